"""What the report, the tables and the profiles say of heat, against the results."""

import csv
import json
import re
from pathlib import Path

import numpy as np
import pytest

import leanloop
from leanloop.cli import main
from leanloop.output.content import Table
from leanloop.output.content_heat import NO_HEAT, degrees
from leanloop.output.content_report import report_sections
from leanloop.pictures import profiles

FOLDER = Path(__file__).resolve().parents[1] / "flowsheets"

WATER = (
    '{ model = "raoult", vapour_pressure = { form = "antoine", A = 5.19621, B = 1730.63, C = 233.426, '
    'pressure = "bar", temperature = "degC" } }'
)

ABSORBER = f"""
[components]
air     = {{ molar_mass = "28.96 g/mol", stays_in = "gas" }}
ammonia = {{ molar_mass = "17.03 g/mol" }}
water   = {{ molar_mass = "18.015 g/mol" }}

[equilibrium.aqueous]
ammonia = {{ model = "polynomial", K = [0.25, 0.018, 2.5e-4, 7e-6], temperature = "degC", pressure = "1.01325 bar" }}
water   = {WATER}

[heat_data.air]
gas_heat_capacity = "29.1 J/(mol K)"
[heat_data.ammonia]
gas_heat_capacity = "35.8 J/(mol K)"
liquid_heat_capacity = "80.8 J/(mol K)"
heat_of_vaporisation = {{ value = "35.0 kJ/mol", at = "25 degC" }}
[heat_data.water]
gas_heat_capacity = "33.6 J/(mol K)"
liquid_heat_capacity = "75.3 J/(mol K)"
heat_of_vaporisation = {{ value = "44.0 kJ/mol", at = "25 degC" }}

[feeds.vent]
phase = "gas"
temperature = "30 degC"
pressure = "1.4 bar"
flow = "20 mol/s"
fractions = {{ air = 0.845, ammonia = 0.15, water = 0.005 }}

[feeds.fresh]
phase = "liquid"
temperature = "20 degC"
pressure = "1.4 bar"
flow = "48 mol/s"
fractions = {{ water = 0.997, ammonia = 0.003 }}

[units.wash]
kind = "absorber"
gas_in = "vent"
liquid_in = "fresh"
gas_out = "cleaned"
liquid_out = "rich"
stages = 8
pressure = "1.4 bar"
equilibrium = "aqueous"
heat = "adiabatic"
"""

ACID_WATER = f"""
[components]
air = {{ molar_mass = "28.96 g/mol", stays_in = "gas" }}
CO2 = {{ molar_mass = "44.01 g/mol" }}
water = {{ molar_mass = "18.015 g/mol" }}
salt = {{ molar_mass = "100 g/mol", stays_in = "liquid" }}
[equilibrium.hot]
CO2 = {{ model = "henry", constant = "1640 bar", slope = "2400 K", at = "25 degC" }}
water = {WATER}
[heat_data.salt]
liquid_heat_capacity = "150 J/(mol K)"
[heat_data.CO2]
gas_heat_capacity = "37 J/(mol K)"
heat_of_vaporisation = "20 kJ/mol"
"""

STRIPPER = (
    ACID_WATER.replace('air = { molar_mass = "28.96 g/mol", stays_in = "gas" }\n', "")
    + """
[feeds.rich]
phase = "liquid"
temperature = "90 degC"
pressure = "2 bar"
flows = { water = "100 mol/s", CO2 = "0.5 mol/s", salt = "5 mol/s" }
[units.strip]
kind = "stripper"
liquid_in = "rich"
gas_out = "acid"
liquid_out = "lean"
stages = 10
equilibrium = "hot"
pressure = "1.8 bar"
reboiler = { duty = "600 kW" }
condenser = { temperature = "40 degC" }
"""
)

