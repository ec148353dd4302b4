"""Elementwise arithmetic on arrays of sympy expressions."""

from __future__ import annotations

from fractions import Fraction
from typing import Any

import numpy as np
import sympy

from ngm.derivation.evaluate import Algebra
from ngm.derivation.space import Array

__all__ = ["SYMBOLS"]

_FUNCTIONS: dict[str, Any] = {
    "exp": sympy.exp,
    "log": sympy.log,
    "sqrt": sympy.sqrt,
    "max": sympy.Max,
    "min": sympy.Min,
}


class _Symbols:
    dtype: type = object

    def number(self, value: Fraction) -> object:
        return sympy.Rational(value.numerator, value.denominator)

    def add(self, a: Array, b: Array) -> Array:
        return np.asarray(a + b)

    def subtract(self, a: Array, b: Array) -> Array:
        return np.asarray(a - b)

    def multiply(self, a: Array, b: Array) -> Array:
        return np.asarray(a * b)

    def divide(self, a: Array, b: Array) -> Array:
        return np.asarray(a / b)

    def power(self, a: Array, b: Array) -> Array:
        return np.asarray(a**b)

    def call(self, function: str, arguments: tuple[Array, ...]) -> Array:
        return np.asarray(np.frompyfunc(_FUNCTIONS[function], len(arguments), 1)(*arguments))

    def matmul(self, a: Array, b: Array) -> Array:
        return np.asarray(a @ b)


SYMBOLS: Algebra = _Symbols()
