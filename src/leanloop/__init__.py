"""Absorber and stripper on one circulating solvent, solved as a flowsheet until the lean loading converges."""

from leanloop.components import Component
from leanloop.errors import InputError, LeanloopError, NotReached
from leanloop.feed import Feed
from leanloop.flowsheet.result import Result
from leanloop.flowsheet.sheet import Flowsheet
from leanloop.pinch.limits import Limits, limits
from leanloop.stream import Stream
from leanloop.textfile.reader import read

__version__ = "0.1.0"

__all__ = [
    "Component",
    "Feed",
    "Flowsheet",
    "InputError",
    "LeanloopError",
    "Limits",
    "NotReached",
    "Result",
    "Stream",
    "__version__",
    "limits",
    "read",
]
