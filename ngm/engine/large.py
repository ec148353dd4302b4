"""R0, bounds, Perron vectors and growth of a large grouped model, with K applied and never formed.

K = F V^-1 restricted to the types at infection. The root of an irreducible K comes from Arnoldi's method on the operator,
for the eigenvalue of largest real part (so that the other roots of a periodic K do no harm), and is judged by the
quotients (K x)_i / x_i. They are widened by the rounding of the products and of the solve, measured by its residual, so
that they enclose the root of the matrices as rounded to doubles. A reducible K is taken class by class.

Sources: Collatz (1942), Wielandt (1950) (quotients; from memory); Lehoucq, Sorensen & Yang (1998) ARPACK users' guide.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
import numpy.typing as npt

from ngm.engine.blocks import BlockMatrix, Diagonal
from ngm.engine.perron import bounds as dense_bounds
from ngm.engine.perron import reproduction_number, stable_distribution
from ngm.engine.routes import Routes
from ngm.engine.transitions import Transitions

__all__ = ["LargeClass", "LargeSpectrum", "NextGeneration", "perron_pair"]

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]
Product = Callable[[FloatArray], FloatArray]

#: Types of one class up to which its block is written out.
MOST_WRITTEN_OUT = 600
#: Non-zero entries up to which a reducible model is written out as sparse matrices.
MOST_ENTRIES = 40_000_000
UNIT = float(np.finfo(float).eps) / 2


@dataclass(frozen=True, eq=False)
class LargeClass:
    """One class of types at infection (positions among them): root with bounds, period, growth rate, Perron vector."""

    members: IntArray
    root: float
    bounds: tuple[float, float]
    period: int | None
    growth_rate: float | None
    vector: FloatArray


@dataclass(frozen=True, eq=False)
class LargeSpectrum:
    """What `NextGeneration.spectrum` finds; vectors over the types at infection, None where classes tie."""

    classes: tuple[LargeClass, ...]
    root: float
    bounds: tuple[float, float]
    leading: tuple[int, ...]
    right: FloatArray | None
    left: FloatArray | None


def perron_pair(product: Product, start: FloatArray, tolerance: float = 1e-13) -> tuple[float, FloatArray]:
    """Return the eigenvalue of largest real part of a non-negative (or Metzler) operator, and its vector, sum 1.

    Parameters
    ----------
    product : callable
        (n,) -> (n,), the operator.
    start : (n,) array, > 0
        Where to begin.
    tolerance : float
        Relative, for the eigenvalue.

    Raises
    ------
    ArithmeticError
        The iteration did not converge.
    """
    from scipy.sparse.linalg import ArpackError, LinearOperator, eigs

    n = len(start)
    if n <= 3:
        matrix = np.stack([product(column) for column in np.eye(n)], axis=1)
        values, vectors = np.linalg.eig(matrix)
        best = int(np.argmax(values.real))
        value, vector = float(values[best].real), vectors[:, best].real
    else:
        operator: Any = LinearOperator((n, n), matvec=product, dtype=float)
        try:
            values, vectors = eigs(operator, k=1, which="LR", v0=start, tol=tolerance, ncv=min(n, 24), maxiter=400)
        except ArpackError as error:
            raise ArithmeticError(str(error)) from None
        value, vector = float(values[0].real), vectors[:, 0].real
    vector = np.abs(vector)
    return value, vector / vector.sum()


class NextGeneration:
    """K = F V^-1 on the types at infection, as an operator.

    Parameters
    ----------
    F, V : BlockMatrix
        Over all infected types; F >= 0, V = losses - gains.
    at : (n,) array of int
        The types at infection.

    Raises
    ------
    SingularTransitions
        V has no inverse.
    """

    def __init__(self, F: BlockMatrix, V: BlockMatrix, at: IntArray) -> None:
        self.F, self.V, self.at = F, V, np.asarray(at, dtype=np.int64)
        self.m = F.size
        self.transitions = Transitions(V)

    def __matmul__(self, x: FloatArray) -> FloatArray:
        """Return K x."""
        return (self.F @ self.stays(x))[self.at]

    def stays(self, x: FloatArray) -> FloatArray:
        """Return V^-1 x: the time spent in each state by those who enter as x (types at infection)."""
        return self.transitions.solve(self._spread(x))

    def transposed_product(self, x: FloatArray) -> FloatArray:
        """Return K^T x."""
        return self.transitions.solve_transposed(self.F.transposed_product(self._spread(x)))[self.at]

    def _spread(self, x: FloatArray) -> FloatArray:
        full = np.zeros((self.m, *x.shape[1:]))
        full[self.at] = x
        return full

    def is_m_matrix(self) -> bool:
        """Return whether V (no positive off-diagonal entry) is a non-singular M-matrix: V x > 0 for x = V^-1 1 > 0."""
        ones = np.ones(self.m)
        x = self.transitions.solve(ones)
        if not (np.all(np.isfinite(x)) and np.all(x > 0)):
            return False
        return bool(np.max(np.abs(self.V @ x - ones)) < 0.5)

    @cached_property
    def routes(self) -> Routes:
        """Classes and periods."""
        return Routes(self.F, self.V, self.at)

    # The terms that one entry of a product adds up, at the most: each costs one rounding.
    @cached_property
    def _depth(self) -> int:
        most = 8
        for matrix in (self.F, self.V):
            for chains in matrix.blocks.values():
                for chain in chains:
                    terms = 4
                    for factor in chain.factors:
                        if isinstance(factor, Diagonal):
                            terms += 1
                        else:
                            terms += factor.table.shape[-1] if hasattr(factor, "table") else sum(factor.sizes)
                    most = max(most, terms + len(chains))
        return most + len(self.F.blocks) + len(self.V.blocks)

    def bounds(self, x: FloatArray) -> tuple[float, float]:
        """Return bounds on the root of an irreducible K from a vector x > 0 on all types at infection.

        The quotients of the computed product, widened by its rounding and by twice what the residual of the solve, and
        the rounding of that residual, can add to it.
        """
        full = self._spread(x)
        y = self.transitions.solve(full)
        gamma = self._depth * UNIT
        size = _absolute(self.V) @ np.abs(y)
        fault = np.abs(self.V @ y - full) + 2 * gamma * (size + np.abs(full))
        spread = (self.F @ np.abs(self.transitions.solve(fault)))[self.at]
        product = (self.F @ y)[self.at]
        slack = 2 * spread + 2 * gamma * np.abs(product)
        low = float(np.min((product - slack) / x))
        high = float(np.max((product + slack) / x))
        return max(0.0, float(np.nextafter(low, -np.inf))), float(np.nextafter(high, np.inf))

    def spectrum(self) -> LargeSpectrum:
        """Return classes, R0 with bounds, and both Perron vectors (right sums to 1, left.right = 1)."""
        routes = self.routes
        if len(routes.classes) == 1 and routes.periods[0] is not None and len(self.at) > MOST_WRITTEN_OUT:
            return self._irreducible(routes.periods[0])
        return self._by_classes()

    def _irreducible(self, period: int) -> LargeSpectrum:
        n = len(self.at)
        root, x = perron_pair(self.__matmul__, np.full(n, 1.0 / n))
        x = self._settled(x, root)
        low, high = self.bounds(x)
        root = min(max(root, low), high)
        left = perron_pair(self.transposed_product, np.full(n, 1.0 / n))[1]
        left = left / float(left @ x)
        rate = self.growth_rate(self.stays(x))
        one = LargeClass(np.arange(n), root, (low, high), period, rate, x)
        return LargeSpectrum((one,), root, (low, high), (0,), x, left)

    def _settled(self, x: FloatArray, root: float) -> FloatArray:
        """Return x after a few steps of (K + c I), which make small entries positive and exact."""
        best, gap = x, np.inf
        for _ in range(12):
            product = self @ x
            with np.errstate(divide="ignore", invalid="ignore"):
                quotients = product / x
            here = float(np.max(quotients) - np.min(quotients)) if np.all(x > 0) else np.inf
            if here < gap:
                best, gap = x, here
            if gap <= 8 * self._depth * UNIT * root or here > 2 * gap:
                break
            x = product + 0.1 * root * x
            x = x / x.sum()
        return best if np.all(best > 0) else x

    def growth_rate(self, start: FloatArray | None = None) -> float:
        """Return the largest real part of the eigenvalues of F - V, per time unit."""

        def product(y: FloatArray) -> FloatArray:
            return (self.F @ y) - (self.V @ y)

        begin = np.ones(self.m) if start is None or not np.all(start > 0) else start
        try:
            return perron_pair(product, begin / begin.sum(), 1e-12)[0]
        except ArithmeticError:
            return self._growth_by_roots()

    @staticmethod
    def growth_of(F: BlockMatrix, V: BlockMatrix) -> float:
        """Return the largest real part of the eigenvalues of F - V where V has no inverse to work with."""
        from scipy.sparse.linalg import LinearOperator, eigs

        operator: Any = LinearOperator((F.size, F.size), matvec=lambda y: (F @ y) - (V @ y), dtype=float)
        values = eigs(operator, k=1, which="LR", v0=np.ones(F.size), return_eigenvectors=False)
        return float(values[0].real)

    def _growth_by_roots(self) -> float:
        """Return the r at which F (V + r I)^-1 has root 1, by the secant rule on its logarithm."""
        n = len(self.at)

        def log_root(r: float) -> float:
            shifted = NextGeneration.__new__(NextGeneration)
            shifted.F, shifted.V, shifted.at, shifted.m = self.F, self.V, self.at, self.m
            shifted.transitions = Transitions(self.V, r)
            return float(np.log(perron_pair(shifted.__matmul__, np.full(n, 1.0 / n), 1e-12)[0]))

        a, fa = 0.0, log_root(0.0)
        scale = 1.0 / float(np.max(self.transitions.solve(np.ones(self.m))))
        b = scale * (0.5 if fa > 0 else -0.25)
        fb = log_root(b)
        for _ in range(60):
            if fb == fa or abs(b - a) <= 1e-13 * max(abs(b), scale):
                break
            a, fa, b = b, fb, b - fb * (b - a) / (fb - fa)
            fb = log_root(b)
        return b

    def type_number(self, targeted: npt.NDArray[np.bool_]) -> tuple[float | None, float]:
        """Return the type-reproduction number T of a set of types at infection, and the root of what is left alone.

        T is the factor by which the targeted rows of K have to be divided for its root to be 1; None where the other
        rows alone have a root of 1 or more. Found by the secant rule on logarithms, each step one Arnoldi iteration.

        References
        ----------
        Roberts & Heesterbeek (2003) Proc. R. Soc. B 270:1359, doi:10.1098/rspb.2003.2339
        """
        n = len(self.at)
        vector = np.full(n, 1.0 / n)

        def root(factors: FloatArray) -> float:
            nonlocal vector
            value, vector = perron_pair(lambda x: factors * (self @ x), vector + 1e-12, 1e-13)
            return max(value, 0.0)

        rest = root(np.where(targeted, 0.0, 1.0))
        if rest >= 1:
            return None, rest
        whole = root(np.ones(n))
        if whole == 0:
            return 0.0, rest

        def log_root(log_T: float) -> float:
            return float(np.log(max(root(np.where(targeted, np.exp(-log_T), 1.0)), 1e-300)))

        a, fa = 0.0, float(np.log(whole))
        b = fa if fa != 0 else 0.1
        fb = log_root(b)
        for _ in range(60):
            if fb == fa or abs(fb) <= 1e-13:
                break
            a, fa, b = b, fb, b - fb * (b - a) / (fb - fa)
            fb = log_root(b)
        return float(np.exp(b)), rest

    # --- several classes -----------------------------------------------------------------------------------------------

    def _by_classes(self) -> LargeSpectrum:
        F, V = self.F.to_sparse(), self.V.to_sparse()
        if F.nnz + V.nnz > MOST_ENTRIES:
            raise ArithmeticError("too many entries to be taken class by class")
        found = [
            self._class(F, V, members, period)
            for members, period in zip(self.routes.classes, self.routes.periods, strict=True)
        ]
        root = max((c.root for c in found), default=0.0)
        leading = tuple(k for k, c in enumerate(found) if root > 0 and c.bounds[1] >= max(x.bounds[0] for x in found))
        low, high = max((c.bounds[0] for c in found), default=0.0), max((c.bounds[1] for c in found), default=0.0)
        right = left = None
        if len(leading) == 1:
            chosen = found[leading[0]]
            right = self._carried(self.__matmul__, chosen, chosen.vector)
            block = self._block(F, V, chosen.members)[0]
            back = stable_distribution(block.T) if len(chosen.members) > 1 else np.ones(1)
            left = (
                None if back is None else self._carried(self.transposed_product, chosen, np.asarray(back, dtype=float))
            )
            if right is not None and left is not None:
                right = right / right.sum()
                left = left / float(left @ right)
        return LargeSpectrum(tuple(found), root, (low, high), leading, right, left)

    def _block(self, F: Any, V: Any, members: IntArray) -> tuple[FloatArray, IntArray, FloatArray, FloatArray]:
        """Return K of one class, the states that its members pass through, and F and V there."""
        from scipy.sparse.csgraph import breadth_first_order

        rows = self.at[members]
        graph = V.copy()
        graph.setdiag(0)
        graph.eliminate_zeros()
        seen = np.zeros(self.m, dtype=bool)
        forward = graph.T.tocsr()
        for start in rows:
            if not seen[start]:
                seen[breadth_first_order(forward, int(start), return_predecessors=False)] = True
        states = np.flatnonzero(seen)
        infecting = np.asarray(abs(F[rows]).sum(axis=0)).ravel() > 0
        useful = np.zeros(self.m, dtype=bool)
        for end in np.flatnonzero(infecting & seen):
            if not useful[end]:
                useful[breadth_first_order(graph, int(end), return_predecessors=False)] = True
        states = states[useful[states] | np.isin(states, rows)]
        Fc, Vc = F[rows][:, states].toarray(), V[states][:, states].toarray()
        entry = np.zeros((len(states), len(rows)))
        entry[np.searchsorted(states, rows), np.arange(len(rows))] = 1
        return np.maximum(Fc @ np.linalg.solve(Vc, entry), 0.0), states, Fc, Vc

    def _class(self, F: Any, V: Any, members: IntArray, period: int | None) -> LargeClass:
        if period is None:
            return LargeClass(members, 0.0, (0.0, 0.0), None, None, np.ones(1))
        K, states, Fc, Vc = self._block(F, V, members)
        low, high = dense_bounds(K)
        margin = 64 * self._depth * UNIT
        low, high = low * (1 - margin), high * (1 + margin)
        root = min(max(reproduction_number(K), low), high)
        own = np.zeros_like(Vc)
        own[np.searchsorted(states, self.at[members])] = Fc
        rate = float(np.max(np.linalg.eigvals(own - Vc).real))
        vector = stable_distribution(K)
        return LargeClass(
            members, root, (low, high), period, rate, np.ones(1) if vector is None else np.asarray(vector)
        )

    def _carried(self, product: Product, chosen: LargeClass, own: FloatArray) -> FloatArray | None:
        """Return the Perron vector of K with the class's vector carried to those that it leads to; None if not settled."""
        x = np.zeros(len(self.at))
        x[chosen.members] = own
        for _ in range(3000):
            new = product(x) / chosen.root
            new[chosen.members] = own
            if np.max(np.abs(new - x)) <= 1e-13 * np.max(new):
                return new
            x = new
        return None


def step_modulus(losses: BlockMatrix) -> float:
    """Return the largest modulus of the eigenvalues of I - losses: what a step in discrete time leaves of a deviation."""
    from scipy.sparse.linalg import LinearOperator, eigs

    size = losses.size
    if size <= 2:  # too few for Arnoldi steps
        columns = np.column_stack([losses @ unit for unit in np.eye(size)])
        return float(np.max(np.abs(np.linalg.eigvals(np.eye(size) - columns))))
    operator: Any = LinearOperator((size, size), matvec=lambda x: x - losses @ x, dtype=float)
    return float(abs(eigs(operator, k=1, which="LM", v0=np.ones(size), return_eigenvectors=False)[0]))


def _absolute(matrix: BlockMatrix) -> BlockMatrix:
    """Return the matrix with every chain counted positive: |V| for chains that do not cancel within a block."""
    from ngm.engine.blocks import Chain

    blocks = {key: [Chain(chain.factors) for chain in chains] for key, chains in matrix.blocks.items()}
    return BlockMatrix(matrix.parts, blocks)
