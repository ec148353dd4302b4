"""What the page of reproduction numbers shows of a projected population besides."""

from __future__ import annotations

from collections.abc import Callable

import streamlit as st

from ngm.charts import bars
from ngm.results import Projected, Solution
from ngm.screens import parts, taking
from ngm.screens.parts import plain

__all__ = ["population"]

Write = Callable[[float | None], str]


def population(solution: Solution, write: Write) -> None:
    """Show whether a population grows or dies out, its stable structure, and what each stage is worth."""
    about = solution.projected
    if about is None:
        return
    st.subheader("Growth of the population")
    unit = plain(solution.time_unit)
    first, second = st.columns([1, 2])
    with first:
        st.metric(f"Growth factor, per {unit}", write(solution.growth_factor), border=True)
    with second:
        st.markdown(
            f"The population **{about.fate(solution.growth_factor)}**. The growth factor is the dominant root of F + T: in the "
            f"long run each step of one {unit} multiplies the population by it."
        )
        for note in about.notes:
            st.warning(plain(note))
    if about.stable_structure is None or about.reproductive_values is None:
        return
    left, right = st.columns(2)
    with left:
        st.markdown("**Stable structure**: the shares of the stages in the long run")
        _picture(about, "stable-structure")
    with right:
        st.markdown("**Reproductive value**: what one member of a stage counts for the size in the long run")
        _picture(about, "stage-values")
    with st.expander("Both as a table"):
        rows = [
            (stage, write(share), write(value))
            for stage, share, value in zip(about.stages, about.stable_structure, about.reproductive_values, strict=True)
        ]
        parts.table(["stage", "share in the long run", "reproductive value"], rows)
    with st.expander("Elasticity of the growth factor, entry by entry"):
        st.caption(
            "One per cent more of an entry moves the growth factor by so many per cent; births and transitions together "
            "add up to 1. Row: the stage reached; column: the stage it comes from."
        )
        for name, entries in (("births", about.elasticity_births), ("transitions", about.elasticity_transitions)):
            if entries is not None:
                st.markdown(f"Entries of {name}")
                parts.numbers_table(entries, about.stages, write, f"elasticity, {name}")


def _picture(about: Projected, kind: str) -> None:
    drawn = bars.stage_shares if kind == "stable-structure" else bars.stage_values
    chart = drawn(about, dark=parts.dark())
    if chart is not None:
        what = (
            "the picture of the stable structure" if kind == "stable-structure" else "the picture of the stages' values"
        )
        taking.picture(chart, kind, what)
