"""The Perron root, the inverse and the M-matrix property, each with a proof: Collatz-Wielandt quotients in balls.

Every function takes balls (the enclosure then holds for the exact matrix that they enclose) or doubles (it then holds
for the matrix as rounded to doubles).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from flint import arb, arb_mat, ctx
from scipy.linalg import lu_factor, lu_solve

from ngm.engine.balls import Array, BallArray, FloatArray, ball, interval, is_balls, precision, to_mat
from ngm.engine.linear import below_zero, leaf_inverse, matmul, pattern, possible, square, zeros
from ngm.engine.noda import Scaled, float_bounds, perron_vector, scaled
from ngm.engine.structure import IntArray, classes

__all__ = [
    "MMatrix",
    "check_sign",
    "inverse",
    "m_matrix",
    "metzler_root",
    "perron_root",
    "perron_root_and_vector",
    "spectral_radius",
]

#: Steps of Noda's iteration in balls that a class may take; past this size a step costs seconds.
_STEPS, _FEW_STEPS, _MANY_TYPES = 60, 4, 120


def perron_root(matrix: Array) -> arb:
    """Return a ball that encloses the Perron root of an irreducible non-negative matrix.

    min (B x)_i / x_i <= rho <= max (B x)_i / x_i for any x > 0 (Collatz-Wielandt), computed in balls, so that the
    enclosure covers the errors of the entries and of the computation. A 1 x 1 matrix is its own root.

    Parameters
    ----------
    matrix : (n, n) array of balls or float, >= 0
        Irreducible (one class of `structure.classes`).

    Returns
    -------
    arb
        As narrow as the entries and the working precision allow (about 2^-precision of itself for exact entries).

    Raises
    ------
    ValueError
        The matrix is not square, not finite, or has a negative entry.

    References
    ----------
    Collatz (1942) Math. Z. 48:221-226; Wielandt (1950) Math. Z. 52:642-648; Noda (1971) Numer. Math. 17:382-386 (from
    memory).
    """
    return perron_root_and_vector(matrix)[0]


def perron_root_and_vector(matrix: Array) -> tuple[arb, Array]:
    """Return the ball of `perron_root` and an approximate right Perron vector: positive, exact numbers, no bounds."""
    matrix = square(matrix)
    check_sign(matrix)
    if len(matrix) == 1:
        return arb(matrix[0, 0]), np.ones(1) if not is_balls(matrix) else np.array([arb(1)], dtype=object)
    scaling = scaled(matrix)
    x = perron_vector(scaling.matrix)
    if not is_balls(matrix):
        with np.errstate(over="ignore", under="ignore"):
            vector = np.ldexp(x, scaling.exponents - scaling.exponents.max())
        return interval(*float_bounds(scaling, x)), np.maximum(vector, np.finfo(float).tiny)
    return _refined(matrix, scaling, x)


def check_sign(matrix: Array) -> None:
    """Raise ValueError where an entry is proven to be negative."""
    negative = below_zero(matrix)
    if negative.any():
        i, j = (int(k) for k in np.argwhere(negative)[0])
        raise ValueError(f"entry ({i}, {j}) is negative")


def _refined(matrix: BallArray, scaling: Scaled, start: FloatArray) -> tuple[arb, BallArray]:
    """Narrow the quotients until the entries or the precision set the limit."""
    bits, size = ctx.prec, len(matrix)
    with precision(bits + 64):
        exact = to_mat(matrix)
        middle = exact.mid()
        grid = [arb(2) ** int(e) for e in scaling.exponents]
        x = [arb(float(v)) * g for v, g in zip(start, grid, strict=True)]
        low, high = arb(0), arb.pos_inf()
        steps = _STEPS if size <= _MANY_TYPES else _FEW_STEPS
        last, newton = arb.pos_inf(), True
        solver: _Correction | None = None
        before: list[arb] | None = None
        for _ in range(200):
            images = (exact * arb_mat(size, 1, x)).entries()
            quotients = [y / v for y, v in zip(images, x, strict=True)]
            top = max((q.upper() for q in quotients), key=_middle)
            bottom = min((q.lower() for q in quotients), key=_middle)
            low, high = _larger(low, bottom), _smaller(high, top)
            middles = [q.mid() for q in quotients]
            spread = (max(middles, key=_middle) - min(middles, key=_middle)).mid()
            noise = max((q.rad() for q in quotients), key=_middle)
            if spread <= 2 * noise or spread <= abs(high) * arb(2) ** -bits:
                break
            if newton and before is not None and not spread < last * arb(2) ** -6:
                # The correction was no good: back to the vector that it was to improve.
                newton, solver, x, before = False, None, before, None
                continue
            better = None
            if newton and spread < abs(high) * arb(2) ** -8:
                solver = solver or _Correction(scaling, x, grid)
                better = solver.apply(x, middles)
                newton = better is not None
                before = x
            last = spread
            if better is None:
                if steps == 0:
                    break
                steps -= 1
                better, newton, before, solver = _noda_step(middle, x, top, bits), True, None, None
                if better is None:
                    break
            x = better
    vector = np.empty(size, dtype=object)
    vector[:] = x
    return interval(low, high), vector


def _middle(number: arb) -> arb:
    """Key for sorting exact numbers."""
    return number


def _larger(a: arb, b: arb) -> arb:
    return a if a > b else b


def _smaller(a: arb, b: arb) -> arb:
    return a if a < b else b


class _Correction:
    """Newton's correction of a Perron vector, its derivative factored once in doubles.

    With C[i, j] = B[i, j] x[j] / x[i] and quotients q = C 1, a relative correction z and a change d of the root satisfy
    (C - s I) z - d 1 = s 1 - q to first order, and sum(z) = 0. The residual is taken in many bits, so every round gains
    what the doubles are good for.
    """

    def __init__(self, scaling: Scaled, x: list[arb], grid: list[arb]) -> None:
        size = len(x)
        weights = np.array([float(v / g) for v, g in zip(x, grid, strict=True)])
        with np.errstate(all="ignore"):
            near = scaling.matrix * weights[None, :] / weights[:, None]
            root = float(np.mean(near.sum(axis=1)))
            bordered = np.empty((size + 1, size + 1))
            bordered[:size, :size] = near - root * np.eye(size)
            bordered[:size, size] = -1.0
            bordered[size, :size] = 1.0
            bordered[size, size] = 0.0
        self.shift = scaling.shift
        self.usable = bool(np.all(np.isfinite(bordered)))
        self.factors = lu_factor(bordered, check_finite=False) if self.usable else None

    def apply(self, x: list[arb], quotients: list[arb]) -> list[arb] | None:
        """Return the corrected vector; None where the correction is no good."""
        if self.factors is None:
            return None
        centre = (sum(quotients, arb(0)) / len(quotients)).mid()
        residual = [(centre - q).mid() for q in quotients]
        size = max((abs(r) for r in residual), key=_middle)
        right = np.array([float(r / size) for r in residual] + [0.0])
        z = lu_solve(self.factors, right, check_finite=False)[:-1]
        if not np.all(np.isfinite(z)):
            return None
        unit = size.mid() * arb(2) ** -self.shift
        corrected = [(v * (1 + arb(float(c)) * unit)).mid() for v, c in zip(x, z, strict=True)]
        return corrected if all(v > 0 for v in corrected) else None


def _noda_step(middle: arb_mat, x: list[arb], top: arb, bits: int) -> list[arb] | None:
    """Return the solution of (top I - B) y = x, scaled; None where it is not positive."""
    size = len(x)
    for more in (2, 8, 32) if size <= _MANY_TYPES else (2,):
        with precision(more * bits + 128):
            shifted = arb_mat(size, size, [-v for v in middle.entries()])
            for i in range(size):
                shifted[i, i] = shifted[i, i] + top
            try:
                solution = shifted.solve(arb_mat(size, 1, x), algorithm="approx").entries()
            except ZeroDivisionError:
                continue
            if all(v > 0 for v in solution):
                largest = max(solution, key=_middle)
                return [(v / largest).mid() for v in solution]
    return None


def spectral_radius(matrix: Array) -> arb:
    """Return a ball that encloses the spectral radius of a non-negative matrix: the largest Perron root of its classes.

    Parameters
    ----------
    matrix : (n, n) array of balls or float, >= 0
        Reducible, zero and empty ones too (0 exactly). An entry that is not proven to be positive counts as 0.
    """
    matrix = square(matrix)
    check_sign(matrix)
    there = pattern(matrix)
    root = arb(0)
    for members in classes(there):
        if len(members) > 1 or there[members[0], members[0]]:
            root = root.max(perron_root(matrix[np.ix_(members, members)]))
    return root


def inverse(matrix: Array) -> Array:
    """Return the inverse, class by class, so that what is zero by structure is an exact zero.

    In the order of the classes the matrix is block triangular: [[A, 0], [C, D]]^-1 = [[A^-1, 0], [-D^-1 C A^-1, D^-1]],
    applied to halves of the list of classes. For a V of residence times, entry (i, j) is the mean time spent in state i
    by one who enters at j.

    Parameters
    ----------
    matrix : (n, n) array of balls or float

    Raises
    ------
    ZeroDivisionError
        The matrix is not proven to be invertible.
    """
    matrix = square(matrix)
    groups = classes(possible(matrix))
    result = zeros(matrix.shape, matrix)

    def fill(first: int, last: int) -> None:
        if last - first == 1:
            block = np.ix_(groups[first], groups[first])
            result[block] = leaf_inverse(matrix[block])
            return
        half = (first + last) // 2
        fill(first, half)
        fill(half, last)
        early, late = np.concatenate(groups[first:half]), np.concatenate(groups[half:last])
        coupling = matrix[np.ix_(late, early)]
        if possible(coupling).any():
            inner = matmul(coupling, result[np.ix_(early, early)])
            result[np.ix_(late, early)] = -matmul(result[np.ix_(late, late)], inner)

    if groups:
        fill(0, len(groups))
    return result


@dataclass(frozen=True, eq=False)
class MMatrix:
    """Whether a matrix is a non-singular M-matrix.

    Attributes
    ----------
    verdict : str
        "yes": off-diagonal entries <= 0 and every eigenvalue has a positive real part (so the inverse is >= 0).
        "singular": it cannot be told from a singular M-matrix. "no": some eigenvalue is negative. "positive
        off-diagonal": an off-diagonal entry is positive.
    entry : (int, int) or None
        The offending entry (row, column), for "positive off-diagonal".
    members : array of int or None
        The rows of the class that fails, for "singular" and "no".
    decided : bool
        False where more bits could change the verdict; at the highest precision "singular" is then to be believed.
    """

    verdict: Literal["yes", "singular", "no", "positive off-diagonal"]
    entry: tuple[int, int] | None = None
    members: IntArray | None = None
    decided: bool = True


def m_matrix(matrix: Array) -> MMatrix:
    """Return whether V is a non-singular M-matrix, class by class.

    V is one where its off-diagonal entries are <= 0 and some x > 0 has V x > 0; it is none where the Perron root of
    c I - V exceeds c (for each class, c at least its largest diagonal entry). Both are tested in balls. A sign that
    is not proven is sought again with more bits where the entries are exact.

    Parameters
    ----------
    matrix : (n, n) array of balls or float

    References
    ----------
    Berman & Plemmons (1994) Nonnegative Matrices in the Mathematical Sciences, chapter 6 (from memory).
    """
    matrix = square(matrix)
    size = len(matrix)
    positive = below_zero(-matrix)
    np.fill_diagonal(positive, False)
    if positive.any():
        i, j = (int(k) for k in np.argwhere(positive)[0])
        return MMatrix("positive off-diagonal", entry=(i, j))
    there = pattern(matrix)
    maybe = possible(matrix) & ~there
    np.fill_diagonal(maybe, False)
    decided = not maybe.any()
    singular: MMatrix | None = None
    for members in classes(there | np.eye(size, dtype=bool)):
        block = matrix[np.ix_(members, members)]
        sign = _least_eigenvalue_sign(block)
        if sign == -1:
            return MMatrix("no", members=members, decided=decided)
        if sign != 1 and singular is None:
            singular = MMatrix("singular", members=members, decided=decided and sign == 0)
    return singular or MMatrix("yes", decided=decided)


def _least_eigenvalue_sign(block: Array) -> int | None:
    """Return the sign of the least real eigenvalue of an irreducible matrix with off-diagonal entries <= 0."""
    if len(block) == 1:
        entry = arb(block[0, 0])
        return 1 if entry > 0 else -1 if entry < 0 else 0 if entry.is_zero() else None
    if _has_positive_image(block):
        return 1
    exact = is_balls(block) and all(v.is_exact() for v in block.ravel())
    bits = ctx.prec
    while True:
        with precision(bits):
            least = -metzler_root(-block)
        if least > 0:
            return 1
        if least < 0:
            return -1
        if least.is_zero():
            return 0
        bits *= 2
        if not exact or bits > 2048:
            return 0 if exact and to_mat(block).det().is_zero() else None


def _has_positive_image(block: Array) -> bool:
    """Return whether the x that solves V x = 1 (in doubles) is positive and V x is proven positive."""
    size = len(block)
    floats = np.array([float(v) for v in block.ravel()]).reshape(block.shape)
    try:
        x = np.linalg.solve(floats, np.ones(size))
    except np.linalg.LinAlgError:
        return False
    if not (np.all(np.isfinite(x)) and np.all(x > 0)):
        return False
    if is_balls(block):
        column = arb_mat(size, 1, [arb(float(v)) for v in x])
        return all(v > 0 for v in (to_mat(block) * column).entries())
    return bool(np.all(floats @ x > 2 * (size + 2) * 2.0**-53 * (np.abs(floats) @ x)))


def metzler_root(block: Array) -> arb:
    """Return a ball around the largest real eigenvalue of an irreducible matrix with off-diagonal entries >= 0.

    With c large enough B + c I is non-negative, and aperiodic: its Perron root less c. The difference costs the bits by
    which c exceeds the result.
    """
    size = len(block)
    if size == 1:
        return arb(block[0, 0])
    largest = arb(0)
    for i in range(size):
        largest = largest.max(abs(arb(block[i, i])))
    shift = 2 * largest.upper()
    if is_balls(block):
        shifted = block.copy()
        for i in range(size):
            shifted[i, i] = shifted[i, i] + shift
        for i, j in np.argwhere(~pattern(shifted)):
            shifted[i, j] = ball(shifted[i, j]).nonnegative_part()
        return perron_root(shifted) - shift
    return _float_metzler_root(block, float(shift))


def _float_metzler_root(block: FloatArray, shift: float) -> arb:
    """Bound the root by the quotients of the matrix itself, so that the shift costs no digits."""
    shifted = block + shift * np.eye(len(block))
    scaling = scaled(shifted)
    x = perron_vector(scaling.matrix)
    by = scaling.exponents[None, :] - scaling.exponents[:, None]
    with np.errstate(over="ignore", under="ignore"):
        own = np.ldexp(block, np.clip(by, -3000, 3000))
    quotients = (own @ x) / x
    error = 2 * (len(x) + 3) * 2.0**-53 * ((np.abs(own) @ x) / x) + 5e-324 * 4 * (len(x) + 1) / x
    return interval(float((quotients - error).min()), float((quotients + error).max()))
