"""Requirements that are limits, several at once, and those at the edge of what can be met.

What a limit does when it is active is compared with the same requirement as `equals`, what it does
when it holds with the flowsheet without it; outlets of a column also with Kremser's equation.
"""

import numpy as np
import pytest
import scenes

import leanloop

GAS, OIL, SOLUTE, K, STAGES = 10.0, 8.0, 0.2, 0.6, 5
OUTLET, REMOVAL = "streams.cleaned.ratio.sol", "units.column.results.removal.sol"
FREE = "feeds.solvent.flows.oil"


def asked(name, quantity, kind, target, free=FREE, between=("1 mol/s", "60 mol/s")):
    target = f'"{target}"' if isinstance(target, str) else repr(float(target))
    low, high = (f'"{bound}"' if isinstance(bound, str) else repr(bound) for bound in between)
    return (f'[requirements.{name}]\nquantity = "{quantity}"\n{kind} = {target}\n'
            f'free = "{free}"\nbetween = [{low}, {high}]\n')  # fmt: skip


def column(tmp_path, *requirements):
    text = scenes.column("absorber", STAGES, ["sol"], {"inert": GAS, "sol": SOLUTE}, {"oil": OIL},
                         {"sol": scenes.constant(K, "ratio")}, extra="\n".join(requirements))  # fmt: skip
    return scenes.read(tmp_path, text)


def removal(oil=OIL):
    """Kremser's equation, pure solvent and constant flows."""
    factor = oil / GAS / K
    return 1 - (factor - 1) / (factor ** (STAGES + 1) - 1)


def outlet(oil=OIL, solute=SOLUTE):
    return solute / GAS * (1 - removal(oil))


def states(result):
    """All of a result but the requirements and how much work it was."""
    data = result.to_dict()
    return {key: data[key] for key in ("status", "streams", "units", "balance")}


def same(one, other, rel=1e-9):
    """Compare two nested tables of numbers, texts and nulls."""
    if isinstance(one, dict):
        assert one.keys() == other.keys()
        for key in one:
            same(one[key], other[key], rel)
    elif isinstance(one, list):
        assert len(one) == len(other)
        for left, right in zip(one, other, strict=True):
            same(left, right, rel)
    elif isinstance(one, float):
        assert other == pytest.approx(one, rel=rel, abs=1e-13)
    else:
        assert one == other


