"""Bracketed roots of many cases at once."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

from leanloop.hydraulics.arrays import quiet

ROUNDS = 120
EPS = np.finfo(float).eps


@quiet
def bracketed(function: Callable[[np.ndarray], np.ndarray], low: Any, high: Any) -> np.ndarray:
    """Find the place between two ends where a function changes its sign, for all cases together.

    Inverse quadratic interpolation where it is safe, else the middle: T. R. Chandrupatla, Adv. Eng. Software 28
    (1997) 145, algorithm from memory.

    Parameters
    ----------
    function : callable
        Takes places and gives values, both of the shape of the cases.
    low, high : (...,)
        Ends; the function has opposite signs there.

    Returns
    -------
    (...,)
        To within rounding; NaN where the signs do not differ or a value is NaN.
    """
    low, high = np.broadcast_arrays(np.asarray(low, dtype=float), np.asarray(high, dtype=float))
    a, b = high.copy(), low.copy()
    fa, fb = np.asarray(function(a), dtype=float), np.asarray(function(b), dtype=float)
    a, b, fa, fb = (item.copy() for item in np.broadcast_arrays(a, b, fa, fb))
    good = np.sign(fa) * np.sign(fb) <= 0  # False with NaN
    c, fc = a.copy(), fa.copy()
    share = np.full(a.shape, 0.5)
    done = ~good
    for _ in range(ROUNDS):
        new = a + share * (b - a)
        value = np.asarray(function(new), dtype=float)
        same = np.sign(value) == np.sign(fa)
        # of the last three places, a is the newest, b is on the other side, c is the one left
        c, fc = np.where(done, c, np.where(same, a, b)), np.where(done, fc, np.where(same, fa, fb))
        b, fb = np.where(done | same, b, a), np.where(done | same, fb, fa)
        a, fa = np.where(done, a, new), np.where(done, fa, value)
        best = np.where(np.abs(fa) < np.abs(fb), a, b)
        least = 2 * EPS * np.abs(best) / np.abs(b - a)
        done = done | (fa == 0) | (fb == 0) | (least >= 0.5) | np.isnan(fa)
        if np.all(done):
            break
        across, height = (a - b) / (c - b), (fa - fb) / (fc - fb)
        safe = (height**2 < across) & ((1 - height) ** 2 < 1 - across)
        inverse = fa / (fb - fa) * fc / (fb - fc) + (c - a) / (b - a) * fa / (fc - fa) * fb / (fc - fb)
        share = np.where(safe & np.isfinite(inverse), inverse, 0.5)
        share = np.clip(share, np.minimum(least, 0.5), np.maximum(1 - least, 0.5))
    best = np.where(np.abs(fa) < np.abs(fb), a, b)
    return np.where(good & np.isfinite(fa), best, np.nan)[()]
