"""Wrong inputs and hostile neighbours: what the worst of them costs, and what others notice of it."""

from __future__ import annotations

import contextlib
import json
import subprocess
import sys
import tempfile
import threading
import time
from collections.abc import Callable
from pathlib import Path

import ngm
from ngm.errors import NgmError
from ngm.screens import jobs
from tests.analysis.test_worker import endless
from tests.contract.test_refused import CASES, text_of
from tests.limits.inputs import LIMITS, SMALL, nodes

__all__ = ["rows"]

Row = tuple[str, str, str]

_WRONG = "from tests.benchmarks.hostile import wrong; wrong()"


def inputs() -> list[tuple[str, Callable[[], object]]]:
    """Return every wrong input of the tests: its name, and how it is read and solved."""
    folder = Path(tempfile.mkdtemp())
    out: list[tuple[str, Callable[[], object]]] = [
        (name, lambda base=base, edits=edits: ngm.solve(ngm.loads(text_of(base, edits)), limit=0))  # type: ignore[misc]
        for name, base, edits, _ in CASES
    ]
    out += [(f"past {name}", lambda past=past: past(folder)) for name, _, past, _ in LIMITS]  # type: ignore[misc]
    for text in ("9^9^9^9", "(" * 5000, "x+" * 1_000_000, "exp(" * 2000, "-" * 9999, "1e999999999"):
        out.append((text[:12], lambda text=text: ngm.loads(SMALL.replace("g*I", text))))  # type: ignore[misc]
    return out


def wrong() -> None:
    """Print the longest processor time, its input, the largest memory and the number of all wrong inputs."""
    import resource

    ngm.solve(ngm.loads(SMALL), limit=0)
    worst, name_of_worst = 0.0, ""
    cases = inputs()
    for name, read in cases:
        start = time.process_time()
        try:
            read()
            raise SystemExit(f"{name} is not refused")
        except NgmError:
            taken = time.process_time() - start
        if taken > worst:
            worst, name_of_worst = taken, name
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024
    print(json.dumps([worst, name_of_worst, peak, len(cases)]))


def rate(seconds: float = 3.0) -> float:
    """Return how many times a second a small model is read and solved, as an edit in the app does."""
    count, start = 0, time.perf_counter()
    while time.perf_counter() - start < seconds:
        ngm.solve(ngm.loads(SMALL.replace("0.3", f"0.3{count % 1000:03d}")), limit=0)
        count += 1
    return count / (time.perf_counter() - start)


def beside(work: Callable[[], object]) -> float:
    """Return the rate of edits while a neighbour in the same server does some work again and again."""
    stop = threading.Event()

    def neighbour() -> None:
        while not stop.is_set():
            with contextlib.suppress(NgmError):
                work()

    thread = threading.Thread(target=neighbour, daemon=True)
    thread.start()
    time.sleep(0.5)
    found = rate()
    stop.set()
    thread.join(60)
    return found


def rows() -> list[Row]:
    """Return what was measured, the figure, and the bound it has to keep."""
    done = subprocess.run([sys.executable, "-c", _WRONG], capture_output=True, text=True, check=True)
    worst, name, peak, count = json.loads(done.stdout)
    out = [
        (f"longest of {count} wrong inputs ({name}), processor time", f"{worst:.2f} s", "2 s"),
        (f"largest memory of a process that reads all {count}", f"{peak / 1e6:.0f} MB", "500 MB"),
    ]
    alone = rate()
    hard = endless()
    for what, work in (
        ("formulas that never end", lambda: jobs.start(hard, None).wait(1.0)),
        ("100,000 operations in its expressions", lambda: ngm.loads(nodes(100))),
    ):
        ratio = alone / beside(work)
        out.append((f"edits of one visitor alone / beside a neighbour with {what}", f"{ratio:.2f}", "2"))
    jobs.forget(hard, None)
    return out
