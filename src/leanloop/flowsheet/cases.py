"""Changes of inputs for one case or many: read, checked, and sorted into groups that can be one batch."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.entries import Context, read_number
from leanloop.errors import InputError, nearest

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet

Groups = list[tuple[np.ndarray, dict[str, Any]]]


def read_changes(
    sheet: Flowsheet, changes: Mapping[str, Any]
) -> tuple[int, bool, dict[str, Any], dict[str, np.ndarray], Groups]:
    """Read changes of inputs.

    Parameters
    ----------
    sheet : Flowsheet
    changes : mapping of str to number, text, list or array

    Returns
    -------
    cases : int
    axis : bool
    base : dict of str to number or list
        Inputs with one value for all cases.
    arrays : dict of str to (M,) array
    groups : list of (rows, dict)
        Case numbers, and the inputs that cannot differ inside a batch.

    Raises
    ------
    InputError
        With every fault found.
    """
    context = Context(plain_si=True)
    base: dict[str, Any] = {}
    arrays: dict[str, np.ndarray] = {}
    apart: dict[str, list[Any]] = {}
    lengths: dict[str, int] = {}
    for address, raw in changes.items():
        if address not in sheet.numbers:
            context.fault(address, "is no numeric input", nearest(address, sheet.numbers))
            continue
        entry, listed = sheet._entries[address], isinstance(sheet.numbers[address], list)
        depth = 2 if listed else 1
        array = raw if isinstance(raw, (str, int, float)) else np.asarray(raw)
        if not isinstance(raw, (str, int, float)) and array.ndim == depth:
            lengths[address] = len(array)
            values = _read_array(array, entry, sheet.sorts[address], address, context, listed)
            if values is None:
                continue
            if listed or not entry.cases:
                apart[address] = values
            else:
                arrays[address] = np.asarray(values, dtype=float)
        elif listed and not isinstance(raw, (str, int, float)) and array.ndim == 1:
            base[address] = [float(item) for item in array]
        elif np.ndim(array) == 0:
            item = array.item() if isinstance(array, np.ndarray) else array
            number = read_number(item, entry, address, context)
            if number is not None:
                if number[1] != sheet.sorts[address] and number[1] != "integer":
                    context.fault(address, f"is given as {sheet.sorts[address]} in the flowsheet", "keep to that dimension")
                base[address] = number[0]
        else:
            context.fault(address, f"has {array.ndim} axes", "give one value, or one for each case")
    if len(set(lengths.values())) > 1:
        for address, length in lengths.items():
            context.fault(address, f"has {length} cases", "give every array the same length")
    if context.faults:
        raise InputError(context.faults, sheet.source)
    axis = bool(lengths)
    cases = next(iter(lengths.values())) if axis else 1
    return cases, axis, base, arrays, _groups(apart, cases)


def _read_array(array: np.ndarray, entry: Any, sort: str, address: str, context: Context, listed: bool) -> list[Any] | None:
    if array.dtype.kind in "fiu":
        values = array.astype(float)
    else:
        read = [read_number(item, entry, f"{address}[{place}]", context) for place, item in enumerate(array.ravel().tolist())]
        if any(item is None for item in read):
            return None
        if any(item[1] not in (sort, "integer") for item in read):
            context.fault(address, f"is given as {sort} in the flowsheet", "keep to that dimension")
            return None
        values = np.array([item[0] for item in read], dtype=float).reshape(array.shape)
    if listed:
        return [list(row) for row in values]
    if entry.sort == "integer":
        least = -np.inf if entry.least is None else entry.least
        most = np.inf if entry.most is None else entry.most
        wrong = np.flatnonzero(~(np.isfinite(values) & (values == np.round(values)) & (values >= least) & (values <= most)))
        for place in wrong[:5]:
            context.fault(f"{address}[{place}]", f"{values[place]!r} is no allowed whole number", f"write one from {least:g} to {most:g}")
        return None if len(wrong) else [int(item) for item in values]
    low = np.zeros(values.shape, dtype=bool)
    with np.errstate(invalid="ignore"):
        for limit, test in ((entry.least, np.less), (entry.above, np.less_equal)):
            low |= test(values, limit) if limit is not None else False
        for limit, test in ((entry.most, np.greater), (entry.below, np.greater_equal)):
            low |= test(values, limit) if limit is not None else False
    # a value out of range spoils its own case alone: it becomes NaN, which that case's status names
    return list(np.where(low, np.nan, values))


def _groups(apart: dict[str, list[Any]], cases: int) -> Groups:
    if not apart:
        return [(np.arange(cases), {})]
    keys: dict[tuple, list[int]] = {}
    for case in range(cases):
        key = tuple(tuple(values[case]) if isinstance(values[case], list) else values[case] for values in apart.values())
        keys.setdefault(key, []).append(case)
    return [
        (np.array(rows), {address: values[rows[0]] for address, values in apart.items()}) for rows in keys.values()
    ]
