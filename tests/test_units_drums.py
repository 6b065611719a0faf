"""Flash drum, decanter and valve: against figures by hand and plain solutions of the same equations, and their laws."""

import itertools
import math

import numpy as np
import pytest
from scipy.optimize import brentq

import leanloop
from leanloop.checks import check_unit
from leanloop.errors import InputError
from leanloop.units.decanter_split import three_phases

R_BAR = 1e5

# Antoine's constants in bar and degC, rounded
WATER = (5.19621, 1730.63, 233.426)
BENZENE = (4.01814, 1203.835, 219.924)
TOLUENE = (4.07827, 1343.943, 219.377)


def saturation(constants, celsius):
    a, b, c = constants
    return R_BAR * 10 ** (a - b / (c + celsius))


def model(constants):
    a, b, c = constants
    form = {"form": "antoine", "A": a, "B": b, "C": c, "pressure": "bar", "temperature": "degC"}
    return {"model": "raoult", "vapour_pressure": form}


def heat(gas, liquid, vaporisation):
    return {
        "gas_heat_capacity": f"{gas} J/(mol K)",
        "liquid_heat_capacity": f"{liquid} J/(mol K)",
        "heat_of_vaporisation": {"value": f"{vaporisation} kJ/mol", "at": "25 degC"},
    }


COMPONENTS = {
    "air": {"stays_in": "gas"}, "water": {}, "benzene": {}, "toluene": {}, "tar": {"stays_in": "liquid"},
}  # fmt: skip
EQUILIBRIUM = {"here": {"water": model(WATER), "benzene": model(BENZENE), "toluene": model(TOLUENE)}}
HEAT = {
    "air": {"gas_heat_capacity": "29.1 J/(mol K)"},
    "water": heat(33.6, 75.3, 44.0),
    "benzene": heat(90.0, 136.0, 33.8),
    "toluene": heat(110.0, 157.0, 38.0),
    "tar": {"liquid_heat_capacity": "300 J/(mol K)"},
}


def feed(phase, flows, celsius=50.0, bar=1.2):
    return {
        "phase": phase, "temperature": f"{celsius} degC", "pressure": f"{bar} bar",
        "flows": {name: f"{value} mol/s" for name, value in flows.items()},
    }  # fmt: skip


def solved(unit, feeds, heat_data=None, cases=None, equilibrium=EQUILIBRIUM):
    names = {name for own in feeds.values() for name in own["flows"]}
    table = {name: entry for name, entry in equilibrium["here"].items() if name in names}
    sheet = leanloop.Flowsheet(
        {name: entry for name, entry in COMPONENTS.items() if name in names},
        equilibrium={"here": table}, feeds=feeds, units={"unit": unit},
        heat_data=None if heat_data is None else {name: heat_data[name] for name in names}, plain_si=False,
    )  # fmt: skip
    result = sheet.solve() if cases is None else sheet.solve(cases)
    return result


def faults(unit, feeds, **options):
    with pytest.raises(InputError) as caught:
        solved(unit, feeds, **options)
    return [str(fault) for fault in caught.value.faults]


@pytest.mark.parametrize("kind", ["flash_drum", "decanter", "valve"])
def test_contract(kind):
    check_unit(kind)


DRUM = {"kind": "flash_drum", "takes": "fed", "gas_out": "over", "liquid_out": "under", "equilibrium": "here"}


