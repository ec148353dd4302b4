"""Values by group from CSV: every layout, and each way of being wrong. Expected values are by hand."""

from __future__ import annotations

from decimal import Decimal

import pytest

from ngm.scenario.csvfile import MatrixFileError, values_of

GROUPS = ("a", "b", "c 1")


@pytest.mark.parametrize(
    "text",
    [
        "a,1\nb,2.5\nc 1,3e2\n",
        "group,value\na,1\nb,2.5\nc 1,3e2\n",
        "\ufeffage;members\n c 1 ; 3e2\n a; 1\n\nb ;2.5",
        "value\tage\n3e2\tc 1\n1\ta\n2.5\tb",
        "a,b,c 1\n1,2.5,3e2\n",
        "b, c 1 ,a\r\n2.5,3e2,1\r\n",
        ",a,c 1,b\nmembers,1,3e2,2.5\n",
        ",a,c 1,b\n,1,3e2,2.5\n",
        "year,a,c 1,b\n2020,1,3e2,2.5\n",
    ],
)
def test_layouts(text):
    assert values_of(text, GROUPS) == (1, Decimal("2.5"), 300)


@pytest.mark.parametrize(
    ("text", "groups", "values"),
    [
        ("x,3", ("x",), (3,)),
        ("x\n3", ("x",), (3,)),
        ("group,value\nx,3", ("x",), (3,)),
        (",x\nmembers,3", ("x",), (3,)),
        ("x,y\n3,4", ("y", "x"), (4, 3)),
        ("x,3\ny,4", ("y", "x"), (4, 3)),
        # labels that are numbers
        ("1,10\n2,20", ("1", "2"), (10, 20)),
        ("1,2\n10,20", ("1", "2"), (10, 20)),
        ("0,5,10\n7,8,9", ("0", "5", "10"), (7, 8, 9)),
        ("age,value\n0,7\n5,8\n10,9", ("0", "5", "10"), (7, 8, 9)),
        # a label's own blanks come first
        ("x ,3\nx,4", ("x", "x "), (4, 3)),
    ],
)
def test_few_groups_and_labels_that_are_numbers(text, groups, values):
    assert values_of(text, groups) == values


def test_values_may_be_negative_where_that_is_said():
    assert values_of("a,1\nb,-2\nc 1,0", GROUPS, signed=True) == (1, -2, 0)
    with pytest.raises(MatrixFileError, match="line 2, column 2: -2 is negative"):
        values_of("a,1\nb,-2\nc 1,0", GROUPS)
    with pytest.raises(MatrixFileError, match="line 2, column 2: -1e300 is too large"):
        values_of("a,1\nb,-1e300\nc 1,0", GROUPS, signed=True)


@pytest.mark.parametrize(
    ("text", "part"),
    [
        ("", "the file is empty"),
        ("1,2,3", "1 line of 3 cells. Expected lines of group, value for a, b, c 1, or a line of groups above"),
        ("1\n2\n3", "3 lines of 1 cell. Expected lines of group, value"),
        ("a,b,c 1\n1,2,3\n4,5,6", "3 lines of 3 cells"),
        ("a,1\nb,2", "there is no value for c 1"),
        ("a,1\nb,2\nd,3", "line 3, column 1: 'd' is not a group. The groups: a, b, c 1."),
        ("d,1\nb,2\nc 1,3", "line 1, column 1: 'd' is not a group"),
        ("a,1\nb,2\na,3", "line 3, column 1: 'a' stands twice"),
        ("a,one\nb,2\nc 1,3", "line 1, column 2: 'one' is not a number"),
        ("group,value\na,1\nb,\nc 1,3", "line 3, column 2: the cell is empty"),
        ("a;1\nb;0,5\nc 1;3", "'0,5' is not a number. Write a decimal with a point: 0.5."),
        ("a,1\nb,nan\nc 1,3", "line 2, column 2: 'nan' is not a number"),
        ("a,1\nb,2,5\nc 1,3", "line 2 has 3 cells, line 1 has 2"),
        ("a,b,z\n1,2,3", "line 1, column 3: 'z' is not a group"),
        ("a,b,b\n1,2,3", "line 1, column 3: 'b' stands twice"),
        ("a,b,c 1\n1,x,3", "line 2, column 2: 'x' is not a number"),
        (",a,b,c 1\nmembers,1,2,-3", "line 2, column 4: -3 is negative"),
        ("a,b,c 1,d\n1,2,3,4", "line 1, column 4: 'd' is not a group"),
        ('a,"1\nb,2', "cannot be read as CSV"),
    ],
)
def test_wrong_tables(text, part):
    with pytest.raises(MatrixFileError) as caught:
        values_of(text, GROUPS)
    assert part in str(caught.value)
    assert len(str(caught.value)) < 400
