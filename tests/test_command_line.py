"""The command line as a person meets it: text, JSON, exit status, and what wrong input gets."""

import json
import re
import subprocess
import sys

import independent
import pytest
import scenes
from scipy.optimize import brentq

EXAMPLE = """\
title = "Any text"

[feeds.vent]
phase = "gas"
temperature = "26 degC"
pressure = "1.07 bar"
flow = "10 mol/s"
fractions = { air = "rest", toluene = 0.02 }

[feeds.steam]
phase = "gas"
temperature = "152 degC"
pressure = "1.01 bar"
flows = { steam = "1.0 mol/s" }

[units.wash]
kind = "absorber"
gas_in = "vent"
liquid_in = "cool_lean"
gas_out = "cleaned"
liquid_out = "rich"
stages = 8
equilibrium = "cold"
heat = "isothermal"

[units.preheat]
kind = "heater"
takes = "rich"
gives = "hot_rich"
temperature = "150 degC"

[units.strip]
kind = "stripper"
liquid_in = "hot_rich"
gas_in = "steam"
gas_out = "overhead"
liquid_out = "lean"
stages = 7
equilibrium = "hot"

[units.divide]
kind = "splitter"
takes = "lean"
gives = ["bleed", "kept"]
shares = { bleed = 1e-3 }

[units.top_up]
kind = "makeup"
takes = "kept"
gives = "topped_lean"
hold = { oil = "1.60 mol/s" }

[units.trim]
kind = "cooler"
takes = "topped_lean"
gives = "cool_lean"
temperature = "26 degC"

[requirements.outlet]
quantity = "streams.cleaned.fraction.toluene"
equals = 5e-4
free = "units.top_up.hold.oil"
between = ["0.8 mol/s", "3 mol/s"]

[components]
air     = { molar_mass = "28.96 g/mol", stays_in = "gas" }
toluene = { molar_mass = "92.14 g/mol" }
oil     = { molar_mass = "250 g/mol", stays_in = "liquid" }
steam   = { molar_mass = "18.02 g/mol", stays_in = "gas" }

[equilibrium.cold]
toluene = { model = "constant", K = 0.1 }
[equilibrium.hot]
toluene = { model = "raoult", vapour_pressure = { form = "antoine", A = 6.95, B = 1345.0, \
C = 219.5, pressure = "mmHg", temperature = "degC" } }

[loop]
method = "newton"
tolerance = 1e-10
"""

LOOP_UNITS = ["divide", "preheat", "strip", "top_up", "trim", "wash"]
LOOP_STREAMS = ["cool_lean", "hot_rich", "kept", "lean", "rich", "topped_lean"]
STREAMS = sorted([*LOOP_STREAMS, "vent", "steam", "cleaned", "overhead", "bleed"])
COMPONENTS = ["air", "toluene", "oil", "steam"]


def run(*arguments, cwd=None):
    return subprocess.run([sys.executable, "-W", "error", "-m", "leanloop", *map(str, arguments)],
                          capture_output=True, text=True, encoding="utf-8", cwd=cwd, timeout=120,
                          check=False)


def strict_json(text):
    def refuse(name):
        raise AssertionError(f"{name} in the JSON")

    return json.loads(text, parse_constant=refuse)


def solved(path, *arguments, status=0):
    done = run("solve", path, "--json", "-", *arguments)
    assert (done.returncode, done.stderr) == (status, "")
    return strict_json(done.stdout)


@pytest.fixture(scope="module")
def example(tmp_path_factory):
    return scenes.write(tmp_path_factory.mktemp("example"), EXAMPLE)


@pytest.fixture(scope="module")
def answer(example):
    return solved(example)


@pytest.fixture(scope="module")
def checked(example):
    done = run("check", example, "--json", "-")
    assert (done.returncode, done.stderr) == (0, "")
    return strict_json(done.stdout)


