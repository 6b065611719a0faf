"""Recycle methods and the driver that runs them, on problems whose fixed points are known exactly.

The methods are taken from the registry, so a further one is tested by being listed there.
"""

import json
from pathlib import Path

import numpy as np
import pytest
import scenes
import test_reference_loops as loops

from leanloop.errors import InputError
from leanloop.recycle import METHODS
from leanloop.recycle.anderson import Anderson, fitted
from leanloop.recycle.base import RecycleMethod, Trial
from leanloop.recycle.broyden import Broyden
from leanloop.recycle.dominant_eigenvalue import DominantEigenvalue
from leanloop.recycle.driver import ROUNDING, Pass, close
from leanloop.recycle.newton import Newton
from leanloop.recycle.substitution import Substitution
from leanloop.recycle.wegstein import Wegstein

DEFAULT = {name: METHODS.load(name)() for name in METHODS}
EVERY = pytest.mark.parametrize("method", DEFAULT.values(), ids=list(DEFAULT))
LOOPS = json.loads((Path(__file__).parent / "data" / "loops.json").read_text(encoding="utf-8"))
UNBOUNDED = {"q_least": -1e12, "q_most": 1e12}
OTHERWISE = {
    "wegstein unbounded": Wegstein(**UNBOUNDED),
    "anderson depth 1": Anderson(depth=1),
    "dominant_eigenvalue early": DominantEigenvalue(direct_steps=2),
}
LOW = -1e6


class Problem:
    """x = A x + b for M cases: a pass, and what was asked of it."""

    def __init__(self, matrix, vector, scale=1.0):
        self.vector = np.atleast_2d(np.asarray(vector, dtype=float))
        count = self.vector.shape[1]
        self.matrix = np.broadcast_to(np.asarray(matrix, dtype=float).reshape(-1, count, count),
                                      (len(self.vector), count, count))
        self.scale = np.broadcast_to(np.asarray(scale, dtype=float), self.vector.shape)
        self.calls, self.ends = [], []
        self.x = np.full(self.vector.shape, np.nan)

    def solution(self):
        return np.linalg.solve(np.eye(self.vector.shape[1]) - self.matrix, self.vector[..., None])[..., 0]

    def g(self, cases, x):
        with np.errstate(over="ignore", invalid="ignore"):
            return (self.matrix[cases] * x[:, None, :]).sum(axis=2) + self.vector[cases]

    def evaluate(self, cases, x):
        self.calls.append((cases.copy(), x.copy()))
        g = self.g(cases, x)
        return Pass(g, self.matrix[cases], self.scale[cases], np.isfinite(g).all(axis=1))

    def settle(self, cases, rows, x, now):
        self.ends += cases.tolist()
        assert np.array_equal(self.calls[-1][0][rows], cases)
        assert np.array_equal(self.calls[-1][1][rows], x)
        assert len(now.g) == len(self.calls[-1][0])
        self.x[cases] = x

    def solve(self, method, start=None, tolerance=1e-10, limit=None, low=LOW, high=np.inf):
        shape = self.vector.shape
        start = np.zeros(shape) if start is None else np.array(np.broadcast_to(start, shape), dtype=float)
        return close(self.evaluate, self.settle, start, np.full(shape[1], low), np.full(shape, high), method, tolerance,
                     method.most_passes if limit is None else limit)

    def promised(self, tolerance):
        """Bound of |x - solution| where every residual is within tolerance of its scale, by |inverse(I - A)|."""
        inverse = np.abs(np.linalg.inv(np.eye(self.vector.shape[1]) - self.matrix))
        allowed = tolerance * self.scale + ROUNDING * np.abs(self.x)
        return (inverse * allowed[:, None, :]).sum(axis=2) * 1.01


