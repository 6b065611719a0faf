"""What pictures of a scan of designs share: quantities of designs, the designs that stand out, and words for both."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from leanloop.pictures.base import PER_HOUR, short
from leanloop.pictures.panel_scales import known, tame
from leanloop.pictures.panels import listed
from leanloop.pictures.study_columns import TITLE_LETTERS, Column, constant, written
from leanloop.pictures.words import shortened

if TYPE_CHECKING:
    from leanloop.sizing.designs import Designs

FAILED_LABEL = "design that could not be"
MOST_COLUMNS = 4  # whose stages name a design


def quantities(found: Designs) -> tuple[list[Column], str]:
    """Give what a design takes: circulation, stripping gas or duty, column volume, cost.

    Parameters
    ----------
    found : Designs

    Returns
    -------
    (columns, note)
        NaN for designs that could not be; what is the same for all of them is left out, and the note names it.
    """
    raw = {"circulation": ("circulation", "kmol/h", PER_HOUR * found.circulation)}
    if np.any(found.stripping > 0):
        raw["stripping"] = ("stripping gas", "kmol/h", PER_HOUR * found.stripping)
    if found.energy is not found.stripping:
        raw["reboilers"] = ("reboiler duty", "kW", found.energy / 1e3)
    if found.columns:
        raw["volume"] = ("column volume", "m3", found.volume)
    if found.costs:
        raw["cost"] = ("cost a year", "in the money of the prices", found.costs["total"])
    out, same = [], []
    for key, (name, unit, values) in raw.items():
        own = np.where(found.good, tame(values), np.nan)
        if constant(known(own)):
            same += [f"{name} = {short(float(known(own)[0]), 4)} {unit}"] if len(known(own)) else []
        else:
            out.append(Column(key, f"{name}, {unit}", own))
    return out, f"not drawn, as it does not vary: {listed(same, 5)}" if same and out else ""


def size_of(found: Designs) -> Column:
    """Give the volume of all columns, or their stages where none is equipped.

    Parameters
    ----------
    found : Designs
    """
    text = "column volume, m3" if found.columns else "stages of all columns"
    return Column("volume" if found.columns else "stages", text, np.where(found.good, tame(found.size_measure), np.nan))


def home(found: Designs) -> int | None:
    """Give the chosen design, or the first that could be; None where none could.

    Parameters
    ----------
    found : Designs
    """
    good = np.flatnonzero(found.good)
    return found.chosen if found.chosen is not None else int(good[0]) if len(good) else None


def marked(found: Designs) -> dict[str, int]:
    """Give the designs that stand out, by what they are.

    Parameters
    ----------
    found : Designs
    """
    pairs = {"chosen": found.chosen, "knee": found.knee, "cheapest": found.cheapest}
    return {key: design for key, design in pairs.items() if design is not None and found.good[design]}


def stages_of(found: Designs, design: int) -> str:
    """Name a design by its stages, such as 8 + 6; where these are the same in all, by the first input that is scanned.

    Parameters
    ----------
    found : Designs
    design : int
    """
    further = _further(found)
    if further and _same_stages(found):
        return written(found.sheet, further[0], found.inputs[further[0]][design])
    counts = [str(values[design]) for values in found.stages.values()]
    if not counts:
        return f"design {design}"
    return " + ".join(counts[:MOST_COLUMNS]) + (" ..." if len(counts) > MOST_COLUMNS else "")


def _further(found: Designs) -> list[str]:
    """Give the scanned inputs that are numbers and no stages."""
    own = {f"units.{name}.stages" for name in found.sizing.stages}
    return [key for key, values in found.inputs.items() if key not in own and not isinstance(values, list)]


def _same_stages(found: Designs) -> bool:
    return all(np.ptp(values) == 0 for values in found.stages.values())


def named(found: Designs, word: str, design: int) -> str:
    """Say which design stands out, for a legend.

    Parameters
    ----------
    found : Designs
    word : str
    design : int
    """
    further = [f"{key} = {written(found.sheet, key, found.inputs[key][design])}" for key in _further(found)]
    words = f"{word}: {stages_of(found, design)}"
    if _same_stages(found):
        further = further[1:]
    return words + (f", {shortened(further[0], 44)}" + (" ..." if len(further) > 1 else "") if further else "")


def naming(found: Designs) -> str:
    """Say what names a design.

    Parameters
    ----------
    found : Designs
    """
    names, further = [shortened(name, 24) for name in found.stages], _further(found)
    if further and _same_stages(found):
        return f"designs are named by {shortened(further[0], 44)}"
    if not names:
        return ""
    more = " + ..." if len(names) > MOST_COLUMNS else ""
    apart = f", those of one name differ in {listed(further, 2)}" if further else ""
    return f"designs are named by the stages of {' + '.join(names[:MOST_COLUMNS])}{more}{apart}"


def heading(found: Designs, what: str, place: int = 0, of: int = 1) -> str:
    """Give the title of a picture.

    Parameters
    ----------
    found : Designs
    what : str
        It shows.
    place, of : int
        Number of the picture, from 0, and how many there are.
    """
    name = shortened(" ".join((found.sheet.title or "Designs").split()), TITLE_LETTERS)
    return f"{name}: {what}" + (f" ({place + 1} of {of})" if of > 1 else "")


def tally(found: Designs) -> str:
    """Write how many designs could be.

    Parameters
    ----------
    found : Designs
    """
    count, good = found.count, int(found.good.sum())
    text = f"{count} design{'s' if count > 1 else ''}"
    return f"{text}, {count - good} of them could not be" if good < count else text
