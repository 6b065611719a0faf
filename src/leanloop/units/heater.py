"""Heater: brings a stream to a temperature, or gives it a duty."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.entries import Context, Entry, near
from leanloop.flash.mixture import Mixture
from leanloop.flash.solve import at_temperature
from leanloop.stream import TWO_PHASE, Stream
from leanloop.units import heating
from leanloop.units.base import Inlet, Numbers, Scene, Surroundings, Unit
from leanloop.units.warmth import heat_addresses, heat_flow, mixture_of, need_heat, temperature_at, two_phase


class Heater(Unit):
    """Brings a stream to a temperature, or gives it a duty; flashed with `equilibrium`, else its phase stays."""

    kind = "heater"
    entries = (
        Entry("takes", "inlet", required=True, doc="the stream to bring to temperature"),
        Entry("gives", "outlet", required=True, doc="the same stream at its new temperature"),
        Entry("temperature", "temperature", doc="temperature of the outlet"),
        Entry("duty", "power", doc="heat into the stream, negative for a cooler; instead of temperature"),
        Entry("equilibrium", "equilibrium", doc="name of an equilibrium table, for an outlet of gas and liquid"),
        Entry("pressure_drop", "pressure", least=0.0, doc="from inlet to outlet"),
    )
    warms = True
    flashes: Mixture | None = None
    knows = False

    @classmethod
    def examples(cls) -> list[Scene]:
        """Give a liquid brought to a temperature; gas and liquid given duties; a wet gas and a liquid that boils, flashed."""
        brine = Inlet("liquid", {"water": [2.0, 1.0], "salt": [0.1, 0.0]}, [300.0, 320.0], [1e5, 2e5])
        data = {
            "air": {"gas_heat_capacity": {"polynomial": [28.0, 3e-3], "temperature": "K", "unit": "J/(mol K)"}},
            "water": {"gas_heat_capacity": 33.6, "liquid_heat_capacity": 75.3, "heat_of_vaporisation": {"value": 4.4e4}},
            "salt": {"liquid_heat_capacity": 120.0},
        }
        boiling = {"form": "antoine", "A": 5.19621, "B": 1730.63, "C": 233.426, "pressure": "bar", "temperature": "degC"}
        here = {"here": {"water": {"model": "raoult", "vapour_pressure": boiling}}}
        stays = {"air": {"stays_in": "gas"}, "salt": {"stays_in": "liquid"}, "water": {}}
        way = {"takes": "before", "gives": "after"}
        wet = Inlet("gas", {"air": [2.0, 1.0], "water": [1.5, 2.0]}, [380.0, 400.0], [1e5, 1.2e5])
        hot = Inlet("liquid", {"water": [2.0, 3.0], "salt": [0.1, 0.0]}, [365.0, 360.0], [1e5, 2e5])
        mixed = Inlet("two-phase", {"air": [0.5, 0.2], "water": [2.0, 1.0], "salt": [0.1, 0.3]}, [4e3, 9e3], [1e5, 1.5e5])
        sign = 1.0 if cls.warms else -1.0
        return [
            Scene({**way, "temperature": "37 degC"}, {"takes": brine}),
            Scene({**way, "temperature": 350.0, "pressure_drop": 2e4}, {"takes": brine}, stays, heat_data=data),
            Scene({**way, "duty": 5e3 * sign}, {"takes": brine}, stays, heat_data=data),
            Scene({**way, "duty": 3e3 * sign, "pressure_drop": 1e4}, {"takes": wet}, stays, heat_data=data),
            Scene({**way, "temperature": 340.0, "equilibrium": "here"}, {"takes": wet}, stays, here, heat_data=data),
            Scene({**way, "duty": 8e3 * sign, "equilibrium": "here"}, {"takes": hot}, stays, here, heat_data=data),
            Scene({**way, "temperature": 330.0, "equilibrium": "here"}, {"takes": mixed}, stays, here, heat_data=data),
        ]

    # --- reading and connecting

    def check(self, address: str, context: Context) -> None:
        """Temperature or duty, one of the two."""
        given = [key for key in ("temperature", "duty") if key in self.raw]
        if len(given) == 2:
            context.fault(f"{address}.duty", "stands beside temperature", "write one of the two")
        known = [entry.name for entry in self.entries]
        if not given and not any(key not in known and near(key, known) in ("temperature", "duty") for key in self.raw):
            context.fault(f"{address}.temperature", "entry is missing", 'add temperature = "26 degC", or a duty')

    @property
    def wants_heat(self) -> bool:
        """A duty is balanced, and what is flashed carries its enthalpy."""
        return "duty" in self.values.numbers or "equilibrium" in self.values.words

    def connect(self, around: Surroundings, context: Context) -> Unit:
        """Settle what is flashed and whether there are heat data of all that flows."""
        unit = super().connect(around, context)
        present, phase = around.present["takes"], around.phases["takes"]
        unit.flashes = mixture_of(unit, present, f"{self.kind} '{self.name}'", context)
        pairs = [(phase, present)]
        if "equilibrium" not in self.values.words:
            heating.refuse_two_phases(unit, "takes", "takes", context, "add equilibrium, the name of an equilibrium table")
        elif unit.flashes is not None:
            pairs += heating.parts(unit.flashes, present)
        wanted = heating.needs(pairs)
        unit.knows = need_heat(unit, wanted, context) if self.wants_heat else heating.knows_heat(around, wanted)
        return unit

    def addresses(self) -> dict[str, str]:
        """Own numbers, those of the heat data where there are any, and of the models where it is flashed."""
        own = super().addresses()
        if self.knows:
            own.update(heat_addresses(self))
        if self.flashes is not None:
            own.update(self.flashes.addresses())
        return own

    def phase(self, outlet: str, phases: Mapping[str, str]) -> str | None:
        """What is flashed may be of two phases, else the phase stays."""
        return TWO_PHASE if "equilibrium" in self.values.words else phases.get("takes")

    def mixture(self, outlet: str) -> Mixture | None:
        """What splits the outlet."""
        return self.flashes

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """The pressure is the inlet's; the temperature is given or follows from the duty; an enthalpy from either."""
        if what == "pressure":
            return [("takes", what)]
        if "duty" in self.values.numbers:
            return [("takes", "flows"), ("takes", "temperature")]
        return [("takes", "flows"), ("takes", "pressure")] if "equilibrium" in self.values.words else []

    # --- calculating

    def calculate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give the stream at the temperature asked for, or with the duty in it."""
        stream = inlets["takes"]
        pressure = stream.pressure
        if "pressure_drop" in numbers:
            pressure = pressure - numbers["pressure_drop"]
            pressure = np.where(np.real(pressure) > 0, pressure, np.nan)
        if "duty" in numbers:
            empty = np.real(stream.total) == 0
            energy = heat_flow(stream, self.around.heat, numbers) + np.where(empty, 0.0, numbers["duty"])
            if self.flashes is not None:
                return {"gives": two_phase(stream.flows, energy, pressure)}
            temperature = temperature_at(self.around.heat, stream.phase, stream.flows, energy, numbers, stream.temperature)
        elif self.flashes is not None:
            split = at_temperature(self.flashes, stream.flows, numbers["temperature"], pressure, numbers)
            energy = self.flashes.enthalpy(split.gas, split.liquid, split.temperature, numbers)
            return {"gives": two_phase(stream.flows, energy, pressure)}
        else:
            temperature = numbers["temperature"]
        if "pressure_drop" not in numbers:
            return {"gives": stream.at(temperature)}
        return {"gives": Stream.of(stream.flows, temperature, pressure, stream.phase)}

    # --- reporting

    def results(self, inlets: Mapping, outlets: Mapping, numbers: Numbers, memory: Mapping) -> dict[str, Any]:
        """Give the duty, None where heat data of what flows are lacking."""
        if not self.knows:
            return {"results": {"duty_W": None}}
        flow = [heat_flow(side[label], self.around.heat, numbers) for side, label in ((outlets, "gives"), (inlets, "takes"))]
        return {"results": {"duty_W": flow[0] - flow[1]}}

    def off_table(self, inlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping[str, np.ndarray]) -> np.ndarray:
        """Tell in which cases the outlet leaves an equilibrium table, (M,) bool."""
        if self.flashes is None:
            return heating.off_table(None, inlets["takes"], numbers)
        return heating.off_table(self.flashes, self.calculate(inlets, numbers)["gives"], numbers)

    def cautions(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping) -> list[str]:
        """Say when a heater cools, or a cooler heats, and where heat data leave their range."""
        given = "duty" if "duty" in numbers else "temperature"
        if given == "duty":
            rise, least = np.asarray(numbers["duty"]), 0.0
        elif self.flashes is not None:
            rise, least = self.results(inlets, outlets, numbers, memory)["results"]["duty_W"], 1.0 * inlets["takes"].total
        else:
            rise, least = outlets["gives"].temperature - inlets["takes"].temperature, 0.01
        found = []
        if ((rise < -least) if self.warms else (rise > least)).any():
            does = "cools" if self.warms else "heats"
            found.append(f"{self.kind.capitalize()} {self.name} {does} its stream: check its {given}.")
        return found + (heating.range_cautions(self, [inlets["takes"], outlets["gives"]]) if self.knows else [])
