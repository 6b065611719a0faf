"""A round of batches: what is not kept yet is calculated, wherever, and kept as it comes."""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping
from concurrent.futures import FIRST_COMPLETED, BrokenExecutor, CancelledError, Future, wait
from contextlib import suppress
from typing import Any, Protocol

import numpy as np

from leanloop.errors import LeanloopError, StudyError
from leanloop.studies.executors import Engine
from leanloop.studies.store import Store

LOST = "the workers were lost; finished batches are kept, run the same command again"
PULSE = 1.0  # s
MOST_BREAKS = 5  # of the pool in one round: more are no accident


class Progress(Protocol):
    """Who is told how far a round is."""

    def __call__(self, part: str, done: int, count: int, failed: int, left: float | None) -> None:
        """Take in the number of cases done, of all, of those that failed, and the seconds left where they can be told."""


class Memory:
    """Keeps what is found for as long as the process lives: the store of a study without a directory."""

    def __init__(self) -> None:
        self.parts: dict[tuple[str, int], Mapping[str, Any]] = {}

    def done(self, part: str) -> set[int]:
        """Give the numbers of the batches that are kept."""
        return {batch for own, batch in self.parts if own == part}

    def put(self, part: str, batch: int, tables: Mapping[str, Any], first: int) -> None:
        """Keep a batch."""
        self.parts[part, batch] = tables

    def note(self, key: str, value: str) -> None:
        """Nothing outlives the process."""

    def table(self, name: str, order: str = "case", where: tuple[str, Any] | None = None) -> dict[str, Any]:
        """Give a table by column, in order."""
        pieces = [tables[name] for (_, _), tables in sorted(self.parts.items()) if name in tables]
        if not pieces:
            return {}
        out = {key: _joined([piece[key] for piece in pieces]) for key in pieces[0]}
        rows = np.arange(len(out[order]))
        if where is not None:
            rows = np.array([row for row in rows if out[where[0]][row] == where[1]], dtype=int)
        rows = rows[np.argsort(np.asarray(out[order])[rows], kind="stable")]
        return {key: [item[row] for row in rows] if isinstance(item, list) else item[rows] for key, item in out.items()}

    def close(self) -> None:
        """Nothing is open."""


def _joined(pieces: list[Any]) -> Any:
    if any(isinstance(piece, list) for piece in pieces):
        return [item for piece in pieces for item in piece]
    return np.concatenate(pieces)


def carry_out(
    part: str,
    work: Callable[..., Mapping[str, Any]],
    payload: bytes,
    changes: Mapping[str, Any],
    count: int,
    size: int,
    store: Store | Memory,
    engine: Engine,
    progress: Progress | None = None,
) -> None:
    """Calculate the batches of a round that are not kept yet.

    Parameters
    ----------
    part : str
        Name of the round.
    work : callable
        A function of a module, ``work(payload, changes, first, count)`` -> tables; it holds a column ``status`` in ``cases``.
    payload : bytes
        What it needs beside the cases.
    changes : mapping of str to (M,) array or list
    count : int
        M.
    size : int
        Cases of a batch. What is calculated does not depend on who calculates, so batches are the same each time.
    store : Store or Memory
    engine : Engine
    progress : callable, optional

    Raises
    ------
    StudyError
        Where a batch cannot be kept or the executor is broken.
    KeyboardInterrupt
        What is finished is kept.
    """
    spans = [(number, first, min(size, count - first)) for number, first in enumerate(range(0, count, size))]
    kept = store.done(part)
    waiting = [item for item in spans if item[0] not in kept]
    clock = _Clock(part, count, sum(item[2] for item in spans if item[0] in kept), progress)
    running: dict[Future, tuple[int, int, int]] = {}
    breaks = 0
    waiting.reverse()  # the next one is taken from the end
    try:
        while waiting or running:
            broken: list[tuple[int, int, int]] = []
            while waiting and len(running) < engine.ahead:
                span = waiting.pop()
                own = {key: values[span[1] : span[1] + span[2]] for key, values in changes.items()}
                try:
                    running[engine.submit(work, payload, own, span[1], span[2])] = span
                except BrokenExecutor:
                    broken.append(span)
                    break
            for future in _back(running):
                span = running.pop(future)
                try:
                    tables = future.result()
                except (BrokenExecutor, CancelledError):
                    broken.append(span)
                    continue
                store.put(part, span[0], tables, span[1])
                clock.step(span[2], tables)
            if running and not engine.alive():
                raise StudyError(LOST)
            if broken:
                breaks += 1
                if breaks > MOST_BREAKS or not engine.own:
                    raise StudyError(LOST)
                broken += running.values()
                running = {}
                engine.again()
                waiting += sorted(set(broken), reverse=True)
    except (LeanloopError, KeyboardInterrupt):
        _leave(part, running, store, engine)
        raise
    except Exception as error:  # noqa: BLE001 - whatever a cluster throws when it goes away
        _leave(part, running, store, engine)
        reason = " ".join(f"{type(error).__name__}: {error}".split())
        raise StudyError(f"a batch could not be calculated: {reason}; finished batches are kept") from error


def _back(running: Mapping[Future, Any]) -> list[Future]:
    """Give the batches that are back, none where none comes within a while.

    A future that was cancelled and whose executor does not say so wakes nobody, hence the look at each.
    """
    if running:
        wait(running, PULSE, FIRST_COMPLETED)
    return [future for future in running if future.done()]


def _leave(part: str, running: Mapping[Future, tuple[int, int, int]], store: Store | Memory, engine: Engine) -> None:
    """Keep what is back and not kept yet, as far as it can be, and let go of the rest."""
    for future, span in running.items():
        with suppress(Exception):  # what ends the round is told already
            if future.done():
                store.put(part, span[0], future.result(), span[1])
    engine.forget(running)


class _Clock:
    """Tells how far a round is, and how long it may take from the pace of this run."""

    def __init__(self, part: str, count: int, kept: int, progress: Progress | None) -> None:
        self.part, self.count, self.kept, self.progress = part, count, kept, progress
        self.begin, self.fresh, self.failed = time.monotonic(), 0, 0
        self._tell()

    def step(self, rows: int, tables: Mapping[str, Any]) -> None:
        """Count a batch that has come back."""
        self.fresh += rows
        status = tables.get("cases", {}).get("status", ())
        self.failed += sum(1 for word in status if word != "converged")
        self._tell()

    def _tell(self) -> None:
        if self.progress is not None:
            left = None
            if self.fresh:
                left = (time.monotonic() - self.begin) / self.fresh * (self.count - self.kept - self.fresh)
            self.progress(self.part, self.kept + self.fresh, self.count, self.failed, left)
