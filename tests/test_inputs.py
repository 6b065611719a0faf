"""Inputs against hand calculation: feeds in every form, bases, groups, and the rules of simple units.

Most feeds here pass a heater alone, so that nothing but the feed is looked at.
"""

import math
import re

import numpy as np
import pytest
from scipy.interpolate import PchipInterpolator

import leanloop

R = 8.31446261815324  # J/(mol K), exact since 2019
NORMAL = 101325 / (R * 273.15)  # mol in a normal cubic metre
POUND = 0.45359237  # kg, exact
MASS = {"air": 28.96e-3, "tol": 92.14e-3, "eth": 46.07e-3, "oil": 0.25, "tar": 0.4, "water": 18.015e-3}  # kg/mol

COMPONENTS = """
[components]
air = { molar_mass = "28.96 g/mol", stays_in = "gas" }
tol = { molar_mass = "92.14 g/mol" }
eth = { molar_mass = "46.07 g/mol" }
oil = { molar_mass = "250 g/mol", stays_in = "liquid" }
tar = { molar_mass = "400 g/mol", stays_in = "liquid" }
water = { molar_mass = "18.015 g/mol" }
"""


def warmed(entries, phase="gas", temperature="40 degC", pressure="1.5 bar", extra=""):
    return f"""
title = "A feed and a heater"
[feeds.given]
phase = "{phase}"
temperature = "{temperature}"
pressure = "{pressure}"
{entries}
[units.warm]
kind = "heater"
takes = "given"
gives = "out"
temperature = "90 degC"
{COMPONENTS}{extra}"""


def read(tmp_path, text, settings=()):
    path = tmp_path / "sheet.toml"
    path.write_text(text, encoding="utf-8")
    return leanloop.read(path, list(settings))


def flows(result, stream="given"):
    """Flows of what is there."""
    return {name: value for name, value in result.to_dict()["streams"][stream]["mol_s"].items() if value}


def by_mass(parts):
    """Mole fractions of mass fractions."""
    moles = {name: part / MASS[name] for name, part in parts.items()}
    return {name: value / sum(moles.values()) for name, value in moles.items()}


GAS = {"air": 0.95, "tol": 0.02, "eth": 0.03}
MASSES = {"air": 0.9, "tol": 0.06, "eth": 0.04}

COMPOSITIONS = {
    "rest": ('fractions = { air = "rest", tol = 0.02, eth = 0.03 }', GAS),
    "whole": ("fractions = { air = 0.95, tol = 0.02, eth = 0.03 }", GAS),
    "another rest": ('fractions = { air = 0.95, tol = 0.02, eth = "rest" }', GAS),
    "per cent": ('fractions = { air = "rest", tol = "2 %", eth = "3%" }', GAS),
    "ppm": ('fractions = { air = "rest", tol = "400 ppm" }', {"air": 1 - 4e-4, "tol": 4e-4}),
    "mg/Nm3": (
        'fractions = { air = "rest", tol = "500 mg/Nm3" }',
        {"air": 1 - 500e-6 / 92.14e-3 / NORMAL, "tol": 500e-6 / 92.14e-3 / NORMAL},
    ),
    "g/Nm3": (
        'fractions = { air = "rest", tol = "20 g/Nm3" }',
        {"air": 1 - 20e-3 / 92.14e-3 / NORMAL, "tol": 20e-3 / 92.14e-3 / NORMAL},
    ),
    "mass": ('mass_fractions = { air = "rest", tol = 0.06, eth = 0.04 }', by_mass(MASSES)),
    "whole mass": ("mass_fractions = { air = 0.9, tol = 0.06, eth = 0.04 }", by_mass(MASSES)),
    "mass per cent": ('mass_fractions = { air = "rest", tol = "6 %", eth = "4 %" }', by_mass(MASSES)),
    "ratios": (
        'ratios = { air = "rest", tol = 0.02, eth = 0.03 }',
        {"air": 1 / 1.05, "tol": 0.02 / 1.05, "eth": 0.03 / 1.05},
    ),
    "whole ratios": ("ratios = { air = 1.0, tol = 0.02, eth = 0.03 }", {"air": 1 / 1.05, "tol": 0.02 / 1.05, "eth": 0.03 / 1.05}),
    "ratios in ppm": ('ratios = { air = 1.0, tol = "300 ppm" }', {"air": 1 / 1.0003, "tol": 0.0003 / 1.0003}),
}


class TestGasCompositions:
    @pytest.mark.parametrize("name", COMPOSITIONS)
    def test_against_hand(self, tmp_path, name):
        text, fractions = COMPOSITIONS[name]
        result = read(tmp_path, warmed(f'flow = "7 mol/s"\n{text}')).solve()
        assert result.status == "converged"
        for stream in ("given", "out"):
            assert flows(result, stream) == pytest.approx({c: 7 * part for c, part in fractions.items()}, rel=1e-13)
            assert result[f"streams.{stream}.total_mol_s"] == pytest.approx(7, rel=1e-13)

    SUMS = [(0.98, True), (0.9800009, True), (0.9799991, True), (0.980002, False), (0.97, False)]

    @pytest.mark.parametrize(("air", "good"), SUMS)
    def test_what_sums_to_one(self, tmp_path, air, good):
        text = warmed(f'flow = "7 mol/s"\nfractions = {{ air = {air}, tol = 0.02 }}')
        if good:
            assert flows(read(tmp_path, text).solve())["tol"] == pytest.approx(0.14, rel=2e-6)
        else:
            with pytest.raises(leanloop.InputError, match=r"feeds\.given\.fractions"):
                read(tmp_path, text)

    def test_the_flow_is_kept_where_the_sum_is_not_quite_one(self, tmp_path):
        result = read(tmp_path, warmed('flow = "7 mol/s"\nfractions = { air = 0.9800009, tol = 0.02 }')).solve()
        assert result["streams.given.total_mol_s"] == pytest.approx(7, rel=1e-13)

    def test_several_carriers_share_the_basis(self, tmp_path):
        text = warmed('flow = "7 mol/s"\nratios = { air = "rest", nitrogen = 0.4, tol = 0.02 }').replace(
            "[components]", '[components]\nnitrogen = { molar_mass = "28.01 g/mol", stays_in = "gas" }'
        )
        expected = {"nitrogen": 7 * 0.4 / 1.02, "air": 7 * 0.6 / 1.02, "tol": 7 * 0.02 / 1.02}
        assert flows(read(tmp_path, text).solve()) == pytest.approx(expected, rel=1e-13)


