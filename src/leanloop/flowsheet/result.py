"""Results of a solve: by address, as a nested dict, with exact sensitivities."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.errors import Fault, InputError, NotReached, nearest
from leanloop.flowsheet.flammable import flammable
from leanloop.flowsheet.quantity import AddressError, formula, stream_table, walk
from leanloop.flowsheet.requirement import Found
from leanloop.flowsheet.run import Run
from leanloop.flowsheet.view import View, derivatives, value
from leanloop.status import CODE, OK, REASONS, Status, solved, status_of
from leanloop.stream import Stream

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet

SOLVED_OUTPUT = (Status.converged, Status.out_of_reach, Status.temperature_cross, Status.off_table, Status.pass_limit)


@dataclass
class Part:
    """Some cases of a result that were solved together.

    Attributes
    ----------
    cases : (m,) int
        Their numbers in the whole.
    run : Run
    found : dict of str to Found
        By requirement.
    evaluations : int
        Unit evaluations, searches for requirements included.
    """

    cases: np.ndarray
    run: Run
    found: dict[str, Found]
    evaluations: int


class Result:
    """What a solve gives.

    Parameters
    ----------
    sheet : Flowsheet
    parts : list of Part
    cases : int
    axis : bool
        Whether there is a case axis; without one, arrays lose theirs.
    """

    def __init__(self, sheet: Flowsheet, parts: list[Part], cases: int, axis: bool) -> None:
        self.sheet, self.parts, self.cases, self.axis = sheet, parts, cases, axis
        self._dict: dict[str, Any] | None = None

    # --- gathering over parts

    def gathered(self, call: Callable[[Part], Any], blank: bool = True) -> Any:
        """Put rows of all parts together; lists of arrays where their lengths differ.

        Parameters
        ----------
        call : callable
            Gives (m, ...) rows of a part of m cases, or None or text for all of them.
        blank : bool
            Whether numbers of cases that have no answer become NaN.

        Returns
        -------
        (M, ...) array, list, or one row without a case axis
        """
        pieces = []
        for part in self.parts:
            found = call(part)
            if found is None or isinstance(found, str):
                return [found] * self.cases if self.axis else found
            found = np.array(found)
            if blank and found.dtype.kind in "fc":
                hidden = ~np.isin(part.run.status, [CODE[item] for item in SOLVED_OUTPUT])
                found = found.astype(float)
                found[hidden] = np.nan
            pieces.append(found)
        shapes = {piece.shape[1:] for piece in pieces}
        if len(shapes) == 1:
            out = np.empty((self.cases, *pieces[0].shape[1:]), dtype=np.result_type(*pieces))
            for part, piece in zip(self.parts, pieces, strict=True):
                out[part.cases] = piece
            return out if self.axis else (out[0] if out.ndim > 1 else out.tolist()[0])
        rows: list[Any] = [None] * self.cases
        for part, piece in zip(self.parts, pieces, strict=True):
            for case, row in zip(part.cases, piece, strict=True):
                rows[case] = row
        return rows

    def _tree(self, call: Callable[[Part], Any]) -> Any:
        """Gather a nested table leaf by leaf."""
        trees = {id(part): call(part) for part in self.parts}
        first = trees[id(self.parts[0])]
        return self._branch(first, lambda part: trees[id(part)])

    def _branch(self, branch: Any, get: Callable[[Part], Any]) -> Any:
        if isinstance(branch, Mapping):
            return {
                key: self._branch(item, lambda part, key=key: get(part)[key]) for key, item in branch.items()
            }
        return self.gathered(get)

    # --- status

    @property
    def status(self) -> Any:
        """Status word, or a list of them by case."""
        words = [status_of(item).name for item in self.codes()]
        return words if self.axis else words[0]

    @property
    def converged(self) -> Any:
        """Whether everything asked for was reached: bool, or (M,) bool."""
        good = self.codes() == OK
        return good if self.axis else bool(good[0])

    @property
    def status_text(self) -> Any:
        """Sentence that says what happened and what to try, or a list of them by case."""
        texts: list[str] = [""] * self.cases
        for part in self.parts:
            for row, case in enumerate(part.cases):
                texts[case] = self._sentence(part, row)
        return texts if self.axis else texts[0]

    def _sentence(self, part: Part, row: int) -> str:
        status = status_of(part.run.status[row])
        culprit = part.run.culprit[row]
        text = status.value
        if status is Status.out_of_reach:
            missed = [
                f"{name}: {found.reason[row] or 'not reached'}, nearest value {found.value[row]:.6g} "
                f"at {self.sheet.requirements[name].free} = {found.free_value[row]:.6g} in SI units"
                + (f"; {REASONS[found.reason[row]]}" if found.reason[row] else "")
                for name, found in part.found.items()
                if not found.reached[row]
            ]
            notes = dict.fromkeys(found.note[row] for found in part.found.values() if found.note.get(row))
            text = f"{text} ({'; '.join([*missed, *notes])})"
        elif culprit >= 0:
            name = part.run.plan.unit_names[culprit]
            text = f"Unit {name}: {text}"
            said = part.run.reasons.get(row) or part.run.messages.get(name)
            if status is Status.unit_failed and said:
                text = f"{text} ({said})"
        return text

    def codes(self) -> np.ndarray:
        """Give the numbers that stand for the statuses, (M,) int8; see `leanloop.status.LIST`."""
        codes = np.empty(self.cases, dtype=np.int8)
        for part in self.parts:
            codes[part.cases] = part.run.status
        return codes

    def raise_if_failed(self) -> Result:
        """Give the result itself where all is reached.

        Raises
        ------
        NotReached
            With the sentence of the worst case; it carries the result.
        """
        codes = self.codes()
        if (codes != OK).any():
            worst = int(np.argmax(codes))
            texts = self.status_text
            raise NotReached(texts[worst] if self.axis else texts, self)
        return self

    # --- looking up

    def stream(self, name: str) -> Stream:
        """Give a stream.

        Parameters
        ----------
        name : str

        Returns
        -------
        Stream
            State (C + 2,), or (M, C + 2) with a case axis.

        Raises
        ------
        KeyError
            Where there is no such stream.
        """
        phases = self.sheet.plan.phases
        if name not in phases:
            raise KeyError(f"there is no stream '{name}'; {nearest(name, phases)}")
        return Stream(self.gathered(lambda part: part.run.states[name]), phases[name])

    def __getitem__(self, address: str) -> Any:
        """Give what stands at an address: a number, text or nested dict; arrays by case.

        Raises
        ------
        KeyError
            Where the address leads nowhere.
        """
        head = address.partition(".")[0]
        try:
            if head in ("streams", "units"):
                try:
                    quantity, *_ = formula(address, self.sheet.plan.phases, self.sheet.plan.units, self.sheet.bases)
                    return self._gather_quantity(quantity)
                except AddressError:
                    return walk(self.to_dict(lists=False), address.split("."), address)
            parts = address.split(".")
            if head == "requirements" and len(parts) > 2 and parts[1] in self.sheet.requirements:
                return walk(self._requirement(parts[1]), parts[2:], address)
            if head == "loop" and len(parts) > 1:
                return walk(self._loop(), parts[1:], address)
            if head == "balance" and len(parts) > 1:
                from leanloop.flowsheet.balance import balance

                return walk(self._tree(lambda part: balance(part.run)), parts[1:], address)
            return walk(self.to_dict(lists=False), address.split("."), address)
        except AddressError as error:
            raise KeyError(str(error)) from None

    def _gather_quantity(self, quantity: Any) -> Any:
        def call(part: Part) -> Any:
            view = View(part.run)
            with np.errstate(all="ignore"):
                return quantity(view.stream, view.unit)

        trees = {id(part): call(part) for part in self.parts}
        return self._branch(trees[id(self.parts[0])], lambda part: trees[id(part)])

    def sensitivity(self, quantity: str, number: str) -> Any:
        """Give the total derivative of a result with respect to an input, SI units.

        Exact through closed loops and active requirements: freed inputs follow. With respect to a
        freed input itself, its own requirement is taken away and the others hold.

        Parameters
        ----------
        quantity : str
            Address of a quantity of a stream or unit, or ``requirements.NAME.free_value``.
        number : str
            Address of a numeric input.

        Returns
        -------
        float or (M,) array
            NaN for cases that are not solved.

        Raises
        ------
        InputError
            Where an address leads nowhere.
        """
        return self.sensitivities([quantity], [number])[quantity, number]

    def sensitivities(self, quantities: list[str], numbers: list[str]) -> dict[tuple[str, str], Any]:
        """Give total derivatives of several results with respect to several inputs in one go.

        Parameters
        ----------
        quantities, numbers : list of str

        Returns
        -------
        dict of (str, str) to float or (M,) array
        """
        sheet = self.sheet
        faults, formulas = [], {}
        for address in quantities:
            name, _, key = address.removeprefix("requirements.").rpartition(".")
            if address.startswith("requirements.") and name in sheet.requirements and key in ("free_value", "value"):
                continue
            try:
                formulas[address] = formula(address, sheet.plan.phases, sheet.plan.units, sheet.bases)[0]
                if not isinstance(value(self.parts[0].run, formulas[address]), np.ndarray):
                    faults.append(Fault(address, "is no number", "name a number of a stream or unit"))
            except AddressError as error:
                faults.append(Fault(address, error.problem, error.remedy))
        for address in numbers:
            if address not in sheet.numbers or isinstance(sheet.numbers[address], list):
                faults.append(Fault(address, "is no numeric input", nearest(address, sheet.numbers)))
            elif not sheet.varies(address):
                faults.append(Fault(address, "has no derivative", "name an input that can change by small amounts"))
        if faults:
            raise InputError(faults)
        found: dict[tuple[str, str], list] = {(q, n): [] for q in quantities for n in numbers}
        # an input that a requirement frees is independent only without that requirement
        freed = {item.free: name for name, item in sheet.requirements.items()}
        groups = [([n for n in numbers if n not in freed], "")] + [([n], freed[n]) for n in numbers if n in freed]
        for part in self.parts:
            for own, released in groups:
                if not own:
                    continue
                run = sheet.linearised(part, own, released)
                for q in quantities:
                    slopes = derivatives(run, formulas[q]) if q in formulas else self._followed(run, q)
                    slopes = np.array(slopes[: len(own)])
                    slopes[:, ~solved(part.run.status)] = np.nan
                    for place, n in enumerate(own):
                        found[q, n].append(slopes[place])
        out = {}
        for key, pieces in found.items():
            pieces = iter(pieces)
            out[key] = self.gathered(lambda part, pieces=pieces: next(pieces), blank=False)
            if not self.axis and np.ndim(out[key]) == 0:
                out[key] = float(out[key])
        return out

    def _followed(self, run: Run, address: str) -> np.ndarray:
        """Give the derivatives of a requirement's value or freed input along a linearised run's inputs."""
        name, _, key = address.removeprefix("requirements.").rpartition(".")
        item = self.sheet.requirements[name]
        if key == "value":
            return derivatives(run, item.quantity)
        if item.free in run.follow:
            return np.ascontiguousarray(run.follow[item.free].T)
        way = np.zeros((len(run.extra), run.inputs.cases))
        way[run.extra.index(item.free)] = 1.0
        return way

    # --- everything at once

    def to_dict(self, lists: bool = True) -> dict[str, Any]:
        """Give the whole result in SI units.

        Parameters
        ----------
        lists : bool
            Plain lists and numbers with None for what is undefined, as in JSON; else arrays with NaN.

        Returns
        -------
        dict
        """
        if self._dict is None:
            from leanloop.flowsheet.balance import balance

            sheet = self.sheet
            self._dict = {
                "status": self.status,
                "status_text": self.status_text,
                "loop": self._loop(),
                "loops": self._loops_cached(),
                "streams": {
                    name: self._tree(lambda part, name=name: stream_table(View(part.run).stream(name), sheet.bases))
                    for name in sheet.plan.structure.streams
                },
                "units": {
                    name: self._tree(lambda part, name=name: View(part.run).unit(name)) for name in sheet.plan.units
                },
                "balance": self._tree(lambda part: balance(part.run)),
                "requirements": {name: self._requirement(name) for name in sheet.requirements},
                "cautions": self.cautions(),
            }
        return plain(self._dict) if lists else self._dict

    def _loops(self) -> list[dict[str, Any]]:
        steps = [step for step in self.sheet.plan.steps if step.tears]
        out = []
        for step in steps:
            loops = {
                id(part): next((loop for loop in part.run.loops if loop.step is step), None) for part in self.parts
            }

            def wide(part: Part, key: str, loops: dict = loops) -> np.ndarray:
                loop = loops[id(part)]
                full = np.zeros(len(part.cases), dtype=int) if key == "passes" else np.full(len(part.cases), np.nan)
                if loop is not None:
                    full[loop.cases] = getattr(loop.outcome, key)
                return full

            history: list[list[float]] = [[] for _ in range(self.cases)]
            for part in self.parts:
                loop = loops[id(part)]
                for line in loop.outcome.history if loop is not None else ():
                    for place, error in zip(loop.cases, line, strict=True):
                        if not np.isnan(error):
                            history[part.cases[place]].append(float(error))
            out.append(
                {
                    "units": step.units,
                    "tears": list(step.tears),
                    "passes": self.gathered(lambda part: wide(part, "passes"), blank=False),
                    "residual": self.gathered(lambda part: wide(part, "error"), blank=False),
                    "history": history if self.axis else history[0],
                }
            )
        return out

    def _loop(self) -> dict[str, Any]:
        loops = self._loops_cached()
        return {
            "passes": _worst([loop["passes"] for loop in loops], self),
            "residual": _worst([loop["residual"] for loop in loops], self),
            "method": self.sheet.settings.method.name,
            "tears": [tear for loop in loops for tear in loop["tears"]],
            "evaluations": sum(part.evaluations for part in self.parts),
        }

    def _loops_cached(self) -> list[dict[str, Any]]:
        if not hasattr(self, "_kept_loops"):
            self._kept_loops = self._loops()
        return self._kept_loops

    def _requirement(self, name: str) -> dict[str, Any]:
        others: list[list[float]] = [[] for _ in range(self.cases)]
        for part in self.parts:
            for place, row in zip(part.cases, part.found[name].others, strict=True):
                others[place] = row
        return {
            "reached": self.gathered(lambda part: part.found[name].reached),
            "active": self.gathered(lambda part: part.found[name].active),
            "value": self.gathered(lambda part: part.found[name].value),
            "free_value": self.gathered(lambda part: part.found[name].free_value),
            "reason": self.gathered(lambda part: part.found[name].reason),
            "other_solutions": others if self.axis else others[0],
        }

    def cautions(self) -> list[str]:
        """Give sentences that a careful reader must know, each once."""
        found: dict[str, None] = {}
        for part in self.parts:
            good = np.flatnonzero(solved(part.run.status))
            if not len(good):
                continue
            run = part.run if len(good) == len(part.cases) else self.sheet.taken(part.run, good)
            view = View(run)
            for name, unit in run.plan.units.items():
                for sentence in unit.cautions(*view.sides(name), view.numbers(name), view.memory(name)):
                    found[sentence] = None
            if any(item.flammable for item in run.plan.components):
                for name in run.plan.structure.streams:
                    sentence = flammable(name, view.stream(name), run.plan.components)
                    if sentence:
                        found[sentence] = None
        return list(found)

    def __str__(self) -> str:
        from leanloop.output.text import report

        return report(self)


def _worst(values: list[Any], result: Result) -> Any:
    if not values:
        return np.zeros(result.cases) if result.axis else 0
    stacked = np.max(np.stack([np.asarray(item) for item in values]), axis=0)
    return stacked if result.axis else stacked[()]


def plain(item: Any) -> Any:
    """Turn arrays into lists and numbers, with None for what is not finite.

    Parameters
    ----------
    item : Any
        Nested dicts, lists and arrays.

    Returns
    -------
    Any
    """
    if isinstance(item, Mapping):
        return {key: plain(value) for key, value in item.items()}
    if isinstance(item, (list, tuple)):
        return [plain(value) for value in item]
    if isinstance(item, np.ndarray):
        return [plain(value) for value in item] if item.ndim else plain(item[()])
    if isinstance(item, (bool, np.bool_)):
        return bool(item)
    if isinstance(item, (int, np.integer)):
        return int(item)
    if isinstance(item, (float, np.floating)):
        number = float(item)
        return number if np.isfinite(number) else None
    return item
