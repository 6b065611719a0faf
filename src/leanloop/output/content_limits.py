"""The report of limits as sections: each column's least rate and pinch, and the window of a closed pair."""

from __future__ import annotations

from typing import TYPE_CHECKING

from leanloop.output.content import Listing, Section, Sentence, Table, hourly, number
from leanloop.output.content_report import CAUTIONS

if TYPE_CHECKING:
    from leanloop.pinch.column import ColumnLimits
    from leanloop.pinch.limits import Limits
    from leanloop.pinch.loop import LoopLimits

METHODS = {
    "curve": "on the equilibrium curve, exact",
    "doubling": "by solves as the stages double, to about 1e-3",
}


def limits_sections(found: Limits, alone: bool = True) -> list[Section]:
    """Give what a report of limits says.

    Parameters
    ----------
    found : Limits
    alone : bool
        Whether it is a report by itself, with status and cautions.

    Returns
    -------
    list of Section
    """
    out = []
    if alone:
        case = found.case
        kind = "status" if case.status == "converged" else "failure"
        out.append(Section("", [Sentence(f"Status: {case.status}. {case.status_text}", 0, kind)], place="status"))
    out += [_column(item) for item in found.columns.values()]
    out.append(_loop(found.loop))
    notes = found.cautions()
    if alone:
        always = CAUTIONS if found.case.sheet.heat is None else CAUTIONS[:-1]
        out.append(Section("Cautions", [Listing([*notes, *always])], place="cautions"))
    elif notes:
        out.append(Section("Cautions on the limits", [Listing(notes)], place="limits.cautions"))
    return out


def _column(item: ColumnLimits) -> Section:
    title = f"Limits of {item.unit} ({item.kind})"
    place = f"units.{item.unit}"
    if item.key is None or item.ends is None:
        return Section(title, [Sentence(_sentence(item.why or "nothing is known"))], place=place)
    at, absorbs = item.ends, item.cleans == "gas"
    word = "solvent" if absorbs else "stripping gas"
    boiled = item.least_duty_W is not None or item.times_least is not None
    now = at.liquid if absorbs else at.gas
    if boiled:
        duty = item.least_duty_W
        flows = [["least reboiler duty", number(None if duty is None else duty / 1e3), "kW"]]
    else:
        flows = [
            [f"least {word}, solute-free", number(hourly(item.least_mol_s)), "kmol/h"],
            [f"{word} as it is" if not at.stated else f"{word} between these ends", number(hourly(now)), "kmol/h"],
        ]
    rows = [
        *flows,
        ["boil-up over that at the least" if boiled else "ratio to the least", number(item.ratio_to_least), ""],
        ["equilibrium stages needed", number(item.stages_needed), ""],
    ]
    pinch = item.pinch
    if pinch is not None:
        rows += [
            [f"pinch at the least rate, {pinch.kind}", "", ""],
            ["  X there", number(pinch.x), "mol/mol"],
            ["  Y there", number(pinch.y), "mol/mol"],
        ]
    ends = [
        ["lean", number(at.x_lean), number(at.y_lean)],
        ["rich", number(at.x_rich), number(at.y_rich)],
    ]
    parts = [
        Table([f"{item.key}, stages without limit", "", ""], rows, f"Least rate and pinch by {item.key}"),
        Table(["end, stated" if at.stated else "end, as solved", "X", "Y"], ends, f"Ends in mole ratios of {item.key}"),
    ]
    if item.method:
        parts.append(Sentence(f"Found {METHODS[item.method]}."))
    if item.why:
        parts.append(Sentence(_sentence(item.why)))
    return Section(title, parts, place=place)


def _loop(loop: LoopLimits) -> Section:
    title = "Limits of the closed pair"
    if loop.circuit is None or loop.asked is None:
        return Section(title, [Sentence(_sentence(loop.why or "nothing is known"))], place="limits.loop")
    circuit, asked = loop.circuit, loop.asked
    named = f"requirement {circuit.requirement.name}" if circuit.requirement else "the outlet as solved"
    parts = [
        Sentence(
            f"{circuit.absorber} and {circuit.stripper}, stages without limit, {named}: {asked.address} of "
            f"{number(asked.target)}" + (f", Y = {number(asked.ratio)}." if asked.ratio is not None else ".")
        ),
        Table(
            ["kmol/h", "least", "as it is", "most"],
            [
                [
                    f"circulation held by {circuit.makeup}",
                    number(hourly(loop.least)),
                    number(hourly(loop.circulation)),
                    number(hourly(loop.most)),
                ],
                *(
                    []
                    if loop.circuit.boil
                    else [
                        [
                            "stripping gas at this circulation, solute-free",
                            number(hourly(loop.least_gas)),
                            number(hourly(loop.gas)),
                            "",
                        ]
                    ]
                ),
            ],
            "Window of circulation, and least stripping gas",
        ),
    ]
    if loop.least_duty is not None:
        parts.append(Sentence(f"Least reboiler duty at this circulation: {number(loop.least_duty / 1e3)} kW."))
    if loop.method:
        parts.append(Sentence(f"Found {METHODS[loop.method]}."))
    if loop.why:
        parts.append(Sentence(_sentence(loop.why)))
    return Section(title, parts, place="limits.loop")


def _sentence(text: str) -> str:
    """Begin with a capital and end with a full stop."""
    return text[:1].upper() + text[1:].rstrip(".") + "."
