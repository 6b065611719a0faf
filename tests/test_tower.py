"""The rigorous stage equations by themselves: derivatives, band, stages without vapour, safeguarded paths."""

import numpy as np
import pytest

from leanloop.column import tower_newton, tower_start
from leanloop.column.law import Law
from leanloop.column.tower import BOIL_UP, HEAT, REFLUX, TEMPERATURE, Form, Tower, evaluate, residual
from leanloop.column.tower_jacobian import Sloped, TowerJacobian, blocks
from leanloop.entries import Context
from leanloop.equilibrium import MODELS
from leanloop.status import OK

LIQUID = np.array([75.0, 29.0, 80.0, 140.0, 300.0])
GAS = np.array([33.0, 29.0, 36.0, 90.0, 300.0])
HEATS = np.array([4.4e4, 0.0, 3e4, 2e4, 0.0])


def model(kind, **entries):
    context = Context(plain_si=True, names={"directory": ["."]})
    found = MODELS.load(kind).read(entries, "model", context)
    assert not context.faults
    return found


def in_liquid(temperature, numbers):
    warm = temperature[..., None] - 298.15
    return LIQUID * warm + 1e-3 * warm**2


def in_gas(temperature, numbers):
    return HEATS + GAS * (temperature[..., None] - 298.15)


def tower(draws, ratio, roles=(REFLUX, HEAT, TEMPERATURE, HEAT, HEAT, BOIL_UP), cases=2):
    """Six stages of everything: an insoluble gas (1), a heavy solvent (4), three components between."""
    rng = np.random.default_rng(5)
    boiling = {"form": "antoine", "A": 5.19, "B": 1730.0, "C": -39.7, "pressure": "bar", "temperature": "K"}
    models = [
        model("polynomial", K=[-2.0, 0.009]),
        model("constant", K=0.3, basis="ratio") if ratio else model("constant", K=0.4),
        model("raoult", vapour_pressure=boiling),
    ]
    places = np.array([0, 2, 3])
    gas_basis, liquid_basis = np.arange(5) == 1, np.arange(5) == 4
    murphree = np.array([True, False, True]) if draws else np.zeros(3, dtype=bool)
    form = Form(
        Law(models, gas_basis[places], liquid_basis[places]), places, np.array([1]), np.array([4]), gas_basis, liquid_basis,
        roles, murphree, bool(draws & 1), bool(draws & 2), in_liquid, in_gas,
    )  # fmt: skip
    stages = len(roles)
    fed, blown = np.zeros((cases, stages, 5)), np.zeros((cases, stages, 5))
    fed[:, 0] = [0.0, 0.0, 0.1, 0.0, 0.5]
    fed[:, 1], fed[:, 2], fed[:, 4] = [0.2, 0, 0.3, 5, 9], [0.1, 0.3, 0.2, 0.1, 0.4], [1.0, 12, 0.5, 0.3, 0.1]
    blown[:, 4] = fed[:, 4]
    spec = np.select([np.array(roles) == TEMPERATURE, np.isin(roles, (REFLUX, BOIL_UP))], [320.0, 0.5], 3e3) * np.ones((cases, 1))
    liquid_draw = np.where(np.arange(stages) == 2, 0.7, 0.0) * np.ones((cases, 1)) * (draws & 1)
    gas_draw = np.where(np.arange(stages) == 3, 1.3, 0.0) * np.ones((cases, 1)) * (draws >> 1 & 1)
    return Tower(
        form, [item.numbers for item in models], {}, fed, blown, rng.uniform(0, 1e5, (cases, stages)),
        np.full((cases, stages), 1.2e5), spec, liquid_draw, gas_draw, np.full((cases, stages, 3), 0.6),
    )  # fmt: skip


def somewhere(given):
    rng = np.random.default_rng(3)
    form = given.form
    unknowns = rng.uniform(0.5, 3.0, (*given.fed.shape[:2], form.unknowns))
    at = len(form.implicit)
    unknowns[..., at] = rng.uniform(15.0, 20.0, unknowns.shape[:2])
    unknowns[..., at + 1] = rng.uniform(300.0, 330.0, unknowns.shape[:2])
    return unknowns


def by_complex_step(given, unknowns):
    """Derivatives of all rows by all unknowns, (M, S, n, S, n) by [case, stage, unknown, stage of the row, row]."""
    cases, stages, n = unknowns.shape
    out = np.zeros((cases, stages, n, stages, n))
    for j in range(stages):
        for k in range(n):
            moved = unknowns.astype(complex)
            moved[:, j, k] += 1e-30j
            out[:, j, k] = residual(given, evaluate(given, moved)).imag / 1e-30
    return out


