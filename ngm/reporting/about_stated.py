"""What the report says of matrices that stand in the scenario: a K as given, and a projected population."""

from __future__ import annotations

from collections.abc import Callable, Mapping

from ngm.charts import bars
from ngm.reporting import figures
from ngm.reporting.document import Block, Bullets, Line, Note, Paragraph, Section, Strong, Table
from ngm.reporting.material import Material, inline, listed, matrix, name_of, numbers_table
from ngm.reporting.numbers import number, share
from ngm.scenario.model import Expression

__all__ = ["CAUTIONS", "instead", "population"]

MOST_ROWS = 40

#: In place of the cautions that speak of an infection.
CAUTIONS = (
    "Deterministic: chance plays no part. A small population can die out by chance although R0 is above 1.",
    "Births and shares are the same in every step: no crowding, no good and bad years. Numbers of the long run hold while that "
    "is so.",
    "R0 counts the new members in a life, the growth factor what a step multiplies by. Both lie on the same side of 1; "
    "neither is a forecast of how many there will be.",
    "The division into births and transitions is the modeller's: R0 depends on it, the growth factor does not.",
    "Bounds cover arithmetic and rounding. They say nothing of how uncertain the entries or the model are.",
    "Decisions rest with the responsible authority under its local rules.",
)

_WHY_GIVEN: Mapping[str, tuple[str, str]] = {
    "diagram": ("Flow diagram", "K is given: there are no flows to draw"),
    "compartments": ("Compartments", "K is given: there are types and no compartments"),
    "groups": ("Groups and contacts", "K is given: contacts are in it"),
    "infection_free": ("Infection-free state", "K is given: there are no uninfected compartments"),
    "transmission": ("Transmission F and transition V", "K is given: there is no F and no V behind it"),
    "conditions": ("Conditions A1 to A5", "K is given: there are no flows that they could be tested on"),
}
_WHY_PROJECTED: Mapping[str, tuple[str, str]] = {
    "diagram": ("Flow diagram", "births and transitions stand as matrices: there are no flows to draw"),
    "compartments": ("Compartments", "the population has stages and no compartments"),
    "groups": ("Groups and contacts", "the population has stages and no groups with contacts"),
    "infection_free": ("Infection-free state", "nobody is infected in a projected population"),
    "who_infects_whom": ("Who infects whom", "nobody is infected; structure and values of the stages stand above"),
}


def instead(m: Material) -> dict[str, Callable[[], Section]]:
    """Return the sections that differ where the matrices stand in the scenario; empty where flows make them."""
    if m.solution.form == "flows":
        return {}
    why = _WHY_GIVEN if m.solution.form == "K as given" else _WHY_PROJECTED
    out: dict[str, Callable[[], Section]] = {}
    for key, (title, reason) in why.items():
        out[key] = lambda key=key, title=title, reason=reason: Section(key, title, (), "absent", reason)  # type: ignore[misc]
    out["flows"] = lambda: as_given(m)
    if m.solution.form == "projection":
        out["transmission"] = lambda: births(m)
        out["control"] = lambda: control(m)
    return out


def as_given(m: Material) -> Section:
    """Show the matrices as they are typed, with the definitions that they use."""
    scenario, s = m.scenario, m.solution
    blocks: list[Block] = []
    if scenario.given is not None:
        title = "The matrix as given"
        words = (
            "K stands in the scenario, entry by entry. Row: the type infected; column: the type that infects: the infections "
            "that one case causes over its whole course. Nothing in this report checks how it was made."
        )
        blocks += [Paragraph((words,)), *_typed("K", scenario.given.K, s.types)]
        if s.sizes is not None:
            members = list(zip(s.types, s.sizes, strict=True))[:MOST_ROWS]
            rows = tuple(((name_of(t),), (number(v, f"report.sizes[{k}]"),)) for k, (t, v) in enumerate(members))
            blocks += [
                Table(("Members of each type.",), ("type", "members"), rows, frozenset({1})),
                *listed(len(s.types), len(rows), "types"),
            ]
    elif scenario.projection is not None:
        title = "Births and transitions as given"
        words = (
            f"One step is one {m.unit}. Births, row by row: new members of the row's stage by one member of the column's stage "
            "in a step. Transitions: the share of the column's stage that is found in the row's stage a step later."
        )
        blocks += [
            Paragraph((words,)),
            *_typed("births", scenario.projection.births, s.types),
            *_typed("transitions", scenario.projection.transitions, s.types),
        ]
    if scenario.definitions:
        made = tuple(((name_of(name),), (inline(d.expression.text),)) for name, d in scenario.definitions.items())
        blocks.append(Table(("Definitions used in the entries.",), ("name", "stands for"), made))
    return Section("flows", title, tuple(blocks))


def _typed(name: str, rows: tuple[tuple[Expression, ...], ...], labels: tuple[str, ...]) -> list[Block]:
    """Return the entries as typed that are not 0, one a line."""
    entries = [
        (row_label, column_label, entry.text)
        for row_label, row in zip(labels, rows, strict=True)
        for column_label, entry in zip(labels, row, strict=True)
        if entry.text not in ("0", "0.0")
    ]
    shown = entries[: 2 * MOST_ROWS]
    if not shown:
        return [Paragraph((f"Every entry of {name} is 0.",))]
    table = Table(
        (f"{name}: entries that are not 0, as typed.",),
        ("row", "column", "entry"),
        tuple(((name_of(row),), (name_of(column),), (inline(text),)) for row, column, text in shown),
    )
    return [table, *listed(len(entries), len(shown), f"entries of {name}")]


