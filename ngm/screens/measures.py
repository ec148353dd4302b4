"""The sections of the page on control that deal with interventions: side by side, edited, at the strength needed, by target."""

from __future__ import annotations

import json
from collections.abc import Callable, Sequence
from typing import Any, get_args

import streamlit as st

from ngm.charts import control as charts
from ngm.charts.control import TargetKind
from ngm.errors import NgmError
from ngm.results import ControlResult
from ngm.results_control import Compared, Comparison, Strength
from ngm.screens import asking, cache, editors, forms, packages, parts, state, taking
from ngm.screens.parts import Shown, plain
from ngm.spreadsheet import csv_text
from ngm.wording import share, strength_words

__all__ = ["editor", "side_by_side", "strengths", "targets"]

Write = Callable[[float | None], str]

#: Models with more types are compared when asked for, not on every visit.
MOST_AT_ONCE = 100

#: Interventions whose strength is found in one go.
MOST_STRENGTHS = 30

ORDERS: dict[str, Callable[[Compared], Any]] = {
    "as in the scenario": lambda row: 0,
    "smallest number first": lambda row: (row.R0 is None, row.R0),
    "fastest fall first": lambda row: (row.growth_rate is None, row.growth_rate),
    "lowest cost first": lambda row: (row.cost is None, row.cost),
    "cost for each share of R0 removed": lambda row: _price(row),
}


def side_by_side(shown: Shown, write: Write) -> None:
    """Show every intervention, and combinations of them, beside the baseline."""
    st.subheader("Interventions side by side")
    names = _names(shown)
    if not names:
        st.info("This scenario has no intervention yet. Type one into the tables below: a row for each change.")
        return
    chosen = [held for held in _combinations() if set(held) <= set(names)]
    if len(shown.solution.types) > MOST_AT_ONCE and not asking.asked(
        "control.compare", "Compare the interventions", (shown.text, chosen)
    ):
        return
    found = cache.compare(shown.text, shown.folder, tuple(chosen))
    if not isinstance(found, Comparison):
        parts.problem_box(found, "with the comparison")
        return
    order = asking.choice("Order", list(ORDERS), "control.order")
    rows = [found.baseline, *sorted(found.interventions, key=ORDERS[order])]
    chart = charts.interventions(rows, dark=parts.dark())
    if chart is not None:
        taking.picture(chart, "interventions", "the picture of the interventions")
    dying = "population" if shown.solution.form == "projection" else "infection"
    st.caption(
        f"Dashed line: 1, below which the {dying} dies out. With an intervention in force the number is a control "
        "reproduction number; R0 is the baseline's alone."
    )
    _table(found, rows, write)
    st.download_button(
        "Download this comparison (CSV)",
        lambda: csv_text(found.to_frame()),
        "comparison.csv",
        "text/csv",
        on_click="ignore",
        key="control.csv",
    )
    _combine(names, chosen)
    _mix(found, rows, write)
    parts.warnings_box(found.warnings)
    combine = [word for held in chosen for word in ("--combine", *held)]
    asking.command("compare", *combine)


def _table(found: Comparison, rows: Sequence[Compared], write: Write) -> None:
    now = any(row.effective is not None for row in rows)
    unit = found.time_unit
    heads = [
        "",
        "number",
        "below 1?",
        "share of R0 removed",
        f"growth rate, per {unit}",
        f"doubles or halves in ({unit})",
    ]
    cells = [
        (
            row.name,
            write(row.R0) if row.R0 is not None else "none",
            "" if row.R0 is None else "yes" if row.below_one else "no",
            "–" if row.reduction is None else share(row.reduction),
            write(row.growth_rate),
            _time(row, write),
            write(row.cost),
            *([write(row.effective)] if now else []),
        )
        for row in rows
    ]
    heads += ["cost", *(["effective number now"] if now else [])]
    if all(row.growth_rate is None for row in rows):
        # of a K as given: it has no time in it
        heads, cells = [*heads[:4], *heads[6:]], [(*cell[:4], *cell[6:]) for cell in cells]
    parts.table(heads, cells)
    notes = [f"**{plain(row.name)}**: {plain(row.note)}" for row in rows if row.note]
    if notes:
        with st.expander("What each intervention is"):
            st.markdown("\n".join(f"- {note}" for note in notes))


def _time(row: Compared, write: Write) -> str:
    if row.doubling_time is not None:
        return f"doubles: {write(row.doubling_time)}"
    return "–" if row.halving_time is None else f"halves: {write(row.halving_time)}"


def _price(row: Compared) -> tuple[bool, float]:
    if row.cost is None or row.reduction is None or row.reduction <= 0:
        return True, 0.0
    return False, row.cost / row.reduction


