"""Reading of requirements: what is asked, which input is freed, and whether the one can follow the other."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.entries import Context, Entry, is_name, near, read_number, read_values, shown_key, shown_name
from leanloop.errors import nearest
from leanloop.flowsheet.graph import influences
from leanloop.flowsheet.inputs import Inputs
from leanloop.flowsheet.plan import Plan
from leanloop.flowsheet.quantity import BY_COMPONENT, WHOLE, AddressError, Formula, formula, stream_table
from leanloop.flowsheet.read import table
from leanloop.flowsheet.requirement import Requirement
from leanloop.quantities import DIMENSIONS, NORMAL_MOLES
from leanloop.stream import Stream

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet

REQUIREMENT = (
    Entry("quantity", "text", required=True, doc="address of a result"),
    Entry("free", "text", required=True, doc="address of the input that is freed"),
)
LIMITS = ("equals", "at_most", "at_least")


def requirements(sheet: Flowsheet, raw: Any, context: Context) -> dict[str, Requirement]:
    """Read requirements; their targets join the flowsheet's numbers."""
    out: dict[str, Requirement] = {}
    freed: dict[str, str] = {}
    asked: dict[str, str] = {}
    for name, entry in table("requirements", raw, context).items():
        address = f"requirements.{shown_key(name)}"
        if not isinstance(entry, Mapping):
            context.fault(address, "is no table", "write [requirements.NAME] with its entries")
            continue
        item = _requirement(sheet, name, address, entry, freed, asked, context)
        if item is not None:
            out[name] = item
    return out


def _requirement(
    sheet: Flowsheet,
    name: str,
    address: str,
    entry: Mapping[str, Any],
    freed: dict[str, str],
    asked: dict[str, str],
    context: Context,
) -> Requirement | None:
    faults = len(context.faults)
    limits = [key for key in LIMITS if key in entry]
    own = [item.name for item in REQUIREMENT]
    every, meant = [*own, *LIMITS, "between"], set()
    for key in entry:
        if key not in every:
            context.fault(f"{address}.{shown_key(key)}", f"unknown entry {shown_name(key)}", nearest(str(key), every))
            meant.add(near(key, every))
    plain = {key: entry[key] for key in own if key in entry}
    words = read_values([item for item in REQUIREMENT if item.name not in meant], plain, address, context).words
    if len(limits) != 1 and not (not limits and meant & set(LIMITS)):
        context.fault(address, f"has {' and '.join(limits) if limits else 'no limit'}", f"give one of {', '.join(LIMITS)}")
    quantity, free = words.get("quantity"), words.get("free")
    found = None
    if quantity is not None:
        try:
            check_address(quantity)
            found = formula_of(sheet, quantity)
            check_quantity(sheet, quantity, found)
        except AddressError as error:
            found = None
            context.fault(f"{address}.quantity", error.problem, error.remedy)
        if quantity in asked:
            context.fault(
                f"{address}.quantity", f"is what {asked[quantity]} asks for already", "keep one of the two requirements"
            )
        asked.setdefault(quantity, address)
    if free is not None:
        _check_free(sheet, address, free, freed, context)
        freed.setdefault(free, address)
    target = bounds = None
    if limits and found is not None:
        target = _target(sheet, address, limits[0], quantity, entry[limits[0]], context)
    if _is_input(sheet, free) and sheet.varies(free) and "between" in entry:
        bounds = _bounds(sheet, address, free, entry, context)
    elif "between" not in entry and "between" not in meant:
        context.fault(f"{address}.between", "entry is missing", "add between = [least, most] of the freed input")
    if len(context.faults) > faults or found is None or target is None or bounds is None:
        return None
    item = Requirement(name, quantity, found, free, *bounds, limits[0])
    tie = sheet.tie(item)
    if not influences(sheet.plan.graph, tie):
        context.fault(f"{address}.free", f"'{free}' cannot change '{quantity}'", "free an input upstream of it")
        return None
    return item


def _target(sheet: Flowsheet, address: str, limit: str, quantity: str, raw: Any, context: Context) -> float | None:
    entry = quantity_entry(quantity)
    found = read_number(raw, entry, f"{address}.{limit}", context)
    if found is None:
        return None
    value, sort = found
    if sort == "mass in gas" and isinstance(raw, str):  # kept in mg/Nm3, as the quantity is reported
        value *= NORMAL_MOLES * 1e6
    sheet.add_number(f"{address}.{limit}", value, sort, entry)
    return value


def quantity_entry(address: str) -> Entry:
    """Give how a target of a quantity is written, by the unit in the quantity's name."""
    for part in reversed(address.split(".")):
        for ending, sort in (("_K", "temperature"), ("_Pa", "pressure"), ("mol_s", "molar flow"), ("_W", "power")):
            if part.endswith(ending):
                return Entry("target", sort)
        if part.startswith("mg_per_Nm3"):
            return Entry("target", "mass in gas", least=0.0)
    return Entry("target", "number")


