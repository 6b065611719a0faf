"""Least rates, pinches, stages and the window of a closed pair, against formulas written here.

Published cases stand in `data/worked.json` with their sources; beside them brute-force scans of the
curve, the map of a column with stages without limit, and solves with very many stages.
"""

import json
from pathlib import Path

import numpy as np
import pytest
import scenes
from scipy.interpolate import PchipInterpolator
from scipy.optimize import brentq, minimize_scalar

import leanloop

WORKED = {case["id"]: case for case in json.loads(
    (Path(__file__).parent / "data" / "worked.json").read_text(encoding="utf-8"))["cases"]}
TEN_DIGITS = 2e-9
DOUBLING = 1e-3
POINTS = 1_000_001
RATIO, FRACTION = "ratio", "fraction"
M_HOT = 319.9 / 101.33  # vapour pressure over pressure in the hot column of Treybal's wash-oil pair


def exact(name, key=None):
    figures = WORKED[name]["recomputed_10_digits"]
    return figures if key is None else figures[key]


def printed(name, key):
    return WORKED[name]["printed"][key]


# ---- the same questions answered in another way -------------------------------------------------


def straight(K):
    """Y = K X."""
    return lambda X: K * X


def bent(K):
    """y = K x on mole ratios of one solute."""
    return lambda X: K * X / (1 + (1 - K) * X)


def tabulated(coordinates, across, up):
    """A table on mole ratios; PCHIP goes through the points in the coordinates they are given in."""
    points = PchipInterpolator(across, up)
    if coordinates == "XY":
        return points
    return lambda X: (y := points(X / (1 + X))) / (1 - y)


def bent_inverse(K, Y):
    """X of y = K x; a gas above what any liquid holds gets a liquid of nearly all solute."""
    below = K + (K - 1) * np.asarray(Y)
    return np.where(below > 0, Y / np.where(below > 0, below, 1.0), 1e6)


def inverse(curve, Y, high):
    return brentq(lambda X: float(curve(X)) - Y, 0, high, xtol=1e-16, rtol=1e-14) if Y > 0 else 0.0


def scan(kind, curve, X_lean, Y_lean, X_rich, Y_rich):
    """Least ratio of the rates and its pinch on a million points of the curve.

    Absorber: liquid to gas, up to X_rich in equilibrium with the gas fed. Stripper: gas to liquid.
    """
    X = np.linspace(X_lean, X_rich, POINTS)[1:]
    Y = curve(X)
    slopes = (Y - Y_lean) / (X - X_lean) if kind == "absorber" else (X - X_lean) / (Y - Y_lean)
    place = int(np.argmax(slopes))
    kinds = {0: "lean end", POINTS - 2: "rich end"}
    return slopes[place], kinds.get(place, "tangent"), X[place], Y[place], X[1] - X[0]


def steps(kind, curve, X_lean, Y_lean, slope, X_rich, high):
    """Stages from the lean end, the last one a fraction linear in X; `slope` is liquid to gas."""
    before, X, count = X_lean, X_lean, 0
    while X < X_rich:
        before = X
        if kind == "absorber":
            X = inverse(curve, Y_lean + slope * (X - X_lean), high)
        else:
            X = X_lean + (float(curve(X)) - Y_lean) / slope
        count += 1
    return count - 1 + (X_rich - before) / (X - before)


def cleanest(kind, K, ratio, X_lean, Y_lean, X_rich, Y_rich):
    """Outlet with stages without limit for y = K x; arrays broadcast.

    Absorber: ratio = liquid/gas, X_lean and Y_rich enter, Y leaves. Stripper: ratio = gas/liquid,
    X_rich and Y_lean enter, X leaves. The line is parallel to the curve at the place of a tangent.
    """
    curve = bent(K)
    if kind == "absorber":
        low, high = X_lean, bent_inverse(K, Y_rich)
        slope = ratio
    else:
        # A liquid beyond the pole of its curve boils whatever the gas: the line meets the curve below it.
        pole = np.where(np.asarray(K) > 1, (1 - 1e-12) / np.where(np.asarray(K) > 1, K - 1, 1.0), np.inf)
        low, high = bent_inverse(K, Y_lean), np.minimum(X_rich, pole)
        slope = 1 / ratio
    touch = np.clip((np.sqrt(K / slope) - 1) / (1 - K), low, high)
    places = np.array(np.broadcast_arrays(low, touch, high))
    if kind == "absorber":
        return (curve(places) - ratio * (places - X_lean)).max(0)
    return (places - ratio * (curve(places) - Y_lean)).max(0)


def kremser_steps(N, factor):
    """The fraction of the last stage linear in X instead of geometric."""
    whole, part = divmod(N, 1)
    return whole + (factor**part - 1) / (factor - 1)


# ---- leanloop -----------------------------------------------------------------------------------


def stated(**entries):
    return "[limits.column]\n" + "".join(
        f'{k} = "{v}"\n' if isinstance(v, str) else f"{k} = {scenes.number(v)}\n"
        for k, v in entries.items())


def one(tmp_path, kind, model, liquid, X_in, gas, Y_in, stages=8, extra="", name="one.toml", **options):
    """Result of a column with one solute."""
    text = scenes.column(kind, stages, ["solute"], {"inert": gas, "solute": gas * Y_in},
                         {"oil": liquid, "solute": liquid * X_in}, {"solute": model}, extra=extra, **options)
    result = scenes.solve(tmp_path, text, name=name)
    assert result["status"] == "converged"
    return result


def of_column(result, case=0):
    return leanloop.limits(result, case=case).to_dict()["units"]["column"]


def limited(*arguments, **options):
    return of_column(one(*arguments, **options))


def least(found):
    return found["least_solvent_mol_s" if found["kind"] == "absorber" else "least_gas_mol_s"]


def check_scan(found, kind, curve, X_lean, Y_lean, X_rich, Y_rich, held, rel=1e-9):
    """Compare with the scan; `held` is the rate that is not asked for."""
    ratio, sort, X, Y, spacing = scan(kind, curve, X_lean, Y_lean, X_rich, Y_rich)
    assert found["method"] == "curve"
    assert least(found) == pytest.approx(ratio * held, rel=rel)
    assert found["pinch"]["kind"] == sort
    assert found["pinch"]["X"] == pytest.approx(X, abs=2 * spacing)
    assert found["pinch"]["Y"] == pytest.approx(Y, rel=1e-4)
    # The pinch lies on the curve and on the operating line of the least rate.
    assert found["pinch"]["Y"] == pytest.approx(float(curve(found["pinch"]["X"])), rel=1e-9)
    line = ratio if kind == "absorber" else 1 / ratio
    assert found["pinch"]["Y"] == pytest.approx(Y_lean + line * (found["pinch"]["X"] - X_lean), rel=1e-7)


