"""TOML data -> parts of a scenario: the shape of the file, section by section.

What needs more than its own section (names in expressions, dimensions, circles) is left to `check`.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from ngm.expression.names import canonical, is_reserved
from ngm.scenario import units
from ngm.scenario.draft import ARTICLE, MOST_TYPES, Draft, Placed
from ngm.scenario.fields import Key, Table, closest, describe, listed, number_trouble, short
from ngm.scenario.model import Compartment, Definition, Dimension, Flow, Kind, Movement
from ngm.scenario.read_interventions import read_interventions
from ngm.scenario.read_matrices import read_matrices
from ngm.scenario.read_parameters import read_parameters
from ngm.scenario.read_season import check_seasons
from ngm.scenario.read_stated import FORMS, read_labels, read_stated

__all__ = ["read"]

_SECTIONS = (
    "scenario",
    "dimensions",
    "compartments",
    "parameters",
    "matrices",
    "definitions",
    "flow",
    "movement",
    "infection_free",
    "state_now",
    "intervention",
    "report",
    *FORMS,
)
_REPORT_TEXTS = ("question", "audience", "place", "date", "author", "reviewer", "reviewed_on", "comparison", "funding")
_REPORT_LISTS = ("assumptions", "limits", "changes")


def read(draft: Draft, data: Mapping[str, Any], folder: str | None) -> None:
    """Read every section into the draft; the problems are in its `found`.

    Parameters
    ----------
    draft : Draft
        An empty one.
    data : mapping
        The TOML document, see `document.to_data`.
    folder : str or None
        Where matrix files are looked for; None: there is no folder.
    """
    found = draft.found
    rest = (
        f" The sections are: {listed(_SECTIONS, len(_SECTIONS))}."  # told once: ten problems must fit into one message
    )
    for name in data:
        if name not in _SECTIONS:
            hint = closest(name, _SECTIONS)
            if not hint:
                hint, rest = rest, ""
            found.add(short(name), f"is not a section of a scenario file.{hint}", (name,))
    _scenario(draft, data)
    stated = any(name in data for name in FORMS)
    draft.discrete = draft.discrete or (stated and "next_generation" not in data)
    sections = {
        name: _section(draft, data, name)
        for name in ("dimensions", "compartments", "parameters", "matrices", "definitions")
    }
    members = {name: _declare(draft, name, section) for name, section in sections.items()}
    found.matrices = frozenset(draft.of_role("matrix"))
    _dimensions(draft, members["dimensions"])
    _compartments(draft, members["compartments"], required=not stated)
    read_parameters(draft, members["parameters"])
    check_seasons(draft, data)
    read_matrices(draft, members["matrices"], folder)
    _definitions(draft, members["definitions"])
    if stated:
        read_stated(draft, data)
    else:
        _flows(draft, data, required=True)
        _movements(draft, data)
        for section in ("infection_free", "state_now"):
            _state(draft, data, section)
    read_interventions(draft, entries(draft, data, "intervention"))
    _report(draft, data)


def entries(draft: Draft, data: Mapping[str, Any], name: str) -> list[Any]:
    """Return the tables of ``[[name]]``."""
    raw = data.get(name, [])
    if isinstance(raw, list) and all(isinstance(entry, dict) for entry in raw):
        return raw
    advice = f"Write a double bracket, [[{name}]], above each one."
    draft.found.add(f"[{name}]", f"expected a list of tables. {advice}", (name,))
    return []


def _section(draft: Draft, data: Mapping[str, Any], name: str) -> Mapping[str, Any]:
    raw = data.get(name, {})
    if isinstance(raw, dict):
        return raw
    draft.found.add(
        f"[{name}]", f"expected a table, not {describe(raw)}. Write [{name}] on a line of its own.", (name,)
    )
    return {}


def _declare(draft: Draft, section: str, raw: Mapping[str, Any]) -> dict[str, Any]:
    """Give each name of a section its role; refuse what is no name, reserved, or taken."""
    role = "matrix" if section == "matrices" else section.removesuffix("s")
    members: dict[str, Any] = {}
    for typed, value in raw.items():
        key: Key = (section, typed)
        where = f"{section}.{short(typed)}"
        name = canonical(typed)
        if name is None:
            rule = "A name is letters (ASCII or Greek), digits and underscores and starts with a letter."
            draft.found.add(where, f"'{short(typed)}' is not a name. {rule}", key)
            continue
        if is_reserved(name):
            draft.found.add(where, f"'{name}' is the name of a function. Take another name.", key)
            continue
        if name in draft.roles:
            draft.clashing.add(name)
            before = draft.typed[name]
            spelt = "" if before == typed else f", which is the same name as '{typed}'"
            other = ARTICLE[draft.roles[name]]
            draft.found.add(
                where, f"'{before}' is already {other} of this file{spelt}. One name means one thing: rename one.", key
            )
            continue
        draft.roles[name] = role
        draft.typed[name] = typed
        members[name] = value
    return members


def _scenario(draft: Draft, data: Mapping[str, Any]) -> None:
    if "scenario" not in data:
        draft.found.add("[scenario]", 'is missing. It holds title = "…" and time_unit = "day".', ("scenario",))
        draft.time_unit = "day"
        return
    allowed = ("title", "time_unit", "summary", "format", "units", "time")
    table = Table(
        draft.found, data["scenario"], "scenario", ("scenario",), allowed, example='title = "…" below [scenario]'
    )
    draft.title = table.text("title", required='Write title = "…".', blank=False) or ""
    draft.summary = table.text("summary")
    time_unit = table.text(
        "time_unit", required='Write time_unit = "day", the unit of time of every rate.', blank=False
    )
    draft.time_unit = "day"
    if time_unit is not None:
        word = units.time_unit_name(time_unit.strip())
        if word is None and not units.is_word(time_unit.strip()):
            table.problem("time_unit", f"'{short(time_unit)}' is not one unit of time. Write one word, such as day.")
        else:
            draft.time_unit = word or time_unit.strip()
    if table.has("format"):
        version = table.raw["format"]
        if isinstance(version, bool) or not isinstance(version, int):
            table.problem("format", f"expected the number 1, not {describe(version)}.")
        elif version != 1:
            shown = version if number_trouble(version) is None and abs(version) < 10**9 else "this"
            table.problem("format", f"{shown} is not known to this version. It reads format = 1.")
    check = table.text("units")
    draft.strict_units = check == "strict"
    if check not in (None, "warn", "strict"):
        table.problem("units", f'\'{short(check or "")}\' is not known. Write "warn" or "strict", or leave it out.')
    time = table.text("time")
    draft.discrete = time == "discrete"
    if time not in (None, "discrete"):
        hint = closest(time, ("discrete",)) or ' Write "discrete", or leave it out for continuous time.'
        table.problem("time", f"'{short(time)}' is not known.{hint}")


def _dimensions(draft: Draft, members: Mapping[str, Any]) -> None:
    for name, raw in members.items():
        where, key = f"dimensions.{name}", ("dimensions", draft.typed[name])
        if not isinstance(raw, list):
            draft.found.add(where, f'expected a list of groups such as ["0-4", "5-17"], not {describe(raw)}.', key)
            continue
        groups = _groups(draft, raw, where, key)
        if groups is not None:
            draft.dimensions[name] = Dimension(name, groups)


def _groups(draft: Draft, raw: list[Any], where: str, key: Key) -> tuple[str, ...] | None:
    if not raw:
        draft.found.add(where, "has no groups. List at least one, or remove the dimension.", key)
        return None
    if len(raw) > MOST_TYPES:
        draft.found.add(where, f"has {len(raw):,} groups. A model has at most {MOST_TYPES:,} types.", key)
        return None
    return read_labels(draft.found, raw, where, key, "group")


def _compartments(draft: Draft, members: Mapping[str, Any], *, required: bool) -> None:
    found = draft.found
    if required and not members and not any(problem.key[:1] == ("compartments",) for problem in found.problems):
        found.add("[compartments]", "there are none. Write, for example, I = { infected = true }.", ("compartments",))
    types = 0
    for name, raw in members.items():
        where, key = f"compartments.{name}", ("compartments", draft.typed[name])
        example = f'{draft.typed[name]} = {{ label = "…", infected = false }}'
        table = Table(found, raw, where, key, ("label", "infected", "by", "unit"), example=example)
        if not table.is_table:
            # whether it is infected is not known: nothing is to be concluded from that
            draft.infected.add(name)
            continue
        infected = table.flag("infected", required="Write infected = true or infected = false.")
        if infected is not False:
            draft.infected.add(name)
        label, unit = table.text("label"), table.text("unit")
        by = draft.by(table.raw["by"], table.at("by"), (*key, "by")) if table.has("by") else ()
        if infected is None or by is None:
            continue
        copies = draft.copies(by)
        types += copies if infected else 0
        if copies > MOST_TYPES:
            found.add(where, f"has {copies:,} copies. A model has at most {MOST_TYPES:,} types.", key)
            continue
        draft.compartments[name] = Compartment(name, infected, label, by, unit)
    if types > MOST_TYPES:
        found.add("compartments", f"the infected ones make {types:,} types. A model has at most {MOST_TYPES:,}.", ())
    if members and not draft.infected:
        advice = "Write infected = true where hosts carry the infection."
        found.add("compartments", f"none is infected. {advice}", ("compartments",))


def _definitions(draft: Draft, members: Mapping[str, Any]) -> None:
    for name, raw in members.items():
        where, key = f"definitions.{name}", ("definitions", draft.typed[name])
        if not isinstance(raw, str):
            draft.found.add(where, f"expected an expression in quotes, not {describe(raw)}.", key)
            continue
        expression = draft.found.expression(raw, where, key)
        if expression is not None:
            draft.definitions[name] = Definition(name, expression)


def _flows(draft: Draft, data: Mapping[str, Any], *, required: bool) -> None:
    found = draft.found
    raw_flows = entries(draft, data, "flow")
    if not raw_flows:
        if required and "flow" not in data:
            found.add("[[flow]]", "there are none. Write one [[flow]] for each arrow of the diagram.", ("flow",))
        elif required and data["flow"] == []:
            found.add("flow", "there are none. Write one [[flow]] for each arrow of the diagram.", ("flow",))
        return
    for index, raw in enumerate(raw_flows):
        label = raw.get("label")
        where = f'flow {index + 1} "{short(label)}"' if isinstance(label, str) and label else f"flow {index + 1}"
        key: Key = ("flow", index)
        table = Table(found, raw, where, key, ("from", "to", "rate", "kind", "label"))
        table.text("label")
        ends: dict[str, str | None] = {}
        for end in ("from", "to"):
            if table.has(end):
                place = table.at(end)
                ends[end] = draft.resolve(table.raw[end], "compartment", place, (*key, end))
        if not ends:
            found.add(where, "has neither from nor to. Name the compartment that it leaves, enters, or both.", key)
        text = table.text("rate", required='Write the whole rate, such as rate = "gamma * I".')
        rate = found.expression(text, table.at("rate"), (*key, "rate")) if text is not None else None
        kind = _kind(draft, table)
        if ends.get("from") is not None and ends.get("from") == ends.get("to"):
            found.add(
                where, f"goes from {ends['from']} to {ends['to']}: nothing changes. Name another compartment.", key
            )
            continue
        if kind == "transmission" and not (
            ends.get("to") in draft.infected or (table.has("to") and ends["to"] is None)
        ):
            target = ends.get("to")
            what = f"ends in {target}, which is not infected" if target else "leaves the system"
            advice = 'New infections arrive in an infected compartment: change to, or write kind = "transition".'
            found.add(table.at("to"), f"this transmission {what}. {advice}", (*key, "to"))
            continue
        if rate is None or kind is None or not ends or None in ends.values():
            continue
        flow = Flow(ends.get("from"), ends.get("to"), rate, kind, label if isinstance(label, str) else None)
        draft.flows.append((flow, Placed(rate, table.at("rate"), (*key, "rate"))))
    draft.flows_read = len(draft.flows) == len(raw_flows)
    if "transmission" not in draft.kinds and "" not in draft.kinds:
        advice = 'Write kind = "transmission" where new infections arise.'
        found.add("flows", f"none is a transmission, so there is no reproduction number. {advice}", ("flow",))


def _kind(draft: Draft, table: Table) -> Kind | None:
    text = table.text("kind", required='Write kind = "transmission" (new infections) or "transition" (the rest).')
    draft.kinds.add(text if text in ("transmission", "transition") else "")
    if text == "transmission":
        return "transmission"
    if text == "transition":
        return "transition"
    if text is not None:
        hint = closest(text, ("transmission", "transition"))
        advice = hint or ' Write "transmission" (new infections) or "transition" (everything else).'
        table.problem("kind", f"'{short(text)}' is not known.{advice}")
    return None


def _movements(draft: Draft, data: Mapping[str, Any]) -> None:
    for index, raw in enumerate(entries(draft, data, "movement")):
        label = raw.get("label")
        where = (
            f'movement {index + 1} "{short(label)}"' if isinstance(label, str) and label else f"movement {index + 1}"
        )
        key: Key = ("movement", index)
        table = Table(draft.found, raw, where, key, ("matrix", "of", "label"))
        table.text("label")
        text = table.text("matrix", required="Name the matrix of the rates.")
        matrix = draft.resolve(text, "matrix", table.at("matrix"), (*key, "matrix")) if text is not None else None
        listed_names = table.texts(
            "of", required='Name the compartments: of = ["S", "I"].', what="a list of compartments"
        )
        if listed_names is None:
            continue
        if not listed_names:
            table.problem("of", 'is empty. Name the compartments that move: of = ["S", "I"].')
            continue
        of = [draft.resolve(name, "compartment", table.at("of"), (*key, "of")) for name in listed_names]
        good = [name for name in of if name is not None]
        for name in sorted({name for name in good if good.count(name) > 1}):
            table.problem("of", f"'{name}' stands twice. Name each compartment once.")
        if matrix is not None and len(good) == len(of):
            draft.movements.append(Movement(matrix, tuple(good), label if isinstance(label, str) else None))
            _movement_groups(draft, draft.movements[-1], table.at("of"), (*key, "of"))


def _movement_groups(draft: Draft, movement: Movement, where: str, key: Key) -> None:
    """Check that what moves has the dimensions of its matrix, and that the matrix has a diagonal of 0."""
    matrix = draft.matrices.get(movement.matrix)
    if matrix is None:
        return
    for name in movement.of:
        compartment = draft.compartments.get(name)
        for dimension in (matrix.by, matrix.within):
            if compartment is not None and dimension is not None and dimension not in compartment.by:
                advice = f'Write by = ["{dimension}"] there, or leave it out here.'
                draft.found.add(where, f"{name} has no groups of {dimension} to move between. {advice}", key)
    groups = draft.dimensions[matrix.by].groups
    for block in matrix.blocks:
        for index, row in enumerate(block):
            if row[index]:
                place = f"row and column {short(groups[index])}"
                advice = "The diagonal of a movement is 0: who stays does not move."
                draft.found.add(
                    f"matrices.{matrix.name}, values",
                    f"{place}: {row[index]} moves a group into itself. {advice}",
                    ("matrices", draft.typed[matrix.name], "values"),
                )
                return


def _state(draft: Draft, data: Mapping[str, Any], section: str) -> None:
    """Read a state of the uninfected compartments: without infection, or as it is now."""
    state = draft.states[section]
    for typed, raw in _section(draft, data, section).items():
        where, key = f"{section}.{short(typed)}", (section, typed)
        name = draft.resolve(typed, "compartment", where, key)
        if name is None:
            continue
        if name in state:
            draft.found.add(where, f"{name} is given twice, in two spellings. Keep one.", key)
            continue
        if name in draft.infected:
            if name in draft.compartments:
                draft.found.add(where, f"{name} is infected and so 0 in this state. Leave it out.", key)
            continue
        compartment = draft.compartments.get(name)
        if compartment is None:
            continue
        items = draft.spread(raw, compartment.by, where, key, loose=True)
        if items is None:
            continue
        placed: list[Placed] = []
        for number, item in enumerate(items, 1):
            place = where if len(items) == 1 else f"{where}, entry {number}"
            expression = draft.found.quantity(item, place, key)
            if expression is not None:
                placed.append(Placed(expression, place, key))
        if len(placed) == len(items):
            state[name] = tuple(placed)


def _report(draft: Draft, data: Mapping[str, Any]) -> None:
    if "report" not in data:
        return
    table = Table(draft.found, data["report"], "report", ("report",), _REPORT_TEXTS + _REPORT_LISTS)
    for name in _REPORT_TEXTS:
        text = table.text(name)
        if text is not None:
            draft.report[name] = text
    for name in _REPORT_LISTS:
        texts = table.texts(name)
        if texts is not None:
            draft.report[name] = tuple(texts)
