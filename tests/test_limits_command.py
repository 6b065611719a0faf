"""`leanloop limits`: text, JSON, exit status, and what wrong `[limits.NAME]` gets."""

import contextlib
import io
import json
import re
import subprocess
import sys

import pytest
import scenes

import leanloop
from leanloop.cli import main

COLUMN_KEYS = {"key", "method", "ratio_to_least", "pinch", "stages_needed"}
LOOP_KEYS = {"least_circulation_mol_s", "most_circulation_mol_s", "least_gas_mol_s", "least_duty_W"}
WINDOW = ("least_circulation_mol_s", "most_circulation_mol_s")


def run(*arguments):
    return subprocess.run([sys.executable, "-W", "error", "-m", "leanloop", *map(str, arguments)],
                          capture_output=True, text=True, encoding="utf-8", timeout=120, check=False)


def here(*arguments):
    """The same in this process, which is faster."""
    out, error = io.StringIO(), io.StringIO()
    with contextlib.redirect_stdout(out), contextlib.redirect_stderr(error):
        code = main([str(argument) for argument in arguments])
    return subprocess.CompletedProcess(arguments, code, out.getvalue(), error.getvalue())


def strict_json(text):
    def refuse(name):
        raise AssertionError(f"{name} in the JSON")

    return json.loads(text, parse_constant=refuse)


def tells(text, value):
    """Whether the text holds a number to the five digits of a report."""
    return any(float(number) == pytest.approx(value, rel=6e-5)
               for number in re.findall(r"\d+(?:\.\d+)?(?:e[+-]?\d+)?", text))


def pair(stages=(8, 7), extra="", kind="at_most", target=1.02e-3, **options):
    asked = scenes.requirement("outlet", "streams.cleaned.ratio.b", target, "units.top_up.hold.oil",
                               ("0.9 mol/s", "2.9 mol/s")).replace("equals", kind)
    return scenes.loop(stages, {"b": scenes.constant(0.125)}, {"b": scenes.constant(3.16)}, 1.787, 10.51, 0.6812,
                       {"b": 0.0204}, extra=extra + asked, **options)


def two_solutes(extra="", kind="absorber"):
    sent = {"b": 0.2, "t": 0.1}
    gas = {"inert": 10.0} | (sent if kind == "absorber" else {})
    liquid = {"oil": 5.0} | (sent if kind == "stripper" else {})
    return scenes.column(kind, 6, ["b", "t"], gas, liquid,
                         {"b": scenes.constant(0.3, "ratio"), "t": scenes.constant(0.2, "ratio")}, extra=extra)


@pytest.fixture(scope="module")
def sheet(tmp_path_factory):
    return scenes.write(tmp_path_factory.mktemp("pair"), pair())


@pytest.fixture(scope="module")
def done(sheet):
    return run("limits", sheet, "--json", "-")


@pytest.fixture(scope="module")
def answer(done):
    return strict_json(done.stdout)


