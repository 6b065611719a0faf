"""Every status is reached by a loop that anyone might write, says in a sentence what to try, and ends in exit status 1."""

import json
import subprocess
import sys

import numpy as np
import pytest
import scenes

from leanloop.entries import Entry
from leanloop.errors import InputError, NotReached
from leanloop.status import LIST, REASONS, Status, code, solved
from leanloop.stream import Stream
from leanloop.units import KINDS
from leanloop.units.base import Unit

COLD, HOT = scenes.constant(0.1), scenes.constant(2.0)
QUANTITY = "streams.cleaned.fraction.a"
OIL, STEAM = "units.top_up.hold.oil", "feeds.steam.flows.steam"


def loop(extra="", cold=COLD, hot=HOT, oil=1.5, **more):
    return scenes.loop((4, 3), {"a": cold}, {"a": hot}, oil, 10.0, 1.0, {"a": 0.02}, purge=0.01, extra=extra, **more)


def outlet(value, free=OIL, between=("0.8 mol/s", "3 mol/s")):
    return loop(scenes.requirement("outlet", QUANTITY, value, free, between))


def antoine(a):
    return (
        f'{{ model = "raoult", vapour_pressure = {{ form = "antoine", A = {a}, B = 1345.0, C = 219.5, '
        'pressure = "mmHg", temperature = "degC" } }'
    )


BOILED = """
[components]
water = { molar_mass = "18.015 g/mol" }
salt = { molar_mass = "100 g/mol", stays_in = "liquid" }
[equilibrium.hot]
water = { model = "raoult", vapour_pressure = { form = "antoine", A = 5.19621, B = 1730.63, C = 233.426, pressure = "bar", temperature = "degC" } }
[heat_data.salt]
liquid_heat_capacity = "150 J/(mol K)"
[feeds.rich]
phase = "liquid"
temperature = "90 degC"
pressure = "2 bar"
flows = { water = "100 mol/s", salt = "5 mol/s" }
[units.strip]
kind = "stripper"
liquid_in = "rich"
gas_out = "vapour"
liquid_out = "lean"
stages = 4
equilibrium = "hot"
pressure = "1.8 bar"
reboiler = { duty = "300 MW" }
"""  # noqa: E501 - as a file has it
CROSSED = """
[components]
oil = { molar_mass = "250 g/mol", stays_in = "liquid" }
[heat_data.oil]
liquid_heat_capacity = "480 J/(mol K)"
[feeds.hot]
phase = "liquid"
temperature = "120 degC"
pressure = "3 bar"
flows = { oil = "2 mol/s" }
[feeds.cold]
phase = "liquid"
temperature = "30 degC"
pressure = "2 bar"
flows = { oil = "3 mol/s" }
[units.swap]
kind = "exchanger"
hot_in = "hot"
hot_out = "cooled"
cold_in = "cold"
cold_out = "warmed"
duty = "100 kW"
"""
LIMITED = loop(method="substitution").replace("[loop]", "[loop]\npasses = 3")

# name: (file, status, words of its sentence)
SCENES = {
    "reached": (outlet(4e-3), "converged", "Everything"),
    "a bound in the way": (outlet(2e-3, between=("0.5 mol/s", "0.8 mol/s")), "out_of_reach", "widen `between`"),
    "past a turning point": (outlet(1e-5), "out_of_reach", "first helps and then hurts"),
    "past a pinch": (outlet(1e-5, STEAM, ("50 mol/s", "5000 mol/s")), "out_of_reach", "no longer helps"),
    "off the table": (loop(cold=scenes.table("xy", [0, 1e-3], [0, 1e-4])), "off_table", "Unit wash"),
    "too few passes": (LIMITED, "pass_limit", "more passes"),
    "no solvent": (loop(oil=0.0), "dry_stage", "Unit wash"),
    "absurd data": (loop(hot=antoine(208.5)), "unbalanced", "Unit strip"),
    "more heat than can pass": (CROSSED, "temperature_cross", "Unit swap"),
    "more heat than there is to boil": (BOILED, "stages_unsolved", "Unit strip"),
    "numbers out of all proportion": (loop(hot=scenes.constant(1e16)), "unbalanced", "Unit strip"),
    "data beyond any number": (loop(hot=antoine(6950.0)), "not_finite", "Unit strip"),
}


