"""A result as CSV files: streams, columns, balance and units, in SI units."""

from __future__ import annotations

import csv
import errno
import io
import os
import tempfile
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from leanloop.sizing.designs import Designs
    from leanloop.studies.findings import Findings


def rows_by_file(data: Mapping[str, Any]) -> dict[str, list[list[Any]]]:
    """Give the tables of one case by file name.

    Parameters
    ----------
    data : mapping
        What `Result.to_dict` gives for one case.

    Returns
    -------
    dict of str to list of rows
        The first row is the head.
    """
    out = {"streams.csv": _wide(data["streams"], "stream")}
    out["units.csv"] = [["unit", "kind", "result", "value"]] + [
        [name, unit["kind"], key, value] for name, unit in data["units"].items() for key, value in flat(unit["results"])
    ]
    for name, unit in data["units"].items():
        if "profile" in unit:
            columns = list(flat(unit["profile"]))
            rows = [list(row) for row in zip(*(values for _, values in columns), strict=True)]
            out[f"profile_{name}.csv"] = [[key for key, _ in columns], *rows]
    out["balance.csv"] = _wide(data["balance"]["components"], "component")
    out["requirements.csv"] = _wide(data["requirements"], "requirement")
    return {name: rows for name, rows in out.items() if len(rows) > 1}


def flat(table: Mapping[str, Any], head: str = "") -> Iterator[tuple[str, Any]]:
    """Give the leaves of a nested table with their dotted names."""
    for key, value in table.items():
        if isinstance(value, Mapping):
            yield from flat(value, f"{head}{key}.")
        else:
            yield head + key, value


def _wide(items: Mapping[str, Mapping[str, Any]], name: str) -> list[list[Any]]:
    rows = {key: dict(flat(item)) for key, item in items.items()}
    keys = list(dict.fromkeys(key for row in rows.values() for key in row))
    return [[name, *keys]] + [[key, *(row.get(column) for column in keys)] for key, row in rows.items()]


def texts(data: Mapping[str, Any], directory: str) -> dict[Path, str]:
    """Give the tables as CSV by path.

    Parameters
    ----------
    data : mapping
    directory : str
    """
    out = {}
    for name, rows in rows_by_file(data).items():
        text = io.StringIO()
        csv.writer(text, lineterminator="\n").writerows([_cell(cell) for cell in row] for row in rows)
        out[Path(directory) / name] = text.getvalue()
    return out


def _cell(cell: Any) -> Any:
    if cell is None:
        return ""
    return "; ".join(str(item) for item in cell) if isinstance(cell, Sequence) and not isinstance(cell, str) else cell


def of_study(found: Findings, directory: str) -> dict[Path, str]:
    """Give a study's cases, and its curves where it has any, as CSV by path, in SI units.

    Parameters
    ----------
    found : Findings
    directory : str
    """
    name = found.study.name
    out = {Path(directory) / f"{name}.csv": _columns(found.cases)} if found.cases else {}
    if len(found.curves.get("case", ())):
        out[Path(directory) / f"{name}_curves.csv"] = _columns(found.curves)
    return out


def of_designs(found: Designs, directory: str) -> dict[Path, str]:
    """Give all designs as CSV by path, in SI units.

    Parameters
    ----------
    found : Designs
    directory : str
    """
    return {Path(directory) / "designs.csv": _columns(found.table())}


def _columns(table: Mapping[str, Any]) -> str:
    """Write columns as CSV; what is not defined is empty."""
    columns = [_cells(values) for values in table.values()]
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(table)
    writer.writerows(zip(*columns, strict=True))
    return text.getvalue()


def _cells(values: Any) -> list[Any]:
    if isinstance(values, list):
        return values
    cells = values.tolist()
    return ["" if item != item else item for item in cells] if values.dtype.kind == "f" else cells


def put(files: Mapping[Path, str | bytes], *directories: str | None) -> None:
    """Write files, all of them whole or none.

    Parameters
    ----------
    files : mapping of Path to str or bytes
        Text is written as UTF-8.
    *directories : str or None
        Made first where they do not exist.

    Raises
    ------
    OSError
        Where something cannot be written; its `filename` is the one asked for.
    """
    for directory in directories:
        if directory is not None:
            Path(directory).mkdir(parents=True, exist_ok=True)
    ready: list[tuple[Path, Path]] = []
    mask = os.umask(0)
    os.umask(mask)
    try:
        for target, content in files.items():
            content = content.encode("utf-8") if isinstance(content, str) else content
            if target.is_dir():
                raise OSError(errno.EISDIR, os.strerror(errno.EISDIR), str(target))
            if target.exists() and not target.is_file():  # a pipe or a device
                target.write_bytes(content)
                continue
            try:
                handle, name = tempfile.mkstemp(dir=target.parent, prefix=".leanloop-")
                ready.append((Path(name), target))
                with os.fdopen(handle, "wb") as stream:
                    stream.write(content)
                Path(name).chmod(0o666 & ~mask)
            except OSError as error:
                raise OSError(error.errno, error.strerror, str(target)) from None
        for name, target in ready:
            name.replace(target)
    finally:
        for name, _ in ready:
            name.unlink(missing_ok=True)
