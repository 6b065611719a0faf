"""Absorber: a column in which the liquid takes components from the gas."""

from __future__ import annotations

from leanloop.units.column import Column


class Absorber(Column):
    """Counter-current equilibrium stages; removal is counted from the gas."""

    kind = "absorber"
    cleans = "gas"
