"""Transfer units, films and mixing rules against worked examples, closed forms, laws and reference data.

Tables, inputs and printed figures with sources: `data/hydraulics.json`. Sinnott's example is recalled as a whole and checks the
coding alone.
"""

import json
from pathlib import Path

import CoolProp.CoolProp
import numpy as np
import pytest
from scipy.constants import R
from scipy.integrate import quad

from leanloop.hydraulics import films, packings, properties, ranges, transfer, trays

DATA = json.loads((Path(__file__).parent / "data" / "hydraulics.json").read_text(encoding="utf-8"))


def example(name):
    found = DATA["examples"][name]
    return found["inputs"], found.get("printed", {}), found.get("recomputed", {})


class TestTransferUnits:
    def test_hetp_table(self):
        lam, ratio = np.array(DATA["hetp"]["rows"]).T
        assert transfer.units_per_stage(lam) == pytest.approx(ratio, abs=5.1e-7)
        assert transfer.hetp(0.7, lam) == pytest.approx(0.7 * ratio, abs=5e-7)

    def test_hetp_is_the_transfer_unit_at_one(self):
        step = np.array([-1e-4, -1e-9, -1e-15, 0.0, 1e-15, 1e-9, 1e-4])
        series = 1 - step / 2 + step**2 / 3
        assert transfer.units_per_stage(1 + step) == pytest.approx(series, rel=1e-11)
        assert transfer.hetp(0.7, 1.0) == 0.7

    def test_round_trip(self):
        lam = np.append(np.geomspace(0.01, 100, 41), 1.0)
        assert transfer.height_from_hetp(transfer.hetp(0.6, lam), lam) == pytest.approx(0.6 + 0 * lam, rel=1e-14)

    @pytest.mark.parametrize("lam", [0.4, 0.999999, 1.0, 1.000001, 1.5])
    def test_transfer_units_against_the_integral(self, lam):
        y_in, y_out, rest = 0.05, 0.02, 0.001  # rest = m x2; y* = rest + lam (y - y_out)
        units = quad(lambda y: 1 / (y - rest - lam * (y - y_out)), y_out, y_in, epsabs=1e-13)[0]
        assert transfer.transfer_units(y_in, y_out, rest, lam) == pytest.approx(units, rel=1e-10)

    def test_units_and_stages_give_one_height(self):
        # Kremser: N stages of one HETP each are N_OG units of one H_OG each
        lam = np.array([0.5, 0.8, 1.25, 1.4])
        stages = 6
        ratio = (lam ** -(stages + 1.0) - 1) / (1 / lam - 1)  # (y_in - m x2) / (y_out - m x2) of 6 equilibrium stages
        units = transfer.transfer_units(ratio, 1.0, 0.0, lam)
        assert stages * transfer.hetp(0.6, lam) == pytest.approx(units * 0.6, rel=1e-12)

    def test_a_stripper_has_negative_differences(self):
        up = transfer.transfer_units(0.0, 0.04, 0.05, 0.7)
        assert up == pytest.approx(transfer.transfer_units(0.05, 0.01, 0.0, 0.7), rel=1e-12)

    def test_out_of_reach_is_nan(self):
        assert np.isnan(transfer.transfer_units(0.05, 0.001, 0.0, 2.0))
        assert np.isnan(transfer.transfer_units(0.05, 0.02, 0.03, 0.5))

    def test_benitez_height(self):
        given, _, exact = example("Benitez_5.4")
        lam = given["m"] * given["G_kmol_h"] / given["L_kmol_h"]
        # the book takes means of the ends for the flows; A = 1.508, G = 0.1158 kmol/(m2 s)
        assert 1 / lam == pytest.approx(exact["A"], rel=0.03)
        units = transfer.transfer_units(given["y_in"], given["y_in"] * (1 - given["absorbed"]), 0.0, 1 / exact["A"])
        assert units == pytest.approx(exact["NtOG"], rel=1e-9)
        overall = 1 / (1 / given["ky_a"] + given["m"] / (given["kL_a"] * 1 / 0.018 * 0.986))
        assert overall == pytest.approx(exact["Kyah"], rel=0.02)
        height = transfer.gas_height(exact["Gmy"], exact["Kyah"], 1.0, 1.0)
        assert height == pytest.approx(exact["HtOG"], rel=1e-9)
        assert height * units == pytest.approx(exact["Z"], rel=1e-9)

    def test_heights_add(self):
        assert transfer.overall_height(0.4, 0.5, 0.8) == pytest.approx(0.8)
        assert transfer.overall_height(0.0, 0.5, 2.0) == pytest.approx(1.0)


