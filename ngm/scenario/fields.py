"""Reading the keys of a table: every mistake is noted with its place, and reading goes on.

`Findings` collects; `Table` reads one table of the file. A reader returns None for what is missing or wrong, so that a
caller never has to catch anything and all problems of a file come out at once.
"""

from __future__ import annotations

import datetime
from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass, field
from decimal import Decimal
from fractions import Fraction
from typing import Any

from ngm.errors import ExpressionError, Problem
from ngm.expression import names, parse
from ngm.expression.tree import Negate, Node, Number
from ngm.scenario import exact
from ngm.scenario.model import Expression

__all__ = ["EnoughError", "Findings", "Key", "Table", "closest", "describe", "listed", "number_node", "to_expression"]

Key = tuple[str | int, ...]

#: power of ten below which a number counts as 0, as in expressions
_SMALLEST_EXPONENT = -300


#: a file with more problems than this is not read further: finding suggestions for 100,000 names takes minutes
MOST_PROBLEMS = 60


class EnoughError(Exception):
    """More problems have been found than anybody will read."""


@dataclass(slots=True)
class Findings:
    """What was found wrong (`problems`), what is doubtful (`warnings`), and the matrices that expressions may apply."""

    problems: list[Problem] = field(default_factory=list)
    warnings: list[str] = field(default_factory=list)
    matrices: frozenset[str] = frozenset()

    def add(
        self, where: str, message: str, key: Key = (), text: str | None = None, position: int | None = None
    ) -> None:
        """Note a problem."""
        self.problems.append(Problem(where, message, text, position, key))
        if len(self.problems) >= MOST_PROBLEMS:
            raise EnoughError

    def warn(self, where: str, message: str) -> None:
        """Note a doubt."""
        self.warnings.append(f"{where}: {message}")

    def expression(self, text: str, where: str, key: Key) -> Expression | None:
        """Read an expression; None, with the problem noted, where it cannot be read."""
        try:
            return Expression(text, parse.parse(text, where=where, matrices=self.matrices, key=key))
        except ExpressionError as error:
            for problem in error.problems:
                self.add(problem.where, problem.message, problem.key, problem.text, problem.position)
            return None

    def quantity(self, raw: object, where: str, key: Key, *, what: str = "a number") -> Expression | None:
        """Read a number, or an expression in quotes (which may hold names)."""
        if isinstance(raw, str):
            return self.expression(raw, where, key)
        return self.literal(raw, where, key, what=f"{what} or an expression in quotes")

    def literal(self, raw: object, where: str, key: Key, *, what: str = "a number") -> Expression | None:
        """Read a TOML number, exactly."""
        if isinstance(raw, bool) or not isinstance(raw, int | Decimal):
            self.add(where, f"expected {what}, not {describe(raw)}.", key)
            return None
        trouble = number_trouble(raw)
        if trouble is not None:
            self.add(where, trouble, key)
            return None
        return to_expression(raw)

    def number(
        self, raw: object, where: str, key: Key, *, what: str = "a number"
    ) -> tuple[Expression, Fraction | float] | None:
        """Read a number, or an expression without names, with its value."""
        read = self.quantity(raw, where, key, what=what)
        if read is None:
            return None
        if not exact.is_closed(read.tree):
            self.add(
                where, f"expected {what}; an expression with names in it ('{short(read.text)}') has no place here.", key
            )
            return None
        value = self.value(read, where, key)
        return None if value is None else (read, value)

    def value(self, expression: Expression, where: str, key: Key) -> Fraction | float | None:
        """Return the value of an expression without names; None, with the problem noted, where it has none."""
        try:
            return exact.evaluate(expression.tree)
        except exact.NoValueError as error:
            self.add(where, str(error), key, expression.text, error.position)
            return None


def number_trouble(raw: int | Decimal) -> str | None:
    """Return why a number cannot be taken, or None."""
    if isinstance(raw, Decimal):
        if not raw.is_finite():
            return f"{raw} is no number to compute with. Write a decimal number."
        if raw and raw.adjusted() < _SMALLEST_EXPONENT:
            return f"{short(str(raw))} is too small. A number is 0 or at least 1e-300."
        if raw and raw.adjusted() >= 300:
            return f"{short(str(raw))} is too large. Numbers stay below 1e300 in size."
        return None
    return "the number is too large. Numbers stay below 1e300 in size." if abs(raw) >= 10**300 else None


def number_node(raw: int | Decimal) -> Node:
    """Return a TOML number as a node; a negative one as the negation of a number, as if it had been typed."""
    value = Fraction(raw)
    text = str(abs(raw)).replace("E+", "e").replace("E", "e")
    node = Number(abs(value), text)
    return Negate(node) if value < 0 else node


