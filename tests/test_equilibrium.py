"""Equilibrium models: closed forms, published values, derivatives, arrays of cases, faults."""

from itertools import pairwise

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from leanloop.entries import Context, read_values
from leanloop.equilibrium import MODELS
from leanloop.equilibrium.base import COMPLEX_STEP, EquilibriumModel, Proportional

EXAMPLES = [(name, table) for name in MODELS for table in MODELS.load(name).examples()]
every_example = pytest.mark.parametrize(
    ("name", "table"), EXAMPLES, ids=[f"{name}-{index}" for index, (name, _) in enumerate(EXAMPLES)]
)

# away from the corners of the example tables, where a difference would straddle two pieces
TEMPERATURES = np.array([281.3, 301.7, 333.1, 377.9])
PRESSURES = np.array([0.6e5, 1.07e5, 5.3e5])
LIQUIDS = np.array([0.0043, 0.0153, 0.0257, 0.071, 0.153])
GRID = tuple(np.meshgrid(TEMPERATURES, PRESSURES, LIQUIDS, indexing="ij"))
PLACE = "equilibrium.cold.a"


def read(name, table, **context):
    """The model of a table that is right."""
    context = Context(**context)
    model = MODELS.load(name).read(table, PLACE, context)
    assert [str(fault) for fault in context.faults] == []
    return model


def faults(name, table, **context):
    """The addresses of what is wrong with a table, below its own, and the model that must not be."""
    context = Context(**context)
    assert MODELS.load(name).read(table, PLACE, context) is None
    assert all(fault.problem and fault.remedy for fault in context.faults)
    return [fault.address.removeprefix(PLACE).lstrip(".") for fault in context.faults]


def k(name, table, temperature, pressure, **context):
    model = read(name, table, **context)
    return float(model.k(np.float64(temperature), np.float64(pressure), model.numbers))


def written_numbers(model):
    """Names of the single numbers of a model, which may differ from case to case."""
    return [name for name, value in model.numbers.items() if not isinstance(value, list)]


# every registered model


@every_example
def test_example_reads_as_a_model(name, table):
    model = read(name, table)
    assert isinstance(model, EquilibriumModel)
    assert type(model).name == name
    assert model.coordinates in ("fraction", "ratio")
    assert set(model.numbers) <= set(model.values.entries)


@every_example
def test_slopes_agree_with_differences(name, table):
    model = read(name, table)
    gas = model.gas(*GRID, model.numbers)
    slopes = model.slopes(*GRID, model.numbers)
    for place, slope in enumerate(slopes):

        def central(step, place=place):
            ahead, behind = list(GRID), list(GRID)
            ahead[place], behind[place] = GRID[place] * (1 + step), GRID[place] * (1 - step)
            change = model.gas(*ahead, model.numbers) - model.gas(*behind, model.numbers)
            return change / (ahead[place] - behind[place])

        difference = (4 * central(5e-4) - central(1e-3)) / 3  # Richardson: the error in step^2 cancels
        scale = np.maximum(np.abs(slope), np.abs(gas) / GRID[place])
        assert slope.shape == gas.shape
        assert (np.abs(slope - difference) <= 1e-8 * scale).all()


@every_example
def test_complex_step_gives_the_slopes(name, table):
    """All three directions on one leading axis, as a column asks for them."""
    model = read(name, table)
    slopes = np.array(model.slopes(*GRID, model.numbers))
    if model.complex_safe:
        step = 1j * COMPLEX_STEP * np.eye(3)[:, :, None, None, None]
        moved = [GRID[place] + step[:, place] for place in range(3)]
        value = model.gas(*moved, model.numbers)
        assert value.shape == slopes.shape
        np.testing.assert_allclose(value.imag / COMPLEX_STEP, slopes, rtol=1e-13)
        np.testing.assert_allclose(
            value.real, np.broadcast_to(model.gas(*GRID, model.numbers), value.shape), rtol=1e-14
        )
    else:
        assert type(model).slopes is not EquilibriumModel.slopes


@every_example
def test_uses_names_what_the_ratio_depends_on(name, table):
    model = read(name, table)
    state = {"temperature": 301.7, "pressure": 1.07e5, "liquid": 0.0153}
    other = {"temperature": 377.9, "pressure": 5.3e5, "liquid": 0.071}

    def ratio(**change):
        t, p, z = (np.float64(value) for value in {**state, **change}.values())
        return float(model.gas(t, p, z, model.numbers) / z)

    for key, value in other.items():
        changed = abs(ratio(**{key: value}) / ratio() - 1) > 1e-12
        assert changed == (key in model.uses), key
    assert isinstance(model, Proportional) == ("liquid" not in model.uses)


