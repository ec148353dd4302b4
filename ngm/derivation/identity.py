"""Whether two expressions are one and the same for all values of their names: a proof, and not a trial at points."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import sympy

from ngm.expression.symbolic import symbol, to_sympy
from ngm.expression.tree import Name, Node, walk

__all__ = ["identical"]

#: Operations past which the expanded difference would fill the memory.
MOST_OPERATIONS = 4000


def identical(
    first: Node, second: Node, meanings: Mapping[str, Node] | None = None, any_sign: Sequence[str] = ()
) -> bool:
    """Return True where first - second is proven to be 0; False where it is not, or where no proof was found.

    The difference is written as one fraction and its numerator expanded: for rational expressions that decides. Roots are
    brought to one form first (equal radicands, then common factors out of them), and a power of a maximum becomes a
    maximum of powers.

    Parameters
    ----------
    first, second : Node
        Without `Apply` and `Total`.
    meanings : mapping of str to Node
        Names that stand for an expression: definitions, states, parameters that follow others.
    any_sign : sequence of str
        Names of which the sign is not known; all others are taken to be positive.

    Examples
    --------
    >>> from ngm.expression.parse import parse
    >>> identical(parse("a/b + c"), parse("(a + b*c)/b"))
    True
    >>> identical(parse("sqrt(a^2*b)"), parse("a*sqrt(b)")), identical(parse("sqrt(a)"), parse("a"))
    (True, False)
    """
    meanings = meanings or {}
    made: dict[str, sympy.Expr] = {}

    def lookup(name: Name) -> sympy.Expr:
        return made[name.item] if name.item in made else symbol(name.item, name.item in any_sign)

    for item in _in_order(meanings):
        made[item] = to_sympy(meanings[item], lookup)
    difference = to_sympy(first, lookup) - to_sympy(second, lookup)
    if difference == 0:
        return True
    if sympy.count_ops(difference) > MOST_OPERATIONS:
        return False
    if difference.is_rational_function():
        return _is_zero(difference)
    return _is_zero(_joined(difference)) or _is_zero(_regular(difference))


def _is_zero(expression: sympy.Expr) -> bool:
    numerator, _ = sympy.fraction(sympy.together(expression))
    return bool(sympy.expand(numerator) == 0)


def _in_order(meanings: Mapping[str, Node]) -> list[str]:
    """Return the names with a meaning, each after those that it uses; what goes in a circle stands for itself."""
    waiting = {item: {node.item for node in walk(tree) if isinstance(node, Name)} for item, tree in meanings.items()}
    done: list[str] = []
    while ready := [item for item, used in waiting.items() if not used & set(waiting)]:
        done += ready
        for item in ready:
            del waiting[item]
    return done


def _joined(expression: sympy.Expr) -> sympy.Expr:
    """Return the expression with roots of one radicand, or of a multiple of it, as one root."""
    kept: list[sympy.Expr] = []
    joined: dict[sympy.Expr, sympy.Expr] = {}
    roots = [power for power in expression.atoms(sympy.Pow) if power.exp.is_Rational and not power.exp.is_Integer]
    for root in sorted(roots, key=sympy.count_ops):
        for other in kept:
            times = _multiple(root.base, other)
            if times is not None:
                joined[root] = times**root.exp * other**root.exp
                break
        else:
            kept.append(root.base)
    return expression.xreplace(joined)


def _multiple(first: sympy.Expr, second: sympy.Expr) -> sympy.Rational | None:
    """Return the positive number that `first` is times `second`, for all values; None where there is none."""
    if first == second:
        return sympy.Integer(1)
    names = sorted(first.free_symbols | second.free_symbols, key=str)
    ratios = set()
    for start in (2, 40):
        # at whole numbers, so that a rational ratio is exact; different ones, so that nothing cancels by chance
        point = {name: sympy.Integer(sympy.prime(start + place)) for place, name in enumerate(names)}
        below = second.xreplace(point)
        ratios.add(first.xreplace(point) / below if below != 0 else sympy.Integer(0))
    ratio = ratios.pop()
    if ratios or not (ratio.is_Rational and ratio > 0):
        return None
    return ratio if _is_zero(first - ratio * second) else None


def _regular(expression: sympy.Expr) -> sympy.Expr:
    """Return the expression with radicands in factors and powers of a maximum inside it."""

    def power(base: sympy.Expr, exponent: sympy.Expr) -> sympy.Expr:
        if isinstance(base, sympy.Max) and exponent.is_Rational and exponent > 0:
            return sympy.Max(*(_factored(argument) ** exponent for argument in base.args))
        return _factored(base) ** exponent if exponent.is_Rational and not exponent.is_Integer else base**exponent

    def extreme(*arguments: sympy.Expr) -> sympy.Expr:
        return sympy.Max(*(_factored(argument) for argument in arguments))

    return expression.replace(sympy.Pow, power).replace(sympy.Max, extreme)


def _factored(expression: sympy.Expr) -> sympy.Expr:
    return sympy.factor(sympy.together(expression))
