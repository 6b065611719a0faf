"""Equilibrium models by name; one file each, one line here."""

from leanloop.registry import Registry

MODELS = Registry(
    "equilibrium model",
    "leanloop.equilibrium",
    {
        "constant": "leanloop.equilibrium.constant:Constant",
        "polynomial": "leanloop.equilibrium.polynomial:Polynomial",
        "henry": "leanloop.equilibrium.henry:Henry",
        "raoult": "leanloop.equilibrium.raoult:Raoult",
        "table": "leanloop.equilibrium.table:Table",
    },
    "leanloop.equilibrium.base:EquilibriumModel",
)
