"""The dominant-eigenvalue method: direct steps, then one to where their geometric series ends."""

from __future__ import annotations

import numpy as np

from leanloop.entries import Entry
from leanloop.recycle.base import RecycleMethod, State, Trial


class DominantEigenvalue(RecycleMethod):
    """x+ = x + d / (1 - r) after some direct steps, d = g - x, |r| = ||d|| / ||d of the pass before||.

    r takes the sign of the product of the two d; the norms are weighed by the scale of each
    component. Not for loops with two slow modes or an oscillating pair, where r does not settle.

    Parameters
    ----------
    direct_steps : int
        Substitution steps before each long one.

    References
    ----------
    O. Orbach and C. M. Crowe, Canadian Journal of Chemical Engineering 49 (1971) 509-513.
    """

    name = "dominant_eigenvalue"
    most_passes = 2000
    entries = (Entry("direct_steps", "integer", least=1, cases=False, doc="substitutions before each long step, 2 by default"),)
    direct_steps = 2

    def begin(self, x: np.ndarray) -> State:
        """Remember no pass and no direct step."""
        return {"d": np.full(x.shape, np.nan), "steps": np.zeros(len(x), dtype=int)}

    def propose(self, trial: Trial, state: State) -> tuple[np.ndarray, State]:
        """Give g, or the long step where enough direct ones have gone before and it stays in bounds."""
        x, g, steps = trial.x, trial.g, state["steps"]
        with np.errstate(all="ignore"):
            d = g - x
            now, before = d / trial.scale, state["d"] / trial.scale
            ratio = np.sqrt((now**2).sum(axis=1) / (before**2).sum(axis=1))
            ratio = np.copysign(ratio, (now * before).sum(axis=1))
            long = (steps >= self.direct_steps) & (ratio < 1)
            new = x + d / (1 - ratio)[:, None]
            good = long[:, None] & np.isfinite(new) & (new >= trial.low)
        return np.where(good, new, g), {"d": d, "steps": np.where(long, 0, steps + 1)}
