"""A sweep of several axes: contours of every quantity over the two longest, crosses where a case did not converge."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from leanloop.pictures.base import legend_below, style
from leanloop.pictures.contour_lines import contours, crosses, distinct, numbers
from leanloop.pictures.panel_scales import fit_axis, known
from leanloop.pictures.panels import FAILED, finish, label_abscissa, page, pages, title_panel
from leanloop.pictures.study_axes import Scaled, held, scaled
from leanloop.pictures.study_columns import Column, constant, heading, joined, recorded, tally
from leanloop.pictures.words import address_lines

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from leanloop.studies.findings import Findings


def figures(findings: Findings) -> list[Figure]:
    """Draw the quantities of a sweep with two axes or more of more than one value.

    Parameters
    ----------
    findings : Findings

    Returns
    -------
    list of matplotlib.figure.Figure
        Of six panels each, none where the study is no such sweep or nothing varies. A panel has the gid ``panel-ADDRESS``,
        its fields ``fields-ADDRESS``, its lines ``lines-ADDRESS``, the crosses of what did not converge ``failed-ADDRESS``.
        Further axes stay at their middle value, which the note tells.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    axes = findings.study.cases.axes
    moving = [place for place, axis in enumerate(axes) if len(axis) > 1]
    if len(moving) < 2 or len(findings) != findings.study.cases.count:
        return []
    chosen = sorted(sorted(moving, key=lambda place: -len(axes[place]))[:2])
    fixed = {place: len(axis) // 2 for place, axis in enumerate(axes) if place not in chosen}
    across, up = (scaled(findings.study.sheet, axes[place]) for place in chosen)
    table = np.arange(findings.study.cases.count).reshape([len(axis) for axis in axes])
    table = table[tuple(fixed.get(place, slice(None)) for place in range(len(axes)))]  # (across, up): cases of the plane
    columns, left_out = recorded(findings)
    places = distinct(across.values), distinct(up.values)
    rows = table[np.ix_(*places)].T
    stay = [held(findings.study.sheet, axes[place], at) for place, at in fixed.items()]
    failed = tally(findings)
    if not findings.converged[rows].all():
        failed += ": crosses"
    note = joined(failed, across.note, up.note, "at " + ", ".join(stay) if stay else "", left_out)
    # what varies in other planes alone has no lines here
    columns = [item for item in columns if not constant(known(item.values[rows]))]
    shared = list(pages(columns))
    out = []
    for place, group in enumerate(shared):
        title = heading(findings, f"results by {across.address} and {up.address}", place, len(shared))
        out.append(_page(findings, group, (across, up), places, rows, title, note))
    return out


def _page(
    findings: Findings, group: list[Column], ends: tuple[Scaled, Scaled], places: tuple[np.ndarray, np.ndarray],
    rows: np.ndarray, title: str, note: str,
) -> Figure:  # fmt: skip
    x, y = (end.values[place] for end, place in zip(ends, places, strict=True))
    with style():
        paper, panels, width = page(title, note, len(group), row_mm=64.0, below_mm=10.0)
        width -= 4.0  # for what stands left of each panel
        drawn, handles = [], {}
        bad = ~findings.converged[rows]
        for number, (axes, column) in enumerate(zip(panels, group, strict=True)):
            axes.set_gid(f"panel-{column.address}")
            axes.grid(False)
            axes.tick_params(pad=8.0)  # crosses stand on the frame
            fit_axis(axes.xaxis, x, ends[0].log, tight=True)
            fit_axis(axes.yaxis, y, ends[1].log, tight=True)
            lines = contours(axes, x, y, column.values[rows], column.address)
            drawn.append((axes, lines))
            if bad.any():
                look = {**FAILED, "markersize": 4.0, "clip_on": False, "zorder": 5, "label": "case not converged"}
                (handles["failed"],) = axes.plot(*crosses(x, y, bad), gid=f"failed-{column.address}", **look)
            title_panel(axes, column.label, width)
            if number >= len(group) - 2:
                label_abscissa(axes, ends[0].label, width)
            if number % 2 == 0:
                axes.set_ylabel(address_lines(ends[1].label, 26).replace("$", r"\$"), size=8.0)
        if handles:
            legend_below(paper, list(handles.values()))
        finish(paper, width)
        for axes, lines in drawn:
            if lines is not None:
                numbers(axes, lines, axes.get_gid().removeprefix("panel-"))
    return paper
