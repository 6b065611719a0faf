"""How a batch of towers gets from its start to its answer where Newton's method alone does not: two safeguarded paths.

*Continuation.* With the gas flows of the heat-balanced stages held at those of the start, the equations are those of
constant molar overflow on equilibrium stages, which Newton's method solves from almost anywhere. The heat balances, and
what efficiencies lack of one, are then blended in, in steps that grow as long as they succeed.

*Filling.* The column is filled from a state in which every stage is as if it were the only one, by implicit Euler steps
of its own dynamics, whose length follows from how much a step changes.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

PLAIN, BLENDING, FILLING, WIDELY = 0, 1, 2, 4
FIRST, LONGEST, SHORTEST = 0.25, 0.5, 1e-3  # steps of the blend
TRIES = 15  # Newton steps at one blend
ON_PATH = 1e-2  # relative step at which the next blend is tried
MODERATE = 0.8  # change in a step of a filling that keeps the step's length
SHORTER, LONGER, LEAST_DRAG, MOST_DRAG = 0.25, 4.0, 1e-3, 1e3
WILD, RETURN = 2.0, 0.05  # change without a drag at which one is put on again, and its size


@dataclass
class Path:
    """Where each of M cases is on its way.

    Attributes
    ----------
    way : (M,) int
        `PLAIN`, `BLENDING`, `FILLING`, or `WIDELY` where what reboiler and condenser are run by is blended as well.
    tried : (M,) int
        How many attempts have been made.
    drag : (M,)
    blend, step : (M,)
        Part of the heat balances that is theirs, and by how much it is to grow.
    kept : (M, S, n)
        Unknowns at the last blend that was solved.
    reached : (M,)
        That blend; below zero where none was.
    tries : (M,) int
        Newton steps at the present blend, or in the present way.
    """

    way: np.ndarray
    tried: np.ndarray
    drag: np.ndarray
    blend: np.ndarray
    step: np.ndarray
    kept: np.ndarray
    reached: np.ndarray
    tries: np.ndarray

    @classmethod
    def of(cls, unknowns: np.ndarray) -> Path:
        """Begin with plain steps."""
        cases = len(unknowns)
        ones, zeros = np.ones(cases), np.zeros(cases, dtype=int)
        first, none = 0 * ones + FIRST, 0 * ones - 1.0
        return cls(zeros.copy(), zeros.copy(), 0 * ones, ones.copy(), first, unknowns.copy(), none, zeros.copy())

    def begin(self, cases: np.ndarray, way: int) -> None:
        """Send some cases on a way from its start."""
        self.way[cases], self.tries[cases] = way, 0
        self.tried[cases] += 1
        self.drag[cases] = 1.0 if way == FILLING else 0.0
        self.blend[cases] = 0.0 if way in (BLENDING, WIDELY) else 1.0
        self.step[cases], self.reached[cases] = FIRST, -1.0

    def advance(self, cases: np.ndarray, new: np.ndarray, size: np.ndarray, lost: np.ndarray) -> np.ndarray:
        """Move blends on, or back to the last that was solved.

        Parameters
        ----------
        cases : (m,) int
        new : (m, S, n)
            Unknowns after a step; those of cases that go back are overwritten.
        size : (m,)
            Relative size of the step.
        lost : (m,) bool
            Whether the step was no good.

        Returns
        -------
        (m,) bool
            Cases for which this way has ended without an answer.
        """
        self.tries[cases] += 1
        on = (self.way[cases] == BLENDING) | (self.way[cases] == WIDELY)
        done = on & (self.blend[cases] < 1.0) & (size <= ON_PATH) & ~lost
        if done.any():
            own = cases[done]
            self.kept[own], self.reached[own] = new[done], self.blend[own]
            self.step[own] = np.minimum(np.where(self.tries[own] <= 6, 2.0, 1.0) * self.step[own], LONGEST)
            self.blend[own] = np.minimum(self.blend[own] + self.step[own], 1.0)
            self.tries[own] = 0
        back = on & ~done & (lost | (self.tries[cases] > TRIES * np.where(self.reached[cases] < 0, 3, 1)))
        ended = back & ((self.reached[cases] < 0) | (self.step[cases] < SHORTEST))
        back &= ~ended
        if back.any():
            own = cases[back]
            new[back] = self.kept[own]
            self.step[own] *= 0.25
            self.blend[own] = np.minimum(self.reached[own] + self.step[own], 1.0)
            self.tries[own] = 0
        return ended

    def pace(self, cases: np.ndarray, moved: np.ndarray) -> None:
        """Set the drag of fillings by how much a step has changed."""
        drag = self.drag[cases]
        grown = drag * np.clip(moved / MODERATE, SHORTER, LONGER)
        grown = np.where(grown < LEAST_DRAG, 0.0, np.minimum(grown, MOST_DRAG))
        grown = np.where((drag == 0) & (moved > WILD), RETURN, grown)
        self.drag[cases] = np.where(self.way[cases] == FILLING, grown, 0.0)

    def underway(self, cases: np.ndarray) -> np.ndarray:
        """Tell which cases do not solve the equations as they are, (m,) bool."""
        return (self.drag[cases] > 0) | (self.blend[cases] < 1.0)
