"""The stages of one column between operating line and equilibrium, on mole ratios."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.pictures.base import (
    GREY,
    INK,
    NAVY,
    PAGE_WIDTH,
    PER_HOUR,
    RUST,
    canvas,
    legend_below,
    library,
    linear_axis,
    literal,
    log_axis,
    settle,
    short,
    style,
    wrapped,
)
from leanloop.pinch.shapes import StageDiagram

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

VANISHING = 0.03  # of the rich end: below that the lean stages cannot be seen on linear axes
FARTHEST = 4.0  # times the operating end: a least-rate line that goes beyond is cut off
MARGIN = 0.06  # of the span, beyond the last point
LOG_MARGIN = 0.09  # the same on log scales, where a number has to find room below the leanest stage
APART = 3.2  # mm between two stage numbers
BESIDE = 1.9  # mm from a stage to its number

EQUILIBRIUM = {"color": NAVY, "linestyle": "-", "linewidth": 1.9}
POINTS = {"color": NAVY, "linestyle": "-", "linewidth": 0.7, "marker": "s", "markersize": 4.2}
OPERATING = {"color": RUST, "linestyle": (0, (7, 2)), "linewidth": 1.7}
LEAST = {"color": GREY, "linestyle": "-.", "linewidth": 1.2}
STEPS = {"color": INK, "linestyle": "-", "linewidth": 0.8, "marker": "o", "markersize": 3.2}
# where equilibrium is drawn as squares at the stages, a second marker there would hide them
BARE_STEPS = {"color": INK, "linestyle": (0, (1, 1)), "linewidth": 0.9}
PINCH = {"color": INK, "linestyle": "none", "marker": "D", "markersize": 7.5, "markerfacecolor": "none", "markeredgewidth": 1.3}


def figure(diagram: StageDiagram) -> Figure:
    """Draw equilibrium, operating line, least-rate line, steps and pinch of one column.

    A second panel on log scales is added where the lean stages are below 3 % of the rich end.

    Parameters
    ----------
    diagram : StageDiagram
        Mole ratios, mol per mol.

    Returns
    -------
    matplotlib.figure.Figure
        Axes with the gid ``linear`` and, where there are two, ``log``. Lines have the gids ``equilibrium``,
        ``operating``, ``least``, ``steps`` and ``pinch``, in the second panel with ``log-`` before.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    two = needs_log(diagram)
    with style():
        paper = canvas(PAGE_WIDTH if two else 140.0, 110.0, f"Stages of {diagram.unit}, {diagram.component}", note(diagram))
        panels = paper.subplots(1, 2 if two else 1, squeeze=False)[0]
        handles = _linear(panels[0], diagram)
        if two:
            _log(panels[1], diagram)
            panels[0].set_title("linear scales")
            panels[1].set_title("log scales, down to the lean end")
        for axes in panels:
            axes.set_xlabel(wrapped(literal(f"X, mol {diagram.component} per mol {diagram.liquid}"), 68))
            axes.set_ylabel(wrapped(literal(f"Y, mol {diagram.component} per mol {diagram.gas}"), 68))
        legend_below(paper, handles)
        settle(paper)  # numbers go where there is room on paper
        for axes in panels:
            _numbers(axes, diagram)
    return paper


def note(diagram: StageDiagram) -> str:
    """Give the lines below the title: stages, rates, and where the pinch lies if it is not shown.

    Parameters
    ----------
    diagram : StageDiagram

    Returns
    -------
    str
    """
    count = len(diagram.stages_x)
    stages = f"{diagram.kind} of {count} equilibrium {'stage' if count == 1 else 'stages'}"
    if diagram.stages_needed is not None and np.isfinite(diagram.stages_needed):
        stages += f", {diagram.stages_needed:.2f} needed between these ends"
    what = diagram.gas if diagram.kind == "stripper" else diagram.liquid
    parts = []
    if diagram.least_mol_s is not None:
        times = "" if diagram.ratio_to_least is None else f"{what} at {diagram.ratio_to_least:.3g} times the "
        parts.append(f"{times}least rate{' ' + what if not times else ''} of {diagram.least_mol_s * PER_HOUR:.4g} kmol/h")
    elif diagram.ratio_to_least is not None:
        parts.append(f"{what} at {diagram.ratio_to_least:.3g} times the least rate")
    else:
        parts.append(f"no least rate of {what} known")
    if diagram.pinch is not None and any(_beyond(diagram)):
        parts.append(f"pinch outside the picture, at X = {short(diagram.pinch.x)}, Y = {short(diagram.pinch.y)}")
    return "\n".join([stages, *parts])


