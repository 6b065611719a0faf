"""Flash drum: splits what it is fed into a gas and a liquid in equilibrium."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.components import Components
from leanloop.entries import Context, Entry
from leanloop.flash.mixture import Mixture
from leanloop.flash.solve import GUESS, Split, at_enthalpy, at_temperature
from leanloop.stream import TWO_PHASE, Stream, divide
from leanloop.units.base import Inlet, Numbers, Scene, Surroundings, Unit
from leanloop.units.joining import (
    all_flows,
    drum_pressure,
    heat_cautions,
    heat_in,
    knows_heat,
    phases_with_heat,
    present_in,
    pressure_caution,
    stays,
)
from leanloop.units.warmth import heat_flow, mixture_of, need_heat


class FlashDrum(Unit):
    """Brings its inlets to equilibrium at a temperature, or with a given heat input, and separates the phases.

    With `temperature` the duty follows; it is unknown where heat data lack. Without it the drum is adiabatic, or
    takes `duty`.
    """

    kind = "flash_drum"
    conserves = True
    entries = (
        Entry("takes", "inlet", required=True, many=True, doc="one stream or several: gas, liquid or two-phase"),
        Entry("gas_out", "outlet", required=True, doc="the gas"),
        Entry("liquid_out", "outlet", required=True, doc="the liquid"),
        Entry("equilibrium", "equilibrium", required=True, doc="name of an equilibrium table"),
        Entry("temperature", "temperature", doc="of both outlets; without it heat is balanced"),
        Entry("pressure", "pressure", above=0.0, doc="of both outlets; the lowest of the inlets by default"),
        Entry("duty", "power", doc="heat into the drum, instead of temperature; none by default"),
    )
    mix: Mixture | None = None
    knows = False

    @classmethod
    def examples(cls) -> list[Scene]:
        """Give drums at a temperature with and without heat data, an adiabatic one, and one with a duty."""
        ports = {"gas_out": "over", "liquid_out": "under", "equilibrium": "here"}
        wet = Inlet("gas", {"air": [2.0, 3.0], "water": [1.0, 0.6], "oil": [0.0, 0.1]}, [380.0, 370.0], [1.4e5, 2e5])
        sump = Inlet("liquid", {"water": [1.0, 2.0], "oil": [0.2, 0.0], "tar": [0.1, 0.2]}, [330.0, 320.0], [1.2e5, 3e5])
        mixed = Inlet("two-phase", {"air": [0.5, 1.0], "water": [2.0, 1.0], "tar": [0.0, 0.1]}, [8e3, 1.5e4], [1.6e5, 1.3e5])
        hot = Inlet("liquid", {"water": [2.0, 1.0], "oil": [0.3, 0.5], "tar": [0.1, 0.2]}, [420.0, 410.0], 8e5)
        return [
            Scene({"takes": "wet", **ports, "temperature": "40 degC"}, {"wet": wet}, SPECIES, EQUILIBRIUM),
            Scene(
                {"takes": ["wet", "sump"], **ports, "temperature": "45 degC", "pressure": "1.1 bar"},
                {"wet": wet, "sump": sump}, SPECIES, EQUILIBRIUM, heat_data=HEAT,
            ),
            Scene({"takes": ["sump", "mixed"], **ports}, {"sump": sump, "mixed": mixed}, SPECIES, EQUILIBRIUM, heat_data=HEAT),
            Scene({"takes": "hot", **ports, "pressure": "1.5 bar"}, {"hot": hot}, SPECIES, EQUILIBRIUM, heat_data=HEAT),
            Scene({"takes": "wet", **ports, "duty": "-40 kW"}, {"wet": wet}, SPECIES, EQUILIBRIUM, heat_data=HEAT),
        ]  # fmt: skip

    # --- reading and connecting

    def check(self, address: str, context: Context) -> None:
        """A temperature and a duty are not given both."""
        if "temperature" in self.raw and "duty" in self.raw:
            context.fault(f"{address}.duty", "stands beside temperature", "keep one of the two")

    @property
    def wants_heat(self) -> bool:
        """Heat is balanced where no temperature is given."""
        return "temperature" not in self.values.numbers

    def connect(self, around: Surroundings, context: Context) -> Unit:
        """Find the mixture, and the heat data that are needed or known."""
        unit = super().connect(around, context)
        table = around.conditions.get(self.values.words.get("equilibrium"))
        if table is None:
            return unit
        unit.mix = mixture_of(unit, present_in(unit), f"flash drum '{self.name}'", context)
        phases = phases_with_heat(unit, *stays(unit, table))
        unit.knows = need_heat(unit, phases, context) if self.wants_heat else knows_heat(unit, phases)
        return unit

    def addresses(self) -> dict[str, str]:
        """Own numbers, those of the models by ``component.number``, and of the heat data where they are known."""
        return {**super().addresses(), **(self.mix.addresses() if self.mix is not None else {})}

    # --- what the engine may know without calculating

    def phase(self, outlet: str, phases: Mapping[str, str]) -> str:
        """Ports are named after their phase."""
        return outlet.partition("_")[0]

    def passes(self, inlet: str, outlet: str, components: Components, numbers: Numbers | None = None) -> np.ndarray:
        """A component that stays in one phase leaves with that phase alone."""
        table = self.tables.get(self.values.words.get("equilibrium"))
        other = "liquid" if outlet == "gas_out" else "gas"
        found = [item.stays_in if table is None else table.stays_in(item.name, components) for item in components]
        return np.array([phase != other for phase in found], dtype=bool)

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """What is given leans on nothing; the pressure else on pressures, the temperature on everything."""
        if what in self.values.numbers:
            return []
        if what == "pressure":
            return [(inlet, "pressure") for inlet in self.inlets]
        return super().leans_on(outlet, what)

    # --- calculating

    def _split(self, inlets: Mapping[str, Stream], numbers: Numbers) -> Split:
        flows, pressure = all_flows(inlets), drum_pressure(inlets, numbers)
        if "temperature" in numbers:
            return at_temperature(self.mix, flows, numbers["temperature"], pressure, numbers)
        energy = heat_in(self, inlets, numbers) + numbers.get("duty", 0.0)
        known = [stream.temperature for stream in inlets.values() if stream.phase != TWO_PHASE]
        return at_enthalpy(self.mix, flows, energy, pressure, numbers, known[0] if known else GUESS)

    def calculate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give gas and liquid in equilibrium."""
        split = self._split(inlets, numbers)
        return {
            "gas_out": Stream.of(split.gas, split.temperature, split.pressure, "gas"),
            "liquid_out": Stream.of(split.liquid, split.temperature, split.pressure, "liquid"),
        }

    # --- reporting

    def off_table(self, inlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping[str, np.ndarray]) -> np.ndarray:
        """Tell which cases use a model off its table, (M,) bool."""
        return self._split(inlets, numbers).off_table

    def results(
        self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping
    ) -> dict[str, Any]:
        """Give the duty, not known without heat data, and mol of gas per mol fed."""
        gas, liquid = outlets["gas_out"].total, outlets["liquid_out"].total
        duty = None
        if self.knows:
            duty = sum(heat_flow(stream, self.around.heat, numbers) for stream in outlets.values())
            duty = duty - heat_in(self, inlets, numbers)
            if "temperature" not in numbers:
                duty = np.zeros_like(duty) + numbers.get("duty", 0.0)
        return {"results": {"duty_W": duty, "vapour_fraction": divide(gas, gas + liquid)}}

    def cautions(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping) -> list[str]:
        """Say where a pressure is too low, and where models or heat data are used outside their range."""
        head = f"Flash drum {self.name}"
        gas, liquid = outlets["gas_out"], outlets["liquid_out"]
        found = pressure_caution(self, "Flash drum", inlets, gas.pressure)
        ratios, fractions = liquid.ratios(self.mix.liquid_basis), liquid.fractions
        for place, model in zip(self.mix.places, self.mix.models, strict=True):
            amount = np.nan_to_num((ratios if model.coordinates == "ratio" else fractions)[..., place])
            name = self.around.components.names[place]
            met = gas.flows[..., place] + liquid.flows[..., place] > 0
            if met.any():
                said = model.cautions(gas.temperature[met], gas.pressure[met], amount[met])
                found += [f"{head}, {name}: {sentence}." for sentence in said]
        return found + (heat_cautions(self, "Flash drum", {**inlets, **outlets}) if self.knows else [])


_BOILING = {"form": "antoine", "A": 5.19621, "B": 1730.63, "C": 233.426, "pressure": "bar", "temperature": "degC"}
SPECIES = {"air": {"stays_in": "gas"}, "tar": {"stays_in": "liquid"}, "water": {}, "oil": {}}
EQUILIBRIUM = {
    "here": {
        "water": {"model": "raoult", "vapour_pressure": _BOILING},
        "oil": {"model": "polynomial", "K": [-3.0, 0.0105], "pressure": "1 bar"},
    }
}
HEAT = {
    "air": {"gas_heat_capacity": 29.1, "liquid_heat_capacity": 29.1},
    "water": {"gas_heat_capacity": 33.6, "liquid_heat_capacity": 75.3, "heat_of_vaporisation": {"value": 4.4e4, "at": 298.15}},
    "oil": {"gas_heat_capacity": 120.0, "liquid_heat_capacity": 160.0, "heat_of_vaporisation": {"value": 3.6e4, "at": 320.0}},
    "tar": {"liquid_heat_capacity": 300.0},
}
