"""Flowsheet files in TOML to flowsheets."""

from __future__ import annotations

import math
import tomllib
from collections.abc import Iterable
from pathlib import Path
from typing import Any

from leanloop.entries import Context, one_line, shown_key, shown_name
from leanloop.errors import Fault, InputError, nearest
from leanloop.feed import SUM_TOLERANCE
from leanloop.flowsheet.sheet import SECTIONS, Flowsheet
from leanloop.quantities import parse
from leanloop.sizing.read import read_properties, read_sizing
from leanloop.studies.read import read_studies

SCALED = ("fractions", "mass_fractions")  # changing one of them scales the others

DEEPEST = 50  # tables in one another
TOO_DEEP = Fault("file", "is nested too deep", "write plain tables and lists")


def load(path: str | Path) -> dict[str, Any]:
    """Read a TOML file.

    Parameters
    ----------
    path : str or Path

    Returns
    -------
    dict

    Raises
    ------
    InputError
        Where the file cannot be read or is not TOML.
    """
    name = str(path)
    try:
        text = Path(path).read_bytes().decode("utf-8-sig")  # some editors put a mark at the head
        return tomllib.loads(text)
    except OSError as error:
        raise InputError([Fault("file", f"cannot be read: {error.strerror}", "name an existing file")], name) from None
    except UnicodeDecodeError:
        raise InputError([Fault("file", "is not UTF-8 text", "save it as UTF-8")], name) from None
    except tomllib.TOMLDecodeError as error:
        raise InputError([Fault("file", f"is no TOML: {one_line(str(error))}", "mend the line named")], name) from None
    except RecursionError:
        raise InputError([TOO_DEEP], name) from None
    except ValueError:  # a whole number of thousands of digits, or a file name that no system can hold
        remedy = "look for a number of thousands of digits"
        raise InputError([Fault("file", "cannot be read as it stands", remedy)], name) from None


def change(data: dict[str, Any], settings: Iterable[str], source: str = "") -> dict[str, Any]:
    """Apply ``ADDRESS=VALUE`` settings to the data of a file.

    Parameters
    ----------
    data : dict
        Changed in place.
    settings : iterable of str
        Values are read as TOML, else as a string.
    source : str

    Returns
    -------
    dict

    Raises
    ------
    InputError
        Where an address cannot be set.
    """
    faults = _change(data, settings)
    if faults:
        raise InputError(faults, source)
    return data


def _change(data: dict[str, Any], settings: Iterable[str]) -> list[Fault]:
    """Apply the settings that can be applied, and give the faults of the others."""
    context = Context()
    moved: dict[tuple[str, str], set[str]] = {}
    for setting in settings:
        address, sign, text = setting.partition("=")
        address = address.strip()
        if not sign or not address:
            context.fault("--set", f"{shown_name(setting)} is no setting", "write --set ADDRESS=VALUE")
            continue
        value = _value(text.strip())
        where = ".".join(shown_key(part) for part in address.split("."))
        table: Any = data
        *heads, last = address.split(".")
        if address in SECTIONS[1:]:
            context.fault(where, "is a whole section", f"go on to one of its entries, {address}.NAME")
            continue
        if heads[:1] in ([], ["title"]) and address != "title" or (heads and heads[0] not in SECTIONS):
            context.fault(where, "leads nowhere", nearest(address.split(".")[0], SECTIONS))
            continue
        for number, head in enumerate(heads):
            deeper = _inside(table, head)
            if isinstance(deeper, list) and number > 1:
                table = deeper
                continue
            if not isinstance(deeper, dict):
                if head in table and number == 0:
                    break  # what is wrong with the section itself is told when it is read
                if number == 0 or (number == 1 and heads[0] in ("components", "feeds", "units", "equilibrium", "requirements")):
                    known = table if isinstance(table, dict) else {}
                    if number == 1 or head not in ("loop", "basis", "groups"):
                        context.fault(where, f"there is no {shown_name(head)}", nearest(head, known))
                        break
                if isinstance(table, dict) and head not in table:
                    deeper = table[head] = {}
                else:
                    context.fault(where, f"{shown_name(head)} is no table", "stop at a shorter address")
                    break
            table = deeper
        else:
            if isinstance(table, list):
                if not (last.isdigit() and int(last) < len(table)):
                    context.fault(where, f"{shown_name(last)} is no place in the list", f"count from 0 to {len(table) - 1}")
                    continue
                table[int(last)] = value
                continue
            table[last] = value
            if len(heads) == 3 and heads[0] == "feeds" and heads[2] in SCALED:
                moved.setdefault((heads[1], heads[2]), set()).add(last)
    for (feed, form), names in moved.items():
        parts: Any = data
        for key in ("feeds", feed, form):  # a later setting may have put something else there
            parts = parts.get(key) if isinstance(parts, dict) else None
        if isinstance(parts, dict) and names <= set(parts):
            _scale_others(parts, names)
    return context.faults


