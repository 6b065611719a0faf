"""How long contaminants take to build up: the circulating inventory as a stirred tank, everything else quasi-steady.

The tank stands where the make-up gives the lean solvent. It holds H mol of the held components, of which S mol/s go round,
so that a component with the flow n out of the tank has the amount n H/S in it, and with g coming back

    (H/S) dn/dt = g(n) - n.

The loop is cut at the tank; g is a solve of the cut flowsheet, and its exact derivatives make the Jacobian. For a component
that enters at the rate f and leaves by a bleed p of the circulation alone, n = (f/p)(1 - p)(1 - exp(-p S t/H)).
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np
from scipy.integrate import solve_ivp
from scipy.sparse import csc_matrix

from leanloop.feed import Feed
from leanloop.studies.purity import Purity
from leanloop.units.base import Unit

if TYPE_CHECKING:
    from leanloop.flowsheet.result import Result
    from leanloop.flowsheet.sheet import Flowsheet

SHARES = (50, 90, 99)  # per cent of the steady level
POINTS = 60  # of a curve
TURNS = 12.0  # time constants of the slowest mode that are followed
TOLERANCE = 1e-8
TOGETHER = 128  # cases that are followed with common steps
FINE = 8000  # points between which a crossing is interpolated: 4e-7 of the time at most


class CutOpen:
    """A flowsheet whose loop is cut where the make-up gives the lean solvent.

    Parameters
    ----------
    sheet : Flowsheet
    purity : Purity
    """

    def __init__(self, sheet: Flowsheet, purity: Purity) -> None:
        self.purity = purity
        stream = purity.stream
        self.feed = f"tank_{stream}"[:80]
        while self.feed in sheet.plan.phases:
            self.feed = f"{self.feed[:79]}_"
        names = sheet.components.names
        present = sheet.plan.present[stream]
        self.carried = [name for name, there in zip(names, present, strict=True) if there and name not in purity.held]
        entries = {
            "phase": sheet.plan.phases[stream], "temperature": 300.0, "pressure": 1e5,
            "flows": {name: 1.0 for name, there in zip(names, present, strict=True) if there},
        }  # fmt: skip
        given = sheet.given["feeds"]
        feeds = {**given, self.feed: entries} if isinstance(given, Mapping) else [*given, Feed(self.feed, **entries)]
        units = [type(unit)(name, **rewired(unit, stream, self.feed)) for name, unit in sheet.units.items()]
        loop = {key: item for key, item in (sheet.given["loop"] or {}).items() if key != "tears"}
        self.sheet = sheet.rebuilt(feeds=feeds, units=units, requirements=None, loop=loop, limits=None, studies=None, plain_si=True)

    def solve(self, changes: Mapping[str, Any], flows: np.ndarray) -> Result:
        """Solve with given flows (M, K) of what the solvent carries out of the tank."""
        own = {f"feeds.{self.feed}.flows.{name}": flows[:, place] for place, name in enumerate(self.carried)}
        return self.sheet.solve_cases({**changes, **own})

    def back(self, result: Result) -> np.ndarray:
        """Give what comes back to the tank, (M, K) mol/s."""
        return np.stack([np.asarray(result[address], dtype=float) for address in self.quantities], axis=1)

    @property
    def quantities(self) -> list[str]:
        """Addresses of what comes back."""
        return [f"streams.{self.purity.stream}.mol_s.{name}" for name in self.carried]

    def slopes(self, result: Result) -> np.ndarray:
        """Give the derivatives of what comes back, (M, K, K): row what, column of which."""
        numbers = [f"feeds.{self.feed}.flows.{name}" for name in self.carried]
        found = result.sensitivities(self.quantities, numbers)
        return np.stack([np.stack([found[q, n] for n in numbers], axis=-1) for q in self.quantities], axis=-2)


def rewired(unit: Unit, old: str, new: str) -> dict[str, Any]:
    """Give what is written at a unit, with another stream at the inlets that took one.

    Parameters
    ----------
    unit : Unit
    old, new : str
    """

    def swapped(entries: tuple[Any, ...], raw: Mapping[str, Any]) -> dict[str, Any]:
        out = dict(raw)
        for entry in entries:
            item = out.get(entry.name)
            if entry.sort == "inlet" and item is not None:
                out[entry.name] = (
                    (new if item == old else item) if isinstance(item, str) else [new if x == old else x for x in item]
                )
            elif entry.sort == "table" and isinstance(item, Mapping):
                out[entry.name] = swapped(entry.nested, item)
            elif entry.sort == "tables" and isinstance(item, (list, tuple)):
                out[entry.name] = [swapped(entry.nested, part) for part in item]
        return out

    return swapped(unit.entries, unit.raw)


def follow(opened: CutOpen, steady: Result, changes: Mapping[str, Any], freed: Mapping[str, np.ndarray]) -> dict[str, Any]:
    """Follow the build-up of every case from the start to the steady level.

    Parameters
    ----------
    opened : CutOpen
    steady : Result
        Of the closed flowsheet, with a case axis.
    changes : mapping of str to (M,) array
        Of the cases.
    freed : mapping of str to (M,) array
        Inputs that requirements freed; they stay where the steady state has them.

    Returns
    -------
    dict
        ``times`` (M, contaminants, 3) s to 50, 90 and 99 % of the steady level, NaN where it is not reached or not known;
        ``curve_times`` (M, POINTS) s; ``curve_levels`` (M, contaminants, POINTS), mol per mol of held components.
    """
    purity, stream = opened.purity, steady.stream(opened.purity.stream)
    names = steady.sheet.components.index
    flows = stream.flows
    held = flows[:, [names[name] for name in purity.held]]
    solvent = held.sum(axis=1)
    through = held @ purity.masses if purity.masses else solvent  # of what the inventory counts, kg/s or mol/s
    ends = flows[:, [names[name] for name in opened.carried]]
    cases, tracked = len(flows), [opened.carried.index(name) for name in purity.contaminants]
    base = {key: value for key, value in changes.items() if key in opened.sheet.numbers} | dict(freed)
    base |= {f"feeds.{opened.feed}.flows.{name}": held[:, place] for place, name in enumerate(purity.held)}
    base |= {f"feeds.{opened.feed}.temperature": stream.temperature, f"feeds.{opened.feed}.pressure": stream.pressure}
    start = ends.copy()
    for name, place in zip(opened.carried, range(len(opened.carried)), strict=True):
        if name in purity.contaminants or name in purity.start:
            start[:, place] = purity.start.get(name, 0.0) * solvent
    times = np.full((cases, len(tracked), len(SHARES)), np.nan)
    curve_times = np.full((cases, POINTS), np.nan)
    levels = np.full((cases, len(tracked), POINTS), np.nan)
    good = np.flatnonzero(np.isfinite(ends).all(axis=1) & (solvent > 0)) if tracked else np.arange(0)
    for begin in range(0, len(good), TOGETHER):
        rows = good[begin : begin + TOGETHER]
        own = {key: _taken(value, rows) for key, value in base.items()}
        found = _follow(opened, own, start[rows], ends[rows], tracked)
        turnover = purity.inventory / through[rows]  # s
        times[rows] = found[0] * turnover[:, None, None]
        curve_times[rows] = found[1] * turnover[:, None]
        levels[rows] = found[2] / solvent[rows][:, None, None]
    return {"times": times, "curve_times": curve_times, "curve_levels": levels}


def _taken(values: Any, rows: np.ndarray) -> Any:
    return [values[row] for row in rows] if isinstance(values, list) else np.asarray(values)[rows]


def _follow(
    opened: CutOpen, base: Mapping[str, Any], start: np.ndarray, ends: np.ndarray, tracked: list[int]
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Follow some cases in turnovers of the inventory; give crossings, times and flows of a curve."""
    cases, width = ends.shape
    scale = np.where(ends > 0, ends, np.maximum(ends.max(axis=1, keepdims=True), 1e-300))
    inner = opened.slopes(opened.solve(base, ends))
    lost = ~np.isfinite(inner).all(axis=(1, 2))
    inner = np.where(lost[:, None, None], 0.0, inner)
    slowest = np.linalg.eigvals(np.eye(width) - inner).real.min(axis=1)
    slowest = np.where(slowest > 1e-9, slowest, 1e-9)
    # every case has its own clock, so that all of them settle at about the same reading
    pace = 1.0 / slowest

    def flows(state: np.ndarray) -> np.ndarray:
        return np.maximum(state.reshape(cases, width), 0.0) * scale

    def rate(_: float, state: np.ndarray) -> np.ndarray:
        come = opened.back(opened.solve(base, flows(state)))
        change = (come / scale - state.reshape(cases, width)) * pace[:, None]
        return np.where(np.isfinite(change) & ~lost[:, None], change, 0.0).ravel()

    rows = (np.arange(cases)[:, None, None] * width + np.arange(width)[None, :, None]) + np.zeros((1, 1, width), dtype=int)
    across = np.swapaxes(rows, 1, 2)

    def slopes(_: float, state: np.ndarray) -> csc_matrix:
        found = opened.slopes(opened.solve(base, flows(state)))
        found = (found * scale[:, None, :] / scale[:, :, None] - np.eye(width)) * pace[:, None, None]
        found = np.where((~np.isfinite(found)).any(axis=(1, 2), keepdims=True) | lost[:, None, None], 0.0, found)
        return csc_matrix((found.ravel(), (rows.ravel(), across.ravel())), shape=(cases * width, cases * width))

    with np.errstate(all="ignore"):
        done = solve_ivp(
            rate, (0.0, TURNS), (start / scale).ravel(), method="BDF", jac=slopes, dense_output=True, rtol=TOLERANCE, atol=TOLERANCE
        )
    nothing = np.full((cases, len(tracked), len(SHARES)), np.nan)
    if not done.success:
        return nothing, np.full((cases, POINTS), np.nan), np.full((cases, len(tracked), POINTS), np.nan)
    fine = np.concatenate([[0.0], np.geomspace(1e-5, TURNS, FINE)])
    path = done.sol(fine).reshape(cases, width, len(fine))[:, tracked]
    aims = ends[:, tracked] / scale[:, tracked]
    crossings = _crossings(fine, path, aims) * pace[:, None, None]
    shown = np.concatenate([[0.0], np.geomspace(1e-3, 1.0, POINTS - 1)]) * TURNS / 2
    curve = done.sol(shown).reshape(cases, width, POINTS)[:, tracked] * scale[:, tracked][:, :, None]
    crossings[lost], curve[lost] = np.nan, np.nan
    return crossings, shown[None, :] * pace[:, None], curve


def _crossings(fine: np.ndarray, path: np.ndarray, aims: np.ndarray) -> np.ndarray:
    """Give when each tracked level first reaches its shares of the steady one, in readings of the common clock."""
    out = np.full((*aims.shape, len(SHARES)), np.nan)
    for number, share in enumerate(SHARES):
        aim = share / 100.0 * aims
        over = path >= aim[:, :, None]
        high = over.argmax(axis=2)
        low = np.maximum(high - 1, 0)
        above = np.take_along_axis(path, high[:, :, None], axis=2)[:, :, 0]
        below = np.take_along_axis(path, low[:, :, None], axis=2)[:, :, 0]
        part = np.where(high > 0, (aim - below) / np.where(above > below, above - below, 1.0), 0.0)
        reading = fine[low] + part * (fine[high] - fine[low])
        out[:, :, number] = np.where(over.any(axis=2) & (aims > 0), reading, np.nan)
    return out
