"""Stage equations with heat, efficiencies, draws, condenser and reboiler, for a batch of columns.

Stages count from the top; a condenser is the first of them and a reboiler the last. Unknowns of a stage, in this order:

    w   gas flows that are not explicit: components with a Murphree efficiency, and what stays in the gas where gas
        is drawn off
    V   total gas flow
    T   temperature
    l   liquid flows of what distributes, and of what stays in the liquid where liquid is drawn off

All other flows are known or explicit. Where a component is in equilibrium its gas flow is v = y*(x, T, P) V, or
v = Y*(X) G on mole ratios (`leanloop.column.law`). Rows:

    heat        duty + heat of feeds + h(above) + H(below) - h - H = 0, or what is given in its place
    material    l(above) + v(below) + feed - l - v = 0             for each l
    summation   a + b - sqrt(a^2 + b^2 + 2 c) = 0,  a = V / scale, b = 1 - sum of y wanted, c = what stays a gas / scale
    gas         v - V ((1 - E) y(below) + E y*) = 0                for each w with an efficiency E
                v(below) + feed - v = 0                            for each w that stays in the gas

For c > 0 the summation is a b = c, the sum of all gas flows; where nothing keeps a gas, it says that either V is zero
and the liquid is below its bubble point, or the gas fractions sum to one, so that stages may be subcooled (smoothing of
complementarity by C. Chen and O. L. Mangasarian and by C. Kanzow, SIAM J. Matrix Anal. Appl. 17 (1996) 851, from memory).

A draw takes a part of what leaves a stage; the rest passes on. With the names of E. V. Murphree, Ind. Eng. Chem. 17
(1925) 747 for the efficiency, and the equations of L. M. Naphtali and D. P. Sandholm, AIChE J. 17 (1971) 148, in other
unknowns (both from memory).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from leanloop.column.law import BoundLaw, Law

HEAT, TEMPERATURE, REFLUX, BOIL_UP, VAPOUR = "heat", "temperature", "reflux", "boil_up", "vapour"
TINY = 1e-300
EMPTY = 1e-14  # of all that is fed: added to each liquid's total, so that a stage without liquid is regular
HEAT_SCALE = 2500.0  # J/mol, about R times 300 K: the heat row in the size of the others
Enthalpy = Callable[[np.ndarray, Mapping[str, Any]], np.ndarray]


@dataclass(frozen=True)
class Form:
    """What all cases of a batch share.

    Parameters
    ----------
    law : Law
        Of the D distributing components.
    places : (D,) int
        Where they stand among the C components.
    gas_only, liquid_only : (G,), (L,) int
        Places of what stays in a phase.
    gas_basis, liquid_basis : (C,) bool
    roles : tuple of S str
        What the first row of each stage is: `HEAT`, `TEMPERATURE`, `REFLUX`, `BOIL_UP` or `VAPOUR`.
    murphree : (D,) bool
        Which components have an efficiency on some stage.
    draws_liquid, draws_gas : bool
    liquid_enthalpy, gas_enthalpy : callable or None
        Of (temperature, numbers) to (..., C) J/mol; None where no heat is known.
    """

    law: Law
    places: np.ndarray
    gas_only: np.ndarray
    liquid_only: np.ndarray
    gas_basis: np.ndarray
    liquid_basis: np.ndarray
    roles: tuple[str, ...]
    murphree: np.ndarray
    draws_liquid: bool = False
    draws_gas: bool = False
    liquid_enthalpy: Enthalpy | None = None
    gas_enthalpy: Enthalpy | None = None

    @property
    def implicit(self) -> np.ndarray:
        """Places of the gas flows that are unknowns, in their order."""
        own = self.places[self.murphree]
        return np.concatenate([own, self.gas_only]) if self.draws_gas else own

    @property
    def falling(self) -> np.ndarray:
        """Places of the liquid flows that are unknowns, in their order."""
        return np.concatenate([self.places, self.liquid_only]) if self.draws_liquid else self.places

    @property
    def unknowns(self) -> int:
        """Unknowns of a stage."""
        return len(self.implicit) + 2 + len(self.falling)

    @property
    def warms(self) -> bool:
        """Whether some stage balances heat."""
        return HEAT in self.roles

    def rows(self, role: str) -> np.ndarray:
        """Give the stages of a role, (S,) bool."""
        return np.array([own == role for own in self.roles], dtype=bool)


@dataclass
class Tower:
    """What is given of M columns of S stages; further leading axes are allowed, complex numbers too.

    Parameters
    ----------
    form : Form
    numbers : list of D mappings
        Of each model, as for `Law.at`; arrays (..., M).
    heat_numbers : mapping of str to float or (..., M) array
        For the enthalpies.
    fed : (..., M, S, C) mol/s
        All that enters each stage from outside.
    blown : (..., M, S, C) mol/s
        Part of it that comes as the gas below the bottom tray, and counts as y(below) there.
    fed_heat : (..., M, S) W
    pressure : (..., M, S) Pa
    spec : (..., M, S)
        Duty in W, temperature in K, reflux over gas, boil-up over bottoms, or gas flow in mol/s, by role.
    liquid_draw, gas_draw : (..., M, S) mol/s
    efficiency : (..., M, S, D)
    blend : (M,) or None
        Part of the first rows that is their own, and of what efficiencies lack; the rest of each first row holds the gas
        flow of its stage at `held`. One, or None, for the equations as they are: the path of a continuation.
    held : (M, S) mol/s or None
    wide : (M,) bool or None
        Whether what reboiler and condenser are run by is blended as well.
    """

    form: Form
    numbers: list[Mapping[str, Any]]
    heat_numbers: Mapping[str, Any]
    fed: np.ndarray
    blown: np.ndarray
    fed_heat: np.ndarray
    pressure: np.ndarray
    spec: np.ndarray
    liquid_draw: np.ndarray
    gas_draw: np.ndarray
    efficiency: np.ndarray
    blend: np.ndarray | None = None
    held: np.ndarray | None = None
    wide: np.ndarray | None = None

    def parts(self) -> np.ndarray:
        """Give the part of each first row that is its own, (M, S), while a blend is on."""
        return np.where(self.form.rows(HEAT) | self.wide[..., None], self.blend[..., None], 1.0)

    def take(self, cases: np.ndarray) -> Tower:
        """Give the columns of some cases, (m,) int; only without further leading axes."""

        def own(values: Any) -> Any:
            return values[cases] if isinstance(values, np.ndarray) else values

        return replace(
            self,
            numbers=[{key: own(value) for key, value in item.items()} for item in self.numbers],
            heat_numbers={key: own(value) for key, value in self.heat_numbers.items()},
            **{
                name: own(getattr(self, name))
                for name in (
                    "fed", "blown", "fed_heat", "pressure", "spec", "liquid_draw", "gas_draw", "efficiency",
                    "blend", "held", "wide",
                )
            },  # fmt: skip
        )

    def efficient(self) -> np.ndarray:
        """Give the efficiencies of the components that have one, those of the blend, (..., M, S, E)."""
        own = self.efficiency[..., self.form.murphree]
        return own if self.blend is None else 1.0 - self.blend[..., None, None] * (1.0 - own)

    def bound(self, temperature: np.ndarray) -> BoundLaw:
        """Give the equilibrium at stage temperatures, (..., M, S) K."""
        shape = np.broadcast_shapes(temperature.shape, self.pressure.shape)
        return self.form.law.at(np.broadcast_to(temperature, shape), self.pressure, self.numbers)

    def heat(self, function: Enthalpy, temperature: np.ndarray) -> np.ndarray:
        """Give enthalpies on the stages, (..., M, S, C) J/mol."""
        numbers = {
            key: value[..., None] if isinstance(value, np.ndarray) else value for key, value in self.heat_numbers.items()
        }
        return function(temperature, numbers)


@dataclass
class State:
    """Flows and enthalpies at given unknowns.

    Attributes
    ----------
    unknowns : (..., M, S, n)
    liquid, gas : (..., M, S, C) mol/s
        Leaving each stage, draws included.
    total_liquid, total_gas : (..., M, S) mol/s
        The second is the unknown V.
    temperature : (..., M, S) K
    coordinate : (..., M, S, D)
        Liquid coordinates of the models.
    wanted : (..., M, S, D)
        Gas coordinates in equilibrium.
    equilibrium : (..., M, S, D) mol/s
        Gas flows in equilibrium.
    basis_liquid, basis_gas : (..., M, S) mol/s
    down, up : (..., M, S)
        Parts of liquid and gas that pass on to the next stage.
    liquid_heat, gas_heat : (..., M, S) W
        Zero where no heat is known.
    """

    unknowns: np.ndarray
    liquid: np.ndarray
    gas: np.ndarray
    total_liquid: np.ndarray
    total_gas: np.ndarray
    temperature: np.ndarray
    coordinate: np.ndarray
    wanted: np.ndarray
    equilibrium: np.ndarray
    basis_liquid: np.ndarray
    basis_gas: np.ndarray
    down: np.ndarray
    up: np.ndarray
    liquid_heat: np.ndarray
    gas_heat: np.ndarray


def split(form: Form, unknowns: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Give w, V, T and l of unknowns, (..., M, S, n)."""
    at = len(form.implicit)
    return unknowns[..., :at], unknowns[..., at], unknowns[..., at + 1], unknowns[..., at + 2 :]


