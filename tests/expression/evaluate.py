"""The value of a tree by the schoolbook, in 50 digits: a route of its own, to compare with."""

from __future__ import annotations

from collections.abc import Mapping

import mpmath

from ngm.expression.tree import Add, Call, Multiply, Name, Negate, Node, Number, Power, children

DIGITS = 50


class NoValueError(Exception):
    """The expression has no real value here, or one that is too large to be worth computing."""


def value(node: Node, values: Mapping[str, object] | None = None) -> mpmath.mpf:
    with mpmath.workdps(DIGITS):
        return _value(node, {name: mpmath.mpf(number) for name, number in (values or {}).items()})


def _value(node: Node, values: Mapping[str, mpmath.mpf]) -> mpmath.mpf:
    parts = [_value(part, values) for part in children(node)]
    match node:
        case Number(value=number):
            return mpmath.mpf(number.numerator) / number.denominator
        case Name():
            return values[node.item]
        case Add(terms=terms):
            return mpmath.fsum(sign * part for (sign, _), part in zip(terms, parts, strict=True))
        case Multiply(factors=factors):
            if any(side < 0 and part == 0 for (side, _), part in zip(factors, parts, strict=True)):
                raise NoValueError
            return mpmath.fprod(part**side for (side, _), part in zip(factors, parts, strict=True))
        case Negate():
            return -parts[0]
        case Power():
            return _power(*parts)
        case Call(function=function):
            return _call(function, parts)
        case _:
            raise AssertionError(node)


def _power(base: mpmath.mpf, exponent: mpmath.mpf) -> mpmath.mpf:
    if (base == 0 and exponent < 0) or (base < 0 and exponent != int(exponent)) or abs(exponent) > 100:
        raise NoValueError
    return base**exponent


def _call(function: str, parts: list[mpmath.mpf]) -> mpmath.mpf:
    first = parts[0]
    if (
        (function == "log" and first <= 0)
        or (function == "sqrt" and first < 0)
        or (function == "exp" and abs(first) > 500)
    ):
        raise NoValueError
    table = {"exp": mpmath.exp, "log": mpmath.log, "sqrt": mpmath.sqrt, "max": max, "min": min}
    return table[function](*parts)
