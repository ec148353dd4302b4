"""The sections of the page on control that deal with a vaccine: the coverage needed, and a supply to be shared."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import streamlit as st

from ngm.charts import control as charts
from ngm.results_control import Allocation, Coverage
from ngm.screens import asking, cache, editors, forms, packages, parts, state, taking
from ngm.screens.asking import Entries
from ngm.screens.cache import ByGroup
from ngm.screens.forms import Column
from ngm.screens.parts import Shown, plain
from ngm.spreadsheet import csv_text
from ngm.wording import allocation_words, coverage_words, share, waning_words, whole

__all__ = ["coverage", "sharing"]

Write = Callable[[float | None], str]

#: Groups up to which a table by group can be typed into, and each is shown alone.
MOST_GROUPS = 40
MOST_ALONE = 12

KINDS = ["leaky: everybody in part", "all-or-nothing: some wholly"]

EFFICACY = Column("efficacy", "Efficacy against infection", hint="0.7 or 70 %; empty: as above.", width=150)
SPREAD = Column("spread", "Efficacy against onward spread", hint="0.5 or 50 %; empty: as above.", width=170)
COST = Column("cost", "Cost a head", hint="Empty: as above.", width=110)
UPPER = Column("upper", "Highest coverage", hint="0.8 or 80 %; empty: as above.", width=130)
MEMBERS = Column("members", "Members", hint="Empty: as the model has it.", width=110)


@dataclass(frozen=True, slots=True)
class Vaccine:
    """What is asked for a vaccine: general values, and values typed for single groups."""

    general: Mapping[str, float]
    single: Mapping[str, Mapping[str, float]]

    def of(self, field: str, groups: Sequence[str]) -> ByGroup:
        """Return the value of a field: one number, or one for each group where any has its own."""
        own = self.single.get(field, {})
        if not any(group in own for group in groups):
            return self.general[field]
        return tuple((group, own.get(group, self.general[field])) for group in groups)

    def members(self, groups: Sequence[str]) -> tuple[tuple[str, float], ...]:
        """Return the sizes typed for groups."""
        own = self.single.get("members", {})
        return tuple((group, own[group]) for group in groups if group in own)


def coverage(shown: Shown, write: Write) -> None:
    """Ask for groups and a vaccine; show the share to be vaccinated of them together, and of each alone."""
    st.subheader("Coverage needed")
    groups = _groups(shown)
    if groups is None:
        return
    chosen = asking.picked("Groups to be vaccinated", groups, "control.groups", "all groups")
    question = asking.common(packages.names(forms.document(shown.text) or {}))
    entries = Entries()
    vaccine = _vaccine(entries, groups, (EFFICACY, SPREAD))
    left, middle, right = st.columns(3)
    with left:
        kind = asking.choice("How it protects", KINDS, "control.kind_of_vaccine").split(":")[0]
    waning = entries.number(
        "Protection lost, per time unit", "control.waning", "0", middle, "1/(years of protection); 0: it lasts."
    )
    turnover = entries.number(
        "Births per head and time unit",
        "control.turnover",
        "0",
        right,
        "Needed where protection is lost: newborns are vaccinated.",
    )
    parts.problem_box(entries.problems)
    if vaccine is None or question is None or waning is None or turnover is None:
        return
    target, besides = question

    def ask(who: tuple[str, ...]) -> Coverage | None:
        named = who or tuple(groups)
        found = cache.coverage(
            shown.text,
            shown.folder,
            who or None,
            vaccine.of("efficacy", named),
            vaccine.of("spread", named),
            kind,
            turnover or None,
            waning,
            target,
            besides,
        )
        if isinstance(found, Coverage):
            return found
        parts.problem_box(found, "with these entries")
        return None

    together = ask(chosen)
    if together is None:
        return
    words = plain(coverage_words(together))
    (st.error if together.unattainable else st.success)(f"**{words}**")
    together_name = ", ".join(together.groups[:8]) + (", …" if len(together.groups) > 8 else "")
    rows = [_coverage_row(together_name + (" together" if len(together.groups) > 1 else ""), together, write)]
    if 1 < len(together.groups) <= MOST_ALONE:
        alone = [(group, ask((group,))) for group in together.groups]
        rows += [_coverage_row(f"{group} alone", found, write) for group, found in alone if found is not None]
    heads = ["vaccinated", "T", "share of their infections to prevent", "coverage needed", "number with all of them"]
    parts.table([*heads, "why not"], rows)
    st.caption(
        "Coverage is the share of the whole group, immune or not. Whether a vaccine protects everybody in part or some "
        "wholly does not move the threshold; it does move the size of an epidemic above it."
    )
    st.caption(asking.ASSURANCE)
    for one in together.waning:
        st.info(plain(waning_words(one)))
    if together.lasting != 1:
        st.caption(f"Protection wanes: {plain(share(together.lasting))} of coverage protects at any time.")
    parts.warnings_box(together.warnings)
    asking.command(
        "coverage",
        *asking.several("--groups", chosen),
        *_option("--efficacy", vaccine.of("efficacy", chosen or groups)),
        *_option("--against-spread", vaccine.of("spread", chosen or groups), 0.0),
        *(["--kind", kind] if kind != "leaky" else []),
        *asking.option("--waning", waning, 0.0),
        *asking.option("--turnover", turnover, 0.0),
        *asking.option("--target", target),
        *asking.several("--with", besides),
    )


def _coverage_row(name: str, found: Coverage, write: Write) -> tuple[str, ...]:
    alone = found.unattainable and found.T is None
    return (
        name,
        write(found.T),
        "cannot work alone" if alone else write(found.critical_effort),
        "unattainable" if found.coverage is None else write(found.coverage),
        write(found.at_full),
        found.why or "",
    )


def sharing(shown: Shown, write: Write) -> None:
    """Ask for a supply; show the best way to share it beside simple rules, and how good it is proven to be."""
    st.subheader("Share a supply")
    groups = _groups(shown)
    if groups is None:
        return
    entries = Entries()
    left, right = st.columns([1, 2])
    typed = left.text_input(
        "Doses, or a budget", value=state.recall("control.supply"), key="control.supply", help="For example 100 000"
    )
    state.remember("control.supply", typed)
    with right:
        chosen = asking.picked("Groups that may get some", groups, "control.groups", "all groups")
    question = asking.common(packages.names(forms.document(shown.text) or {}))
    vaccine = _vaccine(entries, groups, (EFFICACY, SPREAD, COST, UPPER, MEMBERS))
    supply = entries.read(typed, "Doses, or a budget") if typed.strip() else None
    parts.problem_box(entries.problems)
    if vaccine is None or question is None or entries.problems:
        return
    if supply is None:
        st.info("Type how many doses there are to share.")
        return
    target, besides = question
    named = chosen or tuple(groups)
    values = [vaccine.of(field, named) for field in ("efficacy", "spread", "cost", "upper")]
    sizes = vaccine.members(named)
    if not asking.asked(
        "control.sharing", "Find the best share", (shown.text, supply, chosen, values, sizes, target, besides)
    ):
        return
    found = cache.allocate(
        shown.text,
        shown.folder,
        supply,
        chosen or None,
        values[0],
        values[1],
        values[2],
        values[3],
        sizes,
        target,
        besides,
    )
    if not isinstance(found, Allocation):
        parts.problem_box(found, "with these entries")
        return
    _shares(found, besides, write)
    asking.command(
        "allocate",
        "--supply",
        f"{supply!r}".removesuffix(".0"),
        *asking.several("--groups", chosen),
        *_option("--efficacy", values[0]),
        *_option("--against-spread", values[1], 0.0),
        *_option("--cost", values[2]),
        *_option("--upper", values[3]),
        *asking.several("--sizes", [f"{group}={size!r}" for group, size in sizes]),
        *asking.option("--target", target),
        *asking.several("--with", besides),
    )


def _shares(found: Allocation, besides: Sequence[str], write: Write) -> None:
    even = next((rule for rule in found.rules if rule.rule == "by population"), None)
    figures = [
        ("Without the supply", found.R0, found.label if besides else "R0, basic reproduction number"),
        ("Best share found", found.best.R0, found.label),
        *([("Shared by population", even.R0, found.label)] if even is not None else []),
    ]
    for (label, value, what), place in zip(figures, st.columns(len(figures)), strict=True):
        place.metric(label, write(value), border=True)
        place.caption(what.capitalize() if what == found.label else what)
    st.markdown("\n".join(f"- {plain(line)}" for line in allocation_words(found)))
    first, second = st.columns(2)
    with first:
        st.markdown("**The number that each way of sharing leaves**")
        chart = charts.shares(found, dark=parts.dark())
        if chart is not None:
            taking.picture(chart, "allocation", "the picture of the ways of sharing")
    with second:
        st.markdown("**Who gets it: coverage of each group**")
        chart = charts.coverages(found, dark=parts.dark())
        if chart is not None:
            taking.picture(chart, "coverages", "the picture of the coverages")
    ways = [found.best, *found.rules]
    parts.table(
        ["way of sharing", found.label, "above the best", "spent"],
        [
            (
                way.rule,
                write(way.R0),
                "–" if way is found.best or not found.best.R0 else share(way.R0 / found.best.R0 - 1),
                whole(way.spent),
            )
            for way in ways
        ],
    )
    with st.expander("Doses and coverage of each group, for every way"):
        heads = ["group", "members", *(f"{what}, {way.rule}" for way in ways for what in ("doses", "coverage"))]
        smallest = found.smallest
        if smallest.doses is not None:
            heads.append(f"doses, smallest supply that reaches {smallest.target:g}")
        rows = [
            (
                group,
                whole(found.sizes[k]),
                *(cell for way in ways for cell in (whole(way.doses[k]), share(way.coverage[k]))),
                *([whole(smallest.doses[k])] if smallest.doses is not None else []),
            )
            for k, group in enumerate(found.groups)
        ]
        parts.grid(heads, rows)
    parts.warnings_box(found.warnings)
    st.download_button(
        "Download the shares (CSV)",
        lambda: csv_text(found.to_frame(), index=True),
        "shares.csv",
        "text/csv",
        on_click="ignore",
        key="control.shares_csv",
    )


def _groups(shown: Shown) -> list[str] | None:
    """Return the groups of hosts; None, with the reason told, where there are none to choose from."""
    if shown.solution.form == "projection":
        st.info(
            "A projected population is not vaccinated: nobody in it is infected. Type what lowers births or survival as an "
            "intervention, and ask for the **Strength needed**."
        )
        return None
    found = cache.coverage(shown.text, shown.folder)
    if not isinstance(found, Coverage):
        parts.problem_box(found, "with the groups of hosts")
        return None
    if found.R0 is None or (found.T is None and found.coverage is None):
        st.info(plain(found.why or "There is nothing to vaccinate against."))
        return None
    return list(found.groups)


def _vaccine(entries: Entries, groups: Sequence[str], columns: Sequence[Column]) -> Vaccine | None:
    """Place the fields of a vaccine, for all groups and for single ones; None where something typed is no number."""
    defaults = {"efficacy": "1", "spread": "0", "cost": "1", "upper": "1"}
    fields = [column for column in columns if column.field in defaults]
    general: dict[str, float] = {}
    places = [place for _ in range(0, len(fields), 2) for place in st.columns(2)]
    for column, place in zip(fields, places, strict=True):
        hint = (
            "For all groups. 0.7 or 70 %." if column.field != "cost" else "For all groups, in the unit of the supply."
        )
        value = entries.number(column.title, f"control.{column.field}", defaults[column.field], place, hint)
        if value is not None:
            general[column.field] = value
    single: dict[str, dict[str, float]] = {}
    if 1 < len(groups) <= MOST_GROUPS or (len(groups) == 1 and MEMBERS in columns):
        single = _by_group(entries, groups, columns)
    if entries.problems:
        return None
    return Vaccine(general, single)


def _by_group(entries: Entries, groups: Sequence[str], columns: Sequence[Column]) -> dict[str, dict[str, float]]:
    held: dict[str, dict[str, str]] = json.loads(state.recall("control.by_group", "{}"))
    with st.expander("Different in some groups", expanded=any(held.get(group) for group in groups)):
        before = [tuple(held.get(group, {}).get(column.field, "") for column in columns) for group in groups]
        token = hashlib.sha256("\n".join(groups).encode()).hexdigest()[:8]
        key = f"control.by_group.{token}.{len(columns)}"
        rows = editors.grid(key, before, columns, "Values of single groups", list(groups))
    out: dict[str, dict[str, float]] = {column.field: {} for column in columns}
    for group, row in zip(groups, rows, strict=True):
        cells = {
            column.field: "" if cell is None or cell != cell else str(cell).strip()
            for column, cell in zip(columns, row, strict=True)
        }
        held[group] = {field: cell for field, cell in {**held.get(group, {}), **cells}.items() if cell}
        for column in columns:
            if cells[column.field]:
                value = entries.read(cells[column.field], f"{group}, {column.title}")
                if value is not None:
                    out[column.field][group] = value
    state.remember("control.by_group", json.dumps(held))
    return out


def _option(name: str, value: ByGroup, default: float = 1.0) -> list[str]:
    if isinstance(value, tuple):
        return [name, *(f"{group}={one!r}" for group, one in value)]
    return asking.option(name, value, default)
