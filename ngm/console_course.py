"""Below one, and the first weeks, as text for a terminal."""

from __future__ import annotations

from ngm.console import WIDTH, closing, figure, squeezed, table
from ngm.results_course import Course, Threshold
from ngm.wording_course import course_words, endemic_words, quantity, threshold_words

__all__ = ["course_text", "threshold_text"]

#: Lines of a table of times, types in it, and generations.
MOST_LINES, MOST_TYPES, MOST_GENERATIONS = 12, 8, 8


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
