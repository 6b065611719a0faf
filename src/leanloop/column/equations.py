"""Stage equations of a counter-current column and their derivatives.

Stage 1 is the top. Unknowns of a stage: the total gas flow V it sends up and the liquid flow l of
each distributing component it sends down; stage temperatures would join in front of them. Rows:

    summation   gas_inert + sum of v - V = 0
    material    l(above) + v(below) + feed - l - v = 0     for each distributing component

with v the explicit gas flows of `leanloop.column.law`. Only l couples downwards.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from leanloop.column.law import BoundLaw


@dataclass
class Stages:
    """What is given of a batch of columns.

    Parameters
    ----------
    feeds : (M, N, D) mol/s
        Distributing components fed to each stage, in whichever phase.
    gas_inert, liquid_inert : (M, N) mol/s
        Flow of the components that stay in the phase, leaving each stage.
    gas_basis, liquid_basis : (M, N) mol/s
        Part of those flows that belongs to the basis of the mole ratios.
    law : BoundLaw
    depth : (M,) int or None
        Stages of each case, where they differ: below them no gas rises, and the liquid runs through as it is.
    """

    feeds: np.ndarray
    gas_inert: np.ndarray
    liquid_inert: np.ndarray
    gas_basis: np.ndarray
    liquid_basis: np.ndarray
    law: BoundLaw
    depth: np.ndarray | None = None

    @property
    def below(self) -> np.ndarray | None:
        """Places under a case's own bottom stage, (M, N) bool; None where there are none."""
        return None if self.depth is None else np.arange(self.feeds.shape[1]) >= self.depth[:, None]

    @property
    def shape(self) -> tuple[int, int, int]:
        """Cases, stages, distributing components."""
        return self.feeds.shape

    def take(self, cases: np.ndarray) -> Stages:
        """Give the columns of some cases.

        Parameters
        ----------
        cases : (m,) int
        """
        law = self.law
        numbers = [
            {key: value[cases] if isinstance(value, np.ndarray) else value for key, value in own.items()}
            for own in law.numbers
        ]
        bound = BoundLaw(law.law, law.temperature[cases], law.pressure[cases], numbers)
        return Stages(
            self.feeds[cases],
            self.gas_inert[cases],
            self.liquid_inert[cases],
            self.gas_basis[cases],
            self.liquid_basis[cases],
            bound,
            None if self.depth is None else self.depth[cases],
        )


@dataclass
class Phases:
    """Gas flows in equilibrium with given liquid flows, and what their derivatives need.

    Attributes
    ----------
    unknowns : (M, N, 1 + D) mol/s
        V and l.
    gas_flow : (M, N, D) mol/s
        v.
    liquid : (M, N, D)
        Liquid coordinates, mole fractions or ratios.
    coordinate : (M, N, D)
        Gas coordinates.
    slope : (M, N, D) or broadcastable
    total_liquid, basis_liquid, basis_gas : (M, N) mol/s
    """

    unknowns: np.ndarray
    gas_flow: np.ndarray
    liquid: np.ndarray
    coordinate: np.ndarray
    slope: np.ndarray
    total_liquid: np.ndarray
    basis_liquid: np.ndarray | None
    basis_gas: np.ndarray | None


def phases(stages: Stages, unknowns: np.ndarray) -> Phases:
    """Evaluate the equilibrium on all stages.

    Parameters
    ----------
    stages : Stages
    unknowns : (M, N, 1 + D) mol/s
    """
    law = stages.law
    gas_total, flows = unknowns[..., 0], unknowns[..., 1:]
    total = stages.liquid_inert + flows.sum(axis=-1)
    if law.plain:
        x = flows / total[..., None]
        y, slope = law.gas(x)
        return Phases(unknowns, y * gas_total[..., None], x, y, slope, total, None, None)
    basis_liquid = stages.liquid_basis + flows @ law.law.liquid_basis
    x = np.where(law.ratio, flows / basis_liquid[..., None], flows / total[..., None])
    y, slope = law.gas(x)
    in_basis = law.law.gas_basis
    fixed = stages.gas_basis + gas_total * (y @ (in_basis & ~law.ratio))
    basis_gas = fixed / (1.0 - y @ (in_basis & law.ratio))
    v = y * np.where(law.ratio, basis_gas[..., None], gas_total[..., None])
    return Phases(unknowns, v, x, y, slope, total, basis_liquid, basis_gas)


