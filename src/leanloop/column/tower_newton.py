"""Newton's method on a batch of towers, and the response of the answer to its data."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from leanloop.column.tower import Form, State, Tower, beyond, evaluate, residual
from leanloop.column.tower_jacobian import Sloped, TowerJacobian, blocks
from leanloop.column.tower_path import BLENDING, FILLING, PLAIN, WIDELY, Path
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
CIRCLES = 5  # steps after which half steps are taken, lest two states alternate
PLAIN_ITERATIONS = 20  # then the safeguarded paths begin
ITERATIONS = 2000
TINY = 1e-300
SETTLED = 1e-6  # residual, in feeds, that is none
ASTRAY = 10.0  # residual, in feeds, at which the plain method is given up
MOST_FILLING, MOST_LAST = 400, 40  # Newton steps of a filling, and after the last blend
Begin = Callable[[Tower, np.ndarray, float], np.ndarray]
# ways and factors on the guessed boil-up, in the order in which they are tried
BLOWN = ((FILLING, 1.0), (BLENDING, 1.0), (WIDELY, 1.0))
BOILING = (
    (BLENDING, 1.0), (WIDELY, 1.0), (FILLING, 1.0), (BLENDING, 0.4), (WIDELY, 0.4), (BLENDING, 3.0), (WIDELY, 3.0),
    (BLENDING, 0.65), (WIDELY, 0.65), (BLENDING, 1.6), (WIDELY, 1.6), (BLENDING, 0.15), (BLENDING, 7.0),
)  # fmt: skip


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
        Newton iterations in all, and those among them on a safeguarded path.
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
    most = GROWTH * now[..., at + 2 :] + tower.fed[..., tower.form.falling].sum(axis=1)[:, None]
    new[..., at + 2 :] = np.minimum(new[..., at + 2 :], most)
    falling = now[..., at + 2 :]
    dry = (falling.sum(axis=-1) < LITTLE * size)[..., None] & (falling + step[..., at + 2 :] <= 0.0)
    new[..., at + 2 :] = np.where(dry, 0.0, new[..., at + 2 :])  # so may the liquid of a stage
    warm = now[..., at + 1]
    new[..., at + 1] = np.clip(warm + np.clip(step[..., at + 1], -WARMEST, WARMEST), COLDEST, HOTTEST)
    return new


def solve(
    tower: Tower, begin: Begin, fill: Begin, guess: np.ndarray | None = None, sharp: bool = False, boils: bool = False,
) -> TowerAnswer:  # fmt: skip
    """Solve the stage equations of a batch of columns.

    Parameters
    ----------
    tower : Tower
    begin, fill : callable
        Of a tower, the numbers of its cases and a factor on the guessed boil-up: unknowns to start from, and to fill
        from, (m, S, n).
    guess : (M, S, n), optional
        Unknowns to start from instead; rows that are not finite are started afresh.
    sharp : bool
        Whether the answer's factorisation is to be made where its derivatives are exact.
    boils : bool
        Whether the columns boil, rather than have a gas that stays one.

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
            unknowns = begin(tower, every, 1.0)
        else:
            unknowns = guess.copy()
            lost = np.flatnonzero(~np.isfinite(guess).all(axis=(1, 2)) & (status == OK))
            if len(lost):
                unknowns[lost] = begin(tower.take(lost), lost, 1.0)
        unknowns[status != OK] = 1.0
        return _iterate(tower, unknowns, floors_of(tower), status, Ways(tower, begin, fill, boils), sharp)


