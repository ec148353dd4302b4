"""The third part of the report: R0 and what belongs to it, and who infects whom."""

from __future__ import annotations

from ngm.charts import bars
from ngm.reporting import by_hand, figures
from ngm.reporting.document import Block, Bullets, Line, Note, Paragraph, Section, Strong, Table
from ngm.reporting.material import Material, listed, name_of, term
from ngm.reporting.numbers import exact, number
from ngm.results import Solution

__all__ = ["classes", "reproduction_number", "who_infects_whom"]

MOST_ROWS = 40


def reproduction_number(m: Material) -> Section:
    """Show R0 with its bounds, per generation and per cycle, and the growth it starts with."""
    s, title = m.solution, "R0, growth and doubling time"
    growth: Line = (
        Strong("Growth rate: "),
        number(s.growth_rate, "solve.growth_rate"),
        f" per {m.unit}: {_growth_words(s)}. It has the sign of R0 − 1, and R0 alone does not give it.",
    )
    if s.form == "K as given":
        growth = (Strong("Growth rate: "), "not known, since a K as given has no time in it.")
    if s.R0 is None or s.R0_bounds is None:
        blocks: list[Block] = [
            Note((Strong("There is no R0 at these values. "), s.no_R0 or "")),
            Bullets((growth,)),
        ]
        return Section("R0", title, tuple(blocks), "absent", "there is no R0 at these values")
    low, high = s.R0_bounds
    items: list[Line] = [
        (
            Strong("R0 per generation: "),
            exact(s.R0, "solve.R0"),
            f", {_meaning(s)} in the next generation. It lies between ",
            exact(low, "solve.R0_bounds[0]"),
            " and ",
            exact(high, "solve.R0_bounds[1]"),
            _bounds_words(s),
        )
    ]
    period = next((c.period for c in s.structure.classes if c.R0 == s.R0), None) if s.structure is not None else None
    if s.R0 > 0 and s.per_cycle is None:
        items.append(
            (Strong("Per cycle: "), "classes of different periods attain R0, so there is no one number per cycle.")
        )
    elif s.R0 > 0 and period is not None and period > 1:
        items.append(
            (
                Strong("R0 per cycle: "),
                exact(s.per_cycle, "solve.per_cycle"),
                f": an infection comes back to its own kind every {period} generations, so a whole cycle "
                "multiplies by R0 to the "
                f"power of {period}. Both pass 1 together; say which one is quoted.",
            )
        )
    elif s.R0 > 0:
        items.append(
            (Strong("Per cycle: "), exact(s.per_cycle, "solve.per_cycle"), ", the same: a cycle is one generation.")
        )
    items.append(growth)
    if s.doubling_time is not None:
        items.append(
            (
                Strong("Doubling time: "),
                number(s.doubling_time, "solve.doubling_time"),
                f" {m.unit}s" + ("." if s.form == "projection" else ", while few are infected."),
            )
        )
    elif s.form != "K as given":
        items.append((Strong("Doubling time: "), "none, as it does not grow."))
    if s.effective is not None:
        now: Line = (
            (s.effective.no_R or "",) if s.effective.R is None else (number(s.effective.R, "solve.effective.R"),)
        )
        items.append((Strong("Effective number at the state now (not R0): "), *now, "."))
    return Section("R0", title, (Bullets(tuple(items)),))


def _growth_words(s: Solution) -> str:
    if s.season is not None:
        return f"the Floquet exponent of F − V over a period of {s.season.period:g} {s.time_unit}s"
    if s.discrete:
        return "the logarithm of the dominant root of F + T, T = I − V"
    return "the largest real part of the eigenvalues of F − V"


def _meaning(s: Solution) -> str:
    if s.season is not None:
        return "the spectral radius of the next-generation operator over the season: new infections by one typical case"
    if s.form == "projection":
        return "the net reproduction number, the spectral radius of K: new members by one new member in its life,"
    return "the spectral radius of K: new infections by one typical case"


def _bounds_words(s: Solution) -> str:
    if s.season is not None:
        return ". These bounds are an estimate of the error of the numerical method over the season, and no proof."
    tail = ", for the matrix as rounded." if len(s.types) > 500 else "."
    return (
        ". These bounds are proven for the decimals of the scenario (quotients of Collatz and Wielandt, class by class, in "
        "arithmetic that carries its own error)" + tail
    )


