"""The exchanger: against closed forms, by hand, against a fine integration, its limits and its failures."""

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.optimize import brentq

import leanloop
from leanloop.checks.stand import Stand
from leanloop.errors import InputError
from leanloop.status import OK, Status, code
from leanloop.units import KINDS
from leanloop.units.base import Inlet, Scene
from leanloop.units.exchanger_zones import inverse_log_mean

PORTS = {"hot_in": "a", "hot_out": "b", "cold_in": "c", "cold_out": "d"}
DATA = {
    "oil": {"liquid_heat_capacity": 200.0},
    "water": {"gas_heat_capacity": 33.6, "liquid_heat_capacity": 75.3, "heat_of_vaporisation": {"value": 44e3, "at": 298.15}},
    "air": {"gas_heat_capacity": 29.1},
    "tar": {"liquid_heat_capacity": {"polynomial": [-200.0, 1.5], "temperature": "K", "unit": "J/(mol K)"}},
}
STAYS = {"oil": {"stays_in": "liquid"}, "air": {"stays_in": "gas"}, "tar": {"stays_in": "liquid"}, "water": {}}
ANTOINE = {"form": "antoine", "A": 5.19621, "B": 1730.63, "C": 233.426, "pressure": "bar", "temperature": "degC"}
HERE = {"here": {"water": {"model": "raoult", "vapour_pressure": ANTOINE}}}


def psat(t):
    return 1e5 * 10 ** (5.19621 - 1730.63 / (233.426 + t - 273.15))


def boiling(pressure):
    return 1730.63 / (5.19621 - np.log10(pressure / 1e5)) - 233.426 + 273.15


def run(hot, cold, **entries):
    """Status, outlet states and results of the cases given."""
    scene = Scene({**PORTS, **entries}, {"hot_in": hot, "cold_in": cold}, STAYS, HERE, heat_data=DATA)
    stand = Stand(KINDS.load("exchanger"), scene)
    found = stand.evaluate()
    half = stand.cases // 2
    with np.errstate(all="ignore"):
        results = stand.unit.results(stand.inlets, found.outlets, stand.numbers, {})["results"]
        crossed = stand.unit.crosses(stand.inlets, found.outlets, stand.numbers)  # as the flowsheet judges it
    return (
        np.where((found.status == OK) & crossed, code(Status.temperature_cross), found.status)[:half],
        {label: stream.state[:half] for label, stream in found.outlets.items()},
        {key: np.broadcast_to(value, (stand.cases,))[:half] for key, value in results.items()},
    )


def oils(hot, cold, **entries):
    """Oil against oil: C = 200 J/(mol K) times the flows."""
    return run(Inlet("liquid", {"oil": hot}, 400.0), Inlet("liquid", {"oil": cold}, 300.0), **entries)


