"""Pressure drop of sieve trays and back-up in downcomers, in metres of clear liquid.

Dry drop by the orifice equation, clear liquid by D. L. Bennett, R. Agrawal, P. J. Cook, AIChE J. 29 (1983) 434, and the
pressure to form bubbles; constants from memory, the same in both systems of units in which they are remembered. No
published example checks the sum.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from scipy.constants import g

from leanloop.hydraulics.arrays import not_negative, positive, quiet
from leanloop.hydraulics.ranges import Range

BENNETT = (
    Range("hole_diameter", 2e-3, 25e-3, "m"), Range("hole_area_ratio", 0.04, 0.20), Range("weir_height", 0.0, 0.1, "m"),
)  # fmt: skip
ORIFICE = 0.73  # J. D. Seader, E. J. Henley, Separation Process Principles, section 6.6; from memory


@quiet
def dry_head(hole_velocity: Any, gas_density: Any, liquid_density: Any, hole_area_ratio: Any, orifice: Any = ORIFICE) -> Any:
    """Give the dry pressure drop of a sieve tray by the orifice equation.

    Parameters
    ----------
    hole_velocity : (...,) m/s
    gas_density, liquid_density : (...,) kg/m3
    hole_area_ratio : (...,)
        Area of the holes over the active area, below 1.
    orifice : (...,)
        Coefficient of discharge.

    Returns
    -------
    (...,) m of clear liquid
    """
    velocity, light, heavy, ratio, orifice = positive(hole_velocity, gas_density, liquid_density, hole_area_ratio, orifice)
    return (velocity / orifice) ** 2 / (2 * g) * light / heavy * positive(1 - ratio**2)


@quiet
def weir_crest(liquid_flow: Any, weir_length: Any) -> Any:
    """Give the height of liquid over a straight weir by the formula of Francis, 0.664 (q / l)^(2/3).

    Parameters
    ----------
    liquid_flow : (...,) m3/s
    weir_length : (...,) m

    Returns
    -------
    (...,) m
    """
    flow, length = positive(liquid_flow, weir_length)
    return 0.664 * (flow / length) ** (2 / 3)


@quiet
def froth_density(active_velocity: Any, gas_density: Any, liquid_density: Any) -> Any:
    """Give the share of liquid in the froth, exp(-12.55 K^0.91) with K = u sqrt(rhoG / (rhoL - rhoG)).

    Parameters
    ----------
    active_velocity : (...,) m/s
        Gas velocity on the active area.
    gas_density, liquid_density : (...,) kg/m3

    Returns
    -------
    (...,)
    """
    velocity, light, heavy = positive(active_velocity, gas_density, liquid_density)
    return np.exp(-12.55 * (velocity * np.sqrt(light / positive(heavy - light))) ** 0.91)


@quiet
def clear_liquid(
    liquid_flow: Any, weir_length: Any, weir_height: Any, active_velocity: Any, gas_density: Any, liquid_density: Any
) -> Any:
    """Give the clear liquid on a sieve tray.

    Ranges in `BENNETT`. With phi the `froth_density`, phi (h_w + C (q / (l phi))^(2/3)), C = 0.501 + 0.439 exp(-137.8 h_w).

    Parameters
    ----------
    liquid_flow : (...,) m3/s
    weir_length, weir_height : (...,) m
    active_velocity : (...,) m/s
    gas_density, liquid_density : (...,) kg/m3

    Returns
    -------
    (...,) m
    """
    flow, length, height = positive(liquid_flow, weir_length, weir_height)
    share = froth_density(active_velocity, gas_density, liquid_density)
    factor = 0.501 + 0.439 * np.exp(-137.8 * height)
    return share * (height + factor * (flow / (length * share)) ** (2 / 3))


@quiet
def bubble_head(surface_tension: Any, liquid_density: Any, hole_diameter: Any) -> Any:
    """Give the head to form bubbles of the size of the holes, 6 sigma / (g rhoL d).

    Parameters
    ----------
    surface_tension : (...,) N/m
    liquid_density : (...,) kg/m3
    hole_diameter : (...,) m

    Returns
    -------
    (...,) m of clear liquid
    """
    tension, heavy, hole = positive(surface_tension, liquid_density, hole_diameter)
    return 6 * tension / (g * heavy * hole)


@quiet
def apron_head(liquid_flow: Any, clearance_area: Any) -> Any:
    """Give the head lost under a downcomer's apron, 0.166 (q / A)^2.

    R. K. Sinnott, Chemical Engineering Design, section 11.13; constant from memory.

    Parameters
    ----------
    liquid_flow : (...,) m3/s
    clearance_area : (...,) m2

    Returns
    -------
    (...,) m of clear liquid
    """
    flow, area = positive(liquid_flow, clearance_area)
    return 0.166 * (flow / area) ** 2


@quiet
def pressure_drop(dry: Any, clear: Any, bubble: Any, liquid_density: Any) -> Any:
    """Give the pressure drop of a tray from its parts.

    Parameters
    ----------
    dry, clear, bubble : (...,) m of clear liquid
    liquid_density : (...,) kg/m3

    Returns
    -------
    (...,) Pa
    """
    return (not_negative(dry) + not_negative(clear) + not_negative(bubble)) * g * positive(liquid_density)


@quiet
def downcomer_backup(tray_drop: Any, liquid_density: Any, clear: Any, apron: Any) -> Any:
    """Give the clear liquid that stands in a downcomer: what holds the tray's drop, the tray's liquid and the apron's loss.

    Parameters
    ----------
    tray_drop : (...,) Pa
    liquid_density : (...,) kg/m3
    clear, apron : (...,) m of clear liquid

    Returns
    -------
    (...,) m
    """
    return not_negative(tray_drop) / (g * positive(liquid_density)) + not_negative(clear) + not_negative(apron)
