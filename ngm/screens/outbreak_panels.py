"""The parts of the page on outbreaks, and what they compute, kept by content as in `cache`."""

from __future__ import annotations

from collections.abc import Callable

import streamlit as st

import ngm
from ngm.charts import outbreak as charts
from ngm.errors import NgmError, Problem
from ngm.results_outbreak import Chance, FinalSizeResult, Outbreak, PaceResult, Twin
from ngm.screens import asking, forms, packages, parts, taking
from ngm.screens.asking import Entries
from ngm.screens.parts import Shown, plain

__all__ = ["outbreak_panel", "twin_panel"]

Problems = tuple[Problem, ...]
Write = Callable[[float | None], str]
Pairs = tuple[tuple[str, float], ...]

#: Rows of the density that stand in the table.
EVERY = 8
KINDS = ["leaky: everybody in part", "all-or-nothing: some wholly"]


@st.cache_resource(max_entries=64, show_spinner="Computing the course of an outbreak …")
def outbreak(
    text: str,
    folder: str | None,
    interventions: tuple[str, ...],
    introduce: Pairs,
    coverage: Pairs | float,
    efficacy: float,
    against_spread: float,
    kind: str,
) -> Outbreak | Problems:
    """Return final size, chance and pace of a text, or what is wrong with the question."""
    try:
        return ngm.outbreak(
            ngm.loads(text, folder=folder),
            interventions=interventions,
            introduce=dict(introduce),
            coverage=dict(coverage) if isinstance(coverage, tuple) else coverage,
            efficacy=efficacy,
            against_spread=against_spread,
            kind=kind,
        )
    except NgmError as error:
        return error.problems


@st.cache_resource(max_entries=64, show_spinner=False)
def twin(text: str, folder: str | None) -> Twin | Problems:
    """Return a text's model beside its twin in the other time."""
    try:
        return ngm.twin(ngm.loads(text, folder=folder))
    except NgmError as error:
        return error.problems


def outbreak_panel(shown: Shown, write: Write) -> None:
    """Ask what is in force and what is introduced; show the three parts, each where it applies."""
    solution = shown.solution
    names = packages.names(forms.document(shown.text) or {})
    entries = Entries()
    besides = asking.picked("Interventions in force", names, "outbreak.with", "none") if names else ()
    introduced = _introduced(entries, solution.types)
    with st.expander("Vaccinated before the outbreak"):
        vaccine = _vaccine(entries, solution.types_at_infection)
    parts.problem_box(entries.problems)
    if vaccine is None or introduced is None:
        return
    found = outbreak(shown.text, shown.folder, besides, introduced, *vaccine)
    if not isinstance(found, Outbreak):
        parts.problem_box(found, "with the question")
        return
    if found.label != "R0":
        st.metric(f"C{found.label[1:]}", write(found.R), border=True, width="content")
    _final_size(found.final_size, write)
    _chance(found.chance, write)
    _pace(found.pace, write, found.time_unit, found.discrete)
    parts.warnings_box(found.warnings)


def _introduced(entries: Entries, types: tuple[str, ...]) -> Pairs | None:
    chosen = asking.picked("Cases that it may start from", types, "outbreak.introduce", "one of each type, separately")
    out = []
    for name, place in zip(chosen, st.columns(max(len(chosen), 1)), strict=False):
        count = entries.number(f"Cases of {plain(name)}", f"outbreak.introduce.{name}", "1", place)
        if count is None:
            return None
        out.append((name, count))
    return tuple(out)


def _vaccine(entries: Entries, types: tuple[str, ...]) -> tuple[Pairs | float, float, float, str] | None:
    """Ask for a vaccine: coverage, efficacy against infection and spread, kind; None where a number cannot be read."""
    first, second, third = st.columns(3)
    coverage = entries.number("Coverage", "outbreak.coverage", "0", first, "Share vaccinated: 0.3 or 30 %.")
    efficacy = entries.number("Efficacy against infection", "outbreak.efficacy", "1", second, "0.7 or 70 %.")
    spread = entries.number("Efficacy against onward spread", "outbreak.spread", "0", third, "Of vaccinated cases.")
    kind = asking.choice("How it protects", KINDS, "outbreak.kind").split(":")[0]
    who = asking.picked("Vaccinated types", types, "outbreak.vaccinated", "all") if len(types) > 1 else ()
    if coverage is None or efficacy is None or spread is None:
        return None
    chosen: Pairs | float = tuple((name, coverage) for name in who) if who and coverage else coverage
    return chosen, efficacy, spread, kind


