"""Arithmetic on short power series: what a formula does along a line through a state, to the second order.

Put x + e u in place of x and multiply out to e^2: the coefficient of e^2 is half of the second derivative along u. Nothing is
differenced, so nothing cancels: derivatives come as exactly as values do.

Source: Griewank & Walther (2008) Evaluating Derivatives, ch. 13 (from memory).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
import numpy.typing as npt

__all__ = ["SERIES", "Series", "SeriesArithmetic", "coefficient", "lines"]

FloatArray = npt.NDArray[np.float64]
ObjectArray = npt.NDArray[np.object_]
_NAN = float("nan")


@dataclass(frozen=True, slots=True)
class Series:
    """a + b e + c e^2; nan in all three where there is none."""

    a: float
    b: float = 0.0
    c: float = 0.0

    def __add__(self, other: Series) -> Series:
        return Series(self.a + other.a, self.b + other.b, self.c + other.c)

    def __sub__(self, other: Series) -> Series:
        return Series(self.a - other.a, self.b - other.b, self.c - other.c)

    def __mul__(self, other: Series) -> Series:
        return Series(
            self.a * other.a,
            self.a * other.b + self.b * other.a,
            self.a * other.c + self.b * other.b + self.c * other.a,
        )

    def over(self, other: Series) -> Series:
        """Return self / other."""
        if other.a == 0:
            return NOTHING
        first = self.a / other.a
        second = (self.b - first * other.b) / other.a
        return Series(first, second, (self.c - first * other.c - second * other.b) / other.a)

    def applied(self, value: float, first: float, second: float) -> Series:
        """Return f(self) for a function with this value and these two derivatives at `a`."""
        return Series(value, first * self.b, first * self.c + second * self.b * self.b / 2)

    def exp(self) -> Series:
        """Return exp(self)."""
        value = math.exp(self.a) if self.a < 700 else math.inf
        return self.applied(value, value, value)

    def log(self) -> Series:
        """Return the natural logarithm."""
        return self.applied(math.log(self.a), 1 / self.a, -1 / self.a**2) if self.a > 0 else NOTHING

    def power(self, exponent: Series) -> Series:
        """Return self to the power of another series."""
        if exponent.b or exponent.c:
            return (self.log() * exponent).exp()
        p = exponent.a
        if self.a == 0 or (self.a < 0 and p == int(p)):
            if p != int(p) or p < 0:
                # 0^p has the value 0, and a second derivative there only past the power 2
                return Series(0.0) if p > 2 else NOTHING
            out = Series(1.0)
            for _ in range(min(int(p), 60)):
                out = out * self
            return out
        if self.a < 0:
            return NOTHING
        value = self.a**p
        return self.applied(value, p * value / self.a, p * (p - 1) * value / self.a**2)


NOTHING = Series(_NAN, _NAN, _NAN)


class SeriesArithmetic:
    """Series in e: what has no series (a root of 0, a tie of max or min) comes out as not a number."""

    dtype: type = object

    def number(self, value: Fraction) -> object:
        """Return an exact number as a constant series."""
        return Series(float(value))

    def add(self, a: ObjectArray, b: ObjectArray) -> ObjectArray:
        """Return a + b."""
        return np.asarray(a + b)

    def subtract(self, a: ObjectArray, b: ObjectArray) -> ObjectArray:
        """Return a - b."""
        return np.asarray(a - b)

    def multiply(self, a: ObjectArray, b: ObjectArray) -> ObjectArray:
        """Return a * b."""
        return np.asarray(a * b)

    def divide(self, a: ObjectArray, b: ObjectArray) -> ObjectArray:
        """Return a / b."""
        return _each(Series.over, a, b)

    def power(self, a: ObjectArray, b: ObjectArray) -> ObjectArray:
        """Return a to the power of b."""
        return _each(Series.power, a, b)

    def call(self, function: str, arguments: tuple[ObjectArray, ...]) -> ObjectArray:
        """Return exp, log, sqrt, max or min of the arguments."""
        if function in ("max", "min"):
            sign = 1 if function == "max" else -1
            return _each(lambda x, y: _larger(x, y, sign), *arguments)
        half = Series(0.5)
        one: dict[str, Callable[[Any], Any]] = {
            "exp": Series.exp,
            "log": Series.log,
            "sqrt": lambda x: x.power(half) if x.a > 0 else NOTHING,
        }
        return _each(one[function], arguments[0])

    def matmul(self, a: ObjectArray, b: ObjectArray) -> ObjectArray:
        """Return the product of two matrices."""
        return np.asarray(np.dot(a, b))


def _each(operation: Callable[..., Any], *arrays: ObjectArray) -> ObjectArray:
    return np.asarray(np.frompyfunc(operation, len(arrays), 1)(*arrays), dtype=object)


def _larger(x: Series, y: Series, sign: int) -> Series:
    difference = (x.a - y.a) * sign
    if difference > 0:
        return x
    return y if difference < 0 else NOTHING


SERIES = SeriesArithmetic()


def lines(x: FloatArray, direction: FloatArray) -> ObjectArray:
    """Return the states x + e u, component by component, as series."""
    out = np.empty(len(x), dtype=object)
    out[:] = [Series(float(a), float(u)) for a, u in zip(x, direction, strict=True)]
    return out


def coefficient(values: ObjectArray, order: int) -> FloatArray:
    """Return the coefficients of e^order as doubles; nan where there is none."""
    flat = [(v.a, v.b, v.c)[order] for v in values.ravel()]
    return np.array(flat, dtype=float).reshape(values.shape)
