"""Make-up: holds the circulation of a solvent."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.components import Components
from leanloop.entries import Context, Entry
from leanloop.stream import Stream
from leanloop.units.base import Inlet, Numbers, Scene, Surroundings, Unit
from leanloop.units.heating import knows_heat, needs, range_cautions, refuse_two_phases
from leanloop.units.warmth import heat_addresses, heat_flow, temperature_at


class Makeup(Unit):
    """Sets the flow of held components by adding what is missing; less than nothing is a caution."""

    kind = "makeup"
    entries = (
        Entry("takes", "inlet", required=True, doc="the stream that has lost some of the held components"),
        Entry("gives", "outlet", required=True, doc="the stream with the held flows"),
        Entry("hold", "molar flow", required=True, by="component", least=0.0, doc="flow of each held component"),
        Entry("composition", "number", by="component", least=0.0, most=1.0, doc="mole fractions of what is added; pure by default"),
        Entry("temperature", "temperature", doc="of what is added; that of the stream by default"),
        Entry("pressure", "pressure", above=0.0, doc="of what is added; that of the stream by default"),
    )
    knows = False

    @classmethod
    def examples(cls) -> list[Scene]:
        """Give an oil that has lost some of its parts and won some of others, and an amine made up with water, also with heat."""
        lean = Inlet("liquid", {"oil": [1.5, 1.7], "light": [0.0, 0.2], "tar": [0.01, 0.0]}, [300.0, 310.0])
        amine = Inlet("liquid", {"amine": [1.0, 0.9], "water": [2.0, 3.0]}, 320.0, [1e5, 2e5])
        mixed = {"hold": {"amine": 1.2}, "composition": {"amine": 0.4, "water": 0.6}, "temperature": 300.0, "pressure": 1.4e5}
        data = {
            "amine": {"liquid_heat_capacity": {"polynomial": [90.0, 0.25], "temperature": "K", "unit": "J/(mol K)"}},
            "water": {"liquid_heat_capacity": 75.3},
        }
        return [
            Scene({"takes": "lean", "gives": "full", "hold": {"oil": 1.6, "light": 0.1}}, {"takes": lean}),
            Scene({"takes": "lean", "gives": "full", **mixed}, {"takes": amine}),
            Scene({"takes": "lean", "gives": "full", **mixed}, {"takes": amine}, heat_data=data),
        ]

    def check(self, address: str, context: Context) -> None:
        """Something is held; a composition is complete and goes with one held component."""
        hold = self.values.group("hold")
        if isinstance(self.raw.get("hold"), Mapping) and not self.raw["hold"]:
            context.fault(f"{address}.hold", "holds nothing", 'write hold = { solvent = "1.6 mol/s" }')
        raw = self.raw.get("composition")
        parts = self.values.group("composition")
        if raw is None or not isinstance(raw, Mapping) or len(parts) < len(raw):
            return
        if abs(sum(parts.values()) - 1.0) > 1e-6:
            context.fault(f"{address}.composition", f"the fractions sum to {sum(parts.values()):g}", "make them sum to 1")
        if len(hold) > 1:
            context.fault(f"{address}.composition", "several components are held", "hold one component, or leave composition out")
        for name in hold:
            if not parts.get(name):
                context.fault(f"{address}.composition", f"what is added holds no '{name}'", f"give '{name}' a fraction above 0")

    def connect(self, around: Surroundings, context: Context) -> Unit:
        """Settle whether there are heat data of what flows and of what is added; the stream is of one phase."""
        unit = super().connect(around, context)
        remedy = "separate it before, and make up the liquid"
        refuse_two_phases(unit, "takes", "takes", context, remedy)
        present = around.present["takes"] | self.adds(around.components)
        unit.knows = around.phases["takes"] in ("gas", "liquid") and knows_heat(around, needs([(around.phases["takes"], present)]))
        return unit

    def addresses(self) -> dict[str, str]:
        """Own numbers, and those of the heat data where heat is balanced."""
        return {**super().addresses(), **(heat_addresses(self) if self.knows else {})}

    def _held(self, components: Components) -> dict[int, str]:
        return {components.index[name]: f"hold.{name}" for name in self.values.group("hold")}

    def adds(self, components: Components) -> np.ndarray:
        """Held components are added, and what comes along with them."""
        return components.mask([*self.values.group("hold"), *self.values.group("composition")])

    def holds(self, components: Components) -> np.ndarray:
        """Held components are set."""
        return components.mask(self.values.group("hold"))

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """What is added comes at the stream's own temperature and pressure, unless given."""
        if what == "temperature" and what in self.values.numbers:
            return [("takes", "temperature"), ("takes", "flows")]
        return [("takes", what)]

    def _gives(self, stream: Stream, numbers: Numbers) -> list[Any]:
        """Give the outlet's flow of every component."""
        columns = [stream.flows[..., place] for place in range(stream.flows.shape[-1])]
        parts = self.values.group("composition")
        for place, key in self._held(self.around.components).items():
            wanted = np.asarray(numbers[key])
            if parts:
                held = self.around.components.names[place]
                amount = (wanted - columns[place]) / numbers[f"composition.{held}"]
                for name in parts:
                    other = self.around.components.index[name]
                    columns[other] = columns[other] + amount * numbers[f"composition.{name}"]
            columns[place] = wanted
        return columns

    def calculate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give the stream with the held flows set."""
        stream = inlets["takes"]
        columns = self._gives(stream, numbers)
        kind = complex if any(column.dtype.kind == "c" for column in columns) else float
        shape = np.broadcast_shapes(*(column.shape for column in columns))
        flows = np.empty((*shape, len(columns)), dtype=kind)
        for place, column in enumerate(columns):
            flows[..., place] = column
        temperature, pressure = stream.temperature, stream.pressure
        if "temperature" in numbers:  # by heat balance, or the molar mean, as in a mixer
            total = flows.sum(axis=-1)
            come = stream.total
            rest = total - come
            empty = total == 0
            mean = (come * temperature + rest * numbers["temperature"]) / np.where(empty, 1.0, total)
            own = temperature
            temperature = np.where(empty, temperature, mean)
            if self.knows:
                heat, phase = self.around.heat, stream.phase
                brought = self._heat_of(flows - stream.flows, numbers["temperature"], phase, numbers)
                energy = heat_flow(stream, heat, numbers) + brought
                temperature = temperature_at(heat, phase, flows, energy, numbers, temperature)
                temperature = np.where(empty, own, temperature)
        if "pressure" in numbers:
            own = np.asarray(numbers["pressure"])
            pressure = np.where(np.real(own) < np.real(pressure), own, pressure)
        return {"gives": Stream.of(flows, temperature, pressure, stream.phase)}

    def _heat_of(self, flows: np.ndarray, temperature: np.ndarray, phase: str, numbers: Numbers) -> np.ndarray:
        """Give the enthalpy flow of what is added, (...,) W; flows may be negative."""
        function = self.around.heat.gas if phase == "gas" else self.around.heat.liquid
        return (flows * function(np.asarray(temperature), numbers)).sum(axis=-1)

    def added_heat(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers) -> np.ndarray | None:
        """Give the enthalpy flow of what is added, at its own temperature, else the stream's, (...,) W; None without heat data."""
        if not self.knows:
            return None
        stream = inlets["takes"]
        temperature = numbers.get("temperature", stream.temperature)
        return self._heat_of(self.added(inlets, outlets, numbers), temperature, stream.phase, numbers)

    def added(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers) -> np.ndarray:
        """Give what is added, (..., C) mol/s; negative for what would have to be taken out."""
        return outlets["gives"].flows - inlets["takes"].flows

    def results(
        self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping
    ) -> dict[str, Any]:
        """Give the flows added."""
        added = self.added(inlets, outlets, numbers)
        components = self.around.components
        places = np.flatnonzero(self.adds(components))
        own = {components.names[place]: added[..., place] for place in places}
        groups = {name: added[..., components.places(name)].sum(axis=-1) for name in components.groups}
        return {"results": {"added_mol_s": own | groups}}

    def cautions(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping) -> list[str]:
        """Say where a held component comes in excess, and where a temperature is a mean."""
        added, flows = self.added(inlets, outlets, numbers), outlets["gives"].flows
        names = self.around.components.names
        found = [
            f"Make-up {self.name}: more {names[place]} arrives than is held, so that it accumulates; "
            "a negative make-up stands for what has to be taken out."
            for place in self._held(self.around.components)
            if np.any(added[:, place] < -1e-9 * flows[:, place])
        ]
        if self.knows:
            return found + range_cautions(self, [inlets["takes"], outlets["gives"]])
        if "temperature" in numbers and np.any(np.abs(numbers["temperature"] - inlets["takes"].temperature) > 0.5):
            found.append(f"Make-up {self.name}: the temperature of its outlet is a molar mean, not a heat balance.")
        return found
