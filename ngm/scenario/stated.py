"""A model whose matrices stand in the file, as the arrows that make the same matrices.

A K as given: each type is left at rate 1 and new infections of type i arise at K[i][j] for each member of type j, so that
F = K, V = I and F V^-1 = K. A projected population: of stage j a share T[i][j] moves to stage i in each step, T[j][j] stays,
what the column lacks to 1 is lost, and births[i][j] new members of stage i arise: F = births, V = I - T. With these arrows a
given matrix takes the same way through the program as every other model; what has no meaning for it (a growth rate of K)
is left out by whoever shows it.
"""

from __future__ import annotations

from collections.abc import Collection, Sequence
from fractions import Fraction

from ngm.expression.tree import Add, Multiply, Name, Node, Number
from ngm.expression.write import write
from ngm.scenario.model import Compartment, Expression, Flow, GivenMatrix, Kind, Projection, Scenario

__all__ = ["MOST_STATED", "TYPE_MARK", "compartments_of", "flows_of", "internal_names", "is_large"]

#: Rows of a matrix that stands in the file.
MOST_STATED = 500
#: Entries that are not 0 up to which formulas are written out.
MOST_WRITTEN = 200
#: Ends the internal name of a type that has the name of a parameter or definition: a quote stands in no name, no label.
TYPE_MARK = "'"

ONE = Number(Fraction(1), "1")
Rows = Sequence[Sequence[Expression]]


def is_large(scenario: Scenario) -> bool:
    """Return whether a matrix that stands in the file has too many entries for its formulas to help anybody."""
    if scenario.given is not None:
        tables = [scenario.given.K]
    elif scenario.projection is not None:
        tables = [scenario.projection.births, scenario.projection.transitions]
    else:
        return False
    return sum(not _is_zero(entry.tree) for rows in tables for row in rows for entry in row) > MOST_WRITTEN


def internal_names(labels: Sequence[str], taken: Collection[str]) -> tuple[str, ...]:
    """Return the names under which types are compartments: their labels, marked where the file uses the name otherwise.

    Examples
    --------
    >>> internal_names(["mouse", "p"], {"p", "c"})
    ('mouse', "p'")
    """
    return tuple(label + TYPE_MARK if label in taken or label.startswith("#") else label for label in labels)


def compartments_of(names: Sequence[str], labels: Sequence[str]) -> dict[str, Compartment]:
    """Return the types or stages as compartments, all of them infected (present)."""
    return {name: Compartment(name, True, label) for name, label in zip(names, labels, strict=True)}


def flows_of(model: GivenMatrix | Projection, names: Sequence[str]) -> tuple[Flow, ...]:
    """Return the flows that make the matrices of the model, without those that are 0 by structure."""
    if isinstance(model, GivenMatrix):
        arriving = _arrivals(model.K, names, "transmission", "New infections of {}")
        leaving = [_flow(name, None, Name(name), "transition", _label("End of {}", name)) for name in names]
        return (*arriving, *leaving)
    births = _arrivals(model.births, names, "transmission", "Births of {}")
    moving, leaving = [], []
    for j, name in enumerate(names):
        shares = [(i, row[j].tree) for i, row in enumerate(model.transitions) if not _is_zero(row[j].tree)]
        for i, share in shares:
            if i != j:
                moving.append(
                    _flow(name, names[i], _times(share, name), "transition", _label("{} to {}", name, names[i]))
                )
        lost = Add(((1, ONE), *((-1, share) for _, share in shares))) if shares else ONE
        leaving.append(_flow(name, None, _times(lost, name), "transition", _label("Deaths of {}", name)))
    return (*births, *moving, *leaving)


def _label(text: str, *names: str) -> str:
    return text.format(*(name.removesuffix(TYPE_MARK) for name in names))


def _arrivals(rows: Rows, names: Sequence[str], kind: Kind, label: str) -> list[Flow]:
    """Return one flow for each row: what arrives there because of every column."""
    out = []
    for row, name in zip(rows, names, strict=True):
        terms = [
            _times(entry.tree, column) for entry, column in zip(row, names, strict=True) if not _is_zero(entry.tree)
        ]
        if terms:
            tree = terms[0] if len(terms) == 1 else Add(tuple((1, term) for term in terms))
            out.append(_flow(None, name, tree, kind, _label(label, name)))
    return out


def _times(share: Node, name: str) -> Node:
    if share == ONE:
        return Name(name)
    factors = share.factors if isinstance(share, Multiply) else ((1, share),)
    return Multiply((*factors, (1, Name(name))))


def _is_zero(tree: Node) -> bool:
    return isinstance(tree, Number) and tree.value == 0


def _flow(source: str | None, target: str | None, tree: Node, kind: Kind, label: str) -> Flow:
    return Flow(source, target, Expression(write(tree), tree), kind, label)