class TestFlashDrum:
    def test_air_over_water_leaves_saturated(self):
        fed = feed("gas", {"air": 10.0, "water": 4.0}, 95.0, 1.5)
        result = solved({**DRUM, "temperature": "40 degC"}, {"fed": fed}, HEAT)
        part = saturation(WATER, 40.0) / 1.5e5
        left = 10.0 * part / (1 - part)
        assert result["streams.over.mol_s.water"] == pytest.approx(left, rel=1e-12)
        assert result["streams.under.mol_s.water"] == pytest.approx(4.0 - left, rel=1e-12)
        assert result["streams.under.mol_s.air"] == 0
        # by hand: gas cooled, and condensation at the datum of 25 degC
        gas = (10 * 29.1 + left * 33.6) * 15 - (10 * 29.1 + 4 * 33.6) * 70 - (4 - left) * 44000 + (4 - left) * 75.3 * 15
        assert result["units.unit.results.duty_W"] == pytest.approx(gas, rel=1e-11)
        assert result["units.unit.results.vapour_fraction"] == pytest.approx((10 + left) / 14, rel=1e-12)
        assert abs(result["balance.energy.closure"]) < 1e-12

    def test_binary_by_hand(self):
        fed = feed("liquid", {"benzene": 6.0, "toluene": 4.0}, 30.0, 1.0)
        result = solved({**DRUM, "temperature": "95 degC"}, {"fed": fed})
        k = [saturation(own, 95.0) / 1e5 for own in (BENZENE, TOLUENE)]
        x = (1 - k[1]) / (k[0] - k[1])
        vapour = (0.6 - x) / (k[0] * x - x)
        assert 0 < vapour < 1
        assert result["streams.under.fraction.benzene"] == pytest.approx(x, rel=1e-11)
        assert result["units.unit.results.vapour_fraction"] == pytest.approx(vapour, rel=1e-11)
        assert result.to_dict()["units"]["unit"]["results"]["duty_W"] is None

    def test_adiabatic_closes_and_comes_back(self):
        feeds = {"fed": feed("liquid", {"water": 2.0, "benzene": 3.0, "tar": 0.5}, 120.0, 6.0),
                 "more": feed("gas", {"air": 0.4, "water": 0.2}, 60.0, 1.3)}
        unit = {**DRUM, "takes": ["fed", "more"]}
        result = solved(unit, feeds, HEAT)
        assert abs(result["balance.energy.closure"]) < 1e-11
        assert result["units.unit.results.duty_W"] == 0
        assert result["streams.over.pressure_Pa"] == pytest.approx(1.3e5)
        found = result["streams.over.temperature_K"]
        again = solved({**unit, "temperature": f"{found!r} K"}, feeds, HEAT)
        assert again["units.unit.results.duty_W"] == pytest.approx(0, abs=1e-6)
        assert again["streams.over.mol_s.benzene"] == pytest.approx(result["streams.over.mol_s.benzene"], rel=1e-10)

    def test_duty_and_temperature_are_two_ways_to_say_the_same(self):
        feeds = {"fed": feed("gas", {"air": 2.0, "water": 3.0}, 99.0, 1.1)}
        at = solved({**DRUM, "temperature": "50 degC"}, feeds, HEAT)
        duty = at["units.unit.results.duty_W"]
        assert duty < 0
        by = solved({**DRUM, "duty": f"{duty!r} W"}, feeds, HEAT)
        assert by["streams.over.temperature_K"] == pytest.approx(323.15, abs=1e-8)
        assert by["units.unit.results.duty_W"] == duty

    def test_two_phase_inlet_brings_its_enthalpy(self):
        sheet = leanloop.Flowsheet(
            {"water": {}, "tar": {"stays_in": "liquid"}},
            equilibrium={"here": {"water": model(WATER)}},
            feeds={"fed": feed("liquid", {"water": 5.0, "tar": 0.2}, 150.0, 8.0)},
            units={
                "let": {"kind": "valve", "takes": "fed", "gives": "low", "pressure": "1.1 bar", "equilibrium": "here"},
                "drum": {**DRUM, "takes": "low"},
            },
            heat_data={"water": HEAT["water"], "tar": HEAT["tar"]}, plain_si=False,
        )  # fmt: skip
        result = sheet.solve()
        direct = solved({**DRUM, "pressure": "1.1 bar"}, {"fed": feed("liquid", {"water": 5.0, "tar": 0.2}, 150.0, 8.0)}, HEAT)
        for key in ("streams.over.mol_s.water", "streams.over.temperature_K"):
            assert result[key] == pytest.approx(direct[key], rel=1e-11)
        assert result["streams.low.vapour_fraction"] == pytest.approx(direct["units.unit.results.vapour_fraction"], rel=1e-10)
        assert result["streams.low.temperature_K"] == pytest.approx(direct["streams.over.temperature_K"], rel=1e-11)
        assert abs(result["balance.energy.closure"]) < 1e-11

    def test_one_phase_leaves_the_other_empty(self):
        hot = solved({**DRUM, "temperature": "150 degC"}, {"fed": feed("gas", {"air": 1.0, "water": 1.0})})
        assert hot["streams.under.total_mol_s"] == 0
        cold = solved({**DRUM, "temperature": "20 degC"}, {"fed": feed("liquid", {"water": 1.0, "benzene": 1.0})})
        assert cold["streams.over.total_mol_s"] == 0

    def test_a_bad_case_is_alone(self):
        fed = {"fed": feed("liquid", {"water": 2.0, "benzene": 1.0}, 120.0, 6.0)}
        duties = np.array([0.0, 2e4, -1e9])
        result = solved({**DRUM, "pressure": "1.2 bar", "duty": "0 W"}, fed, HEAT, {"units.unit.duty": duties})
        assert list(result.to_dict()["status"])[:2] == ["converged"] * 2
        assert result.to_dict()["status"][2] != "converged"
        alone = solved({**DRUM, "pressure": "1.2 bar", "duty": "20 kW"}, fed, HEAT)
        assert result["streams.over.temperature_K"][1] == pytest.approx(alone["streams.over.temperature_K"], rel=1e-12)

    def test_faults(self):
        fed = {"fed": feed("gas", {"air": 1.0, "benzene": 1.0})}
        found = faults({**DRUM, "temperature": "30 degC", "duty": "1 kW"}, fed)
        assert any(item.startswith("units.unit.duty: stands beside temperature") for item in found)
        found = faults({**DRUM, "temperature": "30 degC"}, fed, equilibrium={"here": {"toluene": model(TOLUENE)}})
        assert any("'benzene' reaches flash drum 'unit' and has no model here" in item for item in found)

    def test_heat_that_is_needed_and_lacks_is_named(self):
        with pytest.raises(InputError, match="heat is balanced in unit 'unit' and 'tarry' has no enthalpy"):
            leanloop.Flowsheet(
                {"water": {}, "tarry": {"stays_in": "liquid"}}, equilibrium={"here": {"water": model(WATER)}},
                feeds={"fed": feed("liquid", {"water": 5.0, "tarry": 0.2})}, units={"unit": DRUM}, plain_si=False,
            )  # fmt: skip

    def test_cautions(self):
        fed = {"fed": feed("gas", {"air": 1.0, "water": 1.0}, bar=1.1)}
        said = solved({**DRUM, "temperature": "30 degC", "pressure": "3 bar"}, fed).cautions()
        assert any("fed at less than its pressure" in item for item in said)
        said = solved({**DRUM, "temperature": "30 degC"}, fed).cautions()
        assert not any("Flash drum" in item for item in said)


