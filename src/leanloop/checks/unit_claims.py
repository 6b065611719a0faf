"""What a unit kind tells the engine without calculating, held against what it calculates."""

from __future__ import annotations

import numpy as np

from leanloop.checks.base import require
from leanloop.checks.stand import SAME, SUITE, Stand
from leanloop.stream import Stream

MORE = 1.03  # what a part is multiplied by to see who follows
PLACES = {"flows": slice(None, -2), "temperature": -2, "pressure": -1}
check = SUITE.check


@check("what the sections do not cover is never calculated", "list every label of both sides in exactly one section")
def sections_cover(stand: Stand) -> None:
    """Every port is in exactly one section."""
    for side, labels in enumerate((stand.unit.inlets, stand.unit.outlets)):
        listed = sorted(label for section in stand.unit.sections() for label in section[side])
        require(listed == sorted(labels), f"the sections list {listed} of {sorted(labels)}")


@check("phases decide what may be connected", "let phase() say what calculate() gives, and None while it is unknown")
def phase_truthful(stand: Stand) -> None:
    """The phase told is that of the outlet."""
    phases = {name: inlet.phase for name, inlet in stand.inlets.items()}
    for label, stream in stand.evaluate().outlets.items():
        told, unknown = stand.unit.phase(label, phases), stand.unit.phase(label, {})
        require(told == stream.phase, f"phase() says that '{label}' is {told}, and it is {stream.phase}")
        require(unknown in (None, told), f"phase() says that '{label}' is {unknown} while nothing is known")


@check("ways in and out of loops are found from it", "mark as not passing only what never reaches the outlet by that inlet")
def passes_truthful(stand: Stand) -> None:
    """A component that does not pass leaves no trace in the outlet."""
    unit, width = stand.unit, len(stand.components)
    base, adds = stand.outlets(), unit.adds(stand.components) | unit.makes(stand.components)
    reached = {label: np.zeros((stand.cases, width), dtype=bool) for label in base}
    for inlet in stand.inlets:
        for outlet in base:
            always = unit.passes(inlet, outlet, stand.components)
            require(always.shape == (width,) and always.dtype == bool, f"passes() gives {always.dtype} {always.shape}")
            now = np.broadcast_to(unit.passes(inlet, outlet, stand.components, stand.numbers), (stand.cases, width))
            require(not (now & ~always).any(), f"with numbers more passes from '{inlet}' to '{outlet}' than without")
            require(unit.shuts or (now == always).all(), "passes() depends on numbers, and shuts is False")
            reached[outlet] |= now
            for place in np.flatnonzero(~now.all(axis=0) & (stand.inlets[inlet].flows > 0).any(axis=0)):
                more = stand.outlets(stand.moved(inlet, place, lambda flow: MORE * flow))[outlet]
                follows = (np.abs(more - base[outlet])[:, place] > SAME * base[outlet][:, place]) & ~now[:, place]
                name = stand.components.names[place]
                require(not follows.any(), f"'{name}' of '{inlet}' is said not to pass to '{outlet}', whose '{name}' follows it")
    for outlet, ways in reached.items():
        for _, place in np.argwhere((base[outlet][:, :-2] != 0) & ~ways & ~adds)[:1]:
            require(False, f"'{stand.components.names[place]}' is said to reach '{outlet}' from no inlet, and is there")


@check("a flow that is set ends the search for what may build up", "let holds() name only what the inlets do not change")
def holds_truthful(stand: Stand) -> None:
    """A flow that is held does not follow the inlets."""
    base = sum(stand.outlets().values())
    for label in stand.inlets:
        now = sum(stand.outlets(stand.moved(label, PLACES["flows"], lambda flows: flows / MORE)).values())
        for place in np.flatnonzero(stand.unit.holds(stand.components)):
            gap, name = np.abs(now - base)[:, place].max(), stand.components.names[place]
            require(gap <= SAME * base[:, place].max(), f"'{name}' is said to be held and follows '{label}'")


