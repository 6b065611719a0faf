"""Two thousand spoilt files: each is read, or refused in whole lines; what is read is solved or has a status.

Spoilt at random from a fixed seed, so that a failure comes again: by keys and sections dropped, doubled, renamed and
moved, by values of the wrong type, size, unit or script, and by noise in the bytes.
"""

import copy
import math
import random
import re
import signal
import tomllib
from contextlib import contextmanager

import numpy as np
import pytest
import scenes

from leanloop.errors import InputError
from leanloop.status import Status
from leanloop.textfile.reader import change, load, read

FILES, PARTS = 2000, 8
SECONDS = 20  # for one file; a right one takes some milliseconds
LINE = re.compile(r"(?P<source>\S+\.toml): (?P<address>.+?): (?P<problem>.+?); (?P<remedy>.+)")

LOOP = """
[feeds.vent]
phase = "gas"
temperature = "26 degC"
pressure = "1.07 bar"
flow = "10 mol/s"
fractions = { air = "rest", tol = "2 %" }
[feeds.steam]
phase = "gas"
temperature = "152 degC"
pressure = "1.01 bar"
flows = { steam = "1.0 mol/s" }
[units.wash]
kind = "absorber"
gas_in = "vent"
liquid_in = "cool"
gas_out = "clean"
liquid_out = "rich"
stages = 3
equilibrium = "cold"
[units.heat]
kind = "heater"
takes = "rich"
gives = "hot"
temperature = "150 degC"
[units.strip]
kind = "stripper"
liquid_in = "hot"
gas_in = "steam"
gas_out = "over"
liquid_out = "lean"
stages = 2
equilibrium = "warm"
[units.part]
kind = "splitter"
takes = "lean"
gives = ["bleed", "kept"]
shares = { bleed = 0.01 }
[units.top]
kind = "makeup"
takes = "kept"
gives = "full"
hold = { oil = "1.60 mol/s" }
[units.trim]
kind = "cooler"
takes = "full"
gives = "cool"
temperature = "26 degC"
[components]
air = { molar_mass = "28.96 g/mol", stays_in = "gas" }
tol = { molar_mass = "92.14 g/mol" }
oil = { molar_mass = "250 g/mol", stays_in = "liquid" }
steam = { molar_mass = "18.02 g/mol", stays_in = "gas" }
[equilibrium.cold]
tol = { model = "table", x = [0, 0.1, 0.9], y = [0, 0.01, 0.09] }
[equilibrium.warm.tol]
model = "raoult"
activity = { a = 0.1, b = "20 K" }
[equilibrium.warm.tol.vapour_pressure]
form = "antoine"
A = 6.95
B = 1345.0
C = 219.5
pressure = "mmHg"
temperature = "degC"
[loop]
method = "newton"
tolerance = 1e-9
passes = 30
tears = ["cool"]
[basis]
gas = ["air", "steam"]
[groups]
gone = ["tol", "air"]
"""
REQUIREMENT = """
[requirements.outlet]
quantity = "streams.clean.fraction.tol"
at_most = 3e-3
free = "units.top.hold.oil"
between = ["0.9 mol/s", "3 mol/s"]
"""
OPEN = """
title = "One column, one mixer"
[feeds.sour]
phase = "gas"
temperature = "20 degC"
pressure = "2 bar"
flow = "100 Nm3/h"
fractions = { air = "rest", a = "900 ppm", b = "50 mg/Nm3" }
[feeds.wet]
phase = "gas"
temperature = "30 degC"
pressure = "2 bar"
flow = "0.5 kg/min"
saturated_with = "water"
mass_fractions = { air = 1.0 }
[feeds.lean]
phase = "liquid"
temperature = "68 degF"
pressure = "30 psi"
flow = "3 lbmol/h"
ratios = { oil = "rest", a = 0.001 }
[units.join]
kind = "mixer"
takes = ["sour", "wet"]
gives = "mixed"
[units.wash]
kind = "absorber"
gas_in = "mixed"
liquid_in = "lean"
gas_out = "clean"
liquid_out = "rich"
stages = 4
pressure = "1.9 bar"
equilibrium = "cold"
[components]
air = { molar_mass = "28.96 g/mol", stays_in = "gas" }
water = { molar_mass = "18.02 g/mol", stays_in = "gas" }
oil = { molar_mass = "250 g/mol", stays_in = "liquid" }
a = { molar_mass = "58 g/mol" }
b = { molar_mass = "44 g/mol" }
[equilibrium.cold]
a = { model = "henry", constant = "0.4 bar", slope = "3000 K", at = "25 degC" }
b = { model = "polynomial", K = [2.0, 0.01], temperature = "degC", pressure = "1 bar" }
"""
BASES = (LOOP, LOOP, OPEN, LOOP.replace('"newton"', '"substitution"').replace("passes = 30", "passes = 4"), LOOP + REQUIREMENT)

