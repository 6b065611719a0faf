"""Batches of block-tridiagonal systems as one banded matrix, with the cases kept apart.

The unknowns of all stages of all cases are laid end to end; the couplings across the seams
between cases are zeros, so one LAPACK band factorisation serves the whole batch. A case whose
rows are not finite or singular would spoil its neighbours: such rows are replaced by the identity.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from scipy.linalg import lapack

BYTES_A_CHUNK = 64 * 2**20


def bytes_a_case(stages: int, unknowns: int) -> int:
    """Give the memory that one case takes in the band.

    Parameters
    ----------
    stages, unknowns : int
        Stages of a column and unknowns of a stage.
    """
    return 8 * stages * unknowns * (4 * unknowns - 1)


class Band:
    """Banded matrix of M cases of N stages with n unknowns each.

    A row couples to its own stage, to the stage below (columns of stage j + 1), and to the stage
    above only through ``row a of stage j + 1, unknown a of stage j`` for the rows from `first` on,
    with coefficient one: the liquid that runs down. That keeps the lower bandwidth at n.

    Parameters
    ----------
    cases, stages, unknowns : int
    first : int
        First row, and unknown, that couples to the stage above.
    """

    def __init__(self, cases: int, stages: int, unknowns: int, first: int) -> None:
        n = unknowns
        self.shape = (cases, stages, n)
        self.lower, self.upper = n, 2 * n - 1 - first
        width = 2 * self.lower + self.upper + 1
        self._store = np.zeros((cases * stages * n, width))
        item = self._store.itemsize
        # element (row i, column j) stands at store[j, lower + upper + i - j]; for column b of a
        # stage the 2n rows of the stage above and of its own are then a run that starts b earlier
        self._runs = np.ndarray(
            (cases, stages, n, 2 * n),
            buffer=self._store,
            offset=(self.lower + self.upper - n) * item,
            strides=(stages * n * width * item, n * width * item, (width - 1) * item, item),
        )
        self._cells = self._store.reshape(cases, stages, n, width)
        self._first = first
        self._pivots: np.ndarray | None = None
        self.singular = np.zeros(cases, dtype=bool)
        self.factorisations = 0

    def fill(self, derivatives: np.ndarray, drag: np.ndarray) -> None:
        """Set the matrix of stage equations whose gas flows have given derivatives.

        Rows of a stage: for each component, gas flow from below less its own gas flow and its own
        liquid flow; before them, where the first unknown is the total gas flow, the sum of the
        stage's gas flows less that.

        Parameters
        ----------
        derivatives : (M, N, n, D) by [case, stage, unknown, component]
            Of the gas flows by the unknowns of their stage; D = n - `first`.
        drag : (M,)
            Taken from the diagonal of the component rows.
        """
        n, first, runs = self.shape[2], self._first, self._runs
        runs[..., first:n] = derivatives
        if first:
            runs[..., n] = derivatives.sum(axis=-1)
        np.negative(derivatives, out=runs[..., n + first :])
        diagonal = self._cells[..., self.lower + self.upper]
        diagonal -= 1.0
        if drag.any():
            diagonal[..., first:] -= drag[:, None, None]
        runs[:, 0, :, :n] = 0.0
        self._cells[:, :-1, first:, -1] = 1.0

    def isolate(self, cases: np.ndarray) -> None:
        """Put the identity in the rows of some cases.

        Parameters
        ----------
        cases : (M,) bool
        """
        if cases.any():
            n = self.shape[2]
            self._cells[cases] = 0.0
            self._runs[cases, :, np.arange(n)[:, None], n + np.arange(n)[:, None]] = 1.0

    def factor(self, derivatives: np.ndarray, drag: np.ndarray) -> np.ndarray:
        """Set and factorise the matrix.

        Parameters
        ----------
        derivatives, drag
            As for `fill`.

        Returns
        -------
        (M,) bool
            Cases that are singular or not finite; their rows are the identity now.
        """
        bad = np.zeros(self.shape[0], dtype=bool)
        if not _finite(derivatives):
            sums = derivatives.sum(axis=-1)  # may overflow where its terms do not
            bad = ~(np.isfinite(derivatives).all(axis=(1, 2, 3)) & np.isfinite(sums).all(axis=(1, 2)))
        return self._factor(derivatives, drag, bad)

    def _factor(self, content: Any, drag: np.ndarray, bad: np.ndarray) -> np.ndarray:
        while True:
            self._store[...] = 0.0
            self.fill(content, drag)
            self.isolate(bad)
            _, self._pivots, info = lapack.dgbtrf(self._store.T, self.lower, self.upper, overwrite_ab=1)
            self.factorisations += 1
            if info == 0:
                break
            pivot = self._cells[..., self.lower + self.upper]
            bad = bad | ((pivot == 0.0) | ~np.isfinite(pivot)).any(axis=(1, 2))
        self.singular = bad
        return bad

    def solve(self, right: np.ndarray) -> np.ndarray:
        """Solve for one or several right-hand sides.

        Parameters
        ----------
        right : (M, N, n) or (S, M, N, n)
            Rows of cases that are set apart are overwritten.

        Returns
        -------
        array of the same shape
            Zero for the cases that `factor` set apart.
        """
        several = right.reshape(-1, self.shape[0] * self.shape[1] * self.shape[2])
        spoilt = self.singular
        whole = _finite(several)
        if spoilt.any() or not whole:
            view = several.reshape(-1, *self.shape)
            spoilt = spoilt | ~np.isfinite(view).all(axis=(0, 2, 3))
            view[:, spoilt] = 0.0
        answer, _ = lapack.dgbtrs(self._store.T, self.lower, self.upper, several.T, self._pivots)
        answer = answer.T
        if not _finite(answer):
            answer = self._one_by_one(several.reshape(-1, *self.shape))
        return answer.reshape(right.shape)

    def _one_by_one(self, right: np.ndarray) -> np.ndarray:
        """Solve case by case, for the rare overflow in one that would spoil the others."""
        rows = self.shape[1] * self.shape[2]
        answer = np.zeros_like(right)
        for case in range(self.shape[0]):
            part = slice(case * rows, (case + 1) * rows)
            pivots = self._pivots[part] - case * rows
            flat = np.asfortranarray(right[:, case].reshape(len(right), rows).T)
            own = np.asfortranarray(self._store[part].T)
            with np.errstate(all="ignore"):
                solved, _ = lapack.dgbtrs(own, self.lower, self.upper, flat, pivots)
            if np.isfinite(solved).all():
                answer[:, case] = solved.T.reshape(len(right), self.shape[1], self.shape[2])
            else:
                self.singular[case] = True
        return answer


def _finite(values: np.ndarray) -> bool:
    """Tell quickly whether all is finite; a sum that overflows errs on the safe side."""
    return bool(np.isfinite(values.sum()))
