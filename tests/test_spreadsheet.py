"""What a table says is data in a spreadsheet program, too."""

from __future__ import annotations

import ast
import csv
import io
from pathlib import Path

import pandas
import pytest

from ngm.scenario.csvfile import table_of
from ngm.spreadsheet import csv_rows, csv_text, safe

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


def test_a_matrix_that_is_written_is_read_again():
    groups = ("=A1", "-1", "+x", "@y", "65+", "a b", "\tz")
    table = [[i + j / 8 for j in range(7)] for i in range(7)]
    written = csv_rows([["from/to", *groups], *([group, *row] for group, row in zip(groups, table, strict=True))])
    assert [[float(x) for x in row] for row in table_of(written, groups)] == table
    assert not any(cell.startswith(("=", "@", "\t")) for row in csv.reader(io.StringIO(written)) for cell in row)


def test_cells_with_separators_stay_one_cell():
    assert list(csv.reader(io.StringIO(csv_rows([['a,b;c\n"d"', None, 0.1]])))) == [['a,b;c\n"d"', "", "0.1"]]


def test_no_other_place_writes_csv():
    """One place for one rule: a table that went round it could hold a formula."""
    for path in (Path(__file__).parents[1] / "ngm").rglob("*.py"):
        if path.name == "spreadsheet.py":
            continue
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            if isinstance(node, ast.Call) and isinstance(node.func, ast.Attribute):
                called = ast.unparse(node.func)
                assert called != "csv.writer", path
                # a table of draws has a method of this name, which is written with `csv_text`
                is_frame = "frame" in called or bool(node.args or node.keywords)
                assert node.func.attr != "to_csv" or not is_frame, f"{path}, line {node.lineno}"
