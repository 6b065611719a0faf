"""Bracketed roots of many cases at once: of the gap along the share of gas, and of a rising function."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from leanloop.flash.phases import EPS

ROUNDS = 120


class Front:
    """Cases that are still open; they are gathered anew whenever more than half of them are done.

    Parameters
    ----------
    count : int
    """

    def __init__(self, count: int) -> None:
        self.cases, self.open = np.arange(count), np.ones(count, dtype=bool)

    def close(self, done: np.ndarray) -> bool:
        """Close cases, (m,) bool, and tell whether all are closed."""
        self.open &= ~done
        left = np.count_nonzero(self.open)
        if left and left <= 0.5 * len(self.open):
            self.cases, self.open = self.cases[self.open], self.open[self.open]
        return not left


def find_share(
    evaluate: Callable[[np.ndarray, np.ndarray, np.ndarray], tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]],
    psi: np.ndarray,
    omega: np.ndarray,
    gas: np.ndarray,
    liquid: np.ndarray,
) -> tuple[np.ndarray, np.ndarray]:
    """Find the share of gas at which the gap, which falls, is zero; an end where it has the wrong sign is the answer.

    Steps are those of E. Halley, which solve g/psi + a exactly and are of third order; one that leaves the bracket is
    replaced by its middle.

    Parameters
    ----------
    evaluate : callable
        Takes psi, omega (m,) and the cases (m,) int; gives gap, its first and second derivative along psi, and the
        size of its rounding, (m,) each.
    psi, omega : (M,)
        Where to start; shares of gas and liquid, each exact by itself.
    gas, liquid : (M,)
        Shares that stay in the phases: the least of each.

    Returns
    -------
    psi, omega : (M,)
        NaN where the gap is no number.
    """
    psi, omega = psi.copy(), omega.copy()
    count = len(psi)
    low, high = np.array([gas, 1.0 - gas]), np.array([1.0 - liquid, liquid])
    known = np.array([gas > 0, liquid > 0])
    before, front = np.ones(count), Front(count)
    for turn in range(ROUNDS):
        part = front.cases
        p, o, lo, hi = psi[part], omega[part], low[:, part], high[:, part]
        gap, slope, bend, rounding = evaluate(p, o, part)
        rising, falling = gap > 0, gap < 0
        at_end = ((p <= lo[0]) & ~rising) | ((o <= hi[1]) & ~falling)
        lo, hi = np.where(rising, (p, o), lo), np.where(falling, (p, o), hi)
        known[:, part] |= np.array([rising, falling])
        sure = known[:, part]
        below = 2 * slope**2 - gap * bend
        step = np.where((below > 0) & (slope < 0), -2 * gap * slope / below, -gap / slope)
        new = _moved(p, o, step)
        size = np.abs(step) / np.minimum(p, o)
        done = at_end | (np.abs(gap) <= rounding) | ~np.isfinite(gap)
        width = np.minimum(hi[0] - lo[0], lo[1] - hi[1])
        done |= width <= 2 * EPS * np.minimum(hi[0], lo[1])
        wild = ~(_before(lo, new) & _before(new, hi))
        slow = (width > 0.5 * before[part]) & (size > 1e-3) & sure.all(axis=0) & (turn > 6)
        before[part] = width
        middle = _middle(lo, hi)
        to_low, to_high = wild & falling & ~sure[0], wild & rising & ~sure[1]
        new = np.where(wild | slow, middle, new)
        new = np.where(to_low, lo, np.where(to_high, hi, new))
        small = size <= 1e-9  # a step of third order from here is exact; beyond the bracket only by rounding
        last = done | small
        keep = done | small & wild | ~front.open
        psi[part], omega[part] = np.where(keep, (p, o), new)
        low[:, part], high[:, part] = lo, hi
        lost = front.open & ~np.isfinite(gap)
        psi[part[lost]] = omega[part[lost]] = np.nan
        if front.close(last):
            break
    return psi, omega


def find_root(
    evaluate: Callable[[np.ndarray, np.ndarray], tuple[np.ndarray, np.ndarray, np.ndarray]],
    start: np.ndarray,
    low: np.ndarray,
    high: np.ndarray,
    reach: float,
) -> tuple[np.ndarray, np.ndarray]:
    """Find the root of a rising function by Newton's method inside a bracket that grows from the start.

    Parameters
    ----------
    evaluate : callable
        Takes places (m,) and the cases (m,) int; gives value, slope and size of the value's rounding, (m,) each.
    start, low, high : (M,)
        Where to start, and how far to look.
    reach : float
        First step into what has not been tried; each next one is twice as long.

    Returns
    -------
    (M,) float, (M,) bool
        Places, and whether the function changes its sign there.
    """
    place, low, high = start.copy(), low.copy(), high.copy()
    count = len(place)
    known = np.zeros((2, count), dtype=bool)
    reach = np.full((2, count), reach)
    before, good, front = np.full(count, np.inf), np.zeros(count, dtype=bool), Front(count)
    for turn in range(ROUNDS):
        part = front.cases
        at, lo, hi = place[part], low[part], high[part]
        value, slope, rounding = evaluate(at, part)
        under, over = value < 0, value > 0
        stuck = ((at >= hi) & under) | ((at <= lo) & over) | ~np.isfinite(value)
        lo, hi = np.where(under, at, lo), np.where(over, at, hi)
        known[:, part] |= np.array([under, over])
        sure, ways = known[:, part], reach[:, part]
        new = at - value / np.where(slope > 0, slope, np.nan)
        size = np.abs(new - at)
        width = hi - lo
        done = (np.abs(value) <= rounding) | (sure.all(axis=0) & (width <= 4 * EPS * np.abs(at)))
        wild = ~((new > lo) & (new < hi))
        slow = sure.all(axis=0) & (width > 0.5 * before[part]) & (turn > 4) & (size > 1e-6 * np.abs(at))
        before[part] = width
        new = np.where((wild | slow) & sure.all(axis=0), 0.5 * (lo + hi), new)
        up, down = under & ~sure[1], over & ~sure[0]
        new = np.where(up & ~(new <= at + ways[1]), np.minimum(at + ways[1], hi), new)
        new = np.where(down & ~(new >= at - ways[0]), np.maximum(at - ways[0], lo), new)
        reach[:, part] = np.where((down, up), 2 * ways, ways)
        small = size <= 1e-9 * np.abs(at)  # the step from here is exact; beyond the bracket only by rounding
        keep = done | stuck | small & wild | ~front.open
        place[part] = np.where(keep, at, new)
        low[part], high[part] = lo, hi
        good[part[front.open & (done | small) & ~stuck]] = True
        if front.close(done | small | stuck):
            break
    return place, good


def _moved(psi: np.ndarray, omega: np.ndarray, step: np.ndarray) -> np.ndarray:
    """Step along psi and keep the smaller share exact."""
    psi, omega = psi + step, omega - step
    small = psi < 0.5
    return np.array([np.where(small, psi, 1.0 - omega), np.where(small, 1.0 - psi, omega)])


def _before(first: np.ndarray, second: np.ndarray) -> np.ndarray:
    return np.where(second[0] < 0.5, first[0] < second[0], first[1] > second[1])


def _middle(low: np.ndarray, high: np.ndarray) -> np.ndarray:
    """Give the middle of a bracket, the geometric one where an end is far nearer to zero than the other."""
    psi = 0.5 * (low[0] + high[0])
    psi = np.where((low[0] > 0) & (high[0] < 0.5), np.sqrt(low[0] * high[0]), psi)
    omega = np.where((high[1] > 0) & (low[1] < 0.5), np.sqrt(low[1] * high[1]), 0.5 * (low[1] + high[1]))
    small = high[0] < 0.5
    return np.array([np.where(small, psi, 1.0 - omega), np.where(small, 1.0 - psi, omega)])
