"""Contract of the equilibrium models of one component: its gas coordinate against its liquid one.

A model is a plain formula of temperature, pressure and liquid coordinate that takes real and
complex arrays alike, so the stage column can differentiate it by the complex step. The
coordinates are mole fractions, or mole ratios on the solute-free basis where `coordinates` says
so. Numbers arrive by argument, one value for each case, and never live in the model alone: the
same instance serves every case of a batch.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Mapping
from typing import Any, ClassVar

import numpy as np

from leanloop.entries import Context, Entry, Values, read_values

COMPLEX_STEP = 1e-30


class EquilibriumModel(ABC):
    """Equilibrium of one component.

    Parameters
    ----------
    values : Values
        What `read` found: words and SI numbers.

    Attributes
    ----------
    name : str
        Word for ``model = `` in a file.
    entries : tuple of Entry
        What may be written beside ``model``.
    complex_safe : bool
        Whether `gas` takes complex numbers; if not, `slopes` gives the derivatives.
    """

    name: ClassVar[str] = ""
    entries: ClassVar[tuple[Entry, ...]] = ()
    complex_safe: ClassVar[bool] = True

    def __init__(self, values: Values) -> None:
        self.values = values

    @property
    def numbers(self) -> dict[str, Any]:
        """SI numbers by flat name: the values of the file."""
        return self.values.numbers

    @property
    def coordinates(self) -> str:
        """``"fraction"`` for mole fractions, ``"ratio"`` for mole ratios."""
        return "fraction"

    @property
    def uses(self) -> frozenset[str]:
        """Which of ``"temperature"``, ``"pressure"`` and ``"liquid"`` the ratio gas/liquid depends on."""
        return frozenset(("temperature", "pressure", "liquid"))

    @abstractmethod
    def gas(
        self, temperature: np.ndarray, pressure: np.ndarray, liquid: np.ndarray, numbers: Mapping[str, Any]
    ) -> np.ndarray:
        """Give the gas coordinate in equilibrium.

        Parameters
        ----------
        temperature : (...,) K
        pressure : (...,) Pa
        liquid : (...,) mole fraction or mole ratio of the component in the liquid
        numbers : mapping of str to (...,) array or float
            SI numbers by flat name; lists as they are.

        Returns
        -------
        (...,) mole fraction or mole ratio in the gas
        """

    def slopes(
        self, temperature: np.ndarray, pressure: np.ndarray, liquid: np.ndarray, numbers: Mapping[str, Any]
    ) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Give the derivatives of `gas` with respect to temperature, pressure and liquid.

        Only a model that is not complex-safe needs to write its own.

        Returns
        -------
        (...,) 1/K, (...,) 1/Pa, (...,) dimensionless
        """
        step = COMPLEX_STEP
        values = (
            self.gas(temperature + 1j * step, pressure, liquid, numbers),
            self.gas(temperature, pressure + 1j * step, liquid, numbers),
            self.gas(temperature, pressure, liquid + 1j * step, numbers),
        )
        shape = np.broadcast_shapes(*(np.shape(item) for item in (temperature, pressure, liquid, *values)))
        return tuple(np.broadcast_to(np.imag(value), shape) / step for value in values)

    def ratio_at_zero(self, temperature: np.ndarray, pressure: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give the limit of gas/liquid at infinite dilution: the slope there.

        Returns
        -------
        (...,) dimensionless
        """
        zero = np.zeros(np.broadcast_shapes(np.shape(temperature), np.shape(pressure)))
        return self.slopes(temperature, pressure, zero, numbers)[2]

    def outside(
        self, temperature: np.ndarray, pressure: np.ndarray, liquid: np.ndarray, numbers: Mapping[str, Any]
    ) -> np.ndarray:
        """Tell where the model is asked off its table, so that the answer is an extrapolation.

        Returns
        -------
        (...,) bool
        """
        return np.zeros(np.broadcast_shapes(np.shape(temperature), np.shape(pressure), np.shape(liquid)), dtype=bool)

    def cautions(self, temperature: np.ndarray, pressure: np.ndarray, liquid: np.ndarray) -> list[str]:
        """Say in sentences where the stated range of the correlation is left, none by default.

        Parameters
        ----------
        temperature : (...,) K
        pressure : (...,) Pa
        liquid : (...,) mole fraction or mole ratio
        """
        return []

    @classmethod
    def read(cls, table: Mapping[str, Any], address: str, context: Context) -> EquilibriumModel | None:
        """Read a model from its table and note every fault.

        Parameters
        ----------
        table : mapping
            As written, without ``model``.
        address : str
        context : Context

        Returns
        -------
        EquilibriumModel or None
            None where a fault was found.
        """
        before = len(context.faults)
        values = read_values(cls.entries_of(table), table, address, context)
        if len(context.faults) == before:
            cls.check(values, address, context)
        return cls(values) if len(context.faults) == before else None

    @classmethod
    def entries_of(cls, table: Mapping[str, Any]) -> tuple[Entry, ...]:
        """Give the entries that apply to a table as written, where one decides what others are; all by default."""
        return cls.entries

    @classmethod
    def check(cls, values: Values, address: str, context: Context) -> None:
        """Note faults that lie between entries; none by default."""

    @classmethod
    @abstractmethod
    def examples(cls) -> list[Mapping[str, Any]]:
        """Give tables as a file would hold them, without ``model``, for the contract checks."""


VALID = Entry(
    "valid", "temperature", many=True, cases=False, doc="range of the correlation, [lowest, highest] temperature"
)


class Proportional(EquilibriumModel):
    """Equilibrium in which the gas coordinate is the liquid one times a ratio K(T, P).

    A model that lists `VALID` among its entries cautions where its range is left.
    """

    @property
    def uses(self) -> frozenset[str]:
        """Temperature and pressure, never the liquid."""
        return frozenset(("temperature", "pressure"))

    @abstractmethod
    def k(self, temperature: np.ndarray, pressure: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give the ratio gas/liquid.

        Parameters
        ----------
        temperature : (...,) K
        pressure : (...,) Pa
        numbers : mapping of str to (...,) array or float

        Returns
        -------
        (...,) dimensionless
            Of a shape that broadcasts with the arguments: a ratio that does not depend on one need not carry its axes.
        """

    def gas(
        self, temperature: np.ndarray, pressure: np.ndarray, liquid: np.ndarray, numbers: Mapping[str, Any]
    ) -> np.ndarray:
        """Give K times the liquid coordinate."""
        return self.k(temperature, pressure, numbers) * liquid

    def ratio_at_zero(self, temperature: np.ndarray, pressure: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give K itself."""
        ratio = self.k(temperature, pressure, numbers)
        shape = np.broadcast_shapes(np.shape(temperature), np.shape(pressure), np.shape(ratio))
        return np.broadcast_to(ratio, shape)

    def cautions(self, temperature: np.ndarray, pressure: np.ndarray, liquid: np.ndarray) -> list[str]:
        """Say where the range written under ``valid`` is left."""
        if "valid" not in self.numbers:
            return []
        lowest, highest = self.numbers["valid"]
        return beyond(temperature, lowest, highest, "the correlation is used outside its stated range")

    @classmethod
    def check(cls, values: Values, address: str, context: Context) -> None:
        """Note a range that is no pair or is the wrong way round."""
        valid = values.numbers.get("valid")
        if valid is not None and (len(valid) != 2 or valid[0] >= valid[1]):
            context.fault(
                f"{address}.valid",
                "the range is no lower and higher temperature",
                'write two temperatures such as ["0 degC", "150 degC"]',
            )


def beyond(temperature: np.ndarray, lowest: float, highest: float, problem: str) -> list[str]:
    """Say in one sentence how far temperatures leave a range, in none where they stay inside.

    Parameters
    ----------
    temperature : (...,) K
        What is not finite is passed over.
    lowest, highest : float
        K.
    problem : str
        Head of the sentence.
    """
    met = np.asarray(temperature, dtype=float)
    left = met[np.isfinite(met) & ((met < lowest) | (met > highest))]
    if not left.size:
        return []
    return [f"{problem}: at {_span(left.min(), left.max())} K, against {_span(lowest, highest)} K"]


def _span(low: float, high: float) -> str:
    if not np.isfinite(low):
        return f"at most {high:.2f}"
    return f"{low:.2f}" if low == high else f"{low:.2f} to {high:.2f}"
