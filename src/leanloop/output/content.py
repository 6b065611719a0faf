"""What a report says, before it is set as text or as a page.

A report is a list of `Section`; each has parts, which are a `Sentence`, a `Listing` or a `Table`. `output.text.render`
and `output.html.render` set the same list in their own way. Nothing here is escaped, indented or aligned.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

PER_HOUR = 3.6  # mol/s to kmol/h


@dataclass(frozen=True)
class Sentence:
    """One line of words.

    Attributes
    ----------
    text : str
    level : int
        Steps of indentation in the text; a page has none.
    kind : str
        ``"plain"``; ``"status"`` or ``"failure"`` for the word on the whole, which a page sets apart.
    """

    text: str
    level: int = 1
    kind: str = "plain"


@dataclass(frozen=True)
class Listing:
    """Sentences of equal rank.

    Attributes
    ----------
    items : sequence of str
    level : int
        Steps of indentation in the text.
    """

    items: Sequence[str]
    level: int = 1


@dataclass(frozen=True)
class Table:
    """Rows under a head; the first column names the row.

    Attributes
    ----------
    head : sequence of str
        One title for each column.
    rows : sequence of sequences of str
        As long as the head, figures already written (`number`).
    caption : str
        What the table shows, on a page. The text has none: there the head says it.
    level : int
        Steps of indentation in the text.
    instead : sequence of Sentence
        How the text says the same, for a table that would be too wide or too short for it.
    """

    head: Sequence[str]
    rows: Sequence[Sequence[str]]
    caption: str = ""
    level: int = 1
    instead: Sequence[Sentence] = ()


Part = Sentence | Listing | Table


@dataclass(frozen=True)
class Section:
    """Parts under one title.

    Attributes
    ----------
    title : str
        Empty for what stands at the head of a report: a page lists the others among its contents.
    parts : sequence of Sentence, Listing or Table
    detail : str
        Goes on from the title: after a colon in the text, below it on a page.
    place : str
        Address of what the section is about, such as ``"units.wash"``; pictures of it join it on a page.
    """

    title: str
    parts: Sequence[Part]
    detail: str = ""
    place: str = ""


def number(value: Any, digits: int = 5) -> str:
    """Write a number with some significant digits, a dash for what is not defined.

    Parameters
    ----------
    value : float or None
    digits : int

    Returns
    -------
    str
    """
    if value is None or not math.isfinite(float(value)):
        return "-"
    value = float(value)
    if value == 0:
        return "0"
    if 1e-3 <= abs(value) < 1e6:
        places = max(0, digits - 1 - math.floor(math.log10(abs(value))))
        return f"{value:.{places}f}"
    return f"{value:.{digits - 1}e}"


def hourly(value: float | None) -> float | None:
    """Turn mol/s into kmol/h.

    Parameters
    ----------
    value : float or None
        mol/s.

    Returns
    -------
    float or None
        kmol/h; None for None.
    """
    return None if value is None else value * PER_HOUR


def celsius(value: float | None) -> float | None:
    """Turn K into degC.

    Parameters
    ----------
    value : float or None
        K.

    Returns
    -------
    float or None
        degC; None for None.
    """
    return None if value is None else value - 273.15


def printable(text: str) -> str:
    """Give a text without control characters, on one line.

    Parameters
    ----------
    text : str

    Returns
    -------
    str
    """
    return " ".join("".join(letter if letter.isprintable() else " " for letter in text).split())
