"""The window of a closed pair by solves of the whole flowsheet: its edges as the stages of both columns double.

A requirement is met in a range of circulations that widens with the stages. A first look over a wide range of
circulations finds it, each edge is divided to 1e-5, and the stages double until an edge moves by less than 1e-3.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from leanloop.pinch.required import Asked
from leanloop.pinch.sequence import limit, settled
from leanloop.pinch.trials import Trials

WIDE = np.geomspace(1 / 40, 40, 49)
PARTS, ROUNDS = 9, 4
DOUBLINGS = 3  # with heat, efficiencies or side streams, where each solve takes long
MOST_STAGES = 4096  # of the taller column
MET = 1e-9


@dataclass(frozen=True)
class Found:
    """Edges as factors on the flow as it is; None where there is none."""

    least: float | None
    most: float | None
    best: tuple[float, float] | None
    why: str | None = None


class Search:
    """Edges of what meets a requirement.

    Parameters
    ----------
    trials : Trials
    asked : Asked
    """

    def __init__(self, trials: Trials, asked: Asked) -> None:
        self.trials, self.asked = trials, asked
        tallest = max(trials.stages.values())
        plain = all(trials.case.plan.units[name].inner is None for name in trials.stages)
        powers = range(1, 12) if plain else range(1, DOUBLINGS + 1)
        self.times = [2**power for power in powers if not plain or tallest * 2**power <= MOST_STAGES or power == 1]
        self.rounds = ROUNDS if plain else ROUNDS - 1

    def _misses(self, hold: np.ndarray, steam: np.ndarray | None, times: int) -> np.ndarray:
        """Give by how much the outlet is dirtier than asked, (R,); above zero misses, not solved misses most."""
        found = self.trials.values(self.asked.quantity, hold, steam, times)
        over = self.asked.sign * (found - self.asked.target) - MET * abs(self.asked.target)
        return np.where(np.isnan(over), np.inf, over)

    def _divide(self, inside: float, outside: float, steam: bool, times: int) -> float:
        """Bring together a factor that meets and one that misses; the one that meets is given."""
        for _ in range(self.rounds):
            trials = inside * (outside / inside) ** (np.arange(1, PARTS) / PARTS)
            over = self._misses(*self._factors(trials, steam), times)
            missed = np.flatnonzero(over > 0)
            first = int(missed[0]) if missed.size else PARTS - 1
            ladder = [inside, *trials, outside]
            inside, outside = ladder[first], ladder[first + 1]
        return float(inside)

    @staticmethod
    def _factors(values: np.ndarray, steam: bool) -> tuple[np.ndarray, np.ndarray | None]:
        return (np.ones_like(values), values) if steam else (values, None)

    def _edge(self, start: float, way: int, steam: bool, times: int) -> float | None:
        """Go outwards from a factor that meets until one misses, then divide; None where none misses."""
        reach = np.array([1.05, 1.3, 2.0, 4.0, 10.0, 40.0]) ** way
        over = self._misses(*self._factors(start * reach, steam), times)
        missed = np.flatnonzero(over > 0)
        if not missed.size:
            return None
        first = int(missed[0])
        return self._divide(start if first == 0 else float(start * reach[first - 1]), float(start * reach[first]), steam, times)

    def _lowest(self, times: int) -> tuple[float, float]:
        """Give the circulation with the cleanest gas, and by how much that misses."""
        grid = WIDE
        for _ in range(3):
            over = self._misses(grid, None, times)
            at = int(np.argmin(over))
            factor, miss = float(grid[at]), float(over[at])
            if miss <= 0:
                break
            grid = np.geomspace(grid[max(at - 1, 0)], grid[min(at + 1, len(grid) - 1)], 13)
        return factor, miss

    def window(self) -> Found:
        """Give the least and the most circulation."""
        history: list[tuple[float | None, float | None]] = []
        best: float | None = None
        lowest = None
        for times in self.times:
            if best is None:
                factor, miss = self._lowest(times)
                reached = self.asked.target + self.asked.sign * (miss + MET * abs(self.asked.target))
                if miss > 0:
                    if lowest is not None and settled(lowest[1], reached):
                        break
                    lowest = (factor, reached)
                    continue
                best, lowest = factor, (factor, reached)
            last = history[-1] if history else (None, None)
            history.append(
                tuple(
                    self._edge(best if last[side] is None else last[side], way, False, times) for side, way in ((0, -1), (1, 1))
                )
            )
            if len(history) > 1 and all(settled(old, new) for old, new in zip(last, history[-1], strict=True)):
                return Found(*_limits(history), lowest, _missing(history[-1]))
        if best is None:
            factor, reached = lowest
            return Found(
                None,
                None,
                lowest,
                f"the window is empty: however many stages, {self.asked.address} comes to {reached:.5g} at best, at "
                f"{3.6 * factor * self.trials.circulation:.5g} kmol/h, against the {self.asked.target:.5g} asked for; more "
                "stripping gas, a hotter stripper or a colder absorber would open it",
            )
        unsettled = f"with {self.times[-1]} times the stages the window still moves by more than 1e-3"
        return Found(*_limits(history), lowest, _missing(history[-1]) or unsettled)

    def least_steam(self) -> tuple[float | None, str | None]:
        """Give the least stripping gas as a factor on the flow as it is, and why there is none."""
        history: list[float] = []
        for times in self.times:
            start = history[-1] if history else None
            if start is None:
                tried = np.array([1.0, 1.5, 3.0, 10.0, 100.0, 1e3, 1e4])
                over = self._misses(*self._factors(tried, True), times)
                met = np.flatnonzero(over <= 0)
                if not met.size:
                    continue
                start = float(tried[met[0]])
            edge = self._edge(start, -1, True, times)
            if edge is None:
                return None, "there is no least stripping gas: the outlet is met with a fortieth of it and less"
            history.append(edge)
            if len(history) > 1 and settled(*history[-2:]):
                return limit(history), None
        if not history:
            return None, "no stripping gas suffices at this circulation, however many stages"
        return limit(history), f"with {self.times[-1]} times the stages the least stripping gas still moves by more than 1e-3"


def _limits(history: list[tuple[float | None, float | None]]) -> tuple[float | None, float | None]:
    """Give the limit of each edge; one that is missing at last is none."""
    out = []
    for side in (0, 1):
        own = [edges[side] for edges in history]
        found = own[max((place + 1 for place, value in enumerate(own) if value is None), default=0) :]
        out.append(limit(found) if found else None)
    return tuple(out)


def _missing(edges: tuple[float | None, float | None]) -> str | None:
    if edges[0] is None:
        return "there is no least circulation: the outlet is met with a fortieth of it and less"
    if edges[1] is None:
        return "there is no most circulation: the stripping gas is enough for forty times as much"
    return None
