"""The parts of the page on second opinions, and what they compute, kept by content as in `cache`."""

from __future__ import annotations

from collections.abc import Callable

import streamlit as st

import ngm
from ngm.errors import NgmError, Problem
from ngm.results_opinion import Difference, FormulaOpinion, Splits, Units
from ngm.screens import parts, shelf, state
from ngm.screens.parts import Shown, plain

__all__ = ["formula_panel", "other_version", "splits_panel", "units_panel", "versions_panel"]

Problems = tuple[Problem, ...]
Write = Callable[[float | None], str]

#: Types up to which the matrices of each split are shown.
MOST_TYPES = 12
VERDICTS = {"equal": "✓ equal", "undecided": "? undecided"}


@st.cache_resource(max_entries=64, show_spinner=False)
def units(text: str, folder: str | None) -> Units | Problems:
    """Return what the units of a text say."""
    try:
        return ngm.units(ngm.loads(text, folder=folder))
    except NgmError as error:
        return error.problems


@st.cache_resource(max_entries=64, show_spinner="Dividing the flows otherwise …")
def splits(text: str, folder: str | None) -> Splits | Problems:
    """Return the other splits of a text."""
    try:
        return ngm.splits(ngm.loads(text, folder=folder))
    except NgmError as error:
        return error.problems


@st.cache_resource(max_entries=64, show_spinner="Comparing at random points …")
def formula(text: str, folder: str | None, typed: str) -> FormulaOpinion | Problems:
    """Return the opinion on a formula."""
    try:
        return ngm.formula(ngm.loads(text, folder=folder), typed)
    except NgmError as error:
        return error.problems


@st.cache_resource(max_entries=64, show_spinner="Comparing the two …")
def difference(text: str, folder: str | None, other: str, other_folder: str | None) -> Difference | Problems:
    """Return what differs from another text to this one."""
    try:
        return ngm.difference(ngm.loads(other, folder=other_folder), ngm.loads(text, folder=folder))
    except NgmError as error:
        return error.problems


def units_panel(shown: Shown) -> None:
    """Show findings, conversions and stays."""
    st.header("Units, times and shares")
    found = units(shown.text, shown.folder)
    if not isinstance(found, Units):
        parts.problem_box(found, "with the units")
        return
    for note in found.findings:
        if note.kind not in ("missing", "slip"):  # slips stand above every result
            st.warning(f"**{plain(note.where)}**: {plain(note.message)}")
    missing = [f"- **{plain(note.where)}**: {plain(note.message)}" for note in found.findings if note.kind == "missing"]
    if missing:
        st.warning("\n".join(missing))
    if all(note.kind == "slip" for note in found.findings):
        st.markdown(f"✓ {found.fits}")
    rows = [
        [
            row.parameter,
            ", ".join(row.typed[:4]),
            row.unit or (f"none; {row.implied} would fit" if row.implied is not None else "none"),
            ", ".join(row.in_force[:4]) if row.converted else "as typed",
            row.reading or "",
        ]
        for row in found.parameters
    ]
    parts.table(["Parameter", "As typed", "Unit", f"In force (time in {found.time_unit})", "Reads as"], rows)
    stays = [
        [
            stay.compartment,
            "nothing leaves" if stay.mean is None else f"{stay.mean:.6g} {found.time_unit}",
            ", ".join(f"{100 * way.probability:.3g} % {way.label}" for way in stay.exits),
        ]
        for stay in found.stays
    ]
    if stays:
        st.subheader("Mean stay in each stage, and how it ends")
        parts.table(["Stage", "Mean stay", "Ends by"], stays)
    parts.warnings_box(found.warnings)


