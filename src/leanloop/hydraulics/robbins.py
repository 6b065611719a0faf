"""Pressure drop of random packings by the method of Robbins.

L. A. Robbins, Chem. Eng. Progr. 87(5) 87 (1991); equations from memory.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from leanloop.hydraulics.arrays import CENTIPOISE, FOOT, INCH_WATER_PER_FOOT, PCF, POUND, not_negative, positive, quiet
from leanloop.hydraulics.ranges import Range

# Tested with air and water alone above a flow parameter of 0.3.
RANGES = (Range("pressure", 0.0, 3e5, "Pa"), Range("flow_parameter", 0.0, 0.3))
FLUX = POUND / FOOT**2 / 3600  # kg/(m2 s) in one lb/(ft2 h)


@quiet
def pressure_drop(
    dry_factor: Any, gas_flux: Any, liquid_flux: Any, gas_density: Any, liquid_density: Any, liquid_viscosity: Any
) -> Any:
    """Give the pressure drop of an irrigated random packing.

    Ranges in `RANGES`; near atmospheric and vacuum. X = 7.4e-8 G^2 10^(2.7e-5 L) and X + 0.4 (L/20000)^0.1 X^4, with G and L the
    fluxes reduced to air and water and to a factor of 20 1/ft. The method gives no flooding.

    Parameters
    ----------
    dry_factor : (...,) 1/m
        Packing factor of the dry bed, as `dry_factor` gives it; not that of the flooding charts.
    gas_flux, liquid_flux : (...,) kg/(m2 s)
        The liquid's may be 0.
    gas_density, liquid_density : (...,) kg/m3
    liquid_viscosity : (...,) Pa s

    Returns
    -------
    (...,) Pa/m
    """
    factor, gas, light, heavy, viscosity = positive(dry_factor, gas_flux, gas_density, liquid_density, liquid_viscosity)
    liquid, factor = not_negative(liquid_flux) / FLUX, factor * FOOT  # lb/(ft2 h) and 1/ft inside
    power = np.where(factor > 200, 0.2, 0.1)
    gas = gas / FLUX * np.sqrt(0.075 * PCF / light) * np.sqrt(factor / 20)
    liquid = liquid * (62.4 * PCF / heavy) * np.sqrt(factor / 20) * (viscosity / CENTIPOISE) ** power
    loaded = 7.4e-8 * gas**2 * 10 ** (2.7e-5 * liquid)
    return (loaded + 0.4 * (liquid / 20000) ** 0.1 * loaded**4) * INCH_WATER_PER_FOOT


@quiet
def dry_factor(drop: Any, gas_velocity: Any, gas_density: Any) -> Any:
    """Give the packing factor of a dry bed from a pressure drop measured without liquid.

    Parameters
    ----------
    drop : (...,) Pa/m
    gas_velocity : (...,) m/s
        Superficial.
    gas_density : (...,) kg/m3

    Returns
    -------
    (...,) 1/m
    """
    drop, velocity, light = positive(drop, gas_velocity, gas_density)
    gas = velocity * light / FLUX * np.sqrt(0.075 * PCF / light)
    return 20 * (drop / INCH_WATER_PER_FOOT) / (7.4e-8 * gas**2) / FOOT
