"""Random columns with heat, each answer checked against the stage equations written independently.

A column is drawn so that an answer exists: absorbers and gas-blown strippers hold an inert gas, and mostly a solvent
that stays in the liquid; reboiled ones are marched from a known answer, and posed by any of its figures. The sample
of seeds below runs always, thousands with `-m campaign`.
"""

import collections
import dataclasses

import columns
import numpy as np
import pytest
from independent_rigorous import Column, Species
from marched_columns import DeadEnd, march

R = 8.314462618
SAMPLE = range(60)
CAMPAIGN = range(1000, 6000)
FAMILIES = ("absorber", "blown", "reboiled", "condensed", "isothermal")


def species(rng, name, k, at, pressure, stays=None):
    latent = rng.uniform(15e3, 90e3)
    slope = latent * rng.uniform(0.75, 1.25) / R
    cp = rng.uniform(70, 350)
    less = rng.uniform(0, min(0.6 * cp, latent / 500))
    if stays == "gas":
        return Species(name, stays, cp_gas=rng.uniform(28, 60))
    if stays == "liquid":
        return Species(name, stays, cp_liquid=cp)
    datum = rng.choice([298.15, 273.15, 350.0])
    return Species(name, None, np.log(k * pressure) + slope / at, slope, 0.0, cp, cp - less, latent, datum)


def fractions(rng, count, main, share):
    """Random fractions: `share` at place `main`, the rest over the others."""
    rest = rng.dirichlet(np.ones(count))
    rest[main] = 0
    return share * np.eye(count)[main] + (1 - share) * (rest / rest.sum() if rest.sum() else rest)


def contacted(rng, family):
    """Absorber or blown stripper with an inert gas."""
    at, pressure = rng.uniform(285, 340), 10 ** rng.uniform(5, 6.3)
    extra = int(rng.integers(1, 5))
    dry = rng.random() < 0.5
    items = [species(rng, "inert", 1, at, pressure, "gas")]
    items.append(species(rng, "solvent", 10 ** rng.uniform(-3, -1.5), at, pressure, "liquid" if dry else None))
    items += [species(rng, f"s{i}", 10 ** rng.uniform(-3, 3), at, pressure) for i in range(extra)]
    C = len(items)
    blown = family == "blown"
    inert = rng.uniform(0.8, 1.0) if blown else rng.uniform(0.3, 0.98)
    y = fractions(rng, C, 0, inert)
    x = fractions(rng, C, 1, rng.uniform(0.5, 0.95) if blown else rng.uniform(0.8, 1.0))
    if dry:
        y[1] = 0
    x[0] = 0
    liquid = 10 ** rng.uniform(-0.7, 1)
    warmer = rng.uniform(0, 60) if blown else rng.uniform(-20, 20)
    stages = int(np.exp(rng.uniform(0, np.log(41))))
    feeds = [(1, "liquid", liquid * x, at + warmer), (stages, "gas", y, at + rng.uniform(-20, 40))]
    column = Column(items, stages, feeds, pressure)
    return extras(rng, column, gas=1.0, liquid=liquid, inert=True, isothermal=at if family == "isothermal" else None)


