"""The ends of a column on mole ratios of one component: as solved, or as `[limits.NAME]` states them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from leanloop.pinch.case import Case
from leanloop.pinch.curve import Curve
from leanloop.stream import Stream

CONSTANT = 1e-4  # relative: what does not distribute may change so much between the ends of a column
TRACE = 1e-9  # of a stream: less of another solute does not bend the curve


@dataclass(frozen=True)
class Ends:
    """Flows and mole ratios at both ends.

    Attributes
    ----------
    liquid, gas : float
        Solute-free flows that enter, mol/s.
    x_lean, x_rich, y_lean, y_rich : float
        Ratios at the end of the lean and at that of the rich solvent.
    stated : bool
        Whether any was stated.
    """

    liquid: float
    gas: float
    x_lean: float
    x_rich: float
    y_lean: float
    y_rich: float
    stated: bool = False

    @property
    def slope(self) -> float:
        """L/G, the slope of the operating line."""
        return self.liquid / self.gas


def ends(case: Case, name: str, component: str) -> Ends:
    """Give the ends of a column as solved.

    Parameters
    ----------
    case : Case
    name : str
        Of the column.
    component : str
    """
    unit = case.plan.units[name]
    place = case.sheet.components.index[component]

    def ratio(stream: str, basis: np.ndarray) -> float:
        flows = case.state(stream).flows
        with np.errstate(all="ignore"):
            return float(flows[place] / flows[basis].sum())

    blown = unit.inlets.get("gas_in")  # a reboiled stripper may have none
    liquid = case.state(unit.inlets["liquid_in"]).flows
    gas = case.state(blown).flows if blown else np.zeros_like(liquid)
    liquid_in, liquid_out = (ratio(stream, unit.liquid_basis) for stream in (unit.inlets["liquid_in"], unit.outlets["liquid_out"]))
    gas_in, gas_out = ratio(blown, unit.gas_basis) if blown else 0.0, ratio(unit.outlets["gas_out"], unit.gas_basis)
    lean_first = unit.cleans == "gas"
    return Ends(
        float(liquid[unit.liquid_basis].sum()),
        float(gas[unit.gas_basis].sum()),
        liquid_in if lean_first else liquid_out,
        liquid_out if lean_first else liquid_in,
        gas_out if lean_first else gas_in,
        gas_in if lean_first else gas_out,
    )


def stated(found: Ends, cleans: str, numbers: Mapping[str, float]) -> Ends:
    """Give the ends with what is stated for them; the end that is left open follows from the balance.

    Where both outlets are stated, the balance gives the ratio of solvent to gas, and the flow that cleans follows.

    Parameters
    ----------
    found : Ends
        As solved.
    cleans : str
        ``"gas"`` or ``"liquid"``.
    numbers : mapping of str to float
        ``gas_in``, ``gas_out``, ``liquid_in``, ``liquid_out``, mole ratios, and ``removal``.
    """
    given = {key: numbers[key] for key in ("gas_in", "gas_out", "liquid_in", "liquid_out") if key in numbers}
    if not given and "removal" not in numbers:
        return found
    gas_in, liquid_in = (found.y_rich, found.x_lean) if cleans == "gas" else (found.y_lean, found.x_rich)
    gas_in, liquid_in = given.get("gas_in", gas_in), given.get("liquid_in", liquid_in)
    gas_out, liquid_out = given.get("gas_out"), given.get("liquid_out")
    if "removal" in numbers:
        if cleans == "gas":
            gas_out = (1 - numbers["removal"]) * gas_in
        else:
            liquid_out = (1 - numbers["removal"]) * liquid_in
    if gas_out is None and liquid_out is None:  # only what enters is stated: the outlet that is cleaned stays as solved
        if cleans == "gas":
            gas_out = found.y_lean
        else:
            liquid_out = found.x_lean
    liquid, gas = found.liquid, found.gas
    if gas_out is None:
        gas_out = gas_in - (liquid / gas) * (liquid_out - liquid_in)
    elif liquid_out is None:
        liquid_out = liquid_in + (gas / liquid) * (gas_in - gas_out)
    elif liquid_out != liquid_in:
        slope = (gas_in - gas_out) / (liquid_out - liquid_in)
        liquid, gas = (slope * gas, gas) if cleans == "gas" else (liquid, liquid / slope if slope else np.inf)
    if cleans == "gas":
        return Ends(liquid, gas, liquid_in, liquid_out, gas_out, gas_in, True)
    return Ends(liquid, gas, liquid_out, liquid_in, gas_in, gas_out, True)


def inlets_at(case: Case, name: str, component: str, at: Ends) -> dict[str, Stream]:
    """Give the inlets of a column with one component's ratio as in stated ends, states (C + 2,)."""
    unit = case.plan.units[name]
    place = case.sheet.components.index[component]
    found = {label: Stream(case.state(stream).state.copy(), case.plan.phases[stream]) for label, stream in unit.inlets.items()}
    if at.stated:
        absorbs = unit.cleans == "gas"
        for label, basis, ratio, flow in (
            ("gas_in", unit.gas_basis, at.y_rich if absorbs else at.y_lean, at.gas),
            ("liquid_in", unit.liquid_basis, at.x_lean if absorbs else at.x_rich, at.liquid),
        ):
            flows = found[label].state[:-2]
            flows *= flow / flows[basis].sum()
            flows[place] = ratio * flow
    return found


def curve_of(case: Case, name: str, component: str) -> Curve | None:
    """Give the equilibrium line of a column's component, None where it is no curve of X alone.

    It is one where temperature and pressure are the same on every stage, what does not distribute keeps its flow, and
    either no other component distributes or the model is on mole ratios.
    """
    unit = case.plan.units[name]
    place = case.sheet.components.index[component]
    if unit.liquid_basis[place] or unit.gas_basis[place] or unit.inner is not None:
        return None  # with heat, efficiencies or side streams there is no one line
    sides = {label: case.state(stream) for label, stream in {**unit.inlets, **unit.outlets}.items()}
    shares = {}
    for label, inert, basis in (("gas", unit.stays_gas, unit.gas_basis), ("liquid", unit.stays_liquid, unit.liquid_basis)):
        first, last = (sides[f"{label}_{way}"].flows for way in ("in", "out"))
        total, own = first[inert].sum(), first[basis].sum()
        if not own > 0 or abs(last[inert].sum() - total) > CONSTANT * total or (basis & ~inert).any():
            return None
        shares[label] = float(total / own)
    at = list(unit.model_names).index(component)
    if unit.models[at].coordinates != "ratio":
        others = [int(index) for index in unit.places if index != place]
        for label in ("gas_in", "liquid_in"):
            flows = sides[label].flows
            if others and flows[others].sum() > TRACE * flows.sum():
                return None
    numbers = case.numbers(name)
    temperature, pressure = unit.conditions_of({label: sides[label] for label in unit.inlets}, numbers)
    own = unit.model_numbers(numbers)[at]
    return Curve(unit.models[at], float(temperature), float(pressure), own, shares["liquid"], shares["gas"])
