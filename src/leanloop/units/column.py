"""The stage block as a unit: a counter-current column between its ports and the stage equations."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, ClassVar

import numpy as np

from leanloop.column.equations import Stages, phases
from leanloop.column.law import Law
from leanloop.column.newton import CLOSE, solve
from leanloop.column.start import split_fractions
from leanloop.components import Components
from leanloop.entries import Context
from leanloop.status import OK
from leanloop.stream import Stream
from leanloop.units import column_entries
from leanloop.units.base import Evaluation, Inlet, Numbers, Scene, Surroundings, Unit, outlet_status
from leanloop.units.column_entries import COLUMN
from leanloop.units.column_report import ColumnReport
from leanloop.units.column_response import Response, inert_flows
from leanloop.units.column_tower import TowerPart


class Column(ColumnReport):
    """Counter-current equilibrium stages between a gas and a liquid; stage 1 is the top.

    Any number of components distribute at once, flows may change along the column without limit.
    Stages are isothermal at `temperature`, by default that of the liquid fed at the top, or balance heat. Without
    heat, efficiencies and side streams the equations of `leanloop.column.equations` serve, else those of
    `leanloop.column.tower`.
    """

    entries = COLUMN
    derivatives = "own"
    cleans: ClassVar[str] = "gas"
    inner: TowerPart | None = None
    knows_heat = False

    @classmethod
    def examples(cls) -> list[Scene]:
        """Give dilute solutes that stay out of the oil, and volatile ones on curves of mole fractions and ratios."""
        ports = {"gas_in": "up", "liquid_in": "down", "gas_out": "top", "liquid_out": "bottom", "equilibrium": "here"}
        carriers = {"air": {"stays_in": "gas"}, "oil": {"stays_in": "liquid"}}
        fed = {
            "gas_in": Inlet("gas", {"air": [1.0, 2.0], "a": [0.02, 0.0], "b": [0.01, 0.1]}, 310.0, [1.1e5, 2e5]),
            "liquid_in": Inlet("liquid", {"oil": [1.5, 1.0], "a": [0.001, 0.01], "b": [0.0, 0.2]}, [300.0, 320.0], 2e5),
        }
        warm = {"a": {"model": "henry", "constant": "0.6 bar", "slope": "2000 K"}, "b": {"model": "constant", "K": 1.3}}
        curved = {
            "a": {"model": "table", "X": [0.0, 0.03, 0.1, 0.4], "Y": [0.0, 0.02, 0.09, 0.5]},
            "b": {"model": "polynomial", "K": [-1.2, 0.005]},
        }
        return [
            Scene({**ports, "stages": 5}, fed, {**carriers, "a": {}, "b": {}}, {"here": warm}),
            Scene(
                {**ports, "stages": 3, "temperature": "50 degC", "pressure": "1.5 bar"},
                fed,
                {"b": {}, **carriers, "a": {}},
                {"here": curved},
            ),
            *cls.warm_examples(),
        ]

    @classmethod
    def warm_examples(cls) -> list[Scene]:
        """Give columns that balance heat, with efficiencies and with side streams."""
        ports = {"gas_in": "up", "liquid_in": "down", "gas_out": "top", "liquid_out": "bottom", "equilibrium": "here"}
        boiling = {"form": "antoine", "A": 5.19621, "B": 1730.63, "C": 233.426, "pressure": "bar", "temperature": "degC"}
        here = {
            "a": {"model": "polynomial", "K": [-4.0, 0.016], "pressure": "1 bar"},
            "water": {"model": "raoult", "vapour_pressure": boiling},
        }
        data = {
            "air": {"gas_heat_capacity": 29.1},
            "a": {"gas_heat_capacity": 36.0, "liquid_heat_capacity": 80.0, "heat_of_vaporisation": {"value": 3.5e4, "at": 300.0}},
            "water": {"gas_heat_capacity": 33.6, "liquid_heat_capacity": 75.3, "heat_of_vaporisation": {"value": 4.4e4}},
            "salt": {"liquid_heat_capacity": 120.0},
        }
        fed = {
            "gas_in": Inlet("gas", {"air": [5.0, 8.0], "a": [0.6, 0.4], "water": [0.05, 0.0]}, [310.0, 300.0], 1.3e5),
            "liquid_in": Inlet("liquid", {"water": [15.0, 12.0], "a": [0.01, 0.0], "salt": [0.3, 0.2]}, [295.0, 305.0], 2e5),
        }
        carriers = {"air": {"stays_in": "gas"}, "salt": {"stays_in": "liquid"}, "a": {}, "water": {}}
        semi = Inlet("liquid", {"water": [4.0, 6.0], "a": [0.05, 0.02], "salt": [0.1, 0.0]}, 300.0, 2e5)
        draws = [
            {"stream": "drawn", "stage": 3, "phase": "liquid", "flow": 2.0},
            {"stream": "vented", "stage": 4, "phase": "gas", "flow": 0.5},
        ]
        return [
            Scene({**ports, "stages": 4, "heat": "adiabatic"}, fed, carriers, {"here": here}, heat_data=data),
            Scene(
                {
                    **ports, "stages": 5, "heat": "adiabatic", "efficiency": 0.7, "pressure_drop": 4e3,
                    "side_feeds": [{"stream": "semi", "stage": 2}], "side_draws": draws,
                    "stage_duties": [{"stage": 4, "duty": -2e4}],
                },
                {**fed, "side_feeds.0": semi},
                carriers,
                {"here": here},
                heat_data=data,
            ),
            Scene({**ports, "stages": 4, "efficiency": {"a": 0.4}}, fed, carriers, {"here": here}),
        ]  # fmt: skip

    # --- connecting

    @property
    def wants_heat(self) -> bool:
        """Adiabatic stages balance heat."""
        return column_entries.balances_heat(self.values)

    def check(self, address: str, context: Context) -> None:
        """Note faults that lie between entries."""
        column_entries.check(self.values, self.raw, address, context, self.cleans == "gas")

    def connect(self, around: Surroundings, context: Context) -> Unit:
        """Settle which components distribute here and by which model."""
        unit = super().connect(around, context)
        address, components = f"units.{self.name}", around.components
        for label, phase in around.phases.items():
            if label in ("gas_in", "liquid_in") and phase not in ("", label.partition("_")[0], "two-phase"):
                context.fault(
                    f"{address}.{label}",
                    f"stream '{self.inlets[label]}' is {phase}",
                    f"connect a {label.partition('_')[0]} stream",
                )
        table = around.conditions.get(self.values.words.get("equilibrium"))
        if table is None:
            return unit
        present = np.any([*around.present.values(), np.zeros(len(components), dtype=bool)], axis=0)
        stays = [table.stays_in(name, components) for name in components.names]
        unit.stays_gas = np.array([phase == "gas" for phase in stays], dtype=bool)
        unit.stays_liquid = np.array([phase == "liquid" for phase in stays], dtype=bool)
        spread = present & ~unit.stays_gas & ~unit.stays_liquid
        unit.places = np.flatnonzero(spread)
        names = [components.names[place] for place in unit.places]
        for name in names:
            if name not in table.models and name not in table.doubtful:
                context.fault(
                    f"equilibrium.{table.name}.{name}",
                    f"'{name}' reaches column '{self.name}' and has no model here",
                    f'add {name} = {{ model = "constant", K = 0.1 }}, or stays_in where it cannot distribute',
                )
        if any(name not in table.models for name in names):
            return unit
        gas = around.basis.get("gas")
        liquid = around.basis.get("liquid")
        unit.gas_basis = unit.stays_gas if gas is None else components.mask(gas)
        unit.liquid_basis = unit.stays_liquid if liquid is None else components.mask(liquid)
        unit.models = [table.models[name] for name in names]
        unit.law = Law(unit.models, unit.gas_basis[unit.places], unit.liquid_basis[unit.places])
        unit.model_names = names
        unit.weights = unit.stays_gas.astype(float), unit.stays_liquid.astype(float)
        unit.present = present
        unit.basis_weights = (
            (unit.stays_gas & unit.gas_basis).astype(float),
            (unit.stays_liquid & unit.liquid_basis).astype(float),
        )
        heat = around.heat
        unit.knows_heat = heat is not None and not (
            heat.lacking("gas", present & ~unit.stays_liquid) or heat.lacking("liquid", present & ~unit.stays_gas)
        )
        unit.inner = TowerPart(unit) if self._rigorous(around) else None
        if column_entries.balances_heat(unit.values):
            self._check_heat(unit, address, context)
        return unit

    def _rigorous(self, around: Surroundings) -> bool:
        """Tell whether the stages need the equations with heat, efficiencies and side streams."""
        values = self.values
        asked = {"side_feeds", "side_draws", "stage_duties", "reboiler", "condenser"} & set(values.words)
        efficient = any(key.partition(".")[0] == "efficiency" for key in values.numbers)
        two = "two-phase" in around.phases.values()
        return bool(asked) or efficient or two or column_entries.balances_heat(values) or "pressure_drop" in values.numbers

    def _check_heat(self, unit: Column, address: str, context: Context) -> None:
        """Note components without heat data, and efficiencies that leave the gas total open."""
        for name in unit.inner.lacking():
            context.fault(
                f"heat_data.{name}",
                f"heat is balanced in column '{self.name}' and '{name}' has no enthalpy for a phase that it is in",
                'add gas_heat_capacity = "33.6 J/(mol K)", liquid_heat_capacity and heat_of_vaporisation as they apply',
            )
        if unit.inner.by_component and not (unit.stays_gas & unit.present).any():
            context.fault(
                f"{address}.efficiency",
                "by component, where every component distributes, leaves the total of the gas open",
                "give one efficiency for all, or a component that stays in the gas",
            )

    def count(self, numbers: Numbers) -> int:
        """Give the equilibrium stages, reboiler and condenser apart; whole ones where a height is given."""
        return column_entries.stage_count(numbers)

    @property
    def deepens(self) -> str:
        """The stages may differ inside a batch where nothing hangs on a single one."""
        return "stages" if self.inner is None and "stages" in self.values.numbers else ""

    def addresses(self) -> dict[str, str]:
        """Own numbers, those of the models by ``component.number``, and of the heat data where heat is balanced."""
        own = super().addresses()
        if self.knows_heat:
            own.update(self.around.heat.addresses())
        table = self.values.words["equilibrium"]
        for name, model in zip(self.model_names, self.models, strict=True):
            own.update({f"{name}.{key}": f"equilibrium.{table}.{name}.{key}" for key in model.numbers})
        return own

    def phase(self, outlet: str, phases: Mapping[str, str]) -> str:
        """Ports are named after their phase; a side draw says its own."""
        if outlet.startswith("side_draws."):
            return self.values.words["side_draws"][int(outlet.rpartition(".")[2])].get("phase", "liquid")
        return "liquid" if outlet == "condenser.draw" else outlet.partition("_")[0]

    def passes(self, inlet: str, outlet: str, components: Components, numbers: Numbers | None = None) -> np.ndarray:
        """A component that stays in one phase leaves with that phase alone."""
        table = self.values.words.get("equilibrium")
        conditions = self.tables.get(table)
        stays = [
            conditions.stays_in(item.name, components) if conditions is not None else item.stays_in for item in components
        ]
        other = "liquid" if self.phase(outlet, {}) == "gas" else "gas"
        return np.array([phase != other for phase in stays], dtype=bool)

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """Outlets have the temperature of the liquid fed and the pressure of the gas fed, unless given."""
        if what in self.values.numbers:
            return []
        if what == "temperature" and column_entries.balances_heat(self.values):
            return [(inlet, part) for inlet in self.inlets for part in ("flows", "temperature", "pressure")]
        return [("liquid_in" if what == "temperature" else "gas_in", what)]

    # --- calculating

    def conditions_of(self, inlets: Mapping[str, Stream], numbers: Numbers) -> tuple[np.ndarray, np.ndarray]:
        """Give temperature and pressure of the stages, (...,) K and Pa."""
        shape = inlets["gas_in"].state.shape[:-1]
        temperature = numbers.get("temperature", inlets["liquid_in"].temperature)
        pressure = numbers.get("pressure", inlets["gas_in"].pressure)
        return _filled(temperature, shape), _filled(pressure, shape)

    def model_numbers(self, numbers: Numbers) -> list[dict[str, Any]]:
        """Give the numbers of each distributing component's model, by their names there."""
        return [
            {key: numbers[f"{name}.{key}"] for key in model.numbers}
            for name, model in zip(self.model_names, self.models, strict=True)
        ]

    def _stages(self, inlets: Mapping[str, Stream], numbers: Numbers) -> Stages:
        gas, liquid = inlets["gas_in"].flows, inlets["liquid_in"].flows
        cases, count = gas.shape[0], column_entries.stage_count(numbers)
        feeds = np.zeros((cases, count, len(self.places)))
        feeds[:, 0] += liquid[:, self.places]
        depth = column_entries.own_counts(numbers)
        feeds[np.arange(cases), -1 if depth is None else depth - 1] += gas[:, self.places]
        temperature, pressure = self.conditions_of(inlets, numbers)
        law = self.law.at(temperature[:, None], pressure[:, None], self.model_numbers(numbers))
        inert = inert_flows(gas, liquid, count, *self.weights, depth)
        if law.plain:
            return Stages(feeds, *inert, *inert, law, depth)
        basis = inert_flows(gas, liquid, count, *self.basis_weights, depth)
        return Stages(feeds, *inert, *basis, law, depth)

    def _leaving(
        self, inlets: Mapping[str, Stream], numbers: Numbers, top: np.ndarray, bottom: np.ndarray
    ) -> dict[str, Stream]:
        """Put the outlets together from the distributing flows that leave."""
        fed = inlets["gas_in"].flows + inlets["liquid_in"].flows
        temperature, pressure = self.conditions_of(inlets, numbers)
        gas, liquid = fed * self.weights[0], fed * self.weights[1]
        gas[..., self.places], liquid[..., self.places] = top, bottom
        return {
            "gas_out": Stream.of(gas, temperature, pressure, "gas"),
            "liquid_out": Stream.of(liquid, temperature, pressure, "liquid"),
        }

    def calculate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give the outlets; see `evaluate` for their derivatives."""
        return self.evaluate(inlets, numbers, None, {}, {}, 0).outlets

    def estimate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give the outlets by one absorption factor for each component."""
        if self.inner is not None:
            return self.inner.estimate(inlets, numbers)
        gas, liquid = inlets["gas_in"], inlets["liquid_in"]
        if not liquid.flows.any():  # nothing has come round the loop yet
            return self._leaving(inlets, numbers, gas.flows[:, self.places], liquid.flows[:, self.places])
        temperature, pressure = self.conditions_of(inlets, numbers)
        with np.errstate(all="ignore"):
            law = self.law.at(temperature[:, None], pressure[:, None], self.model_numbers(numbers))
            g, l = gas.total[:, None] + 1e-300, liquid.total[:, None]
            factor = law.k_dilute[:, 0] * g / np.maximum(l, 1e-9 * g)
            depth = column_entries.own_counts(numbers)
            count = column_entries.stage_count(numbers) if depth is None else depth[:, None]
            stripped, absorbed = split_fractions(np.clip(np.nan_to_num(factor), 1e-15, 1e15), count)
        up, down = gas.flows[:, self.places], liquid.flows[:, self.places]
        absorbed = np.where(l > 0, absorbed, 0.0)
        return self._leaving(
            inlets, numbers, stripped * down + (1 - absorbed) * up, (1 - stripped) * down + absorbed * up
        )

    def evaluate(
        self,
        inlets: Mapping[str, Stream],
        numbers: Numbers,
        memory: Mapping[str, np.ndarray] | None,
        tangents: Mapping[str, np.ndarray | None],
        number_tangents: Mapping[str, np.ndarray],
        seeds: int,
    ) -> Evaluation:
        """Solve all stages of all cases; derivatives by the last factorisation."""
        if self.inner is not None:
            return self.inner.evaluate(inlets, numbers, memory, tangents, number_tangents, seeds)
        stages = self._stages(inlets, numbers)
        guess = None
        if memory is not None and memory["unknowns"].shape[1] == stages.shape[1]:
            guess = np.maximum(memory["unknowns"], 0.0)
            guess[..., 0] = np.maximum(guess[..., 0], stages.gas_inert)
        asked = None
        if seeds and (number_tangents or any(way is not None for way in tangents.values())):
            asked = Response(self, stages, inlets, numbers, tangents, number_tangents, seeds)
        good = guess is not None and memory["first_step"].max(initial=0.0) <= CLOSE
        answer = solve(stages, guess, asked.right if asked else None, good)
        unknowns, failed = answer.unknowns, answer.status != OK
        with np.errstate(all="ignore"):
            first = _slice(stages, slice(0, 1))
            at_top = phases(first, unknowns[:, :1])
            outlets = self._leaving(inlets, numbers, at_top.gas_flow[:, 0], unknowns[:, -1, 1:])
            if failed.any():
                for stream in outlets.values():
                    stream.state[failed] = np.nan
            status = np.where(failed, answer.status, outlet_status(outlets))
            found: dict[str, np.ndarray | None] = {"gas_out": None, "liquid_out": None}
            memory_tangents = {}
            if asked is not None:
                found, memory_tangents["unknowns"] = asked.chained(answer, first, at_top)
        memory = {"unknowns": unknowns, "first_step": answer.first_step}
        return Evaluation(outlets, found, status, memory, memory_tangents)


def _filled(value: Any, shape: tuple[int, ...]) -> np.ndarray:
    """Give a number, or an array that may be narrower, for all cases."""
    if isinstance(value, np.ndarray):
        return value if value.shape == shape else np.broadcast_to(value, shape)
    return np.full(shape, value)


def _slice(stages: Stages, part: slice) -> Stages:
    return Stages(
        stages.feeds[:, part],
        stages.gas_inert[:, part],
        stages.liquid_inert[:, part],
        stages.gas_basis[:, part],
        stages.liquid_basis[:, part],
        stages.law,
    )

