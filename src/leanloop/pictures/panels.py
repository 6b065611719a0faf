"""Pages of small panels: paper that fits them, scales with ticks that can be read, crosses for cases without an answer."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from typing import TYPE_CHECKING, Any, TypeVar

import numpy as np

from leanloop.pictures.base import (
    INK,
    MM,
    PAGE_WIDTH,
    PNG_DPI,
    RUST,
    canvas,
    literal,
    quiet,
    settle,
    wrapped,
)
from leanloop.pictures.words import address_lines, shortened

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from matplotlib.text import Text

T = TypeVar("T")

MOST_PANELS = 6  # of a page
ONE_WIDTH = 125.0  # mm, paper of a single panel
LETTER = 1.62  # mm, of a panel's title and labels on the average
SQUEEZED = 0.96  # letters are of whole dots, so that they shrink less than they are told to
FAILED = {"color": RUST, "linestyle": "none", "marker": "x", "markersize": 5.0, "markeredgewidth": 1.1}


def pages(items: Sequence[T], most: int = MOST_PANELS) -> Iterator[list[T]]:
    """Share items out over pages.

    Parameters
    ----------
    items : sequence
    most : int
        Items of a page.

    Yields
    ------
    list
    """
    for start in range(0, len(items), most):
        yield list(items[start : start + most])


def page(title: str, note: str, count: int, row_mm: float = 56.0, below_mm: float = 8.0) -> tuple[Figure, list[Axes], float]:
    """Give paper with panels in two columns, one where there is one panel.

    Parameters
    ----------
    title, note : str
        See `canvas`.
    count : int
        Panels.
    row_mm, below_mm : float
        Height of a row of panels, and of what stands below all, mm.

    Returns
    -------
    (figure, axes, width)
        Width of a panel's texts, mm.
    """
    columns = min(2, count)
    width = PAGE_WIDTH if columns == 2 else ONE_WIDTH
    rows = -(-count // columns)
    paper = sheet_of(width, rows * row_mm + below_mm, title, note)
    grid = paper.subplots(rows, columns, squeeze=False).ravel()
    for spare in grid[count:]:
        spare.remove()
    return paper, list(grid[:count]), width / columns - 18.0


def sheet_of(width_mm: float, height_mm: float, title: str, note: str) -> Figure:
    """Give paper with a height left below title and note, however long they are.

    Parameters
    ----------
    width_mm, height_mm : float
    title, note : str

    Returns
    -------
    matplotlib.figure.Figure
        Measured as fine as a PNG is, since letters are of whole dots there.
    """
    lines = [len(wrapped(title, width_mm - 6, 2.45).splitlines()), len(wrapped(note, width_mm - 6, 1.68).splitlines())]
    paper = canvas(width_mm, 4.0 + 4.4 * lines[0] + 3.9 * lines[1] + height_mm, title, note)
    paper.set_dpi(PNG_DPI)
    return paper


def title_panel(axes: Axes, label: str, width_mm: float, more: str = "") -> None:
    """Write over a panel what it shows, in two lines at most, and a line of its own below.

    Parameters
    ----------
    axes : matplotlib.axes.Axes
    label : str
        An address and its unit.
    width_mm : float
    more : str
    """
    lines = address_lines(label, int(width_mm / LETTER))
    if more:
        lines += "\n" + wrapped(more, width_mm, LETTER)
    axes.set_title(literal(lines), loc="left", size=8.0)


def label_abscissa(axes: Axes, label: str, width_mm: float) -> None:
    """Name the abscissa in two lines at most.

    Parameters
    ----------
    axes : matplotlib.axes.Axes
    label : str
    width_mm : float
    """
    axes.set_xlabel(literal(address_lines(label, int(width_mm / LETTER))), size=8.0)


def finish(figure: Figure, width_mm: float) -> None:
    """Lay a page out, and make title, note and labels smaller whose letters are wider than most.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
    width_mm : float
        Room of a panel's texts.
    """
    for axes in figure.axes:
        for text in (axes._left_title, axes.xaxis.label):  # the library gives no other way to a title on the left
            squeeze(text, width_mm)
    fit_head(figure)
    settle(figure)


def fit_head(figure: Figure) -> None:
    """Make title and note smaller where they are wider than the paper.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
    """
    for text in figure.texts:
        squeeze(text, figure.get_figwidth() / MM - 4.0)


def squeeze(text: Text, width_mm: float) -> None:
    """Make a text smaller where it is wider than its room.

    Parameters
    ----------
    text : matplotlib.text.Text
        On a figure.
    width_mm : float
    """
    if text.get_text():
        room = width_mm * MM * text.figure.dpi
        wide = _extent(text)
        if wide > room:
            text.set_size(text.get_size() * SQUEEZED * room / wide)


def _extent(text: Text) -> float:
    """Give the width of a text in dots."""
    with quiet():
        return float(text.get_window_extent().width)


def rug(axes: Axes, places: np.ndarray, gid: str, label: str = "case not converged") -> list[Any]:
    """Mark cases without an answer by crosses on the abscissa.

    Parameters
    ----------
    axes : matplotlib.axes.Axes
    places : (n,) array
        Finite.
    gid, label : str

    Returns
    -------
    list of matplotlib.lines.Line2D
        Empty where there are none.
    """
    if not len(places):
        return []
    options = {"transform": axes.get_xaxis_transform(), "clip_on": False, "zorder": 5, "label": label}
    return axes.plot(places, np.zeros(len(places)), gid=gid, **options, **FAILED)


def listed(names: Iterable[str], most: int = 3, letters: int = 60) -> str:
    """Write some addresses in a row, the first few of them where they are many.

    Parameters
    ----------
    names : iterable of str
    most, letters : int
        Addresses, and letters of each.

    Returns
    -------
    str
    """
    names = list(names)
    shown = [shortened(name, letters) for name in names[:most]]
    return ", ".join(shown) + (f" and {len(names) - most} more" if len(names) > most else "")


def upright(axes: Axes, place: float, gid: str, label: str, **look: Any) -> Any:
    """Draw a line from the bottom of a panel to its top.

    Parameters
    ----------
    axes : matplotlib.axes.Axes
    place : float
    gid, label : str
    **look
        Of the line.

    Returns
    -------
    matplotlib.lines.Line2D
    """
    return axes.axvline(place, gid=gid, label=label, **{"color": INK, "linewidth": 1.3, "zorder": 4, **look})
