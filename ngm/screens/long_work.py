"""Long computations in the background: a page shows how far they are, and a way to stop them. No Streamlit here.

Work belongs to a question, not to a visitor: two who ask the same wait for one computation. What nobody has asked about for
a while is stopped, and begun anew when somebody comes back. Results are immutable and kept by content.
"""

from __future__ import annotations

import threading
import time
from collections import OrderedDict
from collections.abc import Callable, Hashable
from typing import Any

from ngm.errors import NgmError, Problem
from ngm.progress import Progress, Stopped, watched

__all__ = ["GRACE", "Work", "forget", "start"]

#: Seconds that a page waits before it shows how far the work is.
GRACE = 2.0
#: Results kept; computations at once, all visitors together.
MOST_KEPT = 48
MOST_AT_ONCE = 2
#: Seconds without a question after which work is stopped.
PATIENCE = 10.0

_kept: OrderedDict[Hashable, Work] = OrderedDict()
_lock = threading.Lock()
_places = threading.BoundedSemaphore(MOST_AT_ONCE)


class Work:
    """One computation on its way.

    Attributes
    ----------
    result : object or None
        What it gave; None until then, and where it failed or was stopped.
    problems : tuple of Problem
        What is wrong with the question.
    failed : BaseException or None
        A fault of the program, to be raised where somebody sees it.
    progress : Progress
    abandoned : bool
        It was stopped because nobody waited any longer.
    """

    def __init__(self, function: Callable[[], Any]) -> None:
        self.result: Any = None
        self.problems: tuple[Problem, ...] = ()
        self.failed: BaseException | None = None
        self.progress = Progress()
        self.abandoned = False
        self._done = threading.Event()
        self._asked = time.monotonic()
        threading.Thread(target=self._work, args=(function,), name="long-work", daemon=True).start()
        threading.Thread(target=self._watch, name="long-work-watch", daemon=True).start()

    @property
    def stopped(self) -> bool:
        """Return whether a stop was asked for."""
        return self.progress.asked

    def wait(self, seconds: float) -> bool:
        """Wait for the end, at most so long; return whether it has ended. Meanwhile somebody is waiting."""
        end = time.monotonic() + seconds
        while True:
            now = self._asked = time.monotonic()
            if self._done.wait(min(max(end - now, 0), PATIENCE / 4)) or time.monotonic() >= end:
                return self._done.is_set()

    def stop(self) -> None:
        """Stop it at its next step."""
        self.progress.stop()

    def _work(self, function: Callable[[], Any]) -> None:
        try:
            with _places, watched(self.progress):
                if not self.progress.asked:
                    self.result = function()
        except Stopped:
            pass
        except NgmError as error:
            self.problems = error.problems
        except BaseException as error:
            self.failed = error
        finally:
            self._done.set()

    def _watch(self) -> None:
        while not self._done.wait(0.5):
            if time.monotonic() - self._asked > PATIENCE:
                self.abandoned = True
                self.stop()
                return


def start(question: Hashable, function: Callable[[], Any]) -> Work:
    """Return the work on a question, begun if there is none; what was abandoned is begun anew."""
    with _lock:
        work = _kept.get(question)
        if work is None or work.abandoned:
            work = _kept[question] = Work(function)
        _kept.move_to_end(question)
        while len(_kept) > MOST_KEPT:
            _kept.popitem(last=False)[1].stop()
    return work


def forget(question: Hashable) -> None:
    """Drop the work on a question, so that the next `start` begins anew."""
    with _lock:
        work = _kept.pop(question, None)
    if work is not None:
        work.stop()
