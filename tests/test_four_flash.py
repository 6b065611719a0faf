"""The problem of four flash drums with two-way recycles, sixteen components, against its exact answer."""

import json
import math
from pathlib import Path

import numpy as np
import pytest

import leanloop

DATA = json.loads((Path(__file__).parent / "data" / "four_flash.json").read_text(encoding="utf-8"))
NAMES = DATA["components"]
HOURLY = 453.59237 / 3600.0  # lbmol/h in mol/s
TAKES = {"F1": ["v2"], "F2": ["crude", "l1", "v3"], "F3": ["l2", "v4"], "F4": ["l3"]}


def sheet(method="newton", **loop):
    """Each drum at its own temperature and pressure; ln K = ln(Pc/P) + 5.37 (1 + omega)(1 - Tc/T), Wilson (1968)."""
    table = {}
    for name, critical, pressure, omega in zip(NAMES, DATA["Tc_K"], DATA["Pc_bar"], DATA["omega"], strict=True):
        slope = 5.37 * (1 + omega) / math.log(10)
        table[name] = {
            "model": "raoult",
            "vapour_pressure": {
                "form": "antoine", "A": math.log10(1e5 * pressure) + slope, "B": slope * critical, "C": 0.0,
                "pressure": "Pa", "temperature": "K",
            },
        }  # fmt: skip
    psi = 6894.75729
    units = {
        drum: {
            "kind": "flash_drum", "takes": takes, "gas_out": f"v{drum[1]}", "liquid_out": f"l{drum[1]}", "equilibrium": "wilson",
            "temperature": (DATA["flash_T_F_P_psia"][drum][0] + 459.67) / 1.8, "pressure": DATA["flash_T_F_P_psia"][drum][1] * psi,
        }
        for drum, takes in TAKES.items()
    }  # fmt: skip
    feed = {name: flow * HOURLY for name, flow in zip(NAMES, DATA["feed_lbmol_h"], strict=True)}
    return leanloop.Flowsheet(
        components={name: {} for name in NAMES},
        equilibrium={"wilson": table},
        feeds={"crude": {"phase": "liquid", "temperature": 320.0, "pressure": 2e6, "flows": feed}},
        units=units,
        loop={"method": method, **loop},
    )


def test_streams_and_passes():
    result = sheet().solve()
    assert result.status == "converged"
    assert result["loop.passes"] <= 8
    for drum, share in DATA["vapour_fractions"].items():
        assert result[f"units.{drum}.results.vapour_fraction"] == pytest.approx(float(share), rel=1e-8)
    for name, flows in DATA["streams"].items():
        if name in ("v1", "v2", "v3", "v4", "l1", "l2", "l3", "l4"):
            wanted = np.array([float(flow) for flow in flows]) * HOURLY
            np.testing.assert_allclose(result.stream(name).flows, wanted, rtol=1e-8, atol=1e-12 * wanted.sum(), err_msg=name)


def test_accelerators_come_to_the_same():
    result, other = sheet().solve(), sheet("anderson", passes=500).solve()
    assert other.status == "converged"
    np.testing.assert_allclose(other.stream("v1").flows, result.stream("v1").flows, rtol=1e-7)
