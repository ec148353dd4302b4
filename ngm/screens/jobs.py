"""Formulas in the background: a page shows the numbers at once, and the formulas when they come. No Streamlit here.

A job belongs to a scenario text, not to a visitor: two who look at the same text wait for one computation. A job that
nobody has asked about for a while is stopped, so an edit leaves no work behind for a text that is gone.
"""

from __future__ import annotations

import threading
import time
from collections import OrderedDict

import ngm
from ngm.errors import NgmError
from ngm.results import Solution
from ngm.worker import Stop, stoppable

__all__ = ["Job", "forget", "ready", "start"]

#: Results kept; jobs under way at once, all visitors together.
MOST_KEPT = 64
MOST_AT_ONCE = 2

#: Seconds without a question after which a job is stopped.
PATIENCE = 5.0

_kept: OrderedDict[tuple[str, str | None], Job] = OrderedDict()
_lock = threading.Lock()
_places = threading.BoundedSemaphore(MOST_AT_ONCE)


class Job:
    """The formulas of one scenario text, on their way.

    Attributes
    ----------
    solution : Solution or None
        The solution with its formulas, or with a warning that says why there are none; None until then.
    stopped, abandoned : bool
        It was stopped; it was stopped because nobody waited any longer.
    """

    def __init__(self, text: str, folder: str | None) -> None:
        self.solution: Solution | None = None
        self.abandoned = False
        self._stop = Stop()
        self._done = threading.Event()
        self._asked = self.begun = time.monotonic()
        threading.Thread(target=self._work, args=(text, folder), name="formulas", daemon=True).start()
        threading.Thread(target=self._watch, name="formulas-watch", daemon=True).start()

    @property
    def stopped(self) -> bool:
        """Return whether it was stopped."""
        return self._stop.asked

    def wait(self, seconds: float) -> bool:
        """Wait for the end, at most so long; return whether it has ended. Meanwhile somebody is waiting."""
        end = time.monotonic() + seconds
        while True:
            now = self._asked = time.monotonic()
            if self._done.wait(min(max(end - now, 0), PATIENCE / 4)) or time.monotonic() >= end:
                return self._done.is_set()

    def stop(self) -> None:
        """Stop it."""
        self._stop.now()

    def _work(self, text: str, folder: str | None) -> None:
        try:
            with _places, stoppable(self._stop):
                if not self._stop.asked:
                    self.solution = ngm.solve(ngm.loads(text, folder=folder))
        except NgmError:
            self.solution = None  # the page has its problems from the numbers
        finally:
            self._done.set()

    def _watch(self) -> None:
        while not self._done.wait(0.5):
            if time.monotonic() - self._asked > PATIENCE:
                self.abandoned = True
                self.stop()
                return


def start(text: str, folder: str | None) -> Job:
    """Return the job for a scenario text, begun if there is none; one that was abandoned is begun anew."""
    key = (text, folder)
    with _lock:
        job = _kept.get(key)
        if job is None or job.abandoned:
            job = _kept[key] = Job(text, folder)
        _kept.move_to_end(key)
        while len(_kept) > MOST_KEPT:
            _kept.popitem(last=False)[1].stop()
    return job


def forget(text: str, folder: str | None) -> None:
    """Drop the job for a text, so that the next `start` begins anew."""
    with _lock:
        job = _kept.pop((text, folder), None)
    if job is not None:
        job.stop()


def ready(text: str, folder: str | None) -> Solution | None:
    """Return the solution with formulas where it is there already; begins nothing."""
    with _lock:
        job = _kept.get((text, folder))
    return None if job is None or job.stopped else job.solution
