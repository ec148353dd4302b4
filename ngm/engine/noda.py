"""The Perron vector of one irreducible matrix, in doubles: scaling first, then Noda's iteration.

A matrix comes as mantissas and binary exponents, so that entries of any size can be scaled without rounding.
"""

from __future__ import annotations

import math
import sys
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from flint import arb
from scipy.linalg import matrix_balance
from scipy.linalg.lapack import dgetrf, dgetrs

from ngm.engine.balls import Array, FloatArray, is_balls
from ngm.engine.structure import classes

__all__ = ["Scaled", "float_bounds", "perron_vector", "scaled"]

IntArray = npt.NDArray[np.int64]

_UNIT = 2.0**-53
_TINY = 5e-324
#: Scaling by longest paths takes size^3 steps: past this size rows and columns are balanced instead.
_LARGE = 600


@dataclass(frozen=True, eq=False)
class Scaled:
    """An irreducible matrix B with matrix[i, j] = B[i, j] 2^(exponents[j] - exponents[i] - shift), but for underflow.

    x is a right Perron vector of `matrix` exactly where 2^exponents x is one of B, and the root of B is 2^shift times
    as large.
    """

    matrix: FloatArray
    exponents: IntArray
    shift: int


def parts(matrix: Array) -> tuple[FloatArray, IntArray]:
    """Return mantissas in [0.5, 1) and exponents of the entries (of the midpoints of balls)."""
    if not is_balls(matrix):
        mantissas, exponents = np.frexp(matrix.astype(float))
        return mantissas, exponents.astype(np.int64)
    floats = np.array([float(v) for v in matrix.ravel()])
    mantissas, exponents = np.frexp(floats)
    exponents = exponents.astype(np.int64)
    for k in np.nonzero(~np.isfinite(floats) | (np.abs(floats) < 1e-300))[0]:
        middle: arb = matrix.ravel()[k].mid()
        if middle.is_zero():
            continue
        whole, power = middle.man_exp()
        length = abs(int(whole)).bit_length()
        mantissas[k] = math.ldexp(int(whole) >> max(0, length - 60), -min(length, 60))
        exponents[k] = int(power) + length
    return mantissas.reshape(matrix.shape), exponents.reshape(matrix.shape)


def scaled(matrix: Array) -> Scaled:
    """Return an irreducible non-negative matrix scaled so that its row sums are near its root.

    With m the largest geometric mean of the entries along a cycle (Karp's algorithm) and d the longest paths from
    such a cycle in log2(B) - m, the largest entry of every row of the scaled matrix is 2^m up to rounding, which is
    at most the root; so the row sums and the root lie between 2^m and n 2^m.

    References
    ----------
    Karp (1978) Discrete Math. 23:309-311 (from memory).
    """
    size = len(matrix)
    mantissas, powers = parts(matrix)
    there = mantissas > 0
    logs = np.full(mantissas.shape, -np.inf)
    logs[there] = np.log2(mantissas[there]) + powers[there]
    sums = np.logaddexp2.reduce(logs, axis=1)
    exponents = np.zeros(size, dtype=np.int64)
    shift = int(np.floor(sums.max()))
    if sums.max() - sums.min() > 4:
        if size <= _LARGE:
            mean, path = _longest_paths(logs)
            exponents = np.rint(path).astype(np.int64)
            shift = int(np.rint(mean))
        else:
            rough = np.ldexp(mantissas, np.clip(powers - shift, -1070, 1000))
            _, (weights, _) = matrix_balance(rough, permute=False, separate=True)
            exponents = np.rint(np.log2(weights)).astype(np.int64)
    by = powers + exponents[None, :] - exponents[:, None] - shift
    return Scaled(np.ldexp(mantissas, np.clip(by, -5000, 1000)), exponents, shift)


def _longest_paths(logs: FloatArray) -> tuple[float, FloatArray]:
    """Return the largest mean over cycles, and the longest paths once it is taken off each arrow.

    The paths start on a cycle that attains the mean: then each type is reached by an arrow of full weight, the first
    too.
    """
    size = len(logs)
    walks = _walks(logs, 0)
    left = (size - np.arange(size))[:, None]
    with np.errstate(invalid="ignore"):
        means = (walks[size][None, :] - walks[:size]) / left
    means[~np.isfinite(walks[:size])] = np.inf
    lowest = means.min(axis=0)
    mean = float(lowest[np.isfinite(lowest)].max())
    lengths = mean * np.arange(size)[:, None]
    path = (walks[:size] - lengths).max(axis=0)
    tight = logs - mean + path[None, :] - path[:, None] > -1e-7
    for members in classes(tight):
        first = int(members[0])
        if len(members) > 1 or tight[first, first]:
            return mean, np.asarray((_walks(logs, first)[:size] - lengths).max(axis=0))
    return mean, np.asarray(path)


