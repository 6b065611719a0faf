"""`leanloop study` as a person meets it: files, exit status, progress, and what wrong entries get."""

import copy
import csv
import fcntl
import io
import math
import os
import pty
import random
import re
import struct
import termios

import pytest
import study_runs as runs

import leanloop
from leanloop.entries import Context
from leanloop.errors import InputError
from leanloop.output.progress import Progress
from leanloop.studies.read import read_studies

SECOND = """
[studies.steep]
change = { "feeds.vent.flow" = ["5 mol/s", "10 mol/s"] }
"""


def lines(err):
    assert "Traceback" not in err and "Error" not in err, err
    return err.splitlines()


def the_one(err, *words):
    assert len(lines(err)) == 1, err
    for word in words:
        assert word in err, err


def test_a_study_end_to_end(tmp_path):
    file = runs.absorber(tmp_path)
    code, out, err = runs.run(["study", file, "flows", "--out", tmp_path / "deep" / "out"])
    assert code == 0 and err == ""
    place = tmp_path / "deep" / "out"
    assert runs.listed(place) == ["flows.csv", "flows.sqlite", "flows.txt"]
    assert out == (place / "flows.txt").read_text(encoding="utf-8")
    assert "200 cases, all converged" in out and "Cautions" in out and "licensed engineer" in out
    rows = list(csv.DictReader(io.StringIO((place / "flows.csv").read_text())))
    assert [int(row["case"]) for row in rows] == list(range(200))
    # every case is what a solve of its own gives
    for row in random.Random(4).sample(rows, 4):
        result = leanloop.read(file).solve({key: float(row[key]) for key in ("units.wash.stages", "feeds.vent.flow")})
        for key in ("streams.cleaned.fraction.toluene", "streams.rich.loading.toluene"):
            assert float(row[key]) == pytest.approx(result[key], rel=1e-9)
        assert row["status"] == result.status == "converged" and row["status_text"] == ""


def test_all_studies_where_none_is_named(tmp_path):
    file = runs.absorber(tmp_path, runs.ABSORBER + SECOND)
    code, out, err = runs.here(["study", file, "--out", tmp_path / "out"])
    assert code == 0 and err == ""
    names = [f"{name}.{kind}" for name in ("flows", "steep") for kind in ("csv", "sqlite", "txt")]
    assert runs.listed(tmp_path / "out") == names
    assert out == "\n".join((tmp_path / "out" / f"{name}.txt").read_text() for name in ("flows", "steep"))
    code, _, _ = runs.here(["study", file, "steep", "--out", tmp_path / "one"])
    assert runs.listed(tmp_path / "one") == names[3:]


def test_cases_that_are_not_reached_give_status_one_and_are_kept(tmp_path):
    text = runs.ABSORBER.replace("toluene = 0.02 }", "toluene = 0.05 }")
    text = text.replace('from = "8 mol/s"', 'from = "1 mol/s"').replace('to = "12 mol/s"', 'to = "500 mol/s"')
    file = runs.absorber(tmp_path, text, "x,y\n0,0\n0.01,0.004\n0.03,0.015\n")
    code, out, err = runs.here(["study", file, "--out", tmp_path / "out"])
    assert code == 1 and err == ""
    rows = list(csv.DictReader(io.StringIO((tmp_path / "out" / "flows.csv").read_text())))
    odd = [row for row in rows if row["status"] != "converged"]
    assert odd and len(odd) < len(rows) and all(row["status_text"] for row in odd)
    assert f"{len(rows) - len(odd)}" in out and odd[0]["status"] in out
    assert (tmp_path / "out" / "flows.sqlite").exists()


WRONG = {
    "an unknown name": (["flow"], "there is no study 'flow'; did you mean 'flows'?"),
    "a name far off": (["zzz"], "there is no study 'zzz'; known: flows"),
    "no workers": (["--workers", "0"], "--workers: 0 is no number of processes; write 1 or more"),
    "less than none": (["--workers", "-3"], "--workers: -3 is no number of processes; write 1 or more"),
    "words for workers": (["--workers", "two"], "--workers"),
    "workers and cluster": (
        ["--workers", "2", "--cluster", "tcp://h:1"],
        "--workers: stands beside --cluster; keep one of the two",
    ),
    "a wrong setting": (["--set", "units.wash.stages=none"], "units.wash.stages"),
    "a setting of the study": (["--set", "studies.flows.record=3"], "studies.flows.record: is no list of addresses"),
}


