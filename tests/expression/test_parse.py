from __future__ import annotations

from fractions import Fraction

import pytest

from ngm.errors import ExpressionError
from ngm.expression.parse import MOST_CHARACTERS, parse
from ngm.expression.tree import Add, Apply, Call, Multiply, Name, Negate, Node, Number, Power, Total, names, walk
from tests.expression.evaluate import value

A, B, C = Name("a"), Name("b"), Name("c")


# By hand.
@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("1", 1),
        ("1.5", "1.5"),
        (".5", "0.5"),
        ("1.", 1),
        ("1e-3", "0.001"),
        ("1E+3", 1000),
        ("1.e2", 100),
        (".5e1", 5),
        ("007", 7),
        ("0e999999999999", 0),
        ("2+3*4", 14),
        ("(2+3)*4", 20),
        ("2-3-4", -5),
        ("2-(3-4)", 3),
        ("24/4/3", 2),
        ("24/(4/3)", 18),
        ("24/4*3", 18),
        ("2^3^2", 512),
        ("2**3**2", 512),
        ("(2^3)^2", 64),
        ("-2^2", -4),
        ("(-2)^2", 4),
        ("2^-1", "0.5"),
        ("2^-2^2", "0.0625"),
        ("2--3", 5),
        ("2-+-3", 5),
        ("+2", 2),
        ("2*-3", -6),
        ("6/-3", -2),
        ("-6/3", -2),
        ("--2", 2),
        ("2*-3^2", -18),
        ("max(2, 3)", 3),
        ("min(2, 3)", 2),
        ("max(2, min(5, 4))", 4),
        ("exp(0)", 1),
        ("log(1)", 0),
        ("sqrt(9)", 3),
        ("sqrt((9))^2", 9),
        (" 1\n+\t2\r\n* 3 ", 7),
        ("1/7*7", 1),
        ("2 ** 3", 8),
        ("exp (0)", 1),
    ],
)
def test_value(text: str, expected: int | str) -> None:
    assert value(parse(text)) == pytest.approx(float(Fraction(expected)), rel=1e-15)


# By hand: the tree as the grammar describes it.
@pytest.mark.parametrize(
    ("text", "tree"),
    [
        ("a - b + c", Add(((1, A), (-1, B), (1, C)))),
        ("a - (b + c)", Add(((1, A), (-1, Add(((1, B), (1, C))))))),
        ("a*b/c", Multiply(((1, A), (1, B), (-1, C)))),
        ("a/(b*c)", Multiply(((1, A), (-1, Multiply(((1, B), (1, C))))))),
        ("-a*b", Negate(Multiply(((1, A), (1, B))))),
        ("(-a)*b", Multiply(((1, Negate(A)), (1, B)))),
        ("a*-b", Multiply(((1, A), (1, Negate(B))))),
        ("-a + b", Add(((1, Negate(A)), (1, B)))),
        ("a^-b^c", Power(A, Negate(Power(B, C)))),
        ("((a))", A),
        ("+a", A),
        ("max(a, b)", Call("max", (A, B))),
        ("sum(a)", Total(A)),
        ("sum(a, age)", Total(A, "age")),
        ("sum(a, α)", Total(A, "alpha")),
        ("M(a)", Apply("M", A)),
        ("M(M(a))", Apply("M", Apply("M", A))),
        ("M", Name("M")),
        ("β_1*Λ", Multiply(((1, Name("beta_1")), (1, Name("Lambda"))))),
    ],
)
def test_tree(text: str, tree: Node) -> None:
    assert parse(text, matrices={"M"}) == tree


def test_numbers_are_exact_and_keep_their_text() -> None:
    number = parse("0.10")
    assert number == Number(Fraction(1, 10))
    assert isinstance(number, Number)
    assert number.text == "0.10"


def test_positions_count_characters_of_the_text() -> None:
    positions = {here.name: here.position for here in walk(parse("β +\n 2*Λ_1 - x")) if isinstance(here, Name)}
    assert positions == {"beta": 0, "Lambda_1": 7, "x": 13}


