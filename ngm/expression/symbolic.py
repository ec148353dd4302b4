"""Tree <-> sympy. The only maker of symbols, and the only way from text to sympy.

Sympy's own reader of text is never used: it evaluates, and takes names such as ``beta``, ``S`` or ``lambda`` for things
of its own. Sympy computes a power of numbers at once and exactly, whatever its size, so powers are measured before
they are made.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from fractions import Fraction
from functools import lru_cache, partial

import sympy

from ngm.errors import ExpressionError, Problem
from ngm.expression.compose import common_number, name, number, product
from ngm.expression.tree import Add, Call, FunctionName, Multiply, Name, Negate, Node, Number, Power, fold
from ngm.expression.write import write

__all__ = ["from_sympy", "symbol", "text", "to_sympy"]

#: Decimal digits before and after the point of a number that is computed from numbers alone.
_MOST_DIGITS = 300
#: Bits of an exact power: 1.0000001^1e9 is a small number with seven thousand million digits.
_MOST_BITS = 200_000

#: Bits of a number that sympy may take a root of: it tries to factorise it.
_MOST_BITS_OF_ROOT = 2_100


@lru_cache(maxsize=65_536)
def symbol(item: str, any_sign: bool = False) -> sympy.Symbol:
    """Return the symbol of a name; the same name and sign always give the same symbol.

    Parameters
    ----------
    item : str
        A canonical name, with its groups where it has some: ``sigma[65+]``.
    any_sign : bool
        False: the symbol is assumed positive. True: it is assumed real.

    Returns
    -------
    sympy.Symbol
        To sympy a name with other assumptions is another symbol: ask with one `any_sign` for each name.
    """
    return sympy.Symbol(item, real=True) if any_sign else sympy.Symbol(item, positive=True)


def text(expr: sympy.Expr) -> str:
    """Return a sympy expression in the expression syntax."""
    return write(from_sympy(expr))


def to_sympy(
    node: Node,
    lookup: Callable[[Name], sympy.Expr],
    *,
    where: str = "",
    source: str | None = None,
    key: tuple[str | int, ...] = (),
) -> sympy.Expr:
    """Return the sympy expression of a tree.

    Parameters
    ----------
    node : Node
        Without `Apply` and `Total`: groups are written out before.
    lookup : callable
        What stands for a name: a symbol, a number or an expression.
    where, source, key
        For the message of an error: the place, the text that `node` was read from, the path of the field.

    Returns
    -------
    sympy.Expr
        Numbers exact. Takes time in proportion to the size of the tree.

    Raises
    ------
    ExpressionError
        A division by 0, a root or logarithm that is no real number, or a number computed from numbers alone that is
        1e300 or larger, below 1e-300, or exact only with more digits than can be handled.
    TypeError
        `Apply` or `Total` in the tree.
    """
    try:
        return fold(node, partial(_converted, lookup))
    except _Refusal as refused:
        raise ExpressionError(Problem(where, refused.message, source, refused.position, key)) from None


class _Refusal(Exception):  # noqa: N818 - it never leaves this file
    def __init__(self, message: str, position: int) -> None:
        super().__init__(message)
        self.message = message
        self.position = position


def _converted(lookup: Callable[[Name], sympy.Expr], node: Node, parts: list[sympy.Expr]) -> sympy.Expr:
    match node:
        case Number(value=value):
            return sympy.Rational(value.numerator, value.denominator)
        case Name():
            return lookup(node)
        case Add(terms=terms):
            made = sympy.Add(*(part if sign > 0 else -part for (sign, _), part in zip(terms, parts, strict=True)))
            return _measured(made, node.position)
        case Multiply(factors=factors):
            return _quotient([(side, factor.position) for side, factor in factors], parts, node.position)
        case Negate():
            return -parts[0]
        case Power():
            return _power(parts[0], parts[1], node.position)
        case Call():
            return _call(node, parts)
        case _:
            raise TypeError(f"{type(node).__name__} has no symbolic form: write out its groups first")


def _call(node: Call, parts: list[sympy.Expr]) -> sympy.Expr:
    argument = parts[0]
    match node.function:
        case "sqrt":
            return _power(argument, sympy.Rational(1, 2), node.position)
        case "exp":
            return _exponential(argument, node.position)
        case "log":
            if argument.is_number and not argument.is_positive:
                raise _Refusal("the logarithm of a number that is not positive does not exist.", node.position)
            return sympy.log(argument)
        case "max":
            return sympy.Max(*parts)
        case "min":
            return sympy.Min(*parts)


def _quotient(sides: list[tuple[int, int]], parts: list[sympy.Expr], position: int) -> sympy.Expr:
    numbers = [(side, part) for (side, _), part in zip(sides, parts, strict=True) if part.is_Rational and part != 0]
    _check_size(sum(side * _size(part) for side, part in numbers), position)
    made = sympy.Mul(*(p if side > 0 else _inverse(p, at) for (side, at), p in zip(sides, parts, strict=True)))
    return _measured(made, position)


def _inverse(expr: sympy.Expr, position: int) -> sympy.Expr:
    if _is_zero(expr):
        raise _Refusal("this divides by 0.", position)
    return 1 / expr


def _power(base: sympy.Expr, exponent: sympy.Expr, position: int) -> sympy.Expr:
    if _is_zero(base) and exponent.is_number and exponent.is_negative:
        raise _Refusal("this divides by 0: 0 has no negative power.", position)
    if base.is_number and base.is_negative and exponent.is_number and not exponent.is_integer:
        raise _Refusal("a root or broken power of what is negative is no real number.", position)
    _check_power(base, exponent, position)
    made = base**exponent
    if not exponent.is_integer and made.has(sympy.I):
        raise _Refusal("a root or broken power of what is negative is no real number.", position)
    return made


def _exponential(argument: sympy.Expr, position: int) -> sympy.Expr:
    for term in sympy.Add.make_args(argument):
        if term.is_number:
            _check_size(_real(term) / math.log(10), position)
            continue
        # exp(c*log(x)) becomes x^c at once, and with it the power of every number in x.
        coefficient, rest = term.as_coeff_Mul()
        for factor in sympy.Mul.make_args(rest):
            if isinstance(factor, sympy.log):
                _check_power(factor.args[0], coefficient, position)
    return sympy.exp(argument)


def _check_power(base: sympy.Expr, exponent: sympy.Expr, position: int) -> None:
    """Refuse a power whose numbers would be too large: sympy takes the numbers out of a product and computes them."""
    if not exponent.is_number:
        return
    times = _real(exponent)
    numbers = [factor for factor in sympy.Mul.make_args(base) if factor.is_number and not _is_zero(factor)]
    _check_size(sum(_size(factor) for factor in numbers) * times, position)
    bits = sum(_bits(factor) for factor in numbers)
    if bits * abs(times) > _MOST_BITS or (bits > _MOST_BITS_OF_ROOT and not exponent.is_integer):
        raise _Refusal("this power of a number has too many digits to be computed exactly.", position)


def _measured(made: sympy.Expr, position: int) -> sympy.Expr:
    """Return a sum or product unless the number in front of it has grown out of the range of numbers."""
    coefficient = made.as_coeff_Mul()[0]
    if coefficient.is_Rational and coefficient != 0:
        _check_size(_size(coefficient), position)
    return made


def _check_size(digits: float, position: int) -> None:
    # The tolerance is for the rounding of a logarithm; 1e-300 itself is allowed.
    if digits >= _MOST_DIGITS:
        raise _Refusal("the numbers here give 1e300 or more; a number is below 1e300.", position)
    if digits < -_MOST_DIGITS - 1e-9:
        raise _Refusal("the numbers here give less than 1e-300; a number is 0 or at least 1e-300.", position)


def _is_zero(expr: sympy.Expr) -> bool:
    # Only numbers are asked: to prove a large expression zero can take any time.
    return bool(expr.is_number and expr.is_zero)


def _size(expr: sympy.Expr) -> float:
    """Return log10 of the size of a number that is not 0."""
    if expr.is_Rational:
        return math.log10(abs(int(expr.p))) - math.log10(int(expr.q))
    size = abs(_real(expr))
    return math.log10(size) if size > 0 else -math.inf


def _bits(expr: sympy.Expr) -> float:
    """Return how many bits of an exact number the first power of an expression holds."""
    if expr.is_Rational:
        return float(max(abs(int(expr.p)), int(expr.q)).bit_length()) if abs(expr) != 1 else 0.0
    return _bits(expr.base) * abs(_real(expr.exp)) if expr.is_Pow and expr.exp.is_number else 0.0


def _real(expr: sympy.Expr) -> float:
    """Return a number as a float, infinite where it is too large for one."""
    try:
        return float(expr) if expr.is_Rational else float(sympy.N(expr, 17))
    except OverflowError:
        return math.inf if expr.is_positive else -math.inf


def from_sympy(expr: sympy.Expr) -> Node:
    """Return the tree of a sympy expression.

    Sums, products, powers, exp, log, max, min, rational numbers and symbols; a symbol named ``sigma[65+]`` becomes a
    name with groups. A symbol's absolute value and sign, which sympy makes of ``sqrt(x^2)`` and its slope, are written
    by that root.

    Parameters
    ----------
    expr : sympy.Expr
        Any depth: nothing recurses, and a part that occurs many times is converted once.

    Returns
    -------
    Node
        Equal to `expr` as a function of its names wherever `expr` is real. Numerators before denominators, a number
        common to all terms of a sum in front of it, no leading sign where another order avoids it.

    Raises
    ------
    TypeError
        What has no place in the expression syntax: binary floating-point numbers, imaginary ones, infinities, other
        functions.
    """
    writer = _Writer()
    stack = [expr]
    while stack:
        here = stack[-1]
        missing = [part for part in _needed(here) if part not in writer.nodes] if here not in writer.nodes else None
        if missing:
            stack.extend(missing)
            continue
        stack.pop()
        if missing is not None:
            writer.nodes[here] = writer.node(here)
    return writer.nodes[expr]


def _needed(expr: sympy.Expr) -> list[sympy.Expr]:
    """Return the parts whose trees the tree of `expr` is made of."""
    if expr.is_Add:
        return [part for term in expr.args for part in _parts_ofproduct(term)]
    if expr.is_Mul or expr.is_Pow:
        return _parts_ofproduct(expr)
    return list(expr.args)


def _parts_ofproduct(expr: sympy.Expr) -> list[sympy.Expr]:
    parts: list[sympy.Expr] = []
    for factor in sympy.Mul.make_args(expr):
        if factor.is_Rational:
            continue
        base, exponent = _base_and_exponent(factor)
        parts.append(base)
        if not exponent.is_Rational:
            parts.append(_without_sign(exponent)[1])
    return parts


def _base_and_exponent(factor: sympy.Expr) -> tuple[sympy.Expr, sympy.Expr]:
    # exp(x) is a function in the syntax; sympy would say E to the x.
    return (factor.base, factor.exp) if factor.is_Pow else (factor, sympy.S.One)


def _without_sign(expr: sympy.Expr) -> tuple[int, sympy.Expr]:
    """Return the sign of an expression's leading number, and the expression without it."""
    return (-1, -expr) if expr.as_coeff_Mul()[0].is_negative else (1, expr)


