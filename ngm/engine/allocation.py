"""A limited supply shared among groups so that the control reproduction number is as small as possible.

The supply buys coverage: x_g in [0, u_g] of group g at price_g x_g, and every type i of that group then counts in K by
1 - e_i x_g. The spectral radius of diag(1 - e x) K is that of K diag(1 - e x), and of every matrix in which the two
effects of a vaccine, on infection and on onward spread, are put together: so rows are enough. It falls in x, but it is
not convex in general; where it is, and how far a result can be from the best, is told by `ngm.engine.allocation_bounds`.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

import numpy as np
import numpy.typing as npt

from ngm.engine.allocation_rules import in_order
from ngm.engine.structure import IntArray, classes
from ngm.engine.symmetric import symmetric_form
from ngm.engine.vaccination import scaled_number

__all__ = [
    "Cut",
    "Problem",
    "best_share",
    "cyclic_classes",
    "least_supply",
    "perron",
]

FloatArray = npt.NDArray[np.float64]

#: Groups up to which every start is optimised, and types up to which eigenvalues come from the dense solver.
_MANY = 40
_DENSE = 24
#: A factor is kept above this while the search runs, so that every class stays one.
_LEAST = 1e-12


@dataclass(frozen=True)
class Cut:
    """The tangent of one class's root at a point: value + slope (y - at)."""

    at: FloatArray
    value: float
    slope: FloatArray


