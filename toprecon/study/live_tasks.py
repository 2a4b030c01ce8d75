"""Long work beside a live study: how far it is, and who is told of its end."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable
from typing import Any

Work = Callable[[Callable[[int, int], None]], Any]
"""Takes a function of (done, total) that raises when the work is to stop."""


@dataclasses.dataclass(frozen=True)
class Progress:
    """How far some work is.

    Parameters
    ----------
    done, total : int
        Equal when nothing is running.
    doing, unit : str
        What is done, to how many of what.
    """

    done: int
    total: int
    doing: str = "reconstructing"
    unit: str = "events"

    @property
    def is_running(self) -> bool:
        """Whether something is left to do."""
        return self.done < self.total

    def __str__(self) -> str:
        return f"{self.doing}: {self.done:,} of {self.total:,} {self.unit}"


@dataclasses.dataclass(frozen=True)
class Task:
    """Long work beside the study, and who is told of its outcome."""

    doing: str
    unit: str
    work: Work
    then: Callable[[Any], Any]
    failed: Callable[[Exception], Any]


class GivenUp(Exception):  # noqa: N818 (a signal, no error)
    """A newer plan is wanted, or the work is to stop."""
