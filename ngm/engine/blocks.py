"""Matrices over groups that are never formed: sums of diag(a) C diag(b), applied factor by factor.

A state of every compartment in every group is a vector; each compartment is a `Part` of it, an array with one axis for each
dimension (length 1 where the compartment does not vary). A `BlockMatrix` holds, for each pair of parts, a list of chains:
products of diagonal factors, contact matrices along one axis, and sums over axes. One product costs what its factors cost:
17 ages x 300 regions is 17 x 17 and 300 x 300, and not 5,100 x 5,100.

Common practice for Kronecker products; no source.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt

__all__ = ["BlockMatrix", "Chain", "Contact", "Diagonal", "Part", "Sum"]

FloatArray = npt.NDArray[np.float64]
Shape = tuple[int, ...]


@dataclass(frozen=True, eq=False)
class Diagonal:
    """Multiplies each entry by its own number. `values`: array over the space, axes of length 1 where it is the same."""

    values: FloatArray


@dataclass(frozen=True, eq=False)
class Contact:
    """Applies a matrix along one axis: in group i the sum over j of table[i, j] x[j].

    `table`: (n, n), or (w, n, n) with `within` the axis whose groups have a table each.
    """

    axis: int
    table: FloatArray
    within: int | None = None


@dataclass(frozen=True, eq=False)
class Sum:
    """Adds over axes; where x does not vary along one, its value counts `sizes` times."""

    axes: tuple[int, ...]
    sizes: tuple[int, ...]


Factor = Diagonal | Contact | Sum


@dataclass(frozen=True, eq=False)
class Chain:
    """`sign` times a product of factors that act from the right: the last one first."""

    factors: tuple[Factor, ...]
    sign: float = 1.0

    @property
    def contacts(self) -> tuple[Contact, ...]:
        """The contact matrices of the chain."""
        return tuple(f for f in self.factors if isinstance(f, Contact))

    @property
    def is_local(self) -> bool:
        """True where every group keeps to itself."""
        return all(isinstance(f, Diagonal) for f in self.factors)


@dataclass(frozen=True)
class Part:
    """One compartment in the vector: its shape over the space and where its copies stand.

    `order` gives the axes in the order in which the copies are listed, the last one fastest.
    """

    shape: Shape
    offset: int
    order: tuple[int, ...]

    @property
    def size(self) -> int:
        """Number of copies."""
        return int(np.prod(self.shape, dtype=int))

    def take(self, vector: FloatArray) -> FloatArray:
        """Return this part of an (m, k) array, as an array over the space with a last axis k."""
        rows = vector[self.offset : self.offset + self.size]
        listed = tuple(self.shape[a] for a in self.order)
        array = rows.reshape(*listed, vector.shape[1])
        back = np.argsort(self.order).tolist()
        array = array.transpose(*back, len(self.order))
        return array.reshape(*self.shape, vector.shape[1])

    def put(self, array: FloatArray) -> FloatArray:
        """Return an array over the space as this part's rows, (size, k)."""
        full = np.broadcast_to(array, (*self.shape, array.shape[-1]))
        rest = [a for a in range(len(self.shape)) if a not in self.order]
        moved = full.transpose(*self.order, *rest, len(self.shape))
        return moved.reshape(self.size, array.shape[-1])


