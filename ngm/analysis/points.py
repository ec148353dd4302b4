"""A model's numbers at many random points of its parameters' ranges, with 50 digits where formulas allow."""

from __future__ import annotations

import math
import random
from collections.abc import Mapping
from dataclasses import dataclass, replace
from decimal import Context, Decimal, DecimalException, localcontext
from fractions import Fraction
from typing import Any

import numpy as np

from ngm.analysis.matrices import as_floats
from ngm.analysis.numbers import decided_numbers
from ngm.engine.balls import nearest
from ngm.errors import NgmError
from ngm.expression.parse import parse
from ngm.expression.tree import Add, Call, Multiply, Name, Negate, Node, Number, Power, fold
from ngm.results import Solution
from ngm.scenario.exact import NoValueError, evaluate
from ngm.scenario.model import Expression, Parameter, Scenario, number

__all__ = ["DIGITS", "Place", "Places", "decimal_value", "exact_value"]

DIGITS = 50
CONTEXT = Context(prec=DIGITS + 10, Emax=10**9, Emin=-(10**9))


class _MissingError(Exception):
    """A name has no value here."""


def decimal_value(node: Node, values: Mapping[str, Decimal]) -> Decimal | None:
    """Return the value of an expression with 60 digits; None where it has none or a name is not known."""

    def step(here: Node, parts: list[Decimal]) -> Decimal:
        match here:
            case Number(value=value):
                return Decimal(value.numerator) / Decimal(value.denominator)
            case Name():
                if here.item not in values:
                    raise _MissingError
                return values[here.item]
            case Add(terms=terms):
                return sum((p if s > 0 else -p for (s, _), p in zip(terms, parts, strict=True)), Decimal(0))
            case Multiply(factors=factors):
                out = Decimal(1)
                for (side, _), part in zip(factors, parts, strict=True):
                    out = out * part if side > 0 else out / part
                return out
            case Negate():
                return -parts[0]
            case Power():
                return Decimal(1) if parts[1] == 0 else parts[0] ** parts[1]
            case Call(function=function):
                if function in ("max", "min"):
                    return max(parts) if function == "max" else min(parts)
                return {"exp": parts[0].exp, "log": parts[0].ln, "sqrt": parts[0].sqrt}[function]()
            case _:
                raise _MissingError

    with localcontext(CONTEXT):
        try:
            value = fold(node, step)
        except (DecimalException, _MissingError, ValueError, OverflowError):
            return None
        return value if value.is_finite() else None


def exact_value(node: Node, values: Mapping[str, Fraction]) -> Fraction | None:
    """Return the value of an expression as an exact fraction; None where it is none."""

    def lookup(name: Name) -> Fraction:
        if name.item not in values:
            raise NoValueError("no value")
        return values[name.item]

    try:
        value = evaluate(node, lookup)
    except NoValueError:
        return None
    return value if isinstance(value, Fraction) else None


@dataclass
class Place:
    """One point: the numbers in force of every name, exact and as decimals, with R0, K and the growth rate there."""

    typed: dict[str, Fraction]
    exact: dict[str, Fraction]
    decimals: dict[str, Decimal]
    R0: Decimal
    K: np.ndarray[Any, np.dtype[Any]] | None
    scenario: Scenario


