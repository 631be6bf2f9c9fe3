"""The error classes of the package and the exit codes they carry to the command line.

Every message is one short paragraph: what is wrong, where, and what to do about it.
"""

from __future__ import annotations


class LespostError(Exception):
    """Base of all errors raised on purpose; `exit_code` is what the command line returns."""

    exit_code = 3


class RequestError(LespostError):
    """The request is wrong: usage or recipe (exit code 2)."""

    exit_code = 2


class RecipeError(RequestError):
    """A recipe that cannot be used: unknown key, wrong type, impossible value, missing path."""


class DataError(LespostError):
    """The data are wrong: unreadable, truncated, contradictory or physically impossible (exit code 3)."""


class UnitError(DataError):
    """A unit text that cannot be read, or that does not convert to the unit needed."""


class LayoutError(DataError):
    """The arrangement of the files (names, axes, staggering) cannot be decided from the evidence."""


class RecordError(DataError):
    """A field record that cannot be read safely."""


class Unfinished(LespostError):
    """Work stopped in part and can be resumed by running again (exit code 4)."""

    exit_code = 4


class Interrupted(Unfinished):
    """Stopped by the user's interrupt; work done so far is saved (exit code 130)."""

    exit_code = 130
