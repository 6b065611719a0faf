"""Degradation: closed forms, balances of what is made and lost, ways in and out of loops, faults and cautions."""

from pathlib import Path

import numpy as np
import pytest

import leanloop
from leanloop.checks import check_unit
from leanloop.errors import InputError
from leanloop.units.degradation import Degradation
from leanloop.units.makeup import Makeup
from leanloop.units.splitter import Splitter

VENT = Path(__file__).parents[1] / "flowsheets" / "coating_vent.toml"
SPECIES = {
    "amine": {"molar_mass": "61 g/mol", "stays_in": "liquid"},
    "water": {"molar_mass": "18 g/mol", "stays_in": "liquid"},
    "salt": {"molar_mass": "107 g/mol", "stays_in": "liquid"},
    "tar": {"stays_in": "liquid"},
}
GASES = {"air": {"stays_in": "gas"}, "ozone": {"molar_mass": "48 g/mol"}}
UNIT = {"kind": "degradation", "takes": "fed", "gives": "aged"}
AMINE, WATER = 3.0, 7.0  # mol/s that circulate in `loop`
BLEED = 0.02


def feed(flows, phase="liquid", celsius=50.0, bar=1.5):
    return {
        "phase": phase, "temperature": f"{celsius} degC", "pressure": f"{bar} bar",
        "flows": {name: f"{value} mol/s" for name, value in flows.items()},
    }  # fmt: skip


def alone(reactions, fed, components=SPECIES, cases=None, **more):
    sheet = leanloop.Flowsheet(
        components, feeds={"fed": fed}, units={"age": {**UNIT, "reactions": reactions}}, plain_si=False, **more
    )
    return sheet.solve() if cases is None else sheet.solve(cases)


def loop(*reactions, bleed=BLEED, fed=None, **more):
    """A closed solvent: held by a make-up, degraded, bled."""
    takes, feeds = "held", {}
    units = {}
    if fed:
        feeds, takes = {"fed": feed(fed)}, "joined"
        units["join"] = {"kind": "mixer", "takes": ["held", "fed"], "gives": "joined"}
    units |= {
        "age": {**UNIT, "takes": takes, "reactions": list(reactions)},
        "divide": {"kind": "splitter", "takes": "aged", "gives": ["bleed", "kept"], "shares": {"bleed": bleed}},
        "top_up": {"kind": "makeup", "takes": "kept", "gives": "held",
                   "hold": {"amine": f"{AMINE} mol/s", "water": f"{WATER} mol/s"}},
    }  # fmt: skip
    return leanloop.Flowsheet(SPECIES, feeds=feeds, units=units, plain_si=False, **more)


def faults(call, *args, **options):
    with pytest.raises(InputError) as caught:
        call(*args, **options)
    return [str(fault) for fault in caught.value.faults]


def closures(result):
    return max(abs(item["closure"]) for item in result.to_dict()["balance"]["components"].values())


def test_contract():
    check_unit("degradation")


