"""CSV: matrices, square (with or without labels) or long (from, to, value), and values by group.

Separated by commas, semicolons or tabs. Labels are matched to the groups of a dimension in any order; whatever is
unknown, missing, doubled, negative or no number is refused with its line and column.
"""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Sequence
from decimal import Decimal, InvalidOperation
from pathlib import Path
from typing import Literal

__all__ = [
    "LARGEST_MATRIX_FILE",
    "LONG",
    "Block",
    "Form",
    "MatrixFileError",
    "Rows",
    "form_and_table",
    "read_matrix_file",
    "rows_of",
    "table_of",
    "values_of",
]

#: bytes in a matrix file
LARGEST_MATRIX_FILE = 64_000_000
_SEPARATORS = (",", ";", "\t")
#: The header of the long form, in any order and case.
LONG = ("from", "to", "value")
_LARGEST = Decimal("1e300")
_KEPT_AS_TEXT = re.compile(r"^'(?=[=+@\t-])")

Rows = list[tuple[int, list[str]]]
Block = tuple[tuple[Decimal, ...], ...]
#: Square without labels, with labels of rows and columns, with a header row or a header column alone; or long.
Form = Literal["bare", "labelled", "header", "column", "long"]


class MatrixFileError(Exception):
    """A table cannot be taken; the message says where in the file, what, and what would be right."""


def read_matrix_file(folder: str | None, file: str, groups: Sequence[str]) -> Block:
    """Return the square table of a CSV file, rows and columns in the order of `groups`.

    Parameters
    ----------
    folder : str or None
        The scenario file's folder; the file must lie in it, also when links are followed.
    file : str
        Path relative to the folder.
    groups : sequence of str
        Labels of the dimension.

    Raises
    ------
    MatrixFileError
        No such file in the folder, more than 64 MB, not UTF-8, or not such a table.
    """
    return table_of(_text(folder, file), groups)


def _text(folder: str | None, file: str) -> str:
    if folder is None:
        raise MatrixFileError(
            "a scenario that is not in a folder cannot name another file. Load it from its folder, or write values."
        )
    if not file.strip():
        raise MatrixFileError("the name is empty. Name a CSV file in the scenario file's folder.")
    outside = "the file lies outside the scenario file's folder. Put it beside the scenario file."
    try:
        if Path(file).is_absolute() or ".." in Path(file).parts or "\\" in file:
            raise MatrixFileError(outside)
        home = Path(folder).resolve()
        place = (home / file).resolve()
        if not place.is_relative_to(home):
            raise MatrixFileError(outside)
        if not place.exists():
            raise MatrixFileError("there is no such file in the scenario file's folder.")
        if not place.is_file():
            raise MatrixFileError("this is not a file. Name a CSV file in the scenario file's folder.")
        with place.open("rb") as stream:
            raw = stream.read(LARGEST_MATRIX_FILE + 1)
    except (OSError, ValueError, RuntimeError) as error:
        raise MatrixFileError(f"cannot be read: {getattr(error, 'strerror', None) or 'no valid path'}.") from None
    if len(raw) > LARGEST_MATRIX_FILE:
        raise MatrixFileError("the file is larger than 64 MB.")
    try:
        # spreadsheets put a byte order mark before UTF-8
        return raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw.count(b"\n", 0, error.start) + 1
        raise MatrixFileError(f"line {line} is not UTF-8. Save the file as UTF-8.") from None


def table_of(text: str, groups: Sequence[str]) -> Block:
    """Return the square table that the text of a CSV file holds, in the order of `groups`."""
    return form_and_table(rows_of(text), groups)[1]


