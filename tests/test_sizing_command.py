"""The command that sizes: files and exit status from end to end, and every entry written wrong."""

import copy
import csv
import json
import math
import os
import re
import subprocess
import sys
import tomllib
from pathlib import Path

import numpy as np
import pytest

import leanloop
from leanloop.cli import main
from leanloop.textfile.writer import text as written

PLANT = """
title = "A small pair"
[feeds.vent]
phase = "gas"
temperature = "28 degC"
pressure = "1.06 bar"
flow = "900 Nm3/h"
fractions = { air = "rest", toluene = "1.1 %" }
[feeds.steam]
phase = "gas"
temperature = "155 degC"
pressure = "1.20 bar"
flow = "75 kg/h"
fractions = { steam = 1.0 }
[units.wash]
kind = "absorber"
gas_in = "vent"
liquid_in = "cool_lean"
gas_out = "cleaned"
liquid_out = "rich"
stages = 9
equilibrium = "oil"
[units.swap]
kind = "exchanger"
hot_in = "lean"
hot_out = "warm_lean"
cold_in = "rich"
cold_out = "warm_rich"
UA = "300 W/K"
[units.preheat]
kind = "heater"
takes = "warm_rich"
gives = "hot_rich"
temperature = "150 degC"
[units.strip]
kind = "stripper"
liquid_in = "hot_rich"
gas_in = "steam"
gas_out = "overhead"
liquid_out = "lean"
stages = 7
equilibrium = "oil"
[units.top_up]
kind = "makeup"
takes = "warm_lean"
gives = "topped"
hold = { oil = "3.5 kmol/h" }
[units.trim]
kind = "cooler"
takes = "topped"
gives = "cool_lean"
temperature = "28 degC"
[requirements.emission]
quantity = "streams.cleaned.fraction.toluene"
equals = "40 ppm"
free = "units.top_up.hold.oil"
between = ["1 kmol/h", "10 kmol/h"]
[components]
air = { molar_mass = "28.96 g/mol", stays_in = "gas" }
toluene = { molar_mass = "92.14 g/mol" }
oil = { molar_mass = "250 g/mol", stays_in = "liquid" }
steam = { molar_mass = "18.02 g/mol", stays_in = "gas" }
[equilibrium.oil.toluene]
model = "raoult"
activity = { a = -0.78, b = 188.6 }
vapour_pressure = { form = "antoine", A = 6.95, B = 1345.0, C = 219.5, pressure = "mmHg", temperature = "degC" }
[heat_data.oil]
liquid_heat_capacity = "500 J/(mol K)"
[heat_data.steam]
gas_heat_capacity = "34 J/(mol K)"
[heat_data.air]
gas_heat_capacity = "29 J/(mol K)"
[heat_data.toluene]
liquid_heat_capacity = "157 J/(mol K)"
gas_heat_capacity = "104 J/(mol K)"
heat_of_vaporisation = "38 kJ/mol"
"""
SIZING = """
[sizing]
hold = ["emission"]
stages = { wash = [9, 10], strip = [7, 7] }
change = { "feeds.steam.flow" = ["75 kg/h", "80 kg/h"] }
choose = "cheapest"
record = ["streams.lean.loading.toluene"]
match = { wash = { quantity = "streams.cleaned.fraction.toluene", equals = "60 ppm", height = "8 m", trays = 20 } }
[sizing.cases.summer]
"feeds.vent.flow" = "920 Nm3/h"
[sizing.columns.wash]
internals = "packing"
packing = "pall_metal_50"
hetp = "0.65 m"
most_drop = "250 Pa/m"
flood = 0.7
rate_margin = 1.1
standard = true
ends = "2 m"
key = "toluene"
flood_by = "kister_gill"
drop_by = "billet_schultes"
[sizing.columns.strip]
internals = "trays"
spacing = "0.45 m"
oconnell = true
system_factor = 0.9
capacity = "fair"
hole_area = 0.1
hole_diameter = "5 mm"
weir_height = "50 mm"
downcomer = 0.12
liquid_density = "760 kg/m3"
liquid_viscosity = "0.9 mPa s"
surface_tension = "22 mN/m"
gas_density = "0.8 kg/m3"
[sizing.exchangers.swap]
coefficient = "400 W/(m2 K)"
[sizing.prices]
steam = "28 /t"
heat = "9 /GJ"
solvent = "2.1 /kg"
column = "18000 /m3"
exchanger = "400 /m2"
hours = 8000
yearly = 0.15
[properties.oil]
liquid_density = "860 kg/m3"
liquid_viscosity = "7 mPa s"
surface_tension = "29 mN/m"
[properties.toluene]
liquid_density = "862 kg/m3"
liquid_viscosity = "0.56 mPa s"
surface_tension = "28 mN/m"
gas_viscosity = "0.007 mPa s"
molar_volume = "118 cm3/mol"
[properties.air]
gas_viscosity = "0.0185 mPa s"
"""
LINE = re.compile(r"(?P<source>\S+\.toml): (?P<address>.+?): (?P<problem>.+?); (?P<remedy>.+)")


