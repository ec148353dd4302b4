"""From a problem to the field that causes it: where that is, a button that leads there, and the arrival."""

from __future__ import annotations

import time
from collections.abc import Sequence
from dataclasses import dataclass

import streamlit as st

from ngm.errors import Problem
from ngm.screens import state
from ngm.screens.forms import TABLES

__all__ = ["Place", "arrive", "jumps", "place_of"]

TO = "finding.to"
#: Buttons offered at once.
MOST = 4

#: Section of the scenario that no table of the model page edits -> file of its page, heading to go to.
ELSEWHERE = {
    "scenario": ("views/scenario.py", "Scenario"),
    "intervention": ("views/control.py", "Edit the interventions"),
    "report": ("views/report.py", "Report"),
}

_JS = """
export default function({data}) {
    if (window.ngmFound === data.count) return;
    window.ngmFound = data.count;
    let tries = 0;
    const go = () => {
        const heads = [...document.querySelectorAll('[data-testid="stMain"] :is(h1, h2, h3)')];
        const head = heads.find(one => one.innerText.trim() === data.heading);
        if (!head) { if (tries++ < 50) setTimeout(go, 100); return; }
        head.closest('details')?.setAttribute('open', '');
        head.scrollIntoView({block: 'start'});
        head.tabIndex = -1;
        head.focus({preventScroll: true});
    };
    setTimeout(go, 150);
}
"""
_arrival = st.components.v2.component("ngm_finding", js=_JS)


@dataclass(frozen=True, slots=True)
class Place:
    """Where a field is edited: file of the page, heading above it, and the field in words."""

    page: str
    heading: str
    words: str


def place_of(problem: Problem) -> Place | None:
    """Return where the field of a problem is edited; None where it belongs to no field, or to none that a page edits."""
    if not problem.key:
        return None
    section, *rest = problem.key
    if section in ELSEWHERE:
        page, heading = ELSEWHERE[str(section)]
        return Place(page, heading, heading)
    table = TABLES.get(str(section))
    if table is None:
        return None
    words = [table.title]
    if rest:
        words.append(f"row {rest[0] + 1}" if isinstance(rest[0], int) else str(rest[0]))
    if len(rest) > 1:
        words += [column.title for column in table.columns if column.field == rest[1]]
    return Place("views/model.py", table.title, ", ".join(words))


def jumps(problems: Sequence[Problem], key: str) -> None:
    """Place a button for each field that problems point to; it leads to the field's table on its page."""
    places = list(dict.fromkeys(place for problem in problems if (place := place_of(problem)) is not None))
    for k, place in enumerate(places[:MOST]):
        if st.button(f"Go to {_cut(place.words)}", key=f"finding.{key}.{k}"):
            state.remember(TO, f"{int(time.time() * 1000)} {place.heading}")
            st.switch_page(place.page)


def arrive() -> None:
    """Bring the heading that was jumped to into view, once."""
    count, _, heading = state.recall(TO).partition(" ")
    if heading:
        state.remember(TO, "")
        _arrival(data={"heading": heading, "count": count}, key="finding.arrival", height=1)


def _cut(words: str) -> str:
    # A label is read as Markdown.
    shown = words if len(words) <= 60 else words[:59] + "…"
    return "".join("\\" + c if c in r"\`*_{}[]<>()#+-.!|~$:" else c for c in shown)