@pytest.mark.parametrize(
    "name",
    [
        "S",
        "I",
        "E",
        "N",
        "O",
        "Q",
        "C",
        "beta",
        "gamma",
        "zeta",
        "lambda",
        "Lambda",
        "pi",
        "in",
        "if",
        "is",
        "x",
        "t",
        "None",
        "True",
        "import",
        "def",
        "e",
        "E1",
        "inf",
        "nan",
        "Exp",
        "ln",
    ],
)
def test_any_name_is_a_name(name: str) -> None:
    assert parse(f"2*{name}^2 + {name}/({name} - 1)", matrices={"M"}) is not None
    assert names(parse(f"exp({name})")) == {name}
    assert parse(f"{name}({name})", matrices={name}) == Apply(name, Name(name))
    assert parse(f"sum(x, {name})") == Total(Name("x"), name)


def test_groups_belong_to_results_only() -> None:
    text = "sigma[65+]*S[0-4,North side] - C[0-4,65+]"
    assert names(parse(text, items=True)) == {"sigma", "S", "C"}
    assert parse("S[0-4,North side]", items=True) == Name("S", ("0-4", "North side"))
    with pytest.raises(ExpressionError, match=r"'\[' is not part of the syntax \(column 6\)"):
        parse(text)


def test_any_name_may_be_a_matrix_where_the_matrices_are_not_known() -> None:
    assert parse("C(I/N)", matrices=None) == Apply("C", Multiply(((1, Name("I")), (-1, Name("N")))))


# The limits of an expression: 10,000 characters, 50 levels, numbers below 1e300.
def test_an_expression_at_its_limits_is_read() -> None:
    assert parse("(" * 50 + "x" + ")" * 50) == Name("x")
    assert value(parse("-" * 50 + "1")) == 1
    assert value(parse("1^" * 50 + "1")) == 1
    wide = parse("+".join(["1"] * 5000))
    assert isinstance(wide, Add)
    assert len(wide.terms) == 5000
    long = "x" * MOST_CHARACTERS
    assert parse(long) == Name(long)
    assert parse("9.99e299") == Number(Fraction("9.99e299"))
    assert parse("1e-300") == Number(Fraction(1, 10**300))
    assert parse("0." + "0" * 9000 + "1e9001") == Number(Fraction(1))
    assert parse("0." + "3" * 9000) == Number(Fraction((10**9000 - 1) // 3, 10**9000))


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("x+" * 1_000_000, "the expression has 2,000,000 characters; at most 10,000 are read."),
        ("x" * 10_001, "the expression has 10,001 characters; at most 10,000 are read."),
        ("(" * 5000 + "x" + ")" * 4999, "more than 50 levels of parentheses, calls, powers and signs (column 51)"),
        ("(" * 51 + "x" + ")" * 51, "more than 50 levels of parentheses, calls, powers and signs (column 51)"),
        ("-" * 9999 + "x", "more than 50 levels of parentheses, calls, powers and signs (column 51)"),
        ("x^" * 4999 + "x", "more than 50 levels of parentheses, calls, powers and signs (column 102)"),
        ("x*-" * 51 + "(" * 51, "more than 50 levels"),
        ("exp(" * 2499, "more than 50 levels of parentheses, calls, powers and signs (column 204)"),
        ("sum(" * 2499, "more than 50 levels"),
        ("1e300", "'1e300' is too large (column 1). A number is below 1e300."),
        ("1" + "0" * 300, "is too large (column 1)"),
        ("1e" + "9" * 9990, "is too large (column 1)"),
        ("9" * 9990, "is too large (column 1)"),
        ("x*9.9e-301", "'9.9e-301' is too small (column 3). A number is 0 or at least 1e-300."),
        ("1e-" + "9" * 9990, "is too small (column 1)"),
        ("." + "0" * 9000 + "1", "is too small (column 1)"),
    ],
)
def test_past_a_limit_it_is_refused_in_a_line(text: str, message: str) -> None:
    with pytest.raises(ExpressionError) as caught:
        parse(text)
    said = str(caught.value)
    assert message in said
    assert len(said) < 400
