"""Studies beyond one process: the same results, in the same order, whoever calculates and whoever is lost."""

import json
import multiprocessing
import os
import signal
import socket
import subprocess
import sys
import threading
import time
from concurrent.futures import BrokenExecutor, Executor, Future, ProcessPoolExecutor, ThreadPoolExecutor

import numpy as np
import pytest
import study_runs as runs

import leanloop
import leanloop.studies.study
from leanloop.errors import MissingExtra, StudyError
from leanloop.studies import tasks
from leanloop.studies.executors import Here


@pytest.fixture(autouse=True)
def small_batches(monkeypatch):
    """Many batches of few cases."""
    monkeypatch.setattr(leanloop.studies.study, "MOST_AT_ONCE", 16)


@pytest.fixture(scope="module")
def studies(tmp_path_factory):
    """A grid, a study of purity and one of uncertainty, with what they find in this process."""
    directory = tmp_path_factory.mktemp("studies")
    vent = leanloop.read(runs.loop(directory, 96, 48))
    out = {"flows": leanloop.study(leanloop.read(runs.absorber(directory)), "flows")}
    out.update({name: leanloop.study(vent, name) for name in ("bleed", "confidence")})
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(leanloop.studies.study, "MOST_AT_ONCE", 16)
        return {name: (study, study.run()) for name, study in out.items()}


def same(found, other):
    """Everything found is the same to the last bit, in the same order."""
    assert list(found.cases) == list(other.cases)
    for key, values in other.cases.items():
        assert type(found.cases[key]) is type(values)
        np.testing.assert_array_equal(found.cases[key], values)
    assert found.to_dict() == other.to_dict() and str(found) == str(other)


class Reversed(Executor):
    """Gives back the last batch first."""

    def __init__(self):
        self.waiting, self.order, self.stop = [], [], threading.Event()
        self.thread = threading.Thread(target=self.turn)
        self.thread.start()

    def submit(self, fn, /, *args, **kwargs):
        future = Future()
        self.waiting.append((future, fn, args))
        return future

    def turn(self):
        while not self.stop.wait(0.02):
            while self.waiting:
                future, fn, args = self.waiting.pop()
                self.order.append(args[2])
                future.set_result(fn(*args))

    def shutdown(self, wait=True, *, cancel_futures=False):
        self.stop.set()
        self.thread.join()


EXECUTORS = {
    "this process": Here,
    "threads": lambda: ThreadPoolExecutor(3),
    "processes": lambda: ProcessPoolExecutor(2),
    "the last first": Reversed,
}


@pytest.mark.parametrize("name", ["flows", "bleed", "confidence"])
@pytest.mark.parametrize("kind", EXECUTORS)
def test_results_are_the_same_whichever_executor_ran_them(studies, tmp_path, kind, name):
    study, wanted = studies[name]
    with EXECUTORS[kind]() as executor:
        same(study.run(tmp_path, executor=executor), wanted)
        if name == "flows":
            assert executor.submit(max, 1, 2) if kind != "the last first" else executor.order != sorted(executor.order)
    same(study.run(tmp_path), wanted)


@pytest.mark.parametrize("name", ["flows", "bleed", "confidence"])
def test_results_are_the_same_with_workers(studies, tmp_path, name):
    study, wanted = studies[name]
    same(study.run(tmp_path, workers=2), wanted)
    assert not multiprocessing.active_children()


def test_the_command_writes_the_same_with_workers(tmp_path):
    file = runs.loop(tmp_path, 64, 32)
    for study in ("bleed", "confidence"):
        for out, more in (("one", []), ("two", ["--workers", "2"])):
            code, _, err = runs.run(["study", file, study, "--out", tmp_path / out, *more], {})
            assert code == 0 and err == ""
        one, two = (runs.contents(tmp_path / out / f"{study}.sqlite", False) for out in ("one", "two"))
        assert one == two
    assert runs.written(tmp_path / "one") == runs.written(tmp_path / "two") and len(runs.listed(tmp_path / "one")) == 6


def test_progress_tells_every_case_once_whatever_comes_back_first(studies):
    study, _ = studies["flows"]
    told = []
    with Reversed() as executor:
        study.run(executor=executor, progress=lambda part, done, count, failed, left: told.append((part, done, count, failed)))
    assert [done for _, done, _, _ in told] == sorted({done for _, done, _, _ in told})
    assert told[0] == ("cases", 0, 200, 0) and told[-1] == ("cases", 200, 200, 0)


