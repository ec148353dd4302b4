"""The pages as a visitor meets them, without a browser."""

from __future__ import annotations

from pathlib import Path

import pytest
from streamlit.testing.v1 import AppTest

from ngm.screens import shelf
from ngm.screens.registry import PAGES
from ngm.screens.state import AppState, Version
from tests.screens.texts import BROKEN, HOSTILE, NO_R0, NO_TYPE, REDUCIBLE, SIR, UNREADABLE, grouped

ROOT = Path(__file__).resolve().parents[2]
MAIN = ROOT / "ngm" / "screens" / "main.py"


def state(text, valid=None):
    return AppState(now=Version(text, "test.toml", None, valid if valid is not None else text))


STATES = {
    "nothing": None,
    "loaded": state(SIR),
    "broken": state(BROKEN, SIR),
    "broken from the start": AppState(now=Version(BROKEN, "test.toml")),
    "unreadable": state(UNREADABLE, SIR),
    "reducible": state(REDUCIBLE),
    "hostile": state(HOSTILE),
    "no R0": state(NO_R0),
    "no type at infection": state(NO_TYPE),
    "many groups": state(grouped(64)),
    "empty": AppState(now=Version(shelf.EMPTY, "untitled.toml")),
}


def start(held=None, page=None):
    at = AppTest.from_file(str(MAIN), default_timeout=60)
    if held is not None:
        at.session_state["ngm"] = held
    at.run()
    return visit(at, page) if page else at


def visit(at, page):
    return at.switch_page(f"views/{page}.py").run()


def text_of(at):
    return at.session_state["ngm"].now.text


def words(at):
    """Return all that is said on the page."""
    kinds = (at.markdown, at.caption, at.error, at.warning, at.info, at.metric, at.latex, at.code)
    return "\n".join(str(element.value) for kind in kinds for element in kind)


def metrics(at):
    return {metric.label: metric.value for metric in at.metric}


def edit_rows(at, section, *, edited=None, added=(), deleted=()):
    """Change a table as the grid in the browser does."""
    key = f"model.{section}.{at.session_state['ngm'].forms}"
    at.session_state[key] = {"edited_rows": edited or {}, "added_rows": list(added), "deleted_rows": list(deleted)}
    return at.run()


@pytest.mark.parametrize("held", STATES.values(), ids=STATES)
@pytest.mark.parametrize("page", [page.name for page in PAGES])
def test_every_page_opens_in_every_state(page, held):
    at = start(held, page)
    assert not at.exception
    assert at.title[0].value


@pytest.mark.parametrize("page", [page.name for page in PAGES])
def test_every_page_tells_R0(page):
    at = start(STATES["loaded"], page)
    assert metrics(at)["R0: basic reproduction number"] == "2.5"


@pytest.mark.parametrize("page", [page.name for page in PAGES if page.name != "scenario"])
def test_results_of_an_earlier_version_are_said_to_be(page):
    at = start(STATES["broken"], page)
    assert metrics(at)["R0: basic reproduction number"] == "2.5"
    assert "not what is typed now" in words(at) or "not of what is typed now" in words(at)
    assert "bata" in words(at)


@pytest.mark.parametrize("page", [page.name for page in PAGES])
def test_no_number_is_shown_where_there_never_was_one(page):
    at = start(STATES["broken from the start"], page)
    assert not at.metric
    assert "bata" in words(at)


@pytest.mark.parametrize("page", [page.name for page in PAGES])
def test_why_there_is_no_R0_is_said(page):
    at = start(STATES["no R0"], page)
    assert "No R0 at these values" in words(at)
    assert not any("R0" in label for label in metrics(at))


def test_growth_and_vectors():
    at = start(STATES["loaded"], "numbers")
    shown = metrics(at)
    # By hand: r = beta - gamma; one type, so a cycle is a generation.
    assert shown["Growth rate, per day"] == "0.3"
    assert shown["R0 per cycle"] == "2.5"
    assert "no forecast" in words(at)


def test_full_precision_shows_every_digit():
    at = start(state(SIR.replace("0.2,", "0.3,")), "numbers")
    assert metrics(at)["R0: basic reproduction number"] == "1.667"
    at.toggle[0].set_value(True).run()
    assert metrics(at)["R0: basic reproduction number"] == repr(5 / 3)


def test_classes_of_a_reducible_model():
    at = start(STATES["reducible"], "numbers")
    table = next(shown.value for shown in at.table if "class" in shown.value.columns)
    assert sorted(table["R0"]) == [r"0\.5", r"2\.5"]


