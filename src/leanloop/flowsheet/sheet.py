"""A flowsheet: components, equilibrium, feeds, units and requirements, checked together and solved."""

from __future__ import annotations

import copy
from collections.abc import Callable, Mapping
from typing import Any

import numpy as np

from leanloop import enthalpy
from leanloop.column.band import BYTES_A_CHUNK
from leanloop.entries import Context, Entry
from leanloop.equilibrium.conditions import Conditions
from leanloop.errors import Fault, InputError, nearest
from leanloop.flowsheet import read, read_limits, read_requirements
from leanloop.flowsheet.graph import Structure, Tie, passes
from leanloop.flowsheet.inputs import Inputs
from leanloop.flowsheet.loop import solve_step
from leanloop.flowsheet.plan import Plan, connect
from leanloop.flowsheet.quantity import Bases, formula
from leanloop.flowsheet.requirement import Requirement
from leanloop.flowsheet.requirements import RegionSolver
from leanloop.flowsheet.result import Part, Result
from leanloop.flowsheet.run import Run, Settings
from leanloop.flowsheet.view import derivatives
from leanloop.recycle import METHODS
from leanloop.recycle.linear import newton_step
from leanloop.status import OK, Status, code, solved
from leanloop.stream import TWO_PHASE
from leanloop.units.base import Unit

CLOSURE = 1e-7  # of what enters or leaves: a component's balance that is open by more is no answer
NOTHING = 1e-25  # of all that enters: less of a component is not told from none
SECTIONS = (
    "title", "feeds", "units", "requirements", "components", "equilibrium", "loop", "basis", "groups", "limits",
    "heat_data", "studies", "sizing", "properties",
)  # fmt: skip


