"""Whole processes: what a person waits for who types a command, against what the general libraries cost to start."""

from __future__ import annotations

import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

__all__ = ["rows"]

Row = tuple[str, str, str]
SCENARIOS = Path(__file__).parents[2] / "scenarios"
#: What one would import to derive and compute this by hand.
BY_HAND = "import numpy, scipy.linalg, scipy.optimize, sympy"


def seconds(*command: str, runs: int = 3) -> float:
    """Return the shortest time of some runs of a Python process, after one that is not counted."""
    taken = []
    for _ in range(runs + 1):
        start = time.perf_counter()
        subprocess.run([sys.executable, *command], check=True, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
        taken.append(time.perf_counter() - start)
    return min(taken[1:])


def rows() -> list[Row]:
    """Return what was compared, the ratio or figure, and the bound it has to keep."""
    libraries = seconds("-c", BY_HAND)
    seir = str(SCENARIOS / "seir-velmar-fever.toml")
    out = []
    solve = seconds("-m", "ngm", "solve", seir)
    out.append(
        (f"`solve`, SEIR, as a process / a process that does `{BY_HAND}` only", f"{solve / libraries:.2f}", "2"),
    )
    slowest = max((seconds("-m", "ngm", "solve", str(path), runs=1), path.stem) for path in SCENARIOS.glob("*.toml"))
    out.append((f"`solve` as a process, slowest of the examples ({slowest[1]})", f"{slowest[0]:.2f} s", "2 s"))
    with tempfile.TemporaryDirectory() as folder:
        for ending in (".html", ".docx", ".pdf"):
            report = seconds("-m", "ngm", "report", seir, "--to", f"{folder}/r{ending}", runs=1)
            out.append(
                (f"`report`, SEIR, {ending} / `solve`, as processes", f"{report / solve:.1f}; {report:.1f} s", "")
            )
    peak = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss * 1024 / 1e6
    out.append(("largest memory of one of these processes", f"{peak:.0f} MB", "500 MB"))
    return out
