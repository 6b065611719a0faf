"""Partitioning and tear sets against published graphs, proofs and plain enumeration."""

import json
import os
import subprocess
import sys
from itertools import combinations
from pathlib import Path
from types import SimpleNamespace

import networkx as nx
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from leanloop.flowsheet import tearing
from leanloop.flowsheet.tearing import TearSet, calculation_order, least_tears, partition

DATA = json.loads((Path(__file__).parent / "data" / "graphs.json").read_text(encoding="utf-8"))
FIXED = settings(deadline=None, derandomize=True, database=None)
SMALL = DATA["small"]
PUBLISHED = DATA["published"]["graphs"]


def graph_of(edges):
    """Streams named "from-to"; further ones between the same units get a number."""
    graph = nx.MultiDiGraph()
    for u, v, *_ in edges:
        count = graph.number_of_edges(u, v)
        graph.add_edge(u, v, key=f"{u}-{v}" + (f"#{count + 1}" if count else ""))
    return graph


def streams(sets):
    return [{f"{u}-{v}" for u, v in one} for one in sets]


def family(kind, n):
    up = [(i, i + 1) for i in range(n - 1)]
    return {
        "countercurrent_cascade": up + [(j, i) for i, j in up],
        "complete": [(i, j) for i in range(n) for j in range(n) if i != j],
        "ring": up + [(n - 1, 0)],
        "nested_to_head": up + [(i, 0) for i in range(1, n)],
    }[kind]


def elementary_loops(edges):
    """Every elementary loop as a list of edge numbers, by plain search; its first unit is least."""
    loops = []

    def walk(start, path, seen):
        for i, (u, v) in enumerate(edges):
            if u != (edges[path[-1]][1] if path else start):
                continue
            if v == start:
                loops.append([*path, i])
            elif v > start and v not in seen:
                walk(start, [*path, i], seen | {v})

    for start in sorted({u for u, _ in edges}):
        walk(start, [], {start})
    return loops


def best_by_enumeration(edges, costs):
    """(tears, sum of loop cuts, cost, edge numbers) of the best set among all subsets."""
    loops = elementary_loops(edges)
    for size in range(len(edges) + 1):
        rank = []
        for chosen in combinations(range(len(edges)), size):
            cuts = [len(set(chosen) & set(loop)) for loop in loops]
            if all(cuts):
                rank.append((sum(cuts), sum(costs[i] for i in chosen), chosen))
        if rank:
            return size, *min(rank)
    raise AssertionError("tearing every stream opens every loop")


def check_order(graph, tears):
    """Torn streams of a least set, and they alone, run backwards; components are in one piece."""
    order = calculation_order(graph, tears)
    place = {node: i for i, node in enumerate(order)}
    assert len(order) == len(place) == graph.number_of_nodes()
    for u, v, name in graph.edges(keys=True):
        assert (place[u] < place[v]) != (name in tears)
    blocks = partition(graph)
    ends = np.cumsum([0, *map(len, blocks)])
    for block, begin, end in zip(blocks, ends, ends[1:]):
        assert set(order[begin:end]) == set(block)


# Published graphs and proved families


@pytest.mark.parametrize("name", PUBLISHED)
def test_published_graphs(name):
    case = PUBLISHED[name]
    graph = graph_of(case["edges"])
    found = least_tears(graph)
    assert len(found.tears) == case["least_tears"] == case["stated_least_tears"]
    assert len(found.tears) >= case["disjoint_loops"]
    assert nx.is_directed_acyclic_graph(tearing._without(graph, found.tears))
    assert found.loops_listed
    assert len(found.loop_cuts) == case["loops"]
    assert min(found.loop_cuts) == 1
    assert sum(found.loop_cuts) == case["least_loop_cuts"]
    assert found.exclusive == (case["exclusive_set"] == case["least_tears"])
    if "all_least_sets" in case:
        assert set(found.tears) in streams(case["all_least_sets"])
    blocks = [sorted(block) for block in partition(graph) if len(block) > 1]
    assert blocks == case["recycle_blocks"]


