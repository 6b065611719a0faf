"""Coefficients of the gas and liquid films and area of the interface in packings: Onda, and Billet and Schultes."""

from __future__ import annotations

from typing import Any

import numpy as np
from scipy.constants import R, g

from leanloop.hydraulics.arrays import positive, quiet
from leanloop.hydraulics.packings import BilletSchultes
from leanloop.hydraulics.ranges import Range

ONDA = (Range("liquid_reynolds", 0.04, 500.0),)  # L / (a muL); scatter 20 to 30 percent

# N/m; from memory.
CRITICAL_TENSIONS = {
    "ceramic": 0.061, "glass": 0.073, "steel": 0.075, "carbon": 0.056, "pvc": 0.040, "polyethylene": 0.033, "paraffin": 0.020,
}  # fmt: skip


@quiet
def onda_area(
    specific_area: Any, critical_tension: Any, surface_tension: Any, liquid_flux: Any, liquid_density: Any, liquid_viscosity: Any
) -> Any:
    """Give the wetted area.

    Ranges in `ONDA`. K. Onda, H. Takeuchi, Y. Okumoto, J. Chem. Eng. Japan 1 (1968) 56; from memory, as are the other two.

    Parameters
    ----------
    specific_area : (...,) m2/m3
    critical_tension : (...,) N/m
        Of the packing's material; see `CRITICAL_TENSIONS`.
    surface_tension : (...,) N/m
    liquid_flux : (...,) kg/(m2 s)
    liquid_density : (...,) kg/m3
    liquid_viscosity : (...,) Pa s

    Returns
    -------
    (...,) m2/m3
    """
    area, critical, tension = positive(specific_area, critical_tension, surface_tension)
    flux, density, viscosity = positive(liquid_flux, liquid_density, liquid_viscosity)
    number = flux / (area * viscosity)
    froude, weber = flux**2 * area / (density**2 * g), flux**2 / (density * tension * area)
    return area * -np.expm1(-1.45 * (critical / tension) ** 0.75 * number**0.1 * froude**-0.05 * weber**0.2)


@quiet
def onda_liquid(
    specific_area: Any,
    wetted_area: Any,
    size: Any,
    liquid_flux: Any,
    liquid_density: Any,
    liquid_viscosity: Any,
    liquid_diffusivity: Any,
) -> Any:
    """Give the coefficient of the liquid film.

    Parameters
    ----------
    specific_area, wetted_area : (...,) m2/m3
    size : (...,) m
        Nominal size of the packing.
    liquid_flux : (...,) kg/(m2 s)
    liquid_density : (...,) kg/m3
    liquid_viscosity : (...,) Pa s
    liquid_diffusivity : (...,) m2/s

    Returns
    -------
    (...,) m/s
    """
    area, wetted, size, flux = positive(specific_area, wetted_area, size, liquid_flux)
    density, viscosity, diffusivity = positive(liquid_density, liquid_viscosity, liquid_diffusivity)
    number, schmidt = flux / (wetted * viscosity), viscosity / (density * diffusivity)
    return 0.0051 * number ** (2 / 3) * schmidt**-0.5 * (area * size) ** 0.4 * np.cbrt(viscosity * g / density)


@quiet
def onda_gas(
    specific_area: Any,
    size: Any,
    gas_flux: Any,
    gas_density: Any,
    gas_viscosity: Any,
    gas_diffusivity: Any,
    temperature: Any,
) -> Any:
    """Give the coefficient of the gas film, with 5.23 for packings of 15 mm and more and 2.00 for lesser ones.

    Parameters
    ----------
    specific_area : (...,) m2/m3
    size : (...,) m
        Nominal size of the packing.
    gas_flux : (...,) kg/(m2 s)
    gas_density : (...,) kg/m3
    gas_viscosity : (...,) Pa s
    gas_diffusivity : (...,) m2/s
    temperature : (...,) K

    Returns
    -------
    (...,) mol/(m2 s Pa)
    """
    area, size, flux = positive(specific_area, size, gas_flux)
    density, viscosity, diffusivity, temperature = positive(gas_density, gas_viscosity, gas_diffusivity, temperature)
    number, schmidt = flux / (area * viscosity), viscosity / (density * diffusivity)
    factor = np.where(size < 0.015, 2.00, 5.23)
    return factor * number**0.7 * np.cbrt(schmidt) * (area * size) ** -2 * area * diffusivity / (R * temperature)


