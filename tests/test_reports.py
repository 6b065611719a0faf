"""What a person reads: the report, the tables and the catalogue, against the JSON and the Python results."""

import csv
import json
import re
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
import scenes

import leanloop
from leanloop.equilibrium import MODELS
from leanloop.recycle import METHODS
from leanloop.units import KINDS

FOLDER = Path(__file__).resolve().parents[1] / "flowsheets"
VENT, SCRUBBER = FOLDER / "coating_vent.toml", FOLDER / "acetone_scrubber.toml"
HOLD = "units.top_up.hold.oil"
DIGITS = 5.1e-5  # half a unit in the last of five figures


def run(*arguments):
    return subprocess.run([sys.executable, "-m", "leanloop", *map(str, arguments)], capture_output=True, text=True, check=False)


def plain_loop():
    return scenes.loop((5, 4), {"sol": scenes.constant(0.15), "odd": scenes.constant(0.4)},
                       {"sol": scenes.constant(2.0), "odd": scenes.constant(3.0)}, 2.0, 10.0, 1.5,
                       {"sol": 0.02, "odd": 0.01}, purge=0.01, impurity=0.001)  # fmt: skip


@pytest.fixture(scope="module")
def results(tmp_path_factory):
    plain = tmp_path_factory.mktemp("plain") / "loop.toml"
    plain.write_text(plain_loop(), encoding="utf-8")
    steam = np.array([0.02, 1e-4, 0.03])
    return {
        "vent": leanloop.read(VENT).solve(),
        "scrubber": leanloop.read(SCRUBBER).solve(),
        "plain": leanloop.read(plain).solve(),
        "turning": leanloop.read(VENT, ["requirements.emission.equals=1 mg/Nm3"]).solve(),
        "bound": leanloop.read(VENT, ['requirements.emission.between=["4 kmol/h", "5 kmol/h"]']).solve(),
        "passes": leanloop.read(VENT, ["loop.passes=1"]).solve(),
        "dry": leanloop.read(plain).solve({"feeds.dirt.flows.tar": 0.0, HOLD: 0.0}),
        "batch": leanloop.read(VENT).solve({"feeds.steam.flow": steam}),
        "short batch": leanloop.read(SCRUBBER).solve({"units.warm.temperature": np.array([330.0])}),
    }


SINGLE = ["vent", "scrubber", "plain", "turning", "bound", "passes"]
EVERY = [*SINGLE, "dry", "batch", "short batch"]
EXPECTED = {"turning": "out_of_reach", "bound": "out_of_reach", "passes": "pass_limit"}


def lines_of(text, head):
    """Lines that follow a head until the next empty one."""
    lines = text.splitlines()
    start = next(n for n, line in enumerate(lines) if line.startswith(head))
    end = next((n for n in range(start + 1, len(lines)) if not lines[n]), len(lines))
    return lines[start + 1 : end]


def cells(line):
    return re.split(r" {2,}", line.strip())


def close(shown, value, rel=DIGITS):
    if value is None:
        assert shown == "-"
    else:
        assert float(shown) == pytest.approx(value, rel=rel, abs=0)


