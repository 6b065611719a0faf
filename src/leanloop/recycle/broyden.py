"""Broyden's method: an inverse Jacobian that learns one direction a pass."""

from __future__ import annotations

import numpy as np

from leanloop.recycle.base import RecycleMethod, State, Trial


class Broyden(RecycleMethod):
    """x+ = x + H d, d = g - x, with H = I at first and H <- H - (s + H y) s'H / (s'H y), s and y the changes of x and d.

    x and d are divided by the first scale of each component. Not for loops of many unknowns that
    all act on one another: a linear loop of n unknowns may take 2 n + 1 passes, and Anderson's
    method n + 2.

    References
    ----------
    C. G. Broyden, Mathematics of Computation 19 (1965) 577-593, the first of his methods; D. M. Gay,
    SIAM Journal on Numerical Analysis 16 (1979) 623-630, for the 2 n steps.
    """

    name = "broyden"
    most_passes = 200

    def begin(self, x: np.ndarray) -> State:
        """Remember no pass, and the identity."""
        none = np.full(x.shape, np.nan)
        return {"x": none, "d": none, "scale": none, "inverse": np.tile(np.eye(x.shape[1]), (len(x), 1, 1))}

    def propose(self, trial: Trial, state: State) -> tuple[np.ndarray, State]:
        """Give the quasi-Newton step, or g in the cases that it takes out of bounds."""
        x, g, inverse = trial.x, trial.g, state["inverse"]
        scale = np.where(np.isnan(state["scale"]), trial.yardstick, state["scale"])  # H belongs to one scale
        with np.errstate(all="ignore"):
            d = g - x
            s, y = (x - state["x"]) / scale, (d - state["d"]) / scale
            turned = (inverse * y[:, None, :]).sum(axis=2)
            row = (s[:, :, None] * inverse).sum(axis=1)
            change = (s + turned)[:, :, None] * row[:, None, :] / (s * turned).sum(axis=1)[:, None, None]
            learnt = np.isfinite(change).all(axis=(1, 2))[:, None, None]
            inverse = inverse - np.where(learnt, change, 0.0)
            new = x + scale * (inverse * (d / scale)[:, None, :]).sum(axis=2)
            good = (np.isfinite(new) & (new >= trial.low)).all(axis=1)[:, None]
        return np.where(good, new, g), {"x": x, "d": d, "scale": scale, "inverse": inverse}
