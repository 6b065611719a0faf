"""From the real solution of a batch of flashes to its answer: polished, judged, with derivatives."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from leanloop.flash.batch import Batch
from leanloop.flash.phases import EPS, Feed, Point, complex_fractions
from leanloop.flash.search import BY_TEMPERATURE, Found, Heats
from leanloop.status import OK, Status, code

CLOSE = 1e-11  # relative, how well the equations must be satisfied
SMALL = 1e-14  # relative, a step that is rounding


@dataclass(frozen=True)
class Split:
    """Two phases of a stream.

    Attributes
    ----------
    gas, liquid : (..., C) mol/s
        NaN where the case failed.
    temperature : (...,) K
    pressure : (...,) Pa
    status : (...,) int8
        ``converged``; ``not_finite`` for inputs that are not finite or negative; ``unit_failed`` where no split
        satisfies the equations.
    off_table : (...,) bool
        Where a model is used off its table.
    """

    gas: np.ndarray
    liquid: np.ndarray
    temperature: np.ndarray
    pressure: np.ndarray
    status: np.ndarray
    off_table: np.ndarray


class Equations:
    """The equations of a batch at a point, and the step that solves them to first order."""

    def __init__(self, batch: Batch, found: Found, kind: str) -> None:
        self.batch, self.found, self.kind = batch, found, kind
        way = (0.0, found.pressure) if kind == "to pressure" else BY_TEMPERATURE
        self.bound = batch.feed.bind(found.temperature, found.pressure, way)
        self.point = self.bound.at(found.psi, found.omega, batch.feed.spread)
        self.two = (found.psi > 0) & (found.omega > 0)
        self.heats = Heats(batch.feed, found.temperature) if kind == "enthalpy" else None
        self.enthalpy = self.heats.of(self.point, found.psi, found.omega) if self.heats else None

    def step(
        self,
        gap: np.ndarray,
        excess: np.ndarray | None,
        gas: np.ndarray | float = 0.0,
        liquid: np.ndarray | float = 0.0,
        spread: Callable[[np.ndarray], np.ndarray] = np.asarray,
    ) -> tuple[np.ndarray, np.ndarray]:
        """Give the changes of psi, and of the temperature or ln P, that answer residuals.

        Parameters
        ----------
        gap : (...,)
            Of the gap, where there are two phases.
        excess : (...,) J/mol or None
            Of the enthalpy, where it is given.
        gas, liquid : (...,)
            Changes of what stays in a phase, where the phase is absent so far.
        spread : callable
            Puts what belongs to the cases on the axes of the residuals.
        """
        point = self.point
        two = spread(self.two)
        if self.kind.startswith("to"):
            return np.zeros(np.shape(gap)), -gap / spread(point.gap_t)
        all_gas = spread(self.found.omega == 0)
        edge = np.where(all_gas, liquid, gas) / -spread(np.abs(point.gap)) * np.where(all_gas, 1.0, -1.0)
        edge = np.where(np.where(all_gas, liquid, gas) == 0, 0.0, edge)
        gap_psi = spread(point.gap_psi)
        if excess is None:
            return np.where(two, -gap / gap_psi, edge), np.zeros(np.shape(gap))
        by_psi, by_t = (spread(item) for item in self.enthalpy[1:3])
        gap_t = spread(point.gap_t)
        divisor = gap_psi * by_t - gap_t * by_psi
        psi = np.where(two, (gap_t * excess - gap * by_t) / divisor, edge)
        warm = np.where(two, (gap * by_psi - gap_psi * excess) / divisor, -(excess + by_psi * edge) / by_t)
        return psi, warm


def finish(batch: Batch, found: Found, kind: str) -> Split:
    """Polish a solution, judge it and give it with derivatives."""
    found.psi = np.where(batch.empty, 0.0, found.psi)
    found.omega = np.where(batch.empty, 1.0, found.omega)
    at = Equations(batch, found, kind)
    for _ in range(3):
        excess = None if at.heats is None else at.enthalpy[0] - batch.real["enthalpy"] / batch.total
        if not _apply(batch, found, at, *at.step(at.point.gap, excess)):
            break
        at = Equations(batch, found, kind)
    good = found.good & _satisfied(batch, found, at)
    status = np.where(batch.valid, np.where(good | batch.empty & found.good, OK, code(Status.unit_failed)), code(Status.not_finite))
    off = at.bound.outside(at.point.z) & ~batch.empty & (status == OK)
    return _answer(batch, found, at, status, off)


def _apply(batch: Batch, found: Found, at: Equations, psi: np.ndarray, warm: np.ndarray) -> bool:
    """Take a step of the polish in cases where it is a small one, and tell whether any was more than rounding."""
    near = found.good & ~batch.empty & np.isfinite(psi) & np.isfinite(warm)
    least, scale = np.minimum(found.psi, found.omega), 1.0 if at.kind == "to pressure" else found.temperature
    near &= (np.abs(psi) <= 0.1 * least) & (np.abs(warm) <= 0.01 * scale)
    near &= (np.abs(psi) > SMALL * least) | (np.abs(warm) > SMALL * scale)
    if not near.any():
        return False
    psi, warm = np.where(near, psi, 0.0), np.where(near, warm, 0.0)
    small = found.psi < 0.5
    new_psi, new_omega = found.psi + psi, found.omega - psi
    found.psi = np.where(small, new_psi, 1.0 - new_omega)
    found.omega = np.where(small, 1.0 - new_psi, new_omega)
    if at.kind == "to pressure":
        found.pressure = found.pressure * np.exp(warm)
    else:
        found.temperature = found.temperature + warm
    return True


def _satisfied(batch: Batch, found: Found, at: Equations) -> np.ndarray:
    """Tell which cases satisfy every equation."""
    point, f = at.point, batch.feed.spread
    left = found.omega[:, None] * point.x + found.psi[:, None] * point.y - f
    good = (np.abs(left) <= CLOSE * np.abs(f) + 1e-300).all(axis=-1)
    even = np.abs(point.gap) <= CLOSE * (point.gas_sum + point.liquid_sum)
    rest = (found.psi == 0) & (point.gap <= 0) | (found.omega == 0) & (point.gap >= 0)
    good &= even | (rest & (not at.kind.startswith("to")))
    if at.heats is not None:
        value, _, by_t, rounding = at.enthalpy
        excess = np.abs(value - batch.real["enthalpy"] / batch.total)
        good &= excess <= CLOSE * (rounding / EPS + np.abs(by_t) * found.temperature)
    return good & np.isfinite(found.temperature) & np.isfinite(found.pressure)


def _answer(batch: Batch, found: Found, at: Equations, status: np.ndarray, off: np.ndarray) -> Split:
    """Give the phases in mol/s; with imaginary parts where an input has one."""
    mixture, point, failed = batch.mixture, at.point, status != OK
    flows = batch.given_flows()
    if batch.moved:
        spread, (feed, total) = batch.spread, batch.complex_feed()
        x, y, psi, omega, temperature, pressure = _derived(batch, found, at, feed, total)
    else:
        spread, total = np.asarray, batch.total
        x, y, psi, omega, temperature, pressure = point.x, point.y, found.psi, found.omega, found.temperature, found.pressure
    empty = spread(batch.empty)
    gas = np.where(mixture.stays_gas, flows, 0.0)
    liquid = np.where(mixture.stays_gas, 0.0, flows)
    own = flows[..., mixture.places]
    share_gas, share_liquid = (total * psi)[..., None] * y, (total * omega)[..., None] * x
    # a phase that is alone holds the stream to the last digit
    no_gas, no_liquid = (spread(item == 0)[..., None] for item in (found.psi, found.omega))
    share_gas = np.where(no_gas, share_gas - share_gas.real, share_gas)
    share_liquid = np.where(no_liquid, share_liquid - share_liquid.real, share_liquid)
    no_gas, no_liquid = no_gas | empty[..., None], no_liquid & ~empty[..., None]
    share_gas = np.where(empty[..., None], 0.0, share_gas)
    gas[..., mixture.places] = np.where(no_liquid, own - share_liquid, share_gas)
    liquid[..., mixture.places] = np.where(no_gas, own - share_gas, share_liquid)
    if failed.any():
        lost = spread(failed)
        gas[lost] = liquid[lost] = np.nan
        temperature, pressure = (np.where(lost, np.nan, item) for item in (temperature, pressure))
    shape = batch.shape
    return Split(
        gas.reshape(*shape, -1),
        liquid.reshape(*shape, -1),
        np.asarray(temperature).reshape(shape),
        np.asarray(pressure).reshape(shape),
        batch.spread(status),
        batch.spread(off),
    )


def _derived(batch: Batch, found: Found, at: Equations, feed: Feed, total: np.ndarray) -> tuple[np.ndarray, ...]:
    """Give x, y, psi, omega, temperature and pressure with their imaginary parts."""
    spread, kind, given = batch.spread, at.kind, batch.complex_given
    point = Point(**{key: None if item is None else spread(item) for key, item in vars(at.point).items()})
    psi, omega = spread(found.psi), spread(found.omega)
    temperature, pressure = spread(found.temperature) + 0j, spread(found.pressure) + 0j
    if kind in ("temperature", "to pressure"):
        temperature = temperature + 1j * given("temperature").imag
    if kind != "to pressure":
        pressure = pressure + 1j * given("pressure").imag
    known = given("fraction").imag if kind.startswith("to") else np.zeros(batch.shape)
    x, y = complex_fractions(feed, temperature, pressure, psi, omega, point)
    two = spread(at.two)
    gas = np.where(two, feed.gas.imag / np.where(psi > 0, psi, 1.0), 0.0)
    liquid = np.where(two, feed.liquid.imag / np.where(omega > 0, omega, 1.0), 0.0)
    gap = gas - liquid + (y - x).imag.sum(axis=-1) + np.where(known == 0, 0.0, point.gap_psi * known)
    excess = None
    if at.heats is not None:
        own, heat = batch.mixture, batch.mixture.heat
        warmth = spread(found.temperature), feed.heat_numbers
        h_gas, h_liquid = (np.broadcast_to(item, feed.flows.shape) for item in (heat.gas(*warmth), heat.liquid(*warmth)))
        in_gas, in_liquid = feed.flows * own.stays_gas, feed.flows * own.stays_liquid
        in_gas[..., own.places], in_liquid[..., own.places] = psi[..., None] * y, omega[..., None] * x
        value = (in_gas * h_gas + in_liquid * h_liquid).sum(axis=-1)
        excess = (value - given("enthalpy") / total).imag
    change, warm = at.step(gap, excess, feed.gas.imag, feed.liquid.imag, spread)
    change = change + known
    empty = spread(batch.empty)
    change, warm = np.where(empty, 0.0, change), np.where(empty, 0.0, warm)
    x = x + 1j * (point.x_psi * change[..., None] + (0.0 if kind == "temperature" else point.x_t * warm[..., None]))
    y = y + 1j * (point.y_psi * change[..., None] + (0.0 if kind == "temperature" else point.y_t * warm[..., None]))
    if kind == "to pressure":
        pressure = pressure + 1j * warm * pressure.real
    elif kind != "temperature":
        temperature = temperature + 1j * warm
    return x, y, psi + 1j * change, omega - 1j * change, temperature, pressure