class TestOneLimit:
    HOLDS = [(OUTLET, "at_most", outlet() * 1.05), (REMOVAL, "at_least", removal() - 0.02), (OUTLET, "at_least", outlet() * 0.9)]

    @pytest.mark.parametrize(("quantity", "kind", "target"), HOLDS)
    def test_that_holds_changes_nothing(self, tmp_path, quantity, kind, target):
        result = column(tmp_path, asked("limit", quantity, kind, target)).solve()
        found = result.to_dict()["requirements"]["limit"]
        assert result.status == "converged"
        assert (found["reached"], found["active"], found["free_value"], found["reason"]) == (True, False, OIL, None)
        assert found["value"] == pytest.approx({OUTLET: outlet(), REMOVAL: removal()}[quantity], rel=1e-10)
        assert found["other_solutions"] == []
        same(states(column(tmp_path).solve()), states(result), rel=1e-13)

    TIGHT = [
        (OUTLET, "at_most", outlet() * 0.2),
        (REMOVAL, "at_least", 0.99),
        (OUTLET, "at_least", outlet() * 2),
        (REMOVAL, "at_most", 0.5),
    ]

    @pytest.mark.parametrize(("quantity", "kind", "target"), TIGHT)
    def test_that_does_not_hold_is_equals(self, tmp_path, quantity, kind, target):
        result = column(tmp_path, asked("limit", quantity, kind, target)).solve()
        found = result.to_dict()["requirements"]["limit"]
        assert result.status == "converged"
        assert (found["reached"], found["active"], found["reason"]) == (True, True, None)
        assert found["value"] == pytest.approx(target, rel=1e-8)
        oil = found["free_value"]
        assert {OUTLET: outlet, REMOVAL: removal}[quantity](oil) == pytest.approx(target, rel=1e-8)
        assert result["streams.solvent.mol_s.oil"] == pytest.approx(oil, rel=1e-14)
        equals = column(tmp_path, asked("limit", quantity, "equals", target)).solve()
        same(states(equals), states(result))
        same(equals.to_dict()["requirements"], result.to_dict()["requirements"])

    def test_equals_is_always_solved(self, tmp_path):
        result = column(tmp_path, asked("same", OUTLET, "equals", outlet() * 1.05)).solve()
        found = result.to_dict()["requirements"]["same"]
        assert found["active"] is True
        assert found["free_value"] < OIL

    def test_just_at_the_limit(self, tmp_path):
        plain = column(tmp_path).solve()[OUTLET]
        found = column(tmp_path, asked("limit", OUTLET, "at_most", plain)).solve().to_dict()["requirements"]["limit"]
        assert found["reached"] is True
        assert found["free_value"] == pytest.approx(OIL, rel=1e-9)

    def test_the_file_value_may_lie_outside_the_bounds_where_the_limit_holds(self, tmp_path):
        result = column(tmp_path, asked("limit", OUTLET, "at_most", outlet() * 1.05, between=("9 mol/s", "60 mol/s"))).solve()
        assert result.to_dict()["requirements"]["limit"]["free_value"] == OIL

    def test_out_of_reach(self, tmp_path):
        result = column(tmp_path, asked("limit", OUTLET, "at_most", outlet() * 0.2, between=("1 mol/s", "9 mol/s"))).solve()
        found = result.to_dict()["requirements"]["limit"]
        assert result.status == "out_of_reach"
        assert (found["reached"], found["active"], found["reason"]) == (False, True, "bound")
        assert found["free_value"] == pytest.approx(9, rel=1e-12)  # the nearest value
        assert found["value"] == pytest.approx(outlet(9.0), rel=1e-9)


class TestCases:
    SOLUTES = np.array([0.05, 0.2, 0.4, 0.19, 1.0])
    LIMIT = outlet()

    def test_each_case_is_idle_or_active_by_itself(self, tmp_path):
        sheet = column(tmp_path, asked("limit", OUTLET, "at_most", self.LIMIT * 1.01))
        result = sheet.solve({"feeds.sour.flows.sol": self.SOLUTES})
        found = result.to_dict()["requirements"]["limit"]
        assert found["active"] == [False, False, True, False, True]
        assert found["reached"] == [True] * 5
        assert result["streams.cleaned.ratio.sol"] == pytest.approx(
            np.minimum([outlet(OIL, s) for s in self.SOLUTES], self.LIMIT * 1.01), rel=1e-8
        )
        for case, solute in enumerate(self.SOLUTES):
            alone = sheet.solve({"feeds.sour.flows.sol": solute})
            assert found["free_value"][case] == pytest.approx(alone["requirements.limit.free_value"], rel=1e-10)
            assert outlet(found["free_value"][case], solute) <= self.LIMIT * 1.01 * (1 + 1e-8)

    def test_the_target_as_text_with_the_unit_of_the_file(self, tmp_path):
        sheet = column(tmp_path, asked("limit", "streams.cleaned.mg_per_Nm3.sol", "equals", "5000 mg/Nm3"))
        for value in ("3000 mg/Nm3", 3000.0, "3 g/Nm3"):
            result = sheet.solve({"requirements.limit.equals": value})
            assert result["streams.cleaned.mg_per_Nm3.sol"] == pytest.approx(3000, rel=1e-8)

    @pytest.mark.parametrize("kind", ["equals", "at_most", "at_least"])
    def test_the_target_as_an_array(self, tmp_path, kind):
        targets = outlet() * np.array([0.1, 0.5, 0.99, 1.5, 3.0])
        sheet = column(tmp_path, asked("limit", OUTLET, kind, 0.001))
        result = sheet.solve({f"requirements.limit.{kind}": targets})
        active = {"equals": targets > 0, "at_most": targets < outlet(), "at_least": targets > outlet()}[kind]
        assert result["requirements.limit.active"].tolist() == active.tolist()
        assert result["requirements.limit.reached"].all()
        assert result[OUTLET] == pytest.approx(np.where(active, targets, outlet()), rel=1e-8)
        for case, target in enumerate(targets):
            alone = sheet.solve({f"requirements.limit.{kind}": target})
            assert result["requirements.limit.free_value"][case] == pytest.approx(alone["requirements.limit.free_value"], rel=1e-10)

    def test_other_file_values_per_case(self, tmp_path):
        """The freed input's own cases are what an idle limit leaves in place; where it is active they do not matter."""
        sheet = column(tmp_path, asked("limit", OUTLET, "at_most", outlet()))
        result = sheet.solve({FREE: np.array([5.0, 9.0, 12.0, 2.0])})
        assert result["requirements.limit.active"].tolist() == [True, False, False, True]
        assert result["requirements.limit.free_value"] == pytest.approx([OIL, 9.0, 12.0, OIL], rel=1e-8)


