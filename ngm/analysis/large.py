"""Large grouped models: the slopes of the template as block matrices, applied and never written out."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from ngm.derivation.evaluate import Evaluator
from ngm.derivation.linearise import Applied, Summed, Term
from ngm.derivation.space import Array
from ngm.derivation.template import Arrow, Template
from ngm.engine.blocks import BlockMatrix, Chain, Contact, Diagonal, Factor, Part, Sum

__all__ = ["block_slopes", "difference", "faults", "parts_of", "scaled", "stray_losses"]


def parts_of(template: Template, compartments: tuple[str, ...]) -> tuple[Part, ...]:
    """Return the compartments as parts of one vector, in the order of the types."""
    space, at = template.space, template.offsets(compartments)
    return tuple(
        Part(space.shape(template.by(name)), at[name], tuple(space.axis(d) for d in template.by(name)))
        for name in compartments
    )


class _Builder:
    def __init__(self, template: Template, evaluator: Evaluator, compartments: tuple[str, ...]) -> None:
        self.template, self.evaluator = template, evaluator
        self.place = {name: k for k, name in enumerate(compartments)}
        self.parts = parts_of(template, compartments)
        self.local: dict[tuple[str, int, int], Array] = {}
        self.matrices = {name: BlockMatrix(self.parts) for name in ("F", "losses", "gains")}

    def chain(self, term: Term, lost: tuple[str, ...]) -> Chain:
        """Return a term as a chain of arrays, with the sum over the dimensions that the row lacks before it."""
        space = self.template.space
        factors: list[Factor] = []
        if lost:
            factors.append(Sum(tuple(space.axis(d) for d in lost), tuple(space.size(d) for d in lost)))
        for factor in term.factors:
            if isinstance(factor, Applied):
                by, within = self.evaluator.along[factor.matrix]
                table = self.evaluator.matrices[factor.matrix]
                table = np.swapaxes(table, -1, -2) if factor.transposed else table
                factors.append(Contact(space.axis(by), table, None if within is None else space.axis(within)))
            elif isinstance(factor, Summed):
                dims = factor.dimensions
                factors.append(Sum(tuple(space.axis(d) for d in dims), tuple(space.size(d) for d in dims)))
            else:
                factors.append(Diagonal(np.asarray(self.evaluator.value(factor)[..., 0])))
        return Chain(tuple(factors), float(term.sign))

    def add(self, into: str, side: str, term: Term, arrow: Arrow) -> None:
        """Add a term to the rows of the compartment at one end of an arrow."""
        lost = tuple(d for d in arrow.by if d not in self.template.by(side))
        chain = self.chain(term, lost)
        i, j = self.place[side], self.place[term.column]
        if chain.is_local:
            shape = self.parts[i].shape
            value = np.full(shape, chain.sign)
            for factor in chain.factors:
                assert isinstance(factor, Diagonal)
                value = value * factor.values
            known = self.local.get((into, i, j))
            self.local[into, i, j] = value if known is None else known + value
        else:
            self.matrices[into].add(i, j, chain)

    def finish(self) -> dict[str, BlockMatrix]:
        """Return the matrices, what groups do by themselves added up in one factor a block."""
        for (into, i, j), value in self.local.items():
            if np.any(value != 0):
                self.matrices[into].add(i, j, Chain((Diagonal(value),)))
        return self.matrices


def block_slopes(
    template: Template, evaluator: Evaluator, arrows: tuple[Arrow, ...], compartments: tuple[str, ...]
) -> tuple[BlockMatrix, BlockMatrix, BlockMatrix]:
    """Return F, losses and gains as block matrices: slope of the net flow = F - losses + gains."""
    builder = _Builder(template, evaluator, compartments)
    for arrow in arrows:
        for term in arrow.rate.terms:
            if term.column not in builder.place:
                continue
            if arrow.source in builder.place:
                builder.add("losses", arrow.source, term, arrow)
            if arrow.target in builder.place and arrow.arriving is None:
                builder.add("F" if arrow.transmission else "gains", arrow.target, term, arrow)
        for term in arrow.arriving or ():
            if arrow.target in builder.place and term.column in builder.place:
                builder.add("gains", arrow.target, term, arrow)
    made = builder.finish()
    return made["F"], made["losses"], made["gains"]


def difference(losses: BlockMatrix, gains: BlockMatrix) -> BlockMatrix:
    """Return losses - gains; what a group does by itself becomes one factor on the diagonal."""
    out = BlockMatrix(losses.parts)
    own: dict[int, Array] = {}
    for sign, matrix in ((1.0, losses), (-1.0, gains)):
        for (i, j), chains in matrix.blocks.items():
            for chain in chains:
                if i == j and chain.is_local:
                    (factor,) = chain.factors
                    assert isinstance(factor, Diagonal)
                    value = sign * chain.sign * factor.values
                    own[i] = value if i not in own else own[i] + value
                else:
                    out.add(i, j, Chain(chain.factors, sign * chain.sign))
    for i, value in own.items():
        out.add(i, i, Chain((Diagonal(np.broadcast_to(value, losses.parts[i].shape)),)))
    return out


def faults(matrix: BlockMatrix) -> tuple[int, int] | None:
    """Return the parts (row, column) of a block with a negative factor, None where every factor is >= 0."""
    for (i, j), chains in matrix.blocks.items():
        for chain in chains:
            negative = chain.sign < 0 or any(
                np.any((f.values if isinstance(f, Diagonal) else f.table) < 0)
                for f in chain.factors
                if not isinstance(f, Sum)
            )
            if negative:
                return i, j
    return None


def stray_losses(losses: BlockMatrix) -> tuple[int, int] | None:
    """Return the parts of a block in which members leave because of others: a positive off-diagonal entry of V."""
    for (i, j), chains in losses.blocks.items():
        if chains and (i != j or not all(chain.is_local for chain in chains)):
            return i, j
    return None


def scaled(F: BlockMatrix, rows: Mapping[int, Array], columns: Mapping[int, Array]) -> BlockMatrix:
    """Return F with the rows and columns of some parts multiplied, group by group."""
    out = BlockMatrix(F.parts)
    for (i, j), chains in F.blocks.items():
        for chain in chains:
            factors: tuple[Any, ...] = chain.factors
            if i in rows:
                factors = (Diagonal(rows[i]), *factors)
            if j in columns:
                factors = (*factors, Diagonal(columns[j]))
            out.add(i, j, Chain(factors, chain.sign))
    return out
