"""A draft with its history, as a file to take along: read with distrust, since anybody may have written it."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from ngm.drafts import schema
from ngm.drafts.schema import DraftError

__all__ = ["FORMAT", "Brought", "history"]

FORMAT = "ngm draft with history"

#: Limits of an imported file: bytes, versions, characters of a text.
MOST_BYTES = 64 * 2**20
MOST_VERSIONS = 100_000
MOST_TEXT = 16 * 2**20


@dataclass(frozen=True, slots=True)
class Brought:
    """One version of the file; the fields are those of the table."""

    number: int
    base: int | None
    time: float
    note: str
    good: bool
    aside: bool
    text: str


def history(content: bytes) -> tuple[str, str, int, list[Brought]]:
    """Return name, origin, head and versions of an exported draft."""
    if len(content) > MOST_BYTES:
        raise DraftError(f"the file is larger than {MOST_BYTES // 2**20} MB.")
    try:
        read = json.loads(content)
    except (ValueError, RecursionError):
        raise DraftError("the file is not JSON: bring in a draft that was exported here.") from None
    if not isinstance(read, dict) or read.get("format") != FORMAT:
        raise DraftError("the file is no exported draft.")
    written = read.get("schema")
    if not isinstance(written, int) or written > schema.SCHEMA:
        raise DraftError("the file was written by a newer version of this program. Update the program.")
    entries = read.get("versions")
    if not isinstance(entries, list) or not 0 < len(entries) <= MOST_VERSIONS:
        raise DraftError(f"expected between 1 and {MOST_VERSIONS:,} versions in the file.")
    versions: list[Brought] = []
    known: set[int] = set()
    for k, entry in enumerate(entries, 1):
        version = _brought(entry, known) if isinstance(entry, dict) else None
        if version is None:
            raise DraftError(f"version {k} of the file is damaged.")
        known.add(version.number)
        versions.append(version)
    head = read.get("head")
    if head not in known or isinstance(head, bool):
        raise DraftError("the file does not say which of its versions is the present one.")
    name, origin = read.get("name"), read.get("origin")
    return str(name)[:200] if isinstance(name, str) else "draft.toml", str(origin)[:200], int(head), versions


def _brought(entry: Mapping[str, Any], known: set[int]) -> Brought | None:
    number, base, when, note, text = (entry.get(key) for key in ("number", "base", "time", "note", "text"))
    if type(number) is not int or not 0 < number < 2**53 or number in known or (base is not None and base not in known):
        return None  # a version is made from an earlier one: no circles
    if isinstance(when, bool) or not isinstance(when, int | float) or not 0 <= when < 1e11:
        return None
    if not isinstance(note, str) or not isinstance(text, str) or len(text) > MOST_TEXT:
        return None
    return Brought(number, base, float(when), note, entry.get("good") is True, entry.get("aside") is True, text)
