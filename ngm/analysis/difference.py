"""Two models side by side: what differs, which entries of F, V and K moved and why, and what moved R0."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from itertools import combinations
from typing import Any

from ngm.analysis.alignment import paired_flows, renamed, renames
from ngm.analysis.matrices import as_floats
from ngm.analysis.numbers import Numbers, decided_numbers
from ngm.derivation.terms import entry_terms
from ngm.engine.balls import nearest
from ngm.errors import NgmError
from ngm.expression.write import write
from ngm.results_opinion import Contribution, Difference, EntryChange, ModelChange
from ngm.scenario.exact import NoValueError, evaluate
from ngm.scenario.model import Flow, Parameter, Scenario
from ngm.scenario.slips import mixed_up

__all__ = ["difference"]

#: Changes up to which every order is averaged over: 2^6 models.
MOST_AVERAGED = 6
MOST_IN_ORDER = 40
MOST_TYPES = 60
#: Entries that differ by less than this share did not move.
SAME = 1e-9


@dataclass(frozen=True)
class _Step:
    """One change that can be made by itself: what to call it, and the first model with it made."""

    name: str
    make: Callable[[Scenario], Scenario] = lambda scenario: scenario
    #: the place of the flow that changes, where it is one
    slot: int | None = None


def difference(first: Scenario, second: Scenario) -> Difference:
    """Return what differs between two scenarios, and what each change does to F, V, K and R0.

    The contribution of a change to R0 is what R0 moves when it is made: once in the order listed (they add up to the
    whole), and, for up to 6 changes, as the mean over all orders (Shapley 1953, from memory). Renaming contributes nothing.

    Raises
    ------
    ngm.DerivationError
        As `ngm.solve`, for either scenario.
    """
    mapping = renames(first, second)
    before = renamed(first, mapping)
    one, two = decided_numbers(before), decided_numbers(second)
    warnings: list[str] = []
    changes = [
        ModelChange("compartment" if old in first.compartments else "name", "renamed", old, old, new)
        for old, new in mapping.items()
    ]
    steps: list[_Step] = []
    _parameters(before, second, changes, steps)
    _structure(before, second, changes, steps)
    if before.dimensions != second.dimensions:
        # Nothing stands between two models that group their hosts differently.
        steps = [_Step("groups, compartments, flows and values", lambda _: second)]
    between = _Between(before, second, steps, one, two)
    moved = _entries(between, one, two, warnings)
    contributions = _contributions(between, warnings)
    return Difference(
        first.title,
        second.title,
        (_root(one), _root(two)),
        (one.growth, two.growth),
        tuple(changes),
        moved,
        contributions,
        tuple(warnings),
    )


def _root(found: Numbers) -> float | None:
    if found.no_R0 is not None:
        return None
    return 0.0 if found.spectrum is None else nearest(found.spectrum.root)


# --- what differs -----------------------------------------------------------------------------------------------------


def _parameters(first: Scenario, second: Scenario, changes: list[ModelChange], steps: list[_Step]) -> None:
    for name in dict.fromkeys([*first.parameters, *second.parameters]):
        old, new = first.parameters.get(name), second.parameters.get(name)
        if old is None or new is None:
            how = "added" if old is None else "removed"
            changes.append(ModelChange("parameter", how, name, _shown(old), _shown(new)))
            continue
        if old.in_force() == new.in_force() and old.by == new.by:
            if _shown(old) != _shown(new):
                note = "the same value in force, written otherwise"
                changes.append(ModelChange("parameter", "changed", name, _shown(old), _shown(new), note))
            continue
        changes.append(ModelChange("parameter", "changed", name, _shown(old), _shown(new), _slip(old, new)))

        def make(scenario: Scenario, new: Parameter = new) -> Scenario:
            return replace(scenario, parameters={**scenario.parameters, new.name: new})

        steps.append(_Step(f"value of {name}", make))


def _shown(parameter: Parameter | None) -> str | None:
    if parameter is None:
        return None
    texts = list(dict.fromkeys(value.text for value in parameter.values))
    text = ", ".join(texts[:8]) + (", …" if len(texts) > 8 else "")
    return f"{text} {parameter.unit.text}" if parameter.unit is not None else text


def _slip(old: Parameter, new: Parameter) -> str | None:
    """Return a note where the value changed by a factor between two units that are easily mixed up."""
    ratios = []
    for a, b in zip(old.in_force(), new.in_force(), strict=False):
        try:
            ratios.append(float(evaluate(b)) / float(evaluate(a)))
        except (NoValueError, ZeroDivisionError):
            return None
    if not ratios or max(ratios) - min(ratios) > 1e-9 * abs(max(ratios)) or ratios[0] <= 0:
        return None
    found = mixed_up(ratios[0], 1.002)
    return None if found is None else f"changed by the factor {found[0]:g}: were {found[1]} mixed up?"


def _structure(first: Scenario, second: Scenario, changes: list[ModelChange], steps: list[_Step]) -> None:
    """Note what differs besides values; a step for each, or one for all where the compartments differ."""
    own: list[_Step] = []
    apart = False
    for name in dict.fromkeys([*first.compartments, *second.compartments]):
        old, new = first.compartments.get(name), second.compartments.get(name)
        if old is None or new is None:
            changes.append(ModelChange("compartment", "added" if old is None else "removed", name, None, None))
            apart = True
        elif (old.infected, old.by) != (new.infected, new.by):
            texts = [
                ("infected" if c.infected else "not infected") + (f", by {', '.join(c.by)}" if c.by else "")
                for c in (old, new)
            ]
            changes.append(ModelChange("compartment", "changed", name, *texts))
            apart = True
    pairs = paired_flows(first, second)
    for place, (j, k) in enumerate(pairs):
        before = None if j is None else first.flows[j]
        after = None if k is None else second.flows[k]
        if (
            before is not None
            and after is not None
            and (before.kind, before.rate.tree) == (after.kind, after.rate.tree)
        ):
            continue
        how = "added" if before is None else "removed" if after is None else "changed"
        label = _flow_name(k, after) if after is not None else _flow_name(j, before)
        changes.append(ModelChange("flow", how, label, _flow_text(before), _flow_text(after)))
        own.append(_Step(f"{label} {how}", slot=place))
    for name in dict.fromkeys([*first.definitions, *second.definitions]):
        old_text, new_text = (
            write(s.definitions[name].expression.tree) if name in s.definitions else None for s in (first, second)
        )
        if old_text == new_text:
            continue
        how = "added" if old_text is None else "removed" if new_text is None else "changed"
        changes.append(ModelChange("definition", how, name, old_text, new_text))
        if how == "changed":
            own.append(
                _Step(
                    f"definition of {name}",
                    lambda s, name=name: replace(s, definitions={**s.definitions, name: second.definitions[name]}),  # type: ignore[misc]
                )
            )
    rest: dict[str, Any] = {}
    for section, what in (
        ("infection_free", "infection-free state"),
        ("matrices", "matrices"),
        ("movements", "movements"),
        ("dimensions", "dimensions"),
    ):
        old_value, new_value = _section(first, section), _section(second, section)
        if old_value != new_value:
            changes.append(ModelChange(section, "changed", what, None, None))
            value = _field(second, section)
            rest[section] = value
            apart = apart or section == "dimensions"
            own.append(_Step(what, lambda s, section=section, value=value: replace(s, **{section: value})))  # type: ignore[misc]
    if apart:

        def make(scenario: Scenario) -> Scenario:
            return replace(
                scenario,
                compartments=second.compartments,
                flows=second.flows,
                definitions=second.definitions,
                **{"infection_free": second.infection_free, **rest},
            )

        steps.append(_Step("compartments and flows", make))
    else:
        steps.extend(own)


def _field(scenario: Scenario, section: str) -> Any:
    return {
        "infection_free": scenario.infection_free,
        "matrices": scenario.matrices,
        "movements": scenario.movements,
        "dimensions": scenario.dimensions,
    }[section]


def _section(scenario: Scenario, section: str) -> Any:
    if section == "infection_free":
        return {name: tuple(value.tree for value in values) for name, values in scenario.infection_free.items()}
    if section == "matrices":
        return {
            name: (m.by, m.blocks, m.within, m.reciprocal, None if m.population is None else m.population.tree)
            for name, m in scenario.matrices.items()
        }
    return _field(scenario, section)


def _flow_name(place: int | None, flow: Flow | None) -> str:
    label = f' "{flow.label}"' if flow is not None and flow.label else ""
    return f"flow {(place or 0) + 1}{label}"


def _flow_text(flow: Flow | None) -> str | None:
    if flow is None:
        return None
    return f"{flow.source or 'outside'} -> {flow.target or 'out'}: {write(flow.rate.tree)} ({flow.kind})"


# --- models between the two -------------------------------------------------------------------------------------------


class _Between:
    """The first model with some of the changes made; numbers are kept."""

    def __init__(self, first: Scenario, second: Scenario, steps: list[_Step], one: Numbers, two: Numbers) -> None:
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

    def root(self, made: frozenset[int]) -> float | None:
        """Return R0 with these changes made."""
        found = self.at(made)
        return None if found is None else _root(found)


def _contributions(between: _Between, warnings: list[str]) -> tuple[Contribution, ...]:
    steps = between.steps
    n = len(steps)
    if not n:
        return ()
    if n > MOST_IN_ORDER:
        warnings.append(f"{n} changes: their contributions to R0 are listed for up to {MOST_IN_ORDER}.")
        return ()
    in_order: list[float | None] = []
    for k in range(n):
        before, after = between.root(frozenset(range(k))), between.root(frozenset(range(k + 1)))
        in_order.append(None if before is None or after is None else after - before)
    averaged: list[float | None] = [None] * n
    if n <= MOST_AVERAGED:
        averaged = [_average(between, k, n) for k in range(n)]
    else:
        warnings.append(f"{n} changes: averages over all orders are taken for up to {MOST_AVERAGED}.")
    if None in in_order:
        warnings.append("Some models between the two have no R0: their changes have no contribution of their own.")
    return tuple(Contribution(s.name, a, b) for s, a, b in zip(steps, in_order, averaged, strict=True))


def _average(between: _Between, k: int, n: int) -> float | None:
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


# --- entries ----------------------------------------------------------------------------------------------------------

_Table = dict[tuple[str, str], float]


def _tables(found: Numbers | None) -> dict[str, _Table]:
    if found is None or found.F is None:
        return {}
    types = found.template.types
    at = [types[int(k)] for k in found.at]
    out: dict[str, _Table] = {}
    for name, matrix, labels in (("F", found.F, types), ("V", found.V, types), ("K", found.K, at)):
        if matrix is not None:
            values = as_floats(matrix)
            out[name] = {(a, b): float(values[i, j]) for i, a in enumerate(labels) for j, b in enumerate(labels)}
    return out


def _moved(before: float | None, after: float | None) -> bool:
    a, b = before or 0.0, after or 0.0
    return abs(a - b) > SAME * max(abs(a), abs(b))


def _entries(between: _Between, one: Numbers, two: Numbers, warnings: list[str]) -> tuple[EntryChange, ...]:
    """Return the entries that moved, each with the changes that move it by themselves, made first or made last."""
    if max(len(one.template.types), len(two.template.types)) > MOST_TYPES:
        warnings.append(f"More than {MOST_TYPES} types: the entries that moved are not listed.")
        return ()
    old, new = _tables(one), _tables(two)
    n = len(between.steps)
    alone: list[tuple[dict[str, _Table], dict[str, _Table]]] = []
    for k in range(n if n <= MOST_IN_ORDER else 0):
        everything_else = frozenset(range(n)) - {k}
        last = {} if n > 12 else _tables(between.at(everything_else))
        alone.append((_tables(between.at(frozenset({k}))), last))
    terms = {(t.matrix, t.row, t.column): t.label for found in (one, two) for t in entry_terms(found.template)}
    out = []
    for matrix in ("F", "V", "K"):
        before, after = old.get(matrix, {}), new.get(matrix, {})
        for key in dict.fromkeys([*before, *after]):
            a, b = before.get(key), after.get(key)
            if not _moved(a, b):
                continue
            because = []
            for step, (first, last) in zip(between.steps, alone, strict=False):
                by_itself = matrix in first and _moved(a, first[matrix].get(key))
                at_last = matrix in last and _moved(b, last[matrix].get(key))
                if by_itself or at_last:
                    because.append(step.name)
            if not because and (matrix, *key) in terms:
                because.append(terms[matrix, *key])
            out.append(EntryChange(matrix, key[0], key[1], a, b, tuple(because)))
    return tuple(out)
