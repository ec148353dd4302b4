"""Matrices that stand in the file in place of compartments and flows: a K as given, and a projected population."""

from __future__ import annotations

from collections.abc import Mapping
from decimal import Decimal
from fractions import Fraction
from typing import Any

from ngm.scenario import exact
from ngm.scenario.draft import Draft, Placed
from ngm.scenario.fields import Findings, Key, Table, describe, listed, short
from ngm.scenario.stated import MOST_STATED

__all__ = ["FORMS", "read_labels", "read_stated"]

#: the sections that stand in place of compartments and flows
FORMS = ("next_generation", "projection")
#: what makes no sense beside them, and why, in words
_INSTEAD = {
    "compartments": "the model has {what} and no compartments",
    "flow": "the model has {what} and no flows",
    "movement": "there are no compartments whose members could move",
    "matrices": "its entries are numbers or expressions in parameters and definitions, without contact matrices",
    "infection_free": "there are no uninfected compartments",
    "state_now": "there are no uninfected compartments, so there is no effective number",
}


def read_stated(draft: Draft, data: Mapping[str, Any]) -> None:
    """Read ``[next_generation]`` or ``[projection]`` into the draft, and refuse what cannot stand beside it."""
    found = draft.found
    form = draft.form = "next_generation" if "next_generation" in data else "projection"
    if all(name in data for name in FORMS):
        found.add(
            "[projection]",
            "stands beside [next_generation]. A file holds one model: put one of the two into a file of its own.",
            ("projection",),
        )
    what = "types and K" if form == "next_generation" else "stages, births and transitions"
    for name, why in _INSTEAD.items():
        if name in data:
            title = f"[[{name}]]" if name in ("flow", "movement") else f"[{name}]"
            told = f"cannot stand beside [{form}]: {why.format(what=what)}. Leave out one of the two."
            found.add(title, told, (name,))
    for name, parameter in draft.parameters.items():
        if parameter.season is not None:
            found.add(
                f"parameters.{name}, season",
                f"cannot stand beside [{form}], which holds one matrix for all times. Leave it out, or write flows.",
                ("parameters", draft.typed[name], "season"),
            )
    if form == "next_generation":
        _next_generation(draft, data[form])
    else:
        _projection(draft, data[form])


def _next_generation(draft: Draft, raw: object) -> None:
    example = 'types = ["host", "vector"] and K = [[0, 1.5], [2, 0]] below [next_generation]'
    table = Table(draft.found, raw, "next_generation", ("next_generation",), ("types", "K", "sizes"), example=example)
    types = _labels(table, "types", "type")
    K = _square(table, "K", types, "row: the type infected, column: the type that infects")
    sizes = _sizes(table, types)
    if types is not None:
        draft.types = types
        if K is not None:
            draft.stated = {"K": K, **({} if sizes is None else {"sizes": (sizes,)})}
    if draft.discrete:
        draft.discrete = False
        draft.found.warn("scenario, time", '"discrete" changes nothing here: a K as given has no time in it.')


def _projection(draft: Draft, raw: object) -> None:
    example = 'stages = ["young", "adult"], births = [[0, 2], [0, 0]] and transitions = [[0, 0], [0.3, 0.8]]'
    allowed = ("stages", "births", "transitions")
    table = Table(draft.found, raw, "projection", ("projection",), allowed, example=f"{example} below [projection]")
    stages = _labels(table, "stages", "stage")
    births = _square(table, "births", stages, "row: the stage of the new members, column: the stage that has them")
    transitions = _square(table, "transitions", stages, "row: the stage a step later, column: the stage now")
    if stages is not None:
        draft.types = stages
        if births is not None and transitions is not None:
            draft.stated = {"births": births, "transitions": transitions}
            _shares(draft, transitions, stages)


def _labels(table: Table, name: str, what: str) -> tuple[str, ...] | None:
    if not table.has(name):
        if table.is_table:
            table.found.add(table.where, f'{name} is missing. Name them: {name} = ["…", "…"].', (*table.key, name))
        return None
    raw, where, key = table.raw[name], table.at(name), (*table.key, name)
    if not isinstance(raw, list):
        table.problem(name, f'expected a list of names such as ["young", "adult"], not {describe(raw)}.')
        return None
    if not raw:
        table.problem(name, f"is empty. Name at least one {what}.")
        return None
    if len(raw) > MOST_STATED:
        table.problem(name, f"names {len(raw):,}. A matrix that stands in the file has at most {MOST_STATED:,} rows.")
        return None
    return read_labels(table.found, raw, where, key, what)