def test_the_class_that_grows_fastest_is_named_where_it_is_not_the_one_with_the_largest_R0():
    # By hand: A has R0 = 0.4/0.1 = 4 and grows by 0.3; B has 3/2 = 1.5 and grows by 1.
    text = REDUCIBLE.replace("value = 0.5", "value = 0.4").replace("value = 0.1", "value = 3")
    text = text.replace("g = { value = 0.2 }", "g = { value = 0.1 }\nh = { value = 2 }").replace("g * J", "h * J")
    at = start(state(text), "numbers")
    assert metrics(at)["R0: basic reproduction number"] == "4"
    assert "grows fastest (J)" in words(at).replace("\\", "")
    assert "grows fastest" not in words(start(STATES["reducible"], "numbers"))


def test_derivation_shows_closed_form_conditions_and_flows():
    at = start(STATES["loaded"], "derivation")
    said = words(at)
    assert "mathcal{R}" in said
    for name in ("A1", "A2", "A3", "A4", "A5"):
        assert name in said
    assert "flow 1, Infection" in said.replace("\\", "")


@pytest.mark.parametrize("name", shelf.names())
def test_every_scenario_of_the_shelf_opens_on_every_page(name):
    text, folder = shelf.read(name)
    at = start(AppState(now=Version(text, name, folder, text)))
    for page in PAGES:
        visit(at, page.name)
        assert not at.exception
        assert not at.error


def test_opening_from_the_shelf():
    at = start()
    name = shelf.names()[0]
    at.selectbox(key="scenario.shelf").select(name)
    at.button(key="scenario.open").click().run()
    assert text_of(at) == shelf.read(name)[0]
    assert at.text_input(key="scenario.title.1").value
    assert metrics(at)


def test_upload_of_a_scenario_and_of_something_else():
    at = start()
    at.file_uploader(key="scenario.upload").set_value(
        ("mine.toml", SIR.replace("\n", "\r\n").encode(), "text/plain")
    ).run()
    assert text_of(at) == SIR
    at.file_uploader(key="scenario.upload").set_value(("mine.toml", b"\xff\xfe\x00bad", "text/plain")).run()
    assert "was not opened" in words(at)
    assert text_of(at) == SIR


@pytest.mark.parametrize(
    ("name", "content", "word"),
    [
        ("a.toml", b"\xff\xfe", "UTF-8"),
        ("a.toml", b"a\x00b", "NUL"),
        ("a.csv", b"a = 1", ".toml"),
        ("a.toml", b"#" * (shelf.MOST_BYTES + 1), "16 MB"),
    ],
)
def test_wrong_uploads_are_refused_in_words(name, content, word):
    found = shelf.uploaded(name, content)
    assert isinstance(found, shelf.Refused)
    assert word in found.why


def test_the_shelf_gives_only_what_is_on_it():
    with pytest.raises(ValueError, match="none of the scenarios"):
        shelf.read("../requirements.txt")


def test_an_edited_rate_gives_a_new_R0_and_undo_the_old_one():
    at = start(STATES["loaded"], "model")
    edit_rows(at, "flow", edited={1: {"rate": "2 * gamma * I"}})
    assert not at.exception
    assert metrics(at)["R0: basic reproduction number"] == "1.25"  # by hand: beta/(2 gamma)
    assert text_of(at) == SIR.replace('"gamma * I"', '"2 * gamma * I"')  # one line of difference, comments kept
    at.sidebar.button(key="status.undo").click().run()
    assert text_of(at) == SIR
    assert metrics(at)["R0: basic reproduction number"] == "2.5"


def test_an_entry_survives_leaving_the_page():
    at = start(STATES["loaded"], "model")
    edit_rows(at, "parameters", edited={0: {"value": "0,8"}})  # wrong, and kept all the same
    visit(at, "numbers")
    assert "0,8" in words(at)
    visit(at, "model")
    assert '"0,8"' in text_of(at)
    assert "in this table" in words(at)
    assert metrics(at)["R0: basic reproduction number"] == "2.5"
    edit_rows(at, "parameters", edited={0: {"value": "0.8"}})
    assert metrics(at)["R0: basic reproduction number"] == "4"


