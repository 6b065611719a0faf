"""Purity of a circulating solvent: what builds up in it, what a limit asks of the bleed, what the solvent costs."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.entries import Context, Entry, read_number, read_values, shown_key, shown_name
from leanloop.errors import InputError, nearest
from leanloop.flowsheet.balance import balance, crossing
from leanloop.flowsheet.view import View
from leanloop.stream import divide

if TYPE_CHECKING:
    from leanloop.flowsheet.result import Part, Result
    from leanloop.flowsheet.sheet import Flowsheet

LEVELS = ("loading", "fraction", "mass_fraction")
BETWEEN = (1e-7, 1.0)  # of a bleed, as a share
ENTRIES = (
    Entry("makeup", "text", doc="the make-up whose loop is looked at, where there are several"),
    Entry("contaminants", "component", many=True, doc="what is to be kept out; those that stay in the liquid by default"),
    Entry("bleed", "text", doc="input that sets the bleed; the share of the splitter's outlet that leaves by default"),
    Entry("inventory", ("amount", "mass"), above=0.0, doc="solvent in circulation, for the time that the build-up takes"),
)
LIMIT = tuple(Entry(key, "number", above=0.0, doc="most of it in the lean solvent") for key in LEVELS)
OTHERS = ("limits", "between", "start")


@dataclass(frozen=True)
class Purity:
    """What a purity study looks at.

    Attributes
    ----------
    makeup, stream : str
        The make-up, and the stream it gives: the lean solvent, in which levels are told.
    held : tuple of str
        Components that the make-up holds: the solvent.
    contaminants, others : tuple of str
        What is to be kept out, and what else circulates with the lean solvent.
    circuit : tuple of str
        Streams of the loop that hold liquid.
    limits : dict of str to (str, float)
        By contaminant, a level of `LEVELS` and the most of it.
    bleed : str
        Address of the input that sets the bleed; empty where none is known.
    between : (float, float)
        Where to look for it, SI.
    inventory : float or None
        Held components in circulation, mol.
    start : dict of str to float
        Loadings at the start of the build-up, mol per mol of held components; zero where not named.
    """

    makeup: str
    stream: str
    held: tuple[str, ...]
    contaminants: tuple[str, ...]
    others: tuple[str, ...]
    circuit: tuple[str, ...]
    limits: dict[str, tuple[str, float]] = field(default_factory=dict)
    bleed: str = ""
    between: tuple[float, float] = BETWEEN
    inventory: float | None = None
    start: dict[str, float] = field(default_factory=dict)

    def limit_address(self, name: str) -> str:
        """Give the address of the level that is limited."""
        return f"streams.{self.stream}.{self.limits[name][0]}.{name}"


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
        problem = "no make-up stands on a loop" if not known else "is not settled" if name is None else f"'{name}' is none"
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
    inventory = _amount(sheet, purity, found, address, context)
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
        limits,
        bleed,
        between,
        inventory,
        start,
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


def _amount(sheet: Flowsheet, purity: Purity, found: Any, address: str, context: Context) -> float | None:
    value = found.numbers.get("inventory")
    if value is None or found.sorts["inventory"] == "amount":
        return value
    masses = [sheet.components[name].molar_mass for name in purity.held]
    if len(masses) > 1 or masses[0] is None:
        context.fault(f"{address}.inventory", "is a mass of which the moles are not known", 'give an amount such as "40 kmol"')
        return None
    return value / masses[0]


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


# --- what is told of each case


def columns(result: Result, purity: Purity) -> dict[str, np.ndarray]:
    """Tell what builds up and what the solvent costs.

    Parameters
    ----------
    result : Result
        With a case axis.
    purity : Purity

    Returns
    -------
    dict of str to (M,) array
        By component C: ``purity.build_up.C``, the largest flow of it in the loop per flow of it that comes in from outside;
        ``purity.level.C``, mol per mol of held components in the lean solvent; ``purity.ingress_mol_s.C``. Of the solvent:
        ``purity.added_mol_s.C``, and where it goes, ``purity.out_with_liquid_mol_s.C``, ``purity.out_with_gas_mol_s.C``,
        ``purity.degraded_mol_s.C``. NaN where not solved.
    """
    trees = {id(part): _of_part(part, purity) for part in result.parts}
    first = trees[id(result.parts[0])]
    return {key: result.gathered(lambda part, key=key: trees[id(part)][key]) for key in first}


def _of_part(part: Part, purity: Purity) -> dict[str, np.ndarray]:
    run = part.run
    plan, view = run.plan, View(run)
    index = plan.components.index
    with np.errstate(all="ignore"):
        entering, _ = crossing(run)
        made = balance(run)["components"]
        lean = view.stream(purity.stream).flows
        solvent = lean[:, [index[name] for name in purity.held]].sum(axis=1)
        out: dict[str, np.ndarray] = {}
        for name in (*purity.contaminants, *purity.others):
            place = index[name]
            most = np.max([view.stream(stream).flows[:, place] for stream in purity.circuit], axis=0)
            ingress = entering[:, place] + np.maximum(made[name]["made_mol_s"], 0.0)
            out[f"purity.build_up.{name}"] = divide(most, ingress)
            out[f"purity.level.{name}"] = divide(lean[:, place], solvent)
            out[f"purity.ingress_mol_s.{name}"] = ingress
        added = view.unit(purity.makeup)["results"]["added_mol_s"]
        for name in purity.held:
            place = index[name]
            leaving = {"liquid": np.zeros(len(part.cases)), "gas": np.zeros(len(part.cases))}
            for stream in plan.structure.products:
                phase = "gas" if plan.phases[stream] == "gas" else "liquid"
                leaving[phase] = leaving[phase] + view.stream(stream).flows[:, place]
            out[f"purity.added_mol_s.{name}"] = np.asarray(added[name], dtype=float)
            out[f"purity.out_with_liquid_mol_s.{name}"] = leaving["liquid"]
            out[f"purity.out_with_gas_mol_s.{name}"] = leaving["gas"]
            out[f"purity.degraded_mol_s.{name}"] = np.maximum(-made[name]["made_mol_s"], 0.0)
    return out


def limited(sheet: Flowsheet, purity: Purity, name: str) -> Flowsheet:
    """Give the flowsheet with the bleed freed to keep a contaminant at its limit.

    Parameters
    ----------
    sheet : Flowsheet
    purity : Purity
    name : str
        The contaminant.

    Raises
    ------
    InputError
        Where the bleed cannot change the level.
    """
    asked = {
        "quantity": purity.limit_address(name), "equals": purity.limits[name][1], "free": purity.bleed,
        "between": list(purity.between),
    }  # fmt: skip
    try:
        return sheet.rebuilt(requirements={**(sheet.given["requirements"] or {}), requirement_of(name): asked}, plain_si=True)
    except InputError as error:
        raise InputError(error.faults, sheet.source) from None


def requirement_of(name: str) -> str:
    """Give the name of the requirement that stands for a contaminant's limit."""
    return f"limit_of_{name}"[:80]


def without(sheet: Flowsheet, purity: Purity, changes: Mapping[str, Any]) -> dict[str, Any]:
    """Give changes that keep every contaminant out: clean feeds, pure make-up, nothing made.

    Parameters
    ----------
    sheet : Flowsheet
    purity : Purity
    changes : mapping of str to array or number
        Of the cases.

    Returns
    -------
    dict of str to array or number
    """
    out = dict(changes)
    for address in sheet.numbers:
        head, _, name = address.rpartition(".")
        table = head.rpartition(".")[2]
        if name not in purity.contaminants:
            continue
        if head.startswith("feeds.") or (head.startswith("units.") and table == "makes"):
            out[address] = 0.0
        elif head.startswith("units.") and table == "composition":
            held = [f"{head}.{item}" for item in purity.held if f"{head}.{item}" in sheet.numbers]
            if len(held) == 1:  # what the contaminant took is solvent now
                out[address] = 0.0
                own = out.get(held[0], sheet.numbers[held[0]])
                out[held[0]] = np.asarray(own) + np.asarray(changes.get(address, sheet.numbers[address]))
    return out
