"""Purity of the solvent: closed forms of build-up, of its time, of lean loading and bleed; balances; the clean solvent."""

from pathlib import Path

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from study_scenes import GAS, OIL, STEAM, linear, pair, taken

import leanloop

FILES = Path(__file__).parents[1] / "flowsheets"
BLEED = "units.divide.shares.spent"
SHARES = np.geomspace(1e-5, 1.0, 11)
INGRESS = 3e-5  # mol/s
SHARE = 1e-4  # of the oil that degrades in each pass
close = pytest.approx


def study(sheet, change=None, **entries):
    return leanloop.study(sheet, "proof", change=change or {BLEED: SHARES}, **entries).run()


def solved(sheet, **entries):
    found = study(sheet, **entries)
    assert found.counts == {"converged": len(found)}, found.counts
    return found


class TestBuildUp:
    """A contaminant that a loop takes up at the rate f and that only a bleed p takes out flows round at f/p."""

    def check(self, sheet, ingress, behind_makeup=False):
        """`ingress` by share of bleed; in what the make-up gives there is the flow f/p, or with f behind it f(1-p)/p."""
        record = [f"streams.{name}.mol_s.tar" for name in ("lean", "kept", "stripped")]
        found = solved(sheet, record=record)
        assert found["purity.build_up.tar"] == close(1 / SHARES, rel=1e-9)
        assert found["purity.ingress_mol_s.tar"] == close(ingress, rel=1e-9)
        lean = ingress / SHARES * (1.0 if behind_makeup else 1 - SHARES)
        assert found["streams.lean.mol_s.tar"] == close(lean, rel=1e-9, abs=1e-9 * INGRESS)
        assert found["purity.level.tar"] == close(lean / OIL, rel=1e-9, abs=1e-9 * INGRESS)
        if not behind_makeup:
            assert found["streams.stripped.mol_s.tar"] == close(ingress / SHARES, rel=1e-9)
            assert found["streams.kept.mol_s.tar"] == close(lean, rel=1e-9, abs=1e-9 * INGRESS)
        return found

    def test_with_the_gas(self):
        self.check(pair(gas={"tar": INGRESS}, components=["tar"]), INGRESS)

    def test_with_the_stripping_gas(self):
        self.check(pair(steam={"tar": INGRESS}, components=["tar"]), INGRESS)

    def test_with_the_makeup(self):
        """The oil made up is p S, so that the tar in the lean solvent is to the oil as in what is added, whatever the bleed."""
        part = 1e-4
        sheet = pair(composition={"oil": 1 - part, "tar": part}, components=["tar"])
        found = self.check(sheet, SHARES * OIL * part / (1 - part), behind_makeup=True)
        assert found["purity.level.tar"] == close(part / (1 - part), rel=1e-9)

    def test_made_by_degradation(self):
        sheet = pair(reactions=[{"component": "oil", "share": SHARE, "makes": {"tar": 0.5}}], components=["tar"])
        found = solved(sheet, record=["streams.aged.mol_s.tar", "streams.lean.mol_s.tar"])
        made = SHARE * OIL * 0.5
        assert found["streams.aged.mol_s.tar"] == close(made / SHARES, rel=1e-9)
        assert found["purity.build_up.tar"] == close(1 / SHARES, rel=1e-9)
        assert found["purity.level.tar"] == close(made * (1 - SHARES) / SHARES / OIL, rel=1e-9, abs=1e-9 * made)

    def test_comes_in_by_all_ways_at_once(self):
        part = 1e-3
        sheet = pair(
            gas={"tar": INGRESS}, steam={"tar": INGRESS}, composition={"oil": 1 - part, "tar": part}, components=["tar"],
            reactions=[{"component": "oil", "share": SHARE, "makes": {"tar": 0.5}}],
        )  # fmt: skip
        found = solved(sheet, record=["streams.aged.mol_s.tar", "streams.lean.mol_s.tar"])
        before = 2 * INGRESS + SHARE * OIL * 0.5
        added = (OIL - OIL * (1 - SHARE) * (1 - SHARES)) * part / (1 - part)
        aged = (before + added) / SHARES  # (1-p) n + before + added = n
        assert found["streams.aged.mol_s.tar"] == close(aged, rel=1e-9)
        assert found["streams.lean.mol_s.tar"] == close(aged * (1 - SHARES) + added, rel=1e-9)
        total = before + added
        assert found["purity.build_up.tar"] * total == close(np.maximum(aged, aged * (1 - SHARES) + added), rel=1e-9)

    def test_beyond_the_solvent(self):
        """More contaminant than solvent is a number like others."""
        found = solved(pair(gas={"tar": 1.0}, components=["tar"]))
        assert found["purity.level.tar"][:-1] == close((1 - SHARES[:-1]) / SHARES[:-1] / OIL, rel=1e-9)

    def test_two_ways_out(self):
        removal = 0.2
        sheet = pair(gas={"tar": INGRESS, "salt": 2 * INGRESS}, removal={"salt": removal}, components=["tar", "salt"])
        found = solved(sheet)
        keeps = (1 - removal) * (1 - SHARES)
        assert found["purity.build_up.tar"] == close(1 / SHARES, rel=1e-9)
        assert found["purity.build_up.salt"] == close(1 / (1 - keeps), rel=1e-9)
        assert found["purity.level.salt"] == close(2 * INGRESS * keeps / (1 - keeps) / OIL, rel=1e-9, abs=1e-14)

    def test_co_absorbed_component(self):
        """Less soluble than the solute: its level is that of the linear pair with its own constants."""
        K = 1.1, 6.0
        ratio = lambda K: {"model": "constant", "K": K, "basis": "ratio"}  # noqa: E731
        tables = {"cold": {"solute": ratio(0.05), "CO2": ratio(K[0])}, "hot": {"solute": ratio(1.9), "CO2": ratio(K[1])}}
        found = solved(pair(gas={"CO2": 2.0}, components=["CO2"], equilibrium=tables), purity={"contaminants": ["CO2"]})
        lean = linear(2.0, bleed=SHARES, K=K)[0]
        assert found["purity.level.CO2"] == close(lean, rel=1e-8, abs=1e-14)


