"""Limits of the closed pair in a flowsheet: by the two curves where they tell all, else by doubling the stages."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from leanloop.flowsheet.quantity import formula
from leanloop.pinch.case import Case
from leanloop.pinch.circuit import Circuit
from leanloop.pinch.column import CURVE, DOUBLING, ColumnLimits
from leanloop.pinch.ends import curve_of
from leanloop.pinch.pair import Pair
from leanloop.pinch.required import Asked, asked_of
from leanloop.pinch.search import Search
from leanloop.pinch.trials import Trials

PROBES = np.array([1.0, 1.27, 0.81, 1.6])  # circulations at which the way between the columns is measured
STRAIGHT = 1e-8  # relative: a way that is no straight line is not described by two numbers
PER_HOUR = 3.6


@dataclass(frozen=True)
class LoopLimits:
    """What is known of the closed pair.

    Attributes
    ----------
    circuit : Circuit or None
    method : str or None
        ``"curve"`` or ``"doubling"``.
    asked : Asked or None
        The outlet that is held.
    circulation, gas : float or None
        As they are, mol/s: what the make-up holds, and the solute-free stripping gas.
    least, most, least_gas : float or None
        mol/s: circulation of what the make-up holds, and solute-free stripping gas.
    least_duty : float or None
        W, of the reboiler where no stripping gas is fed.
    best : (float, float) or None
        Circulation with the lowest outlet, and that outlet in the quantity held.
    why : str or None
    pair : Pair or None
    per_liquid : float
        What the make-up holds over the solute-free solvent.
    """

    circuit: Circuit | None = None
    method: str | None = None
    asked: Asked | None = None
    circulation: float | None = None
    gas: float | None = None
    least: float | None = None
    most: float | None = None
    least_gas: float | None = None
    least_duty: float | None = None
    best: tuple[float, float] | None = None
    why: str | None = None
    pair: Pair | None = None
    per_liquid: float = 1.0

    def table(self) -> dict[str, Any]:
        """Give it as a result reports it."""
        circuit, asked = self.circuit, self.asked
        return {
            "absorber": circuit.absorber if circuit else None,
            "stripper": circuit.stripper if circuit else None,
            "method": self.method,
            "requirement": circuit.requirement.name if circuit and circuit.requirement else None,
            "quantity": asked.address if asked else None,
            "value": asked.target if asked else None,
            "Y": asked.ratio if asked else None,
            "circulation_mol_s": self.circulation,
            "gas_mol_s": self.gas,
            "least_circulation_mol_s": self.least,
            "most_circulation_mol_s": self.most,
            "least_gas_mol_s": self.least_gas,
            "least_duty_W": self.least_duty,
            "why": self.why,
        }


def loop_limits(case: Case, circuit: Circuit | str, columns: dict[str, ColumnLimits]) -> LoopLimits:
    """Find the limits of the closed pair.

    Parameters
    ----------
    case : Case
    circuit : Circuit or str
        What `circuit.find` gives.
    columns : dict of str to ColumnLimits
        Of this case.
    """
    if isinstance(circuit, str):
        return LoopLimits(why=circuit)
    trials = Trials(case, circuit)
    asked = asked_of(case, circuit, trials, columns[circuit.absorber].key)
    stripper = case.plan.units[circuit.stripper]
    gas = float(case.state(stripper.inlets["gas_in"]).flows[stripper.gas_basis].sum()) if "gas_in" in stripper.inlets else None
    blank = LoopLimits(
        circuit, circulation=trials.circulation, gas=gas, asked=asked if isinstance(asked, Asked) else None
    )
    if isinstance(asked, str):
        return replace(blank, why=asked)
    pair, per_liquid = _pair(case, circuit, trials, asked)
    if pair is not None:
        return _by_curves(replace(blank, pair=pair, method=CURVE, per_liquid=per_liquid))
    return _by_doubling(replace(blank, method=DOUBLING), case, trials)


def _pair(case: Case, circuit: Circuit, trials: Trials, asked: Asked) -> tuple[Pair | None, float]:
    """Give the pair of curves, and the held flow per solute-free solvent; None where curves do not tell all.

    The way of the lean solvent between the columns is measured on solves at several circulations.
    """
    if asked.key is None or asked.ratio is None:
        return None, 1.0
    first, second = case.plan.units[circuit.absorber], case.plan.units[circuit.stripper]
    place = case.sheet.components.index[asked.key]
    if place not in second.places or "gas_in" not in second.inlets:
        return None, 1.0
    curves = curve_of(case, circuit.absorber, asked.key), curve_of(case, circuit.stripper, asked.key)
    if None in curves:
        return None, 1.0
    states = trials.states(trials.solve(PROBES))
    names = {
        "lean": (first.inlets["liquid_in"], first.liquid_basis),
        "rich": (first.outlets["liquid_out"], first.liquid_basis),
        "fed": (second.inlets["liquid_in"], second.liquid_basis),
        "left": (second.outlets["liquid_out"], second.liquid_basis),
        "gas": (first.inlets["gas_in"], first.gas_basis),
        "steam": (second.inlets["gas_in"], second.gas_basis),
    }
    flow = {key: states[stream][:, :-2][:, basis].sum(axis=1) for key, (stream, basis) in names.items()}
    ratio = {key: states[stream][:, place] / flow[key] for key, (stream, _) in names.items()}
    held = np.array([case.sheet.components.index[address.rpartition(".")[2]] for address in circuit.hold])
    holding = states[names["lean"][0]][:, held].sum(axis=1)
    if len(holding) < 3:
        return None, 1.0
    scale = ratio["rich"].max()
    steady = all(
        _same(values, values[0])
        for values in (
            flow["gas"],
            flow["steam"],
            ratio["gas"],
            ratio["steam"],
            *(states[stream][:, column] for stream in (names["lean"][0], names["fed"][0]) for column in (-2,)),
            *(states[stream][:, column] for stream in (names["gas"][0], names["steam"][0]) for column in (-1,)),
            holding / flow["lean"],
        )
    )
    steady = steady and all(_same(flow[key], flow["lean"]) for key in ("rich", "fed", "left"))
    steady = steady and np.all(np.abs(ratio["fed"] - ratio["rich"]) <= STRAIGHT * scale)
    matrix = np.stack([ratio["left"], np.ones_like(ratio["left"])], axis=1)
    (kept, gained), *_ = np.linalg.lstsq(matrix, ratio["lean"], rcond=1e-12)
    if abs(gained) <= 1e-12 * scale:
        gained = 0.0
    off = np.abs(matrix @ [kept, gained] - ratio["lean"]).max()
    if not steady or off > STRAIGHT * scale or not 0 <= kept <= 1 + STRAIGHT or gained < 0:
        return None, 1.0
    found = Pair(
        *curves,
        float(flow["gas"][0]),
        float(flow["steam"][0]),
        float(ratio["gas"][0]),
        float(ratio["steam"][0]),
        float(min(kept, 1.0)),
        float(gained),
    )
    return found, float(holding[0] / flow["lean"][0])


def _same(values: np.ndarray, wanted: Any) -> bool:
    return bool(np.all(np.abs(values - wanted) <= 1e-9 * np.maximum(np.abs(wanted), 1e-300) + 1e-15))


def _hourly(circulation: float) -> str:
    return f"{PER_HOUR * circulation:.5g} kmol/h"


def _by_curves(found: LoopLimits) -> LoopLimits:
    pair, share, asked = found.pair, found.per_liquid, found.asked
    edges = pair.window(asked.ratio, lambda liquid: _hourly(share * liquid), found.circulation / share)
    steam, why = pair.least_steam(found.circulation / share, asked.ratio)
    reasons = [text for text in (edges.why, why) if text]
    return replace(
        found,
        least=None if edges.least is None else share * edges.least,
        most=None if edges.most is None else share * edges.most,
        least_gas=steam,
        best=(share * edges.best[0], edges.best[1]),
        why="; ".join(reasons) or None,
    )


def _by_doubling(found: LoopLimits, case: Case, trials: Trials) -> LoopLimits:
    circuit = found.circuit
    if any(isinstance(numbers.get("efficiency"), list) for numbers in trials.numbers.values()):
        return replace(found, why="efficiencies are given by stage, so that the stages cannot be doubled")
    search = Search(trials, found.asked)
    window = search.window()
    steam, why = None, None
    if circuit.steam or circuit.boil:
        steam, why = search.least_steam()
    elif "gas_in" in case.plan.units[circuit.stripper].inlets:
        why = "no single feed gives the stripping gas"
    else:
        why = "the reboiler is run by its temperature, so that there is no least duty to look for"
    duty = None
    if steam is not None and circuit.boil:
        plan = case.plan
        quantity = formula(f"units.{circuit.stripper}.results.reboiler_duty_W", plan.phases, plan.units, case.sheet.bases)[0]
        duty = float(trials.values(quantity, np.ones(1), np.full(1, steam), search.times[min(4, len(search.times) - 1)])[0])
    reasons = [text for text in (window.why, why) if text]
    hold = trials.circulation
    return replace(
        found,
        least=None if window.least is None else hold * window.least,
        most=None if window.most is None else hold * window.most,
        least_gas=None if steam is None or not circuit.steam or found.gas is None else steam * found.gas,
        least_duty=duty if duty is not None and np.isfinite(duty) else None,
        best=(hold * window.best[0], window.best[1]) if window.best else None,
        why="; ".join(reasons) or None,
    )
