"""The nodes of an expression.

A tree is immutable and hashable. Equality looks at the mathematics written down, not at where it stood in the text:
`position` (characters from 0 in the text) takes no part in it. Sums and products are flat, so that a sum of 5,000
terms is one node and not 5,000 nested ones: the depth of a tree is bounded by the depth that the parser allows.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Literal, TypeVar

__all__ = [
    "FUNCTIONS",
    "Add",
    "Apply",
    "Call",
    "Multiply",
    "Name",
    "Negate",
    "Node",
    "Number",
    "Power",
    "Total",
    "children",
    "fold",
    "names",
    "rebuild",
    "replace_names",
    "walk",
]

#: name -> number of arguments; `sum` is not here: it is `Total`, and takes a dimension.
FUNCTIONS: dict[str, int] = {"exp": 1, "log": 1, "sqrt": 1, "max": 2, "min": 2}

T = TypeVar("T")

FunctionName = Literal["exp", "log", "sqrt", "max", "min"]


@dataclass(frozen=True, slots=True)
class Number:
    """A decimal literal, kept exactly. `text` is how it was typed, and is what is written back."""

    value: Fraction
    text: str = field(default="", compare=False)
    position: int = field(default=0, compare=False)


@dataclass(frozen=True, slots=True)
class Name:
    """A compartment, parameter or definition, by its canonical (Latin) name.

    In a result's expression the name may carry its groups: ``sigma[65+]`` is ``Name("sigma", groups=("65+",))``.
    """

    name: str
    groups: tuple[str, ...] = ()
    position: int = field(default=0, compare=False)

    @property
    def item(self) -> str:
        """The name with its groups as results write it: ``sigma[65+]``, ``S[0-4,North]``."""
        return f"{self.name}[{','.join(self.groups)}]" if self.groups else self.name


@dataclass(frozen=True, slots=True)
class Add:
    """Two or more terms, each with its sign: ``a - b + c`` is ``((1, a), (-1, b), (1, c))``; the first sign is 1."""

    terms: tuple[tuple[int, Node], ...]
    position: int = field(default=0, compare=False)


@dataclass(frozen=True, slots=True)
class Multiply:
    """Two or more factors: ``a / b * c`` is ``((1, a), (-1, b), (1, c))``, -1 marking a division; the first is 1."""

    factors: tuple[tuple[int, Node], ...]
    position: int = field(default=0, compare=False)


@dataclass(frozen=True, slots=True)
class Negate:
    """``-x``. Binds looser than a power: ``-x^2`` is ``Negate(Power(x, 2))``."""

    operand: Node
    position: int = field(default=0, compare=False)


@dataclass(frozen=True, slots=True)
class Power:
    """``base ^ exponent``; binds to the right."""

    base: Node
    exponent: Node
    position: int = field(default=0, compare=False)


@dataclass(frozen=True, slots=True)
class Call:
    """One of `FUNCTIONS` applied to its arguments."""

    function: FunctionName
    arguments: tuple[Node, ...]
    position: int = field(default=0, compare=False)


@dataclass(frozen=True, slots=True)
class Total:
    """``sum(x)`` over all groups of x (`dimension` None) or ``sum(x, age)`` over those of one dimension."""

    operand: Node
    dimension: str | None = None
    position: int = field(default=0, compare=False)


@dataclass(frozen=True, slots=True)
class Apply:
    """``C(x)``: matrix `matrix` applied along its dimension: in group i the sum over j of C[i][j] * x[j]."""

    matrix: str
    operand: Node
    position: int = field(default=0, compare=False)


Node = Number | Name | Add | Multiply | Negate | Power | Call | Total | Apply


def children(node: Node) -> tuple[Node, ...]:
    """Return the direct sub-expressions of a node, in the order of the text."""
    match node:
        case Number() | Name():
            return ()
        case Add(terms=parts) | Multiply(factors=parts):
            return tuple(part for _, part in parts)
        case Negate(operand=operand) | Total(operand=operand) | Apply(operand=operand):
            return (operand,)
        case Power(base=base, exponent=exponent):
            return (base, exponent)
        case Call(arguments=arguments):
            return arguments


def rebuild(node: Node, change: Callable[[Node], Node]) -> Node:
    """Return the node with `change` applied to each direct sub-expression."""
    match node:
        case Number() | Name():
            return node
        case Add(terms=parts):
            return Add(tuple((sign, change(part)) for sign, part in parts), node.position)
        case Multiply(factors=parts):
            return Multiply(tuple((sign, change(part)) for sign, part in parts), node.position)
        case Negate(operand=operand):
            return Negate(change(operand), node.position)
        case Power(base=base, exponent=exponent):
            return Power(change(base), change(exponent), node.position)
        case Call(function=function, arguments=arguments):
            return Call(function, tuple(change(argument) for argument in arguments), node.position)
        case Total(operand=operand, dimension=dimension):
            return Total(change(operand), dimension, node.position)
        case Apply(matrix=matrix, operand=operand):
            return Apply(matrix, change(operand), node.position)


def walk(node: Node) -> Iterator[Node]:
    """Yield the node and all below it, parents first."""
    stack = [node]
    while stack:
        here = stack.pop()
        yield here
        stack.extend(reversed(children(here)))


def fold(node: Node, combine: Callable[[Node, list[T]], T]) -> T:
    """Return what `combine` gives for the node from what it gave for the node's direct sub-expressions, in order.

    Works from the leaves up without recursion, so that the depth of a tree does not matter.
    """
    done: list[T] = []
    # Read backwards, the order of `walk` has every sub-expression before its parent, the last one first.
    for here in reversed(list(walk(node))):
        count = len(children(here))
        parts = done[: -count - 1 : -1] if count else []
        if count:
            del done[-count:]
        done.append(combine(here, parts))
    return done[0]


def names(node: Node) -> set[str]:
    """Return the names of compartments, parameters and definitions in the expression (not of matrices)."""
    return {here.name for here in walk(node) if isinstance(here, Name)}


def replace_names(node: Node, replacement: Callable[[Name], Node | None]) -> Node:
    """Return the expression with each name replaced by what `replacement` gives for it (None: left as it is)."""
    if isinstance(node, Name):
        new = replacement(node)
        return node if new is None else new
    return rebuild(node, lambda child: replace_names(child, replacement))
