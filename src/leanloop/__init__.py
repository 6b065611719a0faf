"""Absorber and stripper on one circulating solvent, solved as a flowsheet until the lean loading converges."""

from leanloop.components import Component
from leanloop.errors import InputError, LeanloopError, NotReached, StudyError
from leanloop.feed import Feed
from leanloop.flowsheet.result import Result
from leanloop.flowsheet.sheet import Flowsheet
from leanloop.pinch.limits import Limits, limits
from leanloop.sizing.designs import Designs
from leanloop.sizing.scan import size
from leanloop.stream import Stream
from leanloop.studies.findings import Findings
from leanloop.studies.read import study
from leanloop.studies.study import Study
from leanloop.textfile.reader import read
from leanloop.version import VERSION as __version__

__all__ = [
    "Component",
    "Designs",
    "Feed",
    "Findings",
    "Flowsheet",
    "InputError",
    "LeanloopError",
    "Limits",
    "NotReached",
    "Result",
    "Stream",
    "Study",
    "StudyError",
    "__version__",
    "limits",
    "read",
    "size",
    "study",
]
