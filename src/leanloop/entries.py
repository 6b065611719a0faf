"""What may be written at an object: entries declared as data, read with every fault collected."""

from __future__ import annotations

import difflib
import json
import math
import re
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field
from datetime import date, time
from numbers import Real
from typing import Any

from leanloop.errors import Fault, nearest
from leanloop.quantities import DIMENSIONS, dimension_name, example, parse

BARE = re.compile(r"[\w-]+")
NAMES = "use up to 80 letters, digits, _ and -"
WORDS = ("text", "inlet", "outlet", "component", "equilibrium", "choice")


@dataclass(frozen=True)
class Entry:
    """One entry of an object.

    Parameters
    ----------
    name : str
    sort : str or tuple of str
        A name of `quantities.DIMENSIONS` (several: any of them), ``"integer"``, ``"flag"``,
        ``"table"`` (nested entries), ``"tables"`` (a list of such), or one of `WORDS`.
    required : bool
    many : bool
        Whether a list is taken (for ports: a name or a list).
    by : str
        ``"component"`` or ``"outlet"`` for a table of values by such names, else empty.
    either : bool
        Whether one number, or with `many` a list, may stand in the place of such a table.
    choices : tuple of str
        Allowed words, for sort ``"choice"``.
    nested : tuple of Entry
        For sorts ``"table"`` and ``"tables"``.
    least, most : float or None
        Limits in SI units, themselves allowed.
    above, below : float or None
        Limits in SI units, themselves not allowed.
    cases : bool
        Whether the number may differ from case to case inside one batch; if not, unequal cases
        are solved in groups.
    doc : str
        One line.
    """

    name: str
    sort: str | tuple[str, ...] = "number"
    required: bool = False
    many: bool = False
    by: str = ""
    either: bool = False
    choices: tuple[str, ...] = ()
    nested: tuple[Entry, ...] = ()
    least: float | None = None
    most: float | None = None
    above: float | None = None
    below: float | None = None
    cases: bool = True
    doc: str = ""

    @property
    def numeric(self) -> bool:
        """Whether the entry holds numbers."""
        return self.sort not in (*WORDS, "flag", "table", "tables")


@dataclass
class Values:
    """What was read of one object.

    Parameters
    ----------
    words : dict of str to Any
        Names, texts and flags by entry.
    numbers : dict of str to float or list of float
        SI numbers by flat name (``"hold.oil"``, ``"vapour_pressure.A"``).
    sorts : dict of str to str
        The dimension of each number.
    entries : dict of str to Entry
        The entry that each number belongs to.
    """

    words: dict[str, Any] = field(default_factory=dict)
    numbers: dict[str, Any] = field(default_factory=dict)
    sorts: dict[str, str] = field(default_factory=dict)
    entries: dict[str, Entry] = field(default_factory=dict)

    def group(self, name: str) -> dict[str, Any]:
        """Give the numbers of a table entry, by the rest of their flat name."""
        head = name + "."
        return {key[len(head) :]: value for key, value in self.numbers.items() if key.startswith(head)}


class Context:
    """Who reads: the faults so far, the names that may be referred to, and whether plain SI numbers are allowed.

    Parameters
    ----------
    faults : list of Fault
        Faults are appended to it.
    plain_si : bool
        Whether a plain number may stand for a quantity with a dimension (Python only).
    names : mapping of str to collection of str
        Known names by sort: ``"component"``, ``"equilibrium"``, ``"outlet"``. Under ``"doubtful"``, components
        whose own entry is faulty: nothing further is said of them.
    """

    def __init__(
        self, faults: list[Fault] | None = None, plain_si: bool = False, names: Mapping[str, Iterable[str]] | None = None
    ) -> None:
        self.faults = [] if faults is None else faults
        self.plain_si = plain_si
        self.names = {key: list(value) for key, value in (names or {}).items()}

    def fault(self, address: str, problem: str, remedy: str) -> None:
        """Note one fault."""
        self.faults.append(Fault(one_line(address), one_line(problem), one_line(remedy)))

    def knowing(self, **names: Iterable[str]) -> Context:
        """Give a context with further known names and the same list of faults."""
        return Context(self.faults, self.plain_si, {**self.names, **names})


