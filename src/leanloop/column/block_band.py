"""Batches of block-tridiagonal systems with dense blocks as one banded matrix, with the cases kept apart."""

from __future__ import annotations

import numpy as np

from leanloop.column.band import Band

DENSE, PLAIN = True, False


class BlockBand(Band):
    """Banded matrix of M cases of S stages with n unknowns each, as `leanloop.column.tower` orders them.

    Rows of a stage: heat, then D rows of material, then others. Unknowns: `ahead` and V, then T and D liquid flows,
    which alone reach the stage below.

    Parameters
    ----------
    cases, stages, unknowns : int
    ahead : int
        Unknowns before T, V included.
    falling : int
        D.
    dense : bool
        Whether each material row couples to all liquid flows above, as with liquid draws; else to its own alone.
    """

    def __init__(self, cases: int, stages: int, unknowns: int, ahead: int, falling: int, dense: bool) -> None:
        n = unknowns
        self.shape = (cases, stages, n)
        self.ahead, self.falling, self.dense = ahead, falling, dense
        reach = n + falling - ahead if dense else n - ahead
        self.lower, self.upper = max(n - 1, reach), 2 * n - 1
        width = 2 * self.lower + self.upper + 1
        self._store = np.zeros((cases * stages * n, width))
        item = self._store.itemsize
        # element (row i, column j) stands at store[j, lower + upper + i - j]
        self._runs = np.ndarray(
            (cases, stages, n, 2 * n),
            buffer=self._store,
            offset=(self.lower + self.upper - n) * item,
            strides=(stages * n * width * item, n * width * item, (width - 1) * item, item),
        )
        # from T on, the rows of the stage below begin n after the own ones
        count = 1 + falling
        self._under = np.ndarray(
            (cases, stages, count, count if dense else 1),
            buffer=self._store,
            offset=(ahead * width + self.lower + self.upper + n - ahead) * item,
            strides=(stages * n * width * item, n * width * item, (width - 1) * item, item),
        )
        self._cells = self._store.reshape(cases, stages, n, width)
        self._pivots: np.ndarray | None = None
        self.singular = np.zeros(cases, dtype=bool)
        self.factorisations = 0

    def fill(self, blocks: Blocks, drag: np.ndarray) -> None:
        """Set the matrix.

        Parameters
        ----------
        blocks : Blocks
        drag : (M,)
            Taken from the diagonal of liquid flows in their material rows, and of T in the heat row.
        """
        n, runs, ahead = self.shape[2], self._runs, self.ahead
        own = blocks.own
        if drag.any():
            own = own.copy()
            k = np.arange(self.falling)
            own[:, :, ahead + 1 + k, 1 + k] -= drag[:, None, None]
            own[:, :, ahead, 0] -= drag[:, None] * blocks.inertia
        runs[..., n:] = own
        runs[:, 1:, :, :n] = blocks.up[:, 1:]
        runs[:, 0, :, :n] = 0.0
        if self.dense:
            self._under[:, :-1] = blocks.down[:, :-1]
        else:
            self._under[:, :-1, :, 0] = blocks.down[:, :-1, :, 0]
            at = self.lower + self.upper + n - ahead
            self._cells[:, :-1, ahead + 1 :, at] = 1.0

    def factor(self, blocks: Blocks, drag: np.ndarray) -> np.ndarray:
        """Set and factorise; give the cases that are singular or not finite, (M,) bool."""
        return self._factor(blocks, drag, blocks.broken())


class Blocks:
    """Derivatives of the rows by the unknowns, by [case, stage, unknown, row].

    Parameters
    ----------
    own : (M, S, n, n)
        Of a stage's rows by its own unknowns.
    up : (M, S, n, n)
        Of the rows of the stage above by a stage's unknowns.
    down : (M, S, 1 + D, 1 + D) or (M, S, 1 + D, 1)
        Of the rows of the stage below by T and l; the heat row alone where material rows couple to their own with one.
    inertia : (M, S)
        Weight of a drag on the heat row.
    """

    def __init__(self, own: np.ndarray, up: np.ndarray, down: np.ndarray, inertia: np.ndarray) -> None:
        self.own, self.up, self.down, self.inertia = own, up, down, inertia

    def take(self, part: slice) -> Blocks:
        """Give some cases."""
        return Blocks(self.own[part], self.up[part], self.down[part], self.inertia[part])

    def broken(self) -> np.ndarray:
        """Tell which cases are not finite, (M,) bool."""
        bad = np.zeros(len(self.own), dtype=bool)
        for block in (self.own, self.up, self.down):
            if not np.isfinite(block.sum()):
                bad |= ~np.isfinite(block).all(axis=(1, 2, 3))
        return bad
