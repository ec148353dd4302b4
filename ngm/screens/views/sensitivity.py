"""Sensitivity: which parameters move R0, how far it is known, two of them at once, the value for a wanted R0."""

from __future__ import annotations

import streamlit as st

from ngm.screens import answers, draw_panels, parts


def page() -> None:
    """Show the page."""
    st.title("Sensitivity")
    shown = parts.results()
    if shown is None:
        return
    write = parts.digits("sensitivity")
    parts.headline(shown.solution, write)
    if shown.solution.R0 is not None:
        answers.local(shown, write)
        draw_panels.draws(shown, write)
        answers.plane(shown, write)
    answers.calibration(shown, write)
    parts.cautions()


page()