@pytest.mark.parametrize("blend", [None, 0.3], ids=["as it is", "blended"])
@pytest.mark.parametrize("ratio", [False, True], ids=["fractions", "ratios"])
@pytest.mark.parametrize("draws", [0, 1, 2, 3], ids=["none", "liquid", "gas", "both"])
class TestDerivatives:
    def build(self, draws, ratio, blend):
        given = tower(draws, ratio)
        if blend is not None:
            given.blend, given.wide = np.full(2, blend), np.array([True, False])
            given.held = np.full(given.fed.shape[:2], 7.0)
        return given, somewhere(given)

    def test_blocks(self, draws, ratio, blend):
        given, unknowns = self.build(draws, ratio, blend)
        found, wanted = blocks(given, Sloped(given, unknowns)), by_complex_step(given, unknowns)
        np.testing.assert_allclose(found.own, np.einsum("mskst->mskt", wanted), atol=2e-12)
        for j in range(1, unknowns.shape[1]):
            np.testing.assert_allclose(found.up[:, j], wanted[:, j, :, j - 1], atol=2e-12)

    def test_band_solves_them(self, draws, ratio, blend):
        given, unknowns = self.build(draws, ratio, blend)
        sloped = Sloped(given, unknowns)
        right = residual(given, sloped.at)
        band = TowerJacobian(given.form, blocks(given, sloped), np.zeros(2))
        size = unknowns[0].size
        matrix = by_complex_step(given, unknowns).transpose(0, 3, 4, 1, 2).reshape(2, size, size)
        wanted = np.linalg.solve(matrix, right.reshape(2, -1, 1)).reshape(right.shape)
        np.testing.assert_allclose(band.solve(right.copy()), wanted, rtol=1e-8, atol=1e-11)
        assert not band.bad.any()


def test_one_bad_case_spoils_itself_alone():
    given = tower(1, False)
    unknowns = somewhere(given)
    sloped = Sloped(given, unknowns)
    right = residual(given, sloped.at)
    alone = TowerJacobian(given.form, blocks(given, sloped), np.zeros(2)).solve(right.copy())
    spoilt = blocks(given, sloped)
    spoilt.own[0, 3] = np.nan
    band = TowerJacobian(given.form, spoilt, np.zeros(2))
    found = band.solve(right.copy())
    assert list(band.bad) == [True, False]
    np.testing.assert_allclose(found[1], alone[1], rtol=1e-11)
    assert not found[0].any()


class TestBoiling:
    """Water alone above a salt solution, two stages and a reboiler: no gas that stays one."""

    def solve(self, duty, warm):
        form = Form(
            Law([model("raoult", vapour_pressure={"form": "antoine", "A": 5.19621, "B": 1730.63, "C": -39.724, "pressure": "bar",
                                                  "temperature": "K"})], np.zeros(1, bool), np.zeros(1, bool)),
            np.array([0]), np.array([], dtype=int), np.array([1]), np.zeros(2, bool), np.zeros(2, bool), (HEAT,) * 3,
            np.zeros(1, bool), False, False,
            lambda t, _: np.array([75.3, 150.0]) * (t[..., None] - 298.15),
            lambda t, _: np.array([4.4e4, 0.0]) + np.array([33.6, 0.0]) * (t[..., None] - 298.15),
        )  # fmt: skip
        cases = len(duty)
        fed = np.zeros((cases, 3, 2))
        fed[:, 0] = [10.0, 0.5]
        heat = np.zeros((cases, 3))
        heat[:, 0] = (fed[:, 0] * np.array([75.3, 150.0])).sum(axis=1) * (warm - 298.15)
        spec = np.zeros((cases, 3))
        spec[:, -1] = duty
        nothing = np.zeros((cases, 3))
        given = Tower(form, [form.law.models[0].numbers], {}, fed, 0 * fed, heat, np.full((cases, 3), 1e5), spec, nothing,
                      nothing, np.ones((cases, 3, 1)))  # fmt: skip
        start = np.full((cases, 3), 360.0), np.full((cases, 3), 1.0), np.full((cases, 3), 10.0)
        boils = np.ones(3, dtype=bool)
        return given, tower_newton.solve(
            given,
            lambda own, rows, _: tower_start.start(own, *(item[rows] for item in start), boils),
            lambda own, rows, _: tower_start.filling(own, *(item[rows] for item in start)),
            boils=True,
        )

    def test_subcooled_stages_have_no_vapour(self):
        # in the first case the duty only warms the liquid, and nothing boils anywhere
        given, answer = self.solve(np.array([3e4, 4e5]), 300.0)
        assert (answer.status == OK).all()
        gas, warmth = answer.unknowns[..., 0], answer.unknowns[..., 1]
        assert not gas[0].any() and (gas[1] > 0.0).all()
        state = evaluate(given, answer.unknowns)
        excess = state.wanted.sum(axis=-1)
        assert (excess <= 1 + 1e-9).all()
        np.testing.assert_allclose(gas * (1 - excess), 0.0, atol=1e-8)
        # the heat balance over all: feed and duty against what leaves
        cp = np.array([75.3, 150.0])
        liquid = np.stack([state.liquid[:, -1, 0], state.liquid[:, -1, 1]], axis=1)
        left = (liquid * cp).sum(axis=1) * (warmth[:, -1] - 298.15) + gas[:, 0] * (4.4e4 + 33.6 * (warmth[:, 0] - 298.15))
        np.testing.assert_allclose(left, given.fed_heat[:, 0] + given.spec[:, -1], rtol=1e-9)

    def test_more_heat_than_water_is_no_answer(self):
        _, answer = self.solve(np.array([2e5, 5e8]), 350.0)
        assert answer.status[0] == OK and answer.status[1] != OK