class TestOnda:
    @pytest.mark.parametrize(("flux", "key"), [("L_printed", "recomputed_L_17.6"), ("L", "recomputed_L_16.7")])
    def test_sinnott_packed_column(self, flux, key):
        given, printed, _ = example("Sinnott_11.14")
        exact, wet = DATA["examples"]["Sinnott_11.14"][key], given[flux]
        area = films.onda_area(given["a"], given["sigma_c"], given["sigma"], wet, given["rhoL"], given["muL"])
        kl = films.onda_liquid(given["a"], area, given["dp"], wet, given["rhoL"], given["muL"], given["DL"])
        kg = films.onda_gas(given["a"], given["dp"], given["V"], given["rhoG"], given["muG"], given["DG"], given["T_K"])
        assert [area, kl] == pytest.approx([exact["aw"], exact["kL"]], rel=2e-4)
        assert kg == pytest.approx(exact["kG"] * 1e-2, rel=1e-3)  # kmol/(m2 s bar)
        gas = transfer.gas_height(given["V"] / 0.029, kg, area, given["P_Pa"])
        liquid = transfer.liquid_height(wet / 0.018, kl, area, given["rhoL"] / 0.018)
        found = [gas, liquid, transfer.overall_height(gas, liquid, given["lam"])]
        assert found == pytest.approx([exact[word] for word in ("HG", "HL", "HOG")], rel=5e-3)
        assert [area, *found] == pytest.approx([printed[word] for word in ("aw", "HG", "HL", "HOG")], rel=0.03)

    def test_sinnott_flow_parameter(self):
        given, printed, exact = example("Sinnott_11.14")
        found = trays.flow_parameter(given["liquid_kg_s"], given["gas_kg_s"], given["rhoG"], given["rhoL"])
        assert found == pytest.approx(exact["FLV"], rel=1e-9)
        assert found == pytest.approx(printed["F"], abs=5e-3)

    def test_laws(self):
        flux = np.geomspace(0.1, 30, 30)
        area = films.onda_area(200.0, 0.061, 0.072, flux, 1000.0, 1e-3)
        assert np.all(np.diff(area) > 0) and np.all(area < 200.0)
        gas = films.onda_gas(200.0, np.array([0.0149, 0.0151]), 1.0, 1.2, 1.8e-5, 1.5e-5, 293.0)
        assert gas[0] / gas[1] == pytest.approx(2.00 / 5.23 * (0.0151 / 0.0149) ** 2, rel=1e-12)
        assert ranges.outside(films.ONDA, liquid_reynolds=0.01) == ["liquid reynolds 0.01 is outside the range 0.04 to 500."]


class TestBilletSchultesFilms:
    """The worked example is in `test_hydraulics_packing.py`."""

    def test_constants_of_the_other_form(self):
        # Benitez, equations (5.20) and (5.22): 0.757 and 0.1304 with a and eps; from memory
        packing = packings.find("pall_metal_50").billet_schultes
        a, eps, held = packing.specific_area, packing.void_fraction, 0.05
        liquid = 0.757 * packing.liquid * np.sqrt(1.5e-9 * a * 0.005 / (eps * held))
        assert films.billet_schultes_liquid(packing, 0.005, held, 1.5e-9) == pytest.approx(liquid, rel=1e-3)
        number, schmidt = 6 * 1.5 * 1.2 / (a * 1.8e-5), 1.8e-5 / (1.2 * 1.5e-5)
        gas = 0.1304 * packing.gas * 1.5e-5 / (R * 300) * a / np.sqrt(eps * (eps - held)) * number**0.75 * schmidt ** (1 / 3)
        found = films.billet_schultes_gas(packing, 1.5, held, 1.2, 1.8e-5, 1.5e-5, 300.0)
        assert found == pytest.approx(gas, rel=1e-3)

    @pytest.mark.parametrize(("name", "factor"), [
        ("pall_metal_25", 2), ("raschig_ceramic_25", 2), ("pall_metal_50", 2.5), ("pall_plastic_50", 3.2)])
    def test_against_onda(self, name, factor):
        # Water and air. The methods part with the size: kG a by Onda, which goes with (a dp)^-2, is 0.43 of the other for
        # metal rings of 50 mm, and 0.34 for plastic ones, which it wets little.
        packing, velocity = packings.find(name), 0.01
        critical = films.CRITICAL_TENSIONS[{"metal": "steel", "plastic": "polyethylene", "ceramic": "ceramic"}[packing.material]]
        own, size = packing.billet_schultes, packing.size
        wet = films.onda_area(own.specific_area, critical, 0.072, 10.0, 1000.0, 1e-3)
        area = films.billet_schultes_area(own, velocity, 1000.0, 1e-3, 0.072)
        held = 0.06
        liquid = films.onda_liquid(own.specific_area, wet, size, 10.0, 1000.0, 1e-3, 1.9e-9) * wet
        other = films.billet_schultes_liquid(own, velocity, held, 1.9e-9) * area
        assert 1 / factor < liquid / other < factor
        gas = films.onda_gas(own.specific_area, size, 1.2, 1.2, 1.8e-5, 1.5e-5, 293.0) * wet
        other = films.billet_schultes_gas(own, 1.0, held, 1.2, 1.8e-5, 1.5e-5, 293.0) * area
        assert 1 / factor < gas / other < factor


