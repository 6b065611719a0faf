"""Contract checks of the plug-ins, for this package's own and for those of others.

>>> from leanloop.checks import check_unit
>>> check_unit("mixer")
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from typing import Any

from leanloop.checks import equilibrium, recycle, unit_claims, unit_derivatives, units  # noqa: F401  (two only register)
from leanloop.checks.base import ContractError, Finding, Suite
from leanloop.units.base import Scene

__all__ = ["SORTS", "ContractError", "Finding", "check_equilibrium", "check_recycle", "check_unit", "checks_for"]

SORTS: dict[str, Suite] = {"units": units.SUITE, "equilibrium": equilibrium.SUITE, "recycle": recycle.SUITE}


def check_unit(plugin: type | str, examples: Sequence[Scene] | None = None) -> None:
    """Check a unit kind.

    Parameters
    ----------
    plugin : type or str
        The class, or its kind.
    examples : sequence of Scene, optional
        Those of its own `examples` by default.

    Raises
    ------
    ContractError
        With every check that is broken, why it matters and what to do.
    """
    units.SUITE.run(plugin, examples)


def check_equilibrium(plugin: type | str, examples: Sequence[Mapping[str, Any]] | None = None) -> None:
    """Check an equilibrium model.

    Parameters
    ----------
    plugin : type or str
        The class, or its name.
    examples : sequence of mapping, optional
        Tables as a file would hold them, without ``model``; those of its own `examples` by default.

    Raises
    ------
    ContractError
        With every check that is broken, why it matters and what to do.
    """
    equilibrium.SUITE.run(plugin, examples)


def check_recycle(plugin: type | str, examples: Sequence[Mapping[str, Any]] | None = None) -> None:
    """Check a recycle method.

    Parameters
    ----------
    plugin : type or str
        The class, or its name.
    examples : sequence of mapping, optional
        Options to make it with; its defaults, and those of its own `examples` if it has them, by default.

    Raises
    ------
    ContractError
        With every check that is broken, why it matters and what to do.
    """
    recycle.SUITE.run(plugin, examples)


def checks_for(sort: str) -> Iterator[tuple[str, Callable[..., None]]]:
    """Give the checks of one sort of plug-in, for parametrised tests.

    Parameters
    ----------
    sort : str
        ``"units"``, ``"equilibrium"`` or ``"recycle"``.

    Yields
    ------
    name : str
    function : callable
        ``function(plugin, examples=None)`` runs that check alone and raises `ContractError`.
    """
    yield from SORTS[sort].functions()
