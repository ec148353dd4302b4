"""Values other than those of the file: overrides, the parameter part of an intervention, conversion of units."""

from __future__ import annotations

from fractions import Fraction

from ngm.expression.tree import Multiply, Node, Number
from ngm.scenario import exact
from ngm.scenario.model import Parameter

__all__ = ["converted"]


def converted(parameter: Parameter) -> tuple[Node, ...]:
    """Return the values in force: one for each group, in the scenario's units.

    A number (also one written as an expression) is multiplied by the factor of its unit, exactly; a rational one comes
    as one `Number`, another one (a root, an exponential) as a product. A parameter that follows others comes as its
    expression, unconverted.
    """
    if parameter.follows:
        return tuple(value.tree for value in parameter.values)
    factor = parameter.factor
    known: dict[int, Node] = {}
    for value in parameter.values:
        if id(value) not in known:
            known[id(value)] = _times(value.tree, factor)
    return tuple(known[id(value)] for value in parameter.values)


def _times(tree: Node, factor: Fraction) -> Node:
    if isinstance(tree, Number):
        return tree if factor == 1 else Number(tree.value * factor)
    value = exact.evaluate(tree)
    if isinstance(value, Fraction):
        return Number(value * factor)
    return tree if factor == 1 else Multiply(((1, Number(factor)), (1, tree)))