class TestTime:
    """A stirred tank of H mol of solvent, S mol/s through it and p of that bled: 1 - exp(-t p S/H)."""

    H = 8000.0
    parts = np.array([0.5, 0.9, 0.99])

    def times(self, found, name="tar"):
        return np.array([found[f"purity.time_to_{p}_s.{name}"] for p in (50, 90, 99)])

    def curve(self, found, case, name="tar"):
        curves = found.curves
        rows = (np.asarray(curves["case"]) == case) & (np.asarray(curves["component"]) == name)
        return np.asarray(curves["time_s"])[rows], np.asarray(curves["level"])[rows]

    @pytest.mark.parametrize("inventory", ["8 kmol", "2 t", "8000 mol", "2000 kg"])
    def test_exponential(self, inventory):
        """Whether the inventory is an amount or a mass of oil of 250 g/mol."""
        bleeds = np.array([1e-5, 1e-3, 0.05, 0.7])
        found = solved(pair(gas={"tar": INGRESS}, components=["tar"]), change={BLEED: bleeds}, purity={"inventory": inventory})
        constant = self.H / (OIL * bleeds)
        assert self.times(found) == close(-np.log1p(-self.parts)[:, None] * constant, rel=1e-5)
        for case, (tau, p) in enumerate(zip(constant, bleeds)):
            times, levels = self.curve(found, case)
            assert times.size >= 20 and times[0] == 0 and times[-1] >= 4.6 * tau and np.all(np.diff(times) > 0)
            steady = INGRESS * (1 - p) / p / OIL
            assert levels == close(steady * -np.expm1(-times / tau), rel=1e-5, abs=1e-6 * steady)

    @pytest.mark.parametrize("way", ["makeup", "degradation", "stripping gas"])
    def test_other_ways_in(self, way):
        part = 1e-4
        more = {
            "makeup": {"composition": {"oil": 1 - part, "tar": part}},
            "degradation": {"reactions": [{"component": "oil", "share": SHARE, "makes": {"tar": 0.5}}]},
            "stripping gas": {"steam": {"tar": INGRESS}},
        }[way]
        bleeds = np.array([1e-4, 0.02])
        found = solved(pair(components=["tar"], **more), change={BLEED: bleeds}, purity={"inventory": "8 kmol"})
        assert self.times(found) == close(-np.log1p(-self.parts)[:, None] * self.H / (OIL * bleeds), rel=1e-5)

    def test_two_held_components(self):
        """The tank holds the solvent as it is mixed: 100 kg are 100/(sum of x M) mol of both."""
        hold = {"oil": OIL, "amine": 0.5}
        found = solved(pair(gas={"tar": INGRESS}, components=["tar", "amine"], hold=hold), change={BLEED: [0.01]},
                       purity={"inventory": "100 kg"})
        constant = 100.0 / (OIL * 0.25 + 0.5 * 0.05) / 0.01  # seconds that a turnover takes, over p
        assert self.times(found)[:, 0] == close(-np.log1p(-self.parts) * constant, rel=1e-5)
        assert found["purity.level.tar"] == close(INGRESS * 99 / 2.5, rel=1e-9)
        assert "0.10000 t of oil, amine in circulation" in str(found)

    def test_two_ways_out(self):
        removal, bleeds = 0.2, np.array([1e-4, 0.01, 0.3])
        sheet = pair(gas={"tar": INGRESS, "salt": INGRESS}, removal={"salt": removal}, components=["tar", "salt"])
        found = solved(sheet, change={BLEED: bleeds}, purity={"inventory": "8 kmol"})
        out = 1 - (1 - removal) * (1 - bleeds)
        logs = -np.log1p(-self.parts)[:, None]
        assert self.times(found) == close(logs * self.H / (OIL * bleeds), rel=1e-5)
        assert self.times(found, "salt") == close(logs * self.H / (OIL * out), rel=1e-5)
        times, levels = self.curve(found, 1, "salt")
        steady = INGRESS * (1 - out[1]) / out[1] / OIL
        assert levels == close(steady * -np.expm1(-times * OIL * out[1] / self.H), rel=1e-5, abs=1e-6 * steady)

    def test_from_a_start(self):
        """Times are to shares of the steady level, from whatever level the fresh solvent has."""
        p = 0.01
        steady = INGRESS * (1 - p) / p / OIL
        start = 0.6 * steady
        found = solved(pair(gas={"tar": INGRESS}, components=["tar"]), change={BLEED: [p]},
                       purity={"inventory": "8 kmol", "start": {"tar": start}})
        tau = self.H / (OIL * p)
        expected = np.maximum(0.0, np.log(0.4 / (1 - self.parts))) * tau
        assert self.times(found)[:, 0] == close(expected, rel=1e-5)
        times, levels = self.curve(found, 0)
        assert levels == close(steady + (start - steady) * np.exp(-times / tau), rel=1e-5)

    def test_from_above(self):
        """Dirtier than the steady state will be: the curve comes down to it."""
        p = 0.01
        steady = INGRESS * (1 - p) / p / OIL
        found = solved(pair(gas={"tar": INGRESS}, components=["tar"]), change={BLEED: [p]},
                       purity={"inventory": "8 kmol", "start": {"tar": 3 * steady}})
        times, levels = self.curve(found, 0)
        assert levels == close(steady * (1 + 2 * np.exp(-times * OIL * p / self.H)), rel=1e-5)

    def test_of_twice_the_inventory(self):
        """Times go with the inventory, and levels do not."""
        sheet = pair(gas={"tar": INGRESS, "solute": 0.2}, components=["tar"])
        one, two = (solved(sheet, change={BLEED: [1e-3, 0.1]}, purity={"inventory": f"{n} kmol"}) for n in (3, 6))
        assert self.times(two) == close(2 * self.times(one), rel=1e-9)
        assert np.array_equal(one["purity.level.tar"], two["purity.level.tar"])

    def test_with_a_freed_circulation(self):
        """The circulation that meets the outlet is that of the tank, in each case its own."""
        requirement = {"quantity": "streams.cleaned.ratio.solute", "equals": 1e-3, "free": "units.top_up.hold.oil",
                       "between": [0.8, 2.9]}  # fmt: skip
        sheet = pair(gas={"tar": INGRESS}, components=["tar"], requirements={"outlet": requirement})
        change = {"feeds.steam.flows.steam": [2.0, 3.0], BLEED: [0.01, 0.1]}
        found = solved(sheet, change=change, purity={"inventory": "8 kmol"}, record=["requirements.outlet.free_value"])
        oil = found["requirements.outlet.free_value"]
        assert np.ptp(oil) > 0.1
        assert self.times(found) == close(-np.log1p(-self.parts)[:, None] * self.H / (oil * found[BLEED]), rel=1e-5)

    def test_against_an_independent_integration(self):
        """Salt thins the mole fractions (y = K x), heavy ends and solute are held back by it: three levels, coupled.

        The contaminants start from nothing, the solute where the plant runs.
        """
        tables = {
            "cold": {"solute": {"model": "constant", "K": 0.3}, "heavy": {"model": "constant", "K": 2e-3}},
            "hot": {"solute": {"model": "constant", "K": 1.2}, "heavy": {"model": "constant", "K": 0.04}},
        }
        more = {
            "solute": 0.6, "gas": {"salt": 4e-3, "heavy": 0.05}, "components": ["salt", "heavy"], "equilibrium": tables,
            "basis": {"loading": ["oil"]},
        }  # fmt: skip
        p, H = 4e-3, 5000.0
        found = solved(pair(p, **more), change={BLEED: [p]}, purity={"inventory": "5 kmol", "contaminants": ["salt", "heavy"]})
        steady = np.array([found[f"purity.level.{name}"][0] for name in ("salt", "heavy")])
        assert steady[0] == close(4e-3 * (1 - p) / p / OIL, rel=1e-9) and steady[0] > 0.4 and steady[1] > 0.05

        whole = pair(p, **more)  # cut by hand: the wash takes a feed instead of what the make-up gives
        given = whole.given
        units = {name: dict(unit) for name, unit in given["units"].items()}
        units["wash"]["liquid_in"] = "tank"
        names = ("solute", "salt", "heavy")
        tank = {"phase": "liquid", "temperature": 420.0, "pressure": 1.1e5, "flows": {"oil": OIL, **dict.fromkeys(names, 0.0)}}
        cut = leanloop.Flowsheet(given["components"], tables, {**given["feeds"], "tank": tank}, units, basis=more["basis"])
        closed = whole.solve()
        final = np.array([closed[f"streams.lean.mol_s.{name}"] for name in names])

        def rate(_, flows):
            result = cut.solve({f"feeds.tank.flows.{name}": flow for name, flow in zip(names, flows)})
            assert result.status == "converged"
            return OIL / H * (np.array([result[f"streams.lean.mol_s.{name}"] for name in names]) - flows)

        assert np.abs(rate(0, final)).max() < 1e-12
        times, levels = self.curve(found, 0, "salt")
        own = solve_ivp(rate, (0, times[-1]), [final[0], 0.0, 0.0], "LSODA", rtol=1e-8, atol=1e-11, dense_output=True)
        assert own.success
        assert levels == close(own.sol(times)[1] / OIL, rel=2e-5, abs=1e-6 * steady[0])
        times, levels = self.curve(found, 0, "heavy")
        assert levels == close(own.sol(times)[2] / OIL, rel=2e-5, abs=2e-6 * steady[1])
        fine = np.linspace(0, times[-1], 400001)
        for name, row, level in (("salt", 1, steady[0]), ("heavy", 2, steady[1])):
            followed = own.sol(fine)[row] / OIL / level
            for part in (50, 90, 99):
                first = fine[np.argmax(followed >= part / 100)]
                assert found[f"purity.time_to_{part}_s.{name}"][0] == close(first, rel=1e-4)
        # not an exponential of the bleed alone, or the check would prove nothing
        linear_time = np.log(10) * H / OIL / p
        assert abs(found["purity.time_to_90_s.heavy"][0] / linear_time - 1) > 0.02

    def test_of_a_co_absorbed_component(self):
        """In the linear pair a pass leaves (1-E_S)(1-E_A/A)(1-p) of it: the rest, times S/H, is the rate."""
        ratio = lambda K: {"model": "constant", "K": K, "basis": "ratio"}  # noqa: E731
        tables = {"cold": {"solute": ratio(0.05), "sulfide": ratio(0.02)}, "hot": {"solute": ratio(1.9), "sulfide": ratio(0.15)}}
        sheet = pair(gas={"sulfide": 0.1}, components=["sulfide"], equilibrium=tables)
        bleeds = np.array([1e-4, 0.1])
        found = solved(sheet, change={BLEED: bleeds}, purity={"inventory": "8 kmol", "contaminants": ["sulfide"]})
        A, S = OIL / (0.02 * GAS), 0.15 * STEAM / OIL
        left = (1 - taken(S, 4)) * (1 - taken(A, 5) / A) * (1 - bleeds)
        assert left[0] > 0.5
        assert found["purity.level.sulfide"] == close(linear(0.1, bleed=bleeds, K=(0.02, 0.15))[0], rel=1e-9)
        assert self.times(found, "sulfide") == close(-np.log1p(-self.parts)[:, None] * self.H / OIL / (1 - left), rel=1e-5)

    def test_ends_at_the_steady_state(self):
        sheet = pair(gas={"tar": 0.02}, components=["tar"])
        found = solved(sheet, change={BLEED: [1e-3, 0.03, 0.4]}, purity={"inventory": "8 kmol"})
        for case, level in enumerate(found["purity.level.tar"]):
            times, levels = self.curve(found, case)
            assert 0.99 * level <= levels[-1] <= level * (1 + 1e-9) and np.all(np.diff(levels) >= 0)


