"""The stage block as a unit: a counter-current column between its ports and the stage equations."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, ClassVar

import numpy as np

from leanloop.column.equations import Phases, Stages, gas_change, phases, rows
from leanloop.column.law import Law
from leanloop.column.newton import CLOSE, Answer, solve
from leanloop.column.start import split_fractions
from leanloop.components import Components
from leanloop.entries import Context, Entry
from leanloop.equilibrium.base import EquilibriumModel
from leanloop.equilibrium.water import is_water, vapour_pressure
from leanloop.status import OK
from leanloop.stream import Stream, divide
from leanloop.units.base import Evaluation, Inlet, Numbers, Scene, Surroundings, Unit, outlet_status

MOST_STAGES = 5000
_NEVER = EquilibriumModel.outside


class Column(Unit):
    """Counter-current equilibrium stages between a gas and a liquid; stage 1 is the top.

    Any number of components distribute at once, flows may change along the column without limit.
    The stages are isothermal: at `temperature`, by default that of the liquid fed at the top.
    """

    entries = (
        Entry("gas_in", "inlet", required=True, doc="gas fed to the bottom stage"),
        Entry("liquid_in", "inlet", required=True, doc="liquid fed to the top stage"),
        Entry("gas_out", "outlet", required=True, doc="gas that leaves the top stage"),
        Entry("liquid_out", "outlet", required=True, doc="liquid that leaves the bottom stage"),
        Entry("stages", "integer", required=True, least=1, most=MOST_STAGES, cases=False, doc="equilibrium stages"),
        Entry("equilibrium", "equilibrium", required=True, doc="name of an equilibrium table"),
        Entry("heat", "choice", choices=("isothermal",), doc="only isothermal stages so far"),
        Entry("temperature", "temperature", doc="of all stages; by default that of the liquid fed"),
        Entry("pressure", "pressure", above=0.0, doc="of all stages; by default that of the gas fed"),
    )
    derivatives = "own"
    cleans: ClassVar[str] = "gas"

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
        ]

    # --- connecting

    def connect(self, around: Surroundings, context: Context) -> Unit:
        """Settle which components distribute here and by which model."""
        unit = super().connect(around, context)
        address, components = f"units.{self.name}", around.components
        for label, phase in around.phases.items():
            if phase and phase != label.partition("_")[0]:
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
        unit.basis_weights = (
            (unit.stays_gas & unit.gas_basis).astype(float),
            (unit.stays_liquid & unit.liquid_basis).astype(float),
        )
        return unit

    def addresses(self) -> dict[str, str]:
        """Own numbers, and those of the models by ``component.number``."""
        own = super().addresses()
        table = self.values.words["equilibrium"]
        for name, model in zip(self.model_names, self.models, strict=True):
            own.update({f"{name}.{key}": f"equilibrium.{table}.{name}.{key}" for key in model.numbers})
        return own

    def phase(self, outlet: str, phases: Mapping[str, str]) -> str:
        """Ports are named after their phase."""
        return outlet.partition("_")[0]

    def passes(self, inlet: str, outlet: str, components: Components, numbers: Numbers | None = None) -> np.ndarray:
        """A component that stays in one phase leaves with that phase alone."""
        table = self.values.words.get("equilibrium")
        conditions = self.tables.get(table)
        stays = [
            conditions.stays_in(item.name, components) if conditions is not None else item.stays_in for item in components
        ]
        other = "liquid" if outlet == "gas_out" else "gas"
        return np.array([phase != other for phase in stays], dtype=bool)

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """Outlets have the temperature of the liquid fed and the pressure of the gas fed, unless given."""
        if what in self.values.numbers:
            return []
        return [("liquid_in" if what == "temperature" else "gas_in", what)]

    # --- calculating

    def _conditions(self, inlets: Mapping[str, Stream], numbers: Numbers) -> tuple[np.ndarray, np.ndarray]:
        shape = inlets["gas_in"].state.shape[:-1]
        temperature = numbers.get("temperature", inlets["liquid_in"].temperature)
        pressure = numbers.get("pressure", inlets["gas_in"].pressure)
        return _filled(temperature, shape), _filled(pressure, shape)

    def _model_numbers(self, numbers: Numbers) -> list[dict[str, Any]]:
        return [
            {key: numbers[f"{name}.{key}"] for key in model.numbers}
            for name, model in zip(self.model_names, self.models, strict=True)
        ]

    def _stages(self, inlets: Mapping[str, Stream], numbers: Numbers) -> Stages:
        gas, liquid = inlets["gas_in"].flows, inlets["liquid_in"].flows
        cases, count = gas.shape[0], int(numbers["stages"])
        feeds = np.zeros((cases, count, len(self.places)))
        feeds[:, 0] += liquid[:, self.places]
        feeds[:, -1] += gas[:, self.places]
        temperature, pressure = self._conditions(inlets, numbers)
        law = self.law.at(temperature[:, None], pressure[:, None], self._model_numbers(numbers))
        inert = self._inert(gas, liquid, count, *self.weights)
        if law.plain:
            return Stages(feeds, *inert, *inert, law)
        basis = self._inert(gas, liquid, count, *self.basis_weights)
        return Stages(feeds, *inert, *basis, law)

    @staticmethod
    def _inert(
        gas: np.ndarray, liquid: np.ndarray, count: int, in_gas: np.ndarray, in_liquid: np.ndarray
    ) -> tuple[np.ndarray, np.ndarray]:
        """Spread flows that stay in a phase over the stages; what comes in with the other phase leaves at once."""
        up = np.empty((*gas.shape[:-1], count))
        up[...] = (gas @ in_gas)[..., None]
        up[..., 0] += liquid @ in_gas
        down = np.empty((*gas.shape[:-1], count))
        down[...] = (liquid @ in_liquid)[..., None]
        down[..., -1] += gas @ in_liquid
        return up, down

    def _leaving(
        self, inlets: Mapping[str, Stream], numbers: Numbers, top: np.ndarray, bottom: np.ndarray
    ) -> dict[str, Stream]:
        """Put the outlets together from the distributing flows that leave."""
        fed = inlets["gas_in"].flows + inlets["liquid_in"].flows
        temperature, pressure = self._conditions(inlets, numbers)
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
        gas, liquid = inlets["gas_in"], inlets["liquid_in"]
        if not liquid.flows.any():  # nothing has come round the loop yet
            return self._leaving(inlets, numbers, gas.flows[:, self.places], liquid.flows[:, self.places])
        temperature, pressure = self._conditions(inlets, numbers)
        with np.errstate(all="ignore"):
            law = self.law.at(temperature[:, None], pressure[:, None], self._model_numbers(numbers))
            g, l = gas.total[:, None] + 1e-300, liquid.total[:, None]
            factor = law.k_dilute[:, 0] * g / np.maximum(l, 1e-9 * g)
            stripped, absorbed = split_fractions(np.clip(np.nan_to_num(factor), 1e-15, 1e15), int(numbers["stages"]))
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
        stages = self._stages(inlets, numbers)
        guess = None
        if memory is not None and memory["unknowns"].shape[1] == stages.shape[1]:
            guess = np.maximum(memory["unknowns"], 0.0)
            guess[..., 0] = np.maximum(guess[..., 0], stages.gas_inert)
        asked = None
        if seeds and (number_tangents or any(way is not None for way in tangents.values())):
            asked = _Asked(self, stages, inlets, numbers, tangents, number_tangents, seeds)
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

    # --- reporting

    def results(
        self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping[str, np.ndarray]
    ) -> dict[str, Any]:
        """Give removal, factors, approaches and the profile."""
        names = self.around.components.names
        gas_in, liquid_in = inlets["gas_in"], inlets["liquid_in"]
        gas_out, liquid_out = outlets["gas_out"], outlets["liquid_out"]
        unknowns = self._unknowns(numbers, inlets, memory)
        count = unknowns.shape[-2]
        temperature, pressure = self._conditions(inlets, numbers)
        law = self.law.at(temperature[..., None], pressure[..., None], self._model_numbers(numbers))
        fed = gas_in.flows + liquid_in.flows
        liquid = np.repeat(np.where(self.stays_liquid, liquid_in.flows, 0.0)[..., None, :], count, axis=-2)
        liquid[..., -1, :] = np.where(self.stays_liquid, fed, 0.0)
        gas = np.repeat(np.where(self.stays_gas, gas_in.flows, 0.0)[..., None, :], count, axis=-2)
        gas[..., 0, :] = np.where(self.stays_gas, fed, 0.0)
        kind = np.result_type(liquid, unknowns)
        liquid, gas = liquid.astype(kind), gas.astype(kind)
        liquid[..., self.places] = unknowns[..., 1:]
        flows = self._gas_flows(law, liquid, gas, unknowns[..., 0])
        gas[..., self.places] = flows
        l_total, g_total = liquid.sum(axis=-1), gas.sum(axis=-1)
        x, y = divide(liquid, l_total[..., None]), divide(gas, g_total[..., None])
        ratio_x = divide(liquid, liquid[..., self.liquid_basis].sum(axis=-1)[..., None])
        ratio_y = divide(gas, gas[..., self.gas_basis].sum(axis=-1)[..., None])
        k = self._k_values(law, x[..., self.places], y[..., self.places])
        factor = divide(l_total[..., None], k * g_total[..., None])
        inlet, outlet = (gas_in, gas_out) if self.cleans == "gas" else (liquid_in, liquid_out)
        removal = 1.0 - divide(outlet.flows, inlet.flows)
        ends = np.sqrt(factor[..., 0, :] * factor[..., -1, :])
        if self.cleans == "gas":
            rich, lean = (gas_in, liquid_out), (gas_out, liquid_in)
        else:
            rich, lean = (gas_out, liquid_in), (gas_in, liquid_out)
        rich, lean = self._approach(numbers, *rich, law), self._approach(numbers, *lean, law)
        place = dict(zip(self.model_names, range(len(self.model_names)), strict=True))

        def by_name(values: np.ndarray) -> dict[str, np.ndarray]:
            return {name: values[..., index] for name, index in place.items()}

        def by_component(values: np.ndarray) -> dict[str, np.ndarray]:
            return {name: values[..., index] for index, name in enumerate(names)}

        moving = [index for index, name in enumerate(names) if name in place]
        return {
            "results": {
                "removal": {names[index]: removal[..., index] for index in moving},
                "absorption_factor": by_name(ends),
                "stripping_factor": by_name(divide(np.ones_like(ends), ends)),
                "solvent_to_gas": divide(
                    liquid_in.flows[..., self.liquid_basis].sum(axis=-1), gas_in.flows[..., self.gas_basis].sum(axis=-1)
                ),
                "approach_rich": by_name(rich),
                "approach_lean": by_name(lean),
                "duty_W": None,
            },
            "profile": {
                "stage": np.broadcast_to(np.arange(1, count + 1), l_total.shape),
                "temperature_K": np.broadcast_to(temperature[..., None], l_total.shape),
                "x": by_component(x),
                "y": by_component(y),
                "X": by_component(ratio_x),
                "Y": by_component(ratio_y),
                "liquid_mol_s": l_total,
                "gas_mol_s": g_total,
                "K": by_name(k),
                "A": by_name(factor),
            },
        }

    def _unknowns(self, numbers: Numbers, inlets: Mapping[str, Stream], memory: Mapping[str, np.ndarray]) -> np.ndarray:
        """Give the state inside, NaN where no case has ever come this far."""
        if "unknowns" in memory:
            return memory["unknowns"]
        shape = inlets["gas_in"].state.shape[:-1]
        return np.full((*shape, int(numbers["stages"]), len(self.places) + 1), np.nan)

    def _coordinates(self, law: Any, liquid: np.ndarray) -> np.ndarray:
        fraction = divide(liquid, liquid.sum(axis=-1)[..., None])[..., self.places]
        if law.plain:
            return fraction
        ratio = divide(liquid, liquid[..., self.liquid_basis].sum(axis=-1)[..., None])[..., self.places]
        return np.where(law.ratio, ratio, fraction)

    def _gas_flows(self, law: Any, liquid: np.ndarray, gas: np.ndarray, total: np.ndarray) -> np.ndarray:
        """Give v on every stage, complex numbers allowed."""
        y = law.complex_gas(self._coordinates(law, liquid))
        if not np.iscomplexobj(liquid):
            y = y.real
        if law.plain:
            return y * total[..., None]
        in_basis = law.law.gas_basis
        inert = gas[..., self.gas_basis & self.stays_gas].sum(axis=-1)
        fixed = inert + total * (y @ (in_basis & ~law.ratio).astype(float))
        basis = fixed / (1.0 - y @ (in_basis & law.ratio).astype(float))
        return y * np.where(law.ratio, basis[..., None], total[..., None])

    def _k_values(self, law: Any, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        """Give y/x, the limit at infinite dilution where the component is absent."""
        found = divide(y, x)
        dilute = np.broadcast_to(law.k_dilute, found.shape)
        return np.where(np.isfinite(found), found, dilute)

    def _approach(self, numbers: Numbers, gas: Stream, liquid: Stream, law: Any) -> np.ndarray:
        """Give partial pressure over that in equilibrium with the liquid at the column's conditions."""
        state = liquid.flows[..., None, :]
        wanted = law.complex_gas(self._coordinates(law, state))[..., 0, :]
        if not np.iscomplexobj(state) and not np.iscomplexobj(gas.flows):
            wanted = wanted.real
        have = divide(gas.flows, gas.total[..., None])[..., self.places]
        if not law.plain:
            ratio = divide(gas.flows, gas.flows[..., self.gas_basis].sum(axis=-1)[..., None])[..., self.places]
            have = np.where(law.ratio, ratio, have)
        return divide(have, wanted)

    def off_table(self, inlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping[str, np.ndarray]) -> np.ndarray:
        """Tell which cases use a model off its table.

        Returns
        -------
        (M,) bool
        """
        if all(type(model).outside is _NEVER for model in self.models):
            return np.zeros(len(inlets["gas_in"].state), dtype=bool)
        stages = self._stages(inlets, numbers)
        with np.errstate(all="ignore"):
            liquid = phases(stages, self._unknowns(numbers, inlets, memory)).liquid
        return stages.law.outside(liquid).any(axis=1)

    def cautions(
        self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping[str, np.ndarray]
    ) -> list[str]:
        """Say where the pressure of the liquid is too low or a correlation's range is left."""
        found = []
        temperature, pressure = self._conditions(inlets, numbers)
        if np.any(inlets["liquid_in"].pressure < pressure * (1 - 1e-6)):
            found.append(f"Column {self.name}: its liquid is fed at less than the column's pressure; a pump is needed.")
        unknowns = self._unknowns(numbers, inlets, memory)
        found += self._condensing(inlets, temperature, pressure, unknowns[..., 0])
        stages = self._stages(inlets, numbers)
        with np.errstate(all="ignore"):
            liquid = phases(stages, unknowns).liquid
        for index, (name, model) in enumerate(zip(self.model_names, self.models, strict=True)):
            for sentence in model.cautions(temperature[:, None], pressure[:, None], liquid[..., index]):
                found.append(f"Column {self.name}, {name}: {sentence}")
        return found

    def _condensing(
        self, inlets: Mapping[str, Stream], temperature: np.ndarray, pressure: np.ndarray, gas_flow: np.ndarray
    ) -> list[str]:
        """Say where steam that is declared to stay in the gas would condense."""
        names = self.around.components.names
        found = []
        for place in np.flatnonzero(self.stays_gas):
            if is_water(names[place]):
                with np.errstate(all="ignore"):
                    partial = (inlets["gas_in"].flows[:, place] * pressure)[:, None] / gas_flow
                    wet = partial.max(axis=1) > vapour_pressure(temperature)
                if wet.any():
                    found.append(
                        f"Column {self.name}: {names[place]} is declared to stay in the gas but is above its "
                        "saturation pressure, so that it would condense; the result is not honest there."
                    )
        return found