@pytest.mark.parametrize("name", SMALL)
def test_small_graphs(name):
    case = SMALL[name]
    graph = graph_of(case["edges"])
    found = least_tears(graph)
    assert len(found.tears) == case["least_tears"]
    assert sum(found.loop_cuts) == case["least_loop_cuts"]
    assert found.exclusive == (case["exclusive_set"] == case["least_tears"])
    assert partition(graph) == case["blocks"]
    if "all_least_sets" in case:
        assert set(found.tears) in streams(case["all_least_sets"])


@pytest.mark.parametrize(("kind", "n", "least"), DATA["families"]["cases"])
def test_families_with_a_proof(kind, n, least):
    graph = graph_of(family(kind, n))
    found = least_tears(graph)
    assert len(found.tears) == least
    check_order(graph, found.tears)
    if kind != "complete":
        assert found.exclusive
    if kind in ("ring", "nested_to_head"):
        assert found.tears == ("0-1",)


# All objectives against plain enumeration


@st.composite
def problems(draw):
    units = st.integers(0, draw(st.integers(1, 6)))
    edges = draw(st.lists(st.tuples(units, units), max_size=12))
    costs = draw(st.lists(st.integers(0, 4), min_size=len(edges), max_size=len(edges)))
    # Units enter in the order of their numbers, so streams stand in the order of the sorted list.
    return sorted(edges), costs


def numbered(edges):
    graph = nx.MultiDiGraph()
    graph.add_nodes_from(range(7))
    graph.add_edges_from((u, v, f"s{i}") for i, (u, v) in enumerate(edges))
    assert [name for *_, name in graph.edges(keys=True)] == [f"s{i}" for i in range(len(edges))]
    return graph


@settings(FIXED, max_examples=150)
@given(problems())
def test_agrees_with_enumeration_in_every_objective(problem):
    edges, costs = problem
    graph = numbered(edges)
    found = least_tears(graph, prefer={f"s{i}": cost for i, cost in enumerate(costs)})
    size, cuts, _, chosen = best_by_enumeration(edges, costs)
    assert found.tears == tuple(f"s{i}" for i in chosen)
    assert len(found.tears) == size
    loops = elementary_loops(edges)
    assert sorted(found.loop_cuts) == sorted(len(set(chosen) & set(loop)) for loop in loops)
    assert sum(found.loop_cuts) == cuts
    assert found.exclusive == (cuts == len(loops))
    assert found.loops_listed
    assert least_tears(graph, fixed=found.tears) == found


@settings(FIXED, max_examples=60)
@given(problems(), st.permutations(range(7)), st.randoms(use_true_random=False))
def test_size_and_cuts_do_not_depend_on_labels_or_order(problem, labels, random):
    edges, costs = problem
    prefer = {f"s{i}": cost for i, cost in enumerate(costs)}
    one = least_tears(numbered(edges), prefer)
    shuffled = [(f"unit {labels[u]}", f"unit {labels[v]}", f"s{i}")
                for i, (u, v) in enumerate(edges)]
    random.shuffle(shuffled)
    graph = nx.MultiDiGraph()
    graph.add_edges_from(shuffled)
    other = least_tears(graph, prefer)
    assert len(other.tears) == len(one.tears)
    assert sum(other.loop_cuts) == sum(one.loop_cuts)
    assert sum(map(prefer.get, other.tears)) == sum(map(prefer.get, one.tears))
    assert other.exclusive == one.exclusive


@settings(FIXED, max_examples=60)
@given(problems())
def test_partition_agrees_with_reachability(problem):
    edges, _ = problem
    graph = numbered(edges)
    reach = np.eye(7, dtype=int)
    for u, v in edges:
        reach[u, v] = 1
    reach = np.linalg.matrix_power(reach, 7) > 0
    blocks = partition(graph)
    block_of = {node: b for b, block in enumerate(blocks) for node in block}
    assert sorted(block_of) == list(range(7))
    assert all(block == sorted(block) for block in blocks)
    for u in range(7):
        for v in range(7):
            assert (block_of[u] == block_of[v]) == (reach[u, v] and reach[v, u])
            if reach[u, v]:
                assert block_of[u] <= block_of[v]
    # Of the components with nothing left to wait for, the first in the graph comes next.
    for b, block in enumerate(blocks):
        rest = [other[0] for other in blocks[b:]]
        ready = [v for v in rest if not any(reach[u, v] for u in rest if u != v)]
        assert block[0] == min(ready)
    check_order(graph, least_tears(graph).tears)


