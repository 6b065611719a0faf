"""Numbers of a flowsheet by address, some of them with a value for each case."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np


class Inputs:
    """SI numbers of M cases.

    Parameters
    ----------
    base : mapping of str to float or list
        Every number of the flowsheet.
    arrays : mapping of str to (M,) array
        Those that differ from case to case.
    cases : int
        M.
    touched : frozenset of str
        Addresses that were set anew, with one value or many.
    """

    def __init__(
        self, base: Mapping[str, Any], arrays: Mapping[str, np.ndarray], cases: int, touched: frozenset[str] = frozenset()
    ) -> None:
        self.base, self.arrays, self.cases, self.touched = base, dict(arrays), cases, touched

    def of(self, addresses: Mapping[str, str], cases: np.ndarray | None = None) -> dict[str, Any]:
        """Give numbers by local name.

        Parameters
        ----------
        addresses : mapping of str to str
            Address by local name.
        cases : (m,) int, optional
            Cases to take; all by default.

        Returns
        -------
        dict of str to float, list or (m,) array
        """
        out = {}
        for local, address in addresses.items():
            if address in self.arrays:
                values = self.arrays[address]
                out[local] = values if cases is None else values[cases]
            elif address in self.base or ":" not in address:  # what has a colon is there only when it is needed
                out[local] = self.base[address]
        return out

    def value(self, address: str) -> np.ndarray:
        """Give one input for all cases, (M,)."""
        return np.broadcast_to(np.asarray(self.arrays.get(address, self.base[address]), dtype=float), (self.cases,))

    def repeated(self, cases: np.ndarray, arrays: Mapping[str, np.ndarray]) -> Inputs:
        """Give the inputs of cases taken several times, with some numbers set anew.

        Parameters
        ----------
        cases : (K,) int
        arrays : mapping of str to (K,) array
        """
        taken = {address: values[cases] for address, values in self.arrays.items()}
        return Inputs(self.base, {**taken, **arrays}, len(cases), self.touched | frozenset(arrays))
