"""Efficiencies of trays: overall by O'Connell, and between Murphree's and the overall one by Lewis."""

from __future__ import annotations

from typing import Any

import numpy as np

from leanloop.hydraulics.arrays import CENTIPOISE, FOOT, PCF, POUND, positive, quiet
from leanloop.hydraulics.ranges import Range

PEAK = 0.078  # the parabola of O'Connell falls again below this
OCONNELL = (Range("oconnell_group", PEAK, 1000.0),)
KESSLER_WANKAT = (Range("kessler_wankat_group", 0.01, 10.0),)
HENRY = 101325.0 * FOOT**3 / (1e3 * POUND)  # Pa m3/mol in one atm ft3/lbmol


@quiet
def oconnell_group(k: Any, molar_mass: Any, viscosity: Any, density: Any) -> Any:
    """Give the abscissa of O'Connell's line for absorbers, K M mu / rho in g/mol, mPa s and lb/ft3.

    Parameters
    ----------
    k : (...,)
        y/x of the key component.
    molar_mass : (...,) kg/mol
        Of the liquid, as are the next two.
    viscosity : (...,) Pa s
    density : (...,) kg/m3

    Returns
    -------
    (...,)
    """
    k, mass, viscosity, density = positive(k, molar_mass, viscosity, density)
    return k * (1e3 * mass) * (viscosity / CENTIPOISE) / (density / PCF)


@quiet
def oconnell_absorber(group: Any) -> Any:
    """Give the overall efficiency of the trays of absorbers and strippers.

    Ranges in `OCONNELL`: below 0.078, where the fit has its peak, the group counts as 0.078. Data scatter by 12 percentage points.
    H. E. O'Connell, Trans. AIChE 42 (1946) 741; parabola from memory, no worked example checks it.

    Parameters
    ----------
    group : (...,)
        As `oconnell_group` gives it.

    Returns
    -------
    (...,)
        Stages over trays.
    """
    log = np.log10(np.maximum(positive(group), PEAK))
    return 0.01 * 10 ** (1.597 - 0.199 * log - 0.0896 * log**2)


@quiet
def kessler_wankat_absorber(henry: Any, pressure: Any, viscosity: Any) -> Any:
    """Give the overall efficiency of the trays of absorbers by another fit of O'Connell's data, for a cross-check.

    Ranges in `KESSLER_WANKAT`. D. P. Kessler, P. C. Wankat, Hydrocarbon Processing 67(6) 71 (1988); constants from memory.

    Parameters
    ----------
    henry : (...,) Pa m3/mol
        Partial pressure over concentration in the liquid.
    pressure : (...,) Pa
    viscosity : (...,) Pa s
        Of the liquid.

    Returns
    -------
    (...,)
    """
    henry, pressure, viscosity = positive(henry, pressure, viscosity)
    log = np.log10(kessler_wankat_group(henry, pressure, viscosity))
    return 0.37237 + 0.19339 * log + 0.024816 * log**2


@quiet
def kessler_wankat_group(henry: Any, pressure: Any, viscosity: Any) -> Any:
    """Give P / (H mu) in atm, atm ft3/lbmol and mPa s; arguments as in `kessler_wankat_absorber`, result (...,)."""
    henry, pressure, viscosity = positive(henry, pressure, viscosity)
    return pressure / 101325.0 / (henry / HENRY * (viscosity / CENTIPOISE))


@quiet
def overall(murphree: Any, lam: Any) -> Any:
    """Give the overall efficiency, ln(1 + E (lam - 1)) / ln lam, of trays with one Murphree vapour efficiency.

    Exact for straight equilibrium and operating lines; equals the Murphree efficiency at lam = 1. W. K. Lewis, Ind. Eng. Chem. 28
    (1936) 399.

    Parameters
    ----------
    murphree : (...,)
        Vapour efficiency; may be above 1.
    lam : (...,)
        Slope of equilibrium over slope of operation, m G / L.

    Returns
    -------
    (...,)
        NaN where no number of trays gives a stage.
    """
    murphree, lam = positive(murphree, lam)
    excess = lam - 1
    return np.where(excess == 0, murphree, np.log1p(murphree * excess) / np.log1p(excess))[()]


@quiet
def murphree(overall: Any, lam: Any) -> Any:
    """Give the Murphree vapour efficiency from the overall one; the inverse of `overall`, arguments and result as there."""
    whole, lam = positive(overall, lam)
    excess = lam - 1
    return np.where(excess == 0, whole, np.expm1(whole * np.log1p(excess)) / excess)[()]


@quiet
def vapour_from_liquid(liquid: Any, lam: Any) -> Any:
    """Give the Murphree vapour efficiency from that of the liquid, E / (E + lam (1 - E)).

    Straight lines; from memory.

    Parameters
    ----------
    liquid, lam : (...,)

    Returns
    -------
    (...,)
    """
    liquid, lam = positive(liquid, lam)
    return positive(liquid / (liquid + lam * (1 - liquid)))


@quiet
def liquid_from_vapour(vapour: Any, lam: Any) -> Any:
    """Give the Murphree liquid efficiency from that of the vapour; the inverse of `vapour_from_liquid`."""
    vapour, lam = positive(vapour, lam)
    return positive(lam * vapour / (1 + vapour * (lam - 1)))
