"""The contract checks themselves: good toys pass them all, and each check catches a plug-in broken for it."""

import os
import subprocess
import sys
import textwrap
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

import leanloop
from leanloop.checks import SORTS, ContractError, check_equilibrium, check_recycle, check_unit, checks_for
from leanloop.checks.base import KNOWN, Suite
from leanloop.entries import Context, Entry
from leanloop.equilibrium.base import EquilibriumModel, Proportional
from leanloop.recycle.base import RecycleMethod
from leanloop.registry import BrokenPlugin, Registry
from leanloop.status import OK, Status, code
from leanloop.stream import Stream, divide
from leanloop.units.base import Evaluation, Inlet, Scene, Unit

# --- a good toy of each sort


class Sieve(Unit):
    """Keeps some components below, sends a share of the others up, and warms what goes up."""

    kind = "sieve"
    entries = (
        Entry("takes", "inlet", required=True, doc="the stream to part"),
        Entry("up", "outlet", required=True, doc="what passes"),
        Entry("down", "outlet", required=True, doc="what is kept, and the rest"),
        Entry("keeps", "component", required=True, many=True, doc="components that never go up"),
        Entry("share", "number", required=True, least=0.0, most=1.0, doc="part of the others that goes up"),
        Entry("most", "molar flow", above=0.0, doc="flow at which half of the share goes up"),
        Entry("rise", "temperature difference", doc="warming of what goes up"),
    )

    @classmethod
    def examples(cls):
        fed = Inlet("liquid", {"oil": [1.0, 2.0], "tar": [0.1, 0.2], "light": [0.0, 0.3]}, [300.0, 330.0], [1e5, 2e5])
        raw = {"takes": "all", "up": "clean", "down": "rest", "keeps": ["tar"], "share": 0.7}
        return [Scene({**raw, "most": "3 mol/s", "rise": "5 K"}, {"takes": fed}), Scene({**raw, "share": 1.0}, {"takes": fed})]

    def passes(self, inlet, outlet, components, numbers=None):
        kept = components.mask(self.values.words["keeps"])
        return ~kept if outlet == "up" else np.ones(len(components), dtype=bool)

    def leans_on(self, outlet, what):
        return [("takes", what)]

    def calculate(self, inlets, numbers):
        stream, components = inlets["takes"], self.around.components
        goes = np.asarray(numbers["share"])[..., None] * ~components.mask(self.values.words["keeps"])
        if "most" in numbers:
            goes = goes * (numbers["most"] / (numbers["most"] + stream.total))[..., None]
        up = stream.flows * goes
        return {
            "up": Stream.of(up, stream.temperature + numbers.get("rise", 0.0), stream.pressure, stream.phase),
            "down": stream.carrying(stream.flows - up),
        }

    def results(self, inlets, outlets, numbers, memory):
        part = divide(outlets["up"].flows, inlets["takes"].flows)
        return {"results": {"recovery": {name: part[..., place] for place, name in enumerate(self.around.components.names)}}}


class Rust(Unit):
    """Turns a part of one component into another, of whose molecules it takes half as many."""

    kind = "rust"
    entries = (
        Entry("takes", "inlet", required=True, doc="the stream before"),
        Entry("gives", "outlet", required=True, doc="the stream behind"),
        Entry("part", "number", required=True, least=0.0, most=0.9, doc="part of the iron that rusts"),
    )
    shuts = True

    @classmethod
    def examples(cls):
        fed = Inlet("liquid", {"iron": [1.0, 2.0], "rust": [0.0, 0.2], "oil": [0.3, 0.1]}, [300.0, 330.0], [1e5, 2e5])
        raw = {"takes": "new", "gives": "old"}
        return [Scene({**raw, "part": 0.3}, {"takes": fed}), Scene({**raw, "part": 0.0}, {"takes": fed})]

    def makes(self, components, numbers=None):
        return components.mask(["rust"] if numbers is None or np.all(np.asarray(numbers["part"]) > 0) else [])

    def destroys(self, components, numbers=None):
        return components.mask(["iron"] if numbers is None or np.all(np.asarray(numbers["part"]) > 0) else [])

    def leans_on(self, outlet, what):
        return [("takes", what)]

    def made(self, inlets, outlets, numbers):
        flows, components = inlets["takes"].flows, self.around.components
        gone = np.asarray(numbers["part"] * flows[..., components.index["iron"]])[..., None]
        return gone * (0.5 * components.mask(["rust"]) - components.mask(["iron"]))

    def calculate(self, inlets, numbers):
        return {"gives": inlets["takes"].carrying(inlets["takes"].flows + Rust.made(self, inlets, {}, numbers))}


