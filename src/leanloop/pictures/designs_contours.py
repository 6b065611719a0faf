"""Designs over what is scanned: contours over two columns' stages, or curves against a single input."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.pictures.base import NAVY, legend_below, library, style
from leanloop.pictures.contour_lines import contours, crosses, distinct, numbers
from leanloop.pictures.designs_marks import DESIGN, MARKS, boxes_of, mark
from leanloop.pictures.designs_parts import FAILED_LABEL, heading, home, marked, named, naming, quantities, tally
from leanloop.pictures.panel_scales import fit_axis, known, wants_log
from leanloop.pictures.panels import FAILED, finish, label_abscissa, page, pages, rug, title_panel
from leanloop.pictures.study_axes import Scaled, held, scaled
from leanloop.pictures.study_columns import Column, constant, joined
from leanloop.pictures.study_curves import markers
from leanloop.pictures.words import address_lines

if TYPE_CHECKING:
    from matplotlib.axis import Axis as Drawn
    from matplotlib.figure import Figure

    from leanloop.sizing.designs import Designs

MOST_NODES = 900  # of a plane, whose designs have dots


def figures(found: Designs) -> list[Figure]:
    """Draw circulation, stripping, column volume and cost over what is scanned.

    Parameters
    ----------
    found : Designs

    Returns
    -------
    list of matplotlib.figure.Figure
        Of six panels each, none where no design could be or nothing is scanned. Over two axes, those of stages first, contours
        are drawn, with the gids ``fields-KEY`` and ``lines-KEY``; over a single one curves, with the gid ``KEY``. Further axes
        stay at the values of the chosen design. Designs that could not be have crosses ``failed-KEY``, those that stand out
        markers ``chosen-KEY``, ``knee-KEY`` and ``cheapest-KEY``. A panel has the gid ``panel-KEY``.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    scanned, start = found.sizing.axes, home(found)
    moving = [place for place, axis in enumerate(scanned) if len(axis) > 1]
    if start is None or not moving:
        return []
    at = np.unravel_index(start, [len(axis) for axis in scanned])
    columns = {f"units.{name}.stages" for name in found.sizing.stages}
    moving.sort(key=lambda place: (not columns & set(scanned[place].values), -len(scanned[place])))
    chosen = sorted(moving[:2])
    fixed = [place for place in range(len(scanned)) if place not in chosen]
    table = np.arange(found.count).reshape([len(axis) for axis in scanned])
    table = table[tuple(slice(None) if place in chosen else at[place] for place in range(len(scanned)))]
    ends = [scaled(found.sheet, scanned[place]) for place in chosen]
    shown, left_out = quantities(found)
    shown = [item for item in shown if not constant(known(item.values[table]))]
    bad = not found.good[table].all()
    elsewhere = [named(found, word, design) for word, design in marked(found).items() if design not in table]
    note = joined(
        f"{tally(found)}{': crosses' if bad else ''}",
        naming(found),
        *(end.note for end in ends),
        f"at the values of the {'chosen' if found.chosen == start else 'first good'} design, "
        + ", ".join(held(found.sheet, scanned[place], int(at[place])) for place in fixed)
        if fixed
        else "",
        f"at other values, and not marked: {'; '.join(elsewhere)}" if elsewhere else "",
        left_out,
    )
    shared, out = list(pages(shown)), []
    for place, group in enumerate(shared):
        title = heading(found, f"designs by {' and '.join(end.address for end in ends)}", place, len(shared))
        draw = _plane if len(chosen) == 2 else _curves
        out.append(draw(found, group, ends, table, title, note))
    return out


