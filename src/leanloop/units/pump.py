"""Pump: raises the pressure of a liquid."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.entries import Context, Entry
from leanloop.stream import TWO_PHASE, Flashed, Stream
from leanloop.units.base import Inlet, Numbers, Scene, Surroundings, Unit
from leanloop.units.joining import heat_cautions, knows_heat, present_in
from leanloop.units.pressure_change import USUAL_EFFICIENCY, PressureChange, entries_of
from leanloop.units.warmth import heat_addresses, heat_flow, temperature_at


class Pump(PressureChange):
    """Raises the pressure of a liquid; the power is volume flow times pressure rise over the efficiency.

    Enthalpies here do not depend on pressure, so all of the power warms the liquid and the energy balance closes;
    in truth only the part lost in the pump does. Without heat data the temperature stays; without a density or a
    molar volume the power is not known either.
    """

    kind = "pump"
    entries = (
        *entries_of("pressure_rise", "from inlet to outlet"),
        Entry("efficiency", "number", above=0.0, most=1.0, doc="useful part of the power; 0.7 by default, common practice"),
        Entry("density", "density", above=0.0, doc="of the liquid, for the power"),
        Entry("molar_volume", "molar volume", above=0.0, doc="of the liquid, instead of density"),
    )
    knows = False

    @classmethod
    def examples(cls) -> list[Scene]:
        """Give a pump of known density with and without heat data, one without a volume, and one behind a condenser."""
        ports = {"takes": "low", "gives": "high"}
        brine = Inlet("liquid", {"water": [20.0, 10.0], "salt": [1.0, 0.0]}, [300.0, 320.0], [1e5, 2e5])
        boiled = Inlet("two-phase", {"water": [20.0, 10.0], "salt": [1.0, 0.0]}, [2e3, 3e3], [1e5, 2e5])
        masses = {"water": {"molar_mass": 0.018015}, "salt": {"molar_mass": 0.05844, "stays_in": "liquid"}}
        heat = {"water": {"liquid_heat_capacity": 75.3}, "salt": {"liquid_heat_capacity": 60.0}}
        mass, volume = {"density": "1010 kg/m3"}, {"molar_volume": "18.1 cm3/mol"}
        return [
            Scene({**ports, **mass, "pressure": "40 bar", "efficiency": 0.6}, {"takes": brine}, masses, heat_data=heat),
            Scene({**ports, **volume, "pressure_rise": "60 bar"}, {"takes": brine}, masses),
            Scene({**ports, "pressure": "12 bar"}, {"takes": brine}, masses),
            Scene({**ports, **mass, "pressure_rise": "50 bar"}, {"takes": boiled}, masses, heat_data=heat),
        ]

    def check(self, address: str, context: Context) -> None:
        """One volume is enough."""
        super().check(address, context)
        if "density" in self.raw and "molar_volume" in self.raw:
            context.fault(f"{address}.molar_volume", "stands beside density", "keep one of the two")

    def connect(self, around: Surroundings, context: Context) -> Unit:
        """A gas cannot be pumped, and a density needs molar masses."""
        unit = super().connect(around, context)
        present, components = present_in(unit), around.components
        if around.phases.get("takes") == "gas":
            problem = f"stream '{self.inlets['takes']}' is gas"
            context.fault(f"units.{self.name}.takes", problem, 'connect a liquid stream, or write kind = "blower"')
        if "density" in self.values.numbers:
            for place in np.flatnonzero(present & np.isnan(components.molar_masses)):
                name = components.names[place]
                problem = f"pump '{self.name}' has a density and '{name}' has no molar mass"
                context.fault(f"components.{name}.molar_mass", problem, "add molar_mass, or give molar_volume at the pump")
        unit.knows = around.phases.get("takes") != TWO_PHASE and knows_heat(unit, {"liquid": present})
        return unit

    @property
    def _powered(self) -> bool:
        return bool({"density", "molar_volume"} & set(self.values.numbers))

    def addresses(self) -> dict[str, str]:
        """Own numbers, and those of the heat data where they are known."""
        return {**super().addresses(), **(heat_addresses(self) if self.knows else {})}

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """A liquid that is warmed leans on all of its inlet."""
        if what == "temperature" and self._powered:
            return [("takes", part) for part in ("flows", "temperature", "pressure")]
        return super().leans_on(outlet, what)

    def power(self, stream: Stream, numbers: Numbers) -> np.ndarray | None:
        """Give the power, (...,) W; None without a volume, 0 where the pressure does not rise."""
        if "molar_volume" in numbers:
            volume = stream.total * numbers["molar_volume"]
        elif "density" in numbers:
            volume = (stream.flows * np.nan_to_num(self.around.components.molar_masses)).sum(axis=-1) / numbers["density"]
        else:
            return None
        rise = self.pressure_out(stream, numbers) - stream.pressure
        rise = np.where(np.real(rise) < 0, 0.0, rise)
        return volume * rise / numbers.get("efficiency", USUAL_EFFICIENCY)

    def calculate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give the liquid at its new pressure, warmed by the power where heat data are known."""
        stream = inlets["takes"]
        pressure, power = self.pressure_out(stream, numbers), self.power(stream, numbers)
        place = stream.state[..., -2]
        if power is not None and stream.phase == TWO_PHASE:
            total = stream.total
            place = place + power / np.where(total == 0, 1.0, total)
        elif power is not None and self.knows:
            energy = heat_flow(stream, self.around.heat, numbers) + power
            place = temperature_at(self.around.heat, "liquid", stream.flows, energy, numbers, stream.temperature)
        return {"gives": Stream.of(stream.flows, place, pressure, stream.phase)}

    def results(
        self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping
    ) -> dict[str, Any]:
        """Give the power into the pump; not known without a density or a molar volume."""
        return {"results": {"power_W": self.power(inlets["takes"], numbers)}}

    def cautions(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping) -> list[str]:
        """Say what is not known, and where a pump is the wrong machine."""
        found, stream, head = [], inlets["takes"], f"Pump {self.name}"
        if self.wrong_way(inlets, outlets, rises=True):
            found.append(f"{head}: its pressure is below that of its inlet; a valve is needed, no power is counted.")
        if not self._powered:
            found.append(f"{head}: without density or molar_volume its power is not known and its liquid is not warmed.")
        elif not self.knows and stream.phase != TWO_PHASE:
            found.append(f"{head}: without heat data of its liquid the temperature stays, whatever the power.")
        if isinstance(stream, Flashed) and np.any(stream.gas_fraction > 0):
            found.append(f"{head}: there is gas in what it is fed; a pump needs a liquid.")
        return found + (heat_cautions(self, "Pump", {**inlets, **outlets}) if self.knows else [])
