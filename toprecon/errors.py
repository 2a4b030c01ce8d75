"""Exceptions and warnings of the package.

::

    TopreconError
    ├── OptionError (ValueError)            a setting is wrong
    ├── MissingFieldError (LookupError)     events, tops or a table lack a field
    ├── InputError (OSError)                a file cannot be used
    │   └── UnknownFormatError              nobody knows how to read it
    ├── MissingPackageError (ImportError)   an optional package is not installed
    └── StudyError (RuntimeError)           a study cannot be carried out as asked

    TopreconWarning (UserWarning)
    ├── LowStatisticsWarning
    ├── SkippedEventsWarning
    └── NotClosingWarning

A message says, in this order: where, what is required, what was received, what to
do. Exceptions are for misuse; an event that fails is data (a status), not an error.
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable


class TopreconError(Exception):
    """Base of every exception the package raises on purpose."""


class OptionError(TopreconError, ValueError):
    """A setting is unknown or out of range."""


class MissingFieldError(TopreconError, LookupError):
    """Events, tops or a table lack a field that a step needs."""


class InputError(TopreconError, OSError):
    """A file is missing, damaged or not what it should be."""


class UnknownFormatError(InputError):
    """No known layout fits the file."""


class MissingPackageError(TopreconError, ImportError):
    """An optional package is needed and not installed."""


class StudyError(TopreconError, RuntimeError):
    """A study cannot be carried out as asked."""


class TopreconWarning(UserWarning):
    """Base of every warning the package gives."""


class LowStatisticsWarning(TopreconWarning):
    """Too few events for the number to mean much."""


class SkippedEventsWarning(TopreconWarning):
    """Some events of the input could not be used."""


class NotClosingWarning(TopreconWarning):
    """A closure test fails."""


def nearest(name: str, known: Iterable[str]) -> str:
    """Return a hint ``; did you mean 'x'?`` or the list of known names.

    Parameters
    ----------
    name : str
        What was received.
    known : iterable of str
        What would have been understood.

    Returns
    -------
    str
        Text to append to a message; empty if nothing is known.
    """
    names = sorted(set(known))
    close = difflib.get_close_matches(name, names, n=1, cutoff=0.6)
    if close:
        return f"; did you mean {close[0]!r}?"
    return f"; known: {', '.join(names)}" if names else ""
