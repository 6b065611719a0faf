"""Mixer: several streams into one."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from leanloop.entries import Context, Entry
from leanloop.flash.mixture import Mixture
from leanloop.stream import TWO_PHASE, Stream
from leanloop.units import heating
from leanloop.units.base import Inlet, Numbers, Scene, Surroundings, Unit
from leanloop.units.warmth import heat_addresses, heat_flow, mixture_of, need_heat, temperature_at, two_phase


class Mixer(Unit):
    """Adds streams of the same phase, or of any phase with `equilibrium`; the lowest inlet pressure; heat is balanced.

    Where heat data of what flows are lacking, the temperature is the molar mean, which is said.
    """

    kind = "mixer"
    entries = (
        Entry("takes", "inlet", required=True, many=True, doc="streams to mix"),
        Entry("gives", "outlet", required=True, doc="the mixed stream"),
        Entry("equilibrium", "equilibrium", doc="name of an equilibrium table, for an outlet of gas and liquid"),
    )
    flashes: Mixture | None = None
    knows = False

    @classmethod
    def examples(cls) -> list[Scene]:
        """Give three gases of unlike pressure and temperature, with and without heat data; gas, liquid and both, flashed."""
        inlets = {
            "wet": Inlet("gas", {"air": [1.0, 0.0], "water": [0.1, 0.4]}, [300.0, 350.0], [1.2e5, 1e5]),
            "dry": Inlet("gas", {"air": [2.0, 1.0]}, 320.0, [1.1e5, 2e5]),
            "steam": Inlet("gas", {"water": [0.0, 0.5]}, 400.0, 3e5),
        }
        data = {
            "air": {"gas_heat_capacity": {"polynomial": [28.0, 3e-3], "temperature": "K", "unit": "J/(mol K)"}},
            "water": {"gas_heat_capacity": 33.6, "liquid_heat_capacity": 75.3, "heat_of_vaporisation": {"value": 4.4e4}},
        }
        boiling = {"form": "antoine", "A": 5.19621, "B": 1730.63, "C": 233.426, "pressure": "bar", "temperature": "degC"}
        here = {"here": {"water": {"model": "raoult", "vapour_pressure": boiling}}}
        stays = {"air": {"stays_in": "gas"}, "water": {}}
        any_phase = {
            **inlets,
            "cold": Inlet("liquid", {"water": [1.0, 2.0]}, [290.0, 310.0], 4e5),
            "both": Inlet("two-phase", {"air": [0.1, 0.2], "water": [2.0, 0.0]}, [5e3, 2e2], 5e5),
        }
        flashed = {"takes": list(any_phase), "gives": "all", "equilibrium": "here"}
        return [
            Scene({"takes": list(inlets), "gives": "all"}, inlets),
            Scene({"takes": list(inlets), "gives": "all"}, inlets, stays, heat_data=data),
            Scene(flashed, any_phase, stays, here, heat_data=data),
        ]

    @property
    def wants_heat(self) -> bool:
        """What is flashed carries its enthalpy."""
        return "equilibrium" in self.values.words

    def connect(self, around: Surroundings, context: Context) -> Unit:
        """Settle what is flashed and whether heat is balanced; without a flash, gas and liquid do not mix into one phase."""
        unit = super().connect(around, context)
        present = np.any(list(around.present.values()), axis=0)
        unit.flashes = mixture_of(unit, present, f"mixer '{self.name}'", context)
        pairs = [(around.phases[label], around.present[label]) for label in self.inlets]
        if self.wants_heat:
            pairs += heating.parts(unit.flashes, present) if unit.flashes is not None else []
            unit.knows = need_heat(unit, heating.needs(pairs), context)
            return unit
        for label in self.inlets:
            heating.refuse_two_phases(unit, label, "takes", context, "add equilibrium, the name of an equilibrium table")
        unit.knows = heating.knows_heat(around, heating.needs(pairs))
        if len(set(around.phases.values()) - {"", TWO_PHASE}) > 1:
            liquid = [self.inlets[label] for label, phase in around.phases.items() if phase == "liquid"]
            context.fault(
                f"units.{self.name}.takes",
                f"mixes gas and liquid ({', '.join(liquid)} liquid)",
                "mix streams of one phase, add equilibrium, or bring both into a column",
            )
        return unit

    def addresses(self) -> dict[str, str]:
        """Own numbers, and those of the heat data where heat is balanced."""
        own = super().addresses()
        if self.knows:
            own.update(heat_addresses(self))
        if self.flashes is not None:  # what tells of tables takes them
            own.update(self.flashes.addresses())
        return own

    def phase(self, outlet: str, phases: Mapping[str, str]) -> str | None:
        """What is flashed may be of two phases, else the phase stays."""
        return TWO_PHASE if "equilibrium" in self.values.words else super().phase(outlet, phases)

    def mixture(self, outlet: str) -> Mixture | None:
        """What splits the outlet."""
        return self.flashes

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """Pressure leans on pressures alone, temperature on flows as well."""
        if what == "pressure":
            return [(inlet, "pressure") for inlet in self.inlets]
        return [(inlet, part) for inlet in self.inlets for part in ("flows", "temperature")]

    def calculate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give the sum of the inlets."""
        streams = list(inlets.values())
        flows = sum(stream.flows for stream in streams)
        pressure = _least([stream.pressure for stream in streams])
        if self.knows:
            energy = sum(heat_flow(stream, self.around.heat, numbers) for stream in streams)
        if self.flashes is not None:
            return {"gives": two_phase(flows, energy, pressure)}
        amount = sum(stream.total for stream in streams)
        mean = sum(stream.total * stream.temperature for stream in streams)
        # nothing flows: the first inlet's temperature, so that an empty stream stays regular
        empty = amount == 0
        temperature = np.where(empty, streams[0].temperature, mean / np.where(empty, 1.0, amount))
        if self.knows:
            temperature = temperature_at(self.around.heat, streams[0].phase, flows, energy, numbers, temperature)
        return {"gives": Stream.of(flows, temperature, pressure, streams[0].phase)}

    def off_table(self, inlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping[str, np.ndarray]) -> np.ndarray:
        """Tell in which cases the outlet leaves an equilibrium table, (M,) bool."""
        mixed = next(iter(inlets.values())) if self.flashes is None else self.calculate(inlets, numbers)["gives"]
        return heating.off_table(self.flashes, mixed, numbers)

    def cautions(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping) -> list[str]:
        """Say that the temperature is no heat balance where it matters, or where heat data leave their range."""
        if self.knows:
            return heating.range_cautions(self, [*inlets.values(), *outlets.values()])
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
