"""How a case ended: one word for programs, one sentence for people."""

from __future__ import annotations

from enum import Enum

import numpy as np


class Status(Enum):
    """Statuses, the mildest first; each value is the sentence a user reads."""

    converged = "Everything asked for was reached."
    out_of_reach = (
        "A requirement cannot be met with its freed input inside the bounds; "
        "ask for what `requirements` reports as the nearest value, or change what stands in the way."
    )
    temperature_cross = (
        "An exchanger is asked for more heat than can pass, or its hot side is the colder one; "
        "take a larger approach, a smaller duty or UA, or change over its sides."
    )
    off_table = (
        "The answer lies outside an equilibrium table and is an extrapolation; "
        "extend the table or move the conditions back inside it."
    )
    pass_limit = (
        "The recycle did not settle within the passes allowed; "
        "try the method newton, more passes, or a start nearer to the answer."
    )
    no_steady_state = (
        "A component enters a loop and cannot leave it, so that it would build up for ever; "
        "give it a way out (a bleed, a cleanup) or stop its ingress."
    )
    dry_stage = (
        "The liquid of a stage dries up: there is no solvent, or all of it would evaporate; "
        "raise the liquid fed or lower the temperature or the gas flow."
    )
    unbalanced = (
        "A component's balance does not close: the numbers are too extreme for the arithmetic; "
        "look for equilibrium ratios or flows that are out of all proportion."
    )
    stages_unsolved = (
        "The stage equations of a column were not solved; "
        "look at its feeds and equilibrium data, which may be extreme or inconsistent."
    )
    unit_failed = "A unit could not calculate its outlets; look at its inlets and inputs."
    not_finite = "An input or a result is not a finite number, or a flow is negative; correct that input."


REASONS = {
    "bound": "the bound stands in the way: widen `between`",
    "pinch": "more of it no longer helps: add stages, or change temperatures, pressures or the other solvent or gas rate",
    "turning_point": "it first helps and then hurts: change another input, such as stripping gas, stages or temperatures",
}

LIST = tuple(Status)
CODE = {status: np.int8(index) for index, status in enumerate(LIST)}
OK = CODE[Status.converged]


def code(status: Status) -> np.int8:
    """Give the number that stands for a status in arrays; a higher one is worse."""
    return CODE[status]


def status_of(number: int) -> Status:
    """Give the status of a code."""
    return LIST[int(number)]


def solved(codes: np.ndarray) -> np.ndarray:
    """Tell for which codes the equations were solved, whether or not all was reached.

    Parameters
    ----------
    codes : (M,) int8

    Returns
    -------
    (M,) bool
    """
    return codes <= CODE[Status.off_table]
