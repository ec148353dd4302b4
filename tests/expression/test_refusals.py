"""What is no expression: each text with what is said of it, and the column (all by hand, from the grammar)."""

from __future__ import annotations

import pytest

from ngm.errors import ExpressionError
from ngm.expression.parse import parse

REFUSED = [
    ("", None, "the expression is empty. Write a number or a formula."),
    (" \n\t", None, "the expression is empty."),
    # numbers
    ("2e", 1, "'2e' lacks the digits of its exponent (column 1). Write 2e-3, or to multiply 2*e."),
    ("1.5e+", 1, "'1.5e' lacks the digits of its exponent"),
    ("2e*x", 1, "'2e' lacks the digits of its exponent"),
    ("1.2.3", 1, "'1.2.3' is not a number (column 1). Write one decimal point: 1.25."),
    ("1..2", 1, "'1..2' is not a number"),
    ("1e5.2", 1, "'1e5.2' is not a number"),
    ("1_000", 2, "'_' cannot stand in a number (column 2). Write the digits without it."),
    ("0,5", 2, "',' stands outside the arguments of a function (column 2). A decimal is written with a point: 0.5;"),
    ("x + 1,000", 6, "A decimal is written with a point: 1.000; digits are not grouped."),
    ("exp(0,5)", 1, "exp takes one argument, found 2 (column 1). A decimal is written with a point: 0.5;"),
    ("5%", 2, "'%' is not part of the syntax (column 2). For 5 % write 0.05."),
    ("５", 1, "'５' (U+FF15) is not part of the syntax (column 1). Write 5 as on a keyboard."),
    ("٣", 1, "'٣' is not part of the syntax (column 1). Write the digits 0 to 9."),
    ("½", 1, "Write 1/2."),
    ("0x10", 2, "an operator is missing between '0' and 'x10'"),
    # operators
    ("2beta", 2, "an operator is missing between '2' and 'beta' (column 2). To multiply, write 2*beta."),
    ("beta gamma", 6, "an operator is missing between 'beta' and 'gamma' (column 6). To multiply, write beta*gamma."),
    ("2(x)", 2, "To multiply, write 2*(…)."),
    ("(x)(y)", 4, "To multiply, write (…)*(…)."),
    ("(x)y", 4, "To multiply, write (…)*y."),
    ("x y" * 20, 3, "an operator is missing between 'x' and 'yx'"),
    ("x (", 1, "'x' is not a function or matrix"),
    ("a ×b", 3, "'×' is not part of the syntax (column 3). Write * to multiply."),
    ("a·b", 2, "Write * to multiply."),
    ("a−b", 2, "Write - (the hyphen of the keyboard) to subtract."),
    ("a–b", 2, "Write - (the hyphen of the keyboard) to subtract."),
    ("a÷b", 2, "Write / to divide."),
    ("x²", 2, "'²' is not part of the syntax (column 2). Write ^2."),
    ("x₁", 2, "'₁' is not part of the syntax (column 2). Write it after an underscore: x_1."),
    ("√x", 1, "Write sqrt(x)."),
    ("a＋b", 2, "Write + as on a keyboard."),
    ("a//b", 3, "expected a number, a name or '(' after '/', found '/' (column 3)."),
    ("a***b", 4, "expected a number, a name or '(' after '**', found '*' (column 4)."),
    ("a^^b", 3, "expected a number, a name or '(' after '^', found '^' (column 3)."),
    ("*a", 1, "expected a number, a name or '(' at the start, found '*' (column 1)."),
    ("a +", 4, "expected a number, a name or '(' after '+', found nothing (column 4)."),
    ("a +\n* b", 5, "after '+', found '*' (line 2, column 1)."),
    ("--", 3, "after '-', found nothing"),
    ("x^", 3, "after '^', found nothing"),
    # parentheses and calls
    ("(a", 1, "this '(' is not closed (column 1). Add the ')'."),
    ("((a)", 1, "this '(' is not closed"),
    ("a)", 2, "')' closes nothing: no '(' is open (column 2). Remove it, or add the '('."),
    ("()", 2, "expected a number, a name or '(' after '(', found ')'"),
    ("(a, b)", 3, "',' stands outside the arguments of a function (column 3)."),
    ("exp()", 5, "exp(x) needs what stands in the parentheses"),
    ("C()", 3, "C(x) needs what stands in the parentheses"),
    ("exp", 1, "'exp' is the name of a function (column 1). Write exp(x)."),
    ("2*max", 3, "'max' is the name of a function (column 3). Write max(x, y)."),
    ("sum^2", 1, "'sum' is the name of a function (column 1). Write sum(x)."),
    ("max(a)", 1, "max takes two arguments, found 1 (column 1)."),
    ("min(a, b, c)", 1, "min takes two arguments, found 3 (column 1). Nest it: min(x, min(y, z))."),
    ("max(a,)", 7, "after ',', found ')'"),
    ("log(a, b)", 1, "log takes one argument, found 2"),
    ("C(a, b)", 1, "C takes one argument, found 2"),
    ("C(a", 2, "this '(' is not closed"),
    ("sum(a, 2)", 8, "the second argument of sum is the name of a dimension: sum(x, age) (column 8)."),
    ("sum(a, exp)", 8, "the second argument of sum is the name of a dimension"),
    ("sum(a, age + 1)", 12, "after the dimension in sum(x, age) a ')' is expected"),
    ("sum(a, age, b)", 11, "after the dimension in sum(x, age) a ')' is expected"),
    ("sum(a, age", 4, "this '(' is not closed"),
    ("f(x)", 1, "'f' is not a function or matrix (column 1). To multiply, write f*(…)."),
    ("beta(S + I)", 1, "'beta' is not a function or matrix (column 1). To multiply, write beta*(…)."),
    ("Exp(x)", 1, "Did you mean 'exp'?"),
    ("c(x)", 1, "'c' is not a function or matrix (column 1). Did you mean 'C'?"),
    ("contact(x)", 1, "Did you mean 'contacts'?"),
    ("ln(x)", 1, "'ln' is not a function or matrix (column 1). Write log(x), the natural logarithm."),
    ("pow(x, 2)", 1, "Write x^y."),
    ("sin(x)", 1, "'sin' is not a function or matrix"),
    # what other languages have
    ("I.value", 2, "'.' is not part of the syntax (column 2). A name has no parts after a point"),
    (".", 1, "'.' is not part of the syntax"),
    ("a[0]", 2, "'[' is not part of the syntax (column 2). Index and list are not part of the syntax"),
    ("[1]", 1, "Index and list are not part of the syntax"),
    ("sigma[65+]", 6, "'[' is not part of the syntax"),
    ("'x'", 1, "Write names and numbers without quotes."),
    ('"x"', 1, "Write names and numbers without quotes."),
    ("a<b", 2, "'<' is not part of the syntax (column 2). An expression holds no comparison."),
    ("a >= b", 3, "An expression holds no comparison."),
    ("a==b", 2, "Write only what stands on the right of the equals sign"),
    ("R0 = a", 4, "Write only what stands on the right of the equals sign"),
    ("a != b", 3, "An expression holds no comparison."),
    ("a; b", 2, "';' is not part of the syntax (column 2). Write one expression."),
    ("lambda x: y", 8, "an operator is missing between 'lambda' and 'x'"),
    ("a if b else c", 3, "an operator is missing between 'a' and 'if'"),
    ("{a}", 1, "Write round parentheses: ( )."),
    (r"\beta", 1, "Write names without a backslash: beta or β."),
    ("a # b", 3, "Write comments outside the expression."),
    ("a & b", 3, "'&' is not part of the syntax (column 3)."),
    ("a @ b", 3, "'@' is not part of the syntax"),
    ("__import__('os')", 1, "'__import__' starts with '_' (column 1). A name starts with a letter."),
    ("x.__class__", 2, "'.' is not part of the syntax"),
    ("__class__", 1, "'__class__' starts with '_'"),
    ("eval('1')", 1, "'eval' is not a function or matrix"),
    ("exec(x)", 1, "'exec' is not a function or matrix"),
    # letters and invisible characters
    ("é", 1, "'é' cannot stand in a name (column 1). Its letters are A to Z and a to z and the Greek ones, bare."),
    ("naïve", 3, "'ï' cannot stand in a name"),
    ("ά", 1, "'ά' cannot stand in a name"),
    ("𝛽", 1, "Write β or beta."),
    ("a\0b", 2, "the character U+0000 (a control character) is not part of the syntax (column 2)."),
    ("a\x1b[31m", 2, "the character U+001B (a control character)"),
    (
        "a\u00a0+ b",
        2,
        "the character U+00A0 (no-break space) is not part of the syntax (column 2). Write a plain space",
    ),
    ("a \u202e+ b", 3, "the character U+202E (right-to-left override)"),
    ("\ufeffa", 1, "the character U+FEFF (zero width no-break space)"),
    ("\ud800", 1, "the character U+D800"),
]


