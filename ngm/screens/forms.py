"""Scenario text as rows of text cells, and changed rows as edits of the text. No Streamlit here.

A model that is half typed in is no valid scenario, so the tables work from the TOML document itself, whatever it says.
"""

from __future__ import annotations

import unicodedata
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from difflib import SequenceMatcher
from typing import Any, Literal

from ngm.errors import ScenarioError
from ngm.scenario import edit
from ngm.scenario.renaming import NAMED, rename_everywhere
from ngm.screens.cells import CellKind, Typed, document, shown, typed

__all__ = [
    "TABLES",
    "Column",
    "Edit",
    "Row",
    "Table",
    "apply",
    "document",
    "edits",
    "field_edit",
    "matrix_edits",
    "matrix_names",
    "matrix_rows",
    "rows",
    "shown",
    "tidy",
    "typed",
]

Row = tuple[str, ...]
Path = tuple[str | int, ...]


#: A row without a name is kept in the text under this one, which no scenario accepts: nothing typed is lost.
NAMELESS = "?"

#: A number past the end of every list.
AT_THE_END = 10**9


@dataclass(frozen=True, slots=True)
class Column:
    """One column of a table: the field it edits, its heading, how its text becomes a value, and a hint."""

    field: str
    title: str
    kind: CellKind = "text"
    hint: str = ""
    options: tuple[str, ...] = ()
    width: int | Literal["medium", "large"] = "medium"


@dataclass(frozen=True, slots=True)
class Table:
    """One table of a scenario.

    Attributes
    ----------
    section : str
        The key in the document.
    shape : "named", "plain" or "list"
        `named`: a table of tables, the first column being the name (compartments). `plain`: name = value, two columns
        (definitions). `list`: a list of tables (flows).
    """

    section: str
    title: str
    shape: Literal["named", "plain", "list"]
    columns: tuple[Column, ...]


NAME = Column("name", "Name", hint="Letters, digits and _, beginning with a letter; Greek letters too.", width=110)
LABEL = Column("label", "Label", hint="In words; optional.")
BY = Column(
    "by", "Grouped by", "names", "Names of dimensions, separated by commas; empty where not grouped.", width=110
)

TABLES: Mapping[str, Table] = {
    table.section: table
    for table in (
        Table(
            "compartments",
            "Compartments",
            "named",
            (
                NAME,
                LABEL,
                Column("infected", "Infected?", "choice", "yes or no", ("yes", "no"), 110),
                BY,
            ),
        ),
        Table(
            "parameters",
            "Parameters",
            "named",
            (
                NAME,
                Column("value", "Value", "value", "A number (0.4, 1e-3, 1/7), an expression, or a list for groups."),
                Column("unit", "Unit", hint="For example 1/day or %.", width=110),
                LABEL,
                Column("source", "Source", hint="Where the value comes from."),
                BY,
                Column("range", "Range", "value", "[low, high], for sensitivity work.", width=110),
                Column("distribution", "Distribution", "value", '{ name = "lognormal", mean = 0.2, sd = 0.04 }'),
                Column("sign", "Sign", hint="any: it may be negative. Empty: zero or positive.", width=110),
            ),
        ),
        Table(
            "definitions",
            "Definitions",
            "plain",
            (NAME, Column("", "Expression", "expression", "For example S + I + R.", width="large")),
        ),
        Table(
            "flow",
            "Flows",
            "list",
            (
                Column("from", "From", hint="Empty: from outside.", width=110),
                Column("to", "To", hint="Empty: out of the system.", width=110),
                Column(
                    "rate", "Rate", "expression", "The whole rate, individuals per time unit: gamma * I.", width="large"
                ),
                Column(
                    "kind",
                    "Kind",
                    "choice",
                    "transmission: new infections. transition: everything else.",
                    ("transmission", "transition"),
                    130,
                ),
                LABEL,
            ),
        ),
        Table(
            "infection_free",
            "Infection-free state",
            "plain",
            (NAME, Column("", "Value", "value", "A number or an expression; a list for groups.", width="large")),
        ),
        Table(
            "dimensions",
            "Dimensions",
            "plain",
            (NAME, Column("", "Groups", "names", "Labels, separated by commas: 0-4, 5-17, 18+", width="large")),
        ),
        Table(
            "matrices",
            "Matrices",
            "named",
            (
                NAME,
                Column("by", "Dimension", hint="Whose groups it joins.", width=110),
                Column("population", "Population", "expression", "Size of each group, for balancing: N", width=110),
                Column(
                    "reciprocal",
                    "Balanced?",
                    "choice",
                    "yes: both directions are made to agree.",
                    ("yes", "no"),
                    130,
                ),
                Column("within", "Within", hint="Another dimension: one matrix for each of its groups.", width=110),
                Column("file", "File", hint="A CSV file in the scenario's folder, in place of values.", width=110),
                LABEL,
            ),
        ),
        Table(
            "movement",
            "Movements",
            "list",
            (
                Column("matrix", "Matrix", hint="Entry [i][j]: rate of moving from group i to group j.", width=110),
                Column("of", "Compartments", "names", "Names, separated by commas.", width="large"),
                LABEL,
            ),
        ),
    )
}


