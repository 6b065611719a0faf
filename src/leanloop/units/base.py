"""Contract of the unit kinds: outlets from inlets, on the case axis, with derivatives."""

from __future__ import annotations

import copy
from abc import ABC, abstractmethod
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, ClassVar

import numpy as np

from leanloop.components import Components
from leanloop.enthalpy.heat import Heat
from leanloop.entries import Context, Entry, Values, read_values
from leanloop.equilibrium.base import COMPLEX_STEP
from leanloop.equilibrium.conditions import Conditions
from leanloop.flash.mixture import Mixture
from leanloop.status import OK, Status, code
from leanloop.stream import Stream

Numbers = Mapping[str, Any]
ROUNDING = 1e-12  # of a stream's flow: less than nothing by no more than this is rounding


@dataclass(frozen=True)
class Surroundings:
    """What a unit is told of the flowsheet around it.

    Parameters
    ----------
    components : Components
    conditions : mapping of str to Conditions
        Equilibrium tables by name.
    basis : mapping of str to tuple of str
        Components that ``[basis]`` names for ``"gas"``, ``"liquid"`` and ``"loading"``.
    present : mapping of str to (C,) bool
        By inlet label, which components its stream can hold.
    phases : mapping of str to str
        By inlet label.
    heat : Heat or None
        Enthalpies of the components, where any are known.
    """

    components: Components
    conditions: Mapping[str, Conditions]
    basis: Mapping[str, tuple[str, ...]]
    present: Mapping[str, np.ndarray]
    phases: Mapping[str, str]
    heat: Heat | None = None


@dataclass
class Evaluation:
    """What one evaluation of a unit gives for M cases.

    Parameters
    ----------
    outlets : dict of str to Stream
        By outlet label; states (M, C + 2).
    tangents : dict of str to (S, M, C + 2) or None
        Derivatives of the outlet states along the S seeds; None for none at all.
    status : (M,) int8
    memory : dict of str to (M, ...) array
        State inside the unit: the start of the next evaluation, and what its results need.
    memory_tangents : dict of str to (S, M, ...) array
    """

    outlets: dict[str, Stream]
    tangents: dict[str, np.ndarray | None]
    status: np.ndarray
    memory: dict[str, np.ndarray] = field(default_factory=dict)
    memory_tangents: dict[str, np.ndarray] = field(default_factory=dict)


@dataclass(frozen=True)
class Inlet:
    """A stream that an example of a unit is fed, for one case or several.

    Parameters
    ----------
    phase : str
        ``"gas"``, ``"liquid"`` or ``"two-phase"``.
    flows : mapping of str to float or list of float
        mol/s by component, one value or one for each case.
    temperature : float or list of float
        K; of a two-phase stream its molar enthalpy in J/mol.
    pressure : float or list of float
        Pa.
    """

    phase: str
    flows: Mapping[str, float | Sequence[float]]
    temperature: float | Sequence[float] = 300.0
    pressure: float | Sequence[float] = 1e5


@dataclass(frozen=True)
class Scene:
    """An example of a unit with all it needs, for the contract checks.

    The cases should differ and stand where the unit's formulas are smooth: derivatives are compared there.

    Parameters
    ----------
    entries : mapping of str to Any
        As a file would hold them, without ``kind``.
    inlets : mapping of str to Inlet
        By label: the port's name, or the stream's own name at a port that takes several.
    components : mapping of str to mapping
        Tables as in a file; by default the components that flow, which all distribute.
    equilibrium : mapping of str to mapping
        Tables as in a file.
    basis : mapping of str to tuple of str
        As in `Surroundings`.
    heat_data : mapping of str to mapping
        Tables as in a file.
    """

    entries: Mapping[str, Any]
    inlets: Mapping[str, Inlet]
    components: Mapping[str, Mapping[str, Any]] = field(default_factory=dict)
    equilibrium: Mapping[str, Mapping[str, Any]] = field(default_factory=dict)
    basis: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    heat_data: Mapping[str, Mapping[str, Any]] = field(default_factory=dict)


