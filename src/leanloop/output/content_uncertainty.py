"""The spread of an answer in the report of a study: how likely each requirement is met, margins, shares of the variance."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.flowsheet.scales import Scale, of_column, of_input, of_quantity
from leanloop.output.content import Section, Sentence, Table, number
from leanloop.output.content_report import written

if TYPE_CHECKING:
    from leanloop.studies.findings import Findings

MOST_BARS = 6


def uncertainty_sections(found: Findings) -> list[Section]:
    """Give what the report of an uncertainty study says beside status and cautions.

    Parameters
    ----------
    found : Findings

    Returns
    -------
    list of Section
        Empty where the flowsheet as it is was not solved.
    """
    told = found.uncertainty
    if not told.get("quantities"):
        return []
    return [_laws(found), *_met(found), *[_spread(found, key, item) for key, item in told["quantities"].items() if _moves(item)]]


def _moves(item: dict[str, Any]) -> bool:
    return bool(item["sampled"]["deviation"] > 1e-9 * abs(item["sampled"]["mean"]))


def _laws(found: Findings) -> Section:
    sheet, body = found.study.sheet, []
    for key, law in found.study.laws.items():
        scale = of_input(sheet, key)
        wide = law.deviation * scale.factor
        share = "-" if sheet.sorts[key] == "temperature" or not law.mean else f"{100 * law.deviation / abs(law.mean):.3g} %"
        body.append([key, law.shape, number(scale.shown(law.mean)), number(wide), scale.unit or "-", share])
    head = ["input", "shape", "mean", "deviation", "unit", "of the mean"]
    design = found.uncertainty["design"]
    lines = [Sentence("The plant is designed once and stays as it is while the inputs move:")] if design else []
    lines += [Sentence(f"{key} = {written(of_input(sheet, key), value)}", 2) for key, value in design.items()]
    return Section("Spread of the inputs", [Table(head, body), *lines], place="spread")


def _met(found: Findings) -> list[Section]:
    sheet, margin, body, parts = found.study.sheet, found.study.margin, [], []
    for name, item in found.uncertainty["requirements"].items():
        scale, sign = of_quantity(item["quantity"]), "<=" if item["meets"] == "at_most" else ">="
        body.append(
            [
                name,
                f"{item['quantity']} {sign} {written(scale, item['limit'])}",
                f"{100 * item['first_order']:.3g} %",
                f"{100 * item['sampled']:.3g} %",
            ]
        )
    if not body:
        return []
    parts.append(Table(["requirement", "limit", "first order", "sampled"], body))
    rows = []
    for name, item in found.uncertainty["requirements"].items():
        for key, own in item["margins"].items():
            scale = of_input(sheet, key)
            moved = [_with(own["at"], own[way], scale) for way in ("first_order", "sampled")]
            rows.append([name, key, number(scale.shown(own["at"])), *moved, scale.unit or "-", _outcome(own, scale)])
    if rows:
        wanted = f"{100 * margin.confidence:.3g} %"
        parts += [
            Sentence(f"What makes it {wanted}, one input moved at a time:"),
            Table(["requirement", "input", "now", "first order", "sampled", "unit", "of the sample"], rows),
        ]
    return [Section("How likely each requirement is met", parts, place="requirements")]


def _outcome(own: dict[str, Any], scale: Scale) -> str:
    """Say how many of the sample meet the requirement with the margin, or the most that do."""
    likely = f"{100 * own['probability']:.3g} %"
    if own["reason"] is None:
        return f"met by {likely}"
    if "best" not in own:
        return f"{own['reason']}: {likely}"
    return f"{own['reason']} up to {written(scale, own['tried'])}: {likely} at {written(scale, own['best'])}"


def _with(at: float, value: float, scale: Scale) -> str:
    if not np.isfinite(value):
        return "-"
    share = f" ({100 * (value - at) / abs(at):+.3g} %)" if at and scale.unit != "degC" else ""
    return f"{number(scale.shown(value))}{share}"


def _spread(found: Findings, key: str, item: dict[str, Any]) -> Section:
    scale = of_column(found.study.sheet, key)
    first, sampled = item["first_order"], item["sampled"]

    def pair(name: str) -> list[str]:
        write = (lambda value: number(scale.shown(value))) if name == "mean" else (lambda value: number(value * scale.factor))
        return ["-" if first is None else write(first[name]), write(sampled[name])]

    body = [["mean", *pair("mean")], ["deviation", *pair("deviation")]]
    body += [[f"{share} % are below", "-", number(scale.shown(value))] for share, value in sampled["quantiles"].items()]
    shares = first["shares"] if first else sampled["shares"]
    order = sorted(shares, key=lambda name: -(shares[name] if np.isfinite(shares[name]) else 0.0))
    for name in order[:MOST_BARS]:
        body.append([f"variance from {name}", _share(first["shares"][name] if first else np.nan), _share(sampled["shares"][name])])
    body.append(["variance from inputs acting together", "-", _share(sampled["rest"])])
    unit = f", {scale.unit}" if scale.unit else ""
    return Section(f"Spread of {key}{unit}", [Table(["", "first order", "sampled"], body)], place="spread")


def _share(value: float) -> str:
    return f"{100 * value:.1f} %" if np.isfinite(value) else "-"
