"""What every recycle method must keep: it solves contractions, keeps cases apart, stays in bounds and remembers nothing."""

from __future__ import annotations

import copy
from typing import Any

import numpy as np

from leanloop.checks.base import Suite, documented, require, well_formed
from leanloop.checks.problem import CASES, COUNT, TOLERANCE, Problem, trials
from leanloop.errors import InputError
from leanloop.recycle import METHODS
from leanloop.recycle.base import RecycleMethod

SUITE = Suite(
    METHODS,
    lambda plugin: [{}, *getattr(plugin, "examples", list)()],
    lambda plugin, options: plugin(**options),
)
check = SUITE.check


@check("files and messages are made of entries", "declare each option with a doc, its default as a class attribute", whole=True)
def entries(plugin: type[RecycleMethod]) -> None:
    """The class is documented, and options have defaults and are read."""
    documented(plugin, "name")
    well_formed(plugin.entries)
    for entry in plugin.entries:
        require(not entry.required and hasattr(plugin, entry.name), f"option '{entry.name}' has no default")
    try:
        plugin(no_such=1.0)
    except InputError:
        return
    require(False, "an unknown option is taken without a word")


@check("most loops are contractions, and users count on the passes", "mend propose(), or raise most_passes")
def contraction_solved(method: RecycleMethod) -> None:
    """A contraction is solved within the passes that the method allows itself."""
    problem = Problem(method)
    outcome = problem.run()
    told = f"errors {np.array2string(outcome.error, precision=1)} after {outcome.passes.max()} passes"
    require(outcome.converged.all(), f"a contraction by half is not solved: {told}")
    gap = np.abs(problem.x - problem.answer).max()
    require(gap <= 4 * TOLERANCE, f"the answer is {gap:.1e} off")


@check("a solved loop must cost nothing again", "leave the start to the driver, and x as it is")
def answer_costs_one_pass(method: RecycleMethod) -> None:
    """A start at the answer costs one evaluation."""
    problem = Problem(method)
    outcome = problem.run(problem.answer)
    once = outcome.converged.all() and (problem.calls == 1).all()
    require(once, f"a start at the answer costs {problem.calls.max()} evaluations")


@check("what is reported is what was done", "set most_passes to a whole number above 1, and propose as often as asked")
def passes_counted(method: RecycleMethod) -> None:
    """Passes are counted as they are made, and no more than allowed."""
    limit = method.most_passes
    require(isinstance(limit, int) and limit > 1, f"most_passes is {limit!r}")
    for most in (1, 2, limit):
        problem = Problem(method)
        outcome = problem.run(limit=most)
        require((outcome.passes == problem.calls).all(), f"{outcome.passes} passes are counted of {problem.calls}")
        require(outcome.passes.max() <= most, f"{outcome.passes.max()} passes are made where {most} are allowed")


@check("one instance serves every loop of a flowsheet", "put what is remembered into the state, never on self")
def instance_can_be_reused(method: RecycleMethod) -> None:
    """A second run of one instance gives the same answer."""
    first, second = Problem(method), Problem(method)
    first.run()
    Problem(method, [3, 1]).run(limit=3)
    Problem(method).run(2.0 * first.start, limit=2)
    second.run()
    require(np.array_equal(first.x, second.x), "a second run of the same instance gives another answer")


@check("configuration is shared", "put what is remembered into the state, never on self or its class")
def configuration_frozen(method: RecycleMethod) -> None:
    """A run leaves the instance and its class as they were."""
    def look() -> dict[str, Any]:
        return {**{key: value for key, value in vars(type(method)).items() if not callable(value)}, **vars(method)}

    before = copy.copy(look())
    kept = copy.deepcopy(vars(method))
    Problem(method).run()
    now = look()
    changed = [key for key in {*before, *now} if before.get(key, now) is not now.get(key, before)]
    require(not changed and vars(method) == kept, f"a run changes {', '.join(sorted(changed)) or 'its attributes'}")


@check("a batch is nothing but its cases", "let no case act on another: no sum or norm over the case axis")
def cases_alone(method: RecycleMethod) -> None:
    """A case in a batch takes the same passes to the same answer as alone."""
    whole = Problem(method)
    passes = whole.run().passes
    for case in range(CASES):
        one = Problem(method, [case])
        found = one.run().passes[0]
        require(found == passes[case], f"case {case} takes {found} passes alone and {passes[case]} in a batch")
        require(np.allclose(one.x[0], whole.x[case], rtol=1e-12, atol=0), f"case {case} alone gives another answer")


@check("one bad case must not cost the others", "keep the state in rows, one for each case")
def nan_stays(method: RecycleMethod) -> None:
    """NaN in one case leaves the others as they were."""
    whole, spoilt = Problem(method), Problem(method, spoilt=1)
    passes, outcome = whole.run().passes, spoilt.run()
    others = np.arange(CASES) != 1
    require(outcome.failed[1] and not outcome.failed[others].any(), f"with NaN in case 1 the failed are {outcome.failed}")
    same = (outcome.passes == passes)[others].all() and np.array_equal(spoilt.x[others], whole.x[others])
    require(same, "NaN in case 1 changes the others")


@check("the driver drops the rows of cases that are done", "lead every array of the state with the case axis")
def state_in_rows(method: RecycleMethod) -> None:
    """The state leads with the case axis."""
    x = np.linspace(1.0, 2.0, 2 * COUNT).reshape(2, COUNT)
    state = method.begin(x)
    for trial in trials(method):
        for key, value in state.items():
            require(np.shape(value)[:1] == (2,), f"state '{key}' has the shape {np.shape(value)}, without the case axis")
        _, state = method.propose(trial, state)


@check("a pass needs finite flows, none below zero", "fall back on g where a step is not finite or out of bounds")
def proposals_in_bounds(method: RecycleMethod) -> None:
    """What is proposed is finite and within the bounds, even where steps are undefined."""
    problem = Problem(method)
    problem.run(40.0 * problem.start)
    for x in problem.proposed:
        require(np.isfinite(x).all() and (x >= 0).all(), f"{x.min():g} is proposed in a contraction")
    state = method.begin(np.linspace(1.0, 2.0, 2 * COUNT).reshape(2, COUNT))
    for number, trial in enumerate(trials(method)):
        x, state = method.propose(trial, state)
        told = f"pass {number + 1} of a stalled, a singular, a leaping and an empty one"
        require(np.shape(x) == trial.x.shape, f"what is proposed has the shape {np.shape(x)}")
        require(np.isfinite(x).all() and (x >= trial.low).all(), f"{x.min():g} is proposed in {told}")


@check("the driver judges by the same arrays", "work on copies")
def trial_unchanged(method: RecycleMethod) -> None:
    """The trial and the start are left as they are."""
    x = np.linspace(1.0, 2.0, 2 * COUNT).reshape(2, COUNT)
    start = x.copy()
    state = method.begin(x)
    require(np.array_equal(x, start), "begin() changes x")
    for trial in trials(method):
        kept = copy.deepcopy(trial)
        _, state = method.propose(trial, state)
        for key, value in vars(kept).items():
            require(np.array_equal(getattr(trial, key), value), f"propose() changes {key}")
