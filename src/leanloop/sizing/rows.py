"""Flows and properties between the stages of columns, as sizing needs them.

Row s lies between stage s and stage s + 1: the gas that rises into stage s meets the liquid that runs down from it. Row 0 is
the top, the last row the bottom; a batch whose columns differ in height has NaN below each one's own bottom.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.flowsheet.view import View
from leanloop.hydraulics import properties, trays
from leanloop.sizing.spec import ColumnSpec
from leanloop.stream import divide

if TYPE_CHECKING:
    from leanloop.flowsheet.result import Part

DILUTE = 1e-300


@dataclass(frozen=True)
class Rows:
    """Between the stages of M columns.

    Attributes
    ----------
    count : (M,) int
        Equilibrium stages.
    gas_mass, liquid_mass : (M, S) kg/s
    gas_mol, liquid_mol : (M, S) mol/s
    temperature, pressure : (M, S) K, Pa
    gas_density, liquid_density : (M, S) kg/m3
    gas_viscosity, liquid_viscosity : (M, S) Pa s
        NaN where not asked for, as are the next three.
    surface_tension : (M, S) N/m
    gas_diffusivity, liquid_diffusivity : (M, S) m2/s
    liquid_molar_mass : (M, S) kg/mol
    k : (M, S)
        y/x of the key component on the stage above; of the top row on that below.
    """

    count: np.ndarray
    gas_mass: np.ndarray
    liquid_mass: np.ndarray
    gas_mol: np.ndarray
    liquid_mol: np.ndarray
    temperature: np.ndarray
    pressure: np.ndarray
    gas_density: np.ndarray
    liquid_density: np.ndarray
    gas_viscosity: np.ndarray
    liquid_viscosity: np.ndarray
    surface_tension: np.ndarray
    gas_diffusivity: np.ndarray
    liquid_diffusivity: np.ndarray
    liquid_molar_mass: np.ndarray
    k: np.ndarray

    @property
    def flow_parameter(self) -> np.ndarray:
        """(L/V) (rhoG/rhoL)^0.5 by mass, (M, S)."""
        return trays.flow_parameter(self.liquid_mass, self.gas_mass, self.gas_density, self.liquid_density)

    @property
    def lam(self) -> np.ndarray:
        """K V/L of the key component, (M, S): slope of equilibrium over slope of operation, where the line is straight."""
        return self.k * divide(self.gas_mol, self.liquid_mol)

    @property
    def stages(self) -> np.ndarray:
        """Rows that lie under a stage, (M, S) bool: one for each stage."""
        place = np.arange(self.gas_mass.shape[1])
        return (place >= 1) & (place <= self.count[:, None])


def rows_of(part: Part, spec: ColumnSpec, known: Mapping[str, Mapping[str, float]]) -> Rows:
    """Give the rows of a column of some cases.

    Parameters
    ----------
    part : Part
    spec : ColumnSpec
    known : mapping of str to mapping
        ``[properties]``, SI, by component.

    Returns
    -------
    Rows
    """
    run = part.run
    view, names = View(run), run.plan.components.names
    unit = run.plan.units[spec.unit]
    numbers = view.numbers(spec.unit)
    with np.errstate(all="ignore"):
        profile = view.unit(spec.unit)["profile"]
        inlets, _ = view.sides(spec.unit)
        boiled = "boil_up" in numbers or any(key.startswith("reboiler.") for key in numbers)
        gas, liquid, counts = _flows(profile, inlets, numbers, names, boiled)
        warm, pressed, k = _states(profile, inlets, spec.key, counts, boiled)
        lost = ~np.isfinite(gas.sum(axis=2)) | ~np.isfinite(liquid.sum(axis=2))
        masses = np.nan_to_num(run.plan.components.molar_masses)
        y, x = divide(gas, gas.sum(axis=2)[..., None]), divide(liquid, liquid.sum(axis=2)[..., None])
        mix = _Mixture(spec, known, unit, names, masses, np.nan_to_num(y), np.nan_to_num(x), warm, pressed)
        found = {
            key: np.where(lost, np.nan, mix.get(key))
            for key in (
                "gas_density", "liquid_density", "gas_viscosity", "liquid_viscosity", "surface_tension", "gas_diffusivity",
                "liquid_diffusivity",
            )
        }  # fmt: skip
        return Rows(
            counts, gas @ masses, liquid @ masses, gas.sum(axis=2), liquid.sum(axis=2), warm, pressed,
            liquid_molar_mass=x @ masses, k=k, **found,
        )  # fmt: skip


def _flows(
    profile: Mapping[str, Any], inlets: Mapping[str, Any], numbers: Mapping[str, Any], names: list[str], boiled: bool
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Give gas and liquid of every row by component, (M, S, C) mol/s, and the stages of each column."""
    up = np.asarray(profile["gas_mol_s"])[..., None] * np.stack([profile["y"][name] for name in names], axis=-1)
    down = np.asarray(profile["liquid_mol_s"])[..., None] * np.stack([profile["x"][name] for name in names], axis=-1)
    # without any flow a fraction is not defined, and the flow of a component is none
    up = np.where((np.asarray(profile["gas_mol_s"]) == 0)[..., None], 0.0, up)
    down = np.where((np.asarray(profile["liquid_mol_s"]) == 0)[..., None], 0.0, down)
    cases, places, width = up.shape
    stage = np.asarray(profile["stage"])[0]
    first = int(np.argmax(stage == 1))
    trays_ = places - first - int(boiled)
    own = np.asarray(numbers["stages"]).astype(int) if "deepest" in numbers else np.full(cases, trays_)
    gas, liquid = np.full((cases, trays_ + 1, width), np.nan), np.full((cases, trays_ + 1, width), np.nan)
    gas[:, :trays_] = up[:, first : first + trays_]
    liquid[:, 1:] = down[:, first : first + trays_]
    every = np.arange(cases)
    gas[every, own] = up[:, first + trays_] if boiled else inlets["gas_in"].flows
    liquid[:, 0] = inlets["liquid_in"].flows + (down[:, first - 1] if first else 0.0)  # reflux runs down beside the feed
    return gas, liquid, own


