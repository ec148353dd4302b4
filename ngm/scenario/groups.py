"""Over which dimensions an expression varies, and whether it may."""

from __future__ import annotations

from collections.abc import Callable

from ngm.expression.tree import Apply, Name, Node, Total, fold, walk
from ngm.scenario.draft import Draft, Placed
from ngm.scenario.fields import closest

__all__ = ["Varies", "check_within", "varies"]

#: None: not known, because something that it depends on could not be read
Varies = frozenset[str] | None
Lookup = Callable[[str], Varies]

_NOWHERE: frozenset[str] = frozenset()


def varies(draft: Draft, placed: Placed, lookup: Lookup) -> Varies:
    """Return the dimensions over which an expression varies; a sum over a dimension that is not there is refused.

    A name varies over its own dimensions, ``C(x)`` over those of x and of the matrix, ``sum(x)`` over none,
    ``sum(x, age)`` over those of x but age, everything else over those of its parts together.
    """

    def step(node: Node, parts: list[Varies]) -> Varies:
        match node:
            case Name(name=name):
                return lookup(name)
            case Total(dimension=None):
                if not draft.of_role("dimension"):
                    _note(
                        draft, placed, node, "sum adds over groups, and this file has no [dimensions]. Leave sum out."
                    )
                return _NOWHERE
            case Total(dimension=str(dimension)):
                return _without(draft, placed, node, dimension, parts[0])
            case Apply(matrix=name):
                matrix = draft.matrices.get(name)
                if matrix is None or parts[0] is None:
                    return None
                return parts[0] | {matrix.by} | ({matrix.within} if matrix.within is not None else set())
        union: frozenset[str] = _NOWHERE
        for part in parts:
            if part is None:
                return None
            union |= part
        return union

    return fold(placed.expression.tree, step)


def _without(draft: Draft, placed: Placed, node: Node, dimension: str, inner: Varies) -> Varies:
    known = draft.of_role("dimension")
    if dimension not in known:
        hint = closest(dimension, known) or draft.choice("dimension")
        _note(draft, placed, node, f"'{dimension}' in sum(…, {dimension}) is not a dimension.{hint}")
        return None
    if inner is None:
        return None
    if dimension not in inner:
        what = f"varies over {' and '.join(sorted(inner))} only" if inner else "is the same in every group"
        _note(draft, placed, node, f"sum(…, {dimension}): what is added up {what}. Sum over a dimension that it has.")
        return None
    return inner - {dimension}


def _note(draft: Draft, placed: Placed, node: Node, message: str) -> None:
    draft.found.add(placed.where, message, placed.key, placed.expression.text, node.position)


def check_within(
    draft: Draft,
    placed: Placed,
    has: Varies,
    allowed: frozenset[str],
    lookup: Lookup,
    owner: str,
    owner_advice: str = "",
) -> None:
    """Refuse an expression that varies over a dimension that its place lacks; say which name brings it in."""
    if has is None:
        return
    for dimension in sorted(has - allowed):
        node = _culprit(draft, placed.expression.tree, dimension, lookup)
        brought = ""
        advice = f"Add it up with sum(…, {dimension})"
        if isinstance(node, Name):
            brought = f" because of {node.name}"
            advice = f"Add it up with sum({node.name}, {dimension})"
            if draft.roles.get(node.name) == "compartment":
                matrix = next((name for name, own in draft.matrices.items() if own.by == dimension), None)
                if matrix is not None and dimension in allowed:
                    advice += f" or {matrix}({node.name})"
        elif isinstance(node, Apply):
            brought = f" because of {node.matrix}(…)"
        advice += f"{owner_advice.format(dimension=dimension)}."
        position = None if node is None else node.position
        text = None if node is None else placed.expression.text
        message = f"varies over {dimension}{brought}, but {owner} no groups of {dimension}. {advice}"
        draft.found.add(placed.where, message, placed.key, text, position)


def _culprit(draft: Draft, tree: Node, dimension: str, lookup: Lookup) -> Node | None:
    """Return the first name or matrix that brings a dimension in, outside of the sums that take it away."""
    hidden: set[int] = set()
    for node in walk(tree):
        if isinstance(node, Total) and node.dimension in (None, dimension):
            hidden.update(id(inner) for inner in walk(node))
        if id(node) in hidden:
            continue
        if isinstance(node, Name) and dimension in (lookup(node.name) or ()):
            return node
        if isinstance(node, Apply):
            matrix = draft.matrices.get(node.matrix)
            if matrix is not None and dimension in (matrix.by, matrix.within):
                return node
    return None
