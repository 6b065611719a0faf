"""The values of one input of a study: a list, a range, or multiples of what the flowsheet has."""

from __future__ import annotations

from collections.abc import Mapping
from numbers import Real
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.entries import Context, Entry, read_number, shown_key, shown_name
from leanloop.errors import nearest
from leanloop.flowsheet.cases import read_item

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet

RANGE = ("from", "to", "count", "step", "spacing")
FORMS = "write a list of values, { from = ..., to = ..., count = ... } or { times = [...] }"
MOST_CASES = 5_000_000
MOST_TIMES = 1e100  # a factor beyond is a slip, and may be no float


def read_values(sheet: Flowsheet, key: str, raw: Any, where: str, context: Context) -> tuple[Any, bool] | None:
    """Read the values of one input.

    Parameters
    ----------
    sheet : Flowsheet
    key : str
        Its address.
    raw : list or mapping
        Values; or a range with ``count`` or ``step``; or ``times``, factors on the value that the flowsheet has.
    where : str
    context : Context

    Returns
    -------
    (values, log) or None
        SI values (n,), or a list of lists for an input that is one; whether they are spaced by equal factors.
    """
    raw = raw.tolist() if isinstance(raw, np.ndarray) else raw
    listed, whole = isinstance(sheet.numbers[key], list), sheet.entry(key).sort == "integer"
    if isinstance(raw, Mapping) and set(raw) == {"times"}:
        return _times(sheet, key, raw["times"], where, context)
    if isinstance(raw, Mapping):
        if listed:
            context.fault(where, "is a list in the flowsheet and has no range", "give a list of lists")
            return None
        return _range(sheet, key, raw, whole, where, context)
    if not isinstance(raw, (list, tuple)):
        context.fault(where, "is no list of values", FORMS)
        return None
    if not raw:
        context.fault(where, "the list is empty", "give at least one value")
        return None
    if listed:
        rows = []
        for place, row in enumerate(raw):
            if not isinstance(row, (list, tuple)):
                context.fault(f"{where}[{place}]", "is no list", "give a list of lists, one for each case")
                return None
            own = f"{where}[{place}]"
            values = [read_item(sheet, key, item, f"{own}[{number}]", context) for number, item in enumerate(row)]
            if len(row) != len(sheet.numbers[key]):
                context.fault(own, f"has {len(row)} values", f"give {len(sheet.numbers[key])}, as the flowsheet does")
                values = [None]
            rows.append(None if None in values else values)
        return None if None in rows else (rows, False)
    values = [read_item(sheet, key, item, f"{where}[{place}]", context) for place, item in enumerate(raw)]
    return None if None in values else (np.array(values), False)


def _times(sheet: Flowsheet, key: str, raw: Any, where: str, context: Context) -> tuple[Any, bool] | None:
    base = sheet.numbers[key]
    if isinstance(base, list) or sheet.entry(key).sort == "integer" or sheet.sorts[key] == "temperature":
        context.fault(where, "has no multiples", "give the values themselves")
        return None
    good = (
        isinstance(raw, (list, tuple))
        and raw
        and all(isinstance(item, Real) and not isinstance(item, bool) and abs(item) <= MOST_TIMES for item in raw)
    )
    if not good:
        context.fault(f"{where}.times", "is no list of factors", "write { times = [0.5, 1.0, 2.0] }")
        return None
    si = Context(context.faults, plain_si=True, names=context.names)
    values = [read_item(sheet, key, base * float(item), f"{where}.times[{place}]", si) for place, item in enumerate(raw)]
    return None if None in values else (np.array(values), False)


def read_ends(sheet: Flowsheet, key: str, raw: Mapping[str, Any], where: str, context: Context) -> tuple[float, float, bool] | None:
    """Read ``from``, ``to`` and ``spacing`` of a range.

    Returns
    -------
    (low, high, log) or None
    """
    faults = len(context.faults)
    for name in ("from", "to"):
        if name not in raw:
            context.fault(f"{where}.{name}", "entry is missing", f"add {name} = ...")
    spacing = raw.get("spacing", "linear")
    if spacing not in ("linear", "log"):
        context.fault(f"{where}.spacing", f"unknown spacing {shown_name(spacing)}", "write linear or log")
    ends = [read_item(sheet, key, raw[name], f"{where}.{name}", context) for name in ("from", "to") if name in raw]
    if len(context.faults) > faults:
        return None
    low, high = ends
    if low == high:
        context.fault(f"{where}.to", "is the same as from", "give two different ends, or a list of one value")
    elif not np.isfinite(float(high) - float(low)):
        context.fault(f"{where}.to", "is too far from from", "give ends of which the difference is a number")
    elif spacing == "log" and not (low > 0 and high > 0):
        context.fault(f"{where}.from", "is not above zero", "a log spacing needs both ends above zero")
    return (low, high, spacing == "log") if len(context.faults) == faults else None


def _range(
    sheet: Flowsheet, key: str, raw: Mapping[str, Any], whole: bool, where: str, context: Context
) -> tuple[np.ndarray, bool] | None:
    faults = len(context.faults)
    for name in raw:
        if name not in RANGE:
            context.fault(f"{where}.{shown_key(name)}", f"unknown entry {shown_name(name)}", nearest(str(name), (*RANGE, "times")))
    found = read_ends(sheet, key, raw, where, context)
    count, step = raw.get("count"), raw.get("step")
    if count is not None and step is not None:
        context.fault(where, "has both count and step", "keep one of the two")
    elif count is not None and (isinstance(count, bool) or not isinstance(count, int) or not 1 < count <= MOST_CASES):
        context.fault(f"{where}.count", "is no whole number above 1", "write count = 20")
    elif count is None and step is None and not whole:
        context.fault(f"{where}.count", "entry is missing", "add count = 20, or step")
    if len(context.faults) > faults or found is None:
        return None
    low, high, log = found
    if step is not None:
        length = _step(sheet, key, step, where, context)
        if length is None:
            return None
        with np.errstate(over="ignore"):
            steps = np.float64(abs(high - low)) / length
        if not steps < MOST_CASES:
            context.fault(f"{where}.step", f"makes more than {MOST_CASES} values", "take a larger step")
            return None
        count = int(np.floor(steps + 1e-9)) + 1
        return low + np.sign(high - low) * length * np.arange(count), False
    if whole and count is None:
        return np.arange(low, high + 1) if high > low else np.arange(low, high - 1, -1), False
    values = np.geomspace(low, high, count) if log else np.linspace(low, high, count)
    return (np.array(list(dict.fromkeys(np.round(values).astype(int).tolist()))) if whole else values), log


def _step(sheet: Flowsheet, key: str, raw: Any, where: str, context: Context) -> float | None:
    sort = sheet.sorts[key]
    sort = {"temperature": "temperature difference", "integer": "number"}.get(sort, sort)
    found = read_number(raw, Entry("step", sort, above=0.0), f"{where}.step", context)
    if found is not None and sheet.entry(key).sort == "integer" and found[0] % 1:
        context.fault(f"{where}.step", "is no whole number", "write step = 1, or more")
        return None
    return None if found is None else found[0]
