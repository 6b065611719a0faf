"""Degradation: what a solvent in circulation loses, and the contaminants that it turns into."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np

from leanloop.components import Components
from leanloop.entries import Context, Entry, near
from leanloop.stream import Stream
from leanloop.units.base import Inlet, Numbers, Scene, Surroundings, Unit
from leanloop.units.heating import knows_heat, needs, range_cautions, refuse_two_phases
from leanloop.units.warmth import heat_addresses, heat_flow

SLACK = 1e-9  # of what flows: a loop's rounding is no rate that cannot be


class Degradation(Unit):
    """Turns a share, or a set flow, of components into others or into nothing that is followed further.

    All reactions take from what flows in, side by side. Temperature, pressure and phase stay: no heat of reaction is
    counted. Where a rate exceeds what flows, all that flows is taken while a loop is closed, and the case ends as failed.
    """

    kind = "degradation"
    shuts = True
    entries = (
        Entry("takes", "inlet", required=True, doc="the stream that degrades"),
        Entry("gives", "outlet", required=True, doc="the same stream with what is left and what is made"),
        Entry(
            "reactions", "tables", required=True, doc="what degrades; each by share or by rate",
            nested=(
                Entry("component", "component", required=True, doc="the one that degrades"),
                Entry("share", "number", least=0.0, most=1.0, doc="part of its flow that degrades each time it passes"),
                Entry("rate", "molar flow", least=0.0, doc="flow that degrades, whatever the circulation"),
                Entry("makes", "number", by="component", least=0.0, doc="mol made per mol degraded, by component"),
            ),
        ),
    )  # fmt: skip
    knows = False

    @classmethod
    def examples(cls) -> list[Scene]:
        """Give an amine in two ways, also with heat, by rate, all of a salt, a gas, and rates above what flows."""
        amine = Inlet("liquid", {"amine": [1.0, 0.9], "water": [2.0, 3.0], "salt": [0.01, 0.0], "heavy": 0.0}, [320.0, 390.0])
        ports = {"takes": "hot", "gives": "aged"}
        two = [
            {"component": "amine", "share": 0.02, "makes": {"salt": 0.5, "water": 1.5}},
            {"component": "amine", "share": 0.001, "makes": {"heavy": 0.4}},
        ]
        fixed = [
            {"component": "amine", "rate": 0.003, "makes": {"salt": 1.0}},
            {"component": "amine", "rate": 0.001},
            {"component": "salt", "share": 1.0, "makes": {"heavy": 0.2}},
        ]
        gas = Inlet("gas", {"air": [1.0, 3.0], "ozone": [0.01, 0.02]})
        data = {
            "amine": {"liquid_heat_capacity": {"polynomial": [90.0, 0.25], "temperature": "K", "unit": "J/(mol K)"}},
            **{name: {"liquid_heat_capacity": 75.3 + 40 * place} for place, name in enumerate(("water", "salt", "heavy"))},
        }
        return [
            Scene({**ports, "reactions": two}, {"takes": amine}),
            Scene({**ports, "reactions": fixed}, {"takes": amine}),
            Scene({**ports, "reactions": two + fixed[2:]}, {"takes": amine}, heat_data=data),
            Scene({**ports, "reactions": [{"component": "ozone", "share": 0.3}]}, {"takes": gas}),
            Scene({**ports, "reactions": [{"component": "amine", "rate": rate, "makes": {"salt": 0.5}} for rate in (2.0, 1.0)]},
                  {"takes": amine}),
        ]

    # --- reading and connecting

    def check(self, address: str, context: Context) -> None:
        """Something degrades, each by share or by rate, no more than all of it, and into something else."""
        raw = self.raw.get("reactions")
        if not isinstance(raw, (list, tuple)):
            return
        if not raw:
            context.fault(f"{address}.reactions", "degrades nothing", 'write [{ component = "amine", share = 0.001 }]')
        first: dict[str, tuple[int, str]] = {}
        shares: dict[str, float] = {}
        for place, item in enumerate(raw):
            if not isinstance(item, Mapping):
                continue
            where = f"{address}.reactions[{place}]"
            given = [key for key in ("share", "rate") if key in item]
            if len(given) == 2:
                context.fault(f"{where}.rate", "stands beside share", "keep one of the two")
            elif not given and not any(near(key, ("share", "rate")) for key in item if key not in ("component", "makes")):
                context.fault(f"{where}.share", "is not known", 'add share = 0.001 or rate = "0.2 mol/h"')
            own = self.values.words["reactions"][place].get("component")
            made = item.get("makes")
            if isinstance(made, Mapping):
                if not made:
                    context.fault(f"{where}.makes", "makes nothing", "leave it out, or write makes = { salt = 0.5 }")
                elif own in made:
                    context.fault(f"{where}.makes.{own}", f"'{own}' is made of itself", "degrade less of it instead")
            if own is None or len(given) != 1:
                continue
            before, way = first.setdefault(own, (place, given[0]))
            if way != given[0]:
                problem = f"'{own}' degrades by {way} in reactions[{before}]"
                context.fault(f"{where}.{given[0]}", problem, f"write {way} here as well, or {given[0]} there")
            shares[own] = shares.get(own, 0.0) + self.values.numbers.get(f"reactions.{place}.share", 0.0)
            if shares[own] > 1 + SLACK >= shares[own] - self.values.numbers.get(f"reactions.{place}.share", 0.0):
                context.fault(f"{where}.share", f"the shares of '{own}' sum to {shares[own]:g}", "let them sum to 1 at most")

    def connect(self, around: Surroundings, context: Context) -> Unit:
        """What is named can be in the stream, which is of one phase; settle whether there are heat data of all in it."""
        unit = super().connect(around, context)
        sound = not context.faults  # else what flows where may not be known
        come = around.present["takes"] | self.makes(around.components)
        refuse_two_phases(unit, "takes", "takes", context, "separate it in a flash drum before")
        phase, stream = around.phases["takes"], self.inlets["takes"]
        for place, own, made in self._reactions():
            where = f"units.{self.name}.reactions[{place}]"
            for name, spot in ((own, f"{where}.component"), *((name, f"{where}.makes.{name}") for name in made)):
                if phase == "liquid" and around.components[name].stays_in == "gas":
                    problem = f"'{name}' stays in the gas and stream '{stream}' is liquid"
                    context.fault(spot, problem, "name a component that can be in the liquid")
            stays = phase == "liquid" and around.components[own].stays_in == "gas"
            if sound and not stays and not come[around.components.index[own]]:
                problem = f"'{own}' never flows in stream '{stream}'"
                context.fault(f"{where}.component", problem, "name a component that does, or leave the reaction out")
        unit.knows = phase in ("gas", "liquid") and knows_heat(around, needs([(phase, come)]))
        return unit

    def addresses(self) -> dict[str, str]:
        """Own numbers, and those of the heat data where heat is balanced."""
        return {**super().addresses(), **(heat_addresses(self) if self.knows else {})}

    def _reactions(self) -> Iterator[tuple[int, str, dict[str, float]]]:
        """Give place, component and what is made of it, of every reaction that could be read."""
        for place, words in enumerate(self.values.words.get("reactions", ())):
            if "component" in words:
                yield place, words["component"], self.values.group(f"reactions.{place}.makes")

    # --- what the engine may know without calculating

    def passes(self, inlet: str, outlet: str, components: Components, numbers: Numbers | None = None) -> np.ndarray:
        """Everything passes but what degrades as a whole."""
        if numbers is None:
            return np.ones(len(components), dtype=bool)
        return ~(np.real(self._shares(components, numbers)) >= 1.0)

    def makes(self, components: Components, numbers: Numbers | None = None) -> np.ndarray:
        """What reactions make, where they run."""
        found = np.zeros(len(components), dtype=bool)
        for place, _, made in self._reactions():
            for name in made:
                runs = np.array(True)
                if numbers is not None:
                    amount = numbers.get(f"reactions.{place}.share", numbers.get(f"reactions.{place}.rate"))
                    runs = np.asarray(np.real(amount * numbers[f"reactions.{place}.makes.{name}"])) > 0.0
                found = found | (runs[..., None] & components.mask([name]))
        return found

    def destroys(self, components: Components, numbers: Numbers | None = None) -> np.ndarray:
        """What degrades by share; a rate does not follow what comes in."""
        if numbers is not None:
            return np.real(self._shares(components, numbers)) > 0.0
        named = [own for place, own, _ in self._reactions() if f"reactions.{place}.share" in self.values.numbers]
        return components.mask(named)

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """Temperature and pressure are those of the inlet."""
        return [("takes", what)]

    # --- calculating

    def _shares(self, components: Components, numbers: Numbers) -> np.ndarray:
        """Give the part of each component that degrades, zero for those that degrade by rate, (C,) or (..., C)."""
        parts = [np.zeros(()) for _ in components.names]
        for place, own, _ in self._reactions():
            parts[components.index[own]] = parts[components.index[own]] + numbers.get(f"reactions.{place}.share", 0.0)
        return np.stack(np.broadcast_arrays(*parts), axis=-1)

    def _rates(self, components: Components, numbers: Numbers) -> np.ndarray:
        """Give the flow of each component that is asked to degrade by rate, (C,) or (..., C) mol/s."""
        flows = [np.zeros(()) for _ in components.names]
        for place, own, _ in self._reactions():
            flows[components.index[own]] = flows[components.index[own]] + numbers.get(f"reactions.{place}.rate", 0.0)
        return np.stack(np.broadcast_arrays(*flows), axis=-1)

    def _extents(self, stream: Stream, numbers: Numbers) -> tuple[np.ndarray, list[np.ndarray]]:
        """Give what is left of each component before anything is made, (..., C), and what each reaction takes, (...,) mol/s."""
        components, flows = self.around.components, stream.flows
        shares, rates = self._shares(components, numbers), self._rates(components, numbers)
        asked = flows * shares + rates
        over = np.real(asked) > np.maximum(np.real(flows), 0.0)
        left = np.where(over, 0.0, flows * (1.0 - shares) - rates)
        part = np.where(over, np.maximum(np.real(flows), 0.0) / np.where(over, np.real(asked), 1.0), 1.0)
        if flows.dtype.kind == "c" or asked.dtype.kind == "c":  # what is cut short follows the flow
            part = np.where(over, flows / np.where(over, asked, 1.0), part)
        taken = []
        for place, own, _ in self._reactions():
            column = components.index[own]
            amount = numbers.get(f"reactions.{place}.rate")
            amount = flows[..., column] * numbers[f"reactions.{place}.share"] if amount is None else amount
            taken.append(part[..., column] * amount)
        return left, taken

    def _gained(self, taken: list[np.ndarray], numbers: Numbers) -> dict[str, np.ndarray]:
        """Give what is made of each component that reactions make, (...,) mol/s."""
        gained: dict[str, np.ndarray] = {}
        for (place, _, made), amount in zip(self._reactions(), taken, strict=True):
            for name in made:
                gained[name] = gained.get(name, 0.0) + amount * numbers[f"reactions.{place}.makes.{name}"]
        return gained

    def _lost(self, taken: list[np.ndarray]) -> dict[str, np.ndarray]:
        """Give what degrades of each component that does, (...,) mol/s."""
        lost: dict[str, np.ndarray] = {}
        for (_, own, _), amount in zip(self._reactions(), taken, strict=True):
            lost[own] = lost.get(own, 0.0) + amount
        return lost

    def _spread(self, table: Mapping[str, np.ndarray], like: np.ndarray) -> np.ndarray:
        """Give flows by component as an array, (..., C) mol/s, zero for the others."""
        columns = [table.get(name, np.zeros(like.shape[:-1])) for name in self.around.components.names]
        return np.stack(np.broadcast_arrays(*columns), axis=-1)

    def calculate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give what is left and what is made."""
        stream = inlets["takes"]
        left, taken = self._extents(stream, numbers)
        return {"gives": stream.carrying(left + self._spread(self._gained(taken, numbers), left))}

    # --- reporting

    def made(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers) -> np.ndarray:
        """Give what is made less what degrades, (..., C) mol/s, by the reactions and not by the outlet."""
        left, taken = self._extents(inlets["takes"], numbers)
        return self._spread(self._gained(taken, numbers), left) - self._spread(self._lost(taken), left)

    def added_heat(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers) -> np.ndarray | None:
        """Give the enthalpy flow of what is made less that of what degrades, (...,) W; None without heat data."""
        if not self.knows:
            return None
        stream = inlets["takes"]
        return heat_flow(stream.carrying(self.made(inlets, outlets, numbers)), self.around.heat, numbers)

    def shortfalls(self, inlets: Mapping[str, Stream], numbers: Numbers) -> list[str]:
        """Say of every case what cannot degrade as asked; an empty text where all can."""
        components, flows = self.around.components, np.maximum(inlets["takes"].flows, 0.0)
        shares, rates = self._shares(components, numbers), self._rates(components, numbers)
        asked = np.broadcast_to(flows * shares + rates, flows.shape)
        found = [""] * len(flows)
        for case, place in np.argwhere(asked > (1 + SLACK) * flows):
            name, wanted, there = components.names[place], asked[case, place], flows[case, place]
            said = f"{wanted:.6g} mol/s of '{name}' are to degrade and {there:.6g} mol/s flow: lower its rate or raise its flow"
            if np.broadcast_to(shares, flows.shape)[case, place] > 1:
                said = f"the shares of '{name}' sum to more than 1: lower them"
            found[case] = f"{found[case]}; {said}" if found[case] else said
        return found

    def results(
        self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping
    ) -> dict[str, Any]:
        """Give the flows that degrade and that are made."""
        left, taken = self._extents(inlets["takes"], numbers)
        found = {}
        for key, table in (("degraded_mol_s", self._lost(taken)), ("made_mol_s", self._gained(taken, numbers))):
            flows = self._spread(table, left)
            components = self.around.components
            groups = {name: flows[..., components.places(name)].sum(axis=-1) for name in components.groups}
            found[key] = {name: flows[..., components.index[name]] for name in table} | groups
        return {"results": found}

    def cautions(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping) -> list[str]:
        """Say where a reaction makes more mass than it takes, and that heat of reaction is left out."""
        components, found = self.around.components, []
        for place, own, made in self._reactions():
            yields = [(numbers[f"reactions.{place}.makes.{name}"], components[name].molar_mass) for name in made]
            mass = components[own].molar_mass
            if mass is None or any(each is None for _, each in yields):
                continue
            ratio = np.max(sum(np.asarray(count) * each for count, each in yields) / mass) if yields else 0.0
            if ratio > 1 + 1e-6:
                found.append(f"Degradation {self.name}: reactions[{place}] makes {ratio:.4g} kg of each kg of {own} that degrades.")
        if self.knows:
            found.append(f"Degradation {self.name}: the temperature stays; no heat of reaction is counted.")
            found += range_cautions(self, [inlets["takes"], outlets["gives"]])
        return found
