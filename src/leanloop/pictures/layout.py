"""The flowsheet laid out on paper: boxes, routed streams and texts in mm, without any drawing.

Units stand in rows by rank (`layout_place`, `layout_ranks`), feeds and products at the edges of the rows, streams run on a grid of
tracks (`layout_route`), texts stand where they touch nothing (`layout_labels`).
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from leanloop.pictures import layout_labels as texts
from leanloop.pictures.layout_boxes import GRID, Box, Link, broken
from leanloop.pictures.layout_labels import LINE, POINT, Label, text_width
from leanloop.pictures.layout_place import Placement, placements
from leanloop.pictures.layout_route import Router, Wire

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet

MARGIN, HEADER, FOOTER = 6.0, 9.0, 10.0  # mm around the drawing, for its title, for its legend
PAPER = ((297.0, 210.0), (420.0, 297.0))  # A4 and A3, landscape; beyond, as much as the drawing needs
SMALLEST, LARGEST = 0.89, 1.3  # scales at which a drawing is set on its paper
STREAM_SIZE, DATA_SIZE, TEAR_SIZE = 7.0, 6.8, 6.8  # points at scale 1; 6 on paper at the least
ATTEMPTS = 9
MORE_ROOM = 5.0  # mm for a name that found no place
ROUTED, FARTHEST = 3, 0.5  # placements that are routed, and by how much their cost may be above the least
CROSSING, BEND = 0.01, 0.003  # what each costs against the size


@dataclass
class Route:
    """A stream as it runs.

    Attributes
    ----------
    link : Link
    points : list of (float, float)
        Ends and bends, mm from the lower left corner of the paper.
    """

    link: Link
    points: list[tuple[float, float]]


@dataclass
class Layout:
    """A whole drawing, in mm at scale 1 from the lower left corner of the paper.

    Attributes
    ----------
    width, height : float
        Of the paper, at scale 1.
    scale : float
        By which everything, texts included, is enlarged on the paper.
    boxes : dict of (str, str) to Box
        By sort (``"unit"``, ``"feed"`` or ``"product"``) and name.
    extents : dict of (str, str) to (float, float, float, float)
        Left, bottom, right, top of each box.
    routes : dict of str to Route
        By stream.
    labels : list of Label
    loops : list of list of str
        Units that recycle among themselves.
    """

    width: float
    height: float
    scale: float
    boxes: dict[tuple[str, str], Box] = field(default_factory=dict)
    extents: dict[tuple[str, str], tuple[float, float, float, float]] = field(default_factory=dict)
    routes: dict[str, Route] = field(default_factory=dict)
    labels: list[Label] = field(default_factory=list)
    loops: list[list[str]] = field(default_factory=list)


def lay_out(sheet: Flowsheet, data: Mapping[str, str] | None = None) -> Layout:
    """Lay a flowsheet out.

    Parameters
    ----------
    sheet : Flowsheet
    data : mapping of str to str, optional
        A line below the name of a stream, left out where it does not fit.

    Returns
    -------
    Layout

    Raises
    ------
    RuntimeError
        Where streams find no way even on a much larger paper. A name that finds no place clear of all lines stands on one.
    """
    links, loops = _links(sheet)
    between = {link.name for link in links if link.maker and link.taker}
    notes: dict[str, list[str]] = {}
    for name, item in sheet.requirements.items():
        part = item.address.split(".")
        if part[0] == "streams" and part[1] in between:
            notes.setdefault(part[1], []).append(f"required: {name}")
    room: dict[str, float] = {}
    done: list[tuple[float, int, Layout]] = []
    spare: Layout | None = None
    for attempt in range(ATTEMPTS):
        tried = []
        choice = placements(sheet, links, data or {}, room, attempt // 3)
        for cost, placement in choice[:ROUTED]:
            if cost > choice[0][0] + FARTHEST:
                break
            wires = {link.name: Wire(link.name, *placement.ports(link)) for link in links}
            solid = [box.corners for box in placement.boxes.values()]
            router = Router(placement.width, placement.height, solid, attempt // 3)
            if not router.route(list(wires.values())):
                bends = sum(len(wire.corners()) - 2 for wire in wires.values())
                tried.append((cost + CROSSING * crossings(wires.values()) + BEND * bends, len(tried), placement, wires))
        short: set[str] = set()
        for cost, _, placement, wires in sorted(tried, key=lambda item: item[:2]):
            layout = _in_mm(placement, wires, links, loops)
            lost = _label(layout, data or {}, notes)
            if not lost:
                done.append((cost, attempt, layout))
                break
            short |= lost
            spare = layout
        for name in short:
            room[name] = room.get(name, 0.0) + MORE_ROOM
        # a name that finds no place in a good drawing asks for room in it before a worse one is taken
        if done and (not short or attempt >= 2):
            return min(done, key=lambda item: item[:2])[2]
    if spare is not None and not _label(spare, {}, notes, anyhow=True):
        return spare
    raise RuntimeError("the flowsheet found no place on paper")


def crossings(wires: Iterable[Wire]) -> int:
    """Count the points at which two streams cross.

    Parameters
    ----------
    wires : iterable of Wire
        Routed.
    """
    points = [point for wire in wires for point in wire.path]
    return len(points) - len(set(points))


def _links(sheet: Flowsheet) -> tuple[list[Link], list[list[str]]]:
    """Gather the streams of a flowsheet and its loops."""
    structure, check = sheet.plan.structure, sheet.check()
    loops = check["loops"]
    recycled = sheet.plan.recycled()
    member = {unit: number for number, units in enumerate(loops) for unit in units}
    links = []
    for name in structure.streams:
        maker, out = structure.makers[name]
        taker, into = structure.takers.get(name, ("", name))
        loop = None
        if name in recycled and maker in member and member[maker] == member.get(taker):
            loop = member[maker]
        links.append(Link(name, maker, out, taker, into, sheet.plan.phases[name], name in check["tears"], loop))
    return links, loops


def _in_mm(placement: Placement, wires: Mapping[str, Wire], links: list[Link], loops: list[list[str]]) -> Layout:
    """Set the grid on the smallest paper that takes it."""
    across, up = placement.width * GRID, placement.height * GRID
    need = across + 2 * MARGIN, up + 2 * MARGIN + HEADER + FOOTER
    fills = [(min(size[0] / need[0], size[1] / need[1]), size) for size in PAPER]
    scale, paper = next((item for item in fills if item[0] >= SMALLEST), (1.0, need))
    scale = min(scale, LARGEST)
    width, height = paper[0] / scale, paper[1] / scale
    left = (width - across) / 2
    top = height - MARGIN - HEADER - (height - need[1]) / 2
    layout = Layout(width, height, scale, placement.boxes, loops=loops)
    for key, box in placement.boxes.items():
        x0, y0, x1, y1 = box.corners
        layout.extents[key] = (left + GRID * x0, top - GRID * y1, left + GRID * x1, top - GRID * y0)
    for link in links:
        points = [(left + GRID * x, top - GRID * y) for x, y in wires[link.name].corners()]
        layout.routes[link.name] = Route(link, points)
    return layout


def _label(layout: Layout, data: Mapping[str, str], notes: Mapping[str, list[str]], anyhow: bool = False) -> set[str]:
    """Set the texts; data that find no place are left out. Give the streams whose names or marks found none."""
    boxes = np.array(list(layout.extents.values()))
    lines = np.array([extent for route in layout.routes.values() for extent in texts.segment_extents(route.points)])
    free = (2.0, FOOTER, layout.width - 2.0, layout.height - HEADER)
    bare: set[str] = set()
    while True:
        labels, along = [], []
        for name, route in layout.routes.items():
            own = [route.points]
            if route.link.torn:
                width = text_width("tear", TEAR_SIZE) + 0.8
                labels.append(Label("tear", name, ["tear"], width, LINE * TEAR_SIZE * POINT, 1.3))
                along.append(own)
            if route.link.maker and route.link.taker:  # feeds and products are named at the edge
                parts = broken(name)
                width = max(text_width(text, STREAM_SIZE) for text in parts)
                label = Label("stream", name, parts, width, LINE * STREAM_SIZE * POINT * len(parts))
                label.names, label.notes = len(parts), len(notes.get(name, ()))
                more = [*notes.get(name, ()), *(data[name].split("\n") if name in data and name not in bare else ())]
                label.lines += more
                label.width = max([label.width, *(text_width(text, DATA_SIZE) for text in more)])
                label.height += LINE * DATA_SIZE * POINT * len(more)
                labels.append(label)
                along.append(own)
        for number in range(len(layout.loops)):
            own = [route.points for route in layout.routes.values() if route.link.loop == number]
            if own:
                text = f"loop {number + 1}"
                width = text_width(text, TEAR_SIZE, True) + 1.6
                labels.append(Label("loop", str(number), [text], width, LINE * TEAR_SIZE * POINT + 0.8, 0.8))
                along.append(own)
        lost = texts.place(labels, along, boxes, lines, free, anyhow)
        if not lost:
            layout.labels = labels
            return set()
        long = {label.name for label in lost if len(label.lines) > label.names + label.notes}
        if not long:
            return {label.name for label in lost}
        bare |= long
