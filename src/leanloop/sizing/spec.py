"""What may be written at `[sizing]` and `[properties]`, and what is known once it is read."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from leanloop.entries import Entry
from leanloop.studies.axes import Axis

# Of a component, at the conditions of the column: [properties.COMPONENT].
PROPERTIES = (
    Entry("liquid_density", "density", above=0.0, doc="as a pure liquid, or as it counts in this one"),
    Entry("liquid_viscosity", "viscosity", above=0.0, doc="likewise"),
    Entry("gas_viscosity", "viscosity", above=0.0, doc="of the pure gas"),
    Entry("surface_tension", "surface tension", above=0.0, doc="of the pure liquid"),
    Entry("gas_diffusivity", "diffusivity", above=0.0, doc="in this gas; else from diffusion_volume"),
    Entry("liquid_diffusivity", "diffusivity", above=0.0, doc="in this liquid; else from molar_volume"),
    Entry("diffusion_volume", "molar volume", above=0.0, doc="for Fuller's equation"),
    Entry("molar_volume", "molar volume", above=0.0, doc="at the normal boiling point, for the equation of Wilke and Chang"),
    Entry("association", "number", above=0.0, doc="of the solvent, in that equation; 1 by default"),
)
# Of a whole stream, at a column; they stand in place of what the components would give.
MIXTURE = (
    Entry("gas_density", "density", above=0.0, doc="of the gas; ideal by default"),
    Entry("liquid_density", "density", above=0.0, doc="of the liquid"),
    Entry("gas_viscosity", "viscosity", above=0.0, doc="of the gas"),
    Entry("liquid_viscosity", "viscosity", above=0.0, doc="of the liquid"),
    Entry("surface_tension", "surface tension", above=0.0, doc="of the liquid"),
    Entry("gas_diffusivity", "diffusivity", above=0.0, doc="of the key component in the gas"),
    Entry("liquid_diffusivity", "diffusivity", above=0.0, doc="of the key component in the liquid"),
)
FLOODS = ("kister_gill", "leva", "eckert", "billet_schultes", "stichlmair")
DROPS = ("billet_schultes", "stichlmair", "robbins")
TRANSFERS = ("onda", "billet_schultes")
COMMON = (
    Entry("internals", "choice", required=True, choices=("trays", "packing"), doc="what makes the stages"),
    Entry("key", "component", doc="component that efficiency and transfer units are for; that of a requirement by default"),
    Entry("flood", "number", above=0.0, most=1.0, doc="part of the flood velocity to design for; 0.8 of trays, 0.7 of packing"),
    Entry("system_factor", "number", above=0.0, most=1.0, doc="of foaming, on the flood velocity; 1 by default"),
    Entry("rate_margin", "number", least=1.0, doc="on both flows, for flood and pressure drop; 1 by default"),
    Entry("diameter", "length", above=0.0, doc="of a column that stands: it is rated instead of sized"),
    Entry("standard", "flag", doc="whether diameters are rounded up to steps of 0.1 m up to 1 m, of 0.2 m above"),
    Entry("ends", "length", least=0.0, doc="height beside trays or packing; none by default"),
    *MIXTURE,
)
TRAYS = (
    Entry("spacing", "length", above=0.0, doc="between trays; 0.5 m by default"),
    Entry("efficiency", "number", above=0.0, most=1.5, doc="overall: stages over trays"),
    Entry("murphree", "number", above=0.0, most=2.0, doc="Murphree vapour efficiency, made overall by Lewis's relation"),
    Entry("oconnell", "flag", doc="whether the overall efficiency is O'Connell's"),
    Entry("capacity", "choice", choices=("fair", "treybal"), doc="fit of the flood chart"),
    Entry("hole_area", "number", above=0.0, most=0.3, doc="of the active area; 0.1 by default"),
    Entry("hole_diameter", "length", above=0.0, doc="5 mm by default"),
    Entry("weir_height", "length", above=0.0, doc="50 mm by default"),
    Entry("downcomer", "number", above=0.0, below=0.5, doc="part of the column's area; by the flow parameter by default"),
)
PACKED = (
    Entry("packing", "text", doc="a generic packing, such as pall_metal_50"),
    Entry("specific_area", "specific area", above=0.0, doc="of another packing"),
    Entry("void_fraction", "number", above=0.0, below=1.0, doc="of another packing"),
    Entry("packing_factor", "specific area", above=0.0, doc="of another packing, of Kister and Strigle's family"),
    Entry("nominal_size", "length", above=0.0, doc="of another packing"),
    Entry("flood_by", "choice", choices=FLOODS, doc="kister_gill by default"),
    Entry("drop_by", "choice", choices=DROPS, doc="the first that has constants by default"),
    Entry("most_drop", "pressure gradient", above=0.0, doc="pressure drop that is not to be passed, beside flood"),
    Entry("hetp", "length", above=0.0, doc="height of a stage; that of the flowsheet's column by default"),
    Entry("transfer", "choice", choices=TRANSFERS, doc="method of film coefficients, instead of hetp"),
    Entry("critical_tension", "surface tension", above=0.0, doc="of the packing's material, for onda; by its name by default"),
)
COLUMN = (*COMMON, *TRAYS, *PACKED)
OF_TRAYS, OF_PACKING = {entry.name for entry in TRAYS}, {entry.name for entry in PACKED}
PRICES = (
    Entry("steam", "price of mass", least=0.0, doc="of stripping gas"),
    Entry("heat", "price of energy", least=0.0, doc="of duties above zero"),
    Entry("cooling", "price of energy", least=0.0, doc="of duties below zero"),
    Entry("power", "price of energy", least=0.0, doc="of pumps and blowers"),
    Entry("solvent", "price of mass", least=0.0, doc="of what make-ups add"),
    Entry("column", "price of volume", least=0.0, doc="of columns with what is in them"),
    Entry("exchanger", "price of area", least=0.0, doc="of exchangers"),
    Entry("hours", "number", above=0.0, most=8784.0, doc="of operation a year; 8000 by default"),
    Entry("yearly", "number", above=0.0, doc="part of what is invested that a year has to bear; 0.2 by default"),
)
CHOICES = ("cheapest", "knee")


@dataclass(frozen=True)
class ColumnSpec:
    """Equipment of one column.

    Attributes
    ----------
    unit : str
    words : dict of str to Any
        Names and flags, as read.
    numbers : dict of str to float
        SI.
    key : str
        Component that efficiency and transfer units are for.
    packing : Packing or None
    """

    unit: str
    words: dict[str, Any]
    numbers: dict[str, float]
    key: str
    packing: Any = None

    @property
    def trays(self) -> bool:
        """Whether trays make the stages."""
        return self.words["internals"] == "trays"

    def get(self, name: str, default: float) -> float:
        """Give a number, or what it is by default."""
        return float(self.numbers.get(name, default))


@dataclass(frozen=True)
class Sizing:
    """What a scan of designs asks for.

    Attributes
    ----------
    hold : tuple of str
        Requirements that every design meets.
    axes : tuple of Axis
        Stages of the columns, one axis each, and further inputs.
    stages : tuple of str
        Columns whose stages are scanned.
    feeds : dict of str to dict
        Feed cases by name: SI inputs by address.
    columns : dict of str to ColumnSpec
    properties : dict of str to dict
        SI, by component.
    prices : dict of str to float
        SI; empty where none is given.
    exchangers : dict of str to float
        Heat transfer coefficients, W/(m2 K).
    choose : str
        ``"cheapest"``, ``"knee"``, or empty for the former where there are prices.
    record : tuple of str
        Addresses of what else is told of each design.
    match : dict of str to Match
        Measured figures by column.
    """

    hold: tuple[str, ...]
    axes: tuple[Axis, ...]
    stages: tuple[str, ...]
    feeds: dict[str, dict[str, Any]]
    columns: dict[str, ColumnSpec] = field(default_factory=dict)
    properties: dict[str, Mapping[str, float]] = field(default_factory=dict)
    prices: dict[str, float] = field(default_factory=dict)
    exchangers: dict[str, float] = field(default_factory=dict)
    choose: str = ""
    record: tuple[str, ...] = ()
    match: dict[str, Any] = field(default_factory=dict)
