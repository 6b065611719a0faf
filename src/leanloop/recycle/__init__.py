"""Recycle methods by name; one file each, one line here."""

from leanloop.registry import Registry

METHODS = Registry(
    "recycle method",
    "leanloop.recycle",
    {
        "newton": "leanloop.recycle.newton:Newton",
        "substitution": "leanloop.recycle.substitution:Substitution",
    },
    "leanloop.recycle.base:RecycleMethod",
)
