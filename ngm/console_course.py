"""Below one, and the first weeks, as text for a terminal."""

from __future__ import annotations

import argparse
import json
from typing import TYPE_CHECKING

from ngm.console import WIDTH, closing, figure, squeezed, table
from ngm.results_course import Course, Threshold
from ngm.typed import number
from ngm.wording_course import course_words, endemic_words, quantity, threshold_words

if TYPE_CHECKING:
    from ngm import Scenario

__all__ = ["add_options", "course_text", "run", "threshold_text"]

#: Lines of a table of times, types in it, and generations.
MOST_LINES, MOST_TYPES, MOST_GENERATIONS = 12, 8, 8


def add_options(sub: argparse.ArgumentParser, verb: str) -> None:
    """Add the options of `course` or `threshold`."""
    sub.add_argument(
        "--with",
        metavar="NAME",
        nargs="+",
        dest="besides",
        default=[],
        help="interventions in force, in order; after FILE",
    )
    if verb == "threshold":
        sub.add_argument("--along", metavar="NAME", help="the parameter that is moved, or all-transmission")
        return
    sub.add_argument("--horizon", metavar="T", help="how long, in time units; until growth has settled where left out")
    sub.add_argument("--cases", metavar="N", help="how many cases of each type are seeded; very few where left out")
    sub.add_argument("--from", metavar="TYPE", nargs="+", dest="seeds", help="types that are seeded, one course each")


def run(options: argparse.Namespace, scenario: Scenario) -> str:
    """Run `course` or `threshold` and return what is to be printed."""
    import ngm

    acting = ngm.combined(scenario, options.besides).intervention if options.besides else None
    result: Course | Threshold
    if options.verb == "threshold":
        result = ngm.threshold(scenario, along=options.along, intervention=acting)
        text = "" if options.json else threshold_text(result)
    else:
        result = ngm.course(
            scenario,
            horizon=None if options.horizon is None else number(options.horizon, "--horizon"),
            cases=None if options.cases is None else number(options.cases, "--cases"),
            seeds=options.seeds,
            intervention=acting,
        )
        text = "" if options.json else course_text(result)
    return json.dumps(result.to_json(), ensure_ascii=False) if options.json else text


def threshold_text(result: Threshold) -> str:
    """Return the result of `ngm.threshold` as text."""
    lines = [result.title, "=" * min(len(result.title), WIDTH), ""]
    if result.intervention is not None:
        lines.append(f"with {result.intervention} in force")
    lines.append(f"{result.label} = {figure(result.R_now)} at {quantity(result, result.now)}")
    lines += ["", *threshold_words(result)]
    if result.direction is not None:
        lines += ["", f"number = 1 at {quantity(result, result.at_one)}"]
        if result.turning is not None:
            lines.append(
                f"turning point at {quantity(result, result.turning)}, number there = {figure(result.R_turning)}"
            )
        lines.append(f"a = {figure(result.a)}, b = {figure(result.b)} (Castillo-Chavez & Song 2004; a > 0: backward)")
        for name, formula in (("a", result.formula_a), ("b", result.formula_b)):
            if formula is not None:
                lines.append(f"   {name} = {formula}")
        lines += ["", f"Endemic states at {quantity(result, result.now)}"]
        lines += [f"  {line}" for line in endemic_words(result)] or [
            "  none on the curve that leaves the infection-free state"
        ]
        step = max(1, -(-len(result.branch) // MOST_LINES))
        shown = [*result.branch[::step], result.branch[-1]] if result.branch else []
        rows = [[figure(p.value), figure(p.infected), "yes" if p.stable else "no"] for p in dict.fromkeys(shown)]
        lines += ["", "Along the curve of endemic states", *table(rows, [result.along, "infected", "stable"])]
    return squeezed([*lines, *closing(result.warnings)])


def course_text(result: Course) -> str:
    """Return the result of `ngm.course` as text."""
    unit = result.time_unit
    lines = [result.title, "=" * min(len(result.title), WIDTH), ""]
    if result.intervention is not None:
        lines.append(f"with {result.intervention} in force")
    lines += [f"{result.label} = {figure(result.number)}", *course_words(result), ""]
    rows = [
        [c.seed, figure(c.growth), figure(result.growth_rate), figure(c.mix_gap), "yes" if c.settled else "no"]
        for c in result.courses
    ]
    lines += ["Growth at the end, seed by seed"]
    lines += table(rows, ["seed", f"growth per {unit}", "expected", "gap of the mix", "settled"])
    shown = result.types[:MOST_TYPES]
    if result.stable_mix is not None:
        rows = [
            [
                name,
                figure(result.stable_mix[k]),
                *(figure(None if c.mix is None else c.mix[k]) for c in result.courses[:4]),
            ]
            for k, name in enumerate(shown)
        ]
        lines += ["", "Shares of the types at the end"]
        lines += table(rows, ["type", "expected", *(f"from {c.seed}" for c in result.courses[:4])])
    for c in result.courses[:2]:
        step = max(1, -(-len(result.times) // MOST_LINES))
        rows = [
            [figure(t), *(figure(v) for v in row[:MOST_TYPES])]
            for t, row in list(zip(result.times, c.infected, strict=True))[::step]
        ]
        lines += ["", f"Infected after {figure(c.cases)} of {c.seed}", *table(rows, [unit, *shown])]
    for name, generations in zip(result.types_at_infection[:2], result.generations[:2], strict=False):
        rows = [
            [str(g), *(figure(v) for v in row[:MOST_TYPES])] for g, row in enumerate(generations[:MOST_GENERATIONS])
        ]
        lines += ["", f"Generations after one case of {name}: K, K^2, …"]
        lines += table(rows, ["generation", *result.types_at_infection[:MOST_TYPES]])
    if len(result.types) > MOST_TYPES or len(result.courses) > 2:
        lines.append("More types and seeds: use --json.")
    return squeezed([*lines, *closing(result.warnings)])
