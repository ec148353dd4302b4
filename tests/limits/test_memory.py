"""What is used is given back: by many solves in one process, and by formulas that are stopped at their limit."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]

#: Runs in a process of its own, so that nothing else of the tests is in its memory; prints megabytes.
_LEAK = """
import gc, sys
import ngm
from pathlib import Path
from tests.limits.inputs import SMALL

def resident():
    gc.collect()
    fields = Path("/proc/self/statm").read_text().split()
    return int(fields[1]) * 4096

def work(first, count):
    for number in range(first, first + count):
        # every text is another one, so that nothing that is kept by text can hide
        scenario = ngm.loads(SMALL.replace("0.3", f"0.3{number:05d}"))
        if number % 5 == 0:
            ngm.control(scenario)
        assert ngm.solve(scenario, limit=0).R0 > 1

work(0, 200)
before = resident()
work(200, 2000)
print((resident() - before) / 1e6)
"""


@pytest.mark.skipif(not Path("/proc/self/statm").exists(), reason="reads /proc")
def test_two_thousand_solves_leak_less_than_20_MB() -> None:
    done = subprocess.run([sys.executable, "-c", _LEAK], cwd=ROOT, capture_output=True, text=True, check=True)
    assert float(done.stdout) < 20, done.stdout
