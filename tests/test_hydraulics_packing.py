"""Packings: data, flooding, pressure drop and hold-up against tables, worked examples, laws and each other.

Tables, inputs and printed figures with sources: `data/hydraulics.json`. The constants of Stichlmair are from memory and doubtful,
those of Billet and Schultes in part: their comparison with the flood lines shows that none is grossly wrong, no more.
"""

import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from scipy.constants import R, g
from scipy.optimize import brentq

from leanloop.hydraulics import billet_schultes, films, flooding, packings, robbins, roots, stichlmair, tray_geometry, trays
from leanloop.hydraulics.packings import BilletSchultes

DATA = json.loads((Path(__file__).parent / "data" / "hydraulics.json").read_text(encoding="utf-8"))
EXAMPLES = DATA["examples"]
FOOT, POUND = 0.3048, 0.45359237
AIR_WATER = {"gas_density": 1.2, "liquid_density": 998.0, "gas_viscosity": 1.8e-5, "liquid_viscosity": 1e-3}
ALL = [AIR_WATER[key] for key in ("gas_density", "liquid_density", "gas_viscosity", "liquid_viscosity")]


def rows(name, method=None):
    return [row for row in DATA[name]["rows"] if method is None or row[2] == method]


def example(name):
    found = EXAMPLES[name]
    return found["inputs"], found.get("printed", {}), found.get("recomputed", {})


def flow_of(ratio):
    return ratio * np.sqrt(1.2 / 998)


class TestData:
    @pytest.mark.parametrize("row", rows("packings"), ids=lambda row: f"{row[0]}-{row[1]}")
    def test_factors_and_geometry(self, row):
        name, family, factor, area, void, _ = row
        found = packings.find(name)
        word = "kister_factor" if family == "kister" else "older_factor"
        assert word in found.sources
        if family == "sinnott" and "seen" in found.sources[word]:
            assert getattr(found, word) == pytest.approx(factor, rel=0.12)  # the other book, where one was read
            return
        assert getattr(found, word) == pytest.approx(factor, rel=2e-3)  # printed to four digits
        if area is not None:
            assert found.specific_area == area
        if void is not None:
            assert found.void_fraction == void

    @pytest.mark.parametrize(("table", "field"), [("billet_schultes", "billet_schultes"), ("stichlmair", "stichlmair")])
    def test_constants(self, table, field):
        for name, *numbers in rows(table):
            found = getattr(packings.find(name), field)
            expected = [np.nan if item is None else item for item in numbers]
            assert list(vars(found).values()) == pytest.approx(expected, nan_ok=True)

    def test_every_number_has_a_source(self):
        for name in packings.names():
            found = packings.find(name)
            assert found.name == name
            for word in ("specific_area", "void_fraction", "older_factor", "kister_factor"):
                assert np.isnan(getattr(found, word)) or "seen" in found.sources[word] or "memory" in found.sources[word]
            for word in ("billet_schultes", "stichlmair"):
                assert (getattr(found, word) is None) == (word not in found.sources)

    def test_near_miss(self):
        with pytest.raises(packings.UnknownPacking, match="no packing is called 'pal_metal_50'; did you mean 'pall_metal_50'"):
            packings.find("pal_metal_50")
        assert packings.find("Pall-Metal 50").name == "pall_metal_50"

    def test_specific_area_falls_with_the_size_and_factors_too(self):
        for kind in ("pall_metal", "pall_plastic", "raschig_ceramic", "berl_ceramic", "saddle_ceramic"):
            found = [packings.find(name) for name in packings.names() if name.startswith(kind) and not name.endswith("_35")]
            found = sorted((item for item in found if item.size != 0.030), key=lambda item: item.size)
            for word in ("specific_area", "older_factor", "kister_factor"):
                values = np.array([getattr(item, word) for item in found])
                assert np.all(np.diff(values[np.isfinite(values)]) < 0), (kind, word)


