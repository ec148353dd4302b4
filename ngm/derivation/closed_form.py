"""A closed form for R0 where one helps, class by class, and the characteristic polynomial.

One type: its entry. Rank one: the trace. Two types, or rank two: the quadratic. Period h: the h-th root of the root of one
h-step block. Several classes: the maximum. What is left has no closed form worth printing, and is said to have none.
"""

from __future__ import annotations

import random
from collections.abc import Callable
from dataclasses import dataclass

import mpmath
import sympy

from ngm.derivation.elimination import Program
from ngm.engine.structure import classes, cyclic_sets, period

__all__ = ["ClassForm", "class_forms", "evaluate", "maximum", "polynomial", "random_values"]

Matrix = list[list[sympy.Expr]]

#: Types of one class up to which the characteristic polynomial is written out.
MOST_IN_POLYNOMIAL = 5
DIGITS = 60


def random_values(expressions: list[sympy.Expr], program: Program, seed: int) -> dict[sympy.Symbol, mpmath.mpf]:
    """Return random positive values for every symbol, those of abbreviations as their lines say."""
    rng = random.Random(seed)
    symbols: set[sympy.Symbol] = set()
    for expression in [*expressions, *program.lines.values()]:
        symbols |= expression.free_symbols
    values = {}
    with mpmath.workdps(DIGITS):
        for symbol in sorted(symbols - set(program.lines), key=str):
            values[symbol] = mpmath.mpf(rng.randrange(10**6, 10**7)) / rng.randrange(10**6, 10**7)
        for symbol, line in program.lines.items():
            values[symbol] = evaluate(line, values)
    return values


def evaluate(expression: sympy.Expr, values: dict[sympy.Symbol, mpmath.mpf]) -> mpmath.mpf:
    """Return the value of an expression to many digits, without executing any text."""
    memo: dict[sympy.Basic, mpmath.mpf] = {}

    def walk(node: sympy.Basic) -> mpmath.mpf:
        if node in memo:
            return memo[node]
        if node.is_Symbol:
            result = values[node]
        elif node.is_Rational:
            result = mpmath.mpf(int(node.p)) / int(node.q)
        elif node.is_Add:
            result = mpmath.fsum(walk(a) for a in node.args)
        elif node.is_Mul:
            result = mpmath.fprod(walk(a) for a in node.args)
        elif node.is_Pow:
            result = mpmath.power(walk(node.args[0]), walk(node.args[1]))
        elif isinstance(node, sympy.exp):
            result = mpmath.exp(walk(node.args[0]))
        elif isinstance(node, sympy.log):
            result = mpmath.log(walk(node.args[0]))
        elif isinstance(node, sympy.Max | sympy.Min):
            parts = [walk(a) for a in node.args]
            result = max(parts) if isinstance(node, sympy.Max) else min(parts)
        else:
            result = mpmath.mpmathify(node.evalf(DIGITS))
        memo[node] = result
        return result

    with mpmath.workdps(DIGITS):
        return walk(expression)


@dataclass(frozen=True, slots=True)
class ClassForm:
    """One class of types of K: its members, the rule that gave its reproduction number, and that number or None."""

    members: tuple[int, ...]
    rule: str
    formula: sympy.Expr | None
    period: int | None


def class_forms(K: Matrix, program: Program, tidy: Callable[[sympy.Expr], sympy.Expr]) -> list[ClassForm]:
    """Return the classes of K by structure, in topological order, with the closed form of each where there is one."""
    import numpy as np

    m = len(K)
    pattern = np.array([[K[i][j] != 0 for j in range(m)] for i in range(m)], dtype=bool).reshape(m, m)
    values = [random_values([e for row in K for e in row], program, seed) for seed in (11, 12)]
    out = []
    for members in classes(pattern):
        kinds = [int(k) for k in members]
        h = period(pattern, members)
        if h is None:
            out.append(ClassForm(tuple(kinds), "no infection within the class", sympy.Integer(0), None))
            continue
        if h > 1:
            sets = [[int(k) for k in part] for part in cyclic_sets(pattern, members)]
            block = _once_round(K, sets)
            rule, root = _root(block, values, tidy)
            formula = None if root is None else tidy(root ** sympy.Rational(1, h))
            out.append(ClassForm(tuple(kinds), f"period {h}: {rule} for {h} steps", formula, h))
        else:
            rule, formula = _root([[K[i][j] for j in kinds] for i in kinds], values, tidy)
            out.append(ClassForm(tuple(kinds), rule, formula, h))
    return out


