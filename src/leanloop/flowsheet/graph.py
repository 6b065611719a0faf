"""Structure of a flowsheet: who feeds whom, which components and phases can be where, loops and their order."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import NamedTuple

import networkx as nx
import numpy as np

from leanloop.components import Components
from leanloop.entries import Context
from leanloop.errors import nearest
from leanloop.feed import Feed
from leanloop.flowsheet.tearing import calculation_order, least_tears, partition
from leanloop.units.base import Numbers, Unit, ports


class Node(NamedTuple):
    """A feed, or one section of a unit.

    Attributes
    ----------
    sort : str
        ``"feed"`` or ``"unit"``.
    name : str
    section : int
    """

    sort: str
    name: str
    section: int

    def __str__(self) -> str:
        return self.name


@dataclass
class Step:
    """Nodes calculated in order, once or as a loop.

    Attributes
    ----------
    nodes : list of Node
    tears : tuple of str
        Torn streams; empty where there is no loop.
    """

    nodes: list[Node]
    tears: tuple[str, ...] = ()

    @property
    def units(self) -> list[str]:
        """Names of the units, each once."""
        return list(dict.fromkeys(name for sort, name, _ in self.nodes if sort == "unit"))


@dataclass
class Region:
    """Steps that are solved together with some requirements, or one step without any."""

    steps: list[Step]
    requirements: list[str] = field(default_factory=list)

    @property
    def units(self) -> list[str]:
        """Names of the units, each once."""
        return list(dict.fromkeys(name for step in self.steps for name in step.units))


@dataclass(frozen=True)
class Tie:
    """Where a requirement stands in the flowsheet.

    Parameters
    ----------
    units, feeds : tuple of str
        Units or feeds that its quantity is reported of.
    free_units, free_feeds : tuple of str
        Units or feeds that its freed input belongs to.
    """

    units: tuple[str, ...]
    feeds: tuple[str, ...]
    free_units: tuple[str, ...]
    free_feeds: tuple[str, ...]


class Structure:
    """Streams between feeds and units.

    Parameters
    ----------
    components : Components
    feeds : mapping of str to Feed
    units : mapping of str to Unit
    """

    def __init__(self, components: Components, feeds: Mapping[str, Feed], units: Mapping[str, Unit]) -> None:
        self.components, self.feeds, self.units = components, feeds, units
        self.makers: dict[str, tuple[str, str]] = {name: ("", name) for name in feeds}  # stream: unit, outlet label
        self.takers: dict[str, tuple[str, str]] = {}
        for unit in units.values():
            for label, stream in unit.outlets.items():
                self.makers.setdefault(stream, (unit.name, label))
            for label, stream in unit.inlets.items():
                self.takers.setdefault(stream, (unit.name, label))

    @property
    def streams(self) -> list[str]:
        """Every stream: feeds first, then in the order of the units."""
        return list(self.makers)

    @property
    def products(self) -> list[str]:
        """Streams that leave the flowsheet."""
        return [stream for stream in self.makers if stream not in self.takers]

    def check(self, context: Context, unsettled: set[str]) -> None:
        """Note streams that are given twice, taken twice, or given by nobody.

        Parameters
        ----------
        context : Context
        unsettled : set of str
            Streams that faulty units may connect; nothing is said of them.
        """
        made: dict[str, str] = {name: f"feeds.{name}" for name in self.feeds}
        taken: dict[str, str] = {}
        for unit in self.units.values():
            for side, known, verb in ((unit.outlets, made, "given"), (unit.inlets, taken, "taken")):
                for label, stream in side.items():
                    where = f"units.{unit.name}.{_port(unit, label)}"
                    if stream in known:
                        context.fault(
                            where,
                            f"stream '{stream}' is {verb} by {known[stream]} already",
                            "rename one of the two" if verb == "given" else "put a splitter between",
                        )
                    known.setdefault(stream, where)
        for stream, where in taken.items():
            if stream not in made and stream not in unsettled:
                context.fault(where, f"nothing gives stream '{stream}'", nearest(stream, made))
        for name in self.feeds:
            if name not in taken and name not in unsettled:
                context.fault(f"feeds.{name}", "no unit takes this feed", "connect it or take it away")

    def phases(self) -> dict[str, str]:
        """Give the phase of every stream; empty where nothing tells it."""
        known = {name: feed.phase for name, feed in self.feeds.items()}
        for _ in range(len(self.units) + 1):
            for unit in self.units.values():
                inlets = {label: known[stream] for label, stream in unit.inlets.items() if stream in known}
                for label, stream in unit.outlets.items():
                    phase = unit.phase(label, inlets)
                    if phase and stream not in known:
                        known[stream] = phase
        return {stream: known.get(stream, "") for stream in self.makers}

    def present(self) -> dict[str, np.ndarray]:
        """Give the components that each stream can hold.

        Returns
        -------
        dict of str to (C,) bool
        """
        none = np.zeros(len(self.components), dtype=bool)
        found = {stream: none for stream in self.makers}
        found.update({name: self.components.mask(feed.present()) for name, feed in self.feeds.items()})
        changed = True
        while changed:
            changed = False
            for unit in self.units.values():
                for label, stream in unit.outlets.items():
                    now = unit.adds(self.components) | unit.makes(self.components)
                    for inlet, source in unit.inlets.items():
                        now = now | (found.get(source, none) & unit.passes(inlet, label, self.components))
                    if self.makers[stream][0] == unit.name and (now & ~found[stream]).any():
                        found[stream], changed = found[stream] | now, True
        return found

    def trapped(
        self, present: Mapping[str, np.ndarray], open_paths: Mapping[tuple[str, str, str], np.ndarray]
    ) -> dict[str, list[str]]:
        """Find components that can be somewhere whence they cannot leave.

        Parameters
        ----------
        present : mapping of str to (C,) bool
            By stream.
        open_paths : mapping of (unit, inlet label, outlet label) to (C,) bool
            Which components pass; with an empty outlet label, which vanish in the unit.

        Returns
        -------
        dict of str to list of str
            By component, the streams from which there is no way out.
        """
        out: dict[str, list[str]] = {}
        holders = {name: unit.holds(self.components) for name, unit in self.units.items()}
        for place, component in enumerate(self.components.names):
            leaving = {stream for stream in self.products}
            grew = True
            while grew:
                grew = False
                for unit in self.units.values():
                    for inlet, source in unit.inlets.items():
                        if source in leaving:
                            continue
                        gone = holders[unit.name][place] or open_paths[unit.name, inlet, ""][place]
                        way = gone or any(
                            open_paths[unit.name, inlet, label][place] and stream in leaving
                            for label, stream in unit.outlets.items()
                        )
                        if way:
                            leaving.add(source)
                            grew = True
            stuck = [stream for stream in self.makers if present[stream][place] and stream not in leaving]
            if stuck:
                out[component] = stuck
        return out

    def paths(self) -> dict[tuple[str, str, str], np.ndarray]:
        """Give which components can pass through each unit, by (unit, inlet label, outlet label).

        With an empty outlet label, which vanish in it.
        """
        return {
            (unit.name, inlet, outlet): passes(unit, inlet, outlet, self.components)
            for unit in self.units.values()
            for inlet in unit.inlets
            for outlet in (*unit.outlets, "")
        }

    def graph(self) -> nx.MultiDiGraph:
        """Give the calculation graph: feeds and sections of units, linked by streams."""
        graph = nx.MultiDiGraph()
        maker: dict[str, Node] = {}
        taker: dict[str, list[Node]] = {}
        for name in self.feeds:
            maker[name] = Node("feed", name, 0)
            graph.add_node(maker[name])
        for unit in self.units.values():
            for number, (inlets, outlets) in enumerate(unit.sections()):
                node = Node("unit", unit.name, number)
                graph.add_node(node)
                for label in outlets:
                    maker[unit.outlets[label]] = node
                for label in inlets:
                    taker.setdefault(unit.inlets[label], []).append(node)
        for stream, source in maker.items():
            for target in taker.get(stream, ()):
                graph.add_edge(source, target, key=stream)
        return graph


def passes(unit: Unit, inlet: str, outlet: str, components: Components, numbers: Numbers | None = None) -> np.ndarray:
    """Tell which components pass, or, with an empty outlet label, which vanish in the unit; (C,) or (M, C) bool."""
    return unit.passes(inlet, outlet, components, numbers) if outlet else unit.destroys(components, numbers)


def _port(unit: Unit, label: str) -> str:
    """Give the address of a port inside its unit."""
    return next((where for own, where, _, _ in ports(unit.entries, unit.values.words) if own == label), label)


def nodes_of(graph: nx.MultiDiGraph, units: Iterable[str], feeds: Iterable[str]) -> list[Node]:
    """Give the nodes of some units and feeds."""
    units, feeds = set(units), set(feeds)
    return [node for node in graph if node.name in (units if node.sort == "unit" else feeds)]


def recycled(graph: nx.MultiDiGraph) -> set[str]:
    """Give the streams that lie on some loop."""
    found: set[str] = set()
    for part in partition(graph):
        members = set(part)
        found |= {key for a, b, key in graph.edges(part, keys=True) if b in members and _is_loop(graph, part)}
    return found


def influences(graph: nx.MultiDiGraph, tie: Tie) -> bool:
    """Tell whether a requirement's freed input stands upstream of its quantity, loops included."""
    free = nodes_of(graph, tie.free_units, tie.free_feeds)
    wanted = set(nodes_of(graph, tie.units, tie.feeds))
    return any(node in wanted or not wanted.isdisjoint(nx.descendants(graph, node)) for node in free)


