"""What one visitor's session holds. The scenario's text is the only state of the model; all else follows from it.

`AppState` is frozen and lives in ``st.session_state["ngm"]``; it is replaced here and nowhere else. Each accepted edit
is a version in the store of drafts before the page says anything about it, and the address of the page names the draft:
a session that begins with such an address goes on where the draft stands.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass, replace

import streamlit as st

from ngm.drafts import Conflict, Draft, DraftError, Saved, Store
from ngm.screens import cache, shelf, signing

__all__ = [
    "PARAMETER",
    "AppState",
    "Version",
    "adopt",
    "arrive",
    "bring_back",
    "bring_in",
    "current",
    "discard",
    "edit",
    "open_text",
    "opened",
    "owner",
    "recall",
    "redo",
    "remember",
    "restore",
    "store",
    "undo",
]

KEY = "ngm"

#: The part of the address that names the draft.
PARAMETER = "draft"

#: What a draft's origin says where its matrix files lie beside the scenarios that come with the app.
SHELF = "shelf"


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
    draft : str or None
        Id of the draft that `now` is kept in; None where it is in no store.
    rev, head : int
        The draft's counter of moves, and the number of its version, that `now` is.
    earlier, later : bool
        Whether Undo, Redo lead anywhere.
    past : tuple of Version
        What stood before the last edit of this session; empty after anything else than an edit.
    before : tuple of str
        Drafts that were left by opening another scenario in this session: Undo leads back to them at last.
    conflict : Conflict or None
        Somebody else changed the draft first: theirs, and where ours is kept.
    trouble : str or None
        Why nothing can be stored at the moment.
    gone : str or None
        The draft that was thrown away last in this session, or that the address named: it can be brought back.
    forms, source : int
        Counters in the keys of widgets: they go up when the text was changed by something other than the tables and
        fields, or other than the text view, so that these start afresh from the text and not from what they held.
    entries : tuple of (str, str)
        Entries of fields that are no part of the scenario, kept while other pages are looked at.
    """

    now: Version | None = None
    draft: str | None = None
    rev: int = 0
    head: int = 0
    earlier: bool = False
    later: bool = False
    past: tuple[Version, ...] = ()
    before: tuple[str, ...] = ()
    conflict: Conflict | None = None
    trouble: str | None = None
    gone: str | None = None
    forms: int = 0
    source: int = 0
    entries: tuple[tuple[str, str], ...] = ()


def current() -> AppState:
    """Return the session's state."""
    held = st.session_state.get(KEY)
    return held if isinstance(held, AppState) else AppState()


def store() -> Store:
    """Return the store of drafts."""
    return _store()


@st.cache_resource(show_spinner=False)
def _store() -> Store:
    return Store()


def owner() -> str:
    """Return who is signed in, or nothing: drafts are listed to their owner and to nobody else."""
    return signing.account(signing.who())


def arrive() -> str | None:
    """Begin a run: take up the draft that the address names, and put it into the address where it is missing.

    Returns
    -------
    str or None
        What to tell where the address names a draft that is not there.
    """
    state = current()
    asked = st.query_params.get(PARAMETER)
    told = None
    if state.now is None and asked:
        try:
            found = store().get(asked)
        except DraftError as error:
            found, told = None, f"The draft of this address cannot be read. {error.problems[0].message}"
        if found is not None:
            # Keys of widgets that no earlier session of this browser tab can have used: what it still holds under them
            # belongs to another state of the text, and a table would apply its changes a second time.
            fresh = int(time.time() * 1000)
            state = _at(replace(state, forms=fresh, source=fresh), found)
            _put(state)
        elif told is None:
            if state.gone == asked or _thrown_away(asked):
                _put(state := replace(state, gone=asked))
            else:
                told = "There is no draft at this address here: it may be on another computer, or mistyped."
    elif state.now is not None and state.draft is None:
        _put(state := _kept(state, state.now))
    if state.draft is not None and asked != state.draft:
        # A click in the menu drops it from the address.
        st.query_params[PARAMETER] = state.draft
    return told


def opened(text: str, name: str, folder: str | None = None) -> Version:
    """Return a scenario text as it is when it is first opened."""
    text = text.replace("\r\n", "\n")
    return Version(text, name, folder, text if _has_results(text, folder) else None)


def open_text(text: str, name: str, folder: str | None = None) -> None:
    """Work on another scenario, as a new draft; the one before stays within reach of Undo."""
    state = current()
    before = state.before if state.draft is None else (*state.before, state.draft)
    _put(_kept(replace(_anew(state), before=before, conflict=None), opened(text, name, folder), "opened"))
    _address()


