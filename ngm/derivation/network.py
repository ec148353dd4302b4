"""The infected types as a network: who moves where at what rate per head, who leaves, and what arises without a loss.

This is V taken apart: V[j, j] = exits + moves out, V[i, j] = -(moves + sources). Individuals that move are matched, flow by
flow, with where they arrive, so that the exits are known as sums of flows and never as a difference.
"""

from __future__ import annotations

import operator
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np

from ngm.derivation.evaluate import Evaluator
from ngm.derivation.expand import arrow_blocks, blank
from ngm.derivation.space import Array
from ngm.derivation.template import Arrow, Template
from ngm.engine.structure import classes

__all__ = ["Network", "network", "pattern_network"]


@dataclass(frozen=True)
class Network:
    """Rates per head between n states, in one kind of number.

    Attributes
    ----------
    moves : (n, n)
        [i, j]: from j to i.
    sources : (n, n)
        [i, j]: arising in i because of j, with no loss in j (shedding, births of infected).
    exits : (n,)
        Leaving j and arriving in none of the n states.
    stray : (n, n)
        [i, j]: leaving i because of j, i not j: a positive off-diagonal entry of V.
    """

    moves: Array
    sources: Array
    exits: Array
    stray: Array

    @property
    def arrivals(self) -> Array:
        """Return moves + sources."""
        return np.asarray(self.moves | self.sources) if self.moves.dtype == bool else self.moves + self.sources

    def blocks(self) -> list[list[int]]:
        """Return the strongly connected sets of states, each before those that its members move to."""
        return [[int(k) for k in members] for members in classes(nonzero(self.arrivals))]

    def traps(self) -> list[list[int]]:
        """Return the sets of states that nothing ever leaves, nor anything that could balance: V is singular there."""
        out = []
        moves, sources, exits = nonzero(self.moves), nonzero(self.sources), nonzero(self.exits)
        for members in self.blocks():
            inside = np.ix_(np.array(members), np.array(members))
            outside = np.setdiff1d(np.arange(len(exits)), members)
            if exits[members].any() or moves[np.ix_(outside, np.array(members))].any() or sources[inside].any():
                continue
            out.append(members)
        return out


def nonzero(values: Array) -> Array:
    """Return where an array is not 0."""
    if values.dtype == bool:
        return values
    flat: list[Any] = values.ravel().tolist()
    return np.array([v != 0 for v in flat], dtype=bool).reshape(values.shape)


def network(
    template: Template, evaluator: Evaluator, arrows: tuple[Arrow, ...], compartments: tuple[str, ...]
) -> Network:
    """Return the network of the copies of these compartments; transmission flows leave, and do not arrive."""
    at = template.offsets(compartments)
    n = sum(template.space.count(template.by(name)) for name in compartments)
    moves, sources, stray = (blank(evaluator, n, n) for _ in range(3))
    exits = blank(evaluator, n, 1)[:, 0]
    add: Callable[[Any, Any], Any] = operator.or_ if evaluator.algebra.dtype is bool else operator.add
    for piece in arrow_blocks(template, evaluator, arrows, compartments):
        arrow, first = piece.arrow, at[piece.column]
        for copy, column in zip(*np.nonzero(nonzero(piece.block)), strict=True):
            rate, j = piece.block[copy, column], first + int(column)
            left = None if piece.leaves is None else int(piece.leaves[copy])
            arrived = None if piece.arrives is None or arrow.transmission else int(piece.arrives[copy])
            if arrow.matrix is not None:
                continue
            if left == j:
                if arrived is None:
                    exits[j] = add(exits[j], rate)
                else:
                    moves[arrived, j] = add(moves[arrived, j], rate)
            else:
                if left is not None:
                    stray[left, j] = add(stray[left, j], rate)
                if arrived is not None:
                    sources[arrived, j] = add(sources[arrived, j], rate)
    for arrow in arrows:
        if arrow.arriving is not None and arrow.target in at:
            block = template.chain(arrow.arriving, arrow.target, evaluator)
            if block is not None:
                flat = template.space.flatten(block, template.by(arrow.target))
                first = at[arrow.target]
                here = moves[first : first + len(flat), first : first + len(flat)]
                moves[first : first + len(flat), first : first + len(flat)] = add(here, flat)
    return Network(moves, sources, exits, stray)


def pattern_network(template: Template) -> Network:
    """Return the network of the infected types as True where a rate is not 0 by structure."""
    return network(template, template.pattern_evaluator, template.arrows, template.infected)
