"""Who leads to whom in a grouped model, without writing its matrices out: classes and periods of K = F V^-1.

A graph with one node for each state, one for "newly infected as" each type, and some for what contact matrices pass on: a
matrix without zeros is one node through which everybody meets, whatever its size. A path from one new infection to the
next has exactly one step through F, so K's classes are the strongly connected sets of new infections, and K's period is
the greatest common divisor of the numbers of F-steps round its cycles.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy.sparse import csr_array
from scipy.sparse.csgraph import connected_components, dijkstra

from ngm.engine.blocks import BlockMatrix, Chain, Contact, Diagonal, Part

__all__ = ["Routes"]

IntArray = npt.NDArray[np.int64]


class _Graph:
    def __init__(self, nodes: int) -> None:
        self.nodes = nodes
        self.tails: list[IntArray] = []
        self.heads: list[IntArray] = []
        self.steps: list[IntArray] = []

    def new(self, count: int) -> IntArray:
        made = np.arange(self.nodes, self.nodes + count)
        self.nodes += count
        return made

    def join(self, tails: IntArray, heads: IntArray, step: int = 0) -> None:
        """Add arrows where both ends live (-1 is nobody)."""
        tails, heads = np.broadcast_arrays(tails, heads)
        live = (tails.ravel() >= 0) & (heads.ravel() >= 0)
        self.tails.append(tails.ravel()[live])
        self.heads.append(heads.ravel()[live])
        self.steps.append(np.full(int(live.sum()), step))

    def follow(self, chain: Chain, start: IntArray, *, loops: bool) -> IntArray:
        """Return, over the space, the node that stands for what a chain gives there; -1 where it gives nothing.

        With `loops` a matrix may be read as if its diagonal were not 0.
        """
        here = start
        for factor in reversed(chain.factors):
            if isinstance(factor, Diagonal):
                shape = np.broadcast_shapes(here.shape, factor.values.shape)
                here = np.where(np.broadcast_to(factor.values != 0, shape), np.broadcast_to(here, shape), -1)
            elif isinstance(factor, Contact):
                here = self._contact(factor, here, loops)
            else:
                here = self._sum(here, factor.axes)
        return here

    def _sum(self, here: IntArray, axes: tuple[int, ...]) -> IntArray:
        shape = tuple(1 if a in axes else n for a, n in enumerate(here.shape))
        out = self.new(math.prod(shape)).reshape(shape)
        self.join(here, np.broadcast_to(out, here.shape))
        return out

    def _contact(self, factor: Contact, here: IntArray, loops: bool) -> IntArray:
        n = factor.table.shape[-1]
        shape = list(here.shape)
        shape[factor.axis] = n
        if factor.within is not None:
            shape[factor.within] = factor.table.shape[0]
        here = np.broadcast_to(here, shape)
        there = factor.table != 0
        if loops:  # going from a group to itself by a step that infects nobody changes neither classes nor periods
            there = there | np.eye(n, dtype=bool)
        if there.all():
            return np.broadcast_to(self._sum(here, (factor.axis,)), shape)
        out = self.new(math.prod(shape)).reshape(shape)
        if factor.within is None:
            before, after = (np.moveaxis(x, factor.axis, 0).reshape(n, -1) for x in (here, out))
            i, j = np.nonzero(factor.table)
            self.join(before[j], after[i])
        else:
            w = factor.table.shape[0]
            axes = (factor.within, factor.axis)
            from_, to = (np.moveaxis(x, axes, (0, 1)).reshape(w, n, -1) for x in (here, out))
            k, i, j = np.nonzero(factor.table)
            self.join(from_[k, j], to[k, i])
        return out


class Routes:
    """Classes and periods of K on its types at infection.

    Attributes
    ----------
    classes : list of int arrays
        Types at infection (positions among them) of each class, a class before those that it infects.
    periods : list of (int or None)
        None for a single type that does not lead back to itself.
    """

    def __init__(self, F: BlockMatrix, V: BlockMatrix, at: IntArray) -> None:
        m, self.count = F.size, len(at)
        graph = _Graph(m + self.count)
        born = np.full(m, -1)
        born[at] = np.arange(m, m + self.count)
        graph.join(born[at], at)
        for matrix, step in ((V, 0), (F, 1)):
            for (i, j), chains in matrix.blocks.items():
                for chain in chains:
                    if step == 0 and (chain.sign > 0 or (i == j and chain.is_local)):
                        continue  # what leaves a state leads nowhere
                    reached = graph.follow(chain, _states(matrix.parts[j]), loops=step == 0 and i == j)
                    target = _states(matrix.parts[i])
                    heads = target if step == 0 else born[target]
                    graph.join(np.broadcast_to(reached, target.shape), heads, step)
        self._solve(graph, m)

    def _solve(self, graph: _Graph, m: int) -> None:
        tails, heads, steps = (np.concatenate(x) for x in (graph.tails, graph.heads, graph.steps))
        # Several arrows between two nodes: one stays, and the one that costs no F-step never joins the same two.
        matrix = csr_array((np.ones(len(tails), dtype=np.int8), (tails, heads)), shape=(graph.nodes, graph.nodes))
        labels = connected_components(matrix, directed=True, connection="strong")[1].astype(np.int64)
        own = labels[m : m + self.count]
        order = np.argsort(own, kind="stable")
        groups = np.split(order, np.flatnonzero(np.diff(own[order])) + 1)
        groups.sort(key=lambda group: int(group[0]))
        inside = labels[tails] == labels[heads]
        self.classes: list[IntArray] = []
        self.periods: list[int | None] = []
        ranked = self._ordered(groups, matrix, labels, m) if len(groups) > 1 else groups
        by_label = dict.fromkeys(labels[tails[inside & (steps == 1)]].tolist())
        for group in ranked:
            label = int(own[group[0]])
            self.classes.append(group)
            if label not in by_label:
                self.periods.append(None)
                continue
            chosen = inside & (labels[tails] == label)
            self.periods.append(_period(tails[chosen], heads[chosen], steps[chosen], m + int(group[0]), graph.nodes))

    def _ordered(self, groups: list[IntArray], matrix: csr_array, labels: IntArray, m: int) -> list[IntArray]:
        """Return the classes, each before those that it infects: by the order of their sets among all sets of nodes."""
        count = int(labels.max()) + 1
        coo = matrix.tocoo()
        across = labels[coo.row] != labels[coo.col]
        links = csr_array(
            (np.ones(int(across.sum()), dtype=np.int8), (labels[coo.row[across]], labels[coo.col[across]])),
            shape=(count, count),
        )
        rank = _topological(links, count)
        return sorted(groups, key=lambda group: (int(rank[labels[m + int(group[0])]]), int(group[0])))


def _topological(links: csr_array, count: int) -> IntArray:
    """Return the depth of each node of a graph without cycles: longest path from a node that nothing leads to."""
    links.sum_duplicates()
    incoming = np.bincount(links.indices, minlength=count)
    depth = np.zeros(count, dtype=np.int64)
    ready = np.flatnonzero(incoming == 0).tolist()
    while ready:
        node = ready.pop()
        for follower in links.indices[links.indptr[node] : links.indptr[node + 1]].tolist():
            depth[follower] = max(depth[follower], depth[node] + 1)
            incoming[follower] -= 1
            if incoming[follower] == 0:
                ready.append(follower)
    return depth


def _states(part: Part) -> IntArray:
    index = np.arange(part.offset + part.size, dtype=float).reshape(-1, 1)
    return part.take(index)[..., 0].astype(np.int64)


def _period(tails: IntArray, heads: IntArray, steps: IntArray, start: int, nodes: int) -> int:
    """Return the greatest common divisor of F-steps round cycles, from the F-steps to each node along some path."""
    large = nodes + 1.0  # more than any path without F-steps costs
    costs = np.where(steps == 1, large, 1.0)
    order = np.lexsort((costs, heads, tails))
    first = np.ones(len(order), dtype=bool)
    first[1:] = (np.diff(tails[order]) != 0) | (np.diff(heads[order]) != 0)
    kept = order[first]
    graph: Any = csr_array((costs[kept], (tails[kept], heads[kept])), shape=(nodes, nodes))
    reached = np.asarray(dijkstra(graph, indices=start))  # type: ignore[call-overload]
    depth = np.floor(reached / large)
    gaps = depth[tails] + steps - depth[heads]
    return int(np.gcd.reduce(np.abs(gaps).astype(np.int64)))
