"""A scenario read as arrows on a template: which arrow adds to which entry of F and V, before any number.

`Template` holds the slopes of every rate where nobody is infected, the compartments that are empty there whatever the
values, and the zero pattern of F and V by structure. Groups are not written out here.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

import numpy as np

from ngm.derivation.evaluate import PATTERN, Algebra, Evaluator
from ngm.derivation.linearise import (
    ONE,
    ZERO,
    Applied,
    Linear,
    Lineariser,
    Summed,
    Term,
    is_zero,
    product,
)
from ngm.derivation.space import Array, Space
from ngm.errors import DerivationError, Problem
from ngm.expression.tree import Add, Apply, Name, Node, Total, children, names
from ngm.scenario.model import Flow, Scenario
from ngm.scenario.stated import is_large
from ngm.scenario.values import converted

__all__ = ["MOST_GROUPED", "MOST_PLAIN", "Arrow", "Template", "flow_name"]

#: Types up to which formulas are written out: of grouped models copy by copy, and of plain ones.
MOST_GROUPED = 12
MOST_PLAIN = 120


@dataclass(frozen=True, slots=True)
class Arrow:
    """A flow, or one compartment's part in a movement, with the slope of its rate.

    `number`: the flow's place in the file from 1, None for a movement. `by`: its dimensions, in the order of the file.
    For a movement, source and target are one compartment, and `arriving` holds the slope of what arrives there: members
    leave group i at A(1)[i] times their number and arrive at the sum over j of A[j][i] times that of group j.
    """

    number: int | None
    label: str
    source: str | None
    target: str | None
    transmission: bool
    by: tuple[str, ...]
    rate: Linear
    arriving: tuple[Term, ...] | None = None
    matrix: str | None = None


def flow_name(scenario: Scenario, number: int) -> str:
    """Return how a flow is named in messages: ``flow 2 "Infection"``."""
    label = scenario.flows[number - 1].label
    return f'flow {number} "{label}"' if label else f"flow {number}"


@dataclass(frozen=True)
class Template:
    """The structure of one scenario. Everything here is independent of the values of parameters."""

    scenario: Scenario

    @cached_property
    def space(self) -> Space:
        """The axes of the scenario."""
        return Space.of(self.scenario)

    @cached_property
    def infected(self) -> tuple[str, ...]:
        """Infected compartments, in the order of the file."""
        return tuple(c.name for c in self.scenario.compartments.values() if c.infected)

    @cached_property
    def uninfected(self) -> tuple[str, ...]:
        """Uninfected compartments, in the order of the file."""
        return tuple(c.name for c in self.scenario.compartments.values() if not c.infected)

    @cached_property
    def types(self) -> tuple[str, ...]:
        """Labels of the infected types, in the order of the matrices."""
        return self.items_of(self.infected)

    def items_of(self, compartments: tuple[str, ...]) -> tuple[str, ...]:
        """Return the labels of all copies of these compartments."""
        scenario = self.scenario
        return tuple(item for name in compartments for item in scenario.items(name, scenario.compartments[name].by))

    def by(self, compartment: str) -> tuple[str, ...]:
        """Return the dimensions of a compartment, in its own order."""
        return self.scenario.compartments[compartment].by

    def offsets(self, compartments: tuple[str, ...]) -> dict[str, int]:
        """Return the row at which the copies of each compartment begin."""
        out, at = {}, 0
        for name in compartments:
            out[name] = at
            at += self.space.count(self.by(name))
        return out

    # --- what a rate depends on -------------------------------------------------------------------------------------

    def dimensions_of(self, node: Node) -> tuple[str, ...]:
        """Return the dimensions over which an expression varies, in the order of the file."""
        return self.space.ordered(self._dimensions(node))

    def _dimensions(self, node: Node) -> frozenset[str]:
        scenario = self.scenario
        match node:
            case Name(name=name):
                for table in (scenario.compartments, scenario.parameters, scenario.definitions):
                    if name in table:
                        return frozenset(table[name].by)
                return frozenset()
            case Total(dimension=None):
                return frozenset()
            case Total(operand=operand, dimension=dimension):
                return self._dimensions(operand) - {dimension}
            case Apply(matrix=matrix, operand=operand):
                table_ = scenario.matrices[matrix]
                return self._dimensions(operand) | {table_.by} | ({table_.within} if table_.within else set())
        return frozenset().union(*(self._dimensions(child) for child in children(node)))

    @cached_property
    def definitions(self) -> Mapping[str, Node]:
        """Trees of the definitions."""
        return {name: d.expression.tree for name, d in self.scenario.definitions.items()}

    @cached_property
    def depended_on(self) -> frozenset[str]:
        """Compartments on which some rate depends, a movement's included."""
        seen: set[str] = set()
        todo = {name for flow in self.scenario.flows for name in names(flow.rate.tree)}
        todo |= {name for movement in self.scenario.movements for name in movement.of}
        while todo:
            name = todo.pop()
            if name not in seen:
                seen.add(name)
                if name in self.definitions:
                    todo |= names(self.definitions[name])
                for given in self.scenario.infection_free.get(name, ()):
                    todo |= names(given.tree)
        return frozenset(name for name in seen if name in self.scenario.compartments)

    # --- the state without infection, as far as structure decides it --------------------------------------------------

    @cached_property
    def masks(self) -> dict[str, tuple[tuple[str, ...], int]]:
        """Synthetic names that are 1 in one copy and 0 elsewhere: how a list of expressions becomes one tree."""
        out: dict[str, tuple[tuple[str, ...], int]] = {}
        for name, values in self.scenario.infection_free.items():
            if len(values) > 1:
                for k in range(len(values)):
                    out[f"#{name}#{k}"] = (self.by(name), k)
        return out

    @cached_property
    def given(self) -> dict[str, Node]:
        """The states that the file gives, each as one tree; 0 for a compartment on which nothing depends."""
        out: dict[str, Node] = {}
        for name in self.uninfected:
            values = self.scenario.infection_free.get(name)
            if values is None:
                if name not in self.depended_on:
                    out[name] = ZERO
            elif len({value.tree for value in values}) == 1:
                out[name] = ZERO if is_zero(values[0].tree) else values[0].tree
            else:
                parts = [
                    (1, product(Name(f"#{name}#{k}"), value.tree))
                    for k, value in enumerate(values)
                    if not is_zero(value.tree)
                ]
                out[name] = parts[0][1] if len(parts) == 1 else Add(tuple(parts))
        return out

    @cached_property
    def empty(self) -> frozenset[str]:
        """Uninfected compartments that are 0 without infection whatever the values.

        Those given as a literal 0, and those that nothing enters when nobody is infected but that their members leave.
        """
        zero = {name for name, tree in self.given.items() if is_zero(tree)}
        free = [name for name in self.uninfected if name not in self.given]
        while True:
            walker = self.lineariser(zero | set(self.infected), set(free), {**self.definitions, **self.given})
            found = {name for name in free if name not in zero and self._drains(name, walker)}
            if not found:
                return frozenset(zero)
            zero |= found

    def _drains(self, name: str, walker: Lineariser) -> bool:
        leaves = False
        for number, flow in enumerate(self.scenario.flows, 1):
            if name not in (flow.source, flow.target):
                continue
            rate = walker.at(flow.rate.tree, f"{flow_name(self.scenario, number)}, rate")
            if flow.target == name and not rate.is_zero:
                return False
            if flow.source == name and any(term.column == name for term in rate.terms):
                leaves = True
        return leaves

    def lineariser(self, zero: set[str], variables: set[str], definitions: Mapping[str, Node]) -> Lineariser:
        """Return a walk in which `zero` vanish and slopes are taken by `variables`."""
        return Lineariser(
            zero=zero,
            variables=variables,
            definitions=definitions,
            dimensions_of=self.dimensions_of,
            exponent=self._exponent,
        )

    def _exponent(self, node: Node) -> list[float]:
        from ngm.derivation.evaluate import FLOATS

        used = set(names(node))
        if used & set(self.scenario.compartments):
            raise DerivationError(Problem("derivation", "an exponent on something that vanishes must be a number."))
        return [float(x) for x in self.evaluator(FLOATS, {}).value(node).ravel()]

    # --- the arrows ---------------------------------------------------------------------------------------------------

    @cached_property
    def at_rest(self) -> Lineariser:
        """The walk used for the derivation: everything infected, and every empty compartment, is 0."""
        return self.lineariser(set(self.infected) | set(self.empty), set(self.scenario.compartments), self.definitions)

    @cached_property
    def arrows(self) -> tuple[Arrow, ...]:
        """Every flow and movement with the slope of its rate at the infection-free state."""
        walker = self.at_rest
        out = []
        for number, flow in enumerate(self.scenario.flows, 1):
            rate = walker.at(flow.rate.tree, f"{flow_name(self.scenario, number)}, rate")
            out.append(self._arrow(number, flow, rate))
        return (*out, *self._movements(walker))

    @cached_property
    def rest_arrows(self) -> tuple[Arrow, ...]:
        """Every flow and movement without infection, with slopes by the uninfected compartments left free."""
        walker = self.rest_walker
        out = []
        for number, flow in enumerate(self.scenario.flows, 1):
            if flow.kind == "transmission":
                continue
            rate = walker.at(flow.rate.tree, f"{flow_name(self.scenario, number)}, rate")
            out.append(self._arrow(number, flow, rate))
        return (*out, *self._movements(walker))

    @cached_property
    def rest_walker(self) -> Lineariser:
        """The walk used to find the infection-free state: what is given follows what is free."""
        zero = set(self.infected) | set(self.empty)
        given = {name: tree for name, tree in self.given.items() if name not in zero}
        return self.lineariser(zero, set(self.free), {**self.definitions, **given})

    @cached_property
    def free(self) -> tuple[str, ...]:
        """Uninfected compartments whose state must be solved for."""
        return tuple(name for name in self.uninfected if name not in self.given and name not in self.empty)

    def _arrow(self, number: int, flow: Flow, rate: Linear) -> Arrow:
        by: set[str] = set()
        for side in (flow.source, flow.target):
            if side is not None:
                by |= set(self.by(side))
        label = flow.label or f"{flow.source or 'outside'} to {flow.target or 'outside'}"
        transmission = flow.kind == "transmission"
        return Arrow(number, label, flow.source, flow.target, transmission, self.space.ordered(by), rate)

    def _movements(self, walker: Lineariser) -> list[Arrow]:
        out = []
        for movement in self.scenario.movements:
            for name in movement.of:
                stay = walker.walk(Name(name))
                leaving = tuple(t.times(Apply(movement.matrix, ONE)) for t in stay.terms)
                arriving = tuple(t.under(Applied(movement.matrix, transposed=True)) for t in stay.terms)
                value = product(Apply(movement.matrix, ONE), stay.value)
                label = movement.label or f"Movement by {movement.matrix}"
                by = self.space.ordered(set(self.by(name)))
                out.append(Arrow(None, label, name, name, False, by, Linear(value, leaving), arriving, movement.matrix))
        return out

    # --- evaluation ---------------------------------------------------------------------------------------------------

    def evaluator(
        self,
        algebra: Algebra,
        state: Mapping[str, Array],
        *,
        names: Mapping[str, Array] | None = None,
        matrices: Mapping[str, Array] | None = None,
    ) -> Evaluator:
        """Return an evaluator: parameters from the scenario, compartments from `state`, matrices from `matrices`.

        `names` replaces parameters (symbols, or the pattern); a compartment in neither is 0 if infected or empty.
        """
        scenario, space = self.scenario, self.space
        zero = algebra.number(Fraction(0))
        values: dict[str, Array] = {}
        lists: dict[str, tuple[tuple[Node, ...], tuple[str, ...]]] = {}
        for name, parameter in scenario.parameters.items():
            if names is not None and name in names:
                values[name] = names[name]
            elif algebra.dtype is bool:
                values[name] = np.ones((*space.shape(parameter.by), 1), dtype=bool)
            else:
                lists[name] = (converted(parameter), parameter.by)
        for name in self.scenario.compartments:
            if name in state:
                values[name] = state[name]
            elif name in self.infected or name in self.empty:
                flat: Array = np.empty((space.count(self.by(name)), 1), dtype=algebra.dtype)
                flat[...] = zero
                values[name] = space.spread(flat, self.by(name))
        for name, (by, k) in self.masks.items():
            flat = np.empty((space.count(by), 1), dtype=algebra.dtype)
            flat[...] = zero
            flat[k, 0] = algebra.number(Fraction(1))
            values[name] = space.spread(flat, by)
        along = {m.name: (m.by, m.within) for m in scenario.matrices.values()}
        return Evaluator(space, algebra, values, self.definitions, lists, dict(matrices or {}), along)

    def chain(self, terms: tuple[Term, ...], column: str, evaluator: Evaluator) -> Array | None:
        """Return the slope by the copies of `column`: an array over the space, last axis: those copies; None if zero."""
        if not any(term.column == column for term in terms):
            return None  # most rates depend on few compartments
        n = self.space.count(self.by(column))
        eye: Array = np.empty((n, n), dtype=evaluator.algebra.dtype)
        eye[...] = evaluator.algebra.number(Fraction(0))
        np.fill_diagonal(eye, evaluator.algebra.number(Fraction(1)))
        return self.along(terms, column, evaluator, self.space.spread(eye, self.by(column)))

    def along(self, terms: tuple[Term, ...], column: str, evaluator: Evaluator, start: Array) -> Array | None:
        """Return the slope along a deviation `start` of the copies of `column` (over the space); None where it is zero."""
        algebra = evaluator.algebra
        total: Array | None = None
        for term in terms:
            if term.column != column:
                continue
            array = start
            for factor in reversed(term.factors):
                if isinstance(factor, Applied):
                    array = evaluator.apply(factor.matrix, array, transposed=factor.transposed)
                elif isinstance(factor, Summed):
                    array = evaluator.total(array, factor.dimensions)
                else:
                    array = algebra.multiply(evaluator.value(factor), array)
            if term.sign < 0:
                array = algebra.subtract(evaluator.scalar(algebra.number(Fraction(0))), array)
            total = array if total is None else algebra.add(total, array)
        return total

    @cached_property
    def pattern_evaluator(self) -> Evaluator:
        """Everything as True where it is not zero by structure."""
        state = {
            name: np.ones((*self.space.shape(self.by(name)), 1), dtype=bool)
            for name in self.uninfected
            if name not in self.empty
        }
        evaluator = self.evaluator(PATTERN, state, matrices=self.pattern_matrices)
        for name, tree in self.given.items():
            if name not in self.empty:
                array = evaluator.value(tree)
                evaluator.names[name] = np.broadcast_to(array, (*self.space.shape(self.by(name)), 1))
        _ = self.arrows
        for selector in self.at_rest.selectors:
            evaluator.names[selector.name] = np.ones((1,) * (len(self.space.sizes) + 1), dtype=bool)
        return evaluator

    @cached_property
    def pattern_matrices(self) -> dict[str, Array]:
        """Contact matrices count as positive everywhere, movement as positive off the diagonal."""
        moving = {movement.matrix for movement in self.scenario.movements}
        out: dict[str, Array] = {}
        for name, matrix in self.scenario.matrices.items():
            n = self.space.size(matrix.by)
            table = np.ones((n, n), dtype=bool)
            if name in moving and n > 1:
                np.fill_diagonal(table, False)
            out[name] = table if matrix.within is None else np.stack([table] * self.space.size(matrix.within))
        return out

    @property
    def is_written_out(self) -> bool:
        """Whether the model is small enough for formulas copy by copy."""
        grouped = any(c.by for c in self.scenario.compartments.values())
        if is_large(self.scenario):
            return False
        return 0 < len(self.types) <= (MOST_GROUPED if grouped else MOST_PLAIN)

    @cached_property
    def at_infection(self) -> tuple[int, ...]:
        """Rows of F that are not identically zero: the types at infection."""
        if self.scenario.given is not None:
            return tuple(range(len(self.types)))
        evaluator, offsets = self.pattern_evaluator, self.offsets(self.infected)
        infects = np.zeros(len(self.types), dtype=bool)
        for arrow in self.arrows:
            if not arrow.transmission or arrow.target is None:
                continue
            by = self.by(arrow.target)
            lost = tuple(name for name in arrow.by if name not in by)
            for column in {term.column for term in arrow.rate.terms} & set(self.infected):
                everybody = np.ones((*self.space.shape(self.by(column)), 1), dtype=bool)
                reached = self.along(arrow.rate.terms, column, evaluator, everybody)
                if reached is not None:
                    flat = self.space.flatten(evaluator.total(reached, lost), by)[:, 0]
                    first = offsets[arrow.target]
                    infects[first : first + len(flat)] |= flat
        return tuple(int(i) for i in np.flatnonzero(infects))