class TestSensitivity:
    INPUTS = {"feeds.sour.flows.sol": SOLUTE, "feeds.sour.flows.inert": GAS, "equilibrium.stage.sol.K": K}

    @pytest.mark.parametrize("address", INPUTS)
    @pytest.mark.parametrize(("share", "active"), [(1.2, False), (0.3, True)])
    def test_against_solves(self, tmp_path, address, share, active):
        sheet = column(tmp_path, asked("limit", OUTLET, "at_most", outlet() * share))
        result = sheet.solve()
        assert result["requirements.limit.active"] == active
        step = 1e-4 * self.INPUTS[address]
        near = sheet.solve({address: self.INPUTS[address] + step * np.array([-1, 1])})
        assert near["requirements.limit.active"].tolist() == [active] * 2
        for quantity in (OUTLET, "requirements.limit.free_value", "streams.rich.mol_s.sol"):
            low, high = near[quantity]
            found = result.sensitivity(quantity, address)
            assert found == pytest.approx((high - low) / (2 * step), rel=1e-6, abs=1e-9), quantity
        assert (abs(result.sensitivity("requirements.limit.free_value", address)) > 1e-3) == active

    def test_of_a_batch_with_both_kinds(self, tmp_path):
        sheet = column(tmp_path, asked("limit", OUTLET, "at_most", outlet()))
        solutes = np.array([0.1, 0.4])
        result = sheet.solve({"feeds.sour.flows.sol": solutes})
        step = 1e-5
        for quantity in (OUTLET, "requirements.limit.free_value"):
            high, low = (sheet.solve({"feeds.sour.flows.sol": solutes + sign * step})[quantity] for sign in (1, -1))
            slopes = result.sensitivity(quantity, "feeds.sour.flows.sol")
            np.testing.assert_allclose(slopes, (high - low) / (2 * step), rtol=1e-6, atol=1e-8)

    @pytest.mark.parametrize(("share", "active"), [(1.2, False), (0.3, True)])
    def test_to_the_limit_itself(self, tmp_path, share, active):
        target = outlet() * share
        result = column(tmp_path, asked("limit", OUTLET, "at_most", target)).solve()
        assert result.sensitivity(OUTLET, "requirements.limit.at_most") == pytest.approx(1.0 if active else 0.0, abs=1e-9)
        slope = result.sensitivity("requirements.limit.free_value", "requirements.limit.at_most")
        oil, step = result["requirements.limit.free_value"], 1e-5
        expected = 2 * step / (outlet(oil + step) - outlet(oil - step)) if active else 0.0
        assert slope == pytest.approx(expected, rel=1e-6, abs=1e-12)