def splits_panel(shown: Shown, write: Write) -> None:
    """Show the figures of every split side by side."""
    st.header("Other splits")
    found = splits(shown.text, shown.folder)
    if not isinstance(found, Splits):
        parts.problem_box(found, "with the splits")
        return
    if not found.choices:
        st.markdown(plain(found.none))
        return
    for number, why in found.choices.items():
        st.markdown(f"- flow {number}: {plain(why)}")
    hosts = found.shown_hosts
    rows = []
    for k, split in enumerate(found.splits, 1):
        numbers = [split.R0, split.growth_rate, *(split.hosts.get(host) for host in hosts)]
        name = f"{k}, as typed" if split.as_typed else str(k)
        rows.append(
            [
                name,
                *split.kinds.values(),
                *(["no valid split", *[""] * (len(numbers) - 1)] if split.refused else map(write, numbers)),
            ]
        )
    heads = ["Split", *(f"flow {number}" for number in found.choices), "R0", f"Growth per {found.time_unit}"]
    parts.table([*heads, *(f"T of {host}" for host in hosts)], rows)
    for k, split in enumerate(found.splits, 1):
        if split.refused:
            st.markdown(f"Split {k} is none: {plain(split.refused)}")
    if found.agree:
        st.markdown(f"The same in all valid splits: **{plain(found.words(found.agree))}**.")
    if found.differ:
        st.markdown(
            f"Not to be compared between models that split differently: **{plain(found.words(found.differ))}**."
        )
    if len(found.types) <= MOST_TYPES:
        with st.expander("F, V and K of each split"):
            for k, split in enumerate(found.splits, 1):
                if split.F is not None and split.V is not None and split.K is not None:
                    st.markdown(f"Split {k}")
                    parts.numbers_table(split.F, found.types, write, f"F, split {k}")
                    parts.numbers_table(split.V, found.types, write, f"V, split {k}")
                    parts.numbers_table(split.K, split.types_at_infection, write, f"K, split {k}")
    parts.warnings_box(warning for warning in found.warnings if not warning.startswith("Units: "))  # told above


def formula_panel(shown: Shown, write: Write) -> None:
    """Let a formula be typed, and show the opinion on it."""
    st.header("A formula from a paper")
    held = state.recall("second_opinion.formula")
    typed = st.text_input(
        "R0 as printed, in the syntax of the rates or in simple LaTeX",
        value=held,
        key="second_opinion.formula",
        placeholder=r"beta/(gamma + mu)   or   \frac{\beta}{\gamma+\mu}",
    )
    state.remember("second_opinion.formula", typed)
    if not typed.strip():
        return
    found = formula(shown.text, shown.folder, typed)
    if not isinstance(found, FormulaOpinion):
        parts.problem_box(found, "with the formula")
        return
    verdict = VERDICTS.get(found.verdict, f"✖ {found.verdict}")
    (st.success if found.verdict == "equal" else st.warning)(f"**{verdict}** {plain(found.message)}")
    if found.counterexample is not None:
        st.markdown(
            f"They differ, for example, here: the model's R0 is {write(found.R0_there)}, "
            f"the formula {write(found.formula_there)}."
            + (f" They answer differently to **{plain(', '.join(found.responses))}**." if found.responses else "")
        )
        parts.table(
            ["Parameter (in force)", "Value", "Elasticity of the model's R0", "Elasticity of the formula"],
            [
                [
                    name,
                    write(value),
                    *(map(write, found.responses[name]) if name in found.responses else ("same", "same")),
                ]
                for name, value in found.counterexample.items()
            ],
        )


def other_version(field: str, label: str) -> tuple[str, str | None] | None:
    """Ask for what the scenario was some edits ago, or one that comes with the app; return its text and folder, or None."""
    past = state.current().past
    before = {
        f"this scenario, {k} edits ago" if k > 1 else "this scenario before the last edit": past[-k]
        for k in range(1, len(past) + 1)
    }
    options = ["none", *before, *shelf.names()]
    held = state.recall(field, "none")
    name = st.selectbox(label, options, index=options.index(held) if held in options else 0, key=field)
    state.remember(field, name)
    if name == "none":
        return None
    return (before[name].text, before[name].folder) if name in before else shelf.read(name)


def versions_panel(shown: Shown, write: Write) -> None:
    """Compare the scenario with what it was, or with one that comes with the app."""
    st.header("Two models")
    other = other_version("second_opinion.other", "Compare with")
    if other is None:
        return
    found = difference(shown.text, shown.folder, *other)
    if not isinstance(found, Difference):
        parts.problem_box(found, "with the comparison")
        return
    st.markdown(f"From that to what is typed now, R0 goes from {write(found.R0[0])} to {write(found.R0[1])}.")
    st.markdown("\n".join(f"- {plain(change.words())}" for change in found.changes[:80]) or "Nothing differs.")
    if found.entries:
        rows = [
            [f"{e.matrix}[{e.row}, {e.column}]", write(e.before), write(e.after), "; ".join(e.because)]
            for e in found.entries
        ]
        parts.table(["Entry", "Before", "After", "Because of"], rows)
    if found.contributions:
        rows = [[c.change, write(c.in_order), write(c.averaged)] for c in found.contributions]
        parts.table(["Change", "Moves R0, in this order", "Mean over orders"], rows)
    parts.warnings_box(found.warnings)
