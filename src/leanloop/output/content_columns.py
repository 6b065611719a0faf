"""Solvent loops and columns as sections of a report."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.output.content import PER_HOUR, Part, Section, Sentence, Table, celsius, hourly, number
from leanloop.output.content_heat import degrees

if TYPE_CHECKING:
    from leanloop.flowsheet.result import Result
    from leanloop.units.base import Unit

SHOWN = 0.05  # K, half of the last digit of a temperature as it is written


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
            low, high = (_loading(result, data["streams"][stream], solute) for stream in (lean, rich))
            change = None if low is None or high is None else high - low
            rows.append([solute, number(low), number(high), number(change)])
        parts.append(Table(["loading, mol/mol", "lean", "rich", "cyclic capacity"], rows, f"Loadings at {name}", level=2))
    return parts


def _loading(result: Result, stream: dict[str, Any], solute: str) -> float | None:
    """Give a loading, of gas and liquid together where a stream has both."""
    if "loading" in stream:
        return stream["loading"][solute]
    names, solvents = result.sheet.components.names, np.flatnonzero(result.sheet.bases.loading)
    basis = sum(stream["mol_s"][names[place]] or 0.0 for place in solvents)
    return (stream["mol_s"][solute] or 0.0) / basis if basis else None


def _exchange(result: Result, data: dict[str, Any], units: list[str]) -> list[Sentence]:
    """Tell what make-ups add to a loop, what degrades and is made in it, and what leaves it as a liquid."""
    parts, plan = [], result.sheet.plan
    for name in units:
        for key, verb in (("added_mol_s", "adds"), ("degraded_mol_s", "degrades"), ("made_mol_s", "makes")):
            for component, flow in (data["units"][name]["results"].get(key) or {}).items():
                parts.append(Sentence(f"{name} {verb} {number(hourly(flow))} kmol/h of {component}"))
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
    own = result.sheet.plan.units[name]
    clean = "gas" if own.cleans == "gas" else "liquid"
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
    parts: list[Part] = [Sentence(text) for text in _inside(result, own, found)]
    parts.append(Table(head, rows, "Removal, and partial pressure over that in equilibrium"))
    varies = _span(profile) is not None
    for component in profile["K"]:
        rows = [
            [
                label,
                *([degrees(profile["temperature_K"][place])] if varies else []),
                *(number(profile[key][component][place]) for key in ("x", "y", "X", "Y", "K")),
                number(hourly(profile["liquid_mol_s"][place])),
                number(hourly(profile["gas_mol_s"][place])),
            ]
            for place, label in _places(own, profile)
        ]
        head = [component, *(["degC"] if varies else []), "x", "y", "X", "Y", "K", "liquid kmol/h", "gas kmol/h"]
        parts.append(Table(head, rows, f"What leaves the end stages: {component} in mole fractions x, y and mole ratios X, Y"))
    return Section(f"Column {name} ({unit['kind']})", parts, _kind(result, own, found, profile), f"units.{name}")


def _kind(result: Result, unit: Unit, found: dict[str, Any], profile: dict[str, Any]) -> str:
    """Say what kind of column it is: stages and what belongs to them, temperatures, solvent to gas."""
    ends = [part for part in ("condenser", "reboiler") if part in unit.values.words]
    count, numbers = len(profile["stage"]) - len(ends), _numbers(result, unit)
    stages = f"{count} equilibrium stages" if count > 1 or result.sheet.heat is None else "1 equilibrium stage"
    if "hetp" in numbers:
        stages += f" ({number(_one(numbers['height']), 3)} m of packing at {number(_one(numbers['hetp']), 3)} m a stage)"
    if unit.wants_heat:
        if ends:
            stages += f", a {' and a '.join(ends)}"
        stages += f", adiabatic, {_span(profile) or degrees(profile['temperature_K'][0])} degC"
    else:
        stages += f" at {number(celsius(profile['temperature_K'][0]))} degC, isothermal"
    said = [stages]
    efficiencies = {key.partition(".")[2]: value for key, value in numbers.items() if key.partition(".")[0] == "efficiency"}
    if efficiencies:
        said.append(f"Murphree vapour efficiency {_efficiency(efficiencies)}")
    if found["solvent_to_gas"] is not None or result.sheet.heat is None:
        said.append(f"solvent to gas {number(found['solvent_to_gas'])} mol/mol")
    return ", ".join(said)


def _numbers(result: Result, unit: Unit) -> dict[str, Any]:
    """Give the numbers of a unit, with those that were set or freed as they were solved."""
    return result.parts[0].run.inputs.of({key: f"units.{unit.name}.{key}" for key in unit.values.numbers})


def _efficiency(values: dict[str, Any]) -> str:
    """Write efficiencies: one, from the least to the most of those by stage, or by component."""
    if "" not in values:
        return " and ".join(f"{number(_one(value), 3)} for {name}" for name, value in values.items()) + ", else 1"
    value = values[""]
    if isinstance(value, list):
        return f"{number(min(value), 3)} to {number(max(value), 3)} by stage"
    return number(_one(value), 3)


def _one(value: Any) -> float:
    """Give the number of the one case."""
    return float(np.ravel(value)[0])


def _inside(result: Result, unit: Unit, found: dict[str, Any]) -> list[str]:
    """Tell what happens between the ends: boil-up and reflux, side feeds, draws."""
    numbers, ratios = _numbers(result, unit), []
    if "reflux_ratio" in found:
        ratios.append(f"reflux {number(found['reflux_ratio'], 4)} mol per mol of overhead gas")
    if "boil_up" in found:
        ratios.append(f"boil-up {number(found['boil_up'], 4)} mol per mol of bottoms")
    out = ["; ".join(ratios)] if ratios else []
    for place, word in enumerate(unit.values.words.get("side_feeds", ())):
        out.append(f"{word['stream']} is fed to stage {int(_one(numbers[f'side_feeds.{place}.stage']))}")
    for place, word in enumerate(unit.values.words.get("side_draws", ())):
        stage, flow = (_one(numbers[f"side_draws.{place}.{key}"]) for key in ("stage", "flow"))
        out.append(f"{word['stream']} draws {number(hourly(flow))} kmol/h of {word['phase']} from stage {int(stage)}")
    return out


def _span(profile: dict[str, Any]) -> str | None:
    """Write the lowest and the highest temperature in degC; None where all stages have the same or it is not known."""
    known = [value for value in profile["temperature_K"] if value is not None]
    if len(known) < len(profile["temperature_K"]) or max(known) - min(known) <= SHOWN:
        return None
    return f"{degrees(min(known))} to {degrees(max(known))}"


def _places(unit: Unit, profile: dict[str, Any]) -> list[tuple[int, str]]:
    """Give the stages to show, with their labels: condenser, both ends, reboiler; hottest and coldest where they lie inside."""
    count = len(profile["stage"])
    first, last = int("condenser" in unit.values.words), count - 1 - int("reboiler" in unit.values.words)
    labels = {last: f"stage {profile['stage'][last]} (bottom)", first: f"stage {profile['stage'][first]} (top)"}
    if first:
        labels[0] = "condenser"
    if last < count - 1:
        labels[count - 1] = "reboiler"
    if _span(profile) is not None:
        warm = profile["temperature_K"]
        for place, word, sign in ((int(np.argmax(warm)), "hottest", 1), (int(np.argmin(warm)), "coldest", -1)):
            if min(sign * (warm[place] - warm[end]) for end in labels) > SHOWN:
                labels[place] = f"stage {profile['stage'][place]} ({word})"
    return sorted(labels.items())
