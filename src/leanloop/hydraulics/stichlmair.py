"""Pressure drop, hold-up and flooding of packings by the method of Stichlmair, Bravo and Fair.

J. Stichlmair, J. L. Bravo, J. R. Fair, Gas Sep. Purif. 3 (1989) 19. Equations and constants from memory,
the constants doubtful. Every function takes the constants as `leanloop.hydraulics.packings.Stichlmair`; velocities are superficial.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from scipy.constants import g

from leanloop.hydraulics.arrays import not_negative, positive, quiet
from leanloop.hydraulics.packings import Stichlmair
from leanloop.hydraulics.ranges import Range
from leanloop.hydraulics.roots import bracketed

RANGES = (Range("liquid_viscosity", 0.0, 5e-3, "Pa s"),)  # from memory
ROUNDS = 200
SLIM = 4.65  # power of the voids in the law of Richardson and Zaki


@quiet
def friction(packing: Stichlmair, gas_velocity: Any, gas_density: Any, gas_viscosity: Any) -> tuple[Any, Any]:
    """Give friction factor of a particle and its slope in logarithms along the Reynolds number.

    Parameters
    ----------
    packing : Stichlmair
    gas_velocity : (...,) m/s
    gas_density : (...,) kg/m3
    gas_viscosity : (...,) Pa s

    Returns
    -------
    factor, slope : (...,)
    """
    velocity, density, viscosity = positive(gas_velocity, gas_density, gas_viscosity)
    number = velocity * _size(packing) * density / viscosity
    factor = packing.c1 / number + packing.c2 / np.sqrt(number) + packing.c3
    return factor, (-packing.c1 / number - packing.c2 / (2 * np.sqrt(number))) / factor


@quiet
def dry_pressure_drop(packing: Stichlmair, gas_velocity: Any, gas_density: Any, gas_viscosity: Any) -> Any:
    """Give the pressure drop of the dry packing; arguments as in `friction`, result (...,) Pa/m."""
    velocity, density = positive(gas_velocity, gas_density)
    factor, _ = friction(packing, velocity, density, gas_viscosity)
    void = np.asarray(packing.void_fraction)
    return 0.75 * factor * (1 - void) / void**SLIM * density * velocity**2 / _size(packing)


@quiet
def dry_holdup(packing: Stichlmair, liquid_velocity: Any) -> Any:
    """Give the hold-up without influence of the gas, 0.555 (a uL^2 / (g eps^4.65))^(1/3).

    Parameters
    ----------
    packing : Stichlmair
    liquid_velocity : (...,) m/s

    Returns
    -------
    (...,) m3/m3
    """
    velocity, void = not_negative(liquid_velocity), np.asarray(packing.void_fraction)
    return 0.555 * np.cbrt(packing.specific_area * velocity**2 / (g * void**SLIM))


@quiet
def pressure_drop(
    packing: Stichlmair, gas_velocity: Any, liquid_velocity: Any, gas_density: Any, liquid_density: Any, gas_viscosity: Any
) -> tuple[Any, Any]:
    """Give pressure drop and hold-up of the irrigated packing.

    Parameters
    ----------
    packing : Stichlmair
    gas_velocity, liquid_velocity : (...,) m/s
        The liquid's may be 0.
    gas_density, liquid_density : (...,) kg/m3
    gas_viscosity : (...,) Pa s

    Returns
    -------
    drop : (...,) Pa/m
    holdup : (...,) m3/m3
        Both NaN past flooding.
    """
    heavy, void = positive(liquid_density), np.asarray(packing.void_fraction)
    _, slope = friction(packing, gas_velocity, gas_density, gas_viscosity)
    dry = dry_pressure_drop(packing, gas_velocity, gas_density, gas_viscosity) / (heavy * g)
    power, still = (2 + slope) / 3, dry_holdup(packing, liquid_velocity)
    # Where flooded there is no root. The function is convex and falls from a drop of 0, so Newton's method climbs to the
    # lesser root from below, and meets a slope that no longer falls where there is none.
    drop = np.where(still < void, 0.0 * (dry * still), np.nan)
    for _ in range(ROUNDS):
        held = still * (1 + 20 * drop**2)
        wet = dry * ((1 - void + held) / (1 - void)) ** power * (void / positive(void - held)) ** SLIM
        rise = wet * (power / (1 - void + held) + SLIM / (void - held)) * 40 * still * drop - 1
        step = np.where(rise < 0, (drop - wet) / rise, np.nan)
        drop = drop + step
        if not np.any(np.abs(step) > 1e-15 * drop):
            break
    held = still * (1 + 20 * drop**2)
    drop = np.where(held < void, drop, np.nan)
    return drop * heavy * g, still * (1 + 20 * drop**2)


@quiet
def flooding(
    packing: Stichlmair, flow_parameter: Any, gas_density: Any, liquid_density: Any, gas_viscosity: Any
) -> tuple[Any, Any]:
    """Give gas velocity and pressure drop at flooding, along a given ratio of the flows.

    Flooding is the largest velocity with a solution. There the pressure drop rises without bound along the gas flow, which
    leaves a quadratic equation for what the gas adds to the hold-up.

    Parameters
    ----------
    packing : Stichlmair
    flow_parameter : (...,)
    gas_density, liquid_density : (...,) kg/m3
    gas_viscosity : (...,) Pa s

    Returns
    -------
    velocity : (...,) m/s
    drop : (...,) Pa/m
    """
    flow, light, heavy, viscosity = positive(flow_parameter, gas_density, liquid_density, gas_viscosity)
    void, ratio = np.asarray(packing.void_fraction), flow * np.sqrt(light / heavy)

    def at(log_velocity: np.ndarray) -> tuple[Any, Any]:
        """Logarithm of what the gas lacks to flood, and drop over that of standing liquid where it comes nearest."""
        velocity = np.exp(log_velocity)
        _, slope = friction(packing, velocity, light, viscosity)
        power, still = (2 + slope) / 3, dry_holdup(packing, velocity * ratio)
        solid, free = 1 - void + still, void - still
        two, one, none = 2 * (SLIM - power) + 1, 2 * (power * free + SLIM * solid) + solid - free, -solid * free
        added = -2 * none / (one + np.sqrt(one**2 - 4 * two * none))
        drop = np.sqrt(added / (20 * still))
        dry = dry_pressure_drop(packing, velocity, light, viscosity) / (heavy * g)
        wet = np.log(dry) + power * np.log((solid + added) / (1 - void)) - SLIM * np.log((free - added) / void)
        return wet - np.log(drop), drop

    # liquid alone fills the voids where its own hold-up is all of them
    full = (void / 0.555) ** 1.5 * np.sqrt(g * void**SLIM / packing.specific_area) / ratio
    high = np.log(full * (1 - 1e-9) + 0 * viscosity)
    log_velocity = bracketed(lambda place: at(place)[0], high - 40, high)
    return np.exp(log_velocity), at(log_velocity)[1] * heavy * g


def _size(packing: Stichlmair) -> Any:
    """Give the diameter of the equivalent sphere, 6 (1 - eps) / a, in m."""
    return 6 * (1 - np.asarray(packing.void_fraction)) / packing.specific_area
