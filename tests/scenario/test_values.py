"""Overrides and the parameter part of interventions. Expected values are by hand."""

from __future__ import annotations

from dataclasses import replace
from decimal import Decimal
from fractions import Fraction

import numpy as np
import pytest

from ngm.errors import ScenarioError
from ngm.expression.parse import parse
from ngm.expression.tree import Multiply, Number
from ngm.scenario.exact import NoValueError, closed_parts, evaluate
from ngm.scenario.file import loads
from ngm.scenario.model import Change, Expression, Intervention, number
from ngm.scenario.values import converted, intervened, with_values
from tests.scenario.models import GROUPED, PLAIN, changed

FOLLOWING = changed(
    PLAIN, ", range = [0.2, 0.6] }", ' }\np = { value = "2 * beta - 0.5" }\nq = { value = 30, unit = "%" }'
)


@pytest.mark.parametrize(
    ("typed", "value", "line"),
    [
        (0.1, Fraction(1, 10), "value = 0.1,"),
        (3, Fraction(3), "value = 3,"),
        ("1/7", Fraction(1, 7), 'value = "1/7",'),
        ("0.25", Fraction(1, 4), "value = 0.25,"),
        (" 1e-3 ", Fraction(1, 1000), "value = 0.001,"),
        (Decimal("0.30"), Fraction(3, 10), "value = 0.30,"),
        (Fraction(1, 3), Fraction(1, 3), 'value = "1/3",'),
        (np.float64(0.1), Fraction(1, 10), "value = 0.1,"),
        (np.int64(2), Fraction(2), "value = 2,"),
        (0.0, Fraction(0), "value = 0.0,"),
        (1e-7, Fraction(1, 10**7), "value = 1e-7,"),
    ],
)
def test_values(typed: object, value: Fraction, line: str) -> None:
    scenario = loads(PLAIN).with_values(beta=typed)
    assert evaluate(scenario.parameters["beta"].values[0].tree) == value
    assert f"beta = {{ {line}" in scenario.text
    again = loads(scenario.text)
    assert evaluate(again.parameters["beta"].values[0].tree) == value
    assert replace(again.parameters["beta"], values=()) == replace(scenario.parameters["beta"], values=())
    assert again.digest == scenario.digest != loads(PLAIN).digest


def test_all_groups_are_set_and_expressions_replaced() -> None:
    scenario = with_values(loads(GROUPED), {"sus": 2, "both": "3/2"})
    assert [v.text for v in scenario.parameters["sus"].values] == ["2", "2"]
    assert loads(scenario.text).parameters == scenario.parameters
    following = loads(FOLLOWING).with_values(p=0.2)
    assert not following.parameters["p"].follows


def test_text_can_be_left() -> None:
    scenario = with_values(loads(PLAIN), {"beta": 0.1}, rewrite=False)
    assert scenario.text == PLAIN
    assert with_values(scenario, {}) is scenario


@pytest.mark.parametrize(
    ("values", "parts"),
    [
        ({"bata": 1}, ("'bata' is not a parameter of this scenario. Did you mean 'beta'?",)),
        ({"N": 1}, ("'N' is not a parameter", "Only parameters can be set")),
        ({"__class__": 1}, ("'__class__' is not a parameter",)),
        ({"beta": -1}, ("beta: -1 is negative",)),
        ({"beta": "gamma"}, ("beta: expected a number or an expression without names, not 'gamma'",)),
        ({"beta": "1 +"}, ("beta: expected a number",)),
        ({"beta": "1/0"}, ("beta: this divides by 0",)),
        ({"beta": float("nan")}, ("beta: the value is not finite",)),
        ({"beta": float("inf")}, ("beta: the value is not finite",)),
        ({"beta": True}, ("beta: expected a number",)),
        ({"beta": None}, ("beta: expected a number",)),
        ({"beta": [1]}, ("beta: expected a number",)),
        ({"beta": "1e400"}, ("beta:", "too large")),
        ({"beta": 10**400}, ("beta:", "too large")),
        ({"beta": "9^9^9^9"}, ("beta:", "too large")),
        ({"beta": 0.1}, ("parameters.p: is -0.3 at beta = 0.1, which is negative",)),
        ({"beta": -1, "x": 2}, ("beta: -1 is negative", "'x' is not a parameter")),
    ],
)
def test_refused_values(values: dict[str, object], parts: tuple[str, ...]) -> None:
    with pytest.raises(ScenarioError) as caught:
        with_values(loads(FOLLOWING), values)
    for part in parts:
        assert part in str(caught.value)


