"""Counts and speed of a closed loop with heat: 20 + 20 stages, exchanger, reboiler and condenser.

The counts are exact and asserted; of the ratios, medians of interleaved turns, the aims are asserted; seconds are only
printed. Run with ``python -m pytest -m bench tests/bench -s``, alone on a quiet machine, with OPENBLAS_NUM_THREADS=1.
The peer is every equation of the flowsheet at once in `scipy.optimize.root(method="hybr")`, vectorised numpy without a
Python loop over stages or components.
"""

import sys
import time
from pathlib import Path

import numpy as np
import pytest

HERE = Path(__file__).resolve().parent
sys.path[:0] = [str(HERE), str(HERE.parent)]

import loop_files

from leanloop.column import tower_newton

TURNS = 5
PASSES = 7
STEPS = 40
pytestmark = pytest.mark.bench


@pytest.fixture
def loop():
    """71 % of the solute are taken up, so that each column depends on the other."""
    return loop_files.acid_gas(stages=(20, 20), reboiler=("duty", 12e3))


@pytest.fixture
def sheet(loop, tmp_path):
    return loop_files.read(loop, tmp_path)


class Counted:
    """`tower_newton.solve` that writes down its Newton steps, plain and on a safeguarded path, by stages of the column."""

    def __init__(self, monkeypatch):
        self.plain, self.filled, self.calls = {}, {}, {}
        real = tower_newton.solve

        def solve(tower, *given, **named):
            answer = real(tower, *given, **named)
            key = answer.unknowns.shape[1]
            self.plain[key] = self.plain.get(key, 0) + answer.iterations - answer.filled
            self.filled[key] = self.filled.get(key, 0) + answer.filled
            self.calls[key] = self.calls.get(key, 0) + 1
            return answer

        monkeypatch.setattr(tower_newton, "solve", solve)


def duties(count):
    return np.linspace(11e3, 13e3, count)


def test_passes_and_newton_steps(loop, sheet, monkeypatch, capsys):
    counted = Counted(monkeypatch)
    result = sheet.solve()
    assert result.status == "converged"
    assert set(counted.plain) == {loop.wash.n, loop.strip.n}
    with capsys.disabled():
        print(f"\n20 + 20 stages with heat: {result['loop.passes']} passes; by equilibrium stages {counted.plain} Newton steps, "
              f"{counted.filled} more on a safeguarded path, in {counted.calls} evaluations")
    assert result["loop.passes"] <= PASSES
    for stages, steps in counted.plain.items():
        assert steps <= STEPS, stages


def test_a_batch_takes_no_more_passes(sheet):
    batch = sheet.solve({"units.strip.reboiler.duty": duties(200)})
    assert set(batch.status) == {"converged"}
    assert batch["loop.passes"].max() <= PASSES


def timed(call):
    begin = time.perf_counter()
    call()
    return time.perf_counter() - begin


def test_batch_against_single(sheet, capsys):
    cases = 200
    many = lambda: sheet.solve({"units.strip.reboiler.duty": duties(cases)})  # noqa: E731
    sheet.solve(), many()
    turns = [(timed(sheet.solve), timed(many)) for _ in range(TURNS)]
    one, batch = np.median(turns, axis=0)
    with capsys.disabled():
        print(f"\nsingle {one * 1e3:.1f} ms, batch of {cases} {batch / cases * 1e3:.2f} ms a case "
              f"({one * cases / batch:.1f} times faster)")
    assert one * cases / batch >= 5.0


def cold_start(loop):
    """What a user would guess without any solution: temperatures in a straight line, all flows those fed, solutes spread."""
    small = 0.01 * loop.flow
    lean = np.zeros(loop.C)
    for place, value in loop.hold.items():
        lean[place] = value
    moves = ~loop.m.in_gas & ~loop.m.in_liquid
    cool, hot = loop.cool, 380.0
    liquid = lean + np.where(moves & (lean == 0), small, 0)
    solutes = np.where(moves, 0.1 * loop.gas[0].sum() * np.where(loop.gas[0] > 0, 1, 0) / moves.sum(), 0)
    profiles = {
        "wash": (np.tile(liquid, (loop.wash.n, 1)), np.tile(loop.gas[0], (loop.wash.n, 1)), np.full(loop.wash.n, cool)),
        "strip": (np.tile(liquid, (loop.strip.n, 1)), np.tile(solutes, (loop.strip.n, 1)), np.full(loop.strip.n, hot)),
    }
    profiles["strip"][2][0] = loop.strip.condenser
    streams = {"warm_lean": (liquid, cool + 8), "warm_rich": (liquid, hot - 8), "cool_lean": (liquid, cool)}
    capacity = liquid @ loop.m.cp_liquid
    results = {f"top_up.added_mol_s.{loop.names[place]}": 0.01 * loop.flow[place] for place in loop.hold}
    results["swap.duty_W"] = capacity * (hot - cool - 8)
    return loop.start(profiles, streams, results)


def test_against_root(loop, sheet, capsys):
    """From a cold start root does not converge; from halfway between that and the answer, and from near the answer, it does."""
    answer = loop_files.start(loop, sheet.solve())
    cold = cold_start(loop)
    starts = {"cold": cold, "halfway": 0.5 * (cold + answer), "the answer moved by 3 %": loop.perturbed(answer, 7)}
    turns, residuals = {name: [] for name in starts}, {}
    single = []
    with np.errstate(all="ignore"):
        for _ in range(3):
            for name, start in starts.items():
                begin = time.perf_counter()
                found, residuals[name] = loop.find(start)
                turns[name].append(time.perf_counter() - begin)
                single.append(timed(sheet.solve))
                if residuals[name] < 1e-8:
                    np.testing.assert_allclose(found, answer, rtol=1e-6, atol=1e-9 * loop.flow.sum(), err_msg=name)
    one, seconds = np.median(single), {name: np.median(item) for name, item in turns.items()}
    with capsys.disabled():
        for name in starts:
            state = "converges" if residuals[name] < 1e-8 else f"gives up at a residual of {residuals[name]:.0e}"
            print(f"\nroot, {answer.size} equations, start {name}: {seconds[name]:.2f} s, {state}; "
                  f"single from nothing {one * 1e3:.1f} ms ({seconds[name] / one:.1f} times faster)")
    assert residuals["halfway"] < 1e-8  # there is something to compare with
    assert seconds["cold"] / one >= 10.0  # to an answer or to giving up
