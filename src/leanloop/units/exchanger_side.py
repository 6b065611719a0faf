"""One side of an exchanger: temperature along the heat that it has taken up or given away."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.enthalpy.heat import Heat
from leanloop.flash.mixture import Mixture
from leanloop.flash.solve import at_enthalpy, at_gas_fraction, at_temperature
from leanloop.status import OK
from leanloop.stream import TWO_PHASE, Stream
from leanloop.units.base import Numbers
from leanloop.units.warmth import heat_flow, temperature_at, two_phase

GUESS = 320.0  # K
TRACE = 1e-9  # of the second phase, at bubble and dew point: there derivatives are those of two phases


class Side:
    """A stream that changes its enthalpy at the pressure of its outlet.

    Parameters
    ----------
    stream : Stream
        The inlet, states (..., M, C + 2), real or complex.
    heat : Heat
    mixture : Mixture or None
        What splits it where it may flash; None where its phase stays.
    numbers : mapping
        By local name as heat data and mixture know them; arrays (..., M).
    pressure : (..., M) Pa
        Of the outlet.

    Attributes
    ----------
    energy : (..., M) W
        Enthalpy flow of the inlet.
    warmth : (..., M) K
        Temperature at that enthalpy.
    empty : (..., M) bool
        Where nothing flows.
    """

    def __init__(
        self, stream: Stream, heat: Heat, mixture: Mixture | None, numbers: Mapping[str, Any], pressure: np.ndarray
    ) -> None:
        self.stream, self.heat, self.mixture, self.numbers, self.pressure = stream, heat, mixture, numbers, pressure
        self.energy = heat_flow(stream, heat, numbers)
        self.empty = np.real(stream.total) == 0
        self._apart = {
            key: value[..., None, :] if not isinstance(value, list) and np.ndim(value) > 1 else value
            for key, value in numbers.items()
        }
        two = stream.phase == TWO_PHASE
        self.guess = np.full(self.empty.shape, GUESS) if two else np.real(stream.temperature)
        if mixture is None:
            self.warmth = stream.temperature
        else:
            self.warmth = at_enthalpy(mixture, stream.flows, self.energy, pressure, numbers, self.guess).temperature

    def temperatures(self, energy: np.ndarray) -> np.ndarray:
        """Give the temperatures at K enthalpies in W, (..., K, M) each."""
        flows, guess = self.stream.flows[..., None, :, :], self.guess[..., None, :]
        if self.mixture is None:
            return temperature_at(self.heat, self.stream.phase, flows, energy, self._apart, guess)
        return at_enthalpy(self.mixture, flows, energy, self.pressure[..., None, :], self._apart, guess).temperature

    def energy_at(self, temperature: np.ndarray) -> np.ndarray:
        """Give the enthalpy flow in W at a temperature in K, (..., M) each; of a flash there where the side may flash."""
        flows = self.stream.flows
        if self.mixture is None:
            function = self.heat.gas if self.stream.phase == "gas" else self.heat.liquid
            return (flows * function(temperature, self.numbers)).sum(axis=-1)
        good = np.where(np.real(temperature) > 0, temperature, np.nan)
        split = at_temperature(self.mixture, flows, good, self.pressure, self.numbers)
        return self.mixture.enthalpy(split.gas, split.liquid, good, self.numbers)

    def bends(self) -> list[np.ndarray]:
        """Give the enthalpy flows of bubble and dew point, (..., M) W; that of the inlet where there is no such point."""
        found = []
        if self.mixture is None:
            return found
        flows = self.stream.flows
        some = (np.real(flows) > 0).reshape(-1, flows.shape[-1]).any(axis=0)
        for share, kept in ((TRACE, self.mixture.stays_gas), (1.0 - TRACE, self.mixture.stays_liquid)):
            if (some & kept).all() or not (some & ~kept).any():
                continue
            split = at_gas_fraction(self.mixture, flows, share, self.numbers, pressure=self.pressure)
            energy = self.mixture.enthalpy(split.gas, split.liquid, split.temperature, self.numbers)
            here = (split.status == OK) & ~self.empty & ~((np.real(flows) > 0) & kept).any(axis=-1)
            found.append(np.where(here, energy, self.energy))
        return found

    def leaving(self, energy: np.ndarray) -> Stream:
        """Give the outlet at an enthalpy flow, (..., M) W."""
        flows = self.stream.flows
        if self.mixture is not None:
            return two_phase(flows, np.where(self.empty, 0.0, energy), self.pressure)
        temperature = temperature_at(self.heat, self.stream.phase, flows, energy, self.numbers, self.stream.temperature)
        return Stream.of(flows, temperature, self.pressure, self.stream.phase)


def levelled(inlets: Mapping[str, Stream], numbers: Numbers) -> tuple[dict[str, Stream], dict[str, Any]]:
    """Give the real parts, without leading axes along which they do not change, as those of derivatives.

    Parameters
    ----------
    inlets : mapping of str to Stream
        States (..., M, C + 2).
    numbers : mapping of str to float, list or (..., M) array
    """
    states = {label: np.real(stream.state) for label, stream in inlets.items()}
    own = {key: value if isinstance(value, list) else np.real(value) for key, value in numbers.items()}
    arrays = {key: value for key, value in own.items() if np.ndim(value) > 1 and not isinstance(value, list)}
    depth = max([state.ndim - 2 for state in states.values()] + [value.ndim - 1 for value in arrays.values()])
    while depth > 0:
        deep = [state for state in states.values() if state.ndim - 2 == depth]
        deep += [value for value in arrays.values() if value.ndim - 1 == depth]
        if not all(np.array_equal(item, np.broadcast_to(item[:1], item.shape), equal_nan=True) for item in deep):
            break
        states = {label: state[0] if state.ndim - 2 == depth else state for label, state in states.items()}
        arrays = {key: value[0] if value.ndim - 1 == depth else value for key, value in arrays.items()}
        depth -= 1
    return {label: Stream(state, inlets[label].phase) for label, state in states.items()}, {**own, **arrays}