class TestConstantCapacities:
    @pytest.mark.parametrize("area", [1e-3, 20.0, 200.0, 1500.0, 8000.0])
    def test_effectiveness_and_number_of_transfer_units(self, area):
        """W. M. Kays, A. L. London, Compact Heat Exchangers, chapter 2: counter-current flow."""
        hot, cold = np.array([1.0, 2.0, 1.0, 1.0 + 1e-9, 3.0]), np.array([2.0, 1.0, 1.0, 1.0, 0.1])
        status, out, results = oils(list(hot), list(cold), UA=area)
        least, most = 200 * np.minimum(hot, cold), 200 * np.maximum(hot, cold)
        ntu, ratio = area / least, least / most
        with np.errstate(all="ignore"):
            fall = np.exp(-ntu * (1 - ratio))
            wanted = np.where(ratio > 1 - 1e-6, ntu / (1 + ntu), (1 - fall) / (1 - ratio * fall))
        assert (status == OK).all()
        assert results["effectiveness"] == pytest.approx(wanted, rel=2e-8)  # the limit of equal rates is that far off
        far = ratio < 1 - 1e-6
        assert results["effectiveness"][far] == pytest.approx(wanted[far], rel=1e-11)
        assert results["duty_W"] == pytest.approx(wanted * least * 100.0, rel=2e-8)
        assert out["hot_out"][:, -2] == pytest.approx(400.0 - results["duty_W"] / (200 * hot), rel=1e-12)
        assert out["cold_out"][:, -2] == pytest.approx(300.0 + results["duty_W"] / (200 * cold), rel=1e-12)

    def test_the_area_of_the_result_is_the_one_given(self):
        for area in (20.0, 900.0):
            assert oils([1.0, 2.0, 1.0], [2.0, 1.0, 1.0], UA=area)[2]["UA_W_K"] == pytest.approx(np.full(3, area), rel=1e-9)

    def test_approach_at_the_hot_end(self):
        status, out, results = oils([2.0], [1.0], approach={"hot_end": 12.0})
        assert (status == OK).all()
        assert out["cold_out"][0, -2] == pytest.approx(388.0, rel=1e-12)
        assert out["hot_out"][0, -2] == pytest.approx(400.0 - 44.0, rel=1e-12)
        assert results["duty_W"] == pytest.approx([17600.0], rel=1e-12)
        assert [results[f"approach_{end}_K"][0] for end in ("hot_end", "cold_end", "least")] == pytest.approx([12.0, 56.0, 12.0])
        log_mean = (56.0 - 12.0) / np.log(56.0 / 12.0)
        assert results["UA_W_K"] == pytest.approx([17600.0 / log_mean], rel=1e-10)

    def test_approach_at_the_cold_end(self):
        _, out, results = oils([1.0], [2.0], approach={"cold_end": 10.0})
        assert out["hot_out"][0, -2] == pytest.approx(310.0, rel=1e-12)
        assert out["cold_out"][0, -2] == pytest.approx(345.0, rel=1e-12)
        assert results["approach_hot_end_K"] == pytest.approx([55.0], rel=1e-10)

    def test_the_least_approach_is_at_the_right_end_on_either_side_of_equal_rates(self):
        hot = [0.5, 0.999999, 1.0, 1.000001, 2.0]
        status, _, results = oils(hot, [1.0] * 5, approach={"least": 10.0})
        assert (status == OK).all()
        assert results["approach_least_K"] == pytest.approx(np.full(5, 10.0), rel=1e-9)
        assert results["approach_cold_end_K"][:3] == pytest.approx(np.full(3, 10.0), rel=1e-9)
        assert results["approach_hot_end_K"][2:] == pytest.approx(np.full(3, 10.0), rel=1e-9)
        assert results["duty_W"] == pytest.approx(200 * 90.0 * np.minimum(hot, 1.0), rel=1e-10)

    def test_a_given_duty(self):
        _, out, results = oils([1.0], [2.0], duty=4000.0)
        assert (out["hot_out"][0, -2], out["cold_out"][0, -2]) == pytest.approx((380.0, 310.0), rel=1e-12)
        assert results["duty_W"] == pytest.approx([4000.0], rel=1e-11)

    def test_unlimited_area_brings_an_outlet_to_the_other_inlet(self):
        status, out, _ = oils([1.0, 2.0], [2.0, 1.0], UA=1e9)
        assert (status == OK).all()
        assert out["hot_out"][0, -2] == pytest.approx(300.0, rel=1e-9)
        assert out["cold_out"][1, -2] == pytest.approx(400.0, rel=1e-9)

    def test_pressure_drops(self):
        _, out, _ = oils([1.0], [2.0], UA=100.0, hot_pressure_drop=3e4, cold_pressure_drop=1e4)
        assert (out["hot_out"][0, -1], out["cold_out"][0, -1]) == (7e4, 9e4)


class TestCapacitiesThatChange:
    def test_area_by_quadrature(self, monkeypatch):
        """Capacity of tar 1.5 T - 200 J/(mol K), so that its enthalpy is a square: the integral dQ/(Th - Tc) by quadrature."""
        hot, cold = Inlet("liquid", {"tar": [1.0]}, 420.0), Inlet("liquid", {"tar": [1.1]}, 300.0)
        _, out, results = run(hot, cold, duty=30000.0)

        def warm(start, heat, flow):  # 0.75 T^2 - 200 T = enthalpy + constant
            value = 0.75 * start**2 - 200 * start + heat / flow
            return (200 + np.sqrt(200**2 + 3 * value)) / 1.5

        end = warm(420.0, -30000.0, 1.0)
        assert out["hot_out"][0, -2] == pytest.approx(end, rel=1e-12)
        area = quad(lambda q: 1 / (warm(end, q, 1.0) - warm(300.0, q, 1.1)), 0, 30000.0, epsrel=1e-12)[0]
        assert results["UA_W_K"] == pytest.approx([area], rel=2e-5)
        # what is left is of second order in the width of the zones
        monkeypatch.setattr("leanloop.units.exchanger_zones.ZONES", 128)
        finer = run(hot, cold, duty=30000.0)[2]["UA_W_K"][0]
        assert (finer - area) / (results["UA_W_K"][0] - area) == pytest.approx(0.25, rel=0.01)
        monkeypatch.undo()
        back = run(hot, cold, UA=float(results["UA_W_K"][0]))[2]
        assert back["duty_W"] == pytest.approx([30000.0], rel=1e-10)


