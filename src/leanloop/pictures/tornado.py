"""What matters most, as bars: elasticities at the flowsheet as it is, and shares of the variance."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.pictures.base import INK, NAVY, PAGE_WIDTH, PALE, legend_below, library, literal, settle, short, style
from leanloop.pictures.panel_scales import LARGEST, fit_axis
from leanloop.pictures.panels import listed, pages, sheet_of, squeeze
from leanloop.pictures.study_columns import heading, joined
from leanloop.pictures.words import shortened, told_apart

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from leanloop.studies.findings import Findings

MOST_BARS = 12  # of a panel
MOST_PANELS = 4  # of a page
BAR_MM = 4.0
NAME_MM = 82.0  # room of a bar's name
LETTERS = 50  # of a bar's name
UP = {"facecolor": NAVY, "edgecolor": NAVY, "linewidth": 0.6}
DOWN = {"facecolor": "white", "edgecolor": INK, "hatch": "//////", "linewidth": 0.8}
FIRST = {"facecolor": NAVY, "edgecolor": NAVY, "linewidth": 0.6}
SAMPLED = {"facecolor": PALE, "edgecolor": INK, "hatch": "////", "linewidth": 0.6}
REST = "several inputs together"


def figures(findings: Findings) -> list[Figure]:
    """Draw by how many per cent each quantity changes for 1 % of an input or 1 K of a temperature, at the flowsheet as it is.

    Parameters
    ----------
    findings : Findings

    Returns
    -------
    list of matplotlib.figure.Figure
        Of four panels each, of the twelve largest bars each; none where no influence is known. A panel has the gid
        ``panel-ADDRESS``, its bars ``bar-INPUT-ADDRESS``.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    groups: dict[str, list[Any]] = {}
    for item in findings.influences:
        if abs(item.per_cent) < LARGEST:
            groups.setdefault(item.quantity, []).append(item)
    # a requirement that holds follows its own limit and nothing else
    held = [name for name, items in groups.items() if all(item.number.startswith("requirements.") for item in items)]
    order = [name for name in findings.study.record if name in groups and name not in held]
    note = joined(
        "change of a quantity in % for 1 % of an input, or 1 K of a temperature, at the flowsheet as it is",
        f"the {MOST_BARS} largest of each" if any(len(groups[name]) > MOST_BARS for name in order) else "",
        f"not drawn, as its limit alone moves it: {listed(held)}" if held else "",
    )
    shared = list(pages(order, MOST_PANELS))
    out = []
    for place, names in enumerate(shared):
        rows = [groups[name][:MOST_BARS] for name in names]
        title = heading(findings, "what matters most", place, len(shared))
        with style():
            paper, panels = _paper(title, note, [len(items) for items in rows])
            for axes, name, items in zip(panels, names, rows, strict=True):
                _name_panel(axes, name)
                labels = told_apart([item.number for item in items], LETTERS - 5)
                _name_bars(axes, [f"{text}, 1 {item.unit}" for text, item in zip(labels, items, strict=True)])
                _elasticities(axes, name, items)
            panels[-1].set_xlabel("change of the quantity, %")
            patch = library().patches.Patch
            labels = "more of the input gives more", "more of the input gives less"
            legend_below(paper, [patch(label=text, **look) for text, look in zip(labels, (UP, DOWN), strict=True)])
            settle(paper)
        out.append(paper)
    return out


