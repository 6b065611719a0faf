"""Equilibrium from a table of points, in the flowsheet or in a CSV file beside it."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.entries import Context, Entry, Values, read_values
from leanloop.equilibrium import points
from leanloop.equilibrium.base import EquilibriumModel
from leanloop.equilibrium.temperature_table import TemperatureTable


class Table(EquilibriumModel):
    """Curve through given points: y over x in mole fractions, or Y over X in mole ratios.

    Between the points a piecewise cubic that keeps their monotony (PCHIP); beyond them the straight line with the
    slope at the end, which `outside` reports. A table of K over temperature is read as a `TemperatureTable`.

    Validity: between the first and the last point, at the temperature and pressure of the data.

    Source: F. N. Fritsch and J. Butland, SIAM J. Sci. Stat. Comput. 5 (1984) 300, for the slopes at the points.
    """

    name = "table"
    entries = points.ENTRIES
    complex_safe = False

    def __init__(self, values: Values) -> None:
        super().__init__(values)
        self._names = points.PAIRS[1] if "X" in values.numbers else points.PAIRS[0]

    @property
    def coordinates(self) -> str:
        """Mole ratios for a table of X and Y, else mole fractions."""
        return "ratio" if "X" in self._names else "fraction"

    @property
    def uses(self) -> frozenset[str]:
        """The liquid alone."""
        return frozenset(("liquid",))

    def gas(
        self, temperature: np.ndarray, pressure: np.ndarray, liquid: np.ndarray, numbers: Mapping[str, Any]
    ) -> np.ndarray:
        """Give the height of the curve."""
        return points.smooth(*(numbers[name] for name in self._names))(liquid)[0]

    def slopes(
        self, temperature: np.ndarray, pressure: np.ndarray, liquid: np.ndarray, numbers: Mapping[str, Any]
    ) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Give the slope of the curve, and zeros for temperature and pressure."""
        shape = np.broadcast_shapes(np.shape(temperature), np.shape(pressure), np.shape(liquid))
        slope = points.smooth(*(numbers[name] for name in self._names))(liquid)[1]
        return np.zeros(shape), np.zeros(shape), np.broadcast_to(slope, shape)

    def outside(
        self, temperature: np.ndarray, pressure: np.ndarray, liquid: np.ndarray, numbers: Mapping[str, Any]
    ) -> np.ndarray:
        """Tell where the liquid is poorer than the first point or richer than the last."""
        shape = np.broadcast_shapes(np.shape(temperature), np.shape(pressure), np.shape(liquid))
        places = numbers[self._names[0]]
        return np.broadcast_to(points.off(liquid, places[0], places[-1]), shape)

    @classmethod
    def read(cls, table: Mapping[str, Any], address: str, context: Context) -> EquilibriumModel | None:
        """Read a table, from its file where one is named, and note every fault.

        Parameters
        ----------
        table : mapping
            As written, without ``model``.
        address : str
        context : Context
            ``names["directory"]`` holds the directory that file names start from.

        Returns
        -------
        Table or TemperatureTable or None
            None where a fault was found.
        """
        before = len(context.faults)
        if isinstance(table, Mapping) and isinstance(table.get("file"), str):
            table = points.from_file(table, address, context)
            if len(context.faults) > before:
                return None
        values = read_values(cls.entries_of(table), table, address, context)
        if len(context.faults) == before:
            points.check(values, address, context)
        if len(context.faults) > before:
            return None
        return TemperatureTable(values) if "temperature" in values.numbers else cls(values)

    @classmethod
    def entries_of(cls, table: Mapping[str, Any]) -> tuple[Entry, ...]:
        """Give the columns of the pair that is written."""
        return points.entries_of(table)

    @classmethod
    def examples(cls) -> list[Mapping[str, Any]]:
        """Give tables in mole fractions, in mole ratios, and of K over temperature."""
        return [
            {"x": [0, 0.01, 0.03], "y": [0, 0.02, 0.07]},
            {"X": [0, 0.02, 0.05, 0.1], "Y": [0, 0.004, 0.012, 0.035]},
            {"x": [0.001, 0.01, 0.1], "y": [0.0005, 0.004, 0.03]},
            *TemperatureTable.examples(),
        ]
