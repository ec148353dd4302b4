"""Which section of the derivation is the first to need an abbreviation."""

from __future__ import annotations

from ngm.results import Step, Symbolic
from ngm.screens import cache, parts
from ngm.screens.steps import first_used
from tests.screens.texts import SIR


def test_an_abbreviation_stands_where_it_is_first_needed_with_what_it_is_made_of():
    symbolic = Symbolic(
        F=(("a*D3",),),
        V=(("b",),),
        K=(("k1 + D1",),),
        infection_free={"S": "D1/mu"},
        characteristic_polynomial="x - k2",
        abbreviations={"D1": "p + q", "D2": "r*D1", "D3": "D2^2", "k1": "D3*D1", "k2": "k1", "unused": "1"},
        steps=(Step("residence", "I", "1/D2", "I"),),
    )
    assert first_used(symbolic) == {
        "state": ["D1"],
        "rates": ["D2", "D3"],
        "residence": [],
        "K": ["k1"],
        "root": ["k2"],
    }


def test_words_for_formulas_lose_their_commands():
    assert parts.latex_words(r"time in I \input{x} $y$ a_b") == r"\text{time in I  input x   y  a b}"
    assert parts.latex_words("") == ""


def test_plain_text_escapes_every_sign_of_markdown():
    assert parts.plain("![a](b) *c* `d` $e$\n# f :red[g]") == (r"\!\[a\]\(b\) \*c\* \`d\` \$e\$ \# f \:red\[g\]")


def test_converted_values_are_told_with_what_was_typed():
    text = SIR.replace('gamma = { value = 0.2, unit = "1/day" }', 'gamma = { value = 1.4, unit = "1/week" }')
    # 1.4 a week is 0.2 a day, by hand; beta is per day already.
    assert cache.conversions(text, None)[0] == (("gamma", "1.4 1/week = 0.2 1/day, once in 5 day"),)
    assert cache.conversions("no model", None) == ((), ())
