"""Vapour pressures of pure substances, as Raoult's law takes them."""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from collections.abc import Mapping
from dataclasses import replace
from typing import Any, ClassVar

import numpy as np

from leanloop.entries import Context, Entry, Values
from leanloop.equilibrium.base import beyond
from leanloop.quantities import unit_scale

NAME = "vapour_pressure"
_FORM = Entry("form", "choice", required=True, choices=("antoine", "wagner"), doc="equation of the constants")
_CONSTANTS = tuple(Entry(letter, "number", required=True, doc=f"constant {letter}") for letter in "ABCD")


class VapourPressure(ABC):
    """One form of vapour pressure equation.

    Parameters
    ----------
    values : Values
        Of the whole model; numbers under ``"vapour_pressure.A"`` and so on.
    """

    entries: ClassVar[tuple[Entry, ...]] = ()
    uses_temperature: ClassVar[bool] = True

    def __init__(self, values: Values) -> None:
        self.words: Mapping[str, Any] = values.words.get(NAME, {})

    @abstractmethod
    def at(self, temperature: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give the vapour pressure in Pa at temperatures in K, real or complex."""

    def cautions(self, temperature: np.ndarray, numbers: Mapping[str, Any]) -> list[str]:
        """Say where the equation itself ends, none by default."""
        return []


class Fixed(VapourPressure):
    """One value in Pa for every temperature: good at one temperature only."""

    uses_temperature = False

    def at(self, temperature: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give the value written."""
        return np.asarray(numbers[NAME])


class Antoine(VapourPressure):
    """Antoine's equation: log10 p = A - B/(C + T), with p and T in the units named.

    Validity: the range of the fit, as a rule from some 1 kPa to 200 kPa; T above -C.

    Source: C. Antoine, Comptes Rendus 107 (1888) 681.
    """

    entries = (
        *_CONSTANTS[:3],
        Entry("pressure", "text", required=True, doc="unit of the equation"),
        Entry(
            "temperature", "choice", required=True, choices=("K", "degC", "degF", "degR"), doc="unit of the equation"
        ),
    )

    def __init__(self, values: Values) -> None:
        super().__init__(values)
        self._pascal, _ = unit_scale(self.words["pressure"], "pressure")
        self._scale = unit_scale(self.words["temperature"], "temperature")

    def at(self, temperature: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give Antoine's equation in Pa."""
        factor, offset = self._scale
        reading = (temperature - offset) / factor
        a, b, c = (numbers[f"{NAME}.{letter}"] for letter in "ABC")
        return self._pascal * np.exp(math.log(10) * (a - b / (c + reading)))


class Wagner(VapourPressure):
    """Wagner's equation: ln(p/pc) = (A t + B t^1.5 + C t^m + D t^n)/(1 - t), t = 1 - T/Tc.

    The powers m, n are 2.5 and 5, or with ``powers = "3-6"`` 3 and 6.

    Validity: from the triple point or the lower end of the fit to Tc. Above Tc, ln p goes on in a straight line
    against 1/T with its slope at Tc, and a caution says so.

    Source: W. Wagner, Cryogenics 13 (1973) 470; the powers 2.5 and 5 after D. Ambrose, J. Chem. Thermodyn. 18 (1986) 45.
    """

    entries = (
        *_CONSTANTS,
        Entry("critical_temperature", "temperature", required=True, doc="Tc"),
        Entry("critical_pressure", "pressure", required=True, above=0.0, doc="pc"),
        Entry("powers", "choice", choices=("2.5-5", "3-6"), doc="powers of C and D, 2.5-5 by default"),
    )

    def at(self, temperature: np.ndarray, numbers: Mapping[str, Any]) -> np.ndarray:
        """Give Wagner's equation in Pa."""
        a, b, c, d = (numbers[f"{NAME}.{letter}"] for letter in "ABCD")
        reduced = temperature / numbers[f"{NAME}.critical_temperature"]
        tau = 1 - reduced
        # without the higher terms A t/(1 - t) = A (Tc/T - 1): the tangent at Tc, straight in 1/T
        below = np.where(np.real(tau) > 0, tau, 0.0)
        root = np.sqrt(below)
        if self.words.get("powers") == "3-6":
            curved = below * root * b + below**3 * c + below**6 * d
        else:
            curved = below * root * (b + below * c) + below**5 * d
        return numbers[f"{NAME}.critical_pressure"] * np.exp((a * tau + curved) / reduced)

    def cautions(self, temperature: np.ndarray, numbers: Mapping[str, Any]) -> list[str]:
        """Say where Tc is passed."""
        critical = numbers[f"{NAME}.critical_temperature"]
        problem = "the vapour pressure is extended above the critical temperature"
        return beyond(temperature, -math.inf, critical, problem)


FORMS: dict[str, type[VapourPressure]] = {"antoine": Antoine, "wagner": Wagner}


def entry_of(raw: Any) -> Entry:
    """Give the entry ``vapour_pressure`` as it applies to what is written there: a table by form, or one value."""
    whole = Entry(NAME, "table", required=True, doc="equation of the vapour pressure, or one value")
    if raw is not None and not isinstance(raw, Mapping):
        return replace(whole, sort="pressure", least=0.0)
    form = FORMS.get(str((raw or {}).get("form")))
    if form is not None:
        return replace(whole, nested=(_FORM, *form.entries))
    named = {item.name: replace(item, required=False) for kind in FORMS.values() for item in kind.entries}
    return replace(whole, nested=(_FORM, *named.values()))


def make(values: Values) -> VapourPressure:
    """Build what was read."""
    return FORMS[values.words[NAME]["form"]](values) if NAME in values.words else Fixed(values)


def check_units(values: Values, address: str, context: Context) -> None:
    """Note a unit of Antoine's equation that is none of pressure."""
    unit = values.words.get(NAME, {}).get("pressure")
    try:
        unit_scale(unit or "Pa", "pressure")
    except ValueError as error:
        context.fault(f"{address}.{NAME}.pressure", str(error), 'write a unit of pressure such as "mmHg"')