class Pair(Unit):
    """Two streams side by side, each brought half way to a temperature by an iteration that remembers its end."""

    kind = "pair"
    derivatives = "own"
    entries = (
        Entry("gas_in", "inlet", required=True, doc="one stream"),
        Entry("gas_out", "outlet", required=True, doc="the same, warmer or colder"),
        Entry("liquid_in", "inlet", required=True, doc="another stream"),
        Entry("liquid_out", "outlet", required=True, doc="the same, warmer or colder"),
        Entry("temperature", "temperature", required=True, doc="where both tend to"),
    )

    @classmethod
    def examples(cls):
        ports = {"gas_in": "a", "gas_out": "b", "liquid_in": "c", "liquid_out": "d"}
        gas, liquid = Inlet("gas", {"air": [1.0, 2.0]}, [300.0, 320.0]), Inlet("liquid", {"oil": [0.5, 0.1]}, 350.0, 2e5)
        return [Scene({**ports, "temperature": "100 degC"}, {"gas_in": gas, "liquid_in": liquid})]

    def sections(self):
        return [(("gas_in",), ("gas_out",)), (("liquid_in",), ("liquid_out",))]

    def phase(self, outlet, phases):
        return outlet.partition("_")[0]

    def passes(self, inlet, outlet, components, numbers=None):
        return np.full(len(components), inlet.partition("_")[0] == outlet.partition("_")[0])

    def leans_on(self, outlet, what):
        return [(outlet.replace("out", "in"), what)]

    def calculate(self, inlets, numbers):
        return self.evaluate(inlets, numbers, None, {}, {}, 0).outlets

    def evaluate(self, inlets, numbers, memory, tangents, number_tangents, seeds):
        outlets, found, kept, ways, status = {}, {}, {}, {}, OK
        for label, stream in inlets.items():
            out, aim = label.replace("in", "out"), stream.temperature * numbers["temperature"]
            root = memory[out].copy() if memory else stream.temperature + 0.0
            for _ in range(30):  # the geometric mean by Heron's rule
                root = (root + aim / root) / 2
            kept[out] = root
            outlets[out] = stream.at(root)
            status = np.where(np.isfinite(outlets[out].state).all(axis=-1), OK, code(Status.not_finite))
            if seeds:
                own = tangents.get(label)
                way = np.zeros((seeds, *stream.state.shape)) if own is None else own.copy()
                moved = way[..., -2] * numbers["temperature"] + stream.temperature * number_tangents.get("temperature", 0.0)
                way[..., -2] = ways[out] = moved / (2 * root)
                found[out] = way
        return Evaluation(outlets, found, status, kept, ways)


class Binding(EquilibriumModel):
    """y = K (P0/P) exp(s (1 - 300/T)) x / (1 + b x): a solute that fills up places."""

    name = "binding"
    entries = (
        Entry("K", "number", required=True, least=0.0, doc="ratio of a trace"),
        Entry("b", "number", required=True, least=0.0, doc="places"),
        Entry("s", "number", required=True, doc="rise with temperature"),
        Entry("at", "pressure", required=True, doc="pressure of the ratio"),
    )

    @classmethod
    def examples(cls):
        return [{"K": 0.3, "b": 2.0, "s": 5.0, "at": "1 bar"}, {"K": 20.0, "b": 0.1, "s": -3.0, "at": "2 bar"}]

    def gas(self, temperature, pressure, liquid, numbers):
        ratio = numbers["K"] * numbers["at"] / pressure * np.exp(numbers["s"] * (1 - 300 / temperature))
        return ratio * liquid / (1 + numbers["b"] * liquid)


class Straight(Proportional):
    """y = K x / P."""

    name = "straight"
    entries = (Entry("K", "pressure", required=True, doc="partial pressure over mole fraction"),)

    @property
    def uses(self):
        return frozenset(("pressure",))

    @classmethod
    def examples(cls):
        return [{"K": "0.4 bar"}]

    def k(self, temperature, pressure, numbers):
        return numbers["K"] / pressure


class Damped(RecycleMethod):
    """x+ = x + share (g - x)."""

    name = "damped"
    most_passes = 2000
    entries = (Entry("share", "number", above=0.0, most=1.0, doc="of the step to g, 0.7 by default"),)
    share = 0.7

    @classmethod
    def examples(cls):
        return [{"share": 0.4}]

    def begin(self, x):
        return {"error": np.full(len(x), np.inf)}

    def propose(self, trial, state):
        return trial.x + self.share * (trial.g - trial.x), {"error": trial.error}


GOOD = [
    (check_unit, Sieve), (check_unit, Rust), (check_unit, Pair),
    (check_equilibrium, Binding), (check_equilibrium, Straight), (check_recycle, Damped),
]  # fmt: skip


@pytest.mark.parametrize(("check", "plugin"), GOOD, ids=lambda item: item.__name__)
def test_a_good_one_passes_every_check(check, plugin):
    check(plugin)


def variant(base, **body):
    """A class that differs from a good one in what is given; its docstring is kept."""
    return type("Broken" + base.__name__, (base,), {"__doc__": base.__doc__, **body})


# --- units


def after(base, change):
    """A unit whose calculated outlets are changed: change(self, outlets, inlets, numbers)."""

    def calculate(self, inlets, numbers):
        return change(self, base.calculate(self, inlets, numbers), inlets, numbers)

    return variant(base, calculate=calculate)


def evaluated(base, change):
    """A unit whose evaluation is changed: change(found, arguments)."""

    def evaluate(self, *arguments):
        return change(base.evaluate(self, *arguments), arguments)

    return variant(base, evaluate=evaluate)


def shifted(stream, by):
    return stream.at(stream.temperature + by)


def in_place(self, outlets, inlets, numbers):
    inlets["takes"].state[..., -1] += 1.0
    return outlets


def forgetful(self, name, **raw):
    Unit.__init__(self, name, **{key: value for key, value in raw.items() if key == "share"})


def strict(self, name, **raw):
    Unit.__init__(self, name, **raw)
    if float(raw["share"]) < 0:
        raise ValueError("share")


def reading_itself(self, context):
    read = Unit.read(self, context)
    self.values = read.values
    return read


def lenient(self, context):
    known = {entry.name for entry in self.entries}
    return Unit.read(type(self)(self.name, **{key: value for key, value in self.raw.items() if key in known}), context)


