"""Two scenarios side by side: their figures, the entries of F, V and K that moved and why, and what moved R0."""

from __future__ import annotations

from dataclasses import dataclass
from urllib.parse import parse_qs, urlsplit

import streamlit as st

from ngm.charts.style import short
from ngm.results import Matrix, Solution
from ngm.results_opinion import Difference
from ngm.screens import cache, desk, lines, opinions, parts, shelf, state
from ngm.screens.parts import plain

__all__ = ["Other", "another", "show"]

#: Changed entries and changed places told.
MOST_ENTRIES = 40
MOST_PLACES = 8
#: Models with more types are compared without the part of each change.
MOST_TYPES = 60

NOTHING = "choose"


@dataclass(frozen=True, slots=True)
class Other:
    """What the present scenario is compared with: its text, its folder, and what it is called on the page."""

    text: str
    folder: str | None
    name: str


def another(held: state.AppState) -> Other | None:
    """Let another draft, or a scenario that comes with the app, be chosen."""
    mine = {key: name for key, name, _ in state.store().of_owner(state.owner()) if key != held.draft}
    for key in held.before:
        found = state.store().get(key)
        if found is not None:
            mine.setdefault(key, found.name)
    names = {f"{name} (draft {key[:6]}…)": key for key, name in mine.items()}
    options = [NOTHING, *names, *shelf.names()]
    left, right = st.columns(2)
    chosen = left.selectbox("Another draft, or a scenario that comes with the app", options, key="versions.other")
    typed = right.text_input(
        "Or the address of another draft", value=state.recall("versions.address"), key="versions.address"
    )
    state.remember("versions.address", typed)
    key = _key(typed) or names.get(chosen, "")
    if key:
        found = state.store().get(key)
        if found is None:
            st.error("**There is no draft at that address here.** Copy it from the address line of the other page.")
            return None
        return Other(found.text, str(shelf.FOLDER) if found.origin == state.SHELF else None, f"{found.name} there")
    return Other(*shelf.read(chosen), chosen) if chosen not in (NOTHING, None) else None


def _key(address: str) -> str:
    """Return the draft that an address names; what is no address may be the id itself."""
    address = address.strip()
    if "?" not in address:
        return address
    return parse_qs(urlsplit(address).query).get(state.PARAMETER, [""])[0]


def show(other: Other, now: state.Version) -> None:
    """Show what differs from the other scenario to the present one, in lines and in results."""
    st.subheader(f"What changed from {plain(other.name)}")
    desk.show_difference(other.text, now.text, f"of {other.name}", "of the present one")
    st.subheader("What it did to the results")
    old, new = cache.numbers(other.text, other.folder), cache.numbers(now.text, now.folder)
    if old.solution is None or new.solution is None:
        st.info(f"{plain(other.name) if old.solution is None else 'The present one'} has problems: nothing to compare.")
        return
    if other.text == now.text:
        st.caption("Nothing: the texts are the same.")
        return
    found = None
    if max(len(old.solution.types), len(new.solution.types)) <= MOST_TYPES:
        found = opinions.difference(now.text, now.folder, other.text, other.folder)
    because = found if isinstance(found, Difference) else None
    results(old.solution, new.solution, because)
    if because is not None:
        contributions(because)
    by_change(other.text, now.text, now.folder)


def contributions(found: Difference) -> None:
    """Show how much of the change in R0 each change made."""
    if len(found.contributions) < 2:
        return
    write = short
    rows = [(c.change, write(c.in_order), write(c.averaged)) for c in found.contributions]
    st.markdown("**How much of the change in R0 each change made**")
    parts.table(["change", "made in this order", "mean over all orders"], rows)
    parts.warnings_box(found.warnings)


def results(then: Solution, now: Solution, because: Difference | None) -> None:
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
        st.caption(f"The one before counts time in units of one {plain(then.time_unit)}.")
    parts.table(["quantity", "then", "now", "change"], rows)
    why = {} if because is None else {(e.matrix, e.row, e.column): "; ".join(e.because) for e in because.entries}
    moved: list[tuple[str, ...]] = []
    for name, a, b, first, second in (
        ("F", then.F, now.F, then.types, now.types),
        ("V", then.V, now.V, then.types, now.types),
        ("K", then.K, now.K, then.types_at_infection, now.types_at_infection),
    ):
        old, new = _entries(a, first), _entries(b, second)
        for row, column in dict.fromkeys([*old, *new]):
            was, is_now = old.get((row, column)), new.get((row, column))
            if was != is_now:
                reason = why.get((name, row, column), "")
                moved.append((f"{name}[{row}, {column}]", write(was), write(is_now), _change(was, is_now), reason))
    if not moved:
        st.caption("No entry of F, V or K moved.")
        return
    st.markdown("**Entries of F, V and K that moved**")
    parts.table(["entry", "then", "now", "change", "because of"], moved[:MOST_ENTRIES])
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
    st.markdown("**R0 of the one before with one changed place at a time**")
    parts.table(["lines then", "lines now", "R0"], rows)


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
