"""The flash: against closed forms and a published example, its laws on random mixtures, its limits, its derivatives."""

import math
import time

import numpy as np
import pytest
from scipy.optimize import brentq

from leanloop.components import Component, Components
from leanloop.enthalpy import read as read_heat
from leanloop.entries import Context
from leanloop.equilibrium.conditions import Conditions
from leanloop.flash.mixture import Mixture
from leanloop.flash.solve import at_enthalpy, at_gas_fraction, at_temperature
from leanloop.status import OK, Status, code

STEP = 1e-30
EPS = np.finfo(float).eps


# --- mixtures


def constant(k, basis="fraction"):
    return {"model": "constant", "K": k, "basis": basis}


def antoine(a, b, c):
    return {"model": "raoult", "vapour_pressure": {
        "form": "antoine", "A": a, "B": b, "C": c, "pressure": "mmHg", "temperature": "degC"}}


def heats(liquid, gas, vaporisation):
    return {"liquid_heat_capacity": f"{liquid} J/(mol K)", "gas_heat_capacity": f"{gas} J/(mol K)",
            "heat_of_vaporisation": {"value": f"{vaporisation} J/mol", "at": "25 degC"}}


VOLATILE = {  # Antoine constants and heat data, rounded
    "water": (antoine(8.07131, 1730.63, 233.426), heats(75.3, 33.6, 44000)),
    "methanol": (antoine(7.87863, 1473.11, 230.0), heats(81.0, 44.0, 37500)),
    "hexane": (antoine(6.87024, 1168.72, 224.21), heats(195.0, 143.0, 31500)),
    "toluene": (antoine(6.95464, 1344.8, 219.482), heats(157.0, 104.0, 38000)),
    "decane": (antoine(6.94365, 1495.17, 193.86), heats(314.0, 234.0, 51400)),
}
STAYS = {
    "air": ("gas", {"gas_heat_capacity": "29.1 J/(mol K)"}),
    "oil": ("liquid", {"liquid_heat_capacity": "480 J/(mol K)"}),
}


def mixture(models, stays=None, heat=None, basis=None):
    """The components that stay in a phase first, then those of the models."""
    stays = stays or {}
    components = Components([Component(name, None, stays.get(name)) for name in (*stays, *models)])
    context = Context()
    conditions = Conditions.read("here", models, components, context)
    data = None if heat is None else read_heat(heat, components, context)
    made = Mixture.connect(components, conditions, np.ones(len(components), dtype=bool), basis or {}, data, "the drum", context)
    assert not context.faults, context.faults
    return made


def real_mixture(volatile=("water", "methanol", "hexane", "toluene", "decane"), stays=()):
    heat = {name: VOLATILE[name][1] for name in volatile} | {name: STAYS[name][1] for name in stays}
    return mixture({name: VOLATILE[name][0] for name in volatile}, {name: STAYS[name][0] for name in stays}, heat)


def psat(name, temperature):
    constants = VOLATILE[name][0]["vapour_pressure"]
    return 101325 / 760 * 10 ** (constants["A"] - constants["B"] / (constants["C"] + temperature - 273.15))


def sums(split):
    return split.gas.sum(axis=-1), split.liquid.sum(axis=-1)


def assert_in_equilibrium(split, flows, k, places, inert_gas=0.0, inert_liquid=0.0, close=1e-10):
    """Balance of each component, y = K x, and the sums of an absent phase below one; (M, D) flows and K."""
    v, l = split.gas[:, places], split.liquid[:, places]
    assert (split.status == OK).all()
    assert (v >= 0).all() and (l >= 0).all()
    assert (np.abs(v + l - flows) <= close * flows).all()
    gas, liquid = inert_gas + v.sum(axis=1), inert_liquid + l.sum(axis=1)
    for below, total in ((v, gas), (l, liquid)):
        assert not below[total == 0].any()
    two = (gas > 0) & (liquid > 0)
    y, kx = v[two] / gas[two, None], k[two] * l[two] / liquid[two, None]
    assert (np.abs(y - kx) <= close * (y + kx)).all()
    flows_all = gas + liquid
    with np.errstate(divide="ignore", invalid="ignore"):
        boiling = np.where(flows == 0, 0.0, k * flows).sum(axis=1) / flows_all
        condensing = np.where(flows == 0, 0.0, flows / k).sum(axis=1) / flows_all
    some = flows_all > 0
    assert (boiling[some & (gas == 0)] <= 1 + 1e-12).all()
    assert (condensing[some & (liquid == 0)] <= 1 + 1e-12).all()
    return two


# --- closed forms


