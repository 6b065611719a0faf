"""An example of a unit, read and connected, on which the checks evaluate it as the engine does."""

from __future__ import annotations

import copy
from collections.abc import Callable, Mapping, Sequence
from typing import Any

import numpy as np

from leanloop import enthalpy
from leanloop.checks.base import Suite, require
from leanloop.checks.slopes import Variable, bounds
from leanloop.components import Component, Components
from leanloop.entries import Context, Entry
from leanloop.equilibrium.conditions import Conditions
from leanloop.status import OK, status_of
from leanloop.stream import Stream
from leanloop.units import KINDS
from leanloop.units.base import Evaluation, Scene, Surroundings, Unit

NAME = "unit"
SAME = 1e-10  # relative difference that the end of an iteration may leave
LEAST = 1e-6  # of the flow fed: smaller flows are compared by this
Streams = dict[str, Stream]


class Stand:
    """A connected unit with inlets and numbers for M cases.

    The cases are those of the scene and, after them, the same a little apart.

    Parameters
    ----------
    plugin : type
    scene : Scene
    backwards : bool
        Whether the components come in reversed order.

    Attributes
    ----------
    inlets : dict of str to Stream
        By label; states (M, C + 2).
    numbers, spread : dict of str to float, list or (M,) array
        By local name, as written; and different from case to case where that may be.
    limits : dict of str to Entry
        Entries of the numbers that may change by small amounts.
    """

    def __init__(self, plugin: type[Unit], scene: Scene, backwards: bool = False) -> None:
        self.plugin, self.scene = plugin, scene
        context = Context(plain_si=True)
        names = [*scene.components, *(name for inlet in scene.inlets.values() for name in inlet.flows)]
        names = list(dict.fromkeys(names))[:: -1 if backwards else 1]
        self.components = Components(
            Component.read(name, scene.components.get(name, {}), f"components.{name}", context) for name in names
        )
        known = context.knowing(component=names)
        tables = {
            name: Conditions.read(name, table, self.components, known) for name, table in scene.equilibrium.items()
        }
        unit = plugin(NAME, **scene.entries).read(known.knowing(equilibrium=tables))
        unit.tables = tables
        self._stop_on(context)
        require(set(unit.inlets) == set(scene.inlets), f"its inlets are {list(unit.inlets)}, not {list(scene.inlets)}")
        self.inlets = self._streams(scene, unit)
        present = {label: (stream.flows > 0).any(axis=0) for label, stream in self.inlets.items()}
        phases = {label: stream.phase for label, stream in self.inlets.items()}
        warm = bool(scene.heat_data) or unit.wants_heat
        self.heat = enthalpy.read(scene.heat_data, self.components, known) if warm else None
        self.around = Surroundings(self.components, tables, scene.basis, present, phases, self.heat)
        self.unit = unit.connect(self.around, known)
        self._stop_on(context)
        self.cases = len(next(iter(self.inlets.values())).state)
        self.fed = sum(stream.total for stream in self.inlets.values())
        owners = {f"units.{NAME}": unit.values} | {
            f"equilibrium.{table.name}.{name}": model.values for table in tables.values() for name, model in table.models.items()
        }
        known_heat = [item for item in (self.heat.items if self.heat else ()) if item is not None]
        owners.update({f"heat_data.{item.name}": item.values for item in known_heat})
        known_numbers = {f"{head}.{key}": (values, key) for head, values in owners.items() for key in values.numbers}
        self.numbers: dict[str, Any] = {}
        self.limits: dict[str, Entry] = {}
        self.sorts: dict[str, str] = {}
        for local, address in self.unit.addresses().items():
            require(address in known_numbers, f"number '{local}' has the address '{address}', where there is none")
            values, key = known_numbers[address]
            entry, self.numbers[local], self.sorts[local] = values.entries[key], values.numbers[key], values.sorts[key]
            if entry.cases and entry.sort != "integer" and not isinstance(self.numbers[local], list):
                self.limits[local] = entry
        self.spread = {**self.numbers, **{key: self._spread(key, place) for place, key in enumerate(self.limits)}}

    @staticmethod
    def _stop_on(context: Context) -> None:
        require(not context.faults, "has faults: " + "; ".join(str(fault) for fault in context.faults))

    def _streams(self, scene: Scene, unit: Unit) -> Streams:
        given = {}
        for label in unit.inlets:
            inlet = scene.inlets[label]
            columns = [inlet.flows.get(name, 0.0) for name in self.components.names]
            given[label] = np.stack(np.broadcast_arrays(*columns, inlet.temperature, inlet.pressure, [0.0])[:-1], axis=-1)
        count = max(len(state) for state in given.values())
        streams = {}
        for place, (label, state) in enumerate(given.items()):
            state = np.broadcast_to(state, (count, state.shape[-1])).astype(float)
            # by place in the scene, so that the order of the components plays no part
            shift = {name: 0.13 * np.cos(3 * number + place) for number, name in enumerate(sorted(self.components.names))}
            flows = [1 + shift[name] for name in self.components.names]
            factor = np.array([*flows, 1 + 0.004 * np.cos(place), 1.02 - 0.01 * place])
            streams[label] = Stream(np.concatenate([state, state * factor]), scene.inlets[label].phase)
        return streams

    def _spread(self, key: str, place: int) -> np.ndarray:
        value, half = self.numbers[key], self.cases // 2
        moved = value * (1 + 0.01 * np.cos(np.arange(half) + place))
        low, high = bounds(self.limits[key])
        return np.concatenate([np.full(half, float(value)), np.where((moved < low) | (moved > high), value, moved)])

    # --- evaluating

    def evaluate(
        self,
        inlets: Mapping[str, Stream] | None = None,
        numbers: Mapping[str, Any] | None = None,
        memory: Mapping[str, np.ndarray] | None = None,
        ways: Mapping[str, Any] | None = None,
        number_ways: Mapping[str, np.ndarray] | None = None,
        seeds: int = 0,
    ) -> Evaluation:
        """Evaluate all sections; what is not given is that of the stand."""
        inlets, numbers = self.inlets if inlets is None else inlets, self.numbers if numbers is None else numbers
        whole = Evaluation({}, {}, np.full(len(next(iter(inlets.values())).state), OK))
        for takes, gives in self.unit.sections():
            own = {label: inlets[label] for label in takes}
            with np.errstate(all="ignore"):
                found = self.unit.evaluate(
                    own, numbers, memory or None, {label: (ways or {}).get(label) for label in takes}, number_ways or {}, seeds
                )
            whole.outlets.update({label: found.outlets[label] for label in gives})
            whole.tangents.update({label: found.tangents.get(label) for label in gives})
            whole.status = np.maximum(whole.status, found.status)
            whole.memory.update(found.memory)
            whole.memory_tangents.update(found.memory_tangents)
        return whole

    def outlets(
        self, inlets: Mapping[str, Stream] | None = None, numbers: Mapping[str, Any] | None = None
    ) -> dict[str, np.ndarray]:
        """Give the calculated states by label, (M, C + 2); every case must be solved."""
        found = self.evaluate(inlets, numbers)
        ends = ", ".join(sorted({status_of(item).name for item in found.status}))
        require((found.status == OK).all(), f"its cases end with {ends}")
        return self.states(found.outlets)

    def states(self, streams: Mapping[str, Stream]) -> dict[str, np.ndarray]:
        """Give states by label, those of one case for all of them, (M, C + 2)."""
        return {label: np.broadcast_to(stream.state, self.sizes().shape) for label, stream in streams.items()}

    def moved(self, label: str, place: int | slice, change: Callable[[np.ndarray], np.ndarray]) -> Streams:
        """Give the inlets with one part of one of them changed."""
        state = self.inlets[label].state.copy()
        state[:, place] = change(state[:, place])
        return {**self.inlets, label: Stream(state, self.inlets[label].phase)}

    def take(self, cases: Sequence[int]) -> tuple[Streams, dict[str, Any]]:
        """Give the inlets and the spread numbers of some cases."""
        index = np.asarray(cases)
        numbers = {key: value[index] if isinstance(value, np.ndarray) else value for key, value in self.spread.items()}
        return {label: Stream(stream.state[index], stream.phase) for label, stream in self.inlets.items()}, numbers

    def sizes(self) -> np.ndarray:
        """Give what differences of a state are measured by, (M, C + 2): the flow fed, K and Pa."""
        first = next(iter(self.inlets.values()))
        return np.concatenate([np.tile(self.fed[:, None], len(self.components)), first.state[:, -2:]], axis=1)

    def apart(self, one: np.ndarray, other: np.ndarray, sizes: np.ndarray | None = None) -> float:
        """Give the largest relative difference of two states, infinite where one alone is NaN."""
        sizes = self.sizes() if sizes is None else sizes
        if one.shape != other.shape or np.any(np.isnan(one) != np.isnan(other)):
            return np.inf
        worst = np.abs(one - other) / (np.maximum(np.abs(one), np.abs(other)) + LEAST * sizes + 1e-300)
        return float(np.nanmax(worst, initial=0.0))

    def variables(self) -> list[Variable]:
        """List what the unit is differentiated by: what may flow, temperatures, pressures, numbers."""
        found = []
        most = np.max([stream.flows for stream in self.inlets.values()], axis=0)
        reach = np.concatenate([np.where(most > 0, most, self.fed[:, None]), self.sizes()[:, -2:]], axis=1)
        for label, stream in self.inlets.items():
            for place in (*np.flatnonzero(self.around.present[label]), -2, -1):
                title = (*self.components.names, "temperature", "pressure")[place]
                own = stream.state[:, place], self.sizes()[:, place], reach[:, place]
                found.append(Variable(label, int(place), f"{title} of '{label}'", *own, 0.0, np.inf))
        for key, entry in self.limits.items():
            value = self.spread[key]
            size = np.where(value == 0, 1.0, np.abs(value))
            found.append(Variable(key, None, f"number '{key}'", value, size, size, *bounds(entry)))
        return found

    def at(self, variable: Variable, value: np.ndarray) -> tuple[Streams, dict[str, Any]]:
        """Give inlets and spread numbers with one variable changed."""
        if variable.place is None:
            return self.inlets, {**self.spread, variable.name: value}
        return self.moved(variable.name, variable.place, lambda _: value), self.spread

    def copied(self) -> tuple[Streams, dict[str, Any]]:
        """Give copies of the inlets and the spread numbers."""
        return copy.deepcopy(self.inlets), copy.deepcopy(self.spread)


SUITE = Suite(KINDS, lambda plugin: plugin.examples(), Stand)
