"""What becomes of an outbreak: how many in the end, whether it takes off, at what pace; steps and continuous time."""

from __future__ import annotations

import streamlit as st

from ngm.screens import outbreak_panels, parts


def page() -> None:
    """Show the page."""
    st.title("Outbreak")
    st.markdown(
        "R0 says whether an infection can spread. Here: how far it gets, whether it takes off at all, and how fast."
    )
    shown = parts.results()
    if shown is None:
        return
    write = parts.digits("outbreak")
    parts.headline(shown.solution, write)
    if shown.solution.R0 is not None:
        if shown.solution.discrete:
            outbreak_panels.twin_panel(shown, write)
        outbreak_panels.outbreak_panel(shown, write)
        if not shown.solution.discrete:
            outbreak_panels.twin_panel(shown, write)
    parts.cautions()


page()
