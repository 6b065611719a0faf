"""Inputs with a spread: normal, lognormal, uniform and triangular."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from scipy.special import ndtri

from leanloop.entries import Context, Entry, read_number, shown_key, shown_name
from leanloop.errors import nearest
from leanloop.flowsheet.cases import read_item

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet

MOST = 1e150  # SI, of what is squared
SHAPES = ("normal", "lognormal", "uniform", "triangular")
ENTRIES = ("shape", "mean", "deviation", "from", "to")
FORMS = 'write "10 %", { deviation = ... }, or { from = ..., to = ... }'


@dataclass(frozen=True)
class Law:
    """How an input is spread.

    Attributes
    ----------
    shape : str
        ``"normal"``, ``"lognormal"``, ``"uniform"`` or ``"triangular"``.
    mean, deviation : float
        Mean and standard deviation, SI; of a lognormal law, those of the input itself.
    low, high : float
        Ends of a uniform or triangular law, SI; the latter has its peak at `mode`.
    mode : float
    log : bool
        Whether a uniform law is one of the logarithm.
    """

    shape: str
    mean: float
    deviation: float
    low: float = -np.inf
    high: float = np.inf
    mode: float = np.nan
    log: bool = False

    def values(self, shares: np.ndarray) -> np.ndarray:
        """Give the quantiles at cumulated shares.

        Parameters
        ----------
        shares : (M,) array
            Above 0 and below 1.

        Returns
        -------
        (M,) array
        """
        if self.shape == "normal":
            return self.mean + self.deviation * ndtri(shares)
        if self.shape == "lognormal":
            width = np.sqrt(np.log1p((self.deviation / self.mean) ** 2))
            return self.mean * np.exp(width * ndtri(shares) - width**2 / 2)
        if self.shape == "uniform":
            if self.log:
                return self.low * (self.high / self.low) ** shares
            return self.low + (self.high - self.low) * shares
        span, left = self.high - self.low, self.mode - self.low
        corner = left / span
        rising = self.low + np.sqrt(shares * span * left)
        falling = self.high - np.sqrt((1.0 - shares) * span * (span - left))
        return np.where(shares < corner, rising, falling)


def read_law(sheet: Flowsheet, key: str, raw: Any, where: str, context: Context) -> Law | None:
    """Read the spread of one input.

    Parameters
    ----------
    sheet : Flowsheet
    key : str
        Its address.
    raw : str, number or mapping
        A standard deviation, ``"10 %"`` of the value that the flowsheet has or in the input's own unit; or a table with
        ``shape``, ``mean``, ``deviation``, ``from``, ``to``.
    where : str
    context : Context

    Returns
    -------
    Law or None
        None after a fault.
    """
    if not sheet.varies(key):
        context.fault(where, "cannot be spread", "name an input that can change by small amounts")
        return None
    faults = len(context.faults)
    if not isinstance(raw, Mapping):
        if isinstance(raw, bool) or not isinstance(raw, (str, int, float)):
            context.fault(where, "is no spread", FORMS)
            return None
        raw = {"deviation": raw}
    for name in raw:
        if name not in (*ENTRIES, "spacing"):
            context.fault(f"{where}.{shown_key(name)}", f"unknown entry {shown_name(name)}", nearest(str(name), ENTRIES))
    ranged = "from" in raw or "to" in raw
    shape = raw.get("shape", "uniform" if ranged else "normal")
    if shape not in SHAPES:
        context.fault(f"{where}.shape", f"unknown shape {shown_name(shape)}", nearest(str(shape), SHAPES))
        return None
    wanted = ("from", "to") if shape in ("uniform", "triangular") else ("deviation",)
    for name in wanted:
        if name not in raw:
            context.fault(f"{where}.{name}", "entry is missing", FORMS)
    for name in {"from", "to", "deviation"} - set(wanted):
        if name in raw:
            context.fault(f"{where}.{name}", f"has no place in a {shape} spread", "leave it out, or give another shape")
    if raw.get("spacing", "linear") not in ("linear", "log"):
        context.fault(f"{where}.spacing", f"unknown spacing {shown_name(raw['spacing'])}", "write linear or log")
    mean = read_item(sheet, key, raw["mean"], f"{where}.mean", context) if "mean" in raw else sheet.numbers[key]
    if len(context.faults) > faults:
        return None
    if wanted == ("deviation",):
        return _about(sheet, key, raw["deviation"], float(mean), shape, where, context)
    return _between(sheet, key, raw, float(mean), shape, where, context)


def _about(sheet: Flowsheet, key: str, raw: Any, mean: float, shape: str, where: str, context: Context) -> Law | None:
    sort = sheet.sorts[key]
    where = f"{where}.deviation"
    if isinstance(raw, str) and raw.strip().endswith("%"):
        if sort == "temperature":
            context.fault(where, "is a share of an absolute temperature", 'write a difference such as "2 K"')
            return None
        found = read_number(raw, Entry("deviation", above=0.0), where, context)
        deviation = None if found is None else found[0] * abs(mean)
    else:
        own = {"temperature": "temperature difference"}.get(sort, sort)
        if own == "mass in gas":
            context.fault(where, "has no deviation in this unit", 'write a share such as "5 %"')
            return None
        found = read_number(raw, Entry("deviation", own, above=0.0), where, context)
        deviation = None if found is None else found[0]
    if deviation is None:
        return None
    if deviation == 0.0:
        context.fault(where, "is a share of nothing", "give the deviation itself, with its unit")
        return None
    if not (deviation < MOST and abs(mean) < MOST):
        context.fault(where, "is too large for its square to be a number", "give a smaller spread")
        return None
    if shape == "lognormal" and mean <= 0:
        context.fault(where, "a lognormal spread needs a mean above zero", "take another shape")
        return None
    return Law(shape, mean, deviation)


def _between(
    sheet: Flowsheet, key: str, raw: Mapping[str, Any], mean: float, shape: str, where: str, context: Context
) -> Law | None:
    ends = [read_item(sheet, key, raw[name], f"{where}.{name}", context) for name in ("from", "to")]
    if None in ends:
        return None
    low, high = map(float, ends)
    if not low < high:
        context.fault(f"{where}.to", "is not above from", "write the lower end first")
        return None
    if not max(abs(low), abs(high), abs(mean)) < MOST:
        context.fault(where, "is too large for its square to be a number", "give smaller ends")
        return None
    log = raw.get("spacing") == "log"
    if log and low <= 0:
        context.fault(f"{where}.from", "is not above zero", "a log spacing needs both ends above zero")
        return None
    if log and not high / low < MOST:
        context.fault(f"{where}.to", "is too many times from", "give ends that are nearer to each other")
        return None
    if shape == "uniform":
        if log:
            ratio = np.log(high / low)
            middle = (high - low) / ratio
            return Law(shape, middle, float(np.sqrt((high**2 - low**2) / (2 * ratio) - middle**2)), low, high, log=True)
        return Law(shape, (low + high) / 2, (high - low) / np.sqrt(12.0), low, high)
    if not low <= mean <= high:
        context.fault(f"{where}.mean", "the peak of a triangular spread is outside its ends", "give mean between from and to")
        return None
    centre = (low + high + mean) / 3
    variance = (low**2 + high**2 + mean**2 - low * high - low * mean - high * mean) / 18
    return Law(shape, centre, float(np.sqrt(variance)), low, high, mean)
