"""Boxes of units, feeds and products of a drawing: texts, sizes and ports."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from leanloop.pictures.layout_labels import LINE, POINT, text_width
from leanloop.pictures.layout_route import Port

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet

GRID = 3.0  # mm from track to track
SIZES = {"name": 7.4, "kind": 6.8, "note": 6.8, "data": 6.8}  # points at scale 1
LONGEST = 16  # letters of a name on one line
TALL, TALL_OF_MANY, MANY = 14, 12, 12  # steps of the grid, height of a column; less where there are more units than this


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


def port_height(box: Box, label: str) -> float:
    """Give the height of a column's port, -0.5 at the top to 0.5 at the bottom; 0 for any other unit."""
    if not box.column:
        return 0.0
    edge = {"gas_out": -0.5, "liquid_out": 0.5, "liquid_in": 2 / box.height - 0.5, "gas_in": 0.5 - 2 / box.height}
    return edge.get(label, 0.0)


def ports(box: Box, label: str, out: bool) -> list[Port]:
    """Give the points at which a stream may end at a box.

    Parameters
    ----------
    box : Box
    label : str
        Of the unit's port.
    out : bool
        Whether the stream leaves the box.

    Returns
    -------
    list of Port
    """
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
    # in on the left, out on the right, over the top or the bottom where that is shorter
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


def boxes_of(sheet: Flowsheet, links: Sequence[Link], data: Mapping[str, str], spread: int = 0) -> dict[tuple[str, str], Box]:
    """Make the boxes with their texts and sizes, not yet placed.

    Parameters
    ----------
    sheet : Flowsheet
    links : sequence of Link
    data : mapping of str to str
        Lines below the names of feeds and products.
    spread : int
        How much taller than needed boxes are, for streams that keep apart.

    Returns
    -------
    dict of (str, str) to Box
    """
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
        most = max(len(unit.inlets), len(unit.outlets))
        ports = max(most + 1, 4, (most + 1) * (1 + min(spread, 3)) if spread else 0)
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
