"""Heights and numbers of transfer units, and the height of packing that does for a stage.

Straight equilibrium and operating lines; lam = m G / L is their ratio of slopes. All are regular at lam = 1.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from leanloop.hydraulics.arrays import not_negative, positive, quiet


@quiet
def gas_height(gas_flux: Any, coefficient: Any, area: Any, pressure: Any) -> Any:
    """Give the height of a gas-film transfer unit, H_G = G / (kG a P).

    Parameters
    ----------
    gas_flux : (...,) mol/(m2 s)
    coefficient : (...,) mol/(m2 s Pa)
    area : (...,) m2/m3
        Of the interface.
    pressure : (...,) Pa

    Returns
    -------
    (...,) m
    """
    flux, coefficient, area, pressure = positive(gas_flux, coefficient, area, pressure)
    return flux / (coefficient * area * pressure)


@quiet
def liquid_height(liquid_flux: Any, coefficient: Any, area: Any, concentration: Any) -> Any:
    """Give the height of a liquid-film transfer unit, H_L = L / (kL a c).

    Parameters
    ----------
    liquid_flux : (...,) mol/(m2 s)
    coefficient : (...,) m/s
    area : (...,) m2/m3
        Of the interface.
    concentration : (...,) mol/m3
        Of the whole liquid.

    Returns
    -------
    (...,) m
    """
    flux, coefficient, area, concentration = positive(liquid_flux, coefficient, area, concentration)
    return flux / (coefficient * area * concentration)


@quiet
def overall_height(gas: Any, liquid: Any, lam: Any) -> Any:
    """Give the height of an overall gas transfer unit, H_OG = H_G + lam H_L.

    Parameters
    ----------
    gas, liquid : (...,) m
        Heights of the film units; one may be 0 where the other film holds all resistance.
    lam : (...,)

    Returns
    -------
    (...,) m
    """
    return not_negative(gas) + positive(lam) * not_negative(liquid)


@quiet
def units_per_stage(lam: Any) -> Any:
    """Give the overall gas transfer units that do for a stage, ln lam / (lam - 1), which is HETP / H_OG; (...,) to (...,)."""
    excess = positive(lam) - 1
    return np.where(excess == 0, 1.0, np.log1p(excess) / excess)[()]


@quiet
def hetp(height: Any, lam: Any) -> Any:
    """Give the height that does for an equilibrium stage, H_OG ln lam / (lam - 1).

    Parameters
    ----------
    height : (...,) m
        Of an overall gas transfer unit.
    lam : (...,)

    Returns
    -------
    (...,) m
    """
    return positive(height) * units_per_stage(lam)


@quiet
def height_from_hetp(hetp: Any, lam: Any) -> Any:
    """Give the height of an overall gas transfer unit, (...,) m, from the HETP; the inverse of `hetp`."""
    return positive(hetp) / units_per_stage(lam)


@quiet
def transfer_units(gas_in: Any, gas_out: Any, gas_at_liquid_in: Any, lam: Any) -> Any:
    """Give the number of overall gas transfer units, ln((1 - lam) r + lam) / (1 - lam), r = (y1 - m x2) / (y2 - m x2).

    Dilute, straight lines; A. P. Colburn, Trans. AIChE 35 (1939) 211. Negative differences are those of a stripper.

    Parameters
    ----------
    gas_in, gas_out : (...,) mol/mol
    gas_at_liquid_in : (...,) mol/mol
        In equilibrium with the liquid fed.
    lam : (...,)
        m G / L, which is 1/A.

    Returns
    -------
    (...,)
        NaN where no height is enough.
    """
    lam = positive(lam)
    lack = 1 - lam
    enters, leaves, rest = (np.asarray(item, dtype=float) for item in (gas_in, gas_out, gas_at_liquid_in))
    excess = (enters - leaves) / (leaves - rest)
    excess = np.where((excess >= 0) & np.isfinite(excess) & np.isfinite(rest), excess, np.nan)
    return np.where(lack == 0, excess, np.log1p(lack * excess) / lack)[()]
