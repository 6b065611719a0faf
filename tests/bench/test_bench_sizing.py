"""Time of a scan of designs against plain batches of `solve`, in one thread.

Run with ``python -m pytest -m bench tests/bench/test_bench_sizing.py -s``. The batch has the same two requirements and as many
cases, of columns of one height, moved by the gas; what a case takes with nothing required is printed beside it. Reading and
reporting are left out.
"""

import os

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(name, "1")

import sys
import time
from pathlib import Path

import numpy as np
import pytest

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

import scenes

import leanloop

pytestmark = pytest.mark.bench
TURNS = 3
GAS = "feeds.vent.flows.inert"
OIL, STEAM = "units.top_up.hold.oil", "feeds.steam.flows.steam"


def sheet_of(tmp_path, stages):
    """Treybal's wash-oil pair, illustrations 8.2 and 8.3: outlet held by the oil, lean loading by the steam."""
    extra = scenes.requirement("outlet", "streams.cleaned.ratio.benzene", 1.02e-3, OIL, ("1.2 mol/s", "6 mol/s"))
    extra += scenes.requirement("lean", "streams.lean.ratio.benzene", 0.005, STEAM, ("0.3 mol/s", "3 mol/s"))
    models = (scenes.constants(["benzene"], [0.125]), scenes.constants(["benzene"], [3.16]))
    return scenes.read(tmp_path, scenes.loop(stages, *models, 1.787, 10.51, 0.6812, {"benzene": 0.0204}, extra=extra))


@pytest.mark.parametrize("scanned, batch_stages, most", [
    ((3, 20), (11, 12), 3.0),  # the mean of the stages that are scanned
    ((3, 20), (8, 7), None),  # the book's own
])  # fmt: skip
def test_scan_against_batch(tmp_path, capsys, scanned, batch_stages, most):
    sheet = sheet_of(tmp_path, (8, 7))
    fixed = sheet_of(tmp_path, batch_stages)
    plain = fixed.released()
    count = (scanned[1] - scanned[0] + 1) ** 2
    spread = np.linspace(0.97, 1.03, count)

    def scan():
        return leanloop.size(sheet, hold=["outlet", "lean"], stages={"wash": list(scanned), "strip": list(scanned)})

    def batch():
        return fixed.solve({GAS: 10.51 * spread})

    def free():
        return plain.solve({OIL: 1.787 * spread})

    found, solved = scan(), batch()
    assert found.count == count == 324 and found.good.all()
    assert set(solved.status) == set(free().status) == {"converged"}
    seconds = {"scan": [], "batch": [], "free": []}
    for _ in range(TURNS):
        for word, call in (("scan", scan), ("batch", batch), ("free", free)):
            begin = time.perf_counter()
            call()
            seconds[word].append(time.perf_counter() - begin)
    one, other, bare = (float(np.median(seconds[word])) / count for word in ("scan", "batch", "free"))
    with capsys.disabled():
        wash, strip = batch_stages
        print(
            f"\n{count} designs, {int(found.good.sum())} of them good: {1e3 * one:.3f} ms each; "
            f"batch of {wash} + {strip} stages {1e3 * other:.3f} ms a case, ratio {one / other:.2f}; "
            f"nothing required {1e3 * bare:.3f} ms, ratio {one / bare:.0f}"
        )
    assert most is None or one / other <= most
