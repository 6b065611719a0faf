"""What the pictures of limits show, as plain numbers."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class Pinch:
    """Where operating line and equilibrium meet at the least rate.

    Attributes
    ----------
    kind : str
        ``"rich end"``, ``"lean end"`` or ``"tangent"``.
    x, y : float
        Mole ratios to the solute-free liquid and gas.
    """

    kind: str
    x: float
    y: float


@dataclass(frozen=True)
class StageDiagram:
    """One column on mole ratios of one component.

    Attributes
    ----------
    unit, kind, component : str
        Name of the column, its kind, the component drawn.
    liquid, gas : str
        Names of what the ratios refer to, such as ``"oil"`` and ``"air"``; several joined with `` + ``.
    curve : bool
        Whether equilibrium is a curve of X alone; if not, the equilibrium points are those of the stages.
    equilibrium_x, equilibrium_y : (P,)
        The equilibrium line, X rising.
    operating_x, operating_y : (Q,)
        The operating line, from the lean to the rich end.
    steps_x, steps_y : (S,)
        The stair between both, from the lean end.
    stages_x, stages_y : (N,)
        What leaves each equilibrium stage, top to bottom: points on the equilibrium line.
    least_x, least_y : (R,) or None
        The operating line at the least rate, from the lean to the rich end; None where there is none.
    pinch : Pinch or None
    least_mol_s, ratio_to_least, stages_needed : float or None
        Least solute-free rate (solvent of an absorber, gas of a stripper), operating rate over it, and stages between
        the ends with a fraction.
    """

    unit: str
    kind: str
    component: str
    liquid: str
    gas: str
    curve: bool
    equilibrium_x: np.ndarray
    equilibrium_y: np.ndarray
    operating_x: np.ndarray
    operating_y: np.ndarray
    steps_x: np.ndarray
    steps_y: np.ndarray
    stages_x: np.ndarray
    stages_y: np.ndarray
    least_x: np.ndarray | None = None
    least_y: np.ndarray | None = None
    pinch: Pinch | None = None
    least_mol_s: float | None = None
    ratio_to_least: float | None = None
    stages_needed: float | None = None


@dataclass(frozen=True)
class Window:
    """Outlet of a closed pair against its circulation, all else as it is.

    Attributes
    ----------
    absorber, stripper, component : str
        Names of the columns and of the component in the cleaned gas.
    solvent, gas : str
        What circulates; what the outlet ratio refers to.
    circulation : (P,) mol/s
        Rising.
    outlet : (P,)
        Mole ratio in the cleaned gas with the stages as they are; NaN where not solved.
    outlet_unlimited : (P,)
        The same with stages without limit, or with very many where there are no curves; NaN where not known.
    required : float or None
        Mole ratio that the requirement allows.
    least, most : float or None
        mol/s, the window with stages without limit.
    turning, turning_unlimited : (float, float) or None
        Circulation and outlet ratio at the lowest point of each curve, where it lies inside.
    operating : (float, float)
        Circulation and outlet ratio as solved.
    """

    absorber: str
    stripper: str
    component: str
    solvent: str
    gas: str
    circulation: np.ndarray
    outlet: np.ndarray
    outlet_unlimited: np.ndarray
    required: float | None
    least: float | None
    most: float | None
    turning: tuple[float, float] | None
    turning_unlimited: tuple[float, float] | None
    operating: tuple[float, float]