PAIR = (
    ACID_WATER
    + """
[feeds.vent]
phase = "gas"
temperature = "30 degC"
pressure = "1.4 bar"
flows = { air = "10 mol/s", CO2 = "0.5 mol/s", water = "0.2 mol/s" }
[units.wash]
kind = "absorber"
gas_in = "vent"
liquid_in = "cool_lean"
gas_out = "cleaned"
liquid_out = "rich"
height = "6 m"
hetp = "0.6 m"
heat = "adiabatic"
equilibrium = "hot"
efficiency = { CO2 = 0.4 }
[units.lift]
kind = "pump"
takes = "rich"
gives = "pumped"
pressure = "3 bar"
density = "1050 kg/m3"
[units.cross]
kind = "exchanger"
hot_in = "lean"
hot_out = "warm_lean"
cold_in = "pumped"
cold_out = "hot_rich"
approach = { cold_end = "10 K" }
[units.let_down]
kind = "valve"
takes = "hot_rich"
gives = "fed"
pressure = "1.8 bar"
equilibrium = "hot"
[units.strip]
kind = "stripper"
liquid_in = "fed"
gas_out = "acid"
liquid_out = "lean"
stages = 4
equilibrium = "hot"
pressure = "1.8 bar"
reboiler = { boil_up = 0.1 }
condenser = { temperature = "40 degC" }
[units.top_up]
kind = "makeup"
takes = "warm_lean"
gives = "topped"
hold = { salt = "5 mol/s", water = "100 mol/s" }
[units.trim]
kind = "cooler"
takes = "topped"
gives = "cool_lean"
temperature = "30 degC"
"""
)

OIL = """
[feeds.oil]
phase = "liquid"
temperature = "30 degC"
pressure = "1.4 bar"
flows = { oil = "1 mol/s" }
[units.warm]
kind = "heater"
takes = "oil"
gives = "hot_oil"
temperature = "60 degC"
"""
OIL_ITSELF = 'oil = { molar_mass = "250 g/mol", stays_in = "liquid" }\n'
HALF = ABSORBER.replace("[equilibrium.aqueous]", f"{OIL_ITSELF}[equilibrium.aqueous]") + OIL
FLASHED = f"""
[components]
air = {{ molar_mass = "28.96 g/mol", stays_in = "gas" }}
water = {{}}
[equilibrium.here]
water = {WATER}
[feeds.wet]
phase = "gas"
temperature = "80 degC"
pressure = "1.2 bar"
flows = {{ air = "10 mol/s", water = "3 mol/s" }}
[units.chill]
kind = "cooler"
takes = "wet"
gives = "mixed"
temperature = "40 degC"
equilibrium = "here"
[units.part]
kind = "flash_drum"
takes = "mixed"
gas_out = "dry"
liquid_out = "drops"
equilibrium = "here"
"""
COLD = [
    'units.wash.stage_duties=[{stage=4,duty="-60 kW"},{stage=6,duty="-20 kW"}]',
    "units.wash.efficiency=[0.5,0.5,0.6,0.6,0.7,0.7,0.7,0.8]",
    'units.wash.side_draws=[{stream="side",stage=3,phase="liquid",flow="2 mol/s"}]',
]
FILES = {
    "absorber": (ABSORBER, ()),
    "isothermal": (ABSORBER, ['units.wash.heat="isothermal"']),
    "cold": (ABSORBER, COLD),
    "stripper": (STRIPPER, ()),
    "pair": (PAIR, ()),
    "half": (HALF, ()),
    "flashed": (FLASHED, ()),
}


@pytest.fixture(scope="module")
def paths(tmp_path_factory):
    folder = tmp_path_factory.mktemp("heat")
    for name, (text, _) in FILES.items():
        (folder / f"{name}.toml").write_text(text, encoding="utf-8")
    return {name: folder / f"{name}.toml" for name in FILES}


@pytest.fixture(scope="module")
def results(paths):
    found = {name: leanloop.read(paths[name], list(changes)).solve() for name, (_, changes) in FILES.items()}
    assert {name: result.status for name, result in found.items()} == dict.fromkeys(FILES, "converged")
    return found


def block(result, head):
    """Lines of the report under a head, the head included."""
    return next(part for part in str(result).split("\n\n") if part.startswith(head)).splitlines()


def rows(lines, head):
    """Cells of the rows below a head, until the table ends."""
    start = next(place for place, line in enumerate(lines) if line.strip().startswith(head))
    width = len(re.split(r" {2,}", lines[start].strip()))
    out = []
    for line in lines[start + 1 :]:
        cells = re.split(r" {2,}", line.strip())
        if len(cells) != width or not re.search(r"\d|-$", cells[-1]):
            break
        out.append(cells)
    return out


