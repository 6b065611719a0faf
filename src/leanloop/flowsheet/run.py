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
from leanloop.recycle.driver import Outcome
from leanloop.status import OK, Status, code
from leanloop.stream import Stream
from leanloop.units.base import Evaluation


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
class ClosedLoop:
    """How a loop was closed, for all cases of a run."""

    step: Step
    outcome: Outcome
    cases: np.ndarray


@dataclass
class Local:
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
        self.loops: list[ClosedLoop] = []
        self.messages: dict[str, str] = {}  # by unit, what its last exception said
        self.reasons: dict[int, str] = {}  # by case, why its unit failed, once judged
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

    def _feed(self, name: str, cases: np.ndarray, seeds: int, local: Local) -> None:
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

    def _note(self, local: Local, where: np.ndarray, codes: np.ndarray, unit: int) -> None:
        fresh = where & (local.status == OK)  # the first unit that fails is the culprit
        local.status = np.where(fresh, codes, local.status)
        local.worst = np.where(fresh, unit, local.worst)

    def _unit(self, node: Node, cases: np.ndarray, seeds: int, local: Local, guess: Mapping[str, np.ndarray] | None) -> None:
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
            local.states[name] = wide(found.outlets[label].state, len(cases))
            local.ways[name] = found.tangents.get(label)
        local.memory[node], local.memory_ways[node] = found.memory, found.memory_tangents
        bad = found.status != OK
        if bad.any():
            self._note(local, bad, found.status, self.plan.unit_number[node[1]])

    def evaluate(self, node: Node, cases: np.ndarray, seeds: int, local: Local, guess: Any = None) -> None:
        """Evaluate a feed or a unit for some cases and put its outlets among the states."""
        # cases that have failed carry NaN along; their status says so, no warning need
        with np.errstate(all="ignore"):
            if node.sort == "feed":
                self._feed(node.name, cases, seeds, local)
            else:
                self._unit(node, cases, seeds, local, guess)

    # --- steps

    def calculate(self, step: Step, cases: np.ndarray) -> None:
        """Calculate a step without a loop for some cases."""
        local = self.begin(cases, step, len(self.extra))
        for node in step.nodes:
            guess = self.memory.get(node)
            guess = guess and {key: value[cases] for key, value in guess.items()}
            self.evaluate(node, cases, len(self.extra), local, guess or None)
        self.store(cases, step, local)

    def begin(self, cases: np.ndarray, step: Step, seeds: int) -> Local:
        """Give the states and derivatives that enter a step, for some cases."""
        local = Local(status=np.full(len(cases), OK), worst=np.full(len(cases), -1))
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

    def store(self, cases: np.ndarray, step: Step, local: Local) -> None:
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


def wide(state: np.ndarray, cases: int) -> np.ndarray:
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
