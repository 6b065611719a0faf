"""Contours of a grid of cases: fields, lines with numbers, and where crosses stand."""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.pictures.base import INK, MM, library, short
from leanloop.pictures.panel_scales import wants_log
from leanloop.pictures.study_columns import constant

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.text import Text

LEVELS = 8  # about
PALEST, DARKEST = (0.965, 0.972, 0.98), (0.60, 0.65, 0.71)  # of one hue; a black line and its number can be read on both
LABEL = 7.0  # points
SHARES = (0.5, 0.35, 0.65, 0.2, 0.8, 0.425, 0.575, 0.275, 0.725, 0.12, 0.88)  # of a line, where its number may stand
MOST_CROSSES = 24  # along an axis
ROOM = 0.7  # mm around a number

Box = tuple[float, float, float, float]  # left, bottom, right, top in dots


def distinct(values: np.ndarray) -> np.ndarray:
    """Give where the values of an axis stand from the lowest to the highest, each value once.

    Parameters
    ----------
    values : (n,) array

    Returns
    -------
    (m,) int array
    """
    found, places = np.unique(values, return_index=True)
    return places[np.isfinite(found)]


def crosses(x: np.ndarray, y: np.ndarray, where: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Give where crosses stand: one for each block of cases where cases are too many.

    Parameters
    ----------
    x : (n,) array
    y : (m,) array
    where : (m, n) bool

    Returns
    -------
    (x, y)
    """
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


def contours(axes: Axes, x: np.ndarray, y: np.ndarray, values: np.ndarray, name: str) -> Any:
    """Draw fields, with the gid ``fields-NAME``, and lines, with the gid ``lines-NAME``.

    Parameters
    ----------
    axes : matplotlib.axes.Axes
    x : (n,) array
    y : (m,) array
    values : (m, n) array
        NaN where there is no answer.
    name : str

    Returns
    -------
    matplotlib.contour.ContourSet or None
        The lines; None where no square of four cases has an answer.
    """
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


def numbers(axes: Axes, lines: Any, name: str, kept: list[Box] | None = None) -> None:
    """Write the level on each line, at a place off the frame and off other numbers; none where there is no such place.

    Parameters
    ----------
    axes : matplotlib.axes.Axes
        Laid out for good.
    lines : matplotlib.contour.ContourSet
    name : str
        A number has the gid ``level-PLACE-NAME``.
    kept : list of Box, optional
        What is to be kept clear beside; the boxes of the numbers are added.
    """
    kept = [] if kept is None else kept
    steps = np.diff(lines.levels)
    finest = steps.min() / np.abs(lines.levels).max() if len(steps) else 1.0
    digits = max(3, int(np.ceil(-np.log10(max(finest, 1e-12)))) + 1)
    most = np.abs(lines.levels).max()
    digits = max(digits, len(f"{most:.0f}")) if most < 1e6 else digits  # no power of ten where an axis has none
    halo = [library().patheffects.withStroke(linewidth=2.2, foreground="white")]
    for place, (level, path) in enumerate(zip(lines.levels, lines.get_paths(), strict=True)):
        options = {"size": LABEL, "color": INK, "ha": "center", "va": "center", "zorder": 6, "path_effects": halo}
        text = axes.text(0.0, 0.0, short(float(level), digits), gid=f"level-{place}-{name}", transform=None, **options)
        settled(text, _spots(axes.transData.transform_path(path)), kept)


def settled(text: Text, spots: Iterable[Any], kept: list[Box]) -> bool:
    """Set a text on the first of some places that is inside its axes and clear of boxes; take it away where none is.

    Parameters
    ----------
    text : matplotlib.text.Text
        Of axes that are laid out for good, aligned at its centre.
    spots : iterable of (2,) array_like
        Dots.
    kept : list of Box
        The text's own is added.

    Returns
    -------
    bool
        Whether it stands.
    """
    axes, size = text.axes, text.get_window_extent()
    room, frame = ROOM * MM * axes.figure.dpi, axes.get_window_extent()
    wide, high = size.width / 2 + room, size.height / 2 + room
    for spot in spots:
        box = (spot[0] - wide, spot[1] - high, spot[0] + wide, spot[1] + high)
        inside = box[0] > frame.x0 and box[1] > frame.y0 and box[2] < frame.x1 and box[3] < frame.y1
        if inside and all(_apart(box, other) for other in kept):
            kept.append(box)
            # in shares of the frame, since the figure may be saved at any resolution
            text.set_transform(axes.transAxes)
            text.set_position(axes.transAxes.inverted().transform(spot))
            return True
    text.remove()
    return False


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
