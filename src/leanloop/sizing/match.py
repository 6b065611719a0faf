"""Stages of a standing column from plant data: where, between whole numbers of them, a measured figure is met."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.entries import Context, Entry, read_number, read_values, shown_key, shown_name
from leanloop.errors import nearest
from leanloop.flowsheet.quantity import AddressError
from leanloop.flowsheet.read_requirements import check_address, check_quantity, formula_of, quantity_entry
from leanloop.quantities import NORMAL_MOLES
from leanloop.sizing.named import named
from leanloop.status import OK

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet

MOST = 60  # stages that are tried
ENTRIES = (
    Entry("quantity", "text", required=True, doc="address of what was measured"),
    Entry("height", "length", above=0.0, doc="of the packing, for its HETP"),
    Entry("trays", "integer", least=1, doc="number of trays, for their overall efficiency"),
)


@dataclass(frozen=True)
class Match:
    """A measured figure of a column.

    Attributes
    ----------
    unit : str
    quantity : str
        Address.
    equals : float
        SI.
    height : float or None
        m.
    trays : int or None
    """

    unit: str
    quantity: str
    equals: float
    height: float | None = None
    trays: int | None = None


def read_matches(sheet: Flowsheet, raw: Any, context: Context) -> dict[str, Match]:
    """Read ``match``, by column.

    Parameters
    ----------
    sheet : Flowsheet
    raw : mapping or None
    context : Context

    Returns
    -------
    dict of str to Match
    """
    out = {}
    known = [name for name in sheet.units if f"units.{name}.stages" in sheet.numbers]
    for name, own in named("sizing.match", raw, context).items():
        where = f"sizing.match.{shown_key(name)}"
        if name not in known:
            context.fault(where, f"there is no column {shown_name(name)} with stages", nearest(str(name), known))
            continue
        if not isinstance(own, Mapping):
            context.fault(where, "is no table", 'write { quantity = "streams.NAME....", equals = ..., height = "8 m" }')
            continue
        faults = len(context.faults)
        values = read_values(ENTRIES, {key: item for key, item in own.items() if key != "equals"}, where, context)
        quantity = values.words.get("quantity")
        if quantity is not None:
            try:
                check_address(quantity)
                check_quantity(sheet, quantity, formula_of(sheet, quantity))
            except AddressError as error:
                context.fault(f"{where}.quantity", error.problem, error.remedy)
        target = None
        if "equals" not in own:
            context.fault(f"{where}.equals", "entry is missing", "add equals = ..., what was measured")
        elif quantity is not None:
            found = read_number(own["equals"], quantity_entry(quantity), f"{where}.equals", context)
            if found is not None:
                mass = found[1] == "mass in gas" and isinstance(own["equals"], str)
                target = found[0] * (NORMAL_MOLES * 1e6 if mass else 1.0)
        if len(context.faults) == faults and target is not None:
            out[name] = Match(name, quantity, target, values.numbers.get("height"), values.numbers.get("trays"))
    return out


def stages_of(sheet: Flowsheet, item: Match) -> dict[str, Any]:
    """Find the stages at which a column gives what was measured, everything else as the flowsheet has it.

    Between whole numbers the logarithm of the quantity, where it has one sign, is taken to be linear.

    Parameters
    ----------
    sheet : Flowsheet
    item : Match

    Returns
    -------
    dict
        ``stages`` with a fraction, ``hetp_m`` where a height is known, ``efficiency`` where the trays are; NaN, and ``why``, where
        no number of stages does.
    """
    counts = np.arange(1, MOST + 1)
    result = sheet.released().solve_cases({f"units.{item.unit}.stages": counts}, mixed=True)
    values = np.where(result.codes() == OK, np.asarray(result[item.quantity], dtype=float), np.nan)
    stages, why = _crossing(counts, values, item.equals)
    return {
        "quantity": item.quantity,
        "equals": item.equals,
        "stages": stages,
        "hetp_m": np.nan if item.height is None else item.height / stages,
        "efficiency": np.nan if item.trays is None else stages / item.trays,
        "why": why,
    }


def _crossing(counts: np.ndarray, values: np.ndarray, target: float) -> tuple[float, str]:
    """Give the first place between whole stages where the values pass the target."""
    good = np.isfinite(values)
    if not good.any():
        return np.nan, "the flowsheet is not solved with any number of stages"
    exact = np.flatnonzero(good & (values == target))
    passed = np.flatnonzero(good[:-1] & good[1:] & ((values[:-1] - target) * (values[1:] - target) < 0))
    if len(exact) and (not len(passed) or exact[0] <= passed[0]):
        return float(counts[exact[0]]), ""
    if not len(passed):
        low, high = np.nanmin(values), np.nanmax(values)
        return np.nan, f"1 to {MOST} stages give {low:.6g} to {high:.6g}: another input than the stages is off"
    place = passed[0]
    first, second = values[place], values[place + 1]
    if first * second > 0 and first * target > 0:
        part = np.log(target / first) / np.log(second / first)
    else:
        part = (target - first) / (second - first)
    return float(counts[place] + part), ""
