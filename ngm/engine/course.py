"""Flows followed in time: stiff systems by a stiff solver, with the slope of the flows, sparse where it is large.

Also what is read off such a course: the growth at its end, and how far the mix of types is from another.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

__all__ = ["CourseFailedError", "followed", "growth_at_end", "mix_gap", "settling", "stepped"]

FloatArray = npt.NDArray[np.float64]
Field = Callable[[float, FloatArray], FloatArray]

#: Components past which the slope is handed over as a sparse matrix.
SPARSE = 60
TOLERANCE = 1e-9


class CourseFailedError(Exception):
    """The solver gave up; the message says where."""


def followed(
    field: Field, slope: Field, start: FloatArray, times: FloatArray, sizes: FloatArray, breaks: Sequence[float] = ()
) -> FloatArray:
    """Return the states at times, (k, n), of x' = field(t, x) from `start` at the first of them.

    Parameters
    ----------
    slope : callable
        (n, n) derivative of the field by x.
    times : (k,) array
        Rising.
    sizes : (n,) array
        What counts as small: errors are kept below a billionth of it, or of the component where that is larger.
    breaks : sequence of float
        Where the field may jump: no step crosses one.

    Raises
    ------
    CourseFailedError
        The solver gave up.
    """
    from scipy.integrate import solve_ivp
    from scipy.sparse import csc_matrix

    large = len(start) > SPARSE

    def jac(t: float, x: FloatArray) -> Any:
        J = slope(t, x)
        return csc_matrix(J) if large else J

    out = [start]
    inner = [b for b in breaks if times[0] < b < times[-1]]
    x, begin, done = start, float(times[0]), 1
    for end in [*inner, float(times[-1])]:
        wanted = times[done:][times[done:] <= end]
        points = wanted if len(wanted) and wanted[-1] == end else np.append(wanted, end)
        # Seen from within the piece: at its ends the field is that of the piece, not that of its neighbour.
        low, high = np.nextafter(begin, end), np.nextafter(end, begin)
        run = solve_ivp(
            lambda t, y, low=low, high=high: field(min(max(t, low), high), y),
            (begin, end),
            x,
            method="BDF" if large else "LSODA",
            jac=jac,
            t_eval=points,
            rtol=TOLERANCE,
            atol=TOLERANCE * sizes,
        )
        if run.status != 0 or not np.all(np.isfinite(run.y)):
            raise CourseFailedError(
                f"the flows could not be followed past time {run.t[-1] if len(run.t) else begin:.6g}."
            )
        out += list(run.y.T[: len(wanted)])
        x, begin, done = run.y[:, -1], end, done + len(wanted)
    return np.array(out)


def stepped(field: Callable[[FloatArray], FloatArray], start: FloatArray, steps: int) -> FloatArray:
    """Return the states of x <- x + field(x) at steps 0, 1, ..., (steps + 1, n)."""
    out = [start]
    for _ in range(steps):
        out.append(out[-1] + field(out[-1]))
    return np.array(out)


def growth_at_end(times: FloatArray, infected: FloatArray, since: float) -> float | None:
    """Return the mean growth rate of all infected together from the time `since` to the end; None where none is left."""
    total = infected.sum(axis=1)
    first = int(np.searchsorted(times, since))
    first = min(first, len(times) - 2)
    if total[first] <= 0 or total[-1] <= 0:
        return None
    return float(math.log(total[-1] / total[first]) / (times[-1] - times[first]))


def mix_gap(mix: FloatArray, expected: FloatArray) -> float:
    """Return half of the sum of differences between two mixes: 0 the same, 1 nothing in common."""
    return float(np.abs(mix - expected).sum() / 2)


def settling(matrix: FloatArray, start: FloatArray, depth: float) -> tuple[float, float, FloatArray | None]:
    """Return growth rate, mix and the time until a start has settled into them, for x' = matrix x.

    Parameters
    ----------
    matrix : (m, m) array
        Non-negative off its diagonal, per time unit.
    start : (m,) array of bool
        Where infection starts: what it never reaches is left out.
    depth : float
        Other modes have then fallen behind the leading one by a factor of exp(depth).

    Returns
    -------
    (float, float, array or None)
        Growth rate per time unit; time (inf where the leading mode is not alone); mix, sums to 1 over all types (None then).
    """
    reached = start.copy()
    while True:
        more = reached | np.any((matrix != 0)[:, reached], axis=1)
        if np.array_equal(more, reached):
            break
        reached = more
    at = np.flatnonzero(reached)
    values, vectors = np.linalg.eig(matrix[np.ix_(at, at)])
    order = np.argsort(-values.real)
    rate = float(values[order[0]].real)
    # One type alone has its mix from the start: what is waited for is growth or decline that can be seen.
    gap = rate - float(values[order[1]].real) if len(values) > 1 else 2 * abs(rate) or 1.0
    size = max(1e-300, float(np.abs(values).max()))
    if gap <= 1e-9 * size:
        return rate, math.inf, None
    vector = np.real(vectors[:, order[0]])
    mix = np.zeros(len(matrix))
    mix[at] = np.maximum(vector / vector.sum(), 0.0)
    return rate, depth / gap, mix / mix.sum()