def _walks(logs: FloatArray, start: int) -> FloatArray:
    """Return [k, i]: the largest weight of a walk of k arrows from `start` to i."""
    size = len(logs)
    walks = np.full((size + 1, size), -np.inf)
    walks[0, start] = 0.0
    for step in range(size):
        np.max(logs + walks[step][None, :], axis=1, out=walks[step + 1])
    return walks


def perron_vector(matrix: FloatArray, most_steps: int = 60) -> FloatArray:
    """Return a positive vector near the right Perron vector of an irreducible scaled matrix, its largest entry 1.

    Noda's iteration: with s the largest quotient (B x)_i / x_i, the next x solves (s I - B) y = x. It stays positive, s
    falls to the root and at last quadratically, periodic matrices included. The best vector seen is returned.

    References
    ----------
    Noda (1971) Numer. Math. 17:382-386; Elsner (1976) Linear Algebra Appl. 15:235-242 (from memory).
    """
    size = len(matrix)
    x = _power_steps(matrix)
    best, best_gap, idle = x, math.inf, 0
    for _ in range(most_steps):
        quotients = (matrix @ x) / x
        high = float(quotients.max())
        gap = (high - float(quotients.min())) / high if high > 0 else math.inf
        if gap < best_gap:
            idle = 0 if gap < 0.9 * best_gap else idle + 1
            best, best_gap = x, gap
        else:
            idle += 1
        if gap <= 4 * size**0.5 * _UNIT or idle > 12 or (idle > 3 and best_gap < 1e-12):
            break
        y = x * _dominant_solve(high * (1 + 2 * _UNIT) * np.eye(size) - matrix * x[None, :] / x[:, None])
        if not np.all(np.isfinite(y)) or not np.all(y > 0):
            break
        x = np.maximum(y / y.max(), 1e-290)
    return np.asarray(best)


def _power_steps(matrix: FloatArray, most_steps: int = 40) -> FloatArray:
    """Return the vector after some steps of B + c I, as long as each narrows the quotients by a third."""
    x = np.ones(len(matrix))
    last = math.inf
    for _ in range(most_steps):
        images = matrix @ x
        quotients = images / x
        high = float(quotients.max())
        gap = high - float(quotients.min())
        if not 0 < gap < 0.7 * last:
            break
        last = gap
        x = images + 0.1 * high * x
        x = np.maximum(x / x.max(), 1e-290)
    return x


def _dominant_solve(matrix: FloatArray) -> FloatArray:
    """Return x with matrix x = 1 for a matrix whose diagonal outweighs the rest of each row.

    The transpose is factored: there the largest entry of a column is its diagonal one, so that no rows are exchanged
    and an M-matrix is eliminated without cancellation off the diagonal. Small entries of x keep their digits.
    """
    factors, order, failed = dgetrf(matrix.T)
    if failed:
        return np.full(len(matrix), np.nan)
    solution, _ = dgetrs(factors, order, np.ones(len(matrix)), trans=1)
    return np.asarray(solution)


def float_bounds(scaling: Scaled, x: FloatArray) -> tuple[float, float]:
    """Return proven bounds (low, high) on the root of the scaled matrix, from a positive vector.

    min (B x)_i / x_i <= rho <= max (B x)_i / x_i (Collatz-Wielandt). A sum of n products of non-negative doubles is
    off by at most n u / (1 - n u) of itself, u = 2^-53, and n times the smallest double where products underflow; the
    quotients are rounded outward on top. A scaled entry that underflowed is off by the smallest double, too.
    """
    size = len(x)
    sums = scaling.matrix @ x
    share = (size + 2) * _UNIT / (1 - (size + 2) * _UNIT)
    spare = 4 * (size + 1) * _TINY
    low = float(np.min(np.nextafter(np.maximum(sums * (1 - 2 * share) - spare, 0.0) / x, -np.inf)))
    high = float(np.max(np.nextafter((sums * (1 + 2 * share) + spare) / x, np.inf)))
    with np.errstate(over="ignore", under="ignore"):
        down = float(np.ldexp(max(low, 0.0), scaling.shift))
        up = float(np.ldexp(high, scaling.shift))
    # Scaling back by a power of two is exact unless the result leaves the range of normal doubles.
    if down < 1e-300:
        down = math.nextafter(down, 0.0)
    return min(down, sys.float_info.max), math.nextafter(up, math.inf) if up < 1e-300 else up