def _combine(names: Sequence[str], chosen: Sequence[tuple[str, ...]]) -> None:
    """Let interventions be put together, and combinations be taken away again."""
    if len(names) < 2:
        return
    with st.container(border=True):
        picked = st.multiselect(
            "Compare several together, in this order", names, key="control.picked", placeholder="Choose two or more"
        )
        new = tuple(picked)
        if st.button("Add this combination", key="control.combine", disabled=len(new) < 2 or new in chosen):
            _keep([*chosen, new])
            st.rerun()
        for k, held in enumerate(chosen):
            if st.button(f"Remove: {plain(' + '.join(held))}", key=f"control.remove.{k}"):
                _keep([other for other in chosen if other != held])
                st.rerun()


def _combinations() -> list[tuple[str, ...]]:
    held = state.recall("control.combinations")
    return [tuple(names) for names in json.loads(held)] if held else []


def _keep(combinations: Sequence[tuple[str, ...]]) -> None:
    state.remember("control.combinations", json.dumps(combinations))


def _mix(found: Comparison, rows: Sequence[Compared], write: Write) -> None:
    with_mix = [row for row in rows if row.case_mix is not None]
    if len(found.types) < 2 or not with_mix:
        return
    with st.expander("Who is infected: share of each type among new infections"):
        heads = ["type", *(row.name for row in with_mix)]
        cells = [
            (name, *(write(row.case_mix[k]) for row in with_mix if row.case_mix is not None))
            for k, name in enumerate(found.types)
        ]
        parts.grid(heads, cells)


# -- editing --------------------------------------------------------------------------------------------------------


def editor(now: state.Version) -> None:
    """Place the two tables of interventions and put what is typed there into the text; problems stand below."""
    st.subheader("Edit the interventions")
    document = forms.document(now.text)
    if document is None:
        st.info("The tables need a text that is TOML. Put it right on the page **Scenario**, or undo the last change.")
        return
    st.caption(
        "One row a change; changes of an intervention apply in order. Click into the last, empty row (or press Enter there) "
        "to add one; a new name makes a new intervention. A matrix is changed for the rows and columns named. "
        "susceptibility reduces how often a type is infected, infectivity how much an infected state infects."
    )
    edits = _grid("changes", document)
    # Only one table can be typed into at a time; its edit comes first, the other then starts from the new text.
    more = _grid("packages", document)
    try:
        text = forms.apply(now.text, edits or more)
    except NgmError as error:
        parts.problem_box(error.problems, "that kept the change out of the text")
        text = now.text
    wrong = [p for p in cache.problems(text, now.folder) if p.key and p.key[0] == packages.SECTION]
    parts.problem_box(wrong, "in these tables")
    if text != now.text:
        after = forms.document(text)
        typed_into = "changes" if edits else "packages"
        st.session_state[f"control.{typed_into}.seen"] = _rows(typed_into, after or document)
        state.edit(text)
        st.rerun()


def _grid(name: str, document: dict[str, Any]) -> list[forms.Edit]:
    """Place one grid; return the edits that it asks for.

    The grid keeps what it started from as long as nothing but itself changes the rows; else it starts afresh.
    """
    before = _rows(name, document)
    number, seen = f"control.{name}.number", f"control.{name}.seen"
    if st.session_state.get(seen, before) != before:
        st.session_state[number] = st.session_state.get(number, 0) + 1
    st.session_state[seen] = before
    key = f"control.{name}.{state.current().forms}.{st.session_state.get(number, 0)}"
    if name == "changes":
        typed = editors.grid(key, before, packages.CHANGES, "Changes of each intervention", spare=1)
        return packages.change_edits(document, packages.tidy_changes(document, typed))
    st.caption("Names, notes and costs. A row without a change has to get one in the table above.")
    typed = editors.grid(key, before, packages.INTERVENTIONS.columns, "Interventions: names, notes, costs", spare=0)
    after = forms.tidy(packages.INTERVENTIONS, typed)
    return [] if after == before else forms.edits(packages.INTERVENTIONS, before, after, document)


def _rows(name: str, document: dict[str, Any]) -> list[forms.Row]:
    if name == "changes":
        return packages.change_rows(document)
    return forms.rows(packages.INTERVENTIONS, document)


# -- strength, targets ----------------------------------------------------------------------------------------------


