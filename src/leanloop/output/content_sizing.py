"""The report of a scan of designs as sections."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.flowsheet.scales import Scale, of_column, of_input
from leanloop.hydraulics.flooding import kister_gill_pressure_drop
from leanloop.output.content import Listing, Section, Sentence, Table, number, printable
from leanloop.output.content_heat import NO_HEAT, heat_cautions
from leanloop.output.content_report import CAUTIONS, written
from leanloop.output.content_studies import thinned
from leanloop.sizing.effects import flood_effects, solvent_effects

if TYPE_CHECKING:
    from leanloop.sizing.designs import Designs

MOST_ROWS = 15
MOST_REASONS = 6


def sizing_title(found: Designs) -> str:
    """Give the title of a report of designs."""
    return f"{printable(found.sheet.title) or 'Flowsheet'}: designs"


def sizing_sections(found: Designs) -> list[Section]:
    """Give what the report of a scan of designs says, its title left out.

    Parameters
    ----------
    found : Designs

    Returns
    -------
    list of Section
    """
    return [
        _status(found),
        *_ranked(found),
        *_chosen(found),
        *_effects(found),
        *_matched(found),
        *_failed(found),
        _cautions(found),
    ]


def _status(found: Designs) -> Section:
    good, count = int(found.good.sum()), found.count
    words = f"{count} designs, {'all' if good == count else good or 'none'} of them met what is asked for"
    if count == 1:
        words = f"One design, which {'meets' if good else 'does not meet'} what is asked for"
    feeds = list(found.sizing.feeds)
    words += f" in each of {len(feeds)} feed cases ({', '.join(feeds)})." if len(feeds) > 1 else "."
    lines = [Sentence(words, 0, "status" if good else "failure")]
    for name, item in found.sheet.requirements.items():
        target = found.sheet.numbers[item.target]
        lines.append(
            Sentence(f"{name}: {item.address} = {written(of_column(found.sheet, item.address), target)}, freeing {item.free}")
        )
    if found.sizing.prices:
        lines.append(
            Sentence(
                "ranked by what a year costs, in the money of the prices given; the knee is that of operation against investment"
            )
        )
    else:
        lines.append(Sentence("no prices are given: shown is the Pareto set over circulation, stripping and column size"))
        lines.append(Sentence("the knee is the one of them that is nearest to the best of each"))
    return Section("", lines, place="status")


def _order(found: Designs) -> np.ndarray:
    """Give the designs in the order in which they are shown."""
    if found.sizing.prices:
        cost = np.where(found.good, found.costs["total"], np.inf)
        order = np.argsort(cost, kind="stable")
        return order[np.isfinite(cost[order])]
    rows = np.flatnonzero(found.front)
    return rows[np.argsort(found.circulation[rows], kind="stable")]


def _ranked(found: Designs) -> list[Section]:
    order = _order(found)
    if not len(order):
        return []
    shown = order[:MOST_ROWS] if found.sizing.prices else order[thinned(len(order), MOST_ROWS)]
    marked = [item for item in (found.cheapest, found.knee, found.chosen) if item is not None and item not in shown]
    shown = np.array([*shown, *dict.fromkeys(marked)])
    names = list(found.stages)
    further = [key for key in found.inputs if key not in [f"units.{name}.stages" for name in names]]
    scales = {key: of_input(found.sheet, found.renamed.get(key, key)) for key in further}
    shown_further = [f"{key}, {scale.unit}" if scale.unit else key for key, scale in scales.items()]
    head = ["design", *(f"stages {name}" for name in names), *shown_further, "kmol/h solvent"]
    head += ["kmol/h stripping gas"] if np.any(found.stripping > 0) else []
    boiled = found.energy is not found.stripping
    head += ["kW reboilers"] if boiled else []
    for name in found.columns:
        head += [f"m wide {name}", f"m high {name}"]
    head += ["cost a year", "of it operation"] if found.costs else []
    head.append("")
    rows = []
    for design in shown:
        row = [str(design), *(str(found.stages[name][design]) for name in names)]
        row += [_cell(found.inputs[key][design], scale) for key, scale in scales.items()]
        row.append(number(3.6 * found.circulation[design]))
        row += [number(3.6 * found.stripping[design])] if np.any(found.stripping > 0) else []
        row += [number(found.energy[design] / 1e3)] if boiled else []
        for item in found.columns.values():
            row += [number(item.diameter_m[design], 4), number(item.height_m[design], 4)]
        row += [number(found.costs["total"][design]), number(found.costs["operation"][design])] if found.costs else []
        words = [
            word
            for word, place in (("cheapest", found.cheapest), ("knee", found.knee), ("chosen", found.chosen))
            if place == design
        ]
        rows.append([*row, ", ".join(words)])
    title = "Designs by cost" if found.sizing.prices else "Pareto set"
    if len(order) > len(shown):
        title += f", {len(shown)} of {len(order)}"
    return [Section(title, [Table(head, rows)], place="designs")]


def _cell(value: Any, scale: Scale) -> str:
    return str(value) if isinstance(value, list) else number(scale.shown(float(value)))


def _chosen(found: Designs) -> list[Section]:
    design = found.chosen
    if design is None:
        return []
    sheet, feeds = found.sheet, list(found.sizing.feeds)
    lines: list[Any] = []
    for key, values in found.inputs.items():
        value, scale = values[design], of_input(sheet, found.renamed.get(key, key))
        shown = str(value) if isinstance(value, (list, np.integer, int)) else written(scale, float(value))
        lines.append(Sentence(f"{key} = {shown}"))
    for address, values in found.freed.items():
        per_feed = ", ".join(
            f"{written(of_input(sheet, address), float(value))}{f' in {name}' if len(feeds) > 1 else ''}"
            for name, value in zip(feeds, values[design], strict=True)
        )
        lines.append(Sentence(f"{address} = {per_feed}"))
    for address in found.sizing.record:
        scale = of_column(sheet, address)
        per_feed = ", ".join(written(scale, float(value)) for value in found.quantity(address)[design])
        lines.append(Sentence(f"{address} = {per_feed}"))
    for name, values in found.ratios.items():
        if np.isfinite(values[design]):
            what = "solvent" if sheet.units[name].cleans == "gas" else "stripping gas"
            lines.append(Sentence(f"{name}: {number(values[design], 4)} times the least {what} between the same ends"))
    sections = [Section(f"Design {design}, the one chosen", lines, place="chosen")]
    for name, item in found.columns.items():
        sections.append(_column(found, name, item, design))
    extra = [Sentence(f"exchanger {name}: {number(area[design])} m2") for name, area in found.areas.items()]
    if np.any(found.power_W > 0):
        extra.append(Sentence(f"pumps and blowers: {number(found.power_W[design] / 1e3)} kW"))
    if found.costs:
        rows = [[key, number(values[design])] for key, values in found.costs.items()]
        extra.append(Table(["cost, of a year but for what is invested", ""], rows))
    if extra:
        sections.append(Section("Besides", extra, place="chosen.besides"))
    return sections


def _column(found: Designs, name: str, item: Any, design: int) -> Section:
    feeds = list(found.sizing.feeds)
    rated = "diameter" in item.spec.numbers
    wide, high = number(item.diameter_m[design], 4), number(item.height_m[design], 4)
    head = f"Column {name}: {wide} m wide ({'given' if rated else 'sized'}), {high} m high"
    count = found.stages[name][design]
    inside = f"{item.trays[design]:.0f} trays" if item.spec.trays else item.spec.packing.name
    inside += f" for {count} stages" + ("" if item.spec.trays else _at_flood(item.spec.packing))
    lead = ["feed case", "% of flood", "nearest under stage", "pressure drop, mbar"]
    lead += ["overall efficiency", "entrained, % of liquid"] if item.spec.trays else ["m per stage", "wetting over the least"]
    rows = []
    for place, feed in enumerate(feeds):
        row = [
            feed,
            number(100 * item.flood[design, place], 3),
            str(item.governs[design, place]),
            number(item.drop_Pa[design, place] / 100, 4),
        ]
        if item.spec.trays:
            row += [number(item.efficiency[design, place], 3), number(100 * item.entrainment[design, place], 3)]
        else:
            row += [number(item.hetp_m[design, place], 3), number(item.wetting[design, place], 3)]
        rows.append(row)
    parts = [Sentence(inside), Table(lead, rows)]
    apart = item.sections[design]
    if apart and not rated:
        first = sorted(apart)
        tops = ["the top" if not low else f"stage {low}" for low in first]
        spans = [f"{top} to {low}" for top, low in zip(tops, [*tops[1:], "the bottom"], strict=True)]
        rows = [[span, number(apart[low], 4)] for span, low in zip(spans, first, strict=True)]
        parts.append(Table(["section", "asks for, m wide"], rows))
    return Section(head, parts, place=f"units.{name}")


def _at_flood(packing: Any) -> str:
    """Tell the pressure drop at flood, where the packing factor is known."""
    if not np.isfinite(packing.kister_factor):
        return ""
    return f"; at flood it takes some {number(kister_gill_pressure_drop(packing.kister_factor) / 100, 3)} mbar/m (Kister and Gill)"


def _effects(found: Designs) -> list[Section]:
    """Tell what margins cost: on flooding in width, on the solvent rate in stages."""
    if found.chosen is None:
        return []
    parts: list[Any] = []
    floods = flood_effects(found)
    if floods:
        rows = [[name, f"{100 * part:.0f} %", number(width, 4), number(volume, 4)] for name, part, width, volume in floods]
        parts.append(Table(["column", "of flood", "m wide", "m3"], rows))
    solvent = solvent_effects(found)
    if solvent:
        names = list(found.stages)
        rows = [
            [
                number(times, 3),
                str(design),
                *(str(found.stages[name][design]) for name in names),
                number(3.6 * found.circulation[design]),
            ]
            for times, design in solvent
        ]
        parts.append(Sentence("Fewest stages for a solvent rate of at most so many times the least in the scan:"))
        parts.append(Table(["times the least", "design", *(f"stages {name}" for name in names), "kmol/h solvent"], rows))
    return [Section("What margins cost", parts, place="margins")] if parts else []


def _matched(found: Designs) -> list[Section]:
    """Tell what plant data make of standing columns."""
    rows, lines = [], []
    for name, item in found.matched.items():
        wanted = written(of_column(found.sheet, item["quantity"]), item["equals"])
        efficiency = "-" if not np.isfinite(item["efficiency"]) else f"{100 * item['efficiency']:.3g} %"
        rows.append([name, item["quantity"], wanted, number(item["stages"], 4), number(item["hetp_m"], 4), efficiency])
        if item["why"]:
            lines.append(Sentence(f"{name}: {item['why']}"))
    head = ["column", "measured", "value", "equilibrium stages", "HETP, m", "overall efficiency"]
    return [Section("What plant data make of it", [Table(head, rows), *lines], place="match")] if rows else []


def _failed(found: Designs) -> list[Section]:
    counts: dict[str, list[int]] = {}
    for design, reason in enumerate(found.reasons):
        if reason:
            counts.setdefault(found.statuses[design], []).append(design)
    lines = [
        f"{word}: {len(rows)} design{'s' if len(rows) > 1 else ''}, first {rows[0]}: {found.reasons[rows[0]]}"
        for word, rows in counts.items()
    ]
    return [Section("Designs that could not be", [Listing(lines[:MOST_REASONS])], place="failed")] if lines else []


def _cautions(found: Designs) -> Section:
    own = heat_cautions(found.result)
    standing = CAUTIONS if own == [NO_HEAT] else (*own, *CAUTIONS[:-1])
    return Section("Cautions", [Listing([*found.cautions(), *found.result.cautions(), *standing])], place="cautions")
