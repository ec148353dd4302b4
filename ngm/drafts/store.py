"""Drafts and their versions in one SQLite file."""

from __future__ import annotations

import contextlib
import json
import os
import secrets
import sqlite3
import threading
import time
import zlib
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

from ngm.drafts import schema
from ngm.drafts.history import FORMAT, history
from ngm.drafts.schema import MOST_STORE, PLACE, DraftError, connect, migrate, most_megabytes, place

__all__ = ["Conflict", "Draft", "Listed", "Saved", "Store"]

#: Characters of a note.
MOST_NOTE = 500
#: Bytes of one text, and of all versions of a draft as they are stored.
MOST_TEXT = 16 * 2**20
MOST_DRAFT = 256 * 2**20
#: Seconds that a draft which was thrown away can be brought back.
GRACE = 30 * 86400.0


@dataclass(frozen=True, slots=True)
class Draft:
    """A draft as it stands.

    Attributes
    ----------
    id : str
        Unguessable; whoever has it may read and write.
    name, origin, owner : str
        Name of the scenario's file; where it came from (free for the caller); who made it, "" for nobody.
    rev : int
        Goes up whenever the head moves.
    head : int
        Number of the version that is shown.
    text : str
        That version.
    valid : str or None
        The latest text, from the head backwards, that was marked as good.
    earlier, later : bool
        Whether there is something to undo, to redo.
    """

    id: str
    name: str
    origin: str
    rev: int
    head: int
    text: str
    valid: str | None
    earlier: bool
    later: bool
    owner: str = ""


@dataclass(frozen=True, slots=True)
class Listed:
    """One version in the list: its number, that of the one it was made from, time (s since 1970), note, and marks."""

    number: int
    base: int | None
    time: float
    note: str
    good: bool
    aside: bool
    size: int


@dataclass(frozen=True, slots=True)
class Saved:
    """The edit is stored and is the head."""

    draft: Draft


@dataclass(frozen=True, slots=True)
class Conflict:
    """Somebody else moved the head first: `theirs` is the draft now; the edit is stored as version `aside`."""

    theirs: Draft
    aside: int


