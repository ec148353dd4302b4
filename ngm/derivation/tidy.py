"""Shorter forms of an expression that are worth their time: no general simplification of anything large."""

from __future__ import annotations

import sympy

__all__ = ["tidy"]

#: Operations up to which an expression is factored over its polynomials.
MOST_FACTORED = 70
#: Operations up to which common factors of a sum are taken out.
MOST_COLLECTED = 1500


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
    best, least = expression, size
    if expression.has(sympy.Add):
        for form in _forms(expression, size):
            count = int(sympy.count_ops(form))
            if count < least:
                best, least = form, count
    return best


def _forms(expression: sympy.Expr, size: int) -> list[sympy.Expr]:
    out = []
    if expression.is_Add or size <= MOST_FACTORED:
        out.append(sympy.factor_terms(expression))
    if size <= MOST_FACTORED and len(expression.free_symbols) <= 12:
        try:
            out.append(sympy.factor(expression))
        except sympy.PolynomialError:
            pass
    return out
