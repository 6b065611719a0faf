"""Heater: brings a stream to a temperature."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from leanloop.entries import Entry
from leanloop.stream import Stream
from leanloop.units.base import Inlet, Numbers, Scene, Unit


class Heater(Unit):
    """Sets the temperature of a stream; its phase and pressure stay; no duty is calculated yet."""

    kind = "heater"
    entries = (
        Entry("takes", "inlet", required=True, doc="the stream to bring to temperature"),
        Entry("gives", "outlet", required=True, doc="the same stream at its new temperature"),
        Entry("temperature", "temperature", required=True, doc="temperature of the outlet"),
    )
    warms = True

    @classmethod
    def examples(cls) -> list[Scene]:
        """Give a liquid brought to a temperature."""
        brine = Inlet("liquid", {"water": [2.0, 1.0], "salt": [0.1, 0.0]}, [300.0, 320.0], [1e5, 2e5])
        return [Scene({"takes": "before", "gives": "after", "temperature": "37 degC"}, {"takes": brine})]

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """The temperature is given; the pressure is the inlet's."""
        return [] if what == "temperature" else [("takes", what)]

    def calculate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give the stream at the temperature asked for."""
        return {"gives": inlets["takes"].at(numbers["temperature"])}

    def results(self, inlets: Mapping, outlets: Mapping, numbers: Numbers, memory: Mapping) -> dict[str, Any]:
        """Give the duty, which is not known while heat is not balanced."""
        return {"results": {"duty_W": None}}

    def cautions(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping) -> list[str]:
        """Say when a heater cools, or a cooler heats."""
        rise = outlets["gives"].temperature - inlets["takes"].temperature
        if ((rise < -0.01) if self.warms else (rise > 0.01)).any():
            does = "cools" if self.warms else "heats"
            return [f"{self.kind.capitalize()} {self.name} {does} its stream: check its temperature."]
        return []
