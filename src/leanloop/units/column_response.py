"""How a column answers small changes of what it is fed, by the last factorisation of its stages."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

import numpy as np

from leanloop.column.equations import Phases, Stages, gas_change, rows
from leanloop.column.newton import Answer
from leanloop.status import OK
from leanloop.stream import Stream
from leanloop.units.base import Numbers

if TYPE_CHECKING:
    from leanloop.units.column import Column


def inert_flows(
    gas: np.ndarray,
    liquid: np.ndarray,
    count: int,
    in_gas: np.ndarray,
    in_liquid: np.ndarray,
    depth: np.ndarray | None = None,
) -> tuple[np.ndarray, np.ndarray]:
    """Spread flows that stay in a phase over the stages; what comes in with the other phase leaves at once."""
    up = np.empty((*gas.shape[:-1], count))
    up[...] = (gas @ in_gas)[..., None]
    up[..., 0] += liquid @ in_gas
    down = np.empty((*gas.shape[:-1], count))
    down[...] = (liquid @ in_liquid)[..., None]
    if depth is None:
        down[..., -1] += gas @ in_liquid
        return up, down
    ends = np.arange(count) >= depth[:, None] - 1  # from each case's own bottom stage on
    down += np.where(ends, (gas @ in_liquid)[..., None], 0.0)
    return np.where(np.arange(count) >= depth[:, None], 0.0, up), down


class Response:
    """Derivatives of a column along seeds: what they change in the stage equations, and what answers.

    Parameters
    ----------
    column : Column
    stages : Stages
    inlets, numbers, tangents, number_tangents, seeds
        As for `Unit.evaluate`.
    """

    def __init__(
        self,
        column: Column,
        stages: Stages,
        inlets: Mapping[str, Stream],
        numbers: Numbers,
        tangents: Mapping[str, np.ndarray | None],
        number_tangents: Mapping[str, np.ndarray],
        seeds: int,
    ) -> None:
        self.column, self.stages = column, stages
        cases, count, parts = stages.shape
        self.still = still = np.zeros((seeds, cases, len(column.stays_gas) + 2))
        gas, liquid = tangents.get("gas_in"), tangents.get("liquid_in")
        gas, liquid = still if gas is None else gas, still if liquid is None else liquid
        gas_flows, liquid_flows = gas[..., :-2], liquid[..., :-2]
        self.fed = gas_flows + liquid_flows
        self.feeds = np.zeros((seeds, cases, count, parts))
        self.feeds[:, :, 0] = liquid[..., column.places]
        self.feeds[:, np.arange(cases), -1 if stages.depth is None else stages.depth - 1] += gas[..., column.places]
        self.up, self.down = inert_flows(gas_flows, liquid_flows, count, *column.weights, stages.depth)
        self.up_basis, self.down_basis = self.up, self.down
        if not stages.law.plain:
            self.up_basis, self.down_basis = inert_flows(gas_flows, liquid_flows, count, *column.basis_weights, stages.depth)
        own = still[..., -2] if "temperature" in numbers else liquid[..., -2]
        self.temperature = number_tangents.get("temperature", own)
        own = still[..., -1] if "pressure" in numbers else gas[..., -1]
        self.pressure = number_tangents.get("pressure", own)
        self.models = [
            {key: number_tangents[f"{name}.{key}"] for key in model.numbers if f"{name}.{key}" in number_tangents}
            for name, model in zip(column.model_names, column.models, strict=True)
        ]
        self.shifts = any(self.models) or self.temperature.any() or self.pressure.any()

    def _shift(self, at: Phases) -> np.ndarray | float:
        """Give the change of the gas coordinates at fixed liquid ones."""
        if not self.shifts:
            return 0.0
        return self.stages.law.shifted(at.liquid, self.temperature[..., None], self.pressure[..., None], self.models)

    def right(self, at: Phases) -> np.ndarray:
        """Give the change of the stage equations at fixed unknowns, (S, M, N, 1 + D)."""
        direct = gas_change(
            self.stages, at, 0.0, 0.0, self.down, self.down_basis, self.up_basis, self._shift(at)
        )
        return rows(self.up, self.feeds, direct)

    def chained(
        self, answer: Answer, first: Stages, at_top: Phases
    ) -> tuple[dict[str, np.ndarray | None], np.ndarray]:
        """Give the derivatives of the outlets by label, and of the unknowns."""
        moved = answer.respond(self.right(answer.at)) if answer.moved is None else answer.moved
        failed = answer.status != OK
        if failed.any():
            moved[:, failed] = 0.0
        top = slice(0, 1)
        leaving = gas_change(
            first,
            at_top,
            moved[:, :, top, 0],
            moved[:, :, top, 1:],
            self.down[..., top],
            self.down_basis[..., top],
            self.up_basis[..., top],
            self._shift(at_top),
        )[:, :, 0]
        found: dict[str, np.ndarray | None] = {}
        sides = zip(("gas_out", "liquid_out"), self.column.weights, (leaving, moved[:, :, -1, 1:]), strict=True)
        for label, weights, own in sides:
            way = np.empty_like(self.still)
            np.multiply(self.fed, weights, out=way[..., :-2])
            way[..., self.column.places] = own
            way[..., -2], way[..., -1] = self.temperature, self.pressure
            found[label] = way
        return found, moved
