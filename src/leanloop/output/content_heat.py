"""Duties, what the regenerator's heat buys, and the energy balance as sections of a report."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.flowsheet.balance import energy_why
from leanloop.output.content import PER_HOUR, Section, Sentence, Table, celsius, number

if TYPE_CHECKING:
    from leanloop.flowsheet.result import Result
    from leanloop.units.base import Unit

NO_HEAT = "No heat is balanced: temperatures are those given, and no duty is calculated."
KILO = 1e3


def degrees(value: float | None) -> str:
    """Write a temperature in degC to a tenth.

    Parameters
    ----------
    value : float or None
        K.

    Returns
    -------
    str
    """
    return "-" if value is None else f"{celsius(value) + 0.0:.1f}"


def kilowatts(value: float | None) -> str:
    """Write a power in kW.

    Parameters
    ----------
    value : float or None
        W.

    Returns
    -------
    str
    """
    return number(None if value is None else value / KILO)


def heat(result: Result, data: dict[str, Any]) -> list[Section]:
    """Give the duties and powers of all units, the reboiler duty per solute, and the exchangers.

    Parameters
    ----------
    result : Result
        Of one case.
    data : dict
        `result.to_dict()`.

    Returns
    -------
    list of Section
        One, with the place ``"heat"``; none where no duty is known.
    """
    if result.sheet.heat is None:
        return []
    rows, per_solute, exchangers = [], [], []
    for name, unit in result.sheet.plan.units.items():
        found = data["units"][name]["results"]
        if "effectiveness" in found:
            exchangers += _exchanger(name, unit, found, data)
        elif "profile" in data["units"][name]:
            rows += _column(name, unit, data)
            per_solute += _per_solute(result, name, unit, data)
        else:
            for key, what in (("duty_W", unit.kind.replace("_", " ")), ("power_W", f"{unit.kind} power")):
                if found.get(key) is not None:
                    rows.append([name, what, kilowatts(found[key]), _span(unit, data)])
    parts = []
    if rows:
        head = ["unit", "what", "kW into the process", "degC"]
        parts.append(Table(head, rows, "Duties and powers, positive into the process"))
    if per_solute:
        head = ["reboiler duty per", "at", "removed kmol/h", "kJ/mol", "MJ/kg"]
        parts.append(Table(head, per_solute, "Reboiler duty over what the column takes from the liquid"))
    if exchangers:
        head = ["exchanger", "kW to the cold side", "hot side degC", "cold side degC", "approach K, hot end", "cold end", "least"]
        parts.append(Table([*head, "UA kW/K", "effectiveness"], exchangers, "Exchangers"))
    return [Section("Heat", parts, place="heat")] if parts else []


def _column(name: str, unit: Unit, data: dict[str, Any]) -> list[list[str]]:
    """Give the duties of a column, top to bottom."""
    found, profile = data["units"][name]["results"], data["units"][name]["profile"]
    warm, count = profile["temperature_K"], len(profile["stage"])
    rows = []
    if found.get("condenser_duty_W") is not None:
        rows.append([name, "condenser", kilowatts(found["condenser_duty_W"]), degrees(warm[0])])
    if not unit.wants_heat:
        if found["duty_W"] is not None:
            rows.append([name, "stages, to hold their temperature", kilowatts(found["duty_W"]), degrees(warm[0])])
    elif found["duty_W"] is not None:
        given = {int(value) for key, value in unit.values.group("stage_duties").items() if key.endswith(".stage")}
        for stage in sorted(given):
            place = profile["stage"].index(stage)
            rows.append([name, f"stage {stage}", kilowatts(profile["duty_W"][place]), degrees(warm[place])])
    if found.get("reboiler_duty_W") is not None:
        rows.append([name, "reboiler", kilowatts(found["reboiler_duty_W"]), degrees(warm[count - 1])])
    return rows


def _per_solute(result: Result, name: str, unit: Unit, data: dict[str, Any]) -> list[list[str]]:
    """Give the reboiler duty over each solute that is removed.

    A solute is what distributes, is neither in the loading's basis nor the largest part of the lean liquid, and is
    removed by a larger part than the liquid as a whole: the vapour of the solvent does not count.
    """
    duty = data["units"][name]["results"].get("reboiler_duty_W")
    if duty is None:
        return []
    phases, components = result.sheet.plan.phases, result.sheet.components
    fed = _flows(data, [stream for stream in unit.inlets.values() if phases[stream] != "gas"])
    # condensate that is taken away has left the solvent, what is drawn from a stage has not
    drawn = [stream for label, stream in unit.outlets.items() if label.startswith("side_draws") and phases[stream] != "gas"]
    kept = _flows(data, [unit.outlets["liquid_out"], *drawn])
    main, removed = int(np.argmax(kept)), fed - kept
    rows = []
    for place, solute in enumerate(components.names):
        moves = solute in data["units"][name]["profile"]["K"] and place != main and not result.sheet.bases.loading[place]
        if not moves or removed[place] <= max(0.0, removed.sum() / fed.sum()) * fed[place]:
            continue
        mass, specific = float(components.molar_masses[place]), duty / removed[place]
        each = number(specific / mass / 1e6) if np.isfinite(mass) else "-"
        rows.append([solute, name, number(removed[place] * PER_HOUR), number(specific / KILO), each])
    return rows


def _flows(data: dict[str, Any], streams: list[str]) -> np.ndarray:
    """Add streams up, component by component, (C,) mol/s."""
    return np.array([list(data["streams"][stream]["mol_s"].values()) for stream in streams], dtype=float).sum(axis=0)


def _exchanger(name: str, unit: Unit, found: dict[str, Any], data: dict[str, Any]) -> list[list[str]]:
    if found["duty_W"] is None:
        return []
    warm = {label: data["streams"][stream]["temperature_K"] for label, stream in (unit.inlets | unit.outlets).items()}
    row = [
        name,
        kilowatts(found["duty_W"]),
        *(f"{degrees(warm[f'{side}_in'])} to {degrees(warm[f'{side}_out'])}" for side in ("hot", "cold")),
        *(number(found[f"approach_{way}_K"], 4) for way in ("hot_end", "cold_end", "least")),
        kilowatts(found["UA_W_K"]),
        number(found["effectiveness"], 4),
    ]
    return [row]


def _span(unit: Unit, data: dict[str, Any]) -> str:
    """Write from which temperature to which a unit brings what it takes."""
    before = [data["streams"][stream]["temperature_K"] for stream in unit.inlets.values()]
    after = degrees(data["streams"][next(iter(unit.outlets.values()))]["temperature_K"])
    return f"{degrees(before[0])} to {after}" if len(before) == 1 else f"to {after}"


def energy(result: Result, data: dict[str, Any]) -> list[Section]:
    """Give the energy balance over the whole flowsheet, or why there is none.

    Parameters
    ----------
    result : Result
        Of one case.
    data : dict
        `result.to_dict()`.

    Returns
    -------
    list of Section
        One, with the place ``"energy"``; none where the flowsheet has no heat data.
    """
    if result.sheet.heat is None:
        return []
    found = data["balance"]["energy"]
    if found is None:
        return [Section("Energy balance", [Sentence(f"Not made: {_why(result)}.")], place="energy")]
    head = ["kW", "in with streams, make-up included", "duties and powers", "out with streams", "closure"]
    row = ["flowsheet", *(_seven(found[key]) for key in ("in_W", "duties_W", "out_W")), number(found["closure"], 2)]
    parts = [Table(head, [row], "Enthalpies on the datum of the heat data: liquid at 25 degC, unless they are given themselves")]
    return [Section("Energy balance, kW", parts, "enthalpies on the datum of the heat data", "energy")]


def _seven(value: float | None) -> str:
    return number(None if value is None else value / KILO, 7)


def _why(result: Result) -> str:
    return energy_why(result.sheet.plan) or "not every unit knows its duty"


def heat_cautions(result: Result) -> list[str]:
    """Give what a reader must know of the heat: that none is balanced, or which heat data are built in.

    Parameters
    ----------
    result : Result
        Of one case or of many.

    Returns
    -------
    list of str
    """
    sheet = result.sheet
    if sheet.heat is None:
        return [NO_HEAT]
    data = result.to_dict()
    out = []
    if not _known(data["balance"]["energy"]):
        units = sheet.plan.units
        duties = [data["units"][name]["results"].get(key) for name, unit in units.items() for key in unit.draws_heat]
        if not any(unit.wants_heat for unit in units.values()) and not any(map(_known, duties)):
            return [NO_HEAT]
        out.append(f"Energy is not balanced over the whole flowsheet: {_why(result)}.")
    used = [
        f"{item.name} ({', '.join(key.replace('_', ' ') for key in item.sources)})"
        for item in sheet.heat.items
        if item is not None and item.built_in
    ]
    if used:
        out.append(f"Heat data not given in the file are the built-in ones: {'; '.join(used)}.")
    return out


def _known(value: Any) -> bool:
    """Tell whether there is a value, in any case."""
    return any(item is not None for item in value) if isinstance(value, list) else value is not None