class TestLiquidCompositions:
    # loadings refer to the non-volatile components, as no make-up holds one here
    LIQUIDS = {
        "loadings": ('loadings = { oil = "rest", tol = 0.1, tar = 0.05 }', {"oil": 0.95, "tar": 0.05, "tol": 0.1}),
        "whole loadings": ("loadings = { oil = 1.0, tol = 0.1, eth = 0.2 }", {"oil": 1.0, "tol": 0.1, "eth": 0.2}),
        "ratios": ('ratios = { oil = "rest", tol = 0.1, tar = 0.05 }', {"oil": 0.95, "tar": 0.05, "tol": 0.1}),
        "fractions": ('fractions = { oil = "rest", tol = 0.1, tar = 0.05 }', {"oil": 0.85, "tar": 0.05, "tol": 0.1}),
        "mass": (
            'mass_fractions = { oil = "rest", tol = 0.1, tar = 0.05 }',
            {"oil": 0.85 / 0.25, "tar": 0.05 / 0.4, "tol": 0.1 / 92.14e-3},
        ),
    }

    @pytest.mark.parametrize("name", LIQUIDS)
    def test_against_hand(self, tmp_path, name):
        text, parts = self.LIQUIDS[name]
        result = read(tmp_path, warmed(f'flow = "3 mol/s"\n{text}', "liquid")).solve()
        whole = sum(parts.values())
        assert flows(result) == pytest.approx({c: 3 * part / whole for c, part in parts.items()}, rel=1e-13)

    def test_a_loading_given_is_the_loading_reported(self, tmp_path):
        result = read(tmp_path, warmed('flow = "3 mol/s"\nloadings = { oil = 1.0, tol = 0.123 }', "liquid")).solve()
        assert result["streams.out.loading.tol"] == pytest.approx(0.123, rel=1e-13)


class TestFlows:
    """The same gas given by different amounts."""

    MEAN = sum(GAS[name] * MASS[name] for name in GAS)
    UNITS = {
        "7 mol/s": 7.0,
        "7 kmol/h": 7 / 3.6,
        "420 mol/min": 7.0,
        "30 kmol/d": 30e3 / 86400,
        "100 lbmol/h": 100 * POUND * 1e3 / 3600,
        "250 kg/h": 250 / 3600 / MEAN,
        "0.2 kg/s": 0.2 / MEAN,
        "360 m3/h": 0.1 * 1.5e5 / (R * 313.15),
        "0.1 m3/s": 0.1 * 1.5e5 / (R * 313.15),
        "360 Nm3/h": 0.1 * NORMAL,
        "8640 Nm3/d": 0.1 * NORMAL,
    }

    @pytest.mark.parametrize("flow", UNITS)
    def test_whole_stream(self, tmp_path, flow):
        result = read(tmp_path, warmed(f'flow = "{flow}"\nfractions = {{ air = "rest", tol = 0.02, eth = 0.03 }}')).solve()
        assert flows(result) == pytest.approx({c: self.UNITS[flow] * part for c, part in GAS.items()}, rel=1e-12)

    def test_mass_fractions_of_a_mass_flow(self, tmp_path):
        result = read(tmp_path, warmed('flow = "360 kg/h"\nmass_fractions = { air = "rest", tol = 0.06, eth = 0.04 }')).solve()
        assert flows(result) == pytest.approx({c: 0.1 * part / MASS[c] for c, part in MASSES.items()}, rel=1e-12)

    def test_by_component(self, tmp_path):
        result = read(tmp_path, warmed('flows = { air = "9 mol/s", tol = "36 kg/h", eth = "0.72 kmol/h" }')).solve()
        assert flows(result) == pytest.approx({"air": 9.0, "tol": 0.01 / MASS["tol"], "eth": 0.2}, rel=1e-13)

    def test_milligrams_come_back(self, tmp_path):
        result = read(tmp_path, warmed('flow = "1 mol/s"\nfractions = { air = "rest", tol = "500 mg/Nm3" }')).solve()
        assert result["streams.given.mg_per_Nm3.tol"] == pytest.approx(500, rel=1e-12)

    @pytest.mark.parametrize(
        ("entries", "phase", "address"),
        [
            ('flow = "1 m3/h"\nfractions = { oil = 1.0 }', "liquid", "feeds.given.flow"),
            ('fractions = { air = 1.0 }', "gas", "feeds.given.flow"),
            ('flow = "1 mol/s"', "gas", "feeds.given.fractions"),
            ('flow = "1 mol/s"\nflows = { air = "1 mol/s" }', "gas", "feeds.given.flow"),
            ('flow = "1 mol/s"\nfractions = { air = 1.0 }\nratios = { air = 1.0 }', "gas", "feeds.given.ratios"),
            ('flow = "1 mol/s"\nloadings = { air = "rest", tol = 0.1 }', "gas", "feeds.given.loadings"),
            ('flow = "1 mol/s"\nfractions = { oil = "rest", tol = "5 mg/Nm3" }', "liquid", "feeds.given.fractions.tol"),
            ('flow = "1 mol/s"\nfractions = { air = "rest", tol = "rest" }', "gas", "feeds.given.fractions.tol"),
            ('flow = "1 mol/s"\nfractions = { air = "rest", tol = 0.7, eth = 0.4 }', "gas", "feeds.given.fractions"),
            ('flow = 7.0\nfractions = { air = 1.0 }', "gas", "feeds.given.flow"),
        ],
    )
    def test_what_makes_no_feed(self, tmp_path, entries, phase, address):
        with pytest.raises(leanloop.InputError) as caught:
            read(tmp_path, warmed(entries, phase))
        assert [fault.address for fault in caught.value.faults] == [address]


ANTOINE = """
[equilibrium.cold]
tol = { model = "raoult", vapour_pressure = VAPOUR }
""".replace("VAPOUR", '{ form = "antoine", A = 6.95, B = 1345.0, C = 219.5, pressure = "mmHg", temperature = "degC" }')


