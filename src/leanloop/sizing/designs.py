"""What a scan of designs found: rates, equipment, cost, the Pareto set and the design chosen."""

from __future__ import annotations

from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.flowsheet.result import Result, plain
from leanloop.sizing import equipment
from leanloop.sizing.equipment import Equipped
from leanloop.sizing.spec import Sizing
from leanloop.status import LIST, OK

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet


class Designs:
    """D designs in F feed cases.

    Parameters
    ----------
    sheet : Flowsheet
        With the requirements that are held, as equalities.
    sizing : Sizing
    inputs : dict of str to (D,) array
        Stages and further inputs by address, SI.
    count : int
        D.
    result : Result
        Cases are designs times feed cases, the feed cases fastest.
    columns : dict of str to Equipped
    renamed : dict of str to str
        Addresses of limits that are held as equalities, by those that the file has for them.

    Attributes
    ----------
    costs : dict of str to (D,) array
        Empty without prices; see `leanloop.sizing.costs.costs`.
    front : (D,) bool
        The Pareto set over circulation, stripping gas or duty, and column volume (stages where no column is equipped).
    cheapest, knee, chosen : int or None
    matched : dict of str to dict
        By column, the stages that plant data make; see `leanloop.sizing.match.stages_of`.
    ratios : dict of str to (D,) array
        By column, its solvent or stripping gas over the least that would do with stages without limit and the same ends, in the
        file's own feed case; NaN for designs that do not stand out, empty where it takes long to find.
    """

    def __init__(
        self, sheet: Flowsheet, sizing: Sizing, inputs: dict[str, Any], count: int, result: Result, columns: dict[str, Equipped],
        renamed: dict[str, str],
    ) -> None:  # fmt: skip
        self.sheet, self.sizing, self.inputs, self.count = sheet, sizing, inputs, count
        self.result, self.columns, self.renamed = result, columns, renamed
        self.costs: dict[str, np.ndarray] = {}
        self.front = np.zeros(count, dtype=bool)
        self.cheapest: int | None = None
        self.knee: int | None = None
        self.chosen: int | None = None
        self.ratios: dict[str, np.ndarray] = {}
        self.matched: dict[str, dict[str, Any]] = {}

    def __len__(self) -> int:
        return self.count

    @property
    def feeds(self) -> int:
        """Number of feed cases F."""
        return len(self.sizing.feeds)

    def by_feed(self, values: Any) -> np.ndarray:
        """Give a quantity of all cases by design and feed case, (D, F)."""
        return np.asarray(values, dtype=float).reshape(self.count, self.feeds)

    def quantity(self, address: str) -> np.ndarray:
        """Give a quantity of the result, (D, F); NaN where not solved or not calculated."""
        found = self.result[address]
        if isinstance(found, list):
            found = [np.nan if item is None else item for item in found]
        return self.by_feed(found)

    # --- which are designs at all

    @cached_property
    def codes(self) -> np.ndarray:
        """Status numbers, (D, F) int."""
        return self.result.codes().reshape(self.count, self.feeds)

    @cached_property
    def good(self) -> np.ndarray:
        """Whether a design meets its requirements in every feed case and every column could be sized, (D,) bool."""
        good = (self.codes == OK).all(axis=1)
        for item in self.columns.values():
            good = good & np.isfinite(item.diameter_m) & np.isfinite(item.height_m)
        return good

    @cached_property
    def reasons(self) -> list[str]:
        """Why a design is none, empty where it is one."""
        names, texts = list(self.sizing.feeds), self.result.status_text
        out = []
        for design in range(self.count):
            bad = np.flatnonzero(self.codes[design] != OK)
            if len(bad):
                case = int(bad[0])
                text = texts[design * self.feeds + case]
                head = f"feed case {names[case]}: " if self.feeds > 1 else ""
                out.append(f"{head}{text}")
            elif not self.good[design]:
                lost = [
                    name for name, item in self.columns.items() if not np.isfinite(item.height_m[design] + item.diameter_m[design])
                ]
                out.append(f"column {', '.join(lost)} could not be sized: a correlation has no answer there")
            else:
                out.append("")
        return out

    @cached_property
    def statuses(self) -> list[str]:
        """Worst status word of the feed cases by design."""
        return [LIST[item].name for item in self.codes.max(axis=1)]

    # --- what they take, the largest of the feed cases; mean of them for what is consumed

    @cached_property
    def freed(self) -> dict[str, np.ndarray]:
        """Freed inputs by address, (D, F) SI."""
        return {item.free: self.quantity(f"requirements.{name}.free_value") for name, item in self.sheet.requirements.items()}

    @cached_property
    def circulation(self) -> np.ndarray:
        """Flow of what make-ups hold, else of what absorbers are fed, (D,) mol/s, in the feed case that has the most."""
        total = np.zeros((self.count, self.feeds))
        units = self.sheet.units.values()
        if not any(unit.kind == "makeup" for unit in units):
            fed = [unit.inlets["liquid_in"] for unit in units if getattr(unit, "cleans", "") == "gas"]
            return _largest(sum((self.quantity(f"streams.{name}.total_mol_s") for name in fed), total))
        for unit in units:
            if unit.kind == "makeup":
                for key in unit.values.group("hold"):
                    total = total + self.quantity(f"streams.{unit.outlets['gives']}.mol_s.{key}")
        return _largest(total)

    @cached_property
    def _strippers(self) -> list[Any]:
        return [unit for unit in self.sheet.units.values() if getattr(unit, "cleans", "") == "liquid"]

    @cached_property
    def stripping(self) -> np.ndarray:
        """Stripping gas fed, (D,) mol/s, in the feed case that has the most."""
        total = np.zeros((self.count, self.feeds))
        for unit in self._strippers:
            if "gas_in" in unit.inlets:
                total = total + self.quantity(f"streams.{unit.inlets['gas_in']}.total_mol_s")
        return _largest(total)

    @cached_property
    def steam_kg_s(self) -> np.ndarray:
        """Stripping gas fed, (D,) kg/s, mean of the feed cases; what stays unknown for want of a molar mass is NaN."""
        total = np.zeros((self.count, self.feeds))
        for unit in self._strippers:
            if "gas_in" in unit.inlets:
                total = total + self._mass(unit.inlets["gas_in"])
        return total.mean(axis=1)

    def _mass(self, stream: str) -> np.ndarray:
        total = np.zeros((self.count, self.feeds))
        for item, there in zip(self.sheet.components, self.sheet.plan.present[stream], strict=True):
            if there:
                mass = np.nan if item.molar_mass is None else item.molar_mass
                total = total + mass * self.quantity(f"streams.{stream}.mol_s.{item.name}")
        return total

    @cached_property
    def _duties(self) -> np.ndarray | None:
        """Duties from outside, (U, D, F) W; None where heat is not balanced."""
        if self.sheet.heat is None:
            return None
        found = []
        for name, unit in self.sheet.units.items():
            if unit.kind == "exchanger":
                continue
            for key in ("duty_W", "reboiler_duty_W", "condenser_duty_W"):
                try:
                    found.append(self.quantity(f"units.{name}.results.{key}"))
                except KeyError:
                    continue
        return np.stack(found) if found else None

    @cached_property
    def heat_W(self) -> np.ndarray:
        """Duties above zero, (D,) W, mean of the feed cases; NaN where heat is not balanced."""
        return np.full(self.count, np.nan) if self._duties is None else np.maximum(self._duties, 0.0).sum(axis=0).mean(axis=1)

    @cached_property
    def cooling_W(self) -> np.ndarray:
        """Duties below zero, (D,) W as a positive figure, likewise."""
        return np.full(self.count, np.nan) if self._duties is None else np.maximum(-self._duties, 0.0).sum(axis=0).mean(axis=1)

    @cached_property
    def power_W(self) -> np.ndarray:
        """Power of pumps and blowers, (D,) W, mean of the feed cases."""
        total = np.zeros((self.count, self.feeds))
        for name, unit in self.sheet.units.items():
            if unit.kind in ("pump", "blower"):
                total = total + self.quantity(f"units.{name}.results.power_W")
        return total.mean(axis=1)

    @cached_property
    def solvent_kg_s(self) -> np.ndarray:
        """What make-ups add, (D,) kg/s, mean of the feed cases."""
        total = np.zeros((self.count, self.feeds))
        for name, unit in self.sheet.units.items():
            if unit.kind == "makeup":
                for key in unit.values.group("hold"):
                    mass = self.sheet.components[key].molar_mass
                    added = self.quantity(f"units.{name}.results.added_mol_s.{key}")
                    total = total + (np.nan if mass is None else mass) * added
        return total.mean(axis=1)

    @cached_property
    def energy(self) -> np.ndarray:
        """What regeneration takes: reboiler duties in W where columns are boiled, else stripping gas in mol/s, (D,)."""
        boiled = [unit.name for unit in self._strippers if "gas_in" not in unit.inlets]
        if not boiled:
            return self.stripping
        return _largest(sum(self.quantity(f"units.{name}.results.reboiler_duty_W") for name in boiled))

    @cached_property
    def volume(self) -> np.ndarray:
        """Volume of all columns that are equipped, (D,) m3."""
        return sum((item.volume_m3 for item in self.columns.values()), np.zeros(self.count))

    @cached_property
    def stages(self) -> dict[str, np.ndarray]:
        """Equilibrium stages of each column, (D,) int."""
        out = {}
        for name, unit in self.sheet.units.items():
            if hasattr(unit, "cleans"):
                own = self.inputs.get(f"units.{name}.stages")
                out[name] = np.full(self.count, unit.count(unit.values.numbers)) if own is None else np.asarray(own).astype(int)
        return out

    @property
    def size_measure(self) -> np.ndarray:
        """Column volume in m3, or the stages of all columns where none is equipped, (D,)."""
        return self.volume if self.columns else sum(self.stages.values(), np.zeros(self.count)).astype(float)

    @cached_property
    def areas(self) -> dict[str, np.ndarray]:
        """Area of each exchanger whose coefficient is given, (D,) m2, in the feed case that asks for the most."""
        return {name: _largest(self.quantity(f"units.{name}.results.UA_W_K")) / own for name, own in self.sizing.exchangers.items()}

    # --- as a table

    def table(self) -> dict[str, Any]:
        """Give one row for each design, by column, SI units.

        Returns
        -------
        dict of str to (D,) array or list of str
        """
        names = list(self.sizing.feeds)
        out: dict[str, Any] = {"design": np.arange(self.count)}
        for key, values in self.inputs.items():
            out[key] = [str(item) for item in values] if isinstance(values, list) else values
        out["status"], out["reason"] = self.statuses, self.reasons
        for address, values in self.freed.items():
            for place, name in enumerate(names):
                out[address if self.feeds == 1 else f"{address} in {name}"] = values[:, place]
        for address in self.sizing.record:
            values = self.quantity(address)
            for place, name in enumerate(names):
                out[address if self.feeds == 1 else f"{address} in {name}"] = values[:, place]
        out["circulation_mol_s"], out["stripping_mol_s"] = self.circulation, self.stripping
        out.update({f"columns.{name}.ratio_to_least": values for name, values in self.ratios.items() if np.isfinite(values).any()})
        for key in ("heat_W", "cooling_W"):
            if np.isfinite(getattr(self, key)).any():
                out[key] = getattr(self, key)
        if np.any(self.power_W > 0):
            out["power_W"] = self.power_W
        for name, item in self.columns.items():
            own = {
                "diameter_m": item.diameter_m, "trays": item.trays, "height_m": item.height_m, "volume_m3": item.volume_m3,
                "flood": _largest(item.flood), "least_flood": item.flood.min(axis=1), "governing_stage": item.governing_stage,
                "drop_Pa": _largest(item.drop_Pa), "entrainment": _largest(item.entrainment), "wetting": item.wetting.min(axis=1),
                "efficiency": item.efficiency.min(axis=1), "hetp_m": _largest(item.hetp_m),
            }  # fmt: skip
            keep = {key: value for key, value in own.items() if np.isfinite(value).any()}
            out.update({f"columns.{name}.{key}": value for key, value in keep.items()})
        out.update({f"exchangers.{name}.area_m2": value for name, value in self.areas.items()})
        out.update({f"cost.{key}": value for key, value in self.costs.items()})
        out["in_pareto_set"] = self.front
        return out

    def case_of(self, design: int, feed: int = 0) -> int:
        """Give the number of the case of a design in a feed case."""
        return design * self.feeds + feed

    def governing_feed(self, name: str, design: int) -> int:
        """Give the feed case in which a column of a design is nearest to flooding."""
        flood = self.columns[name].flood[design]
        return int(np.argmax(np.where(np.isfinite(flood), flood, -np.inf)))

    def cautions(self) -> list[str]:
        """Say what a careful reader must know of the design chosen."""
        if self.chosen is None:
            return []
        said: dict[str, None] = {}
        for key, values in self.inputs.items():
            if not isinstance(values, list) and np.ptp(values) > 0 and values[self.chosen] in (np.min(values), np.max(values)):
                said[f"The design chosen lies at the end of what was scanned of {key}: a wider scan may hold a better one."] = None
        for name, item in self.columns.items():
            case = self.case_of(self.chosen, self.governing_feed(name, self.chosen))
            for sentence in equipment.cautions(self.sizing, item.spec, self.result, case, float(item.diameter_m[self.chosen])):
                said[sentence] = None
        return list(said)

    def settings(self, design: int) -> dict[str, float]:
        """Give the inputs that make the flowsheet a design, SI by address: what is scanned, and what requirements free.

        Parameters
        ----------
        design : int
        """
        out = {key: values[design] for key, values in self.inputs.items()}
        out.update({address: float(values[design, 0]) for address, values in self.freed.items()})
        return {key: value.tolist() if isinstance(value, np.ndarray | np.generic) else value for key, value in out.items()}

    def to_dict(self) -> dict[str, Any]:
        """Give everything in SI units, as plain lists and numbers with None for what is undefined.

        Returns
        -------
        dict
        """
        return plain(
            {
                "designs": self.table(),
                "feed_cases": list(self.sizing.feeds),
                "pareto": np.flatnonzero(self.front),
                "cheapest": self.cheapest,
                "knee": self.knee,
                "chosen": self.chosen,
                "matched": self.matched,
                "cautions": self.cautions(),
            }
        )

    def __str__(self) -> str:
        from leanloop.output.text import designs

        return designs(self)


def _largest(values: np.ndarray) -> np.ndarray:
    """Give the largest of the feed cases, (D,); NaN where one is not known."""
    return values.max(axis=1)
