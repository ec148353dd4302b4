"""Mixing: contact matrices, brought and balanced, and how R0 and the case mix answer to them."""

from __future__ import annotations

import streamlit as st

from ngm.results_mixing import MixCase, Mixing, MixingResponses
from ngm.screens import cache, forms, mixing_changes, mixing_panels, parts, state
from ngm.screens.parts import Shown, plain


def without_groups() -> None:
    """Say what a scenario needs before this page has something to show."""
    st.info(
        "This scenario has no contact matrix. On the page **Model**, under *Groups, matrices and movements*:\n"
        "1. name a dimension and its groups (age: 0-17, 18-64, 65+);\n"
        "2. write that dimension under *Grouped by* for the compartments it divides;\n"
        "3. add a matrix of that dimension (contacts, by age) and fill it in;\n"
        "4. use it in the rate of infection: `q * S * contacts(I / N)` is, in each group, the contacts of one member that "
        "are infectious, times q and S.\n\n"
        "Several matrices, one for each setting (home, school, work), can be added in one rate."
    )
    st.page_link("views/model.py", label="Go to Model")


def chosen(shown: Shown, first: Mixing) -> tuple[Mixing, int | None] | None:
    """Let a matrix be chosen, and the group where it has several tables; return it and the table's number."""
    held = state.recall("mixing.matrix", first.matrix)
    index = first.settings.index(held) if held in first.settings else 0
    name = st.selectbox("Contact matrix", first.settings, index=index, key="mixing.matrix")
    state.remember("mixing.matrix", name)
    found = first if name == first.matrix else cache.mixing(shown.text, shown.folder, name, None)
    block = None
    if isinstance(found, Mixing) and found.others:
        within = st.selectbox("Its table for which group?", found.others, key=f"mixing.within.{name}")
        block = found.others.index(within)
        found = cache.mixing(shown.text, shown.folder, name, within)
    if not isinstance(found, Mixing):
        parts.problem_box(found, "with this matrix")
        return None
    return found, block


def before_the_change(found: Mixing) -> MixCase | None:
    """Return R0 and the case mix before the last change of the text, where they can be compared."""
    past = state.current().past
    now = state.current().now
    if not past or now is None or past[-1].name != now.name:
        return None
    earlier = cache.mixing(past[-1].text, past[-1].folder, found.matrix, found.within)
    if not isinstance(earlier, Mixing) or earlier.mix_labels != found.mix_labels:
        return None
    case = earlier.in_force
    if (case.R0, case.case_mix) == (found.in_force.R0, found.in_force.case_mix):
        return None
    return MixCase("before the last change", "What the text said before.", False, case.R0, case.case_mix, case.why)


def page() -> None:
    """Show the page."""
    st.title("Mixing")
    shown = parts.results()
    if shown is None:
        return
    write = parts.digits("mixing")
    parts.headline(shown.solution, write)
    first = cache.mixing(shown.text, shown.folder, None, None)
    if not isinstance(first, Mixing):
        without_groups()
        return
    made = chosen(shown, first)
    if made is None:
        return
    found, block = made
    document = forms.document(shown.text) or {}
    if shown.stale:
        st.info("The scenario can be changed here again once the problems above are put right.")
    else:
        mixing_changes.bring(shown, found, document, block, write)
    mixing_panels.the_matrix(found, write)
    mixing_panels.reciprocity(found, write)
    if not shown.stale:
        mixing_changes.balance(found, document)
        mixing_changes.sizes(found, document)
    mixing_panels.cases(found, before_the_change(found), write)
    parts.cautions()
    if not shown.stale:
        mixing_changes.factors(shown, found, document, write)
    answers = cache.mixing_responses(shown.text, shown.folder, found.matrix, found.within)
    if isinstance(answers, MixingResponses):
        mixing_panels.answers(answers, write)
        parameters = document.get("parameters")
        mixing_panels.the_map(shown, found, list(parameters) if isinstance(parameters, dict) else [], write)
    else:
        st.caption(" ".join(plain(str(problem)) for problem in answers))
    parts.warnings_box(found.warnings)


page()