# Particular shapes


def test_no_loop_needs_no_tear():
    graph = graph_of([("b", "c"), ("a", "b")])
    assert least_tears(graph) == TearSet((), (), True, True)
    assert partition(graph) == [["a"], ["b"], ["c"]]
    assert calculation_order(graph, ()) == ["a", "b", "c"]
    assert least_tears(nx.MultiDiGraph()) == TearSet((), (), True, True)
    assert partition(nx.MultiDiGraph()) == []


def test_ties_in_the_order_go_by_entry():
    graph = nx.MultiDiGraph()
    graph.add_nodes_from(["z", "y", "x", "w"])
    graph.add_edge("w", "y", key="s")
    assert partition(graph) == [["z"], ["x"], ["w"], ["y"]]
    assert calculation_order(graph, ()) == ["z", "x", "w", "y"]


def test_a_component_is_calculated_in_one_piece():
    # Torn at a-b, unit b waits for nothing, but belongs after `feeder`.
    graph = nx.MultiDiGraph()
    graph.add_nodes_from(["b", "a", "feeder"])
    graph.add_edges_from([("a", "b", "ab"), ("b", "a", "ba"), ("feeder", "a", "in")])
    assert calculation_order(graph, ["ab"]) == ["feeder", "b", "a"]
    assert calculation_order(graph, ["ba", "a stream elsewhere"]) == ["feeder", "a", "b"]


def test_self_loops_are_cut():
    graph = graph_of([("a", "a"), ("a", "b"), ("b", "a"), ("a", "a")])
    assert least_tears(graph) == TearSet(("a-a", "a-a#2", "a-b"), (1, 1, 1), True, True)
    alone = graph_of([("a", "a")])
    assert least_tears(alone) == TearSet(("a-a",), (1,), True, True)
    assert partition(alone) == [["a"]]


def test_parallel_streams_are_loops_of_their_own():
    pair = [("a", "b"), ("a", "b"), ("b", "c"), ("c", "a"), ("c", "a"), ("c", "a")]
    assert least_tears(graph_of(pair)) == TearSet(("b-c",), (1,) * 6, True, True)
    found = least_tears(graph_of([*pair, ("b", "c"), ("b", "c")]))
    assert found == TearSet(("a-b", "a-b#2"), (1,) * 18, True, True)
    # The user may cut part of a bundle, so copies of one loop are cut unequally.
    partly = least_tears(graph_of(pair), fixed=("a-b#2", "b-c"))
    assert sorted(partly.loop_cuts) == [1, 1, 1, 2, 2, 2]
    assert not partly.exclusive


def test_each_copy_of_a_loop_weighs_in_the_sum_of_cuts():
    # With the two streams 0-3 taken for one, s2, s3 and s4 would cut as little as the best.
    edges = [(0, 3), (0, 3), (1, 2), (1, 3), (2, 0), (2, 1), (3, 1), (3, 2)]
    found = least_tears(numbered(edges))
    assert found.tears == ("s2", "s3", "s7")
    assert sum(found.loop_cuts) == best_by_enumeration(edges, [0] * 8)[1] == 8
    assert sum(least_tears(numbered(edges), fixed=("s2", "s3", "s4")).loop_cuts) == 9


def test_components_are_torn_separately_and_named_in_order():
    graph = graph_of([("d", "e"), ("e", "d"), ("a", "b"), ("b", "c"), ("c", "a"), ("c", "d")])
    found = least_tears(graph)
    assert found == TearSet(("d-e", "a-b"), (1, 1), True, True)
    assert partition(graph) == [["a", "b", "c"], ["d", "e"]]
    assert calculation_order(graph, found.tears) == ["b", "c", "a", "e", "d"]


# Preferences


