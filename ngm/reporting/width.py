"""How wide a formula is on the page, roughly: enough to decide whether it is set as one, broken or named."""

from __future__ import annotations

import re
from collections.abc import Sequence
from itertools import pairwise
from typing import NamedTuple

from ngm.expression.names import GREEK
from ngm.expression.parse import parse
from ngm.expression.tree import Add, Apply, Call, Multiply, Name, Negate, Node, Number, Power, Total, fold

__all__ = ["LINE", "SIDE_LINE", "Columns", "columns", "spaced", "width"]

#: Letters of a formula that fit on a line of the page, and of a page on its side.
LINE = 78.0
SIDE_LINE = 116.0

#: Letters of a table that fit on a line, and on that of a page on its side; and those lost between two columns. The
#: form with the widest letters decides: TeX and Word.
TABLE, SIDE_TABLE, GAP = 88.0, 138.0, 2.6

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
        case Negate():
            return parts[0] + 1.5
        case Apply(matrix=name) | Call(function=name):
            return sum(parts) + len(name) + 3
        case Total():
            return parts[0] + 5
    raise TypeError(type(node).__name__)


class Columns(NamedTuple):
    """How the columns of a table are laid out: parts from one column to before another, and whether on the side."""

    parts: tuple[tuple[int, int], ...]
    wide: bool


def columns(head: float, letters: Sequence[float]) -> Columns:
    """Return how columns of so many letters are set beside a first one that heads the rows.

    As one table where that fits on the page, else on a page on its side, else in parts that fit, of about the same width.

    Examples
    --------
    >>> columns(3, [8] * 7)
    Columns(parts=((0, 7),), wide=False)
    >>> columns(3, [8] * 10)
    Columns(parts=((0, 10),), wide=True)
    >>> columns(3, [8] * 20)
    Columns(parts=((0, 7), (7, 13), (13, 20)), wide=False)
    """
    first = head + GAP
    sizes = [size + GAP for size in letters]
    whole = first + sum(sizes)
    if whole <= SIDE_TABLE:
        return Columns(((0, len(sizes)),), whole > TABLE)
    for count in range(2, len(sizes)):
        ends = [round(k * len(sizes) / count) for k in range(count + 1)]
        if all(first + sum(sizes[a:b]) <= TABLE for a, b in pairwise(ends)):
            return Columns(tuple(pairwise(ends)), False)
    return Columns(tuple((k, k + 1) for k in range(len(sizes))), first + max(sizes) > TABLE)


def spaced(text: str) -> str:
    """Return an expression with blanks around ``*`` and ``/``, so that a long one can be broken into lines."""
    pieces = re.split(r"(\[[^\]]*\])", text)
    return "".join(piece if piece.startswith("[") else re.sub(r"\s*([*/])\s*", r" \1 ", piece) for piece in pieces)
