"""A unit kind's derivatives, the complex numbers behind them, its results and its memory."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.checks.base import require
from leanloop.checks.slopes import miss
from leanloop.checks.stand import SAME, SUITE, Stand, Variable
from leanloop.equilibrium.base import COMPLEX_STEP
from leanloop.stream import Stream

check = SUITE.check


def seed_ways(stand: Stand, weights: np.ndarray) -> tuple[dict[str, np.ndarray | None], dict[str, np.ndarray]]:
    """Give the ways of inlets and numbers along one seed for each variable, each case with its own weight.

    Parameters
    ----------
    stand : Stand
    weights : (S, M)
    """
    ways: dict[str, np.ndarray | None] = dict.fromkeys(stand.inlets)
    number_ways: dict[str, np.ndarray] = {}
    for seed, variable in enumerate(stand.variables()):
        name = variable.name
        if variable.place is None:
            number_ways[name] = np.zeros_like(weights)
            number_ways[name][seed] = weights[seed]
        else:
            if ways[name] is None:
                ways[name] = np.zeros((*weights.shape, len(stand.components) + 2))
            ways[name][seed, :, variable.place] = weights[seed]
    return ways, number_ways


def derived(stand: Stand) -> tuple[Any, np.ndarray, dict[str, Any], dict[str, np.ndarray]]:
    """Evaluate along all variables; give the evaluation, the weights (S, M) and the ways."""
    seeds = len(stand.variables())
    weights = 1.0 + 0.5 * np.cos(np.arange(seeds)[:, None] + 2.0 * np.arange(stand.cases))
    ways, number_ways = seed_ways(stand, weights)
    return stand.evaluate(None, stand.spread, None, ways, number_ways, seeds), weights, ways, number_ways


def compare_outlets(stand: Stand, of_numbers: bool) -> None:
    """Hold the derivatives of outlets and memory along inlets, or along numbers, against differences."""
    whole, weights, *_ = derived(stand)
    labels = list(whole.outlets)
    for label, way in whole.tangents.items():
        wanted = (len(weights), stand.cases, len(stand.components) + 2)
        require(way is None or way.shape == wanted, f"the derivatives of '{label}' have the shape {np.shape(way)}, not {wanted}")
    for seed, variable in enumerate(stand.variables()):
        if of_numbers != (variable.place is None):
            continue

        def call(moved: np.ndarray, variable: Variable = variable) -> list[np.ndarray]:
            now = stand.evaluate(*stand.at(variable, moved))
            states = stand.states(now.outlets)
            return [states[label] for label in labels] + [now.memory[key] for key in whole.memory_tangents]

        found = variable.slope(call)
        for label, slope in zip(labels, found, strict=False):
            way = whole.tangents[label]
            own = np.zeros_like(slope) if way is None else way[seed] / weights[seed][:, None]
            off = miss(own, slope, stand.sizes() / variable.size[:, None])
            require(off <= 1, f"the derivative of '{label}' along {variable.title} is off {off:.1e} times what is allowed")
        for (key, way), slope in zip(whole.memory_tangents.items(), found[len(labels) :], strict=True):
            wide = (stand.cases, *(1,) * (slope.ndim - 1))
            sizes = np.abs(whole.memory[key]).max() / variable.size.reshape(wide)
            off = miss(way[seed] / weights[seed].reshape(wide), slope, sizes)
            require(off <= 1, f"the derivative of memory '{key}' along {variable.title} is off {off:.1e} times what is allowed")


@check("loops and requirements are solved with them", "mend evaluate, or set derivatives = 'difference'")
def derivatives_along_inlets(stand: Stand) -> None:
    """Derivatives along inlet flows, temperatures and pressures agree with differences."""
    compare_outlets(stand, of_numbers=False)


@check("sensitivities and requirements are made of them", "mend evaluate, or set derivatives = 'difference'")
def derivatives_along_numbers(stand: Stand) -> None:
    """Derivatives along numbers agree with differences."""
    compare_outlets(stand, of_numbers=True)


@check("derivatives are complex steps on leading axes", "broadcast over leading axes and take complex numbers, or set derivatives")
def complex_and_leading_axes(stand: Stand) -> None:
    """A plain formula gives the same on leading axes and with complex numbers."""
    if stand.unit.derivatives != "complex":
        return
    for takes, _ in stand.unit.sections():
        own = {label: stand.inlets[label] for label in takes}
        more = {
            label: Stream(np.stack([stream.state, stream.state * (1.01 + COMPLEX_STEP * 1j)]), stream.phase)
            for label, stream in own.items()
        }
        with np.errstate(all="ignore"):
            flat, deep = stand.unit.calculate(own, stand.spread), stand.unit.calculate(more, stand.spread)
        for label, stream in flat.items():
            state = deep[label].state
            wide = np.broadcast_to(state, (2, *stand.sizes().shape))
            gap = stand.apart(wide[0].real, np.broadcast_to(stream.state, stand.sizes().shape))
            require(gap <= SAME, f"with a leading axis '{label}' is {gap:.1e} apart")


def leaves(table: Mapping[str, Any], head: str = "") -> dict[str, np.ndarray]:
    """Flatten reported results: leaf by address, what is not known left out."""
    found: dict[str, np.ndarray] = {}
    for key, item in table.items():
        if isinstance(item, Mapping):
            found.update(leaves(item, f"{head}{key}."))
        elif item is not None:
            found[head + key] = np.asarray(item)
    return found


@check("every reported figure is differentiated, by case", "report (M,) or (M, N) arrays by formulas that take complex numbers")
def results_differentiable(stand: Stand) -> None:
    """Results have the case axis, and their complex steps agree with differences."""
    unit = stand.unit
    whole, weights, ways, number_ways = derived(stand)

    def report(inlets: Any, outlets: Any, numbers: Any, memory: Any) -> dict[str, np.ndarray]:
        with np.errstate(all="ignore"):
            return leaves(unit.results(inlets, outlets, numbers, memory))

    plain = report(stand.inlets, whole.outlets, stand.spread, whole.memory)
    for key, leaf in plain.items():
        require(leaf.shape[:1] == (stand.cases,) and leaf.ndim < 3, f"'{key}' has the shape {leaf.shape}, without the case axis")
    step = 1j * COMPLEX_STEP

    def shifted(streams: Mapping[str, Stream], along: Mapping[str, Any]) -> dict[str, Stream]:
        zero = np.zeros((len(weights), 1, 1))
        return {
            label: Stream(stream.state + step * (zero if along.get(label) is None else along[label]), stream.phase)
            for label, stream in streams.items()
        }

    numbers = stand.spread | {key: stand.spread[key] + step * way for key, way in number_ways.items()}
    memory = whole.memory | {key: whole.memory[key] + step * way for key, way in whole.memory_tangents.items()}
    moved = report(shifted(stand.inlets, ways), shifted(whole.outlets, whole.tangents), numbers, memory)
    for seed, variable in enumerate(stand.variables()):

        def call(now: np.ndarray, variable: Variable = variable) -> list[np.ndarray]:
            inlets, numbers = stand.at(variable, now)
            found = stand.evaluate(inlets, numbers)
            given = report(inlets, found.outlets, numbers, found.memory)
            return [np.asarray(given[key], dtype=float) for key in plain]

        for key, slope in zip(plain, variable.slope(call), strict=True):
            imaginary = np.broadcast_to(np.imag(moved[key]) / COMPLEX_STEP, (len(weights), *plain[key].shape))
            wide = (stand.cases, *(1,) * (slope.ndim - 1))
            own = imaginary[seed] / weights[seed].reshape(wide)
            most = np.nanmax(np.abs(plain[key]), initial=1e-300)
            off = miss(np.where(np.isnan(slope), np.nan, own), slope, most / variable.size.reshape(wide))
            require(off <= 1, f"the derivative of '{key}' along {variable.title} is off {off:.1e} times what is allowed")


@check("the next pass starts from the last one", "let memory shorten the way, never change the answer")
def memory_keeps_the_answer(stand: Stand) -> None:
    """A second evaluation from memory gives the same answer."""
    first = stand.evaluate()
    for key, value in first.memory.items():
        require(value.shape[:1] == (stand.cases,), f"memory '{key}' has the shape {value.shape}, without the case axis")
    again = stand.evaluate(memory=first.memory)
    for label, stream in first.outlets.items():
        gap = stand.apart(again.outlets[label].state, stream.state)
        require(gap <= SAME, f"from memory '{label}' is {gap:.1e} apart")
    require((again.status == first.status).all(), "from memory a case ends with another status")