VALUES = (
    0, 1, -1, 7, 1e-300, 1e300, 5e-324, 1.7976931348623157e308, math.inf, -math.inf, math.nan, -0.0, 0.5, 10**30, 2**63,
    True, False, "", " ", "rest", "gas", "liquid", "air", "oil", "tol", "a", "rich", "vent", "cool", "cold", "warm",
    "newton", "wegstein", "absorber", "1 mol/s", "0 mol/s", "-1 mol/s", "1e300 mol/s", "1e-300 mol/s", "1e999 kg",
    "0 K", "-300 degC", "26 degX", "1e8 degC", "0 bar", "1e-30 bar", "1e30 bar", "3 m3/h", "10 %", "150 %", "3 mg/Nm3",
    "1 kg/s", "1 t/d", "5", "1,5 bar", "1 bar/", "(1 bar", "1 ((((((((((bar", "\u00e4\u00f6\u00fc", "\u6c34",
    "1 \u00b0C", "26\u00a0degC", "\u0661\u0662 bar", "\u202e26 degC", "x" * 3000, "1 " + "m " * 3000,
    "1" + " " * 20000 + "x", "9" * 400 + " bar", "a.b.c", "streams.clean.fraction.tol", "units.top.hold.oil", "\x7f",
    "a\tb", "\\", '"', "'", "nan", "inf", "1e5", [], [0], [1, 2], [0, 0.5, 1], ["a"], ["rich", "vent"], [[1]], [None],
    {}, {"a": 1}, {"air": "rest"}, {"model": "constant", "K": 0.3}, {"stays_in": "gas"}, {"tol": 0.5, "air": 0.5},
    {"oil": "1 mol/s"}, {"": ""}, "@date", "@time", "@huge", "@deep",
)  # fmt: skip
NAMES = (
    "name", "self", "kind", "raw", "", " ", "a.b", "\u00e9t\u00e9", "x\ny", "a: b; c", "takes", "gives", "stages",
    "flow", "flows", "fractions", "model", "K", "stays_in", "equals", "at_least", "between", "free", "oil", "tol",
    "rest", "vent", "temperature", "pressure", "efficiency", "units", "feeds", "__class__", "_", "-", "0", "n" * 500,
)  # fmt: skip


