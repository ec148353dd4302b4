"""Local indices as formulas, where R0 has a closed form; each is held against the number before it is shown."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from ngm.derivation.compile import formulas
from ngm.derivation.evaluate import FLOATS
from ngm.derivation.template import Template
from ngm.errors import ExpressionError
from ngm.expression.parse import parse
from ngm.expression.tree import Apply, Node, Total, walk
from ngm.results_sensitivity import LocalIndex
from ngm.scenario.model import Scenario
from ngm.worker import WorkerFailed, slope_forms

__all__ = ["AGREE", "with_formulas"]

#: Relative difference of formula and number above which the formula is not shown.
AGREE = 1e-9
#: Seconds for the formulas.
LIMIT = 5.0


def with_formulas(
    scenario: Scenario, local: Sequence[LocalIndex], closed_form: str, R0: float | None
) -> tuple[LocalIndex, ...]:
    """Return the indices with dR0/dp and (p/R0) dR0/dp as formulas; those that have none worth reading stay as they are.

    Parameters
    ----------
    local : sequence of LocalIndex
        The numbers, which a formula must meet to `AGREE`.
    closed_form : str
        R0 as `ngm.solve` writes it.
    """
    tree = parse(closed_form, items=True)
    if any(isinstance(node, Apply | Total) for node in walk(tree)):
        return tuple(local)
    values = values_in_force(scenario)
    meanings: dict[str, Node] = {}
    for parameter in scenario.parameters.values():
        for item, value in zip(scenario.items(parameter.name, parameter.by), parameter.in_force(), strict=True):
            if not _is_number(scenario, parameter.name, item, local):
                meanings[item] = value
    any_sign = [item for p in scenario.parameters.values() if p.any_sign for item in scenario.items(p.name, p.by)]
    try:
        found = slope_forms(tree, meanings, [index.parameter for index in local], values, any_sign, LIMIT)
    except WorkerFailed:
        return tuple(local)
    return tuple(_checked(scenario, index, found.get(index.parameter), values, R0) for index in local)


def values_in_force(scenario: Scenario) -> dict[str, float]:
    """Return the number in force of each parameter, by item, in the scenario's units."""
    template = Template(scenario)
    evaluator = template.evaluator(FLOATS, {})
    out: dict[str, float] = {}
    for name, parameter in scenario.parameters.items():
        flat = template.space.flatten(evaluator.name(name), parameter.by)[:, 0]
        out |= dict(zip(scenario.items(name, parameter.by), flat.tolist(), strict=True))
    return out


def _is_number(scenario: Scenario, name: str, item: str, local: Sequence[LocalIndex]) -> bool:
    return any(index.parameter in (item, name) for index in local)


def _checked(
    scenario: Scenario,
    index: LocalIndex,
    found: tuple[str, str] | None,
    values: dict[str, float],
    R0: float | None,
) -> LocalIndex:
    """Return an index with its formulas, where both are the numbers that were worked out without them."""
    if found is None or index.derivative is None or index.elasticity is None:
        return index
    factor = float(scenario.parameters[index.parameter.split("[")[0]].factor)
    names = list(values)
    try:
        program = formulas(list(found), names)
    except (ExpressionError, KeyError, ValueError):
        return index
    slope, share = program.run([np.array([values[name]]) for name in names])[:, 0].tolist()
    size = abs(R0 or 0.0) / abs(index.value) if index.value else 1.0
    near = abs(slope * factor - index.derivative) <= AGREE * max(abs(index.derivative), AGREE * size)
    if not (near and abs(share - index.elasticity) <= AGREE * max(1.0, abs(index.elasticity))):
        return index
    return replace(index, formula=found[0], elasticity_formula=found[1], factor=factor)
