"""The season, the first weeks and what lies below one in the report; each absent with the reason where it does not apply."""

from __future__ import annotations

from ngm.charts import course as charts
from ngm.reporting import figures
from ngm.reporting.document import Block, Bullets, Line, Note, Paragraph, Section, Strong, Table
from ngm.reporting.material import MOST_ROWS, Material, equation, listed, name_of, term
from ngm.reporting.numbers import number
from ngm.results_course import Threshold
from ngm.wording_course import course_words, threshold_words

__all__ = ["TITLES", "below_one", "first_weeks", "season"]

TITLES = {
    "season": "Over the season",
    "first_weeks": "The first weeks",
    "below_one": "Whether below one is enough",
}
#: Generations told in the report.
GENERATIONS = 6


def season(m: Material) -> Section:
    """Show R0 of the season beside the numbers of the averaged and of the worst season."""
    year, title = m.solution.season, TITLES["season"]
    if year is None:
        return Section("season", title, (), "absent", "no parameter has a season")
    items: list[Line] = [
        (
            Strong("Season: "),
            *term(year.parameters),
            f" repeat themselves after {year.period:g} {m.unit}s. R0 is the spectral radius of the next-generation operator "
            "over one period (Wang & Zhao 2008), found from the solution operator of the infected states.",
        ),
        (
            Strong("R0 of the averaged season (not R0): "),
            number(year.averaged, "solve.season.averaged"),
            ". Averages leave out that infection of one month is passed on in another.",
        ),
        (
            Strong("Worst and mildest moment, if they lasted (not R0): "),
            number(year.worst, "solve.season.worst"),
            " at time ",
            number(year.worst_at, "solve.season.worst_at"),
            " and ",
            number(year.mildest, "solve.season.mildest"),
            " at time ",
            number(year.mildest_at, "solve.season.mildest_at"),
            f" {m.unit}s. Cases may rise for a while at the worst moment even where R0 is below 1.",
        ),
        (
            Strong("The infection-free state "),
            "itself changes over the season; what is listed in this report is that of the averaged season."
            if year.state_moves
            else "is the same all the time.",
        ),
    ]
    blocks: list[Block] = [Bullets(tuple(items))]
    drawn = charts.season(year, m.unit)
    if drawn is not None:
        spec = drawn.to_dict()
        caption = "The number of each moment if it lasted, R0 of the whole season and that of the averaged one."
        blocks.append(figures.chart("season", spec, str(spec["description"]), caption))
    return Section("season", title, tuple(blocks))


def first_weeks(m: Material) -> Section:
    """Show growth and mix seen when the flows are followed, beside what is expected."""
    found, title = m.course, TITLES["first_weeks"]
    if found is None:
        return Section("first_weeks", title, (), "absent", (m.why.get("first_weeks") or "not computed").rstrip("."))
    blocks: list[Block] = [Paragraph((line,)) for line in course_words(found)]
    rows: tuple[tuple[Line, ...], ...] = tuple(
        (
            (name_of(c.seed),),
            (number(c.growth, f"course.courses[{k}].growth"),),
            (number(found.growth_rate, "course.growth_rate"),),
            (number(c.mix_gap, f"course.courses[{k}].mix_gap"),),
            ("yes" if c.settled else "not yet, or never",),
        )
        for k, c in enumerate(found.courses[:MOST_ROWS])
    )
    heads = ("cases of", f"growth seen per {m.unit}", "expected", "gap of the mix", "settled")
    caption = "The flows followed from a few cases of one type. The gap of the mix of types is 0 where it is the one expected."
    blocks.append(Table((caption,), heads, rows, frozenset({1, 2, 3})))
    spec = charts.first_weeks(found, found.courses[0]).to_dict()
    told = f"The first weeks after a few cases of {found.courses[0].seed}. Dotted: growth as expected all the while."
    blocks.append(figures.chart("first-weeks", spec, str(spec["description"]), told))
    if found.generations:
        names = found.types_at_infection[:6]
        lines: tuple[tuple[Line, ...], ...] = tuple(
            (
                (str(g),),
                *((number(row[k], f"course.generations[0][{g}][{k}]"),) for k in range(len(names))),
            )
            for g, row in enumerate(found.generations[0][: GENERATIONS + 1])
        )
        about = (
            f"New cases expected in each generation after one of {found.types_at_infection[0]}: columns of K, K^2, …"
        )
        numeric = frozenset(range(1, len(names) + 1))
        blocks.append(Table((about,), ("generation", *names), lines, numeric))
        blocks += listed(len(found.types_at_infection), len(names), "types")
    return Section("first_weeks", title, tuple(blocks))


def below_one(m: Material) -> Section:
    """Show whether infection can persist where the number is below 1, at the baseline and with what brings it there."""
    title = TITLES["below_one"]
    if not m.thresholds:
        return Section("below_one", title, (), "absent", (m.why.get("below_one") or "not computed").rstrip("."))
    blocks: list[Block] = []
    for k, found in enumerate(m.thresholds):
        who = "Without interventions" if found.intervention is None else f"With {found.intervention}"
        words = threshold_words(found)
        first = (Strong(f"{who}: "), words[0])
        warned = found.direction == "backward" and found.R_now is not None and found.R_now < 1
        blocks.append(Note(first) if warned else Paragraph(first))
        blocks += [Paragraph((line,)) for line in words[1:]]
        if found.direction is not None:
            blocks += _figures(found, k)
    if all(found.direction is None for found in m.thresholds):
        return Section("below_one", title, (), "absent", (m.thresholds[0].why or "not computed").rstrip("."))
    return Section("below_one", title, tuple(blocks))


def _figures(found: Threshold, k: int) -> list[Block]:
    name = f"threshold[{k}]"
    items: list[Line] = [
        (
            "Coefficients (Castillo-Chavez & Song 2004): a = ",
            number(found.a, f"{name}.a"),
            ", b = ",
            number(found.b, f"{name}.b"),
        ),
        (f"The number is 1 at {found.along} = ", number(found.at_one, f"{name}.at_one"), f" {found.unit}".rstrip()),
    ]
    if found.turning is not None:
        items.append(
            (
                f"Turning point at {found.along} = ",
                number(found.turning, f"{name}.turning.value"),
                f" {found.unit}".rstrip() + ", where the number is ",
                number(found.R_turning, f"{name}.turning.number"),
            )
        )
    for j, state in enumerate(found.endemic):
        kind = "stable" if state.stable else "unstable"
        items.append((f"Endemic state, {kind}: ", number(state.infected, f"{name}.endemic[{j}].infected"), " infected"))
    out: list[Block] = [Bullets(tuple(items))]
    out += [equation(left, text) for left, text in (("a", found.formula_a), ("b", found.formula_b)) if text is not None]
    drawn = charts.endemic_curve(found)
    if drawn is not None:
        spec = drawn.to_dict()
        caption = f"Endemic states along {found.along}. Solid: stable. Dashed: unstable."
        out.append(figures.chart(f"endemic-states-{k + 1}", spec, str(spec["description"]), caption))
    return out
