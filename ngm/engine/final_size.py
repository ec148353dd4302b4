"""How many are infected in the end: the largest solution of the final-size equation of several types.

For type i let x_i be the force of infection added up over the whole outbreak. Of those who were susceptible, the share
1 - exp(-x_i) is infected, and

    x_i = sum over j of A[i, j] y_j(x_j),    A[i, j] = K[i, j] N_j / N_i,    y_j(x) = sum over g of w (1 - exp(-s x)),

where the susceptible members of type j are made of kinds g (with and without vaccine): a share of them, their
susceptibility s, and w, that share times their infectivity once infected. With one kind, w = s = 1, this is
1 - z_i = exp(-sum_j K[i, j] N_j z_j / N_i).

Source: Andreasen (2011) Bull. Math. Biol. 73:2305-2321; Arino, Brauer, van den Driessche, Watmough & Wu (2007) Math.
Biosci. Eng. 4:159-175 (both from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ngm.engine.sides import exceeds_one
from ngm.engine.structure import classes, reachable

__all__ = ["FinalSize", "Kinds", "final_size"]

FloatArray = npt.NDArray[np.float64]

MOST_STEPS = 200
#: Steps of plain iteration from above before Newton's method takes over.
PLAIN_STEPS = 3


@dataclass(frozen=True, eq=False)
class Kinds:
    """What the susceptible members of each type are made of.

    `shares`, `susceptibility`, `infectivity`: (n, kinds) arrays; the shares of a type add up to 1, the other two are >= 0
    (1: as without vaccine).
    """

    shares: FloatArray
    susceptibility: FloatArray
    infectivity: FloatArray

    @staticmethod
    def alike(size: int) -> Kinds:
        """Return one kind only, nobody vaccinated."""
        one = np.ones((size, 1))
        return Kinds(one, one, one)


@dataclass(frozen=True, eq=False)
class FinalSize:
    """The largest solution.

    Attributes
    ----------
    force : (n,) array
        x, the force of infection added up over the outbreak.
    attack : (n,) array
        Share of the susceptible members of each type that is infected, all kinds together.
    attack_by_kind : (n, kinds) array
    low, high : (n,) arrays
        Enclose `attack`, up to rounding: from a point below which no solution is the largest, and one above it.
    steps : int
        Iterations.
    """

    force: FloatArray
    attack: FloatArray
    attack_by_kind: FloatArray
    low: FloatArray
    high: FloatArray
    steps: int


def final_size(K: FloatArray, sizes: FloatArray, kinds: Kinds | None = None) -> FinalSize:
    """Return the largest solution of the final-size equation.

    Types that no class with a number above 1 leads to stay at 0. For the others the right-hand side is increasing and
    concave: plain iteration from above falls to the largest solution, and so does Newton's method, which never passes it.
    The result is enclosed: what a small step down raises again lies below the solution.

    Parameters
    ----------
    K : (n, n) array, >= 0
        Next-generation matrix where everybody in `sizes` is susceptible; K[i, j]: infections of i by one of j.
    sizes : (n,) array, > 0
        Susceptible members of each type before the outbreak. A type of size 0 has no infections.
    kinds : Kinds, optional
        With vaccine; nobody vaccinated where left out.

    Returns
    -------
    FinalSize

    Raises
    ------
    ValueError
        K is not square or has a negative entry, or a size is negative.

    Examples
    --------
    >>> final_size(np.array([[1.2, 0.8], [0.5, 0.9]]), np.array([400.0, 600.0])).attack.round(10).tolist()
    [0.7926654955, 0.5185193597]
    """
    K, sizes = np.asarray(K, dtype=float), np.asarray(sizes, dtype=float)
    n = len(sizes)
    if K.shape != (n, n) or not np.all(K >= 0) or not np.all(np.isfinite(K)):
        raise ValueError(f"expected a non-negative matrix of shape ({n}, {n})")
    if not np.all(sizes >= 0):
        raise ValueError("expected sizes that are not negative")
    kinds = Kinds.alike(n) if kinds is None else kinds
    weights = kinds.shares * kinds.infectivity
    there = sizes > 0
    A = np.where(there[:, None] & there[None, :], K * sizes[None, :] / np.where(there, sizes, 1.0)[:, None], 0.0)
    live = _reached(A * (weights * kinds.susceptibility).sum(axis=1)[None, :])
    x = low = high = np.zeros(n)
    steps = 0
    if live.any():
        x, low, high = np.zeros(n), np.zeros(n), np.zeros(n)
        part = _Part(A[np.ix_(live, live)], weights[live], kinds.susceptibility[live])
        x[live], low[live], high[live], steps = part.solve()
    each = -np.expm1(-kinds.susceptibility * x[:, None])

    def attack(force: FloatArray) -> FloatArray:
        return np.asarray((kinds.shares * -np.expm1(-kinds.susceptibility * force[:, None])).sum(axis=1))

    return FinalSize(x, attack(x), each, attack(low), attack(high), steps)


def _reached(M: FloatArray) -> npt.NDArray[np.bool_]:
    """Return which types are reached from a class whose number is above 1."""
    pattern = M > 0
    start = np.zeros(len(M), dtype=bool)
    for members in classes(pattern):
        block = M[np.ix_(members, members)]
        if block.any() and exceeds_one(block):
            start[members] = True
    return reachable(pattern, start) if start.any() else start


@dataclass(frozen=True, eq=False)
class _Part:
    """The equation of types that are all reached: its largest solution is positive everywhere."""

    A: FloatArray
    weights: FloatArray
    susceptibility: FloatArray

    def image(self, x: FloatArray) -> FloatArray:
        return np.asarray(self.A @ (self.weights * -np.expm1(-self.susceptibility * x[:, None])).sum(axis=1))

    def slope(self, x: FloatArray) -> FloatArray:
        inner = self.weights * self.susceptibility * np.exp(-self.susceptibility * x[:, None])
        return np.asarray(self.A * inner.sum(axis=1)[None, :])

    def solve(self) -> tuple[FloatArray, FloatArray, FloatArray, int]:
        """Return x, a point below it and one above it, and the steps taken."""
        before = np.inf
        x = np.asarray(self.A @ self.weights.sum(axis=1))  # nothing is larger than the image of an infinite force
        for step in range(1, MOST_STEPS + 1):
            if step <= PLAIN_STEPS:
                new = self.image(x)
            else:
                # x - image(x) is convex: from above, Newton's method stays above its largest zero.
                new = x - np.linalg.solve(np.eye(len(x)) - self.slope(x), x - self.image(x))
            change = float(np.max(np.abs(x - new)) / np.max(x))
            x = np.clip(new, 0.0, x)
            # From where rounding rules, steps shrink no more.
            if change <= 4e-16 or (step > PLAIN_STEPS and change < 1e-8 and change > before / 2):
                break
            before = change
        return x, self._below(x), self._above(x), step

    def _below(self, x: FloatArray) -> FloatArray:
        """Return a point a little lower that the image raises: the largest solution lies above it."""
        for exponent in range(-52, 0):
            low = x * (1 - 2.0**exponent)
            if np.all(self.image(low) >= low):
                return low
        return np.zeros_like(x)

    def _above(self, x: FloatArray) -> FloatArray:
        """Return a point a little higher that the image lowers: the largest solution lies below it."""
        for exponent in range(-52, 0):
            high = x * (1 + 2.0**exponent)
            if np.all(self.image(high) <= high):
                return high
        return np.asarray(self.A @ self.weights.sum(axis=1))