class TestOnce:
    def test_shares_take_from_what_comes_in(self):
        reactions = [
            {"component": "amine", "share": 0.1, "makes": {"salt": 0.5, "water": 2.0}},
            {"component": "amine", "share": 0.2},
            {"component": "salt", "share": 0.25},
        ]
        result = alone(reactions, feed({"amine": 3.0, "water": 7.0, "salt": 0.4}))
        assert result["streams.aged.mol_s.amine"] == pytest.approx(3.0 * 0.7, rel=1e-14)
        assert result["streams.aged.mol_s.water"] == pytest.approx(7.0 + 0.6, rel=1e-14)
        assert result["streams.aged.mol_s.salt"] == pytest.approx(0.4 * 0.75 + 0.15, rel=1e-14)
        assert result["units.age.results.degraded_mol_s"] == pytest.approx({"amine": 0.9, "salt": 0.1}, rel=1e-14)
        assert result["units.age.results.made_mol_s"] == pytest.approx({"salt": 0.15, "water": 0.6}, rel=1e-14)
        for key in ("temperature_K", "pressure_Pa", "phase"):
            assert result[f"streams.aged.{key}"] == result[f"streams.fed.{key}"]

    def test_a_rate_knows_no_circulation(self):
        rates = [{"component": "amine", "rate": "0.02 mol/s", "makes": {"tar": 0.5}}, {"component": "amine", "rate": "0.01 mol/s"}]
        for flow in (0.5, 50.0):
            result = alone(rates, feed({"amine": flow, "water": 1.0}))
            assert result["streams.aged.mol_s.amine"] == pytest.approx(flow - 0.03, rel=1e-14)
            assert result["streams.aged.mol_s.tar"] == 0.01
            assert result["balance.components.amine.made_mol_s"] == pytest.approx(-0.03, rel=1e-14)
            assert result["balance.components.tar.made_mol_s"] == 0.01
            assert result["balance.components.tar.in_mol_s"] == 0.0
            assert closures(result) < 1e-14

    def test_all_of_it_leaves_nothing(self):
        result = alone([{"component": "ozone", "share": 1.0}], feed({"air": 2.0, "ozone": 0.1}, "gas"), GASES)
        assert result["streams.aged.mol_s.ozone"] == 0.0
        assert result["balance.components.ozone.made_mol_s"] == -0.1
        assert result["balance.components.ozone.closure"] == 0.0

    def test_groups_are_summed(self):
        reaction = {"component": "amine", "share": 0.1, "makes": {"salt": 0.5, "tar": 0.2}}
        result = alone([reaction], feed({"amine": 1.0}), groups={"dirt": ["salt", "tar"]})
        assert result["units.age.results.made_mol_s.dirt"] == pytest.approx(0.07, rel=1e-14)
        assert result["units.age.results.degraded_mol_s.dirt"] == 0.0

    def test_more_than_flows_fails_its_own_case_with_the_figures(self):
        rates = np.array([0.1, 0.5, 0.50001, 0.7, np.nan])
        result = alone([{"component": "amine", "rate": "0.1 mol/s", "makes": {"salt": 1.0}}], feed({"amine": 0.5}),
                       cases={"units.age.reactions.0.rate": rates})  # fmt: skip
        assert result.status == ["converged", "converged", "unit_failed", "unit_failed", "not_finite"]
        np.testing.assert_allclose(result["streams.aged.mol_s.amine"][:2], [0.4, 0.0], atol=1e-16)
        assert "Unit age: " in result.status_text[3]
        assert "(0.7 mol/s of 'amine' are to degrade and 0.5 mol/s flow: lower its rate or raise its flow)" in result.status_text[3]
        assert "(0.50001 mol/s of 'amine' are to degrade and 0.5 mol/s flow" in result.status_text[2]
        assert "are to degrade" not in result.status_text[0] + result.status_text[4]

    def test_shares_above_all_of_it_fail_their_own_case(self):
        halves = [{"component": "amine", "share": 0.5}, {"component": "amine", "share": 0.5}]
        result = alone(halves, feed({"amine": 0.5}), cases={"units.age.reactions.1.share": np.array([0.5, 0.6, 0.1])})
        assert result.status == ["converged", "unit_failed", "converged"]
        assert "the shares of 'amine' sum to more than 1" in result.status_text[1]
        np.testing.assert_allclose(result["streams.aged.mol_s.amine"][[0, 2]], [0.0, 0.2], rtol=1e-14)

    def test_what_does_not_come_does_not_degrade(self):
        result = alone([{"component": "amine", "share": 0.5, "makes": {"salt": 1.0}}], feed({"amine": 1.0, "water": 1.0}),
                       cases={"feeds.fed.flows.amine": np.array([0.0, 1.0])})  # fmt: skip
        assert result.status == ["converged", "converged"]
        np.testing.assert_array_equal(result["streams.aged.mol_s.salt"], [0.0, 0.5])
        np.testing.assert_array_equal(result["balance.components.salt.closure"], [0.0, 0.0])

    def test_python_and_file_forms_agree(self, tmp_path):
        text = """
            [components]
            amine = { stays_in = "liquid" }
            salt = { stays_in = "liquid" }
            [feeds.fed]
            phase = "liquid"
            temperature = "50 degC"
            pressure = "1.5 bar"
            flows = { amine = "3 mol/s" }
            [units.age]
            kind = "degradation"
            takes = "fed"
            gives = "aged"
            reactions = [
                { component = "amine", share = "2 %", makes = { salt = 0.5 } },
                { component = "amine", share = 0.001 },
            ]
        """
        path = tmp_path / "sheet.toml"
        path.write_text(text.replace("\n            ", "\n"), encoding="utf-8")
        one = leanloop.read(path).solve({"units.age.reactions.1.share": "0.3 %"})
        sheet = leanloop.Flowsheet(
            {"amine": {"stays_in": "liquid"}, "salt": {"stays_in": "liquid"}},
            feeds=[leanloop.Feed("fed", phase="liquid", temperature=323.15, pressure=1.5e5, flows={"amine": 3.0})],
            units=[Degradation("age", takes="fed", gives="aged", reactions=[
                {"component": "amine", "share": 0.02, "makes": {"salt": 0.5}}, {"component": "amine", "share": 0.003},
            ])],
        )  # fmt: skip
        other = sheet.solve()
        assert one["streams.aged.mol_s"] == other["streams.aged.mol_s"] == pytest.approx({"amine": 3 * 0.977, "salt": 0.03})


