"""The same stage equations solved in another way: all of them at once by scipy.optimize.root.

Nothing here knows of leanloop. The unknowns are the liquid mole ratios of all stages; the
carriers, the purge and the impurity balance by hand, as a person would do it before starting.
The speed comparison uses `solve_loop` as its peer, so the residual has no Python loop over stages.
"""

from dataclasses import dataclass

import numpy as np
from scipy.optimize import brentq, minimize_scalar, root


@dataclass(frozen=True)
class Loop:
    """Profiles top to bottom, shape (stages, solutes); flows in the unit of the input."""

    X_wash: np.ndarray
    Y_wash: np.ndarray
    X_strip: np.ndarray
    Y_strip: np.ndarray
    X_lean: np.ndarray  # liquid that enters the absorber
    cleaned: np.ndarray  # solute flows leaving with the gas of the absorber
    overhead: np.ndarray  # ... with the gas of the stripper
    bleed: np.ndarray  # ... with the purged liquid
    evaluations: int

    @property
    def X_rich(self):
        return self.X_wash[-1]

    @property
    def X_stripped(self):
        return self.X_strip[-1]

    @property
    def Y_out(self):
        return self.Y_wash[0]


def gas_ratio(K, X, basis):
    """Y in equilibrium with X: Y = K X, or y = K x with every solute diluting the others."""
    if basis == "ratio":
        return K * X
    y = K * X / (1 + X.sum(-1, keepdims=True))
    return y / (1 - y.sum(-1, keepdims=True))


def newton_polish(residual, x, steps=3):
    """Some Newton steps, complex-step Jacobian, relative unknowns: roots to rounding."""
    for _ in range(steps):
        scale = np.where(x == 0, 1.0, np.abs(x))
        nudged = x + 1j * 1e-30 * np.diag(scale)
        jacobian = np.array([residual(row) for row in nudged]).imag.T / 1e-30
        x = x + scale * np.linalg.solve(jacobian, -residual(x))
    return x


def solve_loop(stages, K, solvent, gas, stripping, feed_ratio, stripping_ratio=0.0, purge=0.0,
               impurity=0.0, basis="fraction", polish=False):
    """Closed absorber and stripper; `stages` and `K` are pairs (absorber, stripper).

    K and the ratios may hold one value or one a solute. The impurity is non-volatile and joins
    the rich liquid; the purge takes its share of the lean liquid, pure solvent makes up for it.
    """
    n_wash, n_strip = stages
    feed_ratio = np.atleast_1d(np.asarray(feed_ratio, float))
    D = feed_ratio.size
    ones = np.ones(D)
    K_all = np.repeat(np.array([ones * K[0], ones * K[1]]), stages, axis=0)
    tar = np.array([(1 - purge) / purge, 1 / purge]) * impurity if impurity else np.zeros(2)
    L = np.repeat(solvent + tar, stages)[:, None]
    V = np.repeat([float(gas), float(stripping)], stages)[:, None]
    sent = np.zeros((n_wash + n_strip, D))  # fresh gas, fed to the last stage of either column
    sent[n_wash - 1] = gas * feed_ratio
    sent[-1] = stripping * (ones * stripping_ratio)
    top_of_strip = np.zeros((n_wash + n_strip, 1), bool)
    top_of_strip[n_wash] = True
    scale = np.where(sent.sum(0) > 0, sent.sum(0), 1.0)

    def balances(X, Y, sent):
        liquid, vapour = L * X, V * Y
        came = np.roll(liquid, 1, axis=0)
        came[0] = came[0] * (1 - purge)  # the loop closes on itself
        rose = np.roll(np.where(top_of_strip, 0, vapour), -1, axis=0)
        rose[-1] = 0
        return came - liquid + rose - vapour + sent, liquid, vapour

    def residual(flat, sent):
        X = flat.reshape(-1, D)
        return (balances(X, gas_ratio(K_all, X, basis), sent)[0] / scale).ravel()

    def linear_start(sent):
        n = n_wash + n_strip
        X = np.empty((n, D))
        for d in range(D):
            matrix = np.stack([balances(e[:, None], K_all[:, [d]] * e[:, None], np.zeros((n, 1)))[0]
                               for e in np.eye(n)], axis=1)[:, :, 0]
            X[:, d] = np.linalg.solve(matrix, -sent[:, d])
        if basis == "fraction":  # a start whose gas is not all solute
            y = (K_all * X / (1 + X.sum(1, keepdims=True))).sum(1, keepdims=True)
            X = X * np.minimum(1, 0.8 / np.maximum(y, 1e-300))
        return X

    evaluations = 0

    def attempt(start, sent):
        nonlocal evaluations
        found = root(residual, start.ravel(), args=(sent,), method="hybr", options={"xtol": 1e-13})
        evaluations += found.nfev
        X = found.x.reshape(-1, D)
        y = 1 - 1 / (1 + gas_ratio(K_all, X, basis).sum(1))
        good = np.abs(residual(found.x, sent)).max() < 1e-9 and X.min() > -1e-12 and y.max() < 1
        return X, good

    X, good = attempt(linear_start(sent), sent)
    if not good:  # rich gas: reach the full solute content by steps
        X = linear_start(sent * 1e-3)
        for share in np.geomspace(1e-3, 1, 25):
            X, good = attempt(X, sent * share)
    if not good:
        raise ArithmeticError("the independent solution was not found")
    if polish:
        flat = newton_polish(lambda x: residual(x, sent), X.ravel())
        X = flat.reshape(-1, D)
    Y = gas_ratio(K_all, X, basis)
    _, liquid, vapour = balances(X, Y, sent)
    return Loop(X[:n_wash], Y[:n_wash], X[n_wash:], Y[n_wash:],
                liquid[-1] * (1 - purge) / L[0], vapour[0], vapour[n_wash], purge * liquid[-1],
                evaluations)


