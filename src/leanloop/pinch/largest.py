"""The largest value of a function of one variable that may have several local ones."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from scipy.optimize import minimize_scalar

NEAR, EVEN, LOG = 1e-9, 256, 256  # least distance from the low end, points spaced evenly and by ratio
CLIMBED = 8  # hills, the highest
TIED = 1e-13  # relative difference that is none: of equal points the farthest is taken


def largest(
    function: Callable[[np.ndarray], np.ndarray],
    low: float,
    high: float,
    places: np.ndarray | None = None,
    near: float = NEAR,
    keep_low: bool = True,
) -> tuple[float, float]:
    """Give the place and the value of the largest finite value between two ends.

    The highest hills of a grid, dense at the low end, are climbed by Brent's method.

    Parameters
    ----------
    function : callable
        Of an array, (P,) to (P,).
    low, high : float
    places : (P,) array, optional
        Further points of the grid.
    near : float
        Distance of the first point from `low`, in parts of the span.
    keep_low : bool
        Whether the low end itself is tried.

    Returns
    -------
    place, value : float

    Raises
    ------
    ValueError
        Where the function is nowhere finite.

    Notes
    -----
    Brent's method: R. P. Brent, Algorithms for Minimization without Derivatives, Prentice-Hall 1973, chapter 5.
    """
    span = high - low
    steps = [np.geomspace(max(near, 1e-15), 1.0, LOG), np.linspace(0.0, 1.0, EVEN + 1)[1:]]
    grid = low + span * np.concatenate([[0.0] if keep_low else [], *steps])
    grid = np.concatenate([grid, np.empty(0) if places is None else places, [high]])
    grid = np.unique(grid[(grid >= low) & (grid <= high)])
    if not keep_low:
        grid = grid[grid > low]
    with np.errstate(all="ignore"):
        heights = np.asarray(function(grid), dtype=float)
    heights = np.where(np.isnan(heights), -np.inf, heights)
    top = heights.max(initial=-np.inf)
    if not np.isfinite(top):
        raise ValueError("the function is nowhere finite")
    best = int(np.flatnonzero(heights >= top - TIED * abs(top))[-1])
    place, value = float(grid[best]), float(heights[best])
    padded = np.concatenate([[-np.inf], heights, [-np.inf]])
    hills = np.flatnonzero((heights >= padded[:-2]) & (heights >= padded[2:]) & np.isfinite(heights))
    for hill in hills[np.argsort(heights[hills])[-CLIMBED:]]:
        left, right = grid[max(hill - 1, 0)], grid[min(hill + 1, len(grid) - 1)]
        if left == right:
            continue
        with np.errstate(all="ignore"):
            found = minimize_scalar(
                lambda at: -float(function(np.array([at]))[0]),
                bounds=(left, right),
                method="bounded",
                options={"xatol": 1e-12 * max(abs(left), abs(right), 1e-300)},
            )
        if -found.fun > value + TIED * abs(value):
            place, value = float(found.x), float(-found.fun)
    return place, value
