"""Solvent loops and columns as sections of a report."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.output.content import PER_HOUR, Part, Section, Sentence, Table, celsius, hourly, number

if TYPE_CHECKING:
    from leanloop.flowsheet.result import Result


def loops(result: Result, data: dict[str, Any]) -> list[Section]:
    """Give one section for each solvent loop: how it closed, circulation, loadings, make-up, what leaves.

    Parameters
    ----------
    result : Result
        Of one case.
    data : dict
        `result.to_dict()`.

    Returns
    -------
    list of Section
        With places ``"loops.0"``, ``"loops.1"`` and so on.
    """
    sections = []
    for place, loop in enumerate(data["loops"]):
        closed = (
            f"{data['loop']['method']}, torn at {', '.join(loop['tears'])}, {loop['passes']} passes, "
            f"residual {number(loop['residual'], 2)} of each component's input"
        )
        parts = [Sentence(closed), *_circulation(result, data, loop["units"]), *_exchange(result, data, loop["units"])]
        sections.append(Section("Solvent loop", parts, " > ".join(loop["units"]), f"loops.{place}"))
    return sections


def _circulation(result: Result, data: dict[str, Any], units: list[str]) -> list[Part]:
    """Give circulation, lean and rich loading and cyclic capacity at the columns of a loop."""
    parts: list[Part] = []
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
        parts.append(
            Sentence(
                f"{name}: {number(circulation * PER_HOUR)} kmol/h of {' + '.join(names)}, "
                f"lean stream {lean}, rich stream {rich}"
            )
        )
        rows = []
        for solute in data["units"][name]["results"]["removal"]:
            if solute in names:
                continue
            low, high = (data["streams"][stream]["loading"][solute] for stream in (lean, rich))
            change = None if low is None or high is None else high - low
            rows.append([solute, number(low), number(high), number(change)])
        parts.append(Table(["loading, mol/mol", "lean", "rich", "cyclic capacity"], rows, f"Loadings at {name}", level=2))
    return parts


def _exchange(result: Result, data: dict[str, Any], units: list[str]) -> list[Sentence]:
    """Tell what make-ups add to a loop and what leaves it as a liquid."""
    parts, plan = [], result.sheet.plan
    for name in units:
        for component, added in (data["units"][name]["results"].get("added_mol_s") or {}).items():
            parts.append(Sentence(f"{name} adds {number(hourly(added))} kmol/h of {component}"))
    for stream in plan.structure.products:
        if plan.structure.makers[stream][0] in units and plan.phases[stream] == "liquid":
            item = data["streams"][stream]
            if item["total_mol_s"] is None:
                continue
            held = [f"{number(hourly(item['mol_s'][c]))} of {c}" for c in plan.components.names if item["mol_s"][c]]
            parts.append(Sentence(f"{stream} leaves with {number(hourly(item['total_mol_s']))} kmol/h: {', '.join(held)}"))
    return parts


def columns(result: Result, data: dict[str, Any]) -> list[Section]:
    """Give one section for each column: removal, factors, approach to equilibrium, and both end stages.

    Parameters
    ----------
    result : Result
        Of one case.
    data : dict
        `result.to_dict()`.

    Returns
    -------
    list of Section
        With places such as ``"units.wash"``.
    """
    return [_column(result, name, unit) for name, unit in data["units"].items() if "profile" in unit]


def _column(result: Result, name: str, unit: dict[str, Any]) -> Section:
    found, profile = unit["results"], unit["profile"]
    count = len(profile["stage"])
    clean = "gas" if result.sheet.plan.units[name].cleans == "gas" else "liquid"
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
    head = [f"removal from the {clean}", "removed", factor.replace("_", " "), "p/p* rich end", "p/p* lean end"]
    parts = [Table(head, rows, "Removal, and partial pressure over that in equilibrium")]
    places = list(dict.fromkeys([0, count - 1]))
    for component in profile["K"]:
        rows = [
            [
                f"stage {profile['stage'][place]}" + (" (top)" if place == 0 else " (bottom)"),
                *(number(profile[key][component][place]) for key in ("x", "y", "X", "Y", "K")),
                number(hourly(profile["liquid_mol_s"][place])),
                number(hourly(profile["gas_mol_s"][place])),
            ]
            for place in places
        ]
        head = [component, "x", "y", "X", "Y", "K", "liquid kmol/h", "gas kmol/h"]
        parts.append(Table(head, rows, f"What leaves the end stages: {component} in mole fractions x, y and mole ratios X, Y"))
    detail = (
        f"{count} equilibrium stages at {number(celsius(profile['temperature_K'][0]))} degC, isothermal, "
        f"solvent to gas {number(found['solvent_to_gas'])} mol/mol"
    )
    return Section(f"Column {name} ({unit['kind']})", parts, detail, f"units.{name}")
