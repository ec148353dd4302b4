"""The matrices of a scenario: contacts and movement between groups, from the file itself or from CSV files."""

from __future__ import annotations

from collections.abc import Mapping
from decimal import Decimal
from typing import Any

from ngm.scenario.csvfile import MatrixFileError, read_matrix_file
from ngm.scenario.draft import Draft
from ngm.scenario.fields import Key, Table, describe, number_trouble, short
from ngm.scenario.model import Expression, Matrix

__all__ = ["read_matrices"]

_KEYS = ("by", "values", "file", "population", "reciprocal", "within", "label", "source")
Block = tuple[tuple[Decimal, ...], ...]


def read_matrices(draft: Draft, members: Mapping[str, Any], folder: str | None) -> None:
    """Read the section, name -> raw entry, into `draft.matrices`."""
    for name, raw in members.items():
        where, key = f"matrices.{name}", ("matrices", draft.typed[name])
        table = Table(draft.found, raw, where, key, _KEYS, example=f'by = "age" and values = … below [matrices.{name}]')
        if table.is_table:
            matrix = _matrix(draft, name, table, folder)
            if matrix is not None:
                draft.matrices[name] = matrix


def _matrix(draft: Draft, name: str, table: Table, folder: str | None) -> Matrix | None:
    label, source = table.text("label"), table.text("source")
    by = _dimension(draft, table, "by", required='Name the dimension of its rows and columns: by = "age".')
    within = _dimension(draft, table, "within")
    if within is not None and within == by:
        table.problem("within", f"'{within}' is the dimension of its rows and columns. Name another one.")
        return None
    population = _population(draft, table)
    reciprocal = table.flag("reciprocal")
    if reciprocal and not table.has("population"):
        table.problem("reciprocal", 'needs the size of each group. Write population = "N", or leave reciprocal out.')
    if table.has("values") == table.has("file"):
        what = "both values and file" if table.has("file") else "neither values nor file"
        draft.found.add(table.where, f"has {what}. Write one of the two.", table.key)
        return None
    broken_within = table.has("within") and within not in draft.dimensions
    if by is None or by not in draft.dimensions or broken_within:
        return None
    if table.has("values"):
        blocks, file = _values(draft, table, by, within), None
    else:
        blocks, file = _files(draft, table, by, within, folder)
    if blocks is None or (table.has("population") and population is None):
        return None
    return Matrix(name, by, blocks, population, bool(reciprocal), within, file, label, source)


def _dimension(draft: Draft, table: Table, field: str, *, required: str = "") -> str | None:
    if isinstance(table.raw.get(field), list):
        items = table.raw[field]
        advice = f' Write {field} = "{short(items[0])}".' if len(items) == 1 and isinstance(items[0], str) else ""
        table.problem(field, f"expected one dimension in quotes, not a list.{advice}")
        return None
    text = table.text(field, required=required)
    return draft.resolve(text, "dimension", table.at(field), (*table.key, field)) if text is not None else None


def _population(draft: Draft, table: Table) -> Expression | None:
    if not table.has("population"):
        return None
    raw = table.raw["population"]
    if not isinstance(raw, str):
        table.problem("population", f"expected an expression in quotes, not {describe(raw)}.")
        return None
    return draft.found.expression(raw, table.at("population"), (*table.key, "population"))


def _values(draft: Draft, table: Table, by: str, within: str | None) -> tuple[Block, ...] | None:
    raw = table.raw["values"]
    where, key = table.at("values"), (*table.key, "values")
    if within is None:
        block = _block(draft, raw, by, where, key)
        return None if block is None else (block,)
    groups = draft.dimensions[within].groups
    if not isinstance(raw, list) or len(raw) != len(groups) or not _is_list_of_tables(raw):
        count = f"a list of {len(raw)}" if isinstance(raw, list) else describe(raw)
        message = (
            f"expected a list of {len(groups)} matrices, one for each group of {draft.groups_of(within)}, not {count}."
        )
        draft.found.add(where, message, key)
        return None
    blocks = [_block(draft, part, by, f"{where}, {short(group)}", key) for part, group in zip(raw, groups, strict=True)]
    good = [block for block in blocks if block is not None]
    return tuple(good) if len(good) == len(blocks) else None


def _is_list_of_tables(raw: list[Any]) -> bool:
    return all(isinstance(part, list) and all(isinstance(row, list) for row in part) for part in raw)


def _block(draft: Draft, raw: object, by: str, where: str, key: Key) -> Block | None:
    """Read one square table; every row and entry that is wrong is told, up to the first of each row."""
    found, groups = draft.found, draft.dimensions[by].groups
    size = len(groups)
    shape = f"expected {size} rows of {size} numbers, for the groups of {draft.groups_of(by)}"
    if not isinstance(raw, list) or not all(isinstance(row, list) for row in raw):
        found.add(where, f"{shape}, as a list of lists.", key)
        return None
    if raw and size > 1 and all(isinstance(row, list) and row and isinstance(row[0], list) for row in raw):
        found.add(
            where, f"{shape}: this is a list of matrices. Name the dimension that they belong to with within.", key
        )
        return None
    if len(raw) != size:
        found.add(where, f"{shape}, not {len(raw)} row{'' if len(raw) == 1 else 's'}.", key)
        return None
    rows: list[tuple[Decimal, ...]] = []
    whole: dict[int, Decimal] = {}
    for number, row in enumerate(raw):
        if len(row) != size:
            found.add(where, f"row {number + 1} ({short(groups[number])}) has {len(row)} of {size} entries.", key)
            continue
        numbers: list[Decimal] = []
        for column, entry in enumerate(row):
            trouble = _entry_trouble(entry)
            if trouble is not None:
                found.add(where, f"row {number + 1}, column {column + 1}: {trouble}", key)
                break
            if isinstance(entry, int):
                # tables of many small whole numbers share them
                numbers.append(whole.setdefault(entry, Decimal(entry)))
            else:
                numbers.append(entry)
        if len(numbers) == size:
            rows.append(tuple(numbers))
    return tuple(rows) if len(rows) == size else None


def _entry_trouble(entry: object) -> str | None:
    if isinstance(entry, bool) or not isinstance(entry, int | Decimal):
        return f"expected a number, not {describe(entry)}."
    trouble = number_trouble(entry)
    if trouble is None and entry < 0:
        return f"{short(str(entry))} is negative. Entries are positive or zero."
    return trouble


def _files(
    draft: Draft, table: Table, by: str, within: str | None, folder: str | None
) -> tuple[tuple[Block, ...] | None, str | tuple[str, ...] | None]:
    raw = table.raw["file"]
    where, key = table.at("file"), (*table.key, "file")
    if within is None:
        names = [raw]
        if not isinstance(raw, str):
            draft.found.add(where, f"expected the name of a CSV file in quotes, not {describe(raw)}.", key)
            return None, None
    else:
        groups = draft.dimensions[within].groups
        if not isinstance(raw, list) or len(raw) != len(groups) or not all(isinstance(name, str) for name in raw):
            shape = f"expected a list of {len(groups)} file names, one for each group of {draft.groups_of(within)}"
            draft.found.add(where, f"{shape}.", key)
            return None, None
        names = raw
    blocks: list[Block] = []
    for name in names:
        try:
            blocks.append(read_matrix_file(folder, name, draft.dimensions[by].groups))
        except MatrixFileError as error:
            draft.found.add(f"{where}, '{short(name)}'", str(error), key)
    if len(blocks) < len(names):
        return None, None
    return tuple(blocks), raw if isinstance(raw, str) else tuple(names)
