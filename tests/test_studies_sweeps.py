"""Sweeps: which cases they make and in what order, each as a solve of its own, failed ones apart, files that agree."""

import csv
import math
import sqlite3
from pathlib import Path

import numpy as np
import pytest
import scipy.stats
from scipy.stats import qmc
from study_scenes import OIL, linear, pair

import leanloop
from leanloop.errors import InputError

BLEED, CIRCULATION, STEAM = "units.divide.shares.spent", "units.top_up.hold.oil", "feeds.steam.flows.steam"
SOLUTE, GRADE = "feeds.vent.flows.solute", "streams.cleaned.ratio.solute"
LEAN = "streams.lean.ratio.solute"
VENT = Path(__file__).parents[1] / "flowsheets" / "coating_vent.toml"
close = pytest.approx


def run(sheet, **entries):
    return leanloop.study(sheet, "proof", **{"purity": False, **entries}).run()


def demanding(limit=None, sense="equals", value=1e-3, between=(0.8, 2.9), **more):
    """The pair with its outlet held by the circulation."""
    item = {"quantity": GRADE, sense: value, "free": CIRCULATION, "between": list(between)}
    return pair(requirements={"outlet": item}, **more)


def wrong(sheet, **entries):
    with pytest.raises(InputError) as caught:
        run(sheet, **entries)
    return [str(fault) for fault in caught.value.faults]


