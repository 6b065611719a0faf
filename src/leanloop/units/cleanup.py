"""Cleanup: takes given parts of components out of a stream, as a reclaimer, a filter or a polishing bed does."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from leanloop.components import Components
from leanloop.entries import Context, Entry
from leanloop.stream import TWO_PHASE, Stream
from leanloop.units.base import Inlet, Numbers, Scene, Surroundings, Unit


class Cleanup(Unit):
    """Removes a given part of each named component; what is removed leaves in a stream of the same phase.

    Temperature and pressure stay. What the removal takes (an adsorbent, heat, a reagent) is not counted.
    """

    kind = "cleanup"
    shuts = True
    entries = (
        Entry("takes", "inlet", required=True, doc="the stream to clean"),
        Entry("gives", "outlet", required=True, doc="the cleaned stream"),
        Entry("rejects", "outlet", required=True, doc="what is removed"),
        Entry("removal", "number", required=True, by="component", least=0.0, most=1.0, doc="part that is removed, by component"),
    )

    @classmethod
    def examples(cls) -> list[Scene]:
        """Give a solvent freed of tar and some of its water, and a gas of which one component is left, one taken out."""
        oil = Inlet("liquid", {"oil": [2.0, 1.0], "tar": [0.1, 0.0], "water": [0.2, 0.3]}, [300.0, 320.0], [1e5, 2e5])
        gas = Inlet("gas", {"air": [1.0, 3.0], "mist": [0.01, 0.0], "tar": [0.0, 0.02]})
        ports = {"takes": "dirty", "gives": "clean", "rejects": "waste"}
        return [
            Scene({**ports, "removal": {"tar": 0.9, "water": 0.25}}, {"takes": oil}),
            Scene({**ports, "removal": {"mist": 1.0, "tar": 0.0}}, {"takes": gas}),
        ]

    def check(self, address: str, context: Context) -> None:
        """Something is removed."""
        if isinstance(self.raw.get("removal"), Mapping) and not self.raw["removal"]:
            context.fault(f"{address}.removal", "removes nothing", "write removal = { tar = 0.9 }")

    def connect(self, around: Surroundings, context: Context) -> Unit:
        """The enthalpy of what is removed from two phases is not known."""
        if around.phases.get("takes") == TWO_PHASE:
            problem = f"stream '{self.inlets['takes']}' may be of two phases"
            context.fault(f"units.{self.name}.takes", problem, "separate it in a flash drum before")
        return super().connect(around, context)

    def passes(self, inlet: str, outlet: str, components: Components, numbers: Numbers | None = None) -> np.ndarray:
        """Nothing passes to the waste of which nothing is removed, nothing to the clean stream of which all is."""
        named = self.values.group("removal")
        if numbers is None:
            return np.ones(len(components), dtype=bool) if outlet == "gives" else components.mask(named)
        parts = np.real(self._parts(components, numbers))
        return parts < 1.0 if outlet == "gives" else parts > 0.0

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """Temperature and pressure are those of the inlet."""
        return [("takes", what)]

    def _parts(self, components: Components, numbers: Numbers) -> np.ndarray:
        """Give the part removed of each component, (C,) or (..., C)."""
        zero = np.zeros(())
        parts = [np.asarray(numbers.get(f"removal.{name}", zero)) for name in components.names]
        return np.stack(np.broadcast_arrays(*parts), axis=-1)

    def calculate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give what is left and what is removed."""
        stream = inlets["takes"]
        parts = self._parts(self.around.components, numbers)
        return {"gives": stream.carrying(stream.flows * (1.0 - parts)), "rejects": stream.carrying(stream.flows * parts)}
