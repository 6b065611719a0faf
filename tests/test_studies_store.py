"""Studies that last: killed, interrupted, out of room or refused, and gone on with."""

import fcntl
import json
import os
import random
import resource
import shutil
import signal
import sqlite3
import subprocess
import sys
import time
from contextlib import contextmanager
from pathlib import Path

import numpy as np
import pytest
import study_runs as runs

import leanloop
import leanloop.studies.study
from leanloop.errors import StudyError
from leanloop.studies import tasks
from leanloop.studies.campaign import Memory
from leanloop.studies.store import Store

KILLS = 20


def quiet(err):
    """Standard error without a trace of Python."""
    assert "Traceback" not in err and "Error:" not in err and "Exception ignored" not in err, err
    return err


def one_line(err, *words):
    assert quiet(err).count("\n") == 1 and err.endswith("\n"), err
    for word in words:
        assert word in err, err


def whole(directory, name, file, study=None):
    """Run a study to its end, uninterrupted: (contents, files of the finish, batches calculated)."""
    log = directory / "whole.log"
    code, _, err = runs.run(["study", file, *([study] if study else []), "--out", directory / "whole"], {"log": str(log)})
    assert code == 0 and err == ""
    return runs.contents(directory / "whole" / f"{name}.sqlite"), runs.written(directory / "whole"), runs.calculated(log)


# --- killed


# One process that has imported everything forks a run for each kill: what is killed is a whole run of the command,
# at a moment of its own time, without seconds of start-up in which nothing can go wrong.
NURSERY = """\
import ctypes, json, os, shutil, signal, sys, time
moments, rest = json.loads(sys.argv[1]), sys.argv[2:]
source, tail = runs.split("sys.argv = ")


def child(spec, out):
    process = os.fork()
    if process:
        return process
    code = 70
    try:
        sys.argv = ["driver", json.dumps(spec)]
        exec(source, {"__name__": "driver"})
        from leanloop import cli
        sys.stdout = open(os.devnull, "w")
        code = cli.main([*rest, "--out", out])
    finally:
        os._exit(code)


def wait(process):
    return os.waitstatus_to_exitcode(os.waitpid(process, 0)[1])


import leanloop.cli
import leanloop.studies.store

begin = time.perf_counter()
assert wait(child({"log": "first.log"}, "first")) == 0
length = time.perf_counter() - begin
for number, moment in enumerate(moments):
    out = f"run{number}"
    process = child({"log": f"{out}.log"}, out)
    time.sleep(moment * length)
    os.kill(process, signal.SIGKILL)
    wait(process)
    if os.path.exists(out):
        shutil.copytree(out, f"{out}_killed")
    print(json.dumps([out, wait(child({"log": f"{out}_again.log"}, out))]), flush=True)
"""


def killed_at_moments(directory, file, study, moments):
    """Kill a study at shares of its time, and go on with it; (name, exit status) of each."""
    script = f"runs = {runs.DRIVER!r}\n{NURSERY}"
    done = subprocess.run([sys.executable, "-c", script, json.dumps(moments), "study", str(file), study], cwd=directory,
                          env=runs.ENVIRONMENT, capture_output=True, text=True, timeout=900)  # fmt: skip
    assert done.returncode == 0, done.stderr
    assert done.stderr == ""
    return [json.loads(line) for line in done.stdout.splitlines()]


def the_same_after_kills(directory, file, study, moments, seen):
    """Check every run that was killed and gone on with against one that was not."""
    for out, code in killed_at_moments(directory, file, study, moments):
        name = f"{study}.sqlite"
        assert code == 0, out
        assert runs.contents(directory / out / name) == runs.contents(directory / "first" / name), out
        assert runs.written(directory / out) == runs.written(directory / "first"), out
        assert not list((directory / out).glob("*.lock"))
        # what was kept at the kill is calculated no more, and nothing else is left out
        every = runs.calculated(directory / "first.log")
        before = runs.kept(directory / f"{out}_killed" / name)
        assert before == every[: len(before)]
        assert runs.calculated(directory / f"{out}_again.log") == every[len(before) :]
        seen.append((len(before), len(every), bool(runs.written(directory / f"{out}_killed")) if before else False))


