"""Places of the texts along streams, clear of boxes, of every line and of each other."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

POINT = 25.4 / 72.0  # mm
LINE = 1.2  # height of a line of text in its own size
NARROW, WIDE = frozenset("fijlrtI.,:;'|!()[] -/"), frozenset("mwMW%@")
CLEAR = 0.25  # mm between a text and what it must not touch
HEAD = 2.6  # mm, length of an arrowhead
COVERED = 20.0  # what it costs to cover a line
BARS = 1.4  # mm, half of the bars across a torn stream


def text_width(text: str, size: float, bold: bool = False) -> float:
    """Estimate the width of a line of text from above, in mm.

    Parameters
    ----------
    text : str
    size : float
        Points.
    bold : bool
    """
    ems = 0.0
    for letter in text:
        if letter in NARROW:
            ems += 0.46 if bold else 0.42
        elif letter in WIDE:
            ems += 1.0
        else:
            ems += 0.64 if letter.islower() or letter.isdigit() or letter == "_" else 0.78 if ord(letter) < 0x2E80 else 1.05
    return ems * size * POINT * (1.13 if bold else 1.0)


@dataclass
class Label:
    """A text beside a stream.

    Attributes
    ----------
    sort : str
        ``"stream"``, ``"tear"`` or ``"loop"``.
    name : str
        Of the stream, or number of the loop.
    lines : list of str
    names, notes : int
        How many lines the name takes, and how many lines after it name requirements.
    width, height : float
        mm, as read, not as turned.
    off : float
        mm from the line.
    x, y : float
        mm; the middle, once it is placed.
    turned : bool
        Whether it reads upwards.
    mark : (float, float, bool) or None
        The point of the line beside the text, and whether the line is upright there.
    """

    sort: str
    name: str
    lines: list[str]
    width: float
    height: float
    off: float = 0.4
    names: int = 1
    notes: int = 0
    x: float = 0.0
    y: float = 0.0
    turned: bool = False
    mark: tuple[float, float, bool] | None = None

    @property
    def extent(self) -> tuple[float, float, float, float]:
        """Left, bottom, right and top in mm."""
        across, up = (self.height, self.width) if self.turned else (self.width, self.height)
        return self.x - across / 2, self.y - up / 2, self.x + across / 2, self.y + up / 2


def segment_extents(points: Sequence[tuple[float, float]]) -> Iterator[tuple[float, float, float, float]]:
    """Give the ground that a line and its arrowhead cover.

    Parameters
    ----------
    points : sequence of (float, float)
        Ends and bends, mm.

    Yields
    ------
    (float, float, float, float)
        Left, bottom, right, top.
    """
    for (ax, ay), (bx, by) in zip(points, points[1:]):
        yield min(ax, bx) - CLEAR, min(ay, by) - CLEAR, max(ax, bx) + CLEAR, max(ay, by) + CLEAR
    (ax, ay), (bx, by) = points[-2:]
    cx = bx - HEAD * np.sign(bx - ax)
    cy = by - HEAD * np.sign(by - ay)
    half = 1.0
    yield ((min(bx, cx), by - half, max(bx, cx), by + half) if ay == by else (bx - half, min(by, cy), bx + half, max(by, cy)))


def places(label: Label, routes: Sequence[Sequence[tuple[float, float]]]) -> tuple[np.ndarray, np.ndarray, list[tuple]]:
    """List where a text may stand along its lines.

    Parameters
    ----------
    label : Label
    routes : sequence of sequence of (float, float)
        Ends and bends in mm.

    Returns
    -------
    extents : (n, 4)
        Left, bottom, right, top; mm.
    costs : (n,)
    spots : list of n (float, float, bool, (float, float, bool))
        Middle, whether turned, and mark.
    """
    extents, costs, spots = [], [], []

    def add(x: float, y: float, turned: bool, cost: float, mark: tuple[float, float, bool]) -> None:
        across, up = (label.height, label.width) if turned else (label.width, label.height)
        extents.append((x - across / 2, y - up / 2, x + across / 2, y + up / 2))
        costs.append(cost)
        spots.append((x, y, turned, mark))

    for points in routes:
        whole = sum(abs(a[0] - b[0]) + abs(a[1] - b[1]) for a, b in zip(points, points[1:]))
        run = 0.0
        for (ax, ay), (bx, by) in zip(points, points[1:]):
            long = abs(ax - bx) + abs(ay - by)
            upright = ax == bx
            for step in np.arange(1.0, long - 0.5, 1.0):
                share = step / long
                x, y = ax + (bx - ax) * share, ay + (by - ay) * share
                dull = 1.5 * abs((run + step) / whole - 0.5) - 0.004 * long  # near the middle, on long runs
                room = 2 * min(step, long - step)
                if not upright:
                    over = max(0.0, label.width - room) / label.width
                    if over < 0.75:
                        away = label.off + label.height / 2
                        add(x, y + away, False, dull + 4 * over, (x, y, False))
                        add(x, y - away, False, dull + 4 * over + 0.5, (x, y, False))
                elif room > 0.8 * label.height:
                    away = label.off + 0.3 + label.width / 2
                    add(x + away, y, False, dull + 1.5, (x, y, True))
                    add(x - away, y, False, dull + 2.0, (x, y, True))
                    if room > label.width:
                        away = label.off + label.height / 2
                        add(x - away, y, True, dull + 3.0, (x, y, True))
                        add(x + away, y, True, dull + 3.5, (x, y, True))
            run += long
    return np.array(extents).reshape(-1, 4), np.array(costs), spots


def meet(some: np.ndarray, others: np.ndarray, apart: float = 0.0) -> np.ndarray:
    """Tell which extents come nearer to each other than a distance.

    Parameters
    ----------
    some : (n, 4)
    others : (m, 4)
    apart : float
        mm.

    Returns
    -------
    (n, m) bool
    """
    a, b = some[:, None, :], others[None, :, :]
    return (
        (a[..., 0] < b[..., 2] + apart)
        & (a[..., 2] > b[..., 0] - apart)
        & (a[..., 1] < b[..., 3] + apart)
        & (a[..., 3] > b[..., 1] - apart)
    )


def place(
    labels: Sequence[Label],
    routes: Sequence[Sequence[Sequence[tuple[float, float]]]],
    boxes: np.ndarray,
    lines: np.ndarray,
    sheet: tuple[float, float, float, float],
    anyhow: bool = False,
) -> list[Label]:
    """Set every label where it touches nothing, those with the least choice first.

    Parameters
    ----------
    labels : sequence of Label
    routes : sequence of sequence of lines
        For each label, the lines beside which it may stand.
    boxes, lines : (n, 4)
        Extents that no text may touch.
    sheet : (float, float, float, float)
        Left, bottom, right, top of the free paper.
    anyhow : bool
        Whether a text may cover lines rather than find no place.

    Returns
    -------
    list of Label
        Those that found no place.
    """
    left, bottom, right, top = sheet
    choice: list[tuple[np.ndarray, np.ndarray, list[tuple]]] = []  # ground covered, costs, spots
    for label, own in zip(labels, routes):
        extents, costs, spots = places(label, own)
        inside = (extents[:, 0] > left) & (extents[:, 1] > bottom) & (extents[:, 2] < right) & (extents[:, 3] < top)
        covered = meet(extents, lines).sum(axis=1)
        free = inside & ~meet(extents, boxes, 0.5).any(axis=1) & (anyhow | (covered == 0))
        kept = np.flatnonzero(free)
        crowd = meet(extents[kept], lines, 1.0).sum(axis=1)  # its own line among them
        costs = costs[kept] + COVERED * covered[kept] + 1.2 * np.maximum(crowd - 1, 0)
        costs += 0.2 * meet(extents[kept], boxes, 1.5).sum(axis=1)
        order = np.argsort(costs, kind="stable")
        ground = extents[kept][order]
        spots = [spots[kept[number]] for number in order]
        if label.sort == "tear" and spots:  # other texts keep off its bars as well
            points = np.array([[x, y, x, y] for *_, (x, y, _) in spots])
            ground = np.where([True, True, False, False], np.minimum(ground, points - BARS), np.maximum(ground, points + BARS))
        choice.append((ground, costs[order], spots))
    taken: dict[int, int] = {}

    def rivals(number: int, skip: int = -1) -> np.ndarray:
        others = [item for item in taken if item not in (number, skip)]
        extents = choice[number][0]
        if not others:
            return np.zeros((len(extents), 0), dtype=bool)
        return meet(extents, np.array([choice[item][0][taken[item]] for item in others]), 0.4)

    lost = []
    for number in sorted(range(len(labels)), key=lambda item: (len(choice[item][1]), item)):
        free = np.flatnonzero(~rivals(number).any(axis=1))
        if len(free):
            taken[number] = int(free[0])
        elif not _push(number, choice, taken, rivals):
            lost.append(labels[number])
    for number, spot in taken.items():
        label = labels[number]
        label.x, label.y, label.turned, label.mark = choice[number][2][spot]
    return lost


def _push(number: int, choice: list, taken: dict[int, int], rivals) -> bool:
    """Find a place for a label by moving one that stands in its way."""
    others = [item for item in taken if item != number]
    hits = rivals(number)
    for spot in np.flatnonzero(hits.sum(axis=1) == 1):
        other = others[int(np.flatnonzero(hits[spot])[0])]
        free = ~rivals(other).any(axis=1)
        own = choice[number][0][spot : spot + 1]
        free &= ~meet(choice[other][0], own, 0.4)[:, 0]
        if free.any():
            taken[number] = int(spot)
            taken[other] = int(np.flatnonzero(free)[0])
            return True
    return False
