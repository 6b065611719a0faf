"""One equilibrium table: which model, or which phase, each component has under some conditions."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

from leanloop.components import PHASES, Components
from leanloop.entries import Context, Entry, near, read_values, shown_key, shown_name
from leanloop.equilibrium import MODELS
from leanloop.equilibrium.base import EquilibriumModel
from leanloop.equilibrium.multiplied import Multiplied
from leanloop.errors import nearest
from leanloop.registry import BrokenPlugin, UnknownPlugin

STAYS = (Entry("stays_in", "choice", choices=PHASES, doc="phase of a component under these conditions"),)


class Conditions:
    """Equilibrium under one set of conditions.

    Parameters
    ----------
    name : str
    models : mapping of str to EquilibriumModel
        By component.
    stays : mapping of str to str
        Phase of components that stay in one under these conditions.
    doubtful : iterable of str
        Components with a faulty entry: nothing further is said of them.
    """

    def __init__(
        self, name: str, models: Mapping[str, EquilibriumModel], stays: Mapping[str, str], doubtful: Iterable[str] = ()
    ) -> None:
        self.name, self.models, self.stays, self.doubtful = name, dict(models), dict(stays), frozenset(doubtful)

    def stays_in(self, component: str, components: Components) -> str | None:
        """Give the phase that a component stays in here, None where it distributes."""
        if component in self.models or component in self.doubtful:
            return None
        return self.stays.get(component, components[component].stays_in)

    @classmethod
    def read(cls, name: str, table: Any, components: Components, context: Context) -> Conditions:
        """Read a table and note every fault."""
        address = f"equilibrium.{shown_key(name)}"
        doubtful = set(context.names.get("doubtful", ()))
        models: dict[str, EquilibriumModel] = {}
        stays: dict[str, str] = {}
        if not isinstance(table, Mapping):
            context.fault(address, "is no table", 'write component = { model = "constant", K = 0.1 }')
            return cls(name, models, stays, components.names)
        for component, entry in table.items():
            where, faults = f"{address}.{shown_key(component)}", len(context.faults)
            if component not in components.index:
                if len(components):  # none at all is a fault already
                    context.fault(where, f"unknown component {shown_name(component)}", nearest(component, components.names))
                meant = near(component, components.names)
                doubtful |= {meant} - {None, *table}
            elif not isinstance(entry, Mapping):
                context.fault(where, "is no table", 'write { model = "constant", K = 0.1 }')
            elif "stays_in" in entry:
                values = read_values(STAYS, {"stays_in": entry["stays_in"]}, where, context)
                others = [shown_key(key) for key in entry if key != "stays_in"]
                if others:
                    problem = f"stands beside {', '.join(others)}"
                    context.fault(f"{where}.stays_in", problem, "give a model or stays_in, not both")
                stays[component] = values.words.get("stays_in", "")
            elif "model" not in entry:
                wrong = next((key for key in entry if near(key, ("model", "stays_in"))), None)
                if wrong is None:
                    context.fault(f"{where}.model", "entry is missing", f"add model, one of {', '.join(MODELS)}")
                else:
                    remedy = nearest(wrong, ("model", "stays_in"))
                    context.fault(f"{where}.{shown_key(wrong)}", f"unknown entry {shown_name(wrong)}", remedy)
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
            if len(context.faults) > faults and component in components.index:
                doubtful.add(component)
        return cls(name, models, stays, doubtful)


def _read_model(entry: Mapping[str, Any], where: str, context: Context) -> EquilibriumModel | None:
    try:
        kind = MODELS.load(entry["model"]) if isinstance(entry["model"], str) else None
    except UnknownPlugin:
        kind = None
    except BrokenPlugin as error:
        context.fault(f"{where}.model", str(error), "mend or remove the package that lists it")
        return None
    if kind is None:
        word = entry["model"]
        if isinstance(word, str) and word:
            context.fault(f"{where}.model", f"unknown model {shown_name(word)}", nearest(word, MODELS.names()))
        else:
            context.fault(f"{where}.model", "is no name of a model", f"write one of {', '.join(MODELS)}")
        return None
    file = entry.get("file")
    if isinstance(file, str) and not file.isprintable():  # no system can hold some of those
        context.fault(f"{where}.file", f"{shown_name(file)} is no name of a file", "name a CSV file beside the flowsheet")
        return None
    table = {key: value for key, value in entry.items() if key != "model"}
    return Multiplied.around(kind, table, where, context) if "multiplier" in table else kind.read(table, where, context)
