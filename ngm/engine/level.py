"""Where a function on a grid passes a level: the line between what lies above and what lies below."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

__all__ = ["Piece", "level_line"]

#: One straight piece of a line: (x, y) of its two ends.
Piece = tuple[tuple[float, float], tuple[float, float]]


def level_line(x: npt.ArrayLike, y: npt.ArrayLike, z: npt.ArrayLike, level: float) -> tuple[Piece, ...]:
    """Return the pieces of the line z = level, one or two in each cell of the grid that it crosses.

    On the sides of a cell z is taken as linear. Where opposite corners lie on the same side of the level, the mean of
    the four decides which of them are joined. A corner at the level counts as below it.

    Parameters
    ----------
    x : (m,) array of float
    y : (n,) array of float
        Both increasing.
    z : (n, m) array of float
        Row: y, column: x. A cell with a corner that is not finite has no piece.
    level : float

    Raises
    ------
    ValueError
        z does not fit to x and y.

    Examples
    --------
    >>> level_line([0, 1], [0, 1], [[0, 2], [0, 2]], 1)
    (((0.5, 0.0), (0.5, 1.0)),)
    """
    xs, ys, table = (np.asarray(values, dtype=float) for values in (x, y, z))
    if table.shape != (len(ys), len(xs)):
        raise ValueError(f"z has shape {table.shape}, and there are {len(ys)} y and {len(xs)} x")
    rest = table - level
    out: list[Piece] = []
    for i in range(len(ys) - 1):
        for j in range(len(xs) - 1):
            # The corners and sides in turn: below, right, above, left.
            corners = [(i, j), (i, j + 1), (i + 1, j + 1), (i + 1, j)]
            values = [float(rest[corner]) for corner in corners]
            if not np.all(np.isfinite(values)):
                continue
            above = [value > 0 for value in values]
            crossed = [k for k in range(4) if above[k] != above[(k + 1) % 4]]
            points = {k: _between(xs, ys, rest, corners[k], corners[(k + 1) % 4]) for k in crossed}
            if len(crossed) == 2:
                out.append((points[crossed[0]], points[crossed[1]]))
            elif len(crossed) == 4:
                joined = (sum(values) > 0) == above[0]
                first, second = ((0, 1), (2, 3)) if joined else ((3, 0), (1, 2))
                out += [(points[first[0]], points[first[1]]), (points[second[0]], points[second[1]])]
    return tuple(out)


def _between(
    xs: npt.NDArray[np.float64],
    ys: npt.NDArray[np.float64],
    rest: npt.NDArray[np.float64],
    a: tuple[int, int],
    b: tuple[int, int],
) -> tuple[float, float]:
    """Return where the line from corner a to corner b passes 0."""
    share = float(rest[a] / (rest[a] - rest[b]))
    return (
        float(xs[a[1]] + share * (xs[b[1]] - xs[a[1]])),
        float(ys[a[0]] + share * (ys[b[0]] - ys[a[0]])),
    )
