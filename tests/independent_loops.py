"""Closed loops with a lean/rich exchanger in a formulation of their own: every equation of the flowsheet at once.

Nothing here knows of leanloop. The unknowns are the liquid flow and the gas flow of every component on every stage
of both columns, the temperature of every stage, the two temperatures and the duty of the exchanger, what the make-up adds
and the flows that are recycled. `scipy.optimize.root` solves for all of them together; Newton steps with a
complex-step Jacobian polish the answer.
"""

from dataclasses import dataclass, replace

import numpy as np
from independent_rigorous import DATUM, polish
from scipy.optimize import root


@dataclass(frozen=True)
class Species:
    """One component: ln p = a - b / (T + c) in Pa and K, heat capacities in J/(mol K), latent heat in J/mol at `at`."""

    name: str
    stays: str | None = None
    a: float = 0.0
    b: float = 0.0
    c: float = 0.0
    cp_liquid: float = 0.0
    cp_gas: float = 0.0
    latent: float = 0.0
    at: float = DATUM


class Mixture:
    """Formulas of several components in columns: partial pressures over pure liquids and molar enthalpies."""

    def __init__(self, species):
        pick = lambda key: np.array([getattr(s, key) for s in species])  # noqa: E731
        self.a, self.b, self.c = pick("a"), pick("b"), pick("c")
        self.cp_liquid, self.cp_gas, self.at = pick("cp_liquid"), pick("cp_gas"), pick("at")
        self.base = self.cp_liquid * (self.at - DATUM) + pick("latent")
        self.in_gas = np.array([s.stays == "gas" for s in species])
        self.in_liquid = np.array([s.stays == "liquid" for s in species])

    def pressures(self, T):
        return np.exp(self.a - self.b / (T[..., None] + self.c))

    def liquid(self, T):
        return self.cp_liquid * (np.asarray(T)[..., None] - DATUM)

    def gas(self, T):
        return self.base + self.cp_gas * (np.asarray(T)[..., None] - self.at)

    def heat(self, phase, flows, T):
        """Enthalpy flow, W."""
        return (flows * (self.liquid(T) if phase == "liquid" else self.gas(T))).sum(-1)


class Tower:
    """Equilibrium stages from the top down; a first one at a given temperature, a last one with a given heat or boil-up."""

    def __init__(self, mixture, pressures, condenser=None, reboiler=None):
        self.mixture, self.P = mixture, np.asarray(pressures, float)
        self.condenser, self.reboiler = condenser, reboiler
        self.n, self.C = len(self.P), len(mixture.a)

    def heats(self, l, v, T, fed_heat):
        """Heat that each stage needs, W: what leaves it less what enters it."""
        m = self.mixture
        down, up = m.heat("liquid", l, T), m.heat("gas", v, T)
        out = down + up - fed_heat
        out[1:] -= down[:-1]
        out[:-1] -= up[1:]
        return out

    def rows(self, l, v, T, fed, fed_heat, flow, energy):
        """Balances, equilibria and heat of every stage; `flow` (C,) and `energy` are their scales."""
        balance = fed - l - v
        balance[1:] += l[:-1]
        balance[:-1] += v[1:]
        L, V = l.sum(-1, keepdims=True), v.sum(-1, keepdims=True)
        m = self.mixture
        fit = v / V - m.pressures(T) / self.P[:, None] * l / L
        fit = np.where(m.in_gas, l / flow.sum(), np.where(m.in_liquid, v / flow.sum(), fit))
        heat = self.heats(l, v, T, fed_heat) / energy
        if self.condenser is not None:
            heat[0] = (T[0] - self.condenser) / 100
        if self.reboiler is not None:
            what, value = self.reboiler
            heat[-1] = heat[-1] - value / energy if what == "duty" else V[-1, 0] / L[-1, 0] - value
        return np.concatenate([balance / flow, fit, heat[:, None]], axis=1).ravel()


def levels(stages, pressure, drop=0.0, condenser=False, reboiler=False):
    """Pressures of stages, the drop spread evenly up to the top; condenser and reboiler as the stages beside them."""
    own = list(pressure - drop * np.linspace(1, 0, stages))
    return own[:1] * condenser + own + own[-1:] * reboiler


