"""Speed against what a user would write instead: ratios within one run, medians of interleaved turns.

Run with ``python -m pytest -m bench tests/bench -s``. Counts are asserted; so are the ratios, which
a quiet machine meets with room to spare; seconds are only printed. The aim for a single small loop is
half the speed of the peer; it is not reached (0.3), so that one ratio guards against getting slower.
"""

import sys
import time
import tracemalloc
from pathlib import Path

import numpy as np
import pytest

HERE = Path(__file__).resolve().parent
sys.path[:0] = [str(HERE), str(HERE.parent)]

import independent
import peer
import scenes

from leanloop.column import band

TURNS = 7
pytestmark = pytest.mark.bench

SMALL = dict(stages=(8, 7), cold=[0.125], hot=[3.16], solvent=1.787, gas=10.51, stripping=0.6812, feed=[0.0204])
LARGE = dict(
    stages=(20, 20),
    cold=[0.08, 0.15, 0.3, 0.5, 0.9],
    hot=[1.6, 2.4, 3.5, 5.0, 8.0],
    solvent=60.0,
    gas=100.0,
    stripping=45.0,
    feed=[0.03, 0.02, 0.02, 0.01, 0.01],
)


def sheet_of(tmp_path, scene):
    names = [f"s{place}" for place in range(len(scene["feed"]))]
    text = scenes.loop(
        scene["stages"],
        scenes.constants(names, scene["cold"]),
        scenes.constants(names, scene["hot"]),
        scene["solvent"],
        scene["gas"],
        scene["stripping"],
        dict(zip(names, scene["feed"], strict=True)),
    )
    return scenes.read(tmp_path, text), names


def peers_of(scene):
    """All stage equations at once, and the same with the equilibrium eliminated by hand."""
    given = (
        scene["stages"],
        (np.array(scene["cold"]), np.array(scene["hot"])),
        scene["solvent"],
        scene["gas"],
        scene["stripping"],
        np.array(scene["feed"]),
    )
    return lambda: peer.solve_all(*given), lambda: independent.solve_loop(*given)


def interleaved(*calls):
    """Median seconds of each call, taken in turn so that a slow spell hits all of them."""
    seconds = [[] for _ in calls]
    for call in calls:
        call()
    for _ in range(TURNS):
        for own, call in zip(seconds, calls, strict=True):
            repeats, begin = 0, time.perf_counter()
            while time.perf_counter() - begin < 0.03:
                call()
                repeats += 1
            own.append((time.perf_counter() - begin) / repeats)
    return [float(np.median(own)) for own in seconds]


@pytest.mark.parametrize(
    "name, cases, single_least, batch_least", [("small", 1000, 0.2, 40.0), ("large", 200, 5.0, 50.0)]
)
def test_against_root(tmp_path, capsys, name, cases, single_least, batch_least):
    scene = {"small": SMALL, "large": LARGE}[name]
    sheet, names = sheet_of(tmp_path, scene)
    all_rows, by_hand = peers_of(scene)
    alone = sheet.solve()
    cleaned = np.array([alone[f"streams.cleaned.mol_s.{c}"] for c in names])
    assert np.allclose(cleaned, all_rows(), rtol=1e-7)
    assert np.allclose(cleaned, by_hand().cleaned, rtol=1e-8)
    hold = scene["solvent"] * np.linspace(0.97, 1.03, cases)
    batch = sheet.solve({"units.top_up.hold.oil": hold})
    assert set(batch.status) == {"converged"}
    assert alone["loop.passes"] <= 5 and batch["loop.passes"].max() <= 5
    one, many, root, less = interleaved(
        sheet.solve, lambda: sheet.solve({"units.top_up.hold.oil": hold}), all_rows, by_hand
    )
    with capsys.disabled():
        print(
            f"\n{name}: root {root * 1e3:.2f} ms, single {one * 1e3:.2f} ms ({root / one:.2f} times faster), "
            f"batch {many / cases * 1e6:.1f} us a case ({root * cases / many:.0f} times faster), "
            f"{cases / many:.0f} loops a second; "
            f"root with the equilibrium eliminated by hand {less * 1e3:.2f} ms "
            f"(single {less / one:.2f}, batch {less * cases / many:.0f} times faster)"
        )
    assert root / one >= single_least
    assert root * cases / many >= batch_least


def test_time_is_linear_in_stages_and_cases(tmp_path, capsys):
    sheet, _ = sheet_of(tmp_path, SMALL)
    cases = np.array([250, 500, 1000, 2000, 4000])
    calls = [lambda m=m: sheet.solve({"units.top_up.hold.oil": np.linspace(1.75, 1.82, m)}) for m in cases]
    by_cases = np.polyfit(np.log(cases), np.log(interleaved(*calls)), 1)[0]
    stages = np.array([10, 20, 40, 80])
    hold = np.linspace(1.75, 1.82, 500)
    calls = [
        lambda n=n: sheet.solve({"units.wash.stages": int(n), "units.strip.stages": int(n), "units.top_up.hold.oil": hold})
        for n in stages
    ]
    by_stages = np.polyfit(np.log(stages), np.log(interleaved(*calls)), 1)[0]
    with capsys.disabled():
        print(f"\ntime grows with cases^{by_cases:.2f} and with stages^{by_stages:.2f}")
    assert by_cases < 1.25 and by_stages < 1.25


def test_share_of_lapack(tmp_path, capsys, monkeypatch):
    sheet, _ = sheet_of(tmp_path, LARGE)
    spent = [0.0]

    real = band.lapack

    class Timed:
        def __getattr__(self, name):
            def timed(*given, **named):
                begin = time.perf_counter()
                try:
                    return getattr(real, name)(*given, **named)
                finally:
                    spent[0] += time.perf_counter() - begin

            return timed

    monkeypatch.setattr(band, "lapack", Timed())
    hold = np.linspace(58.0, 62.0, 200)
    sheet.solve({"units.top_up.hold.oil": hold})
    spent[0], begin = 0.0, time.perf_counter()
    for _ in range(TURNS):
        sheet.solve({"units.top_up.hold.oil": hold})
    share = spent[0] / (time.perf_counter() - begin)
    with capsys.disabled():
        print(f"\nLAPACK takes {share:.0%} of a batch of 200 of 20 + 20 stages with five solutes")
    assert 0.0 < share < 1.0


def test_memory_of_a_long_batch(tmp_path, capsys):
    sheet, _ = sheet_of(tmp_path, SMALL)
    hold = np.linspace(1.6, 2.0, 100_000)
    tracemalloc.start()
    begin = time.perf_counter()
    result = sheet.solve({"units.top_up.hold.oil": hold})
    seconds = time.perf_counter() - begin
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert set(result.status) == {"converged"}
    with capsys.disabled():
        print(f"\n100,000 loops: {seconds:.1f} s with memory traced, peak {peak / 2**20:.0f} MiB")
    assert peak < 2 * 2**30
