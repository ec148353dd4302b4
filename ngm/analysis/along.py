"""What is moved to look below a number of 1: a parameter, or all transmission together."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from fractions import Fraction

from ngm.derivation.dynamics import is_one_value
from ngm.errors import Problem, ScenarioError
from ngm.expression.names import canonical, suggest
from ngm.expression.tree import Add, Apply, Call, Multiply, Name, Negate, Node, Number, Power, Total
from ngm.scenario.model import Expression, Scenario
from ngm.scenario.values import converted

__all__ = ["ALL_TRANSMISSION", "Along", "chosen", "degree"]

ALL_TRANSMISSION = "all-transmission"


@dataclass(frozen=True, slots=True)
class Along:
    """What is moved.

    `parameter`: None for all transmission. `now`: the value in force, 1 for a multiplier. `factor`: a value in force is
    the parameter's own value times this.
    """

    parameter: str | None
    now: float
    factor: float
    label: str
    unit: str
    low: float | None = None
    high: float | None = None

    def at(self, scenario: Scenario, value: float) -> Scenario:
        """Return the scenario (as in force) with the quantity at a value in force; not for all transmission."""
        assert self.parameter is not None
        parameter = scenario.parameters[self.parameter]
        new = Number(Fraction(value))
        if self.label == self.parameter:
            values = (Expression("", new),) * len(parameter.values)
            unit = None
        else:
            values = tuple(Expression("", Multiply(((1, tree), (1, new)))) for tree in converted(parameter))
            unit = None
        changed = replace(parameter, values=values, unit=unit)
        return replace(scenario, parameters={**scenario.parameters, self.parameter: changed})


def degree(node: Node, name: str, known: Mapping[str, Node]) -> Fraction | None:
    """Return the d with which an expression grows as name^d, None where it does not: 1 for ``beta*S*I/N`` by beta.

    Parameters
    ----------
    known : mapping of str to Node
        Definitions, and parameters that follow others.
    """
    match node:
        case Name(name=one):
            if one == name:
                return Fraction(1)
            return degree(known[one], name, known) if one in known else Fraction(0)
        case Number():
            return Fraction(0)
        case Negate(operand=inner) | Total(operand=inner) | Apply(operand=inner):
            return degree(inner, name, known)
        case Add(terms=terms):
            found = {degree(term, name, known) for _, term in terms}
            return found.pop() if len(found) == 1 else None
        case Multiply(factors=factors):
            total = Fraction(0)
            for sign, factor in factors:
                d = degree(factor, name, known)
                if d is None:
                    return None
                total += sign * d
            return total
        case Power(base=base, exponent=exponent):
            d, e = degree(base, name, known), degree(exponent, name, known)
            if d == 0 and e == 0:
                return Fraction(0)
            return d * exponent.value if d is not None and isinstance(exponent, Number) else None
        case Call(function=function, arguments=arguments):
            found = {degree(argument, name, known) for argument in arguments}
            if found == {Fraction(0)}:
                return Fraction(0)
            return found.pop() if function in ("max", "min") and len(found) == 1 else None


def chosen(scenario: Scenario, name: str | None) -> Along:
    """Return what is moved in a scenario as in force: what is asked for, else a parameter of all transmission, else that.

    Raises
    ------
    ScenarioError
        Unknown, or a parameter that follows others.
    """
    if name is None:
        name = _default(scenario)
    if name == ALL_TRANSMISSION:
        return Along(None, 1.0, 1.0, "all transmission", "times the rates in force")
    found = canonical(name)
    if found is None or found not in scenario.parameters:
        near = suggest(found or name, list(scenario.parameters))
        hint = f" Did you mean '{near}'?" if near else ""
        raise ScenarioError(
            Problem("--along", f"'{name[:60]}' is not a parameter.{hint} Write a parameter, or {ALL_TRANSMISSION}.")
        )
    parameter = scenario.parameters[found]
    if parameter.follows:
        raise ScenarioError(
            Problem("--along", f"{found} follows other parameters. Choose one of those that it follows.")
        )
    unit = parameter.unit.text if parameter.unit is not None else ""
    factor = float(parameter.factor)
    if not is_one_value(parameter):
        return Along(found, 1.0, 1.0, f"values of {found}", "times the values in force")
    tree = converted(parameter)[0]
    from ngm.scenario.exact import evaluate

    now = float(evaluate(tree))
    low, high = (None, None) if parameter.range is None else (end * factor for end in parameter.range)
    if high is None and parameter.unit is not None and parameter.unit.factor == Fraction(1, 100):
        high = 1.0
    return Along(found, now, factor, found, unit, low, high)


def _default(scenario: Scenario) -> str:
    known: dict[str, Node] = {name: d.expression.tree for name, d in scenario.definitions.items()}
    known |= {n: p.values[0].tree for n, p in scenario.parameters.items() if p.follows and len(set(p.values)) == 1}
    rates = [flow.rate.tree for flow in scenario.flows if flow.kind == "transmission"]
    for name, parameter in scenario.parameters.items():
        if parameter.follows or not is_one_value(parameter) or name.startswith("#"):
            continue
        if rates and all(degree(rate, name, known) == 1 for rate in rates):
            return name
    return ALL_TRANSMISSION
