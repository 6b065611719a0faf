"""One loop of a run, from its start to its last pass: torn streams as a vector for a recycle method."""

from __future__ import annotations

import numpy as np

from leanloop.flowsheet.graph import Node, Step
from leanloop.flowsheet.run import ClosedLoop, Local, Run, put, wide
from leanloop.recycle.driver import Pass, close
from leanloop.recycle.linear import newton_step
from leanloop.status import OK, Status, code
from leanloop.stream import TWO_PHASE, Stream

TEMPERATURE_TOLERANCE = 1e-6  # K
ENTHALPY_TOLERANCE = 1e-4  # J/mol of a stream that may be of two phases, about as much
PRESSURE_TOLERANCE = 1e-9  # relative
NEGLIGIBLE = 4 * np.finfo(float).eps  # a last correction smaller than this changes nothing
LEAST_SCALE = 1e-12  # of the loop flow, where nothing of a component is brought or made


def solve_step(run: Run, step: Step) -> None:
    """Calculate a step for all cases that are still good, closing its loop where it has one.

    Parameters
    ----------
    run : Run
    step : Step
    """
    cases = np.flatnonzero(run.status == OK)
    if not len(cases):
        for name in run.plan.inner(step):
            run.states.setdefault(name, np.full((run.inputs.cases, run.plan.width), np.nan))
    elif step.tears:
        LoopRun(run, step, cases).close()
    else:
        run.calculate(step, cases)


class LoopRun:
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
        brought = fed != 0.0
        for name in step.units:
            unit = plan.units[name]
            brought = brought | unit.adds(plan.components)
            if type(unit).made is not plan.makes_nothing:
                brought = brought | unit.makes(plan.components, run.inputs.of(plan.addresses[name], cases))
        self.nothing = ~brought
        self.base: dict[str, np.ndarray] = {}
        self.last: tuple[np.ndarray, np.ndarray, Local] | None = None
        self.derive = run.settings.method.needs_jacobian

    # --- start

    def _start(self) -> np.ndarray:
        """Estimate the tears by rounds of the units' own rough outlets; cheap, and no pass."""
        run, plan = self.run, self.run.plan
        local = run.begin(self.cases, self.step, 0)
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
                    state = wide(found[label].state, len(self.cases))
                    if not (np.isfinite(state.sum()) and state.min() >= 0.0):
                        cold = plan.phases[name] == TWO_PHASE  # an enthalpy may be below zero
                        kept = np.arange(state.shape[-1]) == state.shape[-1] - 2 if cold else False
                        state = np.where(np.isfinite(state) & ((state >= 0) | kept), state, 0.0)
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

    def _pass(self, rows: np.ndarray, x: np.ndarray, derive: bool) -> tuple[Local, np.ndarray]:
        run, plan = self.run, self.run.plan
        cases = self.cases[rows]
        seeds = (self.extra + self.count) if derive else 0
        local = run.begin(cases, self.step, seeds)
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
            run.evaluate(node, cases, seeds, local, guesses.get(node))
            given += self._brought(node, cases, local)
        return local, given

    def _brought(self, node: Node, cases: np.ndarray, local: Local) -> np.ndarray | float:
        """Give what a unit adds or makes, (m, C) mol/s; what it takes away counts as nothing."""
        plan = self.run.plan
        unit = plan.units[node[1]]
        if type(unit).added is plan.adds_nothing and type(unit).made is plan.makes_nothing:
            return 0.0
        inlets, outlets = plan.ports[node]
        streams = [
            {label: Stream(local.states[name], plan.phases[name]) for label, name in side.items()} for side in (inlets, outlets)
        ]
        numbers = self.run.inputs.of(plan.addresses[node[1]], cases)
        found = unit.added(*streams, numbers), unit.made(*streams, numbers)
        return sum((np.maximum(item, 0.0) for item in found if item is not None), 0.0)

    def _scale(self, x: np.ndarray, given: np.ndarray, local: Local) -> np.ndarray:
        tolerance = self.run.settings.tolerance
        scale = np.empty_like(x)
        least = 1e-20 * given.sum(axis=1)
        for tear in self.step.tears:
            begin = self.offsets[tear]
            for number, place in enumerate(self.places[tear]):
                own = x[:, begin + number]
                if place == self.run.plan.width - 2:
                    warm = self.run.plan.phases[tear] != TWO_PHASE
                    own = np.full(len(x), (TEMPERATURE_TOLERANCE if warm else ENTHALPY_TOLERANCE) / tolerance)
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
        picked = Local(status=local.status[rows], worst=local.worst[rows])
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
        run.store(self.cases[cases], self.step, picked)

    def _total(self, way: np.ndarray, turn: np.ndarray | None) -> np.ndarray | None:
        """Turn derivatives along tears into total ones along the extra inputs."""
        if turn is None:
            return None
        return way[: self.extra] + np.einsum("sm...,mse->em...", way[self.extra :], turn)

    def _extra_ways(self, local: Local, rows: np.ndarray) -> np.ndarray:
        out = np.zeros((len(rows), self.count, self.extra))
        for tear in self.step.tears:
            way = local.ways.get(tear)
            if way is not None:
                out[:, self._part(tear), :] = way[: self.extra][:, rows][..., self.places[tear]].transpose(1, 2, 0)
        return out

    def _jacobian(self, local: Local) -> tuple[np.ndarray | None, np.ndarray | None]:
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
        for tear in self.step.tears:
            if run.plan.phases[tear] == TWO_PHASE:  # enthalpies may be below zero
                low[self._part(tear)][self.places[tear] == run.plan.width - 2] = -np.inf
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
        run.loops.append(ClosedLoop(self.step, outcome, self.cases))
