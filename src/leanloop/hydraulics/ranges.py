"""Stated ranges of correlations as data, and the sentences on what lies outside."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np


@dataclass(frozen=True)
class Range:
    """Range of a quantity over which a correlation is stated to hold.

    Parameters
    ----------
    name : str
        The argument it is about, such as ``"flow_parameter"``.
    low, high : float
        Ends, in the unit; infinite where there is none.
    unit : str
        SI, empty for a ratio.
    """

    name: str
    low: float
    high: float
    unit: str = ""

    def text(self) -> str:
        """Give the range in words, such as ``"0.15 to 0.9 m"``."""
        unit = f" {self.unit}" if self.unit else ""
        if np.isinf(self.high):
            return f"{self.low:g}{unit} and more"
        if np.isinf(self.low):
            return f"up to {self.high:g}{unit}"
        return f"{self.low:g} to {self.high:g}{unit}"


def outside(ranges: Iterable[Range], **values: Any) -> list[str]:
    """Say in one sentence for each breached quantity what is outside its range.

    Parameters
    ----------
    ranges : iterable of Range
    **values : (...,)
        Quantities by name, in the ranges' units. Those without a range, and NaN, are passed over.

    Returns
    -------
    list of str
        Empty where nothing is outside.
    """
    found = []
    for item in ranges:
        if item.name not in values:
            continue
        value = np.atleast_1d(np.asarray(values[item.name], dtype=float)).ravel()
        breached = value[(value < item.low) | (value > item.high)]
        if not breached.size:
            continue
        words, unit = item.name.replace("_", " "), f" {item.unit}" if item.unit else ""
        least, most = breached.min(), breached.max()
        shown = f"{least:.4g}{unit}" if least == most else f"{least:.4g} to {most:.4g}{unit}"
        places = f" in {breached.size} of {value.size} places" if value.size > 1 else ""
        found.append(f"{words} {shown} is outside the range {item.text()}{places}.")
    return found
