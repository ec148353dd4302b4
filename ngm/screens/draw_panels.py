"""The sections of the page on sensitivity that rest on draws: where they come from, R0's distribution, what drives it."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import streamlit as st

import ngm
from ngm.charts import draws as draw_charts
from ngm.charts import sensitivity as charts
from ngm.charts.style import short
from ngm.results_draws import Spread, Uncertainty
from ngm.screens import asking, assured_panel, parts, taking
from ngm.screens.answers import save
from ngm.screens.draw_questions import Question, asked_question
from ngm.screens.parts import Shown, plain
from ngm.screens.waiting import worked

__all__ = ["draws"]

Write = Callable[[float | None], str]

QUANTILES = ("0.025", "0.25", "0.5", "0.75", "0.975")


@st.fragment
def draws(shown: Shown, write: Write) -> None:
    """Show what the spread of the parameters does to R0."""
    st.subheader("How far R0 is known")
    question = asked_question(shown)
    if question is None:
        return
    found = worked(
        "sensitivity.work",
        "Drawing and computing",
        ("uncertainty", *question.key),
        lambda: _figures_of(question),
        "with these draws",
    )
    if not isinstance(found, Uncertainty):
        return
    _distribution(found, write)
    for spread in found.others:
        _other(spread, write)
    _every_draw(question)
    _drivers(found, write)
    _interventions(found, write)
    assured_panel.panel(shown, question, write)
    parts.warnings_box(found.warnings)
    asking.command("sensitivity", *question.options, *asking.several("--of", question.of))


def _figures_of(question: Question) -> Uncertainty:
    scenario = question.scenario
    return ngm.uncertainty(scenario, question.source(scenario), of=question.of, **question.settings)


def _distribution(found: Uncertainty, write: Write) -> None:
    figures = found.R0
    if figures.quantiles is None or figures.mean is None:
        st.error(f"**No distribution.** {figures.rejected:,} of {figures.draws:,} draws have no R0.")
        return
    first, second, third = st.columns(3)
    first.metric("P(R0 > 1)", write(figures.above_one), border=True)
    second.metric("R0, median of the draws", write(figures.quantiles["0.5"]), border=True)
    third.metric(
        "R0, middle 95 % of the draws",
        f"{short(figures.quantiles['0.025'])} to {short(figures.quantiles['0.975'])}",
        border=True,
    )
    interval = figures.above_one_interval
    told = f"{figures.draws:,} draws, {plain(found.how)}"
    if found.seed is not None:
        told += f", seed {found.seed}"
    if figures.rejected:
        told += f"; {figures.rejected:,} without an R0 are left out"
    if interval is not None:
        told += f". Of P: {plain(short(interval[0]))} to {plain(short(interval[1]))} (95 %, if draws are independent)"
    st.caption(f"{told}. P is the share of draws with R0 above 1, under the assumptions of the scenario.")
    chart = charts.histogram(found, dark=parts.dark())
    if chart is not None:
        taking.picture(chart, "R0-distribution", "the distribution")
        st.caption("The bar at the top spans the middle 95 % of the draws, its diamond is the median; dashed: R0 = 1.")
    _table_of(found.distributions[0], write)
    with st.expander("Have the figures settled?"):
        settled = charts.convergence(found, dark=parts.dark())
        if settled is not None:
            taking.picture(settled, "R0-settled", "the picture of the figures settling")
        st.caption("Figures of the first draws alone: they should move no further than their 95 % intervals.")
        parts.table(
            ["first draws", "mean", "median", "P(R0 > 1)"],
            [
                (f"{p.draws:,}", write(p.mean), write((p.quantiles or {}).get("0.5")), write(p.above_one))
                for p in found.running
            ],
        )


def _other(spread: Spread, write: Write) -> None:
    """Show the distribution of a number other than R0."""
    name = spread.number.replace("_", " ")
    st.markdown(f"**{plain(name)}**" + (f", per {plain(spread.unit.removeprefix('1/'))}" if spread.unit else ""))
    figures = spread.figures
    if figures.quantiles is None:
        st.caption("No draw has this number.")
        return
    first, second, third = st.columns(3)
    first.metric(f"P({name} > {spread.threshold:g})", write(figures.above_one), border=True)
    second.metric("Median of the draws", write(figures.quantiles["0.5"]), border=True)
    third.metric(
        "Middle 95 % of the draws",
        f"{short(figures.quantiles['0.025'], 3)} to {short(figures.quantiles['0.975'], 3)}",
        border=True,
    )
    for why, count in spread.missing.items():
        st.caption(f"{count:,} of {figures.draws:,} draws are left out: {plain(why)}.")
    chart = draw_charts.spread(spread, dark=parts.dark())
    if chart is not None:
        taking.picture(chart, f"{name.replace(' ', '-')}-distribution", f"the distribution of {name}")
    _table_of(spread, write)


def _table_of(spread: Spread, write: Write) -> None:
    """Show figures and steps of a distribution as tables, with a way to save them."""
    name = spread.number
    with st.expander(f"The distribution of {plain(name.replace('_', ' '))} as a table"):
        rows = [(what, write(value)) for what, value in _rows(spread)]
        parts.table(["figure", name], rows)
        steps = [(write(low), write(high), f"{count:g}") for low, high, count in spread.histogram]
        parts.grid(["from", "to", "draws"], steps)
        _save_steps(spread)


def _rows(spread: Spread) -> Sequence[tuple[str, float | None]]:
    figures = spread.figures
    quantiles = figures.quantiles or {}
    return [
        ("draws", float(figures.draws)),
        ("without this number", float(figures.rejected)),
        ("mean", figures.mean),
        ("standard deviation", figures.sd),
        *((f"quantile {name}", quantiles.get(name)) for name in QUANTILES),
        (f"P({spread.number} > {spread.threshold:g})", figures.above_one),
    ]


def _save_steps(spread: Spread) -> None:
    import pandas

    rows: list[tuple[str, str, str, float | None]] = [("figure", name, "", value) for name, value in _rows(spread)]
    rows += [("draws from, to", repr(low), repr(high), count) for low, high, count in spread.histogram]
    frame = pandas.DataFrame(rows, columns=["what", "name or from", "to", "value"])
    save(
        "Save this distribution as CSV",
        frame,
        f"{spread.number.replace(' ', '')}-distribution.csv",
        f"distribution.{spread.number}",
    )


def _every_draw(question: Question) -> None:
    """Place the button that saves every draw with its numbers; it computes them when it is pressed."""

    def content() -> bytes:
        scenario = question.scenario
        table = ngm.draw_table(scenario, question.source(scenario), of=question.of, **question.settings)
        return table.to_csv().encode()

    st.download_button(
        "Save every draw with its numbers as CSV",
        content,
        "draws.csv",
        "text/csv",
        on_click="ignore",
        key="sensitivity.every_draw",
    )


def _drivers(found: Uncertainty, write: Write) -> None:
    st.markdown("**What drives the spread**")
    chart = charts.ranking(found, dark=parts.dark())
    if chart is not None:
        taking.picture(chart, "ranking", "the picture of the ranking")
        st.caption(
            "Partial rank correlation: how closely R0 goes with one parameter, the others' part taken out; its sign is the "
            "direction. It misleads where R0 both rises and falls."
        )
    second = charts.indices(found, dark=parts.dark())
    if second is not None:
        taking.picture(second, "sobol-indices", "the picture of the indices")
        st.caption(
            "Sobol indices: the share of R0's variance that a parameter explains by itself (bar) and with all its interplay "
            "(diamond), with 95 % intervals."
        )
    if not found.drivers:
        st.caption("No parameter is drawn.")
        return
    with st.expander("The ranking as a table"):
        rows = [
            (
                d.parameter,
                write(d.prcc),
                "–" if d.monotone is None else "yes" if d.monotone else "no",
                write(d.first),
                write(d.total),
                d.why or "",
            )
            for d in sorted(found.drivers, key=lambda d: -abs(d.total if d.total is not None else d.prcc or 0.0))
        ]
        parts.table(["parameter", "rank correlation", "one direction", "Sobol first", "Sobol total", "note"], rows)
        save("Save the ranking as CSV", found.to_frame(), "ranking.csv", "ranking")


def _interventions(found: Uncertainty, write: Write) -> None:
    if found.uniform_effort is not None:
        st.caption(
            f"Preventing {plain(short(100 * found.uniform_effort, 3))} % of all infections, in all types alike, is enough in "
            f"{short(100 * found.assurance, 3)} % of the draws."
        )
    if not found.interventions:
        return
    st.markdown("**The chance that each intervention is enough**")
    rows = [
        (
            one.intervention,
            write(one.figures.mean),
            write((one.figures.quantiles or {}).get("0.5")),
            write(one.below_one),
        )
        for one in found.interventions
    ]
    parts.table(["intervention", "mean control number", "median", "share of draws below 1"], rows)