# --- workers that are lost


def test_a_killed_worker_of_the_pool_is_survived(studies, tmp_path):
    study, wanted = studies["bleed"]
    lost = []

    def progress(part, done, count, failed, left):
        if done >= 16 and not lost:
            worker = multiprocessing.active_children()[0]
            worker.kill()
            lost.append(worker.pid)

    same(study.run(tmp_path, workers=2, progress=progress), wanted)
    assert lost and not multiprocessing.active_children()


def _deadly(payload, changes, first, count):
    if first >= 96:
        os.kill(os.getpid(), signal.SIGKILL)
    return _plain(payload, changes, first, count)


_plain = tasks.work


def test_a_batch_that_kills_its_worker_each_time_ends_it_and_keeps_the_others(studies, tmp_path, monkeypatch):
    study, wanted = studies["flows"]
    monkeypatch.setattr(tasks, "work", _deadly)
    with pytest.raises(StudyError, match="workers were lost; finished batches are kept, run the same command again"):
        study.run(tmp_path, workers=2)
    monkeypatch.undo()
    monkeypatch.setattr(leanloop.studies.study, "MOST_AT_ONCE", 16)
    before = runs.kept(tmp_path / "flows.sqlite")
    assert before and max(first for _, first in before) < 96
    same(study.run(tmp_path), wanted)


class Failing(Here):
    """Calculates some batches, and then fails in its own way."""

    def __init__(self, way, good=4):
        self.way, self.good, self.calls = way, good, 0

    def submit(self, fn, /, *args, **kwargs):
        self.calls += 1
        if self.calls == self.good + 1:
            return self.way()
        return super().submit(fn, *args, **kwargs)


def raising(error):
    raise error


def with_error(error):
    future = Future()
    future.set_exception(error)
    return future


def cancelled():
    future = Future()
    future.cancel()
    return future


FAILURES = {
    "breaks when it is handed a batch": (lambda: raising(BrokenExecutor("gone")), "the workers were lost"),
    "breaks while it calculates": (lambda: with_error(BrokenExecutor("gone")), "the workers were lost"),
    "loses one batch": (cancelled, "the workers were lost"),
    "is shut down": (lambda: raising(RuntimeError("cannot schedule new futures")), "RuntimeError: cannot schedule"),
    "says what no other says": (lambda: with_error(OSError("cable\nout")), "OSError: cable out"),
    "gives what is no future": (lambda: None, "a batch could not be calculated"),
    "gives what is no table": (lambda: Here().submit(lambda: 3), "a batch could not be calculated"),
}


@pytest.mark.parametrize("kind", FAILURES)
def test_an_executor_that_fails_is_told_and_what_is_finished_stays(studies, tmp_path, kind):
    study, wanted = studies["flows"]
    way, words = FAILURES[kind]
    with pytest.raises(StudyError) as caught:
        study.run(tmp_path, executor=Failing(way))
    text = str(caught.value)
    assert words in text and "finished batches are kept" in text and "\n" not in text
    before = runs.kept(tmp_path / "flows.sqlite")
    # those that came back before the fault was noticed are kept, the later ones among them
    assert [("cases", 16 * number) for number in range(4)] == before[:4] and ("cases", 64) not in before
    calls = Failing(None, good=100)
    same(study.run(tmp_path, executor=calls), wanted)
    assert calls.calls == 13 - len(before)


def test_an_executor_of_the_caller_stays_open_and_what_waits_in_it_is_taken_back(studies, tmp_path):
    study, _ = studies["flows"]
    release = threading.Event()

    class Holding(ThreadPoolExecutor):
        futures: list = []

        def submit(self, fn, /, *args, **kwargs):
            self.futures.append(super().submit(self.later, fn, *args))
            return self.futures[-1]

        @staticmethod
        def later(fn, *args):
            if args[2] > 0:
                release.wait(30)
            return fn(*args)

    def interrupt(part, done, count, failed, left):
        if done:
            raise KeyboardInterrupt

    with Holding(1) as executor:
        with pytest.raises(KeyboardInterrupt):
            study.run(tmp_path, executor=executor, progress=interrupt)
        release.set()
        # the first was done, and the second may have begun
        assert sum(future.cancelled() for future in executor.futures) >= len(executor.futures) - 2
        assert ThreadPoolExecutor.submit(executor, max, 1, 2).result(10) == 2
    assert runs.kept(tmp_path / "flows.sqlite") == [("cases", 0)]


