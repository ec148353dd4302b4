"""The infection-free state in symbols, block by block.

A block in which the net flow is affine in its own unknowns is solved like V: by elimination without subtraction, inflow by
inflow. Another block is brought down to one unknown, whose equation is factored; of its roots the one is taken that has
the value found numerically. Where this does not lead to a formula there is none, and the numbers stand alone.
"""

from __future__ import annotations

from collections.abc import Mapping

import mpmath
import numpy as np
import sympy

from ngm.derivation.closed_form import evaluate, random_values
from ngm.derivation.elimination import WRITTEN_OUT, Program, residence_times
from ngm.derivation.expand import net_flow
from ngm.derivation.network import Network, network
from ngm.derivation.rest import RestSystem
from ngm.derivation.space import Array
from ngm.derivation.sympy_algebra import SYMBOLS
from ngm.derivation.template import Template
from ngm.derivation.tidy import tidy
from ngm.engine.structure import classes
from ngm.expression.symbolic import symbol

__all__ = ["solve_rest"]

#: The largest polynomial equation that is factored, in operations.
MOST_OPERATIONS = 2000


def solve_rest(
    template: Template,
    names: Mapping[str, Array],
    matrices: Mapping[str, Array],
    numbers: Mapping[str, float],
    values: Mapping[str, float],
    program: Program,
) -> dict[str, Array] | None:
    """Return every uninfected compartment as expressions over the space, or None where there is no formula.

    Parameters
    ----------
    names, matrices : mapping
        Parameters and matrices as symbols.
    numbers : mapping of str to float
        The state at the scenario's values, by copy, which tells solutions apart.
    values : mapping of str to float
        Parameters in force, by item, for the same purpose.
    program : Program
        Takes abbreviations, where many compartments exchange members.
    """
    labels = template.items_of(template.free)
    unknowns = [symbol(label) for label in labels]
    system = _SymbolicRest(template, names, matrices)
    x = np.empty((len(unknowns), 1), dtype=object)
    x[:, 0] = unknowns
    solution: dict[sympy.Symbol, sympy.Expr] = {}
    if unknowns:
        if template.rest_walker.by_value or template.rest_walker.selectors:
            return None
        found = _solve(template, system, x, unknowns, numbers, values, program)
        if found is None:
            return None
        solution = found
    solved = np.empty((len(unknowns), 1), dtype=object)
    solved[:, 0] = [solution[u] for u in unknowns]
    return system.state(solved)


class _SymbolicRest(RestSystem):
    """The equations at rest, with symbols for parameters."""

    def __init__(self, template: Template, names: Mapping[str, Array], matrices: Mapping[str, Array]) -> None:
        super().__init__(template, SYMBOLS, matrices)
        self.base = template.evaluator(SYMBOLS, {}, names=names, matrices=matrices)


def _solve(
    template: Template,
    system: RestSystem,
    x: Array,
    unknowns: list[sympy.Symbol],
    numbers: Mapping[str, float],
    values: Mapping[str, float],
    program: Program,
) -> dict[sympy.Symbol, sympy.Expr] | None:
    evaluator = system.evaluator(x)
    arrows = template.rest_arrows
    entering, leaving = net_flow(template, evaluator, arrows, template.free)
    net = [a - b for a, b in zip(entering[:, 0], leaving[:, 0], strict=True)]
    graph = network(template, evaluator, arrows, template.free)
    n = len(unknowns)
    pattern = np.array([[i == j or net[i].has(unknowns[j]) for j in range(n)] for i in range(n)], dtype=bool)
    solution: dict[sympy.Symbol, sympy.Expr] = {}
    for members in classes(pattern):
        block = [int(k) for k in members]
        own = [unknowns[k] for k in block]
        equations = [net[k].xreplace(solution) for k in block]
        slopes = [[sympy.diff(equation, u) for u in own] for equation in equations]
        if any(slope.has(u) for row in slopes for slope in row for u in own):
            found = _curved(equations, own, [numbers.get(str(u)) for u in own], values)
        else:
            found = _affine(graph, block, own, equations, solution, program)
        if found is None:
            return None
        for u, value in found.items():
            solution[u] = tidy(value)
    return solution


def _affine(
    graph: Network,
    block: list[int],
    own: list[sympy.Symbol],
    equations: list[sympy.Expr],
    solution: Mapping[sympy.Symbol, sympy.Expr],
    program: Program,
) -> dict[sympy.Symbol, sympy.Expr] | None:
    """Solve an affine block by elimination: stays times inflows, so that the formula has no needless minus sign."""
    zero = dict.fromkeys(own, sympy.Integer(0))
    inflow = [tidy(equation.xreplace(zero)) for equation in equations]
    n = len(block)
    inside = np.ix_(block, block)

    def known(values: Array) -> Array:
        out = np.empty(values.shape, dtype=object)
        out.ravel()[:] = [v.xreplace(dict(solution)) for v in values.ravel()]
        return out

    if all(entry == 0 for entry in inflow):
        return zero
    outside = [k for k in range(len(graph.exits)) if k not in block]
    exits = graph.exits[block] + (graph.moves[np.ix_(outside, block)].sum(axis=0) if outside else 0)
    part = Network(known(graph.moves[inside]), known(graph.sources[inside]), known(exits), known(graph.stray[inside]))
    if any(entry != 0 for entry in part.stray.ravel()):
        return None
    columns = [k for k in range(n) if inflow[k] != 0]
    labels = tuple(str(u) for u in own)
    stays = residence_times(part, columns, program, labels, tidy)
    out = {}
    for k, u in enumerate(own):
        total = sympy.Add(*(inflow[j] * stays[j].get(k, 0) for j in columns))
        out[u] = program.name(total, f"{u} without infection") if n > WRITTEN_OUT else total
    return out if _at_rest(equations, out, program) else None


