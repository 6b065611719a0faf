"""The one loop that runs every recycle method and alone judges convergence."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from leanloop.recycle.base import RecycleMethod, Trial

ROUNDING = 16 * np.finfo(float).eps


@dataclass(frozen=True)
class Pass:
    """What one pass over some cases gives the driver.

    Parameters
    ----------
    g : (m, n)
    jacobian : (m, n, n) or None
    scale : (m, n)
        Scale of each component; a difference of tolerance times scale is allowed.
    good : (m,) bool
        False where a unit has failed.
    """

    g: np.ndarray
    jacobian: np.ndarray | None
    scale: np.ndarray
    good: np.ndarray


@dataclass
class Outcome:
    """How M cases ended.

    Attributes
    ----------
    converged, failed : (M,) bool
        Neither of them: the pass limit.
    passes : (M,) int
    error : (M,)
        At the last pass, in the measure of the tolerance.
    history : list of (M,)
        Error by pass, NaN where a case was done before.
    """

    converged: np.ndarray
    failed: np.ndarray
    passes: np.ndarray
    error: np.ndarray
    history: list[np.ndarray]


def close(
    evaluate: Callable[[np.ndarray, np.ndarray], Pass],
    settle: Callable[[np.ndarray, np.ndarray, np.ndarray, Pass], None],
    x: np.ndarray,
    low: np.ndarray,
    high: np.ndarray,
    method: RecycleMethod,
    tolerance: float,
    limit: int,
) -> Outcome:
    """Iterate x = g(x) for M cases until each is converged by its own scale, or given up.

    Parameters
    ----------
    evaluate : callable
        ``evaluate(cases, x)`` makes one pass for the cases with those numbers, x (m, n).
    settle : callable
        ``settle(cases, rows, x, pass)`` is called once for each case when it is done: the case
        numbers, their rows in the last pass, and x of that pass.
    x : (M, n)
        Start.
    low : (n,)
        Lower bounds, -inf for none.
    high : (M, n)
        Upper bounds, inf for none; what a method proposes is kept below them.
    method : RecycleMethod
    tolerance : float
    limit : int
        Most passes.

    Returns
    -------
    Outcome
    """
    count = len(x)
    cases = np.arange(count)
    outcome = Outcome(
        np.zeros(count, dtype=bool), np.zeros(count, dtype=bool), np.zeros(count, dtype=int), np.full(count, np.nan), []
    )
    state = method.begin(x)
    while len(cases):
        now = evaluate(cases, x)
        number = len(outcome.history) + 1
        with np.errstate(invalid="ignore", over="ignore", divide="ignore"):
            scale = now.scale + ROUNDING * np.abs(x) / tolerance
            error = np.where(now.g == x, 0.0, np.abs(now.g - x) / scale).max(axis=1, initial=0.0)
        outcome.passes[cases], outcome.error[cases] = number, error
        line = np.full(count, np.nan)
        line[cases] = error
        outcome.history.append(line)
        failed = ~now.good | ~np.isfinite(error)
        converged = ~failed & (error <= tolerance)
        outcome.converged[cases], outcome.failed[cases] = converged, failed
        done = converged | failed | (number >= limit)
        if done.any():
            rows = np.flatnonzero(done)
            settle(cases[rows], rows, x[rows], now)
        if done.all():
            break
        on = ~done
        trial = Trial(x[on], now.g[on], None if now.jacobian is None else now.jacobian[on], error[on], scale[on], low)
        state = {key: value[on] for key, value in state.items()}
        cases = cases[on]
        x, state = method.propose(trial, state)
        x = np.minimum(x, high[cases])
    return outcome
