"""What may be written at a column, and what does not go together."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.entries import Context, Entry, Values, near

MOST_STAGES = 5000
REBOILER = ("duty", "boil_up", "temperature", "stripping_ratio")
CONDENSER = ("temperature", "reflux_ratio")

GAS_IN = Entry("gas_in", "inlet", required=True, doc="gas fed to the bottom stage")
COMMON = (
    Entry("liquid_in", "inlet", required=True, doc="liquid fed to the top stage"),
    Entry("gas_out", "outlet", required=True, doc="gas that leaves the top stage, or the condenser"),
    Entry("liquid_out", "outlet", required=True, doc="liquid that leaves the bottom stage, or the reboiler"),
    Entry("stages", "integer", least=1, most=MOST_STAGES, cases=False, doc="equilibrium stages; reboiler and condenser apart"),
    Entry("height", "length", above=0.0, cases=False, doc="packed height, with hetp, instead of stages"),
    Entry("hetp", "length", above=0.0, cases=False, doc="height equivalent to a theoretical plate (stage)"),
    Entry("equilibrium", "equilibrium", required=True, doc="name of an equilibrium table"),
    Entry("heat", "choice", choices=("isothermal", "adiabatic"), doc="isothermal stages by default; adiabatic with a reboiler"),
    Entry("temperature", "temperature", doc="of isothermal stages; by default that of the liquid fed at the top"),
    Entry("pressure", "pressure", above=0.0, doc="at the bottom; by default that of the gas fed there"),
    Entry("pressure_drop", "pressure", least=0.0, doc="from the bottom stage to the top"),
    Entry(
        "efficiency", "number", many=True, by="component", either=True, above=0.0, most=1.0,
        doc="Murphree vapour efficiency: of all, a list by stage, or by component",
    ),
    Entry(
        "side_feeds", "tables", doc="streams fed to further stages",
        nested=(
            Entry("stream", "inlet", required=True, doc="the stream"),
            Entry("stage", "integer", required=True, least=1, cases=False, doc="stage that it enters"),
        ),
    ),
    Entry(
        "side_draws", "tables", doc="streams drawn from what leaves a stage",
        nested=(
            Entry("stream", "outlet", required=True, doc="the stream"),
            Entry("stage", "integer", required=True, least=1, cases=False, doc="stage that it is drawn from"),
            Entry("phase", "choice", choices=("gas", "liquid"), required=True, doc="what is drawn"),
            Entry("flow", "molar flow", required=True, least=0.0, doc="how much"),
        ),
    ),
    Entry(
        "stage_duties", "tables", doc="heat put into stages",
        nested=(
            Entry("stage", "integer", required=True, least=1, cases=False, doc="the stage"),
            Entry("duty", "power", required=True, doc="positive into the stage"),
        ),
    ),
)  # fmt: skip

COLUMN = (GAS_IN, *COMMON)

STRIPPER = (
    Entry("gas_in", "inlet", doc="gas fed to the bottom stage; with a reboiler none is needed"),
    *COMMON,
    Entry(
        "reboiler", "table", doc="kettle below the last stage, one of its entries",
        nested=(
            Entry("duty", "power", least=0.0, doc="heat into it"),
            Entry("boil_up", "number", above=0.0, doc="mol of vapour per mol of bottoms"),
            Entry("temperature", "temperature", doc="of the bottoms"),
            Entry("stripping_ratio", "number", above=0.0, doc="mol of vapour per mol of liquid fed at the top"),
        ),
    ),
    Entry(
        "condenser", "table", doc="partial condenser above the first stage, temperature or reflux_ratio",
        nested=(
            Entry("temperature", "temperature", doc="of the gas and the condensate that leave it"),
            Entry("reflux_ratio", "number", least=0.0, doc="mol of reflux per mol of overhead gas"),
            Entry(
                "draw", "table", doc="condensate taken away",
                nested=(
                    Entry("stream", "outlet", required=True, doc="the stream"),
                    Entry("flow", "molar flow", required=True, least=0.0, doc="how much"),
                ),
            ),
        ),
    ),
)  # fmt: skip


def balances_heat(values: Values) -> bool:
    """Tell whether the stages balance heat."""
    return values.words.get("heat", "adiabatic" if "reboiler" in values.words or "condenser" in values.words else "") == "adiabatic"


DEEPEST = "deepest"  # local name of the largest number of stages in a batch of which the cases differ


def stage_count(numbers: Mapping[str, Any]) -> int:
    """Give the equilibrium stages, whole ones where a height is given; the most of them where cases differ."""
    if DEEPEST in numbers:
        return int(numbers[DEEPEST])
    if "stages" in numbers:
        return int(numbers["stages"])
    return max(1, int(numbers["height"] / numbers["hetp"] + 1e-9))


def own_counts(numbers: Mapping[str, Any]) -> np.ndarray | None:
    """Give the equilibrium stages of each case, (M,) int, where they differ; None where they do not."""
    return np.asarray(numbers["stages"]).astype(int) if DEEPEST in numbers else None


def check(values: Values, raw: Mapping[str, Any], address: str, context: Context, absorbs: bool) -> None:
    """Note faults that lie between a column's entries.

    Parameters
    ----------
    values : Values
    raw : mapping
        As written.
    address : str
    context : Context
    absorbs : bool
        Whether it is an absorber, of which the gas fed is required anyway.
    """
    words, numbers = values.words, values.numbers
    packed = [key for key in ("height", "hetp") if key in raw]
    if "stages" in raw and packed:
        context.fault(f"{address}.stages", f"stands beside {' and '.join(packed)}", "write stages, or height with hetp")
    elif "stages" not in raw and len(packed) < 2:
        missing = "stages" if not packed else "hetp" if packed == ["height"] else "height"
        remedy = "add stages = 8, or height with hetp" if not packed else f'add {missing} = "0.6 m"'
        context.fault(f"{address}.{missing}", "entry is missing", remedy)
    reboiled = "reboiler" in raw
    misspelt = any(key not in {entry.name for entry in STRIPPER} and near(key, ["gas_in"]) for key in raw)
    if not absorbs and "gas_in" not in raw and not reboiled and not misspelt:
        context.fault(f"{address}.gas_in", "entry is missing", "add gas_in, the name of a stream")
    if "gas_in" not in raw and reboiled and "pressure" not in raw:
        context.fault(f"{address}.pressure", "is not known: no gas is fed", 'write pressure = "1.9 bar"')
    warm = balances_heat(values)
    if not warm:
        for key in ("reboiler", "condenser", "stage_duties"):
            if key in raw:
                context.fault(f"{address}.{key}", "stands beside isothermal stages", 'write heat = "adiabatic"')
    elif "temperature" in raw:
        context.fault(f"{address}.temperature", "stands beside adiabatic stages", 'take it away, or write heat = "isothermal"')
    for key, choices in (("reboiler", REBOILER), ("condenser", CONDENSER)):
        table = raw.get(key)
        if isinstance(table, Mapping):
            given = [item for item in choices if item in table]
            if len(given) != 1:
                problem = f"has {' and '.join(given)}" if given else "does not say how it is run"
                context.fault(f"{address}.{key}", problem, f"give one of {', '.join(choices)}")
    count = stage_count(numbers) if "stages" in numbers or {"height", "hetp"} <= set(numbers) else None
    for key in ("side_feeds", "side_draws", "stage_duties"):
        for place in range(len(words.get(key, ()))):
            stage = numbers.get(f"{key}.{place}.stage")
            if count is not None and stage is not None and stage > count:
                problem = f"there is no stage {stage}: the column has {count}"
                context.fault(f"{address}.{key}[{place}].stage", problem, f"write 1 to {count}")
    drawn: dict[tuple[Any, Any], int] = {}
    for place, word in enumerate(words.get("side_draws", ())):
        key = (numbers.get(f"side_draws.{place}.stage"), word.get("phase"))
        if key in drawn:
            problem = f"draws {key[1]} from stage {key[0]}, as side_draws[{drawn[key]}] does"
            context.fault(f"{address}.side_draws[{place}]", problem, "draw once and split the stream")
        drawn.setdefault(key, place)
    listed = numbers.get("efficiency")
    if isinstance(listed, list) and count is not None and len(listed) != count:
        context.fault(f"{address}.efficiency", f"has {len(listed)} values", f"give {count}, one for each stage")
