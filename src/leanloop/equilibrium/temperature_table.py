"""Equilibrium ratio from a table over temperature."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.entries import Values
from leanloop.equilibrium import points
from leanloop.equilibrium.base import Proportional
from leanloop.quantities import unit_scale


class TemperatureTable(Proportional):
    """Ratio K through given points over temperature, y = K(T) x, in straight lines that go on beyond the ends.

    Read by ``model = "table"`` where the columns are temperature and K.

    Validity: between the first and the last temperature, at the pressure of the data; `outside` reports the rest.

    Source: linear interpolation.
    """

    name = "table"
    entries = points.entries_of({"temperature": ()})
    complex_safe = False

    def __init__(self, values: Values) -> None:
        super().__init__(values)
        self._factor, self._offset = unit_scale(values.words.get("unit", "K"), "temperature")

    @property
    def uses(self) -> frozenset[str]:
        """The temperature alone."""
        return frozenset(("temperature",))

    def _line(self, temperature: np.ndarray, numbers: Mapping[str, Any]) -> tuple[np.ndarray, np.ndarray]:
        kelvin = np.asarray(numbers["temperature"], dtype=float) * self._factor + self._offset
        return points.straight(kelvin, numbers["K"])(temperature)

    def k(self, temperature: np.ndarray, pressure: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give K on the lines."""
        return self._line(temperature, numbers)[0]

    def slopes(
        self, temperature: np.ndarray, pressure: np.ndarray, liquid: np.ndarray, numbers: Mapping[str, Any]
    ) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Give dK/dT times the liquid, zero, and K."""
        shape = np.broadcast_shapes(np.shape(temperature), np.shape(pressure), np.shape(liquid))
        ratio, slope = self._line(temperature, numbers)
        return np.broadcast_to(slope * liquid, shape), np.zeros(shape), np.broadcast_to(ratio, shape)

    def outside(
        self, temperature: np.ndarray, pressure: np.ndarray, liquid: np.ndarray, numbers: Mapping[str, Any]
    ) -> np.ndarray:
        """Tell where the temperature is below the first point or above the last."""
        shape = np.broadcast_shapes(np.shape(temperature), np.shape(pressure), np.shape(liquid))
        first, last = (numbers["temperature"][index] * self._factor + self._offset for index in (0, -1))
        return np.broadcast_to(points.off(temperature, first, last), shape)

    @classmethod
    def examples(cls) -> list[Mapping[str, Any]]:
        """Give one table in a unit and one with a unit at each temperature."""
        return [
            {"temperature": [20, 40, 80], "unit": "degC", "K": [0.5, 0.9, 2.4]},
            {"temperature": ["0 degC", "50 degF"], "K": [0.5, 0.4]},
        ]
