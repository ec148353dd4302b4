"""Final size and chance of a large outbreak for many groups, against the plain ways to the same solutions."""

from __future__ import annotations

import time
from collections.abc import Callable
from typing import Any

import numpy as np

from ngm.engine.chance import Events, extinction
from ngm.engine.final_size import final_size

__all__ = ["rows"]

Row = tuple[str, str, str]
GROUPS = 300
R0 = 1.01


def seconds(work: Callable[[], Any]) -> float:
    """Return the least time of three runs."""
    taken = []
    for _ in range(3):
        start = time.perf_counter()
        work()
        taken.append(time.perf_counter() - start)
    return min(taken)


def rows() -> list[Row]:
    """Return what was compared, the ratio or figure, and the bound it has to keep."""
    rng = np.random.default_rng(9)
    K = rng.uniform(size=(GROUPS, GROUPS)) ** 4
    K *= R0 / max(abs(np.linalg.eigvals(K)))
    sizes = rng.uniform(1e3, 1e5, GROUPS)
    A = K * sizes[None, :] / sizes[:, None]
    process = Events(K, np.zeros_like(K), np.ones(GROUPS))

    def steps_to_final_size() -> None:
        z = np.ones(GROUPS)
        while True:
            new = -np.expm1(-(A @ z))
            if np.max(np.abs(new - z)) < 1e-14:
                return
            z = new

    def steps_to_extinction() -> None:
        q = np.zeros(GROUPS)
        while True:
            new = process.image(q)
            if np.max(np.abs(new - q)) < 1e-14:
                return
            q = new

    size, chance = seconds(lambda: final_size(K, sizes)), seconds(lambda: extinction(process, GROUPS))
    plain_size, plain_chance = seconds(steps_to_final_size), seconds(steps_to_extinction)
    return [
        (f"final size with bounds, {GROUPS} groups", f"{size:.2f} s", "1 s"),
        (f"plain iteration to the final size / the same, R0 = {R0}", f"{plain_size / size:.2g}", ""),
        (f"chance of a large outbreak, {GROUPS} groups", f"{chance:.2f} s", "1 s"),
        (f"plain iteration to the chance / the same, R0 = {R0}", f"{plain_chance / chance:.2g}", ""),
    ]