class Store:
    """The file of all drafts. One object serves any number of threads, and several processes may share the file.

    Parameters
    ----------
    path : Path, optional
        The file; made, with its folder and readable by its owner only, when first used. Default: `place()`.

    Raises
    ------
    DraftError
        By every method: the file cannot be opened or written, is something else, or was written by a newer version.
    """

    def __init__(self, path: Path | None = None) -> None:
        self.path = place() if path is None else path
        self._ready = False
        self._lock = threading.Lock()

    def create(
        self, text: str, name: str, *, origin: str = "", owner: str = "", note: str = "", good: bool = False
    ) -> Draft:
        """Return a new draft that begins with this text."""
        key = secrets.token_urlsafe(18)
        now = time.time()
        with self._writing() as db:
            _purge(db, now)
            db.execute(f"{_INSERT} VALUES (?, ?, ?, ?, ?, ?, 1, 1)", (key, name, origin, owner, now, now))
            _add(db, key, 1, None, now, note, good, False, text)
            return _draft(db, key)

    def get(self, key: str) -> Draft | None:
        """Return a draft, or None where there is none of this id."""
        with self._reading() as db:
            return _draft(db, key) if _row(db, key) is not None else None

    def rev(self, key: str) -> int | None:
        """Return the counter of a draft's moves, or None where there is no such draft."""
        with self._reading() as db:
            row = _row(db, key)
            return None if row is None else int(row["rev"])

    def save(
        self, key: str, rev: int, text: str, *, base: int | None = None, note: str = "", good: bool = False
    ) -> Saved | Conflict:
        """Add an edit made on revision `rev`, on version `base` (the head, if not said); move the head to it.

        When this returns, the text is on disk, also where the answer is `Conflict`.
        """
        with self._writing() as db:
            row = _need(db, key)
            fits = int(row["rev"]) == rev
            start = int(row["head"]) if base is None else base
            if fits and _text(db, key, start) == text:
                return Saved(_draft(db, key))
            number = _next(db, key)
            now = time.time()
            _add(db, key, number, start, now, note, good, not fits, text)
            if not fits:
                return Conflict(_draft(db, key), number)
            db.execute("UPDATE drafts SET rev = rev + 1, head = ?, changed = ? WHERE id = ?", (number, now, key))
            return Saved(_draft(db, key))

    def move(self, key: str, rev: int, number: int) -> Saved | Conflict:
        """Make an existing version the head: undo, redo, or keeping what was stored beside it."""
        with self._writing() as db:
            row = _need(db, key)
            if not db.execute("SELECT 1 FROM versions WHERE draft = ? AND number = ?", (key, number)).fetchone():
                raise DraftError(f"this draft has no version {number}.")
            if int(row["rev"]) != rev:
                return Conflict(_draft(db, key), number)
            db.execute(
                "UPDATE drafts SET rev = rev + 1, head = ?, changed = ? WHERE id = ?", (number, time.time(), key)
            )
            db.execute("UPDATE versions SET aside = 0 WHERE draft = ? AND number = ?", (key, number))
            return Saved(_draft(db, key))

    def undo(self, key: str, rev: int) -> Saved | Conflict | None:
        """Move the head to the version that it was made from; None where there is none."""
        number = self._neighbour(key, later=False)
        return None if number is None else self.move(key, rev, number)

    def redo(self, key: str, rev: int) -> Saved | Conflict | None:
        """Move the head to the last version made from it; None where there is none."""
        number = self._neighbour(key, later=True)
        return None if number is None else self.move(key, rev, number)

    def _neighbour(self, key: str, *, later: bool) -> int | None:
        with self._reading() as db:
            head = int(_need(db, key)["head"])
            return _later(db, key, head) if later else _base(db, key, head)

    def versions(self, key: str, *, most: int = 500) -> list[Listed]:
        """Return the newest versions of a draft, newest first, without their texts."""
        with self._reading() as db:
            rows = db.execute(
                "SELECT number, base, time, note, good, aside, length(text) AS size FROM versions "
                "WHERE draft = ? ORDER BY number DESC LIMIT ?",
                (key, most),
            ).fetchall()
        return [
            Listed(r["number"], r["base"], r["time"], r["note"], bool(r["good"]), bool(r["aside"]), r["size"])
            for r in rows
        ]

    def text(self, key: str, number: int) -> str:
        """Return the text of one version."""
        with self._reading() as db:
            return _text(db, key, number)

    def annotate(self, key: str, number: int, note: str) -> None:
        """Put a note on a version."""
        with self._writing() as db:
            done = db.execute(
                "UPDATE versions SET note = ? WHERE draft = ? AND number = ?", (note[:MOST_NOTE], key, number)
            )
            if not done.rowcount:
                raise DraftError(f"this draft has no version {number}.")

    def of_owner(self, owner: str, *, most: int = 50) -> list[tuple[str, str, float]]:
        """Return id, name and time of the last change of one person's drafts, newest first; none for nobody."""
        if not owner:
            return []
        with self._reading() as db:
            rows = db.execute(
                "SELECT id, name, changed FROM drafts WHERE owner = ? AND discarded IS NULL ORDER BY changed DESC LIMIT ?",
                (owner, most),
            ).fetchall()
        return [(row["id"], row["name"], row["changed"]) for row in rows]

    def discard(self, key: str) -> None:
        """Throw a draft away: from now on it is not there, and for 30 days `recover` brings it back."""
        with self._writing() as db:
            _need(db, key)
            db.execute("UPDATE drafts SET discarded = ?, rev = rev + 1 WHERE id = ?", (time.time(), key))

    def recover(self, key: str) -> Draft | None:
        """Bring back a draft that was thrown away, with all its versions; None where there is none any more."""
        with self._writing() as db:
            db.execute("UPDATE drafts SET discarded = NULL WHERE id = ? AND discarded IS NOT NULL", (key,))
            return _draft(db, key) if _row(db, key) is not None else None

    def discarded(self, key: str) -> float | None:
        """Return when a draft was thrown away (s since 1970); None where it was not, or is gone."""
        with self._reading() as db:
            row = db.execute("SELECT discarded FROM drafts WHERE id = ?", (key,)).fetchone()
            return None if row is None or row["discarded"] is None else float(row["discarded"])

    def export(self, key: str) -> str:
        """Return a draft with its whole history as JSON; its id is not part of it."""
        with self._reading() as db:
            row = _need(db, key)
            rows = db.execute("SELECT * FROM versions WHERE draft = ? ORDER BY number", (key,)).fetchall()
        out = {
            "format": FORMAT,
            "schema": schema.SCHEMA,
            "name": row["name"],
            "origin": row["origin"],
            "head": row["head"],
            "versions": [
                {
                    "number": r["number"],
                    "base": r["base"],
                    "time": r["time"],
                    "note": r["note"],
                    "good": bool(r["good"]),
                    "aside": bool(r["aside"]),
                    "text": _unpacked(r["text"]),
                }
                for r in rows
            ],
        }
        return json.dumps(out, ensure_ascii=False, indent=1) + "\n"

    def bring_in(self, content: bytes, *, owner: str = "") -> Draft:
        """Return a new draft with the history that `export` wrote; a file that is none is refused in words."""
        name, origin, head, versions = history(content)
        key = secrets.token_urlsafe(18)
        with self._writing() as db:
            now = time.time()
            db.execute(f"{_INSERT} VALUES (?, ?, ?, ?, ?, ?, 1, ?)", (key, name, origin, owner, now, now, head))
            for v in versions:
                _add(db, key, v.number, v.base, v.time, v.note, v.good, v.aside, v.text)
            return _draft(db, key)

    @contextlib.contextmanager
    def _reading(self) -> Iterator[sqlite3.Connection]:
        with self._open() as db:
            db.execute("BEGIN")  # one state of the file for all that is read
            yield db
            db.execute("COMMIT")

    @contextlib.contextmanager
    def _writing(self) -> Iterator[sqlite3.Connection]:
        with self._open() as db:
            db.execute("BEGIN IMMEDIATE")
            yield db
            db.execute("COMMIT")

    @contextlib.contextmanager
    def _open(self) -> Iterator[sqlite3.Connection]:
        # A connection a call: pages run in threads that come and go, and opening one costs a fraction of a millisecond.
        try:
            self._prepare()
            db = connect(self.path)
        except (OSError, sqlite3.Error) as error:
            if isinstance(error, sqlite3.Error) and error.sqlite_errorcode == sqlite3.SQLITE_NOTADB:
                raise DraftError(f"{self.path} is not an SQLite file. Name another place in {PLACE}.") from None
            raise DraftError(f"{self.path} cannot be opened ({error}).") from None
        try:
            yield db
        except sqlite3.Error as error:
            if error.sqlite_errorcode == sqlite3.SQLITE_FULL:
                raise DraftError(
                    f"{self.path} is full, or the disk is: it may grow to {most_megabytes():,} MB, which the variable "
                    f"{MOST_STORE} can raise. Nothing that is in it is lost."
                ) from None
            raise DraftError(f"{self.path} cannot be used ({error}).") from None
        finally:
            db.close()  # rolls back what was not committed

    def _prepare(self) -> None:
        with self._lock:
            if self._ready and self.path.exists():
                return
            self.path.parent.mkdir(parents=True, exist_ok=True, mode=0o700)
            os.close(os.open(self.path, os.O_CREAT | os.O_RDWR, 0o600))
            db = connect(self.path)
            try:
                migrate(db, self.path)
            finally:
                db.close()
            self._ready = True


