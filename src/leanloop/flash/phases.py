"""Two phases in equilibrium at a given share of gas, for a batch of streams of one mole each.

With psi mol of gas and omega = 1 - psi mol of liquid from one mole, each distributing component obeys

    omega x + psi y*(x) = f

by itself, and what is left is one equation for psi (H. H. Rachford, J. D. Rice, Trans. AIME 195 (1952) 327):

    gap = sum of y - sum of x = g/psi + sum of y - l/omega - sum of x = 0

with g and l the components that stay in the gas and in the liquid. The gap falls with psi and, as K grows with
temperature, rises with temperature. At psi = 0 it is negative in a subcooled liquid, at psi = 1 positive in a
superheated gas. A model on mole ratios reads x = xb Z and y = yb Y*(Z) with xb and yb the fractions of the bases.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from leanloop.column.law import BoundLaw
from leanloop.equilibrium.base import COMPLEX_STEP
from leanloop.flash.mixture import Mixture

EPS = np.finfo(float).eps
LEAST, MOST_K = 1e-300, 1e150
MOST_LIQUID = 1e12  # a coordinate beyond it says that the liquid cannot hold the component


@dataclass
class Feed:
    """Streams to be split, per mol of each, real or complex.

    Parameters
    ----------
    mixture : Mixture
    flows : (..., C) mole fractions of the whole stream
    numbers : list of D mappings of str to float, list or (...,) array
        Of the models.
    heat_numbers : mapping of str to float, list or (...,) array
    """

    mixture: Mixture
    flows: np.ndarray
    numbers: list[dict[str, Any]]
    heat_numbers: dict[str, Any]

    def __post_init__(self) -> None:
        own, flows = self.mixture, self.flows
        self.spread = flows[..., own.places]
        self.gas = flows[..., own.stays_gas].sum(axis=-1)
        self.liquid = flows[..., own.stays_liquid].sum(axis=-1)
        if not own.law.plain:
            self.gas_basis = flows[..., own.stays_gas & own.gas_basis].sum(axis=-1)
            self.liquid_basis = flows[..., own.stays_liquid & own.liquid_basis].sum(axis=-1)

    def take(self, cases: np.ndarray) -> Feed:
        """Give some of the cases.

        Parameters
        ----------
        cases : (m,) int
        """

        def some(numbers: Mapping[str, Any]) -> dict[str, Any]:
            return {key: item[cases] if np.ndim(item) and isinstance(item, np.ndarray) else item for key, item in numbers.items()}

        return Feed(self.mixture, self.flows[cases], [some(item) for item in self.numbers], some(self.heat_numbers))

    def bind(
        self, temperature: np.ndarray, pressure: np.ndarray, way: tuple[float | np.ndarray, float | np.ndarray] | None = None
    ) -> Bound:
        """Fix temperature and pressure.

        Parameters
        ----------
        temperature, pressure : (...,) K, Pa, real
        way : pair of float or (...,), optional
            Direction in temperature and pressure along which derivatives are wanted.
        """
        return Bound(self, temperature, pressure, way)


@dataclass
class Point:
    """Phases at a share of gas; ``_psi`` and ``_t`` mark derivatives along psi and along the way of `Feed.bind`.

    Attributes
    ----------
    z : (..., D)
        Liquid coordinates of the models.
    x, y : (..., D) mole fractions
    gas_sum, liquid_sum : (...,)
        Sums over each phase, which are 1 where both phases are in equilibrium.
    gap : (...,)
    bend : (...,)
        Second derivative of the gap along psi, good enough for a step of third order.
    """

    z: np.ndarray
    x: np.ndarray
    y: np.ndarray
    slope: np.ndarray
    den: np.ndarray
    gas_sum: np.ndarray
    liquid_sum: np.ndarray
    gap: np.ndarray
    x_psi: np.ndarray
    y_psi: np.ndarray
    gap_psi: np.ndarray
    bend: np.ndarray
    x_t: np.ndarray | None
    y_t: np.ndarray | None
    gap_t: np.ndarray | None


class Bound:
    """Streams at a temperature and a pressure; see `Feed.bind`."""

    def __init__(self, feed: Feed, temperature: Any, pressure: Any, way: Any) -> None:
        own = feed.mixture
        self.feed, self.law, self.curved, self.moved, self.k_t = feed, own.law, own.curved, None, None
        if way is not None:
            step = 1j * COMPLEX_STEP
            self.moved = BoundLaw(own.law, temperature + step * way[0], pressure + step * way[1], feed.numbers)
        self.still = BoundLaw(own.law, temperature, pressure, feed.numbers) if way is None or len(self.curved) else self.moved
        k = self.still.k_dilute
        self.k = np.clip(k, 0.0, MOST_K)
        if len(self.curved):
            numbers = [feed.numbers[index] for index in self.curved]
            self.curves = BoundLaw(own.curved_law, temperature, pressure, numbers)
        elif way is not None:
            k_t = self.moved.complex_gas(np.ones(k.shape)).imag / COMPLEX_STEP
            self.k_t = np.where(self.k == k, k_t, 0.0)

    def _gas(self, z: np.ndarray, a: np.ndarray, b: np.ndarray, f: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Solve a z + b y*(z) = f for the liquid coordinate of each component; give z, y* and its slope."""
        straight = f / _safe(a + b * self.k)
        if not len(self.curved):
            return straight, self.k * straight, self.k
        phi, slope, own = self.k * straight, self.k.copy(), self.curved
        a, b = (item[..., own] if item.shape[-1] > 1 else item for item in (a, b))
        bent = self._bent(z[..., own], a, b, f[..., own])
        straight[..., own], phi[..., own], slope[..., own] = bent
        return straight, phi, slope

    def _bent(self, z: np.ndarray, a: np.ndarray, b: np.ndarray, f: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Do the same for the components whose ratio depends on the liquid, by Newton's method in a bracket."""
        absent = f <= 0
        zero = self._curve(np.zeros(z.shape), f)[0] if absent.any() else 0.0
        low, high = np.zeros(z.shape), np.full(z.shape, np.inf)
        z = np.clip(np.where(np.isfinite(z), z, 0.0), 0.0, MOST_LIQUID)
        for _ in range(100):
            phi, slope = self._curve(z, f)
            phi = np.where(absent, phi - zero, phi)
            rest, steep = a * z + b * phi - f, a + b * slope
            low, high = np.where(rest <= 0, z, low), np.where(rest >= 0, z, high)
            new = z - rest / np.where(steep == 0, np.nan, steep)
            far = np.where(np.isfinite(high), 0.5 * (low + high), 10.0 * z + 1.0)
            new = np.where((new >= low) & (new <= np.minimum(high, 100.0 * z + 10.0)), new, far)
            new = np.where(absent, 0.0, np.minimum(new, MOST_LIQUID))
            settled = (np.abs(rest) <= 4 * EPS * np.abs(f)) | (np.abs(new - z) <= 2 * EPS * z) | ~np.isfinite(rest)
            if settled.all():
                break
            z = np.where(settled, z, new)
        return z, phi, slope

    def _curve(self, z: np.ndarray, f: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Give y* and its slope, none where the models have left their range so far that y* would be negative."""
        phi, slope = self.curves.gas(z)
        empty = (phi < 0) | np.isnan(phi) & (f == 0)
        return np.where(empty, 0.0, np.minimum(phi, MOST_K)), np.where(empty, 0.0, np.minimum(slope, MOST_K))

    def at(self, psi: np.ndarray, omega: np.ndarray, z: np.ndarray) -> Point:
        """Evaluate the phases.

        Parameters
        ----------
        psi, omega : (...,) mol/mol
            Shares of gas and liquid, each exact by itself.
        z : (..., D)
            Coordinates to start from.
        """
        feed, law, f = self.feed, self.law, self.feed.spread
        psi_, omega_ = psi[..., None], omega[..., None]
        if law.plain:
            z, phi, slope = self._gas(z, omega_, psi_, f)
            x, y, den = z, phi, _safe(omega_ + psi_ * slope)
            x_psi = (x - y) / den
            y_psi = slope * x_psi
            x_t = y_t = None
            if self.moved is not None:
                phi_t = self._shift(z)
                x_t = -psi_ * phi_t / den
                y_t = omega_ * phi_t / den
        else:
            z, x, y, slope, den, x_psi, y_psi, x_t, y_t = self._ratios(psi_, omega_, z)
        gas, liquid = _part(feed.gas, psi), _part(feed.liquid, omega)
        gas_sum, liquid_sum = gas + y.sum(axis=-1), liquid + x.sum(axis=-1)
        gap = gas - liquid + (y - x).sum(axis=-1)
        gap_psi = -_part(gas, psi) - _part(liquid, omega) + (y_psi - x_psi).sum(axis=-1)
        own = -(slope - 1.0) / den * (y_psi - x_psi)
        if not law.plain:
            own = np.where(law.ratio, _part(y, psi_**2) - _part(x, omega_**2), own)
        bend = 2.0 * (_part(gas, psi**2) - _part(liquid, omega**2) + own.sum(axis=-1))
        gap_t = None if y_t is None else (y_t - x_t).sum(axis=-1)
        return Point(z, x, y, slope, den, gas_sum, liquid_sum, gap, x_psi, y_psi, gap_psi, bend, x_t, y_t, gap_t)

    def _shift(self, z: np.ndarray) -> np.ndarray:
        """Give the derivative of y* along the way at fixed coordinates."""
        if self.k_t is not None:
            return self.k_t * z
        moved = self.moved.complex_gas(z)
        return np.where((self.feed.spread <= 0) | (moved.real < 0), 0.0, moved.imag / COMPLEX_STEP)

    def _ratios(self, psi: np.ndarray, omega: np.ndarray, z: np.ndarray) -> tuple[Any, ...]:
        """Evaluate where some models are on mole ratios: those on fractions first, then their bases, then the others."""
        law, feed = self.law, self.feed
        ratio, f = law.ratio, feed.spread
        in_gas, in_liquid = law.gas_basis & ~ratio, law.liquid_basis & ~ratio
        gas, liquid = _part(feed.gas_basis[..., None], psi), _part(feed.liquid_basis[..., None], omega)
        xb, yb = np.where(ratio, liquid, 1.0), np.where(ratio, gas, 1.0)
        xb_psi, yb_psi = np.where(ratio, _part(liquid, omega), 0.0), np.where(ratio, -_part(gas, psi), 0.0)
        xb_t = yb_t = np.zeros(xb.shape)
        # a second time where a basis holds components that distribute themselves
        for last in (False, True) if (in_gas | in_liquid).any() else (True,):
            a, b = xb * omega, yb * psi
            z, phi, slope = self._gas(z, a, b, f)
            den = _safe(a + b * slope)
            a_psi, b_psi = xb_psi * omega - xb, yb_psi * psi + yb
            z_psi = -(a_psi * z + b_psi * phi) / den
            x, y = xb * z, yb * phi
            x_psi = xb_psi * z + xb * z_psi
            y_psi = yb_psi * phi + yb * slope * z_psi
            x_t = y_t = None
            if self.moved is not None:
                phi_t = self._shift(z)
                z_t = -(xb_t * omega * z + yb_t * psi * phi + b * phi_t) / den
                x_t = xb_t * z + xb * z_t
                y_t = yb_t * phi + yb * (slope * z_t + phi_t)
            if last:
                return z, x, y, slope, den, x_psi, y_psi, x_t, y_t
            xb = np.where(ratio, liquid + _sum(x, in_liquid), 1.0)
            yb = np.where(ratio, gas + _sum(y, in_gas), 1.0)
            xb_psi = np.where(ratio, _part(liquid, omega) + _sum(x_psi, in_liquid), 0.0)
            yb_psi = np.where(ratio, -_part(gas, psi) + _sum(y_psi, in_gas), 0.0)
            if self.moved is not None:
                xb_t = np.where(ratio, _sum(x_t, in_liquid), 0.0)
                yb_t = np.where(ratio, _sum(y_t, in_gas), 0.0)

    def outside(self, z: np.ndarray) -> np.ndarray:
        """Tell which cases use a model off its table, (M,) bool."""
        return self.still.outside(z[:, None, :]).any(axis=-1) if z.shape[-1] else np.zeros(len(z), dtype=bool)


def complex_fractions(
    feed: Feed, temperature: np.ndarray, pressure: np.ndarray, psi: np.ndarray, omega: np.ndarray, point: Point
) -> tuple[np.ndarray, np.ndarray]:
    """Give x and y to first order in small imaginary parts.

    Parameters
    ----------
    feed : Feed
    temperature, pressure, psi, omega : (...,) K, Pa, mol/mol
        Complex.
    point : Point
        At the real parts.

    Returns
    -------
    (..., D), (..., D)
    """
    law, f = feed.mixture.law, feed.spread
    psi, omega = psi[..., None], omega[..., None]
    z = np.broadcast_to(point.z, np.broadcast_shapes(psi.shape, f.shape, point.z.shape))
    shape = z.shape[:-1]
    bound = BoundLaw(law, np.broadcast_to(temperature, shape), np.broadcast_to(pressure, shape), feed.numbers)
    phi = bound.complex_gas(z)
    phi = np.where(phi.real < 0, 0.0, np.where(f.real <= 0, point.slope * z, phi))
    xb, yb = 1.0, 1.0
    for last in (False, True):
        a, b = xb * omega, yb * psi
        den = _safe(np.real(a) + np.real(b) * point.slope)
        change = -(a * z + b * phi - f) / den
        x, y = xb * (z + change), yb * (phi + point.slope * change)
        if law.plain or last:
            return x, y
        gas, liquid = _part(feed.gas_basis[..., None], psi), _part(feed.liquid_basis[..., None], omega)
        xb = np.where(law.ratio, liquid + _sum(x, law.liquid_basis & ~law.ratio), 1.0)
        yb = np.where(law.ratio, gas + _sum(y, law.gas_basis & ~law.ratio), 1.0)
    raise AssertionError  # not reached


def _safe(divisor: np.ndarray) -> np.ndarray:
    """Give a divisor that is not zero, so that what no phase can hold becomes huge rather than no number."""
    return np.where(divisor == 0, LEAST, divisor)


def _part(above: np.ndarray, below: np.ndarray) -> np.ndarray:
    """Divide, with zero where there is nothing to divide."""
    return np.where(np.real(above) == 0, 0.0, above / _safe(below))


def _sum(values: np.ndarray, members: np.ndarray) -> np.ndarray:
    return values[..., members].sum(axis=-1, keepdims=True)