def by_place(self, outlets, inlets, numbers):
    flows = inlets["takes"].flows * np.array([0.1, 0.0, 0.0])
    return {"up": outlets["up"].carrying(flows), "down": outlets["down"].carrying(inlets["takes"].flows - flows)}


def sized(self, outlets, inlets, numbers):
    flows = outlets["up"].flows / (1.0 + inlets["takes"].total[..., None])
    return {"up": outlets["up"].carrying(flows), "down": outlets["down"].carrying(inlets["takes"].flows - flows)}


def leaky(self, outlets, inlets, numbers):
    return {**outlets, "down": outlets["down"].carrying(outlets["down"].flows * (1 - 1e-9))}


def fountain(base):
    """Adds a tenth, and says so by added() but not by adds()."""
    made = after(base, lambda self, outlets, inlets, numbers: {
        **outlets, "up": outlets["up"].carrying(1.1 * outlets["up"].flows)})  # fmt: skip
    made.added = lambda self, inlets, outlets, numbers: outlets["up"].flows / 11
    return made


def mixing(self, outlets, inlets, numbers):
    return {**outlets, "up": shifted(outlets["up"], np.nanmean(np.real(inlets["takes"].temperature)))}


def infecting(self, outlets, inlets, numbers):
    own = np.real(inlets["takes"].temperature)
    return {**outlets, "up": shifted(outlets["up"], 0.0 * own.sum())}


def blessing(found, arguments):
    found.status = np.full_like(found.status, OK)
    return found


def refusing(self, outlets, inlets, numbers):
    if not inlets["takes"].flows.any():
        raise ZeroDivisionError("nothing flows")
    return outlets


def undefined(self, outlets, inlets, numbers):
    whole = inlets["takes"].total
    return {**outlets, "up": shifted(outlets["up"], whole / whole - 1.0)}



def real_only(self, outlets, inlets, numbers):
    return {**outlets, "up": shifted(outlets["up"], abs(inlets["takes"].pressure) * 1e-6)}


def steeper(found, arguments):
    return replace(found, tangents={key: None if way is None else 1.001 * way for key, way in found.tangents.items()})


def blind_to_numbers(base):
    return variant(base, evaluate=lambda self, *arguments: base.evaluate(self, *arguments[:4], {}, arguments[5]))


def narrow(found, arguments):
    return replace(found, tangents={key: way if way is None else way[0] for key, way in found.tangents.items()})


def wrong_memory(found, arguments):
    return replace(found, memory_tangents={key: 2 * way for key, way in found.memory_tangents.items()})


def drifting(self, *arguments):
    found = Pair.evaluate(self, *arguments)
    outlets = {label: shifted(stream, 0.1) for label, stream in found.outlets.items()} if arguments[2] else found.outlets
    return replace(found, outlets=outlets)


def overwriting(self, *arguments):
    for value in (arguments[2] or {}).values():
        value *= 1.01
    return Pair.evaluate(self, *arguments)


def extra_outlet(self, outlets, inlets, numbers):
    return {"up": outlets["up"]}


def flat_state(self, outlets, inlets, numbers):
    return {**outlets, "up": Stream(outlets["up"].state[..., :-1], "liquid")}


def with_entry(*more):
    return variant(Sieve, entries=(*Sieve.entries, *more))


def always_some(self, inlet, outlet, components, numbers=None):
    found = Sieve.passes(self, inlet, outlet, components)
    return found if numbers is None else found & (np.asarray(numbers["share"]) > 0.8)


def never_oil(self, inlet, outlet, components, numbers=None):
    return Sieve.passes(self, inlet, outlet, components) & ~components.mask(["oil"])


def more_at_last(self, inlet, outlet, components, numbers=None):
    return Sieve.passes(self, inlet, outlet, components) | (numbers is not None)


def fixed():
    """Sends a set flow of oil up, whatever comes."""

    def change(self, outlets, inlets, numbers):
        flows = outlets["up"].flows + 0.0
        flows[..., self.around.components.index["oil"]] = 0.05
        return {"up": outlets["up"].carrying(flows), "down": outlets["down"].carrying(inlets["takes"].flows - flows)}

    return after(Sieve, change)


def half_as_much(self, inlets, outlets, numbers):
    return Rust.made(self, inlets, outlets, numbers) / 2


def only_with_numbers(self, components, numbers=None):
    return np.full(len(components), numbers is not None)


def oil_as_well(self, components, numbers=None):
    return components.mask(["oil"])


def lonely(found, arguments):
    if len(found.status) == 1:
        found.status = np.full_like(found.status, code(Status.unit_failed))
    return found


def condemning(found, arguments):
    found.status = np.full_like(found.status, found.status.max())
    return found


def tired(self, *arguments):
    found = Pair.evaluate(self, *arguments)
    return replace(found, status=found.status + code(Status.unit_failed)) if arguments[2] else found


def owing(self, outlets, inlets, numbers):
    none = (inlets["takes"].total == 0)[..., None]
    return {**outlets, "up": outlets["up"].carrying(np.where(none, -1.0, outlets["up"].flows))}


def stacked(self, outlets, inlets, numbers):
    return {**outlets, "up": shifted(outlets["up"], inlets["takes"].temperature.ndim * 1.0)}


def never_oil_up(self, inlet, outlet, components, numbers=None):
    return never_oil(self, inlet, outlet, components) if outlet == "up" else Sieve.passes(self, inlet, outlet, components)


