"""Edit the model in tables, with its flow diagram and the problems beside what causes them."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import streamlit as st
from streamlit.delta_generator import DeltaGenerator

from ngm.charts.graphs import MOST_WORDED, flow_diagram
from ngm.errors import Problem
from ngm.screens import cache, editors, finding, forms, parts, pasting, sketch, state, stated_edits, taking
from ngm.screens.forms import TABLES, Edit

WORDS = {
    "compartments": (
        "The stages of the course of infection, in matrix order. The last, empty row adds one. "
        "A new name goes wherever the old one stood."
    ),
    "parameters": (
        "Values are typed as text: 0.4, 1e-3, 1/7, or an expression in other parameters. "
        "A new name goes wherever the old one stood."
    ),
    "definitions": "Abbreviations, usable in every expression: N for S + I + R.",
    "flow": "One row an arrow. The rate is the whole rate, not the rate per head: gamma * I.",
    "infection_free": "Optional: what is left out is solved for. A population without births needs it.",
    "dimensions": "Ways in which hosts are grouped, such as age or region.",
    "matrices": "Contacts between groups, or rates of moving between them.",
    "movement": "Members of these compartments change group by a matrix and keep their compartment.",
}
PLAIN = ("compartments", "flow", "parameters", "definitions", "infection_free")
GROUPED = ("dimensions", "matrices", "movement")


def tables(names: tuple[str, ...], document: Mapping[str, Any], boxes: dict[str, DeltaGenerator]) -> list[Edit]:
    """Place tables, each with room below for its problems; return the edits that they ask for."""
    edits: list[Edit] = []
    for name in names:
        st.subheader(TABLES[name].title)
        st.caption(WORDS[name])
        edits += editors.table_editor(TABLES[name], document)
        boxes[name] = st.container()
        if name == "matrices":
            for matrix in forms.matrix_names(document):
                st.markdown(
                    f"Entries of **{parts.plain(matrix)}**. Row: the group that makes contacts, or leaves. "
                    "Column: the group that it meets, or joins."
                )
                edits += editors.matrix_editor(matrix, document)
    return edits


def overview(document: Mapping[str, Any]) -> None:
    """Draw the flow diagram."""
    down = parts.switch("Draw the diagram from top to bottom (for narrow screens)", "model.down")
    graph = flow_diagram(sketch.stages(document), sketch.arrows(document), dark=parts.dark(), down=down)
    if graph is None:
        st.caption("The flow diagram appears here (for up to 60 compartments).")
        return
    arrows = [(a.source, a.target, a.rate, a.kind, a.label) for a in sketch.arrows(document)]
    taking.diagram(graph, "flow-diagram", [("from", "to", "rate", "kind", "label"), *arrows])
    if len(arrows) > MOST_WORDED:
        st.caption("Numbers are those of the flows in their table, from 1; T marks transmission.")
    st.caption(
        "Thick dashed arrows marked “transmission” are new infections (F); thin solid ones are transitions (V). "
        "Infected compartments have a double border; words without a box stand outside."
    )


def sort_out(problems: tuple[Problem, ...], boxes: dict[str, DeltaGenerator]) -> list[Problem]:
    """Put each problem below the table that causes it; return the rest."""
    for name, box in boxes.items():
        with box:
            parts.problem_box([p for p in problems if p.key and p.key[0] == name], "in this table")
    return [p for p in problems if not p.key or p.key[0] not in boxes]


def page() -> None:
    """Show the page."""
    st.title("Model")
    now = state.current().now
    if now is None:
        parts.nothing_open()
        return
    document = forms.document(now.text)
    if document is None:
        parts.problem_box(cache.problems(now.text, now.folder), "in the text")
        st.info("The tables need a text that is TOML. Put it right on the page **Scenario**, or undo the last change.")
        return
    top = st.container()
    boxes: dict[str, DeltaGenerator] = {}
    stated = stated_edits.form(document)
    if stated is not None:
        edits = stated_edits.editor(stated, document)
        boxes[stated] = st.container()
        edits += tables(("parameters", "definitions"), document, boxes)
    else:
        pasting.panel(document)
        edits = tables(PLAIN, document, boxes)
        with st.expander("Groups, matrices and movements", expanded=any(document.get(name) for name in GROUPED)):
            edits += tables(GROUPED, document, boxes)
    text = parts.applied(now.text, edits)
    if any(edit.action == "follow" for edit in edits):
        state.edit(text, by_source=True)  # other tables show the new name too
        st.rerun()
    state.edit(text)
    outcome = cache.solve(text, now.folder)
    rest = sort_out(outcome.problems, boxes)
    with top:
        if stated is None:
            overview(forms.document(text) or document)
        if outcome.solution is not None:
            parts.conversions(text, now.folder, outcome.solution.time_unit)
            parts.headline(outcome.solution)
        else:
            parts.problem_box(rest, "besides those at the tables" if len(rest) < len(outcome.problems) else "")
            finding.jumps(outcome.problems, "model")
            parts.earlier_result()


page()