class TestSensitivityOutOfReach:
    """At a bound the freed input stays there, so that everything moves as without the requirement."""

    @pytest.mark.parametrize("address", TestSensitivity.INPUTS)
    @pytest.mark.parametrize("kind", ["equals", "at_most"])
    def test_against_solves(self, tmp_path, address, kind):
        sheet = column(tmp_path, asked("limit", OUTLET, kind, outlet() * 0.2, between=("1 mol/s", "9 mol/s")))
        result = sheet.solve()
        value = TestSensitivity.INPUTS[address]
        near = sheet.solve({address: value * (1 + 1e-4 * np.array([-1, 1]))})
        assert list(near.status) == ["out_of_reach"] * 2
        assert near["requirements.limit.free_value"] == pytest.approx([9.0, 9.0], rel=1e-12)
        low, high = near[OUTLET]
        assert result.sensitivity(OUTLET, address) == pytest.approx((high - low) / (2e-4 * value), rel=1e-6)
        assert result.sensitivity("requirements.limit.free_value", address) == pytest.approx(0.0, abs=1e-9)
        assert result.sensitivity(OUTLET, f"requirements.limit.{kind}") == pytest.approx(0.0, abs=1e-9)


CLEAN, LEAN = "streams.cleaned.ratio.sol", "streams.lean.loading.sol"
HOLD, STEAM = "units.top_up.hold.oil", "feeds.steam.flows.steam"


def loop(tmp_path, *requirements):
    text = scenes.loop((5, 4), {"sol": scenes.constant(0.15)}, {"sol": scenes.constant(2.0)}, 2.0, 10.0, 1.5, {"sol": 0.02},
                       extra="\n".join(requirements))  # fmt: skip
    return scenes.read(tmp_path, text)


def clean(kind, target):
    return asked("clean", CLEAN, kind, target, HOLD, ("1 mol/s", "6 mol/s"))


def lean(kind, target):
    return asked("lean", LEAN, kind, target, STEAM, ("0.8 mol/s", "8 mol/s"))


