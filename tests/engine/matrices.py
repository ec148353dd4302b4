"""Strategies for next-generation matrices: reducible, periodic and badly scaled ones too."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
from hypothesis import strategies as st

from ngm.engine import balls as b


def decimals(rows: list[list[str]]) -> npt.NDArray[Any]:
    """Return a matrix of decimal texts as balls."""
    return b.balls(rows)


def floats(rows: list[list[str]]) -> npt.NDArray[np.float64]:
    """Return a matrix of decimal texts as doubles."""
    return np.array([[float(v) for v in row] for row in rows])


@st.composite
def nonnegative(draw: st.DrawFn, least: int = 1, most: int = 5, scale: int = 9) -> list[list[str]]:
    """Matrices of decimal texts >= 0, many of them reducible or periodic, sizes from 10^-scale to 10^scale."""
    size = draw(st.integers(least, most))
    shape = draw(st.sampled_from(["full", "sparse", "cycle", "triangular"]))
    entry = st.builds(
        lambda digits, power: f"{digits}e{power}", st.integers(1, 99999), st.integers(-scale - 4, scale - 5)
    )
    rows = [["0"] * size for _ in range(size)]
    for i in range(size):
        for j in range(size):
            there = {
                "full": True,
                "sparse": draw(st.integers(0, 9)) < 4,
                "cycle": i == (j + 1) % size or (j == 0 and draw(st.integers(0, 9)) < 2),
                "triangular": i >= j,
            }[shape]
            if there:
                rows[i][j] = draw(entry)
    return rows
