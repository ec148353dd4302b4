"""The coefficients on the centre manifold as formulas: what is asked of the symbols, and a check of each answer."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from ngm.analysis.bifurcation import Coefficients
from ngm.derivation.dynamics import LOOSE, Dynamics
from ngm.errors import ExpressionError
from ngm.expression.parse import parse
from ngm.expression.tree import Add, Name, Negate, Node
from ngm.scenario.exact import NoValueError, Value, evaluate
from ngm.scenario.values import converted
from ngm.worker import bifurcation_forms

__all__ = ["coefficients_in_words"]

#: Components of the state, and infected ones among them, up to which formulas are sought.
MOST, MOST_INFECTED = 6, 3
#: A formula is shown where it gives the number to this share.
CLOSE = 1e-6


def coefficients_in_words(
    dynamics: Dynamics, state: Any, at_one: float, parts: Coefficients, limit: float
) -> tuple[str | None, str | None]:
    """Return a and b (turned so that it is positive) in the expression syntax, None where there is no short formula."""
    scenario = dynamics.scenario
    small = dynamics.size <= MOST and dynamics.infected <= MOST_INFECTED
    if not small or scenario.dimensions or scenario.movements or limit <= 0:
        return None, None
    if any(name.startswith("#") for name in scenario.parameters):
        return None, None
    values = dynamics.parameter_values()
    known = {**values, **dict(zip(dynamics.labels, state.tolist(), strict=True)), LOOSE: at_one}
    found = bifurcation_forms(
        _net(dynamics), dynamics.labels, dynamics.infected, LOOSE, _meanings(dynamics), known, limit=limit
    )
    a = _checked(found[0], parts.a, values)
    b = _checked(found[1], parts.b, values)
    return a, b if b is None or parts.b > 0 else f"-({b})"


def _net(dynamics: Dynamics) -> tuple[Node, ...]:
    """Return the net flow of each component as one expression."""
    out: list[Node] = []
    for name in dynamics.labels:
        terms = [(1, flow.rate.tree) for flow in dynamics.scenario.flows if flow.target == name]
        terms += [(-1, flow.rate.tree) for flow in dynamics.scenario.flows if flow.source == name]
        signed = [tree if sign > 0 else Negate(tree) for sign, tree in terms]
        out.append(signed[0] if len(signed) == 1 else Add(tuple((1, tree) for tree in signed)))
    return tuple(out)


def _meanings(dynamics: Dynamics) -> dict[str, Node]:
    """Return definitions, parameters that follow others, and compartments on which nothing depends, as expressions."""
    scenario = dynamics.scenario
    out: dict[str, Node] = {name: d.expression.tree for name, d in scenario.definitions.items()}
    out |= {name: converted(p)[0] for name, p in scenario.parameters.items() if p.follows}
    zero = parse("0")
    out |= {name: zero for name in scenario.compartments if name not in dynamics.compartments}
    return out


def _checked(formula: str | None, number: float, values: Mapping[str, float]) -> str | None:
    """Return the formula where it gives the number, else None."""
    if formula is None:
        return None

    def lookup(name: Name) -> Value:
        if name.name not in values:
            raise NoValueError(f"{name.name} has no value", name.position)
        return values[name.name]

    try:
        value = float(evaluate(parse(formula), lookup))
    except (NoValueError, ExpressionError):
        return None
    return formula if abs(value - number) <= CLOSE * abs(number) else None