class _Writer:
    """Trees of expressions, and of sums the number in front and the sum without it."""

    def __init__(self) -> None:
        self.nodes: dict[sympy.Expr, Node] = {}
        self.sums: dict[sympy.Expr, tuple[Fraction, Node]] = {}

    def node(self, expr: sympy.Expr) -> Node:
        if expr.is_Rational:
            return product(Fraction(int(expr.p), int(expr.q)), [], [])
        if expr.is_Symbol:
            return name(expr.name)
        if expr.is_Add:
            self.sums[expr] = front, rest = self.sum(expr)
            return rest if front == 1 else product(front, [rest], [])
        if expr.is_Mul or expr.is_Pow:
            return self.product(expr)
        if expr is sympy.E:
            return Call("exp", (number(Fraction(1)),))
        return self.function(expr)

    def function(self, expr: sympy.Expr) -> Node:
        arguments = [self.nodes[argument] for argument in expr.args]
        simple: dict[type, FunctionName] = {sympy.exp: "exp", sympy.log: "log"}
        if expr.func in simple:
            return Call(simple[expr.func], tuple(arguments))
        if isinstance(expr, sympy.Max | sympy.Min):
            function: FunctionName = "max" if isinstance(expr, sympy.Max) else "min"
            arguments = [self.nodes[argument] for argument in sorted(expr.args, key=sympy.default_sort_key)]
            nested = arguments[-1]
            for argument in reversed(arguments[:-1]):
                nested = Call(function, (argument, nested))
            return nested
        if isinstance(expr, sympy.Abs | sympy.sign):
            size = Call("sqrt", (Power(arguments[0], number(Fraction(2))),))
            return size if isinstance(expr, sympy.Abs) else Multiply(((1, arguments[0]), (-1, size)))
        raise TypeError(f"{expr.func.__name__} has no place in the expression syntax")

    def sum(self, expr: sympy.Add) -> tuple[Fraction, Node]:
        """Return the number to put in front of a sum, and the sum without it."""
        split = [term.as_coeff_Mul() for term in expr.args]
        numbers = [Fraction(int(factor.p), int(factor.q)) for factor, _ in split]
        common = common_number(numbers)
        terms: list[tuple[int, Node]] = []
        for size, (_, rest) in zip(numbers, split, strict=True):
            scaled = size / common
            terms.append((1 if scaled > 0 else -1, self.product(rest, abs(scaled))))
        first = next((i for i, (sign, _) in enumerate(terms) if sign > 0), None)
        if first is None:
            return -common, Add(tuple((1, term) for _, term in terms))
        terms.insert(0, terms.pop(first))
        return common, Add(tuple(terms))

    def product(self, expr: sympy.Expr, front: Fraction = Fraction(1)) -> Node:
        """Return the tree of `front` times a product (or a power, or anything else as a product of one)."""
        above: list[Node] = []
        below: list[Node] = []
        roots: dict[Fraction, tuple[list[Node], list[Node]]] = {}
        for factor in sympy.Mul.make_args(expr):
            if factor.is_Rational:
                front *= Fraction(int(factor.p), int(factor.q))
                continue
            base, exponent = _base_and_exponent(factor)
            if not exponent.is_Rational:
                sign, size = _without_sign(exponent)
                (above if sign > 0 else below).append(Power(self.nodes[base], self.nodes[size]))
                continue
            times = Fraction(int(exponent.p), int(exponent.q))
            side = above if times > 0 else below
            if times.denominator > 1 and abs(times) < 1:
                pair = roots.setdefault(abs(times), ([], []))
                pair[0 if times > 0 else 1].append(self.nodes[base])
            elif base.is_Add and abs(times) == 1:
                inner_front, rest = self.sums[base]
                front *= inner_front if times > 0 else 1 / inner_front
                side.append(rest)
            else:
                node = self.nodes[base]
                side.append(node if abs(times) == 1 else Power(node, number(abs(times))))
        for times, (radicands, divisors) in roots.items():
            # Where each root is real, their product is the root of the product; one that stands below only stays there.
            inner, side = (
                (product(Fraction(1), radicands, divisors), above)
                if radicands
                else (product(Fraction(1), divisors, []), below)
            )
            side.append(Call("sqrt", (inner,)) if times == Fraction(1, 2) else Power(inner, number(times)))
        return product(front, above, below)
