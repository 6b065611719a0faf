"""How contaminants build up in the lean solvent: level against time."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.pictures.base import GREY, INK, NAVY, legend_below, literal, look, short, style
from leanloop.pictures.panel_scales import fit_axis, known, tame, wants_log
from leanloop.pictures.panels import finish, label_abscissa, listed, page, pages, title_panel
from leanloop.pictures.study_columns import constant, heading, joined, label, shown
from leanloop.pictures.words import shortened

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from leanloop.studies.findings import Findings

MOST_CURVES = 8
MOST_INPUTS = 3  # in a label
MARKS = ((50, "o"), (90, "s"), (99, "^"))  # per cent of the steady level, and its marker
HOUR, DAY = 3600.0, 86400.0
DAYS_FROM = 72 * HOUR
LOG_FROM = 12.0  # longest over shortest curve
FIRST = 1e-2  # of the shortest curve, where a log axis of time begins
STEADY = {"color": GREY, "linestyle": (0, (5, 2)), "linewidth": 1.4, "zorder": 2}
DECADES = 2.0  # below the lowest steady level, on a log axis of levels


def figures(findings: Findings) -> list[Figure]:
    """Draw the build-up of each contaminant.

    Parameters
    ----------
    findings : Findings

    Returns
    -------
    list of matplotlib.figure.Figure
        Of six panels each, none where no curve is known. A panel has the gid ``panel-COMPONENT``, its lines
        ``case-NUMBER-COMPONENT``; a single case has marks ``time-50-COMPONENT`` and so on, and ``steady-COMPONENT``. Of many
        cases, eight evenly chosen are drawn.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    curves = _curves(findings)
    chosen = {name: _some(list(own)) for name, own in curves.items()}
    inputs = _inputs(findings, sorted({case for own in chosen.values() for case in own}))
    shared = list(pages(list(curves)))
    out = []
    for place, names in enumerate(shared):
        title = heading(findings, "build-up in the lean solvent", place, len(shared))
        out.append(_page(findings, {name: {case: curves[name][case] for case in chosen[name]} for name in names}, inputs, title))
    return out


def _curves(findings: Findings) -> dict[str, dict[int, tuple[np.ndarray, np.ndarray]]]:
    """Give times in s and levels by component and case; what has no finite points is left out."""
    table, out = findings.curves, {}
    if not all(key in table for key in ("case", "component", "time_s", "level")):
        return {}
    cases, names = np.asarray(table["case"]), np.asarray(table["component"], dtype=object)
    times, levels = tame(table["time_s"]), tame(table["level"])
    good = np.isfinite(times) & np.isfinite(levels)
    for name in dict.fromkeys(names.tolist()):
        own = {}
        for case in np.unique(cases[good & (names == name)]).tolist():
            rows = good & (names == name) & (cases == case)
            own[int(case)] = times[rows], levels[rows]
        if own:
            out[name] = own
    return out


def _some(cases: list[int]) -> list[int]:
    if len(cases) <= MOST_CURVES:
        return cases
    return [cases[place] for place in np.round(np.linspace(0, len(cases) - 1, MOST_CURVES)).astype(int)]


def _row(findings: Findings, case: int) -> int | None:
    found = np.flatnonzero(np.asarray(findings.cases.get("case", ())) == case)
    return int(found[0]) if len(found) else None


def _inputs(findings: Findings, cases: list[int]) -> list[str]:
    """Give the inputs that tell cases apart, by address."""
    rows = [row for case in cases if (row := _row(findings, case)) is not None]
    out = []
    for key in findings.study.cases.changes:
        column = findings.cases.get(key)
        if column is not None and not isinstance(column, list) and not constant(known(np.asarray(column)[rows])):
            out.append(key)
    return out


def _name(findings: Findings, case: int, inputs: list[str]) -> str:
    row = _row(findings, case)
    if row is None or not inputs:
        return f"case {case}"
    values = [short(float(shown(findings.study.sheet, key, [findings.cases[key][row]])[0]), 4) for key in inputs[:MOST_INPUTS]]
    return shortened(f"case {case}: " + ", ".join(values), 60)


