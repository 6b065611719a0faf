"""Heater, cooler, mixer and make-up with heat: balances by hand, flashes, cautions, faults."""

import numpy as np
import pytest

import leanloop
from leanloop.checks.stand import Stand
from leanloop.errors import InputError
from leanloop.status import OK, Status, code
from leanloop.stream import Stream
from leanloop.units import KINDS
from leanloop.units.base import Inlet, Scene

DATA = {
    "oil": {"liquid_heat_capacity": {"polynomial": [-200.0, 1.5], "temperature": "K", "unit": "J/(mol K)"}},
    "water": {"gas_heat_capacity": 33.6, "liquid_heat_capacity": 75.3, "heat_of_vaporisation": {"value": 44e3, "at": 298.15}},
    "air": {"gas_heat_capacity": 29.1},
}
STAYS = {"oil": {"stays_in": "liquid"}, "air": {"stays_in": "gas"}, "water": {}}
ANTOINE = {"form": "antoine", "A": 5.19621, "B": 1730.63, "C": 233.426, "pressure": "bar", "temperature": "degC"}
HERE = {"here": {"water": {"model": "raoult", "vapour_pressure": ANTOINE}}}


def psat(t):
    return 1e5 * 10 ** (5.19621 - 1730.63 / (233.426 + t - 273.15))


def steam(t):
    return 44e3 + 33.6 * (t - 298.15)


def stand(kind, inlets, data=None, **entries):
    if not {"takes", "gives"} & set(entries):
        entries = {"takes": list(inlets) if kind == "mixer" else "before", "gives": "after", **entries}
    if kind != "mixer":
        inlets = {"takes": inlets}
    used = {name for inlet in inlets.values() for name in inlet.flows} | {*entries.get("hold", ()), *entries.get("composition", ())}
    stays = {name: STAYS[name] for name in sorted(used)}
    heat = {name: DATA[name] for name in sorted(used)} if data is None else data
    return Stand(KINDS.load(kind), Scene(entries, inlets, stays, HERE if "water" in used else {}, heat_data=heat))


def first(kind, inlets, data=None, **entries):
    """Status, outlet state, results, cautions and added heat of the first case."""
    own = stand(kind, inlets, data, **entries)
    found = own.evaluate()
    sides = own.inlets, found.outlets, own.numbers
    with np.errstate(all="ignore"):
        results, said = own.unit.results(*sides, {})["results"], own.unit.cautions(*sides, {})
        added = own.unit.added_heat(*sides)
    return found.status[0], found.outlets["gives"].state[0], results, said, None if added is None else added[0]


