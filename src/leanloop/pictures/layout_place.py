"""Boxes of a flowsheet placed in rows on the grid of a drawing."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from leanloop.pictures import layout_ranks as order
from leanloop.pictures.layout_boxes import GRID, MANY, SIZES, Box, Link, boxes_of, broken, port_height, ports
from leanloop.pictures.layout_labels import text_width
from leanloop.pictures.layout_route import Port

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet

MOST_GAP = 14  # steps of the grid that a name may open between two ranks
A4, MOST_A3 = (95.0, 59.0), (153.0, 100.0)  # free paper in steps of the grid; the most that A3 takes at the least scale
BEYOND = 3.0  # what it costs to be too large for A3, against being larger
LEAST_FILL = 0.85  # of the free paper: a smaller drawing is no better
CUT, CUT_LOOP, ROW = 0.03, 0.12, 0.03  # of the paper's size: a stream between two rows, one of a loop, a further row


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
            ports(self.boxes[link.source], link.outlet, True),
            ports(self.boxes[link.target], link.inlet, False),
        )


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
    sheet: Flowsheet, links: Sequence[Link], data: Mapping[str, str], room: Mapping[str, float], extra: int
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
        link.name: max(text_width(text, SIZES["name"]) for text in (*broken(link.name), *more.get(link.name, "").split("\n")))
        + room.get(link.name, 0.0)
        for link in links
    }
    tried, seen = [], set()
    for most in range(1, len(sequence) + 1):
        starts = order.rows(sequence, inner, most)
        if tuple(starts) in seen:
            continue
        seen.add(tuple(starts))
        found = Placement(boxes_of(sheet, links, data, extra))
        cut = _placed(links, inner, sequence, starts, extra, found, widths)
        scale = max(found.width / A4[0], found.height / A4[1], LEAST_FILL)
        scale += BEYOND * max(0.0, found.width / MOST_A3[0] - 1.0, found.height / MOST_A3[1] - 1.0)
        tried.append((scale + cut + ROW * len(starts), len(tried), found))
    return [(cost, found) for cost, _, found in sorted(tried, key=lambda item: item[:2])]


def _placed(
    links: Sequence[Link],
    inner: Sequence[tuple],
    sequence: Sequence[str],
    starts: Sequence[int],
    extra: int,
    found: Placement,
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
            high = port_height(boxes["unit", link.maker], link.outlet)
            low = port_height(boxes["unit", link.taker], link.inlet)
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
    elif link.maker and last and not (boxes["unit", unit].column and label in ("gas_out", "liquid_out")):
        side = "right"
    box.side = side
    if side in ("top", "bottom"):
        row.pulls.setdefault(unit, []).append(-1.0 if side == "top" else 1.0)
    row.flags[side].append((box, link))


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
        free = top + 1
        for (box, _), middle in zip(flags, order.snapped([_up(item, boxes) for item in flags], [1.0] * len(flags), gaps)):
            box.x, box.y = (1 if side == "left" else edge), max(free, middle - box.height // 2)
            free = box.y + box.height + 1
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
    return unit.y + unit.height / 2 + unit.height * port_height(unit, label)
