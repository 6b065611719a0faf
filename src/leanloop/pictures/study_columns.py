"""What pictures of a study show: which columns of the table of cases, under which label, and what is said of the rest."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.flowsheet.scales import of_column
from leanloop.pictures.base import short
from leanloop.pictures.panel_scales import known, tame
from leanloop.pictures.panels import listed
from leanloop.pictures.words import shortened

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet
    from leanloop.studies.findings import Findings

CONSTANT = 1e-9  # of the largest value: what varies less does not
TITLE_LETTERS = 150


@dataclass(frozen=True)
class Column:
    """One quantity in every case, as it is read.

    Attributes
    ----------
    address : str
    label : str
        The address and the unit.
    values : (M,) array
        In the unit; NaN where the case has no answer.
    clean : (M,) array or None
        The same with clean solvent.
    """

    address: str
    label: str
    values: np.ndarray
    clean: np.ndarray | None = None


def label(sheet: Flowsheet, address: str) -> str:
    """Give an address and the unit in which it is read.

    Parameters
    ----------
    sheet : Flowsheet
    address : str
        Of an input or of a column.

    Returns
    -------
    str
    """
    unit = of_column(sheet, address).unit
    return f"{address}, {unit}" if unit else address


def written(sheet: Flowsheet, address: str, value: float) -> str:
    """Write a value in the unit in which it is read.

    Parameters
    ----------
    sheet : Flowsheet
    address : str
    value : float
        SI.

    Returns
    -------
    str
    """
    scale = of_column(sheet, address)
    return f"{short(float(scale.shown(value)), 4)} {scale.unit}".strip()


def shown(sheet: Flowsheet, address: str, values: Any) -> np.ndarray:
    """Give values in the unit in which they are read, NaN for what is no number to draw.

    Parameters
    ----------
    sheet : Flowsheet
    address : str
    values : (M,) array_like
        SI.

    Returns
    -------
    (M,) array
    """
    with np.errstate(all="ignore"):
        return tame(of_column(sheet, address).shown(tame(values)))


def constant(values: np.ndarray) -> bool:
    """Tell whether values vary by no more than rounding.

    Parameters
    ----------
    values : (n,) array
        Finite.
    """
    return not len(values) or bool(np.ptp(values) <= CONSTANT * np.abs(values).max())


def recorded(findings: Findings) -> tuple[list[Column], str]:
    """Give what is worth a panel, and a note on what is not.

    Parameters
    ----------
    findings : Findings

    Returns
    -------
    (columns, note)
        What is recorded, then build-up factors, levels and the bleed that a limit needs. Cases that did not converge
        have NaN; quantities that are the same in every case are left out, and the note names them.
    """
    study, good = findings.study, findings.converged
    names = [name for name in study.record if name in findings.cases]
    if study.kind == "uncertainty":
        names = [*(name for name in findings.uncertainty.get("quantities", {}) if name in findings.cases), *names]
    if study.purity is not None:
        followed = study.purity.contaminants or study.purity.others
        extra = [f"purity.{key}.{name}" for key in ("build_up", "level", "bleed_needed") for name in followed]
        names += [name for name in extra if name in findings.cases]
    out, same, empty = [], [], []
    for name in dict.fromkeys(names):
        raw = np.asarray(findings.cases[name], dtype=float)
        # a bleed that a limit needs has its own solve, and its own status
        values = shown(study.sheet, name, raw if ".bleed_needed." in name else np.where(good, raw, np.nan))
        clean = findings.cases.get(f"clean.{name}")
        clean = None if clean is None else shown(study.sheet, name, np.where(good, np.asarray(clean, dtype=float), np.nan))
        if clean is not None and not np.isfinite(clean).any():
            clean = None
        if constant(known(values)) and (clean is None or constant(known(clean))):
            (same if len(known(values)) else empty).append((name, values))
        else:
            out.append(Column(name, label(study.sheet, name), values, clean))
    said = []
    if same and len(findings) > 1:
        units = [of_column(study.sheet, name).unit for name, _ in same]
        firsts = [short(float(known(values)[0]), 4) for _, values in same]
        texts = [f"{shortened(n, 60)} = {v} {u}".strip() for (n, _), v, u in zip(same, firsts, units, strict=True)]
        said.append("not drawn, as it does not vary: " + listed(texts, 3, 90))
    if empty:
        said.append("not drawn, as it has no value: " + listed(name for name, _ in empty))
    return out, "; ".join(said)


def tally(findings: Findings) -> str:
    """Write how many cases converged.

    Parameters
    ----------
    findings : Findings

    Returns
    -------
    str
    """
    count, good = len(findings), int(findings.converged.sum())
    if good == count:
        return f"{count} {'case' if count == 1 else 'cases'}, all converged" if count != 1 else "1 case, converged"
    return f"{good} of {count} cases converged, {count - good} did not"


def heading(findings: Findings, what: str, place: int = 0, of: int = 1) -> str:
    """Give the title of a picture.

    Parameters
    ----------
    findings : Findings
    what : str
        It shows.
    place, of : int
        Number of the picture, from 0, and how many there are.

    Returns
    -------
    str
    """
    name = shortened(" ".join((findings.study.title or findings.study.name).split()), TITLE_LETTERS)
    return f"{name}: {what}" + (f" ({place + 1} of {of})" if of > 1 else "")


def joined(*parts: str) -> str:
    """Join the parts of a note.

    Parameters
    ----------
    *parts : str
        Empty ones are left out.
    """
    return "; ".join(part for part in parts if part)