def gas_change(
    stages: Stages,
    at: Phases,
    total_gas: np.ndarray | float,
    flows: np.ndarray | float,
    liquid_inert: np.ndarray | float,
    liquid_basis: np.ndarray | float,
    gas_basis: np.ndarray | float,
    shift: np.ndarray | float,
) -> np.ndarray:
    """Give the change of the gas flows v, to first order, with everything they depend on.

    Parameters
    ----------
    stages : Stages
    at : Phases
    total_gas, liquid_inert, liquid_basis, gas_basis : (..., M, N) mol/s
        Changes of V and of the flows that stay in one phase.
    flows : (..., M, N, D) mol/s
        Changes of l.
    shift : (..., M, N, D)
        Changes of the gas coordinates at fixed liquid ones.

    Returns
    -------
    (..., M, N, D) mol/s
    """
    law, gas_total = stages.law, at.unknowns[..., 0]
    grown = np.asarray(liquid_inert + flows.sum(axis=-1) if isinstance(flows, np.ndarray) else liquid_inert)[..., None]
    x_change = (flows - at.liquid * grown) / at.total_liquid[..., None]
    if law.plain and not isinstance(total_gas, np.ndarray):
        return gas_total[..., None] * (shift + at.slope * x_change)
    total_gas = np.asarray(total_gas)[..., None]
    if law.plain:
        return at.coordinate * total_gas + gas_total[..., None] * (shift + at.slope * x_change)
    grown = np.asarray(
        liquid_basis + flows @ law.law.liquid_basis.astype(float) if np.ndim(flows) else liquid_basis
    )[..., None]
    x_change = np.where(law.ratio, (flows - at.liquid * grown) / at.basis_liquid[..., None], x_change)
    y_change = shift + at.slope * x_change
    in_basis = law.law.gas_basis
    fraction, ratio = (in_basis & ~law.ratio).astype(float), (in_basis & law.ratio).astype(float)
    basis_change = (
        gas_basis + gas_total * (y_change @ fraction) + total_gas[..., 0] * (at.coordinate @ fraction)
        + at.basis_gas * (y_change @ ratio)
    ) / (1.0 - at.coordinate @ ratio)  # fmt: skip
    return np.where(
        law.ratio,
        at.coordinate * basis_change[..., None] + at.basis_gas[..., None] * y_change,
        at.coordinate * total_gas + gas_total[..., None] * y_change,
    )


def gas_derivatives(stages: Stages, at: Phases) -> np.ndarray:
    """Differentiate the gas flows by the unknowns of their stage.

    Returns
    -------
    (M, N, 1 + D, D) by [case, stage, unknown, component]
    """
    cases, count, parts = stages.shape
    if stages.law.plain:
        out = np.empty((cases, count, parts + 1, parts))
        out[:, :, 0] = at.coordinate
        steep = (at.unknowns[..., 0] / at.total_liquid)[..., None] * at.slope
        out[:, :, 1:] = (-steep * at.liquid)[:, :, None, :]
        diagonal = np.arange(parts)
        out[:, :, 1 + diagonal, diagonal] += steep
        return _without_gas(stages, out)
    unit = np.eye(parts + 1)[:, None, None, :]
    out = gas_change(stages, at, unit[..., 0], unit[..., 1:], 0.0, 0.0, 0.0, 0.0)
    return _without_gas(stages, np.moveaxis(np.broadcast_to(out, (parts + 1, cases, count, parts)), 0, 2).copy())


def _without_gas(stages: Stages, derivatives: np.ndarray) -> np.ndarray:
    """Take away what gas would do where none can be."""
    if stages.depth is not None:
        derivatives[stages.below] = 0.0
    return derivatives


def rows(inert: np.ndarray | float, feeds: np.ndarray | float, gas_flow: np.ndarray) -> np.ndarray:
    """Assemble the part of the rows that does not stem from the unknowns themselves.

    Parameters
    ----------
    inert : (..., M, N) mol/s
    feeds : (..., M, N, D) mol/s
    gas_flow : (..., M, N, D) mol/s

    Returns
    -------
    (..., M, N, 1 + D) mol/s
    """
    out = np.empty((*gas_flow.shape[:-1], gas_flow.shape[-1] + 1))
    out[..., 0] = inert + gas_flow.sum(axis=-1)
    out[..., 1:] = feeds - gas_flow
    out[..., :-1, 1:] += gas_flow[..., 1:, :]
    return out


def residual(stages: Stages, at: Phases) -> np.ndarray:
    """Evaluate the stage equations.

    Returns
    -------
    (M, N, 1 + D) mol/s
    """
    out = rows(stages.gas_inert, stages.feeds, at.gas_flow)
    out -= at.unknowns
    out[:, 1:, 1:] += at.unknowns[:, :-1, 1:]
    return out