class TestPublished:
    @pytest.mark.parametrize("case", ["m=0.125 (rounded as in the book)", "m=13330/107000"])
    def test_wash_oil_absorber(self, tmp_path, case):
        # R. E. Treybal, Mass-Transfer Operations, 3rd ed. 1980, Illustration 8.2 (from memory; the
        # graph reading 0.176 read in a public text): a tangent pinch. TREY-8.2-ABS.
        m = 0.125 if case.startswith("m=0.125") else 13330 / 107000
        figures, common = exact("TREY-8.2-ABS", case), exact("TREY-8.2-ABS", "common")
        gas, X_lean, Y_out, Y_in = (common[k] for k in ("Gs_mol_s", "X2", "Y2", "Y1"))
        found = limited(tmp_path, "absorber", scenes.constant(m), figures["Ls_mol_s"], X_lean, gas, Y_in,
                        extra=stated(gas_out=Y_out))
        assert found["key"] == "solute" and found["method"] == "curve"
        assert least(found) == pytest.approx(figures["Ls_min_mol_s"], rel=TEN_DIGITS)
        assert found["ratio_to_least"] == pytest.approx(1.5, rel=TEN_DIGITS)
        assert found["pinch"]["kind"] == "tangent" and figures["tangent_pinch"]
        assert found["pinch"]["X"] == pytest.approx(figures["X_tangent"], rel=1e-6)
        assert found["stages_needed"] == pytest.approx(figures["N_lean"], rel=1e-7)
        check_scan(found, "absorber", bent(m), X_lean, Y_out, figures["X1_end_pinch"], Y_in, gas)
        X_most = X_lean + gas * (Y_in - Y_out) / least(found)
        assert X_most == pytest.approx(figures["X1_max"], rel=1e-8)
        assert least(found) == pytest.approx(printed("TREY-8.2-ABS", "Ls_min_mol_s"), rel=0.02)
        assert X_most == pytest.approx(printed("TREY-8.2-ABS", "X1_max_graphical"), rel=0.025)

    @pytest.mark.parametrize(("m", "case"), [(M_HOT, "m=319.9/101.33"), (3.16, "m=3.16")])
    def test_wash_oil_stripper(self, tmp_path, m, case):
        # The same, stripper (from memory, also read in a public text). TREY-8.2-STR.
        given, figures = WORKED["TREY-8.2-STR"]["inputs_SI"], exact("TREY-8.2-STR", case)
        found = limited(tmp_path, "stripper", scenes.constant(m), given["Ls_mol_s"], given["X_in"],
                        figures["Gs_mol_s"], 0.0, extra=stated(liquid_out=given["X_out"]))
        assert least(found) == pytest.approx(figures["Gs_min_mol_s"], rel=TEN_DIGITS)
        assert found["ratio_to_least"] == pytest.approx(given["Gs_over_min"], rel=TEN_DIGITS)
        assert found["pinch"]["kind"] == "tangent" and figures["tangent_pinch"]
        assert found["pinch"]["X"] == pytest.approx(figures["X_tangent"], rel=1e-6)
        check_scan(found, "stripper", bent(m), given["X_out"], 0.0, given["X_in"], None, given["Ls_mol_s"])
        Y_out = given["Ls_mol_s"] * (given["X_in"] - given["X_out"]) / least(found)
        assert Y_out == pytest.approx(figures["Y_out_at_min"], rel=1e-8)
        assert Y_out == pytest.approx(printed("TREY-8.2-STR", "Y_out_at_min_graphical"), rel=0.01)
        assert least(found) == pytest.approx(printed("TREY-8.2-STR", "Gs_min_mol_s"), rel=0.01)

    def test_wash_oil_stages(self, tmp_path):
        # Treybal, Illustration 8.3 (tray counts read in a public text). TREY-8.3.
        given = WORKED["TREY-8.3"]["inputs_SI"]
        L, G, V, X0, XN = (given[k] for k in ("Ls_mol_s", "Gs_mol_s", "steam_mol_s", "X0", "XN"))
        ends = {"gas_in": given["YN1"], "gas_out": given["Y1"], "liquid_in": X0, "liquid_out": XN}
        wash = limited(tmp_path, "absorber", scenes.constant(0.125), L, X0, G, given["YN1"], extra=stated(**ends))
        strip = limited(tmp_path, "stripper", scenes.constant(M_HOT), L, XN, V, 0.0,
                        extra=stated(liquid_in=XN, liquid_out=X0))
        slope = (given["YN1"] - given["Y1"]) / (XN - X0)  # both outlets stated set it
        assert wash["stages_needed"] == pytest.approx(
            steps("absorber", bent(0.125), X0, given["Y1"], slope, XN, 0.3), rel=1e-9)
        assert wash["ratio_to_least"] == pytest.approx(slope * G / least(wash), rel=1e-9)
        assert strip["stages_needed"] == pytest.approx(
            steps("stripper", bent(M_HOT), X0, 0.0, L / V, XN, 0.3), rel=1e-9)
        # The recomputed count goes by L/G of the rates, and by the rounded rich end of the liquid.
        rated = ends | {"gas_in": given["Y1"] + L / G * (XN - X0)}
        del rated["liquid_out"]
        by_rates = limited(tmp_path, "absorber", scenes.constant(0.125), L, X0, G, given["YN1"], extra=stated(**rated))
        assert by_rates["stages_needed"] == pytest.approx(exact("TREY-8.3", "N_abs_lean"), rel=1e-8)
        assert strip["stages_needed"] == pytest.approx(exact("TREY-8.3", "N_strip_lean"), rel=1e-8)
        assert wash["stages_needed"] == pytest.approx(printed("TREY-8.3", "N_abs_graphical"), abs=0.15)
        assert strip["stages_needed"] == pytest.approx(printed("TREY-8.3", "N_strip_graphical"), abs=0.15)

    @pytest.mark.parametrize("basis", [FRACTION, RATIO])
    def test_ethanol(self, tmp_path, basis):
        # J. D. Seader, E. J. Henley, Separation Process Principles, 2nd ed. 2006, Example 6.1 (from
        # memory). Its least water, 97.5 kmol/h, is that of Y = K X. SEA-6.1.
        given, figures = WORKED["SEA-6.1"]["inputs_SI"], exact("SEA-6.1")
        gas = given["V_mol_s"] * (1 - given["y_in"])
        found = limited(tmp_path, "absorber", scenes.constant(given["K"], basis), figures["L_mol_s"], 0.0, gas,
                        figures["Y_in"], extra=stated(removal=given["recovery"]))
        key = "L_min_mole_ratio_exact_kmol_h" if basis == FRACTION else "L_min_dilute_kmol_h"
        assert least(found) * 3.6 == pytest.approx(figures[key], rel=TEN_DIGITS)
        assert found["ratio_to_least"] == pytest.approx(figures["L_kmol_h"] / figures[key], rel=TEN_DIGITS)
        assert found["pinch"]["kind"] == "rich end"
        assert found["pinch"]["Y"] == pytest.approx(figures["Y_in"], rel=TEN_DIGITS)
        if basis == RATIO:
            assert least(found) * 3.6 == pytest.approx(printed("SEA-6.1", "L_min_kmol_h"), rel=1e-3)
            wanted = kremser_steps(figures["N_Kremser"], figures["A"])
        else:
            wanted = figures["N_lean"]
            assert 6 < found["stages_needed"] < 7  # printed: between 6 and 7
        assert found["stages_needed"] == pytest.approx(wanted, rel=1e-8)

    def test_acetone_into_oil(self, tmp_path):
        # W. L. McCabe, J. C. Smith, P. Harriott, Unit Operations, 5th ed., Example 17.1 (from
        # memory): 4 stages and a fraction. MCC-17.1.
        given, figures = WORKED["MCC-17.1"]["inputs_SI"], exact("MCC-17.1")
        found = limited(tmp_path, "absorber", scenes.constant(given["m"]), figures["oil_mol"], 0.0, 70.0, 30 / 70,
                        extra=stated(removal=given["recovery"]))
        assert least(found) == pytest.approx(figures["min_oil_mol"], rel=TEN_DIGITS)
        assert found["stages_needed"] == pytest.approx(figures["N_lean"], rel=TEN_DIGITS)
        assert found["stages_needed"] == pytest.approx(4.3, abs=0.5)
        assert found["pinch"]["kind"] == "rich end"

    def test_acetone_into_water(self, tmp_path):
        # C. J. Geankoplis, 3rd ed., Examples 10.3-2 and 10.3-3 (from memory). GEA-10.3-2/3.
        given, figures = WORKED["GEA-10.3-2/3"]["inputs_SI"], exact("GEA-10.3-2/3")
        gas = 30.0 / 3.6 * (1 - given["y_in"])
        Y_out = figures["y1"] / (1 - figures["y1"])
        found = limited(tmp_path, "absorber", scenes.constant(given["m"]), given["L_mol_s"], 0.0, gas,
                        given["y_in"] / 0.99, extra=stated(gas_out=Y_out))
        assert found["stages_needed"] == pytest.approx(figures["N_lean_ratio"], rel=1e-8)
        assert found["stages_needed"] == pytest.approx(printed("GEA-10.3-2/3", "N_graphical"), abs=0.15)
        assert found["stages_needed"] == pytest.approx(printed("GEA-10.3-2/3", "N_analytic"), abs=0.15)
        check_scan(found, "absorber", bent(given["m"]), 0.0, Y_out,
                   inverse(bent(given["m"]), given["y_in"] / 0.99, 0.1), None, gas)

    def test_sulphur_dioxide(self, tmp_path):
        # C. J. Geankoplis, 3rd ed., Example 10.6-1; data of Appendix A.3-19 (2.4 trays from memory).
        # GEA-10.6-1, its figures by the monotone cubic.
        points, figures = WORKED["GEA-10.6-1"]["equilibrium"], exact("GEA-10.6-1", "monotone cubic (PCHIP)")
        gas, liquid, Y_out = 150 / 29, 6000 / 18, 0.02 / 0.98
        found = limited(tmp_path, "absorber", scenes.table("xy", points["x"], points["y"]), liquid, 0.0, gas, 0.25,
                        stages=3, extra=stated(gas_out=Y_out))
        curve, slope = tabulated("xy", points["x"], points["y"]), liquid / gas
        assert found["stages_needed"] == pytest.approx(
            steps("absorber", curve, 0.0, Y_out, slope, (0.25 - Y_out) / slope, 0.007), rel=1e-9)
        # The recomputed count goes by a cubic through x of y, not y of x.
        assert found["stages_needed"] == pytest.approx(figures["N_lean"], rel=1e-4)
        assert found["stages_needed"] == pytest.approx(printed("GEA-10.6-1", "N"), abs=0.15)
        check_scan(found, "absorber", curve, 0.0, Y_out, inverse(curve, 0.25, 0.0095), None, gas)
        assert least(found) * 18 == pytest.approx(figures["water_min_kg_h_m2"], rel=1e-4)
        assert found["pinch"]["kind"] == "rich end" and figures["end_pinch"]

    def test_carbon_dioxide_into_amine(self, tmp_path):
        # J. D. Seader, E. J. Henley, Separation Process Principles, ch. 6, triethanolamine exercise
        # (read in a public text), six stages. SEA-TEA.
        points, figures = WORKED["SEA-TEA"]["equilibrium"], exact("SEA-TEA", "monotone cubic (PCHIP)")
        model, liquid = scenes.table("XY", points["X"], points["Y"]), 90 * figures["L_over_V"]
        curve = tabulated("XY", points["X"], points["Y"])
        for extra, Y_out in ((stated(gas_out=0.024), 0.024), ("", None)):
            result = one(tmp_path, "absorber", model, liquid, 0.04, 90.0, 1 / 9, stages=6, extra=extra)
            found = of_column(result)
            if Y_out is None:
                Y_out = result["streams.cleaned.ratio.solute"]
                assert found["stages_needed"] == pytest.approx(6, abs=1e-6)
            X_rich = 0.04 + (1 / 9 - Y_out) / figures["L_over_V"]
            assert found["stages_needed"] == pytest.approx(
                steps("absorber", curve, 0.04, Y_out, figures["L_over_V"], X_rich, 0.11), rel=1e-7)
            # The figure goes by a cubic through X of Y, which is some 0.01 stage off this curve.
            assert found["stages_needed"] == pytest.approx(6, abs=0.03)
            check_scan(found, "absorber", curve, 0.04, Y_out, inverse(curve, 1 / 9, 0.11), None, 90.0)

    def test_pentane_from_oil(self, tmp_path):
        # J. M. Coulson, J. F. Richardson et al., Chemical Engineering Vol. 2, 5th ed., Example 12.6
        # (from memory, also read in a public text). CR-12.6.
        figures = exact("CR-12.6")
        for steam, ratio, N, factor in (
                (figures["steam_per_oil"], figures["ratio"], 9.0, figures["stripping_factor"]),
                (figures["case2_steam"], 2.0, figures["case2_N"], figures["case2_factor"])):
            found = limited(tmp_path, "stripper", scenes.constant(3.0, RATIO), 100.0, 0.06, 100 * steam, 0.0,
                            extra=stated(liquid_out=0.001))
            assert least(found) == pytest.approx(100 * figures["steam_min"], rel=TEN_DIGITS)
            assert found["ratio_to_least"] == pytest.approx(ratio, rel=TEN_DIGITS)
            assert found["stages_needed"] == pytest.approx(kremser_steps(N, factor), rel=1e-8)
            assert (found["pinch"]["kind"], found["pinch"]["X"]) == ("rich end", pytest.approx(0.06, rel=1e-12))
        assert least(found) == pytest.approx(100 * printed("CR-12.6", "steam_min"), rel=2e-3)

    def test_ammonia_from_water(self, tmp_path):
        # W. L. McCabe, J. C. Smith, P. Harriott, equilibrium-stage chapter (from memory). MCC-17.2.
        figures = exact("MCC-17.2")
        found = limited(tmp_path, "stripper", scenes.constant(0.8), 100.0, 1e-8, 150.0, 0.0,
                        extra=stated(removal=0.9))
        wanted = kremser_steps(figures["N"], figures["S"])
        assert found["stages_needed"] == pytest.approx(wanted, rel=1e-6)  # dilute in the book
        assert least(found) == pytest.approx(112.5, rel=1e-6)  # L r / K
        more = one(tmp_path, "stripper", scenes.constant(0.8, RATIO), 100.0, 1e-3, 200.0, 0.0,
                   extra=stated(removal=figures["removal_b"]))
        assert of_column(more)["stages_needed"] == pytest.approx(
            kremser_steps(figures["N"], figures["S_b"]), rel=1e-8)

    @pytest.mark.parametrize("basis", [RATIO, FRACTION])
    def test_ground_water(self, tmp_path, basis):
        # J. D. Seader, E. J. Henley, Separation Process Principles, Exercise 6.11 and its solution,
        # read in a public text. Mole fractions couple the three solutes. SEA-6.11.
        names, given, figures = ("DCA", "TCE", "TCA"), WORKED["SEA-6.11"]["inputs_SI"], exact("SEA-6.11")
        K = [given[f"K_{c}"] for c in names]
        water = 693.0 / 60
        sent = {c: water * ppm * 1e-6 for c, ppm in zip(names, given["ppm_in"], strict=True)}
        air = 2.0 * water / K[0]  # the factor 2 that the recomputed counts go by
        rel = 1e-8 if basis == RATIO else DOUBLING
        for ends, N in (({"removal": 0.99994}, figures["N_for_0p99994"]),
                        ({"liquid_in": 85e-6, "liquid_out": 5e-9}, figures["N_from_ppm"])):
            text = scenes.column("stripper", 13, names, {"air": air}, {"water": water} | sent,
                                 scenes.constants(names, K, basis), stays={"air": "gas", "water": "liquid"},
                                 extra=stated(key="DCA", **ends))
            result = scenes.solve(tmp_path, text)
            assert result["status"] == "converged"
            found = of_column(result)
            assert found["method"] == ("curve" if basis == RATIO else "doubling")
            assert found["key"] == "DCA"
            if "removal" in ends:  # rates are in lbmol
                assert least(found) * 60 == pytest.approx(figures["Vmin_lbmol_min"], rel=rel)
                assert found["ratio_to_least"] == pytest.approx(2.0 / 0.99994, rel=rel)
            assert least(found) * 60 == pytest.approx(printed("SEA-6.11", "Vmin_lbmol_min"), rel=1e-3)
            assert found["stages_needed"] == pytest.approx(kremser_steps(N, 2.0), rel=rel)
            assert found["stages_needed"] == pytest.approx(printed("SEA-6.11", "N"), abs=0.1)

    @pytest.mark.parametrize("stages", [(7, 6), (8, 7), (10, 10)])
    def test_columns_as_solved_have_their_own_stages(self, tmp_path, stages):
        # LOOP-TREYBAL: rates and equilibria of Treybal 1980, Illustrations 8.2 and 8.3.
        figures = exact("LOOP-TREYBAL", "N_abs={},N_str={}".format(*stages))
        text = scenes.loop(stages, {"b": scenes.constant(0.125)}, {"b": scenes.constant(M_HOT)}, 1.787, 10.51, 0.679,
                           {"b": 0.02 / 0.98})
        units = leanloop.limits(scenes.solve(tmp_path, text)).to_dict()["units"]
        for name, N in zip(("wash", "strip"), stages, strict=True):
            assert units[name]["stages_needed"] == pytest.approx(N, abs=1e-7)
        gas, X_lean, Y_out, Y_in = 10.51, figures["X_lean"], figures["Y_out"], 0.02 / 0.98
        check_scan(units["wash"], "absorber", bent(0.125), X_lean, Y_out, inverse(bent(0.125), Y_in, 0.3), None, gas,
                   rel=1e-7)
        check_scan(units["strip"], "stripper", bent(M_HOT), X_lean, 0.0, figures["X_rich"], None, 1.787, rel=1e-7)


