"""Type-, target- and state-reproduction numbers: what a control measure that acts on a part must undo.

Each takes matrices of balls (then T is the double nearest to the exact number) or of doubles.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt
from flint import arb

from ngm.engine.balls import Array, FloatArray, is_balls, to_floats
from ngm.engine.enclosure import inverse, m_matrix, spectral_radius
from ngm.engine.linear import identity, matmul, pattern, square, value, zeros
from ngm.engine.spectrum import spectrum
from ngm.engine.structure import BoolArray

__all__ = [
    "ReproductionNumber",
    "all_single_types",
    "critical_effort",
    "rest_number",
    "state_number_by_row",
    "state_reproduction_numbers",
    "target_reproduction_number",
    "type_reproduction_number",
]

#: Classes up to this size are treated type by type, larger ones by one inverse for all types.
_SMALL = 24


@dataclass(frozen=True, slots=True)
class ReproductionNumber:
    """A reproduction number T; None where what control leaves alone sustains the infection.

    `rest` is the spectral radius of that remainder: T exists where it is below 1. Of large classes
    (`all_single_types`) it is an estimate for display, to about three digits.
    """

    T: float | None
    rest: float

    @property
    def critical_effort(self) -> float | None:
        """The share to remove: 1 - 1/T where T > 1, 0 where T <= 1, None where T is."""
        return critical_effort(self.T)


def critical_effort(T: float | None) -> float | None:
    """Return the share to remove so that the infection does not grow: 1 - 1/T for T > 1, 0 for T <= 1, None for None.

    Examples
    --------
    >>> critical_effort(5.0), critical_effort(0.5), critical_effort(None)
    (0.8, 0.0, None)
    """
    if T is None:
        return None
    return (T - 1.0) / T if T > 1.0 else 0.0


def rest_number(K: Array, targeted: npt.ArrayLike) -> float:
    """Return the spectral radius of what control leaves alone.

    Parameters
    ----------
    K : (m, m) array of balls or float, >= 0
    targeted : (m,) or (m, m) array of bool
        Targeted types (rows of K), or targeted entries of K.
    """
    K, mask = _checked(K, targeted)
    if mask.ndim == 1:
        rest = np.nonzero(~mask)[0]
        return value(spectral_radius(K[np.ix_(rest, rest)]))
    return value(spectral_radius(_only(K, ~mask)))


def type_reproduction_number(K: Array, targeted: npt.ArrayLike) -> ReproductionNumber:
    """Return the type-reproduction number of the targeted types.

    Expected infections of targeted types due to one of them, directly or through untargeted types:
    T = rho(P K (I - (I - P) K)^-1), P keeps the targeted rows; in blocks rho(K_tt + K_tr (I - K_rr)^-1 K_rt). T > 1
    exactly where R0 > 1; T = R0 where all types are targeted. A T of 0 is possible: a type that infects nobody.

    Parameters
    ----------
    K : (m, m) array of balls or float, >= 0
        Next-generation matrix, no unit; K[i, j]: infections of i by one of j.
    targeted : (m,) array of bool
        True where control acts; at least one.

    Returns
    -------
    ReproductionNumber
        T is None where the rest sustains infection: rho(K_rr) >= 1.

    Raises
    ------
    ValueError
        K is not square, negative or not finite; `targeted` is too long, short or all False.

    References
    ----------
    Roberts & Heesterbeek (2003) Proc. R. Soc. B 270:1359, doi:10.1098/rspb.2003.2339

    Examples
    --------
    A vector infects 2 hosts, a host 3 vectors: R0 = sqrt(6), but host control must undo 6.

    >>> K = np.array([[0.0, 3.0], [2.0, 0.0]])
    >>> round(type_reproduction_number(K, np.array([False, True])).T, 9)
    6.0
    """
    K, mask = _checked(K, targeted)
    if mask.ndim != 1:
        raise ValueError("targeted types are a vector, one value a type")
    t, r = np.nonzero(mask)[0], np.nonzero(~mask)[0]
    rest = spectral_radius(K[np.ix_(r, r)])
    if not rest < 1:
        return ReproductionNumber(None, value(rest))
    through = K[np.ix_(t, t)]
    if len(r):
        try:
            stays = _stays(K[np.ix_(r, r)])
        except ZeroDivisionError:
            return ReproductionNumber(None, value(rest))
        through = through + matmul(K[np.ix_(t, r)], matmul(stays, K[np.ix_(r, t)]))
    return ReproductionNumber(value(spectral_radius(through)), value(rest))


def target_reproduction_number(K: Array, targeted: npt.ArrayLike) -> ReproductionNumber:
    """Return the target reproduction number of a set of entries of K.

    With K_S the targeted entries and 0 elsewhere: T = rho(K_S (I - K + K_S)^-1). Dividing the targeted entries by T
    brings the spectral radius to 1. For a row of entries it is the type-reproduction number, for all of them R0.

    Parameters
    ----------
    K : (m, m) array of balls or float, >= 0
        Next-generation matrix, no unit.
    targeted : (m, m) array of bool
        True for targeted entries [row, column]; at least one.

    Returns
    -------
    ReproductionNumber
        T is None where the other entries sustain infection: rho(K - K_S) >= 1.

    Raises
    ------
    ValueError
        K is not square, negative or not finite; `targeted` has another shape or is all False.

    References
    ----------
    Shuai, Heesterbeek & van den Driessche (2013) J. Math. Biol. 67:1067-1082, with the correction of 2015, J. Math.
    Biol. 71:255.

    Examples
    --------
    >>> K = np.array([[0.8, 1.5], [0.6, 0.5]])
    >>> round(target_reproduction_number(K, np.array([[False, True], [False, False]])).T, 9)
    9.0
    """
    K, mask = _checked(K, targeted)
    if mask.ndim != 2:
        raise ValueError("targeted entries are a matrix, one value an entry")
    others = _only(K, ~mask)
    rest = spectral_radius(others)
    if not rest < 1:
        return ReproductionNumber(None, value(rest))
    rows = np.nonzero(mask.any(axis=1))[0]
    try:
        stays = _stays(others)
    except ZeroDivisionError:
        return ReproductionNumber(None, value(rest))
    through = matmul(_only(K, mask)[rows, :], stays[:, rows])
    return ReproductionNumber(value(spectral_radius(through)), value(rest))


def all_single_types(K: Array) -> list[ReproductionNumber]:
    """Return the type-reproduction number of every single type: what `type_reproduction_number` gives for each alone.

    The way from a type back to itself stays in its class, so that only the class counts, once all other classes die
    out by themselves. With B = (I - K)^-1 of the class and i the type: T_i = k_ii + sum_r k_ir B_ri / B_ii, and the
    rest dies out exactly where y = B 1 - B_i (B 1)_i / B_ii, the solution of (I - K_rr) y = 1, is positive. So one
    inverse serves all types; what it cannot decide is done type by type.

    Parameters
    ----------
    K : (m, m) array of balls or float, >= 0
        Next-generation matrix, no unit.
    """
    K = square(K, "K")
    parts = spectrum(K, vectors=False)
    result: list[ReproductionNumber | None] = [None] * len(K)
    for number, members in enumerate(parts.classes):
        others = arb(0)
        for other, root in enumerate(parts.roots):
            if other != number:
                others = others.max(root)
        block = K[np.ix_(members, members)]
        for i, found in zip(members, _within_class(block), strict=True):
            rest = max(found.rest, value(others))
            result[int(i)] = ReproductionNumber(found.T if others < 1 else None, rest)
    return [found for found in result if found is not None]


def _within_class(block: Array) -> list[ReproductionNumber]:
    size = len(block)
    single = np.eye(size, dtype=bool)
    if size <= _SMALL:
        return [type_reproduction_number(block, single[i]) for i in range(size)]
    numbers, decided = _by_one_inverse(block)
    rests = _rest_estimates(to_floats(block))
    result = []
    for i in range(size):
        if not decided[i]:
            result.append(type_reproduction_number(block, single[i]))
        elif numbers[i] is None:
            result.append(ReproductionNumber(None, max(float(rests[i]), 1.0)))
        else:
            result.append(ReproductionNumber(numbers[i], min(float(rests[i]), 1.0)))
    return result


def _by_one_inverse(block: Array) -> tuple[list[float | None], BoolArray]:
    """Return T of each type of a class (None where the rest sustains itself), and for which types that is decided."""
    size = len(block)
    nothing: list[float | None] = [None] * size
    try:
        B = inverse(identity(size, block) - block)
    except ZeroDivisionError:
        return nothing, np.zeros(size, dtype=bool)
    diagonal = np.diagonal(B).copy()
    apart = pattern(diagonal)
    diagonal[~apart] = zeros((1,), block)[0] + 1
    sums = B.sum(axis=1)
    images = sums[:, None] - B * (sums / diagonal)[None, :]
    relative = B / diagonal[None, :]
    for i in range(size):
        relative[i, i] = zeros((1,), block)[0]
        images[i, i] = zeros((1,), block)[0] + 1
    # Where the rest dies out, y is at least 1 everywhere; where it does not, some entry of y is not positive.
    if is_balls(block):
        exists = apart & np.array([all(v > 0 for v in images[:, i]) for i in range(size)])
        fails = apart & np.array([any(v < 1 for v in images[:, i]) for i in range(size)])
    else:
        # Doubles prove nothing by themselves: (I - K_rr) y = 1 and (I - K_rr) z = K_ri are tested as equations.
        close = _residuals(block, images, np.ones((size, size))) & _residuals(block, relative, block)
        exists = apart & close & np.all(images > 0.5, axis=0)
        fails = apart & close & np.any(images < 0.5, axis=0)
        relative = np.maximum(relative, 0.0)
    loops = np.diagonal(block)
    T = [loops[i] + (block[i, :] * relative[:, i]).sum() for i in range(size)]
    return [value(T[i]) if exists[i] else None for i in range(size)], exists | fails


def _residuals(block: FloatArray, found: FloatArray, wanted: FloatArray) -> BoolArray:
    """Return for each column i whether (I - K_rr) found = wanted holds on the rows other than i."""
    masked = found.copy()
    np.fill_diagonal(masked, 0.0)
    error = np.abs(masked - block @ masked - wanted)
    np.fill_diagonal(error, 0.0)
    size = np.abs(masked).max(axis=0) + np.abs(wanted).max(axis=0)
    with np.errstate(invalid="ignore"):
        return np.asarray(error.max(axis=0) <= 1e-12 * size)


def _rest_estimates(block: FloatArray, steps: int = 80) -> FloatArray:
    """Return rho of the class without each of its types, to about three digits: power steps for all types at once."""
    size = len(block)
    scale = float(spectral_radius(block).mid())
    matrix = block / scale + 0.25 * np.eye(size)
    columns = np.ones((size, size))
    np.fill_diagonal(columns, 0.0)
    growth = np.zeros(size)
    for _ in range(steps):
        images = matrix @ columns
        np.fill_diagonal(images, 0.0)
        sums = images.sum(axis=0)
        before, growth = growth, sums
        columns = images / sums
        if np.all(np.abs(growth - before) < 1e-6 * growth):
            break
    return np.asarray(np.maximum(growth - 0.25, 0.0) * scale)


def state_reproduction_numbers(
    F: Array, V: Array, states: Sequence[int] | None = None
) -> list[tuple[int, ReproductionNumber]]:
    """Return for each infecting state the number that removing its infectivity must undo.

    T = rho(F_c (V - F + F_c)^-1), F_c the column of F of the state and 0 elsewhere. Since V^-1 takes the part of V,
    it is the type-reproduction number of that state in V^-1 F; it exists where the other states' infectivity dies out
    by itself.

    Parameters
    ----------
    F, V : (m, m) arrays of balls or float
        Transmission (>= 0) and transition (a non-singular M-matrix), per time unit.
    states : sequence of int, optional
        The states asked for; where left out, those whose column of F is not zero.

    Returns
    -------
    list of (state, ReproductionNumber)

    Raises
    ------
    ZeroDivisionError
        V is not proven to be invertible.

    References
    ----------
    Lewis, Shuai & van den Driessche (2019) J. Math. Biol. 78:2317-2339
    """
    F, V = square(F, "F"), square(V, "V")
    visits = matmul(inverse(V), F)
    if not is_balls(visits):
        visits = np.maximum(visits, 0.0)
    chosen = np.nonzero(pattern(F).any(axis=0))[0].tolist() if states is None else list(states)
    numbers = all_single_types(visits)
    return [(int(c), numbers[int(c)]) for c in chosen]


def state_number_by_row(F: Array, V: Array, state: int) -> float | None:
    """Return the state-reproduction number in the sense of all inflow to one state, or None.

    With A the row of inflows to the state, from infection and transition alike, and B = A - (F - V): rho(A B^-1).
    None where B is no non-singular M-matrix. A second route to numbers of this kind, not the number of
    `state_reproduction_numbers`.

    References
    ----------
    Inaba & Nishiura (2008) Math. Biosci. 216:77-89 (formula from memory)
    """
    F, V = square(F, "F"), square(V, "V")
    inflow = zeros(F.shape, F)
    for j in range(len(F)):
        inflow[state, j] = F[state, j] - V[state, j] if j != state else F[state, j]
    remaining = inflow - F + V
    if m_matrix(remaining).verdict != "yes":
        return None
    return value((inflow[state, :] * inverse(remaining)[:, state]).sum())


def _stays(block: Array) -> Array:
    """Return (I - K)^-1 >= 0 for a K whose spectral radius is below 1."""
    found = inverse(identity(len(block), block) - block)
    return found if is_balls(block) else np.maximum(found, 0.0)


def _only(K: Array, mask: BoolArray) -> Array:
    kept = K.copy()
    kept[~mask] = zeros((1,), K)[0]
    return kept


def _checked(K: Array, targeted: Any) -> tuple[Array, BoolArray]:
    K = square(K, "K")
    mask = np.asarray(targeted, dtype=bool)
    if mask.shape not in ((len(K),), K.shape):
        raise ValueError(f"targets of shape {mask.shape} for K of shape {K.shape}")
    if not mask.any():
        raise ValueError("nothing is targeted")
    return K, mask