class TestHeaterAndCooler:
    OIL = Inlet("liquid", {"oil": [2.0]}, 300.0, 2e5)

    def test_duty_from_the_temperature(self):
        _, state, results, said, _ = first("heater", self.OIL, temperature=400.0)
        assert results["duty_W"][0] == pytest.approx(2 * (0.75 * (400**2 - 300**2) - 200 * 100), rel=1e-12)
        assert list(state[-2:]) == [400.0, 2e5] and said == []

    def test_temperature_from_the_duty(self):
        duty = 2 * (0.75 * (400**2 - 300**2) - 200 * 100)
        status, state, results, said, _ = first("heater", self.OIL, duty=duty, pressure_drop=5e4)
        assert status == OK and said == []
        assert list(state[-2:]) == pytest.approx([400.0, 1.5e5], rel=1e-12)
        assert results["duty_W"][0] == pytest.approx(duty, rel=1e-12)
        hot = Inlet("liquid", {"oil": [2.0]}, 400.0)
        assert first("cooler", hot, duty=-duty)[1][-2] == pytest.approx(300.0, rel=1e-12)

    def test_without_heat_data_the_duty_is_not_known(self):
        assert first("heater", self.OIL, data={}, temperature=400.0)[2]["duty_W"] is None

    def test_the_wrong_sign_is_a_caution(self):
        assert any("heater unit cools" in item.lower() and "duty" in item for item in first("heater", self.OIL, duty=-10.0)[3])
        assert any("cooler unit heats" in item.lower() and "duty" in item for item in first("cooler", self.OIL, duty=10.0)[3])
        assert any("cools" in item and "temperature" in item for item in first("heater", self.OIL, temperature=290.0)[3])

    def test_what_boils_at_a_temperature(self):
        """Water with oil: x psat(T) = P splits it; enthalpy of both phases by hand."""
        inlet = Inlet("liquid", {"oil": [1.0], "water": [3.0]}, 350.0, 1e5)
        t = 385.0
        status, state, results, _, _ = first("heater", inlet, temperature=t, equilibrium="here")
        x = 1e5 / psat(t)
        liquid = x / (1 - x)
        wanted = 0.75 * (t**2 - 298.15**2) - 200 * (t - 298.15) + liquid * 75.3 * (t - 298.15) + (3 - liquid) * steam(t)
        assert status == OK and 0 < liquid < 3
        assert state[-2] * 4 == pytest.approx(wanted, rel=1e-11)
        before = 0.75 * (350**2 - 298.15**2) - 200 * (350 - 298.15) + 3 * 75.3 * (350 - 298.15)
        assert results["duty_W"][0] == pytest.approx(wanted - before, rel=1e-11)
        # the duty of that gives the same stream back
        again = first("heater", inlet, duty=float(results["duty_W"][0]), equilibrium="here")[1]
        assert again == pytest.approx(state, rel=1e-12)

    def test_a_gas_is_condensed_and_a_two_phase_stream_is_taken(self):
        wet = Inlet("gas", {"air": [1.0], "water": [0.5]}, 380.0, 1e5)
        t = 310.0
        state = first("cooler", wet, temperature=t, equilibrium="here")[1]
        left = psat(t) / (1e5 - psat(t))
        wanted = 29.1 * (t - 298.15) + left * steam(t) + (0.5 - left) * 75.3 * (t - 298.15)
        assert state[-2] * 1.5 == pytest.approx(wanted, rel=1e-11)
        both = Inlet("two-phase", {"air": [1.0], "water": [0.5]}, float(state[-2]), 1e5)
        _, _, results, said, _ = first("heater", both, temperature=380.0, equilibrium="here")
        back = 29.1 * (380 - 298.15) + 0.5 * steam(380.0)
        assert results["duty_W"][0] == pytest.approx(back - wanted, rel=1e-11) and said == []

    def test_nothing_flows(self):
        for entries in ({"duty": 500.0}, {"duty": 500.0, "equilibrium": "here"}, {"temperature": 350.0, "equilibrium": "here"}):
            status, state, results, _, _ = first("heater", Inlet("liquid", {"water": [0.0, 1.0]}, 310.0), **entries)
            assert status == OK and results["duty_W"][0] == 0
            assert state[-2] == (0.0 if "equilibrium" in entries else 310.0)

    def test_what_cannot_be_fails_its_case_alone(self):
        cold = stand("cooler", Inlet("liquid", {"water": [1.0, 1.0]}, 310.0, [1e5, 3e5]), duty=-1e3, pressure_drop=2e5)
        assert list(cold.evaluate().status[:2]) == [code(Status.unit_failed), OK]
        far = stand("cooler", Inlet("liquid", {"water": [1.0, 100.0]}, 310.0), duty=-1e5)
        assert list(far.evaluate().status[:2]) == [code(Status.unit_failed), OK]


class TestMixer:
    def test_temperature_by_heat_balance(self):
        """0.75 T^2 - 200 T is conserved."""
        inlets = {"one": Inlet("liquid", {"oil": [1.0]}, 300.0), "two": Inlet("liquid", {"oil": [3.0]}, 400.0)}
        status, state, _, said, _ = first("mixer", inlets)
        level = sum(n * (0.75 * t**2 - 200 * t) for n, t in ((1, 300), (3, 400))) / 4
        assert status == OK and said == []
        assert state[-2] == pytest.approx((200 + np.sqrt(200**2 + 3 * level)) / 1.5, rel=1e-12)
        assert abs(state[-2] - 375.0) > 1  # which is the molar mean

    def test_the_molar_mean_where_data_are_lacking_is_said(self):
        inlets = {"one": Inlet("liquid", {"oil": [1.0]}, 300.0), "two": Inlet("liquid", {"oil": [3.0]}, 400.0)}
        _, state, _, said, _ = first("mixer", inlets, data={})
        assert state[-2] == pytest.approx(375.0, rel=1e-14)
        assert len(said) == 1 and "molar mean" in said[0]

    def test_gas_liquid_and_both_are_flashed_together(self):
        inlets = {
            "gas": Inlet("gas", {"air": [1.0], "water": [0.2]}, 360.0, 2e5),
            "liquid": Inlet("liquid", {"water": [1.0]}, 300.0, 1.5e5),
            "both": Inlet("two-phase", {"air": [0.1], "water": [0.4]}, 1234.0, 1.8e5),
        }
        status, state, _, _, _ = first("mixer", inlets, equilibrium="here")
        energy = 29.1 * (360 - 298.15) + 0.2 * steam(360.0) + 75.3 * (300 - 298.15) + 0.5 * 1234.0
        assert status == OK
        assert state[-2] * 2.7 == pytest.approx(energy, rel=1e-12)
        assert state[-1] == 1.5e5 and state[:-2].sum() == pytest.approx(2.7, rel=1e-14)