def _once_round(K: Matrix, sets: list[list[int]]) -> Matrix:
    """Return the block of K^h on the smallest of the h sets of types through which a cyclic class passes in turn."""
    h = len(sets)
    start = min(range(h), key=lambda s: len(sets[s]))
    block: Matrix | None = None
    for step in range(h):
        before, after = sets[(start + step) % h], sets[(start + step + 1) % h]
        if not any(K[i][j] != 0 for i in after for j in before):  # the sets may be listed against the direction
            return _once_round(K, sets[::-1])
        factor = [[K[i][j] for j in before] for i in after]
        block = factor if block is None else _multiply(factor, block)
    assert block is not None
    return block


def _multiply(A: Matrix, B: Matrix) -> Matrix:
    inner = range(len(B))
    return [[sympy.Add(*(row[k] * B[k][j] for k in inner)) for j in range(len(B[0]))] for row in A]


def _root(
    B: Matrix, values: list[dict[sympy.Symbol, mpmath.mpf]], tidy: Callable[[sympy.Expr], sympy.Expr]
) -> tuple[str, sympy.Expr | None]:
    n = len(B)
    if n == 1:
        return "one type", tidy(B[0][0])
    rank = max(_rank(B, point) for point in values)
    trace = sympy.Add(*(B[i][i] for i in range(n)))
    if rank == 1:
        return "rank one", tidy(trace)
    if n == 2:
        (a, b), (c, d) = B
        if a == 0 and d == 0:
            return "two types", tidy(sympy.sqrt(b * c))
        inner = tidy((a - d) ** 2 + 4 * b * c) if a != d else None
        root = tidy(sympy.sqrt(b * c)) if inner is None else sympy.sqrt(inner) / 2
        return "two types", (a + d) / 2 + root if inner is not None else a + root
    if rank == 2:
        square = sympy.Add(*(B[i][j] * B[j][i] for i in range(n) for j in range(n)))
        return "rank two", trace / 2 + sympy.sqrt(2 * square - trace**2) / 2
    return "no closed form", None


def _rank(B: Matrix, point: dict[sympy.Symbol, mpmath.mpf]) -> int:
    """Return the rank at a random point by elimination with complete pivoting, in 60 digits; 3 stands for 3 or more."""
    with mpmath.workdps(DIGITS):
        rows = [[evaluate(entry, point) for entry in row] for row in B]
        size = max(abs(v) for row in rows for v in row)
        for rank in range(3):
            pivot, i, j = max((abs(v), i, j) for i, row in enumerate(rows) for j, v in enumerate(row))
            if pivot <= size * mpmath.mpf(10) ** -40:
                return rank
            chosen = rows.pop(i)
            if not rows:
                return rank + 1
            rows = [[v - row[j] / chosen[j] * c for v, c in zip(row, chosen, strict=True)] for row in rows]
    return 3


def maximum(forms: list[ClassForm]) -> sympy.Expr | None:
    """Return R0 as the largest of the classes' formulas; None where one class has none."""
    found: list[sympy.Expr] = []
    for form in forms:
        if form.formula is None:
            return None
        if form.formula != 0 and form.formula not in found:
            found.append(form.formula)
    if not found:
        return sympy.Integer(0)
    return found[0] if len(found) == 1 else sympy.Max(*found, evaluate=False)


def polynomial(
    K: Matrix,
    forms: list[ClassForm],
    x: sympy.Symbol,
    program: Program,
) -> sympy.Expr | None:
    """Return det(x I - K) as a product over classes; None where a class is too large to write out.

    Entries longer than a few symbols get abbreviations, so that the polynomial shows its form.
    """
    factors: list[sympy.Expr] = []
    for form in forms:
        n = len(form.members)
        if form.period is None:
            factors.append(x)
            continue
        B = [[K[i][j] for j in form.members] for i in form.members]
        if n == 1:
            factors.append(x - B[0][0])
        elif form.rule == "rank one" and form.formula is not None:
            factors.append(x ** (n - 1) * (x - form.formula))
        elif n > MOST_IN_POLYNOMIAL:
            return None
        else:
            named = [
                [
                    program.name(e, f"entry of K: row {i + 1}, column {j + 1} of its class", "k", least=4)
                    for j, e in enumerate(row)
                ]
                for i, row in enumerate(B)
            ]
            # Worked out with one symbol an entry: fractions in a determinant are put over common denominators for ever.
            meaning: dict[sympy.Symbol, sympy.Expr] = {}
            plain = sympy.zeros(n, n)
            for i, row in enumerate(named):
                for j, entry in enumerate(row):
                    if entry != 0:
                        plain[i, j] = sympy.Dummy(f"k{i}{j}")
                        meaning[plain[i, j]] = entry
            coefficients = plain.charpoly(x).all_coeffs()
            total = sympy.Add(*(c * x ** (n - k) for k, c in enumerate(coefficients)))
            factors.append(total.xreplace(meaning))
    return sympy.Mul(*factors) if factors else sympy.Integer(1)
