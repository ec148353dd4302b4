"""Large grouped models: the operator against Arnoldi on the same operator, against the dense way, and whole processes."""

from __future__ import annotations

import resource
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from scipy.sparse.linalg import LinearOperator, eigs

import ngm
from ngm.analysis.large import difference
from ngm.analysis.point import Point
from ngm.engine.large import NextGeneration, perron_pair
from tests.benchmarks.large_models import write_model

__all__ = ["rows"]

Row = tuple[str, str, str]


def median_of(runs: int, work: Callable[[], Any]) -> float:
    """Return the median of the seconds that some work takes, after one run that is not counted."""
    work()
    taken = []
    for _ in range(runs):
        start = time.perf_counter()
        work()
        taken.append(time.perf_counter() - start)
    return float(np.median(taken))


def operator_of(path: Path) -> NextGeneration:
    """Return K of a scenario as an operator."""
    point = Point(ngm.load(path))
    slopes = point.blocks
    return NextGeneration(slopes.F, difference(slopes.losses, slopes.gains), np.array(point.template.at_infection))


def rows() -> list[Row]:
    """Return what was compared, the ratio or figure, and the bound it has to keep."""
    out: list[Row] = []
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        K = operator_of(write_model(folder, 17, 300))
        n = len(K.at)
        start = np.full(n, 1.0 / n)

        def ours() -> None:
            root, x = perron_pair(K.__matmul__, start)
            K.bounds(K._settled(x, root))

        def plain() -> None:
            eigs(LinearOperator((n, n), matvec=K.__matmul__, dtype=float), k=1, v0=start, tol=1e-13)

        ratio = median_of(5, ours) / median_of(5, plain)
        out.append(
            ("R0 with proven bounds / scipy.sparse.linalg.eigs alone, 5,100 types at infection", f"{ratio:.2f}", "1.5")
        )
        out += dense(folder)
        for regions, seconds, memory in ((300, 10, 1.5), (1000, 60, 4.0)):
            taken, peak = whole_process(write_model(folder, 17, regions))
            what = f"`solve` as a whole process, 17 x {regions:,} x 4 = {17 * regions * 4:,} types"
            out.append((what, f"{taken:.1f} s, {peak:.2f} GB", f"{seconds} s, {memory} GB"))
    return out


def dense(folder: Path) -> list[Row]:
    """Compare with F V^-1 written out, at the largest size at which that is still bearable."""
    out = []
    for regions in (15, 30):
        K = operator_of(write_model(folder, 17, regions))
        F, V = (matrix @ np.eye(K.m) for matrix in (K.F, K.V))

        def written_out(F: np.ndarray = F, V: np.ndarray = V) -> None:
            np.max(np.abs(np.linalg.eigvals(F @ np.linalg.inv(V))))

        def applied(K: NextGeneration = K) -> None:
            start = np.full(len(K.at), 1.0 / len(K.at))
            root, x = perron_pair(K.__matmul__, start)
            K.bounds(K._settled(x, root))

        ratio = median_of(1, written_out) / median_of(3, applied)
        out.append((f"F V^-1 and its eigenvalues written out / the operator, {K.m:,} types", f"{ratio:.0f}", ""))
    size = 17 * 300 * 4
    out.append((f"memory of F, V and F V^-1 written out at {size:,} types", f"{3 * 8 * size**2 / 1e9:.0f} GB", ""))
    return out


def whole_process(path: Path) -> tuple[float, float]:
    """Return seconds and the largest memory (GB) of `solve` as a process of its own."""
    start = time.perf_counter()
    subprocess.run([sys.executable, "-m", "ngm", "solve", str(path), "--json"], check=True, stdout=subprocess.DEVNULL)
    taken = time.perf_counter() - start
    return taken, resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss * 1024 / 1e9
