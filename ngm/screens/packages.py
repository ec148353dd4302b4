"""Interventions as rows of text cells, and changed rows as edits of the text. No Streamlit here.

One row a change: the intervention it belongs to, what it acts on, where, how, by how much. A row that is half typed is kept
in the text all the same, under keys that the reader refuses in words.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from difflib import SequenceMatcher
from typing import Any

from ngm.screens.cells import Typed, shown, typed
from ngm.screens.forms import AT_THE_END, NAMELESS, Column, Edit, Row, Table

__all__ = ["CHANGES", "INTERVENTIONS", "change_edits", "change_rows", "names", "tidy_changes"]

WHAT = ("parameter", "matrix", "susceptibility", "infectivity")
ACTIONS = ("multiply", "set", "add", "reduce")

#: Keys for what has no key yet: a name with nothing said about what it is, an amount with no action.
NO_ACTION = "amount"

SECTION = "intervention"

INTERVENTIONS = Table(
    SECTION,
    "Interventions",
    "list",
    (
        Column("name", "Name", hint="Each its own."),
        Column("note", "Note", hint="In words; optional.", width="large"),
        Column("cost", "Cost", "value", "A number, in one unit for all; optional.", width=110),
    ),
)

CHANGES = (
    Column("intervention", "Intervention", hint="A new name makes a new one; empty: as in the row above.", width=180),
    Column("what", "Acts on", "choice", "What kind of thing is changed.", WHAT, 130),
    Column("name", "Its name", hint="Of the parameter, matrix or compartment: beta, contacts, E.", width=110),
    Column(
        "action", "How", "choice", "reduce: for susceptibility and infectivity; else the other three.", ACTIONS, 110
    ),
    Column("amount", "Amount", "value", "multiply by 0.8; set to 0.3; add -0.05; reduce by 0.45, for 45 %.", width=110),
    Column("group", "Groups", hint="age: 0-4, 5-17 (and ; region: North); empty: all.", width=140),
    Column("rows", "Rows", "names", "Of a matrix: groups, separated by commas; empty: all.", width=100),
    Column("columns", "Columns", "names", "Of a matrix: groups, separated by commas; empty: all.", width=100),
)


def names(document: Mapping[str, Any]) -> list[str]:
    """Return a label for each intervention of the document, each its own: a second "Masks" is "Masks (2)"."""
    out: list[str] = []
    for _, entry in _entries(document):
        name = shown(entry.get("name"), "text").strip() or NAMELESS
        label, k = name, 2
        while label in out:
            label, k = f"{name} ({k})", k + 1
        out.append(label)
    return out


def change_rows(document: Mapping[str, Any]) -> list[Row]:
    """Return a row for each change of each intervention."""
    return [
        (label, *_cells(change))
        for label, (_, entry) in zip(names(document), _entries(document), strict=True)
        for _, change in _changes(entry)
    ]


def tidy_changes(document: Mapping[str, Any], typed_rows: Sequence[Sequence[object]]) -> list[Row]:
    """Return the rows of a grid in the order of the document: empty ones dropped, an empty first cell filled from above."""
    known = names(document)
    rows: list[Row] = []
    above = known[-1] if known else NAMELESS
    for cells in typed_rows:
        row = tuple("" if cell is None or cell != cell else str(cell).strip() for cell in cells)
        if not any(row):
            continue
        above = row[0] or above
        rows.append((above, *row[1:]))
    order = list(dict.fromkeys([*known, *(row[0] for row in rows)]))
    return sorted(rows, key=lambda row: order.index(row[0]))


def change_edits(document: Mapping[str, Any], after: Sequence[Row]) -> list[Edit]:
    """Return the edits that bring the rows of `tidy_changes` into the document, the last first, so that places stay right."""
    wanted: dict[str, list[Row]] = {}
    for row in after:
        wanted.setdefault(row[0], []).append(row[1:])
    known = list(zip(names(document), _entries(document), strict=True))
    new = [label for label in wanted if label not in names(document)]
    out = [
        Edit("append", (SECTION,), {"name": label, "change": [_entry(row, document) for row in wanted[label]]})
        for label in new
    ]
    for label, (k, entry) in reversed(known):
        out += _within(document, k, entry, wanted.get(label, []))
    return out


def _within(document: Mapping[str, Any], k: int, entry: Mapping[str, Any], after: Sequence[Row]) -> list[Edit]:
    """Return the edits of one intervention's changes."""
    held = _changes(entry)
    before = [_cells(change) for _, change in held]
    if before == list(after):
        return []
    path = (SECTION, k, "change")
    if not isinstance(entry.get("change"), list):
        return [Edit("set", path, [_entry(row, document) for row in after])]
    out: list[Edit] = []
    for tag, b0, b1, a0, a1 in reversed(SequenceMatcher(None, before, after, autojunk=False).get_opcodes()):
        if tag == "equal":
            continue
        both = min(b1 - b0, a1 - a0)
        place = held[b0 + both][0] if b0 + both < len(held) else AT_THE_END
        for row in reversed(after[a0 + both : a1]):
            out.append(Edit("insert", (*path, place), _entry(row, document)))
        for b in range(b1 - 1, b0 + both - 1, -1):
            out.append(Edit("delete", (*path, held[b][0])))
        for b in range(both - 1, -1, -1):
            j, change = held[b0 + b]
            out += _changed((*path, j), change, before[b0 + b], after[a0 + b], document)
    return out


