"""An uncertainty study: how often each quantity takes which value, with limits and what first order says."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.flowsheet.scales import of_column
from leanloop.pictures.base import GREEN, GREY, INK, NAVY, PALE, RUST, legend_below, library, short, style
from leanloop.pictures.panel_scales import LARGEST, fit_axis, known, wants_log
from leanloop.pictures.panels import finish, page, pages, title_panel, upright
from leanloop.pictures.study_columns import Column, heading, joined, recorded, tally

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from leanloop.studies.findings import Findings

FEWEST, MOST = 8, 40  # bins
POINTS = 240  # of a density
MARKS = (5, 50, 95)  # per cent of the solved cases
BARS = {"facecolor": PALE, "edgecolor": GREY, "linewidth": 0.6, "zorder": 2}
DENSITY = {"color": NAVY, "linestyle": "-", "linewidth": 1.6, "zorder": 4}
LIMIT = {"color": RUST, "linestyle": "-.", "linewidth": 1.8}
BASE = {"color": INK, "linestyle": ":", "linewidth": 1.6}
QUANTILES = {"color": GREEN, "linestyle": (0, (5, 2)), "linewidth": 1.2}


def figures(findings: Findings) -> list[Figure]:
    """Draw the histograms of an uncertainty study, those of requirements first.

    Parameters
    ----------
    findings : Findings

    Returns
    -------
    list of matplotlib.figure.Figure
        Of six panels each, none where the study is of another kind or nothing varies. A panel has the gid
        ``panel-ADDRESS``, its bars ``bar-NUMBER-ADDRESS``, the density ``density-ADDRESS``, the value at the flowsheet as it
        is ``base-ADDRESS``, limits ``limit-REQUIREMENT``; where there is no limit, marks ``mark-5-ADDRESS`` and so on.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    told = findings.uncertainty
    if findings.study.kind != "uncertainty" or not told.get("quantities") or not len(findings):
        return []
    columns, left_out = recorded(findings)
    columns = [item for item in columns if item.address in told["quantities"] and len(known(item.values)) > 1]
    judged = {item["quantity"] for item in told.get("requirements", {}).values()}
    columns.sort(key=lambda item: item.address not in judged)
    note = joined(tally(findings), left_out)
    shared = list(pages(columns))
    out = []
    for place, group in enumerate(shared):
        out.append(_page(findings, group, heading(findings, "spread of the answer", place, len(shared)), note))
    return out


def bins(values: np.ndarray) -> tuple[np.ndarray, bool]:
    """Give the edges of bins that hold every value.

    Parameters
    ----------
    values : (n,) array
        Finite, not all the same.

    Returns
    -------
    (edges, log)
        As many bins as the root of the number of values, within bounds; equal factors where values span much.
    """
    count = int(min(MOST, max(FEWEST, np.sqrt(len(values)))))
    log = wants_log(values) and bool(np.median(values) < 0.1 * values.max())
    edges = (np.geomspace if log else np.linspace)(values.min(), values.max(), count + 1)
    edges[0], edges[-1] = values.min(), values.max()  # the ends lie in, whatever rounding does
    return edges, log


def density(places: np.ndarray, mean: float, deviation: float) -> np.ndarray:
    """Give the normal density.

    Parameters
    ----------
    places : (n,) array
    mean, deviation : float
        The latter above zero.

    Returns
    -------
    (n,) array
    """
    return np.exp(-(((places - mean) / deviation) ** 2) / 2) / (deviation * np.sqrt(2 * np.pi))


def _page(findings: Findings, group: list[Column], title: str, note: str) -> Figure:
    with style():
        paper, panels, width = page(title, note, len(group), row_mm=64.0, below_mm=16.0)
        handles: dict[str, Any] = {}
        for number, (axes, column) in enumerate(zip(panels, group, strict=True)):
            axes.set_gid(f"panel-{column.address}")
            axes.grid(visible=False, axis="x")
            lines, more = _panel(axes, findings, column)
            handles |= {line.get_label(): line for line in lines}
            title_panel(axes, column.label, width, more)
            if number % 2 == 0:
                axes.set_ylabel("cases")
        legend_below(paper, list(handles.values()))
        finish(paper, width)
    return paper


