"""What may happen next to one infected host, with its rate: the flows read as events, near the infection-free state.

F and V say what happens on average. Here the same flows are kept apart by what they do to the host concerned: it may infect
another and stay, move on, or leave. Rates are those of F and V; with an intervention the infections that it prevents do not
happen.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from ngm.analysis.matrices import as_floats
from ngm.analysis.numbers import Numbers
from ngm.derivation.expand import arrow_blocks, slopes
from ngm.derivation.network import network
from ngm.engine.blocks import BlockMatrix
from ngm.engine.chance import Events, Steps

__all__ = ["MOST_DENSE", "Process", "dense_F_and_V", "dense_K", "process"]

FloatArray = npt.NDArray[np.float64]

#: Types up to which matrices are written out in doubles here.
MOST_DENSE = 2000


@dataclass(frozen=True, eq=False)
class Process:
    """Rates per host (per step: mean numbers and shares) between m infected states.

    Attributes
    ----------
    births : (m, m) array
        [i, j]: one in state j makes one in state i, and stays: new infections.
    sources : (m, m) array
        The same, by flows that are no infections: shedding, births of infected.
    swaps : (m, m) array
        [i, j]: a flow of kind transmission takes one out of state j into state i.
    moves : (m, m) array
    exits : (m,) array
    """

    births: FloatArray
    sources: FloatArray
    swaps: FloatArray
    moves: FloatArray
    exits: FloatArray

    @property
    def F(self) -> FloatArray:
        """New infections, as the derivation counts them."""
        return self.births + self.swaps

    @property
    def leaving(self) -> FloatArray:
        """All that leaves each state, per host in it."""
        return np.asarray(self.exits + self.moves.sum(axis=0) + self.swaps.sum(axis=0))

    @property
    def V(self) -> FloatArray:
        """Losses less gains, as the derivation counts them."""
        return np.asarray(np.diag(self.leaving) - self.moves - self.sources)

    def offspring(self, discrete: bool) -> Events | Steps:
        """Return the branching process."""
        births, moves = self.births + self.sources, self.moves + self.swaps
        if discrete:
            stay = np.maximum(1 - self.leaving, 0.0)
            return Steps(births, moves + np.diag(stay), self.exits)
        return Events(births, moves, self.exits)


def process(found: Numbers) -> Process:
    """Return the events of a model with an R0, under whatever intervention `found` is.

    At most `MOST_DENSE` types; matrices are doubles.
    """
    point, template = found.point, found.template
    infected = template.infected
    F, _ = dense_F_and_V(found)
    others = tuple(a for a in template.arrows if not a.transmission)
    net = network(template, point.evaluator, others, infected)
    moves, sources, exits = (as_floats(part) for part in (net.moves, net.sources, net.exits))
    swaps = np.zeros_like(F)
    leaving = tuple(a for a in template.arrows if a.transmission and a.source in infected)
    lost = np.zeros(len(F))
    at = template.offsets(infected)
    for piece in arrow_blocks(template, point.evaluator, leaving, infected):
        assert piece.leaves is not None
        assert piece.arrives is not None
        block = as_floats(piece.block)
        for copy, column in zip(*np.nonzero(block), strict=True):
            j = at[piece.column] + int(column)
            if int(piece.leaves[copy]) == j:
                swaps[int(piece.arrives[copy]), j] += block[copy, column]
                lost[j] += block[copy, column]
    # What an intervention prevents of them: the host leaves all the same, and nobody is infected.
    whole = as_floats(_plain_F(found))
    kept = np.divide(F, whole, out=np.zeros_like(F), where=whole > 0)
    swaps = swaps * kept
    exits = exits + lost - swaps.sum(axis=0)
    exits = np.where(exits > 1e-14 * np.maximum(lost, 1e-300), exits, np.maximum(exits, 0.0))
    return Process(np.maximum(F - swaps, 0.0), sources, swaps, moves, np.maximum(exits, 0.0))


def _plain_F(found: Numbers) -> Any:
    """Return F without what an intervention takes off its rows and columns."""
    return slopes(found.template, found.point.evaluator, found.template.arrows, found.template.infected)[0]


def dense_F_and_V(found: Numbers) -> tuple[FloatArray, FloatArray]:
    """Return F and V in doubles, written out also where the model is large."""
    if found.point.exact:
        return as_floats(found.F), as_floats(found.V)
    blocks = found.point.blocks
    return _dense(blocks.F), _dense(blocks.losses) - _dense(blocks.gains)


def _dense(matrix: BlockMatrix) -> FloatArray:
    return np.asarray(matrix.to_sparse().toarray(), dtype=float)


def dense_K(found: Numbers) -> FloatArray:
    """Return K in doubles, written out also where the model is large."""
    if found.K is not None:
        return as_floats(found.K)
    F, V = dense_F_and_V(found)
    stays = np.linalg.solve(V, np.eye(len(V))[:, found.at])
    return np.asarray(np.maximum((F @ stays)[found.at], 0.0))
