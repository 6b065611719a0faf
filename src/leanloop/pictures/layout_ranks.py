"""Ranks, rows and positions of the units of a drawing.

Layered drawing in the manner of Sugiyama, Tagawa and Toda (IEEE Trans. Syst. Man Cybern. 11, 1981, 109): ranks by
the longest path, dummy places for streams that pass a rank, barycentre sweeps against crossings. Positions are
least-squares answers under separations, found exactly by pooling (Barlow et al., 1972). All is deterministic.
"""

from __future__ import annotations

import random
from collections.abc import Hashable, Mapping, Sequence

STARTS = 8  # orders tried first
SWEEPS = 6  # of each
TURNS = 24  # of finding heights


def ranks(order: Sequence[str], links: Sequence[tuple[str, str]]) -> dict[str, int]:
    """Give every unit a rank, so that each link which follows the order of calculation leads to a higher one.

    Parameters
    ----------
    order : sequence of str
        Units in calculation order.
    links : sequence of (str, str)
        Maker and taker of each stream between units. A link against the order is a recycle and binds nothing.

    Returns
    -------
    dict of str to int
        From 0 on without a gap.
    """
    place = {name: number for number, name in enumerate(order)}
    before: dict[str, set[str]] = {name: set() for name in order}
    after: dict[str, set[str]] = {name: set() for name in order}
    for maker, taker in links:
        if place[maker] < place[taker]:
            before[taker].add(maker)
            after[maker].add(taker)
    found: dict[str, int] = {}
    for name in order:
        found[name] = max((found[other] + 1 for other in before[name]), default=0)
    for name in reversed(order):  # a unit that is fed from outside stands just before the unit it feeds
        if after[name] and len(before[name]) < len(after[name]):
            found[name] = max(found[name], min(found[other] for other in after[name]) - 1)
    dense = {rank: number for number, rank in enumerate(sorted(set(found.values())))}
    return {name: dense[rank] for name, rank in found.items()}


def rows(order: Sequence[str], links: Sequence[tuple[str, str]], most: int) -> list[int]:
    """Break the order of calculation into rows where the fewest streams are cut.

    Parameters
    ----------
    order : sequence of str
        Units in calculation order; what recycles stands together in it.
    links : sequence of (str, str)
        Maker and taker of each stream between units.
    most : int
        Ranks that a row may have.

    Returns
    -------
    list of int
        Place in the order of the first unit of each row.
    """
    place = {name: number for number, name in enumerate(order)}
    ends = [sorted((place[maker], place[taker])) for maker, taker in links]
    cuts = [sum(low < number <= high for low, high in ends) for number in range(len(order))]
    before: list[list[int]] = [[] for _ in order]
    for maker, taker in links:
        if place[maker] < place[taker]:
            before[place[taker]].append(place[maker])
    best: list[tuple[float, list[int]]] = [(0.0, [])] + [(float("inf"), [])] * len(order)
    for begin in range(len(order)):
        depth: dict[int, int] = {}
        for here in range(begin, len(order)):
            depth[here] = 1 + max((depth[other] for other in before[here] if other >= begin), default=0)
            if depth[here] > most:
                break
            cost = best[begin][0] + 1.0 + (cuts[begin] if begin else 0.0)
            best[here + 1] = min(best[here + 1], (cost, [*best[begin][1], begin]))
    return best[-1][1]


def crossings(layers: Sequence[Sequence[Hashable]], links: Sequence[Sequence[tuple]]) -> int:
    """Count the crossings of straight links between neighbouring ranks.

    Parameters
    ----------
    layers : sequence of sequence of hashable
        Places of each rank from top to bottom.
    links : sequence of sequence of (place, place, float, float)
        Links from each rank to the next, with the heights of their ports, -0.5 at the top to 0.5 at the bottom.
    """
    total = 0
    for layer, following, own in zip(layers, layers[1:], links):
        left = {item: number for number, item in enumerate(layer)}
        right = {item: number for number, item in enumerate(following)}
        ends = sorted((left[a] + high, right[b] + low) for a, b, high, low in own)
        total += sum(b > d for number, (a, b) in enumerate(ends) for c, d in ends[number + 1 :] if a < c)
    return total


