"""Reading of `[studies.NAME]`, from a file or from Python; every fault is noted."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from leanloop.entries import NAMES, Context, Entry, is_name, near, read_values, shown_key, shown_name
from leanloop.errors import Fault, InputError, nearest
from leanloop.flowsheet.read import table
from leanloop.studies import purity
from leanloop.studies.axes import Cases, read_cases
from leanloop.studies.purity import Purity
from leanloop.studies.read_purity import read_purity
from leanloop.studies.record import read_record
from leanloop.studies.sample import read_sample
from leanloop.studies.spread import Law, read_law
from leanloop.studies.study import Margin, Study

if TYPE_CHECKING:
    from leanloop.flowsheet.sheet import Flowsheet

ENTRIES = (
    "title", "change", "sample", "record", "hold", "purity", "spread", "meets", "confidence", "margin",
)  # fmt: skip
ONLY_SPREAD = ("meets", "confidence", "margin")
MOST_COLUMNS = 1500  # a database takes 2000, and purity adds its own
DRAWN = 1024  # cases of an uncertainty study where none are asked for
WORDS = (Entry("title", "text"), Entry("confidence", "number", above=0.5, below=1.0))


def study(sheet: Flowsheet, name: str | None = None, /, **entries: Any) -> Study:
    """Give a study of a flowsheet: one that it declares, or one that is described here.

    Parameters
    ----------
    sheet : Flowsheet
    name : str, optional
        Of a declared study; may be left out where there is one. With entries, what the study is to be called.
    **entries
        As in ``[studies.NAME]``: ``change``, ``sample``, ``record``, ``hold``, ``purity``, ``spread``, ...; plain numbers are SI.

    Returns
    -------
    Study

    Raises
    ------
    InputError
        With every fault found.
    """
    declared = sheet.given["studies"]
    if not entries:
        known = declared if isinstance(declared, Mapping) else {}
        if name is None and len(known) == 1:
            name = next(iter(known))
        if name not in known:
            what = "several studies are declared" if name is None and known else f"there is no study {shown_name(name or '')}"
            raise InputError([Fault("studies", what, nearest(name or "", known))], sheet.source)
        entries = known[name]
    name = name or "study"
    if not is_name(name):
        raise InputError([Fault("studies", f"{shown_name(name)} is no name", NAMES)], sheet.source)
    context = Context(plain_si=sheet.given["plain_si"] or entries is not (declared or {}).get(name))
    found = read_study(sheet, name, entries, context)
    if context.faults or found is None:
        raise InputError(context.faults, sheet.source)
    return found


def read_studies(sheet: Flowsheet, context: Context) -> dict[str, Study]:
    """Read all studies that a flowsheet declares.

    Parameters
    ----------
    sheet : Flowsheet
    context : Context
        Takes the faults.

    Returns
    -------
    dict of str to Study
        Those without faults.
    """
    found = {name: read_study(sheet, name, raw, context) for name, raw in table("studies", sheet.given["studies"], context).items()}
    return {name: item for name, item in found.items() if item is not None}


def read_study(sheet: Flowsheet, name: str, raw: Any, context: Context) -> Study | None:
    """Read one study.

    Parameters
    ----------
    sheet : Flowsheet
    name : str
    raw : mapping
        As written.
    context : Context

    Returns
    -------
    Study or None
        None after a fault.
    """
    address = f"studies.{shown_key(name)}"
    if not isinstance(raw, Mapping):
        context.fault(address, "is no table", "write [studies.NAME] with change = { ... } or spread = { ... }")
        return None
    faults, meant = len(context.faults), set()
    for key in raw:
        if key not in ENTRIES:
            context.fault(f"{address}.{shown_key(key)}", f"unknown entry {shown_name(key)}", nearest(str(key), ENTRIES))
            meant.add(near(key, ENTRIES))
    spread = "spread" in raw
    if not meant & {"change", "spread", "purity"}:
        if spread and "change" in raw:
            context.fault(f"{address}.change", "stands beside spread", "make two studies of them")
        elif not spread and "change" not in raw and not raw.get("purity"):
            context.fault(address, "changes nothing", 'add change = { "units.NAME.ENTRY" = [values] }, or spread = { ... }')
    for key in ONLY_SPREAD if not spread else ("purity",):
        if key in raw and not (key == "purity" and raw[key] is False):
            remedy = "leave it out" if spread else "it belongs to a study with spread"
            context.fault(f"{address}.{key}", "has no meaning here", remedy)
    words = read_values(WORDS, {key: raw[key] for key in ("title", "confidence") if key in raw}, address, context)
    held = _held(sheet, raw.get("hold"), f"{address}.hold", context)
    record = read_record(held, raw.get("record"), f"{address}.record", context)
    if spread:
        cases, laws = _spread(held, raw, address, context)
        margin = _margin(held, raw, laws or {}, words.numbers.get("confidence", 0.95), address, context)
        asked = None
    else:
        laws, margin = {}, None
        sample = read_sample(raw["sample"], f"{address}.sample", context) if "sample" in raw else None
        cases = Cases({})
        if "change" in raw and not ("sample" in raw and sample is None):
            cases = read_cases(held, raw["change"], sample, f"{address}.change", context)
        elif "sample" in raw and "change" not in raw:
            context.fault(f"{address}.sample", "has nothing to draw", "add change with ranges { from = ..., to = ... }")
        asked = read_purity(held, raw.get("purity"), f"{address}.purity", context)
        if asked is not None and len(context.faults) == faults:
            _try_limits(held, asked, f"{address}.purity.limits", context)
    if len(context.faults) > faults or cases is None or record is None:
        return None
    wide = len(cases.changes) + len(record) * (2 if asked and asked.contaminants else 1)
    if wide > MOST_COLUMNS:
        context.fault(f"{address}.record", f"makes more than {MOST_COLUMNS} columns", "record fewer, or leave purity out")
        return None
    kind = "uncertainty" if spread else "sweep"
    title = words.words.get("title", "")
    return Study(held, name, kind, cases, record, title, asked, laws, margin, dict(raw))


def _held(sheet: Flowsheet, raw: Any, address: str, context: Context) -> Flowsheet:
    """Give the flowsheet with the requirements that are to hold; as it is after a fault, so that the rest is read too."""
    if raw is None:
        return sheet
    if not isinstance(raw, (list, tuple)) or not all(isinstance(item, str) for item in raw):
        context.fault(address, "is no list of requirements", 'write hold = ["NAME"], or [] for none')
        return sheet
    unknown = [(place, name) for place, name in enumerate(raw) if name not in sheet.requirements]
    for place, name in unknown:
        context.fault(f"{address}[{place}]", f"there is no requirement {shown_name(name)}", nearest(name, sheet.requirements))
    if unknown:
        return sheet
    if set(raw) == set(sheet.requirements):
        return sheet
    kept = {name: item for name, item in (sheet.given["requirements"] or {}).items() if name in raw}
    return sheet.rebuilt(requirements=kept)


def _spread(sheet: Flowsheet, raw: Mapping[str, Any], address: str, context: Context) -> tuple[Cases | None, dict[str, Law] | None]:
    where, spread = f"{address}.spread", raw["spread"]
    sample = read_sample(raw.get("sample"), f"{address}.sample", context, DRAWN)
    if not isinstance(spread, Mapping) or not spread:
        context.fault(where, "is no table of inputs", 'write spread = { "feeds.NAME.flow" = "5 %" }')
        return None, None
    laws: dict[str, Law] = {}
    freed = {item.free: name for name, item in sheet.requirements.items()}
    for key, item in spread.items():
        own = f"{where}.{shown_key(key)}"
        if key not in sheet.numbers:
            context.fault(own, "is no numeric input", nearest(str(key), sheet.numbers))
        elif key.startswith("requirements."):
            context.fault(own, "is a limit", "spread inputs; a limit is what they are judged by")
        elif key in freed:
            context.fault(own, f"is freed by requirement {freed[key]}", "spread other inputs, or leave it out of hold")
        else:
            law = read_law(sheet, key, item, own, context)
            if law is not None:
                laws[key] = law
    if sample is None or len(laws) < len(spread):
        return None, laws
    shares = sample.draw(len(laws))
    return Cases({key: law.values(shares[:, n]) for n, (key, law) in enumerate(laws.items())}, (), tuple(laws)), laws


def _margin(
    sheet: Flowsheet, raw: Mapping[str, Any], laws: Mapping[str, Law], confidence: float, address: str, context: Context
) -> Margin:
    meets = {name: _usual_sense(item.kind, item.address) for name, item in sheet.requirements.items()}
    given = raw.get("meets", {})
    if not isinstance(given, Mapping):
        context.fault(f"{address}.meets", "is no table", 'write meets = { REQUIREMENT = "at_most" }')
        given = {}
    for name, sense in given.items():
        where = f"{address}.meets.{shown_key(name)}"
        if name not in meets:
            context.fault(where, f"there is no requirement {shown_name(name)}", nearest(str(name), meets))
        elif sense not in ("at_most", "at_least"):
            context.fault(where, f"unknown sense {shown_name(sense)}", "write at_most or at_least")
        else:
            meets[name] = sense
    inputs = raw.get("margin")
    if inputs is None:
        inputs = [item.free for item in sheet.requirements.values()]
    elif not isinstance(inputs, (list, tuple)):
        context.fault(f"{address}.margin", "is no list of inputs", 'write margin = ["feeds.steam.flow"]')
        inputs = []
    named: list[str] = []
    for place, key in enumerate(inputs):
        where = f"{address}.margin[{place}]"
        if not isinstance(key, str):
            context.fault(where, "is no address", "write one in quotes")
        elif key not in sheet.numbers or key.startswith("requirements."):
            context.fault(where, f"{shown_name(key)} is no numeric input", nearest(key, sheet.numbers))
        elif not sheet.varies(key):
            context.fault(where, "cannot have a margin", "name an input that can change by small amounts")
        else:
            named.append(key)
    if "margin" in raw and not sheet.requirements:
        context.fault(f"{address}.margin", "there is no requirement that it is for", "add a requirement, or leave it out")
    return Margin(meets, float(confidence), tuple(dict.fromkeys(named)))


def _usual_sense(kind: str, quantity: str) -> str:
    """Tell which side of a target is good: of an equality, less of what is in a stream, more of a removal."""
    if kind != "equals":
        return kind
    return "at_least" if ".removal." in quantity or "approach" in quantity else "at_most"


def _try_limits(sheet: Flowsheet, asked: Purity, address: str, context: Context) -> None:
    """Note where no bleed can keep to a limit, before anything is solved."""
    for name in asked.limits:
        try:
            with np.errstate(all="ignore"):
                purity.limited(sheet, asked, name)
        except InputError as error:
            for fault in error.faults:
                context.fault(f"{address}.{name}", f"{fault.address}: {fault.problem}", fault.remedy)
