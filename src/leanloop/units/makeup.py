"""Make-up: holds the circulation of a solvent."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.components import Components
from leanloop.entries import Context, Entry
from leanloop.stream import Stream
from leanloop.units.base import Numbers, Unit


class Makeup(Unit):
    """Sets the flow of held components by adding what is missing; less than nothing is a caution."""

    kind = "makeup"
    entries = (
        Entry("takes", "inlet", required=True, doc="the stream that has lost some of the held components"),
        Entry("gives", "outlet", required=True, doc="the stream with the held flows"),
        Entry("hold", "molar flow", required=True, by="component", least=0.0, doc="flow of each held component"),
    )

    def check(self, address: str, context: Context) -> None:
        """At least one component is held."""
        if isinstance(self.raw.get("hold"), Mapping) and not self.raw["hold"]:
            context.fault(f"{address}.hold", "holds nothing", 'write hold = { solvent = "1.6 mol/s" }')

    def _held(self, components: Components) -> dict[int, str]:
        return {components.index[name]: f"hold.{name}" for name in self.values.group("hold")}

    def adds(self, components: Components) -> np.ndarray:
        """Held components are added."""
        return components.mask(self.values.group("hold"))

    def holds(self, components: Components) -> np.ndarray:
        """Held components are set."""
        return components.mask(self.values.group("hold"))

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """What is added comes at the stream's own temperature and pressure."""
        return [("takes", what)]

    def calculate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give the stream with the held flows set."""
        stream = inlets["takes"]
        held = self._held(self.around.components)
        values = {place: np.asarray(numbers[key]) for place, key in held.items()}
        kind = complex if any(value.dtype.kind == "c" for value in values.values()) else stream.state.dtype
        shape = np.broadcast_shapes(stream.state.shape[:-1], *(value.shape for value in values.values()))
        state = np.empty((*shape, stream.state.shape[-1]), dtype=kind)
        state[:] = stream.state
        for place, value in values.items():
            state[..., place] = value
        return {"gives": Stream(state, stream.phase)}

    def added(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers) -> np.ndarray:
        """Give what is added, (..., C) mol/s; negative for what would have to be taken out."""
        return outlets["gives"].flows - inlets["takes"].flows

    def results(
        self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping
    ) -> dict[str, Any]:
        """Give the flows added."""
        added = self.added(inlets, outlets, numbers)
        held = self._held(self.around.components)
        names = self.around.components.names
        return {"results": {"added_mol_s": {names[place]: added[..., place] for place in held}}}

    def cautions(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping) -> list[str]:
        """Say where a held component comes in excess."""
        added, flows = self.added(inlets, outlets, numbers), outlets["gives"].flows
        names = self.around.components.names
        return [
            f"Make-up {self.name}: more {names[place]} arrives than is held, so that it accumulates; "
            "a negative make-up stands for what has to be taken out."
            for place in self._held(self.around.components)
            if np.any(added[:, place] < -1e-9 * flows[:, place])
        ]
