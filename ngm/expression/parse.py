"""Text -> tree, by a tokenizer and a parser of our own.

Nothing is ever evaluated, and no word of any programming language is in the way of a name. The grammar::

    sum      = term { ("+" | "-") term }
    term     = ("+" | "-") term | factor { ("*" | "/") signed }
    signed   = ("+" | "-") signed | factor
    factor   = atom [ ("^" | "**") signed ]
    atom     = number | name | "(" sum ")" | function "(" sum { "," sum } ")"
             | "sum" "(" sum [ "," name ] ")" | matrix "(" sum ")"

Every rule that calls itself goes one level down, and levels are counted: so neither the stack of the parser nor that
of any later walk over the tree can be exhausted by a text.
"""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Collection
from dataclasses import dataclass
from fractions import Fraction
from typing import NoReturn, cast

from ngm.errors import ExpressionError, Problem
from ngm.expression.advice import FOREIGN_FUNCTIONS, advice, quoted
from ngm.expression.decimals import NUMBER, exact_value, magnitude
from ngm.expression.names import NAME, canonical, is_reserved, suggest
from ngm.expression.tree import (
    FUNCTIONS,
    Add,
    Apply,
    Call,
    FunctionName,
    Multiply,
    Name,
    Negate,
    Node,
    Number,
    Power,
    Total,
)

__all__ = ["MOST_CHARACTERS", "MOST_LEVELS", "parse"]

#: Limits of an expression in a scenario.
MOST_CHARACTERS = 10_000
MOST_LEVELS = 50
#: Limits of an expression in a result, which is a program's own text and may be longer.
_MOST_CHARACTERS_OF_ITEMS = 1_000_000
_MOST_LEVELS_OF_ITEMS = 100

_SPACE = re.compile(r"[ \t\r\n\f\v]*")
_OPERATOR = re.compile(r"\*\*|[-+*/^(),]")
_GROUPS = re.compile(r"\[([^\[\]]*)\]")
_UNFINISHED = re.compile(r"[eE][+-]?(?![A-Za-z0-9_])")


@dataclass(frozen=True, slots=True)
class _Token:
    kind: str  # number, name, operator or end
    text: str
    position: int
    groups: tuple[str, ...] = ()

    def is_end(self) -> bool:
        return self.kind == "end"

    @property
    def shown(self) -> str:
        return "the end" if self.is_end() else quoted(self.text)


def parse(
    text: str,
    *,
    where: str = "",
    matrices: Collection[str] | None = frozenset(),
    items: bool = False,
    key: tuple[str | int, ...] = (),
) -> Node:
    """Return the tree of an expression.

    Parameters
    ----------
    text : str
        At most 10,000 characters and 50 levels of parentheses, calls, powers and signs.
    where : str
        The place in the scenario, for the message: ``flow 2 "Infection", rate``.
    matrices : collection of str, or None
        Canonical names of the matrices: ``X(…)`` applies X. None: any name before a parenthesis is a matrix.
    items : bool
        Whether names may carry groups, ``sigma[65+]``, as they do in results and never in scenarios. Such a text may
        have 1,000,000 characters and 100 levels.
    key : tuple of (str or int)
        The path of the field in the scenario file, for the message.

    Returns
    -------
    Node
        Sums and products flat as far as they are written without parentheses; names in their canonical spelling;
        numbers exact.

    Raises
    ------
    ExpressionError
        The first thing that is wrong, with its place.

    Examples
    --------
    >>> parse("-β^2").operand.base.name
    'beta'
    """
    return _Parser(text, where, matrices, items, key).run()


