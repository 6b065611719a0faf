"""Points of an equilibrium table: read, judged and joined."""

from __future__ import annotations

import csv
import errno
from collections.abc import Callable, Mapping
from dataclasses import replace
from functools import lru_cache
from pathlib import Path
from typing import Any

import numpy as np
from scipy.interpolate import PchipInterpolator

from leanloop.entries import Context, Entry, Values

PAIRS = (("x", "y"), ("X", "Y"), ("temperature", "K"))
UNIT = Entry("unit", "choice", choices=("K", "degC", "degF", "degR"), doc="unit of the temperatures")
FILE = Entry("file", "text", doc="CSV file with a header row that names the two columns")

_REMEDY = "write one of x and y, X and Y, temperature and K, or file with one of these pairs of columns"
_NEAR = 8 * np.finfo(float).eps  # rounding at the ends is not off the table

Curve = Callable[[np.ndarray], tuple[np.ndarray, np.ndarray]]


def _column(name: str, required: bool = False, sort: str = "number") -> Entry:
    least, most = None if name == "temperature" else 0.0, 1.0 if name in "xy" else None
    return Entry(name, sort, required, many=True, least=least, most=most, cases=False, doc=f"column {name}")


ENTRIES = (*(_column(name) for pair in PAIRS for name in pair), UNIT, FILE)


def entries_of(table: Mapping[str, Any]) -> tuple[Entry, ...]:
    """Give the two columns of the pair that is written, required; every entry where none or several are."""
    pairs = [pair for pair in PAIRS if any(name in table for name in pair)]
    if len(pairs) != 1:
        return ENTRIES
    if pairs[0] != PAIRS[2]:
        return (*(_column(name, True) for name in pairs[0]), FILE)
    # temperatures are plain numbers in the one unit, or each is written with its own
    listed = table.get("temperature")
    if "unit" not in table and isinstance(listed, (list, tuple)) and any(isinstance(item, str) for item in listed):
        return (_column("temperature", True, "temperature"), _column("K", True), FILE)
    return (_column("temperature", True), _column("K", True), replace(UNIT, required=True), FILE)


def from_file(table: Mapping[str, Any], address: str, context: Context) -> Mapping[str, Any]:
    """Add the columns of the CSV file that a table names, from ``context.names["directory"]`` on, and note faults."""
    name, where = table["file"], f"{address}.file"
    path = Path(next(iter(context.names.get("directory", ())), ".")) / name
    try:
        if path.exists() and not path.is_file():
            raise OSError(errno.EINVAL, "it is no regular file")
        with path.open(newline="", encoding="utf-8-sig") as stream:
            reader = csv.reader(stream)
            rows = [(reader.line_num, [cell.strip() for cell in row]) for row in reader]
    except (OSError, UnicodeDecodeError, csv.Error) as error:
        reason = getattr(error, "strerror", None) or "it is no CSV text"
        context.fault(where, f"'{name}' cannot be read: {reason}", "name a CSV file beside the flowsheet")
        return table
    rows = [(line, row) for line, row in rows if any(row) and not row[0].startswith("#")]
    header = rows[0][1] if rows else []
    pairs = [pair for pair in PAIRS if set(pair) <= set(header)]
    twice = [column for pair in PAIRS for column in pair if column in table]
    if len(pairs) != 1 or twice:
        problem = f"{', '.join(twice)} stands beside it" if twice else f"its header is '{','.join(header)}'"
        context.fault(where, f"'{name}' gives no single pair of columns: {problem}", _REMEDY)
        return table
    columns: dict[str, list[float]] = {column: [] for column in pairs[0]}
    for line, row in rows[1:]:
        if len(row) > len(header):
            problem = f"'{name}' line {line} has {len(row)} cells under {len(header)} columns"
            context.fault(where, problem, "write numbers with a decimal point, and a comma between columns alone")
            continue
        for column, numbers in columns.items():
            cell = dict(zip(header, row, strict=False)).get(column, "")
            try:
                numbers.append(float(cell))
            except ValueError:
                context.fault(where, f"'{name}' line {line}: '{cell}' is no number of {column}", "write plain numbers")
    return {**table, **columns}


def check(values: Values, address: str, context: Context) -> None:
    """Note points that make no curve."""
    pairs = [pair for pair in PAIRS if pair[0] in values.numbers or pair[1] in values.numbers]
    if len(pairs) != 1:
        problem = "several pairs of columns are written" if pairs else "the table has no points"
        context.fault(address, problem, _REMEDY)
        return
    (across, up), (places, heights) = pairs[0], (values.numbers[name] for name in pairs[0])
    if len(places) < 2:
        context.fault(f"{address}.{across}", "the table has a single point", "write two points or more")
    if len(places) != len(heights):
        counts = f"{len(heights)} values of {up} stand against {len(places)} of {across}"
        context.fault(f"{address}.{up}", counts, "write one for each")
    _rising(places, across, address, context, strict=True)
    if up != "K":
        _rising(heights, up, address, context, strict=False)


def _rising(numbers: list[float], name: str, address: str, context: Context, strict: bool) -> None:
    for index in range(1, len(numbers)):
        if numbers[index] < numbers[index - 1] or strict and numbers[index] == numbers[index - 1]:
            problem = f"{numbers[index]:g} comes after {numbers[index - 1]:g}"
            order = "rising" if strict else "rising or level"
            context.fault(f"{address}.{name}[{index}]", problem, f"write {name} in {order} order")


def smooth(places: Any, heights: Any) -> Curve:
    """Give the monotone cubic through points, straight beyond them; a call gives height and slope."""
    return _smooth(tuple(map(float, places)), tuple(map(float, heights)))


@lru_cache(maxsize=256)
def _smooth(places: tuple[float, ...], heights: tuple[float, ...]) -> Curve:
    with np.errstate(all="ignore"):  # differences near the least number overflow inside, to no effect
        curve = PchipInterpolator(places, heights)
    slope = curve.derivative()
    first, last = places[0], places[-1]
    low, high = float(slope(first)), float(slope(last))

    def at(place: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        inside = np.clip(place, first, last)
        beyond = low * np.minimum(place - first, 0.0) + high * np.maximum(place - last, 0.0)
        return curve(inside) + beyond, slope(inside)

    return at


def straight(places: Any, heights: Any) -> Curve:
    """Give the straight lines through points, the outer ones going on; a call gives height and slope."""
    across, up = np.asarray(places, dtype=float), np.asarray(heights, dtype=float)
    slope = np.diff(up) / np.diff(across)

    def at(place: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        index = np.clip(np.searchsorted(across, place, side="right") - 1, 0, len(slope) - 1)
        return up[index] + slope[index] * (place - across[index]), slope[index]

    return at


def off(place: np.ndarray, first: float, last: float) -> np.ndarray:
    """Tell where a place is before the first point or after the last."""
    reach = _NEAR * max(abs(first), abs(last))
    return (place < first - reach) | (place > last + reach)
