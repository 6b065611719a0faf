"""Colours, dashes, markers and sizes of all pictures, made to be told apart in black and white."""

from __future__ import annotations

from typing import Any

# Dark enough to print, and of grey levels that stay apart; dashes and markers tell lines apart, colour only helps.
INK = "#1a1a1a"
NAVY = "#12355b"
RUST = "#b5482a"
GREEN = "#4f7f6a"
GREY = "#6f6f6f"
PALE = "#d9dee4"

# Keyword arguments of the first lines of a list; each has its own dashes and marker. `look` gives them for more.
LINES: tuple[dict[str, Any], ...] = (
    {"color": NAVY, "linestyle": "-", "marker": "o"},
    {"color": RUST, "linestyle": "--", "marker": "s"},
    {"color": GREEN, "linestyle": "-.", "marker": "^"},
    {"color": INK, "linestyle": ":", "marker": "D"},
    {"color": GREY, "linestyle": (0, (6, 2)), "marker": "v"},
    {"color": NAVY, "linestyle": (0, (4, 1, 1, 1, 1, 1)), "marker": "P"},
    {"color": RUST, "linestyle": (0, (1, 2)), "marker": "X"},
    {"color": GREEN, "linestyle": (0, (8, 2, 2, 2)), "marker": "*"},
)

# rc parameters, over the library's own defaults
STYLE: dict[str, Any] = {
    "font.family": ["sans-serif"],
    "font.sans-serif": ["DejaVu Sans"],  # ships with matplotlib
    "font.size": 8.5,
    "axes.titlesize": 8.5,
    "axes.labelsize": 8.5,
    "axes.edgecolor": INK,
    "axes.linewidth": 0.7,
    "axes.axisbelow": True,
    "axes.grid": True,
    "axes.formatter.useoffset": False,
    "grid.color": "#d4d4d4",
    "grid.linewidth": 0.5,
    "xtick.labelsize": 8.0,
    "ytick.labelsize": 8.0,
    "xtick.direction": "in",
    "ytick.direction": "in",
    "xtick.major.pad": 5.5,  # the zeros of both axes meet at the corner
    "ytick.major.pad": 4.0,
    "legend.fontsize": 8.0,
    "legend.frameon": False,
    "legend.handlelength": 3.4,
    "lines.linewidth": 1.4,
    "lines.markersize": 4.0,
    "hatch.linewidth": 0.5,
    "hatch.color": GREY,
    "svg.fonttype": "path",  # looks the same in every browser, whatever fonts it has
    "svg.hashsalt": "leanloop",
}


def look(place: int) -> dict[str, Any]:
    """Give the keyword arguments of a line by its place in a list; no two of the first 64 share dashes and marker.

    Parameters
    ----------
    place : int
        From 0.

    Returns
    -------
    dict of str to object
        ``color``, ``linestyle`` and ``marker``.
    """
    count = len(LINES)
    return {**LINES[place % count], "marker": LINES[(place + place // count) % count]["marker"]}
