"""The scan of designs: every one solved to its requirements, equipped, priced and ranked."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.entries import Context
from leanloop.errors import Fault, InputError
from leanloop.pinch.case import Case
from leanloop.pinch.column import column_limits
from leanloop.sizing import choice, costs
from leanloop.sizing.designs import Designs
from leanloop.sizing.equipment import equip
from leanloop.sizing.match import stages_of
from leanloop.sizing.read import read_sizing
from leanloop.sizing.spec import Sizing

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet

MOST_RATIOS = 40  # designs whose rates are set against the least ones


def size(sheet: Flowsheet, /, progress: Callable[[int, int], None] | None = None, **entries: Any) -> Designs:
    """Size a flowsheet's columns together.

    Parameters
    ----------
    sheet : Flowsheet
    progress : callable, optional
        Told how many cases are solved, and of how many.
    **entries
        As in ``[sizing]``: ``hold``, ``stages``, ``change``, ``cases``, ``columns``, ``prices``, ...; those that the flowsheet
        declares where none are given.

    Returns
    -------
    Designs

    Raises
    ------
    InputError
        With every fault found.
    """
    declared = sheet.given["sizing"]
    raw = entries or declared
    if raw is None:
        raise InputError([Fault("sizing", "nothing is asked for", "add [sizing] with hold and stages")], sheet.source)
    context = Context(plain_si=sheet.given["plain_si"] or bool(entries))
    sizing = read_sizing(sheet, raw, sheet.given["properties"], context)
    if context.faults or sizing is None:
        raise InputError(context.faults, sheet.source)
    return scan(sheet, sizing, progress)


def held(sheet: Flowsheet, names: tuple[str, ...]) -> Flowsheet:
    """Give the flowsheet with some requirements alone, each an equality.

    Parameters
    ----------
    sheet : Flowsheet
    names : tuple of str
    """
    raw = {}
    for name, entry in (sheet.given["requirements"] or {}).items():
        if name in names:
            raw[name] = {("equals" if key in ("at_most", "at_least") else key): item for key, item in entry.items()}
    return sheet.rebuilt(requirements=raw)


def scan(sheet: Flowsheet, sizing: Sizing, progress: Callable[[int, int], None] | None = None) -> Designs:
    """Solve, equip, price and rank all designs.

    Parameters
    ----------
    sheet : Flowsheet
    sizing : Sizing
    progress : callable, optional
        As for `size`.

    Returns
    -------
    Designs
    """
    own = held(sheet, sizing.hold)
    renamed = {sheet.requirements[name].target: item.target for name, item in own.requirements.items()}
    inputs, designs = _grid(sizing)
    changes = _with_feeds(sheet, sizing, inputs, designs)
    result = own.solve_cases({renamed.get(key, key): values for key, values in changes.items()}, True, progress)
    columns = {name: equip(sizing, spec, result, designs) for name, spec in sizing.columns.items()}
    found = Designs(own, sizing, inputs, designs, result, columns, renamed)
    volume = found.size_measure
    objectives = np.stack([found.circulation, found.energy, volume], axis=1)
    known = objectives[found.good]
    moves = [place for place in range(3) if len(known) and np.isfinite(known[:, place]).all() and np.ptp(known[:, place]) > 0]
    objectives = objectives[:, moves] if moves else objectives[:, 2:]
    found.costs = costs.costs(found) if sizing.prices else {}
    found.front = choice.pareto(objectives, found.good)
    if sizing.prices:
        found.cheapest = choice.cheapest(found.costs["total"], found.good)
        pair = np.stack([found.costs["operation"], found.costs["invested"]], axis=1)
        found.knee = choice.knee(pair, choice.pareto(pair, found.good))
    else:
        found.knee = choice.knee(objectives, found.front)
    wanted = sizing.choose or ("cheapest" if sizing.prices else "knee")
    found.chosen = found.cheapest if wanted == "cheapest" else found.knee
    found.ratios = _ratios(found)
    found.matched = {name: stages_of(sheet, item) for name, item in sizing.match.items()}
    return found


def _grid(sizing: Sizing) -> tuple[dict[str, Any], int]:
    """Give the inputs of every design, (D,) each."""
    counts = [len(axis) for axis in sizing.axes]
    designs = int(np.prod(counts)) if counts else 1
    places = np.indices(counts).reshape(len(counts), -1) if counts else []
    out: dict[str, Any] = {}
    for axis, place in zip(sizing.axes, places, strict=True):
        for key, values in axis.values.items():
            out[key] = [values[item] for item in place] if isinstance(values, list) else np.asarray(values)[place]
    return out, designs


def _with_feeds(sheet: Flowsheet, sizing: Sizing, inputs: Mapping[str, Any], designs: int) -> dict[str, Any]:
    """Give the inputs of every design in every feed case, the feed cases fastest."""
    feeds = list(sizing.feeds.values())
    out: dict[str, Any] = {
        key: [item for item in values for _ in feeds] if isinstance(values, list) else np.repeat(values, len(feeds))
        for key, values in inputs.items()
    }
    for key in dict.fromkeys(key for own in feeds for key in own):
        base = out.get(key, np.full(designs * len(feeds), float(sheet.numbers[key]))).astype(float)
        for place, own in enumerate(feeds):
            if key in own:
                base[place :: len(feeds)] = own[key]
        out[key] = base
    if not out:  # one design, the flowsheet as it is; it gets a case axis all the same
        address = next(address for address in sheet.numbers if sheet.varies(address))
        out[address] = np.array([float(sheet.numbers[address])])
    return out


def _ratios(found: Designs) -> dict[str, np.ndarray]:
    """Give each column's rate over its least, of the designs that stand out; only where the limits are found at once."""
    out = {name: np.full(found.count, np.nan) for name in found.stages}
    if found.sheet.heat is not None:
        return {}
    free = found.sheet.released()
    marked = [item for item in (found.chosen, found.cheapest, found.knee) if item is not None]
    wanted = list(dict.fromkeys([*marked, *np.flatnonzero(found.front).tolist()]))[:MOST_RATIOS]
    for design in wanted:
        result = free.solve({found.renamed.get(key, key): value for key, value in found.settings(design).items()})
        known = {name: column_limits(Case(result, 0), name) for name in out}
        if any(item.method != "curve" for item in known.values()):
            return {}
        for name, item in known.items():
            out[name][design] = np.nan if item.ratio_to_least is None else item.ratio_to_least
    return out
