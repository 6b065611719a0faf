"""Enthalpy of one component in liquid and gas."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.enthalpy.curve import Curve
from leanloop.entries import Values

DATUM = 298.15  # K, at which the liquid has no enthalpy
PHASES = ("gas", "liquid")


class ComponentHeat:
    """Enthalpies of one component on the datum that its liquid, or dissolved state, has none at 298.15 K.

    From heat capacities: h_L(T) is the integral of cp_L from 298.15 K; h_G(T) = h_L(T_at) + dH + the integral of cp_G
    from T_at, with the heat of vaporisation, or absorption, dH at T_at. Without a heat of vaporisation the datum is
    the gas at 298.15 K, which is right where the component stays in the gas. A dissolved gas without a liquid heat
    capacity takes that of the gas. Enthalpies written themselves keep the datum that they are written on. Mixing is
    ideal and pressure has no effect.

    Parameters
    ----------
    name : str
    values : Values
        What was read, or is built in: words and SI numbers by flat name.
    molar_mass : float or None
        kg/mol, for data per mass.
    sources : mapping of str to str, optional
        Source of each entry that is built in.

    Attributes
    ----------
    has_liquid, has_gas : bool
        Whether there are data for the phase.
    sources : dict of str to str
        By entry; empty where every value is the user's own.
    """

    def __init__(
        self, name: str, values: Values, molar_mass: float | None = None, sources: Mapping[str, str] | None = None
    ) -> None:
        self.name, self.values, self.sources = name, values, dict(sources or {})
        self.enthalpies = {phase: Curve(phase, values, molar_mass) for phase in PHASES if _has(values, phase)}
        self.capacities = {
            phase: Curve(f"{phase}_heat_capacity", values, molar_mass)
            for phase in PHASES
            if _has(values, f"{phase}_heat_capacity")
        }
        heat = values.sorts.get("heat_of_vaporisation.value")
        self._linked = heat is not None
        self._mass = (np.nan if molar_mass is None else molar_mass) if heat == "specific energy" else 1.0
        self.borrowed = self._linked and "gas" in self.capacities and not {"liquid"} & {*self.enthalpies, *self.capacities}
        self.has_liquid = "liquid" in self.enthalpies or "liquid" in self.capacities or self.borrowed
        self.has_gas = "gas" in self.enthalpies or "gas" in self.capacities

    @property
    def numbers(self) -> dict[str, Any]:
        """SI numbers by flat name, such as ``"heat_of_vaporisation.at"``; polynomials and ranges are lists."""
        return self.values.numbers

    @property
    def built_in(self) -> bool:
        """Whether any value comes from the built-in data."""
        return bool(self.sources)

    def liquid(self, temperature: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give the enthalpy in the liquid.

        Parameters
        ----------
        temperature : (...,) K, real or complex
        numbers : mapping of str to (...,) array, float or list
            As `numbers`, with the values of each case.

        Returns
        -------
        (...,) J/mol
            Of a shape that broadcasts with the arguments; 0 without data.
        """
        if "liquid" in self.enthalpies:
            return self.enthalpies["liquid"].straight_on(temperature, numbers)
        curve = self._capacity("liquid")
        return 0.0 * temperature if curve is None else curve.integral(DATUM, temperature, numbers)

    def gas(self, temperature: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give the enthalpy in the gas.

        Parameters
        ----------
        temperature : (...,) K, real or complex
        numbers : mapping of str to (...,) array, float or list

        Returns
        -------
        (...,) J/mol
            Of a shape that broadcasts with the arguments; 0 without data.
        """
        if "gas" in self.enthalpies:
            return self.enthalpies["gas"].straight_on(temperature, numbers)
        curve = self._capacity("gas")
        if curve is None:
            return 0.0 * temperature
        if not self._linked:
            return curve.integral(DATUM, temperature, numbers)
        at, heat = numbers["heat_of_vaporisation.at"], self._mass * numbers["heat_of_vaporisation.value"]
        return self.liquid(at, numbers) + heat + curve.integral(at, temperature, numbers)

    def capacity(self, phase: str, temperature: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give the heat capacity in a phase, the exact derivative of its enthalpy.

        Parameters
        ----------
        phase : str
            ``"gas"`` or ``"liquid"``.
        temperature : (...,) K, real or complex
        numbers : mapping of str to (...,) array, float or list

        Returns
        -------
        (...,) J/(mol K)
            Of a shape that broadcasts with the arguments; 0 without data.
        """
        if phase in self.enthalpies:
            return self.enthalpies[phase].slope(temperature, numbers)
        curve = self._capacity(phase)
        return 0.0 * temperature if curve is None else curve.at(temperature, numbers)

    def cautions(self, temperature: np.ndarray, phase: str) -> list[str]:
        """Say in sentences where the data are used outside what they are stated for.

        Parameters
        ----------
        temperature : (...,) K
            What was met; what is not finite is passed over.
        phase : str
            ``"gas"`` or ``"liquid"``.

        Returns
        -------
        list of str
            Without the component's name.
        """
        curve = self.enthalpies.get(phase) or self._capacity(phase)
        met = np.asarray(temperature, dtype=float)
        met = met[np.isfinite(met)]
        if curve is None or not met.size:
            return []
        said = []
        what = f"{phase} enthalpy" if curve.name in PHASES else curve.name.replace("_", " ")
        if phase == "liquid" and self.borrowed:
            said.append("no liquid heat capacity is given, so the dissolved state takes that of the gas")
        limits = curve.valid(self.numbers)
        if limits is not None:
            left = met[(met < limits[0]) | (met > limits[1])]
            if left.size:
                problem = f"the {what} is used outside its stated range"
                said.append(f"{problem}: at {_span(left.min(), left.max())} K, against {_span(*limits)} K")
        bad = met[np.broadcast_to(self.capacity(phase, met, self.numbers), met.shape) <= 0]
        if bad.size:
            problem = "falls with temperature" if curve.name in PHASES else "is not positive"
            said.append(f"the {what} {problem} at {_span(bad.min(), bad.max())} K: left its range")
        return said

    def _capacity(self, phase: str) -> Curve | None:
        return self.capacities.get("gas" if phase == "liquid" and self.borrowed else phase)


def _has(values: Values, name: str) -> bool:
    return name in values.numbers or f"{name}.polynomial" in values.numbers


def _span(low: float, high: float) -> str:
    return f"{low:.2f}" if low == high else f"{low:.2f} to {high:.2f}"