METHODS = ["newton", "substitution", "wegstein", "anderson", "broyden", "dominant_eigenvalue"]


class TestLoop:
    """A loop without any feed: H held, a share s or a rate r degrades, a part p of what is left is bled."""

    @pytest.mark.parametrize("method", METHODS)
    def test_a_contaminant_made_at_a_rate_settles_at_rate_over_bleed(self, method):
        sheet = loop({"component": "amine", "rate": "0.6 mol/s", "makes": {"salt": 0.005}}, loop={"method": method})
        result = sheet.solve()
        assert result.converged
        # made r inside the stream that is split: level behind the unit times p = r
        assert result["streams.aged.mol_s.salt"] == pytest.approx(0.003 / BLEED, rel=1e-9)
        assert result["streams.bleed.mol_s.salt"] == pytest.approx(0.003, rel=1e-9)
        assert result["streams.held.mol_s.salt"] == pytest.approx(0.003 / BLEED * (1 - BLEED), rel=1e-9)
        assert closures(result) < 1e-8  # to the tolerance of the loop, or to rounding behind a step of Newton's

    def test_what_is_made_inside_is_what_convergence_is_measured_by(self):
        """By substitution salt is off by e / p at the end, where e is how far its balance is open: the residual of what is made."""
        made = 0.004
        reaction = {"component": "amine", "rate": f"{made} mol/s", "makes": {"salt": 1.0}}
        result = loop(reaction, loop={"method": "substitution", "tolerance": 1e-6}).solve()
        residual = result["loop.residual"]
        assert 0.97e-6 < residual <= 1e-6
        off = made / BLEED - result["streams.aged.mol_s.salt"]
        assert off * BLEED / made == pytest.approx(residual * (1 - BLEED), rel=0.03)

    @pytest.mark.parametrize("share", [1e-6, 1e-3, 0.3, 1.0])
    def test_make_up_covers_bleed_and_degradation(self, share):
        result = loop({"component": "amine", "share": share, "makes": {"salt": 0.5}}).solve()
        added = result["units.top_up.results.added_mol_s.amine"]
        assert added == pytest.approx(AMINE * (share + BLEED - share * BLEED), rel=1e-12)
        assert result["units.top_up.results.added_mol_s.water"] == pytest.approx(WATER * BLEED, rel=1e-12)
        assert result["streams.aged.mol_s.salt"] == pytest.approx(0.5 * share * AMINE / BLEED, rel=1e-12)
        parts = result.to_dict()["balance"]["components"]
        assert parts["amine"]["in_mol_s"] == added
        assert parts["amine"]["out_mol_s"] == pytest.approx(AMINE * (1 - share) * BLEED, rel=1e-12)
        assert parts["amine"]["made_mol_s"] == pytest.approx(-AMINE * share, rel=1e-14)
        assert parts["salt"] == pytest.approx(
            {"in_mol_s": 0, "made_mol_s": 0.5 * share * AMINE, "out_mol_s": 0.5 * share * AMINE, "closure": 0}, rel=1e-12, abs=1e-12
        )
        assert closures(result) < 1e-13

    def test_the_order_of_bleed_and_degradation(self):
        """With the bleed first the make-up is H (p + s - p s) as well, and the salt sees the bleed a round later."""
        share = 0.05
        units = {
            "divide": {"kind": "splitter", "takes": "held", "gives": ["bleed", "kept"], "shares": {"bleed": BLEED}},
            "age": {**UNIT, "takes": "kept", "reactions": [{"component": "amine", "share": share, "makes": {"salt": 1.0}}]},
            "top_up": {"kind": "makeup", "takes": "aged", "gives": "held", "hold": {"amine": f"{AMINE} mol/s"}},
        }
        result = leanloop.Flowsheet(SPECIES, feeds={}, units=units, plain_si=False).solve()
        assert result["units.top_up.results.added_mol_s.amine"] == pytest.approx(
            AMINE * (share + BLEED - share * BLEED), rel=1e-12
        )
        assert result["streams.held.mol_s.salt"] == pytest.approx(share * AMINE * (1 - BLEED) / BLEED, rel=1e-12)
        assert closures(result) < 1e-13

    def test_loss_only(self):
        result = loop({"component": "amine", "share": 0.01}, bleed=0.0).solve()
        assert result["units.top_up.results.added_mol_s.amine"] == pytest.approx(0.01 * AMINE, rel=1e-13)
        assert result["units.top_up.results.added_mol_s.water"] == pytest.approx(0, abs=1e-15)
        assert result["balance.components.amine.out_mol_s"] == 0
        assert result["balance.components.amine.made_mol_s"] == pytest.approx(-0.01 * AMINE, rel=1e-13)
        assert closures(result) < 1e-13

    def test_a_chain_of_contaminants(self):
        """Amine makes salt, a share q of which becomes tar each round: salt m / (1 - (1 - q)(1 - p)) before the unit's loss."""
        q, made = 0.1, 0.02 * AMINE
        chain = [{"component": "amine", "share": 0.02, "makes": {"salt": 1.0}},
                 {"component": "salt", "share": q, "makes": {"tar": 2.0}}]  # fmt: skip
        result = loop(*chain).solve()
        # behind the unit: salt = (1 - q)(1 - p) salt + made
        salt = made / (1 - (1 - q) * (1 - BLEED))
        assert result["streams.aged.mol_s.salt"] == pytest.approx(salt, rel=1e-12)
        assert result["streams.bleed.mol_s.tar"] == pytest.approx(2 * q * (1 - BLEED) * salt, rel=1e-12)
        assert closures(result) < 1e-13

    def test_what_is_made_and_vanishes_inside_closes_too(self):
        shares = np.linspace(0.01, 0.99, 41)
        chain = [{"component": "amine", "share": 0.02, "makes": {"salt": 0.7}}, {"component": "salt", "share": 0.5}]
        result = loop(*chain, bleed=0.0).solve({"units.age.reactions.1.share": shares})
        np.testing.assert_allclose(result["streams.aged.mol_s.salt"], 0.7 * 0.02 * AMINE / shares, rtol=1e-12)
        part = result["balance.components.salt"]
        assert (part["in_mol_s"] == 0).all() and (part["out_mol_s"] == 0).all()
        assert np.abs(part["made_mol_s"]).max() < 1e-15 and np.abs(part["closure"]).max() < 1e-15
        assert part["made_mol_s"].any()  # else rounding is not what was tried

    def test_an_open_balance_of_what_is_made_and_vanishes_inside_shows(self, monkeypatch):
        chain = [{"component": "amine", "share": 0.02, "makes": {"salt": 1.0}}, {"component": "salt", "share": 0.5}]
        right = Degradation.made
        monkeypatch.setattr(Degradation, "made", lambda self, *sides: right(self, *sides) + [0, 0, 0.001, 0])
        result = loop(*chain, bleed=0.0).solve()
        through = result["streams.held.mol_s.salt"] + result["streams.aged.mol_s.salt"]
        assert result["balance.components.salt.closure"] == pytest.approx(0.001 / through)  # nothing comes in or leaves
        assert result["balance.components.amine.closure"] == pytest.approx(0, abs=1e-13)

    def test_a_batch_of_rates_and_bleeds(self):
        rates, bleeds = (item.ravel() for item in np.meshgrid([0.0, 1e-9, 1e-3, 0.5, 4.0], [1e-6, 0.01, 1.0]))
        sheet = loop({"component": "amine", "rate": "0.1 mol/s", "makes": {"salt": 0.5}})
        result = sheet.solve({"units.age.reactions.0.rate": rates, "units.divide.shares.bleed": bleeds})
        good = rates < AMINE
        assert result.status == ["converged" if item else "unit_failed" for item in good]
        level = np.array(result["streams.aged.mol_s.salt"])
        np.testing.assert_allclose(level[good], (0.5 * rates / bleeds)[good], rtol=1e-9)
        assert (level[rates == 0] == 0).all()
        made = np.array(result["balance.components.salt.made_mol_s"])
        np.testing.assert_allclose(made[good], 0.5 * rates[good], rtol=1e-14)
        closure = np.array(result["balance.components.salt.closure"])
        assert np.abs(closure[good]).max() < 1e-8

    def test_scaling_of_all_flows(self):
        base = loop({"component": "amine", "rate": "0.1 mol/s", "makes": {"salt": 0.5}})
        keys = ("units.age.reactions.0.rate", "units.top_up.hold.amine", "units.top_up.hold.water")
        one, more = base.solve(), base.solve({key: 1e4 * base.numbers[key] for key in keys})
        for name, flow in one["streams.aged.mol_s"].items():
            assert more[f"streams.aged.mol_s.{name}"] == pytest.approx(1e4 * flow, rel=1e-12)

    @pytest.mark.parametrize("number", [
        "units.age.reactions.0.share", "units.age.reactions.0.makes.salt", "units.age.reactions.1.rate",
        "units.divide.shares.bleed", "units.top_up.hold.amine",
    ])  # fmt: skip
    def test_derivatives_through_the_loop(self, number):
        reactions = [{"component": "amine", "share": 0.03, "makes": {"salt": 0.5}},
                     {"component": "water", "rate": "0.2 mol/s", "makes": {"tar": 0.1, "salt": 0.01}}]  # fmt: skip
        sheet = loop(*reactions, loop={"tolerance": 1e-12})
        result = sheet.solve()
        asked = ["streams.aged.mol_s.salt", "streams.bleed.mol_s.tar", "units.top_up.results.added_mol_s.amine",
                 "units.age.results.degraded_mol_s.amine", "units.age.results.made_mol_s.salt"]  # fmt: skip
        found = result.sensitivities(asked, [number])
        value = sheet.numbers[number]
        step = 1e-4 * value
        ends = [sheet.solve({number: value + way * step}) for way in (1, -1)]
        for address in asked:
            slope = (ends[0][address] - ends[1][address]) / (2 * step)
            assert found[address, number] == pytest.approx(slope, rel=1e-6, abs=1e-8 * abs(result[address] / value)), address

    def test_a_fed_component_that_degrades_at_a_rate(self):
        """Salt f comes and r degrades: what is left, f - r, is bled; with r above f there is no such state."""
        sheet = loop({"component": "salt", "rate": "0.01 mol/s"}, fed={"salt": 0.03})
        result = sheet.solve({"units.age.reactions.0.rate": np.array([0.0, 0.01, 0.0299, 0.05])})
        assert result.status == ["converged"] * 3 + ["unit_failed"]
        np.testing.assert_allclose(result["streams.bleed.mol_s.salt"][:3], [0.03, 0.02, 1e-4], rtol=1e-8)
        assert "0.05 mol/s of 'salt' are to degrade and 0.03 mol/s flow" in result.status_text[3]

    def test_a_pair_of_columns(self, tmp_path):
        """The oil of the example degrades on its way to the stripper: bleed and balance by hand, the window still found."""
        text = VENT.read_text(encoding="utf-8").split("[studies.")[0].replace('liquid_in = "hot_rich"', 'liquid_in = "aged"')
        text = text.replace("[components]", '[components]\ntar = { molar_mass = "400 g/mol", stays_in = "liquid" }')
        text += """
[units.age]
kind = "degradation"
takes = "hot_rich"
gives = "aged"
reactions = [{ component = "oil", share = 2e-4, makes = { tar = 0.6 } }]
"""
        (tmp_path / "vent.toml").write_text(text, encoding="utf-8")
        result = leanloop.read(tmp_path / "vent.toml").solve()
        assert result.converged
        oil = result["requirements.emission.free_value"]
        assert result["streams.bleed.mol_s.tar"] == pytest.approx(0.6 * 2e-4 * oil, rel=1e-10)
        added = result["units.top_up.results.added_mol_s.oil"]
        assert added == pytest.approx(oil * (2e-4 + 2e-3 - 4e-7), rel=1e-10)
        assert closures(result) < 1e-12
        # tar carries solute as oil does: less oil is asked for than without it
        assert oil < leanloop.read(VENT).solve()["requirements.emission.free_value"]
        window = leanloop.limits(result).to_dict()["loop"]
        assert window["least_circulation_mol_s"] < oil < window["most_circulation_mol_s"]

    def test_requirement_on_a_made_contaminant(self):
        wanted = {"clean": {"quantity": "streams.held.fraction.salt", "equals": 0.01, "free": "units.divide.shares.bleed",
                            "between": [0.001, 0.5]}}  # fmt: skip
        result = loop({"component": "amine", "share": 0.01, "makes": {"salt": 1.0}}, requirements=wanted).solve()
        assert result.converged
        p = result["requirements.clean.free_value"]
        salt = 0.01 * AMINE * (1 - p) / p
        assert salt / (salt + AMINE + WATER) == pytest.approx(0.01, rel=1e-9)