@quiet
def billet_schultes_area(
    packing: BilletSchultes, liquid_velocity: Any, liquid_density: Any, liquid_viscosity: Any, surface_tension: Any
) -> Any:
    """Give the area of the interface below loading, for liquids whose surface tension does not fall along the column.

    R. Billet, M. Schultes, Trans. IChemE 77A (1999) 498; from memory, as are the other two. With d = 4 eps / a the ratio to the
    specific area is 1.5 (a d)^-0.5 (u d rho/mu)^-0.2 (u^2 rho d/sigma)^0.75 (u^2/(g d))^-0.45. The worked example of Benitez
    takes the hydraulic area instead.

    Parameters
    ----------
    packing : BilletSchultes
    liquid_velocity : (...,) m/s
        Superficial.
    liquid_density : (...,) kg/m3
    liquid_viscosity : (...,) Pa s
    surface_tension : (...,) N/m

    Returns
    -------
    (...,) m2/m3
    """
    velocity, density, viscosity, tension = positive(liquid_velocity, liquid_density, liquid_viscosity, surface_tension)
    area, channel = np.asarray(packing.specific_area), _channel(packing)
    number, weber = velocity * channel * density / viscosity, velocity**2 * density * channel / tension
    froude = velocity**2 / (g * channel)
    return area * 1.5 * (area * channel) ** -0.5 * number**-0.2 * weber**0.75 * froude**-0.45


@quiet
def billet_schultes_liquid(packing: BilletSchultes, liquid_velocity: Any, holdup: Any, liquid_diffusivity: Any) -> Any:
    """Give the coefficient of the liquid film, 0.757 C_L (D a u / (eps h))^0.5.

    Parameters
    ----------
    packing : BilletSchultes
    liquid_velocity : (...,) m/s
        Superficial.
    holdup : (...,) m3/m3
    liquid_diffusivity : (...,) m2/s

    Returns
    -------
    (...,) m/s
    """
    velocity, held, diffusivity = positive(liquid_velocity, holdup, liquid_diffusivity)
    factor = 12 ** (1 / 6) * np.asarray(packing.liquid)  # with the channel's width of 4 eps / a this is the 0.757
    return factor * np.sqrt(diffusivity / _channel(packing) * velocity / held)


@quiet
def billet_schultes_gas(
    packing: BilletSchultes,
    gas_velocity: Any,
    holdup: Any,
    gas_density: Any,
    gas_viscosity: Any,
    gas_diffusivity: Any,
    temperature: Any,
    schmidt_power: Any = 1 / 3,
) -> Any:
    """Give the coefficient of the gas film, 0.1304 C_V (D/(R T)) a / (eps (eps - h))^0.5 (6 u rho/(a mu))^(3/4) Sc^n.

    Parameters
    ----------
    packing : BilletSchultes
    gas_velocity : (...,) m/s
        Superficial.
    holdup : (...,) m3/m3
    gas_density : (...,) kg/m3
    gas_viscosity : (...,) Pa s
    gas_diffusivity : (...,) m2/s
    temperature : (...,) K
    schmidt_power : (...,)
        1/3 as in the paper of 1999; the worked example of Benitez, chapter 4, is met by 2/3 alone.

    Returns
    -------
    (...,) mol/(m2 s Pa)
    """
    velocity, held, density, viscosity = positive(gas_velocity, holdup, gas_density, gas_viscosity)
    diffusivity, temperature, power = positive(gas_diffusivity, temperature, schmidt_power)
    area, free = np.asarray(packing.specific_area), positive(np.asarray(packing.void_fraction) - held)
    number, schmidt = velocity * density / (area * viscosity), viscosity / (density * diffusivity)
    spread = np.sqrt(area / (_channel(packing) * free))  # 0.1304 is 6^(-3/4) / 2
    return np.asarray(packing.gas) * spread * diffusivity / (R * temperature) * number**0.75 * schmidt**power


def _channel(packing: BilletSchultes) -> Any:
    """Give the hydraulic diameter of the channels, 4 eps / a, in m."""
    return 4 * np.asarray(packing.void_fraction) / packing.specific_area