def cautions(result):
    return [line.removeprefix("  * ") for line in block(result, "Cautions")[1:]]


class TestColumns:
    def test_header_counts_stages_apart_from_condenser_and_reboiler(self, results):
        warm = results["stripper"].to_dict()["units"]["strip"]["profile"]["temperature_K"]
        assert block(results["stripper"], "Column")[0] == (
            "Column strip (stripper): 10 equilibrium stages, a condenser and a reboiler, adiabatic, "
            f"40.0 to {warm[-1] - 273.15:.1f} degC"
        )

    def test_header_of_an_adiabatic_absorber(self, results):
        warm = results["absorber"].to_dict()["units"]["wash"]["profile"]["temperature_K"]
        span = f"{min(warm) - 273.15:.1f} to {max(warm) - 273.15:.1f}"
        assert block(results["absorber"], "Column")[0] == f"Column wash (absorber): 8 equilibrium stages, adiabatic, {span} degC"

    def test_header_of_isothermal_stages_is_as_ever(self, results):
        head = block(results["isothermal"], "Column")[0]
        assert head == "Column wash (absorber): 8 equilibrium stages at 20.000 degC, isothermal"

    def test_efficiency_and_height_are_said(self, results):
        head = block(results["pair"], "Column wash")[0]
        assert "10 equilibrium stages (6.00 m of packing at 0.600 m a stage)" in head
        assert "Murphree vapour efficiency 0.400 for CO2, else 1, solvent to gas 0.50000 mol/mol" in head
        assert "Murphree vapour efficiency 0.500 to 0.800 by stage" in block(results["cold"], "Column")[0]

    def test_an_efficiency_set_in_a_solve_is_the_one_said(self, paths):
        result = leanloop.read(paths["absorber"], ["units.wash.efficiency=0.9"]).solve({"units.wash.efficiency": 0.7})
        assert block(result, "Column")[0].endswith("Murphree vapour efficiency 0.700")

    def test_reflux_boil_up_and_draws_are_said(self, results):
        found = results["stripper"].to_dict()["units"]["strip"]["results"]
        line = block(results["stripper"], "Column")[1]
        pattern = r"  reflux (\S+) mol per mol of overhead gas; boil-up (\S+) mol per mol of bottoms"
        reflux, boil_up = re.fullmatch(pattern, line).groups()
        assert float(reflux) == pytest.approx(found["reflux_ratio"], rel=1e-3)
        assert float(boil_up) == pytest.approx(found["boil_up"], rel=1e-3)
        assert block(results["cold"], "Column")[1] == "  side draws 7.2000 kmol/h of liquid from stage 3"

    @pytest.mark.parametrize(
        ("name", "unit", "labels"),
        [
            ("stripper", "strip", {"condenser": 0, "stage 1 (top)": 1, "stage 10 (bottom)": 10, "reboiler": 11}),
            ("absorber", "wash", {"stage 1 (top)": 0, "stage 6 (hottest)": 5, "stage 8 (bottom)": 7}),
            ("cold", "wash", {"stage 1 (top)": 0, "stage 4 (coldest)": 3, "stage 8 (bottom)": 7}),
        ],
    )
    def test_rows_are_those_of_the_profile(self, results, name, unit, labels):
        profile = results[name].to_dict()["units"][unit]["profile"]
        (section,) = [item for item in report_sections(results[name]) if item.place == f"units.{unit}"]
        tables = {part.head[0]: part for part in section.parts if isinstance(part, Table)}
        for component in profile["K"]:
            shown = tables[component].rows
            assert tables[component].head[1] == "degC"
            assert [row[0] for row in shown] == list(labels)
            for row, place in zip(shown, labels.values(), strict=True):
                assert row[1] == f"{profile['temperature_K'][place] - 273.15:.1f}"
                assert float(row[2]) == pytest.approx(profile["x"][component][place], rel=1e-4)
                assert float(row[3]) == pytest.approx(profile["y"][component][place], rel=1e-4)
                assert float(row[-1]) == pytest.approx(3.6 * profile["gas_mol_s"][place], rel=1e-4)

    def test_no_temperatures_where_all_stages_have_one(self, results):
        (section,) = [item for item in report_sections(results["isothermal"]) if item.place == "units.wash"]
        assert not [part for part in section.parts if isinstance(part, Table) and "degC" in part.head]

    def test_the_loading_of_a_feed_of_two_phases(self, results):
        feed = results["pair"].to_dict()["streams"]["fed"]
        assert feed["phase"] == "two-phase"
        lines = block(results["pair"], "Solvent loop")
        start = next(place for place, line in enumerate(lines) if line.startswith("  strip:"))
        rich = float(rows(lines[start:], "loading")[0][2])
        assert rich == pytest.approx(feed["mol_s"]["CO2"] / feed["mol_s"]["salt"], rel=1e-4)