class TestSolve:
    def test_prints_text(self, example):
        done = run("solve", example)
        assert (done.returncode, done.stderr) == (0, "")
        with pytest.raises(json.JSONDecodeError):
            json.loads(done.stdout)
        assert "Any text" in done.stdout
        for word in ("cleaned", "toluene", "loading", "wash", "strip"):
            assert word in done.stdout
        assert not re.search(r"\bnan\b|\binf\b", done.stdout, re.IGNORECASE)

    def test_json_in_a_file(self, example, answer, tmp_path):
        done = run("solve", example, "--json", tmp_path / "answer.json")
        assert done.returncode == 0
        assert "toluene" in done.stdout
        assert strict_json((tmp_path / "answer.json").read_text(encoding="utf-8")) == answer

    def test_top_level(self, answer):
        assert answer["status"] == "converged"
        assert isinstance(answer["status_text"], str) and answer["status_text"]
        assert set(answer) >= {"status", "status_text", "loop", "loops", "streams", "units",
                               "balance", "requirements", "cautions"}
        assert all(isinstance(sentence, str) for sentence in answer["cautions"])

    def test_loop(self, answer):
        assert answer["loop"]["method"] == "newton"
        assert isinstance(answer["loop"]["passes"], int) and answer["loop"]["passes"] >= 2
        assert answer["loop"]["residual"] <= 1e-10
        assert answer["loop"]["tears"] and set(answer["loop"]["tears"]) <= set(LOOP_STREAMS)
        (loop,) = answer["loops"]
        assert sorted(loop["units"]) == LOOP_UNITS
        assert set(loop) >= {"units", "tears", "passes", "residual", "history"}

    def test_streams(self, answer):
        assert sorted(answer["streams"]) == STREAMS
        for name, stream in answer["streams"].items():
            wanted = {"phase", "temperature_K", "pressure_Pa", "total_mol_s", "mol_s", "fraction",
                      "ratio", "mass_fraction"}
            if stream["phase"] == "gas":
                wanted |= {"fraction_dry", "mg_per_Nm3", "mg_per_Nm3_dry", "dew_point_K"}
            else:
                wanted |= {"loading"}
            assert set(stream) >= wanted, name
            assert set(stream["mol_s"]) == set(COMPONENTS), name
            assert sum(stream["mol_s"].values()) == pytest.approx(stream["total_mol_s"], rel=1e-12)
            assert sum(stream["fraction"].values()) == pytest.approx(1, rel=1e-12)
            assert sum(stream["mass_fraction"].values()) == pytest.approx(1, rel=1e-12)

    def test_temperatures_and_pressures(self, answer):
        streams = answer["streams"]
        for name, degrees in (("vent", 26), ("steam", 152), ("hot_rich", 150), ("lean", 150),
                              ("overhead", 150), ("cool_lean", 26), ("rich", 26), ("cleaned", 26)):
            assert streams[name]["temperature_K"] == pytest.approx(degrees + 273.15, abs=1e-9), name
        for name in ("cleaned", "rich"):
            assert streams[name]["pressure_Pa"] == pytest.approx(1.07e5, rel=1e-12)
        for name in ("overhead", "lean"):
            assert streams[name]["pressure_Pa"] == pytest.approx(1.01e5, rel=1e-12)

    def test_columns(self, answer):
        for name, stages in (("wash", 8), ("strip", 7)):
            unit = answer["units"][name]
            assert set(unit["results"]) >= {"removal", "absorption_factor", "stripping_factor",
                                            "solvent_to_gas", "approach_rich", "approach_lean"}
            profile = unit["profile"]
            assert profile["stage"] == list(range(1, stages + 1))
            for key in ("temperature_K", "liquid_mol_s", "gas_mol_s"):
                assert len(profile[key]) == stages
            for key in ("x", "y", "X", "Y", "K", "A"):
                assert len(profile[key]["toluene"]) == stages
        assert answer["units"]["wash"]["kind"] == "absorber"
        assert answer["units"]["strip"]["kind"] == "stripper"

    def test_column_results_follow_their_definitions(self, answer):
        streams, wash = answer["streams"], answer["units"]["wash"]
        moles = lambda name: streams[name]["mol_s"]["toluene"]  # noqa: E731
        results, profile = wash["results"], wash["profile"]
        assert results["removal"]["toluene"] == pytest.approx(
            1 - moles("cleaned") / moles("vent"), rel=1e-9)
        assert answer["units"]["strip"]["results"]["removal"]["toluene"] == pytest.approx(
            1 - moles("lean") / moles("hot_rich"), rel=1e-9)
        factors = [L / (0.1 * G) for L, G in
                   zip(profile["liquid_mol_s"], profile["gas_mol_s"], strict=True)]
        assert profile["A"]["toluene"] == pytest.approx(factors, rel=1e-9)
        assert results["absorption_factor"]["toluene"] == pytest.approx(
            (factors[0] * factors[-1]) ** 0.5, rel=1e-9)
        assert results["solvent_to_gas"] == pytest.approx(
            streams["cool_lean"]["mol_s"]["oil"] / 9.8, rel=1e-9)
        # Partial pressure over equilibrium: gas fed against rich, gas leaving against lean.
        assert results["approach_rich"]["toluene"] == pytest.approx(
            0.02 / (0.1 * streams["rich"]["fraction"]["toluene"]), rel=1e-9)
        assert results["approach_lean"]["toluene"] == pytest.approx(
            5e-4 / (0.1 * streams["cool_lean"]["fraction"]["toluene"]), rel=1e-9)

    def test_numbers_agree_with_an_independent_solution(self, answer):
        hot = 10 ** (6.95 - 1345.0 / (219.5 + 150)) * 101325 / 760 / 1.01e5

        def close(oil):
            return independent.solve_loop((8, 7), (0.1, hot), oil, 9.8, 1.0, 0.2 / 9.8,
                                          purge=1e-3, polish=True)

        gap = lambda oil: close(oil).Y_out[0] - 5e-4 / (1 - 5e-4)  # noqa: E731
        oil = brentq(gap, 0.8, 1.7, xtol=1e-14)
        loop = close(oil)
        streams, outlet = answer["streams"], answer["requirements"]["outlet"]
        assert streams["cleaned"]["fraction"]["toluene"] == pytest.approx(5e-4, rel=1e-9)
        assert outlet["reached"] is True and outlet["active"] is True
        assert outlet["value"] == pytest.approx(5e-4, rel=1e-9)
        assert outlet["free_value"] == pytest.approx(oil, rel=1e-8)
        assert outlet["other_solutions"] == pytest.approx(
            [brentq(gap, 1.9, 3.0, xtol=1e-14)], rel=1e-8)
        assert streams["cool_lean"]["loading"]["toluene"] == pytest.approx(loop.X_lean[0], rel=1e-8)
        assert streams["lean"]["loading"]["toluene"] == pytest.approx(loop.X_stripped[0], rel=1e-8)
        assert streams["rich"]["loading"]["toluene"] == pytest.approx(loop.X_rich[0], rel=1e-8)
        assert answer["units"]["top_up"]["results"]["added_mol_s"]["oil"] == pytest.approx(
            streams["bleed"]["mol_s"]["oil"], rel=1e-8)

    def test_balance_is_the_streams_own(self, answer):
        streams = answer["streams"]
        added = answer["units"]["top_up"]["results"]["added_mol_s"]
        for component, balance in answer["balance"]["components"].items():
            came = sum(streams[s]["mol_s"][component] for s in ("vent", "steam"))
            left = sum(streams[s]["mol_s"][component] for s in ("cleaned", "overhead", "bleed"))
            came += added.get(component) or 0.0
            assert balance["in_mol_s"] == pytest.approx(came, rel=1e-12), component
            assert balance["out_mol_s"] == pytest.approx(left, rel=1e-12), component
            assert balance["made_mol_s"] == 0
            assert abs(balance["closure"]) <= 1e-9
        assert set(answer["balance"]["components"]) == set(COMPONENTS)

    def test_milligrams_per_normal_cubic_metre(self, answer):
        # 22.414 litres a mole at 0 degC and 101.325 kPa (molar gas constant of CODATA 2018).
        per_mole = 8.31446261815324 * 273.15 / 101325
        cleaned = answer["streams"]["cleaned"]
        expected = cleaned["fraction"]["toluene"] * 92.14e3 / per_mole
        assert cleaned["mg_per_Nm3"]["toluene"] == pytest.approx(expected, rel=1e-9)

    def test_unreached_requirement_is_exit_status_one(self, example):
        answer = solved(example, "--set", "requirements.outlet.equals=1e-6", status=1)
        assert answer["status"] == "out_of_reach"
        assert answer["requirements"]["outlet"]["reached"] is False