def _plane(found: Designs, group: list[Column], ends: list[Scaled], table: np.ndarray, title: str, note: str) -> Figure:
    """Draw contours; `table` has the designs of the plane, (across, up)."""
    places = [distinct(end.values) for end in ends]
    x, y = (end.values[place] for end, place in zip(ends, places, strict=True))
    rows = table[np.ix_(*places)].T
    across, up = _spread(found.count, table, ends)
    good = found.good[rows]
    with style():
        paper, panels, width = page(title, note, len(group), row_mm=64.0, below_mm=10.0)
        width -= 4.0  # for what stands left of each panel
        drawn, handles = [], {}
        for number, (axes, column) in enumerate(zip(panels, group, strict=True)):
            axes.set_gid(f"panel-{column.address}")
            axes.grid(False)
            axes.tick_params(pad=8.0)  # crosses and markers stand on the frame
            _fit(axes.xaxis, ends[0], x, tight=True)
            _fit(axes.yaxis, ends[1], y, tight=True)
            lines = contours(axes, x, y, column.values[rows], column.address)
            drawn.append((axes, lines))
            if good.size <= MOST_NODES:
                spots = x[np.nonzero(good)[1]], y[np.nonzero(good)[0]]
                look = {**DESIGN, "clip_on": False, "zorder": 3, "label": "design"}
                (handles["design"],) = axes.plot(*spots, gid=f"designs-{column.address}", **look)
            if not good.all():
                look = {**FAILED, "markersize": 4.0, "clip_on": False, "zorder": 5, "label": FAILED_LABEL}
                (handles["failed"],) = axes.plot(*crosses(x, y, ~good), gid=f"failed-{column.address}", **look)
            handles |= mark(axes, found, across, up, column.address, clip=False)
            title_panel(axes, column.label, width)
            if number >= len(group) - 2:
                label_abscissa(axes, ends[0].label, width)
            if number % 2 == 0:
                axes.set_ylabel(address_lines(ends[1].label, 26).replace("$", r"\$"), size=8.0)
        legend_below(paper, list(handles.values()))
        finish(paper, width)
        for axes, lines in drawn:
            if lines is not None:
                stand = np.array([design for design in marked(found).values() if design in table], dtype=int)
                kept = boxes_of(axes, across[stand], up[stand], MARKS["chosen"]["markersize"])
                numbers(axes, lines, axes.get_gid().removeprefix("panel-"), kept)
    return paper


def _curves(found: Designs, group: list[Column], ends: list[Scaled], table: np.ndarray, title: str, note: str) -> Figure:
    """Draw curves; `table` has the designs along the axis."""
    end = ends[0]
    order = np.argsort(end.values, kind="stable")
    order = order[np.isfinite(end.values[order])]
    rows, across = table[order], _spread(found.count, table, ends)[0]
    bad = ~found.good[rows]
    with style():
        paper, panels, width = page(title, note, len(group), below_mm=14.0)
        handles: dict[str, Any] = {}
        for number, (axes, column) in enumerate(zip(panels, group, strict=True)):
            axes.set_gid(f"panel-{column.address}")
            own = column.values[rows]
            axes.plot(across[rows], own, gid=column.address, color=NAVY, marker="o", markevery=markers(own), zorder=3)
            values = known(own)
            fit_axis(axes.yaxis, values, wants_log(values))
            _fit(axes.xaxis, end, known(end.values))
            failed = rug(axes, across[rows][bad], f"failed-{column.address}", FAILED_LABEL)
            handles |= {"failed": failed[0]} if failed else {}
            handles |= mark(axes, found, across, column.values, column.address)
            title_panel(axes, column.label, width)
            if number >= len(group) - 2:
                label_abscissa(axes, end.label, width)
        if handles:
            legend_below(paper, list(handles.values()))
        finish(paper, width)
    return paper


def _spread(count: int, table: np.ndarray, ends: list[Scaled]) -> list[np.ndarray]:
    """Give where each design stands on the axes, NaN for those elsewhere."""
    out = []
    for place, end in enumerate(ends):
        own = np.full(count, np.nan)
        own[table] = end.values.reshape([-1 if axis == place else 1 for axis in range(table.ndim)])
        out.append(own)
    return out


def _fit(axis: Drawn, end: Scaled, values: np.ndarray, tight: bool = False) -> None:
    """Set a scale, with whole ticks for stages."""
    fit_axis(axis, values, end.log, tight=tight, zero=False)
    if end.address.endswith(".stages") and len(values) > 1:
        axis.set_major_locator(library().ticker.MaxNLocator(nbins=8, integer=True))
        axis.set_major_formatter(library().ticker.FuncFormatter(lambda value, _: f"{value:.0f}"))
        axis.set_minor_locator(library().ticker.NullLocator())