class Unit(ABC):
    """One piece of the flowsheet.

    The constructor only stores; `read` and `connect` give bound copies.

    Parameters
    ----------
    name : str
    **raw : Any
        Entries as a file would hold them; in Python plain SI numbers may stand for quantities.

    Attributes
    ----------
    kind : str
        Word for ``kind = `` in a file.
    entries : tuple of Entry
        Everything that may be written, ports included.
    derivatives : str
        ``"complex"``: `calculate` is a plain formula that takes complex numbers; ``"own"``:
        `evaluate` is overridden and gives them; ``"difference"``: to be differenced.
    scales : bool
        Whether scaling all inlet flows (and flow inputs) scales all outlet flows.
    shuts : bool
        Whether `passes` or `destroys` depends on numbers.
    conserves : bool
        Whether outlets must hold what inlets bring, so that a case in which they do not is no answer.
    inlets, outlets : dict of str to str
        Stream names by label, once read. The label is the port's name, or the stream's own name
        at a port that takes several.
    draws_heat : tuple of str
        Keys of its results that are heat or work from outside, in W.
    known_failures : dict of str to str
        Contract checks that the kind fails, each with the reason; one that it passes is an error.
    """

    kind: ClassVar[str] = ""
    entries: ClassVar[tuple[Entry, ...]] = ()
    derivatives: ClassVar[str] = "complex"
    scales: ClassVar[bool] = True
    shuts: ClassVar[bool] = False
    conserves: ClassVar[bool] = False
    draws_heat: ClassVar[tuple[str, ...]] = ("duty_W", "reboiler_duty_W", "condenser_duty_W", "power_W")
    known_failures: ClassVar[Mapping[str, str]] = {}

    def __init__(self, name: str, **raw: Any) -> None:
        self.name, self.raw = name, raw
        self.values = Values()
        self.inlets: dict[str, str] = {}
        self.outlets: dict[str, str] = {}
        self.around: Surroundings | None = None
        self.tables: Mapping[str, Conditions] = {}

    @classmethod
    def examples(cls) -> list[Scene]:
        """Give scenes for the contract checks of `leanloop.checks`, which ask for one at least."""
        return []

    # --- reading and connecting

    def read(self, context: Context) -> Unit:
        """Give a copy with its entries read; faults are noted in the context."""
        unit = copy.copy(self)
        address = f"units.{self.name}"
        unit.inlets, unit.outlets = {}, {}
        given = [name for _, _, name, side in ports(self.entries, self.raw) if side == "outlet"]
        context = context.knowing(outlet=[name for name in given if isinstance(name, str)])
        unit.values = read_values(self.entries, self.raw, address, context)
        for label, where, stream, way in ports(self.entries, unit.values.words):
            side = unit.inlets if way == "inlet" else unit.outlets
            if label in side:
                context.fault(f"{address}.{where}", f"stream '{stream}' is named twice", "name each stream once")
            side[label] = stream
        unit.check(address, context)
        return unit

    def check(self, address: str, context: Context) -> None:
        """Note faults that lie between entries; none by default."""

    def connect(self, around: Surroundings, context: Context) -> Unit:
        """Give a copy that knows its surroundings; faults are noted in the context."""
        unit = copy.copy(self)
        unit.around = around
        return unit

    def addresses(self) -> dict[str, str]:
        """Give the address of every number that `calculate` takes, by its local name."""
        return {key: f"units.{self.name}.{key}" for key in self.values.numbers}

    @property
    def wants_heat(self) -> bool:
        """Whether the unit, as it was read, balances heat and so needs enthalpies; no by default."""
        return False

    @property
    def deepens(self) -> str:
        """The entry, a whole number, that may all the same differ inside a batch; none by default.

        `calculate` is then given its largest value under the name ``deepest``, the same for every call of a batch.
        """
        return ""

    # --- what the engine may know without calculating

    def sections(self) -> list[tuple[tuple[str, ...], tuple[str, ...]]]:
        """Give parts that can be calculated on their own: labels of their inlets and outlets."""
        return [(tuple(self.inlets), tuple(self.outlets))]

    def phase(self, outlet: str, phases: Mapping[str, str]) -> str | None:
        """Give the phase of an outlet from those of the inlets; None while it is unknown."""
        return next(iter(phases.values()), None)

    def mixture(self, outlet: str) -> Mixture | None:
        """Give what splits an outlet that may be of two phases; None for what splits the inlets."""
        return None

    def passes(self, inlet: str, outlet: str, components: Components, numbers: Numbers | None = None) -> np.ndarray:
        """Tell which components can get from an inlet to an outlet.

        Returns
        -------
        (C,) or (M, C) bool
        """
        return np.ones(len(components), dtype=bool)

    def adds(self, components: Components) -> np.ndarray:
        """Tell which components the unit itself can add.

        Returns
        -------
        (C,) bool
        """
        return np.zeros(len(components), dtype=bool)

    def makes(self, components: Components, numbers: Numbers | None = None) -> np.ndarray:
        """Tell which components the unit can make of others.

        Returns
        -------
        (C,) or (M, C) bool
        """
        return np.zeros(len(components), dtype=bool)

    def destroys(self, components: Components, numbers: Numbers | None = None) -> np.ndarray:
        """Tell of which components a part of what comes in vanishes, which is a way out of a loop.

        Returns
        -------
        (C,) or (M, C) bool
        """
        return np.zeros(len(components), dtype=bool)

    def holds(self, components: Components) -> np.ndarray:
        """Tell the flow of which components the unit sets, whatever comes in.

        Returns
        -------
        (C,) bool
        """
        return np.zeros(len(components), dtype=bool)

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """Tell what an outlet's temperature or pressure depends on.

        Parameters
        ----------
        outlet : str
        what : str
            ``"temperature"`` or ``"pressure"``.

        Returns
        -------
        list of (inlet, str)
            With ``"flows"``, ``"temperature"`` or ``"pressure"`` of that inlet.
        """
        return [(inlet, part) for inlet in self.inlets for part in ("flows", "temperature", "pressure")]

    # --- calculating

    @abstractmethod
    def calculate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give the outlets.

        Parameters
        ----------
        inlets : mapping of str to Stream
            By label; states (..., C + 2).
        numbers : mapping of str to float or (...,) array
            SI numbers by local name.

        Returns
        -------
        dict of str to Stream
            By label. Inlets are left as they are.
        """

    def estimate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give rough outlets for the start of a recycle; by default the calculated ones."""
        return self.calculate(inlets, numbers)

    def evaluate(
        self,
        inlets: Mapping[str, Stream],
        numbers: Numbers,
        memory: Mapping[str, np.ndarray] | None,
        tangents: Mapping[str, np.ndarray | None],
        number_tangents: Mapping[str, np.ndarray],
        seeds: int,
    ) -> Evaluation:
        """Give the outlets and their derivatives along the seeds.

        Parameters
        ----------
        inlets, numbers
            As for `calculate`, for M cases.
        memory : mapping or None
            What the last evaluation left, or a prediction from it.
        tangents : mapping of str to (S, M, C + 2) or None
            Derivatives of the inlet states along the seeds.
        number_tangents : mapping of str to (S, M)
            Derivatives of numbers along the seeds; absent for none.
        seeds : int
            S; 0 where no derivatives are asked for.

        Returns
        -------
        Evaluation
        """
        moved = any(item is not None for item in tangents.values()) or bool(number_tangents)
        if seeds and moved and self.derivatives == "complex":
            outlets, found = self._complex_step(inlets, numbers, tangents, number_tangents)
        else:
            outlets, found = self.calculate(inlets, numbers), {}
            if seeds and moved:
                found = self._difference(inlets, numbers, outlets, tangents, number_tangents, seeds)
        status = outlet_status(outlets)
        if (status == code(Status.not_finite)).any():  # where what came in was sound, the unit found no answer
            sound = np.all([np.isfinite(stream.state).all(axis=-1) for stream in inlets.values()], axis=0)
            for value in numbers.values():
                sound = sound & np.isfinite(value) if isinstance(value, np.ndarray) else sound
            lost = [~np.isfinite(stream.state).all(axis=-1) for stream in outlets.values()]
            status = np.where(sound & np.any(lost, axis=0), code(Status.unit_failed), status)
        return Evaluation(outlets, found, status)

    def _complex_step(
        self, inlets: Mapping[str, Stream], numbers: Numbers, tangents: Mapping[str, Any], number_tangents: Mapping[str, Any]
    ) -> tuple[dict[str, Stream], dict[str, np.ndarray | None]]:
        """Give outlets and their derivatives in one call: a step of 1e-30 does not change a real part."""
        step = 1j * COMPLEX_STEP
        moved = {
            label: stream if tangents.get(label) is None else Stream(stream.state + step * tangents[label], stream.phase)
            for label, stream in inlets.items()
        }
        shifted = {key: numbers[key] + step * way for key, way in number_tangents.items()}
        outlets: dict[str, Stream] = {}
        found: dict[str, np.ndarray | None] = {}
        for label, stream in self.calculate(moved, {**numbers, **shifted} if shifted else numbers).items():
            if stream.state.dtype.kind == "c":
                outlets[label] = Stream(stream.state[0].real.copy(), stream.phase)
                found[label] = stream.state.imag / COMPLEX_STEP
            else:
                outlets[label], found[label] = stream, None
        return outlets, found

    def _difference(
        self,
        inlets: Mapping[str, Stream],
        numbers: Numbers,
        outlets: Mapping[str, Stream],
        tangents: Mapping[str, Any],
        number_tangents: Mapping[str, Any],
        seeds: int,
    ) -> dict[str, np.ndarray | None]:
        """Difference by each inlet variable and number, then chain; three points on one side at zero."""
        found = {label: np.zeros((seeds, *stream.state.shape)) for label, stream in outlets.items()}

        def add(value: np.ndarray, size: np.ndarray, way: np.ndarray, call: Any) -> None:
            step = 1e-5 * np.maximum(np.abs(value), 1e-3 * size)
            inside = np.abs(value) >= step
            high, low = call(value + step), call(np.where(inside, value - step, value + 2 * step))
            for label, base in outlets.items():
                central = (high[label].state - low[label].state) / (2 * step)[:, None]
                sided = (4 * high[label].state - 3 * base.state - low[label].state) / (2 * step)[:, None]
                slope = np.where(inside[:, None], central, sided)
                found[label] += way[..., None] * slope

        for label, stream in inlets.items():
            way = tangents.get(label)
            if way is None:
                continue
            for place in np.flatnonzero(way.any(axis=(0, 1))):
                size = stream.total if place < stream.state.shape[-1] - 2 else np.abs(stream.state[:, place])

                def at_inlet(value: np.ndarray, label: str = label, place: int = place) -> dict[str, Stream]:
                    state = inlets[label].state.copy()
                    state[:, place] = value
                    return self.calculate({**inlets, label: Stream(state, inlets[label].phase)}, numbers)

                add(stream.state[:, place], size, way[..., place], at_inlet)
        for key, way in number_tangents.items():
            value = np.broadcast_to(np.asarray(numbers[key], dtype=float), way.shape[1:])
            add(value, np.abs(value) + 1e-9, way, lambda number, key=key: self.calculate(inlets, {**numbers, key: number}))
        return found

    # --- reporting

    def added(
        self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers
    ) -> np.ndarray | None:
        """Give what the unit adds from outside, (..., C) mol/s; None for nothing."""
        return None

    def made(
        self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers
    ) -> np.ndarray | None:
        """Give what the unit makes of other components, (..., C) mol/s, negative for what vanishes; None for nothing."""
        return None

    def added_heat(self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers) -> np.ndarray | None:
        """Give the enthalpy flow of what the unit adds or makes, (...,) W; None for nothing, or where it is not known."""
        return None

    def results(
        self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping[str, np.ndarray]
    ) -> dict[str, Any]:
        """Give what a result reports of the unit: ``results`` and, for columns, ``profile``.

        Formulas take complex numbers, so that sensitivities of every reported figure are exact.

        Returns
        -------
        dict
            Leaves (...,) or (..., N) arrays, None for what is not known; keys may be nested.
        """
        return {"results": {}}

    def cautions(
        self, inlets: Mapping[str, Stream], outlets: Mapping[str, Stream], numbers: Numbers, memory: Mapping[str, np.ndarray]
    ) -> list[str]:
        """Say in sentences what a careful reader of the result must know."""
        return []