def form_and_table(rows: Rows, groups: Sequence[str]) -> tuple[Form, Block]:
    """Return how the table is written, and the table in the order of `groups`."""
    size = len(groups)
    widths = {len(cells) for _, cells in rows}
    first = [cell.strip() for cell in rows[0][1]]
    if sorted(cell.lower() for cell in first) == sorted(LONG):
        order = [[cell.lower() for cell in first].index(name) for name in LONG]
        return "long", _long(rows[1:], order, groups)
    if len(rows) == size and widths == {size}:
        if size > 1 and not first[0] and all(_is_label(cell, groups) for cell in first[1:]):
            # a labelled table that lacks a group
            return "labelled", _labelled(rows[0][1][1:], rows[1:], groups)
        if size > 1 or not _is_label(first[0], groups):
            return "bare", _bare(rows)
    elif len(rows) == size and widths == {size + 1} and all(_is_label(cells[0], groups) for _, cells in rows):
        return "column", _column_only(rows, groups)
    elif len(rows) == size + 1:
        if widths == {size + 1}:
            # one row and column too many is told as that, not as labels that nobody meant
            if not any(_is_label(cell, groups) or _trouble(cell, signed=True) for cell in first):
                raise MatrixFileError(_shape(rows, groups))
            return "labelled", _labelled(rows[0][1][1:], rows[1:], groups)
        if len(first) == size and {len(cells) for _, cells in rows[1:]} == {size + 1}:
            return "labelled", _labelled(rows[0][1], rows[1:], groups)
        if widths == {size}:
            return "header", _header_only(rows, groups)
    elif widths == {3} and _is_label(first[0], groups) and _is_label(first[1], groups):
        return "long", _long(rows, [0, 1, 2], groups)
    raise MatrixFileError(_shape(rows, groups))


def rows_of(text: str) -> Rows:
    """Return the lines of a CSV text that hold something, each with its number and its cells; at least one."""
    # a text that was pasted or uploaded may still have the mark that spreadsheets put first
    text = text.removeprefix("\ufeff")
    head = next((line for line in text.splitlines() if line.strip()), "")
    separator = max(_SEPARATORS, key=head.count)
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=separator, strict=True)
    try:
        rows = [(reader.line_num, cells) for cells in reader if any(cell.strip() for cell in cells)]
    except csv.Error as error:
        raise MatrixFileError(f"line {reader.line_num} cannot be read as CSV: {error}.") from None
    if not rows:
        raise MatrixFileError("the file is empty.")
    if "'" in text:
        # no label holds an apostrophe: one that keeps a label such as -1 from being a formula is taken off
        rows = [(line, [_KEPT_AS_TEXT.sub("", cell) for cell in cells]) for line, cells in rows]
    return rows


def values_of(text: str, groups: Sequence[str], *, signed: bool = False) -> tuple[Decimal, ...]:
    """Return the values by group that the text of a CSV file holds, in the order of `groups`.

    Lines of group, value (with a header or without), or a line of groups above a line of values (each with a cell in
    front, or without). Values always go with labels: a bare list could be in another order.

    Parameters
    ----------
    text : str
        CSV; a number is written with a point.
    groups : sequence of str
        Labels of the dimension.
    signed : bool
        Whether values may be negative.

    Raises
    ------
    MatrixFileError
        Not such a table; a group unknown, missing or doubled; a cell that is no number, or negative.
    """
    known = {group: index for index, group in enumerate(groups)}
    found: dict[int, Decimal] = {}
    for label_at, label, value_at, cell in _labelled_values(rows_of(text), groups):
        name = label if label in known else label.strip()
        group = known.get(name)
        if group is None:
            raise MatrixFileError(f"{label_at}: '{_cut(name)}' is not a group. The groups: {_some(groups)}.")
        if group in found:
            raise MatrixFileError(f"{label_at}: '{_cut(name)}' stands twice.")
        trouble = _trouble(cell, signed=signed)
        if trouble:
            raise MatrixFileError(f"{value_at}: {trouble}")
        found[group] = Decimal(cell)
    missing = [group for group, index in known.items() if index not in found]
    if missing:
        raise MatrixFileError(f"there is no value for {_some(missing)}.")
    return tuple(found[index] for index in range(len(groups)))