def test_preference_decides_among_sets_of_equal_loop_cuts():
    graph = graph_of(SMALL["cavett_with_mixers"]["edges"])
    free = {"F1-M2", "M3-F3"}
    prefer = {name: 1.0 for *_, name in graph.edges(keys=True) if name not in free}
    assert set(least_tears(graph, prefer).tears) == free
    # The set that cuts the middle loop twice is worse at any cost.
    redundant = {"M2-F2", "M3-F3"}
    prefer = {name: 1e9 for *_, name in graph.edges(keys=True) if name not in redundant}
    found = least_tears(graph, prefer)
    assert set(found.tears) != redundant
    assert found.exclusive
    assert sum(map(prefer.get, set(found.tears) - redundant)) == 1e9


def test_preference_never_costs_a_tear():
    graph = graph_of([("a", "b"), ("b", "a"), ("b", "c"), ("c", "a")])
    assert least_tears(graph, {"a-b": 1e6}).tears == ("a-b",)


def test_one_huge_cost_does_not_hide_small_ones():
    graph = graph_of(family("ring", 30))
    prefer = {name: 1e12 for *_, name in graph.edges(keys=True)}
    prefer |= {"4-5": 2.0, "20-21": 1.0, "22-23": 1.001}
    assert least_tears(graph, prefer).tears == ("20-21",)


@pytest.mark.parametrize("cost", [-1.0, float("nan"), float("inf")])
def test_costs_must_be_finite_and_not_negative(cost):
    with pytest.raises(ValueError, match="not negative: b-a"):
        least_tears(graph_of([("a", "b"), ("b", "a")]), {"a-b": 1.0, "b-a": cost})


def test_last_tie_goes_to_the_streams_that_stand_first():
    # Rings of more arcs than are put in order at once; doubled arcs are too dear to cut. Unit
    # "hub" makes one block of them.
    edges = [(f"{r}{i}", f"{r}{(i + 1) % 12}") for r in "pqr" for i in range(12)]
    edges += edges[:11] + edges[12:18]
    edges += [("p0", "q0"), ("q0", "r0"), ("r0", "hub"), ("hub", "p0")]
    found = least_tears(graph_of(edges))
    assert found.tears == ("p0-q0", "p11-p0", "q6-q7", "r0-r1")
    assert found.exclusive


# The user's own tears


def test_fixed_tears_are_returned_unchanged():
    graph = graph_of(SMALL["cavett_with_mixers"]["edges"])
    found = least_tears(graph, fixed=["M3-F3", "M2-F2"])
    # Loops M2-F2-F1 and M3-F3-F4, then the longer M2-F2-M3-F3.
    assert found == TearSet(("M3-F3", "M2-F2"), (1, 1, 2), False, True)
    every = [name for *_, name in graph.edges(keys=True)]
    assert least_tears(graph, fixed=every).loop_cuts == (3, 3, 4)


def test_fixed_tears_that_leave_a_loop_are_refused():
    graph = graph_of([("a", "b"), ("b", "a"), ("b", "c"), ("c", "d"), ("d", "b"), ("d", "e")])
    with pytest.raises(ValueError) as error:
        least_tears(graph, fixed=["b-a"])
    assert str(error.value) == "no tear cuts the loop b -> c -> d -> b; add b-c"
    with pytest.raises(ValueError, match="loop a -> b -> a; add a-b, b-c$"):
        calculation_order(graph, ())
    parallel = graph_of([("a", "b"), ("a", "b"), ("b", "a")])
    with pytest.raises(ValueError, match="a -> b -> a; add a-b#2"):
        least_tears(parallel, fixed=["a-b"])


def test_everything_wrong_with_fixed_tears_is_said_at_once():
    graph = graph_of([("a", "b"), ("b", "a"), ("b", "c"), ("c", "c")])
    with pytest.raises(ValueError) as error:
        least_tears(graph, fixed=["a-b", "b-c", "lean", "a-b"])
    assert str(error.value).split("; ") == [
        "no stream is named lean",
        "b-c is on no loop",
        "leave it out",
        "a-b is named twice",
        "no tear cuts the loop c -> c",
        "add c-c",
    ]
    with pytest.raises(ValueError, match="a-b is on no loop"):
        least_tears(graph_of([("a", "b")]), fixed=["a-b"])


def test_streams_need_names_of_their_own():
    graph = nx.MultiDiGraph([("a", "b", "s"), ("b", "a", "s")])
    with pytest.raises(ValueError, match="share a name: s"):
        least_tears(graph)