def test_a_newcomer_types_three_compartments_and_gets_R0():
    at = start()
    at.button(key="scenario.empty").click().run()
    visit(at, "model")
    assert not at.metric
    edit_rows(
        at,
        "compartments",
        added=[
            {"name": "S", "infected": "no"},
            {"name": "I", "infected": "yes"},
            {"name": "R", "infected": "no"},
        ],
    )
    edit_rows(
        at,
        "flow",
        added=[
            {"from": "S", "to": "I", "rate": "beta * S * I / N", "kind": "transmission"},
            {"from": "I", "to": "R", "rate": "gamma * I", "kind": "transition"},
        ],
    )
    assert "beta" in words(at)  # not defined yet, said at the table
    edit_rows(at, "parameters", added=[{"name": "beta", "value": "1/2"}, {"name": "gamma", "value": "0.2"}])
    edit_rows(at, "definitions", added=[{"name": "N", "": "S + I + R"}])
    edit_rows(at, "infection_free", added=[{"name": "S", "": "1000"}, {"name": "R", "": "0"}])
    assert not at.exception
    assert metrics(at)["R0: basic reproduction number"] == "2.5"
    visit(at, "derivation")
    assert not at.exception
    assert metrics(at)["R0: basic reproduction number"] == "2.5"


def test_a_row_is_deleted_and_another_added_in_the_grid():
    at = start(STATES["loaded"], "model")
    edit_rows(at, "parameters", deleted=[1], added=[{"name": "gamma", "value": "0.25"}])
    assert metrics(at)["R0: basic reproduction number"] == "2"
    assert "# contacts" in text_of(at)


def test_fields_and_text_view_follow_each_other():
    at = start(STATES["loaded"])
    at.text_input(key="scenario.title.0").set_value("Another").run()
    assert 'title = "Another"' in text_of(at)
    assert 'title = "Another"' in at.text_area(key="scenario.source.1").value
    at.text_area(key="scenario.source.1").set_value(text_of(at).replace("Another", "Third")).run()
    assert at.text_input(key="scenario.title.1").value == "Third"


def test_text_that_is_no_toml_is_kept():
    at = start(STATES["loaded"])
    at.text_area(key="scenario.source.0").set_value(UNREADABLE).run()
    assert text_of(at) == UNREADABLE
    visit(at, "model")
    assert "problem" in words(at)
    visit(at, "scenario")
    assert at.text_area[-1].value == UNREADABLE


def test_a_changed_value_stands_beside_the_old_and_is_taken_over():
    at = start(STATES["loaded"], "numbers")
    at.multiselect(key="numbers.chosen").set_value(["beta"]).run()
    at.text_input(key="numbers.value.beta").set_value("0.1").run()
    shown = metrics(at)
    assert (shown["R0 now"], shown["R0 with these values"]) == ("2.5", "0.5")
    assert text_of(at) == SIR
    visit(at, "scenario")
    visit(at, "numbers")  # what was typed is still there
    assert at.text_input(key="numbers.value.beta").value == "0.1"
    at.button(key="numbers.apply").click().run()
    assert text_of(at) == SIR.replace("value = 0.5", "value = 0.1")
    assert metrics(at)["R0: basic reproduction number"] == "0.5"


def test_hostile_labels_are_words_and_nothing_else():
    for page in PAGES:
        at = start(STATES["hostile"], page.name)
        assert not at.exception
        for element in [*at.markdown, *at.caption, *at.error, *at.info, *at.warning]:
            assert "](http" not in element.value
            assert "<script" not in element.value.replace("\\<", "")


def test_a_matrix_cell_is_one_line_of_difference():
    text, folder = shelf.read("age-groups-ember-cough.toml")
    at = start(AppState(now=Version(text, "a.toml", folder, text)), "model")
    before = metrics(at)
    at.session_state["model.matrix.contacts.None.0"] = {
        "edited_rows": {0: {"0": "50"}},
        "added_rows": [],
        "deleted_rows": [],
    }
    at.run()
    assert not at.exception
    assert metrics(at) != before
    assert sum(a != b for a, b in zip(text.splitlines(), text_of(at).splitlines(), strict=True)) == 1


def test_a_grouped_derivation_stands_on_its_template():
    scenario = (ROOT / "scenarios" / "age-groups-ember-cough.toml").read_text(encoding="utf-8")
    at = start(state(scenario), "derivation")
    blocks = [code.value for code in at.code if "diag(" in code.value]
    assert len(blocks) == 1
    assert "K[E, E] = diag(population*q*sigma) contacts diag(1/(gamma*population))" in blocks[0]