class _Asked:
    """Derivatives of a column along seeds: what they change in the stage equations, and what answers.

    Parameters
    ----------
    column : Column
    stages : Stages
    inlets, numbers, tangents, number_tangents, seeds
        As for `Unit.evaluate`.
    """

    def __init__(
        self,
        column: Column,
        stages: Stages,
        inlets: Mapping[str, Stream],
        numbers: Numbers,
        tangents: Mapping[str, np.ndarray | None],
        number_tangents: Mapping[str, np.ndarray],
        seeds: int,
    ) -> None:
        self.column, self.stages = column, stages
        cases, count, parts = stages.shape
        self.still = still = np.zeros((seeds, cases, len(column.stays_gas) + 2))
        gas, liquid = tangents.get("gas_in"), tangents.get("liquid_in")
        gas, liquid = still if gas is None else gas, still if liquid is None else liquid
        gas_flows, liquid_flows = gas[..., :-2], liquid[..., :-2]
        self.fed = gas_flows + liquid_flows
        self.feeds = np.zeros((seeds, cases, count, parts))
        self.feeds[:, :, 0] = liquid[..., column.places]
        self.feeds[:, :, -1] += gas[..., column.places]
        self.up, self.down = column._inert(gas_flows, liquid_flows, count, *column.weights)
        self.up_basis, self.down_basis = self.up, self.down
        if not stages.law.plain:
            self.up_basis, self.down_basis = column._inert(gas_flows, liquid_flows, count, *column.basis_weights)
        own = still[..., -2] if "temperature" in numbers else liquid[..., -2]
        self.temperature = number_tangents.get("temperature", own)
        own = still[..., -1] if "pressure" in numbers else gas[..., -1]
        self.pressure = number_tangents.get("pressure", own)
        self.models = [
            {key: number_tangents[f"{name}.{key}"] for key in model.numbers if f"{name}.{key}" in number_tangents}
            for name, model in zip(column.model_names, column.models, strict=True)
        ]
        self.shifts = any(self.models) or self.temperature.any() or self.pressure.any()

    def _shift(self, at: Phases) -> np.ndarray | float:
        """Give the change of the gas coordinates at fixed liquid ones."""
        if not self.shifts:
            return 0.0
        return self.stages.law.shifted(at.liquid, self.temperature[..., None], self.pressure[..., None], self.models)

    def right(self, at: Phases) -> np.ndarray:
        """Give the change of the stage equations at fixed unknowns, (S, M, N, 1 + D)."""
        direct = gas_change(
            self.stages, at, 0.0, 0.0, self.down, self.down_basis, self.up_basis, self._shift(at)
        )
        return rows(self.up, self.feeds, direct)

    def chained(
        self, answer: Answer, first: Stages, at_top: Phases
    ) -> tuple[dict[str, np.ndarray | None], np.ndarray]:
        """Give the derivatives of the outlets by label, and of the unknowns."""
        moved = answer.respond(self.right(answer.at)) if answer.moved is None else answer.moved
        failed = answer.status != OK
        if failed.any():
            moved[:, failed] = 0.0
        top = slice(0, 1)
        leaving = gas_change(
            first,
            at_top,
            moved[:, :, top, 0],
            moved[:, :, top, 1:],
            self.down[..., top],
            self.down_basis[..., top],
            self.up_basis[..., top],
            self._shift(at_top),
        )[:, :, 0]
        found: dict[str, np.ndarray | None] = {}
        sides = zip(("gas_out", "liquid_out"), self.column.weights, (leaving, moved[:, :, -1, 1:]), strict=True)
        for label, weights, own in sides:
            way = np.empty_like(self.still)
            np.multiply(self.fed, weights, out=way[..., :-2])
            way[..., self.column.places] = own
            way[..., -2], way[..., -1] = self.temperature, self.pressure
            found[label] = way
        return found, moved


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

