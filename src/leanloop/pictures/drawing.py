"""The flowsheet as a drawing with streams, loops and torn streams."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from leanloop.pictures.base import INK, NAVY, PER_HOUR, RUST, canvas, library, literal, style
from leanloop.pictures.layout import DATA_SIZE, FOOTER, MARGIN, STREAM_SIZE, TEAR_SIZE, Layout, Route, lay_out
from leanloop.pictures.layout_boxes import SIZES, Box
from leanloop.pictures.layout_labels import LINE, POINT, Label

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from leanloop.flowsheet.result import Result
    from leanloop.flowsheet.sheet import Flowsheet

DASHES = {"gas": (0, (4.5, 1.6)), "liquid": "-"}
COLOURS = {"gas": RUST, "liquid": NAVY}
OTHER = (0, (6.0, 1.2, 1.2, 1.2)), INK  # two phases in one stream
HALOS = ("#d5e3ee", "#eadcc2", "#d6e6d6", "#e6d8e6", "#e3e3cf")  # one for each loop, then again
ABOVE_LINE, ABOVE_BOX = 3, 5


def figure(sheet: Flowsheet, result: Result | None = None) -> Figure:
    """Draw a flowsheet.

    Units stand in rows in calculation order, feeds and products at the edges of the rows. The paper grows with
    the flowsheet, from A4 landscape on.

    Parameters
    ----------
    sheet : Flowsheet
    result : Result, optional
        Of one case: total flow (kmol/h) and temperature (degC) stand below the names of streams where they fit.
        With a case axis there are names alone.

    Returns
    -------
    matplotlib.figure.Figure
        Axes in mm at scale 1 with the gid ``flowsheet``. Boxes have the gids ``unit:NAME``, ``feed:NAME`` and ``product:NAME``,
        lines ``stream:NAME``, double bars ``tear:NAME``, backgrounds of loops ``loop:NUMBER:NAME``; texts the same with
        ``text:`` before.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    library()
    layout = lay_out(sheet, stream_data(sheet, result))
    width, height = layout.width * layout.scale, layout.height * layout.scale
    with style():
        paper = canvas(width, height, _cut(sheet.title or "Flowsheet", width), layout=None)
        axes = paper.add_axes((0, 0, 1, 1), gid="flowsheet")
        axes.set(xlim=(0, layout.width), ylim=(0, layout.height))
        axes.axis("off")
        for route in layout.routes.values():
            _stream(axes, route, layout.scale)
        for key, box in layout.boxes.items():
            _box(axes, box, layout.extents[key], layout.scale)
        for label in layout.labels:
            _text(axes, label, layout)
        _legend(axes, layout)
    return paper


def stream_data(sheet: Flowsheet, result: Result | None) -> dict[str, str]:
    """Give the text below the name of each stream.

    Parameters
    ----------
    sheet : Flowsheet
    result : Result or None

    Returns
    -------
    dict of str to str
        Empty without a result, and with a case axis.
    """
    if result is None or result.axis:
        return {}
    found = {}
    for name in sheet.plan.structure.streams:
        stream = result.stream(name)
        flow, celsius = float(stream.total) * PER_HOUR, float(stream.temperature) - 273.15
        if math.isfinite(flow) and math.isfinite(celsius):
            found[name] = f"{_number(flow)} kmol/h\n{celsius:.1f} °C"
    return found


def _number(value: float) -> str:
    """Give four digits without an exponent where that is short."""
    return f"{value:.4g}" if value == 0 or 1e-3 <= abs(value) < 1e5 else f"{value:.2e}"


def _cut(title: str, width: float) -> str:
    """Keep a title within the paper."""
    most = int(width / 2.6)
    return title if len(title) <= most else title[: most - 1].rstrip() + "…"


