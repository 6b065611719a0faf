"""The least rate of one column by solves of its stages: the limit as their number doubles.

Where equilibrium is no curve of one mole ratio alone, the stage equations say what a rate does. The outlet of a
component falls as the rate rises, so the rate that meets the outlet is bracketed and the bracket divided, all trials
of a division in one batch. The rate falls with the stages; they double until it changes by less than 1e-3.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from leanloop.pinch.case import Alone
from leanloop.pinch.sequence import limit, settled
from leanloop.pinch.shapes import Pinch

PARTS, ROUNDS = 9, 6  # a factor of 2 is divided to 1.3e-6
FARTHEST = 2.0**40  # factor on a rate
MET = 1e-9  # relative: an outlet within rounding of its limit meets it
MOST_STAGES, MOST_RIGOROUS = 4096, 448  # the second with heat, efficiencies or side streams
END = 0.02  # of the span of X: nearer to an end, the flattest place belongs to that end


@dataclass(frozen=True)
class Doubled:
    """What doubling found for one component.

    Attributes
    ----------
    factor : float
        Least rate over the rate as given.
    stages : int
        Of the last solve.
    settled : bool
        Whether the last doubling changed the rate by less than 1e-3.
    """

    factor: float
    stages: int
    settled: bool


def rates(column: Alone, places: np.ndarray, limits: np.ndarray, stages: int, start: np.ndarray) -> np.ndarray:
    """Give the factors at which outlets meet their limits with given stages.

    Parameters
    ----------
    column : Alone
    places : (K,) int
        Components.
    limits : (K,) mol/s
        Of each in the cleaned stream.
    stages : int
    start : (K,)
        Factors to begin with.

    Returns
    -------
    (K,)
        Infinite where no factor suffices, zero where any does.
    """

    def meets(factors: np.ndarray) -> np.ndarray:
        """Of factors (K, P), tell which meet, (K, P)."""
        flows = column.outlets(factors.ravel(), stages)
        flows = flows.reshape(*factors.shape, -1)[np.arange(len(places)), :, places]
        return flows <= limits[:, None] * (1 + MET)

    high, low = start.copy(), start.copy()
    good = meets(start[:, None])[:, 0]
    seek = ~good
    while (seek & (high < FARTHEST)).any():
        low = np.where(seek, high, low)
        high = np.where(seek, 2 * high, high)
        seek = seek & ~meets(high[:, None])[:, 0]
    lost = seek
    seek = good.copy()
    while (seek & (low > 1 / FARTHEST)).any():
        high = np.where(seek, low, high)
        low = np.where(seek, low / 2, low)
        seek = seek & meets(low[:, None])[:, 0]
    for _ in range(ROUNDS):
        trials = low[:, None] * (high / low)[:, None] ** (np.arange(1, PARTS) / PARTS)
        inside = meets(trials)
        count = np.where(inside.any(axis=1), inside.argmax(axis=1), PARTS - 1)  # trials below the first that meets
        edges = np.concatenate([low[:, None], trials, high[:, None]], axis=1)
        rows = np.arange(len(places))
        low, high = edges[rows, count], edges[rows, count + 1]
    return np.where(lost, np.inf, np.where(seek, 0.0, high))


def least_by_doubling(column: Alone, places: np.ndarray, limits: np.ndarray) -> list[Doubled]:
    """Give the least rates that meet each limit, stages without limit.

    Parameters
    ----------
    column : Alone
    places : (K,) int
    limits : (K,) mol/s
    """
    stages = max(2 * column.stages, 16)
    history = [rates(column, places, limits, stages, np.ones(len(places)))]
    done = np.zeros(len(places), dtype=bool)
    most = max(MOST_STAGES if column.unit.inner is None else MOST_RIGOROUS, 4 * column.stages)
    while not done.all() and stages < most:
        stages = min(2 * stages, most)
        last = history[-1]
        history.append(rates(column, places, limits, stages, np.where(np.isfinite(last) & (last > 0), last, 1.0)))
        done = np.array([settled(float(old), float(new)) for old, new in zip(last, history[-1], strict=True)])
    return [
        Doubled(
            limit([float(row[k]) for row in history if np.isfinite(row[k])] or [np.inf]) if np.isfinite(history[-1][k]) else np.inf,
            stages,
            bool(done[k]),
        )
        for k in range(len(places))
    ]


def pinch_of(column: Alone, component: str, factor: float, stages: int) -> Pinch:
    """Give the place where the gas changes least from stage to stage: there operating line and equilibrium meet.

    Its ratios are NaN where no solute-free flow defines them.
    """
    profile = column.report(factor, stages)["profile"]
    stage = np.asarray(profile["stage"])[0]
    trays = (stage >= 1) & (stage <= stages)
    x, y = (np.asarray(profile[axis][component])[0][trays] for axis in "xy")
    steps = np.abs(np.diff(y))
    at = int(np.argmin(steps))
    flat = steps <= 10 * steps[at]
    rich_up = x[-1] > x[0]  # in an absorber the bottom is rich, in a stripper the top
    lean, rich = (x[0], x[-1]) if rich_up else (x[-1], x[0])
    part = (x[1:][flat] - lean) / (rich - lean)
    kind = "rich end" if part.max() > 1 - END else "lean end" if part.min() < END else "tangent"
    if kind != "tangent":
        at = int(np.argmax(part) if kind == "rich end" else np.argmin(part))
        at = int(np.flatnonzero(flat)[at])
    ratios = (np.asarray(profile[axis][component])[0][trays][at + 1] for axis in "XY")
    return Pinch(kind, *(float(value) for value in ratios))


def stages_by_count(column: Alone, place: int, limit: float) -> float | None:
    """Give how many stages bring a component's outlet to its limit, with a fraction linear in the logarithm.

    Parameters
    ----------
    column : Alone
    place : int
    limit : float
        mol/s in the cleaned stream.
    """

    def outlet(stages: int) -> float:
        return float(column.outlets(np.ones(1), stages)[0, place])

    low, high = 0, 1
    before, now = None, outlet(1)
    while not now <= limit * (1 + MET):
        if high >= MOST_STAGES or np.isnan(now):
            return None
        low, before = high, now
        high *= 2
        now = outlet(high)
    while high - low > 1:
        middle = (low + high) // 2
        value = outlet(middle)
        if value <= limit * (1 + MET):
            high, now = middle, value
        else:
            low, before = middle, value
    if before is None:
        entering = "gas_in" if column.clean == "gas_out" else "liquid_in"
        before = float(column.inlets[entering].flows[place])
    if not before > now or limit <= 0:
        return float(high)
    if now <= 0:
        return low + (before - limit) / before
    return float(min(high, low + np.log(before / limit) / np.log(before / now)))
