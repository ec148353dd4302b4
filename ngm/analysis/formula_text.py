"""The text of a printed formula, read with the names of a scenario; sums over groups are written out."""

from __future__ import annotations

from collections.abc import Mapping

from ngm.analysis.points import Places
from ngm.errors import ExpressionError, Problem
from ngm.expression.from_latex import from_latex, is_latex, left_power, right_side
from ngm.expression.names import suggest
from ngm.expression.parse import parse
from ngm.expression.tree import Add, Apply, Name, Node, Total, rebuild, replace_names, walk
from ngm.results import Solution
from ngm.scenario.model import Scenario

__all__ = ["read_formula"]

#: Terms that a sum may be written out to.
MOST_TERMS = 2000


def read_formula(scenario: Scenario, solution: Solution, places: Places, text: str) -> Node:
    """Return the tree of a formula: the expression syntax, simple LaTeX, or products without signs.

    ``sum(c^2*n)`` runs over the groups of what is inside; outside of sums a grouped name needs its group, ``c[core]``.

    Raises
    ------
    ngm.ExpressionError
        It cannot be read, a name in it is not known, or it has a value in each group and none is named.
    """
    uninfected = [name for name, compartment in scenario.compartments.items() if not compartment.infected]
    known = [*scenario.parameters, *scenario.definitions, *uninfected]
    own = right_side(text)
    if not own:
        raise ExpressionError(Problem("formula", "is empty. Type R0 as it is printed, such as beta/(gamma + mu)."))
    states = [*scenario.definitions, *uninfected]
    if is_latex(own):
        own = from_latex(own, known, states)
    power = left_power(text)
    if power != 1:
        own = f"sqrt({own})" if power == 2 else f"({own})^(1/{power})"
    try:
        tree = parse(own, where="formula", items="[" in own)
    except ExpressionError as problem:
        # Pasted from a page a product may have lost its signs: beta sigma/((sigma + mu)(gamma + mu)).
        try:
            tree = parse(from_latex(own, known, states), where="formula")
        except ExpressionError:
            raise problem from None
        if not {node.item for node in walk(tree) if isinstance(node, Name)} <= set(known):
            raise
    by: dict[str, tuple[str, ...]] = {p.name: p.by for p in scenario.parameters.values()}
    by |= {d.name: d.by for d in scenario.definitions.values()}
    by |= {name: scenario.compartments[name].by for name in uninfected}
    tree = _written_out(scenario, by, tree)
    items = set(known) | set(solution.infection_free or {}) | set(places.entries)
    for name, parameter in scenario.parameters.items():
        items |= set(scenario.items(name, parameter.by))
    for node in walk(tree):
        if not isinstance(node, Name):
            continue
        if node.item not in items:
            guess = suggest(node.name, known)
            hint = f" Did you mean '{guess}'?" if guess else f" Known: {', '.join(known[:12])}."
            raise ExpressionError(Problem("formula", f"'{node.item}' is not defined.{hint}", own, node.position))
        if by.get(node.name) and not node.groups:
            first = scenario.items(node.name, by[node.name])[0]
            message = f"'{node.name}' has a value in each group. Name one, {first}, or add over all: sum({node.name})."
            raise ExpressionError(Problem("formula", message, own, node.position))
    return tree


def _written_out(scenario: Scenario, by: Mapping[str, tuple[str, ...]], node: Node) -> Node:
    """Return the expression with each sum over all groups as its terms, the innermost first."""
    if isinstance(node, Apply) or (isinstance(node, Total) and node.dimension is not None):
        what = f"the matrix {node.matrix}" if isinstance(node, Apply) else "a sum over one of several dimensions"
        raise ExpressionError(
            Problem("formula", f"{what} is not read in a formula. Write its terms out, with their groups in brackets.")
        )
    changed = rebuild(node, lambda child: _written_out(scenario, by, child))
    if not isinstance(changed, Total):
        return changed
    free = [name for name in walk(changed.operand) if isinstance(name, Name) and not name.groups and by.get(name.name)]
    dimensions = tuple(d for d in scenario.dimensions if any(d in by[name.name] for name in free))
    copies = scenario.copies(dimensions)
    if len(copies) > MOST_TERMS:
        raise ExpressionError(Problem("formula", f"a sum has {len(copies):,} terms; at most {MOST_TERMS:,} are read."))

    def term(copy: tuple[str, ...]) -> Node:
        group = dict(zip(dimensions, copy, strict=True))

        def placed(name: Name) -> Node | None:
            if name.groups or not by.get(name.name):
                return None
            return Name(name.name, tuple(group[d] for d in by[name.name]), name.position)

        return replace_names(changed.operand, placed)

    return Add(tuple((1, term(copy)) for copy in copies), changed.position)