def test_killed_at_twenty_random_moments_a_study_ends_as_if_it_had_not_been(tmp_path):
    rng, seen = random.Random(20261), []
    for place, (study, share) in enumerate((("flows", 8), ("bleed", 6), ("confidence", 6))):
        directory = tmp_path / study
        directory.mkdir()
        file = runs.loop(directory) if place else runs.absorber(directory)
        # evenly over the whole time, at random inside each stretch
        moments = [(number + rng.random()) / share for number in range(share)]
        the_same_after_kills(directory, file, study, moments, seen)
    assert len(seen) == KILLS
    assert any(0 < before < every for before, every, _ in seen)  # some fell into the middle


@pytest.mark.campaign
def test_killed_at_moments_a_study_with_its_curves_ends_as_if_it_had_not_been(tmp_path):
    rng, seen = random.Random(7), []
    file = runs.loop(tmp_path, 48, purity='{ limits = { resin = { mass_fraction = 0.02 } }, inventory = "2 t" }')
    the_same_after_kills(tmp_path, file, "bleed", [rng.random() for _ in range(8)], seen)
    assert any(0 < before < every for before, every, _ in seen)


@pytest.fixture(scope="module")
def scrubber(tmp_path_factory):
    """The scrubber's file, with what its uninterrupted study holds, writes and calculates."""
    directory = tmp_path_factory.mktemp("scrubber")
    file = runs.absorber(directory)
    return file, *whole(directory, "flows", file)


def statements_of(file, directory):
    """How many SQL statements a run takes, from a run that counts them by dying at none."""
    counts = []
    connect = sqlite3.connect

    def counting(*arguments, **words):
        base = connect(*arguments, **words)
        base.set_trace_callback(counts.append)
        return base

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr("leanloop.studies.store.sqlite3.connect", counting)
        patch.setattr(leanloop.studies.study, "MOST_AT_ONCE", 16)
        leanloop.study(leanloop.read(file), "flows").run(directory)
    return counts


def test_killed_before_any_statement_of_the_file_nothing_is_lost(scrubber, tmp_path):
    file, holds, writes, every = scrubber
    texts = statements_of(file, tmp_path / "count")
    pick = random.Random(5)
    sorts = {  # one of each, and the first, the last and one anywhere
        "begin": [n for n, text in enumerate(texts, 1) if text.startswith("BEGIN")],
        "commit": [n for n, text in enumerate(texts, 1) if text.startswith("COMMIT")],
        "row": [n for n, text in enumerate(texts, 1) if text.startswith('INSERT INTO "cases"')],
        "note": [n for n, text in enumerate(texts, 1) if text.startswith("INSERT INTO batches")],
    }
    places = [1, texts.index(next(text for text in texts if text.startswith("CREATE"))) + 1, len(texts)]
    places += [pick.choice(group[1:]) for group in sorts.values()]
    for place in places:
        out = tmp_path / f"at{place}"
        code, _, err = runs.run(["study", file, "--out", out], {"statement": place})
        assert code == -signal.SIGKILL, (place, texts[place - 1])
        quiet(err)
        shutil.copytree(out, tmp_path / "look", dirs_exist_ok=True)
        before = runs.kept(tmp_path / "look" / "flows.sqlite")
        shutil.rmtree(tmp_path / "look")
        assert runs.gone_on_with(file, out) == every[len(before) :]
        assert runs.contents(out / "flows.sqlite") == holds, texts[place - 1]
        assert runs.written(out) == writes


@pytest.mark.parametrize("place", range(4))
def test_killed_while_the_finish_is_written_no_file_is_half_written(scrubber, tmp_path, place):
    file, holds, writes, _ = scrubber
    code, _, err = runs.run(["study", file, "--out", tmp_path / "out"], {"file": place})
    assert code == -signal.SIGKILL
    quiet(err)
    for name, content in runs.written(tmp_path / "out").items():
        assert name.startswith(".leanloop-") or content == writes[name]
    assert runs.gone_on_with(file, tmp_path / "out") == []
    after = {name: content for name, content in runs.written(tmp_path / "out").items() if not name.startswith(".")}
    assert after == writes and runs.contents(tmp_path / "out" / "flows.sqlite") == holds


def group_is_empty(group):
    """Whether all processes of a group are gone, or go within some seconds."""
    end = time.monotonic() + 10
    while time.monotonic() < end:
        try:
            os.killpg(group, 0)
        except ProcessLookupError:
            return True
        time.sleep(0.05)
    return False


def under_way(file, out, ready, *more, slow=0.3, batch=3):
    """Start a study in a group of processes of its own, and wait until some batches have begun."""
    spec = {"slow": slow, "ready": str(ready), "log": os.devnull, "batch": batch}
    process = runs.begin(["study", file, "--out", out, *more], spec, start_new_session=True)
    end = time.monotonic() + 60
    while not ready.exists() and process.poll() is None and time.monotonic() < end:
        time.sleep(0.02)
    assert process.poll() is None
    return process


