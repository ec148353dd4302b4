"""Units as typed: ``1/day``, ``per person per week``, ``%``, or a remark in words.

A unit is a product of powers of words. Units of time are known by their length; every other word stands for itself.
A number given in another unit of time than the scenario's, or in per cent, is converted by an exact factor.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass
from decimal import Decimal, InvalidOperation
from fractions import Fraction
from functools import lru_cache

from ngm.scenario.model import Unit

__all__ = ["UnitReading", "is_share_of_another_step", "is_word", "read_unit", "time_unit_name"]

_DAY = Fraction(86_400)
#: the units of time and their length in seconds
SECONDS: dict[str, Fraction] = {
    "second": Fraction(1),
    "minute": Fraction(60),
    "hour": Fraction(3600),
    "day": _DAY,
    "week": 7 * _DAY,
    "month": _DAY * Fraction("30.4375"),
    "year": _DAY * Fraction("365.25"),
}
_SHORT = {"s": "second", "min": "minute", "h": "hour", "d": "day", "wk": "week", "yr": "year"}
#: abbreviations that people write and that are units of their own here: worth a warning
_LOOKALIKE = {
    "sec": "s",
    "secs": "s",
    "mins": "min",
    "hr": "h",
    "hrs": "h",
    "wks": "wk",
    "mo": "month",
    "mth": "month",
    "yrs": "yr",
    "y": "yr",
}
_ADJECTIVES = {"daily", "weekly", "monthly", "yearly", "hourly", "annual", "annually"}

_TOKEN = re.compile(
    r"\s*(?:(?P<word>[^\W\d_]\w*)|(?P<number>(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?(?![\w.]))|(?P<sign>[%*/^()-]))"
)
_WORD = re.compile(r"[^\W\d_]+")
_MOST_CHARACTERS = 300
_MOST_POWER = 20


def time_unit_name(word: str) -> str | None:
    """Return the unit of time that a word names, in the singular (``"days"``, ``"d"``: ``"day"``); None for no unit."""
    if word in _SHORT:
        return _SHORT[word]
    lower = word.lower()
    if lower in SECONDS:
        return lower
    return lower[:-1] if lower.endswith("s") and lower[:-1] in SECONDS else None


def is_word(text: str) -> bool:
    """Return True where the text is one word, and so a unit of its own where it is no known one."""
    return re.fullmatch(r"[^\W\d_]\w*", text) is not None and text != "per"


@dataclass(frozen=True, slots=True)
class UnitReading:
    """What the text of a unit says.

    `converts`: the word that makes a conversion necessary (``"%"`` or another unit of time than the scenario's), or
    None. `refusal`: why such a unit cannot stand in this scenario, or None. `warning`: a doubt worth telling, or None.
    """

    unit: Unit
    converts: str | None = None
    refusal: str | None = None
    warning: str | None = None


@lru_cache(maxsize=1024)
def read_unit(text: str, time_unit: str) -> UnitReading:
    """Read a unit.

    Parameters
    ----------
    text : str
        As typed: factors joined by ``*``, ``-`` or a space; ``/`` or ``per`` before the one factor that it divides by;
        parentheses; powers ``^n`` with a whole n. A text that is none, or that holds a number other than 1, is a
        remark: no powers, factor 1.
    time_unit : str
        The scenario's unit of time; where it is none of the known ones, other units of time are refused.

    Returns
    -------
    UnitReading
        `unit.factor` times a number in this unit is the number in the scenario's units, exactly.

    Examples
    --------
    >>> read_unit("1/week", "day").unit.factor
    Fraction(1, 7)
    >>> read_unit("cases per 1000", "day").unit.powers is None
    True
    """
    try:
        powers, doubt = _Reader(text).read()
    except _NoUnitError:
        word = next((word for word in _WORD.findall(text) if time_unit_name(word) or word.lower() in _ADJECTIVES), None)
        warning = None
        if word is not None:
            warning = (
                f"'{text}' is kept as a remark and converts nothing, though it speaks of time ({word}). "
                f"A unit reads like 1/{time_unit}, person*{time_unit} or %."
            )
        return UnitReading(Unit(text, None), warning=warning)
    home = time_unit_name(time_unit)
    factor = Fraction(1)
    converts: str | None = None
    refusal: str | None = None
    shown: dict[str, Fraction] = {}
    for word, power in powers.items():
        if not power:
            continue
        if word == "%":
            factor *= Fraction(1, 100) ** power
            converts = converts or "%"
            continue
        shown[word] = Fraction(power)
        if word not in SECONDS or word == home:
            continue
        if home is None:
            if word != time_unit:
                refusal = (
                    f"'{text}' holds the {word}, which cannot be converted: "
                    f'time_unit = "{time_unit}" is no unit of time of known length. Write 1/{time_unit}.'
                )
            continue
        converts = converts or word
        factor *= (SECONDS[word] / SECONDS[home]) ** power
    return UnitReading(Unit(text, shown, factor), converts, refusal, doubt)


def is_share_of_another_step(unit: Unit, time_unit: str) -> bool:
    """Return whether a unit says "share, or chance, per time" with another unit of time than the step's.

    A number of members or of events per time (``person/day``, ``contacts/day``) adds up over the days of a week, and is
    converted; what is left over of a group does not.

    Examples
    --------
    >>> is_share_of_another_step(read_unit("1/day", "week").unit, "week")
    True
    >>> is_share_of_another_step(read_unit("person/day", "week").unit, "week")
    False
    """
    powers = {word: power for word, power in (unit.powers or {}).items() if power}
    home = time_unit_name(time_unit) or time_unit
    other = [word for word in powers if word in SECONDS and word != home]
    return any(powers[word] < 0 for word in other) and not any(power > 0 for power in powers.values())


class _NoUnitError(Exception):
    """The text is no unit."""


def _is_one(number: str) -> bool:
    """Return whether a number is 1. Decimals work out no power: 1e-999999999 has that many digits as a fraction."""
    try:
        return Decimal(number) == 1
    except InvalidOperation:
        return False


class _Reader:
    """Recursive descent over the few tokens of a unit; depth is bounded by the length of the text."""

    def __init__(self, text: str) -> None:
        if len(text) > _MOST_CHARACTERS:
            raise _NoUnitError
        self.tokens = list(_tokens(text))
        self.at = 0
        self.doubt: str | None = None

    def peek(self) -> str:
        return self.tokens[self.at] if self.at < len(self.tokens) else ""

    def take(self) -> str:
        token = self.peek()
        self.at += 1
        return token

    def read(self) -> tuple[dict[str, int], str | None]:
        if not self.tokens:
            raise _NoUnitError
        powers = self.product(0)
        if self.peek() or any(abs(power) > _MOST_POWER for power in powers.values()):
            raise _NoUnitError
        return powers, self.doubt

    def product(self, depth: int) -> dict[str, int]:
        """Read factors until the text or the parentheses end."""
        powers: dict[str, int] = {}
        sign, divided, joint = 1, False, ""
        if self.peek() in ("/", "per"):
            self.take()
            sign = -1
        while True:
            factor = self.factor(depth, first=joint in ("", "*") and sign == 1)
            if divided and sign == 1 and joint in ("-", " ") and any(word in SECONDS for word in factor):
                self.doubt = (
                    "'per' and '/' divide by one factor only: the unit of time after it multiplies. "
                    "Write 1/(person*year) for 'per person-year'."
                )
            divided = sign == -1
            for word, power in factor.items():
                powers[word] = powers.get(word, 0) + sign * power
            token = self.peek()
            if token in ("", ")"):
                return powers
            if token in ("/", "per"):
                sign, joint = -1, self.take()
            elif token in ("*", "-"):
                sign, joint = 1, self.take()
            else:
                sign, joint = 1, " "

    def factor(self, depth: int, *, first: bool) -> dict[str, int]:
        token = self.take()
        if token == "(" and depth < 10:
            inner = self.product(depth + 1)
            if self.take() != ")":
                raise _NoUnitError
        elif token == "%":
            inner = {"%": 1}
        elif token[:1].isdigit() or token[:1] == ".":
            # "day-1" and "day 1" mean 1/day where a raised -1 was lost: no unit, rather than the wrong one
            if not _is_one(token) or not first:
                raise _NoUnitError
            inner = {}
        elif token[:1].isalpha() and token != "per":
            name = time_unit_name(token)
            if name is None and token in _LOOKALIKE:
                self.doubt = f"'{token}' is a unit of its own here. For the unit of time write '{_LOOKALIKE[token]}'."
            inner = {name or token: 1}
        else:
            raise _NoUnitError
        power = self.power()
        return {word: own * power for word, own in inner.items()}

    def power(self) -> int:
        if self.peek() != "^":
            return 1
        self.take()
        sign = 1
        if self.peek() == "-":
            self.take()
            sign = -1
        token = self.take()
        if not token.isdecimal() or len(token) > 2:
            raise _NoUnitError
        return sign * int(token)


def _tokens(text: str) -> Iterator[str]:
    position = 0
    text = text.rstrip()
    while position < len(text):
        match = _TOKEN.match(text, position)
        if match is None:
            raise _NoUnitError
        yield match.group("word") or match.group("number") or match.group("sign")
        position = match.end()
