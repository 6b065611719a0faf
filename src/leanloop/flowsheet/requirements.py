"""Requirements: freed inputs that bring quantities to their targets, whatever the start.

With the loops closed at given freed inputs p, a quantity q(p) and its exact slope are known. One
requirement is bracketed on a grid over its bounds, with the slopes telling where a turning point
hides a pair of solutions between two grid points, and refined by Newton's method inside the
bracket. Several at once are solved by Newton's method from starts spread over the box.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from scipy.stats import qmc

from leanloop.flowsheet.graph import Region
from leanloop.flowsheet.quantity import Formula
from leanloop.flowsheet.run import Run
from leanloop.flowsheet.view import derivatives, value
from leanloop.status import OK, Status, code, solved

GRID = 17
ZOOM = 9
ZOOMS = 4
REFINEMENTS = 60
ROWS_AT_ONCE = 4096
STARTS = 32
RANK = 1e-7  # of a matrix of elasticities
FLAT = 1e-3  # elasticity below which a quantity no longer follows its freed input


@dataclass(frozen=True)
class Requirement:
    """A result that must take a value, and the input that is freed to reach it.

    Parameters
    ----------
    name : str
    address : str
        Of the quantity.
    quantity : Formula
    free : str
        Address of the freed input.
    low, high : float
        SI bounds of the freed input.
    kind : str
        ``"equals"``, ``"at_most"`` or ``"at_least"``.
    """

    name: str
    address: str
    quantity: Formula
    free: str
    low: float
    high: float
    kind: str = "equals"

    @property
    def target(self) -> str:
        """Address of the target value."""
        return f"requirements.{self.name}.{self.kind}"


@dataclass
class Found:
    """How a requirement ended for M cases.

    Attributes
    ----------
    reached, active : (M,) bool
    value, free_value : (M,)
    reason : (M,) of object
        ``"bound"``, ``"pinch"``, ``"turning_point"`` or None.
    others : list of M lists
        Freed inputs of further solutions.
    note : dict of int to str
        By case, what is known of why it was not reached.
    """

    reached: np.ndarray
    active: np.ndarray
    value: np.ndarray
    free_value: np.ndarray
    reason: np.ndarray
    others: list[list[float]] = field(default_factory=list)
    note: dict[int, str] = field(default_factory=dict)


@dataclass
class _Probe:
    """Quantities at some freed inputs: q (K, P), slopes (K, P, P), good (K,)."""

    q: np.ndarray
    slopes: np.ndarray
    good: np.ndarray


class RegionSolver:
    """Solves the requirements of one region on a run.

    Parameters
    ----------
    run : Run
        Everything before the region is solved.
    region : Region
    requirements : sequence of Requirement
    """

    def __init__(self, run: Run, region: Region, requirements: Sequence[Requirement]) -> None:
        self.run, self.region, self.requirements = run, region, list(requirements)
        cases = run.inputs.cases
        self.evaluations = 0
        self.found = {
            item.name: Found(
                np.zeros(cases, dtype=bool),
                np.full(cases, item.kind == "equals"),
                np.full(cases, np.nan),
                run.inputs.value(item.free).copy(),
                np.full(cases, None, dtype=object),
                [[] for _ in range(cases)],
            )
            for item in self.requirements
        }

    def solve(self) -> None:
        """Free the inputs case by case, then solve the region at them."""
        run = self.run
        cases = np.flatnonzero(run.status == OK)
        if len(cases):
            self._active_sets(cases)
        for item in self.requirements:
            run.inputs.arrays[item.free] = self.found[item.name].free_value
        run.inputs.touched = run.inputs.touched | {item.free for item in self.requirements}
        for step in self.region.steps:
            run.step(step)
        self._judge()

    # --- active set

    def _active_sets(self, cases: np.ndarray) -> None:
        left = cases
        for _ in range(len(self.requirements) + 1):
            patterns: dict[tuple[int, ...], list[int]] = {}
            for case in left:
                key = tuple(n for n, item in enumerate(self.requirements) if self.found[item.name].active[case])
                patterns.setdefault(key, []).append(case)
            for key, members in patterns.items():
                self._solve_active([self.requirements[n] for n in key], np.array(members))
            left = self._violated(left)
            if not len(left):
                return

    def _violated(self, cases: np.ndarray) -> np.ndarray:
        """Make limits active where they do not hold at the inputs so far."""
        idle = [item for item in self.requirements if item.kind != "equals"]
        if not idle:
            return cases[:0]
        p = np.stack([self.found[item.name].free_value[cases] for item in idle], axis=1)
        fixed = {item.free: self.found[item.name].free_value[cases] for item in self.requirements}
        probe = self._probe(idle, cases, p, fixed)
        more = np.zeros(len(cases), dtype=bool)
        for number, item in enumerate(idle):
            target = self.run.inputs.value(item.target)[cases]
            over = probe.q[:, number] - target if item.kind == "at_most" else target - probe.q[:, number]
            new = (over > 1e-9 * np.abs(target)) & ~self.found[item.name].active[cases] & probe.good
            self.found[item.name].active[cases[new]] = True
            more |= new
        return cases[more]

    def _solve_active(self, active: list[Requirement], cases: np.ndarray) -> None:
        if len(active) == 1:
            _Single(self, active[0], cases).solve()
        elif active:
            _Several(self, active, cases).solve()

    # --- probing

    def _probe(
        self, active: Sequence[Requirement], cases: np.ndarray, p: np.ndarray, fixed: dict[str, np.ndarray] | None = None
    ) -> _Probe:
        """Close the region's loops at freed inputs p (K, P) of given cases (K,)."""
        pieces = []
        for begin in range(0, len(cases), ROWS_AT_ONCE):
            part = slice(begin, begin + ROWS_AT_ONCE)
            pieces.append(self._probe_piece(active, cases[part], p[part], {k: v[part] for k, v in (fixed or {}).items()}))
        return _Probe(*(np.concatenate([getattr(item, key) for item in pieces]) for key in ("q", "slopes", "good")))

    def _probe_piece(self, active: Sequence[Requirement], cases: np.ndarray, p: np.ndarray, fixed: dict) -> _Probe:
        run = self.run
        arrays = {item.free: self.found[item.name].free_value[cases] for item in self.requirements}
        arrays.update(fixed)
        arrays.update({item.free: p[:, number] for number, item in enumerate(active)})
        inputs = run.inputs.repeated(cases, arrays)
        trial = Run(run.plan, inputs, run.settings, [item.free for item in active])
        for step in self.region.steps:
            for name in run.plan.outer(step):
                if name in run.states:
                    trial.states[name] = run.states[name][cases]
        for step in self.region.steps:
            trial.step(step)
        self.evaluations += trial.evaluations
        q = np.stack([value(trial, item.quantity) for item in active], axis=1)
        slopes = np.stack([derivatives(trial, item.quantity).T for item in active], axis=1)
        good = solved(trial.status) & np.isfinite(q).all(axis=1) & np.isfinite(slopes).all(axis=(1, 2))
        return _Probe(q, slopes, good)

    # --- verdict

    def _judge(self) -> None:
        run = self.run
        for item in self.requirements:
            found = self.found[item.name]
            found.value = value(run, item.quantity)
            target = run.inputs.value(item.target)
            with np.errstate(invalid="ignore"):
                gap = np.abs(found.value - target) <= 1e-8 * np.abs(target) + 1e-300
                if item.kind == "at_most":
                    gap |= found.value <= target
                elif item.kind == "at_least":
                    gap |= found.value >= target
            found.reached = gap & (run.status == OK)
            found.reason[found.reached] = None
            missed = (run.status == OK) & ~gap
            run.status[missed] = code(Status.out_of_reach)