def arrange(
    layers: Sequence[Sequence[Hashable]], links: Sequence[Sequence[tuple]], pulls: Mapping[Hashable, Sequence[float]]
) -> list[list[Hashable]]:
    """Order the places within each rank so that links cross as little as sweeps from several starts can find.

    Parameters
    ----------
    layers, links
        As for `crossings`.
    pulls : mapping of place to sequence of float
        -1 for each stream that leads out over the top, 1 for each below.

    Returns
    -------
    list of list of hashable
    """
    chance = random.Random(1981)
    neighbours: tuple[dict, dict] = ({}, {})
    for number, own in enumerate(links):
        for a, b, high, low in own:
            neighbours[0].setdefault((number + 1, b), []).append((a, high - low))
            neighbours[1].setdefault((number, a), []).append((b, low - high))

    def cost(state: list[list[Hashable]]) -> float:
        passed = sum(
            number if way < 0 else len(layer) - 1 - number
            for layer in state
            for number, item in enumerate(layer)
            for way in pulls.get(item, ())
        )
        return crossings(state, links) + 0.6 * passed

    def sweep(state: list[list[Hashable]], down: bool) -> None:
        for number in range(1, len(state)) if down else range(len(state) - 2, -1, -1):
            other = state[number - 1 if down else number + 1]
            place = {item: (index + 0.5) / len(other) for index, item in enumerate(other)}
            own = state[number]
            keys = {}
            for index, item in enumerate(own):
                near = [place[a] + off / len(other) for a, off in neighbours[not down].get((number, item), ())]
                near += [0.5 + 0.6 * way for way in pulls.get(item, ())]
                keys[item] = sum(near) / len(near) if near else (index + 0.5) / len(own)
            own.sort(key=keys.__getitem__)

    def switch(state: list[list[Hashable]]) -> None:
        least = cost(state)
        for layer in state:
            for index in range(len(layer) - 1):
                layer[index], layer[index + 1] = layer[index + 1], layer[index]
                new = cost(state)
                if new < least:
                    least = new
                else:
                    layer[index], layer[index + 1] = layer[index + 1], layer[index]

    best, least = [list(layer) for layer in layers], float("inf")
    if max((len(layer) for layer in layers), default=0) < 2:
        return best
    for start in range(STARTS):
        state = [list(layer) for layer in layers]
        if start:
            for layer in state:
                chance.shuffle(layer)
        for number in range(SWEEPS):
            sweep(state, number % 2 == 0)
            now = cost(state)
            if now < least:
                best, least = [list(layer) for layer in state], now
        if not least:
            break
    switch(best)
    return best


def separate(wanted: Sequence[float], weights: Sequence[float], gaps: Sequence[float]) -> list[float]:
    """Give the positions nearest to those wanted that keep the order and the gaps.

    Parameters
    ----------
    wanted, weights : (n,)
    gaps : (n - 1,)
        Least distance from each to the next.

    Returns
    -------
    list of float
        Minimum of the weighted squares of the shifts, by pooling neighbours that press on each other.
    """
    shift = [0.0]
    for gap in gaps:
        shift.append(shift[-1] + gap)
    pools: list[list[float]] = []  # mean, weight, number
    for aim, weight, own in zip(wanted, weights, shift):
        pools.append([aim - own, weight, 1])
        while len(pools) > 1 and pools[-2][0] >= pools[-1][0]:
            mean, heavy, number = pools.pop()
            last = pools[-1]
            last[0] = (last[0] * last[1] + mean * heavy) / (last[1] + heavy)
            last[1] += heavy
            last[2] += number
    flat = [mean for mean, _, number in pools for _ in range(number)]
    return [value + own for value, own in zip(flat, shift)]


def snapped(wanted: Sequence[float], weights: Sequence[float], gaps: Sequence[int]) -> list[int]:
    """Give whole positions near those of `separate`, with whole gaps kept.

    Parameters
    ----------
    wanted, weights, gaps
        As for `separate`.

    Returns
    -------
    list of int
    """
    found: list[int] = []
    for number, value in enumerate(separate(wanted, weights, gaps)):
        least = found[-1] + gaps[number - 1] if found else None
        nearest = int(value + 0.5) if value >= 0 else -int(-value + 0.5)
        found.append(nearest if least is None else max(nearest, least))
    return found


def heights(
    layers: Sequence[Sequence[Hashable]],
    links: Sequence[Sequence[tuple]],
    sizes: Mapping[Hashable, tuple[int, float]],
    gap: int,
) -> dict[Hashable, int]:
    """Give the height of the middle of every place, downwards, so that links run as level as they can.

    Parameters
    ----------
    layers, links
        As for `crossings`, ordered.
    sizes : mapping of place to (int, float)
        Height, and the pull to the middle of the row.
    gap : int
        Free height between places.

    Returns
    -------
    dict of place to int
    """
    aims: dict[Hashable, list[tuple[Hashable, float]]] = {item: [] for layer in layers for item in layer}
    for own in links:
        for a, b, high, low in own:
            off = high * sizes[a][0] - low * sizes[b][0]
            aims[b].append((a, off))
            aims[a].append((b, -off))
    where: dict[Hashable, float] = {}
    spaces = []
    for layer in layers:
        spaces.append([(sizes[a][0] + sizes[b][0] + 1) // 2 + gap for a, b in zip(layer, layer[1:])])
        start = -sum(spaces[-1]) / 2
        for number, item in enumerate(layer):
            where[item] = start + sum(spaces[-1][:number])
    for turn in range(TURNS):
        for layer, own in list(zip(layers, spaces))[:: 1 if turn % 2 else -1]:
            wanted, weights = [], []
            for item in layer:
                near = [where[other] + off for other, off in aims[item]]
                # weights that fall with the distance: some links run quite level rather than all of them nearly so
                heavy = [1.0 / ((aim - where[item]) ** 2 + 1.0) for aim in near] if turn > 5 else [1.0] * len(near)
                weight = sizes[item][1] + sum(heavy) + 1e-3
                wanted.append(sum(aim * part for aim, part in zip(near, heavy)) / weight)
                weights.append(weight)
            new = snapped(wanted, weights, own) if turn > TURNS - 3 else separate(wanted, weights, own)
            where.update(zip(layer, new))
    return {item: int(value) for item, value in where.items()}
