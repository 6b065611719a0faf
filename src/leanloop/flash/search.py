"""The real solution of a batch of flashes: share of gas, temperature and pressure of each case."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from leanloop.equilibrium.base import COMPLEX_STEP
from leanloop.flash.phases import EPS, Feed, Point
from leanloop.flash.roots import find_root, find_share

COLDEST, HOTTEST = 50.0, 5000.0  # K, between which temperatures are looked for
LEAST_PRESSURE, MOST_PRESSURE = 1e-8, 1e12  # Pa
LINE = 100.0  # K that weigh as much as all of the stream passing from liquid to gas
BY_TEMPERATURE, BY_PRESSURE = (1.0, 0.0), (0.0, 1.0)


@dataclass
class Found:
    """Where a batch of flashes ended.

    Attributes
    ----------
    psi, omega : (M,) mol/mol
        Shares of gas and liquid; one is 0 where a single phase is present.
    temperature, pressure : (M,) K, Pa
    good : (M,) bool
    """

    psi: np.ndarray
    omega: np.ndarray
    temperature: np.ndarray
    pressure: np.ndarray
    good: np.ndarray


class Heats:
    """Enthalpies per mol of a feed at a temperature, with their slopes.

    Parameters
    ----------
    feed : Feed
    temperature : (M,) K
    """

    def __init__(self, feed: Feed, temperature: np.ndarray) -> None:
        own, heat = feed.mixture, feed.mixture.heat
        warm = temperature + 1j * COMPLEX_STEP
        gas, liquid = heat.gas(warm, feed.heat_numbers), heat.liquid(warm, feed.heat_numbers)
        self.gas, self.liquid = gas[..., own.places], liquid[..., own.places]
        kept = feed.flows * (gas * own.stays_gas + liquid * own.stays_liquid)
        self.kept = kept.sum(axis=-1)
        self.size = np.abs(kept.real).sum(axis=-1)

    def of(self, point: Point, psi: np.ndarray, omega: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
        """Give enthalpy, its slopes along psi and along temperature, and its rounding, (M,) J/mol."""
        psi, omega = psi[..., None], omega[..., None]
        v, l = psi * point.y, omega * point.x
        value = self.kept + (v * self.gas + l * self.liquid).sum(axis=-1)
        gain = (self.gas - self.liquid).real
        by_psi = ((point.y + psi * point.y_psi) * gain).sum(axis=-1)
        by_t = value.imag / COMPLEX_STEP + (psi * point.y_t * gain).sum(axis=-1)
        size = self.size + (v * np.abs(self.gas.real) + l * np.abs(self.liquid.real)).sum(axis=-1)
        return value.real, by_psi, by_t, EPS * size


def start_of(feed: Feed) -> tuple[np.ndarray, np.ndarray]:
    """Give a share of gas inside what the phases hold for certain, and the share of liquid, (M,) each."""
    free = np.clip(1.0 - feed.gas - feed.liquid, 0.0, 1.0)
    return feed.gas + 0.5 * free, feed.liquid + 0.5 * free


class Isothermal:
    """Flashes at known temperature and pressure.

    Parameters
    ----------
    feed : Feed
    temperature, pressure : (M,) K, Pa
    """

    def __init__(self, feed: Feed, temperature: np.ndarray, pressure: np.ndarray) -> None:
        self.feed, self.temperature, self.pressure = feed, temperature, pressure
        self.z = feed.spread.copy()
        self._part, self._bound = None, None

    def __call__(self, psi: np.ndarray, omega: np.ndarray, part: np.ndarray) -> tuple[np.ndarray, ...]:
        """Evaluate the gap for `find_share`."""
        if part is not self._part:
            whole = len(part) == len(self.z)
            feed = self.feed if whole else self.feed.take(part)
            self._part, self._bound = part, feed.bind(self.temperature[part], self.pressure[part])
        point = self._bound.at(psi, omega, self.z[part])
        self.z[part] = point.z
        return point.gap, point.gap_psi, point.bend, EPS * (point.gas_sum + point.liquid_sum)

    def solve(self) -> Found:
        """Find the share of gas of every case."""
        psi, omega = find_share(self, *start_of(self.feed), self.feed.gas, self.feed.liquid)
        return Found(psi, omega, self.temperature, self.pressure, np.isfinite(psi))


class Adiabatic:
    """Flashes at known enthalpy and pressure.

    On a line psi + T/LINE = constant the gap falls with psi whether K depends on temperature or not, and from line to
    line share of gas, temperature and enthalpy all rise, through both phase changes and however close bubble and dew
    point are. So the share is found on each line, and the line by its enthalpy.

    Parameters
    ----------
    feed : Feed
    enthalpy : (M,) J/mol
    pressure : (M,) Pa
    guess : (M,) K
    """

    def __init__(self, feed: Feed, enthalpy: np.ndarray, pressure: np.ndarray, guess: np.ndarray) -> None:
        self.feed, self.enthalpy, self.pressure, self.guess = feed, enthalpy, pressure, guess
        self.z = feed.spread.copy()
        self.psi, self.omega = start_of(feed)
        self._part, self._feed = None, feed

    def __call__(self, line: np.ndarray, part: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Evaluate enthalpy along the lines for `find_root`."""
        if part is not self._part:
            self._part, self._feed = part, self.feed if len(part) == len(self.z) else self.feed.take(part)
        own, pressure = self._feed, self.pressure[part]
        z = self.z[part]
        held: dict[str, object] = {"cases": None, "feed": own}

        def gap(psi: np.ndarray, omega: np.ndarray, cases: np.ndarray) -> tuple[np.ndarray, ...]:
            if cases is not held["cases"]:
                held["cases"], held["feed"] = cases, own if len(cases) == len(part) else own.take(cases)
            temperature, moving = _on(line[cases], psi)
            point = held["feed"].bind(temperature, pressure[cases], BY_TEMPERATURE).at(psi, omega, z[cases])
            z[cases] = point.z
            steep = point.gap_psi - np.where(moving, LINE * point.gap_t, 0.0)
            return point.gap, steep, point.bend, EPS * (point.gas_sum + point.liquid_sum)

        free = np.clip(1.0 - own.gas - own.liquid, 0.0, 1.0)
        psi = np.clip(self.psi[part], own.gas + 1e-3 * free, own.gas + 0.999 * free)
        omega = np.clip(self.omega[part], own.liquid + 1e-3 * free, own.liquid + 0.999 * free)
        psi, omega = find_share(gap, psi, omega, own.gas, own.liquid)
        self.psi[part], self.omega[part] = np.where(np.isfinite(psi), (psi, omega), start_of(own))
        temperature, moving = _on(line, psi)
        point = own.bind(temperature, pressure, BY_TEMPERATURE).at(psi, omega, z)
        self.z[part] = point.z
        value, by_psi, by_t, rounding = Heats(own, temperature).of(point, psi, omega)
        single = (psi == 0) | (omega == 0)
        warm = LINE * point.gap_t
        share = np.where(single, 0.0, warm / (warm - point.gap_psi))
        slope = by_psi * share + by_t * LINE * np.where(moving, 1.0 - share, 0.0)
        return value - self.enthalpy[part], slope, rounding

    def solve(self) -> Found:
        """Find share of gas and temperature of every case."""
        count = len(self.z)
        start = self.guess / LINE + self.psi
        line, good = find_root(self, start, np.full(count, COLDEST / LINE), np.full(count, HOTTEST / LINE + 1.0), 0.5)
        self(line, np.arange(count))
        return Found(self.psi, self.omega, _on(line, self.psi)[0], self.pressure, good)


