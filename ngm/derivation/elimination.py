"""V^-1 as a table of expected residence times, by state elimination without a subtraction.

Entry (i, j) of V^-1 is the expected time spent in i by one who enters at j. States are taken in the order of the strongly
connected components of the transitions; inside a component they are eliminated one by one, and the diagonal is always
the sum of what leaves (exits and moves), never a difference. Where individuals are conserved every expression stays
positive. A cycle through a source (births of infected, shedding that comes back) needs "loss - gain", the only minus sign.

Sources: Grassmann, Taksar & Heyman (1985) Oper. Res. 33:1107-1116 (elimination without subtraction); Sheskin (1985) Oper.
Res. 33:228-235 (both from memory).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import sympy

from ngm.derivation.network import Network

__all__ = ["Program", "residence_times"]

#: Components of up to this many states are eliminated in one formula. Up to `LOOP` states with few moves among them (a
#: loop or two) are solved by cofactors, which people write: one determinant, "product of the losses - loops". Larger
#: ones get an abbreviation for each step.
WRITTEN_OUT = 2
LOOP = 4

ZERO = sympy.Integer(0)


@dataclass
class Program:
    """Abbreviations in the order in which they are defined: a straight-line program."""

    free_name: Callable[[str], sympy.Symbol]
    lines: dict[sympy.Symbol, sympy.Expr] = field(default_factory=dict)
    about: dict[sympy.Symbol, str] = field(default_factory=dict)
    counts: dict[str, int] = field(default_factory=dict)

    def name(self, expression: sympy.Expr, about: str, letter: str = "D", *, least: int = 2) -> sympy.Expr:
        """Return a symbol for the expression, or the expression itself where it has fewer than `least` operations."""
        if expression.is_Symbol or expression.is_Number or int(sympy.count_ops(expression)) < least:
            return expression
        for symbol, known in self.lines.items():
            if known == expression:
                return symbol
        self.counts[letter] = self.counts.get(letter, 0) + 1
        symbol = self.free_name(f"{letter}{self.counts[letter]}")
        self.lines[symbol] = expression
        self.about[symbol] = about
        return symbol

    def written_out(self, expression: sympy.Expr, most: int) -> sympy.Expr | None:
        """Return the expression without abbreviations, None where it would have more than `most` operations."""
        if not self.lines:
            return expression
        sizes: dict[sympy.Symbol, int] = {}

        def size(part: sympy.Expr) -> int:
            total = int(sympy.count_ops(part))
            for symbol in part.free_symbols & set(self.lines):
                total += int(part.count(symbol)) * sizes[symbol]
            return total

        for symbol, line in self.lines.items():
            sizes[symbol] = size(line)
        if size(expression) > most:
            return None
        for symbol in reversed(list(self.lines)):
            if symbol in expression.free_symbols:
                expression = expression.xreplace({symbol: self.lines[symbol]})
        return expression


def residence_times(
    net: Network,
    columns: list[int],
    program: Program,
    labels: tuple[str, ...],
    tidy: Callable[[sympy.Expr], sympy.Expr],
) -> dict[int, dict[int, sympy.Expr]]:
    """Return the non-zero entries of the given columns of V^-1: column -> row -> expression.

    Parameters
    ----------
    net : Network
        Of sympy expressions, with no stray losses.
    columns : list of int
        Where individuals enter.
    program : Program
        Takes the abbreviations.
    labels : tuple of str
        Names of the states.
    tidy : callable
        Shortens an expression without changing its value.
    """
    out: dict[int, dict[int, sympy.Expr]] = {j: {} for j in columns}
    arrivals, n = net.arrivals, len(net.exits)
    for block in net.blocks():
        inside = set(block)
        rates = {j: {i: arrivals[i, j] for i in block if i != j and arrivals[i, j] != 0} for j in block}
        leaving = {}
        for j in block:
            total = net.exits[j]
            for i in range(n):
                if i not in inside and net.moves[i, j] != 0:
                    total = total + net.moves[i, j]
                elif i in inside and net.sources[i, j] != 0:
                    total = total - net.sources[i, j]
            leaving[j] = tidy(total) if len(block) == 1 else total
        entering = {}
        for j in columns:
            start = {}
            for i in block:
                amount = sympy.Add(
                    *(arrivals[i, k] * stay for k, stay in out[j].items() if k not in inside and arrivals[i, k] != 0)
                )
                if i == j:
                    amount = amount + 1
                if amount != 0:
                    start[i] = amount
            if start:
                entering[j] = start
        if not entering:
            continue
        solved = _eliminate(block, rates, leaving, entering, program, labels, tidy)
        for j, stays in solved.items():
            out[j].update(stays)
    return out


def _eliminate(
    block: list[int],
    rates: dict[int, dict[int, sympy.Expr]],
    leaving: dict[int, sympy.Expr],
    entering: dict[int, dict[int, sympy.Expr]],
    program: Program,
    labels: tuple[str, ...],
    tidy: Callable[[sympy.Expr], sympy.Expr],
) -> dict[int, dict[int, sympy.Expr]]:
    """Solve one strongly connected component for every column; `rates[j][i]`: from j to i."""
    moves = sum(len(row) for row in rates.values())
    if WRITTEN_OUT < len(block) <= LOOP and moves <= len(block) + 1:
        return _by_cofactors(block, rates, leaving, entering, tidy)
    short = len(block) > WRITTEN_OUT
    rates = {j: dict(row) for j, row in rates.items()}
    leaving = dict(leaving)
    entering = {j: dict(start) for j, start in entering.items()}
    # Few neighbours first: fewer new arrows arise.
    order = sorted(block, key=lambda k: (len(rates[k]) * sum(k in rates[j] for j in block), block.index(k)))

    def keep(expression: sympy.Expr, about: str) -> sympy.Expr:
        return (
            program.name(expression, about) if short else sympy.together(expression) if len(block) > 1 else expression
        )

    total: dict[int, sympy.Expr] = {}
    after: dict[int, dict[int, sympy.Expr]] = {}
    waiting = list(order)
    while waiting:
        k = waiting.pop(0)
        live = set(waiting)
        after[k] = {i: rate for i, rate in rates[k].items() if i in live}
        total[k] = keep(
            sympy.Add(leaving[k], *after[k].values()), f"what leaves {labels[k]}, by way of states before included"
        )
        for j in waiting:
            rate = rates[j].get(k)
            if rate is None:
                continue
            share = keep(rate / total[k], f"from {labels[j]} by way of {labels[k]}, per time in {labels[k]}")
            for i, onward in after[k].items():
                if i != j:
                    new = rates[j].get(i, ZERO) + share * onward
                    rates[j][i] = keep(new, f"from {labels[j]} to {labels[i]}, by way of states before included")
            if leaving[k] != 0:
                leaving[j] = keep(
                    leaving[j] + share * leaving[k],
                    f"out of these states from {labels[j]}, by way of states before included",
                )
        for j, start in entering.items():
            here = start.get(k)
            if here is None:
                continue
            for i, onward in after[k].items():
                start[i] = keep(
                    start.get(i, ZERO) + here * onward / total[k],
                    f"arriving in {labels[i]} of those who enter at {labels[j]}",
                )
    out: dict[int, dict[int, sympy.Expr]] = {}
    for j, start in entering.items():
        stays: dict[int, sympy.Expr] = {}
        for k in reversed(order):
            amount = start.get(k, ZERO)
            back = [rates[i][k] * stays[i] for i in stays if k in rates[i]]
            amount = sympy.Add(amount, *back)
            if amount != 0:
                stays[k] = keep(amount / total[k], f"time spent in {labels[k]} by one who enters at {labels[j]}")
        if not short:
            stays = {k: tidy(stay) for k, stay in stays.items()}
        out[j] = stays
    return out


def _by_cofactors(
    block: list[int],
    rates: dict[int, dict[int, sympy.Expr]],
    leaving: dict[int, sympy.Expr],
    entering: dict[int, dict[int, sympy.Expr]],
    tidy: Callable[[sympy.Expr], sympy.Expr],
) -> dict[int, dict[int, sympy.Expr]]:
    """Solve a small loop of states by Cramer's rule, with one symbol for each loss and each move while it is worked out."""
    meaning: dict[sympy.Symbol, sympy.Expr] = {}

    def opaque(name: str, expression: sympy.Expr) -> sympy.Symbol:
        symbol = sympy.Dummy(name, positive=True)
        meaning[symbol] = expression
        return symbol

    place = {k: n for n, k in enumerate(block)}
    matrix = sympy.zeros(len(block), len(block))
    for j in block:
        matrix[place[j], place[j]] = opaque(f"D{j}", sympy.Add(leaving[j], *rates[j].values()))
        for i, rate in rates[j].items():
            matrix[place[i], place[j]] = -opaque(f"q{i}_{j}", rate)
    determinant = sympy.factor(matrix.det(method="berkowitz")).xreplace(meaning)
    out: dict[int, dict[int, sympy.Expr]] = {}
    for j, start in entering.items():
        stays = {}
        for k in block:
            parts = [
                sympy.factor(matrix.cofactor(place[i], place[k], method="berkowitz")).xreplace(meaning) * amount
                for i, amount in start.items()
            ]
            total = sympy.Add(*parts)
            if total != 0:
                stays[k] = tidy(total) / determinant
        out[j] = stays
    return out