class TestEveryReport:
    @pytest.mark.parametrize("name", EVERY)
    def test_has_no_figures_that_are_none(self, results, name):
        text = str(results[name])
        assert not re.search(r"\b(nan|none|inf|infinity|null)\b", text.replace("torn streams: none", ""), re.IGNORECASE)
        assert all(sign.isprintable() or sign == "\n" for sign in text)
        assert text == text.encode("utf-8").decode("utf-8")
        assert not any(line != line.rstrip() for line in text.splitlines())

    @pytest.mark.parametrize("name", ["vent", "scrubber", "plain"])
    def test_fits_a_page(self, results, name):
        assert max(map(len, str(results[name]).splitlines())) <= 160

    @pytest.mark.parametrize("name", SINGLE)
    def test_tells_the_status(self, results, name):
        result = results[name]
        assert result.status == EXPECTED.get(name, "converged")
        assert f"Status: {result.status}. {result.status_text}" in str(result).splitlines()
        assert len(result.status_text.split()) >= 4

    @pytest.mark.parametrize("name", EVERY)
    def test_tells_the_cautions(self, results, name):
        result = results[name]
        own = lines_of(str(result), "Cautions")
        assert all(line.startswith("  * ") for line in own)
        for sentence in result.to_dict()["cautions"]:
            assert f"  * {sentence}" in own
        text = " ".join(own)
        assert "licensed engineer" in text and "safety review" in text and "No heat is balanced" in text

    @pytest.mark.parametrize("name", ["vent", "batch"])
    def test_tells_what_is_amiss_with_pressure(self, results, name):
        assert any("less than the column's pressure" in sentence for sentence in results[name].to_dict()["cautions"])

    def test_of_a_case_without_an_answer(self, results):
        """Nothing is made up: dashes stand for what was not calculated."""
        assert results["dry"].status == "dry_stage"
        assert f"Status: dry_stage. {results['dry'].status_text}" in str(results["dry"]).splitlines()
        assert {cells(line)[-1] for line in lines_of(str(results["dry"]), "Combined balance")[1:]} == {"-"}

    def test_print(self, results, capsys):
        print(results["vent"])
        assert capsys.readouterr().out.rstrip() == run("solve", VENT).stdout.rstrip()

    def test_batch_counts_its_cases(self, results):
        result = results["batch"]
        text = str(result)
        assert list(result.status) == ["converged", "out_of_reach", "converged"]
        assert "3 cases" in text.splitlines()
        assert "  converged: 2" in text.splitlines()
        line = next(line for line in text.splitlines() if line.startswith("  out_of_reach: 1"))
        assert "case 1" in line and result.status_text[1] in line