def contraction(count=7, unknowns=3, radius=0.8, seed=0):
    """Random dense cases of spectral radius from 0.1 to `radius`."""
    random = np.random.default_rng(seed)
    matrix = random.standard_normal((count, unknowns, unknowns))
    wanted = np.linspace(0.1, radius, count)
    matrix *= (wanted / np.abs(np.linalg.eigvals(matrix)).max(axis=1))[:, None, None]
    return Problem(matrix, random.uniform(1, 2, (count, unknowns)))


def turning(radius, degrees):
    angle = np.radians(degrees)
    return radius * np.array([[np.cos(angle), -np.sin(angle)], [np.sin(angle), np.cos(angle)]])


LINEAR2 = ([[0.7, 0.2], [0.3, 0.6]], [1.0, 2.0])  # eigenvalues 0.9 and 0.4
PROBLEMS = {
    "purge 0.01": ([[0.99]], [0.99], 1.0),
    "purge 1e-4": ([[0.9999]], [0.9999], 1.0),
    "slope -0.9": ([[-0.9]], [1.0], 1.0),
    "slope -1.5": ([[-1.5]], [1.0], 1.0),
    "two by two": (*LINEAR2, 1.0),
    "oscillating": (turning(0.8, 60), [1.0, 2.0], 1.0),
    # solute and impurity of loop N10 near its solution: 0.36 and 20 kmol/h, fed 15 and 0.002
    "solute and impurity": ([[0.0089690712759402, 0.015585558513067], [0.0, 0.9999]], [0.0420432, 0.0019998], [15.0, 0.002]),
    "absent component": ([[0.5, 0.0], [0.0, 0.0]], [1.0, 0.0], [1.0, 0.0]),
}


# --- the driver


def test_contraction_is_solved():
    problem = contraction()
    outcome = problem.solve(Substitution())
    assert outcome.converged.all()
    assert not outcome.failed.any()
    np.testing.assert_allclose(problem.x, problem.solution(), rtol=1e-9)


@EVERY
def test_start_at_the_solution_takes_one_pass(method):
    problem = Problem([[[0.5, 0.25], [0.0, 0.75]]] * 2, [[1.0, 1.0], [2.0, 0.5]])
    outcome = problem.solve(method, start=[[4.0, 4.0], [5.0, 2.0]])
    assert outcome.converged.all()
    assert outcome.passes.tolist() == [1, 1]
    assert outcome.error.tolist() == [0.0, 0.0]
    assert len(problem.calls) == 1


@EVERY
def test_passes_are_counted_truly(method):
    problem = contraction()
    outcome = problem.solve(method)
    counted = np.bincount(np.concatenate([cases for cases, _ in problem.calls]), minlength=len(problem.x))
    assert outcome.passes.tolist() == counted.tolist()
    assert len(outcome.history) == len(problem.calls) == counted.max()
    assert sorted(problem.ends) == list(range(len(problem.x)))


@EVERY
def test_last_iterate_is_tested_before_giving_up(method):
    problem = Problem(*LINEAR2)
    needed = int(problem.solve(method).passes[0])
    assert needed > 1
    at_limit = problem.solve(method, limit=needed)
    assert at_limit.converged[0]
    assert at_limit.passes[0] == needed
    short = problem.solve(method, limit=needed - 1)
    assert not short.converged[0]
    assert not short.failed[0]
    assert short.passes[0] == needed - 1
    assert short.error[0] > 1e-10


class Spoilt(Problem):
    """One case gives NaN, or the word of a unit that it has failed, from the second pass on."""

    case, how = 2, "nan"

    def evaluate(self, cases, x):
        now = super().evaluate(cases, x)
        if len(self.calls) > 1:
            row = np.flatnonzero(cases == self.case)
            if self.how == "nan":
                now.g[row, 0] = np.nan
            else:
                now.good[row] = False
        return now


