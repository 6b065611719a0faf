"""A closed absorber and stripper with stages without limit: outlet, window of circulation, least stripping gas.

Derivation
----------
Ratios refer to the solute-free flows: G gas, L solvent, V stripping gas. Y_a*(X) and Y_s*(X) are the equilibrium
lines in absorber and stripper, X_a*(Y) and X_s*(Y) their inverses.

*Absorber.* The gas that passes the liquid of ratio X inside the column has, by the balance around the lean end,
Y = Y_out + (L/G) (X - X_lean). Where gas gives and liquid takes, Y >= Y_a*(X) at every X that occurs. Liquid can not get
beyond X_a*(Y_feed). With stages without limit the two lines touch somewhere between, for else a further stage would
still absorb; so

    Y_out = max over X in [X_lean, X_a*(Y_feed)] of  Y_a*(X) - (L/G) (X - X_lean).

The maximum at X_lean is a pinch at the lean end, at X_a*(Y_feed) one at the rich end, inside it is a tangent.

*Stripper.* By the balance around the lean end Y = Y_s + (L/V) (X - X_lean) <= Y_s*(X); the liquid can not get below
X_s*(Y_s). Solved for X_lean and with a touch somewhere,

    X_lean = max over X in [X_s*(Y_s), X_rich] of  X - (V/L) (Y_s*(X) - Y_s).

*The pair.* X_rich = X_lean + (G/L) (Y_feed - Y_out). Solvent that a bleed takes and a make-up replaces changes the lean
ratio between the columns to a X_lean + c. What the stripper makes of X_rich, put through the absorber, is a rising
function of X_lean with a slope below one: in the absorber d X_rich / d X_lean is 0 to 1 (0 where the rich end
or a tangent limits), in the stripper d X_lean / d X_rich likewise. So there is one fixed point, found by bracketing.

*The window.* With V fixed, more solvent first lets the absorber do better and then starves the stripper. The
circulations at which Y_out is at most the one required lie between a least and a most; the first is
limited by the absorber, the second by the stripper. Y_out falls with V at a fixed L, so the least V is unique.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from scipy.optimize import brentq, minimize_scalar

from leanloop.pinch.curve import Curve
from leanloop.pinch.largest import largest
from leanloop.pinch.maps import absorber_outlet, stripper_outlet

SCANNED, DECADES = 241, 4.0  # circulations of the first look, from the least that could carry the solute
POINTS = 1500  # of a line in the first look
TIGHT = 1e-13
CLEAR = 0.98  # of the required outlet: a first look below it is below
MOST_GAS = 1e9  # times the gas fed: more stripping gas is none


@dataclass(frozen=True)
class Edges:
    """Between which circulations a requirement can be met.

    Attributes
    ----------
    least, most : float or None
        mol/s of solute-free solvent.
    best : (float, float)
        Circulation of the lowest outlet, and that outlet's ratio.
    why : str or None
        Why one or both are missing.
    """

    least: float | None
    most: float | None
    best: tuple[float, float]
    why: str | None = None


@dataclass(frozen=True)
class Pair:
    """Absorber and stripper on one solvent.

    Parameters
    ----------
    absorber, stripper : Curve
    gas, steam : float
        G and V, mol/s, solute-free.
    y_feed, y_steam : float
        Ratios in the gas to be cleaned and in the stripping gas.
    kept, gained : float
        a and c: the lean ratio that the absorber receives is a X_lean + c.
    """

    absorber: Curve
    stripper: Curve
    gas: float
    steam: float
    y_feed: float
    y_steam: float = 0.0
    kept: float = 1.0
    gained: float = 0.0

    def outlet(self, circulation: float) -> tuple[float, float, float]:
        """Give what the pair settles to.

        Parameters
        ----------
        circulation : float
            L, mol/s.

        Returns
        -------
        y_out, x_lean, x_rich : float
            `x_lean` as the absorber receives it.
        """
        s, r = circulation / self.gas, self.steam / circulation
        x_end, floor = self._ends()

        def made(x_lean: float) -> tuple[float, float, float]:
            y_out = absorber_outlet(self.absorber, s, x_lean, self.y_feed, x_end)
            x_rich = x_lean + (self.y_feed - y_out) / s
            return y_out, x_rich, self.kept * stripper_outlet(self.stripper, r, x_rich, self.y_steam, floor) + self.gained

        low, high = 0.0, (x_end if np.isfinite(x_end) else 1e6) + self.gained
        if made(high)[2] >= high:
            x_lean = high
        elif made(low)[2] <= low:
            x_lean = low
        else:
            x_lean = brentq(lambda x: made(x)[2] - x, low, high, xtol=1e-300, rtol=TIGHT)
        y_out, x_rich, _ = made(x_lean)
        return y_out, x_lean, x_rich

    def _ends(self) -> tuple[float, float]:
        x_end = self.absorber.inverse(self.y_feed)
        return x_end, self.stripper.inverse(self.y_steam) if self.y_steam > 0 else 0.0

    def scan(self, circulations: np.ndarray, steam: np.ndarray | None = None) -> np.ndarray:
        """Give the outlet at many circulations at once, to some 1e-4: the maps as running maxima on a grid.

        Parameters
        ----------
        circulations : (P,) mol/s
        steam : (P,) mol/s, optional

        Returns
        -------
        (P,) mol/mol
        """
        x_end, floor = self._ends()
        steam = np.full(len(circulations), self.steam) if steam is None else steam
        s, r = circulations / self.gas, steam / circulations
        high = x_end if np.isfinite(x_end) else 10.0 * self.y_feed / s.min()
        grid = high * np.unique(np.concatenate([[0.0], np.geomspace(1e-9, 1, POINTS), np.linspace(0, 1, POINTS)]))
        grid = np.concatenate([grid, high * np.linspace(1, 2, 50)[1:]])
        y_a = np.where(grid <= x_end, self.absorber(grid), -np.inf)
        y_s = self.stripper(grid)
        out = np.empty(len(circulations))
        for place in range(len(circulations)):
            line = y_a - s[place] * grid
            rest = np.maximum.accumulate(line[::-1])[::-1]  # of X and all above
            left = np.where(grid >= floor, grid - r[place] * (y_s - self.y_steam), grid)  # below, nothing is stripped
            left = np.maximum.accumulate(left)  # of X and all below
            limit = np.maximum(rest + s[place] * grid, 0.0)
            clean = np.where(grid < x_end, np.minimum(limit, self.y_feed), self.y_feed)
            rich = grid + (self.y_feed - clean) / s[place]
            back = np.interp(rich, grid, np.maximum(left, 0.0))
            back = self.kept * np.where(rich <= floor, rich, np.minimum(back, rich)) + self.gained
            over = np.flatnonzero(back <= grid)
            at = int(over[0]) if over.size else len(grid) - 1
            if at == 0:
                out[place] = clean[0]
                continue
            gap = back - grid
            part = gap[at - 1] / (gap[at - 1] - gap[at]) if gap[at - 1] > gap[at] else 0.0
            out[place] = clean[at - 1] + part * (clean[at] - clean[at - 1])
        return out

    def window(self, required: float, span: Callable[[float], str], near: float | None = None) -> Edges:
        """Give the least and the most circulation at which the outlet is at most a required one.

        With a bleed there may be a second window at very high circulations, where the bleed alone carries the solute
        away; the one around `near` is given, else the first.

        Parameters
        ----------
        required : float
            Y.
        span : callable
            Writes a circulation with its unit, for sentences.
        near : float, optional
            L, mol/s, as it is.
        """
        x_end, _ = self._ends()
        carrying = self.gas * max(self.y_feed - required, 1e-12 * self.y_feed)
        start = 0.999 * carrying / x_end if np.isfinite(x_end) else 1e-3 * carrying
        circulations = np.geomspace(start, start * 10**DECADES, SCANNED)
        rough = self.scan(circulations)
        best, lowest = self._best(circulations, rough, required, near)
        if lowest > required:
            return Edges(
                None,
                None,
                (best, lowest),
                f"the window is empty: with stages without limit the outlet comes down to Y = {lowest:.5g} at "
                f"{span(best)}, above the Y = {required:.5g} asked for; more stripping gas, a hotter stripper or "
                "a colder absorber would open it",
            )

        def miss(log: float) -> float:
            return self.outlet(float(np.exp(log)))[0] - required

        def edge(outer: float) -> float:
            return float(np.exp(brentq(miss, np.log(outer), np.log(best), xtol=1e-300, rtol=1e-13)))

        # from the turning point outwards, on either side, to the first circulation that misses
        above = next((c for c in circulations[circulations > best] if self._misses(c, required, rough, circulations)), None)
        below = next((c for c in circulations[circulations < best][::-1] if self._misses(c, required, rough, circulations)), None)
        why = None
        if above is None:
            why = f"there is no most circulation: the stripping gas is enough for {span(float(circulations[-1]))} and more"
        if below is None:
            why = f"there is no least circulation above {span(float(start))}"
        return Edges(edge(below) if below else None, edge(above) if above else None, (best, lowest), why)

    def _best(
        self, circulations: np.ndarray, rough: np.ndarray, required: float, near: float | None
    ) -> tuple[float, float]:
        """Give a circulation that meets, as far inside its window as a first look can tell, else that of the lowest outlet."""
        meets = np.flatnonzero(rough <= required)
        if near is not None and self.outlet(near)[0] <= required:
            at = int(np.searchsorted(circulations, near).clip(1, SCANNED - 1))
            meets = np.arange(at - 1, at + 1) if not np.isin([at - 1, at], meets).any() else meets
            inside = [run for run in _runs(meets) if {at - 1, at} & set(run)]
            low = min(inside[0], key=lambda place: rough[place]) if inside else at
            best = float(circulations[low])
            outlet = self.outlet(best)[0]
            here = self.outlet(near)[0]
            return (best, outlet) if outlet <= here else (near, here)
        for run in _runs(meets):
            place = min(run, key=lambda place: rough[place])
            best = float(circulations[place])
            outlet = self.outlet(best)[0]
            if outlet <= required and rough[place] <= CLEAR * required:
                return best, outlet
        hills = np.flatnonzero((rough <= np.append(rough[1:], np.inf)) & (rough <= np.append(np.inf, rough[:-1])))
        found = []
        for at in hills[np.argsort(rough[hills])][:3]:  # near the edge of having a window at all: look closely
            left, right = circulations[max(at - 1, 0)], circulations[min(at + 1, SCANNED - 1)]
            closer = minimize_scalar(
                lambda log: self.outlet(float(np.exp(log)))[0],
                bounds=(np.log(left), np.log(right)),
                method="bounded",
                options={"xatol": 1e-8},
            )
            here = float(circulations[at])
            found += [(float(np.exp(closer.x)), float(closer.fun)), (here, self.outlet(here)[0])]
        good = [item for item in found if item[1] <= required]
        return min(good) if good else min(found, key=lambda item: item[1])

    def _misses(self, circulation: float, required: float, rough: np.ndarray, circulations: np.ndarray) -> bool:
        """Tell whether the outlet is above the required one, exactly only where the first look is near it."""
        at = rough[int(np.searchsorted(circulations, circulation))]
        if abs(at - required) > (1 - CLEAR) * required:
            return bool(at > required)
        return self.outlet(float(circulation))[0] > required

    def least_steam(self, circulation: float, required: float) -> tuple[float | None, str | None]:
        """Give the least stripping gas at a circulation.

        Parameters
        ----------
        circulation : float
            L, mol/s.
        required : float
            Y.

        Returns
        -------
        steam : float or None
            mol/s, solute-free.
        why : str or None
        """

        def outlet(log: float) -> float:
            return replace(self, steam=float(np.exp(log))).outlet(circulation)[0]

        most = np.log(MOST_GAS * self.gas)
        if outlet(most) > required:
            return None, (
                f"no stripping gas suffices at this circulation: with any amount the outlet stays at "
                f"Y = {outlet(most):.5g} or above"
            )
        least = np.log(1e-12 * self.gas)
        if outlet(least) <= required:
            return 0.0, None
        # the bracket shrinks by the rough scan first
        steps = np.exp(np.linspace(least, most, SCANNED))
        rough = self.scan(np.full(SCANNED, circulation), steps)
        meets = np.flatnonzero(rough <= required)
        low, high = least, most
        if meets.size and meets[0] > 0:
            low, high = np.log(steps[max(meets[0] - 2, 0)]), np.log(steps[min(meets[0] + 1, SCANNED - 1)])
            if outlet(low) <= required or outlet(high) > required:
                low, high = least, most
        return float(np.exp(brentq(lambda log: outlet(log) - required, low, high, xtol=1e-13, rtol=1e-13))), None

    def pinches(self, circulation: float) -> tuple[float, float]:
        """Give the liquid ratios at which absorber and stripper touch their equilibrium lines.

        Returns
        -------
        absorber, stripper : float
        """
        _, x_lean, x_rich = self.outlet(circulation)
        x_end, floor = self._ends()
        s, r = circulation / self.gas, self.steam / circulation
        high = min(x_end, x_lean + self.y_feed / s)
        first = largest(lambda x: self.absorber(x) - s * (x - x_lean), x_lean, high)[0] if x_lean < high else x_lean
        second = largest(lambda x: x - r * (self.stripper(x) - self.y_steam), floor, x_rich)[0] if floor < x_rich else floor
        return first, second


def _runs(places: np.ndarray) -> list[list[int]]:
    """Give whole numbers in a row as runs."""
    return [run.tolist() for run in np.split(places, np.flatnonzero(np.diff(places) > 1) + 1) if run.size]