# ---- pinches ------------------------------------------------------------------------------------

WAVE = np.linspace(0, 0.3, 16)
TABLES = {
    # sigmoid: convex, then concave
    "sigmoid XY": ("XY", [0, 0.02, 0.04, 0.06, 0.08, 0.1, 0.13, 0.17, 0.22, 0.3],
                   [0, 0.002, 0.007, 0.018, 0.034, 0.047, 0.058, 0.065, 0.07, 0.076]),
    "sigmoid xy": ("xy", [0, 0.02, 0.04, 0.06, 0.08, 0.1, 0.13, 0.17, 0.22],
                   [0, 0.003, 0.008, 0.019, 0.033, 0.045, 0.055, 0.062, 0.067]),
    # concave, then convex
    "saddle XY": ("XY", [0, 0.02, 0.05, 0.09, 0.14, 0.2, 0.25, 0.3],
                  [0, 0.015, 0.028, 0.036, 0.042, 0.055, 0.08, 0.12]),
    # several tangents compete
    "wave XY": ("XY", WAVE, 0.3 * WAVE + 0.008 * np.sin(WAVE * 40) ** 2 * (1 - WAVE)),
}


class TestPinches:
    @pytest.mark.parametrize("K", [0.02, 0.125, 0.3, 0.7, 0.95, 1.5, 4.0])
    @pytest.mark.parametrize("impure", [0.0, 0.6])
    def test_absorber(self, tmp_path, K, impure):
        Y_in, removal, gas = min(0.06, 0.5 * K), 0.93, 3.0
        Y_out = Y_in * (1 - removal)
        X_lean = impure * float(bent_inverse(K, Y_out))
        top = float(bent_inverse(K, Y_in))
        liquid = 1.3 * gas * Y_in / top
        found = limited(tmp_path, "absorber", scenes.constant(K), liquid, X_lean, gas, Y_in,
                        extra=stated(removal=removal))
        check_scan(found, "absorber", bent(K), X_lean, Y_out, top, Y_in, gas)
        assert found["ratio_to_least"] == pytest.approx(liquid / least(found), rel=1e-12)
        if K > 1:
            assert found["pinch"]["kind"] == "rich end"  # the curve is convex

    @pytest.mark.parametrize("K", [0.4, 1.3, 3.16, 12.0, 40.0])
    @pytest.mark.parametrize("impure", [0.0, 0.6])
    def test_stripper(self, tmp_path, K, impure):
        X_in, removal, liquid = 0.4 / max(K, 2.0), 0.93, 3.0
        X_out = X_in * (1 - removal)
        Y_lean = impure * float(bent(K)(X_out))
        gas = 2.5 * liquid * X_in / float(bent(K)(X_in))
        found = limited(tmp_path, "stripper", scenes.constant(K), liquid, X_in, gas, Y_lean,
                        extra=stated(removal=removal))
        check_scan(found, "stripper", bent(K), X_out, Y_lean, X_in, None, liquid)
        if K < 1:
            assert found["pinch"]["kind"] == "rich end"

    def test_gas_above_what_any_liquid_holds(self, tmp_path):
        # y = 0.02 x never gets to Y = 0.06: the curve ends below the gas, a tangent stays.
        Y_out, X_lean = 0.06 * 0.07, 0.01
        found = limited(tmp_path, "absorber", scenes.constant(0.02), 1.0, X_lean, 3.0, 0.06, extra=stated(gas_out=Y_out))
        check_scan(found, "absorber", bent(0.02), X_lean, Y_out, 3.0, None, 3.0)
        assert found["pinch"]["kind"] == "tangent"

    def test_tangents_are_among_them(self, tmp_path):
        # K below 1 in an absorber and above 1 in a stripper, with a pure and an impure entering stream.
        for impure in (0.0, 0.6):
            Y_out = 0.02 * 0.05
            wash = limited(tmp_path, "absorber", scenes.constant(0.125), 4.0, impure * Y_out / 0.125, 20.0, 0.02,
                           extra=stated(gas_out=Y_out))
            strip = limited(tmp_path, "stripper", scenes.constant(3.16), 4.0, 0.12, 2.0, impure * 0.005 * 3.16,
                            extra=stated(liquid_out=0.005))
            # With the place of contact known, the slope of the curve is that of the line.
            for found, K in ((wash, 0.125), (strip, 3.16)):
                assert found["pinch"]["kind"] == "tangent"
                slope = K / (1 + (1 - K) * found["pinch"]["X"]) ** 2
                rates = least(wash) / 20.0 if found is wash else 4.0 / least(strip)
                assert slope == pytest.approx(rates, rel=1e-6)

    @pytest.mark.parametrize("name", TABLES)
    @pytest.mark.parametrize(("removal", "impure"), [(0.5, 0.0), (0.8, 0.0), (0.8, 0.5), (0.97, 0.0), (0.97, 0.9)])
    def test_tables_absorber(self, tmp_path, name, removal, impure):
        coordinates, across, up = TABLES[name]
        curve = tabulated(coordinates, across, up)
        Y_in, gas, high = 0.06, 2.0, across[-1]
        Y_out = Y_in * (1 - removal)
        X_lean = impure * inverse(curve, Y_out, high)
        found = limited(tmp_path, "absorber", scenes.table(coordinates, across, up), 3.0, X_lean, gas, Y_in,
                        extra=stated(gas_out=Y_out))
        check_scan(found, "absorber", curve, X_lean, Y_out, inverse(curve, Y_in, high), Y_in, gas, rel=1e-8)

    @pytest.mark.parametrize("name", TABLES)
    @pytest.mark.parametrize(("removal", "impure"), [(0.5, 0.0), (0.8, 0.5), (0.97, 0.0), (0.97, 0.9)])
    def test_tables_stripper(self, tmp_path, name, removal, impure):
        coordinates, across, up = TABLES[name]
        curve = tabulated(coordinates, across, up)
        X_in, liquid = 0.19, 2.0
        X_out = X_in * (1 - removal)
        Y_lean = impure * float(curve(X_out))
        found = limited(tmp_path, "stripper", scenes.table(coordinates, across, up), liquid, X_in, 20.0, Y_lean,
                        extra=stated(liquid_out=X_out))
        check_scan(found, "stripper", curve, X_out, Y_lean, X_in, None, liquid, rel=1e-8)

    def test_tables_pinch_inside_and_at_the_end(self, tmp_path):
        kinds = set()
        for coordinates, across, up in TABLES.values():
            for removal in (0.5, 0.97):
                found = limited(tmp_path, "absorber", scenes.table(coordinates, across, up), 3.0, 0.0, 2.0, 0.06,
                                extra=stated(removal=removal))
                kinds.add(found["pinch"]["kind"])
        assert kinds == {"rich end", "tangent"}

    @pytest.mark.parametrize("K", [0.1, 0.6])
    def test_everything_removed_pinches_an_absorber_at_the_lean_end(self, tmp_path, K):
        # A concave curve lies below its tangent at the origin: L/G = K.
        found = limited(tmp_path, "absorber", scenes.constant(K), 5.0, 0.0, 3.0, 0.05, extra=stated(removal=1.0))
        assert least(found) == pytest.approx(3.0 * K, rel=1e-8)
        assert found["pinch"] == {"kind": "lean end", "X": pytest.approx(0, abs=1e-8), "Y": pytest.approx(0, abs=1e-8)}

    @pytest.mark.parametrize("K", [2.0, 5.0])
    def test_everything_removed_pinches_a_stripper_at_the_lean_end(self, tmp_path, K):
        found = limited(tmp_path, "stripper", scenes.constant(K), 5.0, 0.05, 4.0, 0.0, extra=stated(removal=1.0))
        assert least(found) == pytest.approx(5.0 / K, rel=1e-8)
        assert found["pinch"] == {"kind": "lean end", "X": pytest.approx(0, abs=1e-8), "Y": pytest.approx(0, abs=1e-8)}

    @pytest.mark.parametrize("kind", ["absorber", "stripper"])
    def test_straight_lines(self, tmp_path, kind):
        # Y = K X pinches at the rich end and needs as many stages as Kremser says.
        K, r, S = 1.4, 0.95, 1.7
        liquid, gas = (S * K, 1.0) if kind == "absorber" else (1.0, S / K)
        X_in, Y_in = (0.0, 0.04) if kind == "absorber" else (0.04, 0.0)
        found = limited(tmp_path, kind, scenes.constant(K, RATIO), liquid, X_in, gas, Y_in, extra=stated(removal=r))
        assert found["ratio_to_least"] == pytest.approx(S / r, rel=1e-12)
        N = np.log((S - r) / (1 - r)) / np.log(S) - 1  # r = (S^(N+1) - S)/(S^(N+1) - 1)
        assert found["stages_needed"] == pytest.approx(kremser_steps(N, S), rel=1e-9)
        assert found["pinch"]["kind"] == "rich end"

    @pytest.mark.parametrize(("kind", "entries"), [
        ("absorber", {"liquid_in": 0.05, "gas_out": 0.01}),
        ("stripper", {"gas_in": 0.05, "liquid_out": 0.01}),
    ])
    def test_no_rate_suffices(self, tmp_path, kind, entries):
        # The stream that enters at the lean end is in equilibrium with more than may leave there.
        K = 0.5 if kind == "absorber" else 2.0
        found = limited(tmp_path, kind, scenes.constant(K), 5.0, 0.06, 5.0, 0.06, extra=stated(**entries))
        assert least(found) is None and found["ratio_to_least"] is None
        assert found["stages_needed"] is None
        assert any(letter.isdigit() for letter in found["why"])

    @pytest.mark.parametrize(("kind", "entries"), [
        ("absorber", {"gas_in": 0.06, "gas_out": 0.002, "liquid_in": 0.0}),
        ("stripper", {"liquid_in": 0.06, "liquid_out": 0.002, "gas_in": 0.0}),
    ])
    def test_below_the_least_rate_no_stages_suffice(self, tmp_path, kind, entries):
        K = 0.5 if kind == "absorber" else 2.0
        liquid, gas = (2.0, 10.0) if kind == "absorber" else (10.0, 2.0)
        found = limited(tmp_path, kind, scenes.constant(K), liquid, 0.01, gas, 0.01, extra=stated(**entries))
        assert found["ratio_to_least"] < 1
        assert found["stages_needed"] is None

    def test_open_outlet_follows_from_the_balance(self, tmp_path):
        # The rich end stated instead of the lean one: the same operating line.
        curve, L, G = bent(0.3), 4.0, 8.0
        ends = {"gas_in": 0.05, "liquid_in": 0.01, "liquid_out": 0.08}
        Y_out = 0.05 - L / G * (0.08 - 0.01)
        a = limited(tmp_path, "absorber", scenes.constant(0.3), L, 0.0, G, 0.02, extra=stated(**ends))
        b = limited(tmp_path, "absorber", scenes.constant(0.3), L, 0.0, G, 0.02,
                    extra=stated(gas_in=0.05, liquid_in=0.01, gas_out=Y_out))
        assert a["stages_needed"] == pytest.approx(b["stages_needed"], rel=1e-9)
        assert a["stages_needed"] == pytest.approx(steps("absorber", curve, 0.01, Y_out, L / G, 0.08, 1.0), rel=1e-9)
        check_scan(a, "absorber", curve, 0.01, Y_out, inverse(curve, 0.05, 1.0), None, G)
        curve = bent(3.0)
        ends = {"gas_in": 0.01, "liquid_in": 0.1, "gas_out": 0.15}
        X_out = 0.1 - 3.0 / 5.0 * (0.15 - 0.01)
        c = limited(tmp_path, "stripper", scenes.constant(3.0), 5.0, 0.05, 3.0, 0.0, extra=stated(**ends))
        assert c["stages_needed"] == pytest.approx(steps("stripper", curve, X_out, 0.01, 5 / 3, 0.1, 1.0), rel=1e-9)
        check_scan(c, "stripper", curve, X_out, 0.01, 0.1, None, 5.0)

    def test_both_outlets_set_the_slope(self, tmp_path):
        found = limited(tmp_path, "stripper", scenes.constant(3.0), 5.0, 0.05, 3.0, 0.0,
                        extra=stated(gas_in=0.0, liquid_in=0.1, gas_out=0.2, liquid_out=0.01))
        slope = 0.2 / 0.09
        assert found["stages_needed"] == pytest.approx(
            steps("stripper", bent(3.0), 0.01, 0.0, slope, 0.1, 1.0), rel=1e-9)
        assert found["ratio_to_least"] == pytest.approx(5.0 / slope / least(found), rel=1e-9)


