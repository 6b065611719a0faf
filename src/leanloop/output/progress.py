"""One line on a terminal that tells how far a study is; nothing where nobody looks."""

from __future__ import annotations

import os
import time
from typing import TextIO

EVERY = 0.2  # s


class Progress:
    """Writes, over and over on one line, cases done, failed, and the time left.

    Parameters
    ----------
    name : str
        Of the study.
    stream : TextIO
        Written to only where it is a terminal.
    """

    def __init__(self, name: str, stream: TextIO) -> None:
        self.name, self.stream = name, stream
        self.shown = stream.isatty()
        self.last, self.width = -EVERY, 0
        self.first: tuple[float, int] | None = None

    def __call__(self, part: str, done: int, count: int, failed: int, left: float | None) -> None:
        """Take in how far a round is.

        Parameters
        ----------
        part : str
            Name of the round.
        done, count, failed : int
            Cases.
        left : float or None
            Seconds.
        """
        now = time.monotonic()
        if not self.shown or (done < count and now - self.last < EVERY):
            return
        self.last = now
        words = [f"{self.name}: {done} of {count} cases, {100 * done // max(count, 1)} %"]
        if part != "cases":
            words.append(part)
        if failed:
            words.append(f"{failed} failed")
        if left is not None and done < count:
            words.append(f"{span(left)} left")
        line = ", ".join(words)
        room = self._room()
        if len(line) > room:  # the numbers matter more than a long name
            line = line[len(line) - room :]
        self.stream.write("\r" + line.ljust(self.width))
        self.stream.flush()
        self.width = len(line)

    def counted(self, done: int, count: int) -> None:
        """Take in how many cases are done, and tell the time left from the pace since the first word.

        Parameters
        ----------
        done, count : int
        """
        now = time.monotonic()
        if self.first is None:
            self.first = (now, done)
        begin, before = self.first
        left = (now - begin) / (done - before) * (count - done) if done > before else None
        self("cases", done, count, 0, left)

    def _room(self) -> int:
        try:
            columns = os.get_terminal_size(self.stream.fileno()).columns
        except (OSError, ValueError):
            columns = 0
        return max(20, (columns or 80) - 1)

    def end(self) -> None:
        """Leave the line."""
        if self.width:
            self.stream.write("\n")
            self.stream.flush()
            self.width = 0


def span(seconds: float) -> str:
    """Write a time as people say it.

    Parameters
    ----------
    seconds : float

    Returns
    -------
    str
    """
    if seconds < 90:
        return f"{seconds:.0f} s"
    minutes = round(seconds / 60)
    return f"{minutes} min" if minutes < 90 else f"{minutes // 60} h {minutes % 60:02d} min"
