"""A closed flowsheet at other circulations, stripping gas and stages, its requirements taken away."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.errors import InputError
from leanloop.flowsheet.result import Result
from leanloop.flowsheet.view import value
from leanloop.pinch.case import Case, stretched
from leanloop.pinch.circuit import Circuit
from leanloop.status import solved


class Trials:
    """Solves of the whole flowsheet around a case.

    Parameters
    ----------
    case : Case
    circuit : Circuit

    Attributes
    ----------
    stages : dict of str to int
        Of absorber and stripper, as they are.
    """

    def __init__(self, case: Case, circuit: Circuit) -> None:
        self.case, self.circuit = case, circuit
        self.sheet = case.sheet.released()
        self.base: dict[str, Any] = case.changes()
        self.numbers = {name: case.numbers(name) for name in (circuit.absorber, circuit.stripper)}
        self.stages = {name: case.plan.units[name].count(numbers) for name, numbers in self.numbers.items()}

    def _at(self, address: str) -> float:
        return float(self.base.get(address, self.case.sheet.numbers[address]))

    @property
    def circulation(self) -> float:
        """Flow of what the make-up holds, mol/s."""
        return sum(self._at(address) for address in self.circuit.hold)

    def solve(self, hold: np.ndarray, steam: np.ndarray | None = None, times: int = 1) -> Result:
        """Solve with the circulation and the stripping gas multiplied.

        Parameters
        ----------
        hold, steam : (R,)
            Factors; the second on the stripping gas, or on the boil-up where none is fed.
        times : int
            Factor on the stages of both columns.
        """
        changes: dict[str, Any] = dict(self.base)
        for address in self.circuit.hold:
            changes[address] = self._at(address) * hold
        for address in (self.circuit.steam or self.circuit.boil) if steam is not None else ():
            changes[address] = self._at(address) * steam
        for name, count in self.stages.items():
            for key, own in stretched(self.numbers[name], count, count * times).items():
                changes[f"units.{name}.{key}"] = own
        return self.sheet.solve(changes)

    def values(self, quantity: Any, hold: np.ndarray, steam: np.ndarray | None = None, times: int = 1) -> np.ndarray:
        """Give a quantity at many factors, (R,); NaN where not solved."""
        out = np.full(len(hold), np.nan)
        try:
            result = self.solve(hold, steam, times)
        except InputError:  # such as no way out at these numbers in any case
            return out
        for part in result.parts:
            found = np.asarray(value(part.run, quantity), dtype=float)
            out[part.cases] = np.where(solved(part.run.status), found, np.nan)
        return out

    def states(self, result: Result) -> Mapping[str, np.ndarray]:
        """Give stream states of all cases that are solved, (R', C + 2) by stream."""
        part_rows = [(part, np.flatnonzero(solved(part.run.status))) for part in result.parts]
        return {
            stream: np.concatenate([part.run.states[stream][rows] for part, rows in part_rows])
            for stream in self.case.plan.phases
        }
