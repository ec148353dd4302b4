"""Text in a cell and the value in the document that it stands for. No Streamlit here.

All cells are text: a grid of numbers drops what it cannot read while it is typed (``1e-3`` became -13), and what is
wrong has to stay where it was typed, with the problem beside it.
"""

from __future__ import annotations

import re
import tomllib
from decimal import Decimal
from typing import Any, Literal

__all__ = ["CellKind", "Typed", "document", "shown", "typed"]

CellKind = Literal["text", "expression", "value", "names", "choice"]

NUMBER = re.compile(r"[+-]?(0|[1-9]\d*)(\.\d+)?([eE][+-]?\d+)?")


class Typed(str):
    """A number of the file as it was typed there: ``1e-3`` stays ``1e-3``."""

    __slots__ = ()


def document(text: str) -> dict[str, Any] | None:
    """Return the TOML document of a text, numbers as typed; None where it is no TOML."""
    try:
        return tomllib.loads(text, parse_float=Typed)
    except (tomllib.TOMLDecodeError, RecursionError, ValueError):
        return None


def shown(value: object, kind: CellKind = "value") -> str:
    """Return a value of the document as the text of a cell; `typed` reads it back."""
    if value is None:
        return ""
    if isinstance(value, bool):
        return ("yes" if value else "no") if kind == "choice" else ("true" if value else "false")
    if isinstance(value, list):
        if kind == "names" and all(isinstance(item, str) and "," not in item for item in value):
            return ", ".join(value)
        return "[" + ", ".join(_inner(item) for item in value) + "]"
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{_key(k)} = {_inner(v)}" for k, v in value.items()) + " }"
    return str(value)


def typed(text: str, kind: CellKind = "value") -> Any:
    """Return what is written into the document for the text of a cell; None: the key is left out.

    What is no number, list or table stays text, for the reader to judge: ``1/7`` is an expression, ``0,5`` a problem
    that the reader words.
    """
    text = text.strip()
    if not text:
        return None
    if kind == "names":
        return _names(text)
    if kind == "choice":
        return {"yes": True, "no": False}.get(text.lower(), text)
    if kind != "value":
        return text
    if NUMBER.fullmatch(text):
        return _number(text)
    if text[0] in "[{":
        try:
            read = tomllib.loads(f"x = {text}")
        except (tomllib.TOMLDecodeError, RecursionError, ValueError):
            return text
        return read["x"] if len(read) == 1 else text
    return text


def _number(text: str) -> int | float | str:
    if re.fullmatch(r"[+-]?\d{1,18}", text):
        return int(text)
    value = float(text)
    # More digits than a float holds: as an expression without names the number keeps them all.
    return value if Decimal(repr(value)) == Decimal(text) else text


def _names(text: str) -> Any:
    if text.startswith("["):
        return typed(text, "value")
    return [part.strip() for part in text.split(",") if part.strip()]


def _inner(value: object) -> str:
    if isinstance(value, str) and not isinstance(value, Typed):
        escaped = value.replace("\\", "\\\\").replace('"', '\\"').replace("\n", "\\n").replace("\t", "\\t")
        return f'"{escaped}"'
    return shown(value, "value")


def _key(name: str) -> str:
    return name if re.fullmatch(r"[A-Za-z0-9_-]+", name) else _inner(name)
