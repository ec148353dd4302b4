"""A second route from a scenario's text to F and V: explicit loops over groups, slopes by differences in 50 digits.

Nothing of the package is used: its own small reader of expressions, every rate evaluated with the infected
compartments moved a little to either side, every flow sorted into F or V as the scenario format says.
"""

from __future__ import annotations

import itertools
import re
import tomllib
from collections.abc import Mapping
from math import prod
from typing import Any

import mpmath as mp
import numpy as np

mp.mp.dps = 50
STEP = mp.mpf(10) ** -14
#: slopes smaller than this are rounding
NOTHING = mp.mpf(10) ** -24
_TOKEN = re.compile(
    r"\s*(?:(\d+\.?\d*(?:[eE][+-]?\d+)?|\.\d+(?:[eE][+-]?\d+)?)|([^\W\d_]\w*(?:\[[^\]]*\])?)|(\*\*|[-+*/^(),]))"
)
_GREEK = {"β": "beta", "γ": "gamma", "μ": "mu", "\u00b5": "mu", "\u03f5": "epsilon", "Σ": "Sigma", "Ι": "Iota"}

Copy = tuple[str, tuple[str, ...]]
Node = tuple[Any, ...]


def spelt(text: str) -> str:
    return "".join(_GREEK.get(letter, letter) for letter in text)


class Reader:
    """Recursive descent: sums, products, signs, powers (to the right, tighter than a sign on their left)."""

    def __init__(self, text: str) -> None:
        self.tokens: list[str] = []
        text = text.rstrip()
        at = 0
        while at < len(text):
            found = _TOKEN.match(text, at)
            assert found is not None, text[at:]
            self.tokens.append(found.group().strip())
            at = found.end()
        self.at = 0

    def next(self, *wanted: str) -> str | None:
        if self.at < len(self.tokens) and (not wanted or self.tokens[self.at] in wanted):
            self.at += 1
            return self.tokens[self.at - 1]
        return None

    def read(self) -> Node:
        node = self.sums()
        assert self.at == len(self.tokens), self.tokens
        return node

    def sums(self) -> Node:
        node = self.products()
        while (sign := self.next("+", "-")) is not None:
            node = (sign, node, self.products())
        return node

    def products(self) -> Node:
        node = self.signs()
        while (sign := self.next("*", "/")) is not None:
            node = (sign, node, self.signs())
        return node

    def signs(self) -> Node:
        if self.next("-"):
            return ("neg", self.signs())
        return self.signs() if self.next("+") else self.powers()

    def powers(self) -> Node:
        base = self.atom()
        return ("^", base, self.signs()) if self.next("^", "**") else base

    def atom(self) -> Node:
        if self.next("("):
            node = self.sums()
            assert self.next(")")
            return node
        token = self.next()
        assert token is not None
        if token[0].isdigit() or token[0] == ".":
            return ("number", token)
        head, bracket, groups = token.partition("[")
        if not self.next("("):
            return ("name", spelt(head) + bracket + groups)
        arguments = [self.sums()]
        while self.next(","):
            arguments.append(self.sums())
        assert self.next(")")
        return ("call", spelt(head), arguments)


_READ: dict[str, Node] = {}


def read(text: str) -> Node:
    if text not in _READ:
        _READ[text] = Reader(text).read()
    return _READ[text]


class Values:
    """Numbers over the groups: one axis for each dimension of the file, of length 1 where it does not vary."""

    def __init__(self, array: Any, over: Any = ()) -> None:
        self.array, self.over = np.asarray(array, dtype=object), frozenset(over)


def each(function: Any, *values: Values) -> Values:
    over = frozenset().union(*(v.over for v in values))
    return Values(np.frompyfunc(function, len(values), 1)(*(v.array for v in values)), over)


_FUNCTIONS = {"exp": mp.exp, "log": mp.log, "sqrt": mp.sqrt, "max": max, "min": min}
_SIGNS = {
    "+": lambda a, b: a + b,
    "-": lambda a, b: a - b,
    "*": lambda a, b: a * b,
    "/": lambda a, b: a / b,
    "^": lambda a, b: a ** int(b) if b == int(b) else mp.power(a, b),
}


