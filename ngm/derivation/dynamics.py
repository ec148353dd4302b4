"""All flows at any state: net flow, its slope and its second derivative, infected and uninfected compartments together.

F and V speak of the infection-free state alone. What happens beside it (the first weeks, states at rest with infection) is
read from the same arrows, walked without setting anything to zero. One quantity may be let loose beside the compartments, a
parameter or a factor on all transmission, so that the state can be followed as it changes.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from fractions import Fraction
from functools import cached_property

import numpy as np

from ngm.derivation.compile import Program, compiled
from ngm.derivation.evaluate import FLOATS, Algebra, Evaluator
from ngm.derivation.expand import net_flow, slopes
from ngm.derivation.linearise import ONE, Applied, Linear, Lineariser, product
from ngm.derivation.rest import choose_branches
from ngm.derivation.space import Array
from ngm.derivation.template import Arrow, Template, flow_name
from ngm.derivation.tracing import Trace, TracedArithmetic
from ngm.expression.tree import Apply, Name, Node, Number, names
from ngm.scenario.model import Compartment, Definition, Expression, Parameter, Scenario
from ngm.scenario.values import converted

__all__ = ["LOOSE", "Dynamics", "NotLooseError", "loosened", "with_susceptibility"]

#: The name of the quantity that is let loose; no name of a file begins like this.
LOOSE = "#along"
#: Components up to which a model is written out as a program: without groups, and with them (arrays of many groups are
#: quick as they are).
MOST_TRACED, MOST_TRACED_GROUPED = 60, 32


class NotLooseError(Exception):
    """A parameter cannot be let loose; the message says why."""


def loosened(scenario: Scenario, parameter: str | None) -> Scenario:
    """Return the scenario with one quantity as a compartment named `LOOSE`, so that slopes by it can be taken.

    Parameters
    ----------
    parameter : str or None
        A parameter: `LOOSE` is its value in force where it has one value in all groups, else what its values are
        multiplied by. None: `LOOSE` multiplies the rate of every transmission flow.

    Raises
    ------
    NotLooseError
        A parameter that follows it does so group by group.
    """
    loose = Name(LOOSE)
    compartments = {**scenario.compartments, LOOSE: Compartment(LOOSE, infected=False)}
    if parameter is None:
        flows = tuple(
            replace(flow, rate=_expression(product(loose, flow.rate.tree))) if flow.kind == "transmission" else flow
            for flow in scenario.flows
        )
        return replace(scenario, compartments=compartments, flows=flows)
    parameters, definitions = dict(scenario.parameters), dict(scenario.definitions)
    own = parameters.pop(parameter)
    if is_one_value(own):
        definitions[parameter] = Definition(parameter, _expression(loose), own.by)
    else:
        base = f"#base {parameter}"
        parameters[base] = replace(own, name=base)
        definitions[parameter] = Definition(parameter, _expression(product(Name(base), loose)), own.by)
    moved = {parameter}
    while True:
        followers = [
            p for p in parameters.values() if not p.name.startswith("#") and _used(p) & moved and p.name not in moved
        ]
        if not followers:
            break
        for follower in followers:
            trees = set(converted(follower))
            if len(trees) > 1:
                raise NotLooseError(f"{follower.name} follows {parameter} in another way in each group.")
            del parameters[follower.name]
            definitions[follower.name] = Definition(follower.name, _expression(trees.pop()), follower.by)
            moved.add(follower.name)
    return replace(scenario, compartments=compartments, parameters=parameters, definitions=definitions)


def is_one_value(parameter: Parameter) -> bool:
    """Return whether a parameter is one number, the same in all groups."""
    return not parameter.follows and len(set(converted(parameter))) == 1


def _used(parameter: Parameter) -> set[str]:
    return set().union(*(names(value.tree) for value in parameter.values))


def _expression(tree: Node) -> Expression:
    return Expression("", tree)


def with_susceptibility(scenario: Scenario, factors: Mapping[str, tuple[Fraction, ...]]) -> Scenario:
    """Return the scenario with every transmission into these compartments multiplied, copy by copy of the compartment."""
    parameters, flows = dict(scenario.parameters), []
    for name, values in factors.items():
        by = scenario.compartments[name].by
        nodes = tuple(_expression(Number(value)) for value in values)
        parameters[f"#factor {name}"] = Parameter(f"#factor {name}", nodes, by)
    for flow in scenario.flows:
        if flow.kind == "transmission" and flow.target in factors:
            flow = replace(flow, rate=_expression(product(Name(f"#factor {flow.target}"), flow.rate.tree)))
        flows.append(flow)
    return replace(scenario, parameters=parameters, flows=tuple(flows))


@dataclass
class Dynamics:
    """The system of all flows of a scenario, as functions of the state (n,), or of many states at once (n, k).

    The state lists the infected compartments copy by copy, then the uninfected ones on which some rate depends, then
    `LOOSE` where the scenario has it.
    """

    scenario: Scenario
    matrices: Mapping[str, Array]

    @cached_property
    def template(self) -> Template:
        """The scenario read as arrows."""
        return Template(self.scenario)

    @cached_property
    def compartments(self) -> tuple[str, ...]:
        """The compartments of the state, in order."""
        template = self.template
        moving = tuple(c for c in template.uninfected if c in template.depended_on and c != LOOSE)
        return (*template.infected, *moving, *((LOOSE,) if LOOSE in self.scenario.compartments else ()))

    @cached_property
    def labels(self) -> tuple[str, ...]:
        """Names of the components of the state, without `LOOSE`."""
        return self.template.items_of(tuple(c for c in self.compartments if c != LOOSE))

    @property
    def size(self) -> int:
        """Components of the state, without `LOOSE`."""
        return len(self.labels)

    @property
    def infected(self) -> int:
        """How many of the first components are infected."""
        return len(self.template.types)

    @cached_property
    def arrows(self) -> tuple[Arrow, ...]:
        """Every flow and movement with its rate at any state and the slopes by all compartments."""
        scenario, template = self.scenario, self.template
        walker = self._walker
        out = []
        for number, flow in enumerate(scenario.flows, 1):
            rate = walker.at(flow.rate.tree, f"{flow_name(scenario, number)}, rate")
            by = {d for side in (flow.source, flow.target) if side is not None for d in template.by(side)}
            transmission = flow.kind == "transmission"
            out.append(
                Arrow(
                    number, flow.label or "", flow.source, flow.target, transmission, template.space.ordered(by), rate
                )
            )
        for movement in scenario.movements:
            for name in movement.of:
                stay = walker.walk(Name(name))
                leaving = tuple(t.times(Apply(movement.matrix, ONE)) for t in stay.terms)
                arriving = tuple(t.under(Applied(movement.matrix, transposed=True)) for t in stay.terms)
                value = product(Apply(movement.matrix, ONE), stay.value)
                by = set(template.by(name))
                rate = Linear(value, leaving)
                out.append(
                    Arrow(None, "", name, name, False, template.space.ordered(by), rate, arriving, movement.matrix)
                )
        return tuple(out)

    @cached_property
    def _walker(self) -> Lineariser:
        return self.template.lineariser(set(), set(self.scenario.compartments), self.template.definitions)

    def _base(self, algebra: Algebra) -> Evaluator:
        key = id(algebra)
        if key not in self._bases:
            state = {name: np.zeros((1,) * (len(self.template.space.sizes) + 1)) for name in self.scenario.compartments}
            matrices = {
                name: table if algebra is FLOATS else _exact(algebra, table) for name, table in self.matrices.items()
            }
            evaluator = self.template.evaluator(algebra, state, matrices=matrices)
            for name in self.scenario.parameters:
                evaluator.name(name)
            self._bases[key] = evaluator
        return self._bases[key]

    def parameter_values(self) -> dict[str, float]:
        """Return the values in force of the parameters of a model without groups."""
        base = self._base(FLOATS)
        return {name: float(np.ravel(base.name(name))[0]) for name in self.scenario.parameters}

    @cached_property
    def _bases(self) -> dict[int, Evaluator]:
        return {}

    def _evaluator(self, algebra: Algebra, x: Array, multipliers: Mapping[str, float] | None) -> Evaluator:
        template, base = self.template, self._base(algebra)
        columns = x if x.ndim == 2 else x.reshape(-1, 1)
        known = dict(base.names)
        for name in self.scenario.compartments:
            if name not in self.compartments:
                flat: Array = np.empty((template.space.count(template.by(name)), 1), dtype=algebra.dtype)
                flat[...] = algebra.number(Fraction(0))
                known[name] = template.space.spread(flat, template.by(name))
        for name, start in template.offsets(self.compartments).items():
            by = template.by(name)
            known[name] = template.space.spread(columns[start : start + template.space.count(by)], by)
        if multipliers:
            known = self._at_season(known, base, multipliers)
        return Evaluator(template.space, algebra, known, template.definitions, base.lists, base.matrices, base.along)

    def _at_season(
        self, known: dict[str, Array], base: Evaluator, multipliers: Mapping[str, float]
    ) -> dict[str, Array]:
        """Return the names with the seasonal parameters multiplied, and all that follow them evaluated anew."""
        from ngm.scenario.season import follows_a_season

        changing = follows_a_season(self.scenario)
        for name in changing:
            known.pop(name, None)
        evaluator = Evaluator(base.space, base.algebra, known, {}, self._steady_lists, base.matrices, base.along)
        waiting = set(changing)
        while waiting:
            for name in sorted(waiting):
                if _used(self.scenario.parameters[name]) & waiting - {name}:
                    continue
                evaluator.names[name] = evaluator.name(name) * multipliers.get(name, 1.0)
                waiting.discard(name)
                break
        return evaluator.names

    @cached_property
    def _steady_lists(self) -> dict[str, tuple[tuple[Node, ...], tuple[str, ...]]]:
        """The values of parameters without their seasons."""
        return {
            name: (converted(replace(parameter, season=None)), parameter.by)
            for name, parameter in self.scenario.parameters.items()
        }

    def net(self, x: Array, algebra: Algebra = FLOATS, multipliers: Mapping[str, float] | None = None) -> Array:
        """Return the net flow of each component but `LOOSE`, per time unit: (n, k) for states (n, k) or (n,).

        `multipliers`: what seasonal parameters are multiplied by at the moment looked at.
        """
        if algebra is FLOATS and not multipliers and self._is_traced:
            columns = x if x.ndim == 2 else x.reshape(-1, 1)
            return self._net_program.run(list(np.ascontiguousarray(columns, dtype=float)))
        evaluator = self._evaluator(algebra, x, multipliers)
        entering, leaving = net_flow(self.template, evaluator, self.arrows, self.compartments)
        return algebra.subtract(entering, leaving)[: self.size]

    def slope(self, x: Array, multipliers: Mapping[str, float] | None = None) -> Array:
        """Return the derivative of `net` by all components, `LOOSE` the last: (n, n) or (n, n + 1), in doubles.

        Raises
        ------
        DerivationError
            A max or min is a tie at this state.
        """
        if not multipliers and self._is_traced and self.arrows and not self._walker.selectors:
            program, rows, columns = self._slope_program
            out: Array = np.zeros((self.size, len(x)))
            out[rows, columns] = program.run(list(np.asarray(x, dtype=float).reshape(-1, 1)))[:, 0]
            return out
        evaluator = self._evaluator(FLOATS, x, multipliers)
        _ = self.arrows  # the walk over them finds where a side is to be chosen
        choose_branches(evaluator, self._walker.selectors)
        return self._slopes(evaluator)

    def _slopes(self, evaluator: Evaluator) -> Array:
        F, losses, gains = slopes(self.template, evaluator, self.arrows, self.compartments)
        return np.asarray(F - losses + gains)[: self.size]

    # --- the same as programs: the walk over trees is done once, and not at every moment ------------------------------

    @cached_property
    def _is_traced(self) -> bool:
        return self.size <= (MOST_TRACED_GROUPED if self.template.space.sizes else MOST_TRACED)

    @cached_property
    def _traced(self) -> tuple[TracedArithmetic, Array]:
        """The arithmetic, and the state as inputs of its trace, (n, 1)."""
        trace = Trace()
        n = self.size + (LOOSE in self.scenario.compartments)
        state: Array = np.empty((n, 1), dtype=object)
        state[:, 0] = [trace.input(nonnegative=False) for _ in range(n)]
        return TracedArithmetic(trace), state

    @cached_property
    def _net_program(self) -> Program:
        arithmetic, state = self._traced
        return compiled(arithmetic.trace, self.net(state, arithmetic).ravel().tolist())

    @cached_property
    def _slope_program(self) -> tuple[Program, Array, Array]:
        """The program of the slopes that are not 0 by structure, and their rows and columns."""
        arithmetic, state = self._traced
        found = self._slopes(self._evaluator(arithmetic, state, None))
        rows, columns = np.nonzero(
            np.array([[entry.value != 0 for entry in row] for row in found.tolist()], dtype=bool)
        )
        return compiled(arithmetic.trace, found[rows, columns].tolist()), rows, columns


def _exact(algebra: Algebra, table: Array) -> Array:
    out = np.empty(table.shape, dtype=object)
    out.ravel()[:] = [algebra.number(Fraction(float(entry))) for entry in np.ravel(table)]
    return out
