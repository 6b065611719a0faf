"""The report of a solve as text for a process engineer."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.output.influence import influences
from leanloop.quantities import NORMAL_MOLES

if TYPE_CHECKING:
    from leanloop.flowsheet.result import Result

PER_HOUR = 3.6  # mol/s to kmol/h
MOST_INFLUENCES = 8
CAUTIONS = (
    "This is a screening calculation with equilibrium stages; have it verified by a licensed engineer "
    "against local codes and measured data.",
    "Toxic or flammable gases, pressure and hot solvent: no figure here replaces a safety review.",
    "No heat is balanced: temperatures are those given, and no duty is calculated.",
)


def number(value: Any, digits: int = 5) -> str:
    """Write a number with some significant digits, a dash for what is not defined."""
    if value is None or not math.isfinite(float(value)):
        return "-"
    value = float(value)
    if value == 0:
        return "0"
    if 1e-3 <= abs(value) < 1e6:
        places = max(0, digits - 1 - math.floor(math.log10(abs(value))))
        return f"{value:.{places}f}"
    return f"{value:.{digits - 1}e}"


def table(head: Sequence[str], rows: Iterable[Sequence[str]], indent: str = "  ") -> list[str]:
    """Set a table in columns, the first to the left, the others to the right."""
    lines = [list(head), *[list(row) for row in rows]]
    widths = [max(len(line[column]) for line in lines) for column in range(len(head))]
    out = []
    for line in lines:
        cells = [cell.rjust(width) for cell, width in zip(line, widths, strict=True)]
        cells[0] = line[0].ljust(widths[0])
        out.append((indent + "  ".join(cells)).rstrip())
    return out


def printable(text: str) -> str:
    """Give a text without control characters, on one line."""
    return " ".join("".join(letter if letter.isprintable() else " " for letter in text).split())


def report(result: Result) -> str:
    """Write the report.

    Parameters
    ----------
    result : Result

    Returns
    -------
    str
    """
    return "\n".join(_batch(result) if result.axis else _single(result)) + "\n"


def _batch(result: Result) -> list[str]:
    words, texts = result.status, result.status_text
    lines = [_title(result), "", f"{result.cases} cases"]
    for word in dict.fromkeys(words):
        cases = [case for case, own in enumerate(words) if own == word]
        lines.append(f"  {word}: {len(cases)}" + ("" if word == "converged" else f", first case {cases[0]}: {texts[cases[0]]}"))
    lines += ["", "Cautions"] + [f"  * {text}" for text in (*result.cautions(), *CAUTIONS)]
    return lines


def _title(result: Result) -> str:
    title = printable(result.sheet.title) or "Flowsheet"
    return f"{title}\n{'=' * len(title)}"


def _single(result: Result) -> list[str]:
    data = result.to_dict()
    lines = [_title(result), "", f"Status: {data['status']}. {data['status_text']}"]
    lines += _requirements(result, data)
    lines += _loops(result, data)
    for name, unit in data["units"].items():
        if "profile" in unit:
            lines += _column(result, name, unit)
    lines += _streams(result, data)
    lines += _gases(result, data)
    lines += _balance(data)
    lines += _influence(result)
    lines += ["", "Cautions"] + [f"  * {text}" for text in (*data["cautions"], *CAUTIONS)]
    return lines


def _requirements(result: Result, data: dict[str, Any]) -> list[str]:
    lines: list[str] = []
    for name, item in result.sheet.requirements.items():
        found = data["requirements"][name]
        verb = {"equals": "=", "at_most": "<=", "at_least": ">="}[item.kind]
        target = result.sheet.numbers[item.target]
        outcome = "met" if found["reached"] else f"not met ({found['reason'] or 'not solved'})"
        how = f"{item.free} = {_shown(result, item.free, found['free_value'])}"
        if not found["active"]:
            how += ", as given"
        wanted, have = _figure(item.address, target), _figure(item.address, found["value"])
        lines.append(f"  {name}: {item.address} {verb} {wanted}: {outcome}, at {have} with {how}")
        if found["other_solutions"]:
            others = ", ".join(_shown(result, item.free, other) for other in found["other_solutions"])
            lines.append(f"    also solved by {others}")
    return ["", "Asked for", *lines] if lines else []


def _figure(address: str, value: float | None) -> str:
    """Write a quantity in the unit of a report, which the end of its address tells."""
    parts = address.split(".")
    if any(part.startswith("mg_per_Nm3") for part in parts):
        return f"{number(value)} mg/Nm3"
    for ending, write in (
        ("mol_s", lambda own: f"{number(own * PER_HOUR)} kmol/h"),
        ("_K", lambda own: f"{number(own - 273.15)} degC"),
        ("_Pa", lambda own: f"{number(own / 1e5)} bar"),
    ):
        if value is not None and any(part.endswith(ending) for part in parts):
            return write(value)
    return number(value)


def _shown(result: Result, address: str, value: float | None) -> str:
    sort = result.sheet.sorts[address]
    if value is None:
        return "-"
    if sort == "molar flow":
        return f"{number(value * PER_HOUR)} kmol/h"
    if sort == "temperature":
        return f"{number(value - 273.15)} degC"
    if sort == "pressure":
        return f"{number(value / 1e5)} bar"
    return number(value)


def _loops(result: Result, data: dict[str, Any]) -> list[str]:
    lines: list[str] = []
    for loop in data["loops"]:
        lines += ["", f"Solvent loop: {' > '.join(loop['units'])}"]
        lines.append(
            f"  {data['loop']['method']}, torn at {', '.join(loop['tears'])}, {loop['passes']} passes, "
            f"residual {number(loop['residual'], 2)} of each component's input"
        )
        lines += _circulation(result, data, loop["units"])
    return lines


def _circulation(result: Result, data: dict[str, Any], units: list[str]) -> list[str]:
    """Give circulation, lean and rich loading and cyclic capacity at the columns of a loop."""
    lines: list[str] = []
    bases, plan = result.sheet.bases, result.sheet.plan
    names = [result.sheet.components.names[place] for place in np.flatnonzero(bases.loading)]
    for name in units:
        unit = plan.units[name]
        if "profile" not in data["units"][name]:
            continue
        lean, rich = unit.inlets["liquid_in"], unit.outlets["liquid_out"]
        if unit.cleans != "gas":
            lean, rich = rich, lean
        names = [solvent for solvent in names if data["streams"][lean]["mol_s"][solvent]] or names
        circulation = sum(data["streams"][lean]["mol_s"][solvent] or 0.0 for solvent in names)
        lines.append(
            f"  {name}: {number(circulation * PER_HOUR)} kmol/h of {' + '.join(names)}, "
            f"lean stream {lean}, rich stream {rich}"
        )
        rows = []
        for solute in data["units"][name]["results"]["removal"]:
            if solute in names:
                continue
            low, high = (data["streams"][stream]["loading"][solute] for stream in (lean, rich))
            change = None if low is None or high is None else high - low
            rows.append([solute, number(low), number(high), number(change)])
        lines += table(["loading, mol/mol", "lean", "rich", "cyclic capacity"], rows, "    ")
    for name in units:
        for component, added in (data["units"][name]["results"].get("added_mol_s") or {}).items():
            lines.append(f"  {name} adds {number(None if added is None else added * PER_HOUR)} kmol/h of {component}")
    for stream in plan.structure.products:
        if plan.structure.makers[stream][0] in units and plan.phases[stream] == "liquid":
            item = data["streams"][stream]
            if item["total_mol_s"] is None:
                continue
            held = [f"{number(_hourly(item['mol_s'][c]))} of {c}" for c in plan.components.names if item["mol_s"][c]]
            lines.append(f"  {stream} leaves with {number(_hourly(item['total_mol_s']))} kmol/h: {', '.join(held)}")
    return lines


def _column(result: Result, name: str, unit: dict[str, Any]) -> list[str]:
    found, profile = unit["results"], unit["profile"]
    count = len(profile["stage"])
    clean = "gas" if result.sheet.plan.units[name].cleans == "gas" else "liquid"
    temperature = profile["temperature_K"][0]
    lines = [
        "",
        f"Column {name} ({unit['kind']}): {count} equilibrium stages at "
        f"{number(None if temperature is None else temperature - 273.15)} degC, isothermal, "
        f"solvent to gas {number(found['solvent_to_gas'])} mol/mol",
    ]
    factor = "absorption_factor" if clean == "gas" else "stripping_factor"
    rows = [
        [
            component,
            number(found["removal"][component]),
            number(found[factor].get(component)),
            number(found["approach_rich"].get(component)),
            number(found["approach_lean"].get(component)),
        ]
        for component in profile["K"]
    ]
    lines += table([f"removal from the {clean}", "removed", factor.replace("_", " "), "p/p* rich end", "p/p* lean end"], rows)
    places = list(dict.fromkeys([0, count - 1]))
    for component in profile["K"]:
        rows = [
            [
                f"stage {profile['stage'][place]}" + (" (top)" if place == 0 else " (bottom)"),
                *(number(profile[key][component][place]) for key in ("x", "y", "X", "Y", "K")),
                number(None if profile["liquid_mol_s"][place] is None else profile["liquid_mol_s"][place] * PER_HOUR),
                number(None if profile["gas_mol_s"][place] is None else profile["gas_mol_s"][place] * PER_HOUR),
            ]
            for place in places
        ]
        lines += table([component, "x", "y", "X", "Y", "K", "liquid kmol/h", "gas kmol/h"], rows)
    return lines


def _streams(result: Result, data: dict[str, Any]) -> list[str]:
    names = result.sheet.components.names
    masses = result.sheet.components.molar_masses
    rows = []
    for stream, item in data["streams"].items():
        flows = [item["mol_s"][c] for c in names]
        total = item["total_mol_s"]
        mass = None
        if total is not None and all(not flow or np.isfinite(m) for flow, m in zip(flows, masses, strict=True)):
            mass = 3600.0 * sum(flow * m for flow, m in zip(flows, masses, strict=True) if flow)
        rows.append(
            [
                stream,
                item["phase"],
                number(None if item["temperature_K"] is None else item["temperature_K"] - 273.15, 4),
                number(None if item["pressure_Pa"] is None else item["pressure_Pa"] / 1e5, 4),
                number(mass),
                number(None if total is None or item["phase"] != "gas" else total * 3600.0 / NORMAL_MOLES),
                number(_hourly(total)),
                *(number(_hourly(flow)) for flow in flows),
            ]
        )
    head = ["stream", "phase", "degC", "bar", "kg/h", "Nm3/h", "kmol/h", *names]
    return ["", "Streams, components in kmol/h", *table(head, rows)]


def _hourly(value: float | None) -> float | None:
    return None if value is None else value * PER_HOUR


def _gases(result: Result, data: dict[str, Any]) -> list[str]:
    """Give what distributes, and what stays in the liquid, in the gas streams by volume and by mass."""
    items = result.sheet.components.items
    names = [item.name for item in items if item.stays_in != "gas"]
    rows = [
        [stream, name, number(1e6 * (item["fraction"][name] or 0.0)), number(item["mg_per_Nm3"][name])]
        for stream, item in data["streams"].items()
        if item["phase"] == "gas"
        for name in names
        if item["mol_s"][name]
    ]
    return ["", "In the gases", *table(["stream", "component", "ppm by volume", "mg/Nm3"], rows)] if rows else []


def _influence(result: Result) -> list[str]:
    found = influences(result)
    lines: list[str] = []
    for quantity in dict.fromkeys(item.quantity for item in found):
        own = [item for item in found if item.quantity == quantity][:MOST_INFLUENCES]
        name = quantity.removeprefix("requirements.").removesuffix(".free_value")
        shown = quantity
        if quantity.startswith("requirements."):
            shown = f"{result.sheet.requirements[name].free}, with requirement {name} held"
        lines += ["", f"What matters most to {shown}"]
        rows = [[item.number, f"1 {item.unit}", f"{item.per_cent:+.3g} %"] for item in own]
        lines += table(["input", "more by", "moves it by"], rows)
    return lines


def _balance(data: dict[str, Any]) -> list[str]:
    rows = [
        [
            component,
            number(None if item["in_mol_s"] is None else item["in_mol_s"] * PER_HOUR, 7),
            number(None if item["out_mol_s"] is None else item["out_mol_s"] * PER_HOUR, 7),
            number(item["closure"], 2),
        ]
        for component, item in data["balance"]["components"].items()
    ]
    head = ["component", "in, make-up included", "out", "closure"]
    both = {unit["kind"] for unit in data["units"].values() if "profile" in unit}
    title = "Combined balance of absorber and regenerator" if len(both) > 1 else "Balance"
    return ["", f"{title}, kmol/h", *table(head, rows)]


def structure(sheet: Any, found: dict[str, Any]) -> str:
    """Write what a check found.

    Parameters
    ----------
    sheet : Flowsheet
    found : dict
        What `Flowsheet.check` gives.

    Returns
    -------
    str
    """
    plan = sheet.plan
    lines = [
        printable(sheet.title) or "Flowsheet",
        f"  {len(sheet.components)} components, {len(sheet.feeds)} feeds, {len(plan.units)} units, {len(plan.phases)} streams",
        f"  order of calculation: {' > '.join(found['order'])}",
    ]
    for units in found["loops"]:
        lines.append(f"  loop: {' > '.join(units)}")
    lines.append(f"  torn streams: {', '.join(found['tears']) or 'none'}")
    for name, free in found["freed"].items():
        item = sheet.requirements[name]
        lines.append(f"  requirement {name}: {item.address} {item.kind} {number(sheet.numbers[item.target])}, freeing {free}")
    for units in found["solved_together"]:
        lines.append(f"  solved together: {', '.join(units)}")
    lines.append(f"  degrees of freedom left: {found['freedom']}")
    return "\n".join(lines) + "\n"