def _stream(axes: Axes, route: Route, scale: float) -> None:
    link, points = route.link, route.points
    xs, ys = [x for x, _ in points], [y for _, y in points]
    if link.loop is not None:
        halo = HALOS[link.loop % len(HALOS)]
        axes.plot(xs, ys, color=halo, linewidth=6.0 * scale, solid_capstyle="butt", solid_joinstyle="round", zorder=1,
                  gid=f"loop:{link.loop + 1}:{link.name}")  # fmt: skip
    dashes, colour = DASHES.get(link.phase, OTHER[0]), COLOURS.get(link.phase, OTHER[1])
    axes.plot(xs, ys, color=colour, linestyle=dashes, linewidth=1.1 * scale, zorder=ABOVE_LINE, gid=f"stream:{link.name}",
              dash_capstyle="butt", solid_capstyle="butt")  # fmt: skip
    (ax, ay), (bx, by) = points[-2:]
    long = math.hypot(bx - ax, by - ay)
    dx, dy = (bx - ax) / long, (by - ay) / long
    tip = [(bx, by), (bx - 2.4 * dx - 0.8 * dy, by - 2.4 * dy + 0.8 * dx), (bx - 2.4 * dx + 0.8 * dy, by - 2.4 * dy - 0.8 * dx)]
    axes.fill([x for x, _ in tip], [y for _, y in tip], color=colour, linewidth=0, zorder=ABOVE_LINE, gid=f"head:{link.name}")


def _box(axes: Axes, box: Box, extent: tuple[float, float, float, float], scale: float) -> None:
    left, bottom, right, top = extent
    gid = f"{box.sort}:{box.name}"
    points = _outline(box, extent)
    axes.fill(
        [x for x, _ in points], [y for _, y in points], facecolor="white" if box.sort == "unit" else "#f1f1f1", edgecolor=INK,
        linewidth=(1.1 if box.sort == "unit" else 0.7) * scale, zorder=ABOVE_BOX, gid=gid,
    )  # fmt: skip
    if box.column:
        shown = min(box.stages or 0, 11)
        low, high = bottom + 0.16 * (top - bottom), top - 0.16 * (top - bottom)
        for number in range(shown):
            y = high + (low - high) * (number + 0.5) / shown
            for x, end in ((left, left + 1.5), (right, right - 1.5)):
                axes.plot([x, end], [y, y], color=INK, linewidth=0.6 * scale, zorder=ABOVE_BOX + 1)
    total = sum(LINE * SIZES[kind] * POINT for kind, _ in box.lines)
    x = (left + right) / 2
    y = (bottom + top + total) / 2
    if box.side:  # the middle of what the point leaves
        ahead = 1 if (box.side in ("left", "bottom")) == (box.sort == "feed") else -1
        x -= 0.6 * (box.side in ("left", "right"))
        y -= 0.6 * ahead * (box.side in ("top", "bottom"))
    for number, (kind, text) in enumerate(box.lines):
        high = LINE * SIZES[kind] * POINT
        axes.text(
            x, y - high / 2, literal(text), size=SIZES[kind] * scale, ha="center", va="center", color=INK,
            weight="bold" if kind == "name" and box.sort == "unit" else "normal",
            style="italic" if kind == "note" else "normal", zorder=ABOVE_BOX + 2, gid=f"text:{gid}:{number}",
        )  # fmt: skip
        y -= high


def _outline(box: Box, extent: tuple[float, float, float, float]) -> list[tuple[float, float]]:
    """Give the corners of a box: domed ends for a column, a point along the flow for a feed or product."""
    left, bottom, right, top = extent
    if box.column:
        half, dome = (right - left) / 2, 2.4
        turn = [math.pi * number / 24 for number in range(25)]
        over = [((left + right) / 2 + half * math.cos(t), top - dome + dome * math.sin(t)) for t in turn]
        under = [((left + right) / 2 - half * math.cos(t), bottom + dome - dome * math.sin(t)) for t in turn]
        return over + under
    corners = [(left, bottom), (right, bottom), (right, top), (left, top)]
    if box.sort == "unit":
        return corners
    slant = 1.2
    feed = box.sort == "feed"
    if box.side in ("left", "right"):
        middle = (bottom + top) / 2
        return [(left, bottom), (right - slant, bottom), (right, middle), (right - slant, top), (left, top)]
    middle = (left + right) / 2
    down = (box.side == "top") == feed
    if down:
        return [(left, top), (left, bottom + slant), (middle, bottom), (right, bottom + slant), (right, top)]
    return [(left, bottom), (left, top - slant), (middle, top), (right, top - slant), (right, bottom)]