class TestClosedForms:
    def test_two_components(self):
        rng = np.random.default_rng(5)
        k1, k2, z = 10 ** rng.uniform(0.05, 6, 400), 10 ** rng.uniform(-6, -0.05, 400), rng.uniform(0.02, 0.98, 400)
        split = at_temperature(mixture({"a": constant(1.0), "b": constant(1.0)}), np.stack([z, 1 - z], axis=-1) * 3.0,
                               300.0, 1e5, {"a.K": k1, "b.K": k2})
        gas, _ = sums(split)
        wanted = -(z * (k1 - 1) + (1 - z) * (k2 - 1)) / ((k1 - 1) * (k2 - 1))
        inside = (wanted > 0) & (wanted < 1)
        assert inside.sum() > 100
        np.testing.assert_allclose(gas[inside], 3.0 * wanted[inside], rtol=0, atol=1e-13 * 3)
        np.testing.assert_array_equal(gas[wanted <= 0], 0.0)
        np.testing.assert_allclose(gas[wanted >= 1], 3.0, rtol=1e-15)
        x = (1 - k2) / (k1 - k2)
        liquid = split.liquid[inside]
        np.testing.assert_allclose(liquid[:, 0] / liquid.sum(axis=1), x[inside], rtol=1e-11)

    def test_one_component_between_a_gas_and_a_liquid_that_stay(self):
        """v (l + f - v) = K (f - v) (g + v) is quadratic in the gas flow v."""
        rng = np.random.default_rng(6)
        g, f, l = (10 ** rng.uniform(-4, 1, 500) for _ in range(3))
        k = 10 ** rng.uniform(-4, 4, 500)
        split = at_temperature(mixture({"a": constant(1.0)}, {"air": "gas", "oil": "liquid"}),
                               np.stack([g, l, f], axis=-1), 300.0, 1e5, {"a.K": k})
        a, b, c = k - 1, (l + f) - k * (f - g), -k * f * g
        root = np.sqrt(b * b - 4 * a * c)
        with np.errstate(all="ignore"):
            v = np.where(b > 0, -2 * c / (b + root), (root - b) / (2 * a))
        np.testing.assert_allclose(split.gas[:, 2], v, rtol=2e-11)
        np.testing.assert_array_equal(split.gas[:, 0], g)
        np.testing.assert_array_equal(split.liquid[:, 1], l)
        np.testing.assert_array_equal(split.gas[:, 1] + split.liquid[:, 0], 0.0)

    def test_a_model_on_mole_ratios(self):
        """Y = K X with bases that stay: v = f K G/(L + K G)."""
        m = mixture({"a": constant(0.4, "ratio"), "b": constant(3.0)}, {"air": "gas", "oil": "liquid"})
        split = at_temperature(m, np.array([2.0, 5.0, 0.7, 0.3]), 300.0, 1e5)
        assert split.gas[2] == pytest.approx(0.7 * 0.4 * 2.0 / (5.0 + 0.4 * 2.0), rel=1e-14)
        gas, liquid = sums(split)
        assert split.gas[3] / gas == pytest.approx(3.0 * split.liquid[3] / liquid, rel=1e-13)

    def test_ratios_to_components_that_distribute(self):
        m = mixture({"a": constant(0.4, "ratio"), "b": constant(3.0), "w": constant(0.2)}, {"air": "gas"},
                    basis={"gas": ("air", "w"), "liquid": ("w",)})
        split = at_temperature(m, np.array([2.0, 0.7, 0.3, 4.0]), 300.0, 1e5)
        v, l = split.gas, split.liquid
        assert split.status == OK
        assert v[1] / (v[0] + v[3]) == pytest.approx(0.4 * l[1] / l[3], rel=1e-13)
        for place, k in ((2, 3.0), (3, 0.2)):
            assert v[place] / v.sum() == pytest.approx(k * l[place] / l.sum(), rel=1e-13)

    def test_a_curved_table(self):
        """y = 2 x^2 at the points; where the split meets a point the answer is exact."""
        x = np.linspace(0.0, 0.5, 6)
        m = mixture({"a": {"model": "table", "x": x.tolist(), "y": (2 * x**2).tolist()}}, {"air": "gas", "oil": "liquid"})
        flows = np.array([1 - 0.18, 2 * 0.7, 0.18 + 2 * 0.3])  # 1 mol of gas at y = 0.18, 2 mol of liquid at x = 0.3
        split = at_temperature(m, flows, 300.0, 1e5)
        np.testing.assert_allclose(split.gas, [0.82, 0.0, 0.18], rtol=1e-13, atol=0)
        np.testing.assert_allclose(split.liquid, [0.0, 1.4, 0.6], rtol=1e-13, atol=0)
        assert not split.off_table
        assert at_temperature(m, np.array([0.1, 0.2, 3.0]), 300.0, 1e5).off_table

    def test_published_example(self):
        """Propane to hexane at 200 degF and 100 psia, with the K values that are given there.

        E. J. Henley, J. D. Seader, Equilibrium-Stage Separation Operations in Chemical Engineering, Wiley 1981,
        chapter 7; figures from memory.
        """
        m = mixture({name: constant(k) for name, k in zip("abcd", (4.2, 1.75, 0.74, 0.34), strict=True)})
        split = at_temperature(m, np.array([10.0, 20.0, 30.0, 40.0]), 366.5, 6.895e5)
        gas, liquid = sums(split)
        assert gas == pytest.approx(12.19, abs=0.006)
        np.testing.assert_allclose(split.liquid / liquid, [0.0719, 0.1833, 0.3098, 0.4350], atol=6e-5)
        np.testing.assert_allclose(split.gas / gas, [0.3021, 0.3207, 0.2293, 0.1479], atol=6e-5)


# --- bubble and dew points