@EVERY
@pytest.mark.parametrize("how", ["nan", "unit"])
def test_a_failed_case_is_alone(method, how):
    sound = contraction()
    spoilt = Spoilt(sound.matrix, sound.vector)
    spoilt.how = how
    expected, outcome = sound.solve(method), spoilt.solve(method)
    assert outcome.failed.tolist() == [case == 2 for case in range(7)]
    assert outcome.passes[2] == 2
    assert not outcome.converged[2]
    others = np.arange(7) != 2
    assert expected.converged[others].all()
    for name in ("converged", "passes", "error"):
        assert np.array_equal(getattr(outcome, name)[others], getattr(expected, name)[others])
    assert np.array_equal(spoilt.x[others], sound.x[others])


@EVERY
def test_cases_leave_when_done(method):
    problem = contraction()
    outcome = problem.solve(method)
    for number, (cases, _) in enumerate(problem.calls, start=1):
        assert cases.tolist() == np.flatnonzero(outcome.passes >= number).tolist()
    history = np.array(outcome.history)
    numbers = np.arange(1, len(history) + 1)[:, None]
    assert np.array_equal(np.isnan(history), numbers > outcome.passes)
    assert np.array_equal(history[outcome.passes - 1, np.arange(7)], outcome.error)
    assert (history[outcome.passes - 1, np.arange(7)] <= 1e-10).all()


def test_history_is_the_scaled_residual():
    problem = Problem([[0.5, 0.0], [0.0, 0.5]], [1.0, 1.0], scale=[10.0, 0.1])
    outcome = problem.solve(Substitution(), limit=3)
    # residuals 1, 1/2, 1/4 against the lesser scale; the rounding of x adds at most 1e-3 to that
    np.testing.assert_allclose([error[0] for error in outcome.history], [10.0, 5.0, 2.5], rtol=1e-3)


def test_upper_bounds_are_kept():
    problem = Problem([[0.5]], [1.0])
    outcome = problem.solve(Substitution(), high=1.25, limit=30)
    assert max(x.max() for _, x in problem.calls) == 1.25
    assert not outcome.converged[0]


def test_small_components_are_not_hidden_by_large_ones():
    # 1e-9 of a flow of 1e6 is open in the second component: nothing of the whole, all of its feed.
    problem = Problem([[0.5, 0.0], [0.0, 1 - 1e-4]], [1e6, 1e-4], scale=[1e6, 1e-4])
    outcome = problem.solve(Substitution(), limit=500)
    assert not outcome.converged[0]
    outcome = problem.solve(Anderson())
    assert outcome.converged[0]
    np.testing.assert_allclose(problem.x, [[2e6, 1.0]], rtol=1e-9)


# --- every method


@pytest.mark.parametrize("method", (DEFAULT | OTHERWISE).values(), ids=list(DEFAULT | OTHERWISE))
@pytest.mark.parametrize("name", PROBLEMS)
@pytest.mark.parametrize("tolerance", [1e-6, 1e-10])
def test_what_is_called_converged_is(method, name, tolerance):
    problem = Problem(*PROBLEMS[name])
    outcome = problem.solve(method, tolerance=tolerance)
    if outcome.converged[0]:
        assert (np.abs(problem.x - problem.solution()) <= problem.promised(tolerance)).all()
    else:
        assert outcome.failed[0] or outcome.passes[0] == method.most_passes
        with np.errstate(over="ignore"):
            lead = np.abs(problem.g([0], problem.x) - problem.x)
        assert (lead > tolerance * problem.scale).any()


@EVERY
def test_easy_problems_are_solved(method):
    for name in ("slope -0.9", "two by two", "absent component"):
        assert Problem(*PROBLEMS[name]).solve(method).converged[0]
    assert contraction().solve(method).converged[:4].all()


@pytest.mark.parametrize("method", [Newton(), Anderson(), Broyden()], ids=lambda method: method.name)
@pytest.mark.parametrize("name", PROBLEMS)
def test_methods_that_solve_everything_linear(method, name):
    outcome = Problem(*PROBLEMS[name]).solve(method)
    assert outcome.converged[0]
    assert outcome.passes[0] <= 5