def _inside(table: Any, head: str) -> Any:
    """Give what stands at a key of a table, or at a place of a list."""
    if isinstance(table, list):
        return table[int(head)] if head.isdigit() and int(head) < len(table) else None
    return table.get(head) if isinstance(table, dict) else None


def _scale_others(parts: dict[str, Any], moved: set[str]) -> None:
    """Scale the fractions that were not set anew, where none of them is the rest; faulty ones are told when read."""
    if "rest" in parts.values():
        return
    numbers: dict[str, float] = {}
    for name, raw in parts.items():
        try:
            found = parse(raw) if isinstance(raw, str) else None
        except ValueError:
            return
        if found is not None and any(found.dimension):
            return  # mass per normal volume: the molar mass is not known here
        numbers[name] = found.value if found is not None else raw
        if isinstance(numbers[name], bool) or not isinstance(numbers[name], (int, float)):
            return
    left = 1.0 - sum(numbers[name] for name in moved)
    now = sum(value for name, value in numbers.items() if name not in moved)
    if now > 0 and left >= 0 and abs(sum(numbers.values()) - 1.0) > SUM_TOLERANCE:
        parts.update({name: value * left / now for name, value in numbers.items() if name not in moved})


def _value(text: str) -> Any:
    """Read what stands behind the sign as one TOML value, else take it as it is."""
    try:
        found = tomllib.loads(f"value = {text}")
    except (ValueError, RecursionError):
        return text
    return found["value"] if len(found) == 1 else text


def _tidy(data: dict[str, Any], source: str) -> None:
    """Make whole numbers beyond any float infinite, and refuse tables that are nested without end."""
    level: list[Any] = [data]
    for _ in range(DEEPEST):
        inner = []
        for table in level:
            for key, item in table.items() if isinstance(table, dict) else enumerate(table):
                if isinstance(item, (dict, list)):
                    inner.append(item)
                elif isinstance(item, int) and item.bit_length() > 1024:
                    table[key] = math.inf if item > 0 else -math.inf
        if not inner:
            return
        level = inner
    raise InputError([TOO_DEEP], source)


def read(path: str | Path, settings: Iterable[str] = ()) -> Flowsheet:
    """Read a flowsheet file.

    Parameters
    ----------
    path : str or Path
    settings : iterable of str
        ``ADDRESS=VALUE`` changes, as on the command line.

    Returns
    -------
    Flowsheet

    Raises
    ------
    InputError
        With every fault found.
    """
    name = str(path)
    data = load(path)
    context = Context()
    for key in data:
        if key not in SECTIONS:
            context.fault(shown_key(key), f"unknown section {shown_name(key)}", nearest(key, SECTIONS))
    faults = [*context.faults, *_change(data, settings)]
    _tidy(data, name)
    try:
        sheet = Flowsheet(
            data.get("components"),
            data.get("equilibrium"),
            data.get("feeds"),
            data.get("units"),
            data.get("requirements"),
            data.get("title", ""),
            data.get("loop"),
            data.get("basis"),
            data.get("groups"),
            data.get("limits"),
            data.get("heat_data"),
            data.get("studies"),
            data.get("sizing"),
            data.get("properties"),
            plain_si=False,
            source=name,
            directory=str(Path(path).parent),
        )
    except InputError as error:
        raise InputError([*faults, *error.faults], name) from None
    context = Context(faults)
    read_studies(sheet, context)
    if "sizing" in data:
        read_sizing(sheet, data["sizing"], data.get("properties"), context)
    elif "properties" in data:
        read_properties(sheet, data["properties"], context)
    if faults:
        raise InputError(faults, name)
    return sheet
