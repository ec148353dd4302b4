"""The section of the page on sensitivity on how much is enough in most of the draws."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import streamlit as st

import ngm
from ngm.charts import draws as charts
from ngm.results_control import Coverage
from ngm.results_draws import Assured
from ngm.screens import asking, cache, forms, packages, parts, taking
from ngm.screens.answers import save
from ngm.screens.draw_questions import Question
from ngm.screens.parts import Shown, plain
from ngm.screens.waiting import worked
from ngm.wording import assured_words, share

__all__ = ["panel"]

Write = Callable[[float | None], str]

VACCINE = "a vaccine"


def panel(shown: Shown, question: Question, write: Write) -> None:
    """Ask for a measure and an assurance; show how much of it is enough in that share of the draws."""
    st.markdown("**How much is enough in most of the draws**")
    names = packages.names(forms.document(shown.text) or {})
    entries = asking.Entries()
    first, second, third = st.columns(3)
    with first:
        measure = asking.choice("Of", [*names, VACCINE], "sensitivity.measure")
    wanted = entries.number("In what share of the draws", "sensitivity.assurance", "95 %", second)
    target = entries.number("Number to fall below", "sensitivity.below", "1", third, "1: from there on it dies out.")
    groups: tuple[str, ...] = ()
    efficacy: float | None = 1.0
    if measure == VACCINE:
        known = cache.coverage(shown.text, shown.folder)
        if not isinstance(known, Coverage):
            parts.problem_box(known, "with the groups of hosts")
            return
        left, right = st.columns([2, 1])
        with left:
            groups = asking.picked("Groups to be vaccinated", known.groups, "sensitivity.vaccinated", "all groups")
        efficacy = entries.number("Efficacy against infection", "sensitivity.efficacy", "1", right, "0.7 or 70 %.")
    parts.problem_box(entries.problems)
    if wanted is None or target is None or efficacy is None:
        return
    asked = (*question.key, measure, wanted, target, groups, efficacy)
    if not asking.asked("sensitivity.assured", "Find what is enough", asked):
        return

    def find() -> Any:
        scenario = question.scenario
        source = question.source(scenario)
        settings = {**question.settings, "assurance": wanted, "target": target}
        if measure == VACCINE:
            return ngm.assured_coverage(scenario, source, groups or None, efficacy=efficacy, **settings)
        return ngm.assured_strength(scenario, measure, source, **settings)

    found = worked("sensitivity.enough", "Trying how much is enough", ("assured", *asked), find, "with this question")
    if not isinstance(found, Assured):
        return
    _show(found, write)
    more = [*question.options, *asking.option("--target", target), *asking.option("--assurance", wanted, 0.95)]
    if measure == VACCINE:
        asking.command("coverage", *asking.several("--groups", groups), *asking.option("--efficacy", efficacy), *more)
    else:
        asking.command("strength", "--intervention", measure, *more)


def _show(found: Assured, write: Write) -> None:
    (st.error if found.needed is None else st.success)(f"**{plain(assured_words(found))}**")
    taking.picture(charts.assured(found, dark=parts.dark()), "assurance", "the picture of the shares")
    st.caption(
        "What is enough at the scenario's own values can be too little for many draws. The dashed line is the share that is "
        "wanted; the draws are those above."
    )
    with st.expander("This curve as a table"):
        heads = [found.what, f"share of draws below {found.target:g}"]
        parts.table(heads, [(write(x), share(y)) for x, y in found.curve])
        save("Save this curve as CSV", found.to_frame(), "assurance.csv", "assurance.curve")
    parts.warnings_box(found.warnings)
