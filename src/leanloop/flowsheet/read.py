"""Reading of a flowsheet's parts from tables as a file holds them; every fault is noted, none stops."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.components import Component, Components
from leanloop.entries import NAMES, Context, Entry, is_name, near, read_number, read_values, shown_key, shown_name
from leanloop.errors import InputError, nearest
from leanloop.feed import Feed
from leanloop.flowsheet.graph import Structure, influences
from leanloop.flowsheet.inputs import Inputs
from leanloop.flowsheet.plan import Plan
from leanloop.flowsheet.quantity import BY_COMPONENT, WHOLE, AddressError, Formula, formula, stream_table
from leanloop.flowsheet.requirement import Requirement
from leanloop.flowsheet.run import Settings
from leanloop.quantities import DIMENSIONS, NORMAL_MOLES
from leanloop.recycle import METHODS
from leanloop.registry import BrokenPlugin
from leanloop.stream import Stream
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
        context.names[f"broken {address}"] = [address]
        return {}
    for name in raw:
        if not is_name(name):
            context.fault(f"{address}.{shown_key(name)}", f"{shown_name(name)} is no name", NAMES)
    return raw


def components(raw: Any, groups: Any, context: Context) -> Components:
    """Read components and their groups."""
    if isinstance(raw, (list, tuple)) and raw and all(isinstance(item, Component) for item in raw):
        raw = {item.name: item for item in _objects("components", raw, context)}
    items, doubtful = [], []
    for name, entry in table("components", raw, context).items():
        faults = len(context.faults)
        items.append(
            entry if isinstance(entry, Component) else Component.read(name, entry, f"components.{shown_key(name)}", context)
        )
        if any(not fault.address.endswith(".molar_mass") for fault in context.faults[faults:]):
            doubtful.append(name)  # which phase it stays in is not known
    context.names["doubtful"] = doubtful
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
    for key in () if keys else table(section, raw, context):
        if not is_name(key):
            raw = {name: item for name, item in raw.items() if name != key}
    entries = [Entry(key, "component", many=True) for key in (keys or raw)]
    words = dict(read_values(entries, raw, section, context).words)
    for key, names in words.items():
        twice = [name for name in dict.fromkeys(names) if names.count(name) > 1]
        if twice:
            context.fault(f"{section}.{key}", f"'{twice[0]}' is named twice", "name each component once")
    return words


def _objects(section: str, items: Any, context: Context) -> list[Any]:
    """Check the names of feeds or units that are given as Python objects."""
    seen: dict[Any, Any] = {}
    for item in items:
        name = getattr(item, "name", None)
        if not is_name(name):
            context.fault(f"{section}.{shown_key(name)}", f"{shown_name(name)} is no name", "use letters, digits, _ and -")
        elif name in seen:
            context.fault(f"{section}.{name}", f"there are two {section} '{name}'", "give each its own name")
        seen.setdefault(name, item)
    return [item for name, item in seen.items() if is_name(name)]


def feeds(raw: Any, context: Context) -> list[Feed]:
    """Make the feeds of their tables, unread."""
    if isinstance(raw, (list, tuple)) and all(isinstance(item, Feed) for item in raw):
        return _objects("feeds", raw, context)
    out = []
    for name, entry in table("feeds", raw, context).items():
        out.append(Feed(name))
        if isinstance(entry, Mapping):
            out[-1].raw = {str(key): value for key, value in entry.items()}
        else:
            out[-1].lost = True
            context.fault(f"feeds.{shown_key(name)}", "is no table", "write [feeds.NAME] with its entries")
    return out


def units(raw: Any, context: Context) -> list[Unit]:
    """Make the units of their tables, unread."""
    if isinstance(raw, (list, tuple)) and raw and all(isinstance(item, Unit) for item in raw):
        return _objects("units", raw, context)
    out = []
    for name, entry in table("units", raw or {}, context).items():
        address = f"units.{shown_key(name)}"
        if not isinstance(entry, Mapping):
            context.fault(address, "is no table", "write [units.NAME] with a kind")
            continue
        kind = entry.get("kind")
        if kind is None:
            wrong = next((key for key in entry if near(key, ["kind"])), None)
            if wrong is None:
                context.fault(f"{address}.kind", "entry is missing", f"add kind, one of {', '.join(KINDS)}")
            else:
                context.fault(f"{address}.{shown_key(wrong)}", f"unknown entry {shown_name(wrong)}", "did you mean 'kind'?")
        elif not isinstance(kind, str) or not kind:
            context.fault(f"{address}.kind", "is no name of a kind", f"write one of {', '.join(KINDS)}")
        elif kind not in KINDS:
            context.fault(f"{address}.kind", f"unknown kind {shown_name(kind)}", nearest(kind, KINDS.names()))
        else:
            try:
                unit = KINDS.load(kind)(name)
            except BrokenPlugin as error:
                context.fault(f"{address}.kind", str(error), "mend or remove the package that lists it")
                continue
            unit.raw = {str(key): value for key, value in entry.items() if key != "kind"}
            out.append(unit)
    if not out and not raw:
        context.fault("units", "there is no unit", "add [units.NAME] with a kind")
    return out


class _Every(set):
    """A set that holds any name."""

    def __contains__(self, name: object) -> bool:
        return True


def unsettled(raw: Any, read: Mapping[str, Unit], context: Context | None = None) -> set[str]:
    """Give the names that units with faulty ports mention: what they would connect is not known.

    Where such a unit does not even say a name, it might be any, and nothing is said of what is not connected.
    """
    names: set[str] = set()
    broken = context is not None and "broken feeds" in context.names
    if broken or not read or not (isinstance(raw, Mapping) or all(isinstance(item, Unit) for item in raw)):
        return _Every()
    tables = raw.items() if isinstance(raw, Mapping) else ((unit.name, unit.raw) for unit in raw)
    for name, entry in tables:
        if not isinstance(entry, Mapping):
            return _Every()
        ports = [item for item in read[name].entries if item.sort in ("inlet", "outlet")] if name in read else []
        lost = [item for item in ports if item.required and not read[name].values.words.get(item.name)]
        if name in read and not lost:
            continue
        # what ports say, and what may be a misspelt port
        others = {"kind", *(item.name for item in read[name].entries if item not in ports)} if name in read else {"kind"}
        said = {
            part
            for key in set(entry) - others
            for part in (entry[key] if isinstance(entry[key], list) else [entry[key]])
            if isinstance(part, str) and part
        }
        settled = {part for item in ports for part in _listed(read[name].values.words.get(item.name))}
        listed = any(item.many and isinstance(entry.get(item.name), list) for item in lost)  # one of several is no name
        if name in read and (listed or len(said - settled) < len(lost)):
            return _Every()
        names |= said
    return names


def _listed(words: Any) -> tuple[str, ...]:
    return words if isinstance(words, tuple) else (words,) if words else ()


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
        context.fault("loop.method", f"unknown method {shown_name(name)}", nearest(name, METHODS.names()))
        options = tuple(item for other in METHODS for item in METHODS.load(other).entries)
    faults = len(context.faults)
    if kind is not None and isinstance(raw, Mapping):
        known = {item.name for item in (*LOOP, *options)}
        strange = [key for key in raw if key not in known]
        # only then are the other methods loaded
        others = {item.name: other for other in METHODS for item in METHODS.load(other).entries} if strange else {}
        for key in [key for key in strange if key in others]:
            context.fault(f"loop.{key}", f"is no option of {name}", f"write method = \"{others[key]}\", or take it away")
            raw = {own: item for own, item in raw.items() if own != key}
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
    tears = values.words.get("tears", ())
    for place, tear in enumerate(tears):
        if not is_name(tear):
            context.fault(f"loop.tears[{place}]", f"{shown_name(tear)} is no name of a stream", NAMES)
    return settings, tuple(tear for tear in tears if is_name(tear))


def ways_out(structure: Structure, present: Mapping[str, np.ndarray], context: Context) -> None:
    """Note components that can get in and not out, and columns whose liquid is nothing."""
    for component, streams in structure.trapped(present, structure.paths()).items():
        context.fault(
            f"components.{component}",
            f"'{component}' has a way in and no way out of {', '.join(streams[:4])}",
            "give it a bleed or another way out, or let a makeup hold it",
        )
    never = [
        item.name
        for place, item in enumerate(structure.components)
        if item.stays_in == "liquid" and not any(mask[place] for mask in present.values())
    ]
    wet = _wet(structure)
    dry = {
        stream: f"units.{unit.name}.{label}"
        for unit in structure.units.values()
        for label, stream in unit.inlets.items()
        if label == "liquid_in" and (not present[stream].any() or (never and stream not in wet))
    }
    if dry:
        names = ", ".join(f"'{stream}'" for stream in dry)
        context.fault(
            next(iter(dry.values())),
            f"nothing ever flows in {names}: no feed brings a solvent and no makeup holds its circulation",
            'add a makeup with hold = { solvent = "1.6 mol/s" } to the loop',
        )


def _wet(structure: Structure) -> set[str]:
    """Give the streams into which a liquid feed or a make-up brings something."""
    phases = structure.phases()
    wet = {name for name, feed in structure.feeds.items() if feed.phase == "liquid"}
    for unit in structure.units.values():
        if unit.adds(structure.components).any():
            wet |= set(unit.outlets.values())
    grew = True
    while grew:
        grew = False
        for unit in structure.units.values():
            new = {stream for stream in unit.outlets.values() if phases[stream] == "liquid"} - wet
            if new and not wet.isdisjoint(unit.inlets.values()):
                wet, grew = wet | new, True
    return wet


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
            _check_address(quantity)
            found = formula(quantity, sheet.plan.phases, sheet.units, sheet.bases)[0]
            _check_quantity(sheet, quantity, found)
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
    entry = _quantity_entry(quantity)
    found = read_number(raw, entry, f"{address}.{limit}", context)
    if found is None:
        return None
    value, sort = found
    if sort == "mass in gas" and isinstance(raw, str):  # kept in mg/Nm3, as the quantity is reported
        value *= NORMAL_MOLES * 1e6
    sheet.add_number(f"{address}.{limit}", value, sort, entry)
    return value


def _quantity_entry(address: str) -> Entry:
    """Give how a target of a quantity is written, by the unit in the quantity's name."""
    for part in reversed(address.split(".")):
        for ending, sort in (("_K", "temperature"), ("_Pa", "pressure"), ("mol_s", "molar flow"), ("_W", "power")):
            if part.endswith(ending):
                return Entry("target", sort)
        if part.startswith("mg_per_Nm3"):
            return Entry("target", "mass in gas", least=0.0)
    return Entry("target", "number")


def _check_address(address: str) -> None:
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


def _check_quantity(sheet: Flowsheet, address: str, found: Formula) -> None:
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
