"""What is settled once for a flowsheet before any case is solved: structure, order, loops and tears."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from leanloop.components import Components
from leanloop.enthalpy.heat import Heat
from leanloop.entries import Context
from leanloop.feed import Feed
from leanloop.flash.mixture import Mixture
from leanloop.flowsheet.graph import Node, Region, Step, Structure, Tie, arrange, nodes_of, recycled
from leanloop.stream import TWO_PHASE
from leanloop.units.base import Surroundings, Unit


class Plan:
    """Order of calculation and look-up tables for the engine.

    Parameters
    ----------
    components : Components
    feeds : mapping of str to Feed
    units : mapping of str to Unit
        Connected.
    structure : Structure
    present : mapping of str to (C,) bool
    phases : mapping of str to str
    """

    adds_nothing = staticmethod(Unit.added)  # as functions, for a unit that overrides none of them
    makes_nothing = staticmethod(Unit.made)

    def __init__(
        self,
        components: Components,
        feeds: Mapping[str, Feed],
        units: Mapping[str, Unit],
        structure: Structure,
        present: Mapping[str, np.ndarray],
        phases: Mapping[str, str],
    ) -> None:
        self.components, self.feeds, self.units = components, feeds, units
        self.structure, self.present, self.phases = structure, present, phases
        self.width = len(components) + 2
        self.unit_names = list(units)
        self.unit_number = {name: number for number, name in enumerate(units)}
        self.addresses = {
            name: {**unit.addresses(), **({"deepest": f"units.{name}.{unit.deepens}:deepest"} if unit.deepens else {})}
            for name, unit in units.items()
        }
        self.graph = structure.graph()
        self.ports: dict[Node, tuple[dict[str, str], dict[str, str]]] = {}
        for unit in units.values():
            for number, (inlets, outlets) in enumerate(unit.sections()):
                self.ports[Node("unit", unit.name, number)] = (
                    {label: unit.inlets[label] for label in inlets},
                    {label: unit.outlets[label] for label in outlets},
                )
        self.mixtures = self._mixtures()
        self.heat: Heat | None = None
        self.regions: list[Region] = []
        self._memo: dict[tuple, Any] = {}

    def arrange(self, ties: Mapping[str, Tie], tears: Sequence[str]) -> None:
        """Settle regions, order and tears.

        Raises
        ------
        ValueError
            Where chosen tears do not cut every loop.
        """

        placed = {
            name: (nodes_of(self.graph, tie.units, tie.feeds), nodes_of(self.graph, tie.free_units, tie.free_feeds))
            for name, tie in ties.items()
        }
        self.regions = arrange(self.graph, placed, self._costs(), tears)

    def _mixtures(self) -> dict[str, Mixture]:
        """Give what splits each stream that may be of two phases: its maker's, else what comes into the maker."""
        found = {name: feed.mixture for name, feed in self.feeds.items() if feed.mixture is not None}
        grew = True
        while grew:
            grew = False
            for unit in self.units.values():
                for label, stream in unit.outlets.items():
                    if self.phases[stream] != TWO_PHASE or stream in found:
                        continue
                    own = unit.mixture(label)
                    come = [found[source] for source in unit.inlets.values() if source in found]
                    if own is not None or come:
                        found[stream] = own if own is not None else come[0]
                        grew = True
        return found

    def forget(self) -> None:
        """Drop what depends on the arrangement, before it is made anew."""
        self._memo = {}

    def recycled(self) -> set[str]:
        """Give the streams that lie on some loop."""
        return recycled(self.graph)

    def _costs(self) -> dict[str, float]:
        """Prefer to tear lean solvent behind its make-up: few components, held flow, known temperature."""
        held = {
            stream
            for unit in self.units.values()
            if unit.holds(self.components).any()
            for stream in unit.outlets.values()
        }
        grew = True
        while grew:
            grew = False
            for unit in self.units.values():
                if len(unit.inlets) == 1 == len(unit.outlets) and set(unit.inlets.values()) <= held:
                    new = set(unit.outlets.values()) - held
                    held |= new
                    grew = grew or bool(new)
        return {
            stream: float(present.sum()) + (0.0 if stream in held else 1.0) + (0.5 if self._leans(stream) else 0.0)
            for stream, present in self.present.items()
        }

    def _leans(self, stream: str) -> bool:
        unit, label = self.structure.makers[stream]
        return not unit or bool(self.units[unit].leans_on(label, "temperature"))

    @property
    def steps(self) -> list[Step]:
        """All steps in order."""
        return [step for region in self.regions for step in region.steps]

    def inner(self, step: Step) -> list[str]:
        """Give the streams that a step makes."""
        key = ("inner", id(step))
        if key not in self._memo:
            names = [node[1] for node in step.nodes if node[0] == "feed"]
            names += [name for node in step.nodes if node[0] == "unit" for name in self.ports[node][1].values()]
            self._memo[key] = names
        return self._memo[key]

    def outer(self, step: Step) -> list[str]:
        """Give the streams that enter a step from outside."""
        key = ("outer", id(step))
        if key not in self._memo:
            own = set(self.inner(step))
            self._memo[key] = list(
                dict.fromkeys(
                    name
                    for node in step.nodes
                    if node[0] == "unit"
                    for name in self.ports[node][0].values()
                    if name not in own
                )
            )
        return self._memo[key]

    def tear_places(self, step: Step, tear: str, full: bool) -> np.ndarray:
        """Give the parts of a torn stream's state that are unknown.

        Parameters
        ----------
        step : Step
        tear : str
        full : bool
            Keep temperature and pressure even where the loop cannot change them.

        Returns
        -------
        (n,) int
            Places in the stream's state.
        """
        key = ("places", id(step), tear, full)
        if key not in self._memo:
            places = list(np.flatnonzero(self.present[tear]))
            for what, place in (("temperature", self.width - 2), ("pressure", self.width - 1)):
                if full or self._depends(step, tear, what):
                    places.append(place)
            self._memo[key] = np.array(places, dtype=int)
        return self._memo[key]

    def _depends(self, step: Step, tear: str, what: str) -> bool:
        """Tell whether the loop can change a torn stream's temperature or pressure."""
        inside = set(self.inner(step))
        todo, seen = [(tear, what)], set()
        while todo:
            stream, part = todo.pop()
            unit, label = self.structure.makers[stream]
            for inlet, needed in self.units[unit].leans_on(label, part):
                source = self.units[unit].inlets[inlet]
                if source not in inside:
                    continue
                if needed == "flows" or source in step.tears:
                    return True
                if (source, needed) not in seen:
                    seen.add((source, needed))
                    todo.append((source, needed))
        return False


def connect(
    units: Mapping[str, Unit],
    structure: Structure,
    surroundings: Mapping[str, Any],
    present: Mapping[str, np.ndarray],
    phases: Mapping[str, str],
    context: Context,
) -> dict[str, Unit]:
    """Give the units connected to their surroundings; faults are noted.

    Parameters
    ----------
    units : mapping of str to Unit
    structure : Structure
    surroundings : mapping
        ``components``, ``conditions``, ``basis`` and ``heat``.
    present, phases
        By stream.
    context : Context
    """
    none = np.zeros(len(structure.components), dtype=bool)
    found = {}
    for name, unit in units.items():
        around = Surroundings(
            surroundings["components"],
            surroundings["conditions"],
            surroundings["basis"],
            {label: present.get(stream, none) for label, stream in unit.inlets.items()},
            {label: phases.get(stream, "liquid") if stream in structure.makers else "" for label, stream in unit.inlets.items()},
            surroundings.get("heat"),
        )
        ports = [entry for entry in unit.entries if entry.sort == "inlet" and entry.required]
        whole = all(entry.name in unit.values.words for entry in ports)  # else a fault is noted, and nothing further is said
        found[name] = unit.connect(around, context) if whole else Unit.connect(unit, around, context)
    return found
