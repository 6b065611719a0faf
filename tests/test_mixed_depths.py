"""Columns of different height in one batch give what each gives by itself."""

import sys
from pathlib import Path

import numpy as np
import pytest

sys.path.insert(0, str(Path(__file__).resolve().parent))

import scenes

QUANTITIES = (
    "streams.cleaned.mol_s.{c}", "streams.rich.mol_s.{c}", "streams.lean.mol_s.{c}", "streams.overhead.total_mol_s",
    "units.wash.results.removal.{c}", "units.wash.results.absorption_factor.{c}", "units.strip.results.stripping_factor.{c}",
    "units.wash.results.approach_rich.{c}", "units.wash.results.approach_lean.{c}", "units.strip.results.approach_rich.{c}",
)  # fmt: skip

CURVE = '{ model = "table", x = [0.0, 0.05, 0.2, 0.6], y = [0.0, 0.02, 0.12, 0.5] }'
SCENES = {
    "three solutes": dict(
        cold=scenes.constants(["a", "b", "c"], [0.08, 0.4, 2.5]),
        hot=scenes.constants(["a", "b", "c"], [1.6, 4.0, 30.0]),
        feed_ratio={"a": 0.05, "b": 0.03, "c": 0.01},
    ),
    "hot liquid that would boil without gas": dict(
        cold=scenes.constants(["a", "b"], [0.05, 0.07]),
        hot=scenes.constants(["a", "b"], [9.0, 14.0]),
        feed_ratio={"a": 0.3, "b": 0.2},
    ),
    "mole ratios": dict(
        cold={"a": scenes.constant(0.2, "ratio"), "b": scenes.constant(0.6)},
        hot={"a": scenes.constant(2.0, "ratio"), "b": scenes.constant(5.0)},
        feed_ratio={"a": 0.1, "b": 0.02},
    ),
    "a curve": dict(cold={"a": CURVE}, hot=scenes.constants(["a"], [2.5]), feed_ratio={"a": 0.08}),
    "a purge and an impurity": dict(
        cold=scenes.constants(["a"], [0.1]), hot=scenes.constants(["a"], [3.0]), feed_ratio={"a": 0.02}, purge=1e-3, impurity=1e-4
    ),
}
STAGES = np.array([(1, 1), (1, 9), (2, 3), (3, 2), (4, 7), (5, 5), (7, 4), (8, 7), (12, 1), (20, 13)])


def sheet_of(tmp_path, name, extra=""):
    return scenes.read(tmp_path, scenes.loop((5, 5), solvent=1.5, gas=8.0, stripping=0.7, extra=extra, **SCENES[name]))


def both(sheet, more=None):
    changes = {"units.wash.stages": STAGES[:, 0], "units.strip.stages": STAGES[:, 1], **(more or {})}
    return sheet.solve(changes), sheet.solve_cases(changes, mixed=True)


@pytest.mark.parametrize("name", SCENES)
def test_every_case_is_what_it_is_alone(tmp_path, name):
    sheet = sheet_of(tmp_path, name)
    apart, together = both(sheet)
    assert apart.status == together.status
    assert set(apart.status) == {"converged"}
    assert len(together.parts) < len(apart.parts)
    for quantity in QUANTITIES:
        for solute in SCENES[name]["cold"]:
            address = quantity.format(c=solute)
            assert together[address] == pytest.approx(apart[address], rel=1e-9, abs=1e-15), address


@pytest.mark.parametrize("name", SCENES)
def test_profiles_end_at_the_own_bottom(tmp_path, name):
    sheet = sheet_of(tmp_path, name)
    apart, together = both(sheet)
    for unit, column in (("wash", 0), ("strip", 1)):
        for key in ("x.a", "Y.a", "liquid_mol_s", "gas_mol_s"):
            own, padded = apart[f"units.{unit}.profile.{key}"], together[f"units.{unit}.profile.{key}"]
            for case, count in enumerate(STAGES[:, column]):
                assert len(own[case]) == count
                assert np.array(padded[case][:count]) == pytest.approx(own[case], rel=1e-9, abs=1e-15)
                assert np.isnan(np.array(padded[case][count:], dtype=float)).all()


@pytest.mark.parametrize("name", SCENES)
def test_sensitivities_are_the_same(tmp_path, name):
    sheet = sheet_of(tmp_path, name)
    apart, together = both(sheet)
    for number in ("units.top_up.hold.oil", "feeds.vent.flows.a", "feeds.steam.flows.steam", "feeds.vent.pressure"):
        for quantity in ("streams.cleaned.mol_s.a", "units.wash.results.absorption_factor.a", "streams.lean.mol_s.a"):
            want = apart.sensitivity(quantity, number)
            assert together.sensitivity(quantity, number) == pytest.approx(want, rel=1e-7, abs=1e-9 * np.abs(want).max() + 1e-13)


def test_requirements_hold_in_a_mixed_batch(tmp_path):
    extra = scenes.requirement("outlet", "units.wash.results.removal.a", 0.9, "units.top_up.hold.oil", ("0.2 mol/s", "9 mol/s"))
    sheet = sheet_of(tmp_path, "a purge and an impurity", extra)
    apart, together = both(sheet)
    assert apart.status == together.status
    good = np.array(apart.status) == "converged"
    assert good.sum() >= 5
    assert together["requirements.outlet.free_value"] == pytest.approx(apart["requirements.outlet.free_value"], rel=1e-9)


def test_a_bad_case_spoils_no_other(tmp_path):
    sheet = sheet_of(tmp_path, "three solutes")
    good = both(sheet)[1]
    oil = np.full(len(STAGES), 1.5)
    oil[4] = np.nan
    spoilt = both(sheet, {"units.top_up.hold.oil": oil})[1]
    assert spoilt.status[4] != "converged"
    rest = np.arange(len(STAGES)) != 4
    assert spoilt["streams.cleaned.mol_s.a"][rest] == pytest.approx(good["streams.cleaned.mol_s.a"][rest], rel=1e-12)


def test_columns_with_heat_are_solved_apart():
    import leanloop

    sheet = leanloop.read(Path(__file__).resolve().parents[1] / "flowsheets" / "ammonia_wash.toml")
    assert sheet.deepening() == frozenset()
