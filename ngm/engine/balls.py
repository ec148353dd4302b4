"""Numbers with proven error bounds: arrays of balls (FLINT's arb) and their way from and to doubles.

A ball [m +/- r] encloses a real number; every operation on balls encloses the exact result, rounding included. A matrix
of balls is an (n, m) numpy array of dtype object that holds `flint.arb`. Where a ball is too wide to decide
something, the computation is done again inside `precision(bits)` with more bits.

Source: Johansson (2017) IEEE Trans. Comput. 66:1281-1292 (Arb), cited from memory.
"""

from __future__ import annotations

import math
import re
import threading
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from fractions import Fraction
from typing import Any

import numpy as np
import numpy.typing as npt
from flint import arb, arb_mat, ctx, fmpq, fmpz

__all__ = [
    "BALLS",
    "MOST_PRECISION",
    "PRECISION",
    "Array",
    "BallArray",
    "BallFunctions",
    "FloatArray",
    "arb",
    "ball",
    "balls",
    "contains_zero",
    "from_mat",
    "interval",
    "is_balls",
    "is_finite",
    "is_sharp",
    "is_zero",
    "nearest",
    "outward",
    "precision",
    "sign",
    "to_floats",
    "to_mat",
]

FloatArray = npt.NDArray[np.float64]
BallArray = npt.NDArray[np.object_]
#: Either of the two.
Array = npt.NDArray[Any]

#: Working precision in bits at first, and the most that anybody should ask for.
PRECISION = 128
MOST_PRECISION = 2048

_lock = threading.RLock()
_DECIMAL = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d{1,6})?")


@contextmanager
def precision(bits: int = PRECISION) -> Iterator[None]:
    """Compute with `bits` bits inside the block. One thread at a time: the precision is the library's, not ours."""
    with _lock:
        before = ctx.prec
        ctx.prec = int(bits)
        try:
            yield
        finally:
            ctx.prec = before


def ball(number: Fraction | int | str | float | arb) -> arb:
    """Return a ball that encloses `number` exactly, as narrow as the working precision allows.

    Parameters
    ----------
    number : Fraction, int, str, float or arb
        A text is a decimal number (``"0.1"`` is one tenth, not the double nearest to it); a float stands for itself.

    Raises
    ------
    ValueError
        The text is no decimal number, or the float is not finite.
    """
    if isinstance(number, arb):
        return number
    if isinstance(number, str):
        if not _DECIMAL.fullmatch(number.strip()):
            raise ValueError(f"not a decimal number: {number[:40]!r}")
        return arb(number.strip())
    if isinstance(number, Fraction):
        return arb(fmpq(number.numerator, number.denominator))
    if isinstance(number, int):
        return arb(fmpz(number))
    if not math.isfinite(number):
        raise ValueError(f"not a finite number: {number}")
    return arb(float(number))


def balls(values: Any) -> BallArray:
    """Return an array of balls of the same shape as `values` (nested sequences, or an array of numbers or balls)."""
    source = np.array(values, dtype=object)
    result = np.empty(source.shape, dtype=object)
    result.ravel()[:] = [ball(v.item() if isinstance(v, np.generic) else v) for v in source.ravel()]
    return result


def is_balls(values: Array) -> bool:
    """Return whether the array holds balls (dtype object) and not doubles."""
    return bool(values.dtype == np.object_)


def interval(low: arb | float, high: arb | float) -> arb:
    """Return a ball that encloses everything from `low` to `high`."""
    return arb(low).union(arb(high))


def nearest(number: arb) -> float:
    """Return the double nearest to the midpoint; 0.0 for a ball that contains zero.

    It is the double nearest to the truth wherever `is_sharp` says so.
    """
    return 0.0 if contains_zero(number) else float(number.mid())


def is_sharp(number: arb) -> bool:
    """Return whether all of the ball rounds to one double (so that `nearest` is right to the last bit)."""
    if not number.is_finite():
        return False
    below, above = _ends(number)
    return float(below) == float(above)


