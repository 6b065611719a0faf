"""How cases are drawn: at random, or evenly over all inputs at once."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.stats import qmc

from leanloop.entries import Context, Entry, read_values

METHODS = ("sobol", "halton", "latin", "random")
ENTRIES = (
    Entry("count", "integer", required=True, least=2, most=5_000_000, doc="number of cases"),
    Entry("method", "choice", choices=METHODS, doc="sobol, halton and latin cover the ranges evenly; random draws freely"),
    Entry("seed", "integer", least=0, doc="another seed gives another sample"),
)
EDGE = 1e-12  # a share of exactly 0 or 1 has no finite quantile


@dataclass(frozen=True)
class Sample:
    """A sample that is the same whenever it is drawn.

    Attributes
    ----------
    count : int
    method : str
    seed : int
    """

    count: int
    method: str = "sobol"
    seed: int = 0

    def draw(self, inputs: int) -> np.ndarray:
        """Give cumulated shares, between 0 and 1, of every input in every case.

        Parameters
        ----------
        inputs : int
            d.

        Returns
        -------
        (count, d) array
        """
        rng = np.random.default_rng(self.seed)
        if self.method == "random":
            shares = rng.random((self.count, inputs))
        elif self.method == "sobol":  # the sequence is balanced at powers of two alone, so it is drawn to one and cut
            power = max(1, int(np.ceil(np.log2(self.count))))
            shares = qmc.Sobol(inputs, rng=rng).random_base2(power)[: self.count]
        else:
            engine = {"halton": qmc.Halton, "latin": qmc.LatinHypercube}[self.method](inputs, rng=rng)
            shares = engine.random(self.count)
        return np.clip(shares, EDGE, 1.0 - EDGE)


def read_sample(raw: Any, address: str, context: Context, count: int | None = None) -> Sample | None:
    """Read ``sample``.

    Parameters
    ----------
    raw : mapping or None
    address : str
    context : Context
    count : int, optional
        Number of cases where none is given.

    Returns
    -------
    Sample or None
        None after a fault.
    """
    faults = len(context.faults)
    entries = ENTRIES if count is None else (Entry("count", "integer", least=2, most=5_000_000, doc=ENTRIES[0].doc), *ENTRIES[1:])
    found = read_values(entries, {} if raw is None else raw, address, context)
    if len(context.faults) > faults:
        return None
    numbers = found.numbers
    return Sample(int(numbers.get("count", count or 0)), found.words.get("method", "sobol"), int(numbers.get("seed", 0)))
