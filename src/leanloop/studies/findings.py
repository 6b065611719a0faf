"""What a study found: a table of cases, curves of build-up, spread of the answer."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.flowsheet.result import Result, plain
from leanloop.studies.influence import Influence, influences

if TYPE_CHECKING:
    from leanloop.studies.study import Study


class Findings:
    """What a study found.

    Parameters
    ----------
    study : Study
    base : Result
        Of the flowsheet as it is, one case.
    cases : dict of str to (M,) array or list of str
        ``case``, inputs by address, ``status``, ``status_text``, what is recorded, and what purity adds.
    curves : dict of str to (n,) array or list of str, optional
        Build-up: ``case``, ``component``, ``time_s``, ``level`` in mol per mol of held components.
    uncertainty : dict, optional
        See `leanloop.studies.uncertainty.explore`.
    """

    def __init__(
        self, study: Study, base: Result, cases: Mapping[str, Any], curves: Mapping[str, Any] | None = None,
        uncertainty: Mapping[str, Any] | None = None,
    ) -> None:  # fmt: skip
        self.study, self.base = study, base
        self.cases, self.curves, self.uncertainty = dict(cases), dict(curves or {}), dict(uncertainty or {})

    def __getitem__(self, address: str) -> Any:
        """Give a column of the table of cases.

        Raises
        ------
        KeyError
            Where it was not recorded.
        """
        if address not in self.cases:
            raise KeyError(f"'{address}' was not recorded")
        return self.cases[address]

    def __len__(self) -> int:
        return len(self.cases.get("case", ()))

    @property
    def status(self) -> list[str]:
        """Status words by case."""
        return list(self.cases.get("status", ()))

    @property
    def converged(self) -> np.ndarray:
        """Whether everything asked for was reached, (M,) bool."""
        return np.array([word == "converged" for word in self.status], dtype=bool)

    @property
    def counts(self) -> dict[str, int]:
        """Number of cases by status, the most frequent first."""
        return dict(Counter(self.status).most_common())

    @property
    def reached(self) -> bool:
        """Whether everything asked for was reached in every case, the flowsheet as it is included."""
        return bool(self.converged.all()) and bool(self.base.converged) and len(self) > 0

    @cached_property
    def influences(self) -> list[Influence]:
        """Effect of every input on what is recorded, at the flowsheet as it is, the largest first."""
        return influences(self.base, list(self.study.record)) if self.base.converged else []

    def to_dict(self) -> dict[str, Any]:
        """Give everything in SI units, as plain lists and numbers with None for what is undefined.

        Returns
        -------
        dict
        """
        return plain(
            {
                "study": self.study.name,
                "kind": self.study.kind,
                "counts": self.counts,
                "base": {"status": self.base.status, "status_text": self.base.status_text},
                "cases": self.cases,
                "curves": self.curves,
                "uncertainty": self.uncertainty,
            }
        )

    def __str__(self) -> str:
        from leanloop.output.text import findings

        return findings(self)