class TestSingleReport:
    @pytest.mark.parametrize("name", SINGLE)
    def test_circulation_and_loadings(self, results, name):
        data, text = results[name].to_dict(), str(results[name])
        own = lines_of(text, "Solvent loop")
        solvent = {"scrubber": "water"}.get(name, "oil")
        seen = 0
        for number, line in enumerate(own):
            match = re.match(r"  (\w+): (\S+) kmol/h of (\w+), lean stream (\w+), rich stream (\w+)$", line)
            if not match:
                continue
            unit, shown, basis, lean, rich = match.groups()
            assert basis == solvent
            close(shown, data["streams"][lean]["mol_s"][solvent] * 3.6)
            assert cells(own[number + 1]) == ["loading, mol/mol", "lean", "rich", "cyclic capacity"]
            solutes = {"scrubber": 1, "plain": 2}.get(name, 1)
            for row in own[number + 2 : number + 2 + solutes]:
                solute, *figures = cells(row)
                ends = [data["streams"][stream]["loading"][solute] for stream in (lean, rich)]
                for figure, value in zip(figures, [*ends, ends[1] - ends[0]], strict=True):
                    close(figure, value)
                seen += 1
            assert data["units"][unit]["kind"] in ("absorber", "stripper")
        assert seen == 2 * {"plain": 2}.get(name, 1)

    @pytest.mark.parametrize("name", SINGLE)
    def test_make_up_and_bleed(self, results, name):
        data, text = results[name].to_dict(), str(results[name])
        (line,) = [line for line in text.splitlines() if " adds " in line]
        match = re.match(r"  top_up adds (\S+) kmol/h of (\w+)$", line)
        close(match[1], data["units"]["top_up"]["results"]["added_mol_s"][match[2]] * 3.6)
        bleed = {"scrubber": "blowdown"}.get(name, "bleed")
        head, *rows = lines_of(text, "Streams")
        assert [row.split()[0] for row in rows] == list(data["streams"])
        names = cells(head)[7:]
        row = next(cells(row) for row in rows if row.split()[0] == bleed)
        for component, shown in zip(names, row[7:], strict=True):
            close(shown, data["streams"][bleed]["mol_s"][component] * 3.6)

    @pytest.mark.parametrize("name", SINGLE)
    def test_streams(self, results, name):
        data = results[name].to_dict()["streams"]
        head, *rows = lines_of(str(results[name]), "Streams")
        assert cells(head)[:7] == ["stream", "phase", "degC", "bar", "kg/h", "Nm3/h", "kmol/h"]
        masses = {"vent": 1190.8, "steam": 75.0} if name == "vent" else {}  # from the file, and as in the README
        for row in rows:
            stream, phase, celsius, bar, mass, normal, total, *_ = cells(row)
            item = data[stream]
            assert phase == item["phase"]
            close(celsius, item["temperature_K"] - 273.15, 5.1e-4)
            close(bar, item["pressure_Pa"] / 1e5, 5.1e-4)
            close(total, item["total_mol_s"] * 3.6)
            close(normal, item["total_mol_s"] * 3600 * 8.31446261815324 * 273.15 / 101325 if phase == "gas" else None)
            if stream in masses:
                close(mass, masses[stream])

    @pytest.mark.parametrize("name", SINGLE)
    def test_closures(self, results, name):
        data = results[name].to_dict()["balance"]["components"]
        head, *rows = lines_of(str(results[name]), "Combined balance")
        assert cells(head)[-1] == "closure"
        assert [cells(row)[0] for row in rows] == list(data)
        for row in rows:
            component, come, gone, closure = cells(row)
            close(come, data[component]["in_mol_s"] * 3.6, 5.1e-7)
            close(gone, data[component]["out_mol_s"] * 3.6, 5.1e-7)
            close(closure, data[component]["closure"], 0.051)

    @pytest.mark.parametrize("name", SINGLE)
    def test_columns(self, results, name):
        data = results[name].to_dict()["units"]
        for unit in ("strip", "scrub" if name == "scrubber" else "wash"):
            profile, found = data[unit]["profile"], data[unit]["results"]
            own = lines_of(str(results[name]), f"Column {unit} ")
            for component, value in found["removal"].items():
                rows = [cells(row) for row in own if row.split()[0] == component]
                close(rows[0][1], value)
                place = next(n for n, row in enumerate(own) if row.split()[0] == component and "liquid kmol/h" in row)
                for row, stage in ((own[place + 1], 0), (own[place + 2], -1)):
                    _, *figures = cells(row)
                    for figure, key in zip(figures, ("x", "y", "X", "Y", "K"), strict=False):
                        close(figure, profile[key][component][stage])
                    close(figures[5], profile["liquid_mol_s"][stage] * 3.6)
                    close(figures[6], profile["gas_mol_s"][stage] * 3.6)

    def test_requirements(self, results):
        text = str(results["vent"])
        free = results["vent"]["requirements.emission.free_value"]
        assert f"= 150.00 mg/Nm3: met, at 150.00 mg/Nm3 with units.top_up.hold.oil = {free * 3.6:.4f} kmol/h" in text
        (other,) = results["vent"].to_dict()["requirements"]["emission"]["other_solutions"]
        assert f"also solved by {other * 3.6:.4f} kmol/h" in text
        assert "<= 150.00 mg/Nm3: met" in str(results["scrubber"])
        assert "not met (turning_point)" in str(results["turning"])
        assert "not met (bound)" in str(results["bound"])

    def test_a_limit_that_holds_is_told(self):
        result = leanloop.read(SCRUBBER, ["requirements.emission.at_most=500 mg/Nm3"]).solve()
        assert not result["requirements.emission.active"]
        assert "<= 500.00 mg/Nm3: met" in str(result)
        assert "320.00 kmol/h, as given" in str(result)


