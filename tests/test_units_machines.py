"""Pump, blower and cleanup: figures by hand, energy, faults and cautions."""

import math

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.optimize import brentq

import leanloop
from leanloop.checks import check_unit
from leanloop.errors import InputError

R = 8.31446261815324


def feed(phase, flows, celsius=50.0, bar=1.0):
    return {
        "phase": phase, "temperature": f"{celsius} degC", "pressure": f"{bar} bar",
        "flows": {name: f"{value} mol/s" for name, value in flows.items()},
    }  # fmt: skip


def solved(unit, fed, components, heat_data=None, cases=None, **more):
    sheet = leanloop.Flowsheet(
        components, feeds={"fed": fed}, units={"unit": unit}, heat_data=heat_data, plain_si=False, **more
    )
    return sheet.solve() if cases is None else sheet.solve(cases)


def faults(*args, **options):
    with pytest.raises(InputError) as caught:
        solved(*args, **options)
    return [str(fault) for fault in caught.value.faults]


@pytest.mark.parametrize("kind", ["pump", "blower", "cleanup"])
def test_contract(kind):
    check_unit(kind)


WATER = {"water": {"molar_mass": "18 g/mol"}}
LIQUID = {"water": {"liquid_heat_capacity": "75 J/(mol K)"}}
PUMP = {"kind": "pump", "takes": "fed", "gives": "high"}


