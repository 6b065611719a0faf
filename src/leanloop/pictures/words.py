"""Numbers and texts as pictures write them."""

from __future__ import annotations

import os
import re
import textwrap

GAP = "..."  # stands for what is left out


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


def shortened(text: str, letters: int) -> str:
    """Leave out the middle of a text that is too long; its beginning and its end stay.

    Parameters
    ----------
    text : str
    letters : int
        Most letters that come back, 8 at least.

    Returns
    -------
    str
    """
    letters = max(8, letters)
    if len(text) <= letters:
        return text
    kept = letters - len(GAP)
    return text[: kept // 2] + GAP + text[len(text) - (kept - kept // 2) :]


def told_apart(texts: list[str], letters: int) -> list[str]:
    """Shorten texts so that those that differ still do.

    Parameters
    ----------
    texts : list of str
    letters : int
        Most letters of each.

    Returns
    -------
    list of str
        Where the middle is what differs, the beginning is left out instead; a number tells apart what is left.
    """
    out = [shortened(text, letters) for text in texts]
    for name in {item for item in out if out.count(item) > 1}:
        own = sorted({text for text, item in zip(texts, out, strict=True) if item == name})
        if len(own) == 1:
            continue
        start = max(0, len(os.path.commonprefix(own)) - letters // 4)
        fresh = {text: shortened(GAP + text[start:], letters) for text in own}
        if len(set(fresh.values())) < len(own):
            fresh = {text: f"{shortened(text, letters - 5)} ({place})" for place, text in enumerate(own, 1)}
        out = [fresh.get(text, item) if item == name else item for text, item in zip(texts, out, strict=True)]
    return out


def address_lines(address: str, letters: int, lines: int = 2) -> str:
    """Break an address behind its dots and underscores; the middle of one that is too long is left out.

    Parameters
    ----------
    address : str
    letters : int
        Most letters of a line.
    lines : int
        Most lines.

    Returns
    -------
    str
    """
    for most in range(letters * lines, 7, -1):
        out = _broken(shortened(address, most), letters)
        if len(out) <= lines:
            return "\n".join(out)
    return shortened(address, letters)


def _broken(text: str, letters: int) -> list[str]:
    """Break a text behind dots, underscores, commas and spaces, and elsewhere only where there is none."""
    out = []
    while len(text) > letters:
        place = max(text.rfind(mark, letters // 2, letters) for mark in "._, ") + 1 or letters
        while text[place - 1 : place + 1] == GAP[:2] and place > 1:  # what stands for the middle stays whole
            place -= 1
        out.append(text[:place].rstrip())
        text = text[place:].lstrip()
    return [*out, text]