# of every input that the reports below may show: its value in SI units, or None for a temperature, moved by 1 K
NORMAL = 101325 / (8.31446261815324 * 273.15)
INPUTS = {
    "vent": {
        "units.trim.temperature": None,
        "units.preheat.temperature": None,
        "feeds.vent.pressure": 1.06e5,
        "feeds.steam.pressure": 1.2e5,
        "feeds.vent.flow": 900 * NORMAL / 3600,
        "feeds.steam.flow": 75 / 3600,
        "feeds.vent.fractions.toluene": 0.011,
        "units.divide.shares.bleed": 2e-3,
        "equilibrium.oil.toluene.vapour_pressure.A": 6.95,
        "equilibrium.oil.toluene.vapour_pressure.B": 1345.0,
        "equilibrium.oil.toluene.vapour_pressure.C": 219.5,
        "equilibrium.oil.toluene.activity.a": -0.78,
        "equilibrium.oil.toluene.activity.b": 188.6,
        "requirements.emission.equals": 150.0,
    },
    "plain": {
        "feeds.vent.flows.inert": 10.0,
        "feeds.vent.flows.sol": 0.2,
        "feeds.vent.flows.odd": 0.1,
        "feeds.steam.flows.steam": 1.5,
        "feeds.dirt.flows.tar": 0.001,
        "units.divide.shares.bleed": 0.01,
        "units.top_up.hold.oil": 2.0,
        "equilibrium.cold.sol.K": 0.15,
        "equilibrium.cold.odd.K": 0.4,
        "equilibrium.hot.sol.K": 2.0,
        "equilibrium.hot.odd.K": 3.0,
    },
    "bound": {
        "units.trim.temperature": None,
        "units.preheat.temperature": None,
        "feeds.vent.pressure": 1.06e5,
        "feeds.steam.pressure": 1.2e5,
        "feeds.vent.flow": 900 * NORMAL / 3600,
        "feeds.steam.flow": 75 / 3600,
        "feeds.vent.fractions.toluene": 0.011,
        "equilibrium.oil.toluene.vapour_pressure.A": 6.95,
        "equilibrium.oil.toluene.vapour_pressure.B": 1345.0,
        "equilibrium.oil.toluene.vapour_pressure.C": 219.5,
        "equilibrium.oil.toluene.activity.a": -0.78,
        "equilibrium.oil.toluene.activity.b": 188.6,
        "units.divide.shares.bleed": 2e-3,
        "units.top_up.hold.oil": 4 / 3.6,
        "requirements.emission.equals": 150.0,
    },
}
ASKED = {
    "vent": {"What matters most to units.top_up.hold.oil": "requirements.emission.free_value"},
    "plain": {f"What matters most to streams.cleaned.fraction.{c}": f"streams.cleaned.fraction.{c}" for c in ("sol", "odd")},
    "bound": {"What matters most to streams.cleaned.mg_per_Nm3.toluene": "streams.cleaned.mg_per_Nm3.toluene"},
}


class TestElasticities:
    @pytest.mark.parametrize("name", ASKED)
    def test_are_the_sensitivities(self, results, name):
        result = results[name]
        for head, quantity in ASKED[name].items():
            titles, *rows = lines_of(str(result), head)
            assert cells(titles) == ["input", "more by", "moves it by"]
            shown = {}
            for row in rows:
                address, by, figure = cells(row)
                value = INPUTS[name][address]
                assert by == ("1 K" if value is None else "1 %")
                slope = result.sensitivity(quantity, address) / result[quantity]
                expected = 100 * slope if value is None else slope * value
                shown[address] = float(figure.removesuffix(" %"))
                assert figure.endswith(" %")
                assert shown[address] == pytest.approx(expected, rel=5.1e-3), address
            sizes = [abs(value) for value in shown.values()]
            assert sizes == sorted(sizes, reverse=True)
            assert 0 < len(sizes) <= 12
            for address, value in INPUTS[name].items():  # nothing larger is left out
                slope = result.sensitivity(quantity, address) / result[quantity]
                effect = abs(100 * slope if value is None else slope * value)
                assert address in shown or effect <= sizes[-1] * 1.006, address

    def test_of_what_cannot_be_reached_are_those_of_solves(self, results):
        """At a bound the freed input stays there: what is left moves as in a flowsheet without the requirement."""
        sheet = leanloop.read(VENT, ['requirements.emission.between=["4 kmol/h", "5 kmol/h"]'])
        quantity, steam, step = "streams.cleaned.mg_per_Nm3.toluene", 75 / 3600, 1e-6
        low, high = sheet.solve({"feeds.steam.flow": steam + step * np.array([-1, 1])})[quantity]
        assert results["bound"].sensitivity(quantity, "feeds.steam.flow") == pytest.approx((high - low) / (2 * step), rel=1e-5)

    def test_rounding_is_no_influence(self, results):
        """The cleanest gas of an unreachable wish depends on steam and temperatures; the wish itself does not move it."""
        rows = [cells(row) for row in lines_of(str(results["turning"]), "What matters most")[1:]]
        assert all(address != "requirements.emission.equals" for address, *_ in rows)
        assert all(abs(float(figure.removesuffix(" %"))) > 1e-6 for *_, figure in rows)


