"""What margins cost: on flooding in width, on the solvent rate in stages."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from leanloop.sizing.designs import Designs

FLOODS = (0.6, 0.7, 0.8, 0.9)
TIMES = (1.05, 1.1, 1.2, 1.35, 1.5, 2.0)


def flood_effects(found: Designs) -> list[tuple[str, float, float, float]]:
    """Give width and volume of the chosen design's columns at other parts of flood.

    Parameters
    ----------
    found : Designs

    Returns
    -------
    list of (str, float, float, float)
        Column, part of flood, diameter in m, volume in m3; nothing for columns that stand already.
    """
    from leanloop.sizing.equipment import equip

    design = found.chosen
    out = []
    if design is None:
        return out
    for name, item in found.columns.items():
        if "diameter" in item.spec.numbers or "most_drop" in item.spec.numbers:
            continue
        for part in FLOODS:
            spec = replace(item.spec, numbers={**item.spec.numbers, "flood": part})
            own = equip(found.sizing, spec, found.result, found.count)
            out.append((name, part, float(own.diameter_m[design]), float(own.volume_m3[design])))
    return out


def solvent_effects(found: Designs) -> list[tuple[float, int]]:
    """Give the designs of fewest stages whose circulation is at most so many times the least of the scan.

    Parameters
    ----------
    found : Designs

    Returns
    -------
    list of (float, int)
        Times the least, and the design; each design once.
    """
    good = np.flatnonzero(found.good)
    if not len(good):
        return []
    total = sum(found.stages.values(), np.zeros(found.count))
    least = found.circulation[good].min()
    if not least > 0 or np.ptp(found.circulation[good]) < 1e-6 * least:
        return []
    out: list[tuple[float, int]] = []
    for times in TIMES:
        rows = good[found.circulation[good] <= times * least]
        best = int(rows[np.lexsort((found.circulation[rows], total[rows]))[0]])
        if not out or out[-1][1] != best:
            out.append((times, best))
    return out
