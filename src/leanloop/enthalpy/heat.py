"""Enthalpies of all components of a flowsheet."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from typing import Any

import numpy as np

from leanloop.enthalpy.heat_data import ComponentHeat

Numbers = Mapping[str, Any]


class Heat:
    """Enthalpies of the components, in the flowsheet's order.

    Numbers arrive by local name, ``"heat.NAME.key"``; one that is absent keeps the value it was read with.

    Parameters
    ----------
    names : iterable of str
        Names of the C components.
    items : iterable of ComponentHeat or None
        Data of each; None where there are none.
    """

    def __init__(self, names: Iterable[str], items: Iterable[ComponentHeat | None]) -> None:
        self.names, self.items = tuple(names), list(items)
        self._keys = [
            [] if item is None else [(key, f"heat.{item.name}.{key}") for key in item.numbers] for item in self.items
        ]

    @property
    def built_in(self) -> list[str]:
        """Names of the components with values of the built-in data."""
        return [item.name for item in self.items if item is not None and item.built_in]

    def addresses(self) -> dict[str, str]:
        """Give the address in the file of each number, by its local name."""
        return {local: f"heat_data.{local.removeprefix('heat.')}" for keys in self._keys for _, local in keys}

    def liquid(self, temperature: np.ndarray, numbers: Numbers | None = None) -> np.ndarray:
        """Give the enthalpies in the liquid.

        Parameters
        ----------
        temperature : (...,) K, real or complex
        numbers : mapping of str to (...,) array, float or list, optional
            By local name; arrays broadcast against the temperature.

        Returns
        -------
        (..., C) J/mol
            0 for components without data.
        """
        return self._all(temperature, numbers, lambda item, own: item.liquid(temperature, own))

    def gas(self, temperature: np.ndarray, numbers: Numbers | None = None) -> np.ndarray:
        """Give the enthalpies in the gas.

        Parameters
        ----------
        temperature : (...,) K, real or complex
        numbers : mapping of str to (...,) array, float or list, optional

        Returns
        -------
        (..., C) J/mol
            0 for components without data.
        """
        return self._all(temperature, numbers, lambda item, own: item.gas(temperature, own))

    def liquid_capacity(self, temperature: np.ndarray, numbers: Numbers | None = None) -> np.ndarray:
        """Give the heat capacities in the liquid, the exact derivatives of `liquid`.

        Parameters
        ----------
        temperature : (...,) K, real or complex
        numbers : mapping of str to (...,) array, float or list, optional

        Returns
        -------
        (..., C) J/(mol K)
            0 for components without data.
        """
        return self._all(temperature, numbers, lambda item, own: item.capacity("liquid", temperature, own))

    def gas_capacity(self, temperature: np.ndarray, numbers: Numbers | None = None) -> np.ndarray:
        """Give the heat capacities in the gas, the exact derivatives of `gas`.

        Parameters
        ----------
        temperature : (...,) K, real or complex
        numbers : mapping of str to (...,) array, float or list, optional

        Returns
        -------
        (..., C) J/(mol K)
            0 for components without data.
        """
        return self._all(temperature, numbers, lambda item, own: item.capacity("gas", temperature, own))

    def lacking(self, phase: str, present: np.ndarray) -> list[str]:
        """Name the components that are present without data for a phase.

        Parameters
        ----------
        phase : str
            ``"gas"`` or ``"liquid"``.
        present : (C,) bool

        Returns
        -------
        list of str
        """
        known = [item is not None and (item.has_gas if phase == "gas" else item.has_liquid) for item in self.items]
        return [name for name, here, has in zip(self.names, present, known, strict=True) if here and not has]

    def _all(
        self,
        temperature: np.ndarray,
        numbers: Numbers | None,
        formula: Callable[[ComponentHeat, dict[str, Any]], np.ndarray],
    ) -> np.ndarray:
        given = numbers or {}
        columns = []
        for item, keys in zip(self.items, self._keys, strict=True):
            own = {key: given.get(local, item.numbers[key]) for key, local in keys}
            columns.append(np.asarray(formula(item, own)) if item is not None else np.zeros(()))
        shape = np.broadcast_shapes(np.shape(temperature), *(column.shape for column in columns))
        out = np.zeros((*shape, len(columns)), dtype=np.result_type(float, temperature, *columns))
        for place, column in enumerate(columns):
            out[..., place] = column
        return out
