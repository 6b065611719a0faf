"""Changes of inputs for one case or many: read, checked, and sorted into groups that can be one batch."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.entries import Context, read_number
from leanloop.errors import Fault, InputError, nearest
from leanloop.quantities import NORMAL_MOLES

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet

Groups = list[tuple[np.ndarray, dict[str, Any]]]


def read_changes(
    sheet: Flowsheet, changes: Mapping[str, Any], mixed: frozenset[str] = frozenset()
) -> tuple[int, bool, dict[str, Any], dict[str, np.ndarray], Groups]:
    """Read changes of inputs.

    Parameters
    ----------
    sheet : Flowsheet
    changes : mapping of str to number, text, list or array
    mixed : frozenset of str
        Whole numbers that may differ inside a batch.

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
            context.fault(str(address), "is no numeric input", nearest(str(address), sheet.numbers))
            continue
        try:
            np.asarray(raw)
        except ValueError:
            context.fault(address, "is a list of uneven lists", "give one value, or one for each case")
            continue
        entry, listed = sheet.entry(address), isinstance(sheet.numbers[address], list)
        depth = 2 if listed else 1
        array = raw if isinstance(raw, (str, int, float)) else np.asarray(raw)
        if not isinstance(raw, (str, int, float)) and array.ndim == depth:
            lengths[address] = len(array)
            values = _read_array(sheet, array, address, context, listed)
            if values is None:
                continue
            if listed or not (entry.cases or address in mixed):
                apart[address] = values
            else:
                arrays[address] = np.asarray(values, dtype=float)
        elif listed and not isinstance(raw, (str, int, float)) and array.ndim == 1:
            values = read_list(sheet, address, array, context)
            if values is not None:
                base[address] = values
        elif listed and np.ndim(array) == 0:
            context.fault(address, "is a list in the flowsheet", f"give a list of {len(sheet.numbers[address])} numbers")
        elif np.ndim(array) == 0:
            item = array.item() if isinstance(array, np.ndarray) else array
            number = read_item(sheet, address, item, address, context)
            if number is not None:
                base[address] = number
        else:
            context.fault(address, f"has {array.ndim} axes", "give one value, or one for each case")
    if len(set(lengths.values())) > 1:
        for address, length in lengths.items():
            context.fault(address, f"has {length} cases", "give every array the same length")
    lists = [address for address in (*base, *apart) if isinstance(sheet.numbers[address], list)]
    if lists and not context.faults:
        _check_models(sheet, lists, base, apart, context)
    if context.faults:
        raise InputError(context.faults, sheet.source)
    if 0 in lengths.values():
        raise InputError([Fault(address, "has no cases", "give one value or more") for address in lengths], sheet.source)
    axis = bool(lengths)
    cases = next(iter(lengths.values())) if axis else 1
    return cases, axis, base, arrays, _groups(apart, cases)


def read_item(sheet: Flowsheet, address: str, raw: Any, where: str, context: Context) -> float | None:
    """Read one new value; a plain number is SI, of the dimension that the flowsheet gives the input in."""
    entry, sort = sheet.entry(address), sheet.sorts[address]
    plain = isinstance(raw, (int, float)) and sort != "integer"
    found = read_number(raw, replace(entry, sort=sort) if plain else entry, where, context)
    if found is None:
        return None
    value, own = found
    if own == "molar mass" and sort == "number":  # mass for an amount of gas, such as mg/Nm3
        component = address.rpartition(".")[2]
        mass = sheet.components[component].molar_mass if address.startswith("feeds.") else None
        if mass is not None:
            return value / mass
        context.fault(where, f"needs the molar mass of '{component}'", "give it, or write a mole fraction")
        return None
    if own == "mass in gas" and isinstance(raw, str):  # kept in mg/Nm3, as the quantity is reported
        return value * NORMAL_MOLES * 1e6
    if own not in (sort, "integer"):
        context.fault(where, f"is given as {sort} in the flowsheet", "keep to that dimension")
        return None
    return value