def evaluate(tower: Tower, unknowns: np.ndarray) -> State:
    """Evaluate flows, equilibrium and heat on all stages; complex numbers are taken.

    Parameters
    ----------
    tower : Tower
    unknowns : (..., M, S, n)
    """
    temperature = split(tower.form, unknowns)[2]
    return assembled(tower, unknowns, lambda liquid: tower.bound(temperature).complex_gas(liquid))


def assembled(tower: Tower, unknowns: np.ndarray, law: Callable[[np.ndarray], np.ndarray]) -> State:
    """Put a state together, the equilibrium being asked of a function of the liquid coordinates."""
    form = tower.form
    w, total_gas, temperature, falling = split(form, unknowns)
    kind = np.result_type(unknowns, tower.fed)
    shape = np.broadcast_shapes(unknowns.shape[:-1], tower.fed.shape[:-1])
    liquid = np.zeros((*shape, tower.fed.shape[-1]), dtype=kind)
    liquid[..., form.falling] = falling
    if not form.draws_liquid and len(form.liquid_only):
        liquid[..., form.liquid_only] = np.cumsum(tower.fed[..., form.liquid_only], axis=-2)
    gas = np.zeros(liquid.shape, dtype=kind)
    if not form.draws_gas and len(form.gas_only):
        gas[..., form.gas_only] = np.cumsum(tower.fed[..., ::-1, form.gas_only], axis=-2)[..., ::-1, :]
    gas[..., form.implicit] = w
    total_liquid = liquid.sum(axis=-1)
    total_liquid = total_liquid + (EMPTY * np.real(tower.fed).sum(axis=(-1, -2)) + TINY)[..., None]
    ratio = form.law.ratio
    fraction = liquid[..., form.places] / total_liquid[..., None]
    basis_liquid = liquid @ form.liquid_basis if not form.law.plain else total_liquid
    z = fraction if form.law.plain else np.where(ratio, liquid[..., form.places] / basis_liquid[..., None], fraction)
    y = law(z)
    if not np.iscomplexobj(liquid):
        y = y.real
    basis_gas = total_gas
    if form.law.plain:
        equilibrium = y * total_gas[..., None]
    else:
        in_basis = form.gas_basis[form.places]
        fixed = (gas[..., form.gas_only] * form.gas_basis[form.gas_only]).sum(axis=-1)
        fixed = fixed + total_gas * (y @ (in_basis & ~ratio).astype(float))
        basis_gas = fixed / (1.0 - y @ (in_basis & ratio).astype(float))
        equilibrium = y * np.where(ratio, basis_gas[..., None], total_gas[..., None])
    explicit = ~form.murphree
    gas[..., form.places[explicit]] = equilibrium[..., explicit]
    nothing = np.zeros(shape, dtype=kind)
    down = 1.0 - tower.liquid_draw / total_liquid if form.draws_liquid else nothing + 1.0
    up = 1.0 - tower.gas_draw / total_gas if form.draws_gas else nothing + 1.0
    liquid_heat = gas_heat = nothing
    if form.liquid_enthalpy is not None:
        liquid_heat = (liquid * tower.heat(form.liquid_enthalpy, temperature)).sum(axis=-1)
        gas_heat = (gas * tower.heat(form.gas_enthalpy, temperature)).sum(axis=-1)
    return State(
        unknowns, liquid, gas, total_liquid, total_gas + nothing, temperature + nothing, z, y, equilibrium,
        basis_liquid, basis_gas, down, up, liquid_heat, gas_heat,
    )  # fmt: skip