def results_of(leaf):
    return variant(Sieve, results=lambda self, inlets, outlets, numbers, memory: {"results": {"leaf": leaf(inlets["takes"])}})


def scenes_of(base, *scenes):
    return variant(base, examples=classmethod(lambda cls: list(scenes)))


WRONG_SCENE = Scene({"takes": "all", "share": 3}, {"takes": Inlet("gas", {"air": 1.0})})
UNSOLVED_SCENE = replace(Sieve.examples()[0], inlets={"takes": Inlet("liquid", {"oil": np.inf, "tar": 1.0})})
WRONG_LABEL = replace(Sieve.examples()[0], inlets={"all": Inlet("liquid", {"oil": 1.0, "tar": 1.0})})

UNITS = [
    (KNOWN, variant(Sieve, known_failures={"balence": "misspelt"}), "balence"),
    (KNOWN, variant(Sieve, known_failures={"balance": " "}), "its reason"),
    ("balance", variant(Sieve, known_failures={"balance": "leaks"}), "and holds"),
    ("entries", with_entry(Entry("odd")), "'odd' has no doc"),
    ("entries", with_entry(Entry("odd", "weight", doc="x")), "unknown sort weight"),
    ("entries", with_entry(Entry("kind", doc="x")), "cannot be written"),
    ("entries", with_entry(Entry("share", doc="x")), "listed twice"),
    ("entries", with_entry(Entry("odd", "choice", doc="x")), "has choices"),
    ("entries", with_entry(Entry("odd", "table", doc="x")), "nested"),
    ("entries", with_entry(Entry("odd", by="stream", doc="x")), "unknown names 'stream'"),
    ("entries", with_entry(Entry("odd", least=2.0, below=1.0, doc="x")), "no value keeps"),
    ("entries", with_entry(Entry("odd", "table", nested=(Entry("in"),), doc="x")), "'in' has no doc"),
    ("entries", variant(Sieve, entries=Sieve.entries[:1]), "no outlet"),
    ("entries", variant(Sieve, derivatives="own"), "evaluate is not its own"),
    ("entries", variant(Sieve, derivatives="exact"), "'exact'"),
    ("entries", type("Bare", (Sieve,), {}), "no docstring"),
    ("entries", variant(Sieve, kind=""), "no kind"),
    ("examples", scenes_of(Sieve), "gives none"),
    ("examples", scenes_of(Sieve, WRONG_SCENE), "units.unit.up: entry is missing"),
    ("examples", scenes_of(Sieve, UNSOLVED_SCENE), "end with not_finite"),
    ("examples", scenes_of(Sieve, WRONG_LABEL), "not ['all']"),
    ("constructor_stores", variant(Sieve, __init__=forgetful), "changes its name or its entries"),
    ("constructor_stores", variant(Sieve, __init__=strict), "KeyError"),
    ("constructor_stores", variant(Sieve, read=reading_itself), "changes the unit itself"),
    ("constructor_stores", variant(Sieve, read=lambda self, context: self), "changes the unit itself"),
    ("constructor_stores", variant(Sieve, read=lambda self, context: Unit.read(self, Context())), "no fault of an unknown entry"),
    ("examples", variant(Sieve, addresses=lambda self: {"share": "units.unit.part"}), "'units.unit.part', where there is none"),
    ("faults_have_addresses", variant(Sieve, read=lenient), "no fault at units.unit.no_such"),
    ("outlets_complete", after(Sieve, extra_outlet), "down"),
    ("outlets_complete", after(Sieve, flat_state), "'up' is float64"),
    ("outlets_complete", evaluated(Sieve, lambda found, _: replace(found, status=OK)), "status has the shape"),
    ("outlets_complete", variant(Sieve, estimate=lambda self, inlets, numbers: {"up": inlets["takes"]}), "down"),
    ("sections_cover", variant(Sieve, sections=lambda self: [(("takes",), ("up",))]), "['up'] of ['down', 'up']"),
    ("sections_cover", variant(Pair, sections=lambda self: 2 * Pair.sections(self)), "of ['gas_in', 'liquid_in']"),
    ("phase_truthful", variant(Sieve, phase=lambda self, outlet, phases: "gas" if phases else None), "'up' is gas, and"),
    ("phase_truthful", variant(Sieve, phase=lambda self, outlet, phases: "liquid" if phases else "gas"), "nothing is known"),
    ("inlets_unchanged", after(Sieve, in_place), "inlet 'takes' is changed"),
    ("inlets_unchanged", after(Sieve, lambda self, outlets, inlets, numbers: numbers.clear() or outlets), "share"),
    ("inlets_unchanged", variant(Pair, evaluate=overwriting), "memory 'gas_out' is changed"),
    ("balance", after(Sieve, leaky), "vanish"),
    ("balance", fountain(Sieve), "adds() does not say so"),
    ("balance", variant(Rust, made=lambda *_: None), "of 'iron' vanish"),
    ("balance", variant(Rust, made=half_as_much), "of 'iron' vanish"),
    ("balance", variant(Rust, makes=Unit.makes), "'rust' is made, and makes() does not say so"),
    ("makes_and_destroys_truthful", variant(Rust, makes=lambda *_: np.ones(2)), "makes() gives float64 (2,)"),
    ("makes_and_destroys_truthful", variant(Rust, destroys=lambda *_: np.ones(2)), "destroys() gives float64 (2,)"),
    ("makes_and_destroys_truthful", variant(Rust, makes=only_with_numbers), "makes() says more with numbers"),
    ("makes_and_destroys_truthful", variant(Rust, destroys=only_with_numbers), "destroys() says more with numbers"),
    ("makes_and_destroys_truthful", variant(Rust, shuts=False), "destroys() depends on numbers, and shuts is False"),
    ("makes_and_destroys_truthful", variant(Rust, destroys=oil_as_well), "'oil' is said to vanish"),
    ("makes_and_destroys_truthful", variant(Sieve, destroys=oil_as_well), "'oil' is said to vanish"),
    ("holds_truthful", variant(Sieve, holds=lambda self, components: components.mask(["oil"])), "'oil' is said to be held"),
    ("cases_alone", after(Sieve, mixing), "case 0 alone gives another 'up'"),
    ("nan_stays", after(Sieve, infecting), "changes 'up' of others"),
    ("cases_alone", evaluated(Sieve, lonely), "case 0 alone ends with another status"),
    ("nan_stays", evaluated(Sieve, blessing), "NaN in 'up'"),
    ("nan_stays", evaluated(Sieve, condemning), "changes the status of others"),
    ("zero_flow", after(Sieve, refusing), "ZeroDivisionError: nothing flows"),
    ("zero_flow", evaluated(after(Sieve, undefined), blessing), "not finite where"),
    ("zero_flow", evaluated(after(Sieve, owing), blessing), "is negative where"),
    ("complex_and_leading_axes", after(Sieve, stacked), "leading axis 'up' is"),
    ("complex_and_leading_axes", after(Sieve, lambda self, outlets, inlets, numbers: {
        **outlets, "up": outlets["up"].carrying(outlets["up"].flows[:, :2])}), "ValueError"),
    ("complex_and_leading_axes", after(Sieve, lambda self, outlets, inlets, numbers: {
        **outlets, "up": Stream(outlets["up"].state.reshape(-1, outlets["up"].state.shape[-1]), "liquid")}), "ValueError"),
    ("derivatives_along_inlets", after(Sieve, real_only), "along pressure of 'takes' is off"),
    ("derivatives_along_inlets", evaluated(Sieve, steeper), "'up' along oil of 'takes' is off"),
    ("derivatives_along_inlets", evaluated(Pair, narrow), "have the shape"),
    ("derivatives_along_inlets", evaluated(Pair, wrong_memory), "memory 'gas_out'"),
    ("derivatives_along_numbers", blind_to_numbers(Sieve), "along number 'share' is off"),
    ("results_differentiable", results_of(lambda stream: np.abs(stream.flows)), "along oil of 'takes' is off"),
    ("results_differentiable", results_of(lambda stream: stream.total.sum()), "without the case axis"),
    ("memory_keeps_the_answer", variant(Pair, evaluate=drifting), "from memory 'gas_out'"),
    ("memory_keeps_the_answer", variant(Pair, evaluate=tired), "from memory a case ends with another status"),
    ("memory_keeps_the_answer", evaluated(Sieve, lambda found, _: replace(found, memory={"count": np.array(3)})), "case axis"),
    ("passes_truthful", variant(Sieve, passes=never_oil), "'oil' of 'takes' is said not to pass to 'up'"),
    ("passes_truthful", variant(Sieve, passes=always_some), "shuts is False"),
    ("passes_truthful", variant(Sieve, passes=more_at_last), "more passes from 'takes' to 'up' than without"),
    ("passes_truthful", variant(fixed(), passes=never_oil_up), "'oil' is said to reach 'up' from no inlet"),
    ("passes_truthful", variant(Sieve, passes=lambda *_, **__: np.ones(2)), "passes() gives float64 (2,)"),
    ("leans_on_truthful", variant(Sieve, leans_on=lambda self, outlet, what: []), "temperature of 'up' follows the temperature"),
    ("leans_on_truthful", variant(Sieve, leans_on=lambda self, outlet, what: [("takes", "heat")]), "no parts of inlets"),
    ("components_permute", after(Sieve, by_place), "reversed order"),
    ("flows_scale", after(Sieve, sized), "times the flows"),
    ("cautions_are_sentences", variant(Sieve, cautions=lambda *_: "Mind this."), "cautions() gives"),
    ("cautions_are_sentences", variant(Sieve, cautions=lambda *_: ["mind"]), "cautions() gives"),
    ("cautions_are_sentences", variant(Sieve, off_table=lambda *_: False), "off_table() gives"),
]  # fmt: skip

