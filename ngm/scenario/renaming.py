"""A new name for something, in every place of a scenario's text that uses it; every other character stays."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterator

from ngm.errors import Problem, ScenarioError
from ngm.expression.names import NAME, canonical, is_reserved
from ngm.scenario.document import to_data
from ngm.scenario.edit import rename, toml
from ngm.scenario.spans import Path, members, statements

__all__ = ["NAMED", "rename_everywhere"]

#: The sections whose keys are names; one name means one thing in a file.
NAMED = ("compartments", "parameters", "matrices", "definitions", "dimensions")
#: The sections whose keys name a compartment.
_STATES = ("infection_free", "state_now")
#: Fields that hold a name, or a list of names.
_FIELDS = {"from", "to", "of", "matrix", "by", "within", "parameter", "susceptibility", "infectivity"}
#: Fields that hold expressions, by their section; elsewhere text is words.
_EXPRESSIONS = {
    "flow": {"rate"},
    "parameters": {"value"},
    "matrices": {"population"},
    "next_generation": {"K", "sizes"},
    "projection": {"births", "transitions"},
}
#: A number, so that the e of 1e3 is no name; or a name.
_PIECE = re.compile(rf"(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?|({NAME.pattern})")


def rename_everywhere(text: str, old: str, new: str) -> str:
    """Return a scenario's text with a compartment, parameter, definition, matrix or dimension under another name.

    The name is replaced where it is defined, in flows and movements, in every expression, in the states, matrices and
    interventions, and as a grouping. Comments, labels and words for the report stay as they are.

    Parameters
    ----------
    text : str
        A TOML document; it need not be a complete model.
    old, new : str
        A Greek letter counts as its spelling.

    Raises
    ------
    ScenarioError
        `new` is no name, belongs to a function, or stands in the file already; or nothing is called `old`.
    """
    to_data(text)
    was, will = canonical(old), canonical(new)
    if will is None or is_reserved(will):
        reason = (
            "belongs to a function" if will is not None else "is no name: write letters, digits and _, a letter first"
        )
        raise ScenarioError(Problem(f"rename {old}", f"'{new[:80]}' {reason}."))
    if was == will:
        return text
    keys, values = _places(text)
    taken = [path for path, name in keys if name == will] + [path for path, _, found in values if will in _names(found)]
    if taken:
        shown = ", ".join(str(part + 1) if isinstance(part, int) else part for part in taken[0])
        raise ScenarioError(
            Problem(
                f"rename {old}", f"'{new}' stands in the file already ({shown}). Choose another name.", key=taken[0]
            )
        )
    if not any(name == was for path, name in keys if path[0] in NAMED):
        raise ScenarioError(Problem(f"rename {old}", f"nothing in the file is called '{old[:80]}'."))
    for _, (start, stop), found in reversed(values):
        changed = _PIECE.sub(lambda m: new if m[1] and canonical(m[1]) == was else m[0], found)
        if changed != found:
            raw = text[start:stop]
            plain = raw[1:-1] == found
            text = text[:start] + (raw[0] + changed + raw[-1] if plain else toml(changed)) + text[stop:]
    for path, name in reversed(keys):
        if name == was:
            text = rename(text, path, new)
    return text


def _names(expression: str) -> set[str | None]:
    return {canonical(found[1]) for found in _PIECE.finditer(expression) if found[1]}


def _places(text: str) -> tuple[list[tuple[Path, str]], list[tuple[Path, tuple[int, int], str]]]:
    """Return the keys that are names, and the texts that hold names with their places, both in the order of the file."""
    keys: dict[Path, str] = {}
    values: list[tuple[Path, tuple[int, int], str]] = []
    # Types of a matrix that stands in the file are labels, and no names: one may be called as a parameter is.
    labelled = any(statement.path[:1] in (("next_generation",), ("projection",)) for statement in statements(text))
    for path, span in _leaves(text):
        section = path[0]
        if section in (*NAMED, *_STATES) and len(path) > 1 and isinstance(path[1], str):
            keys.setdefault(path[:2], canonical(path[1]) or "")
        if "group" in path[:-1]:
            at = path.index("group") + 1
            keys.setdefault(path[: at + 1], canonical(str(path[at])) or "")
        raw = text[span[0] : span[1]]
        if labelled and path[-1] in ("susceptibility", "infectivity"):
            continue
        if raw[:1] in "\"'" and _holds_names(path):
            values.append((path, span, str(tomllib.loads(f"x = {raw}")["x"])))
    return list(keys.items()), values


def _holds_names(path: Path) -> bool:
    section = str(path[0])
    if section in _STATES or (section == "definitions" and len(path) == 2):
        return True
    fields = [part for part in path[1:] if isinstance(part, str)]
    field = fields[-1] if fields else ""
    if section in ("parameters", "matrices", "compartments") and len(fields) < 2:
        return False
    return field in _EXPRESSIONS.get(section, set()) or (field in _FIELDS and "group" not in fields)


def _leaves(text: str) -> Iterator[tuple[Path, tuple[int, int]]]:
    """Yield every value that is neither a list nor an inline table, with its path and place, in the order of the file."""
    for statement in statements(text):
        if statement.value is None:
            continue
        stack = [(statement.path, statement.value)]
        while stack:
            path, span = stack.pop()
            if text[span[0]] in "[{":
                stack += [((*path, *member.path), member.value) for member in reversed(members(text, span))]
            else:
                yield path, span
