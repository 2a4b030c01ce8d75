"""Observables: the numbers per event that a cut, a scan or a figure can use."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterable

from toprecon.errors import OptionError, nearest


@dataclasses.dataclass(frozen=True)
class Observable:
    """One number per event, offered by a step.

    Parameters
    ----------
    name : str
        ``step.name``, for example ``pairing.chi2``; also the column of the table.
    unit : str
        ``"GeV"``, ``"rad"`` or empty.
    meaning : str
        One line for people.
    range : tuple of float
        Interval in which nearly all values lie; used by controls and figures.
    label : str
        Text of an axis, without the unit.
    """

    name: str
    unit: str
    meaning: str
    range: tuple[float, float]
    label: str

    @property
    def axis_label(self) -> str:
        """Label with the unit in brackets."""
        return f"{self.label} [{self.unit}]" if self.unit else self.label


def find_observable(
    name: str, known: Iterable[Observable], *, where: str = "observable"
) -> Observable:
    """Look an observable up by name.

    Parameters
    ----------
    name : str
        Name asked for.
    known : iterable of Observable
        What there is.
    where : str
        Start of the message, for example ``cuts.0.observable``.

    Returns
    -------
    Observable
        The one of that name.

    Raises
    ------
    OptionError
        If there is none; the message lists the nearest names.
    """
    by_name = {item.name: item for item in known}
    if name not in by_name:
        msg = f"{where}: unknown observable {name!r}{nearest(name, by_name)}"
        raise OptionError(msg)
    return by_name[name]