class TestFloodLines:
    @pytest.mark.parametrize(("line", "column"), [
        (flooding.leva_flood, 1), (flooding.kister_gill_flood, 2), (flooding.eckert_flood, 3)])
    def test_table(self, line, column):
        flow, expected = np.array(rows("flood_lines"))[:, [0, column]].T
        light = 1e-3  # so that rhoL - rhoG is rhoL
        velocity = line(flow, 100.0, light, 1000.0, 1e-3)
        assert velocity**2 * 100 / g * light / 1000 == pytest.approx(expected, rel=1e-5)

    def test_the_three_agree_with_one_factor(self):
        flow = np.geomspace(0.02, 5, 30)
        found = np.array([line(flow, 100.0, 1.2, 1000.0, 1e-3) for line in (
            flooding.leva_flood, flooding.kister_gill_flood, flooding.eckert_flood)])
        assert np.abs(found / found.mean(axis=0) - 1).max() < 0.04

    @pytest.mark.parametrize("line", [flooding.leva_flood, flooding.kister_gill_flood, flooding.eckert_flood])
    def test_laws(self, line):
        flow = np.geomspace(0.03, 5, 50)
        assert np.all(np.diff(line(flow, 100.0, 1.2, 1000.0, 1e-3)) < 0)
        base = line(0.1, 100.0, 1.2, 1000.0, 1e-3)
        assert line(0.1, 400.0, 1.2, 1000.0, 1e-3) == pytest.approx(base / 2)
        assert line(0.1, 100.0, 1.2, 1000.0, 4e-3) < base
        assert np.isnan(line(0.1, 100.0, 1000.0, 900.0, 1e-3))

    def test_eckert_in_pounds_feet_and_seconds(self):
        # EPA Air Pollution Control Cost Manual, section 5.2 chapter 1: Y = G^2 Fp psi mu^0.2 / (rhoL rhoG gc)
        light, heavy, factor, flow, psi = 0.075, 58.0, 48.0, 0.07, 62.427961 / 58.0
        ordinate = 10 ** (-1.668 - 1.085 * np.log10(flow) - 0.297 * np.log10(flow) ** 2)
        flux = np.sqrt(ordinate * heavy * light * 32.174049 / (factor * psi * 1.7**0.2))
        pcf = POUND / FOOT**3
        found = flooding.eckert_flood(flow, factor / FOOT, light * pcf, heavy * pcf, 1.7e-3)
        assert found / FOOT == pytest.approx(flux / light, rel=1e-6)

    def test_kister_gill_drop(self):
        factor, inches, pascals = np.array(rows("kister_gill_drop")).T
        found = flooding.kister_gill_pressure_drop(factor / FOOT)
        assert found == pytest.approx(pascals, rel=1e-3)  # of 93.9
        assert found / (249.08891 / FOOT) == pytest.approx(inches, rel=2e-4)
        assert found == pytest.approx(93.9 * factor**0.7, rel=2e-3)  # the SI form, read in Benitez
        # above 60 1/ft flat by common practice; the curve is out of its stated range there
        assert flooding.kister_gill_pressure_drop(np.array([95, 179]) / FOOT) == pytest.approx(2 * 249.08891 / FOOT)

    def test_diameter_goes_with_the_root_of_the_gas_at_one_ratio(self):
        gas = np.array([1.0, 4.0])  # m3/s, and liquid in proportion: F is the same
        flow = trays.flow_parameter(3 * gas, 1.2 * gas, 1.2, 998.0)
        flood = flooding.kister_gill_flood(flow, packings.find("pall_metal_50").kister_factor, 1.2, 998.0, 1e-3)
        size = tray_geometry.diameter(gas, flood, 0.7)
        assert size[1] == pytest.approx(2 * size[0], rel=1e-14)