class TestSaturation:
    # vapour pressure of water, IAPWS-95 saturation values as tabulated by NIST, from memory
    @pytest.mark.parametrize(("celsius", "kilopascal"), [(25, 3.1699), (40, 7.3849), (80, 47.414), (10, 1.2282)])
    def test_water(self, tmp_path, celsius, kilopascal):
        entries = 'flow = "10 mol/s"\nfractions = { air = "rest", tol = 0.02 }\nsaturated_with = "water"'
        result = read(tmp_path, warmed(entries, temperature=f"{celsius} degC")).solve()
        assert result["streams.given.fraction.water"] * 150 == pytest.approx(kilopascal, rel=1e-4)
        assert result["streams.given.total_mol_s"] == pytest.approx(10, rel=1e-13)  # flow is that of the whole stream
        dry = result["streams.given.total_mol_s"] - result["streams.given.mol_s.water"]
        assert result["streams.given.mol_s.tol"] == pytest.approx(0.02 * dry, rel=1e-13)
        assert result["streams.given.dew_point_K"] == pytest.approx(celsius + 273.15, abs=1e-6)

    def test_a_component_with_a_model(self, tmp_path):
        entries = 'flow = "10 mol/s"\nfractions = { air = "rest", eth = 0.01 }\nsaturated_with = "tol"'
        text = warmed(entries, temperature="30 degC", extra=ANTOINE)
        pressure = 10 ** (6.95 - 1345 / (219.5 + 30)) * 101325 / 760
        result = read(tmp_path, text).solve()
        assert result["streams.given.fraction.tol"] == pytest.approx(pressure / 1.5e5, rel=1e-12)
        assert result["streams.given.mol_s.eth"] == pytest.approx(0.1 * (1 - pressure / 1.5e5), rel=1e-12)

    def test_it_follows_temperature_and_pressure(self, tmp_path):
        entries = 'flow = "10 mol/s"\nfractions = { air = 1.0 }\nsaturated_with = "tol"'
        warm, high = np.array([290.0, 310.0]), np.array([1.2e5, 3e5])
        cases = {"feeds.given.temperature": warm, "feeds.given.pressure": high}
        result = read(tmp_path, warmed(entries, extra=ANTOINE)).solve(cases)
        pressure = 10 ** (6.95 - 1345 / (219.5 + warm - 273.15)) * 101325 / 760
        np.testing.assert_allclose(result["streams.given.fraction.tol"], pressure / high, rtol=1e-12)

    def test_sensitivity_of_a_saturated_feed(self, tmp_path):
        entries = 'flow = "10 mol/s"\nfractions = { air = 1.0 }\nsaturated_with = "water"'
        sheet = read(tmp_path, warmed(entries))
        step = 0.01
        near = sheet.solve({"feeds.given.temperature": 313.15 + np.array([-step, step])})["streams.out.mol_s.water"]
        slope = sheet.solve().sensitivity("streams.out.mol_s.water", "feeds.given.temperature")
        assert slope == pytest.approx((near[1] - near[0]) / (2 * step), rel=1e-7)

    @pytest.mark.parametrize(
        ("entries", "temperature"),
        [
            ('fractions = { air = "rest", water = 0.01 }\nsaturated_with = "water"', "40 degC"),
            ('fractions = { air = 1.0 }\nsaturated_with = "eth"', "40 degC"),  # nothing tells its vapour pressure
            ('fractions = { air = 1.0 }\nsaturated_with = "water"', "130 degC"),  # boils at 1.5 bar
        ],
    )
    def test_what_cannot_be_saturated(self, tmp_path, entries, temperature):
        with pytest.raises(leanloop.InputError, match=r"feeds\.given\.saturated_with"):
            read(tmp_path, warmed(f'flow = "1 mol/s"\n{entries}', temperature=temperature))


class TestWater:
    # IAPWS values as above, and the boiling points at 101.325 kPa (99.974 degC) and 1 bar (99.606 degC), from memory
    @pytest.mark.parametrize(
        ("fraction", "pressure", "celsius"),
        [(0.031699, "1 bar", 25.0), (0.073849, "1 bar", 40.0), (1.0, "101.325 kPa", 99.974), (1.0, "1 bar", 99.606)],
    )
    def test_dew_point(self, tmp_path, fraction, pressure, celsius):
        entries = f'flow = "1 mol/s"\nfractions = {{ air = "rest", water = {fraction} }}'
        result = read(tmp_path, warmed(entries, temperature="150 degC", pressure=pressure)).solve()
        assert result["streams.given.dew_point_K"] == pytest.approx(celsius + 273.15, abs=5e-3)

    def test_dew_point_of_dry_gas_is_null(self, tmp_path):
        result = read(tmp_path, warmed('flow = "1 mol/s"\nfractions = { air = 1.0 }')).solve()
        assert result.to_dict()["streams"]["given"]["dew_point_K"] is None
        assert np.isnan(result["streams.given.dew_point_K"])

    def test_dry_figures(self, tmp_path):
        entries = 'flow = "10 mol/s"\nfractions = { air = "rest", tol = 0.001, water = 0.2 }'
        stream = read(tmp_path, warmed(entries)).solve().to_dict()["streams"]["given"]
        assert stream["fraction"]["tol"] == pytest.approx(0.001, rel=1e-13)
        assert stream["fraction_dry"]["tol"] == pytest.approx(0.001 / 0.8, rel=1e-13)
        assert stream["fraction_dry"]["water"] is None
        milligrams = 0.001 * MASS["tol"] * NORMAL * 1e6
        assert stream["mg_per_Nm3"]["tol"] == pytest.approx(milligrams, rel=1e-12)
        assert stream["mg_per_Nm3_dry"]["tol"] == pytest.approx(milligrams / 0.8, rel=1e-12)
        assert stream["mg_per_Nm3_dry"]["water"] is None


