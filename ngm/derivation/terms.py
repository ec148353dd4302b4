"""What each entry of F and V is made of, flow by flow: how a wrong arrow is found."""

from __future__ import annotations

from ngm.derivation.linearise import ONE, Applied, Summed, Term, product
from ngm.derivation.template import Template
from ngm.expression.tree import Apply, Multiply, Name, Node, Total, rebuild
from ngm.expression.write import write
from ngm.results import EntryTerm

__all__ = ["entry_terms"]


def entry_terms(template: Template) -> tuple[EntryTerm, ...]:
    """Return every share of every entry of F and V, in the order of the flows."""
    infected = set(template.infected)
    out = []
    for arrow in template.arrows:
        for term in arrow.rate.terms:
            if term.column not in infected:
                continue
            share = _text(term)
            if arrow.source in infected:
                out.append(EntryTerm("V", arrow.source, term.column, arrow.number, arrow.label, term.sign, share))
            if arrow.target in infected and arrow.arriving is None:
                matrix, sign = ("F", term.sign) if arrow.transmission else ("V", -term.sign)
                out.append(EntryTerm(matrix, arrow.target, term.column, arrow.number, arrow.label, sign, share))
        for term in arrow.arriving or ():
            if term.column in infected and arrow.target is not None:
                share = _text(term, arriving=True)
                out.append(EntryTerm("V", arrow.target, term.column, arrow.number, arrow.label, -term.sign, share))
    return tuple(out)


def _text(term: Term, *, arriving: bool = False) -> str:
    """Return the chain as an expression; inside a matrix or a sum it acts on the column's own values."""
    acts = any(isinstance(factor, Applied | Summed) for factor in term.factors)
    node: Node = Name(term.column) if acts else ONE
    for factor in reversed(term.factors):
        if isinstance(factor, Applied):
            node = Apply(factor.matrix, node)
        elif isinstance(factor, Summed):
            for dimension in factor.dimensions:
                node = Total(node, dimension)
        else:
            node = product(factor, node)
    text = write(_plain(node))
    return f"{text} (those who arrive)" if arriving else text


def _plain(node: Node) -> Node:
    """Return the node without the synthetic names that say which side of a max or min is in force."""
    if isinstance(node, Multiply):
        kept = tuple(
            (sign, _plain(part))
            for sign, part in node.factors
            if not (isinstance(part, Name) and part.name.startswith("#"))
        )
        if not kept:
            return ONE
        if len(kept) == 1 and kept[0][0] > 0:
            return kept[0][1]
        if kept[0][0] < 0:
            kept = ((1, ONE), *kept)
        return Multiply(kept, node.position)
    return rebuild(node, _plain)