class TestBilletSchultes:
    def test_benitez_holdup(self):
        given, printed, exact = example("Benitez_4.2")
        packing = packings.find(given["packing"]).billet_schultes
        numbers = given["uL"], 1000.0, 1000.0 * given["nu"]
        assert billet_schultes.reynolds(packing, *numbers) == pytest.approx(exact["Re"], rel=1e-9)
        assert billet_schultes.hydraulic_area(packing, *numbers) == pytest.approx(exact["ah_a"], rel=2e-4)  # g = 9.8
        assert billet_schultes.holdup(packing, *numbers) == pytest.approx(printed["hL"], abs=5e-4)
        assert billet_schultes.holdup(packing, *numbers) == pytest.approx(exact["hL"], rel=1e-3)

    def test_benitez_ammonia_absorber(self):
        given, _, exact = example("Benitez_4.3a")
        packing = packings.find(given["packing"])
        gas = given["gas_kmol_h"] * given["M_gas"] * 1000 / 3600
        liquid, density = given["L_kg_h"] / 3600, given["P_Pa"] * given["M_gas"] / (R * given["T_K"])
        flow = trays.flow_parameter(liquid, gas, density, given["rhoL"])
        flood = flooding.kister_gill_flood(flow, packing.kister_factor, density, given["rhoL"], given["muL"])
        size = tray_geometry.diameter(gas / density, flood, given["fraction"])
        assert [flow, flood, size] == pytest.approx([exact["X"], exact["vflood"], exact["D"]], rel=3e-4)
        velocity, down = given["fraction"] * flood, liquid / given["rhoL"] / tray_geometry.column_area(size)
        constants = packing.billet_schultes
        dry = billet_schultes.dry_pressure_drop(constants, velocity, density, given["muG"], size)
        wet = dry * billet_schultes.wet_factor(constants, down, given["rhoL"], given["muL"])
        found = [billet_schultes.wall_factor(constants, size), dry, wet]
        assert found == pytest.approx([exact["Kw"], exact["dP0"], exact["dP"]], rel=1e-3)
        assert wet == billet_schultes.pressure_drop(
            constants, velocity, down, density, given["rhoL"], given["muG"], given["muL"], size)
        other = robbins.pressure_drop(179 / FOOT, velocity * density, down * given["rhoL"], density, given["rhoL"], given["muL"])
        assert other == pytest.approx(exact["robbins_Fpd_179"], rel=2e-3)
        assert other / wet == pytest.approx(1, abs=0.25)

    def test_benitez_ethanol_absorber_at_300_pascals(self):
        given, printed, exact = example("Benitez_4.4")
        names = ("a", "eps", "C_h", "C_P", "C_L", "C_V")
        area, void, c_h, c_p, c_l, c_v = (given[name] for name in names)
        packing = BilletSchultes(area, void, holdup=c_h, pressure=c_p, liquid=c_l, gas=c_v)
        density, heavy = given["P_Pa"] * given["M_gas"] / (R * given["T_K"]), given["rhoL"]
        gas, liquid = given["gas_kmol_h"] * given["M_gas"] / 3.6 / density, given["L_kg_h"] / 3600 / heavy

        def drop(size):
            across = tray_geometry.column_area(size)
            dry = billet_schultes.dry_pressure_drop(packing, gas / across, density, given["muG"], size)
            return dry * billet_schultes.wet_factor(packing, liquid / across, heavy, given["muL"])

        size = brentq(lambda d: drop(d) - 300, 0.5, 1.2)
        assert size == pytest.approx(printed["D"], abs=2e-3)
        assert size == pytest.approx(exact["D"], rel=3e-4)
        across = tray_geometry.column_area(size)
        found = [gas / across, billet_schultes.holdup(packing, liquid / across, heavy, given["muL"]),
                 area * billet_schultes.hydraulic_area(packing, liquid / across, heavy, given["muL"])]
        assert found == pytest.approx([exact["vg"], exact["hL"], exact["ah"]], rel=1e-3)
        assert found == pytest.approx([printed["u"], printed["hL"], printed["ah"]], rel=0.02)
        flow = trays.flow_parameter(liquid * heavy, gas * density, density, heavy)
        flood = flooding.kister_gill_flood(flow, given["Fp_1/ft"] / FOOT, density, heavy, given["muL"])
        assert tray_geometry.fraction_of_flood(gas, flood, size) == pytest.approx(exact["frac_flood"], rel=1e-3)
        # films with the printed u, uL, hL; kG P = ky
        kl = films.billet_schultes_liquid(packing, printed["uL"], printed["hL"], given["DL"])
        assert kl == pytest.approx(exact["kl"], rel=1e-3)
        assert kl * printed["ah"] == pytest.approx(printed["klah_1_s"], rel=0.02)
        diffusivity = given["muG"] / density / given["Sc"]
        for power, key in ((2 / 3, "ky_power_2/3"), (1 / 3, "ky_power_1/3")):
            kg = films.billet_schultes_gas(
                packing, printed["u"], printed["hL"], density, given["muG"], diffusivity, given["T_K"], power)
            assert kg * given["P_Pa"] == pytest.approx(exact[key], rel=5e-3)
            # the printed figure belongs to 2/3, the paper of 1999 to 1/3: 4.5 percent apart
            matches = abs(kg * given["P_Pa"] * printed["ah"] / 1000 / printed["kyah_kmol_m3_s"] - 1) < 0.01
            assert matches == (power > 0.5)

    @pytest.mark.parametrize("row", rows("flood_velocities", "billet_schultes"), ids=lambda row: f"{row[0]}-{row[1]}")
    def test_flooding_and_loading_table(self, row):
        name, ratio, _, flood, held, load = row
        packing = packings.find(name)
        found, at_flood = billet_schultes.flooding(packing.billet_schultes, flow_of(ratio), *ALL)
        assert [found, at_flood] == pytest.approx([flood, held], rel=1e-5)
        assert billet_schultes.loading(packing.billet_schultes, flow_of(ratio), *ALL)[0] == pytest.approx(load, rel=1e-4)
        line = flooding.kister_gill_flood(flow_of(ratio), packing.kister_factor, 1.2, 998.0, 1e-3)
        assert 0.70 < found / line < 1.15  # spread between methods: 0.71 (metal 50) to 1.14 (ceramic 25)

    def test_flooding_solves_its_equations(self):
        packing = packings.find("pall_plastic_50").billet_schultes
        flow = np.geomspace(0.005, 5, 60)
        u, h = billet_schultes.flooding(packing, flow, *ALL)
        a, eps, ratio = packing.specific_area, packing.void_fraction, flow / np.sqrt(1.2 / 998)
        assert h**3 * (3 * h - eps) == pytest.approx(6 / g * a**2 * eps * 1e-3 / 998 * ratio * 1.2 / 998 * u, rel=1e-9)
        assert np.all((h > eps / 3) & (h < eps))
        load, held = billet_schultes.loading(packing, flow, *ALL)
        assert np.all(load < u)
        assert np.all((held > 0) & (held < h))
        assert held == pytest.approx(billet_schultes.holdup(packing, load * ratio * 1.2 / 998, 998.0, 1e-3), rel=1e-12)
        t = np.cbrt(12 * 1e-3 * load * ratio * 1.2 / 998 / (g * 998))
        low = flow <= 0.4
        c = np.where(low, packing.load, 0.695 * packing.load * (1e-3 / 1.8e-5) ** 0.1588)
        psi = g / c**2 * (flow * (1e-3 / 1.8e-5) ** 0.4) ** (2 * np.where(low, 0.326, 0.723))
        right = np.sqrt(g / psi) * (eps * a ** (-1 / 6) - np.sqrt(a) * t) * np.sqrt(t) * np.sqrt(998 / 1.2)
        assert load == pytest.approx(right, rel=1e-9)

    @pytest.mark.parametrize("method", [billet_schultes.flooding, billet_schultes.loading])
    def test_falls_with_the_flow_parameter(self, method):
        for low, high in ((0.005, 0.4), (0.401, 5.0)):  # the exponents change at 0.4
            found = method(packings.find("pall_metal_25").billet_schultes, np.geomspace(low, high, 50), *ALL)[0]
            assert np.all(np.diff(found) < 0)

    def test_wet_factors(self):
        packing = packings.find("pall_metal_50").billet_schultes
        held = billet_schultes.loading(packing, flow_of(4.0), *ALL)[1]
        old = billet_schultes.wet_factor(packing, 0.005, 998.0, 1e-3)
        new = billet_schultes.wet_factor(packing, 0.005, 998.0, 1e-3, held)
        assert new / old == pytest.approx(1, abs=0.35)  # two editions of one method
        assert billet_schultes.wet_factor(packing, 1e-9, 998.0, 1e-3) == pytest.approx(1, abs=2e-3)
        assert np.isnan(billet_schultes.wet_factor(packing, 3.0, 998.0, 1e-3))  # more than the voids hold

    def test_missing_constants_are_nan(self):
        packing = packings.find("berl_ceramic_25").billet_schultes
        assert np.isnan(billet_schultes.flooding(packing, 0.1, *ALL)).all()
        assert np.isfinite(billet_schultes.holdup(packing, 0.005, 998.0, 1e-3))


