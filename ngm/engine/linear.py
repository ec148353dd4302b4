"""Matrix algebra that takes doubles and balls alike: one formula, two kinds of numbers."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
from flint import arb, arb_mat
from scipy.linalg.lapack import dgetrf, dgetrs

from ngm.engine.balls import Array, BallArray, from_mat, is_balls, nearest, to_mat

__all__ = [
    "below_zero",
    "dominant_solve",
    "identity",
    "leaf_inverse",
    "matmul",
    "pattern",
    "possible",
    "solve",
    "square",
    "value",
    "zeros",
]

BoolArray = npt.NDArray[np.bool_]

#: Systems up to this size are solved in balls throughout.
_FEW = 40


def square(matrix: Array, name: str = "matrix") -> Array:
    """Return `matrix` as an array of balls or of doubles; raise ValueError where it is not square or not finite."""
    array = np.asarray(matrix)
    if array.ndim != 2 or array.shape[0] != array.shape[1]:
        raise ValueError(f"{name} is not square: its shape is {array.shape}")
    if is_balls(array):
        if not all(isinstance(v, arb) for v in array.ravel()):
            raise ValueError(f"{name} holds something that is no ball")
        if not all(v.is_finite() for v in array.ravel()):
            raise ValueError(f"{name} has an entry that is not finite")
        return array
    floats = array.astype(float)
    if not np.all(np.isfinite(floats)):
        raise ValueError(f"{name} has an entry that is not finite")
    return floats


def pattern(matrix: Array) -> BoolArray:
    """Return where the entries are proven not to be zero (doubles: where they are not 0)."""
    if is_balls(matrix):
        return np.array([bool(v > 0 or v < 0) for v in matrix.ravel()], dtype=bool).reshape(matrix.shape)
    return np.asarray(matrix != 0)


def possible(matrix: Array) -> BoolArray:
    """Return where the entries are not proven to be zero (doubles: where they are not 0)."""
    if is_balls(matrix):
        return np.array([not v.is_zero() for v in matrix.ravel()], dtype=bool).reshape(matrix.shape)
    return np.asarray(matrix != 0)


def below_zero(matrix: Array) -> BoolArray:
    """Return where the entries are proven to be negative (doubles: where they are)."""
    if is_balls(matrix):
        return np.array([bool(v < 0) for v in matrix.ravel()], dtype=bool).reshape(matrix.shape)
    return np.asarray(matrix < 0)


def zeros(shape: tuple[int, ...], like: Array) -> Array:
    """Return exact zeros of the kind of `like`."""
    if is_balls(like):
        result = np.empty(shape, dtype=object)
        result.ravel()[:] = [arb(0)] * int(np.prod(shape))
        return result
    return np.zeros(shape)


def identity(size: int, like: Array) -> Array:
    """Return the (size, size) identity of the kind of `like`."""
    result = zeros((size, size), like)
    for i in range(size):
        result[i, i] = arb(1) if is_balls(like) else 1.0
    return result


def matmul(left: Array, right: Array) -> Array:
    """Return the product; an entry that is a sum of products with an exact zero each is an exact zero."""
    if not is_balls(left):
        return np.asarray(left @ right)
    column = right.ndim == 1
    product: BallArray = from_mat(to_mat(left) * to_mat(right))
    # The library's product of large matrices works in blocks and may smear a rounding error over an exact zero.
    there = possible(left).astype(np.float32) @ possible(right.reshape(len(right), -1)).astype(np.float32)
    for i, j in zip(*np.nonzero(there == 0), strict=True):
        product[i, j] = arb(0)
    return product[:, 0] if column else product


def solve(matrix: Array, right: Array) -> Array:
    """Return X with matrix X = right; raise ZeroDivisionError where the matrix is not proven to be invertible."""
    if is_balls(matrix):
        result = from_mat(to_mat(matrix).solve(to_mat(right)))
        return result[:, 0] if right.ndim == 1 else result
    try:
        return np.asarray(np.linalg.solve(matrix, right))
    except np.linalg.LinAlgError as error:
        raise ZeroDivisionError("the matrix is singular") from error


def dominant_solve(matrix: BallArray, right: BallArray) -> BallArray:
    """Return balls around the x with A x = b, for a non-singular M-matrix A with rows of similar size.

    With v > 0 and A v >= m > 0, A^-1 1 <= v / m, so that an approximate x is off by at most max|b - A x| v / m entry
    by entry. x and v come from one factorisation in doubles, x refined with residuals in balls: some n^2 steps in
    balls instead of n^3.

    Raises
    ------
    ZeroDivisionError
        A is not proven to be invertible.
    """
    size = len(matrix)
    if size > _FEW:
        with np.errstate(all="ignore"):
            floats = np.array([float(v) for v in matrix.ravel()]).reshape(matrix.shape)
            factors, order, failed = dgetrf(floats.T)
        if not failed:
            found = _refined_solution(to_mat(matrix), to_mat(right), factors, order)
            if found is not None:
                return found
    return np.asarray(solve(matrix, right))


def _refined_solution(exact: arb_mat, right: arb_mat, factors: Any, order: Any) -> BallArray | None:
    size = exact.nrows()

    def quick(numbers: list[arb]) -> list[arb] | None:
        largest = max((abs(v.mid()) for v in numbers), key=lambda v: v)
        if largest.is_zero():
            return None
        solution, _ = dgetrs(factors, order, np.array([float(v.mid() / largest) for v in numbers]), trans=1)
        return [(arb(float(v)) * largest).mid() for v in solution] if np.all(np.isfinite(solution)) else None

    weights = quick([arb(1)] * size)
    if weights is None or not all(v > 0 for v in weights):
        return None
    least = min((v.lower() for v in (exact * arb_mat(size, 1, weights)).entries()), key=lambda v: v)
    if not least > 0:
        return None
    x = [arb(0)] * size
    best: arb | None = None
    for _ in range(40):
        residual = (right - exact * arb_mat(size, 1, x)).entries()
        error = max((abs(v).upper() for v in residual), key=lambda v: v)
        if best is not None and not error < best / 16:
            break
        best, kept = error, x
        correction = quick(residual)
        if correction is None:
            break
        x = [(v + c).mid() for v, c in zip(x, correction, strict=True)]
    assert best is not None
    result = np.empty(size, dtype=object)
    result[:] = [v + arb(0, best * w / least) for v, w in zip(kept, weights, strict=True)]
    return result


def leaf_inverse(matrix: Array) -> Array:
    """Return the inverse of one block; raise ZeroDivisionError where it is not proven to be invertible."""
    if is_balls(matrix):
        if len(matrix) == 1:
            entry = matrix[0, 0]
            if not (entry > 0 or entry < 0):
                raise ZeroDivisionError("the matrix is singular")
            return np.array([[1 / entry]], dtype=object)
        return from_mat(to_mat(matrix).inv())
    try:
        return np.asarray(np.linalg.inv(matrix))
    except np.linalg.LinAlgError as error:
        raise ZeroDivisionError("the matrix is singular") from error


def value(number: Any) -> float:
    """Return a ball or a number as a double."""
    return nearest(number) if isinstance(number, arb) else float(number)
