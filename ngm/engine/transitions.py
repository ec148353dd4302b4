"""V^-1 without V: solving the transitions of a grouped model part by part.

Compartments are taken in the order of the strongly connected components of the transitions between them. Where groups keep
to themselves a component is one small matrix for each group, all inverted at once; where members move along one dimension
it is one matrix for each group of the others; what couples several dimensions is factored as one sparse matrix.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
from scipy.linalg import lu_factor, lu_solve

from ngm.engine.blocks import BlockMatrix, Chain, Contact, Diagonal, Part
from ngm.engine.structure import classes

__all__ = ["SingularTransitions", "Transitions"]

FloatArray = npt.NDArray[np.float64]


class SingularTransitions(ArithmeticError):  # noqa: N818 - a finding about V
    """V has no inverse. `parts`: the parts of the component that has none."""

    def __init__(self, parts: list[int]) -> None:
        super().__init__(parts)
        self.parts = parts


class Transitions:
    """Solves V x = b and x V = b for a block matrix V + shift I.

    Raises
    ------
    SingularTransitions
        Some component has no inverse.
    """

    def __init__(self, V: BlockMatrix, shift: float = 0.0) -> None:
        self.V, self.shift = V, shift
        count = len(V.parts)
        pattern = np.eye(count, dtype=bool)
        for i, j in V.blocks:
            pattern[i, j] = True
        self.order = [[int(k) for k in members] for members in classes(pattern)]
        self.solvers: list[_Local | _Along | _General] = [self._solver(members) for members in self.order]

    def _solver(self, members: list[int]) -> _Local | _Along | _General:
        V = self.V
        parts = [V.parts[k] for k in members]
        chains = {(a, b): V.blocks.get((i, j), []) for a, i in enumerate(members) for b, j in enumerate(members)}
        every = [chain for block in chains.values() for chain in block]
        same = all(part.shape == parts[0].shape for part in parts)
        plain = all(not _sums(chain) for chain in every)
        axes = {c.axis for chain in every for c in chain.contacts}
        try:
            if same and plain and not axes:
                return _Local(parts, chains, self.shift)
            if same and plain and len(axes) == 1 and parts[0].shape[axis := next(iter(axes))] > 1:
                return _Along(parts, chains, axis, self.shift)
            return _General(V, members, self.shift)
        except (np.linalg.LinAlgError, ZeroDivisionError, RuntimeError) as error:
            raise SingularTransitions(members) from error

    def solve(self, right: FloatArray) -> FloatArray:
        """Return x with (V + shift I) x = right, for (m,) or (m, k) arrays."""
        columns = right.reshape(len(right), -1)
        out = np.zeros_like(columns)
        waiting = columns.copy()
        for members, solver in zip(self.order, self.solvers, strict=True):
            solved = solver.solve([waiting[_rows(self.V.parts[k])] for k in members])
            inside = np.zeros_like(columns)
            for k, values in zip(members, solved, strict=True):
                out[_rows(self.V.parts[k])] = values
                inside[_rows(self.V.parts[k])] = values
            onward = {(i, j): c for (i, j), c in self.V.blocks.items() if j in members and i not in members}
            if onward:
                waiting -= BlockMatrix(self.V.parts, onward) @ inside
        return out.reshape(right.shape)

    def solve_transposed(self, right: FloatArray) -> FloatArray:
        """Return x with (V + shift I)^T x = right, for (m,) or (m, k) arrays."""
        columns = right.reshape(len(right), -1)
        out = np.zeros_like(columns)
        waiting = columns.copy()
        for members, solver in zip(reversed(self.order), reversed(self.solvers), strict=True):
            solved = solver.solve([waiting[_rows(self.V.parts[k])] for k in members], transposed=True)
            inside = np.zeros_like(columns)
            for k, values in zip(members, solved, strict=True):
                out[_rows(self.V.parts[k])] = values
                inside[_rows(self.V.parts[k])] = values
            back = {(i, j): c for (i, j), c in self.V.blocks.items() if i in members and j not in members}
            if back:
                waiting -= BlockMatrix(self.V.parts, back).transposed_product(inside)
        return out.reshape(right.shape)


def _rows(part: Part) -> slice:
    return slice(part.offset, part.offset + part.size)


def _sums(chain: Chain) -> bool:
    return any(not isinstance(f, Diagonal | Contact) for f in chain.factors)


class _Local:
    """Groups keep to themselves: one k x k matrix for each group."""

    def __init__(self, parts: list[Part], chains: dict[tuple[int, int], list[Chain]], shift: float) -> None:
        self.parts = parts
        k, shape = len(parts), parts[0].shape
        matrix = np.zeros((*shape, k, k))
        for (a, b), block in chains.items():
            for chain in block:
                product = np.asarray(chain.sign)
                for factor in chain.factors:
                    assert isinstance(factor, Diagonal)
                    product = product * factor.values
                matrix[..., a, b] += product
        matrix[..., range(k), range(k)] += shift
        if k == 1:
            if np.any(matrix == 0):
                raise ZeroDivisionError
            self.inverse: FloatArray = np.asarray(1 / matrix)
        else:
            self.inverse = np.asarray(np.linalg.inv(matrix), dtype=np.float64)
        if not np.all(np.isfinite(self.inverse)):
            raise ZeroDivisionError

    def solve(self, right: list[FloatArray], *, transposed: bool = False) -> list[FloatArray]:
        inverse = self.inverse.swapaxes(-1, -2) if transposed else self.inverse
        arrays = [_over_space(part, rows) for part, rows in zip(self.parts, right, strict=True)]
        stacked = np.stack(arrays, axis=-2)  # (..., k, columns)
        solved = inverse @ stacked
        return [_listed(part, solved[..., a, :]) for a, part in enumerate(self.parts)]


class _Along:
    """Members move along one axis: one matrix of k x n states for each group of the other axes."""

    def __init__(self, parts: list[Part], chains: dict[tuple[int, int], list[Chain]], axis: int, shift: float) -> None:
        self.parts, self.axis = parts, axis
        shape = parts[0].shape
        self.n, self.k = shape[axis], len(parts)
        self.others = tuple(s for a, s in enumerate(shape) if a != axis)
        count = int(np.prod(self.others, dtype=int))
        matrix = np.zeros((count, self.k * self.n, self.k * self.n))
        for (a, b), block in chains.items():
            for chain in block:
                here = matrix[:, a * self.n : (a + 1) * self.n, b * self.n : (b + 1) * self.n]
                here += chain.sign * self._expanded(chain, shape)
        index = np.arange(self.k * self.n)
        matrix[:, index, index] += shift
        self.factors = []
        for block_matrix in matrix:
            factored = lu_factor(block_matrix, check_finite=False)
            diagonal = np.abs(np.diag(factored[0]))
            if not (diagonal.min() > 0 and np.isfinite(diagonal).all()):
                raise ZeroDivisionError
            self.factors.append(factored)

    def _expanded(self, chain: Chain, shape: tuple[int, ...]) -> FloatArray:
        product: FloatArray | None = None
        for factor in reversed(chain.factors):
            if isinstance(factor, Diagonal):
                full = np.broadcast_to(factor.values, shape)
                rows = np.moveaxis(full, self.axis, -1).reshape(-1, self.n)
                product = rows[:, :, None] * (np.eye(self.n)[None] if product is None else product)
            elif isinstance(factor, Contact):
                tables = self._tables(factor, shape)
                product = tables if product is None else tables @ product
        return np.eye(self.n)[None] if product is None else product

    def _tables(self, factor: Contact, shape: tuple[int, ...]) -> FloatArray:
        if factor.within is None:
            return factor.table[None]
        index = np.broadcast_to(
            np.arange(shape[factor.within]).reshape([-1 if a == factor.within else 1 for a in range(len(shape))]), shape
        )
        lines = np.moveaxis(index, self.axis, -1).reshape(-1, self.n)[:, 0]
        return factor.table[lines]

    def solve(self, right: list[FloatArray], *, transposed: bool = False) -> list[FloatArray]:
        columns = right[0].shape[1]
        arrays = []
        for part, rows in zip(self.parts, right, strict=True):
            moved = np.moveaxis(_over_space(part, rows), self.axis, -2)
            arrays.append(moved.reshape(-1, self.n, columns))
        stacked = np.concatenate(arrays, axis=1)
        solved = np.empty_like(stacked)
        for o, factored in enumerate(self.factors):
            solved[o] = lu_solve(factored, stacked[o], trans=1 if transposed else 0, check_finite=False)
        out = []
        for a, part in enumerate(self.parts):
            lines = solved[:, a * self.n : (a + 1) * self.n].reshape(*self.others, self.n, columns)
            out.append(_listed(part, np.moveaxis(lines, -2, self.axis)))
        return out


class _General:
    """Anything else: one sparse factorisation of the component."""

    def __init__(self, V: BlockMatrix, members: list[int], shift: float) -> None:
        from scipy.sparse import csc_array, eye_array
        from scipy.sparse.linalg import splu

        rows = np.concatenate([np.arange(V.parts[k].offset, V.parts[k].offset + V.parts[k].size) for k in members])
        own = {(i, j): c for (i, j), c in V.blocks.items() if i in members and j in members}
        matrix = BlockMatrix(V.parts, own).to_sparse()[rows][:, rows]
        self.sizes = [V.parts[k].size for k in members]
        self.factored: Any = splu(csc_array(matrix + shift * eye_array(len(rows))))

    def solve(self, right: list[FloatArray], *, transposed: bool = False) -> list[FloatArray]:
        solved = self.factored.solve(np.ascontiguousarray(np.concatenate(right)), trans="T" if transposed else "N")
        return np.split(solved, np.cumsum(self.sizes)[:-1])


def _over_space(part: Part, rows: FloatArray) -> FloatArray:
    return Part(part.shape, 0, part.order).take(rows)


def _listed(part: Part, array: FloatArray) -> FloatArray:
    return part.put(array)