class TestCases:
    def test_grid(self):
        """The first input is the slowest."""
        found = run(pair(), change={CIRCULATION: [1.5, 2.0, 3.0], STEAM: [1.0, 2.0], BLEED: [0.1, 0.2]}, record=[GRADE])
        assert len(found) == 12 and list(found["case"]) == list(range(12))
        assert list(found[CIRCULATION]) == [1.5] * 4 + [2.0] * 4 + [3.0] * 4
        assert list(found[STEAM]) == [1.0, 1.0, 2.0, 2.0] * 3
        assert list(found[BLEED]) == [0.1, 0.2] * 6

    def test_inputs_in_step(self):
        found = run(pair(), change=[{CIRCULATION: [1.5, 2.0, 3.0], STEAM: [1.0, 1.2, 1.9]}, {BLEED: [0.1, 0.2]}], record=[GRADE])
        assert list(found[CIRCULATION]) == [1.5, 1.5, 2.0, 2.0, 3.0, 3.0]
        assert list(found[STEAM]) == [1.0, 1.0, 1.2, 1.2, 1.9, 1.9]
        assert list(found[BLEED]) == [0.1, 0.2] * 3

    def test_unequal_lists_in_step(self):
        faults = wrong(pair(), change=[{CIRCULATION: [1.5, 2.0, 3.0], STEAM: [1.0, 1.2]}], record=[GRADE])
        assert len(faults) == 2 and all(fault.startswith("studies.proof.change[0].") for fault in faults)

    @pytest.mark.parametrize("raw, expected", [
        ({"from": 1.0, "to": 3.0, "count": 5}, [1.0, 1.5, 2.0, 2.5, 3.0]),
        ({"from": 3.0, "to": 1.0, "count": 3}, [3.0, 2.0, 1.0]),
        ({"from": 1.0, "to": 3.0, "step": 0.5}, [1.0, 1.5, 2.0, 2.5, 3.0]),
        ({"from": 3.0, "to": 1.2, "step": 0.5}, [3.0, 2.5, 2.0, 1.5]),
        ({"from": 1.0, "to": 1.3, "step": 0.1}, [1.0, 1.1, 1.2, 1.3]),
        ({"from": 1.0, "to": 2.9, "step": 0.5}, [1.0, 1.5, 2.0, 2.5]),
        ({"from": 0.5, "to": 4.0, "count": 4, "spacing": "log"}, [0.5, 1.0, 2.0, 4.0]),
        ({"times": [0.5, 1, 1.25]}, [OIL / 2, OIL, 1.25 * OIL]),
        (["1.5 mol/s", "7.2 kmol/h", 3.0], [1.5, 2.0, 3.0]),
        ({"from": "3.6 kmol/h", "to": "2 mol/s", "count": 2}, [1.0, 2.0]),
    ])  # fmt: skip
    def test_ranges(self, raw, expected):
        found = run(pair(), change={CIRCULATION: raw}, record=[GRADE])
        assert list(found[CIRCULATION]) == close(expected, rel=1e-14)
        assert found[GRADE] == close(linear(0.3, bleed=0.01, oil=np.array(expected))[3], rel=1e-10)

    def test_temperatures(self):
        """A list in degrees; multiples of a temperature count from absolute zero or are refused."""
        found = run(pair(), change={"units.strip.temperature": ["100 degC", 400.0, {"from": 1}][:2]}, record=[GRADE])
        assert found["units.strip.temperature"] == close([373.15, 400.0], rel=1e-14)

    @pytest.mark.parametrize("raw, expected", [
        ([2, 9, 4], [2, 9, 4]),
        ({"from": 2, "to": 9, "count": 8}, list(range(2, 10))),
        ({"from": 3, "to": 12, "step": 3}, [3, 6, 9, 12]),
        ({"from": 2, "to": 5}, [2, 3, 4, 5]),
        ({"from": 2, "to": 9, "count": 4}, [2, 4, 7, 9]),  # 4.33 and 6.67 are no stages
    ])  # fmt: skip
    def test_stages(self, raw, expected):
        found = run(pair(), change={"units.wash.stages": raw}, record=[GRADE])
        assert list(found["units.wash.stages"]) == expected and found.counts == {"converged": len(expected)}
        for stages, grade in zip(expected, found[GRADE]):
            alone = pair()
            assert alone.solve({"units.wash.stages": stages})[GRADE] == close(grade, rel=1e-12)

    @pytest.mark.parametrize("raw", [[2, 2.5], {"from": 2, "to": 3, "step": 0.5}, {"from": 2.5, "to": 5}, [0], {"times": [2]}])
    def test_stages_are_whole(self, raw):
        faults = wrong(pair(), change={"units.wash.stages": raw}, record=[GRADE])
        assert faults and "studies.proof.change" in faults[0]

    @pytest.mark.parametrize("raw", [
        [], [math.nan], [1.0, -2.0], {"from": 1.0, "to": 2.0}, {"from": 1.0, "to": 2.0, "count": 0}, {"to": 2.0, "count": 3},
        {"from": 1.0, "to": 1.0, "count": 2}, {"from": 1.0, "to": 2.0, "step": 0.0}, {"from": 1.0, "to": 2.0, "step": -0.1},
        {"from": 0.0, "to": 2.0, "count": 3, "spacing": "log"},
        {"from": 1.0, "to": 2.0, "count": 3, "step": 0.5}, {"from": 1.0, "to": 2.0, "count": 3, "spacing": "cubic"}, {"times": []},
        {"from": "1 kg", "to": "2 K", "count": 2}, "1 mol/s", {"from": 1.0, "to": 2.0, "count": 2, "stop": 4},
    ])  # fmt: skip
    def test_nonsense_is_a_fault(self, raw):
        faults = wrong(pair(), change={CIRCULATION: raw}, record=[GRADE])
        assert faults and all(fault.startswith("studies.proof.change") for fault in faults)

    def test_all_faults_at_once(self):
        change = {"units.top_up.hold.oli": [1.0], BLEED: [2.0]}
        faults = wrong(pair(), change=change, record=["streams.clean.fraction.solute"], hold=["no", "none"], purity={"limits": 3})
        for place in ("change", "record", "hold[0]", "hold[1]", "purity"):
            assert any(fault.startswith(f"studies.proof.{place}") for fault in faults), (place, faults)
        assert any("oli" in fault for fault in faults) and any(BLEED in fault for fault in faults)

    def test_lists_as_inputs(self):
        """An efficiency by stage is one value."""
        lists = [[0.5, 0.6, 0.7, 0.8, 0.9], [0.9] * 5]
        sheet = pair()
        units = {name: dict(unit) for name, unit in sheet.given["units"].items()}
        units["wash"]["efficiency"] = [1.0] * 5
        sheet = sheet.rebuilt(units=units)
        found = run(sheet, change={"units.wash.efficiency": lists, STEAM: [1.0, 1.5]}, record=[GRADE])
        assert [list(map(float, item.split())) for item in found["units.wash.efficiency"]] == [lists[0]] * 2 + [lists[1]] * 2
        for case, (item, steam) in enumerate(((lists[0], 1.0), (lists[0], 1.5), (lists[1], 1.0), (lists[1], 1.5))):
            alone = sheet.solve({"units.wash.efficiency": np.array([item]), STEAM: np.array([steam])})
            assert alone[GRADE][0] == close(found[GRADE][case], rel=1e-10)


    def test_faults_of_lists_say_where(self):
        sheet = pair()
        units = {name: dict(unit) for name, unit in sheet.given["units"].items()}
        units["wash"]["efficiency"] = [1.0] * 5
        lists = [[0.5] * 5, [0.5, 2.0, 0.5, 0.5, 0.5], [0.5] * 4]
        faults = wrong(sheet.rebuilt(units=units), change={"units.wash.efficiency": lists})
        where = 'studies.proof.change."units.wash.efficiency"'
        assert len(faults) == 2
        assert faults[0].startswith(f"{where}[1][1]: 2.0 is out of") and faults[1].startswith(f"{where}[2]: has 4 values")


