"""Perron roots of very many small matrices at once: arrays laid out entry by entry, one draw in each place of the last axis.

Every operation acts draw by draw and is one of + - * / sqrt (which are rounded correctly whatever the processor), so a
draw's root does not depend on which draws stand beside it. By class: one type is its entry; two types a quadratic; three
and four Newton's method on the characteristic polynomial; more, steps of the power method and then Noda's iteration, told
to be done by the Collatz-Wielandt quotients. What none of them settles goes, draw by draw, to the root with proven bounds.
"""

from __future__ import annotations

from functools import lru_cache
from typing import Any

import numpy as np
import numpy.typing as npt

from ngm.engine.perron import reproduction_number
from ngm.engine.structure import classes, cyclic_sets

__all__ = ["perron_roots"]

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]

_UNIT = 2.0**-53
#: The relative distance of the two quotients, or the estimated error of a root of a polynomial, that is accepted.
_GAP = 1e-12
#: Doubles in the matrices that are worked on at a time: enough for numpy's calls to cost little, few enough to stay near.
_WORKING_SET = 1 << 18
#: How often a shifted matrix is factored, and how many solutions each factored one gives.
_MOST_FACTORED, _MOST_SOLVED = 12, 4


def perron_roots(K: FloatArray, pattern: BoolArray | None = None) -> FloatArray:
    """Return the spectral radius of each of many non-negative matrices.

    Parameters
    ----------
    K : (n, n, N) array of float
        K[i, j, d]: infections of i by one of j in draw d, no unit.
    pattern : (n, n) array of bool, optional
        False where an entry is 0 in every draw. A draw with more zeros is taken by its own zeros; without `pattern`
        all are.

    Returns
    -------
    (N,) array of float
        No unit; nan where a matrix has an entry that is negative or not finite.

    Notes
    -----
    Relative errors of some 1e-14 for three and more types. The polynomial of a non-negative matrix is increasing and
    convex above its largest root, so that Newton's method comes down to it from any bound; it is left where the
    coefficients have lost too many digits to cancellation. Noda's iteration: the next x solves (s I - K) y = x, s the
    largest quotient (K x)_i / x_i.

    References
    ----------
    Noda (1971) Numer. Math. 17:382-386; Berman & Plemmons (1994) Nonnegative Matrices in the Mathematical Sciences,
    chapter 2 (both from memory)

    Examples
    --------
    >>> K = np.array([[[0.0, 0.8], [9.0, 1.5]], [[4.0, 0.6], [0.0, 0.5]]])
    >>> perron_roots(K).round(9).tolist()
    [6.0, 1.610468636]
    """
    K = np.asarray(K, dtype=float)
    if K.ndim != 3 or K.shape[0] != K.shape[1]:
        raise ValueError(f"K has shape {K.shape}; (n, n, N) is needed")
    n, size = K.shape[0], K.shape[2]
    out = np.zeros(size)
    if n == 0 or size == 0:
        return out
    width = max(16, _WORKING_SET // (n * n))
    with np.errstate(all="ignore"):
        for start in range(0, size, width):
            part = K[:, :, start : start + width]
            out[start : start + width] = _roots(part, pattern)
    return out


def _roots(K: FloatArray, pattern: BoolArray | None) -> FloatArray:
    n = len(K)
    if n == 1 and K.min() >= 0 and K.max() < np.inf:
        return np.asarray(K[0, 0])
    flat = K.reshape(n * n, -1)
    # A sum tells in one pass: nan and infinity stay in it. Entries below 0 are looked for by the smallest.
    fine = np.isfinite(flat.sum(axis=0)) & (flat.min(axis=0) >= 0)
    if not fine.all():
        out = np.full(K.shape[2], np.nan)
        if fine.any():
            out[fine] = _roots(K[:, :, fine], pattern)
        return out
    if pattern is None:
        return _by_zeros(K, np.ones((n, n), dtype=bool))
    out = np.zeros(K.shape[2])
    found = _classes(pattern.tobytes(), n)
    for members in found:
        if len(members) == 1:
            own = K[members[0], members[0]]
        else:
            inside = np.ix_(members, members)
            own = _class_roots(K if len(members) == n else K[inside], pattern[inside])
        if len(found) == 1:
            return np.asarray(own)
        np.maximum(out, own, out=out)
    return out


@lru_cache(maxsize=256)
def _classes(pattern: bytes, n: int) -> list[npt.NDArray[np.intp]]:
    """Return the classes of a pattern, which comes again with every part of the draws."""
    return classes(np.frombuffer(pattern, dtype=bool).reshape(n, n))


@lru_cache(maxsize=256)
def _sets(pattern: bytes, n: int) -> list[npt.NDArray[np.intp]]:
    """Return the sets of types that one class passes through in turn: as many as its period."""
    return cyclic_sets(np.frombuffer(pattern, dtype=bool).reshape(n, n))


def _by_zeros(K: FloatArray, pattern: BoolArray) -> FloatArray:
    """Return the roots of finite non-negative matrices, each by its own zeros; those with the same are done together."""
    rows, columns = np.nonzero(pattern)
    signs = np.packbits(K[rows, columns] > 0, axis=0).T
    kinds, which = np.unique(signs, axis=0, return_inverse=True)
    out = np.empty(K.shape[2])
    for k in range(len(kinds)):
        chosen = np.flatnonzero(which.ravel() == k)
        own = pattern.copy()
        own[rows, columns] = np.unpackbits(kinds[k], count=len(rows)).astype(bool)
        out[chosen] = _roots(np.ascontiguousarray(K[:, :, chosen]), own)
    return out


def _class_roots(B: FloatArray, pattern: BoolArray) -> FloatArray:
    """Return the roots of matrices of one class, at least two types; `pattern` irreducible."""
    n = len(B)
    if n == 2:
        return _quadratic(B)
    rows, columns = np.nonzero(pattern)
    missing = (B[rows, columns] == 0).any(axis=0)
    if missing.any():
        out = np.empty(B.shape[2])
        out[missing] = _by_zeros(B[:, :, missing], pattern)
        if not missing.all():
            out[~missing] = _full_roots(B[:, :, ~missing], pattern)
        return out
    return _full_roots(B, pattern)


def _full_roots(B: FloatArray, pattern: BoolArray) -> FloatArray:
    """Return the roots of matrices that are positive just where the irreducible pattern is."""
    sets = _sets(pattern.tobytes(), len(B))
    if len(sets) > 1:
        return _periodic(B, pattern, sets)
    if len(B) <= 4:
        found = _newton(B)
    else:
        found = _iterate(B)
    for k in np.flatnonzero(np.isnan(found)):
        found[k] = reproduction_number(B[:, :, k])
    return found


def _quadratic(B: FloatArray) -> FloatArray:
    """Return (a + d)/2 + sqrt(((a - d)/2)^2 + b c): no subtraction of what is nearly equal, as b c is not negative.

    Scaled by the larger of the diagonal and sqrt(b) sqrt(c), so that nothing leaves the range of doubles.
    """
    a, b, c, d = B[0, 0], B[0, 1], B[1, 0], B[1, 1]
    across = np.sqrt(b) * np.sqrt(c)
    if not (a.any() or d.any()):
        return np.asarray(across)
    scale = np.maximum(np.maximum(a, d), across)
    scale[scale == 0] = 1
    half = (a - d) / scale
    half *= 0.5
    across /= scale
    root = np.sqrt(half * half + across * across)
    root += 0.5 * (a / scale + d / scale)
    root *= scale
    return np.asarray(root)


def _periodic(B: FloatArray, pattern: BoolArray, sets: list[npt.NDArray[np.intp]]) -> FloatArray:
    """Return the h-th root of the root of one block of B^h, on the smallest of the h sets passed through in turn."""
    h = len(sets)
    start = min(range(h), key=lambda s: len(sets[s]))
    block: FloatArray | None = None
    there: Any = None
    for step in range(h):
        before, after = sets[(start + step) % h], sets[(start + step + 1) % h]
        factor, links = B[np.ix_(after, before)], pattern[np.ix_(after, before)]
        block = factor if block is None else _product(factor, block, links)
        there = links if there is None else links.astype(int) @ there.astype(int) > 0
    assert block is not None
    found = block[0, 0].copy() if len(block) == 1 else _class_roots(block, there)
    return _nth_root(found, h)


def _product(A: FloatArray, B: FloatArray, links: BoolArray) -> FloatArray:
    out = np.zeros((A.shape[0], B.shape[1], A.shape[2]))
    for i, k in zip(*np.nonzero(links), strict=True):
        out[i] += A[i, k] * B[k]
    return out


def _nth_root(values: FloatArray, h: int) -> FloatArray:
    while h % 2 == 0:
        values = np.sqrt(values)
        h //= 2
    if h == 1:
        return values
    # numpy may take the general power of a long array by other instructions than of a short one, and a draw's last digit
    # would then depend on its neighbours.
    return np.asarray([float(v) ** (1.0 / h) for v in values.tolist()])


# --- three and four types: Newton's method on the characteristic polynomial -----------------------------------------------


def _newton(B: FloatArray) -> FloatArray:
    """Return the roots for three or four types; nan where the coefficients lost too many digits.

    The matrix is first scaled by its row sums r, B[i, j] r[j] / r[i], which brings its row sums together.
    """
    n = len(B)
    sums = B.sum(axis=1)
    B = B * (sums[None, :, :] / sums[:, None, :])
    top = B.sum(axis=1).max(axis=0)
    B /= top
    c = _coefficients_3(B) if n == 3 else _coefficients_4(B)
    x: FloatArray = np.ones_like(top)
    for _ in range(40):
        value = x + c[0]
        slope = np.ones_like(x)
        for coefficient in c[1:]:
            slope *= x
            slope += value
            value *= x
            value += coefficient
        step = value / slope
        # Past the root by rounding, a draw stays where it is: rounding is then all that moves it.
        step[~(step > 0)] = 0
        x -= step
        if not (step > 4 * _UNIT * x).any():
            break
    slope = np.ones_like(x)
    value = x + c[0]
    for coefficient in c[1:]:
        slope *= x
        slope += value
        value *= x
        value += coefficient
    # Each coefficient is a sum of products of at most 1 each: Sum C(n, k) x^(n - k) bounds what was added up.
    spread = (1 + x) ** 2 if n == 3 else (1 + x) ** 3
    error = 16 * _UNIT * spread * (1 + x) / (slope * x)
    done = (error < _GAP) & ~(step > 1e-8 * x) & (np.abs(value) <= _GAP * slope * x)
    x *= top
    x[~done] = np.nan
    if not done.all():
        x[~done] = _iterate(B[:, :, ~done] * top[~done])
    return x


def _coefficients_3(B: FloatArray) -> tuple[FloatArray, ...]:
    """Return c1, c2, c3 of x^3 + c1 x^2 + c2 x + c3 = det(x I - B)."""
    (a, b, c), (d, e, f), (g, h, i) = B
    ei_fh = e * i - f * h
    c2 = a * e - b * d + a * i - c * g + ei_fh
    c3 = b * (d * i - f * g) - a * ei_fh - c * (d * h - e * g)
    return -(a + e + i), c2, c3


def _coefficients_4(B: FloatArray) -> tuple[FloatArray, ...]:
    """Return c1 to c4 of det(x I - B) for four types, by the minors of the first and of the last two rows."""
    pairs = [(0, 1), (0, 2), (0, 3), (1, 2), (1, 3), (2, 3)]
    upper = {(j, k): B[0, j] * B[1, k] - B[0, k] * B[1, j] for j, k in pairs}
    lower = {(j, k): B[2, j] * B[3, k] - B[2, k] * B[3, j] for j, k in pairs}
    determinant = (
        upper[0, 1] * lower[2, 3]
        - upper[0, 2] * lower[1, 3]
        + upper[0, 3] * lower[1, 2]
        + upper[1, 2] * lower[0, 3]
        - upper[1, 3] * lower[0, 2]
        + upper[2, 3] * lower[0, 1]
    )
    second = (
        upper[0, 1]
        + lower[2, 3]
        + (B[0, 0] + B[1, 1]) * (B[2, 2] + B[3, 3])
        - (B[0, 2] * B[2, 0] + B[0, 3] * B[3, 0] + B[1, 2] * B[2, 1] + B[1, 3] * B[3, 1])
    )
    # Principal minors of three types: each row of a pair, expanded by its 2 x 2 minors in the other two.
    third = (
        B[2, 0] * upper[1, 2]
        - B[2, 1] * upper[0, 2]
        + B[2, 2] * upper[0, 1]
        + B[3, 0] * upper[1, 3]
        - B[3, 1] * upper[0, 3]
        + B[3, 3] * upper[0, 1]
        + B[0, 0] * lower[2, 3]
        - B[0, 2] * lower[0, 3]
        + B[0, 3] * lower[0, 2]
        + B[1, 1] * lower[2, 3]
        - B[1, 2] * lower[1, 3]
        + B[1, 3] * lower[1, 2]
    )
    return -(B[0, 0] + B[1, 1] + B[2, 2] + B[3, 3]), second, -third, determinant


# --- more types: power steps, then inverse steps --------------------------------------------------------------------------


def _iterate(B: FloatArray) -> FloatArray:
    """Return the roots of irreducible aperiodic matrices; nan where the quotients do not come together.

    With A = s I - B and A y = x, (B y)_i / y_i = s - x_i / y_i: the quotients come with each solution. The first shift
    is an estimate of the root from both sides; where a solution has mixed signs the next shift is the largest quotient so
    far, for which A is an M-matrix (Noda's choice).
    """
    size = B.shape[2]
    out = np.full(size, np.nan)
    left = B.sum(axis=0)
    x = B.sum(axis=1)
    x /= x.max(axis=0)
    image = _images(B, x)
    low, high = _bounds(image / x)
    close = _accept(out, np.arange(size), low, high)
    shift = (left * image).sum(axis=0) / (left * x).sum(axis=0)
    shift += 1e-6 * (high - low)
    x = image / image.max(axis=0)
    active = np.flatnonzero(~close)
    for _ in range(_MOST_FACTORED):
        if not len(active):
            break
        if len(active) < B.shape[2]:
            keep = ~close
            B, x, shift, high, low = B[:, :, keep], x[:, keep], shift[keep], high[keep], low[keep]
        A = _factored(B, shift)
        close = np.zeros(len(active), dtype=bool)
        for _ in range(_MOST_SOLVED):
            y = _solved(A, x)
            quotients = shift - x / y
            down, up = _bounds(quotients)
            y /= y[0]
            valid = (y > 0).all(axis=0) & (up - down < high - low)
            x = np.where(valid, y, x)
            x /= x.max(axis=0)
            low, high = np.where(valid, down, low), np.where(valid, up, high)
            close |= _accept(out, active, low, high)
            if not valid.any() or close.all():
                break
        # A shift at the root itself leaves nothing to divide by: a hair above the largest quotient is enough.
        shift = high * (1 + 4 * _UNIT)
        active = active[~close]
    return out


def _accept(out: FloatArray, active: npt.NDArray[np.intp], low: FloatArray, high: FloatArray) -> BoolArray:
    close = high - low <= (_GAP / 8) * high
    fresh = close & np.isnan(out[active])
    out[active[fresh]] = 0.5 * (high[fresh] + low[fresh])
    return np.asarray(close)


def _bounds(quotients: FloatArray) -> tuple[FloatArray, FloatArray]:
    return quotients.min(axis=0), quotients.max(axis=0)


def _images(B: FloatArray, x: FloatArray) -> FloatArray:
    """Return B x, term by term."""
    out = B[:, 0] * x[0]
    for k in range(1, len(x)):
        out += B[:, k] * x[k]
    return np.asarray(out)


def _factored(B: FloatArray, shift: FloatArray) -> FloatArray:
    """Return shift I - B as L U in one array (L with a diagonal of 1), by elimination without exchanges."""
    A = -B
    n = len(A)
    for k in range(n):
        A[k, k] += shift
    room = np.empty_like(A)
    for k in range(n - 1):
        A[k + 1 :, k] /= A[k, k]
        rest = np.multiply(A[k + 1 :, k][:, None, :], A[k, k + 1 :][None, :, :], out=room[k + 1 :, k + 1 :])
        A[k + 1 :, k + 1 :] -= rest
    return np.asarray(A)


def _solved(A: FloatArray, right: FloatArray) -> FloatArray:
    """Return y with L U y = right."""
    y = right.copy()
    n = len(y)
    for k in range(n - 1):
        y[k + 1 :] -= A[k + 1 :, k] * y[k]
    for k in range(n - 1, -1, -1):
        y[k] /= A[k, k]
        if k:
            y[:k] -= A[:k, k] * y[k]
    return y