DECANTER = {
    "kind": "decanter", "takes": "fed", "gas_out": "vent", "organic_out": "oil", "water_out": "sour", "equilibrium": "here",
}  # fmt: skip
STEAM = {"water": 6.0, "benzene": 1.5, "toluene": 2.5}


def decanted(celsius, flows=None, bar=1.0, **entries):
    unit = {**DECANTER, "temperature": f"{celsius!r} degC", **entries}
    return solved(unit, {"fed": feed("gas", flows or STEAM, 130.0, bar)})


def plain(flows, k):
    """Amounts of gas, organic liquid and water of `flows`, nothing dissolved: nested brackets, water first in `flows`."""
    water, *organic = flows
    k_water, *k_organic = k

    def oil(gas):
        def miss(amount):
            return sum(f / (gas * own + amount) for f, own in zip(organic, k_organic, strict=True)) - 1

        return brentq(miss, 0, sum(organic), xtol=1e-15) if miss(0) > 0 else 0.0

    def miss(gas):
        own, free = oil(gas), max(water - gas * k_water, 0.0)
        parts = sum(f * one / (gas * one + own) for f, one in zip(organic, k_organic, strict=True))
        return parts + water * k_water / (gas * k_water + free) - 1

    most = sum(flows)
    low = 1e-12 * most
    if miss(low) < 0:
        return 0.0, sum(organic), water
    gas = most if miss(most) >= 0 else brentq(miss, low, most, xtol=1e-15)
    return gas, oil(gas), max(water - gas * k_water, 0.0)