def write(folder, text, name="own.toml"):
    path = folder / name
    path.write_text(text, encoding="utf-8")
    return path


def run(capsys, *arguments):
    """Exit status, standard output, and lines of standard error."""
    capsys.readouterr()
    status = main([str(item) for item in arguments])
    out, err = capsys.readouterr()
    return status, out, err.splitlines()


def rows_of(path):
    return list(csv.DictReader(path.read_text(encoding="utf-8").splitlines()))


class TestEndToEnd:
    def test_as_a_process(self, tmp_path):
        """Everything at once: report, JSON, table, design; the design solves to the numbers of its row."""
        path = write(tmp_path, PLANT + SIZING)
        there = {**os.environ, "PYTHONPATH": str(Path(leanloop.__file__).parents[1])}
        ways = {"cwd": tmp_path, "capture_output": True, "text": True, "env": there}
        call = [sys.executable, "-W", "error", "-m", "leanloop"]
        more = ["--json", "own.json", "--tables", "out", "--write", "design.toml"]
        done = subprocess.run([*call, "size", path.name, *more], **ways)
        assert done.returncode == 0 and done.stderr == "", done.stderr
        found = json.loads((tmp_path / "own.json").read_text(encoding="utf-8"))
        rows = rows_of(tmp_path / "out" / "designs.csv")
        assert len(rows) == len(found["designs"]["design"]) == 4
        chosen = found["chosen"]
        assert chosen == found["cheapest"] and f"Design {chosen}" in done.stdout
        for words in ("Column wash", "Column strip", "Designs by cost", "exchanger swap", "What margins cost", "What plant data"):
            assert words in done.stdout
        solved = subprocess.run([*call, "solve", "design.toml", "--json", "-"], **ways)
        assert solved.returncode == 0 and solved.stderr == ""
        own = json.loads(solved.stdout)
        oil = float(rows[chosen]["units.top_up.hold.oil in as_written"])
        assert own["streams"]["topped"]["mol_s"]["oil"] == pytest.approx(oil, rel=1e-12)

    def test_json_to_standard_output(self, tmp_path, capsys):
        path = write(tmp_path, PLANT + SIZING)
        status, out, err = run(capsys, "size", path, "--json", "-", "--tables", tmp_path / "out", "--json", tmp_path / "a.json")
        assert status == 0 and out.startswith("A small pair") and err == []
        status, out, err = run(capsys, "size", path, "--json", "-")
        assert status == 0 and err == []
        assert json.loads(out) == json.loads((tmp_path / "a.json").read_text(encoding="utf-8"))
        assert "NaN" not in out and "Infinity" not in out

    def test_no_design(self, tmp_path, capsys):
        """Status 1; nothing is written as a design, the table with the reasons is."""
        path = write(tmp_path, PLANT.replace('"40 ppm"', '"1e-9 ppm"') + SIZING)
        status, out, err = run(capsys, "size", path, "--write", tmp_path / "design.toml", "--tables", tmp_path / "out", "--json",
                               tmp_path / "a.json")  # fmt: skip
        assert status == 1 and len(err) == 1 and "no design could be chosen" in err[0]
        assert not (tmp_path / "design.toml").exists()
        rows = rows_of(tmp_path / "out" / "designs.csv")
        assert len(rows) == 4 and all(row["status"] == "out_of_reach" and "emission" in row["reason"] for row in rows)
        found = json.loads((tmp_path / "a.json").read_text(encoding="utf-8"))
        assert found["chosen"] is found["knee"] is found["cheapest"] is None and found["pareto"] == []
        assert "none of them met" in out and "Designs that could not be" in out

    def test_some_designs(self, tmp_path, capsys):
        path = write(tmp_path, PLANT + SIZING.replace("[9, 10]", "[2, 10]"))
        status, out, err = run(capsys, "size", path)
        assert status == 0 and err == [] and "Designs that could not be" in out

    def test_file_asks_for_nothing(self, tmp_path, capsys):
        status, out, err = run(capsys, "size", write(tmp_path, PLANT))
        assert status == 2 and out == "" and len(err) == 1 and LINE.fullmatch(err[0])
        status, out, err = run(capsys, "size", write(tmp_path, PLANT + "[sizing]\n"))
        assert status == 2 and out == "" and len(err) == 1 and LINE.fullmatch(err[0])

    def test_nothing_is_half_written(self, tmp_path, capsys):
        path = write(tmp_path, PLANT + SIZING)
        (tmp_path / "taken").write_text("a file", encoding="utf-8")
        status, out, err = run(capsys, "size", path, "--tables", tmp_path / "taken", "--write", tmp_path / "design.toml")
        assert status == 2 and out == "" and len(err) == 1
        assert not (tmp_path / "design.toml").exists()

    def test_settings(self, tmp_path, capsys):
        """What is set is sized, and what is set wrongly is refused; the scan itself may be set."""
        path = write(tmp_path, PLANT + SIZING)
        status, out, _ = run(capsys, "size", path, "--set", "sizing.stages.wash=[9, 11]", "--json", "-")
        assert status == 0 and set(json.loads(out)["designs"]["units.wash.stages"]) == {9, 10, 11}
        status, out, err = run(capsys, "size", path, "--set", "sizing.stages.wash=[9, 0]")
        assert status == 2 and out == "" and all(LINE.fullmatch(line) for line in err)

    def test_order_of_ends(self, tmp_path, capsys):
        """A range written from above is the same scan."""
        one, two = (json.loads(run(capsys, "size", write(tmp_path, PLANT + SIZING.replace("[9, 10]", item)), "--json", "-")[1])
                    for item in ("[9, 10]", "[10, 9]"))  # fmt: skip
        assert sorted(one["designs"]["units.wash.stages"]) == sorted(two["designs"]["units.wash.stages"])
        assert one["designs"]["cost.total"][one["chosen"]] == two["designs"]["cost.total"][two["chosen"]]


