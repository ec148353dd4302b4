"""Hypothesis strategies for expressions, one for each kind of node; a test sees that no kind is left out."""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from typing import get_args

from hypothesis import strategies as st

from ngm.expression.names import is_reserved
from ngm.expression.tree import (
    FUNCTIONS,
    Add,
    Apply,
    Call,
    Multiply,
    Name,
    Negate,
    Node,
    Number,
    Power,
    Total,
)

Nodes = st.SearchStrategy[Node]

#: Names of every sort: those that mean something to Python or to a computer algebra system above all.
AWKWARD_NAMES = ["S", "I", "E", "N", "O", "Q", "C", "beta", "gamma", "zeta", "lambda", "Lambda", "pi", "in", "if"]
AWKWARD_NAMES += ["is", "x", "t", "None", "True", "import", "def", "class", "exec", "eval", "oo", "zoo", "nan", "re"]
AWKWARD_NAMES += ["im", "Max", "Symbol", "e", "E1", "e1", "d_e", "sigma_2_", "a0"]

names = st.one_of(
    st.sampled_from(AWKWARD_NAMES),
    st.from_regex(r"[A-Za-z][A-Za-z0-9_]{0,6}", fullmatch=True).filter(lambda name: not is_reserved(name)),
)

#: Group labels: any text without comma, brackets and quotes.
labels = st.text(
    st.characters(codec="utf-8", exclude_characters=",[]'\"", exclude_categories=["Cs"]), min_size=1, max_size=6
).filter(lambda label: bool(label.strip()))


def _number(text: str) -> Number:
    return Number(Fraction(text), text)


#: Numbers as they are typed.
numbers: st.SearchStrategy[Number] = st.one_of(
    st.integers(0, 10**6).map(lambda n: _number(str(n))),
    st.from_regex(r"[0-9]{0,3}\.[0-9]{1,4}", fullmatch=True).map(_number),
    st.from_regex(r"[0-9]{1,3}\.[0-9]{0,4}[eE][+-]?[0-9]{1,2}", fullmatch=True).map(_number),
)


def _signed(parts: Nodes) -> st.SearchStrategy[tuple[tuple[int, Node], ...]]:
    rest = st.lists(st.tuples(st.sampled_from([1, -1]), parts), min_size=1, max_size=3)
    return st.tuples(parts, rest).map(lambda pair: ((1, pair[0]), *pair[1]))


def _call(parts: Nodes) -> st.SearchStrategy[Call]:
    def of(name: str) -> st.SearchStrategy[Call]:
        arguments = st.tuples(*[parts] * FUNCTIONS[name])
        return arguments.map(lambda made: Call(name, made))  # type: ignore[arg-type]

    return st.sampled_from(sorted(FUNCTIONS)).flatmap(of)


#: Kind of node -> its strategy, given one for the sub-expressions.
STRATEGIES: dict[type, Callable[[Nodes], Nodes]] = {
    Number: lambda parts: numbers,
    Name: lambda parts: st.builds(Name, names, st.lists(labels, max_size=2).map(tuple)),
    Add: lambda parts: _signed(parts).map(Add),
    Multiply: lambda parts: _signed(parts).map(Multiply),
    Negate: lambda parts: st.builds(Negate, parts),
    Power: lambda parts: st.builds(Power, parts, parts),
    Call: _call,
    Total: lambda parts: st.builds(Total, parts, st.none() | names),
    Apply: lambda parts: st.builds(Apply, names, parts),
}

LEAVES = (Number, Name)
KINDS: tuple[type, ...] = get_args(Node)


def expressions(max_leaves: int = 15) -> Nodes:
    """Return any tree that the parser can make."""
    leaves = st.one_of(*(STRATEGIES[kind](st.nothing()) for kind in LEAVES))
    return st.recursive(
        leaves,
        lambda parts: st.one_of(*(make(parts) for kind, make in STRATEGIES.items() if kind not in LEAVES)),
        max_leaves=max_leaves,
    )


#: Trees that a program may make besides: negative numbers, and fractions without a text.
program_numbers: st.SearchStrategy[Number] = st.builds(
    Number, st.fractions(min_value=-100, max_value=100, max_denominator=1000)
)


def formulas(max_leaves: int = 12) -> Nodes:
    """Return a tree without groups, of numbers that a computation can take: small ones, and small numeric exponents."""
    small = st.sampled_from(["0.5", "2", "3", "1", "0.25", "7", "1e-2", "0"]).map(_number)
    leaves: Nodes = st.one_of(small, st.sampled_from(["S", "beta", "gamma", "lambda", "x"]).map(Name))
    powers = st.sampled_from(["2", "3", "0.5", "1.5"]).map(_number)
    exponents: Nodes = powers | powers.map(Negate)

    def above(parts: Nodes) -> Nodes:
        kinds = [STRATEGIES[kind](parts) for kind in (Add, Multiply, Negate, Call)]
        return st.one_of(*kinds, st.builds(Power, parts, exponents))

    return st.recursive(leaves, above, max_leaves=max_leaves)
