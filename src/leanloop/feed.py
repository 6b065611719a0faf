"""Feeds: streams that enter the flowsheet from outside, from the numbers that a user gives."""

from __future__ import annotations

import copy
from collections.abc import Callable, Iterable, Mapping
from functools import partial
from typing import Any

import numpy as np
from scipy.constants import R

from leanloop.components import PHASES, Components
from leanloop.entries import Context, Entry, Values, near, read_number, read_values, shown_key, shown_name
from leanloop.equilibrium.conditions import Conditions
from leanloop.equilibrium.water import is_water
from leanloop.equilibrium.water import vapour_pressure as water_vapour_pressure
from leanloop.errors import nearest
from leanloop.flash.mixture import Mixture
from leanloop.flash.solve import at_temperature, enthalpy
from leanloop.stream import TWO_PHASE, Stream, divide

FORMS = ("fractions", "mass_fractions", "ratios", "loadings")
FLOW_SORTS = ("molar flow", "mass flow", "volume flow")
SUM_TOLERANCE = 1e-6

ENTRIES = (
    Entry("phase", "choice", required=True, choices=(*PHASES, TWO_PHASE), doc="gas, liquid, or two-phase at its T and P"),
    Entry("equilibrium", "equilibrium", doc="table by which a two-phase feed is split"),
    Entry("temperature", "temperature", required=True),
    Entry("pressure", "pressure", required=True, above=0.0),
    Entry("saturated_with", "component", doc="component of which the gas holds what it can at its T and P"),
    Entry("flow", FLOW_SORTS, least=0.0, doc="whole stream; gas also in m3 at its own T and P, or Nm3"),
)
_PART = Entry("part", ("number", "molar mass"), least=0.0)
_FLOW = Entry("flows", ("molar flow", "mass flow"), least=0.0, by="component")


def _saturation(model: Any, temperature: np.ndarray) -> np.ndarray:
    return model.saturation_pressure(temperature, model.numbers)