def read_number(raw: Any, entry: Entry, address: str, context: Context) -> tuple[float, str] | None:
    """Read one number of an entry in SI units.

    Parameters
    ----------
    raw : Any
        A string with a unit, or a plain number where that is allowed.
    entry : Entry
    address : str
    context : Context

    Returns
    -------
    (float, str) or None
        The number and its dimension; None after a fault.
    """
    if entry.sort == "integer":
        return _read_integer(raw, entry, address, context)
    sorts = (entry.sort,) if isinstance(entry.sort, str) else entry.sort
    wanted = " or ".join(f"{name} such as {example(name)}" for name in sorts)
    if isinstance(raw, bool) or not isinstance(raw, (Real, str)):
        context.fault(address, f"{_shown(raw)} is no {sorts[0]}", f"write {wanted}")
        return None
    if isinstance(raw, str):
        try:
            quantity = parse(raw, difference="temperature" not in sorts)
        except ValueError as error:
            context.fault(address, str(error), f"write {wanted}")
            return None
        fitting = [name for name in sorts if DIMENSIONS[name][0] == quantity.dimension]
        if not fitting:
            context.fault(address, f"'{raw}' is {_article(dimension_name(quantity.dimension))}", f"write {wanted}")
            return None
        value, sort = quantity.value, fitting[0]
    elif "number" in sorts or context.plain_si:
        value, sort = _float(raw), "number" if "number" in sorts else sorts[0]
    else:
        context.fault(address, f"{_shown(raw)} has no unit", f"write {wanted}")
        return None
    return (value, sort) if _inside(value, raw, entry, sort, address, context) else None


def _read_integer(raw: Any, entry: Entry, address: str, context: Context) -> tuple[float, str] | None:
    if isinstance(raw, bool) or not isinstance(raw, Real) or not math.isfinite(_float(raw)) or raw != int(raw):
        context.fault(address, f"{_shown(raw)} is no whole number", "write a whole number such as 8")
        return None
    return (int(raw), "integer") if _inside(int(raw), raw, entry, "integer", address, context) else None


def _float(raw: Real) -> float:
    try:
        return float(raw)
    except OverflowError:  # a whole number of hundreds of digits
        return math.inf


def _inside(value: float, raw: Any, entry: Entry, sort: str, address: str, context: Context) -> bool:
    if not math.isfinite(value):
        context.fault(address, f"{_shown(raw)} is not finite", "write a finite value")
        return False
    if sort == "temperature" and value <= 0:
        context.fault(address, f"{_shown(raw)} is not above absolute zero", "write a temperature above 0 K")
        return False
    low = entry.least is not None and value < entry.least or entry.above is not None and value <= entry.above
    high = entry.most is not None and value > entry.most or entry.below is not None and value >= entry.below
    if low or high:
        parts = []
        if entry.least is not None:
            parts.append(f"at least {entry.least:g}")
        if entry.above is not None:
            parts.append(f"above {entry.above:g}")
        if entry.most is not None:
            parts.append(f"at most {entry.most:g}")
        if entry.below is not None:
            parts.append(f"below {entry.below:g}")
        units = "" if sort in ("number", "integer") else " (SI)"
        context.fault(address, f"{_shown(raw)} is out of range", f"write a value {' and '.join(parts)}{units}")
        return False
    return True