def toml(value):
    """A value as TOML; a text that starts with @ stands for what Python's own values cannot say."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, dict):
        return "{" + ", ".join(f"{quoted(key)} = {toml(item)}" for key, item in value.items()) + "}"
    if isinstance(value, list):
        return "[" + ", ".join(toml(item) for item in value if item is not None) + "]"
    special = {"@date": "1979-05-27", "@time": "07:32:00.999999", "@huge": "0x" + "f" * 4000, "@deep": "[" * 40 + "]" * 40}
    if isinstance(value, str):
        return special.get(value) or quoted(value)
    return repr(value)


def quoted(text):
    escaped = "".join(f"\\u{ord(c):04x}" if ord(c) < 32 or c == "\x7f" else "\\" + c if c in '"\\' else c for c in text)
    return f'"{escaped}"'


def written(data):
    """A file of it: a table of tables gets headers, all else stands in one line."""
    lines = [f"{quoted(key)} = {toml(item)}" for key, item in data.items() if not isinstance(item, dict)]
    for section, table in data.items():
        if isinstance(table, dict):
            lines.append(f"[{quoted(section)}]")
            lines += [f"{quoted(key)} = {toml(item)}" for key, item in table.items()]
    return "\n".join(lines) + "\n"


def places(table, path=()):
    """Every key of a nested table, and every place of its lists, as a path."""
    found = []
    items = table.items() if isinstance(table, dict) else enumerate(table)
    for key, item in items:
        found.append((*path, key))
        if isinstance(item, (dict, list)):
            found += places(item, (*path, key))
    return found


def holder(data, path):
    for key in path[:-1]:
        data = data[key]
    return data


def spoil(data, rng):
    """Change one thing in the structure or the values."""
    path = rng.choice(places(data))
    table, key = holder(data, path), path[-1]
    sort = rng.choice(("drop", "rename", "move", "copy", "value", "value", "value", "factor", "swap", "wrap", "letter"))
    if sort == "drop":
        del table[key]
    elif sort in ("rename", "move", "copy"):
        item = copy.deepcopy(table[key])
        if sort == "move" or sort == "rename":
            del table[key]
        where = table
        if sort != "rename":
            paths = [other for other in [(), *places(data)] if isinstance(holder(data, (*other, None)), dict)]
            where = holder(data, (*rng.choice(paths), None))
        if isinstance(where, dict):
            where[rng.choice(NAMES) if rng.random() < 0.7 or sort == "rename" else str(key)] = item
    elif sort == "value":
        table[key] = copy.deepcopy(rng.choice(VALUES))
    elif sort == "factor":
        table[key] = scaled(table[key], rng.choice((-1, 0, 1e-12, 1e-3, 0.1, 0.9, 1.1, 3, 30, 1e6, 1e15)))
    elif sort == "swap":
        other = rng.choice(places(data))
        if other[: len(path)] != path and path[: len(other)] != other:
            there = holder(data, other)
            table[key], there[other[-1]] = there[other[-1]], table[key]
    elif sort == "wrap":
        table[key] = rng.choice(([table[key]], {"x": table[key]}, {str(key): table[key]}))
    elif isinstance(table[key], str) and table[key]:
        text, place = table[key], rng.randrange(len(table[key]))
        table[key] = text[:place] + rng.choice(("", "x", " ", "\u00df", "0", text[place] * 2)) + text[place + 1 :]


def shake(data, rng):
    """Change a number by a factor, take another method or table, or put the sections in another order."""
    numbers = [path for path in places(data) if scaled(holder(data, path)[path[-1]], 2) != holder(data, path)[path[-1]]]
    sort = rng.choice(("number",) * 6 + ("method", "model", "order"))
    if sort == "number":
        path = rng.choice(numbers)
        table = holder(data, path)
        table[path[-1]] = scaled(
            table[path[-1]], rng.choice((0, 1e-30, 1e-9, 1e-3, 0.1, 0.5, 0.9, 1.1, 2, 5, 30, 1e3, 1e9, 1e30))
        )
    elif sort == "method" and "loop" in data:
        methods = ("newton", "substitution", "wegstein", "anderson", "broyden", "dominant_eigenvalue")
        data["loop"] = {"method": rng.choice(methods), "passes": rng.choice((1, 2, 5, 30))}
    elif sort == "model":
        table = rng.choice(list(data["equilibrium"].values()))
        basis = rng.choice(("fraction", "ratio"))
        table[rng.choice(list(table))] = {
            "model": "constant",
            "K": rng.choice((0, 1e-12, 0.01, 0.3, 1, 3, 1e12)),
            "basis": basis,
        }
    elif sort == "order":
        for table in (data, *(item for item in data.values() if isinstance(item, dict))):
            items = list(table.items())
            rng.shuffle(items)
            table.clear()
            table.update(items)


def scaled(value, factor):
    if isinstance(value, (int, float)) and not isinstance(value, bool):
        return value * factor
    match = re.fullmatch(r"([-+0-9.eE]+)( .*)", value) if isinstance(value, str) else None
    try:
        return f"{float(match[1]) * factor!r}{match[2]}" if match else value
    except ValueError:
        return value


def noisy(text, rng):
    """Spoil the bytes of a file."""
    raw = bytearray(text, "utf-8")
    for _ in range(rng.choice((1, 1, 2, 5, 30))):
        place = rng.randrange(len(raw))
        sort = rng.choice(("set", "ascii", "drop", "insert", "cut", "double", "line"))
        if sort == "set":
            raw[place] = rng.randrange(256)
        elif sort == "ascii":
            raw[place] = rng.choice(b" \t\n\"'=[]{}.,#-+0123456789eabz")
        elif sort == "drop":
            del raw[place : place + rng.choice((1, 1, 10))]
        elif sort == "insert":
            raw[place:place] = rng.choice(
                (b"\x00", b"\xff", b"\xef\xbb\xbf", b"\r", b"\xe2\x80\xa8", b"[", b'"""', b"'''", b"= ", b"\\u")
            )
        elif sort == "cut" and rng.random() < 0.2:
            del raw[place:]
        elif sort == "double":
            raw[place:place] = raw[place : place + rng.choice((1, 20, 200))]
        elif sort == "line":
            begin = raw.rfind(b"\n", 0, place) + 1
            end = raw.find(b"\n", place) + 1 or len(raw)
            line = raw[begin:end]
            del raw[begin:end]
            raw[rng.randrange(len(raw) + 1) if raw else 0 : 0] = line
        if not raw:
            break
    encoding = rng.choice(("utf-8",) * 12 + ("utf-16", "latin-1"))
    return bytes(raw) if encoding == "utf-8" else bytes(raw).decode("utf-8", "replace").encode(encoding, "replace")


