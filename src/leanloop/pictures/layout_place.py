"""Boxes of units, feeds and products on the grid of a drawing."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from leanloop.pictures import layout_ranks as order
from leanloop.pictures.layout_labels import LINE, POINT, text_width
from leanloop.pictures.layout_route import Port

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet

GRID = 3.0  # mm from track to track
SIZES = {"name": 7.4, "kind": 6.8, "note": 6.8, "data": 6.8}  # points at scale 1
LONGEST = 15  # letters of a name on one line
MOST_GAP = 14  # steps of the grid that a name may open between two ranks
TALL, TALL_OF_MANY, MANY = 14, 12, 12  # steps of the grid, height of a column; less where there are more units than this
A4, MOST_A3 = (95.0, 59.0), (153.0, 100.0)  # free paper in steps of the grid; the most that A3 takes at the least scale
BEYOND = 3.0  # what it costs to be too large for A3, against being larger
LEAST_FILL = 0.85  # of the free paper: a smaller drawing is no better
CUT, CUT_LOOP, ROW = 0.03, 0.12, 0.03  # of the paper's size: a stream between two rows, one of a loop, a further row


@dataclass(frozen=True)
class Link:
    """A stream between two ports.

    Attributes
    ----------
    name, maker, outlet, taker, inlet : str
        An empty maker is a feed, an empty taker a product.
    phase : str
    torn : bool
    loop : int or None
        The loop it is a part of.
    """

    name: str
    maker: str
    outlet: str
    taker: str
    inlet: str
    phase: str
    torn: bool
    loop: int | None

    @property
    def source(self) -> tuple[str, str]:
        """Box that it comes from."""
        return ("unit", self.maker) if self.maker else ("feed", self.name)

    @property
    def target(self) -> tuple[str, str]:
        """Box that it goes to."""
        return ("unit", self.taker) if self.taker else ("product", self.name)


@dataclass
class Box:
    """A unit, or the name of a feed or product at the edge of its row.

    Attributes
    ----------
    sort, name : str
        ``"unit"``, ``"feed"`` or ``"product"``.
    lines : list of (str, str)
        Style (``"name"``, ``"kind"``, ``"note"``, ``"data"``) and text.
    width, height : int
        Steps of the grid.
    stages : int or None
        Of a column.
    side : str
        For feeds and products, the edge of the row: ``"left"``, ``"right"``, ``"top"`` or ``"bottom"``.
    x, y : int
        Left and top, y downwards.
    row : int
        Of a unit, from the top.
    """

    sort: str
    name: str
    lines: list[tuple[str, str]]
    width: int
    height: int
    stages: int | None = None
    column: bool = False
    side: str = ""
    x: int = 0
    y: int = 0
    row: int = 0

    @property
    def corners(self) -> tuple[int, int, int, int]:
        """Left, top, right, bottom."""
        return self.x, self.y, self.x + self.width, self.y + self.height


@dataclass
class Placement:
    """Boxes on a grid.

    Attributes
    ----------
    boxes : dict of (str, str) to Box
    width, height : int
        Steps of the grid.
    """

    boxes: dict[tuple[str, str], Box] = field(default_factory=dict)
    width: int = 0
    height: int = 0

    def ports(self, link: Link) -> tuple[list[Port], list[Port]]:
        """Give where a stream may begin and end."""
        return (
            _ports(self.boxes[link.source], link.outlet, True),
            _ports(self.boxes[link.target], link.inlet, False),
        )


def port_height(box: Box, label: str, out: bool) -> float:
    """Give the height of a column's port, -0.5 at the top to 0.5 at the bottom; 0 for any other unit."""
    if not box.column:
        return 0.0
    edge = {"gas_out": -0.5, "liquid_out": 0.5, "liquid_in": 2 / box.height - 0.5, "gas_in": 0.5 - 2 / box.height}
    return edge.get(label, 0.0)


