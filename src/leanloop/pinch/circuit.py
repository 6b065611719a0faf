"""The closed pair in a flowsheet: which loop, columns, make-up, stripping gas and requirement belong together."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from leanloop.flowsheet.quantity import AddressError, formula
from leanloop.flowsheet.requirement import Requirement
from leanloop.pinch.case import Case


@dataclass(frozen=True)
class Circuit:
    """One absorber and one stripper on one solvent.

    Attributes
    ----------
    absorber, stripper, makeup : str
        Unit names.
    hold : tuple of str
        Addresses of the flows that the make-up holds.
    steam : tuple of str
        Addresses of the flow of the stripping gas; empty where it is none of a feed's.
    boil : tuple of str
        Address of what boils the reboiler of a stripper without stripping gas; empty where there is none, or where it
        is a temperature.
    requirement : Requirement or None
        What is asked of the cleaned gas; None where the outlet as solved is taken.
    """

    absorber: str
    stripper: str
    makeup: str
    hold: tuple[str, ...]
    steam: tuple[str, ...]
    boil: tuple[str, ...]
    requirement: Requirement | None


def find(case: Case) -> Circuit | str:
    """Give the pair, or a sentence that says why there is none.

    Parameters
    ----------
    case : Case
    """
    plan, sheet = case.plan, case.sheet
    columns = {name: unit for name, unit in plan.units.items() if hasattr(unit, "cleans")}
    loops = [step for step in plan.steps if step.tears and columns.keys() & set(step.units)]
    if not loops:
        return "no solvent loop closes over an absorber and a stripper"
    if len(loops) > 1:
        return f"there are {len(loops)} solvent loops: a window belongs to one of them"
    units = loops[0].units
    absorbers = [name for name in units if name in columns and columns[name].cleans == "gas"]
    strippers = [name for name in units if name in columns and columns[name].cleans != "gas"]
    for names, word in ((absorbers, "absorber"), (strippers, "stripper")):
        if not names:
            return f"the loop has no {word}"
        if len(names) > 1:
            return f"several {word}s share the solvent ({', '.join(names)}), so that one window is ambiguous"
    makeups = [name for name in units if plan.units[name].holds(plan.components).any()]
    if len(makeups) != 1:
        return "no make-up holds the circulation" if not makeups else f"several make-ups hold flows: {', '.join(makeups)}"
    makeup = makeups[0]
    hold = tuple(address for key, address in plan.addresses[makeup].items() if key.startswith("hold."))
    asked = list(sheet.requirements.values())
    if len(asked) > 1:
        return f"{len(asked)} requirements ({', '.join(sheet.requirements)}) are held together, so that one window is ambiguous"
    requirement = asked[0] if asked else None
    if requirement is not None and not _on_outlet(case, requirement, absorbers[0]):
        return f"requirement {requirement.name} asks for nothing in the gas that {absorbers[0]} cleans"
    stripper = plan.units[strippers[0]]
    kinds = [f"reboiler.{key}" for key in ("duty", "boil_up", "stripping_ratio")]
    boil: tuple[str, ...] = ()
    if "gas_in" not in stripper.inlets:
        boil = tuple(f"units.{stripper.name}.{key}" for key in kinds if key in stripper.values.numbers)
    return Circuit(absorbers[0], stripper.name, makeup, hold, _gas_flow(case, stripper.name, set(units)), boil, requirement)


def _on_outlet(case: Case, item: Requirement, absorber: str) -> bool:
    """Tell whether a requirement asks for the cleaned gas of a column, or for its removal."""
    plan = case.plan
    if item.address.startswith(f"units.{absorber}.results.removal."):
        return True
    try:
        _, streams, _ = formula(item.address, plan.phases, plan.units, case.sheet.bases)
    except AddressError:
        return False
    clean = plan.units[absorber].outlets["gas_out"]
    for stream in streams:
        own, flows = case.state(stream).flows, case.state(clean).flows
        if stream != clean and not (plan.phases[stream] == "gas" and np.allclose(own, flows, rtol=1e-12, atol=0.0)):
            return False
    return bool(streams)


def _gas_flow(case: Case, stripper: str, loop: set[str]) -> tuple[str, ...]:
    """Give the addresses that set the flow of the stripping gas: those of the one feed behind it."""
    plan = case.plan
    stream = plan.units[stripper].inlets.get("gas_in")
    while stream is not None and stream not in plan.feeds:
        unit = plan.units[plan.structure.makers[stream][0]]
        if len(unit.inlets) != 1 or unit.name in loop:
            return ()
        stream = next(iter(unit.inlets.values()))
    if stream is None:
        return ()
    numbers = plan.feeds[stream].values.numbers
    keys = ["flow"] if "flow" in numbers else [key for key in numbers if key.startswith("flows.")]
    return tuple(f"feeds.{stream}.{key}" for key in keys)