def mutated(number):
    rng = random.Random(f"spoilt {number}")
    text = rng.choice(BASES)
    if rng.random() < 0.25:
        return noisy(text, rng)
    data = tomllib.loads(text)
    mild = rng.random() < 0.5
    for _ in range(rng.choice((1, 1, 1, 1, 2, 3, 8))):
        if mild:
            shake(data, rng)
        elif places(data):
            spoil(data, rng)
    return written(data).encode("utf-8", "replace")


class Late(BaseException):
    """Not an Exception, so that nothing on the way can take it for one of its own."""


@contextmanager
def within(seconds):
    def ring(number, frame):
        raise Late

    before = signal.signal(signal.SIGALRM, ring)
    signal.setitimer(signal.ITIMER_REAL, seconds)
    try:
        yield
    finally:
        signal.setitimer(signal.ITIMER_REAL, 0)
        signal.signal(signal.SIGALRM, before)


def whole_lines(error):
    lines = error.lines()
    assert lines and len(set(lines)) == len(lines)
    for line in lines:
        assert LINE.fullmatch(line), line
        assert line.isprintable() and len(line) < 1000, line
    return len(lines)


def outcome(path):
    """``"refused"``, or the status of what could be read."""
    try:
        sheet = read(path)
    except InputError as error:
        whole_lines(error)
        return "refused"
    try:
        result = sheet.solve()
    except InputError as error:  # no way out at these numbers
        whole_lines(error)
        return "no way out"
    assert result.status in Status.__members__
    assert isinstance(result.status_text, str) and result.status_text
    numbers = result.stream(next(iter(sheet.feeds))).flows if sheet.feeds else np.zeros(1)
    assert result.status != "converged" or np.isfinite(numbers).all()
    return result.status


@pytest.mark.parametrize("part", range(PARTS))
def test_spoilt_files(tmp_path, part):
    path = tmp_path / "sheet.toml"
    ends, broken = {}, []
    for number in range(part, FILES, PARTS):
        raw = mutated(number)
        path.write_bytes(raw)
        try:
            with within(SECONDS):
                end = outcome(path)
        except (Exception, Late) as error:
            broken.append(f"file {number}: {type(error).__name__}: {str(error)[:300]}")
        else:
            ends[end] = ends.get(end, 0) + 1
    assert not broken, "\n".join(broken)
    assert ends["refused"] >= 80 and ends["converged"] >= 40, ends  # the spoiling is neither too rough nor too mild


def test_the_files_differ_and_come_again():
    files = [mutated(number) for number in range(FILES)]
    assert len(set(files)) > 0.9 * FILES
    assert files[:50] == [mutated(number) for number in range(50)]
    assert sum(b"\xff" in raw for raw in files) > 20


def test_the_files_before_they_are_spoilt(tmp_path):
    for text in BASES:
        plain = scenes.write(tmp_path, text)
        assert outcome(plain) == ("pass_limit" if "substitution" in text else "converged")
        again = scenes.write(tmp_path, written(tomllib.loads(text)), "again.toml")
        assert load(again) == load(plain)
        assert outcome(again) == outcome(plain)


def test_spoilt_settings(tmp_path):
    """The same for changes on the command line: they are taken, or refused in whole lines."""
    data = tomllib.loads(LOOP)
    addresses = [".".join(map(str, path)) for path in places(data)]
    rng = random.Random("spoilt settings")
    ends = {"taken": 0, "refused": 0}
    path = scenes.write(tmp_path, LOOP)
    for _ in range(300):
        address = rng.choice(addresses)
        path_there = next(there for there in places(data) if ".".join(map(str, there)) == address)
        now = holder(data, path_there)[path_there[-1]]
        value = rng.choice(VALUES) if rng.random() < 0.6 else scaled(now, rng.choice((0.5, 0.9, 1.1, 1e9)))
        if rng.random() < 0.3:
            place = rng.randrange(len(address))
            address = address[:place] + rng.choice((".", "", "x", "=", " ", "\n", "[0]")) + address[place + 1 :]
        text = value if isinstance(value, str) and rng.random() < 0.5 else toml(value)
        try:
            with within(SECONDS):
                change(load(path), [f"{address}={text}"], str(path))
                read(path, [f"{address}={text}"])
        except InputError as error:
            whole_lines(error)
            ends["refused"] += 1
        else:
            ends["taken"] += 1
    assert min(ends.values()) >= 15, ends