def needs_log(diagram: StageDiagram) -> bool:
    """Tell whether the lean stages are too small to be seen on linear axes.

    Parameters
    ----------
    diagram : StageDiagram

    Returns
    -------
    bool
    """
    ends = ((diagram.stages_x, diagram.operating_x), (diagram.stages_y, diagram.operating_y))
    return any(0 < np.min(stages) < VANISHING * max(np.max(stages), np.max(line)) for stages, line in ends)


def _beyond(diagram: StageDiagram) -> tuple[bool, bool]:
    """Tell for X and for Y whether the least-rate line goes too far to be shown whole."""
    if diagram.least_x is None or diagram.least_y is None:
        return False, False
    x, y = _stair(diagram)
    return bool(np.max(diagram.least_x) > FARTHEST * x.max()), bool(np.max(diagram.least_y) > FARTHEST * y.max())


def _stair(diagram: StageDiagram) -> tuple[np.ndarray, np.ndarray]:
    """Give all points of operation: its line, steps and stages."""
    x = np.concatenate([diagram.operating_x, diagram.steps_x, diagram.stages_x])
    y = np.concatenate([diagram.operating_y, diagram.steps_y, diagram.stages_y])
    return x, y


def _span(diagram: StageDiagram, log: bool) -> list[tuple[float, float]]:
    """Give lower and upper ends of both axes: operation and the least-rate line, whatever equilibrium does beyond."""
    spans = []
    least = (diagram.least_x, diagram.least_y)
    both = (diagram.stages_x, diagram.stages_y)
    for values, stages, line, beyond in zip(_stair(diagram), both, least, _beyond(diagram), strict=True):
        values = values[np.isfinite(values)]
        if line is not None and not beyond:
            values = np.concatenate([values, line])
        low, high = float(values.min()), float(values.max())
        if log:
            # a lean end of next to nothing would take decades without a stage
            low = max(float(values[values > 0].min()), 0.1 * float(stages[stages > 0].min()))
            stretch = (high / low) ** LOG_MARGIN
            spans.append((low / stretch, high * stretch))
            continue
        low = 0.0 if low < 0.4 * high else low
        room = MARGIN * (high - low or high or 1.0)
        spans.append((low - room if low > room else min(low, 0.0), high + room))
    return spans


def _linear(axes: Axes, diagram: StageDiagram) -> list[Any]:
    axes.set_gid("linear")
    count = len(diagram.stages_x)
    if diagram.curve:
        equilibrium = {**EQUILIBRIUM, "label": "equilibrium"}
    else:
        equilibrium = {**POINTS, "label": "equilibrium at the stages (no curve of X alone)"}
    lines = [
        _line(axes, diagram.equilibrium_x, diagram.equilibrium_y, "equilibrium", zorder=3, **equilibrium),
        _line(axes, diagram.operating_x, diagram.operating_y, "operating", zorder=3, label="operating line", **OPERATING),
    ]
    if diagram.least_x is not None and diagram.least_y is not None:
        what = "gas" if diagram.kind == "stripper" else "solvent"
        lines.append(_line(axes, diagram.least_x, diagram.least_y, "least", label=f"at the least {what}", **LEAST))
    steps = _step_style(diagram)
    label = f"{count} equilibrium {'stage' if count == 1 else 'stages'}"
    lines.append(_line(axes, diagram.steps_x, diagram.steps_y, "steps", zorder=2.5, label=label, **steps))
    if diagram.pinch is not None and not any(_beyond(diagram)):
        lines.append(_pinch(axes, diagram, "pinch"))
    (low, high), (bottom, top) = _span(diagram, log=False)
    linear_axis(axes.xaxis, low, high)
    linear_axis(axes.yaxis, bottom, top)
    return lines


