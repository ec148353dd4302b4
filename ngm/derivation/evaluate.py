"""One evaluator for every kind of number.

The same walk over a tree gives floats, proven balls, sympy expressions or the pattern of what is zero by structure: only
the arithmetic differs, and is handed in as an `Algebra`. So the formulas that are printed and the numbers that are
printed cannot part ways.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Protocol

import numpy as np

from ngm.derivation.linearise import definitions_in_order
from ngm.derivation.space import Array, Space
from ngm.expression.tree import Add, Apply, Call, Multiply, Name, Negate, Node, Number, Power, Total

__all__ = ["FLOATS", "PATTERN", "Algebra", "Evaluator"]


class Algebra(Protocol):
    """Elementwise arithmetic on arrays of one kind of number."""

    @property
    def dtype(self) -> type:
        """`float`, `bool` or `object`."""
        ...

    def number(self, value: Fraction) -> object:
        """Return an exact number as a scalar of this kind (an enclosure, where it is balls)."""
        ...

    def add(self, a: Array, b: Array) -> Array:
        """Return a + b."""
        ...

    def subtract(self, a: Array, b: Array) -> Array:
        """Return a - b."""
        ...

    def multiply(self, a: Array, b: Array) -> Array:
        """Return a * b."""
        ...

    def divide(self, a: Array, b: Array) -> Array:
        """Return a / b; an entry that cannot be divided by is the algebra's own "not a number", or an error."""
        ...

    def power(self, a: Array, b: Array) -> Array:
        """Return a to the power of b."""
        ...

    def call(self, function: str, arguments: tuple[Array, ...]) -> Array:
        """Return exp, log, sqrt, max or min."""
        ...

    def matmul(self, a: Array, b: Array) -> Array:
        """Return the matrix product of two plain matrices."""
        ...


class _Floats:
    """IEEE doubles; what is undefined becomes nan or inf and is looked for by the caller."""

    dtype: type = float

    def number(self, value: Fraction) -> object:
        return float(value)

    def add(self, a: Array, b: Array) -> Array:
        return np.asarray(a + b)

    def subtract(self, a: Array, b: Array) -> Array:
        return np.asarray(a - b)

    def multiply(self, a: Array, b: Array) -> Array:
        return np.asarray(a * b)

    def divide(self, a: Array, b: Array) -> Array:
        return np.asarray(a / b)

    def power(self, a: Array, b: Array) -> Array:
        return np.asarray(a**b)

    def call(self, function: str, arguments: tuple[Array, ...]) -> Array:
        if function in ("max", "min"):
            return np.asarray((np.maximum if function == "max" else np.minimum)(*arguments))
        return np.asarray({"exp": np.exp, "log": np.log, "sqrt": np.sqrt}[function](arguments[0]))

    def matmul(self, a: Array, b: Array) -> Array:
        return np.asarray(a @ b)


class _Pattern:
    """True where a value is not zero by structure: whatever the parameters are. Values never matter here."""

    dtype: type = bool

    def number(self, value: Fraction) -> object:
        return value != 0

    def add(self, a: Array, b: Array) -> Array:
        return np.asarray(a | b)

    subtract = add

    def multiply(self, a: Array, b: Array) -> Array:
        return np.asarray(a & b)

    def divide(self, a: Array, b: Array) -> Array:
        return np.asarray(a & np.ones_like(b))

    def power(self, a: Array, b: Array) -> Array:
        return np.asarray(a | ~b)

    def call(self, function: str, arguments: tuple[Array, ...]) -> Array:
        if function in ("max", "min"):
            return np.asarray(arguments[0] | arguments[1])
        return np.ones_like(arguments[0]) if function in ("exp", "log") else arguments[0]

    def matmul(self, a: Array, b: Array) -> Array:
        return np.asarray((a.astype(float) @ b.astype(float)) > 0)


FLOATS: Algebra = _Floats()
PATTERN: Algebra = _Pattern()


