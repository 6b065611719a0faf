"""A column with heat, efficiencies, side streams, reboiler or condenser, between its ports and the stage equations."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.column import tower_newton, tower_start
from leanloop.column.start import split_fractions
from leanloop.column.tower import (
    BOIL_UP,
    HEAT,
    REFLUX,
    TEMPERATURE,
    VAPOUR,
    Form,
    State,
    Tower,
    balances,
    beyond,
    evaluate,
    residual,
)
from leanloop.equilibrium.base import COMPLEX_STEP
from leanloop.equilibrium.water import is_water, vapour_pressure
from leanloop.status import OK, Status, code
from leanloop.stream import TWO_PHASE, Stream, divide
from leanloop.units.base import Evaluation, Numbers, outlet_status
from leanloop.units.column_entries import balances_heat, stage_count
from leanloop.units.column_inside import Inside
from leanloop.units.warmth import heat_flow

if TYPE_CHECKING:
    from leanloop.units.column import Column

OVERHEAD = 0.8  # of what is volatile, at most guessed to leave as gas
WARM = 350.0  # K, where nothing better is known
BOILING_HEAT = 4.0e4  # J/mol, to guess a boil-up
DRY = 1e-9  # of the flow: a draw that leaves less leaves nothing


class TowerPart:
    """What of a column depends on its entries alone, and the way between streams and stages.

    Parameters
    ----------
    column : Column
        Connected.
    """

    def __init__(self, column: Column) -> None:
        self.column = column
        words, numbers = column.values.words, column.values.numbers
        self.warm = balances_heat(column.values)
        self.condenser, self.reboiler = "condenser" in words, "reboiler" in words
        self.feeds = [f"side_feeds.{place}" for place in range(len(words.get("side_feeds", ())))]
        self.draws = [(f"side_draws.{place}", word["phase"]) for place, word in enumerate(words.get("side_draws", ()))]
        self.duties = [f"stage_duties.{place}" for place in range(len(words.get("stage_duties", ())))]
        self.condensate = "condenser.draw" in column.outlets
        self.by_component = {key.partition(".")[2] for key in numbers if key.startswith("efficiency.")}
        self.efficient = "efficiency" in numbers or bool(self.by_component)
        names = column.model_names
        murphree = np.array([self.efficient and (not self.by_component or name in self.by_component) for name in names], dtype=bool)
        heat = column.around.heat
        self.known = heat is not None and not self.lacking()
        present = column.present
        self.form_of = dict(
            law=column.law,
            places=column.places,
            gas_only=np.flatnonzero(column.stays_gas & present),
            liquid_only=np.flatnonzero(column.stays_liquid & present),
            gas_basis=column.gas_basis,
            liquid_basis=column.liquid_basis,
            murphree=murphree,
            draws_liquid=self.condensate or any(phase == "liquid" for _, phase in self.draws),
            draws_gas=any(phase == "gas" for _, phase in self.draws),
            liquid_enthalpy=heat.liquid if self.known else None,
            gas_enthalpy=heat.gas if self.known else None,
        )

    def lacking(self) -> list[str]:
        """Give the components for which the column knows no enthalpy."""
        column, heat = self.column, self.column.around.heat
        if heat is None:
            return [name for name, there in zip(column.around.components.names, column.present, strict=True) if there]
        gas = heat.lacking("gas", column.present & ~column.stays_liquid)
        return list(dict.fromkeys([*gas, *heat.lacking("liquid", column.present & ~column.stays_gas)]))

    # --- stages from streams

    def place(self, label: str, numbers: Numbers) -> int:
        """Give the place among all stages of a side feed, a draw or a duty.

        Raises
        ------
        ValueError
            Where the column has no such stage.
        """
        stage, count = int(numbers[f"{label}.stage"]), stage_count(numbers)
        if stage > count:
            raise ValueError(f"{label} is at stage {stage} of a column with {count}")
        return int(self.condenser) + stage - 1

    def roles(self, count: int) -> tuple[str, ...]:
        """Give what the first row of each stage is."""
        numbers = self.column.values.numbers
        inner = HEAT if self.warm else TEMPERATURE
        top = ((TEMPERATURE if "condenser.temperature" in numbers else REFLUX,) if self.condenser else ())
        bottom = ()
        if self.reboiler:
            kinds = (("duty", HEAT), ("boil_up", BOIL_UP), ("temperature", TEMPERATURE), ("stripping_ratio", VAPOUR))
            bottom = (next(role for key, role in kinds if f"reboiler.{key}" in numbers),)
        return (*top, *(inner,) * count, *bottom)

    def tower(self, inlets: Mapping[str, Stream], numbers: Numbers) -> Tower:
        """State the stages; leading axes and complex numbers are carried along."""
        column = self.column
        count, ahead = stage_count(numbers), int(self.condenser)
        form = Form(roles=self.roles(count), **self.form_of)
        total = len(form.roles)
        liquid = inlets["liquid_in"]
        plain = [np.asarray(value) for value in numbers.values() if not isinstance(value, list)]
        states = [stream.state for stream in inlets.values()]
        kind = np.result_type(*states, *plain)
        lead = np.broadcast_shapes(*(state.shape[:-1] for state in states), *(value.shape for value in plain))
        width = liquid.flows.shape[-1]
        fed = np.zeros((*lead, total, width), dtype=kind)
        heat = np.zeros((*lead, total), dtype=kind)
        blown = np.zeros((*lead, total, width), dtype=kind)
        placed = [("liquid_in", ahead)] + [(label, self.place(label, numbers)) for label in self.feeds]
        if "gas_in" in inlets:
            placed.append(("gas_in", ahead + count - 1))
        for label, stage in placed:
            fed[..., stage, :] += inlets[label].flows
            if self.known:
                heat[..., stage] += self.enthalpy_of(inlets[label], numbers)
        if "gas_in" in inlets:
            blown[..., ahead + count - 1, :] += inlets["gas_in"].flows
        spec = np.zeros((*lead, total), dtype=kind)
        if not self.warm:
            spec[..., ahead : ahead + count] = np.asarray(numbers.get("temperature", liquid.temperature))[..., None]
        for label in self.duties:
            spec[..., self.place(label, numbers)] += numbers[f"{label}.duty"]
        if self.condenser:
            spec[..., 0] = numbers.get("condenser.temperature", numbers.get("condenser.reflux_ratio"))
        if self.reboiler:
            key = next(key for key in ("duty", "boil_up", "temperature", "stripping_ratio") if f"reboiler.{key}" in numbers)
            value = numbers[f"reboiler.{key}"]
            spec[..., -1] = value * liquid.total if key == "stripping_ratio" else value
        drawn = {phase: np.zeros((*lead, total), dtype=kind) for phase in ("liquid", "gas")}
        for label, phase in self.draws:
            drawn[phase][..., self.place(label, numbers)] += numbers[f"{label}.flow"]
        if self.condensate:
            drawn["liquid"][..., 0] += numbers["condenser.draw.flow"]
        return Tower(
            form,
            column.model_numbers(numbers),
            {key: value for key, value in numbers.items() if key.startswith("heat.")},
            fed,
            blown,
            heat,
            self.pressure(inlets, numbers, lead, total),
            spec,
            drawn["liquid"],
            drawn["gas"],
            self.efficiencies(numbers, lead, total, kind),
        )

    def pressure(self, inlets: Mapping[str, Stream], numbers: Numbers, lead: tuple[int, ...], total: int) -> np.ndarray:
        """Give the pressures of the stages, (..., S) Pa: linear between bottom and top stage."""
        bottom = numbers["pressure"] if "pressure" in numbers else inlets["gas_in"].pressure
        inner = total - int(self.condenser) - int(self.reboiler)
        height = np.arange(inner)[::-1] / max(inner - 1, 1)
        if self.condenser:
            height = np.append(1.0, height)
        if self.reboiler:
            height = np.append(height, 0.0)
        bottom = np.asarray(bottom)[..., None]
        found = bottom - np.asarray(numbers.get("pressure_drop", 0.0))[..., None] * height
        return np.broadcast_to(found, (*lead, total)) if found.shape != (*lead, total) else found

    def efficiencies(self, numbers: Numbers, lead: tuple[int, ...], total: int, kind: Any) -> np.ndarray:
        """Give the Murphree efficiencies of stages and components, one for reboiler and condenser."""
        out = np.ones((*lead, total, len(self.column.places)), dtype=kind)
        if not self.efficient:
            return out
        inner = slice(int(self.condenser), total - int(self.reboiler))
        for place, name in enumerate(self.column.model_names):
            if self.by_component:
                if name in self.by_component:
                    out[..., inner, place] = np.asarray(numbers[f"efficiency.{name}"])[..., None]
            elif isinstance(numbers["efficiency"], (list, tuple)):
                out[..., inner, place] = numbers["efficiency"]
            else:
                out[..., inner, place] = np.asarray(numbers["efficiency"])[..., None]
        return out

    def enthalpy_of(self, stream: Stream, numbers: Numbers) -> np.ndarray:
        """Give the enthalpy flow of a feed, (...,) W."""
        return heat_flow(stream, self.column.around.heat, numbers)

    # --- starts

    def guess(
        self, tower: Tower, inlets: Mapping[str, Stream], numbers: Numbers, factor: float = 1.0
    ) -> tuple[np.ndarray, ...]:
        """Give rough temperatures and flows, (M, S) each, and which stages boil, (S,).

        Parameters
        ----------
        tower, inlets, numbers
            Of M cases.
        factor : float
            On the boil-up.
        """
        form = tower.form
        total, ahead = len(form.roles), int(self.condenser)
        cases = len(tower.fed)
        gas, liquid = np.zeros((cases, total)), np.zeros((cases, total))
        top = _warmth(inlets["liquid_in"])
        liquid[:, ahead:] += inlets["liquid_in"].total[:, None]
        for label in self.feeds:
            stream, place = inlets[label], self.place(label, numbers)
            if stream.phase == "gas":
                gas[:, : place + 1] += stream.total[:, None]
            else:
                liquid[:, place:] += stream.total[:, None]
        if "gas_in" in inlets:
            end = total - int(self.reboiler)
            gas[:, :end] += inlets["gas_in"].total[:, None]
        bottom = _warmth(inlets["gas_in"]) if "gas_in" in inlets else top + 20.0
        mix = tower.fed[..., form.places].sum(axis=1)
        still = tower.fed.sum(axis=(1, 2))
        boils = self.boils(tower)
        if self.reboiler:
            spec, role = tower.spec[:, -1], form.roles[-1]
            flow = liquid[:, -1]
            up = {
                HEAT: np.maximum(spec, 0.0) / self.boiling_heat(tower),
                BOIL_UP: spec / (1 + spec) * flow,
                VAPOUR: spec,
                TEMPERATURE: 0.3 * flow,
            }[role]
            up = factor * up
            # of what boils up a part leaves at the top, no more than is volatile
            share = 1.0 / (1.0 + tower.spec[:, 0]) if form.roles[0] == REFLUX else 0.5 if self.condenser else 1.0
            up = np.minimum(np.maximum(up, 1e-3 * flow), OVERHEAD * mix.sum(axis=1) / share)
            up = np.maximum(up, 1.2 * np.real(tower.liquid_draw[:, 0]))
            gas += up[:, None]
            gas[:, : ahead + 1] -= self.condensed(tower, inlets, numbers, up)[:, None]
            liquid[:, -1] = np.maximum(liquid[:, -1] - share * up, 0.1 * flow)
        fraction = mix / np.maximum(still, tower_start.TINY)[:, None]
        temperature = top[:, None] + (bottom - top)[:, None] * np.arange(total) / max(total - 1, 1)
        if boils.any():
            warm = tower_start.boiling(tower, temperature, np.repeat(fraction[:, None], total, axis=1), np.zeros((cases, total)))
            temperature = np.where(boils, warm, temperature)
        if self.condenser:
            spec = tower.spec[:, 0]
            if form.roles[0] == TEMPERATURE:
                temperature[:, 0] = spec
            share = 1.0 / (1.0 + spec) if form.roles[0] == REFLUX else 0.5
            taken = np.minimum(np.real(tower.liquid_draw[:, 0]), 0.9 * gas[:, 0])
            back = (1.0 - share) * (gas[:, 0] - taken)
            liquid[:, :-1] += back[:, None]
            liquid[:, 0] += taken
            gas[:, 0] -= back + taken
        return temperature, np.maximum(gas, 1e-6 * still[:, None]), np.maximum(liquid, 1e-6 * still[:, None]), boils

    def boils(self, tower: Tower) -> np.ndarray:
        """Tell which stages boil, (S,) bool: all where there is a reboiler, or hardly a gas that stays one."""
        inert = tower.fed[..., tower.form.gas_only].sum(axis=(1, 2))
        none = not (inert > 1e-3 * tower.fed.sum(axis=(1, 2))).any()
        return np.full(len(tower.form.roles), self.reboiler or none)

    def boiling_heat(self, tower: Tower, warm: np.ndarray | None = None) -> np.ndarray:
        """Give a mean heat of boiling of what is fed, (M,) J/mol."""
        if not self.known:
            return np.full(len(tower.fed), BOILING_HEAT)
        form = tower.form
        warm = np.full(len(tower.fed), WARM) if warm is None else warm
        mix = tower.fed[..., form.places].sum(axis=1)
        gap = form.gas_enthalpy(warm, tower.heat_numbers) - form.liquid_enthalpy(warm, tower.heat_numbers)
        mean = (mix * gap[..., form.places]).sum(axis=1) / np.maximum(mix.sum(axis=1), tower_start.TINY)
        return np.clip(np.where(np.isfinite(mean), mean, BOILING_HEAT), 5e3, 2e5)

    def condensed(self, tower: Tower, inlets: Mapping[str, Stream], numbers: Numbers, up: np.ndarray) -> np.ndarray:
        """Give how much of a boil-up condenses to warm the liquid fed at the top, (M,) mol/s; negative where that flashes."""
        stream, form = inlets["liquid_in"], tower.form
        if not self.known:
            return np.zeros(len(up))
        fraction = divide(stream.flows, stream.total[..., None])[:, None, form.places]
        place = slice(int(self.condenser), int(self.condenser) + 1)
        few = replace(tower, pressure=tower.pressure[:, place])
        warm = tower_start.boiling(few, _warmth(stream)[:, None], np.nan_to_num(fraction), np.zeros((len(up), 1)))[:, 0]
        hot = (stream.flows * form.liquid_enthalpy(warm, tower.heat_numbers)).sum(axis=-1)
        need = (hot - self.enthalpy_of(stream, numbers)) / self.boiling_heat(tower, warm)
        return np.clip(np.nan_to_num(need), -0.5 * stream.total, 0.9 * up)

    # --- solving

    def evaluate(
        self,
        inlets: Mapping[str, Stream],
        numbers: Numbers,
        memory: Mapping[str, np.ndarray] | None,
        tangents: Mapping[str, np.ndarray | None],
        number_tangents: Mapping[str, np.ndarray],
        seeds: int,
    ) -> Evaluation:
        """Solve all stages of all cases, and give the derivatives along the seeds."""
        tower = self.tower(inlets, numbers)
        guess = None
        shape = (*tower.fed.shape[:2], tower.form.unknowns)
        if memory is not None and memory["unknowns"].shape == shape:
            guess = memory["unknowns"]
            at = len(tower.form.implicit)
            positive = np.maximum(guess, 0.0)
            positive[..., at + 1] = guess[..., at + 1]
            guess = positive
        with np.errstate(all="ignore"):
            rough: dict[float, tuple[np.ndarray, ...]] = {}

            def roughly(rows: np.ndarray, factor: float) -> list[np.ndarray]:
                if factor not in rough:
                    rough[factor] = self.guess(tower, inlets, numbers, factor)
                return [item[rows] for item in rough[factor][:3]]

            boils = self.boils(tower)
            answer = tower_newton.solve(
                tower,
                lambda own, rows, factor: tower_start.start(own, *roughly(rows, factor), boils),
                lambda own, rows, factor: tower_start.filling(own, *roughly(rows, factor)),
                guess,
                bool(seeds),
                bool(boils.any()),
            )
            state = evaluate(tower, answer.unknowns)
            outlets = self.outlets(tower, state, numbers)
            failed = answer.status != OK
            dry = ((state.down < DRY) | (state.up < DRY)).any(axis=1) & ~failed
            status = np.where(dry, code(Status.dry_stage), answer.status)
            for stream in outlets.values():
                stream.state[failed] = np.nan
            status = np.where(status != OK, status, outlet_status(outlets))
            found: dict[str, np.ndarray | None] = dict.fromkeys(outlets)
            memory_tangents = {}
            if seeds and (number_tangents or any(way is not None for way in tangents.values())):
                found, moved = self.response(answer, inlets, numbers, tangents, number_tangents, seeds)
                memory_tangents["unknowns"] = moved
        memory = {"unknowns": answer.unknowns, "first_step": answer.first_step}
        memory["iterations"] = np.full(len(answer.status), answer.iterations)
        return Evaluation(outlets, found, status, memory, memory_tangents)

    def response(
        self,
        answer: tower_newton.TowerAnswer,
        inlets: Mapping[str, Stream],
        numbers: Numbers,
        tangents: Mapping[str, np.ndarray | None],
        number_tangents: Mapping[str, np.ndarray],
        seeds: int,
    ) -> tuple[dict[str, np.ndarray | None], np.ndarray]:
        """Give the derivatives of the outlets and of the unknowns: the equations in complex numbers, one step off."""
        step = 1j * COMPLEX_STEP
        still = np.zeros((seeds, 1, 1))
        ways = {label: still if tangents.get(label) is None else tangents[label] for label in inlets}
        moved = {label: Stream(stream.state + step * ways[label], stream.phase) for label, stream in inlets.items()}
        shifted = {**numbers, **{key: numbers[key] + step * way for key, way in number_tangents.items()}}
        tower = self.tower(moved, shifted)
        change = residual(tower, evaluate(tower, answer.at.unknowns)).imag / COMPLEX_STEP
        change = np.broadcast_to(change, (seeds, *answer.unknowns.shape))
        change = np.where(np.isfinite(change), change, 0.0)
        way = answer.respond(change)
        way[:, answer.status != OK] = 0.0
        nothing = beyond(answer.tower)
        if nothing is not None:
            way[:, nothing] = 0.0
        outlets = self.outlets(tower, evaluate(tower, answer.unknowns + step * way), numbers)
        found = {}
        for label, stream in outlets.items():
            own = np.broadcast_to(stream.state.imag / COMPLEX_STEP, (seeds, len(answer.status), stream.state.shape[-1])).copy()
            own[:, answer.status != OK] = 0.0
            found[label] = own
        return found, way

    def outlets(self, tower: Tower, at: State, numbers: Numbers) -> dict[str, Stream]:
        """Give what leaves the column."""
        temperature, pressure = at.temperature, tower.pressure + 0.0 * at.temperature
        found = {
            "gas_out": (at.up[..., 0, None] * at.gas[..., 0, :], 0, "gas"),
            "liquid_out": (at.down[..., -1, None] * at.liquid[..., -1, :], -1, "liquid"),
        }
        for label, phase in self.draws:
            place = self.place(label, numbers)
            own, flow = (at.gas, at.total_gas) if phase == "gas" else (at.liquid, at.total_liquid)
            drawn = (tower.gas_draw if phase == "gas" else tower.liquid_draw)[..., place] / flow[..., place]
            found[label] = (drawn[..., None] * own[..., place, :], place, phase)
        if self.condensate:
            part = tower.liquid_draw[..., 0] / at.total_liquid[..., 0]
            found["condenser.draw"] = (part[..., None] * at.liquid[..., 0, :], 0, "liquid")
        return {
            label: Stream.of(flows, temperature[..., place], pressure[..., place], phase)
            for label, (flows, place, phase) in found.items()
        }

    def estimate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give rough outlets: one absorption factor for each component, at the guessed flows."""
        column = self.column
        with np.errstate(all="ignore"):
            if not inlets["liquid_in"].flows.any():  # nothing has come round the loop yet
                little = inlets["liquid_in"].state.copy()
                little[:, :-2] = sum(stream.flows for stream in inlets.values()) * np.where(column.stays_gas, 0.0, 1e-3)
                inlets = {**inlets, "liquid_in": Stream(little, inlets["liquid_in"].phase)}
            tower = self.tower(inlets, numbers)
            temperature, gas, liquid, _ = self.guess(tower, inlets, numbers)
            k = tower_start.k_values(tower, temperature)[:, :: max(1, k_step(temperature))].mean(axis=1)
            count = len(tower.form.roles)
            factor = np.clip(np.nan_to_num(k * (gas.mean(axis=1) / liquid.mean(axis=1))[:, None]), 1e-15, 1e15)
            stripped, absorbed = split_fractions(factor, count)
            fed = tower.fed.sum(axis=1)
            above = inlets["liquid_in"].flows
            up = np.where(column.stays_gas, fed, 0.0)
            up[:, column.places] = stripped * above[:, column.places] + (1 - absorbed) * (fed - above)[:, column.places]
            left = fed - up
            found: dict[str, Stream] = {}
            for label, phase in self.draws:
                place = self.place(label, numbers)
                flow = (tower.gas_draw if phase == "gas" else tower.liquid_draw)[:, place]
                own = up if phase == "gas" else left
                taken = own * np.minimum(flow / np.maximum(own.sum(axis=1), tower_start.TINY), 0.5)[:, None]
                if phase == "gas":
                    up = up - taken
                else:
                    left = left - taken
                found[label] = Stream.of(taken, temperature[:, place], tower.pressure[:, place], phase)
            if self.condensate:
                taken = up * np.where(column.stays_gas, 0.0, 0.3)
                up = up - taken
                found["condenser.draw"] = Stream.of(taken, temperature[:, 0], tower.pressure[:, 0], "liquid")
            found["gas_out"] = Stream.of(up, temperature[:, 0], tower.pressure[:, 0], "gas")
            found["liquid_out"] = Stream.of(left, temperature[:, -1], tower.pressure[:, -1], "liquid")
        return {label: found[label] for label in column.outlets}

    # --- reporting

    def inside(self, inlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping[str, np.ndarray]) -> Inside:
        """Give flows and conditions on the stages; complex numbers are carried along."""
        tower = self.tower(inlets, numbers)
        at = self.state(tower, memory)
        x = divide(at.liquid, at.total_liquid[..., None])[..., self.column.places]
        law = tower.bound(at.temperature)
        found = divide(divide(at.equilibrium, at.total_gas[..., None]), x)
        k = np.where(np.isfinite(found), found, np.broadcast_to(law.k_dilute, found.shape))
        duty = np.where(tower.form.rows(HEAT), tower.spec, balances(tower, at)) if self.known else None
        first = int(self.condenser)
        last = len(tower.form.roles) - int(self.reboiler)
        return Inside(at.liquid, at.gas, at.temperature, tower.pressure, k, law, first, last, duty)

    def state(self, tower: Tower, memory: Mapping[str, np.ndarray]) -> State:
        """Give the state inside, NaN where no case has ever come this far."""
        unknowns = memory.get("unknowns")
        if unknowns is None:
            unknowns = np.full((*tower.fed.shape[:-1], tower.form.unknowns), np.nan)
        with np.errstate(all="ignore"):
            return evaluate(tower, unknowns)

    def off_table(self, inlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping[str, np.ndarray]) -> np.ndarray:
        """Tell which cases use a model off its table, (M,) bool."""
        tower = self.tower(inlets, numbers)
        at = self.state(tower, memory)
        return tower.bound(at.temperature).outside(at.coordinate).any(axis=1)

    def cautions(
        self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping[str, np.ndarray]
    ) -> list[str]:
        """Say where a pressure is too low, steam would condense, a range is left, and where a temperature bulges."""
        column = self.column
        tower = self.tower(inlets, numbers)
        at = self.state(tower, memory)
        names = column.around.components.names
        head, found = f"Column {column.name}", []
        places = {"liquid_in": int(self.condenser), "gas_in": len(tower.form.roles) - 1 - int(self.reboiler)}
        places.update({label: self.place(label, numbers) for label in self.feeds})
        for label, place in places.items():
            if label in inlets and np.any(inlets[label].pressure < tower.pressure[..., place] * (1 - 1e-6)):
                need = "blower" if inlets[label].phase == "gas" else "pump"
                found.append(f"{head}: {column.inlets[label]} is fed at less than the column's pressure; a {need} is needed.")
        for place in np.flatnonzero(column.stays_gas):
            if is_water(names[place]):
                partial = at.gas[..., place] * tower.pressure / at.total_gas
                if np.any(partial > vapour_pressure(at.temperature)):
                    found.append(
                        f"{head}: {names[place]} is declared to stay in the gas but is above its saturation pressure, "
                        "so that it would condense; the result is not honest there."
                    )
        for index, (name, model) in enumerate(zip(column.model_names, column.models, strict=True)):
            for sentence in model.cautions(at.temperature, tower.pressure, at.coordinate[..., index]):
                found.append(f"{head}, {name}: {sentence}")
        if self.known:
            for item, place in zip(column.around.heat.items, range(len(names)), strict=True):
                if item is not None and column.present[place]:
                    own = ["gas"] * (not column.stays_liquid[place]) + ["liquid"] * (not column.stays_gas[place])
                    for phase in own:
                        found += [f"{head}, {names[place]}: {sentence}." for sentence in item.cautions(at.temperature, phase)]
        found += self._bulge(at)
        if "height" in numbers:
            real = numbers["height"] / numbers["hetp"]
            if np.any(np.abs(real - stage_count(numbers)) > 1e-6):
                found.append(f"{head}: its height makes {real:.4g} stages; {stage_count(numbers)} whole ones are calculated.")
        return found

    def _bulge(self, at: State) -> list[str]:
        """Say where a stage is hotter than both ends by more than 2 K: the middle of the column limits it."""
        if not self.warm or self.reboiler:
            return []
        inner = at.temperature[..., int(self.condenser) :]
        if inner.shape[-1] < 3:
            return []
        peak = np.nanmax(inner, axis=-1, initial=-np.inf)
        over = peak - np.maximum(inner[..., 0], inner[..., -1])
        if not np.any(over > 2.0):
            return []
        case = int(np.argmax(np.where(np.isfinite(over), over, -np.inf)))
        where = int(np.argmax(inner[case]))
        return [
            f"Column {self.column.name}: the temperature bulges to {peak[case] - 273.15:.1f} degC on stage {where + 1}, "
            f"{over[case]:.1f} K above both ends; the solvent holds least there."
        ]


def k_step(temperature: np.ndarray) -> int:
    """Give the step that takes some seven stages of a profile."""
    return temperature.shape[-1] // 7


def _warmth(stream: Stream) -> np.ndarray:
    """Give a temperature to begin with; of a stream that may be two-phase only its enthalpy is known."""
    return np.full(stream.state.shape[:-1], 350.0) if stream.phase == TWO_PHASE else stream.temperature
