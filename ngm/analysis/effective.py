"""The number at today's immunity: the same flows, taken at the state that the file calls the state now.

It is called effective, and never R0: it says how many one case infects now, while the state stays what it is.
"""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from typing import Any

import numpy as np

from ngm.analysis.large import block_slopes, difference, faults, scaled
from ngm.analysis.numbers import Numbers
from ngm.analysis.steps_of_time import overdrawn
from ngm.derivation.expand import assemble
from ngm.derivation.rest import RestSystem, choose_branches
from ngm.derivation.template import Template
from ngm.engine.balls import is_finite, nearest, to_floats
from ngm.engine.enclosure import inverse, m_matrix
from ngm.engine.large import NextGeneration
from ngm.engine.linear import matmul, possible
from ngm.engine.spectrum import spectrum
from ngm.engine.transitions import SingularTransitions
from ngm.errors import DerivationError, Problem
from ngm.expression.tree import Number
from ngm.results import Effective
from ngm.scenario.model import Expression

__all__ = ["effective"]


def effective(found: Numbers) -> Effective | None:
    """Return the effective number at `[state_now]`, None where the file gives no such state.

    F and V are taken at that state, with whatever intervention `found` is under; a compartment that is not given is as
    in the infection-free state. Contact matrices stay as they are in force.

    Raises
    ------
    DerivationError
        The state is negative, or a rate has no slope there.

    References
    ----------
    Nishiura & Chowell (2009) in Mathematical and Statistical Estimation Approaches in Epidemiology, 103-121 (from memory)
    """
    if not found.scenario.state_now:
        return None
    point = found.point
    template = Template(replace(point.scenario, infection_free=_given(found)))
    state = RestSystem(template, point.algebra, point.matrices).state(np.empty((0, 1), dtype=point.algebra.dtype))
    numbers = _numbers(template, state)
    evaluator = template.evaluator(point.algebra, state, matrices=point.matrices)
    _ = template.arrows
    choose_branches(evaluator, template.at_rest.selectors)
    at = np.array(template.at_infection, dtype=int)
    if not point.exact:
        return Effective(*_large(found, template, evaluator, at), numbers)
    F, V = assemble(template, evaluator)
    if not (is_finite(F) and is_finite(V)):
        raise DerivationError(
            Problem(
                "state_now", "a rate has no slope at this state: it divides by 0 or leaves the range of a function."
            )
        )
    F = point.scaled(F)
    why = None
    if any(F[i, j] < 0 for i, j in zip(*np.nonzero(possible(F)), strict=True)):
        why = "F has a negative entry at this state."
    elif found.scenario.discrete and overdrawn(V):
        why = "more leave a compartment in a step than there are in it at this state."
    elif m_matrix(V).verdict != "yes":
        why = "V is no M-matrix at this state."
    if why is not None:
        return Effective(None, why, numbers)
    K = matmul(F, inverse(V))[np.ix_(at, at)]
    return Effective(nearest(spectrum(K, vectors=False).root) if len(at) else 0.0, None, numbers)


def _given(found: Numbers) -> dict[str, tuple[Expression, ...]]:
    """Return the state now as given states; what the file does not give is as without infection, as numbers."""
    point, template = found.point, found.template
    out: dict[str, tuple[Expression, ...]] = dict(found.scenario.state_now)
    for name in template.uninfected:
        if name not in out:
            flat = template.space.flatten(np.asarray(point.state[name]), template.by(name))[:, 0]
            values = to_floats(flat) if flat.dtype == object else flat
            out[name] = tuple(Expression(repr(float(v)), Number(Fraction(float(v)))) for v in values)
    return {name: out[name] for name in template.uninfected}


def _numbers(template: Template, state: dict[str, Any]) -> dict[str, float]:
    out: dict[str, float] = {}
    problems = []
    for name in template.uninfected:
        flat = template.space.flatten(np.asarray(state[name]), template.by(name))[:, 0]
        values = to_floats(flat) if flat.dtype == object else np.asarray(flat, dtype=float)
        for label, value in zip(template.scenario.items(name, template.by(name)), values.tolist(), strict=True):
            if not value >= 0:
                problems.append(
                    Problem(
                        f"state_now.{name}",
                        f"{label} = {value:.6g} is negative or has no value. A state is positive or zero.",
                        key=("state_now", name),
                    )
                )
            out[label] = value
    if problems:
        raise DerivationError(problems)
    return out


def _large(found: Numbers, template: Template, evaluator: Any, at: Any) -> tuple[float | None, str | None]:
    F, losses, gains = block_slopes(template, evaluator, template.arrows, template.infected)
    if found.point.intervention is not None:
        F = scaled(F, *found.point.scales(found.point.intervention))
    if faults(F) is not None:
        return None, "F may have a negative entry at this state."
    try:
        operator = NextGeneration(F, difference(losses, gains), at)
    except SingularTransitions:
        return None, "V is singular at this state."
    if not operator.is_m_matrix():
        return None, "V is no M-matrix at this state."
    return operator.spectrum().root, None
