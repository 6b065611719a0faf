"""A multiplier on an equilibrium model: K times as large everywhere, an input like any other."""

import sys
from pathlib import Path

import numpy as np
import pytest

sys.path.insert(0, str(Path(__file__).resolve().parent))

import scenes

import leanloop
from leanloop import InputError

MODELS = {
    "constant": '{{ model = "constant", K = 0.2{} }}',
    "ratio": '{{ model = "constant", K = 0.2, basis = "ratio"{} }}',
    "polynomial": '{{ model = "polynomial", K = [-1.0, 0.004]{} }}',
    "henry": '{{ model = "henry", constant = "0.3 bar", slope = "2000 K", at = "25 degC"{} }}',
    "table": '{{ model = "table", x = [0.0, 0.05, 0.2, 0.6], y = [0.0, 0.02, 0.12, 0.5]{} }}',
    "temperature table": '{{ model = "table", temperature = [10, 60], unit = "degC", K = [0.1, 0.5]{} }}',
}
ANTOINE = (
    '{{ model = "raoult", vapour_pressure = {{ form = "antoine", A = 6.95, B = 1345.0, C = 219.5, pressure = "mmHg", '
    'temperature = "degC" }}{} }}'
)
MODELS["raoult"] = ANTOINE


def sheet_of(tmp_path, model, times, extra=""):
    text = MODELS[model].format("" if times is None else f", multiplier = {times}")
    feeds = ({"inert": 8.0, "a": 0.4}, {"oil": 5.0, "a": 0.02})
    return scenes.read(tmp_path, scenes.column("absorber", 4, ["a"], *feeds, {"a": text}, extra=extra))


@pytest.mark.parametrize("model", MODELS)
def test_one_changes_nothing(tmp_path, model):
    plain, one = sheet_of(tmp_path, model, None).solve(), sheet_of(tmp_path, model, 1.0).solve()
    assert one["streams.cleaned.mol_s.a"] == pytest.approx(plain["streams.cleaned.mol_s.a"], rel=1e-13)


@pytest.mark.parametrize("model", MODELS)
def test_k_is_as_many_times_as_large(tmp_path, model):
    plain, more = sheet_of(tmp_path, model, None).solve(), sheet_of(tmp_path, model, 1.7).solve()
    assert more["streams.cleaned.mol_s.a"] > plain["streams.cleaned.mol_s.a"]
    x, y = more["units.column.profile.x.a"], more["units.column.profile.y.a"]
    sheet = sheet_of(tmp_path, model, 1.7)
    own = sheet.conditions["stage"].models["a"]
    top, bottom = np.array(x), np.array(y)
    if own.coordinates == "ratio":
        top, bottom = np.array(more["units.column.profile.X.a"]), np.array(more["units.column.profile.Y.a"])
    want = 1.7 * own.inner.gas(np.full(4, 298.15), np.full(4, 1e5), top, own.inner.numbers)
    assert bottom == pytest.approx(want, rel=1e-10)


def test_constant_k_may_as_well_be_larger(tmp_path):
    more = sheet_of(tmp_path, "constant", 1.7).solve()
    feeds = ({"inert": 8.0, "a": 0.4}, {"oil": 5.0, "a": 0.02})
    other = scenes.read(tmp_path, scenes.column("absorber", 4, ["a"], *feeds, {"a": scenes.constant(0.34)})).solve()
    assert more["streams.cleaned.mol_s.a"] == pytest.approx(other["streams.cleaned.mol_s.a"], rel=1e-13)


@pytest.mark.parametrize("model", MODELS)
def test_its_sensitivity_is_exact(tmp_path, model):
    sheet, address = sheet_of(tmp_path, model, 1.2), "equilibrium.stage.a.multiplier"
    slope = sheet.solve().sensitivity("streams.cleaned.mol_s.a", address)
    step = 1e-4
    ends = sheet.solve({address: np.array([1.2 - step, 1.2 + step])})["streams.cleaned.mol_s.a"]
    assert slope == pytest.approx((ends[1] - ends[0]) / (2 * step), rel=1e-6)


def test_it_is_freed_to_match_plant_data(tmp_path):
    measured = sheet_of(tmp_path, "raoult", 1.31).solve()["units.column.results.removal.a"]
    extra = (
        f'[requirements.plant]\nquantity = "units.column.results.removal.a"\nequals = {measured!r}\n'
        'free = "equilibrium.stage.a.multiplier"\nbetween = [0.5, 2.0]\n'
    )
    found = sheet_of(tmp_path, "raoult", 1.0, extra).solve()
    assert found.converged
    assert found["requirements.plant.free_value"] == pytest.approx(1.31, rel=1e-8)


def test_adiabatic_stages_know_it():
    text = (Path(__file__).resolve().parents[1] / "flowsheets" / "ammonia_wash.toml").read_text(encoding="utf-8")
    sheet = leanloop.read(Path(__file__).resolve().parents[1] / "flowsheets" / "ammonia_wash.toml")
    name = next(iter(sheet.conditions))
    given = sheet.given["equilibrium"]
    component = next(key for key, item in given[name].items() if "model" in item)
    assert component in text
    changed = {**given, name: {**given[name], component: {**given[name][component], "multiplier": 1.25}}}
    result = sheet.rebuilt(equilibrium=changed).solve()
    assert result.converged
    product = next(iter(sheet.plan.structure.products))
    slope = result.sensitivity(f"streams.{product}.total_mol_s", f"equilibrium.{name}.{component}.multiplier")
    assert np.isfinite(slope)


@pytest.mark.parametrize("value", ["0", "-1.0", '"twice"', "[1.0]", "true"])
def test_wrong_ones_are_faults(tmp_path, value):
    with pytest.raises(InputError) as error:
        sheet_of(tmp_path, "constant", value)
    assert [fault.address for fault in error.value.faults] == ["equilibrium.stage.a.multiplier"]
