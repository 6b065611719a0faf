"""Purity of a circulating solvent: what builds up in it, what a limit asks of the bleed, what the solvent costs."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.flowsheet.view import View
from leanloop.stream import divide

if TYPE_CHECKING:
    from leanloop.flowsheet.result import Part, Result
    from leanloop.flowsheet.run import Run
    from leanloop.flowsheet.sheet import Flowsheet

LEVELS = ("loading", "fraction", "mass_fraction")
BETWEEN = (1e-7, 1.0)  # of a bleed, as a share


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
    loop : tuple of str
        Its units.
    limits : dict of str to (str, float)
        By contaminant, a level of `LEVELS` and the most of it.
    bleed : str
        Address of the input that sets the bleed; empty where none is known.
    between : (float, float)
        Where to look for it, SI.
    inventory : float or None
        Held components in circulation, mol; kg where `masses` are given.
    start : dict of str to float
        Loadings at the start of the build-up, mol per mol of held components; zero for contaminants
        that are not named, and as in the steady state for `others`.
    masses : tuple of float
        Molar masses of several held components, kg/mol, where the inventory is a mass of them as they are mixed.
    """

    makeup: str
    stream: str
    held: tuple[str, ...]
    contaminants: tuple[str, ...]
    others: tuple[str, ...]
    circuit: tuple[str, ...]
    loop: tuple[str, ...] = ()
    limits: dict[str, tuple[str, float]] = field(default_factory=dict)
    bleed: str = ""
    between: tuple[float, float] = BETWEEN
    inventory: float | None = None
    start: dict[str, float] = field(default_factory=dict)
    masses: tuple[float, ...] = ()

    def limit_address(self, name: str) -> str:
        """Give the address of the level that is limited."""
        return f"streams.{self.stream}.{self.limits[name][0]}.{name}"


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
        entering, gained, leaving = _around(run, purity.loop)
        lean = view.stream(purity.stream).flows
        solvent = lean[:, [index[name] for name in purity.held]].sum(axis=1)
        out: dict[str, np.ndarray] = {}
        for name in (*purity.contaminants, *purity.others):
            place = index[name]
            most = np.max([view.stream(stream).flows[:, place] for stream in purity.circuit], axis=0)
            ingress = entering[:, place] + np.maximum(gained[:, place], 0.0)
            out[f"purity.build_up.{name}"] = divide(most, ingress)
            out[f"purity.level.{name}"] = divide(lean[:, place], solvent)
            out[f"purity.ingress_mol_s.{name}"] = ingress
        added = view.unit(purity.makeup)["results"]["added_mol_s"]
        for name in purity.held:
            place = index[name]
            out[f"purity.added_mol_s.{name}"] = np.asarray(added[name], dtype=float)
            out[f"purity.out_with_liquid_mol_s.{name}"] = leaving["liquid"][:, place]
            out[f"purity.out_with_gas_mol_s.{name}"] = leaving["gas"][:, place]
            out[f"purity.degraded_mol_s.{name}"] = np.maximum(-gained[:, place], 0.0)
    return out


def _around(run: Run, loop: tuple[str, ...]) -> tuple[np.ndarray, np.ndarray, dict[str, np.ndarray]]:
    """Give what comes into a loop, what its units make, less what vanishes there, and what leaves it by phase, (M, C) mol/s."""
    plan, view = run.plan, View(run)
    shape = (run.inputs.cases, len(plan.components))
    entering, gained = np.zeros(shape), np.zeros(shape)
    leaving = {"liquid": np.zeros(shape), "gas": np.zeros(shape)}
    taken = {stream for name in loop for stream in plan.units[name].inlets.values()}
    given = {stream for name in loop for stream in plan.units[name].outlets.values()}
    for stream in sorted(taken - given):
        entering = entering + view.stream(stream).flows
    for stream in sorted(given - taken):
        phase = "gas" if plan.phases[stream] == "gas" else "liquid"
        leaving[phase] = leaving[phase] + view.stream(stream).flows
    for name in loop:
        unit = plan.units[name]
        if type(unit).added is not plan.adds_nothing:
            own = unit.added(*view.sides(name), view.numbers(name))
            entering = entering + (0.0 if own is None else own)
        if type(unit).made is not plan.makes_nothing:
            own = unit.made(*view.sides(name), view.numbers(name))
            gained = gained + (0.0 if own is None else own)
    return entering, gained, leaving


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
    return sheet.rebuilt(requirements={**(sheet.given["requirements"] or {}), requirement_of(name): asked}, plain_si=True)


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
