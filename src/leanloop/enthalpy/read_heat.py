"""Reading of ``[heat_data.NAME]``; every fault is noted, none stops."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import numpy as np

from leanloop.components import Component, Components
from leanloop.enthalpy import library
from leanloop.enthalpy.curve import Curve
from leanloop.enthalpy.heat import Heat
from leanloop.enthalpy.heat_data import DATUM, PHASES, ComponentHeat
from leanloop.entries import NAMES, Context, Entry, is_name, read_values, shown_key, shown_name
from leanloop.errors import nearest
from leanloop.quantities import unit_scale

CAPACITY = ("molar heat capacity", "specific heat capacity")
ENERGY = ("molar energy", "specific energy")
VALID = Entry("valid", "temperature", many=True, cases=False, doc="range of the data, [lowest, highest] temperature")
POLYNOMIAL = (
    Entry("polynomial", "number", required=True, many=True, cases=False, doc="coefficients a, b, c, ... of a + b T + c T^2"),
    Entry("temperature", "choice", choices=("K", "degC", "degF", "degR"), doc="unit of T in the polynomial, K by default"),
    Entry("unit", "text", required=True, doc="unit of the polynomial's value"),
    VALID,
)
HEAT = Entry(
    "heat_of_vaporisation",
    "table",
    nested=(
        Entry("value", ENERGY, required=True, doc="heat of vaporisation, or of absorption for a dissolved gas"),
        Entry("at", "temperature", doc="temperature that it holds at, 25 degC by default"),
    ),
    doc="heat of vaporisation, or of absorption for a dissolved gas",
)
ENTRIES = (
    Entry("gas_heat_capacity", CAPACITY, above=0.0, doc="heat capacity in the gas, or a polynomial of it"),
    Entry("liquid_heat_capacity", CAPACITY, above=0.0, doc="heat capacity in the liquid, or a polynomial of it"),
    HEAT,
    Entry("gas", "table", nested=POLYNOMIAL, doc="enthalpy in the gas itself"),
    Entry("liquid", "table", nested=POLYNOMIAL, doc="enthalpy in the liquid itself"),
    VALID,
    Entry("data", "choice", choices=("built-in",), doc="take what is not written from the built-in data"),
)
SIMPLEST = 'liquid_heat_capacity = "75.3 J/(mol K)"'
UNITS = {"gas": ENERGY, "liquid": ENERGY, "gas_heat_capacity": CAPACITY, "liquid_heat_capacity": CAPACITY}
EXAMPLES = {ENERGY: '"kJ/mol" or "Btu/lbmol"', CAPACITY: '"J/(mol K)" or "kJ/(kg K)"'}


def read(raw: Any, components: Components, context: Context) -> Heat:
    """Read the section; a component without an entry takes the built-in data of its name.

    Parameters
    ----------
    raw : mapping of str to mapping, or None
        As written.
    components : Components
    context : Context
        Faults are appended to it.

    Returns
    -------
    Heat
        What could be read.
    """
    found: dict[str, ComponentHeat | None] = {}
    if raw is not None and not isinstance(raw, Mapping):
        context.fault("heat_data", "is no table", "write [heat_data.NAME] with its entries")
    elif raw is not None:
        for name, entry in raw.items():
            address = f"heat_data.{shown_key(name)}"
            if not is_name(name):
                context.fault(address, f"{shown_name(name)} is no name", NAMES)
            elif name in components.index:
                found[name] = _component(components[name], entry, address, context)
            elif len(components):  # none at all is a fault already
                context.fault(address, f"unknown component {shown_name(name)}", nearest(name, components.names))
    for name in components.names:
        species = None if name in found else library.find(name)
        if species is not None:
            values = read_values(_entries(species.table), species.table, f"heat_data.{name}", context)
            found[name] = ComponentHeat(name, values, components[name].molar_mass, species.sources)
    return Heat(components.names, [found.get(name) for name in components.names])


def _component(component: Component, entry: Any, address: str, context: Context) -> ComponentHeat | None:
    """Read the data of one component, None after a fault."""
    faults = len(context.faults)
    if not isinstance(entry, Mapping):
        context.fault(address, "is no table", f"write entries such as {SIMPLEST}")
        return None
    table, sources = _with_built_in(component.name, entry, address, context)
    heat = table.get("heat_of_vaporisation")
    if isinstance(heat, Mapping):
        table["heat_of_vaporisation"] = {"at": f"{DATUM} K", **heat}
    elif heat is not None:
        table["heat_of_vaporisation"] = {"value": heat, "at": f"{DATUM} K"}
    values = read_values(_entries(table), table, address, context)
    _check_combination(component, table, address, context)
    for name, sorts in UNITS.items():
        if f"{name}.polynomial" in values.numbers and "unit" in values.words[name]:
            _check_unit(values.words[name]["unit"], sorts, f"{address}.{name}.unit", context)
    for name in ("valid", *(f"{name}.valid" for name in UNITS)):
        valid = values.numbers.get(name)
        if valid is not None and (len(valid) != 2 or valid[0] >= valid[1]):
            remedy = 'write two temperatures such as ["0 degC", "150 degC"]'
            context.fault(f"{address}.{name}", "the range is no lower and higher temperature", remedy)
    if len(context.faults) > faults:
        return None
    item = ComponentHeat(component.name, values, component.molar_mass, sources)
    _check_mass(component, item, address, context)
    for curve in (*item.enthalpies.values(), *item.capacities.values()):
        _check_positive(curve, item, address, context)
    return item if len(context.faults) == faults else None


def _entries(table: Mapping[str, Any]) -> tuple[Entry, ...]:
    """Give the entries as they apply to a table: heat capacities are one value, or a table with a polynomial."""
    return tuple(
        replace(entry, sort="table", nested=POLYNOMIAL)
        if entry.sort == CAPACITY and isinstance(table.get(entry.name), Mapping)
        else entry
        for entry in ENTRIES
    )


def _with_built_in(
    name: str, entry: Mapping[str, Any], address: str, context: Context
) -> tuple[dict[str, Any], dict[str, str]]:
    """Give an entry completed by built-in data where it asks for them, and the sources of what was taken."""
    if entry.get("data") != "built-in":
        return dict(entry), {}
    species = library.find(name)
    if species is None:
        problem = f"there are no built-in data of {shown_name(name)}"
        context.fault(f"{address}.data", problem, f"write its heat capacities here; {nearest(name, library.names())}")
        return dict(entry), {}
    taken = set(species.table) - set(entry)
    if "gas" in entry:
        taken -= {"gas_heat_capacity", "heat_of_vaporisation"}
    if "liquid" in entry:
        taken -= {"liquid_heat_capacity"}
    table = {**{key: item for key, item in species.table.items() if key in taken}, **entry}
    return table, {key: item for key, item in species.sources.items() if key in taken}


def _check_combination(component: Component, table: Mapping[str, Any], address: str, context: Context) -> None:
    """Note data that say the same twice, and data that leave gas and liquid without a link."""
    for phase in PHASES:
        if phase in table and f"{phase}_heat_capacity" in table:
            problem = f"stands beside {phase}, which gives the enthalpy itself"
            context.fault(f"{address}.{phase}_heat_capacity", problem, "keep one of the two")
    heated = "heat_of_vaporisation" in table
    if heated and "gas" in table:
        problem = "stands beside gas, which gives the enthalpy itself"
        context.fault(f"{address}.heat_of_vaporisation", problem, "keep one of the two")
    built_in = "data" not in table or table["data"] == "built-in" and library.find(component.name) is not None
    if not built_in or not set(table) <= {entry.name for entry in ENTRIES}:
        return  # what is meant is not known
    if not set(table) - {"data", "valid"}:
        context.fault(address, "gives neither heat capacities nor enthalpies", f"write entries such as {SIMPLEST}")
    elif component.name in context.names.get("doubtful", ()):
        return  # which phase it stays in is not known
    elif "gas_heat_capacity" in table and not heated and "gas" not in table and component.stays_in != "gas":
        problem = f"'{component.name}' has a gas heat capacity and nothing that links its gas to its liquid"
        remedy = 'add heat_of_vaporisation = "44 kJ/mol" (of absorption, for a dissolved gas), or stays_in = "gas" at the component'
        context.fault(f"{address}.heat_of_vaporisation", problem, remedy)
    elif heated and not {"gas", "gas_heat_capacity"} & set(table) and component.stays_in != "liquid":
        problem = "a heat of vaporisation needs the heat capacity of the gas"
        context.fault(f"{address}.gas_heat_capacity", problem, 'add gas_heat_capacity = "33.6 J/(mol K)"')


def _check_unit(unit: str, sorts: tuple[str, ...], address: str, context: Context) -> None:
    problem = ""
    for sort in reversed(sorts):
        try:
            unit_scale(unit, sort)
            return
        except ValueError as error:
            problem = str(error)
    context.fault(address, problem, f"write a unit such as {EXAMPLES[sorts]}")


def _check_mass(component: Component, item: ComponentHeat, address: str, context: Context) -> None:
    """Note data per mass of a component without a molar mass."""
    faulty = f"components.{component.name}.molar_mass"
    if component.molar_mass is not None or any(fault.address == faulty for fault in context.faults):
        return
    curves = [curve.name for curve in (*item.enthalpies.values(), *item.capacities.values()) if curve.per_mass]
    if item.values.sorts.get("heat_of_vaporisation.value") == "specific energy":
        curves.append("heat_of_vaporisation")
    for name in curves:
        problem = f"is per mass, and '{component.name}' has no molar mass"
        context.fault(f"{address}.{name}", problem, "give molar_mass at the component, or write it per mol")


def _check_positive(curve: Curve, item: ComponentHeat, address: str, context: Context) -> None:
    """Note a polynomial of which the heat capacity is not positive in its range, or at 298.15 K where none is stated."""
    valid = curve.valid(item.numbers)
    temperature = np.array([DATUM]) if valid is None else np.linspace(*valid, 101)
    with np.errstate(all="ignore"):
        enthalpy = curve.name in PHASES
        capacity = (curve.slope if enthalpy else curve.at)(temperature, item.numbers) + 0.0 * temperature
    bad = temperature[~(capacity > 0)] if not (curve.per_mass and np.isnan(capacity).all()) else temperature[:0]
    if bad.size:
        what = "the enthalpy does not rise with temperature" if enthalpy else "the heat capacity is not positive"
        remedy = "check coefficients and units" + ("" if valid else ', or state the range: valid = ["100 degC", "200 degC"]')
        context.fault(f"{address}.{curve.name}.polynomial", f"{what} at {bad[0]:.2f} K", remedy)
