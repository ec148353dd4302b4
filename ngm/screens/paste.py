"""Cells pasted from a spreadsheet as rows of a table, or entries of a matrix; everything wrong is told with its line.

No Streamlit here. What is pasted becomes edits of the scenario's text, as if it had been typed into the grid.
"""

from __future__ import annotations

import csv
import io
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from ngm.errors import Problem
from ngm.scenario.csvfile import MatrixFileError, table_of
from ngm.screens import forms
from ngm.screens.forms import Column, Edit, Row, Table

__all__ = ["Pasted", "into_matrix", "into_table"]

#: Characters and rows that are taken at once; what is larger belongs into a file.
MOST_CHARACTERS = 1_000_000
MOST_ROWS = 2_000
#: Problems told at once.
MOST_PROBLEMS = 10

_YES = {"yes": "yes", "true": "yes", "1": "yes", "x": "yes", "no": "no", "false": "no", "0": "no"}


@dataclass(frozen=True, slots=True)
class Pasted:
    """What a pasted text asks for: edits and what they do in words; or what is wrong with it, and no edits."""

    edits: tuple[Edit, ...] = ()
    told: str = ""
    problems: tuple[Problem, ...] = ()


def into_table(table: Table, text: str, document: Mapping[str, Any], *, instead: bool = False) -> Pasted:
    """Return the edits that put pasted rows into a table.

    Cells are separated by tabs, as spreadsheets copy them, or else by semicolons or commas. A first line of headings says
    which columns these are, in any order; without one they are the table's, from the left. A row with the name of one
    that is there changes its cells; others are added. `instead`: the rows pasted are all that remains.
    """
    lines = _lines(text)
    if isinstance(lines, Problem):
        return Pasted(problems=(lines,))
    order, start = _columns(table, lines[0][1])
    problems: list[Problem] = []
    if isinstance(order, Problem):
        return Pasted(problems=(order,))
    before = forms.rows(table, document)
    named = table.shape != "list"
    rows = [] if instead else list(before)
    old = {row[0]: row for row in before} if named else {}
    places = {row[0]: k for k, row in enumerate(rows)} if named else {}
    seen: dict[str, int] = {}
    added = changed = 0
    for number, cells in lines[start:]:
        if len(cells) > len(order) and any(cells[len(order) :]):
            wanted = ", ".join(column.title for column in order)
            problems.append(_at(number, f"{len(cells)} cells for {len(order)} columns. Expected: {wanted}."))
            continue
        given = {column.field: cell for column, cell in zip(order, cells, strict=False)}
        given = {field: _tidied(table, field, cell) for field, cell in given.items()}
        problems += [_at(number, told) for field, cell in given.items() if (told := _wrong(table, field, cell))]
        name = given.get("name", "")
        if named and not name:
            problems.append(_at(number, "the name is empty. Every row needs one."))
        elif named and name in seen:
            problems.append(_at(number, f"'{name[:40]}' stands twice; first in line {seen[name]}."))
        seen.setdefault(name, number)
        held = old.get(name) if named else None
        row = tuple(
            given.get(column.field, held[k] if held is not None else "") for k, column in enumerate(table.columns)
        )
        if named and name in places:
            changed += row != rows[places[name]]
            rows[places[name]] = row
        else:
            added += 1
            rows.append(row)
    if problems:
        return Pasted(problems=_some(problems))
    after = forms.tidy(table, rows)
    removed = len({*before} - {*after}) if instead else 0
    told = f"{added} row{'' if added == 1 else 's'} {'pasted' if instead else 'added'}"
    told += (
        f", {removed} of the present ones removed or changed" if instead else f", {changed} changed" if changed else ""
    )
    return Pasted(tuple(forms.edits(table, before, after, document)), told)