class TestLeanLoading:
    """The linear pair: X_lean from Kremser's two columns, the bleed and what the make-up brings."""

    RECORD = [f"streams.{name}.ratio.solute" for name in ("lean", "stripped", "rich", "cleaned")]

    def check(self, found, *closed):
        for address, expected in zip(self.RECORD, closed):
            assert found[address] == close(expected, rel=1e-9, abs=1e-15), address

    @pytest.mark.parametrize("made_up", [0.0, 1e-4, 0.05])
    def test_makeup_that_carries_the_solute(self, made_up):
        composition = {"oil": 1 / (1 + made_up), "solute": made_up / (1 + made_up)}
        found = solved(pair(composition=composition), record=self.RECORD)
        self.check(found, *linear(0.3, makeup_ratio=made_up, bleed=SHARES))

    @pytest.mark.parametrize("brought", [1e-4, 0.02])
    def test_stripping_gas_that_carries_the_solute(self, brought):
        found = solved(pair(steam={"solute": STEAM * brought}), record=self.RECORD)
        self.check(found, *linear(0.3, steam_ratio=brought, bleed=SHARES))

    def test_both_and_other_inputs(self):
        made_up, brought = 0.01, 2e-3
        composition = {"oil": 1 / (1 + made_up), "solute": made_up / (1 + made_up)}
        change = {BLEED: [1e-3, 0.1], "units.top_up.hold.oil": [0.8, 1.5, 3.04], "feeds.steam.flows.steam": [0.4, 2.0]}
        found = solved(pair(composition=composition, steam={"solute": STEAM * brought}), change=change, record=self.RECORD)
        bleed, oil, steam = (found[name] for name in change)
        assert len(found) == 12
        self.check(found, *linear(0.3, STEAM * brought / steam, made_up, bleed, oil, steam))

    def test_numbers_by_hand(self):
        """A = 4/3, S = 1.52: written out for one case, that the formula of the helper is not taken on trust."""
        A, S, p = OIL / (0.05 * GAS), 1.9 * STEAM / OIL, 0.1
        kept_A = A**5 * (A - 1) / (A**6 - 1)  # 1 - E_A/A
        kept_S = (S - 1) / (S**5 - 1)  # 1 - E_S
        lean = 0.9 * kept_S * (1 - kept_A) * (0.01 / 0.05) / (1 - 0.9 * kept_S * kept_A)
        found = solved(pair(), change={BLEED: [p]}, record=self.RECORD)
        assert found[self.RECORD[0]][0] == close(lean, rel=1e-9)