def variance(findings: Findings) -> list[Figure]:
    """Draw the share that each spread input has in the variance of each quantity, to first order and of the sample.

    Parameters
    ----------
    findings : Findings

    Returns
    -------
    list of matplotlib.figure.Figure
        Of four panels each, none where the study is of another kind or no share is known. A panel has the gid
        ``panel-ADDRESS``, its bars ``first-INPUT-ADDRESS`` and ``sampled-INPUT-ADDRESS``, and ``sampled-rest-ADDRESS`` for
        what no input has alone.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    told = findings.uncertainty.get("quantities", {})
    parts = {name: found for name, item in told.items() if (found := _shares(item))}
    note = joined(
        "share of each input in the variance of a quantity; of the sample, what a curve in that input alone explains",
        f"the {MOST_BARS} largest of each" if any(len(own) - (REST in own) > MOST_BARS for own in parts.values()) else "",
    )
    shared = list(pages(list(parts), MOST_PANELS))
    out = []
    for place, names in enumerate(shared):
        title = heading(findings, "where the spread comes from", place, len(shared))
        with style():
            rows = [dict(list(parts[name].items())[:MOST_BARS]) for name in names]
            for name, own in zip(names, rows, strict=True):
                own |= {REST: parts[name][REST]} if REST in parts[name] else {}
            paper, panels = _paper(title, note, [2 * len(own) for own in rows])
            for axes, name, own in zip(panels, names, rows, strict=True):
                _name_panel(axes, name)
                _name_bars(axes, told_apart(list(own), LETTERS))
                _pairs(axes, name, own)
            panels[-1].set_xlabel("share of the variance, %")
            patch = library().patches.Patch
            legend_below(paper, [patch(label="first order", **FIRST), patch(label="of the sample", **SAMPLED)])
            settle(paper)
        out.append(paper)
    return out


def _shares(item: Mapping[str, Any]) -> dict[str, tuple[float, float]]:
    """Give both shares by input in per cent, the largest first and the rest last; empty where none is known."""
    first = (item.get("first_order") or {}).get("shares", {})
    sampled = (item.get("sampled") or {}).get("shares", {})
    keys = list(dict.fromkeys([*first, *sampled]))
    found = {key: (100 * first.get(key, np.nan), 100 * sampled.get(key, np.nan)) for key in keys}
    found = {key: pair for key, pair in found.items() if any(abs(value) < LARGEST for value in pair)}
    found = dict(sorted(found.items(), key=lambda entry: -np.nanmax(entry[1])))
    rest = (item.get("sampled") or {}).get("rest", np.nan)
    if found and np.isfinite(rest):
        found[REST] = (np.nan, 100 * rest)
    return found


def _paper(title: str, note: str, bars: list[int]) -> tuple[Figure, list[Axes]]:
    """Give paper with a panel for each number of bars, one below the other."""
    heights = [12.0 + BAR_MM * max(2, count) for count in bars]
    paper = sheet_of(PAGE_WIDTH, sum(heights) + 17.0, title, note)
    ratios = [max(2, count) for count in bars]
    return paper, list(paper.subplots(len(bars), 1, squeeze=False, height_ratios=ratios).ravel())


def _name_panel(axes: Axes, name: str) -> None:
    axes.set_gid(f"panel-{name}")
    axes.grid(visible=False, axis="y")
    axes.set_title(literal(shortened(name, LETTERS)), loc="left", x=0.0, size=7.5, weight="bold")
    squeeze(axes._left_title, 84.0)


def _name_bars(axes: Axes, labels: list[str]) -> None:
    axes.set_yticks(range(len(labels)), [literal(text) for text in labels])
    axes.tick_params(axis="y", length=0)
    axes.set_ylim(len(labels) - 0.4, -0.6)
    for text in axes.get_yticklabels():
        text.set_size(7.5)
        squeeze(text, NAME_MM)


def _elasticities(axes: Axes, name: str, items: list[Any]) -> None:
    values = np.array([item.per_cent for item in items])
    for place, (item, value) in enumerate(zip(items, values, strict=True)):
        look = UP if value > 0 else DOWN
        axes.barh(place, value, height=0.62, gid=f"bar-{item.number}-{name}", zorder=3, **look)
    low, high = min(0.0, values.min()), max(0.0, values.max())
    span = high - low
    # room beyond the bars for their numbers
    fit_axis(axes.xaxis, np.array([low - 0.16 * span * (low < 0), high + 0.16 * span * (high > 0)]), tight=True, count=7)
    axes.axvline(0.0, color=INK, linewidth=0.8, zorder=4)
    for place, value in enumerate(values):
        side = "left" if value > 0 else "right"
        axes.annotate(
            short(value), (value, place), (3 if value > 0 else -3, 0), textcoords="offset points", ha=side, va="center", size=7.0
        )


def _pairs(axes: Axes, name: str, own: Mapping[str, tuple[float, float]]) -> None:
    most = 100.0
    for place, (key, pair) in enumerate(own.items()):
        for offset, value, sort, look in ((-0.19, pair[0], "first", FIRST), (0.19, pair[1], "sampled", SAMPLED)):
            if abs(value) < LARGEST:
                gid = f"{sort}-{'rest' if key == REST else key}-{name}"
                axes.barh(place + offset, value, height=0.36, gid=gid, zorder=3, **look)
                axes.annotate(
                    f"{value:.1f}" if value >= 0.05 or value == 0 else "< 0.1", (value, place + offset), (3, 0),
                    textcoords="offset points", ha="left", va="center", size=6.5,
                )  # fmt: skip
                most = max(most, value)
    fit_axis(axes.xaxis, np.array([0.0, 1.1 * most]), tight=True, count=7)
