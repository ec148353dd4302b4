"""Matrix algebra that takes doubles and balls alike: one formula, two kinds of numbers."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
from flint import arb

from ngm.engine.balls import Array, BallArray, from_mat, is_balls, nearest, to_mat

__all__ = [
    "below_zero",
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
