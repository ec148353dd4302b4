"""States at rest followed as a parameter changes: a curve in (state, parameter), round its turning points.

The curve is followed by its arc length (Keller), so that it does not matter whether the parameter rises or falls along it. A
turning point is where the parameter stops rising: the tangent has no part along the parameter there, and that is solved for
between the two points on either side. Sums of the state that the flows conserve are kept as equations of their own.

Sources: Keller (1977) in Applications of Bifurcation Theory, 359-384; Castillo-Chavez & Song (2004) Math. Biosci. Eng.
1:361-404, theorem 4.1, for the start of the curve (both from memory).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ngm.engine.roots import root_between

__all__ = ["Branch", "Problem", "at_parameter", "follow", "null_direction", "stable_beside"]

FloatArray = npt.NDArray[np.float64]

#: First and largest step along the curve, in scaled units, and steps at most.
FIRST_STEP, LARGEST_STEP, MOST_STEPS = 2e-3, 0.12, 300
#: A corrected step may turn the curve by this much (cosine) at most.
STRAIGHT = 0.95
#: A step of Newton's method as small as this leaves an error of its square.
SETTLED = 1e-8


@dataclass(frozen=True, slots=True)
class Problem:
    """0 = net(y), y = (state, parameter), scaled.

    Attributes
    ----------
    net : callable
        (n + 1,) -> (n,) net flows.
    slope : callable
        (n + 1,) -> (n, n + 1).
    scale : (n + 1,) array
        Sizes of the components: the curve is followed in y / scale.
    conserved : (c, n) array
        Sums of the state that `net` never changes.
    infected : int
        The first components: those that are 0 without infection.
    """

    net: Callable[[FloatArray], FloatArray]
    slope: Callable[[FloatArray], FloatArray]
    scale: FloatArray
    conserved: FloatArray
    infected: int


@dataclass(frozen=True, eq=False, slots=True)
class Branch:
    """Points of a curve of states at rest, (k, n + 1) with the parameter last, and its turning points likewise.

    `left` says why it ends: "range" (the parameter left its range), "no infection" (it came back to none), "steps" (given
    up), "negative" (a compartment would be negative).
    """

    points: FloatArray
    turning: FloatArray
    left: str


def null_direction(matrix: FloatArray) -> FloatArray:
    """Return the unit vector that the matrix sends closest to 0."""
    return np.asarray(np.linalg.svd(matrix)[2][-1])


def _scaled(problem: Problem, z: FloatArray, kept: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return the equations and their slope at a scaled point; `kept`: what the conserved sums must be."""
    y = z * problem.scale
    n = len(z) - 1
    size = problem.scale[:n].max()
    value = problem.net(y) / size
    slope = problem.slope(y) * problem.scale[None, :] / size
    if len(problem.conserved):
        value = np.concatenate([value, (problem.conserved @ y[:n] - kept) / size])
        held = np.hstack([problem.conserved * problem.scale[None, :n], np.zeros((len(problem.conserved), 1))]) / size
        slope = np.vstack([slope, held])
    return value, slope


def _corrected(
    problem: Problem, z: FloatArray, plane: FloatArray, kept: FloatArray
) -> tuple[FloatArray, FloatArray] | None:
    """Return the point of the curve on the plane through z across `plane`, and its tangent; None where none is near."""
    through = float(plane @ z)
    point = z.copy()
    for _ in range(12):
        value, slope = _scaled(problem, point, kept)
        rows = np.vstack([slope, plane[None, :]])
        right = np.concatenate([value, [plane @ point - through]])
        if not (np.all(np.isfinite(rows)) and np.all(np.isfinite(right))):
            return None
        step = np.linalg.lstsq(rows, right, rcond=None)[0]
        point = point - step
        size = float(np.max(np.abs(step)))
        if size > 1:
            return None
        if size <= SETTLED:
            tangent = null_direction(_scaled(problem, point, kept)[1])
            return point, tangent * (1 if tangent @ plane >= 0 else -1)
    return None


