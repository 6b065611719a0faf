"""Derivatives by differences, against which a plug-in's own are held."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np

from leanloop.entries import Entry

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
        shape = (len(value), *(1,) * (np.ndim(one) - 1))
        width, aside = step.reshape(shape), sided.reshape(shape)
        with np.errstate(all="ignore"):
            whole, half, quarter = (
                (at[place][number] - back[min(place, 1)][number]) / (reach * width)
                for place, reach in ((0, 1.0), (1, 0.5), (2, 0.25))
            )
            central = (4 * half - whole) / 6  # over twice the step
            once, twice = 2 * half - whole, 2 * quarter - half  # errors in h, then in h squared
            found.append(np.where(aside, (4 * twice - once) / 3, central))
    return found


@dataclass(frozen=True)
class Variable:
    """What a unit is differentiated by.

    Parameters
    ----------
    name : str
        Label of an inlet, or local name of a number.
    place : int or None
        Place in the inlet's state; None for a number.
    title : str
        For messages.
    value, size, reach : (M,)
        Value, what errors are measured by, and what a step from zero is measured by.
    low, high : float
        Limits.
    """

    name: str
    place: int | None
    title: str
    value: np.ndarray
    size: np.ndarray
    reach: np.ndarray
    low: float
    high: float

    def slope(self, call: Callable[[np.ndarray], list[np.ndarray]]) -> list[np.ndarray]:
        """Give the derivatives of some arrays along it by differences."""
        return difference(call, self.value, self.reach, self.low, self.high)


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


def bounds(entry: Entry) -> tuple[float, float]:
    """Give the least and the greatest number that an entry allows, its limits taken as allowed."""
    low = max((limit for limit in (entry.least, entry.above) if limit is not None), default=-np.inf)
    high = min((limit for limit in (entry.most, entry.below) if limit is not None), default=np.inf)
    return low, high