def read_csv(path):
    with path.open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def flat(table, head=""):
    for key, value in table.items():
        if isinstance(value, dict):
            yield from flat(value, f"{head}{key}.")
        else:
            yield head + key, value


def same_cell(cell, value):
    if value is None:
        assert cell == ""
    elif isinstance(value, (str, bool)):
        assert cell == str(value)
    elif isinstance(value, list):
        assert [float(part) for part in cell.split(";") if part.strip()] == value
    else:
        assert float(cell) == value


@pytest.fixture(scope="module")
def written(tmp_path_factory):
    """JSON and tables of one run; the directory and its parent are not there before."""
    folder = tmp_path_factory.mktemp("written")
    made = run("solve", VENT, "--json", folder / "out.json", "--tables", folder / "new" / "tables")
    assert made.returncode == 0, made.stderr
    return json.loads((folder / "out.json").read_text(encoding="utf-8")), folder / "new" / "tables"


class TestTables:
    def test_files(self, written):
        names = {"streams.csv", "units.csv", "balance.csv", "requirements.csv", "profile_wash.csv", "profile_strip.csv"}
        assert {path.name for path in written[1].iterdir()} == names

    @pytest.mark.parametrize("unit", ["wash", "strip"])
    def test_profiles_stage_by_stage(self, written, unit):
        data, folder = written
        rows = read_csv(folder / f"profile_{unit}.csv")
        profile = dict(flat(data["units"][unit]["profile"]))
        assert len(rows) == {"wash": 9, "strip": 7}[unit]
        assert list(rows[0]) == list(profile)
        for stage, row in enumerate(rows):
            for key, cell in row.items():
                same_cell(cell, profile[key][stage])

    @pytest.mark.parametrize(
        ("file", "key", "place"),
        [
            ("streams.csv", "stream", ("streams",)),
            ("balance.csv", "component", ("balance", "components")),
            ("requirements.csv", "requirement", ("requirements",)),
        ],
    )
    def test_rows_are_the_items(self, written, file, key, place):
        data, folder = written
        for step in place:
            data = data[step]
        rows = read_csv(folder / file)
        assert [row[key] for row in rows] == list(data)
        for row in rows:
            item = dict(flat(data[row[key]]))
            assert set(item) <= set(row)
            for column in set(row) - {key}:
                same_cell(row[column], item.get(column))

    def test_units(self, written):
        data, folder = written
        found = {(row["unit"], row["kind"], row["result"]): row["value"] for row in read_csv(folder / "units.csv")}
        expected = {
            (name, unit["kind"], key): value for name, unit in data["units"].items() for key, value in flat(unit["results"])
        }
        assert found.keys() == expected.keys()
        for key, value in expected.items():
            same_cell(found[key], value)

    def test_of_an_unreached_requirement(self, tmp_path):
        made = run("solve", VENT, "--set", "requirements.emission.equals=1 mg/Nm3", "--tables", tmp_path / "t")
        assert made.returncode == 1
        (row,) = read_csv(tmp_path / "t" / "requirements.csv")
        assert (row["requirement"], row["reached"], row["reason"]) == ("emission", "False", "turning_point")

    def test_existing_files_are_replaced_whole(self, written, tmp_path):
        (tmp_path / "streams.csv").write_text("old\n" * 5000, encoding="utf-8")
        (tmp_path / "mine.txt").write_text("mine", encoding="utf-8")
        assert run("solve", VENT, "--tables", tmp_path).returncode == 0
        assert (tmp_path / "streams.csv").read_text(encoding="utf-8") == (written[1] / "streams.csv").read_text(encoding="utf-8")
        assert (tmp_path / "mine.txt").read_text(encoding="utf-8") == "mine"
        assert {path.name for path in tmp_path.iterdir()} == {path.name for path in written[1].iterdir()} | {"mine.txt"}

    def refused(self, made, name):
        assert made.returncode == 2
        (line,) = made.stderr.splitlines()
        assert line.startswith(str(VENT)) and name in line and "cannot be written" in line
        assert made.stdout == ""

    @pytest.mark.parametrize("place", ["file", "file/deep/er"])
    def test_directory_that_cannot_be_made(self, tmp_path, place):
        (tmp_path / "file").write_text("whole", encoding="utf-8")
        self.refused(run("solve", VENT, "--tables", tmp_path / place), str(tmp_path / "file"))
        assert [path.name for path in tmp_path.iterdir()] == ["file"]
        assert (tmp_path / "file").read_text(encoding="utf-8") == "whole"

    def test_file_that_cannot_be_written(self, tmp_path):
        """A directory stands where a table should: no table of another run may be left beside it in pieces."""
        (tmp_path / "balance.csv").mkdir()
        self.refused(run("solve", VENT, "--tables", tmp_path), "balance.csv")
        assert not [path for path in tmp_path.iterdir() if path.name.startswith(".")]
        for path in tmp_path.glob("*.csv"):
            assert path.is_dir() or path.read_text(encoding="utf-8").endswith("\n")

    def test_wrong_input_makes_no_directory(self, tmp_path):
        made = run("solve", VENT, "--set", "units.wash.stages=0", "--tables", tmp_path / "t", "--json", tmp_path / "o.json")
        assert made.returncode == 2
        assert list(tmp_path.iterdir()) == []


