"""The axes of a sweep as pictures have them: the input that stands for each, its values, and what moves with it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from leanloop.pictures.panels import listed
from leanloop.pictures.study_columns import constant, label, shown, written

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet
    from leanloop.studies.axes import Axis


@dataclass(frozen=True)
class Scaled:
    """An axis of a sweep.

    Attributes
    ----------
    address, label : str
        Of the input that is drawn, with its unit.
    values : (n,) array
        In the unit, as the study has them; a place from 1 where the inputs are lists.
    log : bool
    note : str
        What moves with it.
    """

    address: str
    label: str
    values: np.ndarray
    log: bool
    note: str


def scaled(sheet: Flowsheet, axis: Axis) -> Scaled:
    """Give an axis as it is drawn: by its first input that is a number and moves.

    Parameters
    ----------
    sheet : Flowsheet
    axis : Axis
    """
    numbers = {key: shown(sheet, key, item) for key, item in axis.values.items() if not isinstance(item, list)}
    chosen = next((key for key, item in numbers.items() if not constant(item[np.isfinite(item)])), None)
    if chosen is None:
        chosen = next(iter(axis.values))
        values, text, log = np.arange(1.0, len(axis) + 1), f"place in the list of {chosen}", False
    else:
        values, text = numbers[chosen], label(sheet, chosen)
        log = axis.log and bool(np.nanmin(values) > 0)
    others = [
        f"{key} from {written(sheet, key, item[0])} to {written(sheet, key, item[-1])}" if key in numbers else key
        for key, item in axis.values.items()
        if key != chosen
    ]
    note = f"moving with {chosen}: {listed(others, 3, 110)}" if others else ""
    return Scaled(chosen, text, values, log, note)


def held(sheet: Flowsheet, axis: Axis, place: int) -> str:
    """Write at what value an axis stays.

    Parameters
    ----------
    sheet : Flowsheet
    axis : Axis
    place : int
        Of the value on the axis.

    Returns
    -------
    str
    """
    texts = [
        f"{key} = {written(sheet, key, item[place])}" if not isinstance(item, list) else f"{key}: list {place + 1}"
        for key, item in axis.values.items()
    ]
    return listed(texts, 2, 100)
