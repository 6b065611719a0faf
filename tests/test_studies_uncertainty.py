"""Uncertainty: linear Gaussian loops in closed form by both routes, curved ones where the routes part, margins, failures."""

import math

import numpy as np
import pytest
import scipy.stats
from study_scenes import GAS, K_COLD, K_HOT, OIL, STEAM, linear, pair

import leanloop
from leanloop.errors import InputError

SOLUTE, BROUGHT, CIRCULATION = "feeds.vent.flows.solute", "feeds.steam.flows.solute", "units.top_up.hold.oil"
GRADE = "streams.cleaned.ratio.solute"
STEAM_RATE = "feeds.steam.flows.steam"
MEANS = {SOLUTE: 0.3, BROUGHT: 0.03}
DEVIATIONS = {SOLUTE: 0.03, BROUGHT: 8e-3}
Z95 = 1.6448536269514722  # of the normal law
close = pytest.approx


def grade(solute=0.3, brought=0.03, oil=OIL, steam=STEAM, K=(K_COLD, K_HOT)):
    return linear(solute, brought / steam, 0.0, 0.01, oil, steam, K=K)[3]


def loop(sense="at_most", value=2.2e-3, free=CIRCULATION, between=(0.6, 2.9), quantity=GRADE, **more):
    item = {"quantity": quantity, sense: value, "free": free, "between": list(between)}
    return pair(steam={"solute": 0.03}, requirements={"outlet": item}, **more)


def told(sheet, **entries):
    entries.setdefault("record", [GRADE])
    return leanloop.study(sheet, "proof", **entries).run()


def slopes():
    """The loop is linear in what comes in, so that differences are derivatives."""
    zero = grade(0.0, 0.0)
    assert zero == 0
    return {SOLUTE: grade(1.0, 0.0), BROUGHT: grade(0.0, 1.0)}


def law():
    """Mean, deviation and shares of the grade."""
    parts = {key: (slope * DEVIATIONS[key]) ** 2 for key, slope in slopes().items()}
    total = sum(parts.values())
    return grade(), math.sqrt(total), {key: part / total for key, part in parts.items()}


