"""Streams on the case axis: molar flows, temperature, pressure and phase."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from leanloop.quantities import NORMAL_MOLES

TWO_PHASE = "two-phase"

@dataclass(frozen=True)
class Stream:
    """State of a stream, for any leading axes.

    Parameters
    ----------
    state : (..., C + 2)
        Molar flows of the C components in mol/s, then temperature in K and pressure in Pa. May be
        complex where derivatives are taken by the complex step.
    phase : str
        ``"gas"``, ``"liquid"`` or ``"two-phase"``. Of a stream that may be of two phases, the molar enthalpy in J/mol
        stands in the place of the temperature: `Flashed` finds the temperature.
    """

    state: np.ndarray
    phase: str

    @classmethod
    def of(cls, flows: np.ndarray, temperature: np.ndarray, pressure: np.ndarray, phase: str) -> Stream:
        """Put a stream together.

        Parameters
        ----------
        flows : (..., C) mol/s
        temperature : (...,) K
        pressure : (...,) Pa
        phase : str
        """
        parts = (flows[..., 0], np.asarray(temperature), np.asarray(pressure))
        kind = complex if flows.dtype.kind == "c" or any(part.dtype.kind == "c" for part in parts) else float
        shape = parts[0].shape
        if any(part.ndim and part.shape != shape for part in parts):
            shape = np.broadcast_shapes(*(part.shape for part in parts))
        state = np.empty((*shape, flows.shape[-1] + 2), dtype=kind)
        state[..., :-2] = flows
        state[..., -2] = temperature
        state[..., -1] = pressure
        return cls(state, phase)

    def at(self, temperature: np.ndarray) -> Stream:
        """Give the same flows at another temperature.

        Parameters
        ----------
        temperature : (...,) K
        """
        return self._with(slice(-2, -1), np.asarray(temperature)[..., None])

    def carrying(self, flows: np.ndarray) -> Stream:
        """Give other flows at the same temperature and pressure.

        Parameters
        ----------
        flows : (..., C) mol/s
        """
        return self._with(slice(0, -2), flows)

    def _with(self, part: slice, values: np.ndarray) -> Stream:
        shape = self.state.shape[:-1]
        if values.ndim > 1 and values.shape[:-1] != shape:
            shape = np.broadcast_shapes(shape, values.shape[:-1])
        complex_one = self.state.dtype.kind == "c" or values.dtype.kind == "c"
        state = np.empty((*shape, self.state.shape[-1]), dtype=complex if complex_one else float)
        state[:] = self.state
        state[..., part] = values
        return Stream(state, self.phase)

    @property
    def flows(self) -> np.ndarray:
        """Molar flows, (..., C) mol/s."""
        return self.state[..., :-2]

    @property
    def temperature(self) -> np.ndarray:
        """Temperature, (...,) K."""
        return self.state[..., -2]

    @property
    def pressure(self) -> np.ndarray:
        """Pressure, (...,) Pa."""
        return self.state[..., -1]

    @property
    def total(self) -> np.ndarray:
        """Total molar flow, (...,) mol/s."""
        return self.flows.sum(axis=-1)

    @property
    def fractions(self) -> np.ndarray:
        """Mole fractions, (..., C); NaN where nothing flows."""
        return divide(self.flows, self.total[..., None])

    def fractions_dry(self, water: np.ndarray) -> np.ndarray:
        """Give mole fractions with water left out.

        Parameters
        ----------
        water : (C,) bool

        Returns
        -------
        (..., C)
            NaN for water itself.
        """
        flows = np.where(water, np.nan, self.flows)
        return divide(flows, self.flows[..., ~water].sum(axis=-1)[..., None])

    def ratios(self, basis: np.ndarray) -> np.ndarray:
        """Give mole ratios to the solute-free phase.

        Parameters
        ----------
        basis : (C,) bool

        Returns
        -------
        (..., C)
            NaN where the basis does not flow.
        """
        return divide(self.flows, self.flows[..., basis].sum(axis=-1)[..., None])

    def mass_fractions(self, molar_masses: np.ndarray) -> np.ndarray:
        """Give mass fractions.

        Parameters
        ----------
        molar_masses : (C,) kg/mol
            NaN where unknown; that spoils the answer only where such a component flows.

        Returns
        -------
        (..., C)
        """
        masses = np.where(self.flows == 0, 0.0, self.flows * molar_masses)
        return divide(masses, masses.sum(axis=-1)[..., None])

    def concentrations(self, molar_masses: np.ndarray, without: np.ndarray) -> np.ndarray:
        """Give mass per normal volume of gas (0 degC, 101.325 kPa).

        Parameters
        ----------
        molar_masses : (C,) kg/mol
        without : (C,) bool
            Components left out of the gas volume (water, for a dry basis).

        Returns
        -------
        (..., C) mg/Nm3
        """
        volume = self.flows[..., ~without].sum(axis=-1) / NORMAL_MOLES
        masses = np.where(self.flows == 0, 0.0, self.flows * molar_masses) * 1e6
        return divide(np.where(without, np.nan, masses), volume[..., None])


@dataclass(frozen=True)
class Flashed(Stream):
    """A stream that may be of two phases, with its temperature and gas fraction.

    Parameters
    ----------
    state, phase
        As for `Stream`.
    warmth : (...,) K
    gas_fraction : (...,)
        mol of gas per mol.
    """

    warmth: np.ndarray
    gas_fraction: np.ndarray

    @property
    def temperature(self) -> np.ndarray:
        """Temperature, (...,) K."""
        return self.warmth


def divide(above: np.ndarray, below: np.ndarray) -> np.ndarray:
    """Divide, with NaN where the divisor is zero.

    Parameters
    ----------
    above, below : (...,) broadcastable

    Returns
    -------
    (...,)
    """
    safe = np.where(below == 0, np.nan, below)
    with np.errstate(invalid="ignore", over="ignore"):
        return above / safe