def _ports(box: Box, label: str, out: bool) -> list[Port]:
    left, top, right, bottom = box.corners
    middle, level = (left + right) // 2, (top + bottom) // 2
    if box.side:
        edge = {
            "left": Port(right, level, 0), "right": Port(left, level, 2),
            "top": Port(middle, bottom, 1), "bottom": Port(middle, top, 3),
        }  # fmt: skip
        return [edge[box.side]]
    if box.column:
        if label == "gas_out":
            return [Port(middle, top, 3)]
        if label == "liquid_out":
            return [Port(middle, bottom, 1)]
        at = {"liquid_in": [top + 2], "gas_in": [bottom - 2]}.get(label, range(top + 4, bottom - 3))
        first, second = (right, left) if out else (left, right)
        near, far = (0, 2) if out else (2, 0)
        return [
            *(Port(first, y, near, 0.2 * abs(y - level)) for y in at),
            *(Port(second, y, far, 1.5 + 0.2 * abs(y - level)) for y in at),
        ]
    side, way = (right, 0) if out else (left, 2)
    found = [Port(side, y, way, 0.4 * abs(y - level)) for y in range(top + 1, bottom)]
    for y, up in ((top, 3), (bottom, 1)):
        found += [Port(x, y, up, 3.0 + 0.2 * abs(x - middle)) for x in range(left + 1, right)]
    return found


# --- sizes


def broken(text: str, most: int = LONGEST) -> list[str]:
    """Break a long name behind ``_``, ``-`` or ``.``, and where there is none, anywhere.

    Parameters
    ----------
    text : str
    most : int
        Letters of a line.

    Returns
    -------
    list of str
    """
    lines = [""]
    for part in re.findall(r"[^_\-. ]*[_\-. ]?", text):
        while len(part) > most:
            if lines[-1]:
                lines.append("")
            lines[-1], part = part[:most], part[most:]
            lines.append("")
        if lines[-1] and len(lines[-1]) + len(part) > most:
            lines.append("")
        lines[-1] += part
    return [line for line in lines if line] or [""]


def _size(lines: Sequence[tuple[str, str]], least: tuple[int, int], pad: float) -> tuple[int, int]:
    width = max(text_width(text, SIZES[style], style == "name") for style, text in lines)
    height = sum(LINE * SIZES[style] * POINT for style, _ in lines)
    return (
        max(least[0], 2 * math.ceil((width + pad) / GRID / 2)),
        max(least[1], 2 * math.ceil((height + 1.2) / GRID / 2)),
    )


def _boxes(sheet: Flowsheet, links: Sequence[Link], data: Mapping[str, str]) -> dict[tuple[str, str], Box]:
    """Make the boxes with their texts and sizes."""
    notes: dict[tuple[str, str], list[str]] = {}
    by_name = {link.name: link for link in links}
    for name, item in sheet.requirements.items():
        tie = sheet.tie(item)
        asked = item.address.split(".")
        if asked[0] == "streams":
            link = by_name[asked[1]]  # between two units the note stands at the stream's name
            holder = link.target if not link.taker else link.source if not link.maker else None
        else:
            holder = ("unit", asked[1]) if asked[0] == "units" else None
        if holder:
            notes.setdefault(holder, []).append(f"required: {name}")
        for key in (*(("unit", unit) for unit in tie.free_units), *(("feed", feed) for feed in tie.free_feeds)):
            if item.free.startswith(f"{key[0]}s.{key[1]}."):
                notes.setdefault(key, []).append(f"freed: {item.free.split('.', 2)[2]}")
    boxes: dict[tuple[str, str], Box] = {}
    tall = TALL_OF_MANY if len(sheet.units) > MANY else TALL
    for name, unit in sheet.units.items():
        column = hasattr(unit, "cleans")
        lines = [("name", text) for text in broken(name)] + [("kind", unit.kind)]
        stages = unit.values.numbers.get("stages") if column else None
        if stages is not None:
            stages = int(stages)
            lines.append(("kind", f"{stages} stage" + "s" * (stages != 1)))
        lines += [("note", text) for note in notes.get(("unit", name), ()) for text in broken(note, 17)]
        ports = max(len(unit.inlets), len(unit.outlets), 3) + 1
        width, height = _size(lines, (6, tall if column else ports + ports % 2), 4.0 if column else 2.4)
        boxes["unit", name] = Box("unit", name, lines, width, height, stages, column)
    for link in links:
        for sort, here in (("feed", not link.maker), ("product", not link.taker)):
            if here:
                lines = [("name", text) for text in broken(link.name, 20)]
                lines += [("data", text) for text in data.get(link.name, "").split("\n") if text]
                lines += [("note", text) for note in notes.get((sort, link.name), ()) for text in broken(note, 20)]
                boxes[sort, link.name] = Box(sort, link.name, lines, *_size(lines, (4, 2), 3.2))
    return boxes