# ---- random columns -----------------------------------------------------------------------------

CASES = 200
ADDRESSES = ("feeds.solvent.flows.oil", "feeds.solvent.flows.solute", "feeds.sour.flows.inert",
             "feeds.sour.flows.solute", "equilibrium.stage.solute.K")


def draw(kind, seed, removal):
    """Random K, feeds and outlets; the ends in the order lean X, lean Y, rich X, rich Y."""
    rng = np.random.default_rng(seed)
    n = len(removal)
    impure = np.where(rng.random(n) < 0.3, 0.0, rng.uniform(0, 0.8, n))
    if kind == "absorber":
        K = np.exp(rng.uniform(np.log(0.02), np.log(3), n))
        Y = rng.uniform(0.001, 0.15, n)
        out = Y * (1 - removal)
        lean = impure * np.minimum(bent_inverse(K, out), 0.5)
        return K, lean, out, None, Y
    K = np.exp(rng.uniform(np.log(0.3), np.log(30), n))
    X = rng.uniform(0.02, 0.6, n) / np.maximum(K, 2)
    out = X * (1 - removal)
    return K, out, impure * bent(K)(out), X, None


def least_ratio(kind, K, X_lean, Y_lean, X_rich, Y_rich):
    """By bisection on the map: the ratio of rates whose cleanest outlet is the one asked for."""
    enters = (kind, K)
    low, high = np.full(K.shape, 1e-6), np.full(K.shape, 1e6)
    target = Y_lean if kind == "absorber" else X_lean
    for _ in range(200):
        middle = np.sqrt(low * high)
        missed = cleanest(*enters, middle, X_lean, Y_lean, X_rich, Y_rich) > target
        low, high = np.where(missed, middle, low), np.where(missed, high, middle)
    return high