@pytest.mark.parametrize("method", [Substitution(), Wegstein()], ids=lambda method: method.name)
def test_divergence_is_said(method):
    # Below -1 the bounded q is 0: both methods grow the error 1.5 times a pass.
    problem = Problem([[[-1.5]], [[0.5]]], [[1.0], [1.0]])
    outcome = problem.solve(method, limit=100)
    assert outcome.converged.tolist() == [False, True]
    assert outcome.error[0] > outcome.history[0][0]
    errors = np.array([x[0, 0] for _, x in problem.calls]) - 0.4
    assert len(errors) == 100
    np.testing.assert_allclose(errors[1:] / errors[:-1], -1.5, rtol=1e-9)
    assert problem.x[1, 0] == pytest.approx(2.0, rel=1e-9)


@EVERY
def test_runaway_case_leaves_the_others_alone(method):
    # to overflow and beyond: slopes of 1e3 in both directions
    both = Problem([[[1e3]], [[-1e3]], [[0.5]]], [[1.0], [1.0], [1.0]])
    outcome = both.solve(method)
    alone = Problem([[0.5]], [1.0])
    assert outcome.converged[2]
    assert outcome.passes[2] == alone.solve(method).passes[0]
    assert both.x[2, 0] == alone.x[0, 0]


@EVERY
def test_batch_is_one_by_one(method):
    batch = contraction(unknowns=4, radius=0.9, seed=3)
    outcome = batch.solve(method)
    for case in range(7):
        single = Problem(batch.matrix[case], batch.vector[case])
        alone = single.solve(method)
        assert alone.passes[0] == outcome.passes[case]
        np.testing.assert_allclose(single.x[0], batch.x[case], rtol=1e-14)


@EVERY
def test_instance_can_be_used_again(method):
    first, other, second = contraction(), contraction(count=3, unknowns=5, seed=1), contraction()
    before = dict(vars(method))
    one = first.solve(method)
    other.solve(method)
    two = second.solve(method)
    assert np.array_equal(first.x, second.x)
    assert np.array_equal(one.history, two.history, equal_nan=True)
    assert vars(method) == before


class Clipped(Problem):
    """g = max(A x + b, 0): a component dies out, and straight lines lead below zero."""

    def evaluate(self, cases, x):
        now = super().evaluate(cases, x)
        dead = now.g <= 0
        now.g[dead] = 0.0
        return Pass(now.g, np.where(dead[..., None], 0.0, now.jacobian), now.scale, now.good)


@EVERY
def test_lower_bounds_are_kept(method):
    problem = Clipped([[0.8, 0.0], [0.1, 0.8]], [-0.3, 0.3])
    outcome = problem.solve(method, start=[2.0, 2.0], low=0.0)
    assert min(x.min() for _, x in problem.calls) >= 0.0
    assert outcome.converged[0]
    np.testing.assert_allclose(problem.x[0], [0.0, 1.5], atol=1e-9)


def passes_of(method, triples):
    """Feed a method x, g and the lower bound, and give what it proposed last."""
    state = method.begin(np.atleast_2d(triples[0][0]))
    for x, g, low in triples:
        x, g = np.atleast_2d(x).astype(float), np.atleast_2d(g).astype(float)
        trial = Trial(x, g, None, np.abs(g - x).max(axis=1), np.ones(x.shape), np.full(x.shape[1], low))
        new, state = method.propose(trial, state)
    return new[0]