class TestDecanter:
    def heteroazeotrope(self, bar):
        """Bubble point of both liquids together, in degC, with the organic liquid as it is fed."""
        x = 1.5 / 4.0
        total = lambda t: saturation(WATER, t) + x * saturation(BENZENE, t) + (1 - x) * saturation(TOLUENE, t)  # noqa: E731
        return brentq(lambda t: total(t) - bar * R_BAR, 20, 120)

    def test_below_the_bubble_point_two_liquids_and_no_gas(self):
        start = self.heteroazeotrope(1.0)
        result = decanted(start - 1e-6)
        assert result["streams.vent.total_mol_s"] == 0
        assert result["streams.sour.mol_s.water"] == 6.0
        assert result["streams.oil.mol_s.toluene"] == 2.5
        assert result["streams.oil.mol_s.water"] == 0 == result["streams.sour.mol_s.benzene"]
        assert decanted(start + 1e-4)["streams.vent.total_mol_s"] > 0

    def test_all_gas_above_the_dew_point(self):
        result = decanted(95.0)
        assert result["streams.oil.total_mol_s"] == 0 == result["streams.sour.total_mol_s"]
        assert result["units.unit.results.vapour_fraction"] == pytest.approx(1)

    def test_three_phases_by_hand(self):
        celsius = self.heteroazeotrope(1.0) + 2.0
        result = decanted(celsius)
        y_water = saturation(WATER, celsius) / 1e5
        assert result["streams.vent.fraction.water"] == pytest.approx(y_water, rel=1e-11)
        for name, own in (("benzene", BENZENE), ("toluene", TOLUENE)):
            part = result[f"streams.oil.fraction.{name}"]
            assert part * saturation(own, celsius) / 1e5 == pytest.approx(result[f"streams.vent.fraction.{name}"], rel=1e-11)
        # what is not water in the gas is organic, and the organic liquid is in equilibrium with it alone
        gas, oil, sour = (result[f"streams.{name}.total_mol_s"] for name in ("vent", "oil", "sour"))
        assert gas * y_water + sour == pytest.approx(6.0, rel=1e-12)
        assert min(gas, oil, sour) > 0.01
        assert gas + oil + sour == pytest.approx(10.0, rel=1e-12)

    @pytest.mark.parametrize("celsius", [25.0, 71.0, 72.5, 75.0, 78.0, 84.0, 90.0, 110.0])
    @pytest.mark.parametrize("flows", [
        (6.0, 1.5, 2.5), (0.3, 1.5, 2.5), (30.0, 0.05, 0.01), (1.0, 1e-6, 3.0), (1e-5, 1.0, 1.0),
    ])  # fmt: skip
    def test_against_nested_brackets(self, flows, celsius):
        k = [saturation(own, celsius) / 1e5 for own in (WATER, BENZENE, TOLUENE)]
        factors = np.array([[k[0], 0, 1], [k[1], 1, 0], [k[2], 1, 0]])
        found = three_phases(np.array([flows]), factors).sum(axis=-2)[0]
        np.testing.assert_allclose(found, plain(flows, k), rtol=1e-9, atol=1e-11 * sum(flows))

    def test_laws_at_random(self):
        """Sums of fractions are one where a phase is and no more where it is not; that is enough, Q being convex."""
        generator = np.random.default_rng(20)
        seen = set()
        for number in range(12):
            count, cases = 2 + number % 5, 400
            f = 10 ** generator.uniform(-8 if number % 2 else -2, 1, (cases, count))
            f[generator.random(f.shape) < 0.2] = 0
            own = generator.integers(0, 3, f.shape)
            k = np.where(generator.random(f.shape) < 0.1, 0, 10 ** generator.uniform(-4, 2, f.shape))
            trace = np.where(generator.random(f.shape) < 0.5, 0, 10 ** generator.uniform(-7, -1, f.shape))
            factors = np.stack([
                np.where(own == 0, 1, k),
                np.where(own == 1, 1, np.where(own == 2, trace, 0)),
                np.where(own == 2, 1, np.where(own == 1, trace, 0)),
            ], axis=-1)  # fmt: skip
            parts = three_phases(f, factors)
            assert np.isfinite(parts).all()
            assert (parts >= 0).all()
            np.testing.assert_allclose(parts.sum(axis=-1), f, rtol=1e-13)
            amounts = parts.sum(axis=-2)
            with np.errstate(all="ignore"):
                ratio = np.where((factors > 0) & (amounts > 0)[:, None], parts / amounts[:, None] / factors, np.nan)
                spread = np.nan_to_num(np.fmax.reduce(ratio, axis=-1) / np.fmin.reduce(ratio, axis=-1), nan=1.0)
            there = f > 0
            assert np.abs(spread[there] - 1).max() < 1e-12  # one x answers for all phases
            x = np.where(there, np.nan_to_num(np.fmax.reduce(ratio, axis=-1)), 0)
            sums = (x[..., None] * factors).sum(axis=-2)
            full = f.sum(axis=-1) > 0
            assert (np.where(amounts > 0, np.abs(sums - 1), 0) < 1e-8).all()
            assert (sums[full] < 1 + 1e-10).all()
            seen |= {tuple(row) for row in (amounts > 0)[full]}
        assert seen == set(itertools.product((False, True), repeat=3)) - {(False,) * 3}

    def test_traces_dissolve_by_their_solubility(self):
        result = decanted(40.0, solubility={"benzene": 4e-4, "water": 3e-3})
        x = result["streams.oil.fraction.benzene"]
        assert result["streams.sour.fraction.benzene"] == pytest.approx(4e-4 * x, rel=1e-11)
        assert result["streams.sour.mol_s.toluene"] == 0
        assert result["streams.oil.fraction.water"] == pytest.approx(3e-3 * result["streams.sour.fraction.water"], rel=1e-11)
        total = sum(result[f"streams.{name}.mol_s.benzene"] for name in ("vent", "oil", "sour"))
        assert total == pytest.approx(1.5, rel=1e-14)

    def test_a_trace_alone_stays_dissolved(self):
        result = decanted(20.0, {"water": 10.0, "benzene": 1e-3}, solubility={"benzene": 4e-4})
        assert result["streams.oil.total_mol_s"] == 0
        assert result["streams.sour.mol_s.benzene"] == pytest.approx(1e-3, rel=1e-14)
        assert any("no organic liquid separates" in item for item in result.cautions())

    def test_single_liquids(self):
        assert decanted(30.0, {"water": 1.0, "air": 0.2})["streams.oil.total_mol_s"] == 0
        dry = decanted(60.0, {"water": 0.05, "benzene": 5.0, "air": 1.0})
        assert dry["streams.sour.total_mol_s"] == 0
        assert dry["streams.oil.total_mol_s"] > 0

    def test_named_aqueous_components_follow_the_water(self):
        fed = {"fed": feed("liquid", {"water": 3.0, "tar": 0.2, "benzene": 1.0}, 30.0, 2.0)}
        unit = {**DECANTER, "temperature": "30 degC"}
        assert solved(unit, fed)["streams.oil.mol_s.tar"] == 0.2
        assert solved({**unit, "aqueous": ["water", "tar"]}, fed)["streams.sour.mol_s.tar"] == 0.2

    def test_duty_closes_the_balance(self):
        feeds = {"fed": feed("gas", {**STEAM, "air": 0.5}, 130.0, 1.1),
                 "more": feed("liquid", {"water": 1.0, "tar": 0.1}, 60.0, 3.0)}
        unit = {**DECANTER, "takes": ["fed", "more"], "temperature": "50 degC", "solubility": {"toluene": 1e-4}}
        result = solved(unit, feeds, HEAT)
        assert result["units.unit.results.duty_W"] < -3e5
        assert abs(result["balance.energy.closure"]) < 1e-12
        assert solved(unit, feeds).to_dict()["units"]["unit"]["results"]["duty_W"] is None

    def test_sensitivity_across_a_batch(self):
        temperatures = 273.15 + np.array([40.0, 74.0, 78.0, 95.0])
        unit = {**DECANTER, "temperature": "40 degC"}
        fed = {"fed": feed("gas", {**STEAM, "air": 0.1}, 130.0, 1.0)}
        result = solved(unit, fed, cases={"units.unit.temperature": temperatures})
        slope = result.sensitivity("streams.vent.mol_s.benzene", "units.unit.temperature")
        step = 1e-4
        ends = [solved(unit, fed, cases={"units.unit.temperature": temperatures + s})["streams.vent.mol_s.benzene"]
                for s in (step, -step)]
        np.testing.assert_allclose(slope, (ends[0] - ends[1]) / (2 * step), rtol=1e-6, atol=1e-9)
        assert abs(slope[-1]) < 1e-15 < slope[0]

    def test_faults(self):
        fed = {"fed": feed("gas", STEAM)}
        found = faults({**DECANTER, "temperature": "30 degC"}, {"fed": feed("gas", {"air": 1.0, "benzene": 1.0})})
        assert any(item.startswith("units.unit.aqueous: nothing that reaches decanter 'unit' condenses as water") for item in found)
        airy = {"fed": feed("gas", {**STEAM, "air": 1.0})}
        found = faults({**DECANTER, "temperature": "30 degC", "solubility": {"air": 1e-3}}, airy)
        assert any("'air' stays in the gas" in item for item in found)
        curved = {"here": {**EQUILIBRIUM["here"], "toluene": {"model": "table", "x": [0.0, 0.5], "y": [0.0, 0.4]}}}
        found = faults({**DECANTER, "temperature": "30 degC"}, fed, equilibrium=curved)
        assert any(item.startswith("equilibrium.here.toluene: 'toluene' is given at decanter 'unit' by a ratio") for item in found)
        assert any("units.unit.temperature: entry is missing" in item for item in faults(DECANTER, fed))