class Route:
    """The model at its values. `factors`: what the unit of a parameter multiplies it by, worked out by hand."""

    def __init__(self, text: str, factors: Mapping[str, str], others: Mapping[str, float] | None = None) -> None:
        data = tomllib.loads(text, parse_float=mp.mpf)
        self.groups: dict[str, list[str]] = data.get("dimensions", {})
        self.dims = list(self.groups)
        self.compartments = {spelt(k): v for k, v in data["compartments"].items()}
        self.parameters = {spelt(k): v for k, v in data.get("parameters", {}).items()}
        self.definitions = {spelt(k): v for k, v in data.get("definitions", {}).items()}
        self.matrices = data.get("matrices", {})
        self.flows, self.movements = data["flow"], data.get("movement", [])
        self.free = {spelt(k): v for k, v in data.get("infection_free", {}).items()}
        self.factors = {name: self.number(factor) for name, factor in factors.items()}
        self.others = dict(others or {})
        copies = {name: [(name, g) for g in self.copies(v.get("by", []))] for name, v in self.compartments.items()}
        self.types = [c for name, v in self.compartments.items() if v["infected"] for c in copies[name]]
        self.uninfected = [c for name, v in self.compartments.items() if not v["infected"] for c in copies[name]]
        self.balanced: dict[str, list[Any]] = {}
        self.state: dict[Copy, Any] = {}

    def copies(self, by: list[str]) -> list[tuple[str, ...]]:
        return list(itertools.product(*(self.groups[d] for d in by)))

    @staticmethod
    def label(copy: Copy) -> str:
        return copy[0] if not copy[1] else f"{copy[0]}[{','.join(copy[1])}]"

    def number(self, text: Any) -> Any:
        if isinstance(text, str):
            return self.value(read(text), {}).array.item()
        return mp.mpf(repr(text)) if isinstance(text, float) else mp.mpf(text)

    def spread(self, by: list[str], flat: list[Any]) -> Values:
        """Lay values in the order of `by` out along the dimensions of the file."""
        array = np.empty(len(flat), dtype=object)
        array[:] = flat
        array = array.reshape([len(self.groups[d]) for d in by])
        array = array.transpose(sorted(range(len(by)), key=lambda k: self.dims.index(by[k])))
        return Values(array.reshape([len(self.groups[d]) if d in by else 1 for d in self.dims]), by)

    def flat(self, value: Any, by: list[str]) -> list[Any]:
        if not isinstance(value, list):
            return [value] * prod(len(self.groups[d]) for d in by)
        for _ in by[1:]:
            value = [inner for item in value for inner in item]
        return list(value)

    def pick(self, values: Values, by: list[str], groups: tuple[str, ...]) -> Any:
        return values.array[
            tuple(self.groups[d].index(groups[by.index(d)]) if d in values.over else 0 for d in self.dims)
        ]

    def parameter(self, name: str, memo: dict[Any, Values]) -> Values:
        if ("parameter", name) not in memo:
            entry = self.parameters[name]
            by = entry.get("by", [])
            numbers = []
            for raw, groups in zip(self.flat(self.others.get(name, entry["value"]), by), self.copies(by), strict=True):
                own = self.pick(self.value(read(raw), memo), by, groups) if isinstance(raw, str) else self.number(raw)
                numbers.append(own * self.factors.get(name, 1))
            memo["parameter", name] = self.spread(by, numbers)
        return memo["parameter", name]

    def value(self, node: Node, memo: dict[Any, Any]) -> Values:
        match node:
            case ("number", text):
                return Values(np.full([1] * len(self.dims), mp.mpf(text)))
            case ("name", name):
                return self.named(name, memo)
            case ("neg", inner):
                return each(lambda a: -a, self.value(inner, memo))
            case ("call", "sum", arguments):
                inner = self.value(arguments[0], memo)
                gone = [arguments[1][1]] if len(arguments) > 1 else list(inner.over)
                array = inner.array
                for d in gone:
                    array = array.sum(axis=self.dims.index(d), keepdims=True)
                return Values(array, inner.over - set(gone))
            case ("call", name, arguments) if name in self.matrices:
                return self.applied(name, self.value(arguments[0], memo))
            case ("call", name, arguments):
                return each(_FUNCTIONS[name], *(self.value(a, memo) for a in arguments))
            case (sign, left, right):
                return each(_SIGNS[sign], self.value(left, memo), self.value(right, memo))
        raise AssertionError(node)

    def named(self, name: str, memo: dict[Any, Any]) -> Values:
        head, bracket, groups = name.rstrip("]").partition("[")
        if ("own", name) in memo:
            return memo["own", name]
        if bracket and head in self.matrices:
            i, j, *rest = groups.split(",")
            by, within = self.matrices[head]["by"], self.matrices[head].get("within")
            block = self.blocks(head)[self.groups[within].index(rest[0]) if within else 0]
            return Values(np.full([1] * len(self.dims), block[self.groups[by].index(i)][self.groups[by].index(j)]))
        if bracket:
            entry = self.compartments.get(head) or self.parameters[head]
            own = self.pick(self.named(head, memo), entry["by"], tuple(groups.split(",")))
            return Values(np.full([1] * len(self.dims), own))
        if name in self.compartments:
            by = self.compartments[name].get("by", [])
            return self.spread(by, [self.state[name, g] for g in self.copies(by)])
        if name in self.parameters:
            return self.parameter(name, memo)
        if ("definition", name) not in memo:
            memo["definition", name] = self.value(read(self.definitions[name]), memo)
        return memo["definition", name]

    def blocks(self, name: str) -> list[Any]:
        if name in self.balanced:
            return self.balanced[name]
        values = self.matrices[name]["values"]
        return values if "within" in self.matrices[name] else [values]

    def applied(self, name: str, inner: Values) -> Values:
        by, within = self.matrices[name]["by"], self.matrices[name].get("within")
        over = inner.over | {by} | ({within} if within else set())
        shape = [len(self.groups[d]) if d in over else 1 for d in self.dims]
        array, axis = np.broadcast_to(inner.array, shape), self.dims.index(by)
        out = np.empty(shape, dtype=object)
        for at in itertools.product(*map(range, shape)):
            row = self.blocks(name)[at[self.dims.index(within)] if within else 0][at[axis]]
            out[at] = sum(mp.mpf(row[j]) * array[(*at[:axis], j, *at[axis + 1 :])] for j in range(shape[axis]))
        return Values(out, over)

    def balance(self, name: str) -> None:
        """Replace both sides of a reciprocal matrix by their mean, weighted by the sizes."""
        by, within = self.matrices[name]["by"], self.matrices[name].get("within")
        sizes = self.value(read(self.matrices[name]["population"]), {})
        out = []
        for w, block in enumerate(self.blocks(name)):
            at = [tuple(i if d == by else w if d == within else 0 for d in self.dims) for i in range(len(block))]
            N = [np.broadcast_to(sizes.array, [max(k, 1) for k in self._shape(sizes, by, within)])[a] for a in at]
            out.append(
                [
                    [(mp.mpf(block[i][j]) * N[i] + mp.mpf(block[j][i]) * N[j]) / (2 * N[i]) for j in range(len(N))]
                    for i in range(len(N))
                ]
            )
        self.balanced[name] = out

    def _shape(self, sizes: Values, by: str, within: str | None) -> list[int]:
        return [
            len(self.groups[d]) if d in (by, within) else size
            for d, size in zip(self.dims, sizes.array.shape, strict=True)
        ]

    def rates(self, state: dict[Copy, Any]) -> list[tuple[Copy | None, Copy | None, str, Any]]:
        """Return every copy of every flow and movement: from, to, kind, number per time unit."""
        self.state = state
        memo: dict[Any, Any] = {}
        out: list[tuple[Copy | None, Copy | None, str, Any]] = []
        for flow in self.flows:
            ends = [spelt(flow[end]) if end in flow else None for end in ("from", "to")]
            over = [d for d in self.dims if any(e and d in self.compartments[e].get("by", []) for e in ends)]
            shape = [len(self.groups[d]) if d in over else 1 for d in self.dims]
            rate = np.broadcast_to(self.value(read(flow["rate"]), memo).array, shape)
            for at in itertools.product(*map(range, shape)):
                here = {d: self.groups[d][k] for d, k in zip(self.dims, at, strict=True)}
                copy = [e and (e, tuple(here[d] for d in self.compartments[e].get("by", []))) for e in ends]
                out.append((copy[0] or None, copy[1] or None, flow["kind"], rate[at]))
        for movement in self.movements:
            by, within = (self.matrices[movement["matrix"]].get(key) for key in ("by", "within"))
            for name in movement["of"]:
                own = self.compartments[name]["by"]
                for groups in self.copies(own):
                    block = self.blocks(movement["matrix"])[
                        self.groups[within].index(groups[own.index(within)]) if within else 0
                    ]
                    i = self.groups[by].index(groups[own.index(by)])
                    for j, label in enumerate(self.groups[by]):
                        to = tuple(label if d == by else g for d, g in zip(own, groups, strict=True))
                        if j != i:
                            out.append(((name, groups), (name, to), "", mp.mpf(block[i][j]) * state[name, groups]))
        return out

    def at(self, told: Mapping[str, float]) -> tuple[Any, Any]:
        """Return F and V at the infection-free state: as the file gives it, else as told."""
        self.state = {copy: mp.mpf(0) for copy in self.types}
        self.state |= {copy: mp.mpf(told[self.label(copy)]) for copy in self.uninfected}
        for _ in self.free:
            for name, raw in self.free.items():
                by = self.compartments[name].get("by", [])
                for item, groups in zip(self.flat(raw, by), self.copies(by), strict=True):
                    own = self.pick(self.value(read(item), {}), by, groups) if isinstance(item, str) else mp.mpf(item)
                    self.state[name, groups] = own
        for name, matrix in self.matrices.items():
            if matrix.get("reciprocal"):
                self.balance(name)
        base = dict(self.state)
        place = {copy: k for k, copy in enumerate(self.types)}
        F, V = mp.zeros(len(place), len(place)), mp.zeros(len(place), len(place))
        for copy, j in place.items():
            more, less = (self.rates({**base, copy: base[copy] + sign * STEP}) for sign in (1, -1))
            for (source, target, kind, a), (*_, b) in zip(more, less, strict=True):
                slope = (a - b) / (2 * STEP)
                if abs(slope) < NOTHING:
                    continue
                if source in place:
                    V[place[source], j] += slope
                if target in place and kind == "transmission":
                    F[place[target], j] += slope
                elif target in place:
                    V[place[target], j] -= slope
        self.state = base
        return F, V

    def text_value(self, text: str, own: Mapping[str, Any] | None = None) -> Any:
        """Return the value of a text of results, whose names may carry groups."""
        memo: dict[Any, Any] = {
            ("own", name): Values(np.full([1] * len(self.dims), value)) for name, value in (own or {}).items()
        }
        value = self.value(read(text), memo).array
        assert value.size == 1, text
        return value.item()
