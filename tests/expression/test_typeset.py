from __future__ import annotations

import re

import pytest
from hypothesis import given, settings

from ngm.errors import ExpressionError
from ngm.expression.parse import parse
from ngm.expression.tree import Name, Node
from ngm.expression.typeset import latex, latex_of
from tests.strategies import expressions, labels, program_numbers

#: Every command that may occur, apart from Greek letters: in KaTeX's list of supported functions and in TeX itself.
COMMANDS = {r"\frac", r"\sqrt", r"\left", r"\right", r"\exp", r"\ln", r"\max", r"\min", r"\sum", r"\cdot", r"\,"}
COMMANDS |= {r"\text", r"\mathrm", r"\backslash", r"\wedge", r"\sim", r"\prime", r"\vert"}
COMMANDS |= {r"\_", r"\{", r"\}", r"\$", r"\&", r"\#", r"\%"}
LOWER = "alpha beta gamma delta epsilon zeta eta theta iota kappa lambda mu"
LOWER += " nu xi pi rho sigma tau upsilon phi chi psi omega"
UPPER = "Gamma Delta Theta Lambda Xi Pi Sigma Upsilon Phi Psi Omega"
GREEK_COMMANDS = {f"\\{name}" for name in f"{LOWER} {UPPER}".split()}


# By hand.
@pytest.mark.parametrize(
    ("typed", "shown"),
    [
        ("beta*S*I/N", r"\frac{\beta\,S\,I}{N}"),
        ("a/b/c*d", r"\frac{a\,d}{b\,c}"),
        ("a/(b*c)", r"\frac{a}{b\,c}"),
        ("(a + b)*c/(d + e)", r"\frac{\left(a + b\right)\,c}{d + e}"),
        ("(a + b)/c", r"\frac{a + b}{c}"),
        ("-a/b", r"-\frac{a}{b}"),
        ("-x^2", r"-x^{2}"),
        ("-(a + b)", r"-\left(a + b\right)"),
        ("--a", r"-\left(-a\right)"),
        ("(-x)^2", r"\left(-x\right)^{2}"),
        ("(a/b)^c^d", r"\left(\frac{a}{b}\right)^{c^{d}}"),
        ("(a^b)^c", r"\left(a^{b}\right)^{c}"),
        ("a - (b - c) + (d + e)", r"a - \left(b - c\right) + d + e"),
        ("a + -b", r"a + \left(-b\right)"),
        ("a*-b", r"a\,\left(-b\right)"),
        ("-a + b", r"-a + b"),
        ("2*3*x*2", r"2 \cdot 3\,x \cdot 2"),
        ("2*(1/2)", r"2 \cdot \frac{1}{2}"),
        ("1e-3*x", r"10^{-3}\,x"),
        ("2.5E+3^2", r"\left(2.5 \cdot 10^{3}\right)^{2}"),
        ("1.*.5", r"1 \cdot 0.5"),
        ("sqrt(a/b)", r"\sqrt{\frac{a}{b}}"),
        ("exp(-mu*tau)^2", r"\left(\exp\left(-\mu\,\tau\right)\right)^{2}"),
        ("log(x)", r"\ln\left(x\right)"),
        ("max(a, min(b, c))", r"\max\left(a, \min\left(b, c\right)\right)"),
        ("q*S*C(I/N)", r"q\,S\,\left(C\,\frac{I}{N}\right)"),
        ("C(a*b)", r"\left(C\,\left(a\,b\right)\right)"),
        ("C(M(x))", r"\left(C\,\left(M\,x\right)\right)"),
        ("sum(xi*I)", r"\sum \xi\,I"),
        ("sum(x + y, age)*z", r"\left(\sum_{\text{age}} \left(x + y\right)\right)\,z"),
        ("a + sum(x)", r"a + \sum x"),
        ("sum(x) + a", r"\left(\sum x\right) + a"),
        ("(a + sum(x)) + b", r"\left(a + \sum x\right) + b"),
        ("beta_1", r"\beta_{1}"),
        ("beta1", r"\beta_{1}"),
        ("I_h", r"I_{h}"),
        ("I1", r"I_{1}"),
        ("E1_h", r"E_{1,h}"),
        ("bW", r"\mathrm{bW}"),
        ("mu2h", r"\mathrm{mu2h}"),
        ("infectious_period", r"\mathrm{infectious}_{\mathrm{period}}"),
        ("x_", r"\mathrm{x\_}"),
        ("lambda*Lambda*omicron*Alpha*λ", r"\lambda\,\Lambda\,o\,\mathrm{A}\,\lambda"),
        ("sigma[65+]", r"\sigma_{\text{65+}}"),
        ("I_h[0-4,North side]^2", r"I_{h,\text{0-4},\text{North side}}^{2}"),
    ],
)
def test_shown(typed: str, shown: str) -> None:
    assert latex_of(typed) == shown


def test_a_text_that_is_no_expression_is_refused() -> None:
    with pytest.raises(ExpressionError):
        latex_of("a +")


def test_a_label_cannot_be_a_command() -> None:
    hostile = r"\input{/x}$$\end{document}%&#_^~<b>"
    shown = latex(Name("S", (hostile,)))
    assert set(re.findall(r"\\[A-Za-z]+|\\.", shown)) <= COMMANDS
    assert r"\input" not in shown
    assert "%" not in shown.replace(r"\%", "")
    assert "$" not in shown.replace(r"\$", "")


def _check(shown: str) -> None:
    """Hold what TeX needs: known commands, balanced braces and parentheses, no line end, nothing unescaped."""
    assert set(re.findall(r"\\[A-Za-z]+|\\.", shown)) <= COMMANDS | GREEK_COMMANDS, shown
    bare = re.sub(r"\\[{}$&#%_]", "", shown)
    depth = 0
    for character in bare:
        depth += (character == "{") - (character == "}")
        assert depth >= 0
    assert depth == 0
    assert shown.count(r"\left(") == shown.count(r"\right)")
    assert not set(bare) & set("$&#%~`"), shown
    assert len(shown.splitlines()) == 1


@settings(deadline=None)
@given(tree=expressions())
def test_every_expression_is_sound_tex(tree: Node) -> None:
    _check(latex(tree))


@settings(deadline=None)
@given(label=labels)
def test_every_label_is_sound_tex(label: str) -> None:
    _check(latex(Name("S", (label, label))))


@settings(deadline=None)
@given(number=program_numbers)
def test_every_number_is_sound_tex(number: Node) -> None:
    _check(latex(number))


def test_parentheses_show_the_structure() -> None:
    # By hand: two trees that differ in value must not look alike.
    pairs = [
        ("a - (b + c)", "a - b + c"),
        ("(a + b)*c", "a + b*c"),
        ("(a*b)^c", "a*b^c"),
        ("sum(a)*b", "sum(a*b)"),
        ("-a^2", "(-a)^2"),
    ]
    for one, other in pairs:
        assert latex(parse(one)) != latex(parse(other))
