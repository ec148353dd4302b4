"""The coefficients on the centre manifold as formulas, for small models without groups.

The infection-free state is solved for, the value of what is moved follows from det J = 0, the vectors from the adjugate of J.
Everything is checked against the numbers by whoever asks; a formula too long to help is left out.

Source: Castillo-Chavez & Song (2004) Math. Biosci. Eng. 1:361-404, theorem 4.1 (from memory).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import sympy

from ngm.expression.symbolic import symbol, text, to_sympy
from ngm.expression.tree import Name, Node

__all__ = ["bifurcation_forms"]

#: Operations past which a formula is no help to a reader.
MOST_OPERATIONS = 90


def bifurcation_forms(
    net: Sequence[Node],
    states: Sequence[str],
    infected: int,
    moved: str,
    meanings: Mapping[str, Node],
    values: Mapping[str, float],
) -> tuple[str | None, str | None]:
    """Return a and b where the number is 1, in the expression syntax; None for one that is too long or was not found.

    Parameters
    ----------
    net : sequence of Node
        Net flow of each state, ungrouped; `states` are their names, the infected ones first.
    moved : str
        The name of what is moved; it stands in neither formula.
    meanings : mapping of str to Node
        Definitions, and parameters that follow others.
    values : mapping of str to float
        Of the states without infection and of `moved`, where the number is 1: which of several solutions is meant.
    """
    known: dict[str, sympy.Expr] = {}

    def lookup(name: Name) -> sympy.Expr:
        if name.name in meanings:
            if name.name not in known:
                known[name.name] = to_sympy(meanings[name.name], lookup)
            return known[name.name]
        return symbol(name.name, name.name in states)  # a state may be 0

    f = sympy.Matrix([to_sympy(tree, lookup) for tree in net])
    x = [symbol(name, True) for name in states]
    p = symbol(moved)
    numbers = {name: value for name, value in values.items() if name not in states and name != moved}
    rest = _rest(f, x, infected, values, numbers)
    if rest is None:
        return None, None
    at = dict(zip(x, rest, strict=True))
    J = f.jacobian(x)
    block = J[:infected, :infected].subs(at)
    critical = _chosen(sympy.solve(sympy.numer(sympy.together(block.det())), p), values[moved], numbers)
    if critical is None:
        return None, None
    adjugate = block.subs(p, critical).adjugate().applyfunc(sympy.cancel)
    k = next(((i, j) for i in range(infected) for j in range(infected) if adjugate[i, j] != 0), None)
    if k is None:
        return None, None
    w, v = adjugate[:, k[1]], adjugate[k[0], :]
    w = w / sum(w)
    v = v / (v * w)[0]
    rows = J[infected:, :].subs(at).subs(p, critical)
    shifts = sympy.zeros(0, 1)
    moves = sympy.zeros(0, 1)
    if len(x) > infected:
        inner = rows[:, infected:]
        shifts = -inner.LUsolve(rows[:, :infected] * w)
        moves = -inner.LUsolve(sympy.diff(f[infected:, :], p).subs(at).subs(p, critical))
    along = [*w, *shifts]
    shift = [sympy.Integer(0)] * infected + list(moves)
    a = sympy.Integer(0)
    b = sympy.Integer(0)
    for i in range(infected):
        hessian = sympy.hessian(f[i], x)
        mixed = sympy.Matrix([sympy.diff(f[i], y, p) for y in x])
        second = hessian.subs(at).subs(p, critical)
        direction = sympy.Matrix(along)
        a += v[i] * (direction.T * second * direction)[0]
        b += v[i] * (
            (direction.T * second * sympy.Matrix(shift))[0] + (direction.T * mixed.subs(at).subs(p, critical))[0]
        )
    return _told(a), _told(b)


def _told(expression: sympy.Expr) -> str | None:
    made = sympy.factor(sympy.together(expression))
    return text(made) if sympy.count_ops(made) <= MOST_OPERATIONS else None


def _rest(
    f: sympy.Matrix, x: Sequence[sympy.Symbol], infected: int, values: Mapping[str, float], numbers: Mapping[str, float]
) -> list[sympy.Expr] | None:
    """Return the infection-free state as formulas, that one of several which has these values."""
    free = list(x[infected:])
    nobody = dict.fromkeys(x[:infected], sympy.Integer(0))
    equations = [sympy.numer(sympy.together(expression.subs(nobody))) for expression in f[infected:, :]]
    found = sympy.solve(equations, free, dict=True) if free else [{}]
    for one in found:
        if set(one) != set(free):
            continue
        state = [one[y] for y in free]
        near = True
        for y, formula in zip(free, state, strict=True):
            value = formula.subs({symbol(name): v for name, v in {**numbers, **values}.items()})
            near = (
                near
                and bool(value.is_number)
                and abs(complex(value) - values[str(y)]) <= 1e-6 * (1 + abs(values[str(y)]))
            )
        if near:
            return [*nobody.values(), *state]
    return None


def _chosen(found: Sequence[sympy.Expr], wanted: float, numbers: Mapping[str, float]) -> sympy.Expr | None:
    for one in found:
        value = one.subs({symbol(name): v for name, v in numbers.items()})
        if value.is_number and abs(complex(value) - wanted) <= 1e-6 * (1 + abs(wanted)):
            return one
    return None
