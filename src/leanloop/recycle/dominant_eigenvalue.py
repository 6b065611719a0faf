"""The dominant-eigenvalue method: direct steps, then one to where their geometric series ends."""

from __future__ import annotations

import numpy as np

from leanloop.entries import Entry
from leanloop.recycle.base import RecycleMethod, State, Trial

PATIENCE = 10  # direct steps after which the long one is taken whatever else d holds


class DominantEigenvalue(RecycleMethod):
    """x+ = x + d / (1 - r) once r has settled over direct steps, with d = g - x and |r| = ||d|| / ||d a pass before||.

    r takes the sign of the product of the two d; the norms are weighed by the scale of each
    component. A long step raises the errors outside the slowest mode by 1 / (1 - r), which is why
    it waits for them to fade. Not for loops with two slow modes or an oscillating pair, nor for a
    bleed of 1e-4 and less with a close tolerance, where rounding in d blurs 1 - r.

    Parameters
    ----------
    direct_steps : int
        Least number of substitution steps before each long one.

    References
    ----------
    O. Orbach and C. M. Crowe, Canadian Journal of Chemical Engineering 49 (1971) 509-513.
    """

    name = "dominant_eigenvalue"
    most_passes = 2000
    entries = (Entry("direct_steps", "integer", least=2, cases=False, doc="substitutions before each long step, 6 by default"),)
    direct_steps = 6

    def begin(self, x: np.ndarray) -> State:
        """Remember no pass and no direct step."""
        return {"d": np.full(x.shape, np.nan), "steps": np.zeros(len(x), dtype=int)}

    def propose(self, trial: Trial, state: State) -> tuple[np.ndarray, State]:
        """Give g, or where the ratio has settled the long step in the components that it keeps in bounds."""
        x, g, steps = trial.x, trial.g, state["steps"]
        with np.errstate(all="ignore"):
            d = g - x
            now, before = d / trial.yardstick, state["d"] / trial.yardstick
            ratio = np.sqrt((now**2).sum(axis=1) / (before**2).sum(axis=1))
            ratio = np.copysign(ratio, (now * before).sum(axis=1))
            rest = np.sqrt(((now - ratio[:, None] * before) ** 2).sum(axis=1) / (now**2).sum(axis=1))
            settled = rest <= 1 - ratio  # what the long step makes of the rest is no greater than d
            due = (steps >= self.direct_steps) & settled | (steps >= max(self.direct_steps, PATIENCE))
            long = due & (ratio < 1)
            new = x + d / (1 - ratio)[:, None]
            good = long[:, None] & np.isfinite(new) & (new >= trial.low)
        return np.where(good, new, g), {"d": d, "steps": np.where(long, 0, steps + 1)}
