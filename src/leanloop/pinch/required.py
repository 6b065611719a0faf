"""What is asked of the cleaned gas of a closed pair: a quantity, its limit, and the mole ratio this stands for."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.optimize import brentq

from leanloop.flowsheet.quantity import Formula, formula
from leanloop.flowsheet.view import value
from leanloop.pinch.case import Case
from leanloop.pinch.circuit import Circuit
from leanloop.pinch.trials import Trials


@dataclass(frozen=True)
class Asked:
    """An outlet that is held.

    Attributes
    ----------
    address : str
        Of the quantity.
    quantity : Formula
    target : float
        Its value.
    sign : float
        1 where a cleaner gas has less of the quantity, -1 where it has more.
    key : str or None
        The component, where it is one.
    ratio : float or None
        Mole ratio of `key` in the cleaned gas at the target.
    """

    address: str
    quantity: Formula
    target: float
    sign: float
    key: str | None
    ratio: float | None


def asked_of(case: Case, circuit: Circuit, trials: Trials, key: str | None) -> Asked | str:
    """Give what is asked, or a sentence that says why it gives no window.

    Parameters
    ----------
    case : Case
    circuit : Circuit
    trials : Trials
    key : str or None
        Key component of the absorber.
    """
    item, plan = circuit.requirement, case.plan
    clean = plan.units[circuit.absorber].outlets["gas_out"]
    if item is None:
        if key is None:
            return "nothing is absorbed"
        address = f"streams.{clean}.ratio.{key}"
        quantity = formula(address, plan.phases, plan.units, case.sheet.bases)[0]
        target = float(value(case.run, quantity)[case.row])
        if not np.isfinite(target):
            return f"the ratio of {key} in the cleaned gas is not defined"
    else:
        address, quantity = item.address, item.quantity
        target = float(case.run.inputs.value(item.target)[case.row])
        last = address.rpartition(".")[2]
        key = last if last in case.sheet.components.index else None
    sign = _sense(quantity, trials)
    if sign == 0:
        return f"more stages do not change {address}, so that no circulation is asked for"
    if item is not None and item.kind == ("at_least" if sign > 0 else "at_most"):
        return f"requirement {item.name} asks for a gas that is less clean, not cleaner"
    ratio = None if key is None else _ratio(case, circuit, quantity, target, key)
    return Asked(address, quantity, target, sign, key, ratio)


def _sense(quantity: Formula, trials: Trials) -> float:
    """Tell whether more stages lower a quantity (1) or raise it (-1)."""
    now = trials.values(quantity, np.ones(1))
    more = trials.values(quantity, np.ones(1), times=2)
    change = float((now - more)[0])
    return 0.0 if np.isnan(change) else float(np.sign(change))


def _ratio(case: Case, circuit: Circuit, quantity: Formula, target: float, key: str) -> float | None:
    """Give the mole ratio of a component in the cleaned gas at which a quantity has its target value.

    The gas that leaves is changed, and all streams with the same flows; nothing else is calculated anew.
    """
    plan = case.plan
    unit = plan.units[circuit.absorber]
    place = case.sheet.components.index[key]
    clean = case.state(unit.outlets["gas_out"]).flows
    basis = float(clean[unit.gas_basis].sum())
    alike = [
        stream
        for stream, phase in plan.phases.items()
        if phase == "gas" and np.allclose(case.state(stream).flows, clean, rtol=1e-12, atol=0.0)
    ]
    if not basis > 0 or unit.gas_basis[place]:
        return None
    few = case.sheet.taken(case.run, np.array([case.row]))

    def miss(ratio: float) -> float:
        for stream in alike:
            few.states[stream][:, place] = ratio * basis
        return float(value(few, quantity)[0]) - target

    feed = case.state(unit.inlets["gas_in"]).flows
    high = float(feed[place] / basis)
    low_miss, high_miss = miss(0.0), miss(high)
    if not np.isfinite(low_miss + high_miss) or low_miss * high_miss > 0:
        return None
    return float(brentq(miss, 0.0, high, xtol=1e-300, rtol=1e-14))
