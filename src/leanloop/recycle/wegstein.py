"""Wegstein's method: a secant in each component by itself."""

from __future__ import annotations

from typing import Any

import numpy as np

from leanloop.entries import Entry
from leanloop.errors import Fault, InputError
from leanloop.recycle.base import RecycleMethod, State, Trial


class Wegstein(RecycleMethod):
    """x+ = q x + (1 - q) g in each component, q = s / (s - 1), s its slope between two passes; the first step is direct.

    Not for loops whose components act on one another strongly, nor, with the customary bounds
    -5 <= q <= 0, for slopes near 1, where a pass is worth six substitutions at most, or below -1,
    where q is cut to substitution and diverges; wider bounds are for loops with little interaction.

    Parameters
    ----------
    q_least, q_most : float
        Bounds of q; 0 is substitution, below it a longer step, from 0 to 1 a shorter one.

    References
    ----------
    J. H. Wegstein, Communications of the ACM 1 (1958) no. 6, 9-13: the iteration for one unknown.
    """

    name = "wegstein"
    most_passes = 2000
    entries = (
        Entry("q_least", cases=False, doc="least q, -5 by default"),
        Entry("q_most", cases=False, doc="greatest q, 0 by default"),
    )
    q_least = -5.0
    q_most = 0.0

    def __init__(self, **options: Any) -> None:
        super().__init__(**options)
        if self.q_least > self.q_most:
            problem = f"q_least {self.q_least:g} is above q_most {self.q_most:g}"
            raise InputError([Fault("loop.q_least", problem, "write the smaller bound as q_least")])

    def begin(self, x: np.ndarray) -> State:
        """Remember no pass: x and g of the last one are NaN."""
        return {"x": np.full(x.shape, np.nan), "g": np.full(x.shape, np.nan)}

    def propose(self, trial: Trial, state: State) -> tuple[np.ndarray, State]:
        """Give the secant step of each component, or g where there is none inside the bounds."""
        x, g = trial.x, trial.g
        with np.errstate(all="ignore"):
            slope = (g - state["g"]) / (x - state["x"])
            q = slope / (slope - 1)
            q = np.where(np.isfinite(q), np.clip(q, self.q_least, self.q_most), 0.0)
            new = g + q * (x - g)
            good = np.isfinite(new) & (new >= trial.low)
        return np.where(good, new, g), {"x": x, "g": g}
