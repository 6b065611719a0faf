"""Results as JSON: SI units, null for what is not defined."""

from __future__ import annotations

import json
from typing import Any


def text(data: Any) -> str:
    """Give JSON.

    Parameters
    ----------
    data : Any
        Plain lists, dicts, numbers and None.

    Returns
    -------
    str
    """
    return json.dumps(data, allow_nan=False, indent=1) + "\n"