@dataclass(frozen=True, eq=False)
class BlockMatrix:
    """An (m, m) matrix as chains between parts: `blocks[i, j]` maps part j to part i."""

    parts: tuple[Part, ...]
    blocks: dict[tuple[int, int], list[Chain]] = field(default_factory=dict)

    @property
    def size(self) -> int:
        """The number m of rows."""
        return sum(part.size for part in self.parts)

    def add(self, row: int, column: int, chain: Chain) -> None:
        """Add a chain to a block."""
        self.blocks.setdefault((row, column), []).append(chain)

    def __matmul__(self, vector: FloatArray) -> FloatArray:
        """Return the product with an (m,) or (m, k) array."""
        columns = vector.reshape(len(vector), -1)
        out = np.zeros((self.size, columns.shape[1]))
        taken = {j: self.parts[j].take(columns) for j in {j for _, j in self.blocks}}
        for (i, j), chains in self.blocks.items():
            row = self.parts[i]
            for chain in chains:
                product = row.put(_forward(chain, taken[j]))
                out[row.offset : row.offset + row.size] += product if chain.sign > 0 else -product
        return out.reshape(vector.shape)

    def transposed_product(self, vector: FloatArray) -> FloatArray:
        """Return the product of the transpose with an (m,) or (m, k) array."""
        columns = vector.reshape(len(vector), -1)
        out = np.zeros((self.size, columns.shape[1]))
        taken = {i: self.parts[i].take(columns) for i in {i for i, _ in self.blocks}}
        for (i, j), chains in self.blocks.items():
            column = self.parts[j]
            for chain in chains:
                product = column.put(_backward(chain, column.shape, taken[i]))
                out[column.offset : column.offset + column.size] += product if chain.sign > 0 else -product
        return out.reshape(vector.shape)

    def without(self, chosen: Sequence[tuple[int, int]]) -> BlockMatrix:
        """Return the matrix with some blocks left out."""
        return BlockMatrix(self.parts, {key: chains for key, chains in self.blocks.items() if key not in set(chosen)})

    def to_sparse(self) -> Any:
        """Return the matrix in compressed sparse rows: for models in which few groups meet."""
        from scipy.sparse import coo_array, csr_array

        rows, columns, values = [], [], []
        for (i, j), chains in self.blocks.items():
            for chain in chains:
                block = _sparse(chain, self.parts[i], self.parts[j]).tocoo()
                rows.append(block.row + self.parts[i].offset)
                columns.append(block.col + self.parts[j].offset)
                values.append(chain.sign * block.data)
        if not rows:
            return csr_array((self.size, self.size))
        triple = (np.concatenate(values), (np.concatenate(rows), np.concatenate(columns)))
        return csr_array(coo_array(triple, shape=(self.size, self.size)))


def contact(factor: Contact, array: FloatArray, *, transposed: bool = False) -> FloatArray:
    """Return a contact matrix (or its transpose) applied along its axis."""
    axis, n = factor.axis, factor.table.shape[-1]
    if array.shape[axis] == 1 and n > 1:
        shape = list(array.shape)
        shape[axis] = n
        array = np.broadcast_to(array, shape)
    if factor.within is None:
        table = factor.table.T if transposed else factor.table
        moved = np.moveaxis(array, axis, 0)
        product = table @ np.ascontiguousarray(moved).reshape(n, -1)
        return np.moveaxis(product.reshape(moved.shape), 0, axis)
    w = factor.table.shape[0]
    if array.shape[factor.within] == 1 and w > 1:
        shape = list(array.shape)
        shape[factor.within] = w
        array = np.broadcast_to(array, shape)
    tables = factor.table.transpose(0, 2, 1) if transposed else factor.table
    moved = np.moveaxis(array, (factor.within, axis), (0, 1))
    product = tables @ np.ascontiguousarray(moved).reshape(w, n, -1)
    return np.moveaxis(product.reshape(moved.shape), (0, 1), (factor.within, axis))


def _forward(chain: Chain, array: FloatArray) -> FloatArray:
    for factor in reversed(chain.factors):
        if isinstance(factor, Diagonal):
            array = factor.values[..., None] * array
        elif isinstance(factor, Contact):
            array = contact(factor, array)
        else:
            for axis, size in zip(factor.axes, factor.sizes, strict=True):
                array = array.sum(axis=axis, keepdims=True) if array.shape[axis] == size else array * size
    return array


def _shapes(chain: Chain, start: Shape) -> list[Shape]:
    """Return the shapes of what enters each factor, from the last factor to the first, and of what comes out."""
    shapes = [start]
    for factor in reversed(chain.factors):
        shape = list(shapes[-1])
        if isinstance(factor, Diagonal):
            shape = list(np.broadcast_shapes(tuple(shape), factor.values.shape))
        elif isinstance(factor, Contact):
            shape[factor.axis] = factor.table.shape[-1]
            if factor.within is not None:
                shape[factor.within] = factor.table.shape[0]
        else:
            for axis in factor.axes:
                shape[axis] = 1
        shapes.append(tuple(shape))
    return shapes