# Limits


@pytest.mark.parametrize(("cap", "most"), [("LOOP_CAP", 186), ("WORK_CAP", 186 * 84)])
def test_too_many_loops_to_list_cost_the_cuts_but_not_the_least(monkeypatch, cap, most):
    case = PUBLISHED["GH_heavywater_sub"]
    graph = graph_of(case["edges"])
    full = least_tears(graph)
    monkeypatch.setattr(tearing, cap, most)
    found = least_tears(graph)
    assert found.loop_cuts is None
    assert not found.loops_listed
    assert not found.exclusive
    assert len(found.tears) == case["least_tears"]
    check_order(graph, found.tears)
    assert least_tears(graph, fixed=full.tears) == TearSet(full.tears, None, False, False)
    monkeypatch.setattr(tearing, cap, most * 187 // 186 + 1)
    assert least_tears(graph) == full


def test_loops_met_on_the_way_stand_in_for_those_not_listed(monkeypatch):
    # The first two streams in the graph that open every loop cut one loop twice.
    graph = graph_of(SMALL["cavett_with_mixers"]["edges"])
    monkeypatch.setattr(tearing, "LOOP_CAP", 2)
    found = least_tears(graph)
    assert found.tears == ("M2-F2", "F3-F4")
    assert not found.loops_listed
    monkeypatch.undo()
    assert least_tears(graph, fixed=found.tears).exclusive
    assert least_tears(graph, fixed=("M2-F2", "M3-F3")).loop_cuts == (1, 1, 2)


def test_a_block_beyond_every_listing():
    # 12 units all linked: more than 10**8 loops; n (n - 1) / 2 by the disjoint pairs.
    graph = graph_of(family("complete", 12))
    found = least_tears(graph)
    assert len(found.tears) == 66
    assert not found.loops_listed
    check_order(graph, found.tears)


def test_an_unproven_answer_is_refused(monkeypatch):
    graph = graph_of([("a", "b"), ("b", "a"), ("b", "c"), ("c", "b")])
    failure = SimpleNamespace(success=False, message="gave up", x=None)
    monkeypatch.setattr(tearing, "milp", lambda costs, **_: failure)
    with pytest.raises(RuntimeError, match="gave up"):
        least_tears(graph)


def test_a_bound_lost_in_rounding_is_refused(monkeypatch):
    graph = graph_of([("a", "b"), ("b", "a"), ("b", "c"), ("c", "b")])
    solve = tearing.milp

    def careless(costs, constraints, **rest):
        if len(constraints) > 1:
            return SimpleNamespace(success=True, x=np.ones(len(costs)))
        return solve(costs, constraints=constraints, **rest)

    monkeypatch.setattr(tearing, "milp", careless)
    with pytest.raises(RuntimeError, match="lost in rounding"):
        least_tears(graph)


SCRIPT = """
import json, sys
import networkx as nx
from leanloop.flowsheet import tearing
edges = json.load(sys.stdin)
for cap in (20000, 50):
    tearing.LOOP_CAP = cap
    graph = nx.MultiDiGraph()
    graph.add_edges_from((f"unit {u}", f"unit {v}", f"from {u} to {v}") for u, v in edges)
    found = tearing.least_tears(graph)
    print(found, tearing.partition(graph), tearing.calculation_order(graph, found.tears))
    try:
        tearing.least_tears(graph, fixed=found.tears[1:])
    except ValueError as error:
        print(error)
"""


@pytest.mark.parametrize("name", ["GH_heavywater_sub", "GH_6"])
def test_hash_seed_changes_nothing(name):
    edges = json.dumps(PUBLISHED[name]["edges"])
    printed = set()
    for seed in ("0", "1", "2", "3"):
        run = subprocess.run(
            [sys.executable, "-W", "error", "-c", SCRIPT], input=edges, text=True, check=True,
            capture_output=True,
            env=os.environ | {"PYTHONHASHSEED": seed, "PYTHONPATH": os.pathsep.join(sys.path)})
        printed.add(run.stdout)
    assert len(printed) == 1
    assert "no tear cuts the loop unit" in printed.pop()