@dataclass(frozen=True, slots=True)
class Edit:
    """One edit of the document: set, delete or rename what is at `path`, append to the list there, or insert before it.

    `follow`: rename, and every use of the name with it; where that cannot be (the new name is taken), the key alone.
    """

    action: Literal["set", "delete", "rename", "follow", "append", "insert"]
    path: Path
    value: Any = None


def rows(table: Table, document: Mapping[str, Any]) -> list[Row]:
    """Return the rows of a table as the document has them; entries of another form than the table's are left out."""
    section = document.get(table.section)
    if table.shape == "list":
        entries = section if isinstance(section, list) else []
        return [
            tuple(shown(entry.get(c.field), c.kind) for c in table.columns) for entry in entries if _is_table(entry)
        ]
    if not isinstance(section, dict):
        return []
    if table.shape == "plain":
        return [(name, shown(value, table.columns[1].kind)) for name, value in section.items()]
    return [
        (name, *(shown(entry.get(c.field), c.kind) for c in table.columns[1:]))
        for name, entry in section.items()
        if _is_table(entry)
    ]


def tidy(table: Table, typed_rows: Sequence[Sequence[object]]) -> list[Row]:
    """Return the rows of a grid as they can be kept: empty ones dropped, names made present and different.

    Two entries of one name (in Greek letters or spelt out) cannot stand side by side in a scenario; the second becomes
    ``S (2)``, which the reader refuses in words.
    """
    out: list[Row] = []
    taken: set[str] = set()
    for cells in typed_rows:
        row = tuple("" if _missing(cell) else str(cell).strip() for cell in cells)
        if not any(row):
            continue
        if table.shape != "list":
            name, k = row[0] or NAMELESS, 2
            while _spelt(name) in taken:
                name, k = f"{row[0] or NAMELESS} ({k})", k + 1
            taken.add(_spelt(name))
            row = (name, *row[1:])
        out.append(row)
    return out


def edits(table: Table, before: Sequence[Row], after: Sequence[Row], document: Mapping[str, Any]) -> list[Edit]:
    """Return the edits that turn the rows `before` into `after`, the last row first, so that places stay right."""
    out: list[Edit] = []
    places = _places(table, document)
    matcher = SequenceMatcher(None, before, after, autojunk=False)
    for tag, b0, b1, a0, a1 in reversed(matcher.get_opcodes()):
        if tag == "equal":
            continue
        both = min(b1 - b0, a1 - a0)
        for row in after[a0 + both : a1]:
            out += _new_row(table, row)
        for k in range(b1 - 1, b0 + both - 1, -1):
            out.append(Edit("delete", (table.section, places[k])))
        for k in range(both - 1, -1, -1):
            out += _changed_row(table, places[b0 + k], before[b0 + k], after[a0 + k])
    return out


def apply(text: str, changes: Sequence[Edit]) -> str:
    """Return the text after the edits, one after the other; comments and order stay.

    Raises
    ------
    ScenarioError
        The text has no place for one of them (``compartments = 3`` takes no row).
    """
    for change in changes:
        if change.action == "set":
            text = edit.set_value(text, change.path, change.value)
        elif change.action == "delete":
            text = edit.delete(text, change.path)
        elif change.action == "rename":
            text = edit.rename(text, change.path, change.value)
        elif change.action == "follow":
            try:
                text = rename_everywhere(text, str(change.path[-1]), change.value)
            except ScenarioError:
                text = edit.rename(text, change.path, change.value)
        elif change.action == "insert":
            text = edit.insert(text, change.path, change.value)
        else:
            text = edit.insert(text, (*change.path, AT_THE_END), change.value)
    return text


def matrix_rows(values: object, size: int, block: int | None = None) -> list[Row]:
    """Return a matrix of the document as `size` rows of text, empty where it has no entry.

    `block`: which of several matrices, where the document has a list of them.
    """
    if block is not None:
        values = values[block] if isinstance(values, list) and block < len(values) else None
    table = values if isinstance(values, list) else []
    out: list[Row] = []
    for i in range(size):
        line = table[i] if i < len(table) and isinstance(table[i], list) else []
        out.append(tuple(shown(line[j], "value") if j < len(line) else "" for j in range(size)))
    return out


