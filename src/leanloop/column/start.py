"""Start of Newton's method on a column: flows by the absorption-factor estimate, then sum-rates sweeps.

With the total flows of the phases given, the material balances of each component are tridiagonal
and their answer is positive; summing the answers gives new totals. That is the sum-rates method
(Sujata, A. D., Hydrocarbon Processing 40(12), 137 (1961); from memory), which needs no guess.
"""

from __future__ import annotations

import numpy as np
from scipy.linalg import lapack

from leanloop.column.equations import Stages, phases

TINY = 1e-300
MOST_FACTOR = 1e15  # beyond it the liquid keeps nothing that the arithmetic can tell from nothing


def split_fractions(factor: np.ndarray, stages: int | np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Give the fractions stripped from the liquid, and absorbed from the gas, at one stripping factor.

    Kremser (1930), Souders and Brown (1932): (S^(N+1) - S)/(S^(N+1) - 1) is stripped, the same with
    A = 1/S absorbed; here by the sum 1 + a + ... + a^N of whichever is below one, exact near S = 1.

    Parameters
    ----------
    factor : (...,) dimensionless
        Stripping factor K V / L, positive.
    stages : int or (...,) int

    Returns
    -------
    stripped, absorbed : (...,) dimensionless
    """
    above = factor > 1.0
    small = np.where(above, 1.0 / factor, factor)
    log = np.log(small)
    total = np.where(log == 0.0, stages + 1.0, np.expm1((stages + 1) * log) / np.expm1(log))
    lesser, greater = 1.0 - 1.0 / total, 1.0 - np.exp(stages * log) / total
    return np.where(above, greater, lesser), np.where(above, lesser, greater)


def tridiagonal(ratio: np.ndarray, feeds: np.ndarray) -> np.ndarray:
    """Solve the material balances of every component at given stripping factors.

    Parameters
    ----------
    ratio : (M, N, D) dimensionless
        v/l of each component on each stage.
    feeds : (M, N, D) mol/s

    Returns
    -------
    (M, N, D) mol/s
        Liquid flows l.
    """
    cases, count, parts = feeds.shape
    lost = ~(np.isfinite(ratio).all(axis=(1, 2)) & np.isfinite(feeds).all(axis=(1, 2)))
    if lost.any():  # the cases are one long system, in which one such case would spoil the others
        ratio, feeds = np.where(lost[:, None, None], 0.0, ratio), np.where(lost[:, None, None], 0.0, feeds)
    s = ratio.transpose(0, 2, 1)
    lower = np.full((cases, parts, count), -1.0)
    lower[..., -1] = 0.0
    upper = np.zeros((cases, parts, count))
    np.negative(s[..., 1:], out=upper[..., :-1])
    right = np.ascontiguousarray(feeds.transpose(0, 2, 1)).reshape(-1)
    if right.size <= 1:
        return feeds / (1.0 + ratio)
    answer = lapack.dgtsv(lower.reshape(-1)[:-1], (1.0 + s).reshape(-1), upper.reshape(-1)[:-1], right)[3]
    answer = answer.reshape(cases, parts, count).transpose(0, 2, 1)
    if answer.min(initial=0.0) < 0.0:  # a pivot chosen by rounding; without pivots nothing is subtracted
        answer = answer.copy()
        wrong = (answer < 0.0).any(axis=(1, 2))
        answer[wrong] = _without_pivots(ratio[wrong], feeds[wrong])
    return answer


def _without_pivots(ratio: np.ndarray, feeds: np.ndarray) -> np.ndarray:
    """Eliminate downwards and substitute upwards, stage by stage, in sums of positive terms."""
    count = feeds.shape[1]
    diagonal, right = np.empty_like(feeds), np.empty_like(feeds)
    diagonal[:, 0], right[:, 0] = 1.0 + ratio[:, 0], feeds[:, 0]
    for j in range(1, count):
        diagonal[:, j] = 1.0 + ratio[:, j] * (1.0 - 1.0 / diagonal[:, j - 1])
        right[:, j] = feeds[:, j] + right[:, j - 1] / diagonal[:, j - 1]
    flows = right / diagonal
    for j in range(count - 2, -1, -1):
        flows[:, j] += ratio[:, j + 1] * flows[:, j + 1] / diagonal[:, j]
    return flows


def sweep(stages: Stages, gas: np.ndarray, liquid: np.ndarray, ratio: np.ndarray) -> np.ndarray:
    """Make one sum-rates sweep.

    Parameters
    ----------
    stages : Stages
    gas, liquid : (M, N) mol/s
        Total flows leaving each stage.
    ratio : (M, N, D)
        Gas over liquid mole fraction of each component.

    Returns
    -------
    (M, N, 1 + D) mol/s
        Unknowns of the column.
    """
    factor = np.minimum(ratio * (gas / np.maximum(liquid, TINY))[..., None], MOST_FACTOR)
    flows = tridiagonal(factor, stages.feeds)
    out = np.empty((*flows.shape[:2], flows.shape[2] + 1))
    out[..., 1:] = flows
    out[..., 0] = stages.gas_inert + (factor * flows).sum(axis=-1)
    return out


def fraction_ratio(stages: Stages, unknowns: np.ndarray) -> np.ndarray:
    """Give y/x of every component on every stage at given unknowns, its limit at zero liquid.

    Parameters
    ----------
    stages : Stages
    unknowns : (M, N, 1 + D) mol/s

    Returns
    -------
    (M, N, D)
    """
    at = phases(stages, unknowns)
    gas, liquid = np.maximum(unknowns[..., :1], TINY), np.maximum(at.total_liquid[..., None], TINY)
    with np.errstate(divide="ignore", invalid="ignore"):
        found = (at.gas_flow / gas) / (unknowns[..., 1:] / liquid)
    dilute = np.broadcast_to(stages.law.k_dilute, found.shape)
    return np.where(np.isfinite(found) & (found > 0), found, dilute)


def start(stages: Stages, sweeps: int = 2) -> np.ndarray:
    """Estimate the unknowns of a batch of columns from their feeds alone.

    Parameters
    ----------
    stages : Stages
    sweeps : int

    Returns
    -------
    (M, N, 1 + D) mol/s
    """
    cases, count, parts = stages.shape
    total = stages.feeds.sum(axis=1)
    last = count - 1 if stages.depth is None else stages.depth - 1
    every = np.arange(cases)
    top, bottom = stages.feeds[:, 0], stages.feeds[every, last]
    ratio = np.broadcast_to(stages.law.k_dilute, (cases, count, parts))
    # gas and liquid with every component in the phase that it prefers
    liquid_in = stages.liquid_inert[:, 0] + top.sum(axis=-1)
    gas_in = stages.gas_inert[every, last] + bottom.sum(axis=-1)
    factor = ratio[:, 0] * ((gas_in + 1e-9 * liquid_in) / np.maximum(liquid_in + 1e-9 * gas_in, TINY))[:, None]
    stripped, absorbed = split_fractions(np.clip(factor, 1e-15, 1e15), count if stages.depth is None else stages.depth[:, None])
    gas_out = stages.gas_inert[:, 0] + (stripped * top + (1.0 - absorbed) * (total - top)).sum(axis=-1)
    liquid_out = stages.liquid_inert[:, -1] + ((1.0 - stripped) * top + absorbed * (total - top)).sum(axis=-1)
    place = np.arange(count) / np.maximum(np.reshape(last, (-1, 1)), 1)
    if stages.depth is not None:
        place = np.minimum(place, 1.0)
    liquid = liquid_in[:, None] + place * (liquid_out - liquid_in)[:, None]
    gas = gas_out[:, None] + place * (gas_in - gas_out)[:, None]
    if stages.depth is not None:
        gas[stages.below] = 0.0
    unknowns = sweep(stages, gas, liquid, ratio)
    for _ in range(sweeps - 1):
        total_liquid = stages.liquid_inert + unknowns[..., 1:].sum(axis=-1)
        if not stages.law.proportional or not stages.law.plain:
            ratio = fraction_ratio(stages, unknowns)
        unknowns = sweep(stages, unknowns[..., 0], total_liquid, ratio)
    return unknowns


def filling_start(stages: Stages) -> np.ndarray:
    """Give the state from which columns are filled: every stage as if it were the only one.

    With all distributing components counted in the gas, the gas mole fractions sum to less than
    one on every stage, whatever the equilibrium ratios: no stage starts superheated.

    Parameters
    ----------
    stages : Stages

    Returns
    -------
    (M, N, 1 + D) mol/s
    """
    total = stages.feeds.sum(axis=1)
    gas = stages.gas_inert + total.sum(axis=-1)[:, None]
    liquid = stages.liquid_inert + stages.feeds[:, 0].sum(axis=-1)[:, None]
    factor = stages.law.k_dilute * (gas / np.maximum(liquid, TINY))[..., None]
    flows = total[:, None, :] / (1.0 + factor)
    if stages.depth is not None:
        gas[stages.below] = 0.0
    return np.concatenate([gas[..., None], flows], axis=-1)
