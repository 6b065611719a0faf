"""Mixer: several streams of one phase into one."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from leanloop.entries import Context, Entry
from leanloop.stream import Stream
from leanloop.units.base import Inlet, Numbers, Scene, Surroundings, Unit


class Mixer(Unit):
    """Adds streams of the same phase; the lowest inlet pressure, the molar mean of the temperatures."""

    kind = "mixer"
    entries = (
        Entry("takes", "inlet", required=True, many=True, doc="streams to mix"),
        Entry("gives", "outlet", required=True, doc="the mixed stream"),
    )

    @classmethod
    def examples(cls) -> list[Scene]:
        """Give three gases of unlike pressure and temperature."""
        inlets = {
            "wet": Inlet("gas", {"air": [1.0, 0.0], "water": [0.1, 0.4]}, [300.0, 350.0], [1.2e5, 1e5]),
            "dry": Inlet("gas", {"air": [2.0, 1.0]}, 320.0, [1.1e5, 2e5]),
            "steam": Inlet("gas", {"water": [0.0, 0.5]}, 400.0, 3e5),
        }
        return [Scene({"takes": list(inlets), "gives": "all"}, inlets)]

    def connect(self, around: Surroundings, context: Context) -> Unit:
        """Gas and liquid do not mix into one phase."""
        if len(set(around.phases.values()) - {""}) > 1:
            liquid = [self.inlets[label] for label, phase in around.phases.items() if phase == "liquid"]
            context.fault(
                f"units.{self.name}.takes",
                f"mixes gas and liquid ({', '.join(liquid)} liquid)",
                "mix streams of one phase, or bring both into a column",
            )
        return super().connect(around, context)

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """Pressure leans on pressures alone, temperature on flows as well."""
        if what == "pressure":
            return [(inlet, "pressure") for inlet in self.inlets]
        return [(inlet, part) for inlet in self.inlets for part in ("flows", "temperature")]

    def calculate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give the sum of the inlets."""
        streams = list(inlets.values())
        flows = sum(stream.flows for stream in streams)
        amount = sum(stream.total for stream in streams)
        heat = sum(stream.total * stream.temperature for stream in streams)
        # nothing flows: the first inlet's temperature, so that an empty stream stays regular
        empty = amount == 0
        temperature = np.where(empty, streams[0].temperature, heat / np.where(empty, 1.0, amount))
        pressure = _least([stream.pressure for stream in streams])
        return {"gives": Stream.of(flows, temperature, pressure, streams[0].phase)}

    def cautions(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping) -> list[str]:
        """Say that the temperature is no heat balance where it matters."""
        temperatures = [stream.temperature for stream in inlets.values()]
        if max(float(np.nanmax(np.abs(item - temperatures[0]), initial=0.0)) for item in temperatures) > 0.5:
            return [
                f"Mixer {self.name}: the temperature of its outlet is the molar mean of its inlets, not a heat balance."
            ]
        return []


def _least(pressures: list[np.ndarray]) -> np.ndarray:
    """Give the lowest pressure; inlets that tie share its derivative, a recycle at the loop's own pressure among them."""
    pressures = np.broadcast_arrays(*pressures)
    least = np.min([np.real(item) for item in pressures], axis=0)
    if not any(item.dtype.kind == "c" for item in pressures):
        return least
    tied = [np.real(item) == least for item in pressures]
    slope = sum(np.imag(item) * own for item, own in zip(pressures, tied, strict=True))
    return least + 1j * slope / np.maximum(sum(own.astype(int) for own in tied), 1)
