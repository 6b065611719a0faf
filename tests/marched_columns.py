"""Reboiled columns with a known answer: marched from the bottoms upwards, the feed being what the march ends with.

Choose the bottoms, the boil-up and the efficiencies; then every stage follows from the one below by bubble point,
component and heat balance, and the liquid that stage 1 needs is the feed (less reflux). So an answer exists.
"""

import numpy as np
from independent_rigorous import Column
from scipy.optimize import brentq


class DeadEnd(ArithmeticError):
    """The march came to numbers that no column has."""


def bubble(species, moles, P, near):
    """Temperature at which a liquid boils."""
    x = moles / moles.sum()
    gap = lambda T: np.log(max(sum(a * float(s.k(T, P)) for s, a in zip(species, x) if s.stays is None), 1e-300))  # noqa: E731
    low, high = near - 5, near + 5
    while gap(low) > 0:
        low -= 20
        if low < 80:
            raise DeadEnd
    while gap(high) < 0:
        high += 20
        if high > 1500:
            raise DeadEnd
    return brentq(gap, low, high, xtol=1e-13, rtol=1e-15)


def root_near(f, x, low=1e-9):
    """A sign change of f near a positive x."""
    for width in (1.05, 1.3, 2.0, 5.0, 30.0):
        a, b = max(x / width, low), x * width
        if f(a) * f(b) < 0:
            return brentq(f, a, b, xtol=1e-15, rtol=1e-15)
    raise DeadEnd


def condensed(species, gas, P, share, near):
    """Liquid and temperature where `share` of a gas condenses."""
    z = gas / gas.sum()
    moves = np.array([s.stays is None for s in species])

    def parts(T):
        K = np.array([float(s.k(T, P)) for s in species if s.stays is None])
        x = np.zeros(len(z))
        x[moves] = z[moves] / (share + (1 - share) * K)
        return x, K

    gap = lambda T: (parts(T)[0][moves] * (1 - parts(T)[1])).sum()  # noqa: E731
    low, high = near - 2, near + 2
    while gap(low) < 0 and low > 80:
        low -= 20
    while gap(high) > 0 and high < 1500:
        high += 20
    if not gap(low) * gap(high) < 0:
        raise DeadEnd
    T = brentq(gap, low, high, xtol=1e-13, rtol=1e-15)
    return parts(T)[0] * share * gas.sum(), T


def march(rng, species, stages, pressure, drop, bottoms, boil_up, efficiency, near, reflux=None, tapped=0.0, extras=True):
    """A column and its answer (l, v, T); raises DeadEnd where the numbers turn out to be none of a column.

    efficiency: (stages,). reflux: mol per mol of overhead gas, None without a condenser; tapped: part of the condensate drawn.
    """
    N, C = stages, len(species)
    P = pressure - drop * (1 - np.arange(N) / max(N - 1, 1)) if N > 1 else np.array([pressure])
    h = lambda phase, T, flows: sum(f * (s.h_gas(T) if phase == "gas" else s.h_liquid(T)) for s, f in zip(species, flows) if f)  # noqa: E731
    K = lambda T, P: np.array([0.0 if s.stays else float(s.k(T, P)) for s in species])  # noqa: E731
    feeds, draws, duties = [], [], []
    l, v, T = np.zeros((N + 2, C)), np.zeros((N + 2, C)), np.zeros(N + 2)
    l[-1], T[-1] = bottoms, bubble(species, bottoms, pressure, near)
    v[-1] = boil_up * bottoms.sum() * K(T[-1], pressure) * bottoms / bottoms.sum()
    rising = v[-1]
    falling = l[-1] + v[-1]  # liquid that comes down to the stage below
    T[N] = bubble(species, falling, P[N - 1], T[-1])
    reboiler = h("liquid", T[-1], l[-1]) + h("gas", T[-1], v[-1]) - h("liquid", T[N], falling)
    for j in range(N, 0, -1):
        taps = {phase: 0.0 for phase in ("gas", "liquid")}
        if extras and rng.random() < 0.4 / N:
            taps[str(rng.choice(["gas", "liquid"]))] = rng.uniform(0.02, 0.25)
        l[j] = falling / (1 - taps["liquid"])
        total = l[j].sum()
        y = efficiency[j - 1] * K(T[j], P[j - 1]) * l[j] / total + (1 - efficiency[j - 1]) * rising / rising.sum()
        duty = rng.uniform(-1, 1) * 1e3 * total if extras and rng.random() < 0.3 / N else 0.0
        fed, heat = np.zeros(C), 0.0
        if extras and j > 1 and rng.random() < 0.5 / N:
            fed, at = rng.uniform(0.05, 0.4) * falling * rng.uniform(0.7, 1, C), T[j] - rng.uniform(-5, 30)
            heat = h("liquid", at, fed)
            feeds.append((j, "liquid", fed, at))
        into = h("gas", T[j + 1], rising) + heat + duty - h("liquid", T[j], l[j])
        if j > 1:
            comes = lambda V: l[j] + V * y - rising - fed  # noqa: E731, B023

            def excess(V):
                above = comes(V)  # noqa: B023
                if above.min() < 0:
                    raise DeadEnd
                return h("liquid", bubble(species, above, P[j - 2], T[j]), above) + into - V * h("gas", T[j], y)  # noqa: B023

            V = root_near(excess, rising.sum())
            falling_next = comes(V)
            T[j - 1] = bubble(species, falling_next, P[j - 2], T[j])
        else:
            V = rising.sum() * rng.uniform(0.5, 1.0)
            falling_next = l[j] + V * y - rising
        v[j] = V * y
        if taps["gas"]:
            draws.append((j, "gas", V * taps["gas"]))
        if taps["liquid"]:
            draws.append((j, "liquid", total * taps["liquid"]))
        if duty:
            duties.append((j, duty))
        rising, falling = v[j] * (1 - taps["gas"]), falling_next
        if j == 1:
            left, draw, returned = falling, 0.0, 0.0
            if reflux is not None:
                share = reflux / (1 - tapped) / (1 + reflux / (1 - tapped))
                l[0], T[0] = condensed(species, rising, pressure - drop, share, T[1])
                v[0] = rising - l[0]
                draw = tapped * l[0].sum()
                back = l[0] * (1 - tapped)
                left, returned = falling - back, h("liquid", T[0], back)
            wanted = V * h("gas", T[1], y) - into - returned
            span = [T[1] - 150, T[1] + 60]
            gap = lambda at: h("liquid", at, left) - wanted  # noqa: E731, B023
            if left.min() < 0 or not gap(span[0]) * gap(span[1]) < 0:
                raise DeadEnd
            feeds.insert(0, (1, "liquid", left, brentq(gap, *span, xtol=1e-13, rtol=1e-15)))
    top = 0 if reflux is not None else 1
    grid = np.repeat(efficiency[:, None], C, axis=1) if np.ptp(efficiency) else float(efficiency[0])
    column = Column(species, N, feeds, pressure, drop, draws, duties, ("reflux_ratio", reflux) if reflux is not None else None,
                    draw if reflux is not None else 0.0, ("duty", reboiler), grid)
    return column, (l[top:], v[top:], T[top:])