class TestAnswer:
    def test_pure_json(self, done, answer):
        assert (done.returncode, done.stderr) == (0, "")
        assert set(answer) >= {"units", "loop"}
        assert set(answer["units"]) == {"wash", "strip"}

    def test_columns(self, answer):
        wash, strip = answer["units"]["wash"], answer["units"]["strip"]
        assert set(wash) >= COLUMN_KEYS | {"least_solvent_mol_s"} and "least_gas_mol_s" not in wash
        assert set(strip) >= COLUMN_KEYS | {"least_gas_mol_s"} and "least_solvent_mol_s" not in strip
        for found in (wash, strip):
            assert (found["key"], found["method"]) == ("b", "curve")
            assert set(found["pinch"]) >= {"kind", "X", "Y"}
            assert found["pinch"]["kind"] in ("rich end", "lean end", "tangent")
        assert wash["ratio_to_least"] == pytest.approx(1.787 / wash["least_solvent_mol_s"], rel=1e-9)
        assert strip["ratio_to_least"] == pytest.approx(0.6812 / strip["least_gas_mol_s"], rel=1e-9)
        assert wash["stages_needed"] == pytest.approx(8, abs=1e-6)
        assert strip["stages_needed"] == pytest.approx(7, abs=1e-6)

    def test_window(self, answer):
        # Treybal's wash-oil pair closed, known to six digits.
        loop = answer["loop"]
        assert set(loop) >= LOOP_KEYS
        assert [loop[key] for key in WINDOW] == pytest.approx([1.10111, 2.86525], rel=4e-6)
        assert loop["least_gas_mol_s"] == pytest.approx(0.424852, rel=2e-6)
        assert loop["least_duty_W"] is None

    def test_the_same_from_python(self, sheet, answer):
        found = leanloop.limits(leanloop.read(sheet).solve())
        assert strict_json(json.dumps(found.to_dict())) == answer

    def test_text(self, sheet, answer):
        told = run("limits", sheet)
        assert (told.returncode, told.stderr) == (0, "")
        with pytest.raises(json.JSONDecodeError):
            json.loads(told.stdout)
        for word in ("wash", "strip", "tangent", "least", "most"):
            assert word in told.stdout
        assert not re.search(r"\b(nan|inf|none|null)\b", told.stdout, re.IGNORECASE)
        # Rates in kmol/h, as the reports of a solve have them.
        for value in (answer["units"]["wash"]["least_solvent_mol_s"], answer["units"]["strip"]["least_gas_mol_s"],
                      answer["loop"]["least_circulation_mol_s"], answer["loop"]["most_circulation_mol_s"],
                      answer["loop"]["least_gas_mol_s"]):
            assert tells(told.stdout, value * 3.6), value

    def test_json_in_a_file(self, sheet, answer, tmp_path):
        told = here("limits", sheet, "--json", tmp_path / "limits.json")
        assert told.returncode == 0
        assert "tangent" in told.stdout
        assert strict_json((tmp_path / "limits.json").read_text(encoding="utf-8")) == answer

    def test_json_is_the_same_every_time(self, sheet, done):
        assert run("limits", sheet, "--json", "-").stdout == done.stdout

    def test_no_loop(self, tmp_path):
        path = scenes.write(tmp_path, two_solutes())
        told = here("limits", path, "--json", "-")
        assert (told.returncode, told.stderr) == (0, "")
        found = strict_json(told.stdout)
        assert found["units"]["column"]["least_solvent_mol_s"] > 0
        assert {key: found["loop"][key] for key in LOOP_KEYS} == dict.fromkeys(LOOP_KEYS)
        assert isinstance(found["loop"]["why"], str) and found["loop"]["why"]
        assert here("limits", path).returncode == 0

    @pytest.mark.parametrize("form", [("--json", "-"), ()])
    def test_out_of_reach_still_gives_the_window(self, tmp_path, form):
        # Two stages in either column do not get there; stages without limit would.
        path = scenes.write(tmp_path, pair(stages=(2, 2), kind="equals"))
        told = run("limits", path, *form)
        assert (told.returncode, told.stderr) == (1, "")
        if form:
            loop = strict_json(told.stdout)["loop"]
            assert [loop[key] for key in WINDOW] == pytest.approx([1.10111, 2.86525], rel=4e-6)
        else:
            assert tells(told.stdout, 1.10111 * 3.6) and "out_of_reach" in told.stdout

    def test_empty_window_says_why(self, tmp_path):
        path = scenes.write(tmp_path, pair(kind="equals", target=1e-9).replace("0.6812 mol/s", "0.05 mol/s"))
        told = here("limits", path, "--json", "-")
        assert told.returncode == 1
        loop = strict_json(told.stdout)["loop"]
        assert [loop[key] for key in WINDOW] == [None, None]
        assert re.search(r"\d", loop["why"])
        text = here("limits", path)
        assert text.returncode == 1 and "why" not in text.stderr
        assert not re.search(r"\b(nan|inf|none|null)\b", text.stdout, re.IGNORECASE)

    def test_no_rate_suffices(self, tmp_path):
        path = scenes.write(tmp_path, pair(extra="[limits.wash]\nliquid_in = 0.05\ngas_out = 1e-3\n"))
        told = here("limits", path, "--json", "-")
        assert (told.returncode, told.stderr) == (0, "")
        found = strict_json(told.stdout)["units"]["wash"]
        assert found["least_solvent_mol_s"] is None and found["ratio_to_least"] is None
        assert re.search(r"\d", found["why"])
        text = here("limits", path)
        assert text.returncode == 0
        assert not re.search(r"\b(nan|inf|none|null)\b", text.stdout, re.IGNORECASE)

    @pytest.mark.parametrize("part", [1e-15, 1e15])
    def test_extreme_rates_stay_json(self, tmp_path, part):
        text = scenes.column("absorber", 4, ["b"], {"inert": 10.0, "b": 0.2}, {"oil": 10.0 * part},
                             {"b": scenes.constant(0.3)})
        told = here("limits", scenes.write(tmp_path, text), "--json", "-")
        assert told.returncode in (0, 1) and told.stderr == ""
        strict_json(told.stdout)


