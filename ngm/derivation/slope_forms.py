"""How a closed form answers to each parameter: its derivative and elasticity as formulas."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from contextlib import suppress

import mpmath
import sympy

from ngm.derivation.closed_form import evaluate
from ngm.derivation.tidy import tidy
from ngm.expression.symbolic import symbol, text, to_sympy
from ngm.expression.tree import Name, Node

__all__ = ["slope_forms"]

#: Operations past which a formula is no help to a reader.
MOST_OPERATIONS = 120
#: Operations up to which numerator and denominator are multiplied out to see what cancels.
MOST_CANCELLED = 300


def slope_forms(
    formula: Node,
    meanings: Mapping[str, Node],
    wanted: Sequence[str],
    values: Mapping[str, float],
    any_sign: Sequence[str] = (),
) -> dict[str, tuple[str, str]]:
    """Return dR/dp and (p/R) dR/dp of a formula R, in the expression syntax; formulas too long to help are left out.

    Parameters
    ----------
    formula : Node
        Without `Apply` and `Total`.
    meanings : mapping of str to Node
        Parameters that follow others: what they are; derivatives go through them, and they keep their names in the result.
    wanted : sequence of str
        The parameters p.
    values : mapping of str to float
        Of every name: of a maximum the side that is in force there is the one that moves.
    any_sign : sequence of str
        Names of which the sign is not known; all others are taken to be positive.

    Examples
    --------
    >>> from ngm.expression.parse import parse
    >>> slope_forms(parse("beta*sigma/((sigma + mu)*mu)"), {}, ["sigma"], {"beta": 1.0, "sigma": 1.0, "mu": 1.0})
    {'sigma': ('beta/(mu + sigma)^2', 'mu/(mu + sigma)')}
    """

    def lookup(name: Name) -> sympy.Expr:
        return symbol(name.item, name.item in any_sign)

    numbers = {symbol(item, item in any_sign): mpmath.mpf(value) for item, value in values.items()}
    R = _in_force(to_sympy(formula, lookup), numbers)
    follow = {
        symbol(item, item in any_sign): _in_force(to_sympy(tree, lookup), numbers) for item, tree in meanings.items()
    }
    out: dict[str, tuple[str, str]] = {}
    for item in wanted:
        p = symbol(item, item in any_sign)
        slope = _total(R, p, follow)
        first = _shortest(slope)
        second = sympy.Integer(0)
        if R != 0 and slope != 0:
            # The logarithm of a product or a root is a sum, of which most terms do not move with p.
            by_logarithm = _shortest(p * _total(sympy.expand_log(sympy.log(R)), p, follow))
            second = min(by_logarithm, _shortest(p * slope / R), key=sympy.count_ops)
        if max(sympy.count_ops(first), sympy.count_ops(second)) <= MOST_OPERATIONS:
            out[item] = text(first), text(second)
    return out


def _in_force(expression: sympy.Expr, numbers: Mapping[sympy.Symbol, mpmath.mpf]) -> sympy.Expr:
    """Return the expression with each maximum and minimum replaced by the side that is in force."""

    def side(largest: bool, arguments: tuple[sympy.Expr, ...]) -> sympy.Expr:
        ranked = sorted(arguments, key=lambda part: evaluate(part, dict(numbers)))
        return ranked[-1 if largest else 0]

    out = expression.replace(sympy.Max, lambda *parts: side(True, parts))
    return out.replace(sympy.Min, lambda *parts: side(False, parts))


def _total(expression: sympy.Expr, p: sympy.Symbol, follow: Mapping[sympy.Symbol, sympy.Expr]) -> sympy.Expr:
    """Return the derivative by p, through what follows it."""
    slope = sympy.diff(expression, p)
    for name in sorted(expression.free_symbols & set(follow), key=str):
        slope += sympy.diff(expression, name) * _total(follow[name], p, follow)
    return slope


def _shortest(expression: sympy.Expr) -> sympy.Expr:
    forms = [tidy(expression)]
    if expression.is_rational_function() and sympy.count_ops(expression) <= MOST_CANCELLED:
        with suppress(sympy.PolynomialError):
            forms.append(tidy(sympy.factor(expression)))
    return min(forms, key=sympy.count_ops)