# --- equilibrium models


def gas_of(base, change):
    """A model whose gas is changed: change(gas, temperature, pressure, liquid, numbers)."""
    return variant(base, gas=lambda self, *at: change(base.gas(self, *at), *at))


def lenient_read(cls, table, address, context):
    own = Context()
    found = super(Binding, cls).read(table, address, own)
    context.faults += [fault for fault in own.faults if "no_such" not in fault.address]
    return found or super(Binding, cls).read(Binding.examples()[0], address, Context())


def stubborn_read(cls, table, address, context):
    return super(Binding, cls).read(table, address, context) or super(Binding, cls).read(cls.examples()[0], address, Context())


def kept_numbers(self, values):
    EquilibriumModel.__init__(self, values)
    self.kept = values.numbers["b"]


def remembering(self, *at):
    self.values.numbers["K"] = self.values.numbers["K"] * 1.0001
    return Binding.gas(self, *at)


def counted(self, *at):
    self.calls = getattr(self, "calls", 0) + 1
    return Binding.gas(self, *at)


def log_of(gas, temperature, pressure, liquid, numbers):
    return gas * np.log(liquid + 0j).real / np.log(liquid + 0j).real


MODELS = [
    (KNOWN, variant(Binding, known_failures={"gas_falls": "misspelt"}), "gas_falls"),
    ("gas_rises", variant(Binding, known_failures={"gas_rises": "falls"}), "and holds"),
    ("entries", variant(Binding, entries=(*Binding.entries, Entry("c"))), "'c' has no doc"),
    ("entries", variant(Binding, entries=(*Binding.entries, Entry("c", "inlet", doc="x"))), "unknown sort inlet"),
    ("entries", variant(Binding, name=""), "no name"),
    ("examples", variant(Binding, examples=classmethod(lambda cls: [])), "gives none"),
    ("examples", variant(Binding, examples=classmethod(lambda cls: [{"K": "1 bar"}])), "component.K"),
    ("examples", variant(Binding, coordinates="mass"), "'mass'"),
    ("examples", variant(Binding, read=classmethod(lambda cls, *_: None)), "read() gives None"),
    ("faults_have_addresses", variant(Binding, read=classmethod(lenient_read)), "component.no_such"),
    ("faults_have_addresses", variant(Binding, read=classmethod(stubborn_read)), "a model in spite of"),
    ("gas_positive", gas_of(Binding, lambda gas, *_: gas - 0.01), "the gas is -0.0"),
    ("gas_positive", gas_of(Binding, lambda gas, temperature, *_: np.where(temperature > 300, np.nan, gas)), "the gas is nan"),
    ("gas_positive", variant(Binding, outside=lambda self, t, p, x, numbers: (t * p * x) > -1), "nothing is checked"),
    ("zero_is_regular", gas_of(Binding, log_of), "without the component is nan"),
    ("gas_rises", gas_of(Binding, lambda gas, t, p, liquid, n: gas * (1 - 0.9 * liquid)), "the gas falls"),
    ("uses_truthful", variant(Binding, uses=frozenset(("temperature", "liquid"))), "depends on the pressure"),
    ("uses_truthful", variant(Binding, uses=frozenset(("temperature", "pressure"))), "depends on the liquid"),
    ("uses_truthful", variant(Binding, uses=frozenset(("temperature", "pressure", "liquid", "weather"))), "weather"),
    ("slopes_right", variant(Binding, slopes=lambda self, *at: tuple(1.001 * item for item in EquilibriumModel.slopes(self, *at))),
     "slope along the temperature"),
    ("slopes_right", variant(Straight, slopes=lambda self, t, p, x, n: (0 * t, -n["K"] * x / p**2, n["K"] / p)), "has the shape"),
    ("complex_truthful", variant(Binding, complex_safe=False), "slopes() is not its own"),
    ("complex_truthful", gas_of(Binding, lambda gas, t, p, x, n: abs(gas)), "complex step along the temperature"),
    ("complex_truthful", gas_of(Binding, lambda gas, t, *_: gas * (1 + 0.1 * np.iscomplexobj(t))), "along the temperature is off"),
    ("complex_truthful", gas_of(Straight, lambda gas, t, p, x, n: gas + 1e-9 * np.iscomplexobj(p)), "changes the real part"),
    ("complex_truthful", gas_of(Straight, lambda gas, t, p, x, n: gas / n["K"] * np.real(n["K"])), "number 'K'"),
    ("numbers_broadcast", gas_of(Straight, lambda gas, t, p, x, n: gas / n["K"] * np.ravel(n["K"])[0]), "of a batch"),
    ("numbers_by_argument", variant(Binding, __init__=kept_numbers, gas=lambda self, t, p, x, n: Binding.gas(
        self, t, p, x, {**n, "b": self.kept})), "number 'b'"),
    ("numbers_by_argument", variant(Binding, gas=remembering), "number 'K'"),
    ("numbers_by_argument", variant(Binding, gas=counted), "changed by using it"),
    ("proportional_is_linear", gas_of(Straight, lambda gas, t, p, liquid, n: gas * (1 + liquid)), "twice the liquid"),
    ("proportional_is_linear", variant(Straight, uses=frozenset(("pressure", "liquid"))), "uses names the liquid"),
    ("ratio_at_zero_is_the_limit", variant(Straight, ratio_at_zero=lambda self, t, p, n: 1.01 * n["K"] / p), "is off"),
    ("ratio_at_zero_is_the_limit", variant(Straight, ratio_at_zero=lambda self, t, p, n: 1.0), "has the shape ()"),
    ("outside_is_bool", variant(Binding, outside=lambda *_: False), "outside() gives ()"),
    ("outside_is_bool", variant(Binding, outside=lambda self, t, p, x, numbers: 0.0 * (t + p + x)), "float64"),
    ("cautions_are_sentences", variant(Binding, cautions=lambda *_: "Mind this."), "cautions() gives"),
]  # fmt: skip

