"""A sweep of several axes: contours of every quantity over the two longest, crosses where a case did not converge."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.pictures.base import INK, MM, legend_below, library, short, style
from leanloop.pictures.panel_scales import fit_axis, known, wants_log
from leanloop.pictures.panels import FAILED, finish, label_abscissa, page, pages, title_panel
from leanloop.pictures.study_axes import Scaled, held, scaled
from leanloop.pictures.study_columns import Column, constant, heading, joined, recorded, tally
from leanloop.pictures.words import address_lines

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from leanloop.studies.findings import Findings

LEVELS = 8  # about
PALEST, DARKEST = (0.965, 0.972, 0.98), (0.60, 0.65, 0.71)  # of one hue; a black line and its number can be read on both
LABEL = 7.0  # points
SHARES = (0.5, 0.35, 0.65, 0.2, 0.8, 0.425, 0.575, 0.275, 0.725, 0.12, 0.88)  # of a line, where its number may stand
MOST_CROSSES = 24  # along an axis
ROOM = 0.7  # mm around a number


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
    across, up = (scaled(findings, axes[place]) for place in chosen)
    table = np.arange(findings.study.cases.count).reshape([len(axis) for axis in axes])
    table = table[tuple(fixed.get(place, slice(None)) for place in range(len(axes)))]  # (across, up): cases of the plane
    columns, left_out = recorded(findings)
    places = _places(across.values), _places(up.values)
    rows = table[np.ix_(*places)].T
    stay = [held(findings, axes[place], at) for place, at in fixed.items()]
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


def _places(values: np.ndarray) -> np.ndarray:
    """Give where the values of an axis stand from the lowest to the highest, each value once."""
    found, places = np.unique(values, return_index=True)
    return places[np.isfinite(found)]


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
            lines = _contours(axes, x, y, column.values[rows], column.address)
            drawn.append((axes, lines))
            if bad.any():
                look = {**FAILED, "markersize": 4.0, "clip_on": False, "zorder": 5, "label": "case not converged"}
                (handles["failed"],) = axes.plot(*_points(x, y, bad), gid=f"failed-{column.address}", **look)
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
                _numbers(axes, lines, axes.get_gid().removeprefix("panel-"))
    return paper


def _points(x: np.ndarray, y: np.ndarray, where: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Give where crosses stand: one for each block of cases where cases are too many."""
    up, across = np.nonzero(where)
    blocks = [part // -(-size // MOST_CROSSES) for part, size in zip((up, across), where.shape, strict=True)]
    _, first = np.unique(np.stack(blocks), axis=1, return_index=True)
    return x[across[first]], y[up[first]]


def levels(values: np.ndarray) -> tuple[np.ndarray, bool]:
    """Give where contours are drawn.

    Parameters
    ----------
    values : (n,) array
        Finite.

    Returns
    -------
    (levels, log)
        Round values between the lowest and the highest; log where they are spaced by factors.
    """
    low, high = values.min(), values.max()
    if wants_log(values):
        low = max(low, high / 1e12)
        decades = np.arange(np.floor(np.log10(low)), np.ceil(np.log10(high)) + 1)
        for steps in ((1.0, 2.0, 5.0), (1.0, 3.0), (1.0,)):
            found = np.array([10.0**decade * step for decade in decades for step in steps])
            found = found[(found > low) & (found < high)]
            if len(found) <= LEVELS + 1:
                return found, True
        return found[:: -(-len(found) // LEVELS)], True
    found = library().ticker.MaxNLocator(nbins=LEVELS, steps=[1, 2, 2.5, 5, 10]).tick_values(low, high)
    return found[(found > low) & (found < high)], False


def _contours(axes: Axes, x: np.ndarray, y: np.ndarray, values: np.ndarray, name: str) -> Any:
    """Draw fields and lines; None where no square of four cases has an answer."""
    good = np.isfinite(values)
    whole = good[1:, 1:] & good[:-1, 1:] & good[1:, :-1] & good[:-1, :-1]
    # contours see what has a corner in such a square alone
    seen = np.zeros_like(good)
    for up in (slice(1, None), slice(None, -1)):
        for across in (slice(1, None), slice(None, -1)):
            seen[up, across] |= whole
    if not seen.any() or constant(values[seen]):
        return None
    found, log = levels(values[seen])
    if not len(found):
        return None
    field = np.ma.masked_invalid(values)
    low, high = values[seen].min(), values[seen].max()
    edges = np.concatenate([[low - 1e-9 * abs(low)], found, [high + 1e-9 * abs(high)]])
    shades = np.linspace(0, 1, len(edges) - 1)[:, None]
    colors = (1 - shades) * np.array(PALEST) + shades * np.array(DARKEST)
    axes.contourf(x, y, field, levels=edges, colors=colors.tolist(), zorder=0.5).set_gid(f"fields-{name}")
    lines = axes.contour(x, y, field, levels=found, colors=INK, linewidths=0.8, linestyles="-", zorder=2)
    lines.set_gid(f"lines-{name}")
    return lines


def _numbers(axes: Axes, lines: Any, name: str) -> None:
    """Write the level on each line, at a place off the frame and off other numbers; none where there is no such place."""
    steps = np.diff(lines.levels)
    finest = steps.min() / np.abs(lines.levels).max() if len(steps) else 1.0
    digits = max(3, int(np.ceil(-np.log10(max(finest, 1e-12)))) + 1)
    halo = [library().patheffects.withStroke(linewidth=2.2, foreground="white")]
    room = ROOM * MM * axes.figure.dpi
    frame, kept = axes.get_window_extent(), []
    for place, (level, path) in enumerate(zip(lines.levels, lines.get_paths(), strict=True)):
        options = {"size": LABEL, "color": INK, "ha": "center", "va": "center", "zorder": 6, "path_effects": halo}
        text = axes.text(0.0, 0.0, short(float(level), digits), gid=f"level-{place}-{name}", transform=None, **options)
        size = text.get_window_extent()
        wide, high = size.width / 2 + room, size.height / 2 + room
        for spot in _spots(axes.transData.transform_path(path)):
            box = (spot[0] - wide, spot[1] - high, spot[0] + wide, spot[1] + high)
            inside = box[0] > frame.x0 and box[1] > frame.y0 and box[2] < frame.x1 and box[3] < frame.y1
            if inside and all(_apart(box, other) for other in kept):
                kept.append(box)
                # in shares of the frame, since the figure may be saved at any resolution
                text.set_transform(axes.transAxes)
                text.set_position(axes.transAxes.inverted().transform(spot))
                break
        else:
            text.remove()


def _spots(path: Any) -> list[Any]:
    """Give points of a line on which its number may stand, the middle of its longest piece first."""
    pieces = []
    for points in path.to_polygons(closed_only=False):
        along = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(points, axis=0).T))])
        if np.isfinite(along[-1]) and along[-1] > 0:
            pieces.append((along[-1], points, along))
    out: list[Any] = []
    for _, points, along in sorted(pieces, key=lambda piece: -piece[0]):
        where = np.array(SHARES) * along[-1]
        out += list(np.stack([np.interp(where, along, points[:, 0]), np.interp(where, along, points[:, 1])], axis=1))
    return out


def _apart(one: tuple[float, ...], other: tuple[float, ...]) -> bool:
    return one[0] > other[2] or other[0] > one[2] or one[1] > other[3] or other[1] > one[3]
