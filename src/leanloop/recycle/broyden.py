"""Broyden."""

from __future__ import annotations

import numpy as np

from leanloop.recycle.base import RecycleMethod, State, Trial


class Broyden(RecycleMethod):
    name = "broyden"
    most_passes = 200

    def begin(self, x: np.ndarray) -> State:
        n = x.shape[1]
        return {"x": np.full(x.shape, np.nan), "d": np.full(x.shape, np.nan), "inverse": np.tile(np.eye(n), (len(x), 1, 1))}

    def propose(self, trial: Trial, state: State) -> tuple[np.ndarray, State]:
        x, g = trial.x, trial.g
        with np.errstate(all="ignore"):
            d = g - x
            dx, df, H = (x - state["x"]) / trial.scale, (state["d"] - d) / trial.scale, state["inverse"]
            Hdf = (H * df[:, None, :]).sum(axis=2)
            dxH = (dx[:, :, None] * H).sum(axis=1)
            new_H = H + ((dx - Hdf)[:, :, None] * dxH[:, None, :]) / (dx * Hdf).sum(axis=1)[:, None, None]
            H = np.where(np.isfinite(new_H).all(axis=(1, 2))[:, None, None], new_H, H)
            new = x + trial.scale * (H * (d / trial.scale)[:, None, :]).sum(axis=2)
            good = np.isfinite(new) & (new >= trial.low)
        return np.where(good, new, g), {"x": x, "d": d, "inverse": H}
