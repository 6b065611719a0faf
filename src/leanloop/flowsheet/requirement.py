"""What a requirement is, how it ended, and what is known of quantities at tried inputs."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Protocol

import numpy as np

from leanloop.flowsheet.inputs import Inputs
from leanloop.flowsheet.quantity import Formula


@dataclass(frozen=True)
class Requirement:
    """A result that must take a value, and the input that is freed to reach it.

    Parameters
    ----------
    name : str
    address : str
        Of the quantity.
    quantity : Formula
    free : str
        Address of the freed input.
    low, high : float
        SI bounds of the freed input.
    kind : str
        ``"equals"``, ``"at_most"`` or ``"at_least"``.
    """

    name: str
    address: str
    quantity: Formula
    free: str
    low: float
    high: float
    kind: str = "equals"

    @property
    def target(self) -> str:
        """Address of the target value."""
        return f"requirements.{self.name}.{self.kind}"


@dataclass
class Found:
    """How a requirement ended for M cases.

    Attributes
    ----------
    reached, active : (M,) bool
    value, free_value : (M,)
    reason : (M,) of object
        ``"bound"``, ``"pinch"``, ``"turning_point"`` or None.
    others : list of M lists
        Freed inputs of further solutions.
    note : dict of int to str
        By case, what is known of why it was not reached.
    """

    reached: np.ndarray
    active: np.ndarray
    value: np.ndarray
    free_value: np.ndarray
    reason: np.ndarray
    others: list[list[float]] = field(default_factory=list)
    note: dict[int, str] = field(default_factory=dict)


@dataclass
class Probe:
    """Quantities at some freed inputs: q (K, P), slopes (K, P, P), good (K,)."""

    q: np.ndarray
    slopes: np.ndarray
    good: np.ndarray


class Prober(Protocol):
    """Who closes the loops of a region at tried inputs."""

    found: dict[str, Found]
    inputs: Inputs

    def probe(self, active: list[Requirement], cases: np.ndarray, p: np.ndarray) -> Probe:
        """Close the loops at freed inputs p (K, P) of given cases (K,)."""