def _at_rest(equations: list[sympy.Expr], found: dict[sympy.Symbol, sympy.Expr], program: Program) -> bool:
    """Return whether the equations hold at a random point: the network counts individuals, the equations are the judge."""
    for seed in (5, 6):
        values = random_values([*equations, *found.values()], program, seed)
        values.update({u: evaluate(expression, values) for u, expression in found.items()})
        for equation in equations:
            terms = [evaluate(term, values) for term in sympy.Add.make_args(equation)]
            if abs(mpmath.fsum(terms)) > mpmath.mpf(10) ** -12 * mpmath.fsum(abs(t) for t in terms):
                return False
    return True


def _curved(
    equations: list[sympy.Expr],
    own: list[sympy.Symbol],
    numbers: list[float | None],
    values: Mapping[str, float],
) -> dict[sympy.Symbol, sympy.Expr] | None:
    """Solve a block that is not affine by bringing it down to one unknown, and take the root that was found in numbers."""
    wanted = dict(zip(own, numbers, strict=True))
    if all(value == 0 for value in numbers):
        return dict.fromkeys(own, sympy.Integer(0))
    substitutions: list[tuple[sympy.Symbol, sympy.Expr]] = []
    left, equations = list(own), [_numerator(e, wanted) for e in equations]
    while len(left) > 1:
        step = _linear_unknown(equations, left, wanted)
        if step is None:
            return None
        index, unknown, expression = step
        substitutions.append((unknown, expression))
        left.remove(unknown)
        equations = [_numerator(e.subs(unknown, expression), wanted) for k, e in enumerate(equations) if k != index]
    (last,) = left
    root = _matching_root(equations[0], last, wanted[last], values)
    if root is None:
        return None
    out = {last: root}
    for unknown, expression in reversed(substitutions):
        out[unknown] = tidy(expression.xreplace(out))
    return out


def _numerator(expression: sympy.Expr, wanted: Mapping[sympy.Symbol, float | None]) -> sympy.Expr:
    """Return the numerator, without factors that are unknowns known not to be 0."""
    numerator = sympy.fraction(sympy.together(expression))[0]
    for unknown, number in wanted.items():
        if number:
            while numerator != 0 and numerator.xreplace({unknown: sympy.Integer(0)}) == 0:
                numerator = sympy.cancel(numerator / unknown)
    return numerator


def _linear_unknown(
    equations: list[sympy.Expr], left: list[sympy.Symbol], wanted: Mapping[sympy.Symbol, float | None]
) -> tuple[int, sympy.Symbol, sympy.Expr] | None:
    """Return an equation that is linear in an unknown which is not 0, solved for it: the shortest such."""
    found: list[tuple[int, int, sympy.Symbol, sympy.Expr]] = []
    for index, equation in enumerate(equations):
        for unknown in left:
            if wanted[unknown] == 0:
                if sympy.expand(equation.xreplace({unknown: sympy.Integer(0)})) == 0:
                    found.append((0, index, unknown, sympy.Integer(0)))
                continue
            slope = sympy.expand(sympy.diff(equation, unknown))
            if slope != 0 and not slope.has(unknown):
                rest = equation.xreplace({unknown: sympy.Integer(0)})
                solved = tidy(-rest / slope)
                found.append((int(sympy.count_ops(solved)) + 1, index, unknown, solved))
    if not found:
        return None
    _, index, unknown, solved = min(found, key=lambda item: (item[0], item[1]))
    return index, unknown, solved


def _matching_root(
    equation: sympy.Expr, unknown: sympy.Symbol, number: float | None, values: Mapping[str, float]
) -> sympy.Expr | None:
    """Return the root of a factored polynomial equation (factors of degree one and two) that is the wanted one.

    A single non-zero root needs no choice; several are told apart by their numbers at the scenario's values.
    """
    if number == 0:
        return sympy.Integer(0)
    if int(sympy.count_ops(equation)) > MOST_OPERATIONS:
        return None
    roots: list[sympy.Expr] = []
    for factor, _ in sympy.factor_list(equation)[1]:
        if not factor.has(unknown):
            continue
        try:
            polynomial = sympy.Poly(factor, unknown)
        except sympy.PolynomialError:
            return None
        if polynomial.degree() == 1:
            a, b = polynomial.all_coeffs()
            roots.append(tidy(-b / a))
        elif polynomial.degree() == 2:
            a, b, c = polynomial.all_coeffs()
            inner = sympy.sqrt(tidy(b**2 - 4 * a * c))
            roots += [tidy(-b / (2 * a)) + inner / (2 * a), tidy(-b / (2 * a)) - inner / (2 * a)]
        else:
            return None
    roots = [root for root in roots if root != 0]
    if len(roots) == 1:
        return roots[0]
    return None if number is None else _nearest(roots, number, values)


def _nearest(roots: list[sympy.Expr], number: float, values: Mapping[str, float]) -> sympy.Expr | None:
    """Return the root that has this number at the scenario's values."""
    chosen, best = None, 1e-6 * abs(number)
    for root in roots:
        try:
            at = {s: mpmath.mpf(values[str(s)]) for s in root.free_symbols}
            gap = abs(complex(evaluate(root, at)) - number)
        except (KeyError, ZeroDivisionError):
            continue
        if gap < best:
            chosen, best = root, gap
    return chosen
