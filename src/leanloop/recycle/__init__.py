"""Recycle methods by name; one file each, one line here."""

from leanloop.registry import Registry

METHODS = Registry(
    "recycle method",
    "leanloop.recycle",
    {
        "newton": "leanloop.recycle.newton:Newton",
        "substitution": "leanloop.recycle.substitution:Substitution",
        "wegstein": "leanloop.recycle.wegstein:Wegstein",
        "anderson": "leanloop.recycle.anderson:Anderson",
        "dominant_eigenvalue": "leanloop.recycle.dominant_eigenvalue:DominantEigenvalue",
        "broyden": "leanloop.recycle.broyden:Broyden",
    },
    "leanloop.recycle.base:RecycleMethod",
)
