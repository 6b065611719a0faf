"""What spread inputs do to the answer: first order from exact sensitivities, and a sample of solves beside it.

The plant is designed by its requirements and then stays as it is: what they freed is held at the value of the flowsheet as
written, while the inputs move. Each requirement is then a limit that is met with some probability; a margin on an input is
the change of it that makes that probability as high as asked.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.polynomial import hermite_e, legendre
from scipy.special import ndtr, ndtri

from leanloop.status import OK
from leanloop.studies import tasks
from leanloop.studies.campaign import Memory, Progress, carry_out
from leanloop.studies.executors import Engine
from leanloop.studies.spread import Law
from leanloop.studies.store import Store

if TYPE_CHECKING:
    from leanloop.flowsheet.result import Result
    from leanloop.studies.study import Study

QUANTILES = (5, 25, 50, 75, 95)  # per cent
DEGREE = 3  # of the polynomials that share out the variance of the sample
REACH = 3.0  # times: how far a margin is looked for where the requirement names no bounds
WARM = 40.0  # K, the same for temperatures
LOOKS = 9  # points of the first search for a margin
REFINED = 8  # bisections of the bracket, each by the false position where that is better
CLOSE = 1e-5  # of the margin's range: near enough


def explore(study: Study, base: Result, store: Store | Memory, engine: Engine, progress: Progress | None) -> dict[str, Any]:
    """Carry out an uncertainty study.

    Parameters
    ----------
    study : Study
    base : Result
        Of the flowsheet as it is, its requirements held; one case.
    store : Store or Memory
        Takes the sample as ``cases`` and what is tried for margins as ``trials``.
    engine : Engine
    progress : callable or None

    Returns
    -------
    dict
        ``status`` of the base; ``design``, freed inputs by address; by quantity ``base``, ``first_order`` (``mean``,
        ``deviation``, ``shares`` of the variance by input) and ``sampled`` (the same, ``quantiles``, ``rest``: the share that
        no input has alone); by requirement ``limit``, ``meets``, ``first_order`` and ``sampled`` probability, and ``margins``
        by input. Only the status where the base is not solved.
    """
    told: dict[str, Any] = {"status": base.status, "status_text": base.status_text, "quantities": {}, "requirements": {}, "design": {}}
    if base.codes()[0] != OK:
        return told
    design = {item.free: float(base[f"requirements.{name}.free_value"]) for name, item in study.sheet.requirements.items()}
    told["design"] = design
    sheet = study.sheet.rebuilt(requirements=None)
    asked = [item.address for item in study.sheet.requirements.values()]
    record = tuple(dict.fromkeys([*asked, *(item for item in study.record if not item.startswith("requirements."))]))
    count = study.cases.count
    changes = {**study.cases.changes, **{key: np.full(count, value) for key, value in design.items()}}
    order = tasks.Order(sheet, record)
    carry_out("cases", tasks.work, order.packed(), changes, count, study.batch, store, engine, progress)
    cases = store.table("cases")
    centre = sheet.solve({**design, **{key: law.mean for key, law in study.laws.items()}})
    sloped = [item for item in record if item.startswith(("streams.", "units."))]
    inputs = list(dict.fromkeys([*study.laws, *(study.margin.inputs if study.sheet.requirements else ())]))
    slopes = centre.sensitivities(sloped, inputs) if sloped else {}
    good = np.array([word == "converged" for word in cases["status"]])
    basis = _basis(study.laws, study.cases.changes, good)
    for item in record:
        first = _first_order(centre, item, study.laws, slopes) if item in sloped else None
        told["quantities"][item] = {
            "base": _number(centre[item]), "first_order": first, "sampled": _sampled(np.asarray(cases[item], dtype=float), good, basis)
        }  # fmt: skip
    told["failed"] = int((~good).sum())
    cases = {key: np.where(good, values, np.nan) for key, values in cases.items() if key in asked}
    for name, item in study.sheet.requirements.items():
        limit = float(study.sheet.numbers[item.target])
        told["requirements"][name] = _judged(
            study, name, item, limit, told["quantities"][item.address], cases, slopes, design, sheet, changes, store, engine, progress
        )
    return told


def _number(value: Any) -> float:
    return float("nan") if value is None else float(value)


def _first_order(centre: Result, item: str, laws: Mapping[str, Law], slopes: Mapping[Any, Any]) -> dict[str, Any]:
    """Give mean, deviation and shares of the variance of a linear answer."""
    parts = {key: (float(slopes[item, key]) * law.deviation) ** 2 for key, law in laws.items()}
    total = sum(parts.values())
    shares = {key: value / total if total > 0 else float("nan") for key, value in parts.items()}
    return {"mean": _number(centre[item]), "deviation": float(np.sqrt(total)), "shares": shares}


# --- the sample


def _basis(laws: Mapping[str, Law], changes: Mapping[str, np.ndarray], good: np.ndarray) -> dict[str, np.ndarray]:
    """Give, for each input, polynomials of it that are orthogonal under its own law, (m, DEGREE)."""
    out = {}
    for key, law in laws.items():
        values = np.asarray(changes[key])[good]
        if law.shape == "normal":
            out[key] = hermite_e.hermevander((values - law.mean) / law.deviation, DEGREE)[:, 1:]
        elif law.shape == "lognormal":
            width = np.sqrt(np.log1p((law.deviation / law.mean) ** 2))
            out[key] = hermite_e.hermevander((np.log(values / law.mean) + width**2 / 2) / width, DEGREE)[:, 1:]
        else:
            own = np.log(values) if law.log else values
            low, high = (np.log(law.low), np.log(law.high)) if law.log else (law.low, law.high)
            out[key] = legendre.legvander(2 * (own - low) / (high - low) - 1, DEGREE)[:, 1:]
    return out


def _sampled(values: np.ndarray, good: np.ndarray, basis: Mapping[str, np.ndarray]) -> dict[str, Any]:
    """Give mean, deviation, quantiles and shares of the variance of the solved cases.

    The share of an input is the variance of what a polynomial in it alone explains, all inputs fitted together.
    """
    own = values[good]
    finite = np.isfinite(own)
    own = own[finite]
    nothing = dict.fromkeys(basis, float("nan"))
    if len(own) < 2:
        return {"mean": float("nan"), "deviation": float("nan"), "quantiles": {}, "shares": nothing, "rest": float("nan"), "solved": len(own)}
    variance = float(own.var(ddof=1))
    quantiles = {item: float(np.percentile(own, item)) for item in QUANTILES}
    told = {"mean": float(own.mean()), "deviation": float(np.sqrt(variance)), "quantiles": quantiles, "solved": len(own)}
    columns = [block[finite] for block in basis.values()]
    width = 1 + sum(block.shape[1] for block in columns)
    if variance == 0 or len(own) < 4 * width:  # too few to tell one input from another
        return {**told, "shares": nothing, "rest": float("nan")}
    matrix = np.concatenate([np.ones((len(own), 1)), *columns], axis=1)
    found = np.linalg.lstsq(matrix, own / np.sqrt(variance), rcond=None)[0]
    shares, place = {}, 1
    for key, block in zip(basis, columns, strict=True):
        shares[key] = float((block @ found[place : place + block.shape[1]]).var(ddof=1))
        place += block.shape[1]
    return {**told, "shares": shares, "rest": float(max(0.0, 1.0 - sum(shares.values())))}


# --- requirements and margins


def _judged(
    study: Study, name: str, item: Any, limit: float, quantity: Mapping[str, Any], cases: Mapping[str, Any],
    slopes: Mapping[Any, Any], design: Mapping[str, float], sheet: Any, changes: Mapping[str, Any], store: Store | Memory,
    engine: Engine, progress: Progress | None,
) -> dict[str, Any]:  # fmt: skip
    """Tell how likely a requirement is met, and what margins make it as likely as asked."""
    sense = study.margin.meets[name]
    sign = 1.0 if sense == "at_most" else -1.0
    first = quantity["first_order"]
    gap, wide = sign * (limit - first["mean"]), first["deviation"]
    values = np.asarray(cases[item.address], dtype=float)
    told = {
        "quantity": item.address, "limit": limit, "meets": sense,
        "first_order": float(ndtr(gap / wide)) if wide > 0 else float(gap >= 0),
        "sampled": _likely(values, limit, sign), "margins": {},
    }  # fmt: skip
    for key in study.margin.inputs:
        slope = sign * float(slopes[item.address, key])
        at = design.get(key, study.laws[key].mean if key in study.laws else float(study.sheet.numbers[key]))
        # to first order the deviation stays and the mean moves
        needed = ndtri(study.margin.confidence) * wide - gap
        shift = max(0.0, needed) / -slope if slope else (0.0 if needed <= 0 else np.nan)
        margin = {"at": at, "first_order": at + shift if np.isfinite(shift) else float("nan")}
        seek = _Seek(study, name, item, limit, sign, key, at, slope, sheet, changes, store, engine, progress)
        told["margins"][key] = {**margin, **seek.found(values)}
    return told


def _likely(values: np.ndarray, limit: float, sign: float) -> float:
    """Give the share of cases that meet a limit; one without an answer does not."""
    with np.errstate(invalid="ignore"):
        return float(np.mean(sign * (values - limit) <= 1e-9 * abs(limit)))


class _Seek:
    """The search for the margin on one input: the sample solved again with that input moved."""

    def __init__(
        self, study: Study, name: str, item: Any, limit: float, sign: float, key: str, at: float, slope: float, sheet: Any,
        changes: Mapping[str, Any], store: Store | Memory, engine: Engine, progress: Progress | None,
    ) -> None:  # fmt: skip
        self.study, self.item, self.limit, self.sign, self.key, self.at = study, item, limit, sign, key, at
        self.slope, self.changes, self.store, self.engine, self.progress = slope, changes, store, engine, progress
        self.sheet = sheet
        self.part = f"margin of {name} on {key}"
        self.warm = sheet.sorts[key] == "temperature"

    def found(self, now: np.ndarray) -> dict[str, Any]:
        """Give the value of the input that makes the requirement as likely as asked, and what it comes to.

        Parameters
        ----------
        now : (M,) array
            The quantity, as the plant is designed.
        """
        want = self.study.margin.confidence
        excess = self._excess(now)
        if excess <= 0:
            return {"sampled": self.at, "probability": _likely(now, self.limit, self.sign), "reason": None}
        far = self._far()
        if far is None:
            return {"sampled": float("nan"), "probability": _likely(now, self.limit, self.sign), "reason": "it does not matter here"}
        points = np.linspace(self.at, far, LOOKS + 1)[1:]
        rows = self._try(points, f"{self.part}, first search")
        excesses = [self._excess(row) for row in rows]
        hit = next((place for place, value in enumerate(excesses) if value <= 0), None)
        if hit is None:
            best = int(np.argmax([_likely(row, self.limit, self.sign) for row in rows]))
            likely = _likely(rows[best], self.limit, self.sign)
            reason = f"at most {100 * likely:.3g} % up to {points[best]:.6g} (SI)"
            return {"sampled": float("nan"), "probability": likely, "reason": reason}
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
        return {"sampled": float(best[0]), "probability": _likely(best[1], self.limit, self.sign), "reason": None, "asked": want}

    def _far(self) -> float | None:
        """Give where the search ends, on the side that helps; None where the input does nothing."""
        if not np.isfinite(self.slope) or self.slope == 0:
            return None
        up = self.slope < 0
        entry = self.sheet.entry(self.key)
        own = next((r for r in self.study.sheet.requirements.values() if r.free == self.key), None)
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
        place = int(np.ceil(self.study.margin.confidence * len(gaps) - 1e-9)) - 1
        return float(gaps[place])

    def _try(self, points: np.ndarray, part: str) -> list[np.ndarray]:
        """Solve the sample at several values of the input, in one round."""
        count = self.study.cases.count
        own = np.asarray(self.changes.get(self.key, np.full(count, self.at)))
        moved = [own + (point - self.at) if self.warm else own * (point / self.at) if self.at else own + point for point in points]
        changes = {key: np.tile(values, len(points)) for key, values in self.changes.items()}
        changes[self.key] = np.concatenate(moved)
        order = tasks.Order(self.sheet, (self.item.address,), part=part)
        carry_out(part, tasks.work, order.packed(), changes, count * len(points), self.study.batch, self.store, self.engine, self.progress)
        found = np.asarray(self.store.table("trials", where=("part", part))["value"], dtype=float)
        return list(found.reshape(len(points), count))