class TestSamples:
    RANGES = {CIRCULATION: {"from": 1.0, "to": 3.0}, STEAM: {"from": 1.0, "to": 4.0, "spacing": "log"}}

    def shares(self, found):
        return np.column_stack([(found[CIRCULATION] - 1) / 2, np.log(found[STEAM]) / np.log(4)])

    @pytest.mark.parametrize("method", ["sobol", "halton", "latin", "random"])
    def test_same_seed_same_sample(self, method):
        def draw(**more):
            return run(pair(), change=self.RANGES, sample={"count": 200, "method": method, **more}, record=[GRADE])

        one, two, other = draw(seed=4), draw(seed=4), draw(seed=5)
        points = self.shares(one)
        assert np.array_equal(points, self.shares(two)) and np.array_equal(one[GRADE], two[GRADE])
        assert not np.array_equal(points, self.shares(other))
        assert len(one) == 200 and points.min() > 0 and points.max() < 1
        assert one[GRADE] == close(linear(0.3, bleed=0.01, oil=one[CIRCULATION], steam=one[STEAM])[3], rel=1e-9)
        # evenly: far less discrepancy than drawing freely leaves (about 1/M of it squared, against M^-2 times logarithms)
        free = [qmc.discrepancy(np.random.default_rng(seed).random((200, 2))) for seed in range(100)]
        gap = qmc.discrepancy(points)
        if method == "random":
            assert min(free) < gap < max(free)
        else:
            assert gap < {"sobol": 0.1, "halton": 0.1, "latin": 0.6}[method] * np.median(free)
        if method == "latin":
            for column in points.T:
                assert sorted(np.floor(200 * column).astype(int)) == list(range(200))

    def test_sobol_is_the_default(self):
        entries = {"change": self.RANGES, "record": [GRADE]}
        default = run(pair(), sample={"count": 64}, **entries)
        assert np.array_equal(default[GRADE], run(pair(), sample={"count": 64, "method": "sobol", "seed": 0}, **entries)[GRADE])
        cells = np.floor(8 * self.shares(default)).astype(int)  # a (0, 6, 2) net has one point in each cell of 8 x 8
        assert len({tuple(cell) for cell in cells}) == 64

    def test_order_of_inputs_is_no_matter_for_ranges(self):
        """Every input lies in its own range whatever stands before it."""
        found = run(pair(), change=dict(reversed(self.RANGES.items())), sample={"count": 50}, record=[GRADE])
        points = self.shares(found)
        assert points.min() > 0 and points.max() < 1

    def test_of_limits_with_purity(self):
        """Limits of requirements are drawn as inputs are, and each draw is looked at for what builds up."""
        change = {"requirements.outlet.equals": {"from": 1e-3, "to": 3e-3}, BLEED: {"from": 1e-3, "to": 0.1, "spacing": "log"}}
        sheet = demanding(gas={"tar": 3e-5}, components=["tar"])
        record = [GRADE, "requirements.outlet.free_value"]
        found = run(sheet, change=change, sample={"count": 40}, record=record, purity={"limits": {"tar": {"loading": 1e-3}}})
        good = found.converged
        assert good.sum() > 20 and found[GRADE][good] == close(found["requirements.outlet.equals"][good], rel=1e-9)
        oil, bleed = (found[key][good] for key in ("requirements.outlet.free_value", BLEED))
        assert found["purity.level.tar"][good] == close(3e-5 * (1 - bleed) / bleed / oil, rel=1e-9)

    def laws(self):
        mean, deviation = 2.0, 0.3
        width = math.sqrt(math.log1p((deviation / mean) ** 2))  # of a lognormal with this mean and deviation
        lognormal = scipy.stats.lognorm(width, scale=mean / math.sqrt(1 + (deviation / mean) ** 2))
        yield "5 %", scipy.stats.norm(OIL, 0.05 * OIL)
        yield "0.1 mol/s", scipy.stats.norm(OIL, 0.1)
        yield 0.1, scipy.stats.norm(OIL, 0.1)
        yield {"deviation": 0.2}, scipy.stats.norm(OIL, 0.2)
        yield {"shape": "normal", "mean": mean, "deviation": deviation}, scipy.stats.norm(mean, deviation)
        yield {"shape": "lognormal", "mean": mean, "deviation": deviation}, lognormal
        yield {"from": 1.5, "to": 2.8}, scipy.stats.uniform(1.5, 1.3)
        yield {"shape": "uniform", "from": "5.4 kmol/h", "to": 2.8}, scipy.stats.uniform(1.5, 1.3)
        yield {"from": 1.5, "to": 2.8, "spacing": "log"}, scipy.stats.loguniform(1.5, 2.8)
        yield {"shape": "triangular", "from": 1.5, "to": 2.8}, scipy.stats.triang((OIL - 1.5) / 1.3, 1.5, 1.3)

    def test_quantiles(self):
        """A latin sample of one input has a point in each of 400 equal shares of its law; a triangle peaks at the file's value."""
        for raw, law in self.laws():
            sample = {"count": 400, "method": "latin"}
            for change in ({"change": {CIRCULATION: raw}}, {"spread": {CIRCULATION: raw}}):
                if isinstance(raw, dict) and "spacing" in raw and "spread" in change:
                    continue
                found = run(pair(), sample=sample, record=[GRADE], **change)
                shares = np.sort(law.cdf(found[CIRCULATION]))
                assert len(shares) == 400, raw
                assert np.all(np.floor(400 * shares + 1e-7) >= np.arange(400)), raw
                assert np.all(np.ceil(400 * shares - 1e-7) <= np.arange(1, 401)), raw

    @pytest.mark.parametrize("raw", [
        {"shape": "normal", "from": 1.0, "to": 2.0}, {"shape": "uniform", "mean": 1.0, "deviation": 0.1}, {"from": 2.0, "to": 1.0},
        {"shape": "lognormal", "mean": -1.0, "deviation": 0.1}, {"shape": "normal", "mean": 1.0}, "-5 %", "5 K", {"shape": "bell"},
        {"shape": "normal", "mean": 1.0, "deviation": -0.1}, {"shape": "triangular", "from": 3.0, "to": 4.0},
    ])  # fmt: skip
    def test_nonsense_is_a_fault(self, raw):
        faults = wrong(pair(), spread={CIRCULATION: raw}, record=[GRADE])
        assert faults and all(fault.startswith("studies.proof.spread") for fault in faults)