def edit(text: str, *, by_source: bool = False, note: str = "") -> None:
    """Replace the scenario's text after an edit in a table or field, or (`by_source`) in the text view."""
    state = current()
    if state.now is None or text == state.now.text:
        return
    good = _has_results(text, state.now.folder)
    now = replace(state.now, text=text, valid=text if good else state.now.valid)
    state = replace(
        state, now=now, past=(state.now,), forms=state.forms + by_source, source=state.source + (not by_source)
    )
    if state.draft is None:
        _put(_kept(state, now))
        return
    try:
        answer = store().save(state.draft, state.rev, text, base=state.head, note=note, good=good)
    except DraftError as error:
        _put(replace(state, trouble=error.problems[0].message))
        return
    if isinstance(answer, Saved):
        found = answer.draft
        state = replace(state, rev=found.rev, head=found.head, earlier=found.earlier, later=found.later, trouble=None)
    else:
        # Ours goes on as a line of its own beside theirs, until one is chosen.
        state = replace(state, head=answer.aside, conflict=answer, trouble=None)
    _put(state)


def undo() -> None:
    """Go back to the version that the present one was made from; at the first, to the scenario open before."""
    state = current()
    if state.draft is not None and state.earlier:
        _move(state, lambda kept, draft: kept.undo(draft, state.rev))
    elif state.before:
        found = _read(state.before[-1])
        if found is not None:
            _put(_at(replace(_anew(state), before=state.before[:-1]), found))
            _address()


def redo() -> None:
    """Go forward again to the last version made from the present one."""
    state = current()
    _move(state, lambda kept, draft: kept.redo(draft, state.rev))


def restore(number: int, rev: int | None = None) -> None:
    """Show another version of the draft; `rev`: in place of what somebody else made of it."""
    state = current()
    _move(state, lambda kept, draft: kept.move(draft, state.rev if rev is None else rev, number))


def adopt() -> None:
    """Show the draft as it stands now, whoever changed it."""
    state = current()
    found = None if state.draft is None else _read(state.draft)
    if found is not None:
        _put(_at(_anew(state), found))


def bring_in(content: bytes) -> str | None:
    """Open a draft that was exported with its history, as a new one; return what is wrong with the file, if anything."""
    state = current()
    try:
        found = store().bring_in(content, owner=owner())
    except DraftError as error:
        return error.problems[0].message
    before = state.before if state.draft is None else (*state.before, state.draft)
    _put(_at(replace(_anew(state), before=before), found))
    _address()
    return None


def discard() -> None:
    """Throw the draft that is open away; nothing is open then, and `bring_back` undoes it."""
    state = current()
    if state.draft is None:
        return
    try:
        store().discard(state.draft)
    except DraftError as error:
        _put(replace(state, trouble=error.problems[0].message))
        return
    _put(AppState(gone=state.draft, forms=state.forms + 1, source=state.source + 1))
    st.query_params.clear()


def bring_back() -> None:
    """Open the draft again that was thrown away."""
    state = current()
    if state.gone is None:
        return
    try:
        found = store().recover(state.gone)
    except DraftError as error:
        _put(replace(state, trouble=error.problems[0].message))
        return
    state = replace(_anew(state), gone=None)
    _put(state if found is None else _at(state, found))
    _address()


def _thrown_away(key: str) -> bool:
    try:
        return store().discarded(key) is not None
    except DraftError:
        return False


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


def _address() -> None:
    key = current().draft
    if key is not None and st.query_params.get(PARAMETER) != key:
        st.query_params[PARAMETER] = key


def _anew(state: AppState) -> AppState:
    """Return the state with all widgets to start from the text."""
    return replace(state, past=(), forms=state.forms + 1, source=state.source + 1)


def _kept(state: AppState, now: Version, note: str = "") -> AppState:
    """Return the state with this text as a new draft; without one, and why, where it cannot be stored."""
    origin = SHELF if now.folder == str(shelf.FOLDER) else ""
    try:
        found = store().create(now.text, now.name, origin=origin, owner=owner(), note=note, good=now.valid == now.text)
    except DraftError as error:
        why = error.problems[0].message
        return replace(state, now=now, draft=None, earlier=False, later=False, trouble=why)
    return replace(
        state, now=now, draft=found.id, rev=found.rev, head=found.head, earlier=False, later=False, trouble=None
    )


def _at(state: AppState, found: Draft) -> AppState:
    """Return the state with a stored draft as what is being worked on."""
    folder = str(shelf.FOLDER) if found.origin == SHELF else None
    return replace(
        state,
        now=Version(found.text, found.name, folder, found.valid),
        draft=found.id,
        rev=found.rev,
        head=found.head,
        earlier=found.earlier,
        later=found.later,
        conflict=None,
        trouble=None,
    )


def _move(state: AppState, how: Callable[[Store, str], Saved | Conflict | None]) -> None:
    """Move the draft's head and show what is there; where somebody else was faster, say so and keep ours."""
    if state.draft is None:
        return
    try:
        answer = how(store(), state.draft)
    except DraftError as error:
        _put(replace(state, trouble=error.problems[0].message))
        return
    if isinstance(answer, Saved):
        _put(_at(_anew(state), answer.draft))
    elif isinstance(answer, Conflict):
        # What this session shows is stored already: as the version it came from.
        _put(replace(state, conflict=Conflict(answer.theirs, state.head)))


def _read(key: str) -> Draft | None:
    try:
        return store().get(key)
    except DraftError as error:
        _put(replace(current(), trouble=error.problems[0].message))
        return None


def _has_results(text: str, folder: str | None) -> bool:
    return cache.numbers(text, folder).solution is not None
