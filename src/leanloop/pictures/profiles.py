"""Composition, flows and temperature along a column, stage by stage."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.errors import Fault, InputError, nearest
from leanloop.pictures.base import (
    INK,
    NAVY,
    PAGE_WIDTH,
    PER_HOUR,
    RUST,
    canvas,
    legend_below,
    library,
    linear_axis,
    literal,
    log_axis,
    look,
    settle,
    short,
    style,
)

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from leanloop.flowsheet.result import Result

LOG_FROM = 100.0  # highest over lowest fraction
VARIES = 1e-3  # K
ZERO_CELSIUS = 273.15
ENDS = ("condenser", "reboiler")  # above the first stage and below the last
MOST_DECADES = 1e12  # shown on a log axis below the highest fraction
# without markers, which the components have
LIQUID = {"color": NAVY, "linestyle": "-", "linewidth": 2.0}
GAS = {"color": RUST, "linestyle": (0, (5, 2)), "linewidth": 2.0}
TEMPERATURE = {"color": INK, "linestyle": (0, (5, 1.5, 1, 1.5)), "linewidth": 2.0}


def figure(result: Result, unit: str, case: int | None = None) -> Figure:
    """Draw the profiles of a column: fractions of each distributing component, total flows, temperature if it varies.

    Parameters
    ----------
    result : Result
    unit : str
        Name of a column.
    case : int, optional
        Number of the case, for a result with a case axis; the first without it.

    Returns
    -------
    matplotlib.figure.Figure
        Axes with the gids ``liquid``, ``gas``, ``flows`` and ``temperature``, the top stage at the top; lines with
        the gids ``x-NAME``, ``y-NAME``, ``liquid-flow``, ``gas-flow`` and ``temperature``. What is not solved is left out.

    Raises
    ------
    MissingExtra
        Where matplotlib is not installed.
    InputError
        Where there is no such unit, or it is no column.
    """
    profile, found, kind = _profile(result, unit, case)
    words = result.sheet.plan.units[unit].values.words
    stages = np.atleast_1d(profile["stage"])
    names = list(profile["K"])
    warm = np.asarray(profile["temperature_K"], dtype=float) - ZERO_CELSIUS
    known = warm[np.isfinite(warm)]
    panels = 4 if len(known) and np.ptp(known) > VARIES else 3
    ends = [part for part in ENDS if part in words]
    count = len(stages) - len(ends)
    note = f"{kind} of {count} equilibrium {'stage' if count == 1 else 'stages'}"
    if ends:
        note += f", a {' and a '.join(ends)}"
    if result.sheet.plan.units[unit].wants_heat:
        note += ", adiabatic"
    if not len(known):
        note += ", not solved"
    elif panels == 3:
        note += f" at {known[0]:.4g} degC"
    note += "; flows are those leaving the stages" + _duties(found)
    with style():
        own = f", case {case or 0}" if result.axis else ""
        paper = canvas(PAGE_WIDTH, 112.0, f"Profiles of {unit}{own}", note)
        axes = paper.subplots(1, panels, sharey=True)
        looks = {name: look(place) for place, name in enumerate(names)}
        handles = _fractions(axes[0], profile["x"], stages, looks, "x", "liquid", "x, mol per mol liquid")
        _fractions(axes[1], profile["y"], stages, looks, "y", "gas", "y, mol per mol gas")
        handles += _flows(axes[2], profile, stages)
        if panels == 4:
            axes[3].set_gid("temperature")
            axes[3].set_title("temperature")
            handles += axes[3].plot(warm, stages, gid="temperature", label="temperature", **_fitting(TEMPERATURE, stages))
            linear_axis(axes[3].xaxis, known.min() - 0.06 * np.ptp(known), known.max() + 0.06 * np.ptp(known), 3)
            axes[3].set_xlabel("degC")
        _stage_axis(axes[0], stages, ends)
        if handles:
            legend_below(paper, handles, columns=4)
        settle(paper)
    return paper


def _profile(result: Result, unit: str, case: int | None) -> tuple[dict[str, Any], dict[str, Any], str]:
    """Give the profile, the results and the kind of a column in one case."""
    units = result.to_dict(lists=False)["units"]
    columns = [name for name, item in units.items() if "profile" in item]
    if unit not in columns:
        raise InputError([Fault(f"units.{unit}", "is no column of this flowsheet", nearest(unit, columns))])

    def chosen(item: Any) -> Any:
        if isinstance(item, dict):
            return {key: chosen(value) for key, value in item.items()}
        return item[case or 0] if result.axis else item

    kind = units[unit]["kind"]
    profile, found = chosen(units[unit]["profile"]), chosen(units[unit]["results"])
    return profile, found, kind if isinstance(kind, str) else kind[case or 0]


def _duties(found: dict[str, Any]) -> str:
    """Write the duties of reboiler and condenser, where they are known."""
    said = []
    for part in ENDS:
        duty = found.get(f"{part}_duty_W")
        if duty is not None and np.isfinite(duty):
            said.append(f"{part} {short(float(duty) / 1e3, 4)} kW")
    return f"; into the process: {', '.join(said)}" if said else ""


def _fitting(look: dict[str, Any], stages: np.ndarray) -> dict[str, Any]:
    """Give a look with markers that stay apart where stages are many."""
    every = max(1, -(-len(stages) // 25))
    return {**look, "markevery": every, "clip_on": False, "zorder": 3}


def _fractions(
    axes: Axes, values: dict[str, Any], stages: np.ndarray, looks: dict[str, Any], letter: str, gid: str, label: str
) -> list[Any]:
    """Draw the fractions of one phase."""
    axes.set_gid(gid)
    axes.set_title(gid)
    lines, seen = [], []
    for name, own_look in looks.items():
        own = np.asarray(values[name], dtype=float)
        seen.append(own[np.isfinite(own)])
        lines += axes.plot(own, stages, gid=f"{letter}-{name}", label=literal(name), **_fitting(own_look, stages))
    every = np.concatenate(seen) if seen else np.zeros(0)
    positive = every[every > 0]
    if len(positive) and positive.max() > LOG_FROM * positive.min():
        high = positive.max()
        low = max(positive.min(), high / MOST_DECADES)
        stretch = (high / low) ** 0.06
        log_axis(axes.xaxis, low / stretch, high * stretch)
        for line in lines:  # what falls below the axis runs into its edge and ends there
            line.set_clip_on(bool(positive.min() < low))
    else:
        linear_axis(axes.xaxis, 0.0, 1.08 * positive.max() if len(positive) else 1.0, 4)
    axes.set_xlabel(label)
    return lines


def _flows(axes: Axes, profile: dict[str, Any], stages: np.ndarray) -> list[Any]:
    axes.set_gid("flows")
    axes.set_title("total flows")
    lines, seen = [], []
    for key, gid, label, own_look in (
        ("liquid_mol_s", "liquid-flow", "liquid flow", LIQUID),
        ("gas_mol_s", "gas-flow", "gas flow", GAS),
    ):
        flow = np.asarray(profile[key], dtype=float) * PER_HOUR
        seen.append(flow[np.isfinite(flow)])
        lines += axes.plot(flow, stages, gid=gid, label=label, **_fitting(own_look, stages))
    every = np.concatenate(seen)
    if len(every) and every.min() > 0 and every.max() > 30 * every.min():
        log_axis(axes.xaxis, every.min() / 1.5, every.max() * 1.5)
    else:
        linear_axis(axes.xaxis, 0.0, 1.08 * (every.max(initial=0.0) or 1.0), 4)
    axes.set_xlabel("kmol/h")
    return lines


def _stage_axis(axes: Axes, stages: np.ndarray, ends: list[str]) -> None:
    low, high = float(stages[0]), float(stages[-1])
    axes.set_ylim(high + 0.5, low - 0.5)
    step = next(step for step in (1, 2, 5, 10, 20, 50, 100, len(stages)) if len(stages) <= 15 * step)
    # both ends, and round numbers that do not come too near to them
    between = [stage for stage in stages if stage % step == 0 and min(stage - low, high - stage) >= 0.6 * step]
    named = dict(zip((low if part == "condenser" else high for part in ends), ends, strict=True))
    ticker = library().ticker
    axes.yaxis.set_major_locator(ticker.FixedLocator([low, *between, high]))
    axes.yaxis.set_major_formatter(ticker.FuncFormatter(lambda stage, _: named.get(stage, f"{stage:.0f}")))
    axes.set_ylabel("stage, 1 at the top")
