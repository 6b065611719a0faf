"""The report of a solve as sections."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.flowsheet.scales import Scale, of_input, of_quantity
from leanloop.output.content import Listing, Section, Sentence, Table, celsius, hourly, number, printable
from leanloop.output.content_columns import columns, loops
from leanloop.output.content_heat import NO_HEAT, energy, heat, heat_cautions
from leanloop.quantities import NORMAL_MOLES
from leanloop.studies.influence import influences

if TYPE_CHECKING:
    from leanloop.flowsheet.result import Result

MOST_INFLUENCES = 8
CAUTIONS = (
    "This is a screening calculation with equilibrium stages; have it verified by a licensed engineer "
    "against local codes and measured data.",
    "Toxic or flammable gases, pressure and hot solvent: no figure here replaces a safety review.",
    NO_HEAT,
)


def report_title(sheet: Any) -> str:
    """Give the title of a flowsheet, in one line, and a word where it has none.

    Parameters
    ----------
    sheet : Flowsheet

    Returns
    -------
    str
    """
    return printable(sheet.title) or "Flowsheet"


def report_sections(result: Result) -> list[Section]:
    """Give what the report says, its title left out.

    Parameters
    ----------
    result : Result
        Of one case; of many, their statuses are counted.

    Returns
    -------
    list of Section
        The last holds the cautions.
    """
    of_heat = heat_cautions(result)
    standing = CAUTIONS if of_heat == [NO_HEAT] else (*of_heat, *CAUTIONS[:-1])
    caution = Section("Cautions", [Listing([*result.cautions(), *standing])], place="cautions")
    if result.axis:
        return [_statuses(result), caution]
    data = result.to_dict()
    status = Sentence(f"Status: {data['status']}. {data['status_text']}", 0, "status" if result.converged else "failure")
    return [
        Section("", [status], place="status"),
        *_requirements(result, data),
        *loops(result, data),
        *columns(result, data),
        *heat(result, data),
        _streams(result, data),
        *_gases(result, data),
        _balance(data),
        *energy(result, data),
        *_influence(result),
        caution,
    ]


def _statuses(result: Result) -> Section:
    words, texts = result.status, result.status_text
    rows, lines = [], [Sentence(f"{result.cases} cases", 0)]
    for word in dict.fromkeys(words):
        cases = [case for case, own in enumerate(words) if own == word]
        rows.append([word, str(len(cases)), str(cases[0]), texts[cases[0]]])
        tail = "" if word == "converged" else f", first case {cases[0]}: {texts[cases[0]]}"
        lines.append(Sentence(f"{word}: {len(cases)}{tail}"))
    head = ["status", "cases", "first case", "of that case"]
    return Section("", [Table(head, rows, f"{result.cases} cases", instead=lines)], place="status")


def _requirements(result: Result, data: dict[str, Any]) -> list[Section]:
    rows, lines = [], []
    for name, item in result.sheet.requirements.items():
        found = data["requirements"][name]
        verb = {"equals": "=", "at_most": "<=", "at_least": ">="}[item.kind]
        target = result.sheet.numbers[item.target]
        outcome = "met" if found["reached"] else f"not met ({found['reason'] or 'not solved'})"
        wanted, have = written(of_quantity(item.address), target), written(of_quantity(item.address), found["value"])
        free = written(of_input(result.sheet, item.free), found["free_value"]) + ("" if found["active"] else ", as given")
        others = ", ".join(written(of_input(result.sheet, item.free), other) for other in found["other_solutions"])
        rows.append([name, item.address, f"{verb} {wanted}", outcome, have, item.free, free, others or "-"])
        lines.append(Sentence(f"{name}: {item.address} {verb} {wanted}: {outcome}, at {have} with {item.free} = {free}"))
        if others:
            lines.append(Sentence(f"also solved by {others}", 2))
    head = ["requirement", "quantity", "asked for", "outcome", "reached", "freed input", "its value", "also solved by"]
    return [Section("Asked for", [Table(head, rows, instead=lines)], place="requirements")] if rows else []


def written(scale: Scale, value: float | None) -> str:
    """Write an SI number in the unit in which people read it.

    Parameters
    ----------
    scale : Scale
    value : float or None

    Returns
    -------
    str
        With the unit; a dash for what is not defined.
    """
    if value is None:
        return "-"
    return f"{number(scale.shown(value))} {scale.unit}".rstrip()


def _streams(result: Result, data: dict[str, Any]) -> Section:
    names = result.sheet.components.names
    masses = result.sheet.components.molar_masses
    mixed = any(item["phase"] == "two-phase" for item in data["streams"].values())
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
                *([number(item["vapour_fraction"], 4)] if mixed else []),
                number(celsius(item["temperature_K"]), 4),
                number(None if item["pressure_Pa"] is None else item["pressure_Pa"] / 1e5, 4),
                number(mass),
                number(None if total is None or item["phase"] != "gas" else total * 3600.0 / NORMAL_MOLES),
                number(hourly(total)),
                *(number(hourly(flow)) for flow in flows),
            ]
        )
    head = ["stream", "phase", *(["vapour fraction"] if mixed else []), "degC", "bar", "kg/h", "Nm3/h", "kmol/h", *names]
    return Section("Streams, components in kmol/h", [Table(head, rows)], place="streams")


def _gases(result: Result, data: dict[str, Any]) -> list[Section]:
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
    head = ["stream", "component", "ppm by volume", "mg/Nm3"]
    return [Section("In the gases", [Table(head, rows)], place="gases")] if rows else []


def _balance(data: dict[str, Any]) -> Section:
    found = data["balance"]["components"]
    keys = {"in_mol_s": "in, make-up included", "made_mol_s": "made", "out_mol_s": "out"}
    if not any(item["made_mol_s"] for item in found.values()):
        del keys["made_mol_s"]
    rows = [[name, *(number(hourly(item[key]), 7) for key in keys), number(item["closure"], 2)] for name, item in found.items()]
    head = ["component", *keys.values(), "closure"]
    both = {unit["kind"] for unit in data["units"].values() if "profile" in unit}
    name = "Combined balance of absorber and regenerator" if len(both) > 1 else "Balance"
    return Section(f"{name}, kmol/h", [Table(head, rows)], place="balance")


def _influence(result: Result) -> list[Section]:
    found = influences(result)
    sections = []
    for quantity in dict.fromkeys(item.quantity for item in found):
        own = [item for item in found if item.quantity == quantity][:MOST_INFLUENCES]
        name = quantity.removeprefix("requirements.").removesuffix(".free_value")
        shown = quantity
        if quantity.startswith("requirements."):
            shown = f"{result.sheet.requirements[name].free}, with requirement {name} held"
        rows = [[item.number, f"1 {item.unit}", f"{item.per_cent:+.3g} %"] for item in own]
        sections.append(Section(f"What matters most to {shown}", [Table(["input", "more by", "moves it by"], rows)]))
    return sections