@check("what vanishes or is made decides what may build up", "let makes() and destroys() say what made() gives")
def makes_and_destroys_truthful(stand: Stand) -> None:
    """Numbers take away from what can be made or vanish; of what vanishes, more does where more comes."""
    unit, components = stand.unit, stand.components
    for title, tell in (("makes", unit.makes), ("destroys", unit.destroys)):
        always = tell(components)
        require(always.shape == (len(components),) and always.dtype == bool, f"{title}() gives {always.dtype} {always.shape}")
        now = np.broadcast_to(tell(components, stand.numbers), (stand.cases, len(components)))
        require(not (now & ~always).any(), f"{title}() says more with numbers than without")
        require(title == "makes" or unit.shuts or (now == always).all(), "destroys() depends on numbers, and shuts is False")
    for label in stand.inlets:
        for place in np.flatnonzero(now.any(axis=0)):
            gone = []
            for inlets in (stand.inlets, stand.moved(label, place, lambda flow: MORE * flow)):
                made = unit.made(inlets, stand.evaluate(inlets).outlets, stand.numbers)
                gone.append(np.zeros(stand.cases) if made is None else -made[:, place])
            flows = now[:, place] & (stand.inlets[label].flows[:, place] > 0)
            more = gone[1] - gone[0] > SAME * stand.inlets[label].flows[:, place]
            require(more[flows].all(), f"'{components.names[place]}' is said to vanish, and no more does where more comes")


@check("a loop leaves out what it cannot change", "let leans_on() list every part of an inlet that moves the outlet")
def leans_on_truthful(stand: Stand) -> None:
    """Temperature and pressure of an outlet follow nothing that is not listed."""
    base = stand.outlets()
    for outlet in base:
        for what in ("temperature", "pressure"):
            told = stand.unit.leans_on(outlet, what)
            odd = [pair for pair in told if pair[0] not in stand.inlets or pair[1] not in PLACES]
            require(not odd, f"leans_on() lists {odd}, which are no parts of inlets")
            for inlet in stand.inlets:
                listed = [part for label, part in told if label == inlet]
                for part, place in PLACES.items():
                    # one flow alone as well, which a composition follows, and a step either way, for the least of several
                    tries = [(own, by) for own in ((place, -3) if part == "flows" else (place,)) for by in (MORE, 1 / MORE)]
                    for own, factor in tries if part not in listed else ():
                        now = stand.outlets(stand.moved(inlet, own, lambda value, factor=factor: factor * value))
                        gap = np.abs(now[outlet] - base[outlet])[:, PLACES[what]]
                        follows = (gap > SAME * np.abs(base[outlet][:, PLACES[what]])).any()
                        require(not follows, f"the {what} of '{outlet}' follows the {part} of '{inlet}', which is not listed")


@check("the order of the components means nothing", "find components by name, never by place")
def components_permute(stand: Stand) -> None:
    """Other orders of the components give the same flows."""
    other = Stand(stand.plugin, stand.scene, backwards=True)
    back = [*range(len(stand.components))[::-1], -2, -1]
    now = other.outlets()
    for label, state in stand.outlets().items():
        gap = stand.apart(now[label][:, back], state)
        require(gap <= SAME, f"with the components in reversed order '{label}' is {gap:.1e} apart")


@check("there is no absolute size of a plant", "write formulas without a size of their own, or set scales = False")
def flows_scale(stand: Stand) -> None:
    """More of every flow gives as much more of the outlets, where the class says so."""
    if not stand.unit.scales:
        return
    factor, base = 7.0, stand.outlets()
    inlets = {
        label: Stream(np.concatenate([factor * stream.flows, stream.state[:, -2:]], axis=1), stream.phase)
        for label, stream in stand.inlets.items()
    }
    flows = [key for key, sort in stand.sorts.items() if "flow" in sort or sort in ("power", "heat transfer")]
    sized = {key: factor * stand.numbers[key] for key in flows}
    now = stand.outlets(inlets, {**stand.numbers, **sized})
    for label, state in base.items():
        grown = np.concatenate([factor * state[:, :-2], state[:, -2:]], axis=1)
        gap = stand.apart(now[label], grown, factor * stand.sizes())
        require(gap <= SAME, f"with {factor:g} times the flows '{label}' is {gap:.1e} apart from that much more")


@check("readers rely on what is said", "give a list of sentences, and (M,) bool from off_table where there is one")
def cautions_are_sentences(stand: Stand) -> None:
    """Cautions and the judgement of tables have the right form."""
    found = stand.evaluate()
    sides = stand.inlets, found.outlets, stand.numbers, found.memory
    said = stand.unit.cautions(*sides)
    good = isinstance(said, list) and all(isinstance(item, str) and item.strip().endswith(".") for item in said)
    require(good, f"cautions() gives {said!r}")
    if hasattr(stand.unit, "off_table"):
        off = np.asarray(stand.unit.off_table(stand.inlets, stand.numbers, found.memory))
        require(off.shape == (stand.cases,) and off.dtype == bool, f"off_table() gives {off.dtype} {off.shape}")
