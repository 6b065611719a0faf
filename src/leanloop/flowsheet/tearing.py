"""Partitioning of a flowsheet graph and its exact least tear sets.

A graph is a `networkx.MultiDiGraph` with units as nodes and streams as edges; the key of an
edge is the stream's name, unique in the whole graph. All orders follow that of the graph.

References
----------
R. E. Tarjan, SIAM J. Comput. 1 (1972) 146-160: strongly connected components.
D. B. Johnson, SIAM J. Comput. 4 (1975) 77-84: listing of elementary loops.
W. Lee, D. F. Rudd, AIChE J. 12 (1966) 1184-1190: tearing as a covering of loops.
R. S. Upadhye, E. A. Grens, AIChE J. 21 (1975) 136-143: families of tear sets.
R. L. Motard, A. W. Westerberg, AIChE J. 27 (1981) 725-732: exclusive tear sets.
"""

from collections import Counter
from dataclasses import dataclass
from itertools import product
from math import inf, prod

import networkx as nx
import numpy as np
from scipy.optimize import Bounds, LinearConstraint, milp
from scipy.sparse import csr_array

LOOP_CAP = 20_000  # elementary loops listed in one block
WORK_CAP = 6_000_000  # loops x (units + arcs), the steps of the listing: bounds its time
RESOLUTION = 1e-6  # relative; the feasibility tolerance of the 0-1 solver
CHUNK = 10  # arcs put in order by one solve; 2**CHUNK stays far below 1 / RESOLUTION


@dataclass(frozen=True)
class TearSet:
    """Streams whose removal opens every loop.

    Attributes
    ----------
    tears : tuple of str
        Names of the torn streams, in the graph's order unless the user chose them.
    loop_cuts : tuple of int, shape (loops,), or None
        Tears on each elementary loop, block by block in calculation order and shorter
        loops first; None if the loops were too many to list.
    exclusive : bool
        Whether each loop is known to be cut exactly once.
    loops_listed : bool
        Whether all elementary loops were listed.
    """

    tears: tuple[str, ...]
    loop_cuts: tuple[int, ...] | None
    exclusive: bool
    loops_listed: bool


