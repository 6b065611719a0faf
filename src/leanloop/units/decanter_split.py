"""Gas and two immiscible liquids in equilibrium, each component with a liquid of its own.

With the moles V of gas, O of organic liquid and W of water liquid, per mol fed, a component of the organic liquid has
there the mole fraction x = f/(V K + O + s W), one of the water x = f/(V K + W + s O): y = K x in the gas, s x in the
other liquid. The amounts are where Q = V + O + W - sum f ln(theta . amounts) is least, theta the three factors of each
component: Q is convex, its slope along an amount is one minus the sum of the mole fractions of that phase, which is
zero where the phase is present and not negative where it is absent. After M. L. Michelsen, Comput. Chem. Eng. 18
(1994) 545, equations (7) to (10); the start by a primal-dual interior-point method (S. Boyd, L. Vandenberghe, Convex
Optimization, 2004, algorithm 11.2), the end by Newton's method on the phases that are present.
"""

from __future__ import annotations

import numpy as np

STEPS, POLISH, FLIPS, HALVINGS = 100, 12, 8, 12
NEAR, SMALL_GAP = 1e-13, 1e-20  # of a mol fed, where the interior-point method ends
TINY = 1e-140
EXACT = 1e-12  # of a mol fed, how well the sums must be satisfied


def three_phases(flows: np.ndarray, factors: np.ndarray) -> np.ndarray:
    """Split streams into gas, organic liquid and water liquid.

    Parameters
    ----------
    flows : (..., C) mol/s
        Real or complex.
    factors : (..., C, 3)
        Ratio of each component's mole fraction in the gas, the organic liquid and the water to that in its own liquid, or
        to its mole fraction in the gas where it has no liquid. Each component has a one. Broadcast with the flows.

    Returns
    -------
    (..., C, 3) mol/s
        What of each component is in each phase, exactly zero in phases that are absent. NaN where an input is not finite
        or negative, or where no solution was found. Where nothing flows, derivatives leave each component in its own
        phase.
    """
    shape = np.broadcast_shapes(flows.shape, factors.shape[:-1])
    flows, factors = np.broadcast_to(flows, shape), np.broadcast_to(factors, (*shape, 3))
    real, theta = np.real(flows), np.real(factors)
    while real.ndim > 2 and all(_level(item) for item in (real, theta)):
        real, theta = real[0], theta[0]  # the axis of derivatives: solved once
    cases = real.shape[:-1]
    real, theta = real.reshape(-1, shape[-1]), theta.reshape(-1, shape[-1], 3)
    with np.errstate(all="ignore"):
        total = real.sum(axis=-1)
        least = -EXACT * np.abs(real).sum(axis=-1, keepdims=True)
        valid = np.isfinite(real).all(axis=-1) & (real >= least).all(axis=-1)
        valid &= np.isfinite(theta).all(axis=(-2, -1)) & (theta >= 0).all(axis=(-2, -1))
        lively = valid & (total > 0)
        f = np.where(lively[:, None], np.maximum(real, 0.0), 0.0) / np.where(lively, total, 1.0)[:, None]
        theta = np.where(valid[:, None, None], theta, 1.0)
        amounts, good = _solve(f, theta)
        amounts = np.where(lively[:, None], amounts, 0.0)
        amounts = np.where((valid & (good | ~lively))[:, None], amounts, np.nan)
        amounts = amounts.reshape(*cases, 3)
        if np.iscomplexobj(flows) or np.iscomplexobj(factors):
            lead = np.broadcast_to(amounts, (*shape[:-1], 3))
            amounts = lead + 1j * _moved(lead, flows, factors)
        return flows[..., None] * _shares(amounts, factors)


def _level(item: np.ndarray) -> bool:
    """Tell whether nothing changes along the first axis."""
    return np.array_equal(item, np.broadcast_to(item[:1], item.shape), equal_nan=True)


def _shares(amounts: np.ndarray, factors: np.ndarray) -> np.ndarray:
    """Give the part of each component in each phase, (..., C, 3); its own phase where it can be in none that is present."""
    parts = factors * amounts[..., None, :]
    whole = parts.sum(axis=-1, keepdims=True)
    own = np.argmax(np.real(factors) == 1.0, axis=-1)
    alone = (np.arange(3) == own[..., None]).astype(float)
    return np.where(whole == 0, alone, parts / np.where(whole == 0, 1.0, whole))


