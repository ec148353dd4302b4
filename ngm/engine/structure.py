"""The graph behind a non-negative matrix: classes, period, who leads to whom.

Throughout, `pattern[i, j]` true means an arrow from j to i (K[i, j] > 0: one case of j causes cases of i).
"""

from __future__ import annotations

import heapq
import math
from collections.abc import Sequence

import numpy as np
import numpy.typing as npt
from scipy.sparse import csr_array
from scipy.sparse.csgraph import connected_components

__all__ = [
    "classes",
    "cyclic_sets",
    "is_irreducible",
    "leading_to",
    "period",
    "reachable",
]

BoolArray = npt.NDArray[np.bool_]
IntArray = npt.NDArray[np.intp]

#: Types up to which classes are found without a graph.
_SMALL = 24


def classes(pattern: BoolArray) -> list[IntArray]:
    """Return the strongly connected classes, a class before all those that it leads to.

    Two types are in one class where each leads to the other along arrows; a type that leads to no other which leads
    back is a class of its own. Classes that do not lead to each other come in the order of their first types.

    Parameters
    ----------
    pattern : (n, n) array of bool
        An arrow from j to i where pattern[i, j].

    Returns
    -------
    list of arrays of int
        The types of each class, ascending.

    References
    ----------
    Frobenius normal form: Berman & Plemmons (1994) Nonnegative Matrices in the Mathematical Sciences, chapter 2 (from
    memory).
    """
    size = len(pattern)
    if size == 0:
        return []
    if size <= _SMALL:
        return _few_classes(pattern)
    heads, tails = np.nonzero(pattern)
    graph = csr_array((np.ones(len(heads), dtype=np.int8), (tails, heads)), shape=(size, size))
    count, labels = connected_components(graph, directed=True, connection="strong")
    order = np.argsort(labels, kind="stable")
    members = np.split(order, np.cumsum(np.bincount(labels, minlength=count))[:-1])
    across = labels[tails] != labels[heads]
    arrows = np.unique(np.stack([labels[tails[across]], labels[heads[across]]], axis=1), axis=0)
    waiting = np.bincount(arrows[:, 1], minlength=count)
    followers: list[list[int]] = [[] for _ in range(count)]
    for tail, head in arrows:
        followers[int(tail)].append(int(head))
    ready = [(int(members[c][0]), c) for c in range(count) if waiting[c] == 0]
    heapq.heapify(ready)
    result: list[IntArray] = []
    while ready:
        _, current = heapq.heappop(ready)
        result.append(members[current].astype(np.intp))
        for follower in followers[current]:
            waiting[follower] -= 1
            if waiting[follower] == 0:
                heapq.heappush(ready, (int(members[follower][0]), follower))
    return result


def _few_classes(pattern: BoolArray) -> list[IntArray]:
    """Return `classes` of a small pattern: who leads to whom as bits of whole numbers, which costs less than a graph."""
    size = len(pattern)
    leads = [sum(1 << i for i, there in enumerate(column) if there) for column in pattern.T.tolist()]
    for k in range(size):
        through = leads[k]
        leads = [ends | through if ends >> k & 1 else ends for ends in leads]
    left = (1 << size) - 1
    members: list[list[int]] = []
    for j in range(size):
        if left >> j & 1:
            own = [i for i in range(j, size) if i == j or (leads[j] >> i & 1 and leads[i] >> j & 1)]
            members.append(own)
            left &= ~sum(1 << i for i in own)
    result: list[IntArray] = []
    waiting = members
    while waiting:
        # The first class, by its first type, that no other one leads to.
        first = next(one for one in waiting if not any(leads[o[0]] >> one[0] & 1 for o in waiting if o is not one))
        waiting = [one for one in waiting if one is not first]
        result.append(np.array(first, dtype=np.intp))
    return result


def is_irreducible(pattern: BoolArray) -> bool:
    """Return whether there is one class only, and not a single type without an arrow to itself."""
    size = len(pattern)
    if size == 0 or (size == 1 and not pattern[0, 0]):
        return False
    return len(classes(pattern)) == 1


def _levels(block: BoolArray) -> IntArray:
    """Return the number of arrows from the first type to each, along a shortest way."""
    levels = np.full(len(block), -1, dtype=np.intp)
    front = np.zeros(len(block), dtype=bool)
    front[0] = True
    step = 0
    while front.any():
        levels[front] = step
        front = block[:, front].any(axis=1) & (levels < 0)
        step += 1
    return levels


def period(pattern: BoolArray, members: Sequence[int] | IntArray | None = None) -> int | None:
    """Return the greatest common divisor of the lengths of all cycles in a class; None where it has none.

    Parameters
    ----------
    pattern : (n, n) array of bool
        An arrow from j to i where pattern[i, j].
    members : sequence of int, optional
        The types of one class as `classes` gives it; all types where left out.

    Returns
    -------
    int or None
        None for a single type without an arrow to itself.
    """
    block = _block(pattern, members)
    heads, tails = np.nonzero(block)
    if len(heads) == 0:
        return None
    levels = _levels(block)
    if (levels < 0).any():
        raise ValueError("these types are not one class")
    return math.gcd(*(int(d) for d in np.unique(np.abs(levels[tails] + 1 - levels[heads]))))


def cyclic_sets(pattern: BoolArray, members: Sequence[int] | IntArray | None = None) -> list[IntArray]:
    """Return the groups of a class that the infection passes through in turn: group k leads to group k + 1 only.

    There are as many groups as the period; the last leads to the first, which holds the first type. For a class without
    a cycle it is one group.
    """
    indices = np.arange(len(pattern)) if members is None else np.asarray(members, dtype=np.intp)
    steps = period(pattern, indices)
    if steps is None:
        return [indices]
    turns = _levels(_block(pattern, indices)) % steps
    return [indices[turns == k] for k in range(steps)]


def reachable(pattern: BoolArray, start: Sequence[int] | IntArray | BoolArray) -> BoolArray:
    """Return a mask of the types that `start` leads to along arrows, `start` included."""
    found = np.zeros(len(pattern), dtype=bool)
    found[np.asarray(start)] = True
    front = found.copy()
    while front.any():
        front = pattern[:, front].any(axis=1) & ~found
        found |= front
    return found


def leading_to(pattern: BoolArray, targets: Sequence[int] | IntArray | BoolArray) -> BoolArray:
    """Return a mask of the types from which arrows lead to `targets`, `targets` included."""
    return reachable(pattern.T, targets)


def _block(pattern: BoolArray, members: Sequence[int] | IntArray | None) -> BoolArray:
    if members is None:
        return pattern
    chosen = np.asarray(members, dtype=np.intp)
    return np.asarray(pattern[np.ix_(chosen, chosen)])
