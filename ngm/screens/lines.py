"""Two texts, line by line: what differs, and both sides' changes put together where they do not touch. No Streamlit here."""

from __future__ import annotations

from difflib import SequenceMatcher, unified_diff

__all__ = ["alone", "difference", "merged"]

#: Texts with more lines than this are not compared: the time grows with the square.
MOST_LINES = 20_000
#: Lines of a difference that are shown.
MOST_SHOWN = 400


def difference(old: str, new: str) -> str | None:
    """Return what differs, each line with ``-`` or ``+`` before it; "" where nothing does, None where it is too long."""
    first, second = old.splitlines(), new.splitlines()
    if max(len(first), len(second)) > MOST_LINES:
        return None
    lines = list(unified_diff(first, second, n=1, lineterm=""))[2:]
    more = [f"… and {len(lines) - MOST_SHOWN} more lines"] if len(lines) > MOST_SHOWN else []
    return "\n".join([*lines[:MOST_SHOWN], *more])


def alone(old: str, new: str) -> list[tuple[str, str, str]]:
    """Return for each changed place its old lines, its new lines, and the old text with this one change."""
    first, second = old.splitlines(keepends=True), new.splitlines(keepends=True)
    if max(len(first), len(second)) > MOST_LINES:
        return []
    return [
        ("".join(first[a:b]), "".join(second[c:d]), "".join([*first[:a], *second[c:d], *first[b:]]))
        for tag, a, b, c, d in SequenceMatcher(None, first, second, autojunk=False).get_opcodes()
        if tag != "equal"
    ]


def merged(base: str, mine: str, theirs: str) -> str | None:
    """Return the base with both sides' changes; None where they touch the same or neighbouring lines, or are too long."""
    lines = base.splitlines(keepends=True)
    sides = [text.splitlines(keepends=True) for text in (mine, theirs)]
    if max(len(lines), *(len(side) for side in sides)) > MOST_LINES:
        return None
    changes = sorted(
        (a, b, k, side[c:d])
        for k, side in enumerate(sides)
        for tag, a, b, c, d in SequenceMatcher(None, lines, side, autojunk=False).get_opcodes()
        if tag != "equal"
    )
    out: list[str] = []
    done, last = 0, None
    for a, b, k, new in changes:
        if last is not None and k != last and a <= done:
            return None
        out += lines[done:a] + new
        done, last = b, k
    return "".join(out + lines[done:])