class _Single:
    """One requirement: bracket on a grid with slopes, then Newton's method inside the bracket."""

    def __init__(self, owner: RegionSolver, item: Requirement, cases: np.ndarray) -> None:
        self.owner, self.item, self.cases = owner, item, cases
        self.target = owner.run.inputs.value(item.target)[cases]
        spread = item.low > 0 and item.high / item.low > 3.0
        self.grid = np.geomspace(item.low, item.high, GRID) if spread else np.linspace(item.low, item.high, GRID)
        self.grid[0], self.grid[-1] = item.low, item.high

    def _f(self, rows: np.ndarray, p: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        probe = self.owner._probe([self.item], self.cases[rows], p[:, None])
        f = np.where(probe.good, probe.q[:, 0] - self.target[rows], np.nan)
        return f, np.where(probe.good, probe.slopes[:, 0, 0], np.nan)

    def solve(self) -> None:
        count = len(self.cases)
        rows = np.repeat(np.arange(count), GRID)
        f, slope = self._f(rows, np.tile(self.grid, count))
        f, slope = f.reshape(count, GRID), slope.reshape(count, GRID)
        p = np.broadcast_to(self.grid, (count, GRID))
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

    def _search(self, p: np.ndarray, f: np.ndarray, slope: np.ndarray) -> tuple[list[tuple], list]:
        """Find intervals with a sign change, looking closer where slopes betray a turning point."""
        rows = np.broadcast_to(np.arange(len(p))[:, None], (len(p), p.shape[1] - 1)).ravel()
        left = [item[:, :-1].ravel() for item in (p, f, slope)]
        right = [item[:, 1:].ravel() for item in (p, f, slope)]
        spans = np.array([rows, *left, *right])  # row, p0, f0, s0, p1, f1, s1
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
    def _reason(place: int, p: np.ndarray, f: np.ndarray, slope: np.ndarray, target: float) -> str:
        """Say why the least gap is where it is: inside, at a bound, or past a pinch where nothing helps."""
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


class _Several:
    """Several requirements at once: damped Newton's method from starts spread over the box."""

    def __init__(self, owner: RegionSolver, active: list[Requirement], cases: np.ndarray) -> None:
        self.owner, self.active, self.cases = owner, active, cases
        self.low = np.array([item.low for item in active])
        self.high = np.array([item.high for item in active])
        self.target = np.stack([owner.run.inputs.value(item.target)[cases] for item in active], axis=1)

    def solve(self) -> None:
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

    def _merit(self, probe: _Probe, rows: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        scale = np.maximum(np.abs(self.target[rows]), 1e-300)
        gap = (probe.q - self.target[rows]) / scale
        return gap * scale, np.where(probe.good, np.abs(gap).max(axis=1), np.inf)

    def _newton(self, rows: np.ndarray, p: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        probe = self.owner._probe(self.active, self.cases[rows], p)
        f, merit = self._merit(probe, rows)
        slopes = probe.slopes
        damping = np.ones(len(p))
        for _ in range(REFINEMENTS):
            on = np.flatnonzero((merit > 1e-12) & np.isfinite(merit) & (damping > 1e-3))
            if not len(on):
                break
            step = np.zeros((len(on), p.shape[1]))
            for place, n in enumerate(on):  # few and small; rank-deficient ones are common at bounds
                step[place] = -np.linalg.lstsq(slopes[n], f[n], rcond=1e-12)[0]
            limit = 0.5 * (self.high - self.low)
            step *= np.minimum(1.0, (limit / np.maximum(np.abs(step), 1e-300)).min(axis=1))[:, None]
            new = np.clip(p[on] + damping[on, None] * step, self.low, self.high)
            trial = self.owner._probe(self.active, self.cases[rows[on]], new)
            f_new, merit_new = self._merit(trial, rows[on])
            better = merit_new < merit[on]
            stuck = (np.abs(new - p[on]) <= 1e-14 * np.abs(p[on])).all(axis=1)
            take = on[better]
            p[take], f[take], merit[take], slopes[take] = new[better], f_new[better], merit_new[better], trial.slopes[better]
            damping[on] = np.where(better, np.minimum(1.0, 2 * damping[on]), 0.4 * damping[on])
            damping[on[stuck]] = 0.0
        return p, merit, slopes
