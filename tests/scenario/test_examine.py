"""A brought matrix: the form found, sums, what is asked and what is told. Expected tables are by hand."""

from __future__ import annotations

from decimal import Decimal

import pytest
from hypothesis import given
from hypothesis import strategies as st

from ngm.scenario import examine as module
from ngm.scenario.csvfile import table_of
from ngm.scenario.examine import examine

TABLE = ((8, 4), (2, Decimal("6.5")))


@pytest.mark.parametrize(
    ("text", "form"),
    [
        ("\ufefffrom/to,young,old\nyoung,8,4\nold,2,6.5\n", "labelled"),
        (";young;old\nyoung;8;4\nold;2;6.5\n", "labelled"),
        ("x,old,young\nyoung,4,8\nold,6.5,2\n", "labelled"),
        ("young,old\nyoung,8,4\nold,2,6.5\n", "labelled"),
        ("young\told\n8\t4\n2\t6.5\n", "header"),
        ("from,to,value\nyoung,young,8\nyoung,old,4\nold,young,2\nold,old,6.5", "long"),
        ("value,to,from\n8,young,young\n4,old,young\n2,young,old\n6.5,old,old", "long"),
        ("young,young,8\nyoung,old,4\nold,young,2\nold,old,6.5", "long"),
    ],
)
@pytest.mark.parametrize("groups", [None, ("young", "old")])
def test_forms(text, form, groups):
    found = examine(text, groups)
    assert (found.form, found.groups, found.table, found.problems, found.notes) == (
        form,
        ("young", "old"),
        TABLE,
        (),
        (),
    )
    assert found.labels_from == ("file" if groups is None else "given")
    assert found.row_sums == (12, Decimal("8.5"))
    assert found.column_sums == (10, Decimal("10.5"))
    assert found.orientation_open


def test_given_groups_set_the_order():
    found = examine("x,young,old\nyoung,8,4\nold,2,6.5", ("old", "young"))
    assert found.table == ((Decimal("6.5"), 2), (4, 8))
    assert found.row_sums == (Decimal("8.5"), 12)


def test_a_table_without_labels():
    found = examine("8,4\n2,6.5")
    assert (found.form, found.groups, found.labels_from, found.table) == ("bare", ("1", "2"), "counted", TABLE)
    assert found.notes == ("The table has no labels: its rows and columns are taken in the order of the groups.",)
    found = examine("8,4\n2,6.5", ["young", "old"])
    assert (found.form, found.groups, found.labels_from, found.table) == ("bare", ("young", "old"), "given", TABLE)
    assert len(found.notes) == 1


def test_labels_may_be_numbers():
    found = examine(",0,5\n0,8,4\n5,2,6.5")
    assert (found.form, found.groups, found.table) == ("labelled", ("0", "5"), TABLE)
    found = examine("0,5\n0,8,4\n5,2,6.5")
    assert (found.form, found.groups, found.table) == ("labelled", ("0", "5"), TABLE)
    # with a number in the corner it is a table of contacts, and the note says how to tell otherwise
    found = examine("1,0,5\n0,8,4\n5,2,6.5")
    assert (found.form, len(found.table)) == ("bare", 3)
    assert "leave the first cell empty" in found.notes[0]


def test_one_group():
    found = examine("x,all\nall,3")
    assert (found.form, found.groups, found.table, found.orientation_open) == ("labelled", ("all",), ((3,),), False)
    assert found.notes == ()


def test_orientation_is_asked_for_unless_it_makes_no_difference():
    asked = examine("8,4\n2,6.5")
    assert asked.orientation_open
    assert asked.oriented("rows") == TABLE
    assert asked.oriented("columns") == ((8, 2), (4, Decimal("6.5")))
    free = examine("8,4\n4,6.5")
    assert not free.orientation_open
    assert free.oriented("rows") == free.oriented("columns")
    assert "symmetric" in free.notes[-1]
    with pytest.raises(ValueError, match="makes is rows or columns, not 'both'"):
        asked.oriented("both")
    with pytest.raises(ValueError, match="no table to orient"):
        examine("").oriented("rows")


