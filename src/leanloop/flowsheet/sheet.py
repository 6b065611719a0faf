"""A flowsheet: components, equilibrium, feeds, units and requirements, checked together and solved."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.column.band import BYTES_A_CHUNK
from leanloop.components import Component, Components
from leanloop.entries import Context, Entry, read_number, read_values
from leanloop.equilibrium.conditions import Conditions
from leanloop.errors import Fault, InputError, nearest
from leanloop.feed import Feed
from leanloop.flowsheet.graph import Structure
from leanloop.flowsheet.inputs import Inputs
from leanloop.flowsheet.plan import Plan, Tie, connect
from leanloop.flowsheet.quantity import AddressError, Bases, formula
from leanloop.flowsheet.requirements import RegionSolver, Requirement
from leanloop.flowsheet.result import Part, Result
from leanloop.flowsheet.run import Run, Settings
from leanloop.quantities import DIMENSIONS
from leanloop.recycle import METHODS
from leanloop.recycle.newton import newton_step
from leanloop.flowsheet.view import derivatives
from leanloop.status import OK, Status, code, solved
from leanloop.units import KINDS
from leanloop.units.base import Unit

REQUIREMENT = (
    Entry("quantity", "text", required=True, doc="address of a result"),
    Entry("free", "text", required=True, doc="address of the input that is freed"),
)
LIMITS = ("equals", "at_most", "at_least")
LOOP = (
    Entry("method", "text", doc="recycle method"),
    Entry("tolerance", "number", above=0.0, most=1e-3, doc="of each component's external input"),
    Entry("passes", "integer", least=1, most=1_000_000, doc="most passes of a loop"),
    Entry("tears", "text", many=True, doc="streams to tear instead of the ones found"),
)
SECTIONS = (
    "title", "feeds", "units", "requirements", "components", "equilibrium", "loop", "basis", "groups",
)  # fmt: skip


class Flowsheet:
    """Everything a solve needs, checked when it is made.

    Parameters
    ----------
    components : mapping of str to Component or mapping
    equilibrium : mapping of str to mapping
        Tables by name, each a model or ``stays_in`` by component.
    feeds : mapping of str to mapping, or list of Feed
    units : mapping of str to mapping, or list of Unit
    requirements : mapping of str to mapping, optional
    title : str, optional
    loop : mapping, optional
        ``method``, ``tolerance``, ``passes``, ``tears``.
    basis, groups : mapping of str to list of str, optional
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
        *,
        plain_si: bool = True,
        source: str = "",
        directory: str = ".",
    ) -> None:
        self.source = source
        context = Context(plain_si=plain_si, names={"directory": [directory]})
        self.title = title if isinstance(title, str) else ""
        if not isinstance(title, str):
            context.fault("title", "is no text", 'write title = "..."')
        self.components = self._read_components(components, groups, context)
        known = context.knowing(component=self.components.names)
        self.basis = self._read_names("basis", basis, ("gas", "liquid", "loading"), known)
        self.conditions = {
            name: Conditions.read(name, table, self.components, known)
            for name, table in self._table("equilibrium", equilibrium, known).items()
        }
        self.feeds = {
            feed.name: feed.read(self.components, self.basis, known) for feed in self._feeds(feeds, known)
        }
        known = known.knowing(equilibrium=self.conditions)
        units_read = {}
        for unit in self._units(units, known):
            units_read[unit.name] = unit.read(known)
            units_read[unit.name].tables = self.conditions
        structure = Structure(self.components, self.feeds, units_read)
        structure.check(known, self._unsettled(units, units_read))
        present, phases = structure.present(), structure.phases()
        surroundings = {"components": self.components, "conditions": self.conditions, "basis": self.basis}
        self.units = connect(units_read, structure, surroundings, present, phases, known)
        structure.units = self.units
        if not self.units:
            if not units:
                known.fault("units", "there is no unit", "add [units.NAME] with a kind")
        self._check_loops(structure, present, known)
        settings_read = self._read_loop(loop, known)
        self._stop_on(known)
        self.plan = Plan(self.components, self.feeds, self.units, structure, present, phases)
        held = {
            self.components.names[place] for unit in self.units.values() for place in np.flatnonzero(unit.holds(self.components))
        }
        self.bases = Bases(self.components, self.basis, held)
        self._gather_numbers()
        self.requirements = self._read_requirements(requirements, known)
        self._stop_on(known)
        self.settings, tears = settings_read
        for place, tear in enumerate(tears):
            if tear not in phases:
                known.fault(f"loop.tears[{place}]", f"there is no stream '{tear}'", nearest(tear, phases))
        self._stop_on(known)
        try:
            self.plan.arrange({name: self._tie(item) for name, item in self.requirements.items()}, tears)
        except ValueError as error:
            known.fault("loop.tears", str(error), "name streams that cut every loop, or leave tears out")
        self._stop_on(known)

    # --- reading

    def _stop_on(self, context: Context) -> None:
        if context.faults:
            raise InputError(context.faults, self.source)

    @staticmethod
    def _table(address: str, table: Any, context: Context) -> Mapping[str, Any]:
        if table is None:
            return {}
        if not isinstance(table, Mapping):
            context.fault(address, "is no table", f"write [{address}.NAME]")
            return {}
        return table

    def _read_components(self, components: Any, groups: Any, context: Context) -> Components:
        items = []
        for name, table in self._table("components", components, context).items():
            if isinstance(table, Component):
                items.append(table)
            else:
                _check_name(f"components.{name}", name, context)
                items.append(Component.read(name, table, f"components.{name}", context))
        if not items:
            context.fault("components", "there is no component", 'add [components] with name = { molar_mass = "..." }')
        names = [item.name for item in items]
        found = self._read_names("groups", groups, None, context.knowing(component=names))
        for name in found:
            if name in names:
                context.fault(f"groups.{name}", "has the name of a component", "rename the group")
        return Components(items, found)

    @staticmethod
    def _read_names(section: str, table: Any, keys: tuple[str, ...] | None, context: Context) -> dict[str, tuple[str, ...]]:
        if table is None:
            return {}
        if not isinstance(table, Mapping):
            context.fault(section, "is no table", f'write [{section}] with name = ["component", ...]')
            return {}
        entries = [Entry(key, "component", many=True) for key in (keys or table)]
        values = read_values(entries, table, section, context)
        return {key: value for key, value in values.words.items()}

    def _feeds(self, feeds: Any, context: Context) -> list[Feed]:
        if isinstance(feeds, (list, tuple)):
            return list(feeds)
        out = []
        for name, table in self._table("feeds", feeds, context).items():
            _check_name(f"feeds.{name}", name, context)
            if isinstance(table, Mapping):
                out.append(Feed(name, **{str(key): value for key, value in table.items()}))
            else:
                context.fault(f"feeds.{name}", "is no table", f"write [feeds.{name}]")
        return out

    def _units(self, units: Any, context: Context) -> list[Unit]:
        if isinstance(units, (list, tuple)):
            return list(units)
        out = []
        for name, table in self._table("units", units, context).items():
            _check_name(f"units.{name}", name, context)
            if not isinstance(table, Mapping):
                context.fault(f"units.{name}", "is no table", f"write [units.{name}] with a kind")
                continue
            kind = table.get("kind")
            if kind is None:
                context.fault(f"units.{name}.kind", "entry is missing", f"add kind, one of {', '.join(KINDS)}")
            elif not isinstance(kind, str) or kind not in KINDS:
                context.fault(f"units.{name}.kind", f"unknown kind {kind!r}", nearest(str(kind), KINDS.names()))
            else:
                entries = {str(key): value for key, value in table.items() if key != "kind"}
                out.append(KINDS.load(kind)(name, **entries))
        return out

    @staticmethod
    def _unsettled(units: Any, read: Mapping[str, Unit]) -> set[str]:
        """Give the names that units with faulty ports mention: what they would connect is not known."""
        names: set[str] = set()
        tables = units.items() if isinstance(units, Mapping) else ((unit.name, unit.raw) for unit in units or ())
        for name, table in tables:
            if not isinstance(table, Mapping):
                continue
            ports = [entry for entry in read[name].entries if entry.sort in ("inlet", "outlet")] if name in read else []
            if name not in read or any(entry.required and not read[name].values.words.get(entry.name) for entry in ports):
                for item in table.values():
                    names |= {part for part in (item if isinstance(item, list) else [item]) if isinstance(part, str)}
        return names

    def _read_loop(self, loop: Any, context: Context) -> tuple[Settings | None, tuple[str, ...]]:
        values = read_values(LOOP, loop if loop is not None else {}, "loop", context)
        method = values.words.get("method", "newton")
        if method not in METHODS:
            context.fault("loop.method", f"unknown method '{method}'", nearest(method, METHODS.names()))
            return None, ()
        found = METHODS.load(method)()
        settings = Settings(found, values.numbers.get("tolerance", 1e-10), values.numbers.get("passes", found.most_passes))
        return settings, values.words.get("tears", ())

    def _check_loops(self, structure: Structure, present: dict[str, np.ndarray], context: Context) -> None:
        """Note components that can get in and not out, and columns whose liquid or gas is nothing."""
        if context.faults:
            return
        for component, streams in structure.trapped(present, structure.paths()).items():
            context.fault(
                f"components.{component}",
                f"'{component}' has a way in and no way out of {', '.join(streams[:4])}",
                "give it a bleed or another way out, or let a makeup hold it",
            )
        for unit in self.units.values():
            for label, stream in unit.inlets.items():
                if label == "liquid_in" and not present[stream].any():
                    context.fault(
                        f"units.{unit.name}.{label}",
                        f"nothing ever flows in '{stream}': no feed brings a solvent and no makeup holds its circulation",
                        'add a makeup with hold = { solvent = "1.6 mol/s" } to the loop',
                    )

    def _gather_numbers(self) -> None:
        """Collect every numeric input by address."""
        self.numbers: dict[str, Any] = {}
        self.sorts: dict[str, str] = {}
        self._entries: dict[str, Entry] = {}
        for owner, values in (
            *((f"feeds.{name}", feed.values) for name, feed in self.feeds.items()),
            *((f"units.{name}", unit.values) for name, unit in self.units.items()),
            *(
                (f"equilibrium.{table.name}.{name}", model.values)
                for table in self.conditions.values()
                for name, model in table.models.items()
            ),
        ):
            for key, number in values.numbers.items():
                self._add_number(f"{owner}.{key}", number, values.sorts[key], values.entries[key])

    def _add_number(self, address: str, number: Any, sort: str, entry: Entry) -> None:
        self.numbers[address], self.sorts[address], self._entries[address] = number, sort, entry

    def varies(self, address: str) -> bool:
        """Tell whether an input may change by small amounts, case by case."""
        entry = self._entries[address]
        return entry.cases and entry.sort != "integer" and not isinstance(self.numbers[address], list)

    def _read_requirements(self, requirements: Any, context: Context) -> dict[str, Requirement]:
        out: dict[str, Requirement] = {}
        freed: dict[str, str] = {}
        for name, table in self._table("requirements", requirements, context).items():
            address = f"requirements.{name}"
            if not isinstance(table, Mapping):
                context.fault(address, "is no table", f"write [{address}]")
                continue
            faults = len(context.faults)
            limits = [key for key in LIMITS if key in table]
            words = read_values(
                REQUIREMENT, {k: v for k, v in table.items() if k not in (*LIMITS, "between")}, address, context
            ).words
            if len(limits) != 1:
                context.fault(address, f"has {' and '.join(limits) if limits else 'no limit'}", f"give one of {', '.join(LIMITS)}")
            quantity, free = words.get("quantity"), words.get("free")
            found = None
            if quantity is not None:
                try:
                    found = formula(quantity, self.plan.phases, self.units, self.bases)[0]
                except AddressError as error:
                    context.fault(f"{address}.quantity", error.problem, error.remedy)
            if free is not None:
                self._check_free(address, free, freed, context)
                freed.setdefault(free, address)
            if len(context.faults) > faults:
                if "between" not in table:
                    context.fault(f"{address}.between", "entry is missing", "add between = [least, most] of the freed input")
                continue
            kind = limits[0]
            entry, scale = _quantity_entry(quantity)
            target = read_number(table[kind], entry, f"{address}.{kind}", context)
            bounds = self._read_bounds(table, address, free, context)
            if target is None or bounds is None:
                continue
            value = target[0] * (scale if target[1] == "molar mass" else 1.0)
            self._add_number(f"{address}.{kind}", value, "number" if target[1] == "molar mass" else target[1], entry)
            out[name] = Requirement(name, quantity, found, free, *bounds, kind)
        return out

    def _check_free(self, address: str, free: str, freed: dict[str, str], context: Context) -> None:
        where = f"{address}.free"
        if free not in self.numbers:
            context.fault(where, f"'{free}' is no numeric input", nearest(free, self.numbers))
        elif not self.varies(free):
            context.fault(where, f"'{free}' cannot be freed", "free an input that can change by small amounts")
        elif free in freed:
            context.fault(where, f"'{free}' is freed by {freed[free]} already", "free another input for one of the two")

    def _read_bounds(self, table: Mapping[str, Any], address: str, free: str, context: Context) -> tuple[float, float] | None:
        where = f"{address}.between"
        raw = table.get("between")
        sort = self.sorts[free]
        shown = DIMENSIONS[sort][1]
        remedy = f'write between = ["{shown}", "{shown}"]' if sort != "number" else "write between = [0.1, 0.9]"
        if not isinstance(raw, (list, tuple)) or len(raw) != 2:
            context.fault(where, "is not two bounds" if "between" in table else "entry is missing", remedy)
            return None
        entry = Entry("between", sort)
        ends = [read_number(item, entry, f"{where}[{place}]", context) for place, item in enumerate(raw)]
        if None in ends:
            return None
        low, high = ends[0][0], ends[1][0]
        if not low < high:
            context.fault(where, "the first bound is not below the second", "write the lower one first")
            return None
        limits = self._entries[free]
        for place, end in enumerate((low, high)):
            if (limits.least is not None and end < limits.least) or (limits.most is not None and end > limits.most):
                context.fault(f"{where}[{place}]", f"is outside what '{free}' may be", "move the bound inside")
                return None
        return low, high

    def _tie(self, item: Requirement) -> Tie:
        _, streams, units = formula(item.address, self.plan.phases, self.units, self.bases)
        makers = [self.plan.structure.makers[stream] for stream in streams]
        quantity_units = (*units, *(unit for unit, _ in makers if unit))
        quantity_feeds = tuple(label for unit, label in makers if not unit)
        free = [name for name, addresses in self.plan.addresses.items() if item.free in addresses.values()]
        feeds = [name for name in self.feeds if item.free.startswith(f"feeds.{name}.")]
        return Tie(quantity_units, quantity_feeds, tuple(free), tuple(feeds))

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
        from leanloop.flowsheet.cases import read_changes

        cases, axis, base, arrays, groups = read_changes(self, changes or {})
        touched = frozenset(changes or {})
        parts = []
        for rows, own in groups:
            size = self._chunk({**base, **own})
            for begin in range(0, len(rows), size):
                chunk = rows[begin : begin + size]
                inputs = Inputs(
                    {**self.numbers, **base, **own}, {key: value[chunk] for key, value in arrays.items()}, len(chunk), touched
                )
                parts.append(self._solve_part(chunk, inputs))
        if cases and all((part.run.status == code(Status.no_steady_state)).all() for part in parts):
            raise InputError([fault for part in parts for fault in part.run.trapped], self.source)
        return Result(self, parts, cases, axis)

    def _chunk(self, numbers: Mapping[str, Any]) -> int:
        """Give how many cases fit into a chunk of memory."""
        per_case = 8.0 * self.plan.width * len(self.plan.phases) * (6 + 2 * self.plan.width)
        for name, unit in self.units.items():
            count = numbers.get(f"units.{name}.stages", unit.values.numbers.get("stages", 0))
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
                    run.step(step)
        self._judge_tables(run)
        return Part(rows, run, found, evaluations + run.evaluations)

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

    def _trapped(self, run: Run) -> list[Fault]:
        """Set the status of cases in which a number, such as a bleed of zero, shuts the only way out."""
        structure, cases = self.plan.structure, run.inputs.cases
        partial = {}
        for unit in self.units.values():
            if unit.shuts:
                numbers = run.inputs.of(self.plan.addresses[unit.name])
                for inlet in unit.inlets:
                    for outlet in unit.outlets:
                        way = unit.passes(inlet, outlet, self.components, numbers)
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
        return total > 0

    def linearised(self, part: Part, numbers: list[str]) -> Run:
        """Give a run at a solved part's states that carries total derivatives along some inputs.

        Parameters
        ----------
        part : Part
        numbers : list of str
            Addresses.

        Returns
        -------
        Run
            Derivatives along `numbers` first; requirements that are active hold.
        """
        done = part.run
        freed = [item.free for item in self.requirements.values() if item.free not in numbers]
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
                run.step(step)
            items = [self.requirements[name] for name in region.requirements]
            if items:
                self._hold(run, items, part)
        return run

    def _hold(self, run: Run, items: list[Requirement], part: Part) -> None:
        """Let freed inputs follow, so that active requirements keep their targets."""
        slopes = np.stack([derivatives(run, item.quantity) for item in items])  # (P, E, M)
        places = [run.extra.index(item.free) for item in items]
        active = np.stack([part.found[item.name].active for item in items], axis=1)  # (M, P)
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


def _check_name(address: str, name: str, context: Context) -> None:
    if not name or not all(letter.isalnum() or letter in "_-" for letter in name):
        context.fault(address, f"'{name}' is no name", "use letters, digits, _ and -")


def _quantity_entry(address: str) -> tuple[Entry, float]:
    """Give how a target of a quantity is written, by the unit in the quantity's name."""
    from leanloop.quantities import NORMAL_MOLES

    for part in reversed(address.split(".")):
        for ending, sort in (("_K", "temperature"), ("_Pa", "pressure"), ("mol_s", "molar flow"), ("_W", "power")):
            if part.endswith(ending):
                return Entry("target", sort), 1.0
        if part.startswith("mg_per_Nm3"):
            return Entry("target", ("number", "molar mass")), NORMAL_MOLES * 1e6
    return Entry("target", "number"), 1.0