class Flowsheet:
    """Everything a solve needs, checked when it is made.

    Parameters
    ----------
    components : mapping of str to Component or mapping, or list of Component
    equilibrium : mapping of str to mapping
        Tables by name, each a model or ``stays_in`` by component.
    feeds : mapping of str to mapping, or list of Feed
    units : mapping of str to mapping, or list of Unit
    requirements : mapping of str to mapping, optional
    title : str, optional
    loop : mapping, optional
        ``method``, ``tolerance``, ``passes``, ``tears``.
    basis, groups : mapping of str to list of str, optional
    limits : mapping of str to mapping, optional
        Ends of columns for `leanloop.limits`: ``key``, ``gas_in``, ``gas_out``, ``liquid_in``, ``liquid_out``, ``removal``.
    heat_data : mapping of str to mapping, optional
        Enthalpies by component; where it is given, or a unit balances heat, common species have built-in data.
    studies, sizing, properties : mapping, optional
        Kept as they are for `leanloop.study` and `leanloop.size`, which read them.
    plain_si : bool
        Whether plain numbers may stand for quantities with a dimension, in SI units.
    source : str
        Name of the file, for messages.
    directory : str
        Where files named in tables are looked for.

    Raises
    ------
    InputError
        With every fault found.
    """

    def __init__(
        self,
        components: Any,
        equilibrium: Any = None,
        feeds: Any = None,
        units: Any = None,
        requirements: Any = None,
        title: Any = "",
        loop: Any = None,
        basis: Any = None,
        groups: Any = None,
        limits: Any = None,
        heat_data: Any = None,
        studies: Any = None,
        sizing: Any = None,
        properties: Any = None,
        *,
        plain_si: bool = True,
        source: str = "",
        directory: str = ".",
    ) -> None:
        self.given = {
            "components": components, "equilibrium": equilibrium, "feeds": feeds, "units": units, "requirements": requirements,
            "title": title, "loop": loop, "basis": basis, "groups": groups, "limits": limits, "heat_data": heat_data,
            "studies": studies, "sizing": sizing, "properties": properties, "plain_si": plain_si, "source": source,
            "directory": directory,
        }  # fmt: skip
        self.source = source
        context = Context(plain_si=plain_si, names={"directory": [directory]})
        self.title = title if isinstance(title, str) else ""
        if not isinstance(title, str):
            context.fault("title", "is no text", 'write title = "..."')
        self.components = read.components(components, groups, context)
        known = context.knowing(component=self.components.names)
        self.basis = read.names_by_key("basis", basis, ("gas", "liquid", "loading"), known)
        self.conditions = {
            name: Conditions.read(name, entry, self.components, known)
            for name, entry in read.table("equilibrium", equilibrium, known).items()
        }
        self.feeds = {
            feed.name: feed.read(self.components, self.basis, self.conditions, known.knowing(equilibrium=self.conditions))
            for feed in read.feeds(feeds, known)
        }
        known = known.knowing(equilibrium=self.conditions)
        units_read: dict[str, Unit] = {}
        for unit in read.units(units, known):
            units_read[unit.name] = unit.read(known)
            units_read[unit.name].tables = self.conditions
        structure = Structure(self.components, self.feeds, units_read)
        loose = read.unsettled(units, units_read, known)
        structure.check(known, loose)
        present, phases = structure.present(), structure.phases()
        if not known.faults:  # then only a loop that no feed enters has no phase yet: solvent
            phases = {stream: phase or "liquid" for stream, phase in phases.items()}
        asked = heat_data is not None or any(unit.wants_heat for unit in units_read.values())
        asked = asked or any(feed.phase == TWO_PHASE for feed in self.feeds.values())
        self.heat = enthalpy.read(heat_data, self.components, known) if asked else None
        for feed in self.feeds.values():
            feed.connect(self.conditions, self.heat, known)
        surroundings = {
            "components": self.components, "conditions": self.conditions, "basis": self.basis, "heat": self.heat,
        }  # fmt: skip
        self.units = connect(units_read, structure, surroundings, present, phases, known)
        structure.units = self.units
        if not known.faults:
            read.ways_out(structure, present, known)
        aside = Context(plain_si=plain_si, names=known.names)  # faults there do not keep from reading on
        self.limits = read_limits.limits(limits, self.units, aside)
        settings, tears = read.loop(loop, known)
        for place, tear in enumerate(tears):
            if tear not in phases and tear not in loose:
                known.fault(f"loop.tears[{place}]", f"there is no stream '{tear}'", nearest(tear, phases))
        if known.faults:
            known.faults.extend(aside.faults)
        self._stop_on(known)
        self.settings, self.tears = settings, tears
        self.plan = Plan(self.components, self.feeds, self.units, structure, present, phases)
        self.plan.heat = self.heat
        for place, tear in enumerate(tears):
            if tear not in self.plan.recycled():
                known.fault(f"loop.tears[{place}]", f"stream '{tear}' is on no loop", "leave it out")
        held = {
            self.components.names[place]
            for unit in self.units.values()
            for place in np.flatnonzero(unit.holds(self.components))
        }
        self.bases = Bases(self.components, self.basis, held)
        self._gather_numbers()
        self.requirements = read_requirements.requirements(self, requirements, known)
        known.faults.extend(aside.faults)
        self._stop_on(known)
        try:
            self.plan.arrange({name: self.tie(item) for name, item in self.requirements.items()}, tears)
        except ValueError as error:
            known.fault("loop.tears", *cut_in_two(str(error)))
        self._stop_on(known)

    # --- inputs

    def _stop_on(self, context: Context) -> None:
        if context.faults:
            raise InputError(context.faults, self.source)

    def _gather_numbers(self) -> None:
        """Collect every numeric input by address."""
        self.numbers: dict[str, Any] = {}
        self.sorts: dict[str, str] = {}
        self._entries: dict[str, Entry] = {}
        for owner, values in (
            *((f"feeds.{name}", feed.values) for name, feed in self.feeds.items()),
            *((f"units.{name}", unit.values) for name, unit in self.units.items()),
            *(
                (f"equilibrium.{conditions.name}.{name}", model.values)
                for conditions in self.conditions.values()
                for name, model in conditions.models.items()
            ),
            *(
                (f"heat_data.{item.name}", item.values)
                for item in (self.heat.items if self.heat else ())
                if item is not None
            ),
        ):
            for key, number in values.numbers.items():
                self.add_number(f"{owner}.{key}", number, values.sorts[key], values.entries[key])

    def add_number(self, address: str, number: Any, sort: str, entry: Entry) -> None:
        """Make a number an input with an address.

        Parameters
        ----------
        address : str
        number : float or list of float
            SI.
        sort : str
            Its dimension.
        entry : Entry
        """
        self.numbers[address], self.sorts[address], self._entries[address] = number, sort, entry

    def entry(self, address: str) -> Entry:
        """Give how an input is declared."""
        return self._entries[address]

    def varies(self, address: str) -> bool:
        """Tell whether an input may change by small amounts, case by case."""
        entry = self._entries[address]
        return entry.cases and entry.sort != "integer" and not isinstance(self.numbers[address], list)

    def tie(self, item: Requirement) -> Tie:
        """Give where a requirement stands in the flowsheet."""
        _, streams, units = formula(item.address, self.plan.phases, self.units, self.bases)
        makers = [self.plan.structure.makers[stream] for stream in streams]
        return Tie(
            (*units, *(unit for unit, _ in makers if unit)),
            tuple(label for unit, label in makers if not unit),
            tuple(name for name, addresses in self.plan.addresses.items() if item.free in addresses.values()),
            tuple(name for name in self.feeds if item.free.startswith(f"feeds.{name}.")),
        )

    def released(self) -> Flowsheet:
        """Give the same flowsheet without its requirements: what they free is an input like any other."""
        sheet = copy.copy(self)
        sheet.requirements = {}
        sheet.given = {**self.given, "requirements": None}
        sheet.plan = copy.copy(self.plan)
        sheet.plan.forget()
        sheet.plan.arrange({}, self.tears)
        return sheet

    def rebuilt(self, **changes: Any) -> Flowsheet:
        """Give a flowsheet made anew from what this one was made of, with some parts replaced.

        Parameters
        ----------
        **changes
            Parameters of `Flowsheet` by name.

        Raises
        ------
        InputError
            With every fault found.
        """
        return Flowsheet(**{**self.given, **changes})

    def __reduce__(self) -> tuple[Any, ...]:
        """Travel to other processes as what the flowsheet was made of."""
        return _remade, (self.given,)

    # --- checking and solving

    def check(self) -> dict[str, Any]:
        """Give the order of calculation, loops and tears; nothing is solved.

        Returns
        -------
        dict
            ``order``, ``loops``, ``solved_together``, ``tears``, ``freedom`` and ``freed``.
        """
        steps = self.plan.steps
        return {
            "order": list(dict.fromkeys(name for step in steps for name in step.units)),
            "loops": [step.units for step in steps if step.tears],
            "solved_together": [region.units for region in self.plan.regions if region.requirements],
            "tears": [tear for step in steps for tear in step.tears],
            "freedom": len({item.free for item in self.requirements.values()}) - len(self.requirements),
            "freed": {name: item.free for name, item in self.requirements.items()},
        }

    def solve(self, changes: Mapping[str, Any] | None = None) -> Result:
        """Solve the flowsheet for one case or many.

        Parameters
        ----------
        changes : mapping of str to number, text or (M,) array, optional
            New values by address, SI numbers or texts with a unit. Any array, even of length one,
            makes a case axis; list inputs take (M, n).

        Returns
        -------
        Result
            Every case with its own status; a case that fails disturbs no other.

        Raises
        ------
        InputError
            Where an address or a value is wrong for all cases.
        """
        result = self.solve_cases(changes)
        if result.cases and all((part.run.status == code(Status.no_steady_state)).all() for part in result.parts):
            raise InputError([fault for part in result.parts for fault in part.run.trapped], self.source)
        return result

    def solve_cases(
        self, changes: Mapping[str, Any] | None = None, mixed: bool = False, told: Callable[[int, int], None] | None = None
    ) -> Result:
        """Solve like `solve`, where that no case has a steady state is no wrong input but each case's status.

        Parameters
        ----------
        changes : mapping of str to number, text or (M,) array, optional
        mixed : bool
            Whether columns of different height may share a batch. Then a profile is as long as that of the highest, NaN
            below a case's own stages.
        told : callable, optional
            Told, after each group of cases that are solved together, how many are done and how many there are.

        Returns
        -------
        Result

        Raises
        ------
        InputError
            Where an address or a value is wrong for all cases.
        """
        from leanloop.flowsheet.cases import read_changes, shares

        deep = self.deepening() if mixed else frozenset()
        cases, axis, base, arrays, groups = read_changes(self, changes or {}, deep)
        touched = frozenset(changes or {})
        parts, done = [], 0
        for rows, own in shares(groups, arrays, deep):
            size = self.chunk({**base, **own})
            for begin in range(0, len(rows), size):
                chunk = rows[begin : begin + size]
                inputs = Inputs(
                    {**self.numbers, **base, **own}, {key: value[chunk] for key, value in arrays.items()}, len(chunk), touched
                )
                parts.append(self._solve_part(chunk, inputs))
                done += len(chunk)
                if told is not None:
                    told(done, cases)
        return Result(self, parts, cases, axis)

    def deepening(self) -> frozenset[str]:
        """Give the addresses of whole numbers that may differ inside a batch."""
        return frozenset(f"units.{name}.{unit.deepens}" for name, unit in self.units.items() if unit.deepens)

    def chunk(self, numbers: Mapping[str, Any] | None = None) -> int:
        """Give how many cases fit into a chunk of memory.

        Parameters
        ----------
        numbers : mapping of str to number, optional
            Where they differ from the flowsheet's own.

        Returns
        -------
        int
        """
        numbers = self.numbers if numbers is None else numbers
        per_case = 8.0 * self.plan.width * len(self.plan.phases) * (6 + 2 * self.plan.width)
        for name, unit in self.units.items():
            own = f"units.{name}.stages"
            count = numbers.get(f"{own}:deepest") or numbers.get(own, unit.values.numbers.get("stages", 0))
            unknowns = len(getattr(unit, "places", ())) + 1
            per_case += 8.0 * count * unknowns * (10 * unknowns + 4 * self.plan.width)
        return int(max(1, min(4096, 2 * BYTES_A_CHUNK / per_case)))

    def _solve_part(self, rows: np.ndarray, inputs: Inputs) -> Part:
        run = Run(self.plan, inputs, self.settings)
        run.trapped = self._trapped(run)
        found, evaluations = {}, 0
        for region in self.plan.regions:
            if region.requirements:
                solver = RegionSolver(run, region, [self.requirements[name] for name in region.requirements])
                solver.solve()
                found.update(solver.found)
                evaluations += solver.evaluations
            else:
                for step in region.steps:
                    solve_step(run, step)
        self._judge_balance(run)
        self._judge_tables(run)
        return Part(rows, run, found, evaluations + run.evaluations)

    def _judge_balance(self, run: Run) -> None:
        """Let the streams of every column bear witness: an answer that loses or makes anything is none."""
        for name, unit in self.units.items():
            if unit.conserves:
                with np.errstate(all="ignore"):
                    entering = sum(run.states[stream][:, :-2] for stream in unit.inlets.values())
                    leaving = sum(run.states[stream][:, :-2] for stream in unit.outlets.values())
                    least = NOTHING * entering.sum(axis=1, keepdims=True)
                    lost = np.abs(entering - leaving) > CLOSURE * np.maximum(entering, leaving) + least
                lost = lost.any(axis=1) & solved(run.status)
                run.status[lost] = code(Status.unbalanced)
                run.culprit[lost] = self.plan.unit_number[name]

    def _judge_tables(self, run: Run) -> None:
        from leanloop.flowsheet.view import View

        view = View(run)
        for name, unit in self.units.items():
            if hasattr(unit, "off_table"):
                with np.errstate(all="ignore"):
                    off = unit.off_table(view.sides(name)[0], view.numbers(name), view.memory(name))
                off = off & solved(run.status)
                run.status[off] = np.maximum(run.status[off], code(Status.off_table))
                run.culprit[off] = self.plan.unit_number[name]
            if hasattr(unit, "crosses"):  # what crosses on the way may come apart again: it is judged at the end
                with np.errstate(all="ignore"):
                    crossed = unit.crosses(*view.sides(name), view.numbers(name)) & solved(run.status)
                worse = crossed & (run.status < code(Status.temperature_cross))
                run.status[worse] = code(Status.temperature_cross)
                run.culprit[worse] = self.plan.unit_number[name]
            if hasattr(unit, "shortfalls"):  # likewise
                with np.errstate(all="ignore"):
                    said = unit.shortfalls(view.sides(name)[0], view.numbers(name))
                for case in np.flatnonzero(solved(run.status)):
                    if said[case]:
                        run.status[case], run.reasons[int(case)] = code(Status.unit_failed), said[case]
                        run.culprit[case] = self.plan.unit_number[name]

    def _trapped(self, run: Run) -> list[Fault]:
        """Set the status of cases in which a number, such as a bleed of zero, shuts the only way out."""
        structure, cases = self.plan.structure, run.inputs.cases
        partial = {}
        for unit in self.units.values():
            if unit.shuts:
                numbers = run.inputs.of(self.plan.addresses[unit.name])
                for inlet in unit.inlets:
                    for outlet in (*unit.outlets, ""):
                        way = passes(unit, inlet, outlet, self.components, numbers)
                        if not way.all():
                            partial[unit.name, inlet, outlet] = way
        if not partial:
            return []
        paths = structure.paths()
        width = len(self.components)
        patterns = np.concatenate([np.broadcast_to(way, (cases, width)) for way in partial.values()], axis=1)
        kinds, which = np.unique(patterns, axis=0, return_inverse=True)
        faults = []
        for number, pattern in enumerate(kinds):
            ways = dict(zip(partial, pattern.reshape(len(partial), width), strict=True))
            stuck = structure.trapped(self.plan.present, {**paths, **ways})
            for component, streams in stuck.items():
                rows = np.flatnonzero(which.ravel() == number)
                fed = self._fed(run, component)[rows]
                run.status[rows[fed]] = code(Status.no_steady_state)
                if fed.any():
                    faults.append(
                        Fault(
                            f"components.{component}",
                            f"'{component}' has a way in and no way out of {', '.join(streams[:4])} at these inputs",
                            "give it a bleed above zero, or another way out",
                        )
                    )
        return faults

    def _fed(self, run: Run, component: str) -> np.ndarray:
        place = self.components.index[component]
        total = np.zeros(run.inputs.cases)
        for feed in self.feeds.values():
            numbers = run.inputs.of(feed.addresses())
            total = total + np.nan_to_num(feed.stream(numbers).flows[..., place])
        fed = total > 0
        for unit in self.units.values():
            if type(unit).made is not self.plan.makes_nothing:
                fed = fed | unit.makes(self.components, run.inputs.of(self.plan.addresses[unit.name]))[..., place]
        return fed

    def linearised(self, part: Part, numbers: list[str], released: str = "") -> Run:
        """Give a run at a solved part's states that carries total derivatives along some inputs.

        Parameters
        ----------
        part : Part
        numbers : list of str
            Addresses.
        released : str
            Name of a requirement that does not hold.

        Returns
        -------
        Run
            Derivatives along `numbers` first; requirements that are active hold.
        """
        done = part.run
        held = [item for name, item in self.requirements.items() if name != released]
        freed = [item.free for item in held]
        settings = Settings(METHODS.load("newton")(), self.settings.tolerance, self.settings.passes)
        run = Run(self.plan, done.inputs, settings, [*numbers, *freed])
        run.memory = {node: dict(memory) for node, memory in done.memory.items()}
        run.tear_start = {
            step.tears: np.concatenate(
                [done.states[tear][:, self.plan.tear_places(step, tear, True)] for tear in step.tears], axis=1
            )
            for step in self.plan.steps
            if step.tears
        }
        run.status = np.where(solved(done.status), OK, done.status)
        for region in self.plan.regions:
            for step in region.steps:
                solve_step(run, step)
            items = [self.requirements[name] for name in region.requirements if name != released]
            if items:
                self._hold(run, items, part)
        return run

    def _hold(self, run: Run, items: list[Requirement], part: Part) -> None:
        """Let freed inputs follow, so that active requirements keep their targets."""
        slopes = np.stack([derivatives(run, item.quantity) for item in items])  # (P, E, M)
        places = [run.extra.index(item.free) for item in items]
        # a requirement that was not reached does not hold: its freed input stays where it is
        active = np.stack([part.found[item.name].active & part.found[item.name].reached for item in items], axis=1)  # (M, P)
        inner = np.moveaxis(slopes[:, places], 2, 0)  # (M, P, P)
        matrix = np.where(active[:, :, None] & active[:, None, :], inner, np.eye(len(items)))
        right = np.moveaxis(slopes, 2, 0).copy()  # (M, P, E)
        right[:, :, places] = 0.0
        for number, item in enumerate(items):
            target = item.target
            if target in run.extra:
                right[:, number, run.extra.index(target)] = -1.0
        right[~active] = 0.0
        follow = newton_step(np.eye(len(items)) - matrix, -right)  # (M, P, E)
        follow = np.where(np.isfinite(follow), follow, 0.0)
        for store in (run.ways, *run.memory_ways.values()):
            for key, way in store.items():
                if way is not None:
                    store[key] = way + np.einsum("pm...,mpe->em...", way[places], follow)
        for number, item in enumerate(items):
            run.follow[item.free] = follow[:, number]

    @staticmethod
    def taken(run: Run, rows: np.ndarray) -> Run:
        """Give a run of some of its cases, states only."""
        few = Run(run.plan, run.inputs.repeated(rows, {}), run.settings)
        few.states = {name: state[rows] for name, state in run.states.items()}
        few.memory = {
            node: {key: value[rows] for key, value in memory.items()} for node, memory in run.memory.items()
        }
        return few


def _remade(given: Mapping[str, Any]) -> Flowsheet:
    """Make a flowsheet of what it was made of."""
    return Flowsheet(**given)


def cut_in_two(message: str) -> tuple[str, str]:
    """Split a sentence about tears into what is wrong and what to do."""
    problem, _, remedy = message.partition("; ")
    return problem, remedy or "name streams that cut every loop, or leave tears out"
