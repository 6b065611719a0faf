"""What a flash knows of the components: where each may be, its model, the bases of mole ratios, the heat data."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.column.law import Law
from leanloop.components import Components
from leanloop.enthalpy.heat import Heat
from leanloop.entries import Context
from leanloop.equilibrium.base import EquilibriumModel
from leanloop.equilibrium.conditions import Conditions


class Mixture:
    """Components of a flowsheet under one set of equilibrium conditions.

    Parameters
    ----------
    components : Components
    conditions : Conditions
        Every component that is present has a model here, or stays in one phase; `connect` sees to it.
    present : (C,) bool
        Which components can flow.
    basis : mapping of str to tuple of str, optional
        Components of the bases of mole ratios, ``"gas"`` and ``"liquid"``; by default those that stay in the phase.
    heat : Heat, optional
        Needed where heat is balanced.

    Attributes
    ----------
    names : tuple of D str
        The distributing components.
    places : (D,) int
        Their places among the C components.
    models : list of D EquilibriumModel
    stays_gas, stays_liquid : (C,) bool
    gas_basis, liquid_basis : (C,) bool
    law : Law
    curved : (d,) int
        Which of the D components have a ratio that depends on the liquid.
    curved_law : Law
        Of those alone.
    """

    def __init__(
        self,
        components: Components,
        conditions: Conditions,
        present: np.ndarray,
        basis: Mapping[str, tuple[str, ...]] | None = None,
        heat: Heat | None = None,
    ) -> None:
        stays = [conditions.stays_in(name, components) for name in components.names]
        self.table, self.heat, self.count = conditions.name, heat, len(components)
        self.stays_gas = np.array([phase == "gas" for phase in stays], dtype=bool)
        self.stays_liquid = np.array([phase == "liquid" for phase in stays], dtype=bool)
        self.places = np.flatnonzero(np.asarray(present, dtype=bool) & ~self.stays_gas & ~self.stays_liquid)
        self.nowhere = ~self.stays_gas & ~self.stays_liquid
        self.nowhere[self.places] = False
        self.names = tuple(components.names[place] for place in self.places)
        gas, liquid = (basis or {}).get("gas"), (basis or {}).get("liquid")
        self.gas_basis = self.stays_gas if gas is None else components.mask(gas)
        self.liquid_basis = self.stays_liquid if liquid is None else components.mask(liquid)
        self.models: list[EquilibriumModel] = [conditions.models[name] for name in self.names]
        in_gas, in_liquid = self.gas_basis[self.places], self.liquid_basis[self.places]
        self.law = Law(self.models, in_gas, in_liquid)
        self.curved = np.flatnonzero(["liquid" in model.uses for model in self.models])
        own = [self.models[index] for index in self.curved]
        self.curved_law = Law(own, in_gas[self.curved], in_liquid[self.curved])

    @classmethod
    def connect(
        cls,
        components: Components,
        conditions: Conditions,
        present: np.ndarray,
        basis: Mapping[str, tuple[str, ...]],
        heat: Heat | None,
        place: str,
        context: Context,
    ) -> Mixture | None:
        """Build a mixture and note every fault.

        Parameters
        ----------
        components, conditions, present, basis, heat
            As for the class.
        place : str
            Where the components meet, such as ``"flash drum 'knockout'"``, for what is said of faults.
        context : Context

        Returns
        -------
        Mixture or None
            None where a component that is present has no model, for which a fault is noted or was before, or is given
            in mole ratios to a basis that it belongs to.
        """
        present = np.asarray(present, dtype=bool)
        names = [
            name
            for name, here in zip(components.names, present, strict=True)
            if here and conditions.stays_in(name, components) is None
        ]
        lacking = [name for name in names if name not in conditions.models]
        for name in lacking:
            if name not in conditions.doubtful:
                context.fault(
                    f"equilibrium.{conditions.name}.{name}",
                    f"'{name}' reaches {place} and has no model here",
                    f'add {name} = {{ model = "constant", K = 0.1 }}, or stays_in where it cannot distribute',
                )
        if lacking:
            return None
        mixture = cls(components, conditions, present, basis, heat)
        law = mixture.law
        own = np.flatnonzero(law.ratio & (law.gas_basis | law.liquid_basis))
        for index in own:
            name = mixture.names[index]
            context.fault(
                f"equilibrium.{conditions.name}.{name}",
                f"'{name}' is given in mole ratios at {place} and belongs to their basis itself",
                "give it in mole fractions, or leave it out of [basis]",
            )
        return None if len(own) else mixture

    def addresses(self) -> dict[str, str]:
        """Give the address of every number of the models and the heat data by its local name.

        Returns
        -------
        dict of str to str
            ``"NAME.key"`` for models, ``"heat.NAME.key"`` for heat data.
        """
        found = {
            f"{name}.{key}": f"equilibrium.{self.table}.{name}.{key}"
            for name, model in zip(self.names, self.models, strict=True)
            for key in model.numbers
        }
        return found if self.heat is None else {**found, **self.heat.addresses()}

    def model_numbers(self, numbers: Mapping[str, Any]) -> list[dict[str, Any]]:
        """Give the numbers of each model by their names there; what is absent is as the file has it.

        Parameters
        ----------
        numbers : mapping of str to (...,) array, float or list
            By local name.

        Returns
        -------
        list of D dict
        """
        return [
            {key: numbers.get(f"{name}.{key}", value) for key, value in model.numbers.items()}
            for name, model in zip(self.names, self.models, strict=True)
        ]

    def heat_numbers(self, numbers: Mapping[str, Any]) -> dict[str, Any]:
        """Give those of the numbers that belong to heat data.

        Parameters
        ----------
        numbers : mapping of str to (...,) array, float or list
            By local name.
        """
        return {} if self.heat is None else {key: numbers[key] for key in self.heat.addresses() if key in numbers}

    def enthalpy(
        self, gas: np.ndarray, liquid: np.ndarray, temperature: np.ndarray, numbers: Mapping[str, Any] | None = None
    ) -> np.ndarray:
        """Give the enthalpy of two phases at one temperature.

        Parameters
        ----------
        gas, liquid : (..., C) mol/s
        temperature : (...,) K
        numbers : mapping of str to (...,) array, float or list, optional

        Returns
        -------
        (...,) W

        Raises
        ------
        ValueError
            Where the mixture has no heat data.
        """
        if self.heat is None:
            raise ValueError("the mixture was made without heat data")
        own = self.heat_numbers(numbers or {})
        return (gas * self.heat.gas(temperature, own)).sum(axis=-1) + (liquid * self.heat.liquid(temperature, own)).sum(axis=-1)