class _Block:
    """One strongly connected component and its 0-1 covering problem.

    Nodes are numbered. Parallel streams are one arc: a least set tears all of them or none,
    for as long as one is left the others open no loop. A loop is a tuple of arcs.
    """

    def __init__(self, graph, nodes):
        place, bundles = {node: i for i, node in enumerate(nodes)}, {}
        # A subgraph view of networkx may iterate over a set; a list of nodes keeps the order.
        for u, v, name in graph.edges(nodes, keys=True):
            if v in place:
                bundles.setdefault((place[u], place[v]), []).append(name)
        self.nodes, self.arcs, self.names = nodes, list(bundles), list(bundles.values())
        self.number = {arc: a for a, arc in enumerate(self.arcs)}
        self.low, self.high = np.zeros(len(self.arcs)), np.ones(len(self.arcs))
        self.rows, self.held = self.missed(self.low), []

    def loop(self, units):
        """Return the loop over a list of nodes, its first arc in front."""
        arcs = [self.number[arc] for arc in zip(units, units[1:] + units[:1])]
        first = arcs.index(min(arcs))
        return tuple(arcs[first:] + arcs[:first])

    def copies(self, loop):
        """Return the number of elementary loops over the same arcs."""
        return prod(len(self.names[a]) for a in loop)

    def all_loops(self):
        """Return all loops, shorter ones first, or None beyond the caps."""
        loops, room = [], min(LOOP_CAP, WORK_CAP // (len(self.nodes) + len(self.arcs)))
        for units in nx.simple_cycles(nx.DiGraph(self.arcs)):
            loops.append(self.loop(units))
            room -= self.copies(loops[-1])
            if room < 0:
                return None
        return sorted(loops, key=lambda loop: (len(loop), loop))

    def missed(self, cut):
        """Return the loops that a cut, shape (arcs,), leaves: a shortest one through each arc."""
        left = nx.DiGraph(arc for arc, torn in zip(self.arcs, cut) if not torn)
        parts = enumerate(nx.strongly_connected_components(left))
        part = {u: i for i, nodes in parts for u in nodes}
        ways = [nx.shortest_path(left, v, u) for u, v in left.edges if part[u] == part[v]]
        return list(dict.fromkeys(map(self.loop, ways)))

    def solve(self, costs):
        """Return the cheapest cut, shape (arcs,), that opens every loop and keeps what is held."""
        while True:
            ends, arcs = np.cumsum([0, *map(len, self.rows)]), np.concatenate(self.rows)
            table = csr_array((np.ones(len(arcs)), arcs, ends), (len(self.rows), len(costs)))
            rules = [LinearConstraint(table, 1, inf)]
            rules += [LinearConstraint(row, -inf, most) for row, most in self.held]
            answer = milp(costs, integrality=np.ones(len(costs)), constraints=rules,
                          bounds=Bounds(self.low, self.high), options={"mip_rel_gap": 0.0})
            if not answer.success:
                raise RuntimeError(f"no least set of tears: {answer.message}")
            cut = np.rint(answer.x)
            if any(row @ cut > most + 2 * RESOLUTION for row, most in self.held):
                raise RuntimeError("no least set of tears: a bound was lost in rounding")
            if not (missed := self.missed(cut)):
                return cut
            self.rows += missed

    def minimise(self, costs, step=0.0):
        """Bring a sum of nonnegative costs to its least and hold it; sums differ by `step`."""
        while (most := costs[self.high > 0].max()) > 0:
            total = costs @ self.solve(costs / most)
            if most <= total:
                self.held.append((costs / total, 1 + max(step / 2 / total, RESOLUTION)))
                return
            # Closing what alone costs more keeps one huge cost from blurring the small ones.
            self.high[costs > total] = 0

    def least(self, loops, prefer):
        """Return the names to tear: fewest, least sum of loop cuts, least cost, early ones."""
        self.minimise(np.array([len(names) for names in self.names], float), step=1.0)
        weights = np.zeros(len(self.arcs))
        for loop in self.rows if loops is None else loops:
            weights[list(loop)] += self.copies(loop)
        self.minimise(weights, step=1.0)
        self.minimise(np.array([sum(prefer.get(s, 0.0) for s in names) for names in self.names]))
        while self.missed(self.low):
            free, costs = np.flatnonzero(self.low < self.high)[:CHUNK], np.zeros(len(self.arcs))
            costs[free] = -(2.0 ** np.arange(len(free))[::-1])
            self.low[free] = self.high[free] = self.solve(costs)[free]
        return [name for a in np.flatnonzero(self.low) for name in self.names[a]]


def partition(graph):
    """Return the strongly connected components in calculation order.

    Parameters
    ----------
    graph : networkx.MultiDiGraph
        Units and streams.

    Returns
    -------
    list of list of node
        Each component before those that it feeds; ties, and the nodes inside a component, in
        the order in which the nodes entered the graph.
    """
    position, condensed = {node: i for i, node in enumerate(graph)}, nx.condensation(graph)
    blocks = {c: sorted(nodes, key=position.get) for c, nodes in condensed.nodes(data="members")}
    order = nx.lexicographical_topological_sort(condensed, key=lambda c: position[blocks[c][0]])
    return [blocks[c] for c in order]


def calculation_order(graph, tears):
    """Return the nodes in the order of calculation once the torn streams are given.

    Parameters
    ----------
    graph : networkx.MultiDiGraph
        Units and streams.
    tears : iterable of str
        Torn streams; names that are not in the graph are passed over.

    Returns
    -------
    list of node
        The components of `partition` one after the other, each in one piece; ties in the
        order in which the nodes entered the graph.

    Raises
    ------
    ValueError
        If the tears leave a loop; the message names one, and what to add.
    """
    left = _without(graph, tears)
    if message := _uncut(left):
        raise ValueError(message)
    place = {node: i for i, node in enumerate(n for block in partition(graph) for n in block)}
    return list(nx.lexicographical_topological_sort(left, key=place.get))


def least_tears(graph, prefer=None, fixed=()):
    """Return the fewest streams whose removal opens every loop.

    Among the least sets that with the smallest sum of loop cuts is taken, since substitution
    suffers where a loop is cut twice (Upadhye and Grens 1975); a set that cuts each loop once
    (Motard and Westerberg 1981) has the smallest sum there is. Then the smallest sum of
    `prefer` decides, then the order of the streams in the graph, early ones first.

    Parameters
    ----------
    graph : networkx.MultiDiGraph
        Units and streams.
    prefer : mapping of str to float, optional
        Cost of tearing a stream, finite and not negative, by default 0, of which only the
        streams of a loop are read; sums within some millionths of each other are equal.
    fixed : sequence of str, optional
        The user's own tears, taken unchanged if they open every loop.

    Returns
    -------
    TearSet

    Raises
    ------
    ValueError
        If two streams share a name, a cost is negative or not finite, or `fixed` leaves a
        loop, names a stream twice, or names one that is unknown or on no loop.
    RuntimeError
        If the 0-1 solver gives no proven answer.

    Notes
    -----
    The number of tears is exact always, by covering with loops added as they are missed (Lee
    and Rudd 1966 with rows on demand). In a block with too many loops to list, the sum of cuts
    counts only the loops that the covering needed.
    """
    names = Counter(name for _, _, name in graph.edges(keys=True))
    if twice := [str(name) for name, count in names.items() if count > 1]:
        raise ValueError(f"streams that share a name: {', '.join(twice)}")
    prefer = prefer or {}
    if wrong := [str(name) for name, cost in prefer.items() if not 0 <= cost < inf]:
        raise ValueError(f"costs must be finite and not negative: {', '.join(wrong)}")
    blocks = _recycles(graph)
    listed = [block.all_loops() for block in blocks]
    if tears := tuple(fixed):
        on_loop = {name for block in blocks for bundle in block.names for name in bundle}
        wrong = [f"no stream is named {name}" for name in fixed if name not in names]
        wrong += [f"{s} is on no loop; leave it out" for s in fixed if s in names.keys() - on_loop]
        wrong += [f"{name} is named twice" for name, n in Counter(fixed).items() if n > 1]
        if message := _uncut(_without(graph, fixed)):
            wrong.append(message)
        if wrong:
            raise ValueError("; ".join(wrong))
    else:
        torn = {s for block, loops in zip(blocks, listed) for s in block.least(loops, prefer)}
        tears = tuple(name for name in names if name in torn)
    if None in listed:
        return TearSet(tears, None, False, False)
    cuts = tuple(
        sum(name in tears for name in streams)
        for block, loops in zip(blocks, listed)
        for loop in loops
        for streams in product(*(block.names[a] for a in loop))
    )
    return TearSet(tears, cuts, all(cut == 1 for cut in cuts), True)


def _recycles(graph):
    """Return the components that hold a loop, in calculation order."""
    return [block for nodes in partition(graph) if (block := _Block(graph, nodes)).rows]


def _without(graph, tears):
    """Return a copy of the graph without the torn streams."""
    torn, left = set(tears), graph.copy()
    left.remove_edges_from([edge for edge in graph.edges(keys=True) if edge[2] in torn])
    return left


def _uncut(graph):
    """Return a sentence on a loop of the graph and the fewest tears to add, or an empty one."""
    if not (missing := least_tears(graph).tears):
        return ""
    block = _recycles(graph)[0]
    units = [str(block.nodes[block.arcs[a][0]]) for a in min(block.rows, key=len)]
    return f"no tear cuts the loop {' -> '.join(units + units[:1])}; add {', '.join(missing)}"