class TestChangingFractions:
    REST = 'flow = "10 mol/s"\nfractions = { air = "rest", tol = 0.02, eth = 0.03 }'
    WHOLE = 'flow = "10 mol/s"\nfractions = { air = 0.95, tol = 0.02, eth = 0.03 }'
    CHANGED = {REST: {"air": 9.1, "tol": 0.6, "eth": 0.3}, WHOLE: {"air": 9.4 * 0.95 / 0.98, "tol": 0.6, "eth": 9.4 * 0.03 / 0.98}}

    @pytest.mark.parametrize("entries", CHANGED, ids=["rest", "whole"])
    def test_by_set(self, tmp_path, entries):
        result = read(tmp_path, warmed(entries), ["feeds.given.fractions.tol=0.06"]).solve()
        assert flows(result) == pytest.approx(self.CHANGED[entries], rel=1e-12)

    @pytest.mark.parametrize("entries", CHANGED, ids=["rest", "whole"])
    def test_by_cases(self, tmp_path, entries):
        sheet = read(tmp_path, warmed(entries))
        expected = self.CHANGED[entries]
        result = sheet.solve({"feeds.given.fractions.tol": np.array([0.06, 0.02, 0.0])})
        assert result["streams.given.mol_s.tol"] == pytest.approx([0.6, 0.2, 0.0], rel=1e-12)
        for name in ("air", "eth"):
            assert result[f"streams.given.mol_s.{name}"][:2] == pytest.approx([expected[name], 10 * GAS[name]], rel=1e-12)
        assert result["streams.given.total_mol_s"] == pytest.approx([10] * 3, rel=1e-12)
        alone = sheet.solve({"feeds.given.fractions.tol": 0.06})
        assert flows(alone) == pytest.approx(expected, rel=1e-12)

    def test_two_at_once_leave_the_rest_to_scale(self, tmp_path):
        settings = ["feeds.given.fractions.tol=0.06", "feeds.given.fractions.eth=0.04"]
        for entries in self.CHANGED:
            result = read(tmp_path, warmed(entries), settings).solve()
            assert flows(result) == pytest.approx({"air": 9.0, "tol": 0.6, "eth": 0.4}, rel=1e-12)

    def test_mass_fractions(self, tmp_path):
        text = warmed('flow = "36 kg/h"\nmass_fractions = { air = 0.9, tol = 0.06, eth = 0.04 }')
        expected = {"air": 0.88 * 0.9 / 0.94, "tol": 0.12, "eth": 0.88 * 0.04 / 0.94}
        for result in (
            read(tmp_path, text, ["feeds.given.mass_fractions.tol=0.12"]).solve(),
            read(tmp_path, text).solve({"feeds.given.mass_fractions.tol": 0.12}),
        ):
            assert flows(result) == pytest.approx({c: 0.01 * part / MASS[c] for c, part in expected.items()}, rel=1e-12)

    def test_ratios_move_alone(self, tmp_path):
        text = warmed('flow = "10 mol/s"\nratios = { air = 1.0, tol = 0.02, eth = 0.03 }')
        for result in (
            read(tmp_path, text, ["feeds.given.ratios.tol=0.06"]).solve(),
            read(tmp_path, text).solve({"feeds.given.ratios.tol": 0.06}),
        ):
            assert flows(result) == pytest.approx({c: 10 * part / 1.09 for c, part in [("air", 1), ("tol", 0.06), ("eth", 0.03)]})
            assert result["streams.given.ratio.eth"] == pytest.approx(0.03, rel=1e-12)

    @pytest.mark.parametrize("entries", CHANGED, ids=["rest", "whole"])
    @pytest.mark.parametrize("solute", ["tol", "eth"])
    def test_sensitivity_is_that_of_solves(self, tmp_path, entries, solute):
        sheet = read(tmp_path, warmed(entries))
        step = 1e-5
        address = f"feeds.given.fractions.{solute}"
        near = sheet.solve({address: GAS[solute] + np.array([-step, step])})
        base = sheet.solve()
        for name in GAS:
            quantity = f"streams.out.mol_s.{name}"
            low, high = near[quantity]
            assert base.sensitivity(quantity, address) == pytest.approx((high - low) / (2 * step), rel=1e-7, abs=1e-8), name

    def test_milligrams_are_fractions_when_changed(self, tmp_path):
        text = warmed('flow = "10 mol/s"\nfractions = { air = "rest", tol = "500 mg/Nm3" }')
        result = read(tmp_path, text, ["feeds.given.fractions.tol=800 mg/Nm3"]).solve()
        assert result["streams.given.mg_per_Nm3.tol"] == pytest.approx(800, rel=1e-12)

    TEXTS = [("800 ppm", 8e-4), ("3 %", 0.03), ("800 mg/Nm3", 800e-6 / MASS["tol"] / NORMAL)]

    @pytest.mark.parametrize(("value", "fraction"), TEXTS)
    def test_text_with_a_unit_from_python(self, tmp_path, value, fraction):
        sheet = read(tmp_path, warmed('flow = "10 mol/s"\nfractions = { air = "rest", tol = "500 mg/Nm3" }'))
        result = sheet.solve({"feeds.given.fractions.tol": value})
        assert result["streams.given.fraction.tol"] == pytest.approx(fraction, rel=1e-12)

    def test_what_no_longer_fits_is_refused(self, tmp_path):
        with pytest.raises(leanloop.InputError, match=r"feeds\.given\.fractions"):
            read(tmp_path, warmed(self.REST), ["feeds.given.fractions.tol=0.99"])

    def test_temperature_with_a_volume_flow(self, tmp_path):
        sheet = read(tmp_path, warmed('flow = "360 m3/h"\nfractions = { air = 0.98, tol = 0.02 }'))
        warm = np.array([280.0, 313.15, 350.0])
        result = sheet.solve({"feeds.given.temperature": warm})
        np.testing.assert_allclose(result["streams.given.total_mol_s"], 0.1 * 1.5e5 / (R * warm), rtol=1e-12)
        np.testing.assert_allclose(result["streams.given.mol_s.tol"], 0.002 * 1.5e5 / (R * warm), rtol=1e-12)
        slope = sheet.solve().sensitivity("streams.given.total_mol_s", "feeds.given.temperature")
        assert slope == pytest.approx(-0.1 * 1.5e5 / (R * 313.15**2), rel=1e-12)

    def test_flow_in_the_unit_of_the_file_or_in_another(self, tmp_path):
        text = warmed('flow = "360 m3/h"\nfractions = { air = 0.98, tol = 0.02 }')
        sheet, total = read(tmp_path, text), "streams.given.total_mol_s"
        per = 1.5e5 / (R * 313.15)
        assert sheet.solve({"feeds.given.flow": np.array([0.2, 0.3])})[total] == pytest.approx([0.2 * per, 0.3 * per], rel=1e-12)
        assert sheet.solve({"feeds.given.flow": "720 m3/h"})[total] == pytest.approx(0.2 * per, rel=1e-12)
        set_anew = read(tmp_path, text, ["feeds.given.flow=36 kmol/h"])
        assert set_anew.solve()[total] == pytest.approx(10, rel=1e-12)

    @pytest.mark.parametrize(
        ("flow", "per"),
        [("7 mol/s", 1.0), ("250 kg/h", 1 / (0.98 * MASS["air"] + 0.02 * MASS["tol"])), ("360 m3/h", 1.5e5 / (R * 313.15))],
    )
    def test_a_plain_si_number_is_one_of_the_dimension_in_the_file(self, tmp_path, flow, per):
        """mol/s, kg/s or m3/s; alone just as in an array."""
        sheet = read(tmp_path, warmed(f'flow = "{flow}"\nfractions = {{ air = 0.98, tol = 0.02 }}'))
        many = sheet.solve({"feeds.given.flow": np.array([0.2])})["streams.given.total_mol_s"]
        assert many == pytest.approx([0.2 * per], rel=1e-12)
        assert sheet.solve({"feeds.given.flow": 0.2})["streams.given.total_mol_s"] == pytest.approx(0.2 * per, rel=1e-12)

    def test_mass_flow_of_one_component_as_a_plain_si_number(self, tmp_path):
        sheet = read(tmp_path, warmed('flows = { air = "9 mol/s", tol = "36 kg/h" }'))
        result = sheet.solve({"feeds.given.flows.tol": 0.02})
        assert result["streams.given.mol_s.tol"] == pytest.approx(0.02 / MASS["tol"], rel=1e-12)


