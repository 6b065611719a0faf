"""Splitter: one stream into several of the same composition."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from leanloop.components import Components
from leanloop.entries import Context, Entry
from leanloop.stream import Stream
from leanloop.units.base import Inlet, Numbers, Scene, Unit


class Splitter(Unit):
    """Divides a stream by given shares; one outlet may go unnamed and gets the rest."""

    kind = "splitter"
    shuts = True
    entries = (
        Entry("takes", "inlet", required=True, doc="the stream to divide"),
        Entry("gives", "outlet", required=True, many=True, doc="the parts"),
        Entry("shares", "number", required=True, by="outlet", least=0.0, most=1.0, doc="part of the inlet by outlet"),
    )

    @classmethod
    def examples(cls) -> list[Scene]:
        """Give three parts of a liquid, and a bleed that is shut."""
        brine = Inlet("liquid", {"water": [2.0, 1.0], "salt": [0.1, 0.0]}, [300.0, 320.0], [1e5, 2e5])
        air = Inlet("gas", {"air": [1.0, 3.0]})
        return [
            Scene({"takes": "all", "gives": ["a", "b", "c"], "shares": {"a": 0.2, "b": 0.3}}, {"takes": brine}),
            Scene({"takes": "all", "gives": ["kept", "bleed"], "shares": {"bleed": 0.0, "kept": 1.0}}, {"takes": air}),
        ]

    def check(self, address: str, context: Context) -> None:
        """Shares must be complete and sum to one, or to less with one outlet unnamed."""
        shares = self.values.group("shares")
        if not isinstance(self.raw.get("shares"), Mapping) or len(shares) < len(self.raw["shares"]):
            return
        unnamed = [label for label in self.outlets if label not in shares]
        total = sum(shares.values())
        if len(unnamed) > 1:
            context.fault(f"{address}.shares", f"no share for {', '.join(unnamed)}", "leave at most one outlet unnamed")
        elif not unnamed and self.outlets and abs(total - 1.0) > 1e-6:
            context.fault(f"{address}.shares", f"the shares sum to {total:g}", "make them sum to 1, or leave one outlet out")
        elif unnamed and total > 1.0:
            context.fault(f"{address}.shares", f"the shares sum to {total:g}", "make them sum to 1 or less")

    def _shares(self, numbers: Numbers) -> dict[str, Any]:
        shares = {label: numbers[f"shares.{label}"] for label in self.outlets if f"shares.{label}" in numbers}
        for label in self.outlets:
            if label not in shares:
                shares[label] = 1.0 - sum(shares.values())
        return {label: shares[label] for label in self.outlets}

    def passes(self, inlet: str, outlet: str, components: Components, numbers: Numbers | None = None) -> np.ndarray:
        """Nothing passes to an outlet whose share is zero."""
        everything = np.ones(len(components), dtype=bool)
        if numbers is None:
            return everything
        return (np.real(np.asarray(self._shares(numbers)[outlet])) != 0)[..., None] & everything

    def leans_on(self, outlet: str, what: str) -> list[tuple[str, str]]:
        """Temperature and pressure are those of the inlet."""
        return [(inlet, what) for inlet in self.inlets]

    def calculate(self, inlets: Mapping[str, Stream], numbers: Numbers) -> dict[str, Stream]:
        """Give each outlet its share."""
        stream = inlets["takes"]
        return {
            label: stream.carrying(stream.flows * np.asarray(share)[..., None])
            for label, share in self._shares(numbers).items()
        }