@pytest.fixture(scope="module", params=["absorber", "stripper"])
def crowd(request, tmp_path_factory):
    """200 columns of 6 stages as one batch, the limits of each, and a sheet of 2,000 stages."""
    kind = request.param
    rng = np.random.default_rng(7)
    K, X_lean, Y_lean, X_rich, Y_rich = draw(kind, 11, 1 - 10 ** rng.uniform(-2, -0.3, CASES))
    ratio = least_ratio(kind, K, X_lean, Y_lean, X_rich, Y_rich) * rng.uniform(1.05, 1.6, CASES)
    text = scenes.column(kind, 6, ["solute"], {"inert": 1.0, "solute": 0.01}, {"oil": 1.0, "solute": 0.01},
                         {"solute": scenes.constant(0.5)})
    folder = tmp_path_factory.mktemp(kind)
    liquid, gas = (ratio * 2.0, 2.0) if kind == "absorber" else (2.0, ratio * 2.0)
    liquid, gas = np.broadcast_to(liquid, CASES), np.broadcast_to(gas, CASES)
    X_in, Y_in = (X_lean, Y_rich) if kind == "absorber" else (X_rich, Y_lean)
    result = scenes.read(folder, text).solve(
        dict(zip(ADDRESSES, (liquid, liquid * X_in, gas, gas * Y_in, K), strict=True)))
    assert set(result.status) == {"converged"}
    found = [of_column(result, case) for case in range(CASES)]
    # Ends as solved: the outlet of 6 stages is what the least rate has to reach.
    outlet = result["streams.cleaned.ratio.solute" if kind == "absorber" else "streams.rich.ratio.solute"]
    tall = scenes.read(folder, text.replace("stages = 6", "stages = 2000"), "tall.toml")
    return kind, K, X_in, Y_in, outlet, ratio, found, tall