class AtShare:
    """Temperature, or pressure, at a known share of gas.

    Parameters
    ----------
    feed : Feed
    psi : (M,) mol/mol
    temperature, pressure : (M,) K, Pa
        Known, or where to start.
    way : tuple
        `BY_TEMPERATURE` or `BY_PRESSURE`, whichever is sought.
    """

    def __init__(self, feed: Feed, psi: np.ndarray, temperature: np.ndarray, pressure: np.ndarray, way: tuple) -> None:
        self.feed, self.psi, self.omega, self.way = feed, psi, 1.0 - psi, way
        self.temperature, self.pressure = temperature, pressure
        self.z = feed.spread.copy()
        self._part, self._feed = None, feed

    def __call__(self, place: np.ndarray, part: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Evaluate ln(sum of y/sum of x), nearly straight against -1/T and -ln P, for `find_root`."""
        if part is not self._part:
            self._part, self._feed = part, self.feed if len(part) == len(self.z) else self.feed.take(part)
        if self.way is BY_TEMPERATURE:
            temperature, pressure, rate = -1.0 / place, self.pressure[part], 1.0 / place**2
        else:
            temperature, pressure = self.temperature[part], np.exp(-place)
            rate = -pressure
        point = self._feed.bind(temperature, pressure, self.way).at(self.psi[part], self.omega[part], self.z[part])
        self.z[part] = point.z
        value = np.log1p(point.gap / point.liquid_sum)
        slope = (point.y_t.sum(axis=-1) / point.gas_sum - point.x_t.sum(axis=-1) / point.liquid_sum) * rate
        return value, slope, np.full(len(part), 4 * EPS)

    def solve(self) -> Found:
        """Find the temperature, or the pressure, of every case."""
        count = len(self.z)
        if self.way is BY_TEMPERATURE:
            ends = -1.0 / COLDEST, -1.0 / HOTTEST
            place, good = find_root(self, -1.0 / self.temperature, *(np.full(count, end) for end in ends), 5e-4)
            return Found(self.psi, self.omega, -1.0 / place, self.pressure, good)
        ends = -np.log(MOST_PRESSURE), -np.log(LEAST_PRESSURE)
        place, good = find_root(self, -np.log(self.pressure), *(np.full(count, end) for end in ends), 2.0)
        return Found(self.psi, self.omega, self.temperature, np.exp(-place), good)


def _on(line: np.ndarray, psi: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Give the temperature on a line, and whether it moves there: it is not let below `COLDEST`."""
    temperature = LINE * (line - psi)
    return np.maximum(temperature, COLDEST), temperature > COLDEST