# --- rows


@dataclass
class Row:
    """Ranks that stand side by side, with what is at their edges.

    Attributes
    ----------
    layers : list of list
        Places of each rank: names of units, and tuples for passing streams.
    links : list of list
        As `layout_ranks.crossings` takes them.
    pulls : dict
    flags : dict of str to list of (Box, Link)
        By side.
    names : list of float
        Width in mm of the longest name of a stream from each rank straight to the next.
    back, through : int
        Streams against the order, and from or to other rows.
    """

    layers: list[list]
    links: list[list[tuple]]
    pulls: dict
    flags: dict[str, list[tuple[Box, Link]]]
    names: list[float]
    back: int = 0
    through: int = 0


def placements(
    sheet: Flowsheet, links: Sequence[Link], data: Mapping[str, str], room: Mapping[str, float], extra: int, count: int
) -> list[tuple[float, Placement]]:
    """Place all boxes in rows, in the ways that give the smallest drawings in the shape of paper.

    Parameters
    ----------
    sheet : Flowsheet
    links : sequence of Link
    data : mapping of str to str
        Texts below the names of streams.
    room : mapping of str to float
        mm by which streams need more than their names seem to.
    extra : int
        Steps of the grid by which gaps are wider than they seem to need.
    count : int
        Placements wanted at most.

    Returns
    -------
    list of (float, Placement)
        Cost, about the size against A4, and placement; the best first.
    """
    inner = [(link.maker, link.taker) for link in links if link.maker and link.taker and link.maker != link.taker]
    sequence = sheet.check()["order"]
    # room for numbers only where there are few streams
    more = data if len(sequence) <= MANY else {}
    widths = {
        link.name: max(text_width(text, SIZES["name"]) for text in (link.name, *more.get(link.name, "").split("\n")))
        + room.get(link.name, 0.0)
        for link in links
    }
    tried, seen = [], set()
    for most in range(1, len(sequence) + 1):
        starts = order.rows(sequence, inner, most)
        if tuple(starts) in seen:
            continue
        seen.add(tuple(starts))
        found = Placement(_boxes(sheet, links, data))
        cut = _placed(links, inner, sequence, starts, extra, found, widths)
        scale = max(found.width / A4[0], found.height / A4[1], LEAST_FILL)
        scale += BEYOND * max(0.0, found.width / MOST_A3[0] - 1.0, found.height / MOST_A3[1] - 1.0)
        tried.append((scale + cut + ROW * len(starts), len(tried), found))
    return [(cost, found) for cost, _, found in sorted(tried, key=lambda item: item[:2])[:count]]


def _placed(
    links: Sequence[Link], inner: Sequence[tuple], sequence: Sequence[str], starts: Sequence[int], extra: int, found: Placement,
    widths: Mapping[str, float],
) -> float:
    """Place all boxes in rows that begin at given places of the order; tell what the streams that change the row cost."""
    row_of: dict[str, int] = {}
    rank: dict[str, int] = {}
    for number, (start, end) in enumerate(zip(starts, [*starts[1:], len(sequence)])):
        own = sequence[start:end]
        row_of.update(dict.fromkeys(own, number))
        rank.update(order.ranks(own, [link for link in inner if link[0] in own and link[1] in own]))
    top = 1
    for name, number in row_of.items():
        found.boxes["unit", name].row = number
    for number in range(len(starts)):
        row = _row(links, rank, row_of, number, found.boxes, widths)
        top = _place_row(row, found.boxes, top, extra, found)
    found.height = top + 1
    found.width += 1
    between = [link for link in links if link.maker and link.taker and row_of[link.maker] != row_of[link.taker]]
    return sum(CUT if link.loop is None else CUT_LOOP for link in between)