class TestWays:
    """What is made needs a way out; to degrade by share is one."""

    def test_a_made_contaminant_without_a_way_out_is_refused(self):
        units = {
            "age": {**UNIT, "takes": "held", "reactions": [{"component": "amine", "share": 0.01, "makes": {"salt": 0.5}}]},
            "top_up": {"kind": "makeup", "takes": "aged", "gives": "held", "hold": {"amine": "1 mol/s"}},
        }
        found = faults(leanloop.Flowsheet, SPECIES, feeds={}, units=units, plain_si=False)
        assert len(found) == 1
        assert found[0].startswith("components.salt: 'salt' has a way in and no way out of aged, held; give it a bleed")

    def test_a_bleed_of_zero_is_no_steady_state_where_something_is_made(self):
        sheet = loop({"component": "amine", "share": 0.01, "makes": {"salt": 0.5}})
        result = sheet.solve({
            "units.divide.shares.bleed": np.array([0.1, 0.0, 0.0, 0.0]),
            "units.age.reactions.0.share": np.array([0.01, 0.01, 0.0, 0.01]),
            "units.age.reactions.0.makes.salt": np.array([0.5, 0.5, 0.5, 0.0]),
        })  # fmt: skip
        assert result.status == ["converged", "no_steady_state", "converged", "converged"]
        np.testing.assert_allclose(result["streams.aged.mol_s.salt"][[0, 2, 3]], [0.5 * 0.01 * AMINE / 0.1, 0.0, 0.0], rtol=1e-12)
        found = faults(sheet.solve, {"units.divide.shares.bleed": 0.0})
        assert found[0].startswith("components.salt: 'salt' has a way in and no way out")

    def test_to_degrade_by_share_is_a_way_out_and_by_rate_is_none(self):
        """Salt is fed to a loop without bleed: at the level where the share degrades what comes."""

        def closed(reaction):
            units = {
                "join": {"kind": "mixer", "takes": ["held", "fed"], "gives": "joined"},
                "age": {**UNIT, "takes": "joined", "reactions": [reaction]},
                "top_up": {"kind": "makeup", "takes": "aged", "gives": "held", "hold": {"amine": "1 mol/s"}},
            }
            return leanloop.Flowsheet(SPECIES, feeds={"fed": feed({"salt": 0.03})}, units=units, plain_si=False)

        sheet = closed({"component": "salt", "share": 0.25})
        result = sheet.solve({"units.age.reactions.0.share": np.array([0.25, 1.0, 0.0])})
        assert result.status == ["converged", "converged", "no_steady_state"]
        np.testing.assert_allclose(result["streams.joined.mol_s.salt"][:2], [0.12, 0.03], rtol=1e-12)
        np.testing.assert_allclose(result["balance.components.salt.made_mol_s"][:2], -0.03, rtol=1e-12)
        found = faults(closed, {"component": "salt", "rate": "0.03 mol/s"})
        assert [item.partition(":")[0] for item in found] == ["components.salt"]

    def test_what_degrades_brings_no_solvent(self):
        """A loop of columns that only makes a contaminant is still one without a solvent."""
        constants = {"solute": {"model": "constant", "K": 0.5}}
        text = {"solute": {}, "air": {"stays_in": "gas"}, "oil": {"stays_in": "liquid"}, "tar": {"stays_in": "liquid"}}
        units = {
            "wash": {"kind": "absorber", "gas_in": "sour", "liquid_in": "old", "gas_out": "clean", "liquid_out": "rich",
                     "stages": 3, "equilibrium": "here"},
            "age": {**UNIT, "takes": "rich", "gives": "old",
                    "reactions": [{"component": "solute", "share": 0.5, "makes": {"tar": 1.0}}]},
        }  # fmt: skip
        sour = feed({"air": 1.0, "solute": 0.1}, "gas")
        found = faults(leanloop.Flowsheet, text, {"here": constants}, {"sour": sour}, units, plain_si=False)
        assert any("no feed brings a solvent and no makeup holds its circulation" in item for item in found)


