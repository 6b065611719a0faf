"""Orthogonal routes of streams on a grid, without two streams on one track.

Each stream takes the cheapest path under costs for length, bends and crossings (Lee, IRE Trans. Electron. Comput. 10,
1961, 346, with the estimate of Hart, Nilsson and Raphael, 1968); routed streams are then taken up and laid again
while that makes them cheaper.
"""

from __future__ import annotations

import heapq
from collections.abc import Sequence
from dataclasses import dataclass, field

BEND, CROSSING, BESIDE, NEAR_BOX = 4.0, 9.0, 0.5, 0.8  # in steps of the grid
STEPS = ((1, 0), (0, 1), (-1, 0), (0, -1))  # right, down, left, up
FAR = 1e30
TURNS = 2  # times all streams are laid again


@dataclass(frozen=True)
class Port:
    """A point on the edge of a box where a stream may end.

    Parameters
    ----------
    x, y : int
        Grid point; y counts downwards.
    way : int
        Outward direction: 0 right, 1 down, 2 left, 3 up.
    cost : float
        What it costs to use it.
    """

    x: int
    y: int
    way: int
    cost: float = 0.0


@dataclass
class Wire:
    """A stream to route.

    Attributes
    ----------
    name : str
    starts, ends : sequence of Port
        Where it may begin and end.
    path : list of (int, int)
        Grid points one step apart once it is routed.
    cost : float
    """

    name: str
    starts: Sequence[Port]
    ends: Sequence[Port]
    path: list[tuple[int, int]] = field(default_factory=list)
    cost: float = 0.0

    def corners(self) -> list[tuple[int, int]]:
        """Give the two ends and the bends."""
        path = self.path
        kept = [path[0]]
        for before, here, after in zip(path, path[1:], path[2:]):
            if (here[0] - before[0], here[1] - before[1]) != (after[0] - here[0], after[1] - here[1]):
                kept.append(here)
        return [*kept, path[-1]]