def to_expression(raw: int | Decimal) -> Expression:
    """Return a TOML number as an expression."""
    node = number_node(raw)
    text = node.operand.text if isinstance(node, Negate) and isinstance(node.operand, Number) else ""
    return Expression(f"-{text}", node) if text else Expression(node.text if isinstance(node, Number) else "", node)


def short(text: str, most: int = 40) -> str:
    """Return a text cut to a length that fits into a message, on one line."""
    line = " ".join(text.split()) if text.strip() else text
    return line if len(line) <= most else line[: most - 1] + "…"


def describe(raw: object) -> str:
    """Say what kind of TOML value this is, in words."""
    match raw:
        case bool():
            return "true" if raw else "false"
        case int() | Decimal():
            return "the number " + (short(str(raw)) if number_trouble(raw) is None else "that stands there")
        case str():
            return f"the text '{short(raw)}'" if raw else "an empty text"
        case list():
            return "a list"
        case dict():
            return "a table"
        case datetime.date() | datetime.time() | datetime.datetime():
            return f"the date {raw} (put it in quotes)"
        case _:
            return "this value"


def closest(name: str, known: Iterable[str]) -> str:
    """Return `` Did you mean 'x'?`` (with the blank before it) or nothing."""
    guess = names.suggest(name, list(known))
    return f" Did you mean '{guess}'?" if guess is not None else ""


def listed(items: Collection[str], most: int = 8) -> str:
    """Return names separated by commas, cut after `most`."""
    shown = [short(item, 30) for item in list(items)[:most]]
    return ", ".join(shown) + (f", … ({len(items)} in all)" if len(items) > most else "")


class Table:
    """One table of the file: reads its keys, notes what is wrong, refuses keys that it does not know."""

    def __init__(
        self,
        found: Findings,
        raw: object,
        where: str,
        key: Key,
        allowed: tuple[str, ...],
        *,
        later: tuple[str, ...] = (),
        example: str = "",
    ) -> None:
        self.found, self.where, self.key = found, where, key
        self.is_table = isinstance(raw, dict)
        self.raw: Mapping[str, Any] = raw if isinstance(raw, dict) else {}
        if not isinstance(raw, dict):
            advice = f" Write {example}." if example else ""
            found.add(where, f"expected a table, not {describe(raw)}.{advice}", key)
            return
        for name in self.raw:
            if name in later:
                found.add(self.at(name), "is not supported yet by this version.", (*key, name))
            elif name not in allowed:
                hint = closest(name, allowed) or f" Known here: {listed(allowed, 12)}."
                found.add(where, f"'{short(name)}' is not a key that is known here.{hint}", (*key, name))

    def at(self, name: str) -> str:
        """Return the place of a key in words."""
        return f"{self.where}, {name}" if self.where else name

    def problem(self, name: str, message: str) -> None:
        """Note a problem with a key."""
        self.found.add(self.at(name), message, (*self.key, name))

    def has(self, name: str) -> bool:
        """Return True where the key stands in the file, right or wrong."""
        return name in self.raw

    def text(self, name: str, *, required: str = "", blank: bool = True) -> str | None:
        """Read a text. `required`: what is missing where it is, in words; `blank`: an empty text will do."""
        if name not in self.raw:
            if required and self.is_table:
                self.found.add(self.where, f"{name} is missing. {required}", (*self.key, name))
            return None
        raw = self.raw[name]
        if not isinstance(raw, str):
            self.problem(name, f"expected a text in quotes, not {describe(raw)}.")
            return None
        if not blank and not raw.strip():
            self.problem(name, f"is empty. {required}".rstrip())
            return None
        return raw

    def flag(self, name: str, *, required: str = "") -> bool | None:
        """Read true or false."""
        if name not in self.raw:
            if required and self.is_table:
                self.found.add(self.where, f"{name} is missing. {required}", (*self.key, name))
            return None
        raw = self.raw[name]
        if not isinstance(raw, bool):
            self.problem(name, f"expected true or false (without quotes), not {describe(raw)}.")
            return None
        return raw

    def texts(self, name: str, *, required: str = "", what: str = "a list of texts") -> list[str] | None:
        """Read a list of texts."""
        if name not in self.raw:
            if required and self.is_table:
                self.found.add(self.where, f"{name} is missing. {required}", (*self.key, name))
            return None
        raw = self.raw[name]
        if not isinstance(raw, list):
            hint = f' Write {name} = ["{short(raw)}"].' if isinstance(raw, str) else ""
            self.problem(name, f"expected {what}, not {describe(raw)}.{hint}")
            return None
        for number, item in enumerate(raw, 1):
            if not isinstance(item, str):
                self.problem(name, f"entry {number}: expected a text in quotes, not {describe(item)}.")
                return None
        return list(raw)
