"""Control: interventions side by side, the strength and coverage needed, whom to act on, a supply to be shared."""

from __future__ import annotations

from collections.abc import Callable

import streamlit as st

from ngm.screens import asking, measures, parts, state, supply
from ngm.screens.parts import Shown

Write = Callable[[float | None], str]

COMPARE = "Compare interventions"
QUESTIONS: dict[str, Callable[[Shown, Write], None]] = {
    COMPARE: measures.side_by_side,
    "Strength needed": measures.strengths,
    "Whom to act on": measures.targets,
    "Coverage": supply.coverage,
    "Share a supply": supply.sharing,
}


def page() -> None:
    """Show the page."""
    st.title("Control")
    now = state.current().now
    if now is None:
        parts.nothing_open()
        return
    held = state.recall("control.question", COMPARE)
    index = list(QUESTIONS).index(held) if held in QUESTIONS else 0
    question = st.radio(
        "What do you want to know?", list(QUESTIONS), index=index, horizontal=True, key="control.question"
    )
    state.remember("control.question", question)
    top = st.container()
    form = "flows"
    if question == COMPARE:
        measures.editor(now)
    with top:
        shown = parts.results()
        if shown is not None:
            form = shown.solution.form
            parts.headline(shown.solution)
            QUESTIONS[question](shown, parts.digits("control"))
    asking.cautions(form)


page()
