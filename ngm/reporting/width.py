"""How wide a formula is on the page, roughly: enough to decide whether it is set as one, broken or named."""

from __future__ import annotations

import re

from ngm.expression.names import GREEK
from ngm.expression.parse import parse
from ngm.expression.tree import Add, Apply, Call, Multiply, Name, Negate, Node, Number, Power, Total, fold

__all__ = ["LINE", "spaced", "width"]

#: Letters of a formula that fit on a line of the page.
LINE = 78.0

#: One letter wide, however they are spelt.
_GREEK = {spelling.lower() for spelling in GREEK.values()}


def width(text: str) -> float:
    """Return about how many letters wide an expression is when it is typeset; fractions count their wider half."""
    return fold(parse(text, items=True, matrices=None), _width)


def _width(node: Node, parts: list[float]) -> float:
    match node:
        case Number():
            return float(len(node.text) or 4)
        case Name(name=name, groups=groups):
            pieces = name.split("_")
            return (1.0 if pieces[0].lower() in _GREEK else float(len(pieces[0]))) + 0.7 * sum(
                len(piece) for piece in (*pieces[1:], *groups)
            )
        case Add():
            return sum(parts) + 2.5 * len(parts)
        case Multiply(factors=factors):
            above = sum(p + 0.8 for (side, _), p in zip(factors, parts, strict=True) if side > 0)
            below = sum(p + 0.8 for (side, _), p in zip(factors, parts, strict=True) if side < 0)
            return max(above, below) + 1
        case Power():
            return parts[0] + 0.7 * parts[1]
        case Negate() | Call() | Total() | Apply():
            return sum(parts) + 4
    raise TypeError(type(node).__name__)


def spaced(text: str) -> str:
    """Return an expression with blanks around ``*`` and ``/``, so that a long one can be broken into lines."""
    pieces = re.split(r"(\[[^\]]*\])", text)
    return "".join(piece if piece.startswith("[") else re.sub(r"\s*([*/])\s*", r" \1 ", piece) for piece in pieces)
