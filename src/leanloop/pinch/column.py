"""Limits of one column: key component, least rate, pinch, stages needed."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from leanloop.pinch import doubling, rates, stepping
from leanloop.pinch.case import Alone, Case
from leanloop.pinch.curve import Curve
from leanloop.pinch.ends import Ends, curve_of, ends, inlets_at, stated
from leanloop.pinch.shapes import Pinch

CURVE, DOUBLING = "curve", "doubling"
TRACES = 1e-9  # of what enters: a component of which less is left sets no limit


@dataclass(frozen=True)
class ColumnLimits:
    """What is known of one column.

    Attributes
    ----------
    unit, kind, cleans : str
        Name, kind, and ``"gas"`` (absorber) or ``"liquid"`` (stripper).
    key : str or None
        Component that sets the limit.
    method : str or None
        ``"curve"`` or ``"doubling"``.
    ends : Ends or None
    least_mol_s : float or None
        Solute-free solvent of an absorber, gas of a stripper.
    least_duty_W : float or None
        Reboiler duty of a stripper without stripping gas.
    times_least : float or None
        Operating rate over the least, where it is not that of the flows.
    pinch : Pinch or None
    stages_needed : float or None
    why : str or None
        Why something is not known.
    outside : bool
        Whether the pinch lies off the data of the model.
    curve : Curve or None
    """

    unit: str
    kind: str
    cleans: str
    key: str | None = None
    method: str | None = None
    ends: Ends | None = None
    least_mol_s: float | None = None
    least_duty_W: float | None = None
    times_least: float | None = None
    pinch: Pinch | None = None
    stages_needed: float | None = None
    why: str | None = None
    outside: bool = False
    curve: Curve | None = field(default=None, repr=False)

    @property
    def ratio_to_least(self) -> float | None:
        """Operating rate over the least."""
        if self.times_least is not None:
            return self.times_least
        if not self.least_mol_s or self.ends is None:
            return None
        return (self.ends.liquid if self.cleans == "gas" else self.ends.gas) / self.least_mol_s

    def table(self) -> dict[str, Any]:
        """Give it as a result reports it."""
        at, pinch = self.ends, self.pinch
        lean_first = self.cleans == "gas"
        return {
            "kind": self.kind,
            "key": self.key,
            "method": self.method,
            "least_solvent_mol_s" if lean_first else "least_gas_mol_s": self.least_mol_s,
            **({} if lean_first else {"least_duty_W": self.least_duty_W}),
            "ratio_to_least": self.ratio_to_least,
            "pinch": {
                "kind": None if pinch is None else pinch.kind,
                "X": None if pinch is None else pinch.x,
                "Y": None if pinch is None else pinch.y,
            },
            "stages_needed": self.stages_needed,
            "ends": {
                "stated": None if at is None else at.stated,
                "solvent_mol_s": None if at is None else at.liquid,
                "gas_mol_s": None if at is None else at.gas,
                "X_lean": None if at is None else at.x_lean,
                "X_rich": None if at is None else at.x_rich,
                "Y_lean": None if at is None else at.y_lean,
                "Y_rich": None if at is None else at.y_rich,
            },
            "why": self.why,
        }


def column_limits(case: Case, name: str) -> ColumnLimits:
    """Find the limits of a column.

    Parameters
    ----------
    case : Case
    name : str
    """
    unit = case.plan.units[name]
    blank = ColumnLimits(name, unit.kind, unit.cleans)
    if not case.usable:
        return replace(blank, why=f"the flowsheet is not solved: {case.status_text}")
    asked = case.sheet.limits.get(name)
    numbers = dict(asked.numbers) if asked else {}
    keys = _keys(case, name, asked.words.get("key") if asked else None)
    if not keys:
        return replace(blank, why="nothing distributes in it")
    found = [_for_key(case, blank, key, numbers) for key in keys]
    coupled = [item for item in found if item.method == DOUBLING and item.why is None]
    if coupled:
        doubled = {item.key: item for item in _doubled(case, coupled)}
        found = [doubled.get(item.key, item) for item in found]
    # where several components count, the one that asks for most sets the limit; one that no rate suffices for comes first
    def size(item: ColumnLimits) -> float | None:
        return item.least_duty_W if item.least_mol_s is None else item.least_mol_s

    lost = [item for item in found if size(item) is None]
    return lost[0] if lost else max(found, key=size)


def _keys(case: Case, name: str, chosen: str | None) -> list[str]:
    """Give the components that may set the limit.

    One that is chosen, or one that a requirement asks for in what leaves the column cleaned; else all that the column can
    take out completely, with a factor of one or more; else all.
    """
    if chosen:
        return [chosen]
    unit = case.plan.units[name]
    clean = unit.outlets["gas_out" if unit.cleans == "gas" else "liquid_out"]
    dirty = case.state(unit.inlets["gas_in" if unit.cleans == "gas" else "liquid_in"]).flows
    index = case.sheet.components.index
    left = case.state(clean).flows
    there = [key for key in unit.model_names if dirty[index[key]] > 0]
    # what is taken out to the last trace asks for no rate
    there = [key for key in there if left[index[key]] > TRACES * dirty[index[key]]] or there
    asked = [
        item.address.rpartition(".")[2]
        for item in case.sheet.requirements.values()
        if item.address.startswith((f"streams.{clean}.", f"units.{name}.results.removal."))
    ]
    asked = [key for key in there if key in asked]
    if asked:
        return asked
    factor = "absorption_factor" if unit.cleans == "gas" else "stripping_factor"
    factors = case.report(name)["results"][factor]
    strong = [key for key in there if factors[key][case.row] >= 1.0]
    return strong or there


def _for_key(case: Case, blank: ColumnLimits, key: str, numbers: dict[str, float]) -> ColumnLimits:
    at = stated(ends(case, blank.unit, key), blank.cleans, numbers)
    unit = case.plan.units[blank.unit]
    if isinstance(case.numbers(blank.unit).get("efficiency"), list):
        return replace(blank, key=key, why="efficiencies are given by stage, so that the stages cannot be doubled")
    if unit.inner is not None:
        if at.stated:
            return replace(blank, key=key, why="with heat, efficiencies or side streams only the ends as solved are looked at")
        return replace(blank, key=key, method=DOUBLING, ends=at)
    if not all(np.isfinite((at.liquid, at.gas, at.x_lean, at.x_rich, at.y_lean, at.y_rich))) or at.gas <= 0 or at.liquid <= 0:
        why = f"ratios of {key} to the solute-free flows are not defined: no solvent, or no gas that does not distribute"
        return replace(blank, key=key, ends=None, why=why)
    if at.y_lean < 0 or at.x_lean < 0 or at.y_rich < 0 or at.x_rich < 0:
        return replace(blank, key=key, ends=at, why="the ends do not balance: one ratio would be below zero")
    curve = curve_of(case, blank.unit, key)
    if curve is None:
        return replace(blank, key=key, method=DOUBLING, ends=at)
    if blank.cleans == "gas":
        least, flow = rates.least_solvent(curve, at.x_lean, at.y_rich, at.y_lean), at.gas
    else:
        least, flow = rates.least_gas(curve, at.x_lean, at.x_rich, at.y_lean), at.liquid
    needed: float | None = float(unit.count(case.numbers(blank.unit)))
    why = least.why
    if at.stated:
        needed = None
        if least.why is None:
            needed = stepping.from_lean(curve, at.slope, at.x_lean, at.y_lean, at.x_rich).stages
            if needed is None:
                why = "no number of stages reaches the stated ends: at this rate the lines meet between them"
    return replace(
        blank,
        key=key,
        method=CURVE,
        ends=at,
        least_mol_s=None if least.ratio is None else least.ratio * flow,
        pinch=least.pinch,
        stages_needed=needed,
        why=why,
        outside=least.pinch is not None and curve.outside(least.pinch.x),
        curve=curve,
    )


def _doubled(case: Case, items: list[ColumnLimits]) -> list[ColumnLimits]:
    """Find the least rates of coupled components, those with the same inlets in one go."""
    out = []
    groups: dict[bool, list[ColumnLimits]] = {}
    for item in items:
        groups.setdefault(item.ends.stated, []).append(item)
    for is_stated, group in groups.items():
        for own in [[item] for item in group] if is_stated else [group]:
            out += _together(case, own)
    return out


def _together(case: Case, items: list[ColumnLimits]) -> list[ColumnLimits]:
    first = items[0]
    column = Alone(case, first.unit, inlets_at(case, first.unit, first.key, first.ends))
    places = np.array([case.sheet.components.index[item.key] for item in items])
    lean_first = first.cleans == "gas"
    if not column.scaled:
        return [replace(item, why="the reboiler is run by its temperature, which has no least rate") for item in items]
    boiled = column.scaled.startswith("reboiler.")
    clean = case.state(column.unit.outlets[column.clean]).flows
    wanted = [item.ends.y_lean * item.ends.gas if lean_first else item.ends.x_lean * item.ends.liquid for item in items]
    limits = np.array(
        [own if item.ends.stated else clean[place] for item, place, own in zip(items, places, wanted, strict=True)]
    )
    out = []
    for item, place, limit, found in zip(
        items, places, limits, doubling.least_by_doubling(column, places, limits), strict=True
    ):
        word = "solvent" if lean_first else "boil-up" if boiled else "gas"
        least = found.factor * (item.ends.liquid if lean_first else item.ends.gas)
        why, pinch = None, None
        if not np.isfinite(found.factor):
            least, why = None, f"no {word} rate suffices: with {found.stages} stages and any rate more of {item.key} leaves"
        elif found.factor == 0:
            least, why = None, f"there is no least rate: {item.key} comes down to its outlet at any rate tried"
        else:
            pinch = doubling.pinch_of(column, item.key, found.factor, found.stages)
            if boiled:
                duty = column.report(found.factor, found.stages)["results"]["reboiler_duty_W"]
                item = replace(item, least_duty_W=None if duty is None else float(duty[0]), times_least=1 / found.factor)
            if not found.settled:
                why = f"with {found.stages} stages the rate still changes by more than 1e-3 as stages double"
        needed = float(column.stages)
        if item.ends.stated:
            needed = doubling.stages_by_count(column, int(place), float(limit))
            if needed is None and why is None:
                why = "no number of stages reaches the stated ends at this rate"
        if boiled:
            least = None
        out.append(replace(item, least_mol_s=least, pinch=pinch, stages_needed=needed, why=why))
    return out
