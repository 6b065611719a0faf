"""Flowsheet files in TOML to flowsheets."""

from __future__ import annotations

import tomllib
from collections.abc import Iterable
from pathlib import Path
from typing import Any

from leanloop.errors import Fault, InputError, nearest
from leanloop.flowsheet.sheet import SECTIONS, Flowsheet

ELSEWHERE = ("heat_data", "limits", "studies", "sizing")  # for other questions than a solve


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
        text = Path(path).read_bytes().decode("utf-8")
        return tomllib.loads(text)
    except OSError as error:
        raise InputError([Fault("file", f"cannot be read: {error.strerror}", "name an existing file")], name) from None
    except UnicodeDecodeError:
        raise InputError([Fault("file", "is not UTF-8 text", "save it as UTF-8")], name) from None
    except (tomllib.TOMLDecodeError, RecursionError) as error:
        raise InputError([Fault("file", f"is no TOML: {error}", "mend the line named")], name) from None


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
    faults = []
    for setting in settings:
        address, sign, text = setting.partition("=")
        address = address.strip()
        if not sign or not address:
            faults.append(Fault("--set", f"'{setting}' is no setting", "write --set ADDRESS=VALUE"))
            continue
        try:
            value = tomllib.loads(f"value = {text.strip()}")["value"]
        except tomllib.TOMLDecodeError:
            value = text.strip()
        table: Any = data
        *heads, last = address.split(".")
        if heads[:1] in ([], ["title"]) and address != "title" or (heads and heads[0] not in (*SECTIONS, *ELSEWHERE)):
            faults.append(Fault(address, "leads nowhere", nearest(address.split(".")[0], SECTIONS)))
            continue
        for number, head in enumerate(heads):
            deeper = table.get(head) if isinstance(table, dict) else None
            if not isinstance(deeper, dict):
                if number == 0 or (number == 1 and heads[0] in ("feeds", "units", "equilibrium", "requirements")):
                    known = table if isinstance(table, dict) else {}
                    if number == 1 or head not in ("loop", "basis", "groups"):
                        faults.append(Fault(address, f"there is no '{head}'", nearest(head, known)))
                        break
                if isinstance(table, dict) and head not in table:
                    deeper = table[head] = {}
                else:
                    faults.append(Fault(address, f"'{head}' is no table", "stop at a shorter address"))
                    break
            table = deeper
        else:
            table[last] = value
    if faults:
        raise InputError(faults, source)
    return data


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
    data = change(load(path), settings, name)
    faults = []
    for key in data:
        if key not in (*SECTIONS, *ELSEWHERE):
            faults.append(Fault(key, f"unknown section '{key}'", nearest(key, SECTIONS)))
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
            plain_si=False,
            source=name,
            directory=str(Path(path).parent),
        )
    except InputError as error:
        raise InputError([*faults, *error.faults], name) from None
    if faults:
        raise InputError(faults, name)
    return sheet