class TestSet:
    def test_strings_with_units(self, example):
        answer = solved(example, "--set", "feeds.vent.flow=12 mol/s")
        assert answer["streams"]["vent"]["total_mol_s"] == pytest.approx(12, rel=1e-12)
        assert answer["streams"]["vent"]["mol_s"]["toluene"] == pytest.approx(0.24, rel=1e-12)

    def test_quoted_strings_and_several_at_once(self, example):
        answer = solved(example, "--set", 'feeds.vent.flow="40 kmol/h"',
                        "--set", "units.wash.stages=10",
                        "--set", "feeds.steam.flows.steam=1.3 mol/s")
        assert answer["streams"]["vent"]["total_mol_s"] == pytest.approx(40 / 3.6, rel=1e-12)
        assert len(answer["units"]["wash"]["profile"]["stage"]) == 10
        assert answer["streams"]["steam"]["mol_s"]["steam"] == pytest.approx(1.3, rel=1e-12)

    def test_normal_cubic_metres(self, example):
        answer = solved(example, "--set", "feeds.vent.flow=0.25 Nm3/s")
        assert answer["streams"]["vent"]["total_mol_s"] == pytest.approx(
            0.25 * 101325 / (8.31446261815324 * 273.15), rel=1e-9)

    def test_plain_number_for_a_dimension_is_wrong_input(self, example):
        expect_faults(run("solve", example, "--set", "feeds.vent.flow=12"), example,
                      [("feeds.vent.flow", ())], exactly=1)

    def test_unknown_address(self, example):
        expect_faults(run("solve", example, "--set", "units.wsh.stages=3"), example,
                      [("units.wsh", ("wash",))], exactly=1)