def _page(
    findings: Findings, curves: dict[str, dict[int, tuple[np.ndarray, np.ndarray]]], inputs: list[str], title: str
) -> Figure:
    ends = [float(times.max()) for own in curves.values() for times, _ in own.values()]
    unit, name = (DAY, "days") if max(ends) > DAYS_FROM else (HOUR, "hours")
    cases = list(dict.fromkeys(case for own in curves.values() for case in own))
    single = len(cases) == 1
    apart = max(ends) / LOG_FROM > min(ends) > 0
    count = len({case for case in findings.curves["case"]})
    labels = [label(findings.study.sheet, key) for key in inputs]
    note = joined(
        f"{len(cases)} of {count} cases are drawn" if len(cases) < count else "",
        "" if single or not inputs else "lines named by " + listed(labels, MOST_INPUTS, 80),
        "the solvent as one stirred tank" + ("; the steady level is dashed" if single else ""),
    )
    with style():
        rows = 2 if single else -(-len(cases) // 2)
        paper, panels, width = page(title, note, len(curves), row_mm=78.0, below_mm=8.0 + 4.4 * rows)
        handles: dict[str, Any] = {}
        for number, (axes, (component, own)) in enumerate(zip(panels, curves.items(), strict=True)):
            axes.set_gid(f"panel-{component}")
            lines, more = [], ""
            for case, (times, levels) in own.items():
                draw = {"color": NAVY, "linestyle": "-"} if single else look(cases.index(case))
                text = "level" if single else literal(_name(findings, case, inputs))
                every = max(1, len(times) // 8)
                options = {"gid": f"case-{case}-{component}", "label": text, "markevery": (every // 2, every), "zorder": 3}
                lines += axes.plot(times / unit, levels, **options, **draw)
            seen = [levels for _, levels in own.values()]
            if single:
                marked, steady, more = _marks(axes, findings, component, cases[0], unit, name)
                lines += marked
                seen.append(steady)
            _scales(axes, own, known(*seen), unit, apart)
            handles |= {line.get_label(): line for line in lines}
            title_panel(axes, f"{component}, mol per mol of lean solvent", width, more)
            if number >= len(curves) - 2:
                label_abscissa(axes, f"time, {name}", width)
        legend_below(paper, list(handles.values()), columns=3 if single else 2)
        finish(paper, width)
    return paper


def _marks(axes: Axes, findings: Findings, component: str, case: int, unit: float, name: str) -> tuple[list[Any], np.ndarray, str]:
    """Mark the steady level of a single case and when it is nearly reached; say when."""
    row = _row(findings, case)
    column = findings.cases.get(f"purity.level.{component}")
    steady = known([] if row is None or column is None else [column[row]])
    if not len(steady):
        return [], steady, ""
    lines = [axes.axhline(steady[0], gid=f"steady-{component}", label="steady level", **STEADY)]
    words = []
    for share, marker in MARKS:
        times = findings.cases.get(f"purity.time_to_{share}_s.{component}")
        place = known([] if times is None else [times[row]]) / unit
        if len(place):
            draw = {"color": INK, "linestyle": "none", "marker": marker, "markersize": 6.0, "zorder": 5}
            gid = f"time-{share}-{component}"
            lines += axes.plot(place, share / 100 * steady, gid=gid, label=f"{share} % of it", **draw)
            words.append(f"{share} % after {short(float(place[0]))}")
    return lines, steady, f"{', '.join(words)} {name}" if words else ""


def _scales(axes: Axes, own: dict[int, tuple[np.ndarray, np.ndarray]], levels: np.ndarray, unit: float, apart: bool) -> None:
    ends = np.array([times.max() for times, _ in own.values()]) / unit
    if apart:
        fit_axis(axes.xaxis, np.array([FIRST * ends.min(), ends.max()]), log=True, tight=True)
    else:
        fit_axis(axes.xaxis, np.array([0.0, ends.max()]), tight=True)
    tops = np.array([values.max() for _, values in own.values()])
    if wants_log(tops):
        start = axes.get_xlim()[0] * unit
        seen = np.concatenate([values[times >= start] for times, values in own.values()])
        low = max(seen[seen > 0].min(), tops.min() / 10**DECADES)
        fit_axis(axes.yaxis, np.array([low, levels.max()]), log=True)
    else:
        fit_axis(axes.yaxis, np.concatenate([levels, [0.0]]))
        if levels.min() >= 0:
            axes.set_ylim(0.0, None)
