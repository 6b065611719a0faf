"""A sweep of one axis: every quantity against the input, with gaps where a case did not converge."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.pictures.base import NAVY, RUST, legend_below, style
from leanloop.pictures.panel_scales import fit_axis, known, wants_log
from leanloop.pictures.panels import finish, label_abscissa, page, pages, rug, title_panel
from leanloop.pictures.study_axes import Scaled, held, scaled
from leanloop.pictures.study_columns import Column, heading, joined, recorded, tally

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from leanloop.studies.findings import Findings

MOST_MARKERS = 40
AS_IS = {"color": NAVY, "linestyle": "-", "marker": "o"}
CLEAN = {"color": RUST, "linestyle": (0, (5, 2)), "marker": "s", "markerfacecolor": "white"}


def figures(findings: Findings) -> list[Figure]:
    """Draw the quantities of a sweep with one axis of more than one value.

    Parameters
    ----------
    findings : Findings

    Returns
    -------
    list of matplotlib.figure.Figure
        Of six panels each, none where the study is no such sweep or nothing varies. A panel has the gid ``panel-ADDRESS``,
        its line ``ADDRESS``, that with clean solvent ``clean.ADDRESS``, the crosses of what did not converge
        ``failed-ADDRESS``.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    moving = [axis for axis in findings.study.cases.axes if len(axis) > 1]
    if len(moving) != 1 or len(findings) != findings.study.cases.count:
        return []
    columns, left_out = recorded(findings)
    axis = scaled(findings.study.sheet, moving[0])
    fixed = [held(findings.study.sheet, item, 0) for item in findings.study.cases.axes if len(item) == 1]
    failed = tally(findings)
    if not findings.converged.all():
        failed += ": crosses on the abscissa"
    note = joined(failed, axis.note, "at " + ", ".join(fixed) if fixed else "", left_out)
    shared = list(pages(columns))
    return [_page(findings, group, axis, note, place, len(shared)) for place, group in enumerate(shared)]


def _page(findings: Findings, group: list[Column], axis: Scaled, note: str, place: int, of: int) -> Figure:
    with style():
        paper, panels, width = page(heading(findings, f"results by {axis.address}", place, of), note, len(group), below_mm=14.0)
        handles: dict[str, Any] = {}
        order = np.argsort(axis.values, kind="stable")
        bad = ~findings.converged[order] & np.isfinite(axis.values[order])
        for number, (axes, column) in enumerate(zip(panels, group, strict=True)):
            axes.set_gid(f"panel-{column.address}")
            lines = _lines(axes, axis.values[order], column, order)
            fit_axis(axes.xaxis, known(axis.values), axis.log)
            lines += rug(axes, axis.values[order][bad], f"failed-{column.address}")
            handles |= {line.get_label(): line for line in lines}
            title_panel(axes, column.label, width)
            if number >= len(group) - 2:
                label_abscissa(axes, axis.label, width)
        if len(handles) > 1:
            legend_below(paper, list(handles.values()))
        finish(paper, width)
    return paper


def _lines(axes: Axes, across: np.ndarray, column: Column, order: np.ndarray) -> list[Any]:
    """Draw a quantity, and beside it the same with clean solvent."""
    lines = []
    for values, gid, label, look in (
        (column.values, column.address, "as it is", AS_IS),
        (column.clean, f"clean.{column.address}", "with clean solvent", CLEAN),
    ):
        if values is not None:
            own = values[order]
            lines += axes.plot(across, own, gid=gid, label=label, markevery=markers(own), zorder=3, **look)
    values = known(column.values, *([] if column.clean is None else [column.clean]))
    fit_axis(axes.yaxis, values, wants_log(values))
    return lines


def markers(values: np.ndarray) -> list[int]:
    """Give where markers stand: not too many of them, and at each point that has no neighbour to be joined to.

    Parameters
    ----------
    values : (n,) array

    Returns
    -------
    list of int
    """
    there = np.isfinite(values)
    beside = np.zeros(len(values), dtype=bool)
    beside[1:] |= there[:-1]
    beside[:-1] |= there[1:]
    every = -(-len(values) // MOST_MARKERS)
    return np.flatnonzero(there & (~beside | (np.arange(len(values)) % every == 0))).tolist()
