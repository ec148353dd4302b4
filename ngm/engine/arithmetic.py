"""Elementwise arithmetic on arrays of balls, in the shape in which the derivation asks for it."""

from __future__ import annotations

from fractions import Fraction
from typing import Any

import numpy as np

from ngm.engine.balls import BALLS, BallArray, ball
from ngm.engine.linear import matmul

__all__ = ["BALL_ARITHMETIC", "BallArithmetic"]


class BallArithmetic:
    """Balls: what has no value comes out as a ball that is not finite."""

    dtype: type = object

    def number(self, value: Fraction) -> object:
        """Return an exact number as a ball."""
        return ball(value)

    def add(self, a: BallArray, b: BallArray) -> BallArray:
        """Return the enclosure of a + b."""
        return np.asarray(a + b)

    def subtract(self, a: BallArray, b: BallArray) -> BallArray:
        """Return the enclosure of a - b."""
        return np.asarray(a - b)

    def multiply(self, a: BallArray, b: BallArray) -> BallArray:
        """Return the enclosure of a * b."""
        return np.asarray(a * b)

    def divide(self, a: BallArray, b: BallArray) -> BallArray:
        """Return the enclosure of a / b, not finite where b may be 0."""
        return np.asarray(a / b)

    def power(self, a: BallArray, b: BallArray) -> BallArray:
        """Return the enclosure of a to the power of b."""
        return np.asarray(BALLS.power(a, b))

    def call(self, function: str, arguments: tuple[BallArray, ...]) -> BallArray:
        """Return exp, log, sqrt, max or min of the arguments."""
        functions: dict[str, Any] = {
            "exp": BALLS.exp,
            "log": BALLS.log,
            "sqrt": BALLS.sqrt,
            "max": BALLS.maximum,
            "min": BALLS.minimum,
        }
        return np.asarray(functions[function](*arguments))

    def matmul(self, a: BallArray, b: BallArray) -> BallArray:
        """Return the enclosure of the product of two matrices."""
        return np.asarray(matmul(a, b))


BALL_ARITHMETIC = BallArithmetic()
