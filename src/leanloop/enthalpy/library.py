"""Built-in heat data of common species, found by name.

The set holds ideal-gas heat capacities, liquid heat capacities and heats of vaporisation as tables of the
same form that a file has, each entry with its source. The constants are those of the works named, as transcribed in the
data files of the Python library chemicals 1.5. Deviations from reference data over the stated ranges are held by
`tests/test_enthalpy_library.py`.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from scipy.constants import R

from leanloop.enthalpy import species as data


@dataclass(frozen=True)
class Species:
    """Built-in data of one species.

    Parameters
    ----------
    name : str
        In full, such as ``"carbon dioxide"``.
    table : dict of str to Any
        Entries as a file would hold them under ``[heat_data.NAME]``.
    sources : dict of str to str
        Source of each entry.
    """

    name: str
    table: dict[str, Any]
    sources: dict[str, str]


def find(component: str) -> Species | None:
    """Give the built-in species that a component's name stands for, None where there is none.

    Letters of either case, hyphens and underscores make no difference.
    """
    name = _BY_NAME.get(_plain(component))
    return None if name is None else _species(name)


def names() -> Iterator[str]:
    """Give the full names of all built-in species."""
    return iter(data.NAMES)


def synonyms(name: str) -> tuple[str, ...]:
    """Give the other names under which a species is found."""
    return data.NAMES[name]


def _plain(name: str) -> str:
    return name.lower().replace("-", "").replace("_", "")


_BY_NAME = {_plain(word).replace(" ", ""): name for name, others in data.NAMES.items() for word in (name, *others)}


def _species(name: str) -> Species:
    table: dict[str, Any] = {}
    sources: dict[str, str] = {}
    if name == "air" or name in data.GAS:
        coefficients, valid = _gas(name)
        table["gas_heat_capacity"] = _polynomial(coefficients, "J/(mol K)", valid)
        sources["gas_heat_capacity"] = data.GAS_SOURCES.get(name, data.POLING)
    if name in data.LIQUID:
        coefficients, unit, valid, source = data.LIQUID[name]
        table["liquid_heat_capacity"], sources["liquid_heat_capacity"] = _polynomial(coefficients, unit, valid), source
    elif name in data.LIQUID_OVER_R:
        coefficients, valid, source = data.LIQUID_OVER_R[name]
        scaled = tuple(R * item / 100**power for power, item in enumerate(coefficients))
        table["liquid_heat_capacity"] = _polynomial(scaled, "J/(mol K)", valid)
        sources["liquid_heat_capacity"] = source
    if name in data.VAPORISATION:
        heat, at = data.VAPORISATION[name]
        table["heat_of_vaporisation"] = {"value": f"{heat} kJ/mol", "at": f"{at} K"}
        sources["heat_of_vaporisation"] = data.CRC
    return Species(name, table, sources)


def _gas(name: str) -> tuple[tuple[float, ...], tuple[float, float]]:
    """Give coefficients of cp in J/(mol K) in T in K, and the range."""
    if name == "air":
        parts = [(share, _gas(part)[0]) for part, share in data.AIR_FRACTIONS.items()]
        mixed = [sum(share * items[power] for share, items in parts) for power in range(5)]
        mixed[0] += 2.5 * R * (1 - sum(data.AIR_FRACTIONS.values()))
        return tuple(mixed), data.GAS["nitrogen"][5:]
    scales = (1.0, 1e-3, 1e-5, 1e-8, 1e-11)
    row = data.GAS[name]
    return tuple(R * item * scale for item, scale in zip(row[:5], scales, strict=True)), row[5:]


def _polynomial(coefficients: tuple[float, ...], unit: str, valid: tuple[float, float]) -> dict[str, Any]:
    return {
        "polynomial": list(coefficients), "temperature": "K", "unit": unit, "valid": [f"{item} K" for item in valid],
    }  # fmt: skip
