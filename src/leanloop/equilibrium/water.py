"""Vapour pressure of water, for saturated feeds, dew points and steam that must not condense."""

from __future__ import annotations

import numpy as np

CRITICAL_TEMPERATURE = 647.096  # K
CRITICAL_PRESSURE = 22.064e6  # Pa
_TERMS = (
    (1.0, -7.85951783), (1.5, 1.84408259), (3.0, -11.7866497), (3.5, 22.6807411), (4.0, -15.9618719), (7.5, 1.80122502),
)  # fmt: skip
LEAST, MOST = 273.15, 640.0  # K, the range in which `saturation_temperature` looks
NAMES = ("water", "h2o", "steam")


def is_water(name: str) -> bool:
    """Tell whether a component is water by its name, in whatever letters: water, H2O or steam."""
    return name.lower() in NAMES


def vapour_pressure(temperature: np.ndarray) -> np.ndarray:
    """Give the vapour pressure of water.

    Valid from 273.16 K to 647.096 K. W. Wagner, A. Pruss, J. Phys. Chem. Ref. Data 31 (2002) 387,
    equation (2.5); constants from memory, checked against the boiling point at 101.325 kPa.

    Parameters
    ----------
    temperature : (...,) K
        Real or complex.

    Returns
    -------
    (...,) Pa
    """
    tau = 1.0 - temperature / CRITICAL_TEMPERATURE
    total = sum(factor * tau**power for power, factor in _TERMS)
    return CRITICAL_PRESSURE * np.exp(total * CRITICAL_TEMPERATURE / temperature)


def saturation_temperature(pressure: np.ndarray) -> np.ndarray:
    """Give the temperature at which water has a vapour pressure; NaN outside 0 to 367 degC.

    Parameters
    ----------
    pressure : (...,) Pa
        Real or complex.

    Returns
    -------
    (...,) K
    """
    real = np.asarray(np.real(pressure), dtype=float)
    low, high = np.full(real.shape, LEAST), np.full(real.shape, MOST)
    inside = (real >= vapour_pressure(low)) & (real <= vapour_pressure(high))
    for _ in range(60):
        middle = 0.5 * (low + high)
        below = vapour_pressure(middle) < real
        low, high = np.where(below, middle, low), np.where(below, high, middle)
    found = 0.5 * (low + high)
    step = 1e-3
    slope = (np.log(vapour_pressure(found + step)) - np.log(vapour_pressure(found - step))) / (2 * step)
    with np.errstate(divide="ignore", invalid="ignore"):
        moved = found + np.imag(pressure) / real / slope * 1j if np.iscomplexobj(pressure) else found
    return np.where(inside, moved, np.nan)
