"""What a column of stages without limit makes of what enters it, on mole ratios.

In an absorber with s = L/G the operating line through (X_lean, Y_out) lies on or above the equilibrium line up to the
rich end, so Y_out >= Y*(X) - s (X - X_lean) for every X that liquid and gas can reach, X_lean to X*(Y_in); with
stages without limit they touch somewhere, and Y_out is the greatest of these. In a stripper with r = V/L likewise
X_lean is the greatest X - r (Y*(X) - Y_in) for X from X*(Y_in) to X_rich.
"""

from __future__ import annotations

import numpy as np

from leanloop.pinch.curve import Curve
from leanloop.pinch.largest import largest


def absorber_outlet(curve: Curve, s: float, x_lean: float, y_in: float, x_end: float | None = None) -> float:
    """Give Y_out.

    Parameters
    ----------
    curve : Curve
    s : float
        L/G, solute-free.
    x_lean, y_in : float
        Ratios that enter.
    x_end : float, optional
        X*(y_in), where it is already known.

    Returns
    -------
    float
        Not below zero; `y_in` where the lean solvent could take up nothing.
    """
    high = curve.inverse(y_in) if x_end is None else x_end
    high = min(high, x_lean + y_in / s) if s > 0 else high  # beyond, the term is below zero
    if not x_lean < high:
        return y_in

    def needed(x: np.ndarray) -> np.ndarray:
        return curve(x) - s * (x - x_lean)

    return max(0.0, min(y_in, largest(needed, x_lean, high, curve.places(x_lean, high))[1]))


def stripper_outlet(curve: Curve, r: float, x_rich: float, y_in: float, x_floor: float | None = None) -> float:
    """Give X_lean.

    Parameters
    ----------
    curve : Curve
    r : float
        V/L, solute-free.
    x_rich, y_in : float
        Ratios that enter.
    x_floor : float, optional
        X*(y_in), where it is already known.

    Returns
    -------
    float
        `x_rich` where the gas could take up nothing.
    """
    low = (curve.inverse(y_in) if y_in > 0 else 0.0) if x_floor is None else x_floor
    if not low < x_rich:
        return x_rich

    def left(x: np.ndarray) -> np.ndarray:
        return x - r * (curve(x) - y_in)

    return max(0.0, min(x_rich, largest(left, low, x_rich, curve.places(low, x_rich))[1]))
