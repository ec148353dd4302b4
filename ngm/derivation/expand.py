"""From arrows to matrices: F and V written out copy by copy, in whatever kind of number the evaluator works in.

V is kept in two parts, what leaves (`losses`) and what arrives (`gains`), V = losses - gains: state elimination needs
them apart, because their difference is where digits and signs get lost.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING

import numpy as np

from ngm.derivation.evaluate import Evaluator
from ngm.derivation.space import Array

if TYPE_CHECKING:
    from ngm.derivation.template import Arrow, Template

__all__ = ["ArrowBlock", "arrow_blocks", "assemble", "blank", "net_flow", "slopes"]


def blank(evaluator: Evaluator, rows: int, columns: int) -> Array:
    """Return a matrix of zeros of the evaluator's kind."""
    out: Array = np.empty((rows, columns), dtype=evaluator.algebra.dtype)
    out[...] = evaluator.algebra.number(Fraction(0))
    return out


def _add_rows(
    template: Template,
    evaluator: Evaluator,
    matrix: Array,
    block: Array,
    arrow: Arrow,
    side: str,
    row: int,
    column: int,
) -> None:
    """Add the slope of an arrow to the rows of the compartment at one of its ends."""
    algebra, space = evaluator.algebra, template.space
    by = template.by(side)
    lost = tuple(name for name in arrow.by if name not in by)
    array = evaluator.total(block, lost) if lost else block
    flat = space.flatten(array, by)
    here = matrix[row : row + flat.shape[0], column : column + flat.shape[1]]
    matrix[row : row + flat.shape[0], column : column + flat.shape[1]] = algebra.add(here, flat)


def assemble(template: Template, evaluator: Evaluator) -> tuple[Array, Array]:
    """Return F and V, (m, m) each, of the infected types."""
    F, losses, gains = slopes(template, evaluator, template.arrows, template.infected)
    return F, evaluator.algebra.subtract(losses, gains)


def slopes(
    template: Template, evaluator: Evaluator, arrows: tuple[Arrow, ...], compartments: tuple[str, ...]
) -> tuple[Array, Array, Array]:
    """Return F, losses and gains by the copies of these compartments: slope of the net flow = F - losses + gains."""
    at = template.offsets(compartments)
    m = sum(template.space.count(template.by(name)) for name in compartments)
    F, losses, gains = (blank(evaluator, m, m) for _ in range(3))
    for arrow in arrows:
        used = {term.column for term in (*arrow.rate.terms, *(arrow.arriving or ()))}
        for column in compartments:
            if column not in used:
                continue
            block = template.chain(arrow.rate.terms, column, evaluator)
            if block is not None:
                if arrow.source in at:
                    _add_rows(template, evaluator, losses, block, arrow, arrow.source, at[arrow.source], at[column])
                if arrow.target in at and arrow.arriving is None:
                    into = F if arrow.transmission else gains
                    _add_rows(template, evaluator, into, block, arrow, arrow.target, at[arrow.target], at[column])
            if arrow.arriving is not None and arrow.target in at:
                block = template.chain(arrow.arriving, column, evaluator)
                if block is not None:
                    _add_rows(template, evaluator, gains, block, arrow, arrow.target, at[arrow.target], at[column])
    return F, losses, gains


def net_flow(
    template: Template, evaluator: Evaluator, arrows: tuple[Arrow, ...], compartments: tuple[str, ...]
) -> tuple[Array, Array]:
    """Return what enters and what leaves each copy of these compartments, (n, k) each, k the evaluator's last axis."""
    at = template.offsets(compartments)
    n = sum(template.space.count(template.by(name)) for name in compartments)
    values = [evaluator.value(arrow.rate.value) for arrow in arrows]
    width = max((value.shape[-1] for value in values), default=1)
    entering, leaving = blank(evaluator, n, width), blank(evaluator, n, width)
    for arrow, one in zip(arrows, values, strict=True):
        value = np.broadcast_to(one, (*one.shape[:-1], width))  # a rate that does not vary is the same in every column
        if arrow.source in at:
            _add_rows(template, evaluator, leaving, value, arrow, arrow.source, at[arrow.source], 0)
        if arrow.target in at:
            if arrow.matrix is not None:
                value = evaluator.apply(arrow.matrix, evaluator.name(arrow.target), transposed=True)
            _add_rows(template, evaluator, entering, value, arrow, arrow.target, at[arrow.target], 0)
    return entering, leaving


@dataclass(frozen=True, slots=True)
class ArrowBlock:
    """One arrow's slope by one compartment, copy by copy: `block[c, j]`, with the rows it leaves and arrives in.

    `leaves` and `arrives` give, for each copy c of the arrow, the row of its source and target (None: not infected).
    """

    arrow: Arrow
    column: str
    block: Array
    leaves: Array | None
    arrives: Array | None


def arrow_blocks(
    template: Template, evaluator: Evaluator, arrows: tuple[Arrow, ...], compartments: tuple[str, ...]
) -> list[ArrowBlock]:
    """Return every arrow's slopes, arrow by arrow, so that what leaves one type can be matched with where it arrives."""
    at = template.offsets(compartments)
    out = []
    for arrow in arrows:
        rows: list[Array | None] | None = None
        used = {term.column for term in arrow.rate.terms}
        for column in compartments:
            if column not in used:
                continue
            block = template.chain(arrow.rate.terms, column, evaluator)
            if block is not None:
                rows = rows or [
                    None if side not in at else at[side] + template.space.index_of(template.by(side), arrow.by)
                    for side in (arrow.source, arrow.target)
                ]
                flat = template.space.flatten(block, arrow.by)
                out.append(ArrowBlock(arrow, column, flat, rows[0], rows[1]))
    return out
