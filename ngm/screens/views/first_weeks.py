"""The first weeks: the flows followed from a few cases, beside growth rate, stable mix and generations."""

from __future__ import annotations

import streamlit as st

from ngm.screens import course_panels, parts


def page() -> None:
    """Show the page."""
    st.title("First weeks")
    st.markdown(
        "The flows of the model followed from a few cases of each type: a look at whether they grow as fast, and in the mix, "
        "that the growth rate promises."
    )
    shown = parts.results()
    if shown is None:
        return
    write = parts.digits("first_weeks")
    parts.headline(shown.solution, write)
    course_panels.first_weeks(shown, write)
    parts.cautions()


page()