def read_values(entries: Iterable[Entry], table: Any, address: str, context: Context) -> Values:
    """Read all entries of one object and note every fault.

    Parameters
    ----------
    entries : iterable of Entry
    table : mapping
        As written.
    address : str
        Where the object stands.
    context : Context

    Returns
    -------
    Values
        What could be read.
    """
    values = Values()
    known = {entry.name: entry for entry in entries}
    if not isinstance(table, Mapping):
        context.fault(address, f"{_shown(table)} is no table", f"write entries: {', '.join(known)}")
        return values
    meant = set()
    for key in table:
        if key not in known:
            context.fault(f"{address}.{shown_key(key)}", f"unknown entry {shown_name(key)}", nearest(str(key), known))
            meant.add(near(key, known))
    for entry in known.values():
        where = f"{address}.{entry.name}"
        if entry.name not in table:
            if entry.required and entry.name not in meant:  # a misspelt entry is one fault, not two
                context.fault(where, "entry is missing", f"add {entry.name}{_hint(entry)}")
            continue
        raw = table[entry.name]
        if entry.by and not (entry.either and not isinstance(raw, Mapping)):
            _read_named(raw, entry, where, context, values)
        elif entry.sort == "tables":
            _read_tables(raw, entry, where, context, values)
        elif entry.sort == "table":
            inner = read_values(entry.nested, raw, where, context)
            values.words[entry.name] = inner.words
            _adopt(values, inner, entry.name)
        elif entry.numeric and entry.many and not (entry.either and not isinstance(raw, (list, tuple))):
            _read_list(raw, entry, where, context, values)
        elif entry.numeric:
            number = read_number(raw, entry, where, context)
            if number is not None:
                _store(values, entry.name, number[0], number[1], entry)
        else:
            word = _read_word(raw, entry, where, context)
            if word is not None:
                values.words[entry.name] = word
    return values


def _store(values: Values, name: str, number: Any, sort: str, entry: Entry) -> None:
    values.numbers[name], values.sorts[name], values.entries[name] = number, sort, entry


def _adopt(values: Values, inner: Values, head: str) -> None:
    for key, number in inner.numbers.items():
        _store(values, f"{head}.{key}", number, inner.sorts[key], inner.entries[key])


def _read_tables(raw: Any, entry: Entry, address: str, context: Context, values: Values) -> None:
    """Read a list of tables; numbers get the place in the list into their name, ``side_draws.0.flow``."""
    if not isinstance(raw, (list, tuple)):
        example_ = ", ".join(f"{item.name} = ..." for item in entry.nested if item.required)
        context.fault(address, f"{_shown(raw)} is no list of tables", f"write [{{ {example_} }}]")
        return
    words = []
    for place, item in enumerate(raw):
        inner = read_values(entry.nested, item, f"{address}[{place}]", context)
        words.append(inner.words)
        _adopt(values, inner, f"{entry.name}.{place}")
    values.words[entry.name] = tuple(words)


def _read_named(raw: Any, entry: Entry, address: str, context: Context, values: Values) -> None:
    if not isinstance(raw, Mapping):
        context.fault(address, f"{_shown(raw)} is no table", f"write a value by {entry.by}, {{ name = value }}")
        return
    known = context.names.get(entry.by)
    for key, item in raw.items():
        where = f"{address}.{shown_key(key)}"
        if known and key not in known:  # where none is known, that is a fault already
            context.fault(where, f"unknown {entry.by} {shown_name(key)}", nearest(str(key), filter(is_name, known)))
            continue
        number = read_number(item, entry, where, context)
        if number is not None:
            _store(values, f"{entry.name}.{key}", number[0], number[1], entry)


def _read_list(raw: Any, entry: Entry, address: str, context: Context, values: Values) -> None:
    raw = raw.tolist() if hasattr(raw, "tolist") else raw  # an array, from Python
    if not isinstance(raw, (list, tuple)) or not raw:
        context.fault(address, f"{_shown(raw)} is no list of numbers", "write a list such as [1.0, 2.0]")
        return
    numbers = [read_number(item, entry, f"{address}[{index}]", context) for index, item in enumerate(raw)]
    if None in numbers:
        return
    odd = next((index for index, number in enumerate(numbers) if number[1] != numbers[0][1]), None)
    if odd is not None:
        problem = f"{_shown(raw[odd])} is {_article(numbers[odd][1])} and the first value {_article(numbers[0][1])}"
        context.fault(f"{address}[{odd}]", problem, "write values of one kind")
    else:
        _store(values, entry.name, [number[0] for number in numbers], numbers[0][1], entry)


