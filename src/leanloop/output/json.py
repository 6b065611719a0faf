"""Results as JSON: SI units, null for what is not defined."""

from __future__ import annotations

import json
import os
import sys
import tempfile
from pathlib import Path
from typing import Any


def write(data: Any, path: str) -> None:
    """Write JSON to a file, whole or not at all, or to standard output for ``-``.

    Parameters
    ----------
    data : Any
        Plain lists, dicts, numbers and None.
    path : str

    Raises
    ------
    OSError
        Where the file cannot be written.
    """
    text = json.dumps(data, allow_nan=False, indent=1) + "\n"
    if path == "-":
        sys.stdout.write(text)
        return
    target = Path(path)
    if target.exists() and not target.is_file():  # a pipe or a device
        target.write_text(text, encoding="utf-8")
        return
    handle, name = tempfile.mkstemp(dir=target.parent, prefix=".leanloop-")
    try:
        with os.fdopen(handle, "w", encoding="utf-8") as stream:
            stream.write(text)
        Path(name).chmod(0o644)
        Path(name).replace(target)
    except BaseException:
        Path(name).unlink(missing_ok=True)
        raise
