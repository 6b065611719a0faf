"""Henry's law with van 't Hoff's temperature dependence."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.entries import Context, Entry, Values
from leanloop.equilibrium.base import VALID, Proportional, beyond

REFERENCE = 298.15  # K, at which solubilities are tabulated
FAR = 40.0  # K from the reference temperature, beyond which a constant slope shows

_SOLUBILITY = Entry("solubility", "solubility", above=0.0, doc="concentration over partial pressure at 298.15 K")
_CONCENTRATION = Entry("solvent_concentration", "molar concentration", above=0.0, doc="of the solvent itself")
_CONSTANT = Entry("constant", "pressure", above=0.0, doc="partial pressure over mole fraction, at the temperature at")
_AT = Entry("at", "temperature", doc="temperature of the constant, 25 degC by default")
_SLOPE = Entry("slope", "temperature difference", doc="d ln(solubility)/d(1/T), 0 by default")


class Henry(Proportional):
    """Henry's law: y P = H x.

    Either from a solubility, H = c_w/Hcp with Hcp = H298 exp(B (1/T - 1/298.15 K)) and the concentration c_w of the
    solvent, or from a constant, H = H_at exp(-B (1/T - 1/T_at)). B is ``slope``: a gas that dissolves less when
    warm has B > 0, so that H grows with T.

    Validity: dilute liquid, ideal gas, near the reference temperature. The slope is taken as constant: for CO2, H2S,
    O2, N2, CH4, CO and H2 in water K is within about 6 % from 5 to 40 degC, then too high by 8 to 17 % at 60 degC
    and 35 to 73 % at 100 degC. A caution is given beyond 40 K from the reference unless ``valid`` states the range.

    Source: R. Sander, Compilation of Henry's law constants, Atmos. Chem. Phys. 15 (2015) 4399 and 23 (2023) 10901.
    """

    name = "henry"
    entries = (_SOLUBILITY, _CONCENTRATION, _CONSTANT, _AT, _SLOPE, VALID)

    @property
    def uses(self) -> frozenset[str]:
        """Pressure, and temperature where a slope is written."""
        return frozenset(("temperature", "pressure") if "slope" in self.numbers else ("pressure",))

    def k(self, temperature: np.ndarray, pressure: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give H/P."""
        if "constant" in numbers:
            at_reference = numbers["constant"]
        else:
            at_reference = numbers["solvent_concentration"] / numbers["solubility"]
        ratio = at_reference / pressure
        if "slope" not in numbers:
            return ratio
        return ratio * np.exp(-numbers["slope"] * (1 / temperature - 1 / numbers.get("at", REFERENCE)))

    def cautions(self, temperature: np.ndarray, pressure: np.ndarray, liquid: np.ndarray) -> list[str]:
        """Say where the stated range is left or, without one, where the constant slope is stretched far."""
        if "valid" in self.numbers or "slope" not in self.numbers:
            return super().cautions(temperature, pressure, liquid)
        at = self.numbers.get("at", REFERENCE)
        return beyond(temperature, at - FAR, at + FAR, f"the constant slope of Henry's law is used far from {at:.2f} K")

    @classmethod
    def entries_of(cls, table: Mapping[str, Any]) -> tuple[Entry, ...]:
        """Give the entries of the form that is written; all where both or none is."""
        by_solubility = "solubility" in table or "solvent_concentration" in table
        if by_solubility == ("constant" in table or "at" in table):
            return cls.entries
        if by_solubility:
            required = (
                Entry(item.name, item.sort, required=True, above=item.above, doc=item.doc)
                for item in (_SOLUBILITY, _CONCENTRATION)
            )
            return (*required, _SLOPE, VALID)
        return (Entry("constant", "pressure", required=True, above=0.0, doc=_CONSTANT.doc), _AT, _SLOPE, VALID)

    @classmethod
    def check(cls, values: Values, address: str, context: Context) -> None:
        """Note both forms at once, or none."""
        super().check(values, address, context)
        written = {name for name in ("solubility", "solvent_concentration", "constant", "at") if name in values.numbers}
        if not written & {"solubility", "constant"}:
            context.fault(
                address,
                "Henry's law has neither a solubility nor a constant",
                'add solubility = "3.3e-4 mol/(m3 Pa)" with solvent_concentration, or constant = "1640 bar"',
            )
        elif written & {"solubility", "solvent_concentration"} and written & {"constant", "at"}:
            context.fault(
                address,
                f"Henry's law is written in both forms: {', '.join(sorted(written))}",
                "keep solubility with solvent_concentration, or constant with at",
            )

    @classmethod
    def examples(cls) -> list[Mapping[str, Any]]:
        """Give CO2 in water by its solubility and by its constant, and a constant alone."""
        return [
            {"solubility": "3.3e-4 mol/(m3 Pa)", "slope": "2400 K", "solvent_concentration": "55.3 kmol/m3"},
            {"constant": "1640 bar", "slope": "2400 K", "at": "25 degC"},
            {"constant": "40 atm"},
        ]