class TestRandom:
    def test_removals_are_spread(self, crowd):
        kind, _, X_in, Y_in, outlet, *_ = crowd
        removal = 1 - outlet / (Y_in if kind == "absorber" else X_in)
        assert removal.min() < 0.6 and 0.95 < removal.max() < 0.99
        assert {item["pinch"]["kind"] for item in crowd[6]} >= {"rich end", "tangent"}

    def test_own_number_of_stages(self, crowd):
        np.testing.assert_allclose([item["stages_needed"] for item in crowd[6]], 6, rtol=0, atol=1e-7)

    def test_map_without_limit_of_stages(self, crowd):
        kind, K, X_in, Y_in, outlet, ratio, found, _ = crowd
        ends = (X_in, None, None, Y_in) if kind == "absorber" else (None, Y_in, X_in, None)
        rate = np.array([least(item) for item in found]) / 2.0
        np.testing.assert_allclose([item["ratio_to_least"] for item in found], ratio / rate, rtol=1e-12)
        scale = Y_in if kind == "absorber" else X_in
        at_least = cleanest(kind, K, rate, *ends)
        np.testing.assert_array_less(np.abs(at_least - outlet), 1e-10 * scale)
        # A thousandth less misses the outlet by far more than that.
        short = cleanest(kind, K, 0.999 * rate, *ends)
        np.testing.assert_array_less(1e-7 * scale, short - outlet)

    def test_two_thousand_steps(self, crowd):
        # Marched along curve and operating line from the lean end, without a solver.
        kind, K, X_in, Y_in, outlet, _, found, _ = crowd
        rate = np.array([least(item) for item in found]) / 2.0
        reached = []
        for share in (1 - 1e-7, 1 + 2e-4):
            X, Y = (X_in, outlet) if kind == "absorber" else (outlet, Y_in)
            for _ in range(2000):
                if kind == "absorber":
                    Y = outlet + share * rate * (bent_inverse(K, Y) - X_in)
                    Y = np.minimum(Y, Y_in)
                else:
                    X = outlet + share * rate * (bent(K)(X) - Y_in)
                    X = np.minimum(X, X_in)
            reached.append(Y == Y_in if kind == "absorber" else X == X_in)
        assert not reached[0].any()
        assert reached[1].all()

    def test_two_thousand_stages(self, crowd):
        kind, K, X_in, Y_in, outlet, _, found, tall = crowd
        rate = np.array([least(item) for item in found])
        address = "streams.cleaned.ratio.solute" if kind == "absorber" else "streams.rich.ratio.solute"
        missed = []
        for share in (1 - 1e-7, 1 + 2e-4):
            liquid, gas = (rate * share, np.full(CASES, 2.0))[:: 1 if kind == "absorber" else -1]
            result = tall.solve(dict(zip(ADDRESSES, (liquid, liquid * X_in, gas, gas * Y_in, K), strict=True)))
            assert set(result.status) == {"converged"}
            missed.append(result[address] - outlet)
        assert missed[0].min() > 0
        assert missed[1].max() < 0

    @pytest.mark.parametrize("kind", ["absorber", "stripper"])
    @pytest.mark.parametrize("removal", [0.999, 0.99999])
    def test_stricter_removals(self, tmp_path, kind, removal):
        K, X_lean, Y_lean, X_rich, Y_rich = draw(kind, 23, np.full(12, removal))
        kinds = set()
        for i in range(len(K)):
            ends = [None if a is None else a[i] for a in (X_lean, Y_lean, X_rich, Y_rich)]
            X_in, Y_in = (ends[0], ends[3]) if kind == "absorber" else (ends[2], ends[1])
            liquid, gas = (2 * K[i], 1.0) if kind == "absorber" else (1.0, 2 / K[i])
            found = limited(tmp_path, kind, scenes.constant(K[i]), liquid, X_in, gas, Y_in,
                            extra=stated(removal=removal))
            rate = least(found)
            wanted = ends[1] if kind == "absorber" else ends[0]
            scale = Y_in if kind == "absorber" else X_in
            assert abs(cleanest(kind, K[i], rate, *ends) - wanted) < 1e-10 * scale
            assert cleanest(kind, K[i], 0.999 * rate, *ends) - wanted > 1e-7 * scale
            kinds.add(found["pinch"]["kind"])
        assert "tangent" in kinds


# ---- the closed pair ----------------------------------------------------------------------------

OIL = dict(G=10.51, Y_feed=0.0204, K=(0.125, 3.16), V=0.6812, target=1.02e-3)


def pair_outlet(L, V, G, Y_feed, K, Y_s=0.0, purge=0.0):
    """Cleaned gas of the closed pair, stages without limit in both columns."""

    def back(X_lean):
        Y_out = cleanest("absorber", K[0], L / G, X_lean, None, None, Y_feed)
        X_rich = X_lean + G / L * (Y_feed - Y_out)
        return (1 - purge) * cleanest("stripper", K[1], V / L, None, Y_s, X_rich, None), Y_out

    top = float(bent_inverse(K[0], Y_feed))  # this liquid takes up nothing
    gap = lambda X: back(X)[0] - X  # noqa: E731
    if gap(0.0) <= 0:
        X_lean = 0.0
    else:
        X_lean = top if gap(top) >= 0 else brentq(gap, 0.0, top, xtol=1e-16, rtol=1e-14)
    return float(back(X_lean)[1])


def pair_window(target, V, G, Y_feed, K, Y_s=0.0, purge=0.0, between=(0.3, 3.0)):
    """Least and most circulation, or None where the cleanest gas of all is above the target."""
    at = lambda L: pair_outlet(L, V, G, Y_feed, K, Y_s, purge) - target  # noqa: E731
    tried = np.linspace(*between, 60)
    worth = np.array([at(L) for L in tried])
    i = int(np.argmin(worth))
    best = minimize_scalar(at, bounds=(tried[max(i - 1, 0)], tried[min(i + 1, 59)]), method="bounded",
                           options={"xatol": 1e-10})
    middle = best.x if best.fun < worth[i] else tried[i]
    if at(middle) > 0:
        return None
    return brentq(at, between[0], middle, xtol=1e-14), brentq(at, middle, between[1], xtol=1e-14)


def pair_text(stages=(8, 7), solvent=1.787, steam=OIL["V"], target=OIL["target"], kind="at_most", K=OIL["K"],
              basis=FRACTION, gas=OIL["G"], Y_feed=OIL["Y_feed"], extra="", quantity="streams.cleaned.ratio.b",
              between=("0.9 mol/s", "2.95 mol/s"), **options):
    asked = scenes.requirement("outlet", quantity, target, "units.top_up.hold.oil", between)
    return scenes.loop(stages, {"b": scenes.constant(K[0], basis)}, {"b": scenes.constant(K[1], basis)}, solvent, gas,
                       steam, {"b": Y_feed}, extra=extra + asked.replace("equals", kind), **options)


def of_loop(tmp_path, text, status="converged"):
    result = scenes.solve(tmp_path, text)
    assert result["status"] == status
    return leanloop.limits(result).to_dict()["loop"]


def window(found):
    return found["least_circulation_mol_s"], found["most_circulation_mol_s"]


