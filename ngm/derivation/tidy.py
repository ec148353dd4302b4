"""Shorter forms of an expression that are worth their time: no general simplification of anything large."""

from __future__ import annotations

from contextlib import suppress
from functools import lru_cache

import sympy

__all__ = ["tidy"]

#: Operations up to which an expression is factored over its polynomials.
MOST_FACTORED = 50
#: Operations up to which common factors of a sum are taken out.
MOST_COLLECTED = 1500


@lru_cache(maxsize=4096)
def tidy(expression: sympy.Expr) -> sympy.Expr:
    """Return the shortest of a few equal forms: as it is, common factors taken out, factored.

    Sums of products keep their form where that is shorter: positive factors are what a reader checks, and an expanded
    product is never shorter.
    """
    if expression.is_Symbol or expression.is_Number:
        return expression
    size = int(sympy.count_ops(expression))
    if size > MOST_COLLECTED:
        return expression
    best, least = expression, _length(expression)
    if expression.has(sympy.Add):
        for form in _forms(expression, size):
            length = _length(form)
            if length < least:
                best, least = form, length
    return _turned(best)


def _turned(expression: sympy.Expr) -> sympy.Expr:
    """Return a product without a minus sign in front where one of its sums can take it: a/(d - c), not -a/(c - d)."""
    if not (expression.is_Mul and expression.as_coeff_Mul()[0].is_negative):
        return expression
    for factor in expression.args:
        base, power = factor.as_base_exp()
        negative = base.is_Add and any(term.as_coeff_Mul()[0].is_negative for term in base.args)
        if negative and power.is_Integer and power.is_odd:
            turned = sympy.Add(*(-term for term in base.args))
            return sympy.Mul(-1, expression / factor, turned**power)
    return expression


def _length(expression: sympy.Expr) -> int:
    """Return the operations, with something added for each product inside a long sum: an expanded product reads badly."""
    length = int(sympy.count_ops(expression))
    for total in expression.atoms(sympy.Add):
        products = sum(
            1
            for term in total.args
            if len([f for f in sympy.Mul.make_args(term) if not f.is_Number]) > 1 or term.is_Pow
        )
        if products > 3:
            length += 4 * products
    return length


def _forms(expression: sympy.Expr, size: int) -> list[sympy.Expr]:
    out = []
    if expression.is_Add or size <= MOST_FACTORED:
        out.append(sympy.factor_terms(expression))
    # Only where a sum stands both above and below a fraction can something cancel that sympy has not cancelled by itself.
    if size <= MOST_FACTORED and len(expression.free_symbols) <= 12 and _may_cancel(expression):
        with suppress(sympy.PolynomialError):
            out.append(sympy.factor(expression))
    return out


def _may_cancel(expression: sympy.Expr) -> bool:
    below = [power for power in expression.atoms(sympy.Pow) if power.exp.is_negative and power.base.is_Add]
    return bool(below) and len(expression.atoms(sympy.Add)) > len({power.base for power in below})