class TestLinearGaussian:
    def sheet(self, **more):
        return loop(**more)

    def entries(self, **more):
        return {"spread": dict(DEVIATIONS), "record": [GRADE], **more}

    def test_first_order(self):
        mean, deviation, shares = law()
        assert 0.1 < shares[BROUGHT] < 0.9  # both matter, or the test is none
        limit = mean + 0.7 * deviation
        found = told(self.sheet(value=limit), **self.entries(sample={"count": 16})).uncertainty
        first = found["quantities"][GRADE]["first_order"]
        assert found["quantities"][GRADE]["base"] == close(mean, rel=1e-9)
        assert first["mean"] == close(mean, rel=1e-9) and first["deviation"] == close(deviation, rel=1e-9)
        assert first["shares"] == close(shares, rel=1e-9)
        item = found["requirements"]["outlet"]
        assert item["meets"] == "at_most" and item["limit"] == limit
        assert item["first_order"] == close(scipy.stats.norm.cdf(0.7), rel=1e-7)

    @pytest.mark.parametrize("method, tight", [("random", 1.0), ("sobol", 0.05), ("latin", 0.5), ("halton", 0.1)])
    def test_sampled(self, method, tight):
        """Within four standard errors of a free sample of 4096; the even ones within a part of that."""
        mean, deviation, shares = law()
        count = 4096
        sheet = self.sheet(value=mean + 0.7 * deviation)
        found = told(sheet, **self.entries(sample={"count": count, "method": method, "seed": 11}))
        assert found.counts == {"converged": count}
        sampled = found.uncertainty["quantities"][GRADE]["sampled"]
        assert sampled["solved"] == count
        assert abs(sampled["mean"] - mean) < 4 * tight * deviation / math.sqrt(count)
        assert abs(sampled["deviation"] / deviation - 1) < 4 * max(tight, 0.1) / math.sqrt(2 * count)
        for key, share in shares.items():
            assert sampled["shares"][key] == close(share, abs=0.05 if method == "random" else 0.01)
        assert sampled["rest"] == close(0.0, abs=0.005)
        for part, value in sampled["quantiles"].items():
            own = scipy.stats.norm.ppf(int(part) / 100)
            error = math.sqrt(int(part) / 100 * (1 - int(part) / 100) / count) / scipy.stats.norm.pdf(own)
            assert abs((value - mean) / deviation - own) < 4 * error
        p = scipy.stats.norm.cdf(0.7)
        assert abs(found.uncertainty["requirements"]["outlet"]["sampled"] - p) < 4 * math.sqrt(p * (1 - p) / count)
        # every case is the closed form of its own inputs, and the summary is that of the cases
        assert found[GRADE] == close(grade(found[SOLUTE], found[BROUGHT]), rel=1e-9)
        assert sampled["mean"] == close(found[GRADE].mean(), rel=1e-12)
        assert sampled["deviation"] == close(found[GRADE].std(ddof=1), rel=1e-10)
        met = np.mean(found[GRADE] <= mean + 0.7 * deviation)
        assert found.uncertainty["requirements"]["outlet"]["sampled"] == met

    @pytest.mark.parametrize("confidence", [0.95, 0.8, 0.99])
    def test_margin_on_a_linear_input(self, confidence):
        """With a stripping gas cleaner by (L - mean - z sigma)/slope; in the sample by its own quantile."""
        deviation = slopes()[SOLUTE] * DEVIATIONS[SOLUTE]
        limit = grade() + 0.2 * deviation
        sheet = self.sheet(value=limit)
        found = told(sheet, spread={SOLUTE: DEVIATIONS[SOLUTE]}, margin=[BROUGHT], confidence=confidence)
        margin = found.uncertainty["requirements"]["outlet"]["margins"][BROUGHT]
        needed = MEANS[BROUGHT] + (0.2 - scipy.stats.norm.ppf(confidence)) * deviation / slopes()[BROUGHT]
        assert needed > 0
        assert margin["at"] == MEANS[BROUGHT] and margin["first_order"] == close(needed, rel=1e-7)
        ordered = np.sort(found[GRADE])
        worst = ordered[math.ceil(confidence * len(ordered) - 1e-9) - 1]  # the last of those that are to meet it
        assert margin["sampled"] == close(MEANS[BROUGHT] + (limit - worst) / slopes()[BROUGHT], rel=2e-3)
        assert margin["sampled"] == close(needed, rel=0.02)
        assert margin["reason"] is None and margin["probability"] >= confidence
        for factor, enough in ((1.0, True), (0.99, False)):
            moved = MEANS[BROUGHT] + factor * (margin["sampled"] - MEANS[BROUGHT])
            met = np.mean(sheet.rebuilt(requirements={}).solve({SOLUTE: found[SOLUTE], BROUGHT: moved})[GRADE] <= limit)
            assert (met >= confidence) == enough, (factor, met)

    def test_margin_beyond_what_an_input_can_be(self):
        """A stripping gas cleaner than clean is no answer, not to first order either."""
        deviation = slopes()[SOLUTE] * 0.1
        assert slopes()[BROUGHT] * MEANS[BROUGHT] < Z95 * deviation
        found = told(self.sheet(value=grade()), spread={SOLUTE: 0.1}, margin=[BROUGHT])
        margin = found.uncertainty["requirements"]["outlet"]["margins"][BROUGHT]
        assert math.isnan(margin["first_order"]) and math.isnan(margin["sampled"]) and margin["reason"]
        assert 0 < margin["best"] < MEANS[BROUGHT] and 0.5 < margin["probability"] < 0.95
        assert margin["reason"] in str(found)

    def test_likely_enough_as_it_is(self):
        """No margin is needed, none is taken."""
        mean, deviation, _ = law()
        found = told(self.sheet(value=mean + 3 * deviation), **self.entries(margin=[CIRCULATION])).uncertainty
        margin = found["requirements"]["outlet"]["margins"][CIRCULATION]
        assert margin["at"] == margin["first_order"] == margin["sampled"] == OIL and margin["probability"] > 0.99

    def test_at_least(self):
        """A removal of 1 - Y_out/Y_f, of stripping gas and oil alone spread; linear in what the stripping gas brings."""
        quantity = "units.wash.results.removal.solute"
        removal = 1 - grade() / (0.3 / GAS)
        deviation = slopes()[BROUGHT] * DEVIATIONS[BROUGHT] / (0.3 / GAS)
        limit = removal - 0.5 * deviation
        sheet = self.sheet(sense="at_least", value=limit, quantity=quantity)
        found = told(sheet, spread={BROUGHT: DEVIATIONS[BROUGHT]}, record=[quantity], margin=[BROUGHT])
        item = found.uncertainty["requirements"]["outlet"]
        assert item["meets"] == "at_least" and item["first_order"] == close(scipy.stats.norm.cdf(0.5), rel=1e-6)
        assert item["sampled"] == close(scipy.stats.norm.cdf(0.5), abs=2 / 1024)
        first = found.uncertainty["quantities"][quantity]["first_order"]
        assert first["deviation"] == close(deviation, rel=1e-9) and first["shares"] == {BROUGHT: close(1.0)}
        # an input that is spread itself is scaled with its spread: k (mean + z sigma) = mean + sigma/2
        needed = MEANS[BROUGHT] * (MEANS[BROUGHT] + 0.5 * DEVIATIONS[BROUGHT]) / (MEANS[BROUGHT] + Z95 * DEVIATIONS[BROUGHT])
        assert item["margins"][BROUGHT]["first_order"] == close(needed, rel=1e-6)
        assert item["margins"][BROUGHT]["sampled"] == close(needed, rel=0.01)

    @pytest.mark.parametrize("meets", [None, "at_most", "at_least"])
    def test_equals(self, meets):
        """Designed to meet the limit exactly: as likely as not."""
        limit = 1.8e-3
        sheet = self.sheet(sense="equals", value=limit)
        more = {"meets": {"outlet": meets}} if meets else {}
        found = told(sheet, **self.entries(margin=[BROUGHT], **more))
        item = found.uncertainty["requirements"]["outlet"]
        oil = found.uncertainty["design"][CIRCULATION]
        assert grade(oil=oil) == close(limit, rel=1e-9) and np.all(found[CIRCULATION] == oil)
        assert item["meets"] == (meets or "at_most") and item["first_order"] == close(0.5, abs=1e-6)
        assert item["sampled"] == close(0.5, abs=4 * math.sqrt(0.25 / 1024))
        # then nothing is solved for: the plant stays as it is
        assert found[GRADE] == close(grade(found[SOLUTE], found[BROUGHT], oil), rel=1e-9)
        slope = {key: grade(*(float(key == name) for name in MEANS), oil=oil) for key in MEANS}
        own = {key: slope[key] * DEVIATIONS[key] for key in slope}
        margin = item["margins"][BROUGHT]
        # what the stripping gas brings is scaled by k with its spread: sign b (k - 1) = z hypot(a, c k)
        b, a, c = slope[BROUGHT] * MEANS[BROUGHT], Z95 * own[SOLUTE], Z95 * own[BROUGHT]
        sign = 1 if meets == "at_least" else -1
        k = (b**2 + sign * math.sqrt(b**4 - (b**2 - c**2) * (b**2 - a**2))) / (b**2 - c**2)
        assert sign * b * (k - 1) == close(math.hypot(a, c * k), rel=1e-12)
        assert margin["first_order"] == close(MEANS[BROUGHT] * k, rel=1e-6)
        assert margin["sampled"] == close(MEANS[BROUGHT] * k, rel=0.03)
        assert margin["probability"] >= 0.95 and margin["reason"] is None

    def test_equal_removal_is_good_above(self):
        sheet = self.sheet(sense="equals", value=0.8, quantity="units.wash.results.removal.solute")
        found = told(sheet, **self.entries(record=["units.wash.results.removal.solute"]))
        assert found.uncertainty["requirements"]["outlet"]["meets"] == "at_least"

    def test_default_margin_is_the_freed_input(self):
        found = told(self.sheet(sense="equals", value=1.8e-3), **self.entries())
        margins = found.uncertainty["requirements"]["outlet"]["margins"]
        assert list(margins) == [CIRCULATION]
        oil = found.uncertainty["design"][CIRCULATION]
        h = 1e-4 * oil
        slope = (8 * (grade(oil=oil + h) - grade(oil=oil - h)) - grade(oil=oil + 2 * h) + grade(oil=oil - 2 * h)) / (12 * h)
        deviation = math.hypot(*(grade(*(float(key == name) for name in MEANS), oil=oil) * DEVIATIONS[key] for key in MEANS))
        assert margins[CIRCULATION]["first_order"] == close(oil - Z95 * deviation / slope, rel=1e-6)
        sampled = margins[CIRCULATION]["sampled"]
        met = np.mean(grade(found[SOLUTE], found[BROUGHT], oil=sampled) <= 1.8e-3)
        less = np.mean(grade(found[SOLUTE], found[BROUGHT], oil=oil + 0.99 * (sampled - oil)) <= 1.8e-3)
        assert met >= 0.95 > less and margins[CIRCULATION]["probability"] == close(met, abs=1e-12)

    def test_first_order_of_inputs_spread_by_ends(self):
        """Deviations of a uniform law are (b - a)/sqrt 12, of a triangle sqrt((a2 + b2 + c2 - ab - ac - bc)/18)."""
        spread = {SOLUTE: {"from": 0.25, "to": 0.35}, BROUGHT: {"shape": "triangular", "from": 0.02, "to": 0.05}}
        found = told(loop(value=5e-3), spread=spread).uncertainty["quantities"][GRADE]
        parts = {SOLUTE: 0.1**2 / 12, BROUGHT: scipy.stats.triang(1 / 3, 0.02, 0.03).var()}
        variance = sum(slopes()[key] ** 2 * part for key, part in parts.items())
        assert found["first_order"]["deviation"] == close(math.sqrt(variance), rel=1e-9)
        assert found["first_order"]["shares"][SOLUTE] == close(slopes()[SOLUTE] ** 2 * parts[SOLUTE] / variance, rel=1e-9)
        # means are those of the laws, 0.3 and 0.1/3, to which a linear answer goes
        assert found["first_order"]["mean"] == close(grade(0.3, 0.1 / 3), rel=1e-9)
        assert found["sampled"]["mean"] == close(grade(0.3, 0.1 / 3), rel=1e-4)
        assert found["sampled"]["deviation"] == close(math.sqrt(variance), rel=2e-3)

    def test_scale(self):
        """Twice the spread is twice the deviation, and the shares stay."""
        one, two = (
            told(loop(value=5e-3), spread={key: times * item for key, item in DEVIATIONS.items()}).uncertainty["quantities"][GRADE]
            for times in (0.5, 1.0)
        )
        for route in ("first_order", "sampled"):
            assert two[route]["deviation"] == close(2 * one[route]["deviation"], rel=1e-8)
            for key in DEVIATIONS:
                assert two[route]["shares"][key] == close(one[route]["shares"][key], rel=1e-6)

    def test_order_of_inputs(self):
        turned = told(loop(value=5e-3), spread=dict(reversed(DEVIATIONS.items()))).uncertainty["quantities"][GRADE]
        straight = told(loop(value=5e-3), spread=DEVIATIONS).uncertainty["quantities"][GRADE]
        assert turned["first_order"]["deviation"] == close(straight["first_order"]["deviation"], rel=1e-12)
        assert turned["first_order"]["shares"] == close(straight["first_order"]["shares"], rel=1e-9)
        assert turned["sampled"]["shares"] == close(straight["sampled"]["shares"], abs=0.01)


