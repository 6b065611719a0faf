"""Flash of streams at a temperature, at an enthalpy, or at a share of gas.

All cases of a batch are solved at once and none disturbs another. Complex inputs carry derivatives: the equations are
solved in reals, then one step of Newton's method in complex numbers gives the imaginary parts, exact to first order.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.flash.batch import Batch
from leanloop.flash.finish import Split, finish
from leanloop.flash.mixture import Mixture
from leanloop.flash.search import BY_PRESSURE, BY_TEMPERATURE, Adiabatic, AtShare, Isothermal

__all__ = ["Split", "at_enthalpy", "at_gas_fraction", "at_temperature", "enthalpy"]

GUESS = 320.0  # K
GUESS_PRESSURE = 1e5  # Pa


def at_temperature(
    mixture: Mixture, flows: np.ndarray, temperature: np.ndarray, pressure: np.ndarray, numbers: Mapping[str, Any] | None = None
) -> Split:
    """Split streams at given temperature and pressure.

    A stream is all liquid where the gas in equilibrium with it adds up to less than one, all gas where the liquid
    does. With components that stay in the gas there always is a gas, with others that stay in the liquid a liquid.
    Where nothing flows the derivatives leave each component in the liquid unless it stays in the gas.

    Parameters
    ----------
    mixture : Mixture
    flows : (..., C) mol/s
        Of both phases together; real or complex, as all that follows.
    temperature : (...,) K
    pressure : (...,) Pa
    numbers : mapping of str to (...,) array, float or list, optional
        By local name as in `Mixture.addresses`; what is absent is as the file has it.

    Returns
    -------
    Split

    Notes
    -----
    H. H. Rachford, J. D. Rice, Trans. AIME 195 (1952) 327, with components that stay in one phase added.
    """
    batch = Batch(mixture, flows, numbers or {}, temperature=temperature, pressure=pressure)
    ok = _positive(batch, "temperature", "pressure")
    with np.errstate(all="ignore"):
        found = Isothermal(batch.feed, ok["temperature"], ok["pressure"]).solve()
        return finish(batch, found, "temperature")


def at_enthalpy(
    mixture: Mixture,
    flows: np.ndarray,
    enthalpy: np.ndarray,
    pressure: np.ndarray,
    numbers: Mapping[str, Any] | None = None,
    guess: np.ndarray | float = GUESS,
) -> Split:
    """Split streams at given enthalpy and pressure, the temperature to be found between 50 and 5000 K.

    Parameters
    ----------
    mixture : Mixture
        With heat data.
    flows : (..., C) mol/s
    enthalpy : (...,) W
    pressure : (...,) Pa
    numbers : mapping of str to (...,) array, float or list, optional
    guess : (...,) K
        Where the search starts, and the temperature where nothing flows.

    Returns
    -------
    Split

    Raises
    ------
    ValueError
        Where the mixture has no heat data.
    """
    if mixture.heat is None:
        raise ValueError("the mixture was made without heat data")
    batch = Batch(mixture, flows, numbers or {}, enthalpy=enthalpy, pressure=pressure, guess=np.real(guess))
    ok = _positive(batch, "guess", "pressure")
    with np.errstate(all="ignore"):
        wanted = np.where(batch.empty, 0.0, batch.real["enthalpy"] / batch.total)
        found = Adiabatic(batch.feed, wanted, ok["pressure"], ok["guess"]).solve()
        if batch.empty.any():
            found.temperature = np.where(batch.empty, ok["guess"], found.temperature)
            found.good = np.where(batch.empty, batch.real["enthalpy"] == 0, found.good)
        return finish(batch, found, "enthalpy")


def at_gas_fraction(
    mixture: Mixture,
    flows: np.ndarray,
    fraction: np.ndarray,
    numbers: Mapping[str, Any] | None = None,
    *,
    pressure: np.ndarray | None = None,
    temperature: np.ndarray | None = None,
    guess: np.ndarray | float | None = None,
) -> Split:
    """Find the temperature, or the pressure, at which a given part of the moles is gas: bubble point 0, dew point 1.

    Parameters
    ----------
    mixture : Mixture
    flows : (..., C) mol/s
    fraction : (...,) mol gas per mol of the stream
        Not less than what stays in the gas, nor more than what does not stay in the liquid.
    numbers : mapping of str to (...,) array, float or list, optional
    pressure : (...,) Pa
        Given; then the temperature is found.
    temperature : (...,) K
        Given; then the pressure is found.
    guess : (...,) K or Pa, optional
        Where the search starts, and the answer where nothing flows.

    Returns
    -------
    Split

    Raises
    ------
    ValueError
        Where not just one of pressure and temperature is given.
    """
    if (pressure is None) == (temperature is None):
        raise ValueError("give one of pressure and temperature")
    way = BY_PRESSURE if temperature is not None else BY_TEMPERATURE
    if way is BY_TEMPERATURE:
        temperature = GUESS if guess is None else np.real(guess)
    else:
        pressure = GUESS_PRESSURE if guess is None else np.real(guess)
    batch = Batch(mixture, flows, numbers or {}, fraction=fraction, temperature=temperature, pressure=pressure)
    ok = _positive(batch, "temperature", "pressure")
    share = batch.real["fraction"]
    with np.errstate(all="ignore"):
        inside = (share >= 0) & (share <= 1)
        found = AtShare(batch.feed, np.where(inside, share, 0.5), ok["temperature"], ok["pressure"], way).solve()
        if batch.empty.any():
            found.temperature = np.where(batch.empty, ok["temperature"], found.temperature)
            found.pressure = np.where(batch.empty, ok["pressure"], found.pressure)
        found.good = (found.good | batch.empty) & inside
        return finish(batch, found, "to temperature" if way is BY_TEMPERATURE else "to pressure")


def enthalpy(
    mixture: Mixture,
    gas: np.ndarray,
    liquid: np.ndarray,
    temperature: np.ndarray,
    numbers: Mapping[str, Any] | None = None,
) -> np.ndarray:
    """Give the enthalpy of two phases at one temperature; the same as `Mixture.enthalpy`.

    Parameters
    ----------
    mixture : Mixture
        With heat data.
    gas, liquid : (..., C) mol/s
    temperature : (...,) K
    numbers : mapping of str to (...,) array, float or list, optional

    Returns
    -------
    (...,) W
    """
    return mixture.enthalpy(gas, liquid, temperature, numbers)


def _positive(batch: Batch, *names: str) -> dict[str, np.ndarray]:
    """Note cases with a condition that is not positive, and give values that are safe to calculate with."""
    found = {}
    for name in names:
        value = batch.real[name]
        good = np.isfinite(value) & (value > 0)
        batch.valid &= good
        found[name] = np.where(good, value, GUESS if name != "pressure" else GUESS_PRESSURE)
    batch.empty |= ~batch.valid
    return found
