"""The grids of matrices that stand in the scenario in place of compartments and flows, and how such a scenario begins."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import streamlit as st

from ngm.scenario.edit import toml
from ngm.scenario.examine import BroughtMatrix, examine
from ngm.screens import editors, forms, parts, state
from ngm.screens.forms import Column, Edit

__all__ = ["begin", "editor", "form", "new_text"]

#: A matrix with more rows is edited as text.
MOST_ROWS = 40

#: section -> the key of its labels, and its matrices with what they hold
FORMS: dict[str, tuple[str, str, tuple[tuple[str, str], ...]]] = {
    "next_generation": (
        "types",
        "Next-generation matrix K",
        (
            (
                "K",
                "Row: the type infected. Column: the type that infects. A number, 1/3, or an expression in parameters.",
            ),
        ),
    ),
    "projection": (
        "stages",
        "Projected population",
        (
            ("births", "Row: the stage of the new members. Column: the stage that has them, in one step."),
            ("transitions", "Row: the stage a step later. Column: the stage now. Shares, positive or zero."),
        ),
    ),
}
KINDS = {"A next-generation matrix K": "next_generation", "A population in stages": "projection"}
INFECTS = ("the column", "the row")


def form(document: Mapping[str, Any]) -> str | None:
    """Return the section of a document that holds matrices in place of flows, None where there is none."""
    return next((name for name in FORMS if name in document), None)


def editor(section: str, document: Mapping[str, Any]) -> list[Edit]:
    """Place the names and the grids of the matrices; return the edits that they ask for."""
    labels_key, title, tables = FORMS[section]
    held = document[section] if isinstance(document[section], dict) else {}
    st.subheader(title)
    labels = [label for label in held.get(labels_key) or [] if isinstance(label, str)]
    before = ", ".join(labels)
    key = f"model.{section}.{labels_key}.{state.current().forms}"
    typed = st.text_input(f"{labels_key.capitalize()}, separated by commas", value=before, key=key)
    named = [label.strip() for label in typed.split(",") if label.strip()]
    if typed.strip() != before and named != labels:
        return _named(section, held, labels, named)
    if not labels or len(labels) > MOST_ROWS:
        st.caption(f"A grid appears here for 1 to {MOST_ROWS} {labels_key}.")
        return []
    edits: list[Edit] = []
    columns = [Column(str(k), label, "value", width=90) for k, label in enumerate(labels)]
    for name, hint in tables:
        st.caption(f"**{name}**. {hint}")
        edits += _grid(section, name, held.get(name), labels, columns)
    if section == "next_generation":
        edits += _sizes(held.get("sizes"), labels)
    return edits


def _grid(section: str, name: str, values: object, labels: list[str], columns: Sequence[Column]) -> list[Edit]:
    before = forms.matrix_rows(values, len(labels))
    key = f"model.{section}.{name}.{len(labels)}.{state.current().forms}"
    corner = {"K": "infected, by", "births": "born, by", "transitions": "later, now"}[name]
    after = _cells(editors.grid(key, before, columns, name, labels, corner=corner))
    return [] if after == before else forms.matrix_edits((section, name), values, before, after, None, len(labels))


def _sizes(values: object, labels: list[str]) -> list[Edit]:
    with st.expander("Members of each type (optional)", expanded=bool(values)):
        st.caption("Needed where sizes matter: shares of a supply, and how many are infected in the end.")
        held = values if isinstance(values, list) else []
        before = [(forms.shown(held[k], "value") if k < len(held) else "",) for k in range(len(labels))]
        key = f"model.next_generation.sizes.{len(labels)}.{state.current().forms}"
        after = _cells(
            editors.grid(key, before, [Column("0", "Members", "value", width=120)], "Sizes", labels, corner="type")
        )
    if after == before:
        return []
    if not any(cell for (cell,) in after):
        return [Edit("delete", ("next_generation", "sizes"))]
    typed = [forms.typed(cell, "value") for (cell,) in after]
    return [Edit("set", ("next_generation", "sizes"), ["" if value is None else value for value in typed])]


def _cells(rows: Sequence[tuple[object, ...]]) -> list[tuple[str, ...]]:
    return [tuple("" if cell is None or cell != cell else str(cell).strip() for cell in row) for row in rows]


def _named(section: str, held: Mapping[str, Any], before: list[str], after: list[str]) -> list[Edit]:
    """Return the edits that give the types other names: as many as before are renamed, others keep what has their label."""
    labels_key, _, tables = FORMS[section]
    edits = [Edit("set", (section, labels_key), after)]
    if len(after) == len(before):
        return edits
    place = {label: k for k, label in enumerate(before)}
    for name, _ in tables:
        old = forms.matrix_rows(held.get(name), len(before))
        table = [[_value(old[place[a]][place[b]]) if a in place and b in place else 0 for b in after] for a in after]
        edits.append(Edit("set", (section, name), table))
    if "sizes" in held:
        edits.append(Edit("delete", (section, "sizes")))
    return edits


def _value(cell: str) -> Any:
    value = forms.typed(cell, "value")
    return 0 if value is None else value


# --- a new one --------------------------------------------------------------------------------------------------------


def new_text(section: str, labels: Sequence[str], tables: Mapping[str, Sequence[Sequence[object]]]) -> str:
    """Return the text of a new scenario that holds these matrices."""
    lines = ["[scenario]", 'title = "Untitled"', 'time_unit = "year"', "", f"[{section}]"]
    lines.append(f"{FORMS[section][0]} = {toml(list(labels))}")
    lines += [f"{name} = {toml([list(row) for row in table])}" for name, table in tables.items()]
    return "\n".join(lines) + "\n"


EXAMPLES = {
    "next_generation": new_text("next_generation", ["host", "vector"], {"K": [[0, 1.5], [2, 0]]}),
    "projection": new_text(
        "projection",
        ["young", "adult"],
        {"births": [[0, 2], [0, 0]], "transitions": [[0, 0], [0.3, 0.8]]},
    ),
}


def begin() -> str | None:
    """Place the start from a matrix; return the text of a new scenario when it is asked for."""
    with st.expander("A next-generation matrix from a paper, or a population in stages"):
        kind = KINDS[st.radio("What is it?", list(KINDS), horizontal=True, key="scenario.stated.kind")]
        text = st.text_area(
            "Its cells, pasted here with Ctrl+V (or nothing, to begin with a small one)",
            key="scenario.stated.cells",
            height=120,
            help="A square of numbers, with or without the names of its rows and columns.",
        )
        if not text.strip():
            return EXAMPLES[kind] if st.button("Begin with two", key="scenario.stated.small") else None
        found = examine(text)
        if found.table is None:
            for problem in found.problems:
                st.error(f"**The cells cannot be taken.** {parts.plain(problem)}")
            return None
        return _brought(kind, found)


def _brought(kind: str, found: BroughtMatrix) -> str | None:
    assert found.table is not None
    for note in found.notes:
        if found.labels_from == "file" or "labels" in note:
            st.caption(parts.plain(note))
    parts.grid(["", *found.groups], [[g, *map(str, row)] for g, row in zip(found.groups, found.table, strict=True)])
    if kind == "next_generation":
        side = st.radio("Which side infects?", INFECTS, horizontal=True, key="scenario.stated.side")
        table = found.table if side == INFECTS[0] else tuple(zip(*found.table, strict=True))
        tables: dict[str, Sequence[Sequence[object]]] = {"K": table}
    else:
        st.caption(
            "Its first row is taken for births, all others for transitions; both can be changed on the page Model."
        )
        zero = [0] * len(found.groups)
        tables = {
            "births": [list(found.table[0]), *([zero] * (len(found.groups) - 1))],
            "transitions": [zero, *found.table[1:]],
        }
    return (
        new_text(kind, found.groups, tables)
        if st.button("Begin with this matrix", key="scenario.stated.take")
        else None
    )
