"""The cross-checks of a scenario: names, circles, groups, values, and what interventions act on.

Every check notes all that it finds and leaves alone what another one has refused already, so that one mistake is told
once and two mistakes are told together.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

from ngm.expression.tree import Apply, Name, Node, Number, fold, names, walk
from ngm.scenario import exact
from ngm.scenario.draft import ARTICLE, Draft, Placed
from ngm.scenario.fields import Key, closest, short
from ngm.scenario.following import parameter_order, values_in_force
from ngm.scenario.graph import arrows, order
from ngm.scenario.groups import Varies, check_within, varies
from ngm.scenario.model import Change, Expression, Parameter

__all__ = ["check"]

#: definitions within definitions
DEEPEST = 50
#: nodes of all expressions of a file with the definitions written out
MOST_NODES = 100_000


def check(draft: Draft) -> None:
    """Note every problem that concerns more than one entry of the file, in `draft.found`."""
    known = _names(draft)
    ordered = _circles(draft)
    _size(draft, ordered)
    _groups(draft, ordered)
    _numbers(draft)
    _parameters(draft, known)
    _interventions(draft, ordered)


def _definition(draft: Draft, name: str) -> Placed:
    return Placed(draft.definitions[name].expression, f"definitions.{name}", ("definitions", draft.typed[name]))


def _population(draft: Draft, name: str, expression: Expression) -> Placed:
    return Placed(expression, f"matrices.{name}, population", ("matrices", draft.typed[name], "population"))


def _populations(draft: Draft) -> Iterator[tuple[str, Placed]]:
    for name, matrix in draft.matrices.items():
        if matrix.population is not None:
            yield name, _population(draft, name, matrix.population)


def _parameter_values(draft: Draft) -> Iterator[Placed]:
    for name, parameter in draft.parameters.items():
        key = ("parameters", draft.typed[name], "value")
        last: Expression | None = None
        for value in parameter.values:
            if value is not last and not value.is_number:
                yield Placed(value, f"parameters.{name}, value", key)
            last = value


def _used(draft: Draft) -> Iterator[Placed]:
    """Yield every expression of the model that is used as it stands; definitions are used through these."""
    for _, placed in draft.flows:
        yield placed
    for _, _, entries in _given(draft):
        yield from entries
    for _, placed in _populations(draft):
        yield placed
    yield from _stated(draft)


def _stated(draft: Draft) -> Iterator[Placed]:
    """Yield every entry of the matrices that stand in the file and is no plain number: those were looked at when read."""
    for rows in draft.stated.values():
        for row in rows:
            yield from (placed for placed in row if not isinstance(placed.expression.tree, Number))


def _given(draft: Draft) -> Iterator[tuple[str, str, tuple[Placed, ...]]]:
    """Yield section, compartment and expressions of every state that is given."""
    for section, state in draft.states.items():
        for name, entries in state.items():
            yield section, name, entries


def _all(draft: Draft) -> Iterator[Placed]:
    yield from (_definition(draft, name) for name in draft.definitions)
    yield from _parameter_values(draft)
    yield from _used(draft)


# -- names ----------------------------------------------------------------------------------------------------------


def _names(draft: Draft) -> bool:
    """Refuse names that nothing in the file has. Return True where all are known."""
    quantities = [name for name, role in draft.roles.items() if role in ("compartment", "parameter", "definition")]
    before = len(draft.found.problems)
    for placed in _all(draft):
        told: set[str] = set()
        for node in walk(placed.expression.tree):
            if isinstance(node, Name) and node.name not in told:
                role = draft.roles.get(node.name)
                if role in ("compartment", "parameter", "definition") or node.name in draft.clashing:
                    continue
                told.add(node.name)
                message = _unknown(draft, node.name, role, quantities)
                draft.found.add(placed.where, message, placed.key, placed.expression.text, node.position)
    for _, name, entries in _given(draft):
        for placed in entries:
            for node in walk(placed.expression.tree):
                if isinstance(node, Name) and node.name in draft.infected:
                    message = f"'{node.name}' is infected and so 0 here; {name} cannot be given by it. Leave it out."
                    draft.found.add(placed.where, message, placed.key, placed.expression.text, node.position)
                    break
    return len(draft.found.problems) == before


def _unknown(draft: Draft, name: str, role: str | None, quantities: list[str]) -> str:
    if role == "matrix":
        return f"'{name}' is a matrix. Apply it to what it acts on: {name}(x)."
    if role is not None:
        return f"'{name}' is {ARTICLE[role]}, which has no value. Name a compartment, parameter or definition."
    hint = closest(name, quantities)
    return f"'{short(name)}' is not defined.{hint or ' Add it to [parameters] or [definitions].'}"


# -- circles --------------------------------------------------------------------------------------------------------


def _circles(draft: Draft) -> list[str]:
    """Refuse circles among definitions, given states and balanced matrices; return the definitions in order."""
    needs: dict[str, list[str]] = {}
    for name, definition in draft.definitions.items():
        needs[name] = _needed(definition.expression.tree)
    for name, entries in draft.states["infection_free"].items():
        needs[name] = [needed for placed in entries for needed in _needed(placed.expression.tree)]
    for name, matrix in draft.matrices.items():
        if matrix.population is not None:
            # without balancing, the population is only compared with the matrix and nothing depends on it
            needs[name] = _needed(matrix.population.tree) if matrix.reciprocal else []
    ordered, circles = order(needs)
    for circle in circles:
        sections = {"compartment": "infection_free", "matrix": "matrices", "definition": "definitions"}
        roles = [draft.roles[name] for name in circle]
        role = next(own for own in ("compartment", "matrix", "definition") if own in roles)
        start = roles.index(role)
        turned = circle[start:] + circle[:start]
        key: Key = (sections[role], draft.typed[turned[0]])
        advice = "" if role == "definition" else " Leave one of them out, or write it in parameters."
        draft.found.add(sections[role], f"{arrows(turned)} goes in a circle.{advice}", key)
    now = {
        name: [needed for placed in entries for needed in _needed(placed.expression.tree)]
        for name, entries in draft.states["state_now"].items()
    }
    for circle in order({**{n: needs[n] for n in draft.definitions}, **now})[1]:
        if any(name in now for name in circle):
            message = f"{arrows(circle)} goes in a circle. Write one of them in parameters."
            draft.found.add("state_now", message, ("state_now",))
    for circle in parameter_order(draft.parameters)[1]:
        key = ("parameters", draft.typed[circle[0]])
        draft.found.add("parameters", f"{arrows(circle)} goes in a circle. Give one of them a number.", key)
    return [name for name in ordered if name in draft.definitions]


def _needed(tree: Node) -> list[str]:
    """Return the names in an expression and the matrices that it applies, in the order of the text."""
    out: dict[str, None] = {}
    for node in walk(tree):
        if isinstance(node, Name):
            out[node.name] = None
        elif isinstance(node, Apply):
            out[node.matrix] = None
    return list(out)


# -- size -----------------------------------------------------------------------------------------------------------


def _size(draft: Draft, ordered: list[str]) -> None:
    """Refuse definitions too deep, and expressions too long when written out; count without writing out."""
    depth: dict[str, int] = {}
    written: dict[str, int] = {}

    def count(node: Node, parts: list[int]) -> int:
        if isinstance(node, Name):
            return written.get(node.name, 1)
        return min(1 + sum(parts), 10 * MOST_NODES)

    def deeper(tree: Node) -> int:
        return 1 + max((depth.get(name, 0) for name in names(tree)), default=0)

    advice = "Write them shorter, or give intermediate quantities as parameters."
    for kind, sequence in (("definitions", ordered), ("parameters", parameter_order(draft.parameters)[0])):
        for name in sequence:
            if kind == "definitions":
                trees = [draft.definitions[name].expression.tree]
            else:
                trees = [value.tree for value in draft.parameters[name].values if not value.is_number]
            if not trees:
                continue
            key: Key = (kind, draft.typed[name])
            depth[name] = max(deeper(tree) for tree in trees)
            if depth[name] == DEEPEST + 1:
                draft.found.add(
                    f"{kind}.{name}", f"needs more than {DEEPEST} {kind} within each other. Write them flatter.", key
                )
            size = max(fold(tree, count) for tree in trees)
            if size > MOST_NODES and not any(written.get(other, 0) > MOST_NODES for t in trees for other in names(t)):
                message = f"written out, it has more than {MOST_NODES:,} names, numbers and operations. {advice}"
                draft.found.add(f"{kind}.{name}", message, key)
            written[name] = size
    for name in draft.parameters:
        # in a formula a parameter stays a name, also where it follows others
        written.pop(name, None)
    if all(size <= MOST_NODES for size in written.values()):
        total = sum(fold(placed.expression.tree, count) for placed in _used(draft) if not placed.expression.is_number)
        if total > MOST_NODES:
            message = (
                f"written out, the expressions have more than {MOST_NODES:,} names, numbers and operations. {advice}"
            )
            draft.found.add("flows", message)


# -- groups ---------------------------------------------------------------------------------------------------------


def _groups(draft: Draft, ordered: list[str]) -> None:
    """Find over which dimensions each expression varies, and refuse what its place has no groups for."""
    over: dict[str, Varies] = {name: frozenset(item.by) for name, item in draft.compartments.items()}
    over |= {name: frozenset(item.by) for name, item in draft.parameters.items()}
    over |= dict.fromkeys(draft.clashing)

    def lookup(name: str) -> Varies:
        return over.get(name)

    for name in ordered:
        over[name] = None if name in draft.clashing else varies(draft, _definition(draft, name), lookup)
        own = over[name]
        if own is not None:
            by = tuple(dimension for dimension in draft.dimensions if dimension in own)
            draft.definitions[name] = replace(draft.definitions[name], by=by)
    for flow, placed in draft.flows:
        ends = [name for name in (flow.source, flow.target) if name is not None]
        has = varies(draft, placed, lookup)
        if any(name not in draft.compartments for name in ends):
            continue
        allowed = frozenset(name for end in ends for name in draft.compartments[end].by)
        owner = f"{ends[0]} has" if len(ends) == 1 else f"{ends[0]} and {ends[1]} have"
        check_within(draft, placed, has, allowed, lookup, owner)
    for _, name, entries in _given(draft):
        allowed = frozenset(draft.compartments[name].by)
        for placed in entries:
            check_within(draft, placed, varies(draft, placed, lookup), allowed, lookup, f"{name} has")
    for name, placed in _populations(draft):
        matrix = draft.matrices[name]
        allowed = frozenset({matrix.by} if matrix.within is None else {matrix.by, matrix.within})
        check_within(draft, placed, varies(draft, placed, lookup), allowed, lookup, f"the matrix {name} has")
    for placed in _stated(draft):
        check_within(draft, placed, varies(draft, placed, lookup), frozenset(), lookup, "an entry of a matrix has")
    typed_parameters: dict[str | int, str] = {draft.typed[name]: name for name in draft.parameters}
    for placed in _parameter_values(draft):
        name = typed_parameters[placed.key[1]]
        allowed = frozenset(draft.parameters[name].by)
        has = varies(draft, placed, lookup)
        if has is not None and has - allowed:
            dimension = sorted(has - allowed)[0]
            message = f'varies over {dimension}, but {name} does not. Add "{dimension}" to by of {name}.'
            draft.found.add(placed.where, message, placed.key)


# -- numbers --------------------------------------------------------------------------------------------------------


def _numbers(draft: Draft) -> None:
    """Refuse parts without names that have no value or are too large, and negative given states."""
    for placed in _all(draft):
        for part in exact.closed_parts(placed.expression.tree):
            try:
                exact.evaluate(part)
            except exact.NoValueError as error:
                draft.found.add(placed.where, str(error), placed.key, placed.expression.text, error.position)
                break
    for _, _, entries in _given(draft):
        for placed in entries:
            if exact.is_closed(placed.expression.tree):
                try:
                    value = exact.evaluate(placed.expression.tree)
                except exact.NoValueError:
                    continue
                if value < 0:
                    message = f"{short(placed.expression.text)} is negative. A state is positive or zero."
                    draft.found.add(placed.where, message, placed.key)


def _parameters(draft: Draft, known: bool) -> None:
    """Evaluate the parameters that follow others: each must have a value, and its sign."""
    if not known or any(name not in draft.parameters for name in draft.of_role("parameter")):
        return
    if any(problem.key[:1] in (("parameters",), ("dimensions",)) for problem in draft.found.problems):
        return

    def report(parameter: Parameter, index: int, message: str, expression: Expression, position: int) -> None:
        where = f"parameters.{parameter.name}, value"
        text = expression.text if position else None
        key: Key = ("parameters", draft.typed[parameter.name], "value")
        draft.found.add(where, message, key, text, position if position else None)

    values_in_force(draft.parameters, draft.dimensions, report)


# -- interventions --------------------------------------------------------------------------------------------------


def _interventions(draft: Draft, ordered: list[str]) -> None:
    """Refuse susceptibility of what nobody is infected into, and infectivity of what infects nobody."""
    reach: dict[str, set[str]] = {}
    for name in ordered:
        reach[name] = _reached(draft.definitions[name].expression.tree, reach)
    entered: set[str | None] = set()
    infecting: set[str] = set()
    complete = draft.flows_read and len(reach) == len(draft.of_role("definition"))
    for flow, placed in draft.flows:
        if flow.kind == "transmission":
            entered.add(flow.target)
            infecting |= _reached(placed.expression.tree, reach)
    for number, intervention in enumerate(draft.interventions):
        for place, change in enumerate(intervention.changes):
            if change.what not in ("susceptibility", "infectivity"):
                continue
            where = f'intervention "{short(intervention.name)}", change {place + 1}'
            key: Key = ("intervention", number, "change", place, change.what)
            if draft.form is not None:
                message = _stated_change(draft, change)
                if not message:
                    continue
            elif change.name not in draft.infected:
                message = (
                    f'{change.what} = "{change.name}": {change.name} is not infected. Name an infected compartment.'
                )
            elif change.what == "susceptibility" and complete and change.name not in entered:
                message = (
                    f"no transmission arrives in {change.name}. Name the compartment in which new infections arrive."
                )
            elif change.what == "infectivity" and complete and change.name not in infecting:
                message = f"no transmission depends on {change.name}. Name a compartment that infects others."
            else:
                continue
            draft.found.add(where, message, key)


def _stated_change(draft: Draft, change: Change) -> str:
    """Return what is wrong with acting on a type of a matrix that stands in the file; empty where nothing is."""
    rows = draft.stated.get("K") or draft.stated.get("births")
    if rows is None:
        return ""
    place = draft.types.index(change.name)
    if change.what == "infectivity" and all(_is_zero(row[place]) for row in rows):
        return f"the column of {change.name} is 0: it causes nothing that could be reduced. Name another one."
    if change.what == "susceptibility" and draft.form == "projection" and all(map(_is_zero, rows[place])):
        return f"the row of {change.name} is 0: nobody is born into it. Name another one."
    return ""


def _is_zero(placed: Placed) -> bool:
    return exact.is_closed(placed.expression.tree) and exact.evaluate(placed.expression.tree) == 0


def _reached(tree: Node, reach: dict[str, set[str]]) -> set[str]:
    out: set[str] = set()
    for name in names(tree):
        out |= reach.get(name, {name})
    return out