def into_matrix(name: str, text: str, document: Mapping[str, Any], groups: Sequence[str]) -> Pasted:
    """Return the edits that put a pasted square table, with labels in any order or without, into a matrix."""
    if len(text) > MOST_CHARACTERS:
        return Pasted(problems=(Problem("", f"more than {MOST_CHARACTERS:,} characters: name a CSV file instead."),))
    try:
        table = table_of(text, groups)
    except MatrixFileError as error:
        return Pasted(problems=(Problem("", str(error)),))
    values = document["matrices"][name].get("values")
    before = forms.matrix_rows(values, len(groups))
    after: list[Row] = [tuple(str(value) for value in row) for row in table]
    moved = sum(a != b for old, new in zip(before, after, strict=True) for a, b in zip(old, new, strict=True))
    edits = forms.matrix_edits(("matrices", name, "values"), values, before, after, None, len(groups))
    return Pasted(tuple(edits), f"{moved} of {len(groups) ** 2} entries written")


def _lines(text: str) -> list[tuple[int, list[str]]] | Problem:
    """Return the lines that hold something, each with its number and its cells; at least one."""
    if len(text) > MOST_CHARACTERS:
        return Problem("", f"more than {MOST_CHARACTERS:,} characters are too much for one table.")
    text = text.removeprefix("\ufeff")
    head = next((line for line in text.splitlines() if line.strip()), "")
    separator = "\t" if "\t" in head else max((";", ","), key=head.count)
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=separator)
    try:
        lines = [(reader.line_num, [" ".join(cell.split()) for cell in cells]) for cells in reader]
    except csv.Error as error:
        return Problem(f"line {reader.line_num}", f"cannot be read: {error}.")
    lines = [(number, cells) for number, cells in lines if any(cells)]
    if not lines:
        return Problem("", "nothing was pasted. Copy cells in the spreadsheet, then paste them here.")
    if len(lines) > MOST_ROWS:
        return Problem("", f"{len(lines):,} rows; at most {MOST_ROWS:,} are taken at once.")
    return lines


def _columns(table: Table, first: Sequence[str]) -> tuple[Sequence[Column] | Problem, int]:
    """Return the columns of what is pasted, and how many lines are headings."""
    known = {key: column for column in table.columns for key in _keys(column)}
    heads = [known.get(cell.casefold().rstrip("?")) for cell in first]
    found = [column for column in heads if column is not None]
    if len(found) < 2 and len(found) < len([cell for cell in first if cell]):
        return table.columns, 0
    if None in heads[: len(first)]:
        wrong = next(cell for cell, column in zip(first, heads, strict=True) if column is None)
        wanted = ", ".join(column.title for column in table.columns)
        return Problem("line 1", f"'{wrong[:40]}' is no column of this table. Its columns: {wanted}."), 1
    if len(set(map(id, found))) < len(found):
        return Problem("line 1", "a heading stands twice."), 1
    return found, 1


def _keys(column: Column) -> set[str]:
    return {column.field.casefold(), column.title.casefold().rstrip("?")} - {""}


def _tidied(table: Table, field: str, cell: str) -> str:
    """Return a cell in the words of the grid."""
    column = next(column for column in table.columns if column.field == field)
    if column.kind != "choice":
        return cell
    low = cell.casefold()
    return _YES.get(low, cell) if "yes" in column.options else low if low in column.options else cell


def _wrong(table: Table, field: str, cell: str) -> str:
    column = next(column for column in table.columns if column.field == field)
    if column.kind == "choice" and cell and cell not in column.options:
        return f"{column.title}: '{cell[:40]}' is none of {', '.join(column.options)}."
    if column.kind == "value" and cell.count(",") == 1 and cell.replace(",", "").isdigit():
        point = cell.replace(",", ".")
        return f"{column.title}: '{cell[:40]}' has a comma. Write {point}, or leave it out if it marks thousands."
    return ""


def _at(line: int, message: str) -> Problem:
    return Problem(f"line {line}", message)


def _some(problems: Sequence[Problem]) -> tuple[Problem, ...]:
    more = len(problems) - MOST_PROBLEMS
    return (*problems[:MOST_PROBLEMS], *([Problem("", f"and {more} more.")] if more > 0 else []))
