"""The sections of the page on mixing that show: the matrix, its reciprocity, the case mix, and what R0 answers to."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import streamlit as st

from ngm.charts import mixing as charts
from ngm.charts.style import short
from ngm.results import Matrix
from ngm.results_mixing import Curve, MixCase, Mixing, MixingMap, MixingResponses
from ngm.screens import cache, parts, state, taking
from ngm.screens.parts import plain
from ngm.spreadsheet import csv_rows

__all__ = ["answers", "cases", "csv_of", "mix_table", "reciprocity", "the_map", "the_matrix"]

Write = Callable[[float | None], str]


def csv_of(groups: Sequence[str], table: Matrix) -> str:
    """Return a matrix as CSV with labels on both sides, as the importer takes it."""
    return csv_rows([["from/to", *groups], *([group, *row] for group, row in zip(groups, table, strict=True))])


def download(label: str, groups: Sequence[str], table: Matrix, name: str, key: str) -> None:
    """Place a button that saves a matrix as CSV."""
    st.download_button(label, csv_of(groups, table), name, "text/csv", on_click="ignore", key=key)


def the_matrix(found: Mixing, write: Write) -> None:
    """Show the matrix in force with its sums."""
    st.subheader("The contacts")
    named = f": {plain(found.label)}" if found.label else ""
    there = f" in {plain(found.within)}" if found.within else ""
    st.markdown(
        f"**{plain(found.matrix)}**{named}{there}. Row i, column j: contacts that **one member of the row's group i** makes "
        f"with members of group j, per {plain(found.time_unit)}."
        + (" Balanced: both counts of each pair are replaced by their mean." if found.reciprocal else "")
    )
    chart = charts.contacts(found, dark=parts.dark())
    if chart is not None:
        _heat(chart, len(found.groups), "contacts")
    with st.expander("As a table, with row and column sums"):
        heads = ["group", "contacts of one member (row sum)", "column sum", "members"]
        sizes = found.sizes
        rows = [
            (
                group,
                write(found.row_sums[k]),
                write(found.column_sums[k]),
                write(None if sizes is None else sizes[k]),
            )
            for k, group in enumerate(found.groups)
        ]
        parts.table(heads, rows)
        parts.numbers_table(found.table, found.groups, write, found.matrix)
        download("Save the matrix in force as CSV", found.groups, found.table, f"{found.matrix}.csv", "mixing.csv")
    index, coefficient = write(found.assortativity), write(found.coefficient)
    st.caption(
        f"Assortativity index Q = {plain(index)} (every group weighs the same; 0: as by chance, 1: each group keeps to "
        f"itself); coefficient r = {plain(coefficient)} (every contact weighs the same)."
    )


def _heat(chart: Any, groups: int, file: str) -> None:
    taking.picture(chart, file, "the picture of the matrix", width="content" if groups <= charts.SMALL else "stretch")


def reciprocity(found: Mixing, write: Write) -> None:
    """Show how far the matrix of the file is from reciprocal."""
    st.subheader("Reciprocity")
    st.markdown(
        "A contact has two ends: all contacts of group i with group j, counted by i, are those of j with i, counted by j. "
        "A matrix for which they differ says two things about one pair."
    )
    if found.gaps is None:
        st.info(f"It cannot be checked yet: {plain(found.sizes_from)}")
        return
    if found.gaps.is_reciprocal:
        st.success("The matrix, as the scenario has it, is reciprocal with these sizes.")
        return
    first, second = found.gaps.pair or ("", "")
    verdict = (
        f"As {'the file' if found.reciprocal else 'it stands'}, **{plain(found.matrix)} is not reciprocal**. The largest gap: "
        f"{plain(first)} counts **{plain(write(100 * found.gaps.largest))} %** (of the mean of both counts) more contacts "
        f"with {plain(second)} than {plain(second)} counts with {plain(first)}. In all, the gaps make up "
        f"{plain(write(100 * found.gaps.overall))} % of the contacts between groups."
    ).replace("As the file,", "As the file has it,")
    if found.reciprocal:
        st.info(f"{verdict} The scenario asks for it to be balanced, and the matrix in force is.")
    else:
        st.warning(verdict)
    with st.expander("The gaps, pair by pair", expanded=not found.reciprocal):
        chart = charts.gaps(found, dark=parts.dark())
        if chart is not None:
            _heat(chart, len(found.groups), "gaps")
        st.caption(
            "Positive (orange): the row's group counts more than the column's. The other side of a pair has the same gap "
            "with its sign turned."
        )
        parts.numbers_table(found.gaps.table, found.groups, write, "gap")
        download("Save the gaps as CSV", found.groups, found.gaps.table, f"{found.matrix}-gaps.csv", "mixing.gaps")


def cases(found: Mixing, earlier: MixCase | None, write: Write) -> None:
    """Show R0 and the case mix as they are, balanced or not, before the last change, and transposed on demand."""
    st.subheader("R0 and the case mix")
    turned = parts.switch("Show the matrix read the other way round too (transposed)", "mixing.turned")
    shown = [case for case in found.cases if turned or not case.name.startswith("transposed")]
    shown = [case for case in shown if case.name != "with these factors"]
    if earlier is not None:
        shown.insert(1, earlier)
    rows = [
        (f"{case.name}{' (in force)' if case.in_force else ''}", write(case.R0), case.what + _why(case))
        for case in shown
    ]
    parts.table(["contacts", "R0", "what they are"], rows)
    if turned:
        st.warning(
            "**R0 cannot reveal a transposed matrix.** A matrix and its transpose have the same root, so R0 is the same or "
            "nearly so; the case mix is not. If the orientation is in doubt, compare the mix with the ages of real cases, "
            "and the row sums with the contacts that the survey reports."
        )
    mix_table(found.mix_labels, shown, write, "mixing.mix")


def _why(case: MixCase) -> str:
    return f" {case.why[0].upper()}{case.why[1:]}." if case.why else ""


def mix_table(labels: Sequence[str], shown: Sequence[MixCase], write: Write, key: str) -> None:
    """Show case mixes as a picture and as a table."""
    mixes = [(case.name, case.case_mix) for case in shown if case.case_mix is not None]
    if not mixes:
        st.caption("There is no case mix to show.")
        return
    if len(labels) <= charts.MOST_GROUPS:
        taking.picture(
            charts.case_mix(labels, mixes, dark=parts.dark()), f"case-mix-{key}", "the picture of the case mix"
        )
    with st.expander("The case mix as a table"):
        rows = [(label, *(write(mix[k]) for _, mix in mixes)) for k, label in enumerate(labels)]
        parts.table(["group", *(name for name, _ in mixes)], rows)
        head = ["group", *(name for name, _ in mixes)]
        text = csv_rows([head, *([label, *(mix[k] for _, mix in mixes)] for k, label in enumerate(labels))])
        st.download_button(
            "Save the case mix as CSV", text, "case-mix.csv", "text/csv", on_click="ignore", key=f"{key}.csv"
        )


def answers(found: MixingResponses, write: Write) -> None:
    """Show what R0 answers to: assortativity, each setting's factor, each pair's contacts."""
    st.subheader("What R0 answers to")
    if found.R0 is None:
        st.caption("There is no R0 at these values, so nothing to ask.")
        return
    first, second = st.columns(2)
    with first:
        st.markdown("**Assortativity**: how far groups keep to themselves")
        if found.assortativity is None:
            st.caption(f"Not shown: {plain(found.no_assortativity or '')}.")
        else:
            _curve(found.assortativity, "assortativity index Q", found.mix_labels, write, "mixing.along")
            st.caption(
                "Along one path among many: upward each group shifts contacts to itself, downward to all in proportion; "
                "every group keeps its number of contacts."
            )
    with second:
        st.markdown("**A factor on one setting**, the others as they are")
        names = [curve.name for curve in found.settings]
        chosen = st.selectbox(
            "Setting", names, key="mixing.setting", index=_index(names, "mixing.setting", found.matrix)
        )
        state.remember("mixing.setting", chosen)
        curve = found.settings[names.index(chosen)]
        _curve(curve, f"factor on {chosen}", found.mix_labels, write, "mixing.factor")
    rows = [
        (curve.name, write(_even(curve.elasticity)), write(_even(loss)))
        for curve, loss in zip(found.settings, found.losses, strict=True)
    ]
    parts.table(["setting", "elasticity of R0", "share of R0 lost without it"], rows)
    st.caption(
        "An elasticity of 0.3: 1 % more contacts there raise R0 by 0.3 %. Where R0 is in proportion to all contacts together "
        "the elasticities sum to 1. What is lost without each setting does not."
    )
    _pairs(found, write)


def _even(share: float | None) -> float | None:
    """Return a share without the last digits of rounding: a 1 is then written as 1, which a number beside 1 never is."""
    return None if share is None else round(share, 13)


def _index(names: Sequence[str], field: str, default: str) -> int:
    held = state.recall(field, default)
    return names.index(held) if held in names else names.index(default) if default in names else 0


def _curve(curve: Curve, title: str, labels: Sequence[str], write: Write, key: str) -> None:
    chart = charts.response(curve, title, dark=parts.dark())
    if chart is not None:
        taking.picture(chart, f"R0-along-{title}-{key}", "the picture of R0")
    mix = charts.mix_along(labels, curve, title)
    if mix is not None:
        taking.picture(mix, f"case-mix-along-{title}-{key}", "the picture of the case mix")
    with st.expander(f"As a table: R0 and the case mix along the {title}"):
        heads = [title, "R0", *labels]
        rows = [
            (write(x), write(R0), *(write(None if mixed is None else mixed[k]) for k in range(len(labels))))
            for x, R0, mixed in zip(curve.x, curve.R0, curve.case_mix, strict=True)
        ]
        parts.grid(heads, rows)
        text = csv_rows([heads, *_full(curve, len(labels))])
        st.download_button("Save as CSV", text, f"{title}.csv", "text/csv", on_click="ignore", key=key)


def _full(curve: Curve, size: int) -> list[list[float | None]]:
    """Return the rows of a curve, None where there is no number."""
    return [
        [x, R0, *([None] * size if mix is None else mix)]
        for x, R0, mix in zip(curve.x, curve.R0, curve.case_mix, strict=True)
    ]


def _pairs(found: MixingResponses, write: Write) -> None:
    st.markdown("**Each pair's contacts**, both directions moved together")
    if found.pairs is None or found.entries is None or found.by_group is None:
        st.caption(f"Not shown: {plain(found.no_elasticities or '')}.")
        return
    chart = charts.pairs(found, dark=parts.dark())
    if chart is not None:
        _heat(chart, len(found.groups), "pairs")
    told = "" if found.exact else " Taken as differences, since these contacts also move the state without infection."
    st.caption(f"4 in a cell: if this pair meets 1 % more, R0 rises by 0.04 %. Each pair stands once.{told}")
    with st.expander("As tables: by group, by pair, entry by entry"):
        rows = [(group, write(_even(value))) for group, value in zip(found.groups, found.by_group, strict=True)]
        parts.table(["group", "elasticity of R0 by all contacts of the group, both ways"], rows)
        st.caption("They sum to more than the setting's elasticity: a pair's contacts belong to two groups.")
        parts.numbers_table(found.pairs, found.groups, write, "pair")
        download("Save the pairs as CSV", found.groups, found.pairs, f"{found.matrix}-elasticity.csv", "mixing.pairs")
        parts.numbers_table(found.entries, found.groups, write, "entry")
        st.caption("Entry by entry: only what one member of the row's group makes with the column's group is moved.")


def the_map(shown: parts.Shown, found: Mixing, parameters: Sequence[str], write: Write) -> None:
    """Let two quantities be chosen and show R0 over them, with the line R0 = 1."""
    st.subheader("Two quantities at once")
    if not parts.switch("Draw a map of R0 over two quantities", "mixing.map"):
        return
    offered = {f"factor on {name}": ("factor", name) for name in found.settings}
    offered |= {f"assortativity of {found.matrix}": ("assortativity", found.matrix)}
    offered |= {f"parameter {name}": ("parameter", name) for name in parameters}
    names = list(offered)
    left, right = st.columns(2)
    chosen = []
    for place, axis, default in ((left, "across", 0), (right, "upward", min(1, len(names) - 1))):
        field = f"mixing.{axis}"
        held = state.recall(field, names[default])
        index = names.index(held) if held in names else default
        name = place.selectbox(axis.capitalize(), names, index=index, key=field)
        state.remember(field, name)
        chosen.append(offered[name])
    if chosen[0] == chosen[1]:
        st.info("Choose two different quantities.")
        return
    made = cache.mixing_map(shown.text, shown.folder, chosen[0], chosen[1], found.within)
    if not isinstance(made, MixingMap):
        parts.problem_box(made, "with this map")
        return
    chart = charts.map_of_two(made)
    if chart is not None:
        taking.picture(chart, "R0-map", "the map")
    told = (
        "The black line is R0 = 1; on its orange side an infection can spread."
        if made.line
        else "R0 does not pass 1 on this map."
    )
    if made.missing:
        told += f" Cells without a colour have no R0: {made.missing}."
    st.caption(plain(told))
    with st.expander("The map as a table"):
        heads = [f"{made.y.title} \\ {made.x.title}", *(short(value, 3) for value in made.x.values)]
        rows = [(short(y, 3), *(write(R0) for R0 in row)) for y, row in zip(made.y.values, made.R0, strict=True)]
        parts.grid(heads, rows)
        head = [f"{made.y.title} / {made.x.title}", *made.x.values]
        text = csv_rows([head, *([y, *row] for y, row in zip(made.y.values, made.R0, strict=True))])
        st.download_button(
            "Save the map as CSV", text, "R0-map.csv", "text/csv", on_click="ignore", key="mixing.map.csv"
        )
