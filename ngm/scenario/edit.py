"""Edits of a scenario's text: one thing changes, every other character stays.

Paths are those of `ngm.errors.Problem.key`: ``("parameters", "beta", "value")``, ``("flow", 1, "rate")`` for the second
flow, ``("matrices", "C", "values", 0, 2)`` for an entry of a matrix. A Greek letter counts as its spelling. The result
is not checked against the scenario format: the text may be wrong on the way to being right. It must be TOML.
"""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from decimal import Decimal

from ngm.errors import Problem, ScenarioError
from ngm.scenario.document import to_data
from ngm.scenario.spans import Member, Path, Statement, members, same, statements

__all__ = ["SECTIONS", "delete", "insert", "move", "rename", "set_value", "toml"]

#: the sections in the order in which a file has them; a new one is put in its place
SECTIONS = (
    "scenario",
    "dimensions",
    "compartments",
    "parameters",
    "matrices",
    "definitions",
    "next_generation",
    "projection",
    "flow",
    "movement",
    "infection_free",
    "intervention",
    "report",
)
_ITEMS = ("flow", "movement", "intervention")
_BARE = re.compile(r"[A-Za-z0-9_-]+")
_ESCAPES = {"\\": "\\\\", '"': '\\"', "\n": "\\n", "\t": "\\t", "\r": "\\r", "\b": "\\b", "\f": "\\f"}


# -- values as text -------------------------------------------------------------------------------------------------


def toml(value: object) -> str:
    """Return a value as TOML: text, true or false, a number, a list, or an inline table.

    A list of lists has a line for each inner list. Floats are written as the shortest decimal that reads as them.
    """
    match value:
        case bool():
            return "true" if value else "false"
        case str():
            return '"' + "".join(_escaped(character) for character in value) + '"'
        case int() | Decimal() | float():
            text = str(value).replace("E", "e")
            if not any(character.isdigit() for character in text):
                raise ValueError(f"{value} is no number that a file can hold")
            return text
        case Mapping():
            inner = ", ".join(f"{key_text(str(name))} = {_flat(item)}" for name, item in value.items())
            return f"{{ {inner} }}" if inner else "{}"
        case Sequence():
            if value and all(isinstance(item, Sequence) and not isinstance(item, str) for item in value):
                return "[\n" + "".join(f"    {_flat(item)},\n" for item in value) + "]"
            return _flat(value)
    raise TypeError(f"{type(value).__name__} has no place in a scenario file")


def _flat(value: object) -> str:
    """Return a value on one line, as an inline table wants it."""
    if isinstance(value, Sequence) and not isinstance(value, str):
        return "[" + ", ".join(_flat(item) for item in value) + "]"
    return toml(value)


def _escaped(character: str) -> str:
    if character in _ESCAPES:
        return _ESCAPES[character]
    return character if ord(character) >= 0x20 and character != "\x7f" else f"\\u{ord(character):04x}"


def key_text(name: str) -> str:
    """Return a key as TOML writes it: in quotes where it holds more than ASCII letters, digits, ``_`` and ``-``."""
    return name if _BARE.fullmatch(name) else toml(name)


# -- edits ----------------------------------------------------------------------------------------------------------


def set_value(text: str, path: Path, value: object) -> str:
    """Return the text with the value at `path` replaced, or added at the end of its table where there is none.

    Parameters
    ----------
    text : str
        A TOML document.
    path : tuple of (str or int)
        A missing section is added at its place; missing numbers are not.
    value : object
        See `toml`.

    Raises
    ------
    ScenarioError
        The text is not TOML, or there is no table at the path to put the value into.
    """
    document = _Document(text)
    found = document.find(path)
    if isinstance(found, tuple):
        return document.replaced(found, toml(value))
    if found is not None or not isinstance(path[-1], str):
        raise _nothing(path)
    return document.added(path, value)


