"""Numbers as people type them on the command line and in fields of the pages."""

from __future__ import annotations

import re
from collections.abc import Sequence
from decimal import Decimal

from ngm.errors import Problem, ScenarioError

__all__ = ["by_group", "number", "pairs"]

_NUMBER = re.compile(r"([+-]?(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d{1,3})?)\s*(%?)")


def number(text: str, what: str) -> float:
    """Return the number that a text says: ``0.7``, ``7e-1`` or ``70 %``; spaces between digits (``100 000``) are left out.

    Raises
    ------
    ngm.ScenarioError
        It says none. `what` names the field in the message.
    """
    told = re.sub(r"(?<=\d)[ \u00a0\u202f](?=\d{3}(?!\d))", "", text.strip())
    found = _NUMBER.fullmatch(told)
    if found is None:
        advice = "Write the decimals after a point: 0.7." if "," in told else "Write it as 0.7 or 70 %."
        shown = told[:40] + ("…" if len(told) > 40 else "")
        raise ScenarioError(Problem(what, f"'{shown}' is no number. {advice}" if told else "is empty. Write a number."))
    digits, percent = found.groups()
    return float(Decimal(digits) / 100 if percent else Decimal(digits))


def by_group(given: Sequence[str], what: str) -> float | dict[str, float]:
    """Return one number for all groups (``0.7``), or one for each as ``LABEL=NUMBER``; a label may hold ``=`` itself.

    Raises
    ------
    ngm.ScenarioError
        As `number`; or one number for all stands beside others, or a group is given twice.
    """
    if len(given) == 1 and "=" not in given[0]:
        return number(given[0], what)
    out: dict[str, float] = {}
    problems = []
    for item in given:
        label, sign, value = item.rpartition("=")
        if not sign:
            problems.append(
                Problem(what, f"expected one number for all groups, or GROUP=NUMBER for each, not {item[:60]!r}.")
            )
        elif label.strip() in out:
            problems.append(Problem(what, f"'{label.strip()[:60]}' stands twice. Give each group one number."))
        else:
            out[label.strip()] = number(value, what)
    if problems:
        raise ScenarioError(problems)
    return out


def pairs(given: Sequence[str], what: str) -> dict[tuple[str, str], float]:
    """Return a number for each pair of names, typed as ``beta, gamma = -0.6``; commas within brackets belong to a name.

    Raises
    ------
    ngm.ScenarioError
        A text that says no pair, or as `number`.
    """
    out: dict[tuple[str, str], float] = {}
    problems: list[Problem] = []
    for item in given:
        names, sign, value = item.rpartition("=")
        ends = [name.strip() for name in _apart(names)]
        if not sign or len(ends) != 2 or not all(ends):
            problems.append(Problem(what, f"expected A,B=NUMBER, for example beta,gamma=-0.6, not {item[:60]!r}."))
        else:
            out[ends[0], ends[1]] = number(value, what)
    if problems:
        raise ScenarioError(problems)
    return out


def _apart(names: str) -> list[str]:
    """Return what the commas outside of brackets separate."""
    out, depth = [""], 0
    for sign in names:
        depth += (sign == "[") - (sign == "]")
        if sign == "," and depth == 0:
            out.append("")
        else:
            out[-1] += sign
    return out
