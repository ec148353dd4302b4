"""By chance: whether one case starts a large outbreak, from the multitype branching process behind F and V.

While few are infected they do not meet each other's victims, so each case starts a family of its own. q_j, the chance
that the family of one case in state j dies out, is the least non-negative solution of q = f(q), f the probability
generating functions of what one case turns into at its next event (or in a step, or in a generation).

Source: Allen & Lahodny (2012) J. Biol. Dyn. 6:590-611 (abstract); Harris (1963) The Theory of Branching Processes;
Etessami & Yannakakis (2009) J. ACM 56:1, for Newton's method from below (the last two from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
import numpy.typing as npt

from ngm.engine.sides import exceeds_one
from ngm.engine.structure import classes, leading_to

__all__ = ["Events", "Extinction", "Generations", "Offspring", "Steps", "extinction"]

FloatArray = npt.NDArray[np.float64]

MOST_STEPS = 200


class Offspring(Protocol):
    """What one case of each type turns into."""

    def image(self, q: FloatArray) -> FloatArray:
        """Return f(q), the generating functions at q in [0, 1]^n."""
        ...

    def slope(self, q: FloatArray) -> FloatArray:
        """Return df_j/dq_i at q, row j, column i: at q = 1 the mean numbers."""
        ...


@dataclass(frozen=True, eq=False)
class Events:
    """Continuous time: what happens next to one case, with chances in proportion to the rates.

    `births`[i, j]: rate at which one in state j makes one in state i and stays; `moves`[i, j]: at which it becomes one in
    state i; `exits`[j]: at which it leaves. f_j(q) = (exits_j + sum_i moves_ij q_i + q_j sum_i births_ij q_i) / total_j.
    """

    births: FloatArray
    moves: FloatArray
    exits: FloatArray

    @property
    def total(self) -> FloatArray:
        """Rate of all events of one case."""
        return np.asarray(self.births.sum(axis=0) + self.moves.sum(axis=0) + self.exits)

    def image(self, q: FloatArray) -> FloatArray:
        """Return f(q)."""
        return np.asarray((self.exits + self.moves.T @ q + q * (self.births.T @ q)) / self.total)

    def slope(self, q: FloatArray) -> FloatArray:
        """Return the slopes of f at q."""
        made = self.births.T @ q
        return np.asarray((self.moves.T + q[:, None] * self.births.T + np.diag(made)) / self.total[:, None])


@dataclass(frozen=True, eq=False)
class Steps:
    """Discrete time: in a step one case stays, moves or leaves, and the number it infects is Poisson.

    `births`[i, j]: mean number of i made by one of j in a step; `moves`[i, j]: share that becomes i (its diagonal: stays);
    `exits`[j]: share that leaves. f_j(q) = (exits_j + sum_i moves_ij q_i) exp(-sum_i births_ij (1 - q_i)).
    """

    births: FloatArray
    moves: FloatArray
    exits: FloatArray

    def image(self, q: FloatArray) -> FloatArray:
        """Return f(q)."""
        return np.asarray((self.exits + self.moves.T @ q) * np.exp(-(self.births.T @ (1 - q))))

    def slope(self, q: FloatArray) -> FloatArray:
        """Return the slopes of f at q."""
        none = np.exp(-(self.births.T @ (1 - q)))
        fate = self.exits + self.moves.T @ q
        return np.asarray(none[:, None] * (self.moves.T + fate[:, None] * self.births.T))


@dataclass(frozen=True, eq=False)
class Generations:
    """A K as given: each case infects Poisson numbers with means K[i, j]. f_j(q) = exp(-sum_i K_ij (1 - q_i))."""

    K: FloatArray

    def image(self, q: FloatArray) -> FloatArray:
        """Return f(q)."""
        return np.exp(-(self.K.T @ (1 - q)))

    def slope(self, q: FloatArray) -> FloatArray:
        """Return the slopes of f at q."""
        return np.asarray(self.image(q)[:, None] * self.K.T)


@dataclass(frozen=True, eq=False)
class Extinction:
    """The least non-negative solution q of q = f(q).

    `residual`: the size of the last correction of Newton's method at q, which bounds the error to first order.
    """

    q: FloatArray
    residual: float
    steps: int


def extinction(offspring: Offspring, size: int) -> Extinction:
    """Return the chance that the family of one case of each type dies out.

    Types that lead to no class in which the mean matrix has a root above 1 die out surely: 1, exactly. The others are
    found by Newton's method from 0, which rises to the least solution and never passes it, since f is convex and
    increasing; q is the chance itself, and the iteration is the chance to die out within ever more generations.

    Parameters
    ----------
    offspring : Offspring
    size : int
        Number of types.

    Examples
    --------
    One type, rates 2 of infecting and 1 of recovery: q = 1/R0 = 1/2.

    >>> extinction(Events(np.array([[2.0]]), np.zeros((1, 1)), np.ones(1)), 1).q.tolist()
    [0.5]
    """
    means = offspring.slope(np.ones(size))
    live = _can_grow(means.T)
    q = np.ones(size)
    q[live] = 0.0
    if not live.any():
        return Extinction(q, 0.0, 0)
    inside = np.ix_(live, live)
    identity = np.eye(int(live.sum()))
    correction = np.zeros(int(live.sum()))
    steps, before = 0, np.inf
    while steps < MOST_STEPS:
        steps += 1
        gap = (offspring.image(q) - q)[live]
        correction[:] = np.linalg.solve(identity - offspring.slope(q)[inside], gap)
        new = np.clip(q[live] + correction, q[live], 1.0)
        q[live] = new
        size_now = float(np.max(np.abs(correction)))
        # From where rounding rules, corrections shrink no more.
        if size_now <= 4e-16 or (size_now < 1e-10 and size_now > before / 2):
            break
        before = size_now
    return Extinction(q, float(np.max(np.abs(correction))), steps)


def _can_grow(means: FloatArray) -> npt.NDArray[np.bool_]:
    """Return which types lead to a class that grows; means[i, j]: mean number of i that one of j turns into."""
    pattern = means > 0
    growing = np.zeros(len(means), dtype=bool)
    for members in classes(pattern):
        block = means[np.ix_(members, members)]
        if block.any() and exceeds_one(block):
            growing[members] = True
    return leading_to(pattern, growing) if growing.any() else growing