def solve_column(stages, curve, liquid, gas, X_in, Y_in):
    """One solute, any curve Y(X), whole stages: march from the top, find the outlet gas.

    Returns X and Y of all stages. The inverse of the curve is bracketed, so no start is needed.
    """
    top = X_in + gas / liquid * Y_in

    def march(Y_out):
        X, Y = [], [Y_out]
        for _ in range(stages):
            if Y[-1] >= curve(top):
                X.append(top)
            else:
                X.append(brentq(lambda x, y=Y[-1]: curve(x) - y, 0, top, xtol=1e-16, rtol=1e-15))
            Y.append(Y_out + liquid / gas * (X[-1] - X_in))
        return np.array(X), np.array(Y)

    low = curve(X_in)
    if low >= Y_in:
        raise ValueError("only absorption is marched")
    Y_out = brentq(lambda y: march(y)[1][-1] - Y_in, low, Y_in, xtol=1e-16, rtol=1e-15)
    X, Y = march(Y_out)
    return X, Y[:-1]


def solve_fraction_column(stages, K, liquid, gas):
    """Every component distributes with y = K x and no carrier holds the totals.

    The unknowns are the component flows of the liquid; total gas flows follow from the balance
    over the stages above, and each gas flow from the equilibrium.
    Returns liquid and gas flows leaving the stages, shape (stages, components).
    """
    K, liquid, gas = (np.asarray(a, float) for a in (K, liquid, gas))
    C = K.size
    scale = liquid + gas

    def both(flat):
        leaves = flat.reshape(stages, C)
        total = leaves.sum(1)
        came = np.vstack([liquid, leaves[:-1]])
        V = gas.sum() + came.sum(1) - total[-1]
        rises = K * leaves * (V / total)[:, None]
        return came, leaves, rises, np.vstack([rises[1:], gas])

    def residual(flat):
        came, leaves, rises, risen = both(flat)
        return ((came - leaves + risen - rises) / scale).ravel()

    start = np.tile(liquid + 0.2 * gas / (1 + K), (stages, 1)) + 1e-6 * scale
    found = root(residual, start.ravel(), method="hybr", options={"xtol": 1e-13})
    x = newton_polish(residual, found.x)
    if np.abs(residual(x)).max() > 1e-12 or x.min() < 0:
        raise ArithmeticError("the independent solution was not found")
    _, leaves, rises, _ = both(x)
    return leaves, rises


def wash_oil_outlet(circulation, stages=(8, 7), stripping=6.812e-4, feed_ratio=0.0204):
    """Outlet gas ratio of the wash-oil loop (Treybal, Illustrations 8.2 and 8.3), kmol/s."""
    loop = solve_loop(stages, (0.125, 3.16), circulation, 0.01051, stripping, feed_ratio,
                      polish=True)
    return float(loop.Y_out[0])


def wash_oil_minimum(between=(1.2e-3, 2.8e-3)):
    """Circulation with the cleanest gas, and the outlet ratio there."""
    best = minimize_scalar(lambda u: wash_oil_outlet(u * 1e-3) * 1e3, method="bounded",
                           bounds=[b * 1e3 for b in between], options={"xatol": 1e-9})
    return best.x * 1e-3, best.fun * 1e-3


def wash_oil_circulations(outlet, between=(1.2e-3, 2.8e-3)):
    """The two circulations that give one outlet ratio, the lesser one first."""
    turn, _ = wash_oil_minimum(between)
    gap = lambda u: (wash_oil_outlet(u * 1e-3) - outlet) * 1e3  # noqa: E731
    low, high = (b * 1e3 for b in between)
    return (brentq(gap, low, turn * 1e3, xtol=1e-14) * 1e-3,
            brentq(gap, turn * 1e3, high, xtol=1e-14) * 1e-3)
