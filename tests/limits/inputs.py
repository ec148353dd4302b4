"""Inputs at each limit of the scenario format and just past it, written here from the format's own numbers."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

from ngm.scenario.file import load, loads

__all__ = ["LIMITS", "SMALL", "Limit", "nodes"]

SMALL = """[scenario]
title = "Small"
time_unit = "day"
[compartments]
S = { infected = false }
I = { infected = true }
[parameters]
b = { value = 0.3 }
g = { value = 0.1 }
[definitions]
N = "S + I"
[[flow]]
from = "S"
to = "I"
rate = "b*S*I"
kind = "transmission"
[[flow]]
from = "I"
rate = "g*I"
kind = "transition"
[infection_free]
S = 10
"""

Limit = tuple[str, Callable[[Path], object], Callable[[Path], object], str]


def _rate(rate: str) -> str:
    return SMALL.replace("g*I", rate)


def _nested(levels: int) -> dict[str, str]:
    """Return a rate with so many levels of each sort, all in one."""
    return {
        "parentheses": "(" * levels + "g" + ")" * levels + "*I",
        "calls": "sqrt(" * levels + "g" + ")" * levels + "*I",
        "powers": "1^" * levels + "1*g*I",
        "signs": "I*g*" + "+" * levels + "1",
    }


def _definitions(depth: int) -> str:
    """Return a model with definitions that need each other, so many deep; N does not count, it needs none."""
    lines = ['d1 = "g"', *(f'd{k} = "d{k - 1}"' for k in range(2, depth + 1))]
    return _rate(f"d{depth}*I").replace('N = "S + I"', "\n".join(lines))


def nodes(terms: int) -> str:
    """Return a model with ten definitions of 999 nodes each (a sum of 998 terms), named in a rate of so many terms."""
    sums = "\n".join(f'd{k} = "{"+".join(["g"] * 998)}"' for k in range(10))
    rate = "(" + " + ".join(f"d{k % 10}" for k in range(terms)) + ")*I"
    return _rate(rate).replace('N = "S + I"', sums)


def _groups(number: int, infected: int = 1) -> str:
    """Return a model with so many groups, and so many infected compartments in each."""
    labels = ",".join(f'"{k}"' for k in range(number))
    text = SMALL.replace("[compartments]", f"[dimensions]\ntown = [{labels}]\n[compartments]")
    text = text.replace("S = { infected = false", 'S = { infected = false, by = ["town"]')
    copies = "\n".join(
        f'{name} = {{ infected = true, by = ["town"] }}' for name in ["I", *(f"J{k}" for k in range(1, infected))]
    )
    return text.replace("I = { infected = true }", copies)


def _filled(size: int) -> str:
    """Return a scenario of so many bytes, most of them a comment."""
    return SMALL + "#" + "x" * (size - len(SMALL) - 1)


def _matrix(folder: Path, size: int) -> object:
    """Return what a scenario with a matrix file of so many bytes loads as."""
    rows = "1," + "0" * 100_000 + "2\n3,4\n"
    blanks, rest = divmod(size - len(rows), 100_001)
    (folder / "m.csv").write_text(rows + (" " * 100_000 + "\n") * blanks + " " * rest, encoding="ascii")
    text = _groups(2).replace("[definitions]", '[matrices.C]\nby = "town"\nfile = "m.csv"\n[definitions]')
    (folder / "m.toml").write_text(text, encoding="utf-8")
    return load(folder / "m.toml")


def _file(folder: Path, size: int) -> object:
    (folder / "s.toml").write_text(_filled(size), encoding="utf-8")
    return load(folder / "s.toml")


def _number(place: str, number: str) -> str:
    """Return a model with a number somewhere."""
    return {
        "value": SMALL.replace("value = 0.3", f"value = {number}"),
        "negative value": SMALL.replace("value = 0.3", f'value = -{number}, sign = "any"'),
        "value as text": SMALL.replace("value = 0.3", f'value = "{number}"'),
        "end of a range": SMALL.replace("value = 0.3", f"value = 0.3, range = [0, {number}]"),
        "expression": _rate(f"g*I*({number}*0)"),
        "state": SMALL.replace("S = 10", f"S = {number}"),
        "cost": SMALL + f'[[intervention]]\nname = "m"\ncost = {number}\nchange = [{{ parameter = "b", set = 1 }}]\n',
        "change": SMALL + f'[[intervention]]\nname = "m"\nchange = [{{ parameter = "b", set = {number} }}]\n',
        "matrix": _groups(2).replace(
            "[definitions]", f'[matrices.C]\nby = "town"\nvalues = [[1, {number}], [1, 1]]\n[definitions]'
        ),
    }[place]


#: What, how to read it at the limit, how past it, and a part of the refusal.
LIMITS: list[Limit] = [
    ("a file of 16 MB", lambda f: _file(f, 16_000_000), lambda f: _file(f, 16_000_001), "16 MB"),
    ("a text of 16 MB", lambda f: loads(_filled(16_000_000)), lambda f: loads(_filled(16_000_001)), "16 MB"),
    ("a matrix file of 64 MB", lambda f: _matrix(f, 64_000_000), lambda f: _matrix(f, 64_000_001), "64 MB"),
    (
        "an expression of 10,000 characters",
        lambda f: loads(_rate("g*I" + " " * 9_997)),
        lambda f: loads(_rate("g*I" + " " * 9_998)),
        "10,001 characters; at most 10,000",
    ),
    *(
        (
            f"50 levels of {what}",
            lambda f, what=what: loads(_rate(_nested(50)[what])),
            lambda f, what=what: loads(_rate(_nested(51)[what])),
            "more than 50 levels",
        )
        for what in ("parentheses", "calls", "powers", "signs")
    ),
    (
        "definitions 50 deep",
        lambda f: loads(_definitions(50)),
        lambda f: loads(_definitions(51)),
        "needs more than 50 definitions within each other",
    ),
    (
        "100,000 nodes when written out",
        lambda f: loads(nodes(100)),
        lambda f: loads(nodes(101)),
        "more than 100,000 names, numbers and operations",
    ),
    *(
        (
            f"a number of 1e300 as {place}",
            lambda f, place=place: loads(_number(place, "9.999e299")),
            lambda f, place=place: loads(_number(place, "1e300")),
            "1e300",
        )
        for place in (
            *("value", "negative value", "value as text", "end of a range", "expression", "state", "cost", "change"),
            "matrix",
        )
    ),
    ("200,000 groups", lambda f: loads(_groups(200_000)), lambda f: loads(_groups(200_001)), "at most 200,000 types"),
    (
        "200,000 types of two compartments",
        lambda f: loads(_groups(100_000, 2)),
        lambda f: loads(_groups(100_001, 2)),
        "at most 200,000",
    ),
]