def _sums(amounts: np.ndarray, f: np.ndarray, theta: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Give one minus the sum of mole fractions of each phase, (..., 3), and the second derivatives of Q, (..., 3, 3)."""
    whole = (theta * amounts[..., None, :]).sum(axis=-1)
    whole = np.where(np.real(whole) < TINY, TINY, whole)  # a phase that a component needs and that is absent calls for itself
    fractions = f / whole
    weight = fractions / whole
    slope = 1.0 - (theta * fractions[..., None]).sum(axis=-2)
    return slope, np.einsum("...c,...ck,...cl->...kl", weight, theta, theta)


def _solve(f: np.ndarray, theta: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Give the amounts of the phases per mol fed, (M, 3), and which cases satisfy every equation."""
    amounts, slope = _interior(f, theta)
    # a component that can be in one phase alone makes that phase
    sole = (theta > 0).sum(axis=-1) == 1
    must = ((theta > 0) & sole[..., None] & (f > 0)[..., None]).any(axis=-2)
    there = must | (amounts > slope)
    for _ in range(FLIPS):
        amounts = _polish(np.where(there, np.maximum(amounts, 1e-9), 0.0), there, f, theta)
        gone = there & ~must & ~(amounts > 1e-30)
        slope = _sums(np.where(gone, 0.0, amounts), f, theta)[0]
        come = ~there & (slope < -EXACT)
        if not (gone | come).any():
            break
        there = (there & ~gone) | (come & ~gone.any(axis=-1, keepdims=True))
        amounts = np.where(np.isfinite(amounts) & (amounts > 0), amounts, 0.0)
    slope = _sums(amounts, f, theta)[0]
    even = np.where(there, (np.abs(amounts * slope) <= EXACT) & (np.abs(slope) <= 1e-9) & (amounts > 0), slope >= -2 * EXACT)
    return np.where(there, amounts, 0.0), even.all(axis=-1)


def _interior(f: np.ndarray, theta: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Give amounts and slopes near the least Q, all above zero."""
    v, z = np.full((len(f), 3), 1.0 / 3.0), np.ones((len(f), 3))

    def miss(v: np.ndarray, z: np.ndarray, slope: np.ndarray, aim: np.ndarray) -> np.ndarray:
        return np.sqrt(((v * (slope - z)) ** 2 + (v * z - aim) ** 2).sum(axis=-1))

    for _ in range(STEPS):
        slope, curve = _sums(v, f, theta)
        gap = (v * z).sum(axis=-1)
        open_ = (gap > SMALL_GAP) | (np.abs(v * (slope - z)).max(axis=-1) > NEAR)
        if not open_.any():
            break
        aim = (gap / 30.0)[:, None]
        matrix = curve * v[:, :, None] * v[:, None, :]
        matrix[:, range(3), range(3)] += v * z
        rate = _solve_three(matrix, aim - v * slope)
        dv, dz = v * rate, aim / v - z - z * rate
        before = miss(v, z, slope, aim)
        most = np.minimum(np.where(dv < 0, -v / dv, np.inf).min(axis=-1), np.where(dz < 0, -z / dz, np.inf).min(axis=-1))
        length = np.where(open_, np.minimum(1.0, 0.99 * most), 0.0)
        for _ in range(HALVINGS):
            new_v, new_z = v + length[:, None] * dv, z + length[:, None] * dz
            after = miss(new_v, new_z, _sums(new_v, f, theta)[0], aim)
            late = open_ & ~((after <= (1.0 - 0.01 * length) * before) | (after <= NEAR))  # near the end there is rounding alone
            if not late.any():
                break
            length = np.where(late, 0.5 * length, length)
        moved = np.isfinite(new_v).all(axis=-1) & np.isfinite(new_z).all(axis=-1) & open_
        v, z = np.where(moved[:, None], new_v, v), np.where(moved[:, None], new_z, z)
    return v, z


def _polish(amounts: np.ndarray, there: np.ndarray, f: np.ndarray, theta: np.ndarray) -> np.ndarray:
    """Solve amount times slope = 0 for the phases that are there; a phase of a single component is solved in one step."""
    for _ in range(POLISH):
        slope, curve = _sums(amounts, f, theta)
        left = np.where(there, amounts * slope, 0.0)
        matrix = curve * amounts[:, :, None] * amounts[:, None, :]
        matrix[:, range(3), range(3)] += np.where(there, left, 1.0)
        rate = np.where(there, _solve_three(matrix, -left), 0.0)
        new = amounts * (1.0 + np.maximum(rate, -0.999))
        amounts = np.where(np.isfinite(new).all(axis=-1, keepdims=True), new, amounts)
        if not np.any(np.abs(rate) > 1e-15):
            break
    return np.where(amounts < 1e-300, 0.0, amounts)


def _moved(amounts: np.ndarray, flows: np.ndarray, factors: np.ndarray) -> np.ndarray:
    """Give the imaginary parts of the amounts that keep the sums at one, (..., 3); none in phases that are absent."""
    total = flows.sum(axis=-1, keepdims=True)
    f = flows / np.where(total == 0, 1.0, total)
    left = np.imag(_sums(amounts, f, factors)[0]) * amounts
    curve = _sums(amounts, np.real(f), np.real(factors))[1]
    there = amounts > 0
    matrix = curve * amounts[..., :, None] * amounts[..., None, :]
    matrix[..., range(3), range(3)] += np.where(there, 0.0, 1.0)
    return amounts * np.where(there, _solve_three(matrix, -left), 0.0)


def _solve_three(matrix: np.ndarray, right: np.ndarray) -> np.ndarray:
    """Solve symmetric systems of three, (..., 3, 3) and (..., 3), scaled by their diagonals; not finite where singular."""
    scale = np.sqrt(np.abs(np.diagonal(matrix, axis1=-2, axis2=-1)))
    scale = np.where(scale == 0, 1.0, scale)
    a = matrix / scale[..., :, None] / scale[..., None, :]
    b = right / scale
    rows = [np.cross(a[..., (i + 1) % 3, :], a[..., (i + 2) % 3, :]) for i in range(3)]
    determinant = (a[..., 0, :] * rows[0]).sum(axis=-1)
    return sum(rows[i] * b[..., i, None] for i in range(3)) / determinant[..., None] / scale
