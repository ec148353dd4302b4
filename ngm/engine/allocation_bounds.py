"""How good an allocation can be at best: a lower bound on the number within a budget, and so the gap of what was found.

Three routes, by what K allows:

- convex. Where every class of K is similar, by a diagonal matrix, to a symmetric A without negative eigenvalues (contacts
  that balance and in which like meets like), the root of diag(d) K is the largest eigenvalue of A^1/2 diag(d) A^1/2,
  convex in d and so in the coverage. Then every tangent lies below the number, and the least maximum of the tangents met on
  the way, a linear program, is the bound. It meets the number at the best allocation.
- nearly convex. Where A has negative eigenvalues down to -s, the bound of A + s I, less s, holds.
- divided. In general the logarithm of the number is convex in log d (Kingman 1961), so that its tangent there, with each
  log(1 - e x) replaced by its chord over a box of coverages, is a linear lower bound: the box is divided where the chord is
  furthest off, the box with the least bound first. Every bound holds; they are sharp once boxes are small, which a limited
  number of boxes reaches for few groups only.

Bounds hold but for rounding: they are computed in doubles and not enclosed.

References
----------
Kingman (1961) Q. J. Math. 12:283-284; Kelley (1960) J. SIAM 8:703-712 (both from memory).
"""

from __future__ import annotations

import heapq
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from ngm.engine.allocation import Cut, Problem, best_share, cyclic_classes, perron
from ngm.engine.allocation_rules import in_order

__all__ = ["Bound", "least_price_bound", "lower_bound"]

FloatArray = npt.NDArray[np.float64]

#: A bound this close to the number, relative to it, is close enough.
CLOSE = 2e-5
#: Boxes looked at, by the number of groups, and types up to which there are more than the first.
BOXES = ((4, 1500), (10, 600), (20, 300))
_FEW_TYPES = 24
_MOST_CUTS = 250


@dataclass(frozen=True)
class Bound:
    """A lower bound on the number within a budget.

    `route`: "convex", "nearly convex", "divided" (boxes), or "all" where the supply is enough for everybody. `x`: the
    best coverage known, which the search for the bound may have improved.
    """

    low: float
    route: str
    x: FloatArray


def lower_bound(problem: Problem, budget: float, x: FloatArray) -> Bound:
    """Return a lower bound on the number that any coverage within the budget leaves, given the best one known.

    Parameters
    ----------
    problem : Problem
    budget : float
        In the unit of `problem.price`.
    x : (g,) array of float
        A coverage within the budget.
    """
    if problem.spend(problem.upper) <= budget:
        return Bound(problem.number(problem.upper), "all", problem.upper.copy())
    if not problem.parts:
        return Bound(0.0, "convex", x)
    number = problem.value(x)
    shift = problem.shift
    if shift == 0.0:
        low, x = _by_tangents(problem, budget, x)
        return Bound(max(low, 0.0), "convex", x)
    near: float | None = None
    if shift is not None and shift < 0.2 * number:
        near = _nearly(problem, budget, x, shift)
        if near >= number * (1 - 1e-4):
            return Bound(near, "nearly convex", x)
    low, x = _by_boxes(problem, budget, x)
    if near is not None and near > low:
        return Bound(near, "nearly convex", x)
    return Bound(max(low, 0.0), "divided", x)


# -- tangents ---------------------------------------------------------------------------------------------------------


def _by_tangents(problem: Problem, budget: float, x: FloatArray) -> tuple[float, FloatArray]:
    """Return the bound from all tangents met so far, with more of them where they leave a gap, and the best coverage."""
    best = float(problem.tangents(x)[0].max(initial=0.0))
    low, more = -np.inf, 12 if len(x) <= 40 else 4
    for step in range(more):
        at_step, y = _program(problem, _recent(problem), budget=budget)
        low = max(low, at_step)
        if low >= best * (1 - CLOSE) or step == more - 1:
            break
        for share in (1.0, 0.3):
            z = np.clip(x + share * (y - x), 0.0, problem.upper)
            value = float(problem.tangents(z)[0].max(initial=0.0))
            if value < best:
                best, x = value, z
    return low, x


def _recent(problem: Problem) -> list[Cut]:
    return problem.cuts[-_MOST_CUTS:]