def ports(entries: Sequence[Entry], words: Any, head: str = "", shown: str = "") -> Iterator[tuple[str, str, Any, str]]:
    """Give the ports among what is written at a unit.

    Parameters
    ----------
    entries : sequence of Entry
    words : mapping
        As written, or as read.
    head, shown : str
        What goes before labels, and before entries in addresses.

    Yields
    ------
    label : str
        The port's name; the stream's own at a port that takes several; ``side_draws.0`` for a stream in a list of tables.
    where : str
        Address inside the unit.
    stream : str
    side : str
        ``"inlet"`` or ``"outlet"``.
    """
    for entry in entries:
        raw = words.get(entry.name) if isinstance(words, Mapping) else None
        if entry.sort in ("inlet", "outlet"):
            for stream in raw if isinstance(raw, (tuple, list)) else (raw,) if raw else ():
                label = head.removesuffix(".") if head else stream if entry.many else entry.name
                yield label, f"{shown}{entry.name}", stream, entry.sort
        elif entry.sort == "table" and isinstance(raw, Mapping):
            yield from ports(entry.nested, raw, f"{head}{entry.name}.", f"{shown}{entry.name}.")
        elif entry.sort == "tables" and isinstance(raw, (tuple, list)):
            for place, item in enumerate(raw):
                yield from ports(entry.nested, item, f"{head}{entry.name}.{place}.", f"{shown}{entry.name}[{place}].")


def outlet_status(outlets: Mapping[str, Stream]) -> np.ndarray:
    """Judge outlets: finite, and no flow below zero.

    Parameters
    ----------
    outlets : mapping of str to Stream

    Returns
    -------
    (M,) int8
    """
    status = None
    for stream in outlets.values():
        if np.isfinite(stream.state.sum()) and stream.flows.min(initial=0.0) >= 0.0:
            found = np.full(stream.state.shape[:-1], OK)
        else:
            least = -ROUNDING * np.abs(stream.flows).sum(axis=-1, keepdims=True)
            good = np.isfinite(stream.state).all(axis=-1) & (stream.flows >= least).all(axis=-1)
            found = np.where(good, OK, code(Status.not_finite))
        status = found if status is None else np.maximum(status, found)
    return status