class TestHeat:
    @pytest.mark.parametrize("name", ["isothermal", "cold", "stripper", "pair", "flashed"])
    def test_duties_and_powers_sum_to_those_of_the_balance(self, results, name):
        shown = rows(block(results[name], "Heat"), "unit")
        total = sum(float(row[2]) for row in shown)
        written = 1e-4 * max(abs(float(row[2])) for row in shown)  # five figures each
        assert total == pytest.approx(results[name].to_dict()["balance"]["energy"]["duties_W"] / 1e3, rel=0, abs=written)

    def test_each_is_named(self, results):
        def named(name):
            return [tuple(row[:2]) for row in rows(block(results[name], "Heat"), "unit")]

        assert named("isothermal") == [("wash", "stages, to hold their temperature")]
        assert named("cold") == [("wash", "stage 4"), ("wash", "stage 6")]
        assert named("stripper") == [("strip", "condenser"), ("strip", "reboiler")]
        assert named("pair") == [("lift", "pump power"), ("strip", "condenser"), ("strip", "reboiler"), ("trim", "cooler")]
        assert named("flashed") == [("chill", "cooler"), ("part", "flash drum")]

    def test_temperatures_of_the_duties(self, results):
        assert [row[3] for row in rows(block(results["stripper"], "Heat"), "unit")] == ["40.0", "118.3"]
        assert rows(block(results["flashed"], "Heat"), "unit")[0][3] == "80.0 to 40.0"

    def test_reboiler_duty_per_solute(self, results):
        # all of 0.5 mol/s is taken out by 600 kW, of 44.01 g/mol
        (row,) = rows(block(results["stripper"], "Heat"), "reboiler duty per")
        assert row[:2] == ["CO2", "strip"]
        assert [float(cell) for cell in row[2:]] == pytest.approx([1.8, 600 / 0.5, 0.6 / 0.5 / 0.04401], rel=1e-4)

    def test_vapour_of_the_solvent_is_no_solute(self, tmp_path):
        path = tmp_path / "open.toml"
        text = STRIPPER.replace('condenser = { temperature = "40 degC" }', "").replace('salt = "5 mol/s"', 'salt = "20 mol/s"')
        path.write_text(text, encoding="utf-8")
        result = leanloop.read(path).solve()
        data = result.to_dict()
        total = {name: data["streams"][name]["total_mol_s"] for name in ("rich", "lean")}
        # with salt in it water goes by a larger part than the liquid as a whole
        assert data["units"]["strip"]["results"]["removal"]["water"] > 1 - total["lean"] / total["rich"] > 0.04
        assert [row[0] for row in rows(block(result, "Heat"), "reboiler duty per")] == ["CO2"]

    def test_no_duty_per_mass_without_a_molar_mass(self, tmp_path):
        path = tmp_path / "bare.toml"
        path.write_text(STRIPPER.replace('CO2 = { molar_mass = "44.01 g/mol" }', "CO2 = {}"), encoding="utf-8")
        (row,) = rows(block(leanloop.read(path).solve(), "Heat"), "reboiler duty per")
        assert row[3:] == ["1200.0", "-"]

    def test_exchanger(self, results):
        data = results["pair"].to_dict()
        found, streams = data["units"]["cross"]["results"], data["streams"]
        (row,) = rows(block(results["pair"], "Heat"), "exchanger")
        assert row[0] == "cross"
        assert row[2] == f"{degrees(streams['lean']['temperature_K'])} to {degrees(streams['warm_lean']['temperature_K'])}"
        assert row[3] == f"{degrees(streams['pumped']['temperature_K'])} to {degrees(streams['hot_rich']['temperature_K'])}"
        keys = ("approach_hot_end_K", "approach_cold_end_K", "approach_least_K", "UA_W_K", "effectiveness")
        scale = (1, 1, 1, 1e-3, 1)
        wanted = [found[key] * by for key, by in zip(keys, scale, strict=True)]
        assert [float(cell) for cell in row[4:]] == pytest.approx(wanted, rel=1e-3)
        assert float(row[1]) == pytest.approx(found["duty_W"] / 1e3, rel=1e-4)

    def test_none_where_nothing_is_heated(self, results):
        assert "\nHeat\n" not in str(results["absorber"])

    def test_vapour_fractions_where_a_stream_has_both_phases(self, results):
        lines = block(results["flashed"], "Streams")
        head = re.split(r" {2,}", lines[1].strip())
        place = head.index("vapour fraction")
        shown = {row[0]: row[place] for row in (re.split(r" {2,}", line.strip()) for line in lines[2:])}
        data = results["flashed"].to_dict()["streams"]
        assert 0 < data["mixed"]["vapour_fraction"] < 1
        assert {name: float(cell) for name, cell in shown.items()} == pytest.approx(
            {name: item["vapour_fraction"] for name, item in data.items()}, abs=1e-4
        )
        assert "vapour fraction" not in str(results["stripper"])


