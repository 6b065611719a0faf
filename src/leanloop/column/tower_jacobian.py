"""Derivatives of the stage equations of `leanloop.column.tower` by the unknowns, and their factorisation."""

from __future__ import annotations

import numpy as np

from leanloop.column.band import BYTES_A_CHUNK
from leanloop.column.block_band import BlockBand, Blocks
from leanloop.column.tower import (
    BOIL_UP,
    HEAT,
    HEAT_SCALE,
    REFLUX,
    TEMPERATURE,
    VAPOUR,
    Form,
    Tower,
    assembled,
    below,
    split,
    summation,
)
from leanloop.equilibrium.base import COMPLEX_STEP

INERTIA = 0.03  # 75 J/(mol K) over HEAT_SCALE: a liquid's heat capacity in the heat row, for drags


class Sloped:
    """State at real unknowns with the slopes of the equilibrium by temperature and own liquid coordinate.

    Parameters
    ----------
    tower : Tower
    unknowns : (M, S, n)

    Attributes
    ----------
    at : State
    by_temperature, by_liquid : (M, S, D)
    """

    def __init__(self, tower: Tower, unknowns: np.ndarray) -> None:
        temperature = split(tower.form, unknowns)[2]
        found = {}

        def law(liquid: np.ndarray) -> np.ndarray:
            y, by_t, by_z = slopes(tower, temperature, liquid)
            found["t"], found["z"] = by_t, by_z
            return y

        self.at = assembled(tower, unknowns, law)
        self.by_temperature, self.by_liquid = found["t"], found["z"]