class _Parser:
    """One pass over one text. `token` is the next token; the one before it decides what can be missing."""

    def __init__(
        self, text: str, where: str, matrices: Collection[str] | None, items: bool, key: tuple[str | int, ...]
    ) -> None:
        self.text = text
        self.where = where
        self.matrices = matrices
        self.items = items
        self.key = key
        self.level = 0
        self.most_levels = _MOST_LEVELS_OF_ITEMS if items else MOST_LEVELS
        self.at = 0
        self.before: _Token | None = None

    def run(self) -> Node:
        most = _MOST_CHARACTERS_OF_ITEMS if self.items else MOST_CHARACTERS
        if len(self.text) > most:
            # The text itself is not part of the message: it may have any length.
            message = f"the expression has {len(self.text):,} characters; at most {most:,} are read."
            raise ExpressionError(Problem(self.where, message, key=self.key))
        self.token = self.read()
        if self.token.is_end():
            raise ExpressionError(
                Problem(self.where, "the expression is empty. Write a number or a formula.", key=self.key)
            )
        node = self.sum()
        if not self.token.is_end():
            self.unexpected()
        return node

    # -- errors -------------------------------------------------------------------------------------------------------

    def error(self, position: int, what: str, hint: str = "") -> ExpressionError:
        place = self.place(position)
        message = f"{what} ({place}).{' ' + hint if hint else ''}"
        return ExpressionError(Problem(self.where, message, self.text, position, self.key))

    def place(self, position: int) -> str:
        line = self.text.count("\n", 0, position) + 1
        column = position - self.text.rfind("\n", 0, position)
        return f"line {line}, column {column}" if "\n" in self.text else f"column {column}"

    def unexpected(self) -> NoReturn:
        """Say why the token cannot follow what has been read as a whole expression."""
        token, before = self.token, self.before
        if token.text == ")":
            raise self.error(token.position, "')' closes nothing: no '(' is open", "Remove it, or add the '('.")
        if token.text == ",":
            raise self.error(token.position, "',' stands outside the arguments of a function", self.decimal_comma())
        left, right = (before.shown if before else ""), token.shown
        raise self.error(token.position, f"an operator is missing between {left} and {right}", self.product_hint())

    def product_hint(self) -> str:
        left, right = self.before, self.token
        if left is None or len(left.text) + len(right.text) > 40:
            return "To multiply, write *."
        before = "(…)" if left.text == ")" else left.text
        after = "(…)" if right.text == "(" else right.text
        return f"To multiply, write {before}*{after}."

    def decimal_comma(self) -> str:
        """Return the advice for a comma between two numbers: a decimal comma, most likely."""
        after = NUMBER.match(self.text, self.token.position + 1)
        before = self.before
        if before is None or before.kind != "number" or after is None or len(before.text) + len(after.group()) > 40:
            return ""
        return f"A decimal is written with a point: {before.text}.{after.group()}; digits are not grouped."

    # -- tokens -------------------------------------------------------------------------------------------------------

    def advance(self) -> _Token:
        """Return the next token and read the one after it."""
        token = self.token
        self.before = token
        self.token = self.read()
        return token

    def read(self) -> _Token:
        text = self.text
        space = _SPACE.match(text, self.at)
        start = space.end() if space else self.at
        if start >= len(text):
            self.at = start
            return _Token("end", "", start)
        if found := _OPERATOR.match(text, start):
            self.at = found.end()
            return _Token("operator", found.group(), start)
        if found := NUMBER.match(text, start):
            self.at = found.end()
            self.check_end_of_number(found)
            return _Token("number", found.group(), start)
        if found := NAME.match(text, start):
            self.at = found.end()
            self.check_end_of_name(found.group(), start)
            return _Token("name", found.group(), start, self.read_groups())
        what, hint = advice(text, start)
        raise self.error(start, what, hint)

    def check_end_of_number(self, found: re.Match[str]) -> None:
        text, start, end = self.text, found.start(), found.end()
        after = text[end : end + 1]
        if after == ".":
            stop = end
            while stop < len(text) and (text[stop] in ".+-" or text[stop].isalnum()) and stop < start + 40:
                stop += 1
            raise self.error(start, f"{quoted(text[start:stop])} is not a number", "Write one decimal point: 1.25.")
        if after == "_":
            raise self.error(end, "'_' cannot stand in a number", "Write the digits without it.")
        if found.group("exponent") is None and _UNFINISHED.match(text, end):
            number = quoted(text[start : end + 1])
            hint = f"Write {found.group()}e-3, or to multiply {found.group()}*{after}." if end - start < 20 else ""
            raise self.error(start, f"{number} lacks the digits of its exponent", hint)

    def check_end_of_name(self, name: str, start: int) -> None:
        after = self.text[self.at : self.at + 1]
        if not after or after.isascii() or unicodedata.category(after)[0] not in "LM":
            return
        what, hint = advice(self.text, self.at)
        raise self.error(self.at, what, hint)

    def read_groups(self) -> tuple[str, ...]:
        """Read ``[65+]`` or ``[0-4,North]`` where such names are allowed."""
        if not self.items or self.text[self.at : self.at + 1] != "[":
            return ()
        found = _GROUPS.match(self.text, self.at)
        groups = tuple(found.group(1).split(",")) if found else ()
        if found is None or any(not group.strip() or "'" in group or '"' in group for group in groups):
            raise self.error(self.at, "after '[' the names of groups and a ']' are expected")
        self.at = found.end()
        return groups

    # -- grammar ------------------------------------------------------------------------------------------------------

    def down(self, token: _Token) -> None:
        self.level += 1
        if self.level > self.most_levels:
            raise self.error(
                token.position,
                f"more than {self.most_levels} levels of parentheses, calls, powers and signs",
                "Name a part of it under [definitions].",
            )

    def sum(self) -> Node:
        start = self.token.position
        terms = [(1, self.term())]
        while self.token.text in ("+", "-"):
            sign = 1 if self.advance().text == "+" else -1
            terms.append((sign, self.term()))
        return terms[0][1] if len(terms) == 1 else Add(tuple(terms), start)

    def term(self) -> Node:
        if self.token.text in ("+", "-"):
            return self.sign(whole_term=True)
        start = self.token.position
        factors = [(1, self.factor())]
        while self.token.text in ("*", "/"):
            side = 1 if self.advance().text == "*" else -1
            factors.append((side, self.signed()))
        return factors[0][1] if len(factors) == 1 else Multiply(tuple(factors), start)

    def signed(self) -> Node:
        return self.sign(whole_term=False) if self.token.text in ("+", "-") else self.factor()

    def sign(self, whole_term: bool) -> Node:
        token = self.advance()
        self.down(token)
        operand = self.term() if whole_term else self.signed()
        self.level -= 1
        return operand if token.text == "+" else Negate(operand, token.position)

    def factor(self) -> Node:
        start = self.token.position
        base = self.atom()
        if self.token.text not in ("^", "**"):
            return base
        self.down(self.advance())
        exponent = self.signed()
        self.level -= 1
        return Power(base, exponent, start)

    def atom(self) -> Node:
        token = self.token
        if token.kind == "number":
            self.advance()
            return Number(self.value(token), token.text, token.position)
        if token.kind == "name":
            self.advance()
            if self.token.text == "(":
                return self.applied(token)
            return self.name(token)
        if token.text == "(":
            self.advance()
            self.down(token)
            inner = self.sum()
            self.close(token)
            return inner
        after = f" after {self.before.shown}" if self.before else " at the start"
        found = "nothing" if token.is_end() else token.shown
        raise self.error(token.position, f"expected a number, a name or '('{after}, found {found}")

    def close(self, opened: _Token) -> None:
        """Read the ')' that belongs to an opened '('."""
        token = self.token
        if token.is_end():
            raise self.error(opened.position, "this '(' is not closed", "Add the ')'.")
        if token.text != ")":
            self.unexpected()
        self.advance()
        self.level -= 1

    def name(self, token: _Token) -> Node:
        name = canonical(token.text)
        if name is None or is_reserved(name):
            raise self.error(token.position, f"{token.shown} is the name of a function", f"Write {_usage(token.text)}.")
        return Name(name, token.groups, token.position)

    def value(self, token: _Token) -> Fraction:
        """Return the exact value of a number; its size is known before any large integer is made."""
        size = magnitude(token.text)
        if size is not None and size >= 300:
            raise self.error(token.position, f"{token.shown} is too large", "A number is below 1e300.")
        if size is not None and size < -300:
            raise self.error(token.position, f"{token.shown} is too small", "A number is 0 or at least 1e-300.")
        return exact_value(token.text)

    def applied(self, token: _Token) -> Node:
        """Read what follows a name before '(': a function, a sum over groups, or a matrix."""
        name = canonical(token.text) or ""
        known = is_reserved(name) or self.matrices is None or name in self.matrices
        if token.groups or not known:
            self.no_function(token, name)
        opened = self.advance()
        self.down(opened)
        if self.token.text == ")":
            raise self.error(self.token.position, f"{_usage(name)} needs what stands in the parentheses")
        if name == "sum":
            return self.total(token, opened)
        arguments = [self.sum()]
        wanted = FUNCTIONS.get(name, 1)
        hint = self.decimal_comma() if self.token.text == "," else ""
        while self.token.text == ",":
            self.advance()
            arguments.append(self.sum())
        self.close(opened)
        if len(arguments) != wanted:
            words = f"takes {'one argument' if wanted == 1 else 'two arguments'}, found {len(arguments)}"
            if wanted == 2 and len(arguments) > 2:
                hint = f"Nest it: {name}(x, {name}(y, z))."
            raise self.error(token.position, f"{name} {words}", hint)
        if name in FUNCTIONS:
            return Call(cast(FunctionName, name), tuple(arguments), token.position)
        return Apply(name, arguments[0], token.position)

    def total(self, token: _Token, opened: _Token) -> Node:
        operand = self.sum()
        dimension: str | None = None
        if self.token.text == ",":
            self.advance()
            named = self.token
            dimension = canonical(named.text) if named.kind == "name" and not named.groups else None
            if dimension is None or is_reserved(dimension):
                raise self.error(named.position, "the second argument of sum is the name of a dimension: sum(x, age)")
            self.advance()
            if self.token.text not in (")", ""):
                raise self.error(self.token.position, "after the dimension in sum(x, age) a ')' is expected")
        self.close(opened)
        return Total(operand, dimension, token.position)

    def no_function(self, token: _Token, name: str) -> NoReturn:
        shown = token.shown
        if name in FOREIGN_FUNCTIONS:
            raise self.error(token.position, f"{shown} is not a function or matrix", FOREIGN_FUNCTIONS[name])
        meant = suggest(name, [*FUNCTIONS, "sum", *sorted(self.matrices or ())])
        hint = f"Did you mean {quoted(meant)}? " if meant else ""
        typed = token.text if len(token.text) <= 40 else "…"
        raise self.error(
            token.position, f"{shown} is not a function or matrix", f"{hint}To multiply, write {typed}*(…)."
        )


def _usage(name: str) -> str:
    """Return how a function or matrix is written: ``max(x, y)``."""
    return f"{name}(x, y)" if FUNCTIONS.get(name) == 2 else f"{name}(x)"