def test_wegstein_and_anderson_replace_components_and_broyden_the_case():
    # 0.8 x - 0.3 leads to -1.5, 0.8 x + 0.3 to 1.5.
    outputs = [[0.1, 0.7], [-0.22, 0.86]]
    first, second = ([0.5, 0.5], outputs[0], 0.0), (outputs[0], outputs[1], 0.0)
    near = pytest.approx
    assert passes_of(Wegstein(), [first, second]).tolist() == near([-0.22, 1.5])
    assert passes_of(Wegstein(), [(*first[:2], -9.0), (*second[:2], -9.0)]).tolist() == near([-1.5, 1.5])
    assert passes_of(Anderson(), [(*first[:2], -9.0), (*second[:2], -9.0)])[0] < 0.0
    assert passes_of(Anderson(), [first, second])[0] == near(-0.22)
    assert passes_of(Anderson(), [first, second])[1] > 0.86
    assert passes_of(Broyden(), [first, second]).tolist() == near(outputs[1])


# --- hand iterates: exact, by rationals; x0 = 0 throughout


def test_wegstein_by_hand():
    # g = 0.99 (1 + x): x1 = 0.99, s = 0.99, q = -99.
    steps = [(0.0, 0.99, -np.inf), (0.99, 0.99 * 1.99, -np.inf)]
    assert passes_of(Wegstein(), steps[:1])[0] == 0.99
    assert passes_of(Wegstein(**UNBOUNDED), steps)[0] == pytest.approx(99.0, rel=1e-12)
    assert passes_of(Wegstein(), steps)[0] == pytest.approx(6.8706, rel=1e-12)  # q = -5


def test_dominant_eigenvalue_by_hand():
    # x1 (1, 2), x2 (2.1, 3.5), x3 (3.17, 4.73); r = |x3 - x2| / |x2 - x1| = 0.8764418343605815.
    steps = [([0.0, 0.0], [1.0, 2.0], LOW), ([1.0, 2.0], [2.1, 3.5], LOW), ([2.1, 3.5], [3.17, 4.73], LOW)]
    method = DominantEigenvalue(direct_steps=2)
    assert passes_of(method, steps[:2]).tolist() == [2.1, 3.5]
    assert passes_of(method, steps).tolist() == pytest.approx([10.75988900420063, 13.454825677725957], rel=1e-13)


@pytest.mark.parametrize("method", [Newton(), Anderson(), Broyden()], ids=lambda method: method.name)
def test_linear_two_by_two_is_exact(method):
    problem = Problem(*LINEAR2)
    assert problem.solve(method, tolerance=1e-12).converged[0]
    assert problem.x[0].tolist() == pytest.approx([40 / 3, 15.0], rel=1e-11)


# --- theorems


@pytest.mark.parametrize("unknowns", range(1, 7))
def test_newton_takes_two_passes_where_all_is_linear(unknowns):
    problem = contraction(unknowns=unknowns, radius=3.0, seed=unknowns)
    outcome = problem.solve(Newton())
    assert outcome.converged.all()
    assert outcome.passes.max() <= 2


@pytest.mark.parametrize("unknowns", range(1, 6))
def test_anderson_ends_after_n_plus_two_passes(unknowns):
    # Equal to GMRES on a linear problem while it does not stagnate: Walker and Ni, SIAM Journal on
    # Numerical Analysis 49 (2011) 1715-1735.
    problem = contraction(count=40, unknowns=unknowns, radius=0.95, seed=unknowns)
    outcome = problem.solve(Anderson(depth=unknowns))
    assert outcome.converged.all()
    assert outcome.passes.max() <= unknowns + 2


@pytest.mark.parametrize("unknowns", range(1, 6))
def test_broyden_ends_after_two_n_plus_one_passes(unknowns):
    problem = contraction(count=40, unknowns=unknowns, radius=0.95, seed=unknowns)
    outcome = problem.solve(Broyden())
    assert outcome.converged.all()
    assert outcome.passes.max() <= 2 * unknowns + 1


@pytest.mark.parametrize("slope", [0.5, 0.99, 0.9999, -0.9, -1.5, 1.2, 20.0])
def test_unbounded_wegstein_is_exact_for_one_linear_component(slope):
    problem = Problem([[slope]], [1.0])
    outcome = problem.solve(Wegstein(**UNBOUNDED))
    assert outcome.converged[0]
    assert outcome.passes[0] == 3
    assert problem.x[0, 0] == pytest.approx(1 / (1 - slope), rel=1e-10)