def column(kind="absorber", gas='flows = { air = "10 mol/s", tol = "0.2 mol/s", eth = "0.1 mol/s" }',
           liquid='flows = { oil = "8 mol/s", tar = "0.5 mol/s" }', entries="", equilibrium="", extra="",
           hot="25 degC", cold="25 degC", gas_pressure="1.2 bar", liquid_pressure="1.2 bar", stages=4):  # fmt: skip
    return f"""
title = "One column"
[feeds.sour]
phase = "gas"
temperature = "{hot}"
pressure = "{gas_pressure}"
{gas}
[feeds.solvent]
phase = "liquid"
temperature = "{cold}"
pressure = "{liquid_pressure}"
{liquid}
[units.tower]
kind = "{kind}"
gas_in = "sour"
liquid_in = "solvent"
gas_out = "cleaned"
liquid_out = "rich"
stages = {stages}
equilibrium = "cold"
{entries}
{COMPONENTS}
[equilibrium.cold]
{equilibrium or CONSTANTS}
{extra}"""


CONSTANTS = """
tol = { model = "constant", K = 0.4 }
eth = { model = "constant", K = 0.9 }
water = { stays_in = "liquid" }
"""


class TestBasis:
    def test_default(self, tmp_path):
        result = read(tmp_path, column()).solve()
        oil, tar, tol = (result[f"streams.rich.mol_s.{c}"] for c in ("oil", "tar", "tol"))
        assert result["streams.rich.ratio.tol"] == pytest.approx(tol / (oil + tar), rel=1e-12)
        assert result["streams.rich.loading.tol"] == pytest.approx(tol / (oil + tar), rel=1e-12)  # no make-up holds one of them
        assert result["units.tower.results.solvent_to_gas"] == pytest.approx(8.5 / 10, rel=1e-12)

    def test_set_for_the_flowsheet(self, tmp_path):
        own = '[basis]\ngas = ["air", "eth"]\nliquid = ["oil"]\nloading = ["oil", "tar", "water"]\n'
        liquid = 'flows = { oil = "8 mol/s", tar = "0.5 mol/s", water = "1 mol/s" }'
        result = read(tmp_path, column(liquid=liquid, extra=own)).solve()
        data = result.to_dict()["streams"]
        rich, cleaned = data["rich"]["mol_s"], data["cleaned"]["mol_s"]
        assert data["rich"]["ratio"]["tol"] == pytest.approx(rich["tol"] / rich["oil"], rel=1e-12)
        assert data["rich"]["loading"]["tol"] == pytest.approx(rich["tol"] / 9.5, rel=1e-12)
        assert data["cleaned"]["ratio"]["tol"] == pytest.approx(cleaned["tol"] / (cleaned["air"] + cleaned["eth"]), rel=1e-12)
        found = result["units.tower.results.solvent_to_gas"]
        assert found == pytest.approx(8 / 10.1, rel=1e-12)  # basis liquid in per basis gas in
        profile = result.to_dict()["units"]["tower"]["profile"]
        assert profile["X"]["tol"][-1] == pytest.approx(rich["tol"] / rich["oil"], rel=1e-10)
        assert profile["Y"]["tol"][0] == pytest.approx(cleaned["tol"] / (cleaned["air"] + cleaned["eth"]), rel=1e-10)

    def test_of_a_ratio_model(self, tmp_path):
        """Y = K X on the basis set: the stage equations and not the report alone follow it."""
        models = CONSTANTS.replace("K = 0.4", 'K = 0.4, basis = "ratio"')
        for own, liquid in (("", 8.5), ('[basis]\nliquid = ["oil"]\n', 8.0)):
            result = read(tmp_path, column(equilibrium=models, extra=own)).solve()
            factor = liquid / 10 / 0.4  # Kremser: absorption of tol with pure solvent, flows of the bases constant
            assert result["units.tower.results.removal.tol"] == pytest.approx(
                1 - (factor - 1) / (factor**5 - 1), rel=1e-10
            ), own

    def test_feed_ratios_refer_to_it(self, tmp_path):
        liquid = 'flow = "8 mol/s"\nratios = { oil = 1.0, tar = 0.25, tol = 0.35 }'
        text = column(liquid=liquid, extra='[basis]\nliquid = ["oil"]\n')
        assert flows(read(tmp_path, text).solve(), "solvent") == pytest.approx({"oil": 5.0, "tar": 1.25, "tol": 1.75}, rel=1e-12)

    def test_of_nothing_is_null(self, tmp_path):
        text = warmed('flow = "1 mol/s"\nfractions = { tol = 1.0 }')
        stream = read(tmp_path, text).solve().to_dict()["streams"]["given"]
        assert stream["ratio"]["tol"] is None
        assert stream["fraction"]["tol"] == 1.0

    def test_loading_counts_what_a_make_up_holds(self, tmp_path):
        text = warmed('flows = { oil = "2 mol/s", tar = "0.5 mol/s", water = "3 mol/s", tol = "0.3 mol/s" }', "liquid")
        text = text.replace("[components]", MAKE_UP.format('hold = { oil = "2.1 mol/s", water = "3 mol/s" }') + "[components]")
        result = read(tmp_path, text).solve()
        assert result["streams.given.loading.tol"] == pytest.approx(0.3 / 2, rel=1e-12)  # volatile water does not count, nor tar
        assert result["streams.full.loading.tol"] == pytest.approx(0.3 / 2.1, rel=1e-12)


MAKE_UP = """
[units.top_up]
kind = "makeup"
takes = "out"
gives = "full"
{}
"""

GROUP = '[groups]\nsolutes = ["tol", "eth"]\n'


