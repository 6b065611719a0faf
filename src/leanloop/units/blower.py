"""Blower: raises the pressure of a gas."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from scipy.constants import R

from leanloop.enthalpy.heat import Heat
from leanloop.entries import Context, Entry
from leanloop.stream import Stream
from leanloop.units.base import Inlet, Numbers, Scene, Surroundings, Unit
from leanloop.units.joining import heat_cautions, knows_heat, present_in
from leanloop.units.pressure_change import USUAL_EFFICIENCY, PressureChange, entries_of
from leanloop.units.warmth import heat_addresses, heat_flow, lacking, temperature_at

STEPS = 60
NODES, WEIGHTS = np.polynomial.legendre.leggauss(12)
NODES, WEIGHTS = 0.5 * (NODES + 1.0), 0.5 * WEIGHTS  # on 0 to 1


class Blower(PressureChange):
    """Compresses an ideal gas with an isentropic efficiency.

    From heat data the isentropic end temperature satisfies: integral of cp d ln T = R ln(P2/P1), by Gauss-Legendre
    quadrature of twelve points. With `heat_capacity_ratio` g the isentropic work is cp T1 ((P2/P1)^((g - 1)/g) - 1)
    per mol, cp = R g/(g - 1), and the outlet temperature follows from the enthalpy where heat data are known, so that
    energy closes, else from the same cp. The gas is not cooled and does not condense.
    """

    kind = "blower"
    entries = (
        *entries_of("pressure_rise", "from inlet to outlet"),
        Entry("efficiency", "number", above=0.0, most=1.0, doc="isentropic; 0.7 by default, common practice"),
        Entry("heat_capacity_ratio", "number", above=1.0, doc="cp/cv for the work, instead of heat data; 1.4 for air"),
    )
    knows = False

    @classmethod
    def examples(cls) -> list[Scene]:
        """Give a blower with heat data, one with a heat capacity ratio, and one with both."""
        ports = {"takes": "low", "gives": "high"}
        moist = Inlet("gas", {"air": [2.0, 1.0], "water": [0.1, 0.0]}, [300.0, 320.0], [1e5, 1.1e5])
        heat = {
            "air": {"gas_heat_capacity": {"polynomial": [28.0, 0.002, 2e-6], "temperature": "K", "unit": "J/(mol K)"}},
            "water": {"gas_heat_capacity": 33.6, "liquid_heat_capacity": 75.3, "heat_of_vaporisation": {"value": 4.4e4}},
        }
        species = {"air": {"stays_in": "gas"}, "water": {}}
        ratio = {"heat_capacity_ratio": 1.39}
        return [
            Scene({**ports, "pressure": "2.5 bar", "efficiency": 0.75}, {"takes": moist}, species, heat_data=heat),
            Scene({**ports, **ratio, "pressure_rise": "30 kPa"}, {"takes": moist}, species),
            Scene({**ports, **ratio, "pressure": "1.9 bar"}, {"takes": moist}, species, heat_data=heat),
        ]

    @property
    def wants_heat(self) -> bool:
        """Heat capacities are needed where their ratio is not given."""
        return "heat_capacity_ratio" not in self.values.numbers

    def connect(self, around: Surroundings, context: Context) -> Unit:
        """Only a gas is blown, and its heat capacities must be known one way or the other."""
        unit = super().connect(around, context)
        phase, present = around.phases.get("takes", ""), present_in(unit)
        if phase not in ("", "gas"):
            problem = f"stream '{self.inlets['takes']}' is {phase}"
            remedy = 'connect a gas stream, or write kind = "pump"' if phase == "liquid" else "connect the gas of a flash drum"
            context.fault(f"units.{self.name}.takes", problem, remedy)
        unit.knows = knows_heat(unit, {"gas": present})
        if self.wants_heat and not unit.knows:
            names = ", ".join(lacking(around.heat, "gas", present, around.components.names))
            problem = f"entry is missing, and there are no heat data of the gas of {names}"
            remedy = "add heat_capacity_ratio = 1.4 (or as it applies), or gas heat capacities under heat_data"
            context.fault(f"units.{self.name}.heat_capacity_ratio", problem, remedy)
        return unit

    def addresses(self) -> dict[str, str]:
        """Own numbers, and those of the heat data where they are known."""
        return {**super().addresses(), **(heat_addresses(self) if self.knows else {})}

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """The temperature leans on all of the inlet."""
        if what == "temperature":
            return [("takes", part) for part in ("flows", "temperature", "pressure")]
        return super().leans_on(outlet, what)

    def power(self, stream: Stream, numbers: Numbers) -> np.ndarray:
        """Give the power, (...,) W; 0 where the pressure does not rise."""
        ratio = self.pressure_out(stream, numbers) / stream.pressure
        ratio = np.where(np.real(ratio) < 1.0, 1.0, ratio)
        efficiency = numbers.get("efficiency", USUAL_EFFICIENCY)
        if "heat_capacity_ratio" in numbers:
            power = 1.0 - 1.0 / numbers["heat_capacity_ratio"]
            return stream.total * R / power * stream.temperature * (ratio**power - 1.0) / efficiency
        end = isentropic_end(self.around.heat, stream, ratio, numbers)
        gained = heat_flow(stream.at(end), self.around.heat, numbers) - heat_flow(stream, self.around.heat, numbers)
        return gained / efficiency

    def calculate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give the gas at its new pressure, warmed by the power."""
        stream = inlets["takes"]
        pressure, power = self.pressure_out(stream, numbers), self.power(stream, numbers)
        if self.knows:
            energy = heat_flow(stream, self.around.heat, numbers) + power
            temperature = temperature_at(self.around.heat, "gas", stream.flows, energy, numbers, stream.temperature)
        else:
            ratio = numbers["heat_capacity_ratio"]
            total = stream.total
            temperature = stream.temperature + power / np.where(total == 0, 1.0, total) * (1.0 - 1.0 / ratio) / R
        return {"gives": Stream.of(stream.flows, temperature, pressure, "gas")}

    def results(
        self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping
    ) -> dict[str, Any]:
        """Give the power into the gas."""
        return {"results": {"power_W": self.power(inlets["takes"], numbers)}}

    def cautions(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping) -> list[str]:
        """Say where a blower is the wrong machine, and where heat data are used outside their range."""
        found = [f"Blower {self.name}: its pressure is below that of its inlet; a valve is needed, no power is counted."]
        found = found if self.wrong_way(inlets, outlets, rises=True) else []
        return found + (heat_cautions(self, "Blower", {**inlets, **outlets}) if self.knows else [])


