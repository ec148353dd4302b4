"""The parts of the pages on what lies below one and on the first weeks, and the season on that of the numbers."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import streamlit as st

import ngm
from ngm.charts import course as charts
from ngm.results import Solution
from ngm.results_course import Course, Threshold
from ngm.results_season import Seasonal
from ngm.screens import asking, forms, packages, parts, state, taking
from ngm.screens.asking import Entries
from ngm.screens.forms import TABLES
from ngm.screens.parts import Shown, plain
from ngm.screens.waiting import worked
from ngm.wording_course import course_words, threshold_words

__all__ = ["below_one", "first_weeks", "season"]

Write = Callable[[float | None], str]

DEFAULT, ALL = "what multiplies all transmission", "all transmission together"
#: Generations and times shown in tables.
MOST_ROWS = 13


def below_one(shown: Shown, write: Write) -> None:
    """Ask what is moved and what is in force; show whether infection can persist below a number of 1, and how far down."""
    why = _not_here(shown.solution)
    if why is not None:
        st.info(why)
        return
    document = forms.document(shown.text) or {}
    names = packages.names(document)
    left, right = st.columns(2)
    parameters = [row[0] for row in forms.rows(TABLES["parameters"], document)]
    with left:
        moved = asking.choice("What is moved", [DEFAULT, ALL, *parameters], "below_one.along")
    with right:
        besides = asking.picked("Interventions in force", names, "below_one.with", "none") if names else ()
    along = None if moved == DEFAULT else "all-transmission" if moved == ALL else moved
    text, folder = shown.text, shown.folder

    def compute() -> Threshold:
        scenario = ngm.loads(text, folder=folder)
        acting = ngm.combined(scenario, besides).intervention if besides else None
        return ngm.threshold(scenario, along=along, intervention=acting)

    question = ("threshold", text, folder, along, besides)
    found = worked("below_one.work", "Following the endemic states", question, compute, "with this question")
    if not isinstance(found, Threshold):
        return
    _verdict(found)
    if found.direction is None:
        parts.warnings_box(found.warnings)
        return
    first, second, third = st.columns(3)
    unit = f" ({plain(found.unit)})" if found.unit else ""
    name = found.label[0].upper() + found.label[1:]
    first.metric(f"{name} now", write(found.R_now), border=True)
    second.metric(f"{plain(found.along)}{unit} where the number is 1", write(found.at_one), border=True)
    third.metric(f"{plain(found.along)}{unit} at the turning point", write(found.turning), border=True)
    if found.turning is not None:
        third.caption(f"The number there is {plain(write(found.R_turning))}.")
    chart = charts.endemic_curve(found, dark=parts.dark())
    if chart is not None:
        taking.picture(chart, "endemic-states", "the curve of endemic states")
        st.caption(
            "Solid: stable, infection stays. Dashed: unstable, the level above which it stays and below which it dies out."
        )
    _endemic(found, write)
    with st.expander("How it is decided"):
        st.markdown(
            "Endemic states leave the infection-free one where the number is 1. Whether they lie above it (forward) or below "
            "it (backward) is decided by two coefficients on the centre manifold (Castillo-Chavez & Song 2004): "
            f"a = {plain(write(found.a))}, b = {plain(write(found.b))}; backward where a > 0 and b > 0."
        )
        for name, formula in (("a", found.formula_a), ("b", found.formula_b)):
            if formula is not None:
                parts.display(f"{name} = {parts.latex(formula)}")
        rows = [(write(p.value), write(p.infected), "stable" if p.stable else "unstable") for p in found.branch]
        parts.grid([found.along, "infected", "state"], rows)
    parts.warnings_box(found.warnings)
    options = asking.several("--along", [] if along is None else [along])
    asking.command("threshold", *options, *asking.several("--with", besides))


def _not_here(solution: Solution) -> str | None:
    """Return why the question cannot be asked of a scenario of this form; None where it can."""
    if solution.form != "flows":
        return "The matrix stands in the file: there are no flows that could lead to an endemic state."
    if solution.season is not None:
        return "With a season there is no state at rest with infection: what lies below one is computed for steady years only."
    if solution.discrete:
        return "What lies below one is computed in continuous time only."
    return None


def _verdict(found: Threshold) -> None:
    words = [plain(line) for line in threshold_words(found)]
    text = f"**{words[0]}**" + "".join(f"\n\n{line}" for line in words[1:])
    persists = found.R_now is not None and found.R_now < 1 and any(e.stable for e in found.endemic)
    if found.direction is None:
        st.info(text)
    elif found.direction == "backward" or persists:
        (st.error if persists else st.warning)(text)
    else:
        st.success(text)


def _endemic(found: Threshold, write: Write) -> None:
    st.subheader("Endemic states at the values in force")
    if not found.endemic:
        st.caption("None on the curve that leaves the infection-free state.")
        return
    names = list(found.endemic[0].state)[:12]
    rows = [
        ("stable" if e.stable else "unstable", write(e.infected), *(write(e.state[name]) for name in names))
        for e in found.endemic
    ]
    parts.table(["state", "infected", *names], rows)


def first_weeks(shown: Shown, write: Write) -> None:
    """Ask for seeds and how long; show the flows followed, beside growth rate, stable mix and generations."""
    if shown.solution.form != "flows":
        st.info("The matrix stands in the file: there are no flows that could be followed.")
        return
    unit = shown.solution.time_unit
    names = packages.names(forms.document(shown.text) or {})
    entries = Entries()
    first, second, third = st.columns(3)
    long = _typed(first, f"How long, in {plain(unit)}s", "first_weeks.horizon", "Empty: until it has settled.")
    many = _typed(
        second, "Cases seeded", "first_weeks.cases", "Empty: so few that hardly anybody susceptible is used up."
    )
    with third:
        besides = asking.picked("Interventions in force", names, "first_weeks.with", "none") if names else ()
    seeds = asking.picked("Seeds", shown.solution.types, "first_weeks.seeds", "each type, one course for each")
    horizon = entries.read(long, "How long") if long.strip() else None
    cases = entries.read(many, "Cases seeded") if many.strip() else None
    parts.problem_box(entries.problems)
    if entries.problems:
        return
    text, folder = shown.text, shown.folder

    def compute() -> Course:
        scenario = ngm.loads(text, folder=folder)
        acting = ngm.combined(scenario, besides).intervention if besides else None
        return ngm.course(scenario, horizon=horizon, cases=cases, seeds=seeds or None, intervention=acting)

    question = ("course", text, folder, horizon, cases, seeds, besides)
    found = worked("first_weeks.work", "Following the flows", question, compute, "with this question")
    if not isinstance(found, Course):
        return
    for line in course_words(found):
        st.markdown(plain(line))
    rows = [
        (
            c.seed,
            write(c.growth),
            write(found.growth_rate),
            write(c.mix_gap),
            "yes" if c.settled else "not yet, or never",
        )
        for c in found.courses
    ]
    parts.table(["seed", f"growth at the end, per {unit}", "expected", "gap of the mix (0 to 1)", "settled"], rows)
    _picture(found, write)
    _mix(found, write)
    _generations(found, write)
    parts.warnings_box(found.warnings)
    options = [*(["--horizon", long] if long.strip() else []), *(["--cases", many] if many.strip() else [])]
    asking.command("course", *options, *asking.several("--from", seeds), *asking.several("--with", besides))


def _typed(place: Any, label: str, field: str, hint: str) -> str:
    """Place a field that may stay empty; return what is typed there."""
    typed = str(place.text_input(label, value=state.recall(field), key=field, help=hint))
    state.remember(field, typed)
    return typed


def _picture(found: Course, write: Write) -> None:
    seeded = found.courses[0]
    if len(found.courses) > 1:
        name = asking.choice("Course after", [c.seed for c in found.courses], "first_weeks.shown")
        seeded = next(c for c in found.courses if c.seed == name)
    taking.picture(charts.first_weeks(found, seeded, dark=parts.dark()), "first-weeks", "the first weeks")
    few = "with so few hardly anybody susceptible is used up, and the picture scales with their number. "
    few = few if found.depleted < 0.01 else "they use up the susceptible, and growth slows down. "
    st.caption(
        f"After {plain(write(seeded.cases))} of {plain(seeded.seed)}: {few}Each step up multiplies; a straight line is "
        "exponential growth. Dotted: all infected together, had they grown at the expected rate all the while."
    )
    if len(found.types) > charts.MOST_LINES:
        st.caption(f"The first {charts.MOST_LINES} of {len(found.types)} types are drawn; the table has all.")
    with st.expander("The course as a table"):
        rows = [(write(t), *(write(v) for v in row)) for t, row in zip(found.times, seeded.infected, strict=True)]
        parts.grid([f"time ({found.time_unit}s)", *found.types], rows)


def _mix(found: Course, write: Write) -> None:
    if found.stable_mix is None:
        return
    with st.expander("Shares of the types at the end, and expected"):
        heads = ["type", "expected", *(f"after {c.seed}" for c in found.courses[:8])]
        rows = [
            (name, write(found.stable_mix[k]), *("–" if c.mix is None else write(c.mix[k]) for c in found.courses[:8]))
            for k, name in enumerate(found.types)
        ]
        parts.table(heads, rows)
        st.caption("Expected: the right vector of F − V for its largest eigenvalue, the growth rate.")


def _generations(found: Course, write: Write) -> None:
    if not found.generations:
        return
    with st.expander("Generation by generation: K, K², K³, …"):
        names = found.types_at_infection
        name = asking.choice("One case of", list(names[: len(found.generations)]), "first_weeks.generation")
        rows = [
            (str(g), *(write(v) for v in row)) for g, row in enumerate(found.generations[names.index(name)][:MOST_ROWS])
        ]
        parts.grid(["generation", *names], rows)
        st.caption("New cases expected in each generation. Generations overlap in time: this is no course over days.")


def season(year: Seasonal, unit: str, write: Write) -> None:
    """Show R0 of the season beside the numbers that mislead."""
    st.subheader("Over the season")
    first, second, third = st.columns(3)
    first.metric("R0 of the whole season", write(year.R0), border=True)
    second.metric("Averaged season (not R0)", write(year.averaged), border=True)
    third.metric("Worst moment, if it lasted (not R0)", write(year.worst), border=True)
    st.caption(
        f"The season of {plain(', '.join(year.parameters))} repeats itself after {write(year.period)} {plain(unit)}s. R0 is "
        "that of the next-generation operator over a whole period; the growth rate is its Floquet exponent. The averaged "
        "season need not have the same number, and the worst moment does not last."
    )
    chart = charts.season(year, unit, dark=parts.dark())
    if chart is not None:
        taking.picture(chart, "season", "the number of each moment of the season")
    with st.expander("The season as a table"):
        heads = [f"time ({unit}s)", "number if it lasted", *(f"factor on {name}" for name in year.multipliers)]
        columns = [year.moments, year.frozen or (None,) * len(year.moments), *year.multipliers.values()]
        if year.state_moves:
            heads += list(year.state)
            columns += list(year.state.values())
        parts.grid(heads, [tuple(write(value) for value in row) for row in zip(*columns, strict=True)])