class TestGroups:
    def test_in_streams(self, tmp_path):
        result = read(tmp_path, column(extra=GROUP)).solve()
        for stream, keys in {
            "cleaned": ("mol_s", "fraction", "fraction_dry", "ratio", "mass_fraction", "mg_per_Nm3", "mg_per_Nm3_dry"),
            "rich": ("mol_s", "fraction", "ratio", "mass_fraction", "loading"),
        }.items():
            for key in keys:
                own = result[f"streams.{stream}.{key}.solutes"]
                assert own == pytest.approx(sum(result[f"streams.{stream}.{key}.{c}"] for c in ("tol", "eth")), rel=1e-12), key

    def test_in_removal(self, tmp_path):
        result = read(tmp_path, column(extra=GROUP)).solve()
        left = result["streams.cleaned.mol_s.tol"] + result["streams.cleaned.mol_s.eth"]
        assert result["units.tower.results.removal.solutes"] == pytest.approx(1 - left / 0.3, rel=1e-12)

    def test_in_a_requirement(self, tmp_path):
        asked = """
[requirements.both]
quantity = "streams.cleaned.mg_per_Nm3.solutes"
equals = "9000 mg/Nm3"
free = "feeds.solvent.flows.oil"
between = ["1 mol/s", "40 mol/s"]
"""
        result = read(tmp_path, column(extra=GROUP + asked)).solve()
        assert result.status == "converged"
        parts = [result[f"streams.cleaned.mg_per_Nm3.{c}"] for c in ("tol", "eth")]
        assert sum(parts) == pytest.approx(9000, rel=1e-8)
        assert min(parts) > 100

    @pytest.mark.parametrize("members", ['["tol", "ethh"]', '["tol", "tol"]', "[]", "3"])
    def test_wrong_ones(self, tmp_path, members):
        with pytest.raises(leanloop.InputError, match=r"groups\.solutes"):
            read(tmp_path, column(extra=f"[groups]\nsolutes = {members}\n"))


class TestEquilibriumTables:
    def test_where_a_component_stays_is_overridden_in_one_table(self, tmp_path):
        """Eth stays in the gas of the tower and distributes in the other one."""
        other = """
[feeds.air2]
phase = "gas"
temperature = "25 degC"
pressure = "1.2 bar"
flows = { air = "5 mol/s", eth = "0.1 mol/s" }
[units.second]
kind = "stripper"
liquid_in = "rich"
gas_in = "air2"
gas_out = "over"
liquid_out = "bottom"
stages = 3
equilibrium = "hot"
[equilibrium.hot]
tol = { model = "constant", K = 2.0 }
eth = { model = "constant", K = 0.9 }
water = { stays_in = "liquid" }
"""
        models = CONSTANTS.replace('{ model = "constant", K = 0.9 }', '{ stays_in = "gas" }')
        result = read(tmp_path, column(equilibrium=models, extra=other)).solve()
        assert result["streams.cleaned.mol_s.eth"] == 0.1
        assert result["streams.rich.mol_s.eth"] == 0
        assert "eth" not in result.to_dict()["units"]["tower"]["profile"]["K"]
        assert 0 < result["streams.bottom.mol_s.eth"] < 0.1
        assert result.to_dict()["units"]["second"]["profile"]["K"]["eth"] == pytest.approx([0.9] * 3)

    def test_a_component_without_a_model_is_named(self, tmp_path):
        models = "\n".join(line for line in CONSTANTS.splitlines() if not line.startswith("eth"))
        with pytest.raises(leanloop.InputError, match="eth"):
            read(tmp_path, column(equilibrium=models))

    def test_a_curve_from_a_file_beside_the_flowsheet(self, tmp_path):
        X, Y = [0.0, 0.01, 0.02, 0.04], [0.0, 0.004, 0.009, 0.02]
        (tmp_path / "data").mkdir()
        (tmp_path / "data" / "points.csv").write_text(
            "# a comment\nX, Y\n" + "".join(f"{a}, {b}\n" for a, b in zip(X, Y, strict=True)), encoding="utf-8"
        )
        models = CONSTANTS.replace('{ model = "constant", K = 0.4 }', '{ model = "table", file = "data/points.csv" }')
        listed = CONSTANTS.replace('{ model = "constant", K = 0.4 }', f'{{ model = "table", X = {X}, Y = {Y} }}')
        found = read(tmp_path, column(equilibrium=models)).solve()
        expected = read(tmp_path, column(equilibrium=listed)).solve()
        assert found.status == "converged"
        assert flows(found, "cleaned") == flows(expected, "cleaned")
        profile = found.to_dict()["units"]["tower"]["profile"]
        curve = PchipInterpolator(X, Y)
        np.testing.assert_allclose(profile["Y"]["tol"], curve(profile["X"]["tol"]), rtol=1e-9)

    @pytest.mark.parametrize(
        ("content", "problem"),
        [(None, "points.csv"), ("X,Y\n0,0\n0.1,high\n", "line 3"), ("a,b\n0,0\n1,1\n", "header"), ("X,Y\n0,0\n", "single point")],
    )
    def test_files_that_give_no_curve(self, tmp_path, content, problem):
        if content is not None:
            (tmp_path / "points.csv").write_text(content, encoding="utf-8")
        models = CONSTANTS.replace('{ model = "constant", K = 0.4 }', '{ model = "table", file = "points.csv" }')
        with pytest.raises(leanloop.InputError, match=problem) as caught:
            read(tmp_path, column(equilibrium=models))
        assert all(fault.address.startswith("equilibrium.cold.tol") for fault in caught.value.faults)


