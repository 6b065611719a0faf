"""Studies for the tests, and a driver that runs the command line in small batches, tells what it calculates and dies on demand."""

import io
import json
import os
import sqlite3
import subprocess
import sys
from contextlib import redirect_stderr, redirect_stdout
from pathlib import Path

import pytest

import leanloop.studies.study
from leanloop import cli
from leanloop.pictures import gather
from leanloop.studies import tasks

ROOT = Path(__file__).parents[1]
ENVIRONMENT = {**os.environ, "PYTHONPATH": os.pathsep.join([str(ROOT / "src"), os.environ.get("PYTHONPATH", "")])}

# one absorber, a table of equilibrium in a file of its own, 5 x 40 cases
ABSORBER = """\
title = "A scrubber"

[feeds.vent]
phase = "gas"
temperature = "26 degC"
pressure = "1.07 bar"
flow = "10 mol/s"
fractions = { air = "rest", toluene = 0.02 }

[feeds.oil_in]
phase = "liquid"
temperature = "26 degC"
pressure = "1.07 bar"
flows = { oil = "6 mol/s" }

[units.wash]
kind = "absorber"
gas_in = "vent"
liquid_in = "oil_in"
gas_out = "cleaned"
liquid_out = "rich"
stages = 6
equilibrium = "cold"

[components]
air = { molar_mass = "28.96 g/mol", stays_in = "gas" }
toluene = { molar_mass = "92.14 g/mol" }
oil = { molar_mass = "250 g/mol", stays_in = "liquid" }

[equilibrium.cold]
toluene = { model = "table", file = "points.csv" }

[studies.flows]
title = "Stages and flow"
change = { "units.wash.stages" = [2, 3, 4, 5, 6], "feeds.vent.flow" = { from = "8 mol/s", to = "12 mol/s", count = 40 } }
record = ["streams.cleaned.fraction.toluene", "streams.rich.loading.toluene"]
"""
POINTS = "x,y\n0,0\n0.01,0.004\n0.03,0.015\n0.1,0.06\n"


def absorber(directory, text=ABSORBER, points=POINTS):
    """Write the scrubber into a directory and give its file."""
    path = Path(directory) / "scrubber.toml"
    path.write_text(text, encoding="utf-8")
    (Path(directory) / "points.csv").write_text(points, encoding="utf-8")
    return path


def loop(directory, cases=112, sample=48, purity="true"):
    """Write the flowsheet of a closed loop with studies of many batches and give its file."""
    text = (ROOT / "flowsheets" / "coating_vent.toml").read_text(encoding="utf-8").split("[studies.")[0]
    text += f"""
[studies.bleed]
change = {{ "units.divide.shares.bleed" = {{ from = 2e-4, to = 5e-2, count = {cases}, spacing = "log" }} }}
purity = {purity}

[studies.confidence]
spread = {{ "feeds.vent.flow" = "5 %", "units.trim.temperature" = "1 K" }}
sample = {{ count = {sample} }}
margin = ["feeds.steam.flow"]
"""
    path = Path(directory) / "vent.toml"
    path.write_text(text, encoding="utf-8")
    return path


# Run as `python driver.py SPEC ARGUMENT...`, SPEC a JSON table:
#   log        a line with round and first case is added for each batch that is calculated
#   statement  dies by SIGKILL before that SQL statement
#   file       dies before that file of the finish is made (even numbers) or put in its place (odd ones)
#   slow       seconds that each batch takes beside its own
#   batch      a line is added to `ready` when that many batches have begun
DRIVER = """\
import functools, itertools, json, os, pathlib, signal, sqlite3, sys, tempfile, time

import leanloop.studies.store
import leanloop.studies.study
from leanloop import cli
from leanloop.pictures import gather
from leanloop.studies import tasks

gather.of_study = lambda found: []  # they take longer than all the rest
spec = json.loads(sys.argv[1])
leanloop.studies.study.MOST_AT_ONCE = 16


def die():
    os.kill(os.getpid(), signal.SIGKILL)
    time.sleep(60)


plain, begun = tasks.work, itertools.count(1)


@functools.wraps(plain)
def work(payload, changes, first, count):
    with open(spec["log"], "a") as log:
        log.write(f"{tasks._unpacked(payload).part or 'cases'}\\t{first}\\n")
    if next(begun) == spec.get("batch"):
        with open(spec["ready"], "a") as ready:
            ready.write(f"{os.getpid()}\\n")
    time.sleep(spec.get("slow", 0))
    return plain(payload, changes, first, count)


if "log" in spec:
    tasks.work = work
if "statement" in spec:
    connect, statements = sqlite3.connect, itertools.count(1)

    def traced(*arguments, **words):
        base = connect(*arguments, **words)
        base.set_trace_callback(lambda text: die() if next(statements) == spec["statement"] else None)
        return base

    leanloop.studies.store.sqlite3.connect = traced
if "file" in spec:
    make, replace = tempfile.mkstemp, pathlib.Path.replace
    steps = {name: itertools.count(start, 2) for name, start in (("make", 0), ("replace", 1))}

    def making(*arguments, **words):
        return die() if next(steps["make"]) == spec["file"] else make(*arguments, **words)

    def replacing(self, target):
        return die() if next(steps["replace"]) == spec["file"] else replace(self, target)

    tempfile.mkstemp, pathlib.Path.replace = making, replacing
sys.argv = ["leanloop", *sys.argv[2:]]
sys.exit(cli.main())
"""