@pytest.mark.parametrize("name", SCENES)
def test_status_and_sentence(tmp_path, name):
    text, wanted, word = SCENES[name]
    result = scenes.solve(tmp_path, text)
    assert result.status == wanted
    assert Status[wanted].value in result.status_text
    assert word in result.status_text
    assert result.converged is (wanted == "converged")
    data = result.to_dict()
    assert (data["status"], data["status_text"]) == (wanted, result.status_text)
    if wanted == "converged":
        assert result.raise_if_failed() is result
    else:
        with pytest.raises(NotReached) as caught:
            result.raise_if_failed()
        assert caught.value.result is result and str(caught.value) == result.status_text


def command(*arguments):
    return subprocess.run(
        [sys.executable, "-W", "error", "-m", "leanloop", *map(str, arguments)],
        capture_output=True,
        encoding="utf-8",
        timeout=120,
        check=False,
    )


@pytest.mark.parametrize("name", SCENES)
def test_on_the_command_line(tmp_path, name):
    text, wanted, word = SCENES[name]
    path = scenes.write(tmp_path, text)
    done = command("solve", path, "--json", tmp_path / "answer.json")
    assert (done.returncode, done.stderr) == (0 if wanted == "converged" else 1, "")
    answer = json.loads((tmp_path / "answer.json").read_text(encoding="utf-8"))
    assert answer["status"] == wanted
    report = " ".join(done.stdout.split())
    assert f"Status: {wanted}." in report
    assert Status[wanted].value in report and word in report
    assert "nan" not in done.stdout.lower().split() and "inf" not in done.stdout.lower().split()


class TestReasons:
    """The reason is held against what the loop does at other values of the freed input."""

    def missed(self, tmp_path, name):
        text = SCENES[name][0]
        result = scenes.solve(tmp_path, text)
        item = result.to_dict()["requirements"]["outlet"]
        assert item["reached"] is False and item["active"] is True
        assert item["value"] == pytest.approx(result[QUANTITY], rel=1e-12)
        assert REASONS[item["reason"]] in result.status_text
        return item, scenes.read(tmp_path, loop())

    def at(self, sheet, address, values):
        result = sheet.solve({address: np.asarray(values, dtype=float)})
        assert result.converged.all()
        return result[QUANTITY]

    def test_bound(self, tmp_path):
        item, sheet = self.missed(tmp_path, "a bound in the way")
        assert (item["reason"], item["free_value"]) == ("bound", pytest.approx(0.8, rel=1e-9))
        inside, bound, beyond = self.at(sheet, OIL, [0.7, 0.8, 0.9])
        assert inside > bound > beyond > 2e-3  # more would help
        assert item["value"] == pytest.approx(bound, rel=1e-8)

    def test_turning_point(self, tmp_path):
        item, sheet = self.missed(tmp_path, "past a turning point")
        assert item["reason"] == "turning_point" and 0.8 < item["free_value"] < 3.0
        low, here, high = self.at(sheet, OIL, np.array([0.97, 1.0, 1.03]) * item["free_value"])
        assert low > here < high
        assert item["value"] == pytest.approx(here, rel=1e-8)

    def test_pinch(self, tmp_path):
        item, sheet = self.missed(tmp_path, "past a pinch")
        assert (item["reason"], item["free_value"]) == ("pinch", pytest.approx(5000.0, rel=1e-9))
        here, beyond = self.at(sheet, STEAM, [5000.0, 50000.0])
        assert here == pytest.approx(beyond, rel=1e-3) and beyond > 1e-5  # ten times as much does nothing
        assert item["value"] == pytest.approx(here, rel=1e-8)

    def test_every_reason_is_met(self, tmp_path):
        met = {self.missed(tmp_path, name)[0]["reason"] for name in SCENES if SCENES[name][1] == "out_of_reach"}
        assert met == set(REASONS)


