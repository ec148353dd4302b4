"""The verbs `outbreak` and `twin`: their options, and their results as text for a terminal."""

from __future__ import annotations

import argparse
from collections.abc import Mapping, Sequence

from ngm.console import WIDTH, closing, figure, squeezed, table
from ngm.errors import Problem, ScenarioError
from ngm.results_outbreak import Chance, FinalSizeResult, Outbreak, PaceResult, Twin
from ngm.typed import by_group

__all__ = ["add_options", "options_of", "outbreak_text", "twin_text"]

#: Rows of a table; the rest is in the JSON.
MOST_ROWS = 60
CAUTION = (
    "Numbers of a model, no forecast. A final size supposes that nobody changes behaviour; a chance "
    "of outbreak that cases are "
    "independent. Decisions belong to the responsible authority under local rules and licensed practice."
)


def add_options(sub: argparse.ArgumentParser) -> None:
    """Add the options of `outbreak`."""

    def several(option: str, metavar: str, text: str, **more: object) -> None:
        sub.add_argument(option, metavar=metavar, nargs="+", help=f"{text}; after FILE", **more)  # type: ignore[arg-type]

    each = "one number for all groups or G=NUMBER for each"
    several("--with", "NAME", "interventions in force, in order", dest="besides", default=[])
    several("--introduce", "TYPE=N", "infected types and how many cases of each the outbreak starts from", default=[])
    several("--coverage", "C", f"share vaccinated before the outbreak, 0 to 1: {each}", default=["0"])
    several("--efficacy", "E", f"efficacy against infection, 0 to 1: {each}; 1 where left out", default=["1"])
    several("--against-spread", "S", f"efficacy against onward spread, 0 to 1: {each}; 0 where left out", default=["0"])
    sub.add_argument("--kind", choices=["leaky", "all-or-nothing"], default="leaky", help="of vaccine")


def options_of(options: argparse.Namespace) -> dict[str, object]:
    """Return the keywords of `ngm.outbreak` that were typed.

    Raises
    ------
    ngm.ScenarioError
        A number cannot be read, or an introduced case names no type.
    """
    introduce: float | Mapping[str, float] = by_group(options.introduce, "--introduce") if options.introduce else {}
    if not isinstance(introduce, Mapping):
        raise ScenarioError(Problem("--introduce", "expected TYPE=NUMBER, for example --introduce I=3."))
    return {
        "interventions": list(options.besides),
        "introduce": introduce,
        "coverage": by_group(options.coverage, "--coverage"),
        "efficacy": by_group(options.efficacy, "--efficacy"),
        "against_spread": by_group(options.against_spread, "--against-spread"),
        "kind": options.kind,
    }


def outbreak_text(result: Outbreak) -> str:
    """Return the result of `ngm.outbreak` as text."""
    lines = [result.title, "=" * min(len(result.title), WIDTH), ""]
    if result.interventions:
        lines.append(f"with {', '.join(result.interventions)} in force")
    lines.append(f"No {result.label}: {result.no_R}" if result.R is None else f"{result.label} = {figure(result.R)}")
    lines += ["", "How many in the end", *_final_size(result.final_size)]
    lines += ["", "By chance", *_chance(result.chance)]
    lines += ["", "Pace", *_pace(result.pace, result.time_unit, result.discrete)]
    return squeezed([*lines, *closing(result.warnings, CAUTION)])


def _cut(rows: list[list[str]], heads: Sequence[str]) -> list[str]:
    rest = len(rows) - MOST_ROWS
    return [*table(rows[:MOST_ROWS], heads), *([f"  … and {rest} more; use --json."] if rest > 0 else [])]


def _count(value: float) -> str:
    """Return a number of hosts."""
    return f"{value:,.0f}" if value >= 1000 else figure(value)


def percent(value: float | None) -> str:
    """Return a share in per cent."""
    return "-" if value is None else f"{100 * value:.4g} %"


