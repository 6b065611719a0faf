"""What all pictures share: paper, style, and the way into PNG and SVG."""

from __future__ import annotations

import io
import re
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from itertools import pairwise
from typing import TYPE_CHECKING, Any
from xml.sax.saxutils import escape

from leanloop.errors import MissingExtra
from leanloop.pictures.looks import GREEN, GREY, INK, LINES, NAVY, PALE, RUST, STYLE, look
from leanloop.pictures.words import literal, short, wrapped

if TYPE_CHECKING:
    from matplotlib.axis import Axis
    from matplotlib.figure import Figure

__all__ = [  # looks and words are given on
    "GREEN", "GREY", "INK", "LINES", "MM", "NAVY", "PAGE_WIDTH", "PALE", "PER_HOUR", "PNG_DPI", "RUST", "STYLE", "canvas",
    "legend_below", "library", "linear_axis", "literal", "log_axis", "look", "png", "quiet", "settle", "short", "style", "svg",
    "wrapped",
]

MISSING = 'pictures need matplotlib; install the extra: pip install "leanloop[pictures]"'

MM = 1.0 / 25.4  # inch
PAGE_WIDTH = 170.0  # mm, an A4 page upright less its margins
PNG_DPI = 150
PER_HOUR = 3.6  # mol/s to kmol/h


def library() -> Any:
    """Give matplotlib.

    Returns
    -------
    module

    Raises
    ------
    MissingExtra
        Where it is not installed.
    """
    try:
        import matplotlib
        import matplotlib.figure
        import matplotlib.patheffects
        import matplotlib.ticker
    except ImportError as error:
        raise MissingExtra(MISSING) from error
    return matplotlib


@contextmanager
def style() -> Iterator[None]:
    """Hold the style of all pictures for as long as the context lasts, whatever the user's own settings are.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    matplotlib = library()
    with matplotlib.rc_context():
        matplotlib.rcdefaults()
        matplotlib.rcParams.update(STYLE)
        yield


def canvas(width_mm: float, height_mm: float, title: str = "", note: str = "", layout: str | None = "constrained") -> Figure:
    """Give an empty figure of a given size on paper.

    Draw on it inside `style`, so that axes and texts take it on.

    Parameters
    ----------
    width_mm, height_mm : float
        Millimetres; an A4 page has some 170 by 250 mm inside its margins.
    title, note : str
        Set at the top left, the note smaller and below the title; it may have several lines.
    layout : str or None
        ``"constrained"`` keeps axes, labels and a legend outside apart from each other and from the title;
        None leaves the places of axes to the caller.

    Returns
    -------
    matplotlib.figure.Figure
        Made without pyplot: nothing global is touched.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    with style():
        figure = library().figure.Figure(figsize=(width_mm * MM, height_mm * MM), layout=layout, facecolor="white")
        left, top = 3.0 / width_mm, 2.5
        title, note = wrapped(title, width_mm - 6, 2.45), wrapped(note, width_mm - 6, 1.68)
        if title:
            text = {"ha": "left", "va": "top", "size": 10.5, "weight": "bold", "gid": "title"}
            figure.text(left, 1 - top / height_mm, literal(title), **text)
            top += 1.3 + 4.4 * len(title.splitlines())
        if note:
            figure.text(left, 1 - top / height_mm, literal(note), ha="left", va="top", size=8.0, gid="note")
            top += 0.5 + 3.9 * len(note.splitlines())
        if layout:
            figure.get_layout_engine().set(
                rect=(0, 0, 1, 1 - top / height_mm), w_pad=2 * MM, h_pad=2 * MM, wspace=0.03, hspace=0.03
            )
        return figure


