"""The cases of a study: grids, lists, lists in step, and samples of inputs."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.entries import Context, shown_key
from leanloop.errors import InputError, nearest
from leanloop.flowsheet.cases import read_changes
from leanloop.studies.draw import read_drawn
from leanloop.studies.sample import Sample
from leanloop.studies.values import MOST_CASES, read_values

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet


@dataclass(frozen=True)
class Axis:
    """Inputs that move together, and their values.

    Attributes
    ----------
    values : dict of str to (n,) array, or list of n lists
        SI, by address.
    log : bool
        Whether the values are spaced by equal factors.
    """

    values: dict[str, Any]
    log: bool = False

    def __len__(self) -> int:
        return len(next(iter(self.values.values())))


@dataclass(frozen=True)
class Cases:
    """The inputs of every case.

    Attributes
    ----------
    changes : dict of str to (M,) array, or list of M lists
        SI, by address.
    axes : tuple of Axis
        What they are the product of, the first the slowest; empty for samples.
    sampled : tuple of str
        Addresses that are drawn.
    """

    changes: dict[str, Any]
    axes: tuple[Axis, ...] = ()
    sampled: tuple[str, ...] = ()

    @property
    def count(self) -> int:
        """Number of cases M, one where nothing changes."""
        return len(next(iter(self.changes.values()))) if self.changes else 1


def read_cases(sheet: Flowsheet, raw: Any, sample: Sample | None, address: str, context: Context) -> Cases | None:
    """Read ``change`` into cases.

    Parameters
    ----------
    sheet : Flowsheet
    raw : mapping, or list of mappings
        Values by address. The entries of one mapping make a grid; each mapping of a list is one axis, on which its entries
        move together.
    sample : Sample or None
        How to draw, where the values are ranges to draw from.
    address : str
        Where it stands.
    context : Context

    Returns
    -------
    Cases or None
        None after a fault.
    """
    faults = len(context.faults)
    if isinstance(raw, Mapping):
        tables = [({key: item}, f"{address}") for key, item in raw.items()]
    elif isinstance(raw, (list, tuple)) and raw and all(isinstance(item, Mapping) for item in raw):
        tables = [(item, f"{address}[{place}]") for place, item in enumerate(raw)]
    else:
        context.fault(address, "is no table", 'write { "units.NAME.ENTRY" = [values] }')
        return None
    for table, where in tables or [({}, address)]:
        if not table:
            context.fault(where, "changes nothing", 'write { "units.NAME.ENTRY" = [values] }')
    seen: dict[str, str] = {}
    for table, where in tables:
        for key in table:
            own = f"{where}.{shown_key(key)}"
            if key in seen:
                context.fault(own, "is changed twice", "name each input once")
            elif key not in sheet.numbers:
                context.fault(own, "is no numeric input", nearest(str(key), sheet.numbers))
            seen[key] = own
    tables = [({key: item for key, item in table.items() if key in sheet.numbers}, where) for table, where in tables]
    if sample is not None:
        drawn = read_drawn(sheet, tables, sample, context)
        return Cases(drawn, (), tuple(drawn)) if drawn is not None and len(context.faults) == faults else None
    axes = [_axis(sheet, table, where, context) for table, where in tables]
    if len(context.faults) == faults:
        for axis, (_, where) in zip(axes, tables, strict=True):
            _check_curves(sheet, axis, where, context)
    if len(context.faults) > faults:
        return None
    counts = [len(axis) for axis in axes]
    if np.prod([float(count) for count in counts]) > MOST_CASES:
        context.fault(address, f"makes more than {MOST_CASES} cases", "give fewer values, or draw a sample")
        return None
    changes: dict[str, Any] = {}
    places = np.indices(counts).reshape(len(counts), -1)
    for axis, place in zip(axes, places, strict=True):
        for key, values in axis.values.items():
            changes[key] = [values[item] for item in place] if isinstance(values, list) else values[place]
    return Cases(changes, tuple(axes))


def _axis(sheet: Flowsheet, table: Mapping[str, Any], where: str, context: Context) -> Axis:
    values, logs = {}, []
    for key, item in table.items():
        own = f"{where}.{shown_key(key)}"
        found = read_values(sheet, key, item, own, context)
        if found is not None:
            values[key], log = found
            logs.append(log)
    lengths = {key: len(item) for key, item in values.items()}
    if len(set(lengths.values())) > 1:
        for key, length in lengths.items():
            context.fault(f"{where}.{shown_key(key)}", f"has {length} values", "what moves together needs as many of each")
    return Axis(values, bool(logs) and all(logs))


def _check_curves(sheet: Flowsheet, axis: Axis, where: str, context: Context) -> None:
    """Note lists of which a model can be no curve, before anything is solved."""
    lists = {key: values for key, values in axis.values.items() if isinstance(values, list) and key.startswith("equilibrium.")}
    if lists:
        try:
            read_changes(sheet, lists)
        except InputError as error:
            for fault in error.faults:
                context.fault(f"{where}.{fault.address}", fault.problem, fault.remedy)