# --- recycle methods


def careless(self, **options):
    pass


def shifting(self, x):
    x += 1.0
    return {}


def on_self(self, trial, state):
    last = getattr(self, "last", None)
    self.last = trial.g.copy()
    return (trial.g if last is None or last.shape != trial.g.shape else (trial.g + last) / 2), state


def counting(self, trial, state):
    type(self).count += 1
    return trial.g, state


def common(self, trial, state):
    return trial.x + (0.5 + 0.4 / (1 + trial.error.max())) * (trial.g - trial.x), state


def by_batch(self, trial, state):
    return trial.x + (0.9 if len(trial.x) == 5 else 0.6) * (trial.g - trial.x), state


def overshooting(self, trial, state):
    return trial.g + 0.9 * (trial.g - trial.x), state



def undefined_step(self, trial, state):
    with np.errstate(all="ignore"):
        ratio = (trial.x - state["x"]) / (trial.x - state["x"])
    return np.where(np.isnan(state["x"]), trial.g, trial.g * ratio), {"x": trial.x}


def scribbling(self, trial, state):
    trial.g[trial.g > 2.5] = 2.5
    return trial.g, state


METHODS = [
    (KNOWN, variant(Damped, known_failures={"contraction": "misspelt"}), "contraction"),
    ("nan_stays", variant(Damped, known_failures={"nan_stays": "spoils"}), "and holds"),
    ("entries", variant(Damped, entries=(Entry("share"),)), "'share' has no doc"),
    ("entries", variant(Damped, entries=(Entry("depth", "integer", doc="x"),)), "'depth' has no default"),
    ("entries", variant(Damped, __init__=careless), "without a word"),
    ("entries", type("Bare", (Damped,), {}), "no docstring"),
    ("contraction_solved", variant(Damped, propose=lambda self, trial, state: (trial.x, state)), "is not solved"),
    ("contraction_solved", variant(Damped, most_passes=5), "after 5 passes"),
    ("contraction_solved", variant(Damped, propose=lambda self, trial, state: (trial.jacobian @ trial.x, state)), "ValueError"),
    ("answer_costs_one_pass", variant(Damped, begin=shifting), "costs"),
    ("passes_counted", variant(Damped, most_passes=1), "most_passes is 1"),
    ("passes_counted", variant(Damped, most_passes=50.0), "most_passes is 50.0"),
    ("instance_can_be_reused", variant(Damped, propose=on_self), "another answer"),
    ("configuration_frozen", variant(Damped, propose=on_self), "a run changes last"),
    ("configuration_frozen", variant(Damped, propose=counting, count=0), "a run changes count"),
    ("cases_alone", variant(Damped, propose=common), "alone"),
    ("nan_stays", variant(Damped, propose=by_batch), "changes the others"),
    ("state_in_rows", variant(Damped, begin=lambda self, x: {"error": np.inf}), "state 'error' has the shape ()"),
    ("proposals_in_bounds", variant(Damped, propose=overshooting, most_passes=500), "is proposed"),
    ("proposals_in_bounds", variant(
        Damped, begin=lambda self, x: {"x": np.full(x.shape, np.nan)}, propose=undefined_step), "nan is proposed in pass 2"),
    ("proposals_in_bounds", variant(Damped, propose=lambda self, trial, state: (
        trial.g[:, 0] if trial.g.max() > 1e5 else trial.g, state)), "has the shape (2,)"),
    ("cases_alone", variant(Damped, propose=by_batch), "passes alone and"),
    ("trial_unchanged", variant(Damped, propose=scribbling), "propose() changes g"),
    ("trial_unchanged", variant(Damped, begin=shifting), "begin() changes x"),
]  # fmt: skip

