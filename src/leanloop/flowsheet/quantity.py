"""Quantities of a result by address, as formulas of the states that take complex numbers."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np

from leanloop.components import Components
from leanloop.equilibrium.water import is_water, saturation_temperature
from leanloop.errors import nearest
from leanloop.stream import TWO_PHASE, Stream, divide

BY_COMPONENT = (
    "mol_s",
    "fraction",
    "fraction_dry",
    "ratio",
    "mass_fraction",
    "loading",
    "mg_per_Nm3",
    "mg_per_Nm3_dry",
)
WHOLE = ("phase", "temperature_K", "pressure_Pa", "total_mol_s", "dew_point_K", "vapour_fraction")


class Bases:
    """Which components mole ratios, loadings and dry fractions refer to.

    Parameters
    ----------
    components : Components
    given : mapping of str to tuple of str
        What ``[basis]`` sets.
    held : set of str
        Components that a make-up holds.
    """

    def __init__(self, components: Components, given: Mapping[str, tuple[str, ...]], held: set[str]) -> None:
        self.components = components
        stays = {phase: [item.name for item in components if item.stays_in == phase] for phase in ("gas", "liquid")}
        solvents = [name for name in stays["liquid"] if name in held] or stays["liquid"]
        self.ratio = {phase: components.mask(given.get(phase) or names) for phase, names in stays.items()}
        self.loading = components.mask(given.get("loading") or solvents)
        self.water = np.array([is_water(name) for name in components.names], dtype=bool)


def stream_table(stream: Stream, bases: Bases) -> dict[str, Any]:
    """Give everything that a result reports of a stream.

    Parameters
    ----------
    stream : Stream
        States (..., C + 2).
    bases : Bases

    Returns
    -------
    dict
        Leaves (...,) arrays, text or None; NaN where undefined.
    """
    return {
        key: stream_quantity(stream, bases, key)
        for key in (*WHOLE[:4], *BY_COMPONENT, *WHOLE[4:])
        if not (key == "loading" and stream.phase != "liquid")
        and not (key in ("mg_per_Nm3", "mg_per_Nm3_dry", "dew_point_K") and stream.phase != "gas")
    }


def stream_quantity(stream: Stream, bases: Bases, key: str) -> Any:
    """Give one quantity of a stream, by component as a dict."""
    masses = bases.components.molar_masses
    none = np.zeros(len(masses), dtype=bool)
    if key == "phase":
        return stream.phase
    if key == "temperature_K":
        return stream.temperature
    if key == "pressure_Pa":
        return stream.pressure
    if key == "total_mol_s":
        return stream.total
    if key == "vapour_fraction":
        if stream.phase == TWO_PHASE:
            return stream.gas_fraction
        return np.full(stream.temperature.shape, 1.0 if stream.phase == "gas" else 0.0)
    if key == "dew_point_K":
        water = stream.flows[..., bases.water].sum(axis=-1)
        return saturation_temperature(divide(water, stream.total) * stream.pressure) if bases.water.any() else None
    values = {
        "mol_s": lambda: stream.flows,
        "fraction": lambda: stream.fractions,
        "fraction_dry": lambda: stream.fractions_dry(bases.water),
        "ratio": lambda: stream.ratios(bases.ratio["gas" if stream.phase == "gas" else "liquid"]),
        "mass_fraction": lambda: stream.mass_fractions(masses),
        "loading": lambda: divide(stream.flows, stream.flows[..., bases.loading].sum(axis=-1)[..., None]),
        "mg_per_Nm3": lambda: stream.concentrations(masses, none),
        "mg_per_Nm3_dry": lambda: stream.concentrations(masses, bases.water),
    }[key]()
    table = {name: values[..., place] for place, name in enumerate(bases.components.names)}
    for group in bases.components.groups:
        table[group] = values[..., bases.components.places(group)].sum(axis=-1)
    return table


class AddressError(ValueError):
    """An address leads nowhere; carries what is wrong and what to write instead."""

    def __init__(self, problem: str, remedy: str) -> None:
        super().__init__(f"{problem}; {remedy}")
        self.problem, self.remedy = problem, remedy


def split_address(address: str, owners: Mapping[str, Any]) -> tuple[str, list[str]]:
    """Split ``owner.rest`` where owners are known names."""
    name, _, rest = address.partition(".")
    if name not in owners:
        raise AddressError(f"there is no '{name}'", nearest(name, owners))
    return name, rest.split(".") if rest else []


def walk(table: Any, path: list[str], address: str) -> Any:
    """Follow keys into a nested table.

    Raises
    ------
    AddressError
        Where a key is not there.
    """
    for number, key in enumerate(path):
        if not isinstance(table, Mapping):
            raise AddressError(f"'{address}' goes too deep", f"stop at '{'.'.join(path[:number])}'")
        if key not in table:
            raise AddressError(f"there is no '{key}' in '{address}'", nearest(key, table))
        table = table[key]
    return table


Formula = Callable[[Callable[[str], Stream], Callable[[str], Mapping[str, Any]]], Any]


def formula(
    address: str, streams: Mapping[str, Any], units: Mapping[str, Any], bases: Bases
) -> tuple[Formula, list[str], list[str]]:
    """Give a quantity as a formula of the streams' and units' states.

    Parameters
    ----------
    address : str
        ``streams.NAME....`` or ``units.NAME....``.
    streams, units : mapping by name
    bases : Bases

    Returns
    -------
    formula : callable
        Takes two look-ups: stream by name, and report of a unit by name.
    streams, units : list of str
        Names it depends on.

    Raises
    ------
    AddressError
        Where the address leads nowhere.
    """
    head, _, rest = address.partition(".")
    if head == "streams":
        name, path = split_address(rest, streams)
        if not path:
            raise AddressError(f"'{address}' is a whole stream", "name one of its quantities, such as fraction.COMPONENT")
        if path[0] not in (*BY_COMPONENT, *WHOLE):
            raise AddressError(f"a stream has no '{path[0]}'", nearest(path[0], (*BY_COMPONENT, *WHOLE)))
        if path[0] in BY_COMPONENT and len(path) == 1:
            raise AddressError(f"'{address}' is a whole table", "name a component as well")
        if path[0] in BY_COMPONENT:
            known = (*bases.components.names, *bases.components.groups)
            if path[1] not in known:
                raise AddressError(f"unknown component '{path[1]}'", nearest(path[1], known))
        if (path[0] == "loading" and streams[name] != "liquid") or (path[0].startswith("mg_") and streams[name] != "gas"):
            raise AddressError(f"stream '{name}' is {streams[name]} and has no {path[0]}", "ask for its ratio or fraction")

        def of_stream(stream: Callable, unit: Callable) -> Any:
            return walk(stream_quantity(stream(name), bases, path[0]), path[1:], address)

        return of_stream, [name], []
    if head == "units":
        name, path = split_address(rest, units)
        if not path:
            raise AddressError(f"'{address}' is a whole unit", "name one of its results, such as results.removal.COMPONENT")

        def of_unit(stream: Callable, unit: Callable) -> Any:
            return walk(unit(name), path, address)

        return of_unit, [], [name]
    raise AddressError(f"'{address}' is no quantity of a stream or unit", "write streams.NAME.... or units.NAME....")
