"""The models between two: some of the changes made, others not; and what each change contributes to R0.

A value that changes is a column of draws: every model in which only values differ is computed in one pass. What changes the
flows needs a derivation for each combination.
"""

from __future__ import annotations

import math
import random
from collections.abc import Callable, Iterable
from dataclasses import dataclass, replace
from itertools import combinations

import numpy as np

from ngm.analysis.alignment import paired_flows
from ngm.analysis.batch import draw_numbers
from ngm.analysis.numbers import Numbers, decided_numbers
from ngm.engine.balls import nearest
from ngm.errors import NgmError
from ngm.results_opinion import Contribution
from ngm.scenario.exact import evaluate
from ngm.scenario.model import Parameter, Scenario

__all__ = ["MOST_IN_ORDER", "Between", "Step", "contributions", "root_of"]

#: Changes that are listed with what they contribute.
MOST_IN_ORDER = 40
#: Changes over all orders of which the mean is taken: of values, and of other things besides.
MOST_VALUES, MOST_OTHERS = 9, 3
#: Random orders, where there are too many; and derivations that they may need, in models of up to so many types.
ORDERS = 400
MOST_DERIVATIONS, FEW_TYPES = {True: 60, False: 16}, 4
#: Models of values only that are worth a program for arrays.
WORTH_A_PROGRAM = 4


@dataclass(frozen=True)
class Step:
    """One change that can be made by itself: what to call it, and the first model with it made."""

    name: str
    make: Callable[[Scenario], Scenario] = lambda scenario: scenario
    #: the place of the flow that changes, where it is one
    slot: int | None = None
    #: the parameter as it becomes, where nothing but its value changes
    parameter: Parameter | None = None


def root_of(found: Numbers) -> float | None:
    """Return R0; None where there is none."""
    if found.no_R0 is not None:
        return None
    return 0.0 if found.spectrum is None else nearest(found.spectrum.root)


class Between:
    """The first model with some of the changes made; numbers are kept."""

    def __init__(self, first: Scenario, second: Scenario, steps: list[Step], one: Numbers, two: Numbers) -> None:
        alike = first.dimensions == second.dimensions
        self.first = replace(
            first,
            parameters={**second.parameters, **first.parameters} if alike else first.parameters,
            matrices={**second.matrices, **first.matrices} if alike else first.matrices,
            # with other compartments a definition of the second may name what the first has not
            definitions=(
                {**second.definitions, **first.definitions}
                if set(first.compartments) == set(second.compartments)
                else first.definitions
            ),
        )
        self.second, self.steps = second, steps
        self.pairs = paired_flows(first, second)
        self.known: dict[frozenset[int], Numbers | None] = {frozenset(): one, frozenset(range(len(steps))): two}
        self.roots: dict[frozenset[int], float | None] = {}
        #: changes of numbers, by which draws can stand for models
        self.values = {k for k, step in enumerate(steps) if self._is_value(step.parameter)}

    def at(self, made: frozenset[int]) -> Numbers | None:
        """Return the numbers with these changes made; None where such a model has none."""
        if made not in self.known:
            try:
                self.known[made] = decided_numbers(self.scenario(made))
            except NgmError:
                self.known[made] = None
        return self.known[made]

    def scenario(self, made: frozenset[int]) -> Scenario:
        """Return the first model with these changes made."""
        slots = {self.steps[k].slot for k in made}
        flows = []
        for place, (j, k) in enumerate(self.pairs):
            if place in slots:
                if k is not None:
                    flows.append(self.second.flows[k])
            elif j is not None:
                flows.append(self.first.flows[j])
        scenario = replace(self.first, flows=tuple(flows))
        for k in sorted(made):
            scenario = self.steps[k].make(scenario)
        return scenario

    def _is_value(self, new: Parameter | None) -> bool:
        old = None if new is None else self.first.parameters.get(new.name)
        if new is None or old is None:
            return False
        return not (old.follows or new.follows) and (old.by, old.season) == (new.by, new.season)

    def root(self, made: frozenset[int]) -> float | None:
        """Return R0 with these changes made."""
        if made not in self.roots:
            found = self.at(made)
            self.roots[made] = None if found is None else root_of(found)
        return self.roots[made]

    def fill(self, wanted: Iterable[frozenset[int]]) -> None:
        """Compute R0 of all these models, those that differ in values only together."""
        groups: dict[frozenset[int], list[frozenset[int]]] = {}
        for made in dict.fromkeys(wanted):
            if made not in self.roots and made not in self.known:
                groups.setdefault(made - self.values, []).append(made)
        for others, models in groups.items():
            if len(models) >= WORTH_A_PROGRAM:
                self._draw(others, models)
            for made in models:
                self.root(made)

    def _draw(self, others: frozenset[int], models: list[frozenset[int]]) -> None:
        """Compute models that differ in values as draws; what has no number there is left to be computed by itself."""
        try:
            scenario = self.scenario(others)
            draws = {}
            for k in sorted(self.values):
                new = self.steps[k].parameter
                if new is None:
                    continue
                old = scenario.parameters[new.name]
                ends = np.array([[float(evaluate(v)) / float(old.factor) for v in p.in_force()] for p in (old, new)])
                made = np.array([k in model for model in models])
                draws[new.name] = np.where(made, ends[1][:, None], ends[0][:, None])
                if not old.by:
                    draws[new.name] = draws[new.name][0]
            numbers = draw_numbers(scenario, draws, passing=True).values
        except NgmError:
            return
        for made_, R0 in zip(models, numbers.tolist(), strict=True):
            if math.isfinite(R0):
                self.roots[made_] = R0


