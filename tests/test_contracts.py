"""Every contract check on every registered plug-in; each pair of them is one test."""

import pytest

from leanloop.checks import SORTS, checks_for
from leanloop.entries import Entry
from leanloop.recycle import METHODS
from leanloop.recycle.base import RecycleMethod


def pairs():
    """(sort, plug-in, check) as the registries and the suites list them."""
    return [(sort, name, check) for sort, suite in SORTS.items() for name in suite.registry for check, _ in checks_for(sort)]


@pytest.mark.parametrize(("sort", "name", "check"), pairs(), ids="-".join)
def test_the_contract_holds(sort, name, check):
    dict(checks_for(sort))[check](name)


@pytest.mark.parametrize(("sort", "name"), [(sort, name) for sort, suite in SORTS.items() for name in suite.registry], ids="-".join)
def test_no_check_is_run_on_nothing(sort, name):
    suite = SORTS[sort]
    assert len(suite.given(suite.registry.load(name))) > 0


class Halved(RecycleMethod):
    """x+ = x + share (g - x)."""

    name = "halved"
    most_passes = 2000
    entries = (Entry("share", "number", above=0.0, most=1.0, doc="of the step to g, 0.5 by default"),)
    share = 0.5

    def propose(self, trial, state):
        return trial.x + self.share * (trial.g - trial.x), state


def test_one_line_in_a_table_is_enough_to_be_checked():
    before = pairs()
    METHODS.add("halved", Halved)
    try:
        new = [pair for pair in pairs() if pair not in before]
        assert new == [("recycle", "halved", check) for check, _ in checks_for("recycle")]
        for sort, name, check in new:
            test_the_contract_holds(sort, name, check)
    finally:
        METHODS.remove("halved")
    assert pairs() == before
