"""Sections of tables by name."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from leanloop.entries import Context, is_name
from leanloop.flowsheet.read import table


def named(address: str, raw: Any, context: Context) -> Mapping[str, Any]:
    """Give a section of tables; what has no proper name is noted and left out.

    Parameters
    ----------
    address : str
    raw : mapping or None
    context : Context
    """
    return {name: own for name, own in table(address, raw, context).items() if is_name(name)}
