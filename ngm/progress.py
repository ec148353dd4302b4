"""How far long work is, and a way to stop it: known to whoever does the work, without a word to those in between.

Work that takes long says how many steps it expects and tells each one done; whoever waits reads the share, or asks for a
stop. Outside of `watched` all of this does nothing.
"""

from __future__ import annotations

import contextlib
from collections.abc import Iterator
from contextvars import ContextVar

__all__ = ["Progress", "Stopped", "advance", "expect", "watched"]


class Stopped(Exception):  # noqa: N818
    """Somebody asked the work to stop. No fault of the input: it is no `NgmError`."""


class Progress:
    """The steps of some work, counted by the thread that does it and read by others.

    Attributes
    ----------
    expected, done : int
    asked : bool
        Whether a stop is asked for; the work ends at its next step.
    """

    def __init__(self) -> None:
        self.expected = self.done = 0
        self.asked = False

    @property
    def share(self) -> float:
        """The share that is done, 0 to 1."""
        return min(1.0, self.done / self.expected) if self.expected else 0.0

    def stop(self) -> None:
        """Ask for a stop."""
        self.asked = True


_current: ContextVar[Progress | None] = ContextVar("progress", default=None)


@contextlib.contextmanager
def watched(progress: Progress) -> Iterator[None]:
    """Let the work done inside be counted, and stopped, by `progress`."""
    token = _current.set(progress)
    try:
        yield
    finally:
        _current.reset(token)


def expect(steps: int) -> None:
    """Say that so many more steps are to come."""
    progress = _current.get()
    if progress is not None:
        progress.expected += steps


def advance(steps: int = 1) -> None:
    """Say that so many steps are done.

    Raises
    ------
    Stopped
        A stop was asked for.
    """
    progress = _current.get()
    if progress is not None:
        progress.done += steps
        if progress.asked:
            raise Stopped
