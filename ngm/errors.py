"""What can be wrong with an input, and how it is told.

The tree of exceptions::

    NgmError
      ExpressionError     one expression cannot be read
      ScenarioError       a scenario cannot be accepted; carries every problem found
      DerivationError     the model is well formed but has no derivation (or no state to derive it at)

Every one of them means that the input is wrong: a mistake of the program itself is any other exception.
"""

from __future__ import annotations

import unicodedata
from collections.abc import Sequence
from dataclasses import dataclass

__all__ = ["DerivationError", "ExpressionError", "NgmError", "Problem", "ScenarioError", "printable"]

#: How many problems one message lists, and how long it may be: the command line's contract.
MOST_LISTED = 10
MOST_CHARACTERS = 1900


@dataclass(frozen=True, slots=True)
class Problem:
    """One thing that is wrong, told so that it can be put right.

    Attributes
    ----------
    where : str
        The place in the scenario, in its own terms: ``flow 2 "Infection", rate``, ``parameters.p, value``.
    message : str
        What is wrong there and what would be right, in one or two sentences.
    text : str or None
        The offending text, where a caret helps.
    position : int or None
        The place in `text`, counted in characters from 0.
    key : tuple of (str or int)
        The path of the field in the scenario file (``("flow", 1, "rate")``), so that a form can show the problem
        beside the field; empty where the problem belongs to no single field.
    applies : bool
        False where nothing is wrong with the scenario: what was asked for does not apply to a model like this.
    """

    where: str
    message: str
    text: str | None = None
    position: int | None = None
    key: tuple[str | int, ...] = ()
    applies: bool = True

    def __str__(self) -> str:
        head = f"{self.where}: {self.message}" if self.where else self.message
        if self.text is None or self.position is None:
            return head
        line, caret = excerpt(self.text, self.position)
        return f"{head}\n    {line}\n    {caret}"


def excerpt(text: str, position: int, width: int = 72) -> tuple[str, str]:
    """Return the line of `text` that holds `position`, cut to `width`, and a line with a caret below the place."""
    position = max(0, min(position, len(text)))
    start = text.rfind("\n", 0, position) + 1
    stop = text.find("\n", position)
    line = text[start : stop if stop >= 0 else len(text)]
    column = position - start
    left = max(0, column - width // 2) if len(line) > width else 0
    shown = printable(line[left : left + width].replace("\t", " "))
    lead = "…" if left else ""
    tail = "…" if left + width < len(line) else ""
    return lead + shown + tail, " " * (len(lead) + column - left) + "^"


def printable(text: str) -> str:
    r"""Return text as it may go to a terminal or a page: each sign that steers one (control, direction) as one box.

    Lines stay lines. A title could else clear the screen, or turn round the numbers that stand beside it.

    Examples
    --------
    >>> printable("a\x1b[31m β")
    'a�[31m β'
    """
    if text.replace("\n", "").isprintable():
        return text
    return "".join("\N{REPLACEMENT CHARACTER}" if _steers(c) else c for c in text)


def _steers(sign: str) -> bool:
    # joiners are letters' own: words of some scripts and some pictures need them
    return sign not in "\n\u200c\u200d" and (unicodedata.category(sign)[0] == "C" or sign in "\u2028\u2029")


class NgmError(Exception):
    """The input is wrong. `problems` holds one or more of `Problem`; `str()` lists up to ten of them."""

    def __init__(self, problems: Problem | Sequence[Problem]) -> None:
        self.problems: tuple[Problem, ...] = (problems,) if isinstance(problems, Problem) else tuple(problems)
        super().__init__(listing(self.problems))


class ExpressionError(NgmError):
    """An expression cannot be read, or holds something that is not allowed."""


class ScenarioError(NgmError):
    """A scenario cannot be accepted."""


class DerivationError(NgmError):
    """The model has no derivation: no infection-free state, a V that is singular by structure, no transmission."""


def listing(problems: Sequence[Problem]) -> str:
    """Return the problems as lines of text, at most `MOST_LISTED` of them and `MOST_CHARACTERS` long."""
    shown: list[str] = []
    room = MOST_CHARACTERS
    for problem in problems[:MOST_LISTED]:
        line = printable(str(problem))
        if len(line) > room:
            line = line[: max(0, room - 1)] + "…"
        if room <= 1:
            break
        shown.append(line)
        room -= len(line) + 1
    rest = len(problems) - len(shown)
    if rest > 0:
        shown.append(f"… and {rest} more problem{'s' if rest > 1 else ''}.")
    return "\n".join(shown)
