"""Models written as arrows, and what holds for every solution.

`A->B t: rate` is a transmission flow from A to B, `x:` a transition; `0` is outside. Sources are named beside each
model; where a page was not read again, the note says that the equations or the formula are from memory.
"""

from __future__ import annotations

import math
import random
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from types import SimpleNamespace
from typing import Any

import pytest

import ngm
from ngm.expression.parse import parse
from ngm.expression.tree import Add, Apply, Call, Multiply, Name, Negate, Node, Number, Power, Total, names
from ngm.results import Solution

#: The printed numbers have ten digits.
PRINTED = 1e-9

Value = float | str | Sequence[float]


@dataclass(frozen=True)
class Model:
    """One published model: its arrows, its values, and a scenario's text made of them.

    `values`: a list holds one value for each group; `shares`: parameters that stay in [0, 1] when drawn at random;
    `formula`: the published R0, as a second route.
    """

    name: str
    infected: str
    uninfected: str
    arrows: str
    values: Mapping[str, Value]
    definitions: Mapping[str, str] = field(default_factory=dict)
    free: Mapping[str, str | float | Sequence[float]] = field(default_factory=dict)
    groups: tuple[str, ...] = ()
    matrices: Mapping[str, Sequence[Sequence[float]]] = field(default_factory=dict)
    matrix_keys: str = ""
    shares: str = ""
    formula: Callable[[SimpleNamespace], float] | None = None

    def but(self, arrows: str = "", **values: Value) -> Model:
        """Return the model with other values, and with arrows replaced where `arrows` gives new ones."""
        return replace(self, values={**self.values, **values}, arrows=arrows or self.arrows)

    @property
    def text(self) -> str:
        """The scenario file."""
        by = ', by = ["group"]' if self.groups else ""
        lines = ["[scenario]", f'title = "{self.name}"', 'time_unit = "day"']
        if self.groups:
            lines += ["[dimensions]", f"group = {list(map(str, self.groups))}"]
        lines.append("[compartments]")
        lines += [f"{name} = {{ infected = true{by} }}" for name in self.infected.split()]
        lines += [f"{name} = {{ infected = false{by} }}" for name in self.uninfected.split()]
        lines.append("[parameters]")
        for name, value in self.values.items():
            grouped = "" if isinstance(value, str | float | int) else by
            lines.append(f"{name} = {{ value = {_toml(value)}{grouped} }}")
        for name, rows in self.matrices.items():
            lines += [f"[matrices.{name}]", 'by = "group"', self.matrix_keys, f"values = {_toml(rows)}"]
        if self.definitions:
            lines.append("[definitions]")
            lines += [f'{name} = "{text}"' for name, text in self.definitions.items()]
        for arrow in self.arrows.split(";"):
            head, rate = arrow.split(":")
            ends, kind = head.split()
            source, target = ends.split("->")
            lines.append("[[flow]]")
            lines += [f'{key} = "{name}"' for key, name in (("from", source), ("to", target)) if name != "0"]
            lines.append(f'rate = "{rate.strip()}"')
            lines.append(f'kind = "{ {"t": "transmission", "x": "transition"}[kind] }"')
        if self.free:
            lines.append("[infection_free]")
            lines += [f"{name} = {_toml(value)}" for name, value in self.free.items()]
        return "\n".join(lines) + "\n"

    @property
    def scenario(self) -> ngm.Scenario:
        """The scenario, read."""
        return ngm.loads(self.text)

    def solve(self) -> Solution:
        """Solve, and check what holds for every solution."""
        solution = ngm.solve(self.scenario)
        check_laws(solution, self.point())
        return solution

    def control(self) -> Numbers:
        """Return the type-, target- and state-reproduction numbers by what they act on."""
        result = ngm.control(self.scenario)
        return Numbers(
            {t.types if len(t.types) > 1 else t.types[0]: t for t in result.type_reproduction},
            {t.entry: t for t in result.target_reproduction},
            {t.state: t for t in result.state_reproduction},
        )

    def point(self) -> dict[str, float]:
        """Return the value of every item that a result's expression may name."""
        out: dict[str, float] = {}
        for name, value in self.values.items():
            if isinstance(value, str):
                out[name] = evaluate(value, out)
            elif isinstance(value, float | int):
                out[name] = float(value)
            else:
                out |= {f"{name}[{group}]": float(v) for group, v in zip(self.groups, value, strict=True)}
        for name, given in self.matrices.items():
            rows = given
            if "reciprocal" in self.matrix_keys:  # results speak of the matrix in force; n: sizes of the groups
                n = [out[f"n[{group}]"] for group in self.groups]
                count = range(len(n))
                rows = [[(given[i][j] * n[i] + given[j][i] * n[j]) / (2 * n[i]) for j in count] for i in count]
            for i, row in zip(self.groups, rows, strict=True):
                out |= {f"{name}[{i},{j}]": float(v) for j, v in zip(self.groups, row, strict=True)}
        return out

    def drawn(self, seed: int) -> Model:
        """Return the model with every number drawn anew: shares in (0, 1), other numbers within a factor of 3."""
        rng = random.Random(f"{self.name} {seed}")

        def draw(name: str, value: float) -> float:
            return rng.uniform(0.05, 0.95) if name in self.shares.split() else value * 3 ** rng.uniform(-1, 1)

        values: dict[str, Value] = {}
        for name, value in self.values.items():
            if isinstance(value, str):
                numeric = not any(c.isalpha() for c in value)
                values[name] = draw(name, evaluate(value, {})) if numeric else value
            elif isinstance(value, float | int):
                values[name] = draw(name, value)
            else:
                values[name] = [draw(name, v) for v in value]
        return replace(self, values=values)

    def published(self) -> float:
        """Return R0 by the published formula at the model's values."""
        assert self.formula is not None
        names: dict[str, Any] = {}
        for name, value in self.values.items():
            names[name] = evaluate(value, names) if isinstance(value, str) else value
        return self.formula(SimpleNamespace(**names))


