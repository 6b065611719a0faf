"""Counter-current exchange between two sides: temperature differences by zone, the most duty, the duty of a given UA."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from leanloop.equilibrium.base import COMPLEX_STEP
from leanloop.units.exchanger_side import Side

ZONES, ZONES_FLASHED = 64, 24  # at least, over all parts between bends
NEAR = 1e-7  # of the difference between the inlets: an end closer than this is at its limit
INSIDE = 1e-8  # K, less than this is rounding
LEAST = 1e-12  # K, differences are not taken for less
STEPS = 80
FARTHEST = 36.0  # -ln of the share of the most duty that is left, as far as numbers tell


class Zones:
    """Two sides in counter-current, divided into zones of equal heat between the bends of either side.

    Positions are told by the heat that the cold side has taken up so far, from 0 at its inlet, the cold end, to the
    duty at the hot end.

    Parameters
    ----------
    hot, cold : Side
        Real, or complex in both.
    """

    def __init__(self, hot: Side, cold: Side) -> None:
        self.hot, self.cold = hot, cold
        self.from_cold = [energy - cold.energy for energy in cold.bends()]
        self.from_hot = [hot.energy - energy for energy in hot.bends()]
        parts = 1 + len(self.from_cold) + len(self.from_hot)
        flashed = hot.mixture is not None or cold.mixture is not None
        self.count = max(8, -(-ZONES_FLASHED // parts)) if flashed else ZONES

    def places(self, duty: np.ndarray) -> np.ndarray:
        """Give the ends of the zones, (..., K + 1, M) W from the cold end, for a duty (..., M) W."""
        bends = [*self.from_cold, *(duty - item for item in self.from_hot)]
        low, high = np.where(np.real(duty) < 0, duty, 0.0), np.where(np.real(duty) < 0, 0.0, duty)
        inside = [_between(item, low, high) for item in bends]
        edges = np.stack(np.broadcast_arrays(low, *inside, high), axis=-2)
        if bends:
            edges = np.take_along_axis(edges, np.argsort(np.real(edges), axis=-2, kind="stable"), axis=-2)
        share = (np.arange(self.count) / self.count)[:, None]
        parts = [edges[..., [k], :] + share * (edges[..., [k + 1], :] - edges[..., [k], :]) for k in range(edges.shape[-2] - 1)]
        return np.concatenate([*parts, edges[..., -1:, :]], axis=-2)

    def differences(self, duty: np.ndarray, places: np.ndarray | None = None) -> np.ndarray:
        """Give hot less cold temperature at the ends of the zones, (..., K + 1, M) K, the cold end first."""
        q = self.places(duty) if places is None else places
        cold = self.cold.temperatures(self.cold.energy[..., None, :] + q)
        hot = self.hot.temperatures((self.hot.energy - duty)[..., None, :] + q)
        return hot - cold

    def least(self, duty: np.ndarray) -> np.ndarray:
        """Give the least temperature difference, (..., M) K."""
        return smallest(self.differences(duty))

    def area(self, duty: np.ndarray, gaps: np.ndarray | None = None) -> tuple[np.ndarray, np.ndarray]:
        """Give the UA that a duty takes, the sum over zones of heat over log-mean difference, and the least difference.

        Parameters
        ----------
        duty : (..., M) W
        gaps : (..., K + 1, M) K, optional
            The differences, where they are known.

        Returns
        -------
        (..., M) W/K, (..., M) K
        """
        q = self.places(duty)
        gaps = self.differences(duty, q) if gaps is None else gaps
        least = smallest(gaps)
        gaps = np.where(np.real(gaps) < LEAST, LEAST, gaps)
        found = (q[..., 1:, :] - q[..., :-1, :]) * inverse_log_mean(gaps[..., :-1, :], gaps[..., 1:, :])
        return found.sum(axis=-2), least

    def at_ends(self, approach: np.ndarray | float) -> tuple[np.ndarray, np.ndarray]:
        """Give the duties at which the hot and the cold end have an approach in K, (..., M) W each."""
        hot_end = self.cold.energy_at(self.hot.warmth - approach) - self.cold.energy
        cold_end = self.hot.energy - self.hot.energy_at(self.cold.warmth + approach)
        return hot_end, cold_end

    def at_least(
        self, approach: np.ndarray | float, real: Zones | None = None, real_approach: np.ndarray | float = 0.0
    ) -> np.ndarray:
        """Give the duty at which the least temperature difference anywhere is an approach in K, (..., M) W.

        Parameters
        ----------
        approach : (..., M) or float
        real : Zones, optional
            The same in reals, where these are complex.
        real_approach : (..., M) or float
            With `real`.
        """
        hot_end, cold_end = self.at_ends(approach)
        duty = np.where(np.real(hot_end) < np.real(cold_end), hot_end, cold_end)
        if real is None:
            inner = (self.least(duty) - approach < -INSIDE) & (duty > 0)
            if not inner.any():
                return duty

            def above(x: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
                gap = self.least(x + 1j * COMPLEX_STEP)
                return approach - gap.real, -gap.imag / COMPLEX_STEP

            return np.where(inner, solve(above, np.zeros_like(duty), duty, 0.9 * duty, inner), duty)
        ends, found = np.minimum(*real.at_ends(real_approach)), real.at_least(real_approach)
        inner = found != ends
        if not inner.any():
            return duty
        slope = real.least(found + 1j * COMPLEX_STEP).imag / COMPLEX_STEP
        return np.where(inner, found - 1j * np.imag(self.least(found + 0j) - approach) / slope, duty)


def _between(value: np.ndarray, low: np.ndarray, high: np.ndarray) -> np.ndarray:
    """Keep a value, real or complex, between two others."""
    return np.where(np.real(value) < np.real(low), low, np.where(np.real(value) > np.real(high), high, value))


def smallest(gaps: np.ndarray) -> np.ndarray:
    """Give the least of differences along the zones, (..., K + 1, M) to (..., M) K, real or complex."""
    where = np.argmin(np.real(gaps), axis=-2, keepdims=True)
    return np.take_along_axis(gaps, where, axis=-2)[..., 0, :]


def inverse_log_mean(one: np.ndarray, other: np.ndarray) -> np.ndarray:
    """Give the inverse of the log-mean of two positive differences, regular where they are equal.

    Parameters
    ----------
    one, other : (...,) K, real or complex

    Returns
    -------
    (...,) 1/K
    """
    ratio = (other - one) / (other + one)
    square = ratio * ratio
    series = 1 + square * (1 / 3 + square * (1 / 5 + square * (1 / 7 + square * (1 / 9 + square / 11))))
    close = np.abs(np.real(ratio)) < 0.03
    apart = np.where(close, 0.5, ratio)
    whole = 0.5 * (np.log(1 + apart) - np.log(1 - apart)) / apart
    return 2 * np.where(close, series, whole) / (one + other)


def of_area(zones: Zones, area: np.ndarray, real: Zones | None = None, real_area: np.ndarray | None = None) -> np.ndarray:
    """Give the duty of an exchanger of given UA, (..., M) W; none where the hot side is not the hotter one.

    Parameters
    ----------
    zones : Zones
    area : (..., M) W/K
    real : Zones, optional
        The same in reals, where `zones` is complex.
    real_area : (..., M) W/K, optional

    Notes
    -----
    Where heat capacities are constant this is the relation between effectiveness and number of transfer units of
    counter-current flow: W. M. Kays, A. L. London, Compact Heat Exchangers, chapter 2.
    """
    own, wanted = (zones, area) if real is None else (real, real_area)
    most = np.minimum(*own.at_ends(0.0))
    good = (most > 0) & np.isfinite(most) & ~own.hot.empty & ~own.cold.empty
    safe = np.where(good, most, 1.0)
    wanted = np.broadcast_to(wanted, most.shape)

    def over(x: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        duty = -safe * np.expm1(-x)
        found, least = own.area(duty + 1j * COMPLEX_STEP)
        crossed = np.real(least) <= 0  # inside, where a side flashes: too much by all means
        return np.where(crossed, np.inf, found.real - wanted), found.imag / COMPLEX_STEP * safe * np.exp(-x)

    # the number of transfer units, nearly, is where the search starts
    spread = np.where(good, own.hot.warmth - own.cold.warmth, 1.0)
    start = np.log1p(np.clip(wanted * spread / safe, 0.0, 1e15))
    far = solve(over, np.zeros(most.shape), np.full(most.shape, FARTHEST), start, good)
    duty = np.where(good, -safe * np.expm1(-far), np.where(np.isfinite(most), 0.0, np.nan))
    if real is None:
        return duty
    found, least = own.area(duty + 1j * COMPLEX_STEP)
    way = -np.imag(zones.area(duty + 0j)[0] - area) / (found.imag / COMPLEX_STEP)
    at_limit = good & (least.real < NEAR * spread)
    if at_limit.any():
        way = np.where(at_limit, np.imag(zones.at_least(0.0, real)), way)
    return duty + 1j * np.where(good, way, 0.0)


def solve(
    rising: Callable[[np.ndarray], tuple[np.ndarray, np.ndarray]],
    low: np.ndarray,
    high: np.ndarray,
    start: np.ndarray,
    where: np.ndarray,
) -> np.ndarray:
    """Find the roots of a rising function in brackets, by Newton's method and halving, each case by itself.

    Parameters
    ----------
    rising : callable
        Gives value and slope, (..., M) each.
    low, high, start : (..., M)
    where : (..., M) bool
        Which cases to solve; elsewhere the start is given back.

    Returns
    -------
    (..., M)
    """
    low, high, x = low.copy(), high.copy(), start.astype(float)
    left = where.copy()
    with np.errstate(all="ignore"):
        for turn in range(STEPS):
            value, slope = rising(x)
            low, high = np.where(left & (value <= 0), x, low), np.where(left & (value >= 0), x, high)
            new = x - value / slope
            # too far: halve; now and then anyway, so that no slow approach goes on for ever
            wild = ~((new >= low) & (new <= high)) | (turn % 8 == 7)
            new = np.where(wild, 0.5 * (low + high), new)
            done = (value == 0) | (np.abs(new - x) <= 4e-15 * np.abs(new)) | np.isnan(value)
            done |= high - low <= 4e-16 * high
            x = np.where(left & (value != 0), new, x)
            left = left & ~done
            if not left.any():
                break
    return x