def births(m: Material) -> Section:
    """Show F and V of a projected population."""
    s = m.solution
    blocks: list[Block] = [
        Paragraph(
            (
                "F holds the births, T the transitions, and V = I − T: what is no longer found in its stage a step later. The "
                "inverse of V holds the mean number of steps spent in each stage.",
            )
        )
    ]
    if s.symbolic.F is not None and s.symbolic.V is not None:
        blocks += [*matrix("F", s.symbolic.F, s.types), *matrix("V", s.symbolic.V, s.types)]
    for name, values in (("F", s.F), ("V", s.V)):
        if values is not None:
            blocks += numbers_table(name, values, s.types, f"solve.{name}", ", per step")
    return Section("transmission", "Births F and transitions V", tuple(blocks))


def control(m: Material) -> Section:
    """Show which share of births must be prevented for a population to die out, stage by stage."""
    title, c = "What control must reach", m.control
    if c is None or c.R0 is None:
        return Section(
            "control", title, (), "absent", "not computed" if c is None else "there is no R0 at these values"
        )
    words = (
        "T counts the births that control of the target must undo: the critical effort is the share of them to prevent for the "
        "population to die out, 1 − 1/T where T is above 1 and 0 otherwise. Where there is no T, the rest sustains itself."
    )
    blocks: list[Block] = [Paragraph((words,))]
    for caption, head, key, targets in (
        (
            "Births into these stages prevented.",
            "born into",
            "type_reproduction",
            [(", ".join(t.types), t.T, t.critical_effort) for t in c.type_reproduction],
        ),
        (
            "Births by members of one stage prevented.",
            "born by",
            "state_reproduction",
            [(t.state, t.T, t.critical_effort) for t in c.state_reproduction],
        ),
    ):
        rows = tuple(
            ((name,), (number(T, f"control.{key}[{k}].T"),), share(effort, f"control.{key}[{k}].critical_effort"))
            for k, (name, T, effort) in enumerate(targets[:MOST_ROWS])
        )
        if rows:
            blocks.append(Table((caption,), (head, "T", "critical effort"), rows, frozenset({1, 2})))
            blocks += listed(len(targets), len(rows), "targets")
    return Section("control", title, tuple(blocks))


def found(m: Material) -> Line:
    """Return the finding on a population in a sentence or two."""
    s = m.solution
    fate = s.projected.fate(s.growth_factor) if s.projected is not None else "is not followed"
    return (
        Strong("Found: "),
        "R0, the net reproduction number, is ",
        number(s.R0, "solve.R0"),
        ": so many new members one new member has in its whole life. The growth factor is ",
        number(s.growth_factor, "solve.growth_factor"),
        f" per step of one {m.unit}: the population {fate}.",
    )


def population(m: Material) -> Section:
    """Say whether a projected population grows, in which structure, and what each stage is worth."""
    s, title = m.solution, "Growth of the population"
    about = s.projected
    if about is None:
        return Section("population", title, (), "absent", "the model is no projected population")
    items: list[Line] = [
        (
            Strong("Growth factor: "),
            number(s.growth_factor, "solve.growth_factor"),
            f" per step of one {m.unit}, the dominant root of F + T. The population {about.fate(s.growth_factor)}.",
        )
    ]
    if about.period is not None:
        settles = (
            "its structure settles" if about.period == 1 else f"its structure comes back every {about.period} steps"
        )
        items.append((Strong("Period: "), f"{about.period}: {settles}."))
    blocks: list[Block] = [Bullets(tuple(items)), *(Note((note,)) for note in about.notes)]
    if about.stable_structure is None or about.reproductive_values is None:
        return Section("population", title, tuple(blocks))
    rows = tuple(
        (
            (name_of(stage),),
            (number(about.stable_structure[k], f"solve.stable_structure[{k}]"),),
            (number(about.reproductive_values[k], f"solve.reproductive_values[{k}]"),),
        )
        for k, stage in enumerate(about.stages[:MOST_ROWS])
    )
    caption = "Stable structure: shares in the long run. Reproductive value: what one member counts for the size then."
    heads = ("stage", "share in the long run", "reproductive value")
    blocks += [Table((caption,), heads, rows, frozenset({1, 2})), *listed(len(about.stages), len(rows), "stages")]
    chart = bars.stage_shares(about)
    if chart is not None:
        told = "; ".join(f"{s} {v:.3g}" for s, v in list(zip(about.stages, about.stable_structure, strict=True))[:20])
        alt = f"Bars: share of each stage in the long run. {told}."
        blocks.append(figures.chart("stable-structure", chart.to_dict(), alt, "Share of each stage in the long run."))
    key = "solve.growth_factor_elasticity"
    for name, entries in (("births", about.elasticity_births), ("transitions", about.elasticity_transitions)):
        if entries is not None:
            what = ": elasticity of the growth factor"
            blocks += numbers_table(name, entries, about.stages, f"{key}.{name}", what)
    blocks.append(
        Paragraph(
            (
                "An elasticity says by how many per cent the growth factor rises when the entry rises by one per cent. "
                "Those of births and transitions together add up to 1.",
            )
        )
    )
    return Section("population", title, tuple(blocks))
