"""What the pictures of limits show: the stage diagram of a column, and the window of a closed pair."""

from __future__ import annotations

import numpy as np

from leanloop.flowsheet.quantity import formula
from leanloop.pinch import stepping
from leanloop.pinch.case import Alone, Case
from leanloop.pinch.column import CURVE, ColumnLimits
from leanloop.pinch.ends import ends, inlets_at
from leanloop.pinch.limits import Limits
from leanloop.pinch.shapes import StageDiagram, Window
from leanloop.pinch.trials import Trials

POINTS, FEWER = 161, 31  # the second where each solve takes long
MANY, MANY_RIGOROUS = 512, 56  # stages that stand for stages without limit where there are no curves
FINE = 300  # stages of the least-rate line there
HIGHER = 1.5  # times the highest point of interest: the equilibrium line is not drawn above


def stage_diagram(found: Limits, name: str) -> StageDiagram | None:
    """Give the diagram of a column; None where nothing can be drawn.

    Parameters
    ----------
    found : Limits
    name : str
        Of the column.
    """
    column, case = found.columns[name], found.case
    if column.key is None or column.ends is None or not case.usable or "gas_in" not in case.plan.units[name].inlets:
        return None
    key, at = column.key, column.ends
    steps = _steps(column, case)
    stages_x, stages_y = (np.array(values) for values in steps)
    if not (len(stages_x) and np.isfinite(stages_x).all() and np.isfinite(stages_y).all()):
        return None  # no solute-free flow, no ratios
    least_x, least_y = _least_line(column, case)
    if column.method == CURVE:
        operating_x, operating_y = np.array([at.x_lean, at.x_rich]), np.array([at.y_lean, at.y_rich])
        high = max(at.x_rich, at.x_lean, 0.0 if least_x is None else least_x.max(), stages_x.max(initial=0.0))
        top = max(at.y_rich, at.y_lean, 0.0 if least_y is None else least_y.max())
        x = high * np.unique(np.concatenate([np.linspace(0, 1, POINTS), np.geomspace(1e-6, 1, POINTS)]))
        x = np.unique(np.concatenate([x, column.curve.places(0.0, high), stages_x]))
        y = column.curve(x)
        keep = y <= max(HIGHER * top, stages_y.max(initial=0.0))
        x, y = x[keep], y[keep]
    else:
        order = np.argsort(stages_x)
        x, y = stages_x[order], stages_y[order]
        operating_x, operating_y = _passing(column, case)
    stair = _stair(column, stages_x, stages_y, operating_x, operating_y)
    whole = column.kind, key
    lists = stages_x, stages_y
    if column.cleans == "liquid":  # top to bottom
        lists = stages_x[::-1], stages_y[::-1]
    return StageDiagram(
        name,
        *whole,
        _basis(case, name, "liquid"),
        _basis(case, name, "gas"),
        column.method == CURVE,
        x,
        y,
        operating_x,
        operating_y,
        *stair,
        *lists,
        least_x,
        least_y,
        column.pinch,
        column.least_mol_s,
        column.ratio_to_least,
        column.stages_needed,
    )


def _basis(case: Case, name: str, phase: str) -> str:
    unit = case.plan.units[name]
    flows = case.state(unit.inlets[f"{phase}_in"]).flows
    mask = unit.liquid_basis if phase == "liquid" else unit.gas_basis
    return " + ".join(item for item, own, flow in zip(case.sheet.components.names, mask, flows, strict=True) if own and flow > 0)


def _steps(column: ColumnLimits, case: Case) -> tuple[list[float], list[float]]:
    """Give what leaves the stages, from the lean end."""
    at = column.ends
    if column.method == CURVE and at.stated:
        found = stepping.from_lean(column.curve, at.slope, at.x_lean, at.y_lean, at.x_rich)
        return found.x, found.y
    profile = case.report(column.unit)["profile"]
    x, y = (np.asarray(profile[axis][column.key])[case.row] for axis in "XY")
    way = 1 if column.cleans == "gas" else -1
    return list(x[::way]), list(y[::way])


def _passing(column: ColumnLimits, case: Case) -> tuple[np.ndarray, np.ndarray]:
    """Give the points of the operating line, where liquid and gas pass each other, from the lean end."""
    x, y = (np.array(values) for values in _steps(column, case))
    at = ends(case, column.unit, column.key)
    if column.cleans == "gas":
        return np.concatenate([[at.x_lean], x]), np.concatenate([y, [at.y_rich]])
    return np.concatenate([x, [at.x_rich]]), np.concatenate([[at.y_lean], y])


