"""What is installed: unit kinds, equilibrium models and recycle methods, with ports and inputs."""

from __future__ import annotations

from collections.abc import Iterable

from leanloop.entries import Entry
from leanloop.equilibrium import MODELS
from leanloop.recycle import METHODS
from leanloop.registry import BrokenPlugin, Registry
from leanloop.units import KINDS

PORTS = ("inlet", "outlet")


def catalogue() -> str:
    """Write the list.

    Returns
    -------
    str
        A plug-in that cannot be loaded is named with the reason.
    """
    lines: list[str] = []
    for head, registry in (
        ("Unit kinds", KINDS), ("Equilibrium models", MODELS), ("Recycle methods", METHODS),
    ):  # fmt: skip
        lines += [head, "-" * len(head)]
        for name in registry:
            lines += _one(registry, name)
        lines.append("")
    return "\n".join(lines[:-1]) + "\n"


def _one(registry: Registry, name: str) -> list[str]:
    try:
        plugin = registry.load(name)
    except BrokenPlugin as error:
        return [f"{name}: cannot be used: {error}"]
    first = (plugin.__doc__ or "").strip().split("\n")[0]
    lines = [f"{name}: {first}"]
    entries: Iterable[Entry] = getattr(plugin, "entries", ())
    for title, chosen in (
        ("ports", [item for item in entries if item.sort in PORTS]),
        ("inputs", [item for item in entries if item.sort not in PORTS]),
    ):
        if chosen:
            lines.append(f"  {title}")
            width = max(len(item.name) for item in chosen)
            lines += [f"    {item.name.ljust(width)}  {_described(item)}" for item in chosen]
    return lines


def _described(item: Entry) -> str:
    sort = item.sort if isinstance(item.sort, str) else " or ".join(item.sort)
    words = [f"one of {', '.join(item.choices)}" if item.choices else sort]
    if item.nested:
        words[0] = "table of " + ", ".join(inner.name for inner in item.nested)
    if item.by:
        words.append(f"by {item.by}")
    elif item.many:
        words.append("one or several")
    words.append("required" if item.required else "optional")
    return ", ".join(words) + (f": {item.doc}" if item.doc else "")
