"""The combined balance over the whole flowsheet, from its streams and not from any residual."""

from __future__ import annotations

from typing import Any

import numpy as np

from leanloop.flowsheet.run import Run
from leanloop.flowsheet.view import View
from leanloop.stream import TWO_PHASE, divide

DATUM = 298.15  # K


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


def made(run: Run) -> tuple[np.ndarray, np.ndarray]:
    """Give what units make of other components, less what vanishes in them, and what flows through those units.

    Parameters
    ----------
    run : Run

    Returns
    -------
    net, through : (M, C) mol/s
    """
    plan, view = run.plan, View(run)
    net = np.zeros((run.inputs.cases, len(plan.components)))
    through = np.zeros(net.shape)
    for name, unit in plan.units.items():
        if type(unit).made is not plan.makes_nothing:
            sides = view.sides(name)
            own = unit.made(*sides, view.numbers(name))
            net = net + (0.0 if own is None else own)
            through = through + sum(stream.flows for side in sides for stream in side.values())
    return net, through


def balance(run: Run) -> dict[str, Any]:
    """Give what enters and leaves, by component, and the energy.

    Parameters
    ----------
    run : Run

    Returns
    -------
    dict
        ``components.COMP`` with ``in_mol_s``, ``out_mol_s``, ``made_mol_s`` and ``closure``, each (M,); ``energy`` with
        ``in_W``, ``out_W``, ``duties_W`` and ``closure``, or None where heat is not balanced; `energy_why` says why.
    """
    plan = run.plan
    entering, leaving = crossing(run)
    gained, through = made(run)
    larger = np.maximum(entering, leaving)
    larger = np.where(larger == 0, through, larger)  # of what is made inside and vanishes there
    closure = np.where(larger == 0, 0.0, divide(entering + gained - leaving, larger))
    return {
        "components": {
            name: {
                "in_mol_s": entering[:, place],
                "out_mol_s": leaving[:, place],
                "made_mol_s": gained[:, place],
                "closure": closure[:, place],
            }
            for place, name in enumerate(plan.components.names)
        },
        "energy": None if energy_why(plan) else _energy(run),
    }


def energy_why(plan: Any) -> str | None:
    """Say why energy is not balanced; None where it is.

    Parameters
    ----------
    plan : Plan
    """
    heat = plan.heat
    if heat is None:
        return "no unit balances heat and no heat data are given"
    lost: dict[str, None] = {}
    for stream, present in plan.present.items():
        phase = plan.phases[stream]
        for own in ("gas", "liquid") if phase == TWO_PHASE else (phase,):
            inside = present
            if phase == TWO_PHASE and stream in plan.mixtures:
                mixture = plan.mixtures[stream]
                inside = present & ~(mixture.stays_liquid if own == "gas" else mixture.stays_gas)
            lost.update(dict.fromkeys(heat.lacking(own, inside)))
    return f"there are no heat data of {', '.join(lost)}" if lost else None


def _energy(run: Run) -> dict[str, np.ndarray] | None:
    """Balance the energy from the streams and from what the units report of their duties."""
    plan, view = run.plan, View(run)
    numbers = run.inputs.of(plan.heat.addresses())
    shape = (run.inputs.cases,)
    entering, leaving, duties, scale = (np.zeros(shape) for _ in range(4))
    with np.errstate(all="ignore"):
        for names, sign in ((plan.feeds, 1), (plan.structure.products, -1)):
            for name in names:
                flow, sensible = _heat_of(view, name, numbers)
                scale = scale + np.abs(sensible)
                if sign > 0:
                    entering = entering + flow
                else:
                    leaving = leaving + flow
        for name, unit in plan.units.items():
            sides, own = view.sides(name), view.numbers(name)
            added = unit.added_heat(*sides, own)
            if added is not None:
                entering = entering + added
                scale = scale + np.abs(added)
            results = view.unit(name)["results"]
            for key in unit.draws_heat:
                if key in results:
                    if results[key] is None:
                        return None
                    duties = duties + results[key]
                    scale = scale + np.abs(results[key])
        gap = entering + duties - leaving
        return {
            "in_W": entering,
            "out_W": leaving,
            "duties_W": duties,
            "closure": np.where(scale == 0, 0.0, divide(gap, scale)),
        }


def _heat_of(view: View, name: str, numbers: dict[str, Any]) -> tuple[np.ndarray, np.ndarray]:
    """Give the enthalpy flow of a stream, and how much of it is above 298.15 K in the same phase, (M,) W."""
    heat, stream = view.run.plan.heat, view.stream(name)
    datum = np.full(stream.state.shape[:-1], DATUM)
    if stream.phase == TWO_PHASE:
        flow = stream.total * stream.state[..., -2]
        gas, liquid = view.parts(name)
        cold = (gas * heat.gas(datum, numbers) + liquid * heat.liquid(datum, numbers)).sum(axis=-1)
        return flow, flow - cold
    function = heat.gas if stream.phase == "gas" else heat.liquid
    flow = (stream.flows * function(stream.temperature, numbers)).sum(axis=-1)
    return flow, flow - (stream.flows * function(datum, numbers)).sum(axis=-1)
