"""Classes, R0 and Perron vectors of a non-negative matrix, with bounds: the Frobenius normal form put to use."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from flint import arb, ctx

from ngm.engine.balls import Array, is_balls, precision
from ngm.engine.enclosure import check_sign, perron_root_and_vector
from ngm.engine.linear import dominant_solve, identity, matmul, pattern, possible, solve, square, zeros
from ngm.engine.structure import BoolArray, IntArray, classes, period, reachable

__all__ = ["Spectrum", "spectrum"]


@dataclass(frozen=True, eq=False)
class Spectrum:
    """What the structure and the sizes of a next-generation matrix K say.

    Attributes
    ----------
    classes : tuple of int arrays
        The strongly connected classes in topological order: a class before those that it infects.
    roots : tuple of arb
        The Perron root of each class; an exact 0 for a single type that does not infect its own kind.
    periods : tuple of (int or None)
        The period of each class; None for a single type without a loop.
    root : arb
        R0: the largest root; an exact 0 where every class has root 0.
    leading : tuple of int
        The classes that attain R0, by number; more than one where their balls overlap (a tie); none where R0 = 0.
    right, left : (n,) arrays or None
        Perron vectors: right sums to 1 (the stable distribution of types), left.right = 1 (reproductive value). None
        where several classes lead or none does. Balls for a matrix of balls, else doubles.
    irreducible : bool
        One class only, and not [[0]].
    period : int or None
        The period of an irreducible matrix, else None.
    cycle : int or None
        The period of the leading classes where they share one: R0 per cycle is R0 to that power. None for a tie of
        different periods and where R0 = 0.
    decided : bool
        False where more bits may change the classes or the vectors: an entry cannot be told from 0, or classes overlap.
    """

    classes: tuple[IntArray, ...]
    roots: tuple[arb, ...]
    periods: tuple[int | None, ...]
    root: arb
    leading: tuple[int, ...]
    right: Array | None
    left: Array | None
    irreducible: bool
    period: int | None
    cycle: int | None
    decided: bool


def spectrum(K: Array, vectors: bool = True) -> Spectrum:
    """Return the classes of K, their roots, R0 and the Perron vectors.

    Class by class, since K may be reducible: R0 is the largest of the roots of the diagonal blocks. Where one class
    alone attains it, the right vector is positive on that class and all that it leads to, the left one on it and all
    that lead to it; both are zero elsewhere and follow from the class's own vector by solving (R0 I - K) x = 0 block
    by block.

    Parameters
    ----------
    K : (n, n) array of balls or float, >= 0
        Next-generation matrix, no unit; K[i, j]: infections of type i caused by one of type j. An entry whose ball
        contains 0 counts as 0 (`decided` is then False). Doubles: roots are enclosed for the matrix as rounded.
    vectors : bool
        False to leave the Perron vectors out (both None).

    Returns
    -------
    Spectrum

    Raises
    ------
    ValueError
        K is not square, not finite, or has a negative entry.

    References
    ----------
    Berman & Plemmons (1994) Nonnegative Matrices in the Mathematical Sciences, chapter 2 (from memory).
    """
    K = square(K, "K")
    check_sign(K)
    there = pattern(K)
    decided = not bool((possible(K) & ~there).any())
    groups = classes(there)
    roots: list[arb] = []
    periods: list[int | None] = []
    shapes: list[Array | None] = []
    for members in groups:
        steps = period(there, members)
        root, shape = (arb(0), None) if steps is None else perron_root_and_vector(K[np.ix_(members, members)])
        roots.append(root)
        periods.append(steps)
        shapes.append(shape)
    root = arb(0)
    for r in roots:
        root = root.max(r)
    leading = tuple(c for c, r in enumerate(roots) if periods[c] is not None and not r < root)
    cycles = {periods[c] for c in leading}
    irreducible = len(groups) == 1 and periods[0] is not None
    right = left = None
    if len(leading) > 1:
        decided = False
    elif leading and vectors:
        members, shape = groups[leading[0]], shapes[leading[0]]
        assert shape is not None
        try:
            other = perron_root_and_vector(K[np.ix_(members, members)].T)[1]
            # The type that weighs most in R0 is kept: without it the others are furthest from sustaining themselves.
            fixed = int(np.argmax(shape * other))
            right = _right_vector(K, there, members, root, shape, fixed)
            left = _right_vector(K.T, there.T, members, root, other, fixed)
        except ZeroDivisionError:
            right = left = None
            decided = False
        if right is not None and left is not None:
            right = right / right.sum()
            left = left / (left[members] * right[members]).sum()
    return Spectrum(
        classes=tuple(groups),
        roots=tuple(roots),
        periods=tuple(periods),
        root=root,
        leading=leading,
        right=right,
        left=left,
        irreducible=irreducible,
        period=periods[0] if irreducible else None,
        cycle=cycles.pop() if len(cycles) == 1 else None,
        decided=decided,
    )


def _right_vector(K: Array, there: BoolArray, members: IntArray, root: arb, shape: Array, fixed: int) -> Array:
    """Return the right Perron vector of one class, carried on to all that it leads to; its scale is left open."""
    result = zeros((len(K),), K)
    block = K[np.ix_(members, members)]
    result[members] = _class_vector(block, root, shape, fixed) if is_balls(K) else shape
    further = np.nonzero(reachable(there, members))[0]
    further = further[~np.isin(further, members)]
    if len(further):
        source = matmul(K[np.ix_(further, members)], result[members])
        result[further] = _carried(K[np.ix_(further, further)], root, source)
    return result


def _class_vector(block: Array, root: arb, shape: Array, fixed: int) -> Array:
    """Return balls around the Perron vector of an irreducible matrix, given one near it and a ball around the root.

    With the entry k = `fixed` kept, the others solve (root I - B_rr) w = B_rk, a non-singular M-matrix for the exact
    root. Scaled by `shape`, its rows sum to about B_ik: nothing is lost to the sizes of the entries.
    """
    size = len(block)
    if size == 1:
        return shape
    near = block * shape[None, :] / shape[:, None]
    rest = np.delete(np.arange(size), fixed)
    with precision(ctx.prec + 64):
        system = root * identity(size - 1, block) - near[np.ix_(rest, rest)]
        relative = dominant_solve(system, near[rest, fixed])
    result = shape.copy()
    result[rest] = shape[rest] * relative
    return result


def _carried(block: Array, root: arb, source: Array) -> Array:
    """Return w with (root I - B) w = source, for classes whose own roots are smaller; positive."""
    size = len(block)
    if not is_balls(block):
        middle = float(root.mid())
        found = solve(middle * identity(size, block) - block, source)
        if not np.all(found > 0):
            raise ZeroDivisionError("the classes cannot be told apart in doubles")
        return found
    with precision(ctx.prec + 64):
        return solve(root * identity(size, block) - block, source)