def isentropic_end(heat: Heat, stream: Stream, ratio: np.ndarray, numbers: Numbers) -> np.ndarray:
    """Give the temperature of an ideal gas after a compression at constant entropy.

    Parameters
    ----------
    heat : Heat
    stream : Stream
        A gas.
    ratio : (...,)
        Pressure behind over pressure before.
    numbers : mapping
        Of the heat data, by ``heat.NAME.key``.

    Returns
    -------
    (...,) K
        That of the stream where nothing flows; NaN where heat capacities are not positive on the way.
    """
    total = stream.total
    empty = total == 0
    fractions = stream.flows / np.where(empty, 1.0, total)[..., None]
    wanted = np.where(empty, 0.0, R * np.log(ratio))

    def capacity(temperature: np.ndarray, shares: np.ndarray, own: Numbers) -> np.ndarray:
        return (shares * heat.gas_capacity(temperature, own)).sum(axis=-1)

    def missing(rise: np.ndarray, start: np.ndarray, shares: np.ndarray, asked: np.ndarray, own: Numbers) -> np.ndarray:
        parts = (
            weight * capacity(start * np.exp(rise * node), shares, own) for node, weight in zip(NODES, WEIGHTS, strict=True)
        )
        return asked - rise * sum(parts)

    real = {key: np.real(value) if isinstance(value, np.ndarray) else value for key, value in numbers.items()}
    start, shares, asked = np.real(stream.temperature), np.real(fractions), np.real(wanted)

    def slope(rise: np.ndarray) -> np.ndarray:
        found = capacity(start * np.exp(rise), shares, real)
        return np.where(empty, 1.0, np.where(found > 0, found, np.nan))

    with np.errstate(all="ignore"):
        rise = asked / slope(np.zeros(np.shape(asked)))
        for _ in range(STEPS):
            step = missing(rise, start, shares, asked, real) / slope(rise)
            rise = rise + step
            if not np.any(np.abs(step) > 1e-14 * np.maximum(np.abs(rise), 1e-3)):
                break
        else:
            rise = np.where(np.abs(step) > 1e-9, np.nan, rise)
        if any(np.iscomplexobj(item) for item in (stream.state, ratio, *numbers.values())):
            left = missing(rise, stream.temperature, fractions, wanted, numbers)
            rise = rise + 1j * np.imag(left) / slope(rise)
    return stream.temperature * np.exp(rise)
