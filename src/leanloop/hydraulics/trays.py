"""Flooding and entrainment of trays: capacity factors by published fits, flood velocity and percent of flood.

Capacity factors are those of M. Souders, G. G. Brown, Ind. Eng. Chem. 26 (1934) 98: C = u sqrt(rhoG / (rhoL - rhoG)), with
u the gas velocity on the net area, which is the column less one downcomer. Each is for a surface tension of 20 mN/m and
goes with the power 0.2 of it.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from leanloop.hydraulics.arrays import FOOT, INCH, PCF, positive, quiet
from leanloop.hydraulics.ranges import Range

REFERENCE_TENSION = 0.020  # N/m
FACTORS = (Range("hole_area_ratio", 0.06, np.inf),)  # H. Z. Kister after Fair 1961: 1.0, 0.9, 0.8 at 0.10, 0.08, 0.06
FAIR = (
    Range("flow_parameter", 0.01, 2.0), Range("spacing", 0.15, 0.9, "m"), Range("hole_diameter", 0.0, 6.4e-3, "m"),
    Range("weir_to_spacing", 0.0, 0.15), *FACTORS,
)  # fmt: skip
TREYBAL = (Range("flow_parameter", 0.1, 1.0), Range("spacing", 0.15, 0.9, "m"), *FACTORS)
SPACING_24_INCH = (Range("flow_parameter", 0.01, 1.0), Range("spacing", 0.60, 0.62, "m"), *FACTORS)
KISTER_HAAS = (
    Range("spacing", 0.4, 0.9, "m"), Range("hole_diameter", 3e-3, 15e-3, "m"), Range("hole_area_ratio", 0.06, 0.20),
    Range("gas_density", 0.5, 30.0, "kg/m3"),
)  # fmt: skip
ENTRAINMENT = (Range("flow_parameter", 0.01, 0.5), Range("fraction_of_flood", 0.3, 0.95))
ENTRAINMENT_80 = (Range("flow_parameter", 0.01, 1.0), Range("fraction_of_flood", 0.75, 0.85))

# Common practice, no source; from memory.
SYSTEM_FACTORS = {
    "non-foaming": 1.0,
    "depropaniser, high pressure": 0.9,
    "oil absorber": 0.85,
    "amine regenerator": 0.85,
    "glycol regenerator": 0.85,
    "amine absorber": 0.73,
    "glycol absorber": 0.73,
    "severe foam": 0.60,
}


@quiet
def flow_parameter(liquid_mass: Any, gas_mass: Any, gas_density: Any, liquid_density: Any) -> Any:
    """Give the flow parameter F = (L / V) sqrt(rhoG / rhoL).

    Parameters
    ----------
    liquid_mass, gas_mass : (...,) kg/s
        Or kg/(m2 s), both the same.
    gas_density, liquid_density : (...,) kg/m3

    Returns
    -------
    (...,)
    """
    liquid, gas, light, heavy = positive(liquid_mass, gas_mass, gas_density, liquid_density)
    return liquid / gas * np.sqrt(light / heavy)


@quiet
def hole_factor(hole_area_ratio: Any) -> Any:
    """Give the factor for the area of the holes: 1 from 0.10 of the active area on, 5 r + 0.5 below.

    Stated for 0.06 and more; J. R. Fair, Petro/Chem. Eng. 33(10) 45 (1961); the line from memory.

    Parameters
    ----------
    hole_area_ratio : (...,)
        Area of the holes over the active area.

    Returns
    -------
    (...,)
    """
    ratio = positive(hole_area_ratio)
    return np.minimum(5 * ratio + 0.5, 1.0)


@quiet
def fair_capacity(
    flow_parameter: Any,
    spacing: Any,
    surface_tension: Any = REFERENCE_TENSION,
    hole_area_ratio: Any = 0.1,
    system_factor: Any = 1.0,
) -> Any:
    """Give the flood capacity factor on the net area by the fit of Lygeros and Magoulas to Fair's chart.

    Ranges in `FAIR`; chart readings scatter by 10 to 15 percent. A. I. Lygeros, K. G. Magoulas, Hydrocarbon
    Processing 65(12) 43 (1986); constants from memory.

    Parameters
    ----------
    flow_parameter : (...,)
    spacing : (...,) m
        Between trays.
    surface_tension : (...,) N/m
    hole_area_ratio : (...,)
        Area of the holes over the active area.
    system_factor : (...,)
        For foaming; see `SYSTEM_FACTORS`.

    Returns
    -------
    (...,) m/s
    """
    flow, spacing = positive(flow_parameter, spacing)
    capacity = 0.0105 + 8.127e-4 * (1e3 * spacing) ** 0.755 * np.exp(-1.463 * flow**0.842)  # spacing in mm inside
    return capacity * _factors(surface_tension, hole_area_ratio, system_factor)


@quiet
def treybal_capacity(
    flow_parameter: Any,
    spacing: Any,
    surface_tension: Any = REFERENCE_TENSION,
    hole_area_ratio: Any = 0.1,
    system_factor: Any = 1.0,
) -> Any:
    """Give the flood capacity factor on the net area as alpha log10(1/F) + beta.

    Ranges in `TREYBAL`; below 0.1 the flow parameter counts as 0.1, as the source has it. R. E. Treybal, Mass-Transfer
    Operations, 3rd ed. 1980, table 6.2. Arguments and result as in `fair_capacity`.
    """
    flow, spacing = positive(flow_parameter, spacing)
    alpha, beta = 0.0744 * spacing + 0.01173, 0.0304 * spacing + 0.015
    capacity = alpha * np.log10(1 / np.maximum(flow, 0.1)) + beta
    return positive(capacity) * _factors(surface_tension, hole_area_ratio, system_factor)


@quiet
def capacity_24_inch(
    flow_parameter: Any,
    surface_tension: Any = REFERENCE_TENSION,
    hole_area_ratio: Any = 0.1,
    system_factor: Any = 1.0,
) -> Any:
    """Give the flood capacity factor on the net area for a tray spacing of 24 in.

    A parabola in logarithms through Fair's chart, with a flat maximum at a flow parameter of 0.028. P. C. Wankat,
    Separation Process Engineering, section 10.3; constants from memory. Arguments and result as in `fair_capacity`.
    """
    exponent = np.log10(positive(flow_parameter))
    capacity = FOOT * 10 ** (-0.94506 - 0.70234 * exponent - 0.22618 * exponent**2)  # ft/s inside
    return capacity * _factors(surface_tension, hole_area_ratio, system_factor)


@quiet
def kister_haas_capacity(
    spacing: Any, clear_liquid: Any, hole_diameter: Any, surface_tension: Any, gas_density: Any, liquid_density: Any
) -> Any:
    """Give the capacity factor of flood by entrainment in the spray regime, on the bubbling area.

    Ranges in `KISTER_HAAS`. H. Z. Kister, J. R. Haas, Chem. Eng. Progr. 86(9) 63 (1990); constants from memory. The
    height of clear liquid where froth turns to spray is an input: no correlation for it is offered here.

    Parameters
    ----------
    spacing, clear_liquid, hole_diameter : (...,) m
    surface_tension : (...,) N/m
    gas_density, liquid_density : (...,) kg/m3

    Returns
    -------
    (...,) m/s
    """
    spacing, height, hole, tension = positive(spacing, clear_liquid, hole_diameter, surface_tension)
    light, heavy = positive(gas_density, liquid_density)
    spray = ((hole / INCH) ** 2 * (1e3 * tension) / (heavy / PCF)) ** 0.125  # in, dyn/cm, lb/ft3 inside
    return FOOT * 0.144 * spray * (light / heavy) ** 0.1 * np.sqrt(spacing / height)  # ft/s inside


@quiet
def flood_velocity(capacity: Any, gas_density: Any, liquid_density: Any) -> Any:
    """Give the gas velocity at flood, on the area that the capacity factor is for.

    Parameters
    ----------
    capacity : (...,) m/s
    gas_density, liquid_density : (...,) kg/m3

    Returns
    -------
    (...,) m/s
        NaN where the gas is not the lighter.
    """
    capacity, light, heavy = positive(capacity, gas_density, liquid_density)
    return capacity * np.sqrt(positive(heavy - light) / light)


@quiet
def entrainment(flow_parameter: Any, fraction_of_flood: Any) -> Any:
    """Give the entrained liquid, over the sum of entrained and downflowing liquid, from Fair's chart.

    psi = exp(-(6.692 + 1.956 f) F^(-0.132 + 0.654 f)), f the fraction of flood. Ranges in `ENTRAINMENT`. A. P.
    Economopoulos, Chem. Eng. 85(27) 109 (1978); constants and source from memory; within 30 percent of
    `entrainment_80` up to a flow parameter of 0.3, from where on it falls off faster.

    Parameters
    ----------
    flow_parameter, fraction_of_flood : (...,)

    Returns
    -------
    (...,)
    """
    flow, flood = positive(flow_parameter, fraction_of_flood)
    return np.exp(-(6.692 + 1.956 * flood) * flow ** (-0.132 + 0.654 * flood))


@quiet
def entrainment_80(flow_parameter: Any) -> Any:
    """Give the entrained liquid, over the sum of entrained and downflowing liquid, at 80 percent of flood.

    psi = 0.00224 + 2.377 exp(-9.394 F^0.314). Lygeros and Magoulas, as in `fair_capacity`; constants from memory.

    Parameters
    ----------
    flow_parameter : (...,)

    Returns
    -------
    (...,)
    """
    return 0.00224 + 2.377 * np.exp(-9.394 * positive(flow_parameter) ** 0.314)


def _factors(surface_tension: Any, hole_area_ratio: Any, system_factor: Any) -> Any:
    """Give the product of the factors for surface tension, holes and foaming."""
    tension, system = positive(surface_tension, system_factor)
    return (tension / REFERENCE_TENSION) ** 0.2 * hole_factor(hole_area_ratio) * system
