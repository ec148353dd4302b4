"""Balls: what goes in is enclosed, what comes out is the nearest double."""

from __future__ import annotations

import math
import threading
from fractions import Fraction

import numpy as np
import pytest
from flint import arb, ctx
from hypothesis import given
from hypothesis import strategies as st

from ngm.engine import balls as b


@given(st.fractions())
def test_fraction_is_enclosed_and_narrow(number):
    with b.precision(80):
        found = b.ball(number)
    with b.precision(2000):
        assert (found * number.denominator).contains(number.numerator)
    assert b.nearest(found) == float(number)


@pytest.mark.parametrize("text", ["0.1", "1e-3", "5.", ".5", "12", "1E+300", "-0.3"])
def test_decimal_text_is_the_decimal(text):
    number = Fraction(text)
    with b.precision(400):
        assert (b.ball(text) * number.denominator).contains(number.numerator)
    assert b.nearest(b.ball(text)) == float(text)


@pytest.mark.parametrize("text", ["", "nan", "inf", "1/3", "0x10", "1_000", "[1 +/- 2]", "1e99999999", "--1", "pi"])
def test_other_text_is_refused(text):
    with pytest.raises(ValueError, match="decimal number"):
        b.ball(text)


@pytest.mark.parametrize("number", [math.nan, math.inf, -math.inf])
def test_float_that_is_not_finite_is_refused(number):
    with pytest.raises(ValueError, match="finite"):
        b.ball(number)


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_float_stands_for_itself(number):
    assert b.nearest(b.ball(number)) == number
    assert b.outward(b.ball(number)) == (number, number)


# By hand: 1/3 lies strictly between two neighbouring doubles.
def test_outward_encloses_by_neighbouring_doubles():
    with b.precision(128):
        low, high = b.outward(b.ball(Fraction(1, 3)))
    assert Fraction(low) < Fraction(1, 3) < Fraction(high)
    assert math.nextafter(low, 1) == high


def test_sharp_and_signs():
    with b.precision(128):
        third = b.ball(Fraction(1, 3))
    wide = b.interval(-1.0, 2.0)
    assert b.is_sharp(third)
    assert not b.is_sharp(wide)
    assert (b.sign(third), b.sign(-third), b.sign(wide), b.sign(arb(0))) == (1, -1, None, 0)
    assert b.contains_zero(wide)
    assert b.contains_zero(arb.nan())
    assert not b.is_zero(wide)
    assert b.nearest(wide) == 0.0


def test_precision_is_put_back_after_an_error():
    before = ctx.prec

    def fails():
        with b.precision(300):
            seen.append(ctx.prec)
            raise RuntimeError

    seen = []
    with pytest.raises(RuntimeError):
        fails()
    assert seen == [300]
    assert ctx.prec == before


def test_precision_belongs_to_one_thread_at_a_time():
    seen = []

    def work(bits):
        for _ in range(50):
            with b.precision(bits):
                seen.append(ctx.prec == bits)

    threads = [threading.Thread(target=work, args=(bits,)) for bits in (64, 200, 333)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert all(seen)
    assert len(seen) == 150


# Second route: the same functions of Python's floats.
@pytest.mark.parametrize(
    ("name", "arguments"),
    [
        ("exp", (1.5,)),
        ("log", (2.5,)),
        ("sqrt", (2.0,)),
        ("maximum", (2.0, -3.0)),
        ("minimum", (2.0, -3.0)),
        ("power", (2.0, 0.5)),
        ("power", (2.0, -3.0)),
        ("power", (-2.0, 3.0)),
        ("power", (0.0, 0.0)),
        ("power", (0.0, 2.5)),
    ],
)
def test_functions(name, arguments):
    plain = {"maximum": max, "minimum": min, "power": math.pow}.get(name) or getattr(math, name)
    with b.precision(128):
        found = getattr(b.BALLS, name)(*(b.balls([a, a]) for a in arguments))
    assert b.to_floats(found) == pytest.approx([plain(*arguments)] * 2, rel=1e-15)


@pytest.mark.parametrize("call", [("power", -2, 0.5), ("power", 0, -1), ("log", 0), ("log", -1), ("sqrt", -1)])
def test_what_has_no_value_is_not_finite(call):
    name, *arguments = call
    found = getattr(b.BALLS, name)(*(b.ball(a) for a in arguments))
    assert not b.is_finite(b.balls([found]))


def test_root_of_a_ball_around_zero():
    straddling = arb(0, 1e-20)
    for found in (b.BALLS.sqrt(straddling), b.BALLS.power(straddling, b.ball("0.3"))):
        assert found.is_finite()
        assert found.contains(0)
        assert found < 1e-5


def test_matrices_there_and_back():
    values = b.balls(np.arange(6.0).reshape(2, 3))
    assert b.to_floats(b.from_mat(b.to_mat(values))).tolist() == [[0, 1, 2], [3, 4, 5]]
    assert b.to_mat(values[0]).ncols() == 1