class TestBleedNeeded:
    @pytest.mark.parametrize("level", ["loading", "fraction", "mass_fraction"])
    def test_closed_form(self, level):
        """No solute: tar and oil are the lean solvent, and X = (f/S)(1-p)/p at the limit."""
        limit = 0.01
        ratio = {"loading": limit, "fraction": limit / (1 - limit), "mass_fraction": limit / (1 - limit) * 0.25 / 0.4}[level]
        ingress = np.array([1e-5, 3e-4, 5e-3])
        sheet = pair(solute=0.0, gas={"tar": INGRESS}, components=["tar"])
        found = solved(sheet, change={"feeds.vent.flows.tar": ingress}, purity={"limits": {"tar": {level: limit}}})
        needed = ingress / (ingress + ratio * OIL)
        assert found["purity.bleed_needed.tar"] == close(needed, rel=1e-8)
        assert found["purity.bleed_status.tar"] == ["converged"] * 3
        assert found["purity.added_at_limit_mol_s.tar.oil"] == close(needed * OIL, rel=1e-8)

    def test_whatever_the_bleed_is_now(self):
        """It is what is asked for; without one there is no steady state, and the bleed needed is the same."""
        sheet = pair(solute=0.0, gas={"tar": INGRESS}, components=["tar"], bleed=0.0)
        found = study(sheet, change={BLEED: [0.0, 0.01, 1.0]}, purity={"limits": {"tar": {"loading": 0.01}}})
        assert found.status == ["no_steady_state", "converged", "converged"]
        assert found["purity.bleed_status.tar"] == ["converged"] * 3
        assert found["purity.bleed_needed.tar"] == close(INGRESS / (INGRESS + 0.01 * OIL), rel=1e-8)

    def test_kept_without_a_bleed(self):
        """A bed that keeps the limit by itself, and a gas without salt: the least bleed that is looked for will do."""
        sheet = pair(solute=0.0, gas={"salt": 1e-4}, removal={"salt": 0.2}, components=["salt"])
        purity = {"limits": {"salt": {"loading": 0.01}}, "bleed": BLEED, "between": [1e-6, 0.9]}
        found = study(sheet, change={"feeds.vent.flows.salt": [0.0, 1e-3, 0.1, 1.0]}, purity=purity)
        q = 0.01 * OIL / (0.01 * OIL + 0.1)
        assert found["purity.bleed_status.salt"] == ["converged"] * 3 + ["out_of_reach"]
        assert found["purity.bleed_needed.salt"] == close([1e-6, 1e-6, 1 - q / 0.8, np.nan], rel=1e-8, nan_ok=True)
        assert found["purity.added_at_limit_mol_s.salt.oil"][:3] == close(found["purity.bleed_needed.salt"][:3] * OIL, rel=1e-8)

    def test_solving_again_gives_the_limit(self):
        limit = 0.02
        sheet = pair(gas={"tar": INGRESS, "salt": 1e-4}, removal={"salt": 2e-4}, components=["tar", "salt"],
                     reactions=[{"component": "oil", "share": SHARE, "makes": {"salt": 0.2}}])
        changes = {"units.top_up.hold.oil": [1.0, 2.0, 3.0], "feeds.vent.flows.solute": [0.1, 0.5]}
        found = solved(sheet, change=changes, purity={"limits": {"tar": {"mass_fraction": limit}, "salt": {"fraction": limit}}})
        for name, quantity in (("tar", "mass_fraction"), ("salt", "fraction")):
            assert found[f"purity.bleed_status.{name}"] == ["converged"] * 6
            cases = {key: found[key] for key in changes} | {BLEED: found[f"purity.bleed_needed.{name}"]}
            again = sheet.solve(cases)
            assert again[f"streams.lean.{quantity}.{name}"] == close(limit, rel=1e-8)
            added = found[f"purity.added_at_limit_mol_s.{name}.oil"]
            assert again["units.top_up.results.added_mol_s.oil"] == close(added, rel=1e-8)

    def test_by_another_input(self):
        """A polishing bed may keep the limit instead: 1 - (1-r)(1-p) = 1 - q with X = (f/S) q/(1-q)."""
        sheet = pair(solute=0.0, gas={"salt": 1e-3}, removal={"salt": 0.05}, components=["salt"])
        purity = {"limits": {"salt": {"loading": 0.01}}, "bleed": "units.bed.removal.salt", "between": [1e-4, 0.9]}
        found = solved(sheet, change={BLEED: [1e-3, 1e-2]}, purity=purity)
        q = 0.01 * OIL / (0.01 * OIL + 1e-3)
        assert found["purity.bleed_needed.salt"] == close(1 - q / (1 - np.array([1e-3, 1e-2])), rel=1e-8)

    def test_out_of_reach_spoils_no_other(self):
        """With a bound of 1 % the dirtiest gas has no bleed that would do."""
        sheet = pair(solute=0.0, gas={"tar": INGRESS}, components=["tar"])
        purity = {"limits": {"tar": {"loading": 0.01}}, "bleed": BLEED, "between": [1e-5, 0.01]}
        found = study(sheet, change={"feeds.vent.flows.tar": [1e-5, 1e-1, 2e-5]}, purity=purity)
        assert found.status == ["converged"] * 3
        assert found["purity.bleed_status.tar"] == ["converged", "out_of_reach", "converged"]
        needed = found["purity.bleed_needed.tar"]
        assert np.isnan(needed[1]) and needed[[0, 2]] == close([1e-5 / 0.02001, 2e-5 / 0.02002], rel=1e-8)

    def test_with_a_requirement_held(self):
        """The outlet is kept by the circulation while the bleed keeps the limit."""
        requirement = {"quantity": "streams.cleaned.ratio.solute", "equals": 1e-3, "free": "units.top_up.hold.oil",
                       "between": [1.0, 3.0]}  # fmt: skip
        sheet = pair(gas={"tar": INGRESS}, components=["tar"], requirements={"outlet": requirement})
        found = solved(sheet, change={"feeds.steam.flows.steam": [2.0, 2.5]}, purity={"limits": {"tar": {"loading": 5e-3}}})
        again = sheet.solve({"feeds.steam.flows.steam": [2.0, 2.5], BLEED: found["purity.bleed_needed.tar"]})
        assert again["streams.lean.loading.tar"] == close(5e-3, rel=1e-8)
        assert again["streams.cleaned.ratio.solute"] == close(1e-3, rel=1e-8)


