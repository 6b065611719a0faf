"""What a contract check is: a function with a name and a reason, run on a plug-in's examples, every breach collected."""

from __future__ import annotations

import warnings
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from functools import partial
from typing import Any

from leanloop.entries import WORDS, Entry
from leanloop.errors import LeanloopError
from leanloop.quantities import DIMENSIONS
from leanloop.registry import Registry

KNOWN = "known_failures"


class Broken(Exception):
    """A check does not hold; the message says where."""


def require(holds: Any, problem: str) -> None:
    """Break the check that is running unless something holds.

    Parameters
    ----------
    holds : bool
    problem : str
        What is wrong, to be read by the plug-in's author.
    """
    if not holds:
        raise Broken(problem)


@dataclass(frozen=True)
class Check:
    """One check of a plug-in's contract.

    Parameters
    ----------
    name : str
    reason : str
        Why it must hold, one line.
    remedy : str
        What to do where it does not, one line.
    function : callable
        Takes the plug-in's class where `whole`, else what the suite prepares of one example; raises where it is broken.
    whole : bool
    """

    name: str
    reason: str
    remedy: str
    function: Callable[[Any], None]
    whole: bool


@dataclass(frozen=True)
class Finding:
    """One breach of the contract: which check, why it matters, what was found and what to do."""

    check: str
    reason: str
    problem: str
    remedy: str

    def __str__(self) -> str:
        return f"{self.check}: {self.problem}\n    reason: {self.reason}\n    remedy: {self.remedy}"


class ContractError(LeanloopError):
    """A plug-in breaks its contract; carries every finding.

    Parameters
    ----------
    plugin : str
    findings : sequence of Finding
    """

    def __init__(self, plugin: str, findings: Sequence[Finding]) -> None:
        self.findings = tuple(findings)
        count = len(self.findings)
        head = f"{plugin} breaks {count} check{'s' if count > 1 else ''} of its contract:"
        super().__init__("\n".join([head, *(f"  {finding}" for finding in self.findings)]))


class Suite:
    """All checks of one sort of plug-in.

    Parameters
    ----------
    registry : Registry
        Where names are looked up.
    given : callable
        Gives the plug-in's own examples.
    prepare : callable
        Makes of the plug-in and one example what the checks of examples take.
    """

    def __init__(
        self, registry: Registry, given: Callable[[type], Sequence[Any]], prepare: Callable[[type, Any], Any]
    ) -> None:
        self.registry, self.given, self.prepare = registry, given, prepare
        self.checks: dict[str, Check] = {}

    def check(self, reason: str, remedy: str, whole: bool = False) -> Callable[[Callable[[Any], None]], Callable[[Any], None]]:
        """Register the decorated function under its own name."""

        def enter(function: Callable[[Any], None]) -> Callable[[Any], None]:
            self.checks[function.__name__] = Check(function.__name__, reason, remedy, function, whole)
            return function

        return enter

    def functions(self) -> Iterator[tuple[str, Callable[..., None]]]:
        """Give the name of each check and a function that takes a plug-in and runs that check alone."""
        for name in (KNOWN, *self.checks):
            yield name, partial(self.run, only=name)

    def run(self, plugin: type | str, examples: Sequence[Any] | None = None, only: str | None = None) -> None:
        """Run the checks.

        Parameters
        ----------
        plugin : type or str
            The class, or the name it is registered under.
        examples : sequence, optional
            Those of the plug-in by default.
        only : str, optional
            Name of the one check to run.

        Raises
        ------
        ContractError
            With a finding for every check that is broken, and for every known failure that is none.
        """
        label = f"{self.registry.sort} '{plugin}'" if isinstance(plugin, str) else f"{self.registry.sort} {plugin.__name__}"
        plugin = self.registry.load(plugin) if isinstance(plugin, str) else plugin
        known = getattr(plugin, KNOWN, {})
        findings = list(self._misnamed(known)) if only in (None, KNOWN) else []
        for check in self.checks.values():
            if only not in (None, check.name):
                continue
            problem = self._problem(check, plugin, examples)
            if problem and check.name not in known:
                findings.append(Finding(check.name, check.reason, problem, check.remedy))
            elif check.name in known and not problem:
                told = f"is listed in {KNOWN} ({known[check.name]!r}) and holds"
                findings.append(Finding(check.name, "a known failure is kept only while it fails", told, f"drop it from {KNOWN}"))
        if findings:
            raise ContractError(label, findings)

    def _misnamed(self, known: dict[str, str]) -> Iterator[Finding]:
        for name, reason in known.items():
            if name not in self.checks or not (isinstance(reason, str) and reason.strip()):
                problem = f"{name!r}: {reason!r} is no check with its reason"
                yield Finding(KNOWN, "an excuse stands for one check", problem, f"write one of {', '.join(self.checks)} and why")

    def _problem(self, check: Check, plugin: type, examples: Sequence[Any] | None) -> str:
        """Say what breaks a check, nothing where it holds; whatever the plug-in raises or warns of breaks it."""
        where = ""
        try:
            with warnings.catch_warnings():
                warnings.simplefilter("error")
                if check.whole:
                    check.function(plugin)
                    return ""
                for number, example in enumerate(self.given(plugin) if examples is None else examples):
                    where = f"example {number}: "
                    check.function(self.prepare(plugin, example))
        except Broken as broken:
            return where + str(broken)
        except Exception as error:  # whatever a plug-in raises is a finding, and no other check is lost to it
            return f"{where}raises {type(error).__name__}: {error}"
        return ""


def well_formed(entries: Sequence[Entry], ports: tuple[str, ...] = ()) -> None:
    """Require entries that can be read and are documented.

    Parameters
    ----------
    entries : sequence of Entry
    ports : tuple of str
        Sorts of entry that this sort of plug-in alone may have.
    """
    words = {*WORDS, "integer", "flag", "table", "tables"} - ({"inlet", "outlet", "component", "equilibrium"} - set(ports))
    names = [entry.name for entry in entries]
    require(len(set(names)) == len(names), f"an entry is listed twice: {', '.join(names)}")
    for entry in entries:
        where = f"entry '{entry.name}'"
        require(entry.name.isidentifier() and entry.name not in ("kind", "model", "method"), f"{where} cannot be written so")
        sorts = (entry.sort,) if isinstance(entry.sort, str) else entry.sort
        unknown = [sort for sort in sorts if sort not in words and sort not in DIMENSIONS]
        require(not unknown, f"{where} is of unknown sort {', '.join(unknown)}")
        require(entry.doc.strip() and "\n" not in entry.doc, f"{where} has no doc of one line")
        require((entry.sort == "choice") == bool(entry.choices), f"{where} has choices, or should have")
        require(entry.by in ("", "component", "outlet"), f"{where} is a table by unknown names '{entry.by}'")
        require((entry.sort in ("table", "tables")) == bool(entry.nested), f"{where} has nested entries, or should have")
        low = max((limit for limit in (entry.least, entry.above) if limit is not None), default=float("-inf"))
        high = min((limit for limit in (entry.most, entry.below) if limit is not None), default=float("inf"))
        require(low <= high, f"{where} has limits that no value keeps")
        well_formed(entry.nested, ports)


def documented(plugin: type, word: str) -> None:
    """Require a docstring of the class's own and the word that files name it by."""
    require((plugin.__dict__.get("__doc__") or "").strip(), f"class {plugin.__name__} has no docstring")
    require(getattr(plugin, word, ""), f"class {plugin.__name__} has no {word}")
