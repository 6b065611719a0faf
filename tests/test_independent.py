"""Invented closed loops against the simultaneous solution of `independent.py`, to 1e-8.

The loops share nothing with leanloop's method: there, all stage equations of both columns are
one system; here, units in calculation order with a torn stream.
"""

import math

import independent
import numpy as np
import pytest
import scenes

# stages, K (absorber, stripper), solvent, gas, stripping gas, ratios, and what else a loop has
LOOPS = {
    "one solute, lean gas": dict(
        stages=(4, 3), K=([0.3], [4.0]), flows=(42.0, 100.0, 18.0), feed=[0.004]),
    "half solute": dict(
        stages=(5, 6), K=([0.08], [1.9]), flows=(55.0, 100.0, 90.0), feed=[1.0]),
    "two solutes far apart": dict(
        stages=(12, 9), K=([0.04, 6.0], [0.9, 60.0]), flows=(30.0, 210.0, 48.0),
        feed=[0.06, 0.11]),
    "three solutes, rich gas": dict(
        stages=(7, 5), K=([0.12, 0.35, 0.9], [2.2, 5.0, 14.0]), flows=(80.0, 100.0, 70.0),
        feed=[0.20, 0.25, 0.15]),
    "stripping gas brings solute": dict(
        stages=(6, 8), K=([0.25, 0.5], [3.0, 4.5]), flows=(65.0, 120.0, 60.0),
        feed=[0.03, 0.08], stripping=[0.002, 0.0005]),
    "purge and impurity": dict(
        stages=(8, 6), K=([0.4], [2.6]), flows=(75.0, 100.0, 62.0), feed=[0.12],
        purge=2e-3, impurity=0.03),
    "purge, impurity and four solutes": dict(
        stages=(9, 11), K=([0.03, 0.2, 0.7, 2.5], [0.8, 3.0, 9.0, 30.0]), flows=(50.0, 90.0, 66.0),
        feed=[0.01, 0.05, 0.09, 0.20], stripping=[0.0, 1e-4, 0.0, 2e-3], purge=0.01, impurity=0.2),
    "single stages": dict(
        stages=(1, 1), K=([0.2, 0.6], [2.0, 7.0]), flows=(60.0, 100.0, 80.0), feed=[0.3, 0.1]),
    "many stages, five solutes": dict(
        stages=(30, 24), K=([0.05, 0.15, 0.4, 1.1, 3.0], [1.4, 3.5, 8.0, 20.0, 55.0]),
        flows=(70.0, 150.0, 58.0), feed=[0.02, 0.03, 0.05, 0.04, 0.06]),
    "linear in ratios, traces beside much": dict(
        stages=(10, 14), K=([0.02, 0.5, 1.5], [1.1, 4.0, 11.0]), flows=(66.0, 100.0, 75.0),
        feed=[1e-9, 0.02, 0.4], purge=1e-4, impurity=1e-3, basis="ratio"),
}


def assert_close(found, expected, scale, name):
    """1e-8 of the value, and for what is far below it the rounding of the scale."""
    found, expected = np.asarray(found), np.asarray(expected)
    gap = np.abs(found - expected)
    assert (gap <= 1e-8 * np.abs(expected) + 1e-15 * np.asarray(scale)).all(), (
        f"{name}: {found} is not {expected}")


def outlets(result, names, purge):
    streams = ["cleaned", "overhead"] + (["bleed"] if purge else [])
    return {s: np.array([result[f"streams.{s}.mol_s.{c}"] for c in names]) for s in streams}


@pytest.mark.parametrize("name", LOOPS)
class TestInventedLoops:
    @pytest.fixture
    def pair(self, tmp_path, name):
        """The result of leanloop and that of the independent solution."""
        loop = dict(basis="fraction", purge=0.0, impurity=0.0, stripping=None) | LOOPS[name]
        cold, hot = loop["K"]
        names = [f"s{i}" for i in range(len(cold))]
        brought = loop["stripping"] or [0.0] * len(cold)
        text = scenes.loop(
            loop["stages"], scenes.constants(names, cold, loop["basis"]),
            scenes.constants(names, hot, loop["basis"]), *loop["flows"],
            dict(zip(names, loop["feed"], strict=True)),
            dict(zip(names, brought, strict=True)), loop["purge"], loop["impurity"])
        result = scenes.solve(tmp_path, text)
        assert result["status"] == "converged"
        other = independent.solve_loop(
            loop["stages"], (np.array(cold), np.array(hot)), *loop["flows"], loop["feed"], brought,
            loop["purge"], loop["impurity"], loop["basis"], polish=True)
        return result, other, names, loop

    def test_outlet_flows(self, pair):
        result, other, names, loop = pair
        _, gas, stripping = loop["flows"]
        sent = gas * np.array(loop["feed"]) + stripping * np.array(loop["stripping"] or 0.0)
        for stream, flows in outlets(result, names, loop["purge"]).items():
            assert_close(flows, getattr(other, stream), sent, stream)

    def test_profiles(self, pair):
        result, other, names, _ = pair
        for unit in ("wash", "strip"):
            for phase in "XY":
                found = [result[f"units.{unit}.profile.{phase}.{c}"] for c in names]
                expected = getattr(other, f"{phase}_{unit}")
                assert_close(np.transpose(found), expected, expected.max(0), f"{unit} {phase}")

    def test_the_independent_solution_closes_its_own_balance(self, pair):
        _, other, _, loop = pair
        _, gas, stripping = loop["flows"]
        sent = gas * np.array(loop["feed"]) + stripping * np.array(loop["stripping"] or 0.0)
        np.testing.assert_allclose(other.cleaned + other.overhead + other.bleed, sent, rtol=1e-11)


