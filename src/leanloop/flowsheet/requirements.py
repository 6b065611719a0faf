"""Requirements: freed inputs that bring quantities to their targets, whatever the start.

With the loops closed at given freed inputs p, a quantity q(p) and its exact slope are known. One
requirement is bracketed on a grid over its bounds, with the slopes telling where a turning point
hides a pair of solutions between two grid points, and refined by Newton's method inside the
bracket. Several at once are solved by Newton's method from starts spread over the box.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from leanloop.flowsheet.graph import Region
from leanloop.flowsheet.loop import solve_step
from leanloop.flowsheet.requirement import Found, Probe, Requirement
from leanloop.flowsheet.run import Run
from leanloop.flowsheet.several import Several
from leanloop.flowsheet.single import Single
from leanloop.flowsheet.view import derivatives, value
from leanloop.status import OK, Status, code, solved

ROWS_AT_ONCE = 4096


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
        self.inputs = run.inputs
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
            with np.errstate(all="ignore"):  # what has no answer is NaN, and its status says so
                self._active_sets(cases)
        for item in self.requirements:
            run.inputs.arrays[item.free] = self.found[item.name].free_value
        run.inputs.touched = run.inputs.touched | {item.free for item in self.requirements}
        for step in self.region.steps:
            solve_step(run, step)
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
        probe = self.probe(idle, cases, p, fixed)
        more = np.zeros(len(cases), dtype=bool)
        for number, item in enumerate(idle):
            target = self.run.inputs.value(item.target)[cases]
            over = probe.q[:, number] - target if item.kind == "at_most" else target - probe.q[:, number]
            # where the given input has no answer at all, the limit does not hold there either
            new = ((over > 1e-9 * np.abs(target)) | ~probe.good) & ~self.found[item.name].active[cases]
            self.found[item.name].active[cases[new]] = True
            more |= new
        return cases[more]

    def _solve_active(self, active: list[Requirement], cases: np.ndarray) -> None:
        if len(active) == 1:
            Single(self, active[0], cases).solve()
        elif active:
            Several(self, active, cases).solve()

    # --- probing

    def probe(
        self, active: Sequence[Requirement], cases: np.ndarray, p: np.ndarray, fixed: dict[str, np.ndarray] | None = None
    ) -> Probe:
        """Close the region's loops at freed inputs p (K, P) of given cases (K,)."""
        pieces = []
        for begin in range(0, len(cases), ROWS_AT_ONCE):
            part = slice(begin, begin + ROWS_AT_ONCE)
            pieces.append(self._probe_piece(active, cases[part], p[part], {k: v[part] for k, v in (fixed or {}).items()}))
        return Probe(*(np.concatenate([getattr(item, key) for item in pieces]) for key in ("q", "slopes", "good")))

    def _probe_piece(self, active: Sequence[Requirement], cases: np.ndarray, p: np.ndarray, fixed: dict) -> Probe:
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
            solve_step(trial, step)
        self.evaluations += trial.evaluations
        q = np.stack([value(trial, item.quantity) for item in active], axis=1)
        slopes = np.stack([derivatives(trial, item.quantity).T for item in active], axis=1)
        good = solved(trial.status) & np.isfinite(q).all(axis=1) & np.isfinite(slopes).all(axis=(1, 2))
        return Probe(q, slopes, good)

    # --- verdict

    def _judge(self) -> None:
        run = self.run
        solved_here = run.status == OK
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
            found.reached = gap & solved_here
            found.reason[found.reached] = None
            missed = solved_here & ~gap
            run.status[missed] = code(Status.out_of_reach)
