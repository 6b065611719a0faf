"""Markers of designs that stand out, and the names of designs beside their points."""

from __future__ import annotations

from collections.abc import Container
from itertools import pairwise
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.pictures.base import GREEN, GREY, INK, MM, NAVY, RUST, library, literal
from leanloop.pictures.contour_lines import Box, settled
from leanloop.pictures.designs_parts import marked, named, stages_of

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from leanloop.sizing.designs import Designs

# Of sizes that leave each to be seen where one design is all of them.
MARKS: dict[str, dict[str, Any]] = {
    "chosen": {"color": INK, "marker": "o", "markersize": 12.0, "markerfacecolor": "none", "markeredgewidth": 1.4},
    "knee": {"color": RUST, "marker": "D", "markersize": 7.0, "markerfacecolor": "white", "markeredgewidth": 1.3},
    "cheapest": {"color": GREEN, "marker": "^", "markersize": 4.5, "markeredgewidth": 0.6},
}
STAIRS = {"color": NAVY, "marker": "o", "markersize": 4.0, "linewidth": 1.2, "drawstyle": "steps-post", "zorder": 4}
DESIGN = {"color": GREY, "linestyle": "none", "marker": "o", "markersize": 2.6, "markerfacecolor": "white", "markeredgewidth": 0.5}
MOST_NAMES = 14  # of designs along stairs
NEAR = 3.4  # mm, of the middle of a small text from its point, beside half its width
SIDES = ((-1, -1), (1, 1), (-1, 0), (0, -1), (1, 0), (0, 1), (1, -1), (-1, 1))


def mark(axes: Axes, found: Designs, x: np.ndarray, y: np.ndarray, name: str, clip: bool = True) -> dict[str, Any]:
    """Mark the designs that stand out, where they have a place.

    Parameters
    ----------
    axes : matplotlib.axes.Axes
    found : Designs
    x, y : (D,) array
    name : str
        A marker has the gid ``WORD-NAME``.
    clip : bool
        Whether markers end at the frame.

    Returns
    -------
    dict of str to matplotlib.lines.Line2D
        By what they are.
    """
    out = {}
    for place, (word, design) in enumerate(marked(found).items()):
        if np.isfinite(x[design]) and np.isfinite(y[design]):
            look = {"linestyle": "none", "zorder": 7 + place, "clip_on": clip, **MARKS[word]}
            (out[word],) = axes.plot([x[design]], [y[design]], gid=f"{word}-{name}", label=named(found, word, design), **look)
    return out


def name_designs(
    axes: Axes, found: Designs, x: np.ndarray, y: np.ndarray, front: np.ndarray, name: str, words: Container[str] = tuple(MARKS)
) -> list[Box]:
    """Write stages beside the designs that stand out and along stairs, off each other, off the stairs and off the frame.

    What has no such place is left out; of long stairs, the ends alone are named.

    Parameters
    ----------
    axes : matplotlib.axes.Axes
        Laid out for good.
    found : Designs
    x, y : (D,) array
    front : (n,) int array
        Designs of the stairs, from the left to the right.
    name : str
        A text has the gid ``name-DESIGN-NAME``.
    words : container of str
        Which of those that stand out are marked.

    Returns
    -------
    list of Box
        What is to be kept clear.
    """
    near = NEAR * MM * axes.figure.dpi
    stand = list(dict.fromkeys(design for word, design in marked(found).items() if word in words))
    stand = [design for design in stand if np.isfinite(x[design]) and np.isfinite(y[design])]
    stairs = front.tolist() if len(front) <= MOST_NAMES else front[[0, -1]].tolist()
    kept = boxes_of(axes, x[stand], y[stand], MARKS["chosen"]["markersize"])
    kept += boxes_of(axes, x[front], y[front], STAIRS["markersize"])
    spots = axes.transData.transform(np.stack([x[front], y[front]], axis=1)) if len(front) else []
    for (left, high), (right, low) in pairwise(spots):
        kept += [(left, high, right, high), (right, min(low, high), right, max(low, high))]
    halo = [library().patheffects.withStroke(linewidth=2.0, foreground="white")]
    for design in dict.fromkeys([*stand, *stairs]):
        spot, gid, own = axes.transData.transform((x[design], y[design])), f"name-{design}-{name}", stages_of(found, design)
        options = {"size": 7.0, "color": INK, "ha": "center", "va": "center", "zorder": 9, "path_effects": halo}
        text = axes.text(0.0, 0.0, literal(own), gid=gid, transform=None, **options)
        half = text.get_window_extent().width / 2
        far = near * (1.35 if design in stand else 1.0)
        settled(text, [(spot[0] + a * (half + 0.65 * far), spot[1] + b * far) for a, b in SIDES], kept)
    return kept


def boxes_of(axes: Axes, x: np.ndarray, y: np.ndarray, size: float) -> list[Box]:
    """Give the boxes of markers, in dots.

    Parameters
    ----------
    axes : matplotlib.axes.Axes
        Laid out for good.
    x, y : (n,) array
        Finite.
    size : float
        Of the markers, points.
    """
    half = 0.5 * size / 72.0 * axes.figure.dpi
    spots = axes.transData.transform(np.stack([x, y], axis=1)) if len(x) else []
    return [(spot[0] - half, spot[1] - half, spot[0] + half, spot[1] + half) for spot in spots]
