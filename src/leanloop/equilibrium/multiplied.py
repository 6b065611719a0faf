"""Any model with a multiplier on its gas: to match measured data, or to ask what an error in K does."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import numpy as np

from leanloop.entries import Context, Entry, Values, read_values
from leanloop.equilibrium.base import EquilibriumModel

MULTIPLIER = Entry("multiplier", "number", above=0.0, doc="on the gas coordinate that the model gives")


class Multiplied(EquilibriumModel):
    """A model whose gas coordinate is multiplied; everything else is the model's own.

    Parameters
    ----------
    inner : EquilibriumModel
    values : Values
        The model's, and the multiplier.
    """

    def __init__(self, inner: EquilibriumModel, values: Values) -> None:
        super().__init__(values)
        self.inner = inner
        self.name, self.entries, self.complex_safe = inner.name, inner.entries, True

    @classmethod
    def around(
        cls, kind: type[EquilibriumModel], table: Mapping[str, Any], address: str, context: Context
    ) -> EquilibriumModel | None:
        """Read a model with its multiplier, and note every fault.

        Parameters
        ----------
        kind : type
        table : mapping
            As written, without ``model``.
        address : str
        context : Context

        Returns
        -------
        EquilibriumModel or None
            None where a fault was found.
        """
        own = read_values((MULTIPLIER,), {"multiplier": table["multiplier"]}, address, context)
        inner = kind.read({key: item for key, item in table.items() if key != "multiplier"}, address, context)
        if inner is None or "multiplier" not in own.numbers:
            return None
        joined = {part: {**getattr(inner.values, part), **getattr(own, part)} for part in ("words", "numbers", "sorts", "entries")}
        return cls(inner, replace(inner.values, **joined))

    def __getattr__(self, name: str) -> Any:
        if name == "inner":  # not there yet, while a copy is made
            raise AttributeError(name)
        found = getattr(self.inner, name)
        if name in ("k", "saturation_pressure"):  # what is given of the gas beside `gas` itself; numbers come last
            return lambda *known: known[-1]["multiplier"] * found(*known)
        return found

    @property
    def coordinates(self) -> str:
        """Those of the model."""
        return self.inner.coordinates

    @property
    def uses(self) -> frozenset[str]:
        """What the model uses."""
        return self.inner.uses

    def gas(self, temperature: np.ndarray, pressure: np.ndarray, liquid: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give the model's gas coordinate times the multiplier; complex numbers go round a model that cannot take them."""
        if self.inner.complex_safe:
            return numbers["multiplier"] * self.inner.gas(temperature, pressure, liquid, numbers)
        real = {key: np.real(item) if isinstance(item, np.ndarray) else item for key, item in numbers.items()}
        places = [np.real(item) for item in (temperature, pressure, liquid)]
        found = self.inner.gas(*places, real)
        moved = [np.imag(item) for item in (temperature, pressure, liquid)]
        if any(np.any(item) for item in moved):
            found = found + 1j * sum(
                slope * way for slope, way in zip(self.inner.slopes(*places, real), moved, strict=True)
            )
        return numbers["multiplier"] * found

    def slopes(
        self, temperature: np.ndarray, pressure: np.ndarray, liquid: np.ndarray, numbers: Mapping[str, Any]
    ) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Give the model's slopes times the multiplier."""
        numbers = {key: np.real(item) if isinstance(item, np.ndarray) else item for key, item in numbers.items()}
        found = self.inner.slopes(temperature, pressure, liquid, numbers)
        return tuple(np.real(numbers["multiplier"]) * item for item in found)

    def ratio_at_zero(self, temperature: np.ndarray, pressure: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give the model's limit times the multiplier."""
        return np.real(numbers["multiplier"]) * self.inner.ratio_at_zero(temperature, pressure, numbers)

    def outside(
        self, temperature: np.ndarray, pressure: np.ndarray, liquid: np.ndarray, numbers: Mapping[str, Any]
    ) -> np.ndarray:
        """Tell where the model is off its table."""
        return self.inner.outside(temperature, pressure, liquid, numbers)

    def cautions(self, temperature: np.ndarray, pressure: np.ndarray, liquid: np.ndarray) -> list[str]:
        """Say what the model says."""
        return self.inner.cautions(temperature, pressure, liquid)

    @classmethod
    def examples(cls) -> list[Mapping[str, Any]]:
        """Give none: it is no model by itself."""
        return []