class TestStichlmair:
    @pytest.mark.parametrize("row", rows("flood_velocities", "stichlmair"), ids=lambda row: f"{row[0]}-{row[1]}")
    def test_flooding_table(self, row):
        name, ratio, _, flood, drop, _ = row
        packing = packings.find(name)
        found, at_flood = stichlmair.flooding(packing.stichlmair, flow_of(ratio), 1.2, 998.0, 1.8e-5)
        assert [found, at_flood] == pytest.approx([flood, drop], rel=5e-4)  # g = 9.81 there
        line = flooding.kister_gill_flood(flow_of(ratio), packing.kister_factor, 1.2, 998.0, 1e-3)
        if name != "raschig_ceramic_30":  # without a factor of its own
            assert 0.85 < found / line < 1.25  # spread between methods: 0.86 to 1.23

    def test_flooding_is_the_last_velocity_with_a_solution(self):
        for name in ("pall_metal_25", "pall_plastic_35", "saddle_ceramic_25", "raschig_ceramic_35", "berl_ceramic_35"):
            packing = packings.find(name).stichlmair
            flow = np.geomspace(0.003, 3, 25)
            flood, drop = stichlmair.flooding(packing, flow, 1.2, 998.0, 1.8e-5)
            share = np.array([0.5, 0.9, 0.99, 1 - 1e-6, 1 + 1e-6, 1.5])[:, None]
            down = flooding.liquid_velocity(flood, flow, 1.2, 998.0)
            found, held = stichlmair.pressure_drop(packing, share * flood, share * down, 1.2, 998.0, 1.8e-5)
            assert np.all(np.isfinite(found[:4])) and np.all(np.isnan(found[4:])) and np.all(np.isnan(held[4:]))
            assert found[3] == pytest.approx(drop, rel=0.01)
            assert np.all(np.diff(found[:4], axis=0) > 0)
            assert np.all(held[:4] < packing.void_fraction)

    def test_solves_its_equation_with_the_least_drop(self):
        packing = packings.find("pall_metal_35").stichlmair
        up, down = np.linspace(0.3, 2.2, 12)[:, None], np.geomspace(1e-4, 0.02, 9)
        found, held = stichlmair.pressure_drop(packing, up, down, 1.2, 998.0, 1.8e-5)
        eps, a = packing.void_fraction, packing.specific_area
        size = 6 * (1 - eps) / a
        number = up * size * 1.2 / 1.8e-5
        f = packing.c1 / number + packing.c2 / number**0.5 + packing.c3
        c = (-packing.c1 / number - packing.c2 / 2 / number**0.5) / f
        dry = 0.75 * f * (1 - eps) / eps**4.65 * 1.2 * up**2 / size
        assert stichlmair.dry_pressure_drop(packing, up, 1.2, 1.8e-5) == pytest.approx(dry, rel=1e-12)
        h0 = 0.555 * (a * down**2 / (g * eps**4.65)) ** (1 / 3)

        def gap(x):
            h = h0 * (1 + 20 * x**2)
            return dry / (998 * g) * ((1 - eps + h) / (1 - eps)) ** ((2 + c) / 3) * (1 - h / eps) ** -4.65 - x

        x = found / (998 * g)
        good = np.isfinite(x)
        assert 60 < good.sum() < good.size
        assert np.abs(gap(x)[good] / x[good]).max() < 1e-12
        assert held[good] == pytest.approx((h0 * (1 + 20 * x**2))[good])
        # on a fine grid: no sign change before the root found, and none at all where there is none
        top = np.sqrt((eps / h0 - 1) / 20)
        for part in np.linspace(0, 1, 400, endpoint=False):
            tried = np.where(good, 0.999 * x * part, top * part)
            assert np.all(gap(tried) > 0)

    def test_without_liquid_it_is_dry(self):
        packing = packings.find("pall_metal_25").stichlmair
        found, held = stichlmair.pressure_drop(packing, 2.0, 0.0, 1.2, 998.0, 1.8e-5)
        assert found == pytest.approx(stichlmair.dry_pressure_drop(packing, 2.0, 1.2, 1.8e-5), rel=1e-12)
        assert held == 0

    def test_dry_drop_against_billet_schultes(self):
        # 6 to 20 percent less for 25 mm; for 35 mm one set of constants is off by 29 to 43 percent
        packing, velocity = packings.find("pall_metal_25"), np.linspace(0.5, 3, 6)
        one = stichlmair.dry_pressure_drop(packing.stichlmair, velocity, 1.2, 1.8e-5)
        two = billet_schultes.dry_pressure_drop(packing.billet_schultes, velocity, 1.2, 1.8e-5)
        assert np.all((one / two > 0.78) & (one / two < 0.95))