class TestEnergyBalance:
    @pytest.mark.parametrize("name", ["absorber", "isothermal", "cold", "stripper", "pair", "flashed"])
    def test_figures_are_those_of_the_result(self, results, name):
        found = results[name].to_dict()["balance"]["energy"]
        (row,) = rows(block(results[name], "Energy balance, kW"), "kW")
        wanted = [found[key] / 1e3 for key in ("in_W", "duties_W", "out_W")]
        assert [float(cell) for cell in row[1:4]] == pytest.approx(wanted, rel=1e-6)
        assert abs(float(row[4])) < 1e-9
        assert NO_HEAT not in cautions(results[name])

    def test_why_there_is_none(self, results):
        assert results["half"].to_dict()["balance"]["energy"] is None
        assert block(results["half"], "Energy balance") == ["Energy balance", "  Not made: there are no heat data of oil."]
        assert "Energy is not balanced over the whole flowsheet: there are no heat data of oil." in cautions(results["half"])
        assert NO_HEAT not in cautions(results["half"])

    def test_known_duties_are_not_denied(self, paths):
        result = leanloop.read(paths["half"], ['units.wash.heat="isothermal"']).solve()
        assert result.to_dict()["balance"]["energy"] is None
        assert rows(block(result, "Heat"), "unit")[0][:2] == ["wash", "stages, to hold their temperature"]
        assert NO_HEAT not in cautions(result)

    def test_a_valve_that_flashes_balances_heat(self, paths):
        valve = """
[feeds.hot]
phase = "liquid"
temperature = "150 degC"
pressure = "8 bar"
flows = { water = "10 mol/s" }
[units.let_down]
kind = "valve"
takes = "hot"
gives = "flashed"
pressure = "1.1 bar"
equilibrium = "aqueous"
"""
        path = paths["half"].with_name("valve.toml")
        text = re.sub(r"\[heat_data\.(air|ammonia)\]\n(.+ = .+\n)+", "", HALF.replace('heat = "adiabatic"', ""))
        path.write_text(re.sub(r"\bammonia\b", "solute", text) + valve, encoding="utf-8")
        result = leanloop.read(path).solve()
        assert result.to_dict()["balance"]["energy"] is None
        assert not [part for part in report_sections(result) if part.title == "Heat"]
        assert NO_HEAT not in cautions(result)

    def test_no_heat_where_data_serve_no_unit(self, tmp_path):
        text = re.sub(r"\[heat_data\.(air|ammonia)\]\n(.+ = .+\n)+", "", HALF.replace('heat = "adiabatic"', ""))
        path = tmp_path / "bare.toml"
        path.write_text(re.sub(r"\bammonia\b", "solute", text), encoding="utf-8")
        result = leanloop.read(path).solve()
        assert result.sheet.heat is not None
        assert result.to_dict()["units"]["wash"]["results"]["duty_W"] is None
        assert cautions(result)[-1] == NO_HEAT
        assert block(result, "Energy balance")[1] == "  Not made: there are no heat data of solute, oil."


