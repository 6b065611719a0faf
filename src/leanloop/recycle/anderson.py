"""Anderson's method: the combination of the last passes that leaves the least residual."""

from __future__ import annotations

import numpy as np

from leanloop.entries import Entry
from leanloop.recycle.base import RecycleMethod, State, Trial

CUT = 1e-10  # a column that repeats newer ones to within this part of itself is left out


class Anderson(RecycleMethod):
    """x+ = g - (dX + dD) gamma with gamma = argmin ||d - dD gamma||, where d = g - x and dX, dD are the last differences.

    Residuals are weighed by the scale of each component. Not for loops so large that n passes are
    worth more than n derivatives, nor where g jumps; a loop of n linear unknowns takes n + 2 passes
    where depth >= n.

    Parameters
    ----------
    depth : int
        Differences kept.

    References
    ----------
    D. G. Anderson, Journal of the ACM 12 (1965) 547-560, equations 4.1 to 4.4 with all beta = 1.
    """

    name = "anderson"
    most_passes = 200
    entries = (Entry("depth", "integer", least=1, most=50, cases=False, doc="differences kept, 5 by default"),)
    depth = 5

    def begin(self, x: np.ndarray) -> State:
        """Remember no pass and no difference."""
        none, columns = np.full(x.shape, np.nan), np.zeros((len(x), self.depth, x.shape[1]))
        return {"d": none, "g": none, "dd": columns, "dg": columns}

    def propose(self, trial: Trial, state: State) -> tuple[np.ndarray, State]:
        """Give the combination, or g in the components that it takes out of bounds."""
        g = trial.g
        with np.errstate(all="ignore"):
            d = g - trial.x
            dd, dg = (
                np.concatenate([(now - state[key])[:, None], state["d" + key][:, :-1]], axis=1)
                for key, now in (("d", d), ("g", g))
            )
            fresh = np.isfinite(state["g"]).all(axis=1)[:, None]
            dd[:, 0], dg[:, 0] = np.where(fresh, dd[:, 0], 0.0), np.where(fresh, dg[:, 0], 0.0)
            new = g - fitted(d / trial.yardstick, dd / trial.yardstick[:, None], dg)
            good = np.isfinite(new) & (new >= trial.low)
        return np.where(good, new, g), {"d": d, "g": g, "dd": dd, "dg": dg}


def fitted(aim: np.ndarray, columns: np.ndarray, partners: np.ndarray) -> np.ndarray:
    """Give partners @ gamma, where gamma = argmin ||aim - columns @ gamma||, case by case.

    The columns are made orthogonal one after another (modified Gram-Schmidt), their partners with
    them; one that repeats earlier ones is left out, so that the first, newest ones count.

    Parameters
    ----------
    aim : (m, n)
    columns : (m, k, n)
    partners : (m, k, p)

    Returns
    -------
    (m, p)
    """
    columns, partners = columns.copy(), partners.copy()
    whole = np.sqrt((columns**2).sum(axis=2))
    total = np.zeros((len(aim), partners.shape[2]))
    for k in range(columns.shape[1]):
        length = np.sqrt((columns[:, k] ** 2).sum(axis=1))
        kept = np.isfinite(length) & (length > CUT * whole[:, k])
        length = np.where(kept, length, np.inf)[:, None]
        unit, partner = (np.where(kept[:, None], array[:, k] / length, 0.0) for array in (columns, partners))
        share = (aim * unit).sum(axis=1)[:, None]
        aim, total = aim - share * unit, total + share * partner
        shares = (columns[:, k + 1 :] * unit[:, None]).sum(axis=2)[..., None]
        columns[:, k + 1 :] -= shares * unit[:, None]
        partners[:, k + 1 :] -= shares * partner[:, None]
    return total
