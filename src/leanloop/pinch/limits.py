"""Limits of a solved flowsheet: each column's, and the closed pair's."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from leanloop.flowsheet.result import Result, plain
from leanloop.pinch.case import Case
from leanloop.pinch.circuit import find
from leanloop.pinch.column import ColumnLimits, column_limits
from leanloop.pinch.loop import LoopLimits, loop_limits


@dataclass(frozen=True)
class Limits:
    """Limits of one case.

    Attributes
    ----------
    case : Case
    columns : dict of str to ColumnLimits
    loop : LoopLimits
    """

    case: Case
    columns: dict[str, ColumnLimits]
    loop: LoopLimits

    def to_dict(self) -> dict[str, Any]:
        """Give everything in SI units, None for what is not known."""
        return {
            "status": self.case.status,
            "status_text": self.case.status_text,
            "units": {name: plain(found.table()) for name, found in self.columns.items()},
            "loop": plain(self.loop.table()),
        }

    def cautions(self) -> list[str]:
        """Say where a limit lies off the data it rests on."""
        return [
            f"Column {name}: the pinch lies off the table of {found.key}, where the line is extended straight."
            for name, found in self.columns.items()
            if found.outside
        ]


def limits(result: Result, case: int = 0) -> Limits:
    """Find least solvent and gas rates, pinches, stages needed, and the window of a closed pair.

    Feeds, gas rates and end compositions are those of the solved flowsheet; `[limits.NAME]` states other ends.

    Parameters
    ----------
    result : Result
    case : int
        Of a result with a case axis.

    Returns
    -------
    Limits

    Notes
    -----
    Stages are without limit. On curves of one mole ratio the answer is exact (`leanloop.pinch.rates`,
    `leanloop.pinch.pair`); where equilibrium is none, or flows that do not distribute change by more than 1e-4 in a
    column, it is the limit of solves as stages double, to 1e-3.
    """
    own = Case(result, case)
    columns = {
        name: column_limits(own, name) for name, unit in own.plan.units.items() if hasattr(unit, "cleans")
    }
    if not own.usable:
        return Limits(own, columns, LoopLimits(why=f"the flowsheet is not solved: {own.status_text}"))
    return Limits(own, columns, loop_limits(own, find(own), columns))
