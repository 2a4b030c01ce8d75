"""The ways to edit the plan of a live study, each a change from plan to plan."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from toprecon.study.plan import StudyPlan


class PlanEditing:
    """Edits of a plan; what follows from a changed plan is up to the study."""

    def _edit(self, change: Callable[[StudyPlan], StudyPlan]) -> None:
        """Take over a changed plan."""
        raise NotImplementedError

    def configure(self, **sections: Any) -> None:
        """Replace sections of the plan, such as ``pairing=PairingOptions(...)``.

        Parameters
        ----------
        **sections
            By the names of :class:`StudyPlan`.
        """
        self._edit(lambda plan: plan.replace(**sections))

    def set_settings(self, settings: dict[str, Any]) -> None:
        """Replace single settings by path, such as ``{"pairing.cap": 6}``."""
        self._edit(lambda plan: plan.with_settings(settings))

    def set_cut(
        self,
        observable: str,
        low: float | None = None,
        high: float | None = None,
        *,
        on: bool = True,
    ) -> None:
        """Set or replace the cut on one observable."""
        self._edit(lambda plan: plan.with_cut(observable, low, high, on=on))

    def remove_cut(self, observable: str) -> None:
        """Take the cut on one observable out of the plan."""
        self._edit(
            lambda plan: plan.replace(
                cuts=tuple(c for c in plan.cuts if c.observable != observable)
            )
        )

    def set_plan(self, plan: StudyPlan) -> None:
        """Want the results of another plan.

        Parameters
        ----------
        plan : StudyPlan
            Takes the place of the present one at once; results follow.
        """
        self._edit(lambda _: plan)
