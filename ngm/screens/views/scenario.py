"""Open, start, name, read and save a scenario."""

from __future__ import annotations

import streamlit as st

from ngm.screens import cache, finding, forms, parts, shelf, start, state, stated_edits
from ngm.screens.forms import Edit


def choose() -> None:
    """Place the three ways to a scenario: the ones that come with the app, a file, a new one."""
    first, second, third = st.columns(3)
    with first, st.container(border=True):
        chosen = st.selectbox("Open one that comes with the app", shelf.names(), key="scenario.shelf")
        if st.button("Open this scenario", key="scenario.open", disabled=chosen is None) and chosen:
            text, folder = shelf.read(chosen)
            state.open_text(text, chosen, folder)
    with second, st.container(border=True):
        file = st.file_uploader(
            "Open a scenario file of yours", type=["toml"], key="scenario.upload", max_upload_size=16
        )
        # The widget holds its file through later runs: it is opened once.
        if file is not None and state.recall("scenario.upload") != file.file_id:
            upload = shelf.uploaded(file.name, file.getvalue())
            if isinstance(upload, shelf.Refused):
                st.error(f"**{parts.plain(file.name)} was not opened.** {parts.plain(upload.why)}")
            else:
                state.open_text(upload, file.name)
                state.remember("scenario.upload", file.file_id)
    with third, st.container(border=True):
        st.markdown("Start a new one")
        st.button("With five questions", key="scenario.guided", on_click=start.begin)
        if st.button("With S, I and R to begin with", key="scenario.new"):
            state.open_text(shelf.THREE_COMPARTMENTS, "untitled.toml")
        if st.button("Quite empty", key="scenario.empty"):
            state.open_text(shelf.EMPTY, "untitled.toml")
    begun = stated_edits.begin()
    if begun is not None:
        state.open_text(begun, "untitled.toml")


#: How time goes, in the order of the choice.
TIMES = ["continuous: rates per time unit", "discrete: one step is one time unit"]


def heading(now: state.Version) -> None:
    """Place title, time unit and summary, and put what is typed there into the text."""
    document = forms.document(now.text)
    if document is None:
        st.caption("Title, time unit and summary can be edited here again once the text below is TOML.")
        return
    fields = document.get("scenario")
    held = fields if isinstance(fields, dict) else {}
    left, right = st.columns([3, 1])
    edits: list[Edit] = []
    for field, label, place in (("title", "Title", left), ("time_unit", "Time unit of every rate", right)):
        before = forms.shown(held.get(field), "text")
        after = place.text_input(label, value=before, key=f"scenario.{field}.{state.current().forms}")
        edits += forms.field_edit("scenario", field, before, after)
    if "next_generation" not in document and "projection" not in document:
        edits += _time(forms.shown(held.get("time"), "text"))
    before = forms.shown(held.get("summary"), "text")
    after = st.text_area("Summary", value=before, height=80, key=f"scenario.summary.{state.current().forms}")
    edits += forms.field_edit("scenario", "summary", before, after)
    state.edit(parts.applied(now.text, edits))


def _time(before: str) -> list[Edit]:
    """Ask whether time is continuous or goes in steps; a text that says neither is left as it is."""
    index = {"": 0, "discrete": 1}.get(before)
    if index is None:
        return []
    key = f"scenario.time.{state.current().forms}"
    after = st.selectbox("Time", TIMES, index=index, key=key, help="In steps a rate is the number that moves in one.")
    return forms.field_edit("scenario", "time", before, "discrete" if after == TIMES[1] else "")


def source() -> None:
    """Place the download, the problems and the text itself."""
    now = state.current().now
    if now is None:
        return
    st.download_button(
        "Download this scenario", now.text, now.name, "application/toml", on_click="ignore", key="scenario.download"
    )
    outcome = cache.solve(now.text, now.folder)
    parts.problem_box(outcome.problems, "to put right")
    finding.jumps(outcome.problems, "scenario")
    if outcome.solution is not None:
        parts.conversions(now.text, now.folder, outcome.solution.time_unit)
        parts.headline(outcome.solution)
        st.caption("The derivation and all other numbers are on the pages **Derivation** and **Reproduction numbers**.")
    st.subheader("The text of the scenario")
    st.caption("All tables of the app edit this text. Ctrl+Enter takes over what is typed here.")
    after = st.text_area(
        "Scenario text (TOML)", value=now.text, height=480, key=f"scenario.source.{state.current().source}"
    )
    if after != now.text:
        state.edit(after, by_source=True)
        st.rerun()


def page() -> None:
    """Show the page."""
    st.title("Scenario")
    st.markdown(
        "One scenario holds one model, its values and the interventions compared on it. From its compartments and "
        "flows follow F, V, the next-generation matrix K and R0."
    )
    if start.under_way():
        start.guided()
        return
    choose()
    now = state.current().now
    if now is None:
        st.info("Nothing is open yet. Choose one of the three ways above.")
        return
    heading(now)
    source()


page()
