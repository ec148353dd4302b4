"""The matrices in force: as the file gives them, balanced where they are reciprocal, changed by an intervention."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import Any

import numpy as np

from ngm.derivation.evaluate import Algebra, Evaluator
from ngm.derivation.space import Array
from ngm.derivation.template import Template
from ngm.engine.balls import is_balls, to_floats
from ngm.errors import DerivationError, Problem, ScenarioError
from ngm.expression.tree import names
from ngm.scenario.model import Change, Intervention, Matrix

__all__ = [
    "RECIPROCAL",
    "as_floats",
    "balanced",
    "changed",
    "needs_state",
    "population",
    "reciprocity_gap",
    "reciprocity_warnings",
    "tables",
]

#: The two counts of a pair's contacts may differ by this share of their mean.
RECIPROCAL = 1e-9


def as_floats(values: Array) -> Array:
    """Return balls or doubles as doubles."""
    return to_floats(values) if is_balls(values) else np.asarray(values, dtype=float)


def tables(template: Template, algebra: Algebra) -> dict[str, Array]:
    """Return the matrices as the file gives them: (n, n), or (w, n, n) for one given within another dimension."""
    out: dict[str, Array] = {}
    for name, matrix in template.scenario.matrices.items():
        entries = np.array(matrix.blocks, dtype=object)
        table: Array
        if algebra.dtype is float:
            table = entries.astype(float)
        else:
            table = np.empty(entries.shape, dtype=object)
            table.ravel()[:] = [algebra.number(Fraction(entry)) for entry in entries.ravel()]
        out[name] = table if matrix.within is not None else table[0]
    return out


def needs_state(template: Template, matrix: Matrix) -> bool:
    """Return whether the population of a matrix is only known in the infection-free state."""
    assert matrix.population is not None
    todo, seen = set(names(matrix.population.tree)), set()
    while todo:
        name = todo.pop()
        if name in template.scenario.compartments:
            return True
        if name in template.definitions and name not in seen:
            seen.add(name)
            todo |= names(template.definitions[name])
    return False


def population(template: Template, matrix: Matrix, evaluator: Evaluator) -> Array:
    """Return the sizes of the groups, (n,), or (w, n) for a matrix given within another dimension."""
    assert matrix.population is not None
    by = (matrix.by,) if matrix.within is None else (matrix.within, matrix.by)
    flat = template.space.flatten(evaluator.value(matrix.population.tree), by)[:, 0]
    return flat if matrix.within is None else flat.reshape(template.space.size(matrix.within), -1)


def balanced(
    template: Template, algebra: Algebra, plain: Mapping[str, Array], state: Mapping[str, Array] | None
) -> dict[str, Array]:
    """Return the matrices, C' in place of C where they are reciprocal; without a state those that need it are left out."""
    out: dict[str, Array] = {}
    for name, matrix in template.scenario.matrices.items():
        if not matrix.reciprocal:
            out[name] = plain[name]
        elif state is not None or not needs_state(template, matrix):
            evaluator = template.evaluator(algebra, state or {}, matrices=out)
            out[name] = _reciprocal(template, matrix, plain[name], population(template, matrix, evaluator), algebra)
    return out


def _reciprocal(template: Template, matrix: Matrix, table: Array, sizes: Array, algebra: Algebra) -> Array:
    """Return C'[i][j] = (C[i][j] N[i] + C[j][i] N[j]) / (2 N[i])."""
    groups = template.scenario.dimensions[matrix.by].groups
    for k, size in enumerate(sizes.reshape(-1)):
        if not size > 0:
            raise DerivationError(
                Problem(
                    f"matrices.{matrix.name}",
                    f"the population of {groups[k % len(groups)]} is not above 0 in the infection-free state, so its contacts "
                    "cannot be balanced. Give it members, or leave out reciprocal = true.",
                    key=("matrices", matrix.name, "population"),
                )
            )
    blocks, all_sizes = (table[None], sizes[None]) if matrix.within is None else (table, sizes)
    two = algebra.number(Fraction(2))
    out = []
    for C, N in zip(blocks, all_sizes, strict=True):
        total = C * N[:, None]
        out.append((total + total.T) / (N[:, None] * two))
    return np.asarray(out[0]) if matrix.within is None else np.stack(out)


