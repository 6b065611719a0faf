"""The Pareto set of a scan of designs: size against circulation and duty, or operation against investment."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.pictures.base import GREY, RUST, legend_below, style
from leanloop.pictures.contour_lines import levels, numbers
from leanloop.pictures.designs_marks import DESIGN, STAIRS, mark, name_designs
from leanloop.pictures.designs_parts import heading, naming, quantities, size_of, tally
from leanloop.pictures.panel_scales import fit_axis, tame
from leanloop.pictures.panels import finish, label_abscissa, page, pages, title_panel
from leanloop.pictures.study_columns import Column, constant, joined
from leanloop.sizing.choice import pareto
from leanloop.sizing.costs import YEARLY

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from leanloop.sizing.designs import Designs

SET = {"color": RUST, "linestyle": "none", "marker": "s", "markersize": 3.2, "markerfacecolor": "white", "zorder": 3.5}
EQUAL = {"colors": GREY, "linewidths": 0.6, "linestyles": "-", "zorder": 1}


def figures(found: Designs) -> list[Figure]:
    """Draw all designs and the Pareto set among them.

    Parameters
    ----------
    found : Designs

    Returns
    -------
    list of matplotlib.figure.Figure
        None where less than two designs could be, or they do not differ. With prices, operation a year is drawn against what
        is invested, with lines of equal total cost, ``equal-operation``; else column volume, or stages, against circulation
        and against stripping gas or duty. A panel has the gid ``panel-KEY``, its designs ``designs-KEY``, the stairs of those
        that none betters in the two axes ``stairs-KEY``, others of the Pareto set ``set-KEY``, texts ``name-DESIGN-KEY``.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    pairs, money = _pairs(found)
    if not pairs:
        return []
    yearly = found.sizing.prices.get("yearly", YEARLY)
    how = (
        f"grey lines: equal cost a year, operation + {yearly:g} of what is invested"
        if money
        else "a design of the Pareto set is bettered by none in circulation, stripping and column size at once"
    )
    shared, out = list(pages(pairs)), []
    for place, group in enumerate(shared):
        title = heading(found, "operation against investment" if money else "Pareto set", place, len(shared))
        note = joined(tally(found), naming(found), how, "" if money else quantities(found)[1])
        out.append(_page(found, group, yearly if money else None, title, note))
    return out


def _pairs(found: Designs) -> tuple[list[tuple[Column, Column]], bool]:
    """Give what is drawn against what, across and up, and whether it is money."""
    if found.costs:
        invested, operation = (np.where(found.good, tame(found.costs[key]), np.nan) for key in ("invested", "operation"))
        both = np.isfinite(invested) & np.isfinite(operation)
        if not constant(invested[both]) and not constant(operation[both]):
            across = Column("invested", "invested, in the money of the prices", invested)
            return [(across, Column("operation", "operation a year, in the money of the prices", operation))], True
    shown = [item for item in quantities(found)[0] if item.address not in ("cost", "volume")]
    size = size_of(found)
    if constant(size.values[np.isfinite(size.values)]):  # nothing but rates differs
        return [(shown[0], other) for other in shown[1:]], False
    pairs = [(item, size) for item in shown]
    return [pair for pair in pairs if np.isfinite(pair[0].values + pair[1].values).sum() > 1], False


def _page(found: Designs, group: list[tuple[Column, Column]], yearly: float | None, title: str, note: str) -> Figure:
    with style():
        paper, panels, width = page(title, note, len(group), row_mm=88.0 if len(group) == 1 else 72.0, below_mm=14.0)
        handles: dict[str, Any] = {}
        drawn = []
        for axes, (across, up) in zip(panels, group, strict=True):
            key = up.address if yearly is not None else across.address
            x, y = across.values, up.values
            axes.set_gid(f"panel-{key}")
            there = np.isfinite(x) & np.isfinite(y)
            (handles["design"],) = axes.plot(x[there], y[there], gid=f"designs-{key}", label="design", **{**DESIGN, "zorder": 3})
            # of designs that are the same on both axes, the one that is better in what is not drawn
            among = there if yearly is not None else there & found.front
            front = np.flatnonzero(pareto(np.stack([x, y], axis=1), among))
            front = front[np.argsort(x[front], kind="stable")]
            others = np.flatnonzero(found.front & there & ~np.isin(np.arange(found.count), front))
            if yearly is not None:
                others = others[:0]
            (handles["stairs"],) = axes.plot(x[front], y[front], gid=f"stairs-{key}", label=_told(group, yearly), **STAIRS)
            if len(others):
                look = {"label": "Pareto set, the others", **SET}
                (handles["set"],) = axes.plot(x[others], y[others], gid=f"set-{key}", **look)
            fit_axis(axes.xaxis, x[there], zero=False)
            fit_axis(axes.yaxis, y[there], zero=False)
            lines = None if yearly is None else _equal(axes, yearly)
            handles |= mark(axes, found, x, y, key)
            title_panel(axes, up.label, width)
            label_abscissa(axes, across.label, width)
            drawn.append((axes, key, x, y, front, lines))
        legend_below(paper, list(handles.values()))
        finish(paper, width)
        for axes, key, x, y, front, lines in drawn:
            kept = name_designs(axes, found, x, y, front, key)
            if lines is not None:
                numbers(axes, lines, "equal", kept)
    return paper


def _told(group: list[tuple[Column, Column]], yearly: float | None) -> str:
    """Name the stairs."""
    return "Pareto set, those that none betters in the two shown" if yearly is None and len(group) > 1 else "Pareto set"


def _equal(axes: Axes, yearly: float) -> Any:
    """Draw lines of equal cost a year, operation and part of what is invested; None where there are none."""
    (left, right), (low, high) = axes.get_xlim(), axes.get_ylim()
    x, y = np.array([left, right]), np.array([low, high])
    total = y[:, None] + yearly * x[None, :]
    found, _ = levels(total)
    if not len(found):
        return None
    lines = axes.contour(x, y, total, levels=found, **EQUAL)
    lines.set_gid("equal-operation")
    return lines