@pytest.mark.parametrize("what", WRONG)
def test_a_wrong_command_is_told_in_one_line_and_leaves_nothing(tmp_path, what):
    more, words = WRONG[what]
    code, out, err = runs.here(["study", runs.absorber(tmp_path), *more, "--out", tmp_path / "out"])
    assert (code, out) == (2, "")
    the_one(err, words)
    assert not (tmp_path / "out").exists()


def test_a_file_without_studies_and_a_command_without_out(tmp_path):
    file = runs.absorber(tmp_path, runs.ABSORBER.split("[studies")[0])
    code, _, err = runs.here(["study", file, "--out", tmp_path / "out"])
    assert code == 2
    the_one(err, "studies: the file declares no study; add [studies.NAME] with change = { ... }")
    code, _, err = runs.here(["study", file])
    assert code == 2
    the_one(err, "--out")
    assert not (tmp_path / "out").exists()


# --- progress


def on_terminal(arguments, spec, columns=100):
    """Run with standard error on a terminal, and give the exit status and what it was sent."""
    master, slave = pty.openpty()
    fcntl.ioctl(slave, termios.TIOCSWINSZ, struct.pack("HHHH", 24, columns, 0, 0))
    process = runs.begin(arguments, spec, stderr=slave)
    os.close(slave)
    shown = b""
    while True:
        try:
            piece = os.read(master, 4096)
        except OSError:  # the other end is closed
            break
        if not piece:
            break
        shown += piece
    process.communicate(timeout=60)
    os.close(master)
    return process.returncode, shown.decode()


@pytest.mark.parametrize("columns", [100, 36])
def test_progress_on_a_terminal_is_one_line_with_count_share_and_time_left(tmp_path, columns):
    spec = {"slow": 0.15, "log": os.devnull}
    code, shown = on_terminal(["study", runs.absorber(tmp_path), "--out", tmp_path / "out"], spec, columns)
    assert code == 0 and shown.endswith("\r\n") and shown.count("\n") == 1
    pieces = shown.strip("\r\n").split("\r")
    assert len(pieces) > 4 and all(len(piece) < columns for piece in pieces)
    assert any(re.search(r"\d+ of 200 cases, \d+ %, \d+ s left", piece) for piece in pieces)
    assert "200 of 200 cases, 100 %" in pieces[-1] and "left" not in pieces[-1]
    counts = [int(re.search(r"(\d+) of 200", piece)[1]) for piece in pieces if "of 200" in piece]
    assert counts == sorted(counts)
    # resumed, what is kept is counted, and no time is told from it
    code, shown = on_terminal(["study", runs.absorber(tmp_path), "--out", tmp_path / "out"], {}, columns)
    assert code == 0 and re.search(r"200 of 200 cases, 100 %", shown) and "left" not in shown


def test_nothing_of_progress_goes_into_a_pipe(tmp_path):
    code, out, err = runs.run(["study", runs.absorber(tmp_path), "--out", tmp_path / "out"], {"slow": 0.02, "log": os.devnull})
    assert code == 0 and err == "" and "\r" not in out and "left" not in out


def test_failed_cases_are_counted_and_times_are_words():
    class Terminal(io.StringIO):
        def isatty(self):
            return True

    screen = Terminal()
    progress = Progress("n" * 80, screen)
    for done, left in ((10, 7.0), (20, 3000.0), (30, 20000.0)):
        progress.last = -1.0
        progress("margin", done, 40, 3, left)
    progress.end()
    text = screen.getvalue()
    assert "3 failed, 7 s left" in text and "50 min left" in text and "5 h 33 min left" in text and "margin" in text
    assert all(len(piece) < 80 for piece in text.strip("\n").split("\r"))


# --- wrong entries