class TestCautions:
    def test_built_in_data_are_named(self, results):
        (said,) = [line for line in cautions(results["stripper"]) if "built-in" in line]
        assert said == (
            "Heat data not given in the file are the built-in ones: "
            "water (gas heat capacity, liquid heat capacity, heat of vaporisation)."
        )
        assert not [line for line in cautions(results["absorber"]) if "built-in" in line]

    def test_without_heat_the_report_has_none_of_it(self):
        result = leanloop.read(FOLDER / "coating_vent.toml").solve()
        assert cautions(result)[-1] == NO_HEAT
        titles = [section.title for section in report_sections(result)]
        assert "Heat" not in titles and not [title for title in titles if title.startswith("Energy")]

    def test_of_many_cases(self, paths):
        result = leanloop.read(paths["stripper"]).solve({"units.strip.reboiler.duty": np.array([5e5, 6e5])})
        said = cautions(result)
        assert NO_HEAT not in said and any("built-in" in line for line in said)
        cold = leanloop.read(FOLDER / "coating_vent.toml").solve({"feeds.steam.flow": np.array([1.1, 1.2])})
        assert cautions(cold)[-1] == NO_HEAT


class TestTablesAndPages:
    def test_profiles_as_csv(self, paths, results, tmp_path, capsys):
        assert main(["solve", str(paths["stripper"]), "--tables", str(tmp_path), "--json", "-"]) == 0
        profile = json.loads(capsys.readouterr().out)["units"]["strip"]["profile"]
        with (tmp_path / "profile_strip.csv").open(encoding="utf-8", newline="") as file:
            table = list(csv.DictReader(file))
        assert [int(row["stage"]) for row in table] == list(range(12))
        for key in ("temperature_K", "duty_W"):
            assert [float(row[key]) for row in table] == profile[key]

    @pytest.mark.parametrize("name", ["stripper", "pair", "half"])
    def test_page_has_the_same_sections(self, results, name):
        from leanloop.output.html import page

        text = page(results[name])
        for section in report_sections(results[name]):
            assert section.title in text


class TestProfiles:
    def test_condenser_and_reboiler_stand_at_the_ends(self, results):
        figure = profiles.figure(results["stripper"], "strip")
        axes = {own.get_gid(): own for own in figure.axes}
        figure.draw_without_rendering()
        low, high = axes["liquid"].get_ylim()
        assert (low, high) == (11.5, -0.5)
        shown = [label.get_text() for label in axes["liquid"].get_yticklabels()]
        assert shown == ["condenser", *map(str, range(1, 11)), "reboiler"]
        warm = results["stripper"].to_dict()["units"]["strip"]["profile"]["temperature_K"]
        (line,) = axes["temperature"].lines
        np.testing.assert_allclose(line.get_xdata(), np.array(warm) - 273.15, rtol=1e-12)

    def test_note_tells_the_duties(self, results):
        figure = profiles.figure(results["stripper"], "strip")
        note = next(text.get_text() for text in figure.texts if text.get_gid() == "note").replace("\n", " ")
        duty = results["stripper"].to_dict()["units"]["strip"]["results"]["condenser_duty_W"]
        assert note.startswith("stripper of 10 equilibrium stages, a condenser and a reboiler, adiabatic;")
        assert note.endswith(f"into the process: condenser {duty / 1e3:.1f} kW, reboiler 600 kW")

    def test_what_falls_below_the_axis_ends_at_its_edge(self, results):
        figure = profiles.figure(results["stripper"], "strip")
        for axes in figure.axes:
            left = axes.get_xlim()[0]
            for line in axes.lines:
                if np.nanmin(line.get_xdata()) < left:
                    assert line.get_clip_on()
        liquid = next(axes for axes in figure.axes if axes.get_gid() == "liquid")
        assert min(np.min(line.get_xdata()) for line in liquid.lines) < liquid.get_xlim()[0]

    def test_an_absorber_keeps_its_stages(self, results):
        figure = profiles.figure(results["absorber"], "wash")
        assert figure.axes[0].get_ylim() == (8.5, 0.5)
        note = next(text.get_text() for text in figure.texts if text.get_gid() == "note")
        assert note == "absorber of 8 equilibrium stages, adiabatic; flows are those leaving the stages"