class TestCurved:
    """Where the routes have to part, they do as they must."""

    def test_product(self):
        """Flow times fraction: sigma^2 = a^2 s_b^2 + b^2 s_a^2 + s_a^2 s_b^2, of which the last is that of both together."""
        sheet = pair()
        feeds = {name: dict(feed) for name, feed in sheet.given["feeds"].items()}
        feeds["vent"] = {"phase": "gas", "temperature": 300.0, "pressure": 1.1e5, "flow": 30.0,
                         "fractions": {"air": "rest", "solute": 0.02}}  # fmt: skip
        quantity, a, b, s = "streams.vent.mol_s.solute", "feeds.vent.flow", "feeds.vent.fractions.solute", 0.2
        found = told(sheet.rebuilt(feeds=feeds), spread={a: "20 %", b: "20 %"}, record=[quantity], sample={"count": 4096})
        item = found.uncertainty["quantities"][quantity]
        assert found[quantity] == close(found[a] * found[b], rel=1e-12)
        assert item["first_order"]["mean"] == close(0.6, rel=1e-12)
        assert item["first_order"]["deviation"] == close(0.6 * s * math.sqrt(2), rel=1e-9)
        assert item["first_order"]["shares"] == close({a: 0.5, b: 0.5}, rel=1e-9)
        assert item["sampled"]["mean"] == close(0.6, rel=1e-3)
        assert item["sampled"]["deviation"] == close(0.6 * s * math.sqrt(2 + s**2), rel=3e-3)
        together = s**2 / (2 + s**2)
        assert item["sampled"]["rest"] == close(together, rel=0.05)
        assert item["sampled"]["shares"] == close({a: (1 - together) / 2, b: (1 - together) / 2}, abs=0.005)

    def test_curved_in_one_input(self):
        """Circulation at its best: nothing to first order, all of second: mean above by f'' s^2/2 and about f'' s^2/sqrt 2 wide."""
        rates = np.linspace(1.0, 3.0, 20001)
        best = rates[grade(oil=rates).argmin()]
        h = 1e-3
        curvature = (grade(oil=best + h) - 2 * grade(oil=best) + grade(oil=best - h)) / h**2
        s = 0.05
        sheet = pair(steam={"solute": 0.03}, hold={"oil": float(best)})
        found = told(sheet, spread={CIRCULATION: s}, sample={"count": 4096}).uncertainty["quantities"][GRADE]
        nodes, weights = np.polynomial.hermite_e.hermegauss(24)
        values, weights = grade(oil=best + s * nodes), weights / weights.sum()
        mean = weights @ values
        deviation = math.sqrt(weights @ (values - mean) ** 2)
        assert found["sampled"]["mean"] == close(mean, rel=1e-5) and found["sampled"]["deviation"] == close(deviation, rel=0.02)
        assert mean - grade(oil=best) == close(curvature * s**2 / 2, rel=0.1)
        assert deviation == close(curvature * s**2 / 2**0.5, rel=0.2)
        assert found["first_order"]["mean"] == close(grade(oil=best), rel=1e-9)
        assert found["first_order"]["deviation"] < 0.02 * deviation
        assert found["sampled"]["shares"][CIRCULATION] == close(1.0, abs=0.01)  # a curve in it alone is its own

    def test_lognormal(self):
        """What is proportional to a lognormal input is lognormal, with the same variation."""
        mean, deviation = 0.3, 0.12
        limit = 2 * grade(0.3, 0.0)
        item = {"quantity": GRADE, "at_most": limit, "free": CIRCULATION, "between": [0.6, 2.9]}
        found = told(pair(requirements={"outlet": item}), sample={"count": 4096},
                     spread={SOLUTE: {"shape": "lognormal", "mean": mean, "deviation": deviation}})
        width = math.sqrt(math.log1p((deviation / mean) ** 2))
        own = scipy.stats.lognorm(width, scale=grade(mean, 0.0) * math.exp(-(width**2) / 2))
        answer, met = found.uncertainty["quantities"][GRADE], found.uncertainty["requirements"]["outlet"]
        for route in ("first_order", "sampled"):
            assert answer[route]["mean"] == close(own.mean(), rel=1e-3) and answer[route]["deviation"] == close(own.std(), rel=5e-3)
        for part, value in answer["sampled"]["quantiles"].items():
            assert value == close(own.ppf(int(part) / 100), rel=2e-3)
        assert met["first_order"] == close(scipy.stats.norm.cdf(mean / deviation), rel=1e-6)
        assert met["sampled"] == close(own.cdf(limit), abs=1 / 1024)
        assert abs(met["sampled"] - met["first_order"]) > 0.01
        assert np.all(found[SOLUTE] > 0)

    def test_temperature(self):
        """K falls with temperature in the wash; slope by differences of solves, mean and deviation by quadrature."""
        tables = {
            "cold": {"solute": {"model": "henry", "constant": 6e3, "slope": 3800.0, "at": 298.15}},
            "hot": {"solute": {"model": "constant", "K": 1.9}},
        }
        sheet = pair(equilibrium=tables, basis=None)
        key, s = "units.wash.temperature", 3.0
        found = told(sheet, spread={key: "3 K"}, sample={"count": 2048}).uncertainty["quantities"][GRADE]

        def at(*offsets):
            return sheet.solve({key: 300.0 + np.array(offsets)})[GRADE]

        h = 0.4
        near = at(-2 * h, -h, h, 2 * h)
        slope = (8 * (near[2] - near[1]) - near[3] + near[0]) / (12 * h)
        assert found["first_order"]["deviation"] == close(abs(slope) * s, rel=1e-5)
        nodes, weights = np.polynomial.hermite_e.hermegauss(16)
        values, weights = at(*(s * nodes)), weights / weights.sum()
        mean = weights @ values
        assert found["sampled"]["mean"] == close(mean, rel=2e-4)
        assert found["sampled"]["deviation"] == close(math.sqrt(weights @ (values - mean) ** 2), rel=5e-3)
        assert found["base"] == close(at(0.0)[0], rel=1e-10)


