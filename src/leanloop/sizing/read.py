"""Reading of `[sizing]` and `[properties]`; every fault is noted."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.entries import Context, Entry, read_values, shown_key, shown_name
from leanloop.errors import nearest
from leanloop.flowsheet.cases import read_item
from leanloop.sizing import spec
from leanloop.sizing.match import read_matches
from leanloop.sizing.named import named
from leanloop.sizing.read_column import read_column
from leanloop.sizing.spec import Sizing
from leanloop.studies.axes import Axis, read_cases
from leanloop.studies.record import read_record

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet

ENTRIES = ("hold", "stages", "change", "cases", "columns", "match", "prices", "exchangers", "choose", "record")
MOST_DESIGNS = 200_000
BASE = "as_written"  # the feed case of the file itself


def read_sizing(sheet: Flowsheet, raw: Any, properties: Any, context: Context) -> Sizing | None:
    """Read what a scan of designs asks for.

    Parameters
    ----------
    sheet : Flowsheet
    raw : mapping
        ``[sizing]``, as written.
    properties : mapping or None
        ``[properties]``, as written.
    context : Context
        Takes the faults.

    Returns
    -------
    Sizing or None
        None after a fault.
    """
    faults = len(context.faults)
    known = read_properties(sheet, properties, context)
    if not isinstance(raw, Mapping):
        context.fault("sizing", "is no table", "write [sizing] with hold and stages")
        return None
    for key in raw:
        if key not in ENTRIES:
            context.fault(f"sizing.{shown_key(key)}", f"unknown entry {shown_name(key)}", nearest(str(key), ENTRIES))
    hold = _hold(sheet, raw.get("hold"), context)
    axes, stages = _axes(sheet, raw, context)
    feeds = _feeds(sheet, raw.get("cases"), context)
    _note_settled(sheet, hold, axes, feeds, context)
    columns = {
        name: item
        for name, own in named("sizing.columns", raw.get("columns"), context).items()
        if (item := read_column(sheet, name, own, known, hold, context)) is not None
    }
    match = read_matches(sheet, raw.get("match"), context)
    prices = read_values(spec.PRICES, raw.get("prices", {}), "sizing.prices", context).numbers
    _note_unpriceable(sheet, prices, context)
    exchangers = _exchangers(sheet, raw.get("exchangers"), context)
    choose = raw.get("choose")
    if choose is not None and (not isinstance(choose, str) or choose not in spec.CHOICES):
        context.fault("sizing.choose", f"unknown choice {shown_name(choose)}", f"write one of {', '.join(spec.CHOICES)}")
    elif choose == "cheapest" and not prices:
        context.fault("sizing.choose", "nothing has a price", "add [sizing.prices], or choose the knee")
    record = read_record(sheet, raw["record"], "sizing.record", context) if "record" in raw else ()
    if not (axes or columns or match) and len(context.faults) == faults:
        context.fault("sizing", "asks for nothing", "add stages = { COLUMN = [least, most] }, or [sizing.columns.COLUMN]")
    if len(context.faults) > faults:
        return None
    return Sizing(hold, axes, stages, feeds, columns, known, prices, exchangers, choose or "", record or (), match)


def read_properties(sheet: Flowsheet, raw: Any, context: Context) -> dict[str, Mapping[str, float]]:
    """Read ``[properties]``, SI numbers by component.

    Parameters
    ----------
    sheet : Flowsheet
    raw : mapping or None
    context : Context

    Returns
    -------
    dict of str to mapping
    """
    out = {}
    for name, own in named("properties", raw, context).items():
        if name not in sheet.components.names:
            context.fault(
                f"properties.{shown_key(name)}", f"unknown component {shown_name(name)}", nearest(name, sheet.components.names)
            )
            continue
        out[name] = read_values(spec.PROPERTIES, own, f"properties.{name}", context).numbers
    return out


def _hold(sheet: Flowsheet, raw: Any, context: Context) -> tuple[str, ...]:
    if raw is None:
        return tuple(sheet.requirements)
    if not isinstance(raw, (list, tuple)) or not all(isinstance(item, str) for item in raw):
        context.fault("sizing.hold", "is no list of requirements", 'write hold = ["NAME"], or [] for none')
        return ()
    for place, name in enumerate(raw):
        if name not in sheet.requirements:
            problem = f"there is no requirement {shown_name(name)}"
            context.fault(f"sizing.hold[{place}]", problem, nearest(name, sheet.requirements))
    return tuple(dict.fromkeys(raw))


def _axes(sheet: Flowsheet, raw: Mapping[str, Any], context: Context) -> tuple[tuple[Axis, ...], tuple[str, ...]]:
    """Read the stages of each column, and further inputs, as axes of a grid."""
    scanned, axes = [], []
    stages = raw.get("stages", {})
    if not isinstance(stages, Mapping):
        context.fault("sizing.stages", "is no table", "write stages = { COLUMN = [3, 20] }")
        stages = {}
    for name, own in stages.items():
        address, where = f"units.{name}.stages", f"sizing.stages.{shown_key(name)}"
        if address not in sheet.numbers:
            columns = [unit for unit in sheet.units if f"units.{unit}.stages" in sheet.numbers]
            problem = f"there is no column {shown_name(name)} with stages"
            context.fault(where, problem, nearest(str(name), columns))
            continue
        values = own
        if isinstance(own, (list, tuple)) and len(own) == 2:  # the two ends of a range
            values = {"from": own[0], "to": own[1]} if own[0] != own[1] else [own[0]]
        before = len(context.faults)
        found = read_cases(sheet, {address: values}, None, "sizing.stages", context)
        own_address = f"sizing.stages.{shown_key(address)}"
        context.faults[before:] = [
            replace(fault, address=fault.address.replace(own_address, where, 1)) for fault in context.faults[before:]
        ]
        if found is not None:
            axes += list(found.axes)
            scanned.append(name)
    if "change" in raw:
        found = read_cases(sheet, raw["change"], None, "sizing.change", context)
        if found is not None:
            twice = [key for key in found.changes if any(key in axis.values for axis in axes)]
            for key in twice:
                context.fault(f"sizing.change.{shown_key(key)}", "is changed by sizing.stages too", "keep one of the two")
            axes += list(found.axes)
    if np.prod([float(len(axis)) for axis in axes]) > MOST_DESIGNS:
        context.fault("sizing", f"makes more than {MOST_DESIGNS} designs", "give fewer values")
    return tuple(axes), tuple(scanned)


def _note_settled(
    sheet: Flowsheet, hold: tuple[str, ...], axes: tuple[Axis, ...], feeds: Mapping[str, Mapping[str, Any]], context: Context
) -> None:
    """Note inputs that are changed though requirements settle them, or belong to requirements that do not hold."""
    freed = {item.free: name for name, item in sheet.requirements.items() if name in hold}
    loose = {item.target: name for name, item in sheet.requirements.items() if name not in hold}
    changed = [(key, "sizing.change") for axis in axes for key in axis.values]
    changed += [(key, f"sizing.cases.{shown_key(name)}") for name, own in feeds.items() for key in own]
    for key, where in changed:
        if key in freed:
            remedy = "change other inputs, or leave it out of hold"
            context.fault(f"{where}.{shown_key(key)}", f"is freed by requirement {freed[key]}", remedy)
        elif key in loose:
            remedy = f'add "{loose[key]}" to hold, or leave it as it is'
            context.fault(f"{where}.{shown_key(key)}", f"is of requirement {loose[key]}, which is not held", remedy)


def _feeds(sheet: Flowsheet, raw: Any, context: Context) -> dict[str, dict[str, Any]]:
    """Read feed cases; the file's own is always the first."""
    out: dict[str, dict[str, Any]] = {BASE: {}}
    for name, own in named("sizing.cases", raw, context).items():
        where = f"sizing.cases.{shown_key(name)}"
        if not isinstance(own, Mapping) or not own:
            context.fault(where, "changes nothing", f'write [{where}] with "feeds.NAME.flow" = ...')
            continue
        if name == BASE:
            context.fault(where, "is the name of the file's own case", "take another name")
        out[name] = {}
        for key, item in own.items():
            address = f"{where}.{shown_key(key)}"
            if key not in sheet.numbers:
                context.fault(address, "is no numeric input", nearest(str(key), sheet.numbers))
            elif isinstance(sheet.numbers[key], list) or sheet.entry(key).sort == "integer":
                context.fault(address, "cannot differ between feed cases", "name a single number of a feed or a unit")
            else:
                value = read_item(sheet, key, item, address, context)
                if value is not None:
                    out[name][key] = float(value)
    return out