class TestMakeup:
    OIL = Inlet("liquid", {"oil": [3.0]}, 400.0)

    def test_temperature_by_heat_balance_and_heat_added(self):
        status, state, results, said, added = first("makeup", self.OIL, hold={"oil": 4.0}, temperature=300.0)
        level = (3 * (0.75 * 400**2 - 200 * 400) + 0.75 * 300**2 - 200 * 300) / 4
        assert status == OK and said == []
        assert state[-2] == pytest.approx((200 + np.sqrt(200**2 + 3 * level)) / 1.5, rel=1e-12)
        assert added == pytest.approx(0.75 * (300**2 - 298.15**2) - 200 * (300 - 298.15), rel=1e-10)

    def test_at_the_streams_own_temperature(self):
        _, state, _, _, added = first("makeup", self.OIL, hold={"oil": 3.5})
        assert state[-2] == 400.0
        assert added == pytest.approx(0.5 * (0.75 * (400**2 - 298.15**2) - 200 * (400 - 298.15)), rel=1e-12)

    def test_without_heat_data_nothing_is_told(self):
        _, state, _, said, added = first("makeup", self.OIL, data={}, hold={"oil": 4.0}, temperature=300.0)
        assert state[-2] == pytest.approx(375.0, rel=1e-14) and added is None
        assert len(said) == 1 and "molar mean" in said[0]

    def test_the_balance_closes_for_every_case_and_for_excess(self):
        own = stand("makeup", Inlet("liquid", {"oil": [3.0, 5.0], "water": [1.0, 0.0]}, [400.0, 350.0]),
                    hold={"oil": 4.0}, composition={"oil": 0.8, "water": 0.2}, temperature=310.0)
        out = own.evaluate().outlets
        own.inlets["takes"] = Stream(own.inlets["takes"].state[[0]], "liquid")
        gives = Stream(out["gives"].state[[0]], "liquid")
        heat, functions = own.unit.around.heat, own.numbers
        flow = [(s.flows * heat.liquid(s.temperature, functions)).sum() for s in (own.inlets["takes"], gives)]
        added = own.unit.added_heat(own.inlets, {"gives": gives}, own.numbers)
        assert flow[0] + added[0] == pytest.approx(flow[1], rel=1e-12)


# --- in a flowsheet

SHEET = """
[feeds.vapour]
phase = "gas"
temperature = "90 degC"
pressure = "1.2 bar"
flow = "2 mol/s"
fractions = { air = "rest", water = 0.4 }
[feeds.lean]
phase = "liquid"
temperature = "40 degC"
pressure = "2 bar"
flow = "3 mol/s"
fractions = { oil = "rest", water = 0.02 }
UNITS
[components]
air = { molar_mass = "28.96 g/mol", stays_in = "gas" }
oil = { molar_mass = "250 g/mol", stays_in = "liquid" }
water = { molar_mass = "18 g/mol" }
[equilibrium.here.water]
model = "raoult"
vapour_pressure = { form = "antoine", A = 5.19621, B = 1730.63, C = 233.426, pressure = "bar", temperature = "degC" }
"""
OIL_DATA = '[heat_data.oil]\nliquid_heat_capacity = "480 J/(mol K)"\n[heat_data.air]\ngas_heat_capacity = "29.1 J/(mol K)"\n'
COOL = '[units.chill]\nkind = "cooler"\ntakes = "vapour"\ngives = "wet"\n'
FILL = '[units.fill]\nkind = "makeup"\ntakes = "lean"\ngives = "full"\nhold = { oil = "3.1 mol/s" }\ntemperature = "20 degC"\n'
WARM = '[units.warm]\nkind = "heater"\ntakes = "full"\ngives = "hot"\n'
MIX = '[units.mix]\nkind = "mixer"\ntakes = ["wet", "hot"]\ngives = "all"\n'