@every_example
def test_zero_liquid_is_regular(name, table):
    model = read(name, table)
    t, p = TEMPERATURES[:, None], PRESSURES
    zero = np.zeros((len(TEMPERATURES), len(PRESSURES)))
    gas = np.broadcast_to(model.gas(t, p, zero, model.numbers), zero.shape)
    limit = model.ratio_at_zero(t, p, model.numbers)
    assert limit.shape == zero.shape
    assert np.isfinite(limit).all()
    if isinstance(model, Proportional):
        assert (gas == 0).all()
    small = 1e-9
    slope = (model.gas(t, p, zero + small, model.numbers) - gas) / small
    np.testing.assert_allclose(np.broadcast_to(slope, zero.shape), limit, rtol=1e-5)


@every_example
def test_cases_with_their_own_numbers_are_cases_on_their_own(name, table):
    model = read(name, table)
    t, p, z = 300.3 + 20 * np.arange(6.0).reshape(3, 2), 1e5 * np.array([[1.0], [2.0], [4.0]]), np.full((3, 2), 0.0153)
    factor = np.array([[1.0], [1.02], [0.97]])
    numbers = {key: value if isinstance(value, list) else value * factor for key, value in model.numbers.items()}
    together = np.broadcast_to(model.gas(t, p, z, numbers), (3, 2))
    dilute = model.ratio_at_zero(t, p, numbers)
    for case in range(3):
        own = {key: value if isinstance(value, list) else value[case, 0] for key, value in numbers.items()}
        for stage in range(2):
            alone = model.gas(t[case, stage], p[case, 0], z[case, stage], own)
            assert together[case, stage] == pytest.approx(float(alone), rel=1e-14)
            limit = model.ratio_at_zero(t[case, stage], p[case, 0], own)
            assert dilute[case, stage] == pytest.approx(float(limit), rel=1e-14)
    one_state = np.float64(300.3), np.float64(1e5), np.float64(0.0153)
    slopes = model.slopes(*one_state, numbers)
    assert {slope.shape for slope in slopes} == {(3, 1) if written_numbers(model) else ()}


@every_example
def test_derivative_with_respect_to_its_numbers(name, table):
    model = read(name, table)
    t, p, z = 300.3 + 20 * np.arange(6.0).reshape(3, 2), np.array([[1e5], [2e5], [4e5]]), np.full((3, 2), 0.0153)
    for key in written_numbers(model):
        value = model.numbers[key]
        step = COMPLEX_STEP * np.array([1.0, 2.0])[:, None, None]
        moved = model.gas(t + 0j, p, z, {**model.numbers, key: value + 1j * step})
        exact = np.broadcast_to(moved.imag / COMPLEX_STEP, (2, 3, 2))
        h = 1e-5 * abs(value)
        ahead, behind = (model.gas(t, p, z, {**model.numbers, key: value + sign * h}) for sign in (1, -1))
        difference = np.broadcast_to((ahead - behind) / (2 * h), (3, 2))
        np.testing.assert_allclose(exact[0], difference, rtol=1e-6, atol=1e-12)
        np.testing.assert_allclose(exact[1], 2 * exact[0], rtol=1e-14)


@every_example
def test_a_case_without_numbers_disturbs_no_other(name, table):
    model = read(name, table)
    t, p, z = np.full((3, 2), 310.0), np.full((3, 2), 1e5), np.full((3, 2), 0.02)
    whole = np.broadcast_to(model.gas(t, p, z, model.numbers), (3, 2))
    for lost in (t, p, z):
        lost[1] = np.nan
    part = np.broadcast_to(model.gas(t, p, z, model.numbers), (3, 2))
    assert (part[[0, 2]] == whole[[0, 2]]).all()
    assert np.isnan(part[1]).all()
    assert not model.outside(t, p, z, model.numbers)[1].any()
    assert isinstance(model.cautions(t, p, z), list)


# closed forms


def test_constant_in_fractions_and_ratios():
    assert k("constant", {"K": 0.03}, 300, 1e5) == 0.03
    assert read("constant", {"K": 0.03}).coordinates == "fraction"
    assert read("constant", {"K": 0.03, "basis": "fraction"}).coordinates == "fraction"
    assert read("constant", {"K": 0.03, "basis": "ratio"}).coordinates == "ratio"
    assert k("constant", {"K": 0}, 300, 1e5) == 0.0


