"""The slope of a rate at a state where nobody is infected, on the template: groups stay groups.

A rate is walked once, forwards. Each part gives its value without infection (a tree in which every infected compartment
is 0) and its slope: a list of `Term`, each saying "so much, times the deviation of this compartment". Inside ``C(x)`` and
``sum(x)`` the slope is the same linear operator applied to the slope of x, so a term is a chain

    sign * diag(a) C diag(b) M diag(c) * deviation of a compartment

and F and V of 300 regions are as short as those of one. A product with two factors that vanish has no slope: that is
decided here, by structure, and never by the values of parameters.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from fractions import Fraction

from ngm.errors import DerivationError, Problem
from ngm.expression.tree import Add, Apply, Call, Multiply, Name, Negate, Node, Number, Power, Total, names
from ngm.expression.write import write

__all__ = [
    "ONE",
    "ZERO",
    "Applied",
    "Linear",
    "Lineariser",
    "Selector",
    "Summed",
    "Term",
    "definitions_in_order",
    "product",
]

ZERO = Number(Fraction(0), "0")
ONE = Number(Fraction(1), "1")


@dataclass(frozen=True, slots=True)
class Applied:
    """A matrix applied along its dimension; transposed for those who move in."""

    matrix: str
    transposed: bool = False


@dataclass(frozen=True, slots=True)
class Summed:
    """The sum over the groups of these dimensions."""

    dimensions: tuple[str, ...]


Factor = Node | Applied | Summed


@dataclass(frozen=True, slots=True)
class Term:
    """One chain of a slope. `factors` act from the right: the last one first."""

    column: str
    sign: int = 1
    factors: tuple[Factor, ...] = ()

    def times(self, node: Node, sign: int = 1) -> Term:
        """Return the term with a factor diag(node) put before it."""
        if isinstance(node, Number) and node.value == 1:
            return self if sign > 0 else Term(self.column, -self.sign, self.factors)
        if self.factors and not isinstance(self.factors[0], Applied | Summed):
            return Term(self.column, self.sign * sign, (product(node, self.factors[0]), *self.factors[1:]))
        return Term(self.column, self.sign * sign, (node, *self.factors))

    def under(self, operator: Applied | Summed) -> Term:
        """Return the term with a linear operator put before it."""
        return Term(self.column, self.sign, (operator, *self.factors))


@dataclass(frozen=True, slots=True)
class Linear:
    """Value without infection, and slope.

    `order`: how fast a value of 0 is reached as the deviations shrink: 1 for I, 2 for I*E, 0 for a value that is not 0,
    infinite for what is 0 whatever the state.
    """

    value: Node
    terms: tuple[Term, ...] = ()
    order: float = 0.0

    @property
    def is_zero(self) -> bool:
        """True where the value is 0 by structure."""
        return is_zero(self.value)


@dataclass(frozen=True, slots=True)
class Selector:
    """1 where `larger` exceeds `smaller`, else 0: which branch of a max or min is in force; a tie is refused.

    `by_structure`: one side is 0 whatever the values, so the branch is the same for all of them.
    """

    name: str
    larger: Node
    smaller: Node
    text: str
    by_structure: bool


def definitions_in_order(node: Node, definitions: Mapping[str, Node]) -> list[str]:
    """Return the definitions that an expression needs, each after those that it uses itself."""
    order: list[str] = []
    seen: set[str] = set()
    stack = [(name, False) for name in sorted(names(node) & set(definitions))]
    while stack:
        name, ready = stack.pop()
        if ready:
            order.append(name)
        elif name not in seen:
            seen.add(name)
            stack.append((name, True))
            stack.extend((inner, False) for inner in sorted(names(definitions[name]) & set(definitions)))
    return order


def is_zero(node: Node) -> bool:
    """Return True for a literal 0."""
    return isinstance(node, Number) and node.value == 0


def product(*nodes: Node) -> Node:
    """Return the product as one flat node, without factors of 1; 0 where one factor is 0."""
    flat: list[tuple[int, Node]] = []
    for node in nodes:
        if is_zero(node):
            return ZERO
        if isinstance(node, Number) and node.value == 1:
            continue
        flat.extend(node.factors if isinstance(node, Multiply) else ((1, node),))
    return _multiply(flat)


def _multiply(flat: list[tuple[int, Node]]) -> Node:
    if not flat:
        return ONE
    if len(flat) == 1 and flat[0][0] > 0:
        return flat[0][1]
    if flat[0][0] < 0:
        flat = [(1, ONE), *flat]
    return Multiply(tuple(flat))


def reciprocal(node: Node) -> Node:
    """Return 1 / node, for use in a product."""
    return Multiply(((1, ONE), (-1, node)))


@dataclass
class Lineariser:
    """Walks expressions of one scenario.

    Attributes
    ----------
    zero : set of str
        Names that are 0 by structure: infected compartments, and uninfected ones that are literally 0 at this state.
    variables : set of str
        Compartments by whose deviations slopes are taken.
    definitions : mapping of str to Node
        Definitions, and what is given in terms of other names (a state given by an expression).
    dimensions_of : callable
        The dimensions over which an expression varies.
    exponent : callable
        The numbers that an expression in parameters stands for, one a group: only for an exponent on something that
        vanishes.
    """

    zero: set[str]
    variables: set[str]
    definitions: Mapping[str, Node]
    dimensions_of: Callable[[Node], tuple[str, ...]]
    exponent: Callable[[Node], list[float]]
    selectors: list[Selector] = field(default_factory=list)
    by_value: bool = False
    memo: dict[str, Linear] = field(default_factory=dict)
    where: str = ""
    folded: dict[str, Node] = field(default_factory=dict)

    def at(self, node: Node, where: str) -> Linear:
        """Return value and slope of an expression; `where` names it in a refusal."""
        self.where = where
        # Definitions first, each after those it uses: fifty of them, fifty levels deep each, are not walked in one go.
        for name in definitions_in_order(node, self.definitions):
            self._name(Name(name), name)
        return self.walk(node)

    def walk(self, node: Node) -> Linear:
        """Return value and slope."""
        match node:
            case Number():
                return Linear(ZERO, (), math.inf) if node.value == 0 else Linear(node)
            case Name(name=name):
                return self._name(node, name)
            case Add(terms=parts):
                return self._sum(parts)
            case Multiply(factors=parts):
                return self._product(parts, node)
            case Negate(operand=operand):
                inner = self.walk(operand)
                return Linear(
                    ZERO if inner.is_zero else Negate(inner.value),
                    tuple(t.times(ONE, -1) for t in inner.terms),
                    inner.order,
                )
            case Power(base=base, exponent=exponent):
                return self._power(self.walk(base), self.walk(exponent), node)
            case Call(function="max" | "min"):
                return self._extreme(node)
            case Call():
                return self._function(node)
            case Total(operand=operand, dimension=dimension):
                inner = self.walk(operand)
                over = (dimension,) if dimension is not None else self.dimensions_of(operand)
                value = inner.value
                if not inner.is_zero:
                    for one in over:
                        value = Total(value, one)
                terms = tuple(t.under(Summed(over)) for t in inner.terms) if over else inner.terms
                return Linear(value, terms, inner.order)
            case Apply(matrix=matrix, operand=operand):
                inner = self.walk(operand)
                value = ZERO if inner.is_zero else Apply(matrix, inner.value)
                return Linear(value, tuple(t.under(Applied(matrix)) for t in inner.terms), inner.order)

    def _name(self, node: Name, name: str) -> Linear:
        if name in self.definitions and name not in self.memo:
            inner = self.walk(self.definitions[name])
            self.folded[name] = inner.value
            value: Node = inner.value if isinstance(inner.value, Number) else Name(name)
            terms = inner.terms
            if name in self.variables:
                terms = (Term(name),)
            self.memo[name] = Linear(value, terms, 1.0 if name in self.variables and inner.is_zero else inner.order)
        if name in self.memo:
            return self.memo[name]
        terms = (Term(name),) if name in self.variables else ()
        if name in self.zero:
            return Linear(ZERO, terms, 1.0 if terms else math.inf)
        return Linear(node, terms)

    def _sum(self, parts: tuple[tuple[int, Node], ...]) -> Linear:
        values: list[tuple[int, Node]] = []
        terms: list[Term] = []
        order = math.inf
        for sign, part in parts:
            inner = self.walk(part)
            order = min(order, inner.order)
            if not inner.is_zero:
                values.append((sign, inner.value))
            terms.extend(t.times(ONE, sign) for t in inner.terms)
        return Linear(_add(values), tuple(terms), order)

    def _product(self, parts: tuple[tuple[int, Node], ...], node: Node) -> Linear:
        inner = [(sign, self.walk(part)) for sign, part in parts]
        for sign, factor in inner:
            if sign < 0 and factor.is_zero:
                raise self._refuse(
                    f"divides by something that is 0 when nobody is infected, in {shorten(node)}. "
                    "Divide by a quantity that stays above 0, such as the whole population."
                )
        zeros = [k for k, (_, factor) in enumerate(inner) if factor.is_zero]
        value = ZERO if zeros else _multiply([pair for sign, f in inner for pair in _flat(sign, f.value)])
        terms: list[Term] = []
        for k, (sign, factor) in enumerate(inner):
            if not factor.terms or (zeros and zeros != [k]):
                continue
            others = [pair for j, (s, f) in enumerate(inner) if j != k for pair in _flat(s, f.value)]
            if sign < 0:
                others += [(-1, factor.value), (-1, factor.value)]
            coefficient = _multiply(others)
            terms.extend(t.times(coefficient, sign) for t in factor.terms)
        return Linear(value, tuple(terms), sum(factor.order for _, factor in inner))

    def _power(self, base: Linear, exponent: Linear, node: Node) -> Linear:
        if base.is_zero:
            return self._power_of_zero(base, exponent, node)
        value: Node = ONE if exponent.is_zero else Power(base.value, exponent.value)
        terms: list[Term] = []
        if base.terms and not exponent.is_zero:
            less = (
                Number(exponent.value.value - 1)
                if isinstance(exponent.value, Number)
                else Add(((1, exponent.value), (-1, ONE)))
            )
            lowered = base.value if less == ONE else Power(base.value, less)
            coefficient = product(exponent.value, ONE if is_zero(less) else lowered)
            terms.extend(t.times(coefficient) for t in base.terms)
        if exponent.terms:
            coefficient = product(value, Call("log", (base.value,)))
            terms.extend(t.times(coefficient) for t in exponent.terms)
        return Linear(value, tuple(terms))

    def _power_of_zero(self, base: Linear, exponent: Linear, node: Node) -> Linear:
        if exponent.terms:
            raise self._refuse(
                f"has no slope when nobody is infected: {shorten(node)} has a state in its exponent. "
                "Use a number or parameters there."
            )
        if isinstance(exponent.value, Number):
            powers = [float(exponent.value.value)]
        else:
            # Whether I^p has a slope at I = 0 depends on the value of p: noted, since a formula then holds for such p only.
            powers = self.exponent(exponent.value)
            self.by_value = True
        if all(p == 0 for p in powers):
            return Linear(ONE)
        # x^p with x of order k vanishes with order k p: beyond 1 the slope is 0, below it is infinite, and at 1 it is that
        # of x itself, or differs from one direction to another.
        orders = [base.order * p for p in powers]
        if all(order > 1 for order in orders):
            return Linear(ZERO, (), min(orders))
        if all(p == 1 for p in powers):
            return base
        raise self._refuse(
            f"has no slope when nobody is infected: the exponent in {shorten(node)} must be 1 or more "
            "where its base is 0 without infection."
        )

    def _function(self, node: Call) -> Linear:
        inner = self.walk(node.arguments[0])
        if node.function == "exp":
            value: Node = ONE if inner.is_zero else Call("exp", (inner.value,))
            return Linear(value, tuple(t.times(value) for t in inner.terms))
        if inner.is_zero:
            if node.function == "log" or inner.order <= 2:
                what = "value" if node.function == "log" else "slope"
                raise self._refuse(
                    f"has no {what} when nobody is infected: {shorten(node)} is taken at 0. "
                    "Write the rate so that it has one there, for example with x + a small constant in place of x."
                )
            return Linear(ZERO, (), inner.order / 2)
        if node.function == "log":
            value = ZERO if inner.value == ONE else Call("log", (inner.value,))
            return Linear(value, tuple(t.times(reciprocal(inner.value)) for t in inner.terms))
        value = Call("sqrt", (inner.value,))
        slope = Multiply(((1, ONE), (-1, Number(Fraction(2), "2")), (-1, value)))
        return Linear(value, tuple(t.times(slope) for t in inner.terms))

    def _extreme(self, node: Call) -> Linear:
        first, second = (self.walk(argument) for argument in node.arguments)
        if first.is_zero and second.is_zero:
            if first.terms or second.terms:
                raise self._refuse(
                    f"has no slope when nobody is infected: {shorten(node)} is a tie of 0 with 0. "
                    "Write the branch that is meant for few infected."
                )
            return Linear(ZERO, (), min(first.order, second.order))
        value = Call(node.function, (first.value, second.value))
        if not first.terms and not second.terms:
            return Linear(value)
        # The selector is 1 where its first side exceeds its second: then a max follows that side, a min the other one.
        name = f"#{len(self.selectors)}"  # "#" cannot stand in a name of the file
        by_structure = first.is_zero or second.is_zero
        self.selectors.append(Selector(name, first.value, second.value, f"{self.where}: {shorten(node)}", by_structure))
        self.by_value = self.by_value or not by_structure
        chosen: Node = Name(name)
        other = Add(((1, ONE), (-1, chosen)))
        of_first, of_second = (chosen, other) if node.function == "max" else (other, chosen)
        terms = (*(t.times(of_first) for t in first.terms), *(t.times(of_second) for t in second.terms))
        return Linear(value, terms)

    def _refuse(self, message: str) -> DerivationError:
        return DerivationError(Problem(self.where, message))


def _flat(sign: int, node: Node) -> list[tuple[int, Node]]:
    if isinstance(node, Number) and node.value == 1:
        return []
    if sign > 0 and isinstance(node, Multiply):
        return list(node.factors)
    return [(sign, node)]


def _add(values: list[tuple[int, Node]]) -> Node:
    if not values:
        return ZERO
    if len(values) == 1:
        sign, value = values[0]
        return value if sign > 0 else Negate(value)
    if values[0][0] < 0:
        values = [(1, Negate(values[0][1])), *values[1:]]
    return Add(tuple(values))


def shorten(node: Node, width: int = 80) -> str:
    """Return the expression as text, cut to `width`."""
    text = write(node)
    return text if len(text) <= width else text[: width - 1] + "…"
