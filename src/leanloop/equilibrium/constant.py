"""Equilibrium with a constant ratio."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.entries import Entry
from leanloop.equilibrium.base import Proportional


class Constant(Proportional):
    """Constant ratio: y = K x in mole fractions, or Y = K X in mole ratios to the solute-free phases.

    Validity: one temperature, one pressure and, in mole fractions, a dilute liquid.

    Source: the linear equilibrium line of absorption, y = K x.
    """

    name = "constant"
    entries = (
        Entry("K", "number", required=True, least=0.0, doc="ratio gas/liquid"),
        Entry("basis", "choice", choices=("fraction", "ratio"), doc="coordinates: mole fractions, or mole ratios"),
    )

    @property
    def coordinates(self) -> str:
        """The word written as ``basis``, mole fractions by default."""
        return self.values.words.get("basis", "fraction")

    @property
    def uses(self) -> frozenset[str]:
        """Nothing."""
        return frozenset()

    def k(self, temperature: np.ndarray, pressure: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give K as it was written."""
        return np.asarray(numbers["K"])

    @classmethod
    def examples(cls) -> list[Mapping[str, Any]]:
        """Give one table in mole fractions and one in mole ratios."""
        return [{"K": 0.03}, {"K": 0.03, "basis": "ratio"}]
