"""Reading of a flowsheet's parts from tables as a file holds them; every fault is noted, none stops."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.components import Component, Components
from leanloop.entries import Context, Entry, read_number, read_values
from leanloop.errors import InputError, nearest
from leanloop.feed import Feed
from leanloop.flowsheet.graph import Structure, influences
from leanloop.flowsheet.quantity import AddressError, formula
from leanloop.flowsheet.requirements import Requirement
from leanloop.flowsheet.run import Settings
from leanloop.quantities import DIMENSIONS, NORMAL_MOLES
from leanloop.recycle import METHODS
from leanloop.registry import BrokenPlugin
from leanloop.units import KINDS
from leanloop.units.base import Unit

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet

REQUIREMENT = (
    Entry("quantity", "text", required=True, doc="address of a result"),
    Entry("free", "text", required=True, doc="address of the input that is freed"),
)
LIMITS = ("equals", "at_most", "at_least")
LOOP = (
    Entry("method", "text", doc="recycle method"),
    Entry("tolerance", "number", above=0.0, most=1e-3, doc="of each component's external input"),
    Entry("passes", "integer", least=1, most=1_000_000, doc="most passes of a loop"),
    Entry("tears", "text", many=True, doc="streams to tear instead of the ones found"),
)
TOLERANCE = 1e-10


def table(address: str, raw: Any, context: Context) -> Mapping[str, Any]:
    """Give a section that must be a table, empty where it is absent or faulty."""
    if raw is None:
        return {}
    if not isinstance(raw, Mapping):
        context.fault(address, "is no table", f"write [{address}.NAME]")
        return {}
    return raw


def check_name(address: str, name: Any, context: Context) -> None:
    """Note a name with letters that addresses cannot hold."""
    if not isinstance(name, str) or not name or not all(letter.isalnum() or letter in "_-" for letter in name):
        context.fault(address, f"{name!r} is no name", "use letters, digits, _ and -")


def components(raw: Any, groups: Any, context: Context) -> Components:
    """Read components and their groups."""
    items = []
    for name, entry in table("components", raw, context).items():
        check_name(f"components.{name}", name, context)
        items.append(entry if isinstance(entry, Component) else Component.read(name, entry, f"components.{name}", context))
    if not items and (raw is None or isinstance(raw, Mapping)):
        context.fault("components", "there is no component", 'add [components] with name = { molar_mass = "..." }')
    names = [item.name for item in items]
    found = names_by_key("groups", groups, None, context.knowing(component=names))
    for name in found:
        if name in names:
            context.fault(f"groups.{name}", "has the name of a component", "rename the group")
    return Components(items, found)


def names_by_key(section: str, raw: Any, keys: tuple[str, ...] | None, context: Context) -> dict[str, tuple[str, ...]]:
    """Read lists of component names."""
    if raw is None:
        return {}
    if not isinstance(raw, Mapping):
        context.fault(section, "is no table", f'write [{section}] with name = ["component", ...]')
        return {}
    entries = [Entry(key, "component", many=True) for key in (keys or raw)]
    return dict(read_values(entries, raw, section, context).words)


def feeds(raw: Any, context: Context) -> list[Feed]:
    """Make the feeds of their tables, unread."""
    if isinstance(raw, (list, tuple)):
        return list(raw)
    out = []
    for name, entry in table("feeds", raw, context).items():
        check_name(f"feeds.{name}", name, context)
        if isinstance(entry, Mapping):
            out.append(Feed(name, **{str(key): value for key, value in entry.items()}))
        else:
            context.fault(f"feeds.{name}", "is no table", f"write [feeds.{name}]")
    return out


def units(raw: Any, context: Context) -> list[Unit]:
    """Make the units of their tables, unread."""
    if isinstance(raw, (list, tuple)):
        return list(raw)
    out = []
    for name, entry in table("units", raw, context).items():
        check_name(f"units.{name}", name, context)
        if not isinstance(entry, Mapping):
            context.fault(f"units.{name}", "is no table", f"write [units.{name}] with a kind")
            continue
        kind = entry.get("kind")
        if kind is None:
            context.fault(f"units.{name}.kind", "entry is missing", f"add kind, one of {', '.join(KINDS)}")
        elif not isinstance(kind, str) or kind not in KINDS:
            context.fault(f"units.{name}.kind", f"unknown kind {kind!r}", nearest(str(kind), KINDS.names()))
        else:
            entries = {str(key): value for key, value in entry.items() if key not in ("kind", "name")}
            if "name" in entry:
                context.fault(f"units.{name}.name", "unknown entry 'name'", "the unit's name stands in [units.NAME]")
            try:
                out.append(KINDS.load(kind)(name, **entries))
            except BrokenPlugin as error:
                context.fault(f"units.{name}.kind", str(error), "mend or remove the package that lists it")
    if not out and not raw:
        context.fault("units", "there is no unit", "add [units.NAME] with a kind")
    return out


def unsettled(raw: Any, read: Mapping[str, Unit]) -> set[str]:
    """Give the names that units with faulty ports mention: what they would connect is not known."""
    names: set[str] = set()
    tables = raw.items() if isinstance(raw, Mapping) else ((unit.name, unit.raw) for unit in raw or ())
    for name, entry in tables:
        if not isinstance(entry, Mapping):
            continue
        ports = [item for item in read[name].entries if item.sort in ("inlet", "outlet")] if name in read else []
        if name not in read or any(item.required and not read[name].values.words.get(item.name) for item in ports):
            for item in entry.values():
                names |= {part for part in (item if isinstance(item, list) else [item]) if isinstance(part, str)}
    return names


def loop(raw: Any, context: Context) -> tuple[Settings | None, tuple[str, ...]]:
    """Read how recycles are closed: the settings, and the tears that are chosen."""
    name = raw.get("method", "newton") if isinstance(raw, Mapping) else "newton"
    options: tuple[Entry, ...] = ()
    kind = None
    if isinstance(name, str) and name in METHODS:
        try:
            kind = METHODS.load(name)
            options = kind.entries
        except BrokenPlugin as error:
            context.fault("loop.method", str(error), "mend or remove the package that lists it")
    elif isinstance(name, str):
        context.fault("loop.method", f"unknown method '{name}'", nearest(name, METHODS.names()))
        options = tuple(item for other in METHODS for item in METHODS.load(other).entries)
    faults = len(context.faults)
    values = read_values((*LOOP, *{item.name: item for item in options}.values()), {} if raw is None else raw, "loop", context)
    if kind is None or len(context.faults) > faults:
        return None, ()
    names = [item.name for item in options]
    given = {key: value for key, value in {**values.words, **values.numbers}.items() if key in names}
    try:
        method = kind(**given)
    except InputError as error:
        context.faults.extend(error.faults)
        return None, ()
    numbers = values.numbers
    settings = Settings(method, numbers.get("tolerance", TOLERANCE), numbers.get("passes", method.most_passes))
    return settings, values.words.get("tears", ())


def ways_out(structure: Structure, present: Mapping[str, np.ndarray], context: Context) -> None:
    """Note components that can get in and not out, and columns whose liquid is nothing."""
    for component, streams in structure.trapped(present, structure.paths()).items():
        context.fault(
            f"components.{component}",
            f"'{component}' has a way in and no way out of {', '.join(streams[:4])}",
            "give it a bleed or another way out, or let a makeup hold it",
        )
    for unit in structure.units.values():
        for label, stream in unit.inlets.items():
            if label == "liquid_in" and not present[stream].any():
                context.fault(
                    f"units.{unit.name}.{label}",
                    f"nothing ever flows in '{stream}': no feed brings a solvent and no makeup holds its circulation",
                    'add a makeup with hold = { solvent = "1.6 mol/s" } to the loop',
                )


def requirements(sheet: Flowsheet, raw: Any, context: Context) -> dict[str, Requirement]:
    """Read requirements; their targets join the flowsheet's numbers."""
    out: dict[str, Requirement] = {}
    freed: dict[str, str] = {}
    asked: dict[str, str] = {}
    for name, entry in table("requirements", raw, context).items():
        address = f"requirements.{name}"
        check_name(address, name, context)
        if not isinstance(entry, Mapping):
            context.fault(address, "is no table", f"write [{address}]")
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
    words = read_values(
        REQUIREMENT, {key: item for key, item in entry.items() if key not in (*LIMITS, "between")}, address, context
    ).words
    if len(limits) != 1:
        context.fault(address, f"has {' and '.join(limits) if limits else 'no limit'}", f"give one of {', '.join(LIMITS)}")
    quantity, free = words.get("quantity"), words.get("free")
    found = None
    if quantity is not None:
        try:
            found = formula(quantity, sheet.plan.phases, sheet.units, sheet.bases)[0]
        except AddressError as error:
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
    if limits and quantity is not None:
        target = _target(sheet, address, limits[0], quantity, entry[limits[0]], context)
    if free in sheet.numbers and sheet.varies(free):
        bounds = _bounds(sheet, address, free, entry, context)
    elif "between" not in entry:
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
    entry = _quantity_entry(quantity)
    found = read_number(raw, entry, f"{address}.{limit}", context)
    if found is None:
        return None
    value, sort = found
    if sort == "molar mass":  # mg/Nm3 as mass for an amount of gas
        value, sort = value * NORMAL_MOLES * 1e6, "number"
    sheet.add_number(f"{address}.{limit}", value, sort, entry)
    return value