@pytest.mark.parametrize(("unit", "reading"), [("K", 310.0), ("degC", 36.85), ("degF", 98.33), ("degR", 558.0)])
def test_polynomial_in_each_unit(unit, reading):
    coefficients = [4.35, 0.02542, -2e-5, 8.333e-9]
    expected = sum(mpmath.mpf(c) * mpmath.mpf(str(reading)) ** power for power, c in enumerate(coefficients))
    assert k("polynomial", {"K": coefficients, "temperature": unit}, 310, 7e5) == pytest.approx(
        float(expected), rel=1e-13
    )
    pressed = {"K": coefficients, "temperature": unit, "pressure": "27.58 bar"}
    assert k("polynomial", pressed, 310, 7e5) == pytest.approx(float(expected * 2758 / 700), rel=1e-13)


def test_polynomials_of_an_oil_absorber():
    """K at 97.5 degF and 400 psia, methane to n-butane; constants of Henley & Seader 1981, chapter 15."""
    methane = {"K": [4.35, 0.02542, -2e-5, 8.333e-9], "temperature": "degF", "pressure": "400 psi"}
    kelvin = (97.5 - 32) / 1.8 + 273.15
    assert k("polynomial", methane, kelvin, 400 * 6894.757293168) == pytest.approx(6.65, abs=0.005)
    assert k("polynomial", methane, kelvin, 800 * 6894.757293168) == pytest.approx(6.65 / 2, abs=0.0025)


# Sander 2015 and 2023; K = y/x at 101325 Pa, with 55 342 mol/m3 of water at 25 degC and 55 076 at 40 degC
HENRY = [
    ("CO2", "3.3e-4", 2400, 1655, 2422),
    ("H2S", "1.0e-3", 2100, 546, 762),
    ("NH3", "0.59", 4200, 0.926, 1.81),
    ("SO2", "1.3e-2", 2900, 42.0, 66.6),
    ("O2", "1.3e-5", 1500, 4.20e4, 5.32e4),
    ("H2", "7.8e-6", 530, 7.00e4, 7.59e4),
    ("acetone", "0.27", 5500, 2.02, 4.87),
    ("toluene", "1.5e-3", 4300, 364, 723),
]


@pytest.mark.parametrize(("solute", "solubility", "slope", "at_25", "at_40"), HENRY)
def test_henry_in_water(solute, solubility, slope, at_25, at_40):
    for kelvin, water, expected in ((298.15, "55.342", at_25), (313.15, "55.076", at_40)):
        table = {
            "solubility": f"{solubility} mol/(m3 Pa)",
            "slope": f"{slope} K",
            "solvent_concentration": f"{water} kmol/m3",
        }
        assert k("henry", table, kelvin, 101325) == pytest.approx(expected, rel=3e-3), solute


@pytest.mark.parametrize("slope", [2400, -310])
def test_henry_closed_forms(slope):
    with mpmath.workdps(30):
        bend = mpmath.exp(-slope * (1 / mpmath.mpf(350) - 1 / mpmath.mpf("298.15")))
        by_solubility = float(mpmath.mpf(55300) / mpmath.mpf("3.3e-4") * bend / 150000)
        other = mpmath.exp(-slope * (1 / mpmath.mpf(350) - 1 / mpmath.mpf("313.15")))
        by_constant = float(164000000 * other / 150000)
    table = {
        "solubility": "3.3e-4 mol/(m3 Pa)",
        "slope": f"{slope} K",
        "solvent_concentration": "55.3 kmol/m3",
    }
    assert k("henry", table, 350, 1.5e5) == pytest.approx(by_solubility, rel=1e-13)
    table = {"constant": "1640 bar", "slope": f"{slope} K", "at": "40 degC"}
    assert k("henry", table, 350, 1.5e5) == pytest.approx(by_constant, rel=1e-13)
    assert (k("henry", table, 350, 1.5e5) > k("henry", table, 320, 1.5e5)) == (slope > 0)


def test_henry_defaults():
    assert k("henry", {"constant": "1640 bar"}, 350, 1e5) == pytest.approx(1640, rel=1e-14)
    assert k("henry", {"constant": "1640 bar", "slope": "2400 K"}, 298.15, 1e5) == pytest.approx(1640, rel=1e-14)
    still = {"solubility": "1 mol/(m3 Pa)", "solvent_concentration": "1 mol/L"}
    assert k("henry", still, 350, 1e5) == pytest.approx(0.01, rel=1e-14)


