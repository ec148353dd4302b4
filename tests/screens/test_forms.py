"""Rows of text cells from a document, and edits of the document from changed rows."""

from __future__ import annotations

import tomllib

import pytest

from ngm.errors import ScenarioError
from ngm.screens import forms
from ngm.screens.forms import TABLES, Edit

TEXT = """\
[scenario]
title = "A"
time_unit = "day"

[compartments]
S = { label = "Susceptible", infected = false }
I = { infected = true, by = ["age", "region"] }

[parameters]
beta = { value = 4e-1, unit = "1/day", range = [0.2, 0.60] }
sigma = { value = [0.9, "1/7"], by = ["age"], distribution = { name = "gamma", mean = 1.0, sd = 0.1 } }

[definitions]
N = "S + I"

[[flow]]
from = "S"
to = "I"
rate = "beta*S*I/N"
kind = "transmission"

[[flow]]
from = "I"
rate = "gamma * I"
kind = "transition"
label = "Recovery"
"""


def test_a_new_name_goes_wherever_the_old_one_stood():
    changed = forms.apply(TEXT, [Edit("follow", ("compartments", "I"), "J")])
    assert 'N = "S + J"' in changed
    assert 'rate = "beta*S*J/N"' in changed
    assert 'from = "J"' in changed
    # the name is taken: the key alone is renamed, and the reader says what is wrong
    assert forms.apply(TEXT, [Edit("follow", ("parameters", "beta"), "N")]) == TEXT.replace("beta = {", "N = {")
    assert forms.apply(TEXT, [Edit("follow", ("parameters", "beta"), "gamma")]) == TEXT.replace("beta = {", "gamma = {")


def test_a_row_in_place_of_another_is_no_new_name(document):
    table = TABLES["parameters"]
    before = forms.rows(table, document)
    other = [("rho", "1", *before[0][2:]), *before[1:]]
    assert [change.action for change in forms.edits(table, before, other, document)] == ["rename", "set"]


@pytest.fixture
def document():
    return forms.document(TEXT)


def test_cells_show_numbers_as_they_were_typed(document):
    assert forms.rows(TABLES["parameters"], document) == [
        ("beta", "4e-1", "1/day", "", "", "", "[0.2, 0.60]", "", ""),
        ("sigma", '[0.9, "1/7"]', "", "", "", "age", "", '{ name = "gamma", mean = 1.0, sd = 0.1 }', ""),
    ]
    assert forms.rows(TABLES["compartments"], document) == [
        ("S", "Susceptible", "no", ""),
        ("I", "", "yes", "age, region"),
    ]
    assert forms.rows(TABLES["flow"], document)[1] == ("I", "", "gamma * I", "transition", "Recovery")
    assert forms.rows(TABLES["movement"], document) == []


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("0.4", 0.4),
        ("1e-3", 1e-3),
        ("7", 7),
        ("-2", -2),
        ("1/7", "1/7"),
        ("0,5", "0,5"),  # no number: kept as typed, for the reader to refuse in words
        (".5", ".5"),  # no TOML number, but a number of the expression syntax
        ("0.12345678901234567890", "0.12345678901234567890"),  # more digits than a float holds
        ("[1, 2.5]", [1, 2.5]),
        ('{ name = "gamma", mean = 1.0 }', {"name": "gamma", "mean": 1.0}),
        ("[1, 2", "[1, 2"),
        ("[1]\ny = 2", "[1]\ny = 2"),  # a second key smuggled into the cell: it stays text
        ("nan", "nan"),
        ("true", "true"),
        ("", None),
    ],
)
def test_typed_values(text, value):
    found = forms.typed(text)
    assert found == value
    assert type(found) is type(value)


@pytest.mark.parametrize("section", TABLES)
def test_unchanged_rows_ask_for_nothing(section, document):
    table = TABLES[section]
    rows = forms.rows(table, document)
    assert forms.edits(table, rows, forms.tidy(table, rows), document) == []


def test_one_cell_is_one_edit(document):
    table = TABLES["flow"]
    before = forms.rows(table, document)
    after = [before[0], ("I", "", "2 * gamma * I", "transition", "Recovery")]
    assert forms.edits(table, before, after, document) == [Edit("set", ("flow", 1, "rate"), "2 * gamma * I")]


def test_a_cleared_cell_deletes_its_key(document):
    table = TABLES["parameters"]
    before = forms.rows(table, document)
    after = [(*before[0][:2], "", *before[0][3:]), before[1]]
    assert forms.edits(table, before, after, document) == [Edit("delete", ("parameters", "beta", "unit"))]