HEAT = {
    "amine": {"liquid_heat_capacity": {"polynomial": [90.0, 0.25], "temperature": "K", "unit": "J/(mol K)"}},
    "water": {"liquid_heat_capacity": "75.3 J/(mol K)"},
    "salt": {"liquid_heat_capacity": "210 J/(mol K)"},
}


class TestHeat:
    def test_the_energy_balance_closes_over_a_loop(self):
        three = {name: SPECIES[name] for name in HEAT}
        units = {
            "warm": {"kind": "heater", "takes": "held", "gives": "hot", "temperature": "120 degC"},
            "age": {**UNIT, "takes": "hot", "reactions": [{"component": "amine", "share": 0.05, "makes": {"salt": 0.4}}]},
            "cool": {"kind": "cooler", "takes": "aged", "gives": "cold", "temperature": "40 degC"},
            "divide": {"kind": "splitter", "takes": "cold", "gives": ["bleed", "kept"], "shares": {"bleed": BLEED}},
            "top_up": {"kind": "makeup", "takes": "kept", "gives": "held", "temperature": "20 degC",
                       "hold": {"amine": "3 mol/s", "water": "7 mol/s"}},
        }  # fmt: skip
        result = leanloop.Flowsheet(three, feeds={}, units=units, heat_data=HEAT, plain_si=False).solve()
        assert abs(result["balance.energy.closure"]) < 1e-12
        assert result["streams.aged.temperature_K"] == result["streams.hot.temperature_K"] == pytest.approx(393.15)
        # by hand: what is added is the make-up at 20 degC and, at 120 degC, salt made less amine lost
        h_amine = lambda t: 90 * (t - 298.15) + 0.125 * (t * t - 298.15**2)  # noqa: E731
        added = result["units.top_up.results.added_mol_s"]
        own = 0.05 * 3 * (0.4 * 210 * 95 - h_amine(393.15))
        come = added["amine"] * h_amine(293.15) + added["water"] * 75.3 * -5
        assert result["balance.energy.in_W"] == pytest.approx(own + come, rel=1e-10)
        assert any("Degradation age: the temperature stays; no heat of reaction is counted." == item for item in result.cautions())

    def test_without_heat_data_of_what_is_made_energy_is_not_balanced(self):
        two = {name: HEAT[name] for name in ("amine", "water")}
        made = {"component": "amine", "share": 0.1, "makes": {"tar": 1.0}}
        result = alone([made], feed({"amine": 1.0, "water": 1.0}), heat_data=two)
        assert result.to_dict()["balance"]["energy"] is None
        assert "tar" in str(result)
        assert not any("heat of reaction" in item for item in result.cautions())

    def test_gas(self):
        data = {name: {"gas_heat_capacity": "29 J/(mol K)"} for name in GASES}
        stay = {name: {"stays_in": "gas"} for name in GASES}
        result = alone([{"component": "ozone", "share": 0.4}], feed({"air": 2.0, "ozone": 0.1}, "gas"), stay, heat_data=data)
        assert result["balance.energy.in_W"] == pytest.approx((2.0 + 0.06) * 29 * 25, rel=1e-12)
        assert abs(result["balance.energy.closure"]) < 1e-13


