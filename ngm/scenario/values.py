"""Values other than those of the file: overrides, the parameter part of an intervention, conversion of units."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace
from decimal import Decimal
from fractions import Fraction
from numbers import Integral, Rational, Real

from ngm.errors import ExpressionError, Problem, ScenarioError
from ngm.expression import names, parse
from ngm.expression.tree import Add, Multiply, Negate, Node, Number
from ngm.expression.write import write
from ngm.scenario import exact
from ngm.scenario.fields import closest, describe, listed, short, to_expression
from ngm.scenario.following import values_in_force
from ngm.scenario.model import Change, Expression, Intervention, Parameter, Scenario, number
from ngm.scenario.season import mean_factor

__all__ = ["converted", "intervened", "with_values"]


def converted(parameter: Parameter) -> tuple[Node, ...]:
    """Return the values in force: one for each group, in the scenario's units.

    A number (also one written as an expression) is multiplied by the factor of its unit, exactly; a rational one comes
    as one `Number`, another one (a root, an exponential) as a product. A parameter that follows others comes as its
    expressions, unconverted. One with a season comes at its mean over the period.

    Examples
    --------
    >>> from ngm.scenario.model import Unit
    >>> week = Unit("1/week", {"week": Fraction(-1)}, Fraction(1, 7))
    >>> weekly = Parameter("a", (number(Fraction("0.35")),), unit=week)
    >>> converted(weekly)[0].value
    Fraction(1, 20)
    """
    mean = Fraction(1) if parameter.season is None else mean_factor(parameter.season)
    if parameter.follows:
        trees = tuple(value.tree for value in parameter.values)
        return trees if mean == 1 else tuple(Multiply(((1, tree), (1, Number(mean)))) for tree in trees)
    factor = parameter.factor * mean
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


# -- overrides ------------------------------------------------------------------------------------------------------


def with_values(scenario: Scenario, values: Mapping[str, object], *, rewrite: bool = True) -> Scenario:
    """Return the scenario with other values for some parameters, in all their groups.

    Parameters
    ----------
    scenario : Scenario
    values : mapping of str to number or str
        Parameter -> a number, or an expression without names, in the parameter's own unit. It replaces an expression.
    rewrite : bool
        Whether `text` (and so `digest`) follows. Without it the text is that of the scenario given: for loops that
        evaluate and do not show.

    Raises
    ------
    ScenarioError
        An unknown parameter, a value that is none, a negative one without ``sign = "any"``, or one at which a
        parameter that follows has no value; with all problems found.
    """
    if not values:
        return scenario
    problems: list[Problem] = []
    parameters = dict(scenario.parameters)
    set_values: dict[str, Expression] = {}
    for typed, raw in values.items():
        name = names.canonical(typed)
        if name is None or name not in parameters:
            what = f"'{short(typed)}' is not a parameter of this scenario."
            hint = closest(name or typed, parameters)
            base = names.canonical(typed.partition("[")[0])
            if base in parameters:
                hint = f" A value given here holds in all groups of {base}: write {base} alone, or edit the file."
            elif (
                not hint
                and name is not None
                and any(
                    name in known
                    for known in (scenario.definitions, scenario.compartments, scenario.matrices, scenario.dimensions)
                )
            ):
                hint = " Only parameters can be set."
            elif not hint:
                hint = f" The parameters: {listed(parameters)}." if parameters else " It has no parameters."
            problems.append(Problem("", f"{what}{hint}"))
            continue
        try:
            expression = as_number(raw)
        except ScenarioError as error:
            problems.extend(replace(problem, where=name) for problem in error.problems)
            continue
        parameter = parameters[name]
        if exact.evaluate(expression.tree) < 0 and not parameter.any_sign:
            problems.append(Problem(name, f"{short(expression.text)} is negative, and {name} is positive or zero."))
            continue
        if name in set_values:
            problems.append(Problem(name, "is set twice, in two spellings. Keep one."))
        set_values[name] = expression
        parameters[name] = replace(parameter, values=(expression,) * len(parameter.values))
    if not problems:
        problems.extend(following_problems(scenario, parameters))
    if problems:
        raise ScenarioError(problems)
    changed = replace(scenario, parameters=parameters)
    return replace(changed, text=_rewritten(scenario.text, set_values)) if rewrite and scenario.text else changed


def _rewritten(text: str, values: Mapping[str, Expression]) -> str:
    from ngm.scenario.edit import set_value

    for name, expression in values.items():
        value = toml_value(expression)
        text = set_value(text, ("parameters", name, "value"), value)
    return text


def toml_value(expression: Expression) -> int | Decimal | str:
    """Return a number as a file writes it: a TOML number where it is one, else an expression in quotes."""
    tree = expression.tree
    sign, inner = (-1, tree.operand) if isinstance(tree, Negate) else (1, tree)
    if isinstance(inner, Number) and inner.text and all(character in "0123456789.eE+-" for character in inner.text):
        value = Decimal(inner.text) * sign
        return int(value) if inner.text.isdecimal() else value
    return expression.text


def as_number(raw: object) -> Expression:
    """Return a number, or a text that is one, as an expression without names.

    A float counts as the shortest decimal that reads as it: 0.1 is 1/10.

    Raises
    ------
    ScenarioError
        Neither a number nor an expression without names, not finite, or past the limits.
    """
    if isinstance(raw, str):
        try:
            tree = parse.parse(raw)
        except ExpressionError as error:
            raise ScenarioError(error.problems) from None
        if not exact.is_closed(tree):
            raise ScenarioError(Problem("", f"expected a number or an expression without names, not '{short(raw)}'."))
        expression = Expression(raw, tree)
    elif isinstance(raw, Expression):
        expression = raw
    else:
        expression = _from_number(raw)
    try:
        exact.evaluate(expression.tree)
    except exact.NoValueError as error:
        raise ScenarioError(Problem("", str(error), expression.text, error.position)) from None
    return expression


def _from_number(raw: object) -> Expression:
    if isinstance(raw, bool) or not isinstance(raw, Real | Decimal):
        raise ScenarioError(Problem("", f"expected a number or an expression in quotes, not {describe(raw)}."))
    if isinstance(raw, Integral):
        return to_expression(int(raw))
    if isinstance(raw, Rational):
        return number(Fraction(int(raw.numerator), int(raw.denominator)))
    value = raw if isinstance(raw, Decimal) else Decimal(repr(float(raw))) if math.isfinite(raw) else Decimal("nan")
    if not value.is_finite():
        raise ScenarioError(Problem("", "the value is not finite. Write a decimal number."))
    return to_expression(value)


def following_problems(scenario: Scenario, parameters: Mapping[str, Parameter]) -> list[Problem]:
    """Return what is wrong with the values of the parameters that follow others, at these values."""
    problems: list[Problem] = []

    def report(parameter: Parameter, index: int, message: str, expression: Expression, position: int) -> None:
        item = scenario.items(parameter.name, parameter.by)[index]
        problems.append(Problem(f"parameters.{item}", message, key=("parameters", parameter.name, "value")))

    values_in_force(parameters, scenario.dimensions, report)
    return problems


# -- interventions --------------------------------------------------------------------------------------------------


def intervened(scenario: Scenario, intervention: Intervention) -> Scenario:
    """Return the scenario with the parameter changes of an intervention made, in order; its text stays.

    `multiply` on a parameter that follows others multiplies what its expression gives, whatever changes its inputs;
    `set` replaces it and `add` adds to it. Numbers are in the parameter's own unit. Changes of matrices,
    susceptibility and infectivity are not made here: they act on arrays.

    Raises
    ------
    ScenarioError
        A parameter becomes negative without ``sign = "any"``, or one that follows has no value any more.
    """
    parameters = dict(scenario.parameters)
    where = f'intervention "{short(intervention.name)}"'
    for place, change in enumerate(intervention.changes, 1):
        if change.what == "parameter":
            try:
                parameters[change.name] = _changed(scenario, parameters[change.name], change)
            except exact.NoValueError as error:
                raise ScenarioError(Problem(f"{where}, change {place}", str(error))) from None
    problems: list[Problem] = []
    for name in dict.fromkeys(change.name for change in intervention.changes if change.what == "parameter"):
        problems.extend(_sign_problems(scenario, parameters[name], where))
    problems.extend(replace(p, where=f"{where}, {p.where}") for p in following_problems(scenario, parameters))
    if problems:
        raise ScenarioError(problems)
    return replace(scenario, parameters=parameters)


def _changed(scenario: Scenario, parameter: Parameter, change: Change) -> Parameter:
    known: dict[int, Expression] = {}
    out: list[Expression] = []
    for value, groups in zip(parameter.values, scenario.copies(parameter.by), strict=True):
        own = dict(zip(parameter.by, groups, strict=True))
        if all(own[dimension] in chosen for dimension, chosen in change.groups.items()):
            if id(value) not in known:
                known[id(value)] = _combined(value, change)
            out.append(known[id(value)])
        else:
            out.append(value)
    return replace(parameter, values=tuple(out))


def _combined(value: Expression, change: Change) -> Expression:
    """Return the value after the change; plain numbers stay numbers, without rounding."""
    if change.action == "set":
        return change.amount
    old, amount = value.tree, change.amount.tree
    if change.action == "multiply":
        before = old.factors if isinstance(old, Multiply) else ((1, old),)
        tree: Node = Multiply((*before, (1, amount)))
    else:
        tree = Add((*(old.terms if isinstance(old, Add) else ((1, old),)), (1, amount)))
    if exact.is_closed(tree):
        result = exact.evaluate(tree)
        if isinstance(result, Fraction):
            return number(result)
    return Expression(write(tree), tree)


def _sign_problems(scenario: Scenario, parameter: Parameter, where: str) -> list[Problem]:
    if parameter.any_sign:
        return []
    for item, value in zip(scenario.items(parameter.name, parameter.by), parameter.values, strict=True):
        if value.is_number:
            result = exact.evaluate(value.tree)
            if result < 0:
                return [Problem(f"{where}, {item}", f"becomes {float(result):g}, and {item} is positive or zero.")]
    return []