BROKEN = {"units": UNITS, "equilibrium": MODELS, "recycle": METHODS}


@pytest.mark.parametrize(
    ("sort", "check", "plugin", "words"),
    [(sort, *item) for sort, items in BROKEN.items() for item in items],
    ids=[f"{sort}-{item[0]}-{number}" for sort, items in BROKEN.items() for number, item in enumerate(items)],
)
def test_a_broken_one_is_caught(sort, check, plugin, words):
    with pytest.raises(ContractError) as caught:
        dict(checks_for(sort))[check](plugin)
    assert [finding.check for finding in caught.value.findings] == [check]
    finding = caught.value.findings[0]
    assert words in finding.problem, finding.problem
    assert finding.reason and finding.remedy
    assert all(part in str(caught.value) for part in (plugin.__name__, check, finding.problem, finding.reason, finding.remedy))


@pytest.mark.parametrize("sort", BROKEN)
def test_every_check_has_a_broken_one(sort):
    assert {item[0] for item in BROKEN[sort]} == {name for name, _ in checks_for(sort)}


# --- how findings are gathered


def test_all_breaches_are_listed_at_once():
    plugin = variant(after(Sieve, leaky), leans_on=lambda self, outlet, what: [], cautions=lambda *_: ["mind"])
    with pytest.raises(ContractError) as caught:
        check_unit(plugin)
    found = {finding.check for finding in caught.value.findings}
    assert found == {"balance", "leans_on_truthful", "cautions_are_sentences"}
    text = str(caught.value)
    assert text.startswith("unit kind BrokenBrokenSieve breaks 3 checks of its contract:\n")
    assert "\n  balance: example 0: case 0: " in text and "mol/s of 'oil' vanish, of 1 mol/s fed\n    reason: nothing" in text


def test_a_known_failure_is_let_through_while_it_fails():
    leaks = variant(after(Sieve, leaky), known_failures={"balance": "a leak is what it is for"})
    check_unit(leaks)
    mended = variant(Sieve, known_failures={"balance": "a leak is what it is for"})
    with pytest.raises(ContractError, match="a leak is what it is for.*holds") as caught:
        check_unit(mended)
    assert [finding.check for finding in caught.value.findings] == ["balance"]


def test_examples_may_be_given_from_outside():
    plugin = variant(Straight, examples=classmethod(lambda cls: [{"K": "2 bar"}]))
    check_equilibrium(plugin, [{"K": "1 bar"}])
    with pytest.raises(ContractError, match="unknown entry 'k'"):
        check_equilibrium(plugin, [{"k": "1 bar"}])
    check_recycle(Damped, [{"share": 0.9}])
    with pytest.raises(ContractError, match="is not solved"):
        check_recycle(Damped, [{"share": 1e-6}])
    check_unit(Sieve, Sieve.examples()[:1])