class TestStatedEnds:
    def test_ends_change_the_answer(self, tmp_path):
        text = two_solutes()
        ends = "[limits.column]\nkey = \"t\"\nremoval = 0.9\n"
        plain, stated = (leanloop.limits(scenes.solve(tmp_path, text + extra)).to_dict()["units"]["column"]
                         for extra in ("", ends))
        assert stated["key"] == "t" and stated["method"] == "curve"
        assert stated["least_solvent_mol_s"] == pytest.approx(10.0 * 0.2 * 0.9, rel=1e-9)
        assert stated["ratio_to_least"] == pytest.approx(5.0 / 1.8, rel=1e-9)
        assert plain["stages_needed"] == pytest.approx(6, abs=1e-6)

    def test_key_that_sets_the_limit(self, tmp_path):
        # As solved, the solute that is harder to absorb, or to strip, has the larger least rate.
        for kind, key in (("absorber", "b"), ("stripper", "t")):
            text = two_solutes(kind=kind)
            solved = scenes.solve(tmp_path, text)
            found = leanloop.limits(solved).to_dict()["units"]["column"]
            rates = {}
            for name, K in (("b", 0.3), ("t", 0.2)):
                removal = solved[f"units.column.results.removal.{name}"]
                rates[name] = 10.0 * K * removal if kind == "absorber" else 5.0 * removal / K
            assert key == max(rates, key=rates.get)
            assert found["key"] == key
            assert found[f"least_{'solvent' if kind == 'absorber' else 'gas'}_mol_s"] == pytest.approx(
                rates[key], rel=1e-8)

    @pytest.mark.parametrize("kind", ["absorber", "stripper"])
    def test_key_alone(self, tmp_path, kind):
        for name, K in (("b", 0.3), ("t", 0.2)):
            solved = scenes.solve(tmp_path, two_solutes(f'[limits.column]\nkey = "{name}"\n', kind))
            found = leanloop.limits(solved).to_dict()["units"]["column"]
            removal = solved[f"units.column.results.removal.{name}"]
            wanted = 10.0 * K * removal if kind == "absorber" else 5.0 * removal / K
            assert found["key"] == name
            assert found[f"least_{'solvent' if kind == 'absorber' else 'gas'}_mol_s"] == pytest.approx(wanted, rel=1e-8)

    def test_a_solve_does_not_mind(self, tmp_path):
        plain, stated = (scenes.solve(tmp_path, pair(extra=extra)).to_dict()
                         for extra in ("", "[limits.wash]\nremoval = 0.9\n"))
        assert plain == stated


def faults(path, text):
    """Faults by address, each one line of the contract's form."""
    path.write_text(text, encoding="utf-8")
    answers = [here("limits", path, *form)
               for form in ((), ("--json", "-"), ("--json", path.parent / "out.json"))]
    assert {(told.returncode, told.stdout) for told in answers} == {(2, "")}
    assert len({told.stderr for told in answers}) == 1
    assert not (path.parent / "out.json").exists()
    found = {}
    for line in answers[0].stderr.splitlines():
        match = re.fullmatch(rf"{re.escape(str(path))}: ([^:]+): ([^;]+); (.+)", line)
        assert match, line
        assert match[1] not in found
        found[match[1]] = match[2]
    return found