def arrange(
    graph: nx.MultiDiGraph,
    ties: Mapping[str, tuple[Iterable[Node], Iterable[Node]]],
    cost: Mapping[str, float],
    fixed: Sequence[str],
) -> list[Region]:
    """Put the calculation in order: regions in sequence, in each the steps, in each loop its tears.

    Parameters
    ----------
    graph : networkx.MultiDiGraph
    ties : mapping of str to (nodes, nodes)
        By requirement, the nodes that its quantity is of and the nodes of its freed input.
    cost : mapping of str to float
        What tearing a stream costs, among sets that are otherwise as good.
    fixed : sequence of str
        Tears chosen by the user; empty for none.

    Returns
    -------
    list of Region

    Raises
    ------
    ValueError
        Where the chosen tears do not cut every loop.
    """
    tied = graph.copy()
    for name, (quantity, freed) in ties.items():
        for source in quantity:
            for target in freed:
                tied.add_edge(source, target, key=f"requirement {name}")
                tied.add_edge(target, source, key=f"freed by {name}")
    loops = [part for part in partition(graph) if _is_loop(graph, part)]
    chosen = set(fixed)
    if chosen:
        inside = nx.MultiDiGraph()
        for part in loops:
            inside.add_nodes_from(part)
            inside.add_edges_from(graph.subgraph(part).edges(keys=True))
        least_tears(inside, fixed=tuple(fixed))  # raises where they do not do
    regions = []
    for block in partition(tied):
        members = set(block)
        region = Region([])
        inner = graph.subgraph(block)
        ordered = nx.MultiDiGraph()
        ordered.add_nodes_from(node for node in graph if node in members)
        ordered.add_edges_from((a, b, k) for a, b, k in graph.edges(keys=True) if a in members and b in members)
        for part in partition(ordered):
            if not _is_loop(inner, part):
                region.steps.append(Step(list(part)))
                continue
            own = nx.MultiDiGraph()
            own.add_nodes_from(part)
            keep = set(part)
            own.add_edges_from((a, b, k) for a, b, k in ordered.edges(keys=True) if a in keep and b in keep)
            names = {key for *_, key in own.edges(keys=True)}
            if chosen:
                tears = tuple(name for name in fixed if name in names)
            else:
                tears = least_tears(own, prefer=cost).tears
            region.steps.append(Step(calculation_order(own, tears), tuple(tears)))
        region.requirements = [
            name for name, (quantity, freed) in ties.items() if members & {*quantity, *freed}
        ]
        regions.append(region)
    return regions


def _is_loop(graph: nx.MultiDiGraph, part: Sequence[Node]) -> bool:
    return len(part) > 1 or graph.has_edge(part[0], part[0])
