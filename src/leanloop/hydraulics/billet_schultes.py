"""Pressure drop, hold-up, loading and flooding of packings by the method of Billet and Schultes.

R. Billet, M. Schultes, Trans. IChemE 77A (1999) 498. Equations from memory; those of hold-up and pressure
drop also read in J. Benitez, Principles and Modern Applications of Mass Transfer Operations, chapter 4. Every function takes the
constants as `leanloop.hydraulics.packings.BilletSchultes`; velocities are superficial.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from scipy.constants import g

from leanloop.hydraulics.arrays import positive, quiet
from leanloop.hydraulics.packings import BilletSchultes
from leanloop.hydraulics.ranges import Range
from leanloop.hydraulics.roots import bracketed

# Of the data behind the method; from memory, rounded.
RANGES = (
    Range("gas_density", 0.07, 97.0, "kg/m3"), Range("liquid_density", 361.0, 1237.0, "kg/m3"),
    Range("liquid_viscosity", 0.1e-3, 2e-3, "Pa s"), Range("liquid_velocity", 0.07e-3, 33e-3, "m/s"),
)  # fmt: skip


@quiet
def reynolds(packing: BilletSchultes, liquid_velocity: Any, liquid_density: Any, liquid_viscosity: Any) -> Any:
    """Give the Reynolds number of the liquid, uL rhoL / (a muL); arguments as in `holdup`, result (...,)."""
    velocity, density, viscosity = positive(liquid_velocity, liquid_density, liquid_viscosity)
    return velocity * density / (packing.specific_area * viscosity)


@quiet
def hydraulic_area(packing: BilletSchultes, liquid_velocity: Any, liquid_density: Any, liquid_viscosity: Any) -> Any:
    """Give the hydraulic area over the specific area; arguments as in `holdup`, result (...,)."""
    velocity, density, viscosity = positive(liquid_velocity, liquid_density, liquid_viscosity)
    number = reynolds(packing, velocity, density, viscosity)
    froude = velocity**2 * packing.specific_area / g
    slow, fast = number**0.15 * froude**0.1, 0.85 * number**0.25 * froude**0.1
    return np.asarray(packing.holdup) * np.where(number < 5, slow, fast)


@quiet
def holdup(packing: BilletSchultes, liquid_velocity: Any, liquid_density: Any, liquid_viscosity: Any) -> Any:
    """Give the liquid hold-up below the loading point, (12 Fr / Re)^(1/3) (ah/a)^(2/3).

    Parameters
    ----------
    packing : BilletSchultes
    liquid_velocity : (...,) m/s
    liquid_density : (...,) kg/m3
    liquid_viscosity : (...,) Pa s

    Returns
    -------
    (...,) m3/m3
    """
    velocity, density, viscosity = positive(liquid_velocity, liquid_density, liquid_viscosity)
    share = hydraulic_area(packing, velocity, density, viscosity)
    froude = velocity**2 * packing.specific_area / g
    return np.cbrt(12 * froude / reynolds(packing, velocity, density, viscosity)) * share ** (2 / 3)


@quiet
def wall_factor(packing: BilletSchultes, diameter: Any = np.inf) -> Any:
    """Give the wall factor K: 1/K = 1 + (2/3) dp / ((1 - eps) D), with dp = 6 (1 - eps) / a.

    Parameters
    ----------
    packing : BilletSchultes
    diameter : (...,) m
        Of the column; infinite for none of its influence.

    Returns
    -------
    (...,)
    """
    diameter = np.asarray(diameter, dtype=float)
    return 1 / (1 + 4 / (packing.specific_area * np.where(diameter > 0, diameter, np.nan)))[()]


@quiet
def dry_pressure_drop(
    packing: BilletSchultes, gas_velocity: Any, gas_density: Any, gas_viscosity: Any, diameter: Any = np.inf
) -> Any:
    """Give the pressure drop of the dry packing, psi (a / eps^3) (rhoG u^2 / 2) / K with psi = C_P (64/Re + 1.8/Re^0.08).

    Parameters
    ----------
    packing : BilletSchultes
    gas_velocity : (...,) m/s
    gas_density : (...,) kg/m3
    gas_viscosity : (...,) Pa s
    diameter : (...,) m
        Of the column; infinite for no influence of the wall.

    Returns
    -------
    (...,) Pa/m
    """
    velocity, density, viscosity = positive(gas_velocity, gas_density, gas_viscosity)
    wall = wall_factor(packing, diameter)
    number = 6 * velocity * density * wall / (packing.specific_area * viscosity)
    friction = np.asarray(packing.pressure) * (64 / number + 1.8 / number**0.08)
    return friction * packing.specific_area / np.asarray(packing.void_fraction) ** 3 * density * velocity**2 / (2 * wall)


@quiet
def wet_factor(
    packing: BilletSchultes,
    liquid_velocity: Any,
    liquid_density: Any,
    liquid_viscosity: Any,
    loading_holdup: Any = None,
) -> Any:
    """Give the pressure drop over that of the dry packing, below the loading point.

    Without the hold-up at loading the form of 1991, (eps / (eps - h))^1.5 exp(Re/200), which the worked examples of Benitez
    use; with it the form of 1999, (eps / (eps - h))^1.5 (h / hS)^0.3 exp(13300 a^-1.5 Fr^0.5), from memory.

    Parameters
    ----------
    packing : BilletSchultes
    liquid_velocity : (...,) m/s
    liquid_density : (...,) kg/m3
    liquid_viscosity : (...,) Pa s
    loading_holdup : (...,) m3/m3, optional
        As `loading` gives it.

    Returns
    -------
    (...,)
        NaN where the hold-up fills the voids.
    """
    velocity, density, viscosity = positive(liquid_velocity, liquid_density, liquid_viscosity)
    held, void = holdup(packing, velocity, density, viscosity), np.asarray(packing.void_fraction)
    narrowed = (void / positive(void - held)) ** 1.5
    if loading_holdup is None:
        return narrowed * np.exp(reynolds(packing, velocity, density, viscosity) / 200)
    area = np.asarray(packing.specific_area)
    swollen = np.exp(13300 * area**-1.5 * velocity * np.sqrt(area / g))
    return narrowed * (held / positive(loading_holdup)) ** 0.3 * swollen


@quiet
def pressure_drop(
    packing: BilletSchultes,
    gas_velocity: Any,
    liquid_velocity: Any,
    gas_density: Any,
    liquid_density: Any,
    gas_viscosity: Any,
    liquid_viscosity: Any,
    diameter: Any = np.inf,
    loading_holdup: Any = None,
) -> Any:
    """Give the pressure drop of the irrigated packing below the loading point, (...,) Pa/m.

    The product of `dry_pressure_drop` and `wet_factor`, whose arguments it takes. It has no end at flooding: see `flooding`.
    """
    dry = dry_pressure_drop(packing, gas_velocity, gas_density, gas_viscosity, diameter)
    return dry * wet_factor(packing, liquid_velocity, liquid_density, liquid_viscosity, loading_holdup)


@quiet
def loading(
    packing: BilletSchultes, flow_parameter: Any, gas_density: Any, liquid_density: Any, gas_viscosity: Any, liquid_viscosity: Any
) -> tuple[Any, Any]:
    """Give gas velocity and hold-up at the loading point, along a given ratio of the flows.

    Parameters
    ----------
    packing : BilletSchultes
    flow_parameter : (...,)
    gas_density, liquid_density : (...,) kg/m3
    gas_viscosity, liquid_viscosity : (...,) Pa s

    Returns
    -------
    velocity : (...,) m/s
    holdup : (...,) m3/m3
    """
    flow, light, heavy, thin, thick = positive(flow_parameter, gas_density, liquid_density, gas_viscosity, liquid_viscosity)
    area, void, constant = (np.asarray(item) for item in (packing.specific_area, packing.void_fraction, packing.load))
    power = np.where(flow <= 0.4, -0.326, -0.723)
    factor = np.where(flow <= 0.4, constant, 0.695 * constant * (thick / thin) ** 0.1588)
    resistance = g / factor**2 * (flow * (thick / thin) ** 0.4) ** (-2 * power)
    speed = np.sqrt(g / resistance * heavy / light)
    # t is the cube root of 12 muL uL / (g rhoL); it grows from 0 to where the first bracket of the source vanishes
    pull = 12 * thick / (g * heavy) * flow * np.sqrt(light / heavy)
    most = void * area ** (-2 / 3)

    def gap(t: np.ndarray) -> np.ndarray:
        return t**2.5 / pull - speed * (void * area ** (-1 / 6) - area**0.5 * t)

    top = most + 0 * pull * speed
    t = bracketed(gap, 0 * top, top)
    velocity = t**3 / pull
    return velocity, holdup(packing, velocity * flow * np.sqrt(light / heavy), heavy, thick)


@quiet
def flooding(
    packing: BilletSchultes, flow_parameter: Any, gas_density: Any, liquid_density: Any, gas_viscosity: Any, liquid_viscosity: Any
) -> tuple[Any, Any]:
    """Give gas velocity and hold-up at the flooding point, along a given ratio of the flows.

    The hold-up solves h^3 (3 h - eps) = (6/g) a^2 eps (muL/rhoL) (L/V) (rhoG/rhoL) u between eps/3 and eps. Arguments and
    results as in `loading`.
    """
    flow, light, heavy, thin, thick = positive(flow_parameter, gas_density, liquid_density, gas_viscosity, liquid_viscosity)
    area, void, constant = (np.asarray(item) for item in (packing.specific_area, packing.void_fraction, packing.flood))
    power = np.where(flow <= 0.4, -0.194, -0.708)
    factor = np.where(flow <= 0.4, constant, 0.6244 * constant * (thick / thin) ** 0.1028)
    resistance = g / factor**2 * (flow * (thick / thin) ** 0.2) ** (-2 * power)
    pull = 6 / g * area**2 * void * thick / heavy * flow * np.sqrt(light / heavy)
    speed = np.sqrt(2 * g / resistance / (void * area) * heavy / light)

    def velocity(h: np.ndarray) -> np.ndarray:
        return speed * (void - h) ** 1.5 * h**0.5

    def gap(h: np.ndarray) -> np.ndarray:
        return h**3 * (3 * h - void) - pull * velocity(h)

    top = void + 0 * pull * speed
    held = bracketed(gap, top / 3, top)
    return velocity(held), held