def _states(
    profile: Mapping[str, Any], inlets: Mapping[str, Any], key: str, counts: np.ndarray, boiled: bool
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Give temperature and pressure of the gas of every row, and K of the stage above it (of the top row, below it), (M, S)."""
    cases, places = len(counts), np.shape(profile["gas_mol_s"])[1]
    first = int(np.argmax(np.asarray(profile["stage"])[0] == 1))
    row = np.arange(places - first - int(boiled) + 1)
    bottom = row == counts[:, None]
    below = first + np.minimum(row, counts[:, None] - 1)  # the stage that the gas comes from
    if boiled:
        below = np.where(bottom, places - 1, below)
    above = first + np.clip(row - 1, 0, counts[:, None] - 1)
    every = np.arange(cases)[:, None]
    warm, pressed, k = (
        np.broadcast_to(np.asarray(item, dtype=float), (cases, places))[every, at]
        for item, at in ((profile["temperature_K"], below), (profile["pressure_Pa"], below), (profile["K"][key], above))
    )
    if not boiled and inlets["gas_in"].phase == "gas":  # it comes as warm as it is fed
        warm = np.where(bottom, np.reshape(inlets["gas_in"].temperature, (-1, 1)), warm)
    return warm, pressed, k


class _Mixture:
    """Properties of the streams of a column: given for the whole, else by mixing rules."""

    def __init__(
        self, spec: ColumnSpec, known: Mapping[str, Mapping[str, float]], unit: Any, names: list[str], masses: np.ndarray,
        y: np.ndarray, x: np.ndarray, temperature: np.ndarray, pressure: np.ndarray,
    ) -> None:  # fmt: skip
        self.spec, self.known, self.names, self.masses = spec, known, names, masses
        self.temperature, self.pressure = temperature, pressure
        self.in_gas = np.flatnonzero(unit.present & ~unit.stays_liquid)
        self.in_liquid = np.flatnonzero(unit.present & ~unit.stays_gas)
        self.y, self.x = y[..., self.in_gas], x[..., self.in_liquid]
        self.nothing = np.full(temperature.shape, np.nan)

    def get(self, key: str) -> np.ndarray:
        """Give a property of all rows, (M, S); NaN where nothing tells it."""
        if key in self.spec.numbers:
            return np.full(self.temperature.shape, self.spec.numbers[key])
        return getattr(self, f"_{key}")()

    def _of(self, places: np.ndarray, key: str) -> np.ndarray | None:
        """Give a property of the components at some places, None where one is not known."""
        found = [self.known.get(self.names[place], {}).get(key) for place in places]
        return None if None in found else np.array(found, dtype=float)

    def _gas_density(self) -> np.ndarray:
        return properties.gas_density(self.pressure, self.temperature, self.y @ self.masses[self.in_gas])

    def _liquid_density(self) -> np.ndarray:
        own = self._of(self.in_liquid, "liquid_density")
        return self.nothing if own is None else properties.liquid_density(self.x, self.masses[self.in_liquid], own)

    def _gas_viscosity(self) -> np.ndarray:
        own = self._of(self.in_gas, "gas_viscosity")
        return self.nothing if own is None else properties.gas_viscosity(self.y, own, self.masses[self.in_gas])

    def _liquid_viscosity(self) -> np.ndarray:
        own = self._of(self.in_liquid, "liquid_viscosity")
        return self.nothing if own is None else properties.liquid_viscosity(self.x, own)

    def _surface_tension(self) -> np.ndarray:
        own = self._of(self.in_liquid, "surface_tension")
        return self.nothing if own is None else properties.surface_tension(self.x, own)

    def _gas_diffusivity(self) -> np.ndarray:
        """Give that of the key component in the others: as given, or by Fuller's equation and Blanc's law."""
        key = self.known.get(self.spec.key, {})
        if "gas_diffusivity" in key:
            return np.full(self.temperature.shape, key["gas_diffusivity"])
        volumes = self._of(self.in_gas, "diffusion_volume")
        if volumes is None:
            return self.nothing
        own = self.names.index(self.spec.key)
        rest, share = np.zeros(self.temperature.shape), np.zeros(self.temperature.shape)
        for number, place in enumerate(self.in_gas):
            if place != own:
                pair = properties.gas_diffusivity(
                    self.temperature, self.pressure, self.masses[own], self.masses[place], key["diffusion_volume"], volumes[number]
                )
                rest, share = rest + self.y[..., number] / pair, share + self.y[..., number]
        return share / rest

    def _liquid_diffusivity(self) -> np.ndarray:
        """Give that of the key component in the rest of the liquid: as given, or by the equation of Wilke and Chang."""
        key = self.known.get(self.spec.key, {})
        if "liquid_diffusivity" in key:
            return np.full(self.temperature.shape, key["liquid_diffusivity"])
        if "molar_volume" not in key:
            return self.nothing
        own = self.names.index(self.spec.key)
        rest = [number for number, place in enumerate(self.in_liquid) if place != own]
        share = self.x[..., rest].sum(axis=-1)
        factor = np.array([self.known.get(self.names[self.in_liquid[number]], {}).get("association", 1.0) for number in rest])
        weighed = (self.x[..., rest] * (factor * self.masses[self.in_liquid[rest]])).sum(axis=-1) / share
        return properties.liquid_diffusivity(self.temperature, weighed, self.get("liquid_viscosity"), key["molar_volume"])