def _stair(
    column: ColumnLimits, x: np.ndarray, y: np.ndarray, line_x: np.ndarray, line_y: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Give the corners between operating and equilibrium line, from the lean end; the last step ends at the rich end."""
    absorbs = column.cleans == "gas"
    at = column.ends
    across, up = [float(line_x[0])], [float(line_y[0])]
    for number, (own_x, own_y) in enumerate(zip(x, y, strict=True)):
        last = number == len(x) - 1
        if absorbs:
            passing = at.y_rich if last else float(y[number + 1])
            across += [float(own_x), float(own_x)]
            up += [float(own_y), passing]
        else:
            passing = at.x_rich if last else float(x[number + 1])
            across += [float(own_x), passing]
            up += [float(own_y), float(own_y)]
    return np.array(across), np.array(up)


def _least_line(column: ColumnLimits, case: Case) -> tuple[np.ndarray | None, np.ndarray | None]:
    at = column.ends
    if not column.least_mol_s:
        return None, None
    if column.method == CURVE:
        if column.cleans == "gas":
            reach = at.x_lean + (at.y_rich - at.y_lean) * at.gas / column.least_mol_s
            return np.array([at.x_lean, reach]), np.array([at.y_lean, at.y_rich])
        reach = at.y_lean + (at.x_rich - at.x_lean) * at.liquid / column.least_mol_s
        return np.array([at.x_lean, at.x_rich]), np.array([at.y_lean, reach])
    alone = Alone(case, column.unit, inlets_at(case, column.unit, column.key, at))
    profile = alone.report(1 / column.ratio_to_least, max(FINE, 2 * alone.stages))["profile"]
    x, y = (np.asarray(profile[axis][column.key])[0] for axis in "XY")
    if column.cleans == "gas":
        found = np.concatenate([[at.x_lean], x]), np.concatenate([y, [at.y_rich]])
    else:
        found = np.concatenate([x[::-1], [at.x_rich]]), np.concatenate([[at.y_lean], y[::-1]])
    return found if np.isfinite(found).all() else (None, None)


def window(found: Limits) -> Window | None:
    """Give the outlet of the closed pair against its circulation; None where there is no pair or no one component.

    Parameters
    ----------
    found : Limits
    """
    loop, case = found.loop, found.case
    if loop.circuit is None or loop.asked is None or loop.asked.key is None:
        return None
    plan, key, trials = case.plan, loop.asked.key, Trials(case, loop.circuit)
    stream = plan.units[loop.circuit.absorber].outlets["gas_out"]
    quantity = formula(f"streams.{stream}.ratio.{key}", plan.phases, plan.units, case.sheet.bases)[0]
    now = trials.circulation
    low = 0.75 * min([now] + [value for value in (loop.least, loop.best and loop.best[0]) if value])
    high = 1.3 * max([now] + [value for value in (loop.most, loop.best and loop.best[0]) if value])
    plain = all(plan.units[name].inner is None for name in trials.stages)
    circulation = np.unique(np.append(np.geomspace(low, high, POINTS if plain else FEWER), now))
    outlet = trials.values(quantity, circulation / now)
    if loop.pair is not None:
        unlimited = np.array([loop.pair.outlet(float(own / loop.per_liquid))[0] for own in circulation])
    else:
        times = max(1, (MANY if plain else MANY_RIGOROUS) // max(trials.stages.values()))
        unlimited = trials.values(quantity, circulation / now, times=times)
    at = int(np.argmin(np.abs(circulation - now)))
    held = plan.units[loop.circuit.makeup].values.group("hold")
    return Window(
        loop.circuit.absorber,
        loop.circuit.stripper,
        key,
        " + ".join(held),
        _basis(case, loop.circuit.absorber, "gas"),
        circulation,
        outlet,
        unlimited,
        loop.asked.ratio if loop.circuit.requirement is not None else None,
        loop.least,
        loop.most,
        _turning(circulation, outlet),
        _turning(circulation, unlimited),
        (float(now), float(outlet[at])),
    )


def _turning(circulation: np.ndarray, outlet: np.ndarray) -> tuple[float, float] | None:
    """Give the lowest point inside by a parabola through three, None on a plateau or at an end."""
    good = np.flatnonzero(np.isfinite(outlet))
    if good.size < 3:
        return None
    x, y = np.log(circulation[good]), outlet[good]
    at = int(np.argmin(y))
    if at in (0, len(y) - 1) or np.count_nonzero(y <= y[at] + 1e-12 * y.max()) > 1:
        return None
    low, high = max(at - 1, 0), min(at + 2, len(y))
    a, b, c = np.polyfit(x[low:high] - x[at], y[low:high], 2)
    if a <= 0 or c - b * b / (4 * a) <= 0:
        return float(circulation[good][at]), float(y[at])
    return float(np.exp(x[at] - b / (2 * a))), float(c - b * b / (4 * a))
