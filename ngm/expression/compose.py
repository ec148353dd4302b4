"""Trees put together as people write them: one fraction, numbers in front, few signs."""

from __future__ import annotations

from collections.abc import Iterable
from fractions import Fraction
from math import gcd, lcm

from ngm.expression.decimals import decimal_text
from ngm.expression.tree import Add, Call, Multiply, Name, Negate, Node, Number, Power

__all__ = ["common_number", "name", "number", "product"]


def common_number(numbers: list[Fraction]) -> Fraction:
    """Return the number to take out of all terms: one that they share, or 1/2 (as in the roots of a quadratic)."""
    sizes = {abs(number) for number in numbers}
    if len(sizes) == 1:
        return sizes.pop()
    if {size.denominator for size in sizes} == {2}:
        return Fraction(gcd(*(size.numerator for size in sizes)), lcm(*(size.denominator for size in sizes)))
    return Fraction(1)


def product(front: Fraction, above: Iterable[Node], below: Iterable[Node]) -> Node:
    """Return front * above / below, the sign in front and nested products flat."""
    tops, bottoms = _flat(above), _flat(below)
    size = abs(front)
    if size != 1:
        if size.denominator > 1 and (not tops or not _is_human_divisor(size)) and _short_decimal(size) is not None:
            tops.insert(0, number(size))
        else:
            if size.numerator != 1:
                tops.insert(0, number(Fraction(size.numerator)))
            if size.denominator != 1:
                bottoms.insert(0, number(Fraction(size.denominator)))
    if not tops:
        tops = [number(Fraction(1))]
    factors = [(1, top) for top in tops]
    if len(bottoms) == 1:
        factors.append((-1, bottoms[0]))
    elif bottoms:
        factors.append((-1, Multiply(tuple((1, bottom) for bottom in bottoms))))
    node = factors[0][1] if len(factors) == 1 else Multiply(tuple(factors))
    return Negate(node) if front < 0 else node


def _flat(nodes: Iterable[Node]) -> list[Node]:
    """Return the factors in order, products of products written as one and plain names first."""
    flat: list[Node] = []
    for node in nodes:
        if isinstance(node, Multiply) and all(side > 0 for side, _ in node.factors):
            flat.extend(factor for _, factor in node.factors)
        else:
            flat.append(node)
    return sorted(flat, key=_place)


def _place(node: Node) -> int:
    order = (Number, Name, Power, Call, Multiply, Add)
    return next((i for i, kind in enumerate(order) if isinstance(node, kind)), len(order))


def _is_human_divisor(size: Fraction) -> bool:
    """Return whether people write x/7 rather than the product with a decimal: so for small divisors."""
    return size.denominator <= 12 and size.numerator == 1


def _short_decimal(value: Fraction) -> str | None:
    """Return the decimal where it is exact and hardly longer than the fraction."""
    decimal = decimal_text(value)
    fraction = len(str(value.numerator)) + 1 + len(str(value.denominator)) if decimal is not None else 0
    return decimal if decimal is not None and len(decimal) <= fraction + 2 else None


def number(value: Fraction) -> Number:
    """Return a number, written as a decimal where that is short and exact."""
    return Number(value, decimal_text(value) or "")


def name(item: str) -> Name:
    """Return the name that results write as `item`: ``sigma[65+]``."""
    bare, bracket, groups = item.partition("[")
    return Name(bare, tuple(groups[:-1].split(",")) if bracket else ())
