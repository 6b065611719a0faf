"""The general dominant-eigenvalue method of order 2: two slow modes at once, real or oscillating."""

from __future__ import annotations

import numpy as np

from leanloop.entries import Entry
from leanloop.recycle.anderson import fitted
from leanloop.recycle.base import RecycleMethod, State, Trial


class GeneralDominantEigenvalue(RecycleMethod):
    """x+ = (g + mu_1 g_1 + mu_2 g_2) / (1 + mu_1 + mu_2) after some direct steps, mu = argmin ||d + mu_1 d_1 + mu_2 d_2||.

    References
    ----------
    C. M. Crowe and M. Nishio, AIChE Journal 21 (1975) 528-533.
    """

    name = "general_dominant_eigenvalue"
    most_passes = 500
    entries = (Entry("direct_steps", "integer", least=2, cases=False, doc="substitutions before each long step, 2 by default"),)
    direct_steps = 2

    def begin(self, x: np.ndarray) -> State:
        none = np.full((len(x), 2, x.shape[1]), np.nan)
        return {"d": none, "g": none, "steps": np.zeros(len(x), dtype=int)}

    def propose(self, trial: Trial, state: State) -> tuple[np.ndarray, State]:
        x, g, steps = trial.x, trial.g, state["steps"]
        with np.errstate(all="ignore"):
            d = g - x
            partners = np.concatenate([state["g"], np.ones((len(x), 2, 1))], axis=2)
            sums = fitted(d / trial.scale, state["d"] / trial.scale[:, None], partners)
            new = (g - sums[:, :-1]) / (1 - sums[:, -1:])
            long = steps >= self.direct_steps
            good = long[:, None] & np.isfinite(new) & (new >= trial.low)
        keep = {key: np.stack([now, state[key][:, 0]], axis=1) for key, now in (("d", d), ("g", g))}
        return np.where(good, new, g), {**keep, "steps": np.where(long, 0, steps + 1)}