class TestPump:
    def test_by_hand(self):
        unit = {**PUMP, "pressure_rise": "30 bar", "density": "1000 kg/m3", "efficiency": 0.6}
        result = solved(unit, feed("liquid", {"water": 100.0}), WATER, LIQUID)
        power = 1.8 / 1000 * 30e5 / 0.6
        assert result["units.unit.results.power_W"] == pytest.approx(power, rel=1e-13)
        assert result["streams.high.temperature_K"] == pytest.approx(323.15 + power / 7500, rel=1e-13)
        assert result["streams.high.pressure_Pa"] == pytest.approx(31e5)
        assert abs(result["balance.energy.closure"]) < 1e-12

    def test_density_and_molar_volume_agree_and_the_default_is_seven_tenths(self):
        fed = feed("liquid", {"water": 100.0})
        one = solved({**PUMP, "pressure": "31 bar", "density": "1000 kg/m3"}, fed, WATER)
        other = solved({**PUMP, "pressure": "31 bar", "molar_volume": "18 cm3/mol"}, fed, WATER)
        assert one["units.unit.results.power_W"] == pytest.approx(1.8e-3 * 30e5 / 0.7, rel=1e-13)
        assert other["units.unit.results.power_W"] == pytest.approx(one["units.unit.results.power_W"], rel=1e-13)

    def test_what_is_not_known_is_said(self):
        fed = feed("liquid", {"water": 100.0})
        result = solved({**PUMP, "pressure": "31 bar"}, fed, WATER, LIQUID)
        assert result.to_dict()["units"]["unit"]["results"]["power_W"] is None
        assert result["streams.high.temperature_K"] == 323.15
        assert any("its power is not known" in item for item in result.cautions())
        result = solved({**PUMP, "pressure": "31 bar", "molar_volume": "18 cm3/mol"}, fed, WATER)
        assert result["streams.high.temperature_K"] == 323.15
        assert any("the temperature stays" in item for item in result.cautions())
        result = solved({**PUMP, "pressure": "31 bar", "molar_volume": "18 cm3/mol"}, fed, WATER, LIQUID)
        assert not any("Pump" in item for item in result.cautions())

    def test_no_power_is_won_by_letting_down(self):
        fed = feed("liquid", {"water": 100.0}, bar=5.0)
        unit = {**PUMP, "pressure": "2 bar", "density": "1000 kg/m3"}
        pressures = np.array([2e5, 8e5])
        result = solved(unit, fed, WATER, LIQUID, cases={"units.unit.pressure": pressures})
        np.testing.assert_allclose(result["units.unit.results.power_W"], [0.0, 1.8e-3 * 3e5 / 0.7], rtol=1e-13)
        assert any("a valve is needed" in item for item in result.cautions())

    def test_liquid_behind_a_condenser_is_pumped_gas_is_a_caution(self):
        boiling = {"form": "antoine", "A": 5.19621, "B": 1730.63, "C": 233.426, "pressure": "bar", "temperature": "degC"}
        data = {"water": {"gas_heat_capacity": "33.6 J/(mol K)", "liquid_heat_capacity": "75 J/(mol K)",
                          "heat_of_vaporisation": "44 kJ/mol"}}
        for celsius, gassy in ((60.0, False), (170.0, True)):
            sheet = leanloop.Flowsheet(
                WATER, equilibrium={"here": {"water": {"model": "raoult", "vapour_pressure": boiling}}},
                feeds={"fed": feed("liquid", {"water": 100.0}, celsius, 9.0)},
                units={
                    "let": {"kind": "valve", "takes": "fed", "gives": "low", "pressure": "1 bar", "equilibrium": "here"},
                    "unit": {**PUMP, "takes": "low", "pressure": "20 bar", "density": "1000 kg/m3"},
                },
                heat_data=data, plain_si=False,
            )  # fmt: skip
            result = sheet.solve()
            assert result["units.unit.results.power_W"] == pytest.approx(1.8e-3 * 19e5 / 0.7, rel=1e-12)
            assert abs(result["balance.energy.closure"]) < 1e-11
            assert any("there is gas in what it is fed" in item for item in result.cautions()) is gassy
            if not gassy:
                assert result["streams.high.temperature_K"] == pytest.approx(333.15 + 1.8e-3 * 19e5 / 0.7 / 7500, rel=1e-10)

    def test_faults(self):
        unit = {**PUMP, "pressure": "31 bar", "density": "1000 kg/m3"}
        found = faults(unit, feed("gas", {"water": 1.0}), WATER)
        assert found == ["units.unit.takes: stream 'fed' is gas; connect a liquid stream, or write kind = \"blower\""]
        found = faults(unit, feed("liquid", {"oil": 1.0}), {"oil": {}})
        assert [item.partition(":")[0] for item in found] == ["components.oil.molar_mass"]
        found = faults({**unit, "molar_volume": "18 cm3/mol"}, feed("liquid", {"water": 1.0}), WATER)
        assert found == ["units.unit.molar_volume: stands beside density; keep one of the two"]
        found = faults({**PUMP, "density": "1 kg/m3"}, feed("liquid", {"water": 1.0}), WATER)
        assert found[0].startswith("units.unit.pressure: is not known")
        assert "is a density" in faults({**unit, "efficiency": "3 kg/m3"}, feed("liquid", {"water": 1.0}), WATER)[0]


GASES = {"air": {"molar_mass": "29 g/mol", "stays_in": "gas"}, "carbon": {"molar_mass": "44 g/mol", "stays_in": "gas"}}
BLOWER = {"kind": "blower", "takes": "fed", "gives": "high"}
CURVE = [20.0, 0.06, -3e-5]
DATA = {
    "air": {"gas_heat_capacity": "29.1 J/(mol K)"},
    "carbon": {"gas_heat_capacity": {"polynomial": CURVE, "temperature": "K", "unit": "J/(mol K)"}},
}


