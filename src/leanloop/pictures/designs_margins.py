"""What margins cost: the width of columns at other parts of flood, and stages at more solvent than the least."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.pictures.base import legend_below, library, look, style
from leanloop.pictures.designs_columns import design_flood
from leanloop.pictures.designs_marks import MARKS, STAIRS, name_designs
from leanloop.pictures.designs_parts import heading, named, naming
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
            name_designs(stairs, found, *steps[1:], steps[0], "solvent", ["chosen"])
    return [paper]


def _widths(axes: Axes, found: Designs, widths: dict[str, list[tuple[float, float]]], width_mm: float) -> dict[str, Any]:
    axes.set_gid("panel-flood")
    handles, labels = {}, told_apart(list(widths), LETTERS)
    own = [(100 * design_flood(found.columns[name]), float(found.columns[name].diameter_m[found.chosen])) for name in widths]
    for place, (label, (name, points)) in enumerate(zip(labels, widths.items(), strict=True)):
        x, y = zip(*points, strict=True)
        (handles[name],) = axes.plot(x, y, gid=f"diameter-{name}", label=label, zorder=3, **look(place))
    handles |= _chosen(axes, found, *np.transpose(own), "chosen-flood")
    every = np.array([*(point for item in widths.values() for point in item), *own])
    across, up = known(every[:, 0]), known(every[:, 1])
    fit_axis(axes.xaxis, across, zero=False)
    fit_axis(axes.yaxis, up, wants_log(up), zero=False)
    title_panel(axes, "diameter, m", width_mm)
    label_abscissa(axes, "% of flood designed for", width_mm)
    return handles


def _chosen(axes: Axes, found: Designs, x: np.ndarray, y: np.ndarray, gid: str) -> dict[str, Any]:
    """Mark the chosen design."""
    look = {"linestyle": "none", "zorder": 7, **MARKS["chosen"]}
    return {"chosen": axes.plot(x, y, gid=gid, label=named(found, "chosen", found.chosen), **look)[0]}


def _steps(found: Designs) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Give the designs that none betters in circulation and stages, and of all designs circulation in times the least and stages.

    Those of `solvent_effects` are among them; drawn are all of them, since between two the stairs have to be right as well.
    """
    total = sum(found.stages.values(), np.zeros(found.count))
    if not solvent_effects(found):
        return np.zeros(0, dtype=int), total, total
    good = found.good & np.isfinite(found.circulation)
    times = np.where(good, found.circulation / found.circulation[good].min(), np.nan)
    rows = np.flatnonzero(pareto(np.stack([times, total], axis=1), good & (times <= TIMES[-1])))
    return rows[np.argsort(times[rows], kind="stable")], times, total


def _stairs(axes: Axes, found: Designs, steps: tuple[np.ndarray, np.ndarray, np.ndarray], width_mm: float) -> dict[str, Any]:
    axes.set_gid("panel-solvent")
    rows, times, stages = steps
    (line,) = axes.plot(times[rows], stages[rows], gid="stages", label="fewest stages", **STAIRS)
    own = found.chosen if times[found.chosen] <= TIMES[-1] else rows[0]
    fit_axis(axes.xaxis, times[[*rows, own]], zero=False)
    fit_axis(axes.yaxis, stages[[*rows, own]], zero=False)
    axes.yaxis.set_major_locator(library().ticker.MaxNLocator(nbins=7, integer=True))
    title_panel(axes, "stages of all columns", width_mm)
    label_abscissa(axes, "circulation, times the least of the scan", width_mm)
    return {"stairs": line, **_chosen(axes, found, times[[own]], stages[[own]], "chosen-solvent")}