class TestGasFraction:
    @staticmethod
    def found(pressure, rest):
        return brentq(lambda t: rest(psat("hexane", t) / pressure, psat("toluene", t) / pressure), 250, 600,
                      xtol=1e-12, rtol=1e-15)

    def test_bubble_and_dew_temperatures_of_two_components(self):
        m = real_mixture(("hexane", "toluene"))
        x = np.array([0.0, 1e-9, 0.1, 0.5, 0.8, 1.0])
        flows = np.stack([x, 1 - x], axis=-1) * 7.0
        for pressure in (2e4, 101325.0, 5e5):
            bubble = at_gas_fraction(m, flows, 0.0, pressure=pressure)
            dew = at_gas_fraction(m, flows, 1.0, pressure=pressure)
            for i, z in enumerate(x):
                boils = self.found(pressure, lambda k1, k2, z=z: z * k1 + (1 - z) * k2 - 1)
                condenses = self.found(pressure, lambda k1, k2, z=z: 1 - z / k1 - (1 - z) / k2)
                assert bubble.temperature[i] == pytest.approx(boils, rel=1e-12)
                assert dew.temperature[i] == pytest.approx(condenses, rel=1e-12)
            assert not bubble.gas.any() and not dew.liquid.any()
            assert (dew.temperature[2:5] > bubble.temperature[2:5] + 1).all()

    def test_bubble_and_dew_pressures(self):
        m = real_mixture(("hexane", "toluene"))
        flows = np.array([0.3, 0.7])
        ps = np.array([psat("hexane", 350.0), psat("toluene", 350.0)])
        bubble = at_gas_fraction(m, flows, 0.0, temperature=350.0)
        dew = at_gas_fraction(m, flows, 1.0, temperature=350.0)
        assert bubble.pressure == pytest.approx((flows * ps).sum(), rel=1e-13)
        assert dew.pressure == pytest.approx(1 / (flows / ps).sum(), rel=1e-13)

    def test_shares_between_agree_with_the_flash_at_that_temperature(self):
        m = real_mixture(stays=("air", "oil"))
        rng = np.random.default_rng(3)
        flows = rng.random((200, 7))
        flows[:, :2] *= 0.1
        low, high = flows[:, 0] / flows.sum(axis=1), 1 - flows[:, 1] / flows.sum(axis=1)
        share = low + rng.uniform(0.01, 0.99, 200) * (high - low)
        by_pressure = at_gas_fraction(m, flows, share, pressure=2e5)
        by_temperature = at_gas_fraction(m, flows, share, temperature=by_pressure.temperature)
        assert (by_pressure.status == OK).all()
        np.testing.assert_allclose(by_pressure.gas.sum(axis=1) / flows.sum(axis=1), share, rtol=1e-12)
        np.testing.assert_allclose(by_temperature.pressure, 2e5, rtol=1e-11)
        again = at_temperature(m, flows, by_pressure.temperature, 2e5)
        np.testing.assert_allclose(again.gas, by_pressure.gas, rtol=1e-9, atol=1e-12)

    def test_what_no_temperature_gives_is_said(self):
        m = real_mixture(("water",), stays=("air", "oil"))
        split = at_gas_fraction(m, np.array([1.0, 1.0, 1.0]), np.array([0.1, 0.5, 0.9, 1.5]), pressure=1e5)
        failed = code(Status.unit_failed)
        assert split.status.tolist() == [failed, OK, failed, failed]
        assert np.isnan(split.gas[0]).all() and np.isfinite(split.gas[1]).all()

    def test_one_condition_is_given(self):
        m = real_mixture(("water",))
        for given in ({}, {"pressure": 1e5, "temperature": 300.0}):
            with pytest.raises(ValueError, match="one of pressure and temperature"):
                at_gas_fraction(m, np.array([1.0]), 0.5, **given)


# --- random mixtures


def random_flows(rng, cases, count):
    """Flows over eight decades, a fifth of them zero, one stream in fifty without any flow."""
    flows = rng.random((cases, count)) * 10 ** rng.uniform(-8, 0, (cases, count)) * 10 ** rng.uniform(-3, 3, (cases, 1))
    flows[rng.random((cases, count)) < 0.2] = 0.0
    flows[rng.random(cases) < 0.02] = 0.0
    return flows


