"""Drafts that cannot be lost: every accepted edit is a version in one SQLite file.

Versions are only ever added. A draft points at one of them, its head; undo, redo and restoring move the head, and a
counter (`rev`) goes up with every move. A save names the counter that it started from: where somebody else was faster
the text is added all the same, beside the head, and the caller gets both.

A draft is reached by its id, which nobody can guess, or by its owner; there is no list of everybody's drafts.
"""

from ngm.drafts.schema import PLACE, DraftError, place
from ngm.drafts.store import Conflict, Draft, Listed, Saved, Store

__all__ = ["PLACE", "Conflict", "Draft", "DraftError", "Listed", "Saved", "Store", "place"]