class TestProperties:
    def test_wilke_against_bird(self):
        given, printed, _ = example("Bird_wilke")
        assert properties.gas_viscosity(given["x"], given["mu"], given["M"]) == pytest.approx(printed["mu"], rel=1e-3)

    def test_wilke_of_equal_gases_and_pure_ones(self):
        assert properties.gas_viscosity([0.3, 0.7], [2e-5, 2e-5], [0.03, 0.03]) == pytest.approx(2e-5, rel=1e-14)
        assert properties.gas_viscosity([0.0, 1.0], [1e-5, 2e-5], [0.002, 0.044]) == pytest.approx(2e-5, rel=1e-14)

    def test_wilke_chang_against_treybal(self):
        given, printed, _ = example("Treybal_mannitol")
        found = properties.liquid_diffusivity(given["T_K"], given["M"], given["mu"], given["V"], given["phi"])
        assert found == pytest.approx(printed["D"], rel=2e-3)

    def test_fuller_against_poling(self):
        given, printed, _ = example("Poling_allyl")
        found = properties.gas_diffusivity(given["T_K"], given["P_Pa"], *given["M"], *given["V"])
        assert found == pytest.approx(printed["D"], rel=0.02)
        assert found == pytest.approx(printed["measured"], rel=0.05)

    @pytest.mark.parametrize(("name", "mass", "temperature", "measured"), [
        # B. E. Poling and others, Properties of Gases and Liquids, 5th ed., table 11-2, in air or as named; from memory
        ("water", 0.018015, 313.0, 0.288e-4), ("ammonia", 0.017031, 273.0, 0.198e-4), ("carbon dioxide", 0.04401, 276.0, 0.142e-4),
    ])
    def test_fuller_against_measurements_in_air(self, name, mass, temperature, measured):
        volumes = properties.DIFFUSION_VOLUMES
        found = properties.gas_diffusivity(temperature, 101325.0, mass, 0.02897, volumes[name], volumes["air"])
        assert found == pytest.approx(measured, rel=0.1)

    def test_density_of_air(self):
        found = properties.gas_density(1e5, 300.0, 0.028965)
        assert found == pytest.approx(CoolProp.CoolProp.PropsSI("D", "T", 300.0, "P", 1e5, "Air"), rel=1e-3)

    def test_liquids_mix_between_their_parts(self):
        share = np.stack([np.linspace(0, 1, 11), 1 - np.linspace(0, 1, 11)], axis=-1)
        for found, one, two in (
            (properties.liquid_density(share, [0.2, 0.05], [850.0, 990.0]), 850.0, 990.0),
            (properties.liquid_viscosity(share, [5e-3, 4e-4]), 5e-3, 4e-4),
            (properties.surface_tension(share, [0.028, 0.072]), 0.028, 0.072),
            (properties.mean_molar_mass(share, [0.2, 0.05]), 0.2, 0.05),
        ):
            assert found[[-1, 0]] == pytest.approx([one, two], rel=1e-14)
            assert np.all(np.diff(found) * (one - two) > 0)
        half = np.array([0.5, 0.5])
        assert properties.liquid_viscosity(half, [4e-3, 1e-3]) == pytest.approx(2e-3)
        # a litre of each
        parts = np.array([850 / 0.2, 990 / 0.05])
        assert properties.liquid_density(parts / parts.sum(), [0.2, 0.05], [850.0, 990.0]) == pytest.approx(920.0)
