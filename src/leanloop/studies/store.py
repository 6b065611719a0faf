"""What a study has found so far, in a SQLite file that a kill at any moment leaves whole.

Tables: ``about`` (key, value), ``batches`` (which are done), and one for each kind of row, with a column by address.
A batch and the note that it is done are one transaction.
"""

from __future__ import annotations

import os
import re
import sqlite3
from collections.abc import Iterable, Iterator, Mapping
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import Any

import numpy as np

from leanloop.errors import StudyError

try:  # only where the system has it: elsewhere two runs in one directory are the user's to avoid
    import fcntl
except ImportError:  # pragma: no cover
    fcntl = None  # type: ignore[assignment]

FORMAT = "1"
HEAD = b"SQLite format 3\x00"
FOREIGN = "is no file of a study; name another directory"
AGAIN = re.compile(r" #\d+$")  # marks a column whose name differs from another only in capitals, which SQLite does not tell apart
_held: set[int] = set()  # locks of this process


def _let_go() -> None:
    """Leave the locks to the process that took them: a worker that outlives it must not keep the next run out."""
    for lock in _held:
        os.close(lock)
    _held.clear()


if hasattr(os, "register_at_fork"):
    os.register_at_fork(after_in_child=_let_go)

Columns = Mapping[str, Any]  # (m,) arrays of numbers, or lists of m texts