def test_a_warning_breaks_a_check():
    def warning(self, outlets, inlets, numbers):
        np.nanmax(np.full(3, np.nan))
        return outlets

    with pytest.raises(ContractError, match="raises RuntimeWarning: All-NaN"):
        check_unit(after(Sieve, warning))


def test_a_suite_runs_each_check_on_each_example_and_loads_by_name():
    registry = Registry("toy", "leanloop.no_such_group", {}, "leanloop.recycle.base:RecycleMethod")
    registry.add("damped", Damped)
    seen = []
    suite = Suite(registry, lambda plugin: [1, 2], lambda plugin, example: (plugin, example))

    @suite.check("why", "what to do")
    def looks(subject):
        seen.append(subject)

    suite.run("damped")
    assert seen == [(Damped, 1), (Damped, 2)]
    assert [name for name, _ in suite.functions()] == [KNOWN, "looks"]


def test_the_checks_bring_neither_pytest_nor_a_plugin():
    script = "import sys, leanloop.checks\nprint(*sys.modules)"
    environment = {**os.environ, "PYTHONPATH": str(Path(leanloop.__file__).parent.parent)}
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", script], capture_output=True, text=True, timeout=60, check=True, env=environment
    )
    loaded = set(done.stdout.split())
    assert "leanloop.checks" in loaded
    listed = {target.partition(":")[0] for suite in SORTS.values() for target in suite.registry._table.values()}
    assert not loaded & {"pytest", "_pytest", "hypothesis", *listed}


# --- a plug-in of another package


@pytest.fixture
def outside(tmp_path):
    """Run Python in a process that finds a package with two plug-ins listed, one of which is broken."""
    (tmp_path / "outside_units.py").write_text(textwrap.dedent('''
        """Units of another package."""
        from leanloop.entries import Entry
        from leanloop.stream import Stream
        from leanloop.units.base import Inlet, Scene, Unit


        class Restriction(Unit):
            """Takes a share of a stream's pressure."""

            kind = "restriction"
            entries = (
                Entry("takes", "inlet", required=True, doc="the stream"),
                Entry("gives", "outlet", required=True, doc="the same at less pressure"),
                Entry("loss", "number", required=True, least=0.0, below=1.0, doc="share of the pressure that is lost"),
            )

            @classmethod
            def examples(cls):
                return [Scene({"takes": "a", "gives": "b", "loss": 0.1}, {"takes": Inlet("gas", {"air": [1.0, 2.0]})})]

            def leans_on(self, outlet, what):
                return [("takes", what)]

            def calculate(self, inlets, numbers):
                stream = inlets["takes"]
                pressure = stream.pressure * (1 - numbers["loss"])
                return {"gives": Stream.of(stream.flows, stream.temperature, pressure, stream.phase)}
    '''), encoding="utf-8")  # fmt: skip
    listing = tmp_path / "outside-1.0.dist-info"
    listing.mkdir()
    (listing / "METADATA").write_text("Metadata-Version: 2.1\nName: outside\nVersion: 1.0\n", encoding="utf-8")
    (listing / "entry_points.txt").write_text(
        "[leanloop.units]\nrestriction = outside_units:Restriction\ngone = outside_units:Gone\n", encoding="utf-8"
    )

    def run(*arguments):
        path = os.pathsep.join([str(tmp_path), str(Path(leanloop.__file__).parent.parent)])
        return subprocess.run(
            [sys.executable, "-W", "error", *arguments],
            capture_output=True, text=True, timeout=60, check=False, env={**os.environ, "PYTHONPATH": path},
        )  # fmt: skip

    return run


def test_an_outside_unit_is_found_and_checked(outside):
    done = outside("-c", (
        "from leanloop.checks import check_unit, checks_for\nfrom leanloop.units import KINDS\n"
        "assert 'restriction' in KINDS and 'restriction' in KINDS.names()\n"
        "check_unit('restriction')\nprint(KINDS.load('restriction').__module__)"
    ))  # fmt: skip
    assert (done.returncode, done.stdout, done.stderr) == (0, "outside_units\n", "")


def test_a_broken_outside_unit_is_named(outside):
    done = outside("-c", (
        "from leanloop.registry import BrokenPlugin\nfrom leanloop.units import KINDS\n"
        "try:\n    KINDS.load('gone')\nexcept BrokenPlugin as error:\n    print(error)"
    ))  # fmt: skip
    assert done.returncode == 0
    assert done.stdout.startswith("unit kind 'gone' cannot be loaded from 'outside_units:Gone': ")


def test_the_catalogue_lists_both(outside):
    done = outside("-m", "leanloop", "catalogue")
    assert (done.returncode, done.stderr) == (0, "")
    assert "restriction: Takes a share of a stream's pressure." in done.stdout.splitlines()
    assert "gone: cannot be used: unit kind 'gone' cannot be loaded from 'outside_units:Gone': " in done.stdout
    assert "mixer: " in done.stdout


def test_a_class_of_another_sort_is_refused():
    table = {"damped": "leanloop.recycle.base:RecycleMethod"}
    registry = Registry("unit kind", "leanloop.no_such_group", table, SORTS["units"].registry.base)
    with pytest.raises(BrokenPlugin, match="unit kind 'damped'.*does not derive from Unit"):
        registry.load("damped")
