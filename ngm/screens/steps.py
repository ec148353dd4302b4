"""The sections of the derivation page, each one step."""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence

import streamlit as st

from ngm.meanings import help_text
from ngm.results import Matrix, Solution, Symbolic, TextMatrix
from ngm.screens import parts, taking
from ngm.screens.parts import latex, plain

__all__ = [
    "conditions",
    "first_used",
    "infection_free",
    "next_generation",
    "on_the_template",
    "residence",
    "root",
    "transmission_and_transition",
    "types",
]

Write = Callable[[float | None], str]

#: More lines than this are shown as a table, not typeset.
MOST_LINES = 40
MOST_TERMS = 80


def types(solution: Solution) -> None:
    """Say which the types are, and which of them are types at infection."""
    what = "Stages" if solution.form == "projection" else "Types"
    st.subheader(f"1. {what}")
    listed = solution.types[:MOST_LINES]
    names = [
        f"{plain(t)} ({plain(solution.type_labels[t])})" if solution.type_labels.get(t, t) != t else plain(t)
        for t in listed
    ]
    more = f" and {len(solution.types) - len(listed)} more" if len(solution.types) > len(listed) else ""
    born = [plain(t) for t in solution.types_at_infection[:MOST_LINES]]
    if solution.form == "K as given":
        st.markdown(f"The types of the matrix, in its order: {', '.join(names)}{more}. Each is a type at infection.")
    elif solution.form == "projection":
        st.markdown(f"The stages, in the order of the matrices: {', '.join(names)}{more}.")
        st.markdown(f"Stages that new members are born into: {', '.join(born) or 'none'}.")
    else:
        st.markdown(f"The infected types, in the order of the matrices: {', '.join(names)}{more}.")
        st.markdown(f"Types at infection, those that new infections enter: {', '.join(born) or 'none'}.")


def infection_free(solution: Solution, write: Write) -> None:
    """Show the infection-free state and how near to rest it is."""
    st.subheader("2. Infection-free state", help=help_text("infection_free"))
    st.markdown("All infected compartments are empty, and every other one is at rest.")
    written = solution.symbolic.infection_free or {}
    if not solution.infection_free:
        st.markdown("The model has no uninfected compartment.")
    elif len(solution.infection_free) > MOST_LINES:
        parts.table(["compartment", "value"], [(k, write(v)) for k, v in solution.infection_free.items()])
    else:
        _abbreviations(solution.symbolic, "state")
        lines = []
        for name, value in solution.infection_free.items():
            middle = f" = {latex(written[name])}" if name in written and written[name] != write(value) else ""
            lines.append(rf"{latex(name)}^{{*}} &{middle} = {_number(write(value))}")
        _aligned(lines)
    st.caption(
        "Checked: the largest net flow, as a share of the gross flow of its compartment, is "
        f"{plain(write(solution.residual))}."
    )


def transmission_and_transition(solution: Solution, write: Write, number: int = 3) -> None:
    """Show F and V, and the flows behind each entry; of a projected population its births F and V = I - T."""
    if solution.form == "projection":
        st.subheader(f"{number}. Births F and transitions T")
        st.markdown(
            f"Per step of one {plain(solution.time_unit)}. F, row by row: new members of a stage by one member of the column's "
            "stage. T: the share of the column's stage that is found in the row's stage a step later; V = I - T."
        )
    else:
        st.subheader(f"{number}. Transmission F and transition V", help=help_text("F"))
        st.markdown(
            f"Rates per {plain(solution.time_unit)} at the infection-free state. Row: the type that is gained or lost; "
            "column: the type that causes it. F counts new infections; V counts everything else, with its sign turned."
        )
    _abbreviations(solution.symbolic, "rates")
    _matrix("F", solution.symbolic.F, solution.F, solution.types, write)
    _matrix("V", solution.symbolic.V, solution.V, solution.types, write)
    if not solution.terms:
        return
    with st.expander("Entry by entry: the flows behind F and V"):
        if len(solution.terms) > MOST_TERMS:
            rows = [
                (f"{t.matrix}[{t.row}, {t.column}]", "+" if t.sign > 0 else "-", t.share, _flow(t.flow, t.label))
                for t in solution.terms
            ]
            parts.table(["entry", "sign", "share", "flow"], rows)
        else:
            _terms(solution)


