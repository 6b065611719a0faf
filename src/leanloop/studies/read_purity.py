"""Reading of `purity` in a study: the make-up, what builds up, its limits, the bleed, the inventory."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from leanloop.entries import Context, Entry, read_number, read_values, shown_key, shown_name
from leanloop.errors import nearest
from leanloop.studies.purity import BETWEEN, LEVELS, Purity

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet

ENTRIES = (
    Entry("makeup", "text", doc="the make-up whose loop is looked at, where there are several"),
    Entry("contaminants", "component", many=True, doc="what is to be kept out; those that stay in the liquid by default"),
    Entry("bleed", "text", doc="input that sets the bleed; the share of the splitter's outlet that leaves by default"),
    Entry("inventory", ("amount", "mass"), above=0.0, doc="solvent in circulation, for the time that the build-up takes"),
)
LIMIT = tuple(Entry(key, "number", above=0.0, doc="most of it in the lean solvent") for key in LEVELS)
OTHERS = ("limits", "between", "start")


def makeups(sheet: Flowsheet) -> dict[str, list[str]]:
    """Give the make-ups that stand on a loop, each with the loop's units."""
    out = {}
    for step in sheet.plan.steps:
        for name in step.units if step.tears else ():
            if sheet.units[name].kind == "makeup":
                out[name] = list(step.units)
    return out


def read_purity(sheet: Flowsheet, raw: Any, address: str, context: Context) -> Purity | None:
    """Read ``purity``.

    Parameters
    ----------
    sheet : Flowsheet
    raw : mapping, bool or None
        None looks at what builds up, where anything does.
    address : str
    context : Context

    Returns
    -------
    Purity or None
        None after a fault, or where nothing is asked.
    """
    known = makeups(sheet)
    if raw is False or (raw is None and len(known) != 1):
        return None
    if not (raw is None or raw is True or isinstance(raw, Mapping)):
        context.fault(address, "is neither true, false nor a table", "write purity = true, or a table")
        return None
    faults = len(context.faults)
    table = dict(raw) if isinstance(raw, Mapping) else {}
    own = context.knowing(component=sheet.components.names)
    plain = {key: item for key, item in table.items() if key not in OTHERS}
    for key in plain:
        if key not in [entry.name for entry in ENTRIES]:
            known_keys = (*[entry.name for entry in ENTRIES], *OTHERS)
            context.fault(f"{address}.{shown_key(key)}", f"unknown entry {shown_name(key)}", nearest(str(key), known_keys))
    found = read_values(ENTRIES, {key: item for key, item in plain.items() if key in [e.name for e in ENTRIES]}, address, own)
    name = found.words.get("makeup", next(iter(known)) if len(known) == 1 else None)
    if name not in known:
        named = "is not settled" if name is None else f"{shown_name(name)} is none"
        problem = named if known else "no make-up stands on a loop"
        remedy = "a purity study needs a loop that a make-up holds" if not known else nearest(name or "", known)
        context.fault(f"{address}.makeup", problem, remedy)
        return None
    purity = _look(sheet, name, known[name], found.words.get("contaminants"))
    for item in found.words.get("contaminants", ()):
        if item not in (*purity.contaminants, *purity.others):
            why = "is held by the make-up" if item in purity.held else f"never gets into '{purity.stream}'"
            context.fault(f"{address}.contaminants", f"'{item}' {why}", nearest(item, (*purity.contaminants, *purity.others)))
    limits = _limits(sheet, purity, table.get("limits"), f"{address}.limits", own)
    bleed = found.words.get("bleed", purity.bleed)
    between = _between(sheet, bleed, table.get("between"), limits, address, context)
    inventory, masses = _inventory(sheet, purity, found, address, context)
    start = _start(purity, table.get("start"), inventory, f"{address}.start", own)
    if len(context.faults) > faults or (raw is None and not purity.contaminants):
        return None
    return Purity(
        name,
        purity.stream,
        purity.held,
        purity.contaminants,
        purity.others,
        purity.circuit,
        purity.loop,
        limits,
        bleed,
        between,
        inventory,
        start,
        masses,
    )


