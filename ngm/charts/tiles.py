"""The cells of a map over two quantities."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

__all__ = ["tiles"]


def tiles(
    xs: Sequence[float], ys: Sequence[float], numbers: Sequence[Sequence[float | None]]
) -> list[dict[str, float]]:
    """Return one row a cell that has a number: its edges x, x2, y, y2, its number R0, and where it was taken, ax, ay.

    A cell ends half-way to its neighbours, and at the outermost values themselves. `numbers`: a row for each of `ys`.
    """
    left, right = _edges(xs)
    low, high = _edges(ys)
    return [
        {"x": left[j], "x2": right[j], "y": low[i], "y2": high[i], "R0": R0, "ax": xs[j], "ay": ys[i]}
        for i, row in enumerate(numbers)
        for j, R0 in enumerate(row)
        if R0 is not None
    ]


def _edges(values: Sequence[float]) -> tuple[list[float], list[float]]:
    """Return where the cell of each value begins and ends."""
    half = [(b - a) / 2 for a, b in pairwise(values)]
    low = [values[0], *(value + step for value, step in zip(values, half, strict=False))]
    return low, [*low[1:], values[-1]]
