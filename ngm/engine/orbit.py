"""A periodic state: the solution of x' = f(x, t) that repeats after a period, by collocation.

On each of some pieces of the period x is a polynomial that meets the equation at Gauss nodes; pieces join, and the last
joins the first. All nodes are solved for at once by Newton's method, so that nothing has to be followed for years until it
settles, and a stiff equation costs no more. Pieces end where f may jump, and are halved until the solution stands still.

Source: Ascher, Mattheij & Russell (1988) Numerical Solution of Boundary Value Problems, ch. 5 (from memory).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy.sparse import csc_matrix
from scipy.sparse.linalg import splu

__all__ = ["NoOrbitError", "Orbit", "conserved_sums", "periodic_orbit"]

FloatArray = npt.NDArray[np.float64]
#: f and its slope: (n, k) states at k moments -> (n, k) and (k, n, n).
Field = Callable[[FloatArray, FloatArray], FloatArray]
Slope = Callable[[FloatArray, FloatArray], FloatArray]

#: Degree of the polynomials, pieces at first, and unknowns at most.
DEGREE, FIRST_PIECES, MOST_UNKNOWNS = 8, 4, 60_000
#: Relative change of the nodes at which pieces are not halved any more.
STANDS_STILL = 1e-11


class NoOrbitError(Exception):
    """No periodic state was found from the start that was given."""


@dataclass(frozen=True, eq=False, slots=True)
class Orbit:
    """A periodic state as polynomials: `ends` (p + 1,) of the pieces, `values` (p, degree + 1, n) at `points` in [0, 1]."""

    ends: FloatArray
    points: FloatArray
    values: FloatArray

    def at(self, moments: FloatArray) -> FloatArray:
        """Return the state at moments within the period, (n, k)."""
        piece = np.clip(np.searchsorted(self.ends, moments, side="right") - 1, 0, len(self.ends) - 2)
        local = (moments - self.ends[piece]) / (self.ends[piece + 1] - self.ends[piece])
        weights = _lagrange(self.points, local)
        return np.asarray(np.einsum("kd,kdn->nk", weights, self.values[piece]))


def _lagrange(points: FloatArray, x: FloatArray) -> FloatArray:
    """Return the values of the Lagrange polynomials of these points at x, (k, points)."""
    n = len(points)
    out = np.ones((len(x), n))
    for j in range(n):
        for m in range(n):
            if m != j:
                out[:, j] *= (x - points[m]) / (points[j] - points[m])
    return out


def _derivatives(points: FloatArray) -> FloatArray:
    """Return D with D[i, j]: slope at point i of the polynomial that is 1 at point j and 0 at the others."""
    n = len(points)
    difference = points[:, None] - points[None, :] + np.eye(n)
    weight = 1 / np.prod(difference, axis=1)
    D: FloatArray = weight[None, :] / weight[:, None] / difference
    np.fill_diagonal(D, 0.0)
    np.fill_diagonal(D, -D.sum(axis=1))
    return D


def conserved_sums(field: Callable[[FloatArray], FloatArray], size: int, seed: int = 7) -> FloatArray:
    """Return the linear sums of the state that the field never changes, (c, size), orthonormal rows.

    Parameters
    ----------
    field : callable
        (size, k) positive states -> (size, k) net flows; looked at in random states.
    """
    if size == 0:
        return np.empty((0, 0))
    rng = np.random.default_rng(seed)
    states = np.exp(rng.normal(size=(size, 2 * size + 6)))
    flows = np.asarray(field(states))
    scale = np.max(np.abs(flows), axis=0)
    flows = flows / np.where(scale > 0, scale, 1.0)
    left, values, _ = np.linalg.svd(flows, full_matrices=True)
    small = np.concatenate([values, np.zeros(size - len(values))]) <= 1e-10 * max(1e-300, float(values.max(initial=0)))
    return np.asarray(left[:, small].T)


def periodic_orbit(field: Field, slope: Slope, breaks: FloatArray, start: FloatArray, conserved: FloatArray) -> Orbit:
    """Return the periodic solution of x' = f(x, t) next to a start.

    Parameters
    ----------
    field, slope : callables
        f (n, k) and its derivative by the state (k, n, n), at states (n, k) and moments (k,).
    breaks : (b,) array
        0, where f may jump in time, and the period.
    start : (n,) array
        A first guess, the same all the time; its `conserved` sums are kept.
    conserved : (c, n) array
        Sums of the state that f never changes.

    Raises
    ------
    NoOrbitError
        Newton's method does not settle.
    """
    nodes = np.polynomial.legendre.leggauss(DEGREE)[0] / 2 + 0.5
    points = np.concatenate([[0.0], nodes])
    lengths = np.diff(breaks)
    parts = np.maximum(1, np.round(FIRST_PIECES * lengths / lengths.sum())).astype(int)
    guess: Orbit | None = None
    probe = breaks[0] + (breaks[-1] - breaks[0]) * (np.arange(97) + 0.5) / 97
    while True:
        ends = np.concatenate(
            [
                *(a + (b - a) * np.arange(n) / n for a, b, n in zip(breaks[:-1], breaks[1:], parts, strict=True)),
                breaks[-1:],
            ]
        )
        if (len(ends) - 1) * len(points) * len(start) > MOST_UNKNOWNS:
            raise NoOrbitError
        moments = ends[:-1, None] + np.diff(ends)[:, None] * points[None, :]
        if guess is None:
            values = np.broadcast_to(start, (*moments.shape, len(start))).copy()
        else:
            values = guess.at(moments.ravel()).T.reshape(*moments.shape, len(start))
        found = Orbit(ends, points, _newton(field, slope, ends, points, values, conserved, start))
        if guess is not None:
            before, now = guess.at(probe), found.at(probe)
            if np.max(np.abs(now - before)) <= STANDS_STILL * max(1e-300, float(np.max(np.abs(now)))):
                return found
        guess, parts = found, parts * 2


def _newton(
    field: Field,
    slope: Slope,
    ends: FloatArray,
    points: FloatArray,
    values: FloatArray,
    conserved: FloatArray,
    start: FloatArray,
) -> FloatArray:
    pieces, degree, n = len(ends) - 1, len(points) - 1, len(start)
    c = len(conserved)
    lengths = np.diff(ends)
    moments = (ends[:-1, None] + lengths[:, None] * points[None, 1:]).ravel()
    D = _derivatives(points)[1:]
    last = _lagrange(points, np.array([1.0]))[0]
    width = (degree + 1) * n
    total = pieces * width + c
    multipliers = np.zeros(c)
    size = max(1e-300, float(np.max(np.abs(start), initial=0.0)))

    def residual(X: FloatArray, mu: FloatArray) -> FloatArray:
        f = np.asarray(field(X[:, 1:].reshape(-1, n).T, moments)).T.reshape(pieces, degree, n)
        inner = np.einsum("dj,pjn->pdn", D, X) - lengths[:, None, None] * f
        joined = np.einsum("j,pjn->pn", last, X) - np.roll(X[:, 0], -1, axis=0)
        joined[-1] += conserved.T @ mu
        kept = conserved @ (X[0, 0] - start)
        whole = np.concatenate([inner, joined[:, None]], axis=1).ravel()
        return np.concatenate([whole, kept])

    value = residual(values, multipliers)
    for _ in range(60):
        J = np.asarray(slope(values[:, 1:].reshape(-1, n).T, moments)).reshape(pieces, degree, n, n)
        try:
            step = splu(_jacobian(D, last, lengths, J, conserved, total)).solve(value)
        except RuntimeError:  # exactly singular
            break
        if not np.all(np.isfinite(step)):
            break
        factor = 1.0
        while factor > 1e-6:
            trial = values - factor * step[: total - c].reshape(values.shape)
            mu = multipliers - factor * step[total - c :]
            new = residual(trial, mu)
            if np.all(np.isfinite(new)) and np.linalg.norm(new) <= np.linalg.norm(value) * (1 - 0.1 * factor):
                break
            factor /= 2
        else:
            if float(np.max(np.abs(step))) <= 1e-9 * size:
                return values
            break
        values, multipliers, value = trial, mu, new
        if float(np.max(np.abs(step))) <= 1e-13 * size:
            return values
    raise NoOrbitError


def _jacobian(
    D: FloatArray, last: FloatArray, lengths: FloatArray, J: FloatArray, conserved: FloatArray, total: int
) -> csc_matrix:
    pieces, degree, n, _ = J.shape
    width, c = (degree + 1) * n, len(conserved)
    rows, columns, entries = [], [], []

    def put(row: int, column: int, block: npt.NDArray[Any]) -> None:
        i, j = np.nonzero(block)
        rows.append(i + row)
        columns.append(j + column)
        entries.append(block[i, j])

    eye = np.eye(n)
    derivative = np.kron(D, eye)
    for p in range(pieces):
        at = p * width
        block = derivative.copy()
        for d in range(degree):
            block[d * n : (d + 1) * n, (d + 1) * n : (d + 2) * n] -= lengths[p] * J[p, d]
        put(at, at, block)
        put(at + degree * n, at, np.kron(last[None, :], eye))
        put(at + degree * n, ((p + 1) % pieces) * width, -eye)
    if c:
        put((pieces - 1) * width + degree * n, pieces * width, conserved.T)
        put(pieces * width, 0, conserved)
    shape = (total, total)
    return csc_matrix((np.concatenate(entries), (np.concatenate(rows), np.concatenate(columns))), shape=shape)
