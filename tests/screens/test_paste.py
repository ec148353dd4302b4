"""Tables pasted from a spreadsheet: by headings or in the table's order, checked line by line."""

from __future__ import annotations

import pytest

import ngm
from ngm.screens import forms, paste
from ngm.screens.forms import TABLES
from tests.screens.test_pages import STATES, metrics, start, text_of, words
from tests.screens.texts import SIR, grouped

DOCUMENT = forms.document(SIR)


def taken(section, text, document=None, source=SIR, **more):
    found = paste.into_table(TABLES[section], text, document or DOCUMENT, **more)
    assert not found.problems
    return forms.apply(source, found.edits)


def refused(section, text, **more):
    found = paste.into_table(TABLES[section], text, DOCUMENT, **more)
    assert not found.edits
    return "\n".join(map(str, found.problems))


def test_headings_in_any_order_change_and_add_rows_and_leave_other_cells():
    text = taken("parameters", "Unit\tName\tValue\n1/day\tbeta\t0.8\n1/week\tmu\t1e-3\n")
    parameters = ngm.loads(text).parameters
    assert (parameters["beta"].values[0].text, parameters["mu"].values[0].text) == ("0.8", "0.001")
    assert "# contacts" in text  # the comment beside the changed value
    assert ngm.solve(ngm.loads(text)).R0 == pytest.approx(4)  # by hand: 0.8/0.2


def test_without_headings_the_columns_are_those_of_the_table():
    text = taken("compartments", "E;Latently infected;TRUE\n")
    assert ngm.loads(text).compartments["E"].infected
    text = taken("definitions", "P\tS + R")
    assert 'P = "S + R"' in text


def test_flows_are_added_and_may_take_the_place_of_the_present_ones():
    flows = "From\tTo\tRate\tKind\nS\tI\tbeta * S * I / N\tTransmission\nI\t\t2 * gamma * I\ttransition"
    assert len(ngm.loads(taken("flow", flows)).flows) == 4
    scenario = ngm.loads(taken("flow", flows, instead=True))
    assert len(scenario.flows) == 2
    assert ngm.solve(scenario).R0 == pytest.approx(1.25)  # by hand: 0.5/(2 * 0.2)


@pytest.mark.parametrize(
    ("section", "text", "said"),
    [
        ("parameters", "a\t0,5", "line 1: Value: '0,5' has a comma. Write 0.5"),
        ("parameters", "Name\tWorth\tValue\na\t1\t2", "'Worth' is no column of this table"),
        ("parameters", "\t3", "line 1: the name is empty"),
        ("parameters", "a\t1\na\t2", "line 2: 'a' stands twice; first in line 1"),
        ("definitions", "a\tb\tc", "3 cells for 2 columns"),
        ("compartments", "E\tLatent\tmaybe", "'maybe' is none of yes, no"),
        ("flow", "S\tI\tx\tinfection", "'infection' is none of transmission, transition"),
        ("flow", " \n", "nothing was pasted"),
        ("flow", "S\n" * 3000, "3,000 rows"),
    ],
)
def test_what_is_wrong_is_told_with_its_line(section, text, said):
    assert said in refused(section, text)


def test_a_matrix_is_pasted_with_its_labels_in_any_order():
    source = grouped(2)
    document = forms.document(source)
    found = paste.into_matrix("C", "\tg1\tg0\ng1\t4\t3\ng0\t2\t1\n", document, ["g0", "g1"])
    assert forms.document(forms.apply(source, found.edits))["matrices"]["C"]["values"] == [[1, 2], [3, 4]]
    wrong = paste.into_matrix("C", "1\t2\n3", document, ["g0", "g1"])
    assert "line 2 has 1 cells" in str(wrong.problems[0])


def test_pasted_on_the_page_it_is_taken_over_on_demand_and_undone():
    at = start(STATES["loaded"], "model")
    at.selectbox(key="paste.into").set_value("Parameters").run()
    field = next(area for area in at.text_area if area.key.startswith("paste.text"))
    field.set_value("beta\t0.8").run()
    assert text_of(at) == SIR
    assert "0 rows added, 1 changed" in words(at).replace("\\", "")
    at.button(key="paste.take").click().run()
    assert not at.exception
    assert metrics(at)["R0: basic reproduction number"] == "4"
    at.button(key="status.undo").click().run()
    assert text_of(at) == SIR