class TestMarginsOfCurvedLoops:
    def test_out_of_reach(self):
        """At the best circulation, so that no other would do; the report says so with the best there is."""
        rates = np.linspace(1.0, 3.0, 20001)
        best = float(rates[grade(oil=rates).argmin()])
        sheet = loop(value=1.001 * grade(oil=best), hold={"oil": best})
        found = told(sheet, spread={SOLUTE: "10 %"}, margin=[CIRCULATION])
        item = found.uncertainty["requirements"]["outlet"]
        margin = item["margins"][CIRCULATION]
        assert item["sampled"] == close(0.5, abs=0.03)
        assert math.isnan(margin["sampled"]) and margin["reason"]
        assert margin["best"] == close(best, rel=0.05)
        assert margin["reason"] in str(found)

    def test_two_margins_and_two_requirements(self):
        """Each margin alone makes its own requirement as likely as asked."""
        tar = {"quantity": "streams.lean.loading.tar", "equals": 2e-3, "free": "units.divide.shares.spent", "between": [1e-4, 0.9]}
        outlet = {"quantity": GRADE, "equals": 1.8e-3, "free": CIRCULATION, "between": [0.6, 2.9]}
        sheet = pair(gas={"tar": 3e-5}, steam={"solute": 0.03}, components=["tar"], requirements={"outlet": outlet, "tar": tar})
        spread = {SOLUTE: "8 %", "feeds.vent.flows.tar": "10 %"}
        found = told(sheet, spread=spread, margin=[CIRCULATION, "units.divide.shares.spent", STEAM_RATE])
        told_of, free = found.uncertainty["requirements"], sheet.rebuilt(requirements={})
        changes = {key: found[key] for key in (*spread, CIRCULATION, "units.divide.shares.spent")}
        checked = 0
        for name, item in told_of.items():
            for key, margin in item["margins"].items():
                if margin["reason"] is not None:
                    continue
                quantity = {"outlet": GRADE, "tar": "streams.lean.loading.tar"}[name]
                limit = {"outlet": 1.8e-3, "tar": 2e-3}[name]
                met = []
                for factor in (1.0, 0.99):
                    moved = margin["at"] + factor * (margin["sampled"] - margin["at"])
                    met.append(np.mean(free.solve({**changes, key: moved})[quantity] <= limit * (1 + 1e-12)))
                assert met[0] >= 0.95 > met[1], (name, key, met)
                checked += 1
        assert checked >= 4
        # the bleed that keeps X: p = f/(f + X S), so that the margin is that of the worst tar of 95 %
        oil = found.uncertainty["design"][CIRCULATION]
        worst = np.sort(found["feeds.vent.flows.tar"])[math.ceil(0.95 * len(found)) - 1]
        assert told_of["tar"]["margins"]["units.divide.shares.spent"]["sampled"] == close(worst / (worst + 2e-3 * oil), rel=1e-3)


