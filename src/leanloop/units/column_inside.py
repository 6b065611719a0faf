"""State on the stages of a column, as its report reads it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from leanloop.column.law import BoundLaw


@dataclass
class Inside:
    """State on the stages, condenser and reboiler included.

    Attributes
    ----------
    liquid, gas : (..., S, C) mol/s
        Leaving each stage.
    temperature, pressure : (..., S) or broadcastable
        K, Pa.
    k : (..., S, D)
        Equilibrium ratio y/x.
    law : BoundLaw
        At the conditions of the stages.
    first, last : int
        The trays among the stages.
    duty : (..., S) W or None
    """

    liquid: np.ndarray
    gas: np.ndarray
    temperature: np.ndarray
    pressure: np.ndarray
    k: np.ndarray
    law: BoundLaw
    first: int
    last: int
    duty: np.ndarray | None = None

    def law_at(self, end: int) -> BoundLaw:
        """Give the equilibrium at the top (0) or bottom (-1) tray."""
        law = self.law
        if np.shape(law.temperature)[-1:] == (1,):
            return law
        place = self.first if end == 0 else self.last - 1
        one = slice(place, place + 1)
        numbers = law.numbers
        return BoundLaw(law.law, law.temperature[..., one], law.pressure[..., one], numbers)
