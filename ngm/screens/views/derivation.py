"""The derivation, step by step: infection-free state, F and V, conditions, K, closed form."""

from __future__ import annotations

import streamlit as st

from ngm.screens import desk, parts, steps


def page() -> None:
    """Show the page."""
    st.title("Derivation")
    shown = parts.results()
    if shown is None:
        return
    write = parts.digits("derivation")
    solution = desk.formulas(shown)
    parts.headline(solution, write)
    steps.types(solution)
    if solution.form == "K as given":
        steps.next_generation(solution, write, 2)
        steps.root(solution, 3)
    elif solution.form == "projection":
        steps.transmission_and_transition(solution, write, 2)
        steps.conditions(solution, 3)
        steps.residence(solution, 4)
        steps.next_generation(solution, write, 5)
        steps.root(solution, 6)
    else:
        steps.infection_free(solution, write)
        steps.transmission_and_transition(solution, write)
        steps.conditions(solution)
        steps.residence(solution)
        steps.next_generation(solution, write)
        steps.on_the_template(solution)
        steps.root(solution)
    parts.warnings_box(solution.warnings)
    parts.cautions(solution.form)


page()
