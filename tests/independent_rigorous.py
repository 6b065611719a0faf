"""Stage equations with heat in a formulation of their own: every balance, equilibrium and heat equation at once.

Nothing here knows of leanloop. The unknowns are the liquid flow and the gas flow of every component on
every stage and the temperature of every stage, condenser and reboiler included; `scipy.optimize.root`
solves for all of them together and Newton steps with a complex-step Jacobian polish the answer.
"""

from dataclasses import dataclass, field

import numpy as np
from scipy.optimize import root

DATUM = 298.15


@dataclass(frozen=True)
class Species:
    """One component: ln p = a - b / (T + c) in Pa and K, heat capacities in J/(mol K), latent heat in J/mol at `at`.

    `ratio`, `liquid` and `gas` may be given as functions instead: K(T, P), h(T).
    """

    name: str
    stays: str | None = None
    a: float = 0.0
    b: float = 0.0
    c: float = 0.0
    cp_liquid: float = 0.0
    cp_gas: float = 0.0
    latent: float = 0.0
    at: float = DATUM
    ratio: object = None
    liquid: object = None
    gas: object = None

    def k(self, T, P):
        if self.ratio is not None:
            return self.ratio(T, P)
        return np.exp(self.a - self.b / (T + self.c)) / P

    def h_liquid(self, T):
        return self.liquid(T) if self.liquid is not None else self.cp_liquid * (T - DATUM)

    def h_gas(self, T):
        if self.gas is not None:
            return self.gas(T)
        if self.stays == "gas":
            return self.cp_gas * (T - DATUM)
        return self.cp_liquid * (self.at - DATUM) + self.latent + self.cp_gas * (T - self.at)