class TestPair:
    def test_wash_oil(self, tmp_path):
        # Treybal's wash-oil pair closed; the figures are known to six digits, in kmol/s.
        found = of_loop(tmp_path, pair_text())
        assert window(found) == pytest.approx((1.10111, 2.86525), rel=4e-6)
        assert found["least_gas_mol_s"] == pytest.approx(0.424852, rel=2e-6)
        assert found["least_duty_W"] is None and found["why"] is None
        alone = {k: v for k, v in OIL.items() if k != "target"}
        assert window(found) == pytest.approx(pair_window(OIL["target"], **alone), rel=1e-8)
        V = brentq(lambda V: pair_outlet(1.787, **(alone | {"V": V})) - OIL["target"], 0.3, 0.6812, xtol=1e-14)
        assert found["least_gas_mol_s"] == pytest.approx(V, rel=1e-8)

    def test_published_unit(self, tmp_path):
        found = of_loop(tmp_path, pair_text(solvent=1.787e-3, steam=6.812e-4, gas=0.01051, unit="kmol/s",
                                            between=("9e-4 kmol/s", "2.95e-3 kmol/s")))
        assert window(found) == pytest.approx((1.10111, 2.86525), rel=4e-6)

    @pytest.mark.parametrize("kind", ["equals", "at_most"])
    def test_window_does_not_depend_on_how_the_requirement_is_written(self, tmp_path, kind):
        wanted = window(of_loop(tmp_path, pair_text()))
        y = OIL["target"] / (1 + OIL["target"])
        assert window(of_loop(tmp_path, pair_text(kind=kind))) == pytest.approx(wanted, rel=1e-9)
        for quantity, value in (("streams.cleaned.fraction.b", y),
                                ("streams.cleaned.mol_s.b", f"{OIL['G'] * OIL['target']!r} mol/s")):
            found = of_loop(tmp_path, pair_text(kind=kind, quantity=quantity, target=value))
            assert window(found) == pytest.approx(wanted, rel=1e-8), quantity
        above = "equals" if kind == "equals" else "at_least"
        found = of_loop(tmp_path, pair_text(kind=above, quantity="units.wash.results.removal.b", target=0.95))
        assert window(found) == pytest.approx(wanted, rel=1e-8)

    def test_straight_lines(self, tmp_path):
        # Rates of LOOP-LINEAR; Y = K X in both columns has closed forms.
        given = WORKED["LOOP-LINEAR"]["inputs_SI"]
        G, V, Ka, Ks, Y = (given[k] for k in ("G_mol_s", "V_mol_s", "K_abs", "K_str", "Y_in"))
        asked = 0.004
        text = pair_text(stages=(given["N_abs"], given["N_str"]), solvent=given["L_mol_s"], steam=V, target=asked,
                         K=(Ka, Ks), basis=RATIO, gas=G, Y_feed=Y, between=("50 mol/s", "200 mol/s"))
        found = of_loop(tmp_path, text)
        # Too little: the absorber pinches at its rich end. Too much: it pinches at its lean end and
        # the stripper at its rich one, where V Ks X_rich = G (Y - asked) and Ka X_lean = asked.
        part = asked / (Ka * G * (Y - asked))
        assert window(found) == pytest.approx(
            (Ka * G * (1 - asked / Y), Ks * V / (1 - part * Ks * V)), rel=1e-9)
        assert found["least_gas_mol_s"] == pytest.approx(1 / (Ks * (1 / given["L_mol_s"] + part)), rel=1e-9)

    @pytest.mark.parametrize(("Y_s", "purge"), [(0.0, 0.01), (0.0, 0.2), (1e-5, 0.0), (2e-3, 0.0), (1e-3, 0.01)])
    def test_impure_stripping_gas_and_bleed(self, tmp_path, Y_s, purge):
        alone = {k: v for k, v in OIL.items() if k != "target"} | {"Y_s": Y_s, "purge": purge}
        found = of_loop(tmp_path, pair_text(stages=(10, 10), stripping_ratio={"b": Y_s}, purge=purge))
        assert window(found) == pytest.approx(pair_window(OIL["target"], **alone), rel=1e-8)
        V = brentq(lambda V: pair_outlet(1.787, **(alone | {"V": V})) - OIL["target"], 0.2, 0.6812, xtol=1e-14)
        assert found["least_gas_mol_s"] == pytest.approx(V, rel=1e-8)

    @pytest.mark.parametrize("impure", [0.0, 0.3])
    def test_random_pairs(self, tmp_path, impure):
        rng = np.random.default_rng(31)
        for i in range(10):
            K = (rng.uniform(0.05, 0.6), rng.uniform(1.5, 5.0))
            Y_feed, purge = min(rng.uniform(0.005, 0.05), 0.4 * K[0]), rng.choice([0.0, 0.01])
            V = K[0] / K[1] * 10.0 * rng.uniform(1.05, 2.5)  # more than what straight lines would ask for
            target = Y_feed * rng.uniform(0.01, 0.1)
            Y_s = impure * target * K[1] / K[0]  # its equilibrium liquid gives that share of the target
            alone = dict(V=V, G=10.0, Y_feed=Y_feed, K=K, Y_s=Y_s, purge=purge)
            middle = 10.0 * K[0]
            wanted = pair_window(target, **alone, between=(0.1 * middle, 8 * middle))
            text = pair_text(stages=(20, 20), solvent=1.3 * middle, steam=V, target=target, K=K, gas=10.0, Y_feed=Y_feed,
                             stripping_ratio={"b": Y_s}, purge=purge,
                             between=(f"{0.1 * middle!r} mol/s", f"{8 * middle!r} mol/s"))
            found = leanloop.limits(scenes.solve(tmp_path, text, name=f"{i}.toml")).to_dict()["loop"]
            if wanted is None:
                assert window(found) == (None, None) and found["why"], alone
            else:
                assert window(found) == pytest.approx(wanted, rel=1e-7), alone

    @pytest.mark.parametrize("purge", [0.0, 0.01])
    def test_more_stages_approach_it_from_within(self, tmp_path, purge):
        found = of_loop(tmp_path, pair_text(stages=(10, 10), purge=purge))
        low, high = window(found)
        steam = found["least_gas_mol_s"]
        away = 10.0 ** np.linspace(-7, -0.8, 63)
        needed = []
        for N in (50, 100, 200, 400, 800):
            sheet = scenes.read(tmp_path, scenes.loop(
                (N, N), {"b": scenes.constant(OIL["K"][0])}, {"b": scenes.constant(OIL["K"][1])}, 1.787, OIL["G"],
                OIL["V"], {"b": OIL["Y_feed"]}, purge=purge), f"{N}.toml")
            row = []
            for address, rates, outside in (
                    ("units.top_up.hold.oil", low * (1 + away), low * (1 - 1e-6)),
                    ("units.top_up.hold.oil", high * (1 - away), high * (1 + 1e-6)),
                    ("feeds.steam.flows.steam", steam * (1 + away), steam * (1 - 1e-6))):
                result = sheet.solve({address: np.append(rates, outside)})
                assert set(result.status) == {"converged"}
                outlet = result["streams.cleaned.ratio.b"]
                assert outlet[-1] > OIL["target"]  # no number of stages meets it outside
                met = outlet[:-1] <= OIL["target"]
                assert met.any()
                row.append(away[np.argmax(met)])
            needed.append(row)
        needed = np.array(needed)
        assert (np.diff(needed, axis=0) <= 0).all()
        assert (needed[0] < 0.05).all() and (needed[-1] < 3e-4).all()
        assert (needed[-1] < 0.05 * needed[0]).all()

    def test_empty_window(self, tmp_path):
        # Straight lines with K_abs G above K_str V: absorber and stripper cannot both be rich enough.
        text = pair_text(steam=15.0, target=1e-4, K=(0.7, 3.2), basis=RATIO, gas=100.0, solvent=60.0, Y_feed=0.05,
                         between=("20 mol/s", "200 mol/s"))
        found = of_loop(tmp_path, text, status="out_of_reach")
        assert window(found) == (None, None)
        assert isinstance(found["why"], str) and any(letter.isdigit() for letter in found["why"])

    def test_window_is_there_though_the_stages_are_too_few(self, tmp_path):
        found = of_loop(tmp_path, pair_text(stages=(2, 2), kind="equals"), status="out_of_reach")
        assert window(found) == pytest.approx((1.10111, 2.86525), rel=4e-6)

    def test_two_requirements(self, tmp_path):
        second = scenes.requirement("steam", "streams.lean.ratio.b", 4e-3, "feeds.steam.flows.steam",
                                    ("0.5 mol/s", "0.9 mol/s"))
        found = of_loop(tmp_path, pair_text(extra=second, kind="equals"))
        assert_null(found)

    def test_two_absorbers(self, tmp_path):
        text = pair_text().replace('gas_out = "cleaned"', 'gas_out = "between"').replace(
            'liquid_in = "cool_lean"', 'liquid_in = "half"')
        text += ('[units.first]\nkind = "absorber"\ngas_in = "between"\nliquid_in = "cool_lean"\n'
                 'gas_out = "cleaned"\nliquid_out = "half"\nstages = 3\nequilibrium = "cold"\n')
        found = of_loop(tmp_path, text)
        assert_null(found)


def assert_null(found):
    assert window(found) == (None, None)
    assert found["least_gas_mol_s"] is None and found["least_duty_W"] is None
    assert isinstance(found["why"], str) and found["why"]


# ---- equilibrium that is no curve of X alone ----------------------------------------------------


def two(tmp_path, kind, K, bases=(FRACTION, FRACTION), stages=8, extra="", order=("a", "b"), flows=(0.5, 0.8),
        liquid=10.0, gas=10.0, scale=1.0, name="two.toml"):
    """Two solutes that enter with the stream to be cleaned."""
    sent = {c: scale * f for c, f in zip("ab", flows, strict=True)}
    models = {c: scenes.constant(k, b) for c, k, b in zip("ab", K, bases, strict=True)}
    gases, liquids = {"inert": gas * scale}, {"oil": liquid * scale}
    (gases if kind == "absorber" else liquids).update({c: sent[c] for c in order})
    text = scenes.column(kind, stages, list(order), gases, liquids, {c: models[c] for c in order}, extra=extra)
    return scenes.read(tmp_path, text, name)


