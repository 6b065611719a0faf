"""What is done with a batch, wherever it is done: functions that travel by name, fed with what travels as bytes."""

from __future__ import annotations

import functools
import pickle
from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.errors import StudyError
from leanloop.status import CODE, LIST, OK, Status
from leanloop.studies import buildup, purity, record
from leanloop.version import VERSION

if TYPE_CHECKING:
    from leanloop.flowsheet.result import Result
    from leanloop.flowsheet.sheet import Flowsheet
    from leanloop.studies.purity import Purity


@dataclass
class Order:
    """What is done with every batch of a round.

    Attributes
    ----------
    sheet : Flowsheet
    record : tuple of str
    purity : Purity or None
    part : str
        Of a round of trials, its name: the one thing recorded is kept as ``value`` in ``trials``, instead of ``cases``.
    """

    sheet: Flowsheet
    record: tuple[str, ...]
    purity: Purity | None = None
    part: str = ""

    def packed(self) -> bytes:
        """Give the order as bytes, the same for the same order, with the version that gives it."""
        return pickle.dumps((VERSION, pickle.dumps(self, protocol=4)), protocol=4)

    @functools.cached_property
    def limited(self) -> dict[str, Flowsheet]:
        """Flowsheets with the bleed freed, by contaminant."""
        return {name: purity.limited(self.sheet, self.purity, name) for name in self.purity.limits} if self.purity else {}

    @functools.cached_property
    def opened(self) -> buildup.CutOpen | None:
        """The flowsheet cut at the tank, where an inventory is given."""
        return buildup.CutOpen(self.sheet, self.purity) if self.purity and self.purity.inventory else None

    def __getstate__(self) -> dict[str, Any]:
        return {"sheet": self.sheet, "record": self.record, "purity": self.purity, "part": self.part}


@functools.lru_cache(maxsize=4)
def _unpacked(payload: bytes) -> Order:
    version, order = pickle.loads(payload)  # noqa: S301 - made by this program, a moment ago
    if version != VERSION:
        raise StudyError(f"a worker has version {VERSION} of this program, the study {version}; give both the same")
    return pickle.loads(order)  # noqa: S301


def work(payload: bytes, changes: Mapping[str, Any], first: int, count: int) -> dict[str, dict[str, Any]]:
    """Solve a batch and give the rows to keep.

    Parameters
    ----------
    payload : bytes
        An `Order`.
    changes : mapping of str to (m,) array or list of m lists
        SI inputs by address; empty for the flowsheet as it is.
    first : int
        Number of the first case.
    count : int
        m.

    Returns
    -------
    dict of str to columns
        ``cases``: ``case``, the inputs, ``status``, ``status_text`` (empty where converged), what is recorded, and of a purity
        study its columns, ``clean.status`` and ``clean.ADDRESS``. ``curves`` where an inventory is given.
    """
    return calculate(_unpacked(payload), changes, first, count)


def calculate(order: Order, changes: Mapping[str, Any], first: int, count: int) -> dict[str, dict[str, Any]]:
    """Do what `work` does, with an order that is at hand."""
    result = solved(order.sheet, changes, count)
    if order.part:
        value = np.where(result.codes() == OK, record.columns(result, order.record)[order.record[0]], np.nan)
        return {"trials": {"part": [order.part] * count, "case": np.arange(first, first + count), "value": value}}
    cases: dict[str, Any] = {"case": np.arange(first, first + count)}
    cases.update({key: values for key, values in changes.items() if not isinstance(values, list)})
    cases.update(
        {
            key: [" ".join(f"{item:.17g}" for item in row) for row in values]
            for key, values in changes.items()
            if isinstance(values, list)
        }
    )
    cases["status"], cases["status_text"] = statuses(result)
    cases.update(record.columns(result, order.record))
    tables = {"cases": cases}
    asked = order.purity
    if asked is None:
        return tables
    cases.update(purity.columns(result, asked))
    if asked.contaminants:
        clean = solved(order.sheet, purity.without(order.sheet, asked, changes), count)
        kept = [clean[f"streams.{asked.stream}.mol_s.{name}"] for name in asked.contaminants]
        # a contaminant that is the rest of a feed cannot be left out: then nothing is told of a clean solvent
        dirty = np.any([np.asarray(item, dtype=float) > 0 for item in kept], axis=0)
        cases["clean.status"] = statuses(clean)[0]
        for address, values in record.columns(clean, order.record).items():
            cases[f"clean.{address}"] = np.where(dirty, np.nan, values)
    for name, sheet in order.limited.items():
        _add_limit(cases, solved(sheet, {**changes, asked.bleed: np.full(count, _start(asked))}, count), asked, name)
    if order.opened is not None:
        tables["curves"] = _followed(cases, order, result, changes, first)
    return tables