def _note_unpriceable(sheet: Flowsheet, prices: Mapping[str, float], context: Context) -> None:
    """Note prices of what is not calculated: no design would have a cost."""
    for key in ("heat", "cooling"):
        if key in prices and sheet.heat is None:
            remedy = "leave it out, or add [heat_data.NAME] and adiabatic columns"
            context.fault(f"sizing.prices.{key}", "no heat is balanced", remedy)
    priced: list[str] = []
    if "solvent" in prices:
        priced += [key for unit in sheet.units.values() if unit.kind == "makeup" for key in unit.values.group("hold")]
    if "steam" in prices:
        gases = [unit.inlets["gas_in"] for unit in sheet.units.values() if _fed_with_gas(unit)]
        for gas in gases:
            priced += [name for name, there in zip(sheet.components.names, sheet.plan.present[gas], strict=True) if there]
    for name in dict.fromkeys(priced):
        if sheet.components[name].molar_mass is None:
            context.fault(f"components.{name}.molar_mass", "entry is missing", "steam and solvent are priced by mass")


def _fed_with_gas(unit: Any) -> bool:
    """Tell whether a unit is a stripper that is fed with gas."""
    return getattr(unit, "cleans", "") == "liquid" and "gas_in" in unit.inlets


def _exchangers(sheet: Flowsheet, raw: Any, context: Context) -> dict[str, float]:
    out = {}
    known = [name for name, unit in sheet.units.items() if unit.kind == "exchanger"]
    entry = (Entry("coefficient", "heat transfer coefficient", required=True, above=0.0, doc="overall"),)
    for name, own in named("sizing.exchangers", raw, context).items():
        where = f"sizing.exchangers.{shown_key(name)}"
        if name not in known:
            context.fault(where, f"there is no exchanger {shown_name(name)}", nearest(str(name), known))
            continue
        numbers = read_values(entry, own, where, context).numbers
        if "coefficient" in numbers:
            out[name] = numbers["coefficient"]
    return out
