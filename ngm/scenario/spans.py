"""Where in the text of a TOML document each key and value stands.

Not a parser: the text has been read by the standard library before, and so is known to be TOML. What is found here are
places only, so that an edit can replace one value and leave every other character alone. Nothing recurses.
"""

from __future__ import annotations

import re
import tomllib
from dataclasses import dataclass

from ngm.expression.names import canonical

__all__ = ["Member", "Path", "Statement", "members", "same", "statements"]

Path = tuple[str | int, ...]

_STRING = r'"""(?:[^\\]|\\.)*?"{3,5}|\'\'\'.*?\'{3,5}|"(?:[^"\\\n]|\\.)*"|\'[^\'\n]*\''
_KEY_PART = re.compile(r"[ \t]*(?:([A-Za-z0-9_-]+)|(\"(?:[^\"\\\n]|\\.)*\"|'[^'\n]*'))[ \t]*")
_BLANK = re.compile(r"(?:[ \t\r\n]|#[^\n]*)*")
_SPACE = re.compile(r"[ \t]*")
_SCALAR = re.compile(rf"(?:{_STRING})|[^,\]}}#\r\n]*[^,\]}}#\s]", re.DOTALL)
#: what a list or an inline table is skipped by, a stretch at a time
_STRETCH = re.compile(rf"(?:{_STRING})|#[^\n]*|[^\[\]{{}}\"'#]+|[\[\]{{}}]", re.DOTALL)
_REST_OF_LINE = re.compile(r"[^\n]*\n?")


@dataclass(frozen=True, slots=True)
class Statement:
    """One statement of the document.

    `path`: of the table of a heading, or of a pair. `key`: the characters of the key. `value`: those of the value; None
    for a heading. `start`, `stop`: the whole lines. `item`: True for ``[[…]]``.
    """

    path: Path
    start: int
    stop: int
    key: tuple[int, int]
    value: tuple[int, int] | None
    item: bool = False


@dataclass(frozen=True, slots=True)
class Member:
    """One member of a list (`path` holds its number) or of an inline table (`path` holds its dotted key)."""

    path: Path
    start: int
    value: tuple[int, int]


def same(left: Path, right: Path) -> bool:
    """Return True where two paths are the same, a Greek letter counting as its spelling."""
    return len(left) == len(right) and all(
        a == b
        or (isinstance(a, str) and isinstance(b, str) and canonical(a) is not None and canonical(a) == canonical(b))
        for a, b in zip(left, right, strict=True)
    )


def statements(text: str) -> list[Statement]:
    """Return the headings and pairs of a document in order, with their full paths.

    The tables of ``[[flow]]`` are numbered from 0: the pair ``rate`` of the second one is ``("flow", 1, "rate")``.
    """
    out: list[Statement] = []
    counts: dict[Path, int] = {}
    table: Path = ()
    at = 0
    while True:
        at = _match(_BLANK, text, at)
        if at >= len(text):
            return out
        start = text.rfind("\n", 0, at) + 1
        if text[at] == "[":
            item = text.startswith("[[", at)
            parts, key = _key(text, at + (2 if item else 1))
            table = _full(parts, counts, item)
            stop = _line_end(text, key[1])
            out.append(Statement(table, start, stop, key, None, item))
        else:
            parts, key = _key(text, at)
            value = _value(text, _skip(text, key[1], "="))
            stop = _line_end(text, value[1])
            out.append(Statement((*table, *parts), start, stop, key, value))
        at = stop


def members(text: str, value: tuple[int, int]) -> list[Member]:
    """Return the members of the list or inline table that stands at `value`; none for anything else."""
    at, stop = value
    opening = text[at : at + 1]
    if opening not in ("[", "{"):
        return []
    out: list[Member] = []
    at += 1
    while True:
        at = _match(_BLANK, text, at)
        if at >= stop - 1:
            return out
        start = at
        path: Path = (len(out),)
        if opening == "{":
            parts, key = _key(text, at)
            path, at = parts, _skip(text, key[1], "=")
        span = _value(text, at)
        out.append(Member(path, start, span))
        at = _match(_BLANK, text, span[1])
        if text[at : at + 1] == ",":
            at += 1


def _full(parts: Path, counts: dict[Path, int], item: bool) -> Path:
    """Return the path of a heading with the numbers of the ``[[…]]`` that it lies in."""
    path: Path = ()
    for number, part in enumerate(parts):
        path = (*path, part)
        last = number == len(parts) - 1
        if last and item:
            counts[path] = counts.get(path, -1) + 1
        if path in counts:
            path = (*path, counts[path])
    return path


def _key(text: str, at: int) -> tuple[tuple[str, ...], tuple[int, int]]:
    parts: list[str] = []
    start = _match(_SPACE, text, at)
    while True:
        part = _KEY_PART.match(text, at)
        if part is None:
            raise ValueError(f"no key at character {at}")
        quoted = part.group(2)
        parts.append(part.group(1) if quoted is None else next(iter(tomllib.loads(f"{quoted} = 0"))))
        stop = part.end(1) if quoted is None else part.end(2)
        at = part.end()
        if text[at : at + 1] != ".":
            return tuple(parts), (start, stop)
        at += 1


def _value(text: str, at: int) -> tuple[int, int]:
    start = _match(_SPACE, text, at)
    if text[start : start + 1] not in ("[", "{"):
        found = _SCALAR.match(text, start)
        if found is None:
            raise ValueError(f"no value at character {start}")
        return start, found.end()
    depth, at = 0, start
    while True:
        found = _STRETCH.match(text, at)
        if found is None:
            raise ValueError(f"a list or table is not closed at character {at}")
        at = found.end()
        token = found.group()
        if token in ("[", "{"):
            depth += 1
        elif token in ("]", "}"):
            depth -= 1
            if not depth:
                return start, at


def _skip(text: str, at: int, sign: str) -> int:
    at = _match(_SPACE, text, at)
    if text[at : at + 1] != sign:
        raise ValueError(f"no {sign} at character {at}")
    return at + 1


def _match(pattern: re.Pattern[str], text: str, at: int) -> int:
    found = pattern.match(text, at)
    return found.end() if found is not None else at


def _line_end(text: str, at: int) -> int:
    return _match(_REST_OF_LINE, text, at)
