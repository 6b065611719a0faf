"""Reading of a flowsheet's parts from tables as a file holds them; every fault is noted, none stops."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.components import Component, Components
from leanloop.entries import NAMES, Context, Entry, is_name, near, read_values, shown_key, shown_name
from leanloop.errors import InputError, nearest
from leanloop.feed import Feed
from leanloop.flowsheet.graph import Structure
from leanloop.flowsheet.run import Settings
from leanloop.recycle import METHODS
from leanloop.registry import BrokenPlugin
from leanloop.units import KINDS
from leanloop.units.base import Unit

if TYPE_CHECKING:
    pass

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