def _changed(
    path: tuple[str | int, ...], change: Mapping[str, Any], before: Row, after: Row, document: Mapping[str, Any]
) -> list[Edit]:
    """Return the edits of one change: cell by cell, or the whole of it where it is of another kind now."""
    if (before[0], before[2]) != (after[0], after[2]) or _what(change) is None or _action(change) is None:
        known = {*WHAT, *ACTIONS, NAMELESS, NO_ACTION, "group", "rows", "columns"}
        others = {key: _plain(value) for key, value in change.items() if key not in known}
        return [Edit("set", path, {**others, **_entry(after, document)})]
    out: list[Edit] = []
    keys = (after[0], after[0], after[2], after[2], "group", "rows", "columns")
    values = _values(after, document)
    for c in (1, 3, 4, 5, 6):
        if before[c] != after[c]:
            value = "" if values[c] is None and c in (1, 3) else values[c]
            out.append(Edit("delete", (*path, keys[c])) if value is None else Edit("set", (*path, keys[c]), value))
    return out


def _entries(document: Mapping[str, Any]) -> list[tuple[int, Mapping[str, Any]]]:
    section = document.get(SECTION)
    return [
        (k, entry) for k, entry in enumerate(section if isinstance(section, list) else []) if isinstance(entry, dict)
    ]


def _changes(entry: Mapping[str, Any]) -> list[tuple[int, Mapping[str, Any]]]:
    held = entry.get("change")
    return [(j, change) for j, change in enumerate(held if isinstance(held, list) else []) if isinstance(change, dict)]


def _what(change: Mapping[str, Any]) -> str | None:
    return next((key for key in WHAT if key in change), None)


def _action(change: Mapping[str, Any]) -> str | None:
    return next((key for key in ACTIONS if key in change), None)


def _cells(change: Mapping[str, Any]) -> Row:
    what, action = _what(change), _action(change)
    return (
        what or "",
        shown(change.get(what or NAMELESS), "text"),
        action or "",
        shown(change.get(action or NO_ACTION)),
        _groups_text(change.get("group")),
        shown(change.get("rows"), "names"),
        shown(change.get("columns"), "names"),
    )


def _values(row: Row, document: Mapping[str, Any]) -> tuple[Any, ...]:
    what, name, action, amount, group, rows, columns = row
    return (
        what,
        name or None,
        action,
        typed(amount, "value"),
        _groups(group, document),
        typed(rows, "names"),
        typed(columns, "names"),
    )


def _entry(row: Row, document: Mapping[str, Any]) -> dict[str, Any]:
    """Return a change as the document holds it."""
    what, name, action, amount, group, rows, columns = _values(row, document)
    out: dict[str, Any] = {}
    if what or name is not None:
        out[what or NAMELESS] = name or ""
    out |= {key: value for key, value in (("group", group), ("rows", rows), ("columns", columns)) if value is not None}
    if action or amount is not None:
        out[action or NO_ACTION] = "" if amount is None else amount
    return out


def _plain(value: Any) -> Any:
    """Return a value of the document with numbers kept as typed turned into numbers."""
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, list):
        return [_plain(item) for item in value]
    return typed(value, "value") if isinstance(value, Typed) else value


def _groups_text(value: object) -> str:
    """Return ``age: 0-4, 5-17; region: North`` where that can be read back, else the value as the file has it."""
    if not isinstance(value, dict):
        return shown(value)
    parts = []
    for dimension, labels in value.items():
        listed = [labels] if isinstance(labels, str) else labels
        if not isinstance(listed, list) or not listed or not all(_is_plain(label) for label in [dimension, *listed]):
            return shown(value)
        parts.append(f"{dimension}: {', '.join(listed)}")
    return "; ".join(parts)


def _is_plain(label: object) -> bool:
    return isinstance(label, str) and label == label.strip() != "" and not set(label) & set(",;:{}")


def _groups(text: str, document: Mapping[str, Any]) -> Any:
    """Return the value of `group` for the text of a cell; without a dimension the only one of the document is meant."""
    if not text:
        return None
    if text.startswith("{"):
        return typed(text, "value")
    dimensions = document.get("dimensions")
    only = list(dimensions) if isinstance(dimensions, dict) else []
    out: dict[str, list[str]] = {}
    for part in text.split(";"):
        dimension, colon, labels = part.partition(":")
        if not colon:
            if len(only) != 1:
                return text
            dimension, labels = only[0], part
        out[dimension.strip()] = [label.strip() for label in labels.split(",") if label.strip()]
    return out
