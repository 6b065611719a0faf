"""Components and which phase they stay in."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from leanloop.entries import Context, Entry, read_values

PHASES = ("gas", "liquid")

ENTRIES = (
    Entry("molar_mass", "molar mass", above=0.0, doc="needed for mass fractions, mass flows and mg/Nm3"),
    Entry(
        "flammable", "number", many=True, least=0.0, most=1.0, cases=False,
        doc="lower and upper limit of flammability in air, mole fractions",
    ),
    Entry("stays_in", "choice", choices=PHASES, doc="the only phase it is ever in; without it the component distributes"),
)  # fmt: skip


@dataclass(frozen=True)
class Component:
    """A chemical species or lumped cut.

    Parameters
    ----------
    name : str
    molar_mass : float or None
        kg/mol.
    stays_in : str or None
        ``"gas"``, ``"liquid"``, or None where it distributes.
    flammable : (float, float) or None
        Lower and upper limit of flammability in air, mole fractions.
    """

    name: str
    molar_mass: float | None = None
    stays_in: str | None = None
    flammable: tuple[float, float] | None = None

    @classmethod
    def read(cls, name: str, table: Any, address: str, context: Context) -> Component:
        """Read a component and note every fault."""
        values = read_values(ENTRIES, table, address, context)
        limits = values.numbers.get("flammable")
        if limits is not None and (len(limits) != 2 or not 0 < limits[0] < limits[1]):
            remedy = 'write the lower and the upper limit, such as [0.011, 0.071] or ["1.1 %", "7.1 %"]'
            context.fault(f"{address}.flammable", "is no lower and higher mole fraction", remedy)
            limits = None
        return cls(
            name, values.numbers.get("molar_mass"), values.words.get("stays_in"), None if limits is None else tuple(limits)
        )


class Components:
    """The components of a flowsheet, in its order.

    Parameters
    ----------
    items : iterable of Component
    groups : mapping of str to tuple of str
        Named groups of components, which may stand for one in a quantity.
    """

    def __init__(self, items: Iterable[Component], groups: Mapping[str, tuple[str, ...]] | None = None) -> None:
        self.items = tuple(items)
        self.names = tuple(item.name for item in self.items)
        self.index = {name: place for place, name in enumerate(self.names)}
        self.groups = dict(groups or {})
        self.molar_masses = np.array(
            [np.nan if item.molar_mass is None else item.molar_mass for item in self.items], dtype=float
        )

    def __len__(self) -> int:
        return len(self.items)

    def __iter__(self) -> Iterator[Component]:
        return iter(self.items)

    def __getitem__(self, name: str) -> Component:
        return self.items[self.index[name]]

    def places(self, name: str) -> list[int]:
        """Give the places of a component, or of all components of a group.

        Raises
        ------
        KeyError
            Where there is neither.
        """
        if name in self.index:
            return [self.index[name]]
        return [self.index[part] for part in self.groups[name]]

    def mask(self, names: Iterable[str]) -> np.ndarray:
        """Tell which components are among some names.

        Returns
        -------
        (C,) bool
        """
        wanted = set(names)
        return np.array([name in wanted for name in self.names], dtype=bool)