def _quantity_entry(address: str) -> Entry:
    """Give how a target of a quantity is written, by the unit in the quantity's name."""
    for part in reversed(address.split(".")):
        for ending, sort in (("_K", "temperature"), ("_Pa", "pressure"), ("mol_s", "molar flow"), ("_W", "power")):
            if part.endswith(ending):
                return Entry("target", sort)
        if part.startswith("mg_per_Nm3"):
            return Entry("target", ("number", "molar mass"), least=0.0)
    return Entry("target", "number")


def _check_free(sheet: Flowsheet, address: str, free: str, freed: Mapping[str, str], context: Context) -> None:
    where = f"{address}.free"
    if free not in sheet.numbers or free.startswith("requirements."):
        context.fault(where, f"'{free}' is no numeric input", nearest(free, sheet.numbers))
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
    remedy = f'write between = ["{shown}", "{shown}"]' if sort != "number" else "write between = [0.1, 0.9]"
    if not isinstance(raw, (list, tuple)) or len(raw) != 2:
        context.fault(where, "is not two bounds" if "between" in entry else "entry is missing", remedy)
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
        if (limits.least is not None and end < limits.least) or (limits.most is not None and end > limits.most):
            context.fault(f"{where}[{place}]", f"is outside what '{free}' may be", "move the bound inside")
            return None
    return low, high
