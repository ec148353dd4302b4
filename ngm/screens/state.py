"""What one visitor's session holds. The scenario's text is the only state of the model; all else follows from it.

`AppState` is frozen and lives in ``st.session_state["ngm"]``; it is replaced here and nowhere else.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import streamlit as st

from ngm.screens import cache

__all__ = ["AppState", "Version", "current", "edit", "open_text", "opened", "recall", "remember", "undo"]

KEY = "ngm"

#: Undo keeps this many characters of earlier texts, and always the last one.
MOST_KEPT = 4_000_000


@dataclass(frozen=True, slots=True)
class Version:
    """A scenario text and what belongs to it.

    Attributes
    ----------
    text : str
        As it stands, valid or not.
    name : str
        Name of its file.
    folder : str or None
        The folder that its matrix files lie in; None where it has none.
    valid : str or None
        The last text of this scenario that had results; None where there was none yet.
    """

    text: str
    name: str
    folder: str | None = None
    valid: str | None = None


@dataclass(frozen=True, slots=True)
class AppState:
    """One session.

    Attributes
    ----------
    now : Version or None
        What is being worked on; None before anything is opened.
    past : tuple of Version
        What Undo goes back to, oldest first.
    forms, source : int
        Counters in the keys of widgets: they go up when the text was changed by something other than the tables and
        fields, or other than the text view, so that these start afresh from the text and not from what they held.
    entries : tuple of (str, str)
        Entries of fields that are no part of the scenario, kept while other pages are looked at.
    """

    now: Version | None = None
    past: tuple[Version, ...] = ()
    forms: int = 0
    source: int = 0
    entries: tuple[tuple[str, str], ...] = ()


def current() -> AppState:
    """Return the session's state."""
    held = st.session_state.get(KEY)
    return held if isinstance(held, AppState) else AppState()


def opened(text: str, name: str, folder: str | None = None) -> Version:
    """Return a scenario text as it is when it is first opened."""
    text = text.replace("\r\n", "\n")
    return Version(text, name, folder, text if _has_results(text, folder) else None)


def open_text(text: str, name: str, folder: str | None = None) -> None:
    """Work on another scenario; the one before stays within reach of Undo."""
    state = current()
    _put(AppState(opened(text, name, folder), _kept(state), state.forms + 1, state.source + 1))


def edit(text: str, *, by_source: bool = False) -> None:
    """Replace the scenario's text after an edit in a table or field, or (`by_source`) in the text view."""
    state = current()
    if state.now is None or text == state.now.text:
        return
    valid = text if _has_results(text, state.now.folder) else state.now.valid
    _put(
        replace(
            state,
            now=replace(state.now, text=text, valid=valid),
            past=_kept(state),
            forms=state.forms + by_source,
            source=state.source + (not by_source),
        )
    )


def undo() -> None:
    """Go back to the text before the last change."""
    state = current()
    if state.past:
        _put(replace(state, now=state.past[-1], past=state.past[:-1], forms=state.forms + 1, source=state.source + 1))


def remember(field: str, value: str) -> None:
    """Keep the entry of a field that is no part of the scenario."""
    state = current()
    others = tuple((name, held) for name, held in state.entries if name != field)
    _put(replace(state, entries=(*others, (field, value))))


def recall(field: str, default: str = "") -> str:
    """Return the entry kept for a field."""
    return dict(current().entries).get(field, default)


def _put(state: AppState) -> None:
    st.session_state[KEY] = state


def _kept(state: AppState) -> tuple[Version, ...]:
    """Return the past with the present one added, the oldest dropped where it grows too large."""
    if state.now is None:
        return state.past
    past = [*state.past, state.now]
    while len(past) > 1 and sum(len(version.text) for version in past) > MOST_KEPT:
        del past[0]
    return tuple(past)


def _has_results(text: str, folder: str | None) -> bool:
    return cache.solve(text, folder).solution is not None
