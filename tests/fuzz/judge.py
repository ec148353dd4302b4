"""One input, one verdict: what is a crash and what is not.

A crash is anything but a result or a refusal in the program's own words: another exception, a message that is empty or
2,000 characters long, an answer that is wrong by the program's own rules (text written back that reads otherwise), more
than 2 s of processor time, or more than 500 MB.
"""

from __future__ import annotations

import resource
import signal
import time
import traceback
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Literal, Self

from ngm.errors import NgmError
from ngm.scenario.csvfile import MatrixFileError

__all__ = ["MOST_MEMORY", "MOST_SECONDS", "Judge", "Verdict"]

MOST_SECONDS = 2.0
#: bytes
MOST_MEMORY = 500_000_000
#: Seconds of processor time after which an input is broken off, so that the rest gets its turn.
_BROKEN_OFF = 10
#: Seconds of processor time between two looks at the clock: an input is timed by the looks that it lives to see, since
#: to ask for the time before and after each one costs more than most of them take.
_LOOK = 0.5
#: What takes less time than this (seconds) cannot have asked for much memory.
_SHORT = 0.02


class _TooSlowError(BaseException):
    """Raised by the timer; a BaseException, so that no `except Exception` on the way swallows it."""


@dataclass(frozen=True, slots=True)
class Verdict:
    """What became of an input.

    Attributes
    ----------
    kind : {"accepted", "refused", "crash"}
    told : str
        The message of a refusal; the traceback or the reason of a crash.
    place : str
        Of a crash: its kind and the innermost line of the program, the same for the same mistake.
    """

    kind: Literal["accepted", "refused", "crash"]
    told: str = ""
    place: str = ""


class Judge:
    """Runs inputs one after another; remembers the largest memory so far, since only a new peak can be seen.

    Used in a `with`, it also watches the time.
    """

    def __init__(self, run: Callable[[bytes], None]) -> None:
        self.run = run
        self.peak = _peak()
        self.looks = 0
        self.before: Any = None

    def __enter__(self) -> Self:
        self.before = signal.signal(signal.SIGPROF, self._look)
        signal.setitimer(signal.ITIMER_PROF, _LOOK, _LOOK)
        return self

    def __exit__(self, *raised: object) -> None:
        signal.setitimer(signal.ITIMER_PROF, 0)
        signal.signal(signal.SIGPROF, self.before)

    def _look(self, number: int, frame: object) -> None:
        self.looks += 1
        if self.looks * _LOOK >= _BROKEN_OFF:
            self.looks = 0
            raise _TooSlowError

    def __call__(self, data: bytes) -> Verdict:
        self.looks = 0
        start = time.perf_counter()
        try:
            self.run(data)
            verdict = Verdict("accepted")
        except (NgmError, MatrixFileError) as error:
            told = str(error)
            if 0 < len(told) < 2000:
                verdict = Verdict("refused", told)
            else:
                verdict = Verdict("crash", f"a message of {len(told)} characters", f"message: {_place(error)}")
        except _TooSlowError as error:
            return Verdict("crash", "broken off: " + traceback.format_exc(limit=-8), f"time: {_place(error)}")
        except Exception as error:
            return Verdict("crash", traceback.format_exc(limit=-12), f"{type(error).__name__}: {_place(error)}")
        if time.perf_counter() - start > _SHORT:
            # the first look may have come at once
            if (self.looks - 1) * _LOOK >= MOST_SECONDS:
                return Verdict("crash", f"more than {MOST_SECONDS} s of processor time", "time")
            grown = _peak() - self.peak
            if grown > MOST_MEMORY:
                self.peak += grown
                return Verdict("crash", f"{grown / 1e6:.0f} MB", "memory")
        return verdict


def _peak() -> int:
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024


def _place(error: BaseException) -> str:
    """Return the innermost line of the package in a traceback: `expression/parse.py:120`."""
    frames = traceback.extract_tb(error.__traceback__)
    ours = [frame for frame in frames if "/ngm/" in frame.filename] or list(frames)
    if not ours:
        return "?"
    return f"{ours[-1].filename.rpartition('/ngm/')[2]}:{ours[-1].lineno}"