def balances(tower: Tower, at: State) -> np.ndarray:
    """Give what heat each stage would need as its duty, (..., M, S) W."""
    out = at.liquid_heat + at.gas_heat - tower.fed_heat
    out[..., 1:] -= (at.down * at.liquid_heat)[..., :-1]
    out[..., :-1] -= (at.up * at.gas_heat)[..., 1:]
    return out


def below(tower: Tower, at: State) -> np.ndarray:
    """Give the mole fractions of the gas that enters each stage from below, (..., M, S, D)."""
    entering = tower.blown + 0.0 * at.gas
    entering[..., :-1, :] += (at.up[..., None] * at.gas)[..., 1:, :]
    total = entering.sum(axis=-1)
    return entering[..., tower.form.places] / np.where(total == 0, 1.0, total)[..., None]


def residual(tower: Tower, at: State) -> np.ndarray:
    """Evaluate the stage equations, (..., M, S, n)."""
    form = tower.form
    out = np.zeros(np.broadcast_shapes(at.unknowns.shape, (*at.total_gas.shape, form.unknowns)), dtype=at.liquid.dtype)
    out[..., 0] = first_rows(tower, at)
    falling, last = form.falling, 1 + len(form.falling)
    passing_down, passing_up = at.down[..., None] * at.liquid, at.up[..., None] * at.gas
    material = tower.fed[..., falling] - at.liquid[..., falling] - at.gas[..., falling]
    material[..., 1:, :] += passing_down[..., :-1, falling]
    material[..., :-1, :] += passing_up[..., 1:, falling]
    out[..., 1:last] = material
    out[..., last] = summation(tower, at)[0]
    own = form.places[form.murphree]
    if len(own):
        e = tower.efficient()
        under = below(tower, at)[..., form.murphree]
        wanted = (1.0 - e) * under * at.total_gas[..., None] + e * at.equilibrium[..., form.murphree]
        out[..., last + 1 : last + 1 + len(own)] = at.gas[..., own] - wanted
    if form.draws_gas:
        staying = tower.fed[..., form.gas_only] - at.gas[..., form.gas_only]
        staying[..., :-1, :] += passing_up[..., 1:, form.gas_only]
        out[..., last + 1 + len(own) :] = staying
    return out


