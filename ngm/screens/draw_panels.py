"""The sections of the page on sensitivity that rest on draws: where they come from, R0's distribution, what drives it."""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Sequence

import streamlit as st

from ngm.charts import sensitivity as charts
from ngm.charts.style import short
from ngm.errors import Problem, ScenarioError
from ngm.results_sensitivity import DrawFigures, Uncertainty
from ngm.screens import asking, cache, parts, state, taking
from ngm.screens.answers import save
from ngm.screens.parts import Shown, plain

__all__ = ["draws"]

Write = Callable[[float | None], str]

#: Draws at the most on the page; the command line and Python take more.
MOST_DRAWS = 200_000
OWN, BROUGHT = "from the ranges and distributions of the scenario", "from a file of joint draws"
DESIGNS = {"Latin hypercube": "latin_hypercube", "Scrambled Sobol points": "sobol"}
QUANTILES = ("0.025", "0.25", "0.5", "0.75", "0.975")


@st.fragment
def draws(shown: Shown, write: Write) -> None:
    """Show what the spread of the parameters does to R0."""
    st.subheader("How far R0 is known")
    source = st.radio(
        "Draws",
        [OWN, BROUGHT],
        index=int(state.recall("sensitivity.source") == BROUGHT),
        horizontal=True,
        key="sensitivity.source",
    )
    state.remember("sensitivity.source", source)
    found = _own(shown) if source == OWN else _brought(shown)
    if found is None:
        return
    if not isinstance(found, Uncertainty):
        parts.problem_box(found, "with these draws")
        return
    _distribution(found, write)
    _drivers(found, write)
    _interventions(found, write)
    parts.warnings_box(found.warnings)


def _own(shown: Shown) -> Uncertainty | tuple[Problem, ...] | None:
    entries = asking.Entries()
    first, second, third = st.columns(3)
    number = entries.number("Number of draws", "sensitivity.draws", "2000", first)
    seed = entries.number("Seed", "sensitivity.seed", "1", second, "The same seed gives the same numbers.")
    with third:
        design = asking.choice("Design", list(DESIGNS), "sensitivity.design")
    for value, label, low, high in (
        (number, "Number of draws", 1, MOST_DRAWS),
        (seed, "Seed", 0, 2**32 - 1),
    ):
        if value is not None and not (value == int(value) and low <= value <= high):
            advice = f"expected a whole number from {low} to {high:,}, not {value:g}."
            entries.problems += ScenarioError(Problem(label, advice)).problems
    parts.problem_box(entries.problems)
    if entries.problems or number is None or seed is None:
        return None
    question = (shown.text, shown.folder, int(number), int(seed), design)
    if not asking.asked("sensitivity.own", "Draw", question):
        return None
    return cache.drawn(shown.text, shown.folder, int(number), int(seed), DESIGNS[design])


def _brought(shown: Shown) -> Uncertainty | tuple[Problem, ...] | None:
    file = st.file_uploader(
        "A file of joint draws: CSV or Parquet", type=["csv", "txt", "tsv", "parquet", "pq"], key="sensitivity.file"
    )
    if file is not None:
        # Kept for the way back from other pages: a field for files is empty then. Every byte is one sign of the text.
        content = file.getvalue()
        token = f"{file.name}\n{hashlib.sha256(content).hexdigest()}"
        if state.recall("sensitivity.token") != token:
            state.remember("sensitivity.token", token)
            state.remember("sensitivity.content", content.decode("latin-1"))
    held = state.recall("sensitivity.content")
    if not held:
        st.caption(
            "A column a parameter, a row a draw, the numbers in each parameter's own unit. Columns are matched by name; "
            "sigma[65+] is one group. Parameters without a column keep their value."
        )
        return None
    name = state.recall("sensitivity.token").split("\n")[0]
    first, second = st.columns([3, 1], vertical_alignment="center")
    first.caption(f"Draws of the file {plain(name)}.")
    if second.button("Leave this file", key="sensitivity.leave", disabled=file is not None):
        state.remember("sensitivity.content", "")
        state.remember("sensitivity.token", "")
        st.rerun()
    return cache.from_file(shown.text, shown.folder, held.encode("latin-1"), name)


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
        f"{write(figures.quantiles['0.025'])} to {write(figures.quantiles['0.975'])}",
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
    with st.expander("The distribution as a table"):
        parts.table(["figure", "R0"], _figures(figures, write))
        rows = [(write(low), write(high), f"{count:g}") for low, high, count in found.histogram]
        parts.grid(["from", "to", "draws"], rows)
        _save_histogram(found)
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


def _figures(figures: DrawFigures, write: Write) -> list[tuple[str, str]]:
    quantiles = figures.quantiles or {}
    return [
        ("mean", write(figures.mean)),
        ("standard deviation", write(figures.sd)),
        *((f"quantile {name}", write(quantiles.get(name))) for name in QUANTILES),
        ("P(R0 > 1)", write(figures.above_one)),
    ]


def _save_histogram(found: Uncertainty) -> None:
    import pandas

    rows: list[tuple[str, str, str, float | None]] = [
        ("figure", name, "", value) for name, value in _plain_figures(found.R0)
    ]
    rows += [("draws from, to", repr(low), repr(high), count) for low, high, count in found.histogram]
    frame = pandas.DataFrame(rows, columns=["what", "name or from", "to", "value"])
    save("Save the distribution as CSV", frame, "R0-distribution.csv", "distribution")


def _plain_figures(figures: DrawFigures) -> Sequence[tuple[str, float | None]]:
    quantiles = figures.quantiles or {}
    return [
        ("draws", figures.draws),
        ("without an R0", figures.rejected),
        ("mean", figures.mean),
        ("standard deviation", figures.sd),
        *((f"quantile {name}", quantiles.get(name)) for name in QUANTILES),
        ("P(R0 > 1)", figures.above_one),
    ]


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
