"""The stage column from inside: the band of many cases, Newton's method on it, its response and its start."""

from fractions import Fraction

import numpy as np
import pytest

from leanloop.column import jacobian
from leanloop.column import newton as column
from leanloop.column.band import Band, bytes_a_case
from leanloop.column.equations import Stages, gas_change, gas_derivatives, phases, residual, rows
from leanloop.column.jacobian import Jacobian
from leanloop.column.law import Law
from leanloop.column.start import filling_start, split_fractions, start, tridiagonal
from leanloop.entries import Context
from leanloop.equilibrium import MODELS
from leanloop.status import OK, Status, code

EPS = np.finfo(float).eps


# --- the band


def random_blocks(seed, cases, stages, unknowns, first=1):
    """Derivatives of gas flows as a column has them: positive on the whole, of mixed size, some drag."""
    rng = np.random.default_rng(seed)
    parts = unknowns - first
    derivatives = rng.normal(size=(cases, stages, unknowns, parts))
    diagonal = np.arange(parts)
    derivatives[:, :, first + diagonal, diagonal] += 10 ** rng.uniform(-1, 1, (cases, stages, parts))
    return derivatives, rng.uniform(0, 0.5, cases) * (rng.random(cases) < 0.5)


def dense(derivatives, drag):
    """The same matrix case by case, from the words of the stage equations alone: (M, N n, N n)."""
    cases, stages, n, parts = derivatives.shape
    first = n - parts  # 1 where the gas total is an unknown, with the summation as its row
    out = np.zeros((cases, stages, n, stages, n))  # row stage, row, column stage, column
    for j in range(stages):
        if first:
            out[:, j, 0, j, :] += derivatives[:, j].sum(axis=-1)
            out[:, j, 0, j, 0] -= 1.0
        for c in range(parts):
            row = first + c
            out[:, j, row, j, :] -= derivatives[:, j, :, c]
            out[:, j, row, j, row] -= 1.0 + drag
            if j + 1 < stages:
                out[:, j, row, j + 1, :] += derivatives[:, j + 1, :, c]
            if j:
                out[:, j, row, j - 1, row] += 1.0
    return out.reshape(cases, stages * n, stages * n)