def summation(tower: Tower, at: State) -> tuple[np.ndarray, ...]:
    """Evaluate the summation rows, and what their derivatives need: a, b, the root and the scale, (..., M, S) each."""
    form = tower.form
    scale = (0.5 * np.real(tower.fed).sum(axis=(-1, -2)) + TINY)[..., None]
    fractions = at.wanted if form.law.plain else at.equilibrium / at.total_gas[..., None]
    b = 1.0 - (fractions * ~form.murphree).sum(axis=-1)
    if form.murphree.any():
        e = tower.efficient()
        under = below(tower, at)[..., form.murphree]
        b = b - ((1.0 - e) * under + e * fractions[..., form.murphree]).sum(axis=-1)
    others = at.gas[..., form.gas_only].sum(axis=-1)
    a = at.total_gas / scale
    root = np.sqrt(a * a + b * b + 2.0 * others / scale + TINY)
    return scale * (a + b - root), a, b, root, scale


def beyond(tower: Tower) -> np.ndarray | None:
    """Tell which unknowns are nothing: what stays in a phase and is fed further on in its way, (..., M, S, n)."""
    form = tower.form
    if not (form.draws_liquid and len(form.liquid_only)) and not (form.draws_gas and len(form.gas_only)):
        return None
    out = np.zeros((*tower.fed.shape[:-1], form.unknowns), dtype=bool)
    fed = np.real(tower.fed)
    if form.draws_liquid:
        out[..., form.unknowns - len(form.liquid_only) :] = np.cumsum(fed[..., form.liquid_only], axis=-2) == 0
    if form.draws_gas:
        at = len(form.implicit)
        rising = np.cumsum(fed[..., ::-1, form.gas_only], axis=-2)[..., ::-1, :]
        out[..., at - len(form.gas_only) : at] = rising == 0
    return out


def first_rows(tower: Tower, at: State) -> np.ndarray:
    """Evaluate the first row of each stage, by its role, (..., M, S)."""
    form = tower.form
    heats = (tower.spec - balances(tower, at)) / HEAT_SCALE if form.warms else 0.0 * at.total_gas
    out = np.where(form.rows(HEAT), heats, 0.0)
    for role, row in (
        (TEMPERATURE, tower.spec - at.temperature),
        (REFLUX, tower.spec * at.total_gas * at.up - at.down * at.total_liquid),
        (BOIL_UP, tower.spec * at.down * at.total_liquid - at.total_gas),
        (VAPOUR, tower.spec - at.total_gas),
    ):
        mask = form.rows(role)
        if mask.any():
            out = np.where(mask, row, out)
    if tower.blend is not None and form.warms:
        part = tower.parts()
        out = part * out + (1.0 - part) * (tower.held - at.total_gas)
    return out