def test_killed_with_workers_nothing_is_left_running_and_the_next_run_goes_on(scrubber, tmp_path):
    file, holds, writes, every = scrubber
    process = under_way(file, tmp_path / "out", tmp_path / "ready", "--workers", "2")
    process.kill()
    process.wait(60)
    # at once: workers that have not heard yet must not keep the next run out
    code, _, err = runs.run(["study", file, "--out", tmp_path / "out", "--workers", "2"], {})
    assert code == 0 and err == ""
    assert group_is_empty(process.pid)
    assert runs.contents(tmp_path / "out" / "flows.sqlite", False) == sorted(holds)
    assert runs.written(tmp_path / "out") == writes
    process.communicate()


# --- interrupted


@pytest.mark.parametrize("workers", ["1", "2"])
@pytest.mark.parametrize("whom", ["process", "group"])
def test_an_interrupt_ends_it_with_a_message_and_keeps_what_is_done(scrubber, tmp_path, workers, whom):
    file, holds, writes, every = scrubber
    process = under_way(file, tmp_path / "out", tmp_path / "ready", "--workers", workers)
    begin = time.monotonic()
    (os.killpg if whom == "group" else os.kill)(process.pid, signal.SIGINT)
    out, err = process.communicate(timeout=60)
    assert process.returncode == 1 and out == ""
    one_line(err, str(file), "interrupted; finished batches are kept, the same command goes on from there")
    assert time.monotonic() - begin < 20
    assert group_is_empty(process.pid)
    before = runs.kept(tmp_path / "out" / "flows.sqlite")
    assert 0 < len(before) < len(every)
    assert runs.written(tmp_path / "out") == {} and not (tmp_path / "out" / "flows.lock").exists()
    more = runs.gone_on_with(file, tmp_path / "out")
    assert runs.contents(tmp_path / "out" / "flows.sqlite", False) == sorted(holds)
    assert runs.written(tmp_path / "out") == writes
    assert sorted(more) == sorted(set(every) - set(before))


def test_interrupted_as_its_workers_start_they_say_nothing(scrubber, tmp_path):
    file, _, writes, _ = scrubber
    for number, wait in enumerate((0.0, 0.004, 0.012, 0.03)):
        out, ready = tmp_path / f"out{number}", tmp_path / f"ready{number}"
        process = under_way(file, out, ready, "--workers", "4", slow=0.05, batch=1)
        time.sleep(wait)
        os.killpg(process.pid, signal.SIGINT)
        _, err = process.communicate(timeout=60)
        assert process.returncode == 1
        one_line(err, "interrupted")
        assert group_is_empty(process.pid)
        runs.gone_on_with(file, out)
        assert runs.written(out) == writes


# --- the same study, or another


def in_python(file, directory, settings=(), **words):
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(leanloop.studies.study, "MOST_AT_ONCE", 16)
        return leanloop.study(leanloop.read(file, settings), "flows").run(directory, **words)


def test_results_are_those_of_memory_and_the_same_when_read_again(tmp_path):
    file = runs.absorber(tmp_path)
    free, first, again = (in_python(file, place) for place in (None, tmp_path / "out", tmp_path / "out"))
    assert list(free.cases) == list(first.cases) == list(again.cases)
    for key, values in free.cases.items():
        for other in (first.cases[key], again.cases[key]):
            assert type(other) is type(values)
            np.testing.assert_array_equal(other, values)
    assert str(free) == str(first) == str(again)


CHANGES = {
    "a number": lambda text: text.replace("stages = 6", "stages = 7"),
    "a unit of measure": lambda text: text.replace('flow = "10 mol/s"', 'flow = "10 kmol/h"'),
    "a component more": lambda text: text.replace("[components]", '[components]\nwater = { molar_mass = "18 g/mol" }'),
}
STUDIES = {
    "a value": lambda text: text.replace('"12 mol/s"', '"13 mol/s"'),
    "what is recorded": lambda text: text.replace(', "streams.rich.loading.toluene"', ""),
    "the order of the inputs": lambda text: text.replace(
        '"units.wash.stages" = [2, 3, 4, 5, 6], "feeds.vent.flow" = { from = "8 mol/s", to = "12 mol/s", count = 40 }',
        '"feeds.vent.flow" = { from = "8 mol/s", to = "12 mol/s", count = 40 }, "units.wash.stages" = [2, 3, 4, 5, 6]'),
}  # fmt: skip