class TestTwoLoops:
    """Two pairs in one flowsheet: each is told of as if it stood alone."""

    def twice(self, sheet, times):
        """A pair and its double, with `times` the feeds and "b_" before every name."""
        given, ports = sheet.given, ("gas_in", "liquid_in", "gas_out", "liquid_out", "takes", "gives")
        feeds, units = dict(given["feeds"]), dict(given["units"])
        for name, feed in given["feeds"].items():
            feeds[f"b_{name}"] = {**feed, "flows": {key: times * flow for key, flow in feed["flows"].items()}}
        for name, unit in given["units"].items():
            own = dict(unit)
            for key in ports:
                if key in own:
                    own[key] = [f"b_{item}" for item in own[key]] if isinstance(own[key], list) else f"b_{own[key]}"
            if "shares" in own:
                own["shares"] = {f"b_{key}": share for key, share in own["shares"].items()}
            units[f"b_{name}"] = own
        return sheet.rebuilt(feeds=feeds, units=units)

    def test_of_one_alone(self):
        reactions = [{"component": "oil", "share": SHARE, "makes": {"tar": 0.5}}]
        sheet = pair(gas={"tar": INGRESS}, components=["tar"], reactions=reactions)
        purity = {"inventory": "8 kmol", "limits": {"tar": {"loading": 0.01}}}
        alone = solved(sheet, change={BLEED: [0.01, 0.2]}, purity=purity, record=["streams.lean.mol_s.tar"])
        change = {"units.b_divide.shares.b_spent": [0.3], BLEED: [0.01, 0.2]}
        purity = {**purity, "makeup": "top_up"}
        both = solved(self.twice(sheet, 1.3), change=change, purity=purity, record=["streams.lean.mol_s.tar"])
        columns = [key for key in alone.to_dict()["cases"] if key.startswith("purity.")]
        assert len(columns) > 12
        for key in columns:
            assert both[key] == (alone[key] if "status" in key else close(alone[key], rel=1e-8, abs=1e-15)), key
        assert both["purity.build_up.tar"] == close([100.0, 5.0], rel=1e-9)
        lost = sum(both[f"purity.{what}.oil"] for what in ("out_with_liquid_mol_s", "out_with_gas_mol_s", "degraded_mol_s"))
        assert both["purity.added_mol_s.oil"] == close(lost, rel=1e-9)

    def test_the_loop_has_to_be_named(self):
        with pytest.raises(leanloop.InputError, match="purity.makeup"):
            study(self.twice(pair(gas={"tar": INGRESS}, components=["tar"]), 1.3), purity={"inventory": "8 kmol"})