class TestTwoLimits:
    @pytest.fixture
    def at_file(self, tmp_path):
        result = loop(tmp_path).solve()
        return result[CLEAN], result[LEAN]

    def found(self, result):
        assert result.status == "converged"
        data = result.to_dict()["requirements"]
        assert data["clean"]["reached"] and data["lean"]["reached"]
        return data["clean"], data["lean"]

    def test_both_hold(self, tmp_path, at_file):
        result = loop(tmp_path, clean("at_most", at_file[0] * 1.1), lean("at_most", at_file[1] * 1.1)).solve()
        first, second = self.found(result)
        assert not first["active"] and not second["active"]
        assert (first["free_value"], second["free_value"]) == (2.0, 1.5)
        same(states(loop(tmp_path).solve()), states(result), rel=1e-9)

    @pytest.mark.parametrize("order", [1, -1])
    def test_one_violated(self, tmp_path, at_file, order):
        """More steam lowers both quantities, so that the other limit holds on."""
        limits = [clean("at_most", at_file[0] * 1.1), lean("at_most", at_file[1] * 0.3)][::order]
        result = loop(tmp_path, *limits).solve()
        first, second = self.found(result)
        assert (first["active"], second["active"]) == (False, True)
        assert first["free_value"] == 2.0
        assert first["value"] < at_file[0]
        alone = loop(tmp_path, lean("equals", at_file[1] * 0.3)).solve()
        same(states(alone), states(result), rel=1e-8)

    def both(self, tmp_path, targets):
        result = loop(tmp_path, clean("equals", targets[0]), lean("equals", targets[1])).solve()
        self.found(result)
        return result

    @pytest.mark.parametrize("order", [1, -1])
    def test_both_violated(self, tmp_path, at_file, order):
        targets = at_file[0] * 0.5, at_file[1] * 0.3
        result = loop(tmp_path, *[clean("at_most", targets[0]), lean("at_most", targets[1])][::order]).solve()
        first, second = self.found(result)
        assert first["active"] and second["active"]
        assert (first["value"], second["value"]) == pytest.approx(targets, rel=1e-8)
        same(states(self.both(tmp_path, targets)), states(result), rel=1e-7)

    @pytest.mark.parametrize("order", [1, -1])
    def test_making_one_active_violates_the_other(self, tmp_path, at_file, order):
        """More oil cleans the gas better and is stripped worse: the limit on lean loading, which held, is broken."""
        targets = at_file[0] * 0.8, at_file[1] * 1.001
        alone = loop(tmp_path, clean("equals", targets[0])).solve()
        assert alone[LEAN] > targets[1]
        result = loop(tmp_path, *[clean("at_most", targets[0]), lean("at_most", targets[1])][::order]).solve()
        first, second = self.found(result)
        assert first["active"] and second["active"]
        assert (first["value"], second["value"]) == pytest.approx(targets, rel=1e-8)
        same(states(self.both(tmp_path, targets)), states(result), rel=1e-7)

    def test_all_of_these_as_cases(self, tmp_path, at_file):
        shares = np.array([[1.1, 1.1], [1.1, 0.3], [0.5, 0.3], [0.8, 1.001]])
        sheet = loop(tmp_path, clean("at_most", at_file[0]), lean("at_most", at_file[1]))
        targets = shares * at_file
        result = sheet.solve({"requirements.clean.at_most": targets[:, 0], "requirements.lean.at_most": targets[:, 1]})
        assert set(result.status) == {"converged"}
        assert result["requirements.clean.active"].tolist() == [False, False, True, True]
        assert result["requirements.lean.active"].tolist() == [False, True, True, True]
        assert (result[CLEAN] <= targets[:, 0] * (1 + 1e-8)).all()
        assert (result[LEAN] <= targets[:, 1] * (1 + 1e-8)).all()
        for case, (first, second) in enumerate(targets):
            alone = sheet.solve({"requirements.clean.at_most": first, "requirements.lean.at_most": second})
            for name in ("clean", "lean"):
                address = f"requirements.{name}.free_value"
                assert result[address][case] == pytest.approx(alone[address], rel=1e-7)

    def test_with_equals_beside(self, tmp_path, at_file):
        for share, active in ((1.5, False), (0.4, True)):
            result = loop(tmp_path, clean("equals", at_file[0] * 0.95), lean("at_most", at_file[1] * share)).solve()
            first, second = self.found(result)
            assert (first["active"], second["active"]) == (True, active)
            assert first["value"] == pytest.approx(at_file[0] * 0.95, rel=1e-8)
            if active:
                same(states(self.both(tmp_path, (at_file[0] * 0.95, at_file[1] * 0.4))), states(result), rel=1e-7)
            else:
                assert second["free_value"] == 1.5
                same(states(loop(tmp_path, clean("equals", at_file[0] * 0.95)).solve()), states(result), rel=1e-8)

    def test_equals_that_makes_a_limit_needless(self, tmp_path, at_file):
        """The limit fails with the steam of the file but holds with the steam that `equals`, always solved, asks for."""
        limit = at_file[0] * 0.99
        alone = loop(tmp_path, lean("equals", at_file[1] * 0.3)).solve()
        assert alone[CLEAN] < limit
        result = loop(tmp_path, clean("at_most", limit), lean("equals", at_file[1] * 0.3)).solve()
        first, _ = self.found(result)
        assert (first["active"], first["free_value"]) == (False, 2.0)
        same(states(alone), states(result), rel=1e-8)

    @pytest.mark.parametrize("order", [1, -1])
    def test_both_violated_where_one_would_do(self, tmp_path, at_file, order):
        """More steam alone would meet both; whichever way is taken, both are met and the order does not matter."""
        limits = [clean("at_most", at_file[0] * 0.99), lean("at_most", at_file[1] * 0.3)]
        result = loop(tmp_path, *limits[::order]).solve()
        first, second = self.found(result)
        assert first["value"] <= at_file[0] * 0.99 * (1 + 1e-8)
        assert second["value"] == pytest.approx(at_file[1] * 0.3, rel=1e-8)
        same(states(loop(tmp_path, *limits).solve()), states(result), rel=1e-7)

    def test_sensitivity_with_one_active(self, tmp_path, at_file):
        sheet = loop(tmp_path, clean("at_most", at_file[0] * 1.1), lean("at_most", at_file[1] * 0.3))
        result = sheet.solve()
        step = 1e-3
        near = sheet.solve({"feeds.vent.flows.inert": 10 + step * np.array([-1, 1])})
        for quantity in (CLEAN, "requirements.lean.free_value", "requirements.clean.free_value"):
            low, high = near[quantity]
            slope = result.sensitivity(quantity, "feeds.vent.flows.inert")
            assert slope == pytest.approx((high - low) / (2 * step), rel=1e-5, abs=1e-9), quantity

    def test_redundant_pair(self, tmp_path):
        """Removal and outlet ratio of one column are one wish: two inputs cannot give them two values."""
        first = asked("share", REMOVAL, "equals", 0.95)
        second = asked("rest", OUTLET, "equals", SOLUTE / GAS * 0.02, "equilibrium.stage.sol.K", (0.1, 1.0))
        result = column(tmp_path, first, second).solve()
        assert result.status == "out_of_reach"
        assert "share" in result.status_text and "rest" in result.status_text
        found = result.to_dict()["requirements"]
        assert not (found["share"]["reached"] and found["rest"]["reached"])
        assert "Status: out_of_reach" in str(result)

    def test_redundant_pair_as_one_case_of_several(self, tmp_path):
        """A limit that holds frees nothing: the other case is well posed."""
        first = asked("share", REMOVAL, "equals", 0.95)
        second = asked("rest", OUTLET, "at_most", SOLUTE / GAS * 0.02, "equilibrium.stage.sol.K", (0.1, 1.0))
        result = column(tmp_path, first, second).solve({"requirements.rest.at_most": SOLUTE / GAS * np.array([0.02, 0.06])})
        assert list(result.status) == ["out_of_reach", "converged"]
        assert removal(result["requirements.share.free_value"][1]) == pytest.approx(0.95, rel=1e-8)
        assert result["requirements.rest.free_value"][1] == K


