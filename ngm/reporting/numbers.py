"""Numbers as they are shown, each with the name by which the companion file has it."""

from __future__ import annotations

import re

from ngm.charts.style import short
from ngm.reporting.document import Inline, Line, Number

__all__ = ["DIGITS", "exact", "lookup", "number", "share"]

#: Significant digits of a number in running text and tables; the table of names has all of them.
DIGITS = 6

_STEP = re.compile(r"\[(\d+)\]|\[\"([^\"]*)\"\]|\.?([^.\[\]]+)")


def number(value: float | None, name: str) -> Inline:
    """Return a number to six significant digits, never rounded onto 1; a dash where there is none."""
    return "–" if value is None else Number(short(value, DIGITS), value, name)


def exact(value: float | None, name: str) -> Inline:
    """Return a number with all its digits, as the JSON result prints it."""
    return "–" if value is None else Number(repr(float(value)), value, name)


def share(value: float | None, name: str) -> Line:
    """Return a share between 0 and 1, and the same in per cent."""
    return ("–",) if value is None else (number(value, name), f" ({100 * value:.1f} %)")


def lookup(tree: object, name: str) -> object:
    """Return what a name leads to: ``solve.K[0][1]``, ``solve.infection_free["S[0-4]"]``.

    Raises
    ------
    KeyError
        The name leads nowhere.
    """
    place = 0
    while place < len(name):
        found = _STEP.match(name, place)
        if found is None:
            raise KeyError(name)
        index, quoted, plain = found.groups()
        if index is not None and isinstance(tree, list):
            tree = tree[int(index)]
        elif index is None and isinstance(tree, dict):
            tree = tree[quoted if quoted is not None else plain]
        else:
            raise KeyError(name)
        place = found.end()
    return tree
