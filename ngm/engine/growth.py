"""How fast an infection grows at first: the spectral abscissa of F - V, whole and class by class."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from flint import acb_mat, arb

from ngm.engine.balls import Array, interval, is_balls, to_floats, to_mat
from ngm.engine.enclosure import metzler_root
from ngm.engine.linear import below_zero, pattern, square, zeros
from ngm.engine.structure import IntArray, classes, leading_to, reachable

__all__ = ["class_growth_rate", "doubling_time", "growth_factor", "growth_rate", "logarithm"]

#: Eigenvalues of a class with mixed signs are enclosed up to this size; larger ones are computed in doubles.
_ENCLOSED = 24


def growth_rate(F: Array, V: Array) -> arb:
    """Return the growth rate r: the largest real part of the eigenvalues of F - V.

    Where F >= 0 and V has no positive off-diagonal entry, F - V is non-negative off its diagonal and r is its Perron
    root, enclosed class by class by the quotients of F - V + c I. Then r has the sign of R0 - 1. Otherwise r is the
    largest real part of eigenvalues: enclosed for small classes, else rounded (an exact ball around a double).

    Parameters
    ----------
    F, V : (m, m) arrays of balls or float
        Transmission and transition, per time unit; F may have negative entries, V positive off-diagonal ones.

    Returns
    -------
    arb
        Per time unit. Doubles: enclosed for the matrices as rounded.

    Raises
    ------
    ValueError
        A matrix is not square or not finite, or their sizes differ.

    References
    ----------
    van den Driessche & Watmough (2002) Math. Biosci. 180:29-48
    """
    F, V = square(F, "F"), square(V, "V")
    if F.shape != V.shape:
        raise ValueError(f"F has shape {F.shape}, V has {V.shape}")
    return _abscissa(F - V)


def growth_factor(F: Array, V: Array) -> arb:
    """Return the growth factor per step in discrete time: rho(F + T), T = I - V.

    F + T = I + (F - V) is non-negative where F is, and then its Perron root is 1 + s(F - V), enclosed as `growth_rate` is.
    Otherwise it is the largest modulus of the eigenvalues.

    Parameters
    ----------
    F, V : (m, m) arrays of balls or float
        New infections by one member in a step, and I - T; T >= 0. F may have negative entries.

    Returns
    -------
    arb
        Without unit; exactly 0 where it is not proven positive.

    References
    ----------
    Allen & van den Driessche (2008) J. Difference Equ. Appl. 14:1127-1147 (from memory)

    Examples
    --------
    >>> F, T = np.array([[0, 0.3], [0, 0]]), np.array([[0.6, 0], [0.4, 0.8]])
    >>> round(float(growth_factor(F, np.eye(2) - T).mid()), 9)
    1.060555128
    """
    F, V = square(F, "F"), square(V, "V")
    if not below_zero(F).any():
        factor = 1 + growth_rate(F, V)
    else:
        factor = arb(float(np.max(np.abs(np.linalg.eigvals(np.eye(len(F)) + to_floats(F - V))))))
    return factor if factor > 0 else arb(0)


def logarithm(factor: arb) -> arb | None:
    """Return the growth rate per step that a growth factor is; None where it is 0."""
    return factor.log() if factor > 0 else None


def _abscissa(matrix: Array) -> arb:
    if len(matrix) == 0:
        raise ValueError("an empty matrix has no growth rate")
    largest: arb | None = None
    for members in classes(pattern(matrix) | np.eye(len(matrix), dtype=bool)):
        block = matrix[np.ix_(members, members)]
        negative = below_zero(block)
        np.fill_diagonal(negative, False)
        root = _largest_real_part(block) if negative.any() else metzler_root(block)
        largest = root if largest is None else largest.max(root)
    assert largest is not None
    return largest


def _largest_real_part(block: Array) -> arb:
    """Return the largest real part of the eigenvalues of a matrix of mixed signs."""
    if is_balls(block) and len(block) <= _ENCLOSED:
        try:
            values = acb_mat(to_mat(block)).eig(multiple=True)
        except (ValueError, ZeroDivisionError):
            values = []
        parts = [v.real for v in values]
        if parts and all(p.is_finite() for p in parts):
            largest: arb = parts[0]
            for part in parts[1:]:
                largest = largest.max(part)
            return largest
    return arb(float(np.linalg.eigvals(to_floats(block)).real.max()))


def class_growth_rate(F: Array, V: Array, members: Sequence[int] | IntArray) -> arb | None:
    """Return the growth rate of one class of types at infection, as if it were alone.

    It is the r at which the class's block of F (V + r I)^-1 has Perron root 1, V restricted to the states on paths
    from the class's types to states that infect it. These states with the class's rows of F are strongly connected,
    so that r is the spectral abscissa of F - V on them, F with the class's rows only.

    Parameters
    ----------
    F, V : (m, m) arrays of balls or float
        Per time unit; F >= 0, V a non-singular M-matrix.
    members : sequence of int
        The types of the class, as rows of F and V.

    Returns
    -------
    arb or None
        Per time unit; None for a class that does not infect its own types.
    """
    F, V = square(F, "F"), square(V, "V")
    chosen = np.asarray(members, dtype=np.intp)
    transitions = pattern(V)
    np.fill_diagonal(transitions, False)
    infecting = pattern(F[chosen, :]).any(axis=0)
    visited = reachable(transitions, chosen)
    sources = infecting & visited
    if not sources.any():
        return None
    states = np.nonzero(visited & leading_to(transitions, sources))[0]
    own = zeros(F.shape, F)
    own[chosen, :] = F[chosen, :]
    block = np.ix_(states, states)
    return _abscissa(own[block] - V[block])


def doubling_time(rate: arb | float) -> arb | None:
    """Return ln 2 / r, in time units, for a growth rate proven positive; else None.

    Examples
    --------
    >>> float(doubling_time(math.log(2)).mid())
    1.0
    >>> doubling_time(-0.1) is None
    True
    """
    r = interval(rate, rate) if isinstance(rate, float) and math.isfinite(rate) else arb(rate)
    return arb.const_log2() / r if r > 0 else None