# --- entries written wrong

HUGE = 10**400
WRONG = {
    str: [True, 3, -1.5, [], ["a"], {}, {"a": 1}, "words", "", math.nan, math.inf, "nan m", "-1 kg/m3", HUGE],
    bool: [3, "words", [], {}, math.nan],
    int: [True, "words", "3 m", [], [1], {}, math.nan, math.inf, -1, HUGE],
    float: [True, "words", "3 m", [], [1], {}, math.nan, math.inf, -1.0, HUGE],
    list: [True, 5, "words", {}, {"a": 1}, math.nan, [{}], [["x"]], [math.nan], ["words"], [True, False]],
    dict: [True, 5, "words", [], [1], math.nan, {"words": 3}, {"words": {}}, {"": {"": 1}}],
}


def places(table, path=()):
    """Paths of all entries of nested tables."""
    for key, item in table.items():
        yield (*path, key)
        if isinstance(item, dict):
            yield from places(item, (*path, key))


def spoilt(data, path, value):
    out = copy.deepcopy(data)
    own = out
    for key in path[:-1]:
        own = own[key]
    own[path[-1]] = value
    return out


RIGHT = tomllib.loads(PLANT + SIZING)
PATHS = [("sizing", *path) for path in places(RIGHT["sizing"])] + [("properties", *path) for path in places(RIGHT["properties"])]
FINE = {("sizing", "match", "wash", "equals"): (3, -1.5)}  # a fraction that no column gives is no wrong input


def dotted(path):
    return ".".join(f'"{key}"' if "." in key else key for key in path)


def plain(address):
    return address.replace('"', "")


@pytest.mark.parametrize("path", PATHS, ids=dotted)
def test_wrong_value(tmp_path, capsys, path):
    """Each is refused by every command, in one line at its own address or the one it stands in, with a way out."""
    own = RIGHT
    for key in path:
        own = own[key]
    for place, value in enumerate(WRONG[type(own)]):
        if value in FINE.get(path, ()) and not isinstance(value, bool):
            continue
        file = write(tmp_path, written(spoilt(RIGHT, path, value)))
        told = {}
        commands = ("size", "check", "solve") if place < 3 else ("size",)
        for command in commands:
            status, out, err = run(capsys, command, file)
            assert status == 2, (command, value, out[:300])
            assert out == "" and err, (command, value)
            told[command] = err
            for line in err:
                match = LINE.fullmatch(line)
                assert match, (command, value, line)
        assert all(told[command] == told["size"] for command in commands)
        where = plain(dotted(path))
        addresses = [plain(LINE.fullmatch(line)["address"]) for line in told["size"]]
        near = [item for item in addresses if item.startswith(where) or where.startswith(item)]
        assert near or value == {} or value in ([], [1]) and isinstance(own, dict), (value, told["size"])


