"""Second opinions: units, other splits, a formula from a paper, and another version of the model."""

from __future__ import annotations

import streamlit as st

from ngm.screens import opinions, parts


def page() -> None:
    """Show the page."""
    st.title("Second opinion")
    st.markdown(
        "What a reviewer would ask: do the units fit, does another view of the flows agree, does the printed formula?"
    )
    shown = parts.results()
    if shown is None:
        return
    write = parts.digits("second_opinion")
    parts.headline(shown.solution, write)
    opinions.units_panel(shown)
    opinions.splits_panel(shown, write)
    opinions.formula_panel(shown, write)
    opinions.versions_panel(shown, write)
    parts.cautions()


page()
