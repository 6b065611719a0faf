"""Mixing rules and diffusivities that sizing needs; simple ones, each with its equation and source.

Components lie along the last axis.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from scipy.constants import R

from leanloop.hydraulics.arrays import CENTIPOISE, not_negative, positive, quiet

# m3/mol in place of the cm3/mol of the source; E. N. Fuller, K. Ensley, J. C. Giddings, J. Phys. Chem. 73 (1969) 3679; from memory.
DIFFUSION_VOLUMES = {
    "hydrogen": 6.12e-6, "helium": 2.67e-6, "nitrogen": 18.5e-6, "oxygen": 16.3e-6, "air": 19.7e-6, "carbon monoxide": 18.0e-6,
    "carbon dioxide": 26.9e-6, "ammonia": 20.7e-6, "water": 13.1e-6, "sulfur dioxide": 41.8e-6,
}  # fmt: skip
# Factor of association of the solvent in the equation of Wilke and Chang; from memory.
ASSOCIATION = {"water": 2.6, "methanol": 1.9, "ethanol": 1.5, "other": 1.0}


@quiet
def mean_molar_mass(fractions: Any, molar_masses: Any) -> Any:
    """Give the molar mass of a mixture.

    Parameters
    ----------
    fractions : (..., n) mol/mol
    molar_masses : (..., n) kg/mol

    Returns
    -------
    (...,) kg/mol
    """
    return np.sum(not_negative(fractions) * positive(molar_masses), axis=-1)


@quiet
def gas_density(pressure: Any, temperature: Any, molar_mass: Any) -> Any:
    """Give the density of an ideal gas, P M / (R T).

    Parameters
    ----------
    pressure : (...,) Pa
    temperature : (...,) K
    molar_mass : (...,) kg/mol

    Returns
    -------
    (...,) kg/m3
    """
    pressure, temperature, mass = positive(pressure, temperature, molar_mass)
    return pressure * mass / (R * temperature)


@quiet
def gas_viscosity(fractions: Any, viscosities: Any, molar_masses: Any) -> Any:
    """Give the viscosity of a gas mixture at low pressure by Wilke's rule.

    C. R. Wilke, J. Chem. Phys. 18 (1950) 517, from memory: sum_i y_i mu_i / sum_j y_j phi_ij,
    phi_ij = (1 + (mu_i/mu_j)^0.5 (M_j/M_i)^0.25)^2 / (8 (1 + M_i/M_j))^0.5.

    Parameters
    ----------
    fractions : (..., n) mol/mol
    viscosities : (..., n) Pa s
    molar_masses : (..., n) kg/mol

    Returns
    -------
    (...,) Pa s
    """
    share, (viscosity, mass) = not_negative(fractions), positive(viscosities, molar_masses)
    ratio = viscosity[..., :, None] / viscosity[..., None, :]
    masses = mass[..., :, None] / mass[..., None, :]
    phi = (1 + np.sqrt(ratio) * masses**-0.25) ** 2 / np.sqrt(8 * (1 + masses))
    return np.sum(share * viscosity / np.sum(share[..., None, :] * phi, axis=-1), axis=-1)


@quiet
def liquid_density(fractions: Any, molar_masses: Any, densities: Any) -> Any:
    """Give the density of a liquid whose volumes add, sum x M / sum (x M / rho).

    Parameters
    ----------
    fractions : (..., n) mol/mol
    molar_masses : (..., n) kg/mol
    densities : (..., n) kg/m3

    Returns
    -------
    (...,) kg/m3
    """
    mass = not_negative(fractions) * positive(molar_masses)
    return np.sum(mass, axis=-1) / np.sum(mass / positive(densities), axis=-1)


@quiet
def liquid_viscosity(fractions: Any, viscosities: Any) -> Any:
    """Give the viscosity of a liquid mixture by the logarithmic rule, ln mu = sum x ln mu.

    After S. Arrhenius, 1887; poor for mixtures with water.

    Parameters
    ----------
    fractions : (..., n) mol/mol
    viscosities : (..., n) Pa s

    Returns
    -------
    (...,) Pa s
    """
    return np.exp(np.sum(not_negative(fractions) * np.log(positive(viscosities)), axis=-1))


@quiet
def surface_tension(fractions: Any, tensions: Any) -> Any:
    """Give the surface tension of a liquid mixture as the mean by mole fractions (common practice, no source).

    Too high for organics dissolved in water, which gather at the surface.

    Parameters
    ----------
    fractions : (..., n) mol/mol
    tensions : (..., n) N/m

    Returns
    -------
    (...,) N/m
    """
    return np.sum(not_negative(fractions) * positive(tensions), axis=-1)


@quiet
def gas_diffusivity(
    temperature: Any, pressure: Any, first_mass: Any, second_mass: Any, first_volume: Any, second_volume: Any
) -> Any:
    """Give the diffusivity of two gases at low pressure by Fuller's equation.

    0.00100 T^1.75 (1/M1 + 1/M2)^0.5 / (P (v1^(1/3) + v2^(1/3))^2) in cm2/s, g/mol, atm and cm3/mol. E. N. Fuller, P. D.
    Schettler, J. C. Giddings, Ind. Eng. Chem. 58(5) 18 (1966); from memory.

    Parameters
    ----------
    temperature : (...,) K
    pressure : (...,) Pa
    first_mass, second_mass : (...,) kg/mol
    first_volume, second_volume : (...,) m3/mol
        Diffusion volumes; some in `DIFFUSION_VOLUMES`.

    Returns
    -------
    (...,) m2/s
    """
    temperature, pressure = positive(temperature, pressure)
    one, two, v, w = positive(first_mass, second_mass, first_volume, second_volume)
    masses = np.sqrt(1e-3 / one + 1e-3 / two)
    volumes = np.cbrt(1e6 * v) + np.cbrt(1e6 * w)
    return 1e-4 * 1.00e-3 * temperature**1.75 * masses / (pressure / 101325.0 * volumes**2)


@quiet
def liquid_diffusivity(
    temperature: Any, solvent_mass: Any, solvent_viscosity: Any, solute_volume: Any, association: Any = 1.0
) -> Any:
    """Give the diffusivity of a dilute solute in a liquid by the equation of Wilke and Chang.

    C. R. Wilke, P. Chang, AIChE J. 1 (1955) 264: 7.4e-8 (phi M)^0.5 T / (mu V^0.6) in cm2/s, g/mol,
    mPa s and cm3/mol; scatter 10 to 15 percent; from memory.

    Parameters
    ----------
    temperature : (...,) K
    solvent_mass : (...,) kg/mol
    solvent_viscosity : (...,) Pa s
    solute_volume : (...,) m3/mol
        Molar, at the normal boiling point.
    association : (...,)
        phi of the solvent; some in `ASSOCIATION`.

    Returns
    -------
    (...,) m2/s
    """
    temperature, mass, viscosity = positive(temperature, solvent_mass, solvent_viscosity)
    volume, phi = positive(solute_volume, association)
    return 1e-4 * 7.4e-8 * np.sqrt(phi * 1e3 * mass) * temperature / (viscosity / CENTIPOISE * (1e6 * volume) ** 0.6)
