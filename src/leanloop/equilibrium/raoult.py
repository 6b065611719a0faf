"""Raoult's law, with an activity coefficient where one is given."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.entries import Context, Entry, Values
from leanloop.equilibrium import vapour_pressure
from leanloop.equilibrium.base import VALID, Proportional

_ACTIVITY = Entry(
    "activity",
    "table",
    nested=(
        Entry("a", "number", required=True, doc="constant term"),
        Entry("b", ("number", "temperature difference"), doc="slope against 1/T in K, 0 by default"),
    ),
    doc="ln(activity coefficient) = a + b/T",
)


class Raoult(Proportional):
    """Raoult's law: y P = gamma psat(T) x, with ln gamma = a + b/T, or gamma = 1 where no ``activity`` is written.

    Validity: ideal gas; a liquid near ideal or, with ``activity``, a solute dilute enough for its activity
    coefficient to stay as at infinite dilution. ``valid`` states the temperatures of the constants.

    Source: F.-M. Raoult, Comptes Rendus 104 (1887) 1430; the vapour pressure equations at their classes.
    """

    name = "raoult"
    entries = (vapour_pressure.entry_of(None), _ACTIVITY, VALID)

    def __init__(self, values: Values) -> None:
        super().__init__(values)
        self._saturation = vapour_pressure.make(values)

    @property
    def uses(self) -> frozenset[str]:
        """Pressure, and temperature unless vapour pressure and activity coefficient are fixed."""
        warm = self._saturation.uses_temperature or "activity.b" in self.numbers
        return frozenset(("temperature", "pressure") if warm else ("pressure",))

    def saturation_pressure(self, temperature: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give the vapour pressure of the pure component.

        Parameters
        ----------
        temperature : (...,) K
        numbers : mapping of str to (...,) array or float

        Returns
        -------
        (...,) Pa
        """
        return self._saturation.at(temperature, numbers)

    def k(self, temperature: np.ndarray, pressure: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give gamma psat/P."""
        ratio = self._saturation.at(temperature, numbers) / pressure
        if "activity.b" in numbers:
            return ratio * np.exp(numbers["activity.a"] + numbers["activity.b"] / temperature)
        return ratio * np.exp(numbers["activity.a"]) if "activity.a" in numbers else ratio

    def cautions(self, temperature: np.ndarray, pressure: np.ndarray, liquid: np.ndarray) -> list[str]:
        """Say where the stated range is left, and where the vapour pressure equation ends."""
        return [
            *super().cautions(temperature, pressure, liquid),
            *self._saturation.cautions(temperature, self.numbers),
        ]

    @classmethod
    def entries_of(cls, table: Mapping[str, Any]) -> tuple[Entry, ...]:
        """Give the entries of the vapour pressure form that is written."""
        return (vapour_pressure.entry_of(table.get("vapour_pressure")), _ACTIVITY, VALID)

    @classmethod
    def check(cls, values: Values, address: str, context: Context) -> None:
        """Note a wrong range and a wrong unit of the vapour pressure."""
        super().check(values, address, context)
        vapour_pressure.check_units(values, address, context)

    @classmethod
    def examples(cls) -> list[Mapping[str, Any]]:
        """Give toluene over a wash oil and over itself, MEA, and one fixed vapour pressure."""
        antoine = {"form": "antoine", "A": 6.95, "B": 1345.0, "C": 219.5, "pressure": "mmHg", "temperature": "degC"}
        wagner = {
            "form": "wagner", "A": -7.50051, "B": 2.08939, "C": -2.56368, "D": -2.85042,
            "critical_temperature": "591.75 K", "critical_pressure": "4.126 MPa",
        }  # fmt: skip
        amine = {
            "form": "wagner", "A": -10.8842, "B": 3.03743, "C": -7.21939, "D": -2.99322, "powers": "3-6",
            "critical_temperature": "614 K", "critical_pressure": "4.4583 MPa",
        }  # fmt: skip
        return [
            {"vapour_pressure": antoine, "activity": {"a": -0.78, "b": 188.6}},
            {"vapour_pressure": wagner, "valid": ["-95 degC", "318.6 degC"]},
            {"vapour_pressure": amine},
            {"vapour_pressure": "13330 Pa", "activity": {"a": 0.1}},
        ]
