"""The table of what quantities mean is whole, and each page's keys are in it."""

from __future__ import annotations

import pytest

from ngm.meanings import MEANINGS, help_text, table
from ngm.screens.registry import PAGES


@pytest.mark.parametrize("key", MEANINGS)
def test_a_meaning_is_a_sentence_a_formula_and_a_unit(key):
    meaning = MEANINGS[key]
    assert meaning.says.endswith(".")
    assert meaning.formula.count("{") == meaning.formula.count("}")
    assert "$" not in meaning.formula + meaning.says + meaning.unit + meaning.source
    assert meaning.unit
    assert meaning.formula in help_text(key)
    assert meaning.says in table([key])


def test_the_pages_explain_what_is_in_the_table():
    explained = {key for page in PAGES for key in page.explains}
    assert explained <= set(MEANINGS)
    assert {"R0", "K", "growth_rate", "T"} <= explained