class TestSidesThatFlash:
    HOT = Inlet("gas", {"air": [0.4], "water": [1.5]}, 420.0, 2e5)
    COLD = Inlet("liquid", {"oil": [0.8]}, 300.0, 2e5)

    @staticmethod
    def enthalpy(t):
        """Of the hot stream, W: air with water to saturation, the rest condensed."""
        most = 0.4 * psat(t) / (2e5 - psat(t)) if psat(t) < 2e5 else np.inf
        steam = min(1.5, most)
        gas = 44e3 + 33.6 * (t - 298.15)
        return 0.4 * 29.1 * (t - 298.15) + steam * gas + (1.5 - steam) * 75.3 * (t - 298.15)

    def hot_at(self, energy):
        return brentq(lambda t: self.enthalpy(t) - energy, 250.0, 430.0, xtol=1e-11)

    def test_condensing_gas_against_a_fine_integration(self):
        duty = 15000.0
        _, out, results = run(self.HOT, self.COLD, duty=duty, hot_equilibrium="here")
        start = self.enthalpy(420.0)
        dew = brentq(lambda t: psat(t) - 2e5 * 1.5 / 1.9, 300.0, 420.0)
        bend = start - self.enthalpy(dew)
        assert 0 < bend < duty

        def inverse(x):  # x counts from the hot end
            return 1 / (self.hot_at(start - x) - (300.0 + (duty - x) / 160.0))

        area = sum(quad(inverse, *part, epsrel=1e-10)[0] for part in ((0, bend), (bend, duty)))
        assert results["UA_W_K"] == pytest.approx([area], rel=2e-3)
        assert results["approach_cold_end_K"] == pytest.approx([self.hot_at(start - duty) - 300.0], rel=1e-8)
        assert out["hot_out"][0, -2] * 1.9 == pytest.approx(start - duty, rel=1e-12)
        assert out["cold_out"][0, -2] == pytest.approx(300.0 + duty / 160.0, rel=1e-12)
        back = run(self.HOT, self.COLD, UA=float(results["UA_W_K"][0]), hot_equilibrium="here")[2]
        assert back["duty_W"] == pytest.approx([duty], rel=1e-9)

    def test_the_least_approach_may_be_where_boiling_starts(self):
        """Oil boils water: the closest point is the bubble point, neither end; duties by hand."""
        hot = Inlet("liquid", {"oil": [4.0]}, 460.0)
        cold = Inlet("liquid", {"water": [2.0]}, 300.0, 1.5e5)
        status, _, results = run(hot, cold, approach={"least": 6.0}, cold_equilibrium="here")
        bubble = boiling(1.5e5)
        # down to the bubble point the hot side has given off 800 (460 - bubble - 6), and warming the liquid takes the rest
        wanted = 800.0 * (460.0 - bubble - 6.0) + 2.0 * 75.3 * (bubble - 300.0)
        assert (status == OK).all()
        assert results["duty_W"] == pytest.approx([wanted], rel=1e-7)
        assert results["approach_least_K"] == pytest.approx([6.0], rel=1e-6)
        assert min(results["approach_hot_end_K"][0], results["approach_cold_end_K"][0]) > 20.0

    def test_area_of_a_boiler_by_hand(self):
        """Two zones of log-mean differences: liquid to its bubble point, then boiling at one temperature."""
        hot = Inlet("liquid", {"oil": [4.0]}, 460.0)
        cold = Inlet("liquid", {"water": [2.0]}, 300.0, 1.5e5)
        duty, bubble = 65000.0, boiling(1.5e5)
        warming = 2.0 * 75.3 * (bubble - 300.0)
        hot_out, between = 460.0 - duty / 800.0, 460.0 - (duty - warming) / 800.0
        area = 0.0
        for heat, one, other in ((warming, hot_out - 300.0, between - bubble), (duty - warming, between - bubble, 460.0 - bubble)):
            area += heat * np.log(one / other) / (one - other)
        results = run(hot, cold, duty=duty, cold_equilibrium="here")[2]
        assert results["UA_W_K"] == pytest.approx([area], rel=1e-6)
        assert run(hot, cold, UA=area, cold_equilibrium="here")[2]["duty_W"] == pytest.approx([duty], rel=1e-6)

    def test_unlimited_area_ends_at_the_inner_pinch(self):
        hot = Inlet("liquid", {"oil": [4.0]}, 460.0)
        cold = Inlet("liquid", {"water": [2.0]}, 300.0, 1.5e5)
        status, _, results = run(hot, cold, UA=1e9, cold_equilibrium="here")
        bubble = boiling(1.5e5)
        assert (status == OK).all()
        assert results["duty_W"] == pytest.approx([800.0 * (460.0 - bubble) + 2.0 * 75.3 * (bubble - 300.0)], rel=1e-6)


