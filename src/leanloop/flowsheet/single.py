"""One requirement: bracketed on a grid with slopes, then Newton's method inside the bracket."""

from __future__ import annotations

import numpy as np

from leanloop.flowsheet.requirement import Prober, Requirement

GRID = 17
ZOOM = 9  # points inside an interval in which a turning point hides
ZOOMS = 4
BESIDE, NEARER = 5, 2  # points beside one that was not solved, and how often
REFINEMENTS = 60
FLAT = 1e-3  # elasticity below which a quantity no longer follows its freed input


class Single:
    """One requirement: bracket on a grid with slopes, then Newton's method inside the bracket."""

    def __init__(self, owner: Prober, item: Requirement, cases: np.ndarray) -> None:
        self.owner, self.item, self.cases = owner, item, cases
        self.target = owner.inputs.value(item.target)[cases]
        spread = item.low > 0 and item.high / item.low > 3.0
        self.grid = np.geomspace(item.low, item.high, GRID) if spread else np.linspace(item.low, item.high, GRID)
        self.grid[0], self.grid[-1] = item.low, item.high

    def _f(self, rows: np.ndarray, p: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        probe = self.owner.probe([self.item], self.cases[rows], p[:, None])
        f = np.where(probe.good, probe.q[:, 0] - self.target[rows], np.nan)
        return f, np.where(probe.good, probe.slopes[:, 0, 0], np.nan)

    def solve(self) -> None:
        """Find all solutions inside the bounds and take the least."""
        count = len(self.cases)
        rows = np.repeat(np.arange(count), GRID)
        f, slope = self._f(rows, np.tile(self.grid, count))
        f, slope = f.reshape(count, GRID), slope.reshape(count, GRID)
        p = np.broadcast_to(self.grid, (count, GRID))
        for _ in range(NEARER):
            p, f, slope = self._beside_lost(p, f, slope)
        brackets, best = self._search(p, f, slope)
        roots: list[list[float]] = [[] for _ in range(count)]
        for row, root in self._refine(brackets):
            roots[row].append(root)
        found = self.owner.found[self.item.name]
        for row, case in enumerate(self.cases):
            mine = _distinct(sorted(roots[row], key=abs))
            if mine:
                found.free_value[case], found.others[case] = mine[0], mine[1:]
            elif best[row] is not None:
                found.free_value[case], found.reason[case] = best[row]

    def _beside_lost(self, p: np.ndarray, f: np.ndarray, slope: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Add points between one that was solved and a neighbour that was not, where no change of sign is seen yet."""
        good = np.isfinite(f)
        seen = np.where(good, np.sign(f), 0.0)
        open_end = good[:, 1:] != good[:, :-1]
        want = open_end.any(axis=1) & ~((seen > 0).any(axis=1) & (seen < 0).any(axis=1))
        if not want.any():
            return p, f, slope
        own, place = np.nonzero(open_end & want[:, None])
        inner = np.linspace(p[own, place], p[own, place + 1], BESIDE + 2)[1:-1].T  # (count, BESIDE)
        f_in, s_in = self._f(np.repeat(own, BESIDE), inner.ravel())
        most = int(np.bincount(own).max()) * BESIDE
        more = [np.full((len(p), most), np.nan) for _ in range(3)]
        more[0][:] = p[:, -1:]  # what is not filled stands at the end, lost
        used = np.zeros(len(p), dtype=int)
        for number, row in enumerate(own):
            part = slice(number * BESIDE, (number + 1) * BESIDE)
            at = slice(used[row], used[row] + BESIDE)
            more[0][row, at], more[1][row, at], more[2][row, at] = inner[number], f_in[part], s_in[part]
            used[row] += BESIDE
        p, f, slope = (np.concatenate([old, new], axis=1) for old, new in zip((p, f, slope), more, strict=True))
        order = np.argsort(p, axis=1, kind="stable")
        return tuple(np.take_along_axis(item, order, axis=1) for item in (p, f, slope))

    def _search(self, p: np.ndarray, f: np.ndarray, slope: np.ndarray) -> tuple[list[tuple], list]:
        """Find intervals with a sign change, looking closer where slopes betray a turning point."""
        spans = self._spans(p, f, slope)
        brackets, turns = self._split(spans)
        # keep for each case the least |f| seen, with its place
        low: dict[int, tuple[float, float, str]] = {}
        size = np.abs(f)
        for row in range(len(p)):
            if np.isfinite(size[row]).any():
                place = int(np.nanargmin(size[row]))
                low[row] = (size[row, place], p[row, place], self._reason(place, p[row], f[row], slope[row], self.target[row]))
        for _ in range(ZOOMS):
            if not turns.shape[1]:
                break
            count = turns.shape[1]
            inner = np.linspace(turns[1], turns[4], ZOOM + 2)[1:-1].T  # (count, ZOOM)
            own = turns[0].astype(int)
            f_in, s_in = self._f(np.repeat(own, ZOOM), inner.ravel())
            f_in, s_in = f_in.reshape(count, ZOOM), s_in.reshape(count, ZOOM)
            all_p = np.column_stack([turns[1], inner, turns[4]])
            all_f = np.column_stack([turns[2], f_in, turns[5]])
            all_s = np.column_stack([turns[3], s_in, turns[6]])
            spans = np.array(
                [np.repeat(turns[0], ZOOM + 1)]
                + [item[:, :-1].ravel() for item in (all_p, all_f, all_s)]
                + [item[:, 1:].ravel() for item in (all_p, all_f, all_s)]
            )
            more, turns = self._split(spans)
            brackets += more
            for number, row in enumerate(own):
                if np.isfinite(all_f[number]).any():
                    place = int(np.nanargmin(np.abs(all_f[number])))
                    size_here = abs(all_f[number, place])
                    if row not in low or size_here <= low[row][0]:
                        low[row] = (size_here, all_p[number, place], "turning_point")
        return brackets, [low[row][1:] if row in low else None for row in range(len(p))]

    @staticmethod
    def _spans(p: np.ndarray, f: np.ndarray, slope: np.ndarray) -> np.ndarray:
        """Give the intervals between neighbours that were solved: row, p0, f0, s0, p1, f1, s1 by interval."""
        rows = np.broadcast_to(np.arange(len(p))[:, None], p.shape)
        good = np.isfinite(f)
        points = np.array([rows[good], p[good], f[good], slope[good]])
        same = points[0, 1:] == points[0, :-1]
        return np.concatenate([points[:, :-1], points[1:, 1:]])[:, same]

    @staticmethod
    def _reason(place: int, p: np.ndarray, f: np.ndarray, slope: np.ndarray, target: float) -> str | None:
        """Say why the least gap is where it is: inside, at a bound, or past a pinch; nothing beside points not solved."""
        if not np.isfinite(f[max(place - 1, 0) : place + 2]).all():
            return None
        if 0 < place < len(p) - 1:
            return "turning_point"
        quantity = f[place] + target
        flat = abs(slope[place] * p[place]) < FLAT * abs(quantity)
        return "pinch" if flat else "bound"

    @staticmethod
    def _split(spans: np.ndarray) -> tuple[list[tuple], np.ndarray]:
        """Sort intervals into sign changes and hidden turning points."""
        _, p0, f0, s0, p1, f1, s1 = spans
        with np.errstate(invalid="ignore", divide="ignore"):
            change = np.isfinite(f0) & np.isfinite(f1) & ((np.sign(f0) != np.sign(f1)) | (f0 == 0))
            inward = np.sign(f0) * s0 < 0
            outward = np.sign(f1) * s1 > 0
            width = p1 - p0
            # where the two end tangents would meet, f cannot be nearer to zero on a convex piece
            meet = (f1 - f0 - s1 * width) / (s0 - s1)
            nearest = f0 + s0 * np.clip(meet, 0.0, width)
            hidden = ~change & np.isfinite(f0) & np.isfinite(f1) & inward & outward
            hidden &= (np.sign(nearest) != np.sign(f0)) | (np.abs(nearest) < np.minimum(np.abs(f0), np.abs(f1)))
        found = [tuple(spans[:, place]) for place in np.flatnonzero(change)]
        return found, spans[:, hidden]

    def _refine(self, brackets: list[tuple]) -> list[tuple[int, float]]:
        """Run Newton's method inside all brackets at once, bisecting where it leaves them."""
        if not brackets:
            return []
        row, a, fa, sa, b, fb, sb = np.array(brackets).T
        row = row.astype(int)
        best = np.where(np.abs(fa) <= np.abs(fb), a, b)
        f, slope = np.where(best == a, fa, fb), np.where(best == a, sa, sb)
        tolerance = np.maximum(1e-12 * np.abs(self.target[row]), 1e-300)
        done = np.abs(f) <= tolerance
        for _ in range(REFINEMENTS):
            on = np.flatnonzero(~done)
            if not len(on):
                break
            with np.errstate(divide="ignore", invalid="ignore"):
                new = best[on] - f[on] / slope[on]
            inside = (new > np.minimum(a[on], b[on])) & (new < np.maximum(a[on], b[on]))
            new = np.where(inside, new, 0.5 * (a[on] + b[on]))
            f_new, s_new = self._f(row[on], new)
            lost = ~np.isfinite(f_new)
            f_new = np.where(lost, fa[on], f_new)  # a case that fails inside: bisect towards b
            s_new = np.where(lost, np.nan, s_new)
            left = np.sign(f_new) == np.sign(fa[on])
            a[on], fa[on] = np.where(left, new, a[on]), np.where(left, f_new, fa[on])
            b[on], fb[on] = np.where(left, b[on], new), np.where(left, fb[on], f_new)
            moved = np.abs(new - best[on])
            best[on], f[on], slope[on] = new, f_new, s_new
            done[on] = ~lost & (
                (np.abs(f_new) <= tolerance[on]) | (moved <= 1e-15 * np.abs(new)) | (np.abs(b[on] - a[on]) <= 1e-14 * np.abs(new))
            )
        good = np.isfinite(f) & (np.abs(f) <= 1e-8 * np.abs(self.target[row]) + 1e-300)
        return [(int(row[n]), float(best[n])) for n in np.flatnonzero(good)]


def _distinct(roots: list[float]) -> list[float]:
    out: list[float] = []
    for root in roots:
        if all(abs(root - other) > 1e-7 * abs(other) for other in out):
            out.append(root)
    return out
