"""The equilibrium of all distributing components of a column, on mole fractions or mole ratios.

With the liquid flows l, the total gas flow V and the flows that stay in one phase given, the gas
flows v in equilibrium are explicit: v = y*(x) V for a model on mole fractions, v = Y*(X) G for one
on mole ratios, with G the flow of the gas's basis. Written so, a flow of zero is regular.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from leanloop.equilibrium.base import COMPLEX_STEP, EquilibriumModel


@dataclass(frozen=True)
class Law:
    """Models of the D distributing components and how their coordinates are formed.

    Parameters
    ----------
    models : sequence of D EquilibriumModel
    gas_basis, liquid_basis : (D,) bool
        Which distributing components count in the basis of a mole ratio.

    Attributes
    ----------
    ratio : (D,) bool
        Which models are given on mole ratios.
    plain : bool
        Whether none is.
    proportional : bool
        Whether no model depends on the liquid's composition.
    """

    models: Sequence[EquilibriumModel]
    gas_basis: np.ndarray
    liquid_basis: np.ndarray
    ratio: np.ndarray = field(init=False)
    plain: bool = field(init=False)
    proportional: bool = field(init=False)

    def __post_init__(self) -> None:
        ratio = np.array([model.coordinates == "ratio" for model in self.models], dtype=bool)
        object.__setattr__(self, "ratio", ratio)
        object.__setattr__(self, "plain", not ratio.any())
        object.__setattr__(self, "proportional", not any("liquid" in model.uses for model in self.models))

    def at(self, temperature: np.ndarray, pressure: np.ndarray, numbers: Sequence[Mapping[str, Any]]) -> BoundLaw:
        """Fix temperature, pressure and the models' numbers.

        Parameters
        ----------
        temperature : (M, N) or (M, 1) K
        pressure : (M, N) or (M, 1) Pa
        numbers : sequence of D mappings of str to float, list or (M,) array
            Arrays are put on the case axis.
        """
        placed = [
            {key: value[..., None] if isinstance(value, np.ndarray) else value for key, value in item.items()}
            for item in numbers
        ]
        return BoundLaw(self, temperature, pressure, placed)


class BoundLaw:
    """A law at given temperatures, pressures and numbers.

    Parameters
    ----------
    law : Law
    temperature, pressure : (M, N) or (M, 1) K, Pa
    numbers : list of D dicts
    """

    def __init__(self, law: Law, temperature: np.ndarray, pressure: np.ndarray, numbers: list[dict[str, Any]]) -> None:
        self.law, self.temperature, self.pressure, self.numbers = law, temperature, pressure, numbers
        self.ratio, self.plain, self.proportional = law.ratio, law.plain, law.proportional
        self.k_dilute = np.empty((*np.shape(temperature), len(law.models)))
        for index, (model, own) in enumerate(zip(law.models, numbers, strict=True)):
            self.k_dilute[..., index] = model.ratio_at_zero(np.real(temperature), np.real(pressure), _real(own))

    def gas(self, liquid: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Give gas coordinates and their slopes.

        Parameters
        ----------
        liquid : (M, N, D) mole fractions or ratios

        Returns
        -------
        gas : (M, N, D)
        slope : (M, N, D) or broadcastable
            Derivative of each with respect to its own liquid coordinate.
        """
        if self.proportional:
            return self.k_dilute * liquid, self.k_dilute
        gas, slope = np.empty_like(liquid), np.empty_like(liquid)
        for index, (model, own) in enumerate(zip(self.law.models, self.numbers, strict=True)):
            z = liquid[..., index]
            if model.complex_safe:
                value = model.gas(self.temperature, self.pressure, z + 1j * COMPLEX_STEP, own)
                gas[..., index], slope[..., index] = value.real, value.imag / COMPLEX_STEP
            else:
                gas[..., index] = model.gas(self.temperature, self.pressure, z, own)
                slope[..., index] = model.slopes(self.temperature, self.pressure, z, own)[2]
        return gas, slope

    def complex_gas(self, liquid: np.ndarray) -> np.ndarray:
        """Give gas coordinates of complex liquid ones, for derivatives of reported quantities."""
        out = np.empty(liquid.shape, dtype=np.result_type(liquid, self.temperature, complex))
        for index, (model, own) in enumerate(zip(self.law.models, self.numbers, strict=True)):
            out[..., index] = self._extended(model, self.temperature, self.pressure, liquid[..., index], own)
        return out

    @staticmethod
    def _extended(model: EquilibriumModel, temperature: Any, pressure: Any, liquid: Any, numbers: dict[str, Any]) -> Any:
        if model.complex_safe:
            return model.gas(temperature, pressure, liquid, numbers)
        real = _real(numbers)
        t, p, z = np.real(temperature), np.real(pressure), np.real(liquid)
        d_t, d_p, d_z = model.slopes(t, p, z, real)
        change = d_t * np.imag(temperature) + d_p * np.imag(pressure) + d_z * np.imag(liquid)
        return model.gas(t, p, z, real) + 1j * change

    def shifted(
        self, liquid: np.ndarray, temperature: np.ndarray, pressure: np.ndarray, numbers: list[dict[str, Any]]
    ) -> np.ndarray:
        """Give the change of the gas coordinates at fixed liquid ones with T, P and numbers.

        Parameters
        ----------
        liquid : (M, N, D)
        temperature, pressure : (S, M, 1) or (S, M, N) K, Pa
            Directions.
        numbers : list of D dicts of str to (S, M) array
            Directions of the models' numbers.

        Returns
        -------
        (S, M, N, D)
        """
        step = COMPLEX_STEP
        columns = [np.zeros((len(temperature), *liquid.shape[:-1], 0))]
        for index, (model, own) in enumerate(zip(self.law.models, self.numbers, strict=True)):
            moved = dict(own)
            for key, direction in numbers[index].items():
                moved[key] = own[key] + 1j * step * direction[..., None]
            value = self._extended(
                model,
                self.temperature + 1j * step * temperature,
                self.pressure + 1j * step * pressure,
                liquid[..., index] + 0j,
                moved,
            )
            columns.append(np.broadcast_to(value.imag / step, (len(temperature), *liquid.shape[:-1]))[..., None])
        return np.concatenate(columns, axis=-1)

    def outside(self, liquid: np.ndarray) -> np.ndarray:
        """Tell which cases and components are off their table.

        Parameters
        ----------
        liquid : (M, N, D)

        Returns
        -------
        (M, D) bool
        """
        out = np.zeros((liquid.shape[0], liquid.shape[2]), dtype=bool)
        for index, (model, own) in enumerate(zip(self.law.models, self.numbers, strict=True)):
            out[:, index] = np.any(model.outside(self.temperature, self.pressure, liquid[..., index], own), axis=1)
        return out


def _real(numbers: Mapping[str, Any]) -> dict[str, Any]:
    return {key: np.real(value) if isinstance(value, np.ndarray) else value for key, value in numbers.items()}