class TestCheck:
    def test_keys(self, checked):
        assert set(checked) >= {"order", "loops", "solved_together", "tears", "freedom"}

    def test_loop_and_tear(self, checked):
        (loop,) = checked["loops"]
        assert sorted(loop) == LOOP_UNITS
        assert len(checked["tears"]) == 1 and checked["tears"][0] in LOOP_STREAMS

    def test_order_can_be_calculated(self, checked):
        takes = {"wash": ["vent", "cool_lean"], "preheat": ["rich"], "strip": ["hot_rich", "steam"],
                 "divide": ["lean"], "top_up": ["kept"], "trim": ["topped_lean"]}
        gives = {"wash": ["cleaned", "rich"], "preheat": ["hot_rich"],
                 "strip": ["overhead", "lean"], "divide": ["bleed", "kept"],
                 "top_up": ["topped_lean"], "trim": ["cool_lean"]}
        assert sorted(checked["order"]) == LOOP_UNITS
        known = {"vent", "steam", *checked["tears"]}
        for unit in checked["order"]:
            assert set(takes[unit]) <= known, unit
            known |= set(gives[unit])

    def test_prints_text(self, example):
        done = run("check", example)
        assert (done.returncode, done.stderr) == (0, "")
        assert "cool_lean" in done.stdout or "rich" in done.stdout

    def test_an_open_train_has_no_loops(self, tmp_path):
        text = scenes.column("absorber", 3, ["a"], {"inert": 10.0, "a": 0.1}, {"oil": 5.0},
                             {"a": scenes.constant(0.3)})
        done = run("check", scenes.write(tmp_path, text), "--json", "-")
        checked = strict_json(done.stdout)
        assert (checked["order"], checked["loops"], checked["tears"]) == (["column"], [], [])


