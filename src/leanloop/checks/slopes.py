"""Derivatives by differences, against which a plug-in's own are held."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

STEP = 1e-3  # of the value
FROM_ZERO = 1e-4  # of the variable's size, where it is zero
RELATIVE = 1e-6  # error allowed in a derivative
FLOOR = 1e-7  # error allowed whatever the derivative, of the sizes of what is differentiated and of the variable


def difference(
    call: Callable[[np.ndarray], list[np.ndarray]],
    value: np.ndarray,
    size: np.ndarray,
    low: float = -np.inf,
    high: float = np.inf,
) -> list[np.ndarray]:
    """Differentiate by Richardson's extrapolation, to one side where the variable is zero or at a limit.

    Parameters
    ----------
    call : callable
        Gives some arrays (M, ...) for values (M,).
    value : (M,)
    size : (M,)
        What a step is measured by where the value is zero.
    low, high : float
        Limits of the value.

    Returns
    -------
    list of (M, ...)
    """
    step = np.where(value == 0, FROM_ZERO * size, STEP * np.abs(value))
    up = (value == 0) | (value - step < low)
    down = (value + step > high) & ~up
    step = np.where(down, -step, step)
    sided = up | down
    at = [call(value + reach * step) for reach in (1.0, 0.5, 0.25)]
    back = [call(np.where(sided, value, value - reach * step)) for reach in (1.0, 0.5)]
    found = []
    for number, one in enumerate(at[0]):
        def wide(part: np.ndarray, like: np.ndarray = one) -> np.ndarray:
            return part.reshape(len(part), *(1,) * (np.ndim(like) - 1))

        with np.errstate(all="ignore"):
            slope = [
                (at[place][number] - back[min(place, 1)][number]) / wide(np.where(sided, 1.0, 2.0) * step * reach)
                for place, reach in ((0, 1.0), (1, 0.5))
            ]
            third = (at[2][number] - back[1][number]) / wide(0.25 * step)
            central = (4 * slope[1] - slope[0]) / 3
            # (f(h) - f(0))/h has errors in h and h^2: two rounds
            once, twice = 2 * slope[1] - slope[0], 2 * third - slope[1]
            found.append(np.where(wide(sided), (4 * twice - once) / 3, central))
    return found


def miss(own: Any, found: np.ndarray, size: np.ndarray) -> float:
    """Give how far a derivative is from its difference, 1 for as much as is allowed.

    Parameters
    ----------
    own, found : (M, ...)
    size : (M, ...)
        Size of what is differentiated over that of the variable.

    Returns
    -------
    float
        Infinite where one of them alone is NaN.
    """
    own, found = np.broadcast_arrays(np.asarray(own, dtype=float), found)
    if np.any(np.isnan(own) != np.isnan(found)):
        return np.inf
    with np.errstate(invalid="ignore"):
        wrong = np.abs(own - found) / (RELATIVE * np.abs(found) + FLOOR * size + 1e-300)
    return float(np.nanmax(np.where(own == found, 0.0, wrong), initial=0.0))
