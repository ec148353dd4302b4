"""Two texts line by line; every expectation by hand."""

from __future__ import annotations

import pytest

from ngm.screens import lines

BASE = "a\nb\nc\nd\ne\n"


def test_a_difference_names_old_and_new_lines():
    told = lines.difference(BASE, BASE.replace("c", "x"))
    assert "-c" in told.splitlines()
    assert "+x" in told.splitlines()
    assert lines.difference(BASE, BASE) == ""
    assert lines.difference("a\n" * 30_000, BASE) is None


@pytest.mark.parametrize(
    ("mine", "theirs", "both"),
    [
        ("A\nb\nc\nd\ne\n", "a\nb\nc\nd\nE\n", "A\nb\nc\nd\nE\n"),
        ("a\nb\nc\nd\ne\nf\n", "b\nc\nd\ne\n", "b\nc\nd\ne\nf\n"),
        ("a\nb\nX\nd\ne\n", "a\nb\nY\nd\ne\n", None),
        ("a\nX\nc\nd\ne\n", "a\nb\nY\nd\ne\n", None),
        (BASE, "z\n", "z\n"),
    ],
)
def test_both_sides_changes_are_put_together_where_they_do_not_touch(mine, theirs, both):
    assert lines.merged(BASE, mine, theirs) == both
    assert lines.merged(BASE, theirs, mine) == both


def test_one_change_at_a_time():
    new = "A\nb\nc\nd\nE\n"
    assert lines.alone(BASE, new) == [("a\n", "A\n", "A\nb\nc\nd\ne\n"), ("e\n", "E\n", "a\nb\nc\nd\nE\n")]