def expect_faults(done, path, faults, exactly=None):
    """Exit status 2, nothing on standard output, one well-formed line for each fault."""
    assert done.returncode == 2, done.stdout + done.stderr
    assert done.stdout == ""
    assert "Traceback" not in done.stderr
    lines = done.stderr.splitlines()
    for line in lines:
        assert re.fullmatch(re.escape(str(path)) + r": [^:;]+: [^;]+.*; .+", line), line
    addresses = [line.removeprefix(f"{path}: ").split(": ", 1)[0] for line in lines]
    for address, words in faults:
        hits = [line for where, line in zip(addresses, lines, strict=True) if address in where]
        assert hits, f"nothing said about {address}:\n{done.stderr}"
        for word in words:
            assert any(word in line for line in hits), f"{word} is not in {hits}"
    if exactly is not None:
        assert len(lines) == exactly, done.stderr


def edited(*edits):
    text = EXAMPLE
    for old, new in edits:
        assert text.count(old) == 1, old
        text = text.replace(old, new)
    return text


# name: (edit, address, words that the line must hold, how many lines in all or None)
FAULTS = {
    "unknown kind": (('kind = "absorber"', 'kind = "absorbor"'),
                     "units.wash.kind", ("absorbor", "absorber"), 1),
    "missing key": (("stages = 8\n", ""), "units.wash", ("stages",), 1),
    "unknown component in a feed": (("toluene = 0.02 }", "tolune = 0.02 }"),
                                    "feeds.vent.fractions", ("tolune", "toluene"), 1),
    "unknown component in an equilibrium table": (
        ('toluene = { model = "constant", K = 0.1 }',
         'toluene = { model = "constant", K = 0.1 }\ntolune = { model = "constant", K = 0.1 }'),
        "equilibrium.cold", ("tolune", "toluene"), 1),
    "component without a model": (('[equilibrium.cold]\ntoluene = { model = "constant", K = 0.1 }',
                                   "[equilibrium.cold]"), "equilibrium.cold", ("toluene",), None),
    "unknown model": (('model = "constant"', 'model = "constnat"'),
                      "equilibrium.cold.toluene", ("constnat", "constant"), 1),
    "unknown equilibrium table": (('equilibrium = "cold"', 'equilibrium = "colt"'),
                                  "units.wash.equilibrium", ("colt", "cold"), 1),
    "dangling stream": (('takes = "rich"', 'takes = "rihc"'), "", ("rihc", "rich"), None),
    "stream given twice": (('gas_out = "overhead"', 'gas_out = "cleaned"'), "", ("cleaned",), None),
    "stream taken twice": (('takes = "topped_lean"', 'takes = "rich"'), "", ("rich",), None),
    "wrong dimension": (('temperature = "150 degC"', 'temperature = "3 bar"'),
                        "units.preheat.temperature", ("3 bar",), 1),
    "unknown unit of measure": (('flow = "10 mol/s"', 'flow = "10 mol/fortnight"'),
                                "feeds.vent.flow", ("fortnight",), 1),
    "plain number for a dimension": (('flow = "10 mol/s"', "flow = 10"),
                                     "feeds.vent.flow", ("mol/s",), 1),
    "misspelt key": (('gives = "hot_rich"\ntemperature', 'gives = "hot_rich"\ntempreature'),
                     "units.preheat", ("tempreature", "temperature"), None),
    "misspelt table": (("[requirements.outlet]", "[requirement.outlet]"),
                       "requirement", ("requirements",), None),
    "fractions that do not make one": (('air = "rest", toluene', "air = 0.9, toluene"),
                                       "feeds.vent.fractions", (), 1),
    "fraction beyond one": (("toluene = 0.02 }", "toluene = 1.2 }"),
                            "feeds.vent.fractions", (), None),
    "stages not whole": (("stages = 8", "stages = 8.5"), "units.wash.stages", ("8.5",), 1),
    "share beyond one": (("bleed = 1e-3", "bleed = 1.5"), "units.divide.shares", ("1.5",), 1),
    "unknown quantity": (('"streams.cleaned.fraction', '"streams.cleand.fraction'),
                         "requirements.outlet.quantity", ("cleand", "cleaned"), 1),
    "unknown input to free": (('"units.top_up.hold.oil"', '"units.topup.hold.oil"'),
                              "requirements.outlet.free", ("topup", "top_up"), 1),
    "unknown recycle method": (('method = "newton"', 'method = "newtown"'),
                               "loop.method", ("newtown", "newton"), 1),
    "unknown tear stream": (("tolerance = 1e-10", 'tolerance = 1e-10\ntears = ["cool_leen"]'),
                            "loop.tears", ("cool_leen", "cool_lean"), 1),
    "tears that leave the loop whole": (
        ("tolerance = 1e-10", 'tolerance = 1e-10\ntears = ["vent"]'), "loop.tears", ("vent",), 1),
}