def test_a_worker_with_another_version_is_refused(studies, tmp_path, monkeypatch):
    study, _ = studies["flows"]
    order = tasks.Order(study.sheet, study.record).packed()
    monkeypatch.setattr(tasks, "VERSION", "0.0.0")
    tasks._unpacked.cache_clear()
    with pytest.raises(StudyError, match="a worker has version 0.0.0 of this program.*give both the same"):
        tasks.work(order, {"feeds.vent.flow": np.array([10.0])}, 0, 1)


@pytest.mark.parametrize("workers", [0, -1])
def test_fewer_than_one_worker_is_refused(studies, tmp_path, workers):
    with pytest.raises(StudyError, match="is no number of processes; give 1 or more"):
        studies["flows"][0].run(tmp_path / "out", workers=workers)
    assert not (tmp_path / "out").exists()


# --- a cluster


def wait_for(what, seconds=60):
    end = time.monotonic() + seconds
    while time.monotonic() < end:
        found = what()
        if found:
            return found
        time.sleep(0.05)
    raise AssertionError("the cluster did not come up")


class Cluster:
    """A scheduler and two workers, each a process of its own on this machine."""

    def __init__(self, directory):
        self.directory, self.file, self.processes = directory, directory / "scheduler.json", []
        self.start("scheduler", "--host", "127.0.0.1", "--port", "0", "--scheduler-file", self.file)
        wait_for(lambda: self.file.exists() and self.file.read_text())
        self.address = json.loads(self.file.read_text())["address"]
        self.workers = [self.worker() for _ in range(2)]
        wait_for(lambda: self.count() == 2)

    def start(self, what, *arguments):
        environment = {**runs.ENVIRONMENT, "DASK_DISTRIBUTED__ADMIN__TICK__INTERVAL": "1s"}
        with open(self.directory / f"{what}{len(self.processes)}.log", "w") as log:
            self.processes.append(
                subprocess.Popen(
                    [sys.executable, "-m", f"distributed.cli.dask_{what}", "--no-dashboard", *map(str, arguments)],
                    stdout=log,
                    stderr=log,
                    env=environment,
                    cwd=self.directory,
                )  # fmt: skip
            )
        return self.processes[-1]

    def worker(self):
        place = self.directory / f"space{len(self.processes)}"
        return self.start("worker", self.address, "--nworkers", "1", "--nthreads", "1", "--no-nanny", "--local-directory", place)

    def count(self):
        import distributed

        with distributed.Client(self.address, set_as_default=False) as client:
            return len(client.scheduler_info()["workers"])

    def close(self):
        for process in reversed(self.processes):
            process.kill()
            process.wait()


@pytest.fixture(scope="module")
def cluster(tmp_path_factory):
    made = Cluster(tmp_path_factory.mktemp("cluster"))
    yield made
    made.close()


@pytest.mark.parametrize("name", ["flows", "confidence"])
def test_results_are_the_same_on_a_cluster(studies, tmp_path, cluster, name):
    study, wanted = studies[name]
    same(study.run(tmp_path, cluster=cluster.address), wanted)


def test_a_killed_worker_of_the_cluster_is_survived(studies, tmp_path, cluster):
    study, wanted = studies["bleed"]
    lost = []

    def progress(part, done, count, failed, left):
        if done >= 16 and not lost:
            lost.append(cluster.workers.pop())
            lost[0].kill()

    try:
        same(study.run(tmp_path, cluster=cluster.address, progress=progress), wanted)
        assert lost[0].wait(10) == -signal.SIGKILL
    finally:
        cluster.workers.append(cluster.worker())
        wait_for(lambda: cluster.count() == 2)


def test_the_command_with_a_cluster_and_an_interrupt(tmp_path, cluster):
    file = runs.absorber(tmp_path, runs.ABSORBER.replace("count = 40", "count = 1600"))
    code, _, err = runs.run(["study", file, "--out", tmp_path / "one"], {})
    assert code == 0 and err == ""
    process = runs.begin(["study", file, "--out", tmp_path / "two", "--cluster", cluster.address], {}, start_new_session=True)
    wait_for(lambda: len(runs.kept(tmp_path / "two" / "flows.sqlite")) > 5)
    os.killpg(process.pid, signal.SIGINT)
    _, err = process.communicate(timeout=60)
    assert process.returncode == 1 and err.count("\n") == 1 and "interrupted; finished batches are kept" in err
    assert 5 < len(runs.kept(tmp_path / "two" / "flows.sqlite")) < 500
    code, _, err = runs.run(["study", file, "--out", tmp_path / "two", "--cluster", cluster.address], {})
    assert code == 0 and err == ""
    assert runs.written(tmp_path / "one") == runs.written(tmp_path / "two")
    assert runs.contents(tmp_path / "one" / "flows.sqlite", False) == runs.contents(tmp_path / "two" / "flows.sqlite", False)


