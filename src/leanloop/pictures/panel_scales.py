"""Scales of small panels: which numbers can be drawn, how far an axis reaches, and ticks that can be read."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.pictures.base import library, log_axis, short

if TYPE_CHECKING:
    from matplotlib.axis import Axis

LARGEST = 1e200  # what is beyond is no number to draw
MOST_DECADES = 12
LEAST_SPAN = 1e-5  # of the values: a narrower range of an axis would only show rounding
LOG_FROM = 50.0  # highest over lowest value


def tame(values: Any) -> np.ndarray:
    """Give values as floats, NaN for what is no number to draw.

    Parameters
    ----------
    values : (n,) array_like

    Returns
    -------
    (n,) array
    """
    own = np.array(values, dtype=float)
    own[~(np.abs(own) < LARGEST)] = np.nan
    own[np.abs(own) < 1 / LARGEST] = 0.0
    return own


def known(*groups: Any) -> np.ndarray:
    """Give all numbers of some arrays that can be drawn.

    Parameters
    ----------
    *groups : array_like

    Returns
    -------
    (n,) array
    """
    values = np.concatenate([np.atleast_1d(tame(item)) for item in groups]) if groups else np.zeros(0)
    return values[np.isfinite(values)]


def wants_log(values: np.ndarray) -> bool:
    """Tell whether values span so much that a log scale shows them better.

    Parameters
    ----------
    values : (n,) array
        Finite.
    """
    return bool(len(values)) and bool(values.min() > 0) and bool(values.max() / LOG_FROM > values.min())


def fit_axis(axis: Axis, values: np.ndarray, log: bool = False, *, zero: bool = True, tight: bool = False, count: int = 5) -> None:
    """Set a scale that holds all values.

    Parameters
    ----------
    axis : matplotlib.axis.Axis
    values : (n,) array
        Finite; any number of them.
    log : bool
        Taken where all values are above zero and not one.
    zero : bool
        Whether an axis whose values come near zero starts there.
    tight : bool
        Whether it ends at the first and the last value.
    count : int
        Most intervals between ticks.
    """
    low, high = (float(values.min()), float(values.max())) if len(values) else (0.0, 1.0)
    if log and low > 0 and high > low * (1 + LEAST_SPAN):
        low = max(low, high / 10.0**MOST_DECADES)
        stretch = 1.0 if tight else (high / low) ** 0.05
        log_axis(axis, low / stretch, high * stretch)
        if high / low < 8:
            _ticks(axis, low, high, count)
        return
    most = max(abs(low), abs(high))
    if high - low < LEAST_SPAN * most or low == high:
        room = max(0.5 * LEAST_SPAN * most, 0.05 * most if low == high else 0.0) or 1.0
        low, high = (low + high) / 2 - room, (low + high) / 2 + room
    elif not tight:
        room = 0.07 * (high - low)
        low, high = (0.0 if zero and 0 <= low < 0.35 * high else low - room), high + room
    (axis.axes.set_xlim if axis.axis_name == "x" else axis.axes.set_ylim)(low, high)
    _ticks(axis, low, high, count)


def _ticks(axis: Axis, low: float, high: float, count: int) -> None:
    """Set round ticks written with as many digits as tell them apart, and nothing aside."""
    ticker = library().ticker
    locator = ticker.MaxNLocator(nbins=count, min_n_ticks=2, steps=[1, 2, 2.5, 5, 10])
    places = locator.tick_values(low, high)
    step = float(places[1] - places[0]) if len(places) > 1 else 1.0
    most = max(abs(low), abs(high), step)
    digits = max(3, math.ceil(math.log10(most / step)) + 2)
    decimals = next((number for number in range(12) if np.allclose(places, np.round(places, number), rtol=0, atol=1e-6 * step)), 12)

    def text(value: float, _: Any = None) -> str:
        if abs(value) < 1e-6 * step:
            return "0"
        return f"{value:.{decimals}f}" if 1e-3 <= most < 1e5 else short(value, digits)

    axis.set_major_locator(locator)
    axis.set_minor_locator(ticker.NullLocator())
    axis.set_major_formatter(ticker.FuncFormatter(text))
