"""States at rest of large grouped models: the net flow's slope stays a block matrix."""

from __future__ import annotations

import numpy as np

from ngm.analysis.large import block_slopes, difference
from ngm.derivation.evaluate import Evaluator
from ngm.derivation.rest import RestSystem, choose_branches
from ngm.derivation.space import Array
from ngm.derivation.template import Arrow, Template
from ngm.engine.blocks import BlockMatrix
from ngm.engine.large import step_modulus
from ngm.engine.rest import FreeStates, RestStates
from ngm.engine.transitions import SingularTransitions, Transitions

__all__ = ["find_large_rest", "is_large_stable"]

NEWTON_STEPS = 60
STARTS = 6


def find_large_rest(system: RestSystem, *, discrete: bool = False) -> RestStates:
    """Return the states at rest of many free compartments, as doubles: an affine system at once, another by Newton's method.

    Raises
    ------
    FreeStates
        Some unknowns are fixed by nothing.
    """
    n = len(system.labels)
    rng = np.random.default_rng(7)
    first, second = (_losses(system, np.exp(rng.normal(size=n))) for _ in range(2))
    trial = rng.uniform(size=n)
    if np.allclose(first @ trial, second @ trial, rtol=1e-11, atol=0):
        entering, leaving = system.flow(np.zeros(n))
        x = _solve(system, first, (entering - leaving)[:, 0])
        return RestStates((x,), (bool(np.all(x >= 0)),), (_stable(first, discrete),))
    found: list[Array] = []
    for k in range(STARTS):
        reached = _newton(system, np.full(n, 10.0 ** (k - 1)))
        if reached is not None and not any(np.allclose(reached, other, rtol=1e-6) for other in found):
            found.append(reached)
    stable = tuple(_stable(_losses(system, x), discrete) for x in found)
    return RestStates(tuple(found), tuple(bool(np.all(x >= 0)) for x in found), stable)


def _newton(system: RestSystem, x: Array) -> Array | None:
    for _ in range(NEWTON_STEPS):
        entering, leaving = system.flow(x)
        net = (entering - leaving)[:, 0]
        if not np.all(np.isfinite(net)):
            return None
        step = _solve(system, _losses(system, x), net)
        new = x + step
        if np.max(np.abs(step)) <= 1e-13 * max(1e-300, float(np.max(np.abs(new)))):
            return np.asarray(new)
        x = new
    return None


def _losses(system: RestSystem, x: Array) -> BlockMatrix:
    """Return minus the slope of the net flow."""
    evaluator = system.evaluator(x)
    choose_branches(evaluator, system.template.rest_walker.selectors)
    _, losses, gains = block_slopes(system.template, evaluator, system.template.rest_arrows, system.template.free)
    return difference(losses, gains)


def _solve(system: RestSystem, matrix: BlockMatrix, right: Array) -> Array:
    try:
        solved = Transitions(matrix).solve(right)
    except SingularTransitions as singular:
        members: list[int] = []
        for part in singular.parts:
            start = matrix.parts[part].offset
            members += range(start, start + matrix.parts[part].size)
        raise FreeStates(tuple(members)) from None
    return np.where(np.abs(solved) > 0, solved, 0.0)


def _stable(matrix: BlockMatrix, discrete: bool) -> bool:
    """Return whether minus a slope with non-negative off-diagonal entries is a non-singular M-matrix.

    In discrete time a step must not overshoot either: no eigenvalue of I + slope has a modulus of 1 or more.
    """
    ones = np.ones(matrix.size)
    try:
        x = Transitions(matrix).solve(ones)
    except SingularTransitions:
        return False
    regular = bool(np.all(np.isfinite(x)) and np.all(x > 0) and np.max(np.abs(matrix @ x - ones)) < 0.5)
    return regular and not (discrete and step_modulus(matrix) >= 1)


def is_large_stable(
    template: Template,
    evaluator: Evaluator,
    arrows: tuple[Arrow, ...],
    compartments: tuple[str, ...],
    *,
    discrete: bool = False,
) -> bool | None:
    """Return whether the uninfected compartments are stable without infection; None where they are neutral."""
    _, losses, gains = block_slopes(template, evaluator, arrows, compartments)
    matrix = difference(losses, gains)
    if _stable(matrix, discrete):
        return True
    ones = np.ones(matrix.size)
    # Nothing enters or leaves (or what leaves one enters another): columns of the slope add up to 0.
    inflow = matrix.transposed_product(ones)
    scale = float(np.max(np.abs(losses.transposed_product(ones)), initial=0.0))
    return None if np.all(np.abs(inflow) <= 1e-12 * max(scale, 1e-300)) or not matrix.blocks else False