class TestEdges:
    @pytest.mark.parametrize("between", [("8 mol/s", "20 mol/s"), ("2 mol/s", "8 mol/s")])
    @pytest.mark.parametrize("kind", ["equals", "at_most", "at_least"])
    def test_met_at_a_bound(self, tmp_path, between, kind):
        plain = column(tmp_path).solve()[OUTLET]
        start = {FREE: {"equals": 8.0, "at_most": 5.0, "at_least": 11.0}[kind]}  # where a limit does not hold
        result = column(tmp_path, asked("edge", OUTLET, kind, plain, between=between)).solve(start)
        found = result.to_dict()["requirements"]["edge"]
        assert result.status == "converged"
        assert (found["reached"], found["active"], found["reason"]) == (True, True, None)
        assert found["free_value"] == pytest.approx(OIL, rel=1e-9)
        assert found["other_solutions"] == []

    def test_a_hair_beyond_a_bound_is_out_of_reach(self, tmp_path):
        plain = column(tmp_path).solve()[OUTLET]
        result = column(tmp_path, asked("edge", OUTLET, "equals", plain * (1 - 1e-5), between=("2 mol/s", "8 mol/s"))).solve()
        assert result.status == "out_of_reach"
        assert result.to_dict()["requirements"]["edge"]["reason"] == "bound"

    def test_zero_that_can_be_reached(self, tmp_path):
        """What a make-up adds to a given flow is nothing where it holds just that."""
        text = "\n".join([
            'title = "Nothing to add"',
            scenes.feed("given", "liquid", {"oil": 3.0}),
            '[units.top_up]\nkind = "makeup"\ntakes = "given"\ngives = "full"\nhold = { oil = "5 mol/s" }\n',
            scenes.components([], {"oil": "liquid"}),
            asked("none", "units.top_up.results.added_mol_s.oil", "equals", "0 mol/s", HOLD, ("1 mol/s", "7 mol/s")),
        ])  # fmt: skip
        result = scenes.solve(tmp_path, text)
        found = result.to_dict()["requirements"]["none"]
        assert result.status == "converged"
        assert found["reached"] is True
        assert found["free_value"] == pytest.approx(3.0, rel=1e-12)
        assert found["value"] == pytest.approx(0.0, abs=1e-12)

    def test_zero_that_cannot_be_reached(self, tmp_path):
        result = column(tmp_path, asked("none", OUTLET, "equals", 0.0)).solve()
        found = result.to_dict()["requirements"]["none"]
        assert result.status == "out_of_reach"
        assert found["reached"] is False
        assert found["free_value"] == pytest.approx(60.0, rel=1e-12)  # the nearest

    def test_limits_of_zero(self, tmp_path):
        idle = column(tmp_path, asked("none", OUTLET, "at_least", 0.0)).solve()
        assert idle.status == "converged"
        assert idle["requirements.none.free_value"] == OIL
        assert not idle["requirements.none.active"]
        assert column(tmp_path, asked("none", OUTLET, "at_most", 0.0)).solve().status == "out_of_reach"

    def test_a_zero_solution_among_cases(self, tmp_path):
        """No solute in the gas: its outlet is zero whatever the solvent, which is within any limit."""
        sheet = column(tmp_path, asked("limit", OUTLET, "at_most", outlet() * 0.5))
        result = sheet.solve({"feeds.sour.flows.sol": np.array([0.0, 0.2])})
        assert list(result.status) == ["converged"] * 2
        assert result["requirements.limit.active"].tolist() == [False, True]

    @pytest.mark.parametrize("kind", ["equals", "at_most"])
    def test_where_the_file_value_has_no_answer(self, tmp_path, kind):
        """Without solvent the column is dry, so that the limit does not hold there; with the freed solvent it is met."""
        sheet = column(tmp_path, asked("limit", OUTLET, kind, outlet()))
        result = sheet.solve({FREE: np.array([0.0, 2.0])})
        assert list(result.status) == ["converged"] * 2
        assert result["requirements.limit.free_value"] == pytest.approx([OIL, OIL], rel=1e-8)

    @pytest.mark.parametrize(("kind", "active"), [("equals", True), ("at_most", True), ("at_least", False)])
    def test_two_solutions(self, tmp_path, kind, active):
        """With the steam as it is, more oil cleans the gas better and then worse; the lesser oil is taken."""
        between = ("0.3 mol/s", "8 mol/s")
        oils = np.linspace(0.4, 7.6, 37)
        outlets = loop(tmp_path).solve({HOLD: oils})[CLEAN]
        least = int(outlets.argmin())
        assert 0 < least < len(oils) - 1
        target = outlets[least] + 0.2 * (outlets[-1] - outlets[least])
        sheet = loop(tmp_path, asked("clean", CLEAN, kind, target, HOLD, between))
        result = sheet.solve({HOLD: 7.9})  # the limit does not hold there
        found = result.to_dict()["requirements"]["clean"]
        assert found["active"] == active
        if not active:
            assert (found["free_value"], found["other_solutions"]) == (7.9, [])
            return
        answers = [found["free_value"], *found["other_solutions"]]
        assert len(answers) == 2
        assert answers[0] < oils[least] < answers[1]
        assert loop(tmp_path).solve({HOLD: np.array(answers)})[CLEAN] == pytest.approx([target] * 2, rel=1e-7)
        batch = sheet.solve({HOLD: np.array([7.9, 0.35])}).to_dict()["requirements"]["clean"]  # whatever the start
        assert batch["free_value"] == pytest.approx([answers[0]] * 2, rel=1e-9)
        assert [len(row) for row in batch["other_solutions"]] == [1, 1]

    def test_a_turning_point_is_named(self, tmp_path):
        oils = np.linspace(0.4, 7.6, 37)
        least = loop(tmp_path).solve({HOLD: oils})[CLEAN].min()
        result = loop(tmp_path, asked("clean", CLEAN, "at_most", least * 0.9, HOLD, ("0.3 mol/s", "8 mol/s"))).solve()
        found = result.to_dict()["requirements"]["clean"]
        assert result.status == "out_of_reach"
        assert (found["reached"], found["reason"]) == (False, "turning_point")
        assert found["value"] >= least * 0.99