def strengths(shown: Shown, write: Write) -> None:
    """Find how much of each intervention is needed."""
    st.subheader("Strength needed")
    names = _names(shown)
    if not names:
        st.info("This scenario has no intervention yet. Type one in under *Compare interventions*.")
        return
    st.markdown(
        "Strength runs from 0 (not there) to 1 (as the scenario has it): half of a factor 0.8 is 0.9, half of a share of "
        "0.45 is 0.225."
    )
    question = asking.common(names)
    if question is None:
        return
    target, besides = question
    asked_for = [name for name in names if name not in besides][:MOST_STRENGTHS]
    if not asking.asked(
        "control.strengths", "Find the strength needed of each", (shown.text, target, besides, asked_for)
    ):
        return
    found: list[Strength] = []
    for name in asked_for:
        with st.spinner(f"Finding the strength of {plain(name)} …"):
            one = cache.strength(shown.text, shown.folder, name, target, besides)
        if isinstance(one, Strength):
            found.append(one)
        else:
            parts.problem_box(one, f"with {name}")
    if not found:
        return
    cells = [
        (
            one.name,
            "unattainable" if one.unattainable else "–" if one.strength is None else write(one.strength),
            write(one.at_full),
            strength_words(one),
        )
        for one in found
    ]
    parts.table(["intervention", f"strength at which it is {target:g}", "number at full strength", "in words"], cells)
    st.caption(asking.ASSURANCE)
    if len(names) > len(asked_for) + len(besides):
        st.caption(f"The first {MOST_STRENGTHS} interventions are shown.")
    name = asking.choice("Show the way of the number for", [one.name for one in found], "control.curve")
    one = next(one for one in found if one.name == name)
    chart = charts.strength(one, dark=parts.dark())
    if chart is not None:
        taking.picture(chart, f"strength-{one.name}", "the picture of the strength")
    with st.expander("This curve as a table"):
        parts.table(["strength", one.label], [(write(x), "none" if y is None else write(y)) for x, y in one.curve])
    parts.warnings_box(dict.fromkeys(warning for one in found for warning in one.warnings))
    asking.command(
        "strength", "--intervention", name, *asking.option("--target", target), *asking.several("--with", besides)
    )


KINDS: dict[str, TargetKind] = {
    "hosts: types, and sets of them": "types",
    "routes: infection of one type by another": "entries",
    "stages: the infectivity of a state": "states",
}
assert set(KINDS.values()) == set(get_args(TargetKind))


def targets(shown: Shown, write: Write) -> None:
    """Show what acting on each target alone has to reach, and which cannot work alone."""
    st.subheader("Whom to act on")
    st.markdown(
        "T counts the infections that acting on a target must undo; the critical effort 1 - 1/T is the share of them to "
        "prevent. Where there is no T, the rest sustains the infection by itself: no effort on that target alone is enough."
    )
    if shown.solution.R0 is None:
        return
    result = cache.control(shown.text, shown.folder)
    kind = KINDS[asking.choice("Act on", list(KINDS), "control.kind")]
    structure = shown.solution.structure
    if structure is not None and structure.period is not None and structure.period > 1:
        st.info(
            f"An infection comes back to its kind of host every {structure.period} generations. T of one kind of host alone "
            f"is counted per cycle: set it beside R0 per cycle, {plain(write(shown.solution.per_cycle))}, not beside R0."
        )
    chart = charts.efforts(result, kind, dark=parts.dark())
    if chart is not None:
        taking.picture(chart, f"efforts-{kind}", "the picture of the efforts")
    if kind == "types":
        rows = [
            (" + ".join(t.types), write(t.T), _effort(t.critical_effort, t.T, write), t.why or "")
            for t in result.type_reproduction
        ]
    elif kind == "entries":
        rows = [
            (f"{t.entry[1]} infecting {t.entry[0]}", write(t.T), _effort(t.critical_effort, t.T, write), t.why or "")
            for t in result.target_reproduction
        ]
    else:
        rows = [
            (t.state, write(t.T), _effort(t.critical_effort, t.T, write), t.why or "")
            for t in result.state_reproduction
        ]
    if rows:
        parts.table(["target", "T", "critical effort", "why it cannot work alone"], rows)
    else:
        st.caption("None is listed.")
    if kind == "entries":
        _together(shown, result, write)
    if kind == "types" and all(len(t.types) == 1 for t in result.type_reproduction):
        st.caption("Sets of types are listed for up to six types. Any set of groups can be chosen under *Coverage*.")
    parts.warnings_box(result.warnings)
    asking.command("control")


def _together(shown: Shown, result: ControlResult, write: Write) -> None:
    """Ask for several routes, and show what acting on all of them together has to reach."""
    routes = {f"{t.entry[1]} infecting {t.entry[0]}": t.entry for t in result.target_reproduction}
    chosen = st.multiselect("Act on several of these together", list(routes), key="control.routes")
    if len(chosen) < 2:
        return
    found = cache.control(shown.text, shown.folder, tuple(routes[name] for name in chosen)).entry_set
    if found is not None:
        effort = _effort(found.critical_effort, found.T, write)
        parts.table(
            ["targets", "T", "critical effort", "why it cannot work"],
            [(" + ".join(chosen), write(found.T), effort, found.why or "")],
        )


def _effort(effort: float | None, T: float | None, write: Write) -> str:
    return "cannot work alone" if T is None else write(effort)


def _names(shown: Shown) -> list[str]:
    document = forms.document(shown.text) or {}
    return packages.names(document)
