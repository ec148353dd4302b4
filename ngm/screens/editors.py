"""The tables of the model page: grids of text cells over the scenario's text."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import streamlit as st

from ngm.screens import forms, state
from ngm.screens.forms import Column, Edit, Row, Table

__all__ = ["grid", "matrix_editor", "table_editor"]

#: A matrix with more groups is edited as text, or read from a file.
MOST_GROUPS = 40

#: Height of a row of a grid, pixels.
ROW = 35


def table_editor(table: Table, document: Mapping[str, Any]) -> list[Edit]:
    """Place the grid of one table; return the edits that it asks for."""
    key = f"model.{table.section}.{state.current().forms}"
    before = forms.rows(table, document)
    typed = grid(key, before, table.columns, table.title)
    after = forms.tidy(table, typed)
    return [] if after == before else forms.edits(table, before, after, document)


def matrix_editor(name: str, document: Mapping[str, Any]) -> list[Edit]:
    """Place the grid of one matrix with its groups on both sides; return the edits that it asks for."""
    matrix = document["matrices"][name]
    groups = _groups(document, matrix.get("by"))
    path: tuple[str | int, ...] = ("matrices", name, "values")
    values = matrix.get("values")
    if "file" in matrix or not groups or len(groups) > MOST_GROUPS:
        st.caption(
            "Its entries come from the file named above."
            if "file" in matrix
            else f"A grid appears here when its dimension has between 1 and {MOST_GROUPS} groups."
        )
        return []
    block = None
    if "within" in matrix:
        others = _groups(document, matrix["within"])
        if not others:
            return []
        key = f"model.block.{name}.{state.current().forms}"
        chosen = st.selectbox(f"Matrix for which group of {matrix['within']}?", others, key=key)
        block = others.index(chosen)
    before = forms.matrix_rows(values, len(groups), block)
    columns = [Column(str(k), group, "value", width=90) for k, group in enumerate(groups)]
    typed = grid(f"model.matrix.{name}.{block}.{state.current().forms}", before, columns, name, groups)
    after = [tuple("" if cell is None or cell != cell else str(cell).strip() for cell in row) for row in typed]
    return [] if after == before else forms.matrix_edits(path, values, before, after, block, len(groups))


def _groups(document: Mapping[str, Any], dimension: object) -> list[str]:
    dimensions = document.get("dimensions")
    found = dimensions.get(dimension) if isinstance(dimensions, dict) and isinstance(dimension, str) else None
    return [group for group in found if isinstance(group, str)] if isinstance(found, list) else []


def grid(
    key: str,
    before: Sequence[Row],
    columns: Sequence[Column],
    title: str,
    labels: Sequence[str] | None = None,
    spare: int | None = None,
    corner: str = "from",
) -> list[tuple[object, ...]]:
    """Return the rows that the grid holds now.

    The table given to the grid stays the same object as long as the grid lives, whatever is typed: with a new one after
    each edit every second edit is lost. It is taken from the text when the grid is new, or is come back to. `spare`: with
    it the grid is as high as its first rows and so many more, up to 25 in all, in place of the usual ten.
    """
    import pandas

    base = f"{key}.base"
    if key not in st.session_state or base not in st.session_state:
        index = pandas.Index(labels, name=corner) if labels is not None else None
        names = [column.field for column in columns]
        st.session_state[base] = pandas.DataFrame(list(before), columns=names, index=index, dtype="object")
    frame = st.data_editor(
        st.session_state[base],
        key=key,
        num_rows="fixed" if labels is not None else "dynamic",
        hide_index=labels is None,
        column_config={column.field: _config(column, before, k) for k, column in enumerate(columns)},
        placeholder="",
        height="auto" if spare is None else ROW * (min(len(st.session_state[base]) + spare, 25) + 2) + 2,
        alt=title,
    )
    return [tuple(row) for row in frame.to_numpy(dtype=object).tolist()]


def _config(column: Column, before: Sequence[Row], k: int) -> Any:
    if column.kind == "choice":
        # What the text says and is no choice stays visible.
        options = dict.fromkeys([*column.options, *(row[k] for row in before if row[k])])
        return st.column_config.SelectboxColumn(
            column.title, help=column.hint or None, options=list(options), width=column.width
        )
    return st.column_config.TextColumn(column.title, help=column.hint or None, width=column.width)
