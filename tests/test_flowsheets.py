"""The example flowsheets against the results that stand beside them, and against their own balances."""

import json
import tomllib
from pathlib import Path

import numpy as np
import pytest

import leanloop

FOLDER = Path(__file__).resolve().parents[1] / "flowsheets"
FILES = sorted(FOLDER.glob("*.toml"))


@pytest.mark.parametrize("path", FILES, ids=lambda path: path.stem)
class TestExamples:
    def test_expected_result(self, path):
        expected = json.loads(path.with_suffix(".expected.json").read_text(encoding="utf-8"))
        result = leanloop.read(path).solve()
        assert result.status == "converged"
        assert len(expected) >= 10
        for address, value in expected.items():
            assert result[address] == pytest.approx(value, rel=1e-7), address

    def test_every_component_balances(self, path):
        balance = leanloop.read(path).solve().to_dict()["balance"]["components"]
        assert balance
        for component, item in balance.items():
            assert abs(item["closure"]) <= 1e-9, component

    def test_says_what_it_is(self, path):
        text = path.read_text(encoding="utf-8")
        assert tomllib.loads(text)["title"]
        assert "#" in text

    def test_answer_does_not_depend_on_the_method(self, path):
        result = leanloop.read(path, ["loop.method=anderson", "loop.tolerance=1e-12"]).solve()
        other = leanloop.read(path).solve()
        assert result.status == "converged"
        for stream in other.to_dict()["streams"]:
            np.testing.assert_allclose(result.stream(stream).flows, other.stream(stream).flows, rtol=1e-7, atol=1e-14)


def test_there_are_examples():
    assert {"coating_vent", "acetone_scrubber"} <= {path.stem for path in FILES}