def changed(
    template: Template, algebra: Algebra, given: Mapping[str, Array], intervention: Intervention
) -> dict[str, Array]:
    """Return the matrices after an intervention's changes of them, in order; matrices that are not there yet stay away.

    Raises
    ------
    ScenarioError
        An entry becomes negative.
    """
    out = dict(given)
    moving = {movement.matrix for movement in template.scenario.movements}
    for place, change in enumerate(intervention.changes, 1):
        if change.what != "matrix" or change.name not in out:
            continue
        matrix = template.scenario.matrices[change.name]
        table = out[change.name].copy()
        blocks = table[None] if matrix.within is None else table
        for block in _chosen_blocks(template, matrix, change):
            _change_block(template, algebra, blocks[block], change, matrix)
            if change.name in moving:
                np.fill_diagonal(blocks[block], algebra.number(Fraction(0)))
        if any(entry < 0 for entry in np.ravel(blocks).tolist()):
            raise ScenarioError(
                Problem(
                    f'intervention "{intervention.name}", change {place}',
                    f"an entry of {change.name} becomes negative. Add less, or multiply.",
                    key=("intervention", template.scenario.interventions.index(intervention), "change", place - 1)
                    if intervention in template.scenario.interventions
                    else (),
                )
            )
        out[change.name] = table
    return out


def _chosen_blocks(template: Template, matrix: Matrix, change: Change) -> list[int]:
    if matrix.within is None:
        return [0]
    groups = template.scenario.dimensions[matrix.within].groups
    wanted = change.groups.get(matrix.within, groups)
    return [k for k, group in enumerate(groups) if group in wanted]


def _change_block(template: Template, algebra: Algebra, block: Array, change: Change, matrix: Matrix) -> None:
    groups = template.scenario.dimensions[matrix.by].groups
    rows = [k for k, g in enumerate(groups) if change.rows is None or g in change.rows]
    columns = [k for k, g in enumerate(groups) if change.columns is None or g in change.columns]
    amount: Any = template.evaluator(algebra, {}).value(change.amount.tree).ravel()[0]
    where = np.ix_(rows, columns)
    if change.action == "multiply":
        block[where] = block[where] * amount
    elif change.action == "add":
        block[where] = block[where] + amount
    else:
        block[where] = amount


def reciprocity_gap(template: Template, matrix: Matrix, table: Array, evaluator: Evaluator) -> tuple[float, str]:
    """Return how far a matrix with a population is from C[i][j] N[i] = C[j][i] N[j], and which pair is the worst.

    The gap is the difference of both counts over their mean (at most 2), the pair comes in words.
    """
    sizes = as_floats(population(template, matrix, evaluator))
    table = as_floats(table)
    blocks = table if matrix.within is not None else table[None]
    groups = template.scenario.dimensions[matrix.by].groups
    worst, pair, there = 0.0, (0, 0), 0
    for k, (C, N) in enumerate(zip(blocks, sizes.reshape(len(blocks), -1), strict=True)):
        total = C * N[:, None]
        mean = (total + total.T) / 2
        gap = np.abs(total - total.T) / np.where(mean > 0, mean, 1)
        i, j = np.unravel_index(int(np.argmax(gap)), gap.shape)
        if gap[i, j] > worst:
            worst, pair, there = float(gap[i, j]), (int(i), int(j)), k
    inside = "" if matrix.within is None else f" in {template.scenario.dimensions[matrix.within].groups[there]}"
    return worst, f"{groups[pair[0]]} and {groups[pair[1]]}{inside}"


def reciprocity_warnings(template: Template, evaluator: Evaluator, plain: Mapping[str, Array]) -> list[str]:
    """Return a warning for each matrix that breaks C[i][j] N[i] = C[j][i] N[j], with the worst pair and its size."""
    out = []
    for name, matrix in template.scenario.matrices.items():
        if matrix.population is None or matrix.reciprocal:
            continue
        worst, pair = reciprocity_gap(template, matrix, plain[name], evaluator)
        if worst > RECIPROCAL:
            out.append(
                f"matrices.{name} is not reciprocal: contacts between {pair}, "
                f"counted from either side, differ by {100 * worst:.3g} % of their mean. Set reciprocal = true to balance "
                "them, or check the orientation."
            )
    return out
