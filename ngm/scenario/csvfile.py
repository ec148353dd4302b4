"""Matrix files: CSV, square (with or without labels) or long (from, to, value).

Separated by commas, semicolons or tabs. Labels are matched to the groups of a dimension in any order; whatever is
unknown, missing, doubled, negative or no number is refused with its line and column.
"""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence
from decimal import Decimal, InvalidOperation
from pathlib import Path

__all__ = ["LARGEST_MATRIX_FILE", "MatrixFileError", "read_matrix_file", "table_of"]

#: bytes in a matrix file
LARGEST_MATRIX_FILE = 64_000_000
_SEPARATORS = (",", ";", "\t")
_LONG = ("from", "to", "value")
_LARGEST = Decimal("1e300")

Rows = list[tuple[int, list[str]]]
Block = tuple[tuple[Decimal, ...], ...]


class MatrixFileError(Exception):
    """A matrix file cannot be taken; the message says where in the file, what, and what would be right."""


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
    rows = _rows(text)
    if not rows:
        raise MatrixFileError("the file is empty.")
    size = len(groups)
    widths = {len(cells) for _, cells in rows}
    first = [cell.strip() for cell in rows[0][1]]
    if sorted(cell.lower() for cell in first) == sorted(_LONG):
        order = [[cell.lower() for cell in first].index(name) for name in _LONG]
        return _long(rows[1:], order, groups)
    if len(rows) == size and widths == {size}:
        if size > 1 or not _is_label(first[0], groups):
            return _bare(rows)
    elif len(rows) == size + 1:
        if widths == {size + 1}:
            return _labelled(rows[0][1][1:], rows[1:], groups)
        if len(first) == size and {len(cells) for _, cells in rows[1:]} == {size + 1}:
            return _labelled(rows[0][1], rows[1:], groups)
        if widths == {size}:
            return _header_only(rows, groups)
    elif widths == {3} and _is_label(first[0], groups) and _is_label(first[1], groups):
        return _long(rows, [0, 1, 2], groups)
    raise MatrixFileError(_shape(rows, groups))


def _rows(text: str) -> Rows:
    head = next((line for line in text.splitlines() if line.strip()), "")
    separator = max(_SEPARATORS, key=head.count)
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=separator, strict=True)
    try:
        return [(reader.line_num, cells) for cells in reader if any(cell.strip() for cell in cells)]
    except csv.Error as error:
        raise MatrixFileError(f"line {reader.line_num} cannot be read as CSV: {error}.") from None


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
        if all(0 <= value < _LARGEST for value in row) and not any("_" in cell for cell in cells):
            return row
    except InvalidOperation:
        pass
    for number, cell in enumerate(cells):
        trouble = _trouble(cell)
        if trouble:
            raise MatrixFileError(f"line {line}, column {first + number}: {trouble}")
    raise AssertionError(cells)


def _trouble(cell: str) -> str:
    text = _cut(cell.strip())
    if not text:
        return "the cell is empty. Write 0 where there is none."
    try:
        value = Decimal(cell)
    except InvalidOperation:
        value = Decimal("nan")
    if not value.is_finite() or "_" in cell:
        comma = cell.strip().replace(",", ".", 1)
        advice = f" Write a decimal with a point: {_cut(comma)}." if "," in cell else ""
        return f"'{text}' is not a number.{advice}"
    if value < 0:
        return f"{text} is negative. Entries are positive or zero."
    return f"{text} is too large. Numbers stay below 1e300 in size." if value >= _LARGEST else ""


def _cut(text: str) -> str:
    line = " ".join(text.split())
    return line if len(line) <= 40 else line[:39] + "…"


def _some(groups: Sequence[str]) -> str:
    shown = ", ".join(_cut(group) for group in groups[:8])
    return shown + (f", … ({len(groups)} in all)" if len(groups) > 8 else "")
