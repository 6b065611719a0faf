"""Flooding of packed columns by three fits of the generalised pressure drop correlation, each with its own ordinate.

Velocities are superficial. The line of Kister and Gill goes with the packing factors of Kister and Strigle alone
(``kister_factor`` of a packing), the Eckert type with the older ones (``older_factor``), Leva's chart as its fit is published
with the former (from memory). With one and the same factor the three agree within 4 percent in velocity for water.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from scipy.constants import g

from leanloop.hydraulics.arrays import CENTIPOISE, FOOT, INCH_WATER_PER_FOOT, positive, quiet
from leanloop.hydraulics.ranges import Range

WATER_DENSITY = 1000.0  # kg/m3; the charts are for water
KISTER_GILL = (Range("flow_parameter", 0.02, 20.0), Range("kister_factor", 10 / FOOT, 60 / FOOT, "1/m"))
LEVA = (Range("flow_parameter", 0.01, 10.0), Range("liquid_density", 700.0, 1400.0, "kg/m3"))
ECKERT = (Range("flow_parameter", 0.01, 10.0),)
FLAT = 2 * INCH_WATER_PER_FOOT  # Pa/m


@quiet
def kister_gill_flood(
    flow_parameter: Any, kister_factor: Any, gas_density: Any, liquid_density: Any, liquid_viscosity: Any
) -> Any:
    """Give the gas velocity at flood: ln Y = -(3.5021 + 1.028 ln F + 0.11093 ln^2 F), Y = C^2 Fp mu^0.1.

    Ranges in `KISTER_GILL`. H. Z. Kister, D. R. Gill, Chem. Eng. Progr. 87(2) 32 (1991), as in J. Benitez, Principles and
    Modern Applications of Mass Transfer Operations, equations (4.6) to (4.8).

    Parameters
    ----------
    flow_parameter : (...,)
    kister_factor : (...,) 1/m
        Packing factor of Kister and Strigle, none other.
    gas_density, liquid_density : (...,) kg/m3
    liquid_viscosity : (...,) Pa s

    Returns
    -------
    (...,) m/s
    """
    flow, factor, light, heavy, viscosity = positive(
        flow_parameter, kister_factor, gas_density, liquid_density, liquid_viscosity
    )
    ordinate = np.exp(-(3.5021 + 1.028 * np.log(flow) + 0.11093 * np.log(flow) ** 2))
    # mixed units of the source: m/s, 1/ft and Pa s
    capacity = np.sqrt(ordinate / (factor * FOOT * viscosity**0.1))
    return capacity * np.sqrt(positive(heavy - light) / light)


@quiet
def leva_flood(flow_parameter: Any, packing_factor: Any, gas_density: Any, liquid_density: Any, liquid_viscosity: Any) -> Any:
    """Give the gas velocity at flood from the chart of Leva, fitted by Seader and Henley.

    Ranges in `LEVA`. ln Y = -3.7121 - 1.0371 ln F - 0.1501 ln^2 F - 0.007544 ln^3 F, Y = (u^2 Fp / g) (rhoG / rho_water)
    f(rhoL) f(muL). M. Leva, Chem. Eng. Progr. 88(1) 65 (1992); J. D. Seader, E. J. Henley, Separation Process Principles,
    section 6.8; constants from memory, and that their table of factors is that of Kister and Strigle. Arguments and result as
    in `kister_gill_flood`.
    """
    flow, factor, light, heavy, viscosity = positive(
        flow_parameter, packing_factor, gas_density, liquid_density, liquid_viscosity
    )
    log = np.log(flow)
    ordinate = np.exp(-3.7121 - 1.0371 * log - 0.1501 * log**2 - 0.007544 * log**3)
    ratio = WATER_DENSITY / heavy
    dense = positive(-0.8787 + 2.6776 * ratio - 0.6313 * ratio**2)
    viscous = 0.96 * (viscosity / CENTIPOISE) ** 0.19
    return np.sqrt(ordinate * g / factor * WATER_DENSITY / light / (dense * viscous)) * _lighter(light, heavy)


@quiet
def eckert_flood(flow_parameter: Any, older_factor: Any, gas_density: Any, liquid_density: Any, liquid_viscosity: Any) -> Any:
    """Give the gas velocity at flood from a chart of Eckert's type, as fitted in the cost manual of the US EPA.

    Ranges in `ECKERT`. log10 Y = -1.668 - 1.085 log10 F - 0.297 log10^2 F, Y = G^2 Fp psi mu^0.2 / (rhoL rhoG g), psi =
    rho_water / rhoL, mu in mPa s. EPA Air Pollution Control Cost Manual, section 5.2 chapter 1; constants from memory.

    Parameters
    ----------
    flow_parameter : (...,)
    older_factor : (...,) 1/m
        Packing factor of the older family.
    gas_density, liquid_density : (...,) kg/m3
    liquid_viscosity : (...,) Pa s

    Returns
    -------
    (...,) m/s
    """
    flow, factor, light, heavy, viscosity = positive(
        flow_parameter, older_factor, gas_density, liquid_density, liquid_viscosity
    )
    log = np.log10(flow)
    ordinate = 10 ** (-1.668 - 1.085 * log - 0.297 * log**2)
    viscous = (viscosity / CENTIPOISE) ** 0.2
    return np.sqrt(ordinate * heavy * g / (light * factor * (WATER_DENSITY / heavy) * viscous)) * _lighter(light, heavy)


@quiet
def kister_gill_pressure_drop(kister_factor: Any) -> Any:
    """Give the pressure drop at flood: 0.115 Fp^0.7 inches of water per foot up to a factor of 60 1/ft, 2 above.

    Kister and Gill as in `kister_gill_flood`; the flat value is common practice, from memory.

    Parameters
    ----------
    kister_factor : (...,) 1/m
        Packing factor of Kister and Strigle.

    Returns
    -------
    (...,) Pa/m
    """
    factor = positive(kister_factor) * FOOT  # 1/ft inside
    drop = 0.115 * factor**0.7 * INCH_WATER_PER_FOOT
    return np.where(factor > 60 * (1 + 1e-12), FLAT, drop)[()]


@quiet
def liquid_velocity(gas_velocity: Any, flow_parameter: Any, gas_density: Any, liquid_density: Any) -> Any:
    """Give the superficial liquid velocity that belongs to a gas velocity and a flow parameter.

    Parameters
    ----------
    gas_velocity : (...,) m/s
    flow_parameter : (...,)
    gas_density, liquid_density : (...,) kg/m3

    Returns
    -------
    (...,) m/s
    """
    gas, flow, light, heavy = positive(gas_velocity, flow_parameter, gas_density, liquid_density)
    return gas * flow * np.sqrt(light / heavy)


def _lighter(light: Any, heavy: Any) -> Any:
    """Give 1, and NaN where the gas is not the lighter."""
    return np.where(heavy > light, 1.0, np.nan)
