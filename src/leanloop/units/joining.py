"""What drums make of several inlets, and what they know and say of the heat and the phases of their outlets."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from leanloop.equilibrium.conditions import Conditions
from leanloop.stream import TWO_PHASE, Stream
from leanloop.units.base import Numbers, Unit
from leanloop.units.warmth import heat_flow, lacking


def lowest_pressure(streams: Sequence[Stream]) -> np.ndarray:
    """Give the lowest pressure of some streams; those that tie share its derivative.

    Parameters
    ----------
    streams : sequence of Stream

    Returns
    -------
    (...,) Pa
    """
    pressures = np.broadcast_arrays(*(stream.pressure for stream in streams))
    least = np.min([np.real(item) for item in pressures], axis=0)
    if not any(np.iscomplexobj(item) for item in pressures):
        return least
    tied = [np.real(item) == least for item in pressures]
    slope = sum(np.imag(item) * own for item, own in zip(pressures, tied, strict=True))
    return least + 1j * slope / np.maximum(sum(own.astype(int) for own in tied), 1)


def drum_pressure(inlets: Mapping[str, Stream], numbers: Numbers) -> np.ndarray:
    """Give the pressure of a drum: the one written, or the lowest of its inlets, (...,) Pa."""
    return np.asarray(numbers["pressure"]) if "pressure" in numbers else lowest_pressure(list(inlets.values()))


def all_flows(inlets: Mapping[str, Stream]) -> np.ndarray:
    """Give the flows of all inlets together, (..., C) mol/s."""
    return sum(stream.flows for stream in inlets.values())


def heat_in(unit: Unit, inlets: Mapping[str, Stream], numbers: Numbers) -> np.ndarray:
    """Give the enthalpy flow of all inlets together, (...,) W."""
    return sum(heat_flow(stream, unit.around.heat, numbers) for stream in inlets.values())


def present_in(unit: Unit) -> np.ndarray:
    """Tell which components some inlet can bring, (C,) bool."""
    return np.any([*unit.around.present.values(), np.zeros(len(unit.around.components), dtype=bool)], axis=0)


def stays(unit: Unit, table: Conditions | None) -> tuple[np.ndarray, np.ndarray]:
    """Tell which components stay in the gas and which in the liquid, by an equilibrium table or without one.

    Returns
    -------
    (C,) bool, (C,) bool
    """
    components = unit.around.components
    found = [item.stays_in if table is None else table.stays_in(item.name, components) for item in components]
    return np.array([phase == "gas" for phase in found], dtype=bool), np.array([phase == "liquid" for phase in found], dtype=bool)


def phases_with_heat(unit: Unit, stays_gas: np.ndarray, stays_liquid: np.ndarray) -> dict[str, np.ndarray]:
    """Give, by phase, the components of which a drum has to know the enthalpy there.

    Those of its gas and its liquid, and those that come in a stream of one phase.

    Returns
    -------
    dict of str to (C,) bool
    """
    present, around = present_in(unit), unit.around
    found = {"gas": present & ~stays_liquid, "liquid": present & ~stays_gas}
    for label, phase in around.phases.items():
        if phase in found:
            found[phase] = found[phase] | around.present[label]
    return found


def knows_heat(unit: Unit, phases: Mapping[str, np.ndarray]) -> bool:
    """Tell whether the enthalpies of all components are known in the phases that they are in."""
    names = unit.around.components.names
    return not any(lacking(unit.around.heat, phase, present, names) for phase, present in phases.items())


def pressure_caution(unit: Unit, title: str, inlets: Mapping[str, Stream], pressure: np.ndarray) -> list[str]:
    """Say where a stream comes with less than a drum's pressure."""
    return [
        f"{title} {unit.name}: stream {unit.inlets[label]} is fed at less than its pressure; a pump or a blower is needed."
        for label, stream in inlets.items()
        if np.any(stream.pressure < pressure * (1 - 1e-6))
    ]


def heat_cautions(unit: Unit, title: str, streams: Mapping[str, Stream]) -> list[str]:
    """Say where heat data are used outside their range in streams of one phase.

    Parameters
    ----------
    unit : Unit
    title : str
        Of the unit's kind, to begin a sentence with.
    streams : mapping of str to Stream
    """
    found: dict[str, None] = {}
    heat = unit.around.heat
    for stream in streams.values():
        if heat is None or stream.phase == TWO_PHASE:
            continue
        for place, item in enumerate(heat.items):
            flows = stream.flows[..., place] > 0
            if item is None or not flows.any():
                continue
            met = np.broadcast_to(stream.temperature, flows.shape)[flows]
            found.update(dict.fromkeys(f"{title} {unit.name}, {item.name}: {said}." for said in item.cautions(met, stream.phase)))
    return list(found)