class TestJson:
    def test_alone_on_standard_output(self, results, tmp_path):
        made = run("solve", VENT, "--json", "-", "--tables", tmp_path / "t")
        assert (made.returncode, made.stderr) == (0, "")
        data = json.loads(made.stdout, parse_constant=lambda text: pytest.fail(f"{text} is no JSON"))
        assert data == results["vent"].to_dict()

    def test_of_numbers_that_did_not_get_there(self, results):
        made = run("solve", VENT, "--set", "requirements.emission.equals=1 mg/Nm3", "--json", "-")
        assert (made.returncode, made.stderr) == (1, "")
        assert json.loads(made.stdout) == results["turning"].to_dict()

    def test_place_that_cannot_be_written(self, tmp_path):
        (tmp_path / "file").write_text("whole", encoding="utf-8")
        for place in (tmp_path / "file" / "out.json", tmp_path / "missing" / "out.json", tmp_path):
            made = run("solve", VENT, "--json", place)
            assert made.returncode == 2
            (line,) = made.stderr.splitlines()
            assert str(place) in line and "cannot be written" in line
            assert made.stdout == ""
        assert [path.name for path in tmp_path.iterdir()] == ["file"]

    def test_an_older_file_is_replaced_whole(self, tmp_path):
        path = tmp_path / "out.json"
        path.write_text("{" + "x" * 200_000, encoding="utf-8")
        assert run("solve", SCRUBBER, "--json", path).returncode == 0
        assert json.loads(path.read_text(encoding="utf-8"))["status"] == "converged"

    def test_check_writes_json_alone(self):
        made = run("check", VENT, "--json", "-")
        assert (made.returncode, made.stderr) == (0, "")
        assert {"order", "loops", "solved_together", "tears", "freedom"} <= set(json.loads(made.stdout))


