"""Equilibrium ratio as a polynomial of temperature."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.entries import Context, Entry, Values
from leanloop.equilibrium.base import VALID, Proportional
from leanloop.quantities import unit_scale


class Polynomial(Proportional):
    """Polynomial of temperature: y = K x with K = (a + b T + c T^2 + ...) P_ref/P, or without the pressures.

    T is in the unit named by ``temperature``, K by default; P_ref is written as ``pressure``.

    Validity: the temperatures and, without ``pressure``, the pressure of the fit; with it, ideal gases and liquids
    beside that pressure. State the range as ``valid``.

    Source: K-value polynomials as tabulated for light hydrocarbons in E. J. Henley and J. D. Seader,
    Equilibrium-Stage Separation Operations in Chemical Engineering, Wiley 1981, chapter 15.
    """

    name = "polynomial"
    entries = (
        Entry("K", "number", required=True, many=True, cases=False, doc="coefficients a, b, c, ... of K"),
        Entry("temperature", "choice", choices=("K", "degC", "degF", "degR"), doc="unit of T in the polynomial"),
        Entry("pressure", "pressure", above=0.0, doc="pressure of the fit; K is then times pressure/P"),
        VALID,
    )

    def __init__(self, values: Values) -> None:
        super().__init__(values)
        self._scale = unit_scale(values.words.get("temperature", "K"), "temperature")

    @property
    def uses(self) -> frozenset[str]:
        """Temperature, and pressure where one is written."""
        return frozenset(("temperature", "pressure") if "pressure" in self.numbers else ("temperature",))

    def k(self, temperature: np.ndarray, pressure: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give K by Horner's scheme."""
        factor, offset = self._scale
        reading = (temperature - offset) / factor
        ratio = np.zeros(())
        for coefficient in reversed(list(numbers["K"])):
            ratio = ratio * reading + coefficient
        return ratio * (numbers["pressure"] / pressure) if "pressure" in numbers else ratio

    def cautions(self, temperature: np.ndarray, pressure: np.ndarray, liquid: np.ndarray) -> list[str]:
        """Say where the stated range is left, and where the polynomial has fallen below zero."""
        said = super().cautions(temperature, pressure, liquid)
        ratio = np.asarray(self.k(np.asarray(temperature, dtype=float), pressure, self.numbers))
        if (ratio < 0).any():
            said.append(f"the polynomial of K is negative, down to {ratio[ratio < 0].min():.3g}: left its range")
        return said

    @classmethod
    def check(cls, values: Values, address: str, context: Context) -> None:
        """Note a wrong range, and a list of nothing but zeros."""
        super().check(values, address, context)
        if not any(values.numbers["K"]):
            context.fault(f"{address}.K", "every coefficient is zero", "write the coefficients of K = a + b T + ...")

    @classmethod
    def examples(cls) -> list[Mapping[str, Any]]:
        """Give one table with a reference pressure and one in K alone."""
        return [
            {
                "K": [4.35, 0.02542, -2e-5, 8.333e-9],
                "temperature": "degF",
                "pressure": "27.58 bar",
                "valid": ["0 degF", "300 degF"],
            },
            {"K": [0.25, 0.018, 2.5e-4, 7e-6], "temperature": "degC"},
            {"K": [-1.2, 0.005]},
        ]
