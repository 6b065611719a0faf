"""Valve: lets a stream down to a lower pressure at constant enthalpy."""

from __future__ import annotations

from collections.abc import Mapping

from leanloop.entries import Context, Entry
from leanloop.flash.mixture import Mixture
from leanloop.stream import TWO_PHASE, Stream
from leanloop.units.base import Inlet, Numbers, Scene, Surroundings, Unit
from leanloop.units.joining import heat_cautions, phases_with_heat, present_in, stays
from leanloop.units.pressure_change import PressureChange, entries_of
from leanloop.units.warmth import heat_addresses, heat_flow, mixture_of, need_heat, two_phase


class Valve(PressureChange):
    """Sets a lower pressure and keeps the enthalpy.

    Enthalpy does not depend on pressure here, so a stream that keeps its phase keeps its temperature. With
    `equilibrium` the outlet may be of two phases: a liquid that boils below the new pressure cools itself.
    """

    kind = "valve"
    change = "pressure_drop"
    entries = (
        *entries_of("pressure_drop", "from inlet to outlet"),
        Entry("equilibrium", "equilibrium", doc="table by which the outlet is split; without it the phase stays"),
    )
    mix: Mixture | None = None

    @classmethod
    def examples(cls) -> list[Scene]:
        """Give a gas and a liquid that stay what they are, a liquid that flashes, and a stream of two phases."""
        ports = {"takes": "before", "gives": "behind"}
        air = Inlet("gas", {"air": [1.0, 2.0], "water": [0.1, 0.0]}, [300.0, 320.0], [3e5, 2e5])
        brine = Inlet("liquid", {"water": [2.0, 1.0], "salt": [0.1, 0.0]}, [300.0, 320.0], [4e5, 3e5])
        water = Inlet("liquid", {"water": [2.0, 1.0], "salt": [0.1, 0.0], "gas": [0.01, 0.02]}, [400.0, 390.0], 5e5)
        mixed = Inlet("two-phase", {"water": [2.0, 1.0], "salt": [0.1, 0.2], "gas": [0.01, 0.0]}, [9e3, 1.2e4], 5e5)
        return [
            Scene({**ports, "pressure": "1.2 bar"}, {"takes": air}),
            Scene({**ports, "pressure_drop": "1.5 bar"}, {"takes": brine}),
            *(
                Scene({**ports, **own, "equilibrium": "low"}, {"takes": inlet}, SPECIES, EQUILIBRIUM, heat_data=HEAT)
                for own, inlet in (({"pressure": "1.1 bar"}, water), ({"pressure_drop": "3.5 bar"}, mixed))
            ),
            Scene({**ports, "pressure_drop": "3.5 bar"}, {"takes": mixed}, SPECIES, EQUILIBRIUM, heat_data=HEAT),
        ]

    @property
    def wants_heat(self) -> bool:
        """A split outlet is found from its enthalpy."""
        return "equilibrium" in self.values.words

    def connect(self, around: Surroundings, context: Context) -> Unit:
        """Find the mixture of a split outlet and the heat data that it needs."""
        unit = super().connect(around, context)
        if self.wants_heat:
            unit.mix = mixture_of(unit, present_in(unit), f"valve '{self.name}'", context)
            table = around.conditions.get(self.values.words["equilibrium"])
            need_heat(unit, phases_with_heat(unit, *stays(unit, table)), context)
        return unit

    def addresses(self) -> dict[str, str]:
        """Own numbers, and those of the heat data where the outlet is split."""
        return {**super().addresses(), **(heat_addresses(self) if self.wants_heat else {})}

    def mixture(self, outlet: str) -> Mixture | None:
        """Give that of the table, if one is named."""
        return self.mix

    def phase(self, outlet: str, phases: Mapping[str, str]) -> str | None:
        """The phase stays, unless the outlet is split."""
        return TWO_PHASE if self.wants_heat else super().phase(outlet, phases)

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """The molar enthalpy of a split outlet depends on the composition as well."""
        if what == "temperature" and self.wants_heat:
            return [("takes", "temperature"), ("takes", "flows")]
        return super().leans_on(outlet, what)

    def calculate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give the stream at its new pressure."""
        stream = inlets["takes"]
        pressure = self.pressure_out(stream, numbers)
        place = stream.state[..., -2]
        if self.wants_heat and stream.phase != TWO_PHASE:
            return {"gives": two_phase(stream.flows, heat_flow(stream, self.around.heat, numbers), pressure)}
        return {"gives": Stream.of(stream.flows, place, pressure, TWO_PHASE if self.wants_heat else stream.phase)}

    def cautions(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping) -> list[str]:
        """Say where the pressure would rise, and where heat data are used outside their range."""
        found = [f"Valve {self.name}: its pressure is above that of its inlet; a valve cannot raise it."]
        found = found if self.wrong_way(inlets, outlets, rises=False) else []
        return found + (heat_cautions(self, "Valve", inlets) if self.wants_heat else [])


_BOILING = {"form": "antoine", "A": 5.19621, "B": 1730.63, "C": 233.426, "pressure": "bar", "temperature": "degC"}
SPECIES = {"gas": {"stays_in": "gas"}, "salt": {"stays_in": "liquid"}}
EQUILIBRIUM = {"low": {"water": {"model": "raoult", "vapour_pressure": _BOILING}}}
HEAT = {
    "gas": {"gas_heat_capacity": 30.0, "liquid_heat_capacity": 40.0, "heat_of_vaporisation": {"value": 1e4, "at": 300.0}},
    "water": {"gas_heat_capacity": 33.6, "liquid_heat_capacity": 75.3, "heat_of_vaporisation": {"value": 4.4e4, "at": 298.15}},
    "salt": {"liquid_heat_capacity": 120.0},
}