class TestBatchDictionary:
    def leaves(self, batch, single, cases, case, where=""):
        """Every leaf is a list over the cases, whose item is the leaf of that case alone."""
        if isinstance(single, dict):
            assert isinstance(batch, dict) and list(batch) == list(single), where
            for key in single:
                self.leaves(batch[key], single[key], cases, case, f"{where}.{key}")
            return
        if where.endswith((".phase", ".kind")) and isinstance(batch, str):
            pytest.fail(f"{where} is no list of {cases}")
        assert isinstance(batch, list) and len(batch) == cases, where
        own = batch[case]
        if isinstance(single, list):
            assert isinstance(own, list) and len(own) == len(single), where
            assert own == pytest.approx(single, rel=1e-9, abs=1e-12), where
        elif isinstance(single, (bool, str)) or single is None:
            assert own == single, where
        else:
            assert own == pytest.approx(single, rel=1e-9, abs=1e-12), where

    @pytest.mark.parametrize("stages", [[9, 9], [9, 4, 6], [5]])
    def test_every_leaf_is_a_list(self, stages):
        sheet = leanloop.read(VENT)
        steam = (np.linspace(70, 90, len(stages)) / 3600).tolist()
        batch = sheet.solve({"feeds.steam.flow": np.array(steam), "units.wash.stages": np.array(stages)}).to_dict()
        json.dumps(batch, allow_nan=False)
        for case, (rate, count) in enumerate(zip(steam, stages, strict=True)):
            single = sheet.solve({"feeds.steam.flow": f"{rate!r} kg/s", "units.wash.stages": count}).to_dict()
            for key in ("status", "status_text"):
                assert batch[key][case] == single[key]
            for key in ("streams", "balance", "requirements"):
                self.leaves(batch[key], single[key], len(stages), case, key)
            for unit, item in single["units"].items():
                own = batch["units"][unit]
                assert own.keys() == item.keys()
                for key in item.keys() - {"kind"}:
                    self.leaves(own[key], item[key], len(stages), case, f"units.{unit}.{key}")
                assert len(batch["units"]["wash"]["profile"]["x"]["toluene"][case]) == count

    def test_a_single_case_has_no_case_axis(self, results):
        for name in SINGLE:
            for where, leaf in flat(results[name].to_dict()["streams"]):
                assert not isinstance(leaf, list), where

    def test_a_case_that_failed_is_null_and_leaves_the_others(self):
        batch = leanloop.read(VENT).solve({"feeds.vent.flow": np.array([10.0, np.nan, 11.0])})
        assert list(batch.status) == ["converged", "not_finite", "converged"]
        data = batch.to_dict()
        json.dumps(data, allow_nan=False)
        assert data["streams"]["cleaned"]["mol_s"]["air"][1] is None
        assert all(data["streams"]["cleaned"]["mol_s"]["air"][case] > 9 for case in (0, 2))
        assert "not_finite: 1, first case 1" in str(batch)
        assert not re.search(r"\bnan\b", str(batch), re.IGNORECASE)


@pytest.fixture(scope="module")
def sections():
    made = run("catalogue")
    assert (made.returncode, made.stderr) == (0, "")
    parts = re.split(r"^(?=\S.*\n-+$)", made.stdout, flags=re.MULTILINE)
    return {part.splitlines()[0]: part for part in parts if part.strip()}


class TestCatalogue:
    @pytest.mark.parametrize(
        ("title", "registry"), [("Unit kinds", KINDS), ("Equilibrium models", MODELS), ("Recycle methods", METHODS)]
    )
    def test_lists_every_plug_in_with_all_it_takes(self, sections, title, registry):
        names = re.findall(r"^(\w+): \S", sections[title], flags=re.MULTILINE)
        assert names == registry.names()
        pieces = dict(zip(names, re.split(r"^\w+: ", sections[title], flags=re.MULTILINE)[1:], strict=True))
        for name in names:
            described = dict(re.findall(r"^    (\w+) +(\S.*)$", pieces[name], flags=re.MULTILINE))
            entries = list(getattr(registry.load(name), "entries", ()))
            assert list(described) == sorted(described, key=lambda key: [entry.name for entry in entries].index(key))
            assert set(described) == {entry.name for entry in entries}, name
            for entry in entries:
                said = described[entry.name].split(":")[0].split(", ")
                assert ("required" if entry.required else "optional") in said
                assert (entry.sort in ("inlet", "outlet")) == described[entry.name].startswith(("inlet", "outlet"))

    def test_kinds_models_and_methods_that_files_may_name(self):
        assert {"absorber", "stripper", "mixer", "splitter", "heater", "cooler", "makeup"} <= set(KINDS)
        assert {"constant", "polynomial", "henry", "raoult", "table"} <= set(MODELS)
        assert {"newton", "substitution", "wegstein", "anderson"} <= set(METHODS)

    def test_a_kind_that_is_added_is_listed(self):
        from leanloop.output.catalogue import catalogue
        from leanloop.units.heater import Heater

        class Oven(Heater):
            """Heats what was too cold."""

            kind = "oven"

        KINDS.add("oven", Oven)
        try:
            assert "oven: Heats what was too cold." in catalogue().splitlines()
        finally:
            KINDS.remove("oven")
        assert "oven" not in catalogue()
