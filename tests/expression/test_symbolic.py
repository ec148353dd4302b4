from __future__ import annotations

import mpmath
import pytest
import sympy
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from ngm.errors import ExpressionError
from ngm.expression.parse import parse
from ngm.expression.symbolic import from_sympy, symbol, text, to_sympy
from ngm.expression.tree import Apply, Name, Node, Total
from ngm.expression.write import write
from tests.expression.evaluate import NoValueError, value
from tests.strategies import AWKWARD_NAMES, formulas


def _symbolic(typed: str) -> sympy.Expr:
    return to_sympy(parse(typed, items=True), lambda name: symbol(name.item))


def _signed(name: Name) -> sympy.Expr:
    return symbol(name.item, any_sign=True)


def test_one_name_is_one_symbol() -> None:
    assert symbol("beta") is symbol("beta")
    assert symbol("beta").is_positive
    assert symbol("beta", any_sign=True).is_positive is None
    assert symbol("beta", any_sign=True).is_real
    assert _symbolic("beta - beta") == 0


@pytest.mark.parametrize("name", AWKWARD_NAMES)
def test_no_name_means_anything_to_the_algebra(name: str) -> None:
    expr = _symbolic(f"{name}^2 + {name}")
    assert expr.free_symbols == {symbol(name)}
    assert parse(text(expr)) == from_sympy(expr)


def test_groups_stay_with_their_name() -> None:
    assert _symbolic("sigma[65+]*2").free_symbols == {symbol("sigma[65+]")}
    assert text(_symbolic("sigma[65+]*S[0-4,North]/2")) == "S[0-4,North]*sigma[65+]/2"


# By hand: what people write (the order of factors and terms is sympy's: by the alphabet, capitals first).
@pytest.mark.parametrize(
    ("typed", "written"),
    [
        ("sigma*beta/((sigma + mu)*(gamma + mu))", "beta*sigma/((gamma + mu)*(mu + sigma))"),
        ("sqrt(bs*bm/(c*(b + gamma)))", "sqrt(bm*bs/(c*(b + gamma)))"),
        ("(a + d + sqrt((a - d)^2 + 4*b*c))/2", "(a + d + sqrt((a - d)^2 + 4*b*c))/2"),
        ("(a*b/c)^(1/3)", "(a*b/c)^(1/3)"),
        ("x^-1", "1/x"),
        ("x^-2*y", "y/x^2"),
        ("x^-y", "1/x^y"),
        ("1/sqrt(x)", "1/sqrt(x)"),
        ("y/sqrt(x)", "y/sqrt(x)"),
        ("x^1.5", "x^1.5"),
        ("1 - p", "1 - p"),
        ("p - 1", "p - 1"),
        ("-a - b", "-(a + b)"),
        ("-x^2", "-x^2"),
        ("0.35*x", "0.35*x"),
        ("x/7", "x/7"),
        ("3*x/7", "3*x/7"),
        ("1/7/mu", "1/(7*mu)"),
        ("0.2/mu", "0.2/mu"),
        ("1/3", "1/3"),
        ("1e-5*x", "1e-5*x"),
        ("0.5*(a + b)", "(a + b)/2"),
        ("a/(2*(x + y))", "a/(2*(x + y))"),
        ("2*(a + b)*(3*c + 3*d)", "6*(a + b)*(c + d)"),
        ("0.3*x + 0.7*y", "0.3*x + 0.7*y"),
        ("exp(-mu*tau)*x", "x*exp(-mu*tau)"),
        ("log(x)/x", "log(x)/x"),
        ("max(a, b)", "max(a, b)"),
        ("max(max(a, b), c)", "max(a, max(b, c))"),
        ("max(a, min(b, c))", "max(a, min(b, c))"),
        ("exp(1)*x", "x*exp(1)"),
        ("2^x", "2^x"),
        ("x - x", "0"),
    ],
)
def test_written_as_people_write_it(typed: str, written: str) -> None:
    assert text(_symbolic(typed)) == written


def test_roots_of_squares_and_their_slope_stay_in_the_syntax() -> None:
    # By hand: the root of x^2 is |x|, and its slope x/|x|.
    x = symbol("x", any_sign=True)
    root = to_sympy(parse("sqrt(x^2)"), _signed)
    assert text(root) == "sqrt(x^2)"
    assert text(sympy.diff(root, x)) == "x/sqrt(x^2)"


