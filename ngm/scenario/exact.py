"""Values of expressions without sums over groups and without matrices, exactly wherever arithmetic is.

Sums, products, quotients and whole powers stay fractions; `exp`, `log`, `sqrt` and other powers give a float. What has
no value (a division by 0, the logarithm of a negative number) or is too large to compute with is said in words.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from fractions import Fraction

from ngm.expression.tree import (
    Add,
    Apply,
    Call,
    Multiply,
    Name,
    Negate,
    Node,
    Number,
    Power,
    Total,
    children,
    fold,
    walk,
)

__all__ = ["LARGEST", "NoValueError", "Value", "closed_parts", "evaluate", "is_closed"]

Value = Fraction | float

#: numbers stay below this in size
LARGEST = 10**300
#: bits of numerator and denominator past which a fraction is rounded to a float
_MOST_BITS = 20_000


class NoValueError(Exception):
    """An expression has no value, or one past the limits; `position` is the place in its text."""

    def __init__(self, message: str, position: int = 0) -> None:
        self.position = position
        super().__init__(message)


def is_closed(node: Node) -> bool:
    """Return True where the expression is a number in every respect: no name, no sum over groups, no matrix."""
    return isinstance(node, Number) or not any(isinstance(here, Name | Total | Apply) for here in walk(node))


def closed_parts(node: Node) -> list[Node]:
    """Return the largest parts of an expression that are numbers and more than a literal, in the order of the text."""
    out: list[Node] = []

    def step(here: Node, below: list[bool]) -> bool:
        if isinstance(here, Name):
            return False
        if all(below) and not isinstance(here, Total | Apply):
            return True
        out.extend(
            child for child, good in zip(children(here), below, strict=True) if good and not isinstance(child, Number)
        )
        return False

    if fold(node, step) and not isinstance(node, Number):
        out.append(node)
    return sorted(out, key=lambda part: part.position)


def evaluate(node: Node, lookup: Callable[[Name], Value] | None = None) -> Value:
    """Return the value of an expression.

    Parameters
    ----------
    node : Node
        Without `Total` and `Apply`; names only where `lookup` is given.
    lookup : callable, optional
        The value of a name.

    Returns
    -------
    Fraction or float
        A float where a function or a root came in, or where the fraction would be too long.

    Raises
    ------
    NoValueError
        Division by 0, a root or logarithm of a negative number, 0 to a negative power, or past 1e300.
    """
    value = fold(node, lambda here, parts: _checked(_step(here, parts, lookup), here))
    if value >= LARGEST or -value >= LARGEST:
        raise NoValueError("the result is too large. Numbers stay below 1e300 in size.", node.position)
    return value


def _checked(value: Value, node: Node) -> Value:
    if isinstance(value, float):
        if not math.isfinite(value):
            raise NoValueError("the result is too large. Numbers stay below 1e300 in size.", node.position)
        return value
    if value.numerator.bit_length() + value.denominator.bit_length() > _MOST_BITS:
        return _float(value, node)
    return value


def _float(value: Value, node: Node) -> float:
    try:
        return float(value)
    except OverflowError:
        raise NoValueError("the result is too large. Numbers stay below 1e300 in size.", node.position) from None


def _step(node: Node, parts: list[Value], lookup: Callable[[Name], Value] | None) -> Value:
    """Return the value of a node from those of its parts; nothing recurses, so a tree may have any depth."""
    match node:
        case Number(value=value):
            return value
        case Name() if lookup is not None:
            return lookup(node)
        case Add(terms=terms):
            total: Value = Fraction(0)
            for (sign, _), part in zip(terms, parts, strict=True):
                total = _checked(_plus(total, part if sign > 0 else -part, node), node)
            return total
        case Multiply(factors=factors):
            product: Value = Fraction(1)
            for (sign, factor), part in zip(factors, parts, strict=True):
                product = _checked(_times(product, part, sign, factor), node)
            return product
        case Negate():
            return -parts[0]
        case Power():
            return _power(parts[0], parts[1], node)
        case Call(function=function):
            return _call(function, parts, node)
        case _:
            raise NoValueError("expected an expression in numbers and parameters only.", node.position)


def _plus(left: Value, right: Value, node: Node) -> Value:
    if isinstance(left, Fraction) and isinstance(right, Fraction):
        return left + right
    return _float(left, node) + _float(right, node)


def _times(left: Value, right: Value, sign: int, node: Node) -> Value:
    if sign < 0 and right == 0:
        raise NoValueError("this divides by 0.", node.position)
    if isinstance(left, Fraction) and isinstance(right, Fraction):
        return left * right if sign > 0 else left / right
    first, second = _float(left, node), _float(right, node)
    if sign > 0:
        return first * second
    if second == 0:
        raise NoValueError("this divides by a number too close to 0.", node.position)
    return first / second


def _power(base: Value, exponent: Value, node: Node) -> Value:
    if base == 0 and exponent < 0:
        raise NoValueError("this divides by 0.", node.position)
    if exponent == 0:
        return Fraction(1)
    if base == 0:
        return Fraction(0)
    whole = isinstance(exponent, Fraction) and exponent.denominator == 1
    if base < 0 and not whole:
        raise NoValueError("a negative number has no such power.", node.position)
    if base == 1:
        return Fraction(1)
    if isinstance(base, Fraction) and whole:
        bits = max(base.numerator.bit_length(), base.denominator.bit_length())
        if abs(int(exponent)) * bits <= _MOST_BITS:
            return Fraction(base ** int(exponent))
    try:
        size = float(_float(base if base > 0 else -base, node) ** _float(exponent, node))
    except OverflowError:
        raise NoValueError("the result is too large. Numbers stay below 1e300 in size.", node.position) from None
    return -size if base < 0 and int(exponent) % 2 else size


def _call(function: str, arguments: list[Value], node: Node) -> Value:
    first = arguments[0]
    if function == "max":
        return max(first, arguments[1])
    if function == "min":
        return min(first, arguments[1])
    if function == "exp":
        if first == 0:
            return Fraction(1)
        try:
            return math.exp(_float(first, node))
        except OverflowError:
            raise NoValueError("the result is too large. Numbers stay below 1e300 in size.", node.position) from None
    if function == "log":
        if first <= 0:
            raise NoValueError("only a positive number has a logarithm.", node.position)
        if first == 1:
            return Fraction(0)
        if isinstance(first, Fraction):
            # a fraction may be out of a float's range
            return math.log(first.numerator) - math.log(first.denominator)
        return math.log(first)
    if first < 0:
        raise NoValueError("a negative number has no square root.", node.position)
    if isinstance(first, Fraction):
        top, bottom = math.isqrt(first.numerator), math.isqrt(first.denominator)
        if top * top == first.numerator and bottom * bottom == first.denominator:
            return Fraction(top, bottom)
    return math.sqrt(_float(first, node))