@pytest.fixture(scope="module")
def made(tmp_path_factory):
    """A directory with a finished study, and the bytes of its file."""
    directory = tmp_path_factory.mktemp("made")
    code, _, err = runs.run(["study", runs.absorber(directory), "--out", directory / "out"])
    assert code == 0 and err == ""
    return directory, (directory / "out" / "flows.sqlite").read_bytes()


def refused(made, arguments, word):
    directory, content = made
    before = runs.written(directory / "out")
    code, out, err = runs.here(["study", *arguments, "--out", directory / "out"])
    assert (code, out) == (2, "")
    one_line(err, "flows.sqlite", f"holds results of {word}", "name another directory")
    assert (directory / "out" / "flows.sqlite").read_bytes() == content and runs.written(directory / "out") == before
    assert runs.listed(directory / "out") == ["flows.csv", "flows.sqlite", "flows.txt"]


@pytest.mark.parametrize("what", CHANGES)
def test_a_changed_flowsheet_is_refused(made, tmp_path, what):
    file = runs.absorber(tmp_path, CHANGES[what](runs.ABSORBER))
    refused(made, [file], "another flowsheet")


def test_a_setting_is_a_changed_flowsheet(made, tmp_path):
    refused(made, [runs.absorber(tmp_path), "--set", "units.wash.stages=7"], "another flowsheet")


def test_other_points_in_the_file_of_a_table_are_a_changed_flowsheet(made, tmp_path):
    refused(made, [runs.absorber(tmp_path, points=runs.POINTS.replace("0.015", "0.0151"))], "another flowsheet")


@pytest.mark.parametrize("what", STUDIES)
def test_a_changed_study_is_refused(made, tmp_path, what):
    refused(made, [runs.absorber(tmp_path, STUDIES[what](runs.ABSORBER))], "another study")


def test_results_of_another_version_are_refused(made, tmp_path, monkeypatch):
    with monkeypatch.context() as patch:
        patch.setattr(leanloop.studies.study, "VERSION", "0.0.0")
        refused(made, [runs.absorber(tmp_path)], f"version {leanloop.__version__}")


def test_titles_comments_and_places_may_change(tmp_path):
    assert runs.here(["study", runs.absorber(tmp_path), "--out", tmp_path / "out"])[0] == 0
    elsewhere = tmp_path / "elsewhere"
    elsewhere.mkdir()
    text = "# a remark\n" + runs.ABSORBER.replace("A scrubber", "The scrubber").replace("Stages and flow", "Flow and stages")
    code, out, err = runs.here(["study", runs.absorber(elsewhere, text), "--out", tmp_path / "out"])
    assert code == 0 and err == "" and "Flow and stages" in out
    base = sqlite3.connect(tmp_path / "out" / "flows.sqlite")
    about = dict(base.execute("SELECT key, value FROM about"))
    base.close()
    assert about["_title"] == "Flow and stages" and about["_state"] == "finished"
    assert about["version"] == leanloop.__version__ and json.loads(about["flowsheet"])["numbers"]["units.wash.stages"] == 6


# --- two at once


def test_a_second_run_in_the_directory_is_refused_and_the_first_undisturbed(scrubber, tmp_path):
    file, holds, writes, _ = scrubber
    process = under_way(file, tmp_path / "out", tmp_path / "ready", slow=0.15)
    code, out, err = runs.run(["study", file, "--out", tmp_path / "out"], {})
    assert (code, out) == (2, "")
    one_line(err, "flows.sqlite: another run is writing it; wait for it, or name another directory")
    assert process.wait(60) == 0
    process.communicate()
    assert runs.contents(tmp_path / "out" / "flows.sqlite") == holds and runs.written(tmp_path / "out") == writes


def test_the_lock_holds_within_a_process_and_against_one_that_was_removed(tmp_path):
    first = Store(tmp_path / "a.sqlite", {})
    with pytest.raises(StudyError, match="another run"):
        Store(tmp_path / "a.sqlite", {})
    stale = os.open(tmp_path / "a.lock", os.O_RDWR)  # opened while the first run held it
    first.close()
    assert not (tmp_path / "a.lock").exists()
    fcntl.flock(stale, fcntl.LOCK_EX)  # of a file that is no more: keeps nobody out
    second = Store(tmp_path / "a.sqlite", {})
    with pytest.raises(StudyError, match="another run"):
        Store(tmp_path / "a.sqlite", {})
    second.close()
    os.close(stale)