def legend_below(figure: Figure, handles: list[Any], columns: int = 3) -> None:
    """Set a legend below all axes, where it covers nothing; one of more than two rows makes the paper longer.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        Of a constrained layout.
    handles : list of matplotlib.artist.Artist
        Labelled.
    columns : int
    """
    letters = [len(handle.get_label()) for handle in handles]
    room = figure.get_figwidth() / MM - 6

    def width(count: int) -> float:
        # filled column by column, the first ones longer by one where they do not come out even
        rows, longer = divmod(len(letters), count)
        starts = [place * rows + min(place, longer) for place in range(count + 1)]
        # a handle and its spaces, then the text
        return sum(18 + 1.5 * max(letters[start:end]) for start, end in pairwise(starts))

    fit = next((count for count in range(min(columns, len(letters)), 1, -1) if width(count) <= room), 1)
    legend = figure.legend(handles=handles, loc="outside lower center", ncols=fit)
    with quiet():
        while fit > 1 and legend.get_window_extent().width > room * MM * figure.dpi:  # letters wider than most
            legend.remove()
            fit -= 1
            legend = figure.legend(handles=handles, loc="outside lower center", ncols=fit)
    legend.set_gid("legend")
    _lengthen(figure, 4.4 * max(0, -(-len(letters) // fit) - 2))


def _lengthen(figure: Figure, more_mm: float) -> None:
    """Add paper below, with the title left where it is from the top."""
    old = figure.get_figheight()
    new = old + more_mm * MM
    for text in figure.texts:
        text.set_y(1 - (1 - text.get_position()[1]) * old / new)
    engine = figure.get_layout_engine()
    left, bottom, width, height = engine.get()["rect"]
    engine.set(rect=(left, bottom, width, 1 - (1 - height) * old / new))
    figure.set_figheight(new)


def log_axis(axis: Axis, low: float, high: float) -> None:
    """Set a log scale with ticks that can be read, few of them where decades are many.

    Parameters
    ----------
    axis : matplotlib.axis.Axis
    low, high : float
        Ends of the axis, above zero.
    """
    ticker = library().ticker
    horizontal = axis.axis_name == "x"
    (axis.axes.set_xscale if horizontal else axis.axes.set_yscale)("log", nonpositive="clip")
    (axis.axes.set_xlim if horizontal else axis.axes.set_ylim)(low, high)
    if high / low < 150:
        axis.set_major_locator(ticker.LogLocator(subs=(1.0, 2.0, 5.0) if high / low < 50 else (1.0, 3.0)))
        axis.set_major_formatter(ticker.FuncFormatter(lambda value, _: short(value)))
    axis.set_minor_formatter(ticker.NullFormatter())


def linear_axis(axis: Axis, low: float, high: float, count: int = 6) -> None:
    """Set a linear scale whose ticks need no power of ten aside, where a label may stand.

    Parameters
    ----------
    axis : matplotlib.axis.Axis
    low, high : float
        Ends of the axis.
    count : int
        Most intervals between ticks.
    """
    ticker = library().ticker
    (axis.axes.set_xlim if axis.axis_name == "x" else axis.axes.set_ylim)(low, high)
    axis.set_major_locator(ticker.MaxNLocator(nbins=count, min_n_ticks=2, steps=[1, 2, 2.5, 5, 10]))
    if not 0.01 <= max(abs(low), abs(high)) < 1e5:
        axis.set_major_formatter(ticker.FuncFormatter(lambda value, _: short(value)))


def settle(figure: Figure) -> None:
    """Lay a figure out once and keep it so, whatever it is saved as afterwards.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
    """
    engine = figure.get_layout_engine()
    if engine is None or isinstance(engine, library().layout_engine.PlaceHolderLayoutEngine):
        return
    with quiet():
        # ticks follow the size of the axes and the reverse: the second time nothing moves
        figure.draw_without_rendering()
        figure.draw_without_rendering()
    figure.set_layout_engine("none")


def png(figure: Figure, dpi: int = PNG_DPI) -> bytes:
    """Give a figure as a PNG file, the same bytes for the same figure.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
    dpi : int
        Dots per inch.

    Returns
    -------
    bytes
    """
    return _saved(figure, format="png", dpi=dpi, metadata={"Software": None})


def svg(figure: Figure, prefix: str = "picture") -> str:
    """Give a figure as SVG, the same text for the same figure; a file by itself, or a part of an HTML page.

    Text is drawn as outlines. Ids and the style sheet are the figure's own, so that several figures can
    stand in one page under different prefixes.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
    prefix : str
        Opens every id; letters other than a-z, digits, ``_`` and ``-`` become ``-``.

    Returns
    -------
    str
        From ``<svg`` on, without a declaration or a document type, in UTF-8.
    """
    prefix = re.sub(r"[^A-Za-z0-9_-]", "-", prefix)
    nothing = {"Date": None, "Creator": None, "Format": None, "Type": None}
    text = _saved(figure, format="svg", metadata=nothing).decode("utf-8")
    text = text[text.index("<svg") :]
    text = re.sub(r'\bid="', f'id="{prefix}-', text)
    text = re.sub(r'(href="#|url\(#)', rf"\g<1>{prefix}-", text)
    # matplotlib's rule is for "*", which in a page would reach everything
    text = text.replace(">*{", f">#{prefix} *{{", 1)
    titles = [item.get_text().replace(r"\$", "$") for item in figure.texts if item.get_gid() == "title"]
    name = "".join(f"<title>{escape(item)}</title>" for item in titles)
    head, _, rest = text.partition(">")
    return head.replace("<svg", f'<svg id="{prefix}" role="img"', 1) + ">" + name + rest


@contextmanager
def quiet() -> Iterator[None]:
    """Hold the style; a name in a script that the font does not have is drawn as boxes, which is no reason to stop."""
    with style(), warnings.catch_warnings():
        warnings.filterwarnings("ignore", message="Glyph .* missing from font", category=UserWarning)
        yield


def _saved(figure: Figure, **options: Any) -> bytes:
    settle(figure)
    held = io.BytesIO()
    with quiet():
        figure.savefig(held, facecolor="white", **options)
    return held.getvalue()