@pytest.mark.parametrize(
    ("text", "part"),
    [
        ("", "the file is empty"),
        ("1,2,3\n4,x,6\n7,8,9", "line 2, column 2: 'x' is not a number"),
        ("1,2,3\n4,,6\n7,8,9", "line 2, column 2: the cell is empty"),
        ("1,2\n3,-4", "line 2, column 2: -4 is negative"),
        ("1,2,3\n4,5\n6,7,8", "line 2"),
        ("1,2,3\n4,5,6", "2 lines of 3 cells are no square table"),
        ("1,2\n3,4\n5,6", "3 lines of 2 numbers are no square table"),
        ("x,a,b\na,1,2\nb,3", "line 3 has 2 cells"),
        ("x,a,b\na,1,2\nc,3,4", "'b' is not a group. The groups: a, c."),
        ("x,a,a\na,1,2\na,3,4", "label 2: 'a' stands twice"),
        ("x,a,b\na,1,2\n,3,4", "label 2 is empty"),
        ('x,a,"b[1]"\na,1,2\n"b[1]",3,4', "label 2: 'b[1]' holds a comma, a square bracket or a quote"),
        ('"a,b",c\n1,2\n3,4', "label 1: 'a,b' holds a comma"),
        ("from,to,value", "there are no lines below the header"),
        ("from,to,value\na,b,1\nb,a,2", "there is no value from 'a' to 'a'"),
        ("from,to,value\na,a,1\na,a,2", "line 3: from 'a' to 'a' stands twice"),
        ("from,to,value\na,a", "line 2 has 2 cells. Expected three"),
        ("1,2,3\n1,1,5\n2,1,4\n2,2,6", "can be read as a square table below a line of labels, or as lines of from, to"),
        ('1,"2\n3,4', "cannot be read as CSV"),
    ],
)
def test_problems(text, part):
    found = examine(text)
    assert part in " ".join(found.problems)
    assert (found.form, found.table, found.row_sums, found.column_sums) == (None, None, (), ())
    assert not found.orientation_open


@pytest.mark.parametrize(
    ("text", "part"),
    [
        ("x,a,z\na,1,2\nz,3,4", "'z' is not a group. The groups: a, b."),
        ("1,2,3\n4,5,6\n7,8,9", "3 lines of 3 cells for 2 groups"),
        ("b,a\n1,2\n3,4", "another order than the groups"),
    ],
)
def test_problems_with_given_groups(text, part):
    found = examine(text, ("a", "b"))
    assert part in found.problems[0]
    assert (found.groups, found.labels_from, found.table) == (("a", "b"), "given", None)


def test_cells_are_kept_beside_a_problem_and_few_of_them():
    assert examine("1,2\n3,x").cells == (("1", "2"), ("3", "x"))
    cells = examine("\n".join([",".join("1" * 30)] * 40)).cells
    assert (len(cells), len(cells[0])) == (24, 24)


def test_too_large(monkeypatch):
    monkeypatch.setattr(module, "LARGEST_MATRIX_FILE", 10)
    assert examine("1,2,3,4,5,6").problems == ("the file is larger than 64 MB.",)


@given(st.text(alphabet='ab01.,;\t\n "-e', max_size=60), st.sampled_from([None, ("a", "b"), ("0", "1", "a")]))
def test_any_text_is_told_about(text, groups):
    found = examine(text, groups)
    assert (found.table is None) == bool(found.problems)
    if found.table is not None:
        # what is found is what the reader of scenario files takes, with these groups
        assert table_of(text, found.groups) == found.table
        assert len(found.table) == len(found.groups) == len(found.row_sums)
        assert sum(found.row_sums) == sum(found.column_sums)
