"""Long computations in the background: a page shows how far they are, and a way to stop them. No Streamlit here.

Work belongs to a question, not to a visitor. Results are immutable and kept by content.
"""

from __future__ import annotations

import threading
from collections.abc import Callable, Hashable
from typing import Any

from ngm.errors import NgmError, Problem
from ngm.progress import Progress, Stopped, watched
from ngm.screens.background import Background, Kept

__all__ = ["GRACE", "Work", "forget", "start"]

#: Seconds that a page waits before it shows how far the work is.
GRACE = 2.0
#: Results kept; computations at once, all visitors together.
MOST_KEPT = 48
MOST_AT_ONCE = 2

_places = threading.BoundedSemaphore(MOST_AT_ONCE)


class Work(Background):
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
    """

    name = "long-work"

    def __init__(self, function: Callable[[], Any]) -> None:
        super().__init__()
        self.result: Any = None
        self.problems: tuple[Problem, ...] = ()
        self.failed: BaseException | None = None
        self.progress = Progress()
        self._function = function

    @property
    def stopped(self) -> bool:
        """Return whether a stop was asked for."""
        return self.progress.asked

    def stop(self) -> None:
        """Stop it at its next step."""
        self.progress.stop()

    def work(self) -> None:
        """Call the function."""
        try:
            with _places, watched(self.progress):
                if not self.progress.asked:
                    self.result = self._function()
        except Stopped:
            pass
        except NgmError as error:
            self.problems = error.problems
        except BaseException as error:
            self.failed = error


_kept: Kept[Hashable, Work] = Kept(MOST_KEPT)


def start(question: Hashable, function: Callable[[], Any]) -> Work:
    """Return the work on a question, begun if there is none; what was abandoned is begun anew."""
    return _kept.start(question, lambda: Work(function))


def forget(question: Hashable) -> None:
    """Drop the work on a question, so that the next `start` begins anew."""
    _kept.forget(question)