def test_a_scheduler_that_is_lost_ends_it_and_keeps_what_is_done(tmp_path):
    made = Cluster(tmp_path)
    try:
        file = runs.absorber(tmp_path, runs.ABSORBER.replace("count = 40", "count = 1600"))
        process = runs.begin(["study", file, "--out", tmp_path / "out", "--cluster", made.address], {})
        wait_for(lambda: len(runs.kept(tmp_path / "out" / "flows.sqlite")) > 5)
        made.processes[0].kill()
        _, err = process.communicate(timeout=60)
    finally:
        made.close()
    assert process.returncode == 2 and err.count("\n") == 1 and "Traceback" not in err, err
    assert "finished batches are kept" in err and len(runs.kept(tmp_path / "out" / "flows.sqlite")) > 5


def no_cluster(tmp_path, address, *words):
    begin = time.monotonic()
    code, out, err = runs.run(["study", runs.absorber(tmp_path), "--out", tmp_path / "out", "--cluster", address])
    assert (code, out) == (2, "") and err.count("\n") == 1, err
    for word in ("scrubber.toml: cluster", "write the scheduler's address, tcp://HOST:PORT", *words):
        assert word in err
    assert time.monotonic() - begin < 25  # 10 s of patience, and the start of a process on a busy machine
    assert not (tmp_path / "out").exists()


def test_no_scheduler_at_the_address_is_told(tmp_path):
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    no_cluster(tmp_path, f"tcp://127.0.0.1:{port}", f"tcp://127.0.0.1:{port}", "does not answer")


@pytest.mark.campaign
def test_something_else_at_the_address_is_told(tmp_path):
    with socket.socket() as mute:
        mute.bind(("127.0.0.1", 0))
        mute.listen()
        no_cluster(tmp_path, f"tcp://127.0.0.1:{mute.getsockname()[1]}", "does not answer")
    with subprocess.Popen([sys.executable, "-m", "http.server", "0", "--bind", "127.0.0.1"], stdout=subprocess.PIPE,
                          stderr=subprocess.DEVNULL, env={**os.environ, "PYTHONUNBUFFERED": "1"}, text=True) as pages:  # fmt: skip
        port = pages.stdout.readline().split(" port ")[1].split()[0]
        try:
            no_cluster(tmp_path, f"tcp://127.0.0.1:{port}", "does not answer: nothing for 10 s")
        finally:
            pages.kill()


WRONG = ("", "x", "127.0.0.1", "tcp://", "tcp://127.0.0.1", "tcp://127.0.0.1:abc", "tcp://127.0.0.1:99999", "http://127.0.0.1:80")


@pytest.mark.parametrize("address", WRONG)
def test_what_is_no_address_is_told_at_once(tmp_path, address):
    code, out, err = runs.here(["study", runs.absorber(tmp_path), "--out", tmp_path / "out", "--cluster", address])
    assert (code, out) == (2, "") and err.count("\n") == 1 and "is no address; write the scheduler's address" in err
    assert not (tmp_path / "out").exists()


def test_without_the_library_the_error_names_the_extra(studies, tmp_path, monkeypatch):
    monkeypatch.setitem(sys.modules, "distributed", None)
    with pytest.raises(MissingExtra, match=r'pip install "leanloop\[cluster\]"'):
        studies["flows"][0].run(tmp_path / "out", cluster="tcp://127.0.0.1:8786")
    code, out, err = runs.here(["study", runs.absorber(tmp_path), "--out", tmp_path / "out", "--cluster", "tcp://127.0.0.1:8786"])
    assert (code, out) == (2, "") and err.count("\n") == 1 and 'pip install "leanloop[cluster]"' in err
    assert not (tmp_path / "out").exists()


def test_nothing_of_the_cluster_is_imported_before_it_is_asked_for():
    code = "import leanloop, leanloop.cli, sys; print([n for n in sys.modules if n.partition('.')[0] in ('dask', 'distributed')])"
    done = subprocess.run([sys.executable, "-c", code], env=runs.ENVIRONMENT, capture_output=True, text=True)
    assert done.stdout.strip() == "[]"