def _row(
    links: Sequence[Link], rank: Mapping[str, int], row_of: Mapping[str, int], number: int, boxes: dict, widths: Mapping
) -> Row:
    """Gather what stands in a row and order it."""
    inside = [name for name in rank if row_of[name] == number]
    end = max(rank[name] for name in inside)
    layers: list[list] = [[] for _ in range(end + 1)]
    for name in inside:
        layers[rank[name]].append(name)
    between: list[list[tuple]] = [[] for _ in range(end)]
    row = Row(layers, between, {}, {"left": [], "right": [], "top": [], "bottom": []}, [0.0] * end)
    for link in links:
        here = [unit for unit in (link.maker, link.taker) if unit and row_of[unit] == number]
        if not here:
            continue
        if link.maker and link.taker:
            if row_of[link.maker] != row_of[link.taker]:
                row.through += 1
                for unit in here:
                    other = link.taker if unit == link.maker else link.maker
                    row.pulls.setdefault(unit, []).append(0.5 if row_of[other] > number else -0.5)
                continue
            ahead = rank[link.maker] < rank[link.taker]
            row.back += not ahead
            first, last = (link.maker, link.taker) if ahead else (link.taker, link.maker)
            high = port_height(boxes["unit", link.maker], link.outlet, True)
            low = port_height(boxes["unit", link.taker], link.inlet, False)
            if not ahead:
                high, low = low, high
            chain = [first, *((link.name, between_rank) for between_rank in range(rank[first] + 1, rank[last])), last]
            if rank[first] == rank[last]:
                continue
            if len(chain) == 2:
                row.names[rank[first]] = max(row.names[rank[first]], widths[link.name])
            for place, (a, b) in enumerate(zip(chain, chain[1:])):
                level = rank[first] + place
                if place:
                    layers[level].append(a)
                between[level].append((a, b, high if a == first else 0.0, low if b == last else 0.0))
        else:
            box = boxes[("product", link.name) if link.maker else ("feed", link.name)]
            _side(row, box, link, here[0], rank[here[0]] == 0, rank[here[0]] == end, boxes)
    row.layers = order.arrange(layers, between, row.pulls)
    # now that the order is known: what is free to leave over the top or below takes the shorter way
    for layer in row.layers:
        for place, name in enumerate(layer):
            for side, other in (("top", "bottom"), ("bottom", "top")):
                for item in list(row.flags[side]):
                    box, link = item
                    if name in (link.maker, link.taker) and not boxes["unit", name].column:
                        above, below = place, len(layer) - 1 - place
                        if (above > below) if side == "top" else (below > above):
                            row.flags[side].remove(item)
                            row.flags[other].append(item)
                            box.side = other
    return row


def _side(row: Row, box: Box, link: Link, unit: str, first: bool, last: bool, boxes: dict) -> None:
    """Choose the edge at which a feed comes in or a product leaves."""
    label = link.outlet if link.maker else link.inlet
    if boxes["unit", unit].column:
        side = {"gas_out": "top", "liquid_out": "bottom", "gas_in": "bottom", "liquid_in": "top"}.get(label, "bottom")
    else:
        side = "bottom" if link.maker else "top"
    if not link.maker and first:
        side = "left"
    elif link.maker and last and side == port_side(boxes["unit", unit], label):
        side = "right"
    box.side = side
    if side in ("top", "bottom"):
        row.pulls.setdefault(unit, []).append(-1.0 if side == "top" else 1.0)
    row.flags[side].append((box, link))


def port_side(box: Box, label: str) -> str:
    """Give the edge that a product of this port would take anywhere but at the end of a row."""
    return "" if box.column and label in ("gas_out", "liquid_out") else "bottom"


