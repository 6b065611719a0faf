"""One solved case of a result, and its columns alone at other rates and stages."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.flowsheet.result import SOLVED_OUTPUT, Result
from leanloop.flowsheet.run import Run
from leanloop.flowsheet.view import View
from leanloop.status import CODE, solved, status_of
from leanloop.stream import Stream
from leanloop.units.base import Evaluation


class Case:
    """Look-ups into one case.

    Parameters
    ----------
    result : Result
    number : int
        Of the case.
    """

    def __init__(self, result: Result, number: int = 0) -> None:
        self.result, self.sheet = result, result.sheet
        for part in result.parts:
            rows = np.flatnonzero(part.cases == number)
            if rows.size:
                self.part, self.row = part, int(rows[0])
        self.run: Run = self.part.run
        self.plan = self.sheet.plan
        texts = result.status_text
        self.status_text = texts[number] if result.axis else texts
        self.status = status_of(self.run.status[self.row]).name
        self.usable = self.run.status[self.row] in [CODE[item] for item in SOLVED_OUTPUT]

    def state(self, stream: str) -> Stream:
        """Give a stream, state (C + 2,)."""
        return Stream(self.run.states[stream][self.row], self.plan.phases[stream])

    def numbers(self, unit: str) -> dict[str, Any]:
        """Give the numbers of a unit by local name, as plain numbers or lists."""
        found = self.run.inputs.of(self.plan.addresses[unit], np.array([self.row]))
        return {key: float(value[0]) if isinstance(value, np.ndarray) else value for key, value in found.items()}

    def report(self, unit: str) -> Mapping[str, Any]:
        """Give what a unit reports, of all cases solved with this one."""
        return View(self.run).unit(unit)

    def changes(self) -> dict[str, Any]:
        """Give what makes this case of the flowsheet: changed and freed inputs by address."""
        inputs, found = self.run.inputs, {}
        for address in inputs.touched:
            found[address] = inputs.base[address]
        for address, values in inputs.arrays.items():
            found[address] = float(values[self.row])
        for name, item in self.part.found.items():
            found[self.sheet.requirements[name].free] = float(item.free_value[self.row])
        return {address: value for address, value in found.items() if not address.startswith("requirements.")}


def stretched(numbers: Mapping[str, Any], now: int, stages: int) -> dict[str, Any]:
    """Give a column's numbers with other stages; side streams keep their place in proportion.

    Parameters
    ----------
    numbers : mapping of str to float or list
        By local name.
    now, stages : int
        As they are, and as wanted.
    """
    out: dict[str, Any] = {}
    if "stages" in numbers:
        out["stages"] = stages
    else:
        out["height"] = stages * numbers["hetp"]
    for key, value in numbers.items():
        if key.endswith(".stage") and key.partition(".")[0] in ("side_feeds", "side_draws", "stage_duties"):
            out[key] = 1 if value == 1 else int(np.clip(round(value * stages / now), 1, stages))
    return out


class Alone:
    """A column by itself, between the streams that enter it in a case.

    Parameters
    ----------
    case : Case
    name : str
    inlets : mapping of str to Stream
        States (C + 2,), by port.

    Attributes
    ----------
    scaled : str
        What is multiplied: a port, or a number such as ``reboiler.duty``; empty where nothing can be.
    """

    def __init__(self, case: Case, name: str, inlets: Mapping[str, Stream]) -> None:
        self.unit, self.inlets = case.plan.units[name], inlets
        self.given = case.numbers(name)
        self.stages = self.unit.count(self.given)
        absorbs = self.unit.cleans == "gas"
        self.scaled = "liquid_in" if absorbs else "gas_in"
        if self.scaled not in inlets:
            boils = [f"reboiler.{key}" for key in ("duty", "boil_up", "stripping_ratio")]
            self.scaled = next((key for key in boils if key in self.given), "")
        self.clean = "gas_out" if absorbs else "liquid_out"

    def solve(self, factors: np.ndarray, stages: int) -> tuple[dict[str, Stream], dict[str, Any], Evaluation]:
        """Solve it with its solvent (absorber), gas or boil-up (stripper) multiplied.

        Parameters
        ----------
        factors : (R,)
        stages : int

        Returns
        -------
        inlets : dict of str to Stream
            States (R, C + 2).
        numbers : dict
        answer : Evaluation
            Of R cases.
        """
        entering = {}
        for label, stream in self.inlets.items():
            state = np.repeat(stream.state[None], len(factors), axis=0)
            if label == self.scaled:
                state[:, :-2] *= factors[:, None]
            entering[label] = Stream(state, stream.phase)
        numbers = {**self.given, **stretched(self.given, self.stages, stages)}
        if self.scaled in self.given:
            numbers[self.scaled] = self.given[self.scaled] * factors
        with np.errstate(all="ignore"):
            return entering, numbers, self.unit.evaluate(entering, numbers, None, {}, {}, 0)

    def outlets(self, factors: np.ndarray, stages: int) -> np.ndarray:
        """Give what leaves with the cleaned stream, (R, C) mol/s; NaN where not solved."""
        *_, answer = self.solve(factors, stages)
        flows = answer.outlets[self.clean].flows.copy()
        flows[~solved(answer.status)] = np.nan
        return flows

    def report(self, factor: float, stages: int) -> Mapping[str, Any]:
        """Give what the column reports at one rate: results and profile, on a case axis of one."""
        entering, numbers, answer = self.solve(np.array([factor]), stages)
        with np.errstate(all="ignore"):
            return self.unit.results(entering, answer.outlets, numbers, answer.memory)
