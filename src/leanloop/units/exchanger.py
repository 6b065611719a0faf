"""Exchanger: a hot stream warms a cold one in counter-current."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.components import Components
from leanloop.entries import Context, Entry
from leanloop.flash.mixture import Mixture
from leanloop.stream import TWO_PHASE, Stream, divide
from leanloop.units import heating
from leanloop.units.base import Inlet, Numbers, Scene, Surroundings, Unit
from leanloop.units.exchanger_side import Side, levelled
from leanloop.units.exchanger_zones import Zones, of_area
from leanloop.units.warmth import heat_addresses, heat_flow, need_heat

WAYS = ("hot_end", "cold_end", "least")
SIDES = ("hot", "cold")
CROSSED = 1e-6  # K, less than this below zero is rounding
CAPACITY = 1e-8  # W for each mol/s, less duty than this is rounding
CLOSE = 3.0  # K, closer than this is rarely built: common practice, no source


class Exchanger(Unit):
    """Passes heat from a hot stream to a cold one in counter-current, by an approach, a UA or a duty.

    A side with an equilibrium table may flash, at the pressure of its outlet. Heat losses are none.
    """

    kind = "exchanger"
    draws_heat = ()
    entries = (
        Entry("hot_in", "inlet", required=True, doc="the stream that gives heat"),
        Entry("hot_out", "outlet", required=True, doc="the same, colder"),
        Entry("cold_in", "inlet", required=True, doc="the stream that takes heat up"),
        Entry("cold_out", "outlet", required=True, doc="the same, warmer"),
        Entry(
            "approach", "table", doc="temperature difference, hot less cold, one of its entries",
            nested=(
                Entry("hot_end", "temperature difference", above=0.0, doc="hot inlet less cold outlet"),
                Entry("cold_end", "temperature difference", above=0.0, doc="hot outlet less cold inlet"),
                Entry("least", "temperature difference", above=0.0, doc="the least anywhere, inside where a side flashes too"),
            ),
        ),
        Entry("UA", "heat transfer", least=0.0, doc="heat transfer coefficient times area, instead of approach"),
        Entry("duty", "power", least=0.0, doc="heat that the cold side gains, instead of approach"),
        Entry("hot_equilibrium", "equilibrium", doc="name of an equilibrium table, for a hot side that may flash"),
        Entry("cold_equilibrium", "equilibrium", doc="name of an equilibrium table, for a cold side that may flash"),
        Entry("hot_pressure_drop", "pressure", least=0.0, doc="of the hot side"),
        Entry("cold_pressure_drop", "pressure", least=0.0, doc="of the cold side"),
    )  # fmt: skip
    mixtures: Mapping[str, Mixture | None] = {"hot": None, "cold": None}

    @classmethod
    def examples(cls) -> list[Scene]:
        """Give two liquids by each way to state the size, and a gas that condenses against a liquid that boils."""
        ports = {"hot_in": "lean", "hot_out": "cooled", "cold_in": "rich", "cold_out": "warmed"}
        data = {
            "air": {"gas_heat_capacity": 29.1},
            "water": {"gas_heat_capacity": 33.6, "liquid_heat_capacity": 75.3, "heat_of_vaporisation": {"value": 4.4e4}},
            "solute": {
                "gas_heat_capacity": 60.0, "heat_of_vaporisation": {"value": 3.4e4},
                "liquid_heat_capacity": {"polynomial": [90.0, 0.2], "temperature": "K", "unit": "J/(mol K)"},
            },
            "oil": {"liquid_heat_capacity": {"polynomial": [200.0, 0.7], "temperature": "K", "unit": "J/(mol K)"}},
        }  # fmt: skip
        antoine = {"form": "antoine", "pressure": "bar", "temperature": "degC"}
        here = {
            "here": {
                "water": {"model": "raoult", "vapour_pressure": {**antoine, "A": 5.19621, "B": 1730.63, "C": 233.426}},
                "solute": {"model": "raoult", "vapour_pressure": {**antoine, "A": 4.07, "B": 1345.0, "C": 219.5}},
            }
        }
        stays = {"air": {"stays_in": "gas"}, "oil": {"stays_in": "liquid"}, "water": {}, "solute": {}}
        liquids = {
            "hot_in": Inlet("liquid", {"oil": [1.0, 2.0], "solute": [0.05, 0.0]}, [400.0, 390.0], [2e5, 3e5]),
            "cold_in": Inlet("liquid", {"oil": [1.5, 1.1], "solute": [0.2, 0.3]}, [300.0, 310.0], [4e5, 3e5]),
        }
        flashing = {
            "hot_in": Inlet("gas", {"air": [0.3, 0.1], "water": [1.5, 1.0]}, [420.0, 410.0], [3e5, 2.5e5]),
            "cold_in": Inlet("liquid", {"oil": [0.5, 0.3], "solute": [1.2, 0.9]}, [310.0, 320.0], [1.1e5, 1e5]),
        }
        condensing = {**flashing, "cold_in": Inlet("liquid", {"oil": [0.5, 0.3]}, [310.0, 320.0], [1.1e5, 1e5])}
        drops = {"hot_pressure_drop": 1e4, "cold_pressure_drop": 5e3}
        return [
            Scene({**ports, "approach": {"hot_end": 45.0}}, liquids, stays, heat_data=data),
            Scene({**ports, "approach": {"cold_end": 50.0}, **drops}, liquids, stays, heat_data=data),
            Scene({**ports, "approach": {"least": 8.0}}, liquids, stays, heat_data=data),
            Scene({**ports, "UA": 900.0}, liquids, stays, heat_data=data),
            Scene({**ports, "duty": 2.5e4}, liquids, stays, heat_data=data),
            Scene({**ports, "UA": 400.0, "hot_equilibrium": "here", **drops}, condensing, stays, here, heat_data=data),
            Scene({**ports, "approach": {"least": 5.0}, "hot_equilibrium": "here"}, condensing, stays, here, heat_data=data),
            Scene({**ports, "approach": {"cold_end": 60.0}, "cold_equilibrium": "here"}, flashing, stays, here, heat_data=data),
        ]

    # --- reading and connecting

    def check(self, address: str, context: Context) -> None:
        """Approach, UA or duty, one of them; the approach somewhere, once."""
        given = [key for key in ("approach", "UA", "duty") if key in self.raw]
        if len(given) != 1:
            problem = f"stands beside {' and '.join(given[1:])}" if given else "entry is missing"
            where = f"{address}.{given[0] if given else 'approach'}"
            context.fault(where, problem, 'give one of approach = { least = "10 K" }, UA, duty')
        table = self.raw.get("approach")
        if isinstance(table, Mapping):
            ends = [key for key in WAYS if key in table]
            if len(ends) != 1:
                problem = f"has {' and '.join(ends)}" if ends else "does not say where"
                context.fault(f"{address}.approach", problem, f"give one of {', '.join(WAYS)}")

    @property
    def wants_heat(self) -> bool:
        """Heat is what is exchanged."""
        return True

    def connect(self, around: Surroundings, context: Context) -> Unit:
        """Settle what may flash; there must be heat data of all that flows."""
        unit = super().connect(around, context)
        unit.mixtures = dict.fromkeys(SIDES)
        pairs = []
        for side in SIDES:
            label, word = f"{side}_in", f"{side}_equilibrium"
            present = around.present[label]
            pairs.append((around.phases[label], present))
            table = around.conditions.get(self.values.words.get(word))
            if word not in self.values.words:
                heating.refuse_two_phases(unit, label, label, context, f"add {word}, the name of an equilibrium table")
            elif table is not None:
                place = f"the {side} side of exchanger '{self.name}'"
                made = Mixture.connect(around.components, table, present, around.basis, around.heat, place, context)
                unit.mixtures[side] = made
                pairs += heating.parts(made, present) if made is not None else []
        need_heat(unit, heating.needs(pairs), context)
        return unit

    def addresses(self) -> dict[str, str]:
        """Own numbers, those of the heat data, and of the models by ``hot.COMPONENT.key`` and ``cold.COMPONENT.key``."""
        own = {**super().addresses(), **heat_addresses(self)}
        for side, mixture in self.mixtures.items():
            if mixture is not None:
                models = {key: place for key, place in mixture.addresses().items() if key not in own}
                own.update({f"{side}.{key}": place for key, place in models.items()})
        return own

    def phase(self, outlet: str, phases: Mapping[str, str]) -> str | None:
        """A side that may flash is of two phases, else its phase stays."""
        side = outlet.partition("_")[0]
        return TWO_PHASE if f"{side}_equilibrium" in self.values.words else phases.get(f"{side}_in")

    def mixture(self, outlet: str) -> Mixture | None:
        """What splits an outlet."""
        return self.mixtures[outlet.partition("_")[0]]

    def passes(self, inlet: str, outlet: str, components: Components, numbers: Numbers | None = None) -> np.ndarray:
        """Each side keeps to itself."""
        return np.full(len(components), inlet.partition("_")[0] == outlet.partition("_")[0])

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """Pressures are those of their own side; temperatures lean on both, and on pressures where a side flashes."""
        if what == "pressure":
            return [(f"{outlet.partition('_')[0]}_in", what)]
        found = [(inlet, part) for inlet in self.inlets for part in ("flows", "temperature")]
        return found + [(f"{side}_in", "pressure") for side in SIDES if f"{side}_equilibrium" in self.values.words]

    # --- calculating

    def _sides(self, inlets: Mapping[str, Stream], numbers: Numbers) -> tuple[Side, Side]:
        found = []
        for side in SIDES:
            stream = inlets[f"{side}_in"]
            pressure = stream.pressure
            if f"{side}_pressure_drop" in numbers:
                pressure = pressure - numbers[f"{side}_pressure_drop"]
                pressure = np.where(np.real(pressure) > 0, pressure, np.nan)
            head = f"{side}."
            own = {key.removeprefix(head): value for key, value in numbers.items() if key.startswith((head, "heat."))}
            found.append(Side(stream, self.around.heat, self.mixtures[side], own, pressure))
        return found[0], found[1]

    def duty(self, inlets: Mapping[str, Stream], numbers: Numbers) -> tuple[np.ndarray, Side, Side]:
        """Give the heat that the cold side gains, (..., M) W, and both sides."""
        hot, cold = self._sides(inlets, numbers)
        empty = hot.empty | cold.empty
        moved = any(np.iscomplexobj(item) for item in (hot.energy, cold.energy, hot.pressure, cold.pressure, *numbers.values()))
        if "duty" in numbers:
            return np.where(empty, 0.0, numbers["duty"]), hot, cold
        zones = Zones(hot, cold)
        if "UA" not in numbers and "approach.least" not in numbers:
            place = 0 if "approach.hot_end" in numbers else 1
            found = zones.at_ends(numbers[f"approach.{WAYS[place]}"])[place]
            return np.where(empty, 0.0, found), hot, cold
        real, flat = None, numbers
        if moved:
            streams, flat = levelled(inlets, numbers)
            real = Zones(*self._sides(streams, flat))
        if "UA" in numbers:
            found = of_area(zones, numbers["UA"], real, flat["UA"])
        else:
            found = zones.at_least(numbers["approach.least"], real, flat["approach.least"])
        return np.where(empty, 0.0, found), hot, cold

    def calculate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give both outlets."""
        found, hot, cold = self.duty(inlets, numbers)
        return {"hot_out": hot.leaving(hot.energy - found), "cold_out": cold.leaving(cold.energy + found)}

    def crosses(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers) -> np.ndarray:
        """Tell in which cases the temperatures cross, or heat would pass from cold to hot, (M,) bool."""
        hot, cold = self._sides(inlets, numbers)
        found = heat_flow(outlets["cold_out"], self.around.heat, cold.numbers) - cold.energy
        least = Zones(hot, cold).least(found)
        backwards = found < -CAPACITY * np.minimum(hot.stream.total, cold.stream.total)
        apart = hot.warmth - cold.warmth < -CROSSED
        return ~hot.empty & ~cold.empty & ((least < -CROSSED) | backwards | apart)

    # --- reporting

    def results(self, inlets: Mapping, outlets: Mapping, numbers: Numbers, memory: Mapping) -> dict[str, Any]:
        """Give duty, approaches, UA and effectiveness: duty over what brings an outlet to the other inlet's temperature."""
        hot, cold = self._sides(inlets, numbers)
        found = heat_flow(outlets["cold_out"], self.around.heat, cold.numbers) - cold.energy
        zones = Zones(hot, cold)
        gaps = zones.differences(found)
        area, least = zones.area(found, gaps)
        hot_end, cold_end = zones.at_ends(0.0)
        most = np.where(np.real(hot_end) < np.real(cold_end), hot_end, cold_end)
        return {
            "results": {
                "duty_W": found,
                "approach_hot_end_K": gaps[..., -1, :],
                "approach_cold_end_K": gaps[..., 0, :],
                "approach_least_K": least,
                "UA_W_K": area,
                "effectiveness": divide(found, most),
            }
        }

    def off_table(self, inlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping[str, np.ndarray]) -> np.ndarray:
        """Tell in which cases an outlet leaves an equilibrium table, (M,) bool."""
        off = np.zeros(inlets["hot_in"].state.shape[:-1], dtype=bool)
        if any(self.mixtures.values()):
            outlets, sides = self.calculate(inlets, numbers), self._sides(inlets, numbers)
            for side, own in zip(SIDES, sides, strict=True):
                off = off | heating.off_table(self.mixtures[side], outlets[f"{side}_out"], own.numbers)
        return off

    def cautions(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping) -> list[str]:
        """Say where heat data leave their range, and where the sides come closer than exchangers are usually built for."""
        found = heating.range_cautions(self, [*inlets.values(), *outlets.values()])
        hot, cold = self._sides(inlets, numbers)
        gained = heat_flow(outlets["cold_out"], self.around.heat, cold.numbers) - cold.energy
        least = np.real(Zones(hot, cold).least(gained))
        least = least[np.isfinite(least) & (np.real(gained) > 0)]
        if least.size and least.min() < CLOSE:
            found.append(
                f"Exchanger {self.name}: its sides come as close as {least.min():.2g} K; below {CLOSE:g} K the area grows steeply "
                "and small errors of the heat data decide (common practice, no source)."
            )
        return found
