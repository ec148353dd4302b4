"""Units as vectors of powers: what a word counts, products, and the text of a unit."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

__all__ = [
    "EVENTS",
    "HOSTS",
    "INDIVIDUAL",
    "MEASURES",
    "UNKNOWN",
    "Powers",
    "UnitCheck",
    "UnitFinding",
    "is_known",
    "singular",
    "times",
    "words_of",
]

Powers = dict[str, Fraction]

INDIVIDUAL = "individual"
HOSTS = {"individual", "person", "people", "human", "host", "head"}
EVENTS = {"bite", "contact", "infection", "event", "case", "meal", "visit", "partnership", "encounter"}
MEASURES = {
    *(
        "litre",
        "liter",
        "l",
        "ml",
        "dl",
        "m",
        "cm",
        "mm",
        "km",
        "metre",
        "meter",
        "ha",
        "hectare",
        "g",
        "kg",
        "mg",
        "tonne",
    ),
    *("germ", "cell", "copy", "copies", "virion", "spore", "egg", "particle", "cfu", "pfu", "dose", "unit", "degree"),
}
#: Begins the name of an unknown: no word of a unit does.
UNKNOWN = "?"


@dataclass(frozen=True, slots=True)
class UnitFinding:
    """One thing about the units that does not fit, or that cannot be decided.

    `kind`: "sum" (terms of different units are added), "flow", "follows" (a value that follows others), "state", "argument"
    (of exp, log or a power), "matrix", "entry" (of a matrix that stands in the file), "K", or "missing" (a parameter
    without a unit where one decides). `key`: the field in the file.
    """

    kind: str
    where: str
    message: str
    key: tuple[str | int, ...] = ()

    def __str__(self) -> str:
        return f"{self.where}: {self.message}"


@dataclass(frozen=True, slots=True)
class UnitCheck:
    """What `check_units` found.

    `findings`: in the order of the file. `implied`: parameter without a unit -> the unit that the flows need ("1" for a
    pure number). `expressions`: definition or flow -> its unit; None where it cannot be told. `given`: whether the
    file gives any unit at all.
    """

    findings: tuple[UnitFinding, ...]
    implied: Mapping[str, str]
    expressions: Mapping[str, str | None]
    given: bool


def times(a: Powers, b: Powers, power: Fraction = Fraction(1)) -> Powers:
    """Return the unit a * b^power."""
    out = dict(a)
    for word, own in b.items():
        out[word] = out.get(word, Fraction(0)) + power * own
    return {word: own for word, own in out.items() if own}


def is_known(powers: Powers) -> bool:
    """Return whether no unknown stands in a unit."""
    return not any(word.startswith(UNKNOWN) for word in powers)


def words_of(powers: Powers) -> str:
    """Return a unit as text: ``1/(day*individual)``."""
    above = [_power(word, power) for word, power in sorted(powers.items()) if power > 0]
    below = [_power(word, -power) for word, power in sorted(powers.items()) if power < 0]
    head = "*".join(above) or "1"
    if not below:
        return head
    return f"{head}/{below[0]}" if len(below) == 1 else f"{head}/({'*'.join(below)})"


def _power(word: str, power: Fraction) -> str:
    word = word.removeprefix(UNKNOWN)
    if power == 1:
        return word
    return f"{word}^{power}" if power.denominator == 1 else f"{word}^({power})"


def singular(word: str) -> str:
    """Return a word without the s of a plural."""
    return word[:-1] if len(word) > 3 and word.endswith("s") and not word.endswith("ss") else word
