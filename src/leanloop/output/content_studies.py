"""The report of a study as sections: what was changed, what came of it, purity, and the spread of the answer."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.flowsheet.scales import Scale, of_column, of_input, of_quantity
from leanloop.output.content import Listing, Section, Sentence, Table, number, printable
from leanloop.output.content_heat import NO_HEAT, heat_cautions
from leanloop.output.content_report import CAUTIONS, written
from leanloop.output.content_uncertainty import uncertainty_sections
from leanloop.studies.buildup import SHARES

if TYPE_CHECKING:
    from leanloop.studies.findings import Findings

MOST_ROWS = 24  # of a table of cases: the file holds all
MOST_COLUMNS = 7
MOST_BARS = 6
HOUR, DAY = 3600.0, 86400.0


def study_title(found: Findings) -> str:
    """Give the title of a report: the flowsheet's, and the study's own or its name.

    Parameters
    ----------
    found : Findings

    Returns
    -------
    str
    """
    own = printable(found.study.title) or found.study.name
    return f"{printable(found.study.sheet.title) or 'Flowsheet'}: {own}"


def study_sections(found: Findings) -> list[Section]:
    """Give what the report of a study says, its title left out.

    Parameters
    ----------
    found : Findings

    Returns
    -------
    list of Section
    """
    spread = found.study.kind == "uncertainty"
    return [
        _status(found),
        *([] if spread else [_inputs(found)]),
        *(uncertainty_sections(found) if spread else [_cases(found)] if len(found) else []),
        *_purity(found),
        *_matters(found),
        _cautions(found),
    ]


def _status(found: Findings) -> Section:
    counts = found.counts
    base = found.base
    lines = []
    if not base.converged:
        text = f"The flowsheet as it is: {base.status}. {base.status_text}"
        lines.append(Sentence(text, 0, "failure"))
    if len(found):
        good = counts.get("converged", 0)
        words = f"{len(found)} case{'s' if len(found) > 1 else ''}, {'all' if good == len(found) else good or 'none'} converged."
        lines.append(Sentence(words, 0, "status" if good == len(found) else "failure"))
    status, texts = found.status, found.cases.get("status_text", [])
    for word, count in counts.items():
        if word != "converged":
            first = status.index(word)
            lines.append(Sentence(f"{word}: {count}, first case {found.cases['case'][first]}: {texts[first]}"))
    return Section("", lines, place="status")


def _inputs(found: Findings) -> Section:
    """Tell what was changed, and over what."""
    sheet, cases = found.study.sheet, found.study.cases
    rows = []
    for address, values in cases.changes.items():
        if isinstance(values, list):
            rows.append([address, f"{len(values[0])} values each", "", "", str(len(cases.axes[0]) if cases.axes else cases.count)])
            continue
        scale = of_input(sheet, address)
        rows.append(
            [address, _cell(np.min(values), scale), _cell(np.max(values), scale), scale.unit or "-", str(len(np.unique(values)))]
        )
    if not rows:
        return Section("Inputs", [Sentence("The flowsheet as it is.")], place="inputs")
    how = "drawn" if cases.sampled else "grid" if len(cases.axes) > 1 else "values"
    title = {"drawn": "Inputs, drawn together", "grid": "Inputs, a grid", "values": "Inputs"}[how]
    return Section(title, [Table(["input", "least", "most", "unit", "values"], rows)], place="inputs")


def thinned(count: int, most: int = MOST_ROWS) -> np.ndarray:
    """Give the rows of a long table that are shown: evenly spread, the first and the last among them."""
    return np.arange(count) if count <= most else np.unique(np.round(np.linspace(0, count - 1, most)).astype(int))


def _cases(found: Findings) -> Section:
    """Give the table of cases, thinned."""
    sheet, record = found.study.sheet, found.study.record
    changed = [key for key, values in found.study.cases.changes.items() if not isinstance(values, list)]
    shown = [*changed, *record]
    shown += [f"purity.build_up.{name}" for name in _contaminants(found)]
    rows = thinned(len(found))
    title = "Cases" if len(rows) == len(found) else f"Cases, {len(rows)} of {len(found)}"
    parts: list[Any] = []
    fixed = len(changed[:3])
    rest = shown[fixed:]
    room = max(1, MOST_COLUMNS - fixed)
    for begin in range(0, len(rest), room):
        columns = [*shown[:fixed], *rest[begin : begin + room]]
        scales = [of_column(sheet, key) for key in columns]
        names = [f"({place + 1})" for place in range(len(columns))]
        lines = [
            Sentence(f"{name} {key}{f', {scale.unit}' if scale.unit else ''}")
            for name, key, scale in zip(names, columns, scales, strict=True)
        ]
        body = []
        for row in rows:
            word = found.status[row]
            cells = [_cell(found.cases[key][row], scale) for key, scale in zip(columns, scales, strict=True)]
            body.append([str(found.cases["case"][row]), *cells, "" if word == "converged" else word])
        parts += [*lines, Table(["case", *names, "status"], body)]
    return Section(title, parts, place="cases")


def _cell(value: Any, scale: Scale) -> str:
    """Write one value, a whole number as one."""
    return str(value) if isinstance(value, (int, np.integer)) and not scale.unit else number(scale.shown(float(value)))


def _contaminants(found: Findings) -> tuple[str, ...]:
    return found.study.purity.contaminants if found.study.purity else ()


# --- purity


def _purity(found: Findings) -> list[Section]:
    asked = found.study.purity
    if asked is None or not len(found):
        return []
    rows = thinned(len(found), 8)
    sections = [_build_up(found, rows), _solvent(found, rows)]
    if asked.contaminants:
        effect = _effect(found)
        sections += [effect] if effect is not None else []
    if asked.inventory:
        sections.append(_times(found, rows))
    return sections


def _build_up(found: Findings, rows: np.ndarray) -> Section:
    asked, cases = found.study.purity, found.cases
    lines = [
        Sentence(f"lean solvent {asked.stream}, held at {asked.makeup}: {', '.join(asked.held)}"),
        Sentence("build-up: largest flow in the loop over what comes in from outside; level: mol per mol of held components"),
    ]
    body = []
    for name in (*asked.contaminants, *asked.others):
        for row in rows if name in asked.contaminants else thinned(len(found), 2):
            needed = cases.get(f"purity.bleed_needed.{name}")
            line = [
                name,
                str(cases["case"][row]),
                number(of_quantity("mol_s").shown(float(cases[f"purity.ingress_mol_s.{name}"][row]))),
                number(float(cases[f"purity.build_up.{name}"][row])),
                number(float(cases[f"purity.level.{name}"][row])),
            ]
            if asked.limits:
                line.append("-" if needed is None else written(of_input(found.study.sheet, asked.bleed), float(needed[row])))
            body.append(line)
    head = ["component", "case", "comes in, kmol/h", "build-up", "level", *(["bleed needed"] if asked.limits else [])]
    for name, (kind, most) in asked.limits.items():
        lines.append(Sentence(f"limit of {name}: {kind} {number(most)} in {asked.stream}, kept by {asked.bleed}"))
    return Section("Purity of the solvent", [*lines, Table(head, body)], place="purity")


def _solvent(found: Findings, rows: np.ndarray) -> Section:
    asked, cases, scale = found.study.purity, found.cases, of_quantity("mol_s")
    keys = ("added_mol_s", "out_with_liquid_mol_s", "out_with_gas_mol_s", "degraded_mol_s")
    body = []
    for name in asked.held:
        mass = found.study.sheet.components[name].molar_mass
        for row in rows:
            flows = [float(cases[f"purity.{key}.{name}"][row]) for key in keys]
            own = number(flows[0] * mass * HOUR) if mass is not None else "-"
            body.append([name, str(cases["case"][row]), *(number(scale.shown(flow)) for flow in flows), own])
    head = ["solvent", "case", "added, kmol/h", "out with liquids", "out with gases", "degraded", "added, kg/h"]
    return Section("Solvent consumed", [Table(head, body)], place="solvent")


def _effect(found: Findings) -> Section | None:
    """Set what is recorded beside the same with clean solvent."""
    body = []
    for key in found.study.record:
        clean = found.cases.get(f"clean.{key}")
        if clean is None:
            continue
        scale, own = of_column(found.study.sheet, key), np.asarray(found.cases[key], dtype=float)
        if not np.isfinite(clean).any():
            continue
        for row in thinned(len(found), 3):
            base, value = float(clean[row]), float(own[row])
            more = 100.0 * (value - base) / abs(base) if base else np.nan
            if np.isfinite(more) and abs(more) > 1e-6 and found.cases["clean.status"][row] == "converged":
                body.append(
                    [
                        key,
                        str(found.cases["case"][row]),
                        number(scale.shown(value)),
                        number(scale.shown(base)),
                        scale.unit,
                        f"{more:+.3g} %",
                    ]
                )
    if not body:
        return None
    head = ["quantity", "case", "as it is", "with clean solvent", "unit", "difference"]
    names = ", ".join(_contaminants(found))
    return Section(f"What {names} in the solvent does", [Table(head, body)], place="purity.effect")


def _times(found: Findings, rows: np.ndarray) -> Section:
    asked, cases = found.study.purity, found.cases
    keys = {share: f"purity.time_to_{share}_s" for share in SHARES}
    longest = np.nanmax([np.nanmax([0.0, *cases[f"{keys[SHARES[-1]]}.{name}"][rows]]) for name in asked.contaminants] or [0.0])
    unit, divisor = ("d", DAY) if longest > 4 * DAY else ("h", HOUR)
    body = [
        [name, str(cases["case"][row]), *(number(float(cases[f"{key}.{name}"][row]) / divisor) for key in keys.values())]
        for name in asked.contaminants
        for row in rows
    ]
    held = f"{number(asked.inventory / 1e3)} {'t' if asked.masses else 'kmol'} of {', '.join(asked.held)}"
    lines = [
        Sentence(f"{held} in circulation, stirred at the make-up; columns follow at once"),
        Sentence("inputs that requirements free stay where the steady state has them"),
    ]
    head = ["component", "case", *(f"to {share} %, {unit}" for share in SHARES)]
    return Section("How long the build-up takes", [*lines, Table(head, body)], place="purity.time")


# --- what matters, cautions


def _matters(found: Findings) -> list[Section]:
    sections: list[Section] = []
    items = found.influences
    for quantity in dict.fromkeys(item.quantity for item in items):
        own = [item for item in items if item.quantity == quantity][:MOST_BARS]
        if all(item.number.startswith("requirements.") for item in own):
            continue  # what a requirement holds moves with its target alone
        rows = [[item.number, f"1 {item.unit}", f"{item.per_cent:+.3g} %"] for item in own]
        sections.append(
            Section(f"What moves {quantity}, at the flowsheet as it is", [Table(["input", "more by", "moves it by"], rows)])
        )
    return sections


def _cautions(found: Findings) -> Section:
    own = heat_cautions(found.base)
    standing: Sequence[str] = CAUTIONS if own == [NO_HEAT] else (*own, *CAUTIONS[:-1])
    said = found.base.cautions() if found.base.converged else []
    notes = ["Cautions of single cases are those of the flowsheet as it is; a case far from it may leave the range of its data."]
    return Section("Cautions", [Listing([*said, *notes, *standing])], place="cautions")