def _text(axes: Axes, label: Label, layout: Layout) -> None:
    gid = f"text:{label.sort}:{int(label.name) + 1 if label.sort == 'loop' else label.name}"
    if label.sort == "loop":
        left, bottom, right, top = label.extent
        halo = HALOS[int(label.name) % len(HALOS)]
        corners = [left, right, right, left], [bottom, bottom, top, top]
        axes.fill(*corners, facecolor=halo, edgecolor=INK, linewidth=0.5 * layout.scale, zorder=ABOVE_LINE + 1)
    if label.sort == "tear":
        _bars(axes, label, layout)
    sizes = [STREAM_SIZE] * label.names + [DATA_SIZE] * (len(label.lines) - label.names) if label.sort == "stream" else [TEAR_SIZE]
    total = sum(LINE * size * POINT for _, size in zip(label.lines, sizes))
    at = total / 2
    for number, (text, size) in enumerate(zip(label.lines, sizes)):
        high = LINE * size * POINT
        off = at - high / 2
        x, y = (label.x - off, label.y) if label.turned else (label.x, label.y + off)
        axes.text(
            x, y, literal(text), size=size * layout.scale, color=INK, rotation=90 if label.turned else 0, ha="center", va="center",
            weight="bold" if label.sort == "loop" else "normal",
            style="italic" if label.sort == "tear" or 0 <= number - label.names < label.notes else "normal",
            zorder=ABOVE_BOX + 1, gid=gid + (f":{number}" if number else ""),
        )  # fmt: skip
        at -= high


def _bars(axes: Axes, label: Label, layout: Layout) -> None:
    """Set a double bar across a torn stream."""
    x, y, upright = label.mark
    for number, off in enumerate((-0.55, 0.55)):
        ends = ([x - 1.3, x + 1.3], [y + off, y + off]) if upright else ([x + off, x + off], [y - 1.3, y + 1.3])
        axes.plot(*ends, color=INK, linewidth=1.3 * layout.scale, zorder=ABOVE_LINE + 1, gid=f"tear:{label.name}" + ":2" * number)


def _legend(axes: Axes, layout: Layout) -> None:
    """Say below what the lines mean."""
    x, y = MARGIN, FOOTER / 2
    present = {route.link.phase for route in layout.routes.values()}
    entries = [(phase, f"{phase} stream") for phase in sorted(present, key=lambda phase: (phase not in DASHES, phase))]
    if any(route.link.torn for route in layout.routes.values()):
        entries.append(("tear", "torn stream"))
    if layout.loops:
        entries.append(("loop", "stream of a loop"))
    for key, text in entries:
        if key == "loop":
            axes.plot([x, x + 9], [y, y], color=HALOS[0], linewidth=6.0 * layout.scale, solid_capstyle="butt", zorder=1)
        axes.plot([x, x + 9], [y, y], linestyle=DASHES.get(key, "-" if key in ("tear", "loop") else OTHER[0]),
                  color=COLOURS.get(key, NAVY if key in ("tear", "loop") else OTHER[1]), linewidth=1.1 * layout.scale)  # fmt: skip
        if key == "tear":
            for off in (3.95, 5.05):
                axes.plot([x + off, x + off], [y - 1.3, y + 1.3], color=INK, linewidth=1.3 * layout.scale)
        drawn = axes.text(x + 10.5, y, text, size=TEAR_SIZE * layout.scale, va="center", color=INK, gid=f"legend:{key}")
        x += 16.0 + len(drawn.get_text()) * 1.5
