"""What stands around every page: how the draft is kept, who else changed it, undo and redo, formulas on their way."""

from __future__ import annotations

import streamlit as st

from ngm.charts.style import short
from ngm.drafts import DraftError
from ngm.results import Solution
from ngm.screens import cache, finding, jobs, lines, signing, state
from ngm.screens.parts import Shown, plain

__all__ = ["formulas", "notices", "show_difference", "status"]

#: Seconds that a page waits for formulas before it shows the numbers without them.
GRACE = 0.4
#: Seconds between looks at the draft, and between looks at formulas on their way.
HEARTBEAT = 3.0
POLL = 0.5


def notices(told: str | None) -> None:
    """Say above the page what went wrong with the draft, if anything."""
    if told:
        st.error(f"**Nothing was opened.** {plain(told)}")
    held = state.current()
    if held.gone and held.now is None:
        with st.container(border=True, key="gone"):
            st.warning("**This draft was thrown away.** For 30 days it can be brought back, with all its versions.")
            st.button("Bring it back", on_click=state.bring_back, key="gone.back")
    if held.trouble:
        st.error(
            f"**Your changes are not being stored:** {plain(held.trouble)} They are lost when this page is closed. "
            "Download the scenario on the page **Scenario**."
        )
    if held.conflict is not None:
        _conflict(held)


def _conflict(held: state.AppState) -> None:
    conflict = held.conflict
    if conflict is None or held.now is None or held.draft is None:
        return
    theirs = conflict.theirs
    with st.container(border=True, key="conflict"):
        st.warning(
            f"**This draft was changed in another tab or by somebody else** (their version {theirs.head}), before your "
            f"change could be saved. Yours is stored too, as version {held.head}; this page goes on with yours until "
            "you choose."
        )
        show_difference(theirs.text, held.now.text, "theirs", "yours")
        try:
            base = _common(held)
        except DraftError:
            base = None
        both = None if base is None else lines.merged(base, held.now.text, theirs.text)
        first, second, third = st.columns(3)
        first.button("Go on with theirs", on_click=state.adopt, key="conflict.theirs")
        second.button("Go on with yours", on_click=state.restore, args=(held.head, theirs.rev), key="conflict.yours")
        third.button(
            "Put both together",
            on_click=_put_together,
            args=(both,),
            disabled=both is None,
            key="conflict.both",
            help="Possible where the changes are in different lines.",
        )


def _common(held: state.AppState) -> str | None:
    """Return the text of the last version that both lines come from."""
    if held.draft is None or held.conflict is None:
        return None
    bases = {version.number: version.base for version in state.store().versions(held.draft, most=10_000)}
    mine: set[int] = set()
    number: int | None = held.head
    while number is not None:
        mine.add(number)
        number = bases.get(number)
    number = held.conflict.theirs.head
    while number is not None and number not in mine:
        number = bases.get(number)
    return None if number is None else state.store().text(held.draft, number)


def _put_together(text: str | None) -> None:
    state.adopt()
    if text is not None and state.current().conflict is None:
        state.edit(text, by_source=True, note="both sides' changes put together")


def show_difference(old: str, new: str, was: str, now: str) -> None:
    """Show two texts' lines that differ."""
    told = lines.difference(old, new)
    if told is None:
        st.caption("The texts are too long to be compared line by line.")
    elif not told:
        st.caption("The texts are the same.")
    else:
        st.caption(f"Lines with - are {plain(was)}, lines with + are {plain(now)}.")
        st.code(told, language="diff", wrap_lines=True)


def status() -> None:
    """Show in the side bar what is open, how it stands and is kept, Undo and Redo."""
    held = state.current()
    if held.now is None:
        st.caption("No scenario is open.")
    else:
        outcome = cache.numbers(held.now.text, held.now.folder)
        st.caption(f"Open: {plain(held.now.name)}")
        if outcome.solution is None:
            count = len(outcome.problems)
            st.markdown(f"⚠ {count} problem{'s' if count > 1 else ''} to put right")
            finding.jumps(outcome.problems, "status")
        elif outcome.solution.R0 is None:
            st.markdown("No R0 at these values")
        else:
            st.markdown(f"R0 = **{plain(short(outcome.solution.R0))}**")
    undo = not (held.earlier or held.before)
    st.button("Undo last change", on_click=state.undo, disabled=undo, key="status.undo", width="stretch")
    st.button("Redo", on_click=state.redo, disabled=not held.later, key="status.redo", width="stretch")
    heartbeat()
    visitor = signing.who()
    if signing.account(visitor):
        st.caption(f"Signed in as {plain(signing.name(visitor))}.")
        if visitor.get("is_logged_in"):
            st.button("Sign out", on_click=st.logout, key="status.out", width="stretch")


@st.fragment(run_every=HEARTBEAT)
def heartbeat() -> None:
    """Say which version is stored, and whether somebody else made a newer one.

    It runs by itself: after a restart of the server it is what makes the page take up its draft again.
    """
    held = state.current()
    if held.draft is None:
        return
    if held.conflict is not None:
        st.caption("⚠ Two versions of this draft: choose above.")
        return
    try:
        rev = state.store().rev(held.draft)
    except DraftError:
        return
    if rev is not None and rev > held.rev:
        st.caption("⚠ Changed in another tab or by somebody else since you opened it.")
        if st.button("Show what is there now", key="status.adopt"):
            state.adopt()
            st.rerun()
        return
    st.caption(f"Stored as version {held.head}. The address of this page leads back to it: keep it, or pass it on.")


def formulas(shown: Shown) -> Solution:
    """Return the solution with its formulas; without them, and with a way to stop or to begin, while they are on their way."""
    job = jobs.start(shown.text, shown.folder)
    if job.stopped:
        st.info("The formulas were stopped. The numbers stand by themselves.")
        if st.button("Derive the formulas again", key="formulas.again"):
            jobs.forget(shown.text, shown.folder)
            st.rerun()
        return shown.solution
    if job.wait(GRACE):
        return job.solution or shown.solution
    _waiting(shown.text, shown.folder)
    return shown.solution


@st.fragment(run_every=POLL)
def _waiting(text: str, folder: str | None) -> None:
    job = jobs.start(text, folder)
    if job.wait(0) or job.stopped:
        st.rerun()
    st.info("The numbers are here; the formulas are on their way (10 seconds at most).")
    if st.button("Stop the formulas", key="formulas.stop"):
        job.stop()
        st.rerun()