def extras(rng, column, gas, liquid, inert, isothermal=None):
    """Side feeds, draws, stage duties, pressure drop and efficiencies, each now and then."""
    N, C = column.stages, column.C
    change = {"feeds": list(column.feeds), "draws": [], "duties": []}
    if rng.random() < 0.4:
        for _ in range(int(rng.integers(1, 3))):
            phase = rng.choice(["gas", "liquid"]) if inert else "liquid"
            pattern = column.feeds[0 if phase == "liquid" else 1]
            flows = np.asarray(pattern[2]) * rng.uniform(0.1, 0.8) * rng.uniform(0.5, 1, C)
            change["feeds"].append((int(rng.integers(1, N + 1)), str(phase), flows, pattern[3] + rng.uniform(-10, 20)))
    if rng.random() < 0.3:
        phase = str(rng.choice(["gas", "liquid"]))
        change["draws"].append((int(rng.integers(1, N + 1)), phase, rng.uniform(0.02, 0.25) * (gas if phase == "gas" else liquid)))
    if rng.random() < 0.2 and isothermal is None:
        change["duties"].append((int(rng.integers(1, N + 1)), rng.uniform(-1, 1) * 1e3 * min(gas, liquid)))
    if rng.random() < 0.2:
        change["pressure_drop"] = column.pressure * rng.uniform(0.001, 0.05)
    choice = rng.random()
    if choice < 0.15:
        change["efficiency"] = float(rng.uniform(0.3, 1))
    elif choice < 0.25:
        change["efficiency"] = np.repeat(rng.uniform(0.3, 1, (N, 1)), C, axis=1)
    elif choice < 0.35 and inert:
        change["efficiency"] = rng.uniform(0.2, 1, C)
    change["temperature"] = isothermal
    return dataclasses.replace(column, **change)


def reboiled(rng, family):
    """Reboiled stripper, with or without a condenser, of which the answer is known; posed in one of the eight ways."""
    while True:
        near, pressure = rng.uniform(290, 390), 10 ** rng.uniform(4.5, 6.3)
        count, stages = int(rng.integers(2, 7)), int(np.exp(rng.uniform(0, np.log(41))))
        k = 10 ** (rng.uniform(-3, 3) * rng.uniform(0, 1, count))
        items = [species(rng, f"s{i}", k[i], near, pressure) for i in range(count)]
        bottoms = rng.dirichlet(np.ones(count)) * 10 ** rng.uniform(-2, 0, count)
        if rng.random() < 0.3:
            items[-1] = species(rng, "oil", 1, near, pressure, "liquid")
        choice = rng.random()
        efficiency = rng.uniform(0.3, 1, stages) if choice < 0.15 else np.full(stages, rng.uniform(0.3, 1) if choice < 0.3 else 1.0)
        drop = pressure * rng.uniform(0.001, 0.05) if rng.random() < 0.2 else 0.0
        reflux = 10 ** rng.uniform(-1, 0.7) if family == "condensed" else None
        tapped = rng.uniform(0.05, 0.5) if reflux and rng.random() < 0.3 else 0.0
        try:
            column, (l, v, T) = march(rng, items, stages, pressure, drop, bottoms / bottoms.sum(), 10 ** rng.uniform(-1, 1),
                                      efficiency, near, reflux, tapped)
        except DeadEnd:
            continue
        if 150 < min(T.min(), *(feed[3] for feed in column.feeds)) and T.max() < 600:  # where the heat data mean something
            break
    ways = {"boil_up": v[-1].sum() / l[-1].sum(), "temperature": T[-1], "stripping_ratio": v[-1].sum() / column.liquid_fed}
    if column.reboiler[1] > 0:
        ways["duty"] = column.reboiler[1]
    what = str(rng.choice(list(ways)))
    change = {"reboiler": (what, float(ways[what]))}
    mixed = v[0].max() < 0.98 * v[0].sum()  # of an overhead that is all but pure, a temperature does not tell the reflux
    if reflux and mixed and rng.random() < 0.5:
        change["condenser"] = ("temperature", T[0])
    return dataclasses.replace(column, **change)


def drawn(seed):
    """A random column by its seed."""
    rng = np.random.default_rng(seed)
    family = FAMILIES[seed % len(FAMILIES)]
    return reboiled(rng, family) if family in ("reboiled", "condensed") else contacted(rng, family)


def tried(column, folder):
    """Status of a column from the default start, what is wrong with its answer, and the result."""
    result = columns.read(columns.tables(column), folder).solve()
    status = result.status
    return status, columns.flaws(result, column) if status == "converged" else [], result


def posed(column):
    """The way a column is run, in words."""
    return " ".join(part[0] for part in (column.reboiler, column.condenser) if part) or "plain"