def _labelled_values(rows: Rows, groups: Sequence[str]) -> list[tuple[str, str, str, str]]:
    """Return (place of the label, label, place of the value, value), in whichever way the file is laid out."""
    line, first = rows[0]
    width = len(first)
    for other, cells in rows:
        if len(cells) != width:
            raise MatrixFileError(f"line {other} has {len(cells)} cells, line {line} has {width}.")
    # Two columns are lines of group, value, unless both cells of the first of two lines are labels already, or the
    # last one is the label of the only group.
    beside = len(rows) == 2 and all(_is_label(cell, groups) for cell in first[-len(groups) :])
    if width == 2 and not beside:
        header = not _is_label(first[0], groups) and bool(_trouble(first[1], signed=True))
        label, value = (1, 0) if header and first[0].strip().lower() == "value" else (0, 1)
        return [
            (f"line {n}, column {label + 1}", cells[label], f"line {n}, column {value + 1}", cells[value])
            for n, cells in rows[1 if header else 0 :]
        ]
    if len(rows) == 2 and (width > 2 or beside):
        below, cells = rows[1]
        labels_start = _is_label(first[0], groups) or (not beside and not _trouble(cells[0], signed=True))
        return [
            (f"line {line}, column {k + 1}", first[k], f"line {below}, column {k + 1}", cells[k])
            for k in range(0 if labels_start else 1, width)
        ]
    raise MatrixFileError(
        f"{len(rows)} line{'' if len(rows) == 1 else 's'} of {width} cell{'' if width == 1 else 's'}. Expected lines of "
        f"group, value for {_some(groups)}, or a line of groups above a line of values."
    )


def _is_label(cell: str, groups: Sequence[str]) -> bool:
    return cell in groups or cell.strip() in groups


def _shape(rows: Rows, groups: Sequence[str]) -> str:
    size = len(groups)
    usual = max((len(cells) for _, cells in rows), default=0)
    ragged = next(((line, len(cells)) for line, cells in rows if len(cells) != usual), None)
    if ragged is not None:
        return f"line {ragged[0]} has {ragged[1]} cells, others have {usual}. Every line has the same number."
    return (
        f"{len(rows)} lines of {usual} cells for {size} groups. Expected {size} x {size} numbers, with or without a "
        f"header row and column, or lines of from, to, value."
    )


def _bare(rows: Rows) -> Block:
    return tuple(_numbers(cells, line, 1) for line, cells in rows)


def _labelled(header: list[str], rows: Rows, groups: Sequence[str]) -> Block:
    columns = _match(header, groups, rows[0][0] - 1, "column")
    lines = _match([cells[0] for _, cells in rows], groups, None, "row")
    table = [_numbers(cells[1:], line, 2) for line, cells in rows]
    if columns == list(range(len(groups))):
        return tuple(table[line] for line in lines)
    return tuple(tuple(table[line][column] for column in columns) for line in lines)


def _header_only(rows: Rows, groups: Sequence[str]) -> Block:
    if _match(rows[0][1], groups, rows[0][0], "column") != list(range(len(groups))):
        raise MatrixFileError(
            "the columns have labels in another order than the groups, and the rows have none. Add a header column."
        )
    return _bare(rows[1:])


def _column_only(rows: Rows, groups: Sequence[str]) -> Block:
    if _match([cells[0] for _, cells in rows], groups, None, "row") != list(range(len(groups))):
        raise MatrixFileError(
            "the rows have labels in another order than the groups, and the columns have none. Add a header row."
        )
    return tuple(_numbers(cells[1:], line, 2) for line, cells in rows)


