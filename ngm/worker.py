"""Symbolic work in a process of its own, with a limit on time and memory.

Symbols can take any time, and a thread cannot be stopped. So a derivation in symbols is sent to a child process, which is
killed when its limit is over, and its memory comes back. One idle child is kept warm between jobs; it ends by itself when
the parent does, since its input ends. The child runs `python -m ngm.worker`: requests come in on its standard input and
results go out on its standard output, each as a length and a pickled object, between two processes of one program.
"""

from __future__ import annotations

import atexit
import contextlib
import os
import pickle
import struct
import subprocess
import sys
import threading
from collections.abc import Callable, Iterator, Mapping, Sequence
from contextvars import ContextVar
from pathlib import Path
from typing import IO, Any

from ngm.expression.tree import Node
from ngm.results import Symbolic
from ngm.scenario.model import Scenario

__all__ = ["LIMIT", "Stop", "WorkerFailed", "identical", "slope_forms", "stoppable", "symbols", "warm"]

#: Seconds for the symbols of one scenario.
LIMIT = 10.0
#: Bytes of address space of a child.
MEMORY = 4 * 2**30

#: Bytes of memory up to which a child that has answered is kept for the next question; one that has grown is ended.
MOST_KEPT = 400_000_000

_HEADER = struct.Struct(">Q")


class WorkerFailed(Exception):  # noqa: N818
    """No symbols: `str()` says why, in words for a warning."""


class Stop:
    """A way to stop the symbolic work that a thread has begun, from another thread."""

    def __init__(self) -> None:
        self._lock = threading.Lock()
        self._child: _Child | None = None
        self.asked = False

    def now(self) -> None:
        """Stop what is under way, and whatever would follow."""
        with self._lock:
            self.asked = True
            child = self._child
        if child is not None:
            child.process.kill()

    def _watch(self, child: _Child | None) -> None:
        with self._lock:
            self._child = child
            if child is None or not self.asked:
                return
        child.process.kill()


_stop: ContextVar[Stop | None] = ContextVar("stop", default=None)


@contextlib.contextmanager
def stoppable(stop: Stop) -> Iterator[None]:
    """Let `stop` end the symbolic work done inside; it raises WorkerFailed, and the numbers come alone."""
    token = _stop.set(stop)
    try:
        yield
    finally:
        _stop.reset(token)


class _Child:
    """One child process that has answered everything it was asked so far."""

    def __init__(self) -> None:
        environment = dict(os.environ)
        root = str(Path(__file__).resolve().parent.parent)
        old = environment.get("PYTHONPATH")
        environment["PYTHONPATH"] = root if not old else root + os.pathsep + old
        # Nothing is read from the folder the user happens to stand in.
        self.process = subprocess.Popen(
            [sys.executable, "-m", "ngm.worker"],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.DEVNULL,
            env=environment,
            cwd=root,
        )

    def ask(self, request: object, limit: float) -> Any:
        """Return the answer; kill the child and raise WorkerFailed when it takes longer than `limit` seconds."""
        assert self.process.stdin is not None
        assert self.process.stdout is not None
        late = threading.Event()
        wanted = _stop.get()

        def stop() -> None:
            late.set()
            self.kill()

        timer = threading.Timer(limit, stop)
        timer.daemon = True
        timer.start()
        try:
            if wanted is not None:
                wanted._watch(self)
            _send(self.process.stdin, request)
            return _receive(self.process.stdout)
        except (OSError, EOFError, pickle.UnpicklingError, struct.error):
            self.kill()
            if wanted is not None and wanted.asked:
                raise WorkerFailed("the formulas were stopped; the numbers stand by themselves.") from None
            if late.is_set():
                raise WorkerFailed(
                    f"the formulas took longer than {limit:g} s and were stopped; the numbers stand by themselves."
                ) from None
            raise WorkerFailed(
                "the formulas needed more memory than is allowed; the numbers stand by themselves."
            ) from None
        finally:
            timer.cancel()
            if wanted is not None:
                wanted._watch(None)

    def kill(self) -> None:
        """End the child at once."""
        self.process.kill()
        self.process.wait()
        for pipe in (self.process.stdin, self.process.stdout):
            if pipe is not None:
                with contextlib.suppress(OSError):
                    pipe.close()


_idle: list[_Child] = []
_busy: set[_Child] = set()
_lock = threading.Lock()


def warm() -> None:
    """Start a child if none is idle, so that the next question finds one."""
    with _lock:
        if not _idle:
            with contextlib.suppress(OSError):
                _idle.append(_Child())


def symbols(
    scenario: Scenario,
    state: Mapping[str, float],
    values: Mapping[str, float],
    branches: Mapping[str, list[int]],
    limit: float = LIMIT,
    **options: Any,
) -> Symbolic:
    """Return `ngm.derivation.symbols.derive_symbols` of the same arguments, computed in a child within `limit` seconds.

    Raises
    ------
    WorkerFailed
        The limit on time or memory was reached, or no process could be started.
    """
    answer = _asked("symbols", (scenario, dict(state), dict(values), dict(branches)), options, limit)
    if isinstance(answer, Symbolic):
        return answer
    raise WorkerFailed(str(answer))