def campaign(seeds, folder):
    """Outcomes counted by family and way of posing; seeds that are wrong, and that are not solved, with what is known of them."""
    counts, wrong, unsolved = collections.Counter(), {}, {}
    for seed in seeds:
        column = drawn(seed)
        status, flaws, _ = tried(column, folder)
        counts[FAMILIES[seed % len(FAMILIES)], posed(column), status] += 1
        if flaws:
            wrong[seed] = flaws
        if status != "converged":
            unsolved[seed] = status
    return counts, wrong, unsolved


def may_dry(column):
    """Whether no answer is known beforehand and the liquid may end: all of it volatile, or drawn."""
    volatile = all(s.stays != "liquid" for s in column.species)
    return not column.reboiler and (volatile or any(phase == "liquid" for _, phase, _ in column.draws))


def judged(seeds, folder):
    """Counts, wrong answers and seeds that fail; those said to dry up, and may, are infeasible and stand apart."""
    counts, wrong, unsolved = campaign(seeds, folder)
    dry = {seed for seed, status in unsolved.items() if status == "dry_stage" and may_dry(drawn(seed))}
    return counts, wrong, {seed: status for seed, status in unsolved.items() if seed not in dry}, dry


def test_sample(tmp_path):
    counts, wrong, failed, dry = judged(SAMPLE, tmp_path)
    assert not wrong, wrong
    assert not failed, {seed: (FAMILIES[seed % len(FAMILIES)], posed(drawn(seed)), status) for seed, status in failed.items()}
    assert len(dry) <= 2
    assert {family for family, *_ in counts} == set(FAMILIES)


def test_marched_columns_meet_the_equations():
    """The answers that reboiled columns are posed from are answers, so that none of them may fail."""
    marched = 0
    for seed in range(20):
        rng = np.random.default_rng(seed)
        items = [species(rng, f"s{i}", 10 ** rng.uniform(-2, 2), 340.0, 2e5) for i in range(3)]
        try:
            bottoms, efficiency = np.array([0.2, 0.3, 0.5]), rng.uniform(0.5, 1, 7)
            column, (l, v, T) = march(rng, items, 7, 2e5, 5e3, bottoms, 1.5, efficiency, 340.0, 0.8, 0.2)
        except DeadEnd:
            continue
        assert np.abs(column.residual(column.pack(l, v, T))).max() < 1e-12
        marched += 1
    assert marched >= 10


@pytest.mark.campaign
def test_campaign(tmp_path):
    counts, wrong, failed, dry = judged(CAMPAIGN, tmp_path)
    for key, count in sorted(counts.items()):
        print(*key, count)
    print("dry", sorted(dry), "failed", failed)
    assert not wrong, wrong
    assert len(failed) <= 0.001 * (len(CAMPAIGN) - len(dry)), failed


def test_huge_internal_flows_are_no_answer(tmp_path):
    """Both ends at a temperature: the answer has 1 to 6 mol/s inside; a search that runs off to hundreds has not solved it."""
    ten = np.log(10)
    items = [
        Species("s0", None, 17.75963006015751 * ten, 3703.2443946446997 * ten, 0.0, 337.65346260214216, 255.3514482608581,
                61732.65824505),
        Species("s1", None, 15.28630504656401 * ten, 2949.320343618957 * ten, 0.0, 130.0905794022538, 73.6327660757845,
                56733.213554880036, 273.15),
        Species("oil", "liquid", cp_liquid=348.94949239898955),
    ]  # fmt: skip
    fed = [1.2148919174209443, 0.047514158725756345, 0.8264936136410257]
    column = Column(items, 2, [(1, "liquid", fed, 263.2715454298786)], 9.8e5,
                    condenser=("temperature", 314.7465433771021), reboiler=("temperature", 336.88575547819653))  # fmt: skip
    status, flaws, _ = tried(column, tmp_path)
    assert not flaws, flaws
    assert status == "converged"