def _match(labels: list[str], groups: Sequence[str], line: int | None, what: str) -> list[int]:
    """Return, for each group, the place of its label."""
    known = {group: index for index, group in enumerate(groups)}
    places: dict[int, int] = {}
    for number, raw in enumerate(labels):
        label = raw if raw in known else raw.strip()
        group = known.get(label)
        if group is None:
            raise MatrixFileError(f"{what} {number + 1}: '{_cut(label)}' is not a group. The groups: {_some(groups)}.")
        if group in places:
            raise MatrixFileError(f"{what} {number + 1}: '{_cut(label)}' stands twice.")
        places[group] = number
    missing = [group for group, index in known.items() if index not in places]
    if missing:
        raise MatrixFileError(f"there is no {what} for {_some(missing)}.")
    return [places[index] for index in range(len(groups))]


def _long(rows: Rows, order: list[int], groups: Sequence[str]) -> Block:
    known = {group: index for index, group in enumerate(groups)}
    size = len(groups)
    table: list[list[Decimal | None]] = [[None] * size for _ in range(size)]
    for line, cells in rows:
        if len(cells) != 3:
            raise MatrixFileError(f"line {line} has {len(cells)} cells. Expected three: from, to, value.")
        place: list[int] = []
        for position in order[:2]:
            label = cells[position] if cells[position] in known else cells[position].strip()
            if label not in known:
                raise MatrixFileError(
                    f"line {line}, column {position + 1}: '{_cut(label)}' is not a group. The groups: {_some(groups)}."
                )
            place.append(known[label])
        i, j = place
        if table[i][j] is not None:
            raise MatrixFileError(f"line {line}: from '{_cut(groups[i])}' to '{_cut(groups[j])}' stands twice.")
        table[i][j] = _numbers([cells[order[2]]], line, order[2] + 1)[0]
    for i, row in enumerate(table):
        if None in row:
            j = row.index(None)
            raise MatrixFileError(
                f"there is no value from '{_cut(groups[i])}' to '{_cut(groups[j])}'. Write 0 where there is none."
            )
    return tuple(tuple(value for value in row if value is not None) for row in table)


def _numbers(cells: list[str], line: int, first: int) -> tuple[Decimal, ...]:
    """Return the cells of one line as numbers, not negative; `first`: the column of the first cell."""
    try:
        row = tuple(map(Decimal, cells))
        # nan compares false with everything: so a row passes only if every number is proven good
        if all(0 <= value < _LARGEST for value in row) and all(map(_is_plain, cells)):
            return row
    except InvalidOperation:
        pass
    for number, cell in enumerate(cells):
        trouble = _trouble(cell)
        if trouble:
            raise MatrixFileError(f"line {line}, column {first + number}: {trouble}")
    raise AssertionError(cells)


def _is_plain(cell: str) -> bool:
    """Return False for what only Python's numbers may hold: underscores, and digits of other scripts."""
    return "_" not in cell and cell.isascii()


def _trouble(cell: str, *, signed: bool = False) -> str:
    text = _cut(cell.strip())
    if not text:
        return "the cell is empty. Write 0 where there is none."
    try:
        value = Decimal(cell)
    except InvalidOperation:
        value = Decimal("nan")
    if not value.is_finite() or not _is_plain(cell):
        comma = cell.strip().replace(",", ".", 1)
        advice = f" Write a decimal with a point: {_cut(comma)}." if "," in cell else ""
        return f"'{text}' is not a number.{advice}"
    if value < 0 and not signed:
        return f"{text} is negative. Entries are positive or zero."
    # `abs` would round, and overflow at 1e999999999
    return f"{text} is too large. Numbers stay below 1e300 in size." if value.copy_abs() >= _LARGEST else ""


def _cut(text: str) -> str:
    line = " ".join(text.split())
    return line if len(line) <= 40 else line[:39] + "…"


def _some(groups: Sequence[str]) -> str:
    shown = ", ".join(_cut(group) for group in groups[:8])
    return shown + (f", … ({len(groups)} in all)" if len(groups) > 8 else "")