def _final_size(size: FinalSizeResult) -> list[str]:
    if size.why is not None:
        return [f"  does not apply: {size.why}"]
    lines = []
    if size.attack_rate is not None and size.infected is not None and size.susceptible is not None:
        lines.append(
            f"  {percent(size.attack_rate)} of the {_count(size.susceptible)} who can be infected: "
            f"{_count(size.infected)} in all, if it "
            "takes off and nothing else changes"
        )
    vaccinated = any(row.vaccinated is not None for row in size.rows)
    heads = ["type", "susceptible", "attack rate", "infected", *(["not vaccinated", "vaccinated"] * vaccinated)]
    rows = []
    for row in size.rows:
        more = [percent(row.unvaccinated), percent(row.vaccinated)] if vaccinated else []
        rows.append([row.type, _count(row.susceptible), percent(row.attack_rate), _count(row.infected), *more])
    return [*lines, *_cut(rows, heads)]


def _chance(chance: Chance) -> list[str]:
    if chance.why is not None:
        return [f"  does not apply: {chance.why}"]
    lines = []
    if chance.introduced is not None:
        named = ", ".join(f"{count:g} {name}" for name, count in chance.introduced.items())
        lines.append(f"  {named} start a large outbreak with probability {figure(chance.large_outbreak)}")
    rows = [[row.type, figure(row.large_outbreak), figure(row.dies_out)] for row in chance.rows]
    return [*lines, *_cut(rows, ["one case of", "large outbreak", "dies out"]), f"  How: {chance.how}"]


def _pace(pace: PaceResult, unit: str, discrete: bool) -> list[str]:
    if pace.why is not None:
        return [f"  does not apply: {pace.why}"]
    each = f"{unit}s, in whole steps" if discrete else f"{unit}s"
    lines = [
        f"  generation interval: mean {figure(pace.mean)}, sd {figure(pace.sd)} {each} ({', '.join(pace.types[:8])})"
    ]
    marks = [
        next((a for a, c in zip(pace.ages, pace.cumulative, strict=True) if c >= x), None) for x in (0.25, 0.5, 0.75)
    ]
    lines.append(f"  a quarter, half, three quarters of infections are made by age {', '.join(map(figure, marks))}")
    lines.append(f"  growth rate {figure(pace.growth_rate)} per {unit}")
    if pace.doubling_time is not None:
        lines.append(f"  doubling time {figure(pace.doubling_time)} {unit}s")
    if pace.R0_by_growth is not None:
        lines.append(f"  R from growth and intervals, 1/M(-r) = {figure(pace.R0_by_growth)}")
    if len(pace.mean_by_type) > 1:
        rows = [[name, figure(mean)] for name, mean in pace.mean_by_type]
        lines += _cut(rows, ["one case of", f"mean age at infecting, {unit}s"])
    return lines


def twin_text(result: Twin) -> str:
    """Return the result of `ngm.twin` as text."""
    unit = result.time_unit
    lines = [result.title, "=" * min(len(result.title), WIDTH), ""]
    rows = [
        [v.name, figure(v.R0), figure(v.growth_rate), figure(v.growth_factor), figure(v.doubling_time)]
        for v in result.versions
    ]
    lines += table(rows, ["", "R0", f"growth per {unit}", "factor per step", f"doubling, {unit}s"])
    if result.stays:
        rows = [
            [s.type, percent(s.share_leaving), figure(s.hazard), figure(s.steps), figure(s.time)] for s in result.stays
        ]
        lines += [
            "",
            *_cut(rows, ["state", "leave in a step", f"rate per {unit}", "mean stay, steps", f"as a time, {unit}s"]),
        ]
    lines += ["", "Why they differ", *(f"  {line}" for line in result.differ)]
    lines += ["", "Which to report", f"  {result.report}"]
    return squeezed([*lines, *closing(result.warnings)])
