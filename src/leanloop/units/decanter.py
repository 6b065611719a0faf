"""Decanter: separates a gas and two liquids that do not mix, an organic one and water."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.components import Components
from leanloop.entries import Context, Entry
from leanloop.equilibrium.water import is_water
from leanloop.flash.mixture import Mixture
from leanloop.stream import Stream, divide
from leanloop.units.base import Inlet, Numbers, Scene, Surroundings, Unit
from leanloop.units.decanter_split import three_phases
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
from leanloop.units.warmth import heat_flow, mixture_of

OUTLETS = ("gas_out", "organic_out", "water_out")


class Decanter(Unit):
    """Separates what it is fed at a temperature into gas, organic liquid and water.

    Each liquid is ideal by itself and has its own vapour pressure: the partial pressure of a component is that over its
    own liquid, whatever the other one holds. A component of given `solubility` s dissolves in the other liquid with s
    times its mole fraction in its own. Any of the three phases may be absent, and then nothing leaves there. Components
    that stay in the gas do not dissolve.
    """

    kind = "decanter"
    shuts = True
    conserves = True
    entries = (
        Entry("takes", "inlet", required=True, many=True, doc="one stream or several: gas, liquid or two-phase"),
        Entry("gas_out", "outlet", required=True, doc="the gas"),
        Entry("organic_out", "outlet", required=True, doc="the organic liquid"),
        Entry("water_out", "outlet", required=True, doc="the water"),
        Entry("equilibrium", "equilibrium", required=True, doc="name of an equilibrium table: each component over its own liquid"),
        Entry("temperature", "temperature", required=True, doc="of all outlets"),
        Entry("pressure", "pressure", above=0.0, doc="of all outlets; the lowest of the inlets by default"),
        Entry("aqueous", "component", many=True, doc="components whose own liquid is the water; by default water alone"),
        Entry(
            "solubility", "number", by="component", least=0.0, below=1.0,
            doc="mole fraction in the other liquid, beside its own liquid pure; 0 by default",
        ),
    )  # fmt: skip
    mix: Mixture | None = None
    knows = False

    @classmethod
    def examples(cls) -> list[Scene]:
        """Give three phases with traces, two liquids and no gas, a gas and one liquid, and a gas alone."""
        ports = {"takes": "cold", **dict(zip(OUTLETS, ("vent", "oil", "sour"), strict=True)), "equilibrium": "two"}
        both = {"water": [2.0, 3.0], "light": [1.0, 0.5], "heavy": [0.4, 0.9]}
        traces = {"solubility": {"light": 4e-4, "water": 2.5e-3, "heavy": 1e-5}}
        vented = Inlet("gas", {"air": [0.3, 0.5], **both, "tar": [0.0, 0.1]}, [350.0, 360.0], [1.1e5, 1.3e5])
        salted = {"aqueous": ["water", "salt"], **traces}
        brine = Inlet("liquid", {"salt": [0.2, 0.1], **both}, [330.0, 320.0], [2.5e5, 3e5])
        mixed = Inlet("two-phase", both, [1.4e4, 1.6e4], 2e5)
        dry = Inlet("gas", {"air": [0.3, 0.5], "water": [0.02, 0.03], "light": [1.0, 0.5], "heavy": [0.4, 0.9]}, 360.0, 1.2e5)
        lots = {"takes": ["cold", "brine"], "temperature": "30 degC", "pressure": "1.05 bar", **salted}
        data = {"components": SPECIES, "equilibrium": EQUILIBRIUM}
        return [
            Scene({**ports, **traces, "temperature": "35 degC"}, {"cold": vented}, **data, heat_data=HEAT),
            Scene({**ports, **lots}, {"cold": vented, "brine": brine}, **data),
            Scene({**ports, **salted, "temperature": "25 degC"}, {"cold": brine}, **data, heat_data=HEAT),
            Scene({**ports, "temperature": "45 degC"}, {"cold": dry}, **data),
            Scene({**ports, **traces, "temperature": "140 degC"}, {"cold": mixed}, **data, heat_data=HEAT),
        ]

    # --- connecting

    @property
    def _aqueous_words(self) -> tuple[str, ...] | None:
        return self.values.words.get("aqueous")

    def _is_aqueous(self, components: Components) -> np.ndarray:
        """Tell which components have the water for their own liquid, (C,) bool."""
        named = self._aqueous_words
        return np.array([is_water(name) if named is None else name in named for name in components.names], dtype=bool)

    def connect(self, around: Surroundings, context: Context) -> Unit:
        """Find the models, which must not depend on the liquid, and what is known of the heat."""
        unit = super().connect(around, context)
        address, components = f"units.{self.name}", around.components
        table = around.conditions.get(self.values.words.get("equilibrium"))
        if table is None:
            return unit
        present = present_in(unit)
        unit.stays_gas, unit.stays_liquid = stays(unit, table)
        unit.aqueous = self._is_aqueous(components)
        if not (unit.aqueous & present & ~unit.stays_gas).any():
            problem = f"nothing that reaches decanter '{self.name}' condenses as water"
            remedy = 'name what does, aqueous = ["water"], or use a flash_drum'
            context.fault(f"{address}.aqueous", problem, remedy)
        for head, names in (("aqueous", self._aqueous_words or ()), ("solubility", self.values.group("solubility"))):
            for name in names:
                if unit.stays_gas[components.index[name]]:
                    remedy = "leave it out, or give it a model in the table"
                    context.fault(f"{address}.{head}", f"'{name}' stays in the gas", remedy)
        unit.mix = mixture_of(unit, present, f"decanter '{self.name}'", context)
        for name, model in zip(unit.mix.names, unit.mix.models, strict=True) if unit.mix is not None else ():
            if not hasattr(model, "k") or model.coordinates != "fraction":
                problem = f"'{name}' is given at decanter '{self.name}' by a ratio that depends on the liquid, or in mole ratios"
                remedy = "give its vapour pressure by raoult, or K in mole fractions"
                context.fault(f"equilibrium.{table.name}.{name}", problem, remedy)
        unit.knows = knows_heat(unit, phases_with_heat(unit, unit.stays_gas, unit.stays_liquid))
        return unit

    def addresses(self) -> dict[str, str]:
        """Own numbers, those of the models by ``component.number``, and of the heat data."""
        return {**super().addresses(), **(self.mix.addresses() if self.mix is not None else {})}

    # --- what the engine may know without calculating

    def phase(self, outlet: str, phases: Mapping[str, str]) -> str:
        """Two of the three are liquid."""
        return "gas" if outlet == "gas_out" else "liquid"

    def passes(self, inlet: str, outlet: str, components: Components, numbers: Numbers | None = None) -> np.ndarray:
        """A component gets to the gas unless it stays in the liquid, and to the other liquid where it dissolves."""
        table = self.tables.get(self.values.words.get("equilibrium"))
        found = [item.stays_in if table is None else table.stays_in(item.name, components) for item in components]
        if outlet == "gas_out":
            return np.array([phase != "liquid" for phase in found], dtype=bool)
        own = self._is_aqueous(components) == (outlet == "water_out")
        named = self.values.group("solubility")
        ways = [own | components.mask(named)]
        if numbers is not None:
            ways = [np.asarray(np.real(numbers.get(f"solubility.{name}", 0.0))) > 0 for name in components.names]
            ways = [np.stack(np.broadcast_arrays(*ways), axis=-1) | own]
        return ways[0] & np.array([phase != "gas" for phase in found], dtype=bool)

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """The temperature is given, and the pressure, or it is the lowest of the inlets."""
        return [] if what in self.values.numbers else [(inlet, "pressure") for inlet in self.inlets]

    # --- calculating

    def _factors(self, temperature: Any, pressure: Any, numbers: Numbers) -> np.ndarray:
        """Give mole fractions in gas, organic liquid and water over that in the own liquid, (..., C, 3)."""
        mixture, names = self.mix, self.around.components.names
        ratios = {
            place: model.k(temperature, pressure, own)
            for place, model, own in zip(mixture.places, mixture.models, mixture.model_numbers(numbers), strict=True)
        }
        one, zero = np.ones(()), np.zeros(())
        rows = []
        for place, name in enumerate(names):
            if self.stays_gas[place]:
                rows.append((one, zero, zero))
                continue
            trace = numbers.get(f"solubility.{name}", zero)
            liquids = (trace, one) if self.aqueous[place] else (one, trace)
            rows.append((ratios.get(place, zero), *liquids))
        flat = np.broadcast_arrays(*(np.asarray(item) for row in rows for item in row))
        return np.stack(flat, axis=-1).reshape(*flat[0].shape, len(names), 3)

    def calculate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give gas and both liquids in equilibrium."""
        temperature, pressure = np.asarray(numbers["temperature"]), drum_pressure(inlets, numbers)
        parts = three_phases(all_flows(inlets), self._factors(temperature, pressure, numbers))
        return {
            label: Stream.of(parts[..., place], temperature, pressure, self.phase(label, {}))
            for place, label in enumerate(OUTLETS)
        }

    # --- reporting

    def off_table(self, inlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping[str, np.ndarray]) -> np.ndarray:
        """Tell which cases use a model off its table, (M,) bool."""
        flows, pressure = all_flows(inlets), drum_pressure(inlets, numbers)
        found = np.zeros(flows.shape[:-1], dtype=bool)
        mixture = self.mix
        for place, model, own in zip(mixture.places, mixture.models, mixture.model_numbers(numbers), strict=True):
            found |= model.outside(numbers["temperature"], pressure, np.zeros(found.shape), own) & (flows[..., place] > 0)
        return found

    def results(
        self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping
    ) -> dict[str, Any]:
        """Give the duty, not known without heat data, and the moles of each phase per mol fed, 0 where it is absent."""
        totals = {label: outlets[label].total for label in OUTLETS}
        whole = sum(totals.values())
        duty = None
        if self.knows:
            duty = sum(heat_flow(outlets[label], self.around.heat, numbers) for label in OUTLETS) - heat_in(self, inlets, numbers)
        keys = ("vapour_fraction", "organic_fraction", "water_fraction")
        shares = {key: divide(totals[label], whole) for key, label in zip(keys, OUTLETS, strict=True)}
        return {"results": {"duty_W": duty, **shares}}

    def cautions(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping) -> list[str]:
        """Say where a liquid is absent, a pressure too low, or where models or heat data are used outside their range."""
        head, gas = f"Decanter {self.name}", outlets["gas_out"]
        found = pressure_caution(self, "Decanter", inlets, gas.pressure)
        fed = all_flows(inlets)
        for label, what in (("organic_out", "organic liquid"), ("water_out", "water")):
            if np.any((outlets[label].total == 0) & (fed.sum(axis=-1) > 0)):
                found.append(f"{head}: no {what} separates.")
        for name, place, model in zip(self.mix.names, self.mix.places, self.mix.models, strict=True):
            met = fed[..., place] > 0
            if met.any():
                temperature, pressure = (np.broadcast_to(item, met.shape)[met] for item in (gas.temperature, gas.pressure))
                found += [f"{head}, {name}: {said}." for said in model.cautions(temperature, pressure, np.ones(temperature.shape))]
        return found + (heat_cautions(self, "Decanter", {**inlets, **outlets}) if self.knows else [])


