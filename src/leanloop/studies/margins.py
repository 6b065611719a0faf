"""How likely a requirement is met when inputs are spread, and the margin on an input that makes it likely enough."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from scipy.special import ndtr, ndtri

from leanloop.studies import tasks
from leanloop.studies.campaign import Memory, Progress, carry_out
from leanloop.studies.executors import Engine
from leanloop.studies.store import Store

if TYPE_CHECKING:
    from leanloop.flowsheet.requirement import Requirement
    from leanloop.flowsheet.sheet import Flowsheet
    from leanloop.studies.study import Study

REACH = 3.0  # times: how far a margin is looked for where the requirement names no bounds
WARM = 40.0  # K, the same for temperatures
LOOKS = 9  # points of the first search for a margin
REFINED = 8  # steps that narrow the bracket, by the false position or by halves
CLOSE = 1e-5  # of the range searched: near enough


@dataclass(frozen=True)
class Ground:
    """What every search of an uncertainty study stands on.

    Attributes
    ----------
    study : Study
    sheet : Flowsheet
        Without requirements.
    design : dict of str to float
        What requirements freed, SI, by address.
    changes : dict of str to (M,) array
        Inputs of the sample, the design among them.
    store : Store or Memory
    engine : Engine
    progress : callable or None
    """

    study: Study
    sheet: Flowsheet
    design: Mapping[str, float]
    changes: Mapping[str, np.ndarray]
    store: Store | Memory
    engine: Engine
    progress: Progress | None


def judged(
    ground: Ground,
    name: str,
    item: Requirement,
    first: Mapping[str, Any],
    cases: Mapping[str, np.ndarray],
    slopes: Mapping[tuple[str, str], Any],
) -> dict[str, Any]:
    """Tell how likely a requirement is met, and what margins make it as likely as asked.

    Parameters
    ----------
    ground : Ground
    name : str
    item : Requirement
    first : mapping
        ``mean`` and ``deviation`` of its quantity, to first order.
    cases : mapping of str to (M,) array
        Its quantity among the columns, NaN where not solved.
    slopes : mapping of (str, str) to float
        Derivatives by quantity and input.

    Returns
    -------
    dict
        ``quantity``, ``limit`` (SI), ``meets``, probabilities ``first_order`` and ``sampled``, and by input ``margins``: ``at``,
        the value now; ``first_order`` and ``sampled``, the value needed (SI, NaN where none was found), with an input that is
        spread itself scaled as a whole, temperatures shifted; ``probability`` there;
        ``reason`` where none was found, with ``best``, the value at which most cases meet it, and ``tried``, the last one tried.
    """
    study = ground.study
    limit = float(study.sheet.numbers[item.target])
    sense = study.margin.meets[name]
    sign = 1.0 if sense == "at_most" else -1.0
    gap, wide = sign * (limit - first["mean"]), first["deviation"]
    values = cases[item.address]
    margins = {}
    for key in study.margin.inputs:
        slope = sign * float(slopes[item.address, key])
        at = ground.design.get(key, study.laws[key].mean if key in study.laws else float(study.sheet.numbers[key]))
        seek = _Seek(ground, name, item, limit, sign, key, at, slope)
        scaled = slope * study.laws[key].deviation if key in study.laws and at and not seek.warm else 0.0
        shift = _first_order(ndtri(study.margin.confidence), gap, wide, slope, scaled, at)
        margins[key] = {"at": float(at), "first_order": seek.allowed(float(at + shift)), **seek.found(values)}
    return {
        "quantity": item.address,
        "limit": limit,
        "meets": sense,
        "first_order": float(ndtr(gap / wide)) if wide > 0 else float(gap >= 0),
        "sampled": _likely(values, limit, sign),
        "margins": margins,
    }


def _first_order(z: float, gap: float, wide: float, slope: float, scaled: float, at: float) -> float:
    """Give the least change d of an input with which gap - slope d = z deviation, NaN where there is none.

    The deviation stays, but for the part `scaled` that the input has in it itself: its spread grows with it, (1 + d/at).
    """
    if z * wide <= gap:
        return 0.0
    if not slope:
        return float("nan")
    grows = scaled / at if scaled else 0.0
    rest = max(wide**2 - scaled**2, 0.0)
    # (gap - slope d)^2 = z^2 (rest + (scaled + grows d)^2)
    roots = np.roots([slope**2 - (z * grows) ** 2, -2 * (gap * slope + z**2 * scaled * grows), gap**2 - z**2 * (rest + scaled**2)])
    good = [d for d in roots[np.isreal(roots)].real if slope * d <= 0 and z * (gap - slope * d) >= 0]
    return min(good, key=abs, default=float("nan"))


def _likely(values: np.ndarray, limit: float, sign: float) -> float:
    """Give the share of cases that meet a limit; one without an answer does not."""
    with np.errstate(invalid="ignore"):
        return float(np.mean(sign * (values - limit) <= 1e-9 * abs(limit)))


class _Seek:
    """The search for the margin on one input: the sample solved again with that input moved."""

    def __init__(
        self, ground: Ground, name: str, item: Requirement, limit: float, sign: float, key: str, at: float, slope: float
    ) -> None:
        self.ground, self.item, self.limit, self.sign = ground, item, limit, sign
        self.key, self.at, self.slope = key, at, slope
        self.part = f"margin of {name} on {key}"
        self.warm = ground.sheet.sorts[key] == "temperature"

    def allowed(self, value: float) -> float:
        """Give a value that the input may have, NaN for others, such as a flow below zero."""
        entry = self.ground.sheet.entry(self.key)
        low = entry.least if entry.least is not None else -np.inf
        high = entry.most if entry.most is not None else np.inf
        beyond = (entry.above is not None and value <= entry.above) or (entry.below is not None and value >= entry.below)
        return value if low <= value <= high and not beyond else float("nan")

    def found(self, now: np.ndarray) -> dict[str, Any]:
        """Give the value of the input that makes the requirement as likely as asked, and what it comes to.

        Parameters
        ----------
        now : (M,) array
            The quantity, as the plant is designed.
        """
        excess = self._excess(now)
        if excess <= 0:
            return {"sampled": self.at, "probability": _likely(now, self.limit, self.sign), "reason": None}
        far = self._far()
        if far is None:
            return {
                "sampled": float("nan"),
                "probability": _likely(now, self.limit, self.sign),
                "reason": "it does not matter here",
            }
        points = np.linspace(self.at, far, LOOKS + 1)[1:]
        rows = self._try(points, f"{self.part}, first search")
        excesses = [self._excess(row) for row in rows]
        hit = next((place for place, value in enumerate(excesses) if value <= 0), None)
        if hit is None:
            best = int(np.argmax([_likely(row, self.limit, self.sign) for row in rows]))
            likely = _likely(rows[best], self.limit, self.sign)
            reason = "no value is enough"
            return {
                "sampled": float("nan"),
                "probability": likely,
                "reason": reason,
                "best": float(points[best]),
                "tried": float(far),
            }
        ends = [(self.at, excess) if hit == 0 else (points[hit - 1], excesses[hit - 1]), (points[hit], excesses[hit])]
        best = (points[hit], rows[hit])
        for turn in range(REFINED):
            (a, fa), (b, fb) = ends
            if abs(b - a) <= CLOSE * abs(far - self.at):
                break
            inside = a + (b - a) * (fa / (fa - fb) if np.isfinite(fa) and turn % 3 else 0.5)
            inside = min(max(inside, min(a, b) + 0.02 * abs(b - a)), max(a, b) - 0.02 * abs(b - a))
            row = self._try(np.array([inside]), f"{self.part}, step {turn + 1}")[0]
            value = self._excess(row)
            if value <= 0:
                ends[1], best = (inside, value), (inside, row)
            else:
                ends[0] = (inside, value)
        return {"sampled": float(best[0]), "probability": _likely(best[1], self.limit, self.sign), "reason": None}

    def _far(self) -> float | None:
        """Give where the search ends, on the side that helps; None where the input does nothing."""
        if not np.isfinite(self.slope) or self.slope == 0:
            return None
        up = self.slope < 0
        entry = self.ground.sheet.entry(self.key)
        own = next((r for r in self.ground.study.sheet.requirements.values() if r.free == self.key), None)
        if own is not None:
            return own.high if up else own.low
        if self.warm:
            return self.at + (WARM if up else -WARM)
        far = self.at * REACH if up == (self.at > 0) else self.at / REACH
        top = entry.most if entry.most is not None else entry.below
        return min(far, top) if top is not None else far

    def _excess(self, values: np.ndarray) -> float:
        """Give by how much the quantile that has to meet the limit misses it; a case without an answer is at the far end."""
        gaps = np.sort(np.where(np.isfinite(values), self.sign * (values - self.limit), np.inf))
        place = int(np.ceil(self.ground.study.margin.confidence * len(gaps) - 1e-9)) - 1
        return float(gaps[place])

    def _try(self, points: np.ndarray, part: str) -> list[np.ndarray]:
        """Solve the sample at several values of the input, in one round."""
        count = self.ground.study.cases.count
        own = np.asarray(self.ground.changes.get(self.key, np.full(count, self.at)))
        moved = [own + (point - self.at) if self.warm else own * (point / self.at) if self.at else own + point for point in points]
        changes = {key: np.tile(values, len(points)) for key, values in self.ground.changes.items()}
        changes[self.key] = np.concatenate(moved)
        ground, cases = self.ground, count * len(points)
        payload = tasks.Order(ground.sheet, (self.item.address,), part=part).packed()
        carry_out(part, tasks.work, payload, changes, cases, ground.study.batch, ground.store, ground.engine, ground.progress)
        found = np.asarray(ground.store.table("trials", where=("part", part))["value"], dtype=float)
        return list(found.reshape(len(points), count))