def classes(m: Material) -> Section:
    """Show the classes of K and its period, and what they mean."""
    s, title = m.solution, "Classes and period"
    if s.structure is None or s.R0 is None:
        return Section("classes", title, (), "absent", "there is no K at these values")
    k = s.structure
    if not k.classes:
        return Section("classes", title, (), "absent", "no type is ever infected")
    if k.irreducible:
        first = (
            f"K is irreducible: {_each(s)}, sooner or later. "
            "Shares of the types "
            "settle on one pattern wherever it starts."
        )
        if k.period and k.period > 1:
            first += f" Its period is {k.period}: generations alternate between {k.period} sets of types before they come back."
    else:
        first = (
            f"K is reducible: it falls into {len(k.classes)} classes. Within a class each type leads to each; a "
            "class comes before "
            "those that it infects. R0 is the largest number of a class. A class with a smaller one can lose its "
            "infection while "
            "another keeps it, and R0 alone does not say which types stay infected."
        )
    shown = k.classes[:MOST_ROWS]
    rows: tuple[tuple[Line, ...], ...] = tuple(
        (
            (str(n + 1),),
            term(c.types, 6),
            (number(c.R0, f"solve.structure.classes[{n}].R0"),),
            ("–" if c.period is None else str(c.period),),
            (number(c.growth_rate, f"solve.structure.classes[{n}].growth_rate"),),
        )
        for n, c in enumerate(shown)
    )
    heads: tuple[str, ...] = ("class", "types", "R0", "period", f"growth per {m.unit}")
    if s.form == "K as given":
        heads, rows = heads[:4], tuple(row[:4] for row in rows)
    table = Table(("Classes of K.",), heads, rows, frozenset({2, 3, 4}))
    return Section("classes", title, (Paragraph((first,)), table, *listed(len(k.classes), len(shown), "classes")))


def _each(s: Solution) -> str:
    if s.form == "projection":
        return "a birth into any of these stages leads to births into every one"
    return "an infection of any type leads to infections of every type"


def who_infects_whom(m: Material) -> Section:
    """Show K as a picture, and both Perron vectors."""
    s, title = m.solution, "Who infects whom"
    if s.R0 is None:
        return Section("who_infects_whom", title, (), "absent", "there is no K at these values")
    blocks: list[Block] = []
    figure = figures.who_infects_whom(s)
    if figure is not None:
        blocks.append(figure)
    if s.right is None or s.left is None:
        blocks.append(
            Paragraph(
                (
                    "The stable distribution and the reproductive values are not given: they are not unique "
                    "where classes tie, and "
                    "not defined where R0 is 0 or where they have no type in common.",
                )
            )
        )
        return Section("who_infects_whom", title, tuple(blocks))
    names = s.types_at_infection
    rows: tuple[tuple[Line, ...], ...] = tuple(
        ((name_of(name),), (number(a, f"solve.perron.right[{k}]"),), (number(b, f"solve.perron.left[{k}]"),))
        for k, (name, a, b) in enumerate(zip(names, s.right, s.left, strict=True))
    )[:MOST_ROWS]
    blocks.append(
        Paragraph(
            (
                "Shares: how new infections are spread over the types once the pattern has settled (right vector "
                "of K, sum 1). "
                "Reproductive value: what one infection of a type counts for all later generations (left vector; "
                "mean 1 over the "
                "shares). Measures do most where both are large.",
            )
        )
    )
    blocks += by_hand.vector_formulas()
    heads = ("type", "share of new infections", "reproductive value")
    blocks.append(Table(("Stable distribution and reproductive values.",), heads, rows, frozenset({1, 2})))
    blocks += listed(len(names), len(rows), "types")
    drawn = bars.stable_distribution(s) if 1 < len(names) <= MOST_ROWS else None
    if drawn is not None:
        told = "; ".join(f"{name} {share:.3g}" for name, share in list(zip(names, s.right, strict=True))[:20])
        blocks.append(
            figures.chart(
                "stable-distribution",
                drawn.to_dict(),
                f"Bars: share of each type among new infections. {told}.",
                "Share of each type among new infections.",
            )
        )
    return Section("who_infects_whom", title, tuple(blocks))
