"""Second derivatives by series against derivatives written down by hand."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ngm.engine.series import NOTHING, SERIES, Series, coefficient, lines

NUMBERS = st.floats(0.1, 5)


def second(value):
    return 2 * value.c


@given(x=NUMBERS, p=st.floats(-3, 3))
def test_functions(x, p):
    s = Series(x, 1.0)
    assert second(s.exp()) == pytest.approx(math.exp(x))
    assert second(s.log()) == pytest.approx(-1 / x**2)
    assert second(s.power(Series(p))) == pytest.approx(p * (p - 1) * x ** (p - 2), rel=1e-9, abs=1e-12)
    assert second(Series(1.0).over(s)) == pytest.approx(2 / x**3)
    assert second(Series(2.0).power(s)) == pytest.approx(math.log(2) ** 2 * 2**x)


@given(x=NUMBERS, y=NUMBERS, u=NUMBERS, v=NUMBERS)
def test_product_of_two_along_a_line(x, y, u, v):
    # d2/de2 (x + e u)(y + e v)^2 at 0 is 4 u v y + 2 x v^2.
    s, t = Series(x, u), Series(y, v)
    assert second(s * t.power(Series(2.0))) == pytest.approx(4 * u * v * y + 2 * x * v * v)


def test_powers_of_zero():
    zero = Series(0.0, 1.0)
    assert second(zero.power(Series(2.0))) == 2
    assert zero.power(Series(3.0)).c == 0
    assert math.isnan(zero.power(Series(1.5)).a)
    assert zero.power(Series(2.5)) == Series(0.0)
    assert math.isnan(Series(1.0).over(zero).a)


def test_arrays():
    x = lines(np.array([2.0, 3.0]), np.array([1.0, 0.0]))
    assert coefficient(SERIES.multiply(x, x), 2).tolist() == [1.0, 0.0]
    larger = SERIES.call("max", (x, x[::-1]))
    assert [v.a for v in larger] == [3.0, 3.0]
    assert SERIES.call("max", (x, x))[0] is NOTHING
    assert coefficient(SERIES.call("sqrt", (lines(np.array([4.0]), np.array([1.0])),)), 1)[0] == 0.25
