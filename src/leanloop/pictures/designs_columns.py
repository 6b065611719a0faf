"""The columns of the chosen design: how near they are to flooding and what pressure they drop, by feed case."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.pictures.base import INK, NAVY, PAGE_WIDTH, RUST, legend_below, literal, settle, short, style
from leanloop.pictures.designs_parts import heading, stages_of
from leanloop.pictures.panel_scales import LARGEST, fit_axis
from leanloop.pictures.panels import fit_head, pages, sheet_of, squeeze, upright
from leanloop.pictures.study_columns import joined
from leanloop.pictures.words import shortened, told_apart
from leanloop.sizing import packed_column, tray_column

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from leanloop.sizing.designs import Designs
    from leanloop.sizing.equipment import Equipped

MOST_BARS = 12  # feed cases of a column
MOST_ROWS = 3  # columns of a page
BAR_MM = 4.6
NAME_MM, LETTERS = 36.0, 22  # of a feed case
PANEL_MM = 58.0
FLOOD = {"facecolor": NAVY, "edgecolor": NAVY, "linewidth": 0.6}
DROP = {"facecolor": "white", "edgecolor": INK, "hatch": "//////", "linewidth": 0.8}


def figures(found: Designs) -> list[Figure]:
    """Draw each column's part of flood and pressure drop in the chosen design, by feed case.

    Parameters
    ----------
    found : Designs

    Returns
    -------
    list of matplotlib.figure.Figure
        Of three columns each, none where no design is chosen or no column is equipped. Panels have the gids ``panel-flood-NAME``
        and ``panel-drop-NAME``, bars ``flood-FEED-NAME`` and ``drop-FEED-NAME``, the part of flood to design for
        ``design-NAME``, a pressure drop not to be passed ``most-NAME``. Of many feed cases, those nearest to flooding.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    design = found.chosen
    if design is None or not found.columns:
        return []
    shared, out = list(pages(list(found.columns), MOST_ROWS)), []
    for place, names in enumerate(shared):
        note = joined(
            f"design {design}: {stages_of(found, design)} stages",
            "% of flood between the stages that are nearest to it",
            f"the {MOST_BARS} of {found.feeds} feed cases that are nearest" if found.feeds > MOST_BARS else "",
        )
        title = heading(found, "columns of the chosen design", place, len(shared))
        out.append(_page(found, design, names, title, note))
    return out


def design_flood(item: Equipped) -> float:
    """Give the part of flood that a column is designed for.

    Parameters
    ----------
    item : Equipped
    """
    return item.spec.get("flood", tray_column.FLOOD if item.spec.trays else packed_column.FLOOD)


def _page(found: Designs, design: int, names: list[str], title: str, note: str) -> Figure:
    rows = min(found.feeds, MOST_BARS)
    with style():
        paper = sheet_of(PAGE_WIDTH, len(names) * (20.0 + BAR_MM * max(2, rows)) + 12.0, title, note)
        grid = paper.subplots(len(names), 2, squeeze=False)
        handles: dict[str, Any] = {}
        for pair, name in zip(grid, names, strict=True):
            item = found.columns[name]
            near = np.argsort(-np.nan_to_num(item.flood[design], nan=-1.0), kind="stable")[:MOST_BARS]
            feeds = [(list(found.sizing.feeds)[place], int(place)) for place in sorted(near)]
            part = 100 * design_flood(item)
            _panel(pair[0], "flood", name, f"{_head(name, item, design)}: % of flood", feeds, 100 * item.flood[design], part, FLOOD)
            handles["design"] = upright(pair[0], part, f"design-{name}", "part of flood designed for", color=RUST)
            most = _most_drop(item, design)
            _panel(pair[1], "drop", name, "pressure drop, mbar", feeds, item.drop_Pa[design] / 100, most, DROP)
            if np.isfinite(most):
                look = {"color": RUST, "linestyle": (0, (4, 2))}
                handles["most"] = upright(pair[1], most, f"most-{name}", "pressure drop not to be passed", **look)
            texts = told_apart([feed for feed, _ in feeds], LETTERS)
            pair[0].set_yticks(range(len(feeds)), [literal(text) for text in texts])
            for text in pair[0].get_yticklabels():
                squeeze(text, NAME_MM)
            pair[1].set_yticks(range(len(feeds)), [""] * len(feeds))
        legend_below(paper, list(handles.values()))
        fit_head(paper)
        settle(paper)
    return paper


def _head(name: str, item: Equipped, design: int) -> str:
    """Say which column it is and how large, with the name shortened so that it fits."""
    size = f"{short(float(item.diameter_m[design]), 3)} m wide{' as given' if 'diameter' in item.spec.numbers else ''}"
    return f"{shortened(name, 18)}, {size}"


def _most_drop(item: Equipped, design: int) -> float:
    """Give the pressure drop that is not to be passed in mbar, over the height of the packing; NaN where none is given."""
    if "most_drop" not in item.spec.numbers:
        return float("nan")
    return float(item.spec.numbers["most_drop"] * (item.height_m[design] - item.spec.get("ends", 0.0)) / 100)


def _panel(
    axes: Axes, sort: str, name: str, title: str, feeds: list[tuple[str, int]], values: np.ndarray, line: float,
    look: dict[str, Any],
) -> None:  # fmt: skip
    """Draw bars with their numbers in a row at the right, where no line runs."""
    axes.set_gid(f"panel-{sort}-{name}")
    axes.grid(visible=False, axis="y")
    axes.set_title(literal(title), loc="left", size=8.0)
    squeeze(axes._left_title, PANEL_MM)
    axes.tick_params(axis="y", length=0)
    shown = [float(values[place]) for _, place in feeds]
    for row, ((feed, _), value) in enumerate(zip(feeds, shown, strict=True)):
        good = abs(value) < LARGEST
        if good:
            axes.barh(row, value, height=0.62, gid=f"{sort}-{feed}-{name}", zorder=3, **look)
        spot = {"transform": axes.get_yaxis_transform(), "ha": "right", "va": "center", "size": 7.5}
        axes.text(0.985, row, short(value) if good else "not known", gid=f"number-{sort}-{feed}-{name}", **spot)
    most = max([value for value in (*shown, line) if abs(value) < LARGEST], default=1.0)
    fit_axis(axes.xaxis, np.array([0.0, 1.3 * (most if most > 0 else 1.0)]), tight=True, count=6)
    axes.set_ylim(len(feeds) - 0.4, -0.6)