def test_unbounded_wegstein_takes_components_one_by_one():
    problem = Problem(np.diag([0.9999, -1.5, 0.0, 0.3]), [1.0, 1.0, 1.0, 0.0])
    outcome = problem.solve(Wegstein(**UNBOUNDED))
    assert outcome.passes[0] == 3
    assert problem.x[0].tolist() == pytest.approx([1e4, 0.4, 1.0, 0.0], rel=1e-10)


@pytest.mark.parametrize("slope", [0.9, 0.99, 0.9999])
def test_bounded_wegstein_shrinks_the_error_by_six_s_minus_five(slope):
    problem = Problem([[slope]], [1.0])
    problem.solve(Wegstein(), limit=12)
    errors = np.array([x[0, 0] for _, x in problem.calls]) - 1 / (1 - slope)
    np.testing.assert_allclose(errors[2:] / errors[1:-1], 6 * slope - 5, rtol=1e-9)


@pytest.mark.parametrize(("matrix", "radius"), [(LINEAR2[0], 0.9), ([[-0.6, 0.1], [0.1, -0.6]], 0.7),
                                                (turning(0.8, 60), 0.8)])
def test_substitution_shrinks_the_error_by_the_spectral_radius(matrix, radius):
    problem = Problem(matrix, [1.0, 2.0])
    problem.solve(Substitution(), limit=80)
    errors = np.array([np.linalg.norm(x[0] - problem.solution()[0]) for _, x in problem.calls])
    np.testing.assert_allclose(errors[31:40] / errors[30:39], radius, rtol=1e-8)


@pytest.mark.parametrize("ratio", [0.9999, 0.5, -0.5, -3.0])
def test_dominant_eigenvalue_is_exact_where_there_is_one(ratio):
    # b along the eigenvector (1, 2) of both; the other eigenvalue is not felt.
    along, across = np.array([1.0, 2.0]), np.array([2.0, -1.0])
    matrix = (ratio * np.outer(along, along) + 0.3 * np.outer(across, across)) / 5
    problem = Problem(matrix, along)
    outcome = problem.solve(DominantEigenvalue(direct_steps=2))
    assert outcome.passes[0] == 4
    np.testing.assert_allclose(problem.x[0], along / (1 - ratio), rtol=1e-9)


def test_dominant_eigenvalue_waits_while_two_modes_turn():
    # Turning by 60 degrees keeps |d| / |d before| at 0.8 from the start, though no mode is alone:
    # a long step after two direct ones would grow the error 0.8**2 * 4 times.
    problem = Problem(*PROBLEMS["oscillating"])
    assert problem.solve(DominantEigenvalue(direct_steps=2)).converged[0]
    np.testing.assert_allclose(problem.x, problem.solution(), rtol=1e-9)


# --- least squares of Anderson's method


def test_fit_is_the_least_squares_one():
    random = np.random.default_rng(5)
    aim, columns, partners = (random.standard_normal(shape) for shape in ((4, 6), (4, 3, 6), (4, 3, 2)))
    found = fitted(aim, columns, partners)
    for case in range(4):
        share = np.linalg.lstsq(columns[case].T, aim[case], rcond=None)[0]
        np.testing.assert_allclose(found[case], share @ partners[case], rtol=1e-12)


def test_fit_leaves_out_columns_that_repeat_newer_ones():
    aim = np.array([[3.0, 1.0]])
    columns = np.array([[[1.0, 0.0], [2.0, 1e-13], [0.0, 0.0], [1.0, 1.0]]])
    partners = np.array([[[1.0], [100.0], [1000.0], [10.0]]])
    assert fitted(aim, columns, partners)[0, 0] == pytest.approx(2 * 1.0 + 1 * 10.0, rel=1e-12)


