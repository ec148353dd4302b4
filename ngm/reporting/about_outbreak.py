"""The course of an outbreak in the report: pace, chance, final size, and the model beside its twin in the other time."""

from __future__ import annotations

from ngm.charts import outbreak as charts
from ngm.reporting import figures
from ngm.reporting.document import Block, Bullets, Line, Note, Paragraph, Section, Strong, Table
from ngm.reporting.material import MOST_ROWS, Material, listed, name_of, term
from ngm.reporting.numbers import number, share

__all__ = ["chance", "final_size", "pace", "twin"]

TITLES = {
    "pace": "Pace: generation interval",
    "chance": "Whether it takes off, by chance",
    "final_size": "How many in the end",
    "twin": "In steps or in continuous time",
}


def _absent(m: Material, key: str, why: str | None) -> Section:
    said = why or m.why.get("outbreak") or "not computed"
    return Section(key, TITLES[key], (), "absent", said.rstrip("."))


def pace(m: Material) -> Section:
    """Show the generation interval: mean, deviation, density, by type; and R0 found from it and the growth rate."""
    found = None if m.outbreak is None else m.outbreak.pace
    if found is None or found.why is not None:
        return _absent(m, "pace", None if found is None else found.why)
    unit, steps, people = m.unit, m.solution.discrete, m.solution.form == "projection"
    at = "its births" if people else "infecting"
    items: list[Line] = [
        (
            Strong("Mean generation interval: "),
            number(found.mean, "outbreak.pace.mean"),
            f" {unit}s{', in whole steps' if steps else ''}, standard deviation ",
            number(found.sd, "outbreak.pace.sd"),
            f" {unit}s: "
            + ("the age of a member at " if people else "the age of an infection when ")
            + ("its births, over newborns in " if people else "it infects others, over new cases of "),
            *term(found.types),
            " in the mix that they settle to.",
        )
    ]
    if found.R0_by_growth is not None:
        items.append(
            (
                Strong("R0 from growth and intervals: "),
                number(found.R0_by_growth, "outbreak.pace.R0_by_growth"),
                ", 1/M(−r), M the moment generating function of the interval (Wallinga & Lipsitch "
                "2007): a second route to R0.",
            )
        )
    blocks: list[Block] = [Bullets(tuple(items))]
    drawn = charts.intervals(found, unit, discrete=steps)
    if drawn is not None:
        told = f"Density of the age at {at} in {unit}s."
        blocks.append(figures.chart("generation-interval", drawn.to_dict(), told, told))
    if len(found.mean_by_type) > 1:
        rows: tuple[tuple[Line, ...], ...] = tuple(
            ((name_of(name),), (number(mean, f'outbreak.pace.mean_by_type["{name}"]'),))
            for name, mean in found.mean_by_type[:MOST_ROWS]
        )
        heads = ("one member of" if people else "one case of", f"mean age at {at} ({unit}s)")
        blocks.append(Table(("By type.",), heads, rows, frozenset({1})))
        blocks += listed(len(found.mean_by_type), len(rows), "types")
    return Section("pace", TITLES["pace"], tuple(blocks))


def chance(m: Material) -> Section:
    """Show the probability that one case of each type starts a large outbreak."""
    found = None if m.outbreak is None else m.outbreak.chance
    if found is None or found.why is not None:
        return _absent(m, "chance", None if found is None else found.why)
    rows: tuple[tuple[Line, ...], ...] = tuple(
        (
            (name_of(row.type),),
            (number(row.large_outbreak, f"outbreak.chance.types[{k}].large_outbreak"),),
            (number(row.dies_out, f"outbreak.chance.types[{k}].dies_out"),),
        )
        for k, row in enumerate(found.rows[:MOST_ROWS])
    )
    people = m.solution.form == "projection"
    words = (
        f"How: {found.how}. Members are independent of each other here: where they share food or room, they are not."
    )
    if not people:
        words = (
            f"How: {found.how}. Cases are independent of each other while they are few; of several that "
            "are introduced, all families "
            "must die out. Above 1 many outbreaks end by chance before they are large."
        )
    heads = ("line of one", "lasts", "dies out") if people else ("one case of", "large outbreak", "dies out")
    table = Table(("Probabilities.",), heads, rows, frozenset({1, 2}))
    return Section(
        "chance", TITLES["chance"], (Paragraph((words,)), table, *listed(len(found.rows), len(rows), "types"))
    )


def final_size(m: Material) -> Section:
    """Show the attack rates in a closed population."""
    found = None if m.outbreak is None else m.outbreak.final_size
    if found is None or found.why is not None:
        return _absent(m, "final_size", None if found is None else found.why)
    rows: tuple[tuple[Line, ...], ...] = tuple(
        (
            (name_of(row.type),),
            (number(row.susceptible, f"outbreak.final_size.types[{k}].susceptible"),),
            (number(row.attack_rate, f"outbreak.final_size.types[{k}].attack_rate"),),
            (number(row.infected, f"outbreak.final_size.types[{k}].infected"),),
        )
        for k, row in enumerate(found.rows[:MOST_ROWS])
    )
    first: Line = (
        "If the outbreak takes off and nothing changes in its course, of ",
        number(found.susceptible, "outbreak.final_size.susceptible"),
        " who can be infected ",
        number(found.infected, "outbreak.final_size.infected"),
        " are in the end, the share ",
        *share(found.attack_rate, "outbreak.final_size.attack_rate"),
        ": the largest solution of 1 − z = exp(−K z), each type by its size. It "
        "supposes a closed population in which nobody behaves otherwise because of the outbreak.",
    )
    heads = ("type", "susceptible", "share infected", "infected")
    table = Table(("Attack rates.",), heads, rows, frozenset({1, 2, 3}))
    return Section(
        "final_size", TITLES["final_size"], (Paragraph(first), table, *listed(len(found.rows), len(rows), "types"))
    )


def twin(m: Material) -> Section:
    """Show the model beside the same flows in the other time, why they differ, and which number to report."""
    found = m.twin
    if found is None or len(found.versions) < 2:
        return _absent(m, "twin", "not computed: the model runs in continuous time, or has no twin")
    rows: tuple[tuple[Line, ...], ...] = tuple(
        (
            (version.name,),
            (number(version.R0, f"twin.versions[{k}].R0"),),
            (number(version.growth_rate, f"twin.versions[{k}].growth_rate"),),
            (number(version.growth_factor, f"twin.versions[{k}].growth_factor"),),
        )
        for k, version in enumerate(found.versions)
    )
    heads = ("version", "R0", f"growth rate per {m.unit}", "factor per step")
    blocks: list[Block] = [
        Table(("The same flows in discrete and in continuous time.",), heads, rows, frozenset({1, 2, 3})),
        Bullets(tuple((line,) for line in found.differ)),
        Note((Strong("Which to report: "), found.report)),
    ]
    return Section("twin", TITLES["twin"], tuple(blocks))
