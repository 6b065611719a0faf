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

from leanloop.status import OK
from leanloop.studies import tasks
from leanloop.studies.campaign import Memory, Progress, carry_out
from leanloop.studies.executors import Engine
from leanloop.studies.margins import Ground, judged
from leanloop.studies.spread import Law
from leanloop.studies.store import Store

if TYPE_CHECKING:
    from leanloop.flowsheet.result import Result
    from leanloop.studies.study import Study

QUANTILES = (5, 25, 50, 75, 95)  # per cent
DEGREE = 3  # of the polynomials that share out the variance of the sample


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
    told: dict[str, Any] = {
        "status": base.status,
        "status_text": base.status_text,
        "quantities": {},
        "requirements": {},
        "design": {},
    }
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
        told["quantities"][item] = {
            "base": _number(base[item]),
            "first_order": _first_order(centre, item, study.laws, slopes) if item in sloped else None,
            "sampled": _sampled(np.asarray(cases[item], dtype=float), good, basis),
        }
    told["failed"] = int((~good).sum())
    cases = {key: np.where(good, values, np.nan) for key, values in cases.items() if key in asked}
    ground = Ground(study, sheet, design, changes, store, engine, progress)
    for name, item in study.sheet.requirements.items():
        told["requirements"][name] = judged(ground, name, item, told["quantities"][item.address]["first_order"], cases, slopes)
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
        return {
            "mean": float("nan"),
            "deviation": float("nan"),
            "quantiles": {},
            "shares": nothing,
            "rest": float("nan"),
            "solved": len(own),
        }
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
