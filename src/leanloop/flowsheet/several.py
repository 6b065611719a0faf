"""Several requirements at once: damped Newton's method from starts spread over the box of their bounds."""

from __future__ import annotations

import numpy as np
from scipy.stats import qmc

from leanloop.flowsheet.requirement import Probe, Prober, Requirement

STARTS = 32
REFINEMENTS = 60
RANK = 1e-7  # of a matrix of elasticities


class Several:
    """Several requirements at once: damped Newton's method from starts spread over the box."""

    def __init__(self, owner: Prober, active: list[Requirement], cases: np.ndarray) -> None:
        self.owner, self.active, self.cases = owner, active, cases
        self.low = np.array([item.low for item in active])
        self.high = np.array([item.high for item in active])
        self.target = np.stack([owner.inputs.value(item.target)[cases] for item in active], axis=1)

    def solve(self) -> None:
        """Find solutions inside the box and take the one nearest to its lower corner."""
        starts = qmc.Sobol(len(self.active), scramble=False).random(STARTS)
        starts[0] = 0.5
        count = len(self.cases)
        rows = np.repeat(np.arange(count), STARTS)
        p = self.low + np.tile(starts, (count, 1)) * (self.high - self.low)
        p, merit, slopes = self._newton(rows, p)
        for row, case in enumerate(self.cases):
            mine = np.flatnonzero(rows == row)
            reached = [n for n in mine if merit[n] <= 1e-9]
            # least circulation, gas or duty: least sum of the places between the bounds
            reached.sort(key=lambda n: ((p[n] - self.low) / (self.high - self.low)).sum())
            distinct: list[int] = []
            for n in reached:
                if all(np.abs(p[n] - p[k]).max() > 1e-6 * np.abs(p[k]).max() for k in distinct):
                    distinct.append(n)
            best = distinct[0] if distinct else mine[np.argmin(np.where(np.isfinite(merit[mine]), merit[mine], np.inf))]
            for number, item in enumerate(self.active):
                found = self.owner.found[item.name]
                found.free_value[case] = p[best, number]
                found.others[case] = [float(p[n, number]) for n in distinct[1:]]
                if not distinct:
                    found.note[int(case)] = self._tangled(p[mine], slopes[mine], row)
                    at_end = min(abs(p[best, number] - item.low), abs(p[best, number] - item.high))
                    found.reason[case] = "bound" if at_end <= 1e-9 * abs(item.high) else "turning_point"

    def _tangled(self, p: np.ndarray, slopes: np.ndarray, row: int) -> str:
        """Name requirements that cannot be met apart: their elasticities are of lower rank wherever tried."""
        scale = np.maximum(np.abs(self.target[row]), 1e-300)
        tangled: np.ndarray | None = None
        for own, slope in zip(p, slopes, strict=True):
            matrix = slope * np.abs(own) / scale[:, None]
            if not np.isfinite(matrix).all():
                continue
            sizes = np.linalg.norm(matrix, axis=1)
            if (sizes <= RANK * sizes.max(initial=0.0)).any() or sizes.max(initial=0.0) == 0.0:
                members = sizes <= RANK * sizes.max(initial=0.0)
            else:
                left, values, _ = np.linalg.svd(matrix / sizes[:, None])
                if values[-1] > RANK * values[0]:
                    return ""
                members = np.abs(left[:, -1]) > 0.1
            tangled = members if tangled is None else tangled | members
        if tangled is None:
            return ""
        names = [item.name for item, member in zip(self.active, tangled, strict=True) if member]
        if len(names) == 1:
            return f"{names[0]} does not follow any of the freed inputs"
        return f"{' and '.join(names)} move together whatever is freed: drop one, or free another input"

    def _merit(self, probe: Probe, rows: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        scale = np.maximum(np.abs(self.target[rows]), 1e-300)
        gap = (probe.q - self.target[rows]) / scale
        return gap * scale, np.where(probe.good, np.abs(gap).max(axis=1), np.inf)

    def _newton(self, rows: np.ndarray, p: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        probe = self.owner.probe(self.active, self.cases[rows], p)
        f, merit = self._merit(probe, rows)
        slopes = probe.slopes
        damping = np.ones(len(p))
        for _ in range(REFINEMENTS):
            on = np.flatnonzero((merit > 1e-12) & np.isfinite(merit) & (damping > 1e-3))
            if not len(on):
                break
            # least squares: matrices that lack rank are common at bounds
            step = -np.einsum("kij,kj->ki", np.linalg.pinv(slopes[on], rcond=1e-12), f[on])
            limit = 0.5 * (self.high - self.low)
            step *= np.minimum(1.0, (limit / np.maximum(np.abs(step), 1e-300)).min(axis=1))[:, None]
            new = np.clip(p[on] + damping[on, None] * step, self.low, self.high)
            trial = self.owner.probe(self.active, self.cases[rows[on]], new)
            f_new, merit_new = self._merit(trial, rows[on])
            better = merit_new < merit[on]
            stuck = (np.abs(new - p[on]) <= 1e-14 * np.abs(p[on])).all(axis=1)
            take = on[better]
            p[take], f[take], merit[take], slopes[take] = new[better], f_new[better], merit_new[better], trial.slopes[better]
            damping[on] = np.where(better, np.minimum(1.0, 2 * damping[on]), 0.4 * damping[on])
            damping[on[stuck]] = 0.0
        return p, merit, slopes
