"""Flowsheets as TOML: what was read, with some inputs changed."""

from __future__ import annotations

import json
import math
import re
from collections.abc import Container, Iterable, Mapping
from pathlib import Path
from typing import Any

from leanloop.quantities import si_text
from leanloop.textfile.reader import change, load

BARE = re.compile(r"[A-Za-z0-9_-]+")
LEFT_OUT = ("studies", "sizing")  # questions that have been answered


def text(data: Mapping[str, Any]) -> str:
    """Write the data of a file as TOML.

    Parameters
    ----------
    data : mapping
        Plain values first, then sections; a section of tables has a heading for each.

    Returns
    -------
    str
    """
    plain = {key: item for key, item in data.items() if not isinstance(item, Mapping)}
    lines = [f"{_key(key)} = {_value(item)}" for key, item in plain.items()]
    for key, item in data.items():
        if not isinstance(item, Mapping):
            continue
        if item and all(isinstance(inner, Mapping) for inner in item.values()) and key != "components":
            for name, inner in item.items():
                lines += ["", f"[{_key(key)}.{_key(name)}]", *_entries(inner)]
        else:
            lines += ["", f"[{_key(key)}]", *_entries(item)]
    return "\n".join(lines).lstrip("\n") + "\n"


def _entries(table: Mapping[str, Any]) -> list[str]:
    return [f"{_key(key)} = {_value(item)}" for key, item in table.items()]


def _key(key: str) -> str:
    return key if BARE.fullmatch(key) else _string(key)


def _string(value: str) -> str:
    return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")


def _value(item: Any) -> str:
    if isinstance(item, bool):
        return "true" if item else "false"
    if isinstance(item, str):
        return _string(item)
    if isinstance(item, Mapping):
        return "{ " + ", ".join(_entries(item)) + " }" if item else "{}"
    if isinstance(item, (list, tuple)):
        return "[" + ", ".join(_value(inner) for inner in item) + "]"
    if isinstance(item, float):
        return repr(item) if math.isfinite(item) else "nan" if item != item else "inf" if item > 0 else "-inf"
    return item.isoformat() if hasattr(item, "isoformat") else str(item)


def with_inputs(
    path: str | Path,
    settings: Iterable[str],
    inputs: Mapping[str, tuple[Any, str]],
    title: str = "",
    requirements: Container[str] | None = None,
) -> str:
    """Write a flowsheet file anew with other inputs.

    Parameters
    ----------
    path : str or Path
        Of the file that was read.
    settings : iterable of str
        ``ADDRESS=VALUE`` changes that were made to it.
    inputs : mapping of str to (value, str)
        SI numbers, or lists of them, by address, and their sort.
    title : str
        Added to the file's own.
    requirements : container of str, optional
        Those to keep; all by default.

    Returns
    -------
    str

    Raises
    ------
    InputError
        Where an address is not in the file.
    """
    data = change(load(path), list(settings), str(path))
    for address, (value, sort) in inputs.items():
        shown = [si_text(item, sort) for item in value] if isinstance(value, list) else si_text(value, sort)
        change(data, [f"{address}={_value(shown)}"], str(path))
    if title:
        own = data.get("title", "")
        data = {"title": f"{own}: {title}" if own else title, **{key: item for key, item in data.items() if key != "title"}}
    if requirements is not None and "requirements" in data:
        data["requirements"] = {name: item for name, item in data["requirements"].items() if name in requirements}
    return text({key: item for key, item in data.items() if key not in LEFT_OUT})