class TestSaid:
    def test_report_and_tables(self):
        result = loop({"component": "amine", "share": 0.01, "makes": {"salt": 0.5}}).solve()
        text = str(result)
        head = next(line for line in text.splitlines() if "make-up included" in line)
        assert head.split("  ")[-1].strip() == "closure" and " made " in head
        plain = str(loop({"component": "amine", "share": 0.0}).solve())
        assert " made " not in next(line for line in plain.splitlines() if "make-up included" in line)

    def test_more_mass_made_than_lost_is_a_caution(self):
        def said(yields):
            result = alone([{"component": "amine", "share": 0.1, "makes": yields}], feed({"amine": 1.0}))
            return [item for item in result.cautions() if "Degradation" in item]

        assert said({"salt": 0.5}) == []
        assert said({"salt": 61 / 107}) == []
        assert said({"salt": 1.0}) == ["Degradation age: reactions[0] makes 1.754 kg of each kg of amine that degrades."]
        assert said({"salt": 0.5, "water": 1.0}) == [
            "Degradation age: reactions[0] makes 1.172 kg of each kg of amine that degrades."
        ]
        assert said({"tar": 9.0, "salt": 9.0}) == []  # of tar no molar mass is known


A = {"component": "amine", "share": 0.1}
FED = {"amine": 1.0, "water": 1.0}


