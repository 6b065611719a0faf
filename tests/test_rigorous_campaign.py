"""Random columns with heat, each answer checked against the stage equations written independently.

A column is drawn so that an answer exists as far as can be told: absorbers and gas-blown strippers hold an inert
gas; reboiled ones are given the duty of a flash that leaves both phases, and are then posed again by the
temperature, boil-up or reflux found. The sample of seeds below runs always, thousands with `-m campaign`.
"""

import collections
import dataclasses

import columns
import numpy as np
import pytest
from independent_rigorous import Column, Species
from scipy.optimize import brentq

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
    return Species(name, None, np.log(k * pressure) + slope / at, slope, 0.0, cp, cp - less, latent, rng.choice([298.15, 273.15, 350.0]))


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


def flashed(items, z, pressure, phi):
    """Temperature and enthalpy in J/mol of a feed of which `phi` is gas."""

    def split(T):
        K = np.array([0.0 if s.stays else float(s.k(T, pressure)) for s in items])
        return z * (K - 1) / (1 + phi * (K - 1)), K

    T = brentq(lambda T: split(T)[0].sum(), 20, 5000)
    K = split(T)[1]
    x = z / (1 + phi * (K - 1))
    y = K * x
    gas = sum(b * s.h_gas(T) for s, b in zip(items, y))
    liquid = sum(a * s.h_liquid(T) for s, a in zip(items, x))
    return T, phi * gas + (1 - phi) * liquid, gas - liquid


def reboiled(rng, family):
    """Reboiled stripper, with or without a condenser, given by its boil-up (and its reflux ratio)."""
    while True:  # until the mixture boils at a temperature at which its heat data mean something
        at, pressure = rng.uniform(300, 380), 10 ** rng.uniform(4.5, 6.3)
        count = int(rng.integers(2, 7))
        heavy = rng.random() < 0.3
        k = 10 ** (rng.uniform(-3, 3) * rng.uniform(0, 1, count))
        items = [species(rng, f"s{i}", k[i], at, pressure) for i in range(count)]
        if heavy:
            items[-1] = species(rng, "oil", 1, at, pressure, "liquid")
        z = rng.dirichlet(np.ones(count)) * 0.98 + 0.02 / count
        room = 1 - (z[-1] if heavy else 0)
        if flashed(items, z, pressure, 0.0)[0] > 180 and flashed(items, z, pressure, 0.95 * room)[0] < 600:
            break
    phi = rng.uniform(0.05, 0.8) * room
    _, needed, latent = flashed(items, z, pressure, phi)
    feed_at = flashed(items, z, pressure, 0.0)[0] - rng.uniform(0, 40)
    liquid = sum(a * s.h_liquid(feed_at) for s, a in zip(items, z))
    stages = int(np.exp(rng.uniform(0, np.log(41))))
    reflux = 10 ** rng.uniform(-1, 0.7) if family == "condensed" else 0.0
    boil_up = ((needed - liquid) / latent + reflux * phi) / (1 - phi)
    column = Column(items, stages, [(1, "liquid", z, feed_at)], pressure, reboiler=("boil_up", boil_up),
                    condenser=("reflux_ratio", reflux) if family == "condensed" else None)
    column = extras(rng, column, gas=phi, liquid=1 - phi, inert=False)
    if column.condenser and rng.random() < 0.3:
        column = dataclasses.replace(column, draw=rng.uniform(0.05, 0.5) * reflux * phi)
    return column


def drawn(seed):
    """A random column by its seed."""
    rng = np.random.default_rng(seed)
    family = FAMILIES[seed % len(FAMILIES)]
    return reboiled(rng, family) if family in ("reboiled", "condensed") else contacted(rng, family)


def again(column, result, rng):
    """The same column posed by what was found instead of by boil-up and reflux."""
    l, v, T = columns.profiles(result, column)
    V, change = v.sum(1), {}
    duties = column.duty(l, v, T)
    if column.reboiler:
        found = {"duty": duties[-1], "temperature": T[-1], "stripping_ratio": V[-1] / column.liquid_fed}
        what = str(rng.choice(list(found)))
        change["reboiler"] = (what, found[what])
    if column.condenser and rng.random() < 0.6:
        change["condenser"] = ("temperature", T[0])
    return dataclasses.replace(column, **change)


def tried(column, folder):
    """Status of a column from the default start, what is wrong with its answer, and the result."""
    result = columns.read(columns.tables(column), folder).solve()
    status = result.status
    return status, columns.flaws(result, column) if status == "converged" else [], result


def campaign(seeds, folder):
    """Outcomes counted by family and way of posing; those that are not right, by seed."""
    counts, bad = collections.Counter(), {}
    for seed in seeds:
        column, family = drawn(seed), FAMILIES[seed % len(FAMILIES)]
        status, flaws, result = tried(column, folder)
        counts[family, status] += 1
        if flaws or status != "converged":
            bad[seed, "first"] = status, flaws
        elif column.reboiler:
            second = again(column, result, np.random.default_rng(seed))
            status, flaws, _ = tried(second, folder)
            counts[family + " again", status] += 1
            if flaws or status != "converged":
                bad[seed, second.reboiler[0] + (" " + second.condenser[0] if second.condenser else "")] = status, flaws
    return counts, bad
