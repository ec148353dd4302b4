"""Mixing: how far groups keep to themselves, contacts built from activity, and the path between the extremes.

The orientation is that of `ngm.engine.contacts`: ``C[i, j]``, contacts that one member of group i makes with members of
group j, per time unit.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from ngm.engine.contacts import (
    ContactError,
    FloatArray,
    checked_both,
    checked_contacts,
    checked_result,
    checked_sizes,
    checked_vector,
)

__all__ = [
    "assortativity_coefficient",
    "assortativity_index",
    "preferential_mixing",
    "proportionate_mixing",
    "with_assortativity",
]


def assortativity_index(C: npt.ArrayLike) -> float | None:
    """Return Q = (trace P - 1) / (n - 1), P[i, j] the share of group i's contacts that it makes with group j.

    1 where every group keeps to itself, 0 for proportionate mixing, at least -1 / (n - 1). Every group weighs the same,
    whatever its size.

    Parameters
    ----------
    C : (n, n) array of float, >= 0
        Contacts per head, per time unit (total contacts give the same, for their rows have the same shares).

    Returns
    -------
    float or None
        No unit. None for a single group, or where a group makes no contacts: its shares do not exist.

    Raises
    ------
    ContactError
        C is not square, not finite or negative.

    References
    ----------
    Gupta, Anderson & May (1989) AIDS 3:807-817 (formula from memory).

    Examples
    --------
    >>> assortativity_index([[3, 1], [1, 1]])
    0.25
    """
    C = checked_contacts(C)
    largest = C.max(axis=1)
    if len(C) == 1 or not np.all(largest > 0):
        return None
    relative = C / largest[:, None]
    return float((np.trace(relative / relative.sum(axis=1, keepdims=True)) - 1) / (len(C) - 1))


def assortativity_coefficient(C: npt.ArrayLike, N: npt.ArrayLike) -> float | None:
    """Return r = (sum e_ii - sum a_i b_i) / (1 - sum a_i b_i), e[i, j] the share of all contacts that i makes with j.

    a and b are the row and column sums of e. 1 where every group keeps to itself, 0 where contacts are independent of
    the group. Every contact weighs the same, so that large groups weigh more: beside `assortativity_index`.

    Parameters
    ----------
    C : (n, n) array of float, >= 0
        Contacts per head, per time unit.
    N : (n,) array of float, > 0
        Members of each group; only their ratios matter.

    Returns
    -------
    float or None
        No unit. None where there are no contacts, or one group makes and receives all of them.

    Raises
    ------
    ContactError
        As for `total_contacts`.

    References
    ----------
    Newman (2003) Phys. Rev. E 67:026126

    Examples
    --------
    >>> assortativity_coefficient([[3, 1], [1, 3]], [10, 10])
    0.5
    """
    C, N = checked_both(C, N)
    counts = N[:, None] / N.max() * C
    largest = counts.max()
    if not largest > 0:
        return None
    shares = counts / largest
    shares /= shares.sum()
    others = 1 - np.eye(len(C))
    # 1 - sum e_ii and 1 - sum a_i b_i as sums over what is apart: differences would lose what small groups contribute.
    apart = float((shares * others).sum())
    expected = float(shares.sum(axis=1) @ others @ shares.sum(axis=0))
    return 1 - apart / expected if expected > 0 else None


def proportionate_mixing(activity: npt.ArrayLike, N: npt.ArrayLike) -> FloatArray:
    """Return contacts in which partners are met in proportion to the contacts that they offer.

    C[i, j] = a_i a_j N_j / sum_k a_k N_k: rank one, reciprocal, row sums a. With an infection in proportion to contacts,
    R0 is b D sum(a^2 N) / sum(a N), never less than
    for the mean activity.

    Parameters
    ----------
    activity : (n,) array of float, >= 0
        a_i, contacts that one member of group i makes, per time unit.
    N : (n,) array of float, > 0
        Members of each group; only their ratios matter.

    Returns
    -------
    (n, n) array of float
        Contacts per head, per time unit.

    Raises
    ------
    ContactError
        Not one activity a group, or one negative or not finite; N as for `total_contacts`.

    References
    ----------
    Nold (1980) Math. Biosci. 52:227-240 (formula from memory).

    Examples
    --------
    >>> proportionate_mixing([2, 6], [30, 10]).tolist()
    [[1.0, 1.0], [3.0, 3.0]]
    """
    return preferential_mixing(activity, N, 0.0)


def preferential_mixing(activity: npt.ArrayLike, N: npt.ArrayLike, epsilon: npt.ArrayLike) -> FloatArray:
    """Return contacts of which a share is reserved for one's own group and the rest is proportionate.

    C[i, j] = a_i (eps_i [i = j] + (1 - eps_i) (1 - eps_j) a_j N_j / sum_k (1 - eps_k) a_k N_k): reciprocal, row sums a.
    One epsilon for all groups is the assortativity index Q of the result: a path from proportionate (0) to fully
    assortative (1) on which every group keeps its contacts.

    Parameters
    ----------
    activity : (n,) array of float, >= 0
        a_i, contacts that one member of group i makes, per time unit.
    N : (n,) array of float, > 0
        Members of each group; only their ratios matter.
    epsilon : float, or (n,) array of float, in [0, 1]
        Share reserved for the own group: one for all, or one a group. No unit.

    Returns
    -------
    (n, n) array of float
        Contacts per head, per time unit.

    Raises
    ------
    ContactError
        As for `proportionate_mixing`; an epsilon outside [0, 1], or not one a group.

    References
    ----------
    Jacquez, Simon, Koopman, Sattenspiel & Perry (1988) Math. Biosci. 92:119-199 (formula from memory).

    Examples
    --------
    >>> preferential_mixing([2, 6], [30, 10], 0.5).tolist()
    [[1.5, 0.5], [1.5, 4.5]]
    """
    N = checked_sizes(N)
    a = checked_vector(activity, len(N), "the activity")
    share = checked_vector(epsilon if np.ndim(epsilon) else np.full(len(N), epsilon), len(N), "epsilon")
    for i in np.nonzero(share > 1)[0].tolist():
        raise ContactError(f"epsilon[{i}] = {share[i]:.15g} lies outside [0, 1]", (i,))
    offered = (1 - share) * a * (N / N.max())
    # Where nobody offers anything outside, whoever has contacts has epsilon 1 and nothing is left to be shared out.
    partner = offered / offered.sum() if offered.sum() > 0 else offered
    return checked_result(np.diag(share * a) + np.outer((1 - share) * a, partner))


def with_assortativity(C: npt.ArrayLike, N: npt.ArrayLike, Q: float) -> FloatArray:
    """Return contacts moved to another assortativity index; every group keeps its contacts, and reciprocity is kept.

    Upward C is mixed with diag(row sums), downward with proportionate mixing of the row sums: with q the index of C,
    C' = (1 - s) C + s diag(a), s = (Q - q) / (1 - q), for Q >= q, and
    C' = (1 - s) C + s a_i a_j N_j / sum(a N), s = 1 - Q / q, for Q < q.
    So one parameter leads from proportionate (0) through C as given (q) to fully assortative (1). It is one path among
    many: which pairs lose the contacts that others gain is a choice. From proportionate contacts it is
    `preferential_mixing` with one epsilon.

    Parameters
    ----------
    C : (n, n) array of float, >= 0
        Contacts per head, per time unit; at least two groups, each with contacts.
    N : (n,) array of float, > 0
        Members of each group; only their ratios matter.
    Q : float
        The assortativity index wanted: from 0 (or q, if that is lower) to 1.

    Returns
    -------
    (n, n) array of float
        Contacts per head, per time unit.

    Raises
    ------
    ContactError
        As for `total_contacts`; Q out of reach; a single group, or one without contacts, for which Q does not exist.

    Examples
    --------
    >>> with_assortativity([[3, 1], [1, 1]], [10, 10], 0.5).round(9).tolist()
    [[3.333333333, 0.666666667], [0.666666667, 1.333333333]]
    """
    C, N = checked_both(C, N)
    now = assortativity_index(C)
    if now is None:
        for i in np.nonzero(~(C > 0).any(axis=1))[0].tolist():
            raise ContactError(f"group {i} makes no contacts, so the assortativity index does not exist", (i,))
        raise ContactError("a single group has no assortativity")
    if not min(0.0, now) <= Q <= 1:
        raise ContactError(f"Q = {Q:.6g} cannot be reached. Choose it from {min(0.0, now):.6g} to 1.")
    activity = C.sum(axis=1)
    if now <= Q:
        share, end = (Q - now) / (1 - now) if now < Q else 0.0, np.diag(activity)
    else:
        share, end = 1 - Q / now, proportionate_mixing(activity, N)
    return checked_result((1 - share) * C + share * end)
