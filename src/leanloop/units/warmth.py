"""Enthalpy flows of streams, and temperatures from them: what units that balance heat share."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from leanloop.enthalpy.heat import Heat
from leanloop.entries import Context
from leanloop.flash.mixture import Mixture
from leanloop.stream import TWO_PHASE, Stream
from leanloop.units.base import Numbers, Unit

LOWEST, HIGHEST = 20.0, 5000.0  # K, between which a temperature is looked for
STEPS = 60


def heat_flow(stream: Stream, heat: Heat, numbers: Numbers) -> np.ndarray:
    """Give the enthalpy flow of a stream.

    Parameters
    ----------
    stream : Stream
        State (..., C + 2); of a two-phase one the molar enthalpy stands in the place of the temperature.
    heat : Heat
    numbers : mapping
        Of the unit; those of the heat data by ``heat.NAME.key``.

    Returns
    -------
    (...,) W
    """
    if stream.phase == TWO_PHASE:
        return stream.total * stream.state[..., -2]
    function = heat.gas if stream.phase == "gas" else heat.liquid
    return (stream.flows * function(stream.temperature, numbers)).sum(axis=-1)


def temperature_at(
    heat: Heat, phase: str, flows: np.ndarray, energy: np.ndarray, numbers: Numbers, guess: np.ndarray
) -> np.ndarray:
    """Give the temperature at which a stream of one phase has a given enthalpy.

    Parameters
    ----------
    heat : Heat
    phase : str
        ``"gas"`` or ``"liquid"``.
    flows : (..., C) mol/s
        Real or complex, as `energy` and numbers.
    energy : (...,) W
    numbers : mapping
    guess : (...,) K
        To begin with, and the answer where nothing flows.

    Returns
    -------
    (...,) K
        NaN where there is none between 20 and 5000 K. Derivatives are those of the implicit function.
    """
    function, capacity = (heat.gas, heat.gas_capacity) if phase == "gas" else (heat.liquid, heat.liquid_capacity)
    real = {key: np.real(value) if isinstance(value, np.ndarray) else value for key, value in numbers.items()}
    amounts, wanted = np.real(flows), np.real(energy)
    now = np.real(np.broadcast_to(guess, wanted.shape)).astype(float)
    empty = amounts.sum(axis=-1) == 0
    with np.errstate(all="ignore"):
        for _ in range(STEPS):
            slope = (amounts * capacity(now, real)).sum(axis=-1)
            step = (wanted - (amounts * function(now, real)).sum(axis=-1)) / slope
            step = np.where(empty, 0.0, np.clip(step, -0.5 * now, now))
            now = np.clip(now + step, LOWEST, HIGHEST)
            if not np.any(np.abs(step) > 1e-12 * now):
                break
        else:
            now = np.where(np.abs(step) > 1e-9 * now, np.nan, now)
        if not any(np.iscomplexobj(item) for item in (flows, energy, *numbers.values())):
            return now
        slope = (amounts * capacity(now, real)).sum(axis=-1)
        miss = energy - (flows * function(now, numbers)).sum(axis=-1)
        own = np.where(empty, guess, now + 1j * np.imag(miss) / np.where(slope == 0, 1.0, slope))
    return own


def lacking(heat: Heat | None, phase: str, present: np.ndarray, names: tuple[str, ...]) -> list[str]:
    """Name the components that flow in a phase without heat data for it."""
    if heat is None:
        return [name for name, here in zip(names, present, strict=True) if here]
    if phase == TWO_PHASE:
        return list(dict.fromkeys([*heat.lacking("gas", present), *heat.lacking("liquid", present)]))
    return heat.lacking(phase, present)


def need_heat(unit: Unit, phases: Mapping[str, np.ndarray], context: Context) -> bool:
    """Note every component without the heat data that a unit needs.

    Parameters
    ----------
    unit : Unit
        Connected.
    phases : mapping of str to (C,) bool
        By phase, what flows in it.
    context : Context

    Returns
    -------
    bool
        Whether nothing lacks.
    """
    names = unit.around.components.names
    found = [name for phase, present in phases.items() for name in lacking(unit.around.heat, phase, present, names)]
    for name in dict.fromkeys(found):
        context.fault(
            f"heat_data.{name}",
            f"heat is balanced in unit '{unit.name}' and '{name}' has no enthalpy for a phase that it is in",
            'add gas_heat_capacity = "33.6 J/(mol K)", liquid_heat_capacity and heat_of_vaporisation as they apply',
        )
    return not found


def heat_addresses(unit: Unit) -> dict[str, str]:
    """Give the addresses of the heat data's numbers by local name, none where no heat is known."""
    return unit.around.heat.addresses() if unit.around.heat is not None else {}


def mixture_of(unit: Unit, present: np.ndarray, place: str, context: Context) -> Mixture | None:
    """Give the mixture of the unit's `equilibrium` entry; None where there is none, or where a fault is noted."""
    table = unit.around.conditions.get(unit.values.words.get("equilibrium"))
    if table is None:
        return None
    around = unit.around
    return Mixture.connect(around.components, table, present, around.basis, around.heat, place, context)


def two_phase(flows: np.ndarray, energy: np.ndarray, pressure: np.ndarray) -> Stream:
    """Put a two-phase stream together.

    Parameters
    ----------
    flows : (..., C) mol/s
    energy : (...,) W
    pressure : (...,) Pa
    """
    total = flows.sum(axis=-1)
    return Stream.of(flows, energy / np.where(total == 0, 1.0, total), pressure, TWO_PHASE)