def _read_word(raw: Any, entry: Entry, address: str, context: Context) -> Any:
    if entry.sort == "flag":
        if not isinstance(raw, bool):
            context.fault(address, f"{_shown(raw)} is neither true nor false", "write true or false")
            return None
        return raw
    many = entry.many and isinstance(raw, (list, tuple))
    items = list(raw) if many else [raw]
    good = []
    known = entry.choices or context.names.get(entry.sort if isinstance(entry.sort, str) else "")
    what = entry.sort if entry.sort == "component" else entry.name
    if entry.sort == "equilibrium" and not known and known is not None and not context.names.get("broken equilibrium"):
        context.fault(address, "there is no equilibrium table", "add [equilibrium.NAME] with a model for each component")
        return None
    for index, item in enumerate(items):
        where = f"{address}[{index}]" if many else address
        if not isinstance(item, str) or not item:
            several = " or a list of them" if entry.many else ""
            context.fault(where, f"{_shown(item)} is no name", f"write a name in quotes{several}")
        elif entry.sort in ("inlet", "outlet") and not is_name(item):
            context.fault(where, f"{_shown(item)} is no name of a stream", NAMES)
        elif known and entry.sort != "text" and item not in known:
            context.fault(where, f"unknown {what} {shown_name(item)}", nearest(item, known))
        else:
            good.append(item)
    if len(good) < len(items) or not good:
        if not items:
            context.fault(address, "the list is empty", "write at least one name")
        return None
    return tuple(good) if entry.many else good[0]


def _hint(entry: Entry) -> str:
    if entry.by:
        return f" = {{ {entry.by} = ... }}"
    if entry.sort == "integer":
        return " = 8"
    if entry.numeric:
        first = entry.sort if isinstance(entry.sort, str) else entry.sort[0]
        return f" = [{example(first)}, ...]" if entry.many else f" = {example(first)}"
    if entry.choices:
        return f", one of {', '.join(entry.choices)}"
    if entry.sort in ("inlet", "outlet"):
        return ", the name of a stream"
    return ""


def is_name(text: Any) -> bool:
    """Tell whether a text can stand in an address: letters, digits, _ and - alone, and not too many."""
    return isinstance(text, str) and 0 < len(text) <= 80 and all(letter.isalnum() or letter in "_-" for letter in text)


def near(name: Any, known: Iterable[str]) -> str | None:
    """Give the known name that a misspelt one is taken for, None where no name is near."""
    found = difflib.get_close_matches(str(name), list(known), n=1, cutoff=0.6)
    return found[0] if found else None


def shown_key(key: Any) -> str:
    """Give a key as an address shows it: in quotes, on one line, where it is no plain name."""
    text = key if isinstance(key, str) else str(key)
    if BARE.fullmatch(text):
        return text if len(text) <= 80 else text[:77] + "..."
    return json.dumps(_cut(text), ensure_ascii=False)


def shown_name(name: Any) -> str:
    """Give a name in single quotes, or as Python writes it where it holds anything unprintable."""
    text = name if isinstance(name, str) else str(name)
    return f"'{text}'" if text.isprintable() and len(text) <= 80 else repr(_cut(text))


def one_line(text: str) -> str:
    """Give a text with escapes for everything that is not printable, so that it stays on one line."""
    return text if text.isprintable() else "".join(
        letter if letter.isprintable() else repr(letter)[1:-1] for letter in text
    )


def _cut(text: str) -> str:
    return text if len(text) <= 80 else text[:77] + "..."


def _shown(raw: Any) -> str:
    try:
        text = raw.isoformat() if isinstance(raw, (date, time)) else repr(raw)
    except (ValueError, RecursionError):  # thousands of digits, or a table thousands deep
        return "this value"
    return text if len(text) <= 40 else text[:37] + "..."


def _article(words: str) -> str:
    return words if words.startswith("a ") else f"{'an' if words[0] in 'aeiou' else 'a'} {words}"


Check = Callable[[Values, str, Context], None]
