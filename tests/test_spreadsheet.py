"""What a table says is data in a spreadsheet program, too."""

from __future__ import annotations

import csv
import io

import pandas
import pytest

from ngm.spreadsheet import csv_text, safe

HOSTILE = ["=HYPERLINK(1)", "+1", "-1+1", "@SUM(A1)", "\tx", "\rx"]


@pytest.mark.parametrize("text", HOSTILE)
def test_no_text_begins_like_a_formula(text):
    frame = pandas.DataFrame({text: [text, "plain", None], "number": [-1.5, 0.1, float("nan")]})
    rows = list(csv.reader(io.StringIO(csv_text(frame), newline="")))
    shown = "'" + text.replace("\r", " ")
    assert rows[0] == [shown, "number"]
    assert rows[1] == [shown, "-1.5"]
    assert rows[2:] == [["plain", "0.1"], ["", ""]]


def test_labels_of_rows_are_looked_at_too():
    frame = pandas.DataFrame({"doses": [1.0]}, index=pandas.Index(["=A1"], name="group"))
    assert csv_text(frame, index=True).splitlines() == ["group,doses", "'=A1,1.0"]


def test_numbers_keep_every_digit():
    assert csv_text(pandas.DataFrame({"x": [0.1 + 0.2]})).splitlines()[1] == "0.30000000000000004"


def test_what_is_no_text_is_left():
    assert safe(-1.0) == -1.0
    assert safe("1 - 1/R0") == "1 - 1/R0"