class TestSolventConsumed:
    def test_closes(self):
        """Volatile solvent, bleed and degradation: what is added goes somewhere."""
        tables = {name: {"solute": {"model": "constant", "K": k}, "amine": {"model": "constant", "K": own}}
                  for name, k, own in (("cold", 0.05, 2e-4), ("hot", 1.9, 3e-3))}  # fmt: skip
        reactions = [{"component": "amine", "share": 2e-3, "makes": {"tar": 0.5}}, {"component": "oil", "share": 1e-4}]
        hold = {"oil": OIL, "amine": 0.4}
        more = {"hold": hold, "reactions": reactions, "equilibrium": tables, "basis": None}
        sheet = pair(components=["tar", "amine"], stays={"amine": None}, **more)
        record = [f"streams.{s}.mol_s.amine" for s in ("cleaned", "overhead")]
        record += [f"streams.{s}.mol_s.{c}" for s in ("spent", "stripped") for c in ("oil", "amine")]
        bleeds = np.geomspace(1e-4, 0.5, 7)
        found = solved(sheet, change={BLEED: bleeds}, record=record)
        for name, share in (("oil", 1e-4), ("amine", 2e-3)):
            added, liquid, gas, lost = (found[f"purity.{what}.{name}"] for what in (
                "added_mol_s", "out_with_liquid_mol_s", "out_with_gas_mol_s", "degraded_mol_s"))  # fmt: skip
            assert added == close(liquid + gas + lost, rel=1e-9, abs=1e-12)
            assert liquid == close(found[f"streams.spent.mol_s.{name}"], rel=1e-12)
            if name == "amine":
                assert gas == close(found["streams.cleaned.mol_s.amine"] + found["streams.overhead.mol_s.amine"], rel=1e-12)
            assert lost == close(share * found[f"streams.stripped.mol_s.{name}"], rel=1e-12)
        assert found["purity.out_with_gas_mol_s.amine"].min() > 5e-4 and not found["purity.out_with_gas_mol_s.oil"].any()

    def test_of_an_oil_that_stays(self):
        """Added is S - S(1-d)(1-p), of which S d degrades."""
        sheet = pair(reactions=[{"component": "oil", "share": SHARE, "makes": {"tar": 0.5}}], components=["tar"])
        found = solved(sheet)
        assert found["purity.added_mol_s.oil"] == close(OIL * (1 - (1 - SHARE) * (1 - SHARES)), rel=1e-9)
        assert found["purity.degraded_mol_s.oil"] == close(OIL * SHARE, rel=1e-9)
        assert found["purity.out_with_liquid_mol_s.oil"] == close(OIL * (1 - SHARE) * SHARES, rel=1e-9)