def test_batch_of_circulations(tmp_path):
    K, gas, strip, feed = ([0.12, 0.35], [2.2, 5.0]), 100.0, 70.0, [0.2, 0.25]
    names = ["s0", "s1"]
    circulations = np.linspace(40.0, 140.0, 21)
    text = scenes.loop((7, 5), scenes.constants(names, K[0]), scenes.constants(names, K[1]),
                       80.0, gas, strip, dict(zip(names, feed, strict=True)))
    result = scenes.solve(tmp_path, text, {"units.top_up.hold.oil": circulations})
    assert list(result["status"]) == ["converged"] * len(circulations)
    others = [independent.solve_loop((7, 5), np.array(K), L, gas, strip, feed, polish=True)
              for L in circulations]
    for stream in ("cleaned", "overhead"):
        flows = result.stream(stream).flows
        order = [i for i, c in enumerate(["inert", "steam", "oil", *names]) if c in names]
        np.testing.assert_allclose(flows[:, order], [getattr(o, stream) for o in others], rtol=1e-8)


# Model text and the K it stands for at T (K) and P (Pa), written out here once more.
MODELS = {
    "raoult, antoine": (
        '{ model = "raoult", vapour_pressure = { form = "antoine", A = 6.95, B = 1345.0, C = 219.5,'
        ' pressure = "mmHg", temperature = "degC" } }',
        lambda T, P: 10 ** (6.95 - 1345.0 / (219.5 + T - 273.15)) * 101325 / 760 / P),
    "raoult with activity": (
        '{ model = "raoult", vapour_pressure = { form = "antoine", A = 4.0, B = 1200.0, C = -53.0, '
        'pressure = "bar", temperature = "K" }, activity = { a = -0.78, b = 188.6 } }',
        lambda T, P: math.exp(-0.78 + 188.6 / T) * 10 ** (4.0 - 1200.0 / (T - 53.0)) * 1e5 / P),
    "henry, solubility": (
        '{ model = "henry", solubility = "3.3e-4 mol/(m3 Pa)", slope = "2400 K", '
        'solvent_concentration = "55.3 kmol/m3" }',
        lambda T, P: 55.3e3 / (3.3e-4 * math.exp(2400 * (1 / T - 1 / 298.15))) / P),
    "henry, constant": (
        '{ model = "henry", constant = "0.4 bar", slope = "2400 K", at = "20 degC" }',
        lambda T, P: 0.4e5 * math.exp(-2400 * (1 / T - 1 / 293.15)) / P),
    "polynomial": (
        '{ model = "polynomial", K = [0.35, 0.002, 3e-5], temperature = "degF",'
        ' pressure = "2 atm" }',
        lambda T, P: np.polynomial.polynomial.polyval((T - 273.15) * 1.8 + 32, [0.35, 0.002, 3e-5])
        * 2 * 101325 / P),
    "table of K": (
        '{ model = "table", temperature = [20, 60, 130], unit = "degC", K = [0.2, 1.0, 5.2] }',
        lambda T, P: np.interp(T - 273.15, [20, 60, 130], [0.2, 1.0, 5.2])),
    "table of ratios on a straight line": (
        scenes.table("XY", [0.0, 1.0, 2.5], [0.0, 1.5, 3.75]), None),
}


@pytest.mark.parametrize("name", MODELS)
def test_equilibrium_models_in_a_loop(tmp_path, name):
    model, K = MODELS[name]
    P, cold, hot = 1.4e5, 298.15, 393.15
    pair = (K(cold, P), K(hot, P)) if K else (1.5, 1.5)
    solvent = 1.6 * pair[0] * 100.0
    stripping = 1.5 * solvent / pair[1]
    text = scenes.loop((5, 6), {"s0": model}, {"s0": model}, solvent, 100.0, stripping,
                       {"s0": 0.05}, pressure="1.4 bar")
    result = scenes.solve(tmp_path, text)
    assert result["status"] == "converged"
    other = independent.solve_loop((5, 6), pair, solvent, 100.0, stripping, 0.05,
                                   basis="fraction" if K else "ratio", polish=True)
    for stream, flows in outlets(result, ["s0"], 0).items():
        np.testing.assert_allclose(flows, getattr(other, stream), rtol=1e-8, err_msg=stream)
    if K:
        for unit, expected in zip(("wash", "strip"), pair, strict=True):
            np.testing.assert_allclose(result[f"units.{unit}.profile.K.s0"], expected, rtol=1e-10)