class TestTemperatures:
    TEXT = "\n".join([
        'title = "Two oils"',
        scenes.feed("warm", "liquid", {"oil": 2.0}, temperature="80 degC"),
        scenes.feed("cool", "liquid", {"oil": 1.0}, temperature="20 degC"),
        '[units.join]\nkind = "mixer"\ntakes = ["warm", "cool"]\ngives = "mixed"\n',
        scenes.components([], {"oil": "liquid"}),
    ])  # fmt: skip

    @pytest.mark.parametrize(
        ("kind", "target", "cool"),
        [("equals", "50 degC", 2.0), ("at_most", "323.15 K", 2.0), ("at_most", "61 degC", 1.0), ("equals", "122 degF", 2.0)],
    )
    def test_of_a_mixture(self, tmp_path, kind, target, cool):
        more = asked("mild", "streams.mixed.temperature_K", kind, target, "feeds.cool.flows.oil", ("0.5 mol/s", "9 mol/s"))
        result = scenes.solve(tmp_path, self.TEXT + more)
        assert result.status == "converged"
        assert result["requirements.mild.free_value"] == pytest.approx(cool, rel=1e-8)
        assert result["streams.mixed.temperature_K"] == pytest.approx((2 * 353.15 + cool * 293.15) / (2 + cool), rel=1e-9)

    def test_a_temperature_is_freed(self, tmp_path):
        more = asked("mild", "streams.mixed.temperature_K", "equals", "50 degC", "feeds.warm.temperature", ("30 degC", "120 degC"))
        result = scenes.solve(tmp_path, self.TEXT + more)
        assert result["requirements.mild.free_value"] == pytest.approx((3 * 323.15 - 293.15) / 2, rel=1e-10)
        assert "65.00" in str(result)  # told in degC

    def test_as_cases_in_kelvin(self, tmp_path):
        more = asked("mild", "streams.mixed.temperature_K", "equals", "50 degC", "feeds.cool.flows.oil", ("0.5 mol/s", "9 mol/s"))
        wanted = np.array([313.15, 323.15, 333.15])
        result = scenes.solve(tmp_path, self.TEXT + more, {"requirements.mild.equals": wanted})
        np.testing.assert_allclose(result["requirements.mild.free_value"], 2 * (353.15 - wanted) / (wanted - 293.15), rtol=1e-9)

    def test_a_plain_number_is_refused(self, tmp_path):
        more = asked("mild", "streams.mixed.temperature_K", "equals", 323.15, "feeds.cool.flows.oil", ("0.5 mol/s", "9 mol/s"))
        with pytest.raises(leanloop.InputError, match=r"requirements\.mild\.equals"):
            scenes.read(tmp_path, self.TEXT + more)
