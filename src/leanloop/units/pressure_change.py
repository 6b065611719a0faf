"""What valve, pump and blower share: one inlet, one outlet, and a pressure that is given or given as a change."""

from __future__ import annotations

from collections.abc import Mapping
from typing import ClassVar

import numpy as np

from leanloop.entries import Context, Entry
from leanloop.stream import Stream
from leanloop.units.base import Numbers, Unit

USUAL_EFFICIENCY = 0.7  # common practice for small machines, no source


def entries_of(change: str, words: str) -> tuple[Entry, ...]:
    """Give the ports and the entries of the pressure.

    Parameters
    ----------
    change : str
        ``"pressure_drop"`` or ``"pressure_rise"``.
    words : str
        What `change` means, one line.
    """
    return (
        Entry("takes", "inlet", required=True, doc="the stream before"),
        Entry("gives", "outlet", required=True, doc="the stream behind"),
        Entry("pressure", "pressure", above=0.0, doc=f"of the outlet; this or {change}"),
        Entry(change, "pressure", least=0.0, doc=words),
    )


class PressureChange(Unit):
    """Changes the pressure of one stream.

    Attributes
    ----------
    change : str
        Entry for the change of pressure, counted upwards where it is a rise.
    """

    change: ClassVar[str] = "pressure_rise"

    def check(self, address: str, context: Context) -> None:
        """One of pressure and its change is given."""
        given = [key for key in ("pressure", self.change) if key in self.raw]
        if len(given) == 2:
            context.fault(f"{address}.{self.change}", "stands beside pressure", "keep one of the two")
        elif not given:
            remedy = f'add pressure = "2 bar" or {self.change} = "1 bar"'
            context.fault(f"{address}.pressure", "is not known", remedy)

    def pressure_out(self, stream: Stream, numbers: Numbers) -> np.ndarray:
        """Give the pressure of the outlet, (...,) Pa; NaN where a drop leaves none."""
        if "pressure" in numbers:
            return np.asarray(numbers["pressure"])
        change = np.asarray(numbers[self.change])
        if self.change == "pressure_rise":
            return stream.pressure + change
        left = stream.pressure - change
        return np.where(np.real(left) > 0, left, np.nan)

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """The pressure is given or follows the inlet's; the temperature stays."""
        if what == "pressure":
            return [] if "pressure" in self.values.numbers else [("takes", "pressure")]
        return [("takes", "temperature")]

    def wrong_way(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], rises: bool) -> bool:
        """Tell whether the pressure falls in some case where it should rise, or the other way round."""
        before, after = inlets["takes"].pressure, outlets["gives"].pressure
        return bool(np.any(after < before * (1 - 1e-9) if rises else after > before * (1 + 1e-9)))