def _program(
    problem: Problem, cuts: list[Cut], budget: float | None = None, target: float | None = None
) -> tuple[float, FloatArray]:
    """Return the least maximum of the tangents within a budget, or the least price with none above a target, and where."""
    from scipy.optimize import linprog

    slopes = np.array([cut.slope for cut in cuts])
    heights = np.array([cut.value - cut.slope @ cut.at for cut in cuts])
    bounds: list[Any] = [(0.0, float(u)) for u in problem.upper]
    g = len(problem.price)
    unit = float(problem.price.max())
    if budget is not None:
        A = np.vstack([np.hstack([slopes, -np.ones((len(cuts), 1))]), np.append(problem.price / unit, 0.0)[None, :]])
        b = np.append(-heights, budget / unit)
        found = linprog(np.append(np.zeros(g), 1.0), A_ub=A, b_ub=b, bounds=[*bounds, (None, None)], method="highs")
        return _outcome(problem, found, 1.0)
    assert target is not None
    found = linprog(problem.price / unit, A_ub=slopes, b_ub=target - heights, bounds=bounds, method="highs")
    return _outcome(problem, found, unit)


def _outcome(problem: Problem, found: Any, unit: float) -> tuple[float, FloatArray]:
    if found.status != 0:
        return -np.inf, np.zeros(len(problem.price))
    return float(found.fun) * unit, np.clip(found.x[: len(problem.price)], 0.0, problem.upper)


def _nearly(problem: Problem, budget: float, x: FloatArray, shift: float) -> float:
    """Return the bound of A + s I, less s: diag(d)^1/2 A diag(d)^1/2 loses at most s max d <= s."""
    K = np.zeros(problem.K.shape)
    assert problem.forms is not None
    for members, form in zip(problem.parts, problem.forms, strict=True):
        K[np.ix_(members, members)] = form + shift * np.eye(len(members))
    other = Problem(K, problem.member, problem.effect, problem.price, problem.upper)
    y = best_share(other, budget, [x])
    return _by_tangents(other, budget, y)[0] - shift


def least_price_bound(problem: Problem, target: float, x: FloatArray) -> float | None:
    """Return a lower bound on the price of bringing the number to the target; None where K is not convex in coverage."""
    if problem.shift != 0.0:
        return None
    problem.tangents(x)
    low = -np.inf
    for _ in range(6 if len(x) <= 40 else 2):
        at_step, y = _program(problem, _recent(problem), target=target)
        low = max(low, at_step)
        if low >= problem.spend(x) * (1 - CLOSE):
            break
        problem.tangents(y)
        problem.tangents((x + y) / 2)
    return max(low, 0.0)


# -- boxes ------------------------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class _Box:
    lower: FloatArray
    upper: FloatArray


