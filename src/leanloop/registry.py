"""Tables of plug-ins: name to class, loaded when first named."""

from __future__ import annotations

from collections.abc import Iterator
from importlib import import_module
from importlib.metadata import entry_points

from leanloop.errors import LeanloopError, nearest


class UnknownPlugin(LeanloopError, KeyError):
    """A name is in no table of plug-ins; the message offers the nearest one."""

    def __str__(self) -> str:
        return str(self.args[0])


class BrokenPlugin(LeanloopError):
    """A plug-in is listed but cannot be used; the message says which and why."""


class Registry:
    """Name to class for one sort of plug-in.

    Parameters
    ----------
    sort : str
        What the plug-ins are, in words.
    group : str
        Entry-point group in which outside packages list theirs.
    table : dict of str to str
        Name to ``"module:Class"`` of the plug-ins that come with leanloop.
    base : str
        ``"module:Class"`` of the base class that every one of them derives from.
    """

    def __init__(self, sort: str, group: str, table: dict[str, str], base: str) -> None:
        self.sort, self.group, self.base = sort, group, base
        self._table = dict(table)
        self._loaded: dict[str, type] = {}
        self._outside: dict[str, str] | None = None

    def _known(self) -> dict[str, str]:
        if self._outside is None:
            self._outside = {item.name: item.value for item in entry_points(group=self.group)}
        return {**self._outside, **self._table}

    def names(self) -> list[str]:
        """List every name, sorted."""
        return sorted({*self._known(), *self._loaded})

    def __iter__(self) -> Iterator[str]:
        return iter(self.names())

    def __contains__(self, name: object) -> bool:
        return name in self._loaded or name in self._known()

    def add(self, name: str, plugin: type) -> None:
        """Register a class under a name for this process.

        Parameters
        ----------
        name : str
        plugin : type
            Derived from the base class of this table.

        Raises
        ------
        BrokenPlugin
            Where the class does not fit.
        """
        self._verify(name, plugin)
        self._loaded[name] = plugin

    def remove(self, name: str) -> None:
        """Take away a class that `add` registered."""
        self._loaded.pop(name, None)

    def load(self, name: str) -> type:
        """Give the class of a name.

        Parameters
        ----------
        name : str

        Raises
        ------
        UnknownPlugin
            Where no plug-in has that name.
        BrokenPlugin
            Where it cannot be imported or is not of the right sort.
        """
        if name not in self._loaded:
            known = self._known()
            if name not in known:
                raise UnknownPlugin(f"no {self.sort} '{name}'; {nearest(name, self.names())}")
            module, _, attribute = known[name].partition(":")
            try:
                plugin = getattr(import_module(module), attribute)
            except Exception as error:  # whatever an outside module raises while it is imported
                raise BrokenPlugin(f"{self.sort} '{name}' cannot be loaded from '{known[name]}': {error}") from error
            self._verify(name, plugin)
            self._loaded[name] = plugin
        return self._loaded[name]

    def _verify(self, name: str, plugin: type) -> None:
        module, _, attribute = self.base.partition(":")
        base = getattr(import_module(module), attribute)
        if not (isinstance(plugin, type) and issubclass(plugin, base)):
            raise BrokenPlugin(f"{self.sort} '{name}': {plugin!r} does not derive from {attribute}")
        missing = sorted(getattr(plugin, "__abstractmethods__", ()))
        if missing:
            raise BrokenPlugin(f"{self.sort} '{name}': {plugin.__name__} lacks {', '.join(missing)}")
