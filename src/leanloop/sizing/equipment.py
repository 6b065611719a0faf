"""Equipment of columns over many designs: one diameter for all feed cases, trays or height, loads."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.flowsheet.view import View
from leanloop.sizing import packed_column, tray_column
from leanloop.sizing.rows import Rows, rows_of
from leanloop.sizing.sections import edges, worst
from leanloop.sizing.spec import ColumnSpec, Sizing
from leanloop.status import OK

if TYPE_CHECKING:
    from leanloop.flowsheet.result import Result

SMALL, LARGE, BORDER = 0.1, 0.2, 1.0  # m: steps of standard diameters, below and above; common practice, no source


@dataclass
class Equipped:
    """A column in every design.

    Attributes
    ----------
    spec : ColumnSpec
    diameter_m : (D,)
    trays, height_m, volume_m3 : (D,)
        The most that a feed case asks for; trays NaN with packing.
    flood, drop_Pa, entrainment, wetting, efficiency, hetp_m : (D, F)
        By feed case: the largest part of the flood velocity, the whole pressure drop, the largest entrainment (trays), the
        least wetting (packing), overall efficiency (trays) and mean height of a stage (packing).
    governs : (D, F) int
        Stage under which flooding is nearest; 0 above the top stage, -1 where it is not known.
    sections : list of D dicts of int to float
        By the first row of a section, the diameter in m that the section by itself asks for, over all feed cases.
    """

    spec: ColumnSpec
    diameter_m: np.ndarray
    trays: np.ndarray
    height_m: np.ndarray
    volume_m3: np.ndarray
    flood: np.ndarray
    drop_Pa: np.ndarray
    entrainment: np.ndarray
    wetting: np.ndarray
    efficiency: np.ndarray
    hetp_m: np.ndarray
    governs: np.ndarray
    sections: list[dict[int, float]]

    @property
    def governing_stage(self) -> np.ndarray:
        """Stage under which flooding is nearest in the feed case that is nearest to it, (D,); NaN where one is not known."""
        known = np.isfinite(self.flood).all(axis=1)
        worst = np.where(known[:, None], self.flood, 0.0).argmax(axis=1)
        return np.where(known, self.governs[np.arange(len(worst)), worst], np.nan)


def standard(diameter: np.ndarray) -> np.ndarray:
    """Round diameters up to standard ones, (...,) m."""
    step = np.where(diameter <= BORDER + 1e-9, SMALL, LARGE)
    return np.round(np.ceil(diameter / step - 1e-9) * step, 6)


def equip(sizing: Sizing, spec: ColumnSpec, result: Result, designs: int) -> Equipped:
    """Give a column's equipment in every design.

    Parameters
    ----------
    sizing : Sizing
    spec : ColumnSpec
    result : Result
        Cases are designs times feed cases, the feed cases fastest.
    designs : int
        D.

    Returns
    -------
    Equipped
        NaN where a case is not solved.
    """
    feeds = len(sizing.feeds)
    way: Any = tray_column if spec.trays else packed_column
    pieces = [(part.cases, part.run.status == OK, rows_of(part, spec, sizing.properties)) for part in result.parts]
    needed = np.full(designs * feeds, np.nan)
    apart: list[dict[int, float]] = [{} for _ in range(designs)]
    for part, (cases, good, rows) in zip(result.parts, pieces, strict=True):
        wide = way.diameters(spec, rows)
        needed[cases] = np.where(good, _most(wide), np.nan)
        _note_sections(apart, edges(View(part.run).numbers(spec.unit)), wide, cases // feeds, good)
    by_design = needed.reshape(designs, feeds)
    if "diameter" in spec.numbers:
        diameter = np.full(designs, spec.numbers["diameter"])
    else:
        diameter = np.where(np.isfinite(by_design).all(axis=1), by_design.max(axis=1), np.nan)
        diameter = standard(diameter) if spec.words.get("standard") else diameter
    wide = np.repeat(diameter, feeds)
    keys = ("flood", "drop_Pa", "entrainment", "wetting", "efficiency", "hetp_m", "trays", "height_m", "governs")
    found = {key: np.full(designs * feeds, np.nan) for key in keys}
    for cases, good, rows in pieces:
        own = way.at(spec, rows, wide[cases])
        for key, value in _summed(own, rows).items():
            found[key][cases] = np.where(good, value, np.nan)
    table = {key: value.reshape(designs, feeds) for key, value in found.items()}
    whole = np.isfinite(table["height_m"]).all(axis=1)
    height = np.where(whole, table["height_m"].max(axis=1), np.nan)
    trays = np.where(whole, table["trays"].max(axis=1), np.nan)
    governs = np.where(np.isfinite(table["governs"]), table["governs"], -1).astype(int)
    keep = {key: table[key] for key in ("flood", "drop_Pa", "entrainment", "wetting", "efficiency", "hetp_m")}
    volume = np.pi / 4 * diameter**2 * height
    return Equipped(spec, diameter, trays, height, volume, governs=governs, sections=apart, **keep)


def _note_sections(
    apart: list[dict[int, float]], first: tuple[int, ...], wide: np.ndarray, designs: np.ndarray, good: np.ndarray
) -> None:
    """Note what each section asks for, where a column has several."""
    if len(first) == 1:
        return
    for design, row in zip(designs[good], worst(wide, first)[good], strict=True):
        for start, own in zip(first, row, strict=True):
            apart[design][start] = max(apart[design].get(start, 0.0), float(own))


def _most(values: np.ndarray) -> np.ndarray:
    """Give the largest of each row that is known at all, (M,)."""
    found = np.where(np.isfinite(values), values, -np.inf).max(axis=1)
    return np.where(np.isfinite(found), found, np.nan)


def _summed(own: dict[str, np.ndarray], rows: Rows) -> dict[str, np.ndarray]:
    """Give one figure for each column: what is worst along it."""
    flood = np.where(np.isfinite(own["flood"]), own["flood"], -np.inf)
    out = {
        "flood": _most(own["flood"]), "governs": flood.argmax(axis=1).astype(float), "drop_Pa": own["drop_Pa"],
        "height_m": own["height_m"],
    }  # fmt: skip
    if "trays" in own:
        out |= {"trays": own["trays"], "efficiency": own["efficiency"], "entrainment": _most(own["entrainment"])}
    else:
        with np.errstate(all="ignore"):
            out |= {"hetp_m": np.nansum(own["hetp_m"], axis=1) / rows.count, "wetting": -_most(-own["wetting"])}
    return out


def cautions(sizing: Sizing, spec: ColumnSpec, result: Result, case: int, diameter: float) -> list[str]:
    """Say what a careful reader must know of a column in one case.

    Parameters
    ----------
    sizing : Sizing
    spec : ColumnSpec
    result : Result
    case : int
        Of design and feed case.
    diameter : float
        m.

    Returns
    -------
    list of str
    """
    said: Sequence[str] = []
    for part in result.parts:
        place = np.flatnonzero(part.cases == case)
        if len(place):
            every = rows_of(part, spec, sizing.properties)
            one = Rows(**{key: getattr(every, key)[place] for key in Rows.__dataclass_fields__})
            way: Any = tray_column if spec.trays else packed_column
            found = way.at(spec, one, np.array([diameter]))
            said = way.cautions(spec, one, found) if spec.trays else way.cautions(spec, one, found, diameter)
    return [f"Column {spec.unit}: {item}" for item in said]
