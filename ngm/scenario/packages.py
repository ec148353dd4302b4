"""Interventions put together, and interventions at part of their strength."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from itertools import combinations

from ngm.errors import Problem, ScenarioError
from ngm.expression.tree import Add, Multiply, Node, Number
from ngm.expression.write import write
from ngm.scenario import exact
from ngm.scenario.fields import closest, listed, short
from ngm.scenario.model import Change, Expression, Intervention, Scenario, number

__all__ = ["Combination", "combined", "find_intervention", "scaled"]


@dataclass(frozen=True, slots=True)
class Combination:
    """Several interventions as one. `notes`: which of them act on the same thing, and what that means."""

    intervention: Intervention
    parts: tuple[str, ...]
    notes: tuple[str, ...]


def find_intervention(scenario: Scenario, name: str) -> Intervention:
    """Return the intervention of this name; raise ScenarioError with a suggestion where there is none."""
    for intervention in scenario.interventions:
        if intervention.name == name:
            return intervention
    known = [intervention.name for intervention in scenario.interventions]
    if not known:
        raise ScenarioError(Problem("", f"'{short(name)}' is no intervention: the scenario has none."))
    hint = closest(name, known) or f" There are {listed(known)}."
    raise ScenarioError(Problem("", f"'{short(name)}' is no intervention of this scenario.{hint}"))


def combined(scenario: Scenario, names: Sequence[str], name: str | None = None) -> Combination:
    """Return one intervention that applies several, in the order of `names`.

    Each does what it does alone, on top of those before it: two factors on one parameter multiply, a `set` undoes what
    came before. The notes say where two of them meet. The cost is the sum where every one has a cost, else None.

    Raises
    ------
    ScenarioError
        No name, an unknown one, or one that is given twice.
    """
    if not names:
        raise ScenarioError(Problem("", "a combination names no intervention. Name two or more."))
    problems = [
        Problem("", f"intervention '{short(twice)}' is named twice in a combination. Name each once.")
        for twice in dict.fromkeys(given for given in names if names.count(given) > 1)
    ]
    parts = []
    for given in dict.fromkeys(names):
        try:
            parts.append(find_intervention(scenario, given))
        except ScenarioError as error:
            problems.extend(error.problems)
    if problems:
        raise ScenarioError(problems)
    costs = [part.cost for part in parts if part.cost is not None]
    notes = [note for first, second in combinations(parts, 2) for note in _meetings(scenario, first, second)]
    if costs and len(costs) < len(parts):
        without = ", ".join(part.name for part in parts if part.cost is None)
        notes.append(f"{without}: no cost is given, so the combination has none.")
    together = Intervention(
        name or " + ".join(part.name for part in parts),
        tuple(change for part in parts for change in part.changes),
        None,
        sum(costs) if len(costs) == len(parts) else None,
    )
    return Combination(together, tuple(part.name for part in parts), tuple(notes))


def _meetings(scenario: Scenario, first: Intervention, second: Intervention) -> Iterable[str]:
    """Yield what is to be said where two interventions act on the same thing."""
    seen = set()
    for before in first.changes:
        for after in second.changes:
            if not _meet(scenario, before, after):
                continue
            what = (
                f"{before.what} of {before.name}" if before.what in ("susceptibility", "infectivity") else before.name
            )
            pair = f"{first.name} and {second.name} both change {what}"
            kinds = {before.action, after.action}
            if after.action == "set":
                note = f"{pair}: {second.name} comes later and sets it, which undoes {first.name} there."
            elif kinds <= {"multiply", "reduce"}:
                note = f"{pair}: the factors multiply, as if each acted on what the other leaves."
            elif kinds == {"add"}:
                note = f"{pair}: both amounts are added."
            else:
                note = f"{pair}, {before.action} before {after.action}: another order gives another result."
            if note not in seen:
                seen.add(note)
                yield note


def _meet(scenario: Scenario, a: Change, b: Change) -> bool:
    """Return whether two changes touch a common number."""
    if (a.what, a.name) != (b.what, b.name):
        return False
    for dimension in set(a.groups) & set(b.groups):
        if not set(a.groups[dimension]) & set(b.groups[dimension]):
            return False
    if a.what == "matrix":
        groups = scenario.dimensions[scenario.matrices[a.name].by].groups
        for mine, other in ((a.rows, b.rows), (a.columns, b.columns)):
            if not set(mine or groups) & set(other or groups):
                return False
    return True


def scaled(intervention: Intervention, strength: Fraction | float) -> Intervention:
    """Return an intervention at part of its strength s: at 0 it does nothing, at 1 all that it says.

    A factor m becomes 1 - s (1 - m), a share to reduce r becomes s r, an amount to add a becomes s a, and a value to be
    set v becomes x + s (v - x) with x the value before: x times 1 - s, then s v added. The name stays, the cost goes.

    Raises
    ------
    ValueError
        The strength lies outside [0, 1].
    """
    s = Fraction(strength)
    if not 0 <= s <= 1:
        raise ValueError(f"a strength of {float(s):g} lies outside [0, 1]")
    if s == 1:
        return intervention
    changes: list[Change] = []
    for change in intervention.changes:
        amount = change.amount.tree
        part: Node = Multiply(((1, Number(s)), (1, amount)))
        if change.action == "multiply":
            part = Add(((1, Number(1 - s)), (1, part)))
        elif change.action == "set":
            changes.append(replace(change, action="multiply", amount=number(1 - s)))
            change = replace(change, action="add")
        changes.append(replace(change, amount=_closed(part)))
    return replace(intervention, changes=tuple(changes), cost=None)


def _closed(tree: Node) -> Expression:
    value = exact.evaluate(tree)
    return number(value) if isinstance(value, Fraction) else Expression(write(tree), tree)
