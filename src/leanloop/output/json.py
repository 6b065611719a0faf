"""Results as JSON: SI units, null for what is not defined."""

from __future__ import annotations

import json
import sys
from pathlib import Path
from typing import Any

from leanloop.output.tables import put


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
    else:
        put(Path(path), text)
