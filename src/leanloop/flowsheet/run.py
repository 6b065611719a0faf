"""One solution run: nodes evaluated in order, loops closed, derivatives chained along.

All states are kept on the case axis. Derivatives are taken along seeds: first the E `extra`
inputs whose total derivatives are asked for, then, inside a loop, the tear variables. After a loop
has closed, the same matrix turns the latter into total derivatives along the former.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from leanloop.equilibrium.base import COMPLEX_STEP
from leanloop.flowsheet.graph import Node, Step
from leanloop.flowsheet.inputs import Inputs
from leanloop.recycle.base import RecycleMethod
from leanloop.recycle.driver import Outcome, Pass, close
from leanloop.recycle.linear import newton_step
from leanloop.status import OK, Status, code
from leanloop.stream import Stream
from leanloop.units.base import Evaluation

TEMPERATURE_TOLERANCE = 1e-6  # K
PRESSURE_TOLERANCE = 1e-9  # relative
NEGLIGIBLE = 4 * np.finfo(float).eps  # a last correction smaller than this changes nothing
LEAST_SCALE = 1e-12  # of the loop flow, where a component has no external input


@dataclass(frozen=True)
class Settings:
    """How recycles are closed.

    Parameters
    ----------
    method : RecycleMethod
    tolerance : float
    passes : int
        Most passes of a loop.
    """

    method: RecycleMethod
    tolerance: float = 1e-10
    passes: int = 50


@dataclass
class Loop:
    """How a loop was closed, for all cases of a run."""

    step: Step
    outcome: Outcome
    cases: np.ndarray


@dataclass
class _Local:
    """States, derivatives and memories of some cases during a pass."""

    states: dict[str, np.ndarray] = field(default_factory=dict)
    ways: dict[str, np.ndarray | None] = field(default_factory=dict)
    memory: dict[Node, dict[str, np.ndarray]] = field(default_factory=dict)
    memory_ways: dict[Node, dict[str, np.ndarray]] = field(default_factory=dict)
    status: np.ndarray | None = None
    worst: np.ndarray | None = None


class Run:
    """States of M cases while they are solved, and afterwards.

    Parameters
    ----------
    plan : leanloop.flowsheet.plan.Plan
    inputs : Inputs
    settings : Settings
    extra : sequence of str
        Addresses of the inputs along which derivatives are carried.

    Attributes
    ----------
    states : dict of str to (M, C + 2) array
        By stream.
    ways : dict of str to (E, M, C + 2) array or None
        Total derivatives of the stream states along the extra inputs.
    memory, memory_ways : dict of Node to dict of arrays
    status : (M,) int8
    culprit : (M,) int
        Number of the unit that failed in `plan.unit_names`, -1 for none.
    """

    def __init__(self, plan: Any, inputs: Inputs, settings: Settings, extra: Sequence[str] = ()) -> None:
        self.plan, self.inputs, self.settings, self.extra = plan, inputs, settings, tuple(extra)
        cases = inputs.cases
        self.states: dict[str, np.ndarray] = {}
        self.ways: dict[str, np.ndarray | None] = {}
        self.memory: dict[Node, dict[str, np.ndarray]] = {}
        self.memory_ways: dict[Node, dict[str, np.ndarray]] = {}
        self.tear_start: dict[tuple[str, ...], np.ndarray] = {}
        self.status = np.full(cases, OK)
        self.culprit = np.full(cases, -1)
        self.loops: list[Loop] = []
        self.messages: dict[str, str] = {}  # by unit, what its last exception said
        self.follow: dict[str, np.ndarray] = {}  # (M, E) by freed input, once linearised
        self.evaluations = 0

    # --- one node

    def _number_ways(self, addresses: Mapping[str, str], seeds: int, cases: int) -> dict[str, np.ndarray]:
        found = {}
        for place, address in enumerate(self.extra):
            for local, own in addresses.items():
                if own == address:
                    way = np.zeros((seeds, cases))
                    way[place] = 1.0
                    found[local] = way
        return found

    def _feed(self, name: str, cases: np.ndarray, seeds: int, local: _Local) -> None:
        feed = self.plan.feeds[name]
        addresses = feed.addresses()
        numbers = self.inputs.of(addresses, cases)
        touched = self.inputs.touched | set(self.extra)
        changed = frozenset(key for key, address in addresses.items() if address in touched)
        stream = feed.stream(numbers, changed)
        shape = (len(cases), stream.state.shape[-1])
        local.states[name] = np.broadcast_to(stream.state, shape).copy()
        local.ways[name] = None
        ways = self._number_ways(addresses, seeds, len(cases)) if seeds else {}
        if ways:
            moved = {key: numbers[key] + 1j * COMPLEX_STEP * way for key, way in ways.items()}
            state = feed.stream({**numbers, **moved}, changed).state
            local.ways[name] = np.broadcast_to(state.imag / COMPLEX_STEP, (seeds, *shape)).copy()
        bad = ~np.isfinite(local.states[name]).all(axis=1) | (local.states[name][:, :-2] < 0).any(axis=1)
        self._note(local, bad, np.full(len(cases), code(Status.not_finite)), -1)

    def _note(self, local: _Local, where: np.ndarray, codes: np.ndarray, unit: int) -> None:
        fresh = where & (local.status == OK)  # the first unit that fails is the culprit
        local.status = np.where(fresh, codes, local.status)
        local.worst = np.where(fresh, unit, local.worst)

    def _unit(self, node: Node, cases: np.ndarray, seeds: int, local: _Local, guess: Mapping[str, np.ndarray] | None) -> None:
        unit = self.plan.units[node[1]]
        inlets, outlets = self.plan.ports[node]
        phases = self.plan.phases
        streams = {label: Stream(local.states[name], phases[name]) for label, name in inlets.items()}
        ways = {label: local.ways.get(name) for label, name in inlets.items()}
        addresses = self.plan.addresses[node[1]]
        numbers = self.inputs.of(addresses, cases)
        number_ways = self._number_ways(addresses, seeds, len(cases)) if self.extra and seeds else {}
        self.evaluations += 1
        try:
            found = unit.evaluate(streams, numbers, guess, ways, number_ways, seeds)
        except Exception as error:  # a plug-in may raise anything; its case alone is lost
            self.messages[node.name] = f"{type(error).__name__}: {error}"
            found = _apart(unit, outlets, self.plan.width, streams, numbers, guess, ways, number_ways, seeds)
        for label, name in outlets.items():
            local.states[name] = _wide(found.outlets[label].state, len(cases))
            local.ways[name] = found.tangents.get(label)
        local.memory[node], local.memory_ways[node] = found.memory, found.memory_tangents
        bad = found.status != OK
        if bad.any():
            self._note(local, bad, found.status, self.plan.unit_number[node[1]])

    def _node(self, node: Node, cases: np.ndarray, seeds: int, local: _Local, guess: Any = None) -> None:
        # cases that have failed carry NaN along; their status says so, no warning need
        with np.errstate(all="ignore"):
            if node.sort == "feed":
                self._feed(node.name, cases, seeds, local)
            else:
                self._unit(node, cases, seeds, local, guess)

    # --- steps

    def step(self, step: Step) -> None:
        """Calculate a step for all cases that are still good."""
        cases = np.flatnonzero(self.status == OK)
        if not len(cases):
            for name in self.plan.inner(step):
                self.states.setdefault(name, np.full((self.inputs.cases, self.plan.width), np.nan))
        elif step.tears:
            _LoopRun(self, step, cases).close()
        else:
            local = self._begin(cases, step, len(self.extra))
            for node in step.nodes:
                guess = self.memory.get(node)
                guess = guess and {key: value[cases] for key, value in guess.items()}
                self._node(node, cases, len(self.extra), local, guess or None)
            self._store(cases, step, local)

    def _begin(self, cases: np.ndarray, step: Step, seeds: int) -> _Local:
        local = _Local(status=np.full(len(cases), OK), worst=np.full(len(cases), -1))
        everything = len(cases) == self.inputs.cases
        for name in self.plan.outer(step):
            state = self.states[name]
            local.states[name] = state if everything else state[cases]
            way = self.ways.get(name)
            if way is not None and seeds:
                wide = np.zeros((seeds, len(cases), self.plan.width))
                wide[: len(self.extra)] = way[:, cases]
                way = wide
            local.ways[name] = way if seeds else None
        return local

    def _store(self, cases: np.ndarray, step: Step, local: _Local) -> None:
        """Keep the states of cases that a step is done with."""
        for name in self.plan.inner(step):
            put(self.states, name, cases, self.inputs.cases, local.states[name])
            way = local.ways.get(name)
            if way is not None and self.extra:
                put_ways(self.ways, name, cases, self.inputs.cases, way)
        for node in step.nodes:
            if node in local.memory:
                for key, value in local.memory[node].items():
                    put(self.memory.setdefault(node, {}), key, cases, self.inputs.cases, value)
                for key, value in local.memory_ways[node].items() if self.extra else ():
                    put_ways(self.memory_ways.setdefault(node, {}), key, cases, self.inputs.cases, value)
        self.status[cases] = np.maximum(self.status[cases], local.status)
        fresh = (local.worst >= 0) & (self.culprit[cases] < 0)
        self.culprit[cases[fresh]] = local.worst[fresh]


def _wide(state: np.ndarray, cases: int) -> np.ndarray:
    """Give a state of one case for all of them, where a unit has not done so."""
    return state if len(state) == cases else np.broadcast_to(state, (cases, state.shape[-1]))


def _apart(
    unit: Any,
    outlets: Mapping[str, str],
    width: int,
    streams: Mapping[str, Stream],
    numbers: Mapping[str, Any],
    guess: Mapping[str, np.ndarray] | None,
    ways: Mapping[str, np.ndarray | None],
    number_ways: Mapping[str, np.ndarray],
    seeds: int,
) -> Evaluation:
    """Evaluate a unit case by case, so that one that raises spoils only itself."""
    cases = len(next(iter(streams.values())).state)
    states = {label: np.full((cases, width), np.nan) for label in outlets}
    tangents = {label: np.zeros((seeds, cases, width)) for label in outlets}
    status = np.full(cases, code(Status.unit_failed))
    memory: dict[str, np.ndarray] = {}
    memory_tangents: dict[str, np.ndarray] = {}
    for case in range(cases):
        own = slice(case, case + 1)
        try:
            found = unit.evaluate(
                {label: Stream(stream.state[own], stream.phase) for label, stream in streams.items()},
                {key: value[own] if isinstance(value, np.ndarray) else value for key, value in numbers.items()},
                {key: value[own] for key, value in guess.items()} if guess else None,
                {label: None if way is None else way[:, own] for label, way in ways.items()},
                {key: way[:, own] for key, way in number_ways.items()},
                seeds,
            )
        except Exception:
            continue
        status[case] = found.status[0]
        for label in outlets:
            states[label][own] = found.outlets[label].state
            if found.tangents.get(label) is not None:
                tangents[label][:, own] = found.tangents[label]
        for key, value in found.memory.items():
            memory.setdefault(key, np.full((cases, *value.shape[1:]), np.nan))[own] = value
        for key, value in found.memory_tangents.items():
            memory_tangents.setdefault(key, np.zeros((seeds, cases, *value.shape[2:])))[:, own] = value
    return Evaluation({label: Stream(state, "") for label, state in states.items()}, tangents, status, memory, memory_tangents)


def put(store: dict[Any, np.ndarray], key: Any, cases: np.ndarray, total: int, value: np.ndarray) -> None:
    """Put rows of some cases into a full array, made when first needed."""
    if len(cases) == total:
        store[key] = value
        return
    if key not in store or store[key].shape[1:] != value.shape[1:]:
        store[key] = np.full((total, *value.shape[1:]), np.nan)
    elif not store[key].flags.writeable:
        store[key] = store[key].copy()
    store[key][cases] = value


def put_ways(store: dict[Any, np.ndarray], key: Any, cases: np.ndarray, total: int, value: np.ndarray) -> None:
    """Put rows of some cases, on the second axis, into a full array."""
    if len(cases) == total:
        store[key] = value
        return
    if store.get(key) is None or store[key].shape[0] != value.shape[0] or store[key].shape[2:] != value.shape[2:]:
        store[key] = np.zeros((value.shape[0], total, *value.shape[2:]))
    store[key][:, cases] = value


class _LoopRun:
    """One loop of a run, from its start to its last pass."""

    def __init__(self, run: Run, step: Step, cases: np.ndarray) -> None:
        self.run, self.step, self.cases = run, step, cases
        plan = run.plan
        self.extra = len(run.extra)
        self.places = {tear: plan.tear_places(step, tear, bool(self.extra)) for tear in step.tears}
        counts = [len(self.places[tear]) for tear in step.tears]
        self.offsets = dict(zip(step.tears, np.concatenate([[0], np.cumsum(counts)[:-1]]).astype(int), strict=True))
        self.count = int(sum(counts))
        # a component that nothing brings into the loop is not in it, whatever rounding says
        fed = sum((run.states[name][cases, :-2] for name in plan.outer(step)), np.zeros((len(cases), plan.width - 2)))
        self.nothing = (fed == 0.0) & ~np.any([plan.units[name].adds(plan.components) for name in step.units], axis=0)
        self.base: dict[str, np.ndarray] = {}
        self.last: tuple[np.ndarray, np.ndarray, _Local] | None = None
        self.derive = run.settings.method.needs_jacobian

    # --- start

    def _start(self) -> np.ndarray:
        """Estimate the tears by rounds of the units' own rough outlets; cheap, and no pass."""
        run, plan = self.run, self.run.plan
        local = run._begin(self.cases, self.step, 0)
        outer = [local.states[name] for name in plan.outer(self.step)]
        for tear in self.step.tears:
            state = np.zeros((len(self.cases), plan.width))
            state[:, -2] = np.mean([item[:, -2] for item in outer], axis=0) if outer else 298.15
            # high, for a mixer passes on the lowest pressure it meets, its own recycle's included
            state[:, -1] = np.max([item[:, -1] for item in outer], axis=0) if outer else 101325.0
            local.states[tear] = state
        for _ in range(1 + len(self.step.tears)):
            for node in self.step.nodes:
                inlets, outlets = plan.ports[node]
                streams = {label: Stream(local.states[name], plan.phases[name]) for label, name in inlets.items()}
                numbers = run.inputs.of(plan.addresses[node[1]], self.cases)
                try:
                    found = plan.units[node[1]].estimate(streams, numbers)
                except Exception:  # an estimate is a help, not a must: nothing flows yet
                    found = {label: Stream(0.0 * next(iter(streams.values())).state, "") for label in outlets}
                for label, name in outlets.items():
                    state = _wide(found[label].state, len(self.cases))
                    if not (np.isfinite(state.sum()) and state.min() >= 0.0):
                        state = np.where(np.isfinite(state) & (state >= 0), state, 0.0)
                    local.states[name] = state
        x = np.empty((len(self.cases), self.count))
        for tear in self.step.tears:
            self.base[tear] = local.states[tear]
            x[:, self._part(tear)] = local.states[tear][:, self.places[tear]]
        known = run.tear_start.get(self.step.tears)
        if known is not None and known.shape[1] == self.count:
            good = np.isfinite(known[self.cases]).all(axis=1)
            x[good] = known[self.cases][good]
        return x

    def _part(self, tear: str) -> slice:
        begin = self.offsets[tear]
        return slice(begin, begin + len(self.places[tear]))

    # --- passes

    def evaluate(self, rows: np.ndarray, x: np.ndarray) -> Pass:
        """Make one pass over the units for some of the loop's cases."""
        local, given = self._pass(rows, x, self.derive)
        self.last = (rows, x, local)
        g = np.empty_like(x)
        jacobian = np.zeros((len(x), self.count, self.count)) if self.derive else None
        for tear in self.step.tears:
            part, places = self._part(tear), self.places[tear]
            g[:, part] = local.states[tear][:, places]
            if self.derive and local.ways.get(tear) is not None:
                jacobian[:, part, :] = local.ways[tear][self.extra :][..., places].transpose(1, 2, 0)
        return Pass(g, jacobian, self._scale(x, given, local), local.status == OK)

    def _pass(self, rows: np.ndarray, x: np.ndarray, derive: bool) -> tuple[_Local, np.ndarray]:
        run, plan = self.run, self.run.plan
        cases = self.cases[rows]
        seeds = (self.extra + self.count) if derive else 0
        local = run._begin(cases, self.step, seeds)
        for tear in self.step.tears:
            state = self.base[tear][rows].copy()
            state[:, self.places[tear]] = x[:, self._part(tear)]
            local.states[tear] = state
            local.ways[tear] = None
            if seeds:
                way = np.zeros((seeds, len(rows), plan.width))
                for number, place in enumerate(self.places[tear]):
                    way[self.extra + self.offsets[tear] + number, :, place] = 1.0
                local.ways[tear] = way
        guesses = self._guesses(rows, x)
        given = np.zeros((len(rows), plan.width - 2))
        for name in plan.outer(self.step):
            given += local.states[name][:, :-2]
        for node in self.step.nodes:
            run._node(node, cases, seeds, local, guesses.get(node))
            given += self._added(node, cases, local)
        return local, given

    def _added(self, node: Node, cases: np.ndarray, local: _Local) -> np.ndarray | float:
        plan = self.run.plan
        unit = plan.units[node[1]]
        if type(unit).added is plan.adds_nothing:
            return 0.0
        inlets, outlets = plan.ports[node]
        streams = [
            {label: Stream(local.states[name], plan.phases[name]) for label, name in side.items()} for side in (inlets, outlets)
        ]
        added = unit.added(*streams, self.run.inputs.of(plan.addresses[node[1]], cases))
        return 0.0 if added is None else np.maximum(added, 0.0)

    def _scale(self, x: np.ndarray, given: np.ndarray, local: _Local) -> np.ndarray:
        tolerance = self.run.settings.tolerance
        scale = np.empty_like(x)
        least = 1e-20 * given.sum(axis=1)
        for tear in self.step.tears:
            begin = self.offsets[tear]
            for number, place in enumerate(self.places[tear]):
                own = x[:, begin + number]
                if place == self.run.plan.width - 2:
                    own = np.full(len(x), TEMPERATURE_TOLERANCE / tolerance)
                elif place == self.run.plan.width - 1:
                    own = PRESSURE_TOLERANCE / tolerance * np.abs(own)
                else:
                    own = np.maximum(np.maximum(given[:, place], LEAST_SCALE * own), least)
                scale[:, begin + number] = own
        return scale

    def _guesses(self, rows: np.ndarray, x: np.ndarray) -> dict[Node, dict[str, np.ndarray]]:
        """Predict the state inside the units from the last pass and its derivatives."""
        if self.last is None:
            return {
                node: {key: value[self.cases[rows]] for key, value in self.run.memory[node].items()}
                for node in self.step.nodes
                if self.run.memory.get(node)
            }
        before, x_before, local = self.last
        same = rows if len(before) == len(self.cases) else np.searchsorted(before, rows)
        whole = len(rows) == len(before)
        step = x - (x_before if whole else x_before[same])
        out = {}
        for node, memory in local.memory.items():
            out[node] = {}
            for key, value in memory.items():
                now = value if whole else value[same]
                way = local.memory_ways[node].get(key)
                if way is not None:
                    way = way[self.extra :] if whole else way[self.extra :, same]
                    now = now + np.einsum("sm...,ms->m...", way, step)
                out[node][key] = now
        return out

    # --- end

    def settle(self, cases: np.ndarray, rows: np.ndarray, x: np.ndarray, now: Pass) -> None:
        """Keep the last pass of cases that are done, with its last Newton correction where there is one."""
        run = self.run
        local = self.last[2]
        if self.extra and not self.derive:
            local, _ = self._pass(cases, x, True)
            rows = np.arange(len(cases))
        jacobian, g = (now.jacobian[rows], now.g[rows]) if self.derive else self._jacobian(local)
        turn = None
        if jacobian is not None:
            with np.errstate(invalid="ignore"):
                correction = newton_step(jacobian, g - x)
            correction[~np.isfinite(correction).all(axis=1)] = 0.0
            if (np.abs(correction) <= NEGLIGIBLE * np.abs(x)).all():
                correction = None
            if self.extra:
                turn = newton_step(jacobian, self._extra_ways(local, rows))
        picked = _Local(status=local.status[rows], worst=local.worst[rows])
        nothing = self.nothing[cases] if self.nothing.any() else None
        for name in run.plan.inner(self.step):
            state, way = local.states[name][rows], local.ways.get(name)
            if way is not None and jacobian is not None:
                if correction is not None:
                    moved = state + np.einsum("sm...,ms->m...", way[self.extra :, rows], correction)
                    state = np.where((moved < 0) & (state >= 0), state, moved)
                picked.ways[name] = self._total(way[:, rows], turn) if self.extra else None
            if nothing is not None:
                state[:, :-2][nothing] = 0.0
            picked.states[name] = state
        for node, memory in local.memory.items():
            picked.memory[node], picked.memory_ways[node] = {}, {}
            for key, value in memory.items():
                own, way = value[rows], local.memory_ways[node].get(key)
                if way is not None and jacobian is not None:
                    if correction is not None:
                        own = own + np.einsum("sm...,ms->m...", way[self.extra :, rows], correction)
                    if self.extra:
                        picked.memory_ways[node][key] = self._total(way[:, rows], turn)
                picked.memory[node][key] = own
        put(run.tear_start, self.step.tears, self.cases[cases], run.inputs.cases, x)
        run._store(self.cases[cases], self.step, picked)

    def _total(self, way: np.ndarray, turn: np.ndarray | None) -> np.ndarray | None:
        """Turn derivatives along tears into total ones along the extra inputs."""
        if turn is None:
            return None
        return way[: self.extra] + np.einsum("sm...,mse->em...", way[self.extra :], turn)

    def _extra_ways(self, local: _Local, rows: np.ndarray) -> np.ndarray:
        out = np.zeros((len(rows), self.count, self.extra))
        for tear in self.step.tears:
            way = local.ways.get(tear)
            if way is not None:
                out[:, self._part(tear), :] = way[: self.extra][:, rows][..., self.places[tear]].transpose(1, 2, 0)
        return out

    def _jacobian(self, local: _Local) -> tuple[np.ndarray | None, np.ndarray | None]:
        """Give dg/dx and g of a pass, where derivatives were taken."""
        if not self.extra:
            return None, None
        count = len(local.status)
        jacobian, g = np.zeros((count, self.count, self.count)), np.empty((count, self.count))
        for tear in self.step.tears:
            part, places = self._part(tear), self.places[tear]
            g[:, part] = local.states[tear][:, places]
            if local.ways.get(tear) is not None:
                jacobian[:, part, :] = local.ways[tear][self.extra :][..., places].transpose(1, 2, 0)
        return jacobian, g

    def close(self) -> None:
        """Iterate until every case is done and note how it ended."""
        run = self.run
        x = self._start()
        low = np.concatenate([np.where(self.places[tear] < run.plan.width - 2, 0.0, 1e-3) for tear in self.step.tears])
        settings = run.settings
        high = np.full(x.shape, np.inf)
        for tear in self.step.tears:
            places = self.places[tear]
            flows = places < run.plan.width - 2
            high[:, self._part(tear)][:, flows] = np.where(self.nothing[:, places[flows]], 0.0, np.inf)
        x = np.minimum(x, high)
        outcome = close(self.evaluate, self.settle, x, low, high, settings.method, settings.tolerance, settings.passes)
        late = ~outcome.converged & ~outcome.failed
        run.status[self.cases[late]] = np.maximum(run.status[self.cases[late]], code(Status.pass_limit))
        lost = outcome.failed & (run.status[self.cases] == OK)
        run.status[self.cases[lost]] = code(Status.not_finite)
        run.loops.append(Loop(self.step, outcome, self.cases))
