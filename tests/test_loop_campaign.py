"""Random closed loops with heat: absorber, heater, reboiled stripper, cooler and make-up, solved from nothing."""

import collections

import numpy as np
import pytest

import leanloop


def loop(seed):
    """A volatile or heavy solvent, one or two solutes that bind with some heat, a lean temperature and a boil-up."""
    rng = np.random.default_rng((4, seed))
    solutes = ["a", "b"][: rng.integers(1, 3)]
    boiling = {"form": "antoine", "A": 5.19621, "B": 1730.63, "C": -39.724, "pressure": "bar", "temperature": "K"}
    table = {"water": {"model": "raoult", "vapour_pressure": boiling}}
    heat = {"air": {"gas_heat_capacity": 29.1}, "salt": {"liquid_heat_capacity": 200.0}}
    for name in solutes:
        bound = rng.uniform(2e4, 6e4)
        table[name] = {"model": "henry", "constant": 10 ** rng.uniform(4.5, 6.5), "slope": bound / 8.314, "at": 298.15}
        heat[name] = {
            "gas_heat_capacity": rng.uniform(30.0, 60.0), "liquid_heat_capacity": rng.uniform(60.0, 120.0),
            "heat_of_vaporisation": {"value": bound, "at": 298.15},
        }  # fmt: skip
    gas = 10 ** rng.uniform(0.0, 2.0)
    fractions = {name: rng.uniform(1e-3, 0.06) for name in solutes} | {"water": 0.03}
    flows = {name: gas * part for name, part in fractions.items()} | {"air": gas}
    water = gas * 10 ** rng.uniform(-0.2, 1.0)
    columns = {
        "wash": {
            "kind": "absorber", "gas_in": "vent", "liquid_in": "cool", "gas_out": "cleaned", "liquid_out": "rich",
            "stages": int(rng.integers(2, 21)), "equilibrium": "wet", "heat": "adiabatic",
        },
        "strip": {
            "kind": "stripper", "liquid_in": "hot", "gas_out": "overhead", "liquid_out": "lean",
            "stages": int(rng.integers(2, 21)), "equilibrium": "wet", "pressure": rng.uniform(1.2e5, 2.5e5),
            "reboiler": {"boil_up": rng.uniform(0.08, 0.3)}, "condenser": {"temperature": rng.uniform(305.0, 330.0)},
        },
    }  # fmt: skip
    if rng.random() < 0.3:
        columns["wash"]["efficiency"] = rng.uniform(0.4, 1.0)
    return leanloop.Flowsheet(
        components={"air": {"stays_in": "gas"}, "water": {}, "salt": {"stays_in": "liquid"}, **{name: {} for name in solutes}},
        equilibrium={"wet": table},
        feeds={"vent": {"phase": "gas", "temperature": rng.uniform(295.0, 330.0), "pressure": 1.1e5, "flows": flows}},
        units={
            **columns,
            "preheat": {"kind": "heater", "takes": "rich", "gives": "hot", "temperature": rng.uniform(345.0, 372.0)},
            "top_up": {"kind": "makeup", "takes": "lean", "gives": "full", "hold": {"water": water, "salt": 0.05 * water}},
            "trim": {"kind": "cooler", "takes": "full", "gives": "cool", "temperature": rng.uniform(290.0, 318.0)},
        },
        heat_data=heat,
    )


def campaign(seeds):
    counts, failed, wrong = collections.Counter(), {}, {}
    for seed in seeds:
        result = loop(seed).solve()
        counts[result.status] += 1
        if result.status != "converged":
            failed[seed] = result.status_text
            continue
        balance = result.to_dict()["balance"]
        worst = max(abs(item["closure"]) for item in balance["components"].values())
        if worst > 1e-8 or abs(balance["energy"]["closure"]) > 1e-8 or result["loop.passes"] > 12:
            wrong[seed] = worst, balance["energy"]["closure"], result["loop.passes"]
    return counts, failed, wrong


def test_sample():
    _, failed, wrong = campaign(range(25))
    assert not failed and not wrong, (failed, wrong)


@pytest.mark.campaign
def test_a_thousand_loops():
    counts, failed, wrong = campaign(range(1000, 2000))
    print(counts, failed)
    assert not wrong, wrong
    assert len(failed) <= 1, failed
