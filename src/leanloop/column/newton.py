"""Newton's method on all stages of all cases at once, and the response of the answer to its data."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from leanloop.column.equations import (
    Phases,
    Stages,
    gas_derivatives,
    phases,
    residual,
)
from leanloop.column.jacobian import Jacobian
from leanloop.column.start import filling_start, fraction_ratio, start, sweep
from leanloop.status import OK, Status, code

STEP_LIMIT = 0.2  # a flow falls to no less than this part of itself in one step
NEAR = 1e-4  # relative step after which the next one is expected to be the last
DONE = 1e-8  # relative step after which the error, about its square, is rounding
CLOSE = 5e-3  # relative step after which the next one is likely to be the last
LEFT = 1e-13  # relative error that may be left, where two steps show how the square counts
FLOOR = 1e-9  # flows below this part of the component's feed are judged against it
LEAST_FLOOR = 1e-11  # of all that is fed: below it a flow drowns in the rounding of the others
TRACE = 10.0  # flows below this many floors are settled by `_settle_traces`
PLAIN_ITERATIONS = 12  # then the columns are filled from the start of a single stage
ITERATIONS = 300
TINY = 1e-300


@dataclass
class Answer:
    """Solved batch of columns.

    Attributes
    ----------
    stages : Stages
    at : Phases
        State at which the factorisation was made, one quadratic step before `unknowns`.
    unknowns : (M, N, 1 + D) mol/s
    jacobian : Jacobian
        Factorised at `at`.
    status : (M,) int8
    iterations : int
        Newton iterations, the last one included.
    moved : (S, M, N, 1 + D) mol/s or None
        Response to the right-hand sides asked for, where the last step was solved along with them.
    first_step : (M,)
        Relative size of the first step: how good the start was.
    """

    stages: Stages
    at: Phases
    unknowns: np.ndarray
    jacobian: Jacobian
    status: np.ndarray
    iterations: int
    moved: np.ndarray | None
    first_step: np.ndarray

    def respond(self, right: np.ndarray) -> np.ndarray:
        """Give the change of the unknowns for changes of the stage equations' data.

        Parameters
        ----------
        right : (S, M, N, 1 + D) mol/s
            Change of the residual at fixed unknowns.

        Returns
        -------
        (S, M, N, 1 + D) mol/s
        """
        return self.jacobian.solve(-right)


def _limited(unknowns: np.ndarray, step: np.ndarray, inert: np.ndarray, floor: np.ndarray) -> np.ndarray:
    """Add a step so that flows stay positive; gas vanishes only where nothing keeps it."""
    new = np.maximum(unknowns + step, STEP_LIMIT * unknowns)
    gas = new[..., 0]
    np.maximum(gas, inert, out=gas)
    if not inert.all():
        gas[(inert == 0.0) & (gas < 1e-4 * floor[:, None]) & (step[..., 0] <= 0.0)] = 0.0
    return new


Ask = Callable[[Phases], np.ndarray]


def solve(stages: Stages, guess: np.ndarray | None = None, ask: Ask | None = None, good: bool = False) -> Answer:
    """Solve the stage equations of a batch of columns.

    Parameters
    ----------
    stages : Stages
    guess : (M, N, 1 + D) mol/s, optional
        Unknowns to start from; rows that are not finite are started afresh.
    ask : callable, optional
        Gives the right-hand sides (S, M, N, 1 + D) of responses that are wanted, as for
        `Answer.respond`; they are solved along with a step that is likely to be the last.
    good : bool
        Whether the guess is so good that the first step is likely to be the last.

    Returns
    -------
    Answer
        Cases that cannot be solved carry their status and finite rubbish; the others are not
        disturbed by them.
    """
    cases, count, parts = stages.shape
    status = np.full(cases, OK)
    scale = stages.feeds.sum(axis=1)
    everything = scale.sum(axis=-1) + stages.gas_inert[:, 0] + stages.liquid_inert[:, -1]
    least = min(
        stages.feeds.min(initial=0.0), stages.gas_inert.min(initial=0.0), stages.liquid_inert.min(initial=0.0)
    )
    if not (least >= 0.0 and np.isfinite(everything.sum() + stages.law.k_dilute.sum())):
        given = np.isfinite(everything) & np.isfinite(stages.law.k_dilute).all(axis=(1, 2))
        given &= (stages.feeds >= 0).all(axis=(1, 2)) & (stages.gas_inert >= 0).all(axis=1)
        given &= (stages.liquid_inert >= 0).all(axis=1)
        status[~given] = code(Status.not_finite)
    wet = stages.liquid_inert[:, 0] + stages.feeds[:, 0].sum(axis=-1) > 1e-9 * everything
    if not wet.all():
        wet |= stages.liquid_inert.min(axis=1) > 0
        status[(status == OK) & ~wet] = code(Status.dry_stage)
    with np.errstate(all="ignore"):
        unknowns = start(stages) if guess is None else guess
        if guess is not None:
            lost = ~np.isfinite(guess).all(axis=(1, 2)) & (status == OK)
            if lost.any():
                unknowns = guess.copy()
                index = np.flatnonzero(lost)
                unknowns[index] = start(stages.take(index))
        floors = np.empty((cases, parts + 1))
        floors[:, 0] = FLOOR * everything
        floors[:, 1:] = np.where(scale > 0, np.maximum(FLOOR * scale, LEAST_FLOOR * everything[:, None]), np.inf)
        answer = _iterate(stages, unknowns, floors, status, ask, good)
        # nothing that stays in the liquid keeps a stage wet: where no answer was found, it dried up
        lost = (answer.status == code(Status.stages_unsolved)) & (stages.liquid_inert.min(axis=1) == 0.0)
        answer.status = np.where(lost, code(Status.dry_stage), answer.status)
        _settle_traces(answer, floors)
    return answer


def _settle_traces(answer: Answer, floors: np.ndarray) -> None:
    """Give flows far below the component's feed their full relative accuracy.

    In the coupled system they carry the rounding of the large flows; at total flows that are
    already right, each component's balances are a tridiagonal system whose answer has none of it.
    """
    stages, unknowns = answer.stages, answer.unknowns
    low = TRACE * np.where(np.isfinite(floors), floors, 0.0)[:, None, 1:]
    small = (unknowns[..., 1:] < low) & (answer.status == OK)[:, None, None]
    if not small.any():
        return
    cases = np.flatnonzero(small.any(axis=(1, 2)))
    few, now = (stages, unknowns) if len(cases) == len(unknowns) else (stages.take(cases), unknowns[cases])
    liquid = few.liquid_inert + now[..., 1:].sum(axis=-1)
    swept = sweep(few, now[..., 0], liquid, fraction_ratio(few, now))
    good = small[cases] & np.isfinite(swept[..., 1:])
    unknowns[cases, :, 1:] = np.where(good, swept[..., 1:], now[..., 1:])


def _iterate(
    stages: Stages, unknowns: np.ndarray, floors: np.ndarray, status: np.ndarray, ask: Ask | None, good: bool
) -> Answer:
    """Iterate until a step of every case is rounding; the last factorisation holds all cases."""
    cases = len(unknowns)
    absent = ~np.isfinite(floors)[:, None, :]
    absent = absent if absent.any() else None
    unknowns = np.where(absent, 0.0, unknowns) if absent is not None else unknowns
    drag, first, before = np.zeros(cases), np.zeros(cases), np.zeros(cases)
    part: np.ndarray | None = None  # the unsolved cases, while they are few
    local, iterations, likely, first_step = stages, 0, good, None
    while True:
        iterations += 1
        own = slice(None) if part is None else part
        now, floor, failed = unknowns[own], floors[own], status[own] != OK
        any_failed = failed.any()
        at = phases(local, now)
        lead = residual(local, at)
        if iterations > PLAIN_ITERATIONS:
            # implicit Euler steps of the columns' own filling, ever longer as the residual falls
            merit = (np.abs(lead) / floor[:, None, :]).max(axis=(1, 2), initial=0.0)
            first[own] = np.where(first[own] == 0.0, merit, first[own])
            drag[own] = np.where(merit > 1e5, np.minimum(merit / first[own], 1.0), 0.0)
        derivatives = gas_derivatives(local, at)
        if any_failed:
            derivatives[failed] = np.nan
        jacobian, moved = Jacobian(derivatives, drag[own]), None
        np.negative(lead, out=lead)
        if ask is not None and likely and part is None:
            both = jacobian.solve(np.concatenate([lead[None], -ask(at)]))
            step, moved = both[0], both[1:]
        else:
            step = jacobian.solve(lead)
        bad = jacobian.bad
        if absent is not None:
            step = np.where(absent[own], 0.0, step)
        new = _limited(now, step, local.gas_inert, floor[:, 0])
        size = (np.abs(step) / (new + floor[:, None, :])).max(axis=(1, 2), initial=0.0)
        if iterations > PLAIN_ITERATIONS:
            size[drag[own] > 0] = 1.0
        if any_failed or bad.any() or not np.isfinite(size.sum()) or iterations >= ITERATIONS:
            broken = (bad | ~np.isfinite(size)) & ~failed
            new[broken | failed] = now[broken | failed]
            size[broken | failed] = 0.0
            late = size > DONE if iterations >= ITERATIONS else np.zeros(len(size), dtype=bool)
            if iterations < PLAIN_ITERATIONS:  # a bad step of the plain method is no failure yet: the column is filled soon
                again = np.flatnonzero(broken)
                if len(again):
                    new[again] = filling_start(local if len(again) == len(new) else local.take(again))
                    size[again] = 1.0
            else:
                late |= broken
            status[own] = np.where(late, code(Status.stages_unsolved), status[own])
            size[late] = 0.0
        if part is None:
            unknowns = new
        else:
            unknowns[part] = new
        first_step = size if first_step is None else first_step
        if part is None:
            if size.max(initial=0.0) <= DONE:
                return Answer(stages, at, unknowns, jacobian, status, iterations, moved, first_step)
            # Newton's error after a step is about bend times its square; the last two steps tell bend
            bend = np.maximum(size / np.maximum(before**2, TINY), 1e-2)
            if (size <= np.maximum(DONE, np.sqrt(LEFT / bend))).all():
                return Answer(stages, at, unknowns, jacobian, status, iterations, moved, first_step)
        before[own] = size
        likely = size.max(initial=0.0) <= CLOSE
        own = np.arange(cases) if part is None else part
        if iterations == PLAIN_ITERATIONS and (size > NEAR).any():
            again = own[size > NEAR]
            unknowns[again] = filling_start(stages if len(again) == cases else stages.take(again))
        far = own[size > NEAR]
        if not len(far):
            part, local = None, stages
        elif len(far) < 0.5 * len(own) and iterations > 1:
            part, local = far, stages.take(far)
