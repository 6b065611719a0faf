"""What designs cost, relatively: by the user's own prices, none of them built in."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from leanloop.sizing.designs import Designs

HOURS, YEARLY = 8000.0, 0.2


def costs(found: Designs) -> dict[str, np.ndarray]:
    """Price every design, in the user's money.

    Operation is that of the mean of the feed cases, they weigh the same.

    Parameters
    ----------
    found : Designs

    Returns
    -------
    dict of str to (D,) array
        A year's ``steam``, ``heat``, ``cooling``, ``power``, ``solvent``; ``operation``, their sum; ``invested``, in columns and
        exchangers; ``total`` a year, with the part of what is invested that a year bears. Only what has a price is counted.
    """
    prices = found.sizing.prices
    seconds = prices.get("hours", HOURS) * 3600.0
    flows = {
        "steam": found.steam_kg_s, "heat": found.heat_W, "cooling": found.cooling_W, "power": found.power_W,
        "solvent": found.solvent_kg_s,
    }  # fmt: skip
    out = {key: seconds * prices[key] * flow for key, flow in flows.items() if key in prices}
    nothing = np.zeros(found.count)
    operation = sum(out.values(), nothing)
    invested = nothing
    if "column" in prices:
        invested = invested + prices["column"] * found.volume
    if "exchanger" in prices:
        invested = invested + prices["exchanger"] * sum(found.areas.values(), nothing)
    return {**out, "operation": operation, "invested": invested, "total": operation + prices.get("yearly", YEARLY) * invested}