_INSERT = "INSERT INTO drafts (id, name, origin, owner, created, changed, rev, head)"


def _purge(db: sqlite3.Connection, now: float) -> None:
    """Take out for good what was thrown away long ago."""
    gone = [row["id"] for row in db.execute("SELECT id FROM drafts WHERE discarded < ?", (now - GRACE,))]
    for key in gone:
        db.execute("DELETE FROM versions WHERE draft = ?", (key,))
        db.execute("DELETE FROM drafts WHERE id = ?", (key,))


def _row(db: sqlite3.Connection, key: str) -> sqlite3.Row | None:
    found = db.execute("SELECT * FROM drafts WHERE id = ? AND discarded IS NULL", (key,)).fetchone()
    row: sqlite3.Row | None = found
    return row


def _need(db: sqlite3.Connection, key: str) -> sqlite3.Row:
    row = _row(db, key)
    if row is None:
        raise DraftError("there is no draft of this id here.")
    return row


def _draft(db: sqlite3.Connection, key: str) -> Draft:
    row = _need(db, key)
    head = int(row["head"])
    # The last good text: along the line of versions that the head was made from.
    good = db.execute(
        "WITH RECURSIVE line (number, base, good, depth) AS ("
        " SELECT number, base, good, 0 FROM versions WHERE draft = :d AND number = :n UNION ALL"
        " SELECT v.number, v.base, v.good, depth + 1 FROM line JOIN versions v ON v.draft = :d AND v.number = line.base"
        " WHERE NOT line.good) SELECT number FROM line WHERE good LIMIT 1",
        {"d": key, "n": head},
    ).fetchone()
    return Draft(
        id=key,
        name=row["name"],
        origin=row["origin"],
        rev=int(row["rev"]),
        head=head,
        text=_text(db, key, head),
        valid=None if good is None else _text(db, key, int(good["number"])),
        earlier=_base(db, key, head) is not None,
        later=_later(db, key, head) is not None,
        owner=row["owner"],
    )


