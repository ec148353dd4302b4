"""Where a response falls to a target: sampled first, since it need not fall all the way, then bracketed."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import pairwise

__all__ = ["Response", "last_fall", "respond", "root_between"]

Value = float | None


@dataclass(frozen=True)
class Response:
    """A function on an interval as sampled: (x, value) in order; None where it has no value."""

    points: tuple[tuple[float, Value], ...]

    @property
    def monotone(self) -> bool:
        """Whether the values exist and never rise, but for rounding."""
        values = [value for _, value in self.points]
        known = [value for value in values if value is not None]
        if len(known) < len(values):
            return False
        return all(b <= a + 1e-12 * max(1.0, abs(a)) for a, b in pairwise(known))

    @property
    def lowest(self) -> tuple[float, float] | None:
        """The point with the least value, the first of several; None where there is no value at all."""
        known = [(value, x) for x, value in self.points if value is not None]
        if not known:
            return None
        value, x = min(known)
        return x, value


def respond(function: Callable[[float], Value], grid: Sequence[float]) -> Response:
    """Return the values on a grid, with three points more around each place where they rise or stop existing."""
    points = [(x, function(x)) for x in grid]
    first = Response(tuple(points))
    if first.monotone:
        return first
    more = []
    for (a, before), (b, after) in pairwise(points):
        near = before is None or after is None or after > before
        if near or _turns(points, a, b):
            more += [(x, function(x)) for x in (a + (b - a) * k / 4 for k in (1, 2, 3))]
    return Response(tuple(sorted([*points, *more], key=lambda point: point[0])))


def _turns(points: Sequence[tuple[float, Value]], a: float, b: float) -> bool:
    """Return whether the values rise right before or right after the step from a to b."""
    xs = [x for x, _ in points]
    k = xs.index(a)
    for i in (k - 1, k + 1):
        if 0 <= i < len(points) - 1:
            left, right = points[i][1], points[i + 1][1]
            if left is None or right is None or right > left:
                return True
    return False


def last_fall(function: Callable[[float], Value], response: Response, target: float) -> float | None:
    """Return the least x from which on the values stay at or below the target, as far as the samples tell.

    Returns
    -------
    float or None
        The first x of the samples where all are at or below it; a root between two samples otherwise, found to 1e-15
        of the interval's length or to the last bit; None where the last value is above the target or missing.
    """
    points = response.points
    k = len(points)
    while k > 0 and _reached(points[k - 1][1], target):
        k -= 1
    if k == len(points):
        return None
    if k == 0:
        return points[0][0]
    (low, above), (high, below) = points[k - 1], points[k]
    assert below is not None
    if above is None:
        return _edge(function, low, high, target)
    return high if below == target else root_between(function, low, high, target)


def _reached(value: Value, target: float) -> bool:
    return value is not None and value <= target


def _edge(function: Callable[[float], Value], low: float, high: float, target: float) -> float:
    """Return where values at or below the target begin, between a point without and one with: by halving."""
    while high - low > 1e-13 * max(1.0, abs(high)):
        middle = (low + high) / 2
        if _reached(function(middle), target):
            high = middle
        else:
            low = middle
    return high


class _NoValue(Exception):  # noqa: N818
    """The function has no value at a point on the way."""


def root_between(function: Callable[[float], Value], low: float, high: float, target: float = 0.0) -> float:
    """Return an x in [low, high] where a continuous function, above the target at one end, equals it.

    Brent's method, to an absolute tolerance of 1e-15 times the interval's length. Where the function has no value on
    the way, the bracket is halved instead.

    Raises
    ------
    ValueError
        The values at both ends lie on one side of the target, or one is missing.

    References
    ----------
    Brent (1973) Algorithms for Minimization without Derivatives, chapter 4 (from memory).

    Examples
    --------
    >>> root_between(lambda x: 3 * (1 - x), 0.0, 1.0, 1.0)
    0.6666666666666667
    """
    from scipy.optimize import brentq

    first, last = function(low), function(high)
    if first is None or last is None or (first - target) * (last - target) > 0:
        raise ValueError("the target does not lie between the values at both ends")
    if first == target:
        return low

    def height(x: float) -> float:
        value = function(x)
        if value is None:
            raise _NoValue
        return value - target

    try:
        return float(brentq(height, low, high, xtol=1e-15 * (high - low), rtol=4 * 2.0**-52, maxiter=200))
    except _NoValue:
        if first < last:
            raise ValueError("the function has no value on the way to the target") from None
        return _edge(function, low, high, target)
