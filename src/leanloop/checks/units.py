"""What every unit kind must keep: reading, balances, and cases that know nothing of one another."""

from __future__ import annotations

import copy

import numpy as np

from leanloop.checks.base import documented, require, well_formed
from leanloop.checks.stand import NAME, SAME, SUITE, Stand
from leanloop.entries import Context
from leanloop.status import OK
from leanloop.units.base import Unit

BALANCE = 1e-12
check = SUITE.check


@check("files, messages and the catalogue are made of entries", "declare each entry with a sort and a line of doc", whole=True)
def entries(plugin: type[Unit]) -> None:
    """The class is documented and its entries can be read."""
    documented(plugin, "kind")
    well_formed(plugin.entries, ("inlet", "outlet", "component", "equilibrium"))
    require(any(entry.sort == "outlet" for entry in plugin.entries), "there is no outlet among its entries")
    require(plugin.derivatives in ("complex", "own", "difference"), f"derivatives is {plugin.derivatives!r}")
    own = plugin.evaluate is not Unit.evaluate
    require(own or plugin.derivatives != "own", "derivatives is 'own', and evaluate is not its own")


@check("without an example nothing is checked", "give one scene or more by a class method examples()", whole=True)
def examples(plugin: type[Unit]) -> None:
    """There are scenes, and every case of them is solved."""
    scenes = plugin.examples()
    require(scenes, "examples() gives none")
    for scene in scenes:
        Stand(plugin, scene).outlets()


@check("faults are collected by read, and one unit may be read often", "keep name and raw, and work in read", whole=True)
def constructor_stores(plugin: type[Unit]) -> None:
    """The constructor only stores, and reading gives a copy."""
    odd = {"no such entry": object()}
    unit = plugin(NAME, **odd)
    require(unit.name == NAME and unit.raw == odd, "the constructor changes its name or its entries")
    before, kept = dict(vars(unit)), copy.deepcopy((unit.values, unit.inlets, unit.outlets))
    context = Context()
    read = unit.read(context)
    still = all(vars(unit).get(key) is value for key, value in before.items()) and len(vars(unit)) == len(before)
    still = still and (unit.values, unit.inlets, unit.outlets) == kept
    require(read is not unit and still, "read changes the unit itself")
    require(context.faults, "read notes no fault of an unknown entry")


@check("a slip of the pen must be found, with its place", "leave reading to the base class, or note every fault")
def faults_have_addresses(stand: Stand) -> None:
    """An unknown, a wrong and a missing entry give a fault at their address."""
    raw = dict(stand.scene.entries)
    tries = [({**raw, "no_such": 1.0}, "no_such")]
    tries += [({**raw, name: object()}, name) for name in raw]
    for entry in stand.plugin.entries:
        if entry.required:
            tries.append(({key: value for key, value in raw.items() if key != entry.name}, entry.name))
    for table, name in tries:
        context = Context(plain_si=True)
        stand.plugin(NAME, **table).read(context)
        found = [fault.address for fault in context.faults]
        require(any(item.startswith(f"units.{NAME}.{name}") for item in found), f"no fault at units.{NAME}.{name}: {found}")


@check("the engine takes outlets by label, with a case axis", "return every outlet by label with states (M, C + 2)")
def outlets_complete(stand: Stand) -> None:
    """Every outlet and rough outlet is there in the right shape."""
    unit, width = stand.unit, len(stand.components) + 2
    found = stand.evaluate()
    shapes = ((stand.cases, width), (1, width))
    rough = unit.estimate(stand.inlets, stand.numbers) if len(unit.sections()) == 1 else found.outlets
    for title, streams in (("outlet", found.outlets), ("rough outlet", rough)):
        for label in unit.outlets:
            state = streams[label].state
            require(state.shape in shapes and state.dtype == float, f"{title} '{label}' is {state.dtype} {state.shape}")
    for takes, _ in unit.sections():
        status = np.shape(unit.evaluate({label: stand.inlets[label] for label in takes}, stand.numbers, None, {}, {}, 0).status)
        require(status == (stand.cases,), f"the status has the shape {status}")


@check("other units and methods use the same arrays", "work on copies")
def inlets_unchanged(stand: Stand) -> None:
    """Inlets, numbers and memory are bitwise the same after an evaluation."""
    inlets, numbers = stand.copied()
    memory = stand.evaluate(inlets, numbers).memory
    kept = copy.deepcopy(memory)
    stand.evaluate(inlets, numbers, memory)
    for label, stream in stand.inlets.items():
        require(inlets[label].state.tobytes() == stream.state.tobytes(), f"inlet '{label}' is changed")
    for title, one, other in (("number", numbers, stand.spread), ("memory", memory, kept)):
        for key, value in other.items():
            require(np.array_equal(one[key], value, equal_nan=True), f"{title} '{key}' is changed")