def test_a_child_of_the_process_does_not_keep_the_lock(tmp_path):
    store = Store(tmp_path / "a.sqlite", {})
    reader, writer = os.pipe()
    child = os.fork()
    if child == 0:
        os.close(writer)
        os.read(reader, 1)
        os._exit(0)
    try:
        os.close(reader)
        store.close()
        Store(tmp_path / "a.sqlite", {}).close()
    finally:
        os.close(writer)
        os.waitpid(child, 0)


def test_a_database_that_another_program_holds_says_so(tmp_path, monkeypatch):
    Store(tmp_path / "a.sqlite", {}).close()
    monkeypatch.setattr("leanloop.studies.store.sqlite3.connect", lambda path, **words: _real(path, timeout=0.1, **words))
    other = _real(tmp_path / "a.sqlite", isolation_level=None)
    other.execute("BEGIN EXCLUSIVE")
    with pytest.raises(StudyError, match="another program holds it"):
        Store(tmp_path / "a.sqlite", {})
    other.close()


_real = sqlite3.connect


# --- files that are none of ours


def foreign(path):
    base = sqlite3.connect(path)
    base.execute("CREATE TABLE about (title TEXT)")
    base.commit()
    base.close()


GARBAGE = {
    "text": lambda path: path.write_text("a note to myself\n" * 200),
    "a line": lambda path: path.write_text("x"),
    "noise": lambda path: path.write_bytes(random.Random(1).randbytes(9000)),
    "another database": foreign,
    "a head and noise": lambda path: path.write_bytes(b"SQLite format 3\x00" + random.Random(2).randbytes(9000)),
}


@pytest.mark.parametrize("what", GARBAGE)
def test_a_file_of_something_else_is_told_and_left_alone(tmp_path, what):
    (tmp_path / "out").mkdir()
    path = tmp_path / "out" / "flows.sqlite"
    GARBAGE[what](path)
    before = path.read_bytes()
    code, out, err = runs.here(["study", runs.absorber(tmp_path), "--out", tmp_path / "out"])
    assert (code, out) == (2, "")
    one_line(err, "flows.sqlite", "no file of a study; name another directory")
    assert path.read_bytes() == before and [item.name for item in (tmp_path / "out").iterdir()] == ["flows.sqlite"]


def test_a_directory_in_place_of_the_file_is_told(tmp_path):
    (tmp_path / "out" / "flows.sqlite").mkdir(parents=True)
    code, out, err = runs.here(["study", runs.absorber(tmp_path), "--out", tmp_path / "out"])
    assert (code, out) == (2, "")
    one_line(err, "flows.sqlite", "cannot be")


# --- where nothing can be written


@contextmanager
def mounted(place, *options):
    """A small file system of its own, where this user may mount one."""
    place.mkdir()
    if subprocess.run(["mount", "-t", "tmpfs", "-o", ",".join(options), "none", place], capture_output=True).returncode:
        pytest.skip("this user cannot mount a file system")
    try:
        yield place
    finally:
        subprocess.run(["umount", "-l", place], check=True)


@pytest.mark.parametrize("out", ["/proc/none", "/dev/null", "/dev/null/below", "{file}", "{file}/below"])
def test_a_place_that_is_no_directory_is_told(tmp_path, out):
    file = runs.absorber(tmp_path)
    code, text, err = runs.here(["study", file, "--out", out.format(file=file)])
    assert (code, text) == (2, "")
    one_line(err, "cannot be written", "name a directory that can")


def test_a_read_only_directory_is_told(scrubber, tmp_path):
    file, holds, _, _ = scrubber
    with mounted(tmp_path / "disk", "size=1m") as place:
        runs.gone_on_with(file, place)
        subprocess.run(["mount", "-o", "remount,ro", place], check=True)
        for out in (place, place / "new"):
            code, text, err = runs.here(["study", file, "--out", out], 16)
            assert (code, text) == (2, "")
            one_line(err, "cannot be written", "name a directory that can")
        assert runs.contents(place / "flows.sqlite") == holds