@dataclass(eq=False)
class Problem:
    """What is shared, and what it does.

    Attributes
    ----------
    K : (m, m) array of float, >= 0
        Next-generation matrix without the supply, no unit.
    member : (m,) array of int
        Group of each type; -1 for a type that the supply does not reach.
    effect : (m,) array of float in [0, 1]
        e: what a type's row loses at full coverage.
    price : (g,) array of float, > 0
        Cost of full coverage of each group: members times cost a head.
    upper : (g,) array of float in [0, 1]
        Highest coverage of each group.
    """

    K: FloatArray
    member: IntArray
    effect: FloatArray
    price: FloatArray
    upper: FloatArray
    cuts: list[Cut] = field(default_factory=list)

    def __post_init__(self) -> None:
        m, g = len(self.K), len(self.price)
        if self.K.shape != (m, m) or self.member.shape != (m,) or self.effect.shape != (m,) or len(self.upper) != g:
            raise ValueError("K, member and effect are for the types, price and upper for the groups")
        if not (np.all(self.K >= 0) and np.all(np.isfinite(self.K))):
            raise ValueError("K has an entry that is negative or not finite")
        if not np.all((self.effect >= 0) & (self.effect <= 1)) or not np.all((self.upper >= 0) & (self.upper <= 1)):
            raise ValueError("effects and upper limits lie in [0, 1]")
        if not (np.all(self.price > 0) and np.all(np.isfinite(self.price))):
            raise ValueError("prices are positive")
        self._vectors: dict[int, tuple[FloatArray, FloatArray]] = {}

    @cached_property
    def parts(self) -> list[IntArray]:
        """The classes of K that have a cycle."""
        return cyclic_classes(self.K > 0)

    @cached_property
    def forms(self) -> list[FloatArray] | None:
        """The symmetric matrix that each class is similar to by scaling; None where one has none."""
        forms = [symmetric_form(self.K[np.ix_(members, members)]) for members in self.parts]
        return None if any(form is None for form in forms) else [form for form in forms if form is not None]

    @cached_property
    def shift(self) -> float | None:
        """How far below 0 the eigenvalues of the symmetric forms reach; 0: the number is convex in coverage."""
        if self.forms is None:
            return None
        values = [np.linalg.eigvalsh(form) for form in self.forms]
        least, largest = min((v[0] for v in values), default=0.0), max((v[-1] for v in values), default=0.0)
        return float(-least) if -least > 1e-12 * largest else 0.0

    def factors(self, x: FloatArray) -> FloatArray:
        """Return 1 - e x for each type."""
        reached = self.member >= 0
        out = np.ones(len(self.K))
        out[reached] = 1 - self.effect[reached] * x[self.member[reached]]
        return out

    def number(self, x: FloatArray) -> float:
        """Return the number that a coverage leaves, from enclosed roots."""
        return scaled_number(self.K, np.clip(self.factors(x), 0.0, 1.0))

    def value(self, x: FloatArray) -> float:
        """Return the number that a coverage leaves: from doubles, or as `number` where a type is all but taken out."""
        if self.factors(x).min(initial=1.0) < 1e-6:
            return self.number(x)
        return float(self.roots(x)[0].max(initial=0.0))

    def roots(self, x: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return the root of each class and its slope by coverage: (c,) and (c, g).

        With r and l the right and left Perron vectors of diag(d) K: d root / d d_i = l_i (K r)_i / (l . r).
        """
        d = np.maximum(self.factors(x), _LEAST)
        values, slopes = np.zeros(len(self.parts)), np.zeros((len(self.parts), len(self.price)))
        for c, members in enumerate(self.parts):
            block = self.K[np.ix_(members, members)]
            root, right, left = perron(d[members, None] * block, self._vectors.get(c))
            self._vectors[c] = (right, left)
            by_type = -self.effect[members] * left * (block @ right) / (left @ right)
            reached = self.member[members] >= 0
            np.add.at(slopes[c], self.member[members][reached], by_type[reached])
            values[c] = root
        return values, slopes

    def tangents(self, x: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return `roots`, and remember the tangents."""
        values, slopes = self.roots(x)
        top = values.max(initial=0.0)
        self.cuts += [Cut(x.copy(), float(v), s.copy()) for v, s in zip(values, slopes, strict=True) if v > 0.9 * top]
        return values, slopes

    def spend(self, x: FloatArray) -> float:
        """Return what a coverage costs."""
        return float(self.price @ x)


def cyclic_classes(there: npt.NDArray[np.bool_]) -> list[IntArray]:
    """Return the classes of a pattern that have a cycle."""
    return [members for members in classes(there) if len(members) > 1 or there[members[0], members[0]]]


def perron(matrix: FloatArray, start: tuple[FloatArray, FloatArray] | None) -> tuple[float, FloatArray, FloatArray]:
    """Return root, right and left Perron vector of an irreducible matrix, to about 1e-12."""
    size = len(matrix)
    if size == 1:
        return float(matrix[0, 0]), np.ones(1), np.ones(1)
    if size > _DENSE:
        right, left = start if start is not None else (np.ones(size), np.ones(size))
        found = _power(matrix, right)
        other = None if found is None else _power(matrix.T, left)
        if found is not None and other is not None:
            return found[0], found[1], other[1]
    from scipy.linalg import eig

    found_all: Any = eig(matrix, left=True, right=True)
    values, lefts, rights = found_all
    top = int(np.argmax(values.real))
    right, left = np.abs(rights[:, top].real), np.abs(lefts[:, top].real)
    return float(values[top].real), right / right.sum(), left / left.sum()


def _power(matrix: FloatArray, start: FloatArray) -> tuple[float, FloatArray] | None:
    """Return root and vector by power steps on M + c I; None where they do not settle in time."""
    x = np.maximum(start, 1e-300) / start.sum()
    shift = 0.1 * float((matrix @ x).sum())
    before = 0.0
    for step in range(400):
        y = matrix @ x + shift * x
        total = float(y.sum())
        y /= total
        if step % 5 == 4:
            if abs(total - before) <= 1e-14 * total and float(np.abs(y - x).max()) <= 1e-12 * float(y.max()):
                return total - shift, y
            before = total
        x = y
    return None


# -- the search -------------------------------------------------------------------------------------------------------


def best_share(problem: Problem, budget: float, starts: Sequence[FloatArray]) -> FloatArray:
    """Return the best coverage found within a budget: sequential quadratic programming from several starts.

    With several classes of K the largest root has kinks where two of them tie: then t is minimised with the root of
    each class at most t. Of many groups only the best starts are followed, and those groups that the multiplier of the
    budget leaves at a limit stay there.

    Parameters
    ----------
    starts : sequence of (g,) arrays
        Feasible coverages; the result is never worse than the best of them.
    """
    if problem.spend(problem.upper) <= budget:
        return problem.upper.copy()
    if not problem.parts:
        return np.zeros(len(problem.price))
    ranked = sorted((problem.value(x), k) for k, x in enumerate(starts))
    many = len(problem.price) > _MANY
    chosen = [starts[k] for _, k in ranked[: 1 if many or problem.shift == 0.0 else 6]]
    best, least = starts[ranked[0][1]], ranked[0][0]
    for start in chosen:
        x = _improved(problem, budget, _steps(problem, budget, start, 60 if many else 8))
        problem.tangents(x)
        value = problem.value(x)
        if value < least:
            best, least = x, value
    return _feasible(problem, np.where(best < 1e-9, 0.0, best), budget)


def _steps(problem: Problem, budget: float, x: FloatArray, count: int) -> FloatArray:
    """Return a coverage improved by conditional-gradient steps: towards the best corner, by a line search."""
    for _ in range(count):
        values, slopes = problem.tangents(x)
        c = int(np.argmax(values))
        corner = in_order(problem, np.argsort(slopes[c] / problem.price, kind="stable"), budget)
        way = corner - x
        if slopes[c] @ way > -1e-9 * values[c]:
            break
        low, high = 0.0, 1.0
        for _ in range(12):
            middle = (low + high) / 2
            at, slope = problem.roots(x + middle * way)
            low, high = (middle, high) if slope[int(np.argmax(at))] @ way < 0 else (low, middle)
        if low == 0.0:
            break
        x = x + low * way
    return x


def _improved(problem: Problem, budget: float, x: FloatArray) -> FloatArray:
    """Return a coverage after sequential quadratic programming on the groups that are not settled at a limit."""
    free = np.ones(len(x), dtype=bool)
    for _ in range(3):
        if len(x) > _MANY:
            free = _unsettled(problem, x)
        if not free.any():
            break
        found = _minimised(problem, x, free, budget=budget)
        found = _feasible(problem, found, budget)
        gain = problem.value(x) - problem.value(found)
        if gain > 0:
            x = found
        if len(x) <= _MANY or gain < 1e-7:
            break
    return x


def _unsettled(problem: Problem, x: FloatArray) -> npt.NDArray[np.bool_]:
    """Return which groups are inside their limits, or at one where the price of a gain does not hold them firmly."""
    values, slopes = problem.roots(x)
    gain = -slopes[int(np.argmax(values))] / problem.price
    inside = (x > 1e-9) & (x < problem.upper - 1e-9)
    level = float(np.median(gain[inside])) if inside.any() else float(np.median(gain))
    empty, full = x <= 1e-9, x >= problem.upper - 1e-9
    settled = (empty & (gain < 0.8 * level)) | (full & (gain > 1.25 * level))
    return np.asarray(~settled & (problem.upper > 0))


def _minimised(
    problem: Problem,
    x: FloatArray,
    free: npt.NDArray[np.bool_],
    budget: float | None = None,
    target: float | None = None,
) -> FloatArray:
    """Return x with its free part where the number is least within a budget, or the price with the number at most a target."""
    known: dict[bytes, tuple[FloatArray, FloatArray]] = {}

    def at(z: FloatArray) -> tuple[FloatArray, FloatArray]:
        key = z.tobytes()
        if key not in known:
            full = x.copy()
            full[free] = z
            known.clear()
            known[key] = problem.tangents(np.clip(full, 0.0, problem.upper))
        return known[key]

    start, price = x[free], problem.price[free]
    bounds: list[tuple[float, float | None]] = [(0.0, float(u)) for u in problem.upper[free]]
    scale = float(at(start)[0].max(initial=0.0)) or 1.0
    rules: list[Any] = []
    if target is not None:
        unit = problem.spend(x) or 1.0
        rules.append(_rule(lambda z: 1 - at(z)[0] / target, lambda z: -at(z)[1][:, free] / target))
        z = _sequential(lambda z: (price @ z / unit, price / unit), start, bounds, rules)
    elif budget is not None and len(problem.parts) == 1:
        room = 1 - problem.spend(np.where(free, 0.0, x)) / budget
        rules.append(_rule(lambda z: room - price @ z / budget, lambda z: -price / budget))
        z = _sequential(lambda z: (at(z)[0][0] / scale, at(z)[1][0, free] / scale), start, bounds, rules)
    elif budget is not None:
        # y is z and, last, t: the least number at or above the roots of all classes
        room = 1 - problem.spend(np.where(free, 0.0, x)) / budget
        last = np.concatenate([np.zeros(len(start)), np.ones(1)])
        ones = np.ones((len(problem.parts), 1))
        rules.append(_rule(lambda y: room - price @ y[:-1] / budget, lambda y: np.append(-price / budget, 0.0)))
        rules.append(
            _rule(lambda y: y[-1] - at(y[:-1])[0] / scale, lambda y: np.hstack([-at(y[:-1])[1][:, free] / scale, ones]))
        )
        z = _sequential(lambda y: (y[-1], last), np.append(start, 1.0), [*bounds, (0.0, None)], rules)[:-1]
    out = x.copy()
    if np.all(np.isfinite(z)):
        out[free] = z
    return np.clip(out, 0.0, problem.upper)


def _rule(function: Callable[[FloatArray], Any], slope: Callable[[FloatArray], Any]) -> dict[str, Any]:
    return {"type": "ineq", "fun": function, "jac": slope}


def _sequential(function: Callable[[FloatArray], Any], start: FloatArray, bounds: Any, rules: list[Any]) -> FloatArray:
    """Return where sequential quadratic programming ends; `function` gives value and slope."""
    from scipy.optimize import minimize

    settings: Any = {"ftol": 1e-12 if len(start) <= _MANY else 1e-9, "maxiter": 100}
    found = minimize(function, start, jac=True, bounds=bounds, constraints=rules, method="SLSQP", options=settings)
    return np.asarray(found.x, dtype=float)


def _feasible(problem: Problem, x: FloatArray, budget: float) -> FloatArray:
    """Return the coverage moved so that it spends the budget and no more: shrunk, or grown towards the limits."""
    x = np.where(x > problem.upper - 1e-9, problem.upper, x)
    spent = problem.spend(x)
    if spent > budget:
        inside = x < problem.upper
        movable = float(problem.price[inside] @ x[inside])
        if movable < spent - budget:
            return x * (budget / spent)
        return np.where(inside, x * (1 - (spent - budget) / movable), x)
    # What is left goes first to groups that have some already: none that was given nothing gets a trace.
    for takes in (x > 0, np.ones(len(x), dtype=bool)):
        space = np.where(takes, problem.upper - x, 0.0)
        room = problem.spend(space)
        if room > 0:
            x = x + space * min(1.0, max(0.0, budget - problem.spend(x)) / room)
    return np.asarray(x)


def least_supply(problem: Problem, target: float, starts: Sequence[FloatArray]) -> FloatArray | None:
    """Return the cheapest coverage found at which the number is at most the target; None where full coverage is not enough.

    Every start is moved along the line through no and full coverage until the number is the target, and the cheapest of
    them improved by sequential quadratic programming on the price.
    """
    from scipy.optimize import brentq

    nothing = np.zeros(len(problem.price))

    def height(x: FloatArray) -> float:
        return problem.value(np.clip(x, 0.0, problem.upper)) - target

    if height(nothing) <= 0:
        return nothing
    if height(problem.upper) > 0:
        return None

    def brought(x: FloatArray) -> FloatArray:
        """Move a coverage until the number is the target."""
        low, high = (x, problem.upper) if height(x) > 0 else (nothing, x)
        if height(high) == 0:
            return high
        s = brentq(lambda s: height(low + s * (high - low)), 0.0, 1.0, xtol=1e-15)
        return np.asarray(low + s * (high - low))

    many = len(problem.price) > _MANY
    moved = sorted((brought(x) for x in starts), key=problem.spend)
    best = moved[0]
    for start in moved[: 1 if many else 4]:
        free = _unsettled(problem, start) if many else np.ones(len(start), dtype=bool)
        if not free.any():
            continue
        found = brought(_minimised(problem, start, free, target=target))
        if problem.spend(found) < problem.spend(best):
            best = found
    return np.where(best < 1e-9, 0.0, np.where(best > problem.upper - 1e-9, problem.upper, best))
