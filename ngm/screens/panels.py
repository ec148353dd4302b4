"""The sections of the page of reproduction numbers."""

from __future__ import annotations

from collections.abc import Callable

import streamlit as st

from ngm.charts import bars, graphs
from ngm.charts.spectrum import eigenvalues
from ngm.meanings import help_text
from ngm.results import ControlResult, Solution
from ngm.screens import cache, forms, parts, state, taking
from ngm.screens.forms import TABLES
from ngm.screens.parts import Shown, plain

__all__ = ["change_a_value", "control", "figures", "spectrum", "vectors", "who_infects_whom"]

Write = Callable[[float | None], str]


def figures(solution: Solution, write: Write) -> None:
    """Show R0, per generation and per cycle, and how fast the infection grows."""
    first, second, third = st.columns(3)
    with first:
        parts.headline(solution, write, "stretch")
        if solution.R0 is not None:
            st.caption(
                "New members that one new member has in its whole life."
                if solution.form == "projection"
                else "Cases caused by one typical case, per generation, where nobody is infected yet."
            )
    period = solution.structure.period if solution.structure is not None else None
    with second:
        if period is not None and period > 1:
            st.metric("R0 per cycle", write(solution.per_cycle), border=True, help=help_text("per_cycle"))
            st.caption(
                f"An infection comes back to where it began every {period} generations (host to vector to host, say). "
                f"Per cycle it multiplies by R0 to the power of {period}. Both numbers pass 1 together; "
                "say which one you quote."
            )
        elif solution.R0 is not None:
            st.metric("R0 per cycle", write(solution.per_cycle), border=True, help=help_text("per_cycle"))
            st.caption(
                "A cycle is one generation here: the number is R0 itself."
                if period == 1
                else "Of the class with the largest R0; a dash where classes of different periods tie."
            )
    with third:
        unit = plain(solution.time_unit)
        if solution.form == "K as given":
            st.caption("A K as given has no time in it: how fast the infection grows is not known.")
            return
        st.metric(f"Growth rate, per {unit}", write(solution.growth_rate), border=True, help=help_text("growth_rate"))
        st.caption(
            f"Early growth, exponential. Doubling time: {plain(write(solution.doubling_time))} {unit}s."
            if solution.doubling_time is not None
            else "It does not grow: there is no doubling time."
        )
        if solution.discrete and solution.form == "flows":
            st.caption(
                f"In discrete time: a step of one {unit} multiplies the infection by {plain(write(solution.growth_factor))}, "
                "and the growth rate is the logarithm of that."
            )
    now = solution.effective
    if now is not None:
        st.metric("Effective number at the state now", write(now.R), border=True, width="content")
        st.caption(now.no_R or "Cases caused by one typical case at the immunity of today. This is not R0.")


def change_a_value(shown: Shown, write: Write) -> None:
    """Try other values of parameters beside those in force, and take them over."""
    st.subheader("Change a value")
    document = forms.document(shown.text) or {}
    rows = {row[0]: row for row in forms.rows(TABLES["parameters"], document)}
    held = [name for name in state.recall("numbers.chosen").split() if name in rows]
    chosen = st.multiselect("Parameters to change", list(rows), default=held, key="numbers.chosen")
    state.remember("numbers.chosen", " ".join(chosen))
    if not chosen:
        st.caption("Choose a parameter, type another value, and see the new R0 beside the old one.")
        return
    st.caption("Each value is in the parameter's own unit.")
    edits: list[forms.Edit] = []
    for name, place in zip(chosen, _columns(len(chosen)), strict=True):
        value, unit = rows[name][1], rows[name][2]
        field = f"numbers.value.{name}"
        label = f"{plain(name)} ({plain(unit)}), now {plain(value)}" if unit else f"{plain(name)}, now {plain(value)}"
        typed = place.text_input(label, value=state.recall(field, value), key=field)
        state.remember(field, typed)
        edits += forms.field_edit("parameters", (name, "value"), value, typed, "value")
    text = parts.applied(shown.text, edits)
    outcome = cache.solve(text, shown.folder)
    if outcome.solution is None:
        parts.problem_box(outcome.problems, "with these values")
        return
    old, new = st.columns(2)
    with old:
        st.metric("R0 now", write(shown.solution.R0), border=True)
    with new:
        st.metric("R0 with these values", write(outcome.solution.R0), border=True)
        if outcome.solution.no_R0:
            st.error(plain(outcome.solution.no_R0))
    if st.button("Take over into the scenario", key="numbers.apply", disabled=text == shown.text):
        state.edit(text)
        st.rerun()