def follow(
    problem: Problem, start: FloatArray, direction: FloatArray, low: float, high: float, most: int = MOST_STEPS
) -> Branch:
    """Return the curve of states at rest that leaves `start` in a direction.

    Parameters
    ----------
    start : (n + 1,) array
        A state at rest without infection and the parameter at which another curve crosses there.
    direction : (n + 1,) array
        Where that other curve goes; its infected part is positive.
    low, high : float
        The curve is followed while the parameter lies between them.
    """
    z, kept = start / problem.scale, problem.conserved @ start[:-1]
    tangent = direction / problem.scale
    tangent = tangent / np.linalg.norm(tangent)
    points, turning = [start], []
    h, steps, left = FIRST_STEP, 0, "steps"
    while steps < most:
        steps += 1
        found = _corrected(problem, z + h * tangent, tangent, kept)
        ahead = found is not None and bool(np.any(np.abs(found[0] - z) > h / 10))
        if found is None or not ahead or found[1] @ tangent < STRAIGHT:
            h /= 2
            if h < 1e-8:
                break
            continue
        new, new_tangent = found
        y = new * problem.scale
        infected = y[: problem.infected]
        if infected.sum() <= 0 or np.any(infected < -1e-9 * problem.scale[: problem.infected]):
            left = "no infection"
            break
        inside = low <= y[-1] <= high
        if inside and np.any(y[problem.infected : -1] < -1e-9 * problem.scale[problem.infected : -1]):
            left = "negative"
            break
        if tangent[-1] * new_tangent[-1] < 0 and len(points) > 1:
            turning.append(_turn(problem, z, tangent, float(np.linalg.norm(new - z)), kept) * problem.scale)
        z, tangent = new, new_tangent
        points.append(y)
        if not inside:
            left = "range"
            break
        h = min(LARGEST_STEP, 2 * h)
    return Branch(np.array(points), np.array(turning).reshape(-1, len(start)), left)


def _turn(problem: Problem, z: FloatArray, tangent: FloatArray, length: float, kept: FloatArray) -> FloatArray:
    """Return the point between z and the next one at which the parameter turns round."""

    def at(h: float) -> float:
        if h == 0:
            return float(tangent[-1])
        found = _corrected(problem, z + h * tangent, tangent, kept)
        if found is None:
            raise RuntimeError("the curve was lost between two of its points")
        return float(found[1][-1])

    high = length
    for _ in range(20):
        if at(0.0) * at(high) < 0:
            break
        high *= 1.2
    h = root_between(at, 0.0, high)
    found = _corrected(problem, z + h * tangent, tangent, kept)
    assert found is not None
    return found[0]


def at_parameter(problem: Problem, branch: Branch, value: float) -> list[FloatArray]:
    """Return the states of a branch at one value of the parameter, (n + 1,) each, in the order of the branch."""
    out: list[FloatArray] = []
    kept = problem.conserved @ branch.points[0][:-1]
    across = np.zeros(branch.points.shape[1])
    across[-1] = 1.0
    for a, b in zip(branch.points[:-1], branch.points[1:], strict=True):
        if a[-1] == b[-1] or not (a[-1] - value) * (b[-1] - value) <= 0:
            continue
        share = (value - a[-1]) / (b[-1] - a[-1])
        guess = a + share * (b - a)
        guess[-1] = value
        found = _corrected(problem, guess / problem.scale, across, kept)
        if found is None:
            continue
        y = found[0] * problem.scale
        y[-1] = value
        infected = y[: problem.infected]
        known = any(np.allclose(y, other, rtol=1e-7, atol=1e-9 * problem.scale.max()) for other in out)
        size = problem.scale[:-1].max()
        if infected.sum() > 1e-9 * size and np.all(infected >= -1e-11 * size) and not known:
            out.append(np.append(np.maximum(y[:-1], 0.0), value))
    return out


def stable_beside(slope: FloatArray, conserved: FloatArray) -> bool:
    """Return whether all eigenvalues of a slope have negative real parts, those that conserved sums make 0 left out."""
    if len(conserved):
        basis = np.linalg.svd(conserved)[2][len(conserved) :].T
        slope = basis.T @ slope @ basis
    return not len(slope) or float(np.max(np.linalg.eigvals(slope).real)) < 0
