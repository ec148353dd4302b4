"""The pages with a K as given and with a projected population, as a visitor meets them."""

from __future__ import annotations

import pytest

from ngm.screens import stated_edits
from ngm.screens.registry import PAGES
from tests.screens.test_pages import edit_rows, metrics, start, state, text_of, visit, words
from tests.stated import change, given, population

# By hand: K = [[0, 2.5 p], [2, 0]] has R0 = sqrt(5 p) = 1.5 for p = 0.45.
GIVEN = given(
    [[0, "2.5 * p"], [2, 0]],
    ["tick", "mouse"],
    {"p": 0.45},
    "sizes = [1000, 50]",
    change('infectivity = "mouse", reduce = 0.5'),
)
# By hand: fertility (0, 0, 6), survival 0.5 and 0.4: R0 = 1.2, period 3, growth factor the cube root of 1.2.
PEOPLE = population([[0, 0, "f"], [0] * 3, [0] * 3], [[0] * 3, [0.5, 0, 0], [0, 0.4, 0]], ["a", "b", "c"], {"f": 6})
NO_END = population([[0, 1], [0, 0]], [[0, 0], [0.5, 1]])


@pytest.mark.parametrize("text", [GIVEN, PEOPLE, NO_END], ids=["K", "population", "no R0"])
@pytest.mark.parametrize("page", [page.name for page in PAGES])
def test_every_page_opens(page, text):
    at = start(state(text), page)
    assert not at.exception
    assert not [error for error in at.error if "No R0" not in str(error.value)]


def test_only_what_applies_to_a_K_is_shown():
    at = start(state(GIVEN), "numbers")
    assert metrics(at)["R0: basic reproduction number"] == "1.5"
    assert not any("Growth" in label for label in metrics(at))
    assert "has no time in it" in words(at)
    at = visit(at, "derivation")
    assert [head.value for head in at.subheader][:3] == [
        "1. Types",
        "2. Next-generation matrix K",
        "3. R0, the spectral radius of K",
    ]
    assert "Infection-free state" not in words(at)
    assert r"\mathcal{R}_0" in words(at)  # the closed form sqrt(5*p)


def test_only_what_applies_to_a_population_is_shown():
    at = start(state(PEOPLE), "numbers")
    shown = metrics(at)
    assert shown["R0: net reproduction number"] == "1.2"
    assert shown["Growth factor, per year"] == "1.063"
    said = words(at).replace("\\", "")
    assert "grows in the long run" in said
    assert "period 3" in said
    heads = [head.value for head in visit(at, "derivation").subheader]
    assert heads[1] == "2. Births F and transitions T"
    assert not any("Infection-free" in head for head in heads)


def test_a_population_without_R0_shows_its_growth():
    at = start(state(NO_END), "numbers")
    assert "No R0 at these values" in words(at)
    assert metrics(at)["Growth factor, per year"] == "1.366"


def test_an_entry_is_edited_in_its_grid():
    at = start(state(GIVEN), "model")
    assert at.subheader[0].value == "Next-generation matrix K"
    assert "Flows" not in [head.value for head in at.subheader]
    forms = at.session_state["ngm"].forms
    key = f"model.next_generation.K.2.{forms}"
    at.session_state[key] = {"edited_rows": {0: {"1": "4.5 * p"}}, "added_rows": [], "deleted_rows": []}
    at.run()
    assert not at.exception
    assert text_of(at) == GIVEN.replace('"2.5 * p"', '"4.5 * p"')
    assert metrics(at)["R0: basic reproduction number"] == "2.012"  # sqrt(4.05)


def test_a_parameter_is_edited_beside_it():
    at = edit_rows(start(state(GIVEN), "model"), "parameters", edited={0: {"value": "0.8"}})
    assert metrics(at)["R0: basic reproduction number"] == "2"


def test_problems_stand_at_the_matrix():
    at = start(state(GIVEN.replace("2.5 * p", "2.5 * q"), GIVEN), "model")
    assert "'q' is not defined" in words(at).replace("\\", "")
    assert "in this table" in words(at)


def test_types_are_named_anew_and_added():
    at = start(state(GIVEN), "model")
    box = next(field for field in at.text_input if field.label.startswith("Types"))
    assert box.value == "tick, mouse"
    at = box.set_value("tick, vole").run()
    assert 'types = ["tick", "vole"]' in text_of(at)
    box = next(field for field in at.text_input if field.label.startswith("Types"))
    at = box.set_value("vole, tick, hare").run()
    assert not at.exception
    # Entries go with their labels; new ones are 0, by hand.
    assert "[0, 2, 0]" in text_of(at)
    assert '["2.5 * p", 0, 0]' in text_of(at)


def begin(at, kind=None, cells=None, **choices):
    if kind is not None:
        at = at.radio(key="scenario.stated.kind").set_value(kind).run()
    if cells is not None:
        at = at.text_area(key="scenario.stated.cells").set_value(cells).run()
    for key, value in choices.items():
        at = at.radio(key=f"scenario.stated.{key}").set_value(value).run()
    return at


@pytest.mark.parametrize("kind", stated_edits.KINDS)
def test_a_small_matrix_begins_a_scenario(kind):
    at = begin(start(None, "scenario"), kind)
    at = at.button(key="scenario.stated.small").click().run()
    assert not at.exception
    assert text_of(at) == stated_edits.EXAMPLES[stated_edits.KINDS[kind]]
    assert metrics(at)  # it has a number


def test_a_matrix_is_pasted_from_a_spreadsheet():
    cells = "\tyoung\told\nyoung\t1.5\t0.5\nold\t0.25\t0.75\n"
    at = begin(start(None, "scenario"), cells=cells)
    assert not at.exception
    at = at.button(key="scenario.stated.take").click().run()
    assert "[1.5, 0.5]" in text_of(at)
    # The other way round: rows infect.
    at = begin(start(None, "scenario"), cells=cells, side="the row")
    at = at.button(key="scenario.stated.take").click().run()
    assert "[1.5, 0.25]" in text_of(at)
    assert 'types = ["young", "old"]' in text_of(at)


def test_a_population_is_pasted_from_a_spreadsheet():
    at = begin(start(None, "scenario"), "A population in stages", "0,2\n0.3,0.8\n")
    at = at.button(key="scenario.stated.take").click().run()
    assert metrics(at)["R0: net reproduction number"] == "3"  # 0.3/0.2 * 2, by hand


def test_cells_that_are_no_matrix_are_refused():
    at = begin(start(None, "scenario"), cells="1,2\n3\n")
    assert "cannot be taken" in words(at)