def matrix_edits(
    path: Path, values: object, before: Sequence[Row], after: Sequence[Row], block: int | None, size: int
) -> list[Edit]:
    """Return the edits that bring the changed cells of a matrix into the document.

    Where the document has a full matrix, each changed entry is set by itself; else the matrix is written anew, with
    empty text for what is still to be typed.
    """
    here = path if block is None else (*path, block)
    held = values if block is None else (values[block] if isinstance(values, list) and block < len(values) else None)
    if _is_square(held, size):
        changed = [(i, j) for i in range(size) for j in range(size) if before[i][j] != after[i][j]]
        return [Edit("set", (*here, i, j), _entry(after[i][j])) for i, j in changed]
    table = [[_entry(cell) for cell in row] for row in after]
    if block is None:
        return [Edit("set", path, table)]
    blocks = list(values) if isinstance(values, list) else []
    blocks += [[[""] * size for _ in range(size)] for _ in range(block + 1 - len(blocks))]
    blocks[block] = table
    return [Edit("set", path, _plain(blocks))]


def _is_square(values: object, size: int) -> bool:
    return (
        isinstance(values, list)
        and len(values) == size
        and all(isinstance(row, list) and len(row) == size for row in values)
    )


def _entry(cell: str) -> Any:
    value = typed(cell, "value")
    return "" if value is None else value


def _plain(value: Any) -> Any:
    """Return a value of the document with numbers kept as typed turned into numbers."""
    if isinstance(value, list):
        return [_plain(item) for item in value]
    return typed(value, "value") if isinstance(value, Typed) else value


def _spelt(name: str) -> str:
    """Return the name with Greek letters spelt out: both spellings are one name."""
    return "".join(_letter(character) for character in name)


def _letter(character: str) -> str:
    told = unicodedata.name(character, "")
    if not told.startswith("GREEK") and told != "MICRO SIGN":
        return character
    word = "mu" if told == "MICRO SIGN" else told.removesuffix(" SYMBOL").split()[-1].lower().replace("lamda", "lambda")
    return word.capitalize() if character.isupper() else word


def _is_table(entry: object) -> bool:
    return isinstance(entry, dict)


def _missing(cell: object) -> bool:
    # A cell nobody typed in arrives as None or as a NaN, which alone differs from itself.
    return cell is None or cell != cell


def _places(table: Table, document: Mapping[str, Any]) -> list[str | int]:
    """Return the key or index of each row in the document."""
    section = document.get(table.section)
    if table.shape == "list":
        return [k for k, entry in enumerate(section if isinstance(section, list) else []) if _is_table(entry)]
    if not isinstance(section, dict):
        return []
    return [name for name, entry in section.items() if table.shape == "plain" or _is_table(entry)]


def _new_row(table: Table, row: Row) -> list[Edit]:
    values = {c.field: typed(cell, c.kind) for c, cell in zip(table.columns, row, strict=True)}
    if table.shape == "plain":
        # A name without a value yet is kept with an empty text, which the reader asks to be filled.
        value = values[""]
        return [Edit("set", (table.section, row[0]), "" if value is None else value)]
    entry = {field: value for field, value in values.items() if value is not None}
    if table.shape == "list":
        return [Edit("append", (table.section,), entry)]
    del entry["name"]
    return [Edit("set", (table.section, row[0]), entry)]


def _changed_row(table: Table, place: str | int, before: Row, after: Row) -> list[Edit]:
    out: list[Edit] = []
    if table.shape != "list" and before[0] != after[0]:
        # With other cells changed too it is another thing that came in its place.
        follow = table.section in NAMED and before[1:] == after[1:] and NAMELESS not in (before[0], after[0])
        out.append(Edit("follow" if follow else "rename", (table.section, place), after[0]))
        place = after[0]
    first = 0 if table.shape == "list" else 1
    for column, old, new in list(zip(table.columns, before, after, strict=True))[first:]:
        if old == new:
            continue
        path: Path = (table.section, place) if table.shape == "plain" else (table.section, place, column.field)
        value = typed(new, column.kind)
        if value is None and table.shape == "plain":
            value = ""
        out.append(Edit("delete", path) if value is None else Edit("set", path, value))
    return out


def field_edit(
    section: str, field: str | tuple[str, ...], before: str, after: str, kind: CellKind = "text"
) -> list[Edit]:
    """Return the edit of a single field; none where it is what it was."""
    if after == before:
        return []
    path: Path = (section, field) if isinstance(field, str) else (section, *field)
    value = typed(after, kind)
    return [Edit("delete", path) if value is None else Edit("set", path, value)]


def matrix_names(document: Mapping[str, Any]) -> list[str]:
    """Return the names of the matrices that the document has as tables."""
    section = document.get("matrices")
    return [name for name, entry in section.items() if _is_table(entry)] if isinstance(section, dict) else []
