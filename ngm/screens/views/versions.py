"""The versions of a draft: what changed, what it did to the results, going back, and taking the history along."""

from __future__ import annotations

from datetime import UTC, datetime
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

import streamlit as st

from ngm.charts.style import short
from ngm.drafts import DraftError, Listed
from ngm.results import Matrix, Solution
from ngm.screens import cache, desk, lines, parts, state
from ngm.screens.parts import plain

#: Versions listed; changed entries and changed places told.
MOST_LISTED = 200
MOST_ENTRIES = 40
MOST_PLACES = 8


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


def results(then: Solution, now: Solution) -> None:
    """Show two solutions side by side, and the entries of F, V and K that moved."""
    write = parts.digits("versions")
    quantities = (
        ("R0", then.R0, now.R0),
        ("R0 per cycle", then.per_cycle, now.per_cycle),
        (f"growth rate, per {now.time_unit}", then.growth_rate, now.growth_rate),
        (f"doubling time, {now.time_unit}s", then.doubling_time, now.doubling_time),
    )
    rows = [(name, write(a), write(b), _change(a, b)) for name, a, b in quantities]
    if then.time_unit != now.time_unit:
        st.caption(f"That version counts time in units of one {plain(then.time_unit)}.")
    parts.table(["quantity", "that version", "now", "change"], rows)
    moved: list[tuple[str, str, str, str]] = []
    for name, a, b, first, second in (
        ("F", then.F, now.F, then.types, now.types),
        ("V", then.V, now.V, then.types, now.types),
        ("K", then.K, now.K, then.types_at_infection, now.types_at_infection),
    ):
        old, new = _entries(a, first), _entries(b, second)
        for row, column in dict.fromkeys([*old, *new]):
            was, is_now = old.get((row, column)), new.get((row, column))
            if was != is_now:
                moved.append((f"{name}[{row}, {column}]", write(was), write(is_now), _change(was, is_now)))
    if not moved:
        st.caption("No entry of F, V or K moved.")
        return
    st.markdown("**Entries of F, V and K that moved**")
    parts.table(["entry", "that version", "now", "change"], moved[:MOST_ENTRIES])
    if len(moved) > MOST_ENTRIES:
        st.caption(f"… and {len(moved) - MOST_ENTRIES} more.")


def by_change(then: str, now: str, folder: str | None) -> None:
    """Show what each changed place does to R0 alone, beginning from that version."""
    places = lines.alone(then, now)
    if len(places) < 2:
        return
    if len(places) > MOST_PLACES:
        st.caption(f"{len(places)} places changed: too many to take one at a time.")
        return
    rows = []
    for was, is_now, text in places:
        outcome = cache.numbers(text, folder)
        number = "no model with this change alone" if outcome.solution is None else short(outcome.solution.R0)
        rows.append((was.strip() or "(nothing)", is_now.strip() or "(nothing)", number))
    st.markdown("**R0 of that version with one change at a time**")
    parts.table(["lines then", "lines now", "R0"], rows)


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
    st.subheader("What changed since")
    desk.show_difference(then, now.text, f"of version {number}", "of the present one")
    st.subheader("What it did to the results")
    old, new = cache.numbers(then, now.folder), cache.numbers(now.text, now.folder)
    if old.solution is None or new.solution is None:
        which = "Version " + str(number) if old.solution is None else "The present version"
        st.info(f"{which} has problems, so there is nothing to compare.")
        return
    results(old.solution, new.solution)
    by_change(then, now.text, now.folder)


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
    except DraftError as error:
        parts.problem_box(error.problems, "with the store of drafts")


def _entries(matrix: Matrix | None, types: tuple[str, ...]) -> dict[tuple[str, str], float]:
    if matrix is None:
        return {}
    return {
        (row, column): value
        for row, values in zip(types, matrix, strict=True)
        for column, value in zip(types, values, strict=True)
    }


def _change(was: float | None, now: float | None) -> str:
    if was is None or now is None or was == 0:
        return "–"
    return "none" if was == now else f"{100 * (now - was) / abs(was):+.3g} %"


page()
