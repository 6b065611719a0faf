"""Areas, chords and diameters of trays with a downcomer on each side."""

from __future__ import annotations

from typing import Any

import numpy as np

from leanloop.hydraulics.arrays import not_negative, positive, quiet


@quiet
def downcomer_share(flow_parameter: Any) -> Any:
    """Give the share of the column's area for one downcomer: 0.1, rising to 0.2 at a flow parameter of 1.

    J. Benitez, Principles and Modern Applications of Mass Transfer Operations, equation (4.34); form from memory.

    Parameters
    ----------
    flow_parameter : (...,)

    Returns
    -------
    (...,)
    """
    flow = positive(flow_parameter)
    return np.clip(0.1 + (flow - 0.1) / 9, 0.1, 0.2)


@quiet
def chord_angle(share: Any) -> Any:
    """Give the angle at the centre of a segment with a share of the circle: share = (angle - sin angle) / (2 pi).

    Parameters
    ----------
    share : (...,)
        Above 0, at most 0.5; else NaN.

    Returns
    -------
    (...,) rad
    """
    share = positive(share)
    share = np.where(share <= 0.5, share, np.nan)
    angle = np.cbrt(12 * np.pi * share)  # below the root; convex, so one step overshoots and the rest fall onto it
    for _ in range(60):
        step = (angle - np.sin(angle) - 2 * np.pi * share) / (2 * np.sin(angle / 2) ** 2)
        angle = angle - step
        if not np.any(np.abs(step) > 1e-15 * angle):
            break
    return angle[()]


@quiet
def weir_length(diameter: Any, share: Any) -> Any:
    """Give the length of a straight weir that cuts off a share of the column's area.

    Parameters
    ----------
    diameter : (...,) m
    share : (...,)
        Of one downcomer, up to 0.5.

    Returns
    -------
    (...,) m
    """
    return positive(diameter) * np.sin(chord_angle(share) / 2)


@quiet
def weir_distance(diameter: Any, share: Any) -> Any:
    """Give the distance of a weir from the column's axis; arguments as in `weir_length`, result (...,) m."""
    return 0.5 * positive(diameter) * np.cos(chord_angle(share) / 2)


@quiet
def weir_share(diameter: Any, length: Any) -> Any:
    """Give the share of the column's area that a straight weir cuts off.

    Parameters
    ----------
    diameter, length : (...,) m

    Returns
    -------
    (...,)
        NaN where the weir is longer than the diameter.
    """
    diameter, length = positive(diameter, length)
    angle = 2 * np.arcsin(length / diameter)
    return (angle - np.sin(angle)) / (2 * np.pi)


@quiet
def column_area(diameter: Any) -> Any:
    """Give the area of a column, (...,) m2, of a diameter, (...,) m."""
    return 0.25 * np.pi * positive(diameter) ** 2


@quiet
def active_area(diameter: Any, share: Any, lost: Any = 0.0) -> Any:
    """Give the area between two downcomers of one share each.

    Parameters
    ----------
    diameter : (...,) m
    share : (...,)
        Of one downcomer.
    lost : (...,) m2
        Taken by supports and calming zones.

    Returns
    -------
    (...,) m2
    """
    return positive(column_area(diameter) * (1 - 2 * positive(share)) - not_negative(lost))


@quiet
def diameter(gas_flow: Any, flood_velocity: Any, fraction: Any, share: Any = 0.0) -> Any:
    """Give the diameter at which a gas flow is at a fraction of flood.

    Parameters
    ----------
    gas_flow : (...,) m3/s
    flood_velocity : (...,) m/s
        On the net area.
    fraction : (...,)
        Of flood.
    share : (...,)
        Share of the column's area that is not net: one downcomer, or 0 for a packed column.

    Returns
    -------
    (...,) m
    """
    gas, flood, fraction, net = positive(gas_flow, flood_velocity, fraction, 1 - not_negative(share))
    return np.sqrt(4 / np.pi * gas / (fraction * flood * net))


@quiet
def fraction_of_flood(gas_flow: Any, flood_velocity: Any, diameter: Any, share: Any = 0.0) -> Any:
    """Give the gas velocity on the net area over that at flood; arguments as in `diameter`, which it inverts."""
    gas, flood, net = positive(gas_flow, flood_velocity, 1 - not_negative(share))
    return gas / (flood * net * column_area(diameter))
