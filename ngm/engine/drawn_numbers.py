"""Growth rates and target reproduction numbers of many matrices at once, as `perron_roots` gives their Perron roots."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from ngm.engine.batch import perron_roots
from ngm.engine.structure import classes

__all__ = ["growth_rates", "target_numbers"]

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]


def growth_rates(slope: FloatArray, pattern: BoolArray | None = None) -> FloatArray:
    """Return the largest real part of the eigenvalues of each of many matrices F - V.

    Where nothing off the diagonal is negative it is the largest root of the classes, each rho(B + c I) - c with c the
    largest loss of its members; else eigenvalues are computed one by one.

    Parameters
    ----------
    slope : (m, m, N) array of float
        F - V in each draw, per time unit.
    pattern : (m, m) array of bool, optional
        False where an entry is 0 in every draw.

    Returns
    -------
    (N,) array of float
        Per time unit; nan where a matrix is not finite or m is 0.

    Examples
    --------
    E to I at 0.5, I infects at 0.6 and is lost at 0.2: r solves (r + 0.5)(r + 0.2) = 0.3.

    >>> slope = np.array([[[-0.5], [0.6]], [[0.5], [-0.2]]])
    >>> growth_rates(slope).round(9).tolist()
    [0.217890835]
    """
    m, size = len(slope), slope.shape[-1]
    if m == 0 or size == 0:
        return np.full(size, np.nan)
    flat = slope.reshape(m * m, size)
    off = ~np.eye(m, dtype=bool).ravel()
    finite = np.isfinite(flat).all(axis=0)
    quick = finite & (flat[off].min(axis=0, initial=0.0) >= 0)
    out = np.full(size, np.nan)
    if quick.any():
        there = (flat != 0).any(axis=1).reshape(m, m) if pattern is None else pattern
        part = slope if quick.all() else slope[:, :, quick]
        out[quick] = _largest(part, there)
    slow = np.flatnonzero(finite & np.isnan(out))
    if len(slow):
        values = np.linalg.eigvals(np.moveaxis(slope[:, :, slow], 2, 0))
        out[slow] = values.real.max(axis=1)
    return out


def _largest(slope: FloatArray, there: BoolArray) -> FloatArray:
    out = np.full(slope.shape[-1], -np.inf)
    for members in classes(there):
        if len(members) == 1:
            root = slope[members[0], members[0]]
        else:
            inside = np.ix_(members, members)
            B = slope[inside].copy()
            k = np.arange(len(members))
            shift = np.maximum(0.0, -B[k, k].min(axis=0))
            B[k, k] += shift
            links = there[inside].copy()
            links[k, k] = True
            root = perron_roots(B, links) - shift
        np.maximum(out, root, out=out)
    return out


def target_numbers(K: FloatArray, targeted: BoolArray) -> FloatArray:
    """Return the target reproduction number of the same entries of each of many next-generation matrices.

    T = rho(K_S (I - K + K_S)^-1), K_S the targeted entries; for whole rows it is the type-reproduction number.

    Parameters
    ----------
    K : (n, n, N) array of float
        K[i, j, d]: infections of i by one of j in draw d, no unit.
    targeted : (n, n) array of bool

    Returns
    -------
    (N,) array of float
        No unit; nan where the other entries sustain infection, rho(K - K_S) >= 1, or K has no value.

    References
    ----------
    Shuai, Heesterbeek & van den Driessche (2013) J. Math. Biol. 67:1067-1082

    Examples
    --------
    >>> K = np.array([[[0.8], [1.5]], [[0.6], [0.5]]])
    >>> target_numbers(K, np.array([[False, True], [False, False]])).round(9).tolist()
    [9.0]
    """
    n, size = len(K), K.shape[-1]
    out = np.full(size, np.nan)
    others = np.where(targeted[:, :, None], 0.0, K)
    with np.errstate(invalid="ignore"):
        exists = perron_roots(others) < 1
    exists &= np.isfinite(K.reshape(n * n, size)).all(axis=0)
    if not exists.any():
        return out
    rows = np.flatnonzero(targeted.any(axis=1))
    left = np.eye(n) - np.moveaxis(others[:, :, exists], 2, 0)
    enter = np.broadcast_to(np.eye(n)[:, rows], (len(left), n, len(rows)))
    acting = np.moveaxis(np.where(targeted[:, :, None], K, 0.0)[rows][:, :, exists], 2, 0)
    through = np.maximum(acting @ np.linalg.solve(left, enter), 0.0)
    out[exists] = perron_roots(np.ascontiguousarray(np.moveaxis(through, 0, 2)))
    return out