class TestColumnConditions:
    HENRY = 'tol = { model = "henry", constant = "0.6 bar", slope = "3000 K", at = "25 degC" }\n' + "\n".join(
        CONSTANTS.strip().splitlines()[1:]
    )

    def ratio(self, celsius, bar):
        """K of the model above: p = H x with d ln(1/H)/d(1/T) = slope."""
        return 0.6 / bar * math.exp(-3000 * (1 / (celsius + 273.15) - 1 / 298.15))

    @pytest.mark.parametrize(
        ("entries", "celsius", "bar"),
        [
            ("", 30, 1.4),  # temperature of the liquid fed at the top, pressure of the gas feed
            ('temperature = "45 degC"', 45, 1.4),
            ('pressure = "2.2 bar"', 30, 2.2),
            ('temperature = "45 degC"\npressure = "2.2 bar"\nheat = "isothermal"', 45, 2.2),
        ],
    )
    def test_default_and_given(self, tmp_path, entries, celsius, bar):
        text = column(entries=entries, equilibrium=self.HENRY, hot="60 degC", cold="30 degC",
                      gas_pressure="1.4 bar", liquid_pressure="3 bar")  # fmt: skip
        data = read(tmp_path, text).solve().to_dict()
        assert data["units"]["tower"]["profile"]["K"]["tol"] == pytest.approx([self.ratio(celsius, bar)] * 4, rel=1e-12)
        assert data["units"]["tower"]["profile"]["temperature_K"] == pytest.approx([celsius + 273.15] * 4, rel=1e-14)
        for stream in ("cleaned", "rich"):
            assert data["streams"][stream]["temperature_K"] == pytest.approx(celsius + 273.15, rel=1e-14)
            assert data["streams"][stream]["pressure_Pa"] == pytest.approx(bar * 1e5, rel=1e-14)

    @pytest.mark.parametrize(
        ("liquid", "entries", "said"),
        [("1.1 bar", "", True), ("1.2 bar", "", False), ("1.2 bar", 'pressure = "1.3 bar"', True), ("3 bar", "", False)],
    )
    def test_liquid_at_less_than_the_column_s_pressure(self, tmp_path, liquid, entries, said):
        result = read(tmp_path, column(liquid_pressure=liquid, entries=entries)).solve()
        own = [text for text in result.to_dict()["cautions"] if "tower" in text and "liquid is fed at less" in text]
        assert len(own) == said
        assert all(text in str(result) for text in own)

    @pytest.mark.parametrize(("entries", "said"), [("", False), ('pressure = "5 bar"', True)])
    def test_gas_at_less_than_the_column_s_pressure(self, tmp_path, entries, said):
        result = read(tmp_path, column(liquid_pressure="6 bar", entries=entries)).solve()
        assert any("gas is fed at less" in text for text in result.to_dict()["cautions"]) == said

    def test_some_cases_of_many_are_enough_for_a_caution(self, tmp_path):
        sheet = read(tmp_path, column())
        assert sheet.solve({"feeds.solvent.pressure": np.array([1.3e5, 1.5e5])}).to_dict()["cautions"] == []
        assert len(sheet.solve({"feeds.solvent.pressure": np.array([1.3e5, 1.1e5])}).to_dict()["cautions"]) == 1

    # saturation pressure at 120 degC is 1.9867 bar (IAPWS, from memory)
    @pytest.mark.parametrize(("bar", "wet"), [(1.97, False), (2.01, True)])
    def test_steam_that_would_condense(self, tmp_path, bar, wet):
        stays = COMPONENTS.replace('"18.015 g/mol"', '"18.015 g/mol", stays_in = "gas"')
        text = column("stripper", gas='flows = { water = "3 mol/s" }', liquid='flows = { oil = "8 mol/s", tol = "1e-9 mol/s" }',
                      equilibrium="\n".join(CONSTANTS.strip().splitlines()[:2]), hot="130 degC", cold="120 degC",
                      gas_pressure=f"{bar} bar", liquid_pressure="3 bar").replace(COMPONENTS, stays)  # fmt: skip
        cautions = read(tmp_path, text).solve().to_dict()["cautions"]
        assert len(cautions) == wet
        if wet:
            assert "condense" in cautions[0] and "water" in cautions[0]


def liquids(units, first="80 degC", second="20 degC", pressures=("2 bar", "1.4 bar")):
    return f"""
title = "Two liquids"
[feeds.one]
phase = "liquid"
temperature = "{first}"
pressure = "{pressures[0]}"
flows = {{ oil = "3 mol/s", tol = "0.2 mol/s" }}
[feeds.two]
phase = "liquid"
temperature = "{second}"
pressure = "{pressures[1]}"
flows = {{ oil = "1 mol/s", tar = "0.6 mol/s" }}
[units.join]
kind = "mixer"
takes = ["one", "two"]
gives = "mixed"
{units}
{COMPONENTS}"""


class TestSimpleUnits:
    def test_mixer(self, tmp_path):
        result = read(tmp_path, liquids("")).solve()
        assert flows(result, "mixed") == pytest.approx({"oil": 4, "tol": 0.2, "tar": 0.6}, rel=1e-14)
        assert result["streams.mixed.pressure_Pa"] == pytest.approx(1.4e5, rel=1e-14)
        assert result["streams.mixed.temperature_K"] == pytest.approx((3.2 * 353.15 + 1.6 * 293.15) / 4.8, rel=1e-13)
        assert len([text for text in result.to_dict()["cautions"] if "join" in text and "molar mean" in text]) == 1

    def test_mixer_of_equal_temperatures_needs_no_caution(self, tmp_path):
        result = read(tmp_path, liquids("", second="80 degC")).solve()
        assert result.to_dict()["cautions"] == []
        assert result["streams.mixed.temperature_K"] == pytest.approx(353.15, rel=1e-14)

    @pytest.mark.parametrize("kind", ["heater", "cooler"])
    def test_heater_and_cooler(self, tmp_path, kind):
        unit = f'[units.change]\nkind = "{kind}"\ntakes = "mixed"\ngives = "changed"\ntemperature = "55 degC"\n'
        result = read(tmp_path, liquids(unit)).solve()
        assert flows(result, "changed") == flows(result, "mixed")
        assert result["streams.changed.temperature_K"] == pytest.approx(328.15, rel=1e-14)
        assert result["streams.changed.pressure_Pa"] == pytest.approx(1.4e5, rel=1e-14)
        assert result.to_dict()["streams"]["changed"]["phase"] == "liquid"

    SPLITTER = '[units.part]\nkind = "splitter"\ntakes = "mixed"\ngives = ["a", "b", "c"]\nshares = {}\n'

    @pytest.mark.parametrize(
        ("shares", "expected"),
        [
            ("{ a = 0.2, c = 0.3 }", (0.2, 0.5, 0.3)),
            ('{ a = 0.2, c = "30 %" }', (0.2, 0.5, 0.3)),
            ("{ a = 0.2, b = 0.5, c = 0.3 }", (0.2, 0.5, 0.3)),
            ("{ b = 0.0, c = 0.0 }", (1.0, 0.0, 0.0)),
        ],
    )
    def test_splitter(self, tmp_path, shares, expected):
        result = read(tmp_path, liquids(self.SPLITTER.format(shares))).solve()
        for stream, share in zip("abc", expected, strict=True):
            for name, whole in {"oil": 4, "tol": 0.2, "tar": 0.6}.items():
                assert result[f"streams.{stream}.mol_s.{name}"] == pytest.approx(share * whole, rel=1e-13, abs=1e-15)
            assert result[f"streams.{stream}.temperature_K"] == result["streams.mixed.temperature_K"]
            assert result[f"streams.{stream}.pressure_Pa"] == result["streams.mixed.pressure_Pa"]

    def test_the_rest_follows_a_share_that_is_changed(self, tmp_path):
        sheet = read(tmp_path, liquids(self.SPLITTER.format("{ a = 0.2, c = 0.3 }")))
        result = sheet.solve({"units.part.shares.a": np.array([0.1, 0.6])})
        assert result["streams.b.mol_s.oil"] == pytest.approx([4 * 0.6, 4 * 0.1], rel=1e-12)
        assert sheet.solve().sensitivity("streams.b.mol_s.oil", "units.part.shares.a") == pytest.approx(-4, rel=1e-12)

    @pytest.mark.parametrize(
        "shares", ["{ a = 0.2 }", "{ a = 0.8, c = 0.3 }", "{ a = 0.2, b = 0.5, c = 0.4 }", "{ a = 0.2, d = 0.3 }"]
    )
    def test_shares_that_do_not_add_up(self, tmp_path, shares):
        with pytest.raises(leanloop.InputError, match=r"units\.part\.shares"):
            read(tmp_path, liquids(self.SPLITTER.format(shares)))


