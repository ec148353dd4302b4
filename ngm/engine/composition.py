"""Contacts composed anew: settings added, contacts carried to another population, groups merged.

The orientation is that of `ngm.engine.contacts`: ``C[i, j]``, contacts that one member of group i makes with members of
group j, per time unit.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal

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
    reciprocal_contacts,
    shares_of,
)

__all__ = ["Method", "adapted_contacts", "merge_groups", "sum_of_settings"]

#: How contacts are carried to another population: see `adapted_contacts`.
Method = Literal["reciprocity", "density", "density_mean_kept"]


def sum_of_settings(settings: Sequence[npt.ArrayLike], factors: npt.ArrayLike | None = None) -> FloatArray:
    """Return the contacts of all settings together, C = sum_s f_s C_s.

    R0 is no such sum: for reciprocal settings of one population it is at most the sum of what each gives alone, and
    what is lost without each in turn does not add up to it.

    Parameters
    ----------
    settings : sequence of (n, n) arrays of float, >= 0
        Contacts per head, per time unit, in each setting.
    factors : (k,) array of float, >= 0, optional
        f_s, what is left of (or multiplies) each setting's contacts; 1 where left out. No unit.

    Raises
    ------
    ContactError
        No setting; one that is no matrix of contacts or has another number of groups; factors that do not fit.

    Examples
    --------
    >>> sum_of_settings([[[2, 1], [1, 2]], [[5, 0], [0, 0]]], [1, 0.6]).tolist()
    [[5.0, 1.0], [1.0, 2.0]]
    """
    if len(settings) == 0:
        raise ContactError("there is no setting. Give at least one.")
    tables: list[FloatArray] = []
    for s, setting in enumerate(settings):
        try:
            tables.append(checked_contacts(setting))
        except ContactError as error:
            raise ContactError(f"setting {s}: {error}", (s, *error.index) if error.index else ()) from None
        if len(tables[s]) != len(tables[0]):
            raise ContactError(f"setting {s} has {len(tables[s])} groups, setting 0 has {len(tables[0])}")
    weights = checked_vector(np.ones(len(tables)) if factors is None else factors, len(tables), "the factor", "setting")
    with np.errstate(over="ignore", invalid="ignore"):
        return checked_result(np.einsum("s,sij->ij", weights, np.stack(tables)))


def adapted_contacts(
    C: npt.ArrayLike, N: npt.ArrayLike, other: npt.ArrayLike, method: Method = "density"
) -> FloatArray:
    """Return contacts for a population of another structure; reciprocal there.

    With N', M' the other sizes and their sum, M the sum of N, and bal() the correction of `reciprocal_contacts` by N':

    - ``"reciprocity"``: bal(C). Each group keeps its habits, as far as reciprocity lets it.
    - ``"density"``: bal(C[i, j] N'_j / N_j M / M'), which is B[i, j] N'_j M / M' with the per-pair form B made symmetric.
      Partners are met in proportion to their share of the population: the preference for each group is kept, the number
      of contacts follows the structure. A population that only grows keeps its contacts.
    - ``"density_mean_kept"``: the same, times one number that brings the mean contacts of a member back to what it was.

    Parameters
    ----------
    C : (n, n) array of float, >= 0
        Contacts per head, per time unit, in the population surveyed.
    N : (n,) array of float, > 0
        Its members in each group.
    other : (n,) array of float, > 0
        Members of each group in the population wanted; the same groups.
    method : {"reciprocity", "density", "density_mean_kept"}

    Returns
    -------
    (n, n) array of float
        Contacts per head, per time unit.

    Raises
    ------
    ContactError
        As for `total_contacts`, for either population.
    ValueError
        Another method.

    References
    ----------
    Arregui, Aleta, Sanz & Moreno (2018) PLoS Comput. Biol. 14:e1006638: methods M1, M2 and M3 in this order (from
    memory; the balancing at the end is ours, and changes nothing in M2 and M3 where C is reciprocal).

    Examples
    --------
    Where the second group doubles, it offers each member twice as many partners beside the first.

    >>> adapted_contacts([[6, 2], [2, 2]], [20, 20], [20, 40], "density").tolist()
    [[4.0, 2.6666666666666665], [1.3333333333333333, 2.6666666666666665]]
    """
    C, N = checked_both(C, N)
    wanted = checked_sizes(other, len(N), "the size in the other population")
    if method == "reciprocity":
        return reciprocal_contacts(C, wanted)
    if method not in ("density", "density_mean_kept"):
        raise ValueError(f"there is no method {method!r}: choose reciprocity, density or density_mean_kept")
    shares, shares_wanted = shares_of(N), shares_of(wanted)
    with np.errstate(over="ignore"):
        moved = reciprocal_contacts(checked_result(C * (shares_wanted / shares)[None, :]), wanted)
    if method == "density":
        return moved
    mean = float(shares_wanted @ moved.sum(axis=1))
    return checked_result(moved * (float(shares @ C.sum(axis=1)) / mean)) if mean > 0 else moved


def merge_groups(C: npt.ArrayLike, N: npt.ArrayLike, merged: npt.ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Return contacts and sizes of groups put together; the totals N_i C_ij add up, and reciprocity is kept.

    C'[I, J] = sum_{i in I} N_i sum_{j in J} C[i, j] / N'_I, N'_I = sum_{i in I} N_i. Differences inside a
    merged group are lost, and R0 with them; it is kept only where there are none.

    Parameters
    ----------
    C : (n, n) array of float, >= 0
        Contacts per head, per time unit.
    N : (n,) array of float, > 0
        Members of each group.
    merged : (n,) array of int
        For each group the number of the merged group that takes it: 0, 1, … without a gap.

    Returns
    -------
    C : (m, m) array of float
    N : (m,) array of float

    Raises
    ------
    ContactError
        As for `total_contacts`; `merged` does not fit, or leaves out a number.

    Examples
    --------
    >>> C, N = merge_groups([[1, 2, 1], [2, 3, 1], [1, 1, 4]], [10, 10, 10], [0, 0, 1])
    >>> C.tolist(), N.tolist()
    ([[4.0, 1.0], [2.0, 4.0]], [20.0, 10.0])
    """
    C, N = checked_both(C, N)
    target = np.asarray(merged)
    if target.shape != N.shape or target.dtype.kind not in "iu" or target.min() < 0:
        raise ContactError(f"the merged groups are numbers 0, 1, …, one for each of the {len(N)} groups")
    size = int(target.max()) + 1
    for number in sorted(set(range(min(size, len(N) + 1))) - set(target.tolist()))[:1]:
        raise ContactError(f"no group goes into merged group {number}")
    member = (target[None, :] == np.arange(size)[:, None]).astype(float)
    sizes = member @ N
    # Weights first: they are at most 1, and totals of large groups do not overflow.
    weights = member * N[None, :] / sizes[:, None]
    return checked_result(weights @ C @ member.T), checked_result(sizes)