# Poling, Prausnitz & O'Connell: log10(p/Pa) = A - B/(T/K + C)
ANTOINE = {
    "benzene": (8.98523, 1184.24, -55.578),
    "toluene": (9.05043, 1327.62, -55.525),
    "n-hexane": (9.00139, 1170.875, -48.833),
    "methanol": (10.20277, 1580.08, -33.65),
    "water": (10.11564, 1687.537, -42.98),
}
# VDI Heat Atlas: A, B, C, D, Tc in K, pc in Pa, powers 2.5 and 5; MEA: McGarry, powers 3 and 6
WAGNER = {
    "benzene": (-7.11451, 1.83981, -2.25158, -3.15179, 562.01, 4.901e6, "2.5-5"),
    "toluene": (-7.50051, 2.08939, -2.56368, -2.85042, 591.75, 4.126e6, "2.5-5"),
    "n-hexane": (-7.61075, 2.00527, -2.74158, -2.82824, 507.79, 3.042e6, "2.5-5"),
    "methanol": (-8.72963, 1.4586, -2.78449, -0.70669, 513.38, 8.216e6, "2.5-5"),
    "water": (-7.86975, 1.90561, -2.30891, -2.06472, 647.1, 22.064e6, "2.5-5"),
    "MEA": (-10.8842, 3.03743, -7.21939, -2.99322, 614.0, 4.4583e6, "3-6"),
}
# measured: normal boiling points, K; steam tables (IAPWS-95); MEA after Cai, Xie and Wu 1996
MEASURED = [
    ("benzene", 353.24, 101325, 0.004),
    ("toluene", 383.76, 101325, 0.004),
    ("n-hexane", 341.87, 101325, 0.004),
    ("methanol", 337.70, 101325, 0.006),
    ("water", 298.15, 3169.9, 0.004),
    ("water", 323.15, 12352, 0.004),
    ("water", 373.15, 101418, 0.004),
    ("water", 423.15, 476160, 0.004),
    ("MEA", 443.38, 101330, 0.006),
    ("MEA", 431.39, 66660, 0.025),
]


def antoine(a, b, c, pressure="Pa", temperature="K"):
    return {"form": "antoine", "A": a, "B": b, "C": c, "pressure": pressure, "temperature": temperature}


def wagner(a, b, c, d, critical_temperature, critical_pressure, powers):
    return {
        "form": "wagner", "A": a, "B": b, "C": c, "D": d, "powers": powers,
        "critical_temperature": f"{critical_temperature} K", "critical_pressure": f"{critical_pressure} Pa",
    }  # fmt: skip


@pytest.mark.parametrize(("substance", "kelvin", "pascal", "within"), MEASURED)
def test_vapour_pressures_against_measured_ones(substance, kelvin, pascal, within):
    forms = [wagner(*WAGNER[substance])]
    if substance in ANTOINE:
        forms.append(antoine(*ANTOINE[substance]))
    for form in forms:
        assert k("raoult", {"vapour_pressure": form}, kelvin, 1.0) == pytest.approx(pascal, rel=within)


def test_antoine_in_units():
    with mpmath.workdps(30):
        mercury = mpmath.power(10, mpmath.mpf("6.95") - 1345 / (mpmath.mpf("219.5") + 150)) * 101325 / 760
        gamma = mpmath.exp(mpmath.mpf("-0.78") + mpmath.mpf("188.6") / mpmath.mpf("423.15"))
    form = antoine(6.95, 1345.0, 219.5, "mmHg", "degC")
    assert k("raoult", {"vapour_pressure": form}, 423.15, 1.01e5) == pytest.approx(float(mercury / 101000), rel=1e-13)
    mixed = {"vapour_pressure": form, "activity": {"a": -0.78, "b": 188.6}}
    assert k("raoult", mixed, 423.15, 1.01e5) == pytest.approx(float(gamma * mercury / 101000), rel=1e-13)
    for unit, at_freezing in (("degF", 32), ("degR", 491.67)):
        same = antoine(6.95, 1345.0 * 1.8, 219.5 * 1.8 - at_freezing, "torr", unit)
        assert k("raoult", {"vapour_pressure": same}, 423.15, 1e5) == pytest.approx(float(mercury / 1e5), rel=1e-12)


