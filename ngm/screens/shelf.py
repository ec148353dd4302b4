"""The scenarios that come with the app, the starting points for a new one, and what an upload says."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

__all__ = ["EMPTY", "THREE_COMPARTMENTS", "Refused", "names", "read", "uploaded"]

FOLDER = Path(__file__).resolve().parents[2] / "scenarios"

#: A scenario file may be this large, bytes.
MOST_BYTES = 16 * 1024 * 1024

EMPTY = """\
[scenario]
title = "Untitled"
time_unit = "day"
"""

THREE_COMPARTMENTS = """\
[scenario]
title = "Untitled"
time_unit = "day"

[compartments]
S = { label = "Susceptible", infected = false }
I = { label = "Infectious", infected = true }
R = { label = "Recovered", infected = false }
"""


@dataclass(frozen=True, slots=True)
class Refused:
    """An upload that cannot be opened, and why."""

    why: str


def names() -> list[str]:
    """Return the file names of the scenarios that come with the app."""
    return sorted(path.name for path in FOLDER.glob("*.toml"))


def read(name: str) -> tuple[str, str]:
    """Return the text of one of `names` and the folder that it lies in."""
    if name not in names():
        raise ValueError(f"{name!r} is none of the scenarios")
    return (FOLDER / name).read_text(encoding="utf-8"), str(FOLDER)


def uploaded(name: str, content: bytes) -> str | Refused:
    """Return the text of an uploaded file, or why it is none."""
    if len(content) > MOST_BYTES:
        return Refused(f"The file is larger than 16 MB ({len(content):,} bytes). A scenario file has at most 16 MB.")
    if not name.lower().endswith(".toml"):
        return Refused("The name does not end in .toml. A scenario is a TOML text file.")
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        return Refused(f"Byte {error.start + 1} is not UTF-8 text. Save the file as plain text in UTF-8 and try again.")
    if "\x00" in text:
        return Refused("The file holds NUL characters: it is no text file.")
    return text
