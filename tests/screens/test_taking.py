"""What is offered to be copied and saved below matrices and pictures."""

from __future__ import annotations

import csv
import io
import re
from pathlib import Path

import pytest

import ngm
from ngm.charts.spectrum import eigenvalues
from ngm.screens import taking
from tests.screens.texts import REDUCIBLE


@pytest.fixture
def offered(monkeypatch):
    """Return what the rows of buttons are given."""
    held = []
    monkeypatch.setattr(taking, "_row", lambda data, key: held.append(data))
    return held


def test_a_matrix_is_copied_at_full_precision_as_formulas_and_as_text(offered):
    taking.matrix("K", ((0.1 + 0.2, 0.0), (1e-9, 2.0)), ("E", "I"), (("a/b", "0"), ("c", "2")))
    texts = dict(offered[0]["texts"])
    rows = list(csv.reader(io.StringIO(texts["CSV"])))
    assert rows[0] == ["", "E", "I"]
    assert [[float(cell) for cell in row[1:]] for row in rows[1:]] == [[0.1 + 0.2, 0.0], [1e-9, 2.0]]
    assert r"\frac{a}{b}" in texts["LaTeX"].replace("dfrac", "frac")
    assert texts["plain text"].splitlines() == ["   E    I", "E  a/b  0", "I  c    2"]


def test_a_matrix_without_formulas_is_copied_as_numbers(offered):
    taking.matrix("K", ((0.5,),), ("E",))
    assert "0.5" in dict(offered[0]["texts"])["plain text"]


def test_what_a_picture_is_drawn_from_is_offered_as_csv(offered, monkeypatch):
    monkeypatch.setattr(taking.st, "altair_chart", lambda chart, width: None)
    solution = ngm.solve(ngm.loads(REDUCIBLE))
    taking.picture(eigenvalues(solution), "eigenvalues", rows=[["re", "im"], *solution.eigenvalues])
    assert offered[0]["csv"].splitlines() == ["re,im", "2.5,0.0", "0.5,0.0"]
    taking.picture(eigenvalues(solution), "e v")
    assert offered[1]["csv"].count("\n") > 2
    assert offered[1]["file"] == "e-v"


def test_text_that_a_spreadsheet_would_run_is_kept_from_it():
    assert taking.csv_rows([["=1+1", "@x", -2.0, "a"]]) == "'=1+1,'@x,-2.0,a\n"


def test_every_picture_can_be_saved():
    # One way to show a picture: the one with its buttons. The guide's sketch is drawn again on the page of the model.
    folder = Path(taking.__file__).parent
    others = [path for path in folder.rglob("*.py") if path.name not in {"taking.py", "start.py"}]
    assert [path.name for path in others if re.search(r"(altair|graphviz|vega_lite)_chart\(", path.read_text())] == []
