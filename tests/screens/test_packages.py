"""Interventions as rows of cells, and changed rows as edits of the text."""

from __future__ import annotations

import difflib
from pathlib import Path

import pytest

import ngm
from ngm.screens import forms, packages

TEXT = (Path(__file__).parents[2] / "scenarios" / "age-groups-ember-cough.toml").read_text(encoding="utf-8")
ROWS = packages.change_rows(forms.document(TEXT))


def typed_in(rows, text=TEXT):
    """Return the text after the rows were typed; typing them a second time must change nothing."""
    document = forms.document(text)
    after = forms.apply(text, packages.change_edits(document, packages.tidy_changes(document, rows)))
    again = forms.document(after)
    assert forms.apply(after, packages.change_edits(again, packages.tidy_changes(again, rows))) == after
    return after


def difference(after, before=TEXT):
    """Return the lines that went and the lines that came."""
    lines = list(difflib.unified_diff(before.splitlines(), after.splitlines(), lineterm="", n=0))[2:]
    return [x[1:] for x in lines if x.startswith("-")], [x[1:] for x in lines if x.startswith("+")]


def changed(row, **cells):
    """Return the rows of the example with some cells of one row changed."""
    fields = [column.field for column in packages.CHANGES]
    rows = [list(one) for one in ROWS]
    for field, cell in cells.items():
        rows[row][fields.index(field)] = cell
    return rows


def problems(text):
    try:
        ngm.loads(text)
    except ngm.ScenarioError as error:
        return str(error)
    return ""


def test_rows_of_the_example():
    assert len(ROWS) == 11
    assert ROWS[0] == ("Masks", "parameter", "q", "multiply", "0.8", "", "", "")
    assert ROWS[2] == ("Schools closed", "matrix", "contacts", "multiply", "0.4", "", "5-17", "5-17")
    assert ROWS[4] == ("Vaccination of adults", "infectivity", "I", "reduce", "0.20", "age: 18-64, 65+", "", "")


def test_nothing_typed_changes_nothing():
    assert typed_in(ROWS) == TEXT


@pytest.mark.parametrize(
    ("row", "cells", "line"),
    [
        (0, {"amount": "0.7"}, 'change = [{ parameter = "q", multiply = 0.7 }]'),
        (0, {"amount": "70 %"}, 'change = [{ parameter = "q", multiply = "70 %" }]'),  # wrong, and kept
        (1, {"action": "multiply", "amount": "1.35"}, 'change = [{ parameter = "gamma", multiply = 1.35 }]'),
        (0, {"name": "beta"}, 'change = [{ parameter = "beta", multiply = 0.8 }]'),
        (0, {"amount": ""}, 'change = [{ parameter = "q", multiply = "" }]'),
        (0, {"action": ""}, 'change = [{ parameter = "q", amount = 0.8 }]'),
        (0, {"what": ""}, 'change = [{ "?" = "q", multiply = 0.8 }]'),
        (
            3,
            {"group": "65+"},  # the only dimension need not be named
            '    { susceptibility = "E", group = { age = ["65+"] }, reduce = 0.49 },',
        ),
        (3, {"group": ""}, '    { susceptibility = "E", reduce = 0.49 },'),
        (
            6,
            {"columns": "0-4, 5-17"},
            '    { matrix = "contacts", add = -0.1, rows = ["65+"], columns = ["0-4", "5-17"] },',
        ),
    ],
)
def test_one_cell_is_one_line_of_difference(row, cells, line):
    gone, come = difference(typed_in(changed(row, **cells)))
    assert (len(gone), come) == (1, [line])


def test_comments_stay():
    after = typed_in(changed(7, amount="-0.2"))
    assert [line for line in after.splitlines() if "#" in line] == [line for line in TEXT.splitlines() if "#" in line]


def test_a_row_added_goes_where_its_intervention_is():
    rows = [*ROWS, ("Masks", "parameter", "gamma", "add", "0.01", "", "", "")]
    assert difference(typed_in(rows)) == (
        ['change = [{ parameter = "q", multiply = 0.8 }]'],
        ['change = [{ parameter = "q", multiply = 0.8 }, { parameter = "gamma", add = 0.01 }]'],
    )