def _boils(a: float, b: float, c: float) -> dict[str, Any]:
    form = {"form": "antoine", "A": a, "B": b, "C": c, "pressure": "bar", "temperature": "degC"}
    return {"model": "raoult", "vapour_pressure": form}


SPECIES = {
    "air": {"stays_in": "gas"}, "tar": {"stays_in": "liquid"}, "salt": {"stays_in": "liquid"},
    "light": {}, "heavy": {}, "water": {},
}  # fmt: skip
EQUILIBRIUM = {
    "two": {"water": _boils(5.19621, 1730.63, 233.426), "light": _boils(4.01, 1203.8, 219.9), "heavy": _boils(4.08, 1346.4, 219.7)}
}
HEAT = {
    "air": {"gas_heat_capacity": 29.1},
    "water": {"gas_heat_capacity": 33.6, "liquid_heat_capacity": 75.3, "heat_of_vaporisation": {"value": 4.4e4, "at": 298.15}},
    "light": {"gas_heat_capacity": 90.0, "liquid_heat_capacity": 136.0, "heat_of_vaporisation": {"value": 3.38e4, "at": 298.15}},
    "heavy": {"gas_heat_capacity": 110.0, "liquid_heat_capacity": 157.0, "heat_of_vaporisation": {"value": 3.8e4, "at": 298.15}},
    "tar": {"liquid_heat_capacity": 300.0},
    "salt": {"liquid_heat_capacity": 80.0},
}
