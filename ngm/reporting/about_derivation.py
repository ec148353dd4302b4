"""The second part of the report: the derivation, from the infection-free state to the closed form."""

from __future__ import annotations

from ngm.expression.typeset import latex_of
from ngm.reporting import by_hand
from ngm.reporting.document import Block, Bullets, Code, Line, Note, Paragraph, Section, Strong, Table
from ngm.reporting.material import (
    MOST_ENTRIES,
    MOST_ROWS,
    Material,
    abbreviations,
    equation,
    inline,
    listed,
    matrix,
    name_of,
    numbers_table,
    term,
)
from ngm.reporting.numbers import number
from ngm.reporting.width import spaced
from ngm.results import EntryTerm, Solution

__all__ = ["closed_form", "conditions", "infection_free", "next_generation", "transmission"]


#: What K is, before and after the types that it is about.
_K_WORDS = {
    "flows": (
        "K is F times the inverse of V, kept to the types at infection, those that new infections enter: ",
        ". Entry (i, j) is the number of infections of type i that one case of type j causes over its whole course, where "
        "nobody is infected yet. It has no unit.",
    ),
    "K as given": (
        "K is taken as the scenario gives it, for the types ",
        ". Entry (i, j) is the number of infections of type i that one case of type j causes over its whole course. It has no "
        "unit.",
    ),
    "projection": (
        "K is F times the inverse of V, kept to the stages that members are born into: ",
        ". Entry (i, j) is the number of births into stage i in the whole life of one member that begins in stage j.",
    ),
}


def infection_free(m: Material, told: set[str]) -> Section:
    """Show the infection-free state and how near to rest it is."""
    s, title = m.solution, "Infection-free state"
    if not s.infection_free:
        return Section(
            "infection_free",
            title,
            (Paragraph(("The model has no uninfected compartment: there is no state to find.",)),),
        )
    written = s.symbolic.infection_free or {}
    blocks: list[Block] = [Paragraph(("All infected compartments are empty, and every other one is at rest.",))]
    blocks += abbreviations(s, list(written.values()), told)
    shown = list(s.infection_free.items())[:MOST_ROWS]
    rows: tuple[tuple[Line, ...], ...] = tuple(
        (
            (name_of(name),),
            (inline(written[name]) if name in written else "–",),
            (number(value, f'solve.infection_free["{name}"]'),),
        )
        for name, value in shown
    )
    heads: tuple[str, ...] = ("compartment", "formula", "value")
    if not written:
        rows, heads = tuple((row[0], row[2]) for row in rows), ("compartment", "value")
    blocks.append(Table(("The infection-free state.",), heads, rows, frozenset({len(heads) - 1})))
    blocks += listed(len(s.infection_free), len(shown), "compartments")
    blocks.append(
        Paragraph(
            (
                "Residual: the largest net flow, as a share of the gross flow of its compartment, is ",
                number(s.residual, "report.residual"),
                ". At rest is what lies within 1e-9.",
            )
        )
    )
    return Section("infection_free", title, tuple(blocks))


def transmission(m: Material, told: set[str]) -> Section:
    """Show F and V, and each entry with its flows."""
    s = m.solution
    written = [entry for rows in (s.symbolic.F or (), s.symbolic.V or ()) for row in rows for entry in row]
    blocks: list[Block] = [
        Paragraph(
            (
                f"Rates per {m.unit} at the infection-free state: the slopes of the flows by the infected "
                "compartments. Rows "
                "and columns in the order ",
                *term(s.types),
                ". Row: the type that is gained or lost; column: the type that causes it. F holds new "
                "infections; V holds "
                "everything else, with its sign turned.",
            )
        )
    ]
    blocks += by_hand.slopes(s)
    blocks += abbreviations(s, written, told)
    if s.symbolic.F is not None and s.symbolic.V is not None:
        blocks += matrix("F", s.symbolic.F, s.types)
        blocks += matrix("V", s.symbolic.V, s.types)
    elif s.symbolic.blocks is None:
        blocks.append(Paragraph(("The model is too large to write F and V out.",)))
    blocks += _blocks(m)
    blocks += _terms(s)
    for name, values in (("F", s.F), ("V", s.V)):
        if values is not None:
            blocks += numbers_table(name, values, s.types, f"solve.{name}", f", per {m.unit}")
    if s.F is None:
        blocks.append(Paragraph((f"F and V have {len(s.types)} rows: too many to be listed in numbers.",)))
    return Section("transmission", "Transmission F and transition V", tuple(blocks))


def _blocks(m: Material) -> list[Block]:
    blocks = m.solution.symbolic.blocks
    if blocks is None:
        return []
    rows: list[tuple[Line, ...]] = []
    for name, entries in (("F", blocks.F), ("V", blocks.V), ("K", blocks.K or {})):
        rows += [((f"{name}[{row}, {column}]",), (Code(spaced(text)),)) for (row, column), text in entries.items()]
    out: list[Block] = [
        Table(
            (
                "By blocks, one for each pair of compartments and all groups at once. diag: a number in each "
                "group; a prime: the "
                "matrix transposed; products of matrices from left to right.",
            ),
            ("block", "is"),
            tuple(rows),
        )
    ]
    if blocks.K is None:
        out.append(Paragraph(("Members move between groups, so the inverse of V has no formula group by group.",)))
    if blocks.root is not None:
        out.append(Paragraph(("R0 is the spectral radius of: ", Code(spaced(blocks.root)), ".")))
    return out


