"""Tree -> text: the shortest text that reads as the same tree."""

from __future__ import annotations

from ngm.expression.decimals import NUMBER, decimal_text, fraction_texts
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
    fold,
)

__all__ = ["write"]

# How tightly the outermost operator of a text binds: an operand that binds less than its place asks for gets
# parentheses. The order is that of the grammar in parse.py: a sign stands before a whole product.
_SUM, _SIGN, _PRODUCT, _POWER, _ATOM = range(5)
#: A sign before a single factor, `-x` or `-x^2`: it may stand after `*`, `/` and `^` as well.
_SHORT_SIGN = _SIGN + 0.5

_Text = tuple[str, float]


def write(node: Node) -> str:
    """Return the expression as text, with the parentheses that it needs and no others.

    ``parse(write(x)) == x`` for every tree that the parser makes. Trees that only a program makes (a negative number,
    a fraction that is no short decimal) come back equal in value.

    Parameters
    ----------
    node : Node
        Any depth; nothing recurses.

    Returns
    -------
    str
        Spaces around ``+`` and ``-``, none around ``* / ^``.

    Examples
    --------
    >>> from ngm.expression.parse import parse
    >>> write(parse("(beta)*sigma / (((sigma+mu)) * (gamma+mu))"))
    'beta*sigma/((sigma + mu)*(gamma + mu))'
    """
    return fold(node, _text)[0]


def _text(node: Node, parts: list[_Text]) -> _Text:
    match node:
        case Number():
            return _number(node)
        case Name():
            return node.item, _ATOM
        case Add(terms=terms):
            texts = [_enclosed(part, _SIGN) for part in parts]
            return _joined_terms([sign for sign, _ in terms], texts), _SUM
        case Multiply(factors=factors):
            return _joined_factors([side for side, _ in factors], parts), _PRODUCT
        case Negate():
            binding = parts[0][1]
            text = "-" + _enclosed(parts[0], _SIGN)
            return text, (_SHORT_SIGN if binding >= _POWER or binding == _SHORT_SIGN else _SIGN)
        case Power():
            base = _enclosed(parts[0], _ATOM)
            return f"{base}^{_after_operator(parts[1])}", _POWER
        case Call(function=function):
            return f"{function}({', '.join(text for text, _ in parts)})", _ATOM
        case Total(dimension=dimension):
            return f"sum({parts[0][0]}{f', {dimension}' if dimension else ''})", _ATOM
        case Apply(matrix=matrix):
            return f"{matrix}({parts[0][0]})", _ATOM


def _number(node: Number) -> _Text:
    if NUMBER.fullmatch(node.text):
        return node.text, _ATOM
    short = decimal_text(abs(node.value))
    if short is not None:
        return (short, _ATOM) if node.value >= 0 else (f"-{short}", _SHORT_SIGN)
    text = "/".join(fraction_texts(node.value))
    return (text, _PRODUCT) if node.value >= 0 else (f"-{text}", _SIGN)


def _enclosed(part: _Text, least: float) -> str:
    text, binding = part
    return text if binding >= least else f"({text})"


def _after_operator(part: _Text) -> str:
    """Return a factor or exponent as it stands after ``*``, ``/`` or ``^``, where a short sign is read as well."""
    return part[0] if part[1] == _SHORT_SIGN else _enclosed(part, _POWER)


def _joined_terms(signs: list[int], texts: list[str]) -> str:
    if not texts:
        return "0"
    first = texts[0] if signs[0] > 0 else f"-{texts[0]}"
    return first + "".join(
        f" {'+' if sign > 0 else '-'} {text}" for sign, text in zip(signs[1:], texts[1:], strict=True)
    )


def _joined_factors(sides: list[int], parts: list[_Text]) -> str:
    if not parts:
        return "1"
    first = _enclosed(parts[0], _POWER) if sides[0] > 0 else f"1/{_after_operator(parts[0])}"
    rest = (
        f"{'*' if side > 0 else '/'}{_after_operator(part)}" for side, part in zip(sides[1:], parts[1:], strict=True)
    )
    return first + "".join(rest)