@settings(deadline=None)
@given(
    tree=formulas(),
    any_sign=st.booleans(),
    values=st.lists(st.fractions(-3, 3, max_denominator=20), min_size=5, max_size=5),
)
def test_there_and_back_is_the_same_function(tree: Node, any_sign: bool, values: list[object]) -> None:
    # Second route: the tree's own value in 50 digits.
    point = dict(zip(["S", "beta", "gamma", "lambda", "x"], map(float, values), strict=True))
    if not any_sign:
        point = {name: abs(number) + 0.125 for name, number in point.items()}
    try:
        back = from_sympy(to_sympy(tree, lambda name: symbol(name.item, any_sign)))
        expected = value(tree, point)
    except (ExpressionError, NoValueError):
        assume(False)
    assume(mpmath.isfinite(expected) and abs(expected) < 1e30)
    assert parse(write(back)) is not None
    try:
        found = value(back, point)
    except NoValueError:
        # Only at a point where the function has a hole: 0/0, or a root of rounding's -1e-50.
        assume(False)
    assert abs(found - expected) <= 1e-20 * (1 + abs(expected)), write(back)


# By hand. Each would take a giant number, or has no real value; sympy would compute it, or make it infinite or complex.
@pytest.mark.parametrize(
    ("typed", "column", "message"),
    [
        ("9^9^9^9", 3, "the numbers here give 1e300 or more"),
        ("x + 10^100000", 5, "the numbers here give 1e300 or more"),
        ("10^-301", 1, "less than 1e-300"),
        ("(2*x)^1e9", 1, "1e300 or more"),
        ("sqrt(2)^1e9", 1, "1e300 or more"),
        ("exp(1000)", 1, "1e300 or more"),
        ("exp(-1000)", 1, "less than 1e-300"),
        ("exp(exp(7))", 1, "1e300 or more"),
        ("exp(x + 1e6*log(2))", 1, "1e300 or more"),
        ("exp(1e6*log(2*x))", 1, "1e300 or more"),
        ("1e200*1e200*x", 1, "1e300 or more"),
        ("1e-200*1e-200", 1, "less than 1e-300"),
        ("*".join(["9e299"] * 1500), 1, "1e300 or more"),
        ("1.0000001^1e9", 1, "too many digits"),
        ("sqrt(1.0000001)^1e9", 1, "too many digits"),
        ("0." + "7" * 5000 + "^0.3", 1, "too many digits"),
        ("1/0", 3, "divides by 0"),
        ("y/(x - x)", 4, "divides by 0"),
        ("0^-1", 1, "divides by 0"),
        ("sqrt(-1)", 1, "no real number"),
        ("(-8)^(1/3)", 1, "no real number"),
        ("sqrt(-x)", 1, "no real number"),
        ("x*(-x*y)^1.5", 3, "no real number"),
        ("log(0)", 1, "does not exist"),
        ("log(1 - 2)", 1, "does not exist"),
    ],
)
def test_numbers_that_are_refused_before_they_are_made(typed: str, column: int, message: str) -> None:
    with pytest.raises(ExpressionError) as caught:
        to_sympy(parse(typed), lambda name: symbol(name.item), where="flow 1, rate", source=typed, key=("flow", 0))
    (problem,) = caught.value.problems
    assert message in problem.message
    assert (problem.where, problem.text, problem.key) == ("flow 1, rate", typed, ("flow", 0))
    assert problem.position == column - 1


def test_a_zero_or_giant_number_from_the_lookup_is_refused_too() -> None:
    with pytest.raises(ExpressionError, match="divides by 0"):
        to_sympy(parse("1/x"), lambda name: sympy.Integer(0))
    with pytest.raises(ExpressionError, match="1e300"):
        to_sympy(parse("x^x"), lambda name: sympy.Integer(10**6))


@pytest.mark.parametrize("typed", ["0.99^3650", "1e-300*x", "9.9e299", "2^(1/3)", "x^1e200", "0^0", "2^1e9^0"])
def test_numbers_in_range_are_computed(typed: str) -> None:
    assert _symbolic(typed) is not None


@pytest.mark.parametrize("node", [Total(Name("x")), Apply("C", Name("x"))])
def test_groups_must_be_written_out_before(node: Node) -> None:
    with pytest.raises(TypeError, match=type(node).__name__):
        to_sympy(node, lambda name: symbol(name.item))


@pytest.mark.parametrize(
    "expr", [sympy.Float(0.1), sympy.I, sympy.zoo, sympy.oo, sympy.nan, sympy.pi, sympy.sin(symbol("x"))]
)
def test_what_the_syntax_cannot_say_is_refused(expr: sympy.Expr) -> None:
    with pytest.raises(TypeError):
        from_sympy(expr * symbol("y"))


def test_a_large_sum_is_converted_without_recursion_and_back() -> None:
    # Some 12,000 nodes; and 900 levels deep, where a function that called itself would end.
    wide = " + ".join(f"a{i}*(b + c{i})/(d + e{i})" for i in range(290))
    assert text(_symbolic(wide)).count("/") == 290
    deep = symbol("x")
    for i in range(900):
        deep = sympy.Mul(symbol(f"a{i}"), sympy.Add(deep, symbol("b"), evaluate=False), evaluate=False)
    assert write(from_sympy(deep)).count("(") == 899 + 1
