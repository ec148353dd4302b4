"""The file of drafts: where it is, its tables, how an older one is brought up to date and a newer one refused."""

from __future__ import annotations

import os
import sqlite3
from pathlib import Path

from ngm.errors import NgmError, Problem

__all__ = ["PLACE", "DraftError", "connect", "migrate", "most_megabytes", "place"]

#: Environment variable that names the file.
PLACE = "NGM_DRAFTS"

#: Marks the file as ours: "NGMd" in ASCII.
APPLICATION = 0x4E474D64

#: Each step leads from the schema of its position to the next; they are never changed, only added to.
MIGRATIONS: tuple[tuple[str, ...], ...] = (
    (
        """CREATE TABLE drafts (
            id TEXT PRIMARY KEY, name TEXT NOT NULL, origin TEXT NOT NULL, owner TEXT NOT NULL,
            created REAL NOT NULL, changed REAL NOT NULL, rev INTEGER NOT NULL, head INTEGER NOT NULL)""",
        """CREATE TABLE versions (
            draft TEXT NOT NULL REFERENCES drafts (id), number INTEGER NOT NULL, base INTEGER, time REAL NOT NULL,
            note TEXT NOT NULL, good INTEGER NOT NULL, aside INTEGER NOT NULL, text BLOB NOT NULL,
            PRIMARY KEY (draft, number)) WITHOUT ROWID""",
        "CREATE INDEX drafts_by_owner ON drafts (owner, changed)",
    ),
    (
        # Bytes of all versions as stored, kept up with each of them; when it was thrown away, if it was.
        "ALTER TABLE drafts ADD COLUMN size INTEGER NOT NULL DEFAULT 0",
        "ALTER TABLE drafts ADD COLUMN discarded REAL",
        "UPDATE drafts SET size = (SELECT coalesce(sum(length(text)), 0) FROM versions WHERE draft = drafts.id)",
        "CREATE INDEX drafts_discarded ON drafts (discarded) WHERE discarded IS NOT NULL",
    ),
)
#: The schema that this program reads and writes.
SCHEMA = len(MIGRATIONS)

#: Environment variable that names the most that the file may grow to, megabytes; and what holds without it.
MOST_STORE = "NGM_DRAFTS_MOST_MB"
MOST_STORE_MB = 10_000

#: Seconds to wait for another process that is writing.
PATIENCE = 15.0


class DraftError(NgmError):
    """A draft, or the store of them, cannot be used; says why."""

    def __init__(self, message: str) -> None:
        super().__init__(Problem("drafts", message))


def place() -> Path:
    """Return the file that drafts are kept in: what ``NGM_DRAFTS`` names, or one in the user's data folder."""
    named = os.environ.get(PLACE)
    if named:
        return Path(named).expanduser()
    data = os.environ.get("XDG_DATA_HOME")
    return (Path(data) if data else Path.home() / ".local" / "share") / "ngm" / "drafts.sqlite"


def connect(path: Path) -> sqlite3.Connection:
    """Open the file; the caller begins and ends transactions."""
    db = sqlite3.connect(path, timeout=PATIENCE, isolation_level=None)
    db.row_factory = sqlite3.Row
    db.execute("PRAGMA synchronous = FULL")  # an acknowledged edit outlives a power cut too
    db.execute("PRAGMA foreign_keys = ON")
    page = int(db.execute("PRAGMA page_size").fetchone()[0])
    db.execute(f"PRAGMA max_page_count = {max(16, most_megabytes() * 1_000_000 // page)}")
    return db


def most_megabytes() -> int:
    """Return what the file may grow to: what ``NGM_DRAFTS_MOST_MB`` says, or 10,000."""
    said = os.environ.get(MOST_STORE, "").strip()
    return int(said) if said.isascii() and said.isdigit() and 0 < int(said) < 10**9 else MOST_STORE_MB


def migrate(db: sqlite3.Connection, path: Path) -> None:
    """Bring the file to the present schema, all or nothing; refuse one that is newer or not ours."""
    version, mark = _marks(db)
    if mark not in (0, APPLICATION) or (mark == 0 and db.execute("SELECT count(*) FROM sqlite_master").fetchone()[0]):
        raise DraftError(f"{path} belongs to another program. Name another place in {PLACE}.")
    if version > SCHEMA:
        raise DraftError(
            f"{path} was written by a newer version of this program (schema {version}; this one knows {SCHEMA}). "
            f"Update the program, or name another place in {PLACE}. Nothing was changed."
        )
    if version == SCHEMA:
        return
    db.execute("PRAGMA journal_mode = WAL")
    db.execute("BEGIN IMMEDIATE")
    version, _ = _marks(db)  # another process may have been faster
    for step in MIGRATIONS[version:]:
        for statement in step:
            db.execute(statement)
    db.execute(f"PRAGMA application_id = {APPLICATION}")
    db.execute(f"PRAGMA user_version = {max(version, SCHEMA)}")
    db.execute("COMMIT")


def _marks(db: sqlite3.Connection) -> tuple[int, int]:
    version, mark = (db.execute(f"PRAGMA {name}").fetchone()[0] for name in ("user_version", "application_id"))
    return int(version), int(mark)
