"""Faults that use has found, each kept from coming back."""

import json
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

import leanloop
from leanloop.cli import main

VENT = Path(__file__).resolve().parents[1] / "flowsheets" / "coating_vent.toml"


def test_report_with_a_group(capsys):
    assert main(["solve", str(VENT), "--set", 'groups.all=["toluene", "resin"]']) == 0
    assert "Column wash" in capsys.readouterr().out


@pytest.mark.parametrize("last", ["feeds.vent=5", "feeds.vent={}", 'feeds.vent.fractions="x"', "feeds.vent.fractions={}"])
def test_later_setting_replaces_the_table_of_an_earlier_one(capsys, last):
    assert main(["solve", str(VENT), "--set", "feeds.vent.fractions.toluene=0.01", "--set", last]) == 2
    assert "feeds.vent" in capsys.readouterr().err


def test_closed_output():
    script = f"{sys.executable} -W error -m leanloop solve {VENT} >&-"
    done = subprocess.run(["sh", "-c", script], capture_output=True, text=True, timeout=60)
    assert "Traceback" not in done.stderr
    assert done.returncode == 0


def test_all_files_or_none(tmp_path, capsys):
    blocked = tmp_path / "file"
    blocked.write_text("")
    target = tmp_path / "out.json"
    assert main(["solve", str(VENT), "--json", str(target), "--tables", str(blocked / "tables")]) == 2
    assert not target.exists()
    assert main(["solve", str(VENT), "--json", str(tmp_path), "--tables", str(tmp_path / "tables")]) == 2
    assert not list((tmp_path / "tables").glob("*.csv"))
    assert main(["solve", str(VENT), "--json", str(target), "--tables", str(tmp_path / "tables")]) == 0
    assert json.loads(target.read_text())["status"] == "converged"


def test_no_cases_and_no_numbers():
    sheet = leanloop.read(VENT)
    with pytest.raises(leanloop.InputError, match="no cases"):
        sheet.solve({"feeds.steam.flow": np.array([])})
    with pytest.raises(leanloop.InputError, match="is no number"):
        sheet.solve().sensitivity("streams.cleaned.phase", "feeds.steam.flow")


def test_undefined_has_no_derivative():
    result = leanloop.read(VENT).solve()
    assert np.isnan(result["streams.cleaned.dew_point_K"])
    assert np.isnan(result.sensitivity("streams.cleaned.dew_point_K", "feeds.steam.flow"))


@pytest.mark.parametrize("target", ["0.2", '"0.2 ppm"', '"3 kg"'])
def test_a_concentration_has_a_unit(capsys, target):
    assert main(["check", str(VENT), "--set", f"requirements.emission.equals={target}"]) == 2
    assert "requirements.emission.equals" in capsys.readouterr().err


def test_two_objects_of_one_name():
    feed = dict(phase="gas", temperature=300.0, pressure=1e5, flows={"air": 1.0})
    with pytest.raises(leanloop.InputError, match="two feeds"):
        leanloop.Flowsheet({"air": {}}, feeds=[leanloop.Feed("a", **feed), leanloop.Feed("a", **feed)])


def test_table_with_decimal_commas_is_refused(tmp_path):
    (tmp_path / "points.csv").write_text("X,Y\n0,0,0,0\n1,5,0,2\n")
    text = VENT.read_text(encoding="utf-8")
    head = text[: text.index("[equilibrium.oil]")]
    path = tmp_path / "sheet.toml"
    path.write_text(head + '[equilibrium.oil]\ntoluene = { model = "table", file = "points.csv" }\n', encoding="utf-8")
    with pytest.raises(leanloop.InputError, match="cells"):
        leanloop.read(path)


def test_a_column_that_dries_up():
    sheet = leanloop.Flowsheet(
        {"air": {"stays_in": "gas"}, "s": {}, "oil": {"stays_in": "liquid"}},
        {"t": {"s": {"model": "constant", "K": 20.0}}},
        [
            leanloop.Feed("g", phase="gas", temperature=300.0, pressure=1e5, flows={"air": 10.0}),
            leanloop.Feed("l", phase="liquid", temperature=300.0, pressure=1e5, flows={"s": 1e-3, "oil": 0.0}),
        ],
        {"tower": dict(kind="absorber", gas_in="g", liquid_in="l", gas_out="c", liquid_out="r", stages=4, equilibrium="t")},
    )
    assert sheet.solve().status == "dry_stage"


def test_components_as_objects():
    air, oil = leanloop.Component("air", 0.02896, "gas"), leanloop.Component("oil", stays_in="liquid")
    feed = leanloop.Feed("a", phase="gas", temperature=300.0, pressure=1e5, flows={"air": 1.0})
    units = {"warm": dict(kind="heater", takes="a", gives="b", temperature=320.0)}
    result = leanloop.Flowsheet([air, oil], feeds=[feed], units=units).solve()
    assert result["streams.b.temperature_K"] == 320.0
    with pytest.raises(leanloop.InputError, match="two components"):
        leanloop.Flowsheet([air, air], feeds=[feed], units=units)