def delete(text: str, path: Path) -> str:
    """Return the text without what stands at `path`: a key, an entry of a list, a ``[[flow]]``, a section.

    Comments on lines of their own stay. The empty line after a removed ``[[flow]]`` goes with it.
    """
    document = _Document(text)
    inner = document.member(path)
    if inner is not None:
        return document.without_member(*inner)
    block = document.block(path)
    if not block:
        raise _nothing(path)
    lines = [(statement.start, statement.stop) for statement in block]
    for start, stop in reversed(lines):
        text = text[:start] + text[stop:]
    first = lines[0][0]
    if block[0].value is None and text[:first].endswith(("\n\n", "\r\n\r\n")):
        blank = re.compile(r"(?:[ \t]*\r?\n)*").match(text, first)
        text = text[:first] + text[blank.end() if blank else first :]
    return text


def insert(text: str, path: Path, value: Mapping[str, object] | object) -> str:
    """Return the text with a new entry before the one that has the number at the end of `path` (or at the end).

    ``insert(text, ("flow", 2), {…})`` adds a ``[[flow]]``; where the list stands in brackets, an entry of that list.
    """
    *parent, number = path
    if not isinstance(number, int):
        return set_value(text, path, value)
    document = _Document(text)
    value_span = document.find(tuple(parent))
    if isinstance(value_span, tuple):
        return document.with_entry(value_span, number, value)
    if not isinstance(value, Mapping) or not all(isinstance(part, str) for part in parent):
        raise _nothing(path)
    heading = ".".join(key_text(str(part)) for part in parent)
    lines = [f"[[{heading}]]", *(f"{key_text(str(name))} = {toml(item)}" for name, item in value.items())]
    blocks = document.items(tuple(parent))
    if number < len(blocks):
        start = document.with_comments(blocks[number][0].start)
        return document.spliced(start, start, [*lines, ""])
    if blocks:
        stop = blocks[-1][-1].stop
        return document.spliced(stop, stop, ["", *lines])
    return document.with_section(str(parent[0]), lines)


def move(text: str, path: Path, number: int, to: int) -> str:
    """Return the text with one ``[[…]]`` of `path` moved to another number, comments directly above it included."""
    document = _Document(text)
    blocks = document.items(path)
    if not (0 <= number < len(blocks) and 0 <= to < len(blocks)):
        raise _nothing((*path, number))
    if number == to:
        return text
    bounds = [(document.with_comments(block[0].start), block[-1].stop) for block in blocks]
    start, stop = bounds[number]
    piece = text[start:stop]
    after = re.compile(r"(?:[ \t]*\r?\n)*").match(text, stop)
    gap = text[stop : after.end()] if after is not None else ""
    if not piece.endswith("\n"):
        piece += document.newline
    target = bounds[to][1] if to > number else bounds[to][0]
    if to > number:
        head, tail = text[:target], text[target:]
        if not head.endswith("\n"):
            head += document.newline
        return head[:start] + head[stop + len(gap) :] + document.newline + piece + tail
    moved = piece + document.newline
    head = text[:start]
    rest = text[stop + len(gap) :]
    if not rest:
        head = head.rstrip() + document.newline
    return head[:target] + moved + head[target:] + rest


def rename(text: str, path: Path, name: str) -> str:
    """Return the text with another key at the end of `path`; what refers to it by name is left as it is."""
    document = _Document(text)
    inner = document.member(path)
    if inner is not None:
        entry, _, _ = inner
        dotted = entry.path
        if isinstance(dotted[-1], str):
            equals = text.index("=", entry.start + sum(len(str(part)) for part in dotted[:-1]))
            before = ".".join(key_text(str(part)) for part in (*dotted[:-1], name))
            return text[: entry.start] + before + " " + text[equals:]
        raise _nothing(path)
    block = document.block(path)
    if not block:
        raise _nothing(path)
    place = len([part for part in path if isinstance(part, str)]) - 1
    for statement in reversed(block):
        depth = len([part for part in statement.path if isinstance(part, str)])
        start, stop = statement.key
        parts = _split_key(text[start:stop])
        index = place - (depth - len(parts))
        if 0 <= index < len(parts):
            parts[index] = key_text(name)
            text = text[:start] + ".".join(parts) + text[stop:]
    return text


