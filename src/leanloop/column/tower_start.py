"""Starts of Newton's method on a tower: flows by sweeps at estimated temperatures, and the state it is filled from."""

from __future__ import annotations

import numpy as np

from leanloop.column.start import MOST_FACTOR, tridiagonal
from leanloop.column.tower import TEMPERATURE, Tower

TINY = 1e-300
COLDEST, HOTTEST = 120.0, 900.0  # K, bounds of a temperature while it is looked for
BUBBLE_STEPS, LONGEST = 12, 25.0  # Newton steps for a boiling temperature, and the longest in K


def put_together(tower: Tower, temperature: np.ndarray, gas: np.ndarray, liquid_flows: np.ndarray, ratio: np.ndarray) -> np.ndarray:
    """Give unknowns from temperatures, total gas flows (M, S), liquid flows and v/l (M, S, D) of what distributes."""
    form = tower.form
    at = len(form.implicit)
    out = np.empty((*temperature.shape, form.unknowns))
    distributing = ratio * liquid_flows
    out[..., : form.murphree.sum()] = distributing[..., form.murphree]
    if form.draws_gas:
        out[..., form.murphree.sum() : at] = np.cumsum(tower.fed[:, ::-1, form.gas_only], axis=1)[:, ::-1]
    out[..., at], out[..., at + 1] = gas, temperature
    out[..., at + 2 : at + 2 + len(form.places)] = liquid_flows
    if form.draws_liquid:
        out[..., at + 2 + len(form.places) :] = np.cumsum(tower.fed[..., form.liquid_only], axis=1)
    return out


def k_values(tower: Tower, temperature: np.ndarray, liquid: np.ndarray | None = None) -> np.ndarray:
    """Give y/x on the stages, at infinite dilution or at given liquid coordinates, (M, S, D)."""
    law = tower.bound(temperature)
    if liquid is None or law.proportional:
        return np.broadcast_to(law.k_dilute, (*temperature.shape, len(tower.form.places)))
    y = law.complex_gas(liquid).real
    with np.errstate(all="ignore"):
        found = y / liquid
    return np.where(np.isfinite(found) & (found > 0), found, law.k_dilute)


def boiling(tower: Tower, temperature: np.ndarray, liquid: np.ndarray, gas: np.ndarray) -> np.ndarray:
    """Give the temperatures at which what is dissolved and the gas that stays fill the stage's pressure.

    Parameters
    ----------
    tower : Tower
    temperature : (M, S) K
        To begin with.
    liquid : (M, S, D)
        Liquid mole fractions.
    gas : (M, S)
        Mole fraction of the gas that stays a gas.

    Returns
    -------
    (M, S) K
    """
    now = temperature.copy()
    for _ in range(BUBBLE_STEPS):
        rise = 0.01
        low = (k_values(tower, now, liquid) * liquid).sum(axis=-1)
        high = (k_values(tower, now + rise, liquid) * liquid).sum(axis=-1)
        with np.errstate(all="ignore"):
            # ln p against 1/T is nearly straight
            slope = (np.log(high) - np.log(low)) / (1 / (now + rise) - 1 / now)
            wanted = 1 / (1 / now + (np.log(np.maximum(1 - gas, 1e-3)) - np.log(low)) / slope)
        step = np.clip(np.where(np.isfinite(wanted), wanted, now) - now, -LONGEST, LONGEST)
        now = np.clip(now + step, COLDEST, HOTTEST)
    return now


def start(
    tower: Tower, temperature: np.ndarray, gas: np.ndarray, liquid: np.ndarray, boils: np.ndarray, sweeps: int = 3
) -> np.ndarray:
    """Estimate the unknowns.

    Parameters
    ----------
    tower : Tower
    temperature : (M, S) K
    gas, liquid : (M, S) mol/s
        Total flows leaving each stage, roughly.
    boils : (S,) bool
        Stages whose temperature is to follow from the liquid's composition.
    sweeps : int

    Returns
    -------
    (M, S, n)
    """
    form = tower.form
    fed = tower.fed[..., form.places]
    still = np.cumsum(tower.fed[..., form.liquid_only], axis=1).sum(axis=-1)
    moving = np.cumsum(tower.fed[:, ::-1, form.gas_only], axis=1)[:, ::-1].sum(axis=-1)
    fixed = form.rows(TEMPERATURE)
    temperature = np.where(fixed, tower.spec.real, temperature)
    flows, ratio = None, None
    for _ in range(sweeps):
        fraction = None if flows is None else flows / np.maximum(still + flows.sum(axis=-1), TINY)[..., None]
        if fraction is not None and boils.any():
            share = moving / np.maximum(gas, TINY)
            warm = boiling(tower, temperature, fraction, np.minimum(share, 1.0))
            temperature = np.where(boils & ~fixed, 0.5 * (temperature + warm), temperature)
        k = k_values(tower, temperature, fraction if form.law.plain else None)
        ratio = np.minimum(k * (gas / np.maximum(liquid, TINY))[..., None], MOST_FACTOR)
        flows = tridiagonal(ratio, fed)
        made = moving + (ratio * flows).sum(axis=-1)
        if not boils.any():
            gas, liquid = made, still + flows.sum(axis=-1)
    return put_together(tower, temperature, np.where(gas > 0, gas, 1e-9), flows, ratio)


def filling(tower: Tower, temperature: np.ndarray, gas: np.ndarray, liquid: np.ndarray) -> np.ndarray:
    """Give the state from which columns are filled: every stage as if it were the only one, (M, S, n)."""
    form = tower.form
    temperature = np.where(form.rows(TEMPERATURE), tower.spec.real, temperature)
    total = tower.fed[..., form.places].sum(axis=1)
    factor = np.minimum(k_values(tower, temperature) * (gas / np.maximum(liquid, TINY))[..., None], MOST_FACTOR)
    flows = total[:, None, :] / (1.0 + factor)
    return put_together(tower, temperature, np.maximum(gas, (factor * flows).sum(axis=-1)), flows, factor)
