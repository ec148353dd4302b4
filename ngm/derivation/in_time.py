"""A template at many moments of a season at once: F, V and the net flow without infection, one for each moment.

The moments are one more axis of every array, beside the groups, so that the walk over the trees is made once for all of
them. Nothing varies *over* that axis by structure: sums over groups never add up moments.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from ngm.derivation.evaluate import FLOATS, Evaluator
from ngm.derivation.rest import choose_branches
from ngm.derivation.space import Array
from ngm.derivation.template import Arrow, Template
from ngm.expression.tree import Node, Total, names, rebuild
from ngm.scenario.model import Dimension, Expression, Scenario
from ngm.scenario.season import follows_a_season
from ngm.scenario.values import converted

__all__ = ["Moments"]

_AXIS = "#moment"


def _explicit(template: Template, node: Node) -> Node:
    """Return a tree in which every sum names its dimensions."""
    out = rebuild(node, lambda child: _explicit(template, child))
    if isinstance(node, Total) and node.dimension is None:
        over = template.dimensions_of(node.operand)
        inner = out.operand if isinstance(out, Total) else out
        for dimension in over:
            inner = Total(inner, dimension)
        return inner
    return out


def _with_moments(template: Template, count: int) -> Scenario:
    scenario = template.scenario
    return replace(
        scenario,
        dimensions={**scenario.dimensions, _AXIS: Dimension(_AXIS, tuple(str(k) for k in range(count)))},
        parameters={name: replace(parameter, season=None) for name, parameter in scenario.parameters.items()},
        definitions={
            name: replace(d, expression=Expression(d.expression.text, _explicit(template, d.expression.tree)))
            for name, d in scenario.definitions.items()
        },
    )


@dataclass
class Moments:
    """A template at k moments.

    Attributes
    ----------
    original : Template
        Of the scenario with its seasons.
    matrices : mapping of str to Array
        In force all the time.
    factors : mapping of str to (k,) array
        What each seasonal parameter's value is multiplied by at each moment.
    """

    original: Template
    matrices: Mapping[str, Array]
    factors: Mapping[str, Array]

    @cached_property
    def count(self) -> int:
        """The number of moments."""
        return len(next(iter(self.factors.values())))

    @cached_property
    def template(self) -> Template:
        """The template with moments as one more axis."""
        return Template(_with_moments(self.original, self.count))

    @cached_property
    def moving(self) -> tuple[str, ...]:
        """The uninfected compartments on which some rate depends and that are not empty by structure."""
        template = self.original
        return tuple(c for c in template.uninfected if c in template.depended_on and c not in template.empty)

    def _flat(self, array: Array, by: tuple[str, ...]) -> Array:
        """Return an array over the space as (copies, k, last axis)."""
        tail = (self.count, array.shape[-1])
        whole = np.broadcast_to(array, (*array.shape[:-2], *tail))
        merged = whole.reshape(*array.shape[:-2], 1, tail[0] * tail[1])
        return self.template.space.flatten(merged, by).reshape(-1, *tail)

    def _spread(self, flat: Array, by: tuple[str, ...]) -> Array:
        """Return copies at moments, (copies, k), as an array over the space."""
        return np.moveaxis(self.template.space.spread(flat, by), -1, -2)

    @cached_property
    def _base(self) -> Evaluator:
        """Parameters at every moment, those that follow a seasonal one included."""
        scenario = self.template.scenario
        evaluator = self.template.evaluator(FLOATS, {}, matrices=self.matrices)
        waiting = set(follows_a_season(self.original.scenario))
        while waiting:
            for name in sorted(waiting):
                parameter = scenario.parameters[name]
                trees = converted(parameter)
                if set().union(*(names(tree) for tree in trees)) & waiting - {name}:
                    continue
                parts: dict[Node, Array] = {}
                for tree in trees:
                    if tree not in parts:
                        parts[tree] = self._flat(evaluator.value(tree), parameter.by)
                flat = np.stack([parts[tree][k, :, 0] for k, tree in enumerate(trees)])
                if name in self.factors:
                    flat = flat * self.factors[name]
                evaluator.names[name] = self._spread(flat, parameter.by)
                waiting.discard(name)
                break
        for name in scenario.parameters:
            evaluator.name(name)
        return evaluator

    def evaluator(self, x: Array) -> Evaluator:
        """Return an evaluator without infection, the copies of `moving` at x, (n, k)."""
        base, template = self._base, self.template
        state = dict(base.names)
        at = self.original.offsets(self.moving)
        for name in self.moving:
            by = template.by(name)
            state[name] = self._spread(x[at[name] : at[name] + template.space.count(by)], by)
        out = Evaluator(template.space, FLOATS, state, template.definitions, base.lists, base.matrices, base.along)
        for name in template.uninfected:
            if name not in out.names:
                out.names[name] = np.zeros((*template.space.shape(template.by(name)), 1))
        return out

    def F_and_V(self, x: Array) -> tuple[Array, Array]:
        """Return F and V of all infected types at each moment, (k, m, m) each."""
        F, losses, gains = self._slopes(x, self.template.infected)
        return F, losses - gains

    def slope(self, x: Array) -> Array:
        """Return the slope of the net flow of `moving` by one another without infection, (k, n, n)."""
        _, losses, gains = self._slopes(x, self.moving)
        return gains - losses

    def _slopes(self, x: Array, compartments: tuple[str, ...]) -> tuple[Array, Array, Array]:
        template, evaluator = self.template, self.evaluator(x)
        arrows = template.arrows
        choose_branches(evaluator, template.at_rest.selectors)
        at = self.original.offsets(compartments)
        m = sum(template.space.count(template.by(name)) for name in compartments)
        F, losses, gains = (np.zeros((self.count, m, m)) for _ in range(3))
        for arrow in arrows:
            for column in compartments:
                block = template.chain(arrow.rate.terms, column, evaluator)
                if block is not None and arrow.source in at:
                    self._add(losses, evaluator, block, arrow, arrow.source, at[arrow.source], at[column])
                if block is not None and arrow.target in at and arrow.arriving is None:
                    into = F if arrow.transmission else gains
                    self._add(into, evaluator, block, arrow, arrow.target, at[arrow.target], at[column])
                if arrow.arriving is not None and arrow.target in at:
                    block = template.chain(arrow.arriving, column, evaluator)
                    if block is not None:
                        self._add(gains, evaluator, block, arrow, arrow.target, at[arrow.target], at[column])
        return F, losses, gains

    def _rows(self, evaluator: Evaluator, block: Array, arrow: Arrow, side: str) -> Array:
        """Return what an arrow moves at one of its ends, (copies, k, last axis)."""
        by = self.template.by(side)
        lost = tuple(name for name in arrow.by if name not in by)
        return self._flat(evaluator.total(block, lost) if lost else block, by)

    def _add(
        self, matrix: Array, evaluator: Evaluator, block: Array, arrow: Arrow, side: str, row: int, column: int
    ) -> None:
        flat = self._rows(evaluator, block, arrow, side)
        matrix[:, row : row + flat.shape[0], column : column + flat.shape[2]] += flat.transpose(1, 0, 2)

    def net_flow(self, x: Array) -> tuple[Array, Array]:
        """Return the net flow of each copy of `moving` without infection, and what enters and leaves together, (n, k)."""
        template, evaluator = self.template, self.evaluator(x)
        at = self.original.offsets(self.moving)
        net = np.zeros((sum(template.space.count(template.by(name)) for name in self.moving), self.count))
        gross = np.zeros_like(net)
        for arrow in template.arrows:
            if arrow.source not in at and arrow.target not in at:
                continue
            value = evaluator.value(arrow.rate.value)
            if arrow.source in at:
                rows = self._rows(evaluator, value, arrow, arrow.source)[..., 0]
                net[at[arrow.source] : at[arrow.source] + len(rows)] -= rows
                gross[at[arrow.source] : at[arrow.source] + len(rows)] += np.abs(rows)
            if arrow.target in at:
                if arrow.matrix is not None:
                    value = evaluator.apply(arrow.matrix, evaluator.name(arrow.target), transposed=True)
                rows = self._rows(evaluator, value, arrow, arrow.target)[..., 0]
                net[at[arrow.target] : at[arrow.target] + len(rows)] += rows
                gross[at[arrow.target] : at[arrow.target] + len(rows)] += np.abs(rows)
        return net, gross