def formula_of(sheet: Flowsheet, address: str) -> Formula:
    """Give a quantity of a stream or unit of a flowsheet as a formula.

    Raises
    ------
    AddressError
        Where the address leads nowhere.
    """
    return formula(address, sheet.plan.phases, sheet.units, sheet.bases)[0]


def check_address(address: str) -> None:
    """Stop at an address that is too short, or too long for a stream.

    Raises
    ------
    AddressError
    """
    parts = address.split(".")
    if len(parts) < 2 or not all(map(is_name, parts)):
        raise AddressError(f"{shown_name(address)} is no quantity", "write streams.NAME.... or units.NAME....")
    most = 4 if parts[2:3] and parts[2] in BY_COMPONENT else 3
    if parts[0] == "streams" and len(parts) > most and parts[2] in (*BY_COMPONENT, *WHOLE):
        raise AddressError(f"{shown_name(address)} goes too deep", f"stop at '{'.'.join(parts[:most])}'")


def check_quantity(sheet: Flowsheet, address: str, found: Formula) -> None:
    """Look the quantity up once, at streams of 1 mol/s of whatever each can hold.

    Raises
    ------
    AddressError
        Where it leads nowhere, or to what is no single number that could be asked for.
    """
    plan = sheet.plan
    parts = address.split(".")
    if parts[0] == "streams":
        known = stream_table(_sample(plan, parts[1]), sheet.bases)
        if parts[2] not in known:
            phase = plan.phases[parts[1]]
            raise AddressError(f"stream '{parts[1]}' is {phase} and has no {parts[2]}", nearest(parts[2], known))
        if len(parts) > 3 and parts[2] in BY_COMPONENT and not plan.present[parts[1]][sheet.components.places(parts[3])].any():
            raise AddressError(f"'{parts[3]}' is never in stream '{parts[1]}'", "ask for a component that gets there")
    with np.errstate(all="ignore"):
        value = found(lambda name: _sample(plan, name), lambda name: _report(sheet, name))
    if isinstance(value, Mapping):
        raise AddressError(f"'{address}' is a whole table", f"go on to one of {', '.join(list(map(str, value))[:12])}")
    if isinstance(value, str):
        raise AddressError(f"'{address}' is text", "ask for a number")
    if value is None:
        raise AddressError(f"'{address}' is not calculated here", "ask for another quantity")
    if np.ndim(value) > 1 or isinstance(value, (list, tuple)):
        raise AddressError(f"'{address}' is a list by stage", "ask for a number of the whole unit or of a stream")


def _sample(plan: Plan, name: str) -> Stream:
    return Stream.of(plan.present[name][None].astype(float), np.array([350.0]), np.array([1e5]), plan.phases[name])


def _report(sheet: Flowsheet, name: str) -> Mapping[str, Any]:
    """Give what a unit reports, at sample streams."""
    unit, plan = sheet.units[name], sheet.plan
    inlets = {label: _sample(plan, stream) for label, stream in unit.inlets.items()}
    numbers = Inputs(sheet.numbers, {}, 1).of(plan.addresses[name])
    done = unit.evaluate(inlets, numbers, None, {}, {}, 0)
    return {"kind": unit.kind, **unit.results(inlets, done.outlets, numbers, done.memory)}


def _is_input(sheet: Flowsheet, free: str | None) -> bool:
    return free in sheet.numbers and not free.startswith("requirements.")


def _check_free(sheet: Flowsheet, address: str, free: str, freed: Mapping[str, str], context: Context) -> None:
    where = f"{address}.free"
    if not _is_input(sheet, free):
        known = [name for name in sheet.numbers if not name.startswith("requirements.")]
        context.fault(where, f"{shown_name(free)} is no numeric input", nearest(free, known))
    elif not sheet.varies(free):
        context.fault(where, f"'{free}' cannot be freed", "free an input that can change by small amounts")
    elif free in freed:
        context.fault(where, f"'{free}' is freed by {freed[free]} already", "free another input for one of the two")


def _bounds(
    sheet: Flowsheet, address: str, free: str, entry: Mapping[str, Any], context: Context
) -> tuple[float, float] | None:
    where = f"{address}.between"
    raw = entry.get("between")
    sort = sheet.sorts[free]
    shown = DIMENSIONS[sort][1]
    remedy = f'write between = [least, most], each such as "{shown}"' if sort != "number" else "write between = [0.1, 0.9]"
    if not isinstance(raw, (list, tuple)) or len(raw) != 2:
        context.fault(where, "is not two bounds", remedy)
        return None
    ends = [read_number(item, Entry("between", sort), f"{where}[{place}]", context) for place, item in enumerate(raw)]
    if None in ends:
        return None
    low, high = ends[0][0], ends[1][0]
    if not low < high:
        context.fault(where, "the first bound is not below the second", "write the lower one first")
        return None
    limits = sheet.entry(free)
    for place, end in enumerate((low, high)):
        below = limits.least is not None and end < limits.least or limits.above is not None and end <= limits.above
        above = limits.most is not None and end > limits.most or limits.below is not None and end >= limits.below
        if below or above:
            context.fault(f"{where}[{place}]", f"is outside what '{free}' may be", "move the bound inside")
            return None
    return low, high
