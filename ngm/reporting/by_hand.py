"""What a reader needs who goes through the derivation with pencil and paper: the definitions, and K product by product."""

from __future__ import annotations

from collections.abc import Sequence

from ngm.reporting.document import Block, Formula, Inline, Line, Maths, Paragraph, Table
from ngm.reporting.material import MOST_COLUMNS, Material, inline, name_of
from ngm.results import Solution

__all__ = ["entries_of_K", "place", "slopes", "target_formulas", "vector_formulas"]


def place(matrix: str, row: str, column: str) -> Line:
    """Return the name of an entry of a matrix: F[E, I]."""
    return (f"{matrix}[", name_of(row), ", ", name_of(column), "]")


def slopes(s: Solution) -> list[Block]:
    """Define F and V; nothing where they do not come from flows in continuous time."""
    if not s.terms or s.discrete:
        return []
    return [
        Formula(
            r"F_{ij} = \frac{\partial \mathcal{F}_i}{\partial x_j}, \qquad V_{ij} = \frac{\partial \mathcal{V}_i}{\partial x_j}"
        ),
        Paragraph(
            (
                Maths("x_j"),
                ": the number in infected compartment j. ",
                Maths(r"\mathcal{F}_i"),
                ": the rates of all transmission flows into i. ",
                Maths(r"\mathcal{V}_i"),
                ": the rates of all flows out of i, less those of all transition flows into i. The slopes are taken at the "
                "infection-free state; in the two matrices its formulas have been put in.",
            )
        ),
    ]


def entries_of_K(s: Solution) -> list[Block]:
    """Return each entry of K as the sum of slopes times mean stays; nothing where that is not written out."""
    names, types = s.types_at_infection, s.types
    F = s.symbolic.F
    stays = {
        (step.name, step.about): step.formula
        for step in s.symbolic.steps
        if step.kind == "residence" and step.formula not in (None, "0")
    }
    if F is None or not stays or len(names) > MOST_COLUMNS:
        return []
    rows: list[tuple[Line, ...]] = []
    for i in names:
        for j in names:
            parts = [
                (types[k], slope, stays[types[k], j])
                for k, slope in enumerate(F[types.index(i)])
                if slope != "0" and (types[k], j) in stays
            ]
            if parts:
                rows.append((place("K", i, j), _words(i, j, parts), _product(parts)))
    return [
        Table(
            (
                "Entries of K: births into the first in the life of one of the second. F times the mean stay of its mothers."
                if s.form == "projection"
                else "Entries of K: infections of the first by one of the second. F times the mean time that it spends where "
                "it infects.",
            ),
            ("entry", "is the sum of", "written out"),
            tuple(rows),
        )
    ]


def _words(i: str, j: str, parts: Sequence[tuple[str, str, str | None]]) -> Line:
    out: list[Inline] = []
    for k, (state, _, _) in enumerate(parts):
        out += [" + "] * (k > 0)
        out += [*place("F", i, state), " × stay in ", name_of(state), " of one who enters at ", name_of(j)]
    return tuple(out)


def _product(parts: Sequence[tuple[str, str, str | None]]) -> Line:
    out: list[Inline] = []
    for k, (_, slope, stay) in enumerate(parts):
        out += [" + "] * (k > 0)
        out += [inline(slope), " × ", inline(stay or "0")]
    return tuple(out)


def target_formulas(m: Material) -> list[Block]:
    """Define the numbers of types, entries and states, and the critical effort."""
    blocks: list[Block] = [
        Formula(r"T = \rho\left(P K \left(I - (I - P) K\right)^{-1}\right)"),
        Formula(r"T_S = \rho\left(K_S \left(I - K + K_S\right)^{-1}\right)"),
        Paragraph(
            (
                Maths("P"),
                " keeps the rows of the targeted types; ",
                Maths("K_S"),
                " has the targeted entries of K alone; ",
                Maths("I"),
                " is the identity, ",
                Maths(r"\rho"),
                " the spectral radius. For a state: ",
                Maths(r"T_c = \rho\left(F_c \left(V - F + F_c\right)^{-1}\right)"),
                " with ",
                Maths("F_c"),
                " the column of F of that state alone.",
            )
        ),
    ]
    cycle = m.solution.per_cycle
    found = [] if m.control is None or cycle is None or cycle == m.solution.R0 else m.control.type_reproduction
    single = [
        t.types[0] for t in found if len(t.types) == 1 and t.T is not None and abs(t.T - (cycle or 0)) <= 1e-9 * t.T
    ]
    if single:
        names = [piece for name in single for piece in (", ", name_of(name))][1:]
        blocks.append(Paragraph(("T of ", *names, " alone is R0 per cycle: a round among them is a whole cycle.")))
    return blocks


def vector_formulas() -> list[Block]:
    """Define the stable distribution and the reproductive values."""
    return [
        Formula(r"K w = \mathcal{R}_0 w, \quad \sum_i w_i = 1; \qquad v K = \mathcal{R}_0 v, \quad \sum_i v_i w_i = 1")
    ]