@pytest.mark.parametrize(("text", "column", "message"), REFUSED)
def test_refusal(text: str, column: int | None, message: str) -> None:
    with pytest.raises(ExpressionError) as caught:
        parse(text, where="flow 2, rate", matrices={"C", "contacts"}, key=("flow", 1, "rate"))
    (problem,) = caught.value.problems
    assert message in problem.message
    assert problem.where == "flow 2, rate"
    assert problem.key == ("flow", 1, "rate")
    assert problem.position == (None if column is None else column - 1)
    assert column is None or (problem.text == text and ("\n" in text or f"column {column})" in problem.message))
    assert problem.message.isprintable(), "a message must not carry control characters to a terminal"
    assert len(problem.message) < 300


def test_a_misspelt_matrix_is_told_with_caret() -> None:
    with pytest.raises(ExpressionError) as caught:
        parse("q * S * contcts(I / N)", where="flow 1, rate", matrices={"contacts"})
    assert str(caught.value) == (
        "flow 1, rate: 'contcts' is not a function or matrix (column 9). Did you mean 'contacts'? "
        "To multiply, write contcts*(…).\n"
        "    q * S * contcts(I / N)\n"
        "            ^"
    )


@pytest.mark.parametrize(
    "text",
    ["S[", "S[]", "S[a", "S[,]", "S[a,]", "S['a']", 'S["a"]', "S[[a]]", "S[ ]", "exp[a](x)", "S[a](x)", "sum(x, a[b])"],
)
def test_groups_in_results_are_refused_where_they_are_no_labels(text: str) -> None:
    with pytest.raises(ExpressionError):
        parse(text, items=True, matrices={"C"})


def test_a_refused_text_of_any_length_is_not_repeated() -> None:
    with pytest.raises(ExpressionError) as caught:
        parse("f" * 9000 + "(x)")
    assert len(caught.value.problems[0].message) < 200
