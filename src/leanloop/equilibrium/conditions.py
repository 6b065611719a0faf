"""One equilibrium table: which model, or which phase, each component has under some conditions."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from leanloop.components import PHASES, Components
from leanloop.entries import Context
from leanloop.equilibrium import MODELS
from leanloop.equilibrium.base import EquilibriumModel
from leanloop.errors import nearest
from leanloop.registry import BrokenPlugin, UnknownPlugin


class Conditions:
    """Equilibrium under one set of conditions.

    Parameters
    ----------
    name : str
    models : mapping of str to EquilibriumModel
        By component.
    stays : mapping of str to str
        Phase of components that stay in one under these conditions.
    """

    def __init__(self, name: str, models: Mapping[str, EquilibriumModel], stays: Mapping[str, str]) -> None:
        self.name, self.models, self.stays = name, dict(models), dict(stays)

    def stays_in(self, component: str, components: Components) -> str | None:
        """Give the phase that a component stays in here, None where it distributes."""
        if component in self.models:
            return None
        return self.stays.get(component, components[component].stays_in)

    @classmethod
    def read(cls, name: str, table: Any, components: Components, context: Context) -> Conditions:
        """Read a table and note every fault."""
        address = f"equilibrium.{name}"
        models: dict[str, EquilibriumModel] = {}
        stays: dict[str, str] = {}
        if not isinstance(table, Mapping):
            context.fault(address, "is no table", 'write component = { model = "constant", K = 0.1 }')
            return cls(name, models, stays)
        for component, entry in table.items():
            where = f"{address}.{component}"
            if component not in components.index:
                context.fault(where, f"unknown component '{component}'", nearest(component, components.names))
            elif not isinstance(entry, Mapping):
                context.fault(where, "is no table", 'write { model = "constant", K = 0.1 }')
            elif "stays_in" in entry:
                if entry["stays_in"] not in PHASES:
                    context.fault(f"{where}.stays_in", f"unknown phase {entry['stays_in']!r}", "write gas or liquid")
                for key in entry:
                    if key != "stays_in":
                        context.fault(f"{where}.{key}", "does not go with stays_in", "give a model or stays_in, not both")
                stays[component] = entry["stays_in"]
            elif "model" not in entry:
                context.fault(f"{where}.model", "entry is missing", f"add model, one of {', '.join(MODELS)}")
            else:
                model = _read_model(entry, where, context)
                if model is not None:
                    models[component] = model
                    if components[component].stays_in:
                        context.fault(
                            where,
                            f"'{component}' stays in the {components[component].stays_in}, so no model is used",
                            "take away the model here, or stays_in at the component",
                        )
                else:
                    stays[component] = "gas"  # keeps one fault from causing another
        return cls(name, models, stays)


def _read_model(entry: Mapping[str, Any], where: str, context: Context) -> EquilibriumModel | None:
    try:
        kind = MODELS.load(entry["model"]) if isinstance(entry["model"], str) else None
    except UnknownPlugin:
        kind = None
    except BrokenPlugin as error:
        context.fault(f"{where}.model", str(error), "mend or remove the package that lists it")
        return None
    if kind is None:
        context.fault(f"{where}.model", f"unknown model {entry['model']!r}", nearest(str(entry["model"]), MODELS.names()))
        return None
    return kind.read({key: value for key, value in entry.items() if key != "model"}, where, context)