def read_labels(found: Findings, raw: list[Any], where: str, key: Key, what: str) -> tuple[str, ...] | None:
    """Read labels of groups, types or stages: any text without ``,`` ``[`` ``]`` and quotes, each of its own."""
    seen: set[str] = set()
    good = True
    for label in raw:
        if not isinstance(label, str):
            trouble = f"expected the label of a {what} in quotes, not {describe(label)}."
        elif not label.strip():
            trouble = f"a {what} has an empty label. Give it one."
        elif any(character in ",[]\"'" for character in label):
            trouble = f"'{short(label)}' holds a comma, a square bracket or a quote, which a label cannot."
        elif label in seen:
            trouble = f"'{short(label)}' stands twice. Each {what} has a label of its own."
        else:
            seen.add(label)
            continue
        found.add(where, trouble, key)
        good = False
    return tuple(raw) if good else None


def _square(
    table: Table, name: str, labels: tuple[str, ...] | None, sides: str
) -> tuple[tuple[Placed, ...], ...] | None:
    """Read a square table, one row and one column for each label."""
    if not table.has(name):
        if table.is_table:
            table.found.add(
                table.where,
                f"{name} is missing. Write it row by row, {name} = [[…], […]] ({sides}).",
                (*table.key, name),
            )
        return None
    raw = table.raw[name]
    if not isinstance(raw, list) or not all(isinstance(row, list) for row in raw):
        table.problem(name, f"expected a list of rows, {name} = [[…], […]] ({sides}).")
        return None
    if labels is None:
        return None
    n = len(labels)
    if len(raw) != n:
        table.problem(name, f"has {len(raw)} row{'' if len(raw) == 1 else 's'} for {n} labels ({listed(labels)}).")
        return None
    uneven = [k for k, row in enumerate(raw) if len(row) != n]
    for k in uneven[:3]:
        count = f"{len(raw[k])} entr{'y' if len(raw[k]) == 1 else 'ies'}"
        table.problem(name, f"row {k + 1} ({short(labels[k])}) has {count} for {n} columns ({listed(labels)}).")
    if uneven:
        return None
    rows = []
    good = True
    for i, row in enumerate(raw):
        out = []
        for j, item in enumerate(row):
            placed = _entry(table, item, f"{name}[{short(labels[i])}, {short(labels[j])}]", (name, i, j))
            if placed is None:
                good = False
            else:
                out.append(placed)
        rows.append(tuple(out))
    return tuple(rows) if good else None


def _entry(table: Table, raw: object, name: str, path: Key) -> Placed | None:
    """Read an entry that is positive or zero: a number, or an expression in parameters and definitions."""
    where, key = table.at(name), (*table.key, *path)
    expression = table.found.quantity(raw, where, key)
    if expression is None:
        return None
    value: Fraction | float | None = None
    if isinstance(raw, int | Decimal):
        value = Fraction(-1) if raw < 0 else None  # many thousands of them may stand in a file
    elif exact.is_closed(expression.tree):
        value = table.found.value(expression, where, key)
        if value is None:
            return None
    if value is not None and value < 0:
        table.found.add(where, f"{short(expression.text)} is negative. An entry is positive or zero.", key)
        return None
    return Placed(expression, where, key)


def _sizes(table: Table, types: tuple[str, ...] | None) -> tuple[Placed, ...] | None:
    if not table.has("sizes"):
        return None
    raw = table.raw["sizes"]
    if not isinstance(raw, list):
        table.problem("sizes", f"expected a list, one number of members for each type, not {describe(raw)}.")
        return None
    if types is None:
        return None
    if len(raw) != len(types):
        table.problem(
            "sizes", f"{len(raw)} size{'' if len(raw) == 1 else 's'} for {len(types)} types ({listed(types)})."
        )
        return None
    out = [_entry(table, item, f"sizes[{short(types[k])}]", ("sizes", k)) for k, item in enumerate(raw)]
    good = [placed for placed in out if placed is not None]
    return tuple(good) if len(good) == len(out) else None


def _shares(draft: Draft, transitions: tuple[tuple[Placed, ...], ...], stages: tuple[str, ...]) -> None:
    """Warn where the numbers of a column add up to more than one: more than everybody is found a step later."""
    for j, stage in enumerate(stages):
        closed = [row[j].expression for row in transitions if exact.is_closed(row[j].expression.tree)]
        total = sum(exact.evaluate(expression.tree) for expression in closed)
        if total > 1 + 1e-12:
            draft.found.warn(
                "projection, transitions",
                f"the column of {short(stage)} adds up to {float(total):.6g}: of one member more than one is found a step "
                "later. New members belong in births; a share is at most 1.",
            )
