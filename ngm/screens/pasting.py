"""The place where cells of a spreadsheet are pasted, looked at, and taken over."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import streamlit as st

from ngm.screens import forms, parts, paste, state
from ngm.screens.forms import TABLES

__all__ = ["panel"]

ADD, INSTEAD = "beside the rows that are there", "in place of the rows that are there"


@st.fragment
def panel(document: Mapping[str, Any]) -> None:
    """Let cells be pasted into one of the tables or matrices; nothing is taken over before the button is pressed."""
    with st.expander("Paste a table from a spreadsheet"):
        matrices = {f"Entries of {name}": name for name in forms.matrix_names(document) if _plain(document, name)}
        titles = {table.title: section for section, table in TABLES.items()}
        left, right = st.columns(2)
        into = left.selectbox("Into which table?", [*titles, *matrices], key="paste.into")
        how = ADD
        if into in titles:
            how = right.radio("How?", [ADD, INSTEAD], key="paste.how")
            heads = ", ".join(column.title for column in TABLES[titles[into]].columns)
            st.caption(f"Columns: {heads}. A first line with these headings may name fewer, in any order.")
        else:
            st.caption("A square of numbers, with or without the groups as headings; or lines of from, to, value.")
        text = st.text_area("Cells, pasted here with Ctrl+V", key=f"paste.text.{state.current().forms}", height=160)
        if not text.strip():
            return
        if into in titles:
            found = paste.into_table(TABLES[titles[into]], text, document, instead=how == INSTEAD)
        else:
            name = matrices[into]
            groups = document["dimensions"][document["matrices"][name]["by"]]
            found = paste.into_matrix(name, text, document, groups)
        parts.problem_box(found.problems, "in what was pasted; nothing was taken over")
        if found.problems:
            return
        st.markdown(f"Ready: {parts.plain(found.told)}.")
        now = state.current().now
        if st.button("Take it over", key="paste.take", type="primary") and now is not None:
            # Not by a grid: all grids start afresh from the text, and so does the whole page.
            state.edit(parts.applied(now.text, found.edits), by_source=True, note=f"pasted: {found.told}")
            st.rerun()


def _plain(document: Mapping[str, Any], name: str) -> bool:
    """Return whether a matrix has its entries in the scenario, one for each pair of groups."""
    matrix = document["matrices"][name]
    dimensions = document.get("dimensions")
    groups = dimensions.get(matrix.get("by")) if isinstance(dimensions, dict) else None
    return isinstance(groups, list) and "file" not in matrix and "within" not in matrix
