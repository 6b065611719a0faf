"""Which of many designs to take: cost, Pareto set, knee."""

from __future__ import annotations

import numpy as np


def pareto(objectives: np.ndarray, good: np.ndarray) -> np.ndarray:
    """Tell which designs no other one betters in every objective.

    Parameters
    ----------
    objectives : (D, O)
        To be small.
    good : (D,) bool
        Designs that count.

    Returns
    -------
    (D,) bool
        Of designs that are the same in every objective, the first.
    """
    out = np.zeros(len(objectives), dtype=bool)
    rows = np.flatnonzero(good & np.isfinite(objectives).all(axis=1))
    if not len(rows):
        return out
    own = objectives[rows]
    order = np.lexsort(own.T[::-1])
    kept: list[int] = []
    for place in order:  # sorted by the first objective: only earlier ones can be better
        if not kept or not (own[kept] <= own[place]).all(axis=1).any():
            kept.append(int(place))
    out[rows[kept]] = True
    return out


def knee(objectives: np.ndarray, front: np.ndarray) -> int | None:
    """Give the design of a Pareto set that lies nearest to the best of every objective.

    Each objective counts from 0 at its best to 1 at its worst in the set; distances are Euclid's.

    Parameters
    ----------
    objectives : (D, O)
    front : (D,) bool

    Returns
    -------
    int or None
        None for an empty set.
    """
    rows = np.flatnonzero(front)
    if not len(rows):
        return None
    own = objectives[rows]
    low, span = own.min(axis=0), np.ptp(own, axis=0)
    scaled = (own - low) / np.where(span > 0, span, 1.0)
    return int(rows[np.argmin((scaled**2).sum(axis=1))])


def cheapest(cost: np.ndarray, good: np.ndarray) -> int | None:
    """Give the design that costs least; None where none has a cost.

    Parameters
    ----------
    cost : (D,)
    good : (D,) bool
    """
    own = np.where(good & np.isfinite(cost), cost, np.inf)
    return int(np.argmin(own)) if np.isfinite(own).any() else None
