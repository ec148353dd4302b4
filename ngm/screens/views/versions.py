"""The versions of a draft: what changed, what it did to the results, going back, and taking the history along."""

from __future__ import annotations

from datetime import UTC, datetime
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

import streamlit as st

from ngm.drafts import DraftError, Listed
from ngm.screens import comparing, parts, state
from ngm.screens.parts import plain

#: Versions listed.
MOST_LISTED = 200

WITH = ("an earlier version of this draft", "another draft or scenario")


def told_time(seconds: float) -> str:
    """Return a time as the visitor's clock shows it."""
    try:
        zone = ZoneInfo(st.context.timezone or "UTC")
    except (ZoneInfoNotFoundError, ValueError):
        zone = ZoneInfo("UTC")
    return datetime.fromtimestamp(seconds, UTC).astimezone(zone).strftime("%Y-%m-%d %H:%M:%S")


def name_of(version: Listed, head: int) -> str:
    """Return a version as one line of the list."""
    marks = [
        "the present one" if version.number == head else "",
        "kept beside, not taken over" if version.aside else "",
        "" if version.good else "has problems",
        version.note,
    ]
    words = "; ".join(mark for mark in marks if mark)
    return f"{version.number} · {told_time(version.time)}" + (f" · {words}" if words else "")


def choose(held: state.AppState, draft: str) -> int | None:
    """Place the list; return the number of the version to look at."""
    versions = state.store().versions(draft, most=MOST_LISTED)
    by_number = {version.number: version for version in versions}
    if len(versions) < 2:
        st.caption("There is one version so far. Every change makes another.")
    others = [number for number in by_number if number != held.head]
    if not others:
        return None
    came_from = by_number[held.head].base if held.head in by_number else None
    first = others.index(came_from) if came_from in others else 0
    return st.selectbox(
        "Version to look at",
        others,
        index=first,
        format_func=lambda number: name_of(by_number[number], held.head),
        key=f"versions.chosen.{held.draft}.{held.head}",
    )


def history(draft: str, name: str) -> None:
    """Place export and import of a draft with its versions."""
    st.subheader("Take a draft along")
    left, right = st.columns(2)
    with left:
        st.download_button(
            "Download this draft with its history",
            lambda: state.store().export(draft).encode(),
            name.removesuffix(".toml") + ".draft.json",
            "application/json",
            on_click="ignore",
            key="versions.export",
        )
        st.caption("All versions with their times and notes, in one file. For the scenario alone see page Scenario.")
    with right:
        bring_in()


def bring_in() -> None:
    """Place the way to open a draft with its history."""
    file = st.file_uploader("Open a draft with its history", type=["json"], key="versions.upload", max_upload_size=64)
    if file is not None and state.recall("versions.upload") != file.file_id:
        state.remember("versions.upload", file.file_id)
        wrong = state.bring_in(file.getvalue())
        if wrong is None:
            st.rerun()
        st.error(f"**{plain(file.name)} was not opened:** {plain(wrong)}")


def mine() -> None:
    """List the drafts of the one who is signed in."""
    listed = state.store().of_owner(state.owner())
    if listed:
        st.subheader("Your drafts")
        for key, name, changed in listed:
            st.markdown(f"- [{plain(name)}](/?{state.PARAMETER}={key}), changed {told_time(changed)}")


def look(held: state.AppState, now: state.Version, draft: str) -> None:
    """Show one version beside the present one."""
    chosen = st.radio(
        "Compare with",
        WITH,
        index=WITH.index(state.recall("versions.with", WITH[0])),
        key="versions.with",
        horizontal=True,
    )
    state.remember("versions.with", chosen)
    if chosen != WITH[0]:
        other = comparing.another(held)
        if other is not None:
            comparing.show(other, now)
        return
    number = choose(held, draft)
    if number is None:
        return
    then = state.store().text(draft, number)
    first, second = st.columns(2)
    if first.button(f"Go back to version {number}", key="versions.restore"):
        state.restore(number)
        st.rerun()
    first.caption("The present one stays in the list.")
    note = second.text_input(f"Note on version {number}", key=f"versions.note.{number}", max_chars=200)
    if note and second.button("Keep this note", key="versions.annotate"):
        state.store().annotate(draft, number, note)
        st.rerun()
    comparing.show(comparing.Other(then, now.folder, f"version {number}"), now)


def throw_away(held: state.AppState, draft: str) -> None:
    """Place the way to throw the draft away: its owner's, or anybody's where it has none."""
    found = state.store().get(draft)
    if found is None or found.owner not in ("", state.owner()):
        return
    st.subheader("Throw this draft away")
    sure = st.checkbox("Yes, throw it away with all its versions", key=f"versions.sure.{draft}")
    st.button("Throw away", key="versions.discard", disabled=not sure, on_click=state.discard)
    st.caption(
        "It can be brought back for 30 days, at its address or right after. Whoever has the address loses it too."
    )


def page() -> None:
    """Show the page."""
    st.title("Versions")
    held = state.current()
    st.markdown(
        "Every change is kept as a version, at once. Closing the page, a lost connection or a stopped server lose none."
    )
    shown = parts.results()
    if held.now is None:
        bring_in()
        return
    if shown is not None:
        parts.headline(shown.solution)
    if held.draft is None:
        st.info("This scenario is in no store, so it has no versions.")
        return
    try:
        look(held, held.now, held.draft)
        history(held.draft, held.now.name)
        mine()
        throw_away(held, held.draft)
    except DraftError as error:
        parts.problem_box(error.problems, "with the store of drafts")


page()
