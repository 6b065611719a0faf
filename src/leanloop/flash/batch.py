"""Inputs of a batch of flashes on common axes: real parts for the solution, imaginary ones for derivatives."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.flash.mixture import Mixture
from leanloop.flash.phases import Feed

ROUNDING = 1e-12  # of a stream's flow: less than nothing by no more than this is rounding


class Batch:
    """Streams and the conditions that they are flashed at.

    Leading axes along which real parts do not change, as those of derivatives, are solved once.

    Parameters
    ----------
    mixture : Mixture
    flows : (..., C) mol/s
    numbers : mapping of str to (...,) array, float or list
        By local name.
    **given : (...,)
        Conditions, by name.

    Attributes
    ----------
    shape : tuple of int
        Of all inputs together.
    feed : Feed
        Real, per mol, of M cases on one axis.
    real : dict of str to (M,)
        Conditions of the cases.
    total : (M,) mol/s
        1 where nothing flows.
    empty, valid : (M,) bool
        Where nothing flows; where every input is finite and no flow is negative.
    moved : bool
        Whether any input is complex.
    """

    def __init__(self, mixture: Mixture, flows: Any, numbers: Mapping[str, Any], **given: Any) -> None:
        self.mixture = mixture
        models, heats = mixture.model_numbers(numbers), mixture.heat_numbers(numbers)
        flows = np.asarray(flows)
        flows = flows.astype(complex if flows.dtype.kind == "c" else float, copy=False)
        self._flows, self._models, self._heats = flows, models, heats
        self._given = {name: np.asarray(value) for name, value in given.items()}
        items = [np.asarray(item) for own in (*models, heats) for item in own.values() if _arrayed(item)]
        items += [np.asarray(value) for value in self._given.values()]
        self.shape = np.broadcast_shapes(flows.shape[:-1], *(item.shape for item in items))
        self.moved = any(np.iscomplexobj(item) for item in (flows, *items))
        self._drop = 0
        if self.moved:
            while len(self.shape) - self._drop > 1 and all(
                self._level(item, len(self.shape) - self._drop) for item in (flows[..., 0], *np.moveaxis(flows, -1, 0), *items)
            ):
                self._drop += 1
        self.cases = self.shape[self._drop :]
        self._fill(items)

    def _level(self, item: np.ndarray, axes: int) -> bool:
        """Tell whether the real part does not change along the first of so many axes."""
        item = item[(0,) * max(item.ndim - axes, 0)] if item.ndim > axes else item
        return item.ndim < axes or bool(np.array_equal(item.real, np.broadcast_to(item.real[:1], item.shape), equal_nan=True))

    def _flat(self, item: Any) -> np.ndarray:
        """Give the real part of an input for the M cases."""
        item = np.real(item)
        item = item[(0,) * max(item.ndim - len(self.cases), 0)]
        return np.broadcast_to(item, self.cases).reshape(-1).astype(float)

    def _fill(self, items: list[np.ndarray]) -> None:
        mixture, count = self.mixture, self._flows.shape[-1]
        flows = np.stack([self._flat(self._flows[..., place]) for place in range(count)], axis=-1)
        self.real = {name: self._flat(value) for name, value in self._given.items()}
        with np.errstate(all="ignore"):
            total = flows.sum(axis=-1)
            least = -ROUNDING * np.abs(flows).sum(axis=-1, keepdims=True)
            self.valid = np.isfinite(flows).all(axis=-1) & (flows >= least).all(axis=-1)
            self.valid &= ~(flows[:, mixture.nowhere] != 0).any(axis=-1)
            for item in (*self.real.values(), *(self._flat(item) for item in items)):
                self.valid &= np.isfinite(item)
            self.empty = ~(self.valid & (total > 0))
            self.total = np.where(self.empty, 1.0, total)
            flows = np.where(self.empty[:, None], 0.0, flows) / self.total[:, None]

        def flat(own: Mapping[str, Any]) -> dict[str, Any]:
            return {key: self._flat(item) if _arrayed(item) and np.ndim(item) else _real(item) for key, item in own.items()}

        self.feed = Feed(mixture, flows, [flat(own) for own in self._models], flat(self._heats))

    def complex_feed(self) -> tuple[Feed, np.ndarray]:
        """Give the streams per mol with their imaginary parts, and their total flows, (...,) mol/s."""
        flows = np.broadcast_to(self._flows, (*self.shape, self._flows.shape[-1])).astype(complex)
        flows = np.where(self.spread(self.empty)[..., None], 0.0, flows)
        total = np.where(self.spread(self.empty), 1.0, flows.sum(axis=-1))
        return Feed(self.mixture, flows / total[..., None], self._models, self._heats), total

    def complex_given(self, name: str) -> np.ndarray:
        """Give a condition with its imaginary part on all axes."""
        return np.broadcast_to(self._given[name], self.shape).astype(complex)

    def given_flows(self) -> np.ndarray:
        """Give the flows as they came: of the M cases, or on all axes where an input is complex."""
        flows = np.broadcast_to(self._flows, (*self.shape, self._flows.shape[-1]))
        return flows.astype(complex) if self.moved else flows.reshape(-1, flows.shape[-1])

    def spread(self, values: np.ndarray) -> np.ndarray:
        """Give what belongs to the M cases, (M, ...), on all axes."""
        values = values.reshape((*self.cases, *values.shape[1:]))
        return np.broadcast_to(values, (*self.shape, *values.shape[len(self.cases) :]))


def _arrayed(item: Any) -> bool:
    return isinstance(item, (np.ndarray, np.generic, float, int, complex))


def _real(item: Any) -> Any:
    return item.real if isinstance(item, (np.ndarray, np.generic, complex)) else item