class TestFailures:
    def test_unsolved_cases_do_not_meet(self):
        """The curve ends at X = 0.2: beyond it a case has no answer, and meets nothing."""
        tables = {
            "cold": {"solute": {"model": "table", "X": [0.0, 0.1, 0.2], "Y": [0.0, 0.005, 0.01]}},
            "hot": {"solute": {"model": "constant", "K": 1.9, "basis": "ratio"}},
        }
        item = {"quantity": GRADE, "at_most": 1.0, "free": CIRCULATION, "between": [0.6, 2.9]}
        sheet = pair(equilibrium=tables, requirements={"outlet": item})
        assert linear(0.3, bleed=0.01)[2] < 0.2
        found = told(sheet, spread={SOLUTE: "25 %"}, margin=[CIRCULATION])
        bad = found.counts["off_table"]
        assert 20 < bad < 900 and found.counts == {"converged": 1024 - bad, "off_table": bad}
        met, answer = found.uncertainty["requirements"]["outlet"], found.uncertainty["quantities"][GRADE]
        assert met["sampled"] == (1024 - bad) / 1024 and met["first_order"] == close(1.0)
        assert answer["sampled"]["solved"] == 1024 - bad and found.uncertainty["failed"] == bad
        good = found.converged
        assert found[GRADE][good] == close(linear(found[SOLUTE][good], bleed=0.01)[3], rel=1e-8)
        assert answer["sampled"]["mean"] == close(found[GRADE][good].mean(), rel=1e-12)
        # with more oil the rich end stays on the curve
        margin = met["margins"][CIRCULATION]
        assert margin["first_order"] == OIL < margin["sampled"] and margin["reason"] is None
        rich = linear(found[SOLUTE], bleed=0.01, oil=margin["sampled"])[2]
        assert margin["probability"] == np.mean(rich <= 0.2) >= 0.95

    def test_base_out_of_reach(self):
        found = told(loop(sense="equals", value=1e-5), spread=DEVIATIONS)
        assert found.uncertainty["status"] == "out_of_reach" and not found.reached
        assert not found.uncertainty["quantities"] and "out_of_reach" in str(found)

    def test_a_spread_without_effect(self):
        """Nothing varies: no share, no warning."""
        found = told(loop(value=5e-3), spread={"feeds.vent.pressure": "1 %"}).uncertainty
        item = found["quantities"][GRADE]
        assert item["first_order"]["deviation"] == close(0.0, abs=1e-12)
        assert found["requirements"]["outlet"]["first_order"] == found["requirements"]["outlet"]["sampled"] == 1.0

    def test_freed_input_is_spread_only_where_nothing_frees_it(self):
        sheet = loop(sense="equals", value=1.8e-3)
        with pytest.raises(InputError, match="freed by requirement outlet"):
            leanloop.study(sheet, "proof", spread={CIRCULATION: "5 %"})
        found = told(sheet, spread={CIRCULATION: "5 %"}, hold=[])
        assert found[GRADE] == close(grade(oil=found[CIRCULATION]), rel=1e-9)

    @pytest.mark.parametrize("entries", [
        {"confidence": 1.0}, {"confidence": 0}, {"margin": ["units.wash.stages"]}, {"margin": ["units.wash.none"]},
        {"meets": {"outlet": "equals"}}, {"meets": {"none": "at_most"}}, {"purity": {"inventory": "2 t"}}, {"margin": 3},
        {"sample": {"count": 0}}, {"sample": {"count": 10, "method": "dice"}}, {"change": {BROUGHT: [1e-3]}},
    ])  # fmt: skip
    def test_nonsense_is_a_fault(self, entries):
        with pytest.raises(InputError) as caught:
            leanloop.study(loop(), "proof", spread=DEVIATIONS, **entries)
        assert all(str(fault).startswith("studies.proof.") for fault in caught.value.faults)
