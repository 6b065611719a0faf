"""Enthalpies from heat data: datum, derivatives, units, cases, and every fault at once."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from leanloop.components import Component, Components
from leanloop.enthalpy import read
from leanloop.entries import Context
from leanloop.quantities import DIMENSIONS, dimension_name, parse

WATER = {
    "gas_heat_capacity": "33.6 J/(mol K)",
    "liquid_heat_capacity": "75.3 J/(mol K)",
    "heat_of_vaporisation": {"value": "44.0 kJ/mol", "at": "25 degC"},
}
C1 = {
    "gas": {"polynomial": [1604.0, 9.357, 0.001782], "temperature": "degF", "unit": "Btu/lbmol"},
    "liquid": {"polynomial": [0.0, 14.17, -0.001782], "temperature": "degF", "unit": "Btu/lbmol"},
}
CURVED = {
    "gas_heat_capacity": {"polynomial": [7.7, 0.0004, 2e-6], "temperature": "degF", "unit": "Btu/(lbmol degF)"},
    "liquid_heat_capacity": {"polynomial": [4.2, -1e-3, 2e-5], "temperature": "degC", "unit": "kJ/(kg K)"},
    "heat_of_vaporisation": {"value": "2257 kJ/kg", "at": "100 degC"},
}
BTU_LBMOL = 1055.05585262 / 453.59237  # J/mol
COMPONENTS = Components([
    Component("carrier", stays_in="gas"), Component("solvent", stays_in="liquid"), Component("a", 0.018), Component("b"),
])  # fmt: skip
TEMPERATURES = np.array([210.0, 273.15, 298.15, 340.0, 373.15, 480.0])


def heat_of(raw, components=COMPONENTS, **context):
    context = Context(**context)
    heat = read(raw, components, context)
    assert [str(fault) for fault in context.faults] == []
    return heat


def one(table, name="a", **context):
    """The data of one component whose table is right."""
    return heat_of({name: table}, **context).items[COMPONENTS.index[name]]


def wrong(raw, components=COMPONENTS, **context):
    """Addresses and texts of the faults."""
    context = Context(**context)
    heat = read(raw, components, context)
    assert len(heat.items) == len(components)
    assert all(fault.problem and fault.remedy for fault in context.faults)
    return {fault.address: f"{fault.problem}; {fault.remedy}" for fault in context.faults}


class TestFormulas:
    def test_datum_of_water_by_hand(self):
        water = one(WATER)
        assert water.liquid(298.15, water.numbers) == 0.0
        assert water.liquid(373.15, water.numbers) == pytest.approx(75 * 75.3, rel=1e-13)
        assert water.gas(373.15, water.numbers) == pytest.approx(44000 + 75 * 33.6, rel=1e-13)

    def test_heat_given_elsewhere_than_at_the_datum(self):
        water = one({**WATER, "heat_of_vaporisation": {"value": "40.66 kJ/mol", "at": "100 degC"}})
        assert water.gas(373.15, water.numbers) == pytest.approx(75 * 75.3 + 40660, rel=1e-13)
        assert water.gas(383.15, water.numbers) == pytest.approx(75 * 75.3 + 40660 + 336, rel=1e-13)

    @pytest.mark.parametrize("table", [WATER, CURVED])
    def test_gas_less_liquid_is_the_heat_where_it_is_given(self, table):
        item = one(table)
        at = item.numbers["heat_of_vaporisation.at"]
        heat = 44000 if table is WATER else 2257e3 * 0.018
        assert item.gas(at, item.numbers) - item.liquid(at, item.numbers) == pytest.approx(heat, rel=1e-13)
        assert item.liquid(298.15, item.numbers) == 0.0

    def test_heat_as_a_text_alone_holds_at_25_degc(self):
        item = one({**WATER, "heat_of_vaporisation": "44.0 kJ/mol"})
        assert item.numbers == one(WATER).numbers
        assert one({**WATER, "heat_of_vaporisation": {"value": "44.0 kJ/mol"}}).numbers == item.numbers

    def test_enthalpies_of_the_worked_example_at_100_degf(self):
        item = one(C1)
        kelvin = (100 - 32) / 1.8 + 273.15
        gas, liquid = 1604 + 935.7 + 17.82, 1417 - 17.82  # Btu/lbmol, by hand
        assert item.gas(kelvin, item.numbers) == pytest.approx(gas * BTU_LBMOL, rel=1e-13)
        assert item.liquid(kelvin, item.numbers) == pytest.approx(liquid * BTU_LBMOL, rel=1e-13)
        slopes = (9.357 + 0.3564, 14.17 - 0.3564)  # Btu/(lbmol degF), by hand
        for phase, slope in zip(("gas", "liquid"), slopes, strict=True):
            assert item.capacity(phase, kelvin, item.numbers) == pytest.approx(1.8 * slope * BTU_LBMOL, rel=1e-13)

    def test_polynomial_capacity_in_fahrenheit_by_hand(self):
        item = one(CURVED)
        at = 212.0  # degF, up to 312 degF
        rise = 7.7 * 100 + 0.0002 * (312**2 - at**2) + 2e-6 / 3 * (312**3 - at**3)  # Btu/lbmol
        top, bottom = (item.gas((reading - 32) / 1.8 + 273.15, item.numbers) for reading in (312, 212))
        assert top - bottom == pytest.approx(rise * BTU_LBMOL, rel=1e-12)

    def test_capacity_per_mass_in_celsius_by_hand(self):
        item = one(CURVED)
        rise = 4.2 * 75 - 5e-4 * (100**2 - 25**2) + 2e-5 / 3 * (100**3 - 25**3)  # kJ/kg
        assert item.liquid(373.15, item.numbers) == pytest.approx(rise * 18, rel=1e-12)

    def test_constant_per_mass_equals_the_molar_one(self):
        molar, mass = one(WATER), one({**WATER, "liquid_heat_capacity": f"{75.3 / 18} kJ/(kg K)"})
        assert mass.numbers["liquid_heat_capacity"] == pytest.approx(75.3 / 0.018, rel=1e-14)
        np.testing.assert_allclose(
            mass.liquid(TEMPERATURES, mass.numbers), molar.liquid(TEMPERATURES, molar.numbers), rtol=1e-13
        )

    @pytest.mark.parametrize("scale", ["K", "degC", "degF", "degR"])
    def test_a_polynomial_of_one_term_is_the_constant_in_any_scale(self, scale):
        constant = one(WATER)
        item = one({**WATER, "liquid_heat_capacity": {"polynomial": [75.3], "temperature": scale, "unit": "J/(mol K)"}})
        for call in ("liquid", "gas"):
            np.testing.assert_allclose(
                getattr(item, call)(TEMPERATURES, item.numbers),
                getattr(constant, call)(TEMPERATURES, constant.numbers),
                rtol=1e-12, atol=1e-10,
            )  # fmt: skip

    def test_component_of_the_gas_without_heat_has_its_datum_in_the_gas(self):
        item = one({"gas_heat_capacity": "29.1 J/(mol K)"}, "carrier")
        assert (item.has_gas, item.has_liquid) == (True, False)
        assert item.gas(298.15, item.numbers) == 0.0
        assert item.gas(308.15, item.numbers) == pytest.approx(291, rel=1e-12)

    def test_dissolved_gas_takes_the_capacity_of_its_gas_and_says_so(self):
        item = one({"gas_heat_capacity": "37.1 J/(mol K)", "heat_of_vaporisation": {"value": "19.4 kJ/mol", "at": "40 degC"}})
        assert item.has_liquid
        assert item.liquid(308.15, item.numbers) == pytest.approx(371, rel=1e-12)
        gap = item.gas(TEMPERATURES, item.numbers) - item.liquid(TEMPERATURES, item.numbers)
        np.testing.assert_allclose(gap, 19400, rtol=1e-12)
        assert "dissolved state" in item.cautions(TEMPERATURES, "liquid")[0]
        assert item.cautions(TEMPERATURES, "gas") == []

    def test_liquid_enthalpy_with_gas_capacity_and_heat(self):
        item = one({"liquid": C1["liquid"], "gas_heat_capacity": "36 J/(mol K)", "heat_of_vaporisation": "9 kJ/mol"})
        liquid = item.liquid(298.15, item.numbers)
        assert liquid == pytest.approx((14.17 * 77 - 0.001782 * 77**2) * BTU_LBMOL, rel=1e-12)
        assert item.gas(308.15, item.numbers) == pytest.approx(liquid + 9000 + 360, rel=1e-12)

    def test_endothermic_absorption_is_taken(self):
        item = one({"gas_heat_capacity": "28.8 J/(mol K)", "heat_of_vaporisation": "-4 kJ/mol"})
        assert item.gas(298.15, item.numbers) == -4000


class TestDerivatives:
    @pytest.mark.parametrize("table", [WATER, C1, CURVED, {**CURVED, "valid": ["0 degC", "100 degC"]},
                                       {"gas_heat_capacity": "37 J/(mol K)", "heat_of_vaporisation": "19 kJ/mol"}])
    @pytest.mark.parametrize("phase", ["gas", "liquid"])
    def test_capacity_is_the_derivative_by_the_complex_step(self, table, phase):
        item = one(table)
        step = 1e-30
        slope = np.imag(getattr(item, phase)(TEMPERATURES + 1j * step, item.numbers)) / step
        expected = np.broadcast_to(item.capacity(phase, TEMPERATURES, item.numbers), slope.shape)
        np.testing.assert_allclose(slope, expected, rtol=1e-13)
        assert (slope > 0).all()

    def test_derivatives_with_respect_to_numbers(self):
        item = one(WATER)
        for key, expected in (("heat_of_vaporisation.value", 1.0), ("heat_of_vaporisation.at", 75.3 - 33.6),
                              ("gas_heat_capacity", 75.0), ("liquid_heat_capacity", 0.0)):
            moved = {**item.numbers, key: item.numbers[key] + 1e-30j}
            assert np.imag(item.gas(373.15, moved)) / 1e-30 == pytest.approx(expected, abs=1e-10)

    @settings(deadline=None, derandomize=True, database=None)
    @given(
        st.lists(st.floats(-1, 1), min_size=0, max_size=4),
        st.floats(200, 600),
        st.sampled_from(["K", "degC", "degF", "degR"]),
        st.booleans(),
    )
    def test_integral_of_any_capacity(self, shape, temperature, scale, ranged):
        """Gauss-Legendre quadrature of the capacity gives the enthalpy, inside a range and beyond it."""
        coefficients = [60.0, *(item * 5 / 1e3**power for power, item in enumerate(shape, 1))]
        capacity = {"polynomial": coefficients, "temperature": scale, "unit": "J/(mol K)"}
        item = one({"liquid_heat_capacity": {**capacity, **({"valid": ["250 K", "450 K"]} if ranged else {})}}, "solvent")
        nodes, weights = np.polynomial.legendre.leggauss(8)
        breaks = sorted({298.15, temperature, *(edge for edge in (250.0, 450.0) if min(298.15, temperature) < edge
                                                 < max(298.15, temperature))})
        total = 0.0
        for low, high in zip(breaks, breaks[1:], strict=False):
            places = 0.5 * (high + low) + 0.5 * (high - low) * nodes
            values = np.broadcast_to(item.capacity("liquid", places, item.numbers), places.shape)
            total += 0.5 * (high - low) * float(weights @ values)
        total = total if temperature > 298.15 else -total
        assert item.liquid(temperature, item.numbers) == pytest.approx(total, rel=1e-9, abs=1e-7)


class TestRange:
    TABLE = {**CURVED, "valid": ["0 degC", "100 degC"]}

    def test_beyond_the_range_the_capacity_keeps_its_last_value(self):
        item, free = one(self.TABLE), one(CURVED)
        inside = np.array([280.0, 330.0, 373.15])
        np.testing.assert_array_equal(item.capacity("liquid", inside, item.numbers), free.capacity("liquid", inside, free.numbers))
        last = free.capacity("liquid", 373.15, free.numbers)
        assert item.capacity("liquid", 900.0, item.numbers) == last
        step = item.liquid(910.0, item.numbers) - item.liquid(900.0, item.numbers)
        assert step == pytest.approx(10 * last, rel=1e-10)

    def test_enthalpies_go_straight_on(self):
        item = one({**C1, "valid": ["0 degF", "200 degF"]})
        edge, slope = (200 - 32) / 1.8 + 273.15, 1.8 * (14.17 - 2 * 0.001782 * 200) * BTU_LBMOL
        rise = item.liquid(edge + 50, item.numbers) - item.liquid(edge, item.numbers)
        assert rise == pytest.approx(50 * slope, rel=1e-11)

    def test_what_leaves_the_range_is_said_with_both(self):
        item = one(self.TABLE)
        assert item.cautions(np.array([[280.0, np.nan], [373.15, 273.15]]), "liquid") == []
        said = item.cautions(np.array([280.0, 400.0, np.nan, 420.5]), "liquid")
        assert said == [
            "the liquid heat capacity is used outside its stated range: at 400.00 to 420.50 K, against 273.15 to 373.15 K"
        ]
        assert item.cautions(np.array([np.nan]), "gas") == []

    def test_the_range_of_one_phase_stands_at_it(self):
        own = {**CURVED["gas_heat_capacity"], "valid": ["0 degC", "300 degC"]}
        item = one({**self.TABLE, "gas_heat_capacity": own})
        assert item.cautions(np.array([500.0]), "gas") == []
        assert len(item.cautions(np.array([500.0]), "liquid")) == 1

    def test_a_capacity_that_has_lost_its_sign_is_said(self):
        item = one({"liquid_heat_capacity": {"polynomial": [100.0, -0.2], "unit": "J/(mol K)"}}, "solvent")
        assert item.cautions(np.array([400.0]), "liquid") == []
        assert item.cautions(np.array([400.0, 600.0]), "liquid") == [
            "the liquid heat capacity is not positive at 600.00 K: left its range"
        ]
        item = one({"liquid": {"polynomial": [0.0, 100.0, -0.1], "unit": "J/mol"}}, "solvent")
        assert "falls with temperature at 600.00 K" in item.cautions(np.array([600.0]), "liquid")[0]


class TestAllComponents:
    RAW = {"a": WATER, "carrier": {"gas_heat_capacity": "29.1 J/(mol K)"}}

    def test_shapes_and_zeros_without_data(self):
        heat = heat_of(self.RAW)
        temperature = np.full((3, 2), 320.0)
        for call in (heat.gas, heat.liquid, heat.gas_capacity, heat.liquid_capacity):
            assert call(temperature).shape == (3, 2, 4)
            assert call(320.0).shape == (4,)
            assert call(temperature + 0j).dtype == complex
            assert (call(temperature)[..., [1, 3]] == 0).all()
        assert heat.liquid(320.0)[0] == 0.0

    def test_numbers_of_cases(self):
        heat = heat_of(self.RAW)
        values = np.array([40e3, 44e3, 46e3])
        temperature = np.array([300.0, 350.0, 400.0])
        found = heat.gas(temperature, {"heat.a.heat_of_vaporisation.value": values})
        for case in range(3):
            single = heat.gas(temperature[case], {"heat.a.heat_of_vaporisation.value": values[case]})
            np.testing.assert_array_equal(found[case], single)
        assert heat.gas(330.0, {"heat.a.heat_of_vaporisation.value": values}).shape == (3, 4)

    def test_one_bad_case_spoils_no_other(self):
        heat = heat_of(self.RAW)
        found = heat.gas(np.array([300.0, np.nan, 400.0]), {"heat.a.gas_heat_capacity": np.array([33.6, 33.6, np.nan])})
        assert np.isfinite(found[0]).all()
        assert np.isnan(found[1:, 2]).all()

    def test_addresses_are_those_of_the_file(self):
        heat = heat_of({**self.RAW, "solvent": {"liquid": C1["liquid"]}})
        assert heat.addresses() == {
            "heat.carrier.gas_heat_capacity": "heat_data.carrier.gas_heat_capacity",
            "heat.solvent.liquid.polynomial": "heat_data.solvent.liquid.polynomial",
            "heat.a.gas_heat_capacity": "heat_data.a.gas_heat_capacity",
            "heat.a.liquid_heat_capacity": "heat_data.a.liquid_heat_capacity",
            "heat.a.heat_of_vaporisation.value": "heat_data.a.heat_of_vaporisation.value",
            "heat.a.heat_of_vaporisation.at": "heat_data.a.heat_of_vaporisation.at",
        }

    def test_every_number_has_its_entry_and_dimension(self):
        item = one({**CURVED, "valid": ["0 degC", "100 degC"]})
        assert set(item.numbers) == set(item.values.sorts) == set(item.values.entries)
        assert item.values.sorts["heat_of_vaporisation.value"] == "specific energy"
        lists = {key for key, value in item.numbers.items() if isinstance(value, list)}
        assert lists == {"valid", "gas_heat_capacity.polynomial", "liquid_heat_capacity.polynomial"}
        assert all(item.values.entries[key].cases != (key in lists) for key in item.numbers)

    def test_lacking_names_what_is_present_without_data(self):
        heat = heat_of(self.RAW)
        everything = np.ones(4, dtype=bool)
        assert heat.lacking("gas", everything) == ["solvent", "b"]
        assert heat.lacking("liquid", everything) == ["carrier", "solvent", "b"]
        assert heat.lacking("liquid", np.array([False, True, True, False])) == ["solvent"]

    def test_nothing_at_all(self):
        heat = heat_of(None)
        assert heat.items == [None] * 4
        assert heat.built_in == [] and heat.addresses() == {}
        assert (heat.gas(np.array([300.0, 310.0])) == 0).all()


class TestBuiltIn:
    NAMES = Components([Component("H2O"), Component("Air", stays_in="gas"), Component("CO2"), Component("oil")])

    def test_a_component_without_an_entry_takes_it_by_name(self):
        heat = heat_of(None, self.NAMES)
        assert heat.built_in == ["H2O", "Air", "CO2"]
        assert heat.lacking("gas", np.ones(4, dtype=bool)) == ["oil"]
        assert heat.lacking("liquid", np.ones(4, dtype=bool)) == ["Air", "CO2", "oil"]  # CO2: its heat is the solvent's
        assert heat.liquid(298.15)[0] == 0.0
        assert heat.gas(298.15)[0] == pytest.approx(43980, rel=1e-12)
        assert heat.addresses()["heat.H2O.heat_of_vaporisation.value"] == "heat_data.H2O.heat_of_vaporisation.value"
        assert "Perry" in heat.items[0].sources["liquid_heat_capacity"]

    def test_an_entry_takes_nothing_unless_it_says_so(self):
        heat = heat_of({"H2O": {"liquid_heat_capacity": "75.3 J/(mol K)"}}, self.NAMES)
        assert heat.built_in == ["Air", "CO2"]
        assert not heat.items[0].has_gas

    def test_single_values_beside_built_in_ones(self):
        heat = heat_of({"CO2": {"data": "built-in", "heat_of_vaporisation": "19.4 kJ/mol"},
                        "H2O": {"data": "built-in", "gas_heat_capacity": "30 J/(mol K)"}}, self.NAMES)
        assert heat.built_in == ["H2O", "Air", "CO2"]
        assert heat.gas(298.15)[2] == 19400
        assert heat.gas_capacity(400.0)[0] == 30
        assert set(heat.items[0].sources) == {"liquid_heat_capacity", "heat_of_vaporisation"}
        assert set(heat.items[2].sources) == {"gas_heat_capacity"}

    def test_enthalpies_beside_built_in_values_replace_them(self):
        heat = heat_of({"H2O": {"data": "built-in", "gas": C1["gas"]}}, self.NAMES)
        assert set(heat.items[0].sources) == {"liquid_heat_capacity"}
        heat = heat_of({"H2O": {"data": "built-in", "liquid": C1["liquid"]}}, self.NAMES)
        assert set(heat.items[0].sources) == {"gas_heat_capacity", "heat_of_vaporisation"}

    def test_a_gas_that_dissolves_needs_its_heat_said(self):
        faults = wrong({"CO2": {"data": "built-in"}, "oil": {"data": "built-in"}}, self.NAMES)
        assert list(faults) == ["heat_data.CO2.heat_of_vaporisation", "heat_data.oil.data"]
        assert "no built-in data of 'oil'" in faults["heat_data.oil.data"]


FAULTS = [
    ({"c": WATER}, "heat_data.c", "unknown component 'c'; known: carrier, solvent, a, b"),
    ({"solvnt": WATER}, "heat_data.solvnt", "did you mean 'solvent'?"),
    ({"a": 5}, "heat_data.a", "is no table"),
    ({"a": {}}, "heat_data.a", "gives neither"),
    ({"a": {"valid": ["0 degC", "9 degC"]}}, "heat_data.a", "gives neither"),
    ({"a b": WATER}, 'heat_data."a b"', "is no name"),
    ({"a": {**WATER, "gas_heat_capacty": 1}}, "heat_data.a.gas_heat_capacty", "did you mean 'gas_heat_capacity'?"),
    ({"a": {**WATER, "liquid_heat_capacity": 75.3}}, "heat_data.a.liquid_heat_capacity", "has no unit"),
    ({"a": {**WATER, "liquid_heat_capacity": "75.3 J/mol"}}, "heat_data.a.liquid_heat_capacity", "is a molar energy; write"),
    ({"a": {**WATER, "liquid_heat_capacity": "0 J/(mol K)"}}, "heat_data.a.liquid_heat_capacity", "above 0"),
    ({"a": {**WATER, "liquid_heat_capacity": "-75 J/(mol K)"}}, "heat_data.a.liquid_heat_capacity", "out of range"),
    ({"a": {**WATER, "liquid_heat_capacity": [75.3]}}, "heat_data.a.liquid_heat_capacity", "is no molar heat capacity"),
    ({"a": {**WATER, "heat_of_vaporisation": 44000}}, "heat_data.a.heat_of_vaporisation.value", "has no unit"),
    ({"a": {**WATER, "heat_of_vaporisation": "44 J"}}, "heat_data.a.heat_of_vaporisation.value", "write molar energy such as"),
    ({"a": {**WATER, "heat_of_vaporisation": {"at": "25 degC"}}}, "heat_data.a.heat_of_vaporisation.value", "missing"),
    ({"a": {**WATER, "heat_of_vaporisation": {"value": "44 kJ/mol", "at": "-300 degC"}}},
     "heat_data.a.heat_of_vaporisation.at", "absolute zero"),
    ({"a": {**WATER, "data": "builtin"}}, "heat_data.a.data", "did you mean 'built-in'?"),
    ({"a": {**WATER, "data": "built-in"}}, "heat_data.a.data", "no built-in data of 'a'"),
    ({"a": {**WATER, "valid": ["100 degC", "0 degC"]}}, "heat_data.a.valid", "no lower and higher"),
    ({"a": {**WATER, "valid": ["100 degC"]}}, "heat_data.a.valid", "no lower and higher"),
    ({"a": {**WATER, "valid": ["0 degC", 100]}}, "heat_data.a.valid[1]", "has no unit"),
    ({"a": {**C1, "liquid_heat_capacity": "75 J/(mol K)"}}, "heat_data.a.liquid_heat_capacity", "beside liquid"),
    ({"a": {**C1, "gas_heat_capacity": "35 J/(mol K)"}}, "heat_data.a.gas_heat_capacity", "beside gas"),
    ({"a": {**C1, "heat_of_vaporisation": "9 kJ/mol"}}, "heat_data.a.heat_of_vaporisation", "beside gas"),
    ({"a": {"gas_heat_capacity": "35 J/(mol K)"}}, "heat_data.a.heat_of_vaporisation", "nothing that links"),
    ({"a": {"gas_heat_capacity": "35 J/(mol K)", "liquid": C1["liquid"]}}, "heat_data.a.heat_of_vaporisation", "nothing that"),
    ({"solvent": {"gas_heat_capacity": "35 J/(mol K)"}}, "heat_data.solvent.heat_of_vaporisation", "nothing that links"),
    ({"a": {"liquid_heat_capacity": "75 J/(mol K)", "heat_of_vaporisation": "44 kJ/mol"}},
     "heat_data.a.gas_heat_capacity", "needs the heat capacity of the gas"),
    ({"a": {**C1, "gas": "5 kJ/mol"}}, "heat_data.a.gas", "is no table"),
    ({"a": {**C1, "gas": {"polynomial": 5, "unit": "J/mol"}}}, "heat_data.a.gas.polynomial", "is no list of numbers"),
    ({"a": {**C1, "gas": {"polynomial": [1, "x"], "unit": "J/mol"}}}, "heat_data.a.gas.polynomial[1]", "does not start"),
    ({"a": {**C1, "gas": {"polynomial": [1.0, 2.0]}}}, "heat_data.a.gas.unit", "missing"),
    ({"a": {**C1, "gas": {"polynomial": [1.0, 2.0], "unit": "J/(mol K)"}}}, "heat_data.a.gas.unit",
     'is no unit of molar energy; write a unit such as "kJ/mol"'),
    ({"a": {**C1, "gas": {"polynomial": [1.0, 2.0], "unit": "furlong"}}}, "heat_data.a.gas.unit", "not understood"),
    ({"a": {**C1, "gas": {**C1["gas"], "temperature": "bar"}}}, "heat_data.a.gas.temperature", "bar"),
    ({"a": {**C1, "gas": {**C1["gas"], "valid": ["9 K", "8 K"]}}}, "heat_data.a.gas.valid", "no lower and higher"),
    ({"a": {**C1, "gas": {"polynomial": [5.0, -2.0], "unit": "J/mol"}}}, "heat_data.a.gas.polynomial", "does not rise"),
    ({"a": {**WATER, "gas_heat_capacity": {"polynomial": [0.0, 0.0], "unit": "J/(mol K)"}}},
     "heat_data.a.gas_heat_capacity.polynomial", "is not positive at 298.15 K"),
    ({"a": {**WATER, "gas_heat_capacity": {"polynomial": [50.0, -0.1], "unit": "J/(mol K)", "valid": ["300 K", "510 K"]}}},
     "heat_data.a.gas_heat_capacity.polynomial", "is not positive at 501.60 K"),
    ({"b": {**WATER, "liquid_heat_capacity": "4.18 kJ/(kg K)"}}, "heat_data.b.liquid_heat_capacity", "no molar mass"),
    ({"b": {**WATER, "heat_of_vaporisation": "2257 kJ/kg"}}, "heat_data.b.heat_of_vaporisation", "no molar mass"),
    ({"b": {**WATER, "liquid_heat_capacity": CURVED["liquid_heat_capacity"]}}, "heat_data.b.liquid_heat_capacity", "molar mass"),
]  # fmt: skip


class TestFaults:
    @pytest.mark.parametrize(("raw", "address", "part"), FAULTS, ids=lambda item: item if isinstance(item, str) else "")
    def test_each_is_one_fault_at_its_address(self, raw, address, part):
        faults = wrong(raw)
        assert list(faults) == [address]
        assert part in faults[address]

    def test_the_section_itself(self):
        assert wrong("water") == {"heat_data": "is no table; write [heat_data.NAME] with its entries"}

    def test_all_at_once_and_the_rest_is_read(self):
        context = Context()
        heat = read(
            {"c": WATER, "a": {**WATER, "liquid_heat_capacity": 75.3, "heat_of_vaporisation": {"value": "9 bar", "at": 5}},
             "b": WATER, "solvent": {"liquid": {"polynomial": "x"}}},
            COMPONENTS, context,
        )  # fmt: skip
        assert [fault.address for fault in context.faults] == [
            "heat_data.c",
            "heat_data.a.liquid_heat_capacity",
            "heat_data.a.heat_of_vaporisation.value",
            "heat_data.a.heat_of_vaporisation.at",
            "heat_data.solvent.liquid.polynomial",
            "heat_data.solvent.liquid.unit",
        ]
        assert [item is not None for item in heat.items] == [False, False, False, True]

    def test_nothing_is_said_of_the_phase_of_a_doubtful_component(self):
        assert wrong({"a": {"gas_heat_capacity": "35 J/(mol K)"}}, names={"doubtful": ["a"]}) == {}

    def test_plain_si_numbers_in_python(self):
        plain = {"gas_heat_capacity": 33.6, "liquid_heat_capacity": 75.3, "heat_of_vaporisation": 44e3, "valid": [280, 400]}
        item = one(plain, plain_si=True)
        assert {**item.numbers, "valid": None} == {**one(WATER).numbers, "valid": None}
        assert item.numbers["valid"] == [280, 400]

    @settings(deadline=None, derandomize=True, database=None)
    @given(st.recursive(
        st.none() | st.booleans() | st.floats() | st.text(max_size=9) | st.sampled_from(["75 J/(mol K)", "44 kJ/mol", "K"]),
        lambda inner: st.lists(inner, max_size=3) | st.dictionaries(
            st.sampled_from(["a", "b", "carrier", "gas", "liquid", "valid", "data", "polynomial", "unit", "temperature", "value",
                             "at", *WATER]), inner, max_size=4),
        max_leaves=12,
    ))  # fmt: skip
    def test_whatever_is_written_is_read_or_refused(self, raw):
        context = Context()
        heat = read(raw, COMPONENTS, context)
        assert heat.gas(np.array([300.0])).shape == (1, 4)
        assert all(fault.address.startswith("heat_data") and fault.remedy for fault in context.faults)


class TestUnits:
    @pytest.mark.parametrize(("text", "value", "sort"), [
        ("75.3 J/(mol K)", 75.3, "molar heat capacity"),
        ("1 cal/(mol degC)", 4.184, "molar heat capacity"),  # thermochemical
        ("1 kJ/(kmol K)", 1.0, "molar heat capacity"),
        ("1 Btu/(lbmol degF)", 1055.05585262 / 453.59237 * 1.8, "molar heat capacity"),
        ("44 kJ/mol", 44e3, "molar energy"),
        ("44 MJ/kmol", 44e3, "molar energy"),
        ("1 kcal/mol", 4184, "molar energy"),
        ("1 Btu/lbmol", BTU_LBMOL, "molar energy"),
        ("2257 kJ/kg", 2.257e6, "specific energy"),
        ("1 Btu/lb", 2326, "specific energy"),  # the definition of the international table Btu
        ("1 kcal/kg", 4184, "specific energy"),
        ("4.18 kJ/(kg K)", 4180, "specific heat capacity"),
        ("1 Btu/(lb degF)", 4186.8, "specific heat capacity"),
        ("1 cal/(g degC)", 4184, "specific heat capacity"),
    ])  # fmt: skip
    def test_published_factors(self, text, value, sort):
        quantity = parse(text)
        assert quantity.value == pytest.approx(value, rel=1e-13)
        assert quantity.dimension == DIMENSIONS[sort][0]
        assert dimension_name(quantity.dimension) == sort