class TestBlower:
    def test_constant_heat_capacity_by_hand(self):
        result = solved({**BLOWER, "pressure": "3 bar", "efficiency": 0.8}, feed("gas", {"air": 5.0}), GASES, DATA)
        power = 5 * 29.1 * 323.15 * (3 ** (R / 29.1) - 1) / 0.8
        assert result["units.unit.results.power_W"] == pytest.approx(power, rel=1e-11)
        assert result["streams.high.temperature_K"] == pytest.approx(323.15 + power / 5 / 29.1, rel=1e-11)
        assert abs(result["balance.energy.closure"]) < 1e-12

    @pytest.mark.parametrize("bar", [1.0, 1.05, 3.0, 30.0])
    def test_isentropic_end_against_quadrature(self, bar):
        fed = feed("gas", {"air": 2.0, "carbon": 3.0}, 40.0)
        result = solved({**BLOWER, "pressure": f"{bar} bar", "efficiency": 1.0}, fed, GASES, DATA)
        cp = lambda t: 0.4 * 29.1 + 0.6 * (CURVE[0] + CURVE[1] * t + CURVE[2] * t * t)  # noqa: E731
        asked = R * math.log(bar)
        end = brentq(lambda t: quad(lambda u: cp(u) / u, 313.15, t, epsabs=1e-13)[0] - asked, 313.1, 900, xtol=1e-11)
        assert result["streams.high.temperature_K"] == pytest.approx(end, rel=1e-10)
        work = 5 * quad(cp, 313.15, end, epsabs=1e-13)[0]
        assert result["units.unit.results.power_W"] == pytest.approx(work, rel=1e-8, abs=1e-8)

    def test_ratio_of_heat_capacities(self):
        unit = {**BLOWER, "pressure_rise": "0.5 bar", "heat_capacity_ratio": 1.4, "efficiency": 0.5}
        result = solved(unit, feed("gas", {"air": 5.0}), GASES)
        rise = 323.15 * (1.5 ** (0.4 / 1.4) - 1) / 0.5
        assert result["streams.high.temperature_K"] == pytest.approx(323.15 + rise, rel=1e-13)
        assert result["units.unit.results.power_W"] == pytest.approx(5 * 3.5 * R * rise, rel=1e-12)
        # with heat data the power is the same and the temperature closes the balance
        both = solved(unit, feed("gas", {"air": 5.0}), GASES, DATA)
        assert both["units.unit.results.power_W"] == pytest.approx(result["units.unit.results.power_W"], rel=1e-13)
        assert abs(both["balance.energy.closure"]) < 1e-12

    def test_built_in_heat_data_serve(self):
        species = {"nitrogen": {"molar_mass": "28 g/mol", "stays_in": "gas"}}
        result = solved({**BLOWER, "pressure": "2 bar", "efficiency": 1.0}, feed("gas", {"nitrogen": 1.0}, 25.0), species)
        assert result["streams.high.temperature_K"] == pytest.approx(298.15 * 2 ** (2 / 7), rel=1e-3)

    def test_letting_down_wins_nothing(self):
        result = solved({**BLOWER, "pressure": "0.5 bar"}, feed("gas", {"air": 5.0}), GASES, DATA)
        assert result["units.unit.results.power_W"] == pytest.approx(0, abs=1e-9)
        assert result["streams.high.temperature_K"] == pytest.approx(323.15, rel=1e-13)
        assert any("a valve is needed" in item for item in result.cautions())

    def test_batch_and_sensitivity(self):
        pressures = np.array([1.1e5, 2e5, 6e5])
        fed, unit = feed("gas", {"air": 2.0, "carbon": 3.0}), {**BLOWER, "pressure": "2 bar"}
        result = solved(unit, fed, GASES, DATA, cases={"units.unit.pressure": pressures})
        slope = result.sensitivity("units.unit.results.power_W", "units.unit.pressure")
        ends = [solved(unit, fed, GASES, DATA, cases={"units.unit.pressure": pressures + s})["units.unit.results.power_W"]
                for s in (10.0, -10.0)]
        np.testing.assert_allclose(slope, (ends[0] - ends[1]) / 20.0, rtol=1e-6)

    def test_range_of_heat_data_is_said(self):
        data = {**DATA, "air": {"gas_heat_capacity": {"polynomial": [29.1], "temperature": "K", "unit": "J/(mol K)",
                                                      "valid": ["0 degC", "100 degC"]}}}
        result = solved({**BLOWER, "pressure": "5 bar"}, feed("gas", {"air": 5.0}), GASES, data)
        head = "Blower unit, air: the gas heat capacity is used outside its stated range"
        assert any(item.startswith(head) for item in result.cautions())

    def test_faults(self):
        found = faults({**BLOWER, "pressure": "2 bar"}, feed("gas", {"mist": 1.0}), {"mist": {"stays_in": "gas"}})
        assert len(found) == 1
        head = "units.unit.heat_capacity_ratio: entry is missing, and there are no heat data of the gas of mist"
        assert found[0].startswith(head)
        found = faults({**BLOWER, "pressure": "2 bar", "heat_capacity_ratio": 1.4}, feed("liquid", {"water": 1.0}), WATER)
        assert found == ["units.unit.takes: stream 'fed' is liquid; connect a gas stream, or write kind = \"pump\""]
        found = faults({**BLOWER, "pressure": "2 bar", "heat_capacity_ratio": 1.0}, feed("gas", {"air": 1.0}), GASES)
        assert found[0].startswith("units.unit.heat_capacity_ratio: 1.0 is out of range")