@dataclass
class Evaluator:
    """Values of names and matrices in one algebra, and the walk that combines them.

    Attributes
    ----------
    names : mapping of str to Array
        Value of each parameter, compartment and synthetic name, over the space, with a last axis of length 1 or n.
    definitions : mapping of str to Node
        Trees evaluated when first needed.
    lists : mapping of str to (tuple of Node, tuple of str)
        What is given copy by copy: one tree for each copy of the dimensions named, each read in its own group.
    matrices : mapping of str to Array
        (n, n), or (w, n, n) for a matrix given within another dimension.
    along : mapping of str to (str, str or None)
        The dimension along which a matrix applies, and the one within which it is given.
    """

    space: Space
    algebra: Algebra
    names: dict[str, Array]
    definitions: Mapping[str, Node] = field(default_factory=dict)
    lists: Mapping[str, tuple[tuple[Node, ...], tuple[str, ...]]] = field(default_factory=dict)
    matrices: Mapping[str, Array] = field(default_factory=dict)
    along: Mapping[str, tuple[str, str | None]] = field(default_factory=dict)

    def scalar(self, value: object) -> Array:
        """Return one number as an array over the space."""
        out: Array = np.empty((1,) * (len(self.space.sizes) + 1), dtype=self.algebra.dtype)
        out[...] = value
        return out

    def value(self, node: Node) -> Array:
        """Return the value of an expression over the space."""
        algebra = self.algebra
        match node:
            case Number(value=value):
                return self.scalar(algebra.number(value))
            case Name(name=name):
                return self.name(name)
            case Add(terms=terms):
                total: Array | None = None
                for sign, term in terms:
                    part = self.value(term)
                    if total is None:
                        total = part
                    else:
                        total = algebra.add(total, part) if sign > 0 else algebra.subtract(total, part)
                assert total is not None
                return total
            case Multiply(factors=factors):
                product: Array | None = None
                for sign, factor in factors:
                    part = self.value(factor)
                    if product is None:
                        product = part
                    else:
                        product = algebra.multiply(product, part) if sign > 0 else algebra.divide(product, part)
                assert product is not None
                return product
            case Negate(operand=operand):
                return algebra.subtract(self.scalar(algebra.number(Fraction(0))), self.value(operand))
            case Power(base=base, exponent=exponent):
                return algebra.power(self.value(base), self.value(exponent))
            case Call(function=function, arguments=arguments):
                return algebra.call(function, tuple(self.value(argument) for argument in arguments))
            case Total(operand=operand, dimension=dimension):
                array = self.value(operand)
                if dimension is not None:
                    return self.total(array, (dimension,))
                grown = [d for d, n in zip(self.space.dimensions, array.shape, strict=False) if n > 1]
                return self.total(array, tuple(grown))
            case Apply(matrix=matrix, operand=operand):
                return self.apply(matrix, self.value(operand))

    def name(self, name: str) -> Array:
        """Return the value of a name; a definition is evaluated when first asked for."""
        if name not in self.names:
            if name in self.lists:
                self.names[name] = self._list(*self.lists[name])
            else:
                # What it uses comes first: a chain of definitions is then not followed by recursion.
                for inner in definitions_in_order(self.definitions[name], self.definitions):
                    if inner not in self.names:
                        self.names[inner] = self.value(self.definitions[inner])
                self.names[name] = self.value(self.definitions[name])
        return self.names[name]

    def _list(self, trees: tuple[Node, ...], by: tuple[str, ...]) -> Array:
        """Return values given copy by copy; equal trees are evaluated once."""
        if len(set(trees)) == 1:
            array = self.value(trees[0])
            return np.broadcast_to(array, (*self.space.shape(by), array.shape[-1]))
        if all(isinstance(tree, Number) for tree in trees):
            flat: Array = np.empty((len(trees), 1), dtype=self.algebra.dtype)
            flat[:, 0] = [self.algebra.number(tree.value) for tree in trees if isinstance(tree, Number)]
            return self.space.spread(flat, by)
        seen: dict[Node, Array] = {}
        rows = []
        for k, tree in enumerate(trees):
            if tree not in seen:
                seen[tree] = self.space.flatten(self.value(tree), by)
            rows.append(seen[tree][k])
        return self.space.spread(np.stack(rows), by)

    def total(self, array: Array, dimensions: tuple[str, ...]) -> Array:
        """Return the sum over the groups of these dimensions (n times the value where it does not vary)."""
        for dimension in dimensions:
            axis, size = self.space.axis(dimension), self.space.size(dimension)
            if array.shape[axis] == 1 and size > 1:
                if self.algebra.dtype is not bool:
                    array = self.algebra.multiply(array, self.scalar(self.algebra.number(Fraction(size))))
            elif self.algebra.dtype is bool:
                array = np.asarray(array.any(axis=axis, keepdims=True))
            else:
                array = array.sum(axis=axis, keepdims=True)
        return array

    def apply(self, matrix: str, array: Array, *, transposed: bool = False) -> Array:
        """Return, in group i, the sum over j of M[i][j] x[j] (M[j][i] when transposed)."""
        by, within = self.along[matrix]
        table = self.matrices[matrix]
        axis, size = self.space.axis(by), self.space.size(by)
        if array.shape[axis] == 1 and size > 1:
            shape = list(array.shape)
            shape[axis] = size
            array = np.broadcast_to(array, shape)
        if within is None:
            return self._along(table.T if transposed else table, array, axis)
        other = self.space.axis(within)
        if array.shape[other] == 1 and self.space.size(within) > 1:
            shape = list(array.shape)
            shape[other] = self.space.size(within)
            array = np.broadcast_to(array, shape)
        parts = []
        for k in range(self.space.size(within)):
            block = table[k].T if transposed else table[k]
            parts.append(self._along(block, np.take(array, [k], axis=other), axis))
        return np.concatenate(parts, axis=other)

    def _along(self, table: Array, array: Array, axis: int) -> Array:
        moved = np.moveaxis(array, axis, 0)
        flat = np.ascontiguousarray(moved).reshape(moved.shape[0], -1)
        out = self.algebra.matmul(table, flat).reshape(moved.shape)
        return np.moveaxis(out, 0, axis)
