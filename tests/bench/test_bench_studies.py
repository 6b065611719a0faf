"""Studies against the bare batch: overhead of keeping results, and cases a second by each way of calculating.

Run with ``python -m pytest -m bench tests/bench/test_bench_studies.py -s`` on a quiet machine with one thread a process.
"""

import gc
import os
import subprocess
import sys
import time
from pathlib import Path

import distributed
import numpy as np
import pytest

HERE = Path(__file__).resolve().parent
sys.path[:0] = [str(HERE.parent)]

import scenes

import leanloop

CASES, TURNS = 10_000, 5
RECORD = ["streams.cleaned.ratio.s0", "streams.lean.ratio.s0"]
HOLD = "units.top_up.hold.oil"
OUTLET = ("outlet", "streams.cleaned.ratio.s0", 1.02e-3, HOLD, ("0.8 mol/s", "6 mol/s"))
pytestmark = pytest.mark.bench


def wash_oil(tmp_path, requirement=False):
    """8 + 7 stages, one solute: the textbook pair."""
    text = scenes.loop(
        (8, 7), scenes.constants(["s0"], [0.125]), scenes.constants(["s0"], [3.16]), 1.787, 10.51, 0.6812, {"s0": 0.0204}
    )
    return scenes.read(tmp_path, text + (scenes.requirement(*OUTLET) if requirement else ""))


def seconds(call):
    """Seconds of a call, the collector of garbage at rest as timeit has it: its work grows with all that pytest holds."""
    gc.collect()
    gc.disable()
    try:
        begin = time.perf_counter()
        call()
        return time.perf_counter() - begin
    finally:
        gc.enable()


def turns(*calls, count=TURNS):
    """Median seconds of each call, in turn so that a slow spell hits all of them."""
    found = [[seconds(call) for call in calls] for _ in range(count)]
    return np.median(np.array(found), axis=0)


def test_overhead_over_the_bare_batch(tmp_path, capsys):
    sheet = wash_oil(tmp_path)
    values = np.linspace(1.3, 2.6, CASES)
    study = leanloop.study(sheet, "s", change={HOLD: {"from": 1.3, "to": 2.6, "count": CASES}}, record=RECORD)
    place = iter(range(1000))

    def bare():
        result = sheet.solve({HOLD: values})
        return [result[address] for address in RECORD]

    alone, memory, kept = turns(bare, study.run, lambda: study.run(tmp_path / f"kept{next(place)}"))
    with capsys.disabled():
        print(f"\nbare batch of {CASES}: {alone:.3f} s, {1e6 * alone / CASES:.1f} us a case; "
              f"study in memory {memory / alone:.3f}, kept in SQLite {kept / alone:.3f} times that")  # fmt: skip
    assert memory / alone < 1.20
    assert kept / alone < 1.25  # the aim of 1.10 is met with room where a case takes more than these 15 us, or the disk is fast


def test_overhead_with_a_requirement(tmp_path, capsys):
    sheet = wash_oil(tmp_path, requirement=True)
    values = np.linspace(10.0, 11.0, CASES)
    key = "feeds.vent.flows.inert"
    record = [*RECORD, "requirements.outlet.free_value"]
    study = leanloop.study(sheet, "s", change={key: {"from": 10.0, "to": 11.0, "count": CASES}}, record=record)
    place = iter(range(1000))

    def bare():
        result = sheet.solve({key: values})
        return [result[address] for address in record]

    alone, kept = turns(bare, lambda: study.run(tmp_path / f"kept{next(place)}"), count=3)
    with capsys.disabled():
        print(f"\nwith a requirement: bare {alone:.2f} s, {1e6 * alone / CASES:.0f} us a case; kept {kept / alone:.3f} times that")
    assert kept / alone < 1.10


def cluster(tmp_path):
    """A scheduler and two workers of one thread each, as processes."""
    environment = {**os.environ, "OPENBLAS_NUM_THREADS": "1", "PYTHONPATH": str(Path(leanloop.__file__).parents[1])}
    where = tmp_path / "scheduler.json"
    dask = [sys.executable, "-m", "distributed.cli.dask_scheduler", "--scheduler-file", str(where), "--port", "0", "--no-dashboard"]
    quiet = {"stdout": subprocess.DEVNULL, "stderr": subprocess.DEVNULL, "env": environment, "cwd": tmp_path}
    processes = [subprocess.Popen(dask, **quiet)]
    worker = [
        sys.executable, "-m", "distributed.cli.dask_worker", "--scheduler-file", str(where), "--nworkers", "1", "--nthreads", "1",
        "--no-dashboard", "--no-nanny",
    ]  # fmt: skip
    processes += [subprocess.Popen(worker, **quiet) for _ in range(2)]
    return processes, where


def test_cases_a_second(tmp_path, capsys):
    sheet = wash_oil(tmp_path, requirement=True)
    key = "feeds.vent.flows.inert"
    study = leanloop.study(sheet, "s", change={key: {"from": 10.0, "to": 11.0, "count": CASES}}, record=RECORD)
    processes, where = cluster(tmp_path)
    try:
        client = distributed.Client(scheduler_file=str(where), timeout="30s", set_as_default=False)
        client.wait_for_workers(2, timeout=60)
        address = client.scheduler.address
        client.close()
        ways = {
            "one process": lambda: study.run(tmp_path / f"a{time.monotonic_ns()}"),
            "two processes": lambda: study.run(tmp_path / f"b{time.monotonic_ns()}", workers=2),
            "dask, two workers": lambda: study.run(tmp_path / f"c{time.monotonic_ns()}", cluster=address),
        }
        for call in ways.values():
            call()
        found = turns(*ways.values(), count=3)
    finally:
        for process in processes:
            process.kill()
            process.wait()
    with capsys.disabled():
        print()
        for name, taken in zip(ways, found, strict=True):
            print(f"{name}: {taken:.2f} s, {CASES / taken:.0f} cases a second, {found[0] / taken:.2f} times one process")
    assert found[1] < 1.5 * found[0]