# --- options


@pytest.mark.parametrize("name", METHODS.names())
def test_every_method_needs_no_option_and_has_each_as_default(name):
    kind = METHODS.load(name)
    method = kind()
    assert method.name == name
    assert method.most_passes >= 10
    for entry in kind.entries:
        default = getattr(method, entry.name)
        assert entry.doc
        assert getattr(kind(**{entry.name: default}), entry.name) == default


def test_options_are_kept_by_the_instance_alone():
    assert Anderson(depth=2).depth == 2
    assert Anderson().depth == 5
    assert (Wegstein(q_least=-20).q_least, Wegstein(q_least=-20).q_most) == (-20, 0.0)
    assert Wegstein.q_least == -5.0


@pytest.mark.parametrize(("kind", "options", "words"), [
    (Anderson, {"depht": 3}, "did you mean 'depth'"),
    (Anderson, {"depth": 0}, "at least 1"),
    (Anderson, {"depth": 2.5}, "whole number"),
    (DominantEigenvalue, {"direct_steps": 1}, "at least 2"),
    (Wegstein, {"q_least": "low"}, "loop.q_least"),
    (Wegstein, {"q_least": 0.5}, "q_least 0.5 is above q_most 0"),
    (Newton, {"depth": 3}, "unknown entry 'depth'"),
])
def test_wrong_options_are_refused(kind, options, words):
    with pytest.raises(InputError, match=words):
        kind(**options)


def test_depth_is_heeded():
    # Three linear unknowns want three differences.
    passes = [contraction(radius=0.9).solve(Anderson(depth=depth)).passes.max() for depth in (1, 2, 3)]
    assert min(passes[:2]) > passes[2] == 5


def test_a_method_must_propose():
    with pytest.raises(TypeError):
        RecycleMethod()


# --- closed loops


@pytest.mark.parametrize("method", METHODS.names())
@pytest.mark.parametrize("name", ["N2", "N3", "N6", "N10"])  # N6: radius 0.907; N10: bleed 1e-4
def test_closed_loops(tmp_path, method, name):
    case = loops.NON_DILUTE[name]
    result = scenes.solve(tmp_path, loops.non_dilute_text(case, method=method, tolerance=1e-12))
    assert result["loop.method"] == method
    if result["status"] == "converged":
        loops.check_non_dilute(result, case, 1e-8)
        if case["impurity_feed"]:
            tar = LOOPS["nondilute"]["N10_tear"]["solution"][1]
            assert loops.relative(result["streams.cool_lean.mol_s.tar"], tar, 1e-8)
        assert result["loop.passes"] <= METHODS.load(method).most_passes
    else:
        assert result["status"] == "pass_limit"
        assert result["loop.passes"] == METHODS.load(method).most_passes
        assert name == "N10"


@pytest.mark.parametrize("method", ["newton", "anderson", "broyden"])
@pytest.mark.parametrize("name", ["N2", "N3", "N6", "N10"])
def test_methods_that_close_every_loop(tmp_path, method, name):
    for tear in scenes.tear_candidates():
        text = loops.non_dilute_text(loops.NON_DILUTE[name], method=method, tolerance=1e-12, tears=[tear])
        result = scenes.solve(tmp_path, text)
        loops.check_non_dilute(result, loops.NON_DILUTE[name], 1e-8)
        assert result["loop.passes"] <= 10


@pytest.mark.parametrize("method", ["substitution", "wegstein"])
def test_a_small_bleed_is_too_slow_for_some(tmp_path, method):
    # 1 - 1e-4 and 1 - 6e-4 a pass: 138 000 and 23 000 passes to 1e-6 and 1e-10.
    text = loops.non_dilute_text(loops.NON_DILUTE["N10"], method=method)
    assert scenes.solve(tmp_path, text)["status"] == "pass_limit"
