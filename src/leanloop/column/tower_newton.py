"""Newton's method on a batch of towers, and the response of the answer to its data."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from leanloop.column.tower import Form, State, Tower, beyond, residual
from leanloop.column.tower_jacobian import Sloped, TowerJacobian, blocks
from leanloop.column.tower_start import COLDEST, HOTTEST
from leanloop.status import OK, Status, code

STEP_LIMIT = 0.2  # a flow falls to no less than this part of itself in one step
GROWTH = 5.0  # and the gas rises to no more than this many times itself
LITTLE = 1e-4  # of all that is fed: from less than this a gas may vanish in one step
WARMEST = 20.0  # K in one step
FLOOR = 1e-9  # flows below this part of the component's feed are judged against it
LEAST_FLOOR = 1e-11  # of all that is fed
DEGREE = 100.0  # K that count as a relative change of one
DONE = 1e-8
NEAR = 1e-4
LEFT = 1e-13
SHARP = 1e-10  # relative step above which the state before it is not near enough for derivatives
PLAIN_ITERATIONS = 20  # then the columns are filled
ITERATIONS = 600
TINY = 1e-300
SETTLED = 1e-6  # residual, in feeds, that is none
ASTRAY = 10.0  # residual, in feeds, at which the plain method is given up
MODERATE = 0.8  # change in a step of a filling that keeps the step's length
SHORTER, LONGER, LEAST_DRAG = 0.25, 4.0, 1e-3


@dataclass
class TowerAnswer:
    """Solved batch of towers.

    Attributes
    ----------
    tower : Tower
    unknowns : (M, S, n)
    at : State
        One quadratic step before `unknowns`.
    jacobian : TowerJacobian
        Factorised there.
    status : (M,) int8
    iterations, filled : int
        Newton iterations in all, and those among them with a drag.
    first_step : (M,)
        Relative size of the first step.
    """

    tower: Tower
    unknowns: np.ndarray
    at: State
    jacobian: TowerJacobian
    status: np.ndarray
    iterations: int
    filled: int
    first_step: np.ndarray

    def respond(self, right: np.ndarray) -> np.ndarray:
        """Give the change of the unknowns, (K, M, S, n), for a change of the residual at fixed unknowns."""
        return self.jacobian.solve(-right)


def floors_of(tower: Tower) -> np.ndarray:
    """Give what a change of each unknown is judged against at least, (M, n); infinite for what is not there."""
    form = tower.form
    scale = tower.fed.sum(axis=1)
    everything = scale.sum(axis=-1)
    floor = np.where(scale > 0, np.maximum(FLOOR * scale, LEAST_FLOOR * everything[:, None]), np.inf)
    out = np.empty((len(scale), form.unknowns))
    at = len(form.implicit)
    out[:, :at] = floor[:, form.implicit]
    out[:, at], out[:, at + 1] = FLOOR * everything, DEGREE
    out[:, at + 2 :] = floor[:, form.falling]
    return out


def limited(tower: Tower, now: np.ndarray, step: np.ndarray) -> np.ndarray:
    """Add a step so that flows stay positive and temperatures move by no more than 20 K."""
    at = len(tower.form.implicit)
    new = np.maximum(now + step, STEP_LIMIT * now)
    size = tower.fed.sum(axis=(1, 2))[:, None]
    gas = now[..., at]
    low = (gas < LITTLE * size) & (gas + step[..., at] <= 0.0)  # a gas may vanish, and come back
    new[..., at] = np.where(low, 0.0, np.minimum(new[..., at], GROWTH * np.maximum(gas, 0.01 * size)))
    warm = now[..., at + 1]
    new[..., at + 1] = np.clip(warm + np.clip(step[..., at + 1], -WARMEST, WARMEST), COLDEST, HOTTEST)
    return new


def solve(
    tower: Tower, begin: Callable[[Tower, np.ndarray], np.ndarray], fill: Callable[[Tower, np.ndarray], np.ndarray],
    guess: np.ndarray | None = None, sharp: bool = False,
) -> TowerAnswer:  # fmt: skip
    """Solve the stage equations of a batch of columns.

    Parameters
    ----------
    tower : Tower
    begin, fill : callable
        Of a tower and the numbers of its cases: unknowns to start from, and to fill from, (m, S, n).
    guess : (M, S, n), optional
        Unknowns to start from instead; rows that are not finite are started afresh.
    sharp : bool
        Whether the answer's factorisation is to be made where its derivatives are exact.

    Returns
    -------
    TowerAnswer
        Cases that cannot be solved carry their status and finite rubbish; the others are not disturbed.
    """
    cases = len(tower.fed)
    status = np.full(cases, OK)
    everything = tower.fed.sum(axis=(1, 2))
    good = np.isfinite(everything) & (tower.fed >= 0).all(axis=(1, 2)) & np.isfinite(tower.spec).all(axis=1)
    good &= np.isfinite(tower.fed_heat).all(axis=1) & (tower.pressure > 0).all(axis=1)
    status[~good] = code(Status.not_finite)
    every = np.arange(cases)
    with np.errstate(all="ignore"):
        if guess is None:
            unknowns = begin(tower, every)
        else:
            unknowns = guess.copy()
            lost = np.flatnonzero(~np.isfinite(guess).all(axis=(1, 2)) & (status == OK))
            if len(lost):
                unknowns[lost] = begin(tower.take(lost), lost)
        unknowns[status != OK] = 1.0
        return _iterate(tower, unknowns, floors_of(tower), status, fill, sharp)


def _iterate(
    tower: Tower, unknowns: np.ndarray, floors: np.ndarray, status: np.ndarray,
    fill: Callable[[Tower, np.ndarray], np.ndarray], sharp: bool,
) -> TowerAnswer:  # fmt: skip
    form, cases = tower.form, len(unknowns)
    absent = ~np.isfinite(floors)[:, None, :]
    if absent.any():
        unknowns = np.where(absent, 0.0, unknowns)
    nothing = beyond(tower)
    if nothing is not None:
        absent = absent | nothing
        unknowns = np.where(absent, 0.0, unknowns)
    few = len(absent) == cases and absent.any()
    scale = tower.fed.sum(axis=(1, 2)) + TINY
    drag, before = np.zeros(cases), np.ones(cases)
    filling, broken_before, stuck = np.zeros(cases, dtype=bool), np.zeros(cases, dtype=int), np.zeros(cases, dtype=int)
    part: np.ndarray | None = None
    local, iterations, filled, first_step = tower, 0, 0, None
    while True:
        iterations += 1
        own = slice(None) if part is None else part
        now, floor, failed = unknowns[own], floors[own], status[own] != OK
        sloped = Sloped(local, now)
        lead = residual(local, sloped.at)
        merit = np.abs(lead).max(axis=(1, 2)) / scale[own]
        lost = (merit > ASTRAY) | (iterations > PLAIN_ITERATIONS) | (stuck[own] > 2)
        lost &= ~filling[own] & ~failed & (before[own] > NEAR)
        if lost.any() and iterations > 1:
            again = np.flatnonzero(lost) if part is None else part[lost]
            unknowns[again] = fill(tower.take(again), again)
            if few:
                unknowns = np.where(absent, 0.0, unknowns)
            filling[again], drag[again], stuck[again] = True, 1.0, 0
            now = unknowns[own]
            sloped = Sloped(local, now)
            lead = residual(local, sloped.at)
        filled += int(filling[own].any())
        content = blocks(local, sloped)
        if failed.any():
            content.own[failed] = np.nan
        jacobian = TowerJacobian(form, content, drag[own])
        step = jacobian.solve(-lead)
        if few:
            step = np.where(absent[own], 0.0, step)
        new = limited(local, now, step)
        size = (np.abs(step) / (np.where(np.isfinite(floor), floor, 1.0)[:, None, :] + _judged(form, new))).max(axis=(1, 2))
        if filling[own].any():  # implicit Euler steps of the column's own filling, as long as changes stay moderate
            moved = _moved(form, now, step, scale[own])
            grown = drag[own] * np.clip(moved / MODERATE, SHORTER, LONGER)
            grown = np.where((drag[own] == 0) & (moved > 2.0), 0.05, np.where(grown < LEAST_DRAG, 0.0, np.minimum(grown, 1e3)))
            size = np.where(filling[own] & (drag[own] > 0), 1.0, size)
            drag[own] = np.where(filling[own], grown, 0.0)
        still = (np.abs(new - now) <= 1e-10 * (np.abs(now) + scale[own][:, None, None])).all(axis=(1, 2)) & (merit > SETTLED)
        stuck[own] = np.where(still & ((drag[own] == 0) | ~filling[own]), stuck[own] + 1, 0)
        broken = (jacobian.bad | ~np.isfinite(size)) & ~failed
        new[broken | failed] = now[broken | failed]
        late = (size > DONE) if iterations >= ITERATIONS else filling[own] & (stuck[own] > 2)  # flows below zero are asked for
        if broken.any() and iterations < ITERATIONS:
            hopeless = broken & filling[own] & (broken_before[own] > 3)
            size[broken], before_own = 1.0, broken & ~hopeless
            broken_before[own] += broken
            again = np.flatnonzero(before_own) if part is None else part[before_own]
            if len(again):
                new[before_own] = fill(tower.take(again), again)
                filling[again], drag[again] = True, 1.0 * 10.0 ** broken_before[again]
            late |= hopeless
        status[own] = np.where(late, code(Status.stages_unsolved), status[own])
        size[late] = 0.0
        size[failed] = 0.0
        if part is None:
            unknowns = new
        else:
            unknowns[part] = new
        first_step = size if first_step is None else first_step
        if part is None:
            bend = np.maximum(size / np.maximum(before**2, TINY), 1e-2)
            if (size <= np.maximum(DONE, np.sqrt(LEFT / bend))).all():
                if sharp and size.max(initial=0.0) > SHARP:  # derivatives are taken at the answer itself
                    sloped = Sloped(tower, unknowns)
                    content = blocks(tower, sloped)
                    content.own[status != OK] = np.nan
                    jacobian = TowerJacobian(form, content, np.zeros(cases))
                return TowerAnswer(tower, unknowns, sloped.at, jacobian, status, iterations, filled, first_step)
        before[own] = size
        own = np.arange(cases) if part is None else part
        far = own[size > NEAR]
        if not len(far):
            part, local = None, tower
        elif len(far) < 0.5 * len(own) and iterations > 1:
            part, local = far, tower.take(far)


def _moved(form: Form, now: np.ndarray, step: np.ndarray, scale: np.ndarray) -> np.ndarray:
    """Give the largest change that a step asks for, in parts of what is there and of a hundredth of the feed, or of 10 K."""
    against = np.abs(now) + 0.01 * scale[:, None, None]
    against[..., len(form.implicit) + 1] = 10.0
    return (np.abs(step) / against).max(axis=(1, 2))


def _judged(form: Form, new: np.ndarray) -> np.ndarray:
    """Give what changes are judged against: the unknowns, zero for temperatures, whose floor is enough."""
    judged = np.abs(new)
    judged[..., len(form.implicit) + 1] = 0.0
    return judged