class TestFaults:
    @pytest.mark.parametrize(("reactions", "wanted"), [
        ([], ["units.age.reactions: degrades nothing; write [{"]),
        (3, ["units.age.reactions: 3 is no list of tables"]),
        ([{"component": "amine"}], ["units.age.reactions[0].share: is not known; add share = 0.001 or rate"]),
        ([{"share": 0.1}], ["units.age.reactions[0].component: entry is missing"]),
        ([{**A, "rate": "1 mol/h"}], ["units.age.reactions[0].rate: stands beside share; keep one of the two"]),
        ([A, {"component": "amine", "rate": "1 mol/h"}],
         ["units.age.reactions[1].rate: 'amine' degrades by share in reactions[0]; write share here as well, or rate there"]),
        ([{"component": "amine", "share": 1.2}], ["units.age.reactions[0].share: 1.2 is out of range"]),
        ([{"component": "amine", "rate": 0.1}], ["units.age.reactions[0].rate: 0.1 has no unit"]),
        ([{"component": "amine", "rate": "-1 mol/h"}], ["units.age.reactions[0].rate: '-1 mol/h' is out of range"]),
        ([{"component": "amine", "shere": 0.1}], ["units.age.reactions[0].shere: unknown entry 'shere'; did you mean 'share'?"]),
        ([{"component": "amin", "share": 0.1}], ["units.age.reactions[0].component: unknown component 'amin'"]),
        ([{**A, "makes": {"amine": 0.5}}], ["units.age.reactions[0].makes.amine: 'amine' is made of itself"]),
        ([{**A, "makes": {}}], ["units.age.reactions[0].makes: makes nothing"]),
        ([{**A, "makes": {"slat": 0.5}}], ["units.age.reactions[0].makes.slat: unknown component 'slat'"]),
        ([{**A, "makes": {"salt": -0.5}}], ["units.age.reactions[0].makes.salt: -0.5 is out of range"]),
        ([{**A, "share": 0.6}, A, {**A, "share": 0.4}, A],
         ["units.age.reactions[2].share: the shares of 'amine' sum to 1.1; let them sum to 1 at most"]),
        ([{"component": "tar", "share": 0.1}], ["units.age.reactions[0].component: 'tar' never flows in stream 'fed'"]),
        ([{"component": "air", "share": 0.1}],
         ["units.age.reactions[0].component: 'air' stays in the gas and stream 'fed' is liquid"]),
        ([{**A, "makes": {"air": 0.1}}], ["units.age.reactions[0].makes.air: 'air' stays in the gas and stream 'fed' is liquid"]),
        ([{"component": "amine", "rate": "1 kg/h"}, {**A, "makes": {"water": "2 bar"}}],
         ["units.age.reactions[0].rate: '1 kg/h' is", "units.age.reactions[1].makes.water: '2 bar' is",
          "units.age.reactions[1].share: 'amine' degrades by rate in reactions[0]"]),
    ])  # fmt: skip
    def test_every_fault_has_its_address(self, reactions, wanted):
        found = faults(alone, reactions, feed(FED), {**SPECIES, **GASES})
        assert len(found) == len(wanted), found
        for fault, part in zip(sorted(found), sorted(wanted), strict=True):
            assert fault.startswith(part), fault

    def test_entries_that_lack(self):
        bare = {"age": {"kind": "degradation"}}
        found = faults(leanloop.Flowsheet, SPECIES, feeds={"fed": feed(FED)}, units=bare, plain_si=False)
        assert {item.partition(":")[0] for item in found} == {"units.age.takes", "units.age.gives", "units.age.reactions"}

    def test_two_phases_are_refused(self):
        units = {
            "let": {"kind": "valve", "takes": "fed", "gives": "low", "pressure": "1 bar", "equilibrium": "here"},
            "age": {**UNIT, "takes": "low", "reactions": [{"component": "ozone", "share": 0.1}]},
        }
        table = {"ozone": {"model": "constant", "K": 2.0}}
        data = {"ozone": {"gas_heat_capacity": "40 J/(mol K)", "liquid_heat_capacity": "80 J/(mol K)",
                          "heat_of_vaporisation": "14 kJ/mol"}, "water": HEAT["water"]}  # fmt: skip
        found = faults(
            leanloop.Flowsheet, {**GASES, "water": SPECIES["water"]}, {"here": table}, {"fed": feed({"ozone": 1.0, "water": 1.0})},
            units, heat_data=data, plain_si=False,
        )  # fmt: skip
        assert found == ["units.age.takes: stream 'low' may be of gas and liquid; separate it in a flash drum before"]


def test_python_objects_in_a_loop():
    units = [
        Degradation("age", takes="held", gives="aged", reactions=[{"component": "amine", "rate": 0.01, "makes": {"salt": 1.0}}]),
        Splitter("divide", takes="aged", gives=["bleed", "kept"], shares={"bleed": 0.1}),
        Makeup("top_up", takes="kept", gives="held", hold={"amine": 2.0}),
    ]
    result = leanloop.Flowsheet(SPECIES, feeds=[], units=units).solve()
    assert result["streams.aged.mol_s.salt"] == pytest.approx(0.1, rel=1e-12)
    assert result["units.top_up.results.added_mol_s.amine"] == pytest.approx(0.01 + 0.1 * 1.99, rel=1e-12)