def contributions(between: Between, warnings: list[str]) -> tuple[Contribution, ...]:
    """Return how much of the change in R0 each change made: in the order listed, and averaged over orders.

    All orders where there are few changes; else random ones, with a warning that gives the largest standard error. Either way
    the averages add up to the whole.
    """
    steps, n = between.steps, len(between.steps)
    if not n:
        return ()
    if n > MOST_IN_ORDER:
        warnings.append(f"{n} changes: their contributions to R0 are listed for up to {MOST_IN_ORDER}.")
        return ()
    listed = tuple(range(n))
    orders = _orders(between, listed)
    sets = [frozenset(order[:k]) for order in [listed, *(orders or [])] for k in range(n + 1)]
    if orders is None:
        sets += [frozenset(chosen) for size in range(n + 1) for chosen in combinations(listed, size)]
    between.fill(sets)
    in_order = _along(between, listed)
    if orders is None:
        averaged = [_average(between, k, n) for k in range(n)]
    else:
        pairs = []  # an order and its reverse: what one deals early the other deals late
        for order in orders[::2]:
            there, back = _along(between, order), _along(between, order[::-1])
            if None not in there and None not in back:
                pairs.append([((a or 0.0) + (b or 0.0)) / 2 for a, b in zip(there, back, strict=True)])
        averaged = [None] * n
        if pairs:
            table = np.array(pairs)
            averaged = list(table.mean(axis=0).tolist())
            error = float(np.max(table.std(axis=0, ddof=1))) / math.sqrt(len(table)) if len(table) > 1 else math.inf
            told = f"their standard error is {error:.2g} at the most" if len(table) > 1 else "too few for an error"
            warnings.append(f"{n} changes: the means are over {2 * len(table)} random orders, not all; {told}.")
    if None in in_order:
        warnings.append("Some models between the two have no R0: their changes have no contribution of their own.")
    return tuple(Contribution(s.name, a, b) for s, a, b in zip(steps, in_order, averaged, strict=True))


def _orders(between: Between, listed: tuple[int, ...]) -> list[tuple[int, ...]] | None:
    """Return random orders, each with its reverse; None where all orders can be looked at."""
    others = [k for k in listed if k not in between.values]
    if len(between.values) <= MOST_VALUES and len(others) <= MOST_OTHERS:
        return None
    rng = random.Random(2003)
    few = max(len(found.template.types) for found in between.known.values() if found is not None) <= FEW_TYPES
    # Orders of the other changes are few, since each prefix of one is a derivation; values are dealt in between at random.
    rows = max(1, MOST_DERIVATIONS[few] // (2 * max(1, len(others))))
    frames = [rng.sample(others, len(others)) for _ in range(min(rows, ORDERS // 2))]
    out = []
    for number in range(ORDERS // 2 if between.values else len(frames)):
        frame = iter(frames[number % len(frames)])
        places = rng.sample(listed, len(listed))
        order = tuple(k if k in between.values else next(frame) for k in places)
        out += [order, order[::-1]]
    return out


def _along(between: Between, order: tuple[int, ...]) -> list[float | None]:
    """Return what each change, by its number, does to R0 when they are made in this order."""
    out: list[float | None] = [None] * len(order)
    for place, k in enumerate(order):
        before, after = between.root(frozenset(order[:place])), between.root(frozenset(order[: place + 1]))
        if before is not None and after is not None:
            out[k] = after - before
    return out


def _average(between: Between, k: int, n: int) -> float | None:
    """Return the mean, over all orders of the changes, of what change k does to R0."""
    others = [j for j in range(n) if j != k]
    total = 0.0
    for size in range(n):
        weight = math.factorial(size) * math.factorial(n - size - 1) / math.factorial(n)
        for made in combinations(others, size):
            before, after = between.root(frozenset(made)), between.root(frozenset(made) | {k})
            if before is None or after is None:
                return None
            total += weight * (after - before)
    return total