def _place_row(row: Row, boxes: dict, top: int, extra: int, placement: Placement) -> int:
    """Set the boxes of a row below a given line; give the line below the row."""
    gap = 3 + (extra + 1) // 2
    sizes = {}
    for layer in row.layers:
        for item in layer:
            if isinstance(item, tuple):
                sizes[item] = (0, 0.01)
            else:
                box = boxes["unit", item]
                sizes[item] = (box.height, 4.0 if box.column and len(layer) == 1 else 0.02)
    where = order.heights(row.layers, row.links, sizes, gap)
    left = 1 + max((box.width for box, _ in row.flags["left"]), default=0) + (3 if row.flags["left"] else 2)
    left += (row.back + row.through + 1) // 2 + extra
    # --- along the row
    for number, layer in enumerate(row.layers):
        names = [item for item in layer if not isinstance(item, tuple)]
        width = max(boxes["unit", name].width for name in names)
        for name in names:
            boxes["unit", name].x = left + (width - boxes["unit", name].width) // 2
        left += width
        if number < len(row.layers) - 1:
            left += _gap(row, number, boxes) + extra
    right = left
    # --- across the row
    lanes = {side: max((box.height for box, _ in row.flags[side]), default=0) for side in ("top", "bottom")}
    rails = 2 + (row.back + row.through + 1) // 2 + extra
    tops = [where[item] - sizes[item][0] // 2 for layer in row.layers for item in layer]
    bottoms = [where[item] - sizes[item][0] // 2 + sizes[item][0] for layer in row.layers for item in layer]
    shift = top + lanes["top"] + rails - min(tops, default=0)
    low = shift + max(bottoms, default=0) + rails
    for layer in row.layers:
        for item in layer:
            if not isinstance(item, tuple):
                boxes["unit", item].y = shift + where[item] - sizes[item][0] // 2
    # --- at the edges
    for side in ("top", "bottom"):
        flags = sorted(row.flags[side], key=lambda item: (_along(item, boxes)[0], item[0].name))
        aims = [_along(item, boxes) for item in flags]
        gaps = [(a.width + b.width) // 2 + 1 for (a, _), (b, _) in zip(flags, flags[1:])]
        middles = order.snapped([aim for aim, _ in aims], [weight for _, weight in aims], gaps)
        push = max(0, max((1 + box.width // 2 - middle for (box, _), middle in zip(flags, middles)), default=0))
        for (box, _), middle in zip(flags, middles):
            box.x = middle + push - box.width // 2
            box.y = top + lanes["top"] - box.height if side == "top" else low
            right = max(right, box.x + box.width)
    edge = right + 3 + (row.back + row.through + 1) // 2
    for side in ("left", "right"):
        flags = sorted(row.flags[side], key=lambda item: (_up(item, boxes), item[0].name))
        gaps = [(a.height + b.height) // 2 + 1 for (a, _), (b, _) in zip(flags, flags[1:])]
        for (box, _), middle in zip(flags, order.snapped([_up(item, boxes) for item in flags], [1.0] * len(flags), gaps)):
            box.x, box.y = (1 if side == "left" else edge), max(top + 1, middle - box.height // 2)
        if side == "right" and flags:
            right = edge + max(box.width for box, _ in flags)
    low += lanes["bottom"]
    low = max([low, *(box.y + box.height for side in ("left", "right") for box, _ in row.flags[side])])
    placement.width = max(placement.width, right + 1, edge)
    return low + 2 + (row.through + 1) // 2


def _gap(row: Row, number: int, boxes: dict) -> int:
    """Give the free width that the streams between two ranks need."""
    links = row.links[number]
    bent = sum(abs(high) + abs(low) > 0 or len(links) > 1 for _, _, high, low in links)
    sides = {row.layers[number + 1][place] for place in range(len(row.layers[number + 1]))}
    into = sum(
        link.taker in sides and boxes["unit", link.taker].column for side in ("top", "bottom") for _, link in row.flags[side]
    )
    return max(4 + into, min(MOST_GAP, math.ceil((row.names[number] + 4.0) / GRID)), 3 + (2 * bent + 2) // 3 + into)


def _along(item: tuple[Box, Link], boxes: dict) -> tuple[float, float]:
    """Give where along a row a feed or product should stand, and how much that matters."""
    box, link = item
    unit = boxes["unit", link.maker or link.taker]
    near = [other for key, other in boxes.items() if key[0] == "unit" and other.x < unit.x + unit.width and unit.x < other.x
            + other.width and (other.y < unit.y if box.side == "top" else other.y > unit.y) and other.row == unit.row]  # fmt: skip
    behind = 2.0 * len(near)  # units between this one and the edge, to be passed
    if link.taker and (unit.column or near):
        return unit.x - 2.0 - behind, 1.0
    if near:
        return unit.x + unit.width + behind, 1.0
    return unit.x + unit.width / 2, 20.0 if unit.column else 4.0


def _up(item: tuple[Box, Link], boxes: dict) -> float:
    """Give where down a row a feed or product should stand."""
    box, link = item
    unit = boxes["unit", link.maker or link.taker]
    label = link.outlet if link.maker else link.inlet
    return unit.y + unit.height / 2 + unit.height * port_height(unit, label, bool(link.maker))
