"""The sections of the page on sensitivity that need no draws: local indices, swings, two quantities at once, a wanted R0."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import streamlit as st

import ngm
from ngm.charts import sensitivity as charts
from ngm.charts.plane import plane as plane_chart
from ngm.charts.style import short
from ngm.results_mixing import Mixing
from ngm.results_sensitivity import Calibration, Plane, Sensitivity, Swing, Swings
from ngm.screens import asking, cache, forms, parts, slope_panel, state, taking
from ngm.screens.parts import Shown, plain
from ngm.screens.waiting import worked
from ngm.spreadsheet import csv_text

__all__ = ["calibration", "local", "plane", "save"]

Write = Callable[[float | None], str]

#: Models with more types have their indices and planes computed when asked for, not on every visit.
MOST_AT_ONCE = 60

RANGES, TENTH = "over each parameter's range", "over 10 % less and more"
BY_R0, BY_GROWTH = "R0", "growth rate"


def save(label: str, frame: Any, name: str, key: str) -> None:
    """Place a button that saves a table as CSV, at full precision."""
    st.download_button(
        label, lambda: csv_text(frame).encode(), name, "text/csv", on_click="ignore", key=f"sensitivity.{key}"
    )


def local(shown: Shown, write: Write) -> None:
    """Show how R0 answers to each parameter: swings as a picture, indices as a table."""
    st.subheader("Which parameter moves R0")
    if len(shown.solution.types) > MOST_AT_ONCE and not asking.asked(
        "sensitivity.local", f"Compute it ({len(shown.solution.types)} types: some seconds)", (shown.text, shown.folder)
    ):
        return
    moved = cache.swings(shown.text, shown.folder)
    if isinstance(moved, Swings):
        _tornado(moved, write)
    else:
        parts.problem_box(moved, "with parameters at their ends")
    found = worked(
        "sensitivity.indices",
        "Working out how R0 answers to each parameter",
        ("sensitivity", shown.text, shown.folder),
        lambda: ngm.sensitivity(ngm.loads(shown.text, folder=shown.folder)),
        "with the indices",
    )
    if not isinstance(found, Sensitivity):
        return
    with st.expander("Local indices: derivative and elasticity"):
        unit = plain(found.time_unit)
        rows = [
            (
                index.parameter,
                write(index.value),
                write(index.derivative),
                write(index.elasticity),
                write(index.growth_derivative),
                write(index.growth_elasticity),
            )
            for index in sorted(found.local, key=lambda index: -abs(index.elasticity or 0.0))
        ]
        heads = ["parameter", "value", "dR0/dp", "elasticity of R0", "dr/dp", "elasticity of r"]
        parts.table(heads, rows)
        st.caption(
            "An elasticity of 0.5: 1 % more of the parameter raises R0 by 0.5 %. Derivatives are by the parameter's own unit; "
            f"r is the growth rate per {unit}. What follows a parameter moves with it, and so does the state without infection."
        )
        save("Save the indices as CSV", found.to_frame(), "local-indices.csv", "local")
        if found.entry_elasticity is not None:
            st.markdown("**Elasticity of R0 by each entry of K** (row infected, column infecting; they sum to 1)")
            parts.numbers_table(found.entry_elasticity, found.types_at_infection, write, "K")
    slope_panel.formulas(shown)
    parts.warnings_box(found.warnings)


def _tornado(moved: Swings, write: Write) -> None:
    options = [RANGES, TENTH] if moved.ranges else [TENTH]
    held = state.recall("sensitivity.over")
    over = st.radio(
        "Moved", options, index=options.index(held) if held in options else 0, horizontal=True, key="sensitivity.over"
    )
    state.remember("sensitivity.over", over)
    rows: Sequence[Swing] = moved.ranges if over == RANGES else moved.tenth
    if not moved.ranges:
        st.caption("No parameter has a range or a distribution yet: give them on the page **Model**.")
    if moved.R0 is None:
        st.caption("There is no R0 at these values, so there is nothing to move.")
        return
    kind = "range" if over == RANGES else "tenth"
    chart = charts.tornado(rows, moved.R0, over=kind, dark=parts.dark())
    if chart is not None:
        taking.picture(chart, f"R0-by-parameter-{kind}", "the picture of the parameters")
    st.caption(
        "One parameter at a time, the others as they are; at each end of a bar the value it stands for. The dashed line is R0 "
        "= 1. "
        + (
            "A distribution without a range goes over its central 95 %; a range is taken by all groups at once."
            if kind == "range"
            else "A parameter with several values is multiplied by 0.9 and 1.1 in all groups at once."
        )
    )
    for why, count in moved.missing.items():
        st.caption(f"At {count} of the ends there is no R0: {plain(why)}.")
    with st.expander("R0 at the ends, as a table"):
        heads = ["parameter", "lower end", "upper end", "unit", "R0 at the lower end", "R0 at the upper end"]
        table = [
            (one.parameter, write(one.low), write(one.high), one.unit, write(one.R0_low), write(one.R0_high))
            for one in rows
        ]
        parts.table(heads, table)
        save("Save as CSV", moved.to_frame(), "R0-at-the-ends.csv", "swings")


def _quantities(shown: Shown, movable: Sequence[str]) -> dict[str, tuple[str, str]]:
    offered = {name: ("parameter", name) for name in movable}
    mixed = cache.mixing(shown.text, shown.folder, None, None)
    if isinstance(mixed, Mixing):
        for name in mixed.settings:
            offered[f"factor on {name}"] = ("factor", name)
            offered[f"assortativity of {name}"] = ("assortativity", name)
    return offered


@st.fragment
def plane(shown: Shown, write: Write) -> None:
    """Let two quantities be chosen and show R0 over them, with the line at 1."""
    st.subheader("Two quantities at once")
    moved = cache.swings(shown.text, shown.folder)
    if not isinstance(moved, Swings):
        return
    offered = _quantities(shown, _by_interest(moved))
    names = list(offered)
    if len(names) < 2:
        st.caption("The scenario has no two numbers to move.")
        return
    left, right, last = st.columns(3)
    chosen = []
    for place, axis, default in ((left, "across", 0), (right, "upward", 1)):
        field = f"sensitivity.{axis}"
        held = state.recall(field, names[default])
        name = place.selectbox(
            axis.capitalize(), names, index=names.index(held) if held in names else default, key=field
        )
        state.remember(field, name)
        chosen.append(name)
    typed = last.text_input(
        "Lines at R0 =",
        value=state.recall("sensitivity.levels", "1"),
        key="sensitivity.levels",
        help="One or several numbers above 0, separated by spaces or semicolons.",
    )
    state.remember("sensitivity.levels", typed)
    entries = asking.Entries()
    read = [entries.read(piece, "Lines at R0") for piece in typed.replace(";", " ").split()]
    parts.problem_box(entries.problems)
    levels = tuple(dict.fromkeys(level for level in read if level is not None)) or (1.0,)
    if chosen[0] == chosen[1]:
        st.info("Choose two different quantities.")
        return
    pair = (offered[chosen[0]], offered[chosen[1]])
    slow = any(kind != "parameter" for kind, _ in pair) or len(shown.solution.types) > MOST_AT_ONCE
    if slow and not asking.asked(
        "sensitivity.plane", "Draw this plane (some seconds)", (shown.text, shown.folder, pair, levels)
    ):
        return
    within = next(
        (found for kind, name in pair if kind == "assortativity" and (found := _first_table(shown, name)) is not None),
        None,
    )
    made = worked(
        "sensitivity.plane.work",
        "Computing R0 over the plane",
        ("plane", shown.text, shown.folder, pair, levels, within),
        lambda: ngm.plane(ngm.loads(shown.text, folder=shown.folder), *pair, levels=levels, within=within),
        "with this plane",
    )
    if not isinstance(made, Plane):
        return
    _show_plane(made, write)


def _by_interest(moved: Swings) -> list[str]:
    """Return what can be moved, by how far it moves R0: first what has a range."""
    return list(dict.fromkeys(one.parameter for one in (*moved.ranges, *moved.tenth)))


def _first_table(shown: Shown, matrix: str) -> str | None:
    """Return the group whose table is moved, for a matrix given within another dimension."""
    found = cache.mixing(shown.text, shown.folder, matrix, None)
    return found.within if isinstance(found, Mixing) else None


def _show_plane(made: Plane, write: Write) -> None:
    chart = plane_chart(made)
    if chart is not None:
        taking.picture(chart, "R0-plane", "the picture of the plane")
    told = (
        "The thick line is R0 = 1: on its orange side an infection can spread, on its purple side it dies out."
        if dict(made.lines).get(1.0)
        else "R0 does not pass 1 on this plane."
        if any(level == 1 for level, _ in made.lines)
        else ""
    )
    without = [short(level) for level, pieces in made.lines if not pieces and level != 1]
    if without:
        told += f" No line at {', '.join(without)}: R0 does not pass it here."
    for why, count in made.missing.items():
        told += f" {count} points have no R0, and no colour: {why}."
    st.caption(plain(told))
    with st.expander("The plane as a table"):
        heads = [f"{made.y.title} \\ {made.x.title}", *(short(value, 4) for value in made.x.values)]
        rows = [(short(y, 4), *(write(R0) for R0 in row)) for y, row in zip(made.y.values, made.R0, strict=True)]
        parts.grid(heads, rows)
        save("Save the plane as CSV", made.to_frame(), "R0-plane.csv", "plane.csv")


@st.fragment
def calibration(shown: Shown, write: Write) -> None:
    """Find the value of a parameter for a wanted R0 or growth rate, and take it over on demand."""
    st.subheader("The value for a wanted R0")
    document = forms.document(shown.text) or {}
    rows = forms.rows(forms.TABLES["parameters"], document)
    names = [row[0] for row in rows]
    if not names:
        st.caption("The scenario has no parameter.")
        return
    first, second, third = st.columns(3)
    with first:
        parameter = asking.choice("Parameter to find", names, "sensitivity.parameter")
    with second:
        kind = asking.choice("Wanted", [BY_R0, BY_GROWTH], "sensitivity.wanted")
    label = "Wanted R0" if kind == BY_R0 else f"Wanted growth rate, per {plain(shown.solution.time_unit)}"
    entries = asking.Entries()
    wanted = entries.number(label, f"sensitivity.value.{kind}", "1" if kind == BY_R0 else "0", third)
    parts.problem_box(entries.problems)
    if wanted is None:
        return
    if not asking.asked("sensitivity.calibrate", "Find the value", (shown.text, shown.folder, parameter, kind, wanted)):
        return
    by_R0 = kind == BY_R0
    found = worked(
        "sensitivity.search",
        "Searching for the value",
        ("calibrate", shown.text, shown.folder, parameter, kind, wanted),
        lambda: ngm.calibrate(
            ngm.loads(shown.text, folder=shown.folder),
            parameter,
            wanted if by_R0 else None,
            growth_rate=None if by_R0 else wanted,
        ),
        "with this wish",
    )
    if not isinstance(found, Calibration):
        return
    unit = {row[0]: row[2] for row in rows}[parameter]
    st.success(
        f"**{plain(parameter)} = {plain(write(found.value))} {plain(unit)}** gives "
        + (f"R0 = {plain(short(wanted))}." if by_R0 else f"a growth rate of {plain(short(wanted))}")
        + ("" if by_R0 else f" and {'no R0' if found.R0 is None else f'R0 = {plain(short(found.R0))}'}.")
    )
    if len(found.values) > 1:
        every = ", ".join(f"{plain(write(value))} {plain(unit)}" for value in found.values)
        st.caption(f"All values found: {every}.")
    if found.attainable is not None:
        low, high = found.attainable
        what = "R0" if by_R0 else "the growth rate"
        st.caption(f"Over the values searched, {what} goes from {plain(write(low))} to {plain(write(high))}.")
    parts.warnings_box(found.warnings)
    asking.command("calibrate", "--parameter", parameter, "--R0" if by_R0 else "--growth-rate", f"{wanted!r}")
    if shown.stale:
        return
    text = parts.applied(shown.text, [forms.Edit("set", ("parameters", parameter, "value"), found.value)])
    if st.button(
        f"Take over {plain(parameter)} = {plain(short(found.value))} into the scenario",
        key="sensitivity.apply",
        disabled=text == shown.text,
    ):
        state.edit(text)
        st.rerun()