def _iterate(
    tower: Tower, unknowns: np.ndarray, floors: np.ndarray, status: np.ndarray, ways: Ways, sharp: bool
) -> TowerAnswer:
    form, cases = tower.form, len(unknowns)
    absent = ~np.isfinite(floors)[:, None, :]
    nothing = beyond(tower)
    if nothing is not None:
        absent = absent | nothing
    absent = absent if absent.any() else None
    unknowns = np.where(absent, 0.0, unknowns) if absent is not None else unknowns
    scale = tower.fed.sum(axis=(1, 2)) + TINY
    path, before, stuck = Path.of(unknowns), np.ones(cases), np.zeros(cases, dtype=int)
    every = np.arange(cases)
    part: np.ndarray | None = None
    local, iterations, filled, first_step = tower, 0, 0, None
    while True:
        iterations += 1
        own = every if part is None else part
        now, floor, failed = unknowns[own], floors[own], status[own] != OK
        underway = path.underway(own)
        if underway.any():
            filled += 1
            local.blend, local.held, local.wide = path.blend[own], ways.held[own], path.way[own] == WIDELY
        else:
            local.blend = None
        sloped = Sloped(local, now)
        lead = residual(local, sloped.at)
        content = blocks(local, sloped)
        if failed.any():
            content.own[failed] = np.nan
        jacobian = TowerJacobian(form, content, path.drag[own])
        step = jacobian.solve(-lead)
        if absent is not None:
            step = np.where(absent[own], 0.0, step)
        circling = (path.tries[own] > CIRCLES) & (path.way[own] != FILLING) & (before[own] > NEAR)
        new = limited(local, now, np.where(circling[:, None, None], 0.5 * step, step) if circling.any() else step)
        size = (np.abs(step) / (np.where(np.isfinite(floor), floor, 1.0)[:, None, :] + _judged(form, new))).max(axis=(1, 2))
        merit = np.abs(lead).max(axis=(1, 2)) / scale[own]
        broken = (jacobian.bad | ~np.isfinite(size)) & ~failed
        still = (np.abs(new - now) <= 1e-10 * (np.abs(now) + scale[own][:, None, None])).all(axis=(1, 2)) & (merit > SETTLED)
        stuck[own] = np.where(still & (path.drag[own] == 0), stuck[own] + 1, 0)
        new[broken | failed] = now[broken | failed]
        tired = iterations > PLAIN_ITERATIONS
        astray = (merit > ASTRAY) & (iterations > 1)
        if tired or broken.any() or astray.any() or (path.way[own] != PLAIN).any():
            size = np.where(broken, 1.0, size)
            moved = _moved(form, now, step, scale[own])
            lost = broken | (stuck[own] > 2)
            ended = path.advance(own, new, size, lost)
            path.pace(own, np.where(np.isfinite(moved), moved, 1.0))
            plain = path.way[own] == PLAIN
            ended |= plain & (lost | astray | tired) & (size > NEAR)
            ended |= (path.way[own] == FILLING) & (lost | (path.tries[own] > MOST_FILLING))
            blends = (path.way[own] == BLENDING) | (path.way[own] == WIDELY)
            ended |= blends & (path.blend[own] == 1.0) & (path.tries[own] > MOST_LAST)
            ended &= ~failed
            size = np.where(underway | path.underway(own), 1.0, size)  # a step of other equations proves nothing
            if ended.any():
                gone = ways.begin(tower, own[ended], path, new, np.flatnonzero(ended))
                status[gone] = code(Status.stages_unsolved)
                if absent is not None:
                    new = np.where(absent[own], 0.0, new)
                stuck[own[ended]] = 0
                size = np.where(ended, 1.0, size)
        if iterations >= ITERATIONS:
            status[own[size > DONE]] = code(Status.stages_unsolved)
        size[status[own] != OK] = 0.0
        if part is None:
            unknowns = new
        else:
            unknowns[part] = new
        first_step = size if first_step is None else first_step
        if part is None and not path.underway(own[status[own] == OK]).any():
            bend = np.maximum(size / np.maximum(before**2, TINY), 1e-2)
            if (size <= np.maximum(DONE, np.sqrt(LEFT / bend))).all():
                tower.blend = None
                if (merit > SETTLED).any():  # small steps of huge flows within the column are no answer
                    left = np.abs(residual(tower, evaluate(tower, unknowns))).max(axis=(1, 2)) / scale
                    wrong = np.flatnonzero((status == OK) & ~(left <= SETTLED))
                    gone = ways.begin(tower, wrong, path, unknowns, wrong)
                    status[gone] = code(Status.stages_unsolved)
                    again = np.setdiff1d(wrong, gone)
                    if len(again) and iterations < ITERATIONS:
                        unknowns = np.where(absent, 0.0, unknowns) if absent is not None else unknowns
                        before[again], stuck[again] = 1.0, 0
                        part, local = again, tower.take(again)
                        continue
                    status[again] = code(Status.stages_unsolved)
                if (sharp and size.max(initial=0.0) > SHARP) or underway.any():  # derivatives are taken at the answer itself
                    sloped = Sloped(tower, unknowns)
                    content = blocks(tower, sloped)
                    content.own[status != OK] = np.nan
                    jacobian = TowerJacobian(form, content, np.zeros(cases))
                return TowerAnswer(tower, unknowns, sloped.at, jacobian, status, iterations, filled, first_step)
        before[own] = size
        far = own[size > NEAR]
        if not len(far):
            part, local = None, tower
        elif len(far) < 0.5 * len(own) and iterations > 1:
            part, local = far, tower.take(far)


class Ways:
    """Where the safeguarded paths begin.

    Parameters
    ----------
    tower : Tower
    begin, fill : callable
        As for `solve`.
    boils : bool
        Whether the columns boil, so that continuation is tried before filling.
    """

    def __init__(self, tower: Tower, begin: Begin, fill: Begin, boils: bool) -> None:
        self._begin, self._fill = begin, fill
        form = tower.form
        self.attempts = BOILING if boils else BLOWN
        if not (form.warms or form.murphree.any()):  # nothing to blend
            self.attempts = ((FILLING, 1.0),)
        self.held = np.ones(tower.fed.shape[:2])

    def begin(self, tower: Tower, cases: np.ndarray, path: Path, new: np.ndarray, rows: np.ndarray) -> np.ndarray:
        """Send cases on the next way that they have not tried, from its start; give those that have none left."""
        next_up = path.tried[cases]
        for number, (way, boil_up) in enumerate(self.attempts):
            mine = next_up == number
            if mine.any():
                own = cases[mine]
                start = (self._fill if way == FILLING else self._begin)(tower.take(own), own, boil_up)
                new[rows[mine]] = start
                gas = start[..., len(tower.form.implicit)]
                self.held[own] = np.maximum(gas, 1e-3 * tower.fed[own].sum(axis=(1, 2))[:, None])
                path.begin(own, way)
        return cases[next_up >= len(self.attempts)]


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