class TestRobbins:
    def test_in_its_own_units(self):
        # Robbins 1991: G, L in lb/(ft2 h), densities in lb/ft3, drop in inches of water per foot
        pcf, flux = POUND / FOOT**3, POUND / FOOT**2 / 3600
        for factor, power in ((40.0, 0.1), (250.0, 0.2)):
            gf, lf = 800 * (0.075 / 0.09) ** 0.5 * (factor / 20) ** 0.5, 5000 * (62.4 / 55) * (factor / 20) ** 0.5 * 2.0**power
            x = 7.4e-8 * gf**2 * 10 ** (2.7e-5 * lf)
            expected = x + 0.4 * (lf / 20000) ** 0.1 * x**4
            found = robbins.pressure_drop(factor / FOOT, 800 * flux, 5000 * flux, 0.09 * pcf, 55 * pcf, 2e-3)
            assert found / (249.08891 / FOOT) == pytest.approx(expected, rel=1e-12)

    def test_dry_factor_inverts_and_is_278(self):
        velocity, light = 1.5, 1.3
        drop = robbins.pressure_drop(120.0, velocity * light, 0.0, light, 1000.0, 1e-3)
        assert robbins.dry_factor(drop, velocity, light) == pytest.approx(120.0, rel=1e-3)  # but for no liquid X^4 is nought
        # Robbins: Fpd = 278 drop / (u^2 rho) in inches of water per foot, ft/s, lb/ft3; from memory
        fs = (velocity / FOOT) ** 2 * light / (POUND / FOOT**3)
        assert 120.0 * FOOT == pytest.approx(278 * drop / (249.08891 / FOOT) / fs, rel=2e-3)

    def test_rises_with_gas_and_liquid(self):
        found = robbins.pressure_drop(100.0, np.linspace(0.1, 2, 20)[:, None], np.linspace(0, 10, 20), 1.2, 1000.0, 1e-3)
        assert np.all(np.diff(found, axis=0) > 0) and np.all(np.diff(found, axis=1) > 0)


