"""The guided start: five questions, with the model that they make beside them."""

from __future__ import annotations

from dataclasses import fields
from typing import Any

import streamlit as st

from ngm.charts.graphs import flow_diagram
from ngm.screens import asking, cache, forms, guide, parts, sketch, state
from ngm.screens.guide import Answers

__all__ = ["begin", "guided", "under_way"]

STEP = "start.step"
#: What stands in the fields at first.
FIRST = Answers()
#: The fields of all steps.
FIELDS = ("title", "unit", "after", "contacts", "beta", "infectious", "immune", "people", "turnover", "lifetime")
STEPS = (
    "What is it, and how is time counted?",
    "What comes after the infectious stage?",
    "How does it spread?",
    "How long do the stages last?",
    "Who is there?",
)
UNITS = ("day", "week", "month", "year")
AFTER = ("immune for good", "immune for a time, then susceptible again")
CONTACTS = (
    "A person has as many contacts however many people there are: beta S I / N",
    "Contacts grow with the number of people, as in a herd or a crowd: beta S I",
)
TURNOVER = ("nobody is born or dies in the time looked at", "people are born and die")


def begin() -> None:
    """Show the first question."""
    state.remember(STEP, "1")


def under_way() -> bool:
    """Return whether the questions are being asked."""
    return bool(state.recall(STEP))


def guided() -> None:
    """Ask one question after the other; at the end the model is opened as a draft."""
    step = int(state.recall(STEP) or 1)
    entries = asking.Entries()
    with st.container(border=True, key="start"):
        st.subheader(f"Step {step} of {len(STEPS)}: {STEPS[step - 1]}")
        left, right = st.columns([3, 2])
        with left:
            _ask(step, entries)
            parts.problem_box(entries.problems, "with what is typed")
        text = guide.written(_answers())
        with right:
            _so_far(text, step)
        back, onward, leave = st.columns(3)
        back.button("Back", key="start.back", disabled=step == 1, on_click=_go, args=(step - 1,), width="stretch")
        if step < len(STEPS):
            onward.button(
                "Next",
                key="start.next",
                type="primary",
                disabled=bool(entries.problems),
                on_click=_go,
                args=(step + 1,),
                width="stretch",
            )
        else:
            onward.button(
                "Open this model",
                key="start.open",
                type="primary",
                disabled=bool(entries.problems),
                on_click=_open,
                width="stretch",
            )
        leave.button("Leave the guide", key="start.leave", on_click=_go, args=(0,), width="stretch")


def _ask(step: int, entries: asking.Entries) -> None:
    unit = state.recall("start.unit", UNITS[0])
    if step == 1:
        title = st.text_input("Title", value=state.recall("start.title", FIRST.title), key="start.title")
        state.remember("start.title", title)
        asking.choice("Time unit of every rate", UNITS, "start.unit")
    elif step == 2:
        st.markdown("Three compartments: **S** susceptible, **I** infectious, **R** recovered. Those in R are")
        _one_of("start.after", AFTER)
    elif step == 3:
        _one_of("start.contacts", CONTACTS)
        per = "" if _first("start.contacts", CONTACTS) else " and person present"
        entries.positive(f"Infectious contacts (beta), per {unit}{per}", "start.beta", guide.amount(FIRST.beta), st)
        st.caption("Contacts of one infectious person that would infect somebody susceptible: contacts times chance.")
    elif step == 4:
        default = guide.amount(FIRST.infectious)
        entries.positive(f"Mean length of the infectious stage, {unit}s", "start.infectious", default, st)
        if not _first("start.after", AFTER):
            entries.positive(f"Mean length of immunity, {unit}s", "start.immune", guide.amount(FIRST.immune), st)
        st.caption("The rate of leaving a stage is 1 over its mean length.")
    else:
        entries.positive("Number of people", "start.people", guide.amount(FIRST.people), st)
        _one_of("start.turnover", TURNOVER)
        if not _first("start.turnover", TURNOVER):
            entries.positive("Mean lifetime, years", "start.lifetime", guide.amount(FIRST.lifetime), st)


def _so_far(text: str, step: int) -> None:
    document = forms.document(text) or {}
    graph = flow_diagram(sketch.stages(document), sketch.arrows(document), dark=parts.dark(), down=True)
    if graph is not None and step > 1:
        st.graphviz_chart(graph.dot, alt=graph.alt)
    outcome = cache.numbers(text, None)
    if outcome.solution is not None and step >= 3:
        parts.headline(outcome.solution)


def _answers() -> Answers:
    """Return what was answered so far; what was not, or is no number, as it is at first."""
    held: dict[str, Any] = {
        "title": state.recall("start.title") or FIRST.title,
        "time_unit": state.recall("start.unit") or UNITS[0],
        "wanes": not _first("start.after", AFTER),
        "per_head": _first("start.contacts", CONTACTS),
        "turnover": not _first("start.turnover", TURNOVER),
    }
    quiet = asking.Entries()
    for field in fields(Answers):
        typed = state.recall(f"start.{field.name}")
        if field.name not in held and typed:
            value = quiet.read(typed, field.name)
            if value is not None and value > 0:
                held[field.name] = value
    return Answers(**held)


def _one_of(field: str, options: tuple[str, ...]) -> None:
    chosen = st.radio(field, options, index=int(not _first(field, options)), key=field, label_visibility="collapsed")
    state.remember(field, chosen or options[0])


def _first(field: str, options: tuple[str, ...]) -> bool:
    return state.recall(field, options[0]) == options[0]


def _go(step: int) -> None:
    # What was typed last may come together with the press of the button, before a run could keep it.
    for field in FIELDS:
        typed = st.session_state.get(f"start.{field}")
        if isinstance(typed, str):
            state.remember(f"start.{field}", typed)
    state.remember(STEP, str(step) if step else "")


def _open() -> None:
    _go(0)
    state.open_text(guide.written(_answers()), "my-first-model.toml")