def outward(number: arb) -> tuple[float, float]:
    """Return the largest double below and the smallest above the ball: (low, high) enclose all of it."""
    below, above = _ends(number)
    low, high = float(below), float(above)
    if arb(low) > below:
        low = math.nextafter(low, -math.inf)
    if arb(high) < above:
        high = math.nextafter(high, math.inf)
    return low, high


def _ends(number: arb) -> tuple[arb, arb]:
    """Return both ends of the ball, not widened by a working precision below that of the ball."""
    with precision(2 * MOST_PRECISION):
        return number.lower(), number.upper()


def is_zero(number: arb) -> bool:
    """Return whether the number is proven to be 0: midpoint and radius both are."""
    return bool(number.is_zero())


def contains_zero(number: arb) -> bool:
    """Return whether the number may be 0. True for what is not finite."""
    return not (number > 0 or number < 0)


def is_finite(values: Array) -> bool:
    """Return whether every entry is a finite number."""
    if is_balls(values):
        return all(bool(v.is_finite()) for v in values.ravel())
    return bool(np.all(np.isfinite(values.astype(float))))


def sign(number: arb) -> int | None:
    """Return 1, -1 or 0 where the sign is proven, None where the ball straddles zero."""
    if number > 0:
        return 1
    if number < 0:
        return -1
    return 0 if number.is_zero() else None


def to_mat(values: BallArray) -> arb_mat:
    """Return an (n, m) array of balls, or an (n,) one as a column, as the library's matrix."""
    rows = values.shape[0]
    columns = values.shape[1] if values.ndim == 2 else 1
    return arb_mat(rows, columns, values.ravel().tolist())


def from_mat(matrix: arb_mat) -> BallArray:
    """Return the library's matrix as an (n, m) array of balls."""
    result = np.empty(matrix.nrows() * matrix.ncols(), dtype=object)
    result[:] = matrix.entries()
    return result.reshape(matrix.nrows(), matrix.ncols())


def to_floats(values: Array | Sequence[arb]) -> FloatArray:
    """Return an array of doubles, each the nearest to its ball (`nearest`); doubles come back as they are."""
    array = np.asarray(values)
    if not is_balls(array):
        return np.array(array, dtype=float)
    return np.array([nearest(v) for v in array.ravel()], dtype=float).reshape(array.shape)


def _nonnegative(x: arb) -> arb:
    """Cut what lies below 0 off a ball that straddles it; a ball proven negative stays."""
    return x if x < 0 else x.nonnegative_part()


def _sqrt(x: Any) -> arb:
    return _nonnegative(ball(x)).sqrt()


def _power(base: Any, exponent: Any) -> arb:
    x, y = ball(base), ball(exponent)
    if y.is_exact() and y.is_integer():
        whole = y.unique_fmpz()
        if whole is not None:
            return x**whole
    if x < 0:
        return arb.nan()
    if x > 0 or x.is_zero() or not (y > 0):
        return x**y
    # The base may be 0 and is not negative: x^y grows with x, and is largest at one end of the exponent's ball.
    top = x.upper()
    return arb(0).union(top ** y.lower()).union(top ** y.upper())


def _elementwise(function: Callable[..., arb], inputs: int) -> Callable[..., Any]:
    applied: Callable[..., Any] = np.frompyfunc(function, inputs, 1)
    return applied


class BallFunctions:
    """The functions of the expression language on balls, elementwise on arrays of them (or on single ones).

    What has no value comes out as a ball that is not finite (`is_finite`): a negative base with a broken exponent, the
    logarithm of 0, a division by a ball that contains 0. The square root (and a power) of a ball that straddles 0 is
    that of its part from 0 up: such a ball arises where the exact value is 0.
    """

    number = staticmethod(ball)
    exp = staticmethod(_elementwise(lambda x: ball(x).exp(), 1))
    log = staticmethod(_elementwise(lambda x: ball(x).log(), 1))
    sqrt = staticmethod(_elementwise(_sqrt, 1))
    maximum = staticmethod(_elementwise(lambda x, y: ball(x).max(ball(y)), 2))
    minimum = staticmethod(_elementwise(lambda x, y: ball(x).min(ball(y)), 2))
    power = staticmethod(_elementwise(_power, 2))


BALLS = BallFunctions()
