"""Contacts between groups: their forms, reciprocity and its correction, orientation.

One orientation throughout. ``C[i, j]``, the per-head form: contacts that one member of group i makes with members of
group j, per time unit. ``N[i]``: members of group i. From these the total ``T[i, j] = N[i] C[i, j]``, contacts between
all of i and all of j per time unit, counted by i; and the per-pair form ``B[i, j] = C[i, j] / N[j]``, the rate at which
one given member of i meets one given member of j. A contact has two ends, so T and B ought to be symmetric (C is then
*reciprocal*); C itself need not be. A next-generation matrix is another thing, and K[i, j] = q D N_i B[i, j] in the
plainest case: infections in i caused by one of j.

Contacts built from activity and moved between assortativities: `ngm.engine.mixing`. Settings added, contacts carried to
another population, groups merged: `ngm.engine.composition`.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

__all__ = [
    "ContactError",
    "FloatArray",
    "Reading",
    "Reciprocity",
    "both_readings",
    "checked_both",
    "checked_contacts",
    "checked_result",
    "checked_sizes",
    "checked_vector",
    "per_head_of_pairs",
    "per_head_of_totals",
    "per_pair",
    "reciprocal_contacts",
    "reciprocity",
    "shares_of",
    "total_contacts",
]

FloatArray = npt.NDArray[np.float64]


class ContactError(ValueError):
    """What is given is no matrix of contacts, or does not fit to it.

    `index` is the place, counted from 0, so that a caller who knows the groups can name them: (i,) a group, (i, j) an
    entry, (s, i, j) an entry of setting s; empty where the whole is wrong.
    """

    def __init__(self, message: str, index: tuple[int, ...] = ()) -> None:
        super().__init__(message)
        self.index = index


@dataclass(frozen=True, eq=False)
class Reciprocity:
    """How far contacts are from reciprocal.

    Attributes
    ----------
    gaps : (n, n) array of float
        (T_ij - T_ji) / ((T_ij + T_ji) / 2): what i counts more than j, relative to the mean of both counts; from -2 to
        2 and antisymmetric, 0 where neither counts any. No unit.
    largest : float
        The largest of their sizes; 0 where C is reciprocal (rounding leaves some 1e-16).
    pair : (int, int) or None
        The pair (i, j), i counting more, that has the largest gap; None where every gap is 0.
    overall : float
        Sum over pairs of abs(T_ij - T_ji), relative to the sum of the pairs' mean counts: large gaps between groups that
        hardly meet weigh little here.
    """

    gaps: FloatArray
    largest: float
    pair: tuple[int, int] | None
    overall: float


@dataclass(frozen=True, eq=False)
class Reading:
    """What a table says in one orientation.

    Attributes
    ----------
    makes : {"rows", "columns"}
        Who makes the contacts: the group of the table's row, or that of its column.
    C : (n, n) array of float
        The contacts in the orientation of this module.
    contacts : (n,) array of float
        Contacts per time unit that one member of each group makes.
    mean : float or None
        Their mean over the population; None where no sizes are given.
    reciprocity : Reciprocity or None
        None where no sizes are given.
    """

    makes: Literal["rows", "columns"]
    C: FloatArray
    contacts: FloatArray
    mean: float | None
    reciprocity: Reciprocity | None


def total_contacts(C: npt.ArrayLike, N: npt.ArrayLike) -> FloatArray:
    """Return the contacts between whole groups, T[i, j] = N[i] C[i, j].

    Parameters
    ----------
    C : (n, n) array of float, >= 0
        Contacts per head, per time unit.
    N : (n,) array of float, > 0
        Members of each group.

    Returns
    -------
    (n, n) array of float
        Contacts per time unit as group i counts them; symmetric where C is reciprocal.

    Raises
    ------
    ContactError
        C is not square, not finite or negative; N does not fit or has a group without members; overflow.

    Examples
    --------
    >>> total_contacts([[8, 4], [2, 6]], [300, 700]).tolist()
    [[2400.0, 1200.0], [1400.0, 4200.0]]
    """
    C, N = checked_both(C, N)
    with np.errstate(over="ignore"):
        return checked_result(N[:, None] * C)


def per_head_of_totals(T: npt.ArrayLike, N: npt.ArrayLike) -> FloatArray:
    """Return C[i, j] = T[i, j] / N[i], the way back from `total_contacts`; same shapes, units and errors."""
    T, N = checked_both(T, N)
    with np.errstate(over="ignore"):
        return checked_result(T / N[:, None])


def per_pair(C: npt.ArrayLike, N: npt.ArrayLike) -> FloatArray:
    """Return the rate at which one member of i meets one member of j, B[i, j] = C[i, j] / N[j].

    Parameters
    ----------
    C : (n, n) array of float, >= 0
        Contacts per head, per time unit.
    N : (n,) array of float, > 0
        Members of each group.

    Returns
    -------
    (n, n) array of float
        Per time unit and member of j; symmetric where C is reciprocal. What a density-dependent rate beta S I takes.

    Raises
    ------
    ContactError
        As for `total_contacts`.

    Examples
    --------
    >>> per_pair([[8, 4], [2, 6]], [200, 400]).tolist()
    [[0.04, 0.01], [0.01, 0.015]]
    """
    C, N = checked_both(C, N)
    with np.errstate(over="ignore"):
        return checked_result(C / N[None, :])


def per_head_of_pairs(B: npt.ArrayLike, N: npt.ArrayLike) -> FloatArray:
    """Return C[i, j] = B[i, j] N[j], the way back from `per_pair`; same shapes, units and errors."""
    B, N = checked_both(B, N)
    with np.errstate(over="ignore"):
        return checked_result(B * N[None, :])


def reciprocity(C: npt.ArrayLike, N: npt.ArrayLike) -> Reciprocity:
    """Return how far contacts are from reciprocal, N[i] C[i, j] = N[j] C[j, i], for every pair and in all.

    Parameters
    ----------
    C : (n, n) array of float, >= 0
        Contacts per head, per time unit.
    N : (n,) array of float, > 0
        Members of each group; only their ratios matter.

    Raises
    ------
    ContactError
        As for `total_contacts`.

    References
    ----------
    Wallinga, Teunis & Kretzschmar (2006) Am. J. Epidemiol. 164:936-944, for reciprocity; the gaps are definitions of ours.

    Examples
    --------
    >>> found = reciprocity([[8, 4], [2, 6]], [300, 700])        # 1200 counted one way, 1400 the other
    >>> found.pair, round(found.largest, 9)
    ((1, 0), 0.153846154)
    """
    C, N = checked_both(C, N)
    counts = N[:, None] / N.max() * C
    # Halved before they are added: entries near the largest double stay finite.
    mean = counts / 2 + counts.T / 2
    difference = counts - counts.T
    gaps = np.divide(difference, mean, out=np.zeros_like(C), where=mean > 0)
    i, j = (int(k) for k in np.unravel_index(np.argmax(gaps), gaps.shape))
    apart = ~np.eye(len(C), dtype=bool)
    most = float(mean[apart].max(initial=0.0))
    overall = float((np.abs(difference[apart]) / most).sum() / (mean[apart] / most).sum()) if most > 0 else 0.0
    return Reciprocity(gaps, float(gaps[i, j]), (i, j) if gaps[i, j] > 0 else None, overall)


def reciprocal_contacts(C: npt.ArrayLike, N: npt.ArrayLike) -> FloatArray:
    """Return reciprocal contacts: each pair's two counts replaced by their mean.

    C'[i, j] = (N[i] C[i, j] + N[j] C[j, i]) / (2 N[i]). The sum of all contacts is kept, the diagonal too; the contacts
    of a single group are not. Done twice it changes nothing more.

    Parameters
    ----------
    C : (n, n) array of float, >= 0
        Contacts per head, per time unit.
    N : (n,) array of float, > 0
        Members of each group; only their ratios matter.

    Returns
    -------
    (n, n) array of float
        Contacts per head, per time unit.

    Raises
    ------
    ContactError
        As for `total_contacts`.

    References
    ----------
    Wallinga, Teunis & Kretzschmar (2006) Am. J. Epidemiol. 164:936-944 (from memory, as common practice after it).

    Examples
    --------
    >>> reciprocal_contacts([[8, 4], [2, 6]], [300, 700]).round(9).tolist()
    [[8.0, 4.333333333], [1.857142857, 6.0]]
    """
    C, N = checked_both(C, N)
    with np.errstate(over="ignore"):
        return checked_result(C / 2 + C.T * (N[None, :] / N[:, None]) / 2)


def both_readings(table: npt.ArrayLike, N: npt.ArrayLike | None = None) -> tuple[Reading, Reading]:
    """Return what a table says if its rows make the contacts, and what if its columns do.

    Nothing here decides. Of a reciprocal matrix the right reading has no gaps, and the wrong one has unless all groups
    are of one size; but surveys have gaps in either. R0 never tells: a matrix and its transpose have the same eigenvalues.
    The case mix does, and so do contacts per member beside what the survey reports.

    Parameters
    ----------
    table : (n, n) array of float, >= 0
        Contacts per head, per time unit, in an orientation that is not known.
    N : (n,) array of float, > 0, optional
        Members of each group.

    Raises
    ------
    ContactError
        As for `total_contacts`.

    Examples
    --------
    >>> rows, columns = both_readings([[8, 2], [4, 6]], [300, 600])
    >>> rows.contacts.tolist(), columns.contacts.tolist()
    ([10.0, 10.0], [12.0, 8.0])
    >>> round(rows.reciprocity.largest, 9), columns.reciprocity.largest
    (1.2, 0.0)
    """
    C = checked_contacts(table)
    sizes = None if N is None else checked_sizes(N, len(C))
    readings: list[tuple[Literal["rows", "columns"], FloatArray]] = [("rows", C), ("columns", C.T.copy())]
    out: list[Reading] = []
    for makes, contacts in readings:
        sums = checked_result(contacts.sum(axis=1))
        mean = None if sizes is None else float(shares_of(sizes) @ sums)
        out.append(Reading(makes, contacts, sums, mean, None if sizes is None else reciprocity(contacts, sizes)))
    return out[0], out[1]


def checked_contacts(C: npt.ArrayLike) -> FloatArray:
    """Return contacts as a new array; ContactError where they are not square, not finite or negative."""
    table = np.array(C, dtype=float)
    if table.ndim != 2 or table.shape[0] != table.shape[1] or not table.size:
        raise ContactError(f"contacts are a square matrix, one row and column a group, not of shape {table.shape}")
    wrong = ~(np.isfinite(table) & (table >= 0))
    for i, j in np.argwhere(wrong)[:1].tolist():
        trouble = "is negative" if np.isfinite(table[i, j]) else "is not finite"
        raise ContactError(f"contacts[{i}, {j}] = {table[i, j]:.15g} {trouble}", (i, j))
    return table


def checked_vector(values: npt.ArrayLike, length: int, what: str, of: str = "group") -> FloatArray:
    """Return one value a group as a new array; ContactError where they do not fit, are not finite or negative."""
    vector = np.array(values, dtype=float)
    if vector.shape != (length,):
        raise ContactError(f"{what}: expected one value for each {of}, {length} in all, not shape {vector.shape}")
    for i in np.nonzero(~(np.isfinite(vector) & (vector >= 0)))[0].tolist():
        trouble = "is negative" if np.isfinite(vector[i]) else "is not finite"
        raise ContactError(f"{what} of {of} {i} = {vector[i]:.15g} {trouble}", (i,))
    return vector


def checked_sizes(N: npt.ArrayLike, groups: int | None = None, what: str = "the size") -> FloatArray:
    """Return the members of each group as a new array; ContactError as `checked_vector`, and for an empty group."""
    sizes = checked_vector(N, max(1, np.size(N)) if groups is None else groups, what)
    for i in np.nonzero(sizes == 0)[0].tolist():
        raise ContactError(f"group {i} has no members: {what} must be above 0", (i,))
    return sizes


def checked_both(C: npt.ArrayLike, N: npt.ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Return contacts and the sizes that go with them, both checked."""
    table = checked_contacts(C)
    return table, checked_sizes(N, len(table))


def checked_result(values: FloatArray) -> FloatArray:
    """Return the values; ContactError where one has overflowed."""
    if not np.all(np.isfinite(values)):
        raise ContactError("the numbers are too large: a result is beyond what a double holds")
    return values


def shares_of(N: FloatArray) -> FloatArray:
    """Return sizes as shares of the population."""
    relative = N / N.max()
    return np.asarray(relative / relative.sum())
