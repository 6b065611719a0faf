"""Cooler: brings a stream to a lower temperature."""

from __future__ import annotations

from leanloop.units.heater import Heater


class Cooler(Heater):
    """Sets the temperature of a stream; its phase and pressure stay; no duty is calculated yet."""

    kind = "cooler"
    warms = False