@pytest.mark.parametrize("path", PATHS, ids=dotted)
def test_wrong_object_in_python(path):
    """The same from Python, with what no file can hold."""
    for value in (None, object(), np.array([1.0, np.nan]), np.nan, b"bytes", {1: 2}, {None: None}, [None], [object()], 1j, HUGE):
        data = spoilt(RIGHT, path, value)
        entries = data.pop("sizing")
        try:
            leanloop.size(leanloop.Flowsheet(**data, plain_si=False), **entries)
        except leanloop.InputError as error:
            assert all("\n" not in str(fault) and fault.address and fault.remedy for fault in error.faults)
        else:
            # only what says nothing may be taken for an entry left out
            assert value is None, (path, value)


@pytest.mark.parametrize("path", PATHS, ids=dotted)
def test_entry_left_out(tmp_path, capsys, path):
    """Read and sized, or refused in whole lines."""
    data = copy.deepcopy(RIGHT)
    if path[1] not in ("match", "cases"):  # these take the most time
        del data["sizing"]["match"], data["sizing"]["cases"]
    data["sizing"] |= {"stages": {"wash": [9, 9], "strip": [7, 7]}}
    own = data
    for key in path[:-1]:
        own = own[key]
    del own[path[-1]]
    status, out, err = run(capsys, "size", write(tmp_path, written(data)))
    assert status in (0, 1, 2)
    if status == 2:
        assert out == "" and err and all(LINE.fullmatch(line) for line in err)
    else:
        assert out and err == []


@pytest.mark.parametrize("path", sorted({path[:-1] for path in PATHS if len(path) > 1}), ids=dotted)
def test_unknown_entry(tmp_path, capsys, path):
    """A letter too many, and words of another script."""
    for name in ("flod", "naïve", "a.b", "x\ny", ""):
        data = spoilt(RIGHT, (*path, name), 1.0)
        status, out, err = run(capsys, "size", write(tmp_path, written(data)))
        assert status == 2 and out == "" and len(err) == 1, (name, err)
        assert LINE.fullmatch(err[0])


def test_every_fault_at_once(tmp_path, capsys):
    """One wrong entry in each table: as many lines, each at its address."""
    wrong = {
        ("sizing", "hold"): ["emision"], ("sizing", "stages", "wash"): [0, 4], ("sizing", "choose"): "nicest",
        ("sizing", "record"): ["streams.nowhere.fraction.toluene"], ("sizing", "change", "feeds.steam.flow"): ["75 m"],
        ("sizing", "cases", "summer", "feeds.vent.flow"): "920 kg", ("sizing", "columns", "wash", "flood"): 1.5,
        ("sizing", "columns", "strip", "spacing"): "0.5 s", ("sizing", "exchangers", "swap", "coefficient"): 400,
        ("sizing", "prices", "steam"): "28 /m3", ("sizing", "match", "wash", "height"): "8 kg",
        ("properties", "oil", "liquid_density"): "860",
    }  # fmt: skip
    data = RIGHT
    for path, value in wrong.items():
        data = spoilt(data, path, value)
    for command in ("size", "check", "solve"):
        status, out, err = run(capsys, command, write(tmp_path, written(data)))
        assert status == 2 and out == ""
        told = [plain(LINE.fullmatch(line)["address"]) for line in err]
        for path in wrong:
            assert sum(item.startswith(plain(dotted(path))) for item in told) == 1, (path, err)
        assert len(told) == len(wrong)


def test_progress_counts_up_to_all_cases():
    told = []
    sheet = leanloop.read(Path(__file__).resolve().parents[1] / "flowsheets" / "coating_vent.toml")
    stages = {"wash": [8, 9], "strip": [7, 8]}
    leanloop.size(sheet, hold=["emission"], stages=stages, progress=lambda done, count: told.append((done, count)))
    assert told and told == sorted(told)
    assert told[-1] == (4, 4)