class TestAnswers:
    """A case of a sweep is a solve of its own."""

    def compare(self, sheet, found, inputs):
        for case in range(len(found)):
            alone = sheet.solve({key: found[key][case] for key in inputs})
            assert alone.status == found.status[case]
            for address in found.study.record:
                assert found[address][case] == close(alone[address], rel=1e-10, abs=1e-16, nan_ok=True), (case, address)

    def test_of_a_requirement_over_limits(self):
        sheet = demanding()
        change = {"requirements.outlet.equals": [8e-4, 1e-3, 2e-3], STEAM: [1.5, 2.0, 3.0]}
        found = run(sheet, change=change, record=["requirements.outlet.free_value", GRADE, LEAN])
        self.compare(sheet, found, change)
        good = found.converged
        assert good.sum() >= 6 and found[GRADE][good] == close(found["requirements.outlet.equals"][good], rel=1e-9)
        closed = linear(0.3, bleed=0.01, oil=found["requirements.outlet.free_value"], steam=found[STEAM])[3]
        assert closed[good] == close(found[GRADE][good], rel=1e-9)

    def test_of_a_limit_that_holds_in_some_cases(self):
        sheet = demanding(sense="at_most", value=1.5e-3)
        change = {SOLUTE: [0.05, 0.2, 0.3, 0.35], "requirements.outlet.at_most": [1e-3, 4e-3]}
        found = run(sheet, change=change, record=["requirements.outlet.free_value", GRADE])
        self.compare(sheet, found, change)
        kept = found["requirements.outlet.free_value"] == OIL
        assert kept.any() and (~kept).any()

    def test_of_the_example(self):
        sheet = leanloop.read(VENT)
        change = {"units.wash.stages": [7, 12], "feeds.steam.flow": [0.018, 0.03], "units.trim.temperature": [299.0, 304.0]}
        found = leanloop.study(sheet, "proof", change=change, purity=False).run()
        self.compare(sheet, found, change)

    def test_with_purity(self):
        """What purity looks at changes nothing in what is recorded."""
        sheet = demanding(gas={"tar": 3e-5}, components=["tar"])
        change = {STEAM: [2.0, 2.6], BLEED: [1e-3, 0.1]}
        record = ["requirements.outlet.free_value", GRADE]
        plain, pure = run(sheet, change=change, record=record), run(sheet, change=change, record=record, purity=True)
        self.compare(sheet, pure, change)
        for address in record:
            assert np.array_equal(plain[address], pure[address])

    def test_permuted(self):
        rng = np.random.default_rng(3)
        values = [{STEAM: rng.uniform(0.6, 3.0, 40), SOLUTE: rng.uniform(0.1, 0.6, 40), BLEED: rng.uniform(0, 0.3, 40)}]
        order = rng.permutation(40)
        moved = [{key: item[order] for key, item in values[0].items()}]
        record = ["requirements.outlet.free_value", GRADE, LEAN]
        one, two = (run(demanding(), change=change, record=record) for change in (values, moved))
        assert [one.status[place] for place in order] == two.status and len(one.counts) > 1
        for address in record:
            assert two[address] == close(one[address][order], rel=1e-10, nan_ok=True)

    def test_in_several_batches(self):
        """More cases than one batch holds, each in its place."""
        count = 9000
        change = {STEAM: {"from": 1.0, "to": 2.0, "count": count}}
        study = leanloop.study(pair(), "proof", change=change, record=[LEAN], purity=False)
        assert study.batch < count
        told = []
        found = study.run(progress=lambda *news: told.append(news))
        assert [news[1] for news in told][-1] == count and len([news for news in told if news[1]]) == -(-count // study.batch)
        steam = np.linspace(1.0, 2.0, count)
        assert found[STEAM] == close(steam, rel=1e-14) and found[LEAN] == close(linear(0.3, bleed=0.01, steam=steam)[0], rel=1e-9)


class TestFailedCases:
    def test_no_way_out_in_one_case(self):
        sheet = pair(gas={"tar": 3e-5}, components=["tar"])
        found = run(sheet, change={BLEED: [0.1, 0.0, 0.2]}, record=[GRADE])
        assert found.status == ["converged", "no_steady_state", "converged"] and not found.reached
        assert "leave" in found["status_text"][1] and found["status_text"][1].endswith(".") and np.isnan(found[GRADE][1])
        assert found[GRADE][[0, 2]] == close(linear(0.3, bleed=np.array([0.1, 0.2]))[3], rel=1e-9)
        assert "no_steady_state" in str(found)

    def test_no_way_out_in_any_case(self):
        """All cases without bleed are statuses as well: what is a sweep's row is no fault of the file."""
        sheet = pair(gas={"tar": 3e-5}, components=["tar"])
        found = run(sheet, change={BLEED: [0.0], STEAM: [1.0, 2.0]}, record=[GRADE])
        assert found.status == ["no_steady_state"] * 2 and found.counts == {"no_steady_state": 2}
        assert np.isnan(found[GRADE]).all()
        str(found)

    def test_out_of_reach(self):
        """No circulation below the bound cleans the gas of the second case: A = 1 at 1.5 mol/s."""
        sheet = demanding(value=1e-3, between=(0.5, 2.5))
        change = {SOLUTE: [0.1, 3.0, 0.15], STEAM: [2.5]}
        found = run(sheet, change=change, record=["requirements.outlet.free_value", GRADE])
        assert found.status == ["converged", "out_of_reach", "converged"]
        alone = sheet.solve({SOLUTE: 3.0, STEAM: 2.5})
        assert alone.status == "out_of_reach" and found["status_text"][1] == alone.status_text
        assert found[GRADE][[0, 2]] == close(1e-3, rel=1e-9) and found[GRADE][1] == close(alone[GRADE], rel=1e-8)

    def test_several_kinds_at_once(self):
        sheet = demanding(value=1e-3, between=(0.5, 2.5), gas={"tar": 1e-5}, components=["tar"])
        change = [{SOLUTE: [0.1, 3.0, 0.12, 0.1, 0.1], BLEED: [0.01, 0.01, 0.0, 0.02, 0.5], STEAM: [2.5, 2.5, 2.5, 2.5, 0.0]}]
        found = run(sheet, change=change, record=[GRADE], purity=True)
        assert found.status[:4] == ["converged", "out_of_reach", "no_steady_state", "converged"]
        assert found.status[4] != "converged"
        assert found[GRADE][[0, 3]] == close(1e-3, rel=1e-9)
        assert found.counts["converged"] == 2 and list(found.converged) == [True, False, False, True, False]
        assert all(bool(text) != good for text, good in zip(found["status_text"], found.converged))
        assert found["purity.build_up.tar"][[0, 3]] == close([100.0, 50.0], rel=1e-9)
        assert np.isnan(found["purity.build_up.tar"][2])


class TestEntries:
    def test_hold_nothing(self):
        """The circulation stays as written, and nothing of the requirement is recorded."""
        found = run(demanding(), change={STEAM: [1.0, 1.6]}, hold=[])
        assert found[GRADE.replace("ratio", "fraction")].shape == (2,)
        assert not any(key.startswith("requirements") for key in found.to_dict()["cases"])
        found = run(demanding(), change={STEAM: [1.0, 1.6]}, hold=[], record=[GRADE])
        assert found[GRADE] == close(linear(0.3, bleed=0.01, steam=np.array([1.0, 1.6]))[3], rel=1e-9)

    def test_hold_one_of_two(self):
        bleed = {"quantity": "streams.lean.loading.tar", "equals": 1e-3, "free": BLEED, "between": [1e-5, 0.5]}
        outlet = {"quantity": GRADE, "equals": 1e-3, "free": CIRCULATION, "between": [0.8, 2.9]}
        sheet = pair(gas={"tar": 3e-5}, components=["tar"], requirements={"outlet": outlet, "tar": bleed})
        found = run(sheet, change={STEAM: [2.0, 2.5]}, hold=["tar"], record=[GRADE, "streams.lean.loading.tar"])
        assert found["streams.lean.loading.tar"] == close(1e-3, rel=1e-9)
        needed = 3e-5 / (3e-5 + 1e-3 * OIL)
        assert found[GRADE] == close(linear(0.3, bleed=needed, steam=np.array([2.0, 2.5]))[3], rel=1e-9)

    def test_default_record(self):
        """What requirements free, outlets, lean loadings, make-up; duties where there are some."""
        keys = set(run(demanding(), change={STEAM: [2.0]}).to_dict()["cases"])
        assert "requirements.outlet.free_value" in keys and "units.top_up.results.added_mol_s.oil" in keys
        assert any(key.startswith("streams.cleaned.") for key in keys)
        assert any(".loading.solute" in key for key in keys)
        sulfur = leanloop.read(VENT.with_name("sulfur_dioxide_loop.toml"))
        record = leanloop.study(sulfur, "proof", change={"units.trim.temperature": [310.0]}).record
        assert "units.strip.results.reboiler_duty_W" in record and "units.trim.results.duty_W" in record

    def test_purity_looks_by_itself(self):
        """Something that builds up is looked at unless it is said not to."""
        sheet = pair(gas={"tar": 3e-5}, components=["tar"])
        found = leanloop.study(sheet, "proof", change={BLEED: [0.1]}).run()
        assert found["purity.build_up.tar"][0] == close(10.0, rel=1e-9)
        with pytest.raises(KeyError):
            run(sheet, change={BLEED: [0.1]})["purity.build_up.tar"]

    def test_a_study_without_a_change(self):
        """`leanloop.study` needs something to do."""
        faults = wrong(pair(), record=[GRADE])
        assert faults and faults[0].startswith("studies.proof")


class TestFiles:
    def read_csv(self, path):
        with path.open(newline="", encoding="utf-8") as lines:
            rows = list(csv.reader(lines))
        return {name: [row[place] for row in rows[1:]] for place, name in enumerate(rows[0])}

    def test_csv_sqlite_and_findings_agree(self, tmp_path, capsys):
        from leanloop.cli import main

        source = VENT.read_text(encoding="utf-8").split("[studies.")[0] + """
[studies.proof]
change = { "units.divide.shares.bleed" = [1e-3, 0.0, 0.1], "feeds.steam.flow" = ["70 kg/h", "90 kg/h"] }
purity = { limits = { resin = { mass_fraction = 0.02 } }, inventory = "2 t" }
"""
        path = tmp_path / "vent.toml"
        path.write_text(source, encoding="utf-8")
        found = leanloop.study(leanloop.read(path)).run()
        code = main(["study", str(path), "proof", "--out", str(tmp_path / "out")])
        capsys.readouterr()
        assert code == 1  # no steady state in two cases
        told = self.read_csv(tmp_path / "out" / "proof.csv")
        again = leanloop.study(leanloop.read(path)).run(tmp_path / "out")
        base = sqlite3.connect(tmp_path / "out" / "proof.sqlite")
        names = [row[0] for row in base.execute("select name from sqlite_master where type = 'table' or type = 'view'")]
        assert names
        texts = ("status", "status_text", "purity.bleed_status.resin", "clean.status")
        columns = found.to_dict()["cases"]
        assert set(told) == set(columns) and len(told["case"]) == 6
        for name, values in columns.items():
            assert again.to_dict()["cases"][name] == values, name
            for mine, text in zip(values, told[name]):
                if name in texts:
                    assert (mine or "") == text
                else:
                    assert (mine is None and text == "") or float(text) == mine, (name, mine, text)
        stored = [name for name in names if {"case", "status"} <= {row[1] for row in base.execute(f'pragma table_info("{name}")')}]
        assert stored
        cursor = base.execute(f'select * from "{stored[0]}" order by "case"')
        heads = [item[0] for item in cursor.description]
        rows = cursor.fetchall()
        base.close()
        for name, values in columns.items():
            assert [row[heads.index(name)] for row in rows] == values, name

    def test_times_of_the_curve(self, tmp_path):
        sheet = pair(gas={"tar": 3e-5}, components=["tar"])
        study = leanloop.study(sheet, "proof", change={BLEED: [0.1, 0.01]}, purity={"inventory": "8 kmol"})
        kept, plain = study.run(tmp_path), study.run()
        for name, values in plain.curves.items():
            assert np.array_equal(np.asarray(values), np.asarray(kept.curves[name]))
