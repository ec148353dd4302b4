"""Below one: whether infection can persist where the number is below 1, and from where on it cannot."""

from __future__ import annotations

import streamlit as st

from ngm.screens import course_panels, parts


def page() -> None:
    """Show the page."""
    st.title("Below one")
    st.markdown(
        "Below 1 a few cases die out. Whether infection that is there already dies out too is another question: this page "
        "answers it for the model that is open."
    )
    shown = parts.results()
    if shown is None:
        return
    write = parts.digits("below_one")
    parts.headline(shown.solution, write)
    course_panels.below_one(shown, write)
    parts.cautions()


page()
