"""Least rates of one column: stages without limit between given ends, on mole ratios.

An absorber's operating line Y = Y_out + s (X - X_lean), s = L/G, must stay on or above the equilibrium line between
its ends, and reaches Y_in at the rich end. Every point X of the equilibrium line up to X*(Y_in) asks for
s >= (Y*(X) - Y_out) / (X - X_lean), so the least slope is the greatest of these. A stripper's line
Y = Y_in + (X - X_lean) L/V must stay on or below: V/L is the greatest (X - X_lean) / (Y*(X) - Y_in) up to X_rich. The
greatest may lie inside, where the line touches the curve.

Source: R. E. Treybal, Mass-Transfer Operations, 3rd ed., McGraw-Hill 1980, chapter 8 (the construction, from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from leanloop.pinch.curve import Curve
from leanloop.pinch.largest import largest
from leanloop.pinch.shapes import Pinch

AT_END = 1e-6  # of the span of X: nearer to an end, the pinch is at that end
EQUAL = 1e-12  # relative: an end in equilibrium within rounding
ROUNDED = 1e-7  # of the lean ratio: nearer to it, differences are lost in rounding


@dataclass(frozen=True)
class Least:
    """A least rate, or why there is none.

    Attributes
    ----------
    ratio : float or None
        Solvent over gas (absorber), gas over solvent (stripper), both solute-free; None where no rate suffices.
    pinch : Pinch or None
    why : str or None
        With the figures, where no rate suffices.
    """

    ratio: float | None
    pinch: Pinch | None = None
    why: str | None = None


def least_solvent(curve: Curve, x_lean: float, y_in: float, y_out: float) -> Least:
    """Give the least L/G of an absorber.

    Parameters
    ----------
    curve : Curve
    x_lean : float
        Liquid ratio that enters.
    y_in, y_out : float
        Gas ratios that enter and leave.
    """
    if not y_out < y_in:
        return Least(None, why=f"nothing is absorbed: the gas enters at Y = {y_in:.5g} and leaves at Y = {y_out:.5g}")
    bound = float(curve(x_lean))
    if bound > y_out * (1 + EQUAL) + 1e-300:
        return Least(
            None,
            why=f"no solvent rate suffices: the lean solvent, X = {x_lean:.5g}, is in equilibrium with gas of "
            f"Y = {bound:.5g}, above the outlet's Y = {y_out:.5g}",
        )
    x_end = curve.inverse(y_in)
    high = x_end if np.isfinite(x_end) else max(1e3 * (x_lean + 1.0), 1e6 * x_lean)

    def slope(x: np.ndarray) -> np.ndarray:
        return (curve(x) - y_out) / (x - x_lean)

    x, steepest = largest(
        slope, x_lean, high, curve.places(x_lean, high), max(1e-9, ROUNDED * x_lean / (high - x_lean)), keep_low=False
    )
    if steepest <= 0:
        return Least(
            None, why=f"there is no least rate: the equilibrium line stays below the outlet's Y = {y_out:.5g} at any loading"
        )
    return Least(steepest, _pinch(x, float(curve(x)), x_lean, high if np.isfinite(x_end) else np.inf))


def least_gas(curve: Curve, x_lean: float, x_rich: float, y_in: float) -> Least:
    """Give the least V/L of a stripper.

    Parameters
    ----------
    curve : Curve
    x_lean, x_rich : float
        Liquid ratios that leave and enter.
    y_in : float
        Gas ratio that enters.
    """
    if not x_lean < x_rich:
        return Least(None, why=f"nothing is stripped: the liquid enters at X = {x_rich:.5g} and leaves at X = {x_lean:.5g}")
    bound = float(curve(x_lean))
    if bound < y_in * (1 - EQUAL):
        return Least(
            None,
            why=f"no gas rate suffices: gas that enters at Y = {y_in:.5g} lets the liquid come down to "
            f"X = {curve.inverse(y_in):.5g}, above the outlet's X = {x_lean:.5g}",
        )

    def steepness(x: np.ndarray) -> np.ndarray:
        return (x - x_lean) / (curve(x) - y_in)

    near = max(1e-9, ROUNDED * x_lean / (x_rich - x_lean))
    try:
        x, most = largest(steepness, x_lean, x_rich, curve.places(x_lean, x_rich), near, keep_low=False)
    except ValueError:
        most = np.inf
    if not np.isfinite(most) or most < 0:
        return Least(None, why=f"no gas rate suffices: the equilibrium line does not rise above the gas's Y = {y_in:.5g}")
    if most == 0:
        return Least(None, why="there is no least rate: the solute leaves the liquid as a pure gas at any rate")
    return Least(most, _pinch(x, float(curve(x)), x_lean, x_rich))


def _pinch(x: float, y: float, x_lean: float, x_rich: float) -> Pinch:
    if x >= x_rich - AT_END * (x_rich - x_lean):
        return Pinch("rich end", x, y)
    span = (x_rich if np.isfinite(x_rich) else 1e300) - x_lean
    return Pinch("lean end" if x - x_lean <= AT_END * span and np.isfinite(x_rich) else "tangent", x, y)
