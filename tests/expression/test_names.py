from __future__ import annotations

import unicodedata

import pytest

from ngm.expression.names import GREEK, canonical, is_reserved, suggest


# By hand: the names of the contract of the file format, and each form of a letter.
@pytest.mark.parametrize(
    ("typed", "name"),
    [
        ("S", "S"),
        ("β", "beta"),
        ("β_1", "beta_1"),
        ("Iβ2", "Ibeta2"),
        ("Λ", "Lambda"),
        ("λ", "lambda"),
        ("ο", "omicron"),
        ("Ω", "Omega"),
        ("\u03f5", "epsilon"),
        ("\u03d5", "phi"),
        ("\u03c2", "sigma"),
        ("\u03d1", "theta"),
        ("\u03f1", "rho"),
        ("\u03d6", "pi"),
        ("\u03f0", "kappa"),
        ("\u00b5", "mu"),
        ("\u03bc", "mu"),
        ("x_", "x_"),
    ],
)
def test_a_greek_letter_is_its_english_spelling(typed: str, name: str) -> None:
    assert canonical(typed) == name


@pytest.mark.parametrize(
    "typed", ["", "_x", "1x", "x y", " x", "x-y", "é", "ά", "x.y", "x[1]", "２", "x₁", "x\n", "𝛽", "__class__"]
)
def test_what_is_no_name_has_no_canonical_form(typed: str) -> None:
    assert canonical(typed) is None


def test_all_greek_letters_are_there_and_spelt_as_unicode_spells_them() -> None:
    # Second route: the names of the Unicode database, where "lamda" is the one odd spelling.
    for code in [*range(0x391, 0x3AA), *range(0x3B1, 0x3CA)]:
        letter = chr(code)
        if not unicodedata.category(letter).startswith("L"):
            continue
        spelling = unicodedata.name(letter).split()[-1].lower().replace("lamda", "lambda")
        assert GREEK[letter] == (spelling.capitalize() if letter.isupper() else spelling)


def test_function_names_are_reserved_and_others_are_not() -> None:
    assert all(is_reserved(name) for name in ["exp", "log", "sqrt", "sum", "max", "min"])
    assert not any(is_reserved(name) for name in ["Exp", "ln", "pi", "lambda", "total", "beta"])


@pytest.mark.parametrize(
    ("typed", "known", "meant"),
    [
        ("bata", ["alpha", "beta", "gamma"], "beta"),
        ("IH", ["I_h", "I_v"], "I_h"),
        ("Beta", ["beta", "Beta2"], "beta"),
        ("sigm", ["sigma", "Sigma"], "sigma"),
        ("β_H", ["beta_h"], "beta_h"),
        ("β_h", ["beta_h"], None),
        ("q", ["beta", "gamma"], None),
        ("beta", [], None),
        ("beta", ["beta"], None),
    ],
)
def test_suggestion(typed: str, known: list[str], meant: str | None) -> None:
    assert suggest(typed, known) == meant


def test_a_suggestion_is_not_sought_for_a_name_of_any_length() -> None:
    assert suggest("x" * 9000, ["x" * 9001]) is None
    assert suggest("infectious_perod", [f"q{i}" for i in range(50_000)] + ["infectious_period"]) == "infectious_period"