class Feed:
    """A stream that enters from outside.

    Parameters
    ----------
    name : str
    **raw : Any
        Entries as a file would hold them; in Python plain SI numbers may stand for quantities.
    """

    def __init__(self, name: str, /, **raw: Any) -> None:
        self.name, self.raw = name, raw
        self.lost = False  # what was written of it is no table: its name alone is known
        self.values = Values()
        self.form, self.rest = "", ""
        self.vapour_pressure: Callable[[np.ndarray], np.ndarray] | None = None
        self.mixture: Mixture | None = None

    @property
    def phase(self) -> str:
        """``"gas"``, ``"liquid"`` or ``"two-phase"``, empty where it is not rightly given."""
        return self.values.words.get("phase", "")

    def read(
        self,
        components: Components,
        basis: Mapping[str, tuple[str, ...]],
        conditions: Mapping[str, Conditions],
        context: Context,
    ) -> Feed:
        """Give a copy with its entries read; faults are noted in the context.

        Parameters
        ----------
        components : Components
        basis : mapping of str to tuple of str
            What ``[basis]`` sets.
        conditions : mapping of str to Conditions
            Where the vapour pressure of a saturated component is looked for.
        context : Context
        """
        feed = copy.copy(self)
        feed.components, feed.basis, feed.vapour_pressure = components, basis, None
        if self.lost:
            return feed
        address = f"feeds.{self.name}"
        forms = [form for form in (*FORMS, "flows") if form in self.raw]
        plain = {key: value for key, value in self.raw.items() if key not in (*FORMS, "flows")}
        context = context.knowing(component=components.names)
        meant = self._misspelt(plain, address, context)
        feed.values = read_values(ENTRIES, plain, address, context)
        if not forms and meant & {*FORMS, "flows"}:
            return feed
        if len(forms) != 1:
            context.fault(
                f"{address}.{forms[1]}" if forms else f"{address}.fractions",
                f"composition is given {'by ' + ' and '.join(forms) if forms else 'in no form'}",
                f"give one of {', '.join((*FORMS, 'flows'))}",
            )
            return feed
        feed.form = forms[0]
        if feed.form == "flows":
            own = read_values((_FLOW,), {"flows": self.raw["flows"]}, address, context)
            if isinstance(self.raw["flows"], Mapping) and not self.raw["flows"]:
                context.fault(f"{address}.flows", "holds nothing", 'write flows = { component = "10 mol/s" }')
            feed.values.numbers.update(own.numbers)
            feed.values.sorts.update(own.sorts)
            feed.values.entries.update(own.entries)
            if "flow" in self.raw:
                context.fault(f"{address}.flow", "flow and flows are both given", "keep one of them")
        else:
            if "flow" not in self.raw and "flow" not in meant:
                context.fault(f"{address}.flow", "entry is missing", 'add flow = "10 mol/s", or give flows by component')
            feed._read_parts(address, context)
        if "saturated_with" in feed.values.words:
            feed._read_saturation(feed.values.words["saturated_with"], conditions, address, context)
        feed._check(address, context)
        return feed

    @staticmethod
    def _misspelt(plain: dict[str, Any], address: str, context: Context) -> set[str]:
        """Note and take out entries that are none, and give the names they are taken for."""
        own = [entry.name for entry in ENTRIES]
        every, meant = [*own, *FORMS, "flows"], set()
        for key in [key for key in plain if key not in own]:
            name = near(key, every)
            if name not in own or name == "flow":
                context.fault(f"{address}.{shown_key(key)}", f"unknown entry {shown_name(key)}", nearest(key, every))
                meant.add(name)
                del plain[key]
        return meant - {None}

    def _read_saturation(self, name: str, conditions: Mapping[str, Conditions], address: str, context: Context) -> None:
        where = f"{address}.saturated_with"
        if self.phase == "liquid":
            context.fault(where, "is for a gas", "take it away, or make the feed a gas")
        if self.form == "flows":
            context.fault(where, "does not go with flows by component", "give flow and fractions of the dry gas")
        if name in self.values.group(self.form) or name == self.rest:
            remedy = f"take it out of {self.form}, which then is the dry gas"
            context.fault(where, f"'{name}' is given in {self.form} as well", remedy)
        for table in conditions.values():
            model = table.models.get(name)
            if hasattr(model, "saturation_pressure"):
                self.vapour_pressure = partial(_saturation, model)
                break
        else:
            if is_water(name):
                self.vapour_pressure = water_vapour_pressure
            else:
                context.fault(where, f"no vapour pressure of '{name}' is known", "give it a raoult model in an equilibrium table")
        numbers = self.values.numbers
        if self.vapour_pressure is not None and {"temperature", "pressure"} <= set(numbers):
            with np.errstate(all="ignore"):  # above its critical temperature it has no vapour pressure
                pressure = float(self.vapour_pressure(np.array(numbers["temperature"])))
            if not pressure < numbers["pressure"]:
                context.fault(where, f"'{name}' boils at this temperature and pressure", "lower the temperature")

    def _read_parts(self, address: str, context: Context) -> None:
        table = self.raw[self.form]
        where = f"{address}.{self.form}"
        if not isinstance(table, Mapping) or not table:
            context.fault(where, "is no table of components", f'write {self.form} = {{ name = 0.02, other = "rest" }}')
            return
        values, faults = self.values, len(context.faults)
        for name, raw in table.items():
            place = f"{where}.{shown_key(name)}"
            if name not in self.components.index:
                if len(self.components):  # none at all is a fault already
                    context.fault(place, f"unknown component {shown_name(name)}", nearest(name, self.components.names))
            elif isinstance(raw, str) and raw == "rest":
                if self.rest:
                    context.fault(place, f"'{self.rest}' is the rest already", "let one component alone be the rest")
                self.rest = name
            else:
                number = read_number(raw, _PART, place, context)
                if number is not None:
                    value, sort = number
                    if sort == "molar mass" and "Nm3" not in raw:
                        context.fault(place, f"{shown_name(raw)} is no part of a gas", "write a fraction, ppm or mg/Nm3")
                    elif sort == "molar mass":  # mass of the component per mol of gas, from mg/Nm3
                        value = self._from_concentration(value, name, place, context)
                    values.numbers[f"{self.form}.{name}"] = value
                    values.sorts[f"{self.form}.{name}"] = "number"
                    values.entries[f"{self.form}.{name}"] = _PART
        if len(context.faults) > faults:
            return
        if not len(self.components) or self.form in ("ratios", "loadings") and not self.phase:
            return  # which basis they refer to is not known
        if self.form == "loadings" and self.phase == "gas":
            return
        total = sum(values.group(self.form)[name] for name in self._summed())
        if self.rest and self.rest not in self._summed([self.rest]):
            what = f"{self.form} are per mol of a basis that '{self.rest}' is no part of, so that it cannot be the rest"
            context.fault(f"{where}.{self.rest}", what, "write its value, and the rest for one of the basis")
        elif self.rest and total > 1.0:
            context.fault(where, f"the given parts sum to {total:g}, which leaves no rest", "make them sum to less than 1")
        elif not self.rest and abs(total - 1.0) > SUM_TOLERANCE:
            context.fault(where, f"the parts sum to {total:g}", 'make them sum to 1, or write "rest" for one of them')

    def _from_concentration(self, value: float, name: str, place: str, context: Context) -> float:
        mass = self.components[name].molar_mass
        if self.form != "fractions" or self.phase == "liquid":
            context.fault(place, "mass per normal volume is for the fractions of a gas", "write a mole fraction")
        elif mass is None:
            context.fault(f"components.{name}.molar_mass", "entry is missing", "add it, as a feed is given in mg/Nm3")
        return value / (mass or 1.0)

    def _summed(self, names: Iterable[str] | None = None) -> list[str]:
        """Give the components whose parts sum to one: all, or those of the basis for ratios."""
        names = list(self.values.group(self.form) if names is None else names)
        if self.form in ("fractions", "mass_fractions"):
            return names
        return [name for name in names if name in self._basis_names()]

    def _basis_names(self) -> list[str]:
        key = "loading" if self.form == "loadings" else self.phase
        given = self.basis.get(key) or self.basis.get(self.phase)
        if given:
            return list(given)
        return [item.name for item in self.components if item.stays_in == self.phase]

    def _check(self, address: str, context: Context) -> None:
        numbers, sorts = self.values.numbers, self.values.sorts
        if sorts.get("flow") == "volume flow" and self.phase == "liquid":
            context.fault(f"{address}.flow", "a liquid's volume needs a density", "give its molar or mass flow")
        by_mass = self.form == "mass_fractions" or sorts.get("flow") == "mass flow"
        for name in self.present():
            own = by_mass or sorts.get(f"flows.{name}") == "mass flow"
            if own and self.components[name].molar_mass is None:
                context.fault(
                    f"components.{name}.molar_mass", "entry is missing", f"add it, as feed '{self.name}' is given by mass"
                )
        if self.form == "loadings" and self.phase == "gas":
            context.fault(f"{address}.loadings", "loadings are for liquids", "give ratios or fractions")
        if "temperature" in numbers and not 20.0 <= numbers["temperature"] <= 3000.0:
            problem = f"{numbers['temperature']:g} K is no temperature of a process stream"
            context.fault(f"{address}.temperature", problem, "check its unit")

    def connect(self, conditions: Mapping[str, Conditions], heat: Any, context: Context) -> None:
        """Settle how a two-phase feed is split; faults are noted.

        Parameters
        ----------
        conditions : mapping of str to Conditions
        heat : Heat or None
        context : Context
        """
        address, table = f"feeds.{self.name}", self.values.words.get("equilibrium")
        if self.phase != TWO_PHASE:
            if table is not None:
                context.fault(f"{address}.equilibrium", "is for a two-phase feed", 'take it away, or write phase = "two-phase"')
            return
        if table is None:
            if "equilibrium" not in self.raw:
                context.fault(f"{address}.equilibrium", "entry is missing", "name the table that splits the feed")
            return
        present = self.components.mask(self.present())
        place = f"two-phase feed '{self.name}'"
        self.mixture = Mixture.connect(self.components, conditions[table], present, self.basis, heat, place, context)
        names = self.components.names
        lost = [name for name, here in zip(names, present, strict=True) if here] if heat is None else [
            *heat.lacking("gas", present & ~self.mixture.stays_liquid), *heat.lacking("liquid", present & ~self.mixture.stays_gas)
        ] if self.mixture is not None else []  # fmt: skip
        for name in dict.fromkeys(lost):
            remedy = 'add gas_heat_capacity = "33.6 J/(mol K)", liquid_heat_capacity and heat_of_vaporisation as they apply'
            context.fault(f"heat_data.{name}", f"feed '{self.name}' is two-phase and '{name}' has no enthalpy", remedy)

    def present(self) -> list[str]:
        """Give the components that the feed can hold."""
        names = list(self.values.group(self.form))
        own = (self.rest, self.values.words.get("saturated_with"))
        return [name for name in self.components.names if name in names or name in own]

    def addresses(self) -> dict[str, str]:
        """Give the address of every number by its local name."""
        own = {key: f"feeds.{self.name}.{key}" for key in self.values.numbers}
        return own if self.mixture is None else {**self.mixture.addresses(), **own}

    def stream(self, numbers: Mapping[str, Any], changed: frozenset[str] = frozenset()) -> Stream:
        """Give the stream; a two-phase one is split at its temperature to find its enthalpy.

        Parameters
        ----------
        numbers : mapping of str to float or (...,) array
            SI numbers by local name; complex numbers allowed.
        changed : frozenset of str
            Local names of fractions that were set anew; without a rest the others are scaled.

        Returns
        -------
        Stream
            State (..., C + 2).
        """
        shape = np.broadcast_shapes(*(np.shape(value) for value in numbers.values() if not isinstance(value, list)))
        parts = {
            name: np.asarray(numbers[f"{self.form}.{name}"])
            for name in self.components.names
            if f"{self.form}.{name}" in numbers
        }
        if self.form == "flows":
            amounts = {
                name: value / self.components[name].molar_mass
                if self.values.sorts[f"flows.{name}"] == "mass flow"
                else value
                for name, value in parts.items()
            }
        else:
            parts = self._complete(parts, changed)
            if self.vapour_pressure is not None:
                parts = self._saturated(parts, numbers)
            amounts = self._scaled(parts, numbers)
        kind = np.result_type(float, *(np.asarray(value) for value in amounts.values()))
        flows = np.zeros((*shape, len(self.components)), dtype=kind)
        for name, value in amounts.items():
            flows[..., self.components.index[name]] = value
        temperature, pressure = np.asarray(numbers["temperature"]), np.asarray(numbers["pressure"])
        if self.phase != TWO_PHASE:
            return Stream.of(flows, temperature, pressure, self.phase)
        split = at_temperature(self.mixture, flows, temperature, pressure, numbers)
        energy = enthalpy(self.mixture, split.gas, split.liquid, split.temperature, numbers)
        return Stream.of(flows, divide(energy, flows.sum(axis=-1)), pressure, TWO_PHASE)

    def _complete(self, parts: dict[str, Any], changed: frozenset[str]) -> dict[str, Any]:
        """Give parts in proportion to moles."""
        names = self._summed()
        if self.rest:
            parts = {**parts, self.rest: 1.0 - sum(parts[name] for name in names)}
        else:
            moved = [name for name in names if f"{self.form}.{name}" in changed]
            others = [name for name in names if name not in moved]
            if moved and others:
                left = 1.0 - sum(parts[name] for name in moved)
                now = sum(self.values.numbers[f"{self.form}.{name}"] for name in others)
                if now > 0:
                    parts = {**parts, **{name: parts[name] * left / now for name in others}}
        if self.form == "mass_fractions":
            parts = {name: value / self.components[name].molar_mass for name, value in parts.items()}
        return parts

    def _saturated(self, parts: dict[str, Any], numbers: Mapping[str, Any]) -> dict[str, Any]:
        """Add the vapour that saturates the gas to parts in proportion to moles."""
        fraction = self.vapour_pressure(np.asarray(numbers["temperature"])) / numbers["pressure"]
        fraction = np.where(np.real(fraction) < 1.0, fraction, np.nan)
        return {**parts, self.values.words["saturated_with"]: sum(parts.values()) * fraction / (1.0 - fraction)}

    def _scaled(self, parts: dict[str, Any], numbers: Mapping[str, Any]) -> dict[str, Any]:
        flow, sort = np.asarray(numbers["flow"]), self.values.sorts["flow"]
        if sort == "mass flow":
            per = sum(value * self.components[name].molar_mass for name, value in parts.items())
        else:
            per = sum(parts.values())
        if sort == "volume flow":
            flow = flow * numbers["pressure"] / (R * numbers["temperature"])
        return {name: value * (flow / per) for name, value in parts.items()}