BASE = {
    "flows": {
        "title": "t",
        "change": [
            {"units.wash.stages": [3, 4], "feeds.vent.flow": ["9 mol/s", "10 mol/s"]},
            {"feeds.oil_in.flows.oil": {"times": [0.9, 1.1]}},
            {"feeds.vent.temperature": {"from": "20 degC", "to": "30 degC", "step": "5 K"}},
            {"feeds.vent.pressure": {"from": "1 bar", "to": "2 bar", "count": 3, "spacing": "log"}},
        ],
        "record": ["streams.cleaned.fraction.toluene"],
        "hold": [],
        "purity": False,
    },
    "drawn": {
        "change": {
            "feeds.vent.flow": {"from": "8 mol/s", "to": "9 mol/s"},
            "feeds.vent.pressure": {"deviation": "5 %", "shape": "lognormal"},
        },
        "sample": {"count": 8, "method": "halton", "seed": 3},
    },
    "spread": {
        "spread": {
            "feeds.vent.flow": "5 %",
            "feeds.vent.pressure": {"shape": "triangular", "from": "1 bar", "to": "2 bar", "mean": "1.5 bar"},
            "feeds.oil_in.flows.oil": {"shape": "uniform", "from": "5 mol/s", "to": "6 mol/s", "spacing": "log"},
        },
        "sample": {"count": 16},
        "confidence": 0.9,
        "meets": {},
        "hold": [],
    },
}
LOOP = {
    "bleed": {
        "change": {"units.divide.shares.bleed": {"from": 1e-3, "to": 1e-2, "count": 3, "spacing": "log"}},
        "hold": ["emission"],
        "purity": {
            "makeup": "top_up",
            "contaminants": ["resin"],
            "limits": {"resin": {"mass_fraction": 0.02}},
            "bleed": "units.divide.shares.bleed",
            "between": [1e-5, 0.5],
            "inventory": "2 t",
            "start": {"resin": 0.001},
        },
    },
    "confidence": {
        "spread": {"units.trim.temperature": "1 K", "equilibrium.oil.toluene.activity.a": {"from": -0.85, "to": -0.71}},
        "meets": {"emission": "at_most"},
        "margin": ["feeds.steam.flow"],
        "record": ["requirements.emission.value"],
    },
}
BAD = [
    None,
    True,
    False,
    0,
    -1,
    1,
    2.5,
    1e308,
    -1e308,
    5e-324,
    math.nan,
    math.inf,
    -math.inf,
    10**400,
    -(10**400),
    10**12,
    "",
    " ",
    "x",
    "5 %",
    "-5 %",
    "0 %",
    "1e400 %",
    "1e308 kg/h",
    "5 kg",
    "µ\n\0",
    "a" * 5000,
    "feeds.vent.flow",
    "requirements.emission.equals",
    [],
    [[]],
    [None],
    [1, 2],
    ["x"],
    [math.nan],
    [{}],
    {},
    {"x": 1},
    {"from": 1, "to": 2, "count": 3},
    {"from": "a", "to": [], "count": {}},
    {"times": None},
    {"times": [10**400]},
    {"times": [1e308]},
    {"deviation": math.nan},
    {"deviation": "5 %"},
    {"": 1},
    [[1, 2], [3]],
    {"from": "1e-300 kg/h", "to": "1e300 kg/h", "step": "1e-300 kg/h"},
    {"from": 1, "to": 10**12, "step": 1},
    {"count": 10**7},
    {"from": -1e308, "to": 1e308, "count": 3},
    {"from": 5e-324, "to": 1e10, "spacing": "log"},
]


def places(item, path=()):
    """Paths to everything that stands in nested tables and lists, the whole first."""
    yield path
    for key in item if isinstance(item, dict) else range(len(item)) if isinstance(item, list) else ():
        yield from places(item[key], (*path, key))


def mutated(item, path, value, drop=False):
    """A copy with another value at a path, or nothing there."""
    if not path:
        return value
    item = copy.deepcopy(item)
    table = item
    for key in path[:-1]:
        table = table[key]
    if drop:
        del table[path[-1]]
    else:
        table[path[-1]] = value
    return item


def mutations(base):
    for path in places(base):
        yield from ((path, mutated(base, path, value)) for value in BAD)
        if path:
            yield path, mutated(base, path, None, drop=True)
        inner = base
        for key in path:
            inner = inner[key]
        if isinstance(inner, dict):
            for key in ("x", "", "count", "a.b", "units.wash.stages", "equilibrium.cold.toluene.x"):
                yield from ((path, mutated(base, (*path, key), value)) for value in (1, "x", None, [1, 2], "5 %"))


def read_with_care(sheet, name, entries, told):
    """Read entries: a study, or faults of one line each with address and remedy, and never anything else."""
    context = Context()
    sheet.given["studies"] = {name: entries}
    found = read_studies(sheet, context)
    assert context.faults or name in found, told
    for fault in context.faults:
        assert fault.address.startswith("studies.") and fault.problem and fault.remedy, told
        assert len(str(fault)) < 1000 and str(fault).isprintable(), told
    return context.faults, found.get(name)