def _look(sheet: Flowsheet, makeup: str, loop: list[str], named: tuple[str, ...] | None) -> Purity:
    """Find the solvent, its circuit, what it carries and where it is bled."""
    plan, unit = sheet.plan, sheet.units[makeup]
    stream = unit.outlets["gives"]
    held = tuple(unit.values.group("hold"))
    taken = {name: user for user in loop for name in sheet.units[user].inlets.values()}
    made = {name: maker for maker in loop for name in sheet.units[maker].outlets.values()}
    circuit = tuple(name for name in made if name in taken and plan.phases[name] != "gas")
    carried = [name for name in sheet.components.names if plan.present[stream][sheet.components.index[name]] and name not in held]
    stays = named if named is not None else [item.name for item in sheet.components if item.stays_in == "liquid"]
    shares = [
        f"units.{name}.shares.{label}"
        for name in loop
        if sheet.units[name].kind == "splitter" and plan.phases[sheet.units[name].inlets["takes"]] == "liquid"
        for label in sheet.units[name].outlets
        if label not in taken and f"units.{name}.shares.{label}" in sheet.numbers
    ]
    return Purity(
        makeup,
        stream,
        held,
        tuple(name for name in carried if name in stays),
        tuple(name for name in carried if name not in stays),
        circuit,
        tuple(loop),
        bleed=shares[0] if len(shares) == 1 else "",
    )


def _limits(sheet: Flowsheet, purity: Purity, raw: Any, address: str, context: Context) -> dict[str, tuple[str, float]]:
    out: dict[str, tuple[str, float]] = {}
    if raw is None:
        return out
    if not isinstance(raw, Mapping):
        context.fault(address, "is no table", "write limits = { COMPONENT = { mass_fraction = 0.02 } }")
        return out
    for name, item in raw.items():
        where = f"{address}.{shown_key(name)}"
        if name not in (*purity.contaminants, *purity.others):
            context.fault(
                where, f"{shown_name(name)} does not build up in '{purity.stream}'", nearest(str(name), purity.contaminants)
            )
            continue
        if not isinstance(item, Mapping):
            found = read_number(item, Entry("limit", "number", above=0.0), where, context)
            if found is not None:
                out[name] = ("loading", found[0])
            continue
        values = read_values(LIMIT, item, where, context).numbers
        if len(values) == 1:
            out[name] = next(iter(values.items()))
        elif len(item) != 1:
            context.fault(where, "has not one limit", f"give one of {', '.join(LEVELS)}")
    return out


def _between(
    sheet: Flowsheet, bleed: str, raw: Any, limits: Mapping[str, Any], address: str, context: Context
) -> tuple[float, float]:
    if bleed and (bleed not in sheet.numbers or not sheet.varies(bleed) or bleed.startswith("requirements.")):
        context.fault(f"{address}.bleed", f"{shown_name(bleed)} is no input that can be freed", nearest(bleed, sheet.numbers))
        return BETWEEN
    if not limits:
        return BETWEEN
    if not bleed:
        context.fault(f"{address}.bleed", "entry is missing", "name the input that sets the bleed")
        return BETWEEN
    if any(item.free == bleed for item in sheet.requirements.values()):
        context.fault(f"{address}.bleed", "is freed by a requirement already", "leave that requirement out of the study's hold")
    sort = sheet.sorts[bleed]
    if raw is None and sort == "number":
        return BETWEEN
    if not isinstance(raw, (list, tuple)) or len(raw) != 2:
        context.fault(f"{address}.between", "is not two bounds", "write between = [least, most] of the bleed")
        return BETWEEN
    ends = [read_number(item, Entry("between", sort), f"{address}.between[{place}]", context) for place, item in enumerate(raw)]
    if None in ends:
        return BETWEEN
    if not ends[0][0] < ends[1][0]:
        context.fault(f"{address}.between", "the first bound is not below the second", "write the lower one first")
    return ends[0][0], ends[1][0]


def _inventory(
    sheet: Flowsheet, purity: Purity, found: Any, address: str, context: Context
) -> tuple[float | None, tuple[float, ...]]:
    """Give an amount, mol, or the mass of several held components, kg, and their molar masses."""
    value = found.numbers.get("inventory")
    if value is None or found.sorts["inventory"] == "amount":
        return value, ()
    masses = [sheet.components[name].molar_mass for name in purity.held]
    if not masses or None in masses:
        context.fault(f"{address}.inventory", "is a mass of which the moles are not known", 'give an amount such as "40 kmol"')
        return None, ()
    return (value / masses[0], ()) if len(masses) == 1 else (value, tuple(masses))


def _start(purity: Purity, raw: Any, inventory: float | None, address: str, context: Context) -> dict[str, float]:
    if raw is None:
        return {}
    if inventory is None:
        context.fault(address, "has no meaning without an inventory", 'add inventory = "40 kmol", or leave it out')
    entry = Entry("start", "number", by="component", least=0.0)
    found = read_values([entry], {"start": raw}, address.rpartition(".")[0], context).group("start")
    for name in found:
        if name not in (*purity.contaminants, *purity.others):
            context.fault(
                f"{address}.{name}", f"'{name}' does not build up in '{purity.stream}'", nearest(name, purity.contaminants)
            )
    return found
