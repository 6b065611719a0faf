"""One quantity along temperature: a constant or a polynomial, in the units it is written in."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.entries import Values
from leanloop.quantities import DIMENSIONS, unit_factor, unit_scale


class Curve:
    """A heat capacity or an enthalpy as written under one entry.

    Outside a range that is stated as ``valid`` the heat capacity keeps its value at the end of the range, so that an
    enthalpy goes on in a straight line there and never turns round.

    Parameters
    ----------
    name : str
        The entry, such as ``"gas_heat_capacity"``.
    values : Values
        All that was read of the component; numbers under ``"NAME"``, or ``"NAME.polynomial"`` and so on.
    molar_mass : float or None
        kg/mol, needed where the unit is per mass.
    """

    def __init__(self, name: str, values: Values, molar_mass: float | None) -> None:
        self.name = name
        self._constant = name in values.numbers
        self._key = name if self._constant else f"{name}.polynomial"
        words = values.words.get(name, {})
        self._scale = (1.0, 0.0) if self._constant else unit_scale(words.get("temperature", "K"), "temperature")
        self._factor, dimension = (1.0, None) if self._constant else unit_factor(words["unit"])
        sort = values.sorts[name] if self._constant else ""
        self.per_mass = sort.startswith("specific") or dimension in _PER_MASS
        if self.per_mass:
            self._factor *= np.nan if molar_mass is None else molar_mass
        own = f"{name}.valid"
        self._range = next((key for key in (own, "valid") if key in values.numbers), None)

    def valid(self, numbers: Mapping[str, Any]) -> tuple[float, float] | None:
        """Give the stated range, lowest and highest temperature in K, None where none is stated."""
        return tuple(numbers[self._range]) if self._range else None

    def at(self, temperature: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give the value at temperatures in K, real or complex, in SI units per mol."""
        return self._factor * _horner(self._coefficients(numbers), self._reading(self._inside(temperature, numbers)))

    def slope(self, temperature: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give the derivative with respect to temperature, in SI units per mol and K."""
        rates = [power * item for power, item in enumerate(self._coefficients(numbers))][1:] or [0.0]
        return self._factor / self._scale[0] * _horner(rates, self._reading(self._inside(temperature, numbers)))

    def straight_on(self, temperature: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give the value, outside the stated range on the tangent at its end."""
        inside = self._inside(temperature, numbers)
        return self.at(inside, numbers) + self.slope(inside, numbers) * (temperature - inside)

    def integral(self, start: np.ndarray, end: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give the integral over temperature from one to another, both in K, in SI units times K."""
        return self._primitive(end, numbers) - self._primitive(start, numbers)

    def _primitive(self, temperature: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        inside = self._inside(temperature, numbers)
        sums = [0.0, *(item / (power + 1) for power, item in enumerate(self._coefficients(numbers)))]
        whole = self._factor * self._scale[0] * _horner(sums, self._reading(inside))
        return whole + self.at(inside, numbers) * (temperature - inside)

    def _coefficients(self, numbers: Mapping[str, Any]) -> list[Any]:
        return [numbers[self._key]] if self._constant else list(numbers[self._key])

    def _reading(self, temperature: np.ndarray) -> np.ndarray:
        factor, offset = self._scale
        return (temperature - offset) / factor

    def _inside(self, temperature: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        limits = self.valid(numbers)
        if limits is None or self._constant:
            return temperature
        met = np.real(temperature)
        return np.where(met < limits[0], limits[0], np.where(met > limits[1], limits[1], temperature))


_PER_MASS = tuple(DIMENSIONS[name][0] for name in ("specific energy", "specific heat capacity"))


def _horner(coefficients: list[Any], reading: np.ndarray) -> np.ndarray:
    """Give a polynomial, constant term first."""
    total = coefficients[-1]
    for item in reversed(coefficients[:-1]):
        total = total * reading + item
    return total