def tried(sheet, studies, share):
    rng, faulty, whole = random.Random(11), 0, 0
    for name, base in studies.items():
        assert read_with_care(sheet, name, base, name)[0] == []
        for path, entries in mutations(base):
            if rng.random() < share:
                faults, found = read_with_care(sheet, name, entries, (path, entries))
                faulty, whole = faulty + bool(faults), whole + (not faults)
                if faults and isinstance(entries, dict):  # the same from Python, as one exception
                    sheet.given["plain_si"] = False
                    with pytest.raises(InputError) as caught:
                        leanloop.study(sheet, name)
                    assert list(caught.value.faults) == list(dict.fromkeys(faults))
                elif found is not None and found.cases.count < 100 and rng.random() < 0.1:
                    found.run().to_dict()
    return faulty, whole


def test_no_wrong_entry_ends_otherwise_than_in_faults(tmp_path):
    faulty, whole = tried(leanloop.read(runs.absorber(tmp_path)), BASE, 0.5)
    assert faulty > 800 and whole > 20
    faulty, _ = tried(leanloop.read(runs.loop(tmp_path)), LOOP, 0.08)
    assert faulty > 50


@pytest.mark.campaign
def test_no_wrong_entry_at_all_ends_otherwise_than_in_faults(tmp_path):
    tried(leanloop.read(runs.absorber(tmp_path)), BASE, 1.0)
    tried(leanloop.read(runs.loop(tmp_path)), LOOP, 1.0)


MANY = """
[studies.bad]
title = 3
colour = "red"
change = { "feeds.vent.flow" = [1, "x"], "feeds.vent.pressure" = { from = "1 bar", to = "1 bar", count = 1 } }
record = ["streams.nowhere.fraction.toluene", 7]
purity = "yes"

[studies.worse]
spread = { "feeds.vent.flow" = inf, "feeds.none.flow" = "5 %", "feeds.vent.temperature" = "5 %" }
sample = { count = 1, method = "dice" }
confidence = 1.5
margin = [[], "units.wash.stages"]
meets = { none = "at_most" }

[studies.none]
"""
ADDRESSES = [
    "studies.bad.title",
    "studies.bad.colour",
    'studies.bad.change."feeds.vent.flow"[0]',
    'studies.bad.change."feeds.vent.flow"[1]',
    'studies.bad.change."feeds.vent.pressure".count',
    "studies.bad.record[0]",
    "studies.bad.record[1]",
    "studies.bad.purity",
    'studies.worse.spread."feeds.vent.flow"',
    'studies.worse.spread."feeds.none.flow"',
    "studies.worse.sample.count",
    "studies.worse.sample.method",
    "studies.worse.confidence",
    "studies.worse.margin[0]",
    "studies.worse.margin[1]",
    "studies.worse.meets.none",
    "studies.none",
]


@pytest.mark.parametrize(
    "command", [["study", "flows", "--out", "{out}"], ["study", "--out", "{out}"], ["check"], ["solve"], ["limits"]]
)
def test_every_fault_of_every_study_is_told_at_once_by_every_command(tmp_path, command):
    file = runs.absorber(tmp_path, runs.ABSORBER + MANY)
    head, *more = command
    code, out, err = runs.here([head, file, *(item.format(out=tmp_path / "out") for item in more)])
    assert (code, out) == (2, "") and not (tmp_path / "out").exists()
    for line in lines(err):
        assert line.startswith(f"{file}: studies.") and re.search(r": [^;]+; .+", line), line
    for address in ADDRESSES:
        assert f"{file}: {address}" in err, address


def test_more_quantities_than_a_table_takes_are_refused_before_anything_is_solved(tmp_path, monkeypatch):
    sheet = leanloop.read(runs.loop(tmp_path))
    words = {
        "change": {"feeds.vent.pressure": [1.05e5, 1.06e5]},
        "record": ["streams.lean.total_mol_s", "streams.rich.total_mol_s"],
    }
    monkeypatch.setattr("leanloop.studies.read.MOST_COLUMNS", 4)  # each is kept once more with clean feeds
    with pytest.raises(InputError, match="studies.many.record: makes more than 4 columns; record fewer, or leave purity out"):
        leanloop.study(sheet, "many", **words)
    leanloop.study(sheet, "many", **words, purity=False)