@dataclass
class Column:
    """A column in SI numbers; stages count from 1 at the top, a condenser is 0, a reboiler `stages` + 1.

    feeds: (stage, phase, flows (C,), temperature); draws: (stage, phase, flow); duties: (stage, W).
    condenser, reboiler: None or (what, value); draw: condensate taken away, mol/s.
    efficiency: 1, or broadcasting to (stages, C). temperature: of isothermal stages, else None.
    """

    species: list
    stages: int
    feeds: list
    pressure: float
    pressure_drop: float = 0.0
    draws: list = field(default_factory=list)
    duties: list = field(default_factory=list)
    condenser: tuple | None = None
    draw: float = 0.0
    reboiler: tuple | None = None
    efficiency: object = 1.0
    temperature: float | None = None

    def __post_init__(self):
        self.C = len(self.species)
        self.top = 0 if self.condenser else 1
        self.n = self.stages + (self.condenser is not None) + (self.reboiler is not None)
        share = np.arange(self.stages) / max(self.stages - 1, 1)
        own = self.pressure - self.pressure_drop * (1 - share) if self.stages > 1 else np.array([self.pressure])
        P = list(own)
        if self.condenser:
            P.insert(0, self.pressure - self.pressure_drop)
        if self.reboiler:
            P.append(P[-1])
        self.P = np.array(P)
        self.eff = np.ones((self.n, self.C))
        self.eff[1 - self.top:1 - self.top + self.stages] = self.efficiency
        self.fed = np.zeros((self.n, self.C))
        self.fed_gas = np.zeros((self.n, self.C))
        self.heat = np.zeros(self.n)
        for stage, phase, flows, T in self.feeds:
            flows = np.asarray(flows, float)
            self.fed[stage - self.top] += flows
            if self.temperature is None:
                self.heat[stage - self.top] += self.h(phase, T, flows)
        for stage, phase, flows, _ in self.feeds:
            if phase == "gas" and stage == self.stages:
                self.fed_gas[stage - self.top] += flows
                break
        for stage, duty in self.duties:
            self.heat[stage - self.top] += duty
        self.taken = {"gas": np.zeros(self.n), "liquid": np.zeros(self.n)}
        for stage, phase, flow in self.draws:
            self.taken[phase][stage - self.top] += flow
        if self.condenser:
            self.taken["liquid"][0] += self.draw
        self.liquid_fed = sum(np.sum(flows) for stage, phase, flows, _ in self.feeds[:1])

    def h(self, phase, T, flows):
        own = [s.h_gas(T) if phase == "gas" else s.h_liquid(T) for s in self.species]
        return sum(flows[..., i] * h for i, h in enumerate(own))

    def k(self, T):
        return np.stack([np.zeros_like(T) if s.stays else s.k(T, self.P) + 0 * T for s in self.species], axis=-1)

    def rising(self, v):
        """Gas that enters the stages: that left over from the stage below, and gas fed."""
        V = v.sum(-1, keepdims=True)
        left = v * (1 - self.taken["gas"][:, None] / np.where(V == 0, 1, V))
        return np.vstack([left[1:], np.zeros((1, self.C))]), left

    def falling(self, l):
        L = l.sum(-1, keepdims=True)
        left = l * (1 - self.taken["liquid"][:, None] / np.where(L == 0, 1, L))
        return np.vstack([np.zeros((1, self.C)), left[:-1]]), left

    def duty(self, l, v, T):
        """Heat that each stage needs to balance, W."""
        rises, _ = self.rising(v)
        falls, _ = self.falling(l)
        below, above = np.append(T[1:], T[-1]), np.insert(T[:-1], 0, T[0])
        out = self.h("liquid", T, l) + self.h("gas", T, v)
        return out - self.h("liquid", above, falls) - self.h("gas", below, rises) - self.heat

    def outlets(self, l, v):
        """Flows that leave at the top as gas and at the bottom as liquid."""
        return self.rising(v)[1][0], self.falling(l)[1][-1]

    def fractions(self, l, v):
        L, V = l.sum(-1, keepdims=True), v.sum(-1, keepdims=True)
        return l / np.where(L == 0, 1, L), v / np.where(V == 0, 1, V)

    def balance(self, l, v):
        return self.rising(v)[0] + self.falling(l)[0] + self.fed - l - v

    def equilibrium(self, l, v, T):
        """y - E K x - (1 - E) y entering, or the flow in the phase where a component never is.

        What enters is the gas of the stage below or the gas fed at the bottom; side feeds join the stage itself.
        """
        x, y = self.fractions(l, v)
        enters = self.rising(v)[0] + self.fed_gas
        total = enters.sum(-1, keepdims=True)
        entering = enters / np.where(total == 0, 1, total)
        gap = y - self.eff * self.k(T) * x - (1 - self.eff) * entering
        for i, s in enumerate(self.species):
            if s.stays == "gas":
                gap[:, i] = l[:, i]
            elif s.stays == "liquid":
                gap[:, i] = v[:, i]
        return gap

    def specified(self, l, v, T):
        """The heat balance of every stage, or what stands in its place; scaled to be of the order of one."""
        L, V = l.sum(-1), v.sum(-1)
        if self.temperature is not None:
            return (T - self.temperature) / 100
        out = self.duty(l, v, T) / self.heat_scale
        if self.condenser:
            what, value = self.condenser
            out[0] = {"temperature": lambda: (T[0] - value) / 100,
                      "reflux_ratio": lambda: ((L[0] - self.draw) - value * V[0]) / self.fed.sum()}[what]()
        if self.reboiler:
            what, value = self.reboiler
            if what == "duty":
                out[-1] -= value / self.heat_scale
            else:
                out[-1] = {"temperature": lambda: (T[-1] - value) / 100,
                           "boil_up": lambda: (V[-1] - value * L[-1]) / self.fed.sum(),
                           "stripping_ratio": lambda: (V[-1] - value * self.liquid_fed) / self.fed.sum()}[what]()
        return out

    @property
    def heat_scale(self):
        return self.fed.sum() * 5e3

    def residual(self, flat):
        l, v, T = self.unpack(flat)
        scale = np.maximum(self.fed.sum(0), 1e-12 * self.fed.sum())
        rows = [self.balance(l, v) / scale, self.equilibrium(l, v, T), self.specified(l, v, T)[:, None]]
        return np.concatenate([rows[0], rows[1], rows[2]], axis=1).ravel()

    def unpack(self, flat):
        grid = flat.reshape(self.n, 2 * self.C + 1)
        return grid[:, :self.C], grid[:, self.C:2 * self.C], grid[:, -1]

    def pack(self, l, v, T):
        return np.concatenate([l, v, T[:, None]], axis=1).ravel()

    def solve(self, l, v, T):
        """Solve from a start; raise ArithmeticError where the equations are not met to 1e-11."""
        start = self.pack(l, v, T)
        size = np.maximum(np.abs(start), 1e-3 * self.fed.sum())
        found = root(lambda z: self.residual(z * size), start / size, method="hybr", options={"xtol": 1e-12, "maxfev": 40000})
        x = polish(self.residual, found.x * size)
        l, v, T = self.unpack(x)
        if not np.abs(self.residual(x)).max() < 1e-11 or min(l.min(), v.min()) < -1e-12 * self.fed.sum():
            raise ArithmeticError("the independent solution was not found")
        return l, v, T


def polish(residual, x, steps=4):
    """Newton steps with a complex-step Jacobian."""
    for _ in range(steps):
        scale = np.maximum(np.abs(x), 1e-9)
        jacobian = np.array([residual(x + 1j * 1e-30 * row).imag for row in np.diag(scale)]).T / 1e-30
        x = x - scale * np.linalg.solve(jacobian, residual(x))
    return x