@pytest.mark.parametrize("substance", WAGNER)
def test_wagner_closed_form(substance):
    a, b, c, d, critical, pascal, powers = WAGNER[substance]
    m, n = (3, 6) if powers == "3-6" else (2.5, 5)
    with mpmath.workdps(30):
        tau = 1 - mpmath.mpf(390) / mpmath.mpf(str(critical))
        sums = sum(mpmath.mpf(str(v)) * tau**e for v, e in ((a, 1), (b, 1.5), (c, m), (d, n)))
        expected = float(pascal * mpmath.exp(sums / (1 - tau)))
    assert k("raoult", {"vapour_pressure": wagner(*WAGNER[substance])}, 390, 1.0) == pytest.approx(expected, rel=1e-12)


def test_wagner_has_the_common_powers_by_default():
    table = wagner(*WAGNER["water"])
    plain = {key: value for key, value in table.items() if key != "powers"}
    assert k("raoult", {"vapour_pressure": plain}, 330, 1e5) == k("raoult", {"vapour_pressure": table}, 330, 1e5)
    assert k("raoult", {"vapour_pressure": {**table, "powers": "3-6"}}, 330, 1e5) != pytest.approx(
        k("raoult", {"vapour_pressure": table}, 330, 1e5), rel=1e-3
    )


@pytest.mark.parametrize("substance", WAGNER)
def test_wagner_goes_on_straight_above_the_critical_point(substance):
    critical, pascal = WAGNER[substance][4:6]
    model = read("raoult", {"vapour_pressure": wagner(*WAGNER[substance])})

    def at(kelvin):
        return model.saturation_pressure(np.asarray(kelvin), model.numbers)

    assert float(at(critical)) == pytest.approx(pascal, rel=1e-14)
    inverse = np.linspace(1 / critical, 0.2 / critical, 9)
    logs = np.log(at(1 / inverse))
    assert np.isfinite(logs).all()
    assert np.diff(logs, 2) == pytest.approx(0, abs=1e-12)
    slopes = [
        model.slopes(np.float64(t), np.float64(1e5), np.float64(0.1), model.numbers)[0]
        for t in (critical * (1 - 1e-9), critical, critical * (1 + 1e-9))
    ]
    assert slopes[0] == pytest.approx(slopes[2], rel=1e-3)
    assert slopes[1] == pytest.approx(slopes[2], rel=1e-6)


def test_fixed_vapour_pressure():
    assert k("raoult", {"vapour_pressure": "13330 Pa"}, 350, 1e5) == pytest.approx(0.1333, rel=1e-14)
    assert k("raoult", {"vapour_pressure": 13330.0}, 350, 1e5, plain_si=True) == pytest.approx(0.1333, rel=1e-14)
    with_activity = {"vapour_pressure": "13330 Pa", "activity": {"a": 0.0, "b": "188.6 K"}}
    assert k("raoult", with_activity, 350, 1e5) == pytest.approx(0.1333 * np.exp(188.6 / 350), rel=1e-14)


# tables


def curve(table, liquid):
    model = read("table", table)
    z = np.asarray(liquid, dtype=float)
    t, p = np.full(z.shape, 300.0), np.full(z.shape, 1e5)
    return (
        model.gas(t, p, z, model.numbers),
        model.slopes(t, p, z, model.numbers)[2],
        model.outside(t, p, z, model.numbers),
    )


def test_table_has_the_slopes_of_the_published_method():
    """Harmonic mean inside, three-point slope at the ends, worked by hand for steps 0.01, 0.02 and rises 2, 2.5."""
    gas, slope, _ = curve({"x": [0, 0.01, 0.03], "y": [0, 0.02, 0.07]}, [0, 0.01, 0.03])
    assert gas == pytest.approx([0, 0.02, 0.07], rel=1e-14)
    assert slope == pytest.approx([0.055 / 0.03, 0.09 / (0.05 / 2 + 0.04 / 2.5), 0.085 / 0.03], rel=1e-13)


def test_table_goes_on_straight_and_says_so():
    table = {"x": [0.01, 0.02, 0.04], "y": [0.01, 0.03, 0.09]}
    first, last = curve(table, [0.01, 0.04])[1]
    gas, slope, outside = curve(table, [0.0, 0.005, 0.01, 0.025, 0.04, 0.05, 0.9])
    assert slope[[0, 1, 2]] == pytest.approx(first, rel=1e-14)
    assert slope[[4, 5, 6]] == pytest.approx(last, rel=1e-14)
    assert gas[[0, 1]] == pytest.approx([0.01 - 0.01 * first, 0.01 - 0.005 * first], abs=1e-15)
    assert gas[[5, 6]] == pytest.approx([0.09 + 0.01 * last, 0.09 + 0.86 * last], rel=1e-14)
    assert outside.tolist() == [True, True, False, False, False, True, True]


