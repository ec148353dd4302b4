"""Two models side by side: what differs, which entries of F, V and K moved and why, and what moved R0."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from ngm.analysis.alignment import paired_flows, renamed, renames
from ngm.analysis.between import MOST_IN_ORDER, Between, Step, contributions, root_of
from ngm.analysis.matrices import as_floats
from ngm.analysis.numbers import Numbers, decided_numbers
from ngm.analysis.stated_difference import stated_changes
from ngm.analysis.stated_entries import form_of, is_stated
from ngm.analysis.steady import refuse_season
from ngm.derivation.terms import entry_terms
from ngm.expression.write import write
from ngm.results_opinion import Difference, EntryChange, ModelChange
from ngm.scenario.exact import NoValueError, evaluate
from ngm.scenario.model import Flow, Parameter, Scenario
from ngm.scenario.slips import mixed_up

__all__ = ["difference"]

MOST_TYPES = 60
#: Entries that differ by less than this share did not move.
SAME = 1e-9


def difference(first: Scenario, second: Scenario) -> Difference:
    """Return what differs between two scenarios, and what each change does to F, V, K and R0.

    The contribution of a change to R0 is what R0 moves when it is made: once in the order listed (they add up to the
    whole), and as the mean over all orders (Shapley 1953, from memory), or over random ones where there are too many; see
    `ngm.analysis.between`. Renaming contributes nothing.

    Raises
    ------
    ngm.DerivationError
        As `ngm.solve`, for either scenario.
    """
    for version in (first, second):
        refuse_season(version, "what each difference does to R0")
    forms = [form_of(version) for version in (first, second)]
    mapping = {} if forms != ["flows", "flows"] else renames(first, second)
    before = renamed(first, mapping)
    one, two = decided_numbers(before), decided_numbers(second)
    warnings: list[str] = []
    changes = [
        ModelChange("compartment" if old in first.compartments else "name", "renamed", old, old, new)
        for old, new in mapping.items()
    ]
    steps: list[Step] = []
    _parameters(before, second, changes, steps)
    _structure(before, second, changes, steps)
    if forms[0] != forms[1]:
        # Nothing stands between a model of flows and a matrix.
        changes = [ModelChange("model", "changed", "form", *forms)]
        steps = [Step(f"{forms[1]} in place of {forms[0]}", lambda _: second)]
    if before.dimensions != second.dimensions:
        # Nothing stands between two models that group their hosts differently.
        steps = [Step("groups, compartments, flows and values", lambda _: second)]
    between = Between(before, second, steps, one, two)
    moved = _entries(between, one, two, warnings)
    return Difference(
        first.title,
        second.title,
        (root_of(one), root_of(two)),
        (one.growth, two.growth),
        tuple(changes),
        moved,
        contributions(between, warnings),
        tuple(warnings),
    )


# --- what differs -----------------------------------------------------------------------------------------------------


def _parameters(first: Scenario, second: Scenario, changes: list[ModelChange], steps: list[Step]) -> None:
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

        steps.append(Step(f"value of {name}", make, parameter=new))


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


def _structure(first: Scenario, second: Scenario, changes: list[ModelChange], steps: list[Step]) -> None:
    """Note what differs besides values; a step for each, or one for all where the compartments differ."""
    own: list[Step] = []
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
    stated_changes(first, second, changes, own)
    pairs = [] if is_stated(first) else paired_flows(first, second)
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
        own.append(Step(f"{label} {how}", slot=place))
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
                Step(
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
            own.append(Step(what, lambda s, section=section, value=value: replace(s, **{section: value})))  # type: ignore[misc]
    if apart:

        def make(scenario: Scenario) -> Scenario:
            return replace(
                scenario,
                compartments=second.compartments,
                flows=second.flows,
                definitions=second.definitions,
                given=second.given,
                projection=second.projection,
                **{"infection_free": second.infection_free, **rest},
            )

        steps.append(Step("compartments and flows", make))
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


# --- entries ----------------------------------------------------------------------------------------------------------

_Table = dict[tuple[str, str], float]


def _tables(found: Numbers | None) -> dict[str, _Table]:
    if found is None or found.F is None:
        return {}
    types = found.template.types
    at = [types[int(k)] for k in found.at]
    out: dict[str, _Table] = {}
    for name, matrix, labels in (("F", found.F, types), ("V", found.V, types), ("K", found.K, at)):
        if name != "K" and found.scenario.given is not None:
            continue
        if matrix is not None:
            values = as_floats(matrix)
            out[name] = {(a, b): float(values[i, j]) for i, a in enumerate(labels) for j, b in enumerate(labels)}
    return out


def _moved(before: float | None, after: float | None) -> bool:
    a, b = before or 0.0, after or 0.0
    return abs(a - b) > SAME * max(abs(a), abs(b))


def _entries(between: Between, one: Numbers, two: Numbers, warnings: list[str]) -> tuple[EntryChange, ...]:
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
