"""A sampled study: every quantity against the input that it follows most."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from scipy.stats import rankdata

from leanloop.pictures.base import NAVY, legend_below, style
from leanloop.pictures.panel_scales import fit_axis, known, wants_log
from leanloop.pictures.panels import finish, label_abscissa, page, pages, rug, title_panel
from leanloop.pictures.study_columns import Column, constant, heading, joined, label, recorded, shown, tally

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from leanloop.studies.findings import Findings

MOST_POINTS = 2000
MOST_CROSSES = 300
POINTS = {"color": NAVY, "linestyle": "none", "marker": "o", "markersize": 2.0, "markeredgewidth": 0.0, "alpha": 0.7, "zorder": 3}


def figures(findings: Findings) -> list[Figure]:
    """Draw every quantity of a sampled study against the input with the highest rank correlation.

    Parameters
    ----------
    findings : Findings

    Returns
    -------
    list of matplotlib.figure.Figure
        Of six panels each, none where nothing was drawn or nothing varies. A panel has the gid ``panel-ADDRESS``, its points
        ``points-ADDRESS``, the crosses of what did not converge ``failed-ADDRESS``. Of many cases, some evenly chosen are
        drawn; the note tells how many.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    drawn = [key for key in findings.study.cases.sampled if key in findings.cases]
    if not drawn or not len(findings):
        return []
    inputs = {key: shown(findings.study.sheet, key, findings.cases[key]) for key in drawn}
    columns, left_out = recorded(findings)
    rows = _some(np.arange(len(findings)), MOST_POINTS)
    failed = tally(findings)
    if not findings.converged.all():
        failed += ": crosses on the abscissa"
    thinned = f"{len(rows)} evenly chosen cases are drawn" if len(rows) < len(findings) else ""
    note = joined(failed, "each quantity against the input that it follows most, by rank correlation", thinned, left_out)
    shared = list(pages(columns))
    out = []
    for place, group in enumerate(shared):
        title = heading(findings, "cases of the sample", place, len(shared))
        out.append(_page(findings, group, inputs, rows, title, note))
    return out


def rank_correlation(one: np.ndarray, other: np.ndarray) -> float:
    """Give Spearman's rank correlation of what both know.

    Parameters
    ----------
    one, other : (M,) array

    Returns
    -------
    float
        NaN where one of the two is the same throughout, or less than three values are known.
    """
    both = np.isfinite(one) & np.isfinite(other)
    first, second = one[both], other[both]
    if len(first) < 3 or constant(first) or constant(second):
        return float("nan")
    return float(np.corrcoef(rankdata(first), rankdata(second))[0, 1])


def _some(places: np.ndarray, most: int) -> np.ndarray:
    """Choose evenly where there are too many."""
    if len(places) <= most:
        return places
    return places[np.round(np.linspace(0, len(places) - 1, most)).astype(int)]


def _page(
    findings: Findings, group: list[Column], inputs: dict[str, np.ndarray], rows: np.ndarray, title: str, note: str
) -> Figure:
    with style():
        paper, panels, width = page(title, note, len(group), row_mm=64.0)
        handles: list[Any] = []
        bad = ~findings.converged
        for axes, column in zip(panels, group, strict=True):
            axes.set_gid(f"panel-{column.address}")
            found = {key: rank_correlation(values, column.values) for key, values in inputs.items()}
            follows = max(found, key=lambda key: (np.nan_to_num(abs(found[key]), nan=-1.0)))
            across, law = inputs[follows], findings.study.laws.get(follows)
            axes.plot(across[rows], column.values[rows], gid=f"points-{column.address}", **POINTS)
            values, places = known(column.values), known(across)
            fit_axis(axes.yaxis, values, wants_log(values))
            fit_axis(axes.xaxis, places, wants_log(places) or bool(law and law.log), zero=False)
            crosses = _some(np.flatnonzero(bad & np.isfinite(across)), MOST_CROSSES)
            handles = rug(axes, across[crosses], f"failed-{column.address}") or handles
            strength = found[follows]
            words = f"rank correlation {strength:.2f}" if np.isfinite(strength) else "no correlation known"
            title_panel(axes, column.label, width, words)
            label_abscissa(axes, label(findings.study.sheet, follows), width)
        if handles:
            legend_below(paper, handles)
        finish(paper, width)
    return paper