class TestNoSteadyState:
    TEXT = loop(impurity=1e-4)

    def test_in_one_case_of_a_batch(self, tmp_path):
        result = scenes.solve(tmp_path, self.TEXT, {"units.divide.shares.bleed": np.array([0.01, 0.0, 0.02])})
        assert result.status == ["converged", "no_steady_state", "converged"]
        assert result.status_text[1] == Status.no_steady_state.value
        assert np.isnan(result["streams.lean.loading.tar"][1])
        tar = result["streams.bleed.mol_s.tar"]
        assert tar[[0, 2]] == pytest.approx(1e-4, rel=1e-9)  # all that comes in leaves by the bleed

    def test_in_the_only_case_the_input_is_wrong(self, tmp_path):
        path = scenes.write(tmp_path, self.TEXT)
        done = command("solve", path, "--set", "units.divide.shares.bleed=0")
        assert (done.returncode, done.stdout) == (2, "")
        (line,) = done.stderr.splitlines()
        assert line.startswith(f"{path}: components.tar: ") and "no way out" in line and "bleed" in line

    def test_from_python_too(self, tmp_path):
        with pytest.raises(InputError, match="no way out"):
            scenes.solve(tmp_path, self.TEXT, {"units.divide.shares.bleed": 0.0})


class Choked(Unit):
    """Passes a stream on as long as there is room for it."""

    kind = "choked"
    entries = (
        Entry("takes", "inlet", required=True),
        Entry("gives", "outlet", required=True),
        Entry("room", "molar flow", required=True, above=0.0),
    )

    def calculate(self, inlets, numbers):
        stream = inlets["takes"]
        if (np.real(stream.total) > np.real(numbers["room"])).any():
            raise ArithmeticError("more comes than there is room for")
        return {"gives": Stream(stream.state + 0 * np.asarray(numbers["room"])[..., None], stream.phase)}


class TestUnitFailed:
    """No kind that comes with leanloop gives this status; a plug-in that raises does."""

    @pytest.fixture(autouse=True)
    def choked(self):
        KINDS.add("choked", Choked)
        yield
        KINDS.remove("choked")

    def text(self, room):
        text = loop().replace('gas_in = "vent"', 'gas_in = "through"')
        return text + f'\n[units.narrow]\nkind = "choked"\ntakes = "vent"\ngives = "through"\nroom = "{room} mol/s"\n'

    def test_alone(self, tmp_path):
        result = scenes.solve(tmp_path, self.text(5))
        assert result.status == "unit_failed"
        assert result.status_text.startswith("Unit narrow: ") and Status.unit_failed.value in result.status_text
        assert "more comes than there is room for" in result.status_text
        assert scenes.solve(tmp_path, self.text(50)).status == "converged"

    def test_in_one_case_of_a_batch(self, tmp_path):
        sheet = scenes.read(tmp_path, self.text(50))
        result = sheet.solve({"units.narrow.room": np.array([50.0, 5.0, 40.0])})
        assert result.status == ["converged", "unit_failed", "converged"]
        assert np.isnan(result[QUANTITY][1])
        assert result[QUANTITY][[0, 2]] == pytest.approx(sheet.solve()[QUANTITY], rel=1e-9)


def test_every_status_is_reached_here():
    met = {Status[wanted] for _, wanted, _ in SCENES.values()} | {Status.no_steady_state, Status.unit_failed}
    assert met == set(Status)


def test_a_batch_holds_every_sort_of_case(tmp_path):
    """Each case keeps the status that it has alone, whatever its neighbours do."""
    sheet = scenes.read(tmp_path, loop(cold=scenes.table("xy", [0, 0.16], [0, 0.016])))
    changes = {
        OIL: np.array([1.5, 0.0, 0.05, 1.5, 1.5, 2.0]),
        "feeds.vent.flows.inert": np.array([10.0, 10.0, 10.0, np.nan, -1.0, 10.0]),
    }
    together = sheet.solve(changes)
    assert together.status == ["converged", "dry_stage", "off_table", "not_finite", "not_finite", "converged"]
    for case, word in enumerate(together.status):
        alone = sheet.solve({address: values[[case]] for address, values in changes.items()})
        assert alone.status == [word]
        assert alone[QUANTITY] == pytest.approx(together[QUANTITY][[case]], rel=1e-9, nan_ok=True)


def test_sentences_differ_and_say_what_to_do():
    sentences = [status.value for status in LIST]
    assert len(set(sentences)) == len(sentences)
    for status, sentence in zip(LIST, sentences, strict=True):
        assert sentence[0].isupper() and sentence.endswith(".")
        assert ";" in sentence or status is Status.converged  # what happened; what to try


def test_worse_is_higher():
    codes = np.array([code(status) for status in LIST])
    assert (np.diff(codes) > 0).all()
    kept = {Status.converged, Status.out_of_reach, Status.temperature_cross, Status.off_table}
    assert {status for status, good in zip(LIST, solved(codes), strict=True) if good} == kept