CLEANUP = {"kind": "cleanup", "takes": "fed", "gives": "clean", "rejects": "waste"}
OILS = {"oil": {"stays_in": "liquid"}, "tar": {"stays_in": "liquid"}}


class TestCleanup:
    def test_parts_are_removed(self):
        result = solved({**CLEANUP, "removal": {"tar": 0.9}}, feed("liquid", {"oil": 2.0, "tar": 0.5}), OILS)
        assert result["streams.clean.mol_s.tar"] == pytest.approx(0.05, rel=1e-13)
        assert result["streams.waste.mol_s.tar"] == pytest.approx(0.45, rel=1e-13)
        assert result["streams.waste.mol_s.oil"] == 0
        assert result["streams.clean.mol_s.oil"] == 2.0
        assert result["streams.waste.temperature_K"] == result["streams.clean.temperature_K"] == 323.15
        assert result["streams.waste.phase"] == "liquid"

    def test_the_only_way_out_of_a_loop(self):
        """Tar enters a closed oil loop and leaves by the cleanup alone; with no removal it would build up for ever."""

        def loop(removal):
            return leanloop.Flowsheet(
                {**OILS, "water": {"stays_in": "liquid"}},
                feeds={"fed": feed("liquid", {"tar": 0.01, "oil": 0.001}), "start": feed("liquid", {"water": 1.0})},
                units={
                    "join": {"kind": "mixer", "takes": ["fed", "start", "back"], "gives": "all"},
                    "clean": {**CLEANUP, "takes": "all", "gives": "cleaned", "removal": {"tar": removal, "oil": 0.5, "water": 1.0}},
                    "top_up": {"kind": "makeup", "takes": "cleaned", "gives": "back", "hold": {"oil": "2 mol/s"}},
                },
                plain_si=False,
            )  # fmt: skip

        result = loop(0.1).solve()
        assert result["streams.all.mol_s.tar"] == pytest.approx(0.1, rel=1e-9)
        assert result["streams.waste.mol_s.tar"] == pytest.approx(0.01, rel=1e-9)
        found = loop(0.1).solve({"units.clean.removal.tar": np.array([0.2, 0.0])})
        assert found.to_dict()["status"] == ["converged", "no_steady_state"]

    def test_faults(self):
        fed = feed("liquid", {"oil": 2.0, "tar": 0.5})
        assert faults({**CLEANUP, "removal": {"tar": 1.2}}, fed, OILS)[0].startswith("units.unit.removal.tar: 1.2 is out of range")
        assert faults({**CLEANUP, "removal": {}}, fed, OILS)[0].startswith("units.unit.removal: removes nothing")
        assert "unknown component 'tarr'" in faults({**CLEANUP, "removal": {"tarr": 0.2}}, fed, OILS)[0]