class TestCleanSolvent:
    """Everything once more with clean feeds and pure make-up: as the flowsheet in which nobody wrote the contaminant."""

    FRACTION = {name: {"solute": {"model": "constant", "K": k}} for name, k in (("cold", 0.05), ("hot", 1.9))}

    def check(self, dirty, clean, record, change):
        found = solved(dirty, change=change, record=record)
        again = clean.solve(change)
        assert list(again.status) == found["clean.status"] == ["converged"] * len(found)
        for address in record:
            assert found[f"clean.{address}"] == close(again[address], rel=1e-9, abs=1e-14), address
        return found

    def test_all_ways_in(self):
        dirty = pair(
            gas={"tar": INGRESS}, steam={"salt": 2e-4}, composition={"oil": 0.99, "salt": 0.01}, components=["tar", "salt"],
            reactions=[{"component": "oil", "share": 2e-3, "makes": {"tar": 0.5}}], equilibrium=self.FRACTION, basis=None,
        )  # fmt: skip
        clean = pair(reactions=[{"component": "oil", "share": 2e-3}], equilibrium=self.FRACTION, basis=None)
        record = ["streams.cleaned.fraction.solute", "streams.lean.fraction.solute", "units.top_up.results.added_mol_s.oil"]
        found = self.check(dirty, clean, record, {BLEED: [1e-4, 1e-3, 0.1]})
        moved = found[record[0]] / found[f"clean.{record[0]}"] - 1
        assert np.abs(moved[0]) > 0.05 and np.abs(moved).argmax() == 0

    def test_with_a_requirement(self):
        requirement = {"outlet": {"quantity": "streams.cleaned.fraction.solute", "equals": 1e-3, "free": "units.top_up.hold.oil",
                                  "between": [0.8, 3.0]}}  # fmt: skip
        more = {"equilibrium": self.FRACTION, "basis": None, "requirements": requirement}
        record = ["requirements.outlet.free_value", "streams.lean.fraction.solute"]
        self.check(pair(gas={"tar": 1e-3}, components=["tar"], **more), pair(**more), record, {BLEED: [0.01, 0.1]})

    def test_clean_solvent_has_a_status_of_its_own(self):
        """With little steam neither the dirty nor the clean solvent reaches the outlet; with more only the thinned one."""
        requirement = {"outlet": {"quantity": "streams.cleaned.fraction.solute", "equals": 1.2e-3, "free": "units.top_up.hold.oil",
                                  "between": [0.6, 1.6]}}  # fmt: skip
        more = {"equilibrium": self.FRACTION, "basis": None, "requirements": requirement}
        change = {"feeds.steam.flows.steam": [1.0, 1.5, 2.2]}
        found = study(pair(gas={"tar": 3e-3}, components=["tar"], **more), change=change)
        clean = pair(**more).solve(change)
        assert found.status == ["out_of_reach", "converged", "converged"]
        assert found["clean.status"] == list(clean.status) == ["out_of_reach", "out_of_reach", "converged"]

    def test_clean_where_the_dirty_loop_has_no_steady_state(self):
        """Without bleed tar has no way out; the clean loop has a steady state all the same."""
        sheet = pair(gas={"tar": INGRESS}, components=["tar"])
        record = ["streams.cleaned.ratio.solute"]
        found = study(sheet, change={BLEED: [0.0, 0.01]}, record=record)
        assert found.status == ["no_steady_state", "converged"]
        assert np.isnan(found[record[0]][0])
        assert found[f"clean.{record[0]}"] == close(linear(0.3, bleed=np.array([0.0, 0.01]))[3], rel=1e-9)

    def test_a_contaminated_feed_given_by_fractions(self):
        """The others keep their flows; the carrier is the rest."""
        change = {"feeds.vent.fractions.resin": [4e-6, 1e-4, 1e-3]}
        record = ["streams.cleaned.mol_s.toluene", "streams.vent.mol_s.toluene"]
        sheet = leanloop.read(FILES / "coating_vent.toml")
        found = leanloop.study(sheet, "proof", change=change, hold=[], record=record).run()
        assert found["clean.streams.vent.mol_s.toluene"] == close(found["streams.vent.mol_s.toluene"], rel=1e-12)
        clean = sheet.rebuilt(requirements={}).solve({"feeds.vent.fractions.resin": 0.0})
        assert found["clean.streams.cleaned.mol_s.toluene"] == close(clean["streams.cleaned.mol_s.toluene"], rel=1e-9)

    def test_duty(self, tmp_path):
        """Buffer that degrades into a salt, and a mist of sulfate: both go round with the heat."""
        text = (FILES / "sulfur_dioxide_loop.toml").read_text(encoding="utf-8")
        age = ('[units.age]\nkind = "degradation"\ntakes = "lean"\ngives = "aged"\n'
               'reactions = [{ component = "buffer", share = 2e-5MAKES }]\n\n')  # fmt: skip
        divide = ('[units.divide]\nkind = "splitter"\ntakes = "polished"\ngives = ["spent", "kept"]\n'
                  'shares = { spent = 1e-3 }\n\n')  # fmt: skip
        text = text.replace('hot_in = "lean"', 'hot_in = "aged"').replace("[units.swap]", age + "[units.swap]")
        text = text.replace("[units.top_up]", divide + "[units.top_up]")
        text = text.replace('takes = "polished"\ngives = "full', 'takes = "kept"\ngives = "full')
        salt = 'salt = { molar_mass = "140 g/mol", stays_in = "liquid" }\n'
        dirty = text.replace("MAKES", ", makes = { salt = 1.0 }").replace("[components]\n", "[components]\n" + salt)
        dirty += '[heat_data.salt]\nliquid_heat_capacity = "250 J/(mol K)"\n'
        clean = text.replace("MAKES", "").replace(', sulfate = "2 ppm"', "")
        clean = clean[: clean.index("[units.bed]")] + clean[clean.index("[units.divide]") :]  # nothing to polish away
        clean = clean.replace('takes = "polished"', 'takes = "warm_lean"').replace("sulfate = { molar", "unused = { molar")
        clean = clean.replace("[heat_data.sulfate]", "[heat_data.unused]")
        for name, content in (("dirty", dirty), ("clean", clean)):
            (tmp_path / f"{name}.toml").write_text(content, encoding="utf-8")
        record = ["units.strip.results.reboiler_duty_W", "units.trim.results.duty_W", "requirements.emission.free_value"]
        change = {BLEED: [5e-4, 5e-3]}
        found = leanloop.study(leanloop.read(tmp_path / "dirty.toml"), "proof", change=change, record=record).run()
        assert found.counts == {"converged": 2}
        again = leanloop.read(tmp_path / "clean.toml").solve(change)
        for address in record:
            assert found[f"clean.{address}"] == close(again[address], rel=1e-7), address
        moved = found[record[0]] / found[f"clean.{record[0]}"] - 1
        assert abs(moved[0]) > abs(moved[1]) > 1e-5
