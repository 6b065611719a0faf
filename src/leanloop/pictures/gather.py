"""All pictures of a result, with their file names and captions."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from leanloop.pictures import (
    base,
    convergence,
    designs_columns,
    designs_contours,
    designs_margins,
    designs_pareto,
    drawing,
    profiles,
    stage_diagram,
    study_buildup,
    study_contours,
    study_curves,
    study_histograms,
    study_samples,
    tornado,
    window,
)
from leanloop.pinch import diagram
from leanloop.pinch.limits import Limits, limits

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from leanloop.flowsheet.result import Result
    from leanloop.sizing.designs import Designs
    from leanloop.studies.findings import Findings

OF_STUDY = (
    ("curves", "Quantities against the input", study_curves.figures),
    ("contours", "Quantities over two inputs", study_contours.figures),
    ("samples", "Cases of the sample", study_samples.figures),
    ("histograms", "Spread of the answer", study_histograms.figures),
    ("variance", "Where the spread comes from", tornado.variance),
    ("tornado", "What matters most", tornado.figures),
    ("buildup", "Build-up in the lean solvent", study_buildup.figures),
)

OF_DESIGNS = (  # file, place in the report, caption
    ("contours", "designs", "What designs take", designs_contours.figures),
    ("pareto", "designs", "Designs that none betters", designs_pareto.figures),
    ("columns", "chosen", "Columns of the chosen design", designs_columns.figures),
    ("margins", "margins", "What margins cost", designs_margins.figures),
)


@dataclass(frozen=True)
class Picture:
    """A figure and what it is called.

    Attributes
    ----------
    name : str
        Of its files, without an ending.
    place : str
        Address of what it shows, as sections of a report have it.
    caption : str
    figure : matplotlib.figure.Figure
    """

    name: str
    place: str
    caption: str
    figure: Figure


def pictures(result: Result, found: Limits | None = None) -> list[Picture]:
    """Draw everything there is to draw of one case.

    Parameters
    ----------
    result : Result
        With a case axis, its first case is drawn.
    found : Limits, optional
        Of that case, where they are known already.

    Returns
    -------
    list of Picture

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    base.library()
    found = limits(result) if found is None else found
    drawn = None if result.axis else result
    out = [Picture("flowsheet", "", "The flowsheet", drawing.figure(result.sheet, drawn))]
    for name in found.columns if found.case.usable else ():
        place = f"units.{name}"
        shown = diagram.stage_diagram(found, name)
        if shown is not None:
            out.append(Picture(f"stages_{name}", place, f"Stages of {name} on mole ratios", stage_diagram.figure(shown)))
        out.append(Picture(f"profiles_{name}", place, f"Profiles of {name}", profiles.figure(result, name)))
    opening = diagram.window(found) if found.case.usable else None
    if opening is not None:
        caption = "Outlet of the closed pair against its circulation"
        out.append(Picture("window", "limits.loop", caption, window.figure(opening)))
    history = convergence.figure(result)
    if history is not None:
        out.append(Picture("convergence", "loops.0", "How the loops converged", history))
    return out


def of_study(findings: Findings) -> list[Picture]:
    """Draw everything there is to draw of a study.

    Parameters
    ----------
    findings : Findings

    Returns
    -------
    list of Picture
        Named by the study and what they show, from the second page of a sort on with its number.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    base.library()
    name, out = findings.study.name, []
    for sort, caption, figures in OF_STUDY:
        out += _numbered(f"{name}_{sort}", f"studies.{name}", caption, figures(findings))
    return out


def of_designs(found: Designs) -> list[Picture]:
    """Draw everything there is to draw of a scan of designs.

    Parameters
    ----------
    found : Designs

    Returns
    -------
    list of Picture
        ``designs_contours``, ``designs_pareto``, ``designs_columns`` and ``designs_margins``, those of them that there is
        something to show in; from the second page of a sort on with its number.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    base.library()
    out = []
    for sort, place, caption, figures in OF_DESIGNS:
        out += _numbered(f"designs_{sort}", place, caption, figures(found))
    return out


def _numbered(name: str, place: str, caption: str, found: list[Figure]) -> list[Picture]:
    """Give pages of one sort, from the second on with their number."""
    of = f" of {len(found)}"
    return [
        Picture(name + (f"_{page}" if page > 1 else ""), place, caption + (f", {page}{of}" if len(found) > 1 else ""), figure)
        for page, figure in enumerate(found, 1)
    ]


def files(shown: list[Picture], directory: str) -> dict[Path, str | bytes]:
    """Give the pictures as files, each as SVG and as PNG.

    Parameters
    ----------
    shown : list of Picture
    directory : str

    Returns
    -------
    dict of Path to str or bytes
    """
    out: dict[Path, str | bytes] = {}
    for item in shown:
        out[Path(directory) / f"{item.name}.svg"] = base.svg(item.figure, item.name)
        out[Path(directory) / f"{item.name}.png"] = base.png(item.figure)
    return out


def inline(shown: list[Picture]) -> dict[tuple[str, str], str]:
    """Give the pictures as SVG by place and caption, for a page.

    Parameters
    ----------
    shown : list of Picture
    """
    return {(item.place, item.caption): base.svg(item.figure, item.name) for item in shown}