def sheet(tmp_path, units, data=OIL_DATA):
    path = tmp_path / "heat.toml"
    path.write_text(SHEET.replace("UNITS", units) + data, encoding="utf-8")
    return leanloop.read(path)


def test_energy_of_a_flowsheet_closes(tmp_path):
    units = COOL + 'temperature = "35 degC"\nequilibrium = "here"\n' + FILL + WARM + 'duty = "20 kW"\n'
    result = sheet(tmp_path, units + MIX + 'equilibrium = "here"\n').solve()
    assert result["status"] == "converged"
    assert result["streams.all.phase"] == "two-phase" and 0 < result["streams.all.vapour_fraction"] < 1
    assert result["units.chill.results.duty_W"] < 0
    assert result["units.warm.results.duty_W"] == pytest.approx(20e3, rel=1e-10)
    assert abs(result["balance.energy.closure"]) < 1e-10
    assert result["balance.energy.duties_W"] == pytest.approx(20e3 + result["units.chill.results.duty_W"], rel=1e-12)


def test_one_phase_with_heat_data_is_balanced_too(tmp_path):
    units = FILL + WARM + 'temperature = "80 degC"\n' + COOL + 'temperature = "85 degC"\n'
    result = sheet(tmp_path, units).solve()
    assert abs(result["balance.energy.closure"]) < 1e-10
    assert result["units.warm.results.duty_W"] > 0


@pytest.mark.parametrize(("units", "address", "part"), [
    (COOL, "units.chill.temperature", "missing"),
    (COOL + 'temperature = "35 degC"\nduty = "-1 kW"\n', "units.chill.duty", "temperature"),
    (COOL + 'duty = "-1 K"\n', "units.chill.duty", "power"),
    (COOL + 'duty = "-1 kW"\npressure_drop = "-1 bar"\n', "units.chill.pressure_drop", "range"),
    (COOL + 'temperature = "35 degC"\nequilibrium = "there"\n', "units.chill.equilibrium", "here"),
    (MIX.replace("wet", "vapour").replace("hot", "lean"), "units.mix.takes", "equilibrium"),
    (COOL + 'temperature = "35 degC"\nequilibrium = "here"\n[units.on]\nkind = "heater"\ntakes = "wet"\ngives = "dry"\n'
     'temperature = "99 degC"\n', "units.on.takes", "equilibrium"),
    (COOL + 'temperature = "35 degC"\nequilibrium = "here"\n'
     '[units.on]\nkind = "mixer"\ntakes = ["wet", "lean"]\ngives = "dry"\n', "units.on.takes", "equilibrium"),
    (COOL + 'temperature = "35 degC"\nequilibrium = "here"\n' + FILL.replace("lean", "wet"), "units.fill.takes", "separate"),
])  # fmt: skip
def test_wrong_input_is_told_with_its_address(tmp_path, units, address, part):
    with pytest.raises(InputError) as caught:
        sheet(tmp_path, units)
    found = [fault for fault in caught.value.faults if fault.address == address]
    assert found and part in str(found[0]), caught.value.faults


def test_a_duty_needs_heat_data(tmp_path):
    with pytest.raises(InputError) as caught:
        sheet(tmp_path, FILL + WARM + 'duty = "20 kW"\n' + COOL + 'temperature = "85 degC"\n', "")
    assert [fault.address for fault in caught.value.faults] == ["heat_data.oil"]


def test_data_beyond_their_range_are_said(tmp_path):
    curve = '{ polynomial = [480.0, 0.0], temperature = "K", unit = "J/(mol K)", valid = ["0 degC", "60 degC"] }'
    data = OIL_DATA.replace('"480 J/(mol K)"', curve)
    units = FILL + WARM + 'temperature = "80 degC"\n' + COOL + 'temperature = "85 degC"\n'
    said = sheet(tmp_path, units, data).solve().to_dict()["cautions"]
    assert any("oil" in item and "range" in item and "353.15" in item for item in said), said