VALVE = {"kind": "valve", "takes": "fed", "gives": "low"}


class TestValve:
    def test_a_phase_that_stays_keeps_its_temperature(self):
        for phase in ("gas", "liquid"):
            result = solved({**VALVE, "pressure_drop": "0.5 bar"}, {"fed": feed(phase, {"water": 1.0}, 50.0, 1.2)}, HEAT)
            assert result["streams.low.temperature_K"] == pytest.approx(323.15)
            assert result["streams.low.pressure_Pa"] == pytest.approx(0.7e5)
            assert result["streams.low.phase"] == phase

    def test_hot_water_flashes_by_hand(self):
        fed = {"fed": feed("liquid", {"water": 3.0}, 150.0, 6.0)}
        result = solved({**VALVE, "pressure": "1.0 bar", "equilibrium": "here"}, fed, HEAT)
        a, b, c = WATER
        boiling = b / a - c
        at = 44000 + (33.6 - 75.3) * (boiling - 25)  # heat of vaporisation there
        assert result["streams.low.temperature_K"] == pytest.approx(boiling + 273.15, abs=1e-8)
        assert result["streams.low.vapour_fraction"] == pytest.approx(75.3 * (150 - boiling) / at, rel=1e-10)
        assert abs(result["balance.energy.closure"]) < 1e-12

    def test_cold_water_stays_liquid(self):
        fed = {"fed": feed("liquid", {"water": 3.0}, 40.0, 6.0)}
        result = solved({**VALVE, "pressure": "1.0 bar", "equilibrium": "here"}, fed, HEAT)
        assert result["streams.low.vapour_fraction"] == 0
        assert result["streams.low.temperature_K"] == pytest.approx(313.15, abs=1e-9)

    def test_a_rise_is_a_caution_and_a_vacuum_a_status(self):
        fed = {"fed": feed("liquid", {"water": 3.0}, 40.0, 6.0)}
        assert any("a valve cannot raise it" in item for item in solved({**VALVE, "pressure": "7 bar"}, fed).cautions())
        assert not any("Valve" in item for item in solved({**VALVE, "pressure": "5 bar"}, fed).cautions())
        result = solved({**VALVE, "pressure_drop": "1 bar"}, fed, cases={"units.unit.pressure_drop": np.array([1e5, 6e5])})
        assert result.to_dict()["status"] == ["converged", "unit_failed"]

    def test_faults(self):
        fed = {"fed": feed("liquid", {"water": 3.0})}
        assert faults(VALVE, fed) == ['units.unit.pressure: is not known; add pressure = "2 bar" or pressure_drop = "1 bar"']
        found = faults({**VALVE, "pressure": "1 bar", "pressure_drop": "1 bar"}, fed)
        assert found == ["units.unit.pressure_drop: stands beside pressure; keep one of the two"]


def test_boiling_point_of_the_constants_used_here():
    """The constants above are no nonsense: water boils near 100 degC, benzene near 80, toluene near 111 at 1 atm."""
    for constants, celsius in ((WATER, 100.0), (BENZENE, 80.1), (TOLUENE, 110.6)):
        a, b, c = constants
        assert b / (a - math.log10(1.01325)) - c == pytest.approx(celsius, abs=0.3)
