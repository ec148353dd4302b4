"""Time spent in each state, by elimination without subtraction, on traced numbers: for many draws at once.

The same elimination as for the formulas (`elimination`), without abbreviations: every operation is one line of the program
anyway. All states are eliminated, those that nobody infected passes through as well: the pivots say whether V is an
M-matrix (a matrix with no positive entry off the diagonal is a non-singular M-matrix exactly where all pivots of its
elimination are positive; Berman & Plemmons 1994, chapter 6, from memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from ngm.derivation.network import Network, nonzero
from ngm.derivation.space import Array
from ngm.derivation.tracing import Trace, Traced
from ngm.engine.structure import classes

__all__ = ["Stays", "stays"]

Column = dict[int, Traced]


@dataclass
class Stays:
    """What elimination found.

    Attributes
    ----------
    zero : Traced
    columns : list of dict of int to Traced
        For each right-hand side, the entries of V^-1 times it that are not 0 by structure.
    pivots : list of Traced
        What leaves a state in all; V is a non-singular M-matrix where each is positive and `rates` are not negative.
    doubtful : list of (Traced, Traced)
        Pivots that came from a difference, and the sum of its parts: where the first is much smaller, digits were lost.
    rates : list of Traced
        What arrives off the diagonal: negative where V has a positive entry off the diagonal.
    """

    zero: Traced
    columns: list[Column]
    pivots: list[Traced] = field(default_factory=list)
    doubtful: list[tuple[Traced, Traced]] = field(default_factory=list)
    rates: list[Traced] = field(default_factory=list)


def stays(net: Network, entering: Sequence[Column], trace: Trace) -> Stays:
    """Return the time spent in each state by those who enter as `entering` says, column by column.

    Parameters
    ----------
    net : Network
        Rates per head between n states, traced. Where something leaves i because of j (`stray`), it is taken off what
        arrives.
    entering : sequence of dict of int to Traced
        State -> how many enter it.
    """
    n = len(net.exits)
    stray = nonzero(net.stray)
    arrivals = net.arrivals - net.stray if stray.any() else net.arrivals
    there = nonzero(arrivals)
    out = Stays(trace.constant(0.0), [{} for _ in entering])
    for members in classes(there):
        _block([int(k) for k in members], net, arrivals, there, n, entering, out)
    return out


def _block(
    block: list[int],
    net: Network,
    arrivals: Array,
    there: Array,
    n: int,
    entering: Sequence[Column],
    out: Stays,
) -> None:
    """Solve one strongly connected set of states, given those before it."""
    inside = set(block)
    zero = out.zero
    rates: dict[int, Column] = {}
    leaving: dict[int, Traced] = {}
    gross: dict[int, Traced] = {}
    for j in block:
        rates[j] = {i: arrivals[i, j] for i in block if i != j and there[i, j]}
        total, lost = net.exits[j], zero
        for i in range(n):
            if i not in inside:
                total = total + net.moves[i, j]
            else:
                # `moves` to itself are a loss and a gain at once, and cancel.
                total = total + (net.stray[i, j] if i != j else zero)
                lost = lost + net.sources[i, j]
        leaving[j], gross[j] = total - lost, total + lost
        out.rates.extend(rate for i, rate in enumerate(arrivals[:, j]) if i != j and rate.value is None)
    starts: list[Column] = []
    for amounts, before in zip(entering, out.columns, strict=True):
        start: Column = {}
        for i in block:
            amount = amounts.get(i, zero)
            for k in np.flatnonzero(there[i]):
                if int(k) in before:
                    amount = amount + arrivals[i, k] * before[int(k)]
            if amount.value != 0:
                start[i] = amount
        starts.append(start)
    solved = _eliminate(block, rates, leaving, gross, starts, out)
    for column, found in zip(out.columns, solved, strict=True):
        column.update(found)


def _eliminate(
    block: list[int],
    rates: dict[int, Column],
    leaving: dict[int, Traced],
    gross: dict[int, Traced],
    starts: list[Column],
    out: Stays,
) -> list[Column]:
    # Few neighbours first: fewer new arrows arise.
    waiting = sorted(block, key=lambda k: len(rates[k]) * sum(k in row for row in rates.values()))
    order = list(waiting)
    total: dict[int, Traced] = {}
    after: dict[int, Column] = {}
    while waiting:
        k = waiting.pop(0)
        live = set(waiting)
        after[k] = {i: rate for i, rate in rates[k].items() if i in live}
        pivot, parts = leaving[k], gross[k]
        for rate in after[k].values():
            pivot, parts = pivot + rate, parts + rate
        total[k] = pivot
        out.pivots.append(pivot)
        if pivot is not parts:
            out.doubtful.append((pivot, parts))
        for j in waiting:
            inward = rates[j].get(k)
            if inward is None:
                continue
            share = inward / pivot
            for i, onward in after[k].items():
                if i != j:
                    rates[j][i] = rates[j][i] + share * onward if i in rates[j] else share * onward
            leaving[j] = leaving[j] + share * leaving[k]
            gross[j] = gross[j] + share * gross[k]
        for start in starts:
            if k in start:
                for i, onward in after[k].items():
                    more = start[k] * onward / pivot
                    start[i] = start[i] + more if i in start else more
    zero = out.zero
    solved = []
    for start in starts:
        found: Column = {}
        for k in reversed(order):
            total_in = start.get(k, zero)
            # Those still to come back to k from states eliminated after it.
            for i, stay in found.items():
                if k in rates[i]:
                    total_in = total_in + rates[i][k] * stay
            if total_in.value != 0:
                found[k] = total_in / total[k]
        solved.append(found)
    return solved
