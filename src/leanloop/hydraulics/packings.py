"""Generic random packings by plain names such as ``pall_metal_50``: geometry, packing factors, constants, each with its source.

Two families of packing factor exist and do not mix: the older one, for the Eckert type of chart, and that of Kister and
Strigle, for the Kister-Gill line. What is not known is NaN. Constants of Billet and Schultes and of Stichlmair come with the
specific area and void fraction that they were fitted with.
"""

from __future__ import annotations

from dataclasses import dataclass, field

from leanloop.errors import LeanloopError, nearest
from leanloop.hydraulics import packing_data as data
from leanloop.hydraulics.arrays import FOOT

NAN = float("nan")


class UnknownPacking(LeanloopError):
    """No packing has the name; the message says which one may be meant."""


@dataclass(frozen=True)
class BilletSchultes:
    """Constants of the method of Billet and Schultes; each may be an array, one that is not known is NaN.

    Parameters
    ----------
    specific_area : (...,) m2/m3
    void_fraction : (...,)
    load, flood, holdup, pressure : (...,)
        C_S, C_Fl, C_h and C_P.
    liquid, gas : (...,)
        C_L and C_V of mass transfer.
    """

    specific_area: float
    void_fraction: float
    load: float = NAN
    flood: float = NAN
    holdup: float = NAN
    pressure: float = NAN
    liquid: float = NAN
    gas: float = NAN


@dataclass(frozen=True)
class Stichlmair:
    """Constants of the method of Stichlmair, Bravo and Fair; each may be an array.

    Parameters
    ----------
    specific_area : (...,) m2/m3
    void_fraction : (...,)
    c1, c2, c3 : (...,)
        Of the friction factor C1/Re + C2/sqrt(Re) + C3.
    """

    specific_area: float
    void_fraction: float
    c1: float
    c2: float
    c3: float


@dataclass(frozen=True)
class Packing:
    """A generic random packing.

    Parameters
    ----------
    name : str
        Type, material and nominal size in mm.
    kind, material : str
    size : m
        Nominal.
    specific_area : m2/m3
    void_fraction
    older_factor, kister_factor : 1/m
        Packing factors of the older family, and of that of Kister and Strigle.
    billet_schultes : BilletSchultes or None
    stichlmair : Stichlmair or None
    sources : dict of str to str
        Source of each field, with whether it was seen or is from memory.
    """

    name: str
    kind: str
    material: str
    size: float
    specific_area: float = NAN
    void_fraction: float = NAN
    older_factor: float = NAN
    kister_factor: float = NAN
    billet_schultes: BilletSchultes | None = None
    stichlmair: Stichlmair | None = None
    sources: dict[str, str] = field(default_factory=dict, compare=False)


def find(name: str) -> Packing:
    """Give a packing by its name.

    Parameters
    ----------
    name : str
        Such as ``"pall_metal_50"``; letters of either case, hyphens and spaces for underscores.

    Returns
    -------
    Packing

    Raises
    ------
    UnknownPacking
        With the nearest name.
    """
    plain = str(name).strip().lower().replace("-", "_").replace(" ", "_")
    if plain not in PACKINGS:
        raise UnknownPacking(f"no packing is called '{name}'; {nearest(plain, PACKINGS)}")
    return PACKINGS[plain]


def names() -> tuple[str, ...]:
    """Give the names of all packings."""
    return tuple(PACKINGS)


def _build() -> dict[str, Packing]:
    keys = dict.fromkeys((*data.GEOMETRY, *data.OLDER, *data.KISTER, *data.BILLET_SCHULTES, *data.STICHLMAIR))
    found = {}
    for kind, material, size in sorted(keys):
        key, sources = (kind, material, size), {}
        area, void = NAN, NAN
        for table in (data.GEOMETRY, data.BILLET_SCHULTES, data.STICHLMAIR):
            if key in table:
                (area, void), source = table[key][0][:2], table[key][-1]
                sources["specific_area"] = sources["void_fraction"] = source
                break
        factors = {"older_factor": NAN, "kister_factor": NAN}
        for word, factor in (("older_factor", data.OLDER), ("kister_factor", data.KISTER)):
            if key in factor:
                value, sources[word] = factor[key]
                factors[word] = value / FOOT  # printed per foot
        billet = stichlmair = None
        if key in data.BILLET_SCHULTES:
            numbers, sources["billet_schultes"] = data.BILLET_SCHULTES[key]
            billet = BilletSchultes(*numbers)
        if key in data.STICHLMAIR:
            numbers, sources["stichlmair"] = data.STICHLMAIR[key]
            stichlmair = Stichlmair(*numbers)
        name = f"{kind}_{material}_{size}"
        found[name] = Packing(
            name, kind, material, 1e-3 * size, area, void, **factors, billet_schultes=billet, stichlmair=stichlmair,
            sources=sources,
        )  # fmt: skip
    return found


PACKINGS = _build()
