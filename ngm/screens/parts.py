"""What the pages have in common: problems, cautions, numbers, matrices, and the state of things in the side bar.

A scenario's text is anybody's text. It reaches Markdown only through `plain`, so that a title can draw no picture from
another server, and never as HTML.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from typing import Literal

import streamlit as st

from ngm.charts.style import short
from ngm.errors import NgmError, Problem, excerpt
from ngm.meanings import help_text
from ngm.meanings import table as meanings_table
from ngm.results import Matrix, Solution, TextMatrix
from ngm.screens import cache, finding, forms, state

__all__ = [
    "Shown",
    "applied",
    "cautions",
    "conditions_table",
    "conversions",
    "dark",
    "digits",
    "display",
    "earlier_result",
    "explanations",
    "grid",
    "headline",
    "latex",
    "latex_matrix",
    "latex_words",
    "numbers_table",
    "plain",
    "problem_box",
    "results",
    "switch",
    "table",
    "warnings_box",
]

#: Problems listed in one box; the others are counted.
MOST_PROBLEMS = 10

#: Conversions told above a result.
MOST_CONVERTED = 8

#: A typeset matrix may have this many types and characters of LaTeX; past it nobody can read it.
MOST_TYPES = 12
MOST_LATEX = 12_000

#: A plain table may have this many rows.
MOST_ROWS = 40

#: A table of numbers may have this many types: all of its cells go to the browser each time.
MOST_SHOWN = 100


@dataclass(frozen=True, slots=True)
class Shown:
    """What a page shows results of: a text that has some, and whether it is older than what is typed now."""

    text: str
    folder: str | None
    solution: Solution
    stale: bool


def applied(text: str, edits: Sequence[forms.Edit]) -> str:
    """Return the text after the edits; the text as it was, and why, where it has no place for them."""
    try:
        return forms.apply(text, edits)
    except NgmError as error:
        problem_box(error.problems, "that kept the change out of the text")
        return text


def plain(text: str) -> str:
    """Return text with every sign that Markdown could read escaped, on one line."""
    line = " ".join(text.split())
    return re.sub(r"([!-/:-@\[-`{-~])", r"\\\1", line)


def dark() -> bool:
    """Return True on a dark background."""
    return getattr(st.context.theme, "type", None) == "dark"


def digits(page: str) -> Callable[[float | None], str]:
    """Place a switch between short numbers and full precision; return the function that writes a number."""
    if switch("Full precision", f"{page}.precision"):
        return lambda value: "–" if value is None else repr(value)
    return short


def switch(label: str, field: str) -> bool:
    """Place a switch that stays as it is left, also on other pages; return whether it is on."""
    on = st.toggle(label, value=state.recall(field) == "on", key=field)
    state.remember(field, "on" if on else "off")
    return on


def problem_box(problems: Sequence[Problem], title: str = "") -> None:
    """List problems: where, what, what would be right, and a caret under the place where it helps.

    What does not apply to a model like this is no problem of it, and looks like none.
    """
    if not problems:
        return
    if not any(problem.applies for problem in problems):
        st.info("\n".join(f"- {plain(problem.message)}" for problem in problems))
        return
    count = f"{len(problems)} problem" + ("s" if len(problems) > 1 else "")
    lines = [f"**{count}{' ' + plain(title) if title else ''}**"]
    for problem in problems[:MOST_PROBLEMS]:
        lines.append(
            f"- **{plain(problem.where)}:** {plain(problem.message)}"
            if problem.where
            else f"- {plain(problem.message)}"
        )
        if problem.text is not None and problem.position is not None:
            line, caret = excerpt(problem.text, problem.position)
            fence = "`" * (3 + max((len(run) for run in re.findall("`+", line)), default=0))
            lines.append(f"\n  {fence}text\n  {line}\n  {caret}\n  {fence}\n")
    if len(problems) > MOST_PROBLEMS:
        lines.append(f"- … and {len(problems) - MOST_PROBLEMS} more.")
    st.error("\n".join(lines))


def warnings_box(warnings: Iterable[str]) -> None:
    """List what a result warns of."""
    lines = [f"- {plain(warning)}" for warning in warnings]
    if lines:
        st.warning("\n".join(["**Please note**", *lines]))


def cautions(form: str = "flows") -> None:
    """Say what these numbers are not. Stands wherever they are read."""
    if form == "projection":
        st.info(
            "**Read with care**\n"
            "- These are numbers of a model under its assumptions: no forecast of how many there will be. They hold while "
            "births and survival stay as they are.\n"
            "- R0 counts new members in a life, the growth factor what a step multiplies by. Both pass 1 together.\n"
            "- Decisions on measures belong to the authority responsible, under its own rules."
        )
        return
    st.info(
        "**Read with care**\n"
        "- These are numbers of a model under its assumptions: no forecast, and no better than its inputs.\n"
        "- R0 says whether an infection can spread at first, not how fast, and nothing about how severe it is. "
        "For speed see the growth rate.\n"
        "- Numbers from different models, or from different splits into transmission and transition, cannot be "
        "compared; only their position above or below 1 can.\n"
        "- Decisions on measures belong to the authority responsible, under its own rules, and to licensed practice. "
        "Nothing here is medical advice."
    )


def explanations(keys: Sequence[str]) -> None:
    """Say at the foot of a page what its quantities mean, each with its formula, unit and source."""
    if keys and state.current().now is not None:
        with st.expander("What these numbers mean: formulas, units, sources"):
            st.markdown(meanings_table(keys))


def nothing_open() -> None:
    """Say that no scenario is open, and where to open one."""
    st.info("No scenario is open yet. Open one, upload one or start a new one on the page **Scenario**.")
    st.page_link("views/scenario.py", label="Go to Scenario")


def results() -> Shown | None:
    """Return what to show results of, with a notice where it is not what is typed now; None where there is nothing."""
    now = state.current().now
    if now is None:
        nothing_open()
        return None
    outcome = cache.solve(now.text, now.folder)
    if outcome.solution is not None:
        conversions(now.text, now.folder, outcome.solution.time_unit)
        return Shown(now.text, now.folder, outcome.solution, False)
    problem_box(outcome.problems, "in what is typed now")
    finding.jumps(outcome.problems, "results")
    if now.valid is None:
        st.info("There are no results until these are put right, on the page **Model** or **Scenario**.")
        return None
    earlier = cache.solve(now.valid, now.folder).solution
    if earlier is None:
        return None
    st.warning("What follows are the results of the last version without problems, **not of what is typed now**.")
    return Shown(now.valid, now.folder, earlier, True)


def headline(
    solution: Solution, write: Callable[[float | None], str] = short, width: Literal["content", "stretch"] = "content"
) -> None:
    """Show R0 with its bounds, or why there is none."""
    if solution.R0 is None:
        st.error(f"**No R0 at these values.** {plain(solution.no_R0 or '')}")
        return
    label = "R0: net reproduction number" if solution.form == "projection" else "R0: basic reproduction number"
    st.metric(label, write(solution.R0), border=True, width=width, help=help_text("R0"))
    if solution.R0_bounds is not None:
        low, high = solution.R0_bounds
        how = "proven" if solution.season is None else "over the season; estimate of the error"
        st.caption(f"{how}: {low!r} ≤ R0 ≤ {high!r}")


def earlier_result() -> None:
    """Say what the last version without problems gave, where there was one."""
    now = state.current().now
    if now is None or now.valid is None or now.valid == now.text:
        return
    earlier = cache.solve(now.valid, now.folder).solution
    if earlier is not None:
        st.warning("The last version without problems gave the following, **not what is typed now**.")
        headline(earlier)


def conversions(text: str, folder: str | None, time_unit: str) -> None:
    """Say which values are converted, as typed and as used, and which are likely a slip between two units of time."""
    found, doubts = cache.conversions(text, folder)
    told = [f"{plain(name)}: {plain(value)}" for name, value in found]
    more = f"; {len(told) - MOST_CONVERTED} more on the page Second opinion" if len(told) > MOST_CONVERTED else ""
    if told:
        st.caption(
            f"Converted for the computation (time in units of one {plain(time_unit)}): "
            f"{'; '.join(told[:MOST_CONVERTED])}{more}."
        )
    if doubts:
        st.warning("\n".join(f"- **{plain(where)}**: {plain(message)}" for where, message in doubts[:MOST_CONVERTED]))


def latex(text: str) -> str:
    """Return an expression as LaTeX; as upright text where it cannot be read as one."""
    try:
        return cache.latex(text)
    except NgmError:
        return latex_words(text)


def latex_words(text: str) -> str:
    """Return words as LaTeX text, with signs that could be commands left out."""
    return r"\text{" + re.sub(r"[^\w\s.,:;+*/()=\[\]-]|_", " ", text) + "}" if text else ""


def latex_matrix(rows: TextMatrix, types: Sequence[str], columns: Sequence[str] | None = None) -> str | None:
    """Return a labelled matrix as LaTeX, or None where it is too large to be read."""
    if len(types) > MOST_TYPES or not types:
        return None
    heads = [latex(name) for name in (columns or types)]
    lines = [" & ".join(["", *heads]) + r" \\ \hline"]
    for name, row in zip(types, rows, strict=True):
        lines.append(" & ".join([latex(name), *(latex(entry) for entry in row)]) + r" \\")
    body = "\n".join(lines).replace(r"\frac", r"\dfrac")
    if len(body) > MOST_LATEX:
        return None
    # Rows of fractions overlap at the usual distance.
    stretch = r"\def\arraystretch{2.6}" if r"\dfrac" in body else r"\def\arraystretch{1.4}"
    return f"{stretch}\\begin{{array}}{{c|{'c' * len(heads)}}}\n{body}\n\\end{{array}}"


def display(body: str) -> None:
    """Show LaTeX on lines of its own.

    The empty line above keeps the page from cutting the tops off low letters in a numerator: the box of a formula ends
    where its letters begin, and what is too wide for the page scrolls inside that box.
    """
    st.latex(rf"\overset{{\vphantom{{x}}}}{{{body}}}")


def numbers_table(matrix: Matrix, types: Sequence[str], write: Callable[[float | None], str], name: str) -> None:
    """Show a matrix of numbers with its types on both sides, or say where to find it where it is large."""
    if len(types) > MOST_SHOWN:
        st.caption(f"{name} has {len(types)} types; the command line prints it: python -m ngm solve FILE --json")
        return
    import pandas

    frame = pandas.DataFrame(
        [[write(value) for value in row] for row in matrix],
        index=pandas.Index(types, name=name),
        columns=list(types),
    )
    st.dataframe(frame, alt=f"Matrix {name}: rows and columns {', '.join(types[:20])}")


def grid(heads: Sequence[str], rows: Sequence[Sequence[str]]) -> None:
    """Show rows of text as a grid that scrolls: for tables that are wide."""
    import pandas

    # A column's name stands for it: two of the same would be one.
    names = [head if head not in heads[:k] else f"{head} ({k + 1})" for k, head in enumerate(heads)]
    st.dataframe(pandas.DataFrame(rows, columns=names), hide_index=True, alt=", ".join(heads[:20]))


def table(heads: Sequence[str], rows: Sequence[Sequence[str]]) -> None:
    """Show rows of text: as a plain table, which wraps long text, or as a grid that scrolls where it is long."""
    import pandas

    told = ", ".join(heads)
    if len(rows) > MOST_ROWS:
        st.dataframe(pandas.DataFrame(rows, columns=list(heads)), hide_index=True, alt=told)
        return
    # The cells of a plain table are read as Markdown.
    cells = [[plain(cell) for cell in row] for row in rows]
    st.table(pandas.DataFrame(cells, columns=[plain(head) for head in heads]), hide_index=True, alt=told)


def conditions_table(solution: Solution) -> None:
    """Show the conditions A1 to A5 with how each turned out, in words."""
    for condition in solution.conditions:
        verdict = "✓ holds" if condition.holds else "✖ **does not hold**"
        st.markdown(f"- **{plain(condition.name)}** {verdict}. {plain(condition.detail)}")