def test_converted_numbers_and_expressions() -> None:
    parameters = loads(FOLLOWING).parameters
    assert converted(parameters["q"]) == (Number(Fraction(3, 10)),)
    assert converted(parameters["p"]) == (parse("2 * beta - 0.5"),)
    root = with_values(loads(FOLLOWING), {"q": "sqrt(2)"}).parameters["q"]
    (tree,) = converted(root)
    assert isinstance(tree, Multiply)
    assert evaluate(tree) == pytest.approx(2**0.5 / 100, rel=1e-15)


def package(*changes: Change) -> Intervention:
    return Intervention("Test", changes)


def change(name: str, action: str, amount: str, **groups: tuple[str, ...]) -> Change:
    return Change("parameter", name, action, Expression(amount, parse(amount)), groups)  # type: ignore[arg-type]


def test_changes_apply_in_order_in_the_own_unit() -> None:
    scenario = loads(FOLLOWING)
    after = intervened(scenario, package(change("q", "add", "20"), change("q", "multiply", "1/2"))).parameters["q"]
    assert converted(after) == (Number(Fraction(1, 4)),)
    assert intervened(scenario, package(change("q", "set", "7"))).parameters["q"].values[0].text == "7"


def test_multiplying_a_parameter_that_follows_multiplies_its_expression() -> None:
    scenario = loads(FOLLOWING)
    after = intervened(scenario, package(change("p", "multiply", "3"), change("beta", "set", "1"))).parameters
    assert after["p"].follows
    # by hand: (2*1 - 0.5)*3
    assert evaluate(after["p"].values[0].tree, lambda name: Fraction(1)) == Fraction(9, 2)
    assert parse(after["p"].values[0].text) == after["p"].values[0].tree


def test_changes_of_groups() -> None:
    after = intervened(
        loads(GROUPED), package(change("both", "multiply", "10", age=("old",), region=("North", "South")))
    )
    assert [v.text for v in after.parameters["both"].values] == ["1", "2", "3", "40", "5", "60"]
    scenario = loads(GROUPED)
    assert [v.text for v in intervened(scenario, scenario.interventions[0]).parameters["sus"].values] == ["1.0", "0.25"]


@pytest.mark.parametrize(
    ("changes", "part"),
    [
        ((change("q", "add", "-31"),), 'intervention "Test", q: becomes -1, and q is positive or zero'),
        ((change("beta", "set", "0.1"),), 'intervention "Test", parameters.p: is -0.3 at beta = 0.1'),
        ((change("q", "multiply", "1e299"),), "too large"),
    ],
)
def test_changes_that_break_a_sign(changes: tuple[Change, ...], part: str) -> None:
    with pytest.raises(ScenarioError) as caught:
        intervened(loads(FOLLOWING), package(*changes))
    assert part in str(caught.value)


def test_other_changes_leave_parameters_alone() -> None:
    scenario = loads(PLAIN)
    only = package(Change("infectivity", "I", "reduce", number(Fraction(1, 2))))
    assert intervened(scenario, only) == replace(scenario)


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("1/7 + 2*3^2", Fraction(127, 7)),
        ("-2^2", Fraction(-4)),
        ("2^-2", Fraction(1, 4)),
        ("2^3^2", Fraction(512)),
        ("sqrt(9/4)", Fraction(3, 2)),
        ("max(1, 2) - min(1, 2)", Fraction(1)),
        ("exp(0) + log(1) + 0^0", Fraction(2)),
        ("1e200*1e200/1e299", Fraction(10**101)),
        ("(1/3)^0", Fraction(1)),
        ("0^3", Fraction(0)),
    ],
)
def test_exact_values(text: str, value: Fraction) -> None:
    assert evaluate(parse(text)) == value


@pytest.mark.parametrize(
    ("text", "value"),
    [("exp(1)", 2.718281828459045), ("log(2)", 0.6931471805599453), ("2^0.5", 2**0.5), ("1.0001^100000", 22015.456)],
)
def test_inexact_values(text: str, value: float) -> None:
    assert float(evaluate(parse(text))) == pytest.approx(value, rel=1e-7)


@pytest.mark.parametrize(
    "text", ["1/0", "0^-1", "log(0)", "sqrt(-1)", "(-1)^0.5", "9^9^9^9", "exp(1e5)", "10^300", "1/exp(-1e5)", "2^1e299"]
)
def test_no_value(text: str) -> None:
    with pytest.raises(NoValueError):
        evaluate(parse(text))


def test_closed_parts() -> None:
    assert closed_parts(parse("x*(1/2) + exp(2)*y + 3")) == [parse("1/2"), parse("exp(2)")]
    assert closed_parts(parse("1 + 2")) == [parse("1 + 2")]
    assert closed_parts(parse("x")) == []