def conditions(solution: Solution, number: int = 4) -> None:
    """Show how the conditions turned out."""
    st.subheader(f"{number}. Conditions")
    st.markdown("R0 is a threshold where these hold (van den Driessche and Watmough 2002).")
    parts.conditions_table(solution)


def residence(solution: Solution, number: int = 5) -> None:
    """Show the elimination that leads to the inverse of V."""
    steps = [step for step in solution.symbolic.steps if step.kind == "residence"]
    st.subheader(f"{number}. Mean stays: the inverse of V", help=help_text("stays"))
    if not steps:
        st.markdown("Nothing is written out here: the inverse of V is known in numbers only, or there is none.")
        return
    st.markdown(
        "Entry (i, j) of the inverse of V, written τ here, is the mean time spent in state i by one who enters at j. "
        "States are taken out one after the other; what would be too long to repeat gets a name."
    )
    _abbreviations(solution.symbolic, "residence")
    _aligned(
        [
            rf"\tau_{{{latex(step.name)},\,{latex(step.about)}}} &= {latex(step.formula)}"
            for step in steps[:MOST_LINES]
            if step.formula is not None
        ]
    )
    if len(steps) > MOST_LINES:
        with st.expander(f"{len(steps) - MOST_LINES} further lines"):
            rows = [(s.name, s.formula or "", s.about) for s in steps[MOST_LINES:]]
            parts.table(["name", "formula", "about"], rows)


def next_generation(solution: Solution, write: Write, number: int = 6) -> None:
    """Show K."""
    st.subheader(f"{number}. Next-generation matrix K", help=help_text("K"))
    if solution.K is None and solution.no_R0:
        st.markdown("There is none at these values.")
        return
    st.markdown(
        {
            "flows": "K = F V⁻¹, kept to the types at infection. Entry (i, j): the infections of type i that one case of "
            "type j causes over its whole course.",
            "K as given": "As the scenario gives it. Entry (i, j): the infections of type i that one case of type j causes "
            "over its whole course. There are no flows behind it to be checked.",
            "projection": "K = F V⁻¹, kept to the stages that members are born into. Entry (i, j): the births into stage i in "
            "the whole life of one member that begins in stage j.",
        }[solution.form]
    )
    _abbreviations(solution.symbolic, "K")
    _matrix("K", solution.symbolic.K, solution.K, solution.types_at_infection, write)


def on_the_template(solution: Solution) -> None:
    """Show the block form of a grouped model: one block for each pair of compartments, whatever the number of groups."""
    blocks = solution.symbolic.blocks
    if blocks is None:
        return
    st.markdown("**All groups at once**")
    st.markdown(
        "Each block stands for all groups: *diag* is a number in each group, a name is a contact or movement matrix "
        "(with a prime: transposed), and *sum* adds up groups."
    )
    lines = []
    for name, entries in (("F", blocks.F), ("V", blocks.V), ("K", blocks.K)):
        if entries is None:
            lines.append("K = F V^-1 has no formula by group: members move between groups")
        else:
            lines += [f"{name}[{row}, {column}] = {entry}" for (row, column), entry in entries.items()]
    if blocks.root is not None:
        lines.append(f"R0 = {blocks.root}")
    st.code("\n".join(lines), language=None, wrap_lines=True)


def root(solution: Solution, number: int = 7) -> None:
    """Show the characteristic polynomial, the classes and the closed form, or say that there is none."""
    st.subheader(f"{number}. R0, the spectral radius of K", help=help_text("R0"))
    if solution.R0 is None:
        st.markdown("There is none at these values.")
        return
    symbolic = solution.symbolic
    _abbreviations(symbolic, "root")
    if symbolic.characteristic_polynomial is not None and len(symbolic.characteristic_polynomial) < MOST_TERMS * 40:
        st.markdown("Characteristic polynomial of K:")
        parts.display(f"{latex(symbolic.characteristic_polynomial)} = 0")
    for step in symbolic.steps:
        if step.kind == "class":
            st.markdown(f"Class of {plain(step.name)}: {plain(step.about)}.")
            if step.formula is not None:
                parts.display(latex(step.formula))
    if solution.closed_form is not None:
        st.markdown("Closed form, for all values of the parameters:")
        parts.display(rf"\mathcal{{R}}_0 = {latex(solution.closed_form)}")
        taking.formula("R0", solution.closed_form)
        with st.expander("The closed form as text"):
            st.code(solution.closed_form, language=None, wrap_lines=True)
    else:
        st.markdown("There is no closed form worth printing: R0 is the number above, within its proven bounds.")


