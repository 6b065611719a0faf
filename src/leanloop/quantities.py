"""Quantities with units: text such as ``"2.5 bar"`` to a number in SI units and its dimension."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

from scipy import constants as c

Dimension = tuple[int, int, int, int, int]  # exponents of kg, m, s, K, mol

DIMENSIONS: dict[str, tuple[Dimension, str]] = {
    "number": ((0, 0, 0, 0, 0), "0.5"),
    "temperature": ((0, 0, 0, 1, 0), "26 degC"),
    "temperature difference": ((0, 0, 0, 1, 0), "10 K"),
    "pressure": ((1, -1, -2, 0, 0), "1.07 bar"),
    "molar flow": ((0, 0, -1, 0, 1), "10 mol/s"),
    "mass flow": ((1, 0, -1, 0, 0), "2 kg/s"),
    "volume flow": ((0, 3, -1, 0, 0), "900 m3/h"),
    "molar mass": ((1, 0, 0, 0, -1), "92.14 g/mol"),
    "mass in gas": ((1, 0, 0, 0, -1), "150 mg/Nm3"),
    "solubility": ((-1, -2, 2, 0, 1), "3.3e-4 mol/(m3 Pa)"),
    "molar concentration": ((0, -3, 0, 0, 1), "55.3 kmol/m3"),
    "power": ((1, 2, -3, 0, 0), "250 kW"),
    "molar energy": ((1, 2, -2, 0, -1), "44.0 kJ/mol"),
    "molar heat capacity": ((1, 2, -2, -1, -1), "75.3 J/(mol K)"),
    "specific energy": ((0, 2, -2, 0, 0), "2257 kJ/kg"),
    "specific heat capacity": ((0, 2, -2, -1, 0), "4.18 kJ/(kg K)"),
    "heat transfer": ((1, 2, -3, -1, 0), "12 kW/K"),
    "length": ((0, 1, 0, 0, 0), "6 m"),
    "amount": ((0, 0, 0, 0, 1), "40 kmol"),
    "mass": ((1, 0, 0, 0, 0), "9 t"),
    "density": ((1, -3, 0, 0, 0), "1020 kg/m3"),
    "molar volume": ((0, 3, 0, 0, -1), "18.1 cm3/mol"),
    "viscosity": ((1, -1, -1, 0, 0), "0.9 mPa s"),
    "surface tension": ((1, 0, -2, 0, 0), "28 mN/m"),
    "diffusivity": ((0, 2, -1, 0, 0), "1.2e-9 m2/s"),
    "pressure gradient": ((1, -2, -2, 0, 0), "300 Pa/m"),
    "area": ((0, 2, 0, 0, 0), "25 m2"),
    "specific area": ((0, -1, 0, 0, 0), "110 m2/m3"),
    "heat transfer coefficient": ((1, 0, -3, -1, 0), "600 W/(m2 K)"),
    "price of mass": ((-1, 0, 0, 0, 0), "25 /t"),
    "price of energy": ((-1, -2, 2, 0, 0), "9 /GJ"),
    "price of volume": ((0, -3, 0, 0, 0), "12000 /m3"),
    "price of area": ((0, -2, 0, 0, 0), "400 /m2"),
}

SI_UNITS = {
    "temperature": "K", "temperature difference": "K", "pressure": "Pa", "molar flow": "mol/s", "mass flow": "kg/s",
    "volume flow": "m3/s", "molar mass": "kg/mol", "mass in gas": "mg/Nm3", "solubility": "mol/(m3 Pa)",
    "molar concentration": "mol/m3", "power": "W", "molar energy": "J/mol", "molar heat capacity": "J/(mol K)",
    "specific energy": "J/kg", "specific heat capacity": "J/(kg K)", "heat transfer": "W/K", "length": "m", "amount": "mol",
    "mass": "kg", "density": "kg/m3", "molar volume": "m3/mol",
}  # fmt: skip

LONGEST = 200  # letters of a unit
NORMAL_MOLES = c.atm / (c.R * c.zero_Celsius)  # mol in 1 Nm3: 0 degC, 101.325 kPa

_NONE = (0, 0, 0, 0, 0)
_MOL, _KG, _M, _S, _K = (0, 0, 0, 0, 1), (1, 0, 0, 0, 0), (0, 1, 0, 0, 0), (0, 0, 1, 0, 0), (0, 0, 0, 1, 0)
_PA, _J, _W = (1, -1, -2, 0, 0), (1, 2, -2, 0, 0), (1, 2, -3, 0, 0)
_PREFIXABLE: dict[str, tuple[float, Dimension]] = {
    "mol": (1.0, _MOL),
    "g": (c.gram, _KG),
    "m": (1.0, _M),
    "s": (1.0, _S),
    "K": (1.0, _K),
    "Pa": (1.0, _PA),
    "bar": (c.bar, _PA),
    "J": (1.0, _J),
    "W": (1.0, _W),
    "Wh": (c.hour, _J),
    "L": (c.liter, (0, 3, 0, 0, 0)),
    "N": (1.0, (1, 1, -2, 0, 0)),
}
_PREFIXES = {
    "n": c.nano, "u": c.micro, "m": c.milli, "c": c.centi, "d": c.deci, "h": c.hecto,
    "k": c.kilo, "M": c.mega, "G": c.giga,
}  # fmt: skip
_NAMED: dict[str, tuple[float, Dimension]] = {
    "Nm3": (NORMAL_MOLES, _MOL),
    "lbmol": (c.pound / c.gram, _MOL),
    "lb": (c.pound, _KG),
    "t": (1000.0, _KG),
    "tonne": (1000.0, _KG),
    "l": (c.liter, (0, 3, 0, 0, 0)),
    "gal": (c.gallon, (0, 3, 0, 0, 0)),
    "ft": (c.foot, _M),
    "in": (c.inch, _M),
    "min": (c.minute, _S),
    "h": (c.hour, _S),
    "d": (c.day, _S),
    "day": (c.day, _S),
    "atm": (c.atm, _PA),
    "psi": (c.psi, _PA),
    "psia": (c.psi, _PA),
    "mmHg": (c.atm / 760, _PA),
    "torr": (c.atm / 760, _PA),
    "Torr": (c.atm / 760, _PA),
    "Btu": (c.Btu_IT, _J),
    "cal": (c.calorie_th, _J),  # thermochemical, 4.184 J
    "kcal": (c.kilo * c.calorie_th, _J),
    "cP": (1e-3, (1, -1, -1, 0, 0)),
    "degC": (1.0, _K),
    "degF": (c.degree_Fahrenheit, _K),
    "degR": (c.degree_Fahrenheit, _K),
    "%": (0.01, _NONE),
    "ppm": (1e-6, _NONE),
    "ppb": (1e-9, _NONE),
}
_OFFSETS = {"degC": c.zero_Celsius, "degF": c.zero_Celsius - 32 * c.degree_Fahrenheit}
_NUMBER = re.compile(r"([+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)\s*(.*)\Z", re.DOTALL)
_TOKEN = re.compile(r"\s*([A-Za-z%]+3?(?:(?:\^|\*\*)?-?\d{1,4})?|[()/*.])")


@dataclass(frozen=True)
class Quantity:
    """A number in SI units with its dimension.

    Parameters
    ----------
    value : float
        In SI units; absolute temperatures in K.
    dimension : tuple of int
        Exponents of kg, m, s, K, mol.
    unit : str
        As it was written.
    """

    value: float
    dimension: Dimension
    unit: str


def _cut(text: str) -> str:
    return text if len(text) <= 40 else text[:37] + "..."


def _atom(token: str) -> tuple[float, Dimension]:
    match = re.fullmatch(r"([A-Za-z%]+)(?:(?:\^|\*\*)?(-?\d+))?", token)
    if token in _NAMED:
        return _NAMED[token]
    if match is None:
        raise ValueError(f"unit '{token}' is not understood")
    name, power = match[1], int(match[2] or 1)
    if name in _NAMED:
        factor, dimension = _NAMED[name]
    elif name in _PREFIXABLE:
        factor, dimension = _PREFIXABLE[name]
    elif name[0] in _PREFIXES and name[1:] in _PREFIXABLE:
        factor, dimension = _PREFIXABLE[name[1:]]
        factor *= _PREFIXES[name[0]]
    else:
        raise ValueError(f"unit '{name}' is not understood")
    if abs(power) > 9:
        raise ValueError(f"unit '{token}' has a power that is too large")
    return factor**power, tuple(power * item for item in dimension)


def unit_factor(text: str) -> tuple[float, Dimension]:
    """Give the SI factor and the dimension of a unit such as ``"mol/(m3 Pa)"``.

    Parameters
    ----------
    text : str
        Products by a space, ``*`` or ``.``, quotients by ``/``, brackets, whole powers.

    Returns
    -------
    factor : float
    dimension : tuple of int

    Raises
    ------
    ValueError
        Where the unit is not understood.
    """
    text = text.rstrip()
    if len(text) > LONGEST:
        raise ValueError(f"unit '{_cut(text)}' is not understood")
    tokens, position = [], 0
    while position < len(text):
        match = _TOKEN.match(text, position)
        if match is None:
            raise ValueError(f"unit '{text}' is not understood")
        tokens.append(match[1])
        position = match.end()

    def product(index: int, depth: int) -> tuple[float, list[int], int]:
        if depth > 9:
            raise ValueError(f"unit '{text}' has too many brackets")
        factor, dimension, sign, empty = 1.0, [0] * 5, 1, True
        while index < len(tokens) and tokens[index] != ")":
            token = tokens[index]
            if token in "*./":
                # two signs in a row are a slip of the pen, and so is a product sign with nothing before it
                if index and tokens[index - 1] in "*./" or token != "/" and empty:
                    raise ValueError(f"unit '{text}' is not understood")
                sign, index = -1 if token == "/" else 1, index + 1
                continue
            if token == "(":
                inner, inner_dimension, index = product(index + 1, depth + 1)
                if index >= len(tokens):
                    raise ValueError(f"unit '{text}' has an open bracket")
            else:
                inner, inner_dimension = _atom(token)
            factor = factor * inner if sign > 0 else factor / inner if inner else math.inf
            dimension = [a + sign * b for a, b in zip(dimension, inner_dimension, strict=True)]
            sign, empty, index = 1, False, index + 1
        if empty or tokens[index - 1] in "*./" or (depth == 0 and index < len(tokens)):
            raise ValueError(f"unit '{text}' is not understood")
        return factor, dimension, index

    factor, dimension, _ = product(0, 0)
    if not 0 < factor < math.inf:
        raise ValueError(f"unit '{text}' is out of range")
    return factor, tuple(dimension)


def parse(text: str, difference: bool = False) -> Quantity:
    """Read a quantity with its unit.

    Parameters
    ----------
    text : str
        A number and a unit, or a number alone for a pure number.
    difference : bool
        Whether a temperature is a difference, so that degC and degF have no offset.

    Returns
    -------
    Quantity

    Raises
    ------
    ValueError
        Where the text is no finite number with a known unit.
    """
    match = _NUMBER.match(text.strip())
    text = _cut(text)
    if match is None:
        raise ValueError(f"'{text}' does not start with a number")
    value, unit = float(match[1]), match[2]
    if not math.isfinite(value):
        raise ValueError(f"'{text}' is too large a number")
    if not unit:
        return Quantity(value, _NONE, "")
    factor, dimension = unit_factor(unit)
    offset = 0.0 if difference else _OFFSETS.get(unit.strip("() "), 0.0)
    value = value * factor + offset
    if not math.isfinite(value):
        raise ValueError(f"'{text}' is too large a number")
    return Quantity(value, dimension, unit)


def unit_scale(text: str, sort: str) -> tuple[float, float]:
    """Give what turns a number in a unit into SI: SI value = number x factor + offset.

    Parameters
    ----------
    text : str
        A unit such as ``"degF"`` or ``"mmHg"``.
    sort : str
        A name of `DIMENSIONS` that the unit has to belong to; only ``"temperature"`` has an offset.

    Returns
    -------
    factor : float
    offset : float

    Raises
    ------
    ValueError
        Where the unit is not understood or belongs to another dimension.
    """
    factor, dimension = unit_factor(text)
    if dimension != DIMENSIONS[sort][0]:
        raise ValueError(f"'{text}' is no unit of {sort}")
    return factor, _OFFSETS.get(text.strip("() "), 0.0) if sort == "temperature" else 0.0


def dimension_name(dimension: Dimension) -> str:
    """Name a dimension in words, for messages."""
    for name, (known, _) in DIMENSIONS.items():
        if known == dimension:
            return name
    return "a quantity of another kind"


def example(name: str) -> str:
    """Give an example text of a named dimension, for messages."""
    return f'"{DIMENSIONS[name][1]}"' if name != "number" else DIMENSIONS[name][1]


def si_text(value: float, sort: str) -> float | int | str:
    """Write an SI number as a file would hold it, so that it is read back as the same double.

    Parameters
    ----------
    value : float or int
        Of a mass in gas, mg/Nm3, as inputs of that sort are kept.
    sort : str
        A name of `DIMENSIONS`, or ``"integer"``.

    Returns
    -------
    float, int or str
        Text with a unit where the sort has a dimension.
    """
    return f"{value!r} {SI_UNITS[sort]}" if sort in SI_UNITS else value
