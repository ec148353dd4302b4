"""The section of the page on sensitivity that writes derivatives and elasticities as formulas."""

from __future__ import annotations

import streamlit as st

from ngm.results_sensitivity import Sensitivity
from ngm.screens import asking, cache, desk, parts
from ngm.screens.parts import Shown, plain

__all__ = ["formulas"]


@st.fragment
def formulas(shown: Shown) -> None:
    """Show dR0/dp and (p/R0) dR0/dp as formulas where R0 has a closed form, on demand."""
    with st.expander("Derivatives and elasticities as formulas"):
        if not asking.asked("sensitivity.formulas", "Write them as formulas", (shown.text, shown.folder)):
            st.caption("Where R0 has a closed form worth printing, it can be differentiated.")
            return
        closed = desk.formulas(shown).closed_form
        if closed is None:
            st.caption("R0 has no closed form that would help here, so there are no formulas; the numbers stand above.")
            return
        found = cache.slopes(shown.text, shown.folder, closed)
        if not isinstance(found, Sensitivity):
            parts.problem_box(found, "with the formulas")
            return
        rows = {index.parameter: index for index in found.local if index.formula and index.elasticity_formula}
        if not rows:
            st.caption("None of them is short enough to be read.")
            return
        one = rows[asking.choice("Parameter", list(rows), "sensitivity.formula_of")]
        parts.display(
            rf"\frac{{\partial R_0}}{{\partial {parts.latex(one.parameter)}}} = {parts.latex(one.formula or '')}"
        )
        parts.display(rf"\text{{elasticity}} = {parts.latex(one.elasticity_formula or '')}")
        told = "Each formula was held against the number above, which was worked out without it."
        if one.factor != 1:
            told += f" Values as converted: the derivative by the parameter's own unit is {one.factor:.6g} times this."
        st.caption(plain(told))
        parts.table(
            ["parameter", "dR0/dp", "elasticity of R0"],
            [(name, index.formula or "", index.elasticity_formula or "") for name, index in rows.items()],
        )
