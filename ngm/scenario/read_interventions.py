"""The interventions of a scenario: names, groups and ranges; what needs numbers is checked when one is evaluated."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, Literal

from ngm.expression.names import canonical
from ngm.scenario.draft import Draft, Role
from ngm.scenario.fields import Key, Table, closest, describe, listed, short
from ngm.scenario.model import Change, Expression, Intervention

__all__ = ["read_interventions"]

What = Literal["parameter", "matrix", "susceptibility", "infectivity"]
Action = Literal["multiply", "set", "add", "reduce"]

_FORMS: tuple[What, ...] = ("parameter", "matrix", "susceptibility", "infectivity")
_ACTIONS: tuple[Action, ...] = ("multiply", "set", "add", "reduce")
_ALLOWED: dict[What, tuple[Action, ...]] = {
    "parameter": ("multiply", "set", "add"),
    "matrix": ("multiply", "set", "add"),
    "susceptibility": ("reduce",),
    "infectivity": ("reduce",),
}


def read_interventions(draft: Draft, raw_interventions: Sequence[dict[str, Any]]) -> None:
    """Read all ``[[intervention]]`` into `draft.interventions`."""
    seen: dict[str, int] = {}
    for index, raw in enumerate(raw_interventions):
        name = raw.get("name")
        known = isinstance(name, str) and name.strip()
        where = f'intervention "{short(str(name))}"' if known else f"intervention {index + 1}"
        key: Key = ("intervention", index)
        table = Table(draft.found, raw, where, key, ("name", "note", "cost", "change"))
        text = table.text("name", required='Write name = "…".', blank=False)
        if text is not None:
            if text in seen:
                table.problem("name", f"intervention {seen[text]} has this name already. Give each its own.")
            seen.setdefault(text, index + 1)
        note = table.text("note")
        cost = _cost(draft, table)
        changes = _changes(draft, table)
        if text is not None and changes is not None:
            draft.interventions.append(Intervention(text, changes, note, cost))


def _cost(draft: Draft, table: Table) -> float | None:
    if not table.has("cost"):
        return None
    cost = draft.found.literal(table.raw["cost"], table.at("cost"), (*table.key, "cost"))
    if cost is None:
        return None
    value = draft.found.value(cost, table.at("cost"), (*table.key, "cost"))
    return None if value is None else float(value)


def _changes(draft: Draft, table: Table) -> tuple[Change, ...] | None:
    example = 'change = [{ parameter = "beta", multiply = 0.6 }]'
    if not table.has("change"):
        draft.found.add(table.where, f"change is missing. Write {example}.", (*table.key, "change"))
        return None
    raw = table.raw["change"]
    if not isinstance(raw, list) or not all(isinstance(item, dict) for item in raw):
        table.problem("change", f"expected a list of tables, {example}.")
        return None
    if not raw:
        table.problem("change", f"lists no change. Write {example}, or remove the intervention.")
        return None
    changes = [_change(draft, table, number, item) for number, item in enumerate(raw, 1)]
    good = [change for change in changes if change is not None]
    return tuple(good) if len(good) == len(changes) else None


def _change(draft: Draft, parent: Table, number: int, raw: dict[str, Any]) -> Change | None:
    where, key = f"{parent.where}, change {number}", (*parent.key, "change", number - 1)
    forms = [form for form in _FORMS if form in raw]
    if len(forms) != 1:
        what = f"names {' and '.join(forms)}" if forms else "names nothing to change"
        hint = ""
        if not forms:
            guess = next((closest(name, _FORMS) for name in raw if closest(name, _FORMS)), "")
            hint = guess
        draft.found.add(where, f"{what}. Write one of {', '.join(_FORMS)}.{hint}", key)
        return None
    form = forms[0]
    before = len(draft.found.problems)
    extra = ("group", "rows", "columns") if form == "matrix" else ("group",)
    table = Table(draft.found, raw, where, key, (form, *_ACTIONS, *extra))
    roles: dict[What, Role] = {"parameter": "parameter", "matrix": "matrix"}
    role = roles.get(form, "compartment")
    if draft.form is not None and role == "compartment":
        name = draft.resolve_type(raw[form], table.at(form), (*key, form))
    else:
        name = draft.resolve(raw[form], role, table.at(form), (*key, form))
    amount = _amount(draft, table, form, name)
    groups, rows, columns = _groups(draft, table, form, name)
    if name is None or amount is None or len(draft.found.problems) > before:
        return None
    return Change(form, name, amount[0], amount[1], groups, rows, columns)


def _amount(draft: Draft, table: Table, form: What, name: str | None) -> tuple[Action, Expression] | None:
    actions = [action for action in _ACTIONS if table.has(action)]
    allowed = _ALLOWED[form]
    choice = ", ".join(f"{action} = …" for action in allowed[:-1]) + " or " * (len(allowed) > 1) + f"{allowed[-1]} = …"
    if len(actions) != 1:
        what = f"has {' and '.join(actions)}" if actions else "does not say by how much"
        draft.found.add(table.where, f"{what}. Write {choice}.", table.key)
        return None
    action = actions[0]
    if action not in allowed:
        table.problem(action, f"{'an' if form == 'infectivity' else 'a'} {form} takes no {action}. Write {choice}.")
        return None
    number = draft.found.number(table.raw[action], table.at(action), (*table.key, action))
    if number is None:
        return None
    expression, value = number
    shown = short(expression.text)
    if action == "reduce":
        if not 0 <= value <= 1:
            advice = ""
            if 1 < value <= 100:
                share = f"{float(value) / 100:.2f}" if float(value) == int(value) else f"{float(value) / 100:g}"
                advice = f" For {shown} % write {share}."
            draft.found.add(table.where, f"reduce = {shown} lies outside [0, 1].{advice}", (*table.key, action))
            return None
        return action, expression
    parameter = draft.parameters.get(name) if form == "parameter" and name is not None else None
    any_sign = parameter is not None and parameter.any_sign
    # a parameter that could not be read may have any sign
    known = form == "matrix" or parameter is not None
    if value < 0 and action != "add" and known and not any_sign:
        what = f"the entries of {name} stay" if form == "matrix" else f"{name} stays"
        draft.found.add(
            table.where, f"{action} = {shown} is negative, but {what} positive or zero.", (*table.key, action)
        )
        return None
    return action, expression


def _groups(
    draft: Draft, table: Table, form: What, name: str | None
) -> tuple[dict[str, tuple[str, ...]], tuple[str, ...] | None, tuple[str, ...] | None]:
    """Read `group`, and for a matrix `rows` and `columns`."""
    rows: tuple[str, ...] | None = None
    columns: tuple[str, ...] | None = None
    if form == "matrix":
        matrix = draft.matrices.get(name) if name is not None else None
        if matrix is None:
            return {}, None, None
        rows = _labels(draft, table, "rows", matrix.by)
        columns = _labels(draft, table, "columns", matrix.by)
        by: tuple[str, ...] = () if matrix.within is None else (matrix.within,)
        none = f"{name} is the same everywhere: it has no within. Name groups of {matrix.by} by rows and columns."
    else:
        owner = draft.parameters.get(name or "") if form == "parameter" else draft.compartments.get(name or "")
        if owner is None and (draft.form is None or form == "parameter" or name is None):
            return {}, None, None
        by = () if owner is None else owner.by
        none = f"{name} is not grouped. Leave group out."
    if not table.has("group"):
        return {}, rows, columns
    raw = table.raw["group"]
    if not by:
        table.problem("group", none)
        return {}, rows, columns
    if not isinstance(raw, dict):
        example = f'group = {{ {by[0]} = "{draft.dimensions[by[0]].groups[0]}" }}'
        table.problem("group", f"expected a table such as {example}, not {describe(raw)}.")
        return {}, rows, columns
    if not raw:
        table.problem("group", f"names no group. Name some of {draft.groups_of(by[0])}, or leave group out for all.")
    groups: dict[str, tuple[str, ...]] = {}
    for typed, value in raw.items():
        dimension = canonical(typed)
        if dimension not in by or dimension is None:
            hint = closest(typed, by) or f" {name} is grouped by {', '.join(by)}."
            table.problem("group", f"'{short(typed)}' is not a dimension of {name}.{hint}")
            continue
        if dimension in groups:
            table.problem("group", f"'{dimension}' stands twice, in two spellings. Keep one.")
            continue
        labels = _check_labels(draft, table, "group", dimension, [value] if isinstance(value, str) else value)
        if labels is not None:
            groups[dimension] = labels
    return groups, rows, columns


def _labels(draft: Draft, table: Table, field: str, dimension: str) -> tuple[str, ...] | None:
    if not table.has(field):
        return None
    raw = table.raw[field]
    if isinstance(raw, str):
        table.problem(field, f'expected a list of groups. Write {field} = ["{short(raw)}"].')
        return None
    return _check_labels(draft, table, field, dimension, raw)


def _check_labels(draft: Draft, table: Table, field: str, dimension: str, raw: object) -> tuple[str, ...] | None:
    groups = draft.dimensions[dimension].groups
    known = frozenset(groups)
    if not isinstance(raw, list):
        table.problem(field, f"expected a group of {dimension} in quotes, or a list of them, not {describe(raw)}.")
        return None
    if not raw:
        table.problem(
            field, f"names no group. Name some of {draft.groups_of(dimension)}, or leave {field} out for all."
        )
        return None
    good = True
    seen: set[str] = set()
    for label in raw:
        if not isinstance(label, str) or label not in known:
            what = f"'{short(label)}'" if isinstance(label, str) else describe(label)
            hint = closest(label, groups) if isinstance(label, str) else ""
            table.problem(field, f"{what} is not a group of {dimension} ({listed(groups)}).{hint}")
            good = False
        elif label in seen:
            table.problem(field, f"'{short(label)}' stands twice. Name each group once.")
            good = False
        else:
            seen.add(label)
    return tuple(raw) if good else None