def _matrix(name: str, text: TextMatrix | None, numbers: Matrix | None, labels: Sequence[str], write: Write) -> None:
    """Show a matrix typeset where it is written out and small enough, and its numbers."""
    typeset = parts.latex_matrix(text, labels) if text is not None else None
    if typeset is not None:
        parts.display(f"{name} = {typeset}")
    taking.matrix(name, numbers, labels, text)
    if numbers is None:
        if typeset is None:
            st.caption(f"{name} is too large to be shown.")
        return
    if typeset is None:
        st.caption(f"{name} is too large to typeset; here are its numbers.")
        parts.numbers_table(numbers, labels, write, name)
    else:
        with st.expander(f"{name} in numbers"):
            parts.numbers_table(numbers, labels, write, name)


def first_used(symbolic: Symbolic) -> dict[str, list[str]]:
    """Return, for each section, the abbreviations that it is the first to need, in the order in which they are made."""
    residence = [step.formula or "" for step in symbolic.steps if step.kind == "residence"]
    classes = [step.formula or "" for step in symbolic.steps if step.kind == "class"]
    written = {
        "state": list((symbolic.infection_free or {}).values()),
        "rates": [entry for rows in (symbolic.F or (), symbolic.V or ()) for row in rows for entry in row],
        "residence": residence,
        "K": [entry for row in symbolic.K or () for entry in row],
        "root": [*classes, symbolic.characteristic_polynomial or ""],
    }
    told: set[str] = set()
    out: dict[str, list[str]] = {}
    for section, formulas in written.items():
        needed: set[str] = set()
        # Later names are made of earlier ones: from the last to the first, each brings what it is made of.
        words = {word for formula in formulas for word in re.findall(r"\w+", formula)}
        for name, formula in reversed(list(symbolic.abbreviations.items())):
            if name in words:
                needed.add(name)
                words.update(re.findall(r"\w+", formula))
        out[section] = [name for name in symbolic.abbreviations if name in needed - told]
        told |= needed
    return out


def _abbreviations(symbolic: Symbolic, section: str) -> None:
    about = {step.name: step.about for step in symbolic.steps if step.kind == "elimination"}
    names = first_used(symbolic)[section]
    if not names:
        return
    st.markdown("With these abbreviations:")
    _aligned(
        [
            rf"{latex(name)} &= {latex(symbolic.abbreviations[name])} &&{parts.latex_words(about.get(name, ''))}"
            for name in names[:MOST_LINES]
        ]
    )
    if len(names) > MOST_LINES:
        with st.expander(f"{len(names) - MOST_LINES} more"):
            rows = [(name, symbolic.abbreviations[name], about.get(name, "")) for name in names[MOST_LINES:]]
            parts.table(["name", "formula", "about"], rows)


def _terms(solution: Solution) -> None:
    entries = dict.fromkeys((t.matrix, t.row, t.column) for t in solution.terms)
    for matrix, row, column in entries:
        here = [t for t in solution.terms if (t.matrix, t.row, t.column) == (matrix, row, column)]
        flows = "; ".join(_flow(t.flow, t.label) for t in here)
        st.markdown(f"**{matrix}**, row {plain(row)}, column {plain(column)}: {plain(flows)}")
        total = " ".join(f"{'-' if t.sign < 0 else '+'} {_grouped(latex(t.share), len(here) > 1)}" for t in here)
        parts.display(total.removeprefix("+ "))


def _grouped(share: str, several: bool) -> str:
    return rf"\left({share}\right)" if several and (" + " in share or " - " in share) else share


def _flow(number: int | None, label: str) -> str:
    return label if number is None else f"flow {number}, {label}" if label else f"flow {number}"


def _aligned(lines: Sequence[str]) -> None:
    """Show lines of LaTeX below each other, aligned at their ``&``; a few at a time, each part scrolls by itself."""
    for start in range(0, len(lines), 12):
        body = r" \\[0.9em] ".join(lines[start : start + 12])
        parts.display(rf"\begin{{aligned}}{body}\end{{aligned}}")


def _number(text: str) -> str:
    head, mark, tail = text.partition("e")
    return rf"{head} \times 10^{{{tail}}}" if mark else text.replace(",", r"\,")