class TestWhatCannotBe:
    FAILED = code(Status.temperature_cross)
    NO_ANSWER = code(Status.unit_failed)

    def test_an_approach_wider_than_the_inlets_are_apart_fails_its_case_alone(self):
        hot = Inlet("liquid", {"oil": [1.0, 1.0, 1.0]}, [400.0, 305.0, 280.0])
        cold = Inlet("liquid", {"oil": [2.0, 2.0, 2.0]}, 300.0)
        for way in ("hot_end", "cold_end", "least"):
            status, _, results = run(hot, cold, approach={way: 60.0 if way == "hot_end" else 10.0})
            assert list(status) == [OK, self.FAILED, self.FAILED]
        assert results["duty_W"][0] == pytest.approx(200 * 90.0)

    def test_temperatures_do_not_cross(self):
        # the cold end would be crossed: hot capacity is half
        assert list(oils([1.0], [2.0], approach={"hot_end": 10.0})[0]) == [self.FAILED]
        assert list(oils([1.0, 1.0], [2.0, 2.0], duty=19999.0)[0]) == [OK, OK]
        assert list(oils([1.0], [2.0], duty=20001.0)[0]) == [self.FAILED]

    def test_a_crossing_inside_is_found(self):
        hot = Inlet("liquid", {"oil": [4.0]}, 460.0)
        cold = Inlet("liquid", {"water": [2.0]}, 300.0, 1.5e5)
        limit = 800.0 * (460.0 - boiling(1.5e5)) + 2.0 * 75.3 * (boiling(1.5e5) - 300.0)
        assert list(run(hot, cold, duty=limit - 10.0, cold_equilibrium="here")[0]) == [OK]
        assert list(run(hot, cold, duty=limit + 10.0, cold_equilibrium="here")[0]) == [self.FAILED]

    def test_a_hot_side_that_is_the_colder_one(self):
        hot, cold = Inlet("liquid", {"oil": [1.0, 1.0]}, [300.0, 350.0]), Inlet("liquid", {"oil": [1.0, 1.0]}, 310.0)
        assert list(run(hot, cold, UA=100.0)[0]) == [self.FAILED, OK]

    def test_a_side_without_flow(self):
        for entries in ({"UA": 500.0}, {"approach": {"least": 10.0}}, {"approach": {"hot_end": 10.0}}, {"duty": 100.0}):
            status, out, results = oils([0.0, 1.0, 0.0], [1.0, 0.0, 0.0], **entries)
            assert (status == OK).all(), entries
            assert (results["duty_W"] == 0).all()
            assert out["hot_out"][:, -2] == pytest.approx(np.full(3, 400.0), rel=1e-14)
            assert out["cold_out"][:, -2] == pytest.approx(np.full(3, 300.0), rel=1e-14)

    def test_a_pressure_drop_beyond_the_pressure_fails(self):
        assert list(oils([1.0], [2.0], UA=100.0, hot_pressure_drop=1e5)[0]) == [self.NO_ANSWER]


def test_inverse_log_mean_is_regular_where_differences_are_equal():
    x = 1 + np.array([-0.9, -0.1, -0.0599, -1e-3, -1e-9, 0.0, 1e-12, 1e-6, 0.061, 0.0621, 5.0])
    with np.errstate(all="ignore"):
        wanted = np.where(x == 1, 1.0, np.log1p(x - 1) / (x - 1))
    assert inverse_log_mean(np.ones(11), x) == pytest.approx(wanted, rel=4e-16 * 8)
    slope = inverse_log_mean(np.ones(1), np.ones(1) + 1e-30j).imag / 1e-30
    assert slope == pytest.approx([-0.5], rel=1e-14)  # d(1/log-mean) is that of the inverse mean


# --- in a flowsheet