@pytest.mark.parametrize("size", [0, 4, 16, 28, 40, 52])
def test_a_full_disk_is_told_and_what_is_finished_stays(scrubber, tmp_path, size):
    file, holds, writes, every = scrubber
    with mounted(tmp_path / "disk", "size=1m") as place:
        (place / "ballast").write_bytes(bytes(2**20 - (size + 4) * 1024))
        code, text, err = runs.here(["study", file, "--out", place / "out"], 16)
        assert (code, text) == (2, "")
        one_line(err, "cannot be written", "make room")
        (place / "ballast").unlink()
        before = runs.kept(place / "out" / "flows.sqlite") if (place / "out").exists() else []
        assert before == every[: len(before)] and len(before) < len(every) + 1
        more = runs.gone_on_with(file, place / "out")
        assert runs.contents(place / "out" / "flows.sqlite") == holds and runs.written(place / "out") == writes
        assert more == every[len(before) :]


@pytest.mark.parametrize("most", [2_000, 10_000, 20_000, 24_000])
def test_a_file_that_may_not_grow_is_told_and_what_is_finished_stays(scrubber, tmp_path, most):
    file, holds, writes, every = scrubber
    limit = lambda: resource.setrlimit(resource.RLIMIT_FSIZE, (most, most))  # noqa: E731
    code, text, err = runs.run(["study", file, "--out", tmp_path / "out"], {}, preexec_fn=limit)
    assert (code, text) == (2, "")
    one_line(err, "cannot be written")
    before = runs.kept(tmp_path / "out" / "flows.sqlite")
    assert before == every[: len(before)]
    more = runs.gone_on_with(file, tmp_path / "out")
    assert runs.contents(tmp_path / "out" / "flows.sqlite") == holds and runs.written(tmp_path / "out") == writes
    assert more == every[len(before) :]


# --- what a table can hold


def test_columns_and_texts_come_back_as_they_went(tmp_path):
    """Names that differ in capitals alone, texts that look like numbers, numbers that have no text."""
    tables = {
        "cases": {
            "case": np.arange(3),
            "streams.a.fraction.CO": np.array([0.1, np.nan, np.inf]),
            "streams.a.fraction.Co": np.array([1 / 3, 5e-324, -1.7976931348623157e308]),
            "streams.A.fraction.co": np.array([np.nan, np.nan, np.nan]),
            "component": ["1", "nan", "inf"],
            'a "quoted" name': ["", "x", "é\n"],
        }
    }
    memory = Memory()
    memory.put("cases", 0, tables, 0)
    store = Store(tmp_path / "a.sqlite", {})
    store.put("cases", 0, tables, 0)
    store.close()
    store = Store(tmp_path / "a.sqlite", {})
    for found in (store.table("cases"), memory.table("cases")):
        assert list(found) == list(tables["cases"])
        for key, values in tables["cases"].items():
            assert type(found[key]) is type(values)
            np.testing.assert_array_equal(found[key], values)
    store.close()


def test_a_batch_that_cannot_be_kept_whole_is_not_kept_at_all(tmp_path):
    store = Store(tmp_path / "a.sqlite", {})
    good = {"cases": {"case": np.arange(2), "x": np.array([1.0, 2.0])}}
    store.put("cases", 0, good, 0)
    with pytest.raises(ValueError):
        store.put("cases", 1, {**good, "curves": {"case": np.arange(2), "y": np.arange(1)}}, 2)
    with pytest.raises(StudyError):
        store.put("cases", 1, {"cases": {**good["cases"], "new": np.arange(2)}}, 2)
    assert store.done("cases") == {0} and len(store.table("cases")["case"]) == 2 and store.table("curves") == {}
    store.close()


def test_a_study_whose_batches_fail_midway_goes_on_from_there(tmp_path, monkeypatch):
    file = runs.absorber(tmp_path)
    calls, plain = [], tasks.work

    def work(payload, changes, first, count):
        calls.append(first)
        if len(calls) == 5:
            raise MemoryError
        return plain(payload, changes, first, count)

    monkeypatch.setattr(tasks, "work", work)
    with pytest.raises(StudyError, match="MemoryError.*finished batches are kept"):
        in_python(file, tmp_path / "out")
    found = in_python(file, tmp_path / "out")
    assert len(calls) == 13 + 1 and sorted(set(calls)) == list(dict.fromkeys(sorted(calls)))
    assert found.cases["case"].tolist() == list(range(200))


def test_names_of_files_are_names_of_studies(tmp_path):
    sheet = leanloop.read(runs.absorber(tmp_path))
    for name in ("../out", "a/b", ".", "a b", "x" * 300, "a\n"):
        with pytest.raises(leanloop.InputError):
            leanloop.study(sheet, name, change={"units.wash.stages": [3, 4]}).run(tmp_path / "deep" / "out")
    assert not (tmp_path / "deep").exists() and Path(tmp_path / "scrubber.toml").exists()
