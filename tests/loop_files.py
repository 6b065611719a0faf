"""The closed loops of `independent_loops` as flowsheet files, and results as the starts and answers they are compared with."""

import columns
import numpy as np
from columns import q
from independent_loops import Loop, Species, staying

WATER = Species("water", None, 23.4776, 3984.9228, -39.724, 75.3, 33.6, 44.0e3)
AIR = Species("air", "gas", cp_gas=29.1)


def of_henry(name, constant, slope, cp_liquid, cp_gas, latent):
    """A dissolved gas: its constant is that at 298.15 K, Pa."""
    return Species(name, None, np.log(constant) + slope / 298.15, slope, 0.0, cp_liquid, cp_gas, latent)


def acid_gas(stages=(4, 5), exchanger=("least", 8.0), reboiler=("duty", 16e3), flash=None, bleed=0.0, scale=1.0):
    """A dissolved acid gas, boiled out: volatile water, reboiler, condenser, no pump."""
    species = [
        AIR, of_henry("SO2", 1.1e5, 5600.0, 86.0, 40.0, 47e3), of_henry("CO2", 1.64e8, 2400.0, 75.0, 37.3, 20e3), WATER,
        Species("salt", "liquid", cp_liquid=310.0),
    ]
    gas = np.array([1.0, 0.0095, 0.07, 0.03, 0.0]), 318.0
    hold = {3: 4.2 * scale, 4: 0.19 * scale}
    if exchanger[0] == "UA":
        exchanger = ("UA", exchanger[1] * scale)
    if reboiler[0] == "duty":
        reboiler = ("duty", reboiler[1] * scale)
    return Loop(species, species, stages, 1.1e5, 1.35e5, (gas[0] * scale, gas[1]), exchanger, hold, 313.15, drop=0.04e5,
                condenser=315.0, reboiler=reboiler, bleed=bleed, flash=flash)


def wash_oil(stages=(5, 4), exchanger=("UA", 900.0), bleed=0.004):
    """Two aromatics in oil, stripped with open steam that stays in the gas; moist gas to the wash, where water distributes."""
    antoine = lambda A, B, C: (np.log(10) * A + np.log(101325 / 760), np.log(10) * B, C - 273.15)  # noqa: E731
    light = Species("light", None, *antoine(6.90565, 1211.033, 220.79), 136.0, 82.0, 33.9e3)
    heavy = Species("heavy", None, *antoine(6.95464, 1344.8, 219.482), 157.0, 104.0, 38.0e3, 310.0)
    species = [AIR, light, heavy, WATER, Species("oil", "liquid", cp_liquid=460.0)]
    gas = np.array([1.0, 0.011, 0.005, 0.004, 0.0]), 297.0
    steam = np.array([0.004, 0.0, 0.0, 0.22, 0.0]), 440.0
    return Loop(species, staying(species, "water", "gas"), stages, 1.1e5, 1.5e5, gas, exchanger, {4: 0.17}, 299.0, drop=0.1e5,
                steam=steam, bleed=bleed, preheat=420.0)


def read(loop, folder, tears=()):
    """Read the flowsheet of a loop, torn where it is told."""
    tail = f"[loop]\ntears = {columns.value(tears)}\n" if tears else ""
    return columns.read(columns.text(tables(loop)) + tail, folder, "loop.toml")


