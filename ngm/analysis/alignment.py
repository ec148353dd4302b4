"""Two scenarios laid side by side: what was renamed, and which flow of the one is which of the other."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from ngm.expression.tree import Name, Node, names, replace_names
from ngm.scenario.model import Definition, Expression, Flow, Movement, Parameter, Scenario

__all__ = ["paired_flows", "renamed", "renames"]


def renames(first: Scenario, second: Scenario) -> dict[str, str]:
    """Return names of the first that stand for the same thing under another name in the second.

    A compartment that is gone and one that is new are one where they are both infected or both not, and most arrows to and
    from them agree; a parameter or definition where its value agrees, and an expression that uses it does so under the
    other name.
    """
    out: dict[str, str] = {}
    gone = [name for name in first.compartments if name not in second.compartments]
    new = [name for name in second.compartments if name not in first.compartments]
    for old in gone:
        best, score = None, 0
        for other in new:
            if first.compartments[old].infected != second.compartments[other].infected or other in out.values():
                continue
            agree = _shared(_ends(first, {**out, old: other}), _ends(second, {}), other)
            label = first.compartments[old].label
            if label is not None and label == second.compartments[other].label:
                agree += 2
            arrows = max(sum(old in e for e in _ends(first, {})), sum(other in e for e in _ends(second, {})))
            if agree > score and 2 * agree > arrows:
                best, score = other, agree
        if best is not None:
            out[old] = best
    for section in ("parameters", "definitions"):
        before: Mapping[str, object] = first.parameters if section == "parameters" else first.definitions
        after: Mapping[str, object] = second.parameters if section == "parameters" else second.definitions
        for old in [name for name in before if name not in after]:
            for other in [name for name in after if name not in before and name not in out.values()]:
                if _value(first, old, {**out, old: other}) == _value(second, other, {}) and _used_alike(
                    first, second, {**out, old: other}, other
                ):
                    out[old] = other
                    break
    return out


def _ends(scenario: Scenario, names_: Mapping[str, str]) -> list[tuple[str | None, str | None]]:
    return [(names_.get(f.source or "", f.source), names_.get(f.target or "", f.target)) for f in scenario.flows]


def _shared(left: list[tuple[str | None, str | None]], right: list[tuple[str | None, str | None]], name: str) -> int:
    """Return how many arrows to or from a compartment both have."""
    rest = [ends for ends in right if name in ends]
    count = 0
    for ends in left:
        if ends in rest:
            rest.remove(ends)
            count += 1
    return count


def _tree(node: Node, names_: Mapping[str, str]) -> Node:
    return replace_names(node, lambda name: Name(names_[name.name], name.groups) if name.name in names_ else None)


def _value(scenario: Scenario, name: str, names_: Mapping[str, str]) -> object:
    if name in scenario.definitions:
        return _tree(scenario.definitions[name].expression.tree, names_)
    return tuple(_tree(node, names_) for node in scenario.parameters[name].in_force())


def _expressions(scenario: Scenario) -> list[Node]:
    return [
        *(flow.rate.tree for flow in scenario.flows),
        *(definition.expression.tree for definition in scenario.definitions.values()),
        *(value.tree for parameter in scenario.parameters.values() if parameter.follows for value in parameter.values),
    ]


def _used_alike(first: Scenario, second: Scenario, names_: Mapping[str, str], name: str) -> bool:
    """Return whether an expression that uses the name stands in both (other names that differ aside)."""
    there = [tree for tree in _expressions(second) if name in names(tree)]
    here = [_tree(tree, names_) for tree in _expressions(first)]
    return any(tree in there for tree in here) or any(
        len(names(a)) == len(names(b)) and names(a) & names(b) and name in names(a) for a in here for b in there
    )


def renamed(scenario: Scenario, names_: Mapping[str, str]) -> Scenario:
    """Return the scenario under other names."""
    if not names_:
        return scenario

    def of(name: str) -> str:
        return names_.get(name, name)

    def expression(value: Expression) -> Expression:
        return replace(value, tree=_tree(value.tree, names_))

    def parameter(p: Parameter) -> Parameter:
        return replace(p, name=of(p.name), values=tuple(expression(value) for value in p.values))

    def flow(f: Flow) -> Flow:
        source = None if f.source is None else of(f.source)
        target = None if f.target is None else of(f.target)
        return replace(f, source=source, target=target, rate=expression(f.rate))

    def definition(d: Definition) -> Definition:
        return replace(d, name=of(d.name), expression=expression(d.expression))

    def movement(m: Movement) -> Movement:
        return replace(m, of=tuple(of(name) for name in m.of))

    return replace(
        scenario,
        compartments={of(name): replace(c, name=of(name)) for name, c in scenario.compartments.items()},
        parameters={of(name): parameter(p) for name, p in scenario.parameters.items()},
        definitions={of(name): definition(d) for name, d in scenario.definitions.items()},
        flows=tuple(flow(f) for f in scenario.flows),
        movements=tuple(movement(m) for m in scenario.movements),
        infection_free={of(n): tuple(expression(v) for v in values) for n, values in scenario.infection_free.items()},
        matrices={
            name: m if m.population is None else replace(m, population=expression(m.population))
            for name, m in scenario.matrices.items()
        },
        state_now={},
        interventions=(),
    )


def paired_flows(first: Scenario, second: Scenario) -> list[tuple[int | None, int | None]]:
    """Return the flows side by side, by their place from 0: those of the second in order, then what is gone.

    Equal flows are one; then those between the same compartments, with the same kind before another.
    """
    left = dict(enumerate(first.flows))
    pairs: dict[int, int] = {}

    def take(alike: object) -> None:
        for k, flow in enumerate(second.flows):
            if k in pairs:
                continue
            for j, other in left.items():
                if alike(other, flow):  # type: ignore[operator]
                    pairs[k] = j
                    del left[j]
                    break

    def ends(a: Flow, b: Flow) -> bool:
        return (a.source, a.target) == (b.source, b.target)

    take(lambda a, b: ends(a, b) and a.kind == b.kind and a.rate.tree == b.rate.tree)
    take(lambda a, b: ends(a, b) and a.rate.tree == b.rate.tree)
    take(lambda a, b: ends(a, b) and a.kind == b.kind)
    take(ends)
    out: list[tuple[int | None, int | None]] = [(pairs.get(k), k) for k in range(len(second.flows))]
    return [*out, *((j, None) for j in left)]
