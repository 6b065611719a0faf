"""Stripper: a column in which the gas takes components from the liquid."""

from __future__ import annotations

from leanloop.units.column import Column


class Stripper(Column):
    """Counter-current equilibrium stages; removal is counted from the liquid."""

    kind = "stripper"
    cleans = "liquid"
