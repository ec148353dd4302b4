"""The equations that an infection-free state satisfies, as functions of the compartments left free.

Nothing is solved here: `RestSystem` gives flows and slopes in one algebra, and whoever has the arrays solves them.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

import numpy as np

from ngm.derivation.evaluate import Algebra, Evaluator
from ngm.derivation.expand import net_flow, slopes
from ngm.derivation.linearise import Selector
from ngm.derivation.space import Array
from ngm.derivation.template import Template
from ngm.errors import DerivationError, Problem

__all__ = ["RestSystem", "choose_branches"]

_ONE, _ZERO = Fraction(1), Fraction(0)


def choose_branches(evaluator: Evaluator, selectors: list[Selector]) -> None:
    """Set the names that say which side of a max or min is in force; a tie has no slope and is refused."""
    algebra = evaluator.algebra
    for selector in selectors:
        difference = algebra.subtract(evaluator.value(selector.larger), evaluator.value(selector.smaller))
        chosen: Array = np.empty(difference.shape, dtype=algebra.dtype)
        for index, item in np.ndenumerate(difference):
            if not (item > 0 or item < 0):
                raise DerivationError(
                    Problem(
                        "",
                        f"{selector.text} is a tie without infection, where it has no slope. "
                        "Change a value so that one side is larger, or write the branch that is meant.",
                    )
                )
            chosen[index] = algebra.number(_ONE if item > 0 else _ZERO)
        evaluator.names[selector.name] = chosen


@dataclass
class RestSystem:
    """Net flow of the free compartments without infection, and its slope, in one algebra.

    `x` lists the copies of `template.free`, (n,) or, for many states at once, (n, k).
    """

    template: Template
    algebra: Algebra
    matrices: Mapping[str, Array]

    @cached_property
    def labels(self) -> tuple[str, ...]:
        """Names of the unknowns, group by group."""
        return self.template.items_of(self.template.free)

    @cached_property
    def base(self) -> Evaluator:
        """Parameters and what else does not depend on the state."""
        evaluator = self.template.evaluator(self.algebra, {}, matrices=self.matrices)
        for name in self.template.scenario.parameters:
            evaluator.name(name)
        return evaluator

    def evaluator(self, x: Array) -> Evaluator:
        """Return an evaluator at state x: free compartments from x, given ones from what the file says of them."""
        template, base = self.template, self.base
        columns = x if x.ndim == 2 else x.reshape(-1, 1)
        names = dict(base.names)
        for name, start in template.offsets(template.free).items():
            by = template.by(name)
            names[name] = template.space.spread(columns[start : start + template.space.count(by)], by)
        given = {name: tree for name, tree in template.given.items() if name not in template.empty}
        definitions = {**template.definitions, **given}
        out = Evaluator(template.space, self.algebra, names, definitions, base.lists, base.matrices, base.along)
        for name in given:
            # A state given by one number for all groups still has one copy in each: sums over groups count them.
            value = out.name(name)
            out.names[name] = np.broadcast_to(
                value, np.broadcast_shapes(value.shape, (*template.space.shape(template.by(name)), 1))
            )
        return out

    def flow(self, x: Array) -> tuple[Array, Array]:
        """Return what enters and what leaves each free copy per time unit: (n, k) each."""
        template = self.template
        entering, leaving = net_flow(template, self.evaluator(x), template.rest_arrows, template.free)
        return entering, leaving

    def slope(self, x: Array) -> Array:
        """Return the derivative of (entering - leaving) by x, (n, n)."""
        template = self.template
        evaluator = self.evaluator(x)
        arrows = template.rest_arrows
        choose_branches(evaluator, template.rest_walker.selectors)
        _, losses, gains = slopes(template, evaluator, arrows, template.free)
        return self.algebra.subtract(gains, losses)

    def state(self, x: Array) -> dict[str, Array]:
        """Return every uninfected compartment at x, as arrays over the space."""
        evaluator = self.evaluator(x)
        out = {}
        for name in self.template.uninfected:
            value = evaluator.name(name)
            shape = (*self.template.space.shape(self.template.by(name)), 1)
            out[name] = np.broadcast_to(value, shape)
        return out