@check("nothing may arise or vanish", "count what comes from outside in added(), what reacts in made()")
def balance(stand: Stand) -> None:
    """Of every component as much leaves as comes in, is added and is made."""
    stand.outlets()
    found = stand.evaluate()
    fed = sum(stream.flows for stream in stand.inlets.values())
    left = sum(stream.flows for stream in found.outlets.values())
    sides = stand.inlets, found.outlets, stand.numbers
    added, made = (np.zeros_like(fed) if item is None else item for item in (stand.unit.added(*sides), stand.unit.made(*sides)))
    gap, allowed = fed + added + made - left, BALANCE * (fed + left + np.abs(added) + np.abs(made))
    for case, place in np.argwhere(~(np.abs(gap) <= allowed))[:1]:
        name, open_by = stand.components.names[place], gap[case, place]
        require(False, f"case {case}: {open_by:.3g} mol/s of '{name}' vanish, of {fed[case, place]:.3g} mol/s fed")
    for told, flows, words in (("adds", np.abs(added), "is added"), ("makes", made, "is made")):
        for place in np.flatnonzero(~getattr(stand.unit, told)(stand.components) & (flows > allowed).any(axis=0)):
            require(False, f"'{stand.components.names[place]}' {words}, and {told}() does not say so")


@check("a batch is nothing but its cases", "let no case act on another: no sum or norm over the case axis")
def cases_alone(stand: Stand) -> None:
    """A case in a batch gives what it gives alone."""
    whole = stand.evaluate(numbers=stand.spread)
    for case in range(stand.cases):
        one = stand.evaluate(*stand.take([case]))
        for label, state in stand.states(whole.outlets).items():
            gap = stand.apart(one.outlets[label].state, state[[case]], stand.sizes()[[case]])
            require(gap <= SAME, f"case {case} alone gives another '{label}', {gap:.1e} apart")
        require(one.status[0] == whole.status[case], f"case {case} alone ends with another status")


@check("one bad case must not cost the others", "never reduce over the case axis; leave NaN in its own row")
def nan_stays(stand: Stand) -> None:
    """NaN in one case leaves the others as they were."""
    whole, others = stand.evaluate(numbers=stand.spread), np.arange(1, stand.cases)
    states = stand.states(whole.outlets)
    for variable in stand.variables():
        found = stand.evaluate(*stand.at(variable, np.where(np.arange(stand.cases) == 0, np.nan, variable.value)))
        where = f"NaN in case 0 of {variable.title}"
        for label, state in stand.states(found.outlets).items():
            gap = stand.apart(state[1:], states[label][1:], stand.sizes()[1:])
            require(gap <= SAME, f"{where} changes '{label}' of others by {gap:.1e}")
            require(found.status[0] != OK or np.isfinite(state[0]).all(), f"{where} ends as converged with NaN in '{label}'")
        require((found.status[others] == whole.status[others]).all(), f"{where} changes the status of others")


@check("a loop starts empty and feeds may be shut", "write formulas that are regular at zero, or give a status")
def zero_flow(stand: Stand) -> None:
    """Flows of zero give finite outlets or a status."""
    tries = [(f"inlet '{label}'", stand.moved(label, slice(None, -2), np.zeros_like)) for label in stand.inlets]
    for place, name in enumerate(stand.components.names):
        tries.append((f"component '{name}'", {label: stand.moved(label, place, np.zeros_like)[label] for label in stand.inlets}))
    empty = {label: stand.moved(label, slice(None, -2), np.zeros_like)[label] for label in stand.inlets}
    for title, inlets in (*tries, ("everything", empty)):
        found = stand.evaluate(inlets)
        for label, state in stand.states(found.outlets).items():
            state = state[found.status == OK]
            where = f"where {title} is zero, and the status is converged"
            require(np.isfinite(state).all(), f"'{label}' is not finite {where}")
            require((state[:, :-2] >= -BALANCE * stand.fed.max()).all(), f"'{label}' is negative {where}")
        if len(stand.unit.sections()) == 1:
            with np.errstate(all="ignore"):
                stand.unit.estimate(inlets, stand.numbers)
