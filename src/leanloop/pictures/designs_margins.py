"""What margins cost: the width of columns at other parts of flood, and stages at more solvent than the least."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.pictures.base import INK, NAVY, legend_below, library, look, style
from leanloop.pictures.designs_columns import design_flood
from leanloop.pictures.designs_parts import boxes_of, heading, name_points, naming, stages_of
from leanloop.pictures.panel_scales import fit_axis, known, wants_log
from leanloop.pictures.panels import finish, label_abscissa, listed, page, title_panel
from leanloop.pictures.study_columns import joined
from leanloop.pictures.words import told_apart
from leanloop.sizing.choice import pareto
from leanloop.sizing.effects import TIMES, flood_effects, solvent_effects

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from leanloop.sizing.designs import Designs

LETTERS = 40  # of a column's name in the legend
AS_CHOSEN = {
    "color": INK, "linestyle": "none", "marker": "o", "markersize": 10.0, "markerfacecolor": "none", "markeredgewidth": 1.3,
}  # fmt: skip
STAIRS = {"color": NAVY, "linestyle": "-", "marker": "o", "markersize": 4.0, "drawstyle": "steps-post", "zorder": 4}


def figures(found: Designs) -> list[Figure]:
    """Draw the width of the chosen design's columns over the part of flood, and the fewest stages over the solvent rate.

    Parameters
    ----------
    found : Designs

    Returns
    -------
    list of matplotlib.figure.Figure
        One, or none where neither is known. The panel ``panel-flood`` has a line ``diameter-NAME`` for each column and
        ``chosen-flood`` where they are designed; the panel ``panel-solvent`` has the stairs ``stages`` of the fewest stages
        over circulation, in times the least of the scan, and the texts ``name-DESIGN-solvent``.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    if found.chosen is None:
        return []
    widths: dict[str, list[tuple[float, float]]] = {}
    for name, part, wide, _ in flood_effects(found):
        if np.isfinite(wide):
            widths.setdefault(name, []).append((100 * part, wide))
    steps = _steps(found)
    count = bool(widths) + (len(steps[0]) > 1)
    if not count:
        return []
    missing = [name for name in found.columns if name not in widths] if widths else []
    note = joined(
        naming(found) if len(steps[0]) > 1 else "",
        "stairs: the fewest stages of any design with at most so much solvent" if len(steps[0]) > 1 else "",
        f"width is given, or the pressure drop is limited: {listed(missing)}" if missing else "",
    )
    with style():
        paper, panels, width = page(heading(found, "what margins cost"), note, count, row_mm=72.0, below_mm=12.0)
        rest, handles = iter(panels), {}
        if widths:
            handles |= _widths(next(rest), found, widths, width)
        stairs = next(rest, None)
        if stairs is not None:
            handles |= _stairs(stairs, found, steps, width)
        legend_below(paper, list(handles.values()))
        finish(paper, width)
        if stairs is not None:
            designs, times, stages = steps
            kept = boxes_of(stairs, times, stages, STAIRS["markersize"])
            texts = {f"name-{design}-solvent": stages_of(found, int(design)) for design in designs}
            name_points(stairs, texts, times.tolist(), stages.tolist(), kept)
    return [paper]


def _widths(axes: Axes, found: Designs, widths: dict[str, list[tuple[float, float]]], width_mm: float) -> dict[str, Any]:
    axes.set_gid("panel-flood")
    handles, labels = {}, told_apart(list(widths), LETTERS)
    own = [(100 * design_flood(found.columns[name]), float(found.columns[name].diameter_m[found.chosen])) for name in widths]
    for place, (label, (name, points)) in enumerate(zip(labels, widths.items(), strict=True)):
        x, y = zip(*points, strict=True)
        (handles[name],) = axes.plot(x, y, gid=f"diameter-{name}", label=label, zorder=3, **look(place))
    handles["chosen"] = axes.plot(*zip(*own, strict=True), gid="chosen-flood", label="as designed", zorder=5, **AS_CHOSEN)[0]
    every = np.array([*(point for item in widths.values() for point in item), *own])
    across, up = known(every[:, 0]), known(every[:, 1])
    fit_axis(axes.xaxis, across, zero=False)
    fit_axis(axes.yaxis, up, wants_log(up), zero=False)
    title_panel(axes, "diameter, m", width_mm)
    label_abscissa(axes, "% of flood designed for", width_mm)
    return handles


def _steps(found: Designs) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Give the designs that none betters in circulation and stages, their circulation in times the least, and their stages."""
    nothing = np.zeros(0, dtype=int), np.zeros(0), np.zeros(0)
    if not solvent_effects(found):
        return nothing
    total = sum(found.stages.values(), np.zeros(found.count))
    times = found.circulation / found.circulation[found.good].min()
    rows = np.flatnonzero(pareto(np.stack([times, total], axis=1), found.good & (times <= TIMES[-1])))
    rows = rows[np.argsort(times[rows], kind="stable")]
    return rows, times[rows], total[rows]


def _stairs(axes: Axes, found: Designs, steps: tuple[np.ndarray, np.ndarray, np.ndarray], width_mm: float) -> dict[str, Any]:
    axes.set_gid("panel-solvent")
    _, times, stages = steps
    (line,) = axes.plot(times, stages, gid="stages", label="fewest stages", **STAIRS)
    fit_axis(axes.xaxis, times, zero=False)
    fit_axis(axes.yaxis, stages, zero=False)
    axes.yaxis.set_major_locator(library().ticker.MaxNLocator(nbins=7, integer=True))
    title_panel(axes, "stages of all columns", width_mm)
    label_abscissa(axes, "circulation, times the least of the scan", width_mm)
    return {"stairs": line}
