"""Numbers and texts as pictures write them."""

from __future__ import annotations

import re
import textwrap


def short(value: float, digits: int = 3) -> str:
    """Write a number shortly, such as 4e-5.

    Parameters
    ----------
    value : float
    digits : int
        Significant ones.

    Returns
    -------
    str
    """
    return re.sub(r"e([+-])0", r"e\1", f"{value:.{digits}g}").replace("e+", "e")


def wrapped(text: str, width_mm: float, letter_mm: float = 1.85) -> str:
    """Break a text into lines that fit a width.

    Parameters
    ----------
    text : str
        Line breaks in it are kept.
    width_mm : float
    letter_mm : float
        Width of a letter on the average; the default is that of axis labels.

    Returns
    -------
    str
    """
    letters = max(8, int(width_mm / letter_mm))
    return "\n".join("\n".join(textwrap.wrap(line, letters)) for line in text.splitlines())


def literal(text: str) -> str:
    """Give a text as matplotlib has to get it to show it as it is, on the lines it has.

    Parameters
    ----------
    text : str

    Returns
    -------
    str
    """
    shown = "".join(letter if letter.isprintable() or letter == "\n" else " " for letter in text)
    return shown.replace("$", r"\$")