class TestMakeup:
    ENTRIES = 'flows = { oil = "2 mol/s", tol = "0.3 mol/s" }'

    def solve(self, tmp_path, entries, **other):
        text = warmed(self.ENTRIES, "liquid", **other).replace("[components]", MAKE_UP.format(entries) + "[components]")
        return read(tmp_path, text).solve()

    def test_pure_by_default(self, tmp_path):
        result = self.solve(tmp_path, 'hold = { oil = "2.5 mol/s" }')
        assert flows(result, "full") == pytest.approx({"oil": 2.5, "tol": 0.3}, rel=1e-13)
        assert result["units.top_up.results.added_mol_s.oil"] == pytest.approx(0.5, rel=1e-13)
        assert result["streams.full.temperature_K"] == pytest.approx(363.15, rel=1e-14)
        assert result["streams.full.pressure_Pa"] == pytest.approx(1.5e5, rel=1e-14)
        assert result.to_dict()["cautions"] == []

    def test_composition(self, tmp_path):
        result = self.solve(tmp_path, 'hold = { oil = "2.5 mol/s" }\ncomposition = { oil = 0.8, tar = 0.15, tol = 0.05 }')
        added = {"oil": 0.5, "tar": 0.5 / 0.8 * 0.15, "tol": 0.5 / 0.8 * 0.05}
        assert result.to_dict()["units"]["top_up"]["results"]["added_mol_s"] == pytest.approx(added, rel=1e-12)
        assert flows(result, "full") == pytest.approx({"oil": 2.5, "tar": added["tar"], "tol": 0.3 + added["tol"]}, rel=1e-12)
        assert all(abs(item["closure"]) < 1e-12 for item in result.to_dict()["balance"]["components"].values())

    def test_temperature_and_pressure_of_what_is_added(self, tmp_path):
        result = self.solve(tmp_path, 'hold = { oil = "2.5 mol/s" }\ntemperature = "20 degC"\npressure = "1.1 bar"')
        assert result["streams.full.temperature_K"] == pytest.approx((2.3 * 363.15 + 0.5 * 293.15) / 2.8, rel=1e-13)
        assert result["streams.full.pressure_Pa"] == pytest.approx(1.1e5, rel=1e-14)  # the lowest, as in a mixer
        assert any("molar mean" in text for text in result.to_dict()["cautions"])

    def test_less_than_nothing_is_a_caution(self, tmp_path):
        result = self.solve(tmp_path, 'hold = { oil = "1.5 mol/s" }')
        assert result["units.top_up.results.added_mol_s.oil"] == pytest.approx(-0.5, rel=1e-13)
        assert any("top_up" in text and "negative" in text for text in result.to_dict()["cautions"])

    IMPURE = """
title = "A contaminant that comes with the make-up alone"
[feeds.sour]
phase = "gas"
temperature = "25 degC"
pressure = "1.2 bar"
flows = {{ air = "10 mol/s", tol = "0.2 mol/s" }}
[feeds.steam]
phase = "gas"
temperature = "25 degC"
pressure = "1.2 bar"
flows = {{ air = "6 mol/s" }}
[units.wash]
kind = "absorber"
gas_in = "sour"
liquid_in = "full"
gas_out = "cleaned"
liquid_out = "rich"
stages = 4
equilibrium = "cold"
[units.strip]
kind = "stripper"
gas_in = "steam"
liquid_in = "rich"
gas_out = "over"
liquid_out = "lean"
stages = 4
equilibrium = "hot"
[units.divide]
kind = "splitter"
takes = "lean"
gives = ["bleed", "kept"]
shares = {{ bleed = {bleed} }}
[units.top_up]
kind = "makeup"
takes = "kept"
gives = "full"
hold = {{ oil = "3 mol/s" }}
composition = {{ oil = {pure}, tar = {dirt} }}
[equilibrium.cold]
tol = {{ model = "constant", K = 0.2 }}
[equilibrium.hot]
tol = {{ model = "constant", K = 2.0 }}
[components]
air = {{ molar_mass = "28.96 g/mol", stays_in = "gas" }}
tol = {{ molar_mass = "92.14 g/mol" }}
oil = {{ molar_mass = "250 g/mol", stays_in = "liquid" }}
tar = {{ molar_mass = "400 g/mol", stays_in = "liquid" }}
"""

    def test_impure_make_up_round_a_loop(self, tmp_path):
        """All oil and tar leave with the bleed: tar builds up until it goes out as fast as it comes, f/p."""
        bleed, dirt = 0.004, 0.03
        text = self.IMPURE.format(bleed=bleed, pure=1 - dirt, dirt=dirt)
        sheet = read(tmp_path, text)
        result = sheet.solve()
        comes = 3 * bleed * dirt / (1 - dirt)  # make-up of oil is what the bleed takes of it
        assert result["units.top_up.results.added_mol_s.oil"] == pytest.approx(3 * bleed, rel=1e-9)
        assert result["units.top_up.results.added_mol_s.tar"] == pytest.approx(comes, rel=1e-9)
        assert result["streams.bleed.mol_s.tar"] == pytest.approx(comes, rel=1e-9)
        assert result["streams.full.mol_s.tar"] == pytest.approx(comes / bleed, rel=1e-9)
        closure = result.to_dict()["balance"]["components"]["tar"]
        assert closure["in_mol_s"] == pytest.approx(comes, rel=1e-9)
        assert abs(closure["closure"]) < 1e-9
        many = sheet.solve({"units.divide.shares.bleed": np.array([1e-3, 1e-2, 1e-1])})
        np.testing.assert_allclose(many["streams.full.mol_s.tar"], 3 * dirt / (1 - dirt), rtol=1e-8)  # whatever the bleed
        slope = result.sensitivity("streams.full.mol_s.tar", "units.divide.shares.bleed")
        assert abs(slope) < 1e-7 * 3 / bleed

    @pytest.mark.parametrize(
        ("entries", "problem"),
        [
            ("composition = { oil = 0.8, tar = 0.1 }", "sum"),
            ("composition = { tar = 1.0 }", "'oil'"),
            ("composition = { oil = 0.8, tarr = 0.2 }", "tarr"),
        ],
    )
    def test_compositions_that_make_no_liquid(self, tmp_path, entries, problem):
        with pytest.raises(leanloop.InputError, match=re.escape(problem)) as caught:
            self.solve(tmp_path, f'hold = {{ oil = "2.5 mol/s" }}\n{entries}')
        assert all(fault.address.startswith("units.top_up.composition") for fault in caught.value.faults)
