"""Symbolic work is really stopped at its limit, and the numbers do not wait for it."""

from __future__ import annotations

import os
import subprocess
import sys
import time
from pathlib import Path

import pytest

import ngm
from ngm import worker
from ngm.analysis.solve import begin
from tests.derivation.models import text


def endless(depth: int = 45) -> str:
    """Return a model whose formula takes sympy for ever: continued fractions, level upon level."""
    definitions = {"d0": "1/(1 + a)"}
    definitions |= {f"d{k}": f"1/(1 + a*d{k - 1})" for k in range(1, depth)}
    flows = [("S", "I", f"beta*d{depth - 1}*S*I", "t"), ("I", "", "gamma*I", "x")]
    values = {"a": 0.5, "beta": 0.5, "gamma": 0.25}
    return text([("S", False), ("I", True)], values, flows, definitions=definitions, free={"S": 1})


def children() -> set[int]:
    """Return the processes that this one has started and that still run."""
    found = set()
    for status in Path("/proc").glob("[0-9]*/stat"):
        try:
            fields = status.read_text().rsplit(")", 1)[1].split()
        except OSError:
            continue
        if int(fields[1]) == os.getpid() and fields[0] != "Z":
            found.add(int(status.parent.name))
    return found


@pytest.mark.skipif(not Path("/proc").is_dir(), reason="looks at processes under /proc")
def test_work_past_its_limit_is_killed_and_the_numbers_stand() -> None:
    scenario = ngm.loads(endless())
    before = children()
    solution = ngm.solve(scenario, limit=2)
    # By hand: the continued fraction converges to d = 1/(1 + d/2), d = sqrt(3) - 1; R0 = 2 d.
    assert solution.R0 == pytest.approx(2 * (3**0.5 - 1), rel=1e-9)
    assert solution.closed_form is None
    assert solution.symbolic.K is None
    assert any("longer than 2 s" in warning for warning in solution.warnings)
    assert children() <= before
    assert ngm.solve(ngm.loads(endless(2)), limit=10).closed_form is not None


def test_numbers_are_there_before_the_formulas_and_the_whole_is_what_solve_returns() -> None:
    scenario = ngm.loads(endless(2))
    begun = begin(scenario)
    assert begun.numbers.closed_form is None
    # By hand: d1 = 1/(1 + d0/2), d0 = 2/3, so d1 = 3/4 and R0 = 2 d1.
    assert begun.numbers.R0 == pytest.approx(1.5, rel=1e-12)
    # Second route: `solve`, which waits for the formulas.
    assert begun.finished().to_json() == ngm.solve(scenario).to_json()
    assert begun.finished().closed_form is not None


@pytest.mark.skipif(not Path("/proc").is_dir(), reason="looks at processes under /proc")
def test_a_process_that_ends_without_its_formulas_leaves_no_child() -> None:
    program = (
        "import sys, time, ngm; from ngm import worker; from ngm.analysis.solve import begin\n"
        "begin(ngm.loads(sys.stdin.read()), limit=600)\n"
        "while not worker._busy: time.sleep(0.01)\n"
        "print(*[child.process.pid for child in worker._busy])"
    )
    done = subprocess.run(
        [sys.executable, "-c", program], input=endless(), capture_output=True, text=True, check=True, timeout=60
    )
    (child,) = done.stdout.split()
    for _ in range(500):  # a killed process is there until whoever inherits it has looked
        status = Path(f"/proc/{child}/stat")
        if not status.exists() or status.read_text().rsplit(")", 1)[1].split()[0] == "Z":
            break
        time.sleep(0.01)
    else:
        pytest.fail("the child still runs")


def test_without_a_limit_of_time_there_are_no_formulas() -> None:
    assert ngm.solve(ngm.loads(endless(2)), limit=0).symbolic.F is None


def test_a_child_that_dies_is_told_and_replaced() -> None:
    worker.warm()
    child = worker._idle[-1]
    child.process.kill()
    child.process.wait()
    assert ngm.solve(ngm.loads(endless(2))).closed_form is not None


def test_a_child_that_has_grown_gives_its_memory_back(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(worker, "MOST_KEPT", 10**12)  # whatever other tests have made of the children that are there
    assert ngm.solve(ngm.loads(endless(2)), limit=60).closed_form is not None
    deadline = time.monotonic() + 60
    while not worker._idle and time.monotonic() < deadline:
        time.sleep(0.05)
    kept = worker._idle[-1]
    monkeypatch.setattr(worker, "MOST_KEPT", 1_000_000)  # less than any child has
    assert ngm.solve(ngm.loads(endless(2)), limit=60).closed_form is not None
    assert kept.process.poll() is not None
    assert kept not in worker._idle


def test_a_child_ends_with_its_input() -> None:
    child = worker._Child()
    assert child.process.stdin is not None
    child.process.stdin.close()
    deadline = time.monotonic() + 60
    while child.process.poll() is None and time.monotonic() < deadline:
        time.sleep(0.05)
    assert child.process.poll() == 0
