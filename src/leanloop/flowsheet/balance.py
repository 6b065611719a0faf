"""The combined balance over the whole flowsheet, from its streams and not from any residual."""

from __future__ import annotations

from typing import Any

import numpy as np

from leanloop.flowsheet.run import Run
from leanloop.flowsheet.view import View
from leanloop.stream import divide


def crossing(run: Run) -> tuple[np.ndarray, np.ndarray]:
    """Give what crosses the boundary: feeds and additions, and products.

    Parameters
    ----------
    run : Run

    Returns
    -------
    entering, leaving : (M, C) mol/s
    """
    plan = run.plan
    view = View(run)
    shape = (run.inputs.cases, len(plan.components))
    entering, leaving = np.zeros(shape), np.zeros(shape)
    for name in plan.feeds:
        entering = entering + view.stream(name).flows
    for name in plan.structure.products:
        leaving = leaving + view.stream(name).flows
    for name, unit in plan.units.items():
        if type(unit).added is not plan.adds_nothing:
            added = unit.added(*view.sides(name), view.numbers(name))
            entering = entering + (0.0 if added is None else added)
    return entering, leaving


def balance(run: Run) -> dict[str, Any]:
    """Give what enters and leaves, by component.

    Parameters
    ----------
    run : Run

    Returns
    -------
    dict
        ``components.COMP`` with ``in_mol_s``, ``out_mol_s``, ``made_mol_s`` and ``closure``, each
        (M,); ``energy`` is None as no heat is balanced yet.
    """
    plan = run.plan
    entering, leaving = crossing(run)
    shape = entering.shape
    made = np.zeros(shape)
    larger = np.maximum(entering, leaving)
    closure = np.where(larger == 0, 0.0, divide(entering + made - leaving, larger))
    return {
        "components": {
            name: {
                "in_mol_s": entering[:, place],
                "out_mol_s": leaving[:, place],
                "made_mol_s": made[:, place],
                "closure": closure[:, place],
            }
            for place, name in enumerate(plan.components.names)
        },
        "energy": None,
    }
