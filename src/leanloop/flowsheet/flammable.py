"""Which gas streams lie inside a flammable range, by limits that the user gives."""

from __future__ import annotations

import numpy as np

from leanloop.components import Components
from leanloop.stream import Stream

OXIDISERS = ("air", "oxygen", "o2")


def flammable(name: str, stream: Stream, components: Components) -> str | None:
    """Say that a gas stream with air or oxygen is inside its flammable range in some case; None where it is in none.

    Limits of mixtures follow Le Chatelier's rule: of the fuel and the air alone, the mixture is at its lower limit where
    the sum of y / lower is one, at its upper where the sum of y / upper is one. Limits hold for air at ambient
    conditions; inert gases, heat and pressure move them.

    Parameters
    ----------
    name : str
        Of the stream.
    stream : Stream
        State (M, C + 2).
    components : Components

    Returns
    -------
    str or None

    Notes
    -----
    H. F. Coward and G. W. Jones, US Bureau of Mines Bulletin 503 (1952), for the rule (from memory).
    """
    fuels = [place for place, item in enumerate(components) if item.flammable is not None]
    airs = [place for place, item in enumerate(components) if item.name.lower() in OXIDISERS]
    if stream.phase != "gas" or not fuels or not airs:
        return None
    low, high = (np.array([components.items[place].flammable[end] for place in fuels]) for end in (0, 1))
    flows = stream.flows
    total = flows[..., fuels].sum(axis=-1) + flows[..., airs].sum(axis=-1)
    with np.errstate(all="ignore"):
        parts = flows[..., fuels] / total[..., None]
        inside = ((parts / low).sum(axis=-1) >= 1.0) & ((parts / high).sum(axis=-1) <= 1.0)
        inside &= flows[..., airs].sum(axis=-1) > 0
    if not np.any(inside):
        return None
    worst = float(np.max(np.where(inside, parts.sum(axis=-1), 0.0)))
    return (
        f"Stream {name} is inside its flammable range by the limits given: {100 * worst:.3g} mol % of flammable components "
        "in the air."
    )