class TestRandomMixtures:
    @pytest.mark.parametrize(("spread", "seed"), [(1.0, 0), (3.0, 1), (8.0, 2)])
    def test_at_temperature(self, spread, seed):
        rng = np.random.default_rng(seed)
        cases, names = 2000, "abcdef"
        flows = random_flows(rng, cases, 8)
        flows[: cases // 2, :2] = 0.0
        k = 10 ** rng.uniform(-spread, spread, (cases, 6))
        k[rng.random((cases, 6)) < 0.02] = 0.0
        m = mixture({name: constant(1.0) for name in names}, {"air": "gas", "oil": "liquid"})
        split = at_temperature(m, flows, 300.0, 1e5, {f"{name}.K": k[:, i] for i, name in enumerate(names)})
        two = assert_in_equilibrium(split, flows[:, 2:], k, np.arange(2, 8), flows[:, 0], flows[:, 1])
        assert 500 < two.sum() < cases
        single = ~two & (flows.sum(axis=1) > 0)
        assert min((single & (split.gas.sum(axis=1) == 0)).sum(), (single & (split.liquid.sum(axis=1) == 0)).sum()) > 10

    @pytest.mark.parametrize("stays", [(), ("air",), ("oil",), ("air", "oil")])
    def test_at_enthalpy(self, stays):
        rng = np.random.default_rng(len(stays) + 10)
        cases, names = 2000, ("water", "methanol", "hexane", "toluene", "decane")
        m, n = real_mixture(names, stays), len(stays)
        flows = random_flows(rng, cases, 5 + n)
        pressure = 10 ** rng.uniform(3.5, 6.5, cases)
        # where the enthalpies of the phases lie from deep in the liquid to far in the gas
        low = m.enthalpy(0 * flows, flows, np.full(cases, 250.0))
        high = m.enthalpy(flows, 0 * flows, np.full(cases, 600.0))
        enthalpy = low + rng.uniform(0, 1, cases) * (high - low)
        split = at_enthalpy(m, flows, enthalpy, pressure)
        k = np.stack([psat(name, split.temperature) / pressure for name in names], axis=-1)
        inert = {name: flows[:, i] for i, name in enumerate(stays)}
        two = assert_in_equilibrium(
            split, flows[:, n:], k, np.arange(n, n + 5), inert.get("air", 0.0), inert.get("oil", 0.0))
        assert two.sum() > 500
        found = m.enthalpy(split.gas, split.liquid, split.temperature)
        scale = flows.sum(axis=1) * 1e4 + 1e-300
        assert (np.abs(found - enthalpy) <= 1e-10 * scale).all()
        assert (split.temperature[flows.sum(axis=1) == 0] == 320.0).all()

    def test_enthalpy_rises_with_temperature_and_comes_back(self):
        m = real_mixture(stays=("air", "oil"))
        rng = np.random.default_rng(21)
        flows, temperature = random_flows(rng, 2000, 7), rng.uniform(260, 480, 2000)
        split = at_temperature(m, flows, temperature, 3e5)
        back = at_enthalpy(m, flows, m.enthalpy(split.gas, split.liquid, split.temperature), 3e5)
        some = flows.sum(axis=1) > 0
        np.testing.assert_allclose(back.temperature[some], temperature[some], rtol=1e-11)
        whole = flows.sum(axis=1, keepdims=True)
        assert (np.abs(back.gas - split.gas) <= 1e-7 * whole).all()  # nearly pure streams hold T far better than the split
        assert np.median(np.abs(back.gas - split.gas)[some] / whole[some]) < 1e-14

    def test_tables_and_ratios(self):
        rng = np.random.default_rng(22)
        x = np.array([0.0, 0.01, 0.05, 0.2, 0.5])
        models = {
            "a": {"model": "table", "x": x.tolist(), "y": (0.3 * x + 1.2 * x**2).tolist()},
            "b": {"model": "table", "X": x.tolist(), "Y": (x / (0.1 + x)).tolist()},
            "c": constant(0.7, "ratio"),
            "d": VOLATILE["water"][0],
        }
        heat = {"d": VOLATILE["water"][1], "air": STAYS["air"][1], "oil": STAYS["oil"][1]}
        heat |= {name: heats(100.0, 60.0, 30000) for name in "abc"}
        m = mixture(models, {"air": "gas", "oil": "liquid"}, heat)
        flows = rng.random((2000, 6)) * [2, 2, 0.3, 0.1, 0.3, 0.5]
        flows[:, 2:][rng.random((2000, 4)) < 0.2] = 0.0
        cold = at_temperature(m, flows, rng.uniform(280, 400, 2000), 1e5)
        warm = at_enthalpy(m, flows, m.enthalpy(cold.gas, cold.liquid, cold.temperature), 1e5)
        for split in (cold, warm):
            assert (split.status == OK).all()
            np.testing.assert_allclose(split.gas + split.liquid, flows, rtol=1e-11, atol=0)
            gas, liquid = split.gas.sum(axis=1), split.liquid.sum(axis=1)
            law = m.law.models
            x_a, y_a = split.liquid[:, 2] / liquid, split.gas[:, 2] / gas
            np.testing.assert_allclose(law[0].gas(300.0, 1e5, x_a, law[0].numbers), y_a, rtol=1e-10, atol=1e-14)
            for place in (3, 4):
                ratio = split.liquid[:, place] / split.liquid[:, 1]
                above = split.gas[:, place] / split.gas[:, 0]
                own = law[place - 2]
                np.testing.assert_allclose(own.gas(300.0, 1e5, ratio, own.numbers), above, rtol=1e-10, atol=1e-14)
            water = psat("water", split.temperature) / 1e5 * split.liquid[:, 5] / liquid
            np.testing.assert_allclose(split.gas[:, 5] / gas, water, rtol=1e-10, atol=1e-14)
        np.testing.assert_allclose(warm.temperature, cold.temperature, rtol=1e-11)


# --- batches


class TestBatches:
    def problem(self, cases=300):
        rng = np.random.default_rng(31)
        m = real_mixture(stays=("air", "oil"))
        flows = random_flows(rng, cases, 7)
        return m, flows, flows.sum(axis=1) * rng.uniform(-5e3, 5e4, cases), 10 ** rng.uniform(4, 6, cases)

    def test_order_and_company_change_nothing(self):
        m, flows, enthalpy, pressure = self.problem()
        whole = at_enthalpy(m, flows, enthalpy, pressure)
        assert (whole.status == OK).all()
        order = np.random.default_rng(1).permutation(len(flows))
        mixed = at_enthalpy(m, flows[order], enthalpy[order], pressure[order])
        np.testing.assert_allclose(mixed.gas, whole.gas[order], rtol=1e-12, atol=0)
        for case in range(0, 300, 7):
            alone = at_enthalpy(m, flows[case], enthalpy[case], pressure[case])
            assert alone.gas.shape == (7,) and alone.temperature.shape == ()
            np.testing.assert_allclose(alone.gas, whole.gas[case], rtol=1e-12, atol=0)
            np.testing.assert_allclose(alone.liquid, whole.liquid[case], rtol=1e-12, atol=0)
            np.testing.assert_allclose(alone.temperature, whole.temperature[case], rtol=1e-13)

    def test_order_of_components(self):
        m, flows, enthalpy, pressure = self.problem()
        names = ("decane", "water", "toluene", "methanol", "hexane")
        other = real_mixture(names, ("oil", "air"))
        place = [1, 0, 6, 2, 5, 3, 4]
        mixed = at_enthalpy(other, flows[:, place], enthalpy, pressure)
        whole = at_enthalpy(m, flows, enthalpy, pressure)
        np.testing.assert_allclose(mixed.temperature, whole.temperature, rtol=1e-12)
        scale = flows.sum(axis=1, keepdims=True)
        assert (np.abs(mixed.gas - whole.gas[:, place]) <= 1e-9 * scale).all()

    def test_more_axes(self):
        m, flows, enthalpy, pressure = self.problem(12)
        whole = at_enthalpy(m, flows, enthalpy, pressure)
        shaped = at_enthalpy(m, flows.reshape(3, 4, 7), enthalpy.reshape(3, 4), pressure.reshape(3, 4))
        np.testing.assert_array_equal(shaped.gas.reshape(12, 7), whole.gas)
        assert shaped.status.shape == (3, 4)
        wide = at_temperature(m, flows[0], np.array([300.0, 350.0]), 1e5)
        assert wide.gas.shape == (2, 7)

    @pytest.mark.parametrize("call", ["temperature", "enthalpy", "fraction"])
    def test_broken_cases_are_said_and_disturb_no_other(self, call):
        m, flows, enthalpy, pressure = self.problem(40)
        own = {"temperature": np.full(40, 330.0), "enthalpy": enthalpy, "fraction": flows[:, 0] / (flows.sum(axis=1) + 1e-300)}
        own["fraction"] = own["fraction"] + 0.5 * (1 - own["fraction"] - flows[:, 1] / (flows.sum(axis=1) + 1e-300))
        run = {
            "temperature": lambda f, v, p, n: at_temperature(m, f, v, p, n),
            "enthalpy": lambda f, v, p, n: at_enthalpy(m, f, v, p, n),
            "fraction": lambda f, v, p, n: at_gas_fraction(m, f, v, n, pressure=p),
        }[call]
        key = "water.vapour_pressure.A"
        a = np.full(40, m.models[0].numbers["vapour_pressure.A"])
        good = run(flows, own[call], pressure, {key: a})
        f, v, p, n = flows.copy(), own[call].copy(), pressure.copy(), a.copy()
        f[1, 3], f[4, 2], v[7], p[11], p[14], p[15], n[20] = np.nan, -1.0, np.inf, np.nan, 0.0, -1e5, np.nan
        bad = run(f, v, p, {key: n})
        broken = np.array([1, 4, 7, 11, 14, 15, 20])
        assert (bad.status[broken] == code(Status.not_finite)).all()
        assert np.isnan(bad.gas[broken]).all() and np.isnan(bad.temperature[broken]).all()
        rest = np.setdiff1d(np.arange(40), broken)
        np.testing.assert_array_equal(bad.status[rest], good.status[rest])
        assert (good.status[rest] == OK).all()
        np.testing.assert_allclose(bad.gas[rest], good.gas[rest], rtol=1e-12, atol=0)

    def test_no_split_is_a_status(self):
        m = real_mixture(("water",))
        split = at_enthalpy(m, np.array([[1.0], [1.0], [0.0]]), np.array([1e9, 1e3, 5.0]), 1e5)
        failed = code(Status.unit_failed)
        assert split.status.tolist() == [failed, OK, failed]  # nothing flows and yet carries heat

    def test_enthalpy_needs_heat_data(self):
        with pytest.raises(ValueError, match="without heat data"):
            at_enthalpy(mixture({"a": constant(1.0)}), np.array([1.0]), 0.0, 1e5)


# --- limits


class TestLimits:
    def test_water_boils_at_one_temperature_and_the_split_follows_the_enthalpy(self):
        m = real_mixture(("water", "methanol"))
        share = np.array([1e-9, 1e-3, 0.2, 0.5, 0.9, 1 - 1e-6])
        boiling = at_gas_fraction(real_mixture(("water",)), np.array([1.0]), 0.5, pressure=101325.0)
        for impurity in (0.0, 1e-18, 1e-14, 1e-10):
            flows = np.array([1.0, impurity])
            t = boiling.temperature
            liquid, gas = m.enthalpy(0 * flows, flows, t), m.enthalpy(flows, 0 * flows, t)
            split = at_enthalpy(m, flows, liquid + share * (gas - liquid), 101325.0)
            assert (split.status == OK).all()
            np.testing.assert_allclose(split.temperature, t, rtol=1e-12 + 1e2 * impurity)
            np.testing.assert_allclose(split.gas[:, 0], share, rtol=1e-9, atol=1e-12 + 1e3 * impurity)
            found = m.enthalpy(split.gas, split.liquid, split.temperature)
            np.testing.assert_allclose(found, liquid + share * (gas - liquid), rtol=1e-13)

    def test_below_and_above_boiling(self):
        m = real_mixture(("water",))
        split = at_enthalpy(m, np.array([2.0]), np.array([0.0, 2 * 75.3 * 50.0, 2 * (44000 + 33.6 * 200.0)]), 101325.0)
        np.testing.assert_allclose(split.temperature, [298.15, 348.15, 498.15], rtol=1e-13)
        assert split.gas[:, 0].tolist() == [0.0, 0.0, 2.0]
        assert split.liquid[:, 0].tolist() == [2.0, 2.0, 0.0]

    def test_constant_ratios_leave_the_temperature_to_the_enthalpy(self):
        heat = {"a": heats(100.0, 60.0, 20000), "b": heats(150.0, 90.0, 30000)}
        m = mixture({"a": constant(3.0), "b": constant(0.3)}, heat=heat)
        flows = np.array([0.5, 0.5])
        split = at_enthalpy(m, flows, np.array([5e3, 2e4, 4e4]), 1e5)
        at_any = at_temperature(m, flows, 300.0, 1e5)
        assert (split.status == OK).all()
        np.testing.assert_allclose(split.gas, np.broadcast_to(at_any.gas, (3, 2)), rtol=1e-12)
        assert (np.diff(split.temperature) > 50).all()

    def test_air_water_and_oil(self):
        m = real_mixture(("water",), ("air", "oil"))
        split = at_temperature(m, np.array([3.0, 1.0, 1.0]), 320.0, 1e5)
        gas, liquid = sums(split)
        assert split.gas[0] == 3.0 and split.liquid[1] == 1.0
        assert split.gas[2] / gas * 1e5 == pytest.approx(psat("water", 320.0) * split.liquid[2] / liquid, rel=1e-13)
        # without the oil, water in plenty saturates the air; a trace of it is all gas
        wet, dry = at_temperature(m, np.array([[3.0, 0.0, 1.0], [3.0, 0.0, 1e-3]]), 320.0, 1e5).gas[:, 2]
        p = psat("water", 320.0) / 1e5
        assert wet == pytest.approx(3.0 * p / (1 - p), rel=1e-13)
        assert dry == 1e-3

    def test_traces_keep_their_relative_accuracy(self):
        m = mixture({"a": constant(1e8), "b": constant(1e-8), "c": constant(0.5)}, {"air": "gas", "oil": "liquid"})
        flows = np.array([1e-7, 1.0, 1e-9, 1e-12, 0.3])
        split = at_temperature(m, flows, 300.0, 1e5)
        gas, liquid = sums(split)
        for place, k in ((2, 1e8), (3, 1e-8), (4, 0.5)):
            assert split.gas[place] / gas == pytest.approx(k * split.liquid[place] / liquid, rel=1e-12)

    def test_only_what_stays(self):
        m = real_mixture(("water",), ("air", "oil"))
        flows = np.array([[2.0, 0.0, 0.0], [0.0, 3.0, 0.0], [2.0, 3.0, 0.0], [0.0, 0.0, 0.0]])
        split = at_temperature(m, flows, 300.0, 1e5)
        assert (split.status == OK).all()
        np.testing.assert_array_equal(split.gas, flows * [1, 0, 0])
        np.testing.assert_array_equal(split.liquid, flows * [0, 1, 0])
        warm = at_enthalpy(m, flows, m.enthalpy(split.gas, split.liquid, np.full(4, 350.0)), 1e5, guess=333.0)
        np.testing.assert_allclose(warm.temperature, [350.0, 350.0, 350.0, 333.0], rtol=1e-13)

    def test_a_ratio_that_falls_below_zero_keeps_the_component_in_the_liquid(self):
        """K = -1.2 + 0.005 T is none below 240 K, beside a curved model and without one."""
        models = {"a": {"model": "polynomial", "K": [-1.2, 0.005]}, "b": constant(0.5),
                  "c": {"model": "table", "x": [0.0, 0.1, 1.0], "y": [0.0, 0.3, 1.0]}}
        for used in (("a", "b"), ("a", "b", "c")):
            m = mixture({name: models[name] for name in used}, {"air": "gas", "oil": "liquid"})
            flows = np.full(2 + len(used), 0.3)
            cold, warm = (at_temperature(m, flows, t + 1j * STEP, 1e5) for t in (230.0, 260.0))
            assert cold.status == warm.status == OK
            assert cold.gas[2] == 0.0 and cold.liquid[2] == pytest.approx(0.3, rel=4 * EPS)
            assert warm.gas[2].real > 0.0 and warm.gas[2].imag > 0.0

    def test_a_hopeless_case_is_given_up(self):
        """Colder than any temperature that is looked for, beside one that boils."""
        m = real_mixture(("water", "toluene"), ("air",))
        split = at_enthalpy(m, np.full((2, 3), 1.0), np.array([-1e6, 3e4]), 1e5)
        assert split.status.tolist() == [code(Status.unit_failed), OK]
        assert np.isnan(split.gas[0]).all() and np.isnan(split.temperature[0])

    def test_scale(self):
        m = real_mixture()
        flows = np.array([0.3, 0.1, 0.2, 0.3, 0.1])
        base = at_enthalpy(m, flows, 2e4, 1e5)
        for factor in (1e-12, 1e9):
            other = at_enthalpy(m, flows * factor, 2e4 * factor, 1e5)
            np.testing.assert_allclose(other.gas, base.gas * factor, rtol=1e-11)


# --- derivatives


def richardson(call, size):
    """Fourth order: central differences at two steps, extrapolated."""
    near, far = ((call(s) - call(-s)) / (2 * s) for s in (size, 2 * size))
    return (4 * near - far) / 3


class TestDerivatives:
    NAMES = ("water", "methanol", "hexane", "toluene", "decane")

    def problem(self):
        rng = np.random.default_rng(41)
        m = real_mixture(self.NAMES, ("air", "oil"))
        flows = rng.uniform(0.05, 1.0, (60, 7))
        flows[:40:2, 0] = 0.0
        flows[:40:3, 1] = 0.0
        numbers = {"water.vapour_pressure.A": np.full(60, 8.07131), "toluene.vapour_pressure.B": np.full(60, 1344.8),
                   "heat.water.heat_of_vaporisation.value": np.full(60, 44000.0),
                   "heat.oil.liquid_heat_capacity": np.full(60, 480.0)}
        temperature, pressure = rng.uniform(300, 430, 60), 10 ** rng.uniform(4.7, 5.7, 60)
        return m, flows, temperature, pressure, numbers

    def directions(self, m, flows, numbers, seeds=6):
        rng = np.random.default_rng(42)
        ways = {"flows": rng.normal(size=(seeds, *flows.shape)) * flows, "first": rng.normal(size=(seeds, 60)),
                "pressure": rng.normal(size=(seeds, 60)) * 1e4}
        return ways | {key: rng.normal(size=(seeds, 60)) * 0.01 * value for key, value in numbers.items()}

    def check(self, call, m, flows, first, pressure, numbers, scale_first, close=2e-8):
        """`call(flows, first, pressure, numbers)`; `first` is T, H or the share of gas."""
        ways = self.directions(m, flows, numbers)
        ways["first"] = ways["first"] * scale_first

        def moved(step):
            return call(flows + step * ways["flows"], first + step * ways["first"], pressure + step * ways["pressure"],
                        {key: value + step * ways[key] for key, value in numbers.items()})

        exact, plain = moved(1j * STEP), call(flows, first, pressure, numbers)
        assert exact.gas.shape == (6, *flows.shape)
        assert exact.status.shape == (6, 60) and (exact.status == OK).all()
        worst = 0.0
        for part in ("gas", "liquid", "temperature", "pressure"):
            value = getattr(exact, part)
            np.testing.assert_allclose(value.real, np.broadcast_to(getattr(plain, part), value.shape), rtol=1e-12, atol=0)
            wanted = richardson(lambda step, part=part: getattr(moved(step), part), 1e-4)
            size = np.abs(wanted).max(axis=-1, keepdims=True) if part in ("gas", "liquid") else np.abs(wanted)
            error = np.abs(value.imag / STEP - wanted)
            worst = max(worst, (error / (size + 1e-3 * np.abs(value.real).max())).max())
        assert worst < close
        return exact, plain

    def test_at_temperature(self):
        m, flows, temperature, pressure, numbers = self.problem()
        exact, plain = self.check(lambda f, t, p, n: at_temperature(m, f, t, p, n), m, flows, temperature, pressure, numbers, 1.0)
        liquid_only, gas_only = plain.gas.sum(axis=1) == 0, plain.liquid.sum(axis=1) == 0
        assert liquid_only.any() and gas_only.any() and (~liquid_only & ~gas_only).sum() > 10
        assert not exact.gas.imag[:, liquid_only].any() and not exact.liquid.imag[:, gas_only].any()

    def test_at_enthalpy(self):
        m, flows, temperature, pressure, numbers = self.problem()
        start = at_temperature(m, flows, temperature, pressure)
        enthalpy = m.enthalpy(start.gas, start.liquid, temperature)
        self.check(lambda f, h, p, n: at_enthalpy(m, f, h, p, n), m, flows, enthalpy, pressure, numbers, 1e3)

    @pytest.mark.parametrize("given", ["pressure", "temperature"])
    def test_at_gas_fraction(self, given):
        m, flows, temperature, pressure, numbers = self.problem()
        low, high = flows[:, 0] / flows.sum(axis=1), 1 - flows[:, 1] / flows.sum(axis=1)
        share = low + 0.4 * (high - low)
        if given == "pressure":
            self.check(lambda f, s, p, n: at_gas_fraction(m, f, s, n, pressure=p), m, flows, share, pressure, numbers, 0.01)
        else:
            self.check(lambda f, s, p, n: at_gas_fraction(m, f, s, n, temperature=temperature + 1e-4 * (p - pressure)),
                       m, flows, share, pressure, numbers, 0.01)

    def test_bubble_point_and_what_first_boils(self):
        m = real_mixture(("hexane", "toluene"))
        x = np.array([0.4, 0.6])
        split = at_gas_fraction(m, x.astype(complex), 1j * STEP, pressure=1e5)
        k = np.array([psat("hexane", split.temperature.real), psat("toluene", split.temperature.real)]) / 1e5
        np.testing.assert_allclose(split.gas.imag / STEP, k * x, rtol=1e-12)
        np.testing.assert_allclose((split.gas + split.liquid).imag, 0.0, atol=1e-15 * STEP)
        wanted = richardson(lambda s: at_gas_fraction(m, x, 0.002 + s, pressure=1e5).temperature, 4e-4)
        inside = at_gas_fraction(m, x, 0.002 + 1j * STEP, pressure=1e5)
        assert inside.temperature.imag / STEP == pytest.approx(wanted, rel=1e-6)

    def test_tables_and_ratios(self):
        x = np.array([0.0, 0.01, 0.05, 0.2, 0.5])
        models = {"a": {"model": "table", "x": x.tolist(), "y": (0.3 * x + 1.2 * x**2).tolist()},
                  "b": {"model": "table", "X": x.tolist(), "Y": (x / (0.1 + x)).tolist()},
                  "c": constant(0.7, "ratio"), "d": VOLATILE["water"][0],
                  "e": {"model": "table", "temperature": [280, 350, 450], "unit": "K", "K": [0.1, 0.5, 2.0]}}
        heat = {name: heats(100.0, 60.0, 30000) for name in "abcde"} | {name: STAYS[name][1] for name in STAYS}
        rng = np.random.default_rng(43)
        flows = rng.uniform(0.1, 1.0, (60, 7)) * [2, 2, 0.3, 0.1, 0.3, 0.5, 0.3]
        temperature, pressure = rng.uniform(300, 345, 60), 10 ** rng.uniform(4.9, 5.3, 60)
        for basis in (None, {"gas": ("air", "d"), "liquid": ("oil", "d")}):
            m = mixture(models, {"air": "gas", "oil": "liquid"}, heat, basis)
            numbers = {"c.K": np.full(60, 0.7)}
            self.check(lambda f, t, p, n, m=m: at_temperature(m, f, t, p, n), m, flows, temperature, pressure, numbers, 1.0, 1e-6)
            split = at_temperature(m, flows, temperature, pressure)
            enthalpy = m.enthalpy(split.gas, split.liquid, temperature)
            self.check(lambda f, h, p, n, m=m: at_enthalpy(m, f, h, p, n), m, flows, enthalpy, pressure, numbers, 1e3, 1e-6)

    def test_a_component_that_begins_to_flow(self):
        """From zero on, into two phases, and the first gas over a liquid below its bubble point."""
        m = real_mixture(("water", "toluene"), ("air",))
        for flows, way in (([1.0, 2.0, 0.0], 2), ([0.0, 2.0, 1.0], 0)):
            flows = np.array(flows)
            unit = np.eye(3)[way]
            split = at_temperature(m, flows + 1j * STEP * unit, 320.0, 1e5)
            near, far = (at_temperature(m, flows + s * unit, 320.0, 1e5) for s in (1e-5, 2e-5))
            base = at_temperature(m, flows, 320.0, 1e5)
            for part in ("gas", "liquid"):
                at = [getattr(item, part) for item in (base, near, far)]
                sided = (4 * at[1] - 3 * at[0] - at[2]) / 2e-5
                np.testing.assert_allclose(getattr(split, part).imag / STEP, sided, rtol=1e-6, atol=1e-8)
            np.testing.assert_allclose((split.gas + split.liquid).imag / STEP, unit, atol=1e-14)

    @pytest.mark.parametrize(("temperature", "way"), [(310.0, 0), (420.0, 1)])
    def test_a_phase_that_begins_at_given_enthalpy(self, temperature, way):
        """Air over a liquid below its bubble point, oil in a gas above its dew point: both take some along."""
        m = real_mixture(("water", "toluene"), ("air", "oil"))
        flows, unit = np.array([0.0, 0.0, 2.0, 1.0]), np.eye(4)[way]
        start = at_temperature(m, flows, temperature, 1e5)
        assert not (start.gas if way == 0 else start.liquid).any()
        enthalpy = m.enthalpy(start.gas, start.liquid, temperature)
        exact = at_enthalpy(m, flows + 1j * STEP * unit, enthalpy, 1e5)
        base, near, far = (at_enthalpy(m, flows + s * unit, enthalpy, 1e5) for s in (0.0, 1e-5, 2e-5))
        for part, size in (("gas", 1.0), ("liquid", 1.0), ("temperature", 100.0)):
            at = [getattr(item, part) for item in (base, near, far)]
            sided = (4 * at[1] - 3 * at[0] - at[2]) / 2e-5
            np.testing.assert_allclose(getattr(exact, part).imag / STEP, sided, rtol=1e-6, atol=1e-7 * size)
        other = exact.gas if way == 0 else exact.liquid
        assert (other.imag[2:] > 0.01 * STEP).all()
        np.testing.assert_array_equal(other.real, 0.0)

    def test_no_flow(self):
        m = real_mixture(("water",), ("air",))
        split = at_temperature(m, np.array([1.0, 1.0]) * 1j * STEP, 300.0 + 2j * STEP, 1e5)
        assert split.status == OK
        assert (split.gas.imag / STEP).tolist() == [1.0, 0.0]
        assert (split.liquid.imag / STEP).tolist() == [0.0, 1.0]
        assert split.temperature.imag == 2 * STEP
        warm = at_enthalpy(m, np.array([1.0, 1.0]) * 1j * STEP, 1j * STEP, 1e5)
        assert warm.status == OK and np.isfinite(warm.temperature)

    def test_derivatives_of_an_enthalpy(self):
        m, flows, temperature, pressure, _ = self.problem()
        split = at_temperature(m, flows, temperature, pressure)
        value = m.enthalpy(split.gas, split.liquid, temperature + 1j * STEP)
        wanted = richardson(lambda s: m.enthalpy(split.gas, split.liquid, temperature + s), 0.1)
        np.testing.assert_allclose(value.imag / STEP, wanted, rtol=1e-10)

    def test_broken_cases_stay_broken(self):
        m, flows, temperature, pressure, _ = self.problem()
        flows = flows.astype(complex)
        flows[3, 2] = np.nan
        split = at_temperature(m, flows + 1j * STEP, temperature, pressure)
        assert split.status[3] == code(Status.not_finite) and np.isnan(split.gas[3]).all()
        assert np.isfinite(np.delete(split.gas, 3, axis=0)).all()


# --- mixtures


class TestMixture:
    def test_addresses(self):
        m = mixture({"a": constant(2.0)}, {"air": "gas"}, {"a": heats(100.0, 60.0, 30000), "air": STAYS["air"][1]})
        found = m.addresses()
        assert found["a.K"] == "equilibrium.here.a.K"
        assert found["heat.a.liquid_heat_capacity"] == "heat_data.a.liquid_heat_capacity"
        assert found["heat.air.gas_heat_capacity"] == "heat_data.air.gas_heat_capacity"

    def test_numbers_are_those_of_the_file_unless_given(self):
        m = mixture({"a": constant(2.0), "b": constant(0.5)})
        flows = np.array([1.0, 1.0])
        given = at_temperature(m, flows, 300.0, 1e5, {"a.K": 2.0, "b.K": 0.5})
        np.testing.assert_array_equal(at_temperature(m, flows, 300.0, 1e5).gas, given.gas)
        assert at_temperature(m, flows, 300.0, 1e5, {"a.K": 2.2}).gas[0] > given.gas[0]

    def connect(self, models, basis=None, present=(True, True)):
        components = Components([Component("a"), Component("b")])
        context = Context()
        conditions = Conditions.read("here", models, components, context)
        made = Mixture.connect(components, conditions, np.array(present), basis or {}, None, "the drum", context)
        return made, [str(fault) for fault in context.faults]

    def test_a_component_without_model_is_a_fault(self):
        made, faults = self.connect({"a": constant(1.0)})
        assert made is None
        assert len(faults) == 1 and "'b' reaches the drum and has no model here" in faults[0]
        made, faults = self.connect({"a": constant(1.0)}, present=(True, False))
        assert made is not None and not faults

    def test_a_ratio_to_a_basis_that_holds_it_is_a_fault(self):
        made, faults = self.connect({"a": constant(1.0, "ratio"), "b": constant(1.0)}, {"gas": ("b",), "liquid": ("a",)})
        assert made is None
        assert len(faults) == 1 and "belongs to their basis itself" in faults[0]

    def test_a_flow_without_a_place_is_broken_input(self):
        made, _ = self.connect({"a": constant(1.0)}, present=(True, False))
        split = at_temperature(made, np.array([[1.0, 0.0], [1.0, 1.0]]), 300.0, 1e5)
        assert split.status.tolist() == [OK, code(Status.not_finite)]

    def test_a_ratio_without_any_basis_has_no_answer(self):
        m = mixture({"a": constant(1.0, "ratio"), "b": constant(0.5), "c": constant(2.0)}, {"air": "gas", "oil": "liquid"})
        split = at_temperature(m, np.array([[0.0, 0.0, 0.1, 1.0, 1.0], [0.0, 0.0, 0.0, 1.0, 1.0]]), 300.0, 1e5)
        assert split.status.tolist() == [code(Status.unit_failed), OK]


# --- speed


@pytest.mark.bench
def test_speed():
    """Microseconds a case of 1,000 with five components that distribute."""
    m = real_mixture()
    rng = np.random.default_rng(51)
    flows, pressure = rng.random((1000, 5)), 10 ** rng.uniform(4.5, 6, 1000)
    split = at_temperature(m, flows, 360.0, pressure)
    enthalpy = m.enthalpy(split.gas, split.liquid, np.full(1000, 360.0))
    calls = {
        "at_temperature": lambda: at_temperature(m, flows, 360.0, pressure),
        "at_enthalpy": lambda: at_enthalpy(m, flows, enthalpy, pressure),
        "bubble": lambda: at_gas_fraction(m, flows, 0.0, pressure=pressure),
    }
    for name, call in calls.items():
        taken = math.inf
        for _ in range(5):
            begun = time.perf_counter()
            call()
            taken = min(taken, time.perf_counter() - begun)
        print(f"{name}: {taken * 1e3:.1f} us a case")
        assert taken * 1e3 < 100