def tables(loop):
    """The file of a loop as nested tables."""
    name_of = loop.names.__getitem__
    distributing = [s for s in loop.species if s.stays is None]
    models = {s.name: columns.model(s) if s.c else {"model": "henry", "constant": q(np.exp(s.a - s.b / 298.15), "Pa"),
                                                    "slope": q(s.b, "K"), "at": "298.15 K"} for s in distributing}
    hot = dict(models)
    for place in np.flatnonzero(loop.strip.mixture.in_gas & ~loop.m.in_gas):
        hot[name_of(place)] = {"stays_in": "gas"}

    def feed(flows, T, pressure):
        own = {n: q(f, "mol/s") for n, f in zip(loop.names, flows) if f}
        return {"phase": "gas", "temperature": q(T, "K"), "pressure": q(pressure, "Pa"), "flows": own}

    strip = {"kind": "stripper", "liquid_in": "warm_rich" if loop.preheat is None else "hot_rich", "gas_out": "overhead",
             "liquid_out": "lean", "heat": "adiabatic", "equilibrium": "hot", "pressure": q(loop.strip.P[-1], "Pa"),
             "pressure_drop": q(loop.strip.P[-1] - loop.strip.P[0], "Pa")}
    strip["stages"] = loop.strip.n - (loop.strip.condenser is not None) - (loop.strip.reboiler is not None)
    if loop.strip.condenser is not None:
        strip["condenser"] = {"temperature": q(loop.strip.condenser, "K")}
    if loop.strip.reboiler is not None:
        what, value = loop.strip.reboiler
        strip["reboiler"] = {what: q(value, "W") if what == "duty" else value}
    what, value = loop.exchanger
    swap = {"kind": "exchanger", "hot_in": "lean", "hot_out": "warm_lean", "cold_in": "rich", "cold_out": "warm_rich"}
    swap |= {"UA": q(value, "W/K")} if what == "UA" else {"approach": {what: q(value, "K")}}
    if loop.drum:
        swap["cold_equilibrium"] = "hot"
        swap["cold_pressure_drop"] = q(loop.wash.P[-1] - loop.drum.P[0], "Pa")
    units = {
        "wash": {"kind": "absorber", "gas_in": "gas", "liquid_in": "cool_lean", "gas_out": "cleaned", "liquid_out": "rich",
                 "stages": loop.wash.n, "equilibrium": "cold", "heat": "adiabatic"},
        "swap": swap, "strip": strip,
        "top_up": {"kind": "makeup", "takes": "kept" if loop.bleed else "warm_lean", "gives": "full_lean",
                   "hold": {name_of(place): q(value, "mol/s") for place, value in loop.hold.items()}},
        "trim": {"kind": "cooler", "takes": "full_lean", "gives": "cool_lean", "temperature": q(loop.cool, "K")},
    }
    feeds = {"gas": feed(*loop.gas, loop.wash.P[-1])}
    if loop.steam:
        strip["gas_in"] = "steam"
        feeds["steam"] = feed(*loop.steam, loop.strip.P[-1])
    if loop.preheat is not None:
        units["preheat"] = {"kind": "heater", "takes": "warm_rich", "gives": "hot_rich", "temperature": q(loop.preheat, "K")}
    if loop.bleed:
        units["divide"] = {"kind": "splitter", "takes": "warm_lean", "gives": ["spent", "kept"], "shares": {"spent": loop.bleed}}
    return {"components": {s.name: columns.component(s) for s in loop.species}, "equilibrium": {"cold": models, "hot": hot},
            "heat_data": {s.name: columns.heat(s) for s in loop.species}, "feeds": feeds, "units": units}


def answer(result, names):
    """Streams (flows, temperature) and unit results of a leanloop result of one case, named as in `Loop.states`."""
    told = result.to_dict()
    streams = {name: (np.array([item["mol_s"][c] for c in names]), item["temperature_K"]) for name, item in told["streams"].items()}
    results = {}
    for unit, item in told["units"].items():
        for key, value in item["results"].items():
            several = value if isinstance(value, dict) else {None: value}
            results |= {f"{unit}.{key}" + (f".{c}" if c else ""): own for c, own in several.items()}
    return streams, results


def start(loop, result):
    """The unknowns of `Loop` at a leanloop result of one case."""
    profiles = {unit: columns.profiles(result, loop, unit) for unit in ("wash", "strip")}
    vapour = result["streams.warm_rich.vapour_fraction"] if loop.drum else 0.0
    return loop.start(profiles, *answer(result, loop.names), vapour)
