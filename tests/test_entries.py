"""Reading of entries: every fault at once, each at its address with what to write instead."""

import math

import numpy as np
import pytest

from leanloop.entries import Context, Entry, Values, read_number, read_values
from leanloop.errors import Fault, InputError, nearest

ENTRIES = (
    Entry("flow", ("molar flow", "mass flow"), required=True, above=0.0),
    Entry("temperature", "temperature"),
    Entry("approach", "temperature difference"),
    Entry("stages", "integer", required=True, least=1, most=100),
    Entry("share", "number", least=0.0, below=1.0),
    Entry("points", "number", many=True, cases=False),
    Entry("flows", ("molar flow", "mass flow"), many=True),
    Entry("hold", "molar flow", by="component"),
    Entry("basis", "choice", choices=("fraction", "ratio")),
    Entry("names", "component", many=True),
    Entry("open", "flag"),
    Entry("activity", "table", nested=(Entry("a", required=True), Entry("b", "pressure"), Entry("unit", "text"))),
)
RIGHT = {"flow": "36 kmol/h", "stages": 8}
PLACE = "units.wash"


def read(table, **context):
    context = Context(**context)
    return read_values(ENTRIES, table, PLACE, context), context.faults


def right(table, **context):
    values, faults = read({**RIGHT, **table}, **context)
    assert [str(fault) for fault in faults] == []
    return values


def wrong(table, **context):
    """The single fault of a table whose required entries are right."""
    faults = read({**RIGHT, **table}, **context)[1]
    assert len(faults) == 1, [str(fault) for fault in faults]
    return faults[0]


def test_values_are_in_si_under_flat_names():
    values = right(
        {
            "temperature": "26 degC",
            "approach": "18 degF",
            "share": 0.25,
            "points": [1, "50 %", 0.5],
            "hold": {"oil": "1.6 mol/s", "water": "3.6 kmol/h"},
            "basis": "ratio",
            "names": "oil",
            "open": True,
            "activity": {"a": -1, "b": "1 bar", "unit": "degC"},
        }
    )
    assert values.numbers.pop("points") == [1, 0.5, 0.5]
    assert values.numbers == pytest.approx(
        {
            "flow": 10.0,
            "stages": 8,
            "temperature": 299.15,
            "approach": 10.0,
            "share": 0.25,
            "hold.oil": 1.6,
            "hold.water": 1.0,
            "activity.a": -1,
            "activity.b": 1e5,
        }
    )
    assert values.words == {"basis": "ratio", "names": ("oil",), "open": True, "activity": {"unit": "degC"}}
    assert values.sorts["flow"] == "molar flow"
    assert values.sorts["hold.oil"] == "molar flow"
    assert values.sorts["activity.b"] == "pressure"
    assert values.entries["hold.oil"] is ENTRIES[7]
    assert values.entries["activity.a"].name == "a"
    assert values.group("hold") == pytest.approx({"oil": 1.6, "water": 1.0})
    assert values.group("flow") == {}


def test_every_fault_is_told_at_once():
    values, faults = read(
        {
            "flwo": 1,
            "temperature": "1 bar",
            "stages": 8.5,
            "share": 2,
            "points": [1, "x", True],
            "hold": {"oli": "1 mol/s", "oil": 1},
            "basis": "rato",
            "names": ["oil", "wter"],
            "open": "yes",
            "activity": {"b": "1 K", "c": 1},
        },
        names={"component": ["oil", "water"]},
    )
    assert {fault.address.removeprefix(PLACE + ".") for fault in faults} == {
        "flwo", "temperature", "stages", "share", "points[1]", "points[2]", "hold.oli", "hold.oil", "basis",
        "names[1]", "open", "activity.a", "activity.b", "activity.c",
    }  # fmt: skip
    assert len(faults) == 14  # a required entry that is misspelt is not missing as well
    assert values.numbers == {}
    remedies = {fault.address.removeprefix(PLACE + "."): fault.remedy for fault in faults}
    assert remedies["flwo"] == "did you mean 'flow'?"
    assert remedies["hold.oli"] == "did you mean 'oil'?"
    assert remedies["names[1]"] == "did you mean 'water'?"
    assert remedies["basis"] == "did you mean 'ratio'?"
    assert {fault.address: fault.remedy for fault in read({})[1]}[PLACE + ".flow"] == 'add flow = "10 mol/s"'
    assert "degC" in remedies["temperature"]


def test_lines_of_an_input_error():
    _, faults = read({"flow": "36 kmol/h"})
    error = InputError([*faults, *faults], "plant.toml")
    assert error.lines() == ["plant.toml: units.wash.stages: entry is missing; add stages = 8"]
    assert str(InputError(faults)) == "units.wash.stages: entry is missing; add stages = 8"
    assert error.faults == (Fault("units.wash.stages", "entry is missing", "add stages = 8"),)


@pytest.mark.parametrize("table", [None, 3, "text", [1, 2]])
def test_what_is_no_table(table):
    _, faults = read(table)
    assert [fault.address for fault in faults] == [PLACE]
    assert "is no table" in faults[0].problem
    assert wrong({"activity": table}).address == PLACE + ".activity"
    assert wrong({"hold": table}).address == PLACE + ".hold"