class TestFaults:
    @pytest.mark.parametrize(("entries", "address", "words"), [
        ("[limits.wosh]\nremoval = 0.9\n", "limits.wosh", "wosh"),
        ("[limits.preheat]\nremoval = 0.9\n", "limits.preheat", "column"),
        ("[limits.wash]\ngas_exit = 0.1\n", "limits.wash.gas_exit", ""),
        ("[limits.wash]\ngas_out = -0.1\n", "limits.wash.gas_out", "-0.1"),
        ("[limits.strip]\nliquid_in = -1e-9\n", "limits.strip.liquid_in", ""),
        ("[limits.wash]\nremoval = 0.9\ngas_out = 0.001\n", "limits.wash.removal", "gas_out"),
        ("[limits.strip]\nremoval = 0.9\nliquid_out = 0.001\n", "limits.strip.removal", "liquid_out"),
        ("[limits.wash]\nremoval = 1.1\n", "limits.wash.removal", "1.1"),
        ("[limits.wash]\nremoval = -0.1\n", "limits.wash.removal", "-0.1"),
        ("[limits.wash]\nremoval = nan\n", "limits.wash.removal", ""),
        ("[limits.wash]\ngas_in = inf\n", "limits.wash.gas_in", ""),
        ('[limits.wash]\ngas_in = "2 kg"\n', "limits.wash.gas_in", ""),
        ("[limits.wash]\ngas_in = [0.1, 0.2]\n", "limits.wash.gas_in", ""),
        ('[limits.wash]\nkey = "oil"\nremoval = 0.9\n', "limits.wash.key", "oil"),
        ('[limits.wash]\nkey = "benzin"\nremoval = 0.9\n', "limits.wash.key", "benzin"),
        ("[limits.wash]\nkey = 3\nremoval = 0.9\n", "limits.wash.key", ""),
        ("[limits]\nwash = 3\n", "limits.wash", "table"),
    ])
    def test_one(self, tmp_path, entries, address, words):
        found = faults(tmp_path / "wrong.toml", pair() + entries)
        assert set(found) == {address}
        assert words in found[address]

    def test_section_that_is_no_table(self, tmp_path):
        assert set(faults(tmp_path / "wrong.toml", "limits = 3\n" + pair())) == {"limits"}

    def test_key_is_needed_with_two_solutes(self, tmp_path):
        text = two_solutes() + "[limits.column]\nremoval = 0.9\n"
        assert set(faults(tmp_path / "wrong.toml", text)) == {"limits.column.key"}

    def test_key_of_the_other_column_alone(self, tmp_path):
        # `t` distributes in neither column as `inert` does not.
        text = two_solutes() + '[limits.column]\nkey = "inert"\nremoval = 0.9\n'
        assert set(faults(tmp_path / "wrong.toml", text)) == {"limits.column.key"}

    def test_all_at_once_over_columns(self, tmp_path):
        text = pair() + ("[limits.wosh]\nremoval = 0.9\n[limits.preheat]\nremoval = 0.9\n"
                         '[limits.wash]\nremoval = 0.9\ngas_out = 0.001\nkey = "oil"\n'
                         "[limits.strip]\nliquid_in = -0.1\nlean = 3\n")
        assert set(faults(tmp_path / "wrong.toml", text)) == {
            "limits.wosh", "limits.preheat", "limits.wash.removal", "limits.wash.key",
            "limits.strip.liquid_in", "limits.strip.lean"}

    def test_all_at_once_in_one_column(self, tmp_path):
        text = two_solutes() + ("[limits.column]\nbogus = 1\ngas_in = -1.0\nremoval = 0.9\ngas_out = 0.001\n")
        assert set(faults(tmp_path / "wrong.toml", text)) == {
            "limits.column.bogus", "limits.column.gas_in", "limits.column.removal", "limits.column.key"}

    @pytest.mark.parametrize(("right", "wrong", "address"), [
        ("at_most = 0.00102", 'at_most = "x"', "requirements.outlet.at_most"),
        ('kind = "heater"\ntakes = "rich"\ngives = "hot_rich"\ntemperature = "120 degC"',
         'kind = "heater"\ntakes = "rich"\ngives = "hot_rich"\ntemperature = "120 C"', "units.preheat.temperature"),
        ("K = 0.125", "K = -1", "equilibrium.cold.b.K"),
    ])
    def test_beside_faults_elsewhere(self, tmp_path, right, wrong, address):
        text = pair()
        assert right in text
        found = faults(tmp_path / "wrong.toml", text.replace(right, wrong) + "[limits.wash]\ngas_out = -0.1\n")
        assert set(found) == {address, "limits.wash.gas_out"}

    def test_as_a_command(self, tmp_path):
        path = scenes.write(tmp_path, pair() + "[limits.wash]\nremoval = 2\n[limits.wosh]\nremoval = 0.5\n")
        told = run("limits", path, "--json", "-")
        again = here("limits", path, "--json", "-")
        assert (told.returncode, told.stdout, told.stderr) == (again.returncode, again.stdout, again.stderr)
        assert told.returncode == 2 and told.stderr.count("\n") == 2

    @pytest.mark.parametrize("command", ["solve", "check"])
    def test_other_commands_report_them_too(self, tmp_path, command):
        path = scenes.write(tmp_path, pair() + "[limits.wash]\nremoval = 2\n")
        told = here(command, path)
        assert (told.returncode, told.stdout) == (2, "")
        assert "limits.wash.removal" in told.stderr

    def test_no_file(self, tmp_path):
        told = here("limits", tmp_path / "nowhere.toml")
        assert (told.returncode, told.stdout) == (2, "")
        assert "nowhere.toml" in told.stderr and "Traceback" not in told.stderr

    def test_directory_that_is_not_there(self, sheet, tmp_path):
        told = here("limits", sheet, "--json", tmp_path / "no" / "where.json")
        assert told.returncode == 2
        assert told.stderr.count("\n") == 1 and "Traceback" not in told.stderr

    @pytest.mark.parametrize("arguments", [(), ("--jason", "-")])
    def test_wrong_arguments(self, sheet, arguments):
        told = run("limits", *([sheet, *arguments] if arguments else []))
        assert (told.returncode, told.stdout) == (2, "")
        assert "Traceback" not in told.stderr

    def test_in_python(self, tmp_path):
        path = scenes.write(tmp_path, pair() + "[limits.wash]\nremoval = 2\n[limits.wosh]\nremoval = 0.5\n")
        with pytest.raises(leanloop.InputError) as caught:
            leanloop.read(path)
        assert {fault.address for fault in caught.value.faults} == {"limits.wash.removal", "limits.wosh"}
