"""What a column reports: removal, factors, approach to equilibrium, profile, cautions."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, ClassVar

import numpy as np

from leanloop.column.equations import phases
from leanloop.equilibrium.base import EquilibriumModel
from leanloop.equilibrium.water import is_water, vapour_pressure
from leanloop.stream import Stream, divide
from leanloop.units.base import Numbers, Unit
from leanloop.units.column_entries import own_counts, stage_count
from leanloop.units.column_inside import Inside

_NEVER = EquilibriumModel.outside


def spread(numbers: Numbers) -> dict[str, Any]:
    """Give numbers with one more axis for the stages."""
    return {key: value[..., None] if isinstance(value, np.ndarray) else value for key, value in numbers.items()}


class ColumnReport(Unit):
    """The reporting half of `leanloop.units.column.Column`, which solves the stages."""

    cleans: ClassVar[str] = "gas"
    conserves: ClassVar[bool] = True

    def results(
        self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping[str, np.ndarray]
    ) -> dict[str, Any]:
        """Give removal, factors, approaches and the profile."""
        names = self.around.components.names
        inside = self._inside(inlets, numbers, memory) if self.inner is None else self.inner.inside(inlets, numbers, memory)
        liquid, gas, temperature, k = inside.liquid, inside.gas, inside.temperature, inside.k
        liquid_in, liquid_out, gas_out = inlets["liquid_in"], outlets["liquid_out"], outlets["gas_out"]
        gas_in = inlets.get("gas_in")
        l_total, g_total = liquid.sum(axis=-1), gas.sum(axis=-1)
        x, y = divide(liquid, l_total[..., None]), divide(gas, g_total[..., None])
        ratio_x = divide(liquid, liquid[..., self.liquid_basis].sum(axis=-1)[..., None])
        ratio_y = divide(gas, gas[..., self.gas_basis].sum(axis=-1)[..., None])
        factor = divide(l_total[..., None], k * g_total[..., None])
        trays = slice(inside.first, inside.last)
        inlet, outlet = (gas_in, gas_out) if self.cleans == "gas" else (liquid_in, liquid_out)
        removal = 1.0 - divide(outlet.flows, inlet.flows)
        own = own_counts(numbers)
        if own is None:
            lowest = factor[..., trays, :][..., -1, :]
        else:
            lowest = factor[..., np.arange(len(own)), own - 1, :]
            under = np.arange(l_total.shape[-1]) >= own[:, None]
            l_total, g_total = np.where(under, np.nan, l_total), np.where(under, np.nan, g_total)
            x, ratio_x = (np.where(under[..., None], np.nan, item) for item in (x, ratio_x))
        ends = np.sqrt(factor[..., trays, :][..., 0, :] * lowest)
        if self.cleans == "gas":
            rich, lean = (gas_in, liquid_out, -1), (gas_out, liquid_in, 0)
        else:
            rich, lean = (gas_out, liquid_in, 0), (gas_in, liquid_out, -1)
        rich, lean = (self._approach(own, liquid_side, inside, end) for own, liquid_side, end in (rich, lean))
        place = dict(zip(self.model_names, range(len(self.model_names)), strict=True))

        def by_name(values: np.ndarray | None) -> dict[str, np.ndarray | None]:
            return {name: None if values is None else values[..., index] for name, index in place.items()}

        groups = {name: self.around.components.places(name) for name in self.around.components.groups}

        def by_component(values: np.ndarray) -> dict[str, np.ndarray]:
            own = {name: values[..., index] for index, name in enumerate(names)}
            return own | {name: values[..., members].sum(axis=-1) for name, members in groups.items()}

        moving = [index for index, name in enumerate(names) if name in place]
        return {
            "results": {
                "removal": {names[index]: removal[..., index] for index in moving}
                | {
                    name: 1.0 - divide(outlet.flows[..., members].sum(axis=-1), inlet.flows[..., members].sum(axis=-1))
                    for name, members in groups.items()
                },
                "absorption_factor": by_name(ends),
                "stripping_factor": by_name(divide(np.ones_like(ends), ends)),
                "solvent_to_gas": None
                if gas_in is None or not (self.liquid_basis & self.present).any() or not (self.gas_basis & self.present).any()
                else divide(liquid_in.flows[..., self.liquid_basis].sum(axis=-1), gas_in.flows[..., self.gas_basis].sum(axis=-1)),
                "approach_rich": by_name(rich),
                "approach_lean": by_name(lean),
                **self._duties(inlets, outlets, numbers, inside),
            },
            "profile": {
                "stage": np.broadcast_to(np.arange(l_total.shape[-1]) + 1 - inside.first, l_total.shape),
                "temperature_K": temperature,
                "pressure_Pa": np.broadcast_to(inside.pressure, l_total.shape),
                "x": by_component(x),
                "y": by_component(y),
                "X": by_component(ratio_x),
                "Y": by_component(ratio_y),
                "liquid_mol_s": l_total,
                "gas_mol_s": g_total,
                "K": by_name(k),
                "A": by_name(factor),
                **({} if inside.duty is None else {"duty_W": inside.duty}),
            },
        }

    def _inside(self, inlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping[str, np.ndarray]) -> Inside:
        """Give flows and conditions on the stages of a plain column."""
        gas_in, liquid_in = inlets["gas_in"], inlets["liquid_in"]
        unknowns = self._unknowns(numbers, inlets, memory)
        count = unknowns.shape[-2]
        temperature, pressure = self.conditions_of(inlets, numbers)
        law = self.law.at(temperature[..., None], pressure[..., None], self.model_numbers(numbers))
        fed = gas_in.flows + liquid_in.flows
        depth = own_counts(numbers)
        liquid = np.repeat(np.where(self.stays_liquid, liquid_in.flows, 0.0)[..., None, :], count, axis=-2)
        if depth is None:
            liquid[..., -1, :] = np.where(self.stays_liquid, fed, 0.0)
        else:
            ends = np.arange(count) >= depth[:, None] - 1
            liquid = np.where(ends[..., None], np.where(self.stays_liquid, fed, 0.0)[..., None, :], liquid)
        gas = np.repeat(np.where(self.stays_gas, gas_in.flows, 0.0)[..., None, :], count, axis=-2)
        gas[..., 0, :] = np.where(self.stays_gas, fed, 0.0)
        if depth is not None:
            gas = np.where((np.arange(count) >= depth[:, None])[..., None], 0.0, gas)
        kind = np.result_type(liquid, unknowns)
        liquid, gas = liquid.astype(kind), gas.astype(kind)
        liquid[..., self.places] = unknowns[..., 1:]
        gas[..., self.places] = self._gas_flows(law, liquid, gas, unknowns[..., 0])
        x, y = (divide(flows, flows.sum(axis=-1)[..., None])[..., self.places] for flows in (liquid, gas))
        warm = np.broadcast_to(temperature[..., None], liquid.shape[:-1])
        found = Inside(liquid, gas, warm, pressure[..., None], self._k_values(law, x, y), law, 0, count)
        found.duty = self._stage_duties(inlets, numbers, found)
        return found

    def _stage_duties(self, inlets: Mapping[str, Stream], numbers: Numbers, inside: Inside) -> np.ndarray | None:
        """Give what keeps each isothermal stage at its temperature, (..., N) W; None where enthalpies are not known."""
        heat = self.around.heat
        if heat is None or not self.knows_heat:
            return None
        warm = inside.temperature
        down = (inside.liquid * heat.liquid(warm, spread(numbers))).sum(axis=-1)
        up = (inside.gas * heat.gas(warm, spread(numbers))).sum(axis=-1)
        duty = down + up
        duty = duty.copy()
        duty[..., 1:] -= down[..., :-1]
        duty[..., :-1] -= up[..., 1:]
        for label, place, function in (("liquid_in", 0, heat.liquid), ("gas_in", -1, heat.gas)):
            stream = inlets[label]
            duty[..., place] -= (stream.flows * function(stream.temperature, numbers)).sum(axis=-1)
        return duty

    def _duties(
        self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, inside: Inside
    ) -> dict[str, np.ndarray | None]:
        """Give the duties: of the stages, and of reboiler and condenser where there are any."""
        duty = inside.duty
        stages = None if duty is None else duty[..., inside.first : inside.last].sum(axis=-1)
        out = {"duty_W": stages}
        if inside.last < inside.liquid.shape[-2]:
            out["reboiler_duty_W"] = None if duty is None else duty[..., -1]
            out["boil_up"] = divide(inside.gas[..., -1, :].sum(axis=-1), outlets["liquid_out"].total)
        if inside.first:
            out["condenser_duty_W"] = None if duty is None else duty[..., 0]
            draw = outlets["condenser.draw"].total if "condenser.draw" in outlets else 0.0
            out["reflux_ratio"] = divide(inside.liquid[..., 0, :].sum(axis=-1) - draw, outlets["gas_out"].total)
        return out

    def _unknowns(self, numbers: Numbers, inlets: Mapping[str, Stream], memory: Mapping[str, np.ndarray]) -> np.ndarray:
        """Give the state inside, NaN where no case has ever come this far."""
        if "unknowns" in memory:
            return memory["unknowns"]
        shape = inlets["gas_in"].state.shape[:-1]
        return np.full((*shape, stage_count(numbers), len(self.places) + 1), np.nan)

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

    def _approach(self, gas: Stream | None, liquid: Stream, inside: Inside, end: int) -> np.ndarray | None:
        """Give partial pressure over that in equilibrium with the liquid, at the conditions of the end's stage."""
        if gas is None or "two-phase" in (gas.phase, liquid.phase):
            return None
        law = inside.law_at(end)
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
            return np.zeros(len(inlets["liquid_in"].state), dtype=bool)
        if self.inner is not None:
            return self.inner.off_table(inlets, numbers, memory)
        stages = self._stages(inlets, numbers)
        with np.errstate(all="ignore"):
            liquid = phases(stages, self._unknowns(numbers, inlets, memory)).liquid
        return stages.law.outside(liquid).any(axis=1)

    def cautions(
        self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping[str, np.ndarray]
    ) -> list[str]:
        """Say where the pressure of the liquid is too low or a correlation's range is left."""
        if self.inner is not None:
            return self.inner.cautions(inlets, outlets, numbers, memory)
        found = []
        temperature, pressure = self.conditions_of(inlets, numbers)
        if np.any(inlets["liquid_in"].pressure < pressure * (1 - 1e-6)):
            found.append(f"Column {self.name}: its liquid is fed at less than the column's pressure; a pump is needed.")
        if np.any(inlets["gas_in"].pressure < pressure * (1 - 1e-6)):
            found.append(f"Column {self.name}: its gas is fed at less than the column's pressure; a blower is needed.")
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
                    wet = np.where(gas_flow > 0, partial, 0.0).max(axis=1) > vapour_pressure(temperature)
                if wet.any():
                    found.append(
                        f"Column {self.name}: {names[place]} is declared to stay in the gas but is above its "
                        "saturation pressure, so that it would condense; the result is not honest there."
                    )
        return found