def test_plain_numbers_are_for_python_only():
    fault = wrong({"temperature": 300.0})
    assert fault.address == "units.wash.temperature"
    assert fault.problem == "300.0 has no unit"
    assert fault.remedy == 'write temperature such as "26 degC"'
    values = right({"temperature": 300, "flow": np.float64(2.5), "stages": np.int64(8)}, plain_si=True)
    assert values.numbers == {"temperature": 300.0, "flow": 2.5, "stages": 8}
    assert values.sorts["flow"] == "molar flow"
    assert right({"points": np.array([1.0, 2.0])}, plain_si=True).numbers["points"] == [1.0, 2.0]
    assert right({"share": 0.5}).numbers["share"] == 0.5


@pytest.mark.parametrize(
    ("table", "problem"),
    [
        ({"flow": "0 mol/s"}, "out of range"),
        ({"flow": "-1 kg/s"}, "out of range"),
        ({"flow": "1 m3/s"}, "a volume flow"),
        ({"flow": "1 mol"}, "an amount"),
        ({"flow": "1 J"}, "a quantity of another kind"),
        ({"flow": "1 molar"}, "not understood"),
        ({"flow": None}, "None is no molar flow"),
        ({"flow": True}, "True is no molar flow"),
        ({"flow": {"a": 1}}, "is no molar flow"),
        ({"flow": "9e999 mol/s"}, "too large"),
        ({"share": 1}, "out of range"),
        ({"share": -1e-300}, "out of range"),
        ({"share": math.nan}, "not finite"),
        ({"share": math.inf}, "not finite"),
        ({"share": 10**400}, "not finite"),
        ({"temperature": "-274 degC"}, "absolute zero"),
        ({"temperature": "0 K"}, "absolute zero"),
        ({"stages": 0}, "out of range"),
        ({"stages": 101}, "out of range"),
        ({"stages": 2.5}, "no whole number"),
        ({"stages": "8"}, "no whole number"),
        ({"stages": True}, "no whole number"),
        ({"stages": math.nan}, "no whole number"),
        ({"stages": math.inf}, "no whole number"),
        ({"stages": 10**400}, "no whole number"),
        ({"points": 1.0}, "no list"),
        ({"points": []}, "no list"),
        ({"points": "1"}, "no list"),
        ({"open": 1}, "neither true nor false"),
        ({"basis": 1}, "no name"),
        ({"basis": ""}, "no name"),
        ({"basis": "mass"}, "unknown basis 'mass'"),
        ({"names": []}, "empty"),
        ({"activity": {"a": 1, "unit": 3}}, "no name"),
    ],
)
def test_wrong_values(table, problem):
    fault = wrong(table)
    assert fault.address.startswith(f"{PLACE}.{next(iter(table))}")
    assert problem in fault.problem
    assert fault.remedy


@pytest.mark.parametrize(
    ("table", "number"),
    [({"share": 0}, 0.0), ({"share": 0.999}, 0.999), ({"stages": 1}, 1), ({"stages": 100.0}, 100)],
)
def test_limits_themselves(table, number):
    (name,) = table
    value = right(table).numbers[name]
    assert value == number
    assert isinstance(value, int) == (name == "stages")


def test_limits_are_told():
    assert wrong({"share": 1}).remedy == "write a value at least 0 and below 1"
    assert wrong({"stages": 0}).remedy == "write a value at least 1 and at most 100"


def test_several_sorts_and_lists_of_one_sort():
    assert right({"flow": "7200 kg/h"}).sorts["flow"] == "mass flow"
    assert right({"flows": ["1 kg/s", "7200 kg/h"]}).numbers["flows"] == pytest.approx([1, 2])
    fault = wrong({"flows": ["1 mol/s", "2 mol/s", "1 kg/s"]})
    assert fault.address == "units.wash.flows[2]"
    assert "mass flow" in fault.problem


def test_differences_have_no_offset_and_temperatures_have():
    assert right({"approach": "10 degC"}).numbers["approach"] == 10
    assert right({"approach": "-10 K"}).numbers["approach"] == -10
    either = Entry("b", ("number", "temperature difference"))
    context = Context()
    assert read_number("10 degC", either, "b", context) == (10.0, "temperature difference")
    assert read_number(10, either, "b", context) == (10.0, "number")
    assert context.faults == []


def test_names_are_judged_where_they_are_known():
    assert right({"names": ["any", "name"]}).words["names"] == ("any", "name")
    known = {"names": {"component": ["oil", "water"]}}
    assert right({"names": ["oil", "water"]}, **known).words["names"] == ("oil", "water")
    assert wrong({"names": "air"}, **known).remedy == "known: oil, water"
    assert wrong({"hold": {"air": "1 mol/s"}}, **known).address == "units.wash.hold.air"


def test_context_shares_its_faults():
    context = Context(plain_si=True, names={"component": ["oil"]})
    inner = context.knowing(equilibrium=["cold"])
    inner.fault("a.b", "is wrong", "write it right")
    assert [str(fault) for fault in context.faults] == ["a.b: is wrong; write it right"]
    assert inner.plain_si
    assert inner.names == {"component": ["oil"], "equilibrium": ["cold"]}
    assert context.names == {"component": ["oil"]}


def test_nearest_names():
    assert nearest("tolune", ["toluene", "benzene"]) == "did you mean 'toluene'?"
    assert nearest("xyz", ["toluene", "benzene"]) == "known: toluene, benzene"
    assert nearest("xyz", []) == "there is none to choose from"
    assert nearest("zzz", [f"name{i}" for i in range(20)]).endswith("name11, ...")


def test_values_are_not_shared():
    Values().numbers["a"] = 1
    assert Values().numbers == {}
