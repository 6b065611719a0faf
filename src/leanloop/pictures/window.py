"""The outlet of a closed absorber and stripper against their circulation."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.pictures.base import (
    GREEN,
    GREY,
    INK,
    NAVY,
    PALE,
    PER_HOUR,
    RUST,
    canvas,
    legend_below,
    linear_axis,
    literal,
    log_axis,
    settle,
    short,
    style,
    wrapped,
)
from leanloop.pinch.shapes import Window

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

LOG_FROM = 10**1.5  # highest over lowest outlet
BELOW = 0.03  # of the lowest of all other values: how far the curve without limit is followed down
ROOM = 1.12  # factor beyond the last value of a log axis

AS_IS = {"color": NAVY, "linestyle": "-", "linewidth": 1.9}
UNLIMITED = {"color": GREEN, "linestyle": (0, (7, 2)), "linewidth": 1.5}
REQUIRED = {"color": RUST, "linestyle": "-.", "linewidth": 1.3}
EDGES = {"color": GREY, "linestyle": ":", "linewidth": 1.5}
ALLOWED = {"facecolor": PALE, "edgecolor": "#b4bcc6", "hatch": "////", "linewidth": 0.0, "alpha": 0.6, "zorder": 0.5}
OPERATING = {"color": INK, "linestyle": "none", "marker": "o", "markersize": 7.0, "zorder": 6}
TURNING = {"color": NAVY, "linestyle": "none", "marker": "v", "markersize": 7.0, "markerfacecolor": "white", "zorder": 5}
TURNING_UNLIMITED = {**TURNING, "color": GREEN, "marker": "^"}


def figure(window: Window) -> Figure:
    """Draw the outlet ratio against the circulation, with the window in which the requirement can be met.

    Parameters
    ----------
    window : Window
        Circulation in mol/s, outlet in mol per mol; drawn in kmol/h.

    Returns
    -------
    matplotlib.figure.Figure
        Lines have the gids ``outlet``, ``unlimited``, ``required``, ``least``, ``most``, ``turning``,
        ``turning-unlimited`` and ``operating``, the shaded window ``allowed``; what is not known is left out, and so is
        the lowest outlet without limit where it is next to nothing.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    with style():
        title = f"Circulation between {window.absorber} and {window.stripper}"
        paper = canvas(140.0, 112.0, title, note(window))
        axes = paper.subplots()
        axes.set_gid("window")
        handles = _curves(axes, window) + _limits(axes, window) + _points(axes, window)
        _scales(axes, window)
        axes.set_xlabel(wrapped(literal(f"circulation, kmol/h of {window.solvent}"), 110))
        axes.set_ylabel(wrapped(literal(f"Y in the cleaned gas,\nmol {window.component} per mol {window.gas}"), 70))
        legend_below(paper, handles, columns=2)
        settle(paper)
    return paper


def note(window: Window) -> str:
    """Give the line below the title: operation and the window.

    Parameters
    ----------
    window : Window

    Returns
    -------
    str
    """
    rate, outlet = window.operating
    parts = [f"{window.component} at {short(outlet)} mol/mol with {rate * PER_HOUR:.4g} kmol/h"]
    if window.required is not None:
        least, most = (None if own is None else f"{own * PER_HOUR:.4g}" for own in (window.least, window.most))
        if least and most:
            parts.append(f"stages without limit meet the requirement between {least} and {most} kmol/h")
        elif least or most:
            side = f"from {least} kmol/h on" if least else f"up to {most} kmol/h"
            parts.append(f"stages without limit meet the requirement {side}")
        else:
            parts.append("no window is known in which the requirement can be met")
    return ";\n".join(parts)


def _known(*groups: Any) -> np.ndarray:
    """Give what is finite among numbers, arrays and None."""
    values = np.concatenate([np.atleast_1d(np.asarray(item, dtype=float)) for item in groups if item is not None])
    return values[np.isfinite(values)]


def _curves(axes: Axes, window: Window) -> list[Any]:
    lines = []
    flow, shown = np.asarray(window.circulation) * PER_HOUR, _outlets(window)
    for outlet, gid, label, look in (
        (window.outlet, "outlet", "stages as they are", AS_IS),
        (window.outlet_unlimited, "unlimited", "stages without limit", UNLIMITED),
    ):
        if np.isfinite(outlet).any():
            if _known(outlet).min() < shown.min():
                label += ", partly below"
            lines += axes.plot(flow, outlet, gid=gid, label=label, zorder=4, **look)
    return lines


def _limits(axes: Axes, window: Window) -> list[Any]:
    handles = []
    if window.required is not None:
        label = f"required, {short(window.required)} mol/mol"
        handles.append(axes.axhline(window.required, gid="required", label=label, **REQUIRED))
    if window.least is None and window.most is None:
        return handles
    ends = [None if own is None else own * PER_HOUR for own in (window.least, window.most)]
    edges = [
        axes.axvline(own, gid=gid, label="least and most circulation", zorder=2, **EDGES)
        for own, gid in zip(ends, ("least", "most"), strict=True)
        if own is not None
    ]
    if len(edges) == 1:
        edges[0].set_label(f"{edges[0].get_gid()} circulation")
    # open to a side where there is no limit: the frame cuts it there
    span = _flows(window) * PER_HOUR
    low = ends[0] if ends[0] is not None else 0.0
    high = ends[1] if ends[1] is not None else 2 * span.max()
    label = "window, stages without limit"
    return [*handles, edges[0], axes.axvspan(low, high, gid="allowed", label=label, **ALLOWED)]


def _points(axes: Axes, window: Window) -> list[Any]:
    handles, lowest = [], _outlets(window).min()
    for spot, gid, label, look in (
        (window.turning, "turning", "lowest, stages as they are", TURNING),
        (window.turning_unlimited, "turning-unlimited", "lowest, stages without limit", TURNING_UNLIMITED),
        (window.operating, "operating", "operation", OPERATING),
    ):
        if spot is not None and np.isfinite(spot).all() and spot[1] >= lowest:
            handles += axes.plot([spot[0] * PER_HOUR], [spot[1]], gid=gid, label=label, **look)
    return handles


def _flows(window: Window) -> np.ndarray:
    """Give every circulation that has to be seen, mol/s."""
    turning = [spot[0] for spot in (window.turning, window.turning_unlimited) if spot is not None]
    return _known(window.circulation, window.least, window.most, window.operating[0], turning)


def _outlets(window: Window) -> np.ndarray:
    """Give every outlet ratio that is shown; without limit of stages it may be next to nothing, which is not."""
    turning = None if window.turning is None else window.turning[1]
    sure = _known(window.outlet, window.required, window.operating[1], turning)
    further = _known(window.outlet_unlimited)
    if not len(sure[sure > 0]):
        return np.concatenate([sure, further])
    return np.concatenate([sure, np.maximum(further, BELOW * sure[sure > 0].min())])


def _scales(axes: Axes, window: Window) -> None:
    flows = _flows(window) * PER_HOUR
    low, high = flows.min(), flows.max()
    room = 0.03 * ((high - low) or high or 1.0)
    linear_axis(axes.xaxis, 0.0 if 0 <= low < 0.15 * high else low - room, high + room, 9)
    outlets = _outlets(window)
    positive = outlets[outlets > 0]
    if len(positive) and positive.max() > LOG_FROM * positive.min():
        stretch = max(ROOM, (positive.max() / positive.min()) ** 0.05)
        log_axis(axes.yaxis, positive.min() / stretch, positive.max() * stretch)
    else:
        linear_axis(axes.yaxis, 0.0, 1.08 * (outlets.max() or 1.0), 8)
