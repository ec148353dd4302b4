"""What is asked for a report on its page: the words it begins with, the parts, and what is computed besides."""

from __future__ import annotations

import streamlit as st

from ngm.reporting.narrative import SECTIONS
from ngm.screens import forms, opinions, parts, state
from ngm.screens.asking import Entries
from ngm.screens.forms import Edit
from ngm.screens.report_cache import Asked

__all__ = ["asked", "left_out", "words"]

#: Field of `[report]` -> what it is called on the page.
WORDS = {
    "question": "Question",
    "audience": "For whom",
    "place": "Place",
    "date": "Date",
    "author": "Author",
    "reviewer": "Reviewer",
    "reviewed_on": "Reviewed on",
    "comparison": "Compared with",
    "funding": "Funding",
}
#: Those that are lists: one line for each.
LISTS = {"assumptions": "Assumptions", "limits": "What must not be concluded", "changes": "Changes"}
#: Draws that a page waits for.
MOST_DRAWS = 100_000


def words() -> None:
    """Place the fields that the report begins with, and put what is typed there into the scenario."""
    now = state.current().now
    document = forms.document(now.text) if now is not None else None
    if now is None or document is None:
        return
    section = document.get("report")
    held = section if isinstance(section, dict) else {}
    edits: list[Edit] = []
    with st.expander("Question, place, date and people", expanded=not held):
        for field, label in WORDS.items():
            before = forms.shown(held.get(field), "text")
            after = st.text_input(label, value=before, key=f"report.{field}.{state.current().forms}")
            edits += forms.field_edit("report", field, before, after)
        for field, label in LISTS.items():
            lines = held.get(field)
            before = "\n".join(map(str, lines)) if isinstance(lines, list) else ""
            after = st.text_area(f"{label}, one a line", value=before, key=f"report.{field}.{state.current().forms}")
            kept = [line.strip() for line in after.splitlines() if line.strip()]
            if after != before and kept != lines:
                edits.append(Edit("set", ("report", field), kept) if kept else Edit("delete", ("report", field)))
    state.edit(parts.applied(now.text, edits))


def left_out() -> tuple[str, ...]:
    """Place the choice of parts; return those left out."""
    known = [key for key in SECTIONS if key != "checklist"]
    held = [key for key in state.recall("report.without").split() if key in known]
    chosen = st.multiselect(
        "Parts to leave out", known, default=held, format_func=lambda key: SECTIONS[key], key="report.without"
    )
    state.remember("report.without", " ".join(chosen))
    return tuple(chosen)


def asked() -> Asked | None:
    """Place the fields for what is computed only where it is asked for; None where an entry is wrong."""
    entries = Entries()
    with st.expander("Draws, a supply, a formula, another version"):
        left, right = st.columns(2)
        draws = entries.number(
            "Draws for the part on uncertainty", "report.draws", "0", left, "0: none. From ranges and distributions."
        )
        seed = entries.number("Seed of the draws", "report.seed", "0", right, "The same seed, the same numbers.")
        supply = left.text_input(
            "Doses, or a budget, to share",
            value=state.recall("report.supply"),
            key="report.supply",
            help="Empty: a model with groups is told the smallest supply that is enough.",
        )
        state.remember("report.supply", supply)
        efficacy = entries.number("Efficacy against infection", "report.efficacy", "1", right, "0.7 or 70 %")
        formula = st.text_input(
            "A formula from a paper, to be compared with R0", value=state.recall("report.formula"), key="report.formula"
        )
        state.remember("report.formula", formula)
        before = opinions.other_version("report.before", "Say what differs from")
    amount = entries.read(supply, "Doses, or a budget, to share") if supply.strip() else None
    for label, number, most in (("Draws", draws, MOST_DRAWS), ("Seed", seed, 2**63 - 1)):
        if number is not None and not (number == int(number) and 0 <= number <= most):
            entries.read("", f"{label}: a whole number from 0 to {most:,}")
    parts.problem_box(entries.problems)
    if entries.problems or draws is None or seed is None or efficacy is None:
        return None
    return Asked(int(draws), int(seed), amount, efficacy, formula.strip(), before)