def _final_size(size: FinalSizeResult, write: Write) -> None:
    st.header("How many in the end")
    if size.why is not None:
        st.markdown(f"The equation for the final size does not apply: {plain(size.why)}")
        return
    first, second = st.columns(2)
    first.metric("Share of the susceptible infected", _percent(size.attack_rate), border=True)
    second.metric("Infected in all", _count(size.infected), border=True)
    st.caption(
        "If the outbreak takes off and nothing changes in its course: nobody behaves otherwise, no "
        "measure is added. The largest "
        "solution of the final-size equation, enclosed by bounds."
    )
    chart = charts.attack_rates(size, dark=parts.dark())
    if chart is not None:
        taking.picture(chart, "attack-rates", "the picture of the shares infected")
    vaccinated = any(row.vaccinated is not None for row in size.rows)
    heads = ["Type", "Susceptible", "Infected, share", "Infected", *(["Not vaccinated", "Vaccinated"] * vaccinated)]
    rows = []
    for row in size.rows:
        more = [_percent(row.unvaccinated), _percent(row.vaccinated)] if vaccinated else []
        rows.append([row.type, _count(row.susceptible), write(row.attack_rate), _count(row.infected), *more])
    parts.table(heads, rows)


def _chance(chance: Chance, write: Write) -> None:
    st.header("By chance")
    if chance.why is not None:
        st.markdown(f"Chances are not given: {plain(chance.why)}")
        return
    if chance.introduced is not None:
        named = ", ".join(f"{count:g} {name}" for name, count in chance.introduced.items())
        st.metric(f"Probability of a large outbreak from {named}", write(chance.large_outbreak), border=True)
    chart = charts.chances(chance, dark=parts.dark())
    if chart is not None:
        taking.picture(chart, "large-outbreaks", "the picture of the chances")
    rows = [[row.type, write(row.large_outbreak), write(row.dies_out)] for row in chance.rows]
    parts.table(["One case of", "starts a large outbreak", "dies out"], rows)
    st.caption(
        f"How: {plain(chance.how)}. Below 1 every outbreak dies out; above 1 many do all the same, by "
        "chance, while cases are few."
    )


def _pace(pace: PaceResult, write: Write, unit: str, discrete: bool) -> None:
    st.header("Pace")
    if pace.why is not None:
        st.markdown(f"Generation intervals are not given: {plain(pace.why)}")
        return
    first, second, third = st.columns(3)
    first.metric(f"Mean generation interval, {unit}s", write(pace.mean), border=True)
    second.metric(f"Growth rate, per {unit}", write(pace.growth_rate), border=True)
    third.metric(f"Doubling time, {unit}s", write(pace.doubling_time), border=True)
    chart = charts.intervals(pace, unit, discrete=discrete, dark=parts.dark())
    if chart is not None:
        taking.picture(chart, "generation-intervals", "the picture of the intervals")
    st.caption(
        "The age of an infection when it infects others, over new cases of "
        f"{plain(', '.join(pace.types[:12]))} as they settle; "
        f"standard deviation {plain(write(pace.sd))} {unit}s"
        + (", in whole steps." if discrete else ".")
        + (f" R from growth and intervals: {plain(write(pace.R0_by_growth))}." if pace.R0_by_growth is not None else "")
    )
    with st.expander("As a table"):
        if len(pace.mean_by_type) > 1:
            rows = [[name, write(mean)] for name, mean in pace.mean_by_type]
            parts.table(["One case of", f"infects at a mean age of, {unit}s"], rows)
        every = 1 if discrete else EVERY
        rows = [
            [write(age), write(density), write(made)]
            for age, density, made in zip(
                pace.ages[::every], pace.density[::every], pace.cumulative[::every], strict=True
            )
        ]
        parts.table([f"Age, {unit}s", f"Infections, share per {unit}", "made by then"], rows)


def twin_panel(shown: Shown, write: Write) -> None:
    """Show the model beside the same flows in the other time, why they differ and which to report."""
    if shown.solution.form != "flows":
        return
    found = twin(shown.text, shown.folder)
    if not isinstance(found, Twin) or not found.stays:
        return
    st.header("In steps or in continuous time")
    unit = found.time_unit
    st.markdown(
        f"This model runs in steps of one {plain(unit)}. The same flows, read as rates:"
        if found.discrete
        else f"This model runs in continuous time. The same flows, counted in steps of one {plain(unit)}:"
    )
    rows = [
        [v.name, write(v.R0), write(v.growth_rate), write(v.growth_factor), write(v.doubling_time)]
        for v in found.versions
    ]
    parts.table(["Version", "R0", f"Growth rate, per {unit}", "Factor per step", f"Doubling time, {unit}s"], rows)
    st.markdown("**Why they differ**")
    st.markdown("\n".join(f"- {plain(line)}" for line in found.differ))
    st.info(f"**Which to report:** {plain(found.report)}")
    with st.expander("Stays, in steps and as times"):
        stays = [
            [s.type, _percent(s.share_leaving), write(s.hazard), write(s.steps), write(s.time)] for s in found.stays
        ]
        heads = ["State", "Leave in a step", f"Rate, per {unit}", "Mean stay, steps", f"Mean stay as a time, {unit}s"]
        parts.table(heads, stays)
    parts.warnings_box([w for w in found.warnings if w.startswith("All members")])


def _percent(value: float | None) -> str:
    return "–" if value is None else f"{100 * value:.3g} %"


def _count(value: float | None) -> str:
    return "–" if value is None else f"{value:,.0f}" if value >= 100 else f"{value:.3g}"