def _panel(axes: Axes, findings: Findings, column: Column) -> tuple[list[Any], str]:
    """Draw bars, density and marks of one quantity; give the lines and what is said of it."""
    told, scale = findings.uncertainty["quantities"][column.address], of_column(findings.study.sheet, column.address)
    values = known(column.values)
    edges, log = bins(values)
    counts, _ = np.histogram(values, edges)
    for place, count in enumerate(counts):
        axes.bar(
            edges[place], count, width=edges[place + 1] - edges[place], align="edge", gid=f"bar-{place}-{column.address}", **BARS
        )
    lines, seen = [], [values]
    lines += _first_order(axes, column, told.get("first_order"), scale, edges, log, len(values))
    limits, words = _limits(axes, findings, column, scale)
    seen += [[line.get_xdata()[0]] for line in limits]
    lines += limits
    if not limits:
        for mark in MARKS:
            place = float(np.percentile(values, mark))
            text = "5, 50 and 95 % of the cases lie below"
            lines.append(upright(axes, place, f"mark-{mark}-{column.address}", text, **QUANTILES))
        words = "5, 50, 95 %: " + ", ".join(short(float(np.percentile(values, mark)), 4) for mark in MARKS)
    centre = _number(told.get("base"), scale)
    if np.isfinite(centre):
        lines.append(upright(axes, centre, f"base-{column.address}", "the flowsheet as it is", **BASE))
        seen.append([centre])
    fit_axis(axes.xaxis, known(*seen), log, zero=False)
    tallest = max([float(counts.max()), *(float(np.max(line.get_ydata())) for line in lines if "density" in line.get_gid())])
    fit_axis(axes.yaxis, np.array([0.0, min(tallest, 3.0 * counts.max())]))
    axes.set_ylim(0, None)
    ticker = library().ticker
    axes.yaxis.set_major_locator(ticker.MaxNLocator(nbins=5, integer=True))
    axes.yaxis.set_major_formatter(ticker.FuncFormatter(lambda value, _: f"{value:.0f}"))
    return lines, words


def _number(value: Any, scale: Any) -> float:
    if value is None or not abs(float(value)) < LARGEST:
        return float("nan")
    return float(scale.shown(float(value)))


def _first_order(
    axes: Axes, column: Column, first: Mapping[str, Any] | None, scale: Any, edges: np.ndarray, log: bool, count: int
) -> list[Any]:
    """Draw the normal density of first order, in cases of a bin."""
    if not first:
        return []
    mean, deviation = _number(first["mean"], scale), abs(float(first["deviation"]) * scale.factor)
    if not (np.isfinite(mean) and 1 / LARGEST < deviation < LARGEST) or deviation < 1e-9 * np.ptp(edges):
        return []
    places = (np.geomspace if log else np.linspace)(edges[0], edges[-1], POINTS)
    wide = places * np.log(edges[1] / edges[0]) if log else edges[1] - edges[0]
    height = count * wide * density(places, mean, deviation)
    return axes.plot(places, height, gid=f"density-{column.address}", label="normal, to first order", **DENSITY)


def _limits(axes: Axes, findings: Findings, column: Column, scale: Any) -> tuple[list[Any], str]:
    lines, words = [], []
    for name, item in findings.uncertainty.get("requirements", {}).items():
        limit = _number(item["limit"], scale)
        if item["quantity"] != column.address or not np.isfinite(limit):
            continue
        lines.append(upright(axes, limit, f"limit-{name}", "limit", **LIMIT))
        sense = item["meets"].replace("_", " ")
        words.append(f"{sense} {short(limit, 4)} in {_share(item['sampled'])} of cases, first order {_share(item['first_order'])}")
    return lines, "; ".join(words)


def _share(value: float) -> str:
    return f"{100 * value:.3g} %" if np.isfinite(value) else "unknown"
