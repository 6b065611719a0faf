"""Reading of `[limits.NAME]`: the ends between which the limits of a column are asked for."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from leanloop.entries import Context, Entry, Values, read_values, shown_key, shown_name
from leanloop.errors import nearest
from leanloop.flowsheet.read import table
from leanloop.units.base import Unit

ENTRIES = (
    Entry("key", "component", doc="component that the ends are given for"),
    Entry("gas_in", "number", least=0.0, doc="mole ratio in the gas that enters"),
    Entry("gas_out", "number", least=0.0, doc="mole ratio in the gas that leaves"),
    Entry("liquid_in", "number", least=0.0, doc="mole ratio in the liquid that enters"),
    Entry("liquid_out", "number", least=0.0, doc="mole ratio in the liquid that leaves"),
    Entry("removal", "number", least=0.0, most=1.0, doc="from the stream that is cleaned, instead of its outlet"),
)


def limits(raw: Any, units: Mapping[str, Unit], context: Context) -> dict[str, Values]:
    """Read the section; faults are noted.

    Parameters
    ----------
    raw : mapping of str to mapping
    units : mapping of str to Unit
        Connected.
    context : Context

    Returns
    -------
    dict of str to Values
        By column.
    """
    found = {}
    columns = [name for name, unit in units.items() if hasattr(unit, "cleans")]
    for name, entry in table("limits", raw, context).items():
        address = f"limits.{shown_key(name)}"
        if name not in columns:
            problem = f"there is no column {shown_name(name)}" if name not in units else f"unit '{name}' is no column"
            context.fault(address, problem, nearest(name, columns))
            continue
        if not isinstance(entry, Mapping):
            context.fault(address, "is no table", "write [limits.NAME] with its entries")
            continue
        unit = units[name]
        moving = getattr(unit, "model_names", None)  # not known where the column itself is faulty
        values = read_values(ENTRIES, entry, address, context)
        key = values.words.get("key")
        asked = [item.name for item in ENTRIES[1:] if item.name in entry]
        if key is not None and moving is not None and key not in moving:
            context.fault(f"{address}.key", f"'{key}' does not distribute in column '{name}'", nearest(key, moving))
        elif "key" not in entry and asked and moving is not None and len(moving) > 1:
            context.fault(f"{address}.key", "entry is missing", f"say which component the ends are for: {', '.join(moving)}")
        clean = "gas_out" if unit.cleans == "gas" else "liquid_out"
        if "removal" in entry and clean in entry:
            context.fault(f"{address}.removal", f"stands beside {clean}, which it sets", "keep one of the two")
        found[name] = values
    return found
