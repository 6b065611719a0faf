"""Newton's method on the tear vector, with the derivatives chained along the calculation order."""

from __future__ import annotations

import numpy as np

from leanloop.recycle.base import RecycleMethod, State, Trial
from leanloop.recycle.linear import newton_step

WORSE = 4.0  # a pass that raises the error by more than this is followed by a substitution
SHRINK = 0.1  # a bounded component falls to no less than this part of itself in one step


class Newton(RecycleMethod):
    """(I - dg/dx) (x+ - x) = g - x, with substitution where a step has made things worse."""

    name = "newton"
    needs_jacobian = True

    def begin(self, x: np.ndarray) -> State:
        """Remember the least error so far."""
        return {"best": np.full(len(x), np.inf)}

    def propose(self, trial: Trial, state: State) -> tuple[np.ndarray, State]:
        """Give the Newton step, kept inside the bounds."""
        step = newton_step(trial.jacobian, trial.g - trial.x)
        low = np.where(np.isfinite(trial.low), trial.low, trial.x)
        bound = np.where(np.isfinite(trial.low), low + SHRINK * (trial.x - low), -np.inf)
        new = np.maximum(trial.x + step, bound)
        lost = ~np.isfinite(new).all(axis=1) | (trial.error > WORSE * state["best"])
        new[lost] = trial.g[lost]
        return new, {"best": np.minimum(state["best"], trial.error)}
