"""Parameters that follow others: their order, and their values where the others have theirs."""

from __future__ import annotations

from collections.abc import Callable, Mapping

from ngm.expression.tree import Name, names
from ngm.scenario import exact
from ngm.scenario.exact import NoValueError, Value
from ngm.scenario.graph import order
from ngm.scenario.model import Dimension, Expression, Parameter

__all__ = ["parameter_order", "values_in_force"]

#: below this size a negative value of an inexact expression is rounding
_ROUNDING = 1e-12

Report = Callable[[Parameter, int, str, Expression, int], None]


def parameter_order(parameters: Mapping[str, Parameter]) -> tuple[list[str], list[list[str]]]:
    """Return the parameters so that each comes after those that it follows, and the circles among them."""
    needs: dict[str, set[str]] = {}
    for name, parameter in parameters.items():
        needs[name] = set()
        last: Expression | None = None
        for value in parameter.values:
            # a value for all groups is one object: it is looked at once
            if value is not last and not value.is_number:
                needs[name] |= names(value.tree)
            last = value
    return order({name: sorted(needed) for name, needed in needs.items()})


def values_in_force(
    parameters: Mapping[str, Parameter], dimensions: Mapping[str, Dimension], report: Report
) -> dict[str, tuple[Value, ...]]:
    """Return the values of the parameters that follow others and of those that they follow.

    A number is multiplied by the factor of its unit; one for each group, as in `Parameter.values`. `report` is told
    the parameter, the place of the value, what is wrong, the expression and the position in it: a value that does not
    exist, or is negative without ``sign = "any"``.
    """
    ordered, _ = parameter_order(parameters)
    followers = [name for name in ordered if parameters[name].follows]
    wanted = set(followers)
    for name in followers:
        for value in parameters[name].values:
            wanted |= names(value.tree)
    known: dict[str, tuple[Value, ...]] = {}
    for name in ordered:
        if name in wanted:
            values = _values(parameters[name], parameters, dimensions, known, report)
            if values is not None:
                known[name] = values
    return known


def _values(
    parameter: Parameter,
    parameters: Mapping[str, Parameter],
    dimensions: Mapping[str, Dimension],
    known: Mapping[str, tuple[Value, ...]],
    report: Report,
) -> tuple[Value, ...] | None:
    out: list[Value] = []
    factor = parameter.factor
    places = _places(parameter, parameters, dimensions)
    for index, expression in enumerate(parameter.values):
        used = names(expression.tree)
        if any(name not in known for name in used):
            return None

        def lookup(name: Name, index: int = index) -> Value:
            values = known[name.name]
            return values[places(name.name, index)]

        try:
            value = exact.evaluate(expression.tree, lookup)
        except NoValueError as error:
            report(parameter, index, str(error), expression, error.position)
            return None
        if used and value < (0 if not isinstance(value, float) else -_ROUNDING) and not parameter.any_sign:
            given = ", ".join(f"{name} = {float(known[name][places(name, index)]):g}" for name in sorted(used)[:5])
            message = f'is {float(value):g} at {given}, which is negative. Write sign = "any" if it may be.'
            report(parameter, index, message, expression, 0)
            return None
        out.append(value * factor if factor != 1 else value)
    return tuple(out)


def _places(
    parameter: Parameter, parameters: Mapping[str, Parameter], dimensions: Mapping[str, Dimension]
) -> Callable[[str, int], int]:
    """Return a function that gives, for the n-th value of the parameter, the place of another's value in its group."""
    sizes = [len(dimensions[name].groups) for name in parameter.by]
    plans: dict[str, list[tuple[int, int, int]]] = {}

    def place(other: str, index: int) -> int:
        if other not in plans:
            plan: list[tuple[int, int, int]] = []
            stride = 1
            for name in reversed(parameters[other].by):
                at = parameter.by.index(name)
                inner = 1
                for size in sizes[at + 1 :]:
                    inner *= size
                plan.append((inner, sizes[at], stride))
                stride *= sizes[at]
            plans[other] = plan
        return sum(index // inner % size * stride for inner, size, stride in plans[other])

    return place
