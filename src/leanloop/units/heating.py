"""What heaters, mixers, make-ups and exchangers share: which streams have heat data, tables left, cautions."""

from __future__ import annotations

from collections.abc import Iterable, Mapping

import numpy as np

from leanloop.entries import Context
from leanloop.flash.mixture import Mixture
from leanloop.flash.solve import at_enthalpy
from leanloop.stream import TWO_PHASE, Stream
from leanloop.units.base import Numbers, Surroundings, Unit
from leanloop.units.warmth import lacking


def parts(mixture: Mixture, present: np.ndarray) -> list[tuple[str, np.ndarray]]:
    """Give what may be in each phase of a stream that is flashed.

    Parameters
    ----------
    mixture : Mixture
    present : (C,) bool

    Returns
    -------
    list of (str, (C,) bool)
    """
    return [("gas", present & ~mixture.stays_liquid), ("liquid", present & ~mixture.stays_gas)]


def needs(pairs: Iterable[tuple[str, np.ndarray]]) -> dict[str, np.ndarray]:
    """Give by phase what heat data are needed of, from pairs of a phase and what is in it, (C,) bool.

    A stream that may be of two phases brings its enthalpy along and needs none.
    """
    found: dict[str, np.ndarray] = {}
    for phase, present in pairs:
        if phase in ("gas", "liquid"):
            found[phase] = found.get(phase, False) | present
    return found


def knows_heat(around: Surroundings, wanted: Mapping[str, np.ndarray]) -> bool:
    """Tell whether there are heat data of all that is in each phase, (C,) bool by phase."""
    names = around.components.names
    return around.heat is not None and not any(lacking(around.heat, *item, names) for item in wanted.items())


def refuse_two_phases(unit: Unit, label: str, address: str, context: Context, remedy: str) -> None:
    """Note a fault where an inlet may be of two phases and the unit does not flash.

    Parameters
    ----------
    unit : Unit
        Connected.
    label : str
        Of the inlet.
    address : str
        Entry of the unit that the fault stands at.
    context : Context
    remedy : str
    """
    if unit.around.phases.get(label) == TWO_PHASE:
        stream = unit.inlets[label]
        context.fault(f"units.{unit.name}.{address}", f"stream '{stream}' may be of gas and liquid", remedy)


def off_table(mixture: Mixture | None, stream: Stream, numbers: Numbers) -> np.ndarray:
    """Tell in which cases a two-phase stream leaves the equilibrium tables.

    Parameters
    ----------
    mixture : Mixture or None
        None for a stream that is not flashed.
    stream : Stream
    numbers : mapping

    Returns
    -------
    (M,) bool
    """
    shape = stream.state.shape[:-1]
    if mixture is None:
        return np.zeros(shape, dtype=bool)
    split = at_enthalpy(mixture, stream.flows, stream.total * stream.state[..., -2], stream.pressure, numbers)
    return np.broadcast_to(split.off_table, shape)


def range_cautions(unit: Unit, streams: Iterable[Stream]) -> list[str]:
    """Say where heat data are used outside what they are stated for.

    Parameters
    ----------
    unit : Unit
        Connected, with heat data.
    streams : iterable of Stream
        Two-phase ones as `Flashed`, else they are passed over.

    Returns
    -------
    list of str
    """
    met: dict[str, list[np.ndarray]] = {}
    flows = {"gas": 0.0, "liquid": 0.0}
    for stream in streams:
        if stream.phase == TWO_PHASE and not hasattr(stream, "warmth"):
            continue
        for phase in ("gas", "liquid") if stream.phase == TWO_PHASE else (stream.phase,):
            met.setdefault(phase, []).append(np.real(stream.temperature).reshape(-1))
            flows[phase] = flows[phase] + np.nan_to_num(np.real(stream.flows)).reshape(-1, stream.flows.shape[-1]).sum(axis=0)
    found = []
    for phase, temperatures in met.items():
        for item, amount in zip(unit.around.heat.items, flows[phase], strict=True):
            if item is not None and amount > 0 and (item.has_gas if phase == "gas" else item.has_liquid):
                said = item.cautions(np.concatenate(temperatures), phase)
                found += [f"{unit.kind.capitalize()} {unit.name}, {item.name}: {sentence}." for sentence in said]
    return found