class _Divider:
    """Boxes of coverages with lower bounds, divided best first."""

    def __init__(self, problem: Problem, budget: float, x: FloatArray) -> None:
        self.problem, self.budget = problem, budget
        self.best, self.x = problem.value(x), x
        self.reached = problem.member >= 0

    def look(self, box: _Box) -> tuple[float, int, float, _Box] | None:
        """Return (bound, group to divide, where, the box as cut by the budget); None where the box holds nothing better."""
        problem, price = self.problem, self.problem.price
        room = self.budget - problem.spend(box.lower)
        if room < -1e-12 * self.budget:
            return None
        upper = np.minimum(box.upper, box.lower + max(room, 0.0) / price)
        width = upper - box.lower
        full = float(price @ width)
        if full <= room * (1 + 1e-12):
            self.offer(upper)
            return problem.value(upper), -1, 0.0, _Box(box.lower, upper)
        point = box.lower + width * (room / full)
        bound, group, where = -np.inf, -1, 0.0
        for _ in range(2):
            low, group, where, corner = self.tangent(box.lower, upper, point, room)
            bound = max(bound, low)
            self.offer(corner)
            if bound >= self.best * (1 - CLOSE):
                return None
            point = corner
        return bound, group, where, _Box(box.lower, upper)

    def offer(self, x: FloatArray) -> None:
        """Take a coverage where it is better than the best so far."""
        value = self.problem.value(x)
        if value < self.best:
            self.best, self.x = value, x.copy()

    def tangent(
        self, lower: FloatArray, upper: FloatArray, point: FloatArray, room: float
    ) -> tuple[float, int, float, FloatArray]:
        """Return the bound from the tangent at a point, the group whose chords are furthest off, where, and the corner."""
        problem = self.problem
        high, low = problem.factors(lower), np.maximum(problem.factors(upper), 0.0)
        at = problem.factors(point)
        # Where a factor falls to almost nothing its chord says little: then it counts as if at its least.
        held = low < 1e-2 * high
        at = np.where(held, low, at)
        root, share = _weights(problem, at)
        moving = self.reached & ~held & (high > low)
        fall = np.zeros(len(at))
        fall[moving] = np.log(low[moving] / high[moving])
        rise = np.zeros(len(at))
        rise[moving] = np.log(high[moving] / at[moving])
        width = np.maximum(upper - lower, 1e-300)
        slope = _by_group(problem, moving, share * fall) / width
        corner = lower + self._filled(slope, width, room)
        start = float(share @ rise)
        bound = root * np.exp(start + float(slope @ (corner - lower)))
        off = _by_group(problem, moving, share * fall**2 / 8)
        lost = self.reached & held & (high > low)
        off += _by_group(problem, lost, share + 1e-3 * high)
        group = int(np.argmax(off))
        where = float(corner[group])
        inner = (lower[group] + 0.2 * width[group], upper[group] - 0.2 * width[group])
        where = where if inner[0] <= where <= inner[1] else float(lower[group] + upper[group]) / 2
        return float(bound), group, where, corner

    def _filled(self, slope: FloatArray, width: FloatArray, room: float) -> FloatArray:
        part = Problem(
            np.zeros((0, 0)), np.zeros(0, dtype=np.intp), np.zeros(0), self.problem.price, np.minimum(width, 1)
        )
        return in_order(part, np.argsort(slope / self.problem.price, kind="stable"), room)


def _by_group(problem: Problem, types: npt.NDArray[np.bool_], values: FloatArray) -> FloatArray:
    """Return the sums over the types of each group, of some types only."""
    out = np.zeros(len(problem.price))
    np.add.at(out, problem.member[types], values[types])
    return out


def _weights(problem: Problem, factors: FloatArray) -> tuple[float, FloatArray]:
    """Return the root of diag(factors) K, and l_i r_i / (l . r) for its leading class, 0 elsewhere.

    These are the slopes of log root by the logarithms of the factors; they sum to 1. A factor of 0 takes its type out.
    """
    parts = problem.parts
    if np.any(factors == 0):
        there = (problem.K > 0) & (factors > 0)[:, None]
        parts = cyclic_classes(there)
    best, share = 0.0, np.zeros(len(factors))
    for members in parts:
        root, right, left = perron(factors[members, None] * problem.K[np.ix_(members, members)], None)
        weights = left * right
        if root > best and weights.sum() > 0:
            best = root
            share = np.zeros(len(factors))
            share[members] = weights / weights.sum()
    return best, share


def _by_boxes(problem: Problem, budget: float, x: FloatArray) -> tuple[float, FloatArray]:
    """Return a lower bound by dividing boxes, and the best coverage met."""
    divider = _Divider(problem, budget, x)
    few = len(problem.K) <= _FEW_TYPES
    limit = next((n for groups, n in BOXES if few and len(x) <= groups), 2)
    first = divider.look(_Box(np.zeros(len(x)), problem.upper.copy()))
    if first is None:
        return divider.best * (1 - CLOSE), divider.x
    count = 0
    queue: list[tuple[float, int, int, float, _Box]] = [(first[0], count, *first[1:])]
    closed = np.inf
    while queue and count < limit:
        bound, _, group, where, box = heapq.heappop(queue)
        if bound >= divider.best * (1 - CLOSE):
            queue = []
            break
        if group < 0:
            closed = min(closed, bound)
            continue
        below, above = box.upper.copy(), box.lower.copy()
        below[group] = above[group] = where
        for part in (_Box(box.lower, below), _Box(above, box.upper)):
            count += 1
            seen = divider.look(part)
            if seen is not None:
                heapq.heappush(queue, (seen[0], count, *seen[1:]))
    left = queue[0][0] if queue else np.inf
    return float(min(left, closed, divider.best * (1 - CLOSE))), divider.x