def _log(axes: Axes, diagram: StageDiagram) -> None:
    axes.set_gid("log")
    (low, high), (bottom, top) = _span(diagram, log=True)
    log_axis(axes.xaxis, low, high)
    log_axis(axes.yaxis, bottom, top)
    fine = np.geomspace(low, high, 300)

    def curved(x: np.ndarray, y: np.ndarray, name: str, **look: Any) -> None:
        # what is straight on linear scales is not on these
        between = np.unique(np.concatenate([x, fine[(fine > x.min()) & (fine < x.max())]]))
        order = np.argsort(x, kind="stable")
        _line(axes, between, np.interp(between, x[order], y[order]), name, **look)

    if diagram.curve:
        curved(diagram.equilibrium_x, diagram.equilibrium_y, "log-equilibrium", zorder=3, **EQUILIBRIUM)
    else:
        _line(axes, diagram.equilibrium_x, diagram.equilibrium_y, "log-equilibrium", zorder=3, **POINTS)
    curved(diagram.operating_x, diagram.operating_y, "log-operating", zorder=3, **OPERATING)
    if diagram.least_x is not None and diagram.least_y is not None:
        curved(diagram.least_x, diagram.least_y, "log-least", **LEAST)
    _line(axes, diagram.steps_x, diagram.steps_y, "log-steps", zorder=2.5, **_step_style(diagram))
    pinch = diagram.pinch
    if pinch is not None and not any(_beyond(diagram)) and low <= pinch.x <= high and bottom <= pinch.y <= top:
        _pinch(axes, diagram, "log-pinch")


def _line(axes: Axes, x: np.ndarray, y: np.ndarray, gid: str, **look: Any) -> Any:
    return axes.plot(x, y, gid=gid, **look)[0]


def _pinch(axes: Axes, diagram: StageDiagram, gid: str) -> Any:
    assert diagram.pinch is not None
    kind = diagram.pinch.kind
    label = "pinch: tangent" if kind == "tangent" else f"pinch at the {kind}"
    # an end may lie on the frame, where the half outside must not be cut away
    return _line(axes, [diagram.pinch.x], [diagram.pinch.y], gid, label=label, zorder=5, clip_on=False, **PINCH)


def _step_style(diagram: StageDiagram) -> dict[str, Any]:
    """Give the look of the stair, with markers at the corners that are stages."""
    if not diagram.curve:
        return BARE_STEPS
    x, y = (np.asarray(values, dtype=float) for values in (diagram.steps_x, diagram.steps_y))
    wide, high = np.ptp(x) or 1.0, np.ptp(y) or 1.0
    corners = {
        int(np.argmin(np.hypot((x - own_x) / wide, (y - own_y) / high)))
        for own_x, own_y in zip(diagram.stages_x, diagram.stages_y, strict=True)
    }
    size = 3.2 if len(diagram.stages_x) <= 25 else 1.8
    return {**STEPS, "markersize": size, "markevery": sorted(corners)}


def _numbers(axes: Axes, diagram: StageDiagram) -> None:
    """Number the stages, beyond the equilibrium line, as far as they have room on paper."""
    mm = axes.figure.dpi / 25.4
    points = axes.transData.transform(np.column_stack([diagram.stages_x, diagram.stages_y])) / mm
    frame = axes.get_window_extent()
    order = np.argsort(diagram.operating_x, kind="stable")
    line = np.interp(diagram.stages_x, np.asarray(diagram.operating_x)[order], np.asarray(diagram.operating_y)[order])
    # the stair lies on the other side of the equilibrium line
    side = -1.0 if np.mean(np.asarray(diagram.stages_y) < line) >= 0.5 else 1.0
    shift = BESIDE * np.array([-side, side])
    count = len(points)
    every = next(step for step in (1, 5, 10, 20, 50, 100, count) if count <= 20 * max(1, 0.8 * step))
    taken = []
    if diagram.pinch is not None:
        taken.append(axes.transData.transform((diagram.pinch.x, diagram.pinch.y)) / mm)
    halo = [library().patheffects.withStroke(linewidth=2.0, foreground="white")]
    for place in np.argsort(-points[:, 0], kind="stable"):
        number = int(place) + 1
        if number % every and number not in (1, count):
            continue
        spot = points[place] + shift
        across, up = spot * mm
        inside = frame.x0 + 1.2 * mm < across < frame.x1 - 1.2 * mm and frame.y0 + mm < up < frame.y1 - mm
        if not inside or any(np.hypot(*(spot - other)) < APART for other in taken):
            continue
        taken.append(spot)
        axes.annotate(
            str(number),
            (diagram.stages_x[place], diagram.stages_y[place]),
            xytext=tuple(shift * 72 / 25.4),
            textcoords="offset points",
            ha="center",
            va="center",
            size=6.5,
            color=INK,
            path_effects=halo,
            zorder=6,
            gid=f"stage-{number}",
        )