@dataclass(frozen=True)
class Numbers:
    """Results of `ngm.control`, by what they act on: one type or a tuple of types, (row, column), a state."""

    types: Mapping[Any, Any]
    targets: Mapping[Any, Any]
    states: Mapping[Any, Any]


def deaths(compartments: str, rate: str) -> str:
    """Return an exit for each compartment at `rate` per head, as arrows with a leading semicolon."""
    return "".join(f"; {name}->0 x: {rate}*{name}" for name in compartments.split())


def _toml(value: Any) -> str:
    if isinstance(value, str):
        return f'"{value}"'
    if isinstance(value, float | int):
        return repr(value)
    return "[" + ", ".join(_toml(v) for v in value) + "]"


def close(value: float, rel: float = PRINTED) -> Any:
    """Return what equals a printed number."""
    return pytest.approx(value, rel=rel, abs=1e-14)


def matrix(rows: Sequence[Sequence[float]], rel: float = PRINTED) -> list[Any]:
    """Return what equals a printed matrix, as a list of rows."""
    return [pytest.approx(tuple(row), rel=rel, abs=1e-13) for row in rows]


def evaluate(text: str, point: Mapping[str, float]) -> float:
    """Return the value of an expression; a second reader of trees, apart from the one under test."""
    return _evaluate(parse(text, items=True), point)


def _evaluate(node: Node, point: Mapping[str, float]) -> float:
    match node:
        case Number(value=value):
            return float(value)
        case Name():
            return point[node.item]
        case Add(terms=terms):
            return math.fsum(sign * _evaluate(term, point) for sign, term in terms)
        case Multiply(factors=factors):
            return math.prod(_evaluate(factor, point) ** power for power, factor in factors)
        case Negate(operand=operand):
            return -_evaluate(operand, point)
        case Power(base=base, exponent=exponent):
            return float(_evaluate(base, point) ** _evaluate(exponent, point))
        case Call(function=function, arguments=arguments):
            functions: dict[str, Callable[..., float]] = {
                "exp": math.exp,
                "log": math.log,
                "sqrt": math.sqrt,
                "max": max,
                "min": min,
            }
            return functions[function](*(_evaluate(argument, point) for argument in arguments))
        case Total() | Apply():
            raise AssertionError("a result writes sums over groups out")


def check_laws(solution: Solution, point: Mapping[str, float]) -> None:
    """Check what holds for every solution: bounds, the threshold, and that symbols and numbers agree."""
    assert solution.R0 is not None, solution.no_R0
    assert solution.R0_bounds is not None
    low, high = solution.R0_bounds
    assert low <= solution.R0 <= high
    assert high - low <= 1e-12 * max(1.0, high)
    if abs(solution.R0 - 1) > 1e-9:
        assert (solution.R0 > 1) == (solution.growth_rate > 0)
    symbolic = solution.symbolic
    values = dict(point)
    if symbolic.infection_free is None:  # then F, V and K are written with the state's own names
        values |= solution.infection_free
    for name, text in symbolic.abbreviations.items():
        values[name] = evaluate(text, values)
    for texts, numbers in ((symbolic.F, solution.F), (symbolic.V, solution.V), (symbolic.K, solution.K)):
        if texts is not None:
            assert numbers is not None
            for row, expected in zip(texts, numbers, strict=True):
                assert [evaluate(text, values) for text in row] == pytest.approx(expected, rel=1e-11, abs=1e-13)
    if symbolic.infection_free is not None:
        for name, text in symbolic.infection_free.items():
            assert evaluate(text, values) == pytest.approx(solution.infection_free[name], rel=1e-11, abs=1e-13)
    if solution.closed_form is not None:
        assert evaluate(solution.closed_form, point) == pytest.approx(solution.R0, rel=1e-11)
    if symbolic.characteristic_polynomial is not None:
        at = {**values, symbolic.polynomial_variable: solution.R0}
        scale = max(1.0, solution.R0) ** len(solution.types_at_infection)
        assert abs(evaluate(symbolic.characteristic_polynomial, at)) < 1e-7 * scale
    if solution.right is not None and solution.left is not None:
        assert math.fsum(solution.right) == pytest.approx(1, rel=1e-13)
        assert math.fsum(a * b for a, b in zip(solution.left, solution.right, strict=True)) == pytest.approx(1)
    assert [condition.name for condition in solution.conditions] == ["A1", "A2", "A3", "A4", "A5"]


def names_in(text: str) -> set[str]:
    """Return the names in an expression of a result."""
    return names(parse(text, items=True))
