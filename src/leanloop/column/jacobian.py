"""The factorised Jacobian of the stage equations, in the full layout or with the gas totals eliminated.

Where something keeps the gas flowing on every stage, the summation row gives each stage's change of
the total gas flow from its own liquid flows, and the band needs the liquid flows alone. With few
components and many cases that more than halves the work; the answer is the same to rounding.
"""

from __future__ import annotations

import numpy as np

from leanloop.column.band import BYTES_A_CHUNK, Band, bytes_a_case

MOST_ELIMINATED = 3  # distributing components up to which eliminating pays
LEAST_STAGES = 64  # stages of all cases together from which it pays
LEAST_INERT = 1e-6  # part of the gas that must not distribute


class Jacobian:
    """Factorised derivative of the stage equations for M cases, chunk by chunk.

    Parameters
    ----------
    derivatives : (M, N, 1 + D, D) by [case, stage, unknown, component]
        Of the gas flows by their stage's unknowns.
    drag : (M,)
        As for `Band.fill`.

    Attributes
    ----------
    bad : (M,) bool
        Cases that are singular or not finite.
    factorisations : int
    """

    def __init__(self, derivatives: np.ndarray, drag: np.ndarray) -> None:
        cases, count, unknowns, parts = derivatives.shape
        self.by_total = derivatives[:, :, 0]
        pays = 1 <= parts <= MOST_ELIMINATED and cases * count >= LEAST_STAGES
        keep = 1.0 - self.by_total.sum(axis=-1) if pays else None
        self.keep = None
        # cases that are not finite are set apart, and decide nothing for the others
        if keep is not None and np.fmin.reduce(keep, axis=None, initial=1.0) >= LEAST_INERT:
            self.keep = keep
            self.sums = derivatives[:, :, 1:].sum(axis=-1)
            self.gain = self.by_total / keep[..., None]
            derivatives = derivatives[:, :, 1:] + self.sums[..., None] * self.gain[:, :, None, :]
            unknowns = parts
        size = max(1, BYTES_A_CHUNK // bytes_a_case(count, max(unknowns, 1)))
        self.bands: list[tuple[slice, Band]] = []
        self.bad = np.zeros(cases, dtype=bool)
        self.factorisations = 0
        for begin in range(0, cases, size):
            part = slice(begin, min(begin + size, cases))
            band = Band(part.stop - part.start, count, unknowns, unknowns - parts)
            self.bad[part] = band.factor(derivatives[part], drag[part])
            self.factorisations += band.factorisations
            self.bands.append((part, band))

    def solve(self, right: np.ndarray) -> np.ndarray:
        """Solve for one or several right-hand sides.

        Parameters
        ----------
        right : (M, N, 1 + D) or (S, M, N, 1 + D)
            May be overwritten.

        Returns
        -------
        array of the same shape
            Zero for cases that are set apart; `bad` grows by those that overflow.
        """
        if self.keep is None:
            return self._bands(right)
        flows = right[..., 1:].copy()
        carried = self.gain * right[..., :1]  # gas flows that the summation row's side alone would cause
        flows -= carried
        flows[..., :-1, :] += carried[..., 1:, :]
        answer = np.empty(right.shape)
        answer[..., 1:] = self._bands(flows)
        answer[..., 0] = ((answer[..., 1:] * self.sums).sum(axis=-1) - right[..., 0]) / self.keep
        if self.bad.any():
            answer[..., self.bad, :, :] = 0.0
        return answer

    def _bands(self, right: np.ndarray) -> np.ndarray:
        if len(self.bands) == 1:
            band = self.bands[0][1]
            answer = band.solve(np.ascontiguousarray(right))
            self.bad = self.bad | band.singular
            return answer
        answer = np.empty(right.shape)
        for part, band in self.bands:
            answer[..., part, :, :] = band.solve(np.ascontiguousarray(right[..., part, :, :]))
            self.bad[part] |= band.singular
        return answer