SIZES = [(seed, 1 + seed % 5, 1 + (5 * seed) % 9, 2 + (5 * seed + seed // 6) % 6) for seed in range(45)]


class TestBand:
    @pytest.mark.parametrize("first", [0, 1])
    @pytest.mark.parametrize(("seed", "cases", "stages", "n"), SIZES)
    def test_equals_dense_solves(self, seed, cases, stages, n, first):
        derivatives, drag = random_blocks(seed, cases, stages, n, first)
        band = Band(cases, stages, n, first)
        assert not band.factor(derivatives, drag).any()
        right = np.random.default_rng(1000 + seed).normal(size=(3, cases, stages, n))
        matrix = dense(derivatives, drag)
        wanted = np.linalg.solve(matrix, right.reshape(3, cases, -1, 1))[..., 0].reshape(right.shape)
        loss = np.linalg.cond(matrix).max()
        several, single = band.solve(right.copy()), band.solve(right[1].copy())
        assert np.abs(several - wanted).max() <= 20 * EPS * loss * np.abs(wanted).max()
        np.testing.assert_allclose(single, several[1], rtol=1e-13, atol=20 * EPS * loss * np.abs(wanted).max())

    def test_sizes_cover_what_they_should(self):
        for place, wanted in ((1, range(1, 6)), (2, range(1, 10)), (3, range(2, 8))):
            assert {size[place] for size in SIZES} == set(wanted)

    @staticmethod
    def spoil(derivatives, case, how):
        bad = derivatives.copy()
        if how == "nan":
            bad[case, 1, 0, 0] = np.nan
        elif how == "inf":
            bad[case, 0, 1, 0] = np.inf
        elif how == "singular":  # the first material row of stage 1 becomes all zeros
            bad[case, :2, :, 0], bad[case, 0, 1, 0] = 0.0, -1.0
        elif how == "overflow":  # each entry is finite, their sum is not
            bad[case, 1, 0, :] = 1.2e308
        return bad

    @pytest.mark.parametrize("where", [0, 2, 4])
    @pytest.mark.parametrize("how", ["nan", "inf", "singular", "overflow"])
    def test_a_spoilt_case_changes_no_other(self, how, where):
        cases, stages, n = 5, 6, 4
        derivatives, drag = random_blocks(7, cases, stages, n)
        drag[where] = 0.0
        right = np.random.default_rng(8).normal(size=(2, cases, stages, n))
        good = Band(cases, stages, n, 1)
        good.factor(derivatives, drag)
        wanted = good.solve(right.copy())
        band = Band(cases, stages, n, 1)
        with np.errstate(all="ignore"):  # as the solver calls it
            bad = band.factor(self.spoil(derivatives, where, how), drag)
            found = band.solve(right.copy())
        others = np.arange(cases) != where
        assert not bad[others].any()
        assert np.array_equal(band.singular, ~others)
        np.testing.assert_allclose(found[:, others], wanted[:, others], rtol=0, atol=1e-15 * np.abs(wanted).max())
        assert (found[:, where] == 0.0).all()

    def test_several_singular_cases_are_all_found(self):
        cases, stages, n = 6, 4, 3
        derivatives, drag = random_blocks(11, cases, stages, n)
        drag[:] = 0.0
        right = np.random.default_rng(12).normal(size=(cases, stages, n))
        band = Band(cases, stages, n, 1)
        band.factor(derivatives, drag)
        wanted = band.solve(right.copy())
        for case in (1, 2, 5):
            derivatives = self.spoil(derivatives, case, "singular")
            matrix = dense(derivatives, drag)[case]
            assert np.linalg.matrix_rank(matrix) < len(matrix)  # else this test tests nothing
        assert band.factor(derivatives, drag).tolist() == [False, True, True, False, False, True]
        found = band.solve(right.copy())
        keep = [0, 3, 4]
        np.testing.assert_allclose(found[keep], wanted[keep], rtol=0, atol=1e-15 * np.abs(wanted).max())

    @pytest.mark.parametrize("value", [np.nan, np.inf])
    def test_a_right_hand_side_that_is_not_finite_stays_alone(self, value):
        derivatives, drag = random_blocks(3, 4, 5, 3)
        band = Band(4, 5, 3, 1)
        band.factor(derivatives, drag)
        right = np.random.default_rng(4).normal(size=(4, 5, 3))
        wanted = band.solve(right.copy())
        right[2, 3, 1] = value
        found = band.solve(right.copy())
        np.testing.assert_array_equal(found[[0, 1, 3]], wanted[[0, 1, 3]])
        assert (found[2] == 0.0).all()

    def test_an_answer_that_overflows_stays_alone(self):
        derivatives, drag = random_blocks(5, 3, 4, 3)
        band = Band(3, 4, 3, 1)
        band.factor(derivatives, drag)
        right = np.random.default_rng(6).normal(size=(2, 3, 4, 3))
        wanted = band.solve(right.copy())
        right[:, 1] *= 0.99 * np.finfo(float).max / np.abs(right[:, 1]).max()
        assert np.isfinite(right).all()
        assert np.abs(wanted[:, 1]).max() > 2.0  # so that the answer is beyond the largest double
        with np.errstate(all="ignore"):
            found = band.solve(right.copy())
        np.testing.assert_allclose(found[:, [0, 2]], wanted[:, [0, 2]], rtol=0, atol=1e-15 * np.abs(wanted).max())
        assert (found[:, 1] == 0.0).all()
        assert band.singular.tolist() == [False, True, False]

    def test_all_cases_spoilt(self):
        derivatives, drag = random_blocks(9, 3, 2, 2)
        band = Band(3, 2, 2, 1)
        assert band.factor(np.full_like(derivatives, np.nan), drag).all()
        assert (band.solve(np.ones((3, 2, 2))) == 0.0).all()

    def test_the_memory_it_is_said_to_take(self):
        assert bytes_a_case(6, 4) == 8 * 6 * 4 * Band(1, 6, 4, 1)._store.shape[1] == Band(1, 6, 4, 1)._store.nbytes


class TestEliminated:
    """The layout without the gas totals, which few components in many cases are solved in."""

    CASES, STAGES = 14, 6

    def blocks(self, seed, parts):
        rng = np.random.default_rng(seed)
        derivatives, drag = random_blocks(seed, self.CASES, self.STAGES, parts + 1)
        # by the gas total: mole fractions, which leave something for what keeps the gas flowing
        derivatives[:, :, 0] = 0.95 * rng.dirichlet(np.ones(parts + 1), (self.CASES, self.STAGES))[..., :parts]
        return derivatives, drag, rng.normal(size=(2, self.CASES, self.STAGES, parts + 1))

    @pytest.mark.parametrize("seed", range(6))
    @pytest.mark.parametrize("parts", [1, 2, 3])
    def test_equals_dense_solves(self, parts, seed):
        derivatives, drag, right = self.blocks(seed, parts)
        made = Jacobian(derivatives, drag)
        assert made.keep is not None  # else this tests the other layout
        matrix = dense(derivatives, drag)
        wanted = np.linalg.solve(matrix, right.reshape(2, self.CASES, -1, 1))[..., 0].reshape(right.shape)
        assert not made.bad.any()
        bound = 50 * EPS * np.linalg.cond(matrix).max() / made.keep.min() * np.abs(wanted).max()
        assert np.abs(made.solve(right.copy()) - wanted).max() <= bound
        assert np.abs(made.solve(right[0].copy()) - wanted[0]).max() <= bound

    @pytest.mark.parametrize("parts", [1, 2, 3])
    @pytest.mark.parametrize("value", [np.nan, np.inf])
    def test_a_spoilt_case_changes_no_other(self, parts, value):
        derivatives, drag, right = self.blocks(3, parts)
        wanted = Jacobian(derivatives, drag).solve(right.copy())
        derivatives[5, 2, 1, 0] = value
        with np.errstate(all="ignore"):
            made = Jacobian(derivatives, drag)
            found = made.solve(right.copy())
        others = np.arange(self.CASES) != 5
        assert made.keep is not None
        assert np.array_equal(made.bad, ~others)
        np.testing.assert_allclose(found[:, others], wanted[:, others], rtol=0, atol=1e-15 * np.abs(wanted).max())
        assert (found[:, 5] == 0.0).all()

    @pytest.mark.parametrize("gas", [0.0, 1e-9])
    def test_a_failed_case_does_not_bring_it_upon_gas_that_distributes_throughout(self, gas):
        # nothing keeps the gas flowing, so eliminating divides by next to nothing; a case that is set apart must not hide it
        feeds = ends(12, [[0.0, 0.3]] * 8, [[1.0, 0.0]] * 8)
        right = np.random.default_rng(0).normal(size=(2, 8, 12, 3))
        found = []
        for spoilt in (False, True):
            feeds[3, 0, 0] = np.nan if spoilt else 0.0
            answer = column.solve(columns(constants([3.0, 1.5]), feeds, gas, 1.0))
            assert (answer.status == OK).tolist() == [True] * 3 + [not spoilt] + [True] * 4
            found.append((answer.unknowns, answer.respond(right.copy())))
        others = np.arange(8) != 3
        np.testing.assert_allclose(found[1][0][others], found[0][0][others], rtol=1e-12)
        wanted = found[0][1][:, others]
        np.testing.assert_allclose(found[1][1][:, others], wanted, rtol=0, atol=1e-9 * np.abs(wanted).max())

    def test_both_layouts_give_the_same_columns(self, monkeypatch):
        feeds = ends(9, [[0.01, 0.02, 0.2]] * 12, [[0.3, 0.1, 0.05]] * 12)
        stages = columns(constants([0.3, 1.4, 0.9]), feeds, np.linspace(0.5, 2, 12), 1.5)
        small = column.solve(stages)
        assert small.jacobian.keep is not None
        monkeypatch.setattr(jacobian, "MOST_ELIMINATED", -1)
        full = column.solve(stages)
        assert full.jacobian.keep is None
        np.testing.assert_allclose(small.unknowns, full.unknowns, rtol=1e-12)
        right = np.random.default_rng(2).normal(size=(3, 12, 9, 4))
        np.testing.assert_allclose(small.respond(right.copy()), full.respond(right.copy()), rtol=1e-9, atol=1e-12)


# --- a column from numbers


def models(written):
    """Models from tables as a file would hold them."""
    context = Context(plain_si=True)
    found = [MODELS.load(item["model"]).read({k: v for k, v in item.items() if k != "model"}, "", context) for item in written]
    assert not context.faults
    return found


def columns(written, feeds, gas, liquid, temperature=300.0, pressure=1e5, gas_basis=None, liquid_basis=None, numbers=None):
    """Stages of M columns: `feeds` (M, N, D); `gas`, `liquid` (M,) of components that stay in the phase."""
    feeds = np.asarray(feeds, dtype=float)
    cases, count, parts = feeds.shape
    own = models(written)
    law = Law(own, np.array(gas_basis or [False] * parts, dtype=bool), np.array(liquid_basis or [False] * parts, dtype=bool))
    numbers = [{**model.numbers, **((numbers or {}).get(place, {}))} for place, model in enumerate(own)]
    whole = lambda value: np.broadcast_to(np.asarray(value, dtype=float), (cases,))[:, None]  # noqa: E731
    bound = law.at(whole(temperature), whole(pressure), numbers)
    up, down = (np.broadcast_to(whole(value), (cases, count)).copy() for value in (gas, liquid))
    return Stages(feeds, up, down, up, down, bound)


def ends(count, top, bottom):
    """Feeds (M, N, D) from those of the top and the bottom stage, (M, D) each."""
    top, bottom = np.atleast_2d(np.asarray(top, dtype=float)), np.atleast_2d(np.asarray(bottom, dtype=float))
    feeds = np.zeros((len(top), count, top.shape[1]))
    feeds[:, 0] += top
    feeds[:, -1] += bottom
    return feeds


def constants(K, basis=None):
    basis = basis or ["fraction"] * len(K)
    return [{"model": "constant", "K": float(k), "basis": b} for k, b in zip(K, basis, strict=True)]


def gas_flows(K, ratio, unknowns, gas, liquid, gas_basis, liquid_basis):
    """v of one column with constant models, written down again: y = K x V/V, Y = K X with the bases spelt out."""
    V, down = unknowns[:, 0], unknowns[:, 1:]
    v = np.zeros_like(down)
    for j in range(len(V)):
        x = down[j] / (liquid + down[j].sum())
        X = down[j] / (liquid + down[j][liquid_basis].sum()) if ratio.any() else x
        v[j, ~ratio] = K[~ratio] * x[~ratio] * V[j]
        # the basis of the gas holds part of what is sought: G = fixed + sum of K X G over it
        fixed = gas + v[j][gas_basis & ~ratio].sum()
        G = fixed / (1.0 - (K * X)[gas_basis & ratio].sum())
        v[j, ratio] = K[ratio] * X[ratio] * G
    return v


def imbalance(stages, unknowns, v):
    """Largest balance error of each component over its own feed, and of the gas total over the gas: (M,), (M,)."""
    down, feeds = unknowns[..., 1:], stages.feeds
    left = feeds - down - v
    left[:, 1:] += down[:, :-1]
    left[:, :-1] += v[:, 1:]
    fed = feeds.sum(axis=1)[:, None, :]
    by_feed = np.abs(left) / np.where(fed > 0, fed, 1.0)
    V = unknowns[..., 0]
    summed = np.abs(stages.gas_inert + v.sum(axis=-1) - V) / np.maximum(V, 1e-300)
    return by_feed.max(axis=(1, 2)), summed.max(axis=1)


def random_problem(seed):
    """A batch of columns with random sizes, feeds from pure carrier to 60 % solute and K from 1e-3 to 1e3."""
    rng = np.random.default_rng(seed)
    cases, count, parts = rng.integers(1, [5, 26, 6])
    cases = 30 if seed % 4 == 0 else cases
    K = 10 ** rng.uniform(-3, 3, parts)
    top, bottom = (rng.dirichlet(np.ones(parts), cases) * 10 ** rng.uniform(-6, 0.2, (cases, 1)) for _ in range(2))
    top[rng.random(top.shape) < 0.3] = 0.0
    gas, liquid = 10 ** rng.uniform(-1, 1, cases), 10 ** rng.uniform(-1, 1, cases)
    return K, ends(count, top * liquid[:, None], bottom * gas[:, None]), gas, liquid


class TestSolve:
    @pytest.mark.parametrize("seed", range(60))
    def test_balances_close_on_every_stage(self, seed):
        K, feeds, gas, liquid = random_problem(seed)
        stages = columns(constants(K), feeds, gas, liquid)
        answer = column.solve(stages)
        assert (answer.status == OK).all()
        assert (answer.unknowns >= 0).all()
        none = np.zeros(len(K), dtype=bool)
        v = np.array([gas_flows(K, none, answer.unknowns[m], gas[m], liquid[m], none, none) for m in range(len(gas))])
        closed, summed = imbalance(stages, answer.unknowns, v)
        assert closed.max() <= 1e-12
        assert summed.max() <= 1e-12
        fed = feeds.sum(axis=1)
        leaving = v[:, 0] + answer.unknowns[:, -1, 1:]
        np.testing.assert_allclose(leaving, fed, rtol=1e-11, atol=0)

    @pytest.mark.parametrize("seed", range(24))
    def test_ratio_and_mixed_models_with_any_basis(self, seed):
        rng = np.random.default_rng(500 + seed)
        parts, count = int(rng.integers(1, 5)), int(rng.integers(1, 12))
        K = 10 ** rng.uniform(-1.5, 0.5, parts)
        ratio = rng.random(parts) < 0.6
        ratio[0] = True
        gas_basis, liquid_basis = (rng.random(parts) < 0.4 * (seed % 3 > 0) for _ in range(2))
        feeds = ends(count, 0.02 * rng.random(parts), 0.2 * rng.random(parts))
        stages = columns(constants(K, ["ratio" if r else "fraction" for r in ratio]), feeds, 1.0, 1.5,
                         gas_basis=gas_basis.tolist(), liquid_basis=liquid_basis.tolist())
        answer = column.solve(stages)
        assert answer.status.tolist() == [OK]
        assert (answer.unknowns > 0).all()
        v = gas_flows(K, ratio, answer.unknowns[0], 1.0, 1.5, gas_basis, liquid_basis)
        closed, summed = imbalance(stages, answer.unknowns, v[None])
        assert closed.max() <= 1e-12
        assert summed.max() <= 1e-12

    @pytest.mark.parametrize("K", [1e-6, 0.02, 0.7, 1.0, 1.3, 40.0, 1e6])
    @pytest.mark.parametrize("fed", [1e-9, 0.3, 5.0])
    def test_one_stage_of_one_solute_is_a_quadratic(self, K, fed):
        gas, liquid = 1.7, 0.9
        answer = column.solve(columns(constants([K]), ends(1, [[0.25 * fed]], [[0.75 * fed]]), gas, liquid))
        # v (L + l) = K l (G + v) with v = F - l
        a, b, c = K - 1.0, fed - liquid - K * (gas + fed), fed * liquid
        wanted = 2 * c / (-b + np.sqrt(b * b - 4 * a * c))
        assert answer.status.tolist() == [OK]
        np.testing.assert_allclose(answer.unknowns[0, 0, 1], wanted, rtol=1e-12)
        np.testing.assert_allclose(answer.unknowns[0, 0, 0], gas + fed - wanted, rtol=1e-12)

    @pytest.mark.parametrize("seed", range(8))
    def test_the_order_of_components_does_not_matter(self, seed):
        K, feeds, gas, liquid = random_problem(seed)
        order = np.random.default_rng(seed).permutation(len(K))
        one = column.solve(columns(constants(K), feeds, gas, liquid)).unknowns
        other = column.solve(columns(constants(K[order]), feeds[..., order], gas, liquid)).unknowns
        floor = 1e-13 * feeds.sum(axis=1)[:, None, :]
        assert (np.abs(other[..., 1:] - one[..., 1:][..., order]) <= 1e-11 * one[..., 1:][..., order] + floor[..., order]).all()

    @pytest.mark.parametrize("seed", range(8))
    def test_a_batch_gives_what_single_columns_give(self, seed):
        K, feeds, gas, liquid = random_problem(100 + seed)
        together = column.solve(columns(constants(K), feeds, gas, liquid)).unknowns
        for m in range(len(gas)):
            alone = column.solve(columns(constants(K), feeds[m : m + 1], gas[m], liquid[m])).unknowns[0]
            floor = np.append(0.0, 1e-13 * feeds[m].sum(axis=0))
            assert (np.abs(together[m] - alone) <= 1e-11 * alone + floor).all()

    def test_parts_per_billion_beside_nine_tenths(self):
        K = np.array([1e-6, 1e6, 0.8, 1.1])
        for top, bottom in (([1e-9, 1e-9, 9.0, 1e-9], [1e-9, 1e-9, 9.0, 1e-9]), ([0, 0, 1e-9, 9.0], [9.0, 1e-9, 0, 1e-9])):
            stages = columns(constants(K), ends(12, [top], [bottom]), 1.0, 1.0)
            answer = column.solve(stages)
            assert answer.status.tolist() == [OK]
            assert (answer.unknowns >= 0).all()
            none = np.zeros(4, dtype=bool)
            v = gas_flows(K, none, answer.unknowns[0], 1.0, 1.0, none, none)
            # its own feed is the measure for each, though it is 1e-10 of the flows around it
            closed, summed = imbalance(stages, answer.unknowns, v[None])
            assert closed.max() <= 1e-12
            assert summed.max() <= 1e-12

    def test_traces_at_constant_flows_follow_kremser_to_their_last_digits(self):
        K, count = np.array([1e-6, 0.05, 0.9, 1.0, 1.2, 1e3, 1e6]), 20
        gas, liquid, trace = 2.0, 2.0, 1e-30
        answer = column.solve(columns(constants(K), ends(count, [np.zeros(7)], [np.full(7, trace)]), gas, liquid))
        for place, k in enumerate(K):
            A = Fraction(liquid) / (Fraction(float(k)) * Fraction(gas))
            total = sum(A**power for power in range(count + 1))
            absorbed = 1 - 1 / total
            assert answer.unknowns[0, -1, 1 + place] == pytest.approx(float(trace * absorbed), rel=1e-11)
            x = answer.unknowns[0, 0, 1 + place] / liquid
            assert k * x * gas == pytest.approx(float(Fraction(trace) / total), rel=1e-11)

    def test_a_thousand_stages(self):
        K = np.array([0.4, 0.9, 1.0, 2.5])
        stages = columns(constants(K), ends(1000, [[0.001, 0, 0, 0.1]], [[0.2, 0.1, 0.05, 0.01]]), 1.0, 1.0)
        answer = column.solve(stages)
        assert answer.status.tolist() == [OK]
        assert (answer.unknowns >= 0).all()
        none = np.zeros(4, dtype=bool)
        closed, summed = imbalance(stages, answer.unknowns, gas_flows(K, none, answer.unknowns[0], 1, 1, none, none)[None])
        assert closed.max() <= 1e-12
        assert summed.max() <= 1e-12
        # end to end as well, where the errors of a thousand stages could add up
        v = gas_flows(K, none, answer.unknowns[0], 1, 1, none, none)
        np.testing.assert_allclose(v[0] + answer.unknowns[0, -1, 1:], stages.feeds[0].sum(axis=0), rtol=1e-10)

    def test_without_gas_a_subcooled_liquid_runs_through(self):
        stages = columns(constants([0.2, 0.7]), ends(5, [[0.3, 0.1]], [[0.0, 0.0]]), 0.0, 1.0)
        answer = column.solve(stages)
        assert answer.status.tolist() == [OK]
        assert (answer.unknowns[..., 0] == 0.0).all()
        np.testing.assert_allclose(answer.unknowns[0, :, 1:], [[0.3, 0.1]] * 5, rtol=1e-13)

    def test_a_case_without_gas_beside_one_with_gas(self):
        feeds = ends(4, [[0.3], [0.3]], [[0.0], [0.0]])
        both = column.solve(columns(constants([0.4]), feeds, [0.0, 2.0], [1.0, 1.0]))
        alone = column.solve(columns(constants([0.4]), feeds[1:], 2.0, 1.0))
        assert both.status.tolist() == [OK, OK]
        assert (both.unknowns[0, :, 0] == 0.0).all()
        np.testing.assert_allclose(both.unknowns[1], alone.unknowns[0], rtol=1e-13)

    @pytest.mark.parametrize("parts", [0, 2])
    def test_without_solutes_the_carriers_pass(self, parts):
        answer = column.solve(columns(constants([0.5] * parts), np.zeros((2, 3, parts)), [1.0, 2.0], [3.0, 4.0]))
        assert answer.status.tolist() == [OK, OK]
        np.testing.assert_array_equal(answer.unknowns[..., 0], [[1.0] * 3, [2.0] * 3])
        assert (answer.unknowns[..., 1:] == 0.0).all()

    def test_an_absent_component_stays_absent(self):
        feeds = ends(6, [[0.01, 0.0]], [[0.1, 0.0]])
        with_it = column.solve(columns(constants([0.3, 0.6]), feeds, 1.0, 1.0))
        without = column.solve(columns(constants([0.3]), feeds[..., :1], 1.0, 1.0))
        assert (with_it.unknowns[..., 2] == 0.0).all()
        np.testing.assert_allclose(with_it.unknowns[..., :2], without.unknowns, rtol=1e-13)

    @pytest.mark.parametrize(("spoil", "wanted"), [
        (lambda s: s.feeds.__setitem__((1, 0, 0), np.nan), Status.not_finite),
        (lambda s: s.feeds.__setitem__((1, 0, 0), -0.1), Status.not_finite),
        (lambda s: s.gas_inert.__setitem__((1, slice(None)), np.inf), Status.not_finite),
        (lambda s: s.liquid_inert.__setitem__((1, slice(None)), -1.0), Status.not_finite),
        (lambda s: (s.liquid_inert.__setitem__((1, slice(None)), 0.0), s.feeds.__setitem__((1, 0), 0.0)), Status.dry_stage),
    ], ids=["nan", "negative feed", "infinite gas", "negative solvent", "no solvent"])
    def test_a_bad_case_has_its_status_and_disturbs_no_other(self, spoil, wanted):
        feeds = ends(5, [[0.01, 0.02]] * 3, [[0.3, 0.1]] * 3)
        make = lambda: columns(constants([0.4, 1.5]), feeds.copy(), [1.0, 1.1, 1.2], [1.0, 1.0, 1.0])  # noqa: E731
        good = column.solve(make())
        stages = make()
        spoil(stages)
        answer = column.solve(stages)
        assert answer.status.tolist() == [OK, code(wanted), OK]
        np.testing.assert_allclose(answer.unknowns[[0, 2]], good.unknowns[[0, 2]], rtol=1e-13)
        assert np.isfinite(answer.unknowns[[0, 2]]).all()

    def test_chunks_of_the_band_give_the_same(self, monkeypatch):
        K, feeds, gas, liquid = np.array([0.3, 1.4]), ends(6, [[0.01, 0.02]] * 7, [[0.3, 0.1]] * 7), np.linspace(1, 2, 7), 1.5
        whole = column.solve(columns(constants(K), feeds, gas, liquid))
        monkeypatch.setattr(jacobian, "BYTES_A_CHUNK", 3 * bytes_a_case(6, 3))
        parts = column.solve(columns(constants(K), feeds, gas, liquid))
        assert [len(band.singular) for _, band in parts.jacobian.bands] == [3, 3, 1]
        np.testing.assert_allclose(parts.unknowns, whole.unknowns, rtol=1e-13)
        right = np.random.default_rng(1).normal(size=(2, 7, 6, 3))
        np.testing.assert_allclose(parts.respond(right.copy()), whole.respond(right.copy()), rtol=1e-11, atol=1e-13)

    def test_guesses_that_are_not_finite_are_started_afresh(self):
        stages = columns(constants([0.4]), ends(5, [[0.01]] * 2, [[0.3]] * 2), 1.0, 1.0)
        wanted = column.solve(stages)
        guess = wanted.unknowns.copy()
        guess[0] = np.nan
        kept = guess.copy()
        answer = column.solve(stages, guess)
        np.testing.assert_allclose(answer.unknowns, wanted.unknowns, rtol=1e-12)
        np.testing.assert_array_equal(guess, kept)  # and the guess is left as it was


# --- response


POLYNOMIAL = {"model": "polynomial", "K": [0.4, 0.004], "temperature": "degC", "pressure": 2e5}
CURVE = {"model": "raoult", "activity": {"a": -0.5, "b": 100.0},
         "vapour_pressure": {"form": "antoine", "A": 6.95, "B": 1345.0, "C": 219.5, "pressure": "mmHg", "temperature": "degC"}}
FRACTION, RATIO = {"model": "constant", "K": 0.6}, {"model": "constant", "K": 0.35, "basis": "ratio"}
SETS = {
    "fractions": ([FRACTION, POLYNOMIAL], [False, False], [False, False]),
    "ratios": ([RATIO, {**RATIO, "K": 1.2}], [False, False], [False, False]),
    "mixed": ([FRACTION, RATIO, CURVE], [False] * 3, [False] * 3),
    "mixed, solutes in the gas basis": ([FRACTION, RATIO, POLYNOMIAL], [True, True, False], [False] * 3),
    "mixed, solutes in both bases": ([RATIO, FRACTION, RATIO], [False, True, True], [True, True, False]),
}


class TestRespond:
    """Changes of the answer against re-solves, one datum moved at a time."""

    COUNT = 6

    def data(self, name):
        written, gas_basis, liquid_basis = SETS[name]
        parts = len(written)
        return dict(
            written=written, feeds=ends(self.COUNT, [np.linspace(0.01, 0.05, parts)], [np.linspace(0.3, 0.1, parts)]),
            gas=np.array([1.0]), liquid=np.array([1.4]), temperature=np.array([330.0]), pressure=np.array([1.5e5]),
            gas_basis=gas_basis, liquid_basis=liquid_basis, numbers={},
        )

    def exact(self, data, up=0.0, down=0.0, feeds=None, temperature=0.0, pressure=0.0, numbers=None):
        """The response at the answer itself."""
        stages = columns(**data)
        answer = column.solve(stages, column.solve(stages).unknowns)
        shape = (1, *stages.shape[:2])
        up, down = np.full(shape, float(up)), np.full(shape, float(down))
        feeds = np.zeros((1, *stages.shape)) if feeds is None else feeds
        along = [{} for _ in data["written"]]
        for place, keys in (numbers or {}).items():
            along[place] = {key: np.array([[1.0]]) for key in keys}
        shift = stages.law.shifted(
            answer.at.liquid, np.full((1, 1, 1), float(temperature)), np.full((1, 1, 1), float(pressure)), along
        )
        return answer.respond(rows(up, feeds, gas_change(stages, answer.at, 0.0, 0.0, down, down, up, shift)))[0, 0]

    def differences(self, data, move, size):
        """Richardson's difference of re-solves: exact to the fourth power of the step."""
        def at(step):
            return column.solve(columns(**move(data, step))).unknowns[0]

        slopes = [(at(h) - at(-h)) / (2 * h) for h in (2 * size, size)]
        return (4 * slopes[1] - slopes[0]) / 3

    @staticmethod
    def agree(found, wanted):
        np.testing.assert_allclose(found, wanted, rtol=2e-8, atol=2e-8 * np.abs(wanted).max())
        assert np.abs(wanted).max() > 0

    @pytest.mark.parametrize("name", SETS)
    @pytest.mark.parametrize("stage", [0, 2, 5])
    def test_to_a_feed(self, name, stage):
        data = self.data(name)
        feeds = np.zeros((1, *data["feeds"].shape))
        feeds[0, 0, stage, 1] = 1.0
        move = lambda data, h: {**data, "feeds": data["feeds"] + h * feeds[0]}  # noqa: E731
        if data["feeds"][0, stage, 1] == 0.0:  # a difference on both sides needs something to take away
            data["feeds"][0, stage, 1] = 0.02
        self.agree(self.exact(data, feeds=feeds), self.differences(data, move, 1e-3))

    @pytest.mark.parametrize("name", SETS)
    @pytest.mark.parametrize("which", ["gas", "liquid"])
    def test_to_a_flow_that_stays_in_its_phase(self, name, which):
        data = self.data(name)
        move = lambda data, h: {**data, which: data[which] + h}  # noqa: E731
        found = self.exact(data, up=which == "gas", down=which == "liquid")
        self.agree(found, self.differences(data, move, 2e-3))

    @pytest.mark.parametrize("name", ["fractions", "mixed", "mixed, solutes in the gas basis"])
    @pytest.mark.parametrize(("which", "size"), [("temperature", 0.2), ("pressure", 200.0)])
    def test_to_temperature_and_pressure(self, name, which, size):
        data = self.data(name)
        move = lambda data, h: {**data, which: data[which] + h}  # noqa: E731
        self.agree(self.exact(data, **{which: 1.0}), self.differences(data, move, size))

    @pytest.mark.parametrize("name", SETS)
    def test_to_the_numbers_of_the_models(self, name):
        data = self.data(name)
        for place, model in enumerate(models(data["written"])):
            for key, number in model.numbers.items():
                if isinstance(number, list):
                    continue
                value = float(number)

                def move(data, h, place=place, key=key, value=value):
                    return {**data, "numbers": {place: {key: np.array([value + h])}}}

                if np.abs(self.differences(data, move, 1e-3 * abs(value))).max() > 0:
                    here = {**data, "numbers": {place: {key: np.array([value])}}}
                    self.agree(self.exact(here, numbers={place: [key]}), self.differences(data, move, 1e-3 * abs(value)))

    def test_every_set_has_a_model_number_to_move(self):
        for written, *_ in SETS.values():
            assert any(not isinstance(n, list) for model in models(written) for n in model.numbers.values())

    def test_the_first_solve_is_already_close(self):
        # the factors of the last step stand one quadratic step before the answer
        data = self.data("mixed")
        stages = columns(**data)
        answer, again = column.solve(stages), column.solve(stages, column.solve(stages).unknowns)
        right = np.random.default_rng(3).normal(size=(2, *stages.shape[:2], 4))
        np.testing.assert_allclose(answer.respond(right.copy()), again.respond(right.copy()), rtol=1e-5, atol=1e-5)

    def test_the_band_is_the_derivative_of_the_residual(self):
        for name in SETS:
            stages = columns(**self.data(name))
            answer = column.solve(stages)
            state = answer.unknowns * np.linspace(0.9, 1.1, answer.unknowns.size).reshape(answer.unknowns.shape)
            derivatives = gas_derivatives(stages, phases(stages, state))
            matrix = dense(derivatives, np.zeros(1))[0]
            for place in range(state.size):
                step = np.zeros(state.size)
                step[place] = 1e-5 * state.ravel()[place]
                step = step.reshape(state.shape)
                high, low = (residual(stages, phases(stages, moved)) for moved in (state + step, state - step))
                slope = (high - low).ravel() / (2 * step.ravel()[place])
                np.testing.assert_allclose(matrix[:, place], slope, rtol=1e-7, atol=1e-7 * np.abs(slope).max())


# --- start


def exact_fraction(S, stages):
    """(S^(N+1) - S)/(S^(N+1) - 1) in rational numbers, as 1 - 1/(1 + S + ... + S^N)."""
    return 1 - 1 / sum(S**power for power in range(stages + 1))


NEAR_ONE = [1.0, 1.0 + EPS, 1.0 - EPS / 2, 1.0 + 1e-12, 1.0 - 1e-9, 1.0 + 1e-6, 0.999, 1.01]
OTHERS = [1e-15, 1e-6, 0.1, 0.7, 1.4, 20.0, 1e6, 1e15]


class TestStart:
    @pytest.mark.parametrize("S", NEAR_ONE + OTHERS)
    @pytest.mark.parametrize("stages", [1, 2, 7, 60])
    def test_split_fractions_are_the_exact_sums(self, S, stages):
        with np.errstate(all="ignore"):  # as the start calls it: 0/0 at one is replaced
            stripped, absorbed = (float(item[0]) for item in split_fractions(np.array([S]), stages))
        assert 0.0 <= stripped <= 1.0
        assert 0.0 <= absorbed <= 1.0
        # of one, so that the part lost counts as well
        assert abs(Fraction(stripped) - exact_fraction(Fraction(S), stages)) <= 4 * Fraction(EPS)
        assert abs(Fraction(absorbed) - exact_fraction(1 / Fraction(S), stages)) <= 4 * Fraction(EPS)

    def test_split_fractions_of_many_stages_and_shapes(self):
        factor = np.array([[0.5, 1.0, 2.0], [1e-15, 1e15, 1.0 + 1e-13]])
        with np.errstate(all="ignore"):
            stripped, absorbed = split_fractions(factor, 3000)
        assert stripped.shape == absorbed.shape == (2, 3)
        np.testing.assert_allclose(stripped, [[0.5, 1 - 1 / 3001, 1.0], [1e-15, 1.0, 1 - 1 / 3001]], rtol=0, atol=1e-12)
        np.testing.assert_allclose(absorbed, [[1.0, 1 - 1 / 3001, 0.5], [1.0, 1e-15, 1 - 1 / 3001]], rtol=0, atol=1e-12)

    @pytest.mark.parametrize("seed", range(20))
    def test_tridiagonal_equals_dense(self, seed):
        rng = np.random.default_rng(seed)
        cases, count, parts = (int(n) for n in rng.integers(1, [5, 12, 4]))
        ratio, feeds = 10 ** rng.uniform(-6, 6, (cases, count, parts)), rng.random((cases, count, parts))
        kept = ratio.copy(), feeds.copy()
        found = tridiagonal(ratio, feeds)
        np.testing.assert_array_equal(ratio, kept[0])
        np.testing.assert_array_equal(feeds, kept[1])
        assert (found >= 0).all()
        for m in range(cases):
            for c in range(parts):
                s = ratio[m, :, c]
                matrix = np.diag(1 + s) - np.diag(np.ones(count - 1), -1) - np.diag(s[1:], 1)
                # residual and not the difference: a matrix of factors from 1e-6 to 1e6 may be ill conditioned
                left = matrix @ found[m, :, c] - feeds[m, :, c]
                assert np.abs(left).max() <= 8 * EPS * (np.abs(matrix) @ found[m, :, c]).max()
                if np.linalg.cond(matrix) < 1e6:
                    np.testing.assert_allclose(found[m, :, c], np.linalg.solve(matrix, feeds[m, :, c]), rtol=1e-8)

    @pytest.mark.parametrize("value", [np.nan, np.inf])
    def test_tridiagonal_keeps_cases_apart(self, value):
        rng = np.random.default_rng(5)
        ratio, feeds = rng.random((3, 6, 2)), rng.random((3, 6, 2))
        wanted = tridiagonal(ratio, feeds)
        ratio[1, 2, 1] = value
        np.testing.assert_allclose(tridiagonal(ratio, feeds)[[0, 2]], wanted[[0, 2]], rtol=1e-14)

    @pytest.mark.parametrize("seed", range(12))
    def test_starts_are_positive_and_finite(self, seed):
        K, feeds, gas, liquid = random_problem(seed)
        stages = columns(constants(10 ** (2 * np.log10(K))), feeds, gas, liquid)  # K from 1e-6 to 1e6
        for found in (start(stages), filling_start(stages)):
            assert found.shape == (*feeds.shape[:2], len(K) + 1)
            assert np.isfinite(found).all()
            assert (found >= 0).all()

    def test_the_filling_start_is_nowhere_superheated(self):
        K, feeds, gas, liquid = np.array([1e3, 1e-3, 5.0]), ends(8, [[0.3, 0.2, 0.1]], [[2.0, 3.0, 1.0]]), 0.5, 0.7
        stages = columns(constants(K), feeds, gas, liquid)
        at = phases(stages, filling_start(stages))
        assert (at.coordinate.sum(axis=-1) < 1).all()