def test_rounding_at_the_ends_is_not_off_the_table():
    inside = [0.01 * (1 - 2e-16), 0.04 * (1 + 2e-16)]
    assert not curve({"x": [0.01, 0.04], "y": [0.01, 0.09]}, inside)[2].any()
    assert curve({"x": [0.01, 0.04], "y": [0.01, 0.09]}, [0.01 - 1e-12, 0.04 + 1e-12])[2].all()


def test_table_that_starts_above_zero_gas():
    gas, slope, outside = curve({"x": [0, 0.1], "y": [0.02, 0.05]}, [0, 0.05])
    assert gas == pytest.approx([0.02, 0.035], rel=1e-14)
    assert slope == pytest.approx(0.3, rel=1e-13)
    assert not outside.any()


def test_table_of_ratios_is_on_ratios():
    assert read("table", {"X": [0, 2.0], "Y": [0, 3.0]}).coordinates == "ratio"
    assert read("table", {"x": [0, 0.2], "y": [0, 0.3]}).coordinates == "fraction"
    assert curve({"X": [0, 2.0], "Y": [0, 3.0]}, [1.0])[0] == pytest.approx(1.5, rel=1e-14)


def test_table_takes_other_points():
    """A case may come with a list of its own; the file's stays as it is."""
    model = read("table", {"x": [0, 0.1], "y": [0, 0.2]})
    state = np.float64(300), np.float64(1e5), np.float64(0.05)
    assert model.gas(*state, {"x": [0, 0.1], "y": [0, 0.4]}) == pytest.approx(0.2, rel=1e-14)
    assert model.gas(*state, {"x": (0, 0.2), "y": np.array([0, 0.2])}) == pytest.approx(0.05, rel=1e-14)
    assert model.gas(*state, model.numbers) == pytest.approx(0.1, rel=1e-14)


@settings(deadline=None, derandomize=True, database=None)
@given(st.lists(st.tuples(st.floats(1e-3, 1), st.floats(0, 1)), min_size=2, max_size=8))
def test_table_is_monotone_through_its_points(steps):
    x, y = np.cumsum(steps, axis=0).T
    table = {"X": x.tolist(), "Y": y.tolist()}
    assert curve(table, x)[0] == pytest.approx(y, rel=1e-12, abs=1e-300)
    gas, slope, _ = curve(table, np.linspace(x[0], 2 * x[-1], 400))
    assert (slope >= -1e-12).all()
    assert all(after >= before - 1e-12 for before, after in pairwise(gas))


def test_table_over_temperature_is_straight_in_its_unit():
    table = {"temperature": [20, 40, 80], "unit": "degC", "K": [0.5, 0.9, 2.4]}
    for celsius, expected in ((20, 0.5), (30, 0.7), (60, 1.65), (80, 2.4), (100, 3.15), (10, 0.3)):
        assert k("table", table, celsius + 273.15, 1e5) == pytest.approx(expected, rel=1e-12)
    named = {"temperature": ["68 degF", "40 degC", "353.15 K"], "K": [0.5, 0.9, 2.4]}
    assert k("table", named, 333.15, 1e5) == pytest.approx(1.65, rel=1e-12)
    model = read("table", table)
    celsius = np.array([19.9, 20, 50, 80, 80.1])
    outside = model.outside(celsius + 273.15, np.float64(1e5), np.float64(0.1), model.numbers)
    assert outside.tolist() == [True, False, False, False, True]


@pytest.mark.parametrize(
    ("text", "unit", "same"),
    [
        ("x,y\n0,0\n0.01,0.02\n0.03,0.07\n", {}, {"x": [0, 0.01, 0.03], "y": [0, 0.02, 0.07]}),
        ("\ufeffnote, Y , X\n# measured\nfirst, 0, 0\n\nlast, 0.3, 0.2\n", {}, {"X": [0, 0.2], "Y": [0, 0.3]}),
        (
            "temperature,K\n20,0.5\n80,2.4\n",
            {"unit": "degC"},
            {"temperature": [20, 80], "unit": "degC", "K": [0.5, 2.4]},
        ),
    ],
)
def test_table_from_a_file_is_the_table_itself(tmp_path, text, unit, same):
    (tmp_path / "points.csv").write_text(text, encoding="utf-8")
    from_file = read("table", {"file": "points.csv", **unit}, names={"directory": [str(tmp_path)]})
    written = read("table", same)
    assert from_file.numbers == written.numbers
    assert type(from_file) is type(written)
    t, p, z = np.float64(310), np.float64(1e5), np.float64(0.012)
    assert from_file.gas(t, p, z, from_file.numbers) == written.gas(t, p, z, written.numbers)