class TestWrongInput:
    @pytest.mark.parametrize("name", FAULTS)
    def test_one_fault(self, tmp_path, name):
        edit, address, words, count = FAULTS[name]
        path = scenes.write(tmp_path, edited(edit))
        expect_faults(run("check", path), path, [(address, words)], exactly=count)

    def test_all_faults_at_once_and_nothing_written(self, tmp_path):
        names = ["unknown component in a feed", "unknown kind", "wrong dimension",
                 "share beyond one", "unknown recycle method", "unknown model"]
        path = scenes.write(tmp_path, edited(*(FAULTS[name][0] for name in names)))
        done = run("solve", path, "--json", tmp_path / "answer.json")
        expect_faults(done, path, [FAULTS[name][1:3] for name in names], exactly=len(names))
        assert not (tmp_path / "answer.json").exists()

    def test_faults_in_file_and_in_set_together(self, tmp_path):
        path = scenes.write(tmp_path, edited(FAULTS["wrong dimension"][0]))
        done = run("solve", path, "--set", "feeds.vent.flow=12")
        expect_faults(done, path, [("units.preheat.temperature", ()), ("feeds.vent.flow", ())],
                      exactly=2)

    def test_text_that_is_not_toml(self, tmp_path):
        path = scenes.write(tmp_path, EXAMPLE.replace("stages = 8", "stages = = 8"))
        expect_faults(run("check", path), path, [], exactly=1)

    def test_no_such_file(self, tmp_path):
        path = tmp_path / "absent.toml"
        done = run("solve", path)
        assert (done.returncode, done.stdout) == (2, "")
        (line,) = done.stderr.splitlines()
        assert line.startswith(f"{path}: ") and "; " in line

    def test_a_way_in_and_no_way_out(self, tmp_path):
        # A non-volatile impurity is fed into the loop and no bleed lets it go: no steady state.
        text = scenes.loop((3, 3), {"a": scenes.constant(0.2)}, {"a": scenes.constant(2.0)},
                           50.0, 100.0, 60.0, {"a": 0.01}, impurity=0.01)
        path = scenes.write(tmp_path, text)
        expect_faults(run("solve", path), path, [("", ("tar",))])

    def test_wrong_use_of_the_command(self):
        done = run("solve")
        assert done.returncode == 2
        assert "Traceback" not in done.stderr and done.stderr