class TestTreybalAbsorber:
    def test_sulphur_dioxide_at_400_pascals(self):
        given, printed, exact = example("Treybal_6.5")
        gas, light = exact["G"], exact["rg"]
        flow = trays.flow_parameter(given["L_kg_s"], gas, light, given["rhoL"])
        assert flow == pytest.approx(exact["X_without"], rel=1e-9)
        assert trays.flow_parameter(given["L_kg_s"] + exact["SO2"], gas, light, given["rhoL"]) == pytest.approx(
            exact["X_with"], rel=1e-9)
        size = tray_geometry.diameter(gas / light, exact["Gp"] / light, 1.0)
        assert size == pytest.approx(exact["D"], rel=1e-9)
        assert size == pytest.approx(printed["D_design"], abs=0.05)  # rounded up
        # at 400 Pa/m a packing is at 60 to 80 percent of flood: common practice, no source
        flood = flooding.kister_gill_flood(flow, given["C_f_1/ft"] / FOOT, light, given["rhoL"], given["muL"])
        assert 0.6 < exact["Gp"] / light / flood < 0.8


class TestUnits:
    """Methods that claim to be free of units give the same in any: metre, kilogram and second scaled at will."""

    LENGTH, MASS, TIME = 3.7, 0.29, 11.0

    def scale(self, value, length=0, mass=0, time=0):
        return value * self.LENGTH**length * self.MASS**mass * self.TIME**time

    @pytest.fixture
    def scaled_gravity(self, monkeypatch):
        def switch(module):
            monkeypatch.setattr(module, "g", self.scale(g, 1, 0, -2))
        return switch

    def test_billet_schultes(self, scaled_gravity):
        old = packings.find("pall_metal_25").billet_schultes
        s = self.scale
        new = replace(old, specific_area=s(old.specific_area, -1), load=s(old.load, 0.5, 0, -1), flood=s(old.flood, 0.5, 0, -1))
        fluids = [0.2, 1.2, 998.0, 1.8e-5, 1e-3]
        moved = [0.2, s(1.2, -3, 1), s(998.0, -3, 1), s(1.8e-5, -1, 1, -1), s(1e-3, -1, 1, -1)]
        before = [billet_schultes.flooding(old, *fluids), billet_schultes.loading(old, *fluids),
                  billet_schultes.dry_pressure_drop(old, 1.0, 1.2, 1.8e-5, 0.8), billet_schultes.wet_factor(old, 0.01, 998.0, 1e-3)]
        scaled_gravity(billet_schultes)
        after = [billet_schultes.flooding(new, *moved), billet_schultes.loading(new, *moved),
                 billet_schultes.dry_pressure_drop(new, s(1.0, 1, 0, -1), moved[1], moved[3], s(0.8, 1)),
                 billet_schultes.wet_factor(new, s(0.01, 1, 0, -1), moved[2], moved[4])]
        for one, two in zip(before[:2], after[:2]):
            assert two == pytest.approx((s(one[0], 1, 0, -1), one[1]), rel=1e-9)
        assert after[2] == pytest.approx(s(before[2], -2, 1, -2), rel=1e-12)
        assert after[3] == pytest.approx(before[3], rel=1e-12)

    def test_stichlmair(self, scaled_gravity):
        old = packings.find("saddle_ceramic_25").stichlmair
        s = self.scale
        new = replace(old, specific_area=s(old.specific_area, -1))
        moved = s(1.2, -3, 1), s(998.0, -3, 1), s(1.8e-5, -1, 1, -1)
        before = stichlmair.flooding(old, 0.2, 1.2, 998.0, 1.8e-5), stichlmair.pressure_drop(old, 1.0, 0.005, 1.2, 998.0, 1.8e-5)
        scaled_gravity(stichlmair)
        speed = s(1.0, 1, 0, -1)
        after = stichlmair.flooding(new, 0.2, *moved), stichlmair.pressure_drop(new, speed, 0.005 * speed, *moved)
        assert after[0] == pytest.approx((speed * before[0][0], s(before[0][1], -2, 1, -2)), rel=1e-9)
        assert after[1] == pytest.approx((s(before[1][0], -2, 1, -2), before[1][1]), rel=1e-12)


class TestRoots:
    def test_many_cases_against_their_closed_form(self):
        target = np.geomspace(1e-9, 1e9, 200)
        found = roots.bracketed(lambda x: x**3 - target, np.zeros(200), np.full(200, 2e3))
        assert found == pytest.approx(np.cbrt(target), rel=1e-14)

    def test_no_change_of_sign_and_nan(self):
        found = roots.bracketed(lambda x: np.where(np.arange(3) == 1, np.nan, x - np.array([0.5, 0.5, 2.0])), 0.0, np.ones(3))
        assert found[0] == pytest.approx(0.5) and np.isnan(found[1:]).all()

    def test_root_at_an_end(self):
        assert roots.bracketed(lambda x: x - 1.0, 0.0, 1.0) == 1.0
        assert roots.bracketed(lambda x: x, 0.0, 1.0) == 0.0