def test_a_new_name_renames_and_a_row_deleted_above_keeps_the_places(document):
    table = TABLES["compartments"]
    before = forms.rows(table, document)
    renamed = [before[0], ("J", *before[1][1:])]
    assert forms.edits(table, before, renamed, document) == [Edit("follow", ("compartments", "I"), "J")]
    assert forms.edits(table, before, before[1:], document) == [Edit("delete", ("compartments", "S"))]


def test_new_rows_keep_their_order(document):
    table = TABLES["flow"]
    before = forms.rows(table, document)
    after = [*before, ("", "S", "b", "transition", ""), ("S", "", "d*S", "", "")]
    assert forms.edits(table, before, after, document) == [
        Edit("append", ("flow",), {"to": "S", "rate": "b", "kind": "transition"}),
        Edit("append", ("flow",), {"from": "S", "rate": "d*S"}),
    ]


def test_rows_that_cannot_stand_get_a_name_of_their_own():
    rows = forms.tidy(TABLES["definitions"], [("N", "a"), ("N", "b"), (None, "c"), ("", float("nan")), (" N ", "d")])
    assert rows == [("N", "a"), ("N (2)", "b"), ("?", "c"), ("N (3)", "d")]
    # Greek letters and their spelling are one name.
    assert forms.tidy(
        TABLES["definitions"], [("beta", "1"), ("β", "2"), ("ϵ_1", "3"), ("epsilon_1", "4"), ("Λ", "5")]
    ) == [
        ("beta", "1"),
        ("β (2)", "2"),
        ("ϵ_1", "3"),
        ("epsilon_1 (2)", "4"),
        ("Λ", "5"),
    ]


def test_a_text_without_a_place_for_an_edit_says_so():
    with pytest.raises(ScenarioError):
        forms.apply("compartments = 3", [Edit("set", ("compartments", "S"), {"infected": False})])


@pytest.mark.parametrize(
    "text",
    ["compartments = 3", "[[compartments]]\nx = 1", "compartments.S = 4", "flow = [1, 2]", "flow = {}", "[flow.x]"],
)
def test_documents_of_any_form_give_rows(text):
    document = forms.document(text)
    for table in TABLES.values():
        assert forms.rows(table, document) == []


def test_what_is_no_toml_has_no_document():
    assert forms.document("a = ") is None
    assert forms.document("a = " + "[" * 5000) is None


@pytest.mark.parametrize("text", [TEXT, TEXT.replace("4e-1", '"1e-1 +"')])
def test_edits_applied_give_the_rows_asked_for(text):
    document = forms.document(text)
    table = TABLES["parameters"]
    before = forms.rows(table, document)
    after = [("b", "1/3", "", "New", "", "", "", "", ""), before[1], ("mu", "0.01", "1/day", "", "", "", "", "", "")]
    new = forms.apply(text, forms.edits(table, before, after, document))
    assert forms.rows(table, forms.document(new)) == after


def test_an_entry_of_a_full_matrix_is_set_alone():
    text = 'x = 1 # kept\n[matrices.C]\nby = "age"\nvalues = [\n  [1.0, 2.0],\n  [3.0, 4.50],\n]\n'
    values = forms.document(text)["matrices"]["C"]["values"]
    before = forms.matrix_rows(values, 2)
    assert before == [("1.0", "2.0"), ("3.0", "4.50")]
    after = [before[0], ("7", "4.50")]
    found = forms.matrix_edits(("matrices", "C", "values"), values, before, after, None, 2)
    assert found == [Edit("set", ("matrices", "C", "values", 1, 0), 7)]
    assert forms.apply(text, found) == text.replace("3.0", "7")


def test_a_matrix_is_typed_in_cell_by_cell():
    before = forms.matrix_rows(None, 2)
    after = [("1", ""), ("", "")]
    found = forms.matrix_edits(("matrices", "C", "values"), None, before, after, None, 2)
    assert found == [Edit("set", ("matrices", "C", "values"), [[1, ""], ["", ""]])]
    # One of several matrices, given before the first one is.
    found = forms.matrix_edits(("matrices", "C", "values"), None, before, after, 1, 2)
    assert found[0].value == [[["", ""], ["", ""]], [[1, ""], ["", ""]]]


def test_shown_reads_back():
    value = tomllib.loads('x = { a = "quo\\"te", b = [1, 2.5, "t\\\\n"], "odd key" = true }')["x"]
    assert forms.typed(forms.shown(value)) == value