class Store:
    """One study's file.

    Parameters
    ----------
    path : Path
        Made where it does not exist, with its directory.
    about : mapping of str to str
        What made it; has to agree with what stands there. Keys that begin with ``_`` are noted and not compared.

    Raises
    ------
    StudyError
        Where it cannot be opened, is no such file, is in use, or was made of something else.
    """

    def __init__(self, path: Path, about: Mapping[str, str]) -> None:
        self.path = path
        self._lock: int | None = None
        self.base: sqlite3.Connection | None = None
        try:
            self._open(about)
        except BaseException:
            self.close()
            raise

    def _open(self, about: Mapping[str, str]) -> None:
        path = self.path
        try:
            path.parent.mkdir(parents=True, exist_ok=True)
            self._hold()
            self._look()
            self.base = sqlite3.connect(path, isolation_level=None)
        except OSError as error:
            raise StudyError(f"{error.filename or path}: cannot be written: {error.strerror}; name a directory that can") from None
        except sqlite3.Error as error:
            raise StudyError(f"{path}: cannot be opened: {error}; name a directory that can be written") from None
        with self._said():
            self.base.execute("PRAGMA synchronous = NORMAL")
            self._settle(about)
            self.base.execute("PRAGMA journal_mode = PERSIST")  # a journal that is not made anew for every batch: half the time

    def _hold(self) -> None:
        """Keep a second run out; the system lets go when the process ends, however it ends."""
        if fcntl is None:
            return
        name = self.path.with_suffix(".lock")
        while self._lock is None:
            lock = os.open(name, os.O_RDWR | os.O_CREAT, 0o666)
            try:
                fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
                if name.exists() and os.path.samestat(os.fstat(lock), name.stat()):  # else the run before has removed it since
                    self._lock = lock
                    _held.add(lock)
            except BlockingIOError:
                raise StudyError(f"{self.path}: another run is writing it; wait for it, or name another directory") from None
            finally:
                if self._lock is None:
                    os.close(lock)

    def _look(self) -> None:
        """Stop at a file that is no database; the shortest ones would be taken for an empty one."""
        if self.path.is_file() and not self.path.with_name(f"{self.path.name}-journal").exists():
            with open(self.path, "rb") as file:
                head = file.read(len(HEAD))
            if head not in (b"", HEAD):
                raise StudyError(f"{self.path}: {FOREIGN}")

    def _settle(self, about: Mapping[str, str]) -> None:
        tables = {row[0] for row in self.base.execute("SELECT name FROM sqlite_master WHERE type = 'table'")}
        if tables and not {"about", "batches"} <= tables:
            raise StudyError(f"{self.path}: {FOREIGN}")
        with self._transaction():
            self.base.execute("CREATE TABLE IF NOT EXISTS about (key TEXT PRIMARY KEY, value TEXT)")
            self.base.execute(
                "CREATE TABLE IF NOT EXISTS batches"
                " (part TEXT, batch INTEGER, first INTEGER, rows INTEGER, PRIMARY KEY (part, batch))"
            )
            there = dict(self.base.execute("SELECT key, value FROM about"))
            wanted = {"format": FORMAT, **about}
            if not there:
                self.base.executemany("INSERT INTO about VALUES (?, ?)", wanted.items())
                return
        for key, value in wanted.items():
            if not key.startswith("_") and there.get(key) != value:
                what = {"format": "another version of this program", "version": f"version {there.get(key)}"}
                told = what.get(key, f"another {key}")
                raise StudyError(f"{self.path}: holds results of {told}; name another directory, or remove the file")
        with self._transaction():
            self.base.executemany(
                "UPDATE about SET value = ? WHERE key = ? AND value != ?",
                [(value, key, value) for key, value in wanted.items() if key.startswith("_") and key != "_state"],
            )

    # --- writing

    @contextmanager
    def _said(self) -> Iterator[None]:
        """Turn what the database says into what a user can act on."""
        try:
            yield
        except sqlite3.Error as error:
            said = str(error)
            remedy = "name a directory that can be written"
            if "full" in said or "disk I/O" in said:
                remedy = "make room and run the same command again: finished batches are kept"
            elif "locked" in said:
                remedy = "another program holds it; close that and run the same command again: finished batches are kept"
            elif "not a database" in said or "malformed" in said:
                remedy = "it is no file of a study; name another directory"
            raise StudyError(f"{self.path}: cannot be written: {said}; {remedy}") from None

    @contextmanager
    def _transaction(self) -> Iterator[None]:
        self.base.execute("BEGIN IMMEDIATE")
        try:
            yield
            self.base.execute("COMMIT")
        except BaseException:
            if self.base.in_transaction:
                self.base.execute("ROLLBACK")
            raise

    def put(self, part: str, batch: int, tables: Mapping[str, Columns], first: int) -> None:
        """Keep a batch, whole or not at all.

        Parameters
        ----------
        part : str
            Which round of the study it belongs to.
        batch : int
        tables : mapping of str to columns
            Rows by table.
        first : int
            Number of its first case.

        Raises
        ------
        StudyError
            Where it cannot be written.
        """
        with self._said(), self._transaction():
            rows = 0
            for name, columns in tables.items():
                values = [_plain(column) for column in columns.values()]
                rows = rows or len(values[0])
                names = _told_apart(columns)
                kinds = ", ".join(f"{_quoted(key)} {_affinity(own)}" for key, own in zip(names, columns.values(), strict=True))
                self.base.execute(f"CREATE TABLE IF NOT EXISTS {_quoted(name)} ({kinds})")
                marks = ", ".join("?" * len(names))
                self.base.executemany(
                    f"INSERT INTO {_quoted(name)} ({', '.join(map(_quoted, names))}) VALUES ({marks})", zip(*values, strict=True)
                )
            self.base.execute("INSERT INTO batches VALUES (?, ?, ?, ?)", (part, batch, first, rows))

    def note(self, key: str, value: str) -> None:
        """Note something about the study, under a key of its own."""
        with self._said():
            self.base.execute("INSERT OR REPLACE INTO about VALUES (?, ?)", (f"_{key}", value))

    # --- reading

    def done(self, part: str) -> set[int]:
        """Give the numbers of the batches that are kept."""
        with self._said():
            return {row[0] for row in self.base.execute("SELECT batch FROM batches WHERE part = ?", (part,))}

    def table(self, name: str, order: str = "case", where: tuple[str, Any] | None = None) -> dict[str, Any]:
        """Give a table by column, in order.

        Parameters
        ----------
        name : str
        order : str
            Column to sort by; rows that share it stay as they were written.
        where : (str, value), optional
            Column and value of the rows wanted.

        Returns
        -------
        dict of str to (n,) array or list of str
            Empty where there is no such table.
        """
        with self._said():
            if not self.base.execute("SELECT 1 FROM sqlite_master WHERE type = 'table' AND name = ?", (name,)).fetchone():
                return {}
            clause = f" WHERE {_quoted(where[0])} = ?" if where else ""
            found = self.base.execute(
                f"SELECT * FROM {_quoted(name)}{clause} ORDER BY {_quoted(order)}, rowid", (where[1],) if where else ()
            )
            names = [AGAIN.sub("", item[0]) for item in found.description]
            rows = found.fetchall()
        columns = list(zip(*rows, strict=True)) if rows else [() for _ in names]
        return {key: _array(column) for key, column in zip(names, columns, strict=True)}

    def close(self) -> None:
        """Close the file."""
        if self.base is not None:
            with suppress(sqlite3.Error):
                self.base.execute("PRAGMA journal_mode = DELETE")
            self.base.close()
        if self._lock is not None:
            with suppress(OSError):  # while it is ours: a run that comes later makes its own
                self.path.with_suffix(".lock").unlink(missing_ok=True)
            os.close(self._lock)
            _held.discard(self._lock)
            self._lock = None


def _told_apart(names: Iterable[str]) -> list[str]:
    """Give names of columns that differ in more than capitals."""
    seen: dict[str, int] = {}
    out = []
    for name in names:
        number = seen[name.lower()] = seen.get(name.lower(), 0) + 1
        out.append(name if number == 1 else f"{name} #{number}")
    return out


def _quoted(name: str) -> str:
    return '"' + name.replace('"', '""') + '"'


def _plain(column: Any) -> list[Any]:
    """Give a column as the database takes it, which makes NULL of NaN."""
    return column.tolist() if isinstance(column, np.ndarray) else list(column)


def _affinity(column: Any) -> str:
    if not isinstance(column, np.ndarray):
        return "TEXT"
    return "INTEGER" if column.dtype.kind in "iub" else "REAL"


def _array(column: tuple[Any, ...]) -> Any:
    """Give a column as an array where it holds numbers, NULL as NaN."""
    if column and type(column[0]) is str:  # a component may be named 1, inf or nan
        return list(column)
    if column and type(column[0]) is int:
        whole = np.array(column)
        if whole.dtype.kind == "i":
            return whole
    return np.array(column, dtype=float)
