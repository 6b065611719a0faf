"""A study: what it asks of a flowsheet, and its way from cases to findings."""

from __future__ import annotations

import json
from concurrent.futures import Executor
from dataclasses import dataclass, field, fields, is_dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.studies import tasks, uncertainty
from leanloop.studies.axes import Cases
from leanloop.studies.campaign import Memory, Progress, carry_out
from leanloop.studies.executors import Engine, engine
from leanloop.studies.findings import Findings
from leanloop.studies.purity import Purity
from leanloop.studies.spread import Law
from leanloop.studies.store import Store
from leanloop.units.base import Unit
from leanloop.version import VERSION

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet

MOST_AT_ONCE = 4096


@dataclass(frozen=True)
class Margin:
    """What uncertainty asks of a requirement.

    Attributes
    ----------
    meets : dict of str to str
        ``"at_most"`` or ``"at_least"`` by requirement.
    confidence : float
        Probability that the margin has to give.
    inputs : tuple of str
        Addresses on which a margin may be taken.
    """

    meets: dict[str, str]
    confidence: float
    inputs: tuple[str, ...]


@dataclass(frozen=True)
class Study:
    """Many cases of a flowsheet.

    Attributes
    ----------
    sheet : Flowsheet
        With the requirements that the study holds.
    name, title : str
    kind : str
        ``"sweep"`` or ``"uncertainty"``.
    cases : Cases
        Of an uncertainty study, the sample.
    record : tuple of str
        Addresses of what is kept.
    purity : Purity or None
    laws : dict of str to Law
        Spread inputs.
    margin : Margin or None
    entries : dict
        As written.
    """

    sheet: Flowsheet
    name: str
    kind: str
    cases: Cases
    record: tuple[str, ...]
    title: str = ""
    purity: Purity | None = None
    laws: dict[str, Law] = field(default_factory=dict)
    margin: Margin | None = None
    entries: dict[str, Any] = field(default_factory=dict)

    @property
    def batch(self) -> int:
        """Cases of a batch: as many as are fast together, of equal number, the same on every machine."""
        most = min(MOST_AT_ONCE, self.sheet.chunk())
        if self.sheet.heat is not None:
            most //= 16
        if self.sheet.requirements or (self.purity and (self.purity.limits or self.purity.inventory)):
            most //= 4
        most = max(16, most)
        count = self.cases.count
        rounds = -(-count // most)
        return -(-count // rounds)

    def run(
        self,
        out: str | Path | None = None,
        *,
        workers: int = 1,
        executor: Executor | None = None,
        cluster: str | None = None,
        progress: Progress | None = None,
    ) -> Findings:
        """Calculate what is not kept yet, and give all that was found.

        Parameters
        ----------
        out : str or Path, optional
            Directory in which ``NAME.sqlite`` keeps every batch as it comes; run again, the study goes on where it stopped.
        workers : int
            Processes of a pool; 1 calculates in this one.
        executor : Executor, optional
            One of `concurrent.futures`, or alike, that calculates the batches.
        cluster : str, optional
            Address of the scheduler of a dask.distributed cluster (extra ``cluster``).
        progress : callable, optional
            Told, after each batch, the round, the number of cases done, of all, of those that failed, and the seconds left.

        Returns
        -------
        Findings

        Raises
        ------
        StudyError
            Where results cannot be kept, or were made of another flowsheet, study or version.
        MissingExtra
            Where a cluster is asked for without its library.
        """
        where = engine(executor, workers, cluster)
        finished = False
        try:
            store = Memory() if out is None else Store(Path(out) / f"{self.name}.sqlite", self.about())
            try:
                found = self._find(store, where, progress)
                finished = True
                store.note("state", "finished")
                return found
            finally:
                store.close()
        finally:
            where.close(wait=finished)

    def _find(self, store: Store | Memory, where: Engine, progress: Progress | None) -> Findings:
        base = self.sheet.solve_cases()
        if self.kind == "uncertainty":
            told = uncertainty.explore(self, base, store, where, progress)
            return Findings(self, base, store.table("cases"), {}, told)
        order = tasks.Order(self.sheet, self.record, self.purity)
        carry_out("cases", tasks.work, order.packed(), self.cases.changes, self.cases.count, self.batch, store, where, progress)
        return Findings(self, base, store.table("cases"), store.table("curves"))

    def about(self) -> dict[str, str]:
        """Give what the study is made of, as texts that differ where it does."""
        given = {
            key: item
            for key, item in self.sheet.given.items()
            if key not in ("title", "studies", "sizing", "properties", "plain_si", "source", "directory")
        }
        numbers = dict(self.sheet.numbers)  # points that stand in a file of their own among them
        return {
            "version": VERSION,
            "flowsheet": _canonical({"sections": given, "numbers": numbers}),
            "study": _canonical(
                {"name": self.name, "entries": {k: v for k, v in self.entries.items() if k != "title"}, "batch": self.batch}
            ),
            "_title": self.title,
            "_state": "running",
        }


def _canonical(item: Any) -> str:
    return json.dumps(item, default=_plain)  # unsorted: the order of inputs is that of the cases


def _plain(item: Any) -> Any:
    """Give an object as what it was made of."""
    if isinstance(item, Unit):
        return {"name": item.name, "kind": item.kind, **item.raw}
    if is_dataclass(item) and not isinstance(item, type):
        return {part.name: getattr(item, part.name) for part in fields(item) if part.init}
    if isinstance(item, np.ndarray):
        return item.tolist()
    if isinstance(item, np.generic):
        return item.item()
    if hasattr(item, "raw"):
        return {"name": getattr(item, "name", ""), **item.raw}
    return repr(item)
