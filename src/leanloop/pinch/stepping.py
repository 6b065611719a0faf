"""Equilibrium stages between given ends, stepped off on mole ratios."""

from __future__ import annotations

from dataclasses import dataclass

from leanloop.pinch.curve import Curve

MOST = 5000
STUCK = 1e-14  # relative: a step that moves less moves nothing


@dataclass(frozen=True)
class Steps:
    """Stages stepped off.

    Attributes
    ----------
    stages : float or None
        With a fraction; None where the lines meet before the other end.
    x, y : list of float
        What leaves the stages, from the end that is begun at: points on the equilibrium line.
    """

    stages: float | None
    x: list[float]
    y: list[float]


def from_lean(curve: Curve, slope: float, x_lean: float, y_lean: float, x_rich: float) -> Steps:
    """Step from the lean-solvent end, the last step counted as a linear part in X.

    Parameters
    ----------
    curve : Curve
    slope : float
        Of the operating line, L/G.
    x_lean, y_lean : float
        Liquid and gas ratio at the lean end: of an absorber its top, of a stripper its bottom.
    x_rich : float
        Liquid ratio at the rich end.

    Notes
    -----
    In an absorber the gas that leaves at the lean end is in equilibrium with the liquid of the stage there; in a
    stripper that liquid itself leaves, and the gas that rises from it is the first step.
    """
    x, y = [], []
    if y_lean <= float(curve(x_lean)):  # below the equilibrium line: a stripper
        below, up = x_lean, y_lean
        while len(x) < MOST:
            up = float(curve(below))
            x.append(below)
            y.append(up)
            nearer = x_lean + (up - y_lean) / slope
            if nearer >= x_rich:
                return Steps(len(x) - 1 + (x_rich - below) / (nearer - below), x, y)
            if nearer - below <= STUCK * x_rich:
                break
            below = nearer
        return Steps(None, x, y)
    before, up = x_lean, y_lean
    while len(x) < MOST:
        leaving = curve.inverse(up)
        if leaving >= x_rich:
            x.append(leaving)
            y.append(up)
            return Steps(len(x) - 1 + (x_rich - before) / (leaving - before), x, y)
        x.append(leaving)
        y.append(up)
        if leaving - before <= STUCK * x_rich:
            break
        before = leaving
        up = y_lean + slope * (leaving - x_lean)
    return Steps(None, x, y)


def from_rich(curve: Curve, slope: float, x_lean: float, y_lean: float, x_rich: float) -> Steps:
    """Step from the rich-solvent end, the last step counted as a linear part, in Y of an absorber, in X of a stripper.

    Parameters
    ----------
    As for `from_lean`.
    """
    x, y = [], []
    if y_lean <= float(curve(x_lean)):
        above = x_rich
        while len(x) < MOST:
            up = y_lean + slope * (above - x_lean)
            leaving = curve.inverse(up)
            x.append(leaving)
            y.append(up)
            if leaving <= x_lean:
                return Steps(len(x) - 1 + (above - x_lean) / (above - leaving), x, y)
            if above - leaving <= STUCK * x_rich:
                break
            above = leaving
        return Steps(None, x, y)
    x_out, y_in = x_rich, y_lean + slope * (x_rich - x_lean)
    while len(x) < MOST:
        up = float(curve(x_out))
        x.append(x_out)
        y.append(up)
        if up <= y_lean:
            return Steps(len(x) - 1 + (y_in - y_lean) / (y_in - up), x, y)
        if y_in - up <= STUCK * y_in:
            break
        x_out, y_in = x_lean + (up - y_lean) / slope, up
    return Steps(None, x, y)