def _collapse(array: FloatArray, shape: Shape) -> FloatArray:
    """Add over the axes along which a thing of this shape had been repeated: the transpose of broadcasting."""
    axes = tuple(k for k, n in enumerate(shape) if n == 1 and array.shape[k] > 1)
    return array.sum(axis=axes, keepdims=True) if axes else array


def _backward(chain: Chain, start: Shape, array: FloatArray) -> FloatArray:
    shapes = _shapes(chain, start)
    array = _collapse(array, shapes[-1])
    for factor, before, after in zip(chain.factors, shapes[-2::-1], shapes[:0:-1], strict=True):
        array = np.broadcast_to(array, (*after, array.shape[-1]))
        if isinstance(factor, Diagonal):
            array = _collapse(factor.values[..., None] * array, before)
        elif isinstance(factor, Contact):
            array = _collapse(contact(factor, array, transposed=True), before)
        else:
            for axis, size in zip(factor.axes, factor.sizes, strict=True):
                if before[axis] == size:
                    array = np.repeat(array, size, axis=axis) if array.shape[axis] == 1 else array
                else:
                    array = array * size
    return array


def _sparse(chain: Chain, row: Part, column: Part) -> Any:
    """Return one chain as a sparse matrix from the copies of `column` to those of `row`."""
    from scipy.sparse import coo_array, csr_array, diags_array

    shapes = _shapes(chain, column.shape)
    matrix: Any = csr_array(_listing(column))
    for factor, before, after in zip(reversed(chain.factors), shapes[:-1], shapes[1:], strict=True):
        if isinstance(factor, Diagonal):
            spread = csr_array(_repeat(before, after))
            values = np.broadcast_to(factor.values, after).ravel()
            matrix = diags_array(values) @ (spread @ matrix)
        elif isinstance(factor, Contact):
            matrix = csr_array(_repeat(before, after)) @ matrix
            matrix = csr_array(_contact_matrix(factor, after)) @ matrix
        else:
            full = list(before)
            for axis, size in zip(factor.axes, factor.sizes, strict=True):
                full[axis] = size
            matrix = csr_array(_repeat(before, tuple(full))) @ matrix
            matrix = csr_array(_repeat(after, tuple(full)).T) @ matrix
    matrix = csr_array(_repeat(shapes[-1], row.shape)) @ matrix
    return coo_array(csr_array(_listing(row).T) @ matrix)


def _listing(part: Part) -> Any:
    """Return the permutation from the listed copies of a part to the space in its natural order."""
    from scipy.sparse import coo_array

    index = part.take(np.arange(part.offset + part.size, dtype=float).reshape(-1, 1))[..., 0].ravel().astype(int)
    n = part.size
    return coo_array((np.ones(n), (np.arange(n), index - part.offset)), shape=(n, n))


def _repeat(before: Shape, after: Shape) -> Any:
    """Return the matrix that repeats an array of one shape to another."""
    from scipy.sparse import coo_array

    n, m = int(np.prod(before, dtype=int)), int(np.prod(after, dtype=int))
    index = np.broadcast_to(np.arange(n).reshape(before), after).ravel()
    return coo_array((np.ones(m), (np.arange(m), index)), shape=(m, n))


def _contact_matrix(factor: Contact, shape: Shape) -> Any:
    """Return a contact matrix along its axis as a sparse matrix on the whole array."""
    from scipy.sparse import coo_array

    index = np.arange(int(np.prod(shape, dtype=int))).reshape(shape)
    n = shape[factor.axis]
    if factor.within is None:
        lines = np.moveaxis(index, factor.axis, 0).reshape(n, -1)
        i, j = np.nonzero(factor.table)
        rows, columns = lines[i].ravel(), lines[j].ravel()
        values = np.repeat(factor.table[i, j], lines.shape[1])
    else:
        w = shape[factor.within]
        lines3 = np.moveaxis(index, (factor.within, factor.axis), (0, 1)).reshape(w, n, -1)
        k, i, j = np.nonzero(factor.table)
        rows, columns = lines3[k, i].ravel(), lines3[k, j].ravel()
        values = np.repeat(factor.table[k, i, j], lines3.shape[2])
    size = index.size
    return coo_array((values, (rows, columns)), shape=(size, size))