def test_a_new_name_makes_a_new_intervention_and_an_empty_one_means_the_row_above():
    rows = [*ROWS, ("Holiday", "parameter", "q", "multiply", "1e-1", "", "", "")]
    rows += [("", "matrix", "contacts", "multiply", "0.9", None, float("nan"), "")]
    after = typed_in(rows)
    made = ngm.loads(after).interventions[-1]
    assert (made.name, len(made.changes)) == ("Holiday", 2)
    assert not [line for line in difflib.ndiff(TEXT.splitlines(), after.splitlines()) if line.startswith("- ")]


def test_a_row_moved_to_another_intervention_keeps_its_place_among_the_rows():
    after = ngm.loads(typed_in(changed(9, intervention="Masks"))).interventions
    assert [(len(one.changes), one.name) for one in after][:1] == [(2, "Masks")]
    assert [change.name for change in after[-1].changes] == ["contacts", "contacts", "contacts", "sigma", "gamma"]


def test_rows_removed():
    rows = [row for k, row in enumerate(ROWS) if k not in (0, 7)]
    after = typed_in(rows)
    gone, come = difference(after)
    assert len(gone) == 2
    assert come == ["change = []"]
    assert "lists no change" in problems(after)


def test_what_is_half_typed_stays_and_is_told():
    rows = [*ROWS, ("Masks", "", "gama", "", "0,5", "", "", "")]
    after = typed_in(rows)
    assert packages.change_rows(forms.document(after))[1] == ("Masks", "", "gama", "", "0,5", "", "", "")
    assert "names nothing to change" in problems(after)


def test_the_first_row_of_a_scenario_without_interventions():
    text = TEXT[: TEXT.index("# Five packages")]
    after = typed_in([("Masks", "parameter", "q", "multiply", "0.8", "", "", "")], text)
    assert [one.name for one in ngm.loads(after).interventions] == ["Masks"]


def test_names_that_stand_twice_and_none_at_all_are_told_apart():
    text = TEXT.replace('name = "Isolation of cases"', 'name = "Masks"').replace('name = "Schools closed"', 'name = ""')
    document = forms.document(text)
    assert packages.names(document)[:3] == ["Masks", "Masks (2)", "?"]
    rows = packages.change_rows(document)
    assert typed_in(rows, text) == text
    rows[1] = ("Masks (2)", "parameter", "gamma", "set", "0.3", "", "", "")
    gone, come = difference(typed_in(rows, text), text)
    assert (len(gone), come) == (1, ['change = [{ parameter = "gamma", set = 0.3 }]'])


def test_groups_over_two_dimensions_and_labels_that_look_like_signs():
    group = '{ age = "0-4", region = ["N", "S"] }'
    text = TEXT.replace('group = { age = ["0-4", "5-17"] }', f"group = {group}")
    row = packages.change_rows(forms.document(text))[8]
    assert row[5] == "age: 0-4; region: N, S"
    odd = TEXT.replace('group = { age = ["0-4", "5-17"] }', 'group = { age = ["a:b", "c;d"] }')
    assert packages.change_rows(forms.document(odd))[8][5] == '{ age = ["a:b", "c;d"] }'
    assert typed_in(packages.change_rows(forms.document(odd)), odd) == odd


@pytest.mark.parametrize("change", ["change = 3", "change = [3]", 'change = "x"', "cost = 1"])
def test_a_change_of_another_form_is_replaced_only_when_rows_are_typed(change):
    text = f'[scenario]\ntitle = "x"\ntime_unit = "day"\n\n[[intervention]]\nname = "A"\n{change}\n'
    assert typed_in([], text) == text
    after = typed_in([("A", "parameter", "q", "multiply", "0.8", "", "", "")], text)
    assert '{ parameter = "q", multiply = 0.8 }' in after


def test_other_keys_of_a_change_are_kept():
    text = TEXT.replace('{ parameter = "q", multiply = 0.8 }]', '{ parameter = "q", multiply = 0.8, why = 1e-3 }]', 1)
    rows = packages.change_rows(forms.document(text))
    rows[0] = ("Masks", "parameter", "q", "set", "0.8", "", "", "")
    assert "why = 0.001" in typed_in(rows, text)
