"""The limit of a sequence that halves or quarters its way to it."""

from __future__ import annotations

CHANGE = 1e-3  # relative: a doubling that changes less ends the sequence
STEADY = 0.6  # a step over the one before; above it nothing is extrapolated


def settled(old: float | None, new: float | None) -> bool:
    """Tell whether a doubling has changed a value by less than 1e-3; two that are missing have not changed."""
    if old is None or new is None:
        return old is new
    return old == new or abs(new - old) <= CHANGE * abs(new)


def limit(values: list[float]) -> float:
    """Give the limit of a sequence by Aitken's process from its last three values, where they close in steadily.

    Parameters
    ----------
    values : list of float
        One or more.

    Notes
    -----
    A. C. Aitken, Proc. R. Soc. Edinburgh 46 (1926) 289: with steps d1, d2 the limit is x - d2^2 / (d2 - d1). A rate at
    a tangent pinch closes in as the inverse square of the stages, a quarter of the step at each doubling.
    """
    last = values[-1]
    if len(values) < 3:
        return last
    first, second = values[-2] - values[-3], last - values[-2]
    if first == 0 or not 0 < second / first < STEADY:
        return last
    return last - second * second / (second - first)