@dataclass
class Places:
    """Points of one scenario. With a closed form R0 is its value; without one each point is computed anew."""

    scenario: Scenario
    solution: Solution
    seed: int = 0

    def __post_init__(self) -> None:
        solution = self.solution
        self.closed = None if solution.closed_form is None else parse(solution.closed_form, items=True)
        self.free = {name: parse(text, items=True) for name, text in (solution.symbolic.infection_free or {}).items()}
        self.short = {name: parse(text, items=True) for name, text in solution.symbolic.abbreviations.items()}
        self.rows = None
        if solution.symbolic.K is not None:
            self.rows = [[parse(text, items=True) for text in row] for row in solution.symbolic.K]
        #: entries of the matrices that are used as the file has them; balanced ones follow sizes
        self.entries: dict[str, Fraction] = {}
        for matrix in self.scenario.matrices.values():
            if not matrix.reciprocal and matrix.within is None:
                groups = self.scenario.dimensions[matrix.by].groups
                self.entries |= {
                    f"{matrix.name}[{row},{column}]": Fraction(matrix.blocks[0][i][j])
                    for i, row in enumerate(groups)
                    for j, column in enumerate(groups)
                }
        self.random = random.Random(self.seed)
        #: item (``sigma[65+]``) -> its parameter and place; what follows others is computed from these
        self.numbers_of: dict[str, tuple[Parameter, int]] = {}
        for parameter in self.scenario.parameters.values():
            if not parameter.follows:
                items = self.scenario.items(parameter.name, parameter.by)
                self.numbers_of |= {item: (parameter, k) for k, item in enumerate(items)}
        if self.closed is not None and self.at(self.typed()) is None:
            # It names what has no value here, such as an entry of a balanced matrix: the model is computed instead.
            self.closed = self.rows = None
        #: whether a point costs no computation of the model
        self.quick = self.rows is not None

    def typed(self) -> dict[str, Fraction]:
        """Return the values of the file."""
        return {
            item: _fraction(parameter.values[k if len(parameter.values) > 1 else 0].tree)
            for item, (parameter, k) in self.numbers_of.items()
        }

    def draw(self) -> dict[str, Fraction]:
        """Return a random value for each parameter that is a number: in its range, or around its value."""
        return {name: self._drawn(name, value) for name, value in self.typed().items()}

    def _drawn(self, name: str, value: Fraction) -> Fraction:
        parameter = self.numbers_of[name][0]
        share = self.random.random()
        if parameter.range is not None and parameter.range[0] < parameter.range[1]:
            low, high = parameter.range
            if low > 0:
                return _short(low * (high / low) ** share)
            return _short(low + (high - low) * share)
        size = float(value)
        unit = float(parameter.factor)
        if size == 0:
            return _short(share / 2)
        if 0 < size * unit <= 1:
            # may be a share: stay below 1
            low, high = size * unit / 2, (1 + size * unit) / 2 if size * unit > 0.3 else 2.5 * size * unit
            return _short((low + (high - low) * share) / unit)
        return _short(size * 2 ** (2 * share - 1))

    def at(self, typed: Mapping[str, Fraction]) -> Place | None:
        """Return the point with these values; None where the model has no positive R0 there."""
        exact: dict[str, Fraction] = {}
        decimals: dict[str, Decimal] = {}
        scenario = self.scenario
        for name, value in typed.items():
            self._put(name, value * self.numbers_of[name][0].factor, exact, decimals)
        for name, value in self.entries.items():
            self._put(name, value, exact, decimals)
        pending = [p for p in scenario.parameters.values() if p.follows]
        for _ in range(len(pending) + 1):
            for parameter in pending:
                items = scenario.items(parameter.name, parameter.by)
                for item, expression in zip(items, parameter.values, strict=True):
                    self._compute(item, expression.tree, exact, decimals)
        for item in self.solution.types:
            self._put(item, Fraction(0), exact, decimals)
        for item, node in self.free.items():
            self._compute(item, node, exact, decimals)
        for _ in range(len(scenario.definitions)):
            for name, definition in scenario.definitions.items():
                if name not in decimals and not definition.by:
                    self._compute(name, definition.expression.tree, exact, decimals)
        for name, node in self.short.items():
            self._compute(name, node, exact, decimals)
        return self._with_R0(dict(typed), exact, decimals)

    def _with_R0(
        self, typed: dict[str, Fraction], exact: dict[str, Fraction], decimals: dict[str, Decimal]
    ) -> Place | None:
        K = self._symbolic_K(decimals)
        if K is None:
            numbers = self.numbers(typed)
            if numbers is None:
                return None
            root, K = numbers
        else:
            root = float(np.max(np.abs(np.linalg.eigvals(K)))) if K.size and self.closed is None else 0.0
        R0 = Decimal(root) if self.closed is None else decimal_value(self.closed, decimals)
        if R0 is None or R0 <= 0:
            return None
        return Place(typed, exact, decimals, R0, K, self.scenario)

    def _symbolic_K(self, decimals: Mapping[str, Decimal]) -> np.ndarray[Any, np.dtype[Any]] | None:
        """Return K from its formulas; None where there are none, or where an entry is negative or none: no M-matrix."""
        if self.rows is None:
            return None
        entries = [[decimal_value(node, decimals) for node in row] for row in self.rows]
        if any(value is None or value < 0 for row in entries for value in row):
            return None
        return np.array([[float(value or 0) for value in row] for row in entries])

    def numbers(self, typed: Mapping[str, Fraction], scenario: Scenario | None = None) -> tuple[float, Any] | None:
        """Return R0 and K by the arrays' own route; None where there is none."""
        try:
            found = decided_numbers(self.changed(scenario or self.scenario, typed))
        except NgmError:
            return None
        if found.no_R0 is not None or found.spectrum is None:
            return None
        return nearest(found.spectrum.root), as_floats(found.K)

    def changed(self, scenario: Scenario, typed: Mapping[str, Fraction]) -> Scenario:
        """Return the scenario with these values, item by item."""
        values: dict[str, list[Expression]] = {}
        for item, value in typed.items():
            values.setdefault(self.numbers_of[item][0].name, []).append(number(value))
        parameters = dict(scenario.parameters)
        for name, given in values.items():
            parameters[name] = replace(parameters[name], values=tuple(given))
        return replace(scenario, parameters=parameters)

    def _put(self, name: str, value: Fraction, exact: dict[str, Fraction], decimals: dict[str, Decimal]) -> None:
        exact[name] = value
        with localcontext(CONTEXT):
            decimals[name] = Decimal(value.numerator) / Decimal(value.denominator)

    def _compute(self, name: str, node: Node, exact: dict[str, Fraction], decimals: dict[str, Decimal]) -> None:
        value = exact_value(node, exact)
        if value is not None:
            self._put(name, value, exact, decimals)
            return
        rough = decimal_value(node, decimals)
        if rough is not None:
            decimals[name] = rough


def _fraction(node: Node) -> Fraction:
    value = evaluate(node)
    return value if isinstance(value, Fraction) else Fraction(value)


def _short(value: float) -> Fraction:
    """Return a number near this one with four digits: exact arithmetic stays short."""
    if value == 0 or not math.isfinite(value):
        return Fraction(0)
    return Fraction(f"{value:.4g}")
