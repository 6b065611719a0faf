"""Reports as text for a process engineer."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING, Any

from leanloop.output.content import Listing, Part, Section, Sentence, number, printable
from leanloop.output.content_limits import limits_sections
from leanloop.output.content_report import report_sections, report_title
from leanloop.output.content_sizing import sizing_sections, sizing_title
from leanloop.output.content_studies import study_sections, study_title

if TYPE_CHECKING:
    from leanloop.flowsheet.result import Result
    from leanloop.pinch.limits import Limits
    from leanloop.sizing.designs import Designs
    from leanloop.studies.findings import Findings

__all__ = ["designs", "findings", "limits", "number", "printable", "render", "report", "structure", "table"]

STEP = "  "  # of indentation


def table(head: Sequence[str], rows: Iterable[Sequence[str]], indent: str = STEP) -> list[str]:
    """Set a table in columns, the first to the left, the others to the right.

    Parameters
    ----------
    head : sequence of str
    rows : iterable of sequences of str
        As long as the head.
    indent : str

    Returns
    -------
    list of str
        Lines.
    """
    lines = [list(head), *[list(row) for row in rows]]
    widths = [max(len(line[column]) for line in lines) for column in range(len(head))]
    out = []
    for line in lines:
        cells = [cell.rjust(width) for cell, width in zip(line, widths, strict=True)]
        cells[0] = line[0].ljust(widths[0])
        out.append((indent + STEP.join(cells)).rstrip())
    return out


def render(sections: Iterable[Section], title: str = "") -> str:
    """Set sections as text, an empty line between them.

    Parameters
    ----------
    sections : iterable of Section
    title : str
        Stands above, underlined; none where it is empty.

    Returns
    -------
    str
        Ends with the end of a line.
    """
    blocks = [[title, "=" * len(title)]] if title else []
    for section in sections:
        head = f"{section.title}: {section.detail}" if section.detail else section.title
        blocks.append(([head] if head else []) + [line for part in section.parts for line in _lines(part)])
    return "\n\n".join("\n".join(block) for block in blocks) + "\n"


def _lines(part: Part) -> list[str]:
    indent = STEP * part.level
    if isinstance(part, Sentence):
        return [indent + part.text]
    if isinstance(part, Listing):
        return [f"{indent}* {item}" for item in part.items]
    if part.instead:
        return [line for sentence in part.instead for line in _lines(sentence)]
    return table(part.head, part.rows, indent)


def report(result: Result) -> str:
    """Write the report of a solve.

    Parameters
    ----------
    result : Result

    Returns
    -------
    str
    """
    return render(report_sections(result), report_title(result.sheet))


def limits(found: Limits) -> str:
    """Write the report of limits.

    Parameters
    ----------
    found : Limits

    Returns
    -------
    str
    """
    return render(limits_sections(found), report_title(found.case.sheet))


def findings(found: Findings) -> str:
    """Write the report of a study.

    Parameters
    ----------
    found : Findings

    Returns
    -------
    str
    """
    return render(study_sections(found), study_title(found))


def designs(found: Designs) -> str:
    """Write the report of a scan of designs.

    Parameters
    ----------
    found : Designs

    Returns
    -------
    str
    """
    return render(sizing_sections(found), sizing_title(found))


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
        f"{len(sheet.components)} components, {len(sheet.feeds)} feeds, {len(plan.units)} units, {len(plan.phases)} streams",
        f"order of calculation: {' > '.join(found['order'])}",
    ]
    for units in found["loops"]:
        lines.append(f"loop: {' > '.join(units)}")
    lines.append(f"torn streams: {', '.join(found['tears']) or 'none'}")
    for name, free in found["freed"].items():
        item = sheet.requirements[name]
        lines.append(f"requirement {name}: {item.address} {item.kind} {number(sheet.numbers[item.target])}, freeing {free}")
    for units in found["solved_together"]:
        lines.append(f"solved together: {', '.join(units)}")
    lines.append(f"degrees of freedom left: {found['freedom']}")
    return render([Section(report_title(sheet), [Sentence(line) for line in lines])])
