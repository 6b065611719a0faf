"""The equilibrium line of one component on mole ratios, at one temperature and pressure."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from scipy.optimize import brentq

from leanloop.equilibrium.base import EquilibriumModel

LEAST, MOST, PER_DECADE = 1e-18, 1e9, 24  # liquid ratios between which an inverse is looked for
REACHES = np.concatenate([[0.0], np.geomspace(LEAST, MOST, PER_DECADE * 27 + 1)])


class Curve:
    """Y*(X): the gas ratio in equilibrium with a liquid ratio, where it depends on nothing else.

    With y* = f(x) from a model on mole fractions, X over a basis of the non-volatile flow and Y over one of the
    insoluble flow, x = X / (X + a) and Y* = b y* / (1 - y*); a and b are 1 where the bases are all that does not
    distribute. A model on mole ratios is the line itself. Where y* reaches 1 the line is infinitely high.

    Parameters
    ----------
    model : EquilibriumModel
    temperature, pressure : float
        K, Pa.
    numbers : mapping of str to float or list
        SI numbers of the model.
    liquid_share, gas_share : float
        What does not distribute, per mol of the basis: a and b.
    """

    def __init__(
        self,
        model: EquilibriumModel,
        temperature: float,
        pressure: float,
        numbers: Mapping[str, Any],
        liquid_share: float = 1.0,
        gas_share: float = 1.0,
    ) -> None:
        self.model, self.numbers = model, dict(numbers)
        self.temperature, self.pressure = temperature, pressure
        self.liquid_share, self.gas_share = liquid_share, gas_share
        self.on_ratios = model.coordinates == "ratio"

    def _coordinate(self, ratio: np.ndarray) -> np.ndarray:
        return ratio if self.on_ratios else ratio / (ratio + self.liquid_share)

    def __call__(self, ratio: Any) -> Any:
        """Give Y*.

        Parameters
        ----------
        ratio : (...,) mol/mol
            X.

        Returns
        -------
        (...,) mol/mol
            Infinite where the gas would be the pure component.
        """
        ratio = np.asarray(ratio, dtype=float)
        gas = self.model.gas(self.temperature, self.pressure, self._coordinate(ratio), self.numbers)
        if self.on_ratios:
            return np.where(np.isfinite(gas), gas, np.inf) + 0.0
        with np.errstate(all="ignore"):
            return np.where(gas < 1.0, self.gas_share * gas / (1.0 - gas), np.inf)

    def inverse(self, gas_ratio: float) -> float:
        """Give X*, the least liquid ratio whose equilibrium reaches a gas ratio; infinite where none does.

        Parameters
        ----------
        gas_ratio : float
            mol/mol.
        """
        high = self(REACHES)
        there = np.flatnonzero(high >= gas_ratio)
        if not there.size:
            return float("inf")
        place = int(there[0])
        if place == 0 or high[place] == gas_ratio:
            return float(REACHES[place])
        low, up = REACHES[place - 1], REACHES[place]
        # an infinite end is no harm to a bisection, but is to a secant: the height is bent to below twice the goal
        return float(
            brentq(lambda ratio: min(float(self(ratio)), 2 * gas_ratio + 1) - gas_ratio, low, up, xtol=1e-300, rtol=1e-15)
        )

    def places(self, low: float, high: float) -> np.ndarray:
        """Give liquid ratios at which the line may bend sharply: the points of a table between two ends.

        Returns
        -------
        (P,) mol/mol
        """
        given = self.numbers.get("X" if self.on_ratios else "x")
        if not isinstance(given, list):
            return np.empty(0)
        points = np.asarray(given, dtype=float)
        if not self.on_ratios:
            points = self.liquid_share * points[points < 1.0] / (1.0 - points[points < 1.0])
        return points[(points > low) & (points < high)]

    def outside(self, ratio: float) -> bool:
        """Tell whether the line is asked off its data."""
        place = self._coordinate(np.array([ratio]))
        return bool(self.model.outside(np.array([self.temperature]), np.array([self.pressure]), place, self.numbers)[0])