class TestCoupled:
    @pytest.mark.parametrize(("kind", "K", "key"), [
        ("absorber", (0.5, 0.9), "a"), ("absorber", (0.5, 0.9), "b"), ("absorber", (0.1, 2.0), "a"),
        ("stripper", (2.0, 5.0), "a"), ("stripper", (4.0, 1.2), "b"), ("stripper", (4.0, 1.2), "a")])
    def test_against_very_many_stages(self, tmp_path, kind, K, key):
        removal = 0.9
        sheet = two(tmp_path, kind, K, extra=stated(key=key, removal=removal))
        result = sheet.solve()
        assert result["status"] == "converged"
        found = of_column(result)
        assert (found["method"], found["key"]) == ("doubling", key)
        rates = least(found) * (1 + np.linspace(-4e-3, 4e-3, 41))
        tall = two(tmp_path, kind, K, stages=1500, name="tall.toml")
        address = "feeds.solvent.flows.oil" if kind == "absorber" else "feeds.sour.flows.inert"
        many = tall.solve({address: rates})
        assert set(many.status) == {"converged"}
        reached = many[f"units.column.results.removal.{key}"]
        assert reached[0] < removal < reached[-1]
        rate = np.interp(removal, reached, rates)
        assert least(found) == pytest.approx(rate, rel=2e-3)
        assert found["ratio_to_least"] == pytest.approx(10.0 / least(found), rel=1e-9)

    def test_as_solved(self, tmp_path):
        result = two(tmp_path, "absorber", (0.5, 0.9)).solve()
        found = of_column(result)
        assert found["method"] == "doubling"
        assert found["stages_needed"] == pytest.approx(8, abs=0.02)
        tall = two(tmp_path, "absorber", (0.5, 0.9), stages=1500, name="tall.toml")
        rates = least(found) * (1 + np.linspace(-4e-3, 4e-3, 41))
        many = tall.solve({"feeds.solvent.flows.oil": rates})
        address = f"units.column.results.removal.{found['key']}"
        assert least(found) == pytest.approx(np.interp(result[address], many[address], rates), rel=2e-3)

    def test_doubling_agrees_with_the_curve_where_the_other_solute_is_a_trace(self, tmp_path):
        for kind, K in (("absorber", 0.3), ("stripper", 3.0)):
            flows = (0.4, 1e-6)  # enough to couple, too little to matter
            coupled = of_column(two(tmp_path, kind, (K, 1.0), flows=flows,
                                    extra=stated(key="a", removal=0.9)).solve())
            X_in, Y_in = (0.0, 0.04) if kind == "absorber" else (0.04, 0.0)
            alone = limited(tmp_path, kind, scenes.constant(K), 10.0, X_in, 10.0, Y_in, extra=stated(removal=0.9))
            assert least(coupled) == pytest.approx(least(alone), rel=DOUBLING)

    @pytest.mark.parametrize("kind", ["absorber", "stripper"])
    @pytest.mark.parametrize("other", [RATIO, FRACTION])
    def test_mole_ratios_stay_a_curve_beside_another_solute(self, tmp_path, kind, other):
        K = 0.5 if kind == "absorber" else 2.0
        found = of_column(two(tmp_path, kind, (K, 0.9), bases=(RATIO, other),
                              extra=stated(key="a", removal=0.9)).solve())
        assert found["method"] == "curve"
        assert least(found) == pytest.approx(10.0 * 0.9 * (K if kind == "absorber" else 1 / K), rel=1e-9)
        assert found["pinch"]["kind"] == "rich end"

    def test_volatile_solvent(self, tmp_path):
        text = scenes.column("absorber", 10, ["solute", "light"], {"inert": 10.0, "solute": 0.4},
                             {"oil": 3.0, "light": 1.0}, {"solute": scenes.constant(0.2), "light": scenes.constant(0.05)},
                             extra=stated(key="solute", removal=0.9))
        sheet = scenes.read(tmp_path, text)
        found = of_column(sheet.solve())
        assert found["method"] == "doubling"
        rates = least(found) * (1 + np.linspace(-4e-3, 4e-3, 41))
        tall = scenes.read(tmp_path, text.replace("stages = 10", "stages = 1500"), "tall.toml")
        # The liquid is fed as it is composed, more or less of it.
        many = tall.solve({"feeds.solvent.flows.oil": rates, "feeds.solvent.flows.light": rates / 3})
        reached = many["units.column.results.removal.solute"]
        assert reached[0] < 0.9 < reached[-1]
        assert least(found) == pytest.approx(np.interp(0.9, reached, rates), rel=2e-3)


# ---- laws ---------------------------------------------------------------------------------------


def same(found, wanted, rel, scale=1.0):
    """Two columns alike, rates scaled."""
    assert (found["key"], found["method"], found["pinch"]["kind"]) == (
        wanted["key"], wanted["method"], wanted["pinch"]["kind"])
    assert least(found) == pytest.approx(scale * least(wanted), rel=rel)
    for one_of, other in ((found, wanted), (found["pinch"], wanted["pinch"])):
        for key in ("ratio_to_least", "stages_needed", "X", "Y"):
            if key in one_of:
                assert one_of[key] == pytest.approx(other[key], rel=max(rel, 1e-6)), key


class TestLaws:
    @pytest.mark.parametrize("scale", [1e-3, 37.0, 1e4])
    @pytest.mark.parametrize(("kind", "K"), [("absorber", 0.125), ("stripper", 3.16)])
    def test_scale_of_a_column(self, tmp_path, scale, kind, K):
        rates = (2.0, 0.03, 10.0, 0.04) if kind == "absorber" else (10.0, 0.12, 5.0, 0.01)
        model = scenes.constant(K)
        one_liquid, X_in, one_gas, Y_in = rates
        wanted = limited(tmp_path, kind, model, one_liquid, X_in, one_gas, Y_in)
        found = limited(tmp_path, kind, model, one_liquid * scale, X_in, one_gas * scale, Y_in)
        same(found, wanted, 1e-9, scale)

    def test_scale_of_a_pair(self, tmp_path):
        wanted = of_loop(tmp_path, pair_text())
        found = of_loop(tmp_path, pair_text(solvent=1787.0, steam=1000 * OIL["V"], gas=1000 * OIL["G"],
                                            between=("900 mol/s", "2950 mol/s")))
        for key in ("least_circulation_mol_s", "most_circulation_mol_s", "least_gas_mol_s"):
            assert found[key] == pytest.approx(1000 * wanted[key], rel=1e-9)

    @pytest.mark.parametrize(("bases", "rel"), [((RATIO, RATIO), 1e-10), ((FRACTION, FRACTION), 1e-6)])
    @pytest.mark.parametrize("extra", ["", stated(key="a", removal=0.9)])
    def test_order_of_components(self, tmp_path, bases, rel, extra):
        wanted, found = (of_column(two(tmp_path, "absorber", (0.5, 0.9), bases, order=order, extra=extra).solve())
                         for order in ("ab", "ba"))
        same(found, wanted, rel)

    def test_cases_equal_single_solves(self, tmp_path):
        sheet = scenes.read(tmp_path, pair_text())
        oil, steam = np.array([1.5, 1.787, 2.3]), np.array([0.6, 0.6812, 0.75])
        batch = sheet.solve({"units.top_up.hold.oil": oil, "feeds.steam.flows.steam": steam})
        for case in range(3):
            found = leanloop.limits(batch, case=case).to_dict()
            wanted = leanloop.limits(sheet.solve({"units.top_up.hold.oil": float(oil[case]),
                                                  "feeds.steam.flows.steam": float(steam[case])})).to_dict()
            for name in ("wash", "strip"):
                same(found["units"][name], wanted["units"][name], 1e-8)
            for key in ("least_circulation_mol_s", "most_circulation_mol_s", "least_gas_mol_s"):
                assert found["loop"][key] == pytest.approx(wanted["loop"][key], rel=1e-8), key
        assert len({leanloop.limits(batch, case=i).to_dict()["loop"]["least_gas_mol_s"] for i in range(3)}) == 3

    def test_first_case_by_default(self, tmp_path):
        batch = scenes.read(tmp_path, pair_text()).solve({"feeds.steam.flows.steam": np.array([0.65, 0.75])})
        assert leanloop.limits(batch).to_dict() == leanloop.limits(batch, case=0).to_dict()
        assert leanloop.limits(batch).to_dict() != leanloop.limits(batch, case=1).to_dict()

    def test_coupled_cases_equal_single_solves(self, tmp_path):
        sheet = two(tmp_path, "absorber", (0.5, 0.9), extra=stated(key="a", removal=0.9))
        oil = np.array([7.0, 10.0])
        batch = sheet.solve({"feeds.solvent.flows.oil": oil})
        for case in range(2):
            same(of_column(batch, case), of_column(sheet.solve({"feeds.solvent.flows.oil": float(oil[case])})), 1e-6)

    def test_more_removal_needs_more(self, tmp_path):
        for kind, K in (("absorber", 0.2), ("stripper", 4.0)):
            X_in, Y_in = (0.0, 0.04) if kind == "absorber" else (0.08, 0.0)
            found = [limited(tmp_path, kind, scenes.constant(K), 10.0, X_in, 10.0, Y_in, extra=stated(removal=r))
                     for r in (0.3, 0.6, 0.9, 0.99, 0.999)]
            assert (np.diff([least(item) for item in found]) > 0).all()
            assert (np.diff([item["stages_needed"] for item in found]) > 0).all()
