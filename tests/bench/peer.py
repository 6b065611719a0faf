"""What a user would write instead: every stage equation of the closed loop, all at once, to scipy's root.

Unknowns are the liquid and the gas flows of every solute on every stage; rows are the material
balance and the equilibrium of every solute on every stage, in numpy, without a Python loop.
"""

import numpy as np
from scipy.optimize import root


def solve_all(stages, K, solvent, gas, stripping, feed_ratio):
    """Close the loop and give the solute flows of the cleaned gas.

    Parameters are as for `independent.solve_loop`, for a loop without purge or impurity.
    """
    n_wash, n_strip = stages
    feed = gas * np.asarray(feed_ratio, dtype=float)
    count, D = n_wash + n_strip, feed.size
    K_all = np.repeat(np.array(K, dtype=float), stages, axis=0)
    inert = np.repeat([float(gas), float(stripping)], stages)[:, None]
    fresh = np.zeros((count, D))
    fresh[n_wash - 1] = feed
    rising = np.ones((count, 1))
    rising[[n_wash - 1, -1]] = 0.0  # nothing rises from below the last stage of a column
    scale = np.where(feed > 0, feed, 1.0)

    def residual(flat):
        l, v = flat.reshape(2, count, D)
        material = np.roll(l, 1, axis=0) + rising * np.roll(v, -1, axis=0) + fresh - l - v
        L = solvent + l.sum(axis=1, keepdims=True)
        V = inert + v.sum(axis=1, keepdims=True)
        equilibrium = (v * L - K_all * l * V) / (solvent + inert)
        return np.stack([material / scale, equilibrium / scale]).ravel()

    # start: the linear loop, with the flows of the phases as they would be without solutes
    ratio = K_all * inert / solvent
    l = np.empty((count, D))
    for d in range(D):
        matrix = np.diag(-1.0 - ratio[:, d]) + np.eye(count, k=-1)
        matrix[0, -1] = 1.0
        matrix += np.diag((rising[:, 0] * np.roll(ratio[:, d], -1))[:-1], k=1)
        l[:, d] = np.linalg.solve(matrix, -fresh[:, d])
    found = root(residual, np.stack([l, ratio * l]).ravel(), method="hybr", options={"xtol": 1e-12})
    if np.abs(residual(found.x)).max() > 1e-8:
        raise ArithmeticError("root did not find the loop")
    return found.x.reshape(2, count, D)[1, 0]
