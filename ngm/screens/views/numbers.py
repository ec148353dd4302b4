"""R0 and what belongs to it: bounds, growth, who infects whom, what control has to reach."""

from __future__ import annotations

import streamlit as st

from ngm.screens import cache, course_panels, panels, parts, stated_panels


def page() -> None:
    """Show the page."""
    st.title("Reproduction numbers")
    shown = parts.results()
    if shown is None:
        return
    write = parts.digits("numbers")
    solution = shown.solution
    panels.figures(solution, write)
    if solution.season is not None:
        course_panels.season(solution.season, solution.time_unit, write)
    stated_panels.population(solution, write)
    parts.cautions(solution.form)
    parts.warnings_box(solution.warnings)
    if not shown.stale:
        panels.change_a_value(shown, write)
    if solution.R0 is None:
        return
    panels.who_infects_whom(solution, write)
    panels.spectrum(solution, write)
    if solution.form != "projection":
        panels.vectors(solution, write)
    panels.control(cache.control(shown.text, shown.folder), write, solution.form)


page()