def identical(
    first: Node, second: Node, meanings: Mapping[str, Node], any_sign: Sequence[str] = (), limit: float = LIMIT
) -> bool:
    """Return `ngm.derivation.identity.identical` of the same arguments, computed in a child; False where no proof came."""
    try:
        answer = _asked("identical", (first, second, dict(meanings), tuple(any_sign)), {}, limit)
    except WorkerFailed:
        return False
    return answer is True


def slope_forms(
    formula: Node,
    meanings: Mapping[str, Node],
    wanted: Sequence[str],
    values: Mapping[str, float],
    any_sign: Sequence[str] = (),
    limit: float = LIMIT,
) -> dict[str, tuple[str, str]]:
    """Return `ngm.derivation.slope_forms.slope_forms` of the same arguments, computed in a child within `limit` seconds.

    Raises
    ------
    WorkerFailed
        As for `symbols`.
    """
    asked = (formula, dict(meanings), tuple(wanted), dict(values), tuple(any_sign))
    answer = _asked("slope_forms", asked, {}, limit)
    if isinstance(answer, dict):
        return answer
    raise WorkerFailed(str(answer))


def bifurcation_forms(*arguments: Any, limit: float = LIMIT) -> tuple[str | None, str | None]:
    """Return `ngm.derivation.bifurcation_forms` of the same arguments, computed in a child; None twice where none came."""
    try:
        answer = _asked("bifurcation_forms", arguments, {}, limit)
    except WorkerFailed:
        return None, None
    return answer if isinstance(answer, tuple) else (None, None)


def _asked(job: str, arguments: tuple[Any, ...], options: Mapping[str, Any], limit: float) -> Any:
    """Return what a child answers; text where the job failed."""
    with _lock:
        child = _idle.pop() if _idle else None
    try:
        if child is None or child.process.poll() is not None:
            child = _Child()
    except OSError as error:
        raise WorkerFailed(f"no process for the formulas could be started ({error.strerror}).") from None
    with _lock:
        _busy.add(child)
    try:
        answer, peak = child.ask((job, arguments, dict(options)), limit)
    finally:
        with _lock:
            _busy.discard(child)
    with _lock:
        if len(_idle) < 2 and peak <= MOST_KEPT:
            _idle.append(child)
            child = None
    if child is not None:
        child.kill()
    return answer


@atexit.register
def _end() -> None:
    while _idle:
        _idle.pop().kill()
    for child in list(_busy):  # asked by a thread for which nobody waits any more
        child.process.kill()


def _send(pipe: IO[bytes], thing: object) -> None:
    data = pickle.dumps(thing)
    pipe.write(_HEADER.pack(len(data)) + data)
    pipe.flush()


def _receive(pipe: IO[bytes]) -> Any:
    header = pipe.read(_HEADER.size)
    if len(header) < _HEADER.size:
        raise EOFError
    (size,) = _HEADER.unpack(header)
    data = pipe.read(size)
    if len(data) < size:
        raise EOFError
    return pickle.loads(data)


def serve() -> None:
    """Answer requests until the input ends. What anybody prints goes to standard error, not among the answers."""
    answers = os.fdopen(os.dup(sys.stdout.fileno()), "wb")
    os.dup2(sys.stderr.fileno(), sys.stdout.fileno())
    with contextlib.suppress(ImportError, ValueError, OSError):
        import resource

        resource.setrlimit(resource.RLIMIT_AS, (MEMORY, MEMORY))
    with contextlib.suppress(OSError, AttributeError):
        os.nice(5)
    from ngm.derivation.bifurcation_forms import bifurcation_forms as bifurcation
    from ngm.derivation.identity import identical as proven
    from ngm.derivation.slope_forms import slope_forms as slopes
    from ngm.derivation.symbols import derive_symbols
    from ngm.errors import NgmError

    jobs: dict[str, Callable[..., object]] = {
        "symbols": derive_symbols,
        "identical": proven,
        "slope_forms": slopes,
        "bifurcation_forms": bifurcation,
    }
    while True:
        try:
            job, arguments, options = _receive(sys.stdin.buffer)
        except (EOFError, OSError):
            os._exit(0)
        try:
            answer: object = jobs[job](*arguments, **options)
        except NgmError as error:
            answer = f"the formulas could not be written ({error.problems[0].message})"
        except RecursionError:
            answer = "the formulas are too deep to be written out; the numbers stand by themselves."
        except MemoryError:
            os._exit(3)
        except Exception as error:  # the numbers do not depend on this, so a fault here must not lose them
            print(repr(error), file=sys.stderr)
            answer = f"the formulas could not be written ({type(error).__name__}); the numbers stand by themselves."
        _send(answers, (answer, _peak()))


def _peak() -> int:
    """Return the largest memory that this process has had, in bytes; 0 where nobody can say."""
    try:
        import resource
    except ImportError:
        return 0
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * (1 if sys.platform == "darwin" else 1024)


if __name__ == "__main__":
    serve()
