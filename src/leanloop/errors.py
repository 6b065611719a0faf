"""Exceptions of leanloop and the faults of wrong input they carry."""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass


class LeanloopError(Exception):
    """Root of every exception that leanloop raises on purpose."""


class MissingExtra(LeanloopError):
    """An optional library is not installed; the message names the extra that brings it."""


class StudyError(LeanloopError):
    """A study cannot be kept, gone on with or calculated; the message says why and what to do."""


class NotReached(LeanloopError):
    """A result was asked to be converged and is not; carries the whole result.

    Parameters
    ----------
    message : str
    result : object
        The result as it stands, statuses included.
    """

    def __init__(self, message: str, result: object) -> None:
        super().__init__(message)
        self.result = result


@dataclass(frozen=True)
class Fault:
    """One thing wrong with the input: where, what, and what to write instead."""

    address: str
    problem: str
    remedy: str

    def __str__(self) -> str:
        return f"{self.address}: {self.problem}; {self.remedy}"


class InputError(LeanloopError):
    """Wrong input, every fault at once.

    Parameters
    ----------
    faults : iterable of Fault
    source : str
        Name of the file, empty for a flowsheet built in Python.
    """

    def __init__(self, faults: Iterable[Fault], source: str = "") -> None:
        self.faults = tuple(dict.fromkeys(faults))
        self.source = source
        super().__init__("\n".join(self.lines()))

    def lines(self) -> list[str]:
        """Give one line for each fault, the file's name first."""
        head = f"{self.source}: " if self.source else ""
        return [head + str(fault) for fault in self.faults]


def nearest(name: str, known: Iterable[str]) -> str:
    """Say which known name is meant, or list the known ones.

    Parameters
    ----------
    name : str
    known : iterable of str

    Returns
    -------
    str
        ``did you mean 'x'?`` where one is near, else the list of known names.
    """
    names = [str(item) for item in known]
    near = difflib.get_close_matches(str(name), names, n=1, cutoff=0.6)
    if near:
        return f"did you mean '{near[0]}'?"
    if not names:
        return "there is none to choose from"
    shown = ", ".join(names[:12]) + (", ..." if len(names) > 12 else "")
    return f"known: {shown}"
