"""What a run says: streams, units and quantities of its states, and their derivatives along its extra inputs."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.equilibrium.base import COMPLEX_STEP
from leanloop.flash.solve import Split, at_enthalpy
from leanloop.flowsheet.quantity import Formula
from leanloop.flowsheet.run import Run
from leanloop.stream import TWO_PHASE, Flashed, Stream, divide


class View:
    """Look-ups into a run.

    Parameters
    ----------
    run : Run
    moved : bool
        Whether the states are moved by a complex step along the run's extra inputs, so that
        imaginary parts are derivatives; arrays then lead with the seed axis E.
    """

    def __init__(self, run: Run, moved: bool = False) -> None:
        self.run, self.moved = run, moved
        self._units: dict[str, dict[str, Any]] = {}
        self._splits: dict[str, Split] = {}

    def stream(self, name: str) -> Stream:
        """Give a stream, states (M, C + 2) or (E, M, C + 2)."""
        state = self.run.states[name]
        if self.moved:
            way = self.run.ways.get(name)
            state = state + 1j * COMPLEX_STEP * (np.zeros((len(self.run.extra), *state.shape)) if way is None else way)
        phase = self.run.plan.phases[name]
        return Stream(state, phase) if phase != TWO_PHASE else self._flashed(name, state)

    def _flashed(self, name: str, state: np.ndarray) -> Stream:
        """Give a stream that may be of two phases, split as its maker would."""
        mixture = self.run.plan.mixtures.get(name)
        if mixture is None:
            nothing = np.full(state.shape[:-1], np.nan)
            return Flashed(state, TWO_PHASE, nothing, nothing)
        if name not in self._splits:
            with np.errstate(all="ignore"):
                flows = state[..., :-2]
                total = flows.sum(axis=-1)
                numbers = self._moved(mixture.addresses())
                split = at_enthalpy(mixture, flows, total * state[..., -2], state[..., -1], numbers)
                self._splits[name] = split
        split = self._splits[name]
        return Flashed(state, TWO_PHASE, split.temperature, divide(split.gas.sum(axis=-1), state[..., :-2].sum(axis=-1)))

    def parts(self, name: str) -> tuple[np.ndarray, np.ndarray]:
        """Give gas and liquid of a stream that may be of two phases, (M, C) mol/s each; NaN where nothing splits it."""
        stream = self.stream(name)
        if name not in self._splits:
            return np.full(stream.flows.shape, np.nan), np.full(stream.flows.shape, np.nan)
        return self._splits[name].gas, self._splits[name].liquid

    def numbers(self, unit: str) -> dict[str, Any]:
        """Give the numbers of a unit by local name."""
        return self._moved(self.run.plan.addresses[unit])

    def _moved(self, addresses: Mapping[str, str]) -> dict[str, Any]:
        run = self.run
        numbers = run.inputs.of(addresses)
        if self.moved:
            for local, address in addresses.items():
                if address in run.extra:
                    way = np.zeros((len(run.extra), run.inputs.cases))
                    if address in run.follow:
                        way += run.follow[address].T
                    else:
                        way[run.extra.index(address)] = 1.0
                    numbers[local] = numbers[local] + 1j * COMPLEX_STEP * way
        return numbers

    def memory(self, unit: str) -> dict[str, np.ndarray]:
        """Give the state inside a unit."""
        run, out = self.run, {}
        for node, memory in run.memory.items():
            if node[1] == unit:
                out.update(memory)
                for key, way in run.memory_ways.get(node, {}).items() if self.moved else ():
                    out[key] = memory[key] + 1j * COMPLEX_STEP * way
        return out

    def sides(self, unit: str) -> tuple[dict[str, Stream], dict[str, Stream]]:
        """Give the inlets and outlets of a unit by label."""
        own = self.run.plan.units[unit]
        return (
            {label: self.stream(name) for label, name in own.inlets.items()},
            {label: self.stream(name) for label, name in own.outlets.items()},
        )

    def unit(self, name: str) -> Mapping[str, Any]:
        """Give what a unit reports."""
        if name not in self._units:
            unit = self.run.plan.units[name]
            with np.errstate(all="ignore"):
                found = unit.results(*self.sides(name), self.numbers(name), self.memory(name))
            self._units[name] = {"kind": unit.kind, **found}
        return self._units[name]


def value(run: Run, quantity: Formula) -> np.ndarray:
    """Give a quantity, (M,) or (M, N); NaN where undefined."""
    view = View(run)
    with np.errstate(all="ignore"):
        found = quantity(view.stream, view.unit)
    return np.full(run.inputs.cases, np.nan) if found is None else found


def derivatives(run: Run, quantity: Formula) -> np.ndarray:
    """Give the total derivatives of a quantity along the run's extra inputs, (E, M) or (E, M, N)."""
    view = View(run, moved=True)
    with np.errstate(all="ignore"):
        found = quantity(view.stream, view.unit)
    if found is None:
        return np.full((len(run.extra), run.inputs.cases), np.nan)
    found = np.asarray(found)
    imaginary = found.imag if np.iscomplexobj(found) else np.zeros(found.shape)
    imaginary = np.where(np.isnan(found.real), np.nan, imaginary)
    if imaginary.ndim and imaginary.shape[0] != len(run.extra):
        imaginary = np.broadcast_to(imaginary, (len(run.extra), *imaginary.shape))
    return imaginary / COMPLEX_STEP
