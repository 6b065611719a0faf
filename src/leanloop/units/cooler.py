"""Cooler: brings a stream to a lower temperature, or takes heat from it."""

from __future__ import annotations

from leanloop.units.heater import Heater


class Cooler(Heater):
    """Brings a stream to a lower temperature, or takes a duty from it; flashed with `equilibrium`, else its phase stays."""

    kind = "cooler"
    warms = False
