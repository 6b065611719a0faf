"""Sections of a column: what lies between the stages at which streams enter or leave."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

SIDES = ("side_feeds", "side_draws")


def edges(numbers: Mapping[str, Any]) -> tuple[int, ...]:
    """Give the first row of each section, the top one's 0.

    A stream at stage j changes what runs down from it and what rises into it, which is row j and those below.

    Parameters
    ----------
    numbers : mapping of str to number
        Of the column, by local name.

    Returns
    -------
    tuple of int
    """
    stages = {
        int(value) for key, value in numbers.items() if key.startswith(SIDES) and key.endswith(".stage") and np.ndim(value) == 0
    }
    return (0, *sorted(stages))


def worst(values: np.ndarray, first: tuple[int, ...]) -> np.ndarray:
    """Give the largest value of each section.

    Parameters
    ----------
    values : (M, S)
        By row.
    first : tuple of K int
        First row of each section.

    Returns
    -------
    (M, K)
        NaN where a section has no row that is known.
    """
    ends = (*first[1:], values.shape[1])
    known = np.where(np.isfinite(values), values, -np.inf)
    out = np.stack([known[:, low:high].max(axis=1, initial=-np.inf) for low, high in zip(first, ends, strict=True)], axis=1)
    return np.where(np.isfinite(out), out, np.nan)