SHEET = """
[feeds.hot]
phase = "liquid"
temperature = "120 degC"
pressure = "3 bar"
flow = "2 mol/s"
fractions = { oil = 1.0 }
[feeds.cold]
phase = "liquid"
temperature = "30 degC"
pressure = "2 bar"
flow = "3 mol/s"
fractions = { oil = "rest", water = 0.1 }
[units.swap]
kind = "exchanger"
hot_in = "hot"
hot_out = "cooled"
cold_in = "cold"
cold_out = "warmed"
SIZE
[components]
oil = { molar_mass = "250 g/mol", stays_in = "liquid" }
water = { molar_mass = "18 g/mol" }
[heat_data.oil]
liquid_heat_capacity = "480 J/(mol K)"
[equilibrium.here.water]
model = "raoult"
vapour_pressure = { form = "antoine", A = 5.19621, B = 1730.63, C = 233.426, pressure = "bar", temperature = "degC" }
"""


def sheet(tmp_path, size, text=SHEET):
    path = tmp_path / "swap.toml"
    path.write_text(text.replace("SIZE", size), encoding="utf-8")
    return leanloop.read(path)


def test_energy_balance_and_sensitivities_in_a_flowsheet(tmp_path):
    result = sheet(tmp_path, 'UA = "1.5 kW/K"').solve()
    assert result["status"] == "converged"
    assert abs(result["balance.energy.closure"]) < 1e-10
    assert result["balance.energy.duties_W"] == 0
    duty = "units.swap.results.duty_W"
    slope = result.sensitivity(duty, "units.swap.UA")
    more, less = (sheet(tmp_path, f'UA = "{1.5 + way} kW/K"').solve()[duty] for way in (1e-4, -1e-4))
    assert slope == pytest.approx((more - less) / 0.2, rel=1e-6)


@pytest.mark.parametrize(("size", "address", "part"), [
    ("", "units.swap.approach", "missing"),
    ('UA = "1 kW/K"\nduty = "3 kW"', "units.swap.UA", "duty"),
    ("approach = { }", "units.swap.approach", "where"),
    ('approach = { hot_end = "5 K", least = "4 K" }', "units.swap.approach", "least"),
    ('approach = { hot_end = "0 K" }', "units.swap.approach.hot_end", "range"),
    ('UA = "3 W"', "units.swap.UA", "power"),
    ('duty = "3 kW"\ncold_equilibrium = "there"', "units.swap.cold_equilibrium", "here"),
])  # fmt: skip
def test_wrong_input_is_told_with_its_address(tmp_path, size, address, part):
    with pytest.raises(InputError) as caught:
        sheet(tmp_path, size)
    found = [fault for fault in caught.value.faults if fault.address == address]
    assert found and part in str(found[0]), caught.value.faults


def test_a_stream_without_heat_data_is_a_fault(tmp_path):
    text = SHEET.replace('[heat_data.oil]\nliquid_heat_capacity = "480 J/(mol K)"\n', "")
    with pytest.raises(InputError) as caught:
        sheet(tmp_path, 'UA = "1 kW/K"', text)
    assert [fault.address for fault in caught.value.faults] == ["heat_data.oil"]


def test_a_two_phase_inlet_needs_a_table(tmp_path):
    first = '[units.boil]\nkind = "heater"\ntakes = "cold"\ngives = "boiled"\ntemperature = "110 degC"\nequilibrium = "here"\n'
    text = SHEET.replace('cold_in = "cold"', 'cold_in = "boiled"').replace("[components]", first + "[components]")
    with pytest.raises(InputError) as caught:
        sheet(tmp_path, 'UA = "1 kW/K"', text)
    assert [fault.address for fault in caught.value.faults] == ["units.swap.cold_in"]
    result = sheet(tmp_path, 'UA = "1 kW/K"\ncold_equilibrium = "here"', text).solve()
    assert result["status"] == "converged"
    assert abs(result["balance.energy.closure"]) < 1e-10


class TestCautions:
    @pytest.mark.parametrize(("least", "told"), [(0.5, True), (2.9, True), (3.1, False), (20.0, False)])
    def test_sides_that_come_very_close_are_told(self, least, told):
        inlets = {"hot_in": Inlet("liquid", {"oil": 1.0}, 400.0), "cold_in": Inlet("liquid", {"oil": 1.2}, 300.0)}
        stand = Stand(KINDS.load("exchanger"), Scene({**PORTS, "approach": {"least": least}}, inlets, STAYS, HERE, heat_data=DATA))
        found = stand.evaluate()
        said = stand.unit.cautions(stand.inlets, found.outlets, stand.numbers, found.memory)
        assert [f"as close as {least:g} K" in sentence for sentence in said] == [True] * told
