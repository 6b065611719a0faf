"""In which units people read inputs and results: factor, offset and unit by address."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet


@dataclass(frozen=True)
class Scale:
    """A unit to read in: shown = SI value times `factor` plus `offset`.

    Attributes
    ----------
    unit : str
        Empty for a pure number.
    factor, offset : float
    """

    unit: str = ""
    factor: float = 1.0
    offset: float = 0.0

    def shown(self, value: Any) -> Any:
        """Turn SI into the unit.

        Parameters
        ----------
        value : float or (...,) array

        Returns
        -------
        float or (...,) array
        """
        return value * self.factor + self.offset


PLAIN = Scale()
OF_INPUTS = {
    "molar flow": Scale("kmol/h", 3.6),
    "mass flow": Scale("kg/h", 3600.0),
    "volume flow": Scale("m3/h", 3600.0),
    "temperature": Scale("degC", 1.0, -273.15),
    "temperature difference": Scale("K"),
    "pressure": Scale("bar", 1e-5),
    "power": Scale("kW", 1e-3),
    "heat transfer": Scale("kW/K", 1e-3),
    "mass in gas": Scale("mg/Nm3"),
    "molar energy": Scale("kJ/mol", 1e-3),
    "length": Scale("m"),
    "density": Scale("kg/m3"),
    "molar mass": Scale("g/mol", 1e3),
    "molar heat capacity": Scale("J/(mol K)"),
    "solubility": Scale("mol/(m3 Pa)"),
    "molar concentration": Scale("kmol/m3", 1e-3),
}
OF_QUANTITIES = (("mol_s", OF_INPUTS["molar flow"]), ("_K", OF_INPUTS["temperature"]), ("_Pa", OF_INPUTS["pressure"]),
                 ("_W", OF_INPUTS["power"]), ("_s", Scale("h", 1 / 3600.0)))  # fmt: skip


def of_quantity(address: str) -> Scale:
    """Give how a quantity of a result is read, which its address tells.

    Parameters
    ----------
    address : str

    Returns
    -------
    Scale
    """
    parts = address.split(".")
    place = {"streams": 2, "units": 3, "purity": 1}.get(parts[0], len(parts) - 1)  # names of components tell no unit
    key = parts[min(place, len(parts) - 1)]
    if key.startswith("mg_per_Nm3"):
        return OF_INPUTS["mass in gas"]
    for ending, scale in OF_QUANTITIES:
        if key.endswith(ending):
            return scale
    return PLAIN


def of_input(sheet: Flowsheet, address: str) -> Scale:
    """Give how an input is read, which its dimension tells.

    Parameters
    ----------
    sheet : Flowsheet
    address : str

    Returns
    -------
    Scale
    """
    return OF_INPUTS.get(sheet.sorts[address], PLAIN)


def of_column(sheet: Flowsheet, address: str) -> Scale:
    """Give how a column of a table of cases is read: an input, what a requirement frees, or a quantity.

    Parameters
    ----------
    sheet : Flowsheet
    address : str

    Returns
    -------
    Scale
    """
    address = address.removeprefix("clean.")
    if address in sheet.sorts:
        return of_input(sheet, address)
    if address.startswith("requirements."):
        name, _, key = address.removeprefix("requirements.").rpartition(".")
        if name in sheet.requirements:
            item = sheet.requirements[name]
            return of_input(sheet, item.free) if key == "free_value" else of_quantity(item.address) if key == "value" else PLAIN
    return of_quantity(address)
