from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import given, settings

from ngm.errors import ExpressionError
from ngm.expression.decimals import decimal_text, exact_value, fraction_texts
from ngm.expression.parse import parse
from ngm.expression.tree import Add, Apply, Multiply, Name, Negate, Node, Number, Power, walk
from ngm.expression.write import write
from tests.expression.evaluate import value
from tests.strategies import KINDS, STRATEGIES, expressions, program_numbers

A, B, C = Name("a"), Name("b"), Name("c")


def _matrices(node: Node) -> set[str]:
    return {here.matrix for here in walk(node) if isinstance(here, Apply)}


def test_every_kind_of_node_has_a_strategy() -> None:
    assert set(STRATEGIES) == set(KINDS)


@settings(deadline=None)
@given(tree=expressions())
def test_what_is_written_reads_as_the_same_tree(tree: Node) -> None:
    assert parse(write(tree), items=True, matrices=_matrices(tree)) == tree


@settings(deadline=None)
@given(tree=expressions(max_leaves=6))
def test_no_pair_of_parentheses_can_be_left_out(tree: Node) -> None:
    text = write(tree)
    for start, end in _pairs(text):
        shorter = text[:start] + text[start + 1 : end] + text[end + 1 :]
        matrices = _matrices(tree)
        assert _parsed(shorter, matrices) != tree, (text, shorter)


def _parsed(text: str, matrices: set[str]) -> Node | None:
    try:
        return parse(text, items=True, matrices=matrices)
    except ExpressionError:
        return None


def _pairs(text: str) -> list[tuple[int, int]]:
    """Return the places of the parentheses that enclose no arguments of a call, outside of labels."""
    pairs, opened, label = [], [], False
    for place, character in enumerate(text):
        label = (label or character == "[") and character != "]"
        if label:
            continue
        if character == "(":
            opened.append(place)
        elif character == ")":
            start = opened.pop()
            if start == 0 or text[start - 1] in "(+-*/^ ":
                pairs.append((start, place))
    return pairs


# By hand.
@pytest.mark.parametrize(
    ("typed", "written"),
    [
        ("((beta))*sigma/( (sigma+mu) * (gamma+mu) )", "beta*sigma/((sigma + mu)*(gamma + mu))"),
        ("a-(b-c)", "a - (b - c)"),
        ("(a+b)+c", "(a + b) + c"),
        ("(a*b)*c", "(a*b)*c"),
        ("(a^b)^c", "(a^b)^c"),
        ("a**(b^c)", "a^b^c"),
        ("a^(-b)", "a^-b"),
        ("a^(-(b*c))", "a^(-b*c)"),
        ("(-a)^2", "(-a)^2"),
        ("-(a^2)", "-a^2"),
        ("-(a*b)", "-a*b"),
        ("(-a)*b", "(-a)*b"),
        ("a*(-b)", "a*-b"),
        ("a - (-b)", "a - -b"),
        ("-(a+b)", "-(a + b)"),
        ("max( (a), b+c)", "max(a, b + c)"),
        ("sum(( a ), age)", "sum(a, age)"),
        ("β*0.10", "beta*0.10"),
        ("2^.5", "2^.5"),
    ],
)
def test_written(typed: str, written: str) -> None:
    assert write(parse(typed)) == written


# By hand: numbers that only a program makes.
@pytest.mark.parametrize(
    ("tree", "written"),
    [
        (Number(Fraction(-2)), "-2"),
        (Number(Fraction(1, 3)), "1/3"),
        (Number(Fraction(-1, 3)), "-1/3"),
        (Power(Number(Fraction(-2)), A), "(-2)^a"),
        (Power(A, Number(Fraction(1, 3))), "a^(1/3)"),
        (Power(A, Number(Fraction(-2))), "a^-2"),
        (Multiply(((1, A), (-1, Number(Fraction(1, 3))))), "a/(1/3)"),
        (Multiply(((1, Number(Fraction(1, 3))), (1, A))), "(1/3)*a"),
        (Add(((1, A), (-1, Number(Fraction(-1, 3))))), "a - -1/3"),
        (Negate(Number(Fraction(-2))), "--2"),
        (Number(Fraction(1, 3), "1/3"), "1/3"),
        (Power(Number(Fraction(1, 3), "1/3"), A), "(1/3)^a"),
        (Add(((-1, A), (1, B))), "-a + b"),
        (Multiply(((-1, A), (1, B))), "1/a*b"),
        (Multiply(((1, Negate(A)), (1, Negate(Power(B, C))))), "(-a)*-b^c"),
        (Multiply(((1, Add(((1, A), (1, B)))), (1, C))), "(a + b)*c"),
    ],
)
def test_programs_trees_are_written(tree: Node, written: str) -> None:
    assert write(tree) == written


@settings(deadline=None)
@given(number=program_numbers)
def test_programs_numbers_keep_their_value(number: Number) -> None:
    for tree in (number, Power(number, Number(Fraction(2))), Multiply(((1, number), (-1, Number(Fraction(7)))))):
        assert value(parse(write(tree))) == pytest.approx(float(value(tree)), rel=1e-15, abs=0)


def test_a_deep_tree_is_written_without_recursion() -> None:
    tree: Node = A
    for _ in range(20_000):
        tree = Negate(tree)
    assert write(tree) == "-" * 20_000 + "a"


# By hand.
@pytest.mark.parametrize(
    ("number", "text"),
    [
        (Fraction(0), "0"),
        (Fraction(1, 8), "0.125"),
        (Fraction(1000), "1000"),
        (Fraction(10**20), "1e20"),
        (Fraction(125, 10**9), "1.25e-7"),
        (Fraction(-3, 2), "-1.5"),
        (Fraction(5, 10000), "0.0005"),
        (Fraction(1, 3), None),
        (Fraction(10**18 + 1, 10**18), None),
        (Fraction(1, 2**3000), None),
    ],
)
def test_short_decimals(number: Fraction, text: str | None) -> None:
    assert decimal_text(number) == text
    assert text is None or Fraction(text) == number


@pytest.mark.parametrize(
    "number", [Fraction(1, 3), Fraction(10**400 + 1, 10**390 + 7), Fraction(3, 10**3000 + 1) * 10**2900]
)
def test_a_fraction_of_any_length_is_written_exactly(number: Fraction) -> None:
    above, below = fraction_texts(number)
    assert exact_value(above) / exact_value(below) == number
    assert parse(f"{above}/{below}") is not None
