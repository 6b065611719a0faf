"""Stripper: a liquid cleaned with a gas, or with steam, or by boiling it."""

from __future__ import annotations

from leanloop.units.base import Inlet, Scene
from leanloop.units.column import Column
from leanloop.units.column_entries import STRIPPER


class Stripper(Column):
    """Counter-current column in which solutes leave a liquid with a gas, with reboiler and condenser where asked for."""

    kind = "stripper"
    entries = STRIPPER
    cleans = "liquid"

    @classmethod
    def examples(cls) -> list[Scene]:
        """Give the columns of both kinds, and regenerators with reboiler and condenser."""
        air, _, _ = cls.warm_examples()
        tables, data, carriers = air.equilibrium, air.heat_data, air.components
        rich = Inlet("liquid", {"water": [15.0, 12.0], "a": [0.4, 0.3], "salt": [0.3, 0.2]}, [340.0, 350.0], 2e5)
        gas = Inlet("gas", {"air": [0.8, 0.5], "water": [0.0, 0.02]}, 340.0, 1.6e5)
        liquid = {"liquid_in": rich}
        ports = {"liquid_in": "down", "gas_out": "top", "liquid_out": "bottom", "equilibrium": "here"}
        ports |= {"stages": 4, "pressure": 1.5e5}
        draw = {"stream": "taken", "flow": 0.2}
        return [
            *super().examples(),
            Scene(
                {**ports, "gas_in": "up", "reboiler": {"boil_up": 0.15}, "condenser": {"temperature": 330.0}},
                {**liquid, "gas_in": gas}, carriers, tables, heat_data=data,
            ),
            Scene(
                {**ports, "reboiler": {"duty": 3e5}, "condenser": {"reflux_ratio": 0.5, "draw": draw}},
                liquid, carriers, tables, heat_data=data,
            ),
            Scene({**ports, "reboiler": {"stripping_ratio": 0.3}}, liquid, carriers, tables, heat_data=data),
        ]  # fmt: skip
