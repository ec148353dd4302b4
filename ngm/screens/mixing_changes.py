"""The sections of the page on mixing that change the scenario: a matrix brought, sizes entered, balance, factors."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from decimal import Decimal
from typing import Any

import streamlit as st

import ngm
from ngm.errors import NgmError
from ngm.results_mixing import Mixing
from ngm.scenario.examine import BroughtMatrix, Makes, examine
from ngm.screens import cache, forms, mixing_edits, mixing_panels, parts, state
from ngm.screens.parts import Shown, plain

__all__ = ["balance", "bring", "factors", "sizes"]

Write = Callable[[float | None], str]
Document = Mapping[str, Any]

#: What is offered in place of a parameter of the scenario.
NEW = "a new parameter"
ROWS, COLUMNS = "The row's group makes the contacts", "The column's group makes the contacts"


def take(edits: Sequence[forms.Edit]) -> None:
    """Put edits into the text and start over; show why where the scenario would not be accepted with them."""
    now = state.current().now
    if now is None:
        return
    try:
        text = forms.apply(now.text, edits)
    except NgmError as error:
        parts.problem_box(error.problems, "that kept the change out of the text")
        return
    problems = cache.problems(text, now.folder) or cache.solve(text, now.folder).problems
    if problems:
        parts.problem_box(problems, "that this change would make; nothing was changed")
        return
    state.edit(text)
    st.rerun()


def bring(shown: Shown, found: Mixing, document: Document, block: int | None, write: Write) -> None:
    """Let a matrix be uploaded or pasted, looked at, oriented and taken."""
    with st.expander("Bring a matrix of your own (CSV)"):
        if mixing_edits.is_brought_by_group(document, found.matrix):
            st.info("Its tables come from one file for each group. Replace a file beside the scenario instead.")
            return
        text = _brought_text(
            "mixing.file", "mixing.paste", "Or paste it here: one line a row, cells separated by commas"
        )
        if text is None:
            st.caption(
                "Square, with or without labels, or in long form (from, to, value). Labels are matched to the groups in any "
                f"order: {', '.join(plain(group) for group in found.groups)}."
            )
            return
        brought = examine(text, found.groups)
        if brought.problems or brought.table is None:
            st.error("\n".join(["**It cannot be taken:**", *(f"- {plain(problem)}" for problem in brought.problems)]))
            if brought.cells:
                st.caption("The first cells as they stand:")
                width = max(len(row) for row in brought.cells)
                rows = [(*row, *[""] * (width - len(row))) for row in brought.cells]
                parts.grid([str(k + 1) for k in range(width)], rows)
            return
        for note in brought.notes:
            st.info(plain(note))
        _take_brought(shown, found, document, block, brought, write)


def _brought_text(file_key: str, paste_key: str, label: str) -> str | None:
    """Place an upload and a field to paste into; return the text brought, None where there is none."""
    file = st.file_uploader("A CSV file", type=["csv", "txt", "tsv"], key=file_key)
    pasted = st.text_area(label, value=state.recall(paste_key), key=paste_key, height=120)
    state.remember(paste_key, pasted)
    if file is not None:
        text = mixing_edits.decoded(file.getvalue())
        if text is None:
            st.error("The file is no text in UTF-8, or too large. Save it as CSV in UTF-8 and try again.")
        return text
    return pasted if pasted.strip() else None


def _take_brought(
    shown: Shown, found: Mixing, document: Document, block: int | None, brought: BroughtMatrix, write: Write
) -> None:
    assert brought.table is not None
    try:
        readings = ngm.contact_readings(
            [[float(value) for value in row] for row in brought.table], found.groups, found.sizes
        )
    except NgmError as error:
        parts.problem_box(error.problems, "in this matrix")
        return
    rows = [
        (group, write(float(brought.row_sums[k])), write(float(brought.column_sums[k])))
        for k, group in enumerate(brought.groups)
    ]
    parts.table(["group", "row sum", "column sum"], rows)
    told = []
    for reading, who in zip(readings, ("rows", "columns"), strict=True):
        gap = (
            "" if reading.gaps is None else f"; largest gap between the two counts of a pair {_percent(reading, write)}"
        )
        mean = "" if reading.mean is None else f"one member makes {write(reading.mean)} contacts on average"
        told.append(f"- If its **{who}** make the contacts: {plain(mean + gap) or 'sizes are needed to say more'}.")
    st.markdown("\n".join(told))
    makes = st.radio(
        "Who makes the contacts? No table says; its source does.", [ROWS, COLUMNS], index=None, key="mixing.makes"
    )
    source = st.text_input("Source (optional)", key="mixing.source", value=state.recall("mixing.source"))
    state.remember("mixing.source", source)
    at_once = st.checkbox("Balance it at once", key="mixing.at_once", disabled=found.sizes is None)
    if st.button("Take this matrix", key="mixing.take", disabled=makes is None) and makes is not None:
        side: Makes = "rows" if makes == ROWS else "columns"
        edits = mixing_edits.matrix_taken(
            document, found.matrix, block, brought.oriented(side), source.strip(), balanced=at_once
        )
        population = mixing_edits.population_of(document, found.matrix)
        if at_once and not population:
            st.error("To balance it, name the sizes first, under Reciprocity.")
            return
        take(edits)
    if makes is None:
        st.caption("Say who makes the contacts, and it can be taken.")


def _percent(reading: Any, write: Write) -> str:
    first, second = reading.gaps.pair or ("", "")
    named = f" ({first} and {second})" if first else ""
    return f"{write(100 * reading.gaps.largest)} % of their mean{named}"


def sizes(found: Mixing, document: Document) -> None:
    """Let members by group be entered or imported."""
    with st.expander("Sizes of the groups", expanded=found.sizes is None):
        if found.sizes is None:
            st.markdown(f"They are not known: {plain(found.sizes_from)}")
        else:
            st.markdown(f"In use: {plain(found.sizes_from)}.")
        parameters = mixing_edits.grouped_parameters(document, found.by)
        text = _brought_text(
            "mixing.sizes.file", "mixing.sizes.paste", "Or paste them: one line a group, group,members"
        )
        names = [*parameters, NEW]
        held = mixing_edits.population_of(document, found.matrix)
        index = names.index(held) if held in names else len(names) - 1
        target = st.selectbox("They go into the parameter", names, index=index, key="mixing.sizes.into")
        if text is None:
            st.caption(
                "What the scenario computes with follows: a state without infection that uses the parameter, too."
            )
            return
        read = mixing_edits.entered_sizes(text, found.groups)
        if isinstance(read, str):
            st.error(plain(read))
            return
        parts.table(
            ["group", "members"], [(group, f"{size:f}") for group, size in zip(found.groups, read, strict=True)]
        )
        if st.button("Take these sizes", key="mixing.sizes.take"):
            name = mixing_edits.free_name(document, ("people", "members")) if target == NEW else target
            take(mixing_edits.sizes_taken(document, found.matrix, found.by, read, name))


def balance(found: Mixing, document: Document) -> None:
    """Let the matrix be balanced, with what its sizes come from."""
    if found.reciprocal:
        if st.button("Take the balance away again (reciprocal off)", key="mixing.unbalance"):
            take([forms.Edit("delete", ("matrices", found.matrix, "reciprocal"))])
        return
    if found.gaps is not None and found.gaps.is_reciprocal:
        return
    held = mixing_edits.population_of(document, found.matrix)
    parameters = mixing_edits.grouped_parameters(document, found.by)
    guess = held or ("" if not parameters else parameters[-1])
    typed = st.text_input(
        "Size of each group: a parameter, a definition, or an expression over the groups",
        value=state.recall(f"mixing.population.{found.matrix}", guess),
        key=f"mixing.population.{found.matrix}",
    )
    state.remember(f"mixing.population.{found.matrix}", typed)
    if st.button("Balance it", key="mixing.balance", type="primary", disabled=not typed.strip()):
        take(mixing_edits.balance(document, found.matrix, typed.strip()))
    st.caption(
        "Both counts of each pair are replaced by their mean. The text says so; the matrix typed stays as it is."
    )


def factors(shown: Shown, found: Mixing, document: Document, write: Write) -> None:
    """Let each setting be given a factor; show R0 and the case mix with them, and take them over."""
    st.subheader("Change the contacts of a setting")
    columns = st.columns(min(4, len(found.settings)))
    wanted: dict[str, Decimal] = {}
    good = True
    for k, name in enumerate(found.settings):
        field = f"mixing.factor.{name}"
        with columns[k % len(columns)]:
            # A new key after each edit of the text: a factor that was written into it is 1 again.
            typed = st.text_input(
                f"Factor on {plain(name)}",
                value=state.recall(field, "1"),
                key=f"{field}.{state.current().source}",
                help="1: as it is. 0.6: 40 % less.",
            )
            state.remember(field, typed)
            read = mixing_edits.factor(typed)
            if isinstance(read, str):
                st.error(plain(read))
                good = False
            elif read != 1:
                wanted[name] = read
    if not good:
        return
    if not wanted:
        st.caption("1 leaves a setting as it is; 0.6 lowers its contacts by 40 %.")
        return
    pairs = tuple((name, float(value)) for name, value in wanted.items())
    tried = cache.mixing(shown.text, shown.folder, found.matrix, found.within, pairs)
    if not isinstance(tried, Mixing):
        parts.problem_box(tried, "with these factors")
        return
    case = tried.case("with these factors")
    if case is None:
        st.caption("The scenario is too large for this page to try them; take them over as an intervention.")
    else:
        old, new = st.columns(2)
        old.metric("R0 as it is", write(found.in_force.R0), border=True)
        new.metric("Control reproduction number with these factors", write(case.R0), border=True)
        if case.why:
            st.error(plain(case.why))
        mixing_panels.mix_table(tried.mix_labels, [tried.in_force, case], write, "mixing.tried")
    _take_factors(shown, found, document, wanted)


def _take_factors(shown: Shown, found: Mixing, document: Document, wanted: Mapping[str, Decimal]) -> None:
    told = ", ".join(f"{name} times {value}" for name, value in wanted.items())
    name = st.text_input("Name of the intervention", value=told, key=f"mixing.intervention.{told}")
    left, right = st.columns(2)
    held = document.get("intervention")
    taken = isinstance(held, list) and any(isinstance(one, dict) and one.get("name") == name.strip() for one in held)
    if left.button(
        "Add as an intervention", key="mixing.intervene", type="primary", disabled=taken or not name.strip()
    ):
        take(mixing_edits.intervention(name.strip(), wanted))
    if taken:
        left.caption("The scenario has an intervention of this name.")
    several = [one for one in wanted if "within" in document["matrices"][one]]
    if several:
        right.caption(f"{plain(several[0])} has several tables: it can be changed by an intervention here.")
    elif right.button("Write into the matrices themselves", key="mixing.write"):
        given = {one: cache.mixing(shown.text, shown.folder, one, None) for one in wanted}
        tables = {one: made.given for one, made in given.items() if isinstance(made, Mixing)}
        for one in wanted:
            state.remember(f"mixing.factor.{one}", "1")
        take(mixing_edits.scaled(document, wanted, tables))
