"""Formulas in the background: a page shows the numbers at once, and the formulas when they come. No Streamlit here.

A job belongs to a scenario text, not to a visitor. A job that nobody has asked about for a while is stopped, so an edit
leaves no work behind for a text that is gone.
"""

from __future__ import annotations

import threading

import ngm
from ngm.errors import NgmError
from ngm.results import Solution
from ngm.screens.background import Background, Kept
from ngm.worker import Stop, stoppable

__all__ = ["Job", "forget", "ready", "start"]

#: Results kept; jobs under way at once, all visitors together.
MOST_KEPT = 64
MOST_AT_ONCE = 2

_places = threading.BoundedSemaphore(MOST_AT_ONCE)


class Job(Background):
    """The formulas of one scenario text, on their way.

    Attributes
    ----------
    solution : Solution or None
        The solution with its formulas, or with a warning that says why there are none; None until then, and where the text
        has problems: the page has those from the numbers.
    """

    name = "formulas"
    patience = 5.0

    def __init__(self, text: str, folder: str | None) -> None:
        super().__init__()
        self.solution: Solution | None = None
        self._text, self._folder = text, folder
        self._stop = Stop()

    @property
    def stopped(self) -> bool:
        """Return whether it was stopped."""
        return self._stop.asked

    def stop(self) -> None:
        """Stop it."""
        self._stop.now()

    def work(self) -> None:
        """Derive the formulas."""
        try:
            with _places, stoppable(self._stop):
                if not self._stop.asked:
                    self.solution = ngm.solve(ngm.loads(self._text, folder=self._folder))
        except NgmError:
            self.solution = None


_kept: Kept[tuple[str, str | None], Job] = Kept(MOST_KEPT)


def start(text: str, folder: str | None) -> Job:
    """Return the job for a scenario text, begun if there is none; one that was abandoned is begun anew."""
    return _kept.start((text, folder), lambda: Job(text, folder))


def forget(text: str, folder: str | None) -> None:
    """Drop the job for a text, so that the next `start` begins anew."""
    _kept.forget((text, folder))


def ready(text: str, folder: str | None) -> Solution | None:
    """Return the solution with formulas where it is there already; begins nothing."""
    job = _kept.get((text, folder))
    return None if job is None or job.stopped else job.solution
