"""An example of an equilibrium model, read, and the points at which the checks ask it."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.checks.base import require
from leanloop.checks.slopes import difference
from leanloop.entries import Context
from leanloop.equilibrium.base import EquilibriumModel

WHERE = "equilibrium.table.component"
# odd values, so that no point of a table is met; inside the stated range where there is one
TEMPERATURES = np.array([274.37, 281.93, 297.11, 313.77, 338.41, 368.83])
PRESSURES = np.array([0.93e5, 1.07e5, 2.3e5, 1.9e5, 4.1e5, 1.3e5])
LIQUIDS = np.array([3.1e-6, 0.00117, 0.0137, 0.0713, 0.317, 1.0])
PARTS = ("temperature", "pressure", "liquid")


class Model:
    """A model read from an example, at M temperatures and pressures and N liquids.

    Parameters
    ----------
    plugin : type
    table : mapping
        As a file would hold it, without ``model``.

    Attributes
    ----------
    model : EquilibriumModel
    at : tuple of (M, 1) K, (M, 1) Pa, (M, N)
    inside : (M, N) bool
        Where the model is not asked off its table.
    free : list of str
        Numbers that may change by small amounts.
    """

    def __init__(self, plugin: type[EquilibriumModel], table: Mapping[str, Any]) -> None:
        self.plugin, self.table = plugin, table
        context = Context()
        model = plugin.read(table, WHERE, context)
        require(not context.faults, "has faults: " + "; ".join(str(fault) for fault in context.faults))
        require(isinstance(model, EquilibriumModel), f"read() gives {model!r}")
        self.model, self.numbers = model, model.numbers
        low, high = self.numbers.get("valid", (-np.inf, np.inf))
        wide = low < TEMPERATURES[0] and high > TEMPERATURES[-1]
        temperature = TEMPERATURES if wide else np.linspace(max(low, 150.0), min(high, 1500.0), 8)[1:-1] + 0.0137
        liquid = np.tile(LIQUIDS, (len(temperature), 1))
        self.at = temperature[:, None], PRESSURES[:, None], liquid
        with np.errstate(all="ignore"):
            outside = model.outside(*self.at, self.numbers)
        self.inside = np.broadcast_to(np.asarray(outside) == 0, liquid.shape)
        entries = model.values.entries
        self.free = [
            key for key, value in self.numbers.items()
            if entries[key].cases and entries[key].sort != "integer" and not isinstance(value, list)
        ]  # fmt: skip

    def gas(self, at: Any = None, numbers: Mapping[str, Any] | None = None) -> np.ndarray:
        """Give the gas coordinates, (M, N) by default."""
        with np.errstate(all="ignore"):
            found = self.model.gas(*(at or self.at), self.numbers if numbers is None else numbers)
        return np.broadcast_to(found, np.broadcast_shapes(np.shape(found), self.at[2].shape if at is None else np.shape(found)))

    def shifted(self, part: int, value: np.ndarray) -> tuple[np.ndarray, ...]:
        """Give the arguments with one of them changed."""
        return tuple(value if place == part else item for place, item in enumerate(self.at))

    def slope(self, part: int) -> tuple[np.ndarray, np.ndarray]:
        """Give a derivative by differences and what its error is measured by, both (M, N)."""
        flat = np.broadcast_to(self.at[part], self.at[2].shape)

        def call(value: np.ndarray) -> list[np.ndarray]:
            return [self.gas(self.shifted(part, value.reshape(flat.shape))).ravel()]

        return difference(call, flat.ravel(), flat.ravel())[0].reshape(flat.shape), np.abs(self.gas()) / flat
