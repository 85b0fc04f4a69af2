"""The errors that this library raises, and the warnings that it hands over.

::

    EarthworkError
    ├── SiteFileError      the site file: unknown keys, wrong values, missing sections (all faults in one message)
    ├── FileError          a file of the user's: missing, unreadable, corrupt, of the wrong kind
    │   └── OutputError    an output that exists, or no room to write it
    ├── GroundError        surfaces and areas that do not fit: no overlap, datum, CRS, overlapping zones
    ├── SoilError          a soil that cannot be: above zero air voids, a fraction for a percentage
    └── PlanError          a plan that cannot be made: no source for a fill, a ledger that does not close

Each message says where, what the value is, the rule, and what to do next.
"""

from __future__ import annotations

from dataclasses import dataclass


class EarthworkError(Exception):
    """Base of all errors that bad input can cause; the command line prints it and ends with exit code 2."""


class SiteFileError(EarthworkError):
    """The site file breaks its rules; the message lists every fault."""


class FileError(EarthworkError):
    """A file is missing, unreadable, corrupt or of the wrong kind."""


class OutputError(FileError):
    """An output exists already, or cannot be written."""


class GroundError(EarthworkError):
    """Surfaces or areas do not fit together."""


class SoilError(EarthworkError):
    """A soil state is impossible, or its figures contradict each other."""


class PlanError(EarthworkError):
    """A plan cannot be made from what the site gives."""


@dataclass(frozen=True)
class Warning:
    """A doubt that the user must see: printed on stderr, and listed in the JSON.

    ``code`` is stable and lower-case with hyphens; ``message`` says what, where and what to do.
    """

    code: str
    message: str
