"""A matrix that somebody brings: what its CSV text holds, shown before anything is taken from it.

Who makes the contacts, the group of the row or that of the column, no table says: it is always asked for. The same goes
for what else could be read in two ways. What cannot be read is told in words, beside the cells as they stand.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from decimal import Decimal, InvalidOperation
from typing import Literal

from ngm.scenario.csvfile import (
    LARGEST_MATRIX_FILE,
    LONG,
    Block,
    Form,
    MatrixFileError,
    Rows,
    form_and_table,
    rows_of,
)

__all__ = ["BroughtMatrix", "Makes", "examine"]

#: Who makes the contacts: the group of the table's row, or that of its column.
Makes = Literal["rows", "columns"]
#: Lines and columns of the cells that are kept to be shown as they stand.
_SHOWN = 24


@dataclass(frozen=True, slots=True)
class BroughtMatrix:
    """What the text of a matrix file holds.

    Attributes
    ----------
    form : {"bare", "labelled", "header", "long"} or None
        Square without labels, with labels of rows and columns, with a header row alone; or long (from, to, value: the
        row is the first label). None where it cannot be read.
    groups : tuple of str
        In the order of `table`: those given, else the labels of the file, else "1", "2", …
    labels_from : {"given", "file", "counted"}
        Where `groups` come from.
    table : tuple of tuples of Decimal, or None
        As the file has it: row, column; not yet in any orientation.
    row_sums, column_sums : tuple of Decimal
        Empty where there is no table.
    orientation_open : bool
        Whether it matters who makes the contacts: the table is not symmetric. Then ask; see `oriented`.
    notes : tuple of str
        What to know about a table that can be read, in sentences.
    problems : tuple of str
        Why it cannot be taken, in sentences; empty where it can.
    cells : tuple of tuples of str
        The first lines and columns of the text, to be shown beside a problem.
    """

    form: Form | None
    groups: tuple[str, ...]
    labels_from: Literal["given", "file", "counted"]
    table: Block | None
    row_sums: tuple[Decimal, ...]
    column_sums: tuple[Decimal, ...]
    orientation_open: bool
    notes: tuple[str, ...]
    problems: tuple[str, ...]
    cells: tuple[tuple[str, ...], ...]

    def oriented(self, makes: Makes) -> Block:
        """Return the table with entry [i][j] the contacts that one member of group i makes with group j.

        Parameters
        ----------
        makes : {"rows", "columns"}
            Who makes the contacts in the table as it is written.

        Raises
        ------
        ValueError
            There is no table, or `makes` is neither of the two.
        """
        if self.table is None:
            raise ValueError("there is no table to orient")
        if makes == "rows":
            return self.table
        if makes == "columns":
            return tuple(zip(*self.table, strict=True))
        raise ValueError(f"makes is rows or columns, not {makes!r}")


def examine(text: str, groups: Sequence[str] | None = None) -> BroughtMatrix:
    r"""Return what the text of a matrix file holds, be it in order or not.

    Parameters
    ----------
    text : str
        CSV, separated by commas, semicolons or tabs.
    groups : sequence of str, optional
        Labels of the dimension, matched in any order. Where left out they are taken from the file.

    Returns
    -------
    BroughtMatrix
        Never an exception for what stands in the text: that is told in `problems`.

    Examples
    --------
    >>> found = examine("from/to,young,old\nyoung,8,4\nold,2,6")
    >>> found.form, found.groups, [str(v) for v in found.row_sums], found.orientation_open
    ('labelled', ('young', 'old'), ['12', '8'], True)
    """
    given = None if groups is None else tuple(groups)
    source: Literal["given", "file", "counted"] = "file" if given is None else "given"
    cells: tuple[tuple[str, ...], ...] = ()
    try:
        # A character takes at least a byte: past the limit in characters is past it in bytes.
        if len(text) > LARGEST_MATRIX_FILE:
            raise MatrixFileError("the file is larger than 64 MB.")
        rows = rows_of(text)
        cells = tuple(tuple(line[:_SHOWN]) for _, line in rows[:_SHOWN])
        notes: list[str] = []
        if given is None:
            given, source, notes = _labels(rows)
        form, table = form_and_table(rows, given)
    except MatrixFileError as error:
        problem = str(error)
        return BroughtMatrix(None, given or (), source, None, (), (), False, (), (problem,), cells)
    columns = tuple(zip(*table, strict=True))
    symmetric = table == columns
    if form == "bare" and len(table) > 1:
        notes.append("The table has no labels: its rows and columns are taken in the order of the groups.")
    if symmetric and len(table) > 1:
        notes.append(
            "The table is symmetric. Contacts of one member with each group seldom are: it may hold contacts between whole "
            "groups, or rates for each pair of members. Those must be converted first."
        )
    return BroughtMatrix(
        form,
        given,
        source,
        table,
        tuple(sum(row, Decimal(0)) for row in table),
        tuple(sum(column, Decimal(0)) for column in columns),
        not symmetric,
        tuple(notes),
        (),
        cells,
    )


def _labels(rows: Rows) -> tuple[tuple[str, ...], Literal["file", "counted"], list[str]]:
    """Return the groups of a file whose groups are not known, and what to note about them."""
    first = [cell.strip() for cell in rows[0][1]]
    lines, width = len(rows), max(len(cells) for _, cells in rows)
    if sorted(cell.lower() for cell in first) == sorted(LONG):
        names = [cell.lower() for cell in first]
        return _legal(_long_labels(rows[1:], names.index("from"), names.index("to"))), "file", []
    labelled = [cells[0].strip() for _, cells in rows[1:]]
    # Labels may be numbers; then the first cell is empty or a word. A word further inside is a slip, told by the reader.
    if lines == width == len(first) and all(_is_number(cell) for cell in (*first, *labelled)):
        notes = []
        if lines > 2 and first[1:] == labelled and len(set(labelled)) == len(labelled):
            notes.append(
                "The first row and column hold the same numbers. If they are labels, leave the first cell empty: all "
                "cells are taken for contacts."
            )
        return tuple(str(number + 1) for number in range(lines)), "counted", notes
    if lines == width and lines > 1:
        return _legal(labelled), "file", []
    if lines == width + 1:
        header = tuple(first)
        complete = width == 3 and _is_complete(rows)
        if all(_is_number(cell) for cell in first) and not complete:
            raise MatrixFileError(
                f"{lines} lines of {width} numbers are no square table. If the first line holds the labels of the groups, "
                "add a first column with them too."
            )
        if (
            complete
            and len(set(header)) == len(header)
            and all(_is_number(cells[k]) for _, cells in rows[1:] for k in (0, 1))
        ):
            raise MatrixFileError(
                "these lines can be read as a square table below a line of labels, or as lines of from, to, value. Add a "
                "first line from,to,value, or a first column of labels."
            )
        if not complete:
            return _legal(header), "file", []
    if width == 3 and _is_complete(rows):
        return _legal(_long_labels(rows, 0, 1)), "file", []
    uneven = next(((line, len(cells)) for line, cells in rows if len(cells) != width), None)
    if uneven is not None:
        raise MatrixFileError(
            f"line {uneven[0]} has {uneven[1]} cells, others have {width}. Every line has the same number."
        )
    raise MatrixFileError(
        f"{lines} lines of {width} cells are no square table. Expected as many rows as columns, with or without a header row "
        "and column, or lines of from, to, value below a line that says so."
    )


def _long_labels(rows: Rows, start: int, end: int) -> list[str]:
    """Return the labels of a long table in the order in which the rows first name them."""
    labels: dict[str, None] = {}
    for column in (start, end):
        for _, cells in rows:
            if len(cells) > column:
                labels.setdefault(cells[column].strip())
    return list(labels)


def _is_complete(rows: Rows) -> bool:
    """Return whether lines of three cells name every pair of their labels once."""
    if any(len(cells) != 3 for _, cells in rows):
        return False
    labels = _long_labels(rows, 0, 1)
    pairs = {(cells[0].strip(), cells[1].strip()) for _, cells in rows}
    return len(pairs) == len(rows) == len(labels) ** 2


def _legal(labels: Sequence[str]) -> tuple[str, ...]:
    """Return the labels, if they may be labels of groups."""
    seen: set[str] = set()
    for number, label in enumerate(labels):
        shown = label if len(label) <= 40 else label[:39] + "…"
        if not label:
            raise MatrixFileError(f"label {number + 1} is empty. Every group has a label.")
        if any(character in ",[]\"'" for character in label):
            raise MatrixFileError(
                f"label {number + 1}: '{shown}' holds a comma, a square bracket or a quote, which a label cannot."
            )
        if label in seen:
            raise MatrixFileError(f"label {number + 1}: '{shown}' stands twice. Each group has a label of its own.")
        seen.add(label)
    if not labels:
        raise MatrixFileError("there are no lines below the header.")
    return tuple(labels)


def _is_number(cell: str) -> bool:
    try:
        Decimal(cell)
    except InvalidOperation:
        return False
    return True
