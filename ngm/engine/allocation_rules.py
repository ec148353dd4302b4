"""Simple rules for sharing a supply: what the best share is held against, and where its search begins."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from ngm.engine.structure import IntArray

if TYPE_CHECKING:
    from ngm.engine.allocation import Problem

__all__ = ["first_then_even", "greedy", "in_order", "same_multiple"]

FloatArray = npt.NDArray[np.float64]


def same_multiple(problem: Problem, direction: FloatArray, budget: float) -> FloatArray:
    """Return x = min(u, t direction) with the t that spends the budget: what a full group leaves goes to the others."""
    x = np.zeros(len(problem.price))
    left = budget
    free = (direction > 0) & (problem.upper > 0)
    while free.any() and left > 0:
        rate = direction / float(np.max(direction[free]))  # whatever the size of what is left
        t = left / float(problem.price[free] @ rate[free])
        full = free & (rate * t >= problem.upper - x)
        if not full.any():
            x[free] += t * rate[free]
            break
        # up to the first groups that fill, then on with the others
        step = min(t, float(np.min((problem.upper[full] - x[full]) / rate[full])))
        grown = np.minimum(x[free] + step * rate[free], problem.upper[free])
        left -= float(problem.price[free] @ (grown - x[free]))
        x[free] = grown
        free &= x < problem.upper * (1 - 1e-15)
    return np.minimum(x, problem.upper)


def in_order(problem: Problem, order: Sequence[int] | IntArray, budget: float) -> FloatArray:
    """Return the coverage that fills one group after the other."""
    x, left = np.zeros(len(problem.price)), budget
    for g in order:
        x[g] = min(float(problem.upper[g]), max(left, 0.0) / float(problem.price[g]))
        left -= float(x[g] * problem.price[g])
    return x


def first_then_even(problem: Problem, group: int, budget: float) -> FloatArray:
    """Return the coverage that fills one group, and gives the same coverage to all others with what is left."""
    x = in_order(problem, [group], budget)
    others = np.ones(len(x))
    others[group] = 0.0
    return np.asarray(x + same_multiple(problem, others, max(budget - problem.spend(x), 0.0)))


def greedy(problem: Problem, budget: float, portions: int = 40) -> FloatArray:
    """Return the coverage that gives each portion where the number falls most for its price at that moment."""
    x = np.zeros(len(problem.price))
    for _ in range(portions if problem.parts else 0):  # without a cycle the number is 0 as it is
        values, slopes = problem.tangents(x)
        gain = -slopes[int(np.argmax(values))] / problem.price
        rest = budget / portions
        for g in np.argsort(-gain, kind="stable"):
            if gain[g] <= 0 or rest <= 0:
                break
            more = min(float(problem.upper[g] - x[g]), rest / float(problem.price[g]))
            x[g] += more
            rest -= more * float(problem.price[g])
    return x