@pytest.mark.parametrize(
    ("content", "table", "addresses"),
    [
        (None, {}, ["file"]),
        (b"", {}, ["file"]),
        (b"\xff\xfe\x00x", {}, ["file"]),
        (b"a,b\n1,2\n", {}, ["file"]),
        (b"x,y,X,Y\n0,0,0,0\n", {}, ["file"]),
        (b"x,y\n0,zero\n0.1\n", {}, ["file", "file"]),
        (b"x,y\n0,0\n0.1,0.2\n", {"x": [0, 0.1]}, ["file"]),
        (b"x,y\n0,0\n0.2,0.2\n0.1,nan\n", {}, ["y[2]"]),
        (b"x,y\n0,0\n0.2,0.2\n0.1,0.3\n", {}, ["x[2]"]),
        (b"x,y\n", {}, ["x", "y"]),
        (b"temperature,K\n20,0.5\n80,2.4\n", {}, ["unit"]),
    ],
)
def test_faults_of_a_table_file(tmp_path, content, table, addresses):
    if content is not None:
        (tmp_path / "points.csv").write_bytes(content)
    assert faults("table", {"file": "points.csv", **table}, names={"directory": [str(tmp_path)]}) == addresses


# faults

FORM = antoine(6.95, 1345.0, 219.5, "mmHg", "degC")
WRONG = [
    ("constant", {}, ["K"]),
    ("constant", {"K": -1}, ["K"]),
    ("constant", {"K": "1 bar", "basis": "mass"}, ["K", "basis"]),
    ("constant", {"K": float("nan")}, ["K"]),
    ("constant", [], [""]),
    ("polynomial", {"K": []}, ["K"]),
    ("polynomial", {"K": [0, 0.0]}, ["K"]),
    ("polynomial", {"K": [1, "x", None]}, ["K[1]", "K[2]"]),
    ("polynomial", {"K": [1], "temperature": "degX", "pressure": 2}, ["temperature", "pressure"]),
    ("polynomial", {"K": [1], "pressure": "0 bar"}, ["pressure"]),
    ("polynomial", {"K": [1], "valid": ["50 degC", "20 degC"]}, ["valid"]),
    ("henry", {}, [""]),
    ("henry", {"slope": "2400 K"}, [""]),
    ("henry", {"solubility": "1 mol/(m3 Pa)"}, ["solvent_concentration"]),
    ("henry", {"solvent_concentration": "55 kmol/m3"}, ["solubility"]),
    ("henry", {"at": "25 degC"}, ["constant"]),
    ("henry", {"constant": "1 bar", "solubility": "1 mol/(m3 Pa)", "solvent_concentration": "55 kmol/m3"}, [""]),
    ("henry", {"constant": "1 bar", "solvent_concentration": "55 kmol/m3"}, [""]),
    ("henry", {"constant": "0 bar", "slope": "2 bar", "ta": 1}, ["ta", "constant", "slope"]),
    ("henry", {"constant": "1 bar", "valid": ["20 degC"]}, ["valid"]),
    ("raoult", {}, ["vapour_pressure"]),
    ("raoult", {"vapour_pressure": {}}, ["vapour_pressure.form"]),
    ("raoult", {"vapour_pressure": {"form": "antione", "A": 1}}, ["vapour_pressure.form"]),
    ("raoult", {"vapour_pressure": 5}, ["vapour_pressure"]),
    ("raoult", {"vapour_pressure": "5 K"}, ["vapour_pressure"]),
    ("raoult", {"vapour_pressure": "-5 Pa"}, ["vapour_pressure"]),
    (
        "raoult",
        {"vapour_pressure": {"form": "antoine", "A": "1 bar"}, "activity": {"b": 1}},
        [f"vapour_pressure.{name}" for name in ("A", "B", "C", "pressure", "temperature")] + ["activity.a"],
    ),
    ("raoult", {"vapour_pressure": {**FORM, "D": 1}}, ["vapour_pressure.D"]),
    ("raoult", {"vapour_pressure": {**FORM, "pressure": "K"}, "valid": ["1 K"]}, ["valid", "vapour_pressure.pressure"]),
    ("raoult", {"vapour_pressure": {**FORM, "pressure": "parsec"}}, ["vapour_pressure.pressure"]),
    (
        "raoult",
        {"vapour_pressure": {"form": "wagner", "A": 1, "B": 1, "C": 1, "D": 1, "powers": "2-4"}},
        [f"vapour_pressure.{name}" for name in ("critical_temperature", "critical_pressure", "powers")],
    ),
    ("table", {}, [""]),
    ("table", {"unit": "degC"}, [""]),
    ("table", {"x": [0, 1], "Y": [0, 1]}, [""]),
    ("table", {"x": [0, 1]}, ["y"]),
    ("table", {"x": [0, 0.1, 0.1, 0.05], "y": [0, 0.2, 0.1, 0.3]}, ["x[2]", "x[3]", "y[2]"]),
    ("table", {"x": [0, 0.1, 0.2], "y": [0, 0.2]}, ["y"]),
    ("table", {"x": [0], "y": [0]}, ["x"]),
    ("table", {"x": [-0.1, 1.1], "y": [0, float("inf")]}, ["x[0]", "x[1]", "y[1]"]),
    ("table", {"X": [0, 1.1], "Y": [-0.1, 2]}, ["Y[0]"]),
    ("table", {"temperature": [20, 30], "K": [1, 2]}, ["unit"]),
    ("table", {"temperature": ["20 degC", 30], "K": [1, 2]}, ["temperature[1]"]),
    ("table", {"temperature": [30, 20], "unit": "degC", "K": [1, 0.5]}, ["temperature[1]"]),
    ("table", {"temperature": [20, 30], "unit": "bar", "K": [1, -1]}, ["K[1]", "unit"]),
    ("table", {"file": 5}, ["file"]),
]


