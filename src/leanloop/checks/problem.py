"""A recycle problem with a known answer, and single passes at which steps are undefined."""

from __future__ import annotations

from typing import Any

import numpy as np

from leanloop.recycle.base import RecycleMethod, Trial
from leanloop.recycle.driver import Outcome, Pass, close

TOLERANCE = 1e-10
COUNT = 3  # unknowns
CASES = 5


class Problem:
    """x = g(x) for some of five cases, each a contraction with a little curvature and a known answer.

    Parameters
    ----------
    method : RecycleMethod
    cases : sequence of int
        Which of the five.
    spoilt : int or None
        Number of the case that gives NaN from the second pass on.

    Attributes
    ----------
    answer, x : (m, n)
        The known one, and the last x of each case.
    calls : (m,) int
        Evaluations of each case.
    proposed : list of (m, n)
    """

    def __init__(self, method: RecycleMethod, cases: Any = range(CASES), spoilt: int | None = None) -> None:
        self.method, self.which, self.spoilt = method, np.asarray(cases), spoilt
        every = np.arange(CASES)[:, None] + 0.37 * np.arange(COUNT)
        self.answer = (1.0 + 0.9 * np.cos(2.0 * every))[self.which]  # some of them near the bound, zero
        pull = np.array([[0.5, 0.03, 0.0], [0.05, 0.3, 0.02], [0.0, 0.04, 0.45]])
        self.pull = (pull * (1 + 0.1 * np.sin(np.arange(CASES)))[:, None, None])[self.which]
        self.start = (3.0 + np.cos(5.0 * every))[self.which]
        self.x = np.full(self.start.shape, np.nan)
        self.calls = np.zeros(len(self.which), dtype=int)
        self.proposed: list[np.ndarray] = []

    def evaluate(self, cases: np.ndarray, x: np.ndarray) -> Pass:
        """Make one pass."""
        self.calls[cases] += 1
        if self.calls.max() > 1:
            self.proposed.append(x.copy())
        away = x - self.answer[cases]
        bent = np.tanh(away)
        g = self.answer[cases] + np.einsum("mij,mj->mi", self.pull[cases], 0.8 * away + 0.2 * bent)
        jacobian = self.pull[cases] * (0.8 + 0.2 * (1 - bent**2))[:, None, :]
        g[(self.which[cases] == self.spoilt) & (self.calls[cases] > 1)] = np.nan
        return Pass(g, jacobian if self.method.needs_jacobian else None, np.ones_like(x), np.ones(len(x), dtype=bool))

    def settle(self, cases: np.ndarray, rows: np.ndarray, x: np.ndarray, now: Pass) -> None:
        """Keep the last x."""
        self.x[cases] = x

    def run(self, start: np.ndarray | None = None, limit: int | None = None) -> Outcome:
        """Close it."""
        x = (self.start if start is None else start).copy()
        low, high = np.zeros(COUNT), np.full(x.shape, np.inf)
        return close(self.evaluate, self.settle, x, low, high, self.method, TOLERANCE, limit or self.method.most_passes)


def trials(method: RecycleMethod) -> list[Trial]:
    """Give trials of two cases in which steps are undefined: stalled, singular, leaping, and empty components."""
    x = np.linspace(1.0, 2.0, 2 * COUNT).reshape(2, COUNT)
    unit = np.tile(np.eye(COUNT), (2, 1, 1))
    empty = np.where(np.arange(COUNT) == 1, 0.0, x)
    found = []
    for at, g, jacobian in (
        (x, x + 0.1, 0.5 * unit), (x, x + 0.1, 0.5 * unit), (x + 0.1, x + 0.2, unit), (x + 0.2, 1e6 * x, 1.0001 * unit),
        (1e6 * x, 1e-6 * x, 3.0 * unit), (empty, 0.5 * empty, 0.5 * unit), (0.5 * empty, 0.25 * empty, 0.0 * unit),
    ):  # fmt: skip
        error = np.abs(g - at).max(axis=1)
        found.append(Trial(at, g, jacobian if method.needs_jacobian else None, error, np.ones_like(at), np.zeros(COUNT)))
    return found