def read_list(sheet: Flowsheet, address: str, row: np.ndarray, context: Context) -> list[float] | None:
    """Read a new list for an input that is one."""
    values = [read_item(sheet, address, item, f"{address}[{place}]", context) for place, item in enumerate(row.tolist())]
    if None in values:
        return None
    faults = len(context.faults)
    if len(values) != len(sheet.numbers[address]):
        context.fault(address, f"has {len(values)} values", f"give {len(sheet.numbers[address])}, as the flowsheet does")
    return values if len(context.faults) == faults else None


def _check_models(
    sheet: Flowsheet, lists: list[str], base: dict[str, Any], apart: dict[str, list[Any]], context: Context
) -> None:
    """Note new lists of which a model can be no curve, such as points that do not rise."""
    owners = {address.rpartition(".")[0] for address in lists if address.startswith("equilibrium.")}
    for conditions in sheet.conditions.values():
        for name, model in conditions.models.items():
            owner = f"equilibrium.{conditions.name}.{name}"
            if owner not in owners:
                continue
            mine = [address for address in lists if address.startswith(f"{owner}.")]
            for case in range(max(len(apart.get(address, (None,))) for address in mine)):
                new = {key[len(owner) + 1 :]: apart[key][case] if key in apart else base[key] for key in mine}
                numbers = {**model.numbers, **new}
                try:
                    with np.errstate(all="ignore"):
                        model.gas(np.array(300.0), np.array(1e5), np.array(0.01), numbers)
                        type(model).check(replace(model.values, numbers=numbers), owner, context)
                except ValueError:
                    context.fault(mine[0], "makes no curve", "write points in rising order, as many of one as of the other")
                if context.faults:
                    return


def _read_array(sheet: Flowsheet, array: np.ndarray, address: str, context: Context, listed: bool) -> list[Any] | None:
    entry, sort = sheet.entry(address), sheet.sorts[address]
    if array.dtype.kind in "fiu":
        values = array.astype(float)
    else:
        items = enumerate(array.ravel().tolist())
        read = [read_item(sheet, address, item, f"{address}[{place}]", context) for place, item in items]
        if None in read:
            return None
        values = np.array(read, dtype=float).reshape(array.shape)
    if listed:
        rows = [read_list(sheet, address, row, context) for row in values]
        return None if None in rows else rows
    if entry.sort == "integer":
        least = -np.inf if entry.least is None else entry.least
        most = np.inf if entry.most is None else entry.most
        wrong = np.flatnonzero(~(np.isfinite(values) & (values == np.round(values)) & (values >= least) & (values <= most)))
        for place in wrong[:5]:
            problem = f"{values[place]:g} is no allowed whole number"
            context.fault(f"{address}[{place}]", problem, f"write one from {least:g} to {most:g}")
        return None if len(wrong) else [int(item) for item in values]
    low = values <= 0 if sort == "temperature" else np.zeros(values.shape, dtype=bool)
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


def shares(groups: Groups, arrays: Mapping[str, np.ndarray], mixed: frozenset[str]) -> Groups:
    """Part groups of cases by how deep they are, so that none carries much more than it needs.

    Parameters
    ----------
    groups : list of (rows, dict)
    arrays : mapping of str to (M,) array
    mixed : frozenset of str
        Whole numbers that may differ inside a batch; the largest of a group is added to its inputs.

    Returns
    -------
    list of (rows, dict)
    """
    deep = [address for address in arrays if address in mixed]
    if not deep:
        return groups
    out = []
    for rows, own in groups:
        powers = np.stack([np.floor(np.log2(arrays[address][rows])) for address in deep], axis=1)
        _, which = np.unique(powers, axis=0, return_inverse=True)
        for number in range(which.max() + 1):
            part = rows[which.ravel() == number]
            out.append((part, {**own, **{f"{address}:deepest": int(arrays[address][part].max()) for address in deep}}))
    return out