def _start(asked: Purity) -> float:
    """Give where the search for a bleed starts: inside its bounds, for at a bleed of 0 there is no steady state to start from."""
    low, high = asked.between
    return float(np.sqrt(low * high)) if low > 0 else (low + high) / 2


def solved(sheet: Flowsheet, changes: Mapping[str, Any], count: int) -> Result:
    """Solve some cases, with a case axis even where nothing changes."""
    if any(np.ndim(values) for values in changes.values()):
        return sheet.solve_cases(dict(changes), mixed=True)
    for address, value in sheet.numbers.items():
        if sheet.varies(address) and address not in changes:
            return sheet.solve_cases({**changes, address: np.full(count, float(value))})
    return sheet.solve_cases(changes)


def statuses(result: Result) -> tuple[list[str], list[str]]:
    """Give words by case, and sentences for those that did not converge."""
    codes = result.codes()
    words = [LIST[item].name for item in codes]
    if (codes == OK).all():
        return words, [""] * len(words)
    return words, ["" if number == OK else text for number, text in zip(codes, result.status_text, strict=True)]


def _add_limit(cases: dict[str, Any], result: Result, asked: Purity, name: str) -> None:
    """Add what keeping to a limit takes."""
    own = purity.requirement_of(name)
    codes = result.codes()
    reached = {key: np.asarray(result[f"requirements.{key}.reached"]).astype(bool) for key in result.sheet.requirements}
    needed = np.asarray(result[f"requirements.{own}.free_value"], dtype=float)
    level = np.asarray(result[f"requirements.{own}.value"], dtype=float)
    # cleaner than asked with the least bleed that is looked for: that one will do
    enough = (codes == CODE[Status.out_of_reach]) & (level < asked.limits[name][1]) & (needed <= asked.between[0] * (1 + 1e-9))
    for key, good in reached.items():
        enough &= good | (key == own)
    codes = np.where(enough, OK, codes)
    met = (reached[own] | enough) & (codes <= CODE[Status.off_table])
    cases[f"purity.bleed_needed.{name}"] = np.where(met, needed, np.nan)
    cases[f"purity.bleed_status.{name}"] = [LIST[item].name for item in codes]
    for held in asked.held:
        added = np.asarray(result[f"units.{asked.makeup}.results.added_mol_s.{held}"], dtype=float)
        cases[f"purity.added_at_limit_mol_s.{name}.{held}"] = np.where(met, added, np.nan)


def _followed(cases: dict[str, Any], order: Order, result: Result, changes: Mapping[str, Any], first: int) -> dict[str, Any]:
    """Add the times of the build-up; give its curves."""
    asked = order.purity
    freed = {
        item.free: np.asarray(result[f"requirements.{name}.free_value"], dtype=float)
        for name, item in order.sheet.requirements.items()
    }
    found = buildup.follow(order.opened, result, changes, freed)
    rows: dict[str, list[Any]] = {"case": [], "component": [], "time_s": [], "level": []}
    for place, name in enumerate(asked.contaminants):
        for number, share in enumerate(buildup.SHARES):
            cases[f"purity.time_to_{share}_s.{name}"] = found["times"][:, place, number]
        for case in range(len(found["times"])):
            times = found["curve_times"][case]
            if np.isfinite(times).all():
                rows["case"] += [first + case] * len(times)
                rows["component"] += [name] * len(times)
                rows["time_s"] += times.tolist()
                rows["level"] += found["curve_levels"][case, place].tolist()
    return {"case": np.array(rows["case"], dtype=int), "component": rows["component"],
            "time_s": np.array(rows["time_s"]), "level": np.array(rows["level"])}  # fmt: skip
