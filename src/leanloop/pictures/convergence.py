"""How the loops of a solve closed: residual by pass."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from leanloop.pictures.base import GREY, canvas, legend_below, library, literal, look, settle, short, style

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from leanloop.flowsheet.result import Result

TOLERANCE = {"color": GREY, "linestyle": (0, (2, 2)), "linewidth": 1.2}
MOST_MARKERS = 40


def figure(result: Result, case: int | None = None) -> Figure | None:
    """Draw the residual of each loop by pass on a log axis.

    Parameters
    ----------
    result : Result
    case : int, optional
        Number of the case, for a result with a case axis; the first without it.

    Returns
    -------
    matplotlib.figure.Figure or None
        None where the flowsheet has no loop, or none that was evaluated. Lines have the gids ``loop-1``, ``loop-2``, ...
        and ``tolerance``; a residual of zero stands at the floor, which the note names.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    """
    data = result.to_dict()
    histories = [loop["history"][case or 0] if result.axis else loop["history"] for loop in data["loops"]]
    if not any(histories):
        return None
    values = [value for history in histories for value in history if value is not None and math.isfinite(value)]
    tolerance = result.sheet.settings.tolerance
    least = min([tolerance, *(value for value in values if value > 0)])
    floor = 10.0 ** (math.floor(math.log10(least)) - 1)
    note = f"method: {data['loop']['method']}; worst component's imbalance over the torn streams, per mol that enters from outside"
    if 0 in values:
        note += f"; a residual of zero is drawn at the floor, {short(floor)}"
    with style():
        own = f", case {case or 0}" if result.axis else ""
        loops = "loop" if len(histories) == 1 else "loops"
        paper = canvas(140.0, 105.0, f"Convergence of the {loops}{own}", note)
        axes = paper.subplots()
        axes.set_gid("convergence")
        handles = []
        for place, (loop, history) in enumerate(zip(data["loops"], histories, strict=True)):
            if history:
                shown = [floor if value == 0 else math.nan if value is None else value for value in history]
                passes = f"{len(history)} {'pass' if len(history) == 1 else 'passes'}"
                label = literal(f"{_few(loop['units'])}, torn at {_few(loop['tears'])}: {passes}")
                every = -(-len(history) // MOST_MARKERS)
                options = {"gid": f"loop-{place + 1}", "label": label, "markevery": every, "clip_on": False, "zorder": 3}
                handles += axes.plot(range(1, len(history) + 1), shown, **options, **look(place))
        label = f"tolerance, {short(tolerance)}"
        handles.append(axes.axhline(tolerance, gid="tolerance", label=label, zorder=2, **TOLERANCE))
        count = max(len(history) for history in histories)
        axes.set_yscale("log")
        axes.set_ylim(floor if 0 in values else least / 3, 3 * max([tolerance, *values]))
        axes.set_xlim(0.5, count + 0.5)
        axes.xaxis.set_major_locator(library().ticker.MaxNLocator(nbins=12, integer=True, min_n_ticks=1))
        axes.yaxis.set_minor_formatter(library().ticker.NullFormatter())
        axes.set_xlabel("pass")
        axes.set_ylabel("residual, mol per mol")
        legend_below(paper, handles, columns=1)
        settle(paper)
    return paper


def _few(names: list[str]) -> str:
    """Write names as a path, the middle left out where they are many."""
    names = list(names)
    shown = names if len(names) <= 4 else [*names[:3], f"... ({len(names)} in all)"]
    return ", ".join(shown)
