"""Identities by hand, and expressions that agree at single points only."""

from __future__ import annotations

import pytest

from ngm.derivation.identity import identical
from ngm.expression.parse import parse


@pytest.mark.parametrize(
    ("first", "second", "same"),
    [
        ("a/b + c", "(a + b*c)/b", True),
        ("(a^2 - b^2)/(a - b)", "a + b", True),
        ("(a^2 - b^2)/(a - b)", "a - b", False),
        ("sqrt(a^2*b)", "a*sqrt(b)", True),
        ("sqrt(4*a*b + (a - b)^2)", "a + b", True),
        ("(x + sqrt(x^2 + 4*y))/2", "x/2 + sqrt((x/2)^2 + y)", True),
        ("(x + sqrt(x^2 + 4*y))/2", "(x + sqrt(x^2 + y))/2", False),
        ("(x + sqrt(x^2 + 4*y))/2", "(x - sqrt(x^2 + 4*y))/2", False),
        ("sqrt(max(a/b, c))", "max(sqrt(c), sqrt(a/b))", True),
        ("max(a, b)", "max(a, c)", False),
        ("exp(a)*exp(b)", "exp(a + b)", True),
        ("a", "a + 0.000001", False),
    ],
)
def test_by_hand(first, second, same):
    assert identical(parse(first), parse(second)) is same


def test_names_that_stand_for_expressions():
    meanings = {"N": parse("S + I"), "S": parse("births/mu"), "I": parse("0")}
    assert identical(parse("beta*S/N"), parse("beta"), meanings)
    assert identical(parse("N"), parse("births/mu"), meanings)
    assert not identical(parse("N"), parse("births"), meanings)


def test_of_any_sign_a_root_of_a_square_is_not_the_number():
    assert identical(parse("sqrt(a^2)"), parse("a"))
    assert not identical(parse("sqrt(a^2)"), parse("a"), any_sign=["a"])