class Loop:
    """What both loops have in common: columns, exchanger, make-up and recycle as one vector of unknowns.

    species: of the wash and of the stripper (the same order); hold: {place: mol/s}; exchanger: (what, value) with what one of
    hot_end, cold_end, least (K) or UA (W/K); bleed: share of the cooled lean liquid that leaves; flash: pressure at which
    the warmed rich liquid flashes; preheat: temperature to which it is brought; gas, steam: (flows, temperature).
    """

    def __init__(self, wash, strip, stages, pressure, strip_pressure, gas, exchanger, hold, cool, *, drop=0.0, steam=None,
                 condenser=None, reboiler=None, bleed=0.0, preheat=None, flash=None):
        self.species = wash
        self.names = [s.name for s in wash]
        self.m, self.C = Mixture(wash), len(wash)
        self.wash = Tower(self.m, levels(stages[0], pressure))
        pressures = levels(stages[1], strip_pressure, drop, condenser is not None, reboiler is not None)
        self.strip = Tower(Mixture(strip), pressures, condenser, reboiler)
        self.fed_at = int(condenser is not None)
        self.gas, self.steam = gas, steam
        self.exchanger, self.hold, self.cool = exchanger, hold, cool
        self.bleed, self.preheat = bleed, preheat
        self.drum = Tower(Mixture(strip), [flash]) if flash else None
        towers = [self.wash, self.strip] + [self.drum] * (self.drum is not None)
        self.shapes = [shape for t in towers for shape in ((t.n, self.C), (t.n, self.C), (t.n,))] + [(3,), (len(hold),), (self.C,)]
        self.ends = np.cumsum([int(np.prod(shape)) for shape in self.shapes])
        self.is_temperature = np.concatenate([np.full(shape, len(shape) == 1).ravel() for shape in self.shapes[:-3]]
                                             + [np.array([True, True, False]), np.zeros(len(hold) + self.C, bool)])
        self.flow = gas[0] + (steam[0] if steam else 0.0) + 0.0
        for place, value in hold.items():
            self.flow[place] += value
        self.energy = 5e3 * self.flow.sum()

    def unpack(self, z):
        return [part.reshape(shape) for part, shape in zip(np.split(z, self.ends[:-1]), self.shapes)]

    def states(self, z):
        """Streams by name, (phase, flows, temperature), and the duties, from the unknowns."""
        wl, wv, wT, sl, sv, sT, *drum, (hot_out, cold_out, duty), added, recycled = self.unpack(z)
        rich, lean = wl[-1], sl[-1]
        left = (1 - self.bleed) * lean
        full = left + 0
        for place, amount in zip(self.hold, added):
            full[place] += amount
        out = {
            "gas": ("gas", *self.gas), "cleaned": ("gas", wv[0], wT[0]), "rich": ("liquid", rich, wT[-1]),
            "overhead": ("gas", sv[0], sT[0]), "lean": ("liquid", lean, sT[-1]), "warm_lean": ("liquid", lean, hot_out),
            "warm_rich": ("two-phase" if drum else "liquid", rich, cold_out), "full_lean": ("liquid", full, hot_out),
            "cool_lean": ("liquid", recycled, self.cool),
        }
        m = self.m
        results = {"swap.duty_W": duty, "trim.duty_W": m.heat("liquid", full, self.cool) - m.heat("liquid", full, hot_out)}
        results |= {f"top_up.added_mol_s.{self.names[place]}": amount for place, amount in zip(self.hold, added)}
        if self.bleed:
            out |= {"spent": ("liquid", self.bleed * lean, hot_out), "kept": ("liquid", left, hot_out)}
        if self.preheat is not None:
            out["hot_rich"] = ("liquid", rich, self.preheat)
            results["preheat.duty_W"] = m.heat("liquid", rich, self.preheat) - m.heat("liquid", rich, cold_out)
        if self.steam:
            out["steam"] = ("gas", *self.steam)
        heats = self.strip.heats(sl, sv, sT, self.fed_to_strip(z)[1])
        if self.strip.condenser is not None:
            results["strip.condenser_duty_W"] = heats[0]
        if self.strip.reboiler is not None:
            results["strip.reboiler_duty_W"] = heats[-1]
        return out, results

    def fed_to_strip(self, z):
        """Flows (n, C) and heat (n,) fed to the stripper: the warmed rich liquid by its enthalpy, and steam."""
        wl, _, wT, *_, (_, _, duty), _, _ = self.unpack(z)
        fed, heat = np.zeros((self.strip.n, self.C), z.dtype), np.zeros(self.strip.n, z.dtype)
        fed[self.fed_at] = wl[-1]
        heat[self.fed_at] = self.m.heat("liquid", wl[-1], wT[-1]) + duty
        if self.preheat is not None:
            heat[self.fed_at] = self.m.heat("liquid", wl[-1], self.preheat)
        if self.steam:
            fed[-1] += self.steam[0]
            heat[-1] += self.m.heat("gas", *self.steam)
        return fed, heat

    def residual(self, z):
        wl, wv, wT, sl, sv, sT, *drum, (hot_out, cold_out, duty), added, recycled = self.unpack(z)
        m, energy = self.m, self.energy
        fed, heat = np.zeros((self.wash.n, self.C), z.dtype), np.zeros(self.wash.n, z.dtype)
        fed[0], heat[0] = recycled, m.heat("liquid", recycled, self.cool)
        fed[-1] += self.gas[0]
        heat[-1] += m.heat("gas", *self.gas)
        rows = [self.wash.rows(wl, wv, wT, fed, heat, self.flow, energy)]
        rows.append(self.strip.rows(sl, sv, sT, *self.fed_to_strip(z), self.flow, energy))
        rich, lean, hot_in, cold_in = wl[-1], sl[-1], sT[-1], wT[-1]
        given = m.heat("liquid", lean, hot_in) - m.heat("liquid", lean, hot_out)
        if drum:
            entered = m.heat("liquid", rich, cold_in) + duty
            rows.append(self.drum.rows(*drum, rich[None], entered[None], self.flow, energy))
            taken = (cold_out - drum[2][0]) / 100
        else:
            taken = (m.heat("liquid", rich, cold_out) - m.heat("liquid", rich, cold_in) - duty) / energy
        ends = {"hot_end": hot_in - cold_out, "cold_end": hot_out - cold_in}
        ends["least"] = min(ends.values(), key=lambda item: item.real)
        what, value = self.exchanger
        if what == "UA":  # log-mean difference, exact where both capacities are constant
            one, other = ends["hot_end"], ends["cold_end"]
            law = duty / value - (one - other) / np.log(one / other)
        else:
            law = ends[what] - value
        rows.append(np.array([(given - duty) / energy, taken, law / 100]))
        full = self.states(z)[0]["full_lean"][1]
        rows.append(np.array([(recycled[place] - value) / value for place, value in self.hold.items()]))
        rows.append((full - recycled) / self.flow)
        return np.concatenate(rows)

    def find(self, start):
        """Solve from a start with scipy alone; give the unknowns and the greatest residual."""
        size = np.maximum(np.abs(start), 1e-4 * self.flow.sum())
        found = root(lambda z: self.residual(z * size), start / size, method="hybr", options={"xtol": 1e-12, "maxfev": 40000})
        return found.x * size, np.abs(found.fun).max()

    def perturbed(self, z, seed, share=0.03):
        """Unknowns moved at random by up to `share`, temperatures by a sixth of it, so that the exchanger does not cross."""
        moved = np.random.default_rng(seed).uniform(-share, share, z.size)
        return z * (1 + np.where(self.is_temperature, moved / 6, moved))

    def solve(self, start):
        """Solve and polish; raise ArithmeticError where the equations are not met to 1e-12."""
        z = polish(self.residual, self.find(start)[0])
        if not np.abs(self.residual(z)).max() < 1e-12:
            raise ArithmeticError("the independent solution was not found")
        return z

    def start(self, profiles, streams, results, vapour=0.0):
        """Unknowns from profiles (l, v, T) of wash and stripper, streams by name, unit results, and the vapour fraction flashed."""
        parts = [*profiles["wash"], *profiles["strip"]]
        if self.drum:
            flows, T = streams["warm_rich"]
            K = np.where(self.drum.mixture.in_liquid, 0.0, self.drum.mixture.pressures(np.array(T)) / self.drum.P)
            gas = flows * K * vapour / (1 + (K - 1) * vapour)
            parts += [(flows - gas)[None], gas[None], np.array([T])]
        parts += [np.array([streams["warm_lean"][1], streams["warm_rich"][1], results["swap.duty_W"]])]
        parts += [np.array([results[f"top_up.added_mol_s.{self.names[place]}"] for place in self.hold]), streams["cool_lean"][0]]
        return np.concatenate([np.ravel(part) for part in parts])


def staying(species, name, phase):
    """The same components, one of them kept to one phase."""
    return [replace(s, stays=phase) if s.name == name else s for s in species]
