"""What a study keeps of every case: quantities by address."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.entries import Context, shown_name
from leanloop.errors import nearest
from leanloop.flowsheet.quantity import AddressError
from leanloop.flowsheet.read_requirements import check_address, check_quantity, formula_of

if TYPE_CHECKING:
    from leanloop.flowsheet.result import Result
    from leanloop.flowsheet.sheet import Flowsheet

OF_REQUIREMENT = ("value", "free_value", "reached", "active")
OF_LOOP = ("passes", "residual")
OF_BALANCE = ("in_mol_s", "out_mol_s", "made_mol_s", "closure")
OF_ENERGY = ("in_W", "out_W", "duties_W", "closure")
MOST = 1000  # columns of a table that every tool still opens


def read_record(sheet: Flowsheet, raw: Any, address: str, context: Context) -> tuple[str, ...] | None:
    """Read ``record``.

    Parameters
    ----------
    sheet : Flowsheet
    raw : list of str, or None
        Addresses of numbers of a result; None for `usual`.
    address : str
    context : Context

    Returns
    -------
    tuple of str or None
        None after a fault.
    """
    if raw is None:
        return usual(sheet)
    faults = len(context.faults)
    if isinstance(raw, str) or not isinstance(raw, (list, tuple)) or not raw:
        context.fault(address, "is no list of addresses", 'write record = ["streams.NAME.fraction.COMPONENT"]')
        return None
    for place, item in enumerate(raw):
        where = f"{address}[{place}]"
        if not isinstance(item, str):
            context.fault(where, "is no address", "write one in quotes")
            continue
        try:
            _check(sheet, item)
        except AddressError as error:
            context.fault(where, error.problem, error.remedy)
    if len(set(map(str, raw))) > MOST:
        context.fault(address, f"names more than {MOST} quantities", "record fewer")
    return tuple(dict.fromkeys(raw)) if len(context.faults) == faults else None


def _check(sheet: Flowsheet, address: str) -> None:
    """Stop at an address that leads to no number of a case.

    Raises
    ------
    AddressError
    """
    head, *path = address.split(".")
    if head == "requirements":
        if not path or path[0] not in sheet.requirements:
            raise AddressError(
                f"there is no requirement {shown_name('.'.join(path))}", nearest(".".join(path[:1]), sheet.requirements)
            )
        _known(address, path[1:], (OF_REQUIREMENT,))
    elif head == "loop":
        _known(address, path, (OF_LOOP,))
    elif head == "balance":
        if path[:1] == ["energy"]:
            if sheet.heat is None:
                raise AddressError("no heat is balanced here", "leave it out")
            _known(address, path[1:], (OF_ENERGY,))
        else:
            _known(address, path, (("components", "energy"), sheet.components.names, OF_BALANCE))
    else:
        check_address(address)
        check_quantity(sheet, address, formula_of(sheet, address))


def _known(address: str, path: list[str], levels: tuple[Any, ...]) -> None:
    for key, names in zip(path, levels, strict=False):
        if key not in names:
            raise AddressError(f"there is no '{key}' in {shown_name(address)}", nearest(key, names))
    if len(path) != len(levels):
        raise AddressError(
            f"{shown_name(address)} is no number", f"go on to one of {', '.join(levels[min(len(path), len(levels) - 1)])}"
        )


def usual(sheet: Flowsheet) -> tuple[str, ...]:
    """Give what is worth keeping where nothing is named: requirements, outlets, lean loadings, make-up and duties.

    Parameters
    ----------
    sheet : Flowsheet

    Returns
    -------
    tuple of str
    """
    out: list[str] = []
    for name, item in sheet.requirements.items():
        out += [f"requirements.{name}.free_value", item.address]
    for name, unit in sheet.units.items():
        cleans = getattr(unit, "cleans", None)
        if cleans == "gas":
            out += [f"streams.{unit.outlets['gas_out']}.fraction.{key}" for key in unit.model_names]
        elif cleans == "liquid":
            out += [f"streams.{unit.outlets['liquid_out']}.loading.{key}" for key in unit.model_names]
        if unit.kind == "makeup":
            out += [f"units.{name}.results.added_mol_s.{key}" for key in unit.values.group("hold")]
        out += [f"units.{name}.results.{key}" for key in unit.draws_heat]
    good = []
    for address in dict.fromkeys(out):
        try:
            _check(sheet, address)
        except AddressError:
            continue
        good.append(address)
    return tuple(good)


def columns(result: Result, record: tuple[str, ...]) -> dict[str, np.ndarray]:
    """Give what is recorded of a batch.

    Parameters
    ----------
    result : Result
        With a case axis.
    record : tuple of str

    Returns
    -------
    dict of str to (M,) array
        NaN where undefined.
    """
    out = {}
    for address in record:
        found = result[address]
        if isinstance(found, list):  # what is None in every case
            found = np.array([np.nan if item is None else item for item in found])
        out[address] = np.asarray(found, dtype=float)
    return out