def _base(db: sqlite3.Connection, key: str, number: int) -> int | None:
    row = db.execute("SELECT base FROM versions WHERE draft = ? AND number = ?", (key, number)).fetchone()
    return None if row is None or row["base"] is None else int(row["base"])


def _later(db: sqlite3.Connection, key: str, number: int) -> int | None:
    row = db.execute(
        "SELECT max(number) AS last FROM versions WHERE draft = ? AND base = ? AND NOT aside", (key, number)
    ).fetchone()
    return None if row["last"] is None else int(row["last"])


def _next(db: sqlite3.Connection, key: str) -> int:
    return int(db.execute("SELECT max(number) FROM versions WHERE draft = ?", (key,)).fetchone()[0]) + 1


def _text(db: sqlite3.Connection, key: str, number: int) -> str:
    row = db.execute("SELECT text FROM versions WHERE draft = ? AND number = ?", (key, number)).fetchone()
    if row is None:
        raise DraftError(f"this draft has no version {number}.")
    return _unpacked(row["text"])


def _unpacked(blob: bytes) -> str:
    return zlib.decompress(blob).decode("utf-8", "surrogatepass")


def _add(
    db: sqlite3.Connection,
    key: str,
    number: int,
    base: int | None,
    when: float,
    note: str,
    good: bool,
    aside: bool,
    text: str,
) -> None:
    raw = text.encode("utf-8", "surrogatepass")
    if len(raw) > MOST_TEXT:
        raise DraftError(f"a text of {len(raw):,} bytes is not stored: at most {MOST_TEXT // 2**20} MB are.")
    blob = zlib.compress(raw, 6)
    size = int(_need(db, key)["size"]) + len(blob)
    if size > MOST_DRAFT:
        raise DraftError(
            f"this draft has reached {MOST_DRAFT // 2**20} MB with its history. Download the scenario and open it as a new one."
        )
    db.execute("UPDATE drafts SET size = ? WHERE id = ?", (size, key))
    db.execute(
        "INSERT INTO versions VALUES (?, ?, ?, ?, ?, ?, ?, ?)",
        (key, number, base, when, note[:MOST_NOTE], int(good), int(aside), blob),
    )
