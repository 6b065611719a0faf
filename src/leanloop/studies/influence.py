"""What matters most: how far the answer moves with each input, from the exact sensitivities."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from leanloop.status import solved

if TYPE_CHECKING:
    from leanloop.flowsheet.result import Result


ROUNDING = 1e-8  # per cent, and of the largest: less than that is no influence


@dataclass(frozen=True)
class Influence:
    """Effect of one input on one quantity.

    Parameters
    ----------
    quantity, number : str
        Addresses.
    per_cent : float
        Change of the quantity in per cent, for 1 % of the input, or for 1 K of a temperature.
    unit : str
        ``"%"`` or ``"K"``: what the input was moved by.
    """

    quantity: str
    number: str
    per_cent: float
    unit: str


def quantities(result: Result) -> list[str]:
    """Give what is worth asking of: freed inputs of requirements that hold, else what absorbers let through.

    Parameters
    ----------
    result : Result
    """
    found = result.parts[0].found
    names = [
        f"requirements.{name}.free_value" if found[name].active[0] and found[name].reached[0] else item.address
        for name, item in result.sheet.requirements.items()
    ]
    if names:
        return names
    out = []
    for unit in result.sheet.plan.units.values():
        if getattr(unit, "cleans", None) == "gas":
            out += [f"streams.{unit.outlets['gas_out']}.fraction.{component}" for component in unit.model_names]
    return out


def influences(result: Result, asked: list[str] | None = None) -> list[Influence]:
    """Give the effects of all inputs on the quantities of a single case, the largest first.

    Parameters
    ----------
    result : Result
        Of one case, solved.
    asked : list of str, optional
        Addresses of quantities; those of `quantities` by default. Others than those of streams and units and what
        requirements free are passed over.

    Returns
    -------
    list of Influence
        Empty where the case is not solved.
    """
    sheet = result.sheet
    asked = quantities(result) if asked is None else [item for item in asked if _has_slope(result, item)]
    held = {name for name, found in result.parts[0].found.items() if found.active[0] and found.reached[0]}
    freed = {item.free for name, item in sheet.requirements.items() if name in held}
    numbers = [address for address in sheet.numbers if sheet.varies(address) and address not in freed]
    if result.axis or not asked or not numbers or not solved(result.parts[0].run.status).all():
        return []
    slopes = result.sensitivities(asked, numbers)
    found = []
    for quantity in asked:
        base = result[quantity]
        inputs = result.parts[0].run.inputs
        for number in numbers:
            warm = sheet.sorts[number] == "temperature"
            change = slopes[quantity, number] * (1.0 if warm else 0.01 * float(inputs.value(number)[0]))
            if base and np.isfinite(change) and change != 0.0:
                found.append(Influence(quantity, number, float(100.0 * change / base), "K" if warm else "%"))
    least = ROUNDING * max((abs(item.per_cent) for item in found), default=0.0)
    return sorted((item for item in found if abs(item.per_cent) > max(least, ROUNDING)), key=lambda item: -abs(item.per_cent))


def _has_slope(result: Result, address: str) -> bool:
    """Tell whether a quantity has derivatives and a value here."""
    parts = address.split(".")
    if parts[0] == "requirements":
        if parts[-1] not in ("free_value", "value"):
            return False
    elif parts[0] not in ("streams", "units"):
        return False
    value = result[address]
    return isinstance(value, float) and bool(np.isfinite(value))