def slopes(tower: Tower, temperature: np.ndarray, liquid: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Give gas coordinates and their derivatives by temperature and own liquid coordinate, (M, S, D) each."""
    law = tower.form.law
    y, by_t, by_z = (np.zeros(liquid.shape) for _ in range(3))
    step = 1j * COMPLEX_STEP
    for index, (model, raw) in enumerate(zip(law.models, tower.numbers, strict=True)):
        own = {key: value[..., None] if isinstance(value, np.ndarray) else value for key, value in raw.items()}
        z = liquid[..., index]
        if not model.complex_safe:
            y[..., index] = model.gas(temperature, tower.pressure, z, own)
            d_t, _, d_z = model.slopes(temperature, tower.pressure, z, own)
            by_t[..., index], by_z[..., index] = d_t, d_z
        elif "liquid" not in model.uses:
            ratio = model.k(temperature + step, tower.pressure, own) if hasattr(model, "k") else None
            if ratio is None:
                ratio = model.gas(temperature + step, tower.pressure, np.ones(z.shape), own)
            y[..., index], by_z[..., index] = np.real(ratio) * z, np.real(ratio)
            by_t[..., index] = np.imag(ratio) / COMPLEX_STEP * z
        else:
            value = model.gas(temperature, tower.pressure, z + step, own)
            y[..., index], by_z[..., index] = value.real, value.imag / COMPLEX_STEP
            if "temperature" in model.uses:
                by_t[..., index] = np.imag(model.gas(temperature + step, tower.pressure, z, own)) / COMPLEX_STEP
    return y, by_t, by_z


def directions(form: Form) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Give the change of liquid flows (n, C), of V (n,) and of T (n,) with each unknown."""
    n, at = form.unknowns, len(form.implicit)
    liquid = np.zeros((n, len(form.gas_basis)))
    liquid[np.arange(at + 2, n), form.falling] = 1.0
    unit = np.eye(n)
    return liquid, unit[at], unit[at + 1]


def blocks(tower: Tower, sloped: Sloped) -> Blocks:
    """Differentiate the rows.

    Parameters
    ----------
    tower : Tower
        Real, without further leading axes.
    sloped : Sloped
    """
    form, at = tower.form, sloped.at
    n, places, law = form.unknowns, form.places, form.law
    d_liquid, d_v, d_t = directions(form)
    d_total = d_liquid.sum(axis=1)
    cases, count = at.total_gas.shape
    d_z = (d_liquid[:, places] - at.coordinate[:, :, None, :] * d_total[:, None]) / at.total_liquid[..., None, None]
    if not law.plain:
        d_basis = d_liquid @ form.liquid_basis
        own = (d_liquid[:, places] - at.coordinate[:, :, None, :] * d_basis[:, None]) / at.basis_liquid[..., None, None]
        d_z = np.where(law.ratio, own, d_z)
    d_y = sloped.by_liquid[:, :, None, :] * d_z + sloped.by_temperature[:, :, None, :] * d_t[:, None]
    d_gas = np.zeros((cases, count, n, d_liquid.shape[1]))
    implicit = form.implicit
    d_gas[:, :, np.arange(len(implicit)), implicit] = 1.0
    v = at.total_gas[..., None, None]
    d_eq = at.wanted[:, :, None, :] * d_v[:, None] + v * d_y
    if not law.plain:
        in_basis = form.gas_basis[places]
        fraction, ratio = (in_basis & ~law.ratio).astype(float), (in_basis & law.ratio).astype(float)
        staying = d_gas[..., form.gas_only] @ form.gas_basis[form.gas_only].astype(float)
        change = (
            staying + at.total_gas[..., None] * (d_y @ fraction) + d_v * (at.wanted @ fraction)[..., None]
            + at.basis_gas[..., None] * (d_y @ ratio)
        ) / (1.0 - at.wanted @ ratio)[..., None]  # fmt: skip
        own = at.wanted[:, :, None, :] * change[..., None] + at.basis_gas[..., None, None] * d_y
        d_eq = np.where(law.ratio, own, d_eq)
    explicit = ~form.murphree
    d_gas[..., places[explicit]] = d_eq[..., explicit]

    d_down = d_up = None
    if form.draws_liquid:
        d_down = (tower.liquid_draw / at.total_liquid**2)[..., None] * d_total
    if form.draws_gas:
        d_up = (tower.gas_draw / at.total_gas**2)[..., None] * d_v
    rising = d_gas if d_up is None else at.up[..., None, None] * d_gas + d_up[..., None] * at.gas[:, :, None, :]

    falling, last = form.falling, 1 + len(form.falling)
    own = np.zeros((cases, count, n, n))
    up = np.zeros((cases, count, n, n))
    own[..., 1:last] = -d_liquid[:, falling] - d_gas[..., falling]
    up[..., 1:last] = rising[..., falling]
    _, a, b, root, scale = summation(tower, at)
    d_a = d_v / scale[..., None]
    d_f = d_y
    if not law.plain:
        fractions = at.equilibrium / at.total_gas[..., None]
        d_f = (d_eq - fractions[:, :, None, :] * d_v[:, None]) / at.total_gas[..., None, None]
    weight = np.ones(at.wanted.shape)
    weight[..., form.murphree] = tower.efficient()
    d_b = -(d_f * weight[:, :, None, :]).sum(axis=-1)
    kept = np.zeros(d_liquid.shape[1])
    kept[form.gas_only] = 1.0
    d_c = (d_gas @ kept) / scale[..., None]
    pull = (a[..., None] * d_a + b[..., None] * d_b + d_c) / root[..., None]
    own[..., last] = scale[..., None] * (d_a + d_b - pull)
    murphree = places[form.murphree]
    if len(murphree):
        e = tower.efficient()[:, :, None, :]
        under = below(tower, at)[..., form.murphree]
        rows = slice(last + 1, last + 1 + len(murphree))
        own[..., rows] = (
            d_gas[..., murphree] - (1.0 - e) * under[:, :, None, :] * d_v[:, None] - e * d_eq[..., form.murphree]
        )
        entering = tower.blown[:, :-1].sum(axis=-1) + (at.up * at.gas.sum(axis=-1))[:, 1:]
        d_under = (rising[:, 1:, :, murphree] - under[:, :-1, None, :] * rising[:, 1:].sum(axis=-1)[..., None]) / entering[
            ..., None, None
        ]
        up[:, 1:, :, rows] = -(1.0 - e[:, :-1]) * at.total_gas[:, :-1, None, None] * d_under
        d_above = -((1.0 - e[:, :-1]) * d_under).sum(axis=-1)
        up[:, 1:, :, last] = (scale * (1.0 - b / root)[:, :-1])[..., None] * d_above
    if form.draws_gas:
        rows = slice(last + 1 + len(murphree), n)
        own[..., rows] = -d_gas[..., form.gas_only]
        up[..., rows] = rising[..., form.gas_only]

    ahead = len(implicit) + 1
    wide = 1 + len(falling)
    down = np.zeros((cases, count, wide, wide if form.draws_liquid else 1))
    if form.draws_liquid:
        sinking = at.down[..., None, None] * d_liquid[ahead:, falling] + d_down[:, :, ahead:, None] * at.liquid[
            :, :, None, falling
        ]
        down[..., 1:] = sinking
    _first(tower, sloped, (d_liquid, d_total, d_v, d_t, d_gas, d_down, d_up), (own, up, down), ahead)
    return Blocks(own, up, down, INERTIA * at.total_liquid)


def _first(tower: Tower, sloped: Sloped, changes: tuple, parts: tuple, ahead: int) -> None:
    """Differentiate the first row of each stage."""
    form, at = tower.form, sloped.at
    d_liquid, d_total, d_v, d_t, d_gas, d_down, d_up = changes
    own, up, down = parts
    if form.warms:
        temperature = at.temperature
        enthalpies = form.liquid_enthalpy, form.gas_enthalpy
        cold, hot = (tower.heat(function, temperature + 1j * COMPLEX_STEP) for function in enthalpies)
        liquid_capacity = (at.liquid * cold.imag).sum(axis=-1) / COMPLEX_STEP
        gas_capacity = (at.gas * hot.imag).sum(axis=-1) / COMPLEX_STEP
        d_lh = cold.real @ d_liquid.T + liquid_capacity[..., None] * d_t
        d_gh = np.einsum("msnc,msc->msn", d_gas, hot.real) + gas_capacity[..., None] * d_t
        mask = form.rows(HEAT)
        part = np.ones((1, 1, 1)) if tower.blend is None else tower.blend[:, None, None]
        own[..., 0][:, mask] = -(d_lh + d_gh)[:, mask] / HEAT_SCALE
        sinking = at.down[..., None] * d_lh if d_down is None else at.down[..., None] * d_lh + d_down * at.liquid_heat[..., None]
        rising = at.up[..., None] * d_gh if d_up is None else at.up[..., None] * d_gh + d_up * at.gas_heat[..., None]
        above, under = np.append(False, mask[:-1]), np.append(mask[1:], False)  # whose neighbour balances heat
        up[..., 0][:, above] = part * rising[:, above] / HEAT_SCALE
        down[..., 0][:, under] = part * sinking[:, under][..., ahead:] / HEAT_SCALE
    passing = at.down[..., None] * d_total
    if d_down is not None:
        passing = passing + d_down * at.total_liquid[..., None]
    blowing = at.up[..., None] * d_v
    if d_up is not None:
        blowing = blowing + d_up * at.total_gas[..., None]
    spec = tower.spec[..., None]
    for role, row in (
        (TEMPERATURE, -d_t + 0.0 * passing),
        (REFLUX, spec * blowing - passing),
        (BOIL_UP, spec * passing - d_v),
        (VAPOUR, -d_v + 0.0 * passing),
    ):
        mask = form.rows(role)
        if mask.any():
            own[..., 0][:, mask] = row[:, mask]
    if tower.blend is not None and form.warms:
        part = tower.parts()[..., None]
        own[..., 0] = part * own[..., 0] - (1.0 - part) * d_v


class TowerJacobian:
    """Factorised derivatives for M cases, chunk by chunk.

    Parameters
    ----------
    form : Form
    content : Blocks
    drag : (M,)

    Attributes
    ----------
    bad : (M,) bool
        Cases that are singular or not finite.
    """

    def __init__(self, form: Form, content: Blocks, drag: np.ndarray) -> None:
        cases, count, n, _ = content.own.shape
        ahead, falling = len(form.implicit) + 1, len(form.falling)
        size = max(1, BYTES_A_CHUNK // max(1, 8 * count * n * (5 * n + 2 * falling)))
        self.bad = np.zeros(cases, dtype=bool)
        self.bands: list[tuple[slice, BlockBand]] = []
        self.factorisations = 0
        for begin in range(0, cases, size):
            part = slice(begin, min(begin + size, cases))
            band = BlockBand(part.stop - part.start, count, n, ahead, falling, form.draws_liquid)
            self.bad[part] = band.factor(content.take(part), drag[part])
            self.factorisations += band.factorisations
            self.bands.append((part, band))

    def solve(self, right: np.ndarray) -> np.ndarray:
        """Solve for one or several right-hand sides, (M, S, n) or (K, M, S, n); zero for cases set apart."""
        answer = np.empty(right.shape)
        for part, band in self.bands:
            answer[..., part, :, :] = band.solve(np.ascontiguousarray(right[..., part, :, :]))
            self.bad[part] |= band.singular
        return answer
