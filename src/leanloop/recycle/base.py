"""Contract of the recycle methods: the next x for x = g(x), on plain vectors and the case axis."""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass, field
from typing import Any, ClassVar

import numpy as np

from leanloop.entries import Context, Entry, read_values
from leanloop.errors import InputError

State = dict[str, np.ndarray]


@dataclass(frozen=True)
class Trial:
    """One pass: what a method sees of it.

    Parameters
    ----------
    x : (m, n)
        Vector that went in.
    g : (m, n)
        Vector that came out.
    jacobian : (m, n, n) or None
        dg_i/dx_j, where the method asks for it.
    error : (m,)
        The driver's measure of g - x; converged at the tolerance.
    scale : (m, n)
        What a difference in each component is measured by.
    low : (n,)
        Lower bounds that x must keep, -inf for none.
    """

    x: np.ndarray
    g: np.ndarray
    jacobian: np.ndarray | None
    error: np.ndarray
    scale: np.ndarray
    low: np.ndarray = field(default_factory=lambda: np.array(-np.inf))

    @property
    def yardstick(self) -> np.ndarray:
        """What to divide each component by: its scale, or 1 where that is nothing (m, n)."""
        return np.where(self.scale > 0, self.scale, 1.0)


class RecycleMethod(ABC):
    """Frozen configuration of a method; what it remembers of a run goes in and out.

    A method proposes; it never judges convergence, which is the driver's alone.

    Parameters
    ----------
    **options
        Values of `entries`, kept as attributes; the default of each is a class attribute of its name.

    Raises
    ------
    InputError
        Where an option is unknown or out of range.

    Attributes
    ----------
    name : str
    needs_jacobian : bool
    most_passes : int
        Passes allowed where the user does not say.
    entries : tuple of Entry
        The method's own options in the loop table.
    """

    name: ClassVar[str] = ""
    needs_jacobian: ClassVar[bool] = False
    most_passes: ClassVar[int] = 50
    entries: ClassVar[tuple[Entry, ...]] = ()

    def __init__(self, **options: Any) -> None:
        context = Context(plain_si=True)
        values = read_values(self.entries, options, "loop", context)
        if context.faults:
            raise InputError(context.faults)
        self.__dict__.update({**values.numbers, **values.words})

    def begin(self, x: np.ndarray) -> State:
        """Give the state before the first pass.

        Parameters
        ----------
        x : (m, n)

        Returns
        -------
        dict of str to (m, ...) array
            The driver drops the rows of cases that are done.
        """
        return {}

    @abstractmethod
    def propose(self, trial: Trial, state: State) -> tuple[np.ndarray, State]:
        """Give the next x.

        Parameters
        ----------
        trial : Trial
        state : dict of str to (m, ...) array

        Returns
        -------
        x : (m, n)
        state : dict of str to (m, ...) array
        """
