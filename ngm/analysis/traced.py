"""A scenario traced: the same way from flows to F and V as for one point, with drawn parameters left open.

The parameters that are drawn follow inputs of a trace; the infection-free state is solved by elimination where its
equations are affine, and is an input itself where they are not.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from fractions import Fraction
from functools import cached_property

import numpy as np

from ngm.analysis.matrices import balanced, changed
from ngm.analysis.point import Point
from ngm.analysis.state import InfectionFree
from ngm.derivation.evaluate import FLOATS, Algebra, Evaluator
from ngm.derivation.expand import net_flow
from ngm.derivation.linearise import Selector
from ngm.derivation.network import Network, network
from ngm.derivation.rest import RestSystem
from ngm.derivation.space import Array
from ngm.derivation.stays import stays
from ngm.derivation.template import Template
from ngm.derivation.tracing import Trace, Traced, TracedArithmetic
from ngm.expression.tree import Name, Node, names
from ngm.scenario.model import Expression, Intervention, Parameter, Scenario, number

__all__ = ["Columns", "CurvedBaseline", "TracedPoint", "TracedTemplate", "opened"]

#: parameter -> for each copy the input it is read from, None: as the file has it
Columns = Mapping[str, tuple[int | None, ...]]


def opened(scenario: Scenario, columns: Columns) -> Scenario:
    """Return the scenario in which each drawn parameter follows another of its own, whose values are the inputs.

    Then interventions and parameters that follow act on it as on any other. The name holds a "#", as no name of a file.
    """
    parameters = dict(scenario.parameters)
    template: Template | None = None
    for name, places in columns.items():
        parameter = parameters[name]
        hidden = f"#{name}"
        numbers = parameter.values
        if parameter.follows:
            if template is None:
                template = Template(scenario)
            flat = template.space.flatten(template.evaluator(FLOATS, {}).name(name), parameter.by)[:, 0]
            numbers = tuple(number(Fraction(repr(v))) for v in flat.tolist())
        parameters[hidden] = Parameter(hidden, numbers, parameter.by, any_sign=parameter.any_sign)
        open_ = Expression(hidden, Name(hidden))
        parameters[name] = replace(
            parameter,
            values=tuple(v if k is None else open_ for v, k in zip(parameter.values, places, strict=True)),
        )
    return replace(scenario, parameters=parameters)


@dataclass(frozen=True)
class TracedTemplate(Template):
    """A template whose evaluators, where they trace, start from parameters already traced."""

    trace: Trace = field(default_factory=Trace)
    algebra: Algebra | None = None
    inputs: tuple[Traced, ...] = ()
    columns: Columns = field(default_factory=dict)

    @cached_property
    def traced(self) -> dict[str, Array]:
        """Every parameter in force, over the space."""
        scenario, space = self.scenario, self.space
        assert self.algebra is not None
        hidden: dict[str, Array] = {}
        zero = self.trace.constant(0.0)
        for name, places in self.columns.items():
            flat = np.empty((len(places), 1), dtype=object)
            flat[:, 0] = [zero if k is None else self.inputs[k] for k in places]
            hidden[f"#{name}"] = space.spread(flat, scenario.parameters[name].by)
        evaluator = Template.evaluator(self, self.algebra, {}, names=hidden)
        out = {}
        # What is drawn comes first: what follows it takes it as converted.
        for name in [*self.columns, *scenario.parameters]:
            if name in out:
                continue
            parameter = scenario.parameters[name]
            value = evaluator.name(name)
            if name in self.columns and parameter.follows and parameter.unit is not None:
                # An open value is in the parameter's own unit, as are numbers that stand beside it.
                value = value * self.trace.constant(float(parameter.unit.factor))
                evaluator.names[name] = value
            out[name] = value
        return out

    @cached_property
    def exponents(self) -> set[str]:
        """Names in exponents on what vanishes: there the structure depends on values."""
        return set()

    def _exponent(self, node: Node) -> list[float]:
        self.exponents.update(names(node))
        return super()._exponent(node)

    def evaluator(
        self,
        algebra: Algebra,
        state: Mapping[str, Array],
        *,
        names: Mapping[str, Array] | None = None,
        matrices: Mapping[str, Array] | None = None,
    ) -> Evaluator:
        """Return an evaluator; see `Template.evaluator`."""
        if algebra is self.algebra:
            names = {**self.traced, **(names or {})}
        return super().evaluator(algebra, state, names=names, matrices=matrices)


class CurvedBaseline(Exception):  # noqa: N818
    """Matrices are balanced by a state that has to be searched for at every draw, and then changed: not traced."""


class _Rest(RestSystem):
    """The equations at rest, traced; which side of a max or min is in force is left to the draw."""

    def slope_network(self, x: Array) -> Network:
        """Return the network of the free compartments at x."""
        template = self.template
        evaluator = self.evaluator(x)
        _choose(evaluator, template.rest_walker.selectors)
        return network(template, evaluator, template.rest_arrows, template.free)


def _choose(evaluator: Evaluator, selectors: list[Selector]) -> None:
    """Set the names that say which side of a max or min is in force: 1 or 0, no number at a tie."""
    for selector in selectors:
        gap = evaluator.algebra.subtract(evaluator.value(selector.larger), evaluator.value(selector.smaller))
        flat = np.empty(gap.size, dtype=object)
        flat[:] = [item.trace.step(item) for item in gap.ravel().tolist()]
        evaluator.names[selector.name] = flat.reshape(gap.shape)


class TracedPoint(Point):
    """One scenario with drawn parameters open, with or without an intervention."""

    def __init__(
        self,
        original: Scenario,
        intervention: Intervention | None,
        trace: Trace,
        inputs: tuple[Traced, ...],
        columns: Columns,
    ) -> None:
        super().__init__(original, intervention)
        self.trace, self.inputs, self.columns = trace, inputs, columns
        self.unknown: list[Traced] = []
        self.net: list[Traced] = []
        self.slope: Array | None = None
        self.solved: list[Traced] = []
        self.doubtful: list[tuple[Traced, Traced]] = []
        self.balance: list[tuple[str, Traced, Traced]] = []

    @cached_property
    def template(self) -> TracedTemplate:
        """The structure of the scenario."""
        return TracedTemplate(self.scenario, self.trace, self.algebra, self.inputs, self.columns)

    @cached_property
    def exact(self) -> bool:
        """True: matrices come as constants of the trace."""
        return True

    @cached_property
    def algebra(self) -> Algebra:
        """The arithmetic of the trace."""
        return self._baseline.algebra if self.intervention is not None else TracedArithmetic(self.trace)

    @cached_property
    def _baseline(self) -> Point:
        if self.intervention is None:
            return self
        return TracedPoint(self.original, None, self.trace, self.inputs, self.columns)

    @cached_property
    def infection_free(self) -> InfectionFree:
        """The state: solved by elimination where the equations are affine, else an input."""
        self.trace.doing = "a group is empty, or contacts become negative"
        if self.intervention is None:
            return self._found(balanced(self.template, self.algebra, self.own_tables, None))
        return self._found(self.matrices)

    @cached_property
    def matrices(self) -> dict[str, Array]:
        """The matrices in force."""
        if self.intervention is None:
            return balanced(self.template, self.algebra, self.own_tables, self.state)
        baseline = self._baseline
        assert isinstance(baseline, TracedPoint)
        known = balanced(baseline.template, self.algebra, self.own_tables, None)
        if any(m not in known for m in self.scenario.matrices):
            known = baseline.matrices
            if baseline.unknown:
                raise CurvedBaseline
        return changed(self.template, self.algebra, known, self.intervention)

    def _found(self, matrices: Mapping[str, Array]) -> InfectionFree:
        template, trace = self.template, self.trace
        system = _Rest(template, self.algebra, matrices)
        n = len(system.labels)
        x = np.empty((n, 1), dtype=object)
        if n:
            trial = [trace.input(nonnegative=True, curved=True) for _ in range(n)]
            x[:, 0] = trial
            net = system.slope_network(x)
            parts = [*net.moves.ravel(), *net.sources.ravel(), *net.exits.ravel(), *net.stray.ravel()]
            if any(part.curved for part in parts):
                self.unknown = trial
                entering, leaving = system.flow(x)
                self.net = [a - b for a, b in zip(entering[:, 0], leaving[:, 0], strict=True)]
                self.slope = _slope(net)
            else:
                for number in trial:  # they were only asked for what depends on them
                    trace.inputs.remove(number)
                x[:, 0] = self._affine(system, net, n)
        state = system.state(x)
        self._check_given(system, x)
        return InfectionFree(state, 0.0, (), {})

    def _affine(self, system: _Rest, net: Network, n: int) -> list[Traced]:
        trace = self.trace
        entering: dict[int, Traced] = {}
        for level in (0.0, 1.0):
            x = np.empty((n, 1), dtype=object)
            x[:, 0] = [trace.constant(level)] * n
            into, out = system.flow(x)
            flow = [a - b for a, b in zip(into[:, 0], out[:, 0], strict=True)]
            if level:
                flow = [f - sum(row) for f, row in zip(flow, _slope(net), strict=True)]
            if not any(f.value is not None and not np.isfinite(f.value) for f in flow):
                break
        entering = {k: f for k, f in enumerate(flow) if f.value != 0}
        found = stays(net, [entering], trace)
        self.doubtful += found.doubtful
        self.solved = [found.columns[0].get(k, trace.constant(0.0)) for k in range(n)]
        return self.solved

    def _check_given(self, system: _Rest, x: Array) -> None:
        template = self.template
        moving = tuple(name for name in template.uninfected if name in template.depended_on)
        into, out = net_flow(template, system.evaluator(x), template.rest_arrows, moving)
        for label, a, b in zip(template.items_of(moving), into[:, 0], out[:, 0], strict=True):
            if label.split("[")[0] not in template.free and a is not b:
                self.balance.append((label, a, b))

    @cached_property
    def evaluator(self) -> Evaluator:
        """Everything in force at the infection-free state."""
        template = self.template
        evaluator = template.evaluator(self.algebra, self.state, matrices=self.matrices)
        _ = template.arrows
        _choose(evaluator, template.at_rest.selectors)
        return evaluator


def _slope(net: Network) -> Array:
    """Return the slope of the net flow: arrivals less losses, (n, n)."""
    out = net.arrivals - net.stray
    for j in range(len(out)):
        total = net.exits[j]
        for i in range(len(out)):
            total = total + net.moves[i, j]
        out[j, j] = out[j, j] - total
    return np.asarray(out)