def begin(arguments, spec=None, **words):
    """Start the command line, through the driver where a table for it is given."""
    start = [sys.executable, "-m", "leanloop"] if spec is None else [sys.executable, "-c", DRIVER, json.dumps(spec)]
    words = {"stdout": subprocess.PIPE, "stderr": subprocess.PIPE, "text": True, "env": ENVIRONMENT, **words}
    return subprocess.Popen([*start, *map(str, arguments)], **words)


def run(arguments, spec=None, **words):
    """Run the command line to its end: exit status, standard output, standard error."""
    process = begin(arguments, spec, **words)
    out, err = process.communicate(timeout=120)
    return process.returncode, out, err


def here(arguments, most=None, calls=None):
    """Run the command line in this process: exit status, standard output, standard error.

    With `most`, in batches of so many cases; what is calculated is added to the list `calls`, as (round, first case).
    """
    plain = tasks.work

    def work(payload, changes, first, count):
        if calls is not None:
            calls.append((tasks._unpacked(payload).part or "cases", first))
        return plain(payload, changes, first, count)

    out, err = io.StringIO(), io.StringIO()
    with pytest.MonkeyPatch.context() as patch, redirect_stdout(out), redirect_stderr(err):
        patch.setattr(leanloop.studies.study, "MOST_AT_ONCE", most or leanloop.studies.study.MOST_AT_ONCE)
        patch.setattr(tasks, "work", work)
        patch.setattr(gather, "of_study", lambda found: [])  # they take longer than all the rest
        code = cli.main([str(item) for item in arguments])
    return code, out.getvalue(), err.getvalue()


def gone_on_with(file, out):
    """Go on with the study of a file to its end, in this process, and give the batches that this took."""
    calls = []
    code, _, err = here(["study", file, "--out", out], 16, calls)
    assert code == 0 and err == "", err
    return calls


def calculated(log):
    """Batches that were calculated, as (round, first case), in order."""
    lines = Path(log).read_text().splitlines() if Path(log).exists() else []
    return [(part, int(first)) for part, first in (line.split("\t") for line in lines)]


def kept(path):
    """Batches that a study's file keeps, as (round, first case), in the order of keeping; none where nothing is written."""
    if not Path(path).exists() or not Path(path).stat().st_size:
        return []
    base = sqlite3.connect(path)
    try:
        if not base.execute("SELECT 1 FROM sqlite_master WHERE name = 'batches'").fetchone():
            return []
        return base.execute("SELECT part, first FROM batches ORDER BY rowid").fetchall()
    finally:
        base.close()


def contents(path, in_order=True):
    """All that a study's file holds, as SQL; rows sorted where batches came as they liked."""
    base = sqlite3.connect(path)
    try:
        lines = list(base.iterdump())
    finally:
        base.close()
    return lines if in_order else sorted(lines)


def written(directory):
    """Everything that the finish writes, by name."""
    names = sorted(item for item in Path(directory).iterdir() if item.suffix not in (".sqlite", ".lock") and item.is_file())
    return {item.name: item.read_bytes() for item in names}


def listed(directory):
    """Names of what a study writes, its pictures left out."""
    return sorted(item.name for item in Path(directory).iterdir() if item.suffix not in (".png", ".svg"))