def who_infects_whom(solution: Solution, write: Write) -> None:
    """Show K as a graph with its classes, and as a table."""
    born = solution.form == "projection"
    st.subheader("Births of a life, stage by stage" if born else "Who infects whom", help=help_text("K"))
    graph = graphs.who_infects_whom(solution, dark=parts.dark())
    if graph is not None:
        types = solution.types_at_infection
        arrows = [
            (types[j], types[i], value)
            for i, row in enumerate(solution.K or ())
            for j, value in enumerate(row)
            if value != 0
        ]
        taking.diagram(graph, "who-infects-whom", [("infects", "infected", "infections caused by one case"), *arrows])
        st.caption(
            "An arrow leads from the stage in which a life begins to the stage of its young; beside it, their number."
            if born
            else "An arrow leads from the type that infects to the type infected; beside it, the infections that one case "
            "causes. A box is a class: within it each type leads to each. That with the largest R0 has a solid box."
        )
    structure = solution.structure
    if structure is not None:
        rows = [
            (str(k), ", ".join(c.types), write(c.R0), "–" if c.period is None else str(c.period), write(c.growth_rate))
            for k, c in enumerate(structure.classes, 1)
        ]
        heads = ["class", "types", "R0", "period", f"growth rate, per {solution.time_unit}"]
        timeless = solution.form == "K as given"
        parts.table(heads[:4] if timeless else heads, [row[:4] for row in rows] if timeless else rows)
        if len(structure.classes) > 1:
            st.caption("K has several classes: R0 is the largest of theirs.")
        growing = [c for c in structure.classes if c.growth_rate is not None]
        fastest = max(growing, key=lambda c: c.growth_rate or 0.0, default=None)
        if fastest is not None and solution.R0 is not None and fastest.R0 < solution.R0:
            st.warning(
                f"The class that grows fastest ({plain(', '.join(fastest.types))}) is not the one with the largest R0: "
                "R0 is no measure of speed."
            )
    if solution.K is not None:
        taking.matrix("K", solution.K, solution.types_at_infection)
        sides = "row born into, column born in" if born else "row infected, column infecting"
        with st.expander(f"K in numbers: {sides}"):
            parts.numbers_table(solution.K, solution.types_at_infection, write, "K")


def spectrum(solution: Solution, write: Write) -> None:
    """Show the eigenvalues of K in the complex plane."""
    st.subheader("Eigenvalues of K", help=help_text("eigenvalues"))
    chart = eigenvalues(solution, dark=parts.dark())
    if chart is None:
        st.caption("K is too large for its eigenvalues to be listed.")
        return
    heads, rows = ["real part", "imaginary part"], solution.eigenvalues
    what = "the picture of the eigenvalues"
    taking.picture(chart, "eigenvalues", what, width="content", rows=[heads, *rows])
    with st.expander("The eigenvalues as a table"):
        parts.table(heads, [tuple(map(write, row)) for row in rows])
    st.caption("R0 is the largest eigenvalue in size. Others on the same circle mean a period, or classes that tie.")


def vectors(solution: Solution, write: Write) -> None:
    """Show the two Perron vectors."""
    st.subheader("Case mix and reproductive values")
    right, left = solution.right, solution.left
    if right is None and left is None:
        st.caption("They are not unique here, because classes tie, or not defined.")
        return
    first, second = st.columns(2)
    with first:
        st.markdown("**Stable distribution**: the mix of new infections, once it has settled")
        chart = bars.stable_distribution(solution, dark=parts.dark())
        if chart is not None:
            taking.picture(chart, "stable-distribution", "the picture of the case mix")
    with second:
        st.markdown("**Reproductive value**: what one case of a type counts for all later generations")
        chart = bars.reproductive_values(solution, dark=parts.dark())
        if chart is not None:
            taking.picture(chart, "reproductive-values", "the picture of the reproductive values")
    with st.expander("Both as a table"):
        rows = [
            (t, write(right[k] if right else None), write(left[k] if left else None))
            for k, t in enumerate(solution.types_at_infection)
        ]
        parts.table(["type", "share of new infections", "reproductive value"], rows)


def control(result: ControlResult, write: Write, form: str = "flows") -> None:
    """Show what control has to reach, target by target."""
    st.subheader("What control has to reach", help=help_text("T"))
    born = form == "projection"
    st.markdown(
        f"T counts the {'births' if born else 'infections'} that control of the target must undo; the critical effort 1 - 1/T "
        f"is the share of them to prevent for the {'population' if born else 'infection'} to die out. It equals 1 - 1/R0 only "
        "where all types are treated alike. Where T does not exist, no effort on that target alone is enough."
    )
    chart = bars.efforts(result, dark=parts.dark(), births=born)
    if chart is not None:
        taking.picture(chart, "efforts", "the picture of the efforts")
    heads = ["target", "T", "critical effort", "why there is none"]
    groups: list[tuple[str, list[tuple[str, ...]]]] = [
        (
            "Stages: births into these stages prevented" if born else "Types: infections of these types prevented",
            [(", ".join(t.types), write(t.T), write(t.critical_effort), t.why or "") for t in result.type_reproduction],
        ),
        (
            "Entries: births into one stage by another prevented"
            if born
            else "Entries: infections of one type by another prevented",
            [
                (
                    f"{t.entry[1]} {'bearing' if born else 'infecting'} {t.entry[0]}",
                    write(t.T),
                    write(t.critical_effort),
                    t.why or "",
                )
                for t in result.target_reproduction
            ],
        ),
        (
            "Stages: births by one stage prevented" if born else "States: infectivity in one state removed",
            [(t.state, write(t.T), write(t.critical_effort), t.why or "") for t in result.state_reproduction],
        ),
    ]
    for title, rows in groups:
        if form == "K as given" and title.startswith("States"):
            continue  # a K as given has no states beside its types
        st.markdown(f"**{title}**")
        if rows:
            parts.table(heads, rows)
        else:
            st.caption("None listed.")
    parts.warnings_box(result.warnings)


def _columns(count: int) -> list[st.delta_generator.DeltaGenerator]:
    width = min(count, 3)
    columns = st.columns(width)
    return [columns[k % width] for k in range(count)]