def _terms(s: Solution) -> list[Block]:
    """Return the entries of F and V with the flows that they are made of."""
    if not s.terms:
        return []
    shown = s.terms[: 2 * MOST_ROWS]
    rows = tuple(
        (
            by_hand.place(t.matrix, t.row, t.column),
            ("− " if t.sign < 0 else "+ ", inline(t.share)),
            (_flow(t),),
        )
        for t in shown
    )
    heads = ("entry", "share in it", "because of")
    caption = (
        "The flows behind each entry of F and V; [row, column]. Entries with several lines are their sum. Here the "
        "infection-free state is not put in yet.",
    )
    return [Table(caption, heads, rows), *listed(len(s.terms), len(shown), "terms")]


def _flow(t: EntryTerm) -> str:
    return t.label if t.flow is None else f"flow {t.flow}" + (f", {t.label}" if t.label else "")


def conditions(m: Material) -> Section:
    """Show the conditions one by one."""
    blocks: list[Block] = [
        Paragraph(("R0 is a threshold where these hold (van den Driessche and Watmough 2002).",)),
        Bullets(
            tuple(
                (Strong(f"{c.name} {'holds' if c.holds else 'does not hold'}. "), c.detail)
                for c in m.solution.conditions
            )
        ),
    ]
    return Section("conditions", "Conditions A1 to A5", tuple(blocks))


def next_generation(m: Material, told: set[str]) -> Section:
    """Show mean stays, K with large domain and K."""
    s, title = m.solution, "Next-generation matrix K"
    if s.R0 is None:
        why = "there is none at these values"
        return Section("next_generation", title, (Paragraph((f"There is no K: {s.no_R0 or why}",)),), "absent", why)
    blocks: list[Block] = []
    stays = [step for step in s.symbolic.steps if step.kind == "residence" and step.formula is not None]
    if stays:
        blocks.append(
            Paragraph(
                (
                    "Entry (i, j) of the inverse of V is the mean time spent in state i by one who enters at j: V times "
                    "these entries is the identity. States are taken out of V one after the other; what would be too long "
                    "to repeat gets a name.",
                )
            )
        )
        blocks += abbreviations(s, [step.formula or "" for step in stays], told)
        shown = stays[:MOST_ENTRIES]
        rows = tuple(((name_of(t.name),), (name_of(t.about),), (inline(t.formula or "0"),)) for t in shown)
        blocks.append(
            Table(
                ("Mean stays: entries of the inverse of V that are not zero.",),
                ("in", "of one who enters at", "mean time"),
                rows,
            )
        )
        blocks += listed(len(stays), len(shown), "mean stays")
    first, last = _K_WORDS[s.form]
    blocks.append(Paragraph((first, *term(s.types_at_infection), last)))
    blocks += by_hand.entries_of_K(s)
    if s.symbolic.K is not None:
        blocks += abbreviations(s, [entry for row in s.symbolic.K for entry in row], told)
        blocks += matrix("K", s.symbolic.K, s.types_at_infection)
    if s.K is not None:
        blocks += numbers_table("K", s.K, s.types_at_infection, "solve.K", "")
    else:
        blocks.append(Paragraph((f"K has {len(s.types_at_infection)} rows: it is applied and never written out.",)))
    if s.K_large is not None and s.K is not None and len(s.types) != len(s.types_at_infection):
        blocks += numbers_table(
            "K with large domain", s.K_large, s.types, "solve.K_large", ": F times the inverse of V for all types"
        )
    return Section("next_generation", title, tuple(blocks))


def closed_form(m: Material, told: set[str]) -> Section:
    """Show the characteristic polynomial, the classes' rules and the closed form, or say honestly that there is none."""
    s, title = m.solution, "Closed form"
    if s.R0 is None:
        return Section("closed_form", title, (), "absent", "there is no R0 at these values")
    symbolic = s.symbolic
    rules = [step for step in symbolic.steps if step.kind == "class"]
    blocks: list[Block] = []
    polynomial = symbolic.characteristic_polynomial
    if polynomial is not None and len(polynomial) < 1500:
        blocks += abbreviations(s, [polynomial], told)
        name = symbolic.polynomial_variable
        blocks.append(Paragraph(("R0 is the largest root of the characteristic polynomial of K:",)))
        blocks.append(equation(rf"\det({latex_of(name)} I - K)", polynomial))
    blocks += abbreviations(s, [step.formula or "" for step in rules], told)
    for step in rules[:MOST_ROWS]:
        blocks.append(Paragraph((f"Class of {step.name}: {step.about}.",)))
        if step.formula is not None:
            blocks.append(equation(r"\mathcal{R}", step.formula))
    if s.closed_form is not None:
        blocks.append(Paragraph((Strong("Closed form, true for all values of the parameters:"),)))
        blocks.append(equation(r"\mathcal{R}_0", s.closed_form))
        blocks.append(Paragraph(("As text: ", Code(spaced(s.closed_form)))))
        return Section("closed_form", title, tuple(blocks))
    why = "there is no closed form worth printing: R0 is the number, within its proven bounds"
    if s.season is not None:
        why = "R0 over a season has no closed form: the polynomial above is that of the averaged season"
    blocks.append(Note((why[0].upper() + why[1:] + ".",)))
    return Section("closed_form", title, tuple(blocks), "absent", "none exists that would help a reader")