class Router:
    """Grid of tracks around boxes.

    Parameters
    ----------
    width, height : int
        Steps of the grid in each direction.
    boxes : sequence of (int, int, int, int)
        Left, top, right, bottom; no stream enters them.
    spread : int
        How much streams keep apart, where they can: more where names found no room between them.
    """

    def __init__(self, width: int, height: int, boxes: Sequence[tuple[int, int, int, int]], spread: int = 0) -> None:
        self.beside, self.reach = BESIDE * (1 + 3 * spread), 1 + min(spread, 2)
        self.across, self.down = width + 1, height + 1
        size = self.across * self.down
        self.solid = bytearray(size)
        self.dear = [0.0] * size
        # along x, along y; longer than the sheet, so that one may look beside its last row
        self.used = (bytearray(size + 4 * self.across), bytearray(size + 4 * self.across))
        for left, top, right, bottom in boxes:
            for y in range(top - 1, bottom + 2):
                for x in range(left - 1, right + 2):
                    if 0 <= x <= width and 0 <= y <= height:
                        self.dear[y * self.across + x] = NEAR_BOX
            for y in range(top, bottom + 1):
                self.solid[y * self.across + left : y * self.across + right + 1] = b"\1" * (right - left + 1)
        for x in range(self.across):  # the rim keeps searches on the sheet
            self.solid[x] = self.solid[size - 1 - x] = 1
        for y in range(self.down):
            self.solid[y * self.across] = self.solid[y * self.across + width] = 1

    def route(self, wires: Sequence[Wire]) -> list[Wire]:
        """Lay all streams, short ones first, then each again among the others.

        Parameters
        ----------
        wires : sequence of Wire
            Their paths are set.

        Returns
        -------
        list of Wire
            Those that found no way.
        """
        queue = sorted(wires, key=lambda wire: (len(wire.starts) + len(wire.ends) > 3, _apart(wire)))
        lost = [wire for wire in queue if not self._lay(wire)]
        for _ in range(3):
            if not lost:
                break
            # those without a way go first, those in their way after them
            for wire in queue:
                self._mark(wire, 0)
            queue = lost + [wire for wire in queue if wire not in lost]
            lost = [wire for wire in queue if not self._lay(wire)]
        for _ in range(TURNS if not lost else 0):
            changed = False
            for wire in sorted(queue, key=lambda item: -item.cost):
                if wire.cost <= _apart(wire) + 1.0:
                    continue
                self._mark(wire, 0)
                path, cost = wire.path, wire.cost
                if not self._lay(wire) or wire.cost > cost - 1e-9 and wire.path != path:
                    self._mark(wire, 0)
                    wire.path, wire.cost = path, cost
                    self._mark(wire, 1)
                changed = changed or wire.path != path
            if not changed:
                break
        return lost

    def _mark(self, wire: Wire, value: int) -> None:
        along, up = self.used
        path = wire.path
        for number, (x, y) in enumerate(path):
            before, after = path[max(number - 1, 0)], path[min(number + 1, len(path) - 1)]
            point = y * self.across + x
            end = number in (0, len(path) - 1)
            if end or before[1] == y == after[1] or before[0] != after[0]:
                along[point] = value
            if end or before[0] == x == after[0] or before[1] != after[1]:
                up[point] = value

    def _lay(self, wire: Wire) -> bool:
        """Search the cheapest path; a state is a point and the direction in which it was entered."""
        across, solid, dear, used = self.across, self.solid, self.dear, self.used
        beside, reach = self.beside, self.reach
        moves = (1, across, -1, -across)
        goals = {port.y * across + port.x: ((port.way + 2) % 4, port.cost) for port in wire.ends}
        xs, ys = [port.x for port in wire.ends], [port.y for port in wire.ends]
        left, right, top, bottom = min(xs), max(xs), min(ys), max(ys)
        best = [FAR] * (4 * len(solid))
        origin = [-1] * (4 * len(solid))
        first = set()
        heap: list[tuple[float, float, int]] = []

        def left_over(point: int) -> float:
            y, x = divmod(point, across)
            along = left - x if x < left else x - right if x > right else 0
            up = top - y if y < top else y - bottom if y > bottom else 0
            return along + up + BEND if along and up else along + up

        for port in wire.starts:
            point = port.y * across + port.x
            if not used[0][point] and not used[1][point]:
                state = point * 4 + port.way
                best[state] = port.cost
                first.add(state)
                heapq.heappush(heap, (port.cost + left_over(point), port.cost, state))
        while heap:
            _, cost, state = heapq.heappop(heap)
            if cost > best[state]:
                continue
            point, way = divmod(state, 4)
            if point in goals and state not in first:
                wire.cost = cost
                wire.path = []
                while state >= 0:
                    y, x = divmod(state >> 2, across)
                    wire.path.append((x, y))
                    state = origin[state]
                wire.path.reverse()
                self._mark(wire, 1)
                return True
            bends = state not in first and not used[0][point] and not used[1][point]
            for turn in (way, (way + 1) % 4, (way + 3) % 4) if bends else (way,):
                new = point + moves[turn]
                goal = goals.get(new)
                if goal is not None:
                    if goal[0] != turn or used[0][new] or used[1][new]:
                        continue
                    step = 1.0 + goal[1]
                elif solid[new]:
                    continue
                else:
                    lane, other = used[turn & 1], used[1 - (turn & 1)]
                    if lane[new]:
                        continue
                    side = across if turn & 1 == 0 else 1
                    step = 1.0 + dear[new]
                    if other[new]:
                        step += CROSSING
                    for off in range(side, side * (reach + 1), side):
                        if lane[new + off] or lane[new - off]:
                            step += beside
                if turn != way:
                    step += BEND
                following = new * 4 + turn
                total = cost + step
                if total < best[following] - 1e-9:
                    best[following] = total
                    origin[following] = state
                    heapq.heappush(heap, (total + left_over(new), total, following))
        wire.path, wire.cost = [], 0.0
        return False


def _apart(wire: Wire) -> float:
    """Give the least distance between the two ends of a stream."""
    return min(abs(a.x - b.x) + abs(a.y - b.y) for a in wire.starts for b in wire.ends)
