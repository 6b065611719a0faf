"""Guards shared by the correlations: no warnings, and NaN where an input cannot be."""

from __future__ import annotations

import functools
from collections.abc import Callable
from typing import Any, TypeVar

import numpy as np

Function = TypeVar("Function", bound=Callable[..., Any])

FOOT, INCH, POUND = 0.3048, 0.0254, 0.45359237  # m, m, kg; by definition
PCF = POUND / FOOT**3  # kg/m3 in one lb/ft3
INCH_WATER_PER_FOOT = 249.08891 / FOOT  # Pa/m; the inch of water of 4 degC
CENTIPOISE = 1e-3  # Pa s


def quiet(function: Function) -> Function:
    """Let a function calculate without warnings; what cannot be is NaN."""

    @functools.wraps(function)
    def inner(*given: Any, **named: Any) -> Any:
        with np.errstate(all="ignore"):  # a new one each time: older numpy cannot nest one instance
            return function(*given, **named)

    return inner  # type: ignore[return-value]


@quiet
def positive(*values: Any) -> Any:
    """Give arrays of floats that hold NaN in the place of what is not positive and finite.

    Parameters
    ----------
    *values : (...,)

    Returns
    -------
    (...,), or a list of them where several are given
    """
    arrays = [np.asarray(value, dtype=float) for value in values]
    checked = [np.where((array > 0) & np.isfinite(array), array, np.nan)[()] for array in arrays]
    return checked if len(checked) > 1 else checked[0]


@quiet
def not_negative(value: Any) -> Any:
    """Give an array of floats that holds NaN in the place of what is negative or infinite."""
    array = np.asarray(value, dtype=float)
    return np.where((array >= 0) & np.isfinite(array), array, np.nan)[()]
