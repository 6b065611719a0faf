"""Cases that are drawn: spreads of numbers, ranges of whole ones."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.entries import Context, shown_key
from leanloop.studies.sample import Sample
from leanloop.studies.spread import read_law
from leanloop.studies.values import read_ends

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet


def read_drawn(
    sheet: Flowsheet, tables: Sequence[tuple[Mapping[str, Any], str]], sample: Sample, context: Context
) -> dict[str, np.ndarray] | None:
    """Read what is to be drawn, and draw it.

    Parameters
    ----------
    sheet : Flowsheet
    tables : sequence of (mapping, str)
        Ranges or spreads by address, and where they stand.
    sample : Sample
    context : Context

    Returns
    -------
    dict of str to (M,) array, or None
        SI, by address; None after a fault.
    """
    laws = {
        key: (_whole if sheet.entry(key).sort == "integer" else read_law)(sheet, key, item, f"{where}.{shown_key(key)}", context)
        for table, where in tables
        for key, item in table.items()
    }
    if None in laws.values():
        return None
    shares = sample.draw(len(laws))
    return {key: law.values(shares[:, place]) for place, (key, law) in enumerate(laws.items())}


@dataclass(frozen=True)
class Whole:
    """Whole numbers between two ends, themselves among them, all as likely.

    Attributes
    ----------
    low, high : int
    """

    low: int
    high: int

    def values(self, shares: np.ndarray) -> np.ndarray:
        """Give the numbers at cumulated shares, (M,) int."""
        return np.minimum(self.low + np.floor(shares * (self.high - self.low + 1)), self.high).astype(int)


def _whole(sheet: Flowsheet, key: str, raw: Any, where: str, context: Context) -> Whole | None:
    """Read the range that a whole number is drawn from."""
    if not isinstance(raw, Mapping) or set(raw) != {"from", "to"}:
        context.fault(where, "is no range of whole numbers", "write { from = 4, to = 12 }")
        return None
    found = read_ends(sheet, key, raw, where, context)
    if found is None:
        return None
    low, high = sorted(found[:2])
    return Whole(int(low), int(high))