@pytest.mark.parametrize(("name", "table", "addresses"), WRONG, ids=[f"{n}-{i}" for i, (n, _, _) in enumerate(WRONG)])
def test_faults_stand_at_their_addresses(name, table, addresses):
    assert faults(name, table) == addresses


@pytest.mark.parametrize("name", list(MODELS))
def test_unknown_entry_is_a_fault_with_the_near_name(name):
    model = MODELS.load(name)
    for table in model.examples():
        key = next(iter(table))
        context = Context()
        assert model.read({**table, key + "e": 1}, PLACE, context) is None
        assert [(f.address, f.remedy) for f in context.faults] == [(f"{PLACE}.{key}e", f"did you mean '{key}'?")]


@every_example
def test_declared_entries_cover_what_the_example_writes(name, table):
    """The entries of the class are what the catalogue lists."""
    context = Context()
    read_values(MODELS.load(name).entries, {"surely_unknown": 1, **table}, PLACE, context)
    unknown = [fault.address for fault in context.faults if "unknown" in fault.problem]
    assert unknown == [f"{PLACE}.surely_unknown"]


# cautions


def cautions(name, table, celsius):
    model = read(name, table)
    t = np.asarray(celsius, dtype=float) + 273.15
    return model.cautions(t, np.full(t.shape, 1e5), np.full(t.shape, 0.01))


def test_stated_range_is_judged():
    table = {"K": [1.0, 0.1], "temperature": "degC", "valid": ["0 degC", "150 degC"]}
    assert cautions("polynomial", table, [0.0, 80, 150]) == []
    (sentence,) = cautions("polynomial", table, [[20, 151], [np.nan, 153.5]])
    assert "424.15 to 426.65 K" in sentence
    assert "273.15 to 423.15 K" in sentence
    boiling = {"vapour_pressure": FORM, "valid": ["0 degC", "150 degC"]}
    assert cautions("raoult", boiling, [20.0]) == []
    assert len(cautions("raoult", boiling, [-1.0])) == 1


def test_negative_polynomial_is_a_caution():
    assert cautions("polynomial", {"K": [-1.0, 0.1], "temperature": "degC"}, [10.5]) == []
    assert "negative" in cautions("polynomial", {"K": [-1.0, 0.1], "temperature": "degC"}, [9.5, 20])[0]


def test_constant_slope_of_henry_is_a_caution_far_from_its_reference():
    table = {"constant": "1640 bar", "slope": "2400 K"}
    assert cautions("henry", table, [5.0, 60]) == []
    assert "373.15 K" in cautions("henry", table, [25, 100.0])[0]
    assert cautions("henry", {**table, "at": "80 degC"}, [100.0]) == []
    assert cautions("henry", {**table, "valid": ["0 degC", "120 degC"]}, [100.0]) == []
    assert cautions("henry", {"constant": "1640 bar"}, [100.0]) == []


def test_critical_temperature_is_a_caution():
    table = {"vapour_pressure": wagner(*WAGNER["n-hexane"])}
    assert cautions("raoult", table, [234.0]) == []
    assert "critical" in cautions("raoult", table, [235.0])[0]