def _split_key(text: str) -> list[str]:
    return re.findall(r"\"(?:[^\"\\]|\\.)*\"|'[^']*'|[A-Za-z0-9_-]+", text)


def _nothing(path: Path) -> ScenarioError:
    shown = ", ".join(str(part + 1) if isinstance(part, int) else part for part in path)
    return ScenarioError(Problem(shown, "there is no such entry in the text.", key=path))


class _Document:
    """A text with its statements."""

    def __init__(self, text: str) -> None:
        to_data(text)
        self.text = text
        self.newline = "\r\n" if "\r\n" in text else "\n"
        self.statements = statements(text)

    def find(self, path: Path) -> tuple[int, int] | Statement | None:
        """Return the characters of the value at `path`, or the heading of the table that it is, or None."""
        for statement in self.statements:
            size = len(statement.path)
            if statement.value is None:
                if same(statement.path, path):
                    return statement
            elif same(statement.path, path[:size]):
                inner = self.within(statement.value, path[size:])
                if inner is not None:
                    return inner
        return None

    def within(self, value: tuple[int, int], path: Path) -> tuple[int, int] | None:
        while path:
            for entry in members(self.text, value):
                if same(entry.path, path[: len(entry.path)]):
                    value, path = entry.value, path[len(entry.path) :]
                    break
            else:
                return None
        return value

    def member(self, path: Path) -> tuple[Member, list[Member], tuple[int, int]] | None:
        """Return the entry of a list or inline table at `path`, with all of them and the characters of the whole."""
        for cut in range(len(path) - 1, 0, -1):
            outer = self.find(path[:cut])
            if isinstance(outer, tuple):
                entries = members(self.text, outer)
                return next(((entry, entries, outer) for entry in entries if same(entry.path, path[cut:])), None)
        return None

    def block(self, path: Path) -> list[Statement]:
        """Return the statements at `path` and below it."""
        return [statement for statement in self.statements if same(statement.path[: len(path)], path)]

    def items(self, path: Path) -> list[list[Statement]]:
        """Return the statements of each ``[[…]]`` at `path`."""
        out: list[list[Statement]] = []
        while block := self.block((*path, len(out))):
            out.append(block)
        return out

    def replaced(self, span: tuple[int, int], new: str) -> str:
        return self.text[: span[0]] + self.newlines(new) + self.text[span[1] :]

    def newlines(self, new: str) -> str:
        return new.replace("\n", self.newline)

    def spliced(self, start: int, stop: int, lines: Sequence[str]) -> str:
        """Return the text with whole lines in place of the characters from `start` to `stop`."""
        head = self.text[:start]
        if head and not head.endswith("\n"):
            head += self.newline
        return head + self.newlines("".join(f"{line}\n" for line in lines)) + self.text[stop:]

    def with_comments(self, start: int) -> int:
        """Return where the comment lines directly above a line begin."""
        while start > 0:
            above = self.text.rfind("\n", 0, start - 1) + 1
            if not self.text[above:start].lstrip().startswith("#"):
                return start
            start = above
        return start

    def added(self, path: Path, value: object) -> str:
        """Return the text with a new pair at `path`."""
        parent, name = path[:-1], str(path[-1])
        outer = self.find(parent) if parent else None
        if isinstance(outer, tuple):
            if self.text[outer[0]] != "{":
                raise _nothing(path)
            return self.with_pair(outer, f"{key_text(name)} = {_flat(value)}")
        line = f"{key_text(name)} = {toml(value)}"
        if isinstance(outer, Statement):
            own = [
                statement
                for statement in self.block(parent)
                if statement is outer or (statement.value is not None and self.heading(statement) is outer)
            ]
            stop = own[-1].stop
            return self.spliced(stop, stop, [line])
        dotted = [s for s in self.block(parent) if s.value is not None] if parent else []
        if dotted and any(len(s.path) > len(parent) for s in dotted):
            # the table is written as dotted keys: the new key joins them
            last = dotted[-1]
            start, stop = last.key
            own_parts = _split_key(self.text[start:stop])
            keep = len(own_parts) - (len(last.path) - len(parent))
            if keep > 0:
                return self.spliced(last.stop, last.stop, [".".join([*own_parts[:keep], line])])
        if len(parent) == 1 and parent[0] not in _ITEMS and parent[0] != "matrices":
            return self.with_section(str(parent[0]), [f"[{key_text(str(parent[0]))}]", line])
        if len(parent) == 2 and parent[0] == "matrices":
            heading = f"[matrices.{key_text(str(parent[1]))}]"
            return self.with_section("matrices", [heading, line])
        if len(path) == 2 and parent[0] == "matrices" and isinstance(value, Mapping):
            pairs = [f"{key_text(str(key))} = {toml(item)}" for key, item in value.items()]
            return self.with_section("matrices", [f"[matrices.{key_text(name)}]", *pairs])
        raise _nothing(path)

    def heading(self, statement: Statement) -> Statement | None:
        """Return the heading that a pair stands below."""
        last: Statement | None = None
        for other in self.statements:
            if other is statement:
                return last
            if other.value is None:
                last = other
        return None

    def with_section(self, name: str, lines: Sequence[str]) -> str:
        """Return the text with the lines of a new section after those that come before it in a file."""
        rank = SECTIONS.index(name) if name in SECTIONS else len(SECTIONS)
        before = [
            statement
            for statement in self.statements
            if not statement.path
            or str(statement.path[0]) not in SECTIONS
            or SECTIONS.index(str(statement.path[0])) <= rank
        ]
        stop = before[-1].stop if before else 0
        return self.spliced(stop, stop, ["", *lines] if stop else [*lines, ""])

    def with_pair(self, outer: tuple[int, int], pair: str) -> str:
        entries = members(self.text, outer)
        if not entries:
            return self.replaced(outer, f"{{ {pair} }}")
        stop = entries[-1].value[1]
        return f"{self.text[:stop]}, {pair}{self.text[stop:]}"

    def with_entry(self, outer: tuple[int, int], number: int, value: object) -> str:
        """Return the text with a new entry of the list at `outer`; on a line of its own where the others are."""
        if self.text[outer[0]] != "[":
            raise ScenarioError(Problem("", "there is no list to put an entry into."))
        entries = members(self.text, outer)
        new = _flat(value)
        if not entries:
            return self.replaced(outer, f"[{new}]")
        if number < len(entries):
            start = entries[number].start
            lead = re.compile(r"[ \t]*\Z").search(self.text[self.text.rfind("\n", 0, start) + 1 : start])
            own_line = self.text[self.text.rfind("\n", 0, start) + 1 : start].strip() == ""
            between = f",{self.newline}{lead.group() if lead else ''}" if own_line and start > outer[0] + 1 else ", "
            return f"{self.text[:start]}{new}{between}{self.text[start:]}"
        last = entries[-1]
        line = self.text[self.text.rfind("\n", 0, last.start) + 1 : last.start]
        between = f",{self.newline}{line}" if not line.strip() and "\n" in self.text[outer[0] : last.start] else ", "
        return f"{self.text[: last.value[1]]}{between}{new}{self.text[last.value[1] :]}"

    def without_member(self, entry: Member, entries: list[Member], outer: tuple[int, int]) -> str:
        """Return the text without one entry of a list or inline table, and without its line where it had one."""
        text, index = self.text, entries.index(entry)
        if len(entries) == 1:
            empty = "[]" if text[outer[0]] == "[" else "{}"
            return self.replaced(outer, empty)
        if index + 1 < len(entries):
            return text[: entry.start] + text[entries[index + 1].start :]
        before = entries[index - 1].value[1]
        return text[:before] + text[entry.value[1] :]
